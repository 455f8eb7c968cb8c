"""What a quadratic model asks of a backend: variables, couplers, coefficient ratio, bits."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction


@dataclass(frozen=True)
class Costs:
    """Counts and sizes, the constant left aside.

    Parameters
    ----------
    auxiliaries, fields, couplers : int
        Numbers of auxiliaries, of one-body terms and of two-body terms.
    couplers_per_variable : int
        Largest number of couplers at one variable.
    coefficient_ratio : Fraction
        Largest over smallest nonzero absolute coefficient; 1 when there are no terms.
    field_bits, coupler_bits : int
        Bit length of the integer largest / greatest common divisor.

    Examples
    --------
    >>> costs_of(Hamiltonian({("a",): 3, ("a", "b"): -6, ("b",): 12}, "spin"), 0)
    Costs(auxiliaries=0, fields=2, couplers=1, couplers_per_variable=1, coefficient_ratio=Fraction(4, 1), \
field_bits=3, coupler_bits=1)
    """

    auxiliaries: int
    fields: int
    couplers: int
    couplers_per_variable: int
    coefficient_ratio: Fraction
    field_bits: int
    coupler_bits: int

    @property
    def bits(self) -> int:
        """The larger of the bits of the fields and of the couplers."""
        return max(self.field_bits, self.coupler_bits)

    def figure(self, prefer: str) -> tuple[Fraction | int, ...]:
        """What a preference compares: the preferred figure first, then the others to break ties.

        Parameters
        ----------
        prefer : {"auxiliaries", "range", "couplers"}
        """
        orders: Mapping[str, tuple[Fraction | int, ...]] = {
            "auxiliaries": (self.auxiliaries, self.coefficient_ratio, self.couplers),
            "range": (self.coefficient_ratio, self.auxiliaries, self.couplers),
            "couplers": (self.couplers, self.auxiliaries, self.coefficient_ratio),
        }
        return orders[prefer]

    def as_json(self) -> dict[str, Any]:
        """Plain JSON values, for the trail."""
        return {
            "auxiliaries": self.auxiliaries,
            "couplers": self.couplers,
            "coefficient ratio": format_fraction(self.coefficient_ratio),
            "bits": self.bits,
        }


def extremes(weights: Iterable[npt.NDArray[Any]]) -> tuple[int, int]:
    """Smallest and largest absolute value over several arrays without zeros; (1, 1) when there is nothing."""
    low, high = [], []
    for array in weights:
        if len(array):
            size = np.abs(array)
            low.append(int(size.min()))
            high.append(int(size.max()))
    return (min(low), max(high)) if low else (1, 1)


def bits_of(weights: npt.NDArray[Any]) -> int:
    """Bit length of the largest over the greatest common divisor; 0 for no weights."""
    if not len(weights):
        return 0
    common = int(np.gcd.reduce(np.abs(weights)))
    return (int(np.abs(weights).max()) // common).bit_length()


def costs_of(model: Hamiltonian, auxiliaries: int) -> Costs:
    """The costs of a model; products of three and more count in the coefficient ratio alone."""
    none = np.zeros(0, np.int64)
    weights = {block.locality: block.weights for block in model.blocks}
    low, high = extremes(weights.values())
    couplers = [block.members for block in model.blocks if block.locality == 2]
    degrees = np.bincount(couplers[0].ravel()) if couplers else np.zeros(1, int)
    fields, pairs = weights.get(1, none), weights.get(2, none)
    return Costs(
        auxiliaries, len(fields), len(pairs), int(degrees.max()), Fraction(high, low), bits_of(fields), bits_of(pairs)
    )
