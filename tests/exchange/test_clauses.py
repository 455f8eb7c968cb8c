"""Clauses: the energy of a state is the weight of the clauses it breaks; hard clauses outweigh all others."""

from __future__ import annotations

import itertools
import random
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from pysat.formula import CNF, WCNF

from hubokit.errors import InputError, LimitError
from hubokit.exchange.clauses import posiform
from hubokit.exchange.cnf import read_cnf, write_cnf
from hubokit.exchange.formats import read_document, write
from hubokit.exchange.wcnf import read_wcnf, write_wcnf
from hubokit.model.hamiltonian import Hamiltonian


def states(count: int) -> list[tuple[int, ...]]:
    """All boolean states."""
    return list(itertools.product((0, 1), repeat=count))


def is_broken(clause: list[int], state: tuple[int, ...]) -> bool:
    """Whether no literal of the clause is true."""
    return not any((state[abs(literal) - 1] == 1) == (literal > 0) for literal in clause)


@pytest.mark.parametrize("seed", range(20))
def test_the_energy_is_the_number_of_broken_clauses(seed: int, tmp_path: Path) -> None:
    draw = random.Random(seed)
    count = draw.randint(1, 6)
    clauses = [
        [draw.choice((1, -1)) * draw.randint(1, count) for _ in range(draw.randint(0, 5))]
        for _ in range(draw.randint(0, 8))
    ]
    path = tmp_path / "f.cnf"
    lines = [" ".join(map(str, [*clause, 0])) for clause in clauses]
    path.write_text(f"c made by a test\np cnf {count} {len(clauses)}\n" + "\n".join(lines) + "\n")
    model = read_cnf(path)
    assert model.labels == tuple(f"x{i + 1}" for i in range(count))
    for state in states(count):
        assert model.energy(state) == sum(is_broken(clause, state) for clause in clauses)


def test_clauses_may_span_lines_and_end_at_a_percent_sign(tmp_path: Path) -> None:
    path = tmp_path / "f.cnf"
    path.write_text("c\nc a comment\n\np cnf 3 2\n1\n -2 0 3\n\t2 0\n%\n0\n")
    assert read_cnf(path) == Hamiltonian(
        {("x2",): 1, ("x1", "x2"): -1, (): 1, ("x3",): -1}, "boolean", labels=["x1", "x2", "x3"]
    ) + Hamiltonian({("x2",): -1, ("x2", "x3"): 1}, "boolean")


def test_a_clause_of_thirty_literals_is_refused_with_the_number_of_products(tmp_path: Path) -> None:
    path = tmp_path / "f.cnf"
    path.write_text("p cnf 30 1\n" + " ".join(map(str, range(1, 31))) + " 0\n")
    with pytest.raises(LimitError, match="would expand into 1,073,741,824 products"):
        read_cnf(path)
    path.write_text("p cnf 30 1\n" + " ".join(str(-i) for i in range(1, 31)) + " 0\n")
    assert read_cnf(path).locality == 30


@pytest.mark.parametrize("seed", range(20))
def test_a_posiform_has_positive_weights_and_the_same_energies(seed: int) -> None:
    draw = random.Random(seed)
    labels = ["a", "b", "c", "d", "e"]
    terms = {tuple(draw.sample(labels, draw.randint(0, 4))): draw.choice([-3, -1, 2, 5]) for _ in range(9)}
    model = Hamiltonian(terms, "boolean", labels=labels)
    constant, products = posiform(model)
    assert all((weights > 0).all() for _, weights in products)
    for state in states(5):
        value = constant
        for literals, weights in products:
            truth = (np.array(state)[np.abs(literals) - 1] == (literals > 0)).all(axis=1)
            value += int(weights[truth].sum())
        assert model.constant + value * model.resolution == model.energy(state)


@pytest.mark.parametrize("header", ["2022", "old"])
def test_another_reader_sees_the_same_weighted_clauses(header: str, tmp_path: Path) -> None:
    model = Hamiltonian({("a", "b", "c"): -2, ("a", "c"): 3, ("b",): "1/2", (): 7}, "spin")
    path = tmp_path / "m.wcnf"
    write_wcnf(model, path, header=header)
    formula = WCNF(from_file=str(path))
    assert formula.hard == []
    shift = next(Fraction(line.split('"')[1]) for line in path.read_text().splitlines() if "constant" in line)
    scale = model.in_domain("boolean").resolution
    for state in states(3):
        broken = sum(w for clause, w in zip(formula.soft, formula.wght, strict=True) if is_broken(clause, state))
        assert shift + broken * scale == model.energy([1 - 2 * value for value in state])


def test_another_reader_sees_the_same_formula(tmp_path: Path) -> None:
    model = Hamiltonian({("a", "b", "c"): 1, ("a",): -2}, "boolean")
    write_cnf(model, tmp_path / "m.cnf")
    assert sorted(CNF(from_file=str(tmp_path / "m.cnf")).clauses) == [[-1, -2, -3], [1], [1]]


@pytest.mark.parametrize(
    "text",
    [
        "h 1 2 0\nh -1 -2 0\n5 1 0\n3 2 0\n1 -3 0\n",
        "c old\np wcnf 3 5 10\n10 1 2 0\n10 -1 -2 0\n5 1 0\n3 2 0\n1 -3 0\n",
    ],
)
def test_breaking_a_hard_clause_costs_more_than_breaking_every_soft_one(text: str, tmp_path: Path) -> None:
    path = tmp_path / "m.wcnf"
    path.write_text(text)
    document = read_document(path)
    model = document.model
    kept = [state for state in states(3) if state[0] + state[1] == 1]
    worst = max(model.energy(state) for state in kept)
    assert all(model.energy(state) > worst for state in states(3) if state not in kept)
    assert min(model.energy(state) for state in states(3)) == 3
    assert "2 hard clauses became penalties of weight 10" in document.notes["reading"][0]


def test_an_old_header_without_top_has_no_hard_clauses(tmp_path: Path) -> None:
    path = tmp_path / "m.wcnf"
    path.write_text("p wcnf 2 2\n4 1 0\n2 -1 2 0\n")
    assert read_wcnf(path).energy([0, 1]) == 4


def test_weights_as_equal_clauses_are_limited(tmp_path: Path) -> None:
    with pytest.raises(LimitError, match=r"1000001 equal clauses, at most 1000000 are written; use \.wcnf"):
        write(Hamiltonian({("a",): 1_000_000, ("b",): 1}, "boolean"), tmp_path / "m.cnf")


def test_an_unknown_header_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match='the header is "2022" or "old"'):
        write_wcnf(Hamiltonian({}, "boolean"), tmp_path / "m.wcnf", header="new")
