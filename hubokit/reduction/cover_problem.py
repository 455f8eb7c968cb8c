"""The covering problem behind pair substitution, as arrays.

A cubic term is quadratic once one of its three pairs is chosen; a quartic once both pairs of one of its three
splits are. Each term is a row with six slots for pairs: three used by a cubic, and by a quartic slots 2s and 2s + 1
for split s. Rows of the same members are one row, and a cubic is a hyperedge over pairs, so that choosing the
fewest pairs for cubic terms alone is the least hitting set (NP-hard; Anthony, Boros, Crama, Gruber 2017, "Quadratic
reformulations of nonlinear binary optimization problems").
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.reduction.pairs import CUBIC_SPLITS, QUARTIC_SPLITS

EMPTY = -1


@dataclass(frozen=True)
class CoverProblem:
    """Rows to be covered by pairs.

    Parameters
    ----------
    variables : int
        Variables are numbered below this.
    operands : int64 array, shape (p, 2)
        The pairs that occur in some row, ascending.
    rows : int64 array, shape (m, 6)
        Pair numbers in the slots of each row; -1 in the last three of a cubic.
    given : bool array, shape (p,)
        Pairs that are there already and cost nothing.

    Examples
    --------
    >>> problem = cover_problem([np.array([[0, 1, 2]]), np.array([[0, 1, 2, 3]])], 4)
    >>> problem.operands.tolist()
    [[0, 1], [0, 2], [0, 3], [1, 2], [1, 3], [2, 3]]
    >>> problem.rows.tolist()
    [[0, 1, 3, -1, -1, -1], [0, 5, 1, 4, 2, 3]]
    """

    variables: int
    operands: NDArray[np.int64]
    rows: NDArray[np.int64]
    given: NDArray[np.bool_]

    @property
    def pairs(self) -> int:
        """Number of pairs."""
        return len(self.operands)

    @property
    def is_cubic(self) -> NDArray[np.bool_]:
        """Which rows are cubic."""
        return self.rows[:, 3] < 0

    @cached_property
    def incidence(self) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """The slots of pair p: ``slots[starts[p]:starts[p + 1]]``, where slot = 6 row + place."""
        flat = self.rows.ravel()
        slots = np.flatnonzero(flat >= 0)
        order = np.argsort(flat[slots], kind="stable")
        starts = np.zeros(self.pairs + 1, np.int64)
        np.cumsum(np.bincount(flat[slots], minlength=self.pairs), out=starts[1:])
        return starts, slots[order].astype(np.int64)

    def is_covered(self, chosen: NDArray[np.bool_]) -> NDArray[np.bool_]:
        """Which rows the chosen pairs make quadratic, shape (m,)."""
        held = np.append(chosen | self.given, False)[self.rows]
        cubic = held[:, :3].any(axis=1)
        quartic = (held[:, 0::2] & held[:, 1::2]).any(axis=1)
        return np.where(self.is_cubic, cubic, quartic)

    def count(self, chosen: NDArray[np.bool_]) -> int:
        """What the chosen pairs cost: those that were not given."""
        return int((chosen & ~self.given).sum())

    def part(self, lines: NDArray[Any]) -> tuple[CoverProblem, NDArray[np.int64]]:
        """The problem of some rows alone, and the numbers its pairs have here."""
        rows = self.rows[lines]
        used = np.unique(rows[rows >= 0]).astype(np.int64)
        place = np.full(self.pairs + 1, EMPTY, np.int64)
        place[used] = np.arange(len(used))
        return CoverProblem(self.variables, self.operands[used], place[rows], self.given[used]), used


def cover_problem(blocks: Sequence[NDArray[Any]], variables: int, given: NDArray[Any] | None = None) -> CoverProblem:
    """The covering problem of cubic and quartic terms.

    Parameters
    ----------
    blocks : sequence of integer arrays (m, 3) or (m, 4)
        Members, in any order; repeated rows count once.
    variables : int
    given : integer array, shape (g, 2), optional
        Pairs that are chosen already.
    """
    slots: list[NDArray[np.int64]] = []
    for members in blocks:
        ordered = np.unique(np.sort(np.asarray(members, dtype=np.int64), axis=1), axis=0)
        splits = CUBIC_SPLITS[:, :2] if ordered.shape[1] == 3 else QUARTIC_SPLITS.reshape(6, 2)
        keys = ordered[:, splits[:, 0]] * variables + ordered[:, splits[:, 1]]
        slots.append(np.column_stack([keys, np.full((len(keys), 6 - keys.shape[1]), EMPTY, np.int64)]))
    table = np.concatenate(slots) if slots else np.zeros((0, 6), np.int64)
    flat = table.ravel()
    used = flat >= 0
    keys, number = np.unique(flat[used], return_inverse=True)
    rows = np.full(flat.shape, EMPTY, np.int64)
    rows[used] = number
    known = np.zeros(len(keys), bool)
    if given is not None and len(given):
        ordered = np.sort(np.asarray(given, dtype=np.int64), axis=1)
        known = np.isin(keys, ordered[:, 0] * variables + ordered[:, 1])
    operands = np.column_stack([keys // max(variables, 1), keys % max(variables, 1)])
    return CoverProblem(variables, operands, rows.reshape(-1, 6), known)
