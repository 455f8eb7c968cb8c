"""In which order to eliminate the variables of a sparse model, and what that costs.

Two variables are *neighbours* when a term holds both. Eliminating a variable joins its neighbours pairwise; the
largest number of neighbours met on the way is the *width* of the order, and the tables of bucket elimination have
2**(neighbours + 1) entries. The least width over all orders is the treewidth of the graph. Finding it is hard;
eliminating next the variable that adds the fewest new edges (*min-fill*) or has the fewest neighbours (*min-degree*)
comes close on sparse models.

Neighbourhoods are held as Python integers, one bit a variable, so that counting common neighbours is one AND and a
population count.

References
----------
Dechter 1999, "Bucket elimination: a unifying framework for reasoning".
Bodlaender, Koster 2010, "Treewidth computations I. Upper bounds".
"""

from __future__ import annotations

import heapq
import itertools
import random
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from hubokit.model.terms import Block

ATTEMPTS = 24
"""Orders tried by min-fill with ties broken at random (seeded), after one of min-degree."""

HOPELESS = 100
"""Where min-degree is stuck with more variables than this, every one with too many neighbours, no other is tried."""

EASY_ENTRIES = 1 << 20
"""An order with so few table entries is good enough: no further attempts."""


@dataclass(frozen=True)
class EliminationOrder:
    """Variables in order of elimination, with what each still touches when its turn comes.

    Parameters
    ----------
    variables : tuple of int
        Positions, first eliminated first.
    separators : tuple of tuple of int
        For each of them, its neighbours then, as *ranks* (places in the order), ascending.

    Examples
    --------
    >>> EliminationOrder((2, 0, 1), ((1, 2), (2,), ())).width
    2
    """

    variables: tuple[int, ...]
    separators: tuple[tuple[int, ...], ...]

    @property
    def width(self) -> int:
        """Largest number of neighbours at elimination."""
        return max(map(len, self.separators), default=0)

    @property
    def entries(self) -> int:
        """Table entries in all: the sum of 2**(neighbours + 1)."""
        return sum(2 << len(separator) for separator in self.separators)

    def without(self, fixed: set[int]) -> tuple[int, ...]:
        """The order of the variables that are left when some are given values."""
        return tuple(v for v in self.variables if v not in fixed)


def neighbour_sets(size: int, blocks: Sequence[Block]) -> list[int]:
    """For each variable, its neighbours as a bit set (an integer with bit i for variable i)."""
    keys = [np.zeros(0, np.int64)]
    for block in blocks:
        rows = block.members.astype(np.int64)
        for i, j in itertools.combinations(range(block.locality), 2):
            keys.append(np.unique(rows[:, i] * size + rows[:, j]))
    pairs = np.unique(np.concatenate(keys))
    first, second = np.divmod(pairs, max(size, 1))
    ends, others = np.concatenate([first, second]), np.concatenate([second, first])
    by_end = np.argsort(ends, kind="stable")
    starts = np.searchsorted(ends[by_end], np.arange(size + 1))
    sets = []
    for variable in range(size):
        row = np.zeros(size, bool)
        row[others[by_end[starts[variable] : starts[variable + 1]]]] = True
        sets.append(int.from_bytes(np.packbits(row, bitorder="little").tobytes(), "little"))
    return sets


def width_bound(neighbours: Sequence[int]) -> int:
    """A number that no order's width is below: the degeneracy of the graph.

    Examples
    --------
    >>> width_bound([0b110, 0b101, 0b011])
    2
    """
    degrees = [n.bit_count() for n in neighbours]
    buckets: list[set[int]] = [set() for _ in range(max(degrees, default=0) + 1)]
    for variable, degree in enumerate(degrees):
        buckets[degree].add(variable)
    bound, left, low = 0, (1 << len(degrees)) - 1, 0
    while left:
        low = max(low - 1, 0)
        while not buckets[low]:
            low += 1
        bound = max(bound, low)
        variable = buckets[low].pop()
        left &= ~(1 << variable)
        for other in members(neighbours[variable] & left):
            buckets[degrees[other]].discard(other)
            degrees[other] -= 1
            buckets[degrees[other]].add(other)
    return bound


def elimination_order(
    size: int, blocks: Sequence[Block], widest: int, attempts: int = ATTEMPTS
) -> EliminationOrder | int:
    """The cheapest of several orders, or, when none is as narrow as asked, a width that was reached in vain.

    Parameters
    ----------
    size : int
        Number of variables.
    blocks : sequence of Block
        The terms.
    widest : int
        Orders beyond this width are given up.
    attempts : int
        Min-fill orders tried with ties broken differently; the same on every machine.

    Returns
    -------
    EliminationOrder or int
        The int, larger than `widest`, when no order was found.

    Examples
    --------
    >>> chain = Block(np.array([[0, 1], [1, 2], [2, 3]], np.int32), np.array([1, 1, 1]))
    >>> elimination_order(4, [chain], widest=22).width
    1
    """
    longest = max((block.locality for block in blocks), default=0)
    if longest > widest + 1:
        return longest - 1
    neighbours = neighbour_sets(size, blocks)
    bound = width_bound(neighbours)
    if bound > widest:
        return bound
    best: EliminationOrder | None = None
    for attempt in range(attempts + 1):
        score = _new_edges if attempt else _neighbour_count
        found = _greedy(neighbours, score, widest, random.Random(attempt) if attempt > 1 else None)
        if isinstance(found, EliminationOrder):
            if best is None or found.entries < best.entries:
                best = found
        elif attempt == 0 and found > HOPELESS:
            break
        if best is not None and (best.entries <= EASY_ENTRIES or best.width == bound):
            break
        if attempt * size > 20_000:
            break
    return widest + 1 if best is None else best


def order_along(variables: Sequence[int], neighbours: Sequence[int]) -> EliminationOrder:
    """The separators of a given order: neighbours are joined as the variables go."""
    ranks = {variable: rank for rank, variable in enumerate(variables)}
    joined = list(neighbours)
    left = sum(1 << variable for variable in variables)
    separators = []
    for variable in variables:
        left &= ~(1 << variable)
        around = joined[variable] & left
        for other in members(around):
            joined[other] |= around & ~(1 << other)
        separators.append(tuple(sorted(ranks[other] for other in members(around))))
    return EliminationOrder(tuple(variables), tuple(separators))


def members(bits: int) -> Iterator[int]:
    """Positions of the ones of a bit set, ascending."""
    while bits:
        low = bits & -bits
        yield low.bit_length() - 1
        bits ^= low


def _new_edges(neighbours: list[int], variable: int) -> int:
    """Edges that eliminating a variable adds (counted from both ends)."""
    around = neighbours[variable]
    degree = around.bit_count()
    return sum(degree - 1 - (around & neighbours[other]).bit_count() for other in members(around))


def _neighbour_count(neighbours: list[int], variable: int) -> int:
    return neighbours[variable].bit_count()


def _greedy(
    start: Sequence[int],
    score: Callable[[list[int], int], int],
    widest: int,
    chance: random.Random | None,
) -> EliminationOrder | int:
    """Eliminate the variable of least score until none is left.

    Where the next has more than `widest` neighbours the number of variables that are left is returned.
    """
    neighbours = list(start)
    size = len(neighbours)
    tie = [chance.random() if chance else 0.0 for _ in range(size)]
    scores = {v: (score(neighbours, v), neighbours[v].bit_count(), tie[v], v) for v in range(size)}
    queue = list(scores.values())
    heapq.heapify(queue)
    variables, separators = [], []
    while scores:
        entry = heapq.heappop(queue)
        variable = entry[3]
        if scores.get(variable) != entry:  # outdated: a newer entry of the variable is in the queue, or it is gone
            continue
        around = neighbours[variable]
        if around.bit_count() > widest:
            return len(scores)
        del scores[variable]
        changed, grown = around, 0
        for other in members(around):
            fresh = around & ~neighbours[other] & ~(1 << other)
            if fresh:
                grown |= 1 << other
            neighbours[other] = (neighbours[other] | fresh) & ~(1 << variable)
        for other in members(grown):
            changed |= neighbours[other]
        for other in members(changed):
            entry = (score(neighbours, other), neighbours[other].bit_count(), tie[other], other)
            if scores[other] != entry:
                scores[other] = entry
                heapq.heappush(queue, entry)
        variables.append(variable)
        separators.append(around)
    ranks = {variable: rank for rank, variable in enumerate(variables)}
    return EliminationOrder(
        tuple(variables), tuple(tuple(sorted(ranks[v] for v in members(around))) for around in separators)
    )
