"""Monochromatic triangles in two-colourings of the edges of a complete graph.

Goodman 1959, "On sets of acquaintances and strangers at any party", Amer. Math. Monthly 66, 778: their number is at
least n(n-2)(n-4)/24 for even n, n(n-1)(n-5)/24 for n = 1 mod 4 and (n+1)(n-3)(n-4)/24 for n = 3 mod 4, and the bound
is reached.
As a cubic boolean model on the edges: x_ij x_ik x_jk + (1 - x_ij)(1 - x_ik)(1 - x_jk), summed over triangles.
"""

from __future__ import annotations

from itertools import combinations
from math import comb

import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.elimination import ground_states as by_elimination
from hubokit.spectrum.search import ground_states


def goodman(n: int) -> int:
    if n % 2 == 0:
        return n * (n - 2) * (n - 4) // 24
    if n % 4 == 1:
        return n * (n - 1) * (n - 5) // 24
    return (n + 1) * (n - 3) * (n - 4) // 24


def triangles(n: int) -> Hamiltonian:
    """The number of monochromatic triangles: both products expanded, the cubic parts cancel."""
    x = {pair: Hamiltonian({(f"x{pair[0]}{pair[1]}",): 1}, "boolean") for pair in combinations(range(n), 2)}
    total = Hamiltonian({}, "boolean", labels=[f"x{i}{j}" for i, j in combinations(range(n), 2)])
    for i, j, k in combinations(range(n), 3):
        a, b, c = x[i, j], x[i, k], x[j, k]
        total = total + a * b * c + (1 - a) * (1 - b) * (1 - c)
    return total


@pytest.mark.parametrize("n", [3, 4, 5, 6, 7])
def test_the_least_number_is_goodmans(n: int) -> None:
    level = ground_states(triangles(n), limit=10)
    assert level.energy == goodman(n)
    assert level.degeneracy > 0


def test_five_vertices_have_the_twelve_five_cycles() -> None:
    """R(3, 3) = 6: on five vertices the colourings without monochromatic triangle are the labelled five-cycles."""
    for level in (ground_states(triangles(5)), by_elimination(triangles(5))):
        assert (level.energy, level.degeneracy) == (0, 12)
        assert set(level.states.sum(axis=1).tolist()) == {5}


def test_elimination_and_exhaustion_agree_on_six_vertices() -> None:
    one, other = by_elimination(triangles(6)), ground_states(triangles(6), method="exhaustion")
    assert (one.energy, one.degeneracy, one.gap) == (other.energy, other.degeneracy, other.gap)
    assert (one.states == other.states).all()


def test_a_triangle_counts_itself() -> None:
    H = triangles(4)
    assert H.energy([1] * 6) == comb(4, 3) == H.energy([0] * 6)
