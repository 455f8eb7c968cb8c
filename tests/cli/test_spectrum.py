"""What `spectrum` says of targets, ground states and draws is what plain enumeration finds."""

from __future__ import annotations

import itertools
import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import jsonschema
import networkx as nx
import numpy as np
import pytest

import hubokit as hk
from hubokit.cli.states_file import read_states, states_text
from hubokit.preparation.side_by_side import Asked, landscape_after, measured_on_minimum
from hubokit.validation.traps import traps

ROOT = Path(__file__).resolve().parents[2]


def summary(text: str) -> dict[str, Any]:
    """A summary document that its schema accepts."""
    document: dict[str, Any] = json.loads(text)
    schema = json.loads((ROOT / "schemas" / "summary.schema.json").read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator(schema).validate(document)
    return document


def all_states(model: hk.Hamiltonian) -> np.ndarray[Any, Any]:
    values = (1, -1) if model.domain == "spin" else (0, 1)
    return np.array(list(itertools.product(values, repeat=model.size)), np.int8)


def energies(model: hk.Hamiltonian, states: np.ndarray[Any, Any]) -> list[Fraction]:
    return [model.constant + int(k) * model.resolution for k in model.integer_energies(states)]


def minimum(reduction: hk.Reduction) -> dict[tuple[int, ...], Fraction]:
    """Source state to the least energy over the auxiliaries, by visiting every state of the reduced model."""
    states = all_states(reduction.model)
    least: dict[tuple[int, ...], Fraction] = {}
    for source, energy in zip(reduction.project(states).tolist(), energies(reduction.model, states), strict=True):
        least[tuple(source)] = min(least.get(tuple(source), energy), energy)
    return least


@pytest.fixture
def design() -> hk.Hamiltonian:
    """Six spins with three-body and four-body terms."""
    terms = {("a", "b", "c"): -3, ("c", "d", "e"): 2, ("a", "d", "e", "f"): -2, ("b",): "1/2", ("e", "f"): 1}
    return hk.Hamiltonian(terms, domain="spin")


@pytest.fixture
def files(design: hk.Hamiltonian, tmp_path: Path) -> tuple[Path, Path, Path]:
    """The design, its reduction and the two lowest states as targets."""
    hk.write(design, tmp_path / "design.json")
    hk.write(hk.reduce(design), tmp_path / "reduced.json")
    states = all_states(design)
    order = np.argsort([float(e) for e in energies(design, states)], kind="stable")
    text = states_text(design.labels, states[order[[0, 3]]])
    (tmp_path / "targets.csv").write_text(text, encoding="utf-8")
    return tmp_path / "design.json", tmp_path / "reduced.json", tmp_path / "targets.csv"


def plain_merit(table: dict[tuple[int, ...], Fraction], targets: list[tuple[int, ...]]) -> tuple[Fraction, Fraction]:
    """B and D of targets over all states of a table."""
    inside = [table[state] for state in targets]
    others = [energy for state, energy in table.items() if state not in targets]
    return max(inside) - min(inside), min(others) - max(inside)


@pytest.mark.parametrize("which", [0, 1])
def test_without_a_radius_bandwidth_and_distance_are_those_of_all_states(
    hubokit: Any, files: tuple[Path, Path, Path], design: hk.Hamiltonian, which: int
) -> None:
    figures = summary(hubokit("spectrum", files[which], "--targets", files[2], "--json").out)["figures"]
    targets = [tuple(row) for row in read_states(files[2], design.labels, "spin").tolist()]
    table = {
        tuple(s): e for s, e in zip(all_states(design).tolist(), energies(design, all_states(design)), strict=True)
    }
    if which == 1:
        source_figures = {name: figures[f"source-{name}"] for name in ("bandwidth", "distance", "bandwidth-ratio")}
        assert source_figures == {name: figures[name] for name in source_figures}
        table = minimum(hk.read(files[1]))
    spread, distance = plain_merit(table, targets)
    assert (figures["bandwidth"], figures["distance"]) == (str(spread), str(distance))
    assert figures["bandwidth-ratio"] == (str(spread / distance) if distance > 0 else None)
    assert figures["bandwidth-over-all-states"] is True


def test_with_a_radius_the_figures_are_worded_as_bounds(hubokit: Any, files: tuple[Path, Path, Path]) -> None:
    done = hubokit("spectrum", files[1], "--targets", files[2], "--radius", "1")
    assert done.code == 0
    assert "at most" in done.out
    assert "all states within 1 flip of 2 states given" in done.out
    document = summary(hubokit("spectrum", files[1], "--targets", files[2], "--radius", "1", "--json").out)
    assert document["figures"]["bandwidth-over-all-states"] is False
    rows = [(row["of"], row["distance"], row["states"]) for row in document["shells"]]
    assert rows == [("source", 0, "2"), ("source", 1, "12"), ("model", 0, "2"), ("model", 1, "12")]


def test_states_at_or_below_the_targets_are_named_by_their_flips(hubokit: Any, fixtures: Path) -> None:
    model = hk.read(fixtures / "greenhouse.json")
    targets = read_states(fixtures / "greenhouse-settings.csv", model.labels, "boolean")
    arguments = ["spectrum", fixtures / "greenhouse.json", "--targets", fixtures / "greenhouse-settings.csv"]
    document = summary(hubokit(*arguments, "--radius", "2", "--json").out)
    seen = set()
    for row in document["shells"]:
        assert len(row["spurious"]) == int(row["at_or_below"])
        for one in row["spurious"]:
            state = targets[one["target"] - 1].copy()
            state[[model.positions[label] for label in one["flips"]]] ^= 1
            assert len(one["flips"]) == row["distance"]
            assert model.energy(state.tolist()) == Fraction(one["energy"]) == 0
            seen.add(tuple(state.tolist()))
    ground = hk.ground_states(model).states
    near = (ground[:, None, :] != targets[None]).sum(axis=2).min(axis=1)
    assert seen == {tuple(s) for s in ground[(near > 0) & (near <= 2)].tolist()}
    assert "flips away from it" in hubokit(*arguments, "--radius", "2").out


def test_a_state_near_several_targets_is_counted_once_when_asked(hubokit: Any, fixtures: Path) -> None:
    arguments = ["spectrum", fixtures / "greenhouse.json", "--targets", fixtures / "greenhouse-settings.csv"]
    once = summary(hubokit(*arguments, "--radius", "14", "--distinct", "--json").out)
    assert once["figures"]["states"] == str(2**14)
    often = summary(hubokit(*arguments, "--radius", "14", "--json").out)
    assert often["figures"]["states"] == str(6 * 2**14)


def test_a_minimum_that_is_no_polynomial_is_measured_state_by_state(files: tuple[Path, Path, Path]) -> None:
    from dataclasses import replace

    known, unknown = hk.read(files[1]), hk.read(files[1])
    unknown.__dict__["projection"] = replace(unknown.projection, polynomial=None)
    targets = read_states(files[2], known.source.labels, "spin")
    for radius in (None, 0, 2):
        first = measured_on_minimum(known, targets, Asked(radius))
        second = measured_on_minimum(unknown, targets, Asked(radius))
        assert [first.merit.lowest_other, first.merit.exact] == [second.merit.lowest_other, second.merit.exact]
        for one, other in zip(first.look.balls, second.look.balls, strict=True):
            seen = [(s.states, s.lowest, s.at_or_below) for s in one.shells]
            assert seen == [(s.states, s.lowest, s.at_or_below) for s in other.shells]


def test_flipped_and_renamed_variables_are_measured_at_the_same_targets(
    hubokit: Any, fixtures: Path, tmp_path: Path
) -> None:
    source = hk.read(fixtures / "elsewhere-source.json")
    targets = tmp_path / "targets.csv"
    targets.write_text(states_text(source.labels, hk.ground_states(source).states[:2]), encoding="utf-8")
    named = ["--source", fixtures / "elsewhere-source.json", "--origin", fixtures / "elsewhere-origin.json"]
    done = hubokit("spectrum", fixtures / "elsewhere-reduced.json", *named, "--targets", targets, "--json")
    document = summary(done.out)
    half = len(document["shells"]) // 2
    bare = [{name: row[name] for name in ("distance", "states", "lowest")} for row in document["shells"]]
    assert bare[:half] == bare[half:]
    assert document["figures"]["highest-target-energy"] == "-2"


def test_every_trap_is_a_local_minimum_that_the_source_has_not_and_none_is_missed(fixtures: Path) -> None:
    reduction = hk.reduce(hk.read(fixtures / "greenhouse.json"))
    model, source = reduction.model, reduction.source
    targets = read_states(fixtures / "greenhouse-settings.csv", source.labels, "boolean")

    def is_minimum(of: hk.Hamiltonian, state: np.ndarray[Any, Any]) -> bool:
        flipped = (state ^ np.eye(of.size, dtype=np.int8)).astype(np.int8)
        return bool((of.integer_energies(flipped) >= of.integer_energies(state[None])[0]).all())

    expected = set()
    for place, lifted in enumerate(reduction.lift(targets)):
        for size in (1, 2):
            for flips in itertools.combinations(range(model.size), size):
                state = lifted.copy()
                state[list(flips)] ^= 1
                if not is_minimum(model, state):
                    continue
                below = reduction.project(state[None])
                best = model.energy(reduction.lift(below)[0].tolist())
                if not (is_minimum(source, below[0]) and model.energy(state.tolist()) == best):
                    expected.add((place, tuple(model.labels[i] for i in flips)))
    found = traps(reduction, targets, 2)
    assert {(trap.target, trap.minimum.flips) for trap in found.found} == expected
    assert expected, "a reduction that adds no trap would test nothing"
    added = set(reduction.auxiliaries)
    assert [t.through_auxiliary for t in found.found] == [bool(added & set(t.minimum.flips)) for t in found.found]


def joined(states: np.ndarray[Any, Any]) -> tuple[int, list[int]]:
    """Least distance and sizes of the groups, by comparing every pair."""
    distances = (states[:, None, :] != states[None, :, :]).sum(axis=2)
    graph = nx.from_numpy_array((distances == 1).astype(int))
    least = int(distances[~np.eye(len(states), dtype=bool)].min())
    return least, sorted(map(len, nx.connected_components(graph)))


def test_ground_states_before_and_after_reduction_lie_as_enumeration_finds_them(
    hubokit: Any, files: tuple[Path, Path, Path]
) -> None:
    reduction = hk.read(files[1])
    figures = summary(hubokit("spectrum", files[1], "--json").out)["figures"]
    for mark, model in (("source-", reduction.source), ("", reduction.model)):
        states = all_states(model)
        level = np.array(energies(model, states), object)
        least, groups = joined(states[level == level.min()])
        assert figures[f"{mark}closest-ground-states"] == least
        assert figures[f"{mark}groups-of-ground-states"] == len(groups)
        assert figures[f"{mark}largest-group-of-ground-states"] == groups[-1]
    lifted = landscape_after(reduction, 1000, None, 600.0)
    assert "lifted" in lifted.level.method
    assert (lifted.closest, sorted(lifted.groups or ())) == joined(lifted.level.states)
    assert lifted.closest == figures["closest-ground-states"]


def test_a_reduced_model_too_large_to_search_is_described_by_lifted_ground_states(
    hubokit: Any, fixtures: Path, tmp_path: Path
) -> None:
    reduced = tmp_path / "reduced.json"
    assert hubokit("reduce", fixtures / "low-autocorrelation-16.json", "-o", reduced).code == 0
    reduction = hk.read(reduced)
    least, groups = joined(reduction.lift(hk.ground_states(reduction.source).states))
    document = summary(hubokit("spectrum", reduced, "--json").out)
    assert document["levels"] == []
    assert any("levels of the reduced model" in note for note in document["notes"])
    assert document["figures"]["closest-ground-states"] == least
    assert document["figures"]["groups-of-ground-states"] == len(groups)
    assert document["figures"]["source-closest-ground-states"] < least
    states = np.array(summary(hubokit("spectrum", reduced, "--draw", "9", "--json").out)["drawn"], np.int8)
    assert set(energies(reduction.model, states)) == {hk.ground_states(reduction.source).energy}


def test_how_the_ground_states_were_found_is_said_with_the_predicted_costs(hubokit: Any, tmp_path: Path) -> None:
    chain = hk.Hamiltonian({(f"v{i}", f"v{i + 1}", f"v{i + 2}"): 1 for i in range(198)}, "spin")
    hk.write(chain, tmp_path / "chain.json")
    done = hubokit("spectrum", tmp_path / "chain.json", "--levels", "2")
    assert done.code == 0
    assert "elimination (width 2)" in done.out
    assert "exhaustion: 2**200 states" in " ".join(done.out.split())
    assert max(map(len, done.out.splitlines())) <= 80 + len(str(tmp_path))


def test_draws_are_ground_states_repeatable_and_read_back(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    model = hk.read(fixtures / "greenhouse.json")
    out = tmp_path / "drawn.csv"
    arguments = ["spectrum", fixtures / "greenhouse.json", "--draw", "2000", "--seed", "5"]
    assert hubokit(*arguments, "-o", out).code == 0
    states = read_states(out, model.labels, model.domain)
    assert states.shape == (2000, model.size)
    assert set(energies(model, states)) == {0}
    assert len(np.unique(states, axis=0)) == 152, "each of the 152 is missed by 2000 draws once in half a million"
    assert summary(hubokit(*arguments, "--json").out)["drawn"] == states.tolist()
    assert summary(hubokit(*arguments[:-1], "6", "--json").out)["drawn"] != states.tolist()
    assert hubokit(*arguments, "-o", out).code == 2, "the file exists"


def test_draws_from_more_ground_states_than_could_be_listed(hubokit: Any, tmp_path: Path) -> None:
    pairs = hk.Hamiltonian({(f"a{i:02d}", f"b{i:02d}"): -1 for i in range(60)}, "spin")
    hk.write(pairs, tmp_path / "pairs.json")
    document = summary(hubokit("spectrum", tmp_path / "pairs.json", "--draw", "40", "--json").out)
    assert document["figures"]["ground-states"] == str(2**60)
    states = np.array(document["drawn"], np.int8)
    assert set(energies(pairs, states)) == {-60}
    assert len(np.unique(states, axis=0)) == 40


def test_options_that_do_not_go_together_are_refused(hubokit: Any, files: tuple[Path, Path, Path]) -> None:
    for wrong in (
        ["--draw", "3", "--targets", files[2]],
        ["--density", "--draw", "3"],
        ["--radius", "2"],
        ["--distinct"],
        ["-o", "drawn.csv"],
    ):
        done = hubokit("spectrum", files[0], *wrong)
        assert (done.code, done.err.count("\n")) == (2, 1)
        assert "--" in done.err


def test_targets_that_are_none_are_refused(hubokit: Any, files: tuple[Path, Path, Path], tmp_path: Path) -> None:
    empty = tmp_path / "empty.csv"
    empty.write_text("a,b,c,d,e,f\n", encoding="utf-8")
    done = hubokit("spectrum", files[0], "--targets", empty)
    assert done.code == 2
    assert "empty.csv" in done.err


def thousand() -> tuple[hk.Hamiltonian, np.ndarray[Any, Any]]:
    """A thousand spins of which a planted state satisfies every product of three, and that state."""
    chance = np.random.default_rng(3)
    planted = chance.choice(np.array([1, -1], np.int8), 1000)
    rest = [chance.permutation(1000)[:999].reshape(-1, 3) for _ in range(2)]
    triples = np.unique(np.sort(np.concatenate(rest), axis=1), axis=0)
    weights = -planted[triples].prod(axis=1, dtype=np.int64)
    return hk.Hamiltonian.from_arrays([triples], [weights], domain="spin", size=1000), planted


@pytest.fixture
def large(tmp_path: Path) -> tuple[hk.Reduction, Path]:
    """A thousand spins reduced, and its planted state in a file."""
    design, planted = thousand()
    targets = tmp_path / "planted.csv"
    targets.write_text(states_text(design.labels, planted[None]), encoding="utf-8")
    return hk.reduce(design), targets


def saved(reduction: hk.Reduction, terms: dict[tuple[str, ...], Any], path: Path) -> Path:
    """The reduction with some terms of its model changed, still declared to keep every energy."""
    changed = dict(reduction.model.terms())
    for members, weight in terms.items():
        changed[members] = changed.get(members, 0) + weight
    model = hk.Hamiltonian(changed, domain="spin", labels=reduction.model.labels)
    hk.write(hk.Reduction(reduction.source, model, reduction.auxiliaries, scale=1, shift=0), path)
    return path


def statuses(hubokit: Any, path: Path, targets: Path, option: str) -> tuple[int, dict[str, Any]]:
    done = hubokit(
        "check", path, "--evidence", "neighbourhood", option, targets, "--radius", "1", "--claim", "all", "--json"
    )
    return done.code, json.loads(done.out)["claims"]


def test_a_thousand_spins_are_tested_near_their_target(
    hubokit: Any, large: tuple[hk.Reduction, Path], tmp_path: Path
) -> None:
    code, claims = statuses(hubokit, saved(large[0], {}, tmp_path / "same.json"), large[1], "--targets")
    assert code == 3
    for name in ("ground-energy", "ground-states", "even-multiplicity", "energies", "one-to-one"):
        assert claims[name]["status"] == "tested"
        assert "1,001 states visited, all within radius 1 of 1 centre given; not a proof" in claims[name]["detail"]


def test_a_thousand_spins_with_one_more_field_are_refuted_with_a_witness(
    hubokit: Any, large: tuple[hk.Reduction, Path], tmp_path: Path
) -> None:
    reduction, targets = large
    path = saved(reduction, {("v7",): 1}, tmp_path / "field.json")
    code, claims = statuses(hubokit, path, targets, "--around")
    assert code == 1
    witness = claims["energies"]["witness"]
    wrong = hk.read(path)
    assert claims["energies"]["status"] == "refuted"
    assert str(wrong.source.energy(witness["state"])) == witness["source_energy"]
    assert str(wrong.model.energy({**witness["state"], **witness["auxiliaries"]})) == witness["model_energy"]
    assert witness["source_energy"] != witness["model_energy"]


def test_a_target_that_is_lost_among_visited_states_alone_leaves_its_claim_open(
    hubokit: Any, large: tuple[hk.Reduction, Path], tmp_path: Path
) -> None:
    reduction, targets = large
    planted = read_states(targets, reduction.source.labels, "spin")[0]
    path = saved(reduction, {("v7",): 50 * int(planted[7])}, tmp_path / "lost.json")
    _, claims = statuses(hubokit, path, targets, "--around")
    assert claims["ground-states"]["status"] == "open"
    assert "1 minimisers are lost and 1 spurious" in claims["ground-states"]["detail"]


def test_a_thousand_spins_without_a_radius_are_refused_with_what_would_do(
    hubokit: Any, large: tuple[hk.Reduction, Path], tmp_path: Path
) -> None:
    reduction, targets = large
    chance = np.random.default_rng(4)
    pairs = np.unique(np.sort(chance.permutation(1000).reshape(-1, 2), axis=1), axis=0)
    more = hk.Hamiltonian.from_arrays([pairs], [np.full(len(pairs), 1)], domain="spin", size=1000)
    hk.write(reduction.source + more, tmp_path / "dense.json")
    done = hubokit("spectrum", tmp_path / "dense.json", "--targets", targets)
    assert (done.code, done.err.count("\n")) == (2, 1)
    assert "--radius R" in done.err
    done = hubokit("spectrum", tmp_path / "dense.json", "--targets", targets, "--radius", "2", "--json")
    assert summary(done.out)["figures"]["states"] == str(1 + 1000 + 1000 * 999 // 2)


def test_an_undefined_ratio_is_explained_below_the_table(hubokit: Any, tmp_path: Path) -> None:
    design = hk.Hamiltonian({("a", "b", "c"): -1, ("a",): 1, ("d",): 0}, domain="boolean", labels=list("abcd"))
    hk.write(hk.reduce(design), tmp_path / "reduced.json")
    (tmp_path / "targets.csv").write_text("a,b,c,d\n0,0,0,0\n", encoding="utf-8")
    shown = hubokit("spectrum", tmp_path / "reduced.json", "--targets", tmp_path / "targets.csv", "--radius", "1")
    assert shown.code == 0
    merit = shown.out[shown.out.index("MERIT") : shown.out.index("AT OR BELOW")]
    assert "B/D undefined   a state lies at the highest target" in merit
    assert max(map(len, merit.splitlines())) <= 80


def test_work_refused_names_the_file(hubokit: Any, tmp_path: Path) -> None:
    rng = np.random.default_rng(2)
    pairs = np.array([(i, j) for i in range(90) for j in range(i)])
    hk.write(hk.Hamiltonian.from_arrays([pairs], [rng.integers(1, 9, len(pairs))], "spin"), tmp_path / "dense.json")
    for option in (["--density"], ["--draw", "2"], []):
        refused = hubokit("spectrum", tmp_path / "dense.json", *option)
        assert refused.code == 2
        assert "dense.json: " in refused.err
