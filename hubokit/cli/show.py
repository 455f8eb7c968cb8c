"""``hubokit show``: what is in a file."""

from __future__ import annotations

from typing import Any

from hubokit.cli import describing, options, summary
from hubokit.cli.loading import load_document
from hubokit.cli.text import fields, listing, section
from hubokit.exchange.documents import Document
from hubokit.reduction.result import Reduction
from hubokit.validation.verdict import Verdict


def command(model: options.Model, as_json: options.Json = False) -> None:
    """Show what is in a file: size, locality, terms, coefficients, intent, trail; or the claims of a verdict."""
    document = load_document(model)
    thing = document.thing
    if isinstance(thing, Verdict):
        if as_json:
            summary.emit(summary.document("show", {"notes": [describing.claim_line(thing)]}))
        else:
            print(section(f"VERDICT  {model}", describing.verdict_text(thing)))
        return
    if as_json:
        summary.emit(summary.document("show", _parts(document, str(model))))
        return
    hamiltonian = document.model
    about = [*describing.model_fields(hamiltonian, len(document.auxiliaries))]
    about += [("names", listing(hamiltonian.labels)), *describing.coefficient_fields(hamiltonian)]
    print(section(f"MODEL  {model}", fields(about)))
    if document.intent:
        print(section("INTENT", "\n".join(describing.tree(document.intent, 2))))
    if document.notes:
        print(section("NOTES", "\n".join(describing.tree(document.notes, 2))))
    if isinstance(thing, Reduction):
        print(section("SOURCE", fields(describing.model_fields(thing.source))))
        print(section("REDUCTION", describing.reduction_text(thing)))
    elif document.trail:
        print(section("TRAIL", fields([("steps", str(len(document.trail) - 1)), ("source", "not in the file")])))


def _parts(document: Document, file: str) -> dict[str, Any]:
    thing = document.thing
    return {
        "model": summary.model_part(document.model, file, len(document.auxiliaries)),
        "source": summary.model_part(thing.source) if isinstance(thing, Reduction) else None,
        "reduction": summary.reduction_part(thing) if isinstance(thing, Reduction) else None,
    }
