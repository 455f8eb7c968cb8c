"""Square-lattice Ising strips against a transfer matrix (Kramers, Wannier 1941, "Statistics of the two-dimensional
ferromagnet. Part I", Phys. Rev. 60, 252), carried out here on polynomials that count states by energy; and the 4 x 4
torus against its published density of states (method of Beale 1996, Phys. Rev. Lett. 76, 78).
"""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.elimination import ground_states, low_levels

Couplings = dict[tuple[tuple[int, int], tuple[int, int]], int]


def strip(width: int, length: int, seed: int | None) -> Couplings:
    """Bonds of an open strip: all -1 (ferromagnet), or +1 and -1 at random."""
    chance = np.random.default_rng(seed)
    bonds = {}
    for column in range(length):
        for row in range(width):
            for other in ((row + 1, column), (row, column + 1)):
                if other[0] < width and other[1] < length:
                    bonds[((row, column), other)] = -1 if seed is None else int(chance.choice([-1, 1]))
    return bonds


def as_hamiltonian(bonds: Couplings, first_rows: bool = False) -> Hamiltonian:
    sites = sorted({site for bond in bonds for site in bond}, key=lambda site: site if first_rows else site[::-1])
    names = {site: f"s{site[0]}.{site[1]}" for site in sites}
    terms = {(names[a], names[b]): weight for (a, b), weight in bonds.items()}
    return Hamiltonian(terms, "spin", labels=[names[site] for site in sites])


def counts_by_transfer(bonds: Couplings, width: int, length: int) -> Counter[int]:
    """Number of states at each energy, column by column: one counter for each setting of the last column."""
    settings = [[1 - 2 * (index >> row & 1) for row in range(width)] for index in range(1 << width)]

    def inside(column: int, spins: list[int]) -> int:
        return sum(bonds[((r, column), (r + 1, column))] * spins[r] * spins[r + 1] for r in range(width - 1))

    counters = [Counter({inside(0, spins): 1}) for spins in settings]
    for column in range(1, length):
        following = []
        for spins in settings:
            gathered: Counter[int] = Counter()
            for earlier, counter in zip(settings, counters, strict=True):
                step = inside(column, spins)
                step += sum(bonds[((r, column - 1), (r, column))] * earlier[r] * spins[r] for r in range(width))
                for energy, number in counter.items():
                    gathered[energy + step] += number
            following.append(gathered)
        counters = following
    return sum(counters, Counter())


@pytest.mark.parametrize(("width", "length"), [(2, 40), (3, 25), (4, 12)])
@pytest.mark.parametrize("seed", [None, 1, 2])
def test_low_levels_of_a_strip_are_those_of_its_transfer_matrix(width: int, length: int, seed: int | None) -> None:
    bonds = strip(width, length, seed)
    expected = sorted(counts_by_transfer(bonds, width, length).items())[:4]
    levels = low_levels(as_hamiltonian(bonds), 4, limit=0)
    assert [(level.energy, level.degeneracy) for level in levels] == expected
    ground = ground_states(as_hamiltonian(bonds, first_rows=True), limit=0)
    assert (ground.energy, ground.degeneracy) == expected[0]
    assert ground.gap == expected[1][0] - expected[0][0]


def test_a_long_ferromagnetic_strip_has_two_ground_states_and_corner_flips_above() -> None:
    """On 8 x 60 sites a corner costs two bonds (energy 4): 4 corners, twice. An edge of the strip costs 3 bonds."""
    levels = low_levels(as_hamiltonian(strip(8, 60, None)), 2)
    bonds = 7 * 60 + 8 * 59
    assert [(level.energy, level.degeneracy) for level in levels] == [(-bonds, 2), (-bonds + 4, 8)]
    up_first = levels[0].states
    assert up_first[0].tolist() == [1] * 480
    assert up_first[1].tolist() == [-1] * 480
    assert sorted((levels[1].states == -1).sum(axis=1).tolist()) == [1] * 4 + [479] * 4


def test_the_four_by_four_torus_has_its_published_levels() -> None:
    terms: dict[tuple[str, str], int] = {}
    for i in range(4):
        for j in range(4):
            terms[(f"s{i}.{j}", f"s{(i + 1) % 4}.{j}")] = -1
            terms[(f"s{i}.{j}", f"s{i}.{(j + 1) % 4}")] = -1
    levels = low_levels(Hamiltonian(terms, "spin"), 15, limit=2000)
    half = {-32: 2, -24: 32, -20: 64, -16: 424, -12: 1728, -8: 6688, -4: 13568, 0: 20524}
    published = half | {-energy: number for energy, number in half.items()}
    assert {int(level.energy): level.degeneracy for level in levels} == published
    assert [len(level.states) for level in levels[:5]] == [2, 32, 64, 424, 1728]
    assert levels[-1].gap is None
