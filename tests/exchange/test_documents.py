"""Documents hold a model, a reduction or a verdict, and lose nothing on the way back."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hubokit.errors import InputError
from hubokit.exchange.documents import (
    Document,
    document_from_json,
    document_to_json,
    plain_json,
    read_document,
    write_document,
)
from hubokit.exchange.formats import read, write
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Step, Trail
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction
from hubokit.validation.check import check

SOURCE = Hamiltonian({("a", "b", "c"): -3, ("a",): "1/2", (): 2}, "spin", labels=["a", "b", "c"])

names = st.lists(
    st.text(st.characters(exclude_categories=["Cs"]), min_size=1, max_size=4), min_size=1, max_size=5, unique=True
)
numbers = st.one_of(
    st.integers(-5, 5), st.fractions(max_denominator=12), st.sampled_from([10**30, -(10**18), 2**53, Fraction(1, 3)])
)


@st.composite
def hamiltonians(draw: st.DrawFn) -> Hamiltonian:
    """Models over up to five variables with any names and weights small and huge."""
    import unicodedata

    labels = list(dict.fromkeys(unicodedata.normalize("NFC", name) for name in draw(names)))
    keys = st.lists(st.sampled_from(labels), max_size=4, unique=True).map(tuple)
    terms = draw(st.dictionaries(keys, numbers, max_size=6))
    convention = draw(st.sampled_from(["1-2x", "2x-1"]))
    return Hamiltonian(terms, draw(st.sampled_from(["spin", "boolean"])), labels=labels, convention=convention)


def as_file(thing: Any, **options: Any) -> Any:
    """The document as a file would give it."""
    return json.loads(json.dumps(plain_json(document_to_json(thing, **options))))


@settings(max_examples=300)
@given(hamiltonians())
def test_a_model_comes_back_equal_with_order_and_convention(model: Hamiltonian) -> None:
    back = document_from_json(as_file(model)).thing
    assert isinstance(back, Hamiltonian)
    assert (back, back.labels, back.convention) == (model, model.labels, model.convention)


def test_intent_notes_and_extensions_are_written_back(tmp_path: Path) -> None:
    document = Document(
        SOURCE,
        intent={"target_states": {"variables": ["a", "b", "c"], "states": [[1, 1, 1]]}, "ground_energy": "-3/2"},
        notes={"who": "me", "x": [1, None, {"y": 0.25}]},
        extensions={"other tool": {"seed": 7}},
    )
    write_document(document, tmp_path / "a.json")
    write_document(read_document(tmp_path / "a.json"), tmp_path / "b.json")
    back = read_document(tmp_path / "b.json")
    assert (back.intent, back.notes, back.extensions) == (document.intent, document.notes, document.extensions)
    assert (tmp_path / "a.json").read_bytes() == (tmp_path / "b.json").read_bytes()


def test_a_file_is_normalised_when_weights_share_a_factor_or_hold_a_zero() -> None:
    fields = as_file(Hamiltonian({("a",): 1, ("b",): 2}, "spin"))
    fields["terms"] = [{"locality": 1, "members": [[1], [0]], "weights": [4, 0]}]
    del fields["digests"]
    model = document_from_json(fields).model
    assert model.terms() == [(("b",), 4)]
    assert model.resolution == 4


def test_a_reduction_comes_back_with_source_trail_and_auxiliaries(tmp_path: Path) -> None:
    reduction = reduce(SOURCE, domain="boolean")
    write(reduction, tmp_path / "r.json")
    back = read(tmp_path / "r.json")
    assert isinstance(back, Reduction)
    assert (back.source, back.model, back.auxiliaries) == (SOURCE, reduction.model, reduction.auxiliaries)
    assert back.trail.steps == reduction.trail.steps
    assert {step.name for step in back.trail.steps} == {"domain", "reduction"}
    assert (back.keep, back.declared) == (reduction.keep, reduction.declared)


def test_a_detached_reduction_needs_its_source_and_checks_it(tmp_path: Path) -> None:
    reduction = reduce(SOURCE)
    write(reduction, tmp_path / "r.json", detached=True, source_file="plan.json")
    bare = read_document(tmp_path / "r.json")
    assert bare.thing == reduction.model
    assert (bare.auxiliaries, bare.trail[0]["file"]) == (reduction.auxiliaries, "plan.json")
    whole = read(tmp_path / "r.json", source=SOURCE)
    assert isinstance(whole, Reduction)
    assert whole.source == SOURCE
    with pytest.raises(InputError, match=r"/trail/0/digest: the source given is another function"):
        read(tmp_path / "r.json", source=SOURCE + 1)


def test_a_detached_document_is_written_back_unchanged(tmp_path: Path) -> None:
    write(reduce(SOURCE), tmp_path / "r.json", detached=True, source_file="plan.json")
    write(read_document(tmp_path / "r.json"), tmp_path / "again.json")
    assert (tmp_path / "again.json").read_bytes() == (tmp_path / "r.json").read_bytes()


def test_a_large_source_is_left_out_of_the_trail(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("hubokit.exchange.trail_document.EMBED_LIMIT", 2)
    assert "model" in as_file(reduce(SOURCE))["trail"][0]
    larger = SOURCE + Hamiltonian({("a", "b"): 1}, "spin")
    assert "model" not in as_file(reduce(larger))["trail"][0]


def test_origin_scale_and_shift_of_a_reduction_made_elsewhere_come_back() -> None:
    model = Hamiltonian({("p", "q"): -6, ("y",): 1}, "spin")
    origin = {"a": ("not", "p"), "b": "q", "c": Fraction(-1)}
    reduction = Reduction(SOURCE, model, ("y",), origin=origin, scale=2, shift="1/3")
    back = document_from_json(as_file(reduction)).thing
    assert isinstance(back, Reduction)
    assert dict(back.origin or {}) == origin
    assert (back.scale, back.shift, back.declared) == (2, Fraction(1, 3), (2, Fraction(1, 3)))


def test_nothing_declared_stays_nothing_declared() -> None:
    reduction = Reduction(SOURCE, SOURCE + Hamiltonian({("y",): 1}, "spin"), ("y",))
    back = document_from_json(as_file(reduction)).thing
    assert isinstance(back, Reduction)
    assert back.declared is None


def test_rationals_in_the_parameters_of_a_step_become_strings() -> None:
    step = Step("rounding", SOURCE.digest, parameters={"resolution": Fraction(1, 4), "kept": (1, 2)})
    reduction = Reduction(SOURCE, SOURCE, (), trail=Trail((step,), source=SOURCE, source_digest=SOURCE.digest))
    assert as_file(reduction)["trail"][1]["parameters"] == {"resolution": "1/4", "kept": [1, 2]}


@pytest.mark.parametrize("weight", [1, 10**30])
def test_a_verdict_comes_back(weight: int, tmp_path: Path) -> None:
    verdict = check(reduce(SOURCE + Hamiltonian({("a", "b", "c"): weight}, "spin")))
    write(verdict, tmp_path / "v.json")
    back = read(tmp_path / "v.json")
    assert as_file(back) == as_file(verdict)
    assert (back.claims, back.figures, back.evidence) == (verdict.claims, verdict.figures, verdict.evidence)


def test_a_refuted_verdict_comes_back_with_its_witness_files_and_extensions(tmp_path: Path) -> None:
    model = Hamiltonian({("a", "y"): 1, ("b",): 1, ("c",): 1}, "spin")
    document = Document(
        check(Reduction(SOURCE, model, ("y",))), files={"source": "s.json", "model": "r.json"}, extensions={"x": 1}
    )
    write(document, tmp_path / "v.json")
    back = read_document(tmp_path / "v.json")
    assert back.thing.claims == document.thing.claims
    assert (back.files, back.extensions) == (document.files, document.extensions)


@pytest.mark.parametrize(
    ("field", "value", "message"),
    [
        ("constant", "7", "/digests/function: the function was changed"),
        ("notes", {"added": 1}, "/digests/document: a field was changed"),
    ],
)
def test_a_change_after_the_digest_is_noticed(field: str, value: Any, message: str) -> None:
    fields = as_file(SOURCE)
    fields[field] = value
    with pytest.raises(InputError, match=message):
        document_from_json(fields)
    del fields["digests"]
    assert isinstance(document_from_json(fields).thing, Hamiltonian)


def test_a_later_minor_version_is_read_when_its_fields_are_known() -> None:
    fields = as_file(SOURCE)
    fields["version"] = "1.7"
    del fields["digests"]
    assert document_from_json(fields).thing == SOURCE
    fields["colour"] = "green"
    with pytest.raises(InputError, match="/colour: there is no field of this name"):
        document_from_json(fields)


@pytest.mark.parametrize("kind", ["notes", "extensions"])
@pytest.mark.parametrize("value", [float("nan"), 2**53, "\ud800", object(), {1: 2}])
def test_what_json_cannot_carry_is_refused_on_writing_with_its_place(kind: str, value: Any) -> None:
    with pytest.raises(InputError, match=f"/{kind}/deep"):
        document_to_json(Document(SOURCE, **{kind: {"deep": value}}))
