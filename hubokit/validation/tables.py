"""E, P and m of every state of a small model, side by side in lift order.

Three ways to the minimum over the auxiliaries, cheapest first: the polynomial P that the projection gave;
all 2^(n+a) energies of the model, the plain definition; and, where these are too many, the per-state
elimination of the projection in blocks of states.
"""

from __future__ import annotations

import time as clock
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, unpack
from hubokit.validation.case import Case, States
from hubokit.validation.scaling import Column

#: Most original variables of which all states are tabulated.
STATES_LIMIT = 20
#: Most variables, auxiliaries included, of which all energies of the model are tabulated.
MODEL_LIMIT = 22
#: States in one block where the minimum is taken state by state.
BLOCK = 2**12


@dataclass(frozen=True)
class Tables:
    """One row for each original state, in lift order.

    Parameters
    ----------
    energy, minimum : Column
        E and P, 2^n entries.
    multiplicity : int64 or object array, shape (2^n,), or None
        m, None where it is left to `counts`.
    best : callable
        Best auxiliary states, int8 (m, a), of row numbers.
    counts : callable
        Multiplicities of row numbers.
    auxiliary_gap : Column-like pair or None
        Least F - P > 0 of each row in units of the model's resolution (0: none), where the whole model was
        tabulated.
    method, account : str
        "exhaustion" or "projection", and a phrase that says how many states were visited and how.
    """

    energy: Column
    minimum: Column
    multiplicity: NDArray[Any] | None
    best: Callable[[NDArray[Any]], States]
    counts: Callable[[NDArray[Any]], NDArray[Any]]
    auxiliary_gap: NDArray[Any] | None
    method: str
    account: str


def energies_of(H: Hamiltonian) -> Column:
    """All energies of a Hamiltonian of at most `MODEL_LIMIT` variables."""
    from hubokit.spectrum.transforms import all_energies

    return Column(all_energies(H), H.constant, H.resolution)


def state_rows(case: Case, numbers: NDArray[Any]) -> States:
    """Original states, int8 (m, n), of row numbers."""
    return from_bits(unpack(numbers, len(case.originals)), case.model.domain)


def tables_from_model(case: Case) -> Tables:
    """E, P and m from all energies of the model.

    Raises
    ------
    LimitError
        More than `MODEL_LIMIT` variables.
    """
    n, a = len(case.originals), len(case.auxiliaries)
    if n + a > MODEL_LIMIT:
        raise LimitError(f"{n + a} variables; all energies are tabulated up to {MODEL_LIMIT}")
    whole = energies_of(case.model.with_labels(case.originals + case.auxiliaries))
    table = whole.integers.reshape(2**n, 2**a)
    first = table.argmin(axis=1)
    least = table[np.arange(2**n), first]
    reached = table == least[:, None]
    bound = table.max() + 1
    above = np.where(reached, bound, table).min(axis=1)
    gaps = np.where(above == bound, 0, above - least)

    def best(numbers: NDArray[Any]) -> States:
        return from_bits(unpack(first[numbers], a), case.model.domain)

    multiplicity = reached.sum(axis=1)
    return Tables(
        energy=energies_of(case.energy),
        minimum=Column(least, case.model.constant, case.model.resolution),
        multiplicity=multiplicity,
        best=best,
        counts=lambda numbers: multiplicity[numbers],
        auxiliary_gap=gaps,
        method="exhaustion",
        account=f"all 2^{n} states and all 2^{a} settings of the auxiliaries visited",
    )


def tables_by_blocks(case: Case, seconds: float) -> Tables:
    """E, P and m with the minimum taken for each state by elimination over the auxiliaries.

    Parameters
    ----------
    seconds : float
        Time that the whole may take, judged by its second block.

    Raises
    ------
    LimitError
        More than `STATES_LIMIT` original variables, auxiliaries too densely coupled to be eliminated, or too
        long.
    """
    n = len(case.originals)
    if not case.projectable:
        raise LimitError("the model is not quadratic, and has too many variables to tabulate its energies")
    if n > STATES_LIMIT:
        raise LimitError(f"{n} original variables; state by state goes up to {STATES_LIMIT}")
    least, chosen, counts = [], [], []
    begun = clock.monotonic()
    for start in range(0, 2**n, BLOCK):
        if start == 2 * BLOCK:
            whole = (clock.monotonic() - begun) * 2**n / start
            if whole > seconds:
                raise LimitError(f"the minimum state by state over 2^{n} states would take about {whole:.0f} s")
        numbers = np.arange(start, min(start + BLOCK, 2**n))
        minimum, best, multiplicity = case.projection.minimum(state_rows(case, numbers))
        least.append(np.asarray(minimum))
        chosen.append(best)
        counts.append(np.asarray(multiplicity))
    best_states, multiplicity = np.concatenate(chosen), np.concatenate(counts)
    return Tables(
        energy=energies_of(case.energy),
        minimum=Column(np.concatenate(least), case.model.constant, case.model.resolution),
        multiplicity=multiplicity,
        best=lambda numbers: best_states[numbers],
        counts=lambda numbers: multiplicity[numbers],
        auxiliary_gap=None,
        method="exhaustion",
        account=f"all 2^{n} states visited, the auxiliaries eliminated for each",
    )


def tables_from_polynomial(case: Case, polynomial: Hamiltonian) -> Tables:
    """E and P from their polynomials; m and the best auxiliaries are left to the projection.

    Raises
    ------
    LimitError
        More than `STATES_LIMIT` original variables.
    """
    n = len(case.originals)
    if n > STATES_LIMIT:
        raise LimitError(f"{n} original variables; all states are tabulated up to {STATES_LIMIT}")
    projection = case.projection

    def best(numbers: NDArray[Any]) -> States:
        found: States = projection.minimum(state_rows(case, numbers))[1]
        return found

    def counts(numbers: NDArray[Any]) -> NDArray[Any]:
        if projection.uniform_multiplicity is not None:
            uniform = projection.uniform_multiplicity
            return np.full(len(numbers), uniform, np.int64 if uniform < 2**62 else object)
        parts = [
            np.asarray(projection.multiplicities(state_rows(case, numbers[start : start + BLOCK])), object)
            for start in range(0, len(numbers), BLOCK)
        ]
        return np.concatenate(parts) if parts else np.zeros(0, object)

    return Tables(
        energy=energies_of(case.energy),
        minimum=energies_of(polynomial.with_labels(case.originals)),
        multiplicity=None,
        best=best,
        counts=counts,
        auxiliary_gap=None,
        method="exhaustion",
        account=f"all 2^{n} states of E and of the projected polynomial visited",
    )


def comparable(tables: Tables, scale: Fraction, shift: Fraction) -> tuple[NDArray[Any], NDArray[Any]]:
    """P and alpha * E + beta of every row as integers in one unit."""
    return comparable_columns(tables.minimum, tables.energy, scale, shift)


def comparable_columns(P: Column, E: Column, scale: Fraction, shift: Fraction) -> tuple[NDArray[Any], NDArray[Any]]:
    """P and alpha * E + beta as integers in one unit, exact: int64 where both fit, else Python integers."""
    offset = scale * E.constant + shift - P.constant
    unit = _common(P.resolution, scale * E.resolution, offset)
    left = _times(P.integers, int(P.resolution / unit), 0)
    right = _times(E.integers, int(scale * E.resolution / unit), int(offset / unit))
    return left, right


def _common(*values: Fraction) -> Fraction:
    from hubokit.model.numbers import common_resolution

    return common_resolution([value for value in values if value] or [Fraction(1)])


def _times(integers: NDArray[Any], factor: int, offset: int) -> NDArray[Any]:
    largest = max((abs(int(integers.max())), abs(int(integers.min())))) if len(integers) else 0
    if integers.dtype == object or max(largest, 1) * factor + abs(offset) >= 2**62:
        return integers.astype(object) * factor + offset
    return integers.astype(np.int64) * factor + offset
