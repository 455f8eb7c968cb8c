"""The ferromagnetic square-lattice Ising model on the 4 x 4 torus, H = -sum over the 32 bonds.

Source: P. D. Beale, "Exact distribution of energies in the two-dimensional Ising model", Phys. Rev. Lett. 76
(1996) 78; the numbers for this lattice were recomputed by a transfer matrix.
"""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum import exhaustive
from hubokit.spectrum.exhaustive import density_of_states, ground_states

LOWER_HALF = {-32: 2, -24: 32, -20: 64, -16: 424, -12: 1728, -8: 6688, -4: 13568}
DENSITY = LOWER_HALF | {0: 20524} | {-energy: count for energy, count in reversed(LOWER_HALF.items())}


def torus(width: int, height: int) -> Hamiltonian:
    """Sites numbered row by row; bonds to the right and downwards."""
    site = np.arange(width * height).reshape(height, width)
    right = np.stack([site, np.roll(site, -1, axis=1)], axis=-1).reshape(-1, 2)
    down = np.stack([site, np.roll(site, -1, axis=0)], axis=-1).reshape(-1, 2)
    bonds = np.concatenate([right, down])
    return Hamiltonian.from_arrays([bonds], [np.full(len(bonds), -1)], domain="spin")


def test_the_density_of_states() -> None:
    density = density_of_states(torus(4, 4))
    assert dict(density) == DENSITY
    assert sum(density.counts) == 2**16


def test_the_density_of_states_by_the_walk(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(exhaustive, "TABULATED", -1)
    monkeypatch.setattr(exhaustive, "WALKED", -1)
    assert dict(density_of_states(torus(4, 4))) == DENSITY


def by_transfer_matrix(width: int, height: int) -> Counter[int]:
    """Number of states at each energy: rows added one by one to a torus, each first row in turn."""
    spins = 1 - 2 * ((np.arange(1 << width)[:, None] >> np.arange(width)) & 1)
    within = -(spins * np.roll(spins, -1, axis=1)).sum(axis=1)
    between = -spins @ spins.T
    total: Counter[int] = Counter()
    bonds = 2 * width * height
    for first in range(1 << width):
        # ways[row, energy + bonds]
        ways = np.zeros((1 << width, 2 * bonds + 1), np.int64)
        ways[first, bonds + within[first]] = 1
        for _ in range(height - 1):
            grown = np.zeros_like(ways)
            for row in range(1 << width):
                for other in range(1 << width):
                    grown[row] += np.roll(ways[other], within[row] + between[other, row])
            ways = grown
        for row in range(1 << width):
            closed = np.roll(ways[row], between[row, first])
            total.update({int(e) - bonds: int(closed[e]) for e in np.flatnonzero(closed)})
    return total


def test_a_larger_torus_agrees_with_a_transfer_matrix() -> None:
    """4 x 6: beyond the tables, so that the walk answers."""
    density = density_of_states(torus(4, 6))
    assert {int(energy): count for energy, count in density} == dict(by_transfer_matrix(4, 6))


def test_the_two_ground_states_point_all_one_way() -> None:
    level = ground_states(torus(6, 6))
    assert level.energy == -72
    assert level.states.tolist() == [[1] * 36, [-1] * 36]
    assert level.gap == 8
