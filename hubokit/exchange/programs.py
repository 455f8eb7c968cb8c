"""A boolean model as a linear integer program, its products linearised.

Variables are binary columns x1 .. xn. A product of columns gets a column p_i_j.. between 0 and 1 with

    p <= x_i for every member,    p >= sum of members - (k - 1)

(Fortet 1960; Glover & Woolsey 1974), so that p is the product wherever the x are whole.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.exchange.cnf import default_name
from hubokit.model.hamiltonian import Hamiltonian

EXACT = 2**53
"""Largest weight that a float holds with all its neighbours."""

NAME_LIMIT = 200
"""Longest name of a product's column, in characters."""


Row = tuple[tuple[tuple[int, float], ...], float, float]
"""A row: its entries (column, value), lower and upper bound."""


@dataclass(frozen=True)
class Program:
    """A linear program with binary and continuous columns, as HiGHS holds it.

    Parameters
    ----------
    names : list of str
        Columns.
    cost : float64 array, shape (c,)
    binary : bool array, shape (c,)
    lower, upper : float64 arrays, shape (r,)
        Bounds of the rows.
    starts, columns, values : arrays
        Rows in compressed form.
    offset : float
        Constant of the objective.
    """

    names: list[str]
    cost: NDArray[np.float64]
    binary: NDArray[np.bool_]
    lower: NDArray[np.float64]
    upper: NDArray[np.float64]
    starts: NDArray[np.int64]
    columns: NDArray[np.int64]
    values: NDArray[np.float64]
    offset: float = 0.0


def largest(weights: NDArray[Any]) -> int:
    """Largest absolute weight, as a Python integer.

    Examples
    --------
    >>> largest(np.array([3, -7]))
    7
    """
    return max(abs(int(weights.max())), abs(int(weights.min())))


def linearised(model: Hamiltonian) -> Program:
    """The integer program of a boolean model: minimise the sum of weights times products.

    Raises
    ------
    LimitError
        A weight beyond 2**53, or a product whose column name would be too long.

    Examples
    --------
    >>> program = linearised(Hamiltonian({("a", "b"): -1, ("a",): 2}, "boolean"))
    >>> program.names, program.cost.tolist(), len(program.lower)
    (['x1', 'x2', 'p_1_2'], [2.0, 0.0, -1.0], 3)
    """
    size = model.size
    names = [default_name(number + 1) for number in range(size)]
    cost = [np.zeros(size)]
    lower, upper, lengths = [np.zeros(0)], [np.zeros(0)], [np.zeros(0, np.int64)]
    columns, values = [np.zeros(0, np.int64)], [np.zeros(0)]
    for block in model.blocks:
        if largest(block.weights) > EXACT:
            raise LimitError("a weight exceeds 2**53, which a float does not hold exactly; round the model first")
        members, count, k = block.members.astype(np.int64), len(block), block.locality
        if k == 1:
            cost[0][members[:, 0]] = block.weights.astype(np.float64)
            continue
        own = len(names) + np.arange(count)
        names += ["p_" + "_".join(map(str, row)) for row in (members + 1).tolist()]
        if max(map(len, names[-count:])) > NAME_LIMIT:
            raise LimitError(f"a product of {k} variables is too long for the name of a column; write .opb instead")
        cost.append(block.weights.astype(np.float64))
        below = np.stack([np.repeat(own, k), members.ravel()], axis=1)
        columns += [below.ravel(), np.hstack([own[:, None], members]).ravel()]
        values += [np.tile([1.0, -1.0], count * k), np.tile([1.0] + [-1.0] * k, count)]
        lengths += [np.full(count * k, 2), np.full(count, k + 1)]
        lower += [np.full(count * k, -np.inf), np.full(count, 1.0 - k)]
        upper += [np.zeros(count * k), np.full(count, np.inf)]
    sizes = np.concatenate(lengths)
    binary = np.zeros(len(names), bool)
    binary[:size] = True
    return Program(
        names,
        np.concatenate(cost),
        binary,
        np.concatenate(lower),
        np.concatenate(upper),
        np.concatenate([[0], np.cumsum(sizes)]),
        np.concatenate(columns),
        np.concatenate(values),
    )


def own_order(program: Program) -> Program:
    """The program with its columns in the order of `linearised`, where they bear its names: LP files reorder them."""
    keys = []
    for place, name in enumerate(program.names):
        head, *parts = name.replace("x", "p_", 1).split("_") if name.startswith("x") else name.split("_")
        if head != "p" or not all(part.isascii() and part.isdigit() and len(part) < 10 for part in parts):
            return program
        keys.append((len(parts), tuple(map(int, parts)), place))
    order = np.array([place for *_, place in sorted(keys)], np.int64)
    rank = np.empty_like(order)
    rank[order] = np.arange(len(order))
    return replace(
        program,
        names=[program.names[place] for place in order.tolist()],
        cost=program.cost[order],
        binary=program.binary[order],
        columns=rank[program.columns],
    )


def product_columns(program: Program) -> list[tuple[int, ...]] | None:
    """The products of the columns where the program is one that `linearised` makes, else None."""
    size = int(program.binary.sum())
    if program.names[:size] != [default_name(i + 1) for i in range(size)]:
        return None
    rows: list[tuple[int, ...]] = [(i,) for i in range(size)]
    for name in program.names[size:]:
        head, *parts = name.split("_")
        if head != "p" or not parts or not all(p.isascii() and p.isdigit() and len(p) < 10 for p in parts):
            return None
        row = tuple(int(part) - 1 for part in parts)
        if len(row) < 2 or list(row) != sorted(set(row)) or row[0] < 0 or row[-1] >= size:
            return None
        rows.append(row)
    return rows if len(set(rows)) == len(rows) and _same_rows(program, rows, size) else None


def _same_rows(program: Program, products: list[tuple[int, ...]], size: int) -> bool:
    """Whether the rows are exactly those that tie each product column to its members."""
    found: set[Row] = set()
    for place in range(len(program.lower)):
        inside = slice(int(program.starts[place]), int(program.starts[place + 1]))
        entries = sorted(zip(program.columns[inside].tolist(), program.values[inside].tolist(), strict=True))
        found.add((tuple(entries), float(program.lower[place]), float(program.upper[place])))
    wanted: set[Row] = set()
    for own, row in enumerate(products[size:], start=size):
        for member in row:
            wanted.add((((member, -1.0), (own, 1.0)), -np.inf, 0.0))
        wanted.add(((*((member, -1.0) for member in row), (own, 1.0)), 1.0 - len(row), np.inf))
    return found == wanted and len(program.lower) == len(wanted)
