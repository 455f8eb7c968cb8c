"""Where the JSON Schemas lie, and validators made from them.

Inside an installed package they are package data, ``hubokit/schemas``; in a checkout they stand beside the package.
"""

from __future__ import annotations

import functools
import json
from pathlib import Path
from typing import TYPE_CHECKING, Any

from hubokit.errors import InputError

if TYPE_CHECKING:
    from jsonschema.protocols import Validator

KINDS = ("model", "verdict", "summary")
"""The documents of the family; the field ``document`` says ``hubokit/`` and one of these."""


def schema_folder() -> Path:
    """The folder that holds the schemas and their README.

    Raises
    ------
    InputError
        The schemas are missing from the installation.

    Examples
    --------
    >>> (schema_folder() / "model.schema.json").is_file()
    True
    """
    package = Path(__file__).resolve().parent.parent
    for folder in (package / "schemas", package.parent / "schemas"):
        if (folder / "model.schema.json").is_file():
            return folder
    raise InputError("the schemas are missing from the installation; install the package again")


@functools.cache
def schema(kind: str) -> dict[str, Any]:
    """The JSON Schema of a kind of document: ``model``, ``verdict`` or ``summary``.

    Examples
    --------
    >>> schema("model")["$id"]
    'urn:hubokit:schema:model:1.0'
    """
    loaded: dict[str, Any] = json.loads((schema_folder() / f"{kind}.schema.json").read_text("utf-8"))
    return loaded


@functools.cache
def validator(kind: str) -> Validator:
    """A validator for a kind of document, JSON Schema 2020-12."""
    from jsonschema import Draft202012Validator

    return Draft202012Validator(schema(kind))
