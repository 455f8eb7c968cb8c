"""Models, reductions, levels and verdicts as sections of plain text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from hubokit.cli.summary import method_rows, terms_by_locality
from hubokit.cli.text import count, fields, folded, number, printable, table
from hubokit.validation.screen import describe, state_text

if TYPE_CHECKING:
    import numpy as np
    import numpy.typing as npt

    from hubokit.model.hamiltonian import Hamiltonian
    from hubokit.model.trail import Trail
    from hubokit.reduction.result import Reduction
    from hubokit.spectrum.levels import Density, Level
    from hubokit.validation.verdict import Claim, StateList, Verdict

Pairs = list[tuple[str, str]]
KINDS = {1: "field", 2: "coupler", 3: "three-body term", 4: "four-body term", 5: "five-body term", 6: "six-body term"}
SHOWN = 3
SHOWN_ROWS = 20
LONG_REASON = 60


def model_fields(model: Hamiltonian, auxiliaries: int = 0) -> Pairs:
    """What a model is, as named values."""
    added = f", {count(auxiliaries, 'auxiliary', 'auxiliaries')} among them" if auxiliaries else ""
    sizes = [
        count(amount, KINDS.get(size, f"{size}-body term"))
        for size, amount in sorted(terms_by_locality(model).items())
    ]
    return [
        ("variables", f"{model.size} {model.domain}{added}"),
        ("locality", str(model.locality)),
        ("terms", f"{len(model)}" + (f": {', '.join(sizes)}" if sizes else "")),
    ]


def coefficient_fields(model: Hamiltonian) -> Pairs:
    """Constant, resolution, convention and digest of a model."""
    return [
        ("constant", number(model.constant)),
        ("resolution", number(model.resolution)),
        ("convention", rule(model)),
        ("digest", model.digest),
    ]


def rule(model: Hamiltonian) -> str:
    """How spins and booleans map, as a formula."""
    return "s = 1 - 2x" if model.convention == "1-2x" else "s = 2x - 1"


def reduction_text(reduction: Reduction) -> str:
    """Method of every locality, and what the reduction costs."""
    costs = reduction.costs
    asked = [("keeps", reduction.keep)] if reduction.keep else []
    spent = [
        ("auxiliaries", str(costs.auxiliaries)),
        ("couplers", f"{costs.couplers}, at most {costs.couplers_per_variable} at one variable"),
        ("fields", str(costs.fields)),
        (
            "coefficients",
            f"largest / smallest {number(costs.coefficient_ratio)}, "
            f"bits {costs.field_bits} (fields) and {costs.coupler_bits} (couplers)",
        ),
    ]
    return "\n".join(part for part in (fields([*asked, *spent]), method_table(reduction)) if part)


def method_table(reduction: Reduction) -> str:
    """The methods that reduced the terms of every locality."""
    rows = [[size, str(terms), str(added), method] for size, terms, method, added in method_rows(reduction)]
    return table(["locality", "terms", "auxiliaries", "reduced by"], rows, align="rrr") if rows else ""


def trail_text(trail: Trail) -> str:
    """The steps from the source to the model at hand, each with its parameters."""
    parts = []
    for step in trail.steps:
        said = {"scale": number(step.scale), "shift": number(step.shift), **step.parameters}
        parts.append("\n".join([f"  {printable(step.name)}", *tree(said, 4)]))
    return "\n".join(parts)


def tree(value: object, indent: int) -> list[str]:
    """Nested values as indented lines: one a line, rows of a list with a dash.

    Examples
    --------
    >>> print("\\n".join(tree({"keep": "energies", "plans": [{"name": "a", "couplers": 3}], "none": []}, 2)))
      keep: energies
      plans:
        - name a, couplers 3
    """
    room = " " * indent
    if isinstance(value, Mapping):
        lines = []
        for name, part in value.items():
            if isinstance(part, (Mapping, list, tuple)):
                inner = tree(part, indent + 2)
                lines += [f"{room}{printable(str(name))}:", *inner] if inner else []
            else:
                lines += folded(f"{name}: {part}", indent)
        return lines
    rows = value if isinstance(value, (list, tuple)) else [value]
    lines = [line for row in rows[:SHOWN_ROWS] for line in folded(f"- {row_text(row)}", indent)]
    return lines + ([f"{room}- and {len(rows) - SHOWN_ROWS} more"] if len(rows) > SHOWN_ROWS else [])


def row_text(row: object) -> str:
    """A value in one line: mappings as ``name value``, lists with blanks."""
    if isinstance(row, Mapping):
        return ", ".join(f"{name} {row_text(part)}" for name, part in row.items())
    if isinstance(row, (list, tuple)):
        return " ".join(row_text(part) for part in row)
    return str(row)


def level_table(levels: Sequence[Level]) -> str:
    """Energies, lowest first."""
    rows = [[number(level.energy), str(level.degeneracy), number(level.gap), level.method] for level in levels]
    return table(["energy", "states", "gap to the next", "found by"], rows, align="rrr")


def density_table(density: Density) -> str:
    """Every energy with its number of states."""
    rows = [[number(e), str(c)] for e, c in zip(density.energies, density.counts, strict=True)]
    return table(["energy", "states"], rows, align="rr")


def state_signs(states: npt.NDArray[np.int8], domain: str) -> list[str]:
    """States as strings with one character a variable: + and - for spins, 0 and 1 for booleans.

    Examples
    --------
    >>> import numpy as np
    >>> state_signs(np.array([[1, -1], [1, 1]], np.int8), "spin")
    ['+-', '++']
    """
    signs = {1: "+", -1: "-"} if domain == "spin" else {0: "0", 1: "1"}
    return ["".join(signs[int(value)] for value in state) for state in states]


def state_lines(model: Hamiltonian, level: Level) -> str:
    """The listed states of a level, one a line, and the order of the variables."""
    shown = [f"  {line}" for line in state_signs(level.states, model.domain)]
    left = level.degeneracy - len(shown)
    if left:
        shown.append(f"  and {count(left, 'more state')}; --limit lists more")
    return "\n".join([*shown, "", fields([("variables", " ".join(model.labels))])])


def claim_table(verdict: Verdict) -> str:
    """Claim by claim, an asterisk before those asked for."""
    rows = [
        [("* " if name in verdict.asked else "  ") + name, claim.status, evidence_text(claim)]
        for name, claim in verdict.claims.items()
    ]
    return table(["  claim", "status", "evidence"], rows)


def evidence_text(claim: Claim) -> str:
    """Method and detail of a claim in one sentence."""
    return ": ".join(part for part in (claim.method, claim.detail) if part)


def verdict_text(verdict: Verdict) -> str:
    """Claims, findings and figures on one screen."""
    scale = f"alpha = {number(verdict.scale)}, beta = {number(verdict.shift)} ({verdict.scale_from})"
    parts = [claim_table(verdict), "  * asked for", "", fields([("judged with", scale), *findings(verdict)])]
    figures = figure_fields(verdict)
    if figures:
        parts += ["", fields(figures, 48)]
    if verdict.notes:
        parts += ["", fields([("note", note) for note in verdict.notes])]
    return "\n".join(parts)


def findings(verdict: Verdict) -> Pairs:
    """Witnesses, lost and spurious ground states, inversions, the difference polynomial."""
    found: Pairs = []
    seen: set[str] = set()
    for claim in verdict.claims.values():
        for witness in (claim.witness, claim.rival):
            if witness is not None and (text := describe(witness)) not in seen and len(seen) < SHOWN:
                seen.add(text)
                found.append(("witness", text))
    if verdict.difference:
        found.append(("P - alpha E - beta", " ".join(verdict.difference)))
    found += state_findings("lost ground states", verdict.lost)
    found += state_findings("spurious ground states", verdict.spurious)
    if verdict.inversions is not None and verdict.inversions.count:
        below = number(verdict.inversions.below)
        found.append(("inversions", f"{verdict.inversions.count} among states with E at most {below}"))
    return found


def state_findings(title: str, listed: StateList | None) -> Pairs:
    """States that a verdict names, the first of them written out."""
    if listed is None or listed.count == 0:
        return []
    amount = "not counted" if listed.count is None else str(listed.count)
    shown = "; ".join(state_text(state) for state in listed.states[:SHOWN])
    return [(title, f"{amount}: {shown}" + ("; ..." if len(listed.states) > SHOWN else ""))]


def figure_fields(verdict: Verdict) -> Pairs:
    """The figures beside the claims."""
    from hubokit.validation.verdict import FIGURES

    named: Pairs = []
    said: dict[str, str] = {}
    for name, title in FIGURES.items():
        if name not in verdict.figures:
            continue
        text = str(verdict.figures[name])
        known = said.setdefault(text, title)
        # A reason that takes several lines is given once.
        named.append((title, f"as for the {known}" if known != title and len(text) > LONG_REASON else text))
    return named + [
        (f"thermal evenness at beta * gap = {step.beta_gap:g}", f"{step.ratio:.4g}") for step in verdict.evenness
    ]


def claim_line(verdict: Verdict) -> str:
    """The statuses in one line."""
    return ", ".join(f"{name} {claim.status}" for name, claim in verdict.claims.items())
