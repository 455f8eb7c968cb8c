"""Any function of four spins takes one auxiliary spin: every sign, order and coincidence of sizes, enumerated."""

from __future__ import annotations

from itertools import product
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest

from hubokit.reduction.gadgets.enumeration import all_values
from hubokit.reduction.gadgets.four_variables import PAIRS, UNIT, Forms, four_variable_forms

SMALL = np.array(list(product(range(-2, 3), repeat=5)))


def with_leading_one() -> npt.NDArray[np.int64]:
    """The sixteen states of s1..s4 behind s0 = 1."""
    return np.hstack([np.ones((16, 1), np.int64), all_values(4, "spin")])


def wanted(functions: npt.NDArray[Any]) -> npt.NDArray[Any]:
    """The functions in all sixteen states, in sixteenths."""
    states = with_leading_one()
    return UNIT * functions @ np.array([np.prod(np.delete(states, i, axis=1), axis=1) for i in range(5)])


def seen(forms: Forms) -> tuple[npt.NDArray[Any], npt.NDArray[Any]]:
    """Minimum over the auxiliary, and |L|, both in sixteenths, shape (m, 16)."""
    states = with_leading_one()
    size = np.abs(forms.linear @ states.T)
    rest = forms.pairs @ np.array([states[:, i] * states[:, j] for i, j in PAIRS]) + forms.constant[:, None]
    return rest - size, size


@pytest.mark.parametrize("margin", [0, 2, 4, 6, 50])
def test_the_minimum_over_the_auxiliary_is_the_function(margin: int) -> None:
    minima, _ = seen(four_variable_forms(SMALL, margin))
    assert np.array_equal(minima, wanted(SMALL))


@pytest.mark.parametrize("margin", [2, 4])
def test_every_whole_function_has_a_form_without_ties(margin: int) -> None:
    forms = four_variable_forms(SMALL, margin)
    _, size = seen(forms)
    assert (forms.margin >= margin).all()
    assert (size >= UNIT * margin).all()


def test_a_margin_beyond_reach_is_told_and_the_one_reached_is_true() -> None:
    forms = four_variable_forms(SMALL, 50)
    _, size = seen(forms)
    assert (forms.margin < 50).any()
    assert np.array_equal(size.min(axis=1), UNIT * forms.margin)


def test_a_single_product_reaches_any_margin_with_the_published_coefficients() -> None:
    for position in range(5):
        function = np.eye(5, dtype=np.int64)[[position]] * 4
        sizes = [int(np.abs(four_variable_forms(function, margin).linear).max()) // UNIT for margin in (0, 2, 4, 400)]
        assert sizes == [8, 10, 12, 408]


def test_weights_beyond_int64_stay_exact() -> None:
    big = np.array([[10**30, -(10**29), 3, 7, -(10**28)]], dtype=object)
    forms = four_variable_forms(big, 4)
    minima, size = seen(forms)
    assert (minima == wanted(big)).all()
    assert (size >= UNIT * 4).all()
