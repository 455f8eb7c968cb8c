"""The bandwidth ratio: how well a design sets its target states apart from all others.

For given target states, B is the spread of their energies and D the lowest energy of any other state minus the
highest target energy. A small B/D means targets that are nearly alike and far below the rest. Where some other state
lies at or below a target (D <= 0) the ratio is undefined, and so it is said.

D is exact where the lowest levels of the model can be found; otherwise it is taken over a neighbourhood of the
targets and bounds the true D from above (and the ratio from below).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from concurrent.futures import Executor
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.spectrum.balls import Neighbourhood
from hubokit.spectrum.neighbourhood import neighbourhood
from hubokit.spectrum.search import low_levels

Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Bandwidth:
    """The figure of merit of a design for given targets.

    Parameters
    ----------
    targets : int
        Number of target states.
    lowest, highest : Fraction
        Energies of the lowest and the highest target.
    lowest_other : Fraction or None
        Least energy of any other state looked at; None when there is none.
    exact : bool
        Whether all other states were covered, or only those of a neighbourhood.
    method : str
        Over which states, in words.

    Examples
    --------
    >>> Bandwidth(3, Fraction(-4), Fraction(-3), Fraction(-1), True, "all states").ratio
    Fraction(1, 2)
    """

    targets: int
    lowest: Fraction
    highest: Fraction
    lowest_other: Fraction | None
    exact: bool
    method: str

    @property
    def bandwidth(self) -> Fraction:
        """B: highest minus lowest target energy."""
        return self.highest - self.lowest

    @property
    def distance(self) -> Fraction | None:
        """D: lowest other energy minus highest target energy; None when there is no other state."""
        return None if self.lowest_other is None else self.lowest_other - self.highest

    @property
    def ratio(self) -> Fraction | None:
        """B/D; None where it is undefined: D <= 0, or no other state."""
        distance = self.distance
        return None if distance is None or distance <= 0 else self.bandwidth / distance

    def __str__(self) -> str:
        figures = f"bandwidth {format_fraction(self.bandwidth)}"
        if self.distance is None:
            return f"{figures}, ratio undefined: no other state ({self.method})"
        bound = "" if self.exact else "at most "
        figures += f", distance {bound}{format_fraction(self.distance)}"
        if self.ratio is None:
            where = "at" if self.distance == 0 else "below"
            return f"{figures}, ratio undefined: another state lies {where} the highest target ({self.method})"
        least = "" if self.exact else "at least "
        return f"{figures}, ratio {least}{format_fraction(self.ratio)} = {float(self.ratio):.4g} ({self.method})"


def bandwidth(
    H: Hamiltonian,
    targets: object,
    *,
    radius: int | None = None,
    executor: Executor | None = None,
    progress: Progress | None = None,
    time: float | None = 600.0,
) -> Bandwidth:
    """Bandwidth ratio of a model for given target states.

    Parameters
    ----------
    H : Hamiltonian
    targets : states
        In any form that `Hamiltonian.states` reads; no state twice.
    radius : int, optional
        None looks at all states, by whichever exact search is cheapest. A number looks only at the states within so
        many flips of a target.
    executor, progress, time
        As for `hubokit.spectrum.search.low_levels`.

    Returns
    -------
    Bandwidth

    Raises
    ------
    LimitError
        All states are too many: name a radius.
    InputError
        No targets, or the same target twice.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b"): -2, ("a",): "-1/4"}, "spin")
    >>> print(bandwidth(H, [[1, 1], [-1, -1]]))
    bandwidth 1/2, distance 7/2, ratio 1/7 = 0.1429 (all 2**2 states, transform)
    """
    states = H.states(targets)
    if len(states) == 0:
        raise InputError("no target states were given", "targets")
    if len(np.unique(states, axis=0)) < len(states):
        raise InputError("a target state was given twice", "targets")
    if radius is not None:
        look = neighbourhood(H, states, radius, limit=1, executor=executor, progress=progress, time=time)
        return bandwidth_within(look)
    energies = Counter(int(k) for k in H.integer_energies(states))
    values = {H.constant + k * H.resolution: number for k, number in energies.items()}
    # Of so many levels at least one holds a state that is no target, if there is any.
    levels = low_levels(H, len(values) + 1, 0, executor=executor, progress=progress, time=time)
    other = next((level.energy for level in levels if level.degeneracy > values.get(level.energy, 0)), None)
    method = f"all 2**{H.size} states, {levels[0].method}"
    return Bandwidth(len(states), min(values), max(values), other, True, method)


def bandwidth_within(look: Neighbourhood) -> Bandwidth:
    """Bandwidth ratio over a neighbourhood that was looked at already: its centres are the targets.

    Parameters
    ----------
    look : Neighbourhood
        Of a model, or of the minimum of a reduced model over its auxiliaries.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b"): -2, ("b", "c"): -1, ("a",): "-1/4"}, "spin")
    >>> print(bandwidth_within(neighbourhood(H, [[1, 1, 1], [-1, -1, -1]], radius=1)).ratio)
    1/3
    """
    energies = [ball.energy for ball in look.balls]
    size = len(look.balls[0].centre)
    exact = look.radius >= size
    method = look.method if not exact else f"all 2**{size} states, by {look.method}"
    return Bandwidth(len(energies), min(energies), max(energies), look.lowest_other, exact, method)
