"""Pair substitution: the rewritten model equals the source wherever the auxiliaries have their right values."""

from __future__ import annotations

import itertools
from fractions import Fraction

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.terms import canonical_blocks
from hubokit.reduction.pairs import PairVariables, balanced, factors_of, rewritten


def all_states(size: int, domain: str) -> np.ndarray:
    """Every state of `size` variables, one a row."""
    values = (1, -1) if domain == "spin" else (0, 1)
    return np.array(list(itertools.product(values, repeat=size)), dtype=np.int8)


def monomial(size: int, domain: str, weight: int = 3) -> Hamiltonian:
    """One product of all `size` variables."""
    return Hamiltonian({tuple(f"v{i}" for i in range(size)): weight}, domain=domain)


def quadratic_energies(source: Hamiltonian, pairs: PairVariables) -> np.ndarray:
    """Energies of the rewritten source at every original state, the auxiliaries at their right values."""
    parts = []
    for block in source.blocks:
        factors = factors_of(block.members, pairs, source.domain)
        parts += rewritten(block.weights, factors, pairs, source.domain)
    constant, blocks = canonical_blocks(parts, source.domain)
    assert all(block.locality <= 2 for block in blocks)
    states = all_states(source.size, source.domain)
    full = np.hstack([states, pairs.values(states, source.domain)]).astype(np.int64)
    energy = np.full(len(full), constant, np.int64)
    for block in blocks:
        energy += (np.prod(full[:, block.members], axis=2) * block.weights).sum(axis=1)
    return energy * int(source.resolution)


@pytest.mark.parametrize(
    ("domain", "size", "pairs"),
    [
        ("boolean", 3, [(0, 1)]),
        ("boolean", 3, [(1, 2)]),
        ("spin", 3, [(0, 1)]),
        ("spin", 3, [(0, 2)]),
        ("boolean", 4, [(0, 1), (2, 3)]),
        ("boolean", 4, [(0, 2), (1, 3)]),
        ("boolean", 4, [(0, 3), (1, 2)]),
        ("boolean", 4, [(0, 1), (2, 4)]),
        ("boolean", 4, [(1, 3), (0, 4)]),
        ("spin", 4, [(0, 1), (2, 3)]),
        ("spin", 4, [(0, 2), (1, 3)]),
        ("spin", 4, [(0, 3), (1, 2)]),
        ("boolean", 5, [(0, 1), (2, 3), (4, 5)]),
        ("boolean", 6, [(0, 1), (2, 3), (6, 7), (4, 5)]),
        ("boolean", 7, [(0, 1), (2, 3), (4, 5), (7, 8), (6, 9)]),
    ],
)
def test_one_product_is_its_factors_product_at_every_state(
    domain: str, size: int, pairs: list[tuple[int, int]]
) -> None:
    source = monomial(size, domain)
    energies = quadratic_energies(source, PairVariables.of(size, pairs))
    assert energies.tolist() == source.energies(all_states(size, domain)).tolist()


@pytest.mark.parametrize("size", [5, 6])
def test_longer_spin_products_use_product_variables(size: int) -> None:
    operands = [(0, 1), (0, 1)] + ([(2, 3), (4, size + 1)] if size == 5 else [(2, 3), (2, 3), (4, 5), (7, 9)])
    companions = [-1, size] + ([-1, -1] if size == 5 else [-1, size + 2, -1, -1])
    pairs = PairVariables(size, np.array(operands, np.int32), np.array(companions, np.int32))
    source = monomial(size, "spin")
    assert quadratic_energies(source, pairs).tolist() == source.energies(all_states(size, "spin")).tolist()


def test_right_values_follow_the_definitions_through_pairs_of_pairs() -> None:
    pairs = PairVariables(3, np.array([(0, 1), (0, 1), (2, 4)], np.int32), np.array([-1, 3, -1], np.int32))
    states = all_states(3, "spin")
    pair, product, nested = pairs.values(states, "spin").T
    assert np.array_equal(pair, np.where((states[:, 0] == -1) & (states[:, 1] == -1), -1, 1))
    assert np.array_equal(product, states[:, 0] * states[:, 1])
    assert np.array_equal(nested, np.where((states[:, 2] == -1) & (product == -1), -1, 1))
    assert pairs.depths.tolist() == [1, 2, 3]


def test_weights_beyond_64_bits_stay_exact() -> None:
    weight = 10**30 + 1
    pairs = PairVariables.of(4, [(0, 1), (2, 3)])
    parts = rewritten(np.array([weight], dtype=object), np.array([[4, 5]]), pairs, "spin")
    _, blocks = canonical_blocks(parts, "spin")
    assert max(abs(int(w)) for block in blocks for w in block.weights) == 4 * weight
    assert Fraction(int(blocks[0].weights[0])) == weight


@pytest.mark.parametrize(
    ("pairs", "text"),
    [
        ([(0, 0)], "two different variables"),
        ([(0, 5)], "defined before"),
        ([(0, 1), (1, 0)], "given twice"),
    ],
)
def test_pairs_that_define_nothing_are_refused(pairs: list[tuple[int, int]], text: str) -> None:
    with pytest.raises(InputError, match=text):
        PairVariables.of(3, pairs)


@pytest.mark.parametrize("size", [3, 4, 5])
def test_a_term_that_the_pairs_do_not_cover_is_named(size: int) -> None:
    with pytest.raises(InputError, match=r"\[0, 1, 2"):
        factors_of(np.arange(size)[None, :], PairVariables.of(9, [(7, 8)]), "boolean")


@pytest.mark.parametrize("domain", ["boolean", "spin"])
def test_terms_that_have_a_choice_spread_over_the_pairs_and_keep_their_value(domain: str) -> None:
    pairs = PairVariables.of(4, list(itertools.combinations(range(4), 2)))
    rows, weights = np.array([[0, 1, 2], [0, 1, 3], [0, 2, 3], [1, 2, 3]]), np.array([7, -5, 3, 2])
    quartic, weight = np.array([[0, 1, 2, 3]]), np.array([4])
    before = [factors_of(rows, pairs, domain), factors_of(quartic, pairs, domain)]
    after = balanced([(rows, weights), (quartic, weight)], before, pairs, domain)

    def heaviest(factors: list[np.ndarray]) -> int:
        load = np.zeros(4 + pairs.count, int)
        for one, many in zip(factors, (weights, weight), strict=True):
            np.add.at(load, one.ravel(), np.repeat(np.abs(many), 2))
        return int(load[4:].max())

    assert heaviest(after) < heaviest(before)
    states = all_states(4, domain)
    full = np.hstack([states, pairs.values(states, domain)])
    for members, many, factors in zip((rows, quartic), (weights, weight), after, strict=True):
        _, blocks = canonical_blocks(rewritten(many, factors, pairs, domain), domain)
        constant, _ = canonical_blocks(rewritten(many, factors, pairs, domain), domain)
        value = constant + sum((np.prod(full[:, b.members], axis=2) * b.weights).sum(axis=1) for b in blocks)
        assert np.array_equal(value, np.prod(states[:, members].astype(int), axis=2) @ many)
