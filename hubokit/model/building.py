"""Reading coefficients: from a mapping of products, or from one array of members for each locality."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hubokit.errors import InputError
from hubokit.model.labels import as_label, as_labels
from hubokit.model.numbers import Number, as_fraction, as_weights, common_resolution, exact_array, format_fraction
from hubokit.model.terms import Part


def read_mapping(
    coefficients: Mapping[tuple[str, ...], Number], labels: Iterable[str] | None
) -> tuple[tuple[str, ...], Fraction, list[Part]]:
    """Labels, resolution and parts of a mapping from products to numbers; see `Hamiltonian`."""
    names = _labels_of(coefficients) if labels is None else as_labels(labels)
    place = {label: position for position, label in enumerate(names)}
    values: list[Fraction] = []
    rows: dict[int, tuple[list[list[int]], list[int]]] = {}
    for key, value in coefficients.items():
        values.append(as_fraction(value, f"coefficient of {_shown(key)}"))
        try:
            row = [place[as_label(label)] for label in _members(key)]
        except KeyError as missing:
            raise InputError(f"{missing.args[0]} is not among the labels", f"term {_shown(key)}") from None
        members, numbers = rows.setdefault(len(row), ([], []))
        members.append(row)
        numbers.append(len(values) - 1)
    resolution = common_resolution(values)
    weights = [int(value / resolution) for value in values]
    parts = [
        (np.array(members, np.int64).reshape(len(members), width), as_weights([weights[i] for i in numbers]))
        for width, (members, numbers) in rows.items()
    ]
    return names, resolution, parts


def read_arrays(
    members: Sequence[ArrayLike],
    weights: Sequence[ArrayLike],
    labels: Iterable[str] | None,
    resolution: Number,
    size: int | None,
) -> tuple[tuple[str, ...], Fraction, list[Part]]:
    """Labels, resolution and parts of arrays of members and weights; see `Hamiltonian.from_arrays`."""
    unit = as_fraction(resolution, "resolution")
    if unit <= 0:
        raise InputError(f"the resolution is {format_fraction(unit)}; it must be positive", "resolution")
    if len(members) != len(weights):
        raise InputError(f"{len(members)} arrays of members and {len(weights)} of weights")
    rows = [_member_array(array, place) for place, array in enumerate(members)]
    values, unit = _weight_arrays(weights, unit)
    for place, (row, value) in enumerate(zip(rows, values, strict=True)):
        if len(row) != len(value):
            raise InputError(f"{len(row)} products and {len(value)} weights", f"weights[{place}]")
    largest = max((int(row.max()) for row in rows if row.size), default=-1)
    if labels is None:
        names = tuple(f"v{i}" for i in range(largest + 1 if size is None else size))
    else:
        names = as_labels(labels, "labels")
    if largest >= len(names):
        raise InputError(f"a member is {largest}, but there are only {len(names)} variables", "members")
    return names, unit, list(zip(rows, values, strict=True))


def _member_array(array: ArrayLike, place: int) -> NDArray[Any]:
    rows = np.asarray(array)
    if rows.size == 0 and rows.ndim < 2:
        rows = rows.reshape(0, 0).astype(np.int64)
    if rows.ndim != 2:
        raise InputError(f"members of shape {rows.shape}; an (m, k) array is needed", f"members[{place}]")
    if rows.dtype.kind not in "iu" and rows.size:
        raise InputError(f"members of type {rows.dtype}; integers are needed", f"members[{place}]")
    if rows.size and (int(rows.min()) < 0 or int(rows.max()) >= 2**31 - 1):
        raise InputError("a member is negative or beyond 2**31", f"members[{place}]")
    return rows.astype(np.int32)


def _weight_arrays(weights: Sequence[ArrayLike], unit: Fraction) -> tuple[list[NDArray[Any]], Fraction]:
    """Whole weights and their unit; floats and fractions are brought to their common resolution first."""
    arrays = [exact_array(array) for array in weights]
    if all(_holds_integers(array) for array in arrays):
        return [as_weights(array, f"weights[{i}]") for i, array in enumerate(arrays)], unit
    values = [[as_fraction(value, f"weights[{i}]") for value in a.tolist()] for i, a in enumerate(arrays)]
    if any(array.dtype == np.float32 for array in arrays):
        values = [[as_fraction(value, f"weights[{i}]") for value in a] for i, a in enumerate(arrays)]
    grid = common_resolution(value for row in values for value in row)
    return [as_weights([int(value / grid) for value in row]) for row in values], unit * grid


def _holds_integers(array: NDArray[Any]) -> bool:
    if array.dtype == object:
        return all(isinstance(value, (int, np.integer)) for value in array.ravel())
    return array.size == 0 or array.dtype.kind != "f"


def _members(key: object) -> tuple[object, ...]:
    if isinstance(key, str):
        raise InputError(f"a term is a tuple of labels; write ({key!a},) for a field", f"term {key!a}")
    try:
        return tuple(key)  # type: ignore[arg-type]
    except TypeError:
        raise InputError(f"a term is a tuple of labels, not {ascii(key)[:60]}") from None


def _labels_of(coefficients: Mapping[tuple[str, ...], Number]) -> tuple[str, ...]:
    seen: dict[str, None] = {}
    for key in coefficients:
        for label in _members(key):
            seen.setdefault(as_label(label, f"term {_shown(key)}"))
    return tuple(seen)


def _shown(key: object) -> str:
    text = ascii(key)
    return text if len(text) <= 60 else text[:57] + "..."
