"""Counting by the Gray-code walk: densities of states and local minima."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
import numpy.typing as npt

from hubokit.errors import LimitError
from hubokit.spectrum.derivatives import Layout, integer_type, tables_of, together
from hubokit.spectrum.polynomial import Polynomial
from hubokit.spectrum.walk import Result, Stop, Walk

LEVEL_LIMIT = 2**22
"""Most distinct energies that a density of states may have."""

_EMITTED = 2**18


@dataclass(frozen=True)
class EnergyCounts:
    """The task: how many states have each energy, where the energies lie in few bins.

    ``energy = lowest + step * bin``. Results: counts, int64 array of shape (bins,).
    """

    polynomial: Polynomial
    layout: Layout
    lowest: int
    step: int
    bins: int
    untried: ClassVar[int] = 2**22

    def run(self, slab: int, hint: int | None, stop: Stop | None) -> Result:
        """The counts of one slab."""
        from hubokit.spectrum import kernels

        walk = _walk(self.polynomial, self.layout, slab)
        counts = np.zeros((2, self.bins), np.int64)
        walk.drive(
            lambda end: kernels.walk_counts(walk.cursor, end, *walk.arrays, self.lowest, self.step, counts), stop
        )
        return {"counts": counts.sum(axis=0)}

    def trial(self, seconds: float) -> float:
        """States a second of one worker."""
        from hubokit.spectrum import kernels

        walk = _walk(self.polynomial, self.layout, 0)
        counts = np.zeros((2, self.bins), np.int64)
        return walk.rate(
            lambda end: kernels.walk_counts(walk.cursor, end, *walk.arrays, self.lowest, self.step, counts),
            None,
            None,
            seconds,
        )

    def merge(self, total: Result | None, part: Result) -> Result:
        """The sums."""
        return part if total is None else {"counts": total["counts"] + part["counts"]}

    def hint(self, total: Result | None) -> int | None:
        """Nothing to tell."""
        return None


@dataclass(frozen=True)
class DistinctEnergies:
    """The task: how many states have each energy, where energies are far apart and few are equal.

    Results: energies (K,) ascending and counts (K,), both int64.
    """

    polynomial: Polynomial
    layout: Layout
    untried: ClassVar[int] = 2**22

    def run(self, slab: int, hint: int | None, stop: Stop | None) -> Result:
        """The energies of one slab."""
        gathered = _Gathered(_walk(self.polynomial, self.layout, slab))
        gathered.walk.drive(gathered.piece, stop, most=gathered.most)
        return gathered.result()

    def trial(self, seconds: float) -> float:
        """States a second of one worker."""
        gathered = _Gathered(_walk(self.polynomial, self.layout, 0))
        return gathered.walk.rate(gathered.piece, None, gathered.most, seconds)

    def merge(self, total: Result | None, part: Result) -> Result:
        """The union, counts added."""
        return part if total is None else _united([total, part])

    def hint(self, total: Result | None) -> int | None:
        """Nothing to tell."""
        return None


class _Gathered:
    """Sorted energies of the blocks so far, joined when as many new ones have come as there were before."""

    def __init__(self, walk: Walk) -> None:
        self.walk = walk
        self.most = max(1, _EMITTED // walk.tables.rows.shape[1])
        self.parts: list[Result] = []

    def piece(self, end: int) -> int:
        """Walk on, and sort what came."""
        from hubokit.spectrum import kernels

        before = self.walk.done
        out = np.empty((end - before, self.walk.tables.rows.shape[1]), np.int64)
        kernels.walk_energies(self.walk.cursor, end, *self.walk.arrays, out)
        energies, counts = np.unique(out, return_counts=True)
        self.parts.append({"energies": energies, "counts": counts.astype(np.int64)})
        while len(self.parts) > 1 and 2 * len(self.parts[-1]["counts"]) >= len(self.parts[-2]["counts"]):
            self.parts[-2:] = [_united(self.parts[-2:])]
        return 0

    def result(self) -> Result:
        """All energies so far."""
        return _united(self.parts)


def _united(parts: list[Result]) -> Result:
    energies = np.concatenate([part["energies"] for part in parts])
    counts = np.concatenate([part["counts"] for part in parts])
    order = np.argsort(energies, kind="stable")
    energies = energies[order]
    starts = np.flatnonzero(np.concatenate([[True], energies[1:] != energies[:-1]]))
    if len(starts) > LEVEL_LIMIT:
        raise LimitError(
            f"the density of states has more than {LEVEL_LIMIT:,} distinct energies: ask for low_levels, "
            "or for the density of the model rounded to a coarser resolution"
        )
    return {"energies": energies[starts], "counts": np.add.reduceat(counts[order], starts)}


@dataclass(frozen=True)
class LocalMinima:
    """The task: how many states no single flip lowers.

    The polynomial keeps all its variables; bits in `held` stay 0 (the pivots of a symmetry), and their flips are
    watched like all others. Results: total, int64 array of shape (1,).
    """

    polynomial: Polynomial
    held: tuple[int, ...]
    layout: Layout
    untried: ClassVar[int] = 2**22

    def run(self, slab: int, hint: int | None, stop: Stop | None) -> Result:
        """The number in one slab."""
        total = np.zeros(1, np.int64)
        watch = _Watch(self, slab, total)
        watch.walk.drive(watch.piece, stop)
        return {"total": total}

    def trial(self, seconds: float) -> float:
        """States a second of one worker."""
        watch = _Watch(self, 0, np.zeros(1, np.int64))
        return watch.walk.rate(watch.piece, None, None, seconds)

    def merge(self, total: Result | None, part: Result) -> Result:
        """The sum."""
        return part if total is None else {"total": total["total"] + part["total"]}

    def hint(self, total: Result | None) -> int | None:
        """Nothing to tell."""
        return None


class _Watch:
    """The energies and one derivative for each bit that is not low, walked side by side."""

    def __init__(self, task: LocalMinima, slab: int, total: npt.NDArray[np.int64]) -> None:
        layout, reduced = task.layout, task.polynomial.without(task.held)
        above = range(layout.low, layout.low + layout.walked + layout.fixed)
        derivatives = [reduced.derivative(bit) for bit in above]
        derivatives += [task.polynomial.derivative(bit).without(task.held) for bit in task.held]
        # a derivative's weights are at most twice the polynomial's, and so is their bound
        kind = integer_type(task.polynomial, Layout(task.polynomial.size, 0, 0), factor=2)
        parts = [tables_of(part, layout, slab, kind) for part in (reduced, *derivatives)]
        self.walk = Walk(together(parts), layout.blocks)
        walked = list(range(layout.walked)) + [-1] * (layout.fixed + len(task.held))
        setting = [0] * layout.walked + [slab >> bit & 1 for bit in range(layout.fixed)] + [0] * len(task.held)
        self.watched, self.setting = np.array(walked, np.int64), np.array(setting, np.int64)
        self.kept = np.zeros(1 << layout.low, kind)
        self.range = int(np.iinfo(kind).min), int(np.iinfo(kind).max)
        self.total = total

    def piece(self, end: int) -> int:
        """Walk on."""
        from hubokit.spectrum import kernels

        walk = self.walk
        seen = walk.tables.roots, self.watched, self.setting, self.kept
        return int(kernels.walk_minima(walk.cursor, end, *walk.arrays, *seen, *self.range, self.total))


def _walk(polynomial: Polynomial, layout: Layout, slab: int) -> Walk:
    kind = integer_type(polynomial, layout)
    return Walk(tables_of(polynomial, layout, slab, kind), layout.blocks)
