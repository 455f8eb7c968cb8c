"""Local minima near given states against testing every state, and the minima that auxiliaries bring."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, unpack
from hubokit.spectrum import minima
from hubokit.spectrum.minima import flip_changes, is_local_minimum, minima_near
from hubokit.spectrum.transforms import local_minima_by_transform
from tests.strategies import EDGES, hamiltonians

WEIGHTS = st.integers(-3, 3)


@given(hamiltonians(max_size=6, max_locality=2, values=st.one_of(WEIGHTS, EDGES), max_terms=14), st.data())
def test_every_local_minimum_within_the_radius_is_found_and_no_other_state(
    H: Hamiltonian, data: st.DataObject
) -> None:
    index = data.draw(st.integers(0, 2**H.size - 1))
    radius = data.draw(st.integers(0, H.size))
    states = from_bits(unpack(np.arange(2**H.size), H.size), H.domain)
    energies = [int(k) for k in H.integer_energies(states)]
    lowest = [all(energies[i ^ 1 << bit] >= energies[i] for bit in range(H.size)) for i in range(len(energies))]
    expected = {
        (tuple(H.labels[k] for k in np.flatnonzero(states[i] != states[index])), energies[i] - energies[index])
        for i in range(len(energies))
        if lowest[i] and 0 < (i ^ index).bit_count() <= radius
    }
    near = minima_near(H, states[index], radius)[0]
    assert near.centre_is_minimum == lowest[index]
    assert len(near.minima) == len(expected)
    assert {(found.flips, found.rise / H.resolution) for found in near.minima} == expected
    assert [found.rise for found in near.minima] == sorted(found.rise for found in near.minima)


@given(hamiltonians(max_size=6, values=st.one_of(WEIGHTS, EDGES)))
def test_flip_changes_are_differences_of_energies(H: Hamiltonian) -> None:
    states = from_bits(unpack(np.arange(2**H.size), H.size), H.domain)
    changes = flip_changes(H, states)
    energies = H.integer_energies(states)
    for i in range(len(states)):
        for k in range(H.size):
            assert changes[i, k] == energies[i ^ 1 << (H.size - 1 - k)] - energies[i]
    assert is_local_minimum(H, states).sum() == local_minima_by_transform(H)


def test_minima_that_need_an_auxiliary_are_told_apart() -> None:
    """Two spins tied to an auxiliary more strongly than to their field: all three must turn over together."""
    H = Hamiltonian({("a", "y"): -3, ("b", "y"): -3, ("a",): -1, ("b",): -1, ("c",): -2}, "spin")
    near = minima_near(H, np.ones((1, 4), np.int8), 3)[0]
    assert near.centre_is_minimum
    assert [(set(found.flips), found.rise) for found in near.minima] == [({"a", "b", "y"}, Fraction(4))]
    assert near.through(["y"]) == near.minima
    assert near.through(["c"]) == ()
    assert minima_near(H, np.ones((1, 4), np.int8), 2)[0].minima == ()


def test_a_large_ferromagnet_has_no_minimum_near_its_ground_state() -> None:
    bonds = {(f"s{i:04}", f"s{(i + 1) % 2000:04}"): -1 for i in range(2000)}
    H = Hamiltonian({**bonds, **{(f"s{i:04}",): "-1/2" for i in range(2000)}}, "spin")
    near = minima_near(H, np.ones((1, 2000), np.int8), 3)[0]
    assert (near.centre_is_minimum, near.minima) == (True, ())


def test_bad_questions_are_told(monkeypatch: pytest.MonkeyPatch) -> None:
    with pytest.raises(InputError, match="locality 3"):
        minima_near(Hamiltonian({("a", "b", "c"): 1}, "spin"), [[1, 1, 1]])
    with pytest.raises(InputError, match="negative"):
        minima_near(Hamiltonian({("a", "b"): 1}, "spin"), [[1, 1]], -1)
    monkeypatch.setattr(minima, "SETS", 3)
    with pytest.raises(LimitError, match="sets of flips hold together"):
        minima_near(Hamiltonian({}, "spin", labels=["a", "b", "c"]), [[1, 1, 1]], 3)
