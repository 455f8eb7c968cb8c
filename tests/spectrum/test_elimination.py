"""Bucket elimination against the energies of all states of small models, and its promises at larger ones."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, unpack
from hubokit.spectrum import elimination as module
from hubokit.spectrum.elimination import draw_ground_states, ground_states, low_levels, predicted_cost
from hubokit.spectrum.elimination_counts import count_ground_states, from_residues, primes_beyond
from hubokit.spectrum.elimination_kernels import add_message, lower_message, multiply_message
from hubokit.spectrum.elimination_levels import lowest_levels
from hubokit.spectrum.elimination_order import (
    EliminationOrder,
    elimination_order,
    neighbour_sets,
    order_along,
    width_bound,
)
from hubokit.spectrum.elimination_states import LevelSearch
from hubokit.spectrum.elimination_tables import Problem, eliminate
from hubokit.spectrum.levels import Level
from tests.strategies import EDGES, hamiltonians

MODELS = hamiltonians(max_size=8, max_locality=5, max_terms=16)
SMALL_WEIGHTS = hamiltonians(max_size=7, max_locality=4, values=st.integers(-2, 2), max_terms=12)
HUGE_WEIGHTS = hamiltonians(max_size=5, max_locality=4, values=EDGES, max_terms=8)


def every_state(H: Hamiltonian) -> tuple[NDArray[np.int8], list[int]]:
    states = from_bits(unpack(np.arange(2**H.size), H.size), H.domain)
    return states, [int(k) for k in H.integer_energies(states)]


def enumerated(H: Hamiltonian, count: int, limit: int = 10**6) -> list[Level]:
    """The lowest levels by looking at every state."""
    states, energies = every_state(H)
    values = sorted(set(energies))
    levels = []
    for place, value in enumerate(values[:count]):
        rows = [i for i, k in enumerate(energies) if k == value]
        above = (values[place + 1] - value) * H.resolution if place + 1 < len(values) else None
        energy = H.constant + value * H.resolution
        levels.append(Level(energy, len(rows), states[rows[:limit]], len(rows) <= limit, above, "enumeration"))
    return levels


def assert_same_levels(found: list[Level], expected: list[Level]) -> None:
    assert [(x.energy, x.degeneracy, x.complete, x.gap) for x in found] == [
        (x.energy, x.degeneracy, x.complete, x.gap) for x in expected
    ]
    for one, other in zip(found, expected, strict=True):
        assert one.states.dtype == np.int8
        assert np.array_equal(one.states, other.states)


@given(st.one_of(MODELS, SMALL_WEIGHTS, HUGE_WEIGHTS))
def test_ground_level_is_that_of_looking_at_every_state(H: Hamiltonian) -> None:
    assert_same_levels([ground_states(H)], enumerated(H, 1))


@given(st.one_of(MODELS, SMALL_WEIGHTS, HUGE_WEIGHTS), st.integers(1, 5))
def test_low_levels_are_those_of_looking_at_every_state(H: Hamiltonian, count: int) -> None:
    assert_same_levels(low_levels(H, count), enumerated(H, count))


@given(SMALL_WEIGHTS, st.integers(0, 6))
def test_a_list_cut_at_a_limit_keeps_the_first_states_in_lift_order(H: Hamiltonian, limit: int) -> None:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(module, "LISTED_TOGETHER", 0)
        assert_same_levels(low_levels(H, 3, limit), enumerated(H, 3, limit))
        assert_same_levels([ground_states(H, limit)], enumerated(H, 1, limit))


@given(hamiltonians(min_size=4, max_size=8, values=st.integers(-1, 1), max_terms=8), st.data())
def test_a_search_for_the_first_states_splits_where_the_counts_say(H: Hamiltonian, data: st.DataObject) -> None:
    level = enumerated(H, 1)[0]
    need = data.draw(st.integers(1, level.degeneracy))
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(LevelSearch, "SPARE", 0)
        order = elimination_order(H.size, H.blocks, widest=22)
        assert isinstance(order, EliminationOrder)
        problem = Problem(H.domain, H.size, H.blocks)
        search = LevelSearch(problem, order, eliminate(problem, order).lowest, 0)
        assert np.array_equal(from_bits(search.first(need), H.domain), level.states[:need])


def test_a_model_without_terms_has_every_state_as_a_ground_state() -> None:
    level = ground_states(Hamiltonian({}, "boolean", labels=[f"v{i}" for i in range(200)]), limit=3)
    assert level.degeneracy == 2**200
    assert level.gap is None
    assert level.states[:, :198].sum() == 0
    assert level.states[:, 198:].tolist() == [[0, 0], [0, 1], [1, 0]]


def test_a_model_without_variables_has_one_state() -> None:
    level = ground_states(Hamiltonian({(): 7}, "spin"))
    assert (level.energy, level.degeneracy, level.states.shape, level.gap) == (7, 1, (1, 0), None)


def test_a_count_divisible_by_every_prime_is_not_mistaken_for_none() -> None:
    """Three blocks of 2**31 - 1 ground states each: the total leaves residue 0 modulo the first prime used.

    In a block t_i is the product of v_0 ... v_i, and the energy is the last t: 0 unless all 31 variables are 1.
    """
    copies, width = 3, 31
    chain = Hamiltonian({}, "boolean")
    for copy in range(copies):
        for i in range(width):
            before = [f"b{copy}t{i - 1}"] if i else []
            chain = chain + _equals_product(f"b{copy}t{i}", [*before, f"b{copy}v{i}"])
        chain = chain + Hamiltonian({(f"b{copy}t{width - 1}",): 1}, "boolean")
    level = ground_states(chain, limit=0)
    assert primes_beyond(2**93)[0] == 2**31 - 1
    assert (level.energy, level.degeneracy) == (0, (2**31 - 1) ** copies)
    assert low_levels(chain, 1, limit=0)[0].degeneracy == (2**31 - 1) ** copies


def _equals_product(result: str, factors: list[str]) -> Hamiltonian:
    """0 when the result is the product of the factors, 1 otherwise."""
    product = tuple(factors)
    return Hamiltonian({(result,): 1, product: 1, (result, *product): -2}, "boolean")


@given(st.lists(st.integers(0, 2**200), min_size=1, max_size=4))
def test_residues_give_back_every_number_below_the_bound(numbers: list[int]) -> None:
    primes = primes_beyond(2**200)
    assert [from_residues([k % p for p in primes], primes) for k in numbers] == numbers


def test_the_primes_are_prime_distinct_and_multiply_beyond_the_bound() -> None:
    sympy = pytest.importorskip("sympy")
    primes = primes_beyond(2**1000)
    assert all(sympy.isprime(p) for p in primes)
    assert primes[0] == sympy.prevprime(2**31)
    assert all(sympy.prevprime(a) == b for a, b in pairwise(primes))
    assert np.prod(np.array(primes, object)) > 2**1000 >= np.prod(np.array(primes[:-1], object))


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_draws_are_ground_states_and_all_alike(domain: str) -> None:
    H = Hamiltonian({("a", "b"): -1, ("c", "d"): -1, ("b", "e", "f"): 2}, domain)
    level = enumerated(H, 1)[0]
    drawn = draw_ground_states(H, 4000, seed=5)
    known = {tuple(row): 0 for row in level.states.tolist()}
    for row in drawn.tolist():
        known[tuple(row)] += 1
    expected = len(drawn) / level.degeneracy
    chi = sum((seen - expected) ** 2 / expected for seen in known.values())
    assert chi < 3 * level.degeneracy


def test_draws_stay_uniform_where_counts_pass_machine_integers() -> None:
    """Free variables but for three that must not all be 1: seven settings of those, three of them with v0 = 1."""
    H = Hamiltonian({("v0", "v1", "v2"): 1}, "boolean", labels=[f"v{i}" for i in range(120)])
    level = ground_states(H, limit=0)
    assert level.degeneracy == 7 * 2**117
    drawn = draw_ground_states(H, 2000, seed=1)
    share = drawn[:, 0].mean()
    assert abs(share - 3 / 7) < 0.05
    assert abs(drawn[:, 100].mean() - 0.5) < 0.05
    assert np.array_equal(drawn, draw_ground_states(H, 2000, seed=1))
    assert not np.array_equal(drawn, draw_ground_states(H, 2000, seed=2))


def test_draws_weigh_numbers_that_exist_only_as_residues() -> None:
    """Two hubs c and d, each with 80 parity equations on 160 spins of its own; c, d and a spin of each must not both
    be down. Of every 8 ground states 4 have both hubs up and 2 each have one down.
    """
    H = sum((not_both_down(hub, f"{hub}x") for hub in "cd"), not_both_down("c", "d"))
    equations = {(hub, f"{hub}{i}", f"{hub}{i}'"): -1 for hub in "cd" for i in range(80)}
    H = H + Hamiltonian(equations, "spin")
    counts = count_ground_states(eliminate(Problem(H.domain, H.size, H.blocks), _order(H)))
    assert counts.total == ground_states(H, limit=0).degeneracy == 2 * 2**160 * 4
    assert any(counts.exact[child] is None for children in counts.children for child in children)
    drawn = draw_ground_states(H, 1000, seed=3)
    assert set(H.energies(drawn).tolist()) == {float(ground_states(H, limit=0).energy)}
    hubs = drawn[:, [H.positions["c"], H.positions["d"]]] < 0
    assert not hubs.all(axis=1).any()
    assert np.abs(hubs.mean(axis=0) - 1 / 4).max() < 0.05


def not_both_down(one: str, other: str) -> Hamiltonian:
    return Hamiltonian({(): 1, (one,): -1, (other,): -1, (one, other): 1}, "spin")


def _order(H: Hamiltonian) -> EliminationOrder:
    order = elimination_order(H.size, H.blocks, widest=22)
    assert isinstance(order, EliminationOrder)
    return order


@given(SMALL_WEIGHTS, st.randoms(use_true_random=False))
def test_any_order_of_elimination_gives_the_same_levels(H: Hamiltonian, chance) -> None:  # type: ignore[no-untyped-def]
    problem = Problem(H.domain, H.size, H.blocks)
    variables = list(range(H.size))
    chance.shuffle(variables)
    along = order_along(variables, neighbour_sets(H.size, H.blocks))
    _, energies = every_state(H)
    elimination = eliminate(problem, along)
    assert elimination.lowest == min(energies)
    expected = [(value - min(energies), energies.count(value)) for value in sorted(set(energies))[:4]]
    assert lowest_levels(elimination, 4) == expected


@given(SMALL_WEIGHTS)
def test_the_width_is_never_below_its_bound(H: Hamiltonian) -> None:
    assert width_bound(neighbour_sets(H.size, H.blocks)) <= _order(H).width


def test_the_width_of_a_grid_is_its_shorter_side() -> None:
    rows, columns = 4, 12
    bonds = {}
    for i in range(rows):
        for j in range(columns):
            if i + 1 < rows:
                bonds[(f"s{i}.{j}", f"s{i + 1}.{j}")] = 1
            if j + 1 < columns:
                bonds[(f"s{i}.{j}", f"s{i}.{j + 1}")] = 1
    assert predicted_cost(Hamiltonian(bonds, "spin")).width == rows


def test_compiled_loops_do_what_the_array_expressions_do() -> None:
    chance = np.random.default_rng(0)
    within, scope = tuple(range(16)), (0, 3, 4, 9, 15)
    start, message = chance.integers(-50, 50, 2**16), chance.integers(-50, 50, 2**5)
    for function in (add_message, multiply_message, lower_message):
        compiled, plain = start.copy(), start.astype(object)
        function(compiled, message, scope, within)
        function(plain, message.astype(object), scope, within)
        assert compiled.tolist() == plain.tolist()


def test_wide_tables_agree_with_the_transform() -> None:
    """Seventeen variables coupled all to all: the tables are large enough for the compiled loops."""
    from hubokit.spectrum.transforms import spectrum_by_transform

    chance = np.random.default_rng(3)
    pairs = np.array([(i, j) for i in range(17) for j in range(i)])
    H = Hamiltonian.from_arrays([pairs], [chance.integers(-2, 3, len(pairs))], domain="spin")
    assert_same_levels(low_levels(H, 3), spectrum_by_transform(H, 3))
    assert_same_levels([ground_states(H)], spectrum_by_transform(H, 1))


def test_progress_ends_at_the_whole() -> None:
    seen: list[tuple[int, int]] = []
    ground_states(Hamiltonian({("a", "b"): 1, ("c",): 1}, "spin"), progress=lambda *at: seen.append(at))
    assert seen[-1][0] == seen[-1][1]
    assert seen == sorted(seen)


def dense(size: int) -> Hamiltonian:
    pairs = np.array([(i, j) for i in range(size) for j in range(i)])
    return Hamiltonian.from_arrays([pairs], [np.ones(len(pairs), int)], domain="spin")


def test_a_dense_model_is_refused_with_its_width() -> None:
    with pytest.raises(LimitError, match=r"50 variables.*width of 49.*neighbourhood"):
        ground_states(dense(50))
    with pytest.raises(LimitError, match="exhaustion would do"):
        ground_states(dense(35))


def test_work_beyond_the_memory_or_the_time_is_refused_with_both_figures() -> None:
    with pytest.raises(LimitError, match=r"width 19 would take .* MB of memory, 1.0 MB are allowed"):
        ground_states(dense(20), memory=2**20)
    with pytest.raises(LimitError, match=r"about .* s, 1e-06 s are allowed"):
        low_levels(dense(20), time=1e-6)


def test_fewer_than_one_level_is_an_error() -> None:
    with pytest.raises(InputError, match="at least 1"):
        low_levels(dense(3), 0)


def test_a_sparse_model_of_large_width_is_refused_after_one_order(monkeypatch: pytest.MonkeyPatch) -> None:
    """Random triples at 1.2 a variable: every order gets stuck in a large core, and one attempt says so."""
    from hubokit.spectrum import elimination_order as orders

    chance = np.random.default_rng(2)
    triples = np.array([chance.choice(500, 3, replace=False) for _ in range(600)])
    H = Hamiltonian.from_arrays([triples], [np.ones(600, int)], domain="spin", size=500)
    made = []
    greedy = orders._greedy
    monkeypatch.setattr(orders, "_greedy", lambda *given: made.append(greedy(*given)) or made[-1])
    with pytest.raises(LimitError, match="500 variables with an elimination width of 28 or more"):
        ground_states(H)
    assert len(made) == 1
    assert made[0] > orders.HOPELESS


def test_a_chain_of_three_thousand_spins_is_short_work() -> None:
    bonds = {(f"s{i:04}", f"s{i + 1:04}"): 1 - 2 * (i % 3 == 0) for i in range(2999)}
    level = ground_states(Hamiltonian(bonds, "spin"), limit=2)
    assert (level.energy, level.degeneracy, level.gap) == (-2999, 2, 2)
    assert np.array_equal(level.states[0], -level.states[1])
