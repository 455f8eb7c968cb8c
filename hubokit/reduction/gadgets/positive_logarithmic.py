"""Positive boolean monomials with ceil(log2 d) - 1 auxiliaries, the least possible.

    w x1...xd = min over y of w T(T-1)/2,   T = S + 2^(l+1) - d - sum_{i=1..l} 2^i y_i,   l = ceil(log2 d) - 1

The y can bring T to 0 or 1 for every S < d (value 0), and to 2 at S = d (value w). Each T is reached by one setting
of the y only, and the next T of the same parity costs w more: auxiliary gap w, no ties.

Cost: l auxiliaries, all couplers among d + l variables, the largest 2^(2l-1) w.

References
----------
Boros, E., Crama, Y., Rodriguez-Heck, E. 2020, "Compact quadratizations for pseudo-Boolean functions", J. Comb. Optim.
"""

from __future__ import annotations

from fractions import Fraction

from hubokit.reduction.gadgets.base import Family, Keep, Polynomial, StandIn


def positive_logarithmic(locality: int, sign: int = 1, keep: Keep = "one-to-one") -> StandIn:
    """Stand-in for ``+|w| x1 ... xd``.

    Parameters
    ----------
    locality : int
        d, at least 3.
    sign : int
        +1.
    keep : str
        Not needed here: this form never has ties.

    Returns
    -------
    StandIn
        ceil(log2 d) - 1 auxiliaries, reach 1.

    Examples
    --------
    >>> [positive_logarithmic(d).auxiliaries for d in (3, 4, 5, 8, 9)]
    [1, 1, 2, 2, 3]
    """
    d = locality
    count = (d - 1).bit_length() - 1
    slopes = dict.fromkeys(range(d), 1) | {d + i - 1: -(2**i) for i in range(1, count + 1)}
    T = Polynomial.linear(slopes, 2 ** (count + 1) - d)
    by_weight = Polynomial().plus(T.times(T.plus({(): Fraction(-1)}), "boolean"), Fraction(1, 2))
    return StandIn(d, count, by_weight.trimmed(), {}, True, Fraction(1))


FAMILY = Family(
    "positive-logarithmic",
    "boolean",
    lambda locality, sign: locality >= 3 and sign > 0,
    positive_logarithmic,
    "Boros, Crama & Rodriguez-Heck 2020",
)
