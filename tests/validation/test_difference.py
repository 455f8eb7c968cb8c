"""Two polynomials that differ: a state that shows it, the largest terms, a bound."""

from fractions import Fraction

import numpy as np
from hypothesis import assume, given
from hypothesis import strategies as st

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.validation.difference import largest_terms, least_bound, nonzero_state


@st.composite
def polynomials(draw, smallest=1, largest=6, most=5):
    n = draw(st.integers(smallest, largest))
    labels = [f"v{i}" for i in range(n)]
    keys = st.lists(st.sampled_from(labels), max_size=min(n, most), unique=True).map(tuple)
    terms = draw(st.dictionaries(keys, st.integers(-3, 3).map(Fraction), max_size=8))
    return Hamiltonian(terms, draw(st.sampled_from(["spin", "boolean"])), labels=labels)


@given(polynomials())
def test_a_polynomial_that_is_not_nought_does_not_vanish_at_the_state_found(polynomial):
    assume(polynomial != 0)
    assert polynomial.energy(nonzero_state(polynomial)) != 0


@given(polynomials(16, 16, most=16), st.integers(1, 3))
def test_products_too_wide_to_list_are_restricted_one_variable_after_the_other(polynomial, weight):
    spin = Hamiltonian(dict(polynomial.terms()), "spin", labels=polynomial.labels)
    wide = spin + Hamiltonian({tuple(spin.labels): weight}, "spin")
    assume(wide != 0)
    assert wide.energy(nonzero_state(wide)) != 0


@given(polynomials())
def test_the_bound_lies_below_every_energy(polynomial):
    grid = np.indices((2,) * polynomial.size).reshape(polynomial.size, -1).T
    states = 1 - 2 * grid if polynomial.domain == "spin" else grid
    assert min(polynomial.energy(state) for state in states) >= least_bound(polynomial)


def test_the_largest_terms_come_first_and_the_others_are_counted():
    terms = {(f"v{i}",): i + 1 for i in range(12)}
    shown = largest_terms(Hamiltonian({**terms, (): -1}, "boolean"), count=4)
    assert shown == ("-1", "+12 v11", "+11 v10", "+10 v9", "... (9 more)")
