"""reduce(): the reduced model is quadratic and its minimum over the auxiliaries is the source, by enumeration."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import product

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction
from hubokit.reduction.assembly import fresh_labels
from hubokit.reduction.gadgets.table import FAMILIES
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction

LIMIT = 17


def random_model(seed: int, size: int = 6) -> Hamiltonian:
    """Up to six variables, a few terms of up to six members, small rational weights."""
    chance = random.Random(seed)
    labels = [f"v{i}" for i in range(chance.randint(3, size))]
    terms = {}
    for _ in range(chance.randint(1, 5)):
        members = chance.sample(labels, chance.choice([1, 2, 3, 3, 3, 4, len(labels)]) if len(labels) > 3 else 3)
        terms[tuple(sorted(members))] = Fraction(
            chance.choice([-7, -3, -2, -1, 1, 2, 5]), chance.choice([1, 1, 2, 3])
        )
    return Hamiltonian(terms, chance.choice(["spin", "boolean"]), labels=labels)


def minimum_by_enumeration(R: Reduction) -> tuple[list[Fraction], set[int], Fraction | None]:
    """P for all source states in lift order of the originals, multiplicities, and least auxiliary gap."""
    count = len(R.auxiliaries)
    assert R.model.labels[-count:] == R.auxiliaries or not count
    values = (1, -1) if R.model.domain == "spin" else (0, 1)
    states = np.array(list(product(values, repeat=R.model.size)), np.int8)
    energies = R.model.integer_energies(states).reshape(-1, 2**count)
    least = energies.min(axis=1)
    excess = energies - least[:, None]
    gap = Fraction(int(excess[excess > 0].min())) * R.model.resolution if (excess > 0).any() else None
    minima = [R.model.constant + int(value) * R.model.resolution for value in least]
    return minima, set((excess == 0).sum(axis=1).tolist()), gap


def source_energies(R: Reduction) -> list[Fraction]:
    """E in the same order."""
    values = (1, -1) if R.model.domain == "spin" else (0, 1)
    count = len(R.auxiliaries)
    states = np.array([(*state, *[values[0]] * count) for state in product(values, repeat=R.source.size)], np.int8)
    return [R.source.energy(state) for state in R.project(states)]


@pytest.mark.parametrize("seed", range(240))
def test_one_to_one_keeps_every_energy_with_one_best_setting(seed: int) -> None:
    R = reduce(random_model(seed), prefer=["auxiliaries", "range", "couplers"][seed % 3])
    if R.model.size > LIMIT:
        R = reduce(random_model(seed))
    assert R.model.locality <= 2
    assert R.model.size <= LIMIT
    minima, multiplicities, gap = minimum_by_enumeration(R)
    assert minima == source_energies(R)
    assert multiplicities == {1}
    assert gap is None or gap >= R.source.resolution


@pytest.mark.parametrize("seed", range(40))
def test_the_gap_asked_for_is_there(seed: int) -> None:
    R = reduce(random_model(seed, size=5), auxiliary_gap="7/2")
    if R.model.size > LIMIT:
        pytest.skip("too many auxiliaries to enumerate")
    minima, multiplicities, gap = minimum_by_enumeration(R)
    assert minima == source_energies(R)
    assert multiplicities == {1}
    assert gap is None or gap >= Fraction(7, 2)


@pytest.mark.parametrize("seed", range(40))
@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_the_model_may_have_the_other_domain(seed: int, domain: str) -> None:
    R = reduce(random_model(seed, size=4), domain=domain, keep="energies")
    assert R.model.domain == domain
    assert R.model.locality <= 2
    minima, _, _ = minimum_by_enumeration(R)
    assert minima == source_energies(R)


@pytest.mark.parametrize("name", [one.name for one in FAMILIES])
def test_a_named_family_serves_what_it_can_and_the_energies_stay(name: str) -> None:
    for domain in ("spin", "boolean"):
        H = Hamiltonian({("a", "b", "c"): 2, ("b", "c", "d"): -3, ("a", "b", "c", "d", "e"): 1}, domain)
        R = reduce(H, method=name)
        minima, multiplicities, _ = minimum_by_enumeration(R)
        assert minima == source_energies(R)
        assert multiplicities == {1}
        served = {row["method"] for row in R.trail.steps[-1].parameters["methods"]}
        assert (name in served) == any(one.name == name and one.domain == domain for one in FAMILIES)


def test_a_quadratic_model_comes_back_without_auxiliaries() -> None:
    H = Hamiltonian({("a", "b"): 2, ("c",): -1, (): 5}, "spin")
    R = reduce(H)
    assert R.auxiliaries == ()
    assert R.model == H


def test_a_constant_comes_back_as_it_is() -> None:
    H = Hamiltonian({(): "7/3"}, "boolean")
    assert reduce(H).model == H


def test_the_trail_says_where_it_started_what_was_kept_and_what_served() -> None:
    H = Hamiltonian({("a", "b", "c"): -1, ("b", "c", "d"): -2}, "boolean")
    R = reduce(H, keep="energies")
    step = R.trail.steps[-1]
    assert (step.name, step.start, step.scale, step.shift) == ("reduction", H.digest, 1, 0)
    assert step.auxiliaries == R.auxiliaries
    assert step.parameters["keep"] == R.keep == "energies"
    assert R.trail.source is H


def test_a_change_of_domain_is_a_step_of_its_own_after_the_reduction() -> None:
    H = Hamiltonian({("a", "b", "c"): -1}, "boolean", convention="2x-1")
    R = reduce(H, domain="spin")
    assert [step.name for step in R.trail.steps] == ["reduction", "domain"]
    assert R.trail.steps[1].parameters == {"from": "boolean", "to": "spin", "convention": "2x-1"}
    assert R.trail.steps[1].start == reduce(H).model.digest
    assert R.trail.auxiliaries == R.auxiliaries


def test_a_product_too_long_for_the_other_domain_is_reduced_before_the_change() -> None:
    H = Hamiltonian({tuple(f"v{i}" for i in range(60)): 1}, "spin")
    R = reduce(H, domain="boolean")
    assert (R.model.domain, R.model.locality, len(R.auxiliaries)) == ("boolean", 2, 5)


def test_the_same_call_gives_the_same_model() -> None:
    first, second = (reduce(random_model(5)) for _ in range(2))
    assert first.model.digest == second.model.digest
    assert first.trail.steps == second.trail.steps


def test_auxiliaries_avoid_the_names_in_use() -> None:
    assert fresh_labels(["y0", "y2"], 3) == ("y1", "y3", "y4")
    assert reduce(Hamiltonian({("y0", "a", "b"): 1}, "spin")).auxiliaries == ("y1",)


def test_lifting_and_projecting_come_back_to_the_same_state() -> None:
    R = reduce(random_model(3))
    values = (1, -1) if R.source.domain == "spin" else (0, 1)
    states = np.array(list(product(values, repeat=R.source.size)), np.int8)
    lifted = R.lift(states)
    assert np.array_equal(R.project(lifted), states)
    assert [R.model.energy(state) for state in lifted] == [R.source.energy(state) for state in states]


def test_huge_weights_stay_exact() -> None:
    H = Hamiltonian({("a", "b", "c"): 10**30 + 1, ("a",): -1}, "spin")
    R = reduce(H)
    minima, multiplicities, _ = minimum_by_enumeration(R)
    assert minima == source_energies(R)
    assert multiplicities == {1}


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"keep": "spectrum"}, "keep: 'spectrum'"),
        ({"prefer": "speed"}, "prefer: 'speed'"),
        ({"domain": "qubit"}, "domain: 'qubit'"),
        ({"method": "magic"}, "no such reduction method: 'magic'"),
        ({"auxiliary_gap": -1}, "must be positive"),
        ({"auxiliary_gap": 0}, "must be positive"),
    ],
)
def test_an_unknown_word_is_refused(arguments: dict[str, object], words: str) -> None:
    with pytest.raises(InputError, match=words):
        reduce(Hamiltonian({("a", "b", "c"): 1}, "spin"), **arguments)  # type: ignore[arg-type]


@pytest.mark.parametrize("method", ["auto", "pair-cover", "spin-product"])
@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_a_gap_beyond_int64_stays_exact(domain: str, method: str) -> None:
    gap = 10**40
    H = Hamiltonian({("a", "b", "c"): 1, ("b", "c", "d"): 2}, domain)
    made = reduce(H, method, auxiliary_gap=gap)
    least = made.projection.gap_everywhere
    assert least is not None
    assert least.value is not None
    assert least.value >= gap
    assert made.projection.polynomial == H


@pytest.mark.parametrize("gap", [10**18, 10**40, "1e-300"])
def test_penalties_are_tightened_exactly_whatever_the_gap(gap: int | str) -> None:
    members = [(0, 1, 2, 3), (0, 1, 4, 5), (0, 1, 2, 4), (1, 2, 3, 4), (2, 3, 4, 5)]
    H = Hamiltonian.from_arrays([np.array(members)], [np.array([1, 1, -1, 2, 1])], domain="boolean")
    made = reduce(H, "pair-cover", auxiliary_gap=gap)
    least = made.projection.gap_everywhere
    assert least is not None
    assert least.value is not None
    assert least.value >= as_fraction(gap)
    assert made.projection.polynomial == H


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("largest", [2**51, 10**17, 10**18, 2**61, 10**25])
def test_terms_on_common_pairs_stay_exact_beside_one_that_is_huge(domain: str, largest: int) -> None:
    terms = {("a", "b", "c"): largest, ("b", "c", "d"): -3, ("a", "b", "c", "d"): "1/7"}
    H = Hamiltonian({**terms, ("a", "c", "d", "e", "f"): 2, ("a", "b", "d", "e", "f"): 2}, domain)
    for method in ("auto", "pair-cover"):
        for keep in ("energies", "one-to-one"):
            assert reduce(H, method, keep).projection.polynomial == H
    assert reduce(H, keep="ground-states").model.locality <= 2


def test_a_seed_that_no_document_holds_is_refused() -> None:
    with pytest.raises(InputError, match=r"seed: 9007199254740992 was given; seeds lie within 2\*\*53 - 1"):
        reduce(Hamiltonian({("a", "b", "c"): 1}, "spin"), seed=2**53)


def test_what_is_no_hamiltonian_is_refused_and_a_reduction_is_called_one() -> None:
    made = reduce(Hamiltonian({("a", "b", "c"): 1}, "spin"))
    with pytest.raises(InputError, match=r"not a Reduction; this one has been reduced, and \.model is a Hamiltonian"):
        reduce(made)  # type: ignore[arg-type]
    with pytest.raises(InputError, match="a Hamiltonian is needed, not a str"):
        reduce("model.json")  # type: ignore[arg-type]
