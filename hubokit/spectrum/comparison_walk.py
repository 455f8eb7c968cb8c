"""E(x) beside P(x) = min over the auxiliaries of F(x, a), block by block: the task of one slab.

A block is all settings of the low bits. E and the part of F without auxiliaries come from the Gray-code walk. The
coefficient of each product of auxiliaries is a polynomial in x of its own: what it owes to low bits alone is
tabulated once, what it owes to the others alone is one number a block. Then the auxiliaries are eliminated,
cluster by cluster (`hubokit.spectrum.two_levels`): 2**n times the sum over clusters, not 2**(n + a).
"""

from __future__ import annotations

import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any, ClassVar

import numpy as np
import numpy.typing as npt

from hubokit.spectrum.derivatives import Layout, integer_type, tables_of
from hubokit.spectrum.polynomial import Polynomial
from hubokit.spectrum.transforms import inverse_moebius, tabulated, walsh_hadamard
from hubokit.spectrum.two_levels import Bucket, Element, Entry, eliminated
from hubokit.spectrum.walk import Result, Stop, StoppedError, Walk

Numbers = npt.NDArray[Any]


@dataclass(frozen=True)
class Comparing:
    """The task: what `hubokit.spectrum.comparison` asks of every state.

    Attributes
    ----------
    source, bare : Polynomial
        E, and the part of F without auxiliaries, over the same variables.
    factors : tuple of (frozenset of int, Polynomial)
        The coefficient of each product of auxiliaries.
    order : tuple of Bucket
        In which they are eliminated.
    relation : tuple of int
        (A, B, C): holds at x when ``A * P(x) == B * E(x) + C``.
    limit : int
        Most states listed.
    """

    source: Polynomial
    bare: Polynomial
    factors: tuple[tuple[frozenset[int], Polynomial], ...]
    order: tuple[Bucket, ...]
    relation: tuple[int, int, int]
    limit: int
    layout: Layout
    wide: bool = field(default=False)
    untried: ClassVar[int] = 2**15

    def run(self, slab: int, hint: int | None, stop: Stop | None) -> Result:
        """The comparison of one slab."""
        total: Result | None = None
        for first, energies, found in self.blocks(slab):
            if stop is not None and stop.is_set():
                raise StoppedError
            total = self.merge(total, self.summary(first, energies, found))
        assert total is not None
        return total

    def trial(self, seconds: float) -> float:
        """States a second of one worker."""
        blocks = self.blocks(0)
        self.summary(*next(blocks))
        done, begun = 0, time.perf_counter()
        for first, energies, found in blocks:
            self.summary(first, energies, found)
            done += len(energies)
            if time.perf_counter() - begun > seconds:
                break
        return done / max(1e-9, time.perf_counter() - begun) if done else 1e9

    def hint(self, total: Result | None) -> int | None:
        """Nothing to tell."""
        return None

    def blocks(self, slab: int) -> Iterator[tuple[int, Numbers, Element]]:
        """First packed state, E, and P (with counts and gaps) of every block; P is `least` of the element."""
        layout = self.layout
        sources, bares = _energies(self.source, layout, slab), _energies(self.bare, layout, slab)
        parts = [_Factor(polynomial, layout.low) for _, polynomial in self.factors]
        for step in range(layout.blocks):
            high = slab << layout.walked | (step ^ (step >> 1))
            energies = next(sources)
            values = {group: part.at(high) for (group, _), part in zip(self.factors, parts, strict=True)}
            best = eliminated(self.order, values, self.bare.spin)
            yield high << layout.low, energies, Element(next(bares) + best.least, best.count, best.gap)

    def summary(self, first: int, energies: Numbers, found: Element) -> Result:
        """All that is kept of a block."""
        shape = energies.shape
        projected = found.least
        counts, gaps = np.broadcast_to(found.count, shape), np.broadcast_to(found.gap, shape)
        least, lowest = energies.min(), projected.min()
        ground, bottom = np.flatnonzero(energies == least), np.flatnonzero(projected == lowest)
        A, B, C = self.relation
        kind = object if self.wide else np.int64
        excess = A * projected.astype(kind) - B * energies.astype(kind) - C
        wrong = np.flatnonzero(excess)
        result = {
            "source": np.array([least, len(ground)]),
            "projected": np.array([lowest, len(bottom)]),
            "common": np.array([int((projected[ground] == lowest).sum())]),
            "source.states": (ground[: self.limit] + first),
            "source.others": projected[ground[: self.limit]],
            "source.counts": counts[ground[: self.limit]],
            "projected.states": (bottom[: self.limit] + first),
            "projected.others": energies[bottom[: self.limit]],
            "projected.counts": counts[bottom[: self.limit]],
            "counts": np.array([counts.min(), counts.max()]),
            "source.range": np.array([counts[ground].min(), counts[ground].max()]),
            "gap": np.array([gaps.min()]),
            "projected.gap": np.array([gaps[bottom].min()]),
            "wrong": np.array([len(wrong)]),
            "first": np.zeros((0, 3), np.int64),
            "worst": np.zeros((0, 3), np.int64),
            "worst.excess": np.zeros(0, kind),
        }
        if len(wrong):
            sizes = np.abs(excess[wrong])
            worst = wrong[int(np.argmax(sizes))]
            result["first"] = np.array([[wrong[0] + first, energies[wrong[0]], projected[wrong[0]]]])
            result["worst"] = np.array([[worst + first, energies[worst], projected[worst]]])
            result["worst.excess"] = np.array([sizes.max()], kind)
        return result

    def merge(self, total: Result | None, part: Result) -> Result:
        """Two summaries as one."""
        if total is None:
            return part
        merged: Result = {}
        for name in ("source", "projected"):
            least = min(total[name][0], part[name][0])
            kept = [result for result in (total, part) if result[name][0] == least]
            merged[name] = np.array([least, sum(int(result[name][1]) for result in kept)])
            order = np.argsort(np.concatenate([r[f"{name}.states"] for r in kept]), kind="stable")[: self.limit]
            for key in ("states", "others", "counts"):
                merged[f"{name}.{key}"] = np.concatenate([r[f"{name}.{key}"] for r in kept])[order]
            if name == "source":
                merged["source.range"] = _range([r["source.range"] for r in kept])
            else:
                merged["projected.gap"] = np.array([min(r["projected.gap"][0] for r in kept)])
        ends = (merged["source"][0], merged["projected"][0])
        both = [r for r in (total, part) if (r["source"][0], r["projected"][0]) == ends]
        merged["common"] = np.array([sum(int(r["common"][0]) for r in both)])
        merged["counts"] = _range([total["counts"], part["counts"]])
        merged["gap"] = np.minimum(total["gap"], part["gap"])
        merged["wrong"] = total["wrong"] + part["wrong"]
        firsts = np.concatenate([total["first"], part["first"]])
        merged["first"] = firsts[np.argsort(firsts[:, 0])][:1]
        worsts = np.concatenate([total["worst"], part["worst"]])
        excess = np.concatenate([total["worst.excess"], part["worst.excess"]])
        best = sorted(range(len(excess)), key=lambda i: (-int(excess[i]), int(worsts[i, 0])))[:1]
        merged["worst"], merged["worst.excess"] = worsts[best], excess[best]
        return merged


def _range(pairs: list[Numbers]) -> Numbers:
    return np.array([min(int(pair[0]) for pair in pairs), max(int(pair[1]) for pair in pairs)], dtype=object)


def _energies(polynomial: Polynomial, layout: Layout, slab: int) -> Iterator[Numbers]:
    """Energies of each block of a slab, in the order of the walk."""
    if layout.walked == 0 and layout.fixed == 0:
        yield tabulated(polynomial)
        return
    from hubokit.spectrum import kernels

    kind = integer_type(polynomial, layout)
    walk = Walk(tables_of(polynomial, layout, slab, kind), layout.blocks)
    for step in range(layout.blocks):
        out = np.empty((1, 1 << layout.low), np.int64)
        kernels.walk_energies(walk.cursor, step + 1, *walk.arrays, out)
        yield out[0]


class _Factor:
    """A polynomial in x, evaluated on all settings of the low bits at once."""

    def __init__(self, polynomial: Polynomial, low: int) -> None:
        self.spin, self.bits = polynomial.spin, low
        inside = polynomial.masks & ((np.int64(1) << low) - 1)
        above = polynomial.masks >> low
        self.plain = above == 0
        self.number = (inside == 0) & ~self.plain
        self.mixed = ~self.plain & ~self.number
        self.inside, self.above, self.weights = inside, above, polynomial.weights
        self.table: Entry = 0
        if self.plain.any():
            self.table = self._values(inside[self.plain], self.weights[self.plain])
        if not inside[self.plain].any():
            self.table = int(self.weights[self.plain].sum())

    def at(self, high: int) -> Entry:
        """Values when the bits above the low ones are `high`."""
        value = self.table
        if self.number.any():
            value = value + int(self._fixed(self.number, high).sum())
        if self.mixed.any():
            value = value + self._values(self.inside[self.mixed], self._fixed(self.mixed, high))
        return value

    def _fixed(self, chosen: npt.NDArray[np.bool_], high: int) -> Numbers:
        above, weights = self.above[chosen], self.weights[chosen]
        factors: Numbers
        if self.spin:
            factors = 1 - 2 * (np.bitwise_count(above & high).astype(np.int64) & 1)
        else:
            factors = (above & ~np.int64(high)) == 0
        products: Numbers = weights * factors
        return products

    def _values(self, masks: Numbers, weights: Numbers) -> Numbers:
        table = np.zeros(1 << self.bits, np.int64)
        np.add.at(table, masks, weights)
        values: Numbers = walsh_hadamard(table) if self.spin else inverse_moebius(table)
        return values
