"""What is known of the source beside the verdict: its ground level, and whether it is what the design intends."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction, format_fraction

if TYPE_CHECKING:
    from hubokit.validation.verdict import Verdict


@dataclass(frozen=True)
class SourceFigures:
    """Ground level of the source, where the evidence at hand or a short search gives it.

    Parameters
    ----------
    ground_energy : Fraction or None
    degeneracy : int or None
        Number of ground states.
    gap : Fraction or None
        Separation from the next level; None also where there is one level only.
    note : str
        Why figures are missing; empty where they are not.
    """

    ground_energy: Fraction | None
    degeneracy: int | None
    gap: Fraction | None
    note: str = ""


def source_figures(source: Hamiltonian, verdict: Verdict, time: float) -> SourceFigures:
    """Ground level of the source: from the verdict where it has one, else by a search within the allowed time."""
    figures = verdict.figures
    energy, amount = figures.get("source-ground-energy"), figures.get("source-degeneracy")
    if energy is not None and energy.value is not None and amount is not None and amount.value is not None:
        return SourceFigures(energy.value, int(amount.value), verdict.source_gap)
    from hubokit.spectrum.search import ground_states

    try:
        level = ground_states(source, 1, time=time)
    except LimitError as error:
        return SourceFigures(None, None, None, f"not searched: {error}")
    return SourceFigures(level.energy, level.degeneracy, level.gap)


def intent_remarks(intent: Mapping[str, Any], source: Hamiltonian, ground_energy: Fraction | None) -> tuple[str, ...]:
    """What a design was meant for, compared with what was found: one sentence for each thing intended.

    Examples
    --------
    >>> model = Hamiltonian({("a", "b"): 1}, domain="spin")
    >>> intent_remarks({"ground_energy": "-2"}, model, Fraction(-1))
    ('the design intends a ground energy of -2, but it is -1',)
    """
    remarks = []
    if "ground_energy" in intent and ground_energy is not None:
        expected = as_fraction(intent["ground_energy"], "/intent/ground_energy")
        found = "as it is" if expected == ground_energy else f"but it is {format_fraction(ground_energy)}"
        remarks.append(f"the design intends a ground energy of {format_fraction(expected)}, {found}")
    targets = intent.get("target_states")
    if targets is not None and ground_energy is not None:
        if set(targets["variables"]) != set(source.labels):
            remarks.append("the target states of the design are over other variables than its own")
        else:
            rows = [dict(zip(targets["variables"], state, strict=False)) for state in targets["states"]]
            lowest = sum(source.energy(row) == ground_energy for row in rows)
            remarks.append(f"{lowest} of the {len(rows)} target states of the design are ground states")
    return tuple(remarks)
