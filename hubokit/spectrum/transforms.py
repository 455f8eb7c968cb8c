"""All energies of a small model by fast transforms: the slow, obvious oracle of the other engines.

A multilinear polynomial over booleans and its table of values are each other's Moebius (subset-sum) transforms; over
spins they are each other's Walsh-Hadamard transforms. A table has length 2**d, and its index carries variable 0 in
the most significant bit, so that the order of the table is lift order: bit 0 is spin +1 or boolean 0.

A transform is d rounds of one addition per entry; ``all_energies`` needs 2**n entries: refused above 24 variables.

References
----------
F. Yates, "The Design and Analysis of Factorial Experiments", 1937 (the fast rounds).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from hubokit.errors import InputError, LimitError
from hubokit.spectrum.levels import Density, Level, density_from_integers, levels_from_integers
from hubokit.spectrum.polynomial import INT64_BOUND, Polynomial, polynomial_of

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian

TABLE_LIMIT = 24
"""Most variables of which all energies are tabulated (2**24 energies, 128 MB as int64)."""

Table = npt.NDArray[Any]
Round = Callable[[Table, Table], None]


def moebius(table: Table) -> Table:
    """Coefficients of the boolean polynomial with these values.

    Parameters
    ----------
    table : ndarray, shape (..., 2**d)
        Values in lift order; any integer dtype, or object.

    Returns
    -------
    ndarray, same shape and dtype
        ``c[S] = sum over subsets T of S of (-1)**|S - T| * table[T]``.

    Raises
    ------
    InputError
        When the last axis is not a power of two long.

    Examples
    --------
    >>> moebius(np.array([5, 5, 5, 7])).tolist()  # 5 + 2 x0 x1
    [5, 0, 0, 2]
    """

    def round_(low: Table, high: Table) -> None:
        np.subtract(high, low, out=high)

    return _transformed(table, round_)


def inverse_moebius(table: Table) -> Table:
    """Values of the boolean polynomial with these coefficients: sums over subsets.

    Parameters
    ----------
    table : ndarray, shape (..., 2**d)
        Coefficients; entry S belongs to the product of the variables whose bits are set in S.

    Returns
    -------
    ndarray, same shape and dtype
        Values in lift order.

    Raises
    ------
    InputError
        When the last axis is not a power of two long.

    Examples
    --------
    >>> inverse_moebius(np.array([5, 0, 0, 2])).tolist()
    [5, 5, 5, 7]
    """

    def round_(low: Table, high: Table) -> None:
        np.add(high, low, out=high)

    return _transformed(table, round_)


def walsh_hadamard(table: Table) -> Table:
    """Values of the spin polynomial with these coefficients (its own inverse up to the factor 2**d).

    Parameters
    ----------
    table : ndarray, shape (..., 2**d)
        Coefficients; entry S belongs to the product of the spins whose bits are set in S.

    Returns
    -------
    ndarray, same shape and dtype
        ``v[x] = sum over S of (-1)**|S & x| * table[S]``, in lift order (bit 0 is spin +1).

    Raises
    ------
    InputError
        When the last axis is not a power of two long.

    Examples
    --------
    >>> walsh_hadamard(np.array([0, 0, 0, 1])).tolist()  # s0 s1
    [1, -1, -1, 1]
    """

    def round_(low: Table, high: Table) -> None:
        # (low, high) becomes (low + high, low - high) without a third array
        np.add(low, high, out=low)
        np.multiply(high, -2, out=high)
        np.add(high, low, out=high)

    return _transformed(table, round_)


def _transformed(table: Table, round_: Round) -> Table:
    length = table.shape[-1] if table.ndim else 0
    depth = length.bit_length() - 1
    if length < 1 or length != 1 << depth:
        raise InputError(f"a transform needs a last axis of length 2**d, got {length}", place="table")
    result = np.array(table, order="C")
    shape = result.shape
    # Rounds on the last few bits would run over very short rows: turn the table first, so that every row is long.
    upper = depth - depth // 2
    result = result.reshape(-1, 1 << upper, 1 << (depth - upper))
    _rounds(result, upper, round_)
    result = np.ascontiguousarray(result.transpose(0, 2, 1))
    _rounds(result, depth - upper, round_)
    return np.ascontiguousarray(result.transpose(0, 2, 1)).reshape(shape)


def _rounds(table: Table, depth: int, round_: Round) -> None:
    """All rounds along the middle axis (length 2**depth) of a C-contiguous array, in place."""
    batch, _, row = table.shape
    for bit in range(depth):
        halves = table.reshape(batch << bit, 2, row << (depth - 1 - bit))
        round_(halves[:, 0], halves[:, 1])


def all_energies(H: Hamiltonian) -> Table:
    """Every energy of a small model, in lift order.

    Parameters
    ----------
    H : Hamiltonian
        At most 24 variables.

    Returns
    -------
    ndarray of int64 or object, shape (2**n,)
        Whole numbers k with ``energy = constant + k * resolution``; object (Python integers) when the sum of
        the absolute weights reaches 2**62.

    Raises
    ------
    LimitError
        Above 24 variables.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> all_energies(Hamiltonian({("a",): 1, ("a", "b"): -2}, domain="boolean")).tolist()
    [0, 0, 1, -1]
    """
    if H.size > TABLE_LIMIT:
        raise LimitError(
            f"a table of all energies holds 2**{H.size} entries; the most is 2**{TABLE_LIMIT}: "
            "use ground_states, low_levels or density_of_states, which keep no table"
        )
    return tabulated(polynomial_of(H))


def tabulated(polynomial: Polynomial) -> Table:
    """Every value of a polynomial with distinct masks: int64 or object, shape (2**n,), in lift order."""
    exact = polynomial.bound < INT64_BOUND
    table: Table = np.zeros(1 << polynomial.size, dtype=np.int64 if exact else object)
    table[polynomial.masks] = polynomial.weights
    return walsh_hadamard(table) if polynomial.spin else inverse_moebius(table)


def spectrum_by_transform(
    H: Hamiltonian, count: int | None = 1, limit: int = 100_000, method: str = "transform"
) -> list[Level]:
    """The lowest levels of a small model from the table of all its energies.

    Parameters
    ----------
    H : Hamiltonian
        At most 24 variables.
    count : int or None
        How many levels; None for all.
    limit : int
        Most states listed for a level: the first in lift order.
    method : str
        What the levels say of how they were found.

    Returns
    -------
    list of Level
        Lowest first.

    Raises
    ------
    LimitError
        Above 24 variables.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> spectrum_by_transform(Hamiltonian({("a", "b"): 1}, domain="spin"))
    [Level(energy -1, 2 states, gap 2, by transform)]
    """
    table = all_energies(H)
    energies: list[int] = []
    counts: list[int] = []
    indices: list[npt.NDArray[np.uint64]] = []
    rest = table
    while len(rest) and (count is None or len(energies) <= count):
        energy = rest.min()
        rest = rest[rest > energy]
        energies.append(int(energy))
        if count is None or len(indices) < count:
            found = np.flatnonzero(table == energy)
            counts.append(len(found))
            indices.append(found[:limit].astype(np.uint64))
    return levels_from_integers(H, energies, counts, indices, method)


def density_by_transform(H: Hamiltonian) -> Density:
    """The density of states of a small model from the table of all its energies.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> density_by_transform(Hamiltonian({("a", "b"): 1}, domain="spin")).counts
    [2, 2]
    """
    energies, counts = np.unique(all_energies(H), return_counts=True)
    return density_from_integers(H, energies.tolist(), counts.tolist())


def local_minima_by_transform(H: Hamiltonian) -> int:
    """The number of states of a small model that no single flip lowers, from the table of all its energies.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> local_minima_by_transform(Hamiltonian({("a", "b"): 1}, domain="spin"))
    2
    """
    table = all_energies(H)
    minimal = np.ones(len(table), dtype=bool)
    for bit in range(H.size):
        pairs, kept = table.reshape(-1, 2, 1 << bit), minimal.reshape(-1, 2, 1 << bit)
        kept[:, 0] &= (pairs[:, 0] <= pairs[:, 1]).astype(bool)
        kept[:, 1] &= (pairs[:, 1] <= pairs[:, 0]).astype(bool)
    return int(minimal.sum())
