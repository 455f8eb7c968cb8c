"""Least value of a sum of functions of a few bits each, by bucket elimination and mini-buckets.

Where the functions that hold a variable span more than `WIDEST` others, they are split into groups and each
group is minimised over the variable by itself: a sum of minima never exceeds the minimum of the sum, so the
result stays a lower bound.

References
----------
R. Dechter, I. Rish, "Mini-buckets: a general scheme for bounded inference", 2003.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from hubokit.projection.structure import Integers

WIDEST = 14
"""Variables in one table."""

Function = tuple[tuple[int, ...], Integers]
"""Variables (ascending) and values, an array of shape (2, ..., 2)."""


@dataclass(frozen=True)
class LowerBound:
    """A lower bound for each setting of some kept variables.

    Parameters
    ----------
    values : integer array, shape (2, ..., 2)
        Over the kept variables, ascending.
    exact : bool
        Whether these are minima, not only bounds.
    trace : tuple of (variable, functions of its bucket)
        In order of elimination, for `assignment`.
    """

    kept: tuple[int, ...]
    values: Integers
    exact: bool
    trace: tuple[tuple[int, tuple[Function, ...]], ...]

    def assignment(self, setting: Sequence[int]) -> dict[int, int]:
        """Bits of all variables that reach the bound at one setting of the kept ones (near it when not exact)."""
        bits = dict(zip(self.kept, setting, strict=True))
        for variable, functions in reversed(self.trace):
            totals = [0, 0]
            for bit in (0, 1):
                bits[variable] = bit
                totals[bit] = sum(int(table[tuple(bits[v] for v in scope)]) for scope, table in functions)
            bits[variable] = 0 if totals[0] <= totals[1] else 1
        return bits


def lower_bound(functions: Sequence[Function], kept: tuple[int, ...], kind: type = np.int64) -> LowerBound:
    """Minimise a sum of functions over all variables but the kept ones.

    Parameters
    ----------
    functions : sequence of (variables, values)
    kept : tuple of int, ascending
    kind : dtype of the values

    Examples
    --------
    >>> f, g = ((0, 1), np.array([[0, 1], [1, -3]])), ((1,), np.array([0, 2]))
    >>> lower_bound([f, g], (0,)).values.tolist()
    [0, -1]
    """
    waiting = list(functions)
    left = {v for scope, _ in waiting for v in scope} - set(kept)
    exact = True
    trace: list[tuple[int, tuple[Function, ...]]] = []
    while left:
        near: dict[int, set[int]] = {v: set() for v in left}
        for scope, _ in waiting:
            for v in scope:
                if v in left:
                    near[v].update(scope)
        variable = min(left, key=lambda v: (len(near[v]), v))
        bucket = [one for one in waiting if variable in one[0]]
        waiting = [one for one in waiting if variable not in one[0]]
        groups = _grouped(bucket)
        exact &= len(groups) == 1
        trace.append((variable, tuple(bucket)))
        for group in groups:
            scope, table = added(group, kind)
            axis = scope.index(variable)
            waiting.append((scope[:axis] + scope[axis + 1 :], table.min(axis=axis)))
        left.remove(variable)
    total: Integers = np.zeros((2,) * len(kept), kind)
    for scope, table in waiting:
        total = total + _spread(table, scope, kept)
    return LowerBound(kept, total, exact, tuple(trace))


def _grouped(bucket: list[Function]) -> list[list[Function]]:
    """Functions packed first-fit, widest first, into groups of at most `WIDEST` variables."""
    groups: list[tuple[set[int], list[Function]]] = []
    for one in sorted(bucket, key=lambda function: (-len(function[0]), function[0])):
        for scope, members in groups:
            if len(scope.union(one[0])) <= max(WIDEST, len(one[0])):
                scope.update(one[0])
                members.append(one)
                break
        else:
            groups.append((set(one[0]), [one]))
    return [members for _, members in groups]


def added(functions: Sequence[Function], kind: type = np.int64) -> Function:
    """The sum of functions, over the union of their variables."""
    scope = tuple(sorted(set().union(*(one[0] for one in functions))))
    total: Integers = np.zeros((2,) * len(scope), kind)
    for own, table in functions:
        total += _spread(table, own, scope)
    return scope, total


def _spread(table: Integers, own: tuple[int, ...], scope: tuple[int, ...]) -> Integers:
    inside = set(own)
    return np.reshape(table, [2 if v in inside else 1 for v in scope])
