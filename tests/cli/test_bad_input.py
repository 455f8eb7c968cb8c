"""Every bad input gives one line on standard error that names the file and the place, and exit code 2."""

from __future__ import annotations

import copy
import gzip
import json
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

GOOD: dict[str, Any] = {
    "document": "hubokit/model",
    "version": "1.0",
    "domain": "spin",
    "convention": "1-2x",
    "variables": ["a", "b", "c", "y0"],
    "resolution": "1/2",
    "constant": "0",
    "terms": [
        {"locality": 1, "members": [[0], [3]], "weights": [1, -4]},
        {"locality": 3, "members": [[0, 1, 2]], "weights": [3]},
    ],
}

Mutation = Callable[[dict[str, Any]], object]


def setting(*path: str | int, to: Any) -> Mutation:
    """A change of one place in the document."""

    def change(document: Any) -> None:
        for key in path[:-1]:
            document = document[key]
        document[path[-1]] = to

    return change


MISTAKES: dict[str, tuple[Mutation, str]] = {
    "missing field": (lambda d: d.pop("domain"), "domain"),
    "unknown field": (setting("colour", to="red"), "colour"),
    "unknown version": (setting("version", to="2.0"), "/version"),
    "unknown document": (setting("document", to="hubokit/poem"), "/document"),
    "wrong type of a field": (setting("variables", to="a b c"), "/variables"),
    "wrong type of a weight": (setting("terms", 0, "weights", 1, to=1.5), "/terms/0/weights"),
    "unknown domain": (setting("domain", to="qutrit"), "/domain"),
    "member out of range": (setting("terms", 1, "members", 0, 2, to=4), "/terms/1/members"),
    "negative member": (setting("terms", 1, "members", 0, 0, to=-1), "/terms/1/members"),
    "member repeated in a term": (setting("terms", 1, "members", 0, 1, to=0), "/terms/1/members"),
    "same term twice": (setting("terms", 0, "members", 1, to=[0]), "/terms/0/members"),
    "fewer weights than members": (setting("terms", 0, "weights", to=[1]), "/terms/0"),
    "term of another locality": (setting("terms", 0, "members", 1, to=[1, 2]), "/terms/0/members"),
    "resolution that is no number": (setting("resolution", to="half"), "/resolution"),
    "resolution of zero": (setting("resolution", to="0"), "/resolution"),
    "constant with an exponent of a billion": (setting("constant", to="1e999999999"), "/constant"),
    "constant divided by zero": (setting("constant", to="1/0"), "/constant"),
    "weights mixed with strings": (setting("terms", 0, "weights", to=[1, "4"]), "/terms/0/weights"),
    "variable named twice": (setting("variables", 1, to="a"), "/variables"),
    "variable named twice after NFC": (setting("variables", to=["\u00e4", "a\u0308", "c", "y0"]), "/variables"),
    "variable without a name": (setting("variables", 1, to=""), "/variables"),
    "auxiliary that is no variable": (setting("auxiliaries", to=["y7"]), "/auxiliaries"),
    "digest of another function": (setting("digests", to={"function": "sha256:" + "0" * 64}), "/digests/function"),
}

TEXTS: dict[str, str] = {
    "no JSON": "{not json",
    "empty file": "",
    "a list": "[1, 2]",
    "a number": "7",
    "a truncated document": json.dumps(GOOD)[:-20],
    "NaN": json.dumps(GOOD).replace('"weights": [3]', '"weights": [NaN]'),
    "infinity": json.dumps(GOOD).replace('"weights": [3]', '"weights": [-Infinity]'),
    "a number beyond floats": json.dumps(GOOD).replace('"weights": [3]', '"weights": [1e999999999]'),
    "ten million digits": json.dumps(GOOD).replace('"weights": [3]', f'"weights": [{"7" * 10_000_000}]'),
    "ten million digits as text": json.dumps(GOOD).replace('"constant": "0"', f'"constant": "{"7" * 10_000_000}"'),
    "lists ten thousand deep": "[" * 10_000 + "]" * 10_000,
    "notes ten thousand deep": json.dumps({**GOOD, "notes": {"a": 0}}).replace(
        '{"a": 0}', '{"a": ' * 10_000 + "0" + "}" * 10_000
    ),
    "a field given twice": json.dumps(GOOD).replace('"version": "1.0"', '"version": "1.0", "version": "1.0"'),
}


def one_line(outcome: Any, *names: str) -> None:
    """Exit code 2, nothing on standard output, one short line on standard error that holds the names."""
    assert outcome.code == 2, outcome
    assert outcome.out == ""
    assert outcome.err.startswith("hubokit: ")
    assert outcome.err.count("\n") == 1
    assert len(outcome.err) < 1000
    for name in names:
        assert name in outcome.err, outcome.err


def test_the_document_without_a_mistake_is_read(hubokit: Any, tmp_path: Path) -> None:
    path = tmp_path / "good.json"
    path.write_text(json.dumps(GOOD), encoding="utf-8")
    assert hubokit("show", path).code == 0


@pytest.mark.parametrize("mistake", MISTAKES)
def test_a_mistake_in_a_document_is_named_with_its_place(hubokit: Any, tmp_path: Path, mistake: str) -> None:
    change, place = MISTAKES[mistake]
    document = copy.deepcopy(GOOD)
    change(document)
    path = tmp_path / "bad.json"
    path.write_text(json.dumps(document), encoding="utf-8")
    one_line(hubokit("show", path), "bad.json", place)


@pytest.mark.parametrize("mistake", TEXTS)
def test_a_text_that_is_no_document_is_refused(hubokit: Any, tmp_path: Path, mistake: str) -> None:
    path = tmp_path / "bad.json"
    path.write_text(TEXTS[mistake], encoding="utf-8")
    one_line(hubokit("show", path), "bad.json")


def test_bytes_that_are_no_text_are_refused(hubokit: Any, tmp_path: Path) -> None:
    path = tmp_path / "bad.json"
    path.write_bytes(b'{"document": "\xff\xfe"}')
    one_line(hubokit("show", path), "bad.json", "UTF-8")


@pytest.mark.parametrize("command", ["show", "spectrum", "check", "reduce", "prepare", "convert", "project"])
def test_a_file_that_is_not_there_is_named(hubokit: Any, tmp_path: Path, command: str) -> None:
    missing = tmp_path / "missing.json"
    more = {
        "reduce": ["-o", tmp_path / "out.json"],
        "prepare": ["-o", tmp_path / "out"],
        "convert": [tmp_path / "out.json"],
        "project": [tmp_path / "states.csv"],
    }
    one_line(hubokit(command, missing, *more.get(command, [])), "missing.json")
    assert list(tmp_path.iterdir()) == []


def test_a_folder_in_the_place_of_a_file_is_named(hubokit: Any, tmp_path: Path) -> None:
    one_line(hubokit("show", tmp_path), tmp_path.name)


def test_a_suffix_of_no_format_is_named_with_those_that_would_do(hubokit: Any, tmp_path: Path) -> None:
    path = tmp_path / "model.docx"
    path.write_text("x", encoding="utf-8")
    one_line(hubokit("show", path), "model.docx", ".json")


def test_a_gz_that_inflates_beyond_the_limit_is_refused_with_the_limit(
    hubokit: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("hubokit.exchange.files.INFLATE_LIMIT", 100_000)
    path = tmp_path / "bomb.json.gz"
    path.write_bytes(gzip.compress(b" " * 200_000))
    one_line(hubokit("show", path), "bomb.json.gz", "100000")


def test_a_damaged_gz_is_refused(hubokit: Any, tmp_path: Path) -> None:
    path = tmp_path / "bad.json.gz"
    path.write_bytes(gzip.compress(json.dumps(GOOD).encode())[:-9])
    one_line(hubokit("show", path), "bad.json.gz")


def test_an_output_file_that_exists_is_kept_without_force(hubokit: Any, tmp_path: Path, fixtures: Path) -> None:
    source = fixtures / "low-autocorrelation-08.json"
    out = tmp_path / "out.json"
    out.write_text("mine", encoding="utf-8")
    one_line(hubokit("reduce", source, "-o", out), "out.json", "--force")
    one_line(hubokit("convert", source, out), "out.json", "--force")
    assert out.read_text(encoding="utf-8") == "mine"
    assert hubokit("reduce", source, "-o", out, "--force").code == 0
    assert "hubokit/model" in out.read_text(encoding="utf-8")


def test_a_folder_that_exists_is_kept_without_force(hubokit: Any, tmp_path: Path, fixtures: Path) -> None:
    (tmp_path / "out").mkdir()
    one_line(hubokit("prepare", fixtures / "greenhouse.json", "-o", tmp_path / "out"), "out", "--force")
    assert [path.name for path in tmp_path.rglob("*")] == ["out"]


def test_force_never_replaces_a_folder_with_files_of_another(hubokit: Any, tmp_path: Path, fixtures: Path) -> None:
    (tmp_path / "home").mkdir()
    (tmp_path / "home" / "thesis.tex").write_text("years", encoding="utf-8")
    one_line(
        hubokit("prepare", fixtures / "greenhouse.json", "-o", tmp_path / "home", "--force"), "home", "thesis.tex"
    )
    assert (tmp_path / "home" / "thesis.tex").read_text(encoding="utf-8") == "years"


def test_a_model_too_large_for_the_evidence_is_refused_before_the_start(hubokit: Any, tmp_path: Path) -> None:
    document = copy.deepcopy(GOOD)
    document["variables"] = [f"v{i}" for i in range(300)]
    triples = [[i, i + 1, i + 2] for i in range(298)]
    document["terms"] = [{"locality": 3, "members": triples, "weights": [1] * len(triples)}]
    path = tmp_path / "large.json"
    path.write_text(json.dumps(document), encoding="utf-8")
    reduced = tmp_path / "reduced.json"
    assert hubokit("reduce", path, "-o", reduced).code == 0
    outcome = hubokit("check", reduced, "--evidence", "exhaustion")
    one_line(outcome, "300")
    assert "projection" in outcome.err


@pytest.mark.parametrize(
    "arguments",
    [
        ["polish", "model.json"],
        ["show"],
        ["show", "a.json", "b.json"],
        ["show", "a.json", "--shiny"],
        ["reduce", "a.json", "-o", "b.json", "--keep", "everything"],
        ["reduce", "a.json", "-o", "b.json", "--seed", "lucky"],
        ["reduce", "a.json"],
        ["spectrum", "a.json", "--levels", "0"],
        ["check", "a.json", "--evidence", "hearsay"],
    ],
)
def test_wrong_usage_is_one_line_as_well(hubokit: Any, arguments: list[str]) -> None:
    one_line(hubokit(*arguments))


def test_an_unknown_claim_is_named_with_those_there_are(hubokit: Any, tmp_path: Path, fixtures: Path) -> None:
    reduced = tmp_path / "reduced.json"
    assert hubokit("reduce", fixtures / "low-autocorrelation-08.json", "-o", reduced).code == 0
    one_line(hubokit("check", reduced, "--claim", "beauty"), "beauty", "ground-states")


def test_a_gap_that_is_no_number_is_named(hubokit: Any, tmp_path: Path, fixtures: Path) -> None:
    source = fixtures / "low-autocorrelation-08.json"
    for text in ("wide", "nan", "inf", "1e999999999"):
        one_line(hubokit("reduce", source, "-o", tmp_path / "out.json", "--auxiliary-gap", text), "auxiliary-gap")
    assert list(tmp_path.iterdir()) == []


def test_a_model_without_a_source_cannot_be_checked(hubokit: Any, fixtures: Path) -> None:
    one_line(hubokit("check", fixtures / "elsewhere-reduced.json"), "elsewhere-reduced.json", "--source")


def test_a_reduced_model_is_not_prepared_again(hubokit: Any, tmp_path: Path, fixtures: Path) -> None:
    reduced = tmp_path / "reduced.json"
    assert hubokit("reduce", fixtures / "low-autocorrelation-08.json", "-o", reduced).code == 0
    one_line(hubokit("prepare", reduced, "-o", tmp_path / "out"), "reduced.json", "hubokit check")
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize(
    ("text", "place"),
    [
        ("", "line 1"),
        ("q0,q1\n1,1\n", "line 1"),
        ("q0,q1,q2,q3,q4,t0,t1,t1\n", "line 1"),
        ("q0,q1,q2,q3,q4,t0,t1,energy\n", "energy"),
        ("q0,q1,q2,q3,q4,t0,t1\n1,1,1,1,1,1\n", "line 2"),
        ("q0,q1,q2,q3,q4,t0,t1\n1,1,1,1,1,1,1\n1,0,1,1,1,1,1\n", "line 3, column q1"),
        ("q0,q1,q2,q3,q4,t0,t1\n1,1,1,1,1,1,up\n", "line 2, column t1"),
    ],
)
def test_a_table_of_states_that_does_not_fit_is_refused(
    hubokit: Any, tmp_path: Path, fixtures: Path, text: str, place: str
) -> None:
    states = tmp_path / "states.csv"
    states.write_text(text, encoding="utf-8")
    outcome = hubokit(
        "project", fixtures / "elsewhere-reduced.json", states, "--source", fixtures / "elsewhere-source.json",
        "--origin", fixtures / "elsewhere-origin.json", "--auxiliaries", "t0,t1",
    )  # fmt: skip
    one_line(outcome, "states.csv", place)


def test_a_name_cannot_steer_the_terminal(hubokit: Any, tmp_path: Path) -> None:
    document = copy.deepcopy(GOOD)
    document["variables"][0] = "\x1b[2Jvalve"
    document["auxiliaries"] = ["\x1b[31mred"]
    path = tmp_path / "bad.json"
    path.write_text(json.dumps(document), encoding="utf-8")
    outcome = hubokit("show", path)
    assert outcome.code == 2
    assert "\x1b" not in outcome.err


def test_constraints_of_an_opb_file_become_penalties_and_are_never_dropped_in_silence(
    hubokit: Any, tmp_path: Path
) -> None:
    path = tmp_path / "hard.opb"
    path.write_text("* #variable= 2 #constraint= 1\nmin: +3 x1 +2 x2 ;\n+1 x1 +1 x2 = 1 ;\n", encoding="utf-8")
    shown = hubokit("show", path)
    assert shown.code == 0
    assert "penalties" in shown.out
    levels = json.loads(hubokit("spectrum", path, "--levels", "1", "--json").out)["levels"]
    assert [(level["energy"], level["states"]) for level in levels] == [("2", [[0, 1]])]


def test_hard_clauses_of_a_wcnf_file_become_penalties_and_are_never_dropped_in_silence(
    hubokit: Any, tmp_path: Path
) -> None:
    path = tmp_path / "hard.wcnf"
    path.write_text("h 1 2 0\n5 -1 0\n3 -2 0\n", encoding="utf-8")
    shown = hubokit("show", path)
    assert shown.code == 0
    assert "penalt" in shown.out
    levels = json.loads(hubokit("spectrum", path, "--levels", "1", "--json").out)["levels"]
    assert [(level["energy"], level["states"]) for level in levels] == [("3", [[0, 1]])]


def test_a_count_of_every_state_of_a_large_model_is_refused_before_the_start(hubokit: Any, tmp_path: Path) -> None:
    document = copy.deepcopy(GOOD)
    document["variables"] = [f"v{i}" for i in range(70)]
    document["terms"] = [{"locality": 2, "members": [[i, i + 1] for i in range(69)], "weights": [1] * 69}]
    path = tmp_path / "large.json"
    path.write_text(json.dumps(document), encoding="utf-8")
    one_line(hubokit("spectrum", path, "--density"), "70")


@pytest.mark.parametrize(
    "arguments", [("check",), ("reduce", "-o", "never.json"), ("spectrum",), ("project", "answers.csv")]
)
def test_a_verdict_where_a_model_is_needed_is_called_one(hubokit: Any, fixtures: Path, arguments: Any) -> None:
    verdict = fixtures / "formats" / "valves-verdict.json"
    command, *rest = arguments
    one_line(hubokit(command, verdict, *rest), str(verdict), "a verdict holds no model")


@pytest.mark.parametrize("seconds", ["nan", "-1"])
def test_a_time_that_limits_nothing_is_refused(hubokit: Any, fixtures: Path, seconds: str) -> None:
    one_line(hubokit("spectrum", fixtures / "greenhouse.json", "--time", seconds), "--time", "no number of seconds")


def run_apart(program: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    """A shell command whose first argument is this Python."""
    return subprocess.run(
        ["sh", "-c", program, "sh", sys.executable, *arguments],
        capture_output=True,
        text=True,
        check=False,
        cwd=Path(__file__).parents[2],
    )


def test_a_closed_standard_output_is_no_defect(fixtures: Path) -> None:
    done = run_apart('"$1" -m hubokit.cli show "$2" >&-', str(fixtures / "greenhouse.json"))
    assert (done.returncode, done.stderr) == (0, "")


def test_an_interrupt_that_falls_where_nothing_can_be_raised_is_passed_on() -> None:
    program = """
import sys
import time
from hubokit import cli
from hubokit.cli import app

class Falls:
    def __del__(self):
        raise KeyboardInterrupt

def run(arguments):
    with __import__("contextlib").suppress(KeyboardInterrupt):
        Falls()
        for _ in range(1000):
            time.sleep(0.01)
        print("lost")
    return 130

app.run = run
cli.main()
"""
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout, done.stderr) == (130, "", "")
