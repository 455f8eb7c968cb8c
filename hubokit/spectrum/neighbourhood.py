"""All states within a Hamming distance of given ones, at sizes where nothing visits them all.

The model is written once for each centre in the flips away from it (`hubokit.spectrum.recentring`); the energies of
all states that share every flip but the last are then one vector, and one addition of vectors leads from one such
block to the next. What comes back for each centre and distance is the number of states, the least energy, how many
lie at or below the highest centre, and the lowest of those: *spurious* states of the design.

A model that can only be asked for energies (the minimum of a reduced model over its auxiliaries, say) is looked at
through `neighbourhood_of`, in blocks of states.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor
from fractions import Fraction

import numpy as np

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import States
from hubokit.spectrum.balls import Centres, Neighbourhood, assembled, centres_of
from hubokit.spectrum.estimate import duration
from hubokit.spectrum.neighbourhood_blocks import EnergiesOf, counted_by_blocks
from hubokit.spectrum.neighbourhood_walk import counted_by_walk

Progress = Callable[[int, int], None]

SMALL = 1 << 22
"""Looks whose states times terms stay below this are made without compiled loops."""

WALKED_PER_SECOND = 5e8
ASKED_PER_SECOND = 1e4
"""Predicted rates; an energy that is asked for is taken to be a search over auxiliaries."""


def neighbourhood(
    H: Hamiltonian,
    around: object,
    radius: int = 2,
    *,
    limit: int = 100,
    distinct: bool = False,
    executor: Executor | None = None,
    progress: Progress | None = None,
    time: float | None = 600.0,
) -> Neighbourhood:
    """Look at every state within `radius` flips of the given states.

    Parameters
    ----------
    H : Hamiltonian
        Any size, domain and locality.
    around : states
        The centres, in any form that `Hamiltonian.states` reads; shape (c, n). No state twice.
    radius : int
        Most flips; more than n is n.
    limit : int
        Most spurious states listed for each centre and distance.
    distinct : bool
        Count a state that lies in several balls once, for its nearest centre (of several nearest, the first).
    executor : concurrent.futures.Executor, optional
        Runs the parts; by default threads on all processors.
    progress : callable, optional
        Called with (parts done, parts).
    time : float or None
        Seconds; what is predicted to take longer is refused. None for any.

    Returns
    -------
    Neighbourhood

    Raises
    ------
    LimitError
        Too many states for the time, or too many terms for the memory.
    InputError
        No states, the same state twice, values outside the domain, a negative radius.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b"): 1, ("b", "c"): 1, ("c",): -1}, "spin")
    >>> ring = neighbourhood(H, [[1, -1, 1]], radius=3)
    >>> [(shell.states, str(shell.lowest), shell.at_or_below) for shell in ring.balls[0].shells]
    [(1, '-3', 0), (3, '-1', 0), (3, '-1', 0), (1, '-1', 0)]
    """
    centres = centres_of(H.states(around), H.domain, radius, distinct)
    scale = (H.constant, H.resolution)
    if H.weight_bound >= 2**61 or centres.visits * max(len(H), 1) <= SMALL:
        _refuse_long(centres, 2e7 / max(len(H), 1), time)
        counted = counted_by_blocks(H.integer_energies, centres, limit, progress)
    else:
        _refuse_long(centres, WALKED_PER_SECOND, time)
        counted = counted_by_walk(H, centres, limit, executor, progress)
    return assembled(centres, *counted, scale, limit, _in_words(centres))


def neighbourhood_of(
    energies_of: EnergiesOf,
    around: States,
    radius: int = 2,
    *,
    domain: str,
    constant: Fraction = Fraction(0),
    resolution: Fraction = Fraction(1),
    limit: int = 100,
    distinct: bool = False,
    progress: Progress | None = None,
    time: float | None = 600.0,
) -> Neighbourhood:
    """The same for energies that only a function gives, in blocks of states.

    Parameters
    ----------
    energies_of : callable
        States, int8 of shape (m, n), to whole numbers of shape (m,).
    around : int8 array, shape (c, n)
        The centres.
    domain : "spin" or "boolean"
    constant, resolution : Fraction
        The energy of the whole number k is constant + k * resolution.
    radius, limit, distinct, progress, time
        As for `neighbourhood`.

    Raises
    ------
    LimitError
        Too many states for the time.
    InputError
        As for `neighbourhood`.

    Examples
    --------
    >>> up = np.ones((1, 4), np.int8)
    >>> look = neighbourhood_of(lambda states: -states.sum(axis=1), up, 2, domain="spin")
    >>> [str(shell.lowest) for shell in look.balls[0].shells]
    ['-4', '-2', '0']
    """
    centres = centres_of(np.asarray(around, np.int8), domain, radius, distinct)
    _refuse_long(centres, ASKED_PER_SECOND, time)
    counted = counted_by_blocks(energies_of, centres, limit, progress)
    return assembled(centres, *counted, (constant, resolution), limit, _in_words(centres))


def _in_words(centres: Centres) -> str:
    return f"all states within {_flips(centres)} of {_states(centres)} given"


def _flips(centres: Centres) -> str:
    return "1 flip" if centres.radius == 1 else f"{centres.radius} flips"


def _states(centres: Centres) -> str:
    return "1 state" if len(centres.bits) == 1 else f"{len(centres.bits)} states"


def _refuse_long(centres: Centres, rate: float, time: float | None) -> None:
    if time is not None and centres.visits > rate * time:
        raise LimitError(
            f"{centres.visits:,} states lie within {_flips(centres)} of {_states(centres)} of "
            f"{centres.size} variables, about {duration(centres.visits / rate)} of work, and {duration(time)} is "
            "allowed; a smaller radius or fewer states would do"
        )
