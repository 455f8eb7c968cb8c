"""What a look around given states finds: balls of shells, one shell for each Hamming distance.

Energies are exact rationals here; the walks work in whole numbers of the model's resolution (`ShellCount`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import comb
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.model.numbers import format_fraction
from hubokit.model.states import States, from_bits, to_bits


@dataclass(frozen=True)
class Shell:
    """All states at one distance from a centre.

    Parameters
    ----------
    distance : int
        Number of flips.
    states : int
        Number of states counted.
    lowest : Fraction or None
        Least energy of a state that is no centre; None when there is none. At distance 0, the centre's energy.
    at_or_below : int
        How many states that are no centres lie at or below the highest centre. 0 at distance 0.
    spurious : int8 array, shape (s, n)
        The lowest of those, up to the limit asked for: by energy, equal energies in lift order.
    energies : tuple of Fraction
        Their energies, ascending.
    """

    distance: int
    states: int
    lowest: Fraction | None
    at_or_below: int
    spurious: States
    energies: tuple[Fraction, ...]


@dataclass(frozen=True)
class Ball:
    """The states within the radius of one centre.

    Parameters
    ----------
    centre : int8 array, shape (n,)
    energy : Fraction
    shells : tuple of Shell
        Distances 0 to the radius.
    """

    centre: States
    energy: Fraction
    shells: tuple[Shell, ...]


@dataclass(frozen=True)
class Neighbourhood:
    """All states within a radius of given centres.

    Parameters
    ----------
    radius : int
    balls : tuple of Ball
        One for each centre, in the order given.
    highest : Fraction
        The energy that states are compared with: that of the highest centre.
    distinct : bool
        Whether a state in several balls was counted once, in the ball of its nearest centre (of several nearest, the
        first given), or in every ball.
    method : str
        In words.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> from hubokit.spectrum.neighbourhood import neighbourhood
    >>> H = Hamiltonian({("a", "b"): -1, ("b", "c"): -1}, "spin")
    >>> print(neighbourhood(H, [[1, 1, 1]], radius=2))
    2 flips around 1 state: 7 states visited, highest centre -2
    distance  states  lowest  at or below
           0       1      -2            -
           1       3       0            0
           2       3       0            0
    """

    radius: int
    balls: tuple[Ball, ...]
    highest: Fraction
    distinct: bool
    method: str

    @property
    def states(self) -> int:
        """Number of states counted, centres included."""
        return sum(shell.states for ball in self.balls for shell in ball.shells)

    @property
    def at_or_below(self) -> int:
        """Number of states counted that are no centres and lie at or below the highest centre."""
        return sum(shell.at_or_below for ball in self.balls for shell in ball.shells)

    @property
    def lowest_other(self) -> Fraction | None:
        """Least energy of a state that is no centre; None when no such state was visited."""
        found = [shell.lowest for ball in self.balls for shell in ball.shells[1:] if shell.lowest is not None]
        return min(found, default=None)

    def shell(self, distance: int) -> list[Shell]:
        """The shells at one distance, one for each ball."""
        return [ball.shells[distance] for ball in self.balls]

    def __str__(self) -> str:
        flips = "1 flip" if self.radius == 1 else f"{self.radius} flips"
        noun = "state" if len(self.balls) == 1 else "states"
        seen = "1 state" if self.states == 1 else f"{self.states:,} states"
        lines = [
            f"{flips} around {len(self.balls)} {noun}: {seen} visited, highest centre {format_fraction(self.highest)}"
        ]
        rows = [("distance", "states", "lowest", "at or below")]
        for distance in range(self.radius + 1):
            shells = self.shell(distance)
            least = min((s.lowest for s in shells if s.lowest is not None), default=None)
            below = f"{sum(s.at_or_below for s in shells):,}" if distance else "-"
            shown = "none" if least is None else format_fraction(least)
            rows.append((str(distance), f"{sum(s.states for s in shells):,}", shown, below))
        widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
        lines += ["  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=True)) for row in rows]
        return "\n".join(lines)


@dataclass(frozen=True)
class ShellCount:
    """A shell in whole numbers, as a walk returns it.

    Parameters
    ----------
    states, at_or_below : int
    lowest : int or None
    bits : uint8 array, shape (s, n)
        The lowest states at or below the threshold, in any order.
    energies : list of int
    """

    states: int
    lowest: int | None
    at_or_below: int
    bits: NDArray[np.uint8]
    energies: list[int]


@dataclass(frozen=True)
class Centres:
    """The states looked around, and which of their balls meet.

    Parameters
    ----------
    bits : uint8 array, shape (c, n)
    domain : "spin" or "boolean"
    radius : int
        No larger than n.
    distinct : bool
        Count a state once, for its nearest centre, or in every ball.
    """

    bits: NDArray[np.uint8]
    domain: str
    radius: int
    distinct: bool

    @property
    def size(self) -> int:
        """Number of variables."""
        return int(self.bits.shape[1])

    @property
    def visits(self) -> int:
        """Number of states in all balls, overlaps counted every time."""
        return len(self.bits) * sum(comb(self.size, d) for d in range(self.radius + 1))

    def others(self, place: int) -> tuple[NDArray[np.uint8], NDArray[np.int64], NDArray[np.int64]]:
        """The centres whose presence matters in the ball of one.

        Returns
        -------
        differences : uint8 array, shape (b, n)
            Where each differs from this centre.
        sizes : int64 array, shape (b,)
            In how many variables.
        cuts : int64 array, shape (b, radius + 1)
            A state at distance d from this centre is passed over when it is at most ``cuts[., d]`` from the other.
            Without `distinct` only the other centre itself is (0).
        """
        differences = self.bits ^ self.bits[place]
        sizes = differences.sum(axis=1, dtype=np.int64)
        reach = 2 * self.radius if self.distinct else self.radius
        near = np.flatnonzero((sizes > 0) & (sizes <= reach))
        distances = np.arange(self.radius + 1, dtype=np.int64)
        earlier = (near < place).astype(np.int64)
        cuts = distances[None, :] - 1 + earlier[:, None] if self.distinct else np.zeros((len(near), len(distances)))
        return np.ascontiguousarray(differences[near]), sizes[near], cuts.astype(np.int64)


def centres_of(states: States, domain: str, radius: int, distinct: bool) -> Centres:
    """Centres from states that were read already.

    Raises
    ------
    InputError
        No state, the same state twice, a negative radius.
    """
    if len(states) == 0:
        raise InputError("no states were given to look around", "around")
    if radius < 0:
        raise InputError(f"the radius is {radius}; it cannot be negative", "radius")
    bits = to_bits(states, domain)
    seen: dict[bytes, int] = {}
    for place, row in enumerate(bits):
        first = seen.setdefault(row.tobytes(), place)
        if first != place:
            raise InputError(f"states {first} and {place} are the same", "around")
    return Centres(bits, domain, min(radius, bits.shape[1]), distinct)


def assembled(
    centres: Centres,
    energies: Sequence[int],
    shells: Sequence[Sequence[ShellCount]],
    scale: tuple[Fraction, Fraction],
    limit: int,
    method: str,
) -> Neighbourhood:
    """The result in rationals.

    Parameters
    ----------
    centres : Centres
    energies : sequence of int
        Of the centres.
    shells : sequence of sequence of ShellCount
        For each centre, distances 1 to the radius.
    scale : (constant, resolution)
        Energy of the whole number k is constant + k * resolution.
    limit : int
        Most spurious states a shell lists.
    """
    constant, resolution = scale

    def value(whole: int) -> Fraction:
        return constant + int(whole) * resolution

    balls = []
    for bits, energy, counts in zip(centres.bits, energies, shells, strict=True):
        centre = from_bits(bits, centres.domain)
        own = Shell(0, 1, value(energy), 0, np.zeros((0, centres.size), np.int8), ())
        outer = []
        for distance, count in enumerate(counts, 1):
            kept, order = lowest_first(count.bits, count.energies, limit)
            outer.append(
                Shell(
                    distance,
                    count.states,
                    None if count.lowest is None else value(count.lowest),
                    count.at_or_below,
                    from_bits(kept, centres.domain),
                    tuple(value(count.energies[i]) for i in order),
                )
            )
        balls.append(Ball(centre, value(energy), (own, *outer)))
    return Neighbourhood(centres.radius, tuple(balls), value(max(energies)), centres.distinct, method)


def lowest_first(bits: NDArray[np.uint8], energies: Sequence[int], limit: int) -> tuple[NDArray[np.uint8], list[int]]:
    """The lowest rows, by energy and then in lift order, and which they were."""
    if len(bits) == 0:
        return bits, []
    keys: list[Any] = list(np.packbits(bits, axis=1).T[::-1])
    values = np.empty(len(energies), object)
    values[:] = list(energies)
    ranks = np.unique(values, return_inverse=True)[1]
    order = np.lexsort([*keys, ranks])[:limit]
    return bits[order], order.tolist()
