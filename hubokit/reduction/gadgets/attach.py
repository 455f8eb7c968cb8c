"""Stand-ins put in place of whole blocks of terms by array work."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt

from hubokit.model.numbers import INT64_BOUND, absolute_sum, common_resolution
from hubokit.model.terms import canonical_blocks
from hubokit.reduction.gadgets.base import Part, StandIn


class Piece(Protocol):
    """Terms that are replaced together."""

    @property
    def method(self) -> str:
        """Name for the trail."""
        ...

    @property
    def auxiliaries(self) -> int:
        """Number of auxiliaries that the terms take together."""
        ...

    def rows(self) -> list[dict[str, Any]]:
        """Rows for the trail: locality, method, terms, auxiliaries."""
        ...

    def resolution(self, unit: Fraction, gap: Fraction) -> Fraction:
        """A rational of which every coefficient is a whole multiple."""
        ...

    def attach(self, first: int, unit: Fraction, gap: Fraction, resolution: Fraction) -> tuple[list[Part], int]:
        """The quadratic products that stand for the terms.

        Parameters
        ----------
        first : int
            Position of the first auxiliary.
        unit, gap, resolution : Fraction
            Resolution of the source, auxiliary gap asked for, unit in which the products are given.

        Returns
        -------
        parts : list of (members (r, 1 or 2), weights (r,))
            Not merged.
        constant : int
            In units of `resolution`.
        """
        ...

    def sketch(self, unit: Fraction, gap: Fraction, resolution: Fraction) -> Sketch:
        """What pricing needs to know, without writing the products of the auxiliaries down."""
        ...


@dataclass(frozen=True)
class Sketch:
    """A piece as pricing sees it.

    Parameters
    ----------
    parts : list of (members, weights)
        Products of original variables alone, not merged.
    couplers : int
        Number of couplers that hold an auxiliary.
    smallest, largest : int or None
        Absolute coefficients of the products that hold an auxiliary; None where there are none.
    """

    parts: list[Part]
    couplers: int
    smallest: int | None
    largest: int | None


@dataclass(frozen=True)
class TermPiece:
    """Terms that share one stand-in.

    Parameters
    ----------
    stand_in : StandIn
    members : integer array, shape (m, k)
    sizes : integer array, shape (m,)
        Absolute weights, positive, in units of the source's resolution.
    method : str
        Name of the family, for the trail.
    """

    stand_in: StandIn
    members: npt.NDArray[Any]
    sizes: npt.NDArray[Any]
    method: str

    @property
    def auxiliaries(self) -> int:
        """Number of auxiliaries that the terms take together."""
        return len(self.sizes) * self.stand_in.auxiliaries

    def rows(self) -> list[dict[str, Any]]:
        """Rows for the trail."""
        return [
            {
                "locality": self.stand_in.originals,
                "method": self.method,
                "terms": len(self.sizes),
                "auxiliaries": self.auxiliaries,
            }
        ]

    def resolution(self, unit: Fraction, gap: Fraction) -> Fraction:
        """A rational of which every coefficient is a whole multiple."""
        slope, step = self.stand_in.grids
        return common_resolution([unit, unit * slope, *([gap * step] if self.stand_in.by_gap else [])])

    def attach(self, first: int, unit: Fraction, gap: Fraction, resolution: Fraction) -> tuple[list[Part], int]:
        """The quadratic products that stand for the terms; term t gets ``first + a*t`` and the next a - 1."""
        shape, count = self.stand_in, len(self.sizes)
        added = first + shape.auxiliaries * np.arange(count, dtype=np.int64)[:, None] + np.arange(shape.auxiliaries)
        columns = np.concatenate([self.members.astype(np.int64), added], axis=1)
        slopes, steps = self.stand_in.whole(unit / resolution, gap / resolution)
        sizes = self._safe_sizes(slopes, steps)
        total = absolute_sum(sizes)
        constant = slopes.get((), 0) * total + steps.get((), 0) * count
        parts: list[Part] = []
        for length in (1, 2):
            chosen = [item for item in shape.products if len(item) == length and (slopes[item] or steps[item])]
            if chosen:
                parts.append(_products(columns, sizes, chosen, slopes, steps))
        return parts, constant

    def sketch(self, unit: Fraction, gap: Fraction, resolution: Fraction) -> Sketch:
        """What pricing needs to know; the auxiliaries' coefficients are looked at once for each distinct weight."""
        shape = self.stand_in
        slopes, steps = self.stand_in.whole(unit / resolution, gap / resolution)
        sizes = self._safe_sizes(slopes, steps)
        parts: list[Part] = []
        mixed = []
        couplers = 0
        for length in (1, 2):
            chosen = [item for item in shape.products if len(item) == length and (slopes[item] or steps[item])]
            own = [item for item in chosen if item[-1] < shape.originals]
            others = [item for item in chosen if item[-1] >= shape.originals]
            if own:
                parts.append(_products(self.members, sizes, own, slopes, steps))
            couplers += len(others) * len(sizes) * (length - 1)
            mixed += others
        kinds = {(slopes[item], steps[item]) for item in mixed}
        distinct = np.unique(sizes)
        seen = [np.abs(distinct * slope + step) for slope, step in sorted(kinds)]
        values = [array[array != 0] for array in seen]
        lost = sum(int((array == 0).sum()) for array in seen)
        low = min((int(array.min()) for array in values if len(array)), default=None)
        high = max((int(array.max()) for array in values if len(array)), default=None)
        if lost:
            couplers -= sum(int((sizes * slopes[item] + steps[item] == 0).sum()) for item in mixed if len(item) == 2)
        return Sketch(parts, couplers, low, high)

    def _safe_sizes(self, slopes: dict[tuple[int, ...], int], steps: dict[tuple[int, ...], int]) -> npt.NDArray[Any]:
        """The sizes as objects where some coefficient might not fit int64."""
        # Of no term at all numpy would still multiply int64 by the factors.
        total, count = max(absolute_sum(self.sizes), 1), max(len(self.sizes), 1)
        bound = sum(abs(slopes[item]) * total + abs(steps[item]) * count for item in slopes)
        return self.sizes.astype(object) if bound >= INT64_BOUND else self.sizes


def sketch_of(parts: list[Part], first: int, domain: str) -> Sketch:
    """The sketch of written products; positions from `first` on are auxiliaries."""
    _, blocks = canonical_blocks(parts, domain)
    own: list[Part] = []
    couplers, sizes = 0, []
    for block in blocks:
        mixed = block.members[:, -1] >= first
        own.append((block.members[~mixed].astype(np.int64), block.weights[~mixed]))
        sizes.append(np.abs(block.weights[mixed]))
        couplers += int(mixed.sum()) * (block.locality - 1)
    low = min((int(array.min()) for array in sizes if len(array)), default=None)
    high = max((int(array.max()) for array in sizes if len(array)), default=None)
    return Sketch(own, couplers, low, high)


def shared_resolution(pieces: Iterable[Piece], unit: Fraction, gap: Fraction) -> Fraction:
    """A rational of which every coefficient that the pieces can write is a whole multiple.

    Parameters
    ----------
    pieces : iterable of Piece
    unit : Fraction
        Resolution of the source.
    gap : Fraction
        Auxiliary gap asked for, energy units.
    """
    return common_resolution([unit, *(piece.resolution(unit, gap) for piece in pieces)])


def _products(
    columns: npt.NDArray[np.int64],
    sizes: npt.NDArray[Any],
    chosen: Sequence[tuple[int, ...]],
    slopes: dict[tuple[int, ...], int],
    steps: dict[tuple[int, ...], int],
) -> Part:
    """Members and weights of products of one length, product after product."""
    members = np.concatenate([columns[:, list(item)] for item in chosen])
    weights = np.concatenate([sizes * slopes[item] + steps[item] for item in chosen])
    return members, weights
