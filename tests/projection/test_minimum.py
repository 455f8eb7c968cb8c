"""The minimum at given states, by every engine, against plain enumeration."""

from __future__ import annotations

import numpy as np
import pytest

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection import elimination, minimum
from hubokit.projection.elimination import elimination_order, minimise
from hubokit.projection.minimum import Minimiser
from hubokit.projection.search import next_level, search
from hubokit.projection.structure import structure_of

ENGINES = {
    "enumeration": {"ENUMERATED": 20},
    "elimination": {"ENUMERATED": 0, "ELIMINATED": 20},
    "search": {"ENUMERATED": 0, "ELIMINATED": -1, "WIDTH_LIMIT": 0},
}


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("engine", ENGINES)
def test_every_engine_finds_the_first_best_auxiliaries_and_their_number(
    monkeypatch, enumerated, make_model, domain, engine
):
    for name, value in ENGINES[engine].items():
        monkeypatch.setattr(minimum, name, value)
    for seed in range(24):
        model, auxiliaries = make_model(seed, domain, seed % 4, 1 + seed % 6, (1, 2, 30)[seed % 3], 0.3 + 0.03 * seed)
        truth = enumerated(model, auxiliaries)
        structure = structure_of(model, auxiliaries)
        states = np.array(truth.states, np.int8).reshape(len(truth.states), len(structure.originals))
        found = Minimiser(structure).minima(states)
        energies = [model.energy(row) for row in found.states]
        assert energies == truth.minimum
        assert [tuple(row) for row in found.states[:, structure.auxiliaries].tolist()] == truth.first
        assert found.multiplicity.tolist() == truth.multiplicity
        for gap, true in zip(found.gap.tolist(), truth.gap, strict=True):
            if found.exact:
                assert (None if gap < 0 else gap * model.resolution) == true
            elif true is not None:
                assert 0 < gap * model.resolution <= true


def test_elimination_and_search_agree_on_wide_clusters_with_many_ties():
    rng = np.random.default_rng(3)
    for _ in range(12):
        pair = np.triu(rng.integers(-2, 3, (11, 11)), 1)
        fields = rng.integers(-3, 4, (7, 11))
        eliminated = minimise(fields, pair, 1000)
        searched = search(fields, pair + pair.T)
        assert eliminated.energy.tolist() == searched.energy.tolist()
        assert eliminated.multiplicity.tolist() == searched.multiplicity.tolist()
        assert eliminated.bits.tolist() == searched.bits.tolist()
        assert eliminated.gap.tolist() == next_level(fields, pair + pair.T, searched).tolist()


def test_a_long_chain_of_auxiliaries_keeps_every_bit_in_lift_order():
    length = 150
    labels = [f"a{i:03}" for i in range(length)]
    ring = {(labels[i], labels[i + 1]): -1 for i in range(length - 1)}
    F = Hamiltonian(ring | {("x", labels[0]): -1}, domain="spin", labels=["x", *labels])
    found = Minimiser(structure_of(F, labels)).minima(np.array([[1], [-1]], np.int8))
    assert (found.states == np.array([[1], [-1]])).all()
    assert found.multiplicity.tolist() == [1, 1]
    free = Hamiltonian(ring, domain="spin", labels=["x", *labels])
    found = Minimiser(structure_of(free, labels)).minima(np.array([[-1]], np.int8))
    assert found.multiplicity.tolist() == [2]
    assert (found.states[:, 1:] == 1).all()


def test_counts_beyond_int64_are_exact():
    labels = [f"a{i}" for i in range(100)]
    free = Hamiltonian({}, domain="spin", labels=["x", *labels])
    assert Minimiser(structure_of(free, labels)).minima(np.array([[1]], np.int8)).multiplicity.tolist() == [2**100]


def test_a_wide_cluster_is_refused_with_its_width(monkeypatch):
    rng = np.random.default_rng(1)
    pair = np.triu(rng.integers(-2, 3, (12, 12)), 1)
    monkeypatch.setattr(elimination, "WIDTH_LIMIT", 3)
    with pytest.raises(LimitError, match="at most 3 are allowed"):
        minimise(np.zeros((1, 12), np.int64), pair, 1000)
    with pytest.raises(LimitError, match="more than 1 branches"):
        search(rng.integers(-1, 2, (50, 12)), pair + pair.T, limit=1)


def test_a_tree_has_width_one():
    edges = np.zeros((6, 6), np.int64)
    edges[0, 1] = edges[0, 2] = edges[1, 3] = edges[1, 4] = edges[2, 5] = 1
    assert elimination_order(edges)[1] == 1
