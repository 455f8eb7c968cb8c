"""Single-flip local minima that a reduction adds near given states: what may hold a sampler beside a target.

A local minimum of the reduced model, auxiliaries included, is *known* where it is the lift of a local minimum of the
source; the others are traps.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from hubokit.model.numbers import format_fraction
from hubokit.model.states import States
from hubokit.reduction.result import Reduction
from hubokit.spectrum.minima import LocalMinimum, NearMinima, is_local_minimum, minima_near

#: Flips that a sentence names.
NAMED = 6


@dataclass(frozen=True)
class Trap:
    """A single-flip local minimum of a reduced model near a target for which the design has none."""

    target: int
    minimum: LocalMinimum
    through_auxiliary: bool


@dataclass(frozen=True)
class Traps:
    """Local minima that a reduction adds near the targets.

    Parameters
    ----------
    radius : int
        Most flips from a lifted target, auxiliaries counted.
    unstable : tuple of int
        Targets whose lifted state is itself no local minimum.
    found : tuple of Trap
        Lowest rise first.
    """

    radius: int
    unstable: tuple[int, ...]
    found: tuple[Trap, ...]

    @property
    def through_auxiliaries(self) -> int:
        """How many need an auxiliary flipped."""
        return sum(trap.through_auxiliary for trap in self.found)

    def __str__(self) -> str:
        where = f"within {self.radius} flip{'s' if self.radius != 1 else ''} of a centre, auxiliaries counted"
        if not self.found:
            return f"no single-flip local minimum of the reduced model {where}, that the source has not"
        lowest = self.found[0]
        rise = lowest.minimum.rise
        flips = ", ".join(lowest.minimum.flips[:NAMED])
        minima = "single-flip local minimum" if len(self.found) == 1 else "single-flip local minima"
        return (
            f"{len(self.found)} {minima} of the reduced model {where}, that the source has not; "
            f"{self.through_auxiliaries} need an auxiliary flipped; the lowest lies "
            f"{format_fraction(abs(rise))} {'below' if rise < 0 else 'above'} centre {lowest.target + 1}, "
            f"by flips of {flips}"
        )


def traps(reduction: Reduction, targets: States, radius: int) -> Traps:
    """Local minima of the reduced model near the lifted targets that are not lifted local minima of the source.

    Parameters
    ----------
    reduction : Reduction
    targets : int8 array, shape (c, source variables)
    radius : int
        Most flips, auxiliaries counted.

    Raises
    ------
    InputError
        The model is not quadratic, or cannot represent a target.
    LimitError
        Too many sets of flips hold together around a target, or the auxiliaries cannot be minimised over.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> E = Hamiltonian({("a",): -1}, "spin")
    >>> F = Hamiltonian({("a",): -1, ("a", "y"): -3}, "spin")
    >>> print(traps(Reduction(E, F, ["y"]), np.array([[1]], np.int8), 2))
    1 single-flip local minimum of the reduced model within 2 flips of a centre, auxiliaries counted, that the \
source has not; 1 need an auxiliary flipped; the lowest lies 2 above centre 1, by flips of a, y
    """
    lifted = reduction.lift(targets)
    near = minima_near(reduction.model, lifted, radius)
    found = [trap for place, one in enumerate(near) for trap in _new(reduction, lifted[place], place, one)]
    unstable = tuple(place for place, one in enumerate(near) if not one.centre_is_minimum)
    return Traps(radius, unstable, tuple(sorted(found, key=lambda trap: (trap.minimum.rise, trap.target))))


def _new(reduction: Reduction, centre: States, place: int, near: NearMinima) -> list[Trap]:
    if not near.minima:
        return []
    model = reduction.model
    states = np.repeat(centre[None, :], len(near.minima), axis=0)
    first, second = (1, -1) if model.domain == "spin" else (0, 1)
    for row, minimum in enumerate(near.minima):
        columns = [model.positions[label] for label in minimum.flips]
        states[row, columns] = np.where(states[row, columns] == first, second, first)
    below = reduction.project(states)
    lifted = model.integer_energies(reduction.lift(below))
    known = is_local_minimum(reduction.source, below) & np.asarray(model.integer_energies(states) == lifted, bool)
    through = set(near.through(reduction.auxiliaries))
    return [
        Trap(place, minimum, minimum in through)
        for minimum, old in zip(near.minima, known.tolist(), strict=True)
        if not old
    ]
