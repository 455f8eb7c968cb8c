"""A design and its reduced model measured alike: the engines called once for each of the two.

A reduced model is measured on P, its minimum over the auxiliaries, where targets are concerned; on its own variables,
auxiliaries included, where ground states and local minima are.
"""

from __future__ import annotations

import random
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import States
from hubokit.projection.project import Projection
from hubokit.reduction.result import Reduction
from hubokit.spectrum.balls import Neighbourhood
from hubokit.spectrum.bandwidth import Bandwidth, bandwidth, bandwidth_within
from hubokit.spectrum.elimination import draw_ground_states
from hubokit.spectrum.landscape import connected_groups, minimum_distance
from hubokit.spectrum.levels import Level
from hubokit.spectrum.neighbourhood import neighbourhood, neighbourhood_of
from hubokit.spectrum.search import ground_states, low_levels, routes

Progress = Callable[[int, int], None]

LISTED = 1 << 14
"""Ground states that are listed to be compared with each other, unless a larger limit is asked for."""

DRAWN_FROM = 1 << 20
"""Ground states that are listed to draw from where no elimination does."""

SHOWN_RADIUS = 2
"""Radius of the table by distance where all states are measured."""


@dataclass(frozen=True)
class Asked:
    """How targets are to be looked at.

    Parameters
    ----------
    radius : int or None
        None: the ratio over all states, the table up to `SHOWN_RADIUS`.
    limit : int
        Most spurious states listed for each target and distance.
    distinct : bool
        Whether a state near several targets counts once.
    time : float
        Seconds that a look may take.
    """

    radius: int | None = None
    limit: int = 100
    distinct: bool = False
    time: float = 600.0

    @property
    def shown(self) -> int:
        """Radius of the table by distance."""
        return SHOWN_RADIUS if self.radius is None else self.radius


@dataclass(frozen=True)
class Measured:
    """Targets in one model of these variables: the look around them and the bandwidth ratio."""

    labels: tuple[str, ...]
    look: Neighbourhood
    merit: Bandwidth

    def shell(self, distance: int) -> tuple[int, Fraction | None, int]:
        """States at one distance from any target, the lowest of them, and how many lie at or below all targets."""
        shells = self.look.shell(distance)
        lowest = min((shell.lowest for shell in shells if shell.lowest is not None), default=None)
        return sum(shell.states for shell in shells), lowest, sum(shell.at_or_below for shell in shells)

    def spurious(self, distances: Iterable[int]) -> list[tuple[Fraction, int, tuple[str, ...]]]:
        """Energy, target (from 1) and flips of the listed states at or below the highest target, lowest first."""
        found = []
        wanted = list(distances)
        for place, ball in enumerate(self.look.balls, 1):
            for shell in (ball.shells[distance] for distance in wanted):
                for energy, state in zip(shell.energies, shell.spurious, strict=True):
                    flips = tuple(self.labels[i] for i in np.flatnonzero(state != ball.centre))
                    found.append((energy, place, flips))
        return sorted(found, key=lambda one: (one[0], len(one[2]), one[1]))


@dataclass(frozen=True)
class Landscape:
    """Where the ground states of a model lie.

    Parameters
    ----------
    level : Level
    chosen : str
        The predicted costs that the way was chosen by.
    closest : int or None
        Least number of flips between two ground states; None for a single one.
    groups : tuple of int or None
        Sizes of the groups that single flips join; None where the states were too many to list.
    """

    level: Level
    chosen: str
    closest: int | None
    groups: tuple[int, ...] | None


def measured(model: Hamiltonian, targets: States, asked: Asked, progress: Progress | None = None) -> Measured:
    """Targets in a model; without a radius the ratio is exact over all states."""
    merit = None if asked.radius is not None else bandwidth(model, targets, progress=progress, time=asked.time)
    look = neighbourhood(
        model, targets, asked.shown, limit=asked.limit, distinct=asked.distinct, progress=progress, time=asked.time
    )
    return Measured(model.labels, look, merit or bandwidth_within(look))


def measured_on_minimum(
    reduction: Reduction, targets: States, asked: Asked, progress: Progress | None = None
) -> Measured:
    """Source targets in P: as a polynomial where projection gives one, else minimised state by state."""
    model, projection = reduction.model, reduction.projection
    at = reduction.lift(targets)[:, [model.positions[label] for label in reduction.originals]]
    if projection.polynomial is not None:
        return measured(projection.polynomial, at, asked, progress)

    def within(flips: int) -> Neighbourhood:
        return neighbourhood_of(
            lambda states: projection.minimum(states)[0], at, flips, domain=model.domain, constant=model.constant,
            resolution=model.resolution, limit=asked.limit, distinct=asked.distinct, progress=progress,
            time=asked.time,
        )  # fmt: skip

    merit = None if asked.radius is not None else bandwidth_within(within(at.shape[1]))
    look = within(asked.shown)
    return Measured(reduction.originals, look, merit or bandwidth_within(look))


def levels_with_landscape(
    model: Hamiltonian, count: int, limit: int, progress: Progress | None, checkpoint: Path | None, time: float
) -> tuple[list[Level], Landscape]:
    """The low levels of a model, and how its ground states lie to each other."""
    chosen = predictions(model, count)
    levels = low_levels(model, count, limit, progress=progress, checkpoint=checkpoint, time=time)
    ground = levels[0]
    if not ground.complete and ground.degeneracy <= LISTED:
        ground = ground_states(model, ground.degeneracy, progress=progress, time=time)
    return levels, landscape(ground, chosen)


def landscape_after(reduction: Reduction, limit: int, progress: Progress | None, time: float) -> Landscape:
    """How the ground states of a reduced model lie, auxiliaries included.

    Where every state has one best setting of the auxiliaries they are the lifted minimisers of P, which has fewer
    variables; otherwise the reduced model is searched itself.
    """
    projection, most = reduction.projection, max(limit, LISTED)
    if projection.polynomial is not None and projection.uniform_multiplicity == 1:
        level = ground_states(projection.polynomial, most, progress=progress, time=time)
        lifted = _with_best_auxiliaries(projection, level.states)
        level = Level(level.energy, level.degeneracy, lifted, level.complete, None, f"{level.method} of P, lifted")
        return landscape(level, predictions(projection.polynomial, 1))
    level = ground_states(reduction.model, most, progress=progress, time=time)
    return landscape(level, predictions(reduction.model, 1))


def _with_best_auxiliaries(projection: Projection, states: States) -> States:
    model = projection.model
    whole = np.zeros((len(states), model.size), np.int8)
    whole[:, [model.positions[label] for label in projection.originals]] = states
    if len(states) and projection.auxiliaries:
        whole[:, [model.positions[label] for label in projection.auxiliaries]] = projection.minimum(states)[1]
    return whole


def landscape(level: Level, chosen: str) -> Landscape:
    """Closest pair and groups, where all ground states are listed."""
    if not level.complete:
        return Landscape(level, chosen, None, None)
    return Landscape(level, chosen, minimum_distance(level.states), connected_groups(level.states).sizes)


def predictions(model: Hamiltonian, count: int) -> str:
    """The ways to the lowest levels with their predicted costs, cheapest first."""
    return "; ".join(str(route) for route in routes(model, count))


def drawn(model: Hamiltonian, number: int, seed: int, progress: Progress | None, time: float) -> tuple[Level, States]:
    """The ground level and states drawn uniformly from it, with repetition.

    Raises
    ------
    LimitError
        The ground states can neither be eliminated nor listed.
    """
    route = routes(model)[0]
    level = ground_states(model, 0 if route.method == "elimination" else DRAWN_FROM, progress=progress, time=time)
    if route.method == "elimination" or not level.complete:
        return level, draw_ground_states(model, number, seed, time=time, cost=route.elimination)
    chance = random.Random(seed)
    rows: Sequence[int] = [chance.randrange(level.degeneracy) for _ in range(number)]
    return level, level.states[np.asarray(rows, np.int64)]


def drawn_after(
    reduction: Reduction, number: int, seed: int, progress: Progress | None, time: float
) -> tuple[Level, States]:
    """The same for a reduced model: from P and lifted where every state has one best setting of the auxiliaries."""
    projection = reduction.projection
    if projection.polynomial is None or projection.uniform_multiplicity != 1:
        return drawn(reduction.model, number, seed, progress, time)
    level, states = drawn(projection.polynomial, number, seed, progress, time)
    return replace(level, gap=None, method=f"{level.method} of P, lifted"), _with_best_auxiliaries(projection, states)
