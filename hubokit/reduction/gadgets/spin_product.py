"""Products of any number of spins with ceil(log2 k) - 1 auxiliary spins, without going through booleans.

Set one member r aside. With l = ceil(log2 k) - 1 auxiliaries and C = 0 (k even) or 1 (k odd), let

    U = (sum of the other k-1 members) - sum_{i=1..l} 2^i y_i - C.

U is odd; the auxiliaries move it in steps of 4, and they bring it to +1 or -1, whichever its class holds: then U is
the product of the k-1 members up to a fixed sign. Hence, with a sign e chosen from that of w,

    w s1 ... sk = min over y of  (alpha/4) (U^2 - 1) - e |w| r U,     alpha = 2|w| + gamma/2.

The best U of a class costs gamma less than the next (2 alpha - 4|w| = gamma), and each U is reached by one setting:
ties at gamma = 0 only. For k = 3 and 4 the largest coefficient is 2|w| + gamma/2 (2, 2.5 and 3 for |w| = 1 and
gamma = 0, 1, 2), the least possible with one auxiliary.

Cost: l auxiliaries, all couplers among k + l spins, the largest coefficient alpha * 2^(2l-2).

References
----------
Derived here; the same strengths are published for four-body parity couplers (Dattani 2019, arXiv:1901.04405, lists
the handbook forms).
"""

from __future__ import annotations

from fractions import Fraction

from hubokit.reduction.gadgets.base import Family, Keep, Polynomial, StandIn


def spin_product(locality: int, sign: int, keep: Keep = "one-to-one") -> StandIn:
    """Stand-in for ``sign * |w| s1 ... sk``.

    Parameters
    ----------
    locality : int
        k, at least 3.
    sign : int
        +1 or -1.
    keep : str
        Not needed here: gamma alone decides whether there are ties.

    Returns
    -------
    StandIn
        ceil(log2 k) - 1 auxiliaries, any gamma reached.

    Examples
    --------
    >>> from fractions import Fraction
    >>> g = spin_product(4, 1)
    >>> [str(g.coefficients(Fraction(1), Fraction(gap))[0, 4]) for gap in range(3)]
    ['-2', '-5/2', '-3']
    """
    k = locality
    count = (k - 1).bit_length() - 1
    odd = k % 2
    slopes = dict.fromkeys(range(k - 1), 1) | {k + i - 1: -(2**i) for i in range(1, count + 1)}
    U = Polynomial.linear(slopes, -odd)
    # U = +1 or -1 is (-1)^(t + number of down spins) with t fixed by the class of U at the all-up state.
    highest = k - 1 - odd
    parity = 1 if highest % 4 == (2 ** (count + 1) - 2 + 1) % 4 else -1
    square = U.times(U, "spin").plus({(): Fraction(-1)})
    product = U.times({(k - 1,): Fraction(1)}, "spin")
    by_weight = Polynomial().plus(square, Fraction(1, 2)).plus(product, sign * parity)
    by_gap = Polynomial().plus(square, Fraction(1, 8))
    return StandIn(k, count, by_weight.trimmed(), by_gap.trimmed(), True, None)


FAMILY = Family(
    "spin-product",
    "spin",
    lambda locality, sign: locality >= 3,
    spin_product,
    "derived here; Dattani 2019 lists the forms of three and four spins",
)

BALANCED = Family(
    "spin-product-balanced",
    "spin",
    lambda locality, sign: locality >= 3 and locality % 2 == 1,
    spin_product,
    "derived here",
    alternate=True,
)
"""The same with C = 1 and C = -1 in turn, so that the fields which odd products need cancel between terms."""
