"""Weights at the edge of each integer type, and beyond all of them: no energy ever wraps, every answer is exact."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum import candidate_walk, exhaustive
from hubokit.spectrum.candidate_walk import Candidates, exact_levels, rounded
from hubokit.spectrum.derivatives import Layout, integer_type
from hubokit.spectrum.level_walk import LowestLevels
from hubokit.spectrum.polynomial import Polynomial, polynomial_of
from hubokit.spectrum.slabs import run_slabs
from hubokit.spectrum.transforms import (
    density_by_transform,
    local_minima_by_transform,
    spectrum_by_transform,
    tabulated,
)

EDGES = [2**15 - 1, 2**15, 2**16, 2**31 - 1, 2**31, 2**32, 2**62 - 1]


def polynomial_of_bound(rng: np.random.Generator, size: int, spin: bool, bound: int) -> Polynomial:
    """Distinct products of up to six variables, all signs, whose absolute weights add up to the bound."""
    masks = np.unique(rng.integers(1, 1 << size, int(rng.integers(1, 25))))
    masks = masks[np.bitwise_count(masks) <= 6]
    if len(masks) == 0:
        masks = np.array([1])
    cuts = np.sort(rng.choice(bound - 1, len(masks) - 1, replace=False) + 1) if bound < 2**20 else None
    if cuts is None:
        cuts = np.array(sorted({int(rng.integers(1, bound)) for _ in range(len(masks) - 1)}))
        masks = masks[: len(cuts) + 1]
    sizes = np.diff([0, *cuts.tolist(), bound])
    signs = rng.choice([-1, 1], len(masks)) if rng.integers(2) else np.full(len(masks), rng.choice([-1, 1]))
    return Polynomial(size, spin, masks, np.array([int(a) * int(b) for a, b in zip(sizes, signs, strict=True)]))


@pytest.mark.parametrize("bound", EDGES)
@pytest.mark.parametrize("spin", [True, False])
def test_no_energy_wraps_at_the_edge_of_an_integer_type(bound: int, spin: bool) -> None:
    rng = np.random.default_rng(bound % 1000 + spin)
    for _ in range(60):
        size = int(rng.integers(2, 9))
        polynomial = polynomial_of_bound(rng, size, spin, bound)
        assert polynomial.bound == bound
        table = tabulated(polynomial)
        low = int(rng.integers(1, size + 1))
        found = run_slabs(LowestLevels(polynomial, Layout(low, size - low, 0), 4, 10))
        energies, counts = np.unique(table, return_counts=True)
        assert found["energies"].tolist() == energies[:4].tolist()
        assert found["counts"][:3].tolist() == counts[:3].tolist()


@pytest.mark.parametrize(
    ("bound", "kind"), [(2**15 - 1, np.int16), (2**15, np.int32), (2**31 - 1, np.int32), (2**31, np.int64)]
)
def test_the_narrowest_type_that_the_bound_allows_is_taken(bound: int, kind: type[np.signedinteger]) -> None:
    polynomial = Polynomial(4, True, np.array([1, 2, 0b1100]), np.array([bound - 1, -1, 2**40]))
    assert integer_type(polynomial, Layout(2, 2, 0)) is kind
    assert integer_type(polynomial, Layout(3, 1, 0)) is np.int64


@pytest.fixture
def _walk_everything(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(exhaustive, "TABULATED", -1)
    monkeypatch.setattr(exhaustive, "WALKED", -1)


def wide_model(rng: np.random.Generator, spread: int) -> Hamiltonian:
    """Weights far beyond int64 whose differences are as small as one: many states lie within the rounding."""
    size = int(rng.integers(2, 11))
    terms: dict[tuple[str, ...], int] = {}
    for _ in range(int(rng.integers(1, 3 * size))):
        product = rng.choice(size, int(rng.integers(1, min(6, size) + 1)), replace=False)
        weight = int(rng.integers(-3, 4)) * 2**70 + int(rng.integers(-spread, spread + 1))
        terms[tuple(f"v{i}" for i in sorted(product))] = weight
    terms |= {("v0",): 2**71 + 1, ("v1",): 1}
    return Hamiltonian(terms, domain=str(rng.choice(["spin", "boolean"])), labels=[f"v{i}" for i in range(size)])


@pytest.mark.usefixtures("_walk_everything")
@pytest.mark.parametrize("spread", [0, 1, 1000, 2**13, 2**15, 2**60])
def test_weights_beyond_int64_give_exact_levels_by_the_rounded_walk(spread: int) -> None:
    rng = np.random.default_rng(spread % 97)
    for _ in range(100):
        H = wide_model(rng, spread)
        assert H.weight_bound >= 2**62
        count, limit = int(rng.integers(1, 6)), int(rng.choice([0, 2, 1000]))
        expected = spectrum_by_transform(H, count, limit, "exhaustion")
        for mine, theirs in zip(exhaustive.low_levels(H, count, limit), expected, strict=True):
            assert (mine.energy, mine.degeneracy, mine.gap) == (theirs.energy, theirs.degeneracy, theirs.gap)
            assert np.array_equal(mine.states, theirs.states)


def test_the_rounding_separates_no_equal_energies_and_loses_no_candidate() -> None:
    """Many slabs, each told what the others found."""
    rng = np.random.default_rng(3)
    for _ in range(100):
        polynomial = polynomial_of(wide_model(rng, 5))
        size = polynomial.size
        coarse, window = rounded(polynomial)
        assert coarse.weights.dtype == np.int64
        assert coarse.bound < 2**62
        fixed = int(rng.integers(0, min(4, size)))
        task = Candidates(coarse, Layout(1, size - 1 - fixed, fixed), 3, window)
        found = exact_levels(polynomial, run_slabs(task), 3, 1000)
        table = tabulated(polynomial)
        energies = sorted(set(table.tolist()))
        assert found["energies"].tolist() == energies[:3]
        for level, energy in enumerate(energies[:2]):
            states = found["states"][found["bounds"][level] : found["bounds"][level + 1]]
            assert states.tolist() == [state for state, value in enumerate(table) if value == energy]


@pytest.mark.usefixtures("_walk_everything")
def test_states_that_rounding_puts_in_the_wrong_order_are_put_right() -> None:
    """Ten booleans of -1.49 units each (rounded to -1), or nine of -1.51 (rounded to -2), or one of -40: never two
    kinds."""
    unit = 2**41
    few = {(f"x{i}",): -149 * unit // 100 for i in range(10)}
    many = {(f"y{i}",): -151 * unit // 100 for i in range(9)}
    apart = {(x, y): 2**94 for (x,) in few for (y,) in many}
    H = Hamiltonian(few | many | apart | {("x0", "x1", "y0"): 1}, domain="boolean")
    polynomial = polynomial_of(H)
    coarse, window = rounded(polynomial)
    energies = tabulated(coarse)
    best = int(np.argmin(tabulated(polynomial)))
    assert energies[best] > energies.min() + window // 4
    level = exhaustive.ground_states(H)
    assert level.energy == sum(few.values())
    assert level.degeneracy == 1

    alone = {(x, "z"): 2**94 for (x,) in (few | many)}
    second = exhaustive.ground_states(H + Hamiltonian({("z",): -40 * unit} | alone, domain="boolean"))
    assert second.energy == -40 * unit
    assert second.gap == level.energy - second.energy


def test_float_weights_of_a_large_model_are_answered_exactly() -> None:
    """Shortest decimals of random floats need 60 bits each: 22 spins, every field and pair."""
    rng = np.random.default_rng(11)
    pairs = [(i, j) for i in range(22) for j in range(i)]
    terms = {(f"v{i}", f"v{j}"): float(rng.normal()) for i, j in pairs}
    terms |= {(f"v{i}",): float(rng.normal()) for i in range(22)}
    H = Hamiltonian(terms, domain="spin")
    assert H.weight_bound >= 2**62
    expected = spectrum_by_transform(H.rounded(Fraction(1, 10**12)).model, 1)[0]
    found = exhaustive.ground_states(H)
    assert found.degeneracy == 1
    assert np.array_equal(found.states, expected.states)
    assert found.energy == H.energy(found.states[0])


def test_more_candidates_than_can_be_listed_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(candidate_walk, "CANDIDATE_LIMIT", 2**10)
    terms = {("v0",): 2**80} | {(f"v{i}",): 1 for i in range(1, 21)} | {("v21",): 2**80 + 1}
    with pytest.raises(LimitError, match=r"H\.rounded"):
        exhaustive.ground_states(Hamiltonian(terms, domain="boolean"))


def test_counting_refuses_weights_beyond_int64_with_what_else_would_do() -> None:
    wide = Hamiltonian({(f"v{i}",): 3**45 + i for i in range(21)}, domain="boolean")
    with pytest.raises(LimitError, match="low_levels, which takes any weights"):
        exhaustive.density_of_states(wide)
    with pytest.raises(LimitError, match=r"H\.rounded"):
        exhaustive.count_local_minima(wide)


def test_small_wide_models_are_counted_exactly() -> None:
    H = wide_model(np.random.default_rng(5), 2)
    assert exhaustive.density_of_states(H) == density_by_transform(H)
    assert exhaustive.count_local_minima(H) == local_minima_by_transform(H)
