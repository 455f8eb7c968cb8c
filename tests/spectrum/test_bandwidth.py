"""The bandwidth ratio against its definition on all states, and its wording where it is undefined or only bounded."""

from __future__ import annotations

from fractions import Fraction
from itertools import combinations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, unpack
from hubokit.spectrum.bandwidth import bandwidth, bandwidth_within
from hubokit.spectrum.neighbourhood import neighbourhood
from tests.strategies import hamiltonians


@given(hamiltonians(max_size=6, values=st.integers(-3, 3)), st.data())
def test_all_figures_follow_the_definition(H: Hamiltonian, data: st.DataObject) -> None:
    count = data.draw(st.integers(1, min(6, 2**H.size)))
    chosen = data.draw(st.lists(st.integers(0, 2**H.size - 1), min_size=count, max_size=count, unique=True))
    states = from_bits(unpack(np.arange(2**H.size), H.size), H.domain)
    energies = [H.constant + int(k) * H.resolution for k in H.integer_energies(states)]
    targets = [energies[i] for i in chosen]
    others = [energy for i, energy in enumerate(energies) if i not in chosen]
    found = bandwidth(H, states[chosen])
    assert found.bandwidth == max(targets) - min(targets)
    assert found.distance == (min(others) - max(targets) if others else None)
    if others and min(others) > max(targets):
        assert found.ratio == (max(targets) - min(targets)) / (min(others) - max(targets))
        assert "ratio" in str(found)
    else:
        assert found.ratio is None
        assert "undefined" in str(found)
    assert found.exact
    within = bandwidth(H, states[chosen], radius=H.size)
    assert (within.bandwidth, within.distance, within.ratio) == (found.bandwidth, found.distance, found.ratio)
    assert within.exact


@given(hamiltonians(max_size=6, min_size=2, values=st.integers(-3, 3)), st.integers(0, 3))
def test_a_neighbourhood_bounds_the_distance_from_above(H: Hamiltonian, chosen: int) -> None:
    targets = from_bits(unpack(np.array([chosen]), H.size), H.domain)
    whole, near = bandwidth(H, targets), bandwidth(H, targets, radius=1)
    assert near.distance is not None
    assert whole.distance is not None
    assert near.distance >= whole.distance
    assert near.exact == (H.size == 1)
    assert "at most" in str(near)


def test_a_bound_is_worded_as_a_bound() -> None:
    H = Hamiltonian({("a", "b", "c"): -2, ("a",): "-1/4", ("b",): -1}, "spin")
    near = bandwidth(H, [[1, 1, 1], [-1, 1, -1]], radius=1)
    assert str(near).startswith("bandwidth 1/2, distance at most ")
    assert "ratio at least" in str(near)
    assert "all states within 1 flip of 2 states given" in str(near)


def test_a_state_level_with_the_highest_target_leaves_the_ratio_undefined() -> None:
    level = bandwidth(Hamiltonian({("a",): 1}, "spin"), [[-1], [1]])
    assert str(level) == "bandwidth 2, ratio undefined: no other state (all 2**1 states, transform)"
    H = Hamiltonian({("a", "b"): 1}, "spin")
    assert "another state lies at the highest target" in str(bandwidth(H, [[1, -1]]))
    assert "another state lies below the highest target" in str(bandwidth(H, [[1, 1]]))


def test_a_sparse_model_of_two_hundred_spins_is_covered_by_elimination() -> None:
    bonds = {(f"s{i:03}", f"s{i + 1:03}"): -2 for i in range(199)}
    H = Hamiltonian({**bonds, ("s000",): "-1/4"}, "spin")
    found = bandwidth(H, [[1] * 200, [-1] * 200])
    assert (found.bandwidth, found.distance, found.ratio) == (Fraction(1, 2), Fraction(7, 2), Fraction(1, 7))
    assert found.exact
    assert "elimination" in found.method


def test_too_many_states_ask_for_a_radius() -> None:
    pairs = np.array(list(combinations(range(100), 2)))
    H = Hamiltonian.from_arrays([pairs], [-np.ones(len(pairs), int)], domain="spin")
    with pytest.raises(LimitError, match="neighbourhood"):
        bandwidth(H, np.ones((1, 100), np.int8))
    near = bandwidth(H, [[1] * 100, [-1] * 100], radius=2)
    assert (near.bandwidth, near.distance, near.ratio, near.exact) == (0, 198, 0, False)


def test_ten_spins_with_twenty_random_targets_reach_a_small_ratio() -> None:
    """Common practice: fields, pairs and triples on 10 spins set 20 random targets apart below a ratio of 0.1.

    The weights keep the targets level, push up whichever other states lie lowest, and are then rounded to a grid; the
    figure itself is exact.
    """
    chance = np.random.default_rng(11)
    index = chance.choice(1024, 20, replace=False)
    states = from_bits(unpack(np.arange(1024), 10), "spin")
    sets = [c for k in (1, 2, 3) for c in combinations(range(10), k)]
    products = np.stack([states[:, list(c)].prod(axis=1) for c in sets], axis=1).astype(float)
    inside, outside = products[index], np.delete(products, index, axis=0)
    # Within the space where all targets are level, push the states outside up, the lowest ones most.
    level = np.linalg.svd(inside - inside.mean(axis=0))[2][19:]
    away = outside @ level.T - inside.mean(axis=0) @ level.T
    weights = away.mean(axis=0)
    for _ in range(1000):
        lowest = np.argsort(away @ weights)[:20]
        weights += 0.02 * away[lowest].mean(axis=0)
    coefficients = np.round(level.T @ weights / np.abs(level.T @ weights).max() * 10**6).astype(np.int64)
    H = Hamiltonian.from_arrays(
        [np.array([c for c in sets if len(c) == k]) for k in (1, 2, 3)],
        [np.array([w for w, c in zip(coefficients, sets, strict=True) if len(c) == k]) for k in (1, 2, 3)],
        domain="spin",
    )
    found = bandwidth(H, states[index])
    assert found.ratio is not None
    assert found.ratio < Fraction(1, 10)


def test_a_look_that_was_made_already_serves() -> None:
    H = Hamiltonian({("a", "b"): -2, ("b", "c"): -1, ("a",): "-1/4"}, "spin")
    targets = [[1, 1, 1], [-1, -1, -1]]
    assert bandwidth_within(neighbourhood(H, targets, 1)) == bandwidth(H, targets, radius=1)


@pytest.mark.parametrize(
    ("targets", "fault"), [(np.zeros((0, 2), np.int8), "no target"), ([[1, 1], [1, 1]], "given twice")]
)
def test_bad_targets_are_told(targets: object, fault: str) -> None:
    with pytest.raises(InputError, match=fault):
        bandwidth(Hamiltonian({("a", "b"): 1}, "spin"), targets)
