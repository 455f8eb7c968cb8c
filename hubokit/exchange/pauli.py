"""Pauli-Z strings: one line a term, its coefficient and a string of I and Z, one letter for each spin.

Z is the observable whose eigenvalues +1 and -1 are the values of a spin; a product of Z is a product of spins. Which
end of the string is the first variable is stated in the comment line ``# hubokit leftmost "first"`` (or ``"last"``),
because tools differ. A boolean model is written in spins, and reading undoes it.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import HubokitError, InputError, LimitError
from hubokit.exchange.cnf import default_name
from hubokit.exchange.files import write_bytes
from hubokit.exchange.header import Header, header_lines
from hubokit.exchange.json_text import quoted
from hubokit.exchange.reading import Reading
from hubokit.exchange.scanning import Words, chunks, without_comments, words
from hubokit.model.digest import coefficient_texts
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction, common_resolution, format_fraction

LETTER_LIMIT = 2**30
"""Most letters in a file, terms times variables."""

_ROWS = 4096


class PauliHeader(Header):
    """Comment lines of such a file: ours, and which end is the first variable."""

    leftmost: str | None = None

    def put(self, key: str, value: Any, number: int | None, place: str) -> None:
        """Set one fact."""
        if key != "leftmost":
            super().put(key, value, number, place)
        elif value in ("first", "last"):
            self.leftmost = value
        else:
            raise InputError(f'leftmost is "first" or "last", not {quoted(value)}', place)


def read_pauli(path: str | os.PathLike[str]) -> Hamiltonian:
    """The model of a file of Pauli-Z strings; see `load_pauli`."""
    return load_pauli(path).model


def load_pauli(path: str | os.PathLike[str]) -> Reading:
    """The model of a file of Pauli-Z strings.

    Parameters
    ----------
    path : path
        ``.pauli`` or ``.pauli.gz``. Equal strings are added up.

    Raises
    ------
    InputError
        Not such a file, or it does not say which end is the first variable; the line is named.
    """
    try:
        header = PauliHeader()
        size: int | None = None
        rows: dict[int, list[NDArray[np.int64]]] = {}
        values: dict[int, list[Any]] = {}
        for chunk in chunks(path):
            found = words(without_comments(chunk, b"#", header.take))
            if len(found) % 2:
                raise InputError("a line holds a coefficient and a string of I and Z", found.place(len(found) - 1))
            if not len(found):
                continue
            size = _same_length(found, size)
            for weight, members in zip(_coefficients(found), _places(found, size), strict=True):
                rows.setdefault(len(members), []).append(members)
                values.setdefault(len(members), []).append(weight)
        return Reading(_model(header, size, rows, values))
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None


def _same_length(found: Words, size: int | None) -> int:
    lines = found.lines()
    if (lines[::2] != lines[1::2]).any():
        place = 2 * int((lines[::2] != lines[1::2]).argmax())
        raise InputError("a line holds a coefficient and a string of I and Z", found.place(place))
    lengths = (found.end - found.start)[1::2]
    size = int(lengths[0]) if size is None else size
    if (lengths != size).any():
        place = int((lengths != size).argmax())
        raise InputError(f"a string of {lengths[place]} letters after strings of {size}", found.place(2 * place + 1))
    return size


def _coefficients(found: Words) -> Iterator[Any]:
    for place, line in zip(range(0, len(found), 2), found.lines()[::2].tolist(), strict=True):
        yield as_fraction(found.text(place), f"line {line}")


def _places(found: Words, size: int) -> Iterator[NDArray[np.int64]]:
    starts = found.start[1::2]
    for first in range(0, len(starts), _ROWS):
        letters = found.chunk.data[starts[first : first + _ROWS, None] + np.arange(size)]
        strange = (letters != ord("I")) & (letters != ord("Z"))
        if strange.any():
            row = int(strange.any(axis=1).argmax())
            raise InputError(
                f"a string holds I and Z only, not {quoted(found.text(2 * (first + row) + 1))}",
                found.place(2 * (first + row) + 1),
            )
        for row in letters == ord("Z"):
            yield np.flatnonzero(row)


def _model(
    header: PauliHeader, size: int | None, rows: dict[int, list[NDArray[np.int64]]], values: dict[int, list[Any]]
) -> Hamiltonian:
    if size is None:
        size = header.variables
    if size is None:
        raise InputError("there is no line with a coefficient and a string of I and Z", "line 1")
    if header.leftmost is None:
        raise InputError(
            'which end of the strings is the first variable? add the line # hubokit leftmost "first" (or "last")',
            "line 1",
        )
    unit = common_resolution(value for listed in values.values() for value in listed)
    turned = header.leftmost == "last"
    members = [np.array(listed, np.int64).reshape(len(listed), k) for k, listed in rows.items()]
    model = Hamiltonian.from_arrays(
        [size - 1 - array if turned else array for array in members],
        [np.array([int(value / unit) for value in listed], dtype=object) for listed in values.values()],
        domain="spin",
        labels=header.labels(size, default_name),
        resolution=unit * header.scale,
        constant=header.constant,
        convention=header.convention,
    )
    return header.restored(model)


def write_pauli(model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False) -> None:
    """Write a model as Pauli-Z strings; the leftmost letter is the first variable.

    Raises
    ------
    InputError
        The file exists and force is not set.
    LimitError
        More than ``LETTER_LIMIT`` letters, or a change of domain that expands too far.
    """
    spin = model.in_domain("spin")
    if len(spin) * spin.size > LETTER_LIMIT:
        raise LimitError(f"{len(spin)} strings of {spin.size} letters are more than {LETTER_LIMIT} letters")

    def parts() -> Iterator[bytes]:
        bare = spin.constant if spin.size == 0 else as_fraction(0)
        lines = header_lines("#", model, scale=as_fraction(1), constant=bare, default=default_name)
        lines.append('# hubokit leftmost "first"')
        yield "".join(f"{line}\n" for line in lines).encode()
        if spin.size and (spin.constant or not spin.blocks):
            yield f"{format_fraction(spin.constant)} {'I' * spin.size}\n".encode()
        for block in spin.blocks:
            texts = coefficient_texts(block.weights, spin.resolution)
            for first in range(0, len(texts), _ROWS):
                members = block.members[first : first + _ROWS]
                letters = np.full((len(members), spin.size), ord("I"), np.uint8)
                letters[np.arange(len(members))[:, None], members] = ord("Z")
                strings = letters.tobytes().decode()
                yield "".join(
                    f"{text} {strings[i * spin.size : (i + 1) * spin.size]}\n"
                    for i, text in enumerate(texts[first : first + _ROWS])
                ).encode()

    write_bytes(path, parts(), force=force)
