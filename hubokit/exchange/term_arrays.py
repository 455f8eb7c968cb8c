"""The long lists of a document, checked by array operations instead of item by item.

The lists of names, members, weights and target states are taken out before the schema looks at the rest
(`taken_out`), and checked here. Together the two accept exactly what the schema accepts; a property test holds them
to it. Every error carries the JSON pointer.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from itertools import chain
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.exchange.json_text import SAFE_INTEGER, quoted

LARGEST_MEMBER = 2**31 - 2
"""Largest position of a variable."""

LARGEST_NAME = 1000
"""Longest name of a variable, in characters."""

LARGEST_WEIGHT = 1000
"""Longest weight written as a string, in characters."""

_WHOLE = re.compile(r"(0|-?[1-9][0-9]*)")

Json = dict[str, Any]


def taken_out(document: Any) -> tuple[Any, list[tuple[str, Callable[[Any, str], Any], Any]]]:
    """A copy of a model document without its long lists, and the lists.

    Returns
    -------
    skeleton : object
        The document with ``[]`` in the place of every list taken out; it shares the rest.
    lists : list of (pointer, check, list)
        ``check(list, pointer)`` raises InputError where the schema would refuse the list.
    """
    lists: list[tuple[str, Callable[[Any, str], Any], Any]] = []
    if not isinstance(document, dict):
        return document, lists
    skeleton = _core_taken(document, "", lists)
    _take(skeleton, "auxiliaries", "", names, lists)
    trail = skeleton.get("trail")
    if isinstance(trail, list):
        skeleton["trail"] = trail = [dict(entry) if isinstance(entry, dict) else entry for entry in trail]
        for place, entry in enumerate(trail):
            if isinstance(entry, dict):
                _take(entry, "auxiliaries", f"/trail/{place}", names, lists)
                if isinstance(entry.get("model"), dict):
                    entry["model"] = _core_taken(entry["model"], f"/trail/{place}/model", lists)
    intent = skeleton.get("intent")
    if isinstance(intent, dict) and isinstance(intent.get("target_states"), dict):
        targets = dict(intent["target_states"])
        _take(targets, "states", "/intent/target_states", state_rows, lists)
        _take(targets, "variables", "/intent/target_states", names, lists)
        skeleton["intent"] = {**intent, "target_states": targets}
    return skeleton, lists


def _core_taken(model: Json, pointer: str, lists: list[tuple[str, Callable[[Any, str], Any], Any]]) -> Json:
    model = dict(model)
    _take(model, "variables", pointer, names, lists)
    if isinstance(model.get("terms"), list):
        model["terms"] = [dict(block) if isinstance(block, dict) else block for block in model["terms"]]
        for place, block in enumerate(model["terms"]):
            if isinstance(block, dict):
                _take(block, "members", f"{pointer}/terms/{place}", member_rows, lists)
                _take(block, "weights", f"{pointer}/terms/{place}", weights, lists)
    return model


def _take(
    fields: Json,
    key: str,
    pointer: str,
    check: Callable[[Any, str], Any],
    lists: list[tuple[str, Callable[[Any, str], Any], Any]],
) -> None:
    value = fields.get(key)
    if isinstance(value, (list, np.ndarray)):
        if isinstance(value, list):
            lists.append((f"{pointer}/{key}", check, value))
        fields[key] = []


def names(value: list[Any], pointer: str) -> list[str]:
    """A list of variable names: strings of 1 to ``LARGEST_NAME`` characters, none twice.

    Raises
    ------
    InputError
        At the first name that is none, or that stands twice.
    """
    if set(map(type, value)) - {str}:
        place = next(i for i, item in enumerate(value) if type(item) is not str)
        raise InputError(f"a variable name is a string, not {quoted(value[place])}", f"{pointer}/{place}")
    lengths = np.fromiter(map(len, value), np.int64, len(value))
    wrong = (lengths < 1) | (lengths > LARGEST_NAME)
    if wrong.any():
        place = int(wrong.argmax())
        raise InputError(
            f"a variable name has 1 to {LARGEST_NAME} characters, this one {lengths[place]}", f"{pointer}/{place}"
        )
    if len(set(value)) < len(value):
        seen: set[str] = set()
        for place, name in enumerate(value):
            if name in seen:
                raise InputError(f"the name {quoted(name)} stands twice", f"{pointer}/{place}")
            seen.add(name)
    return value


def integers(value: list[Any], low: int, high: int, pointer: Callable[[int], str], what: str) -> NDArray[np.int64]:
    """A flat list as int64; whole floats (2.0) are integers in JSON, truth values are not.

    Raises
    ------
    InputError
        At the first item that is no integer from `low` to `high`.
    """
    kinds = set(map(type, value))
    if kinds <= {int}:
        try:
            array = np.array(value, np.int64)
        except OverflowError:
            array = None
        if array is not None:
            wrong = (array < low) | (array > high)
            if not wrong.any():
                return array
            place = int(wrong.argmax())
            raise InputError(_not_between(value[place], low, high, what), pointer(place))
    for place, item in enumerate(value):
        whole = type(item) is int or (type(item) is float and item.is_integer())
        if not whole or not low <= item <= high:
            raise InputError(_not_between(item, low, high, what), pointer(place))
    return np.array([int(item) for item in value], np.int64)


def _not_between(item: Any, low: int, high: int, what: str) -> str:
    if high == SAFE_INTEGER:
        mend = "a whole number within 2**53 - 1 (beyond it, write all weights of the block as strings)"
    else:
        mend = f"a whole number from {low} to {high}"
    return f"{what} is {mend}, not {quoted(item)}"


def _rows(
    value: list[Any], low: int, high: int, pointer: str, what: str, least: int
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """A list of lists of integers as (lengths, all integers in one row)."""
    if set(map(type, value)) - {list}:
        place = next(i for i, item in enumerate(value) if type(item) is not list)
        raise InputError(f"a list of integers is needed here, not {quoted(value[place])}", f"{pointer}/{place}")
    lengths = np.fromiter(map(len, value), np.int64, len(value))
    if (lengths < least).any():
        place = int((lengths < least).argmax())
        raise InputError("the list is empty; the constant has a field of its own", f"{pointer}/{place}")
    ends = np.cumsum(lengths)

    def at(index: int) -> str:
        row = int(np.searchsorted(ends, index, side="right"))
        return f"{pointer}/{row}/{index - int(ends[row] - lengths[row])}"

    return lengths, integers(list(chain.from_iterable(value)), low, high, at, what)


def member_rows(value: list[Any], pointer: str) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Members of a block as (length of each row, all members in one row)."""
    return _rows(value, 0, LARGEST_MEMBER, pointer, "a member", 1)


def state_rows(value: list[Any], pointer: str) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Target states as (length of each row, all values in one row)."""
    return _rows(value, -1, 1, pointer, "a value of a variable", 0)


def weights(value: list[Any], pointer: str) -> NDArray[Any]:
    """Weights of a block: all integers within 2**53 - 1 (int64), or all strings of integers (Python integers).

    Raises
    ------
    InputError
        At the first weight that is neither, or of the other kind than the first.
    """
    if not value or type(value[0]) is not str:
        return integers(value, -SAFE_INTEGER, SAFE_INTEGER, lambda place: f"{pointer}/{place}", "a weight")
    return np.array(list(_whole_texts(value, pointer)), dtype=object)


def _whole_texts(value: list[Any], pointer: str) -> Iterator[int]:
    for place, item in enumerate(value):
        if type(item) is not str:
            raise InputError(
                f"weights of one block are all numbers or all strings; {quoted(item)} follows a string",
                f"{pointer}/{place}",
            )
        if len(item) > LARGEST_WEIGHT:
            raise InputError(
                f"a weight of {len(item)} characters; at most {LARGEST_WEIGHT} are read", f"{pointer}/{place}"
            )
        if not _WHOLE.fullmatch(item):
            raise InputError(f'a weight as a string is like "-12", not {quoted(item)}', f"{pointer}/{place}")
        yield int(item)
