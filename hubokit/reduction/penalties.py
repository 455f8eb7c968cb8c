"""Two-sided penalties that hold every auxiliary of a pair substitution to its right value.

A pair variable y of u and v (booleans) gets

    B u v - (A + B) (u + v) y + (2A + B) y,

which is 0 where y = u v, costs A where y = 1 and one of u, v is 0, costs 2A + B where both are 0, and costs B where
y = 0 and u = v = 1. With A = B it is the penalty of Rosenberg 1975. Let C be what the rest of the model adds to the
cost of y = 1, an affine form of the other variables. For every setting of those, y = u v is better by at least g
when

    A + C >= g where one of u, v is 1,    2A + B + C >= g where neither is,    B - C >= g where both are.

C is bounded by the sum of the positive and of the negative parts of its coefficients, with u and v held where the
condition holds them, so each pair has its own A and B and no global constant appears. Then whatever the other
auxiliaries do, y is best at its right value and only there (for g > 0); setting them right in the order of
definition gains at least g each time, so P = E, every state has one best setting, and the auxiliary gap is at least
g.

A product variable p = s_u s_v of spins gets ``A/2 (1 - p (1 + s_u + s_v - 2y))`` with its companion y: A where wrong.

Everything here is computed in booleans x = (1 - s) / 2, where spin models are no special case.

References
----------
Rosenberg 1975, "Reduction of bivalent maximization to the quadratic case".
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.numbers import INT64_BOUND, absolute_sum
from hubokit.model.rewriting import affine_parts
from hubokit.model.terms import Part, canonical_blocks
from hubokit.reduction.pairs import PairVariables

SPIN_DIVISOR = 4
"""Penalties in spins are whole multiples of a quarter of the unit of A and B."""


@dataclass(frozen=True)
class BooleanForm:
    """A quadratic model over booleans as arrays, its constant left out.

    Parameters
    ----------
    fields : int64 or object array, shape (n,)
    members : int64 array, shape (c, 2)
        Distinct pairs, the smaller variable first.
    couplers : int64 or object array, shape (c,)
    """

    fields: NDArray[Any]
    members: NDArray[np.int64]
    couplers: NDArray[Any]

    @classmethod
    def of(cls, parts: Sequence[Part], domain: str, size: int) -> BooleanForm:
        """The quadratic parts merged and, where they are over spins, rewritten in x = (1 - s) / 2."""
        _, blocks = canonical_blocks(parts, domain)
        if domain == "spin":
            _, blocks = canonical_blocks(affine_parts(blocks, 1, -2), "boolean")
        kind = np.int64
        if any(block.weights.dtype == object for block in blocks):
            kind = object  # type: ignore[assignment]
        fields = np.zeros(size, kind)
        members, couplers = np.zeros((0, 2), np.int64), np.zeros(0, kind)
        for block in blocks:
            if block.locality == 1:
                fields[block.members[:, 0]] = block.weights
            else:
                members, couplers = block.members.astype(np.int64), block.weights
        return cls(fields, members, couplers)

    def plus(self, parts: Sequence[Part]) -> BooleanForm:
        """The form with boolean parts added."""
        return BooleanForm.of([*self.parts(), *parts], "boolean", len(self.fields))

    def parts(self) -> list[Part]:
        """The form as parts for ``canonical_blocks``."""
        return [(np.arange(len(self.fields))[:, None], self.fields), (self.members, self.couplers)]


@dataclass(frozen=True)
class Strengths:
    """What a wrong auxiliary costs, in the unit of the weights.

    Parameters
    ----------
    one : int64 or object array, shape (a,)
        A: cost of y = 1 where exactly one operand is 1. For a product variable, the cost of its wrong value.
    both : int64 or object array, shape (a,)
        B: cost of y = 0 where both operands are 1. For a product variable equal to `one`.
    """

    one: NDArray[Any]
    both: NDArray[Any]


def interval_strengths(form: BooleanForm, pairs: PairVariables, gap: int) -> Strengths:
    """The least A and B of every auxiliary for which interval bounds prove a margin of `gap`.

    Parameters
    ----------
    form : BooleanForm
        The rewritten model without penalties, over originals and auxiliaries.
    pairs : PairVariables
    gap : int
        Margin in the unit of the weights; 0 allows ties.

    Returns
    -------
    Strengths

    Examples
    --------
    The cubic term 3 x0 x1 x2 with y for x0 x1: y's cost is 3 x2, between 0 and 3.

    >>> pairs = PairVariables.of(3, [(0, 1)])
    >>> form = BooleanForm.of([(np.array([[2, 3]]), np.array([3]))], "boolean", 4)
    >>> strengths = interval_strengths(form, pairs, 1)
    >>> strengths.one.tolist(), strengths.both.tolist()
    ([1], [4])
    """
    total = absolute_sum(form.fields) + absolute_sum(form.couplers) + gap
    deepest = int(pairs.depths.max(initial=0))
    kind = np.int64 if total << (5 * deepest + 5) < INT64_BOUND else object
    one, both = np.zeros(pairs.count, kind), np.zeros(pairs.count, kind)
    form = BooleanForm(form.fields.astype(kind), form.members, form.couplers.astype(kind))
    for depth in range(deepest, 0, -1):
        chosen = pairs.depths == depth
        one[chosen], both[chosen] = _bounds(form, pairs, chosen, gap)
        if depth > 1:
            form = form.plus(penalty_parts(pairs, Strengths(one, both), "boolean", chosen))
    return Strengths(one, both)


def _bounds(
    form: BooleanForm, pairs: PairVariables, chosen: NDArray[np.bool_], gap: int
) -> tuple[NDArray[Any], NDArray[Any]]:
    """A and B of the chosen auxiliaries against everything that the form holds."""
    size = pairs.size
    low = form.fields[size:].copy()
    high = low.copy()
    own = np.zeros((pairs.count, 2), low.dtype)
    for end in (0, 1):
        number = form.members[:, end] - size
        here = np.flatnonzero(number >= 0)
        here = here[chosen[number[here]]]
        number, other, weight = number[here], form.members[here, 1 - end], form.couplers[here]
        operand = other[:, None] == pairs.operands[number]
        for side in (0, 1):
            np.add.at(own[:, side], number[operand[:, side]], weight[operand[:, side]])
        free = ~operand.any(axis=1)
        np.add.at(low, number[free], np.minimum(weight[free], 0))
        np.add.at(high, number[free], np.maximum(weight[free], 0))
    low, high, own, product = low[chosen], high[chosen], own[chosen], pairs.is_product[chosen]
    both = gap + high + own.sum(axis=1)
    one = gap - low - np.minimum(own[:, 0], own[:, 1])
    neither = gap - low
    short = np.maximum(neither - 2 * one - both, 0)
    one = one + (short + 1) // 2
    level = gap + np.maximum(np.abs(low - np.abs(own).sum(axis=1)), np.abs(high + np.abs(own).sum(axis=1)))
    return np.where(product, level, one), np.where(product, level, both)


def penalty_parts(
    pairs: PairVariables, strengths: Strengths, domain: str, chosen: NDArray[np.bool_] | None = None
) -> list[Part]:
    """The penalties as quadratic parts: for spins, four times the penalty, so that the weights are whole.

    Parameters
    ----------
    pairs : PairVariables
    strengths : Strengths
    domain : "spin" or "boolean"
    chosen : bool array, shape (a,), optional
        Only these auxiliaries.

    Returns
    -------
    list of Part
        To be divided by ``SPIN_DIVISOR`` where the domain is spin.
    """
    chosen = np.ones(pairs.count, bool) if chosen is None else chosen
    parts: list[Part] = []
    for kind in (False, True):
        which = np.flatnonzero(chosen & (pairs.is_product == kind))
        u, v = pairs.operands[which].T.astype(np.int64)
        y, c = pairs.size + which, pairs.companions[which].astype(np.int64)
        a, b = strengths.one[which], strengths.both[which]
        columns = _product_penalty if kind else _pair_penalty
        for members, weights in columns(u, v, y, c, a, b, domain):
            stacked = np.column_stack(members) if members else np.zeros((len(which), 0), np.int64)
            parts.append((stacked, weights))
    return parts


Row = tuple[tuple[NDArray[np.int64], ...], NDArray[Any]]
Column = NDArray[np.int64]
Weight = NDArray[Any]


def _pair_penalty(u: Column, v: Column, y: Column, c: Column, a: Weight, b: Weight, domain: str) -> list[Row]:
    if domain == "boolean":
        return [((u, v), b), ((u, y), -(a + b)), ((v, y), -(a + b)), ((y,), 2 * a + b)]
    fields: list[Row] = [((), 2 * a + b), ((u,), a), ((v,), a), ((y,), -2 * a)]
    return [*fields, ((u, v), b), ((u, y), -(a + b)), ((v, y), -(a + b))]


def _product_penalty(u: Column, v: Column, y: Column, c: Column, a: Weight, b: Weight, domain: str) -> list[Row]:
    if domain == "boolean":
        fields: list[Row] = [((y,), a), ((u,), a), ((v,), a), ((c,), -2 * a)]
        return [*fields, ((u, y), -2 * a), ((v, y), -2 * a), ((c, y), 4 * a)]
    return [((), 2 * a), ((y,), -2 * a), ((u, y), -2 * a), ((v, y), -2 * a), ((c, y), 4 * a)]
