"""Positive boolean monomials with floor((d-1)/2) auxiliaries and small coefficients.

With S = x1 + ... + xd and S2 = S(S-1)/2, every auxiliary cuts the parabola S2 down where S passes a threshold:

    d even:  w x1...xd = min  w S2 + sum_{i=1..n} y_i w (4i - 1 - 2S)
    d odd:   w x1...xd = min  w S2 + gamma S + y_1 (w - (w + gamma) S) + sum_{i=2..n} y_i w (4i - 3 - 2S)

with n = floor((d-1)/2). For d even this is Ishikawa's form, and every bracket is an odd multiple of w: auxiliary gap
w. For d odd it is his form counted from the other end of the range (thresholds at S = 1, 3, 5 ... instead of
2, 4, 6 ...), with the tie at S = 1, where the first bracket is -gamma: auxiliary gap min(gamma, w).

Cost: n auxiliaries, d(d-1)/2 + n d couplers, none larger than 2w; fields up to (2d - 5) w.

References
----------
Ishikawa, H. 2011, "Transformation of general binary MRF minimization to the first-order case", IEEE PAMI 33, 1234.
"""

from __future__ import annotations

from fractions import Fraction
from itertools import combinations

from hubokit.reduction.gadgets.base import PROVABLE, Family, Keep, Polynomial, StandIn


def positive_monomial(locality: int, sign: int = 1, keep: Keep = "one-to-one") -> StandIn:
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
        floor((d-1)/2) auxiliaries, reach 1.

    Examples
    --------
    >>> positive_monomial(3).auxiliaries, positive_monomial(7).auxiliaries
    (1, 3)
    """
    d = locality
    count = (d - 1) // 2
    members = Polynomial.linear(dict.fromkeys(range(d), 1))
    by_weight = Polynomial({pair: Fraction(1) for pair in combinations(range(d), 2)})
    by_gap = Polynomial()
    for i in range(1, count + 1):
        auxiliary = Polynomial({(d + i - 1,): Fraction(1)})
        if d % 2 and i == 1:
            bracket = Polynomial.linear({}, 1).plus(members, -1)
            by_gap = by_gap.plus(members).plus(members.times(auxiliary, "boolean"), -1)
        else:
            bracket = Polynomial.linear({}, 4 * i - (3 if d % 2 else 1)).plus(members, -2)
        by_weight = by_weight.plus(bracket.times(auxiliary, "boolean"))
    return StandIn(d, count, by_weight.trimmed(), by_gap.trimmed(), True, Fraction(1))


FAMILY = Family(
    "positive-monomial",
    "boolean",
    lambda locality, sign: 3 <= locality <= PROVABLE and sign > 0,
    positive_monomial,
    "Ishikawa 2011",
)
