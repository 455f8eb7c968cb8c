"""Mutated files: a model, or one error of ours; never a traceback of another kind."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hubokit.errors import HubokitError
from hubokit.exchange.formats import read
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.result import Reduction
from hubokit.validation.verdict import Verdict

FIXTURES = Path(__file__).resolve().parents[2] / "fixtures" / "formats"
NAMES = [
    "valves.json",
    "valves-reduced.json",
    "valves-verdict.json",
    "valves.opb",
    "valves.wcnf",
    "valves-old.wcnf",
    "valves.cnf",
    "valves-reduced.mtx",
    "valves-spin.mtx",
    "valves.csv",
    "valves-numbers.csv",
    "valves.pauli",
    "valves.npz",
]
TOKENS = [
    b"0",
    b"-1",
    b"9" * 25,
    b"1e999",
    b"1/0",
    b"nan",
    b"\x00",
    b"\xff",
    b"\xef\xbb\xbf",
    b"\r\n",
    b'"',
    b"{}",
    b"[[",
    b"null",
    b"true",
    b"x1",
    b"~x2",
    b";",
    b">= 1 ;",
    b" = ",
    b"h ",
    b"c hubokit ",
    b"* hubokit ",
    b"%",
    b",,",
    b"ZZZ",
    b"min:",
]

edits = st.lists(
    st.tuples(
        st.sampled_from(["cut", "drop", "repeat", "insert", "replace", "swap"]),
        st.floats(0, 1, exclude_max=True),
        st.floats(0, 1, exclude_max=True),
        st.sampled_from(TOKENS) | st.binary(min_size=1, max_size=3),
    ),
    min_size=1,
    max_size=4,
)


def mutated(data: bytes, changes: list[tuple[str, float, float, bytes]]) -> bytes:
    """The bytes after some edits at relative places."""
    for kind, first, second, token in changes:
        place = int(first * len(data))
        stop = place + 1 + int(second**3 * 40)
        if kind == "cut":
            data = data[:place]
        elif kind == "drop":
            data = data[:place] + data[stop:]
        elif kind == "repeat":
            data = data[:stop] + data[place:]
        elif kind == "insert":
            data = data[:place] + token + data[place:]
        elif kind == "replace":
            data = data[:place] + token + data[place + len(token) :]
        else:
            data = data[:place] + data[stop : stop + 9] + data[place:stop] + data[stop + 9 :]
    return data


def outcome(path: Path) -> str:
    """ "read", or the line of the error."""
    try:
        thing = read(path)
    except HubokitError as error:
        line = str(error)
        assert line.startswith(str(path.parent))
        assert "\n" not in line
        return line
    assert isinstance(thing, (Hamiltonian, Reduction, Verdict))
    if isinstance(thing, Hamiltonian):
        thing.energy([1] * thing.size)
    return "read"


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the file of fields that the spin matrix names."""
    made = tmp_path_factory.mktemp("fuzz")
    name = "valves-spin.fields.mtx"
    (made / name).write_bytes((FIXTURES / name).read_bytes())
    return made


@pytest.mark.parametrize("name", NAMES)
def test_a_mutated_file_is_read_or_refused(name: str, folder: Path) -> None:
    original = (FIXTURES / name).read_bytes()
    outcomes = set()

    @settings(max_examples=250)
    @given(edits)
    def trial(changes: list[tuple[str, float, float, bytes]]) -> None:
        path = folder / name
        path.write_bytes(mutated(original, changes))
        outcomes.add(outcome(path))

    trial()
    assert len(outcomes) > 10


@pytest.mark.parametrize("name", ["valves.mps", "valves.lp"])
def test_a_mutated_program_is_read_or_refused(name: str, folder: Path) -> None:
    original = (FIXTURES / name).read_bytes()
    outcomes = set()

    @settings(max_examples=12)
    @given(edits)
    def trial(changes: list[tuple[str, float, float, bytes]]) -> None:
        path = folder / name
        path.write_bytes(mutated(original, changes))
        outcomes.add(outcome(path))

    trial()
    assert len(outcomes) > 3


@settings(max_examples=150)
@given(st.binary(max_size=80), st.sampled_from(sorted({os.path.splitext(name)[1] for name in NAMES})))
def test_any_bytes_are_read_or_refused(data: bytes, suffix: str) -> None:
    import tempfile

    with tempfile.TemporaryDirectory() as place:
        path = Path(place) / f"m{suffix}"
        path.write_bytes(data)
        outcome(path)


@settings(max_examples=200)
@given(edits)
def test_a_mutated_gz_is_read_or_refused(changes: list[tuple[str, float, float, bytes]]) -> None:
    import gzip
    import tempfile

    packed = gzip.compress((FIXTURES / "valves.json").read_bytes(), mtime=0)
    with tempfile.TemporaryDirectory() as place:
        path = Path(place) / "m.json.gz"
        path.write_bytes(mutated(packed, changes))
        outcome(path)
