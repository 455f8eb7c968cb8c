"""The projected polynomial under construction: terms from many clusters, in different powers of two."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.numbers import absolute_sum, smallest_weights
from hubokit.model.terms import Part, canonical_blocks

MERGE_AT = 2**22
"""Gathered weights after which equal products are merged."""


@dataclass
class Gathered:
    """A sum of products, in units of the model's resolution over 2**shift.

    Parameters
    ----------
    domain : "spin" or "boolean"
    shift : int
    constant : int
    parts : list of (members (m, k), weights (m,))
    """

    domain: str
    shift: int = 0
    constant: int = 0
    parts: list[Part] = field(default_factory=list)
    held: int = 0

    def add(self, parts: list[Part], shift: int = 0) -> None:
        """Add terms whose weights are in units of 2**-shift."""
        if shift > self.shift:
            self.refine(shift)
        for members, weights in parts:
            if not len(weights):
                continue
            raised = times(weights, 1 << (self.shift - shift))
            if members.shape[1] == 0:
                self.constant += int(raised.astype(object).sum())
                continue
            self.parts.append((members, raised))
            self.held += len(weights)
        if self.held > MERGE_AT:
            self.merge()

    def refine(self, shift: int) -> None:
        """Express everything in units of 2**-shift."""
        factor = 1 << (shift - self.shift)
        self.parts = [(members, times(weights, factor)) for members, weights in self.parts]
        self.constant *= factor
        self.shift = shift

    def merge(self) -> None:
        """Add up equal products and drop what cancels; common powers of two are taken out."""
        constant, blocks = canonical_blocks(self.parts, self.domain)
        self.constant += constant
        self.parts = [(block.members, block.weights) for block in blocks]
        self.held = 0
        common = self.constant
        for _, weights in self.parts:
            common |= int(np.bitwise_or.reduce(weights))
        spare = min(self.shift, (common & -common).bit_length() - 1) if common else self.shift
        if spare:
            self.parts = [(members, smallest_weights(weights >> spare)) for members, weights in self.parts]
            self.constant >>= spare
            self.shift -= spare

    @property
    def terms(self) -> int:
        """Products gathered so far, equal ones counted apart unless merged."""
        return sum(len(weights) for _, weights in self.parts)


def times(weights: NDArray[Any], factor: int) -> NDArray[Any]:
    """Weights times an integer: int64 while the absolute sum allows it, else objects."""
    if factor == 1:
        return weights
    if weights.dtype != object and absolute_sum(weights) * abs(factor) < 2**62:
        return weights * factor
    return weights.astype(object) * factor
