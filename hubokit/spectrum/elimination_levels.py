"""The lowest levels of a sparse model with exact degeneracies: every table entry keeps a short list.

An entry's list holds the smallest distinct excesses (ascending, the first is 0 wherever a completion exists) and the
number of completions at each. Lists of independent parts combine by adding excesses and multiplying numbers; the two
values of a variable combine by merging. Numbers are taken modulo a prime, one sweep a prime, unless 2**n fits; that a
level exists is said by its excess, never by its number.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np

from hubokit.model.compiling import compiled as compile_loop
from hubokit.spectrum.elimination_counts import from_residues, primes_beyond
from hubokit.spectrum.elimination_kernels import COMPILED_FROM, Table, partner_index
from hubokit.spectrum.elimination_tables import Elimination

MACHINE_BITS = 61
"""Models of at most this many variables are counted without residues: 2**n fits."""


def lowest_levels(elimination: Elimination, count: int) -> list[tuple[int, int]]:
    """Excesses above the ground energy, ascending, and the number of states at each.

    Parameters
    ----------
    elimination : Elimination
    count : int
        How many levels at most.

    Returns
    -------
    list of (int, int)
        Excess in the problem's units (0 first) and degeneracy; shorter when the model has fewer levels.

    Examples
    --------
    >>> from hubokit.model.terms import Block
    >>> from hubokit.spectrum.elimination_order import elimination_order
    >>> from hubokit.spectrum.elimination_tables import Problem, eliminate
    >>> ring = Block(np.array([[0, 1], [0, 2], [1, 2]], np.int32), np.array([1, 1, 1]))
    >>> order = elimination_order(3, [ring], widest=22)
    >>> lowest_levels(eliminate(Problem("spin", 3, (ring,)), order), 5)
    [(0, 6), (4, 2)]
    """
    size = len(elimination.order.variables)
    if size <= MACHINE_BITS:
        return _sweep(elimination, count, 0)
    primes = primes_beyond(_bound(elimination, count))
    sweeps = [_sweep(elimination, count, prime) for prime in primes]
    excesses = [excess for excess, _ in sweeps[0]]
    numbers = [from_residues([sweep[k][1] for sweep in sweeps], primes) for k in range(len(excesses))]
    return list(zip(excesses, numbers, strict=True))


def _bound(elimination: Elimination, count: int) -> int:
    """A number that no degeneracy exceeds: 2**n, or less by a sweep in floats.

    All numbers are positive, so every one of the fewer than 2**40 operations behind a degeneracy adds at most 2**-53
    to its relative error: twice the float is a proven bound.
    """
    size = len(elimination.order.variables)
    if size > 1000:
        return 1 << size
    largest = max(number for _, number in _sweep(elimination, count, 0, np.float64))
    return min(1 << size, 2 * largest)


def _sweep(
    elimination: Elimination, count: int, prime: int, number_kind: type[Any] = np.int64
) -> list[tuple[int, int]]:
    separators = elimination.order.separators
    wide = any(difference.dtype == object for difference in elimination.differences)
    kind = object if wide else np.int64
    waiting: list[list[tuple[tuple[int, ...], Table, Table]]] = [[] for _ in separators]
    excess, number = _identity(1, count, kind, number_kind)
    here = np.zeros(1, np.int64)
    combine, merge = _loops(elimination.order.entries * count >= COMPILED_FROM and not wide)
    for rank, separator in enumerate(separators):
        entries = 2 << len(separator)
        table, numbers = _identity(entries, count, kind, number_kind)
        for place, (scope, other, other_numbers) in enumerate(waiting[rank]):
            high, low = partner_index(scope, (rank, *separator))
            if place == 0:
                partners = (high[:, None] + low).ravel()
                np.take(other, partners, axis=0, out=table)
                np.take(other_numbers, partners, axis=0, out=numbers)
                continue
            combine(table, numbers, other, other_numbers, high, low, prime)
        waiting[rank] = []
        difference = elimination.differences[rank].astype(kind, copy=False)
        merge(table, numbers, difference, prime)
        half = len(difference)
        if separator:
            waiting[separator[0]].append((separator, table[:half].copy(), numbers[:half].copy()))
        else:
            combine(excess, number, table, numbers, here, here, prime)
    return [(int(e), int(k)) for e, k in zip(excess[0], number[0], strict=True) if e >= 0]


def _identity(entries: int, count: int, kind: type[Any], number_kind: type[Any]) -> tuple[Table, Table]:
    """Lists with one completion at excess 0; an excess of -1 means that the list has ended."""
    excess: Table = np.full((entries, count), -1, dtype=kind)
    number: Table = np.zeros((entries, count), dtype=number_kind)
    excess[:, 0] = 0
    number[:, 0] = 1
    return excess, number


@cache
def _loops(compiled: bool) -> tuple[Callable[..., None], Callable[..., None]]:
    if not compiled:
        return _combine, _merge
    return compile_loop(_combine, nogil=True), compile_loop(_merge, nogil=True)


def _combine(
    table: Table, numbers: Table, other: Table, other_numbers: Table, high: Table, low: Table, prime: int
) -> None:
    """Every list of `table` becomes the list of sums with its partner in `other`, equal sums counted together.

    The sum of the a-th and the b-th element has at least a + b smaller ones: pairs with a + b >= count are skipped.
    """
    count = table.shape[1]
    sums, products = np.empty(count, table.dtype), np.empty(count, numbers.dtype)
    for row in range(len(high)):
        for column in range(len(low)):
            i, j = row * len(low) + column, high[row] + low[column]
            filled = 0
            for a in range(count):
                if table[i, a] < 0:
                    break
                for b in range(count - a):
                    if other[j, b] < 0:
                        break
                    total = table[i, a] + other[j, b]
                    product = numbers[i, a] * other_numbers[j, b]
                    if prime > 0:
                        product %= prime
                    place = filled
                    while place > 0 and sums[place - 1] > total:
                        place -= 1
                    if place > 0 and sums[place - 1] == total:
                        products[place - 1] += product
                    elif place < count:
                        filled = min(filled + 1, count)
                        for k in range(filled - 1, place, -1):
                            sums[k], products[k] = sums[k - 1], products[k - 1]
                        sums[place], products[place] = total, product
            for k in range(filled):
                table[i, k] = sums[k]
                numbers[i, k] = products[k] % prime if prime > 0 else products[k]
            for k in range(filled, count):
                table[i, k], numbers[i, k] = -1, 0


def _merge(table: Table, numbers: Table, difference: Table, prime: int) -> None:
    """The first half of `table` becomes the merged lists of both values of the variable, excesses added."""
    count, half = table.shape[1], len(difference)
    sums, totals = np.empty(count, table.dtype), np.empty(count, numbers.dtype)
    for i in range(half):
        first, second = max(0, -difference[i]), max(0, difference[i])
        a = b = filled = 0
        while filled < count:
            left = a < count and table[i, a] >= 0
            right = b < count and table[half + i, b] >= 0
            if not left and not right:
                break
            here = table[i, a] + first if left else table[half + i, b] + second
            if right:
                here = min(here, table[half + i, b] + second)
            number = 0
            if left and table[i, a] + first == here:
                number += numbers[i, a]
                a += 1
            if right and table[half + i, b] + second == here:
                number += numbers[half + i, b]
                b += 1
            sums[filled] = here
            totals[filled] = number % prime if prime > 0 else number
            filled += 1
        for k in range(filled):
            table[i, k], numbers[i, k] = sums[k], totals[k]
        for k in range(filled, count):
            table[i, k], numbers[i, k] = -1, 0
