"""What a comparison of a reduced model with its source finds, in exact energies."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

import numpy as np
import numpy.typing as npt

from hubokit.model.states import from_bits, unpack
from hubokit.spectrum.two_levels import FAR
from hubokit.spectrum.walk import Result

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian

ScaleFrom = Literal["declared", "found", "default"]


@dataclass(frozen=True)
class Difference:
    """A state at which P is not ``scale * E + shift``.

    Attributes
    ----------
    state : int8 array, shape (n,)
    source_energy, projected_energy : Fraction
        E and P there.
    """

    state: npt.NDArray[np.int8]
    source_energy: Fraction
    projected_energy: Fraction


@dataclass(frozen=True)
class GroundStates:
    """The states that minimise E, or those that minimise P.

    Attributes
    ----------
    energy : Fraction
        The minimum.
    count : int
        How many states reach it.
    states : int8 array, shape (d', n)
        The first of them in lift order.
    others : list of Fraction
        The other energy of each of these states: P for the minimisers of E, E for those of P.
    multiplicities : list of int
        m of each of these states.
    """

    energy: Fraction
    count: int
    states: npt.NDArray[np.int8]
    others: list[Fraction]
    multiplicities: list[int]


@dataclass(frozen=True)
class Comparison:
    """What holds between E and P over all 2**n states.

    Attributes
    ----------
    size : int
        Number n of original variables; states have them in the order of the source.
    source, projected : GroundStates
        Of E and of P.
    common : int
        Number of states that minimise both.
    scale, shift : Fraction
        alpha and beta with which the two were compared.
    scale_from : {"declared", "found", "default"}
        Where they come from. "found" means that ``P = scale * E + shift`` holds everywhere; "default" (1 and 0)
        that no scale and shift do.
    violations : int
        Number of states where ``P != scale * E + shift``.
    first_violation, worst_violation : Difference or None
        The first in lift order, and (the first of) those with the largest difference.
    multiplicities, ground_multiplicities : (int, int)
        Least and largest m(x) over all x, and over the states that minimise E.
    auxiliary_gap, auxiliary_gap_at_minimum : Fraction or None
        Least strictly positive ``F(x, a) - P(x)`` over all x, and over the states that minimise P; None where
        there is none.
    """

    size: int
    source: GroundStates
    projected: GroundStates
    common: int
    scale: Fraction
    shift: Fraction
    scale_from: ScaleFrom
    violations: int
    first_violation: Difference | None
    worst_violation: Difference | None
    multiplicities: tuple[int, int]
    ground_multiplicities: tuple[int, int]
    auxiliary_gap: Fraction | None
    auxiliary_gap_at_minimum: Fraction | None

    @property
    def same_ground_states(self) -> bool:
        """Whether the states that minimise E are exactly those that minimise P."""
        return self.source.count == self.projected.count == self.common

    @property
    def same_energies(self) -> bool:
        """Whether ``P = scale * E + shift`` at every state."""
        return self.violations == 0


def energy_of(H: Hamiltonian, whole: int) -> Fraction:
    """The energy of a whole number of resolutions."""
    return H.constant + int(whole) * H.resolution


def comparison_of(
    source: Hamiltonian,
    model: Hamiltonian,
    total: Result,
    scale: Fraction,
    shift: Fraction,
    scale_from: ScaleFrom,
) -> Comparison:
    """The result from the merged summaries of all slabs (`hubokit.spectrum.comparison_walk`)."""

    def states(packed: npt.NDArray[np.int64]) -> npt.NDArray[np.int8]:
        return from_bits(unpack(packed.astype(np.uint64), source.size), source.domain)

    def ground(name: str, own: Hamiltonian, other: Hamiltonian) -> GroundStates:
        least, count = total[name]
        others = [energy_of(other, k) for k in total[f"{name}.others"]]
        counts = [int(k) for k in total[f"{name}.counts"]]
        return GroundStates(energy_of(own, least), int(count), states(total[f"{name}.states"]), others, counts)

    def difference(row: npt.NDArray[np.int64]) -> Difference | None:
        if len(row) == 0:
            return None
        _, energy, projected = row[0]
        return Difference(states(row[:1, 0])[0], energy_of(source, energy), energy_of(model, projected))

    def gap(name: str) -> Fraction | None:
        whole = int(total[name][0])
        return None if whole >= FAR else whole * model.resolution

    least, most = total["counts"]
    ground_least, ground_most = total["source.range"]
    return Comparison(
        size=source.size,
        source=ground("source", source, model),
        projected=ground("projected", model, source),
        common=int(total["common"][0]),
        scale=scale,
        shift=shift,
        scale_from=scale_from,
        violations=int(total["wrong"][0]),
        first_violation=difference(total["first"]),
        worst_violation=difference(total["worst"]),
        multiplicities=(int(least), int(most)),
        ground_multiplicities=(int(ground_least), int(ground_most)),
        auxiliary_gap=gap("gap"),
        auxiliary_gap_at_minimum=gap("projected.gap"),
    )
