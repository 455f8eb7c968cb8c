"""Inner loops of bucket elimination: small tables by numpy, large ones compiled (numba, loaded when first needed).

A message is a table over some of the variables of a larger table. Where an entry of the larger table finds its
partner in the message is the sum of two short look-ups, one for the leading half of its index and one for the rest:
``high[row] + low[column]``.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.compiling import compiled

COMPILED_FROM = 1 << 15
"""Tables from this size on are worked by compiled loops."""

Table = NDArray[Any]


def partner_index(scope: Sequence[int], within: Sequence[int]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Look-ups that lead from an index over `within` to the index over `scope`, both ascending ranks.

    The first rank is the most significant bit.

    Examples
    --------
    >>> high, low = partner_index((1, 4), (1, 3, 4))
    >>> (high[:, None] + low).ravel().tolist()
    [0, 1, 0, 1, 2, 3, 2, 3]
    """
    steps = {rank: 1 << place for place, rank in enumerate(reversed(scope))}
    middle = len(within) // 2
    return _sums([steps.get(r, 0) for r in within[:middle]]), _sums([steps.get(r, 0) for r in within[middle:]])


def _sums(steps: Sequence[int]) -> NDArray[np.int64]:
    sums = np.zeros(1, np.int64)
    for step in reversed(steps):
        sums = np.concatenate([sums, sums + step])
    return sums


def add_message(table: Table, message: Table, scope: Sequence[int], within: Sequence[int]) -> None:
    """``table[i] += message[partner of i]`` in place."""
    _apply(np.add, "add", table, message, scope, within)


def multiply_message(table: Table, message: Table, scope: Sequence[int], within: Sequence[int]) -> None:
    """``table[i] *= message[partner of i]`` in place."""
    _apply(np.multiply, "multiply", table, message, scope, within)


def lower_message(table: Table, message: Table, scope: Sequence[int], within: Sequence[int]) -> None:
    """``table[i] = min(table[i], message[partner of i])`` in place."""
    _apply(np.minimum, "lower", table, message, scope, within)


def _apply(
    function: np.ufunc, name: str, table: Table, message: Table, scope: Sequence[int], within: Sequence[int]
) -> None:
    if tuple(scope) == tuple(within):
        function(table, message, out=table)
        return
    high, low = partner_index(scope, within)
    if len(table) < COMPILED_FROM or table.dtype == object:
        square = table.reshape(len(high), len(low))
        function(square, message[high[:, None] + low], out=square)
    else:
        _compiled(name)(table, message, high, low)


@cache
def _compiled(name: str) -> Callable[..., None]:
    def add(table: Table, message: Table, high: Table, low: Table) -> None:
        width = len(low)
        for row in range(len(high)):
            start, offset = row * width, high[row]
            for column in range(width):
                table[start + column] += message[offset + low[column]]

    def multiply(table: Table, message: Table, high: Table, low: Table) -> None:
        width = len(low)
        for row in range(len(high)):
            start, offset = row * width, high[row]
            for column in range(width):
                table[start + column] *= message[offset + low[column]]

    def lower(table: Table, message: Table, high: Table, low: Table) -> None:
        width = len(low)
        for row in range(len(high)):
            start, offset = row * width, high[row]
            for column in range(width):
                table[start + column] = min(table[start + column], message[offset + low[column]])

    loops: dict[str, Callable[..., None]] = {"add": add, "multiply": multiply, "lower": lower}
    return compiled(loops[name], nogil=True)


def transform(values: Table, domain: str) -> None:
    """Values of a polynomial at every setting from its coefficients, in place; length 2**k.

    Entry ``i`` holds the coefficient of the product of the variables whose bit of ``i`` is set. Booleans: each value
    is the sum over subsets; spins: over all products with the sign of the parity.
    """
    half = 1
    while half < len(values):
        pairs = values.reshape(-1, 2, half)
        if domain == "boolean":
            pairs[:, 1] += pairs[:, 0]
        else:
            first = pairs[:, 0].copy()
            pairs[:, 0] += pairs[:, 1]
            np.subtract(first, pairs[:, 1], out=pairs[:, 1])
        half *= 2


def narrowed(values: Table) -> Table:
    """The same integers in the smallest signed type that holds them."""
    if values.dtype == object or not len(values):
        return values
    largest = max(int(values.max()), -int(values.min()))
    for kind in (np.int8, np.int16, np.int32):
        if largest <= np.iinfo(kind).max:
            return values.astype(kind)
    return values
