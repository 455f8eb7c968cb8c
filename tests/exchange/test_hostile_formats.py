"""Bad files of every other format: one error that names file and place, and variants that must be read."""

from __future__ import annotations

import gzip
import io
import json
import re
import tracemalloc
from pathlib import Path

import numpy as np
import pytest

from hubokit.errors import HubokitError
from hubokit.exchange import files
from hubokit.exchange.formats import read
from hubokit.model.hamiltonian import Hamiltonian

MM = "%%MatrixMarket matrix coordinate integer general\n"
SPIN = '% hubokit domain "spin"\n'
CSV = '# hubokit domain "spin"\n'
PAULI = '# hubokit leftmost "first"\n'
BAD: dict[str, list[tuple[str, str]]] = {
    "m.cnf": [
        ("", "line 1: the file must begin with a line like p cnf"),
        ("c only a comment\n", "line 1: the file must begin"),
        ("1 2 0\n", "line 1: the file must begin"),
        ("p sat 3 2\n1 0\n", "line 1: the file must begin"),
        ("p cnf\n1 0\n", "line 1: the file must begin"),
        ("p cnf two 2\n1 0\n", "line 1: the file must begin"),
        ("p cnf -1 1\n1 0\n", "line 1: the file must begin"),
        ("p cnf 2 2\n1 0\n", "line 1: the p line says 2 clauses, the file holds 1"),
        ("p cnf 2 1\n1 0\n2 0\n", "line 1: the p line says 1 clauses, the file holds 2"),
        ("p cnf 2 1\n1 3 0\n", "literal 3 is out of range; there are 2 variables"),
        ("p cnf 2 1\n1 -2\n", "end: the last clause does not end with 0"),
        ("p cnf 2 1\n1 x 0\n", 'line 2: a literal or weight is a whole number, not "x"'),
        ("p cnf 2 1\n1 1.5 0\n", "line 2: a literal or weight is a whole number"),
        ("p cnf 2 1\n1 --2 0\n", "line 2: a literal or weight is a whole number"),
        ("p cnf 2 1\n1 - 0\n", "line 2: a literal or weight is a whole number"),
        ("p cnf 2 1\n1 " + "9" * 500 + " 0\n", "literal a very long number is out of range"),
        ("p cnf 2 1\n1 " + "9" * 5000 + " 0\n", "line 2: a literal or weight of 5000 characters"),
        ("p cnf 99999999999 1\n1 0\n", "the file counts 99999999999 variables; at most 1048576"),
        ("p cnf " + "9" * 3000 + " 1\n1 0\n", "line 1"),
        ("p cnf 2 1\nh 1 0\n", 'clause 0|a weight "h" in a CNF file'),
        ("p cnf 40 1\n" + " ".join(map(str, range(1, 41))) + " 0\n", "would expand into 1,099,511,627,776 products"),
        ('c hubokit name 3 "a"\np cnf 2 1\n1 2 0\n', "a name for variable 3, but the file has variables 1 to 2"),
        ('c hubokit name 1 "a"\nc hubokit name 1 "b"\np cnf 2 1\n1 2 0\n', "line 2: variable 1 has a name already"),
        ('c hubokit name 1 "a"\nc hubokit name 2 "a"\np cnf 2 1\n1 2 0\n', "stands twice"),
        ("c hubokit colour 7\np cnf 2 1\n1 2 0\n", 'line 1: an unknown key: "colour"'),
        ("c hubokit domain spin\np cnf 2 1\n1 2 0\n", 'line 1: the value of "domain" is not JSON'),
        ('c hubokit domain "qubit"\np cnf 2 1\n1 2 0\n', "line 1: the domain is spin or boolean"),
        ('c hubokit scale "0"\np cnf 2 1\n1 2 0\n', "line 1: the scale is .* it must be positive"),
        ("c hubokit scale 2\np cnf 2 1\n1 2 0\n", 'line 1: the scale is a string like "3/2"'),
        ('c hubokit constant "x"\np cnf 2 1\n1 2 0\n', "line 1: not a finite number"),
        ('c hubokit name x "a"\np cnf 2 1\n1 2 0\n', "line 1: a name line is like"),
        ("c hubokit name 1 " + "[" * 5000 + "\np cnf 2 1\n1 2 0\n", "line 1: the value of .* is not JSON"),
        ("p cnf 2 1\n1 \x00 2 x 0\n", "line 2"),
    ],
    "m.wcnf": [
        ("", "line 1: there is no clause"),
        ("p wcnf 2\n", "line 1"),
        ("p cnf 2 1\n1 0\n", "line 1: the file must begin with a line like p wcnf"),
        ("p wcnf 2 2 5\n3 1 0\n", "line 1: the p line says 2 clauses, the file holds 1"),
        ("p wcnf 2 1 5\n3 4 0\n", "literal 4 is out of range"),
        ("0 1 2 0\n", "clause 1: a clause begins with its weight"),
        ("-3 1 2 0\n", "clause 1: the weight -3 is below 1"),
        ("3 1 0\n0\n", "clause 2: a clause begins with its weight"),
        ("3 1 0\n3 h 0\n", "clause 2: h stands only at the beginning"),
        ("3 1 0\n2 2", "end: the last clause does not end with 0"),
        ("p wcnf 2 1 5\nh 1 0\n", "clause 1: h with an old header"),
        ("3 1 99999999999 0\n", "literal 99999999999 is out of range"),
        ("3 1 20000000 0\n", "the file counts 20000000 variables"),
        ("1.5 1 0\n", "line 1: a literal or weight is a whole number"),
        ("hard 1 0\n", "line 1: a literal or weight is a whole number"),
        ("c hubokit variables 1\n3 1 2 0\n", "variable 2 occurs, but there are 1 variables"),
        ("c hubokit variables -1\n3 1 2 0\n", "line 1: the number of variables is a whole number"),
    ],
    "m.opb": [
        ("", "line 1: there is no objective"),
        ("* comment only\n", "line 1: there is no objective"),
        ("min: +1 x1", "end: the last statement does not end with ;"),
        ("min: +1 y1 ;", 'line 1: "y1" does not belong here'),
        ("min: +1 x0 ;", 'line 1: "x0" does not belong here'),
        ("min: +1 x ;", "line 1"),
        ("min: +1 x-1 ;", "line 1"),
        ("min: +1 ~ x1 ;", "line 1"),
        ("min: +1 ~", "line 1"),
        ("min: +1 ~x", "line 1"),
        ("min: +1 x", "line 1"),
        ("min: +", "line 1"),
        ("min: +1 ~y1 ;", "line 1"),
        ("min: +1 x99999999999999 ;", "line 1"),
        ("min: +1 x999999999 ;", "the file counts 999999999 variables"),
        ("min: + 1 x1 ;", "line 1: a weight is a whole number"),
        ("min: 1e5 x1 ;", "line 1: a weight is a whole number"),
        ("min: +" + "9" * 2000 + " x1 ;", "line 1: a weight of 2001 characters"),
        ("min: +1 x1 ; min: +1 x1 ;", "min: stands only once"),
        ("min: +1 x1 ;\n+1 x1 >= ;", "line 2: a constraint is like"),
        ("min: +1 x1 ;\n+1 x1 >= 1 >= 2 ;", "line 2: a constraint is like"),
        ("min: +1 x1 ;\n>= 1 ;", "line 2"),
        ("min: +1 x1 ;\n+1 x1 +2 >= 1 ;", "line 2"),
        ("min: +1 x1 ;\nx1 >= 1 ;", "line 2: a term begins with its weight"),
        ("min: +1 x1 ;\n+1 x1 < 1 ;", "line 2: a strict relation"),
        ("min: +1 x1 ;\n;", "line 2: a constraint is like"),
        ("soft: 5 ;\nmin: +1 x1 ;", "line 1: .* soft constraints"),
        ("min: +1 x1 ;\nbinary \xff\x00", "line 2"),
        ("* hubokit constant 5\nmin: +1 x1 ;", "line 1: the constant is a string"),
    ],
    "m.mtx": [
        ("", "line 1: the first line is %%MatrixMarket"),
        ("2 2 1\n1 2 3\n", "line 1: the first line is %%MatrixMarket"),
        ("%%MatrixMarket matrix array real general\n2 2\n1\n2\n3\n4\n", "line 1"),
        ("%%MatrixMarket matrix coordinate complex general\n1 1 0\n", "line 1"),
        ("%%MatrixMarket matrix coordinate pattern general\n1 1 0\n", "line 1"),
        ("%%MatrixMarket matrix coordinate real hermitian\n1 1 0\n", "line 1"),
        (MM, "end: the size line is missing"),
        (MM + "2 2\n", "line 2: the size line holds rows, columns and entries"),
        (MM + "2 3 1\n1 2 3\n", "size line: a square matrix is needed, not 2 x 3"),
        (MM + "2 2 2\n1 2 3\n", "size line: the size line says 2 entries, the file holds 1"),
        (MM + "2 2 1\n1 2\n", "line 3: an entry is a row, a column and a value"),
        (MM + "2 2 1\n1 3 5\n", 'line 3: position "3" is out of range 1 to 2'),
        (MM + "2 2 1\n0 1 5\n", 'line 3: position "0" is out of range'),
        (MM + "2 2 1\n1 -1 5\n", "line 3: a position is a whole number"),
        (MM + "2 2 1\n1 2 0.5\n", "line 3: a value is a whole number"),
        (MM.replace("integer", "real") + "2 2 1\n1 2 nan\n", "line 3: not a finite number"),
        (MM.replace("integer", "real") + "2 2 1\n1 2 1e99999\n", "line 3"),
        (MM + SPIN + "2 2 1\n1 1 5\n", "a spin matrix has no diagonal"),
        (MM + "99999999 99999999 0\n", "line 2: the file counts 99999999 variables"),
        (MM + SPIN + '% hubokit fields "none.mtx"\n2 2 1\n1 2 5\n', "none.mtx: there is no such file"),
        (MM + SPIN + '% hubokit fields "../m.mtx"\n2 2 1\n1 2 5\n', "line 3: the name of a file beside this one"),
        (
            MM + SPIN + '% hubokit fields "m.mtx"\n2 2 1\n1 2 5\n',
            "m.mtx: size line: fields are a general 2 x 1 matrix",
        ),
        (MM + '% hubokit matrix "lower"\n2 2 1\n1 2 5\n', "line 2: the matrix is upper or symmetric"),
    ],
    "m.csv": [
        ("", "line 1: there is no title line"),
        (CSV, "line 1: there is no title line"),
        ("coefficient,members\n1,a\n", "line 1: the domain is not said"),
        (CSV + "value,members\n1,a\n", "line 2: the first column is titled coefficient or weight"),
        (CSV + "1,a\n", "line 2: the first column is titled"),
        (CSV + "coefficient,members\nx,a\n", "line 3: not a finite number: x"),
        (CSV + "coefficient,members\n1/0,a\n", "line 3: division by zero"),
        (CSV + "coefficient,members\nnan,a\n", "line 3: not a finite number"),
        (CSV + "coefficient,members\n1,a,,b\n", "line 3: an empty cell between members"),
        (CSV + "coefficient,members\n,a\n", "line 3: an empty cell"),
        (CSV + 'coefficient,members\n1,"a\n', "line 3: not CSV|line 4: not CSV"),
        (CSV + "coefficient,members\n" + "9" * 5000 + ",a\n", "line 3: a number of 5000 characters"),
        (CSV + "coefficient,members\n1e99999,a\n", "line 3: the exponent"),
        (CSV + "weight,members\n1.5,1\n", "line 3: a weight is a whole number"),
        (CSV + "weight,members\n1,a\n", "line 3: a member is a whole number"),
        (CSV + "weight,members\n1,0\n", "line 3: members are numbers of variables, from 1"),
        (CSV + "weight,members\n1,,2\n", "line 3: an empty cell"),
        (CSV + "weight,members\n,2\n", "line 3: an empty cell"),
        (CSV + "weight,members\n1,-2\n", "line 3: a member is a whole number"),
        (CSV + "weight,members\n1,4000000000\n", "line 3: members are numbers"),
        (CSV + "weight,members\n1,400000000\n", "the file counts 400000000 variables"),
        (CSV + "# hubokit variables 1\nweight,members\n1,2\n", "variable 2 occurs, but there are 1"),
        (CSV + "weight,members\n# late\n1,x\n", "line 4"),
    ],
    "m.pauli": [
        ("", "line 1: there is no line"),
        ("1 ZZ\n", "line 1: which end of the strings is the first variable"),
        (PAULI + "1\n", "line 2: a line holds a coefficient and a string"),
        (PAULI + "1 ZZ 2\n", "line 2: a line holds a coefficient"),
        (PAULI + "1\nZZ\n", "line 2: a line holds a coefficient"),
        (PAULI + "1 ZZ\n2 Z\n", "line 3: a string of 1 letters after strings of 2"),
        (PAULI + "1 ZX\n", 'line 2: a string holds I and Z only, not "ZX"'),
        (PAULI + "1 zi\n", "line 2: a string holds I and Z only"),
        (PAULI + "one ZZ\n", "line 2: not a finite number: one"),
        (PAULI + "1j ZZ\n", "line 2: not a finite number"),
        ('# hubokit leftmost "left"\n1 ZZ\n', 'line 1: leftmost is "first" or "last"'),
        (PAULI + '# hubokit name 3 "c"\n1 ZZ\n', "a name for variable 3"),
    ],
}
CASES = [(name, text.encode("latin-1"), message) for name, listed in BAD.items() for text, message in listed]
RUBBISH = [bytes(range(256)) * 20, b"\x89PNG\r\n\x1a\n" + bytes(1000), "min: p cnf".encode("utf-16")]
CASES += [(name, content, "") for name in [*BAD, "m.npz"] for content in RUBBISH]


def error_of(path: Path) -> str:
    """The one line that reading gives."""
    with pytest.raises(HubokitError) as caught:
        read(path)
    return str(caught.value)


def test_there_are_more_than_a_hundred_bad_files() -> None:
    assert len({case[:2] for case in CASES}) > 140


@pytest.mark.parametrize(("name", "content", "message"), CASES)
def test_a_bad_file_gives_one_line_with_file_and_place(
    name: str, content: bytes, message: str, tmp_path: Path
) -> None:
    path = tmp_path / name
    path.write_bytes(content)
    line = error_of(path)
    assert line.startswith(f"{tmp_path}")
    assert name in line or "none.mtx" in line
    assert re.search(message, line), line
    assert "\n" not in line
    assert len(line) < len(str(path)) + 400


@pytest.mark.parametrize("name", BAD)
def test_a_bad_file_is_as_bad_inside_a_gz(name: str, tmp_path: Path) -> None:
    text, message = BAD[name][3]
    path = tmp_path / f"{name}.gz"
    path.write_bytes(gzip.compress(text.encode()))
    assert re.search(message, error_of(path))


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("m.mps", "", "the file is empty"),
        ("m.mps", "this is no program", "line 1: the file does not end with ENDATA"),
        ("m.mps", "this is no program\nENDATA", "the program has no columns"),
        ("m.mps", "NAME\nROWS\n N Obj\nCOLUMNS\n x1 Obj zz\nENDATA\n", 'line 5: "zz" is no number'),
        ("m.mps", "NAME\nROWS\n N Obj\nCOLUMNS\n x1 Obj 1", "line 5: the file does not end with ENDATA"),
        ("m.mps", "NAME\nROWS\n N c\nCOLUMNS\n x c 1\nRHS\n R c 1z\nENDATA", 'line 7: "1z" is no number'),
        ("m.mps", "\xff\x00" * 9, "the file does not end with ENDATA"),
        ("m.lp", "min\n obj: x1\nst\n", "line 3: the file does not end with end"),
        (
            "m.mps",
            "NAME\nROWS\n N  Obj\nCOLUMNS\n    x1  Obj  1\nRHS\nENDATA\n",
            "column x1: every column must be binary",
        ),
        ("m.lp", "", "the file is empty"),
        ("m.lp", "min\n obj: x1 x2 x3 +\nst\n c1: >= \nend\n", "HiGHS"),
        ("m.lp", "max\n obj: x1\nst\nbin\n x1\nend\n", "the objective is maximised"),
        ("m.lp", "min\n obj: x1 + [ x1^2 ] / 2\nst\nbin\n x1\nend\n", "a quadratic objective"),
        ("m.lp", "min\n obj: x1\nst\n c: x1 + y >= 1\nbin\n x1\nend\n", "column y: every column must be binary"),
    ],
)
def test_a_bad_program_gives_one_line(name: str, content: str, message: str, tmp_path: Path) -> None:
    path = tmp_path / name
    path.write_text(content)
    assert re.search(message, error_of(path))


def stored(**arrays: object) -> bytes:
    """The bytes of an .npz file."""
    buffer = io.BytesIO()
    np.savez(buffer, **arrays)  # type: ignore[arg-type]
    return buffer.getvalue()


DOCUMENT = {
    "document": "hubokit/model",
    "version": "1.0",
    "domain": "spin",
    "convention": "1-2x",
    "variables": ["a", "b"],
    "resolution": "1",
    "constant": "0",
}
HEAD = np.frombuffer(json.dumps({**DOCUMENT, "terms": []}).encode(), np.uint8)
PAIR = np.array([[0, 1]], np.int32)
NPZ = [
    (stored(x=PAIR), 'the array "document" is missing'),
    (stored(document=PAIR), "document: the array holds JSON bytes"),
    (stored(document=np.frombuffer(b"{", np.uint8)), "line 1 column 2: not JSON"),
    (stored(document=np.frombuffer(b"{}", np.uint8)), 'the field "document" is missing'),
    (stored(document=HEAD, extra=PAIR), 'an array of an unknown name: "extra"'),
    (stored(document=HEAD, members_2=PAIR), "there are members_2 but no weights_2"),
    (
        stored(document=HEAD, members_3=PAIR, weights_3=np.ones(1, int)),
        "members_3: integers of shape .m, 3. are needed",
    ),
    (stored(document=HEAD, members_2=PAIR, weights_2=np.ones(2, int)), "weights_2: 1 weights are needed"),
    (stored(document=HEAD, members_2=PAIR, weights_2=np.ones(1)), "weights_2: weights are whole numbers"),
    (stored(document=HEAD, members_2=PAIR, weights_2=np.array(["x"])), "weights_2: weights as strings"),
    (stored(document=HEAD, members_2=PAIR + 5, weights_2=np.ones(1, int)), "a member is 6"),
    (stored(document=HEAD, members_2=PAIR - 1, weights_2=np.ones(1, int)), "a member is negative"),
    (
        stored(document=HEAD, members_2=np.array([[None, 1]]), weights_2=np.ones(1, int)),
        "Object arrays cannot be loaded",
    ),
    (stored(document=HEAD)[:-30], "not an .npz file"),
    (b"PK\x03\x04rubbish", "not an .npz file"),
    (b"", "not an .npz file"),
]


@pytest.mark.parametrize(("content", "message"), NPZ)
def test_a_bad_npz_gives_one_line(content: bytes, message: str, tmp_path: Path) -> None:
    path = tmp_path / "m.npz"
    path.write_bytes(content)
    line = error_of(path)
    assert line.startswith(f"{path}: ")
    assert re.search(message, line), line


def test_an_npz_bomb_is_refused_before_it_is_inflated(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(files, "INFLATE_LIMIT", 2**24)
    path = tmp_path / "m.npz"
    with open(path, "wb") as stream:
        np.savez_compressed(
            stream, document=HEAD, members_1=np.zeros((2**22, 1), np.int32), weights_1=np.zeros(2**22)
        )
    tracemalloc.start()
    assert "more than the limit of" in error_of(path)
    assert tracemalloc.get_traced_memory()[1] < 2**22
    tracemalloc.stop()


ACCEPTED = [
    ("m.cnf", "c x\r\np cnf 2 1\r\n\r\n1   -2\t0\r\n"),
    ("m.cnf", "\ufeffp cnf 2 1\n1 -2 0"),
    ("m.wcnf", "\ufeff1 1 -2 0\r\n"),
    ("m.wcnf", "p wcnf 2 1\n1 1 -2 0\n"),
    ("m.opb", "\ufeff* #variable= 2 #constraint= 0\r\nmin:+1 ~x1 x2;\r\n"),
    ("m.opb", "min: +1 x2\n -1 x1 x2\n;\n"),
    ("m.opb", "* \u00e9 comment\nmin: 1 x2 -1 x2 x1 ; * not a constraint\n".replace(" * not a constraint", "")),
    ("m.mtx", "%%MatrixMarket MATRIX Coordinate Real General\r\n%\r\n2 2 2\r\n2 2 1.0\r\n1 2 -1e0\r\n"),
    ("m.mtx", MM + "2 2 3\n2 2 1\n1 2 -2\n2 1 1\n"),
    ("m.csv", '\ufeff# hubokit domain "boolean"\r\ncoefficient,members\r\n1,x2\r\n-1,x1,x2\r\n'),
    ("m.csv", '# hubokit domain "boolean"\n\ncoefficient,a,b\n1,x2,,,\n-1.0,"x1",x2\n\n'),
    ("m.csv", '# hubokit domain "boolean"\r\nweight,members,\r\n1,2,,\r\n-1,1,2\r\n'),
]


@pytest.mark.parametrize(("name", "text"), ACCEPTED)
def test_harmless_variants_are_read(name: str, text: str, tmp_path: Path) -> None:
    path = tmp_path / name
    path.write_bytes(text.encode())
    assert read(path) == Hamiltonian({("x2",): 1, ("x1", "x2"): -1}, "boolean")
