"""The choice between the exact ways: all give the same answer, the cheapest is taken, and the level says which."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.levels import Level
from hubokit.spectrum.search import ground_states, low_levels, routes
from tests.strategies import hamiltonians


def chain(size: int) -> Hamiltonian:
    return Hamiltonian({(f"v{i:03}", f"v{i + 1:03}"): 1 for i in range(size - 1)}, "spin")


def dense(size: int) -> Hamiltonian:
    chance = np.random.default_rng(size)
    pairs = np.array([(i, j) for i in range(size) for j in range(i)])
    return Hamiltonian.from_arrays([pairs], [chance.integers(1, 9, len(pairs))], domain="spin")


def same(one: Level, other: Level) -> bool:
    figures = [(x.energy, x.degeneracy, x.complete, x.gap) for x in (one, other)]
    return figures[0] == figures[1] and np.array_equal(one.states, other.states)


@given(hamiltonians(max_size=7, max_locality=4), st.integers(1, 4), st.integers(0, 5))
def test_every_method_gives_the_same_levels(H: Hamiltonian, count: int, limit: int) -> None:
    first = low_levels(H, count, limit)
    for method in ("transform", "exhaustion", "elimination"):
        found = low_levels(H, count, limit, method=method)
        assert len(found) == len(first)
        assert all(same(one, other) for one, other in zip(found, first, strict=True))
        assert same(ground_states(H, limit, method=method), first[0])


def test_elimination_and_exhaustion_agree_on_a_ring_of_twenty_with_fields() -> None:
    terms = {(f"v{i}", f"v{(i + 1) % 20}", f"v{(i + 2) % 20}"): 1 + i % 3 for i in range(20)}
    H = Hamiltonian(terms, "spin") + Hamiltonian({("v3",): -1, ("v11",): 2}, "spin")
    one, other = (ground_states(H, method=method) for method in ("elimination", "exhaustion"))
    assert same(one, other)


def test_the_level_says_which_way_was_taken() -> None:
    assert ground_states(chain(10)).method.startswith("transform")
    assert ground_states(dense(20)).method.startswith("exhaustion")
    assert ground_states(chain(100)).method == "elimination (width 1)"
    assert low_levels(chain(100), 2)[1].method == "elimination (width 1)"


def test_the_cheapest_way_comes_first() -> None:
    assert [route.method for route in routes(chain(30))] == ["elimination", "exhaustion"]
    assert [route.method for route in routes(dense(30))] == ["exhaustion", "elimination"]
    assert str(routes(chain(60))[0]).startswith("elimination: width 1, ")


def test_what_no_way_can_do_is_refused_with_the_size_of_each() -> None:
    with pytest.raises(LimitError, match=r"80 variables.*2\*\*80 states.*years.*width 79 or more.*neighbourhood"):
        ground_states(dense(80))
    with pytest.raises(LimitError, match="neighbourhood"):
        low_levels(dense(80), 3)


def test_a_method_that_was_asked_for_is_taken_or_refused() -> None:
    assert ground_states(chain(18), method="elimination").method.startswith("elimination")
    with pytest.raises(LimitError, match="use elimination"):
        ground_states(chain(100), method="exhaustion")
    with pytest.raises(LimitError, match="24"):
        ground_states(chain(100), method="transform")
    with pytest.raises(LimitError, match="width"):
        ground_states(dense(80), method="elimination")


def test_an_unknown_method_is_an_error_that_names_the_known_ones() -> None:
    with pytest.raises(InputError, match=r"'guess' is no method.*transform, exhaustion, elimination"):
        ground_states(chain(3), method="guess")
    with pytest.raises(InputError, match="at least 1"):
        low_levels(chain(3), 0)


def test_progress_and_checkpoint_reach_the_walk(tmp_path: Path) -> None:
    seen: list[tuple[int, int]] = []
    H = dense(22)
    level = ground_states(
        H, method="exhaustion", progress=lambda *at: seen.append(at), checkpoint=tmp_path / "walk.json"
    )
    assert seen[-1][0] == seen[-1][1]
    assert same(level, ground_states(H))
