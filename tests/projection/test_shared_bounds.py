"""Tightened penalties: shared bounds prove what interval bounds cannot, and never more than is true."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection import buckets, stages
from hubokit.projection.buckets import lower_bound
from hubokit.projection.candidates import fitted, known_samples
from hubokit.projection.project import project
from hubokit.projection.shared_bounds import PARTS, better_shares, flip_problem, slacks
from hubokit.projection.slack_figures import shared_bound_slacks
from hubokit.projection.structure import structure_of


def methods(projection):
    return {summary.method for summary in projection.clusters}


@pytest.mark.parametrize(
    ("size", "scale", "method"),
    [
        (8, "1", "guards"),
        (8, "0.62", "shared bounds"),
        (8, "0.5", "shared bounds"),
        (12, "0.62", "shared bounds"),
        (12, "0.35", "single states"),
        (20, "0.62", "shared bounds"),
    ],
)
def test_tightened_penalties_of_the_low_autocorrelation_model_are_proved(
    monkeypatch, make_low_autocorrelation, size, scale, method
):
    monkeypatch.setattr(stages, "SMALL", -1)
    monkeypatch.setattr(stages, "CHEAP", 0)
    model, auxiliaries, source = make_low_autocorrelation(size, Fraction(scale))
    P = project(model, auxiliaries)
    assert methods(P) == {method}
    assert P.polynomial == source
    assert P.uniform_multiplicity == 1
    assert P.gap_everywhere.value > 0
    assert P.gap_everywhere.exact == (method == "single states")


def test_penalties_tightened_too_far_change_the_polynomial(make_low_autocorrelation):
    model, auxiliaries, source = make_low_autocorrelation(8, Fraction("0.25"))
    P = project(model, auxiliaries)
    assert P.polynomial is not None
    assert P.polynomial != source


def random_pairs(seed, domain):
    """Pairs of four originals, coupled to each other at random, with penalties on both sides of what is needed."""
    rng = np.random.default_rng(seed)
    names = ["a", "b", "c", "d"]
    pairs = {f"y{i}{k}": (names[i], names[k]) for i in range(4) for k in range(i + 1, 4) if rng.random() < 0.8}
    terms = {}
    for y, z in zip(list(pairs), list(pairs)[1:], strict=False):
        terms[y, z] = int(rng.integers(-4, 5))
        terms[(y, names[rng.integers(4)])] = int(rng.integers(-2, 3))
    penalty = int(rng.integers(4, 11))
    for y, (first, second) in pairs.items():
        for key, c in (((first, second), 1), ((first, y), -2), ((second, y), -2), ((y,), 3)):
            terms[key] = terms.get(key, 0) + c * penalty
    labels = [*names, *pairs]
    return Hamiltonian(terms, domain="boolean", labels=labels).in_domain(domain), tuple(pairs)


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_what_shared_bounds_prove_of_random_pair_models_is_true(monkeypatch, enumerated, domain):
    monkeypatch.setattr(stages, "SMALL", -1)
    monkeypatch.setattr(stages, "decide", lambda structure, candidates: [])
    monkeypatch.setattr(stages, "_by_chains", lambda findings, found, chosen, least_margin=1: chosen)
    outcomes = []
    for seed in range(60):
        model, auxiliaries = random_pairs(seed, domain)
        P = project(model, auxiliaries, table_bits=0)
        if P.polynomial is None:
            outcomes.append("open")
            continue
        outcomes.append("proved")
        truth = enumerated(model, auxiliaries)
        assert [P.polynomial.energy(x) for x in truth.states] == truth.minimum
        assert P.gap_everywhere.value <= truth.least_gap()
        if methods(P) == {"shared bounds"}:
            assert set(truth.multiplicity) == {1}
    assert outcomes.count("proved") >= 10
    assert outcomes.count("open") >= 5


def test_unequal_shares_raise_the_least_slack(make_low_autocorrelation):
    model, auxiliaries, _ = make_low_autocorrelation(8, Fraction("0.55"))
    structure = structure_of(model, auxiliaries)
    problem = flip_problem(structure, structure.auxiliaries)
    candidate = fitted(problem, known_samples(structure, [], problem.known))
    equal = slacks(problem, candidate)
    shares, better = better_shares(problem, candidate)
    assert equal.least <= 0 < better.least
    assert (shares + shares.transpose(1, 0, 3, 2) == PARTS).all()


def test_slacks_are_never_above_the_true_excess_of_single_flips(make_low_autocorrelation):
    model, auxiliaries, _ = make_low_autocorrelation(6, Fraction("0.7"))
    figures = shared_bound_slacks(model, auxiliaries)
    bits = (np.arange(64)[:, None] >> np.arange(5, -1, -1)) & 1
    right = np.array([[row[int(y[1:3])] * row[int(y[4:6])] for y in auxiliaries] for row in bits])
    best = model.integer_energies(np.hstack([bits, right]))
    for k, y in enumerate(auxiliaries):
        wrong = right.copy()
        wrong[:, k] ^= 1
        excess = (model.integer_energies(np.hstack([bits, wrong])) - best) * model.resolution
        columns = [int(label[1:]) for label in figures[y].guards]
        for row, seen in zip(bits, excess, strict=True):
            setting = int("".join(str(row[c]) for c in columns), 2)
            assert figures[y].function[setting] == row[columns].prod()
            assert figures[y].slacks[setting] <= seen


def test_a_slack_says_how_far_a_penalty_may_shrink():
    def model(penalty):
        terms = {("a", "b"): penalty, ("a", "y"): -2 * penalty, ("b", "y"): -2 * penalty, ("y",): 3 * penalty}
        return Hamiltonian(terms | {("y", "c"): 3, ("c", "d"): 1}, domain="boolean")

    figures = shared_bound_slacks(model(10), ["y"])["y"]
    assert figures.least == 7
    assert project(model(10 - 6), ["y"]).uniform_multiplicity == 1
    assert project(model(10 - 7), ["y"]).uniform_multiplicity is None


def test_a_lower_bound_of_split_buckets_is_below_the_minimum(monkeypatch):
    rng = np.random.default_rng(5)
    below = 0
    for _ in range(20):
        functions = [
            (tuple(sorted(rng.choice(7, 2, replace=False).tolist())), rng.integers(-9, 10, (2, 2))) for _ in range(12)
        ]
        monkeypatch.setattr(buckets, "WIDEST", 14)
        exact = lower_bound(functions, (0,))
        monkeypatch.setattr(buckets, "WIDEST", 2)
        split = lower_bound(functions, (0,))
        table = np.zeros((2,) * 7, np.int64)
        for scope, values in functions:
            table += values.reshape([2 if v in scope else 1 for v in range(7)])
        assert exact.exact
        assert exact.values.tolist() == table.reshape(2, -1).min(axis=1).tolist()
        for bit in (0, 1):
            bits = exact.assignment([bit])
            assert table[tuple(bits.get(v, 0) for v in range(7))] == exact.values[bit]
        assert (split.values <= exact.values).all()
        below += int((split.values < exact.values).any())
    assert below
