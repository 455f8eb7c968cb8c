"""Deductions and excluded configurations keep the ground energy and the set of ground states, by enumeration."""

from __future__ import annotations

import random
from itertools import product

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.deductions import Deduced, deduced, indicator
from hubokit.reduction.reduce import PREFERENCES, reduce
from hubokit.validation.check import check


def random_model(seed: int) -> Hamiltonian:
    """Three to seven variables with heavy fields and pairs beside light longer terms, so that much is excluded."""
    chance = random.Random(seed)
    labels = [f"v{i}" for i in range(chance.randint(3, 7))]
    heavy = chance.choice([2, 5, 9])
    terms: dict[tuple[str, ...], int] = {}
    for _ in range(chance.randint(4, 16)):
        members = chance.sample(labels, min(len(labels), chance.choice([1, 1, 2, 2, 3, 3, 4, 5])))
        most = heavy if len(members) < 3 else 3
        terms[tuple(sorted(members))] = chance.randint(-most, most)
    return Hamiltonian(
        terms, ("spin", "boolean")[seed % 2], labels=labels, convention=("1-2x", "2x-1")[seed // 2 % 2]
    )


def all_states(H: Hamiltonian) -> np.ndarray:
    """Every state, in lift order."""
    return np.array(list(product((1, -1) if H.domain == "spin" else (0, 1), repeat=H.size)), np.int8)


def energies(H: Hamiltonian) -> list[object]:
    """Exact energies of every state."""
    return [H.constant + int(k) * H.resolution for k in H.integer_energies(all_states(H))]


def found_in(seeds: range) -> dict[int, tuple[Hamiltonian, Deduced]]:
    """The random models of these seeds in which something is deduced."""
    models = ((seed, random_model(seed)) for seed in seeds)
    return {seed: (H, found) for seed, H in models if (found := deduced(H)) is not None}


FOUND = found_in(range(600))


def test_hundreds_of_models_keep_their_ground_states_and_ground_energy() -> None:
    for H, found in FOUND.values():
        before, after = energies(H), energies(found.model)
        assert min(before) == min(after)
        assert [e == min(before) for e in before] == [e == min(after) for e in after]
    assert len(FOUND) > 300


def test_every_rule_is_met_in_both_domains() -> None:
    met = {(H.domain, entry["rule"]) for H, found in FOUND.values() for entry in found.found}
    assert met == {(d, r) for d in ("spin", "boolean") for r in ("value", "deduction", "configuration")}


def test_no_ground_state_has_an_excluded_configuration() -> None:
    for H, found in list(FOUND.values())[:150]:
        before = energies(H)
        ground = all_states(H)[[e == min(before) for e in before]]
        for entry in found.found:
            columns = [H.positions[label] for label in entry["variables"]]
            assert not (ground[:, columns] == entry["excluded"]).all(axis=1).any()


def test_longer_terms_grow_fewer_or_shorter() -> None:
    for H, found in FOUND.values():
        weight = [sum(len(b) * b.locality for b in one.blocks if b.locality > 2) for one in (H, found.model)]
        assert weight[1] < weight[0]


def test_energies_change_so_that_no_more_than_ground_states_may_be_claimed() -> None:
    assert any(energies(H) != energies(found.model) for H, found in FOUND.values())


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_an_indicator_is_zero_everywhere_but_at_its_setting(domain: str) -> None:
    values = (1, -1) if domain == "spin" else (0, 1)
    for setting in product(values, repeat=3):
        ones = indicator((0, 1, 2), setting, domain)
        for state in product(values, repeat=3):
            value = sum(weight * int(np.prod([state[i] for i in item])) for item, weight in ones.items())
            assert (value > 0) == (state == setting)
            assert value >= 0


def test_nothing_is_deduced_where_no_configuration_is_excluded() -> None:
    assert deduced(Hamiltonian({("a", "b", "c"): 1}, "spin")) is None
    assert deduced(Hamiltonian({("a", "b"): 9, ("a",): 1}, "boolean")) is None


def test_ties_are_not_excluded() -> None:
    # x = 1 costs nothing more than x = 0 when b c = 1 and a = 1: both are ground states.
    H = Hamiltonian({("x",): 1, ("x", "b", "c"): -1, ("b",): -1, ("c",): -1}, "boolean")
    found = deduced(H)
    if found is not None:
        before, after = energies(H), energies(found.model)
        assert [e == min(before) for e in before] == [e == min(after) for e in after]
    assert sum(e == min(energies(H)) for e in energies(H)) == 2


def test_huge_weights_stay_exact() -> None:
    big = 10**30
    H = Hamiltonian({("a", "b", "c"): big, ("a", "b"): big + 1, ("a",): -1, ("c",): -1}, "boolean")
    found = deduced(H)
    assert found is not None
    before, after = energies(H), energies(found.model)
    assert [e == min(before) for e in before] == [e == min(after) for e in after]


def test_the_handbook_example_needs_no_auxiliary() -> None:
    # Dattani 2019, "Quadratization in discrete optimization and quantum mechanics", the opening example.
    H = Hamiltonian({("b1", "b2"): 1, ("b2", "b3"): 1, ("b3", "b4"): 1, ("b1", "b2", "b3"): -4}, "boolean")
    R = reduce(H, keep="ground-states")
    assert (R.model.locality, R.auxiliaries) == (2, ())
    least = min(energies(R.model))
    assert least == -2
    assert [tuple(s) for s, e in zip(all_states(H).tolist(), energies(R.model), strict=True) if e == least] == [
        (1, 1, 1, 0)
    ]


@pytest.mark.parametrize("prefer", PREFERENCES)
def test_check_proves_ground_states_of_what_was_reduced_after_deductions(prefer: str) -> None:
    used = 0
    for seed in list(FOUND)[:8]:
        R = reduce(FOUND[seed][0], keep="ground-states", prefer=prefer)
        verdict = check(R)
        assert "ground-states" in verdict.asked
        assert verdict.claims["ground-states"].status == "proved"
        used += [step.name for step in R.trail.steps] == ["deduction", "reduction"]
    assert used > 2


@pytest.mark.parametrize("keep", ["energies", "one-to-one"])
def test_only_ground_states_allow_deductions(keep: str) -> None:
    for seed in list(FOUND)[:8]:
        R = reduce(FOUND[seed][0], keep=keep)
        assert [step.name for step in R.trail.steps] == ["reduction"]
        assert check(R).claims["energies"].status == "proved"
