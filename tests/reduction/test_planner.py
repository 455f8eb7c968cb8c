"""The planner takes the cheapest way, prices exactly, and says what it beat."""

from __future__ import annotations

import random
from itertools import combinations, product
from typing import Any

import numpy as np
import pytest

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction import ways
from hubokit.reduction.covers import PairCoverPlan, pair_cover_reduction
from hubokit.reduction.gadgets.table import FAMILIES
from hubokit.reduction.planner import methods, plan_table
from hubokit.reduction.product_spins import METHOD as PRODUCT_SPINS
from hubokit.reduction.reduce import PREFERENCES, reduce
from hubokit.reduction.ways import (
    COMMON_PART,
    GROUPS,
    MIX_LIMIT,
    PAIR_COVER,
    PAIR_COVER_LIMIT,
    SYMMETRIC,
    TERM_BY_TERM,
)


def random_model(seed: int) -> Hamiltonian:
    """Ten variables, up to twenty terms of up to seven members."""
    chance = random.Random(seed)
    labels = [f"v{i}" for i in range(10)]
    terms = {}
    for _ in range(chance.randint(3, 20)):
        members = chance.sample(labels, chance.choice([1, 2, 3, 3, 3, 4, 4, 5, 7]))
        terms[tuple(sorted(members))] = chance.choice([-9, -4, -1, 1, 2, 6, 11])
    return Hamiltonian(terms, chance.choice(["spin", "boolean"]), labels=labels)


def pulses(size: int) -> Hamiltonian:
    """Low-autocorrelation binary sequences."""
    terms: dict[tuple[str, ...], int] = {}
    for k in range(1, size):
        for i, j in combinations(range(size - k), 2):
            odd = {i} ^ {i + k} ^ {j} ^ {j + k}
            key = tuple(f"s{v}" for v in sorted(odd))
            terms[key] = terms.get(key, 0) + 2
    return Hamiltonian(terms, "spin")


STRUCTURED = {
    "all triples": Hamiltonian(dict.fromkeys(combinations("abcdefg", 3), 1), "boolean"),
    "plaquettes": Hamiltonian(
        {(f"{r}{c}", f"{r}{c + 1}", f"{r + 1}{c}", f"{r + 1}{c + 1}"): -1 for r in range(4) for c in range(4)}, "spin"
    ),
    "pulses": pulses(8),
    "common part": Hamiltonian({(*"abcdef", other): 1 for other in "ghijk"}, "boolean"),
    "common part, ties allowed": Hamiltonian({(*"abcd", other): -3 for other in "efgh"}, "boolean"),
    "three of four": Hamiltonian(dict.fromkeys(combinations("abcd", 3), 1), "spin"),
}
WAYS = (TERM_BY_TERM, GROUPS, SYMMETRIC, COMMON_PART, PAIR_COVER, PRODUCT_SPINS)


def covers_without_gadgets(H: Hamiltonian, *, alone: object = None, **given: Any) -> PairCoverPlan:
    """Pair covers that do not know of the gadgets of quartic terms."""
    del alone
    return pair_cover_reduction(H, **given)


FIGURES = {"auxiliaries": "auxiliaries", "range": "coefficient_ratio", "couplers": "couplers"}


@pytest.mark.parametrize("prefer", PREFERENCES)
@pytest.mark.parametrize("case", [*range(3), *STRUCTURED])
def test_the_choice_never_costs_more_than_the_best_single_family(case: int | str, prefer: str) -> None:
    H = random_model(case) if isinstance(case, int) else STRUCTURED[case]
    keep = "energies" if case == "common part, ties allowed" else "one-to-one"
    chosen = getattr(reduce(H, prefer=prefer, keep=keep).costs, FIGURES[prefer])
    for name in (*(one.name for one in FAMILIES if one.domain == H.domain), *WAYS):
        assert chosen <= getattr(reduce(H, method=name, prefer=prefer, keep=keep).costs, FIGURES[prefer])


def test_each_way_is_the_best_for_some_model_so_that_none_can_be_forgotten() -> None:
    best = {
        plan_table(reduce(H, prefer=prefer).trail)[0]["plan"] for H in STRUCTURED.values() for prefer in PREFERENCES
    }
    assert best >= set(WAYS)


@pytest.mark.parametrize("prefer", PREFERENCES)
@pytest.mark.parametrize("seed", range(4))
def test_deductions_never_make_the_plan_dearer(seed: int, prefer: str) -> None:
    R = reduce(random_model(seed), keep="ground-states", prefer=prefer)
    plain = reduce(random_model(seed), keep="energies", prefer=prefer)
    assert R.costs.figure(prefer) <= plain.costs.figure(prefer)
    rows = [row["plan"] for row in plan_table(R.trail)]
    if R.trail.steps[0].name == "deduction":
        assert any(name.endswith("without deductions") for name in rows)


def test_some_quartic_terms_keep_a_gadget_of_their_own_where_that_is_fewer(monkeypatch: pytest.MonkeyPatch) -> None:
    chance = np.random.default_rng(12)
    rows = np.unique([np.sort(chance.choice(12, 4, replace=False)) for _ in range(30)], axis=0)
    H = Hamiltonian.from_arrays([rows], [np.ones(len(rows), np.int64)], domain="spin")
    mixed = reduce(H, method=PAIR_COVER)
    monkeypatch.setattr(ways, "pair_cover_reduction", covers_without_gadgets)
    assert len(mixed.auxiliaries) < len(reduce(H, method=PAIR_COVER).auxiliaries)


@pytest.mark.parametrize("prefer", PREFERENCES)
@pytest.mark.parametrize("keep", ["one-to-one", "energies"])
@pytest.mark.parametrize("seed", range(4))
def test_the_price_in_the_trail_is_what_the_model_costs(seed: int, keep: str, prefer: str) -> None:
    R = reduce(random_model(seed), keep=keep, prefer=prefer)
    row = plan_table(R.trail)[0]
    assert row["status"] == "chosen"
    assert row["auxiliaries"] == R.costs.auxiliaries
    assert row["couplers"] == R.costs.couplers
    assert row["coefficient ratio"] == str(R.costs.coefficient_ratio)


def test_the_table_names_the_runner_up_and_its_costs() -> None:
    rows = plan_table(reduce(STRUCTURED["all triples"]).trail)
    assert [row["status"] for row in rows[:2]] == ["chosen", "runner-up"]
    assert rows[0]["auxiliaries"] <= rows[1]["auxiliaries"]


def test_a_preference_changes_what_is_chosen() -> None:
    H = Hamiltonian(dict.fromkeys(combinations("abcde", 5), 1), "spin")
    few, small = reduce(H), reduce(H, prefer="range")
    assert few.costs.auxiliaries < small.costs.auxiliaries
    assert few.costs.coefficient_ratio > small.costs.coefficient_ratio


def test_positive_cubic_terms_get_flipped_literals_when_couplers_are_dear() -> None:
    R = reduce(Hamiltonian({tuple("abc"): 1, tuple("def"): 1}, "boolean"), prefer="couplers")
    assert {row["method"] for row in R.trail.steps[-1].parameters["methods"]} == {"flipped-literals"}
    assert R.costs.couplers == 8


def test_what_a_work_limit_kept_from_being_priced_is_named() -> None:
    chance = np.random.default_rng(7)
    rows = np.unique(np.sort(chance.permuted(np.tile(np.arange(40), (9000, 1)), axis=1)[:, :4], axis=1), axis=0)
    H = Hamiltonian.from_arrays([rows, [[0, 1, 2, 3, 4]]], [chance.choice([-1, 1], len(rows)), [1]], "boolean")
    notes = {row["plan"]: row["reason"] for row in plan_table(reduce(H, prefer="range").trail) if row["reason"]}
    assert f"{PAIR_COVER_LIMIT:,}" in notes[PAIR_COVER]


def test_many_mixes_are_not_all_priced_and_the_trail_says_so() -> None:
    terms = {tuple("abcdefg"[:k]): sign * k for k in range(3, 8) for sign in (1,)}
    terms |= {tuple("hijklmn"[:k]): -k for k in range(3, 8)}
    rows = plan_table(reduce(Hamiltonian(terms, "boolean"), prefer="range").trail)
    note = next(row for row in rows if row["plan"] == "every mix of families")
    assert f"more than {MIX_LIMIT}" in note["reason"]


def test_every_method_name_is_taken_and_others_are_refused() -> None:
    H = Hamiltonian({tuple("abc"): 1, tuple("bcd"): -1, tuple("cd"): 2}, "boolean")
    for name in methods():
        assert reduce(H, method=name).model.locality <= 2
    with pytest.raises(InputError, match=PAIR_COVER):
        reduce(H, method="pairs")


def test_a_method_beyond_its_work_limit_is_refused() -> None:
    members = np.stack([np.zeros(1500, int), np.ones(1500, int), np.arange(2, 1502)], axis=1)
    H = Hamiltonian.from_arrays([members], [np.ones(1500, int)], "spin")
    with pytest.raises(LimitError, match="sets of four variables"):
        reduce(H, method=GROUPS)


@pytest.mark.parametrize(("size", "most"), [(10, 20)])
def test_pulses_take_no_more_auxiliaries_than_the_known_covers(size: int, most: int) -> None:
    R = reduce(pulses(size))
    assert len(R.auxiliaries) <= most
    assert plan_table(R.trail)[0]["plan"] == PAIR_COVER


def test_a_pair_cover_keeps_every_energy_once_and_the_trail_says_what_each_pair_is() -> None:
    H = pulses(7)
    R = reduce(H, method=PAIR_COVER)
    states = np.array(list(product((1, -1), repeat=R.model.size)), np.int8)
    energies = R.model.integer_energies(states).reshape(2**H.size, -1)
    least = energies.min(axis=1)
    assert ((energies == least[:, None]).sum(axis=1) == 1).all()
    found = [R.model.constant + int(value) * R.model.resolution for value in least]
    assert found == [H.energy(state) for state in product((1, -1), repeat=H.size)]
    listed = R.trail.steps[0].parameters["pair cover"]["pairs"]
    best = states.reshape(2**H.size, -1, R.model.size)[np.arange(2**H.size), energies.argmin(axis=1)]
    for entry in listed:
        down = [best[:, R.model.positions[label]] < 0 for label in (entry["auxiliary"], *entry["of"])]
        assert np.array_equal(down[0], down[1] & down[2])


def test_terms_that_share_no_pair_get_gadgets_of_their_own_beside_a_cover() -> None:
    shared = {("a", "b", other): 1 for other in "cdefg"}
    H = Hamiltonian({**shared, ("p", "q", "r"): -1, ("s", "t", "u", "v"): 1}, "boolean")
    R = reduce(H, method=PAIR_COVER)
    rows = {(row["locality"], row["method"]): row["terms"] for row in R.trail.steps[0].parameters["methods"]}
    assert rows[3, PAIR_COVER] == 5
    assert sum(rows.values()) == 7
    assert len(R.auxiliaries) == 3
