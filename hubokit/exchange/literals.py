"""Sums of weighted products of literals, as clauses and pseudo-Boolean files have them, as Hamiltonians.

A literal is a variable or its complement, x or 1 - x. Literals are held as numbers, as in DIMACS files: +3 is the
third variable, -3 its complement.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Origin

Products = tuple[NDArray[Any], NDArray[Any]]
"""Literals of shape (m, k) and weights of shape (m,)."""


def literal_model(
    products: Iterable[Products],
    labels: Sequence[str],
    *,
    scale: Fraction = Fraction(1),
    constant: Fraction = Fraction(0),
    convention: str = "1-2x",
) -> Hamiltonian:
    """``constant + scale * sum of weight * product of literals`` as a boolean Hamiltonian.

    Parameters
    ----------
    products : iterable of (literals (m, k), weights (m,))
        Literals are +-1 .. +-n; x * (1 - x) = 0 and repeated literals are reduced.
    labels : sequence of str, length n
    scale, constant : Fraction
    convention : str

    Raises
    ------
    LimitError
        The complements expand into more than ``EXPANSION_LIMIT`` products (2**j for a product of j complements).

    Examples
    --------
    >>> print(literal_model([(np.array([[1, -2]]), np.array([3]))], ["a", "b"]))
    3 a - 3 a b
    """
    count = len(labels)
    gathered = [
        (np.where(literals > 0, literals - 1, count - 1 - literals), weights)
        for literals, weights in products
        if len(weights)
    ]
    complements = any(len(members) and int(members.max()) >= count for members, _ in gathered if members.size)
    mark = "~"
    while any(label.startswith(mark) for label in labels):
        mark += "~"
    names = list(labels) + ([f"{mark}{i}" for i in range(count)] if complements else [])
    wide = Hamiltonian.from_arrays(
        [members for members, _ in gathered],
        [weights for _, weights in gathered],
        domain="boolean",
        labels=names,
        resolution=scale,
        constant=constant,
        convention=convention,
    )
    if not complements:
        return wide
    origin: dict[str, Origin | int] = {f"{mark}{i}": ("not", label) for i, label in enumerate(labels)}
    return wide.substituted(origin)


def grouped(literals: NDArray[Any], lengths: NDArray[np.int64], weights: NDArray[Any]) -> list[Products]:
    """Products of mixed length, laid end to end, as one array for each length.

    Examples
    --------
    >>> [a.tolist() for a, _ in grouped(np.array([1, 2, 3]), np.array([1, 2]), np.array([5, 6]))]
    [[[1]], [[2, 3]]]
    """
    if len(lengths) and (lengths == lengths[0]).all():
        return [(literals.reshape(len(lengths), int(lengths[0])), weights)]
    starts = np.cumsum(lengths) - lengths
    parts = []
    for length in np.unique(lengths).tolist():
        chosen = np.flatnonzero(lengths == length)
        rows = literals[starts[chosen, None] + np.arange(length)] if length else np.zeros((len(chosen), 0), np.int64)
        parts.append((rows, weights[chosen]))
    return parts


def joined(parts: Iterable[Products]) -> list[Products]:
    """Products of the same length in one array each."""
    by_length: dict[int, list[Products]] = {}
    for literals, weights in parts:
        by_length.setdefault(literals.shape[1], []).append((literals, weights))
    return [
        (np.concatenate([p[0] for p in group]), np.concatenate([p[1] for p in group]))
        for _, group in sorted(by_length.items())
    ]
