"""The figures beside the claims: costs, gaps, auxiliary gaps, local minima, thermal evenness.

A figure that would cost a long enumeration is not computed, and says why.
"""

from __future__ import annotations

from fractions import Fraction

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.levels import Level
from hubokit.validation.by_levels import ENUMERABLE, SPARSE_TERMS
from hubokit.validation.case import Case
from hubokit.validation.findings import Findings
from hubokit.validation.options import Options
from hubokit.validation.screen import state_text
from hubokit.validation.thermal import TEMPERATURES, largest_ratio, log_weights
from hubokit.validation.verdict import Evenness, Figure

#: Seconds that a ground level may be predicted to take when only a figure needs it.
PATIENCE = 5.0
#: Most variables of which local minima are counted.
MINIMA_SIZE = 28
#: Ground states listed for a figure.
LISTED = 10_000

NO_LEVEL = "none: one level"


def add_figures(case: Case, options: Options, found: Findings) -> None:
    """Add every figure that is at hand or cheap."""
    _costs(case, found)
    if "source-gap" not in found.figures or "projection-gap" not in found.figures:
        _levels(case, options, found)
    _auxiliary_gaps(case, found)
    _model_gap(found)
    _relative(case, found)
    _local_minima(case, options, found)
    _evenness(case, found)


def _costs(case: Case, found: Findings) -> None:
    costs = case.reduction.costs
    for name, value in (
        ("auxiliaries", costs.auxiliaries),
        ("fields", costs.fields),
        ("couplers", costs.couplers),
        ("couplers-per-variable", costs.couplers_per_variable),
        ("coefficient-ratio", costs.coefficient_ratio),
        ("field-bits", costs.field_bits),
        ("coupler-bits", costs.coupler_bits),
    ):
        found.figures[name] = Figure(Fraction(value))


def _ground(H: Hamiltonian, options: Options) -> Level:
    """A ground level, cheaply.

    Raises
    ------
    LimitError
        It would take long.
    """
    from hubokit.spectrum.search import ground_states

    if H.size > ENUMERABLE and len(H) > SPARSE_TERMS:
        raise LimitError(f"{H.size:,} variables and {len(H):,} terms are beyond enumeration and elimination")
    return ground_states(H, LISTED, executor=options.executor, time=min(options.time, PATIENCE))


def _levels(case: Case, options: Options, found: Findings) -> None:
    """Ground levels of E and P for their gaps, where a claim needed neither."""
    figures = found.figures
    try:
        if "source-gap" not in figures:
            level = _ground(case.source, options)
            figures["source-ground-energy"] = Figure(level.energy)
            figures["source-degeneracy"] = Figure(Fraction(level.degeneracy))
            figures["source-gap"] = _gap(level.gap)
            if found.proved("energies") and level.complete:
                found.minimisers = case.original_states(level.states)[0]
        if found.proved("energies"):
            energy, gap = figures["source-ground-energy"].value, figures["source-gap"].value
            figures["projection-degeneracy"] = figures["source-degeneracy"]
            figures["projection-gap"] = _gap(None if gap is None else found.scale * gap)
            if energy is not None:
                figures["model-ground-energy"] = Figure(found.scale * energy + found.shift)
        elif case.projectable and case.projection.polynomial is not None:
            level = _ground(case.projection.polynomial.with_labels(case.originals), options)
            figures["model-ground-energy"] = Figure(level.energy)
            figures["projection-degeneracy"] = Figure(Fraction(level.degeneracy))
            figures["projection-gap"] = _gap(level.gap)
            if level.complete:
                found.minimisers = level.states
    except LimitError as refusal:
        for name in ("source-gap", "projection-gap"):
            figures.setdefault(name, Figure(None, note=f"not computed: {refusal.message}"))
    figures.setdefault("projection-gap", Figure(None, note="not computed: P is not known as a polynomial"))


def _gap(value: Fraction | None) -> Figure:
    return Figure(None, note=NO_LEVEL) if value is None else Figure(value)


def _auxiliary_gaps(case: Case, found: Findings) -> None:
    figures = found.figures
    at, everywhere = "auxiliary-gap-at-minimisers", "auxiliary-gap-everywhere"
    if everywhere not in figures:
        bound = case.projection.gap_everywhere if case.projectable else None
        figures[everywhere] = _bound(bound) if bound is not None else _unknown("some auxiliaries are undecided")
    if at in figures:
        return
    if found.minimisers is not None and case.projectable:
        try:
            figures[at] = _bound(case.projection.gap_at(found.minimisers))
            return
        except LimitError as refusal:
            figures[at] = _unknown(refusal.message)
    least = figures[everywhere]
    if least.value is not None:
        figures[at] = Figure(least.value, exact=False)
    elif least.note.startswith("none"):
        figures[at] = least
    else:
        figures.setdefault(at, _unknown("the minimisers of P are not listed"))


def _bound(bound: object) -> Figure:
    value, exact = getattr(bound, "value", None), bool(getattr(bound, "exact", False))
    return (
        Figure(value, exact) if value is not None else Figure(None, note="none: no auxiliary setting above the best")
    )


def _unknown(reason: str) -> Figure:
    return Figure(None, note=f"not computed: {reason}")


def _model_gap(found: Findings) -> None:
    """The smaller of the gap of P and the auxiliary gap at the minimisers of P."""
    parts = [found.figures["projection-gap"], found.figures["auxiliary-gap-at-minimisers"]]
    missing = [part for part in parts if part.value is None and not part.note.startswith("none")]
    known = [part for part in parts if part.value is not None]
    if missing:
        found.figures["model-gap"] = missing[0]
    elif not known:
        found.figures["model-gap"] = Figure(None, note=NO_LEVEL)
    else:
        least = min(part.value for part in known if part.value is not None)
        exact = any(part.exact and part.value == least for part in known)
        found.figures["model-gap"] = Figure(least, exact)


def _relative(case: Case, found: Findings) -> None:
    """The auxiliary gaps divided by the largest coefficient, the constant aside."""
    sizes = [max(abs(int(block.weights.min())), abs(int(block.weights.max()))) for block in case.model.blocks]
    if not sizes:
        return
    largest = max(sizes) * case.model.resolution
    for name in ("auxiliary-gap-at-minimisers", "auxiliary-gap-everywhere"):
        figure = found.figures[name]
        if figure.value is not None:
            found.figures[f"relative-{name}"] = Figure(figure.value / largest, figure.exact)


def _local_minima(case: Case, options: Options, found: Findings) -> None:
    from hubokit.spectrum.exhaustive import count_local_minima

    for name, H in (("source-local-minima", case.source), ("model-local-minima", case.model)):
        if H.size > MINIMA_SIZE:
            continue
        try:
            found.figures[name] = Figure(Fraction(count_local_minima(H, time=PATIENCE)))
        except LimitError as refusal:
            found.note(f"{name} not counted: {refusal.message}")


def _evenness(case: Case, found: Findings) -> None:
    """W over the ground states, and a sentence on what unevenness does."""
    gap = found.figures["source-gap"].value
    states = found.minimisers
    if states is None or gap is None or not found.proved("ground-states") or not case.projectable:
        return
    try:
        weights = log_weights(case, states, found.scale * gap)
    except LimitError as refusal:
        found.note(f"thermal evenness not computed: {refusal.message}")
        return
    found.evenness = tuple(
        Evenness(temperature, largest_ratio(row)) for temperature, row in zip(TEMPERATURES, weights, strict=True)
    )
    ratio = found.evenness[0].ratio
    if len(states) < 2:
        return
    if ratio == 1 and found.evenness[-1].ratio == 1:
        found.note(f"the {len(states)} ground states have equal weight at every temperature looked at")
        return
    row = weights[0] if ratio != 1 else weights[-1]
    names = case.source.labels
    heavy, light = (
        state_text(dict(zip(names, map(int, case.source_states(states[[i]])[0]), strict=True)))
        for i in (int(row.argmax()), int(row.argmin()))
    )
    cold = "evens out" if found.proved("even-multiplicity") else "does not even out"
    found.note(
        f"at beta_T * gap = 1 the heaviest ground state ({heavy}) is sampled {ratio:.3g} times as often as "
        f"the lightest ({light}); as the temperature falls this {cold} ({found.evenness[-1].ratio:.3g} at 10)"
    )
