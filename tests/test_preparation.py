"""The main job: one call from a design to a folder with everything in it, or nothing at all."""

from __future__ import annotations

import csv
import json
import re
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

import hubokit as hk
from hubokit.errors import HubokitError, InputError
from hubokit.preparation import Prepared, prepare
from hubokit.preparation.contents import DOCUMENTS

ROOT = Path(__file__).resolve().parents[1]
FIXTURES = ROOT / "fixtures"


@pytest.fixture(scope="module")
def twelve(tmp_path_factory: pytest.TempPathFactory) -> Prepared:
    """The low-autocorrelation model of twelve spins, prepared once."""
    return prepare(FIXTURES / "low-autocorrelation-12.json", tmp_path_factory.mktemp("n12") / "out")


def optimum_by_scip(path: Path) -> tuple[Fraction, dict[str, int]]:
    """Least energy of an OPB file as PySCIPOpt solves it (constant and scale from the comments), and the state."""
    from pyscipopt import Model

    comments = re.findall(
        r"^\* hubokit (\w+) (?:(\d+) )?(\".*\"|\d+)$", path.read_text(encoding="utf-8"), re.MULTILINE
    )
    said = {key: json.loads(value) for key, _, value in comments if key in ("scale", "constant")}
    names = {f"x{number}": json.loads(value) for key, number, value in comments if key == "name"}

    solver = Model()
    solver.hideOutput()
    solver.readProblem(str(path))
    solver.optimize()
    assert solver.getStatus() == "optimal"
    best = solver.getBestSol()
    state = {names[v.name]: round(solver.getSolVal(best, v)) for v in solver.getVars() if v.name in names}
    return Fraction(said["constant"]) + Fraction(said["scale"]) * round(solver.getObjVal()), state


def test_twelve_spins_are_proved_one_to_one_and_with_it_everything_that_follows(twelve: Prepared) -> None:
    for claim in ("quadratic", "one-to-one", "energies", "even-multiplicity", "ground-states", "ground-energy"):
        assert twelve.verdict.holds(claim), claim
    assert twelve.exit_code == 0
    assert twelve.figures.ground_energy == 10
    assert twelve.reduction.model.locality <= 2


def test_the_folder_holds_what_it_names_and_nothing_else(twelve: Prepared) -> None:
    written = {path.name for path in twelve.folder.iterdir()}
    assert set(twelve.files) <= written
    assert {name for name in written - set(twelve.files) if not name.endswith(".names.json")} == set()
    assert set(DOCUMENTS) <= set(twelve.files)
    assert {"source.opb", "reduced.opb"} <= set(twelve.files)
    readme = (twelve.folder / "README.txt").read_text(encoding="utf-8")
    for name in twelve.files:
        assert name in readme
    assert "hubokit project" in readme
    assert all(len(line) <= 80 for line in readme.splitlines())
    assert readme.isascii()


def test_the_documents_of_the_folder_are_read_back_equal(twelve: Prepared) -> None:
    source = hk.read(twelve.folder / "source.json")
    reduced = hk.read(twelve.folder / "reduced.json")
    verdict = hk.read(twelve.folder / "verdict.json")
    assert source == twelve.reduction.source
    assert reduced.source == source
    assert reduced.model == twelve.reduction.model
    assert reduced.auxiliaries == twelve.reduction.auxiliaries
    assert verdict.holds("one-to-one")
    assert verdict.source_digest == source.digest
    assert verdict.model_digest == reduced.model.digest


def test_intent_and_notes_of_the_design_travel_into_the_folder(twelve: Prepared) -> None:
    before = hk.read_document(FIXTURES / "low-autocorrelation-12.json")
    for name in ("source.json", "reduced.json"):
        after = hk.read_document(twelve.folder / name)
        assert after.intent == before.intent
        assert after.notes == before.notes


def test_scip_finds_the_published_optimum_in_both_files_of_the_twelve_spins(twelve: Prepared) -> None:
    assert optimum_by_scip(twelve.folder / "source.opb")[0] == 10
    assert optimum_by_scip(twelve.folder / "reduced.opb")[0] == 10


@pytest.mark.parametrize("name", ["greenhouse.json", "satisfiable-20.cnf"])
def test_another_program_finds_the_same_optimum_in_both_exports(tmp_path: Path, name: str) -> None:
    made = prepare(FIXTURES / name, tmp_path / "out", exports=["opb"])
    level = hk.ground_states(made.reduction.source, 1)
    assert optimum_by_scip(made.folder / "source.opb")[0] == level.energy
    assert optimum_by_scip(made.folder / "reduced.opb")[0] == level.energy


def test_the_answer_of_another_program_to_the_reduced_file_is_a_ground_state_of_the_design(tmp_path: Path) -> None:
    made = prepare(FIXTURES / "greenhouse.json", tmp_path / "out", exports=["opb"])
    energy, state = optimum_by_scip(made.folder / "reduced.opb")
    # A variable that the objective does not hold is free, and left out by the program.
    answer = {**dict.fromkeys(made.reduction.model.labels, 0), **state}
    assert made.reduction.model.energy(answer) == energy == 0
    (setting,) = made.reduction.project([answer])
    assert made.reduction.source.energy(setting) == 0


@pytest.mark.parametrize(
    ("name", "ground_energy"),
    [
        ("low-autocorrelation-08.json", 8),
        ("low-autocorrelation-12.json", 10),
        ("low-autocorrelation-16.json", 24),
        ("parity-equations.json", -18),
        ("satisfiable-20.cnf", 0),
        ("greenhouse.json", 0),
    ],
)
def test_every_fixture_is_proved_and_its_ground_energy_named(tmp_path: Path, name: str, ground_energy: int) -> None:
    made = prepare(FIXTURES / name, tmp_path / "out", exports=["opb"])
    assert made.verdict.holds("one-to-one")
    assert made.figures.ground_energy == ground_energy


def test_a_formula_that_no_setting_satisfies_has_a_ground_energy_above_zero(tmp_path: Path) -> None:
    made = prepare(FIXTURES / "unsatisfiable-20.cnf", tmp_path / "out", exports=["opb"])
    assert made.verdict.holds("one-to-one")
    assert made.figures.ground_energy is not None
    assert made.figures.ground_energy > 0


@pytest.mark.parametrize("keep", ["ground-states", "energies", "one-to-one"])
@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_what_was_asked_to_be_kept_is_what_is_checked(tmp_path: Path, keep: str, domain: str) -> None:
    made = prepare(
        FIXTURES / "low-autocorrelation-08.json", tmp_path / "out", exports=["opb"], keep=keep, domain=domain
    )
    assert made.verdict.asked == ("quadratic", keep)
    assert made.verdict.holds(keep)
    assert made.reduction.model.domain == domain


def test_a_hamiltonian_is_prepared_as_well_as_a_file(tmp_path: Path) -> None:
    a, b, c = hk.spins("a b c")
    made = prepare(3 * a * b * c - b + 2, tmp_path / "out", exports=["opb"])
    assert made.verdict.holds("one-to-one")
    assert made.figures.ground_energy == -2
    assert hk.read(made.folder / "source.json") == 3 * a * b * c - b + 2


def test_a_model_that_is_quadratic_already_needs_no_auxiliaries(tmp_path: Path) -> None:
    made = prepare(hk.Hamiltonian({("a", "b"): 1, ("a",): "1/3"}, domain="spin"), tmp_path / "out", exports=["opb"])
    assert made.reduction.auxiliaries == ()
    assert made.verdict.holds("one-to-one")


def test_a_constant_design_has_one_level_and_says_so(tmp_path: Path) -> None:
    made = prepare(hk.Hamiltonian({(): "5/2"}, domain="boolean", labels=["a"]), tmp_path / "out", exports=["opb"])
    assert (made.figures.ground_energy, made.figures.degeneracy, made.figures.gap) == (Fraction(5, 2), 2, None)


def test_the_same_design_gives_the_same_files_twice(tmp_path: Path) -> None:
    one = prepare(FIXTURES / "greenhouse.json", tmp_path / "one")
    two = prepare(FIXTURES / "greenhouse.json", tmp_path / "two")
    for name in one.files:
        assert (one.folder / name).read_bytes() == (two.folder / name).read_bytes(), name


def test_a_run_that_breaks_off_leaves_nothing_behind(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object) -> str:
        raise KeyboardInterrupt

    monkeypatch.setattr("hubokit.preparation.job.readme_text", interrupted)
    with pytest.raises(KeyboardInterrupt):
        prepare(FIXTURES / "greenhouse.json", tmp_path / "out", exports=["opb"])
    assert list(tmp_path.iterdir()) == []


def test_a_forced_run_that_breaks_off_keeps_the_earlier_folder(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    made = prepare(FIXTURES / "greenhouse.json", tmp_path / "out", exports=["opb"])
    before = {name: path.read_bytes() for name, path in made.paths.items()}

    def interrupted(*_: object) -> str:
        raise KeyboardInterrupt

    monkeypatch.setattr("hubokit.preparation.job.readme_text", interrupted)
    with pytest.raises(KeyboardInterrupt):
        prepare(FIXTURES / "low-autocorrelation-08.json", tmp_path / "out", exports=["opb"], force=True)
    assert [path.name for path in tmp_path.iterdir()] == ["out"]
    assert {name: path.read_bytes() for name, path in made.paths.items()} == before


def test_an_export_that_there_is_not_is_named_with_those_there_are(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="opb"):
        prepare(FIXTURES / "greenhouse.json", tmp_path / "out", exports=["docx"])
    assert list(tmp_path.iterdir()) == []


def test_force_replaces_the_folder_of_an_earlier_run_whole(tmp_path: Path) -> None:
    prepare(FIXTURES / "low-autocorrelation-08.json", tmp_path / "out", exports=["opb"])
    with pytest.raises(InputError, match="exists"):
        prepare(FIXTURES / "greenhouse.json", tmp_path / "out", exports=["opb"])
    made = prepare(FIXTURES / "greenhouse.json", tmp_path / "out", exports=["opb"], force=True)
    assert hk.read(tmp_path / "out" / "source.json").labels[0] == "north-1"
    assert {path.name for path in tmp_path.iterdir()} == {"out"}
    assert json.loads((made.folder / "source.json").read_text(encoding="utf-8"))["domain"] == "boolean"


@pytest.mark.parametrize(
    ("folder", "reason"), [("missing/out", "make it first"), ("file", "no folder"), ("link", "no folder")]
)
def test_a_place_where_no_folder_can_be_made_is_refused(tmp_path: Path, folder: str, reason: str) -> None:
    (tmp_path / "file").write_text("mine", encoding="utf-8")
    (tmp_path / "link").symlink_to(tmp_path)
    with pytest.raises(HubokitError, match=reason):
        prepare(FIXTURES / "greenhouse.json", tmp_path / folder, exports=["opb"], force=True)


def test_the_greenhouse_settings_of_the_fixture_are_ground_states() -> None:
    model = hk.read(FIXTURES / "greenhouse.json")
    with (FIXTURES / "greenhouse-settings.csv").open(encoding="utf-8") as table:
        states = [{name: int(value) for name, value in row.items()} for row in csv.DictReader(table)]
    assert len(states) == 6
    assert {model.energy(state) for state in states} == {0}
    assert hk.ground_states(model).energy == 0


def test_the_ground_states_of_the_greenhouse_are_the_settings_that_break_no_rule() -> None:
    level = hk.ground_states(hk.read(FIXTURES / "greenhouse.json"))
    valves = hk.read(FIXTURES / "greenhouse.json").labels
    place = {name: i for i, name in enumerate(valves)}
    found = level.states
    north = found[:, [place[f"north-{i}"] for i in (1, 2, 3, 4)]]
    south = found[:, [place[f"south-{i}"] for i in (1, 2, 3)]]
    assert level.complete
    assert np.all((north.sum(axis=1) <= 2) & (south.sum(axis=1) >= 1) & (south.sum(axis=1) <= 2))
    mist = found[:, place["mist-east"]] == 1
    assert np.all(found[mist][:, [place["pump"], place["tank-a"]]] == 1)


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_pauli_strings_of_many_variables_are_left_out_and_nothing_else(
    domain: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    model = hk.Hamiltonian({("a", "b", "c"): 1, ("c", "d", "e"): -1}, domain=domain)
    monkeypatch.setattr("hubokit.preparation.contents.LETTERS_LIMIT", 79 if domain == "boolean" else 9)
    made = prepare(model, tmp_path / "out")
    assert set(made.left_out) == {"source.pauli", "reduced.pauli"}
    assert made.left_out["source.pauli"].startswith("a letter for each of 5 variables in every term")
    monkeypatch.setattr("hubokit.preparation.contents.LETTERS_LIMIT", 80 if domain == "boolean" else 10)
    assert set(prepare(model, tmp_path / "again").left_out) == {"reduced.pauli"}
