"""Tightened penalties: smaller, and still proved by projection, which knows nothing of how they were found."""

from __future__ import annotations

import itertools
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.project import project
from hubokit.reduction.covers import PairCoverPlan, covered_form, pair_cover_reduction
from hubokit.reduction.penalties import Strengths
from hubokit.reduction.tightening import group_of, groups, least_strengths, tightened
from hubokit.reduction.tightening_ledger import Ledger


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


def quartic_model(seed: int, domain: str, size: int = 6, terms: int = 7) -> Hamiltonian:
    """Random products of four, with some shorter ones."""
    rng = np.random.default_rng(seed)
    chosen: dict[tuple[str, ...], int] = {("v0",): 1, ("v1", "v2"): -2}
    for _ in range(terms):
        members = np.sort(rng.choice(size, 4, replace=False))
        chosen[tuple(f"v{i}" for i in members)] = int(rng.integers(1, 5)) * int(rng.choice([-1, 1]))
    return Hamiltonian(chosen, domain=domain, labels=[f"v{i}" for i in range(size)])


def built(plan: PairCoverPlan) -> Hamiltonian:
    return plan.build(tuple(f"y{i}" for i in range(plan.auxiliaries)))


def largest(model: Hamiltonian) -> Fraction:
    """The largest absolute coefficient, constant aside."""
    return max(abs(value) for key, value in model.terms() if key)


def excesses(plan: PairCoverPlan) -> np.ndarray:
    """F(x, a) - E(x) in energy units, shape (2**n, 2**a), by enumeration."""
    H, model = plan.source, built(plan)
    values = (1, -1) if H.domain == "spin" else (0, 1)
    states = np.array(list(itertools.product(values, repeat=H.size)), dtype=np.int8)
    settings = np.array(list(itertools.product(values, repeat=plan.auxiliaries)), dtype=np.int8)
    full = np.hstack([np.repeat(states, len(settings), axis=0), np.tile(settings, (len(states), 1))])
    table = model.integer_energies(full).reshape(len(states), -1)
    energies = np.array([int((H.energy(state) - model.constant) / model.resolution) for state in states])
    return (table - energies[:, None]) * model.resolution


@pytest.mark.parametrize("size", [8, 10, 12])
def test_the_largest_coefficient_of_low_autocorrelation_is_halved_and_projection_proves_it(size: int) -> None:
    H = low_autocorrelation(size)
    plan = pair_cover_reduction(H)
    better = tightened(plan)
    for domain in ("spin", "boolean"):
        before, after = largest(built(plan).in_domain(domain)), largest(built(better).in_domain(domain))
        assert after * 2 <= before
    projection = project(built(better), [f"y{i}" for i in range(better.auxiliaries)])
    assert projection.polynomial == H
    assert projection.uniform_multiplicity == 1
    assert Fraction(better.tightening["scale"]) <= Fraction(1, 2)


def test_at_twenty_spins_equal_shares_nearly_halve_it() -> None:
    H = low_autocorrelation(20)
    plan = pair_cover_reduction(H)
    better = tightened(plan)
    assert Fraction(better.tightening["scale"]) < Fraction(51, 100)
    assert better.tightening["proved by"] == "shared bounds, equal shares"
    assert project(built(better), [f"y{i}" for i in range(better.auxiliaries)]).polynomial == H


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("work", [1, 2])
def test_random_quartic_models_keep_every_energy_the_gap_and_one_setting(domain: str, work: int) -> None:
    gained = 0
    for seed in range(12):
        H = quartic_model(seed, domain)
        gap = Fraction(1 + seed % 3, 2)
        plan = pair_cover_reduction(H, auxiliary_gap=gap)
        better = tightened(plan, work)
        gained += largest(built(better)) < largest(built(plan))
        assert largest(built(better)) <= largest(built(plan))
        if better.auxiliaries <= 9:
            table = np.sort(excesses(better), axis=1)
            assert (table[:, 0] == 0).all()
            assert (table[:, 1] >= gap).all()
    # Two boolean pairs in one product: the other can be rightly 1, so a wrong 1 costs the whole weight.
    assert gained > 6 or domain == "boolean"


def test_a_penalty_below_the_tightened_one_can_lose_a_state() -> None:
    H = low_autocorrelation(6)
    better = tightened(pair_cover_reduction(H))
    weaker = Strengths(better.strengths.one // 2, better.strengths.both // 2)
    broken = PairCoverPlan(
        H, better.covered, better.chosen, better.factors, weaker, better.resolution, better.gap, better.tightening
    )
    assert excesses(better).min() == 0
    assert excesses(broken).min() < 0


def test_pairs_that_stand_alone_gain_nothing() -> None:
    plan = pair_cover_reduction(Hamiltonian({("a", "b", "c"): 2, ("d", "e", "f"): -1}, "boolean"))
    assert tightened(plan) is plan


def test_pairs_of_pairs_keep_their_interval_bounds() -> None:
    H = Hamiltonian({tuple("abcdefg"): 3, tuple("abcdxyz"): -2}, "boolean")
    plan = pair_cover_reduction(H)
    assert tightened(plan) is plan


def test_better_shares_never_grow_what_is_made_small() -> None:
    plan = pair_cover_reduction(low_autocorrelation(8))
    form = covered_form(plan.source, plan.covered, plan.factors, plan.pairs, plan.resolution)
    [numbers] = groups(form, plan.pairs, 100)
    group, table = group_of(form, plan.pairs, numbers), Ledger(plan, "spin").table(numbers)
    figures = [table.figure(least_strengths(group, table, 1, rounds, 0)[0]) for rounds in (0, 4, 12)]
    assert figures == sorted(figures, reverse=True)
    assert figures[0] > figures[-1]
    assert table.figure(plan.strengths) > figures[0]


def test_the_trail_says_how_far_the_largest_coefficient_came_down() -> None:
    plan = pair_cover_reduction(low_autocorrelation(8))
    better = tightened(plan)
    record = better.record(tuple(f"y{i}" for i in range(better.auxiliaries)))
    assert record["penalties"] == better.tightening
    assert Fraction(better.tightening["scale"]) == largest(built(better)) / largest(built(plan))


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_the_ledger_holds_the_coefficients_of_the_model_built(domain: str) -> None:
    plan = pair_cover_reduction(quartic_model(2, "spin"))
    ledger = Ledger(plan, domain)
    numbers = np.arange(plan.auxiliaries)
    changed = Strengths(plan.strengths.one + 3, plan.strengths.both + 8)
    ledger.change(numbers, changed)
    after = replace(plan, strengths=changed)
    table = ledger.table(numbers)
    written = [value / after.unit for key, value in built(after).in_domain(domain).terms() if key]
    assert set(table.values(changed).tolist()) - {0} <= {int(value) for value in written}
    assert table.figure(changed)[0] == max(abs(value) for value in written)


@pytest.mark.parametrize("scale", [10**30, Fraction(1, 7)])
def test_huge_and_fractional_weights_stay_exact(scale: Fraction | int) -> None:
    terms = {("a", "b", "c", "d"): 3, ("a", "b", "e", "f"): -2, ("c", "d", "e", "f"): 5, ("a", "c", "e"): 1}
    H = Hamiltonian({key: value * scale for key, value in terms.items()}, "spin")
    better = tightened(pair_cover_reduction(H, auxiliary_gap=Fraction(1, 3)))
    assert Fraction(better.tightening["scale"]) < 1
    projection = project(built(better), [f"y{i}" for i in range(better.auxiliaries)])
    assert projection.polynomial == H
    assert projection.uniform_multiplicity == 1
