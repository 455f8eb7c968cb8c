"""``hubokit audit``: a verdict checked again by separate, small code in plain integers."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hubokit.cli import options


def command(
    verdict: Annotated[Path, typer.Argument(metavar="VERDICT", help="A verdict document.")],
    source: options.Source = None,
    model: Annotated[Path | None, typer.Option("--model", metavar="REDUCED", help="The reduced model.")] = None,
    as_json: options.Json = False,
) -> None:
    """Check a verdict again; the files that it names are looked for beside it."""
