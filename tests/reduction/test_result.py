"""A Reduction carries states both ways, through renamed, flipped, merged and fixed variables."""

from __future__ import annotations

from fractions import Fraction
from itertools import product

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Step, Trail
from hubokit.reduction.result import Reduction

E = Hamiltonian({("a", "b", "c"): -1, ("a",): 2}, "boolean")
F = Hamiltonian(
    {("a",): 2, ("y",): 2, ("a", "y"): -1, ("b", "y"): -1, ("c", "y"): -1}, "boolean", labels=["a", "y", "b", "c"]
)


def test_projecting_drops_the_auxiliaries_in_source_order() -> None:
    R = Reduction(E, F, ["y"])
    assert R.project([[1, 1, 0, 1], [0, 1, 1, 0]]).tolist() == [[1, 0, 1], [0, 1, 0]]


def test_costs_count_what_the_model_asks_of_a_backend() -> None:
    costs = Reduction(E, F, ["y"]).costs
    assert (costs.auxiliaries, costs.fields, costs.couplers, costs.couplers_per_variable) == (1, 2, 3, 3)
    assert (costs.coefficient_ratio, costs.field_bits, costs.coupler_bits, costs.bits) == (2, 1, 1, 1)


def test_the_bits_of_fields_and_couplers_are_counted_apart() -> None:
    model = Hamiltonian({("a",): 6, ("b",): 9, ("a", "b"): 20}, "spin")
    costs = Reduction(model, model, []).costs
    assert (costs.field_bits, costs.coupler_bits, costs.bits) == (2, 1, 2)


def test_renamed_flipped_merged_and_fixed_variables_come_back() -> None:
    source = Hamiltonian({("a", "b", "c", "d"): 1, ("e",): 1}, "spin")
    model = Hamiltonian({("p", "q"): 1}, "spin")
    R = Reduction(source, model, [], origin={"a": "p", "b": ("not", "p"), "c": "q", "d": -1, "e": "q"})
    assert R.project([[1, -1]]).tolist() == [[1, -1, -1, -1, -1]]
    assert R.lift([[1, -1, -1, -1, -1]]).tolist() == [[1, -1]]
    assert R.representable([[1, -1, -1, -1, -1], [1, 1, -1, -1, -1], [1, -1, -1, 1, -1]]).tolist() == [
        True,
        False,
        False,
    ]
    with pytest.raises(InputError, match="cannot be represented"):
        R.lift([[1, 1, -1, -1, -1]])


@pytest.mark.parametrize("convention", ["1-2x", "2x-1"])
def test_the_source_in_model_variables_has_the_energy_of_the_projected_state(convention: str) -> None:
    source = Hamiltonian({("a", "b", "c"): 3, ("a",): Fraction(1, 2), ("d", "c"): 5, (): 7}, "boolean")
    model = Hamiltonian({("p", "q"): 1}, "spin", convention=convention)
    R = Reduction(source, model, [], origin={"a": "p", "b": ("not", "q"), "c": "q", "d": 1})
    rewritten = R.source_in_model_variables()
    assert rewritten.labels == ("p", "q")
    for state in product((1, -1), repeat=2):
        assert rewritten.energy(state) == source.energy(R.project([state]))


def test_what_the_caller_declares_binds_before_the_trail() -> None:
    trail = Trail((Step("reduction", "", Fraction(2), Fraction(3)),))
    assert Reduction(E, F, ["y"], trail=trail).declared == (2, 3)
    assert Reduction(E, F, ["y"], scale="1/2", trail=trail).declared == (Fraction(1, 2), 0)
    assert Reduction(E, F, ["y"]).declared is None


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"auxiliaries": ["z"]}, "'z' is no variable"),
        ({"auxiliaries": ["y", "y"]}, "named twice"),
        ({"auxiliaries": []}, "'y' of the reduced model is neither"),
        ({"auxiliaries": ["y"], "origin": {"q": "a"}}, "'q' is no variable of the source"),
        ({"auxiliaries": ["y"], "origin": {"a": "q"}}, "'a' would be 'q'"),
        ({"auxiliaries": ["y"], "origin": {"a": "y"}}, "would be the auxiliary"),
        ({"auxiliaries": ["y"], "origin": {"a": 2}}, "fixed at 2"),
        ({"auxiliaries": ["y"], "scale": 0}, "must be positive"),
    ],
)
def test_a_reduction_that_does_not_fit_is_refused(arguments: dict[str, object], words: str) -> None:
    with pytest.raises(InputError, match=words):
        Reduction(E, F, **arguments)  # type: ignore[arg-type]


def test_states_of_the_wrong_width_are_refused() -> None:
    with pytest.raises(InputError, match="4 values"):
        Reduction(E, F, ["y"]).project(np.zeros((1, 3), np.int8))
