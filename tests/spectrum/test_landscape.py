"""Distances between states and groups under single flips, against the definitions pair by pair."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits
from hubokit.spectrum import landscape
from hubokit.spectrum.landscape import connected_groups, minimum_distance
from hubokit.spectrum.search import ground_states


@st.composite
def state_lists(draw: st.DrawFn) -> NDArray[np.int8]:
    """Distinct states of a few or many variables, some of them close to each other."""
    size = draw(st.sampled_from([1, 3, 5, 8, 64, 65, 130]))
    chance = np.random.default_rng(draw(st.integers(0, 10**6)))
    bits = chance.integers(0, 2, (draw(st.integers(1, 4)), size))
    near = bits[chance.integers(0, len(bits), 12)] ^ (chance.random((12, size)) < 2 / size)
    rows = chance.permutation(np.unique(np.concatenate([bits, near]), axis=0))
    return from_bits(rows, draw(st.sampled_from(["spin", "boolean"])))


@given(state_lists())
def test_the_least_distance_is_that_of_comparing_every_pair(states: NDArray[np.int8]) -> None:
    distances = [int((a != b).sum()) for i, a in enumerate(states) for b in states[:i]]
    assert minimum_distance(states) == min(distances, default=None)


@given(state_lists())
def test_groups_are_the_connected_parts_of_the_graph_of_single_flips(states: NDArray[np.int8]) -> None:
    graph: nx.Graph[int] = nx.Graph()
    graph.add_nodes_from(range(len(states)))
    graph.add_edges_from((i, j) for i in range(len(states)) for j in range(i) if (states[i] != states[j]).sum() == 1)
    groups = connected_groups(states)
    parts = [set(np.flatnonzero(groups.labels == label).tolist()) for label in range(len(groups))]
    assert sorted(map(sorted, parts)) == sorted(map(sorted, nx.connected_components(graph)))
    assert [len(part) for part in parts] == list(groups.sizes)
    assert [min(part) for part in parts] == sorted(min(part) for part in parts)


def test_a_long_path_of_states_is_one_group() -> None:
    path = np.tril(np.ones((200, 199), np.int8), -1)
    shuffled = path[np.random.default_rng(0).permutation(200)]
    assert connected_groups(shuffled).sizes == (200,)
    assert minimum_distance(shuffled) == 1


def test_ground_states_of_an_antiferromagnetic_ring_of_five_are_one_ring() -> None:
    """One bond of an odd ring is broken; moving it by one site flips one spin: ten states in one group."""
    H = Hamiltonian({(f"s{i}", f"s{(i + 1) % 5}"): 1 for i in range(5)}, "spin")
    states = ground_states(H).states
    assert (len(states), minimum_distance(states), connected_groups(states).sizes) == (10, 1, (10,))


def test_parity_solutions_lie_two_flips_apart() -> None:
    states = ground_states(Hamiltonian({("a", "b", "c", "d"): -1}, "spin")).states
    assert (len(states), minimum_distance(states), len(connected_groups(states))) == (8, 2, 8)


def test_no_states_have_no_distance_and_no_groups() -> None:
    nothing = np.zeros((0, 4), np.int8)
    assert minimum_distance(nothing) is None
    assert connected_groups(nothing).sizes == ()


def test_a_state_given_twice_is_an_error() -> None:
    for function in (minimum_distance, connected_groups):
        with pytest.raises(InputError, match="twice"):
            function(np.zeros((2, 3), np.int8))


def test_too_many_pairs_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(landscape, "PAIRS", 10)
    far = np.repeat(np.arange(8)[:, None] & np.array([[1, 2, 4]]), 3, axis=1) > 0
    with pytest.raises(LimitError, match="8 states are too many"):
        minimum_distance(far.astype(np.int8))
