"""Clusters: who is coupled to whom, and which are alike."""

from __future__ import annotations

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.clusters import Batch, batches, components, shapes
from hubokit.projection.structure import structure_of


def test_auxiliaries_coupled_through_others_share_a_cluster_and_originals_do_not_join_them():
    F = Hamiltonian(
        {("a", "b"): 1, ("b", "x"): 2, ("c", "x"): 3, ("a", "y"): 4, ("d",): 5},
        domain="spin",
        labels=["x", "a", "y", "b", "c", "d"],
    )
    found = components(structure_of(F, ["a", "b", "c", "d"]), np.array([1, 3, 4, 5]))
    clusters = [(found.auxiliaries_of(k).tolist(), found.touched_by(k).tolist()) for k in range(len(found))]
    assert sorted(clusters) == [([1, 3], [0, 2]), ([4], [0]), ([5], [])]


def test_batches_hold_every_coupling_of_their_clusters():
    rng = np.random.default_rng(6)
    for _ in range(20):
        count = 12
        pairs = np.argwhere(np.triu(rng.random((count, count)) < 0.15, 1))
        labels = [f"v{i}" for i in range(count)]
        F = Hamiltonian.from_arrays(
            [np.arange(count)[:, None], pairs],
            [rng.integers(1, 9, count), rng.integers(1, 9, len(pairs))],
            domain="boolean",
            labels=labels,
        )
        auxiliaries = sorted(rng.permutation(count)[:6].tolist())
        structure = structure_of(F, [labels[i] for i in auxiliaries])
        found = components(structure, structure.auxiliaries)
        rebuilt = {}
        for batch in batches(structure, found, np.ones(len(found), bool)):
            for b in range(len(batch)):
                own, touched = batch.auxiliaries[b].tolist(), batch.touched[b].tolist()
                rebuilt |= {(i,): int(batch.field[b, k]) for k, i in enumerate(own)}
                for k, i in enumerate(own):
                    rebuilt |= {tuple(sorted((i, j))): int(batch.coupling[b, k, t]) for t, j in enumerate(touched)}
                    rebuilt |= {(i, own[m]): int(batch.between[b, k, m]) for m in range(k + 1, len(own))}
        expected = {
            tuple(row): int(weight)
            for block in F.blocks
            for row, weight in zip(block.members.tolist(), block.weights.tolist(), strict=True)
            if set(row) & set(auxiliaries)
        }
        assert {key: weight for key, weight in rebuilt.items() if weight} == expected


def test_clusters_equal_up_to_a_factor_have_one_shape():
    rng = np.random.default_rng(8)
    kinds = rng.integers(-3, 4, (4, 3))
    which, factor = rng.integers(0, 4, 50), rng.integers(1, 6, 50)
    rows = kinds[which] * factor[:, None]
    for kind in (np.int64, object):
        batch = Batch(
            np.arange(50)[:, None],
            np.zeros((50, 2), np.int64),
            rows[:, :1].astype(kind),
            rows[:, None, 1:].astype(kind),
            np.zeros((50, 1, 1), kind),
        )
        distinct, factors, shape = shapes(batch)
        assert (distinct.rows()[shape] * factors[:, None] == batch.rows()).all()
        assert len(distinct) == len({tuple(row // max(1, np.gcd.reduce(row))) for row in kinds})
