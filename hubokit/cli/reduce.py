"""``hubokit reduce``: a quadratic model with the same ground states."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Annotated

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import load_document, model_of
from hubokit.cli.text import fields, section
from hubokit.exchange.conversion import losses
from hubokit.exchange.documents import as_document
from hubokit.exchange.files import refuse_existing
from hubokit.exchange.formats import format_of, write
from hubokit.reduction.reduce import reduce


def command(
    model: options.Model,
    out: Annotated[Path, typer.Option("--output", "-o", metavar="OUT", help="File for the reduced model.")],
    method: options.MethodOption = "auto",
    keep: options.KeepOption = options.Keep.one_to_one,
    prefer: options.PreferOption = options.Prefer.auxiliaries,
    domain: options.DomainOption = None,
    auxiliary_gap: options.GapOption = None,
    seed: options.Seed = 0,
    file_format: options.Format = None,
    detached: Annotated[
        bool, typer.Option("--detached", help="Leave the source out of the file; its name and digest stay.")
    ] = False,
    explain: Annotated[bool, typer.Option("--explain", help="Print what was chosen and why.")] = False,
    force: options.Force = False,
    as_json: options.Json = False,
) -> None:
    """Reduce a model to quadratic form and write it with the trail that leads back to its source."""
    format_of(out, file_format)
    refuse_existing(out, force=force)
    document = load_document(model)
    source = model_of(document, model)
    reduction = reduce(
        source,
        method=method,
        keep=keep.value,
        prefer=prefer.value,
        domain=None if domain is None else domain.value,
        auxiliary_gap=options.fraction(auxiliary_gap, "--auxiliary-gap"),
        seed=seed,
    )
    made = replace(
        as_document(reduction), intent=document.intent, notes=document.notes, extensions=document.extensions
    )
    write(made, out, file_format, force=force, detached=detached, source_file=model.name)
    if as_json:
        parts = {
            "source": summary.model_part(source, str(model)),
            "model": summary.model_part(reduction.model, str(out), len(reduction.auxiliaries)),
            "reduction": summary.reduction_part(reduction),
            "files": {str(out): "the reduced model"},
            "notes": [f"left behind: {loss}" for loss in losses(made, format_of(out, file_format))],
        }
        summary.emit(summary.document("reduce", parts))
        return
    print(section(f"SOURCE  {model}", fields(describing.model_fields(source))))
    lost = losses(made, format_of(out, file_format))
    left = fields([("left behind", f"{', '.join(lost)}; a .json file holds them")]) if lost else ""
    print(section(f"REDUCTION  {out}", describing.reduction_text(reduction), left))
    if explain:
        print(section("WHY", describing.trail_text(reduction.trail)))
