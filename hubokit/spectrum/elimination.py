"""Sparse models of hundreds of variables: exact ground energy, degeneracy, levels and states by bucket elimination.

A model in which every term touches few others has an order of elimination of small *width* (see
`hubokit.spectrum.elimination_order`); tables of 2**(width + 1) entries then give exact answers at any number of
variables and any locality, in both domains. The order is found first, and the work is refused, with its size,
when memory or time would not do.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import States, from_bits
from hubokit.spectrum.elimination_counts import count_ground_states, gap
from hubokit.spectrum.elimination_levels import lowest_levels
from hubokit.spectrum.elimination_order import EliminationOrder, elimination_order
from hubokit.spectrum.elimination_states import ROWS_AT_ONCE, LevelSearch, draw, sorted_bits, states_within
from hubokit.spectrum.elimination_tables import Elimination, Problem, eliminate
from hubokit.spectrum.levels import Level

WIDEST = 27
"""Orders wider than this are not looked for: one table would pass any sensible memory."""

MEMORY = 4 * 2**30
"""Bytes that an elimination may take, by its prediction."""

LISTED_TOGETHER = 1 << 20
"""Levels with fewer states than this in all are listed by one walk over the energy window."""

Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class EliminationCost:
    """What an elimination would take, predicted from its order alone.

    Parameters
    ----------
    width : int
        Largest number of neighbours at elimination; a lower bound on it when no order was found.
    order : EliminationOrder or None
        None when every order tried was wider than `WIDEST`.
    entries : int
        Table entries in all.
    memory : int
        Bytes, a generous estimate of the peak.
    seconds : float
        On one core, to an order of magnitude.
    """

    width: int
    order: EliminationOrder | None
    entries: int
    memory: int
    seconds: float

    def __str__(self) -> str:
        if self.order is None:
            return f"width {self.width} or more, beyond {WIDEST}"
        return f"width {self.width}, {_bytes(self.memory)}, about {max(self.seconds, 0.01):.2g} s"


def predicted_cost(H: Hamiltonian, count: int = 1) -> EliminationCost:
    """Find an order of elimination and predict what it takes to keep `count` levels.

    Parameters
    ----------
    H : Hamiltonian
    count : int
        1 for ground states with their degeneracy and gap.

    Examples
    --------
    >>> chain = Hamiltonian({(f"v{i}", f"v{i + 1}"): 1 for i in range(99)}, "spin")
    >>> predicted_cost(chain).width
    1
    """
    found = elimination_order(H.size, H.blocks, WIDEST)
    if isinstance(found, int):
        return EliminationCost(found, None, 0, 2 ** (found + 5), float("inf"))
    entries, largest = found.entries, 2 << found.width
    primes = 1 + max(0, H.size - 61) // 31
    if count == 1:
        memory, seconds = 12 * entries + 40 * largest, 8e-9 * (3 + primes) * entries
    else:
        memory = (6 + 8 * count) * entries + 40 * count * largest
        seconds = 9e-9 * (2 + (count + 1) ** 2 * primes) * entries
    return EliminationCost(found.width, found, entries, memory, seconds + 1e-4 * H.size)


def ground_states(
    H: Hamiltonian,
    limit: int = 100_000,
    *,
    progress: Progress | None = None,
    time: float | None = 600.0,
    memory: int = MEMORY,
    cost: EliminationCost | None = None,
) -> Level:
    """Exact ground level of a sparse model by bucket elimination.

    Parameters
    ----------
    H : Hamiltonian
    limit : int
        Most states to list; beyond it the first in lift order.
    progress : callable, optional
        Called with table entries done and in all.
    time : float or None
        Seconds; work predicted to take longer is refused. None for any.
    memory : int
        Bytes; work predicted to take more is refused.
    cost : EliminationCost, optional
        From `predicted_cost`, where it is at hand.

    Returns
    -------
    Level
        The degeneracy is exact at any size.

    Raises
    ------
    LimitError
        The order found is too wide for the memory or the time.

    References
    ----------
    Dechter 1999, "Bucket elimination: a unifying framework for reasoning".

    Examples
    --------
    >>> chain = Hamiltonian({(f"v{i}", f"v{i + 1}", f"v{i + 2}"): 1 for i in range(198)}, "spin")
    >>> level = ground_states(chain, limit=2)
    >>> level.energy, level.degeneracy, level.complete, level.gap
    (Fraction(-198, 1), 4, False, Fraction(2, 1))
    """
    chosen = _allowed(H, 1, time, memory, cost)
    problem, elimination = _eliminated(H, chosen, progress)
    degeneracy = count_ground_states(elimination).total
    above = gap(elimination)
    return Level(
        energy=H.constant + elimination.lowest * H.resolution,
        degeneracy=degeneracy,
        states=_states(H, problem, elimination, (0, 0), (degeneracy, degeneracy), limit),
        complete=degeneracy <= limit,
        gap=None if above is None else above * H.resolution,
        method=f"elimination (width {chosen.width})",
    )


def low_levels(
    H: Hamiltonian,
    count: int = 5,
    limit: int = 100_000,
    *,
    progress: Progress | None = None,
    time: float | None = 600.0,
    memory: int = MEMORY,
    cost: EliminationCost | None = None,
) -> list[Level]:
    """The lowest levels of a sparse model, lowest first, each with its exact degeneracy.

    Parameters
    ----------
    H : Hamiltonian
    count : int
        How many levels at most, at least 1.
    limit : int
        Most states to list of each level; beyond it the first in lift order.
    progress, time, memory, cost
        As for `ground_states`.

    Raises
    ------
    LimitError
        The order found is too wide for the memory or the time.

    Examples
    --------
    >>> chain = Hamiltonian({(f"v{i}", f"v{i + 1}"): -1 for i in range(99)}, "spin")
    >>> [(int(level.energy), level.degeneracy) for level in low_levels(chain, count=3, limit=1)]
    [(-99, 2), (-97, 198), (-95, 9702)]
    """
    if count < 1:
        raise InputError(f"{count} levels were asked for; at least 1 is needed", "count")
    chosen = _allowed(H, count, time, memory, cost)
    problem, elimination = _eliminated(H, chosen, progress)
    found = lowest_levels(elimination, count + 1)
    levels, so_far = [], 0
    for below, (excess, degeneracy) in enumerate(found[:count]):
        above = found[below + 1][0] - excess if below + 1 < len(found) else None
        so_far += degeneracy
        levels.append(
            Level(
                energy=H.constant + (elimination.lowest + excess) * H.resolution,
                degeneracy=degeneracy,
                states=_states(H, problem, elimination, (excess, below), (degeneracy, so_far), limit),
                complete=degeneracy <= limit,
                gap=None if above is None else above * H.resolution,
                method=f"elimination (width {chosen.width})",
            )
        )
    return levels


def draw_ground_states(
    H: Hamiltonian,
    number: int,
    seed: int = 0,
    *,
    time: float | None = 600.0,
    memory: int = MEMORY,
    cost: EliminationCost | None = None,
) -> States:
    """Ground states drawn independently and uniformly at random, exactly, however many there are.

    Parameters
    ----------
    H : Hamiltonian
    number : int
        Rows of the result.
    seed : int
        The same seed gives the same states on every machine.
    time, memory, cost
        As for `ground_states`.

    Returns
    -------
    int8 array, shape (number, n)

    Raises
    ------
    LimitError
        The order found is too wide for the memory or the time.

    Examples
    --------
    >>> chain = Hamiltonian({(f"v{i}", f"v{i + 1}"): -1 for i in range(99)}, "spin")
    >>> {int(total) for total in draw_ground_states(chain, 20).sum(axis=1)} == {-100, 100}
    True
    """
    chosen = _allowed(H, 1, time, memory, cost)
    _, elimination = _eliminated(H, chosen, None)
    return from_bits(draw(count_ground_states(elimination), H.size, number, seed), H.domain)


def _allowed(
    H: Hamiltonian, count: int, time: float | None, memory: int, cost: EliminationCost | None
) -> EliminationCost:
    chosen = predicted_cost(H, count) if cost is None else cost
    instead = "exhaustion would do" if H.size <= 40 else "a neighbourhood of given states would do"
    if chosen.order is None:
        raise LimitError(
            f"{H.size} variables with an elimination width of {chosen.width} or more (at most {WIDEST}); {instead}"
        )
    if chosen.memory > memory:
        raise LimitError(
            f"elimination at width {chosen.width} would take {_bytes(chosen.memory)} of memory, "
            f"{_bytes(memory)} are allowed; raise memory=, or {instead}"
        )
    if time is not None and chosen.seconds > time:
        raise LimitError(
            f"elimination at width {chosen.width} would take about {chosen.seconds:.0f} s, {time:g} s are "
            f"allowed; raise time=, or {instead}"
        )
    return chosen


def _eliminated(H: Hamiltonian, cost: EliminationCost, progress: Progress | None) -> tuple[Problem, Elimination]:
    if cost.order is None:
        raise LimitError(f"no order of elimination was found: {cost}")
    problem = Problem(H.domain, H.size, H.blocks)
    return problem, eliminate(problem, cost.order, progress)


def _states(
    H: Hamiltonian,
    problem: Problem,
    elimination: Elimination,
    level: tuple[int, int],
    numbers: tuple[int, int],
    limit: int,
) -> States:
    """States of one level: by one walk where that is few, else by search for the first in lift order.

    `level` is (excess, levels below), `numbers` is (degeneracy, states at or below the level).
    """
    excess, below = level
    degeneracy, together = numbers
    need = min(degeneracy, limit)
    if need == 0:
        return np.zeros((0, H.size), np.int8)
    if together <= max(LISTED_TOGETHER, 2 * need) and together <= ROWS_AT_ONCE:
        bits, used = states_within(elimination, H.size, excess)
        return from_bits(sorted_bits(bits[used == excess])[:need], H.domain)
    search = LevelSearch(problem, elimination.order, elimination.lowest + excess, below)
    return from_bits(search.first(need), H.domain)


def _bytes(number: int) -> str:
    for unit, name in ((2**30, "GB"), (2**20, "MB")):
        if number >= unit:
            return f"{number / unit:.1f} {name}"
    return f"{max(number // 2**10, 1)} kB"
