"""What the schema says about a document, as one sentence with the JSON pointer of the place."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from hubokit.errors import InputError
from hubokit.exchange.json_text import escaped, quoted
from hubokit.exchange.schema_files import KINDS, validator
from hubokit.exchange.term_arrays import taken_out

if TYPE_CHECKING:
    from jsonschema import ValidationError

_TYPES = {
    "object": "an object",
    "array": "a list",
    "string": "a string",
    "integer": "an integer",
    "number": "a number",
    "boolean": "true or false",
    "null": "null",
}


def refuse_invalid(kind: str, document: Any) -> dict[str, Any]:
    """Raise unless the schema of the kind accepts the document.

    Parameters
    ----------
    kind : "model", "verdict" or "summary"
    document : object
        Plain JSON values; in a model, term lists may be numpy arrays, which are passed over.

    Returns
    -------
    dict
        The long lists of a model as arrays, by their JSON pointers.

    Raises
    ------
    InputError
        The first violation, with its JSON pointer.

    Examples
    --------
    >>> refuse_invalid("summary", {"document": "hubokit/summary", "version": "1.0", "command": "show"})
    Traceback (most recent call last):
    hubokit.errors.InputError: the field "made_by" is missing from the document
    """
    skeleton, lists = taken_out(document) if kind == "model" else (document, [])
    error = next(iter(validator(kind).iter_errors(skeleton)), None)
    if error is not None:
        raise sentence(error)
    return {pointer: check(value, pointer) for pointer, check, value in lists}


def kind_of(document: Any) -> str:
    """The kind of a document by its field ``document``, with the version checked.

    Raises
    ------
    InputError
        Not an object, another family, or a major version that is not read here.

    Examples
    --------
    >>> kind_of({"document": "hubokit/model", "version": "1.0"})
    'model'
    """
    if not isinstance(document, dict):
        raise InputError(f"a document is a JSON object, not {quoted(document)}")
    if "document" not in document:
        raise InputError(f'the field "document" is missing; it says hubokit/ and one of {", ".join(KINDS)}')
    named = document["document"]
    kind = named.removeprefix("hubokit/") if isinstance(named, str) and named.startswith("hubokit/") else ""
    if kind not in KINDS:
        known = ", ".join(f'"hubokit/{name}"' for name in KINDS)
        raise InputError(f"a kind of document that is not known: {quoted(named)}; known are {known}", "/document")
    version = document.get("version")
    if isinstance(version, str) and not version.startswith("1."):
        raise InputError(f"version {quoted(version)} is not read here; versions 1.x are", "/version")
    return kind


def sentence(error: ValidationError) -> InputError:
    """A violation that jsonschema found, in the words of this house."""
    path = [*error.absolute_path]
    wanted: Any = error.validator_value
    keyword = error.validator
    found: Any = error.instance
    pointer = "".join(f"/{escaped(step)}" for step in path)
    here = "this object" if path else "the document"
    schema: Any = error.schema
    if keyword == "required":
        missing = next(name for name in wanted if name not in found)
        return InputError(f"the field {quoted(missing)} is missing from {here}", pointer)
    if keyword == "additionalProperties" and wanted is False:
        unknown = next(name for name in found if name not in schema.get("properties", {}))
        return InputError(
            'there is no field of this name; put what is your own into "notes" or "extensions"',
            f"{pointer}/{escaped(unknown)}",
        )
    if keyword == "type":
        kinds = [wanted] if isinstance(wanted, str) else wanted
        return InputError(f"must be {' or '.join(_TYPES[kind] for kind in kinds)}, not {quoted(found)}", pointer)
    if keyword in ("const", "enum"):
        choices = [wanted] if keyword == "const" else wanted
        return InputError(
            f"must be {' or '.join(quoted(choice) for choice in choices)}, not {quoted(found)}", pointer
        )
    if keyword == "pattern":
        what = schema.get("description") or "a text of another form"
        return InputError(f"{quoted(found)} is not as it must be: {what}", pointer)
    if keyword in ("minLength", "maxLength", "minItems", "maxItems"):
        bound = f"at least {wanted} are needed" if keyword.startswith("min") else f"at most {wanted} are read"
        unit = "characters" if keyword.endswith("Length") else "items"
        return InputError(f"holds {len(found)} {unit}; {bound}", pointer)
    if keyword in ("minimum", "maximum"):
        bound = "at least" if keyword == "minimum" else "at most"
        return InputError(f"must be {bound} {wanted}, not {quoted(found)}", pointer)
    if keyword == "uniqueItems":
        return InputError("an item stands twice in this list", pointer)
    if keyword == "not":
        return InputError(f"{quoted(found)} may not stand here", pointer)
    return InputError(f"does not fit the schema ({keyword}): {quoted(found)}", pointer)
