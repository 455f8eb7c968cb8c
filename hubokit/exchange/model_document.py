"""The function of a model document: domain, variables, terms; there and back."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.exchange.json_text import SAFE_INTEGER, quoted
from hubokit.exchange.term_arrays import LARGEST_NAME, LARGEST_WEIGHT
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.labels import as_labels
from hubokit.model.numbers import as_fraction, format_fraction
from hubokit.model.terms import row_keys

VERSION = "1.0"
"""The version that is written."""


def model_fields(model: Hamiltonian) -> dict[str, Any]:
    """The required fields of a model document; members and weights as integer arrays.

    Weights of a block that reach beyond 2**53 - 1 are a list of strings.

    Raises
    ------
    InputError
        A name or a weight is longer than a document can hold.

    Examples
    --------
    >>> fields = model_fields(Hamiltonian({("a", "b"): 10**20, ("a",): "1/2"}, "spin"))
    >>> fields["resolution"], fields["terms"][1]["weights"]
    ('1/2', ['200000000000000000000'])
    """
    for place, label in enumerate(model.labels):
        if len(label) > LARGEST_NAME:
            raise InputError(
                f"a name of {len(label)} characters; a document holds {LARGEST_NAME}", f"/variables/{place}"
            )
    return {
        "document": "hubokit/model",
        "version": VERSION,
        "domain": model.domain,
        "convention": model.convention,
        "variables": list(model.labels),
        "resolution": format_fraction(model.resolution),
        "constant": format_fraction(model.constant),
        "terms": [
            {
                "locality": block.locality,
                "members": block.members,
                "weights": _written_weights(block.weights, f"/terms/{place}/weights"),
            }
            for place, block in enumerate(model.blocks)
        ],
    }


def _written_weights(values: NDArray[Any], pointer: str) -> NDArray[np.int64] | list[str]:
    if values.dtype != object and int(np.abs(values).max()) <= SAFE_INTEGER:
        return values.astype(np.int64)
    listed = values.tolist()
    if max(map(abs, listed)) <= SAFE_INTEGER:
        return values.astype(np.int64)
    if max(map(abs, listed)) >= 10 ** (LARGEST_WEIGHT - 1):
        raise InputError(
            f"a weight of more than {LARGEST_WEIGHT - 1} digits; round the model to a coarser resolution", pointer
        )
    return [str(value) for value in listed]


def read_model(
    fields: Mapping[str, Any], arrays: Mapping[str, Any], pointer: str = ""
) -> tuple[Hamiltonian, dict[str, Any]]:
    """A Hamiltonian from fields that the schema has accepted.

    Parameters
    ----------
    fields : mapping
        A model document, or one embedded in a trail.
    arrays : mapping
        Its long lists as arrays, as `refuse_invalid` returns them.
    pointer : str
        Where `fields` stand in the whole document.

    Returns
    -------
    model : Hamiltonian
    fields : dict
        The same fields with arrays in the place of members and weights, for the digest.

    Raises
    ------
    InputError
        What no schema can say: a member out of range or twice in a term, the same term twice, lists of different
        length, the same locality twice, names that are equal after Unicode NFC.
    """
    labels = as_labels(fields["variables"], f"{pointer}/variables")
    blocks, seen = [], set()
    for place, block in enumerate(fields["terms"]):
        here = f"{pointer}/terms/{place}"
        locality = int(block["locality"])
        if locality in seen:
            raise InputError(f"locality {locality} has a block already; join the two", f"{here}/locality")
        seen.add(locality)
        blocks.append(_read_block(arrays, locality, len(labels), here))
    model = Hamiltonian.from_arrays(
        [members for members, _ in blocks],
        [values for _, values in blocks],
        domain=fields["domain"],
        labels=labels,
        resolution=as_fraction(fields["resolution"], f"{pointer}/resolution"),
        constant=as_fraction(fields["constant"], f"{pointer}/constant"),
        convention=fields["convention"],
    )
    terms = [
        {
            "locality": int(block["locality"]),
            "members": members,
            "weights": values if values.dtype != object else block["weights"],
        }
        for block, (members, values) in zip(fields["terms"], blocks, strict=True)
    ]
    return model, {**fields, "terms": terms}


def _read_block(
    arrays: Mapping[str, Any], locality: int, size: int, pointer: str
) -> tuple[NDArray[Any], NDArray[Any]]:
    lengths, flat = arrays[f"{pointer}/members"]
    values = arrays[f"{pointer}/weights"]
    if len(lengths) != len(values):
        raise InputError(f"{len(values)} weights for {len(lengths)} terms", f"{pointer}/weights")
    if (lengths != locality).any():
        row = int((lengths != locality).argmax())
        raise InputError(f"{lengths[row]} members in a block of locality {locality}", f"{pointer}/members/{row}")
    members = flat.reshape(len(lengths), locality)
    if members.size and int(members.max()) >= size:
        row, column = np.argwhere(members >= size)[0]
        raise InputError(
            f"member {members[row, column]} is out of range; there are {size} variables, counted from 0",
            f"{pointer}/members/{row}/{column}",
        )
    _refuse_repeats(members, size, f"{pointer}/members")
    return members, values


def _refuse_repeats(members: NDArray[np.int64], size: int, pointer: str) -> None:
    rows = np.sort(members, axis=1)
    same = (rows[:, 1:] == rows[:, :-1]).any(axis=1)
    if same.any():
        row = int(same.argmax())
        raise InputError(f"a member stands twice in the term {quoted_row(members[row])}", f"{pointer}/{row}")
    keys = row_keys(rows, size) if len(rows) else []
    order = np.lexsort(keys[::-1]) if keys else np.zeros(0, np.int64)
    equal = np.ones(max(len(order) - 1, 0), bool)
    for key in keys:
        equal &= key[order][1:] == key[order][:-1]
    if equal.any():
        place = int(equal.argmax())
        first, second = sorted((int(order[place]), int(order[place + 1])))
        raise InputError(
            f"the term {quoted_row(members[second])} stands twice, first at {pointer}/{first}", f"{pointer}/{second}"
        )


def quoted_row(row: NDArray[Any]) -> str:
    """A row of members for a message."""
    return quoted(" ".join(map(str, row[:20].tolist())))
