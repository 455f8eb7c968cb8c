"""``hubokit convert``: the same model in another format."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Annotated

import typer

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import load_document
from hubokit.cli.text import fields, number, section, size_of
from hubokit.errors import InputError
from hubokit.exchange.documents import Document
from hubokit.exchange.files import refuse_existing
from hubokit.exchange.formats import JSON, Format, format_of, write
from hubokit.exchange.header import sidecar_path
from hubokit.model.hamiltonian import Hamiltonian

WHOLE_WEIGHTS = ("opb", "wcnf", "cnf")
"""Formats whose weights are whole numbers without a constant."""

NUMBERED = ("mps", "lp")
"""Formats that number the variables and keep the names in a file beside."""


def command(
    source: Annotated[Path, typer.Argument(metavar="IN", help="A file in any format that hubokit reads.")],
    out: Annotated[Path, typer.Argument(metavar="OUT", help="The file to write; its suffix says the format.")],
    file_format: options.Format = None,
    source_format: Annotated[
        str | None, typer.Option("--from", metavar="NAME", help="Format of IN; by default from its suffix.")
    ] = None,
    domain: options.DomainOption = None,
    force: options.Force = False,
    as_json: options.Json = False,
) -> None:
    """Write a model in another format, or in the other domain, and say what changed on the way."""
    entry = format_of(out, file_format)
    refuse_existing(out, force=force)
    document = load_document(source, file_format=source_format)
    changed, changes = _in_domain(document, domain, source)
    write(changed, out, file_format, force=force)
    changes += [*_remarks(document), *_changes(changed, entry, out)]
    if as_json:
        parts = {
            "source": summary.model_part(document.model, str(source), len(document.auxiliaries)),
            "model": summary.model_part(changed.model, str(out), len(changed.auxiliaries)),
            "changes": changes,
            "files": {str(out): entry.carries},
        }
        summary.emit(summary.document("convert", parts))
        return
    about = [*describing.model_fields(changed.model, len(changed.auxiliaries)), ("format", entry.name)]
    about += [("size", size_of(out.stat().st_size))] + [("changed", change) for change in changes]
    print(section(f"CONVERTED  {source} to {out}", fields(about)), end="")


def _in_domain(document: Document, domain: options.Domain | None, file: Path) -> tuple[Document, list[str]]:
    """The document in the domain asked for, and what that changed."""
    if domain is None or domain.value == document.model.domain:
        return document, []
    if not isinstance(document.thing, Hamiltonian):
        raise InputError("a reduction keeps its domain; hubokit reduce --domain chooses it", file=str(file))
    model = document.thing.in_domain(domain.value)
    sentence = f"{document.thing.domain} became {domain.value} by {describing.rule(model)}"
    return replace(document, thing=model, digests={}), [sentence]


def _remarks(document: Document) -> list[str]:
    """What the reader of a foreign format had to say."""
    return [str(remark) for remark in document.notes.get("reading", ())]


def _changes(document: Document, entry: Format, out: Path) -> list[str]:
    """What the format says in another way, or not at all."""
    if entry.name == JSON:
        return []
    model = document.model
    changes = []
    if entry.domain not in ("any", model.domain):
        model = model.in_domain(entry.domain)
        changes.append(f"written in {entry.domain} variables by {describing.rule(model)}; reading undoes it")
    if entry.name in WHOLE_WEIGHTS and (model.resolution != 1 or model.constant):
        changes.append(
            f"weights stand in units of {number(model.resolution)} and the constant {number(model.constant)} apart; "
            "comments say both, and reading undoes it"
        )
    if entry.name in NUMBERED:
        changes.append(f"variables are numbered; their names stand in {sidecar_path(out).name}")
    beside = [name for name in ("intent", "notes", "extensions") if getattr(document, name)]
    if not isinstance(document.thing, Hamiltonian):
        beside = ["the source", "the trail", *beside]
    if beside:
        changes.append(f"left behind: {', '.join(beside)}")
    return changes
