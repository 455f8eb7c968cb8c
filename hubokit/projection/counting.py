"""Symmetric clusters by counting: variables with equal coupling vectors matter only by how many of them are set.

Group the touched variables of a cluster into *classes* of equal coupling vectors to the cluster's auxiliaries
(for spins: equal up to sign, where a flipped spin is counted by its negative). The minimum over the
auxiliaries depends only on the number of set bits in each class, so the table has prod(d_c + 1) entries in
place of 2**d. The coefficient of a product with e_c variables from class c follows from it one class at a
time:

- booleans: the e-th finite difference at 0, ``sum_k (-1)**(e-k) C(e, k) T(k)``;
- spins: ``2**-d sum_k K(e, k) T(k)`` with ``K(e, k) = sum_j (-1)**j C(e, j) C(d-e, k-j)``.

References
----------
M. Krawtchouk, "Sur une generalisation des polynomes d'Hermite", 1929 (the numbers K(e, k)).
M. Anthony, E. Boros, Y. Crama, A. Gruber, "Quadratization of symmetric pseudo-Boolean functions", 2016 (why
counting is enough).
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from math import comb, prod

import numpy as np

from hubokit.model.terms import EXPANSION_LIMIT
from hubokit.projection.clusters import Batch
from hubokit.projection.structure import Integers, Positions
from hubokit.projection.tables import NONE, Polynomial, fold, settings

COUNT_CELLS = 2**20
"""Largest table over counts, times the number of auxiliary settings."""


@dataclass(frozen=True)
class Classes:
    """The touched variables of one cluster, by equal coupling vectors.

    Parameters
    ----------
    members : tuple of tuple of int
        Columns of each class.
    signs : tuple of int
        Sign of each column relative to its class (always 1 for booleans).
    coupling : integer array, shape (a, K)
        One coupling vector for each class.
    """

    members: tuple[tuple[int, ...], ...]
    signs: tuple[int, ...]
    coupling: Integers

    @property
    def sizes(self) -> tuple[int, ...]:
        """Number of variables in each class."""
        return tuple(len(one) for one in self.members)

    @property
    def cells(self) -> int:
        """Entries of the table over counts."""
        return prod(size + 1 for size in self.sizes)


@dataclass(frozen=True)
class Counted:
    """Tables of one cluster over the numbers of set bits in each class, shape (d_1 + 1, ..., d_K + 1)."""

    classes: Classes
    minimum: Integers
    multiplicity: Integers
    gap: Integers


def classes_of(coupling: Integers, domain: str) -> Classes:
    """Group the columns of one cluster's coupling matrix (a, d).

    Examples
    --------
    >>> classes_of(np.array([[2, -2, 3]]), "spin").members
    ((0, 1), (2,))
    """
    groups: dict[tuple[int, ...], list[int]] = {}
    signs = []
    for column, vector in enumerate(coupling.T.tolist()):
        sign = 1
        if domain == "spin":
            sign = next((1 if entry > 0 else -1 for entry in vector if entry), 1)
        signs.append(sign)
        groups.setdefault(tuple(sign * entry for entry in vector), []).append(column)
    matrix = np.array(list(groups), coupling.dtype).reshape(len(groups), len(coupling)).T
    return Classes(tuple(tuple(group) for group in groups.values()), tuple(signs), matrix)


def count(batch: Batch, domain: str) -> Counted | None:
    """Tables over counts of the only cluster of a batch; None where they would be too large."""
    classes = classes_of(batch.coupling[0], domain)
    if classes.cells << batch.a > COUNT_CELLS:
        return None
    shape = classes.sizes
    values = settings(batch.a, domain)
    tables: tuple[Integers, Integers, Integers] | None = None
    for setting in values:
        base = int(batch.field[0] @ setting) + int(setting @ batch.between[0] @ setting)
        energy = np.full(shape and tuple(size + 1 for size in shape), base, batch.field.dtype)
        for axis, weight in enumerate(setting @ classes.coupling):
            size = shape[axis]
            set_bits = np.arange(size + 1).astype(batch.field.dtype)
            total = size - 2 * set_bits if domain == "spin" else set_bits
            energy = energy + (weight * total).reshape([-1 if i == axis else 1 for i in range(len(shape))])
        if tables is None:
            tables = energy, np.ones(energy.shape, np.int64), np.full(energy.shape, NONE, energy.dtype)
        else:
            tables = fold(*tables, energy)
    assert tables is not None
    return Counted(classes, *tables)


def symmetric_polynomial(counted: Counted, domain: str) -> tuple[Polynomial, int] | None:
    """The minimum as a polynomial over the cluster's columns, in units of 2**-shift.

    Returns
    -------
    (parts, shift), or None
        None when it has more than ``EXPANSION_LIMIT`` products.
    """
    sizes = counted.classes.sizes
    coefficient = counted.minimum.astype(object)
    for axis, size in enumerate(sizes):
        matrix = _krawtchouk(size) if domain == "spin" else _differences(size)
        coefficient = np.moveaxis(np.tensordot(matrix, coefficient, axes=(1, axis)), 0, axis)
    degrees = [tuple(int(e) for e in row) for row in np.argwhere(coefficient != 0)]
    if sum(prod(comb(size, e) for size, e in zip(sizes, row, strict=True)) for row in degrees) > EXPANSION_LIMIT:
        return None
    shift = sum(sizes) if domain == "spin" else 0
    held = 0
    for row in degrees:
        held |= int(coefficient[row])
    spare = min(shift, (held & -held).bit_length() - 1) if held else shift
    signs = np.array(counted.classes.signs, np.int64)
    parts: Polynomial = []
    for row in degrees:
        members = _products(counted.classes.members, row)
        sign = np.prod(signs[members], axis=1)
        parts.append((members, sign.astype(object) * (int(coefficient[row]) >> spare)))
    return parts, shift - spare


def _products(classes: tuple[tuple[int, ...], ...], degrees: tuple[int, ...]) -> Positions:
    """All choices of the given number of columns from each class, shape (t, sum of degrees)."""
    rows = np.zeros((1, 0), np.int64)
    for columns, degree in zip(classes, degrees, strict=True):
        if degree == 0:
            continue
        amount = comb(len(columns), degree)
        flat = itertools.chain.from_iterable(itertools.combinations(columns, degree))
        chosen = np.fromiter(flat, np.int64, amount * degree).reshape(amount, degree)
        rows = np.concatenate([np.repeat(rows, amount, axis=0), np.tile(chosen, (len(rows), 1))], axis=1)
    return rows


def _differences(size: int) -> Integers:
    rows = [[(-1) ** (e - k) * comb(e, k) if k <= e else 0 for k in range(size + 1)] for e in range(size + 1)]
    return np.array(rows, object)


def _krawtchouk(size: int) -> Integers:
    rows = [
        [
            sum((-1) ** j * comb(e, j) * comb(size - e, k - j) for j in range(max(0, k - size + e), min(e, k) + 1))
            for k in range(size + 1)
        ]
        for e in range(size + 1)
    ]
    return np.array(rows, object)
