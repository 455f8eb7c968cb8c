"""Pair covers: every term becomes quadratic, with few pairs, and the model keeps every energy one-to-one."""

from __future__ import annotations

import itertools
from fractions import Fraction

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.project import project
from hubokit.reduction.cover_choice import choose_pairs
from hubokit.reduction.cover_kernels import compiled, exchange_loop, greedy_loop
from hubokit.reduction.cover_nests import nested_cover
from hubokit.reduction.cover_problem import CoverProblem, cover_problem
from hubokit.reduction.cover_program import least_cover
from hubokit.reduction.cover_search import components, exchanged, find_cover, greedy_cover, pruned, sides, simplified
from hubokit.reduction.covers import PairCoverPlan, pair_cover_reduction
from hubokit.reduction.pairs import factors_of


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


def triples(size: int) -> np.ndarray:
    """All triples on `size` variables."""
    return np.array(list(itertools.combinations(range(size), 3)))


def random_rows(seed: int, size: int, count: int, locality: int) -> np.ndarray:
    """Distinct random products."""
    rng = np.random.default_rng(seed)
    return np.unique(np.array([np.sort(rng.choice(size, locality, replace=False)) for _ in range(count)]), axis=0)


def random_problem(seed: int, size: int = 7, cubic: int = 12, quartic: int = 6) -> CoverProblem:
    """Cubic and quartic rows mixed, one pair given."""
    blocks = [random_rows(seed, size, cubic, 3), random_rows(seed + 1000, size, quartic, 4)]
    return cover_problem(blocks, size, np.array([[0, 1]]))


def plain_rule(rows: list[tuple[int, ...]], size: int, domain: str, sign: int = 1) -> int:
    """The most-common-pair rule spelled out over sets: how many auxiliaries it takes; equal pairs in either order."""
    terms = [frozenset(row) for row in rows]
    due: set[frozenset[int]] = set()
    used: set[frozenset[int]] = set()
    fresh = size
    while True:
        counts: dict[frozenset[int], int] = {}
        for term in terms:
            if len(term) > 2:
                for pair in itertools.combinations(sorted(term), 2):
                    counts[frozenset(pair)] = counts.get(frozenset(pair), 0) + 1
        for pair in due:
            counts[pair] = counts.get(pair, 0) + 1
        if not counts:
            return len(used)
        best = min(counts, key=lambda pair: (-counts[pair], [sign * v for v in sorted(pair)]))
        used.add(best)
        due.discard(best)
        after = []
        for term in terms:
            if len(term) > 2 and best <= term:
                if domain == "spin":
                    rest = term - best
                    if len(rest) == 2 and rest not in used:
                        due.add(rest)
                    continue
                term = term - best | {fresh}
            after.append(term)
        terms, fresh = after, fresh + 1


def least_by_enumeration(problem: CoverProblem) -> int:
    """The least number of pairs, by trying all sets of pairs of growing size."""
    free = np.flatnonzero(~problem.given)
    for size in range(len(free) + 1):
        for some in itertools.combinations(free, size):
            chosen = problem.given.copy()
            chosen[list(some)] = True
            if problem.is_covered(chosen).all():
                return size
    raise AssertionError


@pytest.mark.parametrize("size", [6, 10, 17])
def test_all_triples_take_no_more_pairs_than_two_halves_hold(size: int) -> None:
    chosen = choose_pairs({3: triples(size)}, size, "boolean")
    assert chosen.pairs.count == size * (size - 1) // 2 - size**2 // 4


@pytest.mark.parametrize(("size", "most"), [(10, 20), (16, 56), (30, 210)])
def test_low_autocorrelation_takes_no_more_pairs_than_published(size: int, most: int) -> None:
    quartic = low_autocorrelation(size).blocks[-1]
    chosen = choose_pairs({4: quartic.members}, size, "spin")
    assert chosen.pairs.count <= most
    assert chosen.greedy > most


@pytest.mark.parametrize("seed", range(8))
def test_small_covers_are_least_and_the_bound_says_so(seed: int) -> None:
    problem = random_problem(seed, size=5, cubic=6, quartic=3)
    cover = find_cover(problem)
    assert problem.is_covered(cover.chosen).all()
    least = least_by_enumeration(problem)
    assert (problem.count(cover.chosen), cover.least) == (least, least)
    assert "proven least" in cover.how


@pytest.mark.parametrize("seed", range(6))
def test_simplifying_forces_only_pairs_of_a_least_cover(seed: int) -> None:
    problem = cover_problem([random_rows(seed, 7, 7, 3)], 7)
    forced, core = simplified(problem)
    rest, _ = core.part(np.arange(len(core.rows)))
    assert problem.count(forced) + least_by_enumeration(rest) == least_by_enumeration(problem)


@pytest.mark.parametrize("domain", ["boolean", "spin"])
@pytest.mark.parametrize("shape", [(3,), (4,), (3, 4)])
def test_never_more_auxiliaries_than_the_most_common_pair_rule(domain: str, shape: tuple[int, ...]) -> None:
    for seed in range(6):
        size = 6 + 2 * seed
        blocks = {k: random_rows(seed + 50 * k, size, 6 + 3 * seed, k) for k in shape}
        rows = [tuple(row) for members in blocks.values() for row in members.tolist()]
        chosen = choose_pairs(blocks, size, domain)
        assert chosen.pairs.count <= plain_rule(rows, size, domain)


def test_products_that_share_a_triple_are_nested_not_split() -> None:
    rows = np.array([[0, 1, 2, k] for k in range(3, 12)])
    assert choose_pairs({4: rows}, 12, "boolean").pairs.count == 2


@pytest.mark.parametrize("seed", range(5))
def test_every_search_covers_all_rows_and_never_grows(seed: int) -> None:
    problem = random_problem(seed, size=9, cubic=30, quartic=15)
    greedy = greedy_cover(problem)
    shuffled = greedy_cover(problem, seed=seed)
    lean = pruned(problem, greedy)
    better = exchanged(problem, lean, seed, 40)
    exact = least_cover(problem, better, 50)
    for chosen in (greedy, shuffled, lean, better, exact.chosen):
        assert problem.is_covered(chosen).all()
        assert chosen[problem.given].all()
    counts = [problem.count(chosen) for chosen in (greedy, lean, better, exact.chosen)]
    assert counts == sorted(counts, reverse=True)
    assert exact.bound <= counts[-1]


def test_pruning_leaves_out_what_is_not_needed() -> None:
    problem = random_problem(3, size=12, cubic=60, quartic=30)
    lean = pruned(problem, np.ones(problem.pairs, bool))
    for pair in np.flatnonzero(lean & ~problem.given):
        without = lean.copy()
        without[pair] = False
        assert not problem.is_covered(without).all()


def test_compiled_and_plain_loops_agree() -> None:
    problem = random_problem(1, size=12, cubic=60, quartic=30)
    starts, slots = problem.incidence
    arguments = (problem.rows, starts, slots, problem.given)
    choices = (np.ones(problem.pairs, bool), np.arange(problem.pairs))
    greedy = greedy_loop(*arguments, *choices)
    assert np.array_equal(greedy, compiled(greedy_loop)(*arguments, *choices))
    plain = exchange_loop(*arguments, greedy, 60, 5, 1)
    assert np.array_equal(plain, compiled(exchange_loop)(*arguments, greedy, 60, 5, 1))


def test_pairs_within_two_sides_cover_quartics_that_no_sides_leave_odd() -> None:
    problem = cover_problem([low_autocorrelation(14).blocks[-1].members], 14)
    [within] = sides(problem, 0)
    assert problem.is_covered(within).all()
    assert within.sum() == 42


def test_sides_cover_rows_that_simplifying_left_without_the_pair_within() -> None:
    rows = np.array([[0, i, j] for i, j in itertools.combinations(range(1, 17), 2)])
    cover = find_cover(cover_problem([rows], 17))
    assert cover_problem([rows], 17).is_covered(cover.chosen).all()
    assert cover.chosen.sum() == 15


def test_components_are_what_hangs_together_through_pairs() -> None:
    problem = cover_problem([np.array([[0, 1, 2], [1, 2, 3], [5, 6, 7], [3, 4, 5]])], 8)
    assert [part.tolist() for part in components(problem)] == [[0, 1], [2], [3]]


def built(H: Hamiltonian, plan: PairCoverPlan) -> Hamiltonian:
    return plan.build(tuple(f"y{i}" for i in range(plan.auxiliaries)))


def assert_one_to_one(H: Hamiltonian, plan: PairCoverPlan) -> None:
    """P = E and one best setting at every state, by enumeration of the auxiliaries."""
    model = built(H, plan)
    assert model.locality <= 2
    values = (1, -1) if H.domain == "spin" else (0, 1)
    states = np.array(list(itertools.product(values, repeat=H.size)), dtype=np.int8)
    settings = np.array(list(itertools.product(values, repeat=plan.auxiliaries)), dtype=np.int8)
    full = np.hstack([np.repeat(states, len(settings), axis=0), np.tile(settings, (len(states), 1))])
    table = model.integer_energies(full).reshape(len(states), -1)
    expected = [(H.energy(state) - model.constant) / model.resolution for state in states]
    assert table.min(axis=1).tolist() == expected
    second = np.sort(table, axis=1)[:, 1] if plan.auxiliaries else table[:, 0] + plan.gap / model.resolution
    assert ((second - table.min(axis=1)) * model.resolution >= plan.gap).all()
    best = settings[table.argmin(axis=1)]
    assert np.array_equal(best, plan.pairs.values(states, H.domain))


@pytest.mark.parametrize("domain", ["boolean", "spin"])
@pytest.mark.parametrize("longest", [3, 4, 5])
def test_random_models_keep_every_energy_one_to_one(domain: str, longest: int) -> None:
    rng = np.random.default_rng(longest)
    for trial in range(24):
        terms: dict[tuple[str, ...], Fraction] = {}
        for _ in range(6 if longest < 5 else 3):
            members = rng.choice(6, int(rng.integers(1, longest + 1)), replace=False)
            terms[tuple(f"v{i}" for i in sorted(members))] = Fraction(int(rng.integers(-6, 7)), 2)
        H = Hamiltonian(terms, domain=domain, labels=[f"v{i}" for i in range(6)])
        plan = pair_cover_reduction(H, auxiliary_gap=Fraction(trial % 3, 3))
        if plan.auxiliaries <= 8:
            assert_one_to_one(H, plan)


@pytest.mark.parametrize("size", [10, 16])
def test_low_autocorrelation_is_proved_one_to_one_by_projection(size: int) -> None:
    H = low_autocorrelation(size)
    model = built(H, pair_cover_reduction(H))
    projection = project(model, [label for label in model.labels if label.startswith("y")])
    assert projection.polynomial == H
    assert projection.uniform_multiplicity == 1


@pytest.mark.parametrize("domain", ["boolean", "spin"])
def test_longer_products_are_proved_one_to_one_by_projection(domain: str) -> None:
    labels = [f"v{i}" for i in range(9)]
    H = Hamiltonian({tuple(labels[:7]): 3, tuple(labels[2:8]): -2, tuple(labels[4:9]): 5}, domain=domain)
    plan = pair_cover_reduction(H)
    projection = project(built(H, plan), [f"y{i}" for i in range(plan.auxiliaries)])
    assert projection.polynomial == H
    assert projection.uniform_multiplicity == 1


def test_only_some_terms_can_be_covered_and_the_rest_is_left_out() -> None:
    H = Hamiltonian({("a", "b", "c"): 2, ("b", "c", "d"): -1, ("a",): 1}, "boolean")
    plan = pair_cover_reduction(H, only={3: np.array([True, False])})
    assert not plan.is_whole
    assert plan.auxiliaries == 1
    assert plan.factors[3].shape == (1, 2)
    with pytest.raises(InputError, match="covers only some"):
        plan.build(("y0",))


def test_the_record_says_what_each_auxiliary_stands_for() -> None:
    H = Hamiltonian({("a", "b", "c"): 2}, "spin")
    record = pair_cover_reduction(H).record(("y0",))
    assert record["pairs"] == [{"auxiliary": "y0", "of": ["a", "b"], "is": "pair"}]
    assert record["proven least"] is True


def test_the_price_is_that_of_the_model_built() -> None:
    H = low_autocorrelation(7)
    plan = pair_cover_reduction(H)
    model = built(H, plan)
    price = plan.price()
    sizes = [abs(value) for key, value in model.terms() if key]
    assert price["largest"] == max(sizes)
    assert price["smallest"] == min(sizes)
    assert price["couplers"] == sum(len(key) == 2 for key, _ in model.terms())


def least_mixed_by_enumeration(problem: CoverProblem, quartics: int) -> int:
    """The least number of pairs plus quartics left alone, by trying all sets of pairs."""
    pairs = np.flatnonzero(problem.operands[:, 0] >= 0)
    best = quartics
    for size in range(quartics):
        for some in itertools.combinations(pairs, size):
            chosen = np.zeros(problem.pairs, bool)
            chosen[list(some)] = True
            held = np.append(chosen, [False, False])[problem.rows]
            left = int((~(held[:, 0:6:2] & held[:, 1:6:2]).any(axis=1)).sum())
            best = min(best, size + left)
    return best


@pytest.mark.parametrize("seed", range(4))
def test_quartics_are_left_to_gadgets_of_their_own_where_that_is_fewer(seed: int) -> None:
    rows = random_rows(seed, 6, 5, 4)
    alone = np.ones(len(rows), bool)
    chosen = choose_pairs({4: rows}, 6, "spin", alone=alone)
    assert chosen.auxiliaries == least_mixed_by_enumeration(cover_problem([rows], 6, alone=[alone]), len(rows))


def test_mixing_never_takes_more_than_either_way_alone() -> None:
    for seed in range(2):
        rows = random_rows(seed, 12, 30, 4)
        mixed = choose_pairs({4: rows}, 12, "spin", alone=np.ones(len(rows), bool))
        assert mixed.auxiliaries <= min(len(rows), choose_pairs({4: rows}, 12, "spin").auxiliaries)
        assert 0 < mixed.alone < len(rows)


def test_terms_left_alone_are_not_covered_and_the_others_are() -> None:
    shared = {("a", "b", "c", "d"): 1, ("a", "b", "e", "f"): 2, ("c", "d", "e", "f"): 1, ("a", "b", "g", "h"): 1}
    H = Hamiltonian({**shared, ("c", "d", "g", "h"): 1, ("i", "j", "k", "l"): 5}, "spin")
    plan = pair_cover_reduction(H, alone=np.ones(6, bool))
    assert plan.covered[4].tolist() == [True, True, True, True, True, False]
    assert (plan.auxiliaries, plan.chosen.alone) == (4, 1)


def test_few_boolean_quartics_take_no_more_than_the_rule_in_either_order() -> None:
    for seed in range(6):
        blocks = {3: random_rows(seed, 6, 3, 3), 4: random_rows(seed + 50, 6, 7, 4)}
        rows = [tuple(row) for members in blocks.values() for row in members.tolist()]
        count = choose_pairs(blocks, 6, "boolean").pairs.count
        assert count <= min(plain_rule(rows, 6, "boolean", 1), plain_rule(rows, 6, "boolean", -1))


@pytest.mark.parametrize("seed", range(6))
def test_splits_and_nests_together_make_every_term_quadratic(seed: int) -> None:
    cubics, quartics = random_rows(seed, 6, 3, 3), random_rows(seed + 9, 6, 6, 4)
    found = nested_cover(cubics, quartics, 6, 50)
    assert found is not None
    pairs, proven = found
    assert proven
    assert (factors_of(cubics, pairs, "boolean") >= 0).all()
    assert (factors_of(quartics, pairs, "boolean") >= 0).all()
    apart = choose_pairs({3: cubics, 4: quartics}, 6, "spin").pairs.count
    assert pairs.count <= apart
