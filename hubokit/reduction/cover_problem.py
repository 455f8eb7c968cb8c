"""The covering problem behind pair substitution, as arrays.

A cubic term is quadratic once one of its three pairs is chosen; a quartic once both pairs of one of its three
splits are. Each term is a row with eight slots for pairs: a cubic uses the first three, a quartic has slots 2s and
2s + 1 for split s. Where a quartic may instead have a gadget of its own that takes one auxiliary, the gadget is one
more thing to choose, a *lone column*: it stands in slot 6, beside a column in slot 7 that is always there, so that
it makes its row quadratic by itself. (A lone pair of a cubic is as good as a gadget.) Rows of the same members are
one row. For cubic terms alone this is the least hitting set (NP-hard; Anthony, Boros, Crama, Gruber 2017,
"Quadratic reformulations of nonlinear binary optimization problems").
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
"""A slot that rows of this kind do not have."""

DROPPED = -2
"""A slot of a quartic that is not to be used any more."""

SLOTS = 8


@dataclass(frozen=True)
class CoverProblem:
    """Rows to be covered by pairs.

    Parameters
    ----------
    variables : int
        Variables are numbered below this.
    operands : int64 array, shape (p, 2)
        The pairs that occur in some row, ascending; then (-1, -1) for each lone column and for the column always
        there.
    rows : int64 array, shape (m, 8)
        Pair numbers in the slots of each row; -1 where the row has no such slot.
    given : bool array, shape (p,)
        Pairs that are there already and cost nothing.

    Examples
    --------
    >>> problem = cover_problem([np.array([[0, 1, 2]]), np.array([[0, 1, 2, 3]])], 4)
    >>> problem.operands.tolist()
    [[0, 1], [0, 2], [0, 3], [1, 2], [1, 3], [2, 3]]
    >>> problem.rows.tolist()
    [[0, 1, 3, -1, -1, -1, -1, -1], [0, 5, 1, 4, 2, 3, -1, -1]]
    """

    variables: int
    operands: NDArray[np.int64]
    rows: NDArray[np.int64]
    given: NDArray[np.bool_]

    @property
    def pairs(self) -> int:
        """Number of pairs and lone columns."""
        return len(self.operands)

    @property
    def is_cubic(self) -> NDArray[np.bool_]:
        """Which rows are cubic."""
        return np.asarray(self.rows[:, 3] == EMPTY)

    @cached_property
    def incidence(self) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """The slots of pair p: ``slots[starts[p]:starts[p + 1]]``, where slot = 8 row + place."""
        flat = self.rows.ravel()
        slots = np.flatnonzero(flat >= 0)
        order = np.argsort(flat[slots], kind="stable")
        starts = np.zeros(self.pairs + 1, np.int64)
        np.cumsum(np.bincount(flat[slots], minlength=self.pairs), out=starts[1:])
        return starts, slots[order].astype(np.int64)

    def is_covered(self, chosen: NDArray[np.bool_]) -> NDArray[np.bool_]:
        """Which rows the chosen pairs make quadratic, shape (m,)."""
        held = np.append(chosen | self.given, [False, False])[self.rows]
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
        place = np.full(self.pairs, EMPTY, np.int64)
        place[used] = np.arange(len(used))
        inner = np.where(rows >= 0, place[rows], rows)
        return CoverProblem(self.variables, self.operands[used], inner, self.given[used]), used


def cover_problem(
    blocks: Sequence[NDArray[Any]],
    variables: int,
    given: NDArray[Any] | None = None,
    alone: Sequence[NDArray[np.bool_]] | None = None,
) -> CoverProblem:
    """The covering problem of cubic and quartic terms.

    Parameters
    ----------
    blocks : sequence of integer arrays (m, 3) or (m, 4)
        Members, in any order; repeated rows count once.
    variables : int
    given : integer array, shape (g, 2), optional
        Pairs that are chosen already.
    alone : sequence of bool arrays (m,), optional
        For each block, the quartics that may have a gadget of their own, of one auxiliary.
    """
    slots: list[NDArray[np.int64]] = []
    lone: list[NDArray[np.bool_]] = []
    for place, members in enumerate(blocks):
        columns = np.shape(members)[1]
        own = np.zeros(len(members), np.int64) if alone is None or columns == 3 else alone[place].astype(np.int64)
        marked = np.column_stack([np.sort(np.asarray(members, dtype=np.int64), axis=1), own])
        ordered = np.unique(marked, axis=0)
        splits = CUBIC_SPLITS[:, :2] if columns == 3 else QUARTIC_SPLITS.reshape(6, 2)
        keys = ordered[:, splits[:, 0]] * variables + ordered[:, splits[:, 1]]
        slots.append(np.column_stack([keys, np.full((len(keys), SLOTS - keys.shape[1]), EMPTY, np.int64)]))
        lone.append(ordered[:, -1] == 1)
    table = np.concatenate(slots) if slots else np.zeros((0, SLOTS), np.int64)
    flat = table.ravel()
    used = flat >= 0
    keys, number = np.unique(flat[used], return_inverse=True)
    numbers = np.full(flat.shape, EMPTY, np.int64)
    numbers[used] = number
    rows = numbers.reshape(-1, SLOTS)
    known = np.zeros(len(keys), bool)
    if given is not None and len(given):
        ordered = np.sort(np.asarray(given, dtype=np.int64), axis=1)
        known = np.isin(keys, ordered[:, 0] * variables + ordered[:, 1])
    operands = np.column_stack([keys // max(variables, 1), keys % max(variables, 1)])
    own = np.flatnonzero(np.concatenate(lone)) if lone else np.zeros(0, np.int64)
    if len(own):
        rows[own, 6], rows[own, 7] = len(keys) + np.arange(len(own)), len(keys) + len(own)
        operands = np.concatenate([operands, np.full((len(own) + 1, 2), EMPTY)])
        known = np.concatenate([known, np.zeros(len(own), bool), [True]])
    return CoverProblem(variables, operands, rows, known)
