"""Where the trail says what auxiliaries stand for, lifting needs no search and gives what the exact minimum gives."""

from __future__ import annotations

import random
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

import hubokit.projection.project
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.common_part import METHOD as COMMON_PART
from hubokit.reduction.lifting import MODEL, definitions
from hubokit.reduction.pair_piece import METHOD as PAIR_COVER
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction


def random_model(seed: int, domain: str, longest: int = 5) -> Hamiltonian:
    """Twelve variables, fourteen terms, most of them with shared pairs."""
    chance = random.Random(seed)
    labels = [f"v{i}" for i in range(12)]
    terms = {}
    for _ in range(14):
        members = {*chance.sample(labels[:5], 2), *chance.sample(labels, chance.randint(1, longest - 2))}
        terms[tuple(sorted(members))] = Fraction(chance.choice([-7, -3, 1, 2, 5]), chance.choice([1, 2]))
    return Hamiltonian(terms, domain, labels=labels)


def some_states(H: Hamiltonian) -> np.ndarray:
    """Forty random states."""
    chance = np.random.default_rng(0)
    return chance.choice([1, -1] if H.domain == "spin" else [0, 1], (40, H.size)).astype(np.int8)


def by_minimum(R: Reduction) -> np.ndarray:
    """The same by the exact minimum alone, the trail forgotten."""
    return Reduction(R.source, R.model, R.auxiliaries).lift(some_states(R.source))


@pytest.fixture
def no_search(monkeypatch: pytest.MonkeyPatch) -> None:
    """Any projection is an error."""

    def refuse(*_: object) -> None:
        raise AssertionError("searched")

    monkeypatch.setattr(hubokit.projection.project, "project", refuse)


@pytest.mark.parametrize("method", ["auto", PAIR_COVER, COMMON_PART])
@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_lifting_gives_the_minimum(domain: str, method: str) -> None:
    defined = 0
    for seed in range(4):
        R = reduce(random_model(seed, domain), method=method, domain=("spin", "boolean")[seed % 2])
        defined += len(definitions(R.trail, R.source, R.model))
        assert np.array_equal(R.lift(some_states(R.source)), by_minimum(R))
    assert defined > 10 or (domain, method) == ("spin", COMMON_PART)


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_pairs_are_lifted_without_any_search(domain: str, no_search: None) -> None:
    H = Hamiltonian({("a", "b", other): 1 for other in "cdefg"}, domain)
    R = reduce(H, method=PAIR_COVER)
    states = some_states(H)
    lifted = R.lift(states)
    assert [R.model.energy(state) for state in lifted] == [H.energy(state) for state in states]


@pytest.mark.usefixtures("no_search")
def test_the_search_is_needed_where_the_trail_is_forgotten() -> None:
    H = Hamiltonian({("a", "b", other): 1 for other in "cdefg"}, "spin")
    R = reduce(H, method=PAIR_COVER)
    with pytest.raises(AssertionError, match="searched"):
        by_minimum(R)


@pytest.mark.parametrize("keep", ["ground-states", "energies"])
def test_of_several_best_settings_the_first_is_given(keep: str) -> None:
    for seed in range(4):
        R = reduce(random_model(seed, "boolean"), keep=keep)
        assert np.array_equal(R.lift(some_states(R.source)), by_minimum(R))


def test_a_model_changed_since_is_minimised_anew() -> None:
    R = reduce(random_model(3, "spin", 4), method=PAIR_COVER)
    weaker = R.model + Hamiltonian({(label,): -40 for label in R.auxiliaries}, "spin")
    changed = Reduction(R.source, weaker.with_labels(R.model.labels), R.auxiliaries, trail=R.trail)
    assert not definitions(changed.trail, changed.source, changed.model)
    assert np.array_equal(changed.lift(some_states(R.source)), by_minimum(changed))
    assert not np.array_equal(changed.lift(some_states(R.source)), R.lift(some_states(R.source)))


def test_a_list_that_says_something_else_is_not_believed() -> None:
    R = reduce(random_model(3, "spin", 4), method=PAIR_COVER)
    step = R.trail.steps[0]
    listed = [dict(row) for row in step.parameters["pair cover"]["pairs"]]
    listed[0]["of"] = [label for label in R.source.labels if label not in listed[0]["of"]][:2]
    parameters = {**step.parameters, "pair cover": {"pairs": listed}}
    lying = Reduction(
        R.source, R.model, R.auxiliaries, trail=replace(R.trail, steps=(replace(step, parameters=parameters),))
    )
    assert definitions(lying.trail, lying.source, lying.model)
    assert np.array_equal(lying.lift(some_states(R.source)), by_minimum(R))


@pytest.mark.parametrize("rows", [7, [7], [{"auxiliary": "y0"}], [{"auxiliary": "y0", "of": ["nobody", "v0"]}], None])
def test_a_list_of_another_form_is_left_alone(rows: object) -> None:
    R = reduce(random_model(3, "spin", 4), method=PAIR_COVER)
    step = R.trail.steps[0]
    parameters = {MODEL: step.parameters[MODEL], "pair cover": {"pairs": rows}}
    trail = replace(R.trail, steps=(replace(step, parameters=parameters),))
    assert definitions(trail, R.source, R.model) == []


def test_a_written_reduction_is_lifted_by_rule_as_well(tmp_path: Path) -> None:
    from hubokit.exchange.formats import read, write

    R = reduce(random_model(1, "boolean"))
    write(R, tmp_path / "reduced.json")
    again = read(tmp_path / "reduced.json")
    assert isinstance(again, Reduction)
    assert definitions(again.trail, again.source, again.model) == definitions(R.trail, R.source, R.model) != []
