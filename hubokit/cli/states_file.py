"""STATES.csv: a header of variable names and one state a line, values in the model's domain."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hubokit.cli.text import listing
from hubokit.errors import InputError
from hubokit.exchange.files import read_text

LARGEST = 1 << 30
VALUES = {
    "spin": {"1": 1, "+1": 1, "-1": -1},
    "boolean": {"0": 0, "1": 1},
}


def read_states(path: Path, labels: Sequence[str], domain: str) -> NDArray[np.int8]:
    """States of a file, with its columns put into the order of the model's variables.

    Parameters
    ----------
    path : Path
        The file: comma-separated, UTF-8, the names of all variables in the first line in any order.
    labels : sequence of str
        The variables wanted. Columns ``x1`` to ``xn``, as the formats call them that number their variables, stand
        for the first to the last of them, where no variable has such a name.
    domain : str
        ``"spin"`` for values +1 and -1, ``"boolean"`` for 0 and 1.

    Returns
    -------
    ndarray of int8, shape (m, n)
        One state a row, columns in the order of ``labels``.

    Raises
    ------
    InputError
        For a column that is missing, unknown or given twice, a row of another length, a value outside the domain.
    LimitError
        For a file above a gigabyte.
    """
    file = str(path)
    text = read_text(path, limit=LARGEST)
    rows = csv.reader(io.StringIO(text, newline=""))
    try:
        header = _named([name.strip() for name in next(rows, [])], labels)
        places = _places(header, labels, file)
        states = [
            _state(row, header, places, VALUES[domain], domain, rows.line_num, file)
            for row in rows
            if any(cell.strip() for cell in row)
        ]
    except csv.Error as error:
        raise InputError(f"{error}; write plain comma-separated values", f"line {rows.line_num}", file) from None
    return np.array(states, dtype=np.int8).reshape(len(states), len(labels))


def states_text(labels: Sequence[str], states: NDArray[np.int8]) -> str:
    """A table of states as `read_states` reads it.

    Examples
    --------
    >>> print(states_text(["a", "b"], np.array([[1, -1]], np.int8)), end="")
    a,b
    1,-1
    """
    text = io.StringIO()
    rows = csv.writer(text, lineterminator="\n")
    rows.writerow(labels)
    rows.writerows(states.tolist())
    return text.getvalue()


def _named(header: list[str], labels: Sequence[str]) -> list[str]:
    """The header with numbered columns under the names of the variables."""
    numbered = {f"x{i + 1}": label for i, label in enumerate(labels)}
    if not header or not numbered.keys() >= set(header) or not numbered.keys().isdisjoint(labels):
        return header
    return [numbered[name] for name in header]


def _places(header: Sequence[str], labels: Sequence[str], file: str) -> list[int]:
    """Column of every label."""
    columns = {name: i for i, name in enumerate(header)}
    if len(columns) < len(header):
        twice = next(name for i, name in enumerate(header) if columns[name] != i)
        raise InputError(f"column {twice!r} is given twice", place="line 1", file=file)
    wanted = set(labels)
    unknown = [name for name in header if name not in wanted]
    if unknown:
        raise InputError(f"no variable of the model: {listing(unknown, 5)}; leave it out", place="line 1", file=file)
    missing = [label for label in labels if label not in columns]
    if missing:
        raise InputError(
            f"no column for {listing(missing, 5)}; the first line names every variable of the model", "line 1", file
        )
    return [columns[label] for label in labels]


def _state(
    row: Sequence[str],
    header: Sequence[str],
    places: Sequence[int],
    values: dict[str, int],
    domain: str,
    line: int,
    file: str,
) -> list[int]:
    if len(row) != len(header):
        raise InputError(f"{len(row)} values for {len(header)} columns", place=f"line {line}", file=file)
    state = [values.get(cell.strip()) for cell in row]
    if None in state:
        at = state.index(None)
        allowed = " or ".join(sorted(values, reverse=True))
        raise InputError(
            f"{row[at].strip()!r} is no {domain} value; {allowed} would do", f"line {line}, column {header[at]}", file
        )
    return [value for place in places if (value := state[place]) is not None]
