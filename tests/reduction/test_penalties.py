"""Two-sided penalties from interval bounds: P = E for every state and exactly one best auxiliary setting."""

from __future__ import annotations

import itertools
from fractions import Fraction

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.terms import canonical_blocks
from hubokit.reduction.pairs import PairVariables, factors_of, rewritten
from hubokit.reduction.penalties import SPIN_DIVISOR, BooleanForm, Strengths, interval_strengths, penalty_parts


def all_states(size: int, domain: str) -> np.ndarray:
    """Every state of `size` variables, one a row."""
    values = (1, -1) if domain == "spin" else (0, 1)
    return np.array(list(itertools.product(values, repeat=size)), dtype=np.int64)


def low_autocorrelation(size: int) -> Hamiltonian:
    """E(s) = sum over k of (sum over i of s_i s_{i+k})^2 (Packebusch & Mertens 2016)."""
    terms: dict[tuple[str, ...], int] = {}
    for k in range(1, size):
        for i, j in itertools.product(range(size - k), repeat=2):
            odd: set[int] = set()
            for position in (i, i + k, j, j + k):
                odd ^= {position}
            key = tuple(f"s{position}" for position in sorted(odd))
            terms[key] = terms.get(key, 0) + 1
    return Hamiltonian(terms, domain="spin", labels=[f"s{i}" for i in range(size)])


def energies_of_reduced(source: Hamiltonian, pairs: PairVariables, gap: int, weaken: int = 0) -> np.ndarray:
    """F(x, a) in units of the source's resolution times its divisor, shape (2**n, 2**a)."""
    parts = []
    for block in source.blocks:
        if block.locality <= 2:
            parts.append((block.members, block.weights))
        else:
            factors = factors_of(block.members, pairs, source.domain)
            parts += rewritten(block.weights, factors, pairs, source.domain)
    form = BooleanForm.of(parts, source.domain, pairs.size + pairs.count)
    strengths = interval_strengths(form, pairs, gap)
    strengths = Strengths(strengths.one - weaken, strengths.both - weaken)
    divisor = SPIN_DIVISOR if source.domain == "spin" else 1
    parts = [(members, weights * divisor) for members, weights in parts]
    constant, blocks = canonical_blocks([*parts, *penalty_parts(pairs, strengths, source.domain)], source.domain)
    originals, settings = all_states(pairs.size, source.domain), all_states(pairs.count, source.domain)
    table = np.full((len(originals), len(settings)), constant, np.int64)
    slopes = np.zeros((len(originals), pairs.count), np.int64)
    for block in blocks:
        for members, weight in zip(block.members.tolist(), block.weights.tolist(), strict=True):
            outer = [v for v in members if v < pairs.size]
            inner = [v - pairs.size for v in members if v >= pairs.size]
            if len(inner) == 1:
                slopes[:, inner[0]] += weight * np.prod(originals[:, outer], axis=1)
            elif outer:
                table += (weight * np.prod(originals[:, outer], axis=1))[:, None]
            else:
                table += weight * np.prod(settings[:, inner], axis=1)
    return table + slopes @ settings.T


def assert_one_to_one(source: Hamiltonian, pairs: PairVariables, gap: int) -> None:
    divisor = SPIN_DIVISOR if source.domain == "spin" else 1
    table = np.sort(energies_of_reduced(source, pairs, gap), axis=1)
    expected = source.integer_energies(all_states(source.size, source.domain).astype(np.int8)) * divisor
    assert table[:, 0].tolist() == expected.tolist()
    assert (table[:, 1] - table[:, 0]).min() >= gap * divisor


def random_model(rng: np.random.Generator, size: int, domain: str, terms: int, longest: int) -> Hamiltonian:
    """Integer weights from -4 to 4 on random products of two to `longest` variables, some fields too."""
    chosen: dict[tuple[str, ...], int] = {}
    for _ in range(terms):
        locality = int(rng.integers(1, longest + 1))
        members = sorted(rng.choice(size, locality, replace=False))
        chosen[tuple(f"v{i}" for i in members)] = int(rng.integers(-4, 5))
    return Hamiltonian(chosen, domain=domain, labels=[f"v{i}" for i in range(size)])


PAIRS = {
    "boolean": PairVariables.of(4, [(0, 1), (2, 3), (2, 4)]),
    "spin": PairVariables.of(4, [(0, 1), (2, 3)]),
}
"""Enough for every product of the four variables: each cubic holds a pair, the quartic splits."""


@pytest.mark.parametrize("domain", ["boolean", "spin"])
@pytest.mark.parametrize("gap", [1, 2, 5])
def test_every_state_keeps_its_energy_and_one_setting_on_random_models(domain: str, gap: int) -> None:
    rng = np.random.default_rng(gap)
    for _ in range(60):
        assert_one_to_one(random_model(rng, 4, domain, 8, 4), PAIRS[domain], gap)


@pytest.mark.parametrize("domain", ["boolean", "spin"])
def test_pairs_of_pairs_and_product_variables_keep_one_setting_too(domain: str) -> None:
    rng = np.random.default_rng(7)
    if domain == "boolean":
        pairs = PairVariables.of(5, [(0, 1), (2, 5), (4, 6), (2, 3), (3, 4)])
    else:
        operands = np.array([(0, 1), (0, 1), (2, 3), (4, 6), (2, 4)], np.int32)
        pairs = PairVariables(5, operands, np.array([-1, 5, -1, -1, -1], np.int32))
    keys = [(0, 1, 2, 3, 4), (0, 1, 2), (0, 1, 4), (0, 1, 2, 3), (2, 3, 4), (1, 2), (3,)]
    for _ in range(40):
        weights = rng.integers(-4, 5, len(keys))
        terms = {tuple(f"v{i}" for i in key): int(w) for key, w in zip(keys, weights, strict=True)}
        source = Hamiltonian(terms, domain=domain, labels=[f"v{i}" for i in range(5)])
        assert_one_to_one(source, pairs, 1)


@pytest.mark.parametrize("size", [6, 7, 8])
def test_low_autocorrelation_keeps_one_setting_at_every_state(size: int) -> None:
    pairs = [(i, j) for i in range(size) for j in range(i + 2, size, 2)]
    assert_one_to_one(low_autocorrelation(size), PairVariables.of(size, pairs), 1)


@pytest.mark.parametrize("domain", ["boolean", "spin"])
def test_a_margin_of_nothing_keeps_the_energies_and_a_weaker_penalty_loses_them(domain: str) -> None:
    source = Hamiltonian({("a", "b", "c"): -3}, domain=domain)
    pairs = PairVariables.of(3, [(0, 1)])
    unit = 4 if domain == "spin" else 1
    expected = source.integer_energies(all_states(3, domain).astype(np.int8)) * unit
    assert energies_of_reduced(source, pairs, 0).min(axis=1).tolist() == expected.tolist()
    assert energies_of_reduced(source, pairs, 0, weaken=1).min(axis=1).tolist() != expected.tolist()


def test_the_two_sides_are_bounded_apart() -> None:
    pairs = PairVariables.of(3, [(0, 1)])
    for weight, one, both in ((5, 1, 6), (-5, 6, 1)):
        form = BooleanForm.of([(np.array([[3, 2]]), np.array([weight]))], "boolean", 4)
        strengths = interval_strengths(form, pairs, 1)
        assert (strengths.one.tolist(), strengths.both.tolist()) == ([one], [both])


def test_weights_beyond_64_bits_give_penalties_beyond_64_bits() -> None:
    weight = 10**40
    form = BooleanForm.of([(np.array([[3, 2]]), np.array([weight], dtype=object))], "boolean", 4)
    strengths = interval_strengths(form, PairVariables.of(3, [(0, 1)]), 1)
    assert strengths.both.tolist() == [weight + 1]
    assert Fraction(int(strengths.one[0])) == 1
