"""The look around given states against plain enumeration of all states, at every radius, by both ways of looking."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from fractions import Fraction
from math import comb

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, unpack
from hubokit.spectrum import neighbourhood as module
from hubokit.spectrum import neighbourhood_walk, recentring
from hubokit.spectrum.balls import Neighbourhood
from hubokit.spectrum.neighbourhood import neighbourhood, neighbourhood_of
from hubokit.spectrum.recentring import flip_coefficients, recentred, trie_of
from tests.strategies import EDGES, hamiltonians

WAYS = {"blocks": 1 << 60, "walk": -1}


@st.composite
def looks(draw: st.DrawFn, values: st.SearchStrategy[int] | None = None) -> tuple[Hamiltonian, NDArray[np.int8]]:
    numbers = st.integers(-3, 3) if values is None else values
    H = draw(hamiltonians(max_size=7, max_locality=5, values=numbers, max_terms=14))
    chosen = draw(st.lists(st.integers(0, 2**H.size - 1), min_size=1, max_size=4, unique=True))
    return H, from_bits(unpack(np.array(chosen), H.size), H.domain)


Rows = list[list[tuple[object, ...]]]


def enumerated(H: Hamiltonian, centres: NDArray[np.int8], radius: int, distinct: bool, limit: int = 200) -> Rows:
    """For each centre and distance: number, least energy, how many at or below the highest centre, those in order."""
    states = from_bits(unpack(np.arange(2**H.size), H.size), H.domain)
    energies = H.integer_energies(states)
    distances = (states[None, :, :] != centres[:, None, :]).sum(axis=2)
    nearest, owner = distances.min(axis=0), distances.argmin(axis=0)
    highest = energies[nearest == 0].max()
    result = []
    for place in range(len(centres)):
        shells: list[tuple[object, ...]] = []
        for d in range(radius + 1):
            counted = (distances[place] == d) & ((owner == place) | (not distinct))
            others = np.flatnonzero(counted & ((nearest > 0) | (d == 0)))
            low = others[energies[others] <= highest] if d else others[:0]
            first = low[np.argsort(energies[low], kind="stable")][:limit]
            values = [H.constant + int(k) * H.resolution for k in energies[first]]
            least = H.constant + int(energies[others].min()) * H.resolution if len(others) else None
            shells.append((int(counted.sum()), least, len(low), states[first].tolist(), values))
        result.append(shells)
    return result


def as_rows(look: Neighbourhood) -> Rows:
    return [
        [(s.states, s.lowest, s.at_or_below, s.spurious.tolist(), list(s.energies)) for s in ball.shells]
        for ball in look.balls
    ]


@pytest.mark.parametrize("way", sorted(WAYS))
@pytest.mark.parametrize("distinct", [False, True])
@settings(max_examples=40)
@given(look=looks())
def test_every_radius_agrees_with_looking_at_every_state(
    way: str, distinct: bool, look: tuple[Hamiltonian, NDArray[np.int8]]
) -> None:
    H, centres = look
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(module, "SMALL", WAYS[way])
        for radius in range(H.size + 1):
            found = neighbourhood(H, centres, radius, limit=200, distinct=distinct)
            assert as_rows(found) == enumerated(H, centres, radius, distinct)


@pytest.mark.parametrize("distinct", [False, True])
@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_sixteen_variables_agree_at_every_radius(
    distinct: bool, domain: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    chance = np.random.default_rng(16)
    parts = [np.array([chance.choice(16, k, replace=False) for _ in range(20)]) for k in (1, 2, 3, 4)]
    H = Hamiltonian.from_arrays(parts, [chance.integers(-4, 5, 20) for _ in parts], domain=domain, size=16)
    centres = from_bits(np.unique(chance.integers(0, 2, (3, 16)), axis=0), domain)
    # With distinct, a state belongs to its nearest centre, whatever the radius: shells do not change with it.
    whole = enumerated(H, centres, 16, distinct, limit=10)
    for way, radii in (("walk", range(17)), ("blocks", (1, 3, 16))):
        monkeypatch.setattr(module, "SMALL", WAYS[way])
        for radius in radii:
            found = as_rows(neighbourhood(H, centres, radius, limit=10, distinct=distinct))
            assert found == [shells[: radius + 1] for shells in whole]


@given(looks(values=EDGES))
def test_weights_beyond_machine_integers_are_looked_at_exactly(look: tuple[Hamiltonian, NDArray[np.int8]]) -> None:
    H, centres = look
    assert as_rows(neighbourhood(H, centres, 3)) == enumerated(H, centres, min(3, H.size), False)


NEAR_THE_BOUNDS = st.sampled_from([1, 2**26 - 1, -(2**26), 2**29 - 1, -(2**29), 2**57 - 1, -(2**57)])


@given(looks(values=NEAR_THE_BOUNDS))
def test_the_walk_is_exact_up_to_the_bounds_of_its_integers(look: tuple[Hamiltonian, NDArray[np.int8]]) -> None:
    H, centres = look
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(module, "SMALL", -1)
        for radius in (2, H.size):
            found = as_rows(neighbourhood(H, centres, radius, limit=200))
            assert found == enumerated(H, centres, min(radius, H.size), False)


@settings(max_examples=40)
@given(looks(), st.integers(1, 4), st.integers(1, 5))
def test_a_list_cut_at_a_limit_keeps_the_lowest_and_of_equals_the_first(
    look: tuple[Hamiltonian, NDArray[np.int8]], radius: int, limit: int
) -> None:
    H, centres = look
    for way in WAYS.values():
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(module, "SMALL", way)
            whole = neighbourhood(H, centres, radius, limit=1000)
            cut = neighbourhood(H, centres, radius, limit=limit)
        for ball, short in zip(whole.balls, cut.balls, strict=True):
            for one, other in zip(ball.shells, short.shells, strict=True):
                assert other.spurious.tolist() == one.spurious[:limit].tolist()
                assert other.at_or_below == one.at_or_below


def ferromagnet(size: int, seed: int = 0) -> Hamiltonian:
    chance = np.random.default_rng(seed)
    triples = np.array([chance.choice(size, 3, replace=False) for _ in range(12 * size)])
    return Hamiltonian.from_arrays([triples], [-np.ones(len(triples), int)], domain="spin", size=size)


def test_parts_and_executors_do_not_change_what_is_found(monkeypatch: pytest.MonkeyPatch) -> None:
    H = ferromagnet(60)
    centres = from_bits(np.random.default_rng(1).integers(0, 2, (3, 60)), "spin")
    seen: list[tuple[int, int]] = []
    whole = neighbourhood(H, centres, 3, limit=20)
    monkeypatch.setattr(neighbourhood_walk, "TASK_STATES", 500)
    with ThreadPoolExecutor(2) as pool:
        split = neighbourhood(H, centres, 3, limit=20, executor=pool, progress=lambda *at: seen.append(at))
    assert as_rows(whole) == as_rows(split)
    assert len(seen) > 20
    assert seen[-1] == (len(seen), len(seen))


def test_rows_of_second_derivatives_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    H = ferromagnet(50)
    centres = from_bits(np.random.default_rng(2).integers(0, 2, (2, 50)), "spin")
    monkeypatch.setattr(module, "SMALL", -1)
    with_rows = neighbourhood(H, centres, 3)
    trie = trie_of(50, H.blocks, 3)
    assert recentred(trie, H.blocks, centres[0], "spin", np.int64).rows.shape == (50, 50)
    monkeypatch.setattr(recentring, "DENSE_ROWS", 0)
    assert recentred(trie, H.blocks, centres[0], "spin", np.int64).rows.shape == (0, 0)
    assert as_rows(neighbourhood(H, centres, 3)) == as_rows(with_rows)


def test_a_thousand_spins_around_the_planted_state() -> None:
    """All up is the ground state; flipping one spin breaks its terms, flipping two those that hold exactly one."""
    H = ferromagnet(1000)
    look = neighbourhood(H, np.ones((1, 1000), np.int8), 2)
    members, weights = H.blocks[0].members, H.blocks[0].weights
    single = -2 * np.bincount(members.ravel(), np.repeat(weights, 3), 1000).astype(np.int64)
    energy = int(weights.sum())
    together = np.zeros((1000, 1000), np.int64)
    for a, b in ((0, 1), (0, 2), (1, 2)):
        np.add.at(together, (members[:, a], members[:, b]), 4 * weights)
    pairs = single[:, None] + single[None, :] + together + together.T
    unit = H.resolution
    assert look.highest == energy * unit
    assert [shell.states for shell in look.balls[0].shells] == [1, 1000, comb(1000, 2)]
    assert look.balls[0].shells[1].lowest == (energy + int(single.min())) * unit
    assert look.balls[0].shells[2].lowest == (energy + int(pairs[np.triu_indices(1000, 1)].min())) * unit
    assert look.at_or_below == 0


def test_wide_products_are_looked_at_through_their_small_subsets() -> None:
    labels = [f"v{i}" for i in range(40)]
    H = Hamiltonian({tuple(labels): -7, tuple(labels[:2]): 1}, "boolean", labels=labels)
    look = neighbourhood(H, np.ones((1, 40), np.int8), 2)
    assert [shell.lowest for shell in look.balls[0].shells] == [-6, 0, 0]
    assert [shell.at_or_below for shell in look.balls[0].shells] == [0, 0, 0]


def test_energies_of_any_kind_are_looked_at_in_blocks() -> None:
    H = Hamiltonian({("a", "b", "c"): "1/2", ("c", "d"): -1, (): 3}, "spin")
    centres = np.array([[1, 1, 1, 1], [1, -1, 1, 1]], np.int8)
    direct = neighbourhood(H, centres, 3, distinct=True)
    asked = neighbourhood_of(
        H.integer_energies,
        centres,
        3,
        domain="spin",
        constant=H.constant,
        resolution=H.resolution,
        distinct=True,
    )
    assert as_rows(asked) == as_rows(direct)
    assert asked.highest == direct.highest == Fraction(5, 2)


def test_the_other_centres_are_no_spurious_states() -> None:
    H = Hamiltonian({("a", "b"): -1, ("c",): 1}, "spin")
    look = neighbourhood(H, [[1, 1, -1], [-1, -1, -1]], 2)
    assert look.at_or_below == 0
    assert look.lowest_other == 0
    assert look.states == 14
    assert neighbourhood(H, [[1, 1, -1], [-1, -1, -1]], 2, distinct=True).states == 8


@given(looks())
def test_the_whole_ball_counted_once_is_every_state_once(look: tuple[Hamiltonian, NDArray[np.int8]]) -> None:
    H, centres = look
    assert neighbourhood(H, centres, H.size + 3, distinct=True).states == 2**H.size


@given(looks(), st.integers(0, 4))
def test_coefficients_in_the_flips_add_up_to_energies(
    look: tuple[Hamiltonian, NDArray[np.int8]], radius: int
) -> None:
    """The energy of a flip set is the sum over the nodes of the trie that lie within it."""
    H, centres = look
    trie = trie_of(H.size, H.blocks, radius)
    sets: list[tuple[int, ...]] = [()] * len(trie.last)
    for node in range(len(sets)):
        for child in range(trie.begin[node], trie.end[node]):
            sets[child] = (*sets[node], int(trie.last[child]))
    assert len(set(sets)) == len(sets)
    values = flip_coefficients(trie, H.blocks, centres[0], H.domain, np.int64)
    for index in range(2**H.size):
        flips = {i for i in range(H.size) if index >> i & 1}
        if len(flips) <= radius:
            state = centres[0].copy()
            for i in flips:
                state[i] = -state[i] if H.domain == "spin" else 1 - state[i]
            inside = sum(int(v) for v, members in zip(values, sets, strict=True) if flips >= set(members))
            assert inside == H.integer_energies(state)[0]


def test_too_many_states_for_the_time_are_refused_with_their_number() -> None:
    number = sum(comb(3000, d) for d in range(5))
    with pytest.raises(LimitError, match=f"{number:,} states lie within 4 flips of 1 state of 3000.*smaller radius"):
        neighbourhood(ferromagnet(3000), np.ones((1, 3000), np.int8), 4)
    with pytest.raises(LimitError, match="within 2 flips of 1 state"):
        neighbourhood_of(lambda s: s.sum(axis=1), np.ones((1, 3000), np.int8), 2, domain="spin", time=1)


def test_too_many_subsets_for_the_memory_are_refused_with_their_number(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(recentring, "SUBSETS", 1000)
    with pytest.raises(LimitError, match=r"subsets of terms, 1,000 are allowed; a smaller radius"):
        neighbourhood(ferromagnet(200), np.ones((1, 200), np.int8), 3)


@pytest.mark.parametrize(
    ("around", "radius", "fault"),
    [
        (np.zeros((0, 2), np.int8), 1, "no state"),
        ([[1, 1], [1, -1], [1, 1]], 1, "states 0 and 2 are the same"),
        ([[1, 1]], -1, "the radius is -1"),
        ([[1, 0]], 1, r"\+1 or -1"),
    ],
)
def test_bad_centres_are_told(around: object, radius: int, fault: str) -> None:
    with pytest.raises(InputError, match=fault):
        neighbourhood(Hamiltonian({("a", "b"): 1}, "spin"), around, radius)


def test_all_flips_of_a_product_of_thirty_four_spins_wrap_around_without_reaching_an_energy() -> None:
    """Sums of coefficients up to 2**34 in 32 bits: modulo 2**32 they give back the energies +1 and -1."""
    assert [int(recentring._wrapped((-2) ** d, np.int32)) for d in (2, 31, 34)] == [4, -(2**31), 0]
    assert int(recentring._wrapped((-2) ** 34, np.int64)) == 2**34
    total = sum(comb(34, d) * int(recentring._wrapped((-2) ** d, np.int32)) for d in range(35))
    assert (total - 1) % 2**32 == 0


def test_a_reduced_model_measured_on_its_minimum_over_auxiliaries_looks_like_its_source() -> None:
    """P equals E for a one-to-one reduction: through the projected polynomial and through minima of single states."""
    from hubokit.reduction.reduce import reduce

    chance = np.random.default_rng(5)
    triples = np.array([chance.choice(12, 3, replace=False) for _ in range(14)])
    H = Hamiltonian.from_arrays([triples], [chance.choice([-2, -1, 1], 14)], domain="spin", size=12)
    R = reduce(H)
    projection = R.projection
    assert projection.originals == H.labels
    assert projection.polynomial is not None
    centres = from_bits(chance.integers(0, 2, (2, 12)), "spin")
    source = neighbourhood(H, centres, 2)
    on_polynomial = neighbourhood(projection.polynomial, centres, 2)
    on_minima = neighbourhood_of(
        lambda states: projection.minimum(states)[0],
        centres,
        2,
        domain="spin",
        constant=R.model.constant,
        resolution=R.model.resolution,
    )
    scale, shift = R.trail.scale, R.trail.shift
    for look in (on_polynomial, on_minima):
        assert look.highest == scale * source.highest + shift
        assert [[s.at_or_below for s in ball.shells] for ball in look.balls] == [
            [s.at_or_below for s in ball.shells] for ball in source.balls
        ]
        assert as_rows(look) == as_rows(on_polynomial)
