"""Large text files as arrays: bounded chunks, comments taken out, words found and whole numbers read by array work.

Memory is proportional to one chunk and to the arrays that come out of it, never to Python objects for each word.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.exchange.files import decoded, pieces
from hubokit.exchange.json_text import quoted

CHUNK = 2**22
"""Bytes scanned at a time."""

LINE_LIMIT = 2**20
"""Longest comment line or word, in bytes."""

_NEWLINE = 10


@dataclass(frozen=True)
class Chunk:
    """A stretch of a file that ends at a line end, or at white space inside a very long line.

    Parameters
    ----------
    data : uint8 array
        Line ends are line feeds; a carriage return is white space.
    line : int
        Number of the first line, from 1.
    fresh : bool
        Whether the chunk begins at the start of a line.
    """

    data: NDArray[np.uint8]
    line: int
    fresh: bool


def chunks(path: str | os.PathLike[str], *, size: int = CHUNK) -> Iterator[Chunk]:
    """The file in chunks of about `size` bytes, inflated, without a byte order mark.

    Raises
    ------
    InputError, LimitError
        The file cannot be read (see `hubokit.exchange.files.pieces`), or a word is longer than ``LINE_LIMIT``.
    """
    line, fresh, first = 1, True, True
    held: list[bytes] = []
    length = 0
    for piece in pieces(path):
        if first:
            piece, first = piece.removeprefix(b"\xef\xbb\xbf"), False
        held.append(piece)
        length += len(piece)
        if length < size:
            continue
        text = b"".join(held)
        cut = text.rfind(b"\n") + 1
        if cut == 0 and not (fresh and text[:1] in (b"*", b"c", b"#", b"%")):
            cut = max(text.rfind(b" "), text.rfind(b"\t")) + 1
        if cut == 0:
            if length > size + LINE_LIMIT:
                raise InputError("a word or a comment of more than a million characters", f"line {line}")
            held = [text]
            continue
        yield Chunk(np.frombuffer(text[:cut], np.uint8).copy(), line, fresh)
        line += text.count(b"\n", 0, cut)
        fresh = text[cut - 1 : cut] == b"\n"
        held, length = [text[cut:]], len(text) - cut
    if length:
        yield Chunk(np.frombuffer(b"".join(held), np.uint8).copy(), line, fresh)


def without_comments(chunk: Chunk, marks: bytes, take: Callable[[str, int], None]) -> Chunk:
    """The chunk with comment lines blanked; each is handed to `take` with its line number.

    Parameters
    ----------
    chunk : Chunk
    marks : bytes
        A line whose first byte is one of these is a comment.
    take : callable
        Called with the text of the line (without mark) and its number.
    """
    data = chunk.data
    starts = np.flatnonzero(data == _NEWLINE) + 1
    if chunk.fresh:
        starts = np.concatenate([[0], starts])
    starts = starts[starts < len(data)]
    commented = starts[np.isin(data[starts], np.frombuffer(marks, np.uint8))]
    if len(commented) == 0:
        return chunk
    ends_of_lines = np.flatnonzero(data == _NEWLINE)
    places = np.searchsorted(ends_of_lines, commented)
    raw = data.tobytes()
    for start, place in zip(commented.tolist(), places.tolist(), strict=True):
        end = int(ends_of_lines[place]) if place < len(ends_of_lines) else len(data)
        text = raw[start + 1 : end]
        if b"hubokit" in text[:12]:
            try:
                take(decoded(text).strip(), chunk.line + place)
            except InputError as error:
                raise InputError(error.message, f"line {chunk.line + place}") from None
        elif text:
            take(text[:200].decode("utf-8", "replace").strip(), chunk.line + place)
        data[start:end] = 32
    return Chunk(data, chunk.line, chunk.fresh)


@dataclass(frozen=True)
class Words:
    """Words of a chunk: stretches without white space.

    Parameters
    ----------
    chunk : Chunk
    start, end : int64 arrays, shape (w,)
        Word i is ``chunk.data[start[i]:end[i]]``.
    """

    chunk: Chunk
    start: NDArray[np.int64]
    end: NDArray[np.int64]

    def __len__(self) -> int:
        return len(self.start)

    @property
    def first(self) -> NDArray[np.uint8]:
        """First byte of each word (of an empty word whatever follows it)."""
        return self.chunk.data[np.minimum(self.start, len(self.chunk.data) - 1)]

    def text(self, index: int) -> str:
        """A word as text; bytes that are not UTF-8 are replaced."""
        return self.chunk.data[self.start[index] : self.end[index]].tobytes().decode("utf-8", "replace")

    def line(self, index: int) -> int:
        """Line number of a word."""
        return self.chunk.line + int(np.count_nonzero(self.chunk.data[: self.start[index]] == _NEWLINE))

    def place(self, index: int) -> str:
        """The place of a word for an error."""
        return f"line {self.line(index)}"

    def lines(self) -> NDArray[np.int64]:
        """Line number of every word."""
        ends = np.flatnonzero(self.chunk.data == _NEWLINE)
        return self.chunk.line + np.searchsorted(ends, self.start)

    def part(self, chosen: NDArray[np.bool_] | NDArray[np.int64] | slice) -> Words:
        """Some of the words."""
        return Words(self.chunk, self.start[chosen], self.end[chosen])

    def inside(self, skip: int) -> Words:
        """The same words without their first `skip` bytes."""
        return Words(self.chunk, self.start + skip, self.end)


def words(chunk: Chunk) -> Words:
    """The words of a chunk.

    Examples
    --------
    >>> found = words(Chunk(np.frombuffer(b"+2 x1\\n-3 x2", np.uint8), 7, True))
    >>> [found.text(i) for i in range(len(found))], found.line(2)
    (['+2', 'x1', '-3', 'x2'], 8)
    """
    inside = np.zeros(len(chunk.data) + 2, np.int8)
    inside[1:-1] = chunk.data > 32
    turns = np.diff(inside)
    return Words(chunk, np.flatnonzero(turns == 1), np.flatnonzero(turns == -1))


def whole_numbers(found: Words, what: str, *, signed: bool = True) -> NDArray[Any]:
    """Every word as a whole number: int64, or Python integers where one has more than 18 digits.

    Parameters
    ----------
    found : Words
    what : str
        What the number is, for the error.
    signed : bool
        Whether a sign may stand in front.

    Raises
    ------
    InputError
        At the first word that is no whole number, or has more than 1000 digits; the line is named.

    Examples
    --------
    >>> whole_numbers(words(Chunk(np.frombuffer(b"+2 -30", np.uint8), 1, True)), "a weight").tolist()
    [2, -30]
    """
    data, lead = found.chunk.data, found.first if len(found) else np.zeros(0, np.uint8)
    negative = lead == ord("-")
    start = found.start + (negative | (lead == ord("+"))) if signed else found.start
    length = found.end - start
    values = np.zeros(len(found), np.int64)
    good = length > 0
    longest = int(length.max()) if len(found) else 0
    for position in range(min(longest, 18)):
        active = np.flatnonzero(length > position)
        digit = data[start[active] + position].astype(np.int64) - 48
        values[active] = values[active] * 10 + digit
        good[active] &= (digit >= 0) & (digit <= 9)
    if not good.all():
        raise _no_number(found, int((~good).argmax()), what)
    values = np.where(negative, -values, values)
    if longest <= 18:
        return values
    wide = values.astype(object)
    for place in np.flatnonzero(length > 18).tolist():
        text = found.text(place)
        if length[place] > 1000 or not text.lstrip("+-").isascii() or not text.lstrip("+-").isdigit():
            raise _no_number(found, place, what)
        wide[place] = int(text)
    return wide


def _no_number(found: Words, place: int, what: str) -> InputError:
    size = int(found.end[place] - found.start[place])
    if size > 1000:
        return InputError(f"{what} of {size} characters; at most 1000 digits are read", found.place(place))
    return InputError(f"{what} is a whole number, not {quoted(found.text(place))}", found.place(place))
