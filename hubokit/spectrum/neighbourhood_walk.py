"""Looking around given states by the compiled walk, in parts that share a centre and a range of first flips."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor, Future, ThreadPoolExecutor
from math import comb

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits
from hubokit.spectrum.balls import Centres, ShellCount, lowest_first
from hubokit.spectrum.estimate import workers_of
from hubokit.spectrum.recentring import Recentred, recentred, trie_of

Progress = Callable[[int, int], None]
Counted = tuple[list[int], list[list[ShellCount]]]

TASK_STATES = 1 << 25
"""About so many states are one part of the work."""


def counted_by_walk(
    H: Hamiltonian, centres: Centres, limit: int, executor: Executor | None, progress: Progress | None
) -> Counted:
    """Energies of the centres, and for each its shells from distance 1 on.

    Parameters
    ----------
    H : Hamiltonian
        Absolute weights sum to less than 2**61.
    centres : Centres
    limit : int
        Most states a shell lists.
    executor : concurrent.futures.Executor or None
        Runs the parts; None for threads on all processors.
    progress : callable, optional
        Called with (parts done, parts).
    """
    kind = np.int32 if H.weight_bound < 2**30 else np.int64
    trie = trie_of(H.size, H.blocks, centres.radius)
    states = from_bits(centres.bits, centres.domain)
    own = [int(k) for k in H.integer_energies(states)]
    ranges = _first_flips(centres.size, centres.radius)
    total, done = len(own) * len(ranges), 0
    parts: list[list[list[ShellCount]]] = [[] for _ in own]
    pool = executor or ThreadPoolExecutor(workers_of(None))
    waiting: list[tuple[int, Future[list[ShellCount]]]] = []
    try:
        for place, state in enumerate(states):
            flips = recentred(trie, H.blocks, state, H.domain, kind)
            for bounds in ranges:
                job = pool.submit(walked, flips, centres, place, bounds, max(own), limit)
                waiting.append((place, job))
            # Coefficients of later centres are worked out while a few earlier ones are walked.
            while waiting and (len(waiting) > 4 * len(ranges) + 8 or place == len(states) - 1):
                owner, job = waiting.pop(0)
                parts[owner].append(job.result())
                done += 1
                if progress is not None:
                    progress(done, total)
    finally:
        for _, job in waiting:
            job.cancel()
        if executor is None:
            pool.shutdown()
    whole = [[_joined(shells, limit) for shells in zip(*part, strict=True)] for part in parts]
    if not centres.distinct:
        whole = [
            [
                ShellCount(comb(centres.size, d), s.lowest, s.at_or_below, s.bits, s.energies)
                for d, s in enumerate(w, 1)
            ]
            for w in whole
        ]
    return own, whole


def _first_flips(size: int, radius: int) -> list[tuple[int, int]]:
    """Ranges of first flips with about equal numbers of states."""
    if radius == 0:
        return []
    ranges, start, held = [], 0, 0
    for first in range(size):
        held += sum(comb(size - 1 - first, d) for d in range(radius))
        if held >= TASK_STATES or first == size - 1:
            ranges.append((start, first + 1))
            start, held = first + 1, 0
    return ranges


def walked(
    flips: Recentred,
    centres: Centres,
    place: int,
    bounds: tuple[int, int],
    threshold: int,
    limit: int,
) -> list[ShellCount]:
    """Shells 1 to the radius of one centre, over the flip sets whose first flip lies in `bounds`.

    Parameters
    ----------
    flips : Recentred
        The model in the flips away from that centre, int32 or int64.
    centres : Centres
    place : int
        Which centre.
    bounds : (int, int)
    threshold : int
        Energy at or below which states are listed.
    limit : int
        Most of them a shell.
    """
    from hubokit.spectrum.neighbourhood_kernels import walk

    radius, trie = centres.radius, flips.trie
    near, sizes, cuts = centres.others(place)
    kept, below, filled = (np.zeros(radius + 1, np.int64) for _ in range(3))
    lowest = np.full(radius + 1, 2**63 - 1, np.int64)
    energies = np.zeros((radius + 1, max(limit, 1)), np.int64)
    sets = np.zeros((radius + 1, max(limit, 1), radius), np.int32)
    room = min(1 << min(radius, 40), trie.parents) + 1
    bits = np.ascontiguousarray(centres.bits[place])
    walk(
        radius, *bounds, flips.values, trie.last, trie.begin, trie.end, flips.rows, room, near, sizes, cuts,
        threshold, bits, kept, lowest, below, energies, sets, filled,
    )  # fmt: skip
    shells = []
    for distance in range(1, radius + 1):
        count = int(filled[distance])
        found = np.repeat(bits[None, :], count, axis=0)
        chosen = sets[distance, :count, :distance].astype(np.int64)
        np.put_along_axis(found, chosen, 1 - np.take_along_axis(found, chosen, axis=1), axis=1)
        least = int(lowest[distance])
        shells.append(
            ShellCount(
                int(kept[distance]),
                None if least == 2**63 - 1 else least,
                int(below[distance]),
                found,
                energies[distance, :count].tolist(),
            )
        )
    return shells


def _joined(parts: tuple[ShellCount, ...], limit: int) -> ShellCount:
    bits = np.concatenate([part.bits for part in parts])
    energies = [energy for part in parts for energy in part.energies]
    bits, order = lowest_first(bits, energies, limit)
    return ShellCount(
        sum(part.states for part in parts),
        min((part.lowest for part in parts if part.lowest is not None), default=None),
        sum(part.at_or_below for part in parts),
        bits,
        [energies[i] for i in order],
    )
