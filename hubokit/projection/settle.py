"""What is known about a batch of clusters once it is settled by tables or by counting."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hubokit.model.states import unpack
from hubokit.projection.clusters import Batch, shapes
from hubokit.projection.counting import classes_of, count, symmetric_polynomial
from hubokit.projection.elimination import elimination_order, minimise
from hubokit.projection.minimum import in_bits
from hubokit.projection.polynomial import Gathered
from hubokit.projection.structure import Integers, Positions
from hubokit.projection.tables import (
    CELLS,
    NONE,
    Tables,
    coefficients,
    joined,
    least_positive,
    settings,
    tabulated_parts,
    written,
    written_by_row,
)

SAMPLE = 512
"""Clusters looked at before deciding whether a search for equal shapes pays."""

TABLE_WORK = 2**30
"""Energies computed for all tables of one batch."""


@dataclass(frozen=True)
class Settled:
    """A batch of clusters whose minimum over the auxiliaries is known.

    Parameters
    ----------
    method : "table" or "counting"
    batch : Batch
    distinct : Batch
        One cluster for each shape, with couplings divided by their common divisor.
    factors, shape : integer arrays, shape (B,)
        Cluster b is ``factors[b]`` times the shape ``distinct[shape[b]]``.
    least, most : int64 arrays, shape (U,)
        Extreme multiplicities of each shape.
    gap : integer array, shape (U,)
        Least strictly positive excess of each shape (times the factor for a cluster), `NONE` where there is none.
    witness : int8 array, shape (U, d)
        Bits of a setting of the touched variables with the most best auxiliary settings.
    """

    method: str
    batch: Batch
    distinct: Batch
    factors: Integers
    shape: Positions
    least: Positions
    most: Positions
    gap: Integers
    witness: NDArray[np.int8]

    def least_gap(self) -> int | None:
        """Least positive excess over all clusters, in units of the resolution; None where there is none."""
        gap = self.gap[self.shape]
        gap = np.where(gap == NONE, NONE, gap * self.factors)
        least = int(least_positive(gap)) if len(gap) else NONE
        return None if least == NONE else least


def looked_alike(batch: Batch) -> tuple[Batch, Integers, Positions]:
    """The shapes of a batch; where a sample shows that clusters hardly repeat, every cluster is its own shape."""
    if len(batch) > SAMPLE:
        sample, _, _ = shapes(batch.taken(np.arange(0, len(batch), len(batch) // SAMPLE)))
        if 2 * len(sample) > SAMPLE:
            return batch, np.ones(len(batch), batch.field.dtype), np.arange(len(batch))
    return shapes(batch)


def by_tables(batch: Batch, domain: str, gathered: Gathered, table_bits: int, work: int) -> Settled | None:
    """Tabulate a batch and add its polynomials; None where the tables would take more than `work` energies."""
    distinct, factors, shape = looked_alike(batch)
    if batch.d > table_bits or not affordable(distinct, work):
        return None
    if distinct is batch:
        return _unlike(batch, domain, gathered)
    tables = tables_of(distinct, domain)
    coefficient, shift = coefficients(tables.minimum, domain)
    step = max(1, (1 << 22) >> batch.d)
    for start in range(0, len(batch), step):
        part = slice(start, start + step)
        for row, members, weights in written_by_row(coefficient[shape[part]], batch.touched[part]):
            gathered.add([(members, scaled(weights, factors[part][row]))], shift)
    return Settled("table", batch, distinct, factors, shape, *_extremes(tables, batch.d))


def affordable(distinct: Batch, work: int) -> bool:
    """Whether tables of these shapes stay within `work` energies."""
    if len(distinct) << (distinct.a + distinct.d) <= work:
        return True
    if len(distinct) << distinct.d > work:
        return False
    widest = work.bit_length()
    width = max(elimination_order(one, widest)[1] for one in distinct.between)
    return (len(distinct) * distinct.a) << (distinct.d + width + 1) <= work


def by_counting(batch: Batch, domain: str, gathered: Gathered) -> Settled | None:
    """Count instead of tabulating, shape by shape; None where it does not pay, or some shape has too many terms."""
    distinct, factors, shape = shapes(batch)
    found = []
    if any(classes_of(one, domain).cells == 1 << batch.d for one in distinct.coupling):
        return None
    for index in range(len(distinct)):
        counted = count(distinct.taken(np.array([index])), domain)
        if counted is None:
            return None
        polynomial = symmetric_polynomial(counted, domain)
        if polynomial is None:
            return None
        found.append((counted, polynomial))
    witness = np.zeros((len(distinct), batch.d), np.int8)
    for index, (counted, (parts, shift)) in enumerate(found):
        same = np.flatnonzero(shape == index)
        for members, weights in parts:
            spread = batch.touched[same][:, members].reshape(len(same) * len(members), members.shape[1])
            gathered.add(
                [(spread, scaled(np.tile(weights, len(same)), np.repeat(factors[same], len(weights))))], shift
            )
        most = np.unravel_index(int(counted.multiplicity.argmax()), counted.multiplicity.shape)
        for columns, number in zip(counted.classes.members, most, strict=True):
            flipped = np.array(counted.classes.signs)[list(columns)] < 0
            witness[index, list(columns)] = (np.arange(len(columns)) < number) ^ flipped
    return Settled(
        "counting",
        batch,
        distinct,
        factors,
        shape,
        np.array([counted.multiplicity.min() for counted, _ in found], np.int64),
        np.array([counted.multiplicity.max() for counted, _ in found], np.int64),
        np.array([int(least_positive(counted.gap.ravel())) for counted, _ in found], batch.field.dtype),
        witness,
    )


def scaled(weights: Integers, factors: Integers) -> Integers:
    """Entrywise product that never wraps."""
    if weights.dtype == object or factors.dtype == object or not len(weights):
        return weights * factors
    if int(np.abs(weights).max()) * int(np.abs(factors).max()) >= 2**62:
        return weights.astype(object) * factors
    return weights * factors


def _unlike(batch: Batch, domain: str, gathered: Gathered) -> Settled:
    """Every cluster its own shape: a few at a time, nothing kept but the extremes."""
    kept: list[tuple[Positions, Positions, Integers, NDArray[np.int8]]] = []
    for part, tables in tabulated_parts(batch, domain):
        coefficient, shift = coefficients(tables.minimum, domain)
        gathered.add(written(coefficient, batch.touched[part]), shift)
        kept.append(_extremes(tables, batch.d))
    least, most, gap, witness = (np.concatenate([one[i] for one in kept]) for i in range(4))
    ones = np.ones(len(batch), batch.field.dtype)
    return Settled("table", batch, batch, ones, np.arange(len(batch)), least, most, gap, witness)


def _extremes(tables: Tables, d: int) -> tuple[Positions, Positions, Integers, NDArray[np.int8]]:
    most = tables.multiplicity.argmax(axis=1)
    return (
        tables.multiplicity.min(axis=1),
        tables.multiplicity.max(axis=1),
        tables.least_gap(),
        unpack(most, d).astype(np.int8),
    )


def tables_of(distinct: Batch, domain: str) -> Tables:
    """By enumeration of the auxiliaries, or by eliminating them where there are many of small width."""
    if len(distinct) << (distinct.a + distinct.d) <= TABLE_WORK >> 4 or distinct.a < 8:
        return joined([tables for _, tables in tabulated_parts(distinct, domain)], distinct)
    return joined([eliminated(distinct.taken(np.array([index])), domain) for index in range(len(distinct))], distinct)


def eliminated(one: Batch, domain: str) -> Tables:
    """Tables of the only cluster of a batch, its auxiliaries eliminated for blocks of settings."""
    field, coupling, between = one.field[0], one.coupling[0], one.between[0]
    values = settings(one.d, domain)
    total = sum(int(np.abs(array).sum()) for array in (field, coupling, between))
    parts = []
    for start in range(0, len(values), CELLS):
        at = field + values[start : start + CELLS] @ coupling.T
        f, q = in_bits(at, between, domain)
        best = minimise(f, q, 8 * total)
        # With all bits 0 a boolean cluster has energy 0 and a spin cluster the sum of its fields and couplings.
        base = at.sum(axis=1) + between.sum() if domain == "spin" else 0
        parts.append(Tables(best.energy + base, best.multiplicity, best.gap))
    return Tables(
        np.concatenate([part.minimum for part in parts])[None, :],
        np.concatenate([part.multiplicity for part in parts])[None, :],
        np.concatenate([part.gap for part in parts])[None, :],
    )
