"""Derivative tables: everything the Gray-code walk adds up, laid out for one slab.

Of the n bits of a packed state the lowest L are *low* (all 2**L settings are held as one vector), the next H are
*walked* in Gray-code order, and the rest are *fixed*: they number the slab. Step t of the walk (t = 1, 2, ...)
flips the walked bit j1 that is the lowest set bit of t. For a set S of walked bits, D_S is the derivative of the
polynomial in all bits of S (value with the bit 1 minus value with the bit 0, one bit after the other), a vector
over the low bits. Between two flips of j1 exactly one walked bit above j1 flips once, and it is j2, the second set
bit of t; and so on upwards. So step t brings up to date the tables D_{j1}, D_{j1 j2}, D_{j1 j2 j3}, ... for the
set bits j1 < j2 < ... of t, the longest first, each from the next, and then adds D_{j1} to the energies
(Bouillaguet et al. 2010, over GF(2)).

Kept here is not D_S but its signed increment U_S. The flip of j has sign -1 exactly when bit j + 1 of t is set, so
that within a set all signs but the last are fixed by the set itself, and the last alternates. Therefore

    U_S(new) = U_{S + next}(new) - U_S(old)

without any multiplication. Before the first use a table holds -U_S, evaluated at the walked bits ``(S >> 1) & ~S``.

The part of D_S that depends on no low bit is one number and is kept apart; a table of 2**L entries exists only
where some term of S also has a low member. Sets that no term contains do not exist. All arithmetic is modulo a
power of two: no table needs to fit its type, only the energies do (and they do by the bound on the weights).

References
----------
Ch. Bouillaguet et al., "Fast exhaustive search for polynomial systems in F2", CHES 2010.
"""

from __future__ import annotations

import hashlib
import threading
from dataclasses import dataclass
from math import comb
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.errors import LimitError
from hubokit.spectrum.polynomial import Polynomial, absolute_sum

SUBSET_LIMIT = 2**24
"""Most (term, set of walked members) pairs that are written down."""

TABLE_BYTES = 2**26
"""Most bytes of tables of one slab, beyond which fewer low bits are tried."""

_PLANS = 64


@dataclass(frozen=True)
class Layout:
    """How the bits of a packed state are used: low, walked and fixed ones, from the least significant up."""

    low: int
    walked: int
    fixed: int

    @property
    def slabs(self) -> int:
        """Number of slabs."""
        return 1 << self.fixed

    @property
    def blocks(self) -> int:
        """Number of vectors in a slab."""
        return 1 << self.walked


@dataclass
class Tables:
    """The tables of one slab (or of several polynomials walked together), changed by the walk.

    Attributes
    ----------
    rows : int array, shape (V, 2**L)
        Vectors; ``rows[row[root]]`` are the energies (less the root's number) of the current block.
    row : int32 array, shape (N,)
        Row of each node, -1 where it has none. A node stands for a set S; node of the empty set: the root.
    child : int32 array, shape (N, H)
        Node of S with one higher bit added, or -1.
    number : int64 array, shape (N,)
        The part that no low bit changes.
    sign : int64 array, shape (N,)
        +1 or -1, the factor of the row; it changes only where the row itself never does.
    steady : int8 array, shape (N,)
        1 where no child has a row.
    roots : int64 array
        The root of each polynomial.
    """

    rows: npt.NDArray[Any]
    row: npt.NDArray[np.int32]
    child: npt.NDArray[np.int32]
    number: npt.NDArray[np.int64]
    sign: npt.NDArray[np.int64]
    steady: npt.NDArray[np.int8]
    roots: npt.NDArray[np.int64]


def integer_type(polynomial: Polynomial, layout: Layout, factor: int = 1) -> type[np.signedinteger[Any]]:
    """The narrowest type that holds every energy of a vector: terms with a low member, times `factor`.

    A vector holds only terms with low members; their absolute weights bound it at every moment of the walk.
    """
    low = polynomial.masks & ((np.int64(1) << layout.low) - 1)
    bound = absolute_sum(polynomial.weights[low != 0]) * factor
    for kind in (np.int16, np.int32):
        if bound <= np.iinfo(kind).max:
            return kind
    return np.int64


@dataclass(frozen=True)
class Plan:
    """What the tables of all slabs have in common: the nodes, and the coefficients before the fixed bits have values.

    Coefficients come as rows of `entries`: the row (or, in `numbers`, the node) that they belong to, their low
    members, the fixed members of their term, and their value for fixed bits that are all 0 (spins) or where the
    fixed members are all 1 (booleans; elsewhere they vanish).
    """

    row: npt.NDArray[np.int32]
    child: npt.NDArray[np.int32]
    steady: npt.NDArray[np.int8]
    entries: tuple[npt.NDArray[np.int64], ...]
    numbers: tuple[npt.NDArray[np.int64], ...]


def plan_of(polynomial: Polynomial, layout: Layout) -> Plan:
    """The plan of a polynomial; the last few are remembered.

    Raises
    ------
    LimitError
        Terms with so many walked members that their subsets cannot be written down.
    """
    found = hashlib.blake2b(f"{polynomial.size} {polynomial.spin} {layout} {len(polynomial.masks)} ".encode())
    found.update(np.ascontiguousarray(polynomial.masks).tobytes())
    found.update(np.ascontiguousarray(polynomial.weights).tobytes())
    key = found.digest()
    with _lock:
        plan = _plans.pop(key, None) or _planned(polynomial, layout)
        _plans[key] = plan
        while len(_plans) > _PLANS:
            del _plans[next(iter(_plans))]
    return plan


_plans: dict[bytes, Plan] = {}
_lock = threading.Lock()


def _planned(polynomial: Polynomial, layout: Layout) -> Plan:
    low, walked, fixed = parted(polynomial.masks, layout)
    sets, owner = _subsets(walked)
    nodes, node = _distinct(sets, layout.walked)
    low, fixed, rest = low[owner], fixed[owner], walked[owner] ^ sets
    plain = low == 0
    has_row = np.zeros(len(nodes), bool)
    has_row[0] = True
    has_row[node[~plain]] = True
    row = np.where(has_row, np.cumsum(has_row) - 1, -1).astype(np.int32)
    child, steady = _family(nodes, row, layout.walked)

    start = (sets >> 1) & ~sets
    flips = np.bitwise_count(sets & (sets >> 1)) + (sets != 0)
    if polynomial.spin:
        order = np.bitwise_count(sets)
        odd = (np.bitwise_count(rest & start) + order + flips) & 1
        value = polynomial.weights[owner] << order.astype(np.int64)
    else:
        odd = flips & 1
        value = polynomial.weights[owner] * (rest & ~start == 0)
    value = np.where(odd, -value, value)
    vector, number = ~plain & (value != 0), plain & (value != 0)
    return Plan(
        row=row,
        child=child,
        steady=steady,
        entries=(row[node[vector]].astype(np.int64), low[vector], fixed[vector], value[vector]),
        numbers=(node[number], low[number], fixed[number], value[number]),
    )


def tables_of(polynomial: Polynomial, layout: Layout, slab: int, kind: type[np.signedinteger[Any]]) -> Tables:
    """The tables of one slab, before its first step.

    Parameters
    ----------
    polynomial : Polynomial
        int64 weights of absolute sum below 2**62.
    layout : Layout
        ``low + walked + fixed`` is the number of variables.
    slab : int
        The setting of the fixed bits.
    kind : integer type
        Of the rows; see `integer_type`.

    Raises
    ------
    LimitError
        Terms with so many walked members that their subsets cannot be written down.
    """
    from hubokit.spectrum import kernels

    plan = plan_of(polynomial, layout)
    rows = np.zeros((int((plan.row >= 0).sum()), 1 << layout.low), kind)
    number = np.zeros((len(plan.row), 1), np.int64)
    kernels.place(rows, *plan.entries, slab, polynomial.spin)
    kernels.place(number, *plan.numbers, slab, polynomial.spin)
    kernels.transform(rows, polynomial.spin)
    return Tables(
        rows=rows,
        row=plan.row,
        child=plan.child,
        number=number[:, 0].copy(),
        sign=np.ones(len(plan.row), np.int64),
        steady=plan.steady,
        roots=np.zeros(1, np.int64),
    )


def table_count(polynomial: Polynomial, layout: Layout, enough: int) -> int:
    """Number of vectors that a slab needs, or a bound on it that is below `enough`."""
    low, walked, _ = parted(polynomial.masks, layout)
    walked = np.unique(walked[low != 0])
    most = int(np.bitwise_count(walked).max(initial=0))
    bound = sum(comb(layout.walked, order) for order in range(most + 1))
    if bound <= enough:
        return bound
    return len(np.unique(_subsets(walked)[0]))


def parted(masks: npt.NDArray[np.int64], layout: Layout) -> tuple[npt.NDArray[np.int64], ...]:
    """Low, walked and fixed members of packed sets, each counted from its own lowest bit."""
    low = masks & ((np.int64(1) << layout.low) - 1)
    walked = (masks >> layout.low) & ((np.int64(1) << layout.walked) - 1)
    return low, walked, masks >> (layout.low + layout.walked)


def together(parts: list[Tables]) -> Tables:
    """Several polynomials in the same bits, as one set of tables with one root each."""
    nodes = np.cumsum([0] + [len(part.row) for part in parts])
    rows = np.cumsum([0] + [len(part.rows) for part in parts])
    return Tables(
        rows=np.concatenate([part.rows for part in parts]),
        row=np.concatenate([np.where(p.row < 0, -1, p.row + r) for p, r in zip(parts, rows, strict=False)]).astype(
            np.int32
        ),
        child=np.concatenate(
            [np.where(p.child < 0, -1, p.child + n) for p, n in zip(parts, nodes, strict=False)]
        ).astype(np.int32),
        number=np.concatenate([part.number for part in parts]),
        sign=np.concatenate([part.sign for part in parts]),
        steady=np.concatenate([part.steady for part in parts]),
        roots=nodes[:-1].astype(np.int64),
    )


def _subsets(masks: npt.NDArray[np.int64]) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.int64]]:
    """Every subset of every mask, and which mask it is of."""
    sizes = np.bitwise_count(masks).astype(np.int64)
    most = int(sizes.max(initial=0))
    total = sum(int(count) << size for size, count in enumerate(np.bincount(sizes).tolist()))
    if most > 24 or total > SUBSET_LIMIT:
        raise LimitError(
            f"products of up to {most} walked variables have {total:,} derivatives; {SUBSET_LIMIT:,} are the most: "
            "elimination does without them where the model is sparse"
        )
    sets = np.zeros(len(masks), np.int64)
    rest, owner = masks.copy(), np.arange(len(masks))
    for _ in range(most):
        lowest = rest & -rest
        more = lowest != 0
        sets = np.concatenate([sets, sets[more] | lowest[more]])
        owner = np.concatenate([owner, owner[more]])
        rest = np.concatenate([rest ^ lowest, (rest ^ lowest)[more]])
    return sets, owner


def _distinct(sets: npt.NDArray[np.int64], walked: int) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.int64]]:
    """The distinct sets, ascending and with the empty one, and the place of each set among them."""
    if walked > 22:
        nodes, node = np.unique(np.concatenate([np.zeros(1, np.int64), sets]), return_inverse=True)
        return nodes, node[1:]
    seen = np.zeros(1 << walked, bool)
    seen[0] = True
    seen[sets] = True
    return np.flatnonzero(seen), (np.cumsum(seen) - 1)[sets]


def _family(
    nodes: npt.NDArray[np.int64], row: npt.NDArray[np.int32], walked: int
) -> tuple[npt.NDArray[np.int32], npt.NDArray[np.int8]]:
    """Children of every node, and which nodes have no child with a row."""
    child = np.full((len(nodes), max(walked, 1)), -1, np.int32)
    steady = np.ones(len(nodes), np.int8)
    if len(nodes) > 1:
        inner = nodes[1:]
        # nodes are sorted and all subsets exist: the parent (the set without its highest bit) is found by bisection
        top = np.zeros(len(inner), np.int64)
        for bit in range(walked):
            top[inner >> bit != 0] = bit
        parent = np.searchsorted(nodes, inner ^ (np.int64(1) << top))
        child[parent, top] = np.arange(1, len(nodes), dtype=np.int32)
        steady[parent[row[1:] >= 0]] = 0
    return child, steady
