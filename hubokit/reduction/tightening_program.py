"""Shares of joint costs by linear program, so that the largest coefficient that a group of pairs writes becomes
small.

Unknown are the share of every coupler (for each pair of right bits for which a joint flip gains), A and B of every
auxiliary, and M, at least every coefficient of the reduced model that holds some A or B. At each state met so far
every auxiliary's local condition is one row. States are the worst ones under the last shares, which lie halfway
between the program's answer and the best shares so far (so that one answer does not swing to the other side of the
last); with rows added in rounds the program comes to hold at the states that matter. Its floats only propose:
shares are rounded to 64ths and the exact condition is evaluated for them anew.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.projection.shared_bounds import PARTS, Candidate, FlipProblem, Slacks, equal_shares
from hubokit.reduction.tightening_ledger import Coefficients

SUM_WEIGHT = 0.001
"""What the sum of all penalties counts beside the largest coefficient."""


@dataclass(frozen=True)
class Group:
    """Pair variables that hang together through couplers.

    Parameters
    ----------
    problem : FlipProblem
        Their costs and couplers without penalties, over booleans.
    candidate : Candidate
        Their right settings.
    """

    problem: FlipProblem
    candidate: Candidate


class SharesProgram:
    """The linear program of one group, growing by the worst states met.

    Parameters
    ----------
    group : Group
    coefficients : Coefficients
    gap : int
        Slack asked for, in the unit of the costs.
    """

    def __init__(self, group: Group, coefficients: Coefficients, gap: int) -> None:
        self.group = group
        self.coefficients = coefficients
        self.gap = gap
        pair = group.problem.pair
        first, second = np.nonzero(np.triu(pair))
        self.count = len(pair)
        self.first, self.second = np.repeat(first, 2), np.repeat(second, 2)
        self.right_first = np.tile([0, 1], len(first))
        # A joint flip gains when the right bits differ for q > 0, and when they agree for q < 0.
        self.right_second = self.right_first ^ (pair[self.first, self.second] > 0).astype(np.int64)
        self.case = np.full((self.count, self.count, 2), -1)
        index = np.arange(len(self.first))
        self.case[self.first, self.second, self.right_first] = index
        self.case[self.second, self.first, self.right_second] = index
        self.states: set[tuple[int, bytes]] = set()
        self.rows: list[tuple[NDArray[np.int64], NDArray[Any], float]] = []

    def learn(self, found: Slacks) -> bool:
        """Add the local conditions of each auxiliary at its worst states, one for each setting of its operands.

        Returns
        -------
        bool
            Whether some of them are new.
        """
        before = len(self.rows)
        for i in range(self.count):
            for setting in ((0, 0), (0, 1), (1, 0), (1, 1)):
                bits = np.zeros(len(self.group.problem.known), np.int64)
                for column, bit in found.bounds[i][setting[0] & setting[1]].assignment(setting).items():
                    bits[column] = bit
                state = (i, np.packbits(bits.astype(np.uint8)).tobytes())
                if state not in self.states:
                    self.states.add(state)
                    self.rows.append(self._condition(i, setting, bits))
        return len(self.rows) > before

    def _condition(
        self, i: int, setting: tuple[int, int], bits: NDArray[np.int64]
    ) -> tuple[NDArray[np.int64], NDArray[Any], float]:
        """Columns, coefficients and right side of ``costs of shares - penalty <= rest of l_i - gap``."""
        problem = self.group.problem
        guards = np.array(self.group.candidate.guards)
        right = bits[guards[:, 0]] & bits[guards[:, 1]]
        sigma = 1 - 2 * right[i]
        coupled = np.flatnonzero(problem.pair[i])
        q = problem.pair[i, coupled]
        rest = sigma * (problem.start[i] + problem.linear[i] @ bits + q @ right[coupled])
        joint = q * sigma * (1 - 2 * right[coupled])
        coupled, cost = coupled[joint < 0], -joint[joint < 0]
        # The share belongs to the lower end; the other end bears the cost less that share.
        lower = coupled > i
        one, both = len(self.first) + i, len(self.first) + self.count + i
        columns, factors = {(0, 0): ([one, both], [-2, -1]), (1, 1): ([both], [-1])}.get(setting, ([one], [-1]))
        return (
            np.concatenate([self.case[i, coupled, right[i]], columns]).astype(np.int64),
            np.concatenate([np.where(lower, cost, -cost), factors]).astype(float),
            float(rest - self.gap - cost[~lower].sum()),
        )

    def solve(self, center: NDArray[np.int64]) -> NDArray[np.int64]:
        """Shares in units of 1 / `PARTS`, shape (u, u, 2, 2), halfway between the program's answer and `center`."""
        from scipy.optimize import linprog
        from scipy.sparse import csr_array, vstack

        cases, width = len(self.first), len(self.first) + 2 * self.count + 1
        starts = np.concatenate([[0], np.cumsum([len(row[0]) for row in self.rows])])
        local = csr_array(
            (np.concatenate([row[1] for row in self.rows]), np.concatenate([row[0] for row in self.rows]), starts),
            shape=(len(self.rows), width),
        )
        table = self.coefficients
        count, factor = len(table.base), table.factor.astype(float)
        row = np.concatenate([table.row, np.arange(count)])
        column = np.concatenate([cases + table.column, np.full(count, width - 1)])
        above = csr_array((np.append(factor, -np.ones(count)), (row, column)), shape=(count, width))
        below = csr_array((np.append(-factor, -np.ones(count)), (row, column)), shape=(count, width))
        base = table.base.astype(float)
        goal = np.zeros(width)
        goal[cases:-1], goal[-1] = SUM_WEIGHT, 1
        conditions: Any = vstack([local, above, below])
        free = np.inf
        limits: Any = np.array([[0.0, 1.0]] * cases + [[-free, free]] * (2 * self.count + 1))
        solved = linprog(
            goal,
            A_ub=conditions,
            b_ub=np.concatenate([[condition[2] for condition in self.rows], -base, base]),
            bounds=limits,
            method="highs",
        )
        shares: NDArray[np.int64] = equal_shares(self.group.problem)
        if solved.x is None:
            return shares
        middle = center[self.first, self.second, self.right_first, self.right_second]
        part = np.rint((np.clip(solved.x[:cases], 0, 1) * PARTS + middle) / 2).astype(np.int64)
        shares[self.first, self.second, self.right_first, self.right_second] = part
        shares[self.second, self.first, self.right_second, self.right_first] = PARTS - part
        return shares
