"""What lies around target states, as text and as parts of a summary document: the model alone, or source and reduced
model side by side."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import Any

from hubokit.cli.progress import bar
from hubokit.cli.states_file import read_states
from hubokit.cli.text import count, fields, listing, number, section, table
from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.model.states import States
from hubokit.preparation.side_by_side import Asked, Measured, measured, measured_on_minimum
from hubokit.reduction.result import Reduction
from hubokit.validation.traps import Traps, traps

Parts = dict[str, Any]
Sides = list[tuple[str, Measured]]
FULL = "without --radius all states are looked at; --radius R looks only at those within R flips of a target"
TRAPS_SHOWN = 3
SPURIOUS_SHOWN = 5


def around(thing: Hamiltonian | Reduction, file: Path, asked: Asked) -> tuple[Parts, list[str]]:
    """Parts of the summary document and sections of text."""
    source = thing.source if isinstance(thing, Reduction) else thing
    targets = read_states(file, source.labels, source.domain)
    if len(targets) == 0:
        raise InputError("no states in the file; one state a line below the names", file=str(file))
    try:
        sides = _sides(thing, targets, asked)
    except LimitError as refusal:
        raise (LimitError(f"{refusal.message} ({FULL})") if asked.radius is None else refusal) from None
    parts: Parts = {
        "figures": _figures(sides),
        "shells": [row for name, side in sides for row in _shells(name, side)],
    }
    parts["notes"] = [f"{name}: {side.merit}" if len(sides) > 1 else str(side.merit) for name, side in sides]
    shown = [section(f"AROUND  {file}", _visits(sides), "", by_distance(sides)), section("MERIT", merits(sides))]
    shown += [section(f"AT OR BELOW  {name}", text) for name, side in sides if (text := spurious_text(side))]
    if isinstance(thing, Reduction):
        try:
            trapped = traps(thing, targets, asked.shown)
        except LimitError as refusal:
            parts["notes"].append(f"local minima near the targets were not looked for: {refusal}")
            shown.append(section("TRAPS", fields([("not looked for", str(refusal))])))
        else:
            parts["figures"].update(trap_figures(trapped))
            shown.append(section("TRAPS", trap_text(trapped)))
    return parts, shown


def _sides(thing: Hamiltonian | Reduction, targets: States, asked: Asked) -> Sides:
    with bar("walking") as progress:
        if not isinstance(thing, Reduction):
            return [("model", measured(thing, targets, asked, progress))]
        source = measured(thing.source, targets, asked, progress)
        return [("source", source), ("reduced model", measured_on_minimum(thing, targets, asked, progress))]


def _visits(sides: Sides) -> str:
    lines = []
    for name, side in sides:
        look = side.look
        said = (
            f"{count(look.radius, 'flip')} around {count(len(look.balls), 'state')}: {look.states:,} states visited, "
            f"highest target {number(look.highest)}"
        )
        lines.append((name, said + (" (on P, the minimum over auxiliaries)" if name == "reduced model" else "")))
    return fields(lines)


def by_distance(sides: Sides) -> str:
    """Lowest energy and number of states at or below the highest target for every distance, side by side."""
    marks = [""] if len(sides) == 1 else [" E", " P"]
    header = ["distance", "states"]
    for mark in marks:
        header += [f"lowest{mark}", f"at or below{mark}"]
    rows = []
    for distance in range(max(side.look.radius for _, side in sides) + 1):
        cells = [_shell_cells(side, distance) for _, side in sides]
        states = list(dict.fromkeys(cell[0] for cell in cells))
        rows.append([str(distance), " / ".join(states), *(text for cell in cells for text in cell[1:])])
    return table(header, rows, align="r" * len(header))


def _shell_cells(side: Measured, distance: int) -> tuple[str, str, str]:
    if distance > side.look.radius:
        return "none", "none", "-"
    states, lowest, below = side.shell(distance)
    return f"{states:,}", number(lowest), f"{below:,}" if distance else "-"


def merits(sides: Sides) -> str:
    """Bandwidth, distance and ratio, one column a model."""
    columns = [_merit_cells(side) for _, side in sides]
    rows = [[name, *cells] for name, *cells in zip(MERITS, *columns, strict=True)]
    header = ["figure", *(name for name, _ in sides)]
    named = [(name, "B/D undefined", why) for name, side in sides if (why := _undefined(side))]
    named += [(name, "over", side.merit.method) for name, side in sides]
    said: list[tuple[str, str]] = []
    for what in ("B/D undefined", "over"):
        texts = [(name, text) for name, kind, text in named if kind == what]
        alike = len(texts) == len(sides) and len({text for _, text in texts}) == 1
        said += [(what, texts[0][1])] if alike else [(what, f"{name}: {text}") for name, text in texts]
    return "\n".join([table(header, rows), "", fields(said)])


def _undefined(side: Measured) -> str:
    """Why the ratio is undefined; empty where it is not."""
    merit = side.merit
    if merit.ratio is not None:
        return ""
    if merit.distance is None:
        return "there is no other state"
    return f"a state lies {'at' if merit.distance == 0 else 'below'} the highest target"


MERITS = ("lowest target", "highest target", "lowest other state", "bandwidth B", "distance D", "ratio B/D")


def _merit_cells(side: Measured) -> list[str]:
    merit = side.merit
    most, least = ("", "") if merit.exact else ("at most ", "at least ")
    distance = "none" if merit.distance is None else f"{most}{number(merit.distance)}"
    if merit.ratio is not None:
        ratio = f"{least}{number(merit.ratio)}" + (
            "" if merit.ratio.denominator == 1 else f" = {float(merit.ratio):.4g}"
        )
    else:
        ratio = "undefined"
    return [
        number(merit.lowest), number(merit.highest), f"{number(merit.lowest_other)}", number(merit.bandwidth),
        distance, ratio,
    ]  # fmt: skip


def _figures(sides: Sides) -> Parts:
    """Figures of the model at hand under plain names, those of its source under ``source-``."""
    figures: Parts = {}
    for name, side in sides:
        mark = "source-" if name == "source" else ""
        look, merit = side.look, side.merit
        figures |= {
            f"{mark}radius": look.radius,
            f"{mark}targets": len(look.balls),
            f"{mark}states": str(look.states),
            f"{mark}highest-target-energy": format_fraction(merit.highest),
            f"{mark}lowest-other-energy": _text(merit.lowest_other),
            f"{mark}bandwidth": format_fraction(merit.bandwidth),
            f"{mark}distance": _text(merit.distance),
            f"{mark}bandwidth-ratio": _text(merit.ratio),
            f"{mark}bandwidth-over-all-states": merit.exact,
            f"{mark}at-or-below-highest-target": str(look.at_or_below),
        }
    return figures


def _shells(name: str, side: Measured) -> list[Parts]:
    rows = []
    for distance in range(side.look.radius + 1):
        states, lowest, below = side.shell(distance)
        rows.append(
            {
                "of": "source" if name == "source" else "model",
                "distance": distance,
                "states": str(states),
                "lowest": _text(lowest),
                "at_or_below": str(below),
                "spurious": [
                    {"energy": format_fraction(energy), "target": target, "flips": list(flips)}
                    for energy, target, flips in side.spurious([distance])
                ],
            }
        )
    return rows


def _text(value: Fraction | None) -> str | None:
    return None if value is None else format_fraction(value)


def spurious_text(side: Measured) -> str:
    """The lowest states that lie at or below the highest target without being targets."""
    found = side.spurious(range(1, side.look.radius + 1))
    rows = [[number(energy), str(target), listing(flips, 6)] for energy, target, flips in found[:SPURIOUS_SHOWN]]
    if not rows:
        return ""
    more = side.look.at_or_below - len(rows)
    left = [f"  and {count(more, 'more state')}; --json lists them up to --limit"] if more else []
    return "\n".join([table(["energy", "target", "flips away from it"], rows, align="rr"), *left])


def trap_figures(found: Traps) -> Parts:
    """Traps as figures of a summary document."""
    return {
        "new-local-minima": str(len(found.found)),
        "new-local-minima-through-auxiliaries": str(found.through_auxiliaries),
        "new-local-minima-radius": found.radius,
        "least-rise-of-a-new-local-minimum": _text(found.found[0].minimum.rise) if found.found else None,
        "targets-not-local-minima": len(found.unstable),
    }


def trap_text(found: Traps) -> str:
    """Traps as named values."""
    lines = [("new minima", _trap_sentence(found))]
    for trap in found.found[:TRAPS_SHOWN]:
        flips = listing(trap.minimum.flips, 6)
        lines.append(("trap", f"{number(trap.minimum.rise)} above target {trap.target + 1}: flips of {flips}"))
    if len(found.found) > TRAPS_SHOWN:
        lines.append(("", f"and {len(found.found) - TRAPS_SHOWN} more, none lower"))
    if found.unstable:
        named = listing([str(place + 1) for place in found.unstable])
        lines.append(("no minimum", f"a flip lowers the energy of target {named} with its best auxiliaries"))
    return fields(lines)


def _trap_sentence(found: Traps) -> str:
    where = f"within {count(found.radius, 'flip')} of a target, auxiliaries counted"
    if not found.found:
        return f"none {where}: no flip of an auxiliary makes a single-flip local minimum that the source has not"
    amount = count(len(found.found), "single-flip local minimum", "single-flip local minima")
    return f"{amount} {where}, that the source has not; {found.through_auxiliaries} need an auxiliary flipped"
