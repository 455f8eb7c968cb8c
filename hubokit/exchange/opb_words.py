"""The words of an OPB file as arrays: kinds and values, one entry a word."""

from __future__ import annotations

import os
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.exchange.json_text import quoted
from hubokit.exchange.scanning import Chunk, Words, chunks, whole_numbers, without_comments, words

END, MINIMISE, AT_LEAST, AT_MOST, EQUAL, NUMBER, WIDE, POSITIVE, NEGATIVE = range(9)
"""Kinds of words: ``;``, ``min:``, relations (below NUMBER), numbers, those beyond 18 digits, literals."""

_RELATIONS = {AT_LEAST: ">=", AT_MOST: "<=", EQUAL: "="}
_SPLIT = ((b"=", b" = "), (b"> = ", b" > "), (b"< = ", b" < "), (b";", b" ; "), (b"min:", b" min: "))


@dataclass(frozen=True)
class OpbWords:
    """All words of a file.

    Parameters
    ----------
    kinds : uint8 array, shape (w,)
        WIDE numbers are shown as NUMBER; their values stand in `wide`.
    values : int32 or int64 array, shape (w,)
        Numbers, and literals as +-1 .. +-n.
    wide : dict of int to int
        Word to a number of more than 18 digits.
    end_lines : int64 array
        Line of every ``;``.
    """

    kinds: NDArray[np.uint8]
    values: NDArray[Any]
    wide: dict[int, int]
    end_lines: NDArray[np.int64]

    def numbers(self, places: NDArray[np.int64]) -> NDArray[Any]:
        """Numbers at these words; Python integers where one is wide."""
        values = self.values[places]
        if not self.wide:
            return values
        listed = [self.wide.get(place, value) for place, value in zip(places.tolist(), values.tolist(), strict=True)]
        return np.array(listed, dtype=object)

    def relation(self, place: int) -> str:
        """The relation at a word."""
        return _RELATIONS[int(self.kinds[place])]

    def line_of(self, place: int) -> int:
        """Line on which the statement of a word ends."""
        if not len(self.end_lines):
            return 1
        ends = np.flatnonzero(self.kinds == END)
        return int(self.end_lines[min(int(np.searchsorted(ends, place)), len(ends) - 1)])


def opb_words(path: str | os.PathLike[str], take: Callable[[str, int], None]) -> OpbWords:
    """Read the words of an OPB file; comment lines go to `take`.

    Raises
    ------
    InputError
        A word that does not belong into an OPB file, with its line.
    """
    kinds: list[NDArray[np.uint8]] = []
    values: list[NDArray[Any]] = []
    end_lines: list[NDArray[np.int64]] = []
    wide: dict[int, int] = {}
    total = 0
    for chunk in chunks(path):
        found = words(_split(without_comments(chunk, b"*", take)))
        if not len(found):
            continue
        kind, value, large = _classified(found)
        wide.update((total + place, number) for place, number in large.items())
        ends = np.flatnonzero(kind == END)
        if len(ends):
            end_lines.append(found.lines()[ends])
        kinds.append(kind)
        values.append(value.astype(np.int32) if int(np.abs(value).max()) < 2**31 else value)
        total += len(kind)
    return OpbWords(
        np.concatenate(kinds) if kinds else np.zeros(0, np.uint8),
        np.concatenate(values) if values else np.zeros(0, np.int64),
        wide,
        np.concatenate(end_lines) if end_lines else np.zeros(0, np.int64),
    )


def _split(chunk: Chunk) -> Chunk:
    """Relations, ``;`` and ``min:`` set off by white space."""
    text = chunk.data.tobytes()
    strict = re.search(rb"[<>](?!=)", text)
    if strict is not None:
        line = chunk.line + text.count(b"\n", 0, strict.start())
        raise InputError("a strict relation; >=, <= and = are read", f"line {line}")
    for mark, apart in _SPLIT:
        text = text.replace(mark, apart)
    return Chunk(np.frombuffer(text, np.uint8), chunk.line, chunk.fresh)


def _classified(found: Words) -> tuple[NDArray[np.uint8], NDArray[np.int64], dict[int, int]]:
    first = found.first
    size = found.end - found.start
    kind = np.full(len(found), 255, np.uint8)
    single = size == 1
    for mark, meaning in ((b";", END), (b">", AT_LEAST), (b"<", AT_MOST), (b"=", EQUAL)):
        kind[single & (first == mark[0])] = meaning
    digit = (first >= ord("0")) & (first <= ord("9"))
    kind[digit | (first == ord("+")) | (first == ord("-"))] = NUMBER
    kind[first == ord("x")] = POSITIVE
    kind[first == ord("~")] = NEGATIVE
    for place in np.flatnonzero((first == ord("m")) & (size == 4)).tolist():
        if found.text(place) == "min:":
            kind[place] = MINIMISE
    strange = kind == 255
    if strange.any():
        raise _stranger(found, int(strange.argmax()))
    value = np.zeros(len(found), np.int64)
    numbers = np.flatnonzero(kind == NUMBER)
    read = whole_numbers(found.part(numbers), "a weight")
    large: dict[int, int] = {}
    if read.dtype == object:
        beyond = np.abs(read) >= 10**18
        large = {int(numbers[i]): int(read[i]) for i in np.flatnonzero(beyond).tolist()}
        read[np.asarray(beyond, bool)] = 0
    value[numbers] = read.astype(np.int64)
    for meaning, skip, sign in ((POSITIVE, 1, 1), (NEGATIVE, 2, -1)):
        chosen = np.flatnonzero(kind == meaning)
        literals = found.part(chosen)
        if meaning == NEGATIVE and len(chosen):
            bare = (literals.end - literals.start < 3) | (literals.inside(1).first != ord("x"))
            if bare.any():
                raise _stranger(found, int(chosen[bare.argmax()]))
        value[chosen] = sign * _variables(literals, skip)
    return kind, value, large


def _variables(literals: Words, skip: int) -> NDArray[np.int64]:
    long = literals.end - literals.start - skip > 10
    if long.any():
        raise _stranger(literals, int(long.argmax()))
    numbers = whole_numbers(literals.inside(skip), "the number of a variable", signed=False).astype(np.int64)
    if len(numbers) and int(numbers.min()) < 1:
        raise _stranger(literals, int(numbers.argmin()))
    return numbers


def _stranger(found: Words, place: int) -> InputError:
    text = found.text(place)
    mend = "a weight, x1, ~x1, a relation, ; or min: is needed"
    if text.startswith("max:"):
        mend = "only min: is read; turn all signs round"
    elif text.startswith(("soft:", "[")):
        mend = "soft constraints (WBO) are not read; write them as terms of the objective"
    return InputError(f"{quoted(text)} does not belong here; {mend}", found.place(place))
