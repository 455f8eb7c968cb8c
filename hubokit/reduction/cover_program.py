"""The least cover by integer program (HiGHS, loaded on use), with limits that count nodes and never seconds.

One 0/1 variable z for each pair. A cubic row asks z_a + z_b + z_c >= 1. A quartic row has a variable u for each
split with u <= z of both its pairs, and asks the three to add up to 1 at least; u is whole of itself where z is.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hubokit.reduction.cover_problem import CoverProblem


@dataclass(frozen=True)
class ProgramAnswer:
    """What the integer program found.

    Parameters
    ----------
    chosen : bool array, shape (p,)
        A full cover, never larger than the one it was given to start from.
    bound : int
        No cover is smaller.
    proven : bool
        The cover is as small as the bound.
    """

    chosen: NDArray[np.bool_]
    bound: int
    proven: bool


def least_cover(problem: CoverProblem, start: NDArray[np.bool_], nodes: int) -> ProgramAnswer:
    """Solve the covering problem exactly, as far as `nodes` branch and bound nodes go.

    Parameters
    ----------
    problem : CoverProblem
    start : bool array, shape (p,)
        A full cover to begin from.
    nodes : int
        Limit of branch and bound nodes; the answer is the same on every machine.

    Returns
    -------
    ProgramAnswer

    Examples
    --------
    >>> from hubokit.reduction.cover_problem import cover_problem
    >>> problem = cover_problem([np.array([[0, 1, 2], [0, 1, 3]])], 4)
    >>> answer = least_cover(problem, np.ones(problem.pairs, bool), 100)
    >>> answer.chosen.tolist(), answer.proven
    ([True, False, False, False, False], True)
    """
    program = _program(problem)
    answer = solved(program, nodes, _columns(problem, start | problem.given))
    found, bound = start | problem.given, 0
    if answer is not None:
        bound = answer[1]
        better = problem.given | (answer[0][: problem.pairs] > 0.5)
        if problem.is_covered(better).all() and problem.count(better) <= problem.count(found):
            found = better
    bound = min(bound, problem.count(found))
    return ProgramAnswer(found, bound, bound == problem.count(found))


@dataclass(frozen=True)
class Program:
    """Minimise cost @ z with every row of the matrix at least `least`, 0 <= z <= 1, the first `whole` columns whole.

    Parameters
    ----------
    cost, lower : float64 arrays, shape (c,)
        Costs are whole numbers; `lower` is 1 for columns that are chosen already.
    whole : int
    starts, index, value : arrays
        The matrix, row by row: row r has ``index[starts[r]:starts[r + 1]]``.
    least : float64 array, shape (r,)
    """

    cost: NDArray[np.float64]
    lower: NDArray[np.float64]
    whole: int
    starts: NDArray[np.int32]
    index: NDArray[np.int32]
    value: NDArray[np.float64]
    least: NDArray[np.float64]


def solved(
    program: Program, nodes: int, start: NDArray[np.float64] | None = None
) -> tuple[NDArray[np.float64], int] | None:
    """Column values and a lower bound of the cost, as far as `nodes` branch and bound nodes go; None without any."""
    import highspy

    class Quiet(highspy.Highs):
        """A solver that is silent before it prints its banner, which enabling callbacks does."""

        def enableCallbacks(self) -> None:
            self.setOptionValue("output_flag", False)
            super().enableCallbacks()  # type: ignore[no-untyped-call]

    solver = Quiet()  # type: ignore[no-untyped-call]
    settings = {"threads": 1, "mip_max_nodes": nodes, "mip_rel_gap": 0.0, "mip_abs_gap": 0.999}
    for name, value in settings.items():
        solver.setOptionValue(name, value)
    columns = len(program.cost)
    model = highspy.HighsLp()
    model.num_col_, model.num_row_ = columns, len(program.least)
    model.col_cost_, model.col_lower_, model.col_upper_ = program.cost, program.lower, np.ones(columns)
    model.row_lower_, model.row_upper_ = program.least, np.full(len(program.least), highspy.kHighsInf)
    model.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
    model.a_matrix_.start_, model.a_matrix_.index_ = program.starts, program.index
    model.a_matrix_.value_ = program.value
    kinds = highspy.HighsVarType
    model.integrality_ = [kinds.kInteger] * program.whole + [kinds.kContinuous] * (columns - program.whole)
    solver.passModel(model)
    if start is not None:
        solution = highspy.HighsSolution()
        solution.col_value = start.tolist()
        solver.setSolution(solution)
    solver.run()
    values = np.array(solver.getSolution().col_value)
    dual = float(solver.getInfo().mip_dual_bound)
    if len(values) != columns or not np.isfinite(dual):
        return None
    return values, max(0, int(np.ceil(dual - 1e-6)))


def _columns(problem: CoverProblem, chosen: NDArray[np.bool_]) -> NDArray[np.float64]:
    quartic = problem.rows[~problem.is_cubic]
    held = np.append(chosen, [False, False])
    splits = (held[quartic[:, 0::2]] & held[quartic[:, 1::2]]).ravel()
    return np.concatenate([chosen, splits]).astype(np.float64)


def _program(problem: CoverProblem) -> Program:
    pairs = problem.pairs
    cubic, quartic = problem.rows[problem.is_cubic][:, :3], problem.rows[~problem.is_cubic]
    split = pairs + np.arange(4 * len(quartic)).reshape(-1, 4)
    there = quartic[:, 0::2] >= 0
    cover_rows = [[int(pair) for pair in row if pair >= 0] for row in cubic]
    cover_rows += [row[usable].tolist() for row, usable in zip(split, there, strict=True)]
    links = np.column_stack([np.repeat(split[there], 2), quartic.reshape(-1, 4, 2)[there].ravel()])
    lengths = np.array([len(row) for row in cover_rows] + [2] * len(links), np.int32)
    index = np.array([column for row in cover_rows for column in row] + links.ravel().tolist(), np.int32)
    value = np.ones(len(index))
    if len(links):
        value[len(index) - 2 * len(links) :: 2] = -1.0
    none = np.zeros(split.size)
    return Program(
        np.concatenate([~problem.given, none]).astype(float),
        np.concatenate([problem.given, none]).astype(float),
        pairs,
        np.concatenate([[0], np.cumsum(lengths)]).astype(np.int32),
        index,
        value,
        np.concatenate([np.ones(len(cover_rows)), np.zeros(len(links))]),
    )
