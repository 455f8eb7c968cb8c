"""The comparison of a reduced model with its source, against every state of both written out."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from fractions import Fraction
from math import prod

import numpy as np
import pytest

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian, booleans
from hubokit.spectrum import comparison
from hubokit.spectrum.comparison import exhaustive_comparison
from hubokit.spectrum.comparison_result import Comparison

VALUES = {"spin": (1, -1), "boolean": (0, 1)}


def random_terms(rng: np.random.Generator, labels: list[str], most: int, count: int) -> dict[tuple[str, ...], int]:
    terms = {}
    for _ in range(count):
        size = int(rng.integers(1, min(most, len(labels)) + 1))
        terms[tuple(labels[i] for i in sorted(rng.choice(len(labels), size, replace=False)))] = int(
            rng.integers(-3, 4)
        )
    return terms


def random_pair(rng: np.random.Generator) -> tuple[Hamiltonian, Hamiltonian, list[str]]:
    domain = str(rng.choice(["spin", "boolean"]))
    originals = [f"v{i}" for i in range(int(rng.integers(1, 6)))]
    auxiliaries = [f"y{i}" for i in range(int(rng.integers(0, 5)))]
    labels = [*originals, *auxiliaries]
    rng.shuffle(labels)
    E = Hamiltonian(random_terms(rng, originals, 4, int(rng.integers(0, 9))), domain, labels=originals)
    locality = int(rng.choice([2, 2, 3]))
    terms = random_terms(rng, labels, locality, int(rng.integers(0, 16)))
    F = Hamiltonian({(): "1/3"} | terms, domain, labels=labels)
    return E, F, auxiliaries


def written_out(
    E: Hamiltonian, F: Hamiltonian, auxiliaries: list[str]
) -> list[tuple[tuple[int, ...], Fraction, Fraction, int, Fraction | None]]:
    """For every x in lift order: x, E, P, m and the auxiliary gap."""
    rows = []
    for x in itertools.product(VALUES[E.domain], repeat=E.size):
        state = dict(zip(E.labels, x, strict=True))
        energies = sorted(
            F.energy(state | dict(zip(auxiliaries, a, strict=True)))
            for a in itertools.product(VALUES[E.domain], repeat=len(auxiliaries))
        )
        above = [energy - energies[0] for energy in energies if energy > energies[0]]
        rows.append((x, E.energy(state), energies[0], energies.count(energies[0]), above[0] if above else None))
    return rows


def assert_agrees(found: Comparison, E: Hamiltonian, F: Hamiltonian, auxiliaries: list[str], limit: int) -> None:
    rows = written_out(E, F, auxiliaries)
    least, lowest = min(row[1] for row in rows), min(row[2] for row in rows)
    ground, bottom = [row for row in rows if row[1] == least], [row for row in rows if row[2] == lowest]
    for side, states, own, other in ((found.source, ground, 1, 2), (found.projected, bottom, 2, 1)):
        assert (side.energy, side.count) == (states[0][own], len(states))
        assert [tuple(row) for row in side.states.tolist()] == [row[0] for row in states[:limit]]
        assert side.others == [row[other] for row in states[:limit]]
        assert side.multiplicities == [row[3] for row in states[:limit]]
    assert found.common == len([row for row in ground if row[2] == lowest])
    assert found.same_ground_states == (ground == bottom)
    assert found.multiplicities == (min(row[3] for row in rows), max(row[3] for row in rows))
    assert found.ground_multiplicities == (min(row[3] for row in ground), max(row[3] for row in ground))
    assert found.auxiliary_gap == min((row[4] for row in rows if row[4] is not None), default=None)
    assert found.auxiliary_gap_at_minimum == min((row[4] for row in bottom if row[4] is not None), default=None)

    wrong = [row for row in rows if row[2] != found.scale * row[1] + found.shift]
    assert found.violations == len(wrong)
    assert found.same_energies == (not wrong)
    if wrong:
        worst = max(wrong, key=lambda row: abs(row[2] - found.scale * row[1] - found.shift))
        for difference, row in ((found.first_violation, wrong[0]), (found.worst_violation, worst)):
            assert difference is not None
            assert tuple(difference.state.tolist()) == row[0]
            assert (difference.source_energy, difference.projected_energy) == row[1:3]
    else:
        assert found.first_violation is None
        assert found.worst_violation is None


@pytest.fixture(params=["one block", "many blocks"])
def _blocks(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    if request.param == "many blocks":
        monkeypatch.setattr(comparison, "WHOLE", -1)
        monkeypatch.setattr(comparison, "LOW", 2)


@pytest.mark.usefixtures("_blocks")
@pytest.mark.parametrize("seed", range(2))
def test_random_pairs_of_models_agree_with_all_their_states(seed: int) -> None:
    rng = np.random.default_rng(seed)
    for _ in range(60):
        E, F, auxiliaries = random_pair(rng)
        limit = int(rng.choice([0, 2, 100]))
        found = exhaustive_comparison(E, F, auxiliaries, limit=limit)
        assert_agrees(found, E, F, auxiliaries, limit)
        scale, shift = Fraction(int(rng.integers(1, 4)), 2), Fraction(int(rng.integers(-2, 3)), 3)
        declared = exhaustive_comparison(E, F, auxiliaries, limit=limit, scale=scale, shift=shift)
        assert (declared.scale, declared.shift, declared.scale_from) == (scale, shift, "declared")
        assert_agrees(declared, E, F, auxiliaries, limit)


@pytest.mark.usefixtures("_blocks")
def test_the_only_scale_and_shift_are_found_where_there_are_some() -> None:
    rng = np.random.default_rng(4)
    for _ in range(40):
        E, _, _ = random_pair(rng)
        scale, shift = Fraction(int(rng.integers(1, 9)), 3), Fraction(int(rng.integers(-9, 9)), 7)
        # one free auxiliary at a field: it adds a constant of its own to the minimum
        free = Hamiltonian({("y",): 2}, E.domain)
        F = (scale * E + shift + free).with_labels([*E.labels, "y"])
        added = -2 if E.domain == "spin" else 0
        found = exhaustive_comparison(E, F, ["y"])
        assert found.scale_from == "found"
        assert found.same_energies
        if len(E):
            assert (found.scale, found.shift) == (scale, shift + added)
        else:
            assert found.scale == 1


@pytest.mark.parametrize("factor", [-1, 0])
def test_a_relation_needs_a_positive_scale(factor: int) -> None:
    E = Hamiltonian({("a",): 1, ("a", "b"): -2}, "boolean")
    F = (factor * E + 5).with_labels(["a", "b"])
    found = exhaustive_comparison(E, F, [])
    assert (found.scale, found.shift, found.scale_from) == (1, 0, "default")
    assert found.violations > 0


def test_auxiliaries_in_a_ring_a_tree_and_a_clique_are_eliminated_exactly() -> None:
    rng = np.random.default_rng(9)
    shapes = {
        "ring": [(i, (i + 1) % 6) for i in range(6)],
        "tree": [(i, (i - 1) // 2) for i in range(1, 6)],
        "clique": list(itertools.combinations(range(5), 2)),
    }
    for edges in shapes.values():
        for domain in VALUES:
            originals, auxiliaries = ["a", "b", "c"], [f"y{i}" for i in range(1 + max(map(max, edges)))]
            terms = {(auxiliaries[i], auxiliaries[j]): int(rng.integers(-2, 3)) for i, j in edges}
            terms |= {(x, y): int(rng.integers(-1, 2)) for x in originals for y in auxiliaries}
            E = Hamiltonian({("a", "b", "c"): 1}, domain)
            F = Hamiltonian(terms, domain, labels=[*originals, *auxiliaries])
            assert_agrees(exhaustive_comparison(E, F, auxiliaries), E, F, auxiliaries, 1000)


def test_multiplicities_beyond_int64_are_whole_numbers() -> None:
    """70 free auxiliaries, each with two equally good settings."""
    free = [f"y{i}" for i in range(70)]
    E = Hamiltonian({("a",): 1}, "spin")
    F = Hamiltonian({("a",): 1, ("a", "y0"): 1} | {("y1", "y2"): 1}, "spin", labels=["a", *free])
    found = exhaustive_comparison(E, F, free)
    assert found.multiplicities == (2**68, 2**68)
    assert found.auxiliary_gap == 2


def monomial(size: int, auxiliaries: int) -> Callable[[str], Hamiltonian]:
    """Tie-free stand-ins of -x1 x2 x3 on consecutive variables, one auxiliary each."""

    def build(kind: str) -> Hamiltonian:
        terms: dict[tuple[str, ...], int] = {}
        for k in range(auxiliaries):
            names = [f"v{(k + i) % size}" for i in range(3)]
            if kind == "source":
                terms[tuple(names)] = -1
            else:
                terms |= {(f"y{k}",): 5} | {(name, f"y{k}"): -2 for name in names}
        return Hamiltonian(
            terms, "boolean", labels=[f"v{i}" for i in range(size)] + [f"y{k}" for k in range(auxiliaries)]
        )

    return build


def test_a_model_of_17_variables_and_17_auxiliaries_is_compared_in_blocks() -> None:
    build = monomial(17, 17)
    auxiliaries = [f"y{k}" for k in range(17)]
    E = Hamiltonian(dict(build("source").terms()), "boolean", labels=[f"v{i}" for i in range(17)])
    F = build("reduced")
    seen: list[tuple[int, int]] = []
    found = exhaustive_comparison(E, F, auxiliaries, progress=lambda done, total: seen.append((done, total)))
    assert found.same_energies
    assert found.scale_from == "found"
    assert found.multiplicities == (1, 1)
    assert found.auxiliary_gap == 1
    assert found.source.energy == -17
    assert seen[-1][0] == seen[-1][1]
    with ThreadPoolExecutor(2) as executor:
        again = exhaustive_comparison(E, F, auxiliaries, executor=executor)
    assert (again.source.count, again.multiplicities) == (found.source.count, found.multiplicities)

    spoilt = F + Hamiltonian({("v3", "y3"): 1}, "boolean")
    refuted = exhaustive_comparison(E, spoilt, auxiliaries, scale=Fraction(1))
    assert refuted.violations > 0
    assert refuted.first_violation is not None
    state = dict(zip(E.labels, refuted.first_violation.state.tolist(), strict=True))
    assert E.energy(state) == refuted.first_violation.source_energy


def test_models_that_do_not_fit_together_are_refused() -> None:
    E, F = Hamiltonian({("a",): 1}, "spin"), Hamiltonian({("a", "y"): 1}, "spin")
    with pytest.raises(InputError, match="'b' is not in both"):
        exhaustive_comparison(Hamiltonian({("b",): 1}, "spin", labels=["a", "b"]), F, ["y"])
    with pytest.raises(InputError, match="boolean model"):
        exhaustive_comparison(E, Hamiltonian({("a", "y"): 1}, "boolean"), ["y"])
    with pytest.raises(InputError, match="named twice"):
        exhaustive_comparison(E, F, ["y", "y"])
    with pytest.raises(InputError, match="positive"):
        exhaustive_comparison(E, F, ["y"], scale=Fraction(-1))


def test_what_is_too_large_is_refused_with_what_else_would_do() -> None:
    E = Hamiltonian({("a",): 1}, "spin")
    tangled = [f"y{i}" for i in range(14)]
    F = Hamiltonian(dict.fromkeys(itertools.combinations(tangled, 2), 1), "spin", labels=["a", *tangled])
    with pytest.raises(LimitError, match=r"depends on 13 others.*projection"):
        exhaustive_comparison(E, F, tangled)
    with pytest.raises(LimitError, match="int64"):
        exhaustive_comparison(E, Hamiltonian({("a",): 2**70, ("a", "y"): 1}, "spin"), ["y"])
    many = [f"v{i}" for i in range(40)]
    wide = Hamiltonian({(label,): 1 for label in many}, "spin")
    with pytest.raises(LimitError, match="would take"):
        exhaustive_comparison(wide, wide, [])


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_a_second_level_that_is_rare_is_found_without_a_walk(domain):
    x = booleans([f"x{i}" for i in range(10)])
    H = prod(x[1:], start=x[0]).in_domain(domain)
    M = H * 3 - 1
    found = exhaustive_comparison(H, M, [])
    assert (found.scale, found.shift, found.scale_from, found.violations == 0) == (3, -1, "found", True)


def test_a_walk_that_would_take_too_long_is_refused_before_it_starts():
    x = booleans([f"x{i}" for i in range(45)])
    H = prod(x[1:], start=x[0])
    with pytest.raises(LimitError):
        exhaustive_comparison(H, H, [], time=1)
