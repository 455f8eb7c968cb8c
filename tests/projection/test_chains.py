"""Auxiliaries that are decided only after others have been put in."""

from __future__ import annotations

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.project import project


def spin_product(strength: int, weights) -> Hamiltonian:
    """p = u v for spins with a helper h, used in one cubic term for each weight."""
    penalty = {("u",): -1, ("v",): -1, ("p",): -1, ("h",): -2, ("u", "v"): 1, ("v", "p"): 1, ("u", "p"): 1}
    penalty |= {("u", "h"): 2, ("v", "h"): 2, ("p", "h"): 2}
    terms = {key: strength * c for key, c in penalty.items()}
    terms |= {("p", f"s{i}"): int(w) for i, w in enumerate(weights)}
    return Hamiltonian(terms, domain="spin")


def test_a_product_of_spins_with_its_helper_is_proved_over_many_terms():
    weights = np.arange(1, 41) * np.resize([1, -1], 40)
    F = spin_product(2 * int(np.abs(weights).sum()), weights)
    P = project(F, ["p", "h"])
    assert {summary.method for summary in P.clusters} == {"guards"}
    assert P.uniform_multiplicity == 1
    wanted = Hamiltonian({("u", "v", f"s{i}"): int(w) for i, w in enumerate(weights)}, domain="spin")
    assert P.polynomial - P.polynomial.constant == wanted


def test_a_product_at_the_edge_of_its_strength_is_proved_up_to_ties():
    weights = np.arange(1, 41)
    P = project(spin_product(int(weights.sum()), weights), ["p", "h"])
    assert P.polynomial is not None
    assert P.uniform_multiplicity is None
    assert P.multiplicities(np.ones((1, 42), int)).tolist() == [3]


def test_too_weak_a_product_is_left_open_and_still_minimised():
    weights = np.arange(1, 41)
    F = spin_product(200, weights)
    P = project(F, ["p", "h"])
    assert P.polynomial is None
    assert P.gap_everywhere is None
    states = 1 - 2 * np.random.default_rng(0).integers(0, 2, (5, 42))
    energies, best, _ = P.minimum(states)
    columns = [F.labels.index(v) for v in P.originals]
    for row, least, found in zip(states, energies, best, strict=True):
        every = []
        for p in (1, -1):
            for h in (1, -1):
                full = np.zeros(44, int)
                full[columns] = row
                full[[F.labels.index("p"), F.labels.index("h")]] = p, h
                every.append(int(F.integer_energies(full[None])[0]))
        assert least == min(every)
        assert found.tolist() in [[p, h] for p in (1, -1) for h in (1, -1)]
