"""Symmetric functions: the form is the function at every count, without ties, and parts are found in models."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import combinations, product

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.gadgets.symmetric import symmetric_form
from hubokit.reduction.reduce import reduce
from hubokit.reduction.symmetric import LARGEST, METHOD, components, symmetric_pieces


@pytest.mark.parametrize("gap", [0, Fraction(1, 2), 1, 3])
def test_the_form_is_the_function_with_the_gap_and_few_auxiliaries(gap: Fraction) -> None:
    chance = random.Random(str(gap))
    for _ in range(400):
        size = chance.randint(2, 10)
        values = [Fraction(chance.choice([0, 0, 1, -1, 2, 5, -3])) for _ in range(size + 1)]
        form = symmetric_form(values, gap)
        assert [form.value(count) for count in range(size + 1)] == values
        assert len(form.brackets) <= size // 2
        for height, slope in form.brackets:
            assert all(abs(height - slope * count) >= gap for count in range(size + 1))


@pytest.mark.parametrize("size", range(3, 12))
def test_a_positive_monomial_takes_the_published_number(size: int) -> None:
    form = symmetric_form([*[0] * size, 1], 1)
    assert len(form.brackets) == (size - 1) // 2


@pytest.mark.parametrize("seed", range(40))
def test_symmetric_models_keep_every_energy(seed: int) -> None:
    chance = random.Random(seed)
    domain = chance.choice(["spin", "boolean"])
    labels = [f"v{i}" for i in range(chance.randint(4, 7))]
    terms: dict[tuple[str, ...], int] = {("v0", "v1"): 5, ("v2",): -3}
    for size in range(3, len(labels) + 1):
        weight = chance.choice([0, 1, -2, 3])
        terms |= dict.fromkeys(combinations(labels, size), weight)
    H = Hamiltonian(terms, domain, labels=labels, convention=chance.choice(["1-2x", "2x-1"]))
    R = reduce(H, method=METHOD)
    assert len(R.auxiliaries) <= len(labels) // 2
    values = (1, -1) if domain == "spin" else (0, 1)
    states = np.array(list(product(values, repeat=R.model.size)), np.int8)
    energies = R.model.integer_energies(states).reshape(2 ** len(labels), -1)
    excess = energies - energies.min(axis=1)[:, None]
    found = [R.model.constant + int(least) * R.model.resolution for least in energies.min(axis=1)]
    assert found == [H.energy(state) for state in product(values, repeat=len(labels))]
    assert ((excess == 0).sum(axis=1) == 1).all()


@pytest.mark.parametrize("size", [10, 20, 30])
def test_all_triples_of_one_weight_take_less_than_half_as_many_auxiliaries_as_variables(size: int) -> None:
    H = Hamiltonian(dict.fromkeys(combinations([f"v{i}" for i in range(size)], 3), 1), "boolean")
    assert len(reduce(H, method=METHOD).auxiliaries) == size // 2 - 1


def test_unasked_only_parts_that_can_be_projected_are_taken() -> None:
    for size in (LARGEST, LARGEST + 1):
        H = Hamiltonian(dict.fromkeys(combinations([f"v{i}" for i in range(size)], 3), 1), "boolean")
        pieces, taken = symmetric_pieces(H, Fraction(1))
        assert len(pieces) == (size == LARGEST)
        assert sum(int(mask.sum()) for mask in taken.values()) == (len(H) if size == LARGEST else 0)


def test_only_whole_parts_of_one_weight_count_as_symmetric() -> None:
    whole = dict.fromkeys(combinations("abcde", 3), 2)
    other = dict.fromkeys(combinations("pqrs", 3), 1)
    H = Hamiltonian(whole | other | {("p", "q", "r"): 3, ("x", "y", "z"): 1}, "boolean")
    pieces, taken = symmetric_pieces(H, Fraction(1))
    assert [[H.labels[i] for i in piece.members] for piece in pieces] == [list("abcde")]
    assert int(taken[3].sum()) == 10
    missing = Hamiltonian(dict.fromkeys(list(whole)[1:], 2), "boolean")
    assert symmetric_pieces(missing, Fraction(1))[0] == []


def test_components_follow_long_chains() -> None:
    rows = np.arange(300)[:, None] + np.array([0, 1, 2])
    H = Hamiltonian.from_arrays([rows[::-1].copy(), [[302, 304]]], [np.ones(300, int), [1]], "spin", size=306)
    labels = components(H)
    assert (labels[:302] == 0).all()
    assert labels[302:].tolist() == [302, 303, 304, 305]
