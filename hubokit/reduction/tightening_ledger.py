"""Every coefficient of a reduced model that penalties enter, kept up to date while penalties change.

Penalties are linear in A and B, so a coefficient is what the model holds plus whole multiples of some A and B.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.numbers import INT64_BOUND, absolute_sum
from hubokit.projection.structure import BOUND
from hubokit.reduction.covers import PairCoverPlan
from hubokit.reduction.penalties import SPIN_DIVISOR, BooleanForm, Strengths, penalty_parts


@dataclass(frozen=True)
class Coefficients:
    """The coefficients of the reduced model that penalties of a group enter: ``base + matrix @ (A, B)``.

    Parameters
    ----------
    base : int64 or object array, shape (r,)
    row, column : int64 arrays, shape (e,)
        Entries of the matrix; column i is A of the group's auxiliary i, column u + i its B.
    factor : integer array, shape (e,)
    """

    base: NDArray[Any]
    row: NDArray[np.int64]
    column: NDArray[np.int64]
    factor: NDArray[Any]

    def values(self, strengths: Strengths) -> NDArray[Any]:
        """The coefficients under given penalties, shape (r,)."""
        penalty = np.concatenate([strengths.one, strengths.both])
        total = self.base.copy()
        np.add.at(total, self.row, self.factor * penalty[self.column])
        return total

    def figure(self, strengths: Strengths) -> tuple[int, int]:
        """What is made small: the largest absolute coefficient, then the sum of them all."""
        sizes = np.abs(self.values(strengths))
        return int(sizes.max(initial=0)), int(sizes.sum())


class Ledger:
    """The coefficients in one reading of the model, spins or booleans, in units of the plan's `unit`.

    Parameters
    ----------
    plan : PairCoverPlan
    domain : "spin" or "boolean"
        The reading; spins can be read as booleans too.
    """

    def __init__(self, plan: PairCoverPlan, domain: str) -> None:
        pairs, source = plan.pairs, plan.source.domain
        total = pairs.size + pairs.count
        self.one, self.both = plan.strengths.one.copy(), plan.strengths.both.copy()
        parts, quarters = plan.all_parts(), 1
        if domain != source:
            parts, quarters = BooleanForm.of(parts, source, total).parts(), SPIN_DIVISOR
        numbers = np.flatnonzero(~pairs.is_product)
        none, unit = np.zeros(pairs.count, np.int64), np.ones(pairs.count, np.int64)
        found = [
            (_key(members, total), numbers, np.full(len(numbers), end), weights * quarters)
            for end, strengths in enumerate((Strengths(unit, none), Strengths(none, unit)))
            for members, weights in penalty_parts(pairs, strengths, domain, ~pairs.is_product)
            if members.shape[1] and len(weights)
        ]
        keys, owners, ends, factors = (np.concatenate(one) for one in zip(*found, strict=True))
        order = np.argsort(owners, kind="stable")
        unique, self.row = np.unique(keys[order], return_inverse=True)
        self.end, self.factor = ends[order], factors[order]
        self.start = np.searchsorted(owners[order], np.arange(pairs.count + 1))
        wide = sum(absolute_sum(weights) for _, weights in parts) >= BOUND
        self.value = np.zeros(len(unique), object if wide else plan.strengths.one.dtype)
        for members, weights in parts:
            if members.shape[1]:
                key = _key(members, total)
                place = np.minimum(np.searchsorted(unique, key), len(unique) - 1)
                here = unique[place] == key
                np.add.at(self.value, place[here], weights[here])

    def table(self, numbers: NDArray[np.int64]) -> Coefficients:
        """The coefficients that the penalties of these auxiliaries enter."""
        lengths = self.start[numbers + 1] - self.start[numbers]
        owner = np.repeat(np.arange(len(numbers)), lengths)
        entry = np.arange(len(owner)) - np.repeat(np.cumsum(lengths) - lengths, lengths) + self.start[numbers][owner]
        rows, row = np.unique(self.row[entry], return_inverse=True)
        column = self.end[entry] * len(numbers) + owner
        table = Coefficients(np.zeros(len(rows), self.value.dtype), row, column, self.factor[entry])
        own = table.values(Strengths(self.one[numbers], self.both[numbers]))
        return Coefficients(self.value[rows] - own, row, column, table.factor)

    def change(self, numbers: NDArray[np.int64], strengths: Strengths) -> None:
        """Put new penalties in the place of those of these auxiliaries."""
        for number, place in zip(numbers.tolist(), range(len(numbers)), strict=True):
            entry = slice(self.start[number], self.start[number + 1])
            changes = [strengths.one[place] - self.one[number], strengths.both[place] - self.both[number]]
            more = np.array(changes, self.value.dtype)
            np.add.at(self.value, self.row[entry], self.factor[entry] * more[self.end[entry]])
        self.one[numbers], self.both[numbers] = strengths.one, strengths.both


def both_readings(own: Coefficients, other: Coefficients, before: Strengths) -> Coefficients:
    """Two tables as one, each multiplied by the largest of the other.

    What is made small is then the larger of the two ratios to what was there before.
    """
    here, there = own.figure(before)[0], other.figure(before)[0]
    kind = object if here * there * 8 >= INT64_BOUND else own.base.dtype
    return Coefficients(
        np.concatenate([own.base.astype(kind) * there, other.base.astype(kind) * here]),
        np.concatenate([own.row, other.row + len(own.base)]),
        np.concatenate([own.column, other.column]),
        np.concatenate([own.factor.astype(kind) * there, other.factor.astype(kind) * here]),
    )


def _key(members: NDArray[Any], total: int) -> NDArray[np.int64]:
    """One number for each product of one or two of `total` variables, in any order."""
    ordered = np.sort(members.astype(np.int64), axis=1)
    key: NDArray[np.int64] = ordered[:, -1] * (total + 1)
    return key + ordered[:, 0] + 1 if ordered.shape[1] == 2 else key
