"""Polynomials for the audit: dictionaries from sorted tuples of positions to integers or fractions."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from fractions import Fraction
from itertools import product
from typing import Any

Key = tuple[int, ...]
Poly = dict[Key, Any]

#: Products that one polynomial may come to before the audit gives up on re-checking.
MOST_TERMS = 2_000_000


class TooLarge(Exception):  # noqa: N818 - it is an answer, not a fault of the document
    """The audit will not re-check this; the message says the size."""


def values_of(domain: str) -> tuple[int, int]:
    """The values of bit 0 and bit 1."""
    return (1, -1) if domain == "spin" else (0, 1)


def settings(count: int) -> Iterator[tuple[int, ...]]:
    """All settings of `count` bits, the first bit most significant.

    Examples
    --------
    >>> list(settings(2))
    [(0, 0), (0, 1), (1, 0), (1, 1)]
    """
    return product((0, 1), repeat=count)


def joined(first: Iterable[int], second: Iterable[int], domain: str) -> Key:
    """The product of two products: s*s = 1, x*x = x."""
    one, two = set(first), set(second)
    return tuple(sorted(one ^ two if domain == "spin" else one | two))


def add(poly: Poly, key: Key, value: Any) -> None:
    """Add to a coefficient, dropping zeros."""
    total = poly.get(key, 0) + value
    if total:
        poly[key] = total
        if len(poly) > MOST_TERMS:
            raise TooLarge(f"a polynomial of more than {MOST_TERMS} terms")
    else:
        poly.pop(key, None)


def add_product(poly: Poly, first: Poly, second: Poly, domain: str) -> None:
    """Add first * second to poly."""
    if len(first) * len(second) > MOST_TERMS:
        raise TooLarge(f"a product of {len(first)} by {len(second)} terms")
    for one, left in first.items():
        for two, right in second.items():
            add(poly, joined(one, two, domain), left * right)


def interpolated(table: Sequence[Any], variables: Sequence[int], domain: str) -> Poly:
    """The polynomial with these values, the first variable most significant.

    Examples
    --------
    >>> interpolated([0, 0, 0, -1], [4, 7], "boolean")
    {(4, 7): -1}
    """
    work = list(table)
    d = len(variables)
    for bit in range(d):
        step = 1 << bit
        for low in range(len(work)):
            if not low & step:
                a, b = work[low], work[low | step]
                if domain == "spin":
                    work[low], work[low | step] = a + b, a - b
                else:
                    work[low | step] = b - a
    found: Poly = {}
    for number, value in enumerate(work):
        if value:
            key = tuple(sorted(variables[d - 1 - bit] for bit in range(d) if number >> bit & 1))
            found[key] = Fraction(value, 1 << d) if domain == "spin" else value
    return found


def tabulated(poly: Poly, variables: Sequence[int], domain: str) -> list[Any]:
    """All values of a polynomial, the first variable most significant; the inverse of `interpolated`.

    Examples
    --------
    >>> tabulated({(4, 7): -1, (): 2}, [4, 7], "boolean")
    [2, 2, 2, 1]
    """
    place = {variable: len(variables) - 1 - number for number, variable in enumerate(variables)}
    work: list[Any] = [0] * (1 << len(variables))
    for key, value in poly.items():
        work[sum(1 << place[position] for position in key)] = value
    for bit in range(len(variables)):
        step = 1 << bit
        for low in range(len(work)):
            if not low & step:
                a, b = work[low], work[low | step]
                work[low], work[low | step] = (a + b, a - b) if domain == "spin" else (a, a + b)
    return work


def substituted(poly: Poly, position: int, by: Poly, domain: str) -> Poly:
    """The polynomial with one variable replaced by a polynomial."""
    found: Poly = {}
    for key, value in poly.items():
        if position in key:
            rest = tuple(other for other in key if other != position)
            add_product(found, {rest: value}, by, domain)
        else:
            add(found, key, value)
    return found


def value_at(poly: Poly, state: Sequence[int]) -> Any:
    """The value at a state, a sequence of values by position."""
    total: Any = 0
    for key, weight in poly.items():
        for position in key:
            weight = weight * state[position]
        total += weight
    return total


def field(touching: Poly, position: int, domain: str) -> Poly:
    """Value at bit 1 minus value at bit 0 of one variable, as a polynomial in the others.

    Parameters
    ----------
    touching : dict
        The terms that hold the variable.
    """
    low, high = values_of(domain)
    return {tuple(i for i in key if i != position): weight * (high - low) for key, weight in touching.items()}


def least(functions: list[tuple[Key, list[Any]]], spend: Callable[[int], None], limit: int = 16) -> Any:
    """The least value of a sum of functions of few bits each, by eliminating one bit after the other.

    Parameters
    ----------
    functions : list of (bits, table)
        The first bit of a table's index is most significant.
    spend : callable
        Told of the operations of every table; raises when they are too many.
    limit : int
        Bits that one table may come to.

    Examples
    --------
    >>> least([((0, 1), [0, 1, 2, 3]), ((1,), [5, 0])], lambda operations: None)
    1
    """
    work = list(functions)
    total: Any = 0
    while work:
        ties: dict[int, set[int]] = {}
        for bits, _ in work:
            for bit in bits:
                ties.setdefault(bit, set()).update(bits)
        if not ties:
            return total + sum(table[0] for _, table in work)
        bit = min(ties, key=lambda one: (len(ties[one]), one))
        scope = tuple(sorted(ties[bit] - {bit}))
        if len(scope) > limit:
            raise TooLarge(f"a minimum over tables of {len(scope)} bits")
        mine = [one for one in work if bit in one[0]]
        work = [one for one in work if bit not in one[0]]
        place = {other: number for number, other in enumerate((bit, *scope))}
        table = []
        spend((2 << len(scope)) * len(mine))
        for setting in settings(len(scope)):
            both = []
            for value in (0, 1):
                full = (value, *setting)
                both.append(sum(_entry(one, full, place) for one in mine))
            table.append(min(both))
        work.append((scope, table))
    return total


def _entry(function: tuple[Key, list[Any]], full: Sequence[int], place: dict[int, int]) -> Any:
    index = 0
    for bit in function[0]:
        index = index * 2 + full[place[bit]]
    return function[1][index]
