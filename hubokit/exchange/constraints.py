"""Constraints of a pseudo-Boolean file as penalties: 0 where the constraint holds, at least 1 elsewhere.

With integers, (h - b)**2 is such a penalty for h = b. For ``sum of literals >= r`` over k literals it is the number
of (k - r + 1)-subsets whose literals are all false (one product for a clause, the pairs for at-most-one). Any other
inequality on few variables gets the indicator of its violation, by the Moebius transform of a table.

A penalty times M = 1 + sum |weights of the objective| is proven: one violated constraint costs more than the
objective can vary, so that no state that violates one lies below a state that keeps all.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from math import comb

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.exchange.literals import Products, literal_model
from hubokit.model.hamiltonian import Hamiltonian

TABLE_VARIABLES = 12
"""Most variables of a constraint that is tabulated."""

SUBSET_LIMIT = 100_000
"""Most products that one cardinality constraint may become."""


@dataclass(frozen=True)
class Constraint:
    """``sum of weight * product of literals`` compared with a bound.

    Parameters
    ----------
    products : list of (tuple of int, int)
        Literals +-1 .. +-n and the weight.
    relation : ">=", "<=" or "="
    bound : int
    line : int
        Where it ends in the file.
    """

    products: list[tuple[tuple[int, ...], int]]
    relation: str
    bound: int
    line: int


def penalty(constraint: Constraint, labels: tuple[str, ...]) -> Hamiltonian | None:
    """A boolean model that is 0 where the constraint holds and at least 1 elsewhere; None where it always holds.

    Raises
    ------
    LimitError
        No penalty of reasonable size is known; the line is named.

    Examples
    --------
    >>> at_most_one = Constraint([((1,), -1), ((2,), -1), ((3,), -1)], ">=", -1, 1)
    >>> print(penalty(at_most_one, ("a", "b", "c")))
    a b + a c + b c
    """
    place = f"line {constraint.line}"
    if constraint.relation == "=":
        try:
            return (_as_model(constraint, labels) - constraint.bound) ** 2
        except LimitError as error:
            raise LimitError(f"the square of an equality is too large: {error.message}", place) from None
    sign = -1 if constraint.relation == "<=" else 1
    bound = sign * constraint.bound
    terms = [(literals, sign * weight) for literals, weight in constraint.products if weight]
    if all(len(literals) == 1 for literals, _ in terms):
        found = _cardinality(terms, bound, labels, place)
        if found is not False:
            return found if isinstance(found, Hamiltonian) else None
    return _tabulated(terms, bound, labels, place)


def _as_model(constraint: Constraint, labels: tuple[str, ...]) -> Hamiltonian:
    return literal_model(_arrays(constraint.products), labels)


def _arrays(products: list[tuple[tuple[int, ...], int]]) -> list[Products]:
    by_length: dict[int, list[tuple[tuple[int, ...], int]]] = {}
    for literals, weight in products:
        by_length.setdefault(len(literals), []).append((literals, weight))
    return [
        (
            np.array([row for row, _ in rows], np.int64).reshape(len(rows), length),
            np.array([weight for _, weight in rows], dtype=object),
        )
        for length, rows in by_length.items()
    ]


def _cardinality(
    terms: list[tuple[tuple[int, ...], int]], bound: int, labels: tuple[str, ...], place: str
) -> Hamiltonian | bool | None:
    """The penalty of ``a * (number of true literals) >= bound``.

    None where it always holds, False where the weights differ.
    """
    literals, total = [], bound
    for (literal,), weight in terms:
        literals.append(literal if weight > 0 else -literal)
        total += max(-weight, 0)
    sizes = {abs(weight) for _, weight in terms}
    if total <= 0:
        return None
    if len(sizes) > 1 or len({abs(literal) for literal in literals}) < len(literals):
        return False
    needed = -(-total // sizes.pop()) if sizes else 1
    count, size = len(literals), len(literals) - needed + 1
    if size <= 0:
        return literal_model([(np.zeros((1, 0), np.int64), np.ones(1, np.int64))], labels)
    if comb(count, size) > SUBSET_LIMIT:
        if count <= TABLE_VARIABLES:
            return False
        raise LimitError(
            f"a constraint over {count} literals would become {comb(count, size)} products, at most {SUBSET_LIMIT} "
            "are made; write it as a penalty in the objective",
            place,
        )
    subsets = itertools.chain.from_iterable(itertools.combinations(literals, size))
    rows = -np.fromiter(subsets, np.int64, comb(count, size) * size).reshape(-1, size)
    return literal_model([(rows, np.ones(len(rows), np.int64))], labels)


def _tabulated(
    terms: list[tuple[tuple[int, ...], int]], bound: int, labels: tuple[str, ...], place: str
) -> Hamiltonian | None:
    """The indicator of violation as a polynomial, from a table over all settings of the variables."""
    used = sorted({abs(literal) for literals, _ in terms for literal in literals})
    if len(used) > TABLE_VARIABLES:
        raise LimitError(
            f"an inequality with unequal weights over {len(used)} variables, at most {TABLE_VARIABLES} are turned "
            "into a penalty; write it as a penalty in the objective",
            place,
        )
    size = len(used)
    bits = (np.arange(2**size)[:, None] >> np.arange(size)[::-1]) & 1
    column = {variable: place for place, variable in enumerate(used)}
    total = np.zeros(2**size, dtype=object)
    for literals, weight in terms:
        truth = np.ones(2**size, bool)
        for literal in literals:
            truth &= bits[:, column[abs(literal)]] == (literal > 0)
        total += weight * truth.astype(object)
    table = np.asarray(total < bound, bool).astype(np.int64)
    if not table.any():
        return None
    return _polynomial(table, bits.astype(bool), np.array(used, np.int64), labels)


def _polynomial(
    table: NDArray[np.int64], bits: NDArray[np.bool_], used: NDArray[np.int64], labels: tuple[str, ...]
) -> Hamiltonian:
    """The multilinear polynomial with the values of the table."""
    size = len(used)
    shaped = table.reshape((2,) * size)
    for axis in range(size):
        upper = [slice(None)] * size
        lower = [slice(None)] * size
        upper[axis], lower[axis] = slice(1, 2), slice(0, 1)
        shaped[tuple(upper)] -= shaped[tuple(lower)]
    coefficients = shaped.reshape(-1)
    rows = np.flatnonzero(coefficients).tolist()
    parts: list[Products] = [(used[bits[row]][None, :], coefficients[row : row + 1]) for row in rows]
    return literal_model(parts, labels)
