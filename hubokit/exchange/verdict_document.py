"""The document of a verdict, there and back."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from hubokit.errors import InputError
from hubokit.exchange.model_document import VERSION

if TYPE_CHECKING:
    from hubokit.validation.verdict import Verdict

OWN_FIELDS = ("document", "version", "files", "extensions", "digests")
"""Fields of the document that are not the verdict's."""


def verdict_document(
    verdict: Verdict, *, files: Mapping[str, str] | None = None, extensions: Mapping[str, Any] | None = None
) -> dict[str, Any]:
    """The fields of a verdict document, without digests.

    Parameters
    ----------
    verdict : Verdict
    files : mapping, optional
        ``source`` and ``model`` to the names of their files.
    extensions : mapping, optional
        What a program wants to keep beside it.
    """
    from hubokit.validation.layout import verdict_to_json

    fields: dict[str, Any] = {"document": "hubokit/verdict", "version": VERSION, **verdict_to_json(verdict)}
    if files:
        fields["files"] = dict(files)
    if extensions:
        fields["extensions"] = dict(extensions)
    return fields


def read_verdict(fields: Mapping[str, Any]) -> Verdict:
    """A verdict from a document that the schema has accepted.

    Raises
    ------
    InputError
        Lists of states and energies of different length.
    """
    from hubokit.validation.layout import verdict_from_json

    for name in ("lost", "spurious"):
        listed = fields[name]
        if listed is not None:
            for energies in ("source_energies", "model_energies"):
                if len(listed[energies]) != len(listed["states"]):
                    raise InputError(
                        f"{len(listed[energies])} energies for {len(listed['states'])} states", f"/{name}/{energies}"
                    )
    return verdict_from_json({key: value for key, value in fields.items() if key not in OWN_FIELDS})
