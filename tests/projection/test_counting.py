"""Gadgets on more variables than any table holds, proved by counting."""

from __future__ import annotations

import itertools
from fractions import Fraction
from math import ceil, log2

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian, booleans, spins
from hubokit.projection import stages
from hubokit.projection.clusters import Batch
from hubokit.projection.counting import count, symmetric_polynomial
from hubokit.projection.project import project
from hubokit.projection.tables import coefficients, tabulate


def methods(projection):
    return {summary.method for summary in projection.clusters}


@pytest.mark.parametrize("size", [13, 30, 60])
def test_a_negative_monomial_of_any_size_is_proved(size):
    x = [f"x{i}" for i in range(size)]
    F = Hamiltonian({("a",): 2 * size - 1} | {(v, "a"): -2 for v in x}, domain="boolean", labels=[*x, "a"])
    P = project(F, ["a"])
    assert P.polynomial == Hamiltonian({tuple(x): -1}, domain="boolean", labels=x)
    assert P.uniform_multiplicity == 1
    assert (str(P.gap_everywhere), methods(P)) == ("1", {"counting"})


@pytest.mark.parametrize("size", [14, 33, 60])
def test_the_logarithmic_form_of_a_positive_monomial_is_proved(size):
    depth = ceil(log2(size)) - 1
    x = booleans([f"x{i}" for i in range(size)])
    y = booleans([f"y{i}" for i in range(depth)])
    steps = sum((2 ** (i + 1) * y[i] for i in range(depth)), start=0 * y[0])
    T = sum(x[1:], start=x[0]) + 2 ** (depth + 1) - size - steps
    F = T * (T - 1) * Fraction(1, 2)
    P = project(F, [f"y{i}" for i in range(depth)])
    assert P.polynomial == Hamiltonian({tuple(f"x{i}" for i in range(size)): 1}, domain="boolean")
    assert P.uniform_multiplicity == 1
    assert methods(P) == {"counting"}


@pytest.mark.parametrize(("size", "shift"), [(15, 1), (31, 1), (60, 0)])
def test_a_parity_of_spins_by_a_square_is_proved_with_flipped_literals(size, shift):
    # T can be brought to 0 or 2, whichever the parity of the sum allows, and the square tells them apart.
    signs = [1 if i % 3 else -1 for i in range(size)]
    s = spins([f"s{i}" for i in range(size)])
    y = spins([f"y{i}" for i in range(ceil(log2(size + 1)) - 1)])
    steps = sum((2 ** (i + 1) * spin for i, spin in enumerate(y)), start=0 * y[0])
    T = sum((signs[i] * s[i] for i in range(size)), start=0 * s[0]) + shift - steps
    F = (2 * T - 1) * (2 * T - 1)
    P = project(F, [f"y{i}" for i in range(len(y))])
    assert methods(P) == {"counting"}
    assert P.uniform_multiplicity == 1
    [(key, weight)] = [(key, weight) for key, weight in P.polynomial.terms() if key]
    assert (len(key), abs(weight)) == (size, 4)
    states = 1 - 2 * np.random.default_rng(size).integers(0, 2, (20, size))
    energies, _, _ = P.minimum(states)
    assert [P.polynomial.energy(row) for row in states] == [F.constant + int(k) * F.resolution for k in energies]


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_counting_agrees_with_tables_on_random_symmetric_clusters(domain):
    rng = np.random.default_rng(11)
    for _ in range(40):
        a, classes = int(rng.integers(1, 4)), int(rng.integers(1, 4))
        vectors = rng.integers(-3, 4, (classes, a))
        columns = [int(c) for c in rng.integers(0, classes, 7)]
        signs = rng.choice([-1, 1], 7) if domain == "spin" else np.ones(7, int)
        coupling = (vectors[columns] * signs[:, None]).T[None]
        one = Batch(
            np.arange(7, 7 + a)[None],
            np.arange(7)[None],
            rng.integers(-5, 6, (1, a)),
            coupling,
            np.triu(rng.integers(-3, 4, (a, a)), 1)[None],
        )
        counted = count(one, domain)
        table = tabulate(one, domain)
        parts, shift = symmetric_polynomial(counted, domain)
        expected, unit = coefficients(table.minimum, domain)
        found = np.zeros(2**7, object)
        for members, weights in parts:
            for row, weight in zip(members.tolist(), weights, strict=True):
                found[sum(1 << (6 - c) for c in row)] += weight
        assert (found * 2**unit == expected[0].astype(object) * 2**shift).all()
        assert {counted.multiplicity.min(), counted.multiplicity.max()} == {
            table.multiplicity.min(),
            table.multiplicity.max(),
        }


def test_a_polynomial_with_too_many_terms_is_left_open(monkeypatch):
    # The square of a sum over fifty spins has a minimum that is full of high products.
    monkeypatch.setattr(stages, "LISTED_BITS", 0)
    s = [f"s{i}" for i in range(50)]
    F = Hamiltonian({(v, "y"): 1 for v in s} | {("y",): 1}, domain="spin", labels=[*s, "y"])
    P = project(F, ["y"])
    assert P.polynomial is None
    assert "1 auxiliary touching 50 variables" in P.undecided[0]
    energies, best, multiplicities = P.minimum(np.ones((1, 50), np.int8))
    assert (energies.tolist(), best.tolist(), multiplicities.tolist()) == ([-51], [[-1]], [1])


def test_witnesses_of_ties_are_found_among_counts():
    x = [f"x{i}" for i in range(20)]
    F = Hamiltonian({("a",): 19} | {(v, "a"): -1 for v in x}, domain="boolean", labels=[*x, "a"])
    P = project(F, ["a"])
    assert P.uniform_multiplicity is None
    [state] = P.multiplicity_witness().tolist()
    assert sum(state) == 19
    assert P.multiplicities([state, [1] * 20]).tolist() == [2, 1]


def test_equal_shapes_are_counted_once_with_their_factors():
    triples = list(itertools.combinations(range(6), 3))
    terms = {}
    for k, triple in enumerate(triples):
        weight = 1 + k % 5
        terms[(f"a{k}",)] = 5 * weight
        terms.update({(f"x{i}", f"a{k}"): -2 * weight for i in triple})
    F = Hamiltonian(terms, domain="boolean")
    P = project(F, [f"a{k}" for k in range(len(triples))])
    wanted = {tuple(f"x{i}" for i in triple): -(1 + k % 5) for k, triple in enumerate(triples)}
    assert P.polynomial == Hamiltonian(wanted, domain="boolean")
    [(settled, consistent)] = list(P.findings.settled())
    assert (len(settled.batch), len(settled.distinct), consistent) == (20, 1, True)
