"""Every claim decided from tables of E, P and m over all states."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.numbers import format_fraction
from hubokit.validation.case import Case, rows
from hubokit.validation.findings import Findings
from hubokit.validation.scaling import column_relation
from hubokit.validation.source_level import GroundLevel, source_ground
from hubokit.validation.tables import Tables, comparable, state_rows
from hubokit.validation.verdict import Figure, StateList, Witness

#: States that a verdict lists by name, and minimisers of P that are kept for the figures.
LISTED, MINIMISERS = 64, 10_000


class Judge:
    """Decides the claims of one case from its tables and writes them into the findings."""

    def __init__(self, case: Case, found: Findings, tables: Tables) -> None:
        self.case, self.found, self.tables = case, found, tables
        self.P, self.A = comparable(tables, found.scale, found.shift)
        self.source: GroundLevel = source_ground(case, tables.energy)
        self.minimises_P = self.P.min() == self.P
        self.minimises_E = self._at_level(self.source.energy)

    def _at_level(self, energy: Fraction) -> NDArray[np.bool_]:
        """Rows whose E is `energy`; none where the source reaches it only in states the model lacks."""
        E = self.tables.energy
        number = (energy - E.constant) / E.resolution
        if number.denominator != 1:
            return np.zeros(len(E.integers), bool)
        mask: NDArray[np.bool_] = E.integers == int(number)
        return mask

    def witness(self, number: int) -> Witness:
        """The witness of one row."""
        at = np.array([number])
        state, best = state_rows(self.case, at)[0], self.tables.best(at)[0]
        count = int(self.tables.counts(at)[0])
        return self.case.witness(state, best, self.tables.method, count, self.tables.minimum[number])

    def judge(self) -> None:
        """Settle every claim."""
        self.energies()
        self.ground_energy()
        self.ground_states()
        self.even_multiplicity()
        self.one_to_one()

    def energies(self) -> None:
        """P = alpha E + beta in every row, and no source state without a row."""
        found, by = self.found, self.tables.method
        off = np.flatnonzero(self.P != self.A)
        if len(off):
            worst = int(off[np.argmax(np.abs(self.P[off] - self.A[off]))])
            text = f"P differs from alpha E + beta at {len(off)} of {len(self.P)} states"
            found.refute("energies", by, f"{text}; {self.tables.account}", self.witness(worst))
        elif not self.case.represents_all:
            witness = self.case.bare_witness(self.case.unrepresented_state())
            text = "variables are merged or fixed: the model lacks source states"
            found.refute("energies", by, text, witness)
        else:
            found.prove("energies", by, self.tables.account)

    def ground_energy(self) -> None:
        """min P against alpha * min E + beta."""
        found, by = self.found, self.tables.method
        target = found.scale * self.source.energy + found.shift
        least = self.tables.minimum[int(self.P.argmin())]
        text = f"min P = {format_fraction(least)}, alpha min E + beta = {format_fraction(target)}"
        if least == target:
            found.prove("ground-energy", by, f"{text}; {self.tables.account}")
        elif least < target or not self.minimises_E.any():
            found.refute("ground-energy", by, text, self.witness(int(self.P.argmin())))
        else:
            found.refute("ground-energy", by, text, self.witness(int(self.minimises_E.argmax())))

    def ground_states(self) -> None:
        """The minimisers of P against those of E, states without a row included."""
        found, by = self.found, self.tables.method
        lost = np.flatnonzero(self.minimises_E & ~self.minimises_P)
        spurious = np.flatnonzero(self.minimises_P & ~self.minimises_E)
        unrepresented = self.source.unrepresented
        if not len(lost) and not len(spurious) and not unrepresented:
            count = int(self.minimises_P.sum())
            found.prove("ground-states", by, f"{_states(count)} on both sides; {self.tables.account}")
            return
        lost_count = len(lost) + unrepresented
        found.lost = self._listed(lost, lost_count)
        found.spurious = self._listed(spurious, len(spurious))
        text = f"{lost_count} lost, {len(spurious)} spurious of {_states(self.source.degeneracy)}"
        minimiser = self.witness(int(self.minimises_P.argmax()))
        if len(lost):
            found.refute("ground-states", by, text, self.witness(int(lost[0])), minimiser)
        elif len(spurious):
            inside = np.flatnonzero(self.minimises_E)
            if len(inside):
                rival = self.witness(int(inside[0]))
            else:
                rival = self.case.bare_witness(self.source.unrepresented_states[0])
            found.refute("ground-states", by, text, self.witness(int(spurious[0])), rival)
        else:
            bare = self.case.bare_witness(self.source.unrepresented_states[0])
            found.refute("ground-states", by, text, bare, minimiser)

    def even_multiplicity(self) -> None:
        """One multiplicity over the ground states, where these are right."""
        found, by = self.found, self.tables.method
        if not found.proved("ground-states"):
            return
        numbers = np.flatnonzero(self.minimises_P)
        counts = self.tables.counts(numbers)
        low, high = int(np.argmin(counts)), int(np.argmax(counts))
        if counts[low] == counts[high]:
            text = f"m = {counts[low]} at {_every(len(numbers))}"
            found.prove("even-multiplicity", by, f"{text}; {self.tables.account}")
            return
        text = f"m runs from {counts[low]} to {counts[high]} over {_states(len(numbers))}"
        found.refute("even-multiplicity", by, text, self.witness(int(numbers[high])), self.witness(int(numbers[low])))

    def one_to_one(self) -> None:
        """m = 1 in every row, where P = alpha E + beta."""
        found, by = self.found, self.tables.method
        if not found.proved("energies") or found.settled("one-to-one"):
            return
        counts = self.tables.multiplicity
        if counts is None:
            counts = self.tables.counts(np.arange(len(self.P)))
        tied = np.flatnonzero(counts != 1)
        if len(tied):
            text = f"{len(tied)} of {len(counts)} states have more than one best auxiliary setting"
            found.refute("one-to-one", by, text, self.witness(int(tied[0])))
        else:
            found.prove("one-to-one", by, f"m = 1 at every state; {self.tables.account}")

    def figures(self) -> None:
        """Ground levels and gaps of E and P."""
        figures, source = self.found.figures, self.source
        figures["source-ground-energy"] = Figure(source.energy)
        figures["source-degeneracy"] = Figure(Fraction(source.degeneracy))
        figures["source-gap"] = gap_figure(source.gap)
        least = self.tables.minimum[int(self.P.argmin())]
        figures["model-ground-energy"] = Figure(least)
        figures["projection-degeneracy"] = Figure(Fraction(int(self.minimises_P.sum())))
        above = self.tables.minimum.integers[~self.minimises_P]
        P = self.tables.minimum
        figures["projection-gap"] = gap_figure(
            P.constant + int(above.min()) * P.resolution - least if len(above) else None
        )
        if self.minimises_P.sum() <= MINIMISERS:
            self.found.minimisers = state_rows(self.case, np.flatnonzero(self.minimises_P))
        gaps = self.tables.auxiliary_gap
        if gaps is not None:
            unit = self.case.model.resolution
            for name, chosen in (
                ("auxiliary-gap-at-minimisers", gaps[self.minimises_P]),
                ("auxiliary-gap-everywhere", gaps),
            ):
                positive = chosen[chosen > 0]
                value = int(positive.min()) * unit if len(positive) else None
                figures[name] = Figure(value) if value is not None else Figure(None, note=NO_AUXILIARY_GAP)

    def _listed(self, numbers: NDArray[Any], count: int) -> StateList:
        shown = numbers[:LISTED]
        states = self.case.source_states(state_rows(self.case, shown))
        bare = self.source.unrepresented_states if count > len(numbers) else states[:0]
        bare = bare[: LISTED - len(shown)]
        E, P = self.tables.energy, self.tables.minimum
        return StateList(
            count,
            rows(self.case.source.labels, np.concatenate([states, bare])),
            tuple([E[int(i)] for i in shown] + [self.source.energy] * len(bare)),
            tuple([P[int(i)] for i in shown] + [None] * len(bare)),
        )


NO_AUXILIARY_GAP = "none: no auxiliary setting above the best"


def gap_figure(gap: Fraction | None) -> Figure:
    """A gap, or "none" where there is one level."""
    return Figure(None, note="none: one level") if gap is None else Figure(gap)


def relation_of(tables: Tables) -> Any:
    """The exact relation between P and E over all rows, or None."""
    return column_relation(tables.minimum, tables.energy)


def _states(count: int) -> str:
    return f"{count} ground state{'s' if count != 1 else ''}"


def _every(count: int) -> str:
    return "the one ground state" if count == 1 else f"all {count} ground states"
