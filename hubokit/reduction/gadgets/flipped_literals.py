"""Positive boolean monomials turned into negative ones by flipping one literal at a time.

    x1 ... xd = x1 x2 - sum_{j=3..d} x1 ... x(j-1) (1 - xj)

Each negative monomial takes one auxiliary (negative_monomial.py) and sees the flipped literal as 1 - xj. For d = 3
this is one auxiliary with three couplers beside x1 x2, where the direct forms need three couplers among the members.

Cost: d - 2 auxiliaries, d(d+1)/2 - 2 couplers, fields up to (d - 1) w + d gamma; auxiliary gap min(gamma, w).

References
----------
Freedman, D., Drineas, P. 2005 (the negative form). Flipping literals: Boros, E., Hammer, P. L. 2002, "Pseudo-Boolean
optimization", Discrete Appl. Math. 123, 155.
"""

from __future__ import annotations

from fractions import Fraction

from hubokit.reduction.gadgets.base import Family, Keep, Polynomial, Products, StandIn
from hubokit.reduction.gadgets.negative_monomial import negative_monomial


def flipped(products: Products, position: int) -> Polynomial:
    """The same polynomial with the boolean at ``position`` replaced by 1 minus itself.

    Examples
    --------
    >>> from fractions import Fraction
    >>> dict(flipped({(0, 1): Fraction(2)}, 1))
    {(0,): Fraction(2, 1), (0, 1): Fraction(-2, 1)}
    """
    found = Polynomial()
    for item, value in products.items():
        if position in item:
            without = tuple(i for i in item if i != position)
            found[without] = found.get(without, Fraction(0)) + value
            found[item] = found.get(item, Fraction(0)) - value
        else:
            found[item] = found.get(item, Fraction(0)) + value
    return found


def flipped_literals(locality: int, sign: int = 1, keep: Keep = "one-to-one") -> StandIn:
    """Stand-in for ``+|w| x1 ... xd``.

    Parameters
    ----------
    locality : int
        d, at least 3.
    sign : int
        +1.
    keep : str
        Not needed here: gamma alone decides whether there are ties.

    Returns
    -------
    StandIn
        d - 2 auxiliaries, reach 1.

    Examples
    --------
    >>> flipped_literals(3).couplers, flipped_literals(5).auxiliaries
    (4, 3)
    """
    d = locality
    by_weight, by_gap = Polynomial({(0, 1): Fraction(1)}), Polynomial()
    for j in range(3, d + 1):
        one = negative_monomial(j)
        place = {i: i for i in range(j)} | {j: d + j - 3}
        for total, part in ((by_weight, one.by_weight), (by_gap, one.by_gap)):
            turned = flipped({tuple(sorted(place[i] for i in item)): value for item, value in part.items()}, j - 1)
            total.update(total.plus(turned))
    return StandIn(d, d - 2, by_weight.trimmed(), by_gap.trimmed(), True, Fraction(1))


FAMILY = Family(
    "flipped-literals",
    "boolean",
    lambda locality, sign: locality >= 3 and sign > 0,
    flipped_literals,
    "Boros & Hammer 2002; Freedman & Drineas 2005",
)
