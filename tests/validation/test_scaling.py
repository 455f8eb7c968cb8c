"""Scale and shift: the relation between two functions, from polynomials and from columns of energies."""

from fractions import Fraction

import numpy as np
from hypothesis import assume, given
from hypothesis import strategies as st

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.validation.scaling import Column, column_relation, judge_scale, polynomial_relation
from hubokit.validation.tables import comparable_columns

RATIONALS = st.fractions(-5, 5, max_denominator=6)
COLUMNS = st.lists(st.integers(-9, 9), min_size=1, max_size=6)


@st.composite
def polynomials(draw):
    keys = st.lists(st.sampled_from("abc"), max_size=3, unique=True).map(tuple)
    terms = draw(st.dictionaries(keys, RATIONALS, max_size=5))
    return Hamiltonian(terms, draw(st.sampled_from(["spin", "boolean"])), labels=list("abc"))


@given(polynomials(), RATIONALS, RATIONALS)
def test_a_scaled_and_shifted_polynomial_gives_back_its_scale_and_shift(E, scale, shift):
    found = polynomial_relation(scale * E + shift, E)
    if not len(E):
        assert (found.scale, found.shift) == (1, (scale - 1) * E.constant + shift)
    elif scale > 0:
        assert (found.scale, found.shift) == (scale, shift)
    else:
        assert found is None


@given(polynomials(), polynomials())
def test_the_relation_found_is_one(P, E):
    assume(P.domain == E.domain)
    found = polynomial_relation(P, E)
    if found is not None:
        assert found.scale * E + found.shift == P


@given(COLUMNS, RATIONALS.filter(bool), RATIONALS, st.integers(1, 10**25), st.integers(-9, 9))
def test_columns_of_energies_give_the_same_at_any_size_of_the_weights(numbers, unit, constant, factor, offset):
    E = Column(np.array(numbers), constant, abs(unit))
    P = Column(np.array([factor * k + offset for k in numbers], object), Fraction(1, 3), Fraction(1, 7))
    found = column_relation(P, E)
    scale = Fraction(1) if len(set(numbers)) == 1 else Fraction(factor, 7) / abs(unit)
    assert found.scale == scale
    assert all(P[i] == found.scale * E[i] + found.shift for i in range(len(numbers)))


@given(COLUMNS, COLUMNS, RATIONALS, RATIONALS)
def test_integers_in_one_unit_compare_as_the_fractions_do(one, two, constant, shift):
    size = min(len(one), len(two))
    P = Column(np.array(one[:size]), constant, Fraction(1, 3))
    E = Column(np.array(two[:size]), Fraction(1, 2), Fraction(2, 5))
    left, right = comparable_columns(P, E, Fraction(3, 4), shift)
    for i in range(size):
        assert (left[i] < right[i]) == (P[i] < Fraction(3, 4) * E[i] + shift)
        assert (left[i] == right[i]) == (P[i] == Fraction(3, 4) * E[i] + shift)


def test_what_is_declared_goes_before_what_is_found():
    E = Hamiltonian({("a",): 1}, "spin")
    found = polynomial_relation(2 * E + 1, E)
    assert judge_scale((Fraction(3), Fraction(0)), found).scale_from == "declared"
    assert judge_scale(None, found).scale_from == "found"
    assert judge_scale(None, None).scale_from == "default"


def test_a_huge_resolution_beside_energies_that_are_all_nought():
    P = Column(np.zeros(2, np.int64), Fraction(0), Fraction(10**30))
    left, right = comparable_columns(P, Column(np.array([0, 1]), Fraction(0), Fraction(1)), Fraction(1), Fraction(0))
    assert left.tolist() == [0, 0]
    assert right.tolist() == [0, 1]
