"""Random 3-clause formulas: a clause is a product of literals that is 1 when it is broken.

The ground states at energy 0 are the models of the formula. python-sat (Ignatiev, Morgado, Marques-Silva 2018,
"PySAT: a Python toolkit for prototyping with SAT oracles") lists and counts them independently; for formulas without
a model its RC2 gives the least number of broken clauses.
"""

from __future__ import annotations

from functools import reduce

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.elimination import ground_states

Formula = list[list[int]]


def formula(variables: int, clauses: int, seed: int, span: int | None = None) -> Formula:
    """Distinct random clauses; with a span, on variables that close together in a row."""
    chance = np.random.default_rng(seed)
    chosen: set[tuple[int, ...]] = set()
    while len(chosen) < clauses:
        start = 0 if span is None else int(chance.integers(0, variables - span + 1))
        members = start + 1 + chance.choice(span or variables, 3, replace=False)
        signs = chance.choice([-1, 1], 3)
        chosen.add(tuple(sorted((int(v * s) for v, s in zip(members, signs, strict=True)), key=abs)))
    return [list(clause) for clause in sorted(chosen)]


def broken_clauses(clauses: Formula, variables: int) -> Hamiltonian:
    """The number of broken clauses as a boolean model, by arithmetic on Hamiltonians."""

    def broken(literal: int) -> Hamiltonian:
        x = Hamiltonian({(f"x{abs(literal):03}",): 1}, "boolean")
        return 1 - x if literal > 0 else x

    terms = [reduce(lambda a, b: a * b, map(broken, clause)) for clause in clauses]
    total = reduce(lambda a, b: a + b, terms)
    return total.with_labels([f"x{i:03}" for i in range(1, variables + 1)])


def models(clauses: Formula, variables: int) -> list[list[int]]:
    """All models, listed by a SAT solver."""
    solvers = pytest.importorskip("pysat.solvers")
    # A clause that is always true names every variable, so that free ones are enumerated too.
    free = [[i, -i] for i in range(1, variables + 1)]
    with solvers.Solver(name="glucose4", bootstrap_with=clauses + free) as solver:
        return [[int(literal > 0) for literal in model] for model in solver.enum_models()]


@pytest.mark.parametrize(("variables", "clauses", "seed"), [(12, 30, 0), (14, 50, 1), (16, 60, 2), (20, 84, 3)])
def test_ground_states_at_zero_are_the_models_of_the_formula(variables: int, clauses: int, seed: int) -> None:
    drawn = formula(variables, clauses, seed)
    found = sorted(models(drawn, variables))
    level = ground_states(broken_clauses(drawn, variables))
    assert found
    assert (level.energy, level.degeneracy) == (0, len(found))
    assert level.states.tolist() == found


def test_models_of_a_long_formula_are_counted_as_the_solver_counts_them() -> None:
    """Sixty variables in a row, clauses within windows of five."""
    drawn = formula(60, 250, 9, span=5)
    found = models(drawn, 60)
    level = ground_states(broken_clauses(drawn, 60), limit=10**6)
    assert len(found) == 1040
    assert (level.energy, level.degeneracy) == (0, len(found))
    assert level.states.tolist() == sorted(found)


def test_an_unsatisfiable_formula_has_the_optimum_of_the_solver_as_ground_energy() -> None:
    rc2 = pytest.importorskip("pysat.examples.rc2")
    pysat_formula = pytest.importorskip("pysat.formula")
    drawn = formula(24, 160, 6, span=6)
    weighted = pysat_formula.WCNF()
    for clause in drawn:
        weighted.append(clause, weight=1)
    with rc2.RC2(weighted) as solver:
        solver.compute()
        optimum = solver.cost
    assert optimum > 0
    assert ground_states(broken_clauses(drawn, 24)).energy == optimum
