"""Auxiliaries decided by a few guard variables: interval bounds.

Fix an auxiliary y and a set G of other variables, its *guards*. The local field of y (the energy change when
y is flipped) is an affine function of the other variables. If for every setting of G its sign is the same,
and strict, whatever the variables outside G are, then y is a function of G in every state that minimises over
the auxiliaries. Such facts hold together; where the guards are originals or auxiliaries decided before, y is
a unique function of the originals. Flipping a wrong y improves by at least the *margin*, the least absolute
field met, whatever the other variables are.

The case in mind is pair substitution, y = x1 x2 (I. G. Rosenberg, "Reduction of bivalent maximization to the
quadratic case", 1975), whose penalty couples y strongly to x1 and x2 and to nothing else.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from hubokit.projection.structure import Integers, Positions, Structure
from hubokit.projection.tables import settings

MOST_GUARDS = 6
"""A function of six guards is a truth table of 64 bits."""


@dataclass(frozen=True)
class Rules:
    """Auxiliaries as functions of g guards each, decided in one round.

    Parameters
    ----------
    auxiliaries : int64 array, shape (r,)
        Positions in the model.
    guards : int64 array, shape (r, g)
        Positions of originals, or of auxiliaries decided in an earlier round.
    function : uint64 array, shape (r,)
        Bit t is the auxiliary's bit when the guards have setting t (first guard most significant).
    margin : integer array, shape (r,)
        Flipping a wrong auxiliary improves by at least this much, in units of the resolution.
    attained : bool array, shape (r,)
        Whether some state reaches the margin.
    """

    auxiliaries: Positions
    guards: Positions
    function: Integers
    margin: Integers
    attained: Integers

    def __len__(self) -> int:
        return len(self.auxiliaries)

    @property
    def g(self) -> int:
        """Number of guards of each auxiliary."""
        return int(self.guards.shape[1])

    def taken(self, chosen: Integers) -> Rules:
        """The rules at the chosen indices."""
        return Rules(
            self.auxiliaries[chosen],
            self.guards[chosen],
            self.function[chosen],
            self.margin[chosen],
            self.attained[chosen],
        )

    def bits(self, guard_bits: Integers) -> Integers:
        """Bits of the auxiliaries, shape (m, r), from the guards' bits, shape (m, r, g)."""
        index = np.zeros(guard_bits.shape[:2], np.uint64)
        for column in range(self.g):
            index = (index << np.uint64(1)) | guard_bits[:, :, column].astype(np.uint64)
        return ((self.function >> index) & np.uint64(1)).astype(np.int8)

    def truth_tables(self) -> Integers:
        """Bits of each auxiliary for all settings of its guards, int64, shape (r, 2**g)."""
        index = np.arange(1 << self.g, dtype=np.uint64)
        return ((self.function[:, None] >> index) & np.uint64(1)).astype(np.int64)


def decide(structure: Structure, candidates: Positions) -> list[list[Rules]]:
    """Decide as many of the candidates as interval bounds can.

    Parameters
    ----------
    structure : Structure
    candidates : int64 array
        Positions of auxiliaries; all their neighbours may be anything else.

    Returns
    -------
    list of rounds, each a list of Rules
        Guards of a round are originals or auxiliaries of earlier rounds.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> from hubokit.projection.structure import structure_of
    >>> F = Hamiltonian({("a", "b"): 4, ("a", "y"): -8, ("b", "y"): -8, ("y",): 12, ("y", "c"): 3}, domain="boolean")
    >>> [[rules]] = decide(structure_of(F, ["y"]), np.array([2]))
    >>> rules.guards.tolist(), rules.truth_tables().tolist(), rules.margin.tolist()
    ([[0, 1]], [[0, 0, 0, 1]], [1])
    """
    known = ~structure.is_auxiliary
    waiting = candidates
    rounds: list[list[Rules]] = []
    while len(waiting):
        found = _one_round(structure, waiting, known)
        if not found:
            break
        rounds.append(found)
        fresh = np.concatenate([rules.auxiliaries for rules in found])
        known = known.copy()
        known[fresh] = True
        open_still = ~known
        # Only neighbours of what was just decided can have gained a guard.
        near = np.zeros(len(known), bool)
        near[structure.neighbours.rows(fresh)[1]] = True
        waiting = candidates[near[candidates] & open_still[candidates]]
    return rounds


def _one_round(structure: Structure, waiting: Positions, known: Integers) -> list[Rules]:
    row, other, weight = structure.neighbours.rows(waiting)
    usable = known[other]
    order = np.lexsort((sorting_keys(-np.abs(weight)), ~usable, row))
    row, other, weight, usable = row[order], other[order], weight[order], usable[order]
    count = len(waiting)
    starts = np.searchsorted(row, np.arange(count))
    available = np.bincount(row, weights=usable, minlength=count).astype(np.int64)
    low, high = np.zeros(count, weight.dtype), np.zeros(count, weight.dtype)
    below, above = reach(weight, structure.domain)
    np.add.at(low, row, below)
    np.add.at(high, row, above)
    free_of_auxiliaries = np.ones(count, bool)
    free_of_auxiliaries[row[structure.is_auxiliary[other]]] = False
    found: list[Rules] = []
    left = np.arange(count)
    for g in range(MOST_GUARDS + 1):
        left = left[available[left] >= g]
        if not len(left):
            break
        entry = starts[left][:, None] + np.arange(g)
        top = weight[entry]
        below, above = reach(top, structure.domain)
        rules, decided = _decided(
            structure, waiting[left], other[entry], top, low[left] - below.sum(axis=1), high[left] - above.sum(axis=1)
        )
        if decided.any():
            attained = free_of_auxiliaries[left][decided]
            found.append(Rules(rules.auxiliaries, rules.guards, rules.function, rules.margin, attained))
            left = left[~decided]
    return found


def _decided(
    structure: Structure, auxiliaries: Positions, guards: Positions, top: Integers, low: Integers, high: Integers
) -> tuple[Rules, Integers]:
    """Which auxiliaries these guards decide, when the other variables contribute anything from low to high."""
    field = structure.field[auxiliaries]
    good = np.ones(len(auxiliaries), bool)
    function = np.zeros(len(auxiliaries), np.uint64)
    margin: Integers | None = None
    for index, values in enumerate(settings(guards.shape[1], structure.domain)):
        middle = field + top @ values
        least, most = middle + low, middle + high
        positive, negative = least > 0, most < 0
        good &= positive | negative
        second = positive if structure.domain == "spin" else negative
        function |= second.astype(np.uint64) << np.uint64(index)
        met = np.where(positive, least, -most)
        margin = met if margin is None else np.minimum(margin, met)
    assert margin is not None
    step = 2 if structure.domain == "spin" else 1
    rules = Rules(auxiliaries[good], guards[good], function[good], margin[good] * step, good[good])
    return rules, good


def reach(weight: Integers, domain: str) -> tuple[Integers, Integers]:
    """Least and greatest value of weight times a variable."""
    if domain == "spin":
        size = np.abs(weight)
        return -size, size
    return np.minimum(weight, 0), np.maximum(weight, 0)


def sorting_keys(values: Integers) -> Positions:
    """Sorting keys as int64 for arrays of any integer dtype."""
    if values.dtype != object:
        return values
    ranks = np.empty(len(values), np.int64)
    ranks[np.argsort(values, kind="stable")] = np.arange(len(values))
    return ranks
