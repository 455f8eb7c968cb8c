"""Pauli-Z strings, CSV tables and Matrix Market files as other tools write and read them."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from scipy.io import mmread

from hubokit.errors import InputError
from hubokit.exchange.formats import read, read_document, write
from hubokit.exchange.matrix_market import write_matrix_market
from hubokit.exchange.pauli import write_pauli
from hubokit.exchange.table import write_table
from hubokit.model.hamiltonian import Hamiltonian


@pytest.mark.parametrize(("end", "first", "last"), [("first", "x1", "x3"), ("last", "x3", "x1")])
def test_the_stated_end_of_a_pauli_string_is_the_first_variable(
    end: str, first: str, last: str, tmp_path: Path
) -> None:
    path = tmp_path / "m.pauli"
    path.write_text(f'# hubokit leftmost "{end}"\n1/2 ZII\n-3 IZZ\n1e1 III\n0.5 ZII\n')
    assert read(path) == Hamiltonian({(first,): 1, ("x2", last): -3, (): 10}, "spin")


def test_a_pauli_string_has_a_z_for_each_member(tmp_path: Path) -> None:
    model = Hamiltonian({("a", "c"): "-3/2", ("b",): 2}, "spin", labels=["a", "b", "c"])
    write_pauli(model, tmp_path / "m.pauli")
    lines = (tmp_path / "m.pauli").read_text().splitlines()
    assert '# hubokit leftmost "first"' in lines
    assert [line for line in lines if not line.startswith("#")] == ["2 IZI", "-3/2 ZIZ"]


def test_the_eigenvalues_of_the_pauli_strings_are_the_energies(tmp_path: Path) -> None:
    model = Hamiltonian({("a", "b", "c"): -1, ("b",): 2, ("a", "c"): "1/4", (): 1}, "boolean")
    write_pauli(model, tmp_path / "m.pauli")
    operator = np.zeros((8, 8))
    matrices = {"I": np.eye(2), "Z": np.diag([1.0, -1.0])}
    for line in (tmp_path / "m.pauli").read_text().splitlines():
        if not line.startswith("#"):
            value, letters = line.split()
            product = np.eye(1)
            for letter in letters:
                product = np.kron(product, matrices[letter])
            operator += float(Fraction(value)) * product
    for index in range(8):
        bits = [(index >> 2) & 1, (index >> 1) & 1, index & 1]
        state = dict(zip(model.labels, bits, strict=True))
        assert operator[index, index] == pytest.approx(float(model.energy(state)))


def test_a_table_made_by_hand_needs_only_its_domain(tmp_path: Path) -> None:
    path = tmp_path / "m.csv"
    rows = ["coefficient,members", "0.5,mist valve,pump", '-1/3,"tank, large"', "2", "0.5,pump,mist valve"]
    path.write_text("\n".join(['# hubokit domain "boolean"', *rows, ""]))
    model = read(path)
    assert model == Hamiltonian({("mist valve", "pump"): 1, ("tank, large",): "-1/3", (): 2}, "boolean")
    assert model.labels == ("mist valve", "pump", "tank, large")  # type: ignore[union-attr]


def test_repeated_members_in_a_table_are_reduced_by_the_domain(tmp_path: Path) -> None:
    for domain, left in (("spin", ()), ("boolean", ("a",))):
        path = tmp_path / f"{domain}.csv"
        path.write_text(f'# hubokit domain "{domain}"\ncoefficient,members\n5,a,a\n')
        assert read(path) == Hamiltonian({left: 5}, domain, labels=["a"])


def test_large_tables_are_written_with_numbers(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    model = Hamiltonian({("a b",): 1, ("a b", "c"): "1/2"}, "spin")
    write_table(model, tmp_path / "small.csv")
    monkeypatch.setattr("hubokit.exchange.table.NAMED_LIMIT", 1)
    write_table(model, tmp_path / "large.csv")
    assert "1/2,a b,c" in (tmp_path / "small.csv").read_text()
    assert "\n1,1,2\n" in (tmp_path / "large.csv").read_text()
    assert read(tmp_path / "small.csv") == read(tmp_path / "large.csv") == model


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("form", ["upper", "symmetric"])
def test_scipy_reads_the_matrix_of_the_energy(form: str, domain: str, tmp_path: Path) -> None:
    model = Hamiltonian({("a", "b"): "3/2", ("b", "c"): -2, ("b",): 1, (): 7}, domain, labels=["a", "b", "c"])
    path = tmp_path / "m.mtx"
    write_matrix_market(model, path, matrix=form)
    matrix = mmread(path).toarray()
    assert (matrix == matrix.T).all() == (form == "symmetric")
    scale = {"upper": 0.5, "symmetric": 0.25}[form]
    for state in [(1, 1, 1), *([(-1, 1, -1), (1, -1, -1)] if domain == "spin" else [(0, 1, 0), (1, 1, 0)])]:
        energy = 7 + scale * float(np.array(state) @ matrix @ np.array(state))
        if domain == "spin":
            assert (np.diag(matrix) == 0).all()
            fields = mmread(tmp_path / "m.fields.mtx").toarray()[:, 0]
            energy += 0.5 * float(fields @ np.array(state))
        assert energy == pytest.approx(float(model.energy(state)))


def test_a_matrix_from_elsewhere_is_read_as_boolean_and_said_so(tmp_path: Path) -> None:
    path = tmp_path / "m.mtx"
    path.write_text("%%MatrixMarket matrix coordinate real symmetric\n2 2 2\n1 1 0.1\n2 1 1.5e0\n")
    document = read_document(path)
    assert document.model == Hamiltonian({("x1",): "0.1", ("x1", "x2"): 3}, "boolean")
    assert "it was read as boolean" in document.notes["reading"][0]


def test_an_existing_file_of_fields_is_not_replaced(tmp_path: Path) -> None:
    (tmp_path / "m.fields.mtx").write_text("mine")
    with pytest.raises(ValueError, match=r"m\.fields\.mtx: the file exists"):
        write(Hamiltonian({("a",): 1, ("a", "b"): 1}, "spin"), tmp_path / "m.mtx")
    assert [path.name for path in tmp_path.iterdir()] == ["m.fields.mtx"]


@pytest.mark.parametrize(
    ("way", "word"), [(write_matrix_market, "matrix"), (write_table, "members")], ids=["matrix", "table"]
)
def test_an_unknown_word_is_refused(way: object, word: str, tmp_path: Path) -> None:
    with pytest.raises(ValueError, match=word):
        way(Hamiltonian({("a",): 1}, "boolean"), tmp_path / "m", **{word: "other"})  # type: ignore[operator]


@pytest.mark.parametrize("name", ["\r", "line\r\nbreak", "end\r"])
def test_a_name_with_a_carriage_return_comes_back_from_a_table(name: str, tmp_path: Path) -> None:
    model = Hamiltonian({(name,): 1, ("a", name): "1/2", ("a",): -3}, "spin")
    write(model, tmp_path / "t.csv")
    again = read(tmp_path / "t.csv")
    assert again == model
    assert again.labels == model.labels
    with pytest.raises(InputError, match="carriage return"):
        write_table(model, tmp_path / "named.csv", members="names")
    assert not (tmp_path / "named.csv").exists()
