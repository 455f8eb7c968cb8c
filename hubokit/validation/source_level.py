"""The ground level of the source over all its states, those the model cannot represent included."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from hubokit.errors import LimitError
from hubokit.model.states import from_bits, unpack
from hubokit.validation.case import Case, States
from hubokit.validation.scaling import Column


@dataclass(frozen=True)
class GroundLevel:
    """Ground level of E.

    Parameters
    ----------
    energy : Fraction
    degeneracy : int
        Over all source states.
    gap : Fraction or None
    unrepresented : int
        Ground states that the model has no state for.
    unrepresented_states : int8 array (k, source variables)
        The first of these in lift order; at least one when there are any.
    """

    energy: Fraction
    degeneracy: int
    gap: Fraction | None
    unrepresented: int
    unrepresented_states: States


def source_ground(case: Case, column: Column) -> GroundLevel:
    """Ground level of E from the column over original states, or from the source where the model lacks states.

    Parameters
    ----------
    column : Column
        E over all original states.
    """
    if case.represents_all:
        return GroundLevel(*_ground(column), 0, np.zeros((0, case.source.size), np.int8))
    if case.source.size > 22:
        return _searched(case)
    from hubokit.spectrum.transforms import all_energies

    source = Column(all_energies(case.source), case.source.constant, case.source.resolution)
    energy, degeneracy, gap = _ground(source)
    numbers = np.flatnonzero(source.integers == source.integers.min())
    states = from_bits(unpack(numbers, case.source.size), case.source.domain)
    _, known = case.original_states(states)
    return GroundLevel(energy, degeneracy, gap, int((~known).sum()), states[~known][:64])


def _ground(column: Column) -> tuple[Fraction, int, Fraction | None]:
    least = column.integers.min()
    at = column.integers == least
    above = column.integers[~at]
    gap = (int(above.min()) - int(least)) * column.resolution if len(above) else None
    return column.constant + int(least) * column.resolution, int(at.sum()), gap


def _searched(case: Case) -> GroundLevel:
    from hubokit.spectrum.search import ground_states

    level = ground_states(case.source)
    if not level.complete:
        raise LimitError(f"the source has {level.degeneracy} ground states, too many to look through one by one")
    _, known = case.original_states(level.states)
    bare = level.states[~known]
    return GroundLevel(level.energy, level.degeneracy, level.gap, len(bare), bare[:64])
