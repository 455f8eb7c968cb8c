"""A verdict as one readable screen of plain ASCII."""

from __future__ import annotations

from collections.abc import Mapping
from textwrap import wrap
from typing import TYPE_CHECKING

from hubokit.model.numbers import format_fraction
from hubokit.validation.figure_names import FIGURES

if TYPE_CHECKING:
    from hubokit.validation.verdict import Claim, StateList, Verdict, Witness

WIDTH = 100
SHOWN_VARIABLES = 24
SHOWN_STATES = 8


def screen(verdict: Verdict) -> str:
    """The lines of `str(verdict)`: claims, scale, findings, figures, notes.

    Returns
    -------
    str
        No line is wider than about 100 characters, none ends in a blank.
    """
    lines = [*_claim_lines(verdict), "", _scale_line(verdict)]
    lines += _finding_lines(verdict)
    figures = _figure_lines(verdict)
    if figures:
        lines += ["", *figures]
    for note in verdict.notes:
        lines += wrap(note, WIDTH, subsequent_indent="  ")
    return "\n".join(line.rstrip() for line in lines)


def _claim_lines(verdict: Verdict) -> list[str]:
    lines: list[str] = []
    shown: list[Witness | None] = []
    for name, claim in verdict.claims.items():
        asked = "*" if name in verdict.asked else " "
        method = f"by {claim.method}" if claim.method else ""
        head = f"{asked} {name:<17} {claim.status:<8} {method}"
        lines.append(head)
        lines += wrap(claim.detail, WIDTH, initial_indent=" " * 4, subsequent_indent=" " * 4)
        if claim.witness not in shown:
            lines += _witness_lines(claim)
            shown.append(claim.witness)
    lines.append("  (* asked for)")
    return lines


def _witness_lines(claim: Claim) -> list[str]:
    lines = []
    if claim.witness is not None:
        lines += _wrapped(f"witness: {describe(claim.witness)}")
    if claim.rival is not None:
        lines += _wrapped(f"beside: {describe(claim.rival)}")
    return lines


def _wrapped(text: str) -> list[str]:
    return wrap(text, WIDTH, initial_indent=" " * 4, subsequent_indent=" " * 6)


def describe(witness: Witness) -> str:
    """A witness in one sentence, long states cut."""
    text = f"x: {state_text(witness.state)}"
    if witness.auxiliaries:
        text += f"; a: {state_text(witness.auxiliaries)}"
    text += f"; E = {format_fraction(witness.source_energy)}"
    if witness.model_energy is None:
        return text + ", P infinite (the model has no such state)"
    text += f", P = {format_fraction(witness.model_energy)}"
    if witness.minimum_by:
        text += f" (minimum by {witness.minimum_by})"
    if witness.multiplicity is not None:
        text += f", m = {witness.multiplicity}"
    return text


def state_text(state: Mapping[str, int]) -> str:
    """A state as ``a=+1 b=-1 ...``, cut after the first variables."""
    spin = any(value < 0 for value in state.values()) or (bool(state) and 0 not in state.values())
    shown = [
        f"{label}={value:+d}" if spin else f"{label}={value}"
        for label, value in list(state.items())[:SHOWN_VARIABLES]
    ]
    if len(state) > SHOWN_VARIABLES:
        shown.append(f"... ({len(state)} variables)")
    return " ".join(shown)


def _scale_line(verdict: Verdict) -> str:
    origin = {
        "declared": "declared",
        "found": "found",
        "default": "default: nothing declared, none found",
    }[verdict.scale_from]
    scale, shift = format_fraction(verdict.scale), format_fraction(verdict.shift)
    return f"judged with alpha = {scale}, beta = {shift} ({origin})"


def _finding_lines(verdict: Verdict) -> list[str]:
    lines: list[str] = []
    if verdict.difference:
        lines += wrap(f"P - (alpha E + beta) = {' '.join(verdict.difference)}", WIDTH, subsequent_indent="  ")
    lines += _list_lines("lost ground states", verdict.lost)
    lines += _list_lines("spurious ground states", verdict.spurious)
    if verdict.inversions is not None and verdict.inversions.count:
        below = format_fraction(verdict.inversions.below)
        lines.append(f"order inversions among states with E <= {below}: {verdict.inversions.count}")
        for pair in verdict.inversions.pairs[:SHOWN_STATES]:
            lines += _wrapped(f"{describe(pair.lower)}  against  {describe(pair.upper)}")
    return lines


def _list_lines(title: str, states: StateList | None) -> list[str]:
    if states is None or states.count == 0:
        return []
    shown = states.states[:SHOWN_STATES]
    lines = [f"{title}: {'not counted' if states.count is None else states.count}"]
    for state, source, model in zip(shown, states.source_energies, states.model_energies, strict=False):
        level = "infinite" if model is None else format_fraction(model)
        lines += _wrapped(f"{state_text(state)}  E = {format_fraction(source)}, P = {level}")
    if states.count is None or states.count > len(shown):
        lines.append("    ...")
    return lines


def _figure_lines(verdict: Verdict) -> list[str]:
    lines = [f"{FIGURES[name]:<46} {verdict.figures[name]}" for name in FIGURES if name in verdict.figures]
    lines += [
        f"{'thermal evenness at beta*gap = ' + format(step.beta_gap, 'g'):<46} {step.ratio:.4g}"
        for step in verdict.evenness
    ]
    return lines
