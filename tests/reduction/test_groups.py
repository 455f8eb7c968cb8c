"""Terms on four variables are gathered, each once, and reduced with one auxiliary a group."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import combinations, product

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.groups import CANDIDATE_LIMIT, METHOD, gathered
from hubokit.reduction.reduce import reduce


def four_variable_function(seed: int, domain: str) -> Hamiltonian:
    """A random polynomial of four variables with whole weights, some of them zero."""
    chance = random.Random(seed)
    terms = {
        subset: chance.choice([0, 0, 1, -1, 2, -3, 5, -8])
        for size in range(5)
        for subset in combinations("abcd", size)
    }
    return Hamiltonian(terms, domain, labels=list("abcd"), convention=["1-2x", "2x-1"][seed % 2])


@pytest.mark.parametrize("seed", range(60))
@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_any_function_of_four_variables_takes_one_auxiliary_and_no_tie(seed: int, domain: str) -> None:
    H = four_variable_function(seed, domain)
    R = reduce(H)
    assert len(R.auxiliaries) <= 1
    values = (1, -1) if domain == "spin" else (0, 1)
    for state in product(values, repeat=4):
        rows = [(*state, *rest) for rest in product(values, repeat=len(R.auxiliaries))]
        energies = [R.model.energy(row) for row in rows]
        assert min(energies) == H.energy(state)
        assert energies.count(min(energies)) == 1
        assert len(energies) == 1 or max(energies) - min(energies) >= H.resolution


def test_every_term_is_served_once_and_only_terms_that_exist() -> None:
    chance = random.Random(4)
    for _ in range(30):
        labels = list("abcdefg")
        terms = {}
        for _ in range(14):
            terms[tuple(sorted(chance.sample(labels, chance.choice([2, 3, 3, 3, 4]))))] = chance.choice([-2, 1, 3])
        H = Hamiltonian(terms, "spin", labels=labels)
        grouping = gathered(H)
        if grouping is None or isinstance(grouping, str):
            continue
        found: dict[tuple[str, ...], int] = {}
        for members, function in zip(grouping.members.tolist(), grouping.functions.tolist(), strict=True):
            names = [labels[i] for i in members]
            products = [tuple(names), *(tuple(n for n in names if n != out) for out in names)]
            for key, weight in zip(products, function, strict=True):
                if weight:
                    assert key not in found
                    found[key] = weight
        taken = {}
        for block in H.blocks:
            if block.locality in (3, 4):
                mask = grouping.taken[block.locality]
                for row, weight in zip(block.members[mask].tolist(), block.weights[mask].tolist(), strict=True):
                    taken[tuple(labels[i] for i in row)] = weight
        assert found == taken


def test_a_quartic_term_takes_its_cubic_terms_along() -> None:
    H = Hamiltonian({tuple("abcd"): 1, tuple("abc"): 1, tuple("bcd"): 1, tuple("cde"): 1}, "spin")
    R = reduce(H, method=METHOD)
    assert len(R.auxiliaries) == 2


def test_groups_that_miss_the_gap_asked_for_are_left_to_gadgets_of_their_own() -> None:
    H = Hamiltonian({tuple("abc"): 3, tuple("abd"): 5, tuple("acd"): 7, tuple("bcd"): 9}, "spin")
    assert len(reduce(H).auxiliaries) == 1
    R = reduce(H, method=METHOD, auxiliary_gap=1000)
    assert len(R.auxiliaries) == 4
    values = np.array(list(product((1, -1), repeat=8)), np.int8)
    energies = R.model.integer_energies(values).reshape(16, 16)
    excess = energies - energies.min(axis=1)[:, None]
    assert int(excess[excess > 0].min()) * R.model.resolution >= 1000


def test_too_many_candidates_are_refused_with_the_number() -> None:
    count = 1500
    others = np.arange(2, count + 2)
    members = np.stack([np.zeros(count, int), np.ones(count, int), others], axis=1)
    found = gathered(Hamiltonian.from_arrays([members], [np.ones(count, int)], "spin"))
    assert count * (count - 1) // 2 > CANDIDATE_LIMIT
    assert found == f"{count * (count - 1) // 2:,} sets of four variables to look at; at most {CANDIDATE_LIMIT:,} are"


def test_rational_weights_in_both_conventions_stay_exact() -> None:
    for convention in ("1-2x", "2x-1"):
        H = Hamiltonian(
            {tuple("abc"): "1/3", tuple("abd"): "-2/7", tuple("abcd"): 2}, "boolean", convention=convention
        )
        R = reduce(H, method=METHOD, auxiliary_gap="1/1000")
        for state in product((0, 1), repeat=4):
            named = dict(zip("abcd", state, strict=True))
            energies = [R.model.energy({**named, R.auxiliaries[0]: value}) for value in (0, 1)]
            assert min(energies) == H.energy(named)
            assert abs(energies[0] - energies[1]) >= Fraction(1, 1000)
