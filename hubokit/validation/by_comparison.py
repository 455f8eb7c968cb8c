"""Evidence by one pass of the enumeration engine over all states, where P is not known and tables are too large."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from hubokit.errors import LimitError
from hubokit.model.numbers import format_fraction
from hubokit.spectrum.comparison_result import Comparison, GroundStates
from hubokit.validation.case import Case, States, rows
from hubokit.validation.findings import Findings
from hubokit.validation.judging import LISTED, NO_AUXILIARY_GAP
from hubokit.validation.options import Options
from hubokit.validation.scaling import Judged
from hubokit.validation.uneven import tied_state
from hubokit.validation.verdict import Figure, StateList, Witness

METHOD = "exhaustion"
#: Minimisers listed on each side.
LIMIT = 10_000


def by_comparison(case: Case, options: Options, found: Findings) -> None:
    """Settle every claim by visiting all states of the originals, the auxiliaries eliminated in each block.

    Raises
    ------
    LimitError
        Where the engine refuses, or the model lacks source states (whose energies are not among those
        visited).
    """
    from hubokit.spectrum.comparison import exhaustive_comparison

    if not case.represents_all:
        raise LimitError("variables are merged or fixed, and all states of the source are not visited here")
    scale, shift = case.declared or (None, None)
    whole = exhaustive_comparison(
        case.energy,
        case.model,
        case.auxiliaries,
        scale=scale,
        shift=shift,
        limit=LIMIT,
        executor=options.executor,
        progress=options.progress,
        time=options.time,
    )
    found.take_scale(Judged(whole.scale, whole.shift, whole.scale_from))
    _Verdict(case, found, whole).judge()
    account = f"all 2^{whole.size} states visited, the auxiliaries eliminated in blocks"
    found.evidence.append({"kind": METHOD, "originals": whole.size, "account": account})


class _Verdict:
    """Claims from a comparison."""

    def __init__(self, case: Case, found: Findings, whole: Comparison) -> None:
        self.case, self.found, self.whole = case, found, whole
        self.account = f"all 2^{whole.size} states visited, the auxiliaries eliminated in blocks"

    def judge(self) -> None:
        self._figures()
        self._energies()
        self._ground_energy()
        self._ground_states()
        self._even_multiplicity()
        self._one_to_one()

    def _witness(self, state: States) -> Witness:
        return self.case.projected_witness(state)

    def _figures(self) -> None:
        figures, whole = self.found.figures, self.whole
        figures["source-ground-energy"] = Figure(whole.source.energy)
        figures["source-degeneracy"] = Figure(Fraction(whole.source.count))
        figures["model-ground-energy"] = Figure(whole.projected.energy)
        figures["projection-degeneracy"] = Figure(Fraction(whole.projected.count))
        for name, value in (
            ("auxiliary-gap-everywhere", whole.auxiliary_gap),
            ("auxiliary-gap-at-minimisers", whole.auxiliary_gap_at_minimum),
        ):
            figures[name] = Figure(value) if value is not None else Figure(None, note=NO_AUXILIARY_GAP)
        if len(whole.projected.states) == whole.projected.count:
            self.found.minimisers = whole.projected.states

    def _energies(self) -> None:
        if self.whole.same_energies:
            self.found.prove("energies", METHOD, self.account)
        elif self.whole.worst_violation is not None:
            text = f"P differs from alpha E + beta at {self.whole.violations} of {2**self.whole.size} states"
            witness = self._witness(self.whole.worst_violation.state)
            self.found.refute("energies", METHOD, f"{text}; {self.account}", witness)

    def _ground_energy(self) -> None:
        target, least = self.found.scale * self.whole.source.energy + self.found.shift, self.whole.projected.energy
        text = f"min P = {format_fraction(least)}, alpha min E + beta = {format_fraction(target)}"
        if least == target:
            self.found.prove("ground-energy", METHOD, f"{text}; {self.account}")
        else:
            side = self.whole.projected if least < target else self.whole.source
            self.found.refute("ground-energy", METHOD, text, self._witness(side.states[0]))

    def _ground_states(self) -> None:
        whole = self.whole
        if whole.same_ground_states:
            self.found.prove("ground-states", METHOD, f"{whole.common} on both sides; {self.account}")
            return
        lost, spurious = whole.source.count - whole.common, whole.projected.count - whole.common
        lost_rows = _other(whole.source, whole.projected.energy)
        spurious_rows = _other(whole.projected, whole.source.energy)
        self.found.lost = self._listed(lost_rows, lost)
        self.found.spurious = self._listed(spurious_rows, spurious)
        text = f"{lost} lost, {spurious} spurious of {whole.source.count} ground states"
        first = lost_rows if len(lost_rows) else spurious_rows
        if not len(first):
            self.found.leave_open("ground-states", f"{text}, none among the first {LIMIT}: no state to show for it")
            return
        rival = whole.projected.states[0] if len(lost_rows) else whole.source.states[0]
        self.found.refute("ground-states", METHOD, text, self._witness(first[0]), self._witness(rival))

    def _even_multiplicity(self) -> None:
        if not self.found.proved("ground-states"):
            return
        low, high = self.whole.ground_multiplicities
        if low == high:
            text = f"m = {low} at every one of {self.whole.common} ground states"
            self.found.prove("even-multiplicity", METHOD, f"{text}; {self.account}")
            return
        counts = np.array(self.whole.source.multiplicities, object)
        states = self.whole.source.states
        text = f"m runs from {low} to {high} over {self.whole.common} ground states"
        if counts.min() == counts.max():
            self.found.leave_open(
                "even-multiplicity", f"{text}, not among the first {LIMIT}: no state to show for it"
            )
            return
        most, fewest = states[int(counts.argmax())], states[int(counts.argmin())]
        self.found.refute("even-multiplicity", METHOD, text, self._witness(most), self._witness(fewest))

    def _one_to_one(self) -> None:
        if not self.found.proved("energies"):
            return
        low, high = self.whole.multiplicities
        if (low, high) == (1, 1):
            self.found.prove("one-to-one", METHOD, f"m = 1 at every state; {self.account}")
            return
        text = f"m runs from {low} to {high} over all states"
        counts = np.array(self.whole.source.multiplicities, object)
        state = self.whole.source.states[int(counts.argmax())] if counts.max() > 1 else tied_state(self.case)
        if state is None:
            self.found.leave_open("one-to-one", f"exhaustion: {text}, and no state was found to show for it")
            return
        self.found.refute("one-to-one", METHOD, text, self._witness(state))

    def _listed(self, states: States, count: int) -> StateList:
        shown = [self._witness(state) for state in states[:LISTED]]
        return StateList(
            count,
            rows(self.case.source.labels, self.case.source_states(states[:LISTED])),
            tuple(witness.source_energy for witness in shown),
            tuple(witness.model_energy for witness in shown),
        )


def _other(side: GroundStates, least: Fraction) -> States:
    """States of one side whose energy on the other side is not least."""
    chosen: States = side.states[np.array([energy != least for energy in side.others], bool)]
    return chosen
