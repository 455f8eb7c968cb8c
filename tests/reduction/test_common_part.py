"""Terms with a common part: one auxiliary for the part, proved by enumeration and by projection."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import combinations, product

import numpy as np
import pytest

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.project import project
from hubokit.reduction.common_part import METHOD, MOST, TERM_LIMIT, Shared, shared_parts
from hubokit.reduction.planner import plan_table
from hubokit.reduction.reduce import PREFERENCES, reduce


def random_model(seed: int, size: int, count: int) -> Hamiltonian:
    """Terms that take most of their members from a small core."""
    chance = random.Random(seed)
    labels = [f"v{i}" for i in range(size)]
    core = chance.sample(labels, chance.choice([3, 4, 5]))
    terms = {}
    for _ in range(count):
        members = {*chance.sample(core, chance.randint(2, len(core))), *chance.sample(labels, chance.randint(1, 3))}
        terms[tuple(sorted(members))] = Fraction(chance.choice([-5, -2, -1, 1, 3]), chance.choice([1, 1, 2]))
    return Hamiltonian(terms, "boolean", labels=labels)


def bits(count: int) -> np.ndarray:
    """All settings of that many booleans."""
    return np.array(list(product((0, 1), repeat=count)), np.int8).reshape(-1, count)


def minimum(model: Hamiltonian, originals: int) -> tuple[list[Fraction], np.ndarray, np.ndarray]:
    """Over the last variables, by enumeration: least energy, the excesses met, and the first best setting."""
    table = model.integer_energies(bits(model.size)).reshape(2**originals, -1)
    least = table.min(axis=1)
    energies = [model.constant + int(k) * model.resolution for k in least]
    return energies, table - least[:, None], bits(model.size - originals)[table.argmin(axis=1)]


def shared_in(H: Hamiltonian, gap: Fraction) -> Shared:
    shared = shared_parts(H, gap)
    assert isinstance(shared, Shared)
    return shared


@pytest.mark.parametrize("gap", [0, Fraction(1, 2), 1, 7])
@pytest.mark.parametrize("signs", [(1, 1, 1, 1), (-1, -1, -2, -1), (-3, 2, 5, -1)])
@pytest.mark.parametrize("part", [4, 5, 6])
def test_the_form_has_the_terms_as_its_minimum_and_the_gap_asked_for(
    part: int, signs: tuple[int, ...], gap: int
) -> None:
    common = tuple(f"c{i}" for i in range(part))
    H = Hamiltonian({(*common, f"r{i}"): weight for i, weight in enumerate(signs)}, "boolean")
    shared = shared_in(H, Fraction(gap))
    assert shared.parts == (common,)
    energies, excess, best = minimum(shared.model, H.size)
    assert energies == [H.energy(state) for state in bits(H.size)]
    product_of_part = bits(H.size)[:, [H.positions[label] for label in common]].all(axis=1)
    if gap:
        assert ((excess == 0).sum(axis=1) == 1).all()
        assert np.array_equal(best[:, 0], product_of_part)
        assert excess[excess > 0].min() * shared.model.resolution == gap


def test_positive_terms_without_a_gap_are_the_published_form() -> None:
    # Fix, Gruber, Boros, Zabih 2011: the sum of the weights stands on the common part.
    H = Hamiltonian({(*"abcd", "e"): 2, (*"abcd", "f"): 3, (*"abcd", "g"): 1}, "boolean")
    terms = dict(shared_in(H, Fraction(0)).model.terms())
    assert terms[tuple("abcd")] == 6
    assert (terms[("e", "y0")], terms[("y0",)], terms[("a", "y0")]) == (2, 18, -6)


def test_negative_terms_without_a_gap_take_one_auxiliary_in_all() -> None:
    H = Hamiltonian({(*"abcd", other): -1 for other in "efgh"}, "boolean")
    assert len(reduce(H, method=METHOD, keep="energies").auxiliaries) == 1


@pytest.mark.parametrize("keep", ["one-to-one", "energies"])
def test_reduced_models_keep_every_energy_by_enumeration(keep: str) -> None:
    used = 0
    for seed in range(24):
        H = random_model(seed, 8, 6)
        R = reduce(H, method=METHOD, keep=keep, prefer=PREFERENCES[seed % 3])
        if "common parts" not in R.trail.steps[0].parameters or R.model.size > 15:
            continue
        used += 1
        energies, excess, _ = minimum(R.model, H.size)
        assert energies == [H.energy(state) for state in bits(H.size)]
        if keep == "one-to-one":
            assert ((excess == 0).sum(axis=1) == 1).all()
    assert used > 8


@pytest.mark.parametrize("gap", [None, "1/3", 7])
def test_projection_proves_what_common_parts_and_the_rest_make_at_any_size(gap: object) -> None:
    used = 0
    for seed in range(5):
        H = random_model(seed, 30, 10 + 12 * seed)
        R = reduce(H, method=METHOD, prefer=PREFERENCES[seed % 3], auxiliary_gap=gap)  # type: ignore[arg-type]
        used += "common parts" in R.trail.steps[0].parameters
        found = project(R.model, R.auxiliaries)
        assert found.polynomial == H
        assert found.uniform_multiplicity == 1
        assert found.gap_everywhere is not None
        assert found.gap_everywhere.value >= (H.resolution if gap is None else Fraction(gap))  # type: ignore[operator, arg-type]
    assert used > 3


def test_a_part_shared_by_many_longer_terms_is_proved_as_well() -> None:
    chance = random.Random(0)
    H = Hamiltonian({(*"abcd", f"p{i}", f"q{i}"): chance.choice([-5, -1, 2, 3]) for i in range(40)}, "boolean")
    R = reduce(H, method=METHOD)
    assert len(R.auxiliaries) == 42
    found = project(R.model, R.auxiliaries)
    assert (found.polynomial, found.uniform_multiplicity) == (H, 1)


def test_parts_of_parts_are_found() -> None:
    near = {(*"abcd", "x", other): 1 for other in "efgh"}
    far = {(*"abcd", other, "z"): 1 for other in "ijkl"}
    shared = shared_in(Hamiltonian(near | far, "boolean"), Fraction(1))
    assert any(label.startswith("y") for part in shared.parts for label in part)
    assert max(len(part) for part in shared.parts) <= MOST


def test_common_parts_are_chosen_where_they_are_fewest_and_the_trail_names_them() -> None:
    H = Hamiltonian({(*"abcdef", *pair): 1 for pair in combinations("ghijk", 1)}, "boolean")
    R = reduce(H)
    assert plan_table(R.trail)[0]["plan"] == METHOD
    assert len(R.auxiliaries) == 3
    assert R.trail.steps[0].parameters["common parts"][0]["of"] == list("abcdef")


def test_cubic_terms_spins_and_lone_terms_have_no_common_part_to_save_with() -> None:
    assert shared_parts(Hamiltonian({tuple("abc"): 1, tuple("abd"): 1}, "boolean"), Fraction(0)) is None
    assert shared_parts(Hamiltonian({tuple("abcde"): 1, tuple("abcdf"): 1}, "spin"), Fraction(0)) is None
    assert shared_parts(Hamiltonian({tuple("abcde"): 1, tuple("fghij"): 1}, "boolean"), Fraction(0)) is None


def test_more_terms_than_the_work_limit_are_left_and_named() -> None:
    rows = np.array([[0, 1, 2, i, j] for i, j in combinations(range(3, 40), 2)])
    H = Hamiltonian.from_arrays([rows], [np.ones(len(rows), np.int64)], domain="boolean")
    assert len(H) > TERM_LIMIT
    notes = {row["plan"]: row["reason"] for row in plan_table(reduce(H, prefer="range").trail) if row["reason"]}
    assert f"{TERM_LIMIT:,}" in notes[METHOD]
    with pytest.raises(LimitError, match=f"{TERM_LIMIT:,}"):
        reduce(H, method=METHOD)


def test_huge_weights_stay_exact() -> None:
    H = Hamiltonian({(*"abcd", other): (-1) ** i * 10**30 + i for i, other in enumerate("efg")}, "boolean")
    R = reduce(H, method=METHOD)
    assert project(R.model, R.auxiliaries).polynomial == H
