"""A stand-in seen from outside: its minimum, multiplicities and auxiliary gap, by visiting every state.

This is the slow, obvious oracle of every family, and the proof that a gadget found by search must pass before it is
used. Cost: 2^(members + auxiliaries) states.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import lcm
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.reduction.gadgets.base import Domain, Products, StandIn


@dataclass(frozen=True)
class Enumerated:
    """What enumeration saw.

    Parameters
    ----------
    minima : list of Fraction, length 2**k
        Minimum over the auxiliaries for every setting of the members, in lift order.
    multiplicities : list of int, length 2**k
        Number of auxiliary settings that reach it.
    gap : Fraction or None
        Least strictly positive excess over the minimum, over all settings; None when there is none.
    """

    minima: list[Fraction]
    multiplicities: list[int]
    gap: Fraction | None


def all_values(count: int, domain: Domain) -> npt.NDArray[np.int64]:
    """All states of `count` variables in lift order, shape (2**count, count).

    Examples
    --------
    >>> all_values(1, "spin").tolist()
    [[1], [-1]]
    """
    bits = (np.arange(2**count)[:, None] >> np.arange(count - 1, -1, -1)) & 1
    return np.asarray(1 - 2 * bits if domain == "spin" else bits, dtype=np.int64)


def enumerated(part: StandIn, size: Fraction | int, gap: Fraction | int, domain: Domain) -> Enumerated:
    """Visit all states of a stand-in for weight size |w| and auxiliary gap gamma.

    Examples
    --------
    >>> tie = StandIn(1, 1, {(0, 1): Fraction(1)}, {}, False)
    >>> enumerated(tie, 3, 0, "boolean")
    Enumerated(minima=[Fraction(0, 1), Fraction(0, 1)], multiplicities=[2, 1], gap=Fraction(3, 1))
    """
    return enumerated_products(
        part.coefficients(Fraction(size), Fraction(gap)), part.originals, part.auxiliaries, domain
    )


def enumerated_products(found: Products, originals: int, auxiliaries: int, domain: Domain) -> Enumerated:
    """The same for given coefficients."""
    unit = lcm(*(value.denominator for value in found.values()))
    whole = {item: int(value * unit) for item, value in found.items()}
    kind: Any = np.int64 if sum(map(abs, whole.values())) < 2**61 else object
    count = originals + auxiliaries
    states = all_values(count, domain).astype(kind)
    fields, couplers = np.zeros(count, kind), np.zeros((count, count), kind)
    for item, value in whole.items():
        if len(item) == 1:
            fields[item] = value
        elif len(item) == 2:
            couplers[item] = value
    energies = states @ fields + ((states @ couplers) * states).sum(axis=1) + whole.get((), 0)
    energies = energies.reshape(2**originals, -1)
    least = energies.min(axis=1)
    excess = energies - least[:, None]
    above = excess[excess > 0]
    return Enumerated(
        [Fraction(int(value), unit) for value in least],
        [int(count) for count in (excess == 0).sum(axis=1)],
        Fraction(int(above.min()), unit) if len(above) else None,
    )
