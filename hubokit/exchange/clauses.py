"""Clauses and posiforms: reading the numbers of DIMACS-like files, and writing a model as weighted clauses.

A clause is broken when all its literals are false, so the weight of the broken clauses is a sum of weighted products
of complemented literals. The other way round, a boolean polynomial becomes a *posiform*, a sum of positive weights
times products of literals plus a constant, without auxiliaries: for w > 0, and with x' for 1 - x,

    -w x1 x2 .. xk = -w + w (x1' + x1 x2' + .. + x1 .. x(k-1) xk')

(Boros & Hammer 2002, "Pseudo-Boolean optimization", section on posiforms).
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.exchange.json_text import quoted
from hubokit.exchange.literals import Products, grouped, joined
from hubokit.exchange.scanning import Words, chunks, whole_numbers, without_comments, words
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.terms import row_keys

HARD = ord("h")
LARGEST_VARIABLE = 2**31 - 2


@dataclass(frozen=True)
class ClauseFile:
    """The numbers of a clause file.

    Parameters
    ----------
    head : tuple of str
        The words of the ``p`` line; empty where there is none.
    numbers : int32, int64 or object array, shape (w,)
        All numbers after it; -1 where ``hard``.
    hard : bool array, shape (w,)
        Words ``h`` in the place of a weight.
    """

    head: tuple[str, ...]
    numbers: NDArray[Any]
    hard: NDArray[np.bool_]


def scanned(path: str | os.PathLike[str], take: Callable[[str, int], None]) -> ClauseFile:
    """Read the words of a clause file; comment lines go to `take`.

    Raises
    ------
    InputError
        A word that is no number, with its line.
    """
    head: tuple[str, ...] = ()
    numbers: list[NDArray[Any]] = []
    hard: list[NDArray[np.bool_]] = []
    ended = False
    for found in _all_words(path, take):
        if ended or not len(found):
            continue
        if not head and not numbers and found.text(0) == "p":
            line = found.lines()
            size = int(np.count_nonzero(line == line[0]))
            head = tuple(found.text(i) for i in range(min(size, 6)))
            found = found.part(slice(size, None))
        percent = (found.first == ord("%")) & (found.end - found.start == 1) if len(found) else np.zeros(0, bool)
        marks: list[int] = np.flatnonzero(percent).tolist()
        if len(marks):
            found, ended = found.part(slice(0, marks[0])), True
        flag = (found.first == HARD) & (found.end - found.start == 1) if len(found) else np.zeros(0, bool)
        values = np.full(len(found), -1, np.int64)
        plain = whole_numbers(found.part(~flag), "a literal or weight")
        if plain.dtype == object:
            values = values.astype(object)
        values[~flag] = plain
        small = values.dtype != object and (not len(values) or int(np.abs(values).max()) < 2**31)
        numbers.append(values.astype(np.int32) if small else values)
        hard.append(flag)
    empty = np.zeros(0, np.int64)
    return ClauseFile(
        head, np.concatenate(numbers) if numbers else empty, np.concatenate(hard) if hard else empty.astype(bool)
    )


def _all_words(path: str | os.PathLike[str], take: Callable[[str, int], None]) -> Iterator[Words]:
    for chunk in chunks(path):
        yield words(without_comments(chunk, b"c", take))


def head_counts(head: tuple[str, ...], kind: str, least: int) -> list[int]:
    """The numbers of a ``p cnf`` or ``p wcnf`` line.

    Raises
    ------
    InputError
        The line is missing or says something else.
    """
    if len(head) < least + 2 or head[1] != kind or not all(w.isascii() and w.isdigit() for w in head[2:]):
        example = "p cnf 3 2 (variables, clauses)" if kind == "cnf" else "p wcnf 3 2 10 (variables, clauses, top)"
        shown = quoted(" ".join(head)) if head else "nothing of the kind"
        raise InputError(f"the file must begin with a line like {example}; here is {shown}", "line 1")
    if any(len(word) > 1000 for word in head):
        raise InputError("a count of more than 1000 digits", "line 1")
    return [int(word) for word in head[2:]]


def split_clauses(found: ClauseFile) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Start and end (its 0) of every clause among the numbers.

    Raises
    ------
    InputError
        The last clause has no 0.
    """
    ends = np.flatnonzero((found.numbers == 0) & ~found.hard)
    size = len(found.numbers)
    if (int(ends[-1]) + 1 if len(ends) else 0) < size:
        raise InputError(f"the last clause does not end with 0; the file may be cut (clause {len(ends) + 1})", "end")
    starts = np.concatenate([[0], ends[:-1] + 1]) if len(ends) else np.zeros(0, np.int64)
    return starts.astype(np.int64), ends.astype(np.int64)


def as_literals(numbers: NDArray[Any], count: int | None) -> NDArray[np.int32]:
    """Numbers as literals of variables 1 to `count` (or to the largest possible).

    Raises
    ------
    InputError
        A literal beyond the variables.
    """
    bound = LARGEST_VARIABLE if count is None else count
    if len(numbers):
        largest = int(np.abs(numbers).max())
        if largest > bound:
            raise InputError(f"literal {quoted(largest)} is out of range; there are {bound} variables", "p line")
    return numbers.astype(np.int32)


def broken_products(numbers: NDArray[np.int32], lengths: NDArray[np.int64], weights: NDArray[Any]) -> list[Products]:
    """Clauses, laid end to end, as products that are 1 where the clause is broken."""
    return grouped(-numbers, lengths, weights)


def posiform(model: Hamiltonian) -> tuple[int, list[Products]]:
    """A boolean model as ``constant + sum of positive weight * product of literals``, in units of its resolution.

    Returns
    -------
    constant : int
        Without the constant of the model.
    products : list of (literals (m, k), weights (m,))
        Each product once; literals +-1 .. +-n.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b"): -2, ("c",): 1}, "boolean")
    >>> constant, products = posiform(H)
    >>> constant, [(a.tolist(), w.tolist()) for a, w in products]
    (-2, [([[-1], [3]], [2, 1]), ([[1, -2]], [2])])
    """
    constant = 0
    parts: list[Products] = []
    for block in model.blocks:
        literals = block.members.astype(np.int64) + 1
        weights = block.weights
        above = np.asarray(weights > 0, bool)
        parts.append((literals[above], weights[above]))
        rows, owed = literals[~above], -weights[~above]
        constant -= sum(owed.tolist())
        for length in range(1, block.locality + 1):
            tail = rows[:, :length].copy()
            tail[:, -1] *= -1
            parts.append((tail, owed))
    return constant, [_added(literals, weights) for literals, weights in joined(parts) if len(weights)]


def _added(literals: NDArray[np.int64], weights: NDArray[Any]) -> Products:
    """Equal rows once, their weights added."""
    top = int(np.abs(literals).max())
    keys = row_keys(literals + top, 2 * top + 1)
    order = np.lexsort(keys[::-1])
    fresh = np.zeros(len(order), bool)
    fresh[0] = True
    for key in keys:
        fresh[1:] |= key[order][1:] != key[order][:-1]
    starts = np.flatnonzero(fresh)
    if len(starts) < len(order) and weights.dtype != object and float(np.abs(weights).sum(dtype=float)) > 2.0**61:
        weights = weights.astype(object)
    return literals[order][starts], np.add.reduceat(weights[order], starts)


def clause_lines(literals: NDArray[np.int64], front: NDArray[Any] | None) -> bytes:
    """Clauses that are broken where the product of `literals` is 1, a line each, `front` before each.

    Examples
    --------
    >>> clause_lines(np.array([[1, -2]]), np.array([5]))
    b'5 -1 2 0\\n'
    """
    import orjson

    zero = np.zeros((len(literals), 1), np.int64)
    if front is not None and front.dtype == object:
        bodies = clause_lines(literals, None).split(b"\n")
        return b"".join(b"%d %s\n" % (weight, body) for weight, body in zip(front.tolist(), bodies, strict=False))
    columns = [-literals, zero] if front is None else [front.astype(np.int64)[:, None], -literals, zero]
    rows = np.ascontiguousarray(np.hstack(columns))
    if not len(rows):
        return b""
    text = orjson.dumps(rows, option=orjson.OPT_SERIALIZE_NUMPY)
    return text[2:-2].replace(b"],[", b"\n").replace(b",", b" ") + b"\n"
