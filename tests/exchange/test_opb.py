"""OPB: products of literals, and constraints as penalties that no violating state can undercut."""

from __future__ import annotations

import itertools
import random
from pathlib import Path

import pytest

from hubokit.errors import InputError, LimitError
from hubokit.exchange.constraints import Constraint, penalty
from hubokit.exchange.formats import read_document
from hubokit.exchange.opb import read_opb, write_opb
from hubokit.model.hamiltonian import Hamiltonian


def states(count: int) -> list[tuple[int, ...]]:
    """All boolean states."""
    return list(itertools.product((0, 1), repeat=count))


def value(products: list[tuple[tuple[int, ...], int]], state: tuple[int, ...]) -> int:
    """The weighted sum of products of literals."""
    return sum(w * all((state[abs(n) - 1] == 1) == (n > 0) for n in row) for row, w in products)


def holds(constraint: Constraint, state: tuple[int, ...]) -> bool:
    """Whether the constraint holds."""
    left = value(constraint.products, state)
    right = constraint.bound
    return {">=": left >= right, "<=": left <= right, "=": left == right}[constraint.relation]


def test_products_and_negated_literals_are_expanded(tmp_path: Path) -> None:
    path = tmp_path / "m.opb"
    path.write_text("* #variable= 4 #constraint= 0\nmin: +2 x1 ~x2 -3 ~x3 ~x4 +1 x4 x4;\n")
    model = read_opb(path)
    products = [((1, -2), 2), ((-3, -4), -3), ((4,), 1)]
    for state in states(4):
        assert model.energy(state) == value(products, state)


@pytest.mark.parametrize("seed", range(60))
def test_a_penalty_is_zero_where_the_constraint_holds_and_at_least_one_elsewhere(seed: int) -> None:
    draw = random.Random(seed)
    count = draw.randint(1, 6)
    equal = draw.random() < 0.5
    linear = draw.random() < 0.7
    products: list[tuple[tuple[int, ...], int]] = []
    for variable in draw.sample(range(1, count + 1), draw.randint(1, count)):
        others = draw.sample(range(1, count + 1), 0 if linear else draw.randint(0, min(2, count)))
        row = tuple(draw.choice((1, -1)) * v for v in (variable, *others))
        products.append((row, draw.choice((1, -1)) * (2 if equal else draw.randint(1, 4))))
    constraint = Constraint(products, draw.choice([">=", "<=", "="]), draw.randint(-4, 5), 1)
    made = penalty(constraint, tuple(f"x{i + 1}" for i in range(count)))
    for state in states(count):
        cost = 0 if made is None else made.energy(state)
        assert cost == 0 if holds(constraint, state) else cost >= 1


@pytest.mark.parametrize("seed", range(20))
def test_no_state_that_violates_a_constraint_lies_below_one_that_keeps_all(seed: int, tmp_path: Path) -> None:
    draw = random.Random(seed)
    objective = [((draw.choice((1, -1)) * i, draw.randint(1, 5)), draw.randint(-9, 9)) for i in range(1, 6)]
    rows = []
    constraints = []
    for line in range(2):
        terms = [((draw.choice((1, -1)) * i,), draw.randint(1, 3)) for i in draw.sample(range(1, 6), 3)]
        constraints.append(Constraint(terms, draw.choice([">=", "="]), draw.randint(1, 4), line))
        body = " ".join(f"{w:+d} {'~' if row[0] < 0 else ''}x{abs(row[0])}" for row, w in terms)
        rows.append(f"{body} {constraints[-1].relation} {constraints[-1].bound} ;")
    text = " ".join(f"{w:+d} " + " ".join(f"{'~' if n < 0 else ''}x{abs(n)}" for n in row) for row, w in objective)
    path = tmp_path / "m.opb"
    path.write_text(f"* #variable= 5 #constraint= 2\nmin: {text} ;\n" + "\n".join(rows) + "\n")
    document = read_document(path)
    kept = [state for state in states(5) if all(holds(c, state) for c in constraints)]
    for state in kept:
        assert document.model.energy(state) == value(objective, state)
    worst = max((value(objective, state) for state in kept), default=-(10**9))
    for state in set(states(5)) - set(kept):
        assert document.model.energy(state) > worst
    assert "2 constraints became penalties of weight" in document.notes["reading"][0]


def test_large_cardinality_constraints_have_small_penalties() -> None:
    labels = tuple(f"x{i + 1}" for i in range(40))
    clause = penalty(Constraint([((-i,), 1) for i in range(1, 41)], ">=", 1, 1), labels)
    assert clause == Hamiltonian({labels: 1}, "boolean")
    at_most_one = penalty(Constraint([((i,), 1) for i in range(1, 41)], "<=", 1, 1), labels)
    assert at_most_one is not None
    assert (len(at_most_one), at_most_one.locality) == (780, 2)


@pytest.mark.parametrize(
    ("constraint", "message"),
    [
        (
            Constraint([((i,), i) for i in range(1, 14)], ">=", 20, 7),
            "line 7: an inequality with unequal weights",
        ),
        (
            Constraint([((i,), 1) for i in range(1, 41)], ">=", 20, 7),
            "line 7: a constraint over 40 literals",
        ),
    ],
)
def test_a_constraint_without_a_small_penalty_is_refused_with_its_line(constraint: Constraint, message: str) -> None:
    with pytest.raises(LimitError, match=message):
        penalty(constraint, tuple(f"x{i + 1}" for i in range(40)))


def test_a_file_of_constraints_alone_asks_whether_they_can_be_kept(tmp_path: Path) -> None:
    path = tmp_path / "m.opb"
    path.write_text("* #variable= 3 #constraint= 2\n+1 x1 +1 x2 >= 1 ;\n+1 x2 +1 x3 = 2 ;\n")
    model = read_opb(path)
    assert min(model.energy(state) for state in states(3)) == 0
    assert [s for s in states(3) if model.energy(s) == 0] == [(0, 1, 1), (1, 1, 1)]


def test_a_model_is_one_line_of_objective_that_says_its_counts(tmp_path: Path) -> None:
    model = Hamiltonian({("a", "b", "c"): "-3/2", ("b", "c"): 10**25, ("c",): 1, (): "1/3"}, "boolean")
    path = tmp_path / "m.opb"
    write_opb(model, path)
    lines = path.read_text().splitlines()
    assert lines[0] == "* #variable= 3 #constraint= 0 #product= 2 sizeproduct= 5"
    assert lines[-1] == "min: +2 x3 +20000000000000000000000000 x2 x3 -3 x1 x2 x3 ;"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("max: +1 x1 ;", "line 1: .* only min: is read; turn all signs round"),
        ("min: +1 x1 ;\n[3] +1 x1 >= 1 ;", "line 2: .* soft constraints"),
        ("min: +1 x1 +5 ;", "line 1: the weight 5 has no variable"),
        ("min: x1 ;", "line 1: a term begins with its weight"),
        ("min: +1 x1 > 2 ;", "line 1: a strict relation"),
        ("* #variable= 1 #constraint= 0\nmin: +1 x2 ;", "line 1: x2 occurs, but the line says 1 variables"),
        ("* #variable= 2 #constraint= 3\nmin: +1 x2 ;", "line 1: the line says 3 constraints, the file holds 0"),
        ("min: +1 x1", "end: the last statement does not end with ;"),
        ("+1 x1 >= 1 ;\nmin: +1 x1 ;", "line 2: min: stands only once"),
        ("min: +1.5 x1 ;", "line 1: a weight is a whole number"),
    ],
)
def test_what_is_no_opb_is_refused_with_line_and_mend(text: str, message: str, tmp_path: Path) -> None:
    path = tmp_path / "m.opb"
    path.write_text(text + "\n")
    with pytest.raises(InputError, match=message):
        read_opb(path)
