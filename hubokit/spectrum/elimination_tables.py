"""Bucket elimination: the exact least energy of a sparse model, and a table from which every other answer follows.

Each variable in turn is minimised out: all terms and messages that hold it are added up into one table over the
variable and its *separator* (the neighbours it has left), and the minimum over the variable becomes a message to the
next bucket. What is kept is the difference ``d = e1 - e0`` of the two choices for every setting of the separator.

With ``excess = max(0, -d)`` for the first value and ``max(0, d)`` for the second, the energy of any state is

    ground energy + sum over variables of the excess of its value given its separator,

so that ground states are the states without excess, and counts, gaps, higher levels and random draws are sweeps over
the same small tables.

References
----------
Dechter 1999, "Bucket elimination: a unifying framework for reasoning".
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.terms import Block
from hubokit.spectrum.elimination_kernels import Table, add_message, narrowed, transform
from hubokit.spectrum.elimination_order import EliminationOrder, neighbour_sets, order_along

INT32_BOUND = 2**30
INT64_BOUND = 2**61


@dataclass(frozen=True)
class Problem:
    """Terms to be minimised, in integers.

    Parameters
    ----------
    domain : "spin" or "boolean"
    size : int
        Number of variables, used or not.
    blocks : tuple of Block
        Terms; rows may repeat.
    shift : int
        A constant in the same units.
    """

    domain: str
    size: int
    blocks: tuple[Block, ...]
    shift: int = 0

    @property
    def kind(self) -> type:
        """Type that holds every energy and every difference of two: int32, int64 or object, by a proven bound."""
        bound = sum(int(np.abs(block.weights).sum(dtype=object)) for block in self.blocks)
        return np.int32 if bound < INT32_BOUND else np.int64 if bound < INT64_BOUND else object

    def fixed(self, bits: Mapping[int, int]) -> Problem:
        """The same problem with some variables given bits (0: spin +1, boolean 0); positions are kept."""
        if not bits:
            return self
        given = np.full(self.size, -1, np.int8)
        given[list(bits)] = list(bits.values())
        blocks, shift = [], self.shift
        for block in self.blocks:
            values = given[block.members]
            weights = block.weights
            if self.domain == "boolean":
                alive = ~(values == 0).any(axis=1)
                rows, values, weights = block.members[alive], values[alive], weights[alive]
            else:
                rows = block.members
                weights = np.where((values == 1).sum(axis=1) % 2 == 1, -weights, weights)
            left = (values < 0).sum(axis=1)
            for locality in np.unique(left).tolist():
                chosen = left == locality
                if locality == 0:
                    shift += int(weights[chosen].sum(dtype=object))
                    continue
                kept = rows[chosen][values[chosen] < 0].reshape(-1, locality)
                blocks.append(Block(np.ascontiguousarray(kept), weights[chosen].copy()))
        return Problem(self.domain, self.size, tuple(blocks), shift)


@dataclass(frozen=True)
class Elimination:
    """The outcome of one elimination: least energy and the differences of every bucket.

    Parameters
    ----------
    order : EliminationOrder
        Variables, and for each its separator as ranks.
    differences : tuple of integer arrays, shape (2**len(separator),)
        Energy of the second value minus energy of the first, the rest at its best; the first rank of the separator
        is the most significant bit of the index.
    lowest : int
        Least energy in the problem's integer units, its shift included.
    """

    order: EliminationOrder
    differences: tuple[Table, ...]
    lowest: int


def eliminate(
    problem: Problem, order: EliminationOrder, progress: Callable[[int, int], None] | None = None
) -> Elimination:
    """Minimise the variables of `order` out of the problem.

    Parameters
    ----------
    problem : Problem
    order : EliminationOrder
        Must hold every variable of every term.
    progress : callable, optional
        Called with table entries done and in all.
    """
    kind = problem.kind
    factors = _own_factors(problem, order)
    waiting: list[list[tuple[tuple[int, ...], Table]]] = [[] for _ in order.variables]
    differences: list[Table] = []
    lowest, done, total = problem.shift, 0, order.entries
    for rank, separator in enumerate(order.separators):
        scope = (rank, *separator)
        table: Table = np.zeros(2 << len(separator), kind)
        own = factors[rank]
        if own is not None:
            add_message(table, _polynomial(own, kind, problem.domain), own[0], scope)
        for message_scope, message in waiting[rank]:
            add_message(table, message, message_scope, scope)
        waiting[rank] = []
        first, second = table[: len(table) // 2], table[len(table) // 2 :]
        differences.append(narrowed(second - first))
        best = np.minimum(first, second)
        if separator:
            waiting[separator[0]].append((separator, best))
        else:
            lowest += int(best[0])
        done += len(table)
        if progress is not None:
            progress(done, total)
    return Elimination(order, tuple(differences), lowest)


def eliminate_fixed(problem: Problem, order: EliminationOrder, bits: Mapping[int, int]) -> Elimination:
    """The elimination with some variables given bits, along the rest of a known order."""
    smaller = problem.fixed(bits)
    variables = order.without(set(bits))
    return eliminate(smaller, order_along(variables, neighbour_sets(problem.size, smaller.blocks)))


Factor = tuple[tuple[int, ...], NDArray[np.int64], Table]
"""Scope (ranks, ascending), index of each coefficient in the table over the scope, coefficients."""


def _own_factors(problem: Problem, order: EliminationOrder) -> list[Factor | None]:
    """For each rank, the terms whose first eliminated variable it is."""
    rank_of = np.zeros(problem.size, np.int64)
    rank_of[list(order.variables)] = np.arange(len(order.variables))
    gathered: list[list[tuple[NDArray[np.int64], Table]]] = [[] for _ in order.variables]
    for block in problem.blocks:
        ranks = rank_of[block.members]
        first = ranks.min(axis=1)
        by_bucket = np.argsort(first, kind="stable")
        starts = np.flatnonzero(np.diff(first[by_bucket], prepend=-1))
        for rows in np.split(by_bucket, starts[1:]):
            if len(rows):
                gathered[first[rows[0]]].append((ranks[rows], block.weights[rows]))
    return [_factor(parts) if parts else None for parts in gathered]


def _factor(parts: Sequence[tuple[NDArray[np.int64], Table]]) -> Factor:
    scope = np.unique(np.concatenate([ranks.ravel() for ranks, _ in parts]))
    places = len(scope) - 1
    index = [(np.int64(1) << (places - np.searchsorted(scope, ranks))).sum(axis=1) for ranks, _ in parts]
    weights: list[NDArray[Any]] = [weights for _, weights in parts]
    return tuple(scope.tolist()), np.concatenate(index), np.concatenate(weights)


def _polynomial(factor: Factor, kind: type, domain: str) -> Table:
    """A factor's values at every setting of its scope."""
    scope, index, weights = factor
    values: Table = np.zeros(1 << len(scope), kind)
    np.add.at(values, index, weights.astype(kind))
    transform(values, domain)
    return values
