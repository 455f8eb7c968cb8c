"""A handful of states looked at where P is not known as a polynomial: they can refute, they prove nothing."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.states import from_bits
from hubokit.validation.case import Case, States
from hubokit.validation.findings import Findings
from hubokit.validation.scaling import Column, column_relation, judge_scale
from hubokit.validation.tables import comparable_columns

#: States drawn at random beside those given.
DRAWN = 256


def columns_at(case: Case, states: States) -> tuple[Column, Column, States, NDArray[np.object_]]:
    """E, P, best auxiliaries and multiplicities of original states.

    Raises
    ------
    LimitError
        The auxiliaries hang together too widely to be eliminated.
    """
    minimum, best, counts = case.projection.minimum(states)
    energy = Column(case.energy.integer_energies(states), case.energy.constant, case.energy.resolution)
    reduced = Column(np.asarray(minimum), case.model.constant, case.model.resolution)
    return energy, reduced, best, np.asarray(counts, object)


def probe(case: Case, found: Findings, method: str, given: tuple[States, NDArray[np.bool_]]) -> None:
    """Fix the scale where a few states can, and refute `energies` or `one-to-one` where they show it.

    Without a declaration the states either admit no scale and shift at all, so that 1 and 0 are the ones to
    judge with, or exactly one pair may hold everywhere. Such a pair is taken only when it is 1 and 0, which
    is what a failure elsewhere would come to as well.

    Parameters
    ----------
    given : states of the originals and which of them are meant
    """
    n = len(case.originals)
    states = given[0][given[1]]
    bits = np.random.default_rng(0).integers(0, 2, (min(DRAWN, max(1, 2**22 // max(n, 1))), n), np.uint8)
    states = np.concatenate([states, from_bits(bits, case.model.domain)])
    if case.declared is not None:
        found.take_scale(judge_scale(case.declared, None))
    if not case.projectable:
        return
    try:
        energy, reduced, best, counts = columns_at(case, states)
    except LimitError as refusal:
        for name in ("energies", "one-to-one"):
            found.leave_open(name, f"{method}: {refusal}")
        return
    relation = column_relation(reduced, energy)
    if not found.scale_known:
        if relation is not None and (relation.level is not None or relation.scale != 1 or relation.shift != 0):
            return
        found.take_scale(judge_scale(None, None))
    P, A = comparable_columns(reduced, energy, found.scale, found.shift)
    off = np.flatnonzero(P != A)
    tied = np.flatnonzero(counts != 1)
    if len(off):
        at = int(off[0])
        witness = case.witness(states[at], best[at], "projection", int(counts[at]), reduced[at])
        found.refute("energies", method, "a state was met where P differs from alpha E + beta", witness)
    elif not case.represents_all:
        witness = case.bare_witness(case.unrepresented_state())
        found.refute("energies", method, "variables are merged or fixed: the model lacks source states", witness)
    elif len(tied):
        at = int(tied[0])
        witness = case.witness(states[at], best[at], "projection", int(counts[at]), reduced[at])
        found.refute("one-to-one", method, "a state has more than one best auxiliary setting", witness)
