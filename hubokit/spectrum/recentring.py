"""A polynomial written in the flips away from a centre, up to a number of flips.

With ``v_i = c_i + g_i * f_i``, where c is the centre, f_i = 1 when variable i is flipped and g_i = -2 c_i for spins,
1 - 2 c_i for booleans, every term becomes a boolean polynomial in f. Its part of degree at most r gives the exact
energy of every state within r flips:

    E(flip set T) = sum over subsets U of T of D(U),    D(U) = sum over terms S containing U of
                                                               weight * prod(g_i, i in U) * prod(c_i, i in S - U).

Which sets U occur does not depend on the centre: they are found once, as a trie (each set below its first members),
and only their coefficients are worked out again for every centre.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cache, cached_property
from itertools import combinations
from math import comb
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.compiling import compiled
from hubokit.model.terms import Block

SUBSETS = 2**27
"""Most pairs of a term with a subset of it that a structure may hold (four bytes each, and as many again to sort)."""

DENSE_ROWS = 4096
"""Up to this many variables second derivatives may be kept as full rows."""

COMPILED_FROM = 1 << 17
"""Scatters of this size on are compiled."""

Members = NDArray[np.int32]


@dataclass(frozen=True)
class Trie:
    """The sets of at most `depth` variables that lie in a term, in lexicographic order below their first members.

    Node 0 is the empty set, node 1 + i the set {i}; larger sets follow by size. The children of a node are
    contiguous and ascend in their last member.

    Parameters
    ----------
    size, depth : int
        Number of variables; largest set held.
    last : int32 array, shape (nodes,)
        Last member of each set (-1 for the empty set).
    begin, end : int64 arrays, shape (nodes,)
        Range of the children of each node.
    index : tuple
        For each block, for each set size from 1 to `depth`: the nodes of the subsets of its terms, shape
        (m, C(k, d)), in the order of ``itertools.combinations``.
    """

    size: int
    depth: int
    last: NDArray[np.int32]
    begin: NDArray[np.int64]
    end: NDArray[np.int64]
    index: tuple[tuple[Members, ...], ...]

    @cached_property
    def parents(self) -> int:
        """Number of sets, the empty one aside, that have children."""
        return int((self.begin[1:] < self.end[1:]).sum())


def trie_of(size: int, blocks: Sequence[Block], radius: int) -> Trie:
    """Every set of at most `radius` variables inside a term.

    Raises
    ------
    LimitError
        More than 2**27 pairs of a term and a subset.

    Examples
    --------
    >>> block = Block(np.array([[0, 1, 2]], np.int32), np.array([1]))
    >>> trie = trie_of(3, [block], 2)
    >>> trie.last.tolist(), trie.begin[1:4].tolist(), trie.end[1:4].tolist()
    ([-1, 0, 1, 2, 1, 2, 2], [4, 6, 7], [6, 7, 7])
    """
    depth = min(radius, max((block.locality for block in blocks), default=0))
    total = sum(len(b) * comb(b.locality, d) for b in blocks for d in range(1, min(depth, b.locality) + 1))
    if total > SUBSETS:
        raise LimitError(
            f"writing the model in its flips takes {total:,} subsets of terms, {SUBSETS:,} are allowed; "
            "a smaller radius would do"
        )
    index: list[list[Members]] = [[block.members + np.int32(1)] for block in blocks]
    last = [np.arange(-1, size, dtype=np.int32)]
    parents = [np.zeros(1 + size, np.int64)]
    nodes = 1 + size
    for degree in range(2, depth + 1):
        pieces, owners = [], []
        for place, block in enumerate(blocks):
            if block.locality >= degree:
                above, member = _extensions(block.locality, degree)
                pieces.append(index[place][-1][:, above].astype(np.int64) * size + block.members[:, member])
                owners.append(place)
        keys = np.concatenate([piece.ravel() for piece in pieces])
        fresh, inverse = _distinct(keys)
        parent, member = np.divmod(fresh, size)
        start = 0
        for place, piece in zip(owners, pieces, strict=True):
            found = inverse[start : start + piece.size].reshape(piece.shape)
            index[place].append((nodes + found).astype(np.int32))
            start += piece.size
        last.append(member.astype(np.int32))
        parents.append(parent)
        nodes += len(fresh)
    begin, end = _ranges(size, nodes, parents)
    return Trie(size, depth, np.concatenate(last), begin, end, tuple(tuple(levels) for levels in index))


def _extensions(locality: int, degree: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """For each combination of `degree` places: the number of the combination of all but the last, and the last."""
    number = {places: at for at, places in enumerate(combinations(range(locality), degree - 1))}
    chosen = list(combinations(range(locality), degree))
    return np.array([number[places[:-1]] for places in chosen]), np.array([places[-1] for places in chosen])


def _distinct(keys: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Distinct keys in order and the place of each key among them; quick where they already ascend."""
    if len(keys) and (keys[1:] > keys[:-1]).all():
        return keys, np.arange(len(keys))
    fresh, inverse = np.unique(keys, return_inverse=True)
    return fresh, inverse.ravel()


def _ranges(
    size: int, nodes: int, parents: Sequence[NDArray[np.int64]]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    begin, end = np.full(nodes, nodes, np.int64), np.full(nodes, nodes, np.int64)
    begin[0], end[0] = 1, 1 + size
    # Nodes of one size ascend by parent, so that counting children gives their ranges.
    low, child = 1, 1 + size
    for parent in parents[1:]:
        high = child
        counts = np.bincount(parent - low, minlength=high - low)
        end[low:high] = child + np.cumsum(counts)
        begin[low:high] = end[low:high] - counts
        low, child = high, high + len(parent)
    return begin, end


def flip_coefficients(
    trie: Trie, blocks: Sequence[Block], centre: NDArray[np.int8], domain: str, kind: type[Any]
) -> NDArray[Any]:
    """D(U) for every node of the trie; the entry of the empty set is the centre's energy.

    Parameters
    ----------
    trie : Trie
    blocks : sequence of Block
        The same that the trie was made of.
    centre : int8 array, shape (n,)
        Values of the domain.
    domain : "spin" or "boolean"
    kind : int32, int64 or object
        Arithmetic modulo 2**32 or 2**64 where coefficients overflow: exact for energies, which fit.

    Examples
    --------
    >>> block = Block(np.array([[0, 1, 2]], np.int32), np.array([1]))
    >>> flip_coefficients(trie_of(3, [block], 2), [block], np.array([1, 1, -1], np.int8), "spin", np.int64).tolist()
    [-1, 2, 2, 2, -4, -4, -4]
    """
    values: NDArray[Any] = np.zeros(len(trie.last), kind)
    for block, levels in zip(blocks, trie.index, strict=True):
        weights, inside = block.weights.astype(kind), centre[block.members]
        if domain == "spin":
            weights = weights * inside.prod(axis=1, dtype=np.int8).astype(kind)
            values[0] += weights.sum(dtype=kind)
            for degree, nodes in enumerate(levels, 1):
                _scatter(values, nodes, weights * _wrapped((-2) ** degree, kind))
        else:
            zeros = (inside == 0).astype(np.int16)
            missing = zeros.sum(axis=1, dtype=np.int16)
            values[0] += weights[missing == 0].sum(dtype=kind)
            for degree, nodes in enumerate(levels, 1):
                _scatter_booleans(values, nodes, weights, zeros, missing, degree)
    return values


def _wrapped(number: int, kind: type[Any]) -> Any:
    """A number in the arithmetic of a type: modulo 2**32 or 2**64, or as it is."""
    if kind is object:
        return number
    bits = 8 * np.dtype(kind).itemsize
    return kind((number + (1 << bits - 1)) % (1 << bits) - (1 << bits - 1))


def _scatter(values: NDArray[Any], nodes: Members, weights: NDArray[Any]) -> None:
    """Add the weight of each term to all its nodes of one size."""
    if nodes.size >= COMPILED_FROM and values.dtype != object:
        _compiled_scatter()(values, nodes, weights)
    else:
        np.add.at(values, nodes.ravel(), np.repeat(weights, nodes.shape[1]))


def _scatter_booleans(
    values: NDArray[Any],
    nodes: Members,
    weights: NDArray[Any],
    zeros: NDArray[np.int16],
    missing: NDArray[np.int16],
    degree: int,
) -> None:
    """A subset counts where it holds every member that is 0; flipping a member that is 1 turns the sign."""
    places = np.array(list(combinations(range(zeros.shape[1]), degree)))
    at_once = max(1, (1 << 22) // max(len(zeros), 1))
    for start in range(0, len(places), at_once):
        chosen = zeros[:, places[start : start + at_once]].sum(axis=2)
        term, subset = np.nonzero(chosen == missing[:, None])
        signs = np.where((degree - chosen[term, subset]) % 2 == 1, -1, 1)
        np.add.at(values, nodes[term, start + subset], weights[term] * signs.astype(values.dtype))


@cache
def _compiled_scatter() -> Callable[..., None]:
    def scatter(values: NDArray[Any], nodes: Members, weights: NDArray[Any]) -> None:
        for term in range(nodes.shape[0]):
            for place in range(nodes.shape[1]):
                values[nodes[term, place]] += weights[term]

    return compiled(scatter, nogil=True)


@dataclass(frozen=True)
class Recentred:
    """A polynomial in the flips away from one centre.

    Parameters
    ----------
    trie : Trie
        Without the places of the terms in it, which only re-centring needs.
    values : integer array, shape (nodes,)
        D(U) of every node.
    rows : integer array, shape (n, n) or (0, 0)
        D({i, k}) above the diagonal, where there are enough of them to keep full rows.
    """

    trie: Trie
    values: NDArray[Any]
    rows: NDArray[Any]


def recentred(
    trie: Trie, blocks: Sequence[Block], centre: NDArray[np.int8], domain: str, kind: type[Any]
) -> Recentred:
    """The polynomial around one centre; parameters as for `flip_coefficients`."""
    values = flip_coefficients(trie, blocks, centre, domain, kind)
    size, bare = trie.size, replace(trie, index=())
    if trie.depth < 2 or size > DENSE_ROWS or (trie.end[size] - trie.begin[1]) * 16 < size * size:
        return Recentred(bare, values, np.zeros((0, 0), kind))
    first, stop = trie.begin[1], trie.end[size]
    rows: NDArray[Any] = np.zeros((size, size), kind)
    owner = np.repeat(np.arange(size), trie.end[1 : size + 1] - trie.begin[1 : size + 1])
    rows[owner, trie.last[first:stop]] = values[first:stop]
    return Recentred(bare, values, rows)
