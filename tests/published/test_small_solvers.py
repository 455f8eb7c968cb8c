"""Small models solved by other people's exact solvers: one optimum, before and after the reduction.

Sources: dimod.ExactPolySolver and dimod.ExactSolver (plain enumeration in floats), and SCIP through
PySCIPOpt, which reads products from OPB files. Coefficients here are quarters, which floats hold exactly.
Table of least energies of the low-autocorrelation model: Packebusch & Mertens 2016, "Low autocorrelation binary
sequences", J. Phys. A 49 165001 (arXiv:1512.02475).
"""

from __future__ import annotations

import itertools
import json
import random
import re
from fractions import Fraction
from pathlib import Path

import pytest

import hubokit as hk
from hubokit.exchange.dimod_bridge import to_bqm, to_polynomial

LEAST_ENERGY = {3: 1, 4: 2, 5: 2, 6: 7, 7: 3, 8: 8, 9: 12, 10: 13, 11: 5, 12: 10, 13: 6, 14: 19, 15: 15, 16: 24}


def low_autocorrelation(size: int) -> hk.Hamiltonian:
    """E(s) = sum_{k=1..N-1} (sum_{i=1..N-k} s_i s_{i+k})^2 by multiplication of models."""
    spins = hk.spins([f"s{i}" for i in range(size)])
    total = hk.Hamiltonian({}, domain="spin", labels=[f"s{i}" for i in range(size)])
    for shift in range(1, size):
        correlation = sum(
            (spins[i] * spins[i + shift] for i in range(1, size - shift)), start=spins[0] * spins[shift]
        )
        total = total + correlation * correlation
    return total


def random_model(seed: int, size: int, domain: str, locality: int = 4, terms: int = 14) -> hk.Hamiltonian:
    """Random terms with coefficients k/4, k up to 12 in size."""
    chance = random.Random(seed)
    labels = [f"v{i}" for i in range(size)]
    made = {}
    for _ in range(terms):
        product = tuple(sorted(chance.sample(labels, chance.randint(1, locality))))
        made[product] = Fraction(chance.choice([k for k in range(-12, 13) if k]), 4)
    return hk.Hamiltonian(made, domain=domain, labels=labels)


def optimum_by_scip(path: Path) -> Fraction:
    """Least energy of an OPB file: SCIP's objective, scaled and shifted as the comments say."""
    from pyscipopt import Model

    said = dict(re.findall(r"^\* hubokit (scale|constant) (.*)$", path.read_text(encoding="utf-8"), re.MULTILINE))
    solver = Model()
    solver.hideOutput()
    solver.readProblem(str(path))
    solver.optimize()
    assert solver.getStatus() == "optimal"
    objective = solver.getObjVal()
    assert objective == pytest.approx(round(objective), abs=1e-6)
    return Fraction(json.loads(said["constant"])) + Fraction(json.loads(said["scale"])) * round(objective)


@pytest.mark.parametrize("size", LEAST_ENERGY)
def test_the_published_least_energies_of_low_autocorrelation_sequences(size: int) -> None:
    level = hk.ground_states(low_autocorrelation(size), 1)
    assert level.energy == LEAST_ENERGY[size]


@pytest.mark.parametrize("size", [6, 8, 10])
def test_the_reduced_pulse_model_is_proved_and_keeps_the_published_energy(size: int) -> None:
    reduction = hk.reduce(low_autocorrelation(size))
    assert hk.check(reduction).holds("one-to-one")
    level = hk.ground_states(reduction.source)
    assert {reduction.model.energy(state) for state in reduction.lift(level.states)} == {LEAST_ENERGY[size]}


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("seed", range(6))
def test_exact_enumeration_elsewhere_finds_the_same_ground_level(seed: int, domain: str) -> None:
    import dimod

    model = random_model(seed, 9, domain)
    level = hk.ground_states(model)
    answers = dimod.ExactPolySolver().sample_poly(to_polynomial(model))
    lowest = answers.lowest()
    assert Fraction(lowest.first.energy) == level.energy
    assert len(lowest) == level.degeneracy
    found = {tuple(answer[name] for name in model.labels) for answer in lowest.samples()}
    assert found == {tuple(state) for state in level.states.tolist()}


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("seed", range(6))
def test_exact_enumeration_of_the_reduced_model_gives_each_ground_state_once(seed: int, domain: str) -> None:
    import dimod

    model = random_model(seed, 6, domain, terms=8)
    reduction = hk.reduce(model)
    assert reduction.model.size <= 16
    level = hk.ground_states(model)
    lowest = dimod.ExactSolver().sample(to_bqm(reduction.model)).lowest()
    assert Fraction(lowest.first.energy) == level.energy
    answers = reduction.project([[answer[name] for name in reduction.model.labels] for answer in lowest.samples()])
    assert sorted(answers.tolist()) == sorted(level.states.tolist())


@pytest.mark.parametrize(("seed", "domain"), list(itertools.product(range(3), ["spin", "boolean"])))
def test_scip_reads_the_same_optimum_from_our_opb_files(tmp_path: Path, seed: int, domain: str) -> None:
    model = random_model(seed, 12, domain)
    reduction = hk.reduce(model)
    hk.write(model, tmp_path / "source.opb")
    hk.write(reduction.model, tmp_path / "reduced.opb")
    least = hk.ground_states(model, 1).energy
    assert optimum_by_scip(tmp_path / "source.opb") == least
    assert optimum_by_scip(tmp_path / "reduced.opb") == least
