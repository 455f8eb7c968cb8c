"""All cubic and quartic terms on four variables reduced together, with one auxiliary a group.

A quartic term takes an auxiliary anyway, and every cubic term inside its four variables comes along for free. Cubic
terms that lie in no quartic are gathered greedily: sets of four variables that hold four of them first, then three,
then two. Terms that find no company are left over for gadgets of their own.

The gadget itself is in gadgets/four_variables.py; it speaks of spins. For booleans x = (1 + e s)/2 the cubic and
quartic coefficients of a group are those of its spin form, the form is written back in booleans, and what the spin
form has of lower order is carried along, so that nothing changes but the terms of the group.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import INT64_BOUND, absolute_sum, common_resolution
from hubokit.model.rewriting import affine_parts
from hubokit.model.terms import Block
from hubokit.reduction.gadgets.attach import Sketch, sketch_of
from hubokit.reduction.gadgets.base import Part
from hubokit.reduction.gadgets.four_variables import PAIRS, UNIT, Forms, four_variable_forms

CANDIDATE_LIMIT = 2**20
"""Largest number of sets of four variables that are looked at."""

METHOD = "four-variable-groups"

TRIPLES = ((1, 2, 3), (0, 2, 3), (0, 1, 3), (0, 1, 2))
"""Positions of the triple that leaves out member 0, 1, 2, 3 of a group."""


@dataclass(frozen=True)
class GroupPiece:
    """Groups of terms on four variables each.

    Parameters
    ----------
    members : int64 array, shape (g, 4)
        Rows increasing.
    functions : integer array, shape (g, 5)
        Weights in units of the source's resolution: of the quartic term, then of the cubic term that leaves out each
        member; 0 where the group has no such term.
    domain, convention : str
        Of the source.
    """

    members: npt.NDArray[np.int64]
    functions: npt.NDArray[Any]
    domain: str
    convention: str

    @property
    def method(self) -> str:
        """Name for the trail."""
        return METHOD

    @property
    def auxiliaries(self) -> int:
        """One a group."""
        return len(self.members)

    def rows(self) -> list[dict[str, Any]]:
        """Rows for the trail."""
        terms = int((self.functions != 0).sum())
        return [{"locality": 4, "method": METHOD, "terms": terms, "auxiliaries": self.auxiliaries}]

    def resolution(self, unit: Fraction, gap: Fraction) -> Fraction:
        """A rational of which every coefficient is a whole multiple."""
        return self._grid(unit, gap) / UNIT

    def _grid(self, unit: Fraction, gap: Fraction) -> Fraction:
        """Unit of the spin functions and of the margin."""
        return common_resolution([unit if self.domain == "spin" else unit / UNIT, gap / 4])

    def spin_functions(self) -> npt.NDArray[Any]:
        """The five coefficients in spins; for booleans in sixteenths of the source's resolution."""
        f = self.functions
        if absolute_sum(f.ravel()) * 64 >= INT64_BOUND:
            f = f.astype(object)
        if self.domain == "spin":
            return f
        e = -1 if self.convention == "1-2x" else 1
        return np.concatenate([f[:, :1], e * (f[:, :1] + 2 * f[:, 1:])], axis=1)

    def forms(self, unit: Fraction, gap: Fraction) -> Forms:
        """The spin forms in units of the grid."""
        own = unit if self.domain == "spin" else unit / UNIT
        grid = self._grid(unit, gap)
        f, factor = self.spin_functions(), int(own / grid)
        if (absolute_sum(f.ravel()) * factor + int(gap / grid)) >= INT64_BOUND // 2**12:
            f = f.astype(object)
        return four_variable_forms(f * factor, int(gap / 2 / grid))

    def reached(self, unit: Fraction, gap: Fraction) -> npt.NDArray[np.bool_]:
        """Which groups reach the auxiliary gap asked for, shape (g,)."""
        return np.asarray(self.forms(unit, gap).margin >= int(gap / 2 / self._grid(unit, gap)), dtype=bool)

    def attach(self, first: int, unit: Fraction, gap: Fraction, resolution: Fraction) -> tuple[list[Part], int]:
        """The quadratic products that stand for the groups; group t gets the auxiliary ``first + t``."""
        grid = self._grid(unit, gap)
        forms = self.forms(unit, gap)
        pairs, constant = forms.pairs, forms.constant
        if self.domain == "boolean":
            low, bottom = self._lower_order()
            factor = int(unit / grid)
            pairs = pairs + low.astype(pairs.dtype) * factor
            constant = constant + bottom.astype(pairs.dtype) * factor
        added = first + np.arange(len(self.members), dtype=np.int64)[:, None]
        places = np.concatenate([self.members, added], axis=1)
        ones = [(places[:, [i - 1]], pairs[:, n]) for n, (o, i) in enumerate(PAIRS) if o == 0]
        ones.append((places[:, [4]], forms.linear[:, 0]))
        twos = [(places[:, [i - 1, j - 1]], pairs[:, n]) for n, (i, j) in enumerate(PAIRS) if i > 0]
        twos += [(places[:, [i, 4]], forms.linear[:, i + 1]) for i in range(4)]
        parts: list[Part] = [_stacked(ones), _stacked(twos)]
        shift = int(constant.sum())
        scale = int(grid / UNIT / resolution)
        if self.domain == "boolean":
            sign = -1 if self.convention == "1-2x" else 1
            parts = [(m.astype(np.int64), w) for m, w in affine_parts([_as_block(p) for p in parts], -sign, 2 * sign)]
            shift += sum(int(w.sum()) for m, w in parts if m.shape[1] == 0)
            parts = [(m, w) for m, w in parts if m.shape[1]]
        total = sum(absolute_sum(w) for _, w in parts)
        if total * scale >= INT64_BOUND:
            parts = [(m, w.astype(object)) for m, w in parts]
        return [(m[w != 0], w[w != 0] * scale) for m, w in parts], shift * scale

    def sketch(self, unit: Fraction, gap: Fraction, resolution: Fraction) -> Sketch:
        """What pricing needs to know."""
        first = int(self.members.max()) + 1 if len(self.members) else 0
        parts, _ = self.attach(first, unit, gap, resolution)
        return sketch_of(parts, first, self.domain)

    def _lower_order(self) -> tuple[npt.NDArray[Any], npt.NDArray[Any]]:
        """Of the boolean terms in spins: coefficients at ``PAIRS`` and the constant, sixteenths of the resolution."""
        e = -1 if self.convention == "1-2x" else 1
        quartic, cubic = self.functions[:, 0], 2 * self.functions[:, 1:]
        columns = []
        for o, i in PAIRS:
            left_out = [k for k in range(4) if k + 1 not in (o, i)]
            total = quartic + cubic[:, left_out].sum(axis=1)
            columns.append(e * total if o == 0 else total)
        return np.stack(columns, axis=1), quartic + cubic.sum(axis=1)


def _stacked(parts: list[Part]) -> Part:
    return np.concatenate([m for m, _ in parts]), np.concatenate([w for _, w in parts])


def _as_block(part: Part) -> Block:
    return Block(part[0].astype(np.int32), part[1])


Taken = dict[int, npt.NDArray[np.bool_]]
"""For each locality, which terms of that block are served."""


@dataclass(frozen=True)
class Grouping:
    """Groups, and the cubic and quartic terms they took.

    Parameters
    ----------
    members : int64 array, shape (g, 4)
    functions : integer array, shape (g, 5)
    taken : mapping from locality to bool array over the terms of that block
    """

    members: npt.NDArray[np.int64]
    functions: npt.NDArray[Any]
    taken: Taken


def gathered(H: Hamiltonian) -> Grouping | str | None:
    """Gather cubic and quartic terms into groups of at least two terms.

    Parameters
    ----------
    H : Hamiltonian

    Returns
    -------
    Grouping, str or None
        None when no two terms lie on the same four variables; a sentence where a work limit is in the way.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b", "c"): 1, ("b", "c", "d"): 2, ("a", "b", "c", "d"): 5, ("a", "e", "f"): 1}, "spin")
    >>> groups = gathered(H)
    >>> groups.members.tolist(), groups.functions.tolist()
    ([[0, 1, 2, 3]], [[5, 2, 0, 0, 1]])
    """
    blocks = {block.locality: block for block in H.blocks}
    cubic = blocks.get(3, Block(np.zeros((0, 3), np.int32), np.zeros(0, np.int64)))
    quartic = blocks.get(4, Block(np.zeros((0, 4), np.int32), np.zeros(0, np.int64)))
    if H.size**3 >= 2**62 or H.size**2 * max(len(quartic), 1) >= 2**62:
        return f"{H.size} variables are too many for the index of cubic terms"
    table = _Triples(cubic.members.astype(np.int64), H.size)
    runs = _Runs(table.members, H.size)
    if runs.count > CANDIDATE_LIMIT:
        return f"{runs.count:,} sets of four variables to look at; at most {CANDIDATE_LIMIT:,} are"
    fours = quartic.members.astype(np.int64)
    chosen, inside = _chosen_groups(table, fours, runs.candidates())
    if not len(chosen):
        return None
    kind = object if object in (cubic.weights.dtype, quartic.weights.dtype) else np.int64
    functions = np.zeros((len(chosen), 5), kind)
    is_quartic = np.zeros(len(chosen), bool)
    if len(fours):
        place, found = _rows_in(chosen, fours, H.size)
        functions[found, 0] = quartic.weights[place[found]]
        is_quartic = found
    some = inside >= 0
    functions[:, 1:][some] = cubic.weights[inside[some]]
    taken = {3: np.zeros(len(cubic), bool), 4: np.zeros(len(quartic), bool)}
    taken[3][inside[some]] = True
    if len(fours):
        taken[4][place[is_quartic]] = True
    return Grouping(chosen, functions, taken)


class _Triples:
    """Sorted cubic terms with look-up of triples."""

    def __init__(self, members: npt.NDArray[np.int64], size: int) -> None:
        self.members, self.size = members, size
        self.keys = self.key(members)

    def key(self, rows: npt.NDArray[np.int64]) -> npt.NDArray[np.int64]:
        return np.asarray((rows[..., 0] * self.size + rows[..., 1]) * self.size + rows[..., 2], dtype=np.int64)

    def inside(self, fours: npt.NDArray[np.int64]) -> npt.NDArray[np.int64]:
        """Numbers of the cubic terms that leave out each member, -1 where there is none; shape (m, 4)."""
        keys = self.key(np.stack([fours[:, list(triple)] for triple in TRIPLES], axis=1))
        if not len(self.keys):
            return np.full(keys.shape, -1, np.int64)
        place = np.minimum(np.searchsorted(self.keys, keys), len(self.keys) - 1)
        return np.where(self.keys[place] == keys, place, -1)


class _Runs:
    """Pairs inside cubic terms beside the member left over, sorted, as runs of one pair.

    One int64 key holds a pair and its third member, so that a plain sort does the work.
    """

    def __init__(self, members: npt.NDArray[np.int64], size: int) -> None:
        self.size = size
        splits = ((0, 1, 2), (0, 2, 1), (1, 2, 0))
        keys = [(members[:, a] * size + members[:, b]) * size + members[:, c] for a, b, c in splits]
        self.keys = np.sort(np.concatenate(keys))
        pairs = self.keys // max(size, 1)
        fresh = np.ones(len(pairs), bool)
        fresh[1:] = pairs[1:] != pairs[:-1]
        self.starts = np.flatnonzero(fresh)
        self.lengths = np.diff(np.append(self.starts, len(pairs)))

    @property
    def count(self) -> int:
        """Number of pairs of cubic terms that share a pair of variables."""
        return int((self.lengths * (self.lengths - 1) // 2).sum())

    def candidates(self) -> npt.NDArray[np.int64]:
        """Every set of four variables that holds two cubic terms, rows increasing, distinct and sorted."""
        found = [np.zeros((0, 4), np.int64)]
        for length in np.unique(self.lengths[self.lengths > 1]).tolist():
            at = self.starts[self.lengths == length]
            first, second = (np.array(side, np.int64) for side in zip(*combinations(range(length), 2), strict=True))
            left = self.keys[(at[:, None] + first).ravel()]
            right = self.keys[(at[:, None] + second).ravel()] % self.size
            pair = left // self.size
            found.append(np.stack([pair // self.size, pair % self.size, left % self.size, right], axis=1))
        return np.unique(np.sort(np.concatenate(found), axis=1), axis=0)


def _chosen_groups(
    table: _Triples, fours: npt.NDArray[np.int64], candidates: npt.NDArray[np.int64]
) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.int64]]:
    """Groups and the cubic terms that each takes (-1 for none), every term once."""
    # The last place, which -1 points at, stands for "no such term" and is never free.
    free = np.append(np.ones(len(table.members), bool), False)
    groups, numbers = [], []
    rounds = ((fours, (1,)), (candidates, (4, 3, 2)))
    for rows, levels in rounds:
        inside = table.inside(rows)
        for level in levels:
            # Counts only fall while terms are taken, so one look at all candidates thins out each round; the loop
            # itself must be one by one, because each choice takes terms away from the next.
            hopeful = np.flatnonzero(free[inside].sum(axis=1) >= level)
            for place in hopeful.tolist():
                own = [number if free[number] else -1 for number in inside[place].tolist()]
                terms = [number for number in own if number >= 0]
                if len(terms) >= level:
                    free[terms] = False
                    groups.append(rows[place])
                    numbers.append(own)
    return np.array(groups, np.int64).reshape(-1, 4), np.array(numbers, np.int64).reshape(-1, 4)


def _rows_in(
    rows: npt.NDArray[np.int64], among: npt.NDArray[np.int64], size: int
) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.bool_]]:
    """Place of each row among sorted distinct rows, and whether it is there."""
    heads, tails = among[:, 0] * size + among[:, 1], among[:, 2] * size + among[:, 3]
    names, head_number = np.unique(heads, return_inverse=True)
    keys = head_number * size**2 + tails
    own_head = rows[:, 0] * size + rows[:, 1]
    at = np.minimum(np.searchsorted(names, own_head), len(names) - 1)
    wanted = np.where(names[at] == own_head, at * size**2 + rows[:, 2] * size + rows[:, 3], -1)
    place = np.minimum(np.searchsorted(keys, wanted), len(keys) - 1)
    return place, keys[place] == wanted


def group_piece(
    H: Hamiltonian, grouping: Grouping, gap: Fraction
) -> tuple[GroupPiece, dict[int, npt.NDArray[np.bool_]]]:
    """The groups that reach the auxiliary gap asked for, and the terms that they take."""
    piece = GroupPiece(grouping.members, grouping.functions, H.domain, H.convention)
    reached = piece.reached(H.resolution, gap)
    taken = {locality: mask.copy() for locality, mask in grouping.taken.items()}
    if not reached.all():
        failed = grouping.members[~reached]
        weights = grouping.functions[~reached]
        for locality, columns in ((4, [(0, (0, 1, 2, 3))]), (3, [(i + 1, t) for i, t in enumerate(TRIPLES)])):
            block = next((b for b in H.blocks if b.locality == locality), None)
            for column, positions in columns:
                used = weights[:, column] != 0
                if block is not None and used.any():
                    wanted = failed[used][:, list(positions)]
                    taken[locality][_places(block, wanted)] = False
    return GroupPiece(grouping.members[reached], grouping.functions[reached], H.domain, H.convention), taken


def _places(block: Block, rows: npt.NDArray[np.int64]) -> npt.NDArray[np.int64]:
    """Numbers of terms that are known to be in the block."""
    both = np.concatenate([block.members.astype(np.int64), rows])
    _, inverse = np.unique(both, axis=0, return_inverse=True)
    inverse = np.ravel(inverse)
    number = np.zeros(int(inverse.max()) + 1, np.int64)
    number[inverse[: len(block)]] = np.arange(len(block))
    return np.asarray(number[inverse[len(block) :]], dtype=np.int64)
