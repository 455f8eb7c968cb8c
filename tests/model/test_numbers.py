"""Coefficients are exact rationals, and a hostile one costs nothing."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hubokit.errors import InputError
from hubokit.model.numbers import absolute_sum, as_fraction, as_weights, common_resolution, times


@pytest.mark.parametrize(
    ("given_value", "expected"),
    [
        (3, Fraction(3)),
        ("-3/2", Fraction(-3, 2)),
        ("0.1", Fraction(1, 10)),
        (0.1, Fraction(1, 10)),
        (1e22, Fraction(10**22)),
        (5e-324, Fraction(5, 10**324)),
        (np.float32(0.1), Fraction(1, 10)),
        (np.int8(-7), Fraction(-7)),
        (Decimal("2.50"), Fraction(5, 2)),
        (" 1e3 ", Fraction(1000)),
    ],
)
def test_a_coefficient_is_read_exactly(given_value, expected):
    assert as_fraction(given_value) == expected


@pytest.mark.parametrize(
    "bad",
    ["nan", "inf", "1e999999999", "9" * 10_000_000, "1/0", "", "1_000", "0x10", None, True, float("nan"), 1j, "1e"],
)
def test_what_is_no_finite_number_is_one_line_of_error(bad):
    with pytest.raises(InputError, match=r"^here: ") as caught:
        as_fraction(bad, "here")
    assert len(str(caught.value)) < 200


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_float_means_its_shortest_decimal(value):
    assert as_fraction(value) == Fraction(repr(value))


@given(st.lists(st.fractions(max_denominator=1000), max_size=8))
def test_the_resolution_is_the_largest_common_unit(values):
    unit = common_resolution(values)
    multiples = [value / unit for value in values if value]
    assert all(m.denominator == 1 for m in multiples)
    if multiples:
        assert np.gcd.reduce(np.array([int(m) for m in multiples], dtype=object)) in (1, -1)
    else:
        assert unit == 1


@given(st.lists(st.integers(-(2**63), 2**63 - 1), max_size=20))
def test_absolute_sums_never_wrap(values):
    assert absolute_sum(np.array(values, np.int64)) == sum(abs(v) for v in values)


@given(st.lists(st.integers(-(2**62), 2**62), min_size=1, max_size=5), st.integers(-(2**40), 2**40))
def test_scaled_weights_never_wrap(values, factor):
    assert times(as_weights(values), factor).tolist() == [v * factor for v in values]


def test_unsigned_and_mixed_weights_keep_their_values():
    assert as_weights(np.array([2**64 - 1], np.uint64)).tolist() == [2**64 - 1]
    assert as_weights([1, 10**30]).tolist() == [1, 10**30]
    with pytest.raises(InputError, match="not a whole number"):
        as_weights(np.array([1, 0.5], dtype=object))


@given(st.lists(st.integers(-(2**65), 2**65), min_size=1, max_size=5))
def test_whole_numbers_of_a_list_are_never_rounded(values):
    assert as_weights(values).tolist() == values


def test_denominators_without_end_are_refused():
    primes = [p for p in range(2, 60_000) if all(p % q for q in range(2, int(p**0.5) + 1))]
    with pytest.raises(InputError, match="65536 bits"):
        common_resolution(Fraction(1, p) for p in primes)
