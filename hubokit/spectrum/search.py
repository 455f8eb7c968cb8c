"""Ground states and low levels by whichever exact way costs least, and which way that was.

Three ways lead to the same answer: a transform of the whole table of energies (smallest models), exhaustion (a walk
over all 2**n states, whatever the terms) and bucket elimination (any number of variables, as long as every term
touches few others). Each predicts its cost before it starts; `routes` lists the predictions, and the level that comes
back names the way taken.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from concurrent.futures import Executor
from dataclasses import dataclass
from pathlib import Path

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum import elimination, exhaustive
from hubokit.spectrum.elimination import EliminationCost
from hubokit.spectrum.estimate import duration
from hubokit.spectrum.levels import Level
from hubokit.spectrum.transforms import spectrum_by_transform

METHODS = ("auto", "transform", "exhaustion", "elimination")

TABLE_SIZE = 16
"""Models of at most this many variables are answered by a transform without weighing anything."""

SHORT_WALK = 24
"""Models of at most this many variables are walked through sooner than an order of elimination is found."""

STATES_PER_SECOND = 1e9
"""Exhaustion, one core, one vector addition a state."""

MACHINE_RANGE = 100
"""How many times faster than predicted the largest machine may be."""

Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Route:
    """One way to the answer and what it is predicted to cost.

    Parameters
    ----------
    method : str
        ``transform``, ``exhaustion`` or ``elimination``.
    seconds : float
        Predicted, to an order of magnitude; infinite when the way is closed.
    detail : str
        The size of the work in words.
    elimination : EliminationCost or None
        The order found, for elimination.
    """

    method: str
    seconds: float
    detail: str
    elimination: EliminationCost | None = None

    def __str__(self) -> str:
        return f"{self.method}: {self.detail}"


def routes(H: Hamiltonian, count: int = 1) -> list[Route]:
    """The ways to the lowest levels of a model, cheapest first.

    Parameters
    ----------
    H : Hamiltonian
    count : int
        Levels wanted.

    Examples
    --------
    >>> chain = Hamiltonian({(f"v{i}", f"v{i + 1}"): 1 for i in range(79)}, "spin")
    >>> [route.method for route in routes(chain)]
    ['elimination', 'exhaustion']
    """
    if H.size <= TABLE_SIZE:
        return [Route("transform", 2.0**H.size * 1e-7, f"a table of {2**H.size:,} energies")]
    walk = _walk(H)
    if H.size <= SHORT_WALK:
        return [walk]
    cost = elimination.predicted_cost(H, count)
    fits = cost.order is not None and cost.memory <= elimination.MEMORY
    sparse = Route("elimination", cost.seconds if fits else math.inf, str(cost), cost)
    return sorted([sparse, walk], key=lambda route: route.seconds)


def ground_states(
    H: Hamiltonian,
    limit: int = 100_000,
    method: str = "auto",
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoint: Path | None = None,
    time: float | None = 600.0,
) -> Level:
    """The ground level of a model: its energy, exact degeneracy, states and gap.

    Parameters
    ----------
    H : Hamiltonian
    limit : int
        Most states to list; beyond it the first in lift order.
    method : "auto", "transform", "exhaustion" or "elimination"
        "auto" takes the cheapest by prediction (`routes`); `Level.method` says which it was.
    executor : concurrent.futures.Executor, optional
        Runs the slabs of an exhaustion.
    progress : callable, optional
        Called with done, total.
    checkpoint : path, optional
        Where an exhaustion keeps what it has found.
    time : float or None
        Seconds; work predicted to take longer is refused. None for any.

    Returns
    -------
    Level

    Raises
    ------
    LimitError
        No way is cheap enough; the message gives the size of each.
    InputError
        An unknown method.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b"): 1, ("b", "c"): 1, ("a", "c"): 1}, "spin")
    >>> level = ground_states(H)
    >>> level.energy, level.degeneracy, level.gap
    (Fraction(-1, 1), 6, Fraction(4, 1))
    """
    route = _chosen(H, 1, method, time)
    if route.method == "transform":
        return spectrum_by_transform(H, 1, limit)[0]
    if route.method == "elimination":
        return elimination.ground_states(H, limit, progress=progress, time=time, cost=route.elimination)
    return exhaustive.ground_states(H, limit, executor=executor, progress=progress, checkpoint=checkpoint, time=time)


def low_levels(
    H: Hamiltonian,
    count: int = 5,
    limit: int = 100_000,
    method: str = "auto",
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoint: Path | None = None,
    time: float | None = 600.0,
) -> list[Level]:
    """The lowest levels of a model, lowest first.

    Parameters
    ----------
    H : Hamiltonian
    count : int
        How many levels at most.
    limit : int
        Most states to list of each.
    method, executor, progress, checkpoint, time
        As for `ground_states`.

    Raises
    ------
    LimitError
        No way is cheap enough; the message gives the size of each.
    InputError
        An unknown method, or a count below 1.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b"): 1, ("b", "c"): 1, ("a", "c"): 1}, "spin")
    >>> [(int(level.energy), level.degeneracy) for level in low_levels(H)]
    [(-1, 6), (3, 2)]
    """
    if count < 1:
        raise InputError(f"{count} levels were asked for; at least 1 is needed", "count")
    route = _chosen(H, count, method, time)
    if route.method == "transform":
        return spectrum_by_transform(H, count, limit)
    if route.method == "elimination":
        return elimination.low_levels(H, count, limit, progress=progress, time=time, cost=route.elimination)
    return exhaustive.low_levels(
        H, count, limit, executor=executor, progress=progress, checkpoint=checkpoint, time=time
    )


def _chosen(H: Hamiltonian, count: int, method: str, time: float | None) -> Route:
    if method not in METHODS:
        raise InputError(f"{method!a} is no method; choose one of {', '.join(METHODS)}", "method")
    if method == "elimination":
        cost = elimination.predicted_cost(H, count)
        return Route(method, cost.seconds, str(cost), cost)
    if method == "exhaustion":
        return _walk(H)
    if method == "transform":
        return Route(method, 2.0**H.size * 1e-7, f"a table of {2**H.size:,} energies")
    ways = routes(H, count)
    # An exhaustion times itself before it starts; what no machine could do is refused here, with both sizes.
    if len(ways) > 1 and time is not None and ways[0].seconds > time * MACHINE_RANGE:
        sizes = "; ".join(str(way) for way in ways)
        raise LimitError(
            f"{H.size} variables are too many for a full search within {time:g} s ({sizes}); a neighbourhood of "
            "given states would do"
        )
    return ways[0]


def _walk(H: Hamiltonian) -> Route:
    seconds = 2.0 ** min(H.size, 1000) * max(H.locality - 1, 1) / STATES_PER_SECOND
    return Route("exhaustion", seconds, f"2**{H.size} states, about {duration(seconds)}")
