"""Looking around given states by asking for the energies of blocks of states: slow, plain, for any kind of energy."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import chain, combinations, islice
from math import comb
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.states import States, from_bits
from hubokit.spectrum.balls import Centres, ShellCount, lowest_first

Progress = Callable[[int, int], None]
EnergiesOf = Callable[[States], Any]

STATES_AT_ONCE = 1 << 14

Counted = tuple[list[int], list[list[ShellCount]]]


def counted_by_blocks(energies_of: EnergiesOf, centres: Centres, limit: int, progress: Progress | None) -> Counted:
    """Energies of the centres, and for each its shells from distance 1 on.

    Parameters
    ----------
    energies_of : callable
        States, int8 of shape (m, n), to whole numbers of shape (m,).
    centres : Centres
    limit : int
        Most states a shell lists.
    progress : callable, optional
        Called with (centres done, centres).
    """
    own = [int(k) for k in energies_of(from_bits(centres.bits, centres.domain))]
    threshold, shells = max(own), []
    for place in range(len(own)):
        shells.append(
            [_asked(energies_of, centres, place, d, threshold, limit) for d in range(1, centres.radius + 1)]
        )
        if progress is not None:
            progress(place + 1, len(own))
    return own, shells


def _asked(
    energies_of: EnergiesOf, centres: Centres, place: int, distance: int, threshold: int, limit: int
) -> ShellCount:
    differences, sizes, cuts = centres.others(place)
    kept, lowest, below = 0, None, 0
    bits, energies = np.zeros((0, centres.size), np.uint8), list[int]()
    for flips in _flip_sets(centres.size, distance):
        states = np.repeat(centres.bits[place : place + 1], len(flips), axis=0)
        np.put_along_axis(states, flips, 1 - np.take_along_axis(states, flips, axis=1), axis=1)
        shared = differences[:, flips].sum(axis=2, dtype=np.int64)
        passed = (sizes[:, None] + distance - 2 * shared <= cuts[:, distance, None]).any(axis=0)
        states = states[~passed]
        kept += len(states)
        if len(states) == 0:
            continue
        found = np.asarray(energies_of(from_bits(states, centres.domain)))
        lowest = int(found.min()) if lowest is None else min(lowest, int(found.min()))
        hits = np.flatnonzero(found <= threshold)
        below += len(hits)
        energies = energies + [int(k) for k in found[hits]]
        bits, order = lowest_first(np.concatenate([bits, states[hits]]), energies, limit)
        energies = [energies[i] for i in order]
    return ShellCount(kept if centres.distinct else comb(centres.size, distance), lowest, below, bits, energies)


def _flip_sets(size: int, distance: int) -> Iterator[NDArray[np.int64]]:
    sets = combinations(range(size), distance)
    while chunk := list(islice(sets, STATES_AT_ONCE)):
        yield np.fromiter(chain.from_iterable(chunk), np.int64, len(chunk) * distance).reshape(-1, distance)
