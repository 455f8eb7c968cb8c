"""Long products of spins split into products of at most four, for small coefficients.

    w s1 ... sk = min over y, ... of  W - W y s1 s2 s3 + w y s4 ... sk,    W = |w| + gamma/2

y = s1 s2 s3 is best by 2W - 2|w| = gamma. The first product takes one auxiliary (spin_product.py), the second is
split again while it is longer than four.

Cost: 2 ceil((k - 4) / 2) + 1 auxiliaries, largest coefficient 2|w| + 3 gamma/2 at any k, where the direct form
reaches 2^(2l-1) |w|.

References
----------
Splitting by an auxiliary for part of a product: Dattani, N. 2019, arXiv:1901.04405. Shares derived here.
"""

from __future__ import annotations

from fractions import Fraction

from hubokit.reduction.gadgets.base import PROVABLE, Family, Keep, StandIn, joined, reweighted
from hubokit.reduction.gadgets.spin_product import spin_product


def spin_split(locality: int, sign: int, keep: Keep = "one-to-one") -> StandIn:
    """Stand-in for ``sign * |w| s1 ... sk``.

    Parameters
    ----------
    locality : int
        k, at least 3; up to 4 this is :func:`spin_product`.
    sign : int
        +1 or -1.
    keep : str
        Not needed here: gamma alone decides whether there are ties.

    Returns
    -------
    StandIn
        Any gamma reached.

    Examples
    --------
    >>> from fractions import Fraction
    >>> g = spin_split(9, 1)
    >>> g.auxiliaries, str(max(abs(v) for item, v in g.coefficients(Fraction(1), Fraction(0)).items() if item))
    (7, '2')
    """
    k = locality
    if k <= 4:
        return spin_product(k, sign, keep)
    # Positions of the joint stand-in: members, then y, then the auxiliaries of the two products. "joined" numbers
    # auxiliaries after the members, so y is taken as one more member until the sum is made.
    y = k
    first = reweighted(spin_product(4, -1, keep), 1, Fraction(1, 2))
    rest = spin_split(k - 2, sign, keep)
    both = joined(
        [(first, {0: 0, 1: 1, 2: 2, 3: y}), (rest, {i: i + 3 for i in range(k - 3)} | {k - 3: y})], k + 1, reach=None
    )
    by_weight, by_gap = dict(both.by_weight), dict(both.by_gap)
    by_weight[()] = by_weight.get((), Fraction(0)) + 1
    by_gap[()] = by_gap.get((), Fraction(0)) + Fraction(1, 2)
    return StandIn(k, both.auxiliaries + 1, by_weight, by_gap, True, None)


FAMILY = Family(
    "spin-split",
    "spin",
    lambda locality, sign: 5 <= locality <= PROVABLE,
    spin_split,
    "derived here; Dattani 2019",
)
