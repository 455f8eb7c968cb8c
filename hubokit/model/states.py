"""States as arrays: one state a row, one variable a column, values of the domain.

A state array is int8 of shape (m, n) with +1 and -1 (spins) or 0 and 1 (booleans). Its *bits* are 0 for the first
value in lift order (spin +1, boolean 0) and 1 for the second, whatever the convention. Packed into integers with
variable 0 as the most significant bit, states sort in lift order.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.model.labels import as_label

DOMAINS = ("spin", "boolean")
CONVENTIONS = ("1-2x", "2x-1")

States = NDArray[np.int8]


def as_states(states: object, labels: Sequence[str], domain: str) -> States:
    """Read one state or many.

    Parameters
    ----------
    states : mapping label -> value, sequence of values, sequence of either, or array (n,) or (m, n)
    labels : sequence of str
        The variables, in column order.
    domain : "spin" or "boolean"

    Returns
    -------
    int8 array, shape (m, n)

    Raises
    ------
    InputError
        A missing or unknown variable, a wrong length, a value outside the domain.

    Examples
    --------
    >>> as_states({"a": 1, "b": -1}, ["a", "b"], "spin")
    array([[ 1, -1]], dtype=int8)
    """
    if isinstance(states, Mapping):
        rows = np.array([_row(states, labels)])
    elif isinstance(states, Sequence) and not isinstance(states, str) and states and isinstance(states[0], Mapping):
        rows = np.array([_row(state, labels) for state in states])
    else:
        try:
            rows = np.asarray(states)
        except ValueError:
            raise InputError("the states have unequal lengths") from None
        if rows.ndim == 1 and not (rows.size == 0 and len(labels)):
            rows = rows[None, :]
        if rows.size == 0 and rows.ndim < 2:
            rows = rows.reshape(0, len(labels))
    if rows.ndim != 2 or rows.shape[1] != len(labels):
        raise InputError(f"states of shape {rows.shape}; {len(labels)} values a state are needed")
    if rows.size == 0:
        return rows.astype(np.int8)
    if rows.dtype.kind not in "iufb":
        raise InputError(f"states of type {rows.dtype}; integers are needed")
    first, second = (1, -1) if domain == "spin" else (0, 1)
    good = (rows == first) | (rows == second)
    if not good.all():
        row, column = (int(position) for position in np.argwhere(~good)[0])
        raise InputError(
            f"state {row} gives {rows[row, column]} to {labels[column]}; "
            f"a {domain} is {'+1 or -1' if domain == 'spin' else '0 or 1'}"
        )
    return rows.astype(np.int8)


def _row(state: Mapping[object, object], labels: Sequence[str]) -> list[object]:
    given = {as_label(label): value for label, value in state.items()}
    missing = [label for label in labels if label not in given]
    if missing:
        raise InputError(f"the state has no value for {missing[0]} ({len(missing)} missing)")
    if len(given) > len(labels):
        unknown = sorted(set(given) - set(labels))
        raise InputError(f"the state gives a value to {unknown[0]}, which is no variable of the model")
    return [given[label] for label in labels]


def to_bits(states: States, domain: str) -> NDArray[np.uint8]:
    """Bits of states: 0 for spin +1 and boolean 0, 1 for spin -1 and boolean 1; the shape is kept."""
    if domain == "spin":
        return (np.asarray(states) < 0).astype(np.uint8)
    return np.asarray(states).astype(np.uint8)


def from_bits(bits: NDArray[Any], domain: str) -> States:
    """States from bits; the inverse of `to_bits`."""
    small = np.asarray(bits).astype(np.int8)
    return 1 - 2 * small if domain == "spin" else small


def pack(bits: NDArray[np.uint8]) -> NDArray[np.uint64]:
    """Bits (m, n) with n <= 64 as unsigned integers, variable 0 most significant.

    Examples
    --------
    >>> pack(np.array([[1, 0, 1]], np.uint8)).tolist()
    [5]
    """
    bits = np.asarray(bits, np.uint8)
    if bits.shape[1] > 64:
        raise InputError(f"{bits.shape[1]} variables do not fit a 64-bit index")
    packed = np.zeros(len(bits), np.uint64)
    for column in range(bits.shape[1]):
        packed = (packed << np.uint64(1)) | bits[:, column].astype(np.uint64)
    return packed


def unpack(index: NDArray[Any], size: int) -> NDArray[np.uint8]:
    """Bits (m, size) of unsigned integers (m,); the inverse of `pack`."""
    index = np.asarray(index).astype(np.uint64)
    shifts = np.arange(size - 1, -1, -1, dtype=np.uint64)
    return ((index[:, None] >> shifts) & np.uint64(1)).astype(np.uint8)


def in_lift_order(states: States, domain: str) -> States:
    """The rows sorted: first variable first, spin +1 before -1, boolean 0 before 1."""
    if len(states) < 2 or states.shape[1] == 0:
        return states
    packed = np.packbits(to_bits(states, domain), axis=1)
    return states[np.lexsort(packed.T[::-1])]


def change_domain(states: States, source: str, target: str, convention: str) -> States:
    """The same states with the values of another domain: s = 1 - 2x or s = 2x - 1.

    Examples
    --------
    >>> change_domain(np.array([[0, 1]], np.int8), "boolean", "spin", "2x-1")
    array([[-1,  1]], dtype=int8)
    """
    states = np.asarray(states, np.int8)
    if source == target:
        return states
    sign = -1 if convention == "1-2x" else 1
    if target == "spin":
        return (sign * (2 * states - 1)).astype(np.int8)
    return ((sign * states + 1) // 2).astype(np.int8)
