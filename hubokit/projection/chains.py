"""Auxiliaries eliminated one after another: chains of pairs, and whatever else the plain bounds leave open.

In y1 = x0 x1, y2 = y1 x2 the penalty of y2 pulls on y1 as hard as the penalty of y1 itself, so that no
interval bound decides y1 while y2 is free. But y2 is decided by y1 and x2. Put in, it leaves a polynomial F'
= min over y2 of F in which the pull is gone, and there y1 is decided in its turn. Every step is the same fact
as in `hubokit.projection.guards`, about a polynomial that need not be quadratic: fix the guards; a product
that they do not fix adds anything between its least and its greatest value. A wrong auxiliary that was put in
early costs at least its margin in the polynomial of its time, so the least margin bounds the auxiliary gap
from below.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from hubokit.errors import LimitError
from hubokit.model.terms import Part
from hubokit.projection.guards import MOST_GUARDS, Rules, reach, sorting_keys
from hubokit.projection.polynomial import Gathered
from hubokit.projection.structure import Integers, Positions, Structure
from hubokit.projection.substitution import substituted
from hubokit.projection.tables import settings


@dataclass
class Chain:
    """What came out of eliminating some auxiliaries in turn.

    Parameters
    ----------
    polynomial : Gathered
        Their terms, over originals and auxiliaries with known guards.
    steps : list of (bool, list of Rules)
        In the order of the proof: whether the auxiliaries were put in at once, and their rules.
    left : int64 array
        Auxiliaries that stayed undecided.
    least_margin : 1 or 0
        With 0 the settings are best ones, but maybe not the only ones.
    """

    polynomial: Gathered
    steps: list[tuple[bool, list[Rules]]] = field(default_factory=list)
    left: Positions = field(default_factory=lambda: np.zeros(0, np.int64))
    least_margin: int = 1

    def rounds(self) -> list[list[Rules]]:
        """Rules in an order in which every guard is known before it is asked for."""
        known = [rules for at_once, rules in self.steps if not at_once]
        replaced = [[one] for at_once, rules in self.steps if at_once for one in rules]
        return known + replaced[::-1]


def eliminate(structure: Structure, waiting: Positions, known: Integers, least_margin: int = 1) -> Chain:
    """Eliminate auxiliaries in turn as far as interval bounds go.

    Parameters
    ----------
    structure : Structure
    waiting : int64 array
        Auxiliaries to decide; together they make whole clusters apart from known ones.
    known : bool array, shape (n,)
        Originals and auxiliaries already decided.
    least_margin : 1 or 0
        With 0 a field that is nowhere of the wrong sign decides, too: the setting is one of the best, P is
        right, but ties are not counted. The auxiliaries are then all put in at once.

    Returns
    -------
    Chain
    """
    size = len(structure.is_auxiliary)
    is_waiting = np.zeros(size, bool)
    is_waiting[waiting] = True
    kept = is_waiting[structure.ends].any(axis=1)
    parts: list[Part] = [
        (waiting[:, None], structure.field[waiting]),
        (structure.ends[kept], structure.weights[kept]),
    ]
    chain = Chain(Gathered(structure.domain), least_margin=least_margin)
    chain.polynomial.add(parts)
    chain.polynomial.merge()
    known = known.copy()
    while len(waiting):
        fields = _fields(chain.polynomial, waiting, size)
        found = _decisions(fields, waiting, known, structure, 1) if least_margin else []
        if found:
            chain.steps.append((False, found))
            fresh = np.concatenate([rules.auxiliaries for rules in found])
            known[fresh] = True
        else:
            found = _in_order(_decisions(fields, waiting, ~np.zeros(size, bool), structure, least_margin), size)
            if not found:
                break
            try:
                chain.polynomial = substituted(chain.polynomial, [[one] for one in found[::-1]], size)
            except LimitError:
                break
            chain.steps.append((True, found))
            fresh = np.concatenate([rules.auxiliaries for rules in found])
        waiting = np.setdiff1d(waiting, fresh)
    chain.left = waiting
    return chain


@dataclass(frozen=True)
class _Fields:
    """Local fields: entry e adds ``weight[e]`` times the product of ``rest[e]`` (-1: absent) to ``row[e]``."""

    row: Positions
    rest: Positions
    weight: Integers
    shift: int


def _fields(polynomial: Gathered, waiting: Positions, size: int) -> _Fields:
    number = np.full(size, -1)
    number[waiting] = np.arange(len(waiting))
    width = max((members.shape[1] for members, _ in polynomial.parts), default=1)
    rows, rests, weights = [], [], []
    for members, numbers in polynomial.parts:
        for column in range(members.shape[1]):
            own = number[members[:, column]]
            held = own >= 0
            rest = np.full((int(held.sum()), width - 1), -1)
            rest[:, : members.shape[1] - 1] = np.delete(members[held], column, axis=1)
            rows.append(own[held])
            rests.append(rest)
            weights.append(numbers[held])
    if not rows:
        return _Fields(np.zeros(0, np.int64), np.zeros((0, 0), np.int64), np.zeros(0, np.int64), polynomial.shift)
    return _Fields(np.concatenate(rows), np.concatenate(rests), np.concatenate(weights), polynomial.shift)


def _decisions(
    fields: _Fields, waiting: Positions, usable: Integers, structure: Structure, least_margin: int
) -> list[Rules]:
    """Auxiliaries decided by up to `MOST_GUARDS` of the usable variables."""
    order, starts = _ranked(fields, len(waiting), usable)
    available = starts[1:] - starts[:-1]
    found: list[Rules] = []
    left = np.arange(len(waiting))
    for g in range(MOST_GUARDS + 1):
        left = left[available[left] >= g]
        if not len(left):
            break
        guards = order[starts[left][:, None] + np.arange(g)]
        rules = _decided(fields, left, waiting[left], guards, structure.domain, least_margin)
        if len(rules):
            found.append(rules)
            left = left[~np.isin(waiting[left], rules.auxiliaries)]
    return found


def _ranked(fields: _Fields, count: int, usable: Integers) -> tuple[Positions, Positions]:
    """Usable variables of each row, the heaviest first, and where each row starts."""
    size = len(usable)
    width = fields.rest.shape[1]
    row = np.repeat(fields.row, width)
    variable = fields.rest.ravel()
    weight = np.repeat(np.abs(fields.weight), width)
    kept = variable >= 0
    kept[kept] = usable[variable[kept]]
    keys, inverse = np.unique(row[kept] * size + variable[kept], return_inverse=True)
    total = np.zeros(len(keys), weight.dtype)
    np.add.at(total, inverse, weight[kept])
    order = np.lexsort((sorting_keys(-total), keys // size))
    return keys[order] % size, np.searchsorted(keys[order] // size, np.arange(count + 1))


def _decided(
    fields: _Fields, rows: Positions, auxiliaries: Positions, guards: Positions, domain: str, least_margin: int
) -> Rules:
    """Which of these rows their guards decide."""
    g = guards.shape[1]
    index = np.full(int(rows.max()) + 1, -1)
    index[rows] = np.arange(len(rows))
    inside = fields.row < len(index)
    inside[inside] = index[fields.row[inside]] >= 0
    row, rest, weight = index[fields.row[inside]], fields.rest[inside], fields.weight[inside]
    match = rest[:, :, None] == guards[row][:, None, :]
    is_free = ((rest >= 0) & ~match.any(axis=2)).any(axis=1)
    held = match.any(axis=1)
    below, above = reach(weight, domain)
    good = np.ones(len(rows), bool)
    function = np.zeros(len(rows), np.uint64)
    margin: Integers | None = None
    for number, values in enumerate(settings(g, domain)):
        # The guards in a product make a factor: 0 or 1 for booleans, a sign for spins.
        factor = np.where(held, values, 1).prod(axis=1)
        low = np.zeros(len(rows), weight.dtype)
        high = np.zeros(len(rows), weight.dtype)
        if domain == "spin":
            np.add.at(low, row, np.where(is_free, below, weight * factor))
            np.add.at(high, row, np.where(is_free, above, weight * factor))
        else:
            np.add.at(low, row, factor * np.where(is_free, below, weight))
            np.add.at(high, row, factor * np.where(is_free, above, weight))
        positive = low >= least_margin
        negative = ~positive & (high <= -least_margin)
        good &= positive | negative
        if not good.any():
            break
        function |= (positive if domain == "spin" else negative).astype(np.uint64) << np.uint64(number)
        met = np.where(positive, low, -high)
        margin = met if margin is None else np.minimum(margin, met)
    if not good.any() or margin is None:
        nothing = np.zeros(0, np.int64)
        return Rules(nothing, guards[:0], nothing.astype(np.uint64), nothing, nothing.astype(bool))
    step = 2 if domain == "spin" else 1
    whole = margin[good] * step
    # F - P is a whole multiple of the resolution, so a bound in units of 2**-shift of it may be rounded up.
    whole = -(-whole >> fields.shift)
    return Rules(auxiliaries[good], guards[good], function[good], whole, np.zeros(int(good.sum()), bool))


def _in_order(found: list[Rules], size: int) -> list[Rules]:
    """Rules split so that none has an auxiliary of an earlier one, or of its own, among its guards.

    Auxiliaries that guard each other in a circle cannot all be put in: of those only the first is kept.
    """
    if not found:
        return []
    guarded_by = {
        int(y): {int(z) for z in guards}
        for rules in found
        for y, guards in zip(rules.auxiliaries, rules.guards, strict=True)
    }
    levels: list[list[int]] = []
    left = set(guarded_by)
    while left:
        used = set().union(*(guarded_by[y] for y in left)) & left
        ready = left - used
        if not ready:
            if not levels:
                levels.append([min(left)])
            break
        levels.append(sorted(ready))
        left -= ready
    ordered = []
    for level in levels:
        inside = np.zeros(size, bool)
        inside[level] = True
        for rules in found:
            chosen = inside[rules.auxiliaries]
            if chosen.any():
                ordered.append(rules.taken(chosen))
    return ordered
