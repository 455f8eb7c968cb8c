"""A polynomial as plain arrays, and the flips that leave it unchanged.

What the enumeration works on: terms in whole numbers, states as packed bits (variable 0 most significant; bit 0 is
spin +1 or boolean 0). It is picklable and knows nothing of labels, so that it can be sent to any worker.

A set of variables whose joint flip leaves every term unchanged is a symmetry. For spins these sets are the null
space of the incidence matrix over GF(2): a model with only even localities has at least the flip of all spins (its
mirror pairs). For booleans they are the sets of variables that no term uses. With r independent sets only one
state of every 2**r is visited: the one whose *pivots* (the leading variable of each set) have bit 0, which comes
first in lift order.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian

INT64_BOUND = 2**62
"""Sums of absolute weights below this are int64; from there on they are Python integers."""

Packed = npt.NDArray[np.uint64]

_CELLS = 2**20
_ROWS = 256


@dataclass(frozen=True)
class Polynomial:
    """Terms over n variables.

    Attributes
    ----------
    size : int
        Number of variables n, at most 62.
    spin : bool
        Spins, or booleans.
    masks : int64 array, shape (m,)
        One bit for each member; variable i is bit ``n - 1 - i``. Zero stands for the constant.
    weights : int64 or object array, shape (m,)
        Whole numbers. Masks may repeat.
    """

    size: int
    spin: bool
    masks: npt.NDArray[np.int64]
    weights: npt.NDArray[Any]

    @property
    def bound(self) -> int:
        """Sum of absolute weights, as a Python integer."""
        return absolute_sum(self.weights)

    def derivative(self, bit: int) -> Polynomial:
        """Value with this bit 1 minus value with this bit 0, a polynomial in the other variables."""
        flag = np.int64(1) << np.int64(bit)
        touched = (self.masks & flag) != 0
        return Polynomial(
            self.size,
            self.spin,
            self.masks[touched] ^ flag,
            self.weights[touched] * (-2 if self.spin else 1),
        )

    def without(self, pivots: Iterable[int]) -> Polynomial:
        """The polynomial in the other variables when these bits are 0, its bits moved together."""
        gone = sorted(pivots)
        fixed = np.int64(sum(1 << bit for bit in gone))
        masks, weights = self.masks, self.weights
        if self.spin:
            masks = masks & ~fixed
        else:
            kept = (masks & fixed) == 0
            masks, weights = masks[kept], weights[kept]
        for bit in reversed(gone):
            low = (np.int64(1) << np.int64(bit)) - 1
            masks = ((masks >> 1) & ~low) | (masks & low)
        return Polynomial(self.size - len(gone), self.spin, masks, weights)

    def merged(self) -> Polynomial:
        """The same function with every mask once and no zero weight; int64 weights where they fit."""
        masks, place = np.unique(self.masks, return_inverse=True)
        weights = np.zeros(len(masks), self.weights.dtype)
        np.add.at(weights, place, self.weights)
        kept = weights != 0
        masks, weights = masks[kept], weights[kept]
        if weights.dtype == object and absolute_sum(weights) < INT64_BOUND:
            weights = weights.astype(np.int64)
        return Polynomial(self.size, self.spin, masks, weights)

    def values(self, states: Packed) -> npt.NDArray[Any]:
        """Exact values at packed states, Python integers in an object array of shape (len(states),)."""
        total = np.zeros(len(states), dtype=object)
        # 32-bit limbs, least significant first, the last one signed: sums over fewer than 2**31 terms fit int64
        limbs = max((int(weight).bit_length() for weight in self.weights), default=0) // 32 + 1
        parts = [[int(w) >> (32 * i) & 0xFFFFFFFF for w in self.weights] for i in range(limbs - 1)]
        parts.append([int(w) >> (32 * (limbs - 1)) for w in self.weights])
        columns = np.array(parts, np.int64).reshape(limbs, len(self.masks)).T
        step = max(1, _CELLS // max(1, len(self.masks)))
        masks = self.masks.astype(np.uint64)
        for start in range(0, len(states), step):
            common = states[start : start + step, None] & masks
            if self.spin:
                factors = 1 - 2 * (np.bitwise_count(common).astype(np.int64) & 1)
            else:
                factors = (common == masks).astype(np.int64)
            sums = factors @ columns
            for limb in range(limbs):
                total[start : start + step] += sums[:, limb].astype(object) << (32 * limb)
        return total


def absolute_sum(weights: npt.NDArray[Any]) -> int:
    """Sum of absolute values as a Python integer, with no way to wrap."""
    if weights.dtype == object:
        return sum(abs(int(w)) for w in weights)
    if len(weights) == 0:
        return 0
    largest = max(int(weights.max()), -int(weights.min()))
    if largest * len(weights) < 2**63:
        return int(np.abs(weights).sum())
    return sum(abs(w) for w in weights.tolist())


def polynomial_of(H: Hamiltonian) -> Polynomial:
    """The terms of a model without its constant, in units of its resolution."""
    masks = [(np.int64(1) << (H.size - 1 - block.members.astype(np.int64))).sum(axis=1) for block in H.blocks]
    if not masks:
        return Polynomial(H.size, H.domain == "spin", np.zeros(0, np.int64), np.zeros(0, np.int64))
    weights = np.concatenate([block.weights for block in H.blocks])
    return Polynomial(H.size, H.domain == "spin", np.concatenate(masks), weights)


@dataclass(frozen=True)
class Symmetry:
    """Flips that leave a polynomial unchanged, in reduced row echelon form.

    Attributes
    ----------
    size : int
        Number of variables of the whole polynomial.
    flips : tuple of int
        Packed sets of variables, descending; the highest bit of each is its pivot and appears in no other set.
    """

    size: int
    flips: tuple[int, ...]

    @property
    def pivots(self) -> tuple[int, ...]:
        """The highest bit of each set."""
        return tuple(flip.bit_length() - 1 for flip in self.flips)

    def whole(self, reduced: Packed) -> Packed:
        """Packed states of the whole polynomial, pivots 0, from those of `Polynomial.without`; order is kept."""
        states = reduced
        for bit in sorted(self.pivots):
            low = np.uint64((1 << bit) - 1)
            states = ((states & ~low) << np.uint64(1)) | (states & low)
        return states

    def images(self, states: Packed, limit: int) -> Packed:
        """The first `limit` of the images, in lift order, from at least the first `limit` states with pivots 0.

        A state with the pivot at 0 comes before its image, so that cutting after every flip loses nothing.
        """
        states = np.sort(states)[:limit]
        for flip in reversed(self.flips):
            states = np.sort(np.concatenate([states, states ^ np.uint64(flip)]))[:limit]
        return states


def symmetry_of(polynomial: Polynomial) -> Symmetry:
    """All flips that leave a polynomial unchanged term by term.

    Examples
    --------
    >>> pairs = Polynomial(3, True, np.array([0b110, 0b011]), np.array([1, 1]))
    >>> [bin(flip) for flip in symmetry_of(pairs).flips]
    ['0b111']
    """
    if not polynomial.spin:
        used = int(np.bitwise_or.reduce(polynomial.masks)) if len(polynomial.masks) else 0
        free = [bit for bit in reversed(range(polynomial.size)) if not used >> bit & 1]
        return Symmetry(polynomial.size, tuple(1 << bit for bit in free))
    # Rows are reduced from the least significant bit up: a row's other bits all lie above its own bit, so that a bit
    # without a row is free, and is the highest of its flip.
    own: dict[int, int] = {}
    for rows in (polynomial.masks[:_ROWS], polynomial.masks[_ROWS:]):  # a few rows mostly suffice
        if len(own) < polynomial.size:
            _absorb(own, rows.copy(), polynomial.size)
    free = [bit for bit in reversed(range(polynomial.size)) if bit not in own]
    flips = (1 << bit | sum(1 << low for low, mask in own.items() if mask >> bit & 1) for bit in free)
    return Symmetry(polynomial.size, tuple(flips))


def _absorb(own: dict[int, int], rows: npt.NDArray[np.int64], size: int) -> None:
    """Add rows to a reduced basis over GF(2): own bit to row; no row has the own bit of another."""
    for bit in range(size):
        having = ((rows >> bit) & 1).astype(bool)
        if bit not in own:
            if not having.any():
                continue
            row = int(rows[np.argmax(having)])
            for other, mask in own.items():
                if row >> other & 1:
                    row ^= mask
            for other, mask in own.items():
                if mask >> bit & 1:
                    own[other] = mask ^ row
            own[bit] = row
        rows[having] ^= np.int64(own[bit])
