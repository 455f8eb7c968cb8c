"""Pair substitution: products of two variables get a variable of their own, and every longer term becomes quadratic.

An auxiliary stands for something that two existing variables u and v (its *operands*) decide:

- a *pair variable* y is down (boolean 1, spin -1) exactly when u and v are. For booleans y = u v. For spins
  s_u s_v = 1 + s_u + s_v - 2 y, which is s_u s_v = 1 - 2x_u - 2x_v + 4x_y in the booleans x = (1 - s) / 2. The
  identity speaks of spins alone and holds under either convention;
- a *product variable* p (spins only) is s_u s_v itself, made quadratic by the pair variable of the same operands,
  its *companion*. It is what pairs of pairs of spins are made of; terms of up to four spins need none, though they
  may take fewer couplers with them (product_spins.py).

A term is rewritten as the product of two *factors*. For booleans a factor is a variable. For spins the factor of a
pair variable is the affine form above, and that of any other variable the variable, so that a product of four spins
becomes the product of two affine forms. A cubic term holds one chosen pair, a quartic splits into two; longer terms
are first shortened by putting one variable for two.

References
----------
Rosenberg 1975, "Reduction of bivalent maximization to the quadratic case" (booleans); the spin form is the same
substitution written in spins.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.model.terms import ABSENT, Part

BALANCE_WORK = 50_000
"""Terms with a choice of pairs up to which the choice is made term by term."""

CUBIC_SPLITS = np.array([[0, 1, 2], [0, 2, 1], [1, 2, 0]])
"""Each row: the two positions that form the pair, then the position left over."""

QUARTIC_SPLITS = np.array([[0, 1, 2, 3], [0, 2, 1, 3], [0, 3, 1, 2]])
"""Each row: the positions of one pair, then of the other."""

QUARTIC_NESTS = np.array(
    [
        [i, j, *rest]
        for i in range(4)
        for j in range(i + 1, 4)
        for rest in (
            [k for k in range(4) if k not in (i, j)],
            [k for k in range(3, -1, -1) if k not in (i, j)],
        )
    ]
)
"""Each row: the positions of the inner pair, the position joined to it, the position left over."""


@dataclass(frozen=True)
class PairVariables:
    """The auxiliaries of a pair substitution, in the order in which they are defined.

    Variable number ``size + i`` is auxiliary i; numbers below `size` are the original variables.

    Parameters
    ----------
    size : int
        Number of original variables.
    operands : int32 array, shape (a, 2)
        The two variables that decide each auxiliary, both defined before it, the smaller first.
    companions : int32 array, shape (a,)
        For a product variable the number of the pair variable with the same operands; -1 for a pair variable.

    Raises
    ------
    InputError
        An operand or companion that is not defined before its auxiliary, or one pair twice.

    Examples
    --------
    >>> pairs = PairVariables.of(4, [(0, 1), (2, 4)])
    >>> pairs.count, pairs.depths.tolist()
    (2, [1, 2])
    >>> pairs.values(np.array([[1, 1, 1, 0]]), "boolean").tolist()
    [[1, 1]]
    """

    size: int
    operands: NDArray[np.int32]
    companions: NDArray[np.int32]

    def __post_init__(self) -> None:
        numbers = np.arange(self.size, self.size + len(self.operands))
        low, high = self.operands[:, 0], self.operands[:, 1]
        if ((low < 0) | (low >= high) | (high >= numbers) | (self.companions >= numbers)).any():
            raise InputError("a pair needs two different variables, both defined before it", "pairs")
        single = self.companions < 0
        for chosen in (single, ~single):
            if len(np.unique(self.operands[chosen], axis=0)) < int(chosen.sum()):
                raise InputError("the same pair is given twice; leave one out", "pairs")
        self.operands.setflags(write=False)
        self.companions.setflags(write=False)

    @classmethod
    def of(cls, size: int, pairs: Sequence[tuple[int, int]] | NDArray[Any]) -> PairVariables:
        """Pair variables for the given pairs, no product variables among them."""
        operands = np.sort(np.asarray(pairs, dtype=np.int32).reshape(-1, 2), axis=1)
        return cls(size, operands, np.full(len(operands), -1, np.int32))

    @property
    def count(self) -> int:
        """Number of auxiliaries."""
        return len(self.operands)

    @property
    def is_product(self) -> NDArray[np.bool_]:
        """Which auxiliaries are product variables, shape (a,)."""
        return self.companions >= 0

    @cached_property
    def depths(self) -> NDArray[np.int32]:
        """How many definitions deep each auxiliary stands: 1 over original variables, shape (a,)."""
        depth = np.zeros(self.size + self.count, np.int32)
        needs = np.column_stack([self.operands, self.companions])
        depth[self.size :] = 1
        while True:
            below = np.where(needs >= 0, depth[needs], 0).max(axis=1, initial=0)
            if np.array_equal(depth[self.size :], below + 1):
                return depth[self.size :]
            depth[self.size :] = below + 1

    def values(self, states: NDArray[Any], domain: str) -> NDArray[np.int8]:
        """The right value of every auxiliary: no search, one pass over the definitions.

        Parameters
        ----------
        states : integer array, shape (m, size)
            Original states, values of the domain.
        domain : "spin" or "boolean"

        Returns
        -------
        int8 array, shape (m, a)
        """
        full = np.ones((self.size + self.count, len(states)), np.int8)
        full[: self.size] = np.asarray(states).T
        for depth in range(1, int(self.depths.max(initial=0)) + 1):
            chosen = np.flatnonzero(self.depths == depth)
            low, high = full[self.operands[chosen, 0]], full[self.operands[chosen, 1]]
            product = low * high
            if domain == "spin":
                pair = np.maximum(low, high)
                product = np.where(self.is_product[chosen, None], product, pair)
            full[self.size + chosen] = product
        return np.ascontiguousarray(full[self.size :].T)

    @cached_property
    def _index(self) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
        found: list[NDArray[np.int64]] = []
        keys = self.operands[:, 0].astype(np.int64) * (self.size + self.count) + self.operands[:, 1]
        for kind in (~self.is_product, self.is_product):
            numbers = np.flatnonzero(kind)
            order = numbers[np.argsort(keys[numbers], kind="stable")]
            found += [keys[order], order + self.size]
        return found[0], found[1], found[2], found[3]

    def _look_up(
        self, u: NDArray[Any], v: NDArray[Any], keys: NDArray[np.int64], numbers: NDArray[np.int64]
    ) -> NDArray[np.int64]:
        wanted = np.minimum(u, v).astype(np.int64) * (self.size + self.count) + np.maximum(u, v)
        if not len(keys):
            return np.full(wanted.shape, ABSENT, np.int64)
        place = np.minimum(np.searchsorted(keys, wanted), len(keys) - 1)
        return np.where((keys[place] == wanted) & (np.minimum(u, v) >= 0), numbers[place], ABSENT)

    def pair_of(self, u: NDArray[Any], v: NDArray[Any]) -> NDArray[np.int64]:
        """Number of the pair variable of each u and v, -1 where that pair was not chosen."""
        return self._look_up(u, v, *self._index[:2])

    def join_of(self, u: NDArray[Any], v: NDArray[Any], domain: str) -> NDArray[np.int64]:
        """Number of the variable that equals u v in the domain: pair variable or product variable, or -1."""
        return self._look_up(u, v, *(self._index[2:] if domain == "spin" else self._index[:2]))


def shortened(members: NDArray[Any], pairs: PairVariables, domain: str, most: int = 4) -> NDArray[np.int64]:
    """Long terms with two members replaced by their joint variable until at most `most` are left.

    The variable defined first is used first, as a rule that replaces pairs everywhere in the order of choice would.

    Returns
    -------
    int64 array, shape (m, most)
        Rows sorted.

    Raises
    ------
    InputError
        Some term holds no chosen pair while it is still too long.
    """
    rows = np.array(members, dtype=np.int64)
    while rows.shape[1] > most:
        first, second = np.triu_indices(rows.shape[1], 1)
        joint = pairs.join_of(rows[:, first], rows[:, second], domain)
        joint = np.where(joint < 0, pairs.size + pairs.count, joint)
        best = joint.argmin(axis=1)
        line = np.arange(len(rows))
        number = joint[line, best]
        if (number == pairs.size + pairs.count).any():
            place = int(np.flatnonzero(number == pairs.size + pairs.count)[0])
            raise InputError(f"the term {rows[place].tolist()} holds no chosen pair", "pairs")
        rows[line, first[best]] = ABSENT
        rows[line, second[best]] = number
        rows = np.sort(rows, axis=1)[:, 1:]
    return rows


def factors_of(members: NDArray[Any], pairs: PairVariables, domain: str) -> NDArray[np.int64]:
    """The two factors whose product is each term, by the chosen pairs.

    Where several pairs would do, the earliest split in the order of ``CUBIC_SPLITS``, ``QUARTIC_SPLITS``,
    ``QUARTIC_NESTS`` is taken.

    Parameters
    ----------
    members : integer array, shape (m, k), k at least 3
    pairs : PairVariables
    domain : "spin" or "boolean"

    Returns
    -------
    int64 array, shape (m, 2)

    Raises
    ------
    InputError
        The pairs do not make some term quadratic.

    Examples
    --------
    >>> factors_of(np.array([[0, 1, 2]]), PairVariables.of(3, [(1, 2)]), "boolean").tolist()
    [[3, 0]]
    """
    rows = shortened(members, pairs, domain) if members.shape[1] > 4 else members
    factors = factors_where_covered(rows, pairs, domain)
    if (factors < 0).any():
        place = int(np.flatnonzero((factors < 0).any(axis=1))[0])
        raise InputError(f"no chosen pair makes the term {np.asarray(members)[place].tolist()} quadratic", "pairs")
    return factors


def factors_where_covered(members: NDArray[Any], pairs: PairVariables, domain: str) -> NDArray[np.int64]:
    """The factors of terms of three or four members, as `factors_of` gives them; -1 where the pairs do not reach.

    Returns
    -------
    int64 array, shape (m, 2)
    """
    rows = np.array(members, dtype=np.int64)
    factors = np.full((len(rows), 2), ABSENT, np.int64)
    for first, second in _options(rows, pairs, domain):
        usable = (first >= 0) & (second >= 0) & (factors[:, :1] < 0)
        line = np.flatnonzero(usable.any(axis=1))
        choice = usable[line].argmax(axis=1)
        factors[line, 0] = first[line, choice]
        factors[line, 1] = second[line, choice]
    return factors


def balanced(
    blocks: Sequence[tuple[NDArray[Any], NDArray[Any]]],
    factors: Sequence[NDArray[np.int64]],
    pairs: PairVariables,
    domain: str,
    most: int = BALANCE_WORK,
) -> list[NDArray[np.int64]]:
    """Factors chosen anew where a term of three or four can be split in several ways, so that no pair bears too much.

    What a pair bears is the sum of the absolute weights of the terms that use it: its penalty grows with that. Heavy
    terms choose first, each the way whose heavier pair is lightest.

    Parameters
    ----------
    blocks : sequence of (members (m, k), weights (m,))
    factors : sequence of int64 arrays (m, 2)
        As `factors_of` gives them; kept for longer terms.
    pairs : PairVariables
    domain : "spin" or "boolean"
    most : int
        Nothing is changed when more terms than these have a choice.

    Returns
    -------
    list of int64 arrays (m, 2)

    Examples
    --------
    >>> pairs = PairVariables.of(4, [(0, 1), (0, 2)])
    >>> rows, weights = np.array([[0, 1, 2], [0, 1, 3]]), np.array([1, 5])
    >>> balanced([(rows, weights)], [np.array([[4, 2], [4, 3]])], pairs, "boolean")[0].tolist()
    [[5, 1], [4, 3]]
    """
    chosen = [one.copy() for one in factors]
    load = [0] * (pairs.size + pairs.count)
    choices: list[tuple[int, int, int, list[list[int]]]] = []
    for place, (members, weights) in enumerate(blocks):
        several = np.zeros(len(members), bool)
        if members.shape[1] <= 4 and len(members):
            first, second = _options(np.asarray(members, dtype=np.int64), pairs, domain)[0]
            usable = (first >= 0) & (second >= 0)
            several = usable.sum(axis=1) > 1
            ways = np.stack([first, second], axis=2)
            choices += [
                (-abs(int(weights[row])), place, row, ways[row, usable[row]].tolist())
                for row in np.flatnonzero(several).tolist()
            ]
        for (u, v), weight in zip(chosen[place][~several].tolist(), np.abs(weights[~several]).tolist(), strict=True):
            load[u] += weight
            load[v] += weight
    if len(choices) > most:
        return chosen
    for weight, place, row, options in sorted(choices):
        # An original variable has no penalty and bears nothing.
        borne = [sorted((load[u] if u >= pairs.size else 0 for u in way), reverse=True) for way in options]
        way = options[borne.index(min(borne))]
        chosen[place][row] = way
        for u in way:
            load[u] -= weight
    return chosen


def _options(
    rows: NDArray[np.int64], pairs: PairVariables, domain: str
) -> list[tuple[NDArray[np.int64], NDArray[np.int64]]]:
    """Candidate factors of rows of three or four members, as arrays of shape (m, options), cheapest kind first."""
    columns = rows.shape[1]
    if columns == 3:
        left, right, other = CUBIC_SPLITS.T
        return [(pairs.pair_of(rows[:, left], rows[:, right]), rows[:, other])]
    a, b, c, d = QUARTIC_SPLITS.T
    split = (pairs.pair_of(rows[:, a], rows[:, b]), pairs.pair_of(rows[:, c], rows[:, d]))
    a, b, c, d = QUARTIC_NESTS.T
    inner = pairs.join_of(rows[:, a], rows[:, b], domain)
    return [split, (pairs.pair_of(inner, rows[:, c]), rows[:, d])]


def rewritten(weights: NDArray[Any], factors: NDArray[Any], pairs: PairVariables, domain: str) -> list[Part]:
    """Quadratic parts equal to the terms with these factors, wherever every auxiliary has its right value.

    Parameters
    ----------
    weights : int64 or object array, shape (m,)
    factors : integer array, shape (m, 2)
    pairs : PairVariables
    domain : "spin" or "boolean"

    Returns
    -------
    list of (members (r, 2), weights (r,))
        To be merged by ``canonical_blocks``; a member of -1 is absent.
    """
    if domain == "boolean":
        return [(factors, weights)]
    numbers, scales = _affine_forms(pairs)
    parts = []
    for i in range(4):
        for j in range(4):
            scale = scales[factors[:, 0], i] * scales[factors[:, 1], j]
            used = scale != 0
            members = np.column_stack([numbers[factors[used, 0], i], numbers[factors[used, 1], j]])
            parts.append((members, weights[used] * scale[used]))
    return parts


def _affine_forms(pairs: PairVariables) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Variables and coefficients, each (size + a, 4), of every variable as a factor of a product of spins."""
    total = pairs.size + pairs.count
    numbers = np.full((total, 4), ABSENT, np.int64)
    scales = np.zeros((total, 4), np.int64)
    numbers[:, 0] = np.arange(total)
    scales[:, 0] = 1
    pair = pairs.size + np.flatnonzero(~pairs.is_product)
    numbers[pair, 0] = ABSENT
    numbers[pair, 1:3] = pairs.operands[pair - pairs.size]
    numbers[pair, 3] = pair
    scales[pair] = (1, 1, 1, -2)
    return numbers, scales
