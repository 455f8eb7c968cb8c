"""Levels of a model whose weights exceed int64: a rounded walk that gathers every state that may matter.

The weights w are divided by 2**q and rounded to whole numbers r whose absolute sum stays below 2**62. A state's exact
energy then lies within d/2 (in units of 2**q) of its rounded one, with d = 2 * sum |w / 2**q - r|. Two states whose
rounded energies differ by more than d differ in exact energy. Hence, with c1 the least rounded energy and c(i+1) the
least one above c(i) + d, there are at least K exact levels up to c(K) + d/2, and all states of the K lowest exact
levels have rounded energies up to c(K) + d. Those are gathered and evaluated exactly. No float takes part.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
import numpy.typing as npt

from hubokit.errors import LimitError
from hubokit.spectrum.derivatives import Layout, integer_type, tables_of
from hubokit.spectrum.polynomial import Polynomial
from hubokit.spectrum.walk import Result, Stop, Walk

CANDIDATE_LIMIT = 2**22
"""Most states that may lie inside the bound."""

_NOTES = 2**16
_HIGHEST = 2**63 - 1


def rounded(polynomial: Polynomial) -> tuple[Polynomial, int]:
    """Weights divided by a power of two and rounded (halves upwards), absolute sum below 2**62; and d, rounded up."""
    bits = max(0, polynomial.bound.bit_length() - 60)
    half = (1 << bits) >> 1
    weights = [(int(weight) + half) >> bits for weight in polynomial.weights]
    deviation = sum(abs(int(w) - (r << bits)) for w, r in zip(polynomial.weights, weights, strict=True))
    coarse = Polynomial(polynomial.size, polynomial.spin, polynomial.masks, np.array(weights, np.int64))
    return coarse, -(-2 * deviation >> bits)


@dataclass(frozen=True)
class Candidates:
    """The task: all states whose exact energy may be among the `most` lowest.

    Results: states (packed) and energies (rounded), both int64, in no order.
    """

    polynomial: Polynomial
    layout: Layout
    most: int
    window: int
    untried: ClassVar[int] = 2**22

    def run(self, slab: int, hint: int | None, stop: Stop | None) -> Result:
        """The candidates of one slab, up to the rounded energy `hint`."""
        notes = _Notes(self, slab, _HIGHEST - 1 if hint is None else hint)
        notes.walk.drive(notes.piece, stop, notes.full)
        notes.lower()
        return notes.result()

    def trial(self, seconds: float) -> float:
        """States a second of one worker."""
        notes = _Notes(self, 0, _HIGHEST - 1)
        return notes.walk.rate(notes.piece, notes.full, None, seconds)

    def hint(self, total: Result | None) -> int | None:
        """The highest rounded energy that still counts."""
        return None if total is None else self.ceiling(total["energies"])

    def ceiling(self, energies: npt.NDArray[np.int64]) -> int | None:
        """c(K) + d; None while fewer than K values lie far enough apart."""
        values = np.unique(energies)
        place, last = 0, 0
        for _ in range(self.most):
            if place >= len(values):
                return None
            last = int(values[place])
            place = int(np.searchsorted(values, last + self.window, side="right"))
        return last + self.window

    def merge(self, total: Result | None, part: Result) -> Result:
        """All candidates of both that still count."""
        if total is None:
            return part
        states = np.concatenate([total["states"], part["states"]])
        energies = np.concatenate([total["energies"], part["energies"]])
        ceiling = self.ceiling(energies)
        if ceiling is not None:
            states, energies = states[energies <= ceiling], energies[energies <= ceiling]
        _refuse(len(states))
        return {"states": states, "energies": energies}


def _refuse(count: int) -> None:
    if count > CANDIDATE_LIMIT:
        raise LimitError(
            f"more than {CANDIDATE_LIMIT:,} states lie within the rounding of weights beyond int64: "
            "use a coarser resolution (H.rounded), elimination for a sparse model, or fewer levels"
        )


class _Notes:
    def __init__(self, task: Candidates, slab: int, ceiling: int) -> None:
        from hubokit.spectrum import kernels

        kind = integer_type(task.polynomial, task.layout)
        self.task = task
        self.walk = Walk(tables_of(task.polynomial, task.layout, slab, kind), task.layout.blocks)
        self.base = slab << (task.layout.low + task.layout.walked)
        self.compiled: Any = kernels.walk_candidates
        self.ceiling = ceiling
        self.tally = np.zeros(1, np.int64)
        self.states = np.zeros(_NOTES, np.int64)
        self.energies = np.zeros(_NOTES, np.int64)

    def piece(self, end: int) -> int:
        noted = self.tally, self.states, self.energies
        return int(self.compiled(self.walk.cursor, end, self.base, *self.walk.arrays, self.ceiling, *noted))

    def lower(self) -> None:
        """Lower the ceiling as far as the states noted allow, and drop what lies above it."""
        result = self.result()
        ceiling = self.task.ceiling(result["energies"])
        if ceiling is not None:
            self.ceiling = min(self.ceiling, ceiling)
        kept = result["energies"] <= self.ceiling
        number = int(kept.sum())
        self.states[:number], self.energies[:number] = result["states"][kept], result["energies"][kept]
        self.tally[0] = number

    def full(self) -> None:
        self.lower()
        number = int(self.tally[0])
        _refuse(number)
        if 2 * number > len(self.states):
            self.states = np.concatenate([self.states, np.zeros_like(self.states)])
            self.energies = np.concatenate([self.energies, np.zeros_like(self.energies)])

    def result(self) -> Result:
        number = int(self.tally[0])
        return {"states": self.states[:number].copy(), "energies": self.energies[:number].copy()}


def exact_levels(polynomial: Polynomial, total: Result, most: int, limit: int) -> Result:
    """The lowest levels from the candidates, as `LowestLevels` returns them; energies may be Python integers."""
    states = np.sort(total["states"]).astype(np.uint64)
    values = polynomial.values(states)
    energies = sorted(set(values.tolist()))[:most]
    listed = [states[values == energy] for energy in energies[: most - 1]]
    counts = [len(part) for part in listed] + [0] * (len(energies) - len(listed))
    return {
        "energies": np.array(energies, dtype=object),
        "counts": np.array(counts, np.int64),
        "states": np.concatenate([np.zeros(0, np.uint64), *(part[:limit] for part in listed)]),
        "bounds": np.cumsum([0] + [min(limit, len(part)) for part in listed]),
    }
