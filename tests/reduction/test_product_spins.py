"""A product spin makes a quartic term one coupler, and every state keeps its energy and one best setting."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import product

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.project import project
from hubokit.reduction import ways
from hubokit.reduction.covers import pair_cover_reduction
from hubokit.reduction.lifting import MODEL, definitions
from hubokit.reduction.pair_piece import METHOD as PAIR_COVER
from hubokit.reduction.pairs import PairVariables
from hubokit.reduction.planner import plan_table
from hubokit.reduction.product_spins import METHOD, fewest_couplers, with_product_spins, with_products
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction
from hubokit.spectrum.transforms import all_energies

DIMOD_PULSES_16 = 874
"""Couplers that dimod.make_quadratic 0.12.23 takes for the sequences of length 16 (RESULTS_reduction.md)."""


def pulses(size: int) -> Hamiltonian:
    """Low-autocorrelation binary sequences of this length, without the constant."""
    terms: dict[tuple[str, ...], int] = {}
    for k in range(1, size):
        for i, j in product(range(size - k), repeat=2):
            odd = {i} ^ {i + k} ^ {j} ^ {j + k}
            if odd:
                key = tuple(f"s{v:02}" for v in sorted(odd))
                terms[key] = terms.get(key, 0) + 1
    return Hamiltonian(terms, "spin")


def random_model(seed: int, longest: int = 5, most: int = 7, size: int = 6) -> Hamiltonian:
    """A few spins, terms of up to `longest` members, halves among the weights."""
    chance = random.Random(seed)
    labels = "abcdefgh"[:size]
    terms = {}
    for _ in range(most):
        members = chance.sample(labels, chance.choice([1, 2, 3, 3, *[4] * 4, longest]))
        terms[tuple(sorted(members))] = Fraction(chance.choice([-7, -3, -1, 1, 2, 5]), chance.choice([1, 2]))
    return Hamiltonian(terms, "spin", labels=list(labels))


def random_cubics(size: int, most: int) -> Hamiltonian:
    """Up to `most` triples of spins, weights between -3 and 2."""
    chance = np.random.default_rng(0)
    rows = np.unique(np.sort(chance.permuted(np.tile(np.arange(size), (most, 1)), axis=1)[:, :3], axis=1), axis=0)
    return Hamiltonian.from_arrays([rows], [chance.choice([-3, -1, 1, 2], len(rows))], domain="spin")


def product_spins_of(R: Reduction) -> list[tuple[str, list[str]]]:
    """The auxiliaries that the trail lists as products."""
    listed = R.trail.steps[0].parameters.get("pair cover", {}).get("pairs", [])
    return [(row["auxiliary"], row["of"]) for row in listed if row["is"] == "product"]


def table_of(R: Reduction) -> np.ndarray:
    """Energies of the model in units of its resolution, one row a source state, one column an auxiliary setting."""
    assert R.model.labels == (*R.source.labels, *R.auxiliaries)
    return all_energies(R.model).reshape(2**R.source.size, -1)


def assert_one_to_one_with_gap(R: Reduction, gap: Fraction) -> Fraction:
    """By enumeration: P = E, m = 1 and the auxiliary gap is at least `gap`; the gap."""
    table = table_of(R)
    least = table.min(axis=1)
    E, F = R.source, R.model
    wanted = [E.constant + int(value) * E.resolution for value in all_energies(E)]
    assert [F.constant + int(value) * F.resolution for value in least] == wanted
    assert ((table == least[:, None]).sum(axis=1) == 1).all()
    excess = np.partition(table, 1, axis=1)[:, 1] - least
    found = int(excess.min()) * F.resolution
    assert found >= gap
    return found


@pytest.mark.parametrize("gap", [None, Fraction(1, 3), Fraction(1), Fraction(5, 2)])
@pytest.mark.parametrize("seed", range(8))
def test_every_state_keeps_its_energy_and_one_best_setting_by_enumeration(seed: int, gap: Fraction | None) -> None:
    R = reduce(random_model(seed), method=METHOD, prefer="couplers", auxiliary_gap=gap)
    assert_one_to_one_with_gap(R, gap or R.source.resolution)


def test_the_random_models_do_have_product_spins() -> None:
    found = [product_spins_of(reduce(random_model(seed), method=METHOD, prefer="couplers")) for seed in range(8)]
    assert sum(map(bool, found)) >= 5


def test_product_spins_of_product_spins_keep_every_energy_once() -> None:
    weights = dict(zip(("abcdef", "abcdeg", "abcdfg", "abcdf", "cdf"), (1, -2, 3, 5, 1), strict=True))
    H = Hamiltonian({tuple(term): weight for term, weight in weights.items()}, "spin")
    R = reduce(H, method=METHOD, prefer="couplers")
    assert any(set(of) & set(R.auxiliaries) for _, of in product_spins_of(R))
    assert_one_to_one_with_gap(R, H.resolution)


@pytest.mark.parametrize("size", [6, 7])
def test_the_low_autocorrelation_model_keeps_every_energy_once_with_the_gap_asked_for(size: int) -> None:
    H = pulses(size)
    R = reduce(H, method=METHOD, prefer="couplers")
    assert product_spins_of(R)
    assert assert_one_to_one_with_gap(R, H.resolution) == H.resolution


@pytest.mark.parametrize("gap", [Fraction(1), Fraction(7, 2), Fraction(4)])
def test_the_penalty_is_the_least_that_gives_the_gap(gap: Fraction) -> None:
    H = Hamiltonian(
        {("a", "b", other): weight for other, weight in zip("cdefg", (1, -2, 3, 1, 1), strict=True)}, "spin"
    )
    R = reduce(H, method=METHOD, prefer="couplers", auxiliary_gap=gap)
    assert len(product_spins_of(R)) == 1
    assert assert_one_to_one_with_gap(R, gap) == gap


def test_the_penalty_has_the_strengths_of_the_formula() -> None:
    H = Hamiltonian({("a", "b", other): weight for other, weight in zip("cde", (1, -2, 3), strict=True)}, "spin")
    F = reduce(H, method=METHOD, prefer="couplers", auxiliary_gap=1).model
    M = 1 + 2 + 3 + Fraction(1, 2)
    alpha = 2 * M + Fraction(1, 2)
    assert dict(F.terms()) == {
        (): Fraction(3, 2) * alpha + M,
        ("a",): alpha / 2,
        ("b",): alpha / 2,
        ("y0",): -alpha,
        ("y1",): -M,
        ("a", "b"): alpha / 2,
        ("a", "y0"): -alpha,
        ("b", "y0"): -alpha,
        ("a", "y1"): -M,
        ("b", "y1"): -M,
        ("y0", "y1"): 2 * M,
        ("c", "y1"): 1,
        ("d", "y1"): -2,
        ("e", "y1"): 3,
    }


@pytest.mark.parametrize("seed", range(12))
def test_the_projection_is_the_source_for_models_beyond_enumeration(seed: int) -> None:
    H = random_model(seed, longest=4 + seed % 3, most=40, size=8)
    R = reduce(H, method=METHOD, prefer="couplers")
    assert len(R.auxiliaries) > 15
    found = project(R.model, R.auxiliaries)
    assert found.polynomial == H
    assert found.uniform_multiplicity == 1
    bound = found.gap_everywhere
    assert bound is not None
    assert bound.value is not None
    assert bound.value >= H.resolution


@pytest.mark.parametrize("size", [7, 16, 24])
def test_the_low_autocorrelation_model_is_proved_at_any_size(size: int) -> None:
    H = pulses(size)
    R = reduce(H, method=METHOD, prefer="couplers")
    found = project(R.model, R.auxiliaries)
    assert found.polynomial == H
    assert found.uniform_multiplicity == 1


def test_sequences_of_length_16_take_fewer_couplers_than_any_other_way() -> None:
    H = pulses(16)
    R = reduce(H, prefer="couplers")
    rows = plan_table(R.trail)
    assert rows[0]["plan"] == METHOD
    assert R.costs.couplers == rows[0]["couplers"] <= 588
    assert R.costs.couplers < DIMOD_PULSES_16
    assert {row["plan"]: row["couplers"] for row in rows}[PAIR_COVER] > R.costs.couplers


@pytest.mark.parametrize("prefer", ["auxiliaries", "range"])
def test_other_preferences_do_not_price_product_spins(prefer: str) -> None:
    assert METHOD not in {row["plan"] for row in plan_table(reduce(pulses(8), prefer=prefer).trail)}


def test_a_work_limit_in_the_way_is_named_and_the_named_method_works_beyond_it(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(ways, "PAIR_COVER_LIMIT", 100)
    plain = reduce(pulses(10), prefer="couplers")
    notes = {row["plan"]: row["reason"] for row in plan_table(plain.trail) if row["reason"]}
    assert "at most 100 unless auxiliaries are preferred" in notes[METHOD]
    assert reduce(pulses(10), method=METHOD, prefer="couplers").costs.couplers < plain.costs.couplers


def test_a_named_method_has_nothing_to_do_for_booleans_and_goes_term_by_term() -> None:
    R = reduce(Hamiltonian({("a", "b", other): 1 for other in "cdefg"}, "boolean"), method=METHOD)
    assert plan_table(R.trail)[0]["plan"] == "term-by-term"


@pytest.mark.parametrize("size", [8, 12])
def test_every_quartic_term_of_the_sequences_is_one_coupler(size: int) -> None:
    H = pulses(size)
    cover = pair_cover_reduction(H)
    plan = with_product_spins(cover, fewest_couplers(cover))
    assert plan.pairs.is_product[plan.factors[4] - H.size].all()
    members = {tuple(row) for part, _ in plan.parts for row in part.tolist() if len(row) == 2}
    own = {tuple(sorted(row)) for row in plan.factors[4].tolist()}
    assert own <= members
    assert len(members) == len(own) + 6 * int(plan.pairs.is_product.sum())


def test_a_pair_that_one_cubic_term_uses_stays_a_pair_variable() -> None:
    H = Hamiltonian({("a", "b", "c"): 1, **{("d", "e", other): 1 for other in "fghij"}}, "spin")
    cover = pair_cover_reduction(H)
    once = [set(operands) <= {0, 1, 2} for operands in cover.pairs.operands.tolist()]
    assert fewest_couplers(cover).tolist() == [not alone for alone in once]


@pytest.mark.parametrize("seed", range(10))
def test_never_more_couplers_than_with_no_product_spin_or_with_all(seed: int) -> None:
    cover = pair_cover_reduction(random_model(seed, most=16, size=8))
    few, every = (with_product_spins(cover, chosen) for chosen in (fewest_couplers(cover), ~cover.pairs.is_product))
    assert few.price()["couplers"] <= min(cover.price()["couplers"], every.price()["couplers"])


def test_turning_pairs_over_one_by_one_is_rarely_beaten_by_trying_all_choices() -> None:
    excess = []
    for seed in range(20):
        cover = pair_cover_reduction(random_model(seed, longest=4, most=9))
        found = with_product_spins(cover, fewest_couplers(cover)).price()["couplers"]
        choices = [np.array(choice) for choice in product((False, True), repeat=cover.auxiliaries)]
        best = min(with_product_spins(cover, choice).price()["couplers"] for choice in choices)
        excess.append(int(found - best))
    assert sum(value > 0 for value in excess) <= 3
    assert max(excess) <= 2


def test_dense_cubic_terms_keep_pair_variables() -> None:
    cover = pair_cover_reduction(random_cubics(12, 400))
    assert not fewest_couplers(cover).any()
    assert with_product_spins(cover, fewest_couplers(cover)) is cover


def test_a_product_that_is_there_already_gets_no_second_spin() -> None:
    pairs = PairVariables(4, np.array([[0, 1], [0, 1], [2, 5]], np.int32), np.array([-1, 4, -1], np.int32))
    found, numbers = with_products(pairs, np.array([True, False, True]))
    assert found.count == 4
    assert numbers.tolist() == [0, 1, 2, 3, 5, 5, 7]


@pytest.mark.parametrize("seed", range(6))
def test_the_trail_lists_every_auxiliary_and_lifting_by_it_gives_the_minimum(seed: int) -> None:
    H = random_model(seed, 6, 14, 8)
    R = reduce(H, method=METHOD, prefer="couplers")
    defined = definitions(R.trail, R.source, R.model)
    cover = next(row for row in R.trail.steps[0].parameters["methods"] if row["method"] == METHOD)
    assert len(defined) == cover["auxiliaries"] == len(R.trail.steps[0].parameters["pair cover"]["pairs"])
    assert R.trail.steps[0].parameters[MODEL] == R.model.digest
    states = np.array(list(product((1, -1), repeat=H.size)), np.int8)
    assert np.array_equal(R.lift(states), Reduction(R.source, R.model, R.auxiliaries).lift(states))


@pytest.mark.parametrize("keep", ["one-to-one", "energies"])
@pytest.mark.parametrize("seed", range(4))
def test_the_price_in_the_trail_is_what_the_model_costs(seed: int, keep: str) -> None:
    R = reduce(random_model(seed, most=14), method=METHOD, keep=keep, prefer="couplers")
    row = plan_table(R.trail)[0]
    assert row["plan"] == METHOD
    assert (row["auxiliaries"], row["couplers"]) == (R.costs.auxiliaries, R.costs.couplers)
    assert row["coefficient ratio"] == str(R.costs.coefficient_ratio)


def test_weights_beyond_64_bits_are_kept_exactly() -> None:
    H = Hamiltonian({("a", "b", other): 3 * 10**20 + place for place, other in enumerate("cde")}, "spin")
    R = reduce(H, method=METHOD, prefer="couplers")
    assert product_spins_of(R)
    assert_one_to_one_with_gap(R, H.resolution)
