"""The least energy of a few dozen coupled bits and the number of settings that reach it, by branch and bound.

Seen from a good setting, another one is a set S of flips with the excess sum of l_i over S + sum of Q_ik
over pairs in S. Half of each negative Q_ik is laid at either end: a set of flips that holds I and otherwise
draws from U costs at least excess(I) + sum over u in U of min(0, g_u + 1/2 sum over k in U of min(0, Q_uk)),
with g_u the cost of flipping u after I. What costs more than nothing by this bound is left; flips that come
out below nothing give a better setting, from which the search begins again.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

Matrix = Sequence[Sequence[int]]


def least_and_count(linear: Sequence[int], quadratic: Matrix, spend: Callable[[int], None]) -> tuple[int, int]:
    """Least value of ``sum linear[i] b_i + sum over i < k of quadratic[i][k] b_i b_k`` and how many b reach it.

    Parameters
    ----------
    linear : sequence of int
    quadratic : sequence of sequences of int
        Symmetric, diagonal 0.
    spend : callable
        Told of the operations of every node; raises when they are too many.

    Examples
    --------
    >>> least_and_count([1, 1, -1], [[0, -3, 0], [-3, 0, 0], [0, 0, 0]], lambda operations: None)
    (-2, 1)
    """
    n = len(linear)
    bits = [0] * n
    field = list(linear)
    while True:
        flips = [-f if b else f for f, b in zip(field, bits, strict=True)]
        worst = min(range(n), key=flips.__getitem__, default=-1)
        spend(n)
        if worst >= 0 and flips[worst] < 0:
            _flip(worst, bits, field, quadratic)
            continue
        signs = [1 - 2 * b for b in bits]
        Q = [[q * s * t for q, t in zip(row, signs, strict=True)] for row, s in zip(quadratic, signs, strict=True)]
        spend(n * n)
        better, count = _explored(flips, Q, spend)
        if better is None:
            energy = sum(f for f, b in zip(linear, bits, strict=True) if b)
            pairs = sum(quadratic[i][k] for i in range(n) for k in range(i) if bits[i] and bits[k])
            return energy + pairs, count
        for i in better:
            _flip(i, bits, field, quadratic)


def _flip(i: int, bits: list[int], field: list[int], quadratic: Matrix) -> None:
    """Flip one bit and bring the fields of the others up to date."""
    change = 1 - 2 * bits[i]
    bits[i] ^= 1
    for k, q in enumerate(quadratic[i]):
        if q:
            field[k] += change * q


def _explored(flips: list[int], Q: list[list[int]], spend: Callable[[int], None]) -> tuple[list[int] | None, int]:
    """Flips that lower the energy, or None and the number of flip sets (none included) that leave it as it is."""
    count = 0
    negative = [[min(0, q) for q in row] for row in Q]
    shares = [sum(row) for row in negative]
    waiting = [(0, [0] * 0, list(range(len(flips))), flips, shares)]
    while waiting:
        excess, taken, free, cost, shares = waiting.pop()
        spend(len(free) + 1)
        least = {u: 2 * cost[u] + shares[u] for u in free}
        if 2 * excess + sum(value for value in least.values() if value < 0) > 0:
            continue
        if excess < 0:
            return taken, 0
        branch = min(free, key=least.__getitem__, default=-1)
        if branch < 0 or least[branch] > 0:
            count += excess == 0
            continue
        rest = [u for u in free if u != branch]
        fewer = [share - part for share, part in zip(shares, negative[branch], strict=True)]
        after = [c + q for c, q in zip(cost, Q[branch], strict=True)]
        waiting.append((excess, taken, rest, cost, fewer))
        waiting.append((excess + cost[branch], [*taken, branch], rest, after, fewer))
    return None, count
