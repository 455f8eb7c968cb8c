"""``hubokit spectrum``: the low levels of a model, or all of them."""

from __future__ import annotations

from typing import Annotated, Any

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import load_model
from hubokit.cli.progress import bar
from hubokit.cli.text import fields, section
from hubokit.model.numbers import format_fraction
from hubokit.spectrum.exhaustive import density_of_states
from hubokit.spectrum.search import low_levels


def command(
    model: options.Model,
    levels: Annotated[int, typer.Option("--levels", min=1, help="Number of low levels.")] = 5,
    limit: options.Limit = 1000,
    states: Annotated[bool, typer.Option("--states", help="Print the states of the ground level.")] = False,
    density: Annotated[bool, typer.Option("--density", help="Every energy with its number of states.")] = False,
    time: options.Time = 600.0,
    checkpoint: options.Checkpoint = None,
    as_json: options.Json = False,
) -> None:
    """Find the low levels of a model, or the whole density of states."""
    hamiltonian = load_model(model)
    parts: dict[str, Any] = {"model": summary.model_part(hamiltonian, str(model))}
    with bar("walking") as progress:
        if density:
            found = density_of_states(hamiltonian, progress=progress, checkpoint=checkpoint, time=time)
        else:
            lowest = low_levels(hamiltonian, levels, limit, progress=progress, checkpoint=checkpoint, time=time)
    if as_json:
        if density:
            parts["density"] = {
                "energies": [format_fraction(energy) for energy in found.energies],
                "counts": [str(amount) for amount in found.counts],
            }
        else:
            parts["variables"] = list(hamiltonian.labels)
            parts["levels"] = [summary.level_part(level) for level in lowest]
        summary.emit(summary.document("spectrum", parts))
        return
    print(section(f"MODEL  {model}", fields(describing.model_fields(hamiltonian))))
    if density:
        print(section("ALL LEVELS", describing.density_table(found)))
        return
    print(section("LOW LEVELS", describing.level_table(lowest)))
    if states:
        print(section("GROUND STATES", describing.state_lines(hamiltonian, lowest[0])))
