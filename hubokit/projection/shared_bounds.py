"""Auxiliaries decided together by shared bounds: what proves a penalty that plain interval bounds find too weak.

Let r(x) be supposed right settings, one function of a few guards for each auxiliary of a cluster. Write any
setting as flips d from the right one. Over bits, with sigma_i = 1 - 2 r_i, local fields f_i (the others
right) and couplings q_ik, its excess is

    sum_i l_i(x) d_i + sum_{i<k} Q_ik(x) d_i d_k,    l_i = sigma_i f_i,    Q_ik = q_ik sigma_i sigma_k.

Divide the cost of every negative Q_ik between its two ends, shares s_ik + s_ki = 1. If for each i and every x

    slack_i(x) = l_i(x) - sum_k s_ik max(0, -Q_ik(x)) > 0,

the excess is at least the sum of the slacks of what was flipped, so r is the only minimiser and the auxiliary
gap is at least the least slack. The shares may depend on the right bits of both ends. Equal shares need no
search; better ones come from a linear program over the worst states met, are rounded to 64ths, and count only
if the condition then holds exactly. The least value over x is bounded by bucket elimination: each slack is a
sum of functions of a few originals.

References
----------
E. Boros, P. L. Hammer, "Pseudo-Boolean optimization", 2002 (bounds of quadratic functions by dividing terms
among variables).
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.projection.buckets import Function, LowerBound, lower_bound
from hubokit.projection.structure import Integers, Positions, Structure

PARTS = 64
"""Shares are multiples of 1/64."""

SHARED_MOST = 3000
"""Auxiliaries of one cluster that are looked at together."""

PROGRAM_MOST = 200
"""Auxiliaries of one cluster for which unequal shares are looked for."""


@dataclass(frozen=True)
class FlipProblem:
    """One cluster over bits: energy ``sum_i (start_i + sum_k linear_ik b_k) b_i + sum_{i<j} pair_ij b_i b_j``
    in known bits b_k.

    Parameters
    ----------
    auxiliaries : int64 array, shape (u,)
    known : int64 array, shape (v,)
        The other variables that the cluster touches.
    start : integer array, shape (u,)
    linear : integer array, shape (u, v)
    pair : integer array, shape (u, u)
        Symmetric, zero on the diagonal.
    """

    auxiliaries: Positions
    known: Positions
    start: Integers
    linear: Integers
    pair: Integers


@dataclass(frozen=True)
class Candidate:
    """Supposed right settings.

    Parameters
    ----------
    guards : tuple of tuples of int
        For each auxiliary its guards, as ascending columns of `known`.
    functions : tuple of int64 arrays, shape (2**g,)
        Its bits over their settings, in lift order.
    """

    guards: tuple[tuple[int, ...], ...]
    functions: tuple[NDArray[np.int64], ...]


@dataclass(frozen=True)
class Slacks:
    """Least slacks under given shares.

    Parameters
    ----------
    tables : tuple of integer arrays, one for each auxiliary, shape (2, ..., 2)
        Lower bounds of the slack for each setting of the auxiliary's guards, in units of 1 / `PARTS`.
    bounds : tuple of pairs of LowerBound
        Their derivations for right bit 0 and right bit 1.
    """

    tables: tuple[Integers, ...]
    bounds: tuple[tuple[LowerBound, LowerBound], ...]

    @property
    def least(self) -> int:
        """The least slack of all, in units of 1 / `PARTS`."""
        return min(int(table.min()) for table in self.tables)


def flip_problem(structure: Structure, auxiliaries: Positions) -> FlipProblem:
    """Couplings of a cluster rewritten for bits; every variable outside `auxiliaries` counts as known."""
    row, other, weight = structure.neighbours.rows(auxiliaries)
    index = np.full(len(structure.is_auxiliary), -1)
    index[auxiliaries] = np.arange(len(auxiliaries))
    inner = index[other] >= 0
    known = np.unique(other[~inner])
    kind = structure.field.dtype
    start = structure.field[auxiliaries].copy()
    pair = np.zeros((len(auxiliaries), len(auxiliaries)), kind)
    pair[row[inner], index[other[inner]]] = weight[inner]
    linear = np.zeros((len(auxiliaries), len(known)), kind)
    linear[row[~inner], np.searchsorted(known, other[~inner])] = weight[~inner]
    if structure.domain == "spin":
        start = -2 * (start + pair.sum(axis=1) + linear.sum(axis=1))
        linear, pair = 4 * linear, 4 * pair
    return FlipProblem(auxiliaries, known, start, linear, pair)


def equal_shares(problem: FlipProblem) -> Integers:
    """Half of every cost to each end: numerators over `PARTS`, shape (u, u, 2, 2), indexed by both right bits."""
    count = len(problem.auxiliaries)
    return np.full((count, count, 2, 2), PARTS // 2, np.int64)


def slacks(problem: FlipProblem, candidate: Candidate, shares: Integers | None = None) -> Slacks:
    """Lower bounds of every auxiliary's slack, for each setting of its guards (shares None: equal ones)."""
    tables, bounds = [], []
    for i in range(len(problem.auxiliaries)):
        kept = candidate.guards[i]
        both = (
            lower_bound(_slack_functions(problem, candidate, shares, i, 0), kept, problem.start.dtype.type),
            lower_bound(_slack_functions(problem, candidate, shares, i, 1), kept, problem.start.dtype.type),
        )
        right = candidate.functions[i].reshape((2,) * len(kept))
        tables.append(np.where(right == 0, both[0].values, both[1].values))
        bounds.append(both)
    return Slacks(tuple(tables), tuple(bounds))


def _slack_functions(
    problem: FlipProblem, candidate: Candidate, shares: Integers | None, i: int, right: int
) -> list[Function]:
    """The slack of auxiliary i, its right bit taken as given, as functions of known bits, times `PARTS`."""
    sigma = 1 - 2 * right
    kind = problem.start.dtype
    functions: list[Function] = [((), np.array(PARTS * sigma * problem.start[i], kind))]
    functions.extend(
        ((int(k),), np.array([0, PARTS * sigma * problem.linear[i, k]], kind))
        for k in np.flatnonzero(problem.linear[i])
    )
    for k in np.flatnonzero(problem.pair[i]):
        q = sigma * problem.pair[i, k]
        here = (PARTS // 2, PARTS // 2) if shares is None else shares[i, k, right]
        # The other end counts when its right bit is 1; a joint flip costs -Q where the product of q and both
        # signs is negative.
        values = np.array([-max(0, -q) * here[0], PARTS * q - max(0, q) * here[1]], kind)
        table = values[candidate.functions[k]].reshape((2,) * len(candidate.guards[k]))
        functions.append((candidate.guards[k], table))
    return functions


def better_shares(problem: FlipProblem, candidate: Candidate, rounds: int = 12) -> tuple[Integers, Slacks]:
    """Shares that raise the least slack, by a linear program over the worst states met so far.

    Each round finds the worst states, solves for the shares that maximise the least slack over all of them,
    and rounds these to multiples of 1 / `PARTS`. The best shares seen are returned, with their exact slacks.
    """
    cases = _cases(problem)
    number = {case: index for index, case in enumerate(cases)}
    shares = equal_shares(problem)
    best, best_slacks = shares, slacks(problem, candidate, shares)
    current = best_slacks
    rows: list[tuple[dict[int, int], int]] = []
    seen: set[tuple[int, tuple[int, ...]]] = set()
    for _ in range(rounds):
        fresh = [one for one in _worst_states(problem, candidate, current) if one not in seen]
        if best_slacks.least > 0 or not cases or not fresh:
            break
        seen.update(fresh)
        rows.extend(_constraint(problem, candidate, number, i, bits) for i, bits in fresh)
        values = _programmed(rows, len(cases))
        if values is None:
            break
        shares = equal_shares(problem)
        for (i, k, r, s), value in zip(cases, values, strict=True):
            part = round(value * PARTS)
            shares[i, k, r, s] = part
            shares[k, i, s, r] = PARTS - part
        current = slacks(problem, candidate, shares)
        if current.least > best_slacks.least:
            best, best_slacks = shares, current
    return best, best_slacks


def _programmed(rows: list[tuple[dict[int, int], int]], count: int) -> list[float] | None:
    """Shares in [0, 1] with the largest t, ``costs @ shares + t <= constant`` in every row; None where t <= 0."""
    from scipy.optimize import linprog
    from scipy.sparse import csr_array

    data: list[float] = []
    columns: list[int] = []
    starts = [0]
    for costs, _ in rows:
        data.extend([float(c) for c in costs.values()] + [1.0])
        columns.extend([*costs, count])
        starts.append(len(data))
    matrix: Any = csr_array((data, columns, starts), shape=(len(rows), count + 1))
    goal = np.zeros(count + 1)
    goal[-1] = -1
    limits: Any = np.array([[0.0, 1.0]] * count + [[-np.inf, np.inf]])
    sides = np.array([float(constant) for _, constant in rows])
    solved = linprog(goal, A_ub=matrix, b_ub=sides, bounds=limits, method="highs")
    if solved.x is None or solved.x[-1] <= 0:
        return None
    return [min(1.0, max(0.0, float(value))) for value in solved.x[:-1]]


def _cases(problem: FlipProblem) -> list[tuple[int, int, int, int]]:
    """Couplings with the right bits of both ends for which a joint flip gains: they differ exactly when q > 0."""
    first, second = np.nonzero(np.triu(problem.pair))
    return [
        (int(i), int(k), r, 1 - r if problem.pair[i, k] > 0 else r)
        for i, k in zip(first, second, strict=True)
        for r in (0, 1)
    ]


def _worst_states(problem: FlipProblem, candidate: Candidate, found: Slacks) -> list[tuple[int, tuple[int, ...]]]:
    """For each auxiliary, and each right bit, a state at (or near) the least slack: bits of all known variables."""
    states = []
    for i, table in enumerate(found.tables):
        right = candidate.functions[i].reshape(table.shape)
        for bit in (0, 1):
            possible = np.argwhere(right == bit)
            if not len(possible):
                continue
            values = [int(table[tuple(row)]) for row in possible]
            setting = possible[int(np.argmin(values))].tolist()
            bits = found.bounds[i][bit].assignment(setting)
            states.append((i, tuple(bits.get(v, 0) for v in range(len(problem.known)))))
    return states


def _constraint(
    problem: FlipProblem,
    candidate: Candidate,
    number: dict[tuple[int, int, int, int], int],
    i: int,
    bits: tuple[int, ...],
) -> tuple[dict[int, int], int]:
    """Costs of the shares and right side of ``sum of costs * share + t <= l_i`` at one state."""
    right = [_value(candidate, k, bits) for k in range(len(problem.auxiliaries))]
    sigma = 1 - 2 * right[i]
    field = int(problem.start[i]) + int(problem.linear[i] @ np.array(bits, problem.linear.dtype))
    costs: dict[int, int] = {}
    constant = 0
    for k in np.flatnonzero(problem.pair[i]).tolist():
        q = int(problem.pair[i, k])
        field += q * right[k]
        joint = q * sigma * (1 - 2 * right[k])
        if joint >= 0:
            continue
        if i < k:
            costs[number[i, k, right[i], right[k]]] = -joint
        else:
            # This end bears 1 - share: the whole cost, less what the share takes off.
            case = number[k, i, right[k], right[i]]
            costs[case] = joint
            constant += joint
    return costs, sigma * field + constant


def _value(candidate: Candidate, k: int, bits: tuple[int, ...]) -> int:
    index = 0
    for guard in candidate.guards[k]:
        index = 2 * index + bits[guard]
    return int(candidate.functions[k][index])


def as_fractions(table: Integers) -> list[Fraction]:
    """Slacks in units of the resolution, one for each setting of the guards."""
    return [Fraction(int(value), PARTS) for value in np.ravel(table)]
