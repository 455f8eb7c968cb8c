"""The greedy most-common-pair rule, which also shortens long terms by pairs of pairs.

Again and again the pair of variables that stands in most terms is replaced everywhere by its joint variable (common
practice). For booleans the joint variable is the pair variable and costs one auxiliary; for spins it is the product
variable, two auxiliaries with its companion, and only terms of five and more are rewritten by it (shorter ones only
need the pair variable). The loop runs over pairs and the terms they touch; every replacement shortens a term.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable
from itertools import combinations
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.reduction.pairs import PairVariables


def most_common_pairs(blocks: Iterable[NDArray[Any]], size: int, domain: str, most: int) -> PairVariables:
    """Joint variables by the most-common-pair rule, until no term has more than `most` members.

    Parameters
    ----------
    blocks : iterable of integer arrays (m, k), k at least 3
        Terms of every locality; the short ones count where pairs are counted.
    size : int
        Number of original variables.
    domain : "spin" or "boolean"
    most : int
        2 for booleans makes everything quadratic by the rule alone; at least 4 for spins.

    Returns
    -------
    PairVariables

    Examples
    --------
    >>> most_common_pairs([np.array([[0, 1, 2, 3], [0, 1, 2, 4]])], 5, "boolean", 2).operands.tolist()
    [[0, 1], [2, 5]]
    """
    rows = [set(row) for members in blocks for row in members.tolist()]
    long = sum(len(row) > most for row in rows)
    where: dict[tuple[int, int], set[int]] = {}
    for number, row in enumerate(rows) if long else ():
        for pair in combinations(sorted(row), 2):
            where.setdefault(pair, set()).add(number)
    heap = [(-len(holders), pair) for pair, holders in where.items()]
    heapq.heapify(heap)
    operands: list[tuple[int, int]] = []
    companions: list[int] = []
    while long:
        count, pair = heapq.heappop(heap)
        holders = where[pair]
        if not holders:
            continue
        if len(holders) < -count:
            heapq.heappush(heap, (-len(holders), pair))
            continue
        if domain == "spin":
            if not any(len(rows[number]) > 4 for number in holders):
                continue
            operands.append(pair)
            companions.append(-1)
        joint = size + len(operands)
        operands.append(pair)
        companions.append(joint - 1 if domain == "spin" else -1)
        touched = set()
        for number in sorted(holders):
            row = rows[number]
            if domain == "spin" and len(row) == 4:
                continue
            for old in combinations(sorted(row), 2):
                if pair[0] in old or pair[1] in old:
                    where[old].discard(number)
            long -= len(row) > most >= len(row) - 1
            row -= set(pair)
            row.add(joint)
            if len(row) == 2 or (domain == "spin" and len(row) == 2):
                for old in combinations(sorted(row), 2):
                    where.get(old, set()).discard(number)
                continue
            for other in row - {joint}:
                where.setdefault((other, joint), set()).add(number)
                touched.add((other, joint))
        for new in sorted(touched):
            heapq.heappush(heap, (-len(where[new]), new))
    return PairVariables(size, np.array(operands, np.int32).reshape(-1, 2), np.array(companions, np.int32))
