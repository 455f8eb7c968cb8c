"""Arithmetic of the audit: polynomials as dictionaries, and two ways to a least value, in plain Python numbers.

A polynomial maps sorted tuples of positions to integers or fractions. A variable has two values, one for each
bit: bit 0 is spin +1 or boolean 0, bit 1 is spin -1 or boolean 1.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from itertools import combinations, product
from math import comb, prod
from typing import Any

Key = tuple[int, ...]
Poly = dict[Key, Any]

#: Elementary operations that one audit may take, products of one polynomial, and bits of one table.
MOST_WORK, MOST_TERMS, MOST_BITS = 2**29, 2_000_000, 16


class TooLarge(Exception):  # noqa: N818 - it is an answer, not a fault of the document
    """The audit will not re-check this; the message says the size."""


class Work:
    """A count of elementary operations that stops when they are too many."""

    def __init__(self) -> None:
        self.done = 0

    def spend(self, operations: int) -> None:
        """Count, before they are made."""
        self.done += operations
        if self.done > MOST_WORK:
            raise TooLarge(f"it takes more than {MOST_WORK:,} operations")


def values_of(domain: str) -> tuple[int, int]:
    """The values of bit 0 and bit 1."""
    return (1, -1) if domain == "spin" else (0, 1)


def add(poly: Poly, key: Iterable[int], value: Any) -> None:
    """Add to a coefficient, dropping zeros."""
    key = tuple(sorted(key))
    total = poly.get(key, 0) + value
    if total:
        poly[key] = total
        if len(poly) > MOST_TERMS:
            raise TooLarge(f"a polynomial of more than {MOST_TERMS:,} terms")
    else:
        poly.pop(key, None)


def times(first: Poly, second: Poly, domain: str) -> Poly:
    """The product, with s*s = 1 and x*x = x."""
    if len(first) * len(second) > MOST_TERMS:
        raise TooLarge(f"a product of {len(first):,} by {len(second):,} terms")
    found: Poly = {}
    for one, left in first.items():
        for two, right in second.items():
            add(found, set(one) ^ set(two) if domain == "spin" else set(one) | set(two), left * right)
    return found


def value_at(poly: Poly, state: Sequence[int]) -> Any:
    """The value at a state, a sequence of values by position."""
    return sum(weight * prod(state[position] for position in key) for key, weight in poly.items())


def interpolated(table: Sequence[Any], classes: Sequence[Sequence[int]], domain: str, work: Work) -> Poly:
    """The polynomial whose value depends only on how many bits are set in each class of variables.

    The table is in the order of ``product(range(len(class) + 1) for each class)``: with classes of one variable each
    it runs over all settings, the first variable most significant.

    >>> interpolated([0, 0, 0, -1], [[4], [7]], "boolean", Work())
    {(4, 7): -1}
    >>> interpolated([0, 0, 1], [[4, 7]], "boolean", Work())
    {(4, 7): 1}
    """
    sizes = [len(one) for one in classes]
    found = dict(zip(product(*(range(d + 1) for d in sizes)), table, strict=True))
    for axis, d in enumerate(sizes):  # the coefficient of j chosen variables, from the values at k set bits
        work.spend(len(found) * (d + 1) + (d + 1) ** 3)
        weight = [[_weight(domain, d, j, k) for k in range(d + 1)] for j in range(d + 1)]
        fresh: dict[Key, Any] = {}
        for ks, value in found.items():
            for j in range(d + 1) if value else ():
                at = (*ks[:axis], j, *ks[axis + 1 :])
                fresh[at] = fresh.get(at, 0) + weight[j][ks[axis]] * value
        found = fresh
    poly: Poly = {}
    for js, value in found.items():
        if value:
            work.spend(prod(map(comb, sizes, js)))
            whole = Fraction(value, 2 ** sum(sizes)) if domain == "spin" else value
            for parts in product(*map(combinations, classes, js)):
                add(poly, sum(parts, ()), whole)
    return poly


def _weight(domain: str, d: int, j: int, k: int) -> int:
    """What the value at k set bits of d gives to the coefficient of j variables (for spins times 2^d)."""
    if domain == "boolean":
        return (-1) ** (j - k) * comb(j, k) if k <= j else 0
    return sum((-1) ** i * comb(j, i) * comb(d - j, k - i) for i in range(min(j, k) + 1))


def least(functions: Iterable[tuple[Key, Sequence[Any]]], work: Work) -> Any:
    """The least value of a sum of functions (bits, table) of few bits each, one bit after the other eliminated.

    >>> least([((0, 1), [0, 1, 2, 3]), ((1,), [5, 0])], Work())
    1
    """
    left, total = list(functions), 0
    while left:
        near: dict[int, set[int]] = {}
        for bits, _ in left:
            for bit in bits:
                near.setdefault(bit, set()).update(bits)
        if not near:
            return total + sum(table[0] for _, table in left)
        bit = min(near, key=lambda one: (len(near[one]), one))
        scope = (bit, *sorted(near[bit] - {bit}))
        if len(scope) > MOST_BITS:
            raise TooLarge(f"a minimum over tables of {len(scope)} bits")
        mine, left = [one for one in left if bit in one[0]], [one for one in left if bit not in one[0]]
        work.spend(len(mine) << len(scope))
        places = [[1 << (len(bits) - 1 - bits.index(one)) if one in bits else 0 for one in scope] for bits, _ in mine]
        sums = [
            sum(
                table[sum(step for step, set_ in zip(steps, setting, strict=True) if set_)]
                for steps, (_, table) in zip(places, mine, strict=True)
            )
            for setting in product((0, 1), repeat=len(scope))
        ]
        half = len(sums) // 2
        left.append((scope[1:], [min(pair) for pair in zip(sums[:half], sums[half:], strict=True)]))
    return total


def least_and_count(cost: Sequence[Any], pairs: Sequence[Sequence[Any]], work: Work) -> tuple[Any, int]:
    """The least value of ``sum cost[i] b_i + sum over i < k of pairs[i][k] b_i b_k`` and how many b reach it.

    Bits are turned round, so that b = 0 is the best setting met so far, until no set of flips pays.

    >>> least_and_count([1, 1, -1], [[0, -3, 0], [-3, 0, 0], [0, 0, 0]], Work())
    (-2, 1)
    """
    cost, rows, low = list(cost), [list(row) for row in pairs], 0
    while True:
        work.spend(len(cost) ** 2)
        steepest = min(range(len(cost)), key=cost.__getitem__, default=0)
        better, count = ([steepest], 0) if cost and cost[steepest] < 0 else _ties(cost, rows, work)
        if not better:
            return low, count
        for i in better:
            low += cost[i]
            cost[i] = -cost[i]
            for k, both in enumerate(rows[i]):
                cost[k] += both
                rows[i][k] = rows[k][i] = -both


def _ties(cost: list[Any], pairs: list[list[Any]], work: Work) -> tuple[list[int], int]:
    """A set of flips that costs less than nothing; or none, and how many sets (the empty one too) cost nothing.

    A set that holds those taken and otherwise draws from the free ones costs at least the cost of those taken +
    the sum over free u of min(0, cost of u + half of its negative pairs among the free): each negative pair is
    divided between its two ends. What costs more than nothing by this bound is left.
    """
    count = 0
    negative = [[min(0, both) for both in row] for row in pairs]
    waiting: list[tuple[Any, list[int], list[int], list[Any], list[Any]]] = [
        (0, [], list(range(len(cost))), cost, [sum(row) for row in negative])
    ]
    while waiting:
        taken_cost, taken, free, cost, shared = waiting.pop()
        work.spend(len(free) + 1)
        bound = {u: 2 * cost[u] + shared[u] for u in free}  # twice the bound: no halves
        if 2 * taken_cost + sum(min(0, value) for value in bound.values()) > 0:
            continue
        if taken_cost < 0:
            return taken, 0
        u = min(free, key=bound.__getitem__, default=-1)
        if u < 0 or bound[u] > 0:
            count += taken_cost == 0
            continue
        rest = [one for one in free if one != u]
        fewer = [share - part for share, part in zip(shared, negative[u], strict=True)]
        after = [one + both for one, both in zip(cost, pairs[u], strict=True)]
        waiting.append((taken_cost, taken, rest, cost, fewer))
        waiting.append((taken_cost + cost[u], [*taken, u], rest, after, fewer))
    return [], count
