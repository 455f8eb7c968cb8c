"""``hubokit spectrum``: low levels of a model, all levels, draws of ground states, or what lies around targets."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from pathlib import Path
from typing import Annotated, Any

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.around import around
from hubokit.cli.loading import Elsewhere, load_document, load_reduction
from hubokit.cli.progress import bar
from hubokit.cli.states_file import states_text
from hubokit.cli.text import count, fields, listing, number, section
from hubokit.errors import HubokitError, InputError, LimitError
from hubokit.exchange.files import refuse_existing, write_text
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.preparation.side_by_side import (
    Asked,
    Landscape,
    drawn,
    drawn_after,
    landscape_after,
    levels_with_landscape,
)
from hubokit.reduction.result import Reduction
from hubokit.spectrum.exhaustive import density_of_states
from hubokit.spectrum.levels import Level

Parts = dict[str, Any]
DRAWS_SHOWN = 20
GROUPS_SHOWN = 8


def command(
    model: options.Model,
    source: options.Source = None,
    auxiliaries: options.Auxiliaries = None,
    origin: options.OriginOption = None,
    levels: Annotated[int, typer.Option("--levels", min=1, help="Number of low levels.")] = 5,
    limit: options.Limit = 1000,
    states: Annotated[bool, typer.Option("--states", help="Print the states of the ground level.")] = False,
    density: Annotated[bool, typer.Option("--density", help="Every energy with its number of states.")] = False,
    targets: Annotated[
        Path | None,
        typer.Option(
            "--targets",
            metavar="STATES.csv",
            help="Measure how these states stand out: bandwidth, distance to the lowest other state, their ratio. "
            "Of a reduced model, states of its source.",
        ),
    ] = None,
    radius: Annotated[
        int | None, typer.Option("--radius", min=0, help="Look only at states so many flips away from a target.")
    ] = None,
    distinct: Annotated[
        bool, typer.Option("--distinct", help="Count a state near several targets once, not for each.")
    ] = False,
    draw: Annotated[
        int | None, typer.Option("--draw", min=1, metavar="N", help="Draw N ground states, each equally likely.")
    ] = None,
    seed: options.Seed = 0,
    out: Annotated[
        Path | None, typer.Option("--output", "-o", metavar="STATES.csv", help="File for the states drawn.")
    ] = None,
    force: options.Force = False,
    time: options.Time = 600.0,
    checkpoint: options.Checkpoint = None,
    as_json: options.Json = False,
) -> None:
    """Find the low levels of a model, every level, ground states drawn at random, or what lies around targets."""
    _refuse_mixed({"--density": density, "--targets": targets is not None, "--draw": draw is not None})
    for option, given, job, asked in (
        ("--radius", radius is not None, "--targets", targets is not None),
        ("--distinct", distinct, "--targets", targets is not None),
        ("--output", out is not None, "--draw", draw is not None),
    ):
        if given and not asked:
            raise InputError(f"it goes with {job}", option)
    if out is not None:
        refuse_existing(out, force=force)
    thing = _loaded(model, Elsewhere(source, auxiliaries, origin))
    hamiltonian = thing.model if isinstance(thing, Reduction) else thing
    try:
        if density:
            parts, shown = _density(hamiltonian, time, checkpoint)
        elif targets is not None:
            parts, shown = around(thing, targets, Asked(radius, limit, distinct, time))
        elif draw is not None:
            parts, shown = _draw(thing, draw, seed, out, force, time)
        else:
            parts, shown = _levels(thing, levels, limit, time, checkpoint, states)
    except LimitError as refusal:
        hint = " (--targets STATES.csv --radius R)" if targets is None and draw is None and not density else ""
        raise LimitError(f"{refusal.message}{hint}", refusal.place, refusal.file or str(model)) from None
    except HubokitError as error:
        raise error.located(file=str(model)) from None
    if as_json:
        heads: Parts = {"model": summary.model_part(hamiltonian, str(model))}
        if isinstance(thing, Reduction):
            heads["source"] = summary.model_part(thing.source)
            heads["model"]["auxiliaries"] = len(thing.auxiliaries)
        summary.emit(summary.document("spectrum", {**heads, **parts}))
        return
    print(_head(thing, model))
    print("\n".join(shown), end="")


def _refuse_mixed(jobs: dict[str, bool]) -> None:
    asked = [name for name, wanted in jobs.items() if wanted]
    if len(asked) > 1:
        raise InputError("each is a run of its own; leave one out", " and ".join(asked))


def _loaded(path: Path, elsewhere: Elsewhere) -> Hamiltonian | Reduction:
    """A reduction where its source is embedded, beside it or named; else the model that the file holds."""
    if elsewhere.given or elsewhere.source is not None:
        return load_reduction(path, elsewhere)[0]
    document = load_document(path)
    try:
        return document.thing if isinstance(document.thing, Reduction) else document.model
    except HubokitError as error:
        raise error.located(file=str(path)) from None


def _head(thing: Hamiltonian | Reduction, file: Path) -> str:
    if not isinstance(thing, Reduction):
        return section(f"MODEL  {file}", fields(describing.model_fields(thing)))
    return "\n".join(
        [
            section("SOURCE", fields(describing.model_fields(thing.source))),
            section(f"REDUCED MODEL  {file}", fields(describing.model_fields(thing.model, len(thing.auxiliaries)))),
        ]
    )


def _levels(
    thing: Hamiltonian | Reduction, levels: int, limit: int, time: float, checkpoint: Path | None, states: bool
) -> tuple[Parts, list[str]]:
    if isinstance(thing, Reduction):
        return _levels_of_both(thing, levels, limit, time, checkpoint, states)
    with bar("walking") as progress:
        found, ground = levels_with_landscape(thing, levels, limit, progress, checkpoint, time)
    parts: Parts = {
        "variables": list(thing.labels),
        "levels": [summary.level_part(level) for level in found],
        "figures": _ground_figures(ground),
    }
    shown = [section("LOW LEVELS", describing.level_table(found)), _ground_section("GROUND STATES", ground)]
    return parts, shown + _listed(thing, found[0], states)


def _levels_of_both(
    thing: Reduction, levels: int, limit: int, time: float, checkpoint: Path | None, states: bool
) -> tuple[Parts, list[str]]:
    """Levels of the source and of the reduced model, excited auxiliaries included where those can be had."""
    source, model = thing.source, thing.model
    with bar("walking the source") as progress:
        before, ground = levels_with_landscape(source, levels, limit, progress, None, time)
    shown = [
        section("LOW LEVELS  source", describing.level_table(before)),
        _ground_section("GROUND STATES  source", ground),
    ]
    parts: Parts = {"figures": _ground_figures(ground, "source-"), "notes": []}
    title = "LOW LEVELS  reduced model, with excited auxiliaries"
    found: list[Level] = []
    after: Landscape | None = None
    try:
        with bar("walking the reduced model") as progress:
            found, after = levels_with_landscape(model, levels, limit, progress, checkpoint, time)
        shown.append(section(title, describing.level_table(found)))
    except LimitError as refusal:
        parts["notes"].append(f"levels of the reduced model: {refusal}")
        shown.append(section(title, fields([("not computed", str(refusal))])))
    title = "GROUND STATES  reduced model, auxiliaries included"
    try:
        if after is None:
            with bar("walking the minimum") as progress:
                after = landscape_after(thing, limit, progress, time)
        parts["figures"] |= _ground_figures(after)
        shown.append(_ground_section(title, after))
        shown += _listed(model, replace(after.level, states=after.level.states[:limit]), states)
    except LimitError as refusal:
        parts["notes"].append(f"ground states of the reduced model: {refusal}")
        shown.append(section(title, fields([("not computed", str(refusal))])))
    parts |= {"variables": list(model.labels), "levels": [summary.level_part(level) for level in found]}
    return parts, shown


def _listed(model: Hamiltonian, level: Level, states: bool) -> list[str]:
    return [section("STATES", describing.state_lines(model, level))] if states else []


def _ground_section(title: str, ground: Landscape) -> str:
    level = ground.level
    lines = [("states", f"{level.degeneracy} at {number(level.energy)}")]
    if ground.groups is None:
        lines.append(("closest pair", "not looked for: too many states to list; --limit lists more"))
    elif ground.closest is not None:
        sizes = listing(
            [f"{amount} of {count(size, 'state')}" for size, amount in sorted(Counter(ground.groups).items())][::-1],
            GROUPS_SHOWN,
        )
        lines.append(("closest pair", f"{count(ground.closest, 'flip')} apart"))
        lines.append(("groups", f"{len(ground.groups)} joined by single flips: {sizes}"))
    lines += [("found by", level.method), ("predicted", ground.chosen)]
    return section(title, fields(lines))


def _ground_figures(ground: Landscape, mark: str = "") -> Parts:
    groups = ground.groups
    return {
        f"{mark}ground-energy": format_fraction(ground.level.energy),
        f"{mark}ground-states": str(ground.level.degeneracy),
        f"{mark}ground-states-found-by": ground.level.method,
        f"{mark}ways-predicted": ground.chosen,
        f"{mark}closest-ground-states": ground.closest,
        f"{mark}groups-of-ground-states": None if groups is None else len(groups),
        f"{mark}largest-group-of-ground-states": None if groups is None else max(groups, default=0),
    }


def _density(model: Hamiltonian, time: float, checkpoint: Path | None) -> tuple[Parts, list[str]]:
    with bar("walking") as progress:
        found = density_of_states(model, progress=progress, checkpoint=checkpoint, time=time)
    parts: Parts = {
        "density": {
            "energies": [format_fraction(energy) for energy in found.energies],
            "counts": [str(amount) for amount in found.counts],
        }
    }
    return parts, [section("ALL LEVELS", describing.density_table(found))]


def _draw(
    thing: Hamiltonian | Reduction, amount: int, seed: int, out: Path | None, force: bool, time: float
) -> tuple[Parts, list[str]]:
    with bar("searching") as progress:
        if isinstance(thing, Reduction):
            model, (level, states) = thing.model, drawn_after(thing, amount, seed, progress, time)
        else:
            model, (level, states) = thing, drawn(thing, amount, seed, progress, time)
    said = [
        ("drawn", f"{count(amount, 'state')} with seed {seed}, every ground state equally likely each time"),
        ("among", f"{level.degeneracy} at {number(level.energy)}"),
        ("found by", level.method),
    ]
    parts: Parts = {
        "variables": list(model.labels),
        "drawn": states.tolist(),
        "figures": {
            "ground-energy": format_fraction(level.energy),
            "ground-states": str(level.degeneracy),
            "seed": seed,
        },
    }
    if out is not None:
        write_text(out, states_text(model.labels, states), force=force)
        parts["files"] = {str(out): "the states drawn"}
        return parts, [section(f"DRAWN  {out}", fields(said))]
    rows = ["", *(f"  {signs}" for signs in describing.state_signs(states[:DRAWS_SHOWN], model.domain))]
    if amount > DRAWS_SHOWN:
        rows.append(f"  and {amount - DRAWS_SHOWN} more; --output or --json gives them all")
    names = fields([("variables", " ".join(model.labels))])
    return parts, [section("DRAWN", fields(said), "\n".join([*rows, ""]), names)]
