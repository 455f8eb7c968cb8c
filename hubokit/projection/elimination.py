"""The minimum over one cluster's auxiliaries for many states at once, by bucket elimination.

Fix the originals in each of m states. What is left of a cluster is ``sum_i f_i b_i + sum_{i<k} q_ik b_i b_k``
over the bits b of its auxiliaries, with fields f that differ from state to state and couplings q that do not.
Auxiliaries are eliminated one after another along a low-degree order; a message over the neighbours left
behind carries, for each state and setting, the least energy, the number of settings that reach it, the
nearest energy above it, and the first of the best settings in lift order.

References
----------
U. Bertele, F. Brioschi, "Nonserial Dynamic Programming", 1972; R. Dechter, "Bucket elimination", 1999.
"""

from __future__ import annotations

import heapq
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.projection.structure import Integers

WIDTH_LIMIT = 22
"""Largest table over auxiliaries: 2**22 settings for each state."""

CELLS = 2**22
"""States times settings held at once in one message."""

WORD = 62
"""Auxiliary bits packed into one int64 word of the lift-order key."""


@dataclass(frozen=True)
class Best:
    """The minimum over one cluster's auxiliaries, for each of m states.

    Parameters
    ----------
    energy : integer array, shape (m,)
    multiplicity : integer array, shape (m,)
        int64, or objects above 62 auxiliaries.
    gap : integer array, shape (m,)
        Least strictly positive excess; -1 where there is none.
    bits : int8 array, shape (m, a)
        The first of the best settings in lift order.
    is_gap_exact : bool
        Whether `gap` is the true one; otherwise a lower bound.
    """

    energy: Integers
    multiplicity: Integers
    gap: Integers
    bits: NDArray[np.int8]
    is_gap_exact: bool = True


@dataclass
class _Message:
    scope: tuple[int, ...]
    energy: Integers
    count: Integers
    above: Integers
    keys: list[Integers]


def elimination_order(between: Integers, limit: int | None = None) -> tuple[list[int], int]:
    """Auxiliaries in order of least degree in the graph that is left, and the width of that order.

    Parameters
    ----------
    between : array, shape (a, a)
        Nonzero (in either triangle) where two auxiliaries are coupled.
    limit : int, optional
        Stop as soon as the width exceeds this.
    """
    size = len(between)
    linked: list[set[int]] = [set() for _ in range(size)]
    for i, k in np.argwhere(between).tolist():
        if i != k:
            linked[i].add(k)
            linked[k].add(i)
    waiting = [(len(linked[i]), i) for i in range(size)]
    heapq.heapify(waiting)
    order: list[int] = []
    gone: set[int] = set()
    width = 0
    while waiting:
        degree, chosen = heapq.heappop(waiting)
        if chosen in gone or degree != len(linked[chosen]):
            continue
        around = linked[chosen]
        width = max(width, degree)
        if limit is not None and width > limit:
            break
        for i in around:
            linked[i] |= around
            linked[i] -= {i, chosen}
            heapq.heappush(waiting, (len(linked[i]), i))
        gone.add(chosen)
        order.append(chosen)
    return order, width


def minimise(fields: Integers, between: Integers, bound: int) -> Best:
    """Eliminate all auxiliaries of one cluster, for every state.

    Parameters
    ----------
    fields : integer array, shape (m, a)
        Energy change when bit i alone is set, for each state.
    between : integer array, shape (a, a)
        Upper triangle: what two set bits add.
    bound : int
        No partial sum of the fields of one state and the couplings exceeds it in absolute value.

    Raises
    ------
    LimitError
        The width of the order exceeds ``WIDTH_LIMIT``.

    Examples
    --------
    >>> best = minimise(np.array([[1, -2], [-1, -1]]), np.array([[0, 1], [0, 0]]), 5)
    >>> best.energy.tolist(), best.multiplicity.tolist(), best.gap.tolist(), best.bits.tolist()
    ([-2, -1], [1, 3], [2, 1], [[0, 1], [0, 1]])
    """
    order, width = elimination_order(between, WIDTH_LIMIT)
    if width > WIDTH_LIMIT:
        raise LimitError(
            f"{len(between)} coupled auxiliaries need tables over at least {width} of them for every state; "
            f"at most {WIDTH_LIMIT} are allowed"
        )
    if fields.dtype != object and bound >= 2**55:
        fields, between = fields.astype(object), between.astype(object)
    step = max(1, CELLS >> (width + 1))
    parts = [
        _minimised(fields[start : start + step], between, order, 64 * bound + 64)
        for start in range(0, len(fields), step)
    ]
    if not parts:
        nothing = np.zeros(0, fields.dtype)
        return Best(nothing, np.zeros(0, np.int64), nothing, np.zeros(fields.shape, np.int8))
    return Best(
        np.concatenate([part.energy for part in parts]),
        np.concatenate([part.multiplicity for part in parts]),
        np.concatenate([part.gap for part in parts]),
        np.concatenate([part.bits for part in parts]),
    )


def _minimised(fields: Integers, between: Integers, order: list[int], none: int) -> Best:
    """`none` stands for "nothing above": it stays far above every energy."""
    states, size = fields.shape
    couplings = between + between.T
    counting: Any = np.int64 if size <= WORD else object
    words = -(-size // WORD)
    kind = fields.dtype
    messages: list[_Message] = []
    gone: set[int] = set()
    for own in order:
        used = [message for message in messages if own in message.scope]
        messages = [message for message in messages if own not in message.scope]
        linked = {int(k) for k in np.flatnonzero(couplings[own])} - gone - {own}
        scope = tuple(sorted(linked.union(*(set(message.scope) for message in used)) - {own}))
        full = (*scope, own)
        blank = (states, *([2] * len(full)))
        energy = np.zeros(blank, kind)
        count = np.ones(blank, counting)
        above = np.full(blank, none, kind)
        keys = [np.zeros(blank, np.int64) for _ in range(words)]
        for message in used:
            their_energy, their_above = (
                _placed(message.energy, message.scope, full),
                _placed(message.above, message.scope, full),
            )
            above = np.minimum(above + their_energy, energy + their_above)
            energy = energy + their_energy
            count = count * _placed(message.count, message.scope, full)
            keys = [
                key + _placed(theirs, message.scope, full) for key, theirs in zip(keys, message.keys, strict=True)
            ]
        added = np.zeros(blank, kind)
        added[..., 1] += fields[:, own].reshape(-1, *([1] * len(scope)))
        for axis, other in enumerate(scope):
            if other in linked:
                both = [slice(None)] * (len(full) + 1)
                both[axis + 1] = slice(1, 2)
                both[-1] = slice(1, 2)
                added[tuple(both)] += couplings[own, other]
        energy, above = energy + added, above + added
        keys[own // WORD][..., 1] += 1 << (WORD - 1 - own % WORD)
        messages.append(_without_last(scope, energy, count, above, keys, none))
        gone.add(own)
    return _read(messages, states, size, none, kind, counting)


def _placed(table: Integers, scope: tuple[int, ...], full: tuple[int, ...]) -> Integers:
    """A table over `scope` (both sorted alike, with the eliminated one last in `full`) spread over `full`."""
    wanted = [scope.index(one) for one in full if one in scope]
    moved = table.transpose(0, *(1 + axis for axis in wanted))
    return moved.reshape(len(table), *(2 if one in scope else 1 for one in full))


def _without_last(
    scope: tuple[int, ...], energy: Integers, count: Integers, above: Integers, keys: list[Integers], none: int
) -> _Message:
    """Minimum over the last axis."""
    e0, e1 = energy[..., 0], energy[..., 1]
    lower, equal = e1 < e0, e1 == e0
    first_is_1 = np.zeros(e0.shape, bool)
    undecided = equal.copy()
    for key in keys:
        first_is_1 |= undecided & (key[..., 1] < key[..., 0])
        undecided &= key[..., 1] == key[..., 0]
    take_1 = lower | first_is_1
    least = np.where(lower, e1, e0)
    counted = np.where(lower, count[..., 1], count[..., 0]) + np.where(equal, count[..., 1], 0)
    nearest = np.minimum(above[..., 0], above[..., 1])
    nearest = np.where(lower, np.minimum(above[..., 1], e0), nearest)
    nearest = np.where(~lower & ~equal, np.minimum(above[..., 0], e1), nearest)
    chosen = [np.where(take_1, key[..., 1], key[..., 0]) for key in keys]
    return _Message(scope, least, counted, nearest, chosen)


def _read(messages: list[_Message], states: int, size: int, none: int, kind: Any, counting: Any) -> Best:
    """Messages without scope, added up."""
    energy, count = np.zeros(states, kind), np.ones(states, counting)
    above = np.full(states, none, kind)
    bits = np.zeros((states, size), np.int8)
    for message in messages:
        above = np.minimum(above + message.energy, energy + message.above)
        energy = energy + message.energy
        count = count * message.count
        for position in range(size):
            key = message.keys[position // WORD]
            bits[:, position] |= ((key >> (WORD - 1 - position % WORD)) & 1).astype(np.int8)
    gap = np.where(above > none // 2, -1, above - energy)
    return Best(energy, count, gap, bits)
