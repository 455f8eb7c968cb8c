"""The Gray-code walk against the table of all energies: thousands of random models, every use of the bits."""

from __future__ import annotations

import itertools

import numpy as np
import numpy.typing as npt
import pytest

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum import exhaustive, level_walk
from hubokit.spectrum.count_walk import DistinctEnergies, EnergyCounts, LocalMinima
from hubokit.spectrum.derivatives import Layout
from hubokit.spectrum.level_walk import LowestLevels
from hubokit.spectrum.polynomial import Polynomial, polynomial_of
from hubokit.spectrum.slabs import run_slabs
from hubokit.spectrum.transforms import (
    density_by_transform,
    local_minima_by_transform,
    spectrum_by_transform,
    tabulated,
)


def random_model(rng: np.random.Generator, most: int = 16, weight: int = 6) -> Hamiltonian:
    """Any domain, localities 1 to 6, sparse to dense; most are small."""
    size = int(rng.integers(1, rng.integers(2, most + 1) + 1))
    locality = int(rng.integers(1, min(6, size) + 1))
    members, weights = [], []
    for k in range(1, locality + 1):
        count = int(rng.integers(0, 3 * size + 1))
        rows = np.array([rng.choice(size, k, replace=False) for _ in range(count)]).reshape(count, k)
        members.append(rows)
        weights.append(rng.integers(-weight, weight + 1, count))
    return Hamiltonian.from_arrays(
        members, weights, domain=str(rng.choice(["spin", "boolean"])), size=size, resolution="1/3", constant="1/7"
    )


def random_layout(rng: np.random.Generator, size: int) -> Layout:
    low = int(rng.integers(0, size + 1))
    fixed = int(rng.integers(0, min(3, size - low) + 1))
    return Layout(low, size - low - fixed, fixed)


def assert_levels(
    polynomial: Polynomial, layout: Layout, most: int, limit: int, table: npt.NDArray[np.int64]
) -> None:
    found = run_slabs(LowestLevels(polynomial, layout, most, limit))
    energies, counts = np.unique(table, return_counts=True)
    assert found["energies"].tolist() == energies[:most].tolist()
    listed = min(most - 1, len(energies)) if len(energies) >= most else len(energies)
    assert found["counts"][:listed].tolist() == counts[:listed].tolist()
    for level in range(listed):
        states = found["states"][found["bounds"][level] : found["bounds"][level + 1]]
        assert states.tolist() == np.flatnonzero(table == energies[level])[:limit].tolist()


def test_little_room_for_states_changes_no_list(monkeypatch: pytest.MonkeyPatch) -> None:
    """The room is used up again and again, in the middle of blocks and of levels that are later forgotten."""
    monkeypatch.setattr(level_walk, "_NOTES", 8)
    rng = np.random.default_rng(50)
    for _ in range(300):
        size, low = int(rng.integers(5, 10)), int(rng.integers(0, 4))
        masks = np.unique(rng.integers(1, 1 << size, int(rng.integers(1, 4))))
        polynomial = Polynomial(size, bool(rng.integers(2)), masks, rng.choice([-2, -1, 1], len(masks)))
        most, limit = int(rng.integers(2, 5)), int(rng.integers(0, 12))
        assert_levels(polynomial, Layout(low, size - low, 0), most, limit, tabulated(polynomial))


@pytest.mark.parametrize("seed", range(4))
def test_levels_counts_and_minima_of_random_models_agree_with_the_table(seed: int) -> None:
    rng = np.random.default_rng(seed)
    for _ in range(400):
        H = random_model(rng, most=12)
        polynomial, layout = polynomial_of(H), random_layout(rng, H.size)
        table = tabulated(polynomial)
        assert_levels(polynomial, layout, int(rng.integers(1, 6)), int(rng.choice([0, 1, 3, 1000])), table)

        energies, counts = np.unique(table, return_counts=True)
        bound = polynomial.bound
        step = 2 if H.domain == "spin" else 1
        bins = 2 * bound // step + 1
        binned = run_slabs(EnergyCounts(polynomial, layout, -bound, step, bins))["counts"]
        used = np.flatnonzero(binned)
        assert (-bound + step * used).tolist() == energies.tolist()
        assert binned[used].tolist() == counts.tolist()

        distinct = run_slabs(DistinctEnergies(polynomial, layout))
        assert distinct["energies"].tolist() == energies.tolist()
        assert distinct["counts"].tolist() == counts.tolist()

        minima = run_slabs(LocalMinima(polynomial, (), layout))["total"]
        assert minima.tolist() == [local_minima_by_transform(H)]


@pytest.fixture
def _walk_everything(monkeypatch: pytest.MonkeyPatch) -> None:
    """Small models take the way of large ones: symmetry, then the walk."""
    monkeypatch.setattr(exhaustive, "TABULATED", -1)
    monkeypatch.setattr(exhaustive, "WALKED", -1)


@pytest.mark.usefixtures("_walk_everything")
@pytest.mark.parametrize("seed", range(4))
def test_public_functions_agree_with_the_oracle(seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    for _ in range(250):
        H = random_model(rng, most=16)
        count, limit = int(rng.integers(1, 5)), int(rng.choice([0, 1, 7, 100_000]))
        expected = spectrum_by_transform(H, count, limit, "exhaustion")
        for mine, theirs in zip(exhaustive.low_levels(H, count, limit), expected, strict=True):
            assert (mine.energy, mine.degeneracy, mine.gap, mine.complete, mine.method) == (
                theirs.energy,
                theirs.degeneracy,
                theirs.gap,
                theirs.complete,
                theirs.method,
            )
            assert mine.states.dtype == np.int8
            assert np.array_equal(mine.states, theirs.states)
        assert exhaustive.density_of_states(H) == density_by_transform(H)
        assert exhaustive.count_local_minima(H) == local_minima_by_transform(H)


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_a_model_above_the_table_sizes_is_walked_to_the_same_answer(domain: str) -> None:
    rng = np.random.default_rng(7)
    members = [np.array(list(itertools.combinations(range(21), k))) for k in (1, 2, 3)]
    H = Hamiltonian.from_arrays(members, [rng.integers(-4, 5, len(rows)) for rows in members], domain=domain)
    expected = spectrum_by_transform(H, 6, 3, "exhaustion")
    found = exhaustive.low_levels(H, 6, 3)
    assert [str(level) for level in found] == [str(level) for level in expected]
    assert all(np.array_equal(a.states, b.states) for a, b in zip(found, expected, strict=True))
    assert exhaustive.density_of_states(H) == density_by_transform(H)
    assert exhaustive.count_local_minima(H) == local_minima_by_transform(H)


@pytest.mark.usefixtures("_walk_everything")
def test_a_huge_degeneracy_is_counted_and_cut_in_lift_order() -> None:
    """One parity equation on 16 spins, and a field that breaks the symmetry of the last one."""
    H = Hamiltonian.from_arrays([[[15]], [list(range(6))]], [[1], [-3]], domain="boolean", size=16)
    level = exhaustive.ground_states(H, limit=50)
    oracle = spectrum_by_transform(H, 1, 50)[0]
    assert level.degeneracy == oracle.degeneracy == 2**9
    assert np.array_equal(level.states, oracle.states)
    assert not level.complete


@pytest.mark.parametrize("limit", [0, 1, 1000, 70_000, 200_000])
def test_the_notes_of_states_keep_the_first_in_lift_order_when_they_overflow(limit: int) -> None:
    polynomial = Polynomial(18, False, np.array([1 << 17, 3]), np.array([1, 1]))
    table = tabulated(polynomial)
    assert_levels(polynomial, Layout(8, 9, 1), 3, limit, table)
    assert_levels(polynomial, Layout(8, 10, 0), 3, limit, table)


@pytest.mark.parametrize("size", [0, 1, 2, 30])
@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_a_model_without_terms_has_one_level(size: int, domain: str) -> None:
    H = Hamiltonian.from_arrays([], [], domain=domain, size=size, constant="5/2")
    level = exhaustive.ground_states(H, limit=4)
    assert level.energy == H.constant
    assert level.degeneracy == 2**size
    assert level.gap is None
    first = 1 if domain == "spin" else 0
    assert (level.states[:1] == first).all()
    assert level.states.shape == (min(4, 2**size), size)
    assert exhaustive.density_of_states(H).counts == [2**size]
    assert exhaustive.count_local_minima(H) == 2**size


def test_counts_and_limits_out_of_range_are_refused() -> None:
    H = Hamiltonian({("a",): 1}, domain="spin")
    with pytest.raises(InputError, match="0 levels"):
        exhaustive.low_levels(H, 0)
    with pytest.raises(InputError, match="limit of states is -1"):
        exhaustive.ground_states(H, limit=-1)
