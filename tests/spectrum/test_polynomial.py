"""Flips that leave a polynomial unchanged, and the states that stand for all their images."""

from __future__ import annotations

import numpy as np
import pytest

from hubokit.spectrum.polynomial import INT64_BOUND, Polynomial, Symmetry, absolute_sum, symmetry_of
from hubokit.spectrum.transforms import tabulated


def random_polynomial(rng: np.random.Generator, size: int, *, spin: bool) -> Polynomial:
    masks = np.unique(rng.integers(1, 1 << size, int(rng.integers(0, size + 1))))
    return Polynomial(size, spin, masks, rng.integers(1, 9, len(masks)))


@pytest.mark.parametrize("spin", [True, False])
def test_the_flips_are_all_those_that_leave_every_energy_unchanged(spin: bool) -> None:
    rng = np.random.default_rng(spin)
    for _ in range(200):
        polynomial = random_polynomial(rng, int(rng.integers(1, 9)), spin=spin)
        flips = symmetry_of(polynomial).flips
        generated = {0}
        for flip in flips:
            generated |= {flip ^ other for other in generated}
        assert len(generated) == 2 ** len(flips)
        if spin:
            even = [f for f in range(1 << polynomial.size) if not (np.bitwise_count(polynomial.masks & f) & 1).any()]
        else:
            even = [f for f in range(1 << polynomial.size) if not (polynomial.masks & f).any()]
        assert generated == set(even)


@pytest.mark.parametrize("spin", [True, False])
def test_states_with_pivots_at_0_stand_for_their_images(spin: bool) -> None:
    rng = np.random.default_rng(10 + spin)
    for _ in range(200):
        polynomial = random_polynomial(rng, int(rng.integers(1, 9)), spin=spin)
        symmetry, table = symmetry_of(polynomial), tabulated(polynomial)
        reduced = tabulated(polynomial.without(symmetry.pivots).merged())
        everywhere = symmetry.whole(np.arange(len(reduced), dtype=np.uint64))
        assert (table[everywhere.astype(np.int64)] == reduced).all()
        assert (np.diff(everywhere.astype(np.int64)) > 0).all(), "lift order is kept"
        for energy in np.unique(reduced):
            states = np.flatnonzero(table == energy)
            for limit in (0, 1, 3, len(states)):
                # cutting the reduced states at the limit first loses none of the first images
                kept = symmetry.whole(np.flatnonzero(reduced == energy)[:limit].astype(np.uint64))
                assert symmetry.images(kept, limit).tolist() == states[:limit].tolist()


def test_a_spin_model_with_only_even_localities_has_its_mirror_pairs() -> None:
    ring = Polynomial(4, True, np.array([0b1100, 0b0110, 0b0011, 0b1111]), np.ones(4, np.int64))
    assert symmetry_of(ring) == Symmetry(4, (0b1111,))


@pytest.mark.parametrize("spin", [True, False])
def test_a_derivative_is_the_difference_that_one_flip_makes(spin: bool) -> None:
    rng = np.random.default_rng(20 + spin)
    for _ in range(50):
        polynomial = random_polynomial(rng, int(rng.integers(1, 8)), spin=spin)
        table = tabulated(polynomial)
        states = np.arange(len(table))
        for bit in range(polynomial.size):
            derivative = tabulated(polynomial.derivative(bit).merged())
            assert (derivative == table[states | 1 << bit] - table[states & ~(1 << bit)]).all()


def test_values_beyond_int64_are_exact() -> None:
    rng = np.random.default_rng(30)
    for spin in (True, False):
        weights = np.array([int(w) * 10**30 - int(v) for w, v in rng.integers(-9, 10, (12, 2))], dtype=object)
        polynomial = Polynomial(6, spin, np.arange(1, 13), weights)
        states = np.arange(64, dtype=np.uint64)
        assert polynomial.values(states).tolist() == tabulated(polynomial).tolist()


def test_merging_adds_repeats_drops_zeros_and_returns_to_int64() -> None:
    huge = INT64_BOUND
    merged = Polynomial(2, True, np.array([1, 3, 1, 2]), np.array([huge, 5, 1 - huge, 0], dtype=object)).merged()
    assert merged.masks.tolist() == [1, 3]
    assert merged.weights.tolist() == [1, 5]
    assert merged.weights.dtype == np.int64


def test_absolute_sums_do_not_wrap() -> None:
    extreme = np.array([-(2**63), 2**63 - 1, -(2**63)])
    assert absolute_sum(extreme) == 3 * 2**63 - 1
    assert absolute_sum(np.array([-2, 3])) == 5
    assert absolute_sum(np.zeros(0, np.int64)) == 0
