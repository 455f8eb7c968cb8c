"""Names of variables: non-empty strings, distinct after Unicode NFC, kept in that form."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable

from hubokit.errors import InputError


def as_label(value: object, place: str | None = None) -> str:
    """One name in NFC.

    Raises
    ------
    InputError
        Not a string, empty, or not encodable as UTF-8.

    Examples
    --------
    >>> as_label("valve 3")
    'valve 3'
    """
    if not isinstance(value, str):
        raise InputError(f"a variable name is a string, not {ascii(value)[:60]}", place)
    if not value:
        raise InputError("a variable name is empty", place)
    if value.isascii():
        return value
    try:
        value.encode()
    except UnicodeEncodeError:
        raise InputError(f"a variable name holds a lone surrogate: {ascii(value)[:60]}", place) from None
    return unicodedata.normalize("NFC", value)


def as_labels(values: Iterable[object], place: str | None = None) -> tuple[str, ...]:
    """Many names in NFC, all different.

    Raises
    ------
    InputError
        A bad name, or one that stands twice (after NFC).
    """
    if isinstance(values, str):
        values = values.split()
    labels = tuple(as_label(value, place) for value in values)
    if len(set(labels)) != len(labels):
        seen: set[str] = set()
        for label in labels:
            if label in seen:
                raise InputError(f"the variable {ascii(label)[:60]} stands twice (after Unicode NFC)", place)
            seen.add(label)
    return labels
