"""Matrix Market coordinate files: a quadratic model as the matrix of its energy (Boisvert, Pozo, Remington 1996).

The energy is ``constant + scale * v' A v``, with the constant and scale in comment lines. Two forms are written and
the comment says which: *upper* (general, i < j, each pair once) and *symmetric* (off-diagonals halved, so that the
scale is half the resolution and the diagonal doubled). The fields of a boolean model stand on the diagonal; those of
a spin model in a second file, NAME.fields.mtx, never on the diagonal, since s*s = 1.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import HubokitError, InputError
from hubokit.exchange.arrays import quadratic_parts
from hubokit.exchange.cnf import default_name
from hubokit.exchange.files import refuse_existing, write_bytes
from hubokit.exchange.header import Header, header_lines, read_sidecar, refuse_many
from hubokit.exchange.json_text import quoted
from hubokit.exchange.reading import Reading
from hubokit.exchange.scanning import Words, chunks, whole_numbers, without_comments, words
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction, common_resolution, smallest_weights


class MarketHeader(Header):
    """Comment lines of such a file: ours, and the name of the file of spin fields."""

    fields: str | None = None

    def put(self, key: str, value: Any, number: int | None, place: str) -> None:
        """Set one fact."""
        if key == "matrix":
            if value not in ("upper", "symmetric"):
                raise InputError(f"the matrix is upper or symmetric, not {quoted(value)}", place)
        elif key == "fields":
            if not isinstance(value, str) or Path(value).name != value or not value:
                raise InputError(f"the name of a file beside this one is needed, not {quoted(value)}", place)
            self.fields = value
        else:
            super().put(key, value, number, place)


@dataclass(frozen=True)
class Entries:
    """What a file holds: entries (row, column, value) counted from 0."""

    shape: tuple[int, int]
    symmetric: bool
    rows: NDArray[np.int64]
    columns: NDArray[np.int64]
    values: NDArray[Any]
    resolution: Fraction


def read_matrix_market(path: str | os.PathLike[str]) -> Hamiltonian:
    """The model of a Matrix Market file; see `load_matrix_market`."""
    return load_matrix_market(path).model


def load_matrix_market(path: str | os.PathLike[str]) -> Reading:
    """The model of a Matrix Market coordinate file, integer or real, general or symmetric.

    Parameters
    ----------
    path : path
        ``.mtx`` or ``.mtx.gz``. Entries (i, j) and (j, i) are added. Without a comment line that says the domain the
        matrix is read as boolean, and a remark says so.

    Raises
    ------
    InputError
        Not such a file, a diagonal in a spin matrix, a missing file of fields; the line is named.
    """
    try:
        header = MarketHeader()
        found = _entries(path, header.take)
        if found.shape[0] != found.shape[1]:
            raise InputError(f"a square matrix is needed, not {found.shape[0]} x {found.shape[1]}", "size line")
        domain = header.domain or "boolean"
        off = found.rows != found.columns
        if domain == "spin" and not off.all():
            raise InputError("a spin matrix has no diagonal, since s*s = 1; put fields into a file of their own")
        values = found.values
        if found.symmetric:
            values = smallest_weights(np.where(off, 2, 1) * values.astype(object))
        parts = [(np.stack([found.rows, found.columns], axis=1), values)]
        if not header.touched:
            read_sidecar(path, header)
        count = found.shape[0]
        model = Hamiltonian.from_arrays(
            [members for members, _ in parts],
            [weights for _, weights in parts],
            domain=domain,
            labels=header.labels(count, default_name),
            resolution=header.scale * found.resolution,
            constant=header.constant,
            convention=header.convention,
        )
        if header.fields is not None:
            model = model + _fields(Path(path).with_name(header.fields), model)
        said = () if header.domain else ("the file does not say its domain; it was read as boolean, v' A v",)
        return Reading(model, said)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None


def _fields(path: Path, model: Hamiltonian) -> Hamiltonian:
    """The fields of a spin model, a matrix of one column in a file of its own."""
    try:
        header = MarketHeader()
        found = _entries(path, header.take)
        if found.shape != (model.size, 1) or found.symmetric:
            raise InputError(f"fields are a general {model.size} x 1 matrix", "size line")
    except HubokitError as error:
        raise error.located(file=str(path)) from None
    return Hamiltonian.from_arrays(
        [found.rows[:, None]],
        [found.values],
        domain=model.domain,
        labels=model.labels,
        resolution=header.scale * found.resolution,
        convention=model.convention,
    )


def _entries(path: str | os.PathLike[str], take: Callable[[str, int], None]) -> Entries:
    banner: list[str] = []

    def read_line(text: str, line: int) -> None:
        if line == 1:
            banner.extend(text.removeprefix("%").lower().split())
        else:
            take(text, line)

    shape: tuple[int, int] | None = None
    entries, total = 0, 0
    gathered: list[tuple[NDArray[np.int64], NDArray[np.int64], Any]] = []
    for chunk in chunks(path):
        found = words(without_comments(chunk, b"%", read_line))
        if not len(found):
            continue
        if shape is None:
            real = _checked_banner(banner)
            sizes = whole_numbers(found.part(slice(0, 3)), "a size", signed=False).tolist()
            if len(sizes) < 3:
                raise InputError("the size line holds rows, columns and entries", found.place(0))
            refuse_many(max(sizes[:2]), found.place(0))
            shape, entries = (sizes[0], sizes[1]), sizes[2]
            found = found.part(slice(3, None))
        if len(found) % 3:
            raise InputError("an entry is a row, a column and a value", found.place(len(found) - 1))
        rows, columns = (_positions(found.part(slice(i, None, 3)), shape[i]) for i in (0, 1))
        value = found.part(slice(2, None, 3))
        gathered.append((rows, columns, _rationals(value) if real else whole_numbers(value, "a value")))
        total += len(rows)
    if shape is None:
        _checked_banner(banner)
        raise InputError("the size line is missing", "end")
    if total != entries:
        raise InputError(f"the size line says {entries} entries, the file holds {total}", "size line")
    empty = np.zeros(0, np.int64)
    values, unit = _whole([value for *_, value in gathered])
    return Entries(
        shape,
        banner[-1] == "symmetric",
        np.concatenate([rows for rows, *_ in gathered]) if gathered else empty,
        np.concatenate([columns for _, columns, _ in gathered]) if gathered else empty,
        values,
        unit,
    )


def _checked_banner(banner: list[str]) -> bool:
    """Whether the values are real; the first line must be a banner of a kind that is read."""
    known = len(banner) == 5 and banner[0].lstrip("%") == "matrixmarket" and banner[1:3] == ["matrix", "coordinate"]
    if not known or banner[3] not in ("integer", "real") or banner[4] not in ("general", "symmetric"):
        raise InputError(
            "the first line is %%MatrixMarket matrix coordinate, integer or real, general or symmetric", "line 1"
        )
    return banner[3] == "real"


def _positions(found: Words, size: int) -> NDArray[np.int64]:
    numbers = whole_numbers(found, "a position", signed=False)
    wrong = np.asarray((numbers < 1) | (numbers > size), dtype=np.bool_)
    if wrong.any():
        place = int(wrong.argmax())
        raise InputError(f"position {quoted(found.text(place))} is out of range 1 to {size}", found.place(place))
    return numbers.astype(np.int64) - 1


def _rationals(found: Words) -> list[Fraction]:
    lines = found.lines()
    return [as_fraction(found.text(i), f"line {lines[i]}") for i in range(len(found))]


def _whole(parts: list[Any]) -> tuple[NDArray[Any], Fraction]:
    """Values as whole numbers of a common resolution."""
    if not parts:
        return np.zeros(0, np.int64), Fraction(1)
    if isinstance(parts[0], list):
        listed = [value for part in parts for value in part]
        unit = common_resolution(listed)
        return smallest_weights(np.array([int(value / unit) for value in listed], dtype=object)), unit
    return smallest_weights(np.concatenate(parts)), Fraction(1)


def write_matrix_market(
    model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False, matrix: str = "upper"
) -> None:
    """Write a quadratic model as a Matrix Market file, and the fields of a spin model beside it.

    Parameters
    ----------
    model : Hamiltonian
        Locality at most 2.
    matrix : "upper" or "symmetric"
        Each pair once (i < j), or halved on both sides of the diagonal.

    Raises
    ------
    InputError
        The file exists and force is not set, products of more than two variables, or another word.
    """
    if matrix not in ("upper", "symmetric"):
        raise InputError(f'the matrix is "upper" or "symmetric", not {matrix!a}', "matrix")
    rows, columns, values, fields = quadratic_parts(model)
    name = os.fspath(path)
    lines = header_lines("%", model, scale=model.resolution, constant=model.constant, default=default_name)
    lines.insert(0, "% energy = constant + scale * (v' A v" + (" + fields . v)" if fields.any() else ")"))
    lines.append(f'% hubokit matrix "{matrix}"')
    beside = Path(name.removesuffix(".gz")).with_suffix(".fields.mtx")
    if fields.any():
        refuse_existing(beside, force=force)
        lines.append(f'% hubokit fields "{beside.name}"')
    if matrix == "symmetric":  # x_i x_j stands in both halves, so a unit is half the resolution
        off = rows != columns
        values = np.where(off, values, 2 * values.astype(object))
        rows, columns = columns, rows
        lines = [line.replace(f'scale "{model.resolution}"', f'scale "{model.resolution / 2}"') for line in lines]
        if fields.any():
            lines[0] = "% energy = constant + scale * v' A v + fields, which have a scale of their own"
    kind = "general" if matrix == "upper" else "symmetric"
    write_bytes(name, _file(kind, lines, (model.size, model.size), rows, columns, values), force=force)
    if fields.any():
        places = np.flatnonzero(fields)
        own = [f'% hubokit scale "{model.resolution}"']
        zeros = np.zeros(len(places), np.int64)
        write_bytes(beside, _file("general", own, (model.size, 1), places, zeros, fields[places]), force=force)


def _file(
    kind: str,
    lines: list[str],
    shape: tuple[int, int],
    rows: NDArray[np.int64],
    columns: NDArray[np.int64],
    values: NDArray[Any],
) -> Iterator[bytes]:
    yield f"%%MatrixMarket matrix coordinate integer {kind}\n".encode()
    yield "".join(f"{line}\n" for line in lines).encode()
    yield f"{shape[0]} {shape[1]} {len(values)}\n".encode()
    for start in range(0, len(values), 65_536):
        stop = start + 65_536
        listed = zip(
            rows[start:stop].tolist(), columns[start:stop].tolist(), values[start:stop].tolist(), strict=True
        )
        yield "".join(f"{row + 1} {column + 1} {value}\n" for row, column, value in listed).encode()
