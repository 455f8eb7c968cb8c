"""Real solvers read our files and find our ground energy: one optimum, on thirty models."""

from __future__ import annotations

import contextlib
import io
import random
from fractions import Fraction
from pathlib import Path

import dimod
import pytest
from pysat.examples.rc2 import RC2
from pysat.formula import WCNF

from hubokit.exchange.dimod_bridge import to_bqm, to_polynomial
from hubokit.exchange.formats import read, write
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.reduce import reduce
from hubokit.spectrum.transforms import all_energies

SEEDS = range(30)


def design(seed: int) -> Hamiltonian:
    """A k-local model over 3 to 8 variables in either domain, with fractions as coefficients."""
    draw = random.Random(seed)
    labels = [f"valve {i}" for i in range(draw.randint(3, 8))]
    terms: dict[tuple[str, ...], Fraction] = {(): Fraction(draw.randint(-9, 9), 2)}
    for _ in range(draw.randint(4, 14)):
        key = tuple(sorted(draw.sample(labels, draw.randint(1, min(4, len(labels))))))
        terms[key] = Fraction(draw.choice([-3, -2, -1, 1, 2, 5]), draw.choice([1, 1, 2, 4]))
    return Hamiltonian(terms, draw.choice(["spin", "boolean"]), labels=labels)  # type: ignore[arg-type]


def ground_energy(model: Hamiltonian) -> Fraction:
    """The least energy by the transform, the slow and obvious way."""
    return model.constant + int(min(all_energies(model).tolist())) * model.resolution


def scip_optimum(path: Path) -> float:
    """The optimum that SCIP finds in a file."""
    from pyscipopt import Model

    solver = Model()
    solver.hideOutput()
    with contextlib.redirect_stdout(io.StringIO()):
        solver.readProblem(str(path))
    solver.optimize()
    assert solver.getStatus() == "optimal"
    return float(solver.getObjVal())


def highs_optimum(path: Path) -> float:
    """The optimum that HiGHS finds in a file."""
    import highspy

    solver = highspy.Highs()
    solver.setOptionValue("output_flag", False)
    assert solver.readModel(str(path)) != highspy.HighsStatus.kError
    solver.run()
    assert solver.getModelStatus() == highspy.HighsModelStatus.kOptimal
    return float(solver.getObjectiveValue())


def energy_of(path: Path, optimum: float) -> Fraction:
    """The energy that the optimum of a file stands for, by the constant and scale that the file states."""
    text = path.read_text()
    if path.suffix in (".mps", ".lp"):
        text = path.with_suffix(".names.json").read_text().replace('": ', " ")
    facts = {
        key: Fraction(line.split('"')[-2])
        for line in text.splitlines()
        for key in ("scale", "constant")
        if f"{key} " in line and "energy =" not in line
    }
    assert optimum == pytest.approx(round(optimum), abs=1e-6)
    return facts["constant"] + facts["scale"] * round(optimum)


@pytest.mark.parametrize("seed", SEEDS)
def test_scip_finds_our_ground_energy_in_the_opb_file(seed: int, tmp_path: Path) -> None:
    model = design(seed)
    for name, made in (("design", model), ("reduced", reduce(model).model)):
        path = tmp_path / f"{name}.opb"
        write(made, path)
        assert energy_of(path, scip_optimum(path)) == ground_energy(model)


@pytest.mark.parametrize("seed", SEEDS)
def test_a_maxsat_solver_finds_our_ground_energy_in_the_wcnf_file(seed: int, tmp_path: Path) -> None:
    model = design(seed)
    path = tmp_path / "m.wcnf"
    write(model, path)
    with RC2(WCNF(from_file=str(path))) as solver:
        solver.compute()
        assert energy_of(path, solver.cost) == ground_energy(model)


@pytest.mark.parametrize("seed", SEEDS)
def test_scip_and_highs_find_our_ground_energy_in_the_integer_programs(seed: int, tmp_path: Path) -> None:
    model = design(seed)
    for suffix in ("mps", "lp") if seed < 6 else (("mps", "lp")[seed % 2],):
        path = tmp_path / f"m.{suffix}"
        write(model, path)
        assert energy_of(path, scip_optimum(path)) == ground_energy(model)
        assert energy_of(path, highs_optimum(path)) == ground_energy(model)


@pytest.mark.parametrize("seed", SEEDS)
def test_exact_solvers_find_our_ground_energy_in_dimod_objects(seed: int) -> None:
    model = design(seed)
    best = dimod.ExactPolySolver().sample_poly(to_polynomial(model)).first
    assert model.energy(best.sample) == ground_energy(model)
    assert best.energy == pytest.approx(float(ground_energy(model)))
    reduced = reduce(model)
    if reduced.model.size <= 14:
        answer = dimod.ExactSolver().sample(to_bqm(reduced.model)).first.sample
        state = reduced.project([[answer[label] for label in reduced.model.labels]])
        assert model.energy(state) == ground_energy(model)


def test_scip_reads_a_long_objective_on_one_line(tmp_path: Path) -> None:
    draw = random.Random(1)
    terms = {tuple(sorted(draw.sample(range(60), 2))): draw.choice([1, 2, 3]) for _ in range(1500)}
    named = {tuple(f"valve {i}" for i in key): value for key, value in terms.items()}
    model = Hamiltonian(named, "boolean") - Hamiltonian({("valve 1",): 1}, "boolean")
    path = tmp_path / "long.opb"
    write(model, path)
    assert max(map(len, path.read_text().splitlines())) > 10_000
    assert scip_optimum(path) == -1
    assert read(path) == model


def test_scip_finds_the_same_optimum_under_a_constraint_as_our_penalty(tmp_path: Path) -> None:
    path = tmp_path / "m.opb"
    path.write_text("* #variable= 3 #constraint= 1\nmin: +2 x1 +3 x2 +4 x3 ;\n+1 x1 +1 x2 +1 x3 >= 2 ;\n")
    assert scip_optimum(path) == 5 == ground_energy(read(path))  # type: ignore[arg-type]
