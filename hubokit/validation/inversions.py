"""Order inversions: pairs of source states whose order the reduced model turns round."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from hubokit.validation.judging import Judge
from hubokit.validation.verdict import Inversion, Inversions

#: States among which pairs are compared, and pairs that are named.
COMPARED = 2048
NAMED = 8


def inversions_below(judge: Judge, below: Fraction | None) -> Inversions | None:
    """Pairs with E(lower) < E(upper) but P(lower) > P(upper), both with E at most `below`.

    Parameters
    ----------
    judge : Judge
        Holds E and P of all states the model has.
    below : Fraction or None
        None takes the third level of E (or the highest there is).

    Returns
    -------
    Inversions or None
        None when more than `COMPARED` states lie below.
    """
    E, P = judge.tables.energy, judge.P
    if below is None:
        levels = np.unique(E.integers)[:3]
        bound = int(levels[-1])
        below = E.constant + bound * E.resolution
    else:
        bound = int((below - E.constant) // E.resolution)
    chosen = np.flatnonzero(E.integers <= bound)
    if len(chosen) > COMPARED:
        return None
    chosen = chosen[np.argsort(E.integers[chosen], kind="stable")]
    energy, minimum = E.integers[chosen], P[chosen]
    turned = (energy[:, None] < energy[None, :]) & (minimum[:, None] > minimum[None, :])
    pairs = [
        Inversion(judge.witness(int(chosen[lower])), judge.witness(int(chosen[upper])))
        for lower, upper in np.argwhere(turned)[:NAMED]
    ]
    return Inversions(below, int(turned.sum()), tuple(pairs))
