"""Product spins: pairs whose product is a spin of its own, so that a quartic term takes one coupler.

A pair variable y enters a product of spins as s_u s_v = 1 + s_u + s_v - 2y: a product of two pairs expands into up to
nine couplers. A *product spin* t = s_u s_v enters it as t: a product of two pairs is one coupler t t', a product of a
pair and a spin one coupler t s. It takes two auxiliaries, t and its companion, the pair variable y of the same
operands (pairs.py), and six couplers, all those among u, v, y and t:

    M (1 - t s_u s_v) = min over y of  alpha/4 ((1 + s_u + s_v - 2y)^2 - 1) + M (1 - t (1 + s_u + s_v - 2y)),
    alpha = 2M + g/2,

where the right y is better by at least g. Let c be the sum of the absolute weights of the couplers that use t in the
rewritten terms (and in the penalties of pairs that t is an operand of). With M = c + g/2 the right t is better by
2 (M - c) = g whatever its neighbours do, so P = E, every state has one best setting, and the auxiliary gap is at
least g. The bounds of penalties.py give this very M.

A pair that few terms use, or whose couplers are there anyway, is cheaper as a pair variable. The search starts twice,
with all pairs as product spins and with none; a pair is turned over where that takes fewer couplers, until none is.

References
----------
Derived here from the three-spin product of gadgets/spin_product.py.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import product

import numpy as np
from numpy.typing import NDArray

from hubokit.reduction.covers import PairCoverPlan, covered_form
from hubokit.reduction.pairs import PairVariables
from hubokit.reduction.penalties import interval_strengths

METHOD = "product-spins"

ROUNDS = 8
"""Most rounds of turning pairs over."""

Coupler = tuple[int, int]


def with_product_spins(cover: PairCoverPlan, chosen: NDArray[np.bool_]) -> PairCoverPlan:
    """The same pairs, the chosen ones as product spins, with penalties from interval bounds.

    Parameters
    ----------
    cover : PairCoverPlan
        Over spins.
    chosen : bool array, shape (a,)
        Pair variables of the cover, for instance `fewest_couplers`.

    Returns
    -------
    PairCoverPlan
        `cover` itself where none is chosen.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> from hubokit.reduction.covers import pair_cover_reduction
    >>> H = Hamiltonian({("a", "b", other): 1 for other in "cdefg"}, "spin")
    >>> cover = pair_cover_reduction(H)
    >>> better = with_product_spins(cover, fewest_couplers(cover))
    >>> cover.price()["couplers"], better.price()["couplers"], better.auxiliaries
    (18, 11, 2)
    """
    if not chosen.any():
        return cover
    pairs, numbers = with_products(cover.pairs, chosen)
    factors = {locality: numbers[rows] for locality, rows in cover.factors.items()}
    form = covered_form(cover.source, cover.covered, factors, pairs, cover.resolution)
    strengths = interval_strengths(form, pairs, int(cover.gap / cover.resolution))
    how = f"{cover.chosen.how}; {int(chosen.sum()):,} as product spins"
    found = replace(cover.chosen, pairs=pairs, how=how, proven_least=False)
    return replace(cover, chosen=found, factors=factors, strengths=strengths, tightening={})


def with_products(pairs: PairVariables, chosen: NDArray[np.bool_]) -> tuple[PairVariables, NDArray[np.int64]]:
    """Pair variables with a product spin beside each chosen one; and the factor that takes each variable's place.

    Parameters
    ----------
    pairs : PairVariables
    chosen : bool array, shape (a,)
        Pair variables; a product that is there already is used.

    Returns
    -------
    pairs : PairVariables
        The new product spins stand last.
    numbers : int64 array, shape (size + a,)

    Examples
    --------
    >>> pairs, numbers = with_products(PairVariables.of(3, [(0, 1), (1, 2)]), np.array([False, True]))
    >>> pairs.operands.tolist(), pairs.companions.tolist(), numbers.tolist()
    ([[0, 1], [1, 2], [1, 2]], [-1, -1, 4], [0, 1, 2, 3, 5])
    """
    which = np.flatnonzero(chosen)
    numbers = np.arange(pairs.size + pairs.count)
    joined = pairs.join_of(pairs.operands[which, 0], pairs.operands[which, 1], "spin")
    fresh = which[joined < 0]
    joined[joined < 0] = len(numbers) + np.arange(len(fresh))
    numbers[pairs.size + which] = joined
    operands = np.concatenate([pairs.operands, pairs.operands[fresh]])
    companions = np.concatenate([pairs.companions, pairs.size + fresh]).astype(np.int32)
    return PairVariables(pairs.size, operands, companions), numbers


def fewest_couplers(cover: PairCoverPlan) -> NDArray[np.bool_]:
    """Which pair variables to give a product spin, shape (a,), as far as turning over one after the other goes.

    Never more couplers than with none and with all, but for couplers whose weights cancel.
    """
    pairs = cover.pairs
    rows = [row for factors in cover.factors.values() for row in factors.tolist()]
    uses: dict[int, list[int]] = {}
    for place, row in enumerate(rows):
        for number in set(row):
            if number >= pairs.size and not pairs.is_product[number - pairs.size]:
                uses.setdefault(number, []).append(place)
    ledgers = [_Ledger.of(cover, rows, start) for start in (set(), set(uses))]
    for ledger in ledgers:
        for _ in range(ROUNDS):
            turned = [number for number in sorted(uses) if ledger.turn(number, uses[number])]
            if not turned:
                break
    best = min(ledgers, key=lambda ledger: len(ledger.count))
    found = np.zeros(pairs.count, bool)
    found[[number - pairs.size for number in best.products]] = True
    return found


@dataclass(frozen=True)
class _Ledger:
    """How often each coupler is used, kept up to date while pairs are turned over.

    Couplers whose weights cancel are counted; the price of the plan is exact, this search need not be.

    Parameters
    ----------
    rows : sequence of two factors a term
    operands : mapping from pair variable to its two operands
    joint : mapping from pair variable to the variable that is its product
    given : set of pair variables whose product is there whatever is chosen
    products : set of pair variables that have a product spin; changed in place
    count : Counter of couplers; changed in place
    """

    rows: Sequence[Sequence[int]]
    operands: Mapping[int, Sequence[int]]
    joint: Mapping[int, int]
    given: frozenset[int]
    products: set[int]
    count: Counter[Coupler]

    @classmethod
    def of(cls, cover: PairCoverPlan, rows: Sequence[Sequence[int]], products: set[int]) -> _Ledger:
        """The couplers of a cover with these product spins, short terms and penalties among them."""
        pairs = cover.pairs
        numbers = (pairs.size + np.flatnonzero(~pairs.is_product)).tolist()
        operands = {number: pairs.operands[number - pairs.size].tolist() for number in numbers}
        existing = pairs.join_of(pairs.operands[:, 0], pairs.operands[:, 1], "spin").tolist()
        total = pairs.size + pairs.count
        joint = {n: found if (found := existing[n - pairs.size]) >= 0 else n + total for n in numbers}
        given = frozenset(n for n in numbers if joint[n] < total)
        ledger = cls(rows, operands, joint, given, products, Counter())
        for block in cover.source.blocks:
            if block.locality == 2:
                ledger.count.update(map(tuple, block.members.tolist()))
        for number, (u, v) in operands.items():
            ledger.count.update([(u, v), _ordered(u, number), _ordered(v, number)])
            if number in products or number in given:
                ledger.count.update(ledger.own(number))
        for place in range(len(rows)):
            ledger.count.update(ledger.couplers(place))
        return ledger

    def own(self, number: int) -> list[Coupler]:
        """The couplers that a product spin adds to those of its companion."""
        return [_ordered(one, self.joint[number]) for one in (*self.operands[number], number)]

    def couplers(self, place: int) -> Iterator[Coupler]:
        """The couplers into which a term expands."""
        first, second = (self.spread(number) for number in self.rows[place])
        return (_ordered(u, v) for u, v in product(first, second) if u != v)

    def spread(self, number: int) -> Sequence[int]:
        """The variables of a factor: the affine form of a pair variable, else the factor itself."""
        if number in self.products:
            return (self.joint[number],)
        return (*self.operands[number], number) if number in self.operands else (number,)

    def turn(self, number: int, places: Sequence[int]) -> bool:
        """Turn a pair over if that leaves fewer couplers."""
        before = len(self.count)
        self._turned(number, places)
        if len(self.count) < before:
            return True
        self._turned(number, places)
        return False

    def _turned(self, number: int, places: Sequence[int]) -> None:
        own = [] if number in self.given else self.own(number)
        gone = [coupler for place in places for coupler in self.couplers(place)]
        if number in self.products:
            gone += own
            own = []
        self.products.symmetric_difference_update({number})
        for coupler in gone:
            self.count[coupler] -= 1
            if not self.count[coupler]:
                del self.count[coupler]
        self.count.update(own)
        self.count.update(coupler for place in places for coupler in self.couplers(place))


def _ordered(u: int, v: int) -> Coupler:
    return (u, v) if u < v else (v, u)
