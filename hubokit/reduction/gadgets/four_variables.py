"""Any function of four spins with one auxiliary spin, in closed form.

Let s0 = 1 and L = l0 s0 + ... + l4 s4. Then min over y in {+1,-1} of y L = -|L|, and

    F = y L + (terms of |L| of at most two of s1..s4)

has P = minus the cubic and quartic terms of |L|. As |L| is even, these are its five coefficients at the four-subsets
of {0..4}; call t_i the one at the subset that leaves out i. To stand for a function with coefficients f_i there, t =
-f is needed. Flipping spins changes the signs of an even number of the f_i, so take them ascending in size with at
most the smallest negative: (+-u1, u2, ..., u5), 0 <= u1 <= ... <= u5.

Within a cone where sign L is a fixed threshold function, l -> t is linear. Of the seven kinds of cones (threshold
functions of five spins up to permutation and flips) only *majority* has full rank; there

    l_i = 2 (sum of f_j, j other than i),    least |L| = 4 (u2 +- u1),

which settles every function: that is the theorem of Dattani & Chau in closed form. Where the least |L| is 0 (a wall
of the cone), another kind has a free direction in which |L| grows without changing t:

    when                                  cone         least |L|
    u1 = u2, minus sign, or u2 = 0        2 2 1 1 1    4 (u3 - u1), or as asked
    u1 = u2 = u3 > 0, minus sign          3 2 2 1 1    4 (u4 - u1) or 8 u1, or as asked
    u1 = ... = u4 > 0, minus sign         2 1 1 1 0    4 (u5 - u1), or as asked
    u1 = ... = u5 > 0, minus sign         3 1 1 1 1    8 u1, or as asked
    u3 = 0                                1 1 1 0 0    as asked

The auxiliary gap is twice the least |L|: at least 8 units where the f_i are whole numbers, and exactly one best
setting for every state. Enumerated in the tests over every sign, order and coincidence of sizes.

Cost: one auxiliary, up to ten couplers, largest coefficient 2 (u2 + ... + u5) in the majority cone.

References
----------
Dattani, N., Chau, H. T. 2019, "All 4-variable functions can be perfectly quadratized with only 1 auxiliary
variable", arXiv:1910.13583 (the theorem). The closed form is derived here.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from itertools import combinations
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.numbers import INT64_BOUND, absolute_sum
from hubokit.reduction.gadgets.enumeration import all_values

SOURCE = "Dattani & Chau 2019; closed form derived here"

CONES = ((1, 1, 1, 1, 1), (2, 2, 1, 1, 1), (3, 2, 2, 1, 1), (2, 1, 1, 1, 0), (3, 1, 1, 1, 1), (1, 1, 1, 0, 0))
"""Threshold weights of the kinds of cones in use, in the order in which they are tried."""

PAIRS = tuple(combinations(range(5), 2))

UNIT = 16
"""Coefficients come out in sixteenths of the unit of f and of the margin."""


@dataclass(frozen=True)
class Forms:
    """Quadratic forms on s1..s4 and one auxiliary spin y, a row for each function.

    Parameters
    ----------
    linear : integer array, shape (m, 5)
        L in sixteenths: the coefficient of y, then those of y s1 ... y s4.
    pairs : integer array, shape (m, 10)
        Coefficients, in sixteenths, of the products ``PAIRS`` of s0 = 1, s1 ... s4: four fields, six couplers.
    constant : integer array, shape (m,)
        In sixteenths.
    margin : integer array, shape (m,)
        Least |L|, in the unit of f: half the auxiliary gap.
    """

    linear: npt.NDArray[Any]
    pairs: npt.NDArray[Any]
    constant: npt.NDArray[Any]
    margin: npt.NDArray[Any]


@cache
def _low_coefficients(cone: int) -> npt.NDArray[np.int64]:
    """Sixteen times the map from l to the coefficients of |L| at the empty set and at ``PAIRS``, shape (11, 5)."""
    states = all_values(5, "spin")
    sign = np.sign(states @ np.array(CONES[cone]))
    characters = [np.ones(32, np.int64), *(states[:, i] * states[:, j] for i, j in PAIRS)]
    sums = np.array([[(sign * character * states[:, k]).sum() for k in range(5)] for character in characters])
    return sums // 2


def four_variable_forms(functions: npt.NDArray[Any], margin: int) -> Forms:
    """Quadratic forms with one auxiliary spin for many functions of four spins at once.

    Parameters
    ----------
    functions : int64 or object array, shape (m, 5)
        Column 0: coefficient of s1 s2 s3 s4. Column i: coefficient of the product of three that leaves out s_i.
    margin : int
        Least |L| asked for, in the same unit, even: half the auxiliary gap. 0 allows ties.

    Returns
    -------
    Forms
        ``margin`` tells where less was reached than asked for.

    Examples
    --------
    >>> forms = four_variable_forms(np.array([[1, 0, 0, 0, 0]]), 2)
    >>> (forms.linear // 16).tolist(), forms.margin.tolist()
    ([[0, 4, 4, 4, 2]], [2])
    """
    f = np.asarray(functions)
    if (absolute_sum(f.ravel()) + abs(margin)) * 256 >= INT64_BOUND:
        f = f.astype(object)
    order = np.argsort(np.abs(f), axis=1, kind="stable")
    line = np.arange(len(f))[:, None]
    flips = np.where(f < 0, -1, 1)
    negative = np.prod(flips, axis=1) < 0
    flips[negative, order[negative, 0]] *= -1
    sizes = np.abs(f)[line, order]
    target = -sizes
    target[negative, 0] *= -1
    linear, cone, reached = _directions(target, margin)
    low = np.zeros((len(f), 11), f.dtype)
    for kind in range(len(CONES)):
        chosen = cone == kind
        low[chosen] = linear[chosen] @ _low_coefficients(kind).T.astype(f.dtype)
    back = np.argsort(order, axis=1)
    place = np.zeros((5, 5), np.int64)
    for number, (i, j) in enumerate(PAIRS):
        place[i, j] = place[j, i] = number + 1
    pairs = np.stack(
        [low[line[:, 0], place[back[:, i], back[:, j]]] * flips[:, i] * flips[:, j] for i, j in PAIRS], 1
    )
    return Forms(linear[line, back] * flips * UNIT, pairs, low[:, 0], reached)


def _directions(t: npt.NDArray[Any], margin: int) -> tuple[npt.NDArray[Any], npt.NDArray[np.int64], npt.NDArray[Any]]:
    """L, kind of cone and least |L| for targets sorted by size, ``t[:, 0]`` alone possibly positive."""
    options = [_majority(t), *(make(t, margin) for make in (_wall, _second_wall, _third_wall, _corner, _few))]
    linear = np.stack([option[0] for option in options])
    reached = np.stack([option[1] for option in options])
    enough = reached >= margin
    first = enough.argmax(axis=0)
    best = np.where(enough.any(axis=0), first, reached.argmax(axis=0)) if margin > 0 else np.zeros(len(t), np.int64)
    line = np.arange(len(t))
    return linear[best, line], best, reached[best, line]


Option = tuple[npt.NDArray[Any], npt.NDArray[Any]]


def _majority(t: npt.NDArray[Any]) -> Option:
    linear = 2 * t - 2 * t.sum(axis=1)[:, None]
    return linear, -4 * (t[:, 0] + t[:, 1])


def _where(possible: npt.NDArray[np.bool_], reached: npt.NDArray[Any]) -> npt.NDArray[Any]:
    """Least |L|, or -1 where the cone does not hold the target."""
    return np.where(possible, reached, -1)


def _wall(t: npt.NDArray[Any], margin: int) -> Option:
    a, b, c, d = t[:, 0], t[:, 2], t[:, 3], t[:, 4]
    total = margin - 4 * (b + c + d)
    linear = np.stack([total // 2 + 2 * a, total // 2 - 2 * a, -2 * (c + d), -2 * (b + d), -2 * (b + c)], 1)
    return linear, _where(a == -t[:, 1], np.minimum(margin, -4 * b - 4 * a))


def _second_wall(t: npt.NDArray[Any], margin: int) -> Option:
    a, b, c = t[:, 0], t[:, 3], t[:, 4]
    side = margin // 2 - 2 * (b + c)
    linear = np.stack([2 * side + 4 * a + 2 * b + 2 * c, side, side, 2 * (a - c), 2 * (a - b)], 1)
    least = np.minimum(np.minimum(margin, 8 * a), -4 * (a + b))
    return linear, _where((a > 0) & (a == -t[:, 1]) & (a == -t[:, 2]), least)


def _third_wall(t: npt.NDArray[Any], margin: int) -> Option:
    a, b = t[:, 0], t[:, 4]
    side = margin // 2 + 2 * (a - b)
    linear = np.stack([3 * side + 4 * b, side, side, side, 4 * a], 1)
    return linear, _where((a > 0) & (t[:, 1:4] == -a[:, None]).all(axis=1), np.minimum(margin, -4 * (a + b)))


def _corner(t: npt.NDArray[Any], margin: int) -> Option:
    a = t[:, 0]
    side = margin // 2 + 4 * a
    linear = np.stack([4 * side - 8 * a, side, side, side, side], 1)
    return linear, _where((a > 0) & (t[:, 1:] == -a[:, None]).all(axis=1), np.minimum(margin, 8 * a))


def _few(t: npt.NDArray[Any], margin: int) -> Option:
    b, c = t[:, 3], t[:, 4]
    side = margin - 2 * (b + c)
    linear = np.stack([side, side, side, -2 * c, -2 * b], 1)
    return linear, _where(t[:, 2] == 0, np.full(len(t), margin))
