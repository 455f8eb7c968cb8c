"""schemas/README.md and fixtures/formats say the same, and every example is read as the same model."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

from hubokit.exchange import schema_files
from hubokit.exchange.documents import document_to_json, plain_json
from hubokit.exchange.formats import FORMATS, read, read_document, write
from hubokit.exchange.matrix_market import write_matrix_market
from hubokit.exchange.schema_errors import refuse_invalid
from hubokit.exchange.table import write_table
from hubokit.exchange.wcnf import write_wcnf
from hubokit.model.hamiltonian import Hamiltonian

ROOT = Path(__file__).resolve().parents[2]
FIXTURES = ROOT / "fixtures" / "formats"
README = (ROOT / "schemas" / "README.md").read_text("utf-8")
EXAMPLES = dict(re.findall(r"`fixtures/formats/(\S+)`\n\n```\w+\n(.*?)```\n", README, re.DOTALL))
VALVES = Hamiltonian(
    {
        (): 1,
        ("mist valve",): 1,
        ("pump",): "1/2",
        ("pump", "tank"): "-1/2",
        ("mist valve", "pump", "tank"): -2,
    },
    "boolean",
)
SAME = [
    "valves.json",
    "valves.opb",
    "valves.wcnf",
    "valves-old.wcnf",
    "valves.cnf",
    "valves.mps",
    "valves.lp",
    "valves.csv",
    "valves-numbers.csv",
    "valves.pauli",
    "valves.npz",
]


def test_every_fixture_is_shown_in_the_specification() -> None:
    shown = set(EXAMPLES) | {"valves.npz"}
    assert {path.name for path in FIXTURES.iterdir()} == shown


@pytest.mark.parametrize("name", sorted(EXAMPLES))
def test_the_example_in_the_specification_is_the_fixture(name: str) -> None:
    assert EXAMPLES[name] == (FIXTURES / name).read_text("utf-8")


@pytest.mark.parametrize("name", SAME)
def test_every_format_holds_the_same_model(name: str) -> None:
    model = read(FIXTURES / name)
    assert model == VALVES
    assert isinstance(model, Hamiltonian)
    assert (model.labels, model.convention) == (VALVES.labels, "1-2x")


def test_the_matrices_hold_the_reduced_model() -> None:
    reduced = read_document(FIXTURES / "valves-reduced.json").model
    assert read(FIXTURES / "valves-reduced.mtx") == reduced
    assert read(FIXTURES / "valves-spin.mtx") == reduced.in_domain("spin")


def test_the_verdict_in_the_specification_is_about_these_models() -> None:
    verdict = read(FIXTURES / "valves-verdict.json")
    reduction = read(FIXTURES / "valves-reduced.json")
    assert verdict.holds("one-to-one")
    assert (verdict.source_digest, verdict.model_digest) == (VALVES.digest, reduction.model.digest)
    assert reduction.source == VALVES


def test_the_summary_in_the_specification_fits_its_schema() -> None:
    refuse_invalid("summary", json.loads((FIXTURES / "valves-summary.json").read_text("utf-8")))


@pytest.mark.parametrize("name", [name for name in SAME if name not in ("valves.json", "valves.npz")])
def test_writing_the_model_gives_the_fixture_byte_for_byte(name: str, tmp_path: Path) -> None:
    out = tmp_path / name
    if name == "valves-old.wcnf":
        write_wcnf(VALVES, out, header="old")
    elif name == "valves-numbers.csv":
        write_table(VALVES, out, members="numbers")
    else:
        write(VALVES, out)
    assert out.read_bytes() == (FIXTURES / name).read_bytes()


def test_writing_the_matrices_gives_the_fixtures_byte_for_byte(tmp_path: Path) -> None:
    reduced = read_document(FIXTURES / "valves-reduced.json").model
    write(reduced, tmp_path / "valves-reduced.mtx")
    write_matrix_market(reduced.in_domain("spin"), tmp_path / "valves-spin.mtx", matrix="symmetric")
    for name in ("valves-reduced.mtx", "valves-spin.mtx", "valves-spin.fields.mtx"):
        assert (tmp_path / name).read_bytes() == (FIXTURES / name).read_bytes()


@pytest.mark.parametrize("name", ["valves.json", "valves-reduced.json", "valves-verdict.json"])
def test_a_document_is_written_back_byte_for_byte(name: str, tmp_path: Path) -> None:
    write(read_document(FIXTURES / name), tmp_path / name)
    assert (tmp_path / name).read_bytes() == (FIXTURES / name).read_bytes()


def test_every_field_of_the_schemas_stands_in_the_specification() -> None:
    missing = []
    for kind in schema_files.KINDS:
        properties = schema_files.schema(kind)["properties"]
        missing += [f"{kind}: {name}" for name in properties if f"`{name}`" not in README]
    assert missing == []


def test_every_format_stands_in_the_specification() -> None:
    assert [name for name in FORMATS if f"`{name}`" not in README] == []


@pytest.mark.parametrize("kind", schema_files.KINDS)
def test_the_schemas_are_valid_json_schema_2020_12(kind: str) -> None:
    from jsonschema import Draft202012Validator

    schema = schema_files.schema(kind)
    Draft202012Validator.check_schema(schema)
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"


def test_schemas_are_found_inside_an_installed_package(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    package = tmp_path / "site" / "hubokit"
    (package / "schemas").mkdir(parents=True)
    (package / "exchange").mkdir()
    (package / "schemas" / "model.schema.json").write_text("{}")
    monkeypatch.setattr(schema_files, "__file__", str(package / "exchange" / "schema_files.py"))
    assert schema_files.schema_folder() == package / "schemas"


def test_the_written_document_satisfies_the_schema_as_jsonschema_reads_it() -> None:
    fields = plain_json(document_to_json(VALVES))
    assert list(schema_files.validator("model").iter_errors(fields)) == []
