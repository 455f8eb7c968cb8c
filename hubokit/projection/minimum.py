"""The exact minimum over the auxiliaries at given states of the originals, for any quadratic model.

Auxiliaries that rules decide are read off their guards. The others split into clusters: small ones are
enumerated, all clusters of one size at once, larger ones go through bucket elimination. Nothing here needs P
as a polynomial.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.states import States, from_bits, to_bits
from hubokit.projection.clusters import Batch, Components, batches, components
from hubokit.projection.elimination import WIDTH_LIMIT, Best, elimination_order, minimise
from hubokit.projection.guards import Rules
from hubokit.projection.search import gap_above, search
from hubokit.projection.structure import Integers, Positions, Structure
from hubokit.projection.tables import NONE, fold, least_positive, settings

ENUMERATED = 6
"""Clusters of up to this many auxiliaries are enumerated."""

ELIMINATED = 10
"""Width up to which a larger cluster is eliminated without trying a search."""

MOST_COUPLED = 4000
"""Auxiliaries of one cluster that are minimised over together."""

CELLS = 2**23
"""States times variables held at once."""


@dataclass(frozen=True)
class Minima:
    """Minimum over the auxiliaries at m states.

    Parameters
    ----------
    states : int8 array, shape (m, n)
        Full states of the model with the best auxiliaries, first in lift order.
    multiplicity : object array, shape (m,)
        Number of best settings.
    gap : integer array, shape (m,)
        Least positive excess met, `NONE` where there is none; for auxiliaries decided by rules their margin.
    exact : bool
        Whether every gap is the true one; otherwise each is a lower bound.
    """

    states: States
    multiplicity: Integers
    gap: Integers
    exact: bool


@dataclass(frozen=True)
class Minimiser:
    """Minimisation over the auxiliaries of one model.

    Parameters
    ----------
    structure : Structure
    rounds : list of rounds of Rules
        Auxiliaries that are functions of their guards in every minimiser.
    """

    structure: Structure
    rounds: tuple[tuple[Rules, ...], ...] = ()

    @cached_property
    def others(self) -> Positions:
        """Positions of the auxiliaries that no rule decides."""
        left = self.structure.is_auxiliary.copy()
        for rules in self.rounds:
            for one in rules:
                left[one.auxiliaries] = False
        return np.flatnonzero(left)

    @cached_property
    def clusters(self) -> Components:
        """Clusters of the auxiliaries that no rule decides."""
        return components(self.structure, self.others)

    @cached_property
    def small(self) -> tuple[Batch, ...]:
        """Clusters to be enumerated, their touched variables left out."""
        return tuple(_merged(self.structure, self.clusters, self.clusters.a <= ENUMERATED))

    @cached_property
    def large(self) -> tuple[tuple[Positions, Integers], ...]:
        """Auxiliaries and inner couplings (upper triangle) of every cluster to be eliminated."""
        found = self.clusters
        if found.a.max(initial=0) > MOST_COUPLED:
            raise LimitError(
                f"a cluster of {found.a.max():,} coupled auxiliaries that no few guards decide is too large to "
                f"minimise over; at most {MOST_COUPLED:,} are allowed"
            )
        chosen = np.flatnonzero(found.a > ENUMERATED)
        return tuple(_inner(self.structure, found.auxiliaries_of(int(one))) for one in chosen)

    @cached_property
    def elimination_work(self) -> int:
        """Table entries that the larger clusters take for one state; huge where elimination would not be chosen."""
        if self.clusters.a.max(initial=0) > MOST_COUPLED:
            return 2**62
        widths = [elimination_order(between, ELIMINATED)[1] for _, between in self.large]
        if max(widths, default=0) > ELIMINATED:
            return 2**62
        return sum(len(between) << width for (_, between), width in zip(self.large, widths, strict=True))

    def minima(self, originals: States) -> Minima:
        """Best auxiliaries for each row of originals (values of the domain, columns in model order).

        Raises
        ------
        LimitError
            A cluster of auxiliaries is too wide for elimination and needs too many branches in a search.
        """
        n = len(self.structure.is_auxiliary)
        step = max(1, CELLS // max(1, n))
        parts = [self._minima(originals[start : start + step]) for start in range(0, len(originals), step)]
        if not parts:
            kind = self.structure.field.dtype
            return Minima(np.zeros((0, n), np.int8), np.zeros(0, object), np.zeros(0, kind), True)
        return Minima(
            np.concatenate([part.states for part in parts]),
            np.concatenate([part.multiplicity for part in parts]),
            np.concatenate([part.gap for part in parts]),
            all(part.exact for part in parts),
        )

    def _minima(self, originals: States) -> Minima:
        structure, domain = self.structure, self.structure.domain
        kind = structure.field.dtype
        count = len(originals)
        states = np.zeros((count, len(structure.is_auxiliary)), np.int8)
        states[:, structure.originals] = originals
        multiplicity = np.ones(count, object)
        gap = np.full(count, NONE, kind)
        exact = True
        for rules in self.rounds:
            for one in rules:
                states[:, one.auxiliaries] = from_bits(one.bits(to_bits(states[:, one.guards], domain)), domain)
                exact &= not len(one)
                gap = _nearer(gap, np.broadcast_to(least_positive(one.margin), (count,)))
        # The auxiliaries not yet set count as 0 here, so that what they are coupled to gives fields alone.
        fields = _fields(structure, self.others, states)
        column = np.full(len(structure.is_auxiliary), -1)
        column[self.others] = np.arange(len(self.others))
        for batch in self.small:
            _, counts, nearest, chosen = _enumerate(fields[:, column[batch.auxiliaries]], batch.between, domain)
            bits = settings_bits(chosen, batch.a)
            states[:, batch.auxiliaries.ravel()] = from_bits(bits, domain).reshape(count, -1)
            multiplicity = multiplicity * _product(counts)
            gap = _nearer(gap, least_positive(nearest))
        bound = 4 * structure.model.weight_bound
        for auxiliaries, between in self.large:
            f = fields[:, column[auxiliaries]]
            best = _wide(*in_bits(f, between, domain), bound)
            states[:, auxiliaries] = from_bits(best.bits, domain)
            multiplicity = multiplicity * best.multiplicity.astype(object)
            gap = _nearer(gap, best.gap)
            exact &= best.is_gap_exact
        return Minima(states, multiplicity, gap, exact)


def _wide(fields: Integers, between: Integers, bound: int) -> Best:
    """One cluster of many auxiliaries: eliminated where narrow, else searched, else eliminated all the same."""
    _, width = elimination_order(between, WIDTH_LIMIT)
    if width <= ELIMINATED or len(between) <= WIDTH_LIMIT // 2:
        return minimise(fields, between, bound)
    try:
        found = search(fields, between + between.T)
    except LimitError:
        if width > WIDTH_LIMIT:
            raise
        return minimise(fields, between, bound)
    gap, is_exact = gap_above(fields, between + between.T, found)
    return Best(found.energy, found.multiplicity, gap, found.bits, is_exact)


def in_bits(fields: Integers, between: Integers, domain: str) -> tuple[Integers, Integers]:
    """Fields (m, a) and couplings (a, a) in values of the domain, rewritten for bits (up to a constant).

    For spins s = 1 - 2b: ``f s`` becomes ``-2 f b`` and ``q s s'`` becomes ``4 q b b' - 2 q b - 2 q b'``.
    """
    if domain == "boolean":
        return fields, between
    around = (between + between.T).sum(axis=1)
    return -2 * (fields + around), 4 * between


def settings_bits(index: Integers, count: int) -> NDArray[np.int8]:
    """Bits of setting numbers, one more axis of length `count`."""
    shifts = np.arange(count - 1, -1, -1)
    return ((index[..., None] >> shifts) & 1).astype(np.int8)


def _enumerate(fields: Integers, between: Integers, domain: str) -> tuple[Integers, Integers, Integers, Integers]:
    """All settings of B clusters at m states, fields (m, B, a), between (B, a, a).

    Minimum, multiplicity, gap and the number of the first best setting, each of shape (m, B).
    """
    best = count = gap = chosen = np.zeros(0, np.int64)
    for index, setting in enumerate(settings(between.shape[1], domain)):
        pairs = (between * np.multiply.outer(setting, setting)).sum(axis=(1, 2))
        energy = fields @ setting + pairs
        if index == 0:
            best, count = energy, np.ones(energy.shape, np.int64)
            gap, chosen = np.full(energy.shape, NONE, energy.dtype), np.zeros(energy.shape, np.int64)
        else:
            chosen = np.where(energy < best, index, chosen)
            best, count, gap = fold(best, count, gap, energy)
    return best, count, gap, chosen


def _fields(structure: Structure, chosen: Positions, states: States) -> Integers:
    """h + sum of couplings times the values already set, for the chosen auxiliaries; shape (m, len(chosen))."""
    row, other, weight = structure.neighbours.rows(chosen)
    fields: Integers = np.repeat(structure.field[chosen][None, :], len(states), axis=0)
    if not len(row):
        return fields
    if weight.dtype == object:
        values = states[:, other].astype(object)
        np.add.at(fields.T, row, (values * weight).T)
        return fields
    from scipy.sparse import csr_array

    starts = np.searchsorted(row, np.arange(len(chosen) + 1))
    matrix = csr_array((weight, other, starts), shape=(len(chosen), states.shape[1]))
    return np.asarray(fields + (matrix @ states.T.astype(np.int64)).T)


def _merged(structure: Structure, found: Components, chosen: NDArray[np.bool_]) -> list[Batch]:
    """Batches by number of auxiliaries alone: the touched variables already sit in the fields."""
    nothing = np.zeros(0, np.int64)
    bare = Components(
        found.members, found.cluster, nothing, nothing, found.a, np.zeros_like(found.a), nothing, nothing
    )
    inner = Structure(
        structure.model,
        structure.is_auxiliary,
        [],
        structure.field,
        *_pairs_inside(structure, found.members),
    )
    return list(batches(inner, bare, chosen))


def _pairs_inside(structure: Structure, members: Positions) -> tuple[Positions, Integers]:
    inside = np.zeros(len(structure.is_auxiliary), bool)
    inside[members] = True
    kept = inside[structure.ends].all(axis=1)
    return structure.ends[kept], structure.weights[kept]


def _inner(structure: Structure, auxiliaries: Positions) -> tuple[Positions, Integers]:
    index = np.full(len(structure.is_auxiliary), -1)
    index[auxiliaries] = np.arange(len(auxiliaries))
    row, other, weight = structure.neighbours.rows(auxiliaries)
    column = index[other]
    kept = column > row
    between = np.zeros((len(auxiliaries), len(auxiliaries)), structure.field.dtype)
    between[row[kept], column[kept]] = weight[kept]
    return auxiliaries, between


def _nearer(gap: Integers, other: Integers) -> Integers:
    """Entrywise least of two gaps, where `NONE` means that there is none."""
    return np.where(gap == NONE, other, np.where(other == NONE, gap, np.minimum(gap, other)))


def _product(counts: Integers) -> Integers:
    """Product along the last axis in Python integers, shape (m,)."""
    total = np.ones(len(counts), object)
    for value in np.unique(counts):
        if value != 1:
            number = (counts == value).sum(axis=1)
            total = total * np.array([int(value) ** int(k) for k in number], object)
    return total
