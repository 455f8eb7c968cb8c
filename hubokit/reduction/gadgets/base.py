"""What a gadget is: a quadratic stand-in for one term, with the auxiliary gap as a parameter.

A term w * z1 ... zk (z booleans or spins) is replaced by a quadratic Q(z, y) with

    min over y of Q(z, y) = w * z1 ... zk     for every z,

and every coefficient of Q is affine in the size of the weight and in the auxiliary gap asked for,

    coefficient of a product = by_weight * |w| + by_gap * gamma,

so that one stand-in serves a whole block of terms by array work. A family (one file each beside this one) makes
the stand-in for a locality and a sign.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from itertools import product
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from hubokit.model.numbers import common_resolution

Domain = Literal["spin", "boolean"]
Keep = Literal["ground-states", "energies", "one-to-one"]
Products = Mapping[tuple[int, ...], Fraction]
Part = tuple[npt.NDArray[np.int64], npt.NDArray[Any]]

PROVABLE = 16
"""Largest locality of families whose auxiliaries, projected one cluster at a time, give all 2^k products of their
members on the way to one: beyond it a reduction could not be proved at any size."""


@dataclass(frozen=True)
class StandIn:
    """A quadratic stand-in for every term of one locality and sign.

    Local positions 0 .. originals-1 are the members of the term, then come the auxiliaries.

    Parameters
    ----------
    originals, auxiliaries : int
        Number of members of the term and of auxiliaries added for it.
    by_weight, by_gap : mapping from sorted tuples of local positions to Fraction
        The coefficient of a product is ``by_weight * |w| + by_gap * gamma`` (energy units); the empty tuple is the
        constant.
    tie_free : bool
        True when every setting of the members has one best auxiliary setting for every gamma > 0.
    reach : Fraction, optional
        The auxiliary gap is at least ``min(gamma, reach * |w|)``; None when any gamma is reached.

    Examples
    --------
    >>> one = StandIn(3, 1, {(3,): Fraction(2), (0, 3): Fraction(-1), (1, 3): Fraction(-1), (2, 3): Fraction(-1)},
    ...               {}, False)
    >>> one.couplers, one.coefficients(Fraction(5), Fraction(0))[(0, 3)]
    (3, Fraction(-5, 1))
    """

    originals: int
    auxiliaries: int
    by_weight: Products
    by_gap: Products
    tie_free: bool
    reach: Fraction | None = None

    @cached_property
    def products(self) -> list[tuple[int, ...]]:
        """Every product that has a coefficient, shorter ones first."""
        return sorted({*self.by_weight, *self.by_gap}, key=lambda item: (len(item), item))

    @property
    def couplers(self) -> int:
        """Number of products of two."""
        return sum(len(item) == 2 for item in self.products)

    @cached_property
    def grids(self) -> tuple[Fraction, Fraction]:
        """Common resolutions of `by_weight` and of `by_gap`."""
        return common_resolution(self.by_weight.values()), common_resolution(self.by_gap.values())

    def whole(self, unit: Fraction, gap: Fraction) -> tuple[dict[tuple[int, ...], int], dict[tuple[int, ...], int]]:
        """For each product the slope in whole weights of that unit, and the step, in units that `grids` allows.

        ``unit`` and ``gap`` are given in units of the coefficients wanted.
        """
        slope, step = self.grids
        by_weight, by_gap = self._in_grids
        factor, shift = unit * slope, gap * step if self.by_gap else Fraction(0)
        if factor.denominator != 1 or shift.denominator != 1:
            raise AssertionError(f"{unit} and {gap} are no multiples of the grid")
        return (
            {item: value * factor.numerator for item, value in by_weight.items()},
            {item: value * shift.numerator for item, value in by_gap.items()},
        )

    @cached_property
    def _in_grids(self) -> tuple[dict[tuple[int, ...], int], dict[tuple[int, ...], int]]:
        """Both maps over every product, as whole multiples of their grids."""
        slope, step = self.grids
        return (
            {item: int(self.by_weight.get(item, Fraction(0)) / slope) for item in self.products},
            {item: int(self.by_gap.get(item, Fraction(0)) / step) for item in self.products},
        )

    def coefficients(self, size: Fraction, gap: Fraction) -> dict[tuple[int, ...], Fraction]:
        """Coefficients for a term of weight size |w| and auxiliary gap gamma; zeros left out."""
        found = {
            item: self.by_weight.get(item, Fraction(0)) * size + self.by_gap.get(item, Fraction(0)) * gap
            for item in self.products
        }
        return {item: value for item, value in found.items() if value}


@dataclass(frozen=True)
class Family:
    """One published family of gadgets.

    Parameters
    ----------
    name : str
        The name that ``reduce(method=...)`` takes.
    domain : {"spin", "boolean"}
    applies : callable (locality, sign) -> bool
    stand_in : callable (locality, sign, keep) -> StandIn
        ``sign`` is +1 or -1, the sign of the weight.
    source : str
        Authors and year.
    alternate : bool
        Whether every second term gets the mirrored stand-in (all variables and auxiliaries flipped, the other sign),
        so that the fields of neighbouring terms cancel. Spins and odd localities only.
    """

    name: str
    domain: Domain
    applies: Callable[[int, int], bool]
    stand_in: Callable[[int, int, Keep], StandIn]
    source: str
    alternate: bool = False


class Polynomial(dict[tuple[int, ...], Fraction]):
    """Coefficients by sorted tuple of local positions: scratch paper on which the families write their formulas.

    Examples
    --------
    >>> line = Polynomial.linear({0: 1, 1: 2}, -1)
    >>> dict(line.times(line, "boolean"))[(0, 1)]
    Fraction(4, 1)
    """

    @classmethod
    def linear(cls, slopes: Mapping[int, int | Fraction], constant: int | Fraction = 0) -> Polynomial:
        """The polynomial ``constant + sum of slopes[i] * z_i``."""
        found = cls({(): Fraction(constant)})
        found.update({(i,): Fraction(value) for i, value in slopes.items()})
        return found

    def times(self, other: Mapping[tuple[int, ...], Fraction], domain: Domain) -> Polynomial:
        """The product, with x*x = x or s*s = 1."""
        found = Polynomial()
        for (a, u), (b, v) in product(self.items(), other.items()):
            joint = set(a) ^ set(b) if domain == "spin" else set(a) | set(b)
            key = tuple(sorted(joint))
            found[key] = found.get(key, Fraction(0)) + u * v
        return found

    def plus(self, other: Mapping[tuple[int, ...], Fraction], factor: int | Fraction = 1) -> Polynomial:
        """``self + factor * other``."""
        found = Polynomial(self)
        for key, value in other.items():
            found[key] = found.get(key, Fraction(0)) + factor * value
        return found

    def trimmed(self) -> dict[tuple[int, ...], Fraction]:
        """The same without zero coefficients."""
        return {key: value for key, value in self.items() if value}


def moved(products: Products, positions: Mapping[int, int]) -> Polynomial:
    """The same products with every local position renamed."""
    return Polynomial({tuple(sorted(positions[i] for i in item)): value for item, value in products.items()})


def joined(parts: Iterable[tuple[StandIn, Mapping[int, int]]], originals: int, *, reach: Fraction | None) -> StandIn:
    """The sum of stand-ins for terms on the same local positions, their auxiliaries set side by side.

    Parameters
    ----------
    parts : iterable of (StandIn, mapping)
        Each mapping sends the members of that stand-in to positions of the joint one.
    originals : int
        Number of members of the joint stand-in.
    reach : Fraction or None
        Reach of the joint stand-in (see :class:`StandIn`).
    """
    by_weight, by_gap, first, tie_free = Polynomial(), Polynomial(), originals, True
    for part, positions in parts:
        place = {**positions, **{part.originals + i: first + i for i in range(part.auxiliaries)}}
        by_weight = by_weight.plus(moved(part.by_weight, place))
        by_gap = by_gap.plus(moved(part.by_gap, place))
        first += part.auxiliaries
        tie_free = tie_free and part.tie_free
    return StandIn(originals, first - originals, by_weight.trimmed(), by_gap.trimmed(), tie_free, reach)


def mirrored(part: StandIn) -> StandIn:
    """The stand-in for the other sign of an odd product of spins: every spin and auxiliary flipped."""
    by_weight = {item: value * (-1) ** len(item) for item, value in part.by_weight.items()}
    by_gap = {item: value * (-1) ** len(item) for item, value in part.by_gap.items()}
    return StandIn(part.originals, part.auxiliaries, by_weight, by_gap, part.tie_free, part.reach)


def reweighted(part: StandIn, size: int | Fraction, gap: int | Fraction) -> StandIn:
    """The stand-in for a weight of ``size * |w| + gap * gamma`` instead of |w|, with the same gamma."""
    by_weight = Polynomial().plus(part.by_weight, size)
    by_gap = Polynomial(part.by_gap).plus(part.by_weight, gap)
    return StandIn(part.originals, part.auxiliaries, by_weight.trimmed(), by_gap.trimmed(), part.tie_free, part.reach)


def widened(own: StandIn, opposite: StandIn) -> StandIn:
    """A stand-in without limit on the auxiliary gap, for terms whose weight is smaller than the gap asked for.

    ``w Z = (w + sign*gamma) Z - sign*gamma Z``: both parts weigh at least gamma, which is within reach of each.

    Parameters
    ----------
    own, opposite : StandIn
        Stand-ins of the same family members for the sign of the term and for the other sign, both of reach >= 1.
    """
    same = {i: i for i in range(own.originals)}
    return joined([(reweighted(own, 1, 1), same), (reweighted(opposite, 0, 1), same)], own.originals, reach=None)
