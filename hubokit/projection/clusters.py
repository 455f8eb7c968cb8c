"""Clusters: connected components of the coupling graph among auxiliaries, with the variables that each touches.

The minimum over the auxiliaries splits into one minimum for each cluster. Clusters of the same number of auxiliaries
and of touched variables form a `Batch`, whose arrays are worked on at once; clusters whose coupling rows are equal up
to a positive factor have the same shape.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.projection.structure import Integers, Positions, Structure

DENSE = 2**25
"""Largest number of coupling entries that one batch may hold as a dense array."""


@dataclass(frozen=True)
class Batch:
    """B clusters with `a` auxiliaries and `d` touched variables each.

    Parameters
    ----------
    auxiliaries : int64 array, shape (B, a)
        Positions in the model, ascending in each row.
    touched : int64 array, shape (B, d)
        Positions of the other variables coupled to the cluster, ascending.
    field : integer array, shape (B, a)
    coupling : integer array, shape (B, a, d)
    between : integer array, shape (B, a, a)
        Upper triangle: couplings among the auxiliaries.
    """

    auxiliaries: Positions
    touched: Positions
    field: Integers
    coupling: Integers
    between: Integers

    def __len__(self) -> int:
        return len(self.auxiliaries)

    @property
    def a(self) -> int:
        """Auxiliaries in each cluster."""
        return int(self.auxiliaries.shape[1])

    @property
    def d(self) -> int:
        """Touched variables of each cluster."""
        return int(self.touched.shape[1])

    def rows(self) -> Integers:
        """All couplings of a cluster as one row, shape (B, a + a*d + a*a)."""
        count = len(self)
        return np.concatenate([self.field, self.coupling.reshape(count, -1), self.between.reshape(count, -1)], axis=1)

    def taken(self, chosen: NDArray[Any]) -> Batch:
        """The clusters at the chosen indices."""
        return Batch(
            self.auxiliaries[chosen],
            self.touched[chosen],
            self.field[chosen],
            self.coupling[chosen],
            self.between[chosen],
        )

    def divided(self, factors: Integers) -> Batch:
        """Every coupling divided by its cluster's factor, which divides it."""
        return Batch(
            self.auxiliaries,
            self.touched,
            self.field // factors[:, None],
            self.coupling // factors[:, None, None],
            self.between // factors[:, None, None],
        )


@dataclass(frozen=True)
class Components:
    """Clusters of chosen auxiliaries, before their couplings are written out.

    Parameters
    ----------
    members : int64 array, shape (u,)
        The chosen auxiliaries, sorted by cluster and then by position.
    cluster : int64 array, shape (u,)
        The cluster of each.
    touched_cluster, touched : int64 arrays, shape (t,)
        Cluster and variable of every touched pair, sorted.
    a, d : int64 arrays, shape (c,)
        Auxiliaries and touched variables of each cluster.
    link, link_entry : int64 arrays, shape (l,)
        Pairs of the structure between a chosen auxiliary and a touched variable, and the touched entry of each.
    """

    members: Positions
    cluster: Positions
    touched_cluster: Positions
    touched: Positions
    a: Positions
    d: Positions
    link: Positions
    link_entry: Positions

    def __len__(self) -> int:
        return len(self.a)

    def auxiliaries_of(self, cluster: int) -> Positions:
        """Positions of one cluster's auxiliaries."""
        start, stop = np.searchsorted(self.cluster, [cluster, cluster + 1])
        return self.members[start:stop]

    def touched_by(self, cluster: int) -> Positions:
        """Positions of the variables that one cluster touches."""
        start, stop = np.searchsorted(self.touched_cluster, [cluster, cluster + 1])
        return self.touched[start:stop]


def components(structure: Structure, chosen: Positions) -> Components:
    """Connected components of the couplings among the chosen auxiliaries; every other variable counts as touched."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    n = len(structure.is_auxiliary)
    index = np.full(n, -1)
    index[chosen] = np.arange(len(chosen))
    ends = structure.ends
    inside = index[ends] >= 0
    both = inside.all(axis=1)
    if both.any():
        first, second = index[ends[both]].T
        graph = coo_array((np.ones(len(first), np.int8), (first, second)), shape=(len(chosen), len(chosen)))
        count, labels = connected_components(graph, directed=False)
        cluster = labels.astype(np.int64)
    else:
        count, cluster = len(chosen), np.arange(len(chosen), dtype=np.int64)
    order = np.lexsort((chosen, cluster))
    link = np.flatnonzero(inside.any(axis=1) & ~both)
    side = inside[link, 0]
    own = np.where(side, ends[link, 0], ends[link, 1])
    other = np.where(side, ends[link, 1], ends[link, 0])
    keys, link_entry = sorted_apart(cluster[index[own]] * n + other)
    touched_cluster, touched = keys // n, keys % n
    return Components(
        chosen[order],
        cluster[order],
        touched_cluster,
        touched,
        np.bincount(cluster, minlength=count).astype(np.int64),
        np.bincount(touched_cluster, minlength=count).astype(np.int64),
        link,
        link_entry,
    )


def sorted_apart(keys: Positions) -> tuple[Positions, Positions]:
    """Distinct keys in ascending order, and the place of each key among them."""
    order = np.argsort(keys, kind="stable")
    ordered = keys[order]
    fresh = np.ones(len(keys), bool)
    fresh[1:] = ordered[1:] != ordered[:-1]
    place = np.empty(len(keys), np.int64)
    place[order] = np.cumsum(fresh) - 1
    return ordered[fresh], place


def batches(structure: Structure, found: Components, chosen: NDArray[np.bool_]) -> Iterator[Batch]:
    """Write out the couplings of the chosen clusters, one batch for each (a, d).

    Parameters
    ----------
    structure : Structure
    found : Components
    chosen : bool array, shape (c,)
        Which clusters; batches too large for dense arrays are cut into several.
    """
    n, count = len(structure.is_auxiliary), len(found)
    cluster_of = np.full(n, -1)
    slot_of = np.full(n, -1)
    starts = np.concatenate([[0], np.cumsum(found.a)])
    cluster_of[found.members] = found.cluster
    slot_of[found.members] = np.arange(len(found.members)) - starts[found.cluster]
    touched_starts = np.concatenate([[0], np.cumsum(found.d)])
    linked = structure.ends[found.link]
    link_cluster = found.touched_cluster[found.link_entry]
    own = np.where(cluster_of[linked[:, 0]] >= 0, linked[:, 0], linked[:, 1])
    link_touched = found.link_entry - touched_starts[link_cluster]
    link_weight = structure.weights[found.link]
    both = (cluster_of[structure.ends] >= 0).all(axis=1)
    inner, inner_weight = structure.ends[both], structure.weights[both]
    inner_cluster = cluster_of[inner[:, 0]] if len(inner) else np.zeros(0, np.int64)

    limit = int(found.d.max(initial=0)) + 1
    shape_key = np.where(chosen, found.a * limit + found.d, -1)
    kind = structure.field.dtype
    for key in np.unique(shape_key[chosen]):
        a, d = int(key) // limit, int(key) % limit
        group = np.flatnonzero(shape_key == key)
        step = max(1, DENSE // max(1, a * (a + d + 1)))
        for start in range(0, len(group), step):
            part = group[start : start + step]
            index = np.full(count, -1)
            index[part] = np.arange(len(part))
            auxiliaries = found.members[starts[part][:, None] + np.arange(a)]
            touched = found.touched[touched_starts[part][:, None] + np.arange(d)]
            coupling = np.zeros((len(part), a, d), kind)
            held = index[link_cluster] >= 0
            coupling[index[link_cluster[held]], slot_of[own[held]], link_touched[held]] = link_weight[held]
            between = np.zeros((len(part), a, a), kind)
            held = index[inner_cluster] >= 0
            low, high = np.sort(slot_of[inner[held]], axis=1).T
            between[index[inner_cluster[held]], low, high] = inner_weight[held]
            yield Batch(auxiliaries, touched, structure.field[auxiliaries], coupling, between)


def shapes(batch: Batch) -> tuple[Batch, Integers, Positions]:
    """One cluster for each shape.

    Returns
    -------
    distinct : Batch
        Representatives, with couplings divided by their greatest common divisor.
    factors : integer array, shape (B,)
        What each cluster's couplings are a multiple by.
    shape : int64 array, shape (B,)
        Index into `distinct`.
    """
    rows = batch.rows()
    factors = np.gcd.reduce(rows, axis=1) if rows.shape[1] else np.ones(len(batch), rows.dtype)
    factors = np.maximum(np.abs(factors), 1)
    rows = rows // factors[:, None]
    first, shape = _alike(rows)
    distinct = batch.taken(first).divided(factors[first])
    return distinct, factors, shape


def _alike(rows: Integers) -> tuple[Positions, Positions]:
    """First row of each kind, and the kind of each row."""
    if rows.dtype != object:
        # Equal rows have equal sums; that unequal ones differ is looked at, not assumed.
        mix = np.random.default_rng(1).integers(1, 2**63, rows.shape[1], np.uint64) | np.uint64(1)
        sums = (rows.astype(np.uint64) * mix).sum(axis=1, dtype=np.uint64).view(np.int64)
        keys, kind = sorted_apart(sums)
        first = np.empty(len(keys), np.int64)
        first[kind[::-1]] = np.arange(len(rows))[::-1]
        if (rows == rows[first[kind]]).all():
            return first, kind
    seen: dict[tuple[int, ...], int] = {}
    kind = np.array([seen.setdefault(tuple(row), len(seen)) for row in rows.tolist()], np.int64)
    first = np.zeros(len(seen), np.int64)
    first[kind[::-1]] = np.arange(len(kind))[::-1]
    return first, kind
