"""The document of a verdict, there and back."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from hubokit.errors import InputError
from hubokit.exchange.json_text import SAFE_INTEGER, quoted
from hubokit.exchange.model_document import VERSION
from hubokit.exchange.term_arrays import LARGEST_WEIGHT
from hubokit.exchange.trail_document import plain

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
    fields["evidence"] = packed(plain(fields["evidence"]))
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
    kept = {key: value for key, value in fields.items() if key not in OWN_FIELDS}
    return verdict_from_json({**kept, "evidence": unpacked(fields["evidence"])})


def packed(value: Any) -> Any:
    """The same with ``{"integer": "..."}`` in the place of every integer beyond 2**53 - 1.

    Examples
    --------
    >>> packed([1, 10**20])
    [1, {'integer': '100000000000000000000'}]
    """
    if isinstance(value, Mapping):
        return {key: packed(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [packed(item) for item in value]
    if isinstance(value, int) and abs(value) > SAFE_INTEGER:
        return {"integer": str(value)}
    return value


def unpacked(value: Any) -> Any:
    """The way back from `packed`.

    Raises
    ------
    InputError
        An ``integer`` that is none.

    Examples
    --------
    >>> unpacked({"gap": {"integer": "-100000000000000000000"}})
    {'gap': -100000000000000000000}
    """
    if isinstance(value, Mapping):
        if value.keys() == {"integer"} and isinstance(value["integer"], str):
            text = value["integer"]
            if len(text) > LARGEST_WEIGHT or not text.removeprefix("-").isdecimal():
                raise InputError(f"{quoted(text)} is no integer of at most {LARGEST_WEIGHT} digits", "/evidence")
            return int(text)
        return {key: unpacked(item) for key, item in value.items()}
    if isinstance(value, list):
        return [unpacked(item) for item in value]
    return value
