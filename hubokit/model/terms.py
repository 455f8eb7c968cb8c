"""Columns of terms: a polynomial as one array of members for each locality, beside its weights.

A multilinear polynomial over spins (s*s = 1) or booleans (x*x = x) is held as *blocks*. The block of locality k has
``members``, an int32 array of shape (m, k) whose rows are the products, and ``weights``, the integers in front of
them. Everything here is array work: no Python loop runs over terms.

While an expression is being built a member of -1 means *absent*, so that rows of unequal length can share an array.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.numbers import INT64_BOUND, absolute_sum

EXPANSION_LIMIT = 2**25
"""Largest number of products that an expansion may write down before it merges them."""

ABSENT = -1

Part = tuple[NDArray[Any], NDArray[Any]]
"""Members (m, k) and weights (m,), in any order, with repeats."""


@dataclass(frozen=True)
class Block:
    """All terms of one locality.

    Parameters
    ----------
    members : int32 array, shape (m, k)
        Positions of the variables; each row strictly increasing, rows distinct and in lexicographic order.
    weights : int64 or object array, shape (m,)
        Nonzero integers in units of the resolution.
    """

    members: NDArray[np.int32]
    weights: NDArray[Any]

    def __post_init__(self) -> None:
        self.members.setflags(write=False)
        self.weights.setflags(write=False)

    @property
    def locality(self) -> int:
        """Number of variables in each product."""
        return int(self.members.shape[1])

    def __len__(self) -> int:
        return len(self.weights)


def canonical_blocks(parts: Iterable[Part], domain: str) -> tuple[int, tuple[Block, ...]]:
    """Merge parts into blocks: rows sorted, repeated members reduced, equal products added, zeros dropped.

    Parameters
    ----------
    parts : iterable of (members (m, k), weights (m,))
        Integer members (-1: absent) and integer weights (int64 or object).
    domain : "spin" or "boolean"
        Decides what a repeated member becomes: s*s = 1, x*x = x.

    Returns
    -------
    constant : int
        What became of products without members.
    blocks : tuple of Block
        Ascending locality; weights int64 when their absolute sum allows it, else objects.

    Examples
    --------
    >>> constant, blocks = canonical_blocks([(np.array([[1, 0, 1]]), np.array([3]))], "boolean")
    >>> constant, blocks[0].members.tolist(), blocks[0].weights.tolist()
    (0, [[0, 1]], [3])
    """
    parts = [(members, weights) for members, weights in parts if len(weights)]
    wide = sum(absolute_sum(weights) for _, weights in parts) >= INT64_BOUND
    constant = 0
    gathered: dict[int, list[Part]] = {}
    for members, weights in parts:
        weights = weights.astype(object if wide else np.int64, copy=False)
        for reduced, kept in _reduced_rows(members, weights, domain):
            if reduced.shape[1] == 0:
                constant += int(kept.sum())
            else:
                gathered.setdefault(reduced.shape[1], []).append((reduced, kept))
    merged = [_merged(gathered[locality]) for locality in sorted(gathered)]
    blocks = tuple(block for block in merged if len(block))
    if wide and sum(absolute_sum(block.weights) for block in blocks) < INT64_BOUND:
        blocks = tuple(Block(block.members, block.weights.astype(np.int64)) for block in blocks)
    return constant, blocks


def _reduced_rows(members: NDArray[Any], weights: NDArray[Any], domain: str) -> Iterator[Part]:
    """Rows sorted, absent and repeated members taken out, grouped by the number of members left."""
    rows = np.sort(members.astype(np.int32, copy=False), axis=1)
    width = rows.shape[1]
    if width == 0 or (width == 1 and rows.min() >= 0):
        yield rows, weights
        return
    repeat = rows[:, 1:] == rows[:, :-1]
    plain = (rows[:, 0] >= 0) & ~repeat.any(axis=1)
    if plain.all():
        yield rows, weights
        return
    if plain.any():
        yield rows[plain], weights[plain]
    rows, weights, repeat = rows[~plain], weights[~plain], repeat[~plain]
    keep = rows >= 0
    keep[:, :-1] &= ~repeat
    if domain == "spin":
        odd = np.ones(len(rows), bool)
        for column in range(width):
            if column:
                odd = np.where(repeat[:, column - 1], ~odd, True)
            keep[:, column] &= odd
    left = keep.sum(axis=1)
    for locality in np.unique(left):
        chosen = left == locality
        yield rows[chosen][keep[chosen]].reshape(int(chosen.sum()), int(locality)), weights[chosen]


def _merged(parts: Sequence[Part]) -> Block:
    """Equal rows of one locality added up."""
    members = np.concatenate([part[0] for part in parts]) if len(parts) > 1 else parts[0][0]
    weights = np.concatenate([part[1] for part in parts]) if len(parts) > 1 else parts[0][1]
    keys = row_keys(members, int(members.max()) + 1)
    if not _strictly_increasing(keys):
        order = np.argsort(keys[0], kind="stable") if len(keys) == 1 else np.lexsort(keys[::-1])
        members, weights = members[order], weights[order]
        fresh = np.zeros(len(members), bool)
        fresh[0] = True
        for key in keys:
            key = key[order]
            fresh[1:] |= key[1:] != key[:-1]
        starts = np.flatnonzero(fresh)
        if len(starts) < len(members):
            members, weights = members[starts], np.add.reduceat(weights, starts)
    nonzero = weights != 0
    if not nonzero.all():
        members, weights = members[nonzero], weights[nonzero]
    if weights.dtype == object:
        weights = np.array([int(w) for w in weights], dtype=object)
    return Block(np.ascontiguousarray(members, dtype=np.int32), np.array(weights))


def row_keys(members: NDArray[Any], size: int) -> list[NDArray[np.int64]]:
    """Rows of positions below `size` as int64 keys, most significant first: row order is the order of the keys.

    Examples
    --------
    >>> [key.tolist() for key in row_keys(np.array([[0, 3], [1, 2]]), 10)]
    [[3, 12]]
    """
    size = max(size, 2)
    columns_per_key = 1
    while size ** (columns_per_key + 1) <= 2**63:
        columns_per_key += 1
    keys = []
    for start in range(0, members.shape[1], columns_per_key):
        key = members[:, start].astype(np.int64)
        for column in range(start + 1, min(start + columns_per_key, members.shape[1])):
            key = key * size + members[:, column]
        keys.append(key)
    return keys


def _strictly_increasing(keys: list[NDArray[np.int64]]) -> bool:
    return len(keys) == 1 and bool((keys[0][1:] > keys[0][:-1]).all())


def refuse_expansion(count: int, what: str) -> None:
    """Raise LimitError when `count` products would be written down, naming the number."""
    if count > EXPANSION_LIMIT:
        shown = f"{count:,}" if count < 10**15 else f"about 2**{count.bit_length() - 1}"
        raise LimitError(f"{what} would expand into {shown} products; at most {EXPANSION_LIMIT:,} are allowed")


def product_parts(
    left: Iterable[Part], right: Sequence[Part], what: str = "the product of the two models"
) -> list[Part]:
    """Every product of a term on the left with a term on the right.

    Raises
    ------
    LimitError
        More than ``EXPANSION_LIMIT`` products.
    """
    left = list(left)
    refuse_expansion(sum(len(w) for _, w in left) * sum(len(w) for _, w in right), what)
    bound = sum(absolute_sum(w) for _, w in left) * sum(absolute_sum(w) for _, w in right)
    kind = np.int64 if bound < INT64_BOUND else object
    parts = []
    for (first, u), (second, v) in itertools.product(left, right):
        members = np.hstack([np.repeat(first, len(v), axis=0), np.tile(second, (len(u), 1))])
        parts.append((members, np.multiply.outer(u.astype(kind), v.astype(kind)).ravel()))
    return parts


def coprime(resolution: Fraction, blocks: tuple[Block, ...]) -> tuple[Fraction, tuple[Block, ...]]:
    """The same terms with weights of greatest common divisor one."""
    if not blocks:
        return Fraction(1), ()
    common = math.gcd(*(int(np.gcd.reduce(block.weights)) for block in blocks))
    if common > 1:
        divided = [Block(block.members, block.weights // common) for block in blocks]
        narrow = sum(absolute_sum(block.weights) for block in divided) < INT64_BOUND
        kind = np.int64 if narrow else object
        blocks = tuple(Block(block.members, block.weights.astype(kind)) for block in divided)
    return resolution * common, blocks
