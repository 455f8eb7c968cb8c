"""JSON text to plain values, refusing what the standard library lets pass.

Refused: a key that stands twice in one object, NaN and infinities, numbers too long to convert, nesting deeper than
``DEPTH_LIMIT``, lone surrogates, and (as RFC 7493 asks) integers beyond 2**53 - 1 outside the weights.
Time and memory are bounded by the length of the text.
"""

from __future__ import annotations

import gc
import json
import math
import re
from collections.abc import Iterable
from typing import Any

from hubokit.errors import InputError

DEPTH_LIMIT = 100
"""Deepest nesting of lists and objects in a document."""

SAFE_INTEGER = 2**53 - 1
"""Largest integer that every JSON reader keeps exactly (RFC 7493)."""


class _Twice(dict[str, Any]):
    """An object of the text in which a key stood twice."""

    key = ""


def parsed(text: str, *, file: str | None = None) -> Any:
    """Parse JSON text.

    Parameters
    ----------
    text : str
        The whole document.
    file : str, optional
        For the error.

    Returns
    -------
    object
        dict, list, str, int, float, bool or None. Non-finite floats are still among them: `refuse_unplain` finds
        them together with their place.

    Raises
    ------
    InputError
        Not JSON (line and column), a key twice in an object (JSON pointer), too deep, or a number too long.

    Examples
    --------
    >>> parsed('{"a": [1, 2]}')
    {'a': [1, 2]}
    >>> parsed('{"a": {"b": 1, "b": 2}}')
    Traceback (most recent call last):
    hubokit.errors.InputError: /a: the key "b" stands twice in one object; keep one of the two
    """
    twice: list[_Twice] = []

    def unique(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        made = dict(pairs)
        if len(made) == len(pairs):
            return made
        marked = _Twice(made)
        keys = [key for key, _ in pairs]
        marked.key = next(key for place, key in enumerate(keys) if key in keys[:place])
        twice.append(marked)
        return marked

    collecting = gc.isenabled()
    gc.disable()  # a million small lists without one cycle: looking for cycles takes longer than parsing
    try:
        value = json.loads(text, object_pairs_hook=unique)
    except json.JSONDecodeError as error:
        if not text.strip():
            raise InputError("the file is empty", file=file) from None
        place = f"line {error.lineno} column {error.colno}"
        raise InputError(f"not JSON: {error.msg}", place, file) from None
    except RecursionError:
        raise InputError(f"nested deeper than {DEPTH_LIMIT} levels", "line 1", file) from None
    except ValueError:
        raise InputError(*_long_number(text), file) from None
    finally:
        if collecting:
            gc.enable()
    if twice:
        pointer, found = next((pointer, found) for pointer, found in _walk(value) if isinstance(found, _Twice))
        raise InputError(
            f"the key {quoted(found.key)} stands twice in one object; keep one of the two", pointer, file
        )
    return value


def _long_number(text: str) -> tuple[str, str]:
    found = re.search(r"\d{4301,}", text)
    if found is None:
        return "a number too long to read", "line 1"
    line = text.count("\n", 0, found.start()) + 1
    return f"a number of {found.end() - found.start()} digits; at most 1000 are read, as a string", f"line {line}"


def _walk(value: Any, pointer: str = "") -> Iterable[tuple[str, Any]]:
    """Every list, object and value inside, each with its JSON pointer; no recursion."""
    waiting = [(pointer, value, 0)]
    while waiting:
        place, item, depth = waiting.pop()
        yield place, item
        if depth > DEPTH_LIMIT:
            raise InputError(f"nested deeper than {DEPTH_LIMIT} levels", place[:200])
        if isinstance(item, dict):
            waiting.extend((f"{place}/{escaped(key)}", inner, depth + 1) for key, inner in item.items())
        elif isinstance(item, list):
            waiting.extend((f"{place}/{position}", inner, depth + 1) for position, inner in enumerate(item))


def refuse_unplain(value: Any, *, pointer: str = "", file: str | None = None) -> None:
    """Raise for anything inside that RFC 8785 cannot carry.

    Raises
    ------
    InputError
        A non-finite number, an integer beyond 2**53 - 1, a lone surrogate, nesting deeper than ``DEPTH_LIMIT``, or
        something that is not JSON at all; the JSON pointer is named.

    Examples
    --------
    >>> refuse_unplain({"notes": [1, float("inf")]})
    Traceback (most recent call last):
    hubokit.errors.InputError: /notes/1: not a finite number; write it as a string
    """
    try:
        for place, item in _walk(value, pointer):
            if isinstance(item, str) and not item.isascii():
                _refuse_surrogate(item, place)
            elif isinstance(item, dict):
                for key in item:
                    if not isinstance(key, str):
                        raise InputError(f"the key {quoted(str(key))} is not a string", place)
                    _refuse_surrogate(key, place)
            elif isinstance(item, float) and not math.isfinite(item):
                raise InputError("not a finite number; write it as a string", place)
            elif isinstance(item, int) and abs(item) > SAFE_INTEGER:
                raise InputError("an integer beyond 2**53 - 1; write it as a string", place)
            elif item is not None and not isinstance(item, (str, bool, int, float, list)):
                raise InputError(f"{type(item).__name__} is not a JSON value", place)
    except InputError as error:
        raise error.located(file=file) from None


def _refuse_surrogate(text: str, place: str) -> None:
    try:
        text.encode()
    except UnicodeEncodeError:
        raise InputError("the text holds a lone surrogate, which UTF-8 cannot carry", place) from None


def escaped(key: object) -> str:
    """One step of a JSON pointer (RFC 6901).

    Examples
    --------
    >>> escaped("a/b~c")
    'a~1b~0c'
    """
    text = str(key).replace("~", "~0").replace("/", "~1")
    return text if len(text) <= 60 else text[:57] + "..."


def quoted(value: object) -> str:
    """A value for a message: JSON in ASCII, cut at 60 characters.

    Examples
    --------
    >>> quoted("x" * 100)
    '"xxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxx...'
    """
    if isinstance(value, (list, dict)):
        return f"{'a list' if isinstance(value, list) else 'an object'} of {len(value)}"
    if isinstance(value, str):
        value = value[:61]
    elif isinstance(value, int) and abs(value) > 10**60:
        return "a very long number"
    text = json.dumps(value)
    return text if len(text) <= 60 else text[:57] + "..."
