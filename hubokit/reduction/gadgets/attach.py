"""Stand-ins put in place of whole blocks of terms by array work."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.numbers import INT64_BOUND, absolute_sum, common_resolution
from hubokit.reduction.gadgets.base import Part, StandIn


@dataclass(frozen=True)
class Piece:
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
    shapes = {id(piece.stand_in): piece.stand_in for piece in pieces}.values()
    values = [unit]
    for shape in shapes:
        values += [unit * value for value in shape.by_weight.values()]
        values += [gap * value for value in shape.by_gap.values()]
    return common_resolution(values)


def attach(piece: Piece, first: int, unit: Fraction, gap: Fraction, resolution: Fraction) -> tuple[list[Part], int]:
    """The quadratic products that stand for the terms of a piece.

    Parameters
    ----------
    piece : Piece
    first : int
        Position of the first auxiliary; term t gets ``first + a*t`` and the following a - 1 positions.
    unit, gap, resolution : Fraction
        Resolution of the source, auxiliary gap asked for, unit in which the products are given.

    Returns
    -------
    parts : list of (members (r, 1 or 2), weights (r,))
        Not merged.
    constant : int
        In units of `resolution`.
    """
    shape, sizes = piece.stand_in, piece.sizes
    count = len(sizes)
    added = first + shape.auxiliaries * np.arange(count, dtype=np.int64)[:, None] + np.arange(shape.auxiliaries)
    columns = np.concatenate([piece.members.astype(np.int64), added], axis=1)
    slopes = {item: _whole(unit * shape.by_weight.get(item, Fraction(0)), resolution) for item in shape.products}
    steps = {item: _whole(gap * shape.by_gap.get(item, Fraction(0)), resolution) for item in shape.products}
    total = absolute_sum(sizes)
    bound = sum(abs(slopes[item]) * total + abs(steps[item]) * count for item in shape.products)
    if bound >= INT64_BOUND:
        sizes = sizes.astype(object)
    constant = slopes.get((), 0) * total + steps.get((), 0) * count
    parts: list[Part] = []
    for length in (1, 2):
        chosen = [item for item in shape.products if len(item) == length and (slopes[item] or steps[item])]
        if chosen:
            parts.append(_products(columns, sizes, chosen, slopes, steps))
    return parts, constant


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


def _whole(value: Fraction, resolution: Fraction) -> int:
    ratio = value / resolution
    if ratio.denominator != 1:
        raise AssertionError(f"{value} is no multiple of {resolution}")
    return ratio.numerator
