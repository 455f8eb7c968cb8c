"""A pair cover as one piece of a reduction, beside the gadgets of the terms that it leaves over."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import times
from hubokit.reduction.covers import PairCoverPlan
from hubokit.reduction.gadgets.attach import Sketch, sketch_of
from hubokit.reduction.gadgets.base import Part

METHOD = "pair-cover"

Taken = dict[int, npt.NDArray[np.bool_]]


@dataclass(frozen=True)
class PairPiece:
    """The terms that a pair cover makes quadratic.

    Parameters
    ----------
    plan : PairCoverPlan
        Pairs, factors and penalties.
    method : str
        Name for the trail.
    """

    plan: PairCoverPlan
    method: str = METHOD

    @property
    def auxiliaries(self) -> int:
        """One a pair, and one more a product variable."""
        return self.plan.auxiliaries

    def rows(self) -> list[dict[str, Any]]:
        """Rows for the trail: one for each locality, the auxiliaries with the first."""
        rows = [
            {"locality": locality, "method": self.method, "terms": int(mask.sum()), "auxiliaries": 0}
            for locality, mask in sorted(self.plan.covered.items())
            if mask.any()
        ]
        if rows:
            rows[0]["auxiliaries"] = self.auxiliaries
        return rows

    def resolution(self, unit: Fraction, gap: Fraction) -> Fraction:
        """A rational of which every coefficient is a whole multiple."""
        return self.plan.unit

    def attach(self, first: int, unit: Fraction, gap: Fraction, resolution: Fraction) -> tuple[list[Part], int]:
        """The covered terms rewritten, and the penalties; auxiliary i of the plan becomes ``first + i``."""
        factor = int(self.plan.unit / resolution)
        parts: list[Part] = []
        constant = 0
        size = self.plan.pairs.size
        for members, weights in self.plan.parts:
            if members.shape[1] == 0:
                constant += factor * sum(int(weight) for weight in weights)
            else:
                places = members.astype(np.int64)
                parts.append((np.where(places >= size, places + (first - size), places), times(weights, factor)))
        return parts, constant

    def sketch(self, unit: Fraction, gap: Fraction, resolution: Fraction) -> Sketch:
        """What pricing needs to know."""
        first = self.plan.pairs.size
        parts, _ = self.attach(first, unit, gap, resolution)
        return sketch_of(parts, first, self.plan.source.domain)


def lonely_terms(plan: PairCoverPlan) -> Taken:
    """Terms that share none of their pairs with another term, or only as many as a gadget of their own would save.

    A cubic or quartic term takes one auxiliary on its own. Where that is no more than the pairs that nobody else
    uses, it is better left to a gadget: no penalty, and never more auxiliaries.

    Parameters
    ----------
    plan : PairCoverPlan

    Returns
    -------
    dict from locality to bool array over the terms of that block
    """
    pairs = plan.pairs
    total = pairs.size + pairs.count
    used = np.zeros(total + 1, np.int64)
    for factors in plan.factors.values():
        np.add.at(used, factors.ravel(), 1)
    np.add.at(used, pairs.operands.ravel(), 1)
    np.add.at(used, pairs.companions[pairs.companions >= 0], 1)
    found: Taken = {}
    for locality, mask in plan.covered.items():
        alone = np.zeros(len(mask), bool)
        if locality in (3, 4) and mask.any():
            factors = plan.factors[locality]
            single = (factors >= pairs.size) & (used[factors] == 1)
            alone[np.flatnonzero(mask)] = single.any(axis=1)
        found[locality] = alone
    return found


def without(H: Hamiltonian, left_out: Mapping[int, npt.NDArray[np.bool_]]) -> Taken:
    """For each locality of three and more, the terms that are not left out."""
    found: Taken = {}
    for block in H.blocks:
        if block.locality > 2:
            mask = left_out.get(block.locality)
            found[block.locality] = np.ones(len(block), bool) if mask is None else ~mask
    return found
