"""From a choice of gadgets to a quadratic model: terms sorted into pieces, priced, and put together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import INT64_BOUND, absolute_sum, format_fraction, times
from hubokit.reduction.costs import extremes
from hubokit.reduction.gadgets.attach import Piece, TermPiece, shared_resolution
from hubokit.reduction.gadgets.base import Keep, Part
from hubokit.reduction.gadgets.table import mirror_stand_in, stand_in, wide_stand_in

Choice = Mapping[tuple[int, int], str]
"""Name of the family that serves each (locality, sign)."""


@dataclass(frozen=True)
class Price:
    """What a way of reducing would cost, exactly.

    Parameters
    ----------
    auxiliaries, couplers : int
    ratio : Fraction
        Largest over smallest nonzero absolute coefficient.
    """

    auxiliaries: int
    couplers: int
    ratio: Fraction

    def figure(self, prefer: str) -> tuple[Fraction | int, ...]:
        """What a preference compares: the preferred figure first, then the others to break ties."""
        if prefer == "range":
            return self.ratio, self.auxiliaries, self.couplers
        if prefer == "couplers":
            return self.couplers, self.auxiliaries, self.ratio
        return self.auxiliaries, self.ratio, self.couplers

    def as_json(self) -> dict[str, Any]:
        """Plain JSON values, for the trail."""
        return {
            "auxiliaries": self.auxiliaries,
            "couplers": self.couplers,
            "coefficient ratio": format_fraction(self.ratio),
        }


def term_pieces(
    H: Hamiltonian,
    choice: Choice,
    gap: Fraction,
    keep: Keep,
    taken: Mapping[int, npt.NDArray[np.bool_]] | None = None,
) -> list[Piece]:
    """The terms of three and more members in canonical order, grouped by stand-in.

    Parameters
    ----------
    H : Hamiltonian
    choice : mapping
        Name of the family for each (locality, sign).
    gap : Fraction
        Auxiliary gap asked for; terms too light for the reach of their family get its widened form.
    keep : str
    taken : mapping from locality to bool array, optional
        Terms that something else serves.
    """
    pieces: list[Piece] = []
    for block in H.blocks:
        free = np.ones(len(block), bool) if taken is None else ~taken.get(block.locality, np.zeros(len(block), bool))
        for sign in (-1, 1):
            chosen = (block.weights * sign > 0) & free
            if block.locality < 3 or not chosen.any():
                continue
            name = choice[block.locality, sign]
            members, sizes = block.members[chosen], np.abs(block.weights[chosen])
            own = stand_in(name, block.locality, sign, keep)
            least = Fraction(0) if own.reach is None else gap / (own.reach * H.resolution)
            # Whole sizes below a rational bound are those below its ceiling, which is an integer comparison.
            light = np.asarray(sizes < -(-least.numerator // least.denominator), dtype=bool)
            mirror = mirror_stand_in(name, block.locality, sign, keep)
            if mirror is not None:
                pieces.append(TermPiece(own, members[::2], sizes[::2], name))
                pieces.append(TermPiece(mirror, members[1::2], sizes[1::2], name))
            elif not light.all():
                pieces.append(TermPiece(own, members[~light], sizes[~light], name))
            if mirror is None and light.any():
                wide = wide_stand_in(name, block.locality, sign, keep)
                pieces.append(TermPiece(wide, members[light], sizes[light], f"{name}, widened"))
    return pieces


def short_parts(H: Hamiltonian, factor: int) -> list[Part]:
    """The fields and couplers of the model, in units of its resolution over `factor`."""
    return [(b.members.astype(np.int64), times(b.weights, factor)) for b in H.blocks if b.locality < 3]


def priced(H: Hamiltonian, pieces: Sequence[Piece], gap: Fraction) -> Price:
    """The exact price of the assembled model, without writing it down."""
    resolution = shared_resolution(pieces, H.resolution, gap)
    sketches = [piece.sketch(H.resolution, gap, resolution) for piece in pieces]
    parts = short_parts(H, int(H.resolution / resolution))
    for sketch in sketches:
        parts += sketch.parts
    fields, pairs = merged_weights(parts, H.size)
    bounds = [value for sketch in sketches for value in (sketch.smallest, sketch.largest) if value is not None]
    if len(fields) or len(pairs):
        bounds += extremes([fields, pairs])
    couplers = sum(sketch.couplers for sketch in sketches) + len(pairs)
    ratio = Fraction(max(bounds), min(bounds)) if bounds else Fraction(1)
    return Price(sum(piece.auxiliaries for piece in pieces), couplers, ratio)


def merged_weights(parts: Sequence[Part], size: int) -> tuple[npt.NDArray[Any], npt.NDArray[Any]]:
    """Nonzero weights of fields and of couplers after equal products are added up.

    Parameters
    ----------
    parts : sequence of (members (m, 1 or 2), weights (m,))
        Rows increasing.
    size : int
        Number of variables.

    Examples
    --------
    >>> pair, other = np.array([[0, 1]]), np.array([[0, 1], [1, 2]])
    >>> [found.tolist() for found in merged_weights([(pair, np.array([2])), (other, np.array([-2, 5]))], 3)]
    [[], [5]]
    """
    wide = sum(absolute_sum(weights) for _, weights in parts) >= INT64_BOUND
    kind: Any = object if wide else np.int64
    found = []
    for length in (1, 2):
        own = [(members, weights) for members, weights in parts if members.shape[1] == length and len(weights)]
        if not own:
            found.append(np.zeros(0, kind))
            continue
        ends = [members.astype(np.int64) for members, _ in own]
        keys = np.concatenate([m[:, 0] if length == 1 else m[:, 0] * size + m[:, 1] for m in ends])
        weights = np.concatenate([weights.astype(kind) for _, weights in own])
        # Order within equal keys does not matter for a sum, so the faster unstable sort does.
        order = np.argsort(keys)
        keys, weights = keys[order], weights[order]
        starts = np.flatnonzero(np.append(True, keys[1:] != keys[:-1]))
        sums = np.add.reduceat(weights, starts)
        found.append(sums[sums != 0])
    return found[0], found[1]


def fresh_labels(labels: Sequence[str], count: int) -> tuple[str, ...]:
    """The first `count` of y0, y1, ... that are not among `labels`.

    Examples
    --------
    >>> fresh_labels(["a", "y1"], 3)
    ('y0', 'y2', 'y3')
    """
    taken = {label for label in labels if label[:1] == "y"}
    found = [label for number in range(count) if (label := f"y{number}") not in taken]
    number = count
    while len(found) < count:
        if (label := f"y{number}") not in taken:
            found.append(label)
        number += 1
    return tuple(found)


def assembled(H: Hamiltonian, pieces: Sequence[Piece], gap: Fraction) -> tuple[Hamiltonian, tuple[str, ...]]:
    """The model with its short terms kept and every piece replaced by its gadgets; and the auxiliaries."""
    resolution = shared_resolution(pieces, H.resolution, gap)
    parts = short_parts(H, int(H.resolution / resolution))
    first, constant = H.size, 0
    for piece in pieces:
        more, offset = piece.attach(first, H.resolution, gap, resolution)
        parts += more
        constant += offset
        first += piece.auxiliaries
    auxiliaries = fresh_labels(H.labels, first - H.size)
    # The labels are known to be good and the parts to fit, so the model is filled without reading them again.
    labels = (*H.labels, *auxiliaries)
    model = H._like(parts, resolution, H.constant + constant * resolution, labels=labels)
    return model, auxiliaries


def trail_rows(pieces: Sequence[Piece]) -> list[dict[str, Any]]:
    """Rows for the trail: which method served how many terms of which locality, and the auxiliaries it took."""
    rows: dict[tuple[int, str], dict[str, Any]] = {}
    for piece in pieces:
        for row in piece.rows():
            key = row["locality"], row["method"]
            if key in rows:
                rows[key]["terms"] += row["terms"]
                rows[key]["auxiliaries"] += row["auxiliaries"]
            else:
                rows[key] = row
    return list(rows.values())


def work_of(H: Hamiltonian) -> int:
    """Number of members over all terms of three and more: what pricing one choice roughly takes in steps."""
    return sum(len(block) * block.locality for block in H.blocks if block.locality > 2)
