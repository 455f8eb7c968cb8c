"""The lowest levels of a polynomial by the Gray-code walk: counts exact, states up to a limit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
import numpy.typing as npt

from hubokit.spectrum.derivatives import Layout, integer_type, tables_of
from hubokit.spectrum.polynomial import Polynomial
from hubokit.spectrum.walk import Result, Stop, Walk

_HIGHEST = 2**63 - 1
_NOTES = 2**16


@dataclass(frozen=True)
class LowestLevels:
    """The task: the `most` lowest energies; of all but the last of them the number of states and the first `limit`.

    Results
    -------
    energies : int64 array, shape (K,)
        Ascending, K <= most.
    counts : int64 array, shape (K,)
        Degeneracies; 0 for the last where K == most.
    states : uint64 array
        The packed states of all levels one after the other, each level's in lift order.
    bounds : int64 array, shape (K + 1,)
        Where each level's states begin.
    """

    polynomial: Polynomial
    layout: Layout
    most: int
    limit: int
    untried: ClassVar[int] = 2**22

    def run(self, slab: int, hint: int | None, stop: Stop | None) -> Result:
        """The lowest levels of one slab; energies of `hint` and above are passed over."""
        notes = _Notes(self, slab, _HIGHEST if hint is None else hint)
        notes.walk.drive(notes.piece, stop, notes.full)
        return notes.result()

    def trial(self, seconds: float) -> float:
        """States a second of one worker."""
        notes = _Notes(self, 0, _HIGHEST)
        return notes.walk.rate(notes.piece, notes.full, None, seconds)

    def hint(self, total: Result | None) -> int | None:
        """The highest energy that still counts: states at or above it change nothing."""
        if total is None or len(total["energies"]) < self.most:
            return None
        return int(total["energies"][-1])

    def merge(self, total: Result | None, part: Result) -> Result:
        """The lowest levels of both."""
        if total is None:
            return part
        energies = np.unique(np.concatenate([total["energies"], part["energies"]]))[: self.most]
        counts = np.zeros(len(energies), np.int64)
        listed: list[list[npt.NDArray[np.uint64]]] = [[] for _ in energies]
        for result in (total, part):
            for place, energy in enumerate(result["energies"]):
                level = int(np.searchsorted(energies, energy))
                if level < len(energies):
                    counts[level] += result["counts"][place]
                    listed[level].append(result["states"][result["bounds"][place] : result["bounds"][place + 1]])
        states = [np.sort(np.concatenate(parts))[: self.limit] for parts in listed]
        return _result(energies, counts, states, self.most)


def _result(
    energies: npt.NDArray[np.int64],
    counts: npt.NDArray[np.int64],
    states: list[npt.NDArray[np.uint64]],
    most: int,
) -> Result:
    if len(energies) == most:
        counts[-1] = 0
        states[-1] = states[-1][:0]
    return {
        "energies": energies,
        "counts": counts,
        "states": np.concatenate([np.zeros(0, np.uint64), *states]),
        "bounds": np.cumsum([0] + [len(part) for part in states]).astype(np.int64),
    }


class _Notes:
    """The levels found so far in one slab, and the states noted for them."""

    def __init__(self, task: LowestLevels, slab: int, ceiling: int) -> None:
        from hubokit.spectrum import kernels

        kind = integer_type(task.polynomial, task.layout)
        self.walk = Walk(tables_of(task.polynomial, task.layout, slab, kind), task.layout.blocks)
        self.limit = task.limit
        self.most = task.most
        self.base = slab << (task.layout.low + task.layout.walked)
        self.compiled: Any = kernels.walk_levels
        self.energy = np.zeros(task.most, np.int64)
        self.count = np.zeros(task.most, np.int64)
        self.name = np.zeros(task.most, np.int64)
        self.cut = np.zeros(task.most, np.int64)
        self.tally = np.array([0, 0, 0, ceiling], np.int64)
        self.states = np.zeros(_NOTES, np.int64)
        self.names = np.zeros(_NOTES, np.int64)

    def piece(self, end: int) -> int:
        """Walk on."""
        levels = self.energy, self.count, self.name, self.cut, self.tally
        return int(
            self.compiled(self.walk.cursor, end, self.base, *self.walk.arrays, *levels, self.states, self.names)
        )

    def full(self) -> None:
        """Forget states of levels that are no longer among the lowest, and all beyond the limit; then make room."""
        lists = self.lists()
        for level, states in enumerate(lists):
            if self.limit <= len(states):
                self.cut[level] = states[-1] if self.limit else -1
        kept = sum(len(states) for states in lists)
        if 2 * kept > len(self.states):
            self.states = np.zeros(2 * len(self.states), np.int64)
            self.names = np.zeros(len(self.states), np.int64)
        place = 0
        for level, states in enumerate(lists):
            self.states[place : place + len(states)] = states
            self.names[place : place + len(states)] = self.name[level]
            place += len(states)
        self.tally[2] = place

    def lists(self) -> list[npt.NDArray[np.int64]]:
        """The first states of every level, in lift order."""
        used, noted = int(self.tally[0]), int(self.tally[2])
        states, names = self.states[:noted], self.names[:noted]
        return [np.sort(states[names == name])[: self.limit] for name in self.name[:used]]

    def result(self) -> Result:
        """What `LowestLevels.run` returns."""
        used = int(self.tally[0])
        states = [states.astype(np.uint64) for states in self.lists()]
        return _result(self.energy[:used].copy(), self.count[:used].copy(), states, self.most)
