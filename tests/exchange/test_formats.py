"""Out and back through every format gives an equal model; suffixes and names lead to formats."""

from __future__ import annotations

import itertools
import random
from pathlib import Path

import pytest

from hubokit.errors import InputError, LimitError
from hubokit.exchange.formats import FORMATS, format_of, read, read_document, write
from hubokit.exchange.matrix_market import write_matrix_market
from hubokit.exchange.table import write_table
from hubokit.exchange.wcnf import write_wcnf
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction

LIGHT = [name for name in FORMATS if name not in ("mps", "lp")]
NAMES = [
    "x1",
    "x2",
    "y0",
    "v 3",
    "Düse, links",
    'with "quotes"',
    "#",
    "7",
    "名前",
    "a;b",
    " lead",
    "x\ty",
    "~0",
    "line\nend",
]


def random_model(seed: int, locality: int = 4, huge: bool = True) -> Hamiltonian:
    """A model over up to six strangely named variables."""
    draw = random.Random(seed)
    labels = draw.sample(NAMES, draw.randint(1, 6))
    coefficients = [1, -1, 2, "1/2", "-7/3", "0.1"] + ([10**30, -(10**30)] if huge else [])
    terms: dict[tuple[str, ...], object] = {}
    for _ in range(draw.randint(0, 7)):
        size = draw.randint(0, min(locality, len(labels)))
        terms[tuple(draw.sample(labels, size))] = draw.choice(coefficients)
    domain = draw.choice(["spin", "boolean"])
    return Hamiltonian(terms, domain, labels=labels, convention=draw.choice(["1-2x", "2x-1"]))  # type: ignore[arg-type]


def carried(model: Hamiltonian, name: str) -> bool:
    """Whether the format says that it can hold the model."""
    entry = FORMATS[name]
    return entry.locality is None or model.locality <= entry.locality


PAIRS = list(itertools.permutations([name for name in LIGHT if name != "cnf"], 2))


@pytest.fixture(autouse=True)
def no_fsync(monkeypatch: pytest.MonkeyPatch) -> None:
    """Thousands of small files: leave it to the system when they reach the disk."""
    monkeypatch.setattr("hubokit.exchange.files.os.fsync", lambda _: None)


@pytest.mark.parametrize(("first", "second"), PAIRS)
def test_from_one_format_to_another_and_back_the_model_stays(first: str, second: str, tmp_path: Path) -> None:
    for seed in range(8):
        model = random_model(seed, locality=2 if "matrix-market" in (first, second) else 4)
        one, two, three = (
            tmp_path / f"{seed}-{i}{FORMATS[f].suffixes[0]}" for i, f in enumerate((first, second, first))
        )
        write(model, one)
        write(read_document(one), two)
        write(read_document(two), three)
        back = read(three)
        assert isinstance(back, Hamiltonian)
        assert (back, back.labels, back.convention) == (model, model.labels, model.convention)


@pytest.mark.parametrize("name", LIGHT)
def test_hundreds_of_models_come_back_equal(name: str, tmp_path: Path) -> None:
    path = tmp_path / f"m{FORMATS[name].suffixes[0]}"
    count = 0
    for seed in range(200):
        model = random_model(seed, huge=name != "cnf")
        if not carried(model, name):
            with pytest.raises(InputError, match="reduce it first"):
                write(model, path, force=True)
            continue
        write(model, path, force=True)
        back = read(path)
        assert isinstance(back, Hamiltonian)
        assert (back, back.labels, back.convention) == (model, model.labels, model.convention)
        count += 1
    assert count > 70


@pytest.mark.parametrize("name", ["mps", "lp"])
def test_integer_programs_come_back_equal_with_their_sidecar(name: str, tmp_path: Path) -> None:
    for seed in range(4):
        model = random_model(seed, huge=False)
        path = tmp_path / f"m{seed}.{name}"
        write(model, path)
        assert (tmp_path / f"m{seed}.names.json").is_file()
        back = read(path)
        assert isinstance(back, Hamiltonian)
        assert (back, back.labels, back.convention) == (model, model.labels, model.convention)


def test_other_forms_of_a_format_come_back_equal(tmp_path: Path) -> None:
    for seed in range(60):
        model = random_model(seed)
        write_wcnf(model, tmp_path / "m.wcnf", force=True, header="old")
        write_table(model, tmp_path / "m.csv", force=True, members="numbers")
        assert read(tmp_path / "m.wcnf") == read(tmp_path / "m.csv") == model
        quadratic = random_model(seed, locality=2)
        write_matrix_market(quadratic, tmp_path / "m.mtx", force=True, matrix="symmetric")
        assert read(tmp_path / "m.mtx") == quadratic


@pytest.mark.parametrize("name", [n for n in LIGHT if FORMATS[n].packed])
def test_a_gz_holds_the_same(name: str, tmp_path: Path) -> None:
    model = random_model(5, locality=2, huge=False)
    path = tmp_path / f"m{FORMATS[name].suffixes[0]}.gz"
    write(model, path)
    assert path.read_bytes()[:2] == b"\x1f\x8b"
    assert read(path) == model


@pytest.mark.parametrize("name", [n for n in LIGHT if n != "npz"])
def test_byte_order_mark_and_carriage_returns_are_accepted(name: str, tmp_path: Path) -> None:
    model = Hamiltonian({("a b", "c"): 2, ("c",): -1, (): "1/2"}, "boolean")
    path = tmp_path / f"m{FORMATS[name].suffixes[0]}"
    write(model, path)
    path.write_bytes(b"\xef\xbb\xbf" + path.read_bytes().replace(b"\n", b"\r\n"))
    assert read(path) == model


def test_a_format_can_be_named_where_the_suffix_says_nothing(tmp_path: Path) -> None:
    model = random_model(3, huge=False)
    write(model, tmp_path / "plan.txt", format="opb")
    assert read(tmp_path / "plan.txt", format="opb") == model


@pytest.mark.parametrize(
    ("path", "name", "message"),
    [
        ("plan.txt", None, "the suffix says no format; use one of .json, .opb"),
        ("plan", None, "name it with --format"),
        ("plan.json", "yaml", "no such format: 'yaml'; there are json, opb"),
        ("plan.npz.gz", None, "not read or written as .gz"),
    ],
)
def test_an_unknown_format_is_named_with_those_that_are_known(path: str, name: str | None, message: str) -> None:
    with pytest.raises(InputError, match=message):
        format_of(path, name)


@pytest.mark.parametrize("name", FORMATS)
def test_an_existing_file_is_refused_in_every_format(name: str, tmp_path: Path) -> None:
    path = tmp_path / f"m{FORMATS[name].suffixes[0]}"
    path.write_text("mine")
    with pytest.raises(InputError, match="the file exists"):
        write(Hamiltonian({("a", "b"): 1}, "boolean"), path)
    assert path.read_text() == "mine"
    assert [item.name for item in tmp_path.iterdir()] == [path.name]


def test_a_foreign_file_beside_its_source_is_a_reduction(tmp_path: Path) -> None:
    source = Hamiltonian({("a", "b", "c"): -1}, "boolean")
    write(reduce(source), tmp_path / "r.opb")
    back = read(tmp_path / "r.opb", source=source)
    assert isinstance(back, Reduction)
    assert back.auxiliaries == ("y0",)


def test_what_a_reader_has_to_say_stands_in_the_notes(tmp_path: Path) -> None:
    path = tmp_path / "m.wcnf"
    path.write_text("h 1 2 0\n3 -1 0\n")
    assert read_document(path).notes["reading"] == [
        "1 hard clause became penalties of weight 4 (1 + the sum of the soft weights)"
    ]


def test_a_verdict_has_no_place_in_a_model_format(tmp_path: Path) -> None:
    from hubokit.validation.check import check

    verdict = check(reduce(Hamiltonian({("a", "b", "c"): -1}, "boolean")))
    with pytest.raises(InputError, match="a verdict holds no model"):
        write(verdict, tmp_path / "m.opb")


def test_weights_beyond_a_float_are_refused_where_the_format_has_floats(tmp_path: Path) -> None:
    model = Hamiltonian({("a", "b"): 2**53 + 1, ("a",): 1}, "boolean")
    for suffix in ("mps", "lp"):
        with pytest.raises(LimitError, match="a float does not hold exactly"):
            write(model, tmp_path / f"m.{suffix}")


@pytest.mark.parametrize("suffix", ["mps", "lp"])
def test_weights_up_to_two_to_the_53_are_written_to_the_last_digit(suffix: str, tmp_path: Path) -> None:
    model = Hamiltonian({("a", "b"): 2**53 - 1, ("a",): -(2**53), ("b",): 1}, "boolean")
    write(model, tmp_path / f"m.{suffix}")
    assert "9007199254740991" in (tmp_path / f"m.{suffix}").read_text()
    assert read(tmp_path / f"m.{suffix}") == model


def test_a_sidecar_of_another_model_is_noticed(tmp_path: Path) -> None:
    write(Hamiltonian({("a", "b"): 1}, "boolean"), tmp_path / "one.mps")
    write(Hamiltonian({("a", "b"): 1, ("b",): 3}, "boolean"), tmp_path / "two.mps")
    (tmp_path / "two.names.json").replace(tmp_path / "one.names.json")
    with pytest.raises(InputError, match="do not belong together"):
        read(tmp_path / "one.mps")


def test_a_sidecar_gives_names_to_a_file_from_elsewhere(tmp_path: Path) -> None:
    (tmp_path / "m.cnf").write_text("p cnf 2 1\n1 -2 0\n")
    (tmp_path / "m.names.json").write_text('{"names": ["mist valve", "pump"]}')
    assert read(tmp_path / "m.cnf") == Hamiltonian({("pump",): 1, ("mist valve", "pump"): -1}, "boolean")
