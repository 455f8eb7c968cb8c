"""``hubokit prepare``: the main job, and its one screen."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import load_document
from hubokit.cli.progress import bar
from hubokit.cli.text import count, fields, number, section, table
from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.preparation import Prepared, prepare
from hubokit.preparation.contents import grouped
from hubokit.preparation.folder import refuse_folder
from hubokit.validation.verdict import Verdict


def command(
    model: options.Model,
    out: Annotated[Path, typer.Option("--output", "-o", metavar="FOLDER", help="The folder to make.")],
    keep: options.KeepOption = options.Keep.one_to_one,
    prefer: options.PreferOption = options.Prefer.auxiliaries,
    method: options.MethodOption = "auto",
    domain: options.DomainOption = None,
    auxiliary_gap: options.GapOption = None,
    evidence: options.EvidenceOption = options.Evidence.auto,
    time: options.Time = 600.0,
    seed: options.Seed = 0,
    export: Annotated[
        list[str] | None,
        typer.Option("--export", metavar="NAME", help="Format to write; several times for several; by default all."),
    ] = None,
    force: options.Force = False,
    as_json: options.Json = False,
) -> None:
    """Reduce a design, check the reduction, and write every file that a backend needs into a folder."""
    refuse_folder(out, force=force)
    document = load_document(model)
    if not isinstance(document.thing, Hamiltonian):
        kind = "a verdict" if isinstance(document.thing, Verdict) else "already a reduced model"
        raise InputError(
            f"this is {kind}; name the model before the reduction (hubokit check judges a reduced one)",
            file=str(model),
        )
    with bar("preparing") as progress:
        made = prepare(
            document,
            out,
            keep=keep.value,
            prefer=prefer.value,
            method=method,
            domain=None if domain is None else domain.value,
            auxiliary_gap=options.fraction(auxiliary_gap, "--auxiliary-gap"),
            evidence=evidence.value,
            time=time,
            seed=seed,
            exports=options.names(export),
            force=force,
            progress=progress,
        )
    if as_json:
        summary.emit(summary.document("prepare", _parts(made, str(model))))
    else:
        print(screen(made, str(model)), end="")
    raise typer.Exit(made.exit_code)


def screen(made: Prepared, file: str) -> str:
    """The whole result on one screen: source, reduction, verdict, files."""
    source = [*describing.model_fields(made.reduction.source), *ground_fields(made)]
    rows = [list(row) for row in grouped(made.files)]
    out = [("left out", f"{name}: {reason}") for name, reason in made.left_out.items()]
    return "\n".join(
        [
            section(f"SOURCE  {file}", fields(source)),
            section("REDUCTION", describing.reduction_text(made.reduction)),
            section("VERDICT", describing.claim_table(made.verdict), *_findings(made)),
            section(f"FILES  {made.folder}", table(["file", "what it is"], rows), fields(out)),
        ]
    )


def ground_fields(made: Prepared) -> list[tuple[str, str]]:
    """Ground level of the source."""
    figures = made.figures
    if figures.ground_energy is None or figures.degeneracy is None:
        return [("ground level", figures.note)]
    return [
        ("ground level", f"{number(figures.ground_energy)}, {count(figures.degeneracy, 'state')}"),
        ("gap", number(figures.gap, "none: there is one level")),
    ]


def _findings(made: Prepared) -> list[str]:
    gap = made.verdict.figures.get("auxiliary-gap-everywhere")
    lines = [("auxiliary gap", str(gap))] if gap is not None else []
    found = describing.findings(made.verdict)
    return [fields([*lines, *found, *(("note", note) for note in made.verdict.notes)])]


def _parts(made: Prepared, file: str) -> dict[str, object]:
    reduction = made.reduction
    verdict = made.verdict
    return {
        "source": summary.model_part(reduction.source, file),
        "model": summary.model_part(reduction.model, str(made.folder / "reduced.json"), len(reduction.auxiliaries)),
        "reduction": summary.reduction_part(reduction),
        "files": dict(made.files),
        "figures": {
            "source-ground-energy": None if made.figures.ground_energy is None else str(made.figures.ground_energy),
            "source-degeneracy": None if made.figures.degeneracy is None else str(made.figures.degeneracy),
            "source-gap": None if made.figures.gap is None else str(made.figures.gap),
            **{f"claim {name}": claim.status for name, claim in verdict.claims.items()},
        },
        "notes": [*verdict.notes, *(f"{name} left out: {reason}" for name, reason in made.left_out.items())],
    }
