"""Low-autocorrelation binary sequences: E(s) = sum over k of (sum over i of s_i s_(i+k))**2.

Source: T. Packebusch and S. Mertens, "Low autocorrelation binary sequences", J. Phys. A 49 (2016) 165001,
arXiv:1512.02475, the table of least energies.
"""

from __future__ import annotations

import itertools
from fractions import Fraction

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.exhaustive import count_local_minima, density_of_states, ground_states, low_levels

LEAST = [1, 2, 2, 7, 3, 8, 12, 13, 5, 10, 6, 19, 15, 24, 32, 25, 29, 26]
LARGER = {21: 26, 22: 39, 23: 47, 24: 36}


def low_autocorrelation(length: int) -> Hamiltonian:
    """The 4-local spin model, products written down one by one and merged."""
    quads = [
        (i, i + k, j, j + k) for k in range(1, length) for i, j in itertools.product(range(length - k), repeat=2)
    ]
    return Hamiltonian.from_arrays([np.array(quads)], [np.ones(len(quads), np.int64)], domain="spin", size=length)


def energy_of(sequence: np.ndarray) -> int:
    return sum(int(sequence[: len(sequence) - k] @ sequence[k:]) ** 2 for k in range(1, len(sequence)))


@pytest.mark.parametrize(("length", "least"), list(enumerate(LEAST, start=3)))
def test_the_least_energy_up_to_length_20(length: int, least: int) -> None:
    level = ground_states(low_autocorrelation(length))
    assert level.energy == least
    assert level.complete
    assert all(energy_of(row.astype(np.int64)) == least for row in level.states)


@pytest.mark.parametrize(("length", "least"), list(LARGER.items()))
def test_the_least_energy_beyond_the_tables(length: int, least: int) -> None:
    level = ground_states(low_autocorrelation(length))
    assert level.energy == least
    assert level.degeneracy == len(level.states)
    assert {energy_of(row.astype(np.int64)) for row in level.states} == {least}


def test_reversal_and_flips_keep_the_ground_states_of_length_24() -> None:
    states = {tuple(row) for row in ground_states(low_autocorrelation(24)).states.tolist()}
    alternating = [(-1) ** i for i in range(24)]
    for state in states:
        assert tuple(-s for s in state) in states
        assert state[::-1] in states
        assert tuple(s * t for s, t in zip(state, alternating, strict=True)) in states


def test_the_density_of_length_22_has_the_mean_energy_of_random_sequences() -> None:
    """The mean over all sequences is the sum of N - k (every product of distinct positions averages to 0)."""
    density = density_of_states(low_autocorrelation(22))
    assert sum(density.counts) == 2**22
    mean = sum((energy * count for energy, count in density), Fraction(0)) / 2**22
    assert mean == sum(range(1, 22))
    levels = low_levels(low_autocorrelation(22), 4)
    assert [(level.energy, level.degeneracy) for level in levels] == list(density)[:4]


def test_every_ground_state_is_a_local_minimum() -> None:
    model = low_autocorrelation(21)
    assert count_local_minima(model) >= ground_states(model).degeneracy
