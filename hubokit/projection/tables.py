"""Small clusters by tables: the minimum over the auxiliaries for every setting of the touched variables.

For each setting of the touched variables (in lift order) the table holds the least energy of the cluster, the
number of auxiliary settings that reach it, and the least strictly positive excess of the others. The minimum
becomes a polynomial by the Moebius transform (booleans) or the Walsh-Hadamard transform (spins, with a factor
2**d that is carried exactly).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from hubokit.model.states import from_bits, unpack
from hubokit.projection.clusters import Batch
from hubokit.projection.structure import Integers, Positions

CELLS = 2**20
"""Table entries held at once: a few such tables fit the cache."""

NONE = -1
"""Entry of a gap table where no auxiliary setting lies above the minimum."""

Polynomial = list[tuple[Positions, Integers]]
"""Members and weights, one entry for each locality, the constant included (members of width 0)."""


@dataclass(frozen=True)
class Tables:
    """Tables of B clusters over the 2**d settings of what they touch, in lift order.

    Parameters
    ----------
    minimum : integer array, shape (B, 2**d)
        Least energy over the auxiliaries, in units of the resolution.
    multiplicity : int64 array, shape (B, 2**d)
        Number of auxiliary settings that reach it.
    gap : integer array, shape (B, 2**d)
        Least strictly positive excess, `NONE` where there is none.
    """

    minimum: Integers
    multiplicity: Integers
    gap: Integers

    def least_gap(self) -> Integers:
        """Least positive gap of each cluster, `NONE` where there is none; shape (B,)."""
        return least_positive(self.gap)


def least_positive(gaps: Integers) -> Integers:
    """Least entry that is not `NONE` along the last axis, `NONE` where there is none."""
    if gaps.shape[-1] == 0:
        return np.full(gaps.shape[:-1], NONE, gaps.dtype)
    top = gaps.max(axis=-1, keepdims=True)
    least: Integers = np.where(gaps == NONE, top, gaps).min(axis=-1)
    return least


def settings(count: int, domain: str) -> Positions:
    """All settings of `count` variables in lift order, int64, shape (2**count, count).

    Examples
    --------
    >>> settings(2, "spin").tolist()
    [[1, 1], [1, -1], [-1, 1], [-1, -1]]
    """
    return from_bits(unpack(np.arange(1 << count), count), domain).astype(np.int64)


def tabulate(batch: Batch, domain: str) -> Tables:
    """Tables of every cluster of a batch by enumerating its auxiliaries: B * 2**(a+d) energies.

    Examples
    --------
    >>> one = np.array
    >>> y_is_x0_and_x1 = Batch(one([[2]]), one([[0, 1]]), one([[3]]), one([[[-2, -2]]]), one([[[0]]]))
    >>> tables = tabulate(y_is_x0_and_x1, "boolean")
    >>> tables.minimum.tolist(), tables.multiplicity.tolist(), tables.gap.tolist()
    ([[0, 0, 0, -1]], [[1, 1, 1, 1]], [[3, 1, 1, 1]])
    """
    return joined([tables for _, tables in tabulated_parts(batch, domain)], batch)


def tabulated_parts(batch: Batch, domain: str) -> Iterator[tuple[slice, Tables]]:
    """Tables of a few clusters at a time, so that no more than about `CELLS` entries are held."""
    step = max(1, CELLS >> batch.d)
    for start in range(0, len(batch), step):
        part = slice(start, min(start + step, len(batch)))
        yield part, _enumerated(batch, part, domain)


def joined(parts: list[Tables], batch: Batch) -> Tables:
    """The tables of consecutive parts of a batch, side by side."""
    if not parts:
        empty = np.zeros((0, 1 << batch.d), batch.field.dtype)
        return Tables(empty, empty.astype(np.int64), empty)
    return Tables(
        np.concatenate([part.minimum for part in parts]),
        np.concatenate([part.multiplicity for part in parts]),
        np.concatenate([part.gap for part in parts]),
    )


def _enumerated(batch: Batch, part: slice, domain: str) -> Tables:
    field, coupling, between = batch.field[part], batch.coupling[part], batch.between[part]
    values = settings(1, domain)[:, 0]
    best = spread_energies(field, coupling, between, settings(batch.a, domain)[0], values)
    count = np.ones(best.shape, np.int64)
    gap = np.full(best.shape, NONE, best.dtype)
    for setting in settings(batch.a, domain)[1:]:
        energy = spread_energies(field, coupling, between, setting, values)
        best, count, gap = fold(best, count, gap, energy)
    return Tables(best, count, gap)


def fold(best: Integers, count: Integers, gap: Integers, energy: Integers) -> tuple[Integers, Integers, Integers]:
    """Take one more setting into account: its energies update minimum, multiplicity and gap."""
    excess = energy - best
    lower, equal = excess < 0, excess == 0
    # A lower energy turns the old minimum into the nearest level above; a higher one may lie nearer than the old gap.
    nearer = ~equal & (lower | (gap == NONE) | (excess < gap))
    return (
        np.where(lower, energy, best),
        np.where(lower, 1, count + equal),
        np.where(nearer, np.abs(excess), gap),
    )


def spread_energies(
    field: Integers, coupling: Integers, between: Integers, setting: Positions, values: Positions
) -> Integers:
    """Energies of B clusters for one auxiliary setting and all settings of the touched variables, shape (B, 2**d)."""
    base = field @ setting
    a = len(setting)
    if a > 1:
        pairs = np.multiply.outer(setting, setting)
        base = base + (between * pairs).reshape(len(field), a * a).sum(axis=1)
    local = (coupling * setting[:, None]).sum(axis=1)
    energy = base[:, None]
    for column in range(coupling.shape[2]):
        step = local[:, column, None] * values
        energy = (energy[:, :, None] + step[:, None, :]).reshape(len(field), -1)
    return energy


def coefficients(table: Integers, domain: str) -> tuple[Integers, int]:
    """Polynomials of value tables: coefficients (B, 2**d) in units of 2**-shift.

    Parameters
    ----------
    table : integer array, shape (B, 2**d)
    domain : "spin" or "boolean"

    Returns
    -------
    coefficients : integer array, shape (B, 2**d)
        Entry S belongs to the product of the variables whose bits are set in S (first variable most significant).
    shift : int
        The least one for which all coefficients are whole (0 for booleans).

    Examples
    --------
    >>> coefficients(np.array([[0, -1]]), "spin")  # -1/2 + s/2
    (array([[-1,  1]]), 1)
    """
    from hubokit.spectrum.transforms import moebius, walsh_hadamard

    d = table.shape[1].bit_length() - 1
    if table.dtype != object and table.size:
        largest = max(int(table.max()), -int(table.min()))
        if largest << d >= 2**62:
            table = table.astype(object)
    if domain == "boolean":
        return moebius(table), 0
    spread = walsh_hadamard(table)
    held = int(np.bitwise_or.reduce(spread, axis=None)) if spread.size else 0
    common = min(d, (held & -held).bit_length() - 1) if held else d
    return spread >> common, d - common


def written(coefficient: Integers, touched: Positions) -> Polynomial:
    """Nonzero coefficients as members and weights: ``coefficient[b, S]`` of the product of ``touched[b]`` over S."""
    return [(members, weights) for _, members, weights in written_by_row(coefficient, touched)]


def written_by_row(coefficient: Integers, touched: Positions) -> list[tuple[Positions, Positions, Integers]]:
    """Nonzero coefficients by locality: rows b (ascending), members and weights."""
    d = touched.shape[1]
    row, subset = np.nonzero(coefficient)
    weights = coefficient[row, subset]
    bits = unpack(np.arange(1 << d), d).astype(bool)
    found = bits.sum(axis=1)[subset]
    parts = []
    for locality in np.unique(found):
        kept = found == locality
        inside = np.nonzero(bits[subset[kept]])[1].reshape(int(kept.sum()), int(locality))
        parts.append((row[kept], touched[row[kept][:, None], inside], weights[kept]))
    return parts
