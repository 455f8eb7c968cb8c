"""``hubokit check``: claim by claim, what is proved of a reduction."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Annotated

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import Elsewhere, load_reduction
from hubokit.cli.progress import bar
from hubokit.cli.states_file import read_states
from hubokit.errors import LimitError
from hubokit.exchange.documents import Document, document_to_json, plain_json
from hubokit.exchange.files import refuse_existing
from hubokit.exchange.formats import write
from hubokit.preparation.figures import intent_remarks
from hubokit.validation.check import check


def command(
    reduced: options.Reduced,
    source: options.Source = None,
    auxiliaries: options.Auxiliaries = None,
    origin: options.OriginOption = None,
    scale: options.ScaleOption = None,
    shift: options.ShiftOption = None,
    claim: options.ClaimOption = None,
    evidence: options.EvidenceOption = options.Evidence.auto,
    around: Annotated[
        Path | None,
        typer.Option(
            "--around", "--targets", metavar="STATES.csv", help="Centres of the neighbourhood, source states."
        ),
    ] = None,
    radius: Annotated[int | None, typer.Option("--radius", min=0, help="Radius of the neighbourhood.")] = None,
    time: options.Time = 600.0,
    out: Annotated[
        Path | None, typer.Option("--output", "-o", metavar="VERDICT", help="File for the verdict document.")
    ] = None,
    force: options.Force = False,
    as_json: options.Json = False,
) -> None:
    """Check a reduced model against its source; exit code 0 proved, 1 refuted, 3 not decided."""
    if out is not None:
        refuse_existing(out, force=force)
    reduction, document = load_reduction(reduced, Elsewhere(source, auxiliaries, origin, scale, shift))
    centres = None if around is None else read_states(around, reduction.source.labels, reduction.source.domain)
    try:
        with bar("checking") as progress:
            verdict = check(
                reduction,
                claims=options.claims(claim),
                evidence=evidence.value,
                radius=radius,
                around=centres,
                progress=progress,
                time=time,
            )
    except LimitError as refusal:
        raise refusal.located(file=str(reduced)) from None
    least = verdict.figures.get("source-ground-energy")
    remarks = intent_remarks(document.intent, reduction.source, None if least is None else least.value)
    verdict = replace(verdict, notes=(*verdict.notes, *remarks))
    if out is not None:
        write(Document(verdict, files=_beside(out, reduced, source)), out, force=force)
    if as_json:
        summary.emit(plain_json(document_to_json(verdict)))
    else:
        print(describing.verdict_text(verdict))
    raise typer.Exit(verdict.exit_code)


def _beside(out: Path, reduced: Path, source: Path | None) -> dict[str, str]:
    """Names of the models' files that stand beside the verdict, where an audit looks for them."""
    files = {"model": reduced} | ({} if source is None else {"source": source})
    return {role: path.name for role, path in files.items() if path.resolve().parent == out.resolve().parent}
