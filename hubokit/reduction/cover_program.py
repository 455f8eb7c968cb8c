"""The least cover by integer program (HiGHS, loaded on use), with limits that count nodes and never seconds.

One 0/1 variable z for each pair. A cubic row asks z_a + z_b + z_c >= 1. A quartic row has a variable u for each
split with u <= z of both its pairs, and asks the three to add up to 1 at least; u is whole of itself where z is.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

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
    import highspy

    class Quiet(highspy.Highs):
        """A solver that is silent before it prints its banner, which enabling callbacks does."""

        def enableCallbacks(self) -> None:
            self.setOptionValue("output_flag", False)
            super().enableCallbacks()  # type: ignore[no-untyped-call]

    solver = Quiet()  # type: ignore[no-untyped-call]
    solver.setOptionValue("threads", 1)
    solver.setOptionValue("mip_max_nodes", nodes)
    solver.setOptionValue("mip_rel_gap", 0.0)
    solver.setOptionValue("mip_abs_gap", 0.999)
    solver.passModel(_program(problem))
    solution = highspy.HighsSolution()
    solution.col_value = _columns(problem, start | problem.given).tolist()
    solver.setSolution(solution)
    solver.run()
    values = np.array(solver.getSolution().col_value[: problem.pairs])
    found = problem.given | (values > 0.5) if len(values) == problem.pairs else start | problem.given
    if not problem.is_covered(found).all() or problem.count(found) > problem.count(start):
        found = start | problem.given
    dual = float(solver.getInfo().mip_dual_bound)
    bound = int(np.ceil(dual - 1e-6)) if np.isfinite(dual) else 0
    bound = min(max(bound, 0), problem.count(found))
    return ProgramAnswer(found, bound, bound == problem.count(found))


def _columns(problem: CoverProblem, chosen: NDArray[np.bool_]) -> NDArray[np.float64]:
    quartic = problem.rows[~problem.is_cubic]
    held = np.append(chosen, [False, False])
    splits = (held[quartic[:, 0::2]] & held[quartic[:, 1::2]]).ravel()
    return np.concatenate([chosen, splits]).astype(np.float64)


def _program(problem: CoverProblem) -> Any:
    import highspy

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
    columns = pairs + split.size
    model = highspy.HighsLp()
    model.num_col_, model.num_row_ = columns, len(lengths)
    model.col_cost_ = np.concatenate([~problem.given, np.zeros(split.size)]).astype(float)
    model.col_lower_ = np.concatenate([problem.given, np.zeros(split.size)]).astype(float)
    model.col_upper_ = np.ones(columns)
    model.row_lower_ = np.concatenate([np.ones(len(cover_rows)), np.zeros(len(links))])
    model.row_upper_ = np.full(len(lengths), highspy.kHighsInf)
    model.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
    model.a_matrix_.start_ = np.concatenate([[0], np.cumsum(lengths)]).astype(np.int32)
    model.a_matrix_.index_, model.a_matrix_.value_ = index, value
    model.integrality_ = [highspy.HighsVarType.kInteger] * pairs + [highspy.HighsVarType.kContinuous] * split.size
    return model
