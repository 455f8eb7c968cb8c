"""Evidence from ground levels: elimination on sparse models, the enumeration engine where all states are too many to
tabulate.

Where P is known as a polynomial its ground level stands beside that of E. Both sets of minimisers are
compared without listing them: with A the minimisers of P and B those of E, the sum P + E has the least value
min P + min E exactly when A and B meet, and then as many minimisers as their intersection.

Where P is not known, the ground states of the whole model F, listed, give the minimisers of P and their
multiplicities.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.model.states import from_bits, to_bits
from hubokit.spectrum.levels import Level
from hubokit.validation.case import Case, States, rows
from hubokit.validation.findings import Findings
from hubokit.validation.judging import LISTED, gap_figure
from hubokit.validation.options import Options
from hubokit.validation.probing import probe
from hubokit.validation.verdict import Figure, StateList, Witness

Ground = Callable[[Hamiltonian], Level]

#: Variables beyond which only sparse models have their ground level sought, and the terms of those at most.
ENUMERABLE, SPARSE_TERMS = 62, 20_000
#: Ground states that are listed to compare two levels state by state.
COMPARED = 100_000


def by_elimination(case: Case, options: Options, found: Findings) -> None:
    """Ground levels by bucket elimination; what is too wide for it stays open with the width."""
    from hubokit.spectrum.elimination import ground_states, predicted_cost

    def ground(H: Hamiltonian) -> Level:
        return ground_states(H, COMPARED, progress=options.progress, time=options.time)

    _by_levels(case, options, found, ground, "elimination", lambda H: predicted_cost(H).seconds)


def by_enumeration(case: Case, options: Options, found: Findings, refusal: str) -> None:
    """Ground levels by visiting all states of E and of P (or F), or by whatever is cheaper where all is allowed.

    Raises
    ------
    LimitError
        Asked for by name, and too much; or ground levels would settle none of the claims asked for.
    """
    from hubokit.spectrum.search import ground_states

    way = "auto" if options.evidence == "auto" else "exhaustion"

    def ground(H: Hamiltonian) -> Level:
        return ground_states(
            H, COMPARED, way, executor=options.executor, progress=options.progress, time=options.time
        )

    if options.named and set(options.asked) <= {"quadratic", "energies", "one-to-one"}:
        raise LimitError(refusal)
    for name in options.asked:
        if name in ("energies", "one-to-one"):
            found.leave_open(name, f"exhaustion: {refusal}")
    _by_levels(case, options, found, ground, "exhaustion", lambda H: H.size)


def _by_levels(
    case: Case, options: Options, found: Findings, ground: Ground, method: str, cost: Callable[[Hamiltonian], float]
) -> None:
    polynomial = case.projection.polynomial if found.used("projection") else None
    ready: dict[str, Level] = {}
    try:
        for H in (case.source, case.model if polynomial is None else polynomial):
            if H.size > ENUMERABLE and len(H) > SPARSE_TERMS:
                raise LimitError(f"{H.size:,} variables and {len(H):,} terms are beyond enumeration and elimination")
        if options.named and cost(case.model) >= cost(case.source):
            ready["model"] = ground(case.model)  # the costlier one first: what is refused is refused before any work
        source = found.source_level = ground(case.source)
        if polynomial is None:
            probe(case, found, method, case.original_states(source.states[:64]))
            levels = Levels(case, found, ground, method, source, ready.get("model") or ground(case.model))
            levels.judge_model()
        else:
            levels = Levels(case, found, ground, method, source, ground(polynomial.with_labels(case.originals)))
            levels.judge_polynomial(polynomial.with_labels(case.originals))
    except LimitError as refusal:
        if options.named:
            raise
        for name in options.asked:
            found.leave_open(name, f"{method}: {refusal}")
        return
    found.evidence.append({"kind": "ground levels", "method": method, "account": f"ground levels by {source.method}"})


class Levels:
    """The ground level of E over all source states beside that of P, or of F where P is not known."""

    def __init__(
        self, case: Case, found: Findings, ground: Ground, method: str, source: Level, reduced: Level
    ) -> None:
        self.case, self.found, self.ground = case, found, ground
        self.source, self.reduced = source, reduced
        eliminated = any(level.method.startswith("elimination") for level in (source, reduced))
        self.method = "elimination" if eliminated else method

    def judge_polynomial(self, polynomial: Hamiltonian) -> None:
        """Settle what follows from the ground levels of E and P."""
        self._source_figures()
        P, E, figures = self.reduced, self.source, self.found.figures
        figures["projection-degeneracy"] = Figure(Fraction(P.degeneracy))
        figures["projection-gap"] = gap_figure(P.gap)
        if P.complete:
            self.found.minimisers = P.states
        self._ground_energy(None)
        if not self.found.settled("ground-states"):
            both = self.ground(polynomial + self.case.energy)
            meet = both.degeneracy if both.energy == P.energy + E.energy else 0
            self._ground_states(P.states, P.degeneracy, meet, polynomial)
        if self.found.proved("ground-states") and not self.found.settled("even-multiplicity"):
            self._even_by_projection(P)

    def judge_model(self) -> None:
        """Settle what follows from the ground levels of E and F, every ground state of F listed."""
        self._source_figures()
        F, E = self.reduced, self.source
        model, originals = self.case.model, self.case.originals
        columns = [model.positions[label] for label in originals]
        self._ground_energy(F.states[0])
        if not F.complete or not E.complete:
            cut = max(F.degeneracy, E.degeneracy)
            reason = f"{self.method}: {cut} ground states with their auxiliaries, more than {COMPARED}"
            self.found.leave_open("ground-states", reason)
            self.found.leave_open("even-multiplicity", reason)
            return
        bits, counts = np.unique(to_bits(F.states[:, columns], model.domain), axis=0, return_counts=True)
        minimisers = from_bits(bits, model.domain)
        self.found.figures["projection-degeneracy"] = Figure(Fraction(len(minimisers)))
        self.found.minimisers = minimisers
        known = {row.tobytes() for row in self.case.source_states(minimisers)}
        meet = sum(row.tobytes() in known for row in E.states)
        self._ground_states(minimisers, len(minimisers), meet, None)
        if self.found.proved("ground-states"):
            self._even(minimisers, counts)

    def _source_figures(self) -> None:
        figures = self.found.figures
        figures["source-ground-energy"] = Figure(self.source.energy)
        figures["source-degeneracy"] = Figure(Fraction(self.source.degeneracy))
        figures["source-gap"] = gap_figure(self.source.gap)
        figures["model-ground-energy"] = Figure(self.reduced.energy)

    def _ground_energy(self, model_state: States | None) -> None:
        """min P against alpha min E + beta; `model_state` is a ground state of F where that is what is known."""
        found = self.found
        if not found.scale_known:
            found.leave_open("ground-energy", f"{self.method}: scale and shift are neither declared nor found")
            return
        target, least = found.scale * self.source.energy + found.shift, self.reduced.energy
        text = f"min P = {format_fraction(least)}, alpha min E + beta = {format_fraction(target)}"
        if least == target:
            found.prove("ground-energy", self.method, text)
        elif found.settled("ground-energy"):
            return
        elif least < target:
            found.refute("ground-energy", self.method, text, self._least_witness(model_state))
        else:
            found.refute("ground-energy", self.method, text, self._witness_of(self.source.states[0]))

    def _ground_states(self, minimisers: States, degeneracy: int, meet: int, polynomial: Hamiltonian | None) -> None:
        found, E = self.found, self.source
        lost, spurious = E.degeneracy - meet, degeneracy - meet
        if not lost and not spurious:
            found.prove("ground-states", self.method, f"{meet} on both sides, ground levels by {E.method}")
            return
        mine = self.case.source_states(minimisers)
        lost_states = _without(E.states, mine) if lost else E.states[:0]
        spurious_states = minimisers[_absent(mine, E.states)] if spurious else minimisers[:0]
        if len(minimisers) < degeneracy and lost:
            lost_states = self._confirmed_lost(lost_states)
        if not E.complete and spurious:
            spurious_states = self._confirmed_spurious(spurious_states)
        if not len(lost_states) and not len(spurious_states) and polynomial is not None:
            lost_states, spurious_states = self._sought(polynomial, lost, spurious)
        if not len(lost_states) and not len(spurious_states):
            found.leave_open(
                "ground-states", f"{self.method}: {lost} lost and {spurious} spurious, none of them listed"
            )
            return
        found.lost = self._listed(lost_states, lost)
        found.spurious = self._listed(self.case.source_states(spurious_states), spurious)
        text = f"{lost} lost, {spurious} spurious of {E.degeneracy} ground states"
        if len(lost_states):
            witness, rival = self._witness_of(lost_states[0]), self._original_witness(minimisers[0])
        else:
            witness, rival = self._original_witness(spurious_states[0]), self._witness_of(E.states[0])
        found.refute("ground-states", self.method, text, witness, rival)

    def _confirmed_lost(self, states: States) -> States:
        """Of listed ground states of E those with P above its least value, where P's own list was cut."""
        originals, known = self.case.original_states(states)
        high = ~known
        if known.any():
            minimum, _, _ = self.case.projection.minimum(originals[known])
            floor = (self.reduced.energy - self.case.model.constant) / self.case.model.resolution
            high[known] = np.array([int(value) > floor for value in minimum])
        return _chosen(states, high)

    def _confirmed_spurious(self, states: States) -> States:
        """Of listed minimisers of P those above the ground energy of E, where E's own list was cut."""
        E = self.case.energy
        floor = (self.source.energy - E.constant) / E.resolution
        high = np.array([int(value) > floor for value in E.integer_energies(states)], bool)
        return _chosen(states, high)

    def _sought(self, polynomial: Hamiltonian, lost: int, spurious: int) -> tuple[States, States]:
        """One lost, else one spurious state, sought where the cut lists held none."""
        E, none = self.case.energy, np.zeros((0, len(self.case.originals)), np.int8)
        if lost:
            steep = 1 + 2 * polynomial.weight_bound * polynomial.resolution / E.resolution
            state = self.ground(steep * E - polynomial).states[:1]
            if E.energy(state) == self.source.energy and polynomial.energy(state) > self.reduced.energy:
                return self.case.source_states(state), none
        if spurious:
            steep = 1 + 2 * E.weight_bound * E.resolution / polynomial.resolution
            return none[:, : self.case.source.size], self.ground(steep * polynomial - E).states[:1]
        return none[:, : self.case.source.size], none

    def _even_by_projection(self, level: Level) -> None:
        if not level.complete:
            text = f"{self.method}: {level.degeneracy} ground states, more than {COMPARED}, and m is not uniform"
            self.found.leave_open("even-multiplicity", text)
            return
        self._even(level.states, np.asarray(self.case.projection.multiplicities(level.states), object))

    def _even(self, minimisers: States, counts: NDArray[Any]) -> None:
        low, high = int(np.argmin(counts)), int(np.argmax(counts))
        if counts[low] == counts[high]:
            text = f"m = {counts[low]} at every one of {len(counts)} ground states"
            self.found.prove("even-multiplicity", self.method, text)
            return
        text = f"m runs from {counts[low]} to {counts[high]} over {len(counts)} ground states"
        witness, rival = self._original_witness(minimisers[high]), self._original_witness(minimisers[low])
        self.found.refute("even-multiplicity", self.method, text, witness, rival)

    def _least_witness(self, model_state: States | None) -> Witness:
        if model_state is None:
            return self._original_witness(self.reduced.states[0])
        place = self.case.model.positions
        x = model_state[[place[label] for label in self.case.originals]]
        a = model_state[[place[label] for label in self.case.auxiliaries]]
        return self.case.witness(x, a, self.method, None, self.reduced.energy)

    def _witness_of(self, source_state: States) -> Witness:
        originals, known = self.case.original_states(source_state[None, :])
        return self._original_witness(originals[0]) if known[0] else self.case.bare_witness(source_state)

    def _original_witness(self, original_state: States) -> Witness:
        return self.case.projected_witness(original_state)

    def _listed(self, states: States, count: int) -> StateList:
        shown = states[:LISTED]
        witnesses = [self._witness_of(state) for state in shown]
        return StateList(
            count,
            rows(self.case.source.labels, shown),
            tuple(witness.source_energy for witness in witnesses),
            tuple(witness.model_energy for witness in witnesses),
        )


def _absent(states: States, others: States) -> NDArray[np.bool_]:
    known = {row.tobytes() for row in others}
    return np.array([row.tobytes() not in known for row in states], bool)


def _without(states: States, others: States) -> States:
    return _chosen(states, _absent(states, others))


def _chosen(states: States, mask: NDArray[np.bool_]) -> States:
    kept: States = states[mask]
    return kept
