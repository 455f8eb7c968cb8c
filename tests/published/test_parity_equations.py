"""Parity equations with a planted solution: H = -sum J_e s_i s_j s_k, three spins an equation.

An equation is satisfied when its term is -1, so the ground energy is minus the number of equations, and the solutions
are a coset of the null space of the incidence matrix over GF(2): there are 2**(n - rank) of them. The rank is found
here by Gaussian elimination on Python integers, independently of the package (Ricci-Tersenghi, Weigt, Zecchina 2001,
"Simplest random K-satisfiability problem", Phys. Rev. E 63, 026702, studies the ensemble).
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.elimination import draw_ground_states, ground_states, low_levels, predicted_cost


def equations(n: int, count: int, seed: int) -> NDArray[np.int64]:
    """Distinct triples of n spins."""
    chance = np.random.default_rng(seed)
    triples: set[tuple[int, ...]] = set()
    while len(triples) < count:
        triples.add(tuple(sorted(chance.choice(n, 3, replace=False).tolist())))
    return np.array(sorted(triples))


def planted(n: int, triples: NDArray[np.int64], seed: int) -> Hamiltonian:
    solution = np.random.default_rng(seed).choice([-1, 1], n)
    return Hamiltonian.from_arrays([triples], [-solution[triples].prod(axis=1)], domain="spin", size=n)


def rank_over_gf2(rows: NDArray[np.int64]) -> int:
    """Rank of the incidence matrix whose row e has ones at the members of equation e."""
    pivots: dict[int, int] = {}
    for row in rows.tolist():
        vector = sum(1 << i for i in row)
        while vector and vector.bit_length() in pivots:
            vector ^= pivots[vector.bit_length()]
        if vector:
            pivots[vector.bit_length()] = vector
    return len(pivots)


@pytest.mark.parametrize(("n", "count"), [(60, 30), (100, 50), (150, 75), (220, 100), (300, 110), (300, 150)])
@pytest.mark.parametrize("seed", [0, 1])
def test_ground_energy_and_degeneracy_follow_from_the_rank(n: int, count: int, seed: int) -> None:
    triples = equations(n, count, seed)
    H = planted(n, triples, seed + 100)
    level = ground_states(H, limit=4)
    assert level.energy == -count
    assert level.degeneracy == 2 ** (n - rank_over_gf2(triples))
    assert level.gap == 2
    assert H.integer_energies(level.states).tolist() == [-count] * 4


def test_an_overdetermined_part_lowers_the_rank_below_the_number_of_equations() -> None:
    """All 20 triples of six spins beside random ones: many equations depend on each other."""
    dense = np.array([(i, j, k) for k in range(6) for j in range(k) for i in range(j)])
    triples = np.unique(np.concatenate([dense, equations(80, 30, 9)]), axis=0)
    rank = rank_over_gf2(triples)
    assert rank < len(triples)
    level = ground_states(planted(80, triples, 1), limit=0)
    assert (level.energy, level.degeneracy) == (-len(triples), 2 ** (80 - rank))


def test_the_first_level_counts_single_violations() -> None:
    """Independent equations: any set of them may be broken, so the j-th level has C(m, j) * 2**(n - m) states."""
    triples = equations(120, 40, 3)
    assert rank_over_gf2(triples) == 40
    levels = low_levels(planted(120, triples, 2), 3, limit=0)
    assert [level.energy for level in levels] == [-40, -38, -36]
    assert [level.degeneracy for level in levels] == [2**80, 40 * 2**80, 780 * 2**80]


def test_the_first_solution_in_lift_order_is_the_reduced_echelon_one() -> None:
    """Going through the variables in order, a spin is up unless the equations and the earlier spins force it down."""
    n, triples = 90, equations(90, 45, 5)
    H = planted(n, triples, 7)
    right = H.blocks[0].weights > 0  # the term's product must be -1 there
    rows = [
        sum(1 << (n - 1 - i) for i in row) | (int(b) << n) for row, b in zip(triples.tolist(), right, strict=True)
    ]
    # Eliminate the last variables first, so that each pivot variable is decided by earlier ones.
    pivots: dict[int, int] = {}
    for row in rows:
        for pivot, other in pivots.items():
            if row >> pivot & 1:
                row ^= other
        low = (row & ((1 << n) - 1)) & -(row & ((1 << n) - 1))
        if low:
            pivots[low.bit_length() - 1] = row
    bits = 0
    for position in range(n - 1, -1, -1):
        if position in pivots:
            row = pivots[position]
            decided = ((row & bits & ~(1 << position)).bit_count() + (row >> n)) & 1
            bits |= decided << position
    first = [1 - 2 * (bits >> (n - 1 - i) & 1) for i in range(n)]
    assert ground_states(H, limit=1).states.tolist() == [first]


def test_random_draws_solve_the_equations() -> None:
    triples = equations(200, 100, 4)
    H = planted(200, triples, 4)
    drawn = draw_ground_states(H, 50, seed=8)
    assert H.integer_energies(drawn).tolist() == [-100] * 50
    assert len(np.unique(drawn, axis=0)) == 50


def test_the_width_stays_near_twenty_at_three_hundred_spins() -> None:
    cost = predicted_cost(planted(300, equations(300, 150, 0), 0))
    assert cost.width <= 24
    assert cost.memory < 2**31
