"""Each command does its job from files to files, and its exit code says how it went."""

from __future__ import annotations

import csv
import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import jsonschema
import pytest

import hubokit as hk

ROOT = Path(__file__).resolve().parents[2]
CLAIMS = ("quadratic", "ground-energy", "ground-states", "even-multiplicity", "energies", "one-to-one")


def of_schema(kind: str, text: str) -> dict[str, Any]:
    """The JSON document of a command, after the schema has accepted it."""
    document: dict[str, Any] = json.loads(text)
    schema = json.loads((ROOT / "schemas" / f"{kind}.schema.json").read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator(schema).validate(document)
    return document


@pytest.fixture
def twelve(hubokit: Any, fixtures: Path, tmp_path: Path) -> Path:
    """The low-autocorrelation model of twelve spins, reduced."""
    out = tmp_path / "twelve.json"
    assert hubokit("reduce", fixtures / "low-autocorrelation-12.json", "-o", out).code == 0
    return out


def elsewhere(fixtures: Path) -> list[str | Path]:
    """How the reduction of fixtures/elsewhere-reduced.json is to be understood."""
    return [
        "--source", fixtures / "elsewhere-source.json",
        "--auxiliaries", "t0,t1",
        "--origin", fixtures / "elsewhere-origin.json",
    ]  # fmt: skip


def test_show_says_what_is_in_a_model(hubokit: Any, fixtures: Path) -> None:
    shown = hubokit("show", fixtures / "greenhouse.json")
    assert shown.code == 0
    for words in ("14 boolean", "s = 1 - 2x", "33", "mist-east", "invented"):
        assert words in shown.out
    assert max(map(len, shown.out.splitlines())) <= 80 + len(str(fixtures))


def test_show_gives_the_same_as_a_summary_document(hubokit: Any, fixtures: Path) -> None:
    model = hk.read(fixtures / "greenhouse.json")
    document = of_schema("summary", hubokit("show", fixtures / "greenhouse.json", "--json").out)
    assert document["model"]["variables"] == 14
    assert document["model"]["digest"] == model.digest
    assert sum(document["model"]["terms_by_locality"].values()) == len(model)


def test_show_reads_formulas_reductions_and_verdicts(
    hubokit: Any, fixtures: Path, twelve: Path, tmp_path: Path
) -> None:
    assert "20 boolean" in hubokit("show", fixtures / "satisfiable-20.cnf").out
    shown = hubokit("show", twelve).out
    assert "REDUCTION" in shown
    assert "one-to-one" in shown
    assert hubokit("check", twelve, "-o", tmp_path / "verdict.json").code == 0
    assert "one-to-one" in hubokit("show", tmp_path / "verdict.json").out
    of_schema("summary", hubokit("show", twelve, "--json").out)
    of_schema("summary", hubokit("show", tmp_path / "verdict.json", "--json").out)


def test_reduce_writes_a_document_that_carries_its_source(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    out = tmp_path / "out.json.gz"
    done = hubokit("reduce", fixtures / "greenhouse.json", "-o", out, "--domain", "spin", "--explain")
    assert done.code == 0
    reduction = hk.read(out)
    assert reduction.source == hk.read(fixtures / "greenhouse.json")
    assert reduction.model.domain == "spin"
    assert reduction.model.locality <= 2
    assert str(reduction.costs.couplers) in done.out


def test_reduce_prints_its_costs_as_a_summary_document(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    done = hubokit("reduce", fixtures / "greenhouse.json", "-o", tmp_path / "out.json", "--json")
    document = of_schema("summary", done.out)
    reduction = hk.read(tmp_path / "out.json")
    assert document["reduction"]["auxiliaries"] == list(reduction.auxiliaries)
    assert document["reduction"]["costs"]["couplers"] == reduction.costs.couplers


def test_check_proves_what_reduce_promised(hubokit: Any, twelve: Path, tmp_path: Path) -> None:
    checked = hubokit("check", twelve, "-o", tmp_path / "verdict.json")
    assert checked.code == 0
    for claim in CLAIMS:
        assert claim in checked.out
    document = of_schema("verdict", hubokit("check", twelve, "--json").out)
    assert {name for name, claim in document["claims"].items() if claim["status"] == "proved"} == set(CLAIMS)
    assert hk.read(tmp_path / "verdict.json").holds("one-to-one")


def test_check_reads_a_source_that_the_document_leaves_out(hubokit: Any, fixtures: Path, twelve: Path) -> None:
    document = json.loads(twelve.read_text(encoding="utf-8"))
    del document["trail"], document["digests"]
    bare = twelve.with_name("bare.json")
    bare.write_text(json.dumps(document), encoding="utf-8")
    assert hubokit("check", bare).code == 2
    assert hubokit("check", bare, "--source", fixtures / "low-autocorrelation-12.json", "--claim", "all").code == 0


def test_check_refuses_a_source_that_is_another(hubokit: Any, fixtures: Path, twelve: Path) -> None:
    checked = hubokit("check", twelve, "--source", fixtures / "low-autocorrelation-08.json")
    assert checked.code == 2
    assert "twelve.json" in checked.err


@pytest.mark.parametrize("step", [1, -1])
def test_a_weight_changed_by_one_breaks_the_digest_and_then_the_claim(hubokit: Any, twelve: Path, step: int) -> None:
    document = json.loads(twelve.read_text(encoding="utf-8"))
    block = next(block for block in document["terms"] if block["locality"] == 2)
    block["weights"][5] += step
    twelve.write_text(json.dumps(document), encoding="utf-8")
    noticed = hubokit("check", twelve)
    assert noticed.code == 2
    assert "twelve.json: /digests" in noticed.err
    del document["digests"]
    twelve.write_text(json.dumps(document), encoding="utf-8")
    refuted = hubokit("check", twelve)
    assert refuted.code == 1
    assert "refuted" in refuted.out
    assert "witness" in refuted.out
    verdict = of_schema("verdict", hubokit("check", twelve, "--json").out)
    witness = verdict["claims"]["one-to-one"]["witness"]
    reduction = hk.read(twelve)
    assert str(reduction.source.energy(witness["state"])) == witness["source_energy"]
    state = {**witness["state"], **witness["auxiliaries"]}
    if reduction.model.domain == reduction.source.domain:
        assert str(reduction.model.energy(state)) == witness["model_energy"]


def test_a_reduction_made_elsewhere_is_checked_with_its_names(hubokit: Any, fixtures: Path) -> None:
    reduced = fixtures / "elsewhere-reduced.json"
    assert hubokit("check", reduced, *elsewhere(fixtures), "--claim", "energies").code == 0
    everything = hubokit("check", reduced, *elsewhere(fixtures))
    assert everything.code == 1, "the published gadget ties where the spins sum to -1"
    one_by_one = [
        "--source", fixtures / "elsewhere-source.json", "--origin", "a=q0", "--origin", "b=q1",
        "--origin", "c=not:q2", "--origin", "d=q3", "--origin", "e=q4",
    ]  # fmt: skip
    assert hubokit("check", reduced, *one_by_one, "--claim", "energies").code == 0
    unflipped = ["c=q2" if part == "c=not:q2" else part for part in one_by_one]
    assert hubokit("check", reduced, *unflipped, "--claim", "energies").code == 1


def test_a_neighbourhood_alone_leaves_the_claim_undecided(hubokit: Any, twelve: Path, tmp_path: Path) -> None:
    centres = tmp_path / "centres.csv"
    labels = hk.read(twelve).source.labels
    centres.write_text(",".join(labels) + "\n" + ",".join("1" for _ in labels) + "\n", encoding="utf-8")
    checked = hubokit("check", twelve, "--evidence", "neighbourhood", "--around", centres, "--radius", "1")
    assert checked.code == 3
    assert "tested" in checked.out


def test_spectrum_lists_the_low_levels(hubokit: Any, fixtures: Path) -> None:
    found = hubokit("spectrum", fixtures / "low-autocorrelation-12.json", "--levels", "2", "--states")
    assert found.code == 0
    document = of_schema(
        "summary", hubokit("spectrum", fixtures / "low-autocorrelation-12.json", "--levels", "2", "--json").out
    )
    levels = hk.low_levels(hk.read(fixtures / "low-autocorrelation-12.json"), 2)
    assert [level["energy"] for level in document["levels"]] == [str(level.energy) for level in levels]
    assert [level["degeneracy"] for level in document["levels"]] == [str(level.degeneracy) for level in levels]
    assert document["levels"][0]["energy"] == "10"


def test_spectrum_counts_every_state(hubokit: Any, fixtures: Path) -> None:
    document = of_schema("summary", hubokit("spectrum", fixtures / "greenhouse.json", "--density", "--json").out)
    assert sum(map(int, document["density"]["counts"])) == 2**14
    assert hubokit("spectrum", fixtures / "greenhouse.json", "--density").code == 0


def test_convert_writes_another_format_and_reads_it_back_equal(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    formula = hk.read(fixtures / "satisfiable-20.cnf")
    for first, second in (("one.json", "two.opb"), ("one.opb", "two.json.gz")):
        assert hubokit("convert", fixtures / "satisfiable-20.cnf", tmp_path / first, "--force").code == 0
        assert hubokit("convert", tmp_path / first, tmp_path / second, "--force").code == 0
        assert hk.read(tmp_path / second) == formula


def test_answers_of_a_solver_come_back_to_the_design(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    import dimod

    from hubokit.exchange.dimod_bridge import to_bqm

    reduced = tmp_path / "reduced.json"
    assert hubokit("reduce", fixtures / "elsewhere-source.json", "-o", reduced).code == 0
    reduction = hk.read(reduced)
    found = dimod.ExactSolver().sample(to_bqm(reduction.model))
    states = tmp_path / "states.csv"
    columns = list(reversed(reduction.model.labels))
    with states.open("w", encoding="utf-8", newline="") as table:
        rows = csv.writer(table)
        rows.writerow(columns)
        rows.writerows([[answer[name] for name in columns] for answer in found.samples()])
    done = hubokit("project", reduced, states)
    assert done.code == 0
    assert "at their best" in done.out
    document = of_schema("summary", hubokit("project", reduced, states, "--json").out)
    assert len(document["answers"]) == 2**reduction.model.size
    assert document["answers"][0]["source_energy"] == str(hk.ground_states(reduction.source).energy)
    assert sum(answer["auxiliaries_at_best"] for answer in document["answers"]) == 2**reduction.source.size
    for answer in document["answers"]:
        assert answer["source_energy"] == str(reduction.source.energy(answer["state"]))
        assert answer["best_model_energy"] == answer["source_energy"]
        assert answer["auxiliaries_at_best"] == (answer["model_energy"] == answer["best_model_energy"])


def test_answers_come_back_through_flipped_variables(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    done = hubokit(
        "project", fixtures / "elsewhere-reduced.json", fixtures / "elsewhere-states.csv", *elsewhere(fixtures),
        "-o", tmp_path / "answers.csv",
    )  # fmt: skip
    assert done.code == 0
    with (tmp_path / "answers.csv").open(encoding="utf-8") as table:
        answers = list(csv.DictReader(table))
    assert [answer["c"] for answer in answers] == ["-1", "1", "1"]
    source = hk.read(fixtures / "elsewhere-source.json")
    for answer in answers:
        state = {name: int(answer[name]) for name in source.labels}
        assert answer["source energy"] == str(source.energy(state))


def test_answers_in_numbered_booleans_come_back_to_named_spins(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    reduced = tmp_path / "reduced.json"
    assert hubokit("reduce", fixtures / "elsewhere-source.json", "-o", reduced).code == 0
    reduction = hk.read(reduced)
    lowest = hk.ground_states(reduction.model).states
    states = tmp_path / "states.csv"
    rows = [",".join(f"x{i + 1}" for i in range(reduction.model.size))]
    rows += [",".join(str((1 - value) // 2) for value in state) for state in lowest.tolist()]
    states.write_text("\n".join(rows) + "\n", encoding="utf-8")
    assert hubokit("project", reduced, states).code == 2
    document = of_schema("summary", hubokit("project", reduced, states, "--domain", "boolean", "--json").out)
    found = [list(answer["state"].values()) for answer in document["answers"]]
    assert found == reduction.project(lowest).tolist()


def test_prepare_prints_the_whole_result_on_one_screen(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    done = hubokit("prepare", fixtures / "low-autocorrelation-12.json", "-o", tmp_path / "out")
    assert done.code == 0
    for words in (
        "SOURCE",
        "REDUCTION",
        "VERDICT",
        "FILES",
        "12 spin",
        "ground level",
        "10,",
        "reduced.opb",
        *CLAIMS,
    ):
        assert words in done.out
    assert max(len(line) for line in done.out.splitlines() if str(tmp_path) not in line) <= 80
    assert done.out.replace(str(fixtures), "").isascii()
    assert done.err == ""


def test_prepare_prints_a_summary_document(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    done = hubokit("prepare", fixtures / "greenhouse.json", "-o", tmp_path / "out", "--json")
    document = of_schema("summary", done.out)
    assert document["figures"]["source-ground-energy"] == "0"
    assert set(document["files"]) <= {path.name for path in (tmp_path / "out").iterdir()}


def test_audit_accepts_the_verdict_of_a_prepared_folder(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    assert hubokit("prepare", fixtures / "greenhouse.json", "-o", tmp_path / "out").code == 0
    assert hubokit("audit", tmp_path / "out" / "verdict.json").code == 0


def test_audit_rejects_a_verdict_over_another_model(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    assert hubokit("prepare", fixtures / "greenhouse.json", "-o", tmp_path / "out").code == 0
    done = hubokit(
        "audit", tmp_path / "out" / "verdict.json", "--source", fixtures / "low-autocorrelation-08.json",
        "--model", tmp_path / "out" / "reduced.json",
    )  # fmt: skip
    assert done.code != 0


def test_the_version_is_printed(hubokit: Any) -> None:
    done = hubokit("--version")
    assert done.code == 0
    assert done.out.startswith("hubokit ")


def test_help_names_every_command(hubokit: Any) -> None:
    for arguments in ([], ["--help"]):
        done = hubokit(*arguments)
        assert done.code == 0
        for command in ("prepare", "show", "reduce", "check", "spectrum", "convert", "project", "audit"):
            assert command in done.out


def test_a_defect_is_one_line_and_never_looks_like_a_refutation(
    hubokit: Any, fixtures: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: object) -> None:
        raise ZeroDivisionError("a defect")

    monkeypatch.setattr("hubokit.cli.show.load_document", broken)
    done = hubokit("show", fixtures / "greenhouse.json")
    assert done.code == 70
    assert done.err.count("\n") == 1
    assert "a defect" in done.err


def test_a_pipe_that_closes_early_ends_in_silence(fixtures: Path) -> None:
    program = [sys.executable, "-m", "hubokit.cli", "spectrum", str(fixtures / "greenhouse.json"), "--density"]
    with subprocess.Popen(program, stdout=subprocess.PIPE, stderr=subprocess.PIPE, cwd=ROOT) as process:
        assert process.stdout is not None
        assert process.stderr is not None
        process.stdout.close()
        assert process.stderr.read() == b""
        assert process.wait() == 141


def test_an_interrupt_ends_the_run_with_nothing_left_behind(fixtures: Path, tmp_path: Path) -> None:
    # The child interrupts itself inside the check, when the folder is not yet written, as Ctrl-C would.
    program = (
        "import os, signal, sys\n"
        "import hubokit.validation.check as module\n"
        "module.check = lambda *a, **k: os.kill(os.getpid(), signal.SIGINT)\n"
        "from hubokit.cli import main\n"
        f"sys.argv = ['hubokit', 'prepare', {str(fixtures / 'greenhouse.json')!r}, '-o', {str(tmp_path / 'out')!r}]\n"
        "main()\n"
    )
    run = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, cwd=ROOT, timeout=120)
    assert run.returncode == 130
    assert run.stderr.count("\n") == 1
    assert "Traceback" not in run.stderr
    assert list(tmp_path.iterdir()) == []


def test_spectrum_looks_around_given_states(hubokit: Any, fixtures: Path) -> None:
    arguments = ["spectrum", fixtures / "greenhouse.json", "--targets", fixtures / "greenhouse-settings.csv"]
    document = of_schema("summary", hubokit(*arguments, "--radius", "1", "--json").out)
    assert document["figures"]["targets"] == 6
    assert document["figures"]["states"] == str(6 * (1 + 14))
    assert document["figures"]["highest-target-energy"] == "0"
    assert "distance" in hubokit(*arguments).out
    assert hubokit(*arguments, "--density").code == 2


def test_a_source_that_was_left_out_is_found_beside_or_named(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    source = tmp_path / "design.json"
    source.write_bytes((fixtures / "elsewhere-source.json").read_bytes())
    reduced = tmp_path / "reduced.json"
    assert hubokit("reduce", source, "-o", reduced, "--detached").code == 0
    assert hubokit("check", reduced).code == 0
    moved = tmp_path / "elsewhere.json"
    source.rename(moved)
    alone = hubokit("check", reduced)
    assert alone.code == 2
    assert "--source" in alone.err
    assert "design.json" in alone.err
    assert hubokit("check", reduced, "--source", moved).code == 0
    assert hubokit("check", reduced, "--source", fixtures / "greenhouse.json").code == 2


def test_convert_says_what_changed_on_the_way(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    greenhouse = fixtures / "greenhouse.json"
    to_opb = of_schema("summary", hubokit("convert", greenhouse, tmp_path / "a.opb", "--lossy", "--json").out)
    assert any("the constant is 4" in change for change in to_opb["changes"])
    assert any("comment lines hold their names" in change for change in to_opb["changes"])
    as_spins = of_schema(
        "summary", hubokit("convert", greenhouse, tmp_path / "b.json", "--domain", "spin", "--json").out
    )
    assert as_spins["model"]["domain"] == "spin"
    assert any("boolean became spin" in change for change in as_spins["changes"])
    assert hk.read(tmp_path / "b.json") == hk.read(greenhouse).in_domain("spin")


def test_convert_states_domain_and_convention_of_both_files(hubokit: Any, tmp_path: Path) -> None:
    model = hk.Hamiltonian({("mist", "vent"): 1}, "spin", convention="2x-1")
    hk.write(model, tmp_path / "a.json")
    done = hubokit("convert", tmp_path / "a.json", tmp_path / "a.opb")
    assert "json, spin variables, s = 2x - 1" in done.out
    assert "opb, boolean variables, s = 2x - 1" in done.out


def test_convert_refuses_a_loss_unless_told_and_then_names_it(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    out = tmp_path / "a.opb"
    refused = hubokit("convert", fixtures / "greenhouse.json", out)
    assert refused.code == 2
    assert "a.opb" in refused.err
    assert "the notes" in refused.err
    assert "--lossy" in refused.err
    assert not out.exists()
    done = hubokit("convert", fixtures / "greenhouse.json", out, "--lossy")
    assert done.code == 0
    assert "left behind" in done.out
    assert "the notes" in done.out
    assert hk.read(out) == hk.read(fixtures / "greenhouse.json")


@pytest.mark.parametrize(
    ("name", "form", "mark"),
    [
        ("a.wcnf", "old-header", "p wcnf 2 "),
        ("a.mtx", "symmetric", "integer symmetric"),
        ("a.csv", "numbered", "weight,members"),
        ("a.csv", "named", "coefficient,members"),
    ],
)
def test_convert_writes_the_other_forms_of_a_format(
    hubokit: Any, tmp_path: Path, name: str, form: str, mark: str
) -> None:
    model = hk.Hamiltonian({("mist", "vent"): "3/2", ("mist",): -1, (): 2}, "spin")
    hk.write(model, tmp_path / "m.json")
    done = hubokit("convert", tmp_path / "m.json", tmp_path / name, "--form", form)
    assert done.code == 0
    assert mark in (tmp_path / name).read_text()
    assert hk.read(tmp_path / name) == model
    wrong = hubokit("convert", tmp_path / "m.json", tmp_path / "b.opb", "--form", form)
    assert wrong.code == 2
    assert form in wrong.err
    assert not (tmp_path / "b.opb").exists()


def test_convert_refuses_a_verdict_before_it_writes(hubokit: Any, twelve: Path, tmp_path: Path) -> None:
    hubokit("check", twelve, "-o", tmp_path / "verdict.json")
    done = hubokit("convert", tmp_path / "verdict.json", tmp_path / "copy.json")
    assert done.code == 2
    assert "verdict" in done.err
    assert not (tmp_path / "copy.json").exists()


def test_reading_a_large_file_shows_a_bar_on_a_terminal_alone(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    from hubokit.cli import progress
    from hubokit.cli.loading import load_document

    hk.write(hk.Hamiltonian({("mist", "vent"): 1}, "spin"), tmp_path / "large.json")
    monkeypatch.setattr(progress, "LARGE", 1)
    load_document(tmp_path / "large.json")
    assert capsys.readouterr().err == ""
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    monkeypatch.setenv("FORCE_COLOR", "1")
    load_document(tmp_path / "large.json")
    assert "large.json" in capsys.readouterr().err


def test_convert_reads_a_file_whose_suffix_says_nothing(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    bare = tmp_path / "formula.txt"
    bare.write_bytes((fixtures / "satisfiable-20.cnf").read_bytes())
    assert hubokit("convert", bare, tmp_path / "a.json").code == 2
    assert hubokit("convert", bare, tmp_path / "a.json", "--from", "cnf").code == 0
    assert hk.read(tmp_path / "a.json") == hk.read(fixtures / "satisfiable-20.cnf")


@pytest.mark.parametrize("name", ["mps", "lp", "npz", "csv", "opb"])
def test_a_named_format_does_without_its_suffix(hubokit: Any, tmp_path: Path, name: str) -> None:
    model = hk.Hamiltonian({("mist", "vent", "pump"): "3/2", ("mist",): -1}, "boolean")
    hk.write(model, tmp_path / "m.json")
    assert hubokit("convert", tmp_path / "m.json", tmp_path / "plan.txt", "--format", name).code == 0
    assert hubokit("convert", tmp_path / "plan.txt", tmp_path / "back.json", "--from", name).code == 0
    assert hk.read(tmp_path / "back.json") == model


def test_audit_finds_the_models_of_a_verdict_that_check_wrote(hubokit: Any, twelve: Path, tmp_path: Path) -> None:
    assert hubokit("check", twelve, "-o", tmp_path / "verdict.json").code == 0
    assert hubokit("audit", tmp_path / "verdict.json").code == 0
    (tmp_path / "other").mkdir()
    assert hubokit("check", twelve, "-o", tmp_path / "other" / "verdict.json").code == 0
    away = hubokit("audit", tmp_path / "other" / "verdict.json")
    assert away.code == 2
    assert "--model" in away.err


def test_audit_says_what_is_no_verdict(hubokit: Any, twelve: Path) -> None:
    refused = hubokit("audit", twelve)
    assert refused.code == 2
    assert "this is no verdict" in refused.err


def test_reduce_says_what_a_foreign_format_leaves_behind(hubokit: Any, fixtures: Path, tmp_path: Path) -> None:
    done = hubokit("reduce", fixtures / "greenhouse.json", "-o", tmp_path / "r.opb")
    assert done.code == 0
    assert "left behind" in done.out
    assert "the source" in done.out
    kept = hubokit("reduce", fixtures / "greenhouse.json", "-o", tmp_path / "r.json")
    assert "left behind" not in kept.out
