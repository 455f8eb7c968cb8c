"""Inner loops of the cover searches: plain functions over arrays, compiled (numba) for large problems.

Rows have eight slots (``cover_problem``): a cubic row holds its pairs in slots 0 to 2, a quartic row its split s in
slots 2s and 2s + 1, the last split standing for a gadget of its own. A quartic is *half done* when some pair of it is
chosen but no split is whole. The same source runs compiled and uncompiled, with the same answer.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model import compiling

COMPILED_FROM = 30_000
"""Work (steps times slots touched) from which a loop is compiled first; compiling costs about as much."""

Ints = NDArray[Any]
Flags = NDArray[Any]


@cache
def compiled(function: Callable[..., Any]) -> Callable[..., Any]:
    """The function compiled by numba."""
    return compiling.compiled(function)


def kernel(function: Callable[..., Any], work: int) -> Callable[..., Any]:
    """The function itself for little work, its compiled twin for much."""
    return compiled(function) if work >= COMPILED_FROM else function


def greedy_loop(rows: Ints, starts: Ints, slots: Ints, given: Flags, allowed: Flags, rank: Ints) -> Flags:
    """Choose pairs one by one, the most useful first, until every row is covered.

    A pair is worth 2 for every row that it finishes and 1 for every quartic that it brings halfway. Values are looked
    up lazily: a pair leaves the heap when its value there is still true, else it goes back with the true one. Equal
    values are taken by `rank`.

    Returns
    -------
    bool array, shape (p,)
        The chosen pairs, the given ones among them.
    """
    pairs = len(starts) - 1
    chosen = np.zeros(pairs, np.bool_)
    done = np.zeros(len(rows), np.bool_)
    value = np.zeros(pairs + 2, np.int64)  # the last two stand for empty slots
    for row in range(len(rows)):
        for place in range(8):
            if rows[row, place] >= 0:
                value[rows[row, place]] += 2 if rows[row, 3] == -1 else 1
    first = np.flatnonzero(given)
    heap = [(-value[pair], rank[pair], pair) for pair in range(pairs) if allowed[pair] and not given[pair]]
    heapq.heapify(heap)
    turn = 0
    while turn < len(first) or len(heap) > 0:
        if turn < len(first):
            best = first[turn]
            turn += 1
        else:
            top = heapq.heappop(heap)
            best = top[2]
            if chosen[best] or value[best] <= 0:
                continue
            if -top[0] != value[best]:
                heapq.heappush(heap, (-value[best], rank[best], best))
                continue
        chosen[best] = True
        for entry in range(starts[best], starts[best + 1]):
            row = slots[entry] // 8
            if done[row]:
                continue
            if rows[row, 3] == -1:
                done[row] = True
                for place in range(3):
                    value[rows[row, place]] -= 2
                continue
            partner = rows[row, (slots[entry] - 8 * row) ^ 1]
            if chosen[partner]:
                done[row] = True
                for place in range(8):
                    if rows[row, place] >= 0:
                        value[rows[row, place]] -= 2 if chosen[rows[row, place ^ 1]] else 1
            else:
                value[partner] += 1
                if allowed[partner]:
                    heapq.heappush(heap, (-value[partner], rank[partner], partner))
    return chosen


def prune_loop(rows: Ints, starts: Ints, slots: Ints, chosen: Flags, order: Ints) -> None:
    """Leave out of a full cover, in the given order, every pair without which all rows are still covered.

    `chosen` has shape (p + 2,); its last two entries stand for empty slots and are False.
    """
    for pair in order:
        if not chosen[pair]:
            continue
        chosen[pair] = False
        for entry in range(starts[pair], starts[pair + 1]):
            row = slots[entry] // 8
            if rows[row, 3] == -1:
                held = chosen[rows[row, 0]] or chosen[rows[row, 1]] or chosen[rows[row, 2]]
            else:
                held = (
                    (chosen[rows[row, 0]] and chosen[rows[row, 1]])
                    or (chosen[rows[row, 2]] and chosen[rows[row, 3]])
                    or (chosen[rows[row, 4]] and chosen[rows[row, 5]])
                    or (chosen[rows[row, 6]] and chosen[rows[row, 7]])
                )
            if not held:
                chosen[pair] = True
                break


def exchange_loop(
    rows: Ints, starts: Ints, slots: Ints, given: Flags, start: Flags, steps: int, sample: int, seed: int
) -> Flags:
    """Weighted exchange: drop a pair from a full cover, then swap pairs until all rows are covered again, and so on.

    Each step takes out the chosen pair that costs least (of `sample` drawn ones), puts in the most useful pair of a
    drawn uncovered row, and makes uncovered rows heavier, so that the search leaves places where it has been stuck.
    A pair that was taken out waits until something near it has changed. Follows Cai, Su, Sattar 2011, "Local search
    with edge weighting and configuration checking heuristics for minimum vertex cover", with quartics as pairs of
    slots.

    Parameters
    ----------
    start : bool array, shape (p,)
        A full cover that holds all given pairs.

    Returns
    -------
    bool array, shape (p,)
        The smallest full cover met.
    """
    pairs, count = len(starts) - 1, len(rows)
    best, chosen = start.copy(), np.zeros(pairs, np.bool_)
    cover = np.zeros(count, np.int64)  # chosen pairs of a cubic, whole splits of a quartic
    halves = np.zeros(count, np.int64)  # chosen pairs of a quartic, its own gadget apart
    weight = np.ones(count, np.int64)
    stamp = np.zeros(pairs, np.int64)
    fresh = np.ones(pairs, np.bool_)
    members = np.zeros(pairs, np.int64)
    where = np.full(pairs, -1, np.int64)
    open_rows = np.arange(count)
    open_at = np.arange(count)
    opened = count
    size = 0
    queue = np.flatnonzero(start)
    turn = 0
    state = (seed % 2147483646) + 1
    step = 0
    while step < steps or turn < len(queue):
        into = -1
        if turn < len(queue):
            into = queue[turn]
            turn += 1
        else:
            step += 1
            drops = 1
            if opened == 0:
                best[:] = chosen
                drops = 2
            for _ in range(drops):
                if size == 0:
                    return best
                out, loss = -1, 0
                for draw in range(min(size, sample)):
                    pair = members[draw]
                    if size > sample:
                        state = state * 48271 % 2147483647
                        pair = members[state % size]
                    if stamp[pair] == step - 1 and size > 1:
                        continue
                    cost = 0
                    for entry in range(starts[pair], starts[pair + 1]):
                        row = slots[entry] // 8
                        if rows[row, 3] == -1:
                            if cover[row] == 1:
                                cost += weight[row]
                        elif cover[row] == 0:
                            if halves[row] == 1:
                                cost += weight[row]
                        elif cover[row] == 1 and chosen[rows[row, (slots[entry] - 8 * row) ^ 1]]:
                            cost += weight[row]
                    if out < 0 or cost < loss or (cost == loss and stamp[pair] < stamp[out]):
                        out, loss = pair, cost
                if out < 0:
                    break
                chosen[out] = False
                fresh[out] = False
                stamp[out] = step
                size -= 1
                members[where[out]] = members[size]
                where[members[size]] = where[out]
                for entry in range(starts[out], starts[out + 1]):
                    row = slots[entry] // 8
                    lost = rows[row, 3] == -1
                    if not lost:
                        halves[row] -= slots[entry] - 8 * row < 6
                        lost = chosen[rows[row, (slots[entry] - 8 * row) ^ 1]]
                    if lost:
                        cover[row] -= 1
                        if cover[row] == 0:
                            open_at[row] = opened
                            open_rows[opened] = row
                            opened += 1
                    for place in range(8):
                        if rows[row, place] >= 0 and rows[row, place] != out:
                            fresh[rows[row, place]] = True
            if opened == 0:
                continue
            state = state * 48271 % 2147483647
            row = open_rows[state % opened]
            gain = 0
            for place in range(8):
                pair = rows[row, place]
                if pair < 0 or chosen[pair] or not fresh[pair]:
                    continue
                worth = 0
                for entry in range(starts[pair], starts[pair + 1]):
                    other = slots[entry] // 8
                    if cover[other] == 0 and (
                        rows[other, 3] == -1
                        or halves[other] == 0
                        or chosen[rows[other, (slots[entry] - 8 * other) ^ 1]]
                    ):
                        worth += weight[other]
                if into < 0 or worth > gain or (worth == gain and stamp[pair] < stamp[into]):
                    into, gain = pair, worth
            for index in range(opened):
                weight[open_rows[index]] += 1
        if into < 0:
            continue
        chosen[into] = True
        stamp[into] = step
        if not given[into]:
            members[size] = into
            where[into] = size
            size += 1
        for entry in range(starts[into], starts[into + 1]):
            row = slots[entry] // 8
            won = rows[row, 3] == -1
            if not won:
                halves[row] += slots[entry] - 8 * row < 6
                won = chosen[rows[row, (slots[entry] - 8 * row) ^ 1]]
            if won:
                cover[row] += 1
                if cover[row] == 1:
                    opened -= 1
                    moved = open_rows[opened]
                    open_rows[open_at[row]] = moved
                    open_at[moved] = open_at[row]
            for place in range(8):
                if rows[row, place] >= 0 and rows[row, place] != into:
                    fresh[rows[row, place]] = True
    if opened == 0 and size < best.sum() - given.sum():
        best[:] = chosen
    return best
