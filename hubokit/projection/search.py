"""The minimum over many coupled auxiliaries, state by state, by branch and bound over flips.

Each state starts from a local minimum. Any other setting is a set of flips d with excess ``sum l_i d_i + sum
Q_ik d_i d_k`` (see `hubokit.projection.shared_bounds`). A flip with ``l_i > sum_k max(0, -Q_ik)`` over the
flips still open is in no minimiser, one with ``l_i < -sum_k max(0, Q_ik)`` is in all, and ``sum_i min(0, l_i
- 1/2 sum_k max(0, -Q_ik))`` bounds what the open flips can gain. States and branches are worked on together
as rows of arrays; the number of branches is limited, not the time.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.projection.structure import Integers, Positions

BRANCHES, WORK = 2**21, 2**32
"""Branches that one search may open, and multiplications that they may take."""

ROWS = 4096
"""Branches worked on at once."""


@dataclass(frozen=True)
class Found:
    """Minimum at each of m states: energy above all bits 0, number of best settings, the first in lift order."""

    energy: Integers
    multiplicity: Integers
    bits: NDArray[np.int8]


@dataclass
class _Branches:
    """Open branches: state, energy so far, cost of each flip, which flips are open, and the bits as they stand."""

    state: Positions
    energy: Integers
    change: Integers
    is_open: NDArray[np.bool_]
    bits: NDArray[np.int8]

    def __len__(self) -> int:
        return len(self.state)

    def taken(self, chosen: Any) -> _Branches:
        return _Branches(
            self.state[chosen], self.energy[chosen], self.change[chosen], self.is_open[chosen], self.bits[chosen]
        )


def search(fields: Integers, pair: Integers, limit: int | None = None) -> Found:
    """Minimise over the bits of one cluster at every state.

    Parameters
    ----------
    fields : integer array, shape (m, u)
        Energy of bit i alone, for each state.
    pair : integer array, shape (u, u)
        Symmetric, zero on the diagonal: what two set bits add.
    limit : int, optional
        Branches that may be opened beyond one for each state; by default what `BRANCHES` and `WORK` allow.

    Raises
    ------
    LimitError
        More branches are needed.

    Examples
    --------
    >>> found = search(np.array([[1, -2], [-1, -1]]), np.array([[0, 1], [1, 0]]))
    >>> found.energy.tolist(), found.multiplicity.tolist(), found.bits.tolist()
    ([-2, -1], [1, 3], [[0, 1], [0, 1]])
    """
    count, size = fields.shape
    limit = min(BRANCHES, WORK // max(1, size * size)) if limit is None else limit
    best = np.zeros(count, fields.dtype)
    number = np.zeros(count, object)
    first = np.zeros((count, size), np.int8)
    opened = 0
    for start in range(0, count, ROWS):
        part = slice(start, min(start + ROWS, count))
        bits, change, energy = local_minima(fields[part], pair)
        best[part] = energy
        states = np.arange(part.start, part.stop)
        stack = [_Branches(states, energy, change, np.ones(bits.shape, bool), bits)]
        while stack:
            branches = stack.pop()
            if len(branches) > ROWS:
                stack.append(branches.taken(np.arange(ROWS, len(branches))))
                branches = branches.taken(np.arange(ROWS))
            opened += len(branches)
            if opened > limit + count:
                raise LimitError(
                    f"the search over {size} coupled auxiliaries opened more than {limit:,} branches; "
                    "stronger penalties, or fewer states, would need fewer"
                )
            _close(branches, pair)
            bound = branches.energy + np.minimum(0, _halved(branches, pair)).sum(axis=1) // 2
            branches = branches.taken(bound <= best[branches.state])
            done = ~branches.is_open.any(axis=1)
            _keep(branches.taken(done), best, number, first)
            branches = branches.taken(~done)
            if len(branches):
                stack.append(_split(branches, pair))
    return Found(best, number, first)


def next_level(fields: Integers, pair: Integers, found: Found, limit: int | None = None) -> Integers:
    """Least strictly positive excess over the minimum at every state, -1 where there is none.

    From the minimum no set of flips loses, so a flip that costs at least the nearest excess known, joint gains
    taken off, is in no set that is nearer.

    Parameters
    ----------
    fields, pair, limit
        As in `search`.
    found : Found
        Its answer.

    Returns
    -------
    integer array, shape (m,)

    Raises
    ------
    LimitError
        More branches are needed.

    Examples
    --------
    >>> fields, pair = np.array([[1, -2], [-1, -1]]), np.array([[0, 1], [1, 0]])
    >>> next_level(fields, pair, search(fields, pair)).tolist()
    [2, 1]
    """
    count, size = fields.shape
    limit = min(BRANCHES, WORK // max(1, size * size)) if limit is None else limit
    bits = found.bits
    change = (1 - 2 * bits.astype(pair.dtype)) * (fields + bits.astype(pair.dtype) @ pair)
    none = 4 * (int(np.abs(fields).sum(axis=1).max(initial=0)) + int(np.abs(pair).sum())) + 4
    above = np.where(change > 0, change, none).min(axis=1) if size else np.full(count, none, fields.dtype)
    opened = 0
    for start in range(0, count, ROWS):
        states = np.arange(start, min(start + ROWS, count))
        zero = np.zeros(len(states), fields.dtype)
        stack = [_Branches(states, zero, change[states], np.ones((len(states), size), bool), bits[states].copy())]
        while stack:
            branches = stack.pop()
            if len(branches) > ROWS:
                stack.append(branches.taken(np.arange(ROWS, len(branches))))
                branches = branches.taken(np.arange(ROWS))
            opened += len(branches)
            if opened > limit + count:
                raise LimitError(f"the next level of {size} coupled auxiliaries needs more than {limit:,} branches")
            gains, _ = _joint_costs(branches, pair)
            branches.is_open &= branches.change - gains < above[branches.state][:, None]
            twice = _halved(branches, pair)
            losses = np.minimum(0, twice).sum(axis=1)
            cheapest = np.where(branches.is_open, twice, 2 * none).min(axis=1)
            bound = 2 * branches.energy + np.where(cheapest < 0, losses, cheapest)
            kept = branches.is_open.any(axis=1) & (bound < 2 * above[branches.state])
            branches = branches.taken(kept)
            if len(branches):
                both = _split(branches, pair)
                energy, state = both.energy[len(branches) :], both.state[len(branches) :]
                np.minimum.at(above, state[energy > 0], energy[energy > 0])
                stack.append(both)
    return np.where(above == none, -1, above)


def gap_above(fields: Integers, pair: Integers, found: Found) -> tuple[Integers, bool]:
    """The next level where it is within reach; else 1, because F - P is a whole multiple of the resolution."""
    try:
        return next_level(fields, pair, found), True
    except LimitError:
        return np.ones(len(fields), fields.dtype), False


def local_minima(fields: Integers, pair: Integers) -> tuple[NDArray[np.int8], Integers, Integers]:
    """Bits, cost of each flip and energy at local minima under single flips."""
    bits = (2 * fields + pair.sum(axis=1) < 0).astype(np.int64)
    local = fields + bits @ pair
    rows = np.arange(len(bits))
    while True:
        change = (1 - 2 * bits) * local
        flip = change.argmin(axis=1)
        falls = change[rows, flip] < 0
        if not falls.any():
            break
        at, which = rows[falls], flip[falls]
        step = 1 - 2 * bits[at, which]
        bits[at, which] += step
        local[at] += step[:, None] * pair[which]
    energy = (bits * (fields + local)).sum(axis=1) // 2
    return bits.astype(np.int8), change, energy


def _joint_costs(branches: _Branches, pair: Integers) -> tuple[Integers, Integers]:
    """For each flip: sums of max(0, -Q) and of max(0, Q) over the other open flips."""
    sign = (1 - 2 * branches.bits).astype(pair.dtype)
    is_open = branches.is_open.astype(pair.dtype)
    size = is_open @ np.abs(pair)
    net = sign * ((sign * is_open) @ pair)
    return (size - net) // 2, (size + net) // 2


def _halved(branches: _Branches, pair: Integers) -> Integers:
    """Twice ``l_i - 1/2 sum max(0, -Q)`` of open flips, 0 elsewhere."""
    gains, _ = _joint_costs(branches, pair)
    return np.where(branches.is_open, 2 * branches.change - gains, 0)


def _close(branches: _Branches, pair: Integers) -> None:
    """Settle flips that are in no minimiser or in all, until none is left; in place."""
    while True:
        gains, losses = _joint_costs(branches, pair)
        never: NDArray[np.bool_] = branches.is_open & (branches.change > gains)
        # Where every open flip costs more than its half of the joint gains, no set of them can pay.
        hopeless = np.all((2 * branches.change > gains) | ~branches.is_open, axis=1)
        never |= branches.is_open & np.reshape(hopeless, (-1, 1))
        always = np.asarray(branches.is_open & ~never & (branches.change < -losses))
        if not (never.any() or always.any()):
            return
        branches.is_open &= ~never
        # One flip a row at a time: it changes what the others cost.
        rows = np.flatnonzero(always.any(axis=1))
        _flip(branches, rows, always[rows].argmax(axis=1), pair)


def _flip(branches: _Branches, rows: Positions, which: Positions, pair: Integers) -> None:
    """Carry out one flip in each of the rows and settle it."""
    sign = (1 - 2 * branches.bits[rows]).astype(pair.dtype)
    own = sign[np.arange(len(rows)), which]
    branches.energy[rows] += branches.change[rows, which]
    branches.change[rows] += pair[which] * own[:, None] * sign
    branches.bits[rows, which] ^= 1
    branches.is_open[rows, which] = False


def _split(branches: _Branches, pair: Integers) -> _Branches:
    """Both ways for the open flip whose joint gains are largest."""
    gains, _ = _joint_costs(branches, pair)
    which = np.where(branches.is_open, gains - branches.change, np.min(gains - branches.change) - 1).argmax(axis=1)
    rows = np.arange(len(branches))
    both = branches.taken(np.concatenate([rows, rows]))
    both.is_open[rows, which] = False
    _flip(both, rows + len(branches), which, pair)
    return both


def _keep(leaves: _Branches, best: Integers, number: Integers, first: NDArray[np.int8]) -> None:
    """Take finished branches into account: lower energies replace, equal ones add up."""
    if not len(leaves):
        return
    packed = np.packbits(leaves.bits.astype(np.uint8), axis=1)
    energy = leaves.energy
    if energy.dtype == object:
        energy = np.unique(energy, return_inverse=True)[1]
    order = np.lexsort((*packed.T[::-1], energy, leaves.state))
    leaves = leaves.taken(order)
    start = np.flatnonzero(np.concatenate([[True], leaves.state[1:] != leaves.state[:-1]]))
    own = leaves.state[start]
    least = leaves.energy[start]
    lengths = np.diff(np.append(start, len(leaves)))
    equal = np.add.reduceat((leaves.energy == np.repeat(least, lengths)).astype(np.int64), start)
    lower = np.asarray((least < best[own]) | (number[own] == 0))
    same = np.asarray(~lower & (least == best[own]))
    bits = leaves.bits[start]
    best[own[lower]], number[own[lower]] = least[lower], equal[lower].astype(object)
    first[own[lower]] = bits[lower]
    number[own[same]] += equal[same].astype(object)
    earlier = same.copy()
    earlier[same] = _before(bits[same], first[own[same]])
    first[own[earlier]] = bits[earlier]


def _before(left: NDArray[np.int8], right: NDArray[np.int8]) -> NDArray[np.bool_]:
    """Rows of `left` that come before the rows of `right` in lift order."""
    differ = left != right
    place = differ.argmax(axis=1)
    rows = np.arange(len(left))
    earlier: NDArray[np.bool_] = differ.any(axis=1) & (left[rows, place] < right[rows, place])
    return earlier
