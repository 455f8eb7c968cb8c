"""Documents: a Hamiltonian, Reduction or Verdict with everything its file holds beside it."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, TypeAlias

from hubokit.errors import HubokitError, InputError
from hubokit.exchange.canonical import document_digest
from hubokit.exchange.files import read_text, write_bytes
from hubokit.exchange.json_text import parsed, refuse_unplain
from hubokit.exchange.layout import laid_out
from hubokit.exchange.model_document import model_fields, read_model
from hubokit.exchange.schema_errors import kind_of, refuse_invalid
from hubokit.exchange.trail_document import read_reduction, read_trail, refuse_strangers, trail_fields
from hubokit.exchange.verdict_document import read_verdict, verdict_document
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.labels import as_labels

if TYPE_CHECKING:
    from hubokit.reduction.result import Reduction
    from hubokit.validation.verdict import Verdict

    Thing: TypeAlias = Hamiltonian | Reduction | Verdict

Json = dict[str, Any]


@dataclass(frozen=True)
class Document:
    """What a document file holds.

    Parameters
    ----------
    thing : Hamiltonian, Reduction or Verdict
    auxiliaries : tuple of str
        Variables that a reduction added; also where the source is not at hand and `thing` is the bare model.
    intent, notes, extensions : mapping
        Plain JSON values, written back as they were read.
    digests : mapping
        As they stood in the file; writing makes them afresh.
    trail : tuple of dict
        The entries of a trail whose source is not at hand, so that they can be written back.
    files : mapping
        In a verdict: names of the files of ``source`` and ``model``.
    """

    thing: Thing
    auxiliaries: tuple[str, ...] = ()
    intent: Mapping[str, Any] = field(default_factory=dict)
    notes: Mapping[str, Any] = field(default_factory=dict)
    extensions: Mapping[str, Any] = field(default_factory=dict)
    digests: Mapping[str, str] = field(default_factory=dict)
    trail: tuple[Json, ...] = ()
    files: Mapping[str, str] = field(default_factory=dict)

    @property
    def model(self) -> Hamiltonian:
        """The model of the document: the Hamiltonian, or the reduced model of a Reduction.

        Raises
        ------
        InputError
            The document is a verdict.
        """
        if isinstance(self.thing, Hamiltonian):
            return self.thing
        model = getattr(self.thing, "model", None)
        if not isinstance(model, Hamiltonian):
            raise InputError("a verdict holds no model; name a model document")
        return model


def as_document(thing: Thing | Document) -> Document:
    """The thing as a Document; a Document as it is."""
    if isinstance(thing, Document):
        return thing
    return Document(thing, auxiliaries=tuple(getattr(thing, "auxiliaries", ())))


def read_document(path: str | os.PathLike[str], source: Hamiltonian | None = None) -> Document:
    """Read a ``.json`` or ``.json.gz`` document of the family.

    Parameters
    ----------
    path : path
    source : Hamiltonian, optional
        The source of a reduced model whose trail does not embed it; its digest is compared with the trail's.

    Raises
    ------
    InputError, LimitError
        Anything wrong in the file, with the JSON pointer of the place.
    """
    name = os.fspath(path)
    try:
        return document_from_json(parsed(read_text(name)), source=source)
    except HubokitError as error:
        raise error.located(file=name) from None


def document_from_json(document: Any, source: Hamiltonian | None = None) -> Document:
    """A Document from parsed JSON.

    Raises
    ------
    InputError
        Anything the schema refuses, anything that contradicts itself, or a digest that does not fit.

    Examples
    --------
    >>> made = document_to_json(Hamiltonian({("a", "b"): 2}, "spin"))
    >>> document_from_json(plain_json(made)).thing.energy([1, -1])
    Fraction(-2, 1)
    """
    kind = kind_of(document)
    if kind == "summary":
        refuse_invalid(kind, document)
        raise InputError("a summary is written for reading by other programs; it holds no model", "/document")
    if kind == "verdict":
        return _verdict_from_json(document)
    return _model_from_json(document, source)


def _verdict_from_json(document: Json) -> Document:
    refuse_unplain(document)
    refuse_invalid("verdict", document)
    _verify("document", document.get("digests", {}), document_digest(document))
    return Document(
        read_verdict(document),
        extensions=document.get("extensions", {}),
        digests=document.get("digests", {}),
        files=document.get("files", {}),
    )


def _model_from_json(document: Json, source: Hamiltonian | None) -> Document:
    arrays = refuse_invalid("model", document)
    for key in ("intent", "notes", "extensions"):
        refuse_unplain(document.get(key, {}), pointer=f"/{key}")
    for place, entry in enumerate(document.get("trail", ())):
        refuse_unplain({k: v for k, v in entry.items() if k != "model"}, pointer=f"/trail/{place}")
    _refuse_ragged(document.get("intent", {}), arrays)
    model, fields = read_model(document, arrays)
    auxiliaries = as_labels(document.get("auxiliaries", ()), "/auxiliaries")
    refuse_strangers(model, auxiliaries)
    trail, entries = read_trail(document.get("trail", ()), arrays)
    if "trail" in fields:
        fields["trail"] = entries
    digests = document.get("digests", {})
    _verify("function", digests, model.digest)
    if "document" in digests:
        _verify("document", digests, document_digest(fields))
    reduction = None
    if entries or source is not None:
        reduction = read_reduction(model, auxiliaries, trail, entries, source)
    return Document(
        thing=model if reduction is None else reduction,
        auxiliaries=auxiliaries,
        intent=document.get("intent", {}),
        notes=document.get("notes", {}),
        extensions=document.get("extensions", {}),
        digests=digests,
        trail=tuple(entries) if reduction is None else (),
    )


def _refuse_ragged(intent: Json, arrays: Mapping[str, Any]) -> None:
    """Raise for a target state that has not one value for each of its variables."""
    if "target_states" not in intent:
        return
    pointer = "/intent/target_states"
    lengths, _ = arrays[f"{pointer}/states"]
    wanted = len(intent["target_states"]["variables"])
    for row, length in enumerate(lengths.tolist()):
        if length != wanted:
            raise InputError(f"{length} values for {wanted} variables", f"{pointer}/states/{row}")


def _verify(name: str, digests: Mapping[str, str], computed: str) -> None:
    if name in digests and digests[name] != computed:
        what = "the function was changed" if name == "function" else "a field was changed"
        raise InputError(
            f"{what} after the digest was made (it would be {computed}); take the digests out to accept the change",
            f"/digests/{name}",
        )


def document_to_json(thing: Thing | Document, *, detached: bool = False, source_file: str | None = None) -> Json:
    """The fields of a document with its digests; term lists are integer arrays (see `plain_json`).

    Parameters
    ----------
    thing : Hamiltonian, Reduction, Verdict or Document
    detached : bool
        Leave the source out of the trail; then `source_file` names it.
    source_file : str, optional
        Name of the source's file for the trail.

    Raises
    ------
    InputError
        Something in notes, extensions or intent that a document cannot hold, with its place.
    """
    document = as_document(thing)
    fields, kind = _fields(document, detached=detached, source_file=source_file)
    for key in ("intent", "notes", "extensions"):
        refuse_unplain(fields.get(key, {}), pointer=f"/{key}")
    refuse_invalid(kind, fields)
    digests = {"document": document_digest(fields)}
    if kind == "model":
        digests = {"function": document.model.digest, **digests}
    return {**fields, "digests": digests}


def _fields(document: Document, *, detached: bool, source_file: str | None) -> tuple[Json, str]:
    from hubokit.validation.verdict import Verdict

    thing = document.thing
    if isinstance(thing, Verdict):
        return verdict_document(thing, files=document.files, extensions=document.extensions), "verdict"
    core = model_fields(document.model)
    terms = core.pop("terms")
    if isinstance(thing, Hamiltonian):
        trail = list(document.trail)
    else:
        trail = trail_fields(thing, detached=detached, file=source_file)
    beside: Json = {
        "intent": dict(document.intent),
        "trail": trail,
        "notes": dict(document.notes),
        "extensions": dict(document.extensions),
    }
    core["auxiliaries"] = list(document.auxiliaries)
    ordered = ("document", "version", "domain", "convention", "variables", "auxiliaries", "resolution", "constant")
    head = {key: core[key] for key in ordered if key != "auxiliaries" or core[key]}
    return {**head, "terms": terms, **{key: value for key, value in beside.items() if value}}, "model"


def document_text(document: Mapping[str, Any]) -> Iterator[bytes]:
    """The bytes of a document file, in parts; see `hubokit.exchange.layout`."""
    return laid_out(document)


def write_document(
    thing: Thing | Document,
    path: str | os.PathLike[str],
    *,
    force: bool = False,
    detached: bool = False,
    source_file: str | None = None,
) -> None:
    """Write a ``.json`` or ``.json.gz`` document.

    Raises
    ------
    InputError
        The file exists and force is not set, it cannot be written, or the thing does not fit into a document.
    """
    try:
        fields = document_to_json(thing, detached=detached, source_file=source_file)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None
    write_bytes(path, document_text(fields), force=force)


def plain_json(value: Any) -> Any:
    """The same with lists in the place of arrays, so that any JSON printer takes it.

    Examples
    --------
    >>> plain_json(document_to_json(Hamiltonian({("a",): 3}, "boolean")))["terms"]
    [{'locality': 1, 'members': [[0]], 'weights': [1]}]
    """
    if isinstance(value, Mapping):
        return {key: plain_json(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain_json(item) for item in value]
    return value.tolist() if hasattr(value, "tolist") else value
