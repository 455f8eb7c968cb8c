"""The table of gadget families that serve one term at a time."""

from __future__ import annotations

from fractions import Fraction
from functools import cache

from hubokit.errors import InputError
from hubokit.reduction.gadgets import (
    flipped_literals,
    negative_monomial,
    positive_logarithmic,
    positive_monomial,
    spin_product,
    spin_split,
)
from hubokit.reduction.gadgets.base import Family, Keep, StandIn, mirrored, widened

FAMILIES: tuple[Family, ...] = (
    negative_monomial.FAMILY,
    positive_logarithmic.FAMILY,
    positive_monomial.FAMILY,
    flipped_literals.FAMILY,
    spin_product.FAMILY,
    spin_product.BALANCED,
    spin_split.FAMILY,
)
"""In the order in which ties between equally good families are broken."""


def family(name: str) -> Family:
    """The family of that name.

    Raises
    ------
    InputError
        When there is none; the message lists the names.

    Examples
    --------
    >>> family("spin-product").domain
    'spin'
    """
    for one in FAMILIES:
        if one.name == name:
            return one
    names = ", ".join(["auto", *(one.name for one in FAMILIES)])
    raise InputError(f"no such reduction method: {name!r}; the methods are {names}", place="method")


def families_for(domain: str, locality: int, sign: int) -> list[Family]:
    """Every family that serves terms of this domain, locality and sign.

    Examples
    --------
    >>> [one.name for one in families_for("boolean", 3, 1)]
    ['positive-logarithmic', 'positive-monomial', 'flipped-literals']
    """
    return [one for one in FAMILIES if one.domain == domain and one.applies(locality, sign)]


@cache
def stand_in(name: str, locality: int, sign: int, keep: Keep) -> StandIn:
    """The stand-in of a family, made once."""
    return family(name).stand_in(locality, sign, keep)


@cache
def mirror_stand_in(name: str, locality: int, sign: int, keep: Keep) -> StandIn | None:
    """The stand-in for every second term, where the family alternates.

    Examples
    --------
    >>> mirror_stand_in("spin-product", 3, 1, "energies") is None
    True
    """
    if not family(name).alternate:
        return None
    return mirrored(stand_in(name, locality, -sign, keep))


@cache
def wide_stand_in(name: str, locality: int, sign: int, keep: Keep) -> StandIn:
    """The stand-in for terms that weigh less than the auxiliary gap asked for times its reach.

    Examples
    --------
    >>> wide_stand_in("negative-monomial", 3, -1, "one-to-one").auxiliaries
    2
    """
    own = stand_in(name, locality, sign, keep)
    if own.reach is None:
        return own
    opposite = "negative-monomial" if sign > 0 else "positive-logarithmic"
    return widened(own, stand_in(opposite, locality, -sign, keep))


def reaches(part: StandIn, size: Fraction, gap: Fraction) -> bool:
    """Whether a term of weight size |w| gets the auxiliary gap asked for."""
    return part.reach is None or part.reach * size >= gap
