"""A conversion says what it changed, and loses nothing unless told."""

from __future__ import annotations

import itertools
from pathlib import Path

import pytest

from hubokit.errors import HubokitError, InputError
from hubokit.exchange.conversion import convert
from hubokit.exchange.documents import Document
from hubokit.exchange.formats import FORMATS, read, write
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.reduce import reduce

MODEL = Hamiltonian({("mist valve", "pump"): "1/2", ("tank",): -3, (): 2}, "spin")
SUFFIXES = [entry.suffixes[0] for entry in FORMATS.values()]


@pytest.mark.parametrize(("first", "second"), list(itertools.pairwise([*SUFFIXES, SUFFIXES[0]])))
def test_a_chain_of_conversions_gives_the_model_back(first: str, second: str, tmp_path: Path) -> None:
    write(MODEL, tmp_path / f"a{first}")
    convert(tmp_path / f"a{first}", tmp_path / f"b{second}")
    convert(tmp_path / f"b{second}", tmp_path / "c.json")
    back = read(tmp_path / "c.json")
    assert back == MODEL
    assert back.convention == MODEL.convention  # type: ignore[union-attr]


@pytest.mark.parametrize(
    ("suffix", "sentences"),
    [
        (".json", []),
        (".npz", []),
        (".csv", []),
        (".pauli", ["variables are numbered"]),
        (".mtx", ["weights are in units of 1/2 and the constant is 2", "second file", "variables are numbered"]),
        (".opb", ["written in boolean variables by s = 1 - 2x", "the constant is -1/2", "variables are numbered"]),
        (".wcnf", ["written in boolean variables", "the constant is -5/2", "variables are numbered"]),
        (
            ".mps",
            ["written in boolean", "sidecar m.names.json says both", "sidecar m.names.json holds", "1 products"],
        ),
    ],
)
def test_a_conversion_says_what_it_changed(suffix: str, sentences: list[str], tmp_path: Path) -> None:
    write(MODEL, tmp_path / "m.json")
    out = tmp_path / f"m{suffix}" if suffix != ".json" else tmp_path / "n.json"
    changes = convert(tmp_path / "m.json", out).changes
    assert len(changes) == len(sentences)
    assert all(part in change for part, change in zip(sentences, changes, strict=True))


@pytest.mark.parametrize(
    ("suffix", "form", "sentences"),
    [
        (".mtx", "symmetric", ["in units of 1/4", "halved on both sides", "second file", "variables are numbered"]),
        (".mtx", "upper", ["in units of 1/2", "second file", "variables are numbered"]),
        (".csv", "numbered", ["weights are in units of 1/2 and the constant is 2", "variables are numbered"]),
        (".csv", "named", []),
        (".wcnf", "old-header", ["written in boolean", "the constant is -5/2", "variables are numbered"]),
    ],
)
def test_every_form_of_a_format_reads_back_equal_and_says_how_it_is_written(
    suffix: str, form: str, sentences: list[str], tmp_path: Path
) -> None:
    write(MODEL, tmp_path / "m.json")
    done = convert(tmp_path / "m.json", tmp_path / f"m{suffix}", form=form)
    assert len(done.changes) == len(sentences)
    assert all(part in change for part, change in zip(sentences, done.changes, strict=True))
    assert read(tmp_path / f"m{suffix}") == MODEL


def test_a_form_that_the_format_does_not_have_is_refused_with_those_it_has(tmp_path: Path) -> None:
    write(MODEL, tmp_path / "m.json")
    with pytest.raises(InputError, match="wcnf files have no form 'upper'; there are no-header, old-header"):
        convert(tmp_path / "m.json", tmp_path / "m.wcnf", form="upper")
    with pytest.raises(InputError, match="written in one form only"):
        write(MODEL, tmp_path / "m.opb", form="upper")


@pytest.mark.parametrize(("weight", "said"), [(2**53, 0), (2**53 + 1, 1), (10**30, 1)])
def test_weights_that_floats_do_not_hold_are_said_so(weight: int, said: int, tmp_path: Path) -> None:
    write(Hamiltonian({("a", "b"): weight, ("a",): 1}, "boolean"), tmp_path / "m.json")
    changes = convert(tmp_path / "m.json", tmp_path / "m.opb").changes
    assert sum("a solver that computes in floats rounds them" in change for change in changes) == said


def test_the_domain_can_be_changed_on_the_way(tmp_path: Path) -> None:
    write(MODEL, tmp_path / "m.json")
    done = convert(tmp_path / "m.json", tmp_path / "b.json", domain="boolean")
    assert done.changes == ("spin became boolean by s = 1 - 2x",)
    assert read(tmp_path / "b.json") == MODEL.in_domain("boolean")


def test_what_a_reader_changed_is_said_too(tmp_path: Path) -> None:
    (tmp_path / "m.wcnf").write_text("h 1 2 0\n3 -1 0\n")
    done = convert(tmp_path / "m.wcnf", tmp_path / "m.csv")
    assert done.changes[0].startswith("1 hard clause became penalties of weight 4")
    assert done.losses == ()


@pytest.mark.parametrize(
    ("document", "lost"),
    [
        (Document(MODEL, intent={"ground_energy": "0"}), "the intent"),
        (Document(MODEL, notes={"x": 1}), "the notes"),
        (Document(MODEL, extensions={"x": 1}), "the extensions"),
        (Document(MODEL, auxiliaries=("pump",)), "which variables are auxiliaries"),
    ],
)
def test_a_loss_is_refused_unless_told(document: Document, lost: str, tmp_path: Path) -> None:
    write(document, tmp_path / "m.json")
    with pytest.raises(InputError, match=f"do not hold {lost}; allow the loss with --lossy"):
        convert(tmp_path / "m.json", tmp_path / "m.opb")
    assert not (tmp_path / "m.opb").exists()
    done = convert(tmp_path / "m.json", tmp_path / "m.opb", lossy=True)
    assert done.losses == (lost,)
    assert convert(tmp_path / "m.json", tmp_path / "m.json.gz").losses == ()


def test_a_reduction_loses_source_and_trail_outside_json(tmp_path: Path) -> None:
    write(reduce(Hamiltonian({("a", "b", "c"): -1}, "boolean")), tmp_path / "r.json")
    done = convert(tmp_path / "r.json", tmp_path / "r.opb", lossy=True)
    assert done.losses == ("the source", "the trail", "which variables are auxiliaries")
    with pytest.raises(InputError, match="a reduction keeps its domain"):
        convert(tmp_path / "r.json", tmp_path / "s.json", domain="spin")


@pytest.mark.parametrize("suffix", [".mtx", ".lp"])
def test_what_a_format_cannot_hold_is_refused_with_the_mend(suffix: str, tmp_path: Path) -> None:
    write(Hamiltonian({("a", "b", "c"): 2**60 + 1, ("a",): 1}, "boolean"), tmp_path / "m.json")
    with pytest.raises(HubokitError, match=r"reduce it first|round the model first"):
        convert(tmp_path / "m.json", tmp_path / f"m{suffix}")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["m.json"]
