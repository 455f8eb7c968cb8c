"""What a visit to some of the states found, and what that says of the claims.

What holds at the visited states is `tested`. What fails there refutes a claim only where it settles it for all
states: one state does for `energies` and `one-to-one`; for the claims about ground states it does where the ground
level of the source is known from elsewhere. Otherwise the claim stays open, with the finding.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np

from hubokit.model.numbers import format_fraction
from hubokit.validation.case import Case, States
from hubokit.validation.findings import Findings
from hubokit.validation.probing import columns_at
from hubokit.validation.scaling import Column
from hubokit.validation.verdict import Witness

METHOD = "neighbourhood"
#: Known ground states of the source that are compared at most.
COMPARED = 10_000


@dataclass(frozen=True)
class Lowest:
    """The lowest visited states of E or of P.

    Parameters
    ----------
    energy : Fraction
    states : int8 array, shape (k, originals)
        Distinct.
    complete : bool
        Whether these are all of them.
    """

    energy: Fraction
    states: States
    complete: bool = True

    def keys(self) -> dict[bytes, int]:
        """Row number of every state."""
        return {row.tobytes(): place for place, row in enumerate(np.ascontiguousarray(self.states))}


@dataclass(frozen=True)
class Visit:
    """What was found at the visited states.

    Parameters
    ----------
    account : str
        How many states, within which radius of which centres.
    lowest_energy, lowest_minimum : Lowest
        Of E and of P, over visited states that the model represents.
    off : int8 array (originals,) or None
        A state where P differs from alpha E + beta.
    off_text : str
    tied : int8 array (originals,) or None
        A state with more than one best auxiliary setting.
    tied_text : str
    unlooked : str
        Why multiplicities were not looked at everywhere; empty where they were.
    unrepresented : list of Fraction
        E of the visited source states that the model has no state for.
    """

    account: str
    lowest_energy: Lowest
    lowest_minimum: Lowest
    off: States | None = None
    off_text: str = ""
    tied: States | None = None
    tied_text: str = ""
    unlooked: str = ""
    unrepresented: list[Fraction] = field(default_factory=list)

    @property
    def tested(self) -> str:
        """The account of a claim that is tested or open."""
        return f"{self.account}; not a proof"


def judge(case: Case, found: Findings, visit: Visit) -> None:
    """Test, refute or leave open every claim; scale and shift are fixed before."""
    _everywhere(case, found, visit)
    _ground_claims(case, found, visit)
    _against_ground_states(case, found, visit)


def _everywhere(case: Case, found: Findings, visit: Visit) -> None:
    """The two claims about every state."""
    if found.settled("energies"):
        pass
    elif visit.off is not None:
        witness = case.projected_witness(visit.off)
        found.refute("energies", METHOD, f"{visit.off_text}; {visit.account}", witness)
    elif not case.represents_all:
        text = "variables are merged or fixed: the model lacks source states"
        found.refute("energies", METHOD, text, case.bare_witness(case.unrepresented_state()))
    else:
        found.test("energies", METHOD, visit.tested)
    if found.settled("one-to-one"):
        return
    if visit.tied is not None:
        witness = case.projected_witness(visit.tied)
        found.refute("one-to-one", METHOD, f"{visit.tied_text}; {visit.account}", witness)
    elif visit.unlooked:
        found.leave_open("one-to-one", f"{METHOD}: {visit.unlooked}; {visit.tested}")
    elif visit.off is None:
        found.test("one-to-one", METHOD, visit.tested)


def _ground_claims(case: Case, found: Findings, visit: Visit) -> None:
    """The three claims about ground states: tested on the visited states, or open with what was seen."""
    E, P = visit.lowest_energy, visit.lowest_minimum
    least, missing, lowest = E.energy, 0, E
    if visit.unrepresented:
        floor = min(visit.unrepresented)
        missing = visit.unrepresented.count(floor) if floor <= least else 0
        if floor < least:
            least, lowest = floor, Lowest(floor, E.states[:0])
    target = found.scale * least + found.shift
    if P.energy == target:
        found.test("ground-energy", METHOD, visit.tested)
    else:
        text = f"the least visited energies differ: P {format_fraction(P.energy)}, alpha E + beta "
        found.leave_open("ground-energy", f"{METHOD}: {text}{format_fraction(target)}; {visit.tested}")
    mine, theirs = lowest.keys(), P.keys()
    lost, spurious = len(mine.keys() - theirs.keys()) + missing, len(theirs.keys() - mine.keys())
    whole = lowest.complete and P.complete
    # Where P = alpha E + beta at every visited state the lists agree, whole or cut.
    alike = (visit.off is None and not missing) or (whole and not lost and not spurious)
    if not alike:
        finding = f"{lost} minimisers are lost and {spurious} spurious" if whole else "too many are lowest to compare"
        text = f"{METHOD}: among visited states {finding}; {visit.tested}"
        for name in ("ground-states", "even-multiplicity"):
            found.leave_open(name, text)
        return
    found.test("ground-states", METHOD, visit.tested)
    if found.settled("even-multiplicity"):
        return
    if case.projection.uniform_multiplicity is None:
        if not P.complete:
            found.leave_open("even-multiplicity", f"{METHOD}: the lowest states are too many; {visit.tested}")
            return
        if len(set(case.projection.multiplicities(P.states))) > 1:
            text = f"{METHOD}: m differs among the lowest visited states; {visit.tested}"
            found.leave_open("even-multiplicity", text)
            return
    found.test("even-multiplicity", METHOD, visit.tested)


def _against_ground_states(case: Case, found: Findings, visit: Visit) -> None:
    """Where the ground level of E is known, one visited state can settle the claims about it."""
    level = found.source_level
    if level is None or not len(level.states):
        return
    originals, known = case.original_states(level.states[:COMPARED])
    if not known.any():
        return
    own = originals[known]
    _, reduced, best, many = columns_at(case, own)
    high, P = int(reduced.integers.argmax()), visit.lowest_minimum

    def at_ground(row: int) -> Witness:
        return case.witness(own[row], best[row], "projection", int(many[row]), reduced[row])

    if not found.settled("ground-states"):
        grounds = {row.tobytes() for row in np.ascontiguousarray(own)}
        complete = level.complete and len(level.states) <= COMPARED
        # With a state above the ground level of E as low as a ground state, either both minimise P or neither does.
        strange = [row for row in P.states if row.tobytes() not in grounds] if complete else []
        if P.energy < reduced[high]:
            text = f"a ground state of E does not minimise P: a visited state lies below it; {visit.account}"
            low = case.projected_witness(P.states[0])
            found.refute("ground-states", METHOD, text, at_ground(high), low)
        elif strange and P.energy == reduced[high]:
            text = f"a state above the ground level of E has a P as low as a ground state of E; {visit.account}"
            found.refute("ground-states", METHOD, text, case.projected_witness(strange[0]), at_ground(high))
    most, fewest = int(np.argmax(many)), int(np.argmin(many))
    if many[most] != many[fewest] and not found.settled("even-multiplicity"):
        text = f"m runs from {many[fewest]} to {many[most]} over the ground states of E"
        found.refute("even-multiplicity", METHOD, text, at_ground(most), at_ground(fewest))
    target = found.scale * level.energy + found.shift
    if P.energy < target and found.scale_from != "found" and not found.settled("ground-energy"):
        text = (
            f"min P is at most {format_fraction(P.energy)}, alpha min E + beta = {format_fraction(target)}; "
            f"{visit.account}"
        )
        found.refute("ground-energy", METHOD, text, case.projected_witness(P.states[0]))


def lowest_of(column: Column, states: States) -> Lowest:
    """The lowest of listed states."""
    mask = column.integers == column.integers.min()
    return Lowest(column[int(mask.argmax())], states[mask])
