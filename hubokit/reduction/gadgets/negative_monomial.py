"""Negative boolean monomials with one auxiliary.

    -w x1 ... xd = min over y of y (c - b S),   S = x1 + ... + xd,   b = w + gamma,   c = b d - w

At S = d the bracket is -w; at S = d - 1 it is gamma, and larger for smaller S: the auxiliary gap is min(gamma, w).
At gamma = 0 this is the published form, with a tie at S = d - 1; at gamma = w it is that form doubled.

Cost: one auxiliary, d couplers of size b, field c on the auxiliary.

References
----------
Freedman, D., Drineas, P. 2005, "Energy minimization via graph cuts: settling what is possible", CVPR.
"""

from __future__ import annotations

from fractions import Fraction

from hubokit.reduction.gadgets.base import Family, Keep, Polynomial, StandIn


def negative_monomial(locality: int, sign: int = -1, keep: Keep = "one-to-one") -> StandIn:
    """Stand-in for ``-|w| x1 ... xd``.

    Parameters
    ----------
    locality : int
        d, at least 1.
    sign : int
        -1.
    keep : str
        Not needed here: gamma alone decides whether there are ties.

    Returns
    -------
    StandIn
        One auxiliary, reach 1.

    Examples
    --------
    >>> from fractions import Fraction
    >>> g = negative_monomial(3).coefficients(Fraction(1), Fraction(0))
    >>> {item: int(value) for item, value in g.items()}
    {(3,): 2, (0, 3): -1, (1, 3): -1, (2, 3): -1}
    """
    d = locality
    sum_of_members = Polynomial.linear(dict.fromkeys(range(d), 1))
    auxiliary = Polynomial({(d,): Fraction(1)})
    by_weight = Polynomial.linear({}, d - 1).plus(sum_of_members, -1).times(auxiliary, "boolean")
    by_gap = Polynomial.linear({}, d).plus(sum_of_members, -1).times(auxiliary, "boolean")
    return StandIn(d, 1, by_weight.trimmed(), by_gap.trimmed(), True, Fraction(1))


FAMILY = Family(
    "negative-monomial",
    "boolean",
    lambda locality, sign: locality >= 2 and sign < 0,
    negative_monomial,
    "Freedman & Drineas 2005",
)
