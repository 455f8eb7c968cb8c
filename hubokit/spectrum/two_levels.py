"""The two lowest levels of independent or alternative parts, for many states at once.

An element holds, for each state of a block, the least energy m of some part of a model over its auxiliaries, the
number k of settings that reach it, and the distance g to the next energy above. Two independent parts combine by
`both`, two alternatives for one auxiliary by `either`. With these two operations, bucket elimination of the
auxiliaries of a cluster gives m, k and g of the whole cluster exactly, in any order.

An entry is an int64 array over the block or, where it is the same for all states, a Python integer. ``FAR`` stands
for "no next energy".
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

FAR = 2**62

Entry = Any  # an int, or an integer array over the block


@dataclass(frozen=True)
class Element:
    """Least energy, number of settings that reach it, distance to the next energy."""

    least: Entry
    count: Entry
    gap: Entry


NOTHING = Element(0, 1, FAR)
"""A part without auxiliaries and without energy."""


def both(one: Element, other: Element) -> Element:
    """Two independent parts: energies add, settings multiply."""
    return Element(one.least + other.least, _product(one.count, other.count), _nearer(one.gap, other.gap))


def either(one: Element, other: Element) -> Element:
    """Two alternatives: the settings of both stand side by side.

    Examples
    --------
    >>> either(Element(1, 2, 3), Element(np.array([0, 1, 3]), 1, FAR))
    Element(least=array([0, 1, 1]), count=array([1, 3, 2]), gap=array([1, 3, 2]))
    """
    rise = np.asarray(other.least - one.least)
    least = np.minimum(one.least, other.least)
    equal, far = rise == 0, np.abs(rise)
    ties = bool(equal.any())
    lower = rise > 0
    count, gap = _chosen(lower, one.count, other.count), _chosen(lower, one.gap, other.gap)
    if not ties:
        return Element(least, count, np.minimum(gap, far))
    tied_gap = _nearer(one.gap, other.gap)
    return Element(
        least, np.where(equal, one.count + other.count, count), np.where(equal, tied_gap, np.minimum(gap, far))
    )


def _chosen(first: npt.NDArray[np.bool_], one: Entry, other: Entry) -> Entry:
    if isinstance(one, int) and isinstance(other, int) and one == other:
        return one
    return np.where(first, one, other)


def _nearer(one: Entry, other: Entry) -> Entry:
    if isinstance(one, int) and one == FAR:
        return other
    if isinstance(other, int) and other == FAR:
        return one
    return np.minimum(one, other)


def _product(one: Entry, other: Entry) -> Entry:
    if isinstance(one, int) and isinstance(other, int):
        return one * other
    if int(np.max(one)) * int(np.max(other)) >= FAR:  # Python integers from here on
        return np.asarray(one).astype(object) * np.asarray(other).astype(object)
    return one * other


@dataclass(frozen=True)
class Bucket:
    """One auxiliary to eliminate: its place, and the auxiliaries it then depends on (all eliminated later)."""

    auxiliary: int
    neighbours: tuple[int, ...]


def elimination_order(auxiliaries: Iterable[int], groups: Iterable[frozenset[int]]) -> tuple[Bucket, ...]:
    """Auxiliaries in an order of least degree, each with the neighbours that it has when its turn comes.

    Parameters
    ----------
    auxiliaries : iterable of int
        One cluster, or several.
    groups : iterable of frozenset of int
        Auxiliaries that stand in one term.

    Examples
    --------
    >>> elimination_order([0, 1, 2], [frozenset({0, 1}), frozenset({1, 2})])
    (Bucket(auxiliary=0, neighbours=(1,)), Bucket(auxiliary=1, neighbours=(2,)), Bucket(auxiliary=2, neighbours=()))
    """
    near: dict[int, set[int]] = {auxiliary: set() for auxiliary in auxiliaries}
    for group in groups:
        for auxiliary in group:
            near[auxiliary] |= group - {auxiliary}
    order = []
    while near:
        chosen = min(near, key=lambda auxiliary: (len(near[auxiliary]), auxiliary))
        neighbours = near.pop(chosen)
        for other in neighbours:
            near[other] |= neighbours - {other}
            near[other].discard(chosen)
        order.append(Bucket(chosen, tuple(sorted(neighbours))))
    return tuple(order)


def eliminated(order: Sequence[Bucket], factors: Mapping[frozenset[int], Entry], spin: bool) -> Element:
    """m, k and g over all auxiliaries.

    Parameters
    ----------
    order : sequence of Bucket
        From `elimination_order`.
    factors : mapping from sets of auxiliaries to entries
        The coefficient of each product of auxiliaries, over the states of the block.
    spin : bool
        Values +1 and -1 of the auxiliaries, or 0 and 1.
    """
    total = NOTHING
    place = {bucket.auxiliary: turn for turn, bucket in enumerate(order)}
    coefficients: list[list[tuple[frozenset[int], Entry]]] = [[] for _ in order]
    messages: list[list[tuple[tuple[int, ...], list[Element]]]] = [[] for _ in order]
    for group, entry in factors.items():
        coefficients[min(place[auxiliary] for auxiliary in group)].append((group, entry))
    for turn, bucket in enumerate(order):
        table = []
        for setting in itertools.product((0, 1), repeat=len(bucket.neighbours)):
            bits = dict(zip(bucket.neighbours, setting, strict=True))
            sides = []
            for bit in (0, 1):
                bits[bucket.auxiliary] = bit
                energy: Entry = 0
                for group, entry in coefficients[turn]:
                    downs = sum(bits[auxiliary] for auxiliary in group)
                    if spin:
                        energy = energy - entry if downs & 1 else energy + entry
                    elif downs == len(group):
                        energy = energy + entry
                side = Element(energy, 1, FAR)
                for scope, message in messages[turn]:
                    side = both(side, message[_index(bits[auxiliary] for auxiliary in scope)])
                sides.append(side)
            table.append(either(*sides))
        if bucket.neighbours:
            heir = min(place[auxiliary] for auxiliary in bucket.neighbours)
            messages[heir].append((bucket.neighbours, table))
        else:
            total = both(total, table[0])
    return total


def _index(bits: Iterable[int]) -> int:
    index = 0
    for bit in bits:
        index = 2 * index + bit
    return index
