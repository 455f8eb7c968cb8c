"""Exact coefficients: what counts as a number, and the rational that all coefficients share.

A coefficient is a rational number. A float stands for its shortest decimal that reads back as the same float, so
0.1 is 1/10 (common practice: the algorithm behind ``repr``, Steele & White 1990). A list of coefficients is stored as
integer weights times one *resolution*, the greatest rational of which each is a whole multiple:
gcd of the numerators over lcm of the denominators.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from decimal import Decimal
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError, LimitError

Number = int | float | str | Fraction | Decimal | np.integer | np.floating
"""Everything that is read as a coefficient."""

DIGIT_LIMIT = 4000
"""Longest coefficient in characters, and largest decimal exponent: beyond it a file is hostile, not precise."""

DENOMINATOR_BITS = 65_536
"""Largest bit length of a common denominator."""

INT64_BOUND = 2**62
"""Weights are int64 while the sum of absolute weights stays below this."""

_NUMBER = re.compile(r"[+-]?(\d+(/\d+)?|(\d+\.?\d*|\.\d+)([eE][+-]?\d{1,9})?)", re.ASCII)


def as_fraction(value: object, place: str | None = None) -> Fraction:
    """Read a coefficient exactly.

    Parameters
    ----------
    value : int, Fraction, Decimal, str, float or numpy scalar
        Strings are ``"-3/2"``, ``"0.1"``, ``"1e3"``. A float (float32 too) means its own shortest decimal.
    place : str, optional
        Where the value stands, for the error.

    Raises
    ------
    InputError
        Not a finite number, or longer than ``DIGIT_LIMIT`` digits.

    Examples
    --------
    >>> as_fraction(0.1), as_fraction("-3/2")
    (Fraction(1, 10), Fraction(-3, 2))
    """
    if isinstance(value, Fraction):
        return value
    if isinstance(value, (bool, np.bool_)):
        raise InputError(f"a truth value is not a coefficient: {value}; write 0 or 1", place)
    if isinstance(value, (int, np.integer)):
        return Fraction(int(value))
    if isinstance(value, np.floating):
        return _from_text(np.format_float_scientific(value, unique=True, trim="-"), place)
    if isinstance(value, float):
        return _from_text(repr(value), place)
    if isinstance(value, Decimal):
        return _from_text(str(value), place)
    if isinstance(value, str):
        return _from_text(value, place)
    raise InputError(
        f"not a coefficient: {_excerpt(value)}; give an integer, a fraction, a decimal or a string", place
    )


def _from_text(text: str, place: str | None) -> Fraction:
    if len(text) > DIGIT_LIMIT:
        raise InputError(f"a number of {len(text)} characters; at most {DIGIT_LIMIT} are read", place)
    text = text.strip()
    if not _NUMBER.fullmatch(text):
        raise InputError(f'not a finite number: {_excerpt(text)}; write it like 3, "-3/2" or 0.25', place)
    exponent = re.search(r"[eE]([+-]?\d+)$", text)
    if exponent and abs(int(exponent[1])) > DIGIT_LIMIT:
        raise InputError(f"the exponent of {_excerpt(text)} is beyond {DIGIT_LIMIT}", place)
    try:
        return Fraction(text)
    except ZeroDivisionError:
        raise InputError(f"division by zero: {_excerpt(text)}", place) from None


def _excerpt(value: object) -> str:
    text = ascii(value) if not isinstance(value, str) else ascii(value)[1:-1]
    return text if len(text) <= 60 else text[:57] + "..."


def format_fraction(value: Fraction) -> str:
    """``"3/2"``, ``"-2"``: lowest terms, no denominator of one.

    Examples
    --------
    >>> format_fraction(Fraction(-6, 4))
    '-3/2'
    """
    try:
        return str(value)
    except ValueError:
        raise LimitError("a coefficient has grown beyond the digits that Python prints; round the model") from None


def common_resolution(values: Iterable[Fraction]) -> Fraction:
    """The largest rational of which every value is a whole multiple; 1 when all are zero or there are none.

    Raises
    ------
    InputError
        The common denominator exceeds ``DENOMINATOR_BITS`` bits.

    Examples
    --------
    >>> common_resolution([Fraction(1, 2), Fraction(3, 4)])
    Fraction(1, 4)
    """
    numerator, denominator = 0, 1
    for value in values:
        if value:
            numerator = math.gcd(numerator, value.numerator)
            denominator = math.lcm(denominator, value.denominator)
            if denominator.bit_length() > DENOMINATOR_BITS:
                raise InputError(
                    f"the common denominator of the coefficients exceeds {DENOMINATOR_BITS} bits; "
                    "round them to one grid first"
                )
    return Fraction(numerator, denominator) if numerator else Fraction(1)


def absolute_sum(weights: NDArray[Any]) -> int:
    """Sum of absolute values as a Python integer, whatever the dtype; no wrap.

    Examples
    --------
    >>> absolute_sum(np.array([-(2**62), 2**62, 2**62]))
    13835058055282163712
    """
    if weights.dtype == object:
        return sum(abs(int(w)) for w in weights)
    low = weights & np.int64(0xFFFFFFFF)
    high = weights >> np.int64(32)
    negative = weights < 0
    total = (int(high.sum()) << 32) + int(low.sum())
    below = (int(high[negative].sum()) << 32) + int(low[negative].sum())
    return total - 2 * below


def exact_array(values: object) -> NDArray[Any]:
    """``np.asarray``, save that numbers in a list stay what they are where numpy would make floats of them.

    Of a list with an integer beyond 63 bits, or with an integer and a float, numpy makes float64 and rounds.

    Examples
    --------
    >>> exact_array([2**64 - 1, -1]).tolist()
    [18446744073709551615, -1]
    """
    array = np.asarray(values)
    if array.dtype.kind == "f" and not isinstance(values, (np.ndarray, np.generic)):
        return np.array(values, dtype=object)
    return array


def as_weights(values: object, place: str | None = None) -> NDArray[Any]:
    """Whole numbers as int64 where every one fits, else as Python integers in an object array.

    Parameters
    ----------
    values : array_like, shape (m,)
        Any integer dtype, or an object array of integers.

    Raises
    ------
    InputError
        Something in it is not a whole number, or the array is not one-dimensional.
    """
    array = exact_array(values)
    if array.ndim != 1:
        raise InputError(f"weights have shape {array.shape}; one dimension is needed", place)
    if array.size == 0:
        return np.zeros(0, np.int64)
    if array.dtype.kind == "i" or (array.dtype.kind == "u" and array.dtype.itemsize < 8):
        return array.astype(np.int64)
    if array.dtype.kind == "u":
        return smallest_weights(array.astype(object))
    if array.dtype == object:
        for position, value in enumerate(array):
            if isinstance(value, (bool, np.bool_)) or not isinstance(value, (int, np.integer)):
                raise InputError(f"weight {position} is not a whole number: {_excerpt(value)}", place)
        return smallest_weights(np.array([int(v) for v in array], dtype=object))
    raise InputError(f"weights of type {array.dtype} are not whole numbers; give integers and a resolution", place)


def smallest_weights(weights: NDArray[Any]) -> NDArray[Any]:
    """The same integers as int64 when the sum of their absolute values is below ``INT64_BOUND``, else as objects."""
    if absolute_sum(weights) < INT64_BOUND:
        return weights.astype(np.int64)
    return weights.astype(object)


def times(weights: NDArray[Any], factor: int) -> NDArray[Any]:
    """Weights times an integer; objects where int64 might wrap."""
    if weights.dtype != object and max(absolute_sum(weights), 1) * abs(factor) >= INT64_BOUND:
        weights = weights.astype(object)
    return weights * factor if weights.dtype == object else weights * np.int64(factor)
