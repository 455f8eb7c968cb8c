"""Where ground states lie in the space of states: how far apart, and which hang together under single flips.

The *Hamming distance* of two states is the number of variables in which they differ. Two ground states at distance
one are neighbours; states that a chain of neighbours joins form a *group*. Both change when auxiliaries are added,
since the best auxiliaries of two neighbours may differ in many places.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError, LimitError

PAIRS = 2**33
"""Most comparisons of 64 variables that a search for the least distance makes."""


@dataclass(frozen=True)
class Groups:
    """Groups of states that single flips join.

    Parameters
    ----------
    labels : int64 array, shape (m,)
        Group of each state, numbered by first appearance.
    sizes : tuple of int
        Number of states in each group.
    """

    labels: NDArray[np.int64]
    sizes: tuple[int, ...]

    def __len__(self) -> int:
        return len(self.sizes)


def minimum_distance(states: NDArray[np.int8]) -> int | None:
    """Least Hamming distance between two of the states.

    Parameters
    ----------
    states : int8 array, shape (m, n)
        Distinct states of either domain.

    Returns
    -------
    int or None
        None for fewer than two states.

    Raises
    ------
    InputError
        The same state twice.
    LimitError
        More comparisons than `PAIRS` allows.

    Examples
    --------
    >>> minimum_distance(np.array([[1, 1, 1], [1, -1, -1], [-1, -1, -1]], np.int8))
    1
    """
    words = _words(states)
    count = len(words)
    if count < 2:
        return None
    _refuse_repeats(words)
    if any(len(_partners(words, flip)) for flip in _flips(states.shape[1])):
        return 1
    if count * count // 2 * words.shape[1] > PAIRS:
        raise LimitError(f"{count:,} states are too many to compare pair by pair; list fewer (limit=)")
    least = int(states.shape[1]) + 1
    rows = max(1, (1 << 20) // (count * words.shape[1]))
    for start in range(0, count, rows):
        block = words[start : start + rows]
        distances = _ones(block[:, None, :] ^ words[None, start:, :])
        distances[np.arange(len(block)), np.arange(len(block))] = least
        least = min(least, int(distances.min()))
        if least == 2:  # distance one was ruled out
            break
    return least


def connected_groups(states: NDArray[np.int8]) -> Groups:
    """Groups of states joined by chains of single flips within the list.

    Parameters
    ----------
    states : int8 array, shape (m, n)
        Distinct states of either domain.

    Raises
    ------
    InputError
        The same state twice.

    Examples
    --------
    >>> groups = connected_groups(np.array([[0, 0, 0], [0, 0, 1], [1, 1, 0]], np.int8))
    >>> groups.labels.tolist(), groups.sizes
    ([0, 0, 1], (2, 1))
    """
    words = _words(states)
    _refuse_repeats(words)
    label = np.arange(len(words))
    pairs = [found for flip in _flips(states.shape[1]) if len(found := _partners(words, flip))]
    edges = np.concatenate(pairs) if pairs else np.zeros((0, 2), np.int64)
    # Every round hands the least label along all edges and then along the chains of labels, until nothing changes.
    while len(edges):
        least = np.minimum(label[edges[:, 0]], label[edges[:, 1]])
        after = label.copy()
        np.minimum.at(after, edges[:, 0], least)
        np.minimum.at(after, edges[:, 1], least)
        after = after[after]
        if (after == label).all():
            break
        label = after
    _, first, labels, sizes = np.unique(label, return_index=True, return_inverse=True, return_counts=True)
    order = np.argsort(first)
    number = np.empty(len(order), np.int64)
    number[order] = np.arange(len(order))
    return Groups(number[labels.ravel()], tuple(int(size) for size in sizes[order]))


def _words(states: NDArray[np.int8]) -> NDArray[np.uint64]:
    """States packed into 64-bit words, shape (m, ceil(n / 64)); one bit a variable."""
    bits = np.packbits(np.asarray(states) <= 0, axis=1)
    padded = np.zeros((len(bits), max(1, -(-bits.shape[1] // 8)) * 8), np.uint8)
    padded[:, : bits.shape[1]] = bits
    return padded.view(np.uint64)


def _flips(size: int) -> list[NDArray[np.uint64]]:
    """For each variable the words that flip it."""
    return list(_words(1 - 2 * np.eye(size, dtype=np.int8)))


def _partners(words: NDArray[np.uint64], flip: NDArray[np.uint64]) -> NDArray[np.int64]:
    """Pairs of rows that this flip turns into each other, shape (p, 2)."""
    keys, turned = _keys(words), _keys(words ^ flip)
    order = np.argsort(keys, kind="stable")
    place = np.minimum(np.searchsorted(keys[order], turned), len(keys) - 1)
    found = np.flatnonzero(keys[order[place]] == turned)
    pairs = np.stack([found, order[place[found]]], axis=1)
    return pairs[pairs[:, 0] < pairs[:, 1]]


def _keys(words: NDArray[np.uint64]) -> NDArray[Any]:
    """Each row as one comparable value."""
    if words.shape[1] == 1:
        return words[:, 0]
    return np.ascontiguousarray(words).view(f"V{8 * words.shape[1]}")[:, 0]


def _refuse_repeats(words: NDArray[np.uint64]) -> None:
    if len(np.unique(words, axis=0)) < len(words):
        raise InputError("the same state was given twice", "states")


def _ones(words: NDArray[np.uint64]) -> NDArray[np.int64]:
    """Number of ones along the last axis."""
    if hasattr(np, "bitwise_count"):
        ones: NDArray[np.int64] = np.bitwise_count(words).sum(axis=-1, dtype=np.int64)
    else:
        ones = np.unpackbits(words.view(np.uint8), axis=-1).sum(axis=-1, dtype=np.int64)
    return ones
