"""The transforms against sums written out, and the oracle's levels against energies of single states."""

from __future__ import annotations

import itertools
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.transforms import (
    all_energies,
    density_by_transform,
    inverse_moebius,
    local_minima_by_transform,
    moebius,
    spectrum_by_transform,
    walsh_hadamard,
)

VALUES = {"spin": (1, -1), "boolean": (0, 1)}


@st.composite
def models(draw: st.DrawFn, most: int = 5, weights: st.SearchStrategy[int] | None = None) -> Hamiltonian:
    size = draw(st.integers(0, most))
    products = draw(
        st.lists(st.lists(st.integers(0, size - 1), max_size=size, unique=True), max_size=12) if size else st.just([])
    )
    numbers = st.integers(-3, 3) if weights is None else weights
    labels = [f"v{i}" for i in range(size)]
    terms = {tuple(labels[i] for i in sorted(product)): draw(numbers) for product in products}
    return Hamiltonian(terms, domain=draw(st.sampled_from(["spin", "boolean"])), labels=labels)


def states_of(H: Hamiltonian) -> list[tuple[int, ...]]:
    return list(itertools.product(VALUES[H.domain], repeat=H.size))


tables = st.integers(0, 6).flatmap(
    lambda depth: st.lists(st.integers(-(2**40), 2**40), min_size=2**depth, max_size=2**depth)
)


@given(tables)
def test_inverse_moebius_sums_over_subsets(coefficients: list[int]) -> None:
    expected = [
        sum(c for part, c in enumerate(coefficients) if part & whole == part) for whole in range(len(coefficients))
    ]
    assert inverse_moebius(np.array(coefficients)).tolist() == expected


@given(tables)
def test_walsh_hadamard_sums_with_the_parity_of_the_common_bits(coefficients: list[int]) -> None:
    expected = [
        sum(c * (-1) ** (part & x).bit_count() for part, c in enumerate(coefficients))
        for x in range(len(coefficients))
    ]
    assert walsh_hadamard(np.array(coefficients)).tolist() == expected


@given(tables)
def test_moebius_undoes_inverse_moebius_in_int64_and_in_python_integers(values: list[int]) -> None:
    assert moebius(inverse_moebius(np.array(values))).tolist() == values
    huge = np.array([v * 10**30 for v in values], dtype=object)
    assert moebius(inverse_moebius(huge)).tolist() == huge.tolist()
    assert (walsh_hadamard(walsh_hadamard(huge)) == huge * len(values)).all()


def test_transforms_act_on_each_row_and_leave_their_argument_alone() -> None:
    table = np.arange(24, dtype=np.int64).reshape(3, 8)
    before = table.copy()
    for transform in (moebius, inverse_moebius, walsh_hadamard):
        rows = np.stack([transform(row) for row in table])
        assert (transform(table) == rows).all()
    assert (table == before).all()


@pytest.mark.parametrize("length", [0, 3, 12])
def test_a_transform_refuses_lengths_that_are_no_power_of_two(length: int) -> None:
    with pytest.raises(InputError, match=f"got {length}"):
        moebius(np.zeros(length, np.int64))


@given(models())
def test_all_energies_are_the_energies_in_lift_order(H: Hamiltonian) -> None:
    table = all_energies(H)
    assert [H.constant + int(k) * H.resolution for k in table] == [H.energy(state) for state in states_of(H)]


@given(models(weights=st.integers(-(2**70), 2**70)))
def test_weights_beyond_int64_give_exact_energies(H: Hamiltonian) -> None:
    table = all_energies(H)
    assert [H.constant + int(k) * H.resolution for k in table] == [H.energy(state) for state in states_of(H)]


@given(models(), st.integers(1, 4), st.integers(0, 5))
def test_levels_list_the_first_states_of_the_lowest_energies(H: Hamiltonian, count: int, limit: int) -> None:
    by_energy: dict[Fraction, list[tuple[int, ...]]] = {}
    for state in states_of(H):
        by_energy.setdefault(H.energy(state), []).append(state)
    energies = sorted(by_energy)
    levels = spectrum_by_transform(H, count, limit)
    assert [level.energy for level in levels] == energies[:count]
    for place, level in enumerate(levels):
        states = by_energy[level.energy]
        assert level.degeneracy == len(states)
        assert [tuple(row) for row in level.states.tolist()] == states[:limit]
        assert level.states.shape == (min(limit, len(states)), H.size)
        assert level.complete == (len(states) <= limit)
        assert level.gap == (energies[place + 1] - level.energy if place + 1 < len(energies) else None)
    density = density_by_transform(H)
    assert list(density) == [(energy, len(by_energy[energy])) for energy in energies]


@given(models())
def test_local_minima_are_the_states_that_no_flip_lowers(H: Hamiltonian) -> None:
    energy = {state: H.energy(state) for state in states_of(H)}
    first, second = VALUES[H.domain]

    def neighbours(state: tuple[int, ...]) -> list[tuple[int, ...]]:
        return [(*state[:i], second if state[i] == first else first, *state[i + 1 :]) for i in range(len(state))]

    expected = sum(all(energy[x] <= energy[y] for y in neighbours(x)) for x in energy)
    assert local_minima_by_transform(H) == expected


def test_a_table_beyond_24_variables_is_refused_with_what_else_would_do() -> None:
    H = Hamiltonian.from_arrays([[[0]]], [[1]], domain="spin", size=25)
    with pytest.raises(LimitError, match=r"2\*\*25.*ground_states"):
        all_energies(H)


def test_a_level_and_a_density_print_well() -> None:
    H = Hamiltonian({("a", "b"): "1/2", (): 3}, domain="spin")
    assert str(spectrum_by_transform(H, limit=1)[0]) == (
        "Level(energy 5/2, 2 states (1 listed), gap 1, by transform)"
    )
    assert len(density_by_transform(H)) == 2
