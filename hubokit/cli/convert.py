"""``hubokit convert``: the same model in another format."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.progress import reading
from hubokit.cli.text import fields, section, size_of
from hubokit.exchange.conversion import Conversion, convert


def command(
    source: Annotated[Path, typer.Argument(metavar="IN", help="A file in any format that hubokit reads.")],
    out: Annotated[Path, typer.Argument(metavar="OUT", help="The file to write; its suffix says the format.")],
    file_format: options.Format = None,
    source_format: Annotated[
        str | None, typer.Option("--from", metavar="NAME", help="Format of IN; by default from its suffix.")
    ] = None,
    form: Annotated[
        str | None,
        typer.Option(
            "--form",
            metavar="NAME",
            help="Where OUT's format is written in more than one way: no-header or old-header (wcnf), upper or "
            "symmetric (matrix-market), named or numbered (csv).",
        ),
    ] = None,
    domain: options.DomainOption = None,
    lossy: Annotated[
        bool, typer.Option("--lossy", help="Write although OUT's format cannot hold all of IN; what is lost is said.")
    ] = False,
    force: options.Force = False,
    as_json: options.Json = False,
) -> None:
    """Write a model in another format, or in the other domain, and say what changed on the way."""
    with reading(source) as progress:
        done = convert(
            source,
            out,
            source_format=source_format,
            target_format=file_format,
            domain=None if domain is None else domain.value,
            form=form,
            lossy=lossy,
            force=force,
            progress=progress,
        )
    if as_json:
        summary.emit(summary.document("convert", _parts(done, source, out)))
        return
    sides = [
        ("read", done.sides[0]),
        ("written", done.sides[1]),
        ("size", size_of(out.stat().st_size)),
    ]
    said = [("changed", change) for change in done.changes] + [("left behind", loss) for loss in done.losses]
    model = describing.model_fields(done.document.model, len(done.document.auxiliaries))
    print(section(f"CONVERTED  {source} to {out}", fields([*model, *sides, *said])), end="")


def _parts(done: Conversion, source: Path, out: Path) -> dict[str, Any]:
    before, after = done.source, done.document
    return {
        "source": summary.model_part(before.model, str(source), len(before.auxiliaries)),
        "model": summary.model_part(after.model, str(out), len(after.auxiliaries)),
        "changes": [*done.changes, *(f"left behind: {loss}" for loss in done.losses)],
        "notes": [f"read: {done.sides[0]}", f"written: {done.sides[1]}"],
        "files": {str(out): done.format.carries},
    }
