"""The alpha > 0 and beta with which a reduction is judged: P = alpha * E + beta.

What the trail or the caller declares binds. Otherwise both are searched for, exactly: two functions are
related so when they agree after their least common weights are divided out, and there is at most one such
pair unless E is constant (then alpha = 1). Where variables are merged or fixed, the relation is sought on
the states the model has.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import gcd
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from hubokit.model.hamiltonian import Hamiltonian


@dataclass(frozen=True)
class Relation:
    """P = scale * E + shift wherever the model has a state.

    `level` is the one value of E where E is constant: then any scale would do, with the shift that fits it.
    """

    scale: Fraction
    shift: Fraction
    level: Fraction | None = None

    def with_scale(self, scale: Fraction) -> Relation:
        """The relation of another scale, where E is constant; else the same."""
        if self.level is None:
            return self
        return Relation(scale, self.shift + (self.scale - scale) * self.level, self.level)


@dataclass(frozen=True)
class Judged:
    """The scale and shift that a verdict speaks with, and where they come from."""

    scale: Fraction
    shift: Fraction
    scale_from: Literal["declared", "found", "default"]


def polynomial_relation(projection: Hamiltonian, energy: Hamiltonian) -> Relation | None:
    """The relation of two polynomials over the same variables, by columns of terms.

    Weights are stored without a common factor, so that the weights of related polynomials are equal and the
    resolutions have the ratio alpha.

    Examples
    --------
    >>> E = Hamiltonian({("a", "b"): 2, ("a",): -1, (): 5}, "spin")
    >>> polynomial_relation(3 * E - 7, E)
    Relation(scale=Fraction(3, 1), shift=Fraction(-7, 1), level=None)
    >>> polynomial_relation(-1 * E, E) is None
    True
    """
    energy = energy if energy.labels == projection.labels else energy.with_labels(projection.labels)
    if not energy.blocks:
        if projection.blocks:
            return None
        return Relation(Fraction(1), projection.constant - energy.constant, energy.constant)
    if [block.members.shape for block in energy.blocks] != [block.members.shape for block in projection.blocks]:
        return None
    for mine, theirs in zip(projection.blocks, energy.blocks, strict=True):
        same = np.array_equal(mine.members, theirs.members) and np.array_equal(mine.weights, theirs.weights)
        if not same:
            return None
    scale = projection.resolution / energy.resolution
    return Relation(scale, projection.constant - scale * energy.constant)


@dataclass(frozen=True)
class Column:
    """Energies of listed states as ``constant + integers * resolution``."""

    integers: NDArray[Any]
    constant: Fraction
    resolution: Fraction

    def __getitem__(self, index: int) -> Fraction:
        return self.constant + int(self.integers[index]) * self.resolution


def column_relation(projection: Column, energy: Column) -> Relation | None:
    """The relation of two columns of energies of the same states (at least one)."""
    rises, falls = _shape(energy.integers), _shape(projection.integers)
    if rises is None:
        if falls is not None:
            return None
        return Relation(Fraction(1), projection[0] - energy[0], energy[0])
    if falls is None or not np.array_equal(rises[0], falls[0]):
        return None
    scale = falls[1] * projection.resolution / (rises[1] * energy.resolution)
    return Relation(scale, projection[0] - scale * energy[0])


def _shape(integers: NDArray[Any]) -> tuple[NDArray[Any], int] | None:
    """Differences from the first entry over their greatest common divisor, and that divisor; None when all equal."""
    differences = integers - integers[0]
    if differences.dtype == object:
        divisor = gcd(*(int(value) for value in differences))
    else:
        divisor = int(np.gcd.reduce(differences))
    if divisor == 0:
        return None
    reduced = differences // divisor
    return (reduced.astype(object) if reduced.dtype == object else reduced.astype(np.int64)), divisor


def judge_scale(declared: tuple[Fraction, Fraction] | None, relation: Relation | None) -> Judged:
    """Declared values first, then the relation, then 1 and 0.

    Examples
    --------
    >>> judge_scale(None, Relation(Fraction(2), Fraction(1)))
    Judged(scale=Fraction(2, 1), shift=Fraction(1, 1), scale_from='found')
    """
    if declared is not None:
        return Judged(*declared, "declared")
    if relation is not None:
        return Judged(relation.scale, relation.shift, "found")
    return Judged(Fraction(1), Fraction(0), "default")
