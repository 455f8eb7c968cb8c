"""CSV table of terms: one term a line, its coefficient first, then its members.

Two dialects, told apart by the title of the first column. ``coefficient``: rationals, and members by name, for people
and spreadsheets. ``weight``: whole numbers in units of the scale, and members by number from 1, read by array work. A
comment line ``# hubokit domain "spin"`` is required in both; names, scale and constant stand in such lines too.
"""

from __future__ import annotations

import csv
import io
import os
import re
from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import HubokitError, InputError
from hubokit.exchange.cnf import default_name
from hubokit.exchange.files import read_text, write_bytes
from hubokit.exchange.header import Header, header_lines
from hubokit.exchange.json_text import quoted
from hubokit.exchange.reading import Reading
from hubokit.exchange.scanning import Chunk, chunks, whole_numbers, without_comments, words
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.labels import as_label
from hubokit.model.numbers import as_fraction, common_resolution, format_fraction, smallest_weights

NAMED_LIMIT = 100_000
"""A model of at most so many terms is written with names, a larger one with numbers."""

Group = tuple[NDArray[Any], NDArray[Any]]


def read_table(path: str | os.PathLike[str]) -> Hamiltonian:
    """The model of a CSV table of terms; see `load_table`."""
    return load_table(path).model


def load_table(path: str | os.PathLike[str]) -> Reading:
    """The model of a CSV table of terms.

    Parameters
    ----------
    path : path
        ``.csv`` or ``.csv.gz``. Equal terms are added up.

    Raises
    ------
    InputError
        Not such a table; the line is named.
    """
    try:
        header = Header()
        title = _title(path, header)
        if header.domain is None:
            raise InputError('the domain is not said; add the line # hubokit domain "spin" (or "boolean")', "line 1")
        model = _numbered(path, header) if title == "weight" else _named(path, header)
        return Reading(model)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None


def _title(path: str | os.PathLike[str], header: Header) -> str:
    """The title of the first column; comment lines before it go into the header."""
    for chunk in chunks(path):
        rest = without_comments(chunk, b"#", header.take)
        text = rest.data.tobytes()
        stripped = text.lstrip()
        if stripped:
            line = chunk.line + text.count(b"\n", 0, len(text) - len(stripped))
            title = re.split(rb"[,\r\n]", stripped[:1000], maxsplit=1)[0].strip().strip(b'"')
            if title not in (b"weight", b"coefficient"):
                shown = quoted(title.decode("utf-8", "replace"))
                raise InputError(f"the first column is titled coefficient or weight, not {shown}", f"line {line}")
            return title.decode()
    raise InputError("there is no title line, coefficient,members or weight,members", "line 1")


def _named(path: str | os.PathLike[str], header: Header) -> Hamiltonian:
    text = read_text(path)
    lines = text.split("\n")
    start = next(i for i, line in enumerate(lines) if line.strip() and not line.startswith("#"))
    rows = csv.reader(io.StringIO("\n".join(lines[start + 1 :]), newline=""), strict=True)
    names = {header.names[n]: n - 1 for n in sorted(header.names)}
    groups: dict[int, tuple[list[list[int]], list[Any]]] = {}
    try:
        for row in rows:
            place = f"line {start + 1 + rows.line_num}"
            cells = row[: next((i for i in range(len(row), 0, -1) if row[i - 1]), 0)]
            if not cells:
                continue
            if "" in cells:
                raise InputError("an empty cell between members", place)
            value = as_fraction(cells[0], place)
            members = [names.setdefault(as_label(cell, place), len(names)) for cell in cells[1:]]
            rows_of, values = groups.setdefault(len(members), ([], []))
            rows_of.append(members)
            values.append(value)
    except csv.Error as error:
        raise InputError(f"not CSV: {error}", f"line {start + 1 + rows.line_num}") from None
    unit = common_resolution(value for _, values in groups.values() for value in values)
    return Hamiltonian.from_arrays(
        [np.array(members, np.int64).reshape(len(members), size) for size, (members, _) in groups.items()],
        [np.array([int(v / unit) for v in values], dtype=object) for _, values in groups.values()],
        domain=header.domain or "",
        labels=list(names),
        resolution=unit * header.scale,
        constant=header.constant,
        convention=header.convention,
    )


def _numbered(path: str | os.PathLike[str], header: Header) -> Hamiltonian:
    groups: dict[int, list[Group]] = {}
    first, largest = True, 0
    for chunk in chunks(path):
        found = words(_cells(without_comments(chunk, b"#", lambda *_: None)))
        if first and len(found):
            found = found.part(found.lines() > found.lines()[0])
            first = False
        if not len(found):
            continue
        lines = found.lines()
        heads = np.flatnonzero(np.concatenate([[True], lines[1:] != lines[:-1]]))
        leading = np.zeros(len(found), bool)
        leading[heads] = True
        weights = whole_numbers(found.part(heads), "a weight")
        members = whole_numbers(found.part(~leading), "a member", signed=False)
        if len(members) and (int(members.min()) < 1 or int(members.max()) >= 2**31):
            place = int(np.flatnonzero(~leading)[int(np.asarray((members < 1) | (members >= 2**31)).argmax())])
            raise InputError("members are numbers of variables, from 1", found.place(place))
        lengths = np.diff(np.concatenate([heads, [len(found)]])) - 1
        starts = np.cumsum(lengths) - lengths
        flat = members.astype(np.int32)
        largest = max(largest, int(flat.max(initial=0)))
        for size in np.unique(lengths).tolist():
            rows = np.flatnonzero(lengths == size)
            groups.setdefault(size, []).append((flat[starts[rows, None] + np.arange(size)] - 1, weights[rows]))
    return Hamiltonian.from_arrays(
        [np.concatenate([members for members, _ in parts]) for parts in groups.values()],
        [smallest_weights(np.concatenate([weights for _, weights in parts])) for parts in groups.values()],
        domain=header.domain or "",
        labels=header.labels(header.count(largest), default_name),
        resolution=header.scale,
        constant=header.constant,
        convention=header.convention,
    )


def _cells(chunk: Chunk) -> Chunk:
    """Commas as white space, after empty cells at the ends of lines; an empty cell elsewhere is an error."""
    text = re.sub(rb",+(?=[ \r]*\n|[ \r]*\Z)", b"", chunk.data.tobytes())
    hole = re.search(rb",[ \t]*,|\n[ \t]*,", text)
    if hole is not None:
        line = chunk.line + text.count(b"\n", 0, hole.start() + 1)
        raise InputError("an empty cell", f"line {line}")
    return Chunk(np.frombuffer(text.replace(b",", b" "), np.uint8), chunk.line, chunk.fresh)


def write_table(
    model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False, members: str | None = None
) -> None:
    """Write a model as a CSV table of terms.

    Parameters
    ----------
    model : Hamiltonian
    members : "names" or "numbers", optional
        By default names up to ``NAMED_LIMIT`` terms, else numbers. A carriage return in a name would not outlive
        the cells of a table: such models are written with numbers.

    Raises
    ------
    InputError
        The file exists and force is not set, another word for members, or names that no cell can hold.
    """
    if members not in (None, "names", "numbers"):
        raise InputError(f'members are "names" or "numbers", not {members!a}', "members")
    returns = [label for label in model.labels if "\r" in label]
    if members == "names" and returns:
        raise InputError(f'a cell cannot hold the carriage return in {returns[0]!a}; members="numbers" would do')
    named = members == "names" or (members is None and not returns and len(model) <= NAMED_LIMIT)
    write_bytes(path, _named_lines(model) if named else _numbered_lines(model), force=force)


def _named_lines(model: Hamiltonian) -> Iterator[bytes]:
    lines = header_lines("#", model, scale=as_fraction(1), constant=as_fraction(0), default=lambda _: "")
    yield "".join(f"{line}\n" for line in lines).encode()
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(["coefficient", "members"])
    writer.writerows([format_fraction(value), *key] for key, value in model.terms())
    yield buffer.getvalue().encode()


def _numbered_lines(model: Hamiltonian) -> Iterator[bytes]:
    import orjson

    lines = header_lines("#", model, scale=model.resolution, constant=model.constant, default=default_name)
    yield "".join(f"{line}\n" for line in lines).encode()
    yield b"weight,members\n"
    for block in model.blocks:
        numbers = block.members.astype(np.int64) + 1
        if block.weights.dtype == object:
            for weight, row in zip(block.weights.tolist(), numbers.tolist(), strict=True):
                yield f"{weight},{','.join(map(str, row))}\n".encode()
            continue
        table = np.ascontiguousarray(np.hstack([block.weights.astype(np.int64)[:, None], numbers]))
        text = orjson.dumps(table, option=orjson.OPT_SERIALIZE_NUMPY)
        yield text[2:-2].replace(b"],[", b"\n") + b"\n"
