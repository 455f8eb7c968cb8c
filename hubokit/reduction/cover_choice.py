"""Which pairs to choose: several ways, the one with the fewest auxiliaries kept.

Ways of treating terms of four and more:

- *splits*: terms of five and more are shortened to four by joint variables, then all cubics and quartics are
  covered together, a quartic by both pairs of a split;
- *nests* (booleans): quartics too are shortened, by the most-common-pair rule, then the cubics are covered;
- *rule* (booleans): the most-common-pair rule to the end;
- *splits and nests* (booleans, few terms): both together, by integer program.

References
----------
Anthony, Boros, Crama, Gruber 2017, "Quadratic reformulations of nonlinear binary optimization problems".
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.reduction.cover_joins import most_common_pairs
from hubokit.reduction.cover_nests import nested_cover
from hubokit.reduction.cover_problem import cover_problem
from hubokit.reduction.cover_search import find_cover
from hubokit.reduction.pairs import PairVariables, shortened

JOIN_WORK = 50_000
"""Terms of four and more up to which the most-common-pair rule is run to the end, for `work` = 1."""


NEST_TERMS, NEST_NODES = 48, 50
"""Terms up to which splits and nests are chosen together, and the nodes spent, for `work` = 1."""


@dataclass(frozen=True)
class ChosenPairs:
    """Pairs that cover some terms, and how they were found.

    Parameters
    ----------
    pairs : PairVariables
    how : str
        In words.
    greedy : int
        Auxiliaries that the most-common-pair rule takes.
    proven_least : bool
        No other pairs of the same way (splits or nests) are fewer.
    alone : int
        Terms left to a gadget of their own, of one auxiliary each.
    skipped : tuple of str
        Ways that were not tried because of the work limit.
    """

    pairs: PairVariables
    how: str
    greedy: int
    proven_least: bool
    skipped: tuple[str, ...] = ()
    alone: int = 0

    @property
    def auxiliaries(self) -> int:
        """Auxiliaries of the pairs and of the terms left alone."""
        return self.pairs.count + self.alone


def choose_pairs(
    blocks: Mapping[int, NDArray[Any]],
    size: int,
    domain: str,
    seed: int = 0,
    work: int = 1,
    alone: NDArray[np.bool_] | None = None,
) -> ChosenPairs:
    """As few pairs as the search finds for terms of three and more members.

    Parameters
    ----------
    blocks : mapping of locality k to integer array (m, k)
    size : int
        Number of original variables.
    domain : "spin" or "boolean"
    seed : int
    work : int
        Multiplies the limits of the searches, which count steps.
    alone : bool array, optional
        The quartic terms that a gadget of one auxiliary serves as well; the search may leave them to it.

    Examples
    --------
    >>> chosen = choose_pairs({4: np.array([[0, 1, 2, 3], [0, 1, 2, 4], [0, 1, 2, 5]])}, 6, "boolean")
    >>> chosen.pairs.operands.tolist(), chosen.greedy
    ([[0, 1], [2, 6]], 2)
    """
    blocks = {locality: members for locality, members in sorted(blocks.items()) if len(members)}
    long = sum(len(members) for locality, members in blocks.items() if locality >= 4)
    tried = [_shorten_and_cover(blocks, size, domain, 4, seed, work, alone)]
    skipped: tuple[str, ...] = ()
    if domain == "boolean" and long:
        if long <= JOIN_WORK * work:
            tried.append(_shorten_and_cover(blocks, size, domain, 3, seed, work, None))
            rule = most_common_pairs(blocks.values(), size, domain, 2)
            tried.append(ChosenPairs(rule, "most common pair", rule.count, False))
            tried += _split_and_nest(blocks, size, work)
        else:
            skipped = (f"nested pairs: {long} terms of four and more, limit {JOIN_WORK * work}",)
    best = min(tried, key=lambda one: one.auxiliaries)
    greedy = min(one.greedy for one in tried)
    return replace(best, greedy=greedy, skipped=skipped)


def _split_and_nest(blocks: Mapping[int, NDArray[Any]], size: int, work: int) -> list[ChosenPairs]:
    """Splits and nests chosen together, where the terms are few and none is longer than four."""
    terms = sum(len(members) for members in blocks.values())
    if max(blocks) > 4 or terms > NEST_TERMS * work:
        return []
    found = nested_cover(blocks.get(3, np.zeros((0, 3), np.int64)), blocks[4], size, NEST_NODES * work)
    if found is None:
        return []
    pairs, proven = found
    how = "integer program over splits and nests, " + ("proven least" if proven else "stopped at its node limit")
    return [ChosenPairs(pairs, how, pairs.count, proven)]


def _shorten_and_cover(
    blocks: Mapping[int, NDArray[Any]],
    size: int,
    domain: str,
    most: int,
    seed: int,
    work: int,
    alone: NDArray[np.bool_] | None,
) -> ChosenPairs:
    """Terms shortened to at most `most` members by joint variables, then covered by pairs."""
    long = [members for locality, members in blocks.items() if locality > most]
    joins = most_common_pairs(blocks.values(), size, domain, most) if long else PairVariables.of(size, [])
    short = {locality: [members] for locality, members in blocks.items() if locality <= most}
    for members in long:
        short.setdefault(most, []).append(shortened(members, joins, domain, most))
    by_columns = [np.concatenate(rows) for rows in short.values()]
    marks = [np.zeros(len(rows), bool) for rows in by_columns]
    if alone is not None and 4 in short:
        marks[list(short).index(4)][: len(alone)] = alone
    problem = cover_problem(by_columns, size + joins.count, joins.operands[~joins.is_product], marks)
    cover = find_cover(problem, seed, work)
    fresh = cover.chosen & ~problem.given
    left = int((fresh & (problem.operands[:, 0] < 0)).sum())
    operands = problem.operands[fresh & (problem.operands[:, 0] >= 0)]
    pairs = PairVariables(
        size,
        np.concatenate([joins.operands, operands]).astype(np.int32),
        np.concatenate([joins.companions, np.full(len(operands), -1)]).astype(np.int32),
    )
    least = joins.count == 0 and problem.count(cover.chosen) == cover.least
    how = cover.how if not joins.count else f"{joins.count} joint variables by the most common pair, then {cover.how}"
    return ChosenPairs(pairs, how, joins.count + cover.greedy, least, alone=left)
