"""Projection against plain enumeration of every state, on random models and every path through it."""

from __future__ import annotations

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection import stages as module
from hubokit.projection.project import project

SIZES = [(0, 1), (1, 1), (3, 1), (4, 2), (5, 3), (4, 5), (2, 4), (6, 2)]
PATHS = {
    "tables": {"SMALL": 12},
    "guards first": {"SMALL": -1},
}


def assert_projection_is_true(model, auxiliaries, enumerated, table_bits=20):
    """Everything a projection claims agrees with enumeration; returns it."""
    truth = enumerated(model, auxiliaries)
    P = project(model, auxiliaries, table_bits=table_bits)
    states = np.array(truth.states, np.int8).reshape(len(truth.states), len(P.originals))
    energies, best, multiplicities = P.minimum(states)
    assert [model.constant + int(k) * model.resolution for k in energies] == truth.minimum
    assert [tuple(row) for row in best.tolist()] == truth.first
    assert multiplicities.tolist() == truth.multiplicity
    if P.polynomial is not None:
        assert P.polynomial.labels == P.originals
        assert [P.polynomial.energy(x) for x in states] == truth.minimum
        assert not P.undecided
    else:
        assert P.undecided
    if P.uniform_multiplicity is not None:
        assert set(truth.multiplicity) == {P.uniform_multiplicity}
    witness = P.multiplicity_witness()
    if witness is not None:
        assert truth.multiplicity[truth.states.index(tuple(witness[0].tolist()))] > 1
    assert_bound_is_true(P.gap_everywhere, truth.least_gap())
    chosen = states[:: max(1, len(states) // 3)]
    some = [truth.gap[i] for i in range(0, len(states), max(1, len(states) // 3))]
    assert_bound_is_true(P.gap_at(chosen), min((gap for gap in some if gap is not None), default=None))
    return P


def assert_bound_is_true(bound, gap):
    if bound is None:
        return
    if bound.exact:
        assert bound.value == gap
    elif gap is not None:
        assert bound.value is not None
        assert bound.value <= gap


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("path", PATHS)
@pytest.mark.parametrize("size", SIZES)
def test_a_projection_is_the_minimum_over_the_auxiliaries(monkeypatch, enumerated, make_model, domain, path, size):
    for name, value in PATHS[path].items():
        monkeypatch.setattr(module, name, value)
    for seed in range(6):
        for largest in (1, 3, 40):
            model, auxiliaries = make_model(seed, domain, *size, largest, density=0.4 + 0.1 * seed)
            P = assert_projection_is_true(model, auxiliaries, enumerated)
            assert P.polynomial is not None


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_a_projection_that_may_not_tabulate_is_still_true_wherever_it_claims_anything(
    monkeypatch, enumerated, make_model, domain
):
    monkeypatch.setattr(module, "SMALL", -1)
    outcomes = set()
    for seed in range(60):
        model, auxiliaries = make_model(seed, domain, 4, 3, 2 + seed % 20, density=0.3 + 0.01 * seed)
        P = assert_projection_is_true(model, auxiliaries, enumerated, table_bits=0)
        outcomes |= {summary.method for summary in P.clusters} | {"open" for _ in P.undecided}
    assert {"guards", "counting"} <= outcomes


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_products_of_products_are_projected_exactly_or_left_open(monkeypatch, enumerated, make_chain, domain):
    monkeypatch.setattr(module, "SMALL", -1)
    eliminated = 0
    for seed in range(100):
        model, auxiliaries = make_chain(seed, domain)
        P = assert_projection_is_true(model, auxiliaries, enumerated, table_bits=0 if seed % 2 else 20)
        eliminated += any(getattr(step, "at_once", False) for step in P.findings.steps)
    assert eliminated >= 5


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_weights_beyond_int64_give_the_same_answers(monkeypatch, enumerated, make_model, domain):
    for small in (12, -1):
        monkeypatch.setattr(module, "SMALL", small)
        for seed in range(8):
            model, auxiliaries = make_model(seed, domain, 4, 3, 9)
            huge = model * 2**70 + Hamiltonian({("v0",): 1, ("v1", "v2"): 3}, domain, labels=model.labels)
            assert_projection_is_true(huge, auxiliaries, enumerated)


def test_auxiliaries_without_terms_count_twice_each():
    F = Hamiltonian({("x",): 1}, domain="spin", labels=["x", "a", "b"])
    P = project(F, ["a", "b"])
    assert P.uniform_multiplicity == 4
    assert P.polynomial == Hamiltonian({("x",): 1}, domain="spin")
    assert P.gap_everywhere.value is None


def test_a_tie_shows_its_witness():
    F = Hamiltonian({("x", "a"): -1, ("y", "a"): -1, ("a",): 1}, domain="boolean")
    P = project(F, ["a"])
    assert P.uniform_multiplicity is None
    [x] = P.multiplicity_witness().tolist()
    assert sum(x) == 1


def test_a_model_that_is_not_quadratic_or_auxiliaries_that_are_not_there_are_refused():
    cubic = Hamiltonian({("x", "y", "z"): 1}, domain="spin")
    with pytest.raises(InputError, match="locality 3"):
        project(cubic, ["z"])
    pair = Hamiltonian({("x", "y"): 1}, domain="spin")
    with pytest.raises(InputError, match="no variable"):
        project(pair, ["z"])
    with pytest.raises(InputError, match="twice"):
        project(pair, ["x", "x"])


def pair_chain(length: int, penalty: int) -> tuple[Hamiltonian, list[str]]:
    """x0 x1 ... by a chain y1 = x0 x1, y2 = y1 x2, ...; the last auxiliary gets weight -1."""
    terms: dict[tuple[str, ...], int] = {}
    before = "x0"
    names = []
    for k in range(1, length):
        x, y = f"x{k}", f"y{k}"
        names.append(y)
        for key, c in (((before, x), 1), ((before, y), -2), ((x, y), -2), ((y,), 3)):
            terms[key] = terms.get(key, 0) + c * penalty
        before = y
    terms[(before,)] = terms.get((before,), 0) - 1
    return Hamiltonian(terms, domain="boolean"), names


def test_a_chain_of_pairs_is_decided_link_by_link(monkeypatch):
    monkeypatch.setattr(module, "SMALL", -1)
    F, auxiliaries = pair_chain(30, 5)
    P = project(F, auxiliaries, table_bits=4)
    assert P.polynomial == Hamiltonian({tuple(f"x{k}" for k in range(30)): -1}, domain="boolean")
    assert P.uniform_multiplicity == 1


def common_part(count, extra):
    """Negative products that share x, each with its own auxiliary z behind y; y is tied where `extra` is 0."""
    terms = {("y",): -extra, ("x", "y"): count + extra}
    for k in range(count):
        z, first, second = f"z{k}", f"a{k}", f"b{k}"
        for key, c in (((z,), 5), ((z, "y"), -2), ((z, first), -2), ((z, second), -2)):
            terms[key] = terms.get(key, 0) + c
    return Hamiltonian(terms, domain="boolean"), ["y", *(f"z{k}" for k in range(count))]


def test_terms_with_a_common_part_are_proved_and_ties_only_cost_the_multiplicity():
    tied, auxiliaries = common_part(15, 0)
    P = project(tied, auxiliaries)
    assert P.polynomial is not None
    assert P.uniform_multiplicity is None
    assert {summary.method for summary in P.clusters} == {"guards with ties"}
    rng = np.random.default_rng(4)
    states = np.vstack([rng.integers(0, 2, (40, len(P.originals))), np.ones((1, len(P.originals)), int)])
    energies, _, multiplicities = P.minimum(states)
    assert [P.polynomial.energy(row) for row in states] == [int(k) for k in energies]
    assert set(multiplicities) > {1}
    assert not P.gap_everywhere.exact


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_chains_with_ties_give_the_right_polynomial(monkeypatch, make_chain, enumerated, domain):
    monkeypatch.setattr(module, "SMALL", -1)
    monkeypatch.setattr(module, "decide", lambda structure, candidates: [])
    monkeypatch.setattr(module, "_by_shared_bounds", lambda *given: False)
    tied = 0
    for seed in range(100):
        model, auxiliaries = make_chain(seed, domain)
        P = assert_projection_is_true(model, auxiliaries, enumerated, table_bits=0)
        tied += any(summary.method == "guards with ties" for summary in P.clusters)
    assert tied >= 2
