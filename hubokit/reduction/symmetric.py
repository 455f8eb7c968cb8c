"""Symmetric parts of a model reduced as one function of the number of ones (booleans) or of down spins.

A part is a connected component of the terms of three and more members. It is symmetric when at every locality it has
all products of its variables, with one weight, or none. The formula is in gadgets/symmetric.py.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, lru_cache
from math import comb
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import INT64_BOUND, common_resolution
from hubokit.model.rewriting import spin_parts
from hubokit.model.terms import Block, canonical_blocks
from hubokit.reduction.gadgets.attach import Sketch, sketch_of
from hubokit.reduction.gadgets.base import Part
from hubokit.reduction.gadgets.symmetric import SymmetricForm, symmetric_form

METHOD = "symmetric"

SMALLEST = 4
"""Fewest variables of a symmetric part; three have one term at most."""

LARGEST = 16
"""Most variables of a symmetric part that is taken unasked: a bracket over n variables projects to 2^n products, and
what cannot be projected cannot be proved at any size."""


@dataclass(frozen=True)
class SymmetricPiece:
    """One symmetric part.

    Parameters
    ----------
    members : int64 array, shape (n,)
        Its variables, increasing.
    weights : tuple of (locality, weight)
        In units of the source's resolution; localities of three and more.
    domain : str
    unit, gap : Fraction
        Resolution of the source and auxiliary gap asked for.
    """

    members: npt.NDArray[np.int64]
    weights: tuple[tuple[int, int], ...]
    domain: str
    unit: Fraction
    gap: Fraction

    @property
    def method(self) -> str:
        """Name for the trail."""
        return METHOD

    @cached_property
    def form(self) -> SymmetricForm:
        """The form, in energy units."""
        return symmetric_form([value * self.unit for value in self.values()], self.gap)

    @property
    def auxiliaries(self) -> int:
        """At most floor(n/2)."""
        return len(self.form.brackets)

    def rows(self) -> list[dict[str, Any]]:
        """Rows for the trail."""
        n = len(self.members)
        terms = sum(comb(n, k) for k, _ in self.weights)
        top = max(k for k, _ in self.weights)
        return [{"locality": top, "method": METHOD, "terms": terms, "auxiliaries": self.auxiliaries}]

    def resolution(self, unit: Fraction, gap: Fraction) -> Fraction:
        """A rational of which every coefficient is a whole multiple."""
        form = self.form
        numbers = [form.constant, form.field, form.coupler, *(value for pair in form.brackets for value in pair)]
        return common_resolution([unit, *numbers]) / (4 if self.domain == "spin" else 1)

    def attach(self, first: int, unit: Fraction, gap: Fraction, resolution: Fraction) -> tuple[list[Part], int]:
        """The quadratic products that stand for the part; see ``gadgets.attach``."""
        form, n = self.form, len(self.members)
        grid = resolution * (4 if self.domain == "spin" else 1)
        added = np.arange(first, first + len(form.brackets), dtype=np.int64)
        low, high = np.triu_indices(n, 1)
        heights = [int(c / grid) for c, _ in form.brackets]
        slopes = [-int(b / grid) for _, b in form.brackets]
        numbers = [int(form.field / grid), int(form.coupler / grid), *heights, *slopes]
        kind: Any = np.int64 if sum(map(abs, numbers)) * (n + len(added)) ** 2 * 16 < INT64_BOUND else object
        parts: list[Part] = [
            (self.members[:, None], np.full(n, numbers[0], kind)),
            (np.stack([self.members[low], self.members[high]], axis=1), np.full(len(low), numbers[1], kind)),
            (added[:, None], np.array(heights, kind)),
            (
                np.stack([np.tile(self.members, len(added)), np.repeat(added, n)], axis=1),
                np.repeat(np.array(slopes, kind), n),
            ),
        ]
        constant = int(form.constant / resolution)
        if self.domain == "spin":
            # Down spins are counted whatever the convention, so x = (1 - s)/2 here.
            _, blocks = canonical_blocks(parts, "boolean")
            top = max((block.locality for block in blocks), default=0)
            scale = 4 // 2**top
            spins = [(m.astype(np.int64), w * scale) for m, w in spin_parts(blocks, -1)]
            constant += sum(int(w.sum()) for m, w in spins if m.shape[1] == 0)
            parts = [(m, w) for m, w in spins if m.shape[1]]
        return [(m[w != 0], w[w != 0]) for m, w in parts], constant

    def sketch(self, unit: Fraction, gap: Fraction, resolution: Fraction) -> Sketch:
        """What pricing needs to know."""
        first = int(self.members[-1]) + 1
        parts, _ = self.attach(first, unit, gap, resolution)
        return sketch_of(parts, first, self.domain)

    def values(self) -> list[int]:
        """f(S) for S = 0 .. n ones or down spins, in units of the source's resolution.

        Examples
        --------
        >>> SymmetricPiece(np.arange(4), ((3, 2),), "boolean", Fraction(1), Fraction(0)).values()
        [0, 0, 0, 2, 8]
        >>> SymmetricPiece(np.arange(3), ((3, 1),), "spin", Fraction(1), Fraction(0)).values()
        [1, -1, 1, -1]
        """
        n = len(self.members)
        return [
            sum(weight * _sum_of_products(n, down, k, self.domain) for k, weight in self.weights)
            for down in range(n + 1)
        ]


@lru_cache(maxsize=4096)
def _sum_of_products(n: int, down: int, k: int, domain: str) -> int:
    """Sum of all products of k variables when `down` of n are one (booleans) or down (spins)."""
    if domain == "boolean":
        return comb(down, k)
    return sum((-1) ** j * comb(down, j) * comb(n - down, k - j) for j in range(k + 1))


def components(H: Hamiltonian) -> npt.NDArray[np.int64]:
    """For each variable the smallest variable that terms of three and more connect it to, shape (n,)."""
    labels = np.arange(H.size)
    blocks = [block for block in H.blocks if block.locality > 2]
    while True:
        before = labels.copy()
        for block in blocks:
            least = labels[block.members].min(axis=1)
            for column in range(block.locality):
                np.minimum.at(labels, block.members[:, column], least)
        # Following the labels themselves makes long chains settle in few rounds.
        labels = labels[labels]
        if np.array_equal(labels, before):
            return labels


Taken = dict[int, npt.NDArray[np.bool_]]


def _possible(block: Block, size: int, largest: int) -> npt.NDArray[np.bool_]:
    """Terms whose members all stand in as many terms of the block as members of a symmetric part would."""
    k = block.locality
    counts = [count for n in range(max(SMALLEST, k), largest + 1) if (count := comb(n - 1, k - 1)) <= len(block)]
    degrees = np.bincount(block.members.ravel(), minlength=size)
    return np.asarray(np.isin(degrees, np.array(counts, np.int64))[block.members].all(axis=1))


def symmetric_pieces(H: Hamiltonian, gap: Fraction, largest: int = LARGEST) -> tuple[list[SymmetricPiece], Taken]:
    """The symmetric parts of at most `largest` variables, and for each locality which terms they take.

    Examples
    --------
    >>> from itertools import combinations
    >>> H = Hamiltonian({triple: 1 for triple in combinations("abcdef", 3)}, "boolean")
    >>> pieces, taken = symmetric_pieces(H, Fraction(1))
    >>> [piece.auxiliaries for piece in pieces], int(taken[3].sum())
    ([2], 20)
    """
    blocks = [block for block in H.blocks if block.locality > 2]
    if not any(_possible(block, H.size, largest).any() for block in blocks):
        return [], {}
    labels = components(H)
    sizes = np.bincount(labels, minlength=H.size)
    good = (sizes >= SMALLEST) & (sizes <= largest)
    counts, weights = {}, {}
    for block in blocks:
        home = labels[block.members[:, 0]]
        count = np.bincount(home, minlength=H.size)
        first = np.zeros(H.size, block.weights.dtype)
        first[home] = block.weights
        wanted = np.array([comb(size, block.locality) for size in range(int(sizes.max(initial=0)) + 1)], object)[
            sizes
        ]
        good &= np.asarray((count == 0) | (count == wanted), dtype=bool)
        good[home[block.weights != first[home]]] = False
        counts[block.locality], weights[block.locality] = count, first
    pieces = []
    for root in np.flatnonzero(good & (labels == np.arange(H.size))).tolist():
        own = tuple((k, int(weights[k][root])) for k in counts if counts[k][root])
        pieces.append(SymmetricPiece(np.flatnonzero(labels == root), own, H.domain, H.resolution, gap))
    return pieces, {block.locality: good[labels[block.members[:, 0]]] for block in blocks}
