"""Decided auxiliaries replaced by the polynomials of their guards, by array work.

A rule y = g(guards) is a truth table; its polynomial has at most 2**g products. Rounds are undone last first,
so that the polynomial put in for y may hold auxiliaries of earlier rounds, which are replaced in their turn.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from hubokit.errors import LimitError
from hubokit.model.numbers import absolute_sum
from hubokit.model.terms import EXPANSION_LIMIT, Part
from hubokit.projection.guards import Rules
from hubokit.projection.polynomial import Gathered, times
from hubokit.projection.structure import Integers, Positions
from hubokit.projection.tables import coefficients, written_by_row


@dataclass(frozen=True)
class Replacements:
    """Products of one locality in the polynomials of many auxiliaries.

    Rows ``starts[i]:starts[i+1]`` belong to auxiliary number i of the round: `members` (r, k), `weights` (r,).
    """

    starts: Positions
    members: Positions
    weights: Integers


def substituted(gathered: Gathered, rounds: list[list[Rules]], size: int) -> Gathered:
    """The same function with every decided auxiliary replaced.

    Parameters
    ----------
    gathered : Gathered
    rounds : list of rounds of Rules
    size : int
        Number of variables of the model.

    Raises
    ------
    LimitError
        More than ``EXPANSION_LIMIT`` products would be written down.

    Examples
    --------
    >>> g = Gathered("boolean", parts=[(np.array([[2, 3]]), np.array([5]))])
    >>> y = Rules(np.array([3]), np.array([[0, 1]]), np.array([8], np.uint64), np.array([1]), np.array([True]))
    >>> [(m.tolist(), w.tolist()) for m, w in substituted(g, [[y]], 4).parts]
    [([[0, 1, 2]], [5])]
    """
    for rules in reversed(rounds):
        if not rules:
            continue
        number = np.full(size, -1)
        fresh = np.concatenate([one.auxiliaries for one in rules])
        number[fresh] = np.arange(len(fresh))
        replacements, shift = _polynomials(rules, gathered.domain)
        remaining = True
        # A product of several auxiliaries of this round loses one of them in each pass.
        while remaining:
            gathered, remaining = _one_pass(gathered, number, replacements, shift)
    gathered.merge()
    return gathered


def _one_pass(
    gathered: Gathered, number: Positions, replacements: list[Replacements], shift: int
) -> tuple[Gathered, bool]:
    gathered.merge()
    result = Gathered(gathered.domain, gathered.shift, gathered.constant)
    opened = 0
    for members, weights in gathered.parts:
        held = number[members] >= 0
        any_held = held.any(axis=1)
        result.add([(members[~any_held], weights[~any_held])], gathered.shift)
        if any_held.any():
            expanded = _expanded(members[any_held], weights[any_held], held[any_held], number, replacements)
            opened += sum(len(part[1]) for part in expanded)
            if opened > EXPANSION_LIMIT:
                raise LimitError(
                    f"putting the decided auxiliaries in would expand into more than {EXPANSION_LIMIT:,} products"
                )
            result.add(expanded, gathered.shift + shift)
    return result, opened > 0


def _expanded(
    members: Positions, weights: Integers, held: Integers, number: Positions, replacements: list[Replacements]
) -> list[Part]:
    """Each row with its first replaceable member multiplied out."""
    rows, width = members.shape
    column = held.argmax(axis=1)
    owner = number[members[np.arange(rows), column]]
    others = members[np.arange(width) != column[:, None]].reshape(rows, width - 1)
    parts: list[Part] = []
    for replacement in replacements:
        lengths = replacement.starts[owner + 1] - replacement.starts[owner]
        total = int(lengths.sum())
        if not total:
            continue
        if total > EXPANSION_LIMIT:
            raise LimitError(
                f"putting the decided auxiliaries in would expand into {total:,} products; "
                f"at most {EXPANSION_LIMIT:,} are allowed"
            )
        row = np.repeat(np.arange(rows), lengths)
        entry = replacement.starts[owner][row] + np.arange(total) - np.repeat(np.cumsum(lengths) - lengths, lengths)
        product = np.concatenate([others[row], replacement.members[entry].astype(others.dtype)], axis=1)
        largest = int(np.abs(replacement.weights).max())
        repeated = weights[row]
        if repeated.dtype != object and absolute_sum(repeated) * largest >= 2**62:
            repeated = repeated.astype(object)
        parts.append((product, repeated * replacement.weights[entry]))
    return parts


def _polynomials(rules: list[Rules], domain: str) -> tuple[list[Replacements], int]:
    """Polynomials of all auxiliaries of a round, in units of 2**-shift."""
    pieces: list[tuple[int, Positions, Positions, Integers]] = []
    first = 0
    for one in rules:
        table = one.truth_tables()
        values = 1 - 2 * table if domain == "spin" else table
        coefficient, shift = coefficients(values, domain)
        pieces.extend((shift, first + row, m, w) for row, m, w in written_by_row(coefficient, one.guards))
        first += len(one)
    shift = max((piece[0] for piece in pieces), default=0)
    by_locality: dict[int, list[tuple[Positions, Positions, Integers]]] = {}
    for own, row, members, weights in pieces:
        raised = times(weights, 1 << (shift - own))
        by_locality.setdefault(members.shape[1], []).append((row, members, raised))
    replacements = []
    for same in by_locality.values():
        row = np.concatenate([piece[0] for piece in same])
        order = np.argsort(row, kind="stable")
        starts = np.searchsorted(row[order], np.arange(first + 1))
        members = np.concatenate([piece[1] for piece in same])[order]
        weights = np.concatenate([piece[2] for piece in same])[order]
        replacements.append(Replacements(starts, members, weights))
    return replacements, shift
