"""``hubokit audit``: a verdict checked again by separate, small code in plain integers."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any

import typer

from hubokit.cli import options, summary
from hubokit.cli.loading import load_model
from hubokit.cli.text import section, table
from hubokit.errors import HubokitError, InputError
from hubokit.exchange.documents import document_to_json, plain_json
from hubokit.exchange.files import read_text
from hubokit.exchange.json_text import parsed
from hubokit.exchange.verdict_document import unpacked
from hubokit.validation.audit import audit

OUTCOMES = {
    0: "accepted: every claim of the verdict was re-checked (its figures and lists were not)",
    1: "rejected: the verdict asserts what does not hold, or is about other models",
    3: "not decided: some of it was not re-checked",
}


def command(
    verdict: Annotated[Path, typer.Argument(metavar="VERDICT", help="A verdict document.")],
    source: options.Source = None,
    model: Annotated[Path | None, typer.Option("--model", metavar="REDUCED", help="The reduced model.")] = None,
    as_json: options.Json = False,
) -> None:
    """Check a verdict again by separate code; exit code 0 accepted, 1 rejected, 3 not all re-checked.

    Models that are not named are looked for beside the verdict, under the names that it gives; a source that it does
    not name is the one in the reduced model's trail.
    """
    judged = unpacked(_object(verdict))
    if judged.get("document") != "hubokit/verdict":
        raise InputError("this is no verdict; hubokit check --output writes one", "/document", str(verdict))
    reduced = _document(model or _beside(verdict, judged, "model", "--model"))
    embedded = None if source is not None or _named(judged, "source") else _embedded(reduced)
    before = embedded or _document(source or _beside(verdict, judged, "source", "--source"))
    try:
        report = audit(judged, before, reduced)
    except HubokitError as error:
        raise error.located(file=str(verdict)) from None
    if as_json:
        parts = {
            "figures": {item.name: item.result for item in report.items},
            "notes": [f"{item.name}: {item.detail}" for item in report.items if item.detail],
        }
        summary.emit(summary.document("audit", parts))
    else:
        rows = [[item.name, item.result, item.detail] for item in report.items]
        print(
            section(
                f"AUDIT  {verdict}", table(["what", "result", "detail"], rows), f"\n  {OUTCOMES[report.exit_code]}"
            )
        )
    raise typer.Exit(report.exit_code)


def _object(path: Path) -> dict[str, Any]:
    """The JSON object of a file, as it stands."""
    try:
        content = parsed(read_text(path))
    except HubokitError as error:
        raise error.located(file=str(path)) from None
    if not isinstance(content, dict):
        raise InputError("not a document; a JSON object is needed", file=str(path))
    return content


def _document(path: Path) -> Mapping[str, Any]:
    """A model as a JSON document: JSON files as they stand, others translated."""
    if path.name.endswith((".json", ".json.gz")):
        return _object(path)
    found: Mapping[str, Any] = plain_json(document_to_json(load_model(path)))
    return found


def _beside(verdict: Path, judged: Mapping[str, Any], role: str, option: str) -> Path:
    """The file that a verdict names for a role, in its own folder."""
    name = _named(judged, role)
    if name is None:
        raise InputError(f"the verdict does not name the file; {option} names it", file=str(verdict))
    return verdict.parent / name


def _named(judged: Mapping[str, Any], role: str) -> str | None:
    """The file name that a verdict gives for a role; None where it gives none, or one with a folder in it."""
    files = judged.get("files")
    name = files.get(role) if isinstance(files, dict) else None
    return name if isinstance(name, str) and Path(name).name == name else None


def _embedded(reduced: Mapping[str, Any]) -> Mapping[str, Any] | None:
    """The source in the trail of a reduced model; None where there is none."""
    trail = reduced.get("trail")
    first = trail[0] if isinstance(trail, list) and trail else None
    found = first.get("model") if isinstance(first, dict) else None
    return found if isinstance(found, dict) else None
