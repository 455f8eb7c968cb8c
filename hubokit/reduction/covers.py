"""Pair covers: the fewest pairs whose substitution makes every term quadratic, with penalties for this model.

A plan holds the chosen pairs (`hubokit.reduction.cover_choice`), how each term is split by them, and penalties from
interval bounds over this model's own terms; it can be priced, built and recorded in the trail.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import common_resolution, format_fraction, times
from hubokit.model.terms import Part, canonical_blocks
from hubokit.reduction.cover_choice import ChosenPairs, choose_pairs
from hubokit.reduction.pairs import PairVariables, balanced, factors_of, factors_where_covered, rewritten
from hubokit.reduction.penalties import SPIN_DIVISOR, BooleanForm, Strengths, interval_strengths, penalty_parts


@dataclass(frozen=True)
class PairCoverPlan:
    """A pair substitution ready to be priced and built.

    Terms that are not covered are no part of it: with gadgets of their own they can stand beside it, because no
    variable but the originals is shared.

    Parameters
    ----------
    source : Hamiltonian
    covered : mapping of locality to bool array (m,)
        The terms that the pairs make quadratic, one mask for each block of locality three and more.
    chosen : ChosenPairs
    factors : mapping of locality to int64 array (number covered, 2)
        The two factors of every covered term.
    strengths : Strengths
        In units of `resolution`.
    resolution : Fraction
        Unit of the strengths, energy units.
    gap : Fraction
        The auxiliary gap that the penalties keep.
    tightening : mapping
        What the penalties were scaled to and how that is proved, for the trail; empty for interval bounds.
    """

    source: Hamiltonian
    covered: Mapping[int, NDArray[np.bool_]]
    chosen: ChosenPairs
    factors: Mapping[int, NDArray[np.int64]]
    strengths: Strengths
    resolution: Fraction
    gap: Fraction
    tightening: Mapping[str, Any] = field(default_factory=dict)

    @property
    def pairs(self) -> PairVariables:
        """The auxiliaries."""
        return self.chosen.pairs

    @property
    def auxiliaries(self) -> int:
        """Number of auxiliaries."""
        return self.pairs.count

    @property
    def how(self) -> str:
        """How the pairs were found."""
        return self.chosen.how

    @property
    def is_whole(self) -> bool:
        """Whether every term of three and more members is covered."""
        return all(bool(mask.all()) for mask in self.covered.values())

    @property
    def unit(self) -> Fraction:
        """What the weights of `parts` are multiples of, energy units."""
        return self.resolution / (SPIN_DIVISOR if self.source.domain == "spin" else 1)

    @cached_property
    def parts(self) -> tuple[Part, ...]:
        """Covered terms and penalties, merged, in units of `unit`; the first has no members: the constant."""
        H = self.source
        divisor = SPIN_DIVISOR if H.domain == "spin" else 1
        rows = [
            (members, times(weights, divisor))
            for members, weights in _rewritten_terms(H, self.covered, self.factors, self.pairs, self.resolution)
        ]
        rows += penalty_parts(self.pairs, self.strengths, H.domain)
        constant, blocks = canonical_blocks(rows, H.domain)
        empty: Part = (np.zeros((1, 0), np.int64), np.array([constant], dtype=object))
        return (empty, *((block.members, block.weights) for block in blocks))

    def price(self) -> dict[str, int | Fraction]:
        """Figures to compare with: auxiliaries, couplers, largest and smallest coefficient in energy units.

        Terms that are not covered, of three and more members, are left out.
        """
        blocks = canonical_blocks(self.all_parts(), self.source.domain)[1]
        sizes = [np.abs(block.weights) for block in blocks]
        return {
            "auxiliaries": self.auxiliaries,
            "couplers": sum(len(block) for block in blocks if block.locality == 2),
            "largest": max((int(size.max()) for size in sizes), default=0) * self.unit,
            "smallest": min((int(size.min()) for size in sizes), default=0) * self.unit,
        }

    def build(self, names: tuple[str, ...]) -> Hamiltonian:
        """The reduced model, auxiliaries named in the order of definition.

        Raises
        ------
        InputError
            The plan leaves terms uncovered, or the number of names is not that of the auxiliaries.
        """
        if not self.is_whole:
            raise InputError("the plan covers only some terms; add the rest to its parts", "pairs")
        if len(names) != self.auxiliaries:
            raise InputError(f"{len(names)} names for {self.auxiliaries} auxiliaries", "names")
        H = self.source
        every = self.all_parts()
        return Hamiltonian.from_arrays(
            [members for members, _ in every],
            [weights for _, weights in every],
            H.domain,
            labels=(*H.labels, *names),
            resolution=self.unit,
            constant=H.constant,
            convention=H.convention,
        )

    def record(self, names: tuple[str, ...]) -> dict[str, Any]:
        """JSON values for the trail: what each auxiliary stands for, so that lifting needs no search."""
        labels = [*self.source.labels, *names]
        defined = [
            {"auxiliary": name, "of": [labels[u], labels[v]], "is": "product" if product else "pair"}
            for name, (u, v), product in zip(
                names, self.pairs.operands.tolist(), self.pairs.is_product.tolist(), strict=True
            )
        ]
        return {
            "pairs": defined,
            "found by": self.how,
            "most common pair rule": self.chosen.greedy,
            "proven least": self.chosen.proven_least,
            "not tried": list(self.chosen.skipped),
            "auxiliary gap": format_fraction(self.gap),
            "penalties": dict(self.tightening) or {"scale": "1", "proved by": "interval bounds"},
        }

    def all_parts(self) -> list[Part]:
        """`parts`, and the terms of one and two members beside them, in units of `unit`."""
        factor = int(self.source.resolution / self.unit)
        short = [(block.members, times(block.weights, factor)) for block in self.source.blocks if block.locality <= 2]
        return [*self.parts, *short]


def pair_cover_reduction(
    H: Hamiltonian,
    *,
    keep: str = "one-to-one",
    auxiliary_gap: Fraction | None = None,
    seed: int = 0,
    work: int = 1,
    only: Mapping[int, NDArray[np.bool_]] | None = None,
    alone: NDArray[np.bool_] | None = None,
) -> PairCoverPlan:
    """Choose pairs for the terms of three and more members, and penalties that interval bounds prove.

    The penalties are strict whatever `keep` says, because a strict margin is what makes the pairs provable at any
    size: where no gap is asked for, the source's resolution is kept.

    Parameters
    ----------
    H : Hamiltonian
    keep : {"one-to-one", "energies", "ground-states"}
        All three are kept by the same model.
    auxiliary_gap : Fraction, optional
        Least gap asked for, in energy units.
    seed : int
    work : int
        Multiplies the limits of the searches.
    only : mapping of locality to bool array (m,), optional
        The terms to cover, one mask for each block; a locality left out is covered whole.
    alone : bool array (m,), optional
        For the block of locality four: terms that a gadget of one auxiliary would serve. They are covered where that
        takes fewer auxiliaries, and left to their gadgets (not `covered`) where it does not.

    Returns
    -------
    PairCoverPlan

    Examples
    --------
    >>> H = Hamiltonian({("a", "b", "c"): 2, ("a", "b", "d"): -1}, "spin")
    >>> plan = pair_cover_reduction(H)
    >>> plan.auxiliaries, plan.build(("y0",)).locality
    (1, 2)
    """
    del keep
    covered = {}
    for block in H.blocks:
        if block.locality >= 3:
            mask = np.ones(len(block), bool)
            covered[block.locality] = mask if only is None else np.asarray(only.get(block.locality, mask), bool)
    members = {b.locality: b.members[covered[b.locality]] for b in H.blocks if b.locality >= 3}
    lone = alone[covered[4]] if alone is not None and 4 in covered else None
    chosen = choose_pairs(members, H.size, H.domain, seed, work, lone)
    factors = {}
    for locality, rows in members.items():
        if chosen.alone and locality == 4:
            found = factors_where_covered(rows, chosen.pairs, H.domain)
            reached = found[:, 0] >= 0
            covered[4] = np.array(covered[4])
            covered[4][covered[4]] = reached
            factors[4] = found[reached]
        else:
            factors[locality] = factors_of(rows, chosen.pairs, H.domain)
    reached_terms = [
        (block.members[covered[block.locality]], block.weights[covered[block.locality]])
        for block in H.blocks
        if block.locality >= 3
    ]
    factors = dict(zip(factors, balanced(reached_terms, list(factors.values()), chosen.pairs, H.domain), strict=True))
    gap = auxiliary_gap if auxiliary_gap else H.resolution
    resolution = common_resolution([H.resolution, gap])
    form = covered_form(H, covered, factors, chosen.pairs, resolution)
    strengths = interval_strengths(form, chosen.pairs, int(gap / resolution))
    return PairCoverPlan(H, covered, chosen, factors, strengths, resolution, gap)


def covered_form(
    H: Hamiltonian,
    covered: Mapping[int, NDArray[np.bool_]],
    factors: Mapping[int, NDArray[np.int64]],
    pairs: PairVariables,
    resolution: Fraction,
) -> BooleanForm:
    """The covered terms rewritten, without penalties, over booleans in units of `resolution`."""
    parts = _rewritten_terms(H, covered, factors, pairs, resolution)
    return BooleanForm.of(parts, H.domain, pairs.size + pairs.count)


def _rewritten_terms(
    H: Hamiltonian,
    covered: Mapping[int, NDArray[np.bool_]],
    factors: Mapping[int, NDArray[np.int64]],
    pairs: PairVariables,
    resolution: Fraction,
) -> list[Part]:
    factor = int(H.resolution / resolution)
    parts: list[Part] = []
    for block in H.blocks:
        if block.locality >= 3:
            weights = times(block.weights[covered[block.locality]], factor)
            parts += rewritten(weights, factors[block.locality], pairs, H.domain)
    return parts
