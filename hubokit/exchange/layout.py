"""How a document is laid out in a file: one field or block a line, long lists broken into short lines.

Line ends in the terms follow the content, not a count from the start of the list: the terms with the same first
member share lines, so that a term more or less changes one line of members and one of weights.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

WIDTH = 100
"""A list of names is broken before it reaches this many characters."""

TERMS_PER_LINE = 16


def laid_out(document: Mapping[str, Any]) -> Iterator[bytes]:
    """The text of a document in UTF-8, in parts that belong one after the other.

    Parameters
    ----------
    document : mapping
        Plain JSON values; members and weights of blocks may be integer arrays.

    Examples
    --------
    >>> print(b"".join(laid_out({"variables": ["a", "b"], "terms": [
    ...     {"locality": 1, "members": np.array([[0], [1]]), "weights": np.array([1, -4])}]})).decode(), end="")
    {"variables": ["a", "b"],
     "terms": [
      {"locality": 1,
       "members": [[0],[1]],
       "weights": [1,-4]}]}
    """
    yield from _object(document, " ")
    yield b"\n"


def _object(fields: Mapping[str, Any], indent: str) -> Iterator[bytes]:
    yield b"{"
    for place, (key, value) in enumerate(fields.items()):
        if place:
            yield (",\n" + indent).encode()
        yield json.dumps(key, ensure_ascii=False).encode() + b": "
        yield from _field(key, value, fields, indent)
    yield b"}"


def _field(key: str, value: Any, fields: Mapping[str, Any], indent: str) -> Iterator[bytes]:
    if key in ("members", "weights") and isinstance(fields.get("members"), np.ndarray):
        yield _broken(value, fields["members"], indent)
    elif isinstance(value, (list, tuple)) and value and all(isinstance(item, str) for item in value):
        yield _wrapped(value, indent)
    elif isinstance(value, (list, tuple)) and value and all(isinstance(item, Mapping) for item in value):
        yield b"["
        for place, item in enumerate(value):
            yield ((",\n" if place else "\n") + indent + " ").encode()
            yield from _item(item, indent + "  ")
        yield b"]"
    else:
        yield from _item(value, indent + " ")


def _item(value: Any, indent: str) -> Iterator[bytes]:
    """A value on one line, or an object with a line for each field where it is long or holds arrays of terms."""
    if isinstance(value, Mapping) and _is_long(value):
        yield from _object(value, indent)
    else:
        yield _plain(value)


def _is_long(value: Mapping[str, Any]) -> bool:
    if isinstance(value.get("members"), np.ndarray) or "terms" in value:
        return True
    return len(_plain(value)) > WIDTH and not all(isinstance(item, int) for item in value.values())


def _plain(value: Any) -> bytes:
    return json.dumps(value, ensure_ascii=False, default=np.ndarray.tolist).encode()


def _wrapped(names: Sequence[str], indent: str) -> bytes:
    lines, line = [], ""
    for name in names:
        text = json.dumps(name, ensure_ascii=False)
        if line and len(line) + len(text) > WIDTH:
            lines.append(line)
            line = ""
        line += (", " if line else "") + text
    lines.append(line)
    return ("[" + f",\n{indent} ".join(lines) + "]").encode()


def line_starts(members: NDArray[np.integer[Any]]) -> NDArray[np.int64]:
    """Rows at which a new line begins, the first row aside.

    A line holds rows with the same first member (of one member: the same sixteen), at most ``TERMS_PER_LINE``.

    Examples
    --------
    >>> line_starts(np.array([[0, 1], [0, 2], [1, 2]])).tolist()
    [2]
    """
    if len(members) == 0:
        return np.zeros(0, np.int64)
    first = members[:, 0] if members.shape[1] > 1 else members[:, 0] // TERMS_PER_LINE
    fresh = np.ones(len(first), bool)
    fresh[1:] = first[1:] != first[:-1]
    run = np.maximum.accumulate(np.where(fresh, np.arange(len(first)), 0))
    starts = fresh | ((np.arange(len(first)) - run) % TERMS_PER_LINE == 0)
    return np.flatnonzero(starts)[1:]


def _broken(values: Any, members: NDArray[np.integer[Any]], indent: str) -> bytes:
    """Members or weights as compact JSON with line ends at the rows of `line_starts`."""
    import orjson

    if not isinstance(values, np.ndarray):
        text = orjson.dumps(values)
        ends = _commas(text)
    else:
        text = orjson.dumps(np.ascontiguousarray(values), option=orjson.OPT_SERIALIZE_NUMPY)
        ends = _commas(text)
        if values.ndim == 2:
            ends = ends[values.shape[1] - 1 :: values.shape[1]]
    cuts = [0, *(ends[line_starts(members) - 1] + 1).tolist(), len(text)]
    lines = [text[start:stop] for start, stop in pairwise(cuts)]
    return f"\n{indent} ".encode().join(lines)


def _commas(text: bytes) -> NDArray[np.int64]:
    return np.flatnonzero(np.frombuffer(text, np.uint8) == ord(","))
