"""The models of fixtures/ are what their program writes, and are what they say they are."""

from __future__ import annotations

import importlib.util
import json
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

import hubokit as hk

ROOT = Path(__file__).resolve().parents[1]
FIXTURES = ROOT / "fixtures"


@pytest.fixture(scope="module")
def program() -> ModuleType:
    """tests/make_fixtures.py as a module."""
    spec = importlib.util.spec_from_file_location("make_fixtures", ROOT / "tests" / "make_fixtures.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_the_program_writes_the_same_files_again(program: ModuleType, tmp_path: Path) -> None:
    program.write_all(tmp_path)
    assert contents(tmp_path) == contents(FIXTURES)


def contents(folder: Path) -> dict[str, Any]:
    """File name to what is in it; JSON without its layout, programs left out."""
    return {
        path.name: json.loads(text) if path.suffix == ".json" else text
        for path in folder.iterdir()
        if path.is_file() and path.suffix != ".py" and (text := path.read_text(encoding="utf-8"))
    }


@pytest.mark.parametrize("size", [8, 12, 16])
def test_the_pulse_model_is_the_sum_of_squared_autocorrelations(size: int) -> None:
    import random

    model = hk.read(FIXTURES / f"low-autocorrelation-{size:02d}.json")
    chance = random.Random(size)
    assert (model.size, model.locality) == (size, 4)
    for _ in range(20):
        s = [chance.choice((1, -1)) for _ in range(size)]
        assert model.energy(s) == sum(sum(s[i] * s[i + k] for i in range(size - k)) ** 2 for k in range(1, size))


@pytest.mark.parametrize(("name", "satisfiable"), [("satisfiable-20", True), ("unsatisfiable-20", False)])
def test_the_formulas_are_as_they_are_called(name: str, satisfiable: bool) -> None:
    from pysat.formula import CNF
    from pysat.solvers import Cadical153

    path = FIXTURES / f"{name}.cnf"
    with Cadical153(bootstrap_with=CNF(from_file=str(path)).clauses) as solver:
        assert solver.solve() is satisfiable
    assert "seed" in path.read_text(encoding="utf-8")
    assert (hk.ground_states(hk.read(path), 1).energy == 0) is satisfiable


def test_the_planted_state_satisfies_every_parity_equation() -> None:
    document = hk.read_document(FIXTURES / "parity-equations.json")
    target = document.intent["target_states"]
    state = dict(zip(target["variables"], target["states"][0], strict=True))
    assert document.thing.energy(state) == -len(document.thing)
    assert str(-len(document.thing)) == document.intent["ground_energy"]


@pytest.mark.parametrize(
    "name",
    ["low-autocorrelation-08", "low-autocorrelation-12", "low-autocorrelation-16", "parity-equations", "greenhouse"],
)
def test_the_ground_energy_that_a_design_intends_is_the_one_it_has(name: str) -> None:
    document = hk.read_document(FIXTURES / f"{name}.json")
    assert str(hk.ground_states(document.thing, 1).energy) == document.intent["ground_energy"]
