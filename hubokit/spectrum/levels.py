"""What an enumeration finds: levels with their states, and densities of states.

A *level* is one energy with its degeneracy and its states. Energies are exact rationals: an enumeration works with
whole numbers k of the model's resolution, and ``energy = constant + k * resolution`` is formed here, once per level.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from hubokit.model.states import from_bits, unpack

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian


@dataclass(frozen=True)
class Level:
    """One energy with its degeneracy and its states.

    Attributes
    ----------
    energy : Fraction
        The energy of the level, constant included.
    degeneracy : int
        The number of states at this energy: always exact.
    states : ndarray of int8, shape (d', n)
        States in lift order, in the domain of the model: all of them, or the first ones where a limit cut the list.
    complete : bool
        True when ``states`` holds every state of the level.
    gap : Fraction or None
        Separation from the next level; None when there is no next level.
    method : str
        How the level was found, for example ``exhaustion``.

    Examples
    --------
    >>> Level(Fraction(-1), 2, np.zeros((2, 3), np.int8), True, Fraction(2), "exhaustion")
    Level(energy -1, 2 states, gap 2, by exhaustion)
    """

    energy: Fraction
    degeneracy: int
    states: npt.NDArray[np.int8]
    complete: bool
    gap: Fraction | None
    method: str

    def __repr__(self) -> str:
        noun = "state" if self.degeneracy == 1 else "states"
        listed = "" if self.complete else f" ({len(self.states)} listed)"
        gap = "none" if self.gap is None else str(self.gap)
        return f"Level(energy {self.energy}, {self.degeneracy} {noun}{listed}, gap {gap}, by {self.method})"


@dataclass(frozen=True)
class Density:
    """The density of states: every energy of a model, ascending, with its number of states.

    Attributes
    ----------
    energies : list of Fraction
        The distinct energies, ascending.
    counts : list of int
        The number of states at each of them; the sum is 2**n.

    Examples
    --------
    >>> density = Density([Fraction(-1), Fraction(1, 2)], [3, 1])
    >>> for energy, count in density:
    ...     print(energy, count)
    -1 3
    1/2 1
    """

    energies: list[Fraction]
    counts: list[int]

    def __iter__(self) -> Iterator[tuple[Fraction, int]]:
        return iter(zip(self.energies, self.counts, strict=True))

    def __len__(self) -> int:
        return len(self.energies)


def levels_from_integers(
    H: Hamiltonian,
    energies: Sequence[int],
    counts: Sequence[int],
    indices: Sequence[npt.NDArray[np.uint64]],
    method: str,
) -> list[Level]:
    """Levels from whole-number energies.

    Parameters
    ----------
    H : Hamiltonian
        The model.
    energies : sequence of int
        Ascending, in units of the resolution and without the constant. May hold one energy more than ``indices``: it
        then gives the gap of the last level.
    counts : sequence of int
        Degeneracies.
    indices : sequence of uint64 arrays
        The packed states of each level that is wanted, in lift order.
    method : str
        Name of the method.

    Returns
    -------
    list of Level
        One level for each array in ``indices``.
    """
    levels = []
    for place, packed in enumerate(indices):
        above = energies[place + 1] if place + 1 < len(energies) else None
        levels.append(
            Level(
                energy=H.constant + int(energies[place]) * H.resolution,
                degeneracy=int(counts[place]),
                states=from_bits(unpack(packed, H.size), H.domain),
                complete=len(packed) == int(counts[place]),
                gap=None if above is None else (int(above) - int(energies[place])) * H.resolution,
                method=method,
            )
        )
    return levels


def density_from_integers(H: Hamiltonian, energies: Sequence[int], counts: Sequence[int]) -> Density:
    """A density of states from ascending whole-number energies (units of the resolution) and their counts."""
    return Density([H.constant + int(k) * H.resolution for k in energies], [int(c) for c in counts])
