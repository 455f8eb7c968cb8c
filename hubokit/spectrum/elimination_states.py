"""States of a sparse model on demand: all within an energy window, the first in lift order, or uniform random draws.

The energy of a state is the ground energy plus the excess of every variable given its separator
(`hubokit.spectrum.elimination_tables`). Choosing the values from the last eliminated variable to the first, a branch
whose excess stays within the window always leads to a state, because the rest can be at its best: nothing is visited
in vain.
"""

from __future__ import annotations

import random
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.terms import Block
from hubokit.spectrum.elimination_counts import Counts, count_ground_states
from hubokit.spectrum.elimination_kernels import Table
from hubokit.spectrum.elimination_levels import lowest_levels
from hubokit.spectrum.elimination_order import EliminationOrder
from hubokit.spectrum.elimination_tables import Elimination, Problem, eliminate_fixed

Bits = NDArray[np.uint8]

ROWS_AT_ONCE = 1 << 22
"""Most states held while a window is listed."""


def states_within(elimination: Elimination, size: int, window: int) -> tuple[Bits, Table]:
    """All states at most `window` above the ground energy.

    Parameters
    ----------
    elimination : Elimination
    size : int
        Number of columns; variables that the elimination does not hold stay 0.
    window : int
        In the problem's integer units.

    Returns
    -------
    bits : uint8 array, shape (m, size)
        In no particular order.
    excess : integer array, shape (m,)

    Raises
    ------
    LimitError
        More than 2**22 states.

    Examples
    --------
    >>> from hubokit.spectrum.elimination_order import elimination_order
    >>> from hubokit.spectrum.elimination_tables import eliminate
    >>> pair = Block(np.array([[0, 1]], np.int32), np.array([-1]))
    >>> problem = Problem("spin", 2, (pair,))
    >>> states_within(eliminate(problem, elimination_order(2, [pair], widest=22)), 2, 0)[0].tolist()
    [[0, 0], [1, 1]]
    """
    order = elimination.order
    bits = np.zeros((1, size), np.uint8)
    wide = any(difference.dtype == object for difference in elimination.differences)
    used = np.zeros(1, object if wide else np.int64)
    for rank in range(len(order.variables) - 1, -1, -1):
        difference = elimination.differences[rank][_entry(bits, order, rank)].astype(used.dtype)
        first, second = used + np.maximum(-difference, 0), used + np.maximum(difference, 0)
        with_second = np.flatnonzero(second <= window)
        with_first = np.flatnonzero(first <= window)
        rows = np.concatenate([with_first, with_second])
        if len(rows) > ROWS_AT_ONCE:
            raise LimitError(f"more than {ROWS_AT_ONCE:,} states lie in the energy window; ask for fewer levels")
        used = np.concatenate([first[with_first], second[with_second]])
        bits = bits[rows]
        bits[len(with_first) :, order.variables[rank]] = 1
    return bits, used


def _entry(bits: Bits, order: EliminationOrder, rank: int) -> NDArray[np.int64]:
    """Index of each state's entry in the table of a bucket."""
    index = np.zeros(len(bits), np.int64)
    for other in order.separators[rank]:
        index = (index << 1) | bits[:, order.variables[other]]
    return index


def one_ground_state(elimination: Elimination, size: int) -> Bits:
    """A ground state, shape (1, size): of two equally good values always the first."""
    bits = np.zeros((1, size), np.uint8)
    for rank in range(len(elimination.order.variables) - 1, -1, -1):
        difference = elimination.differences[rank][_entry(bits, elimination.order, rank)]
        bits[:, elimination.order.variables[rank]] = difference < 0
    return bits


def draw(counts: Counts, size: int, number: int, seed: int) -> Bits:
    """Ground states drawn uniformly at random, with repetition, exactly: each choice weighs whole numbers.

    Parameters
    ----------
    counts : Counts
    size, number : int
        Columns and rows.
    seed : int

    Returns
    -------
    uint8 array, shape (number, size)
    """
    order = counts.elimination.order
    chance = random.Random(seed)
    bits = np.zeros((number, size), np.uint8)
    for rank in range(len(order.variables) - 1, -1, -1):
        difference = counts.elimination.differences[rank][_entry(bits, order, rank)]
        column = order.variables[rank]
        bits[:, column] = difference < 0
        free = np.flatnonzero(difference == 0)
        if len(free):
            weights = []
            for value in (0, 1):
                bits[free, column] = value
                weights.append(_completions(counts, bits[free], rank))
            bits[free, column] = [
                chance.randrange(first + second) >= first for first, second in zip(*weights, strict=True)
            ]
    return bits


def _completions(counts: Counts, bits: Bits, rank: int) -> NDArray[Any]:
    """Number of best completions below a bucket once its variable has a value too."""
    product = np.ones(len(bits), object)
    for child in counts.children[rank]:
        product = product * counts.at(child, _entry(bits, counts.elimination.order, child))
    return product


@dataclass(frozen=True)
class LevelSearch:
    """Looks for the states of one level in lift order, by eliminations with the leading variables fixed.

    Parameters
    ----------
    problem : Problem
    order : EliminationOrder
        Of the whole problem.
    energy : int
        The level's energy in the problem's units.
    below : int
        How many levels lie below it: 0 for the ground level.
    """

    problem: Problem
    order: EliminationOrder
    energy: int
    below: int

    SPARE: ClassVar[int] = 1024
    """So many more states than four times those needed are listed rather than looked for more closely."""

    def first(self, need: int, given: Bits | None = None) -> Bits:
        """The first `need` states in lift order among those that begin with the `given` bits.

        Parameters
        ----------
        need : int
            At least 1, and no more than there are.
        given : uint8 array, shape (p,), optional

        Returns
        -------
        uint8 array, shape (need, n)
        """
        given = np.zeros(0, np.uint8) if given is None else given
        if need == 0:
            return np.zeros((0, self.problem.size), np.uint8)
        leader = self._leader(given)
        if need == 1:
            return leader[None, :]
        short, long = len(given), self.problem.size
        while long - short > 1:
            middle = (short + long) // 2
            if self._count(leader[:middle]) >= need:
                short = middle
            else:
                long = middle
        if self._count(leader[:short]) <= 4 * need + self.SPARE:
            return self._listed(leader[:short])[:need]
        sooner = self._listed(leader[: short + 1])
        later = self.first(need - len(sooner), np.append(leader[:short], np.uint8(1)))
        return np.concatenate([sooner, later])

    def _prefix(self, bits: Bits) -> dict[int, int]:
        return dict(enumerate(bits.tolist()))

    def _count(self, prefix: Bits) -> int:
        """Number of states of the level that begin with the prefix."""
        elimination = eliminate_fixed(self.problem, self.order, self._prefix(prefix))
        if elimination.lowest > self.energy:
            return 0
        if self.below == 0:
            return count_ground_states(elimination).total
        levels = dict(lowest_levels(elimination, self.below + 1))
        return levels.get(self.energy - elimination.lowest, 0)

    def _listed(self, prefix: Bits) -> Bits:
        """All states of the level that begin with the prefix, in lift order."""
        elimination = eliminate_fixed(self.problem, self.order, self._prefix(prefix))
        window = self.energy - elimination.lowest
        bits, used = states_within(elimination, self.problem.size, window)
        bits = bits[used == window]
        bits[:, : len(prefix)] = prefix
        return sorted_bits(bits)

    def _leader(self, given: Bits) -> Bits:
        """The first state of the level in lift order that begins with the given bits."""
        prefix = given
        while len(prefix) < self.problem.size:
            if self.below == 0:
                prefix = self._tie_broken(prefix)
            else:
                longer = np.append(prefix, np.uint8(0))
                prefix = longer if self._count(longer) else np.append(prefix, np.uint8(1))
        return prefix

    def _tie_broken(self, prefix: Bits) -> Bits:
        """The prefix of a first ground state, longer by as many bits as fit beside the energies in 64.

        Minimising energy * 2**(c + 1) + (the next c bits read as a number) settles c variables at once.
        """
        bound = sum(int(np.abs(block.weights).sum(dtype=object)) for block in self.problem.blocks)
        chunk = min(self.problem.size - len(prefix), max(58 - bound.bit_length(), 8))
        problem = self.problem.fixed(self._prefix(prefix))
        scale = 2 << chunk
        powers = np.array([1 << place for place in range(chunk - 1, -1, -1)], object)
        following = np.arange(len(prefix), len(prefix) + chunk, dtype=np.int32)[:, None]
        parts = [Block(block.members, block.weights.astype(object) * scale) for block in problem.blocks]
        parts.append(Block(following, powers if self.problem.domain == "boolean" else -powers))
        small = bound * scale + scale < 2**61
        blocks = tuple(Block(b.members, b.weights.astype(np.int64) if small else b.weights) for b in parts)
        tied = Problem(problem.domain, problem.size, blocks)
        found = one_ground_state(eliminate_fixed(tied, self.order, self._prefix(prefix)), problem.size)[0]
        return np.concatenate([prefix, found[len(prefix) : len(prefix) + chunk]])


def sorted_bits(bits: Bits) -> Bits:
    """Rows in lift order."""
    if len(bits) < 2 or bits.shape[1] == 0:
        return bits
    return bits[np.lexsort(np.packbits(bits, axis=1).T[::-1])]
