"""Exhaustion: ground states, low levels, density of states and local minima by visiting every state.

Small models (and models that symmetry makes small) are tabulated by a transform. Above that a Gray-code walk with
derivative tables (`hubokit.spectrum.derivatives`) visits 2**L states with each handful of vector additions. Flips
that leave every term unchanged divide the work: a spin model with only even localities is walked once for each
mirror pair.

All answers are exact, whatever the executor: degeneracies are whole, and a list of states cut at a limit keeps the
first in lift order.
"""

from __future__ import annotations

import os
from concurrent.futures import Executor
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from hubokit.errors import InputError, LimitError
from hubokit.spectrum.candidate_walk import Candidates, exact_levels, rounded
from hubokit.spectrum.count_walk import DistinctEnergies, EnergyCounts, LocalMinima
from hubokit.spectrum.level_walk import LowestLevels
from hubokit.spectrum.levels import Density, Level, density_from_integers, levels_from_integers
from hubokit.spectrum.polynomial import INT64_BOUND, Polynomial, Symmetry, polynomial_of, symmetry_of
from hubokit.spectrum.slabs import Progress, run_slabs
from hubokit.spectrum.transforms import (
    density_by_transform,
    local_minima_by_transform,
    spectrum_by_transform,
    tabulated,
)
from hubokit.spectrum.walk import Result, layout_of

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian

Path = str | os.PathLike[str]

TABULATED = 16
"""Models of at most so many variables go straight to a table of all energies."""

WALKED = 20
"""What symmetry leaves is walked above so many variables, and tabulated below."""

PACKED = 62
"""Most variables of a packed state."""

_BINS = 2**17


def ground_states(
    H: Hamiltonian,
    limit: int = 100_000,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoint: Path | None = None,
    time: float | None = 600.0,
) -> Level:
    """The ground level of a model, by visiting every state.

    Parameters
    ----------
    H : Hamiltonian
        Any domain and locality, at most 62 variables.
    limit : int
        Most states listed: the first in lift order. The degeneracy is exact all the same.
    executor : concurrent.futures.Executor, optional
        Where slabs run; by default threads on all processors.
    progress : callable, optional
        Called with (slabs done, slabs).
    checkpoint : path-like, optional
        A file that makes the run resumable after an interruption at any moment.
    time : float or None
        Seconds allowed by the estimate made before the start; None for any.

    Returns
    -------
    Level
        Energy, degeneracy, states (int8, shape (d', n)), and the gap to the next level.

    Raises
    ------
    LimitError
        When it would take longer than `time`, or more than 62 variables.
    InputError
        A negative limit, or a checkpoint of something else.

    References
    ----------
    Ch. Bouillaguet et al., "Fast exhaustive search for polynomial systems in F2", CHES 2010 (the walk).

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> level = ground_states(Hamiltonian({("a", "b", "c"): 1, ("a",): "1/2"}, domain="spin"))
    >>> level.energy, level.degeneracy, level.gap
    (Fraction(-3, 2), 2, Fraction(1, 1))
    >>> level.states.tolist()
    [[-1, 1, 1], [-1, -1, -1]]
    """
    levels = low_levels(H, 1, limit, executor=executor, progress=progress, checkpoint=checkpoint, time=time)
    return levels[0]


def low_levels(
    H: Hamiltonian,
    count: int = 5,
    limit: int = 100_000,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoint: Path | None = None,
    time: float | None = 600.0,
) -> list[Level]:
    """The lowest levels of a model, by visiting every state.

    Parameters
    ----------
    H : Hamiltonian
        Any domain and locality, at most 62 variables.
    count : int
        How many levels; fewer are returned where the model has fewer.
    limit, executor, progress, checkpoint, time
        As for `ground_states`; the limit holds for each level.

    Returns
    -------
    list of Level
        Lowest first.

    Raises
    ------
    LimitError, InputError
        As `ground_states`; a count below one.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> H = Hamiltonian({("a",): 1, ("b",): 2, ("a", "b"): -4}, domain="boolean")
    >>> for level in low_levels(H, 2):
    ...     print(level)
    Level(energy -1, 1 state, gap 1, by exhaustion)
    Level(energy 0, 1 state, gap 1, by exhaustion)
    """
    if count < 1:
        raise InputError(f"{count} levels were asked for; at least one is needed", "count")
    if limit < 0:
        raise InputError(f"the limit of states is {limit}; zero or more is needed", "limit")
    if H.size <= TABULATED:
        levels = spectrum_by_transform(H, count, limit, "exhaustion")
        _report_whole(progress)
        return levels
    symmetry, reduced = _reduced(H)
    wide = reduced.bound >= INT64_BOUND
    if reduced.size <= WALKED:
        found = _tabulated_levels(reduced, count + 1, limit)
        _report_whole(progress)
    elif wide:
        coarse, window = rounded(reduced)
        candidates = Candidates(coarse, layout_of(coarse), count + 1, window)
        total = run_slabs(candidates, executor=executor, progress=progress, checkpoint=checkpoint, time=time)
        found = exact_levels(reduced, total, count + 1, limit)
    else:
        task = LowestLevels(reduced, layout_of(reduced), count + 1, limit)
        found = run_slabs(task, executor=executor, progress=progress, checkpoint=checkpoint, time=time)
    return _levels(H, symmetry, found, count, limit)


def density_of_states(
    H: Hamiltonian,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoint: Path | None = None,
    time: float | None = 600.0,
) -> Density:
    """Every energy of a model with its number of states, by visiting every state.

    Parameters
    ----------
    H : Hamiltonian
        Any domain and locality, at most 62 variables; weights that fit int64 above 20 variables.
    executor, progress, checkpoint, time
        As for `ground_states`.

    Returns
    -------
    Density
        Energies ascending, and exact counts that add up to 2**n.

    Raises
    ------
    LimitError
        Too long, too many variables, or more than 2**22 distinct energies.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> ring = Hamiltonian({("a", "b"): -1, ("b", "c"): -1, ("a", "c"): -1}, domain="spin")
    >>> list(density_of_states(ring))
    [(Fraction(-3, 1), 2), (Fraction(1, 1), 6)]
    """
    if H.size <= TABULATED:
        density = density_by_transform(H)
        _report_whole(progress)
        return density
    symmetry, reduced = _reduced(H)
    if reduced.size <= WALKED:
        energies, counts = np.unique(tabulated(reduced), return_counts=True)
        _report_whole(progress)
    else:
        _refuse_wide(reduced, "the density of states")
        layout = layout_of(reduced)
        weights = reduced.weights
        lowest = -reduced.bound if reduced.spin else int(weights[weights < 0].sum())
        # over spins every energy has the parity of the sum of weights
        step, bins = (2, reduced.bound + 1) if reduced.spin else (1, int(weights[weights > 0].sum()) - lowest + 1)
        if bins <= _BINS:
            binned = run_slabs(
                EnergyCounts(reduced, layout, lowest, step, bins),
                executor=executor,
                progress=progress,
                checkpoint=checkpoint,
                time=time,
            )["counts"]
            used = np.flatnonzero(binned)
            energies, counts = lowest + step * used, binned[used]
        else:
            task = DistinctEnergies(reduced, layout)
            found = run_slabs(task, executor=executor, progress=progress, checkpoint=checkpoint, time=time)
            energies, counts = found["energies"], found["counts"]
    times = 1 << len(symmetry.flips)
    return density_from_integers(H, energies.tolist(), [count * times for count in counts.tolist()])


def count_local_minima(
    H: Hamiltonian,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoint: Path | None = None,
    time: float | None = 600.0,
) -> int:
    """The number of states that no flip of a single variable lowers.

    States on a plateau count: a state is a local minimum when every neighbour has at least its energy.

    Parameters
    ----------
    H : Hamiltonian
        Any domain and locality; weights that fit int64 above 20 variables.
    executor, progress, checkpoint, time
        As for `ground_states`.

    Returns
    -------
    int
        Exact.

    Raises
    ------
    LimitError
        Too long, or too many variables.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> count_local_minima(Hamiltonian({("a", "b"): -1, ("b", "c"): -1}, domain="spin"))
    2
    """
    if H.size <= WALKED:
        minima = local_minima_by_transform(H)
        _report_whole(progress)
        return minima
    symmetry, reduced = _reduced(H)
    polynomial = polynomial_of(H)
    if 4 * polynomial.bound >= INT64_BOUND:
        raise LimitError("local minima are counted where weights fit int64: use a coarser resolution (H.rounded)")
    task = LocalMinima(polynomial, symmetry.pivots, layout_of(reduced, derivatives=True))
    found = run_slabs(task, executor=executor, progress=progress, checkpoint=checkpoint, time=time)
    return int(found["total"][0]) << len(symmetry.flips)


def _report_whole(progress: Progress | None) -> None:
    if progress is not None:
        progress(1, 1)


def _refuse_wide(polynomial: Polynomial, what: str) -> None:
    if polynomial.bound >= INT64_BOUND:
        raise LimitError(
            f"{what} of {polynomial.size} variables is counted where weights fit int64: "
            "use a coarser resolution (H.rounded), or low_levels, which takes any weights"
        )


def _reduced(H: Hamiltonian) -> tuple[Symmetry, Polynomial]:
    if H.size > PACKED:
        raise LimitError(
            f"{H.size} variables have 2**{H.size} states, and {PACKED} variables are the most that exhaustion takes: "
            "use elimination for a sparse model, or look at a neighbourhood of known states"
        )
    polynomial = polynomial_of(H)
    symmetry = symmetry_of(polynomial)
    return symmetry, polynomial.without(symmetry.pivots).merged()


def _tabulated_levels(polynomial: Polynomial, most: int, limit: int) -> Result:
    table = tabulated(polynomial)
    energies, counts = np.unique(table, return_counts=True)
    energies, counts = energies[:most], counts[:most]
    states = [np.flatnonzero(table == energy)[:limit] for energy in energies[: most - 1]]
    return _flat(energies, counts, states)


def _flat(
    energies: npt.NDArray[np.int64], counts: npt.NDArray[np.int64], states: list[npt.NDArray[np.int64]]
) -> Result:
    bounds = np.cumsum([0] + [len(part) for part in states])
    return {
        "energies": energies,
        "counts": counts,
        "states": np.concatenate([np.zeros(0, np.uint64), *states]).astype(np.uint64),
        "bounds": bounds,
    }


def _levels(H: Hamiltonian, symmetry: Symmetry, found: Result, count: int, limit: int) -> list[Level]:
    """Levels of the whole model from those of its reduced states."""
    bounds = found["bounds"]
    listed = min(count, len(found["energies"]))
    states = [
        symmetry.images(symmetry.whole(found["states"][bounds[place] : bounds[place + 1]]), limit)
        for place in range(listed)
    ]
    counts = [int(number) << len(symmetry.flips) for number in found["counts"]]
    return levels_from_integers(H, found["energies"].tolist(), counts, states, "exhaustion")
