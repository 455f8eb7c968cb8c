"""Splits and nests of boolean quartics chosen together, by integer program, for few terms.

The product of four booleans is a product of two pairs, or of a *triple* and the variable left over, where a triple is
itself the product of a pair and a variable. 0/1 variables z for pairs and for triples within quartics:

    cubic:    sum of z over its three pairs                    >= 1
    triple:   sum of z over its three pairs - z of the triple  >= 0
    quartic:  sum of u over its splits + sum of z over its four triples >= 1,    u <= z of both pairs of the split.

References
----------
Anthony, Boros, Crama, Gruber 2017, "Quadratic reformulations of nonlinear binary optimization problems" (covers by
sets of any size).
"""

from __future__ import annotations

from itertools import combinations
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.reduction.cover_program import Program, solved
from hubokit.reduction.pairs import QUARTIC_SPLITS, PairVariables


def nested_cover(
    cubics: NDArray[Any], quartics: NDArray[Any], size: int, nodes: int
) -> tuple[PairVariables, bool] | None:
    """The fewest auxiliaries for boolean terms of three and four members, as far as `nodes` nodes go.

    Parameters
    ----------
    cubics, quartics : integer arrays, shapes (m, 3) and (q, 4)
    size : int
        Number of original variables.
    nodes : int

    Returns
    -------
    pairs : PairVariables
    proven : bool
        No fewer auxiliaries do, each being the product of two variables or of a pair and a variable.
    None when the program found nothing within its limit.

    Examples
    --------
    >>> rows = np.array([[0, 1, 2, 3], [0, 1, 2, 4], [0, 1, 2, 5]])
    >>> pairs, proven = nested_cover(np.zeros((0, 3), int), rows, 6, 100)
    >>> pairs.count, proven
    (2, True)
    """
    terms = [tuple(row) for row in np.concatenate([quartics[:, :3], cubics]).tolist()]
    triples = sorted({three for row in quartics.tolist() for three in combinations(row, 3)})
    twos = sorted({two for row in [*terms, *quartics.tolist()] for two in combinations(row, 2)})
    column = {item: place for place, item in enumerate([*twos, *triples])}
    costly = len(column)
    plain, quartics = np.unique(cubics, axis=0).tolist(), np.unique(quartics, axis=0).tolist()
    split = costly + 3 * np.arange(len(quartics))
    rows: list[tuple[list[int], list[float], float]] = [
        ([column[two] for two in combinations(row, 2)], [1.0] * 3, 1.0) for row in plain
    ]
    rows += [
        ([column[two] for two in combinations(three, 2)] + [column[three]], [1.0, 1.0, 1.0, -1.0], 0.0)
        for three in triples
    ]
    rows += [
        ([*(column[three] for three in combinations(row, 3)), *range(first, first + 3)], [1.0] * 7, 1.0)
        for row, first in zip(quartics, split.tolist(), strict=True)
    ]
    rows += [
        ([column[row[ends[0]], row[ends[1]]], first + place], [1.0, -1.0], 0.0)
        for row, first in zip(quartics, split.tolist(), strict=True)
        for place, halves in enumerate(QUARTIC_SPLITS.reshape(3, 2, 2).tolist())
        for ends in halves
    ]
    width = costly + 3 * len(quartics)
    starts = np.concatenate([[0], np.cumsum([len(columns) for columns, _, _ in rows])]).astype(np.int32)
    program = Program(
        np.array([1.0] * costly + [0.0] * (width - costly)),
        np.zeros(width),
        costly,
        starts,
        np.concatenate([columns for columns, _, _ in rows]).astype(np.int32),
        np.concatenate([factors for _, factors, _ in rows]),
        np.array([least for _, _, least in rows]),
    )
    found = solved(program, nodes)
    if found is None:
        return None
    values, bound = found
    chosen = [two for two in twos if values[column[two]] > 0.5]
    number = {two: size + place for place, two in enumerate(chosen)}
    operands = list(chosen)
    for three in triples:
        if values[column[three]] > 0.5:
            held = [two for two in combinations(three, 2) if two in number]
            if not held:
                return None
            left = next(variable for variable in three if variable not in held[0])
            operands.append((left, number[held[0]]))
    return PairVariables.of(size, operands), len(operands) == bound
