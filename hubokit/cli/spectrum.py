"""``hubokit spectrum``: the low levels of a model, all of them, or what lies around given states."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import load_model
from hubokit.cli.progress import bar
from hubokit.cli.states_file import read_states
from hubokit.cli.text import fields, number, section
from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.spectrum.bandwidth import bandwidth_within
from hubokit.spectrum.exhaustive import density_of_states
from hubokit.spectrum.neighbourhood import neighbourhood
from hubokit.spectrum.search import low_levels

Parts = dict[str, Any]


def command(
    model: options.Model,
    levels: Annotated[int, typer.Option("--levels", min=1, help="Number of low levels.")] = 5,
    limit: options.Limit = 1000,
    states: Annotated[bool, typer.Option("--states", help="Print the states of the ground level.")] = False,
    density: Annotated[bool, typer.Option("--density", help="Every energy with its number of states.")] = False,
    targets: Annotated[
        Path | None,
        typer.Option("--targets", metavar="STATES.csv", help="Look at all states around these instead."),
    ] = None,
    radius: Annotated[int, typer.Option("--radius", min=0, help="Most flips away from a target.")] = 2,
    time: options.Time = 600.0,
    checkpoint: options.Checkpoint = None,
    as_json: options.Json = False,
) -> None:
    """Find the low levels of a model, the whole density of states, or the states around given ones."""
    if density and targets is not None:
        raise InputError("all levels and a neighbourhood are two runs; leave one out", "--density and --targets")
    hamiltonian = load_model(model)
    if density:
        parts, shown = _density(hamiltonian, time, checkpoint)
    elif targets is not None:
        parts, shown = _around(hamiltonian, targets, radius, limit, time)
    else:
        parts, shown = _levels(hamiltonian, levels, limit, time, checkpoint)
        if states:
            shown.append(section("GROUND STATES", parts.pop("listed")))
        parts.pop("listed", None)
    if as_json:
        summary.emit(summary.document("spectrum", {"model": summary.model_part(hamiltonian, str(model)), **parts}))
        return
    print(section(f"MODEL  {model}", fields(describing.model_fields(hamiltonian))))
    print("\n".join(shown), end="")


def _levels(
    model: Hamiltonian, levels: int, limit: int, time: float, checkpoint: Path | None
) -> tuple[Parts, list[str]]:
    with bar("walking") as progress:
        found = low_levels(model, levels, limit, progress=progress, checkpoint=checkpoint, time=time)
    parts: Parts = {
        "variables": list(model.labels),
        "levels": [summary.level_part(level) for level in found],
        "listed": describing.state_lines(model, found[0]),
    }
    return parts, [section("LOW LEVELS", describing.level_table(found))]


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


def _around(model: Hamiltonian, targets: Path, radius: int, limit: int, time: float) -> tuple[Parts, list[str]]:
    centres = read_states(targets, model.labels, model.domain)
    with bar("walking") as progress:
        found = neighbourhood(model, centres, radius, limit=limit, progress=progress, time=time)
    lowest = found.lowest_other
    merit = bandwidth_within(found)
    parts: Parts = {
        "figures": {
            "radius": found.radius,
            "targets": len(found.balls),
            "states": str(found.states),
            "highest-target-energy": format_fraction(found.highest),
            "lowest-other-energy": None if lowest is None else format_fraction(lowest),
            "bandwidth": format_fraction(merit.bandwidth),
            "bandwidth-ratio": None if merit.ratio is None else format_fraction(merit.ratio),
            "at-or-below-highest-target": str(found.at_or_below),
        },
        "notes": [str(merit)],
    }
    about = [
        ("lowest other", number(lowest)),
        ("merit", str(merit)),
        ("at or below", f"{found.at_or_below} other states at or below the highest target"),
    ]
    lines = "\n".join(f"  {line}" for line in str(found).splitlines())
    return parts, [section(f"AROUND  {targets}", lines + "\n", fields(about))]
