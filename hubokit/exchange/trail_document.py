"""The trail of a model document: the source first, then one entry for each step; there and back.

The first entry embeds the source (up to ``EMBED_LIMIT`` terms) or names its file, and carries what concerns the whole
way: what was kept, the origin of source variables that were renamed, flipped, merged or fixed, and a scale and shift
that were declared without steps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np

from hubokit.errors import InputError
from hubokit.exchange.json_text import quoted
from hubokit.exchange.model_document import model_fields, read_model
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction, format_fraction
from hubokit.model.trail import Origin, Step, Trail

if TYPE_CHECKING:
    from hubokit.reduction.result import Reduction

EMBED_LIMIT = 100_000
"""A source of at most so many terms is embedded in the trail unless it is asked for detached."""

Json = dict[str, Any]


def trail_fields(reduction: Reduction, *, detached: bool = False, file: str | None = None) -> list[Json]:
    """The trail of a reduction as a list of entries.

    Parameters
    ----------
    reduction : Reduction
    detached : bool
        Leave the source out, whatever its size.
    file : str, optional
        Name of the source's file; by default what the trail says.

    Returns
    -------
    list of dict
        The source first; its terms, where embedded, are integer arrays.
    """
    trail, source = reduction.trail, reduction.source
    first: Json = {"step": "source", "digest": source.digest}
    name = file or trail.source_file
    if name is not None:
        first["file"] = name
    if not detached and len(source) <= EMBED_LIMIT:
        first["model"] = model_fields(source)
    if trail.keep is not None:
        first["keep"] = trail.keep
    if reduction.origin is not None:
        first["origin"] = {label: _written_origin(image) for label, image in reduction.origin.items()}
    if not trail.steps:
        if reduction.scale is not None:
            first["scale"] = format_fraction(as_fraction(reduction.scale))
        if reduction.shift is not None:
            first["shift"] = format_fraction(as_fraction(reduction.shift))
    return [first, *(_written_step(step) for step in trail.steps)]


def _written_origin(image: Origin | int) -> str | list[str] | int:
    if isinstance(image, str):
        return image
    if isinstance(image, tuple):
        return list(image)
    return int(image)


def _written_step(step: Step) -> Json:
    written: Json = {
        "step": step.name,
        "start": step.start,
        "scale": format_fraction(step.scale),
        "shift": format_fraction(step.shift),
    }
    if step.auxiliaries:
        written["auxiliaries"] = list(step.auxiliaries)
    if step.parameters:
        written["parameters"] = plain(step.parameters)
    return written


def plain(value: Any) -> Any:
    """Plain JSON values: rationals become strings, numpy numbers Python's, tuples and arrays lists.

    Examples
    --------
    >>> plain({"deviation": Fraction(1, 3), "pairs": ((np.int64(0), 1),)})
    {'deviation': '1/3', 'pairs': [[0, 1]]}
    """
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, (list, tuple, set, frozenset)):
        return [plain(item) for item in value]
    if isinstance(value, Fraction):
        return format_fraction(value)
    return value.item() if isinstance(value, np.generic) else value


def read_trail(entries: Sequence[Json], arrays: Mapping[str, Any]) -> tuple[Trail, list[Json]]:
    """A trail from entries that the schema has accepted, with the long lists of the document as arrays.

    Returns
    -------
    trail : Trail
    entries : list of dict
        The same entries with arrays in the place of the embedded terms, for the digest.

    Raises
    ------
    InputError
        The embedded source is not the model of the digest, or the first step does not begin at the source.
    """
    if not entries:
        return Trail(), []
    first = dict(entries[0])
    source: Hamiltonian | None = None
    if "model" in first:
        source, first["model"] = read_model(first["model"], arrays, "/trail/0/model")
        if source.digest != first["digest"]:
            raise InputError(
                f"the embedded source is another function than the digest says; its own is {source.digest}",
                "/trail/0/digest",
            )
    steps = tuple(_read_step(entry, f"/trail/{place}") for place, entry in enumerate(entries) if place)
    if steps and steps[0].start != first["digest"]:
        raise InputError("the first step does not start at the source's digest", "/trail/1/start")
    trail = Trail(
        steps=steps,
        source=source,
        source_digest=first["digest"],
        source_file=first.get("file"),
        keep=first.get("keep"),
    )
    return trail, [first, *entries[1:]]


def _read_step(entry: Json, pointer: str) -> Step:
    return Step(
        name=entry["step"],
        start=entry["start"],
        scale=as_fraction(entry["scale"], f"{pointer}/scale"),
        shift=as_fraction(entry["shift"], f"{pointer}/shift"),
        auxiliaries=tuple(entry.get("auxiliaries", ())),
        parameters=entry.get("parameters", {}),
    )


def read_reduction(
    model: Hamiltonian,
    auxiliaries: tuple[str, ...],
    trail: Trail,
    entries: Sequence[Json],
    source: Hamiltonian | None,
) -> Reduction | None:
    """The reduction that a model document tells of, or None where its source is not at hand.

    Parameters
    ----------
    model, auxiliaries, trail
        As read from the document.
    entries : sequence of dict
        The entries of the trail; the first may carry origin, scale and shift.
    source : Hamiltonian, optional
        The source where the caller has it.

    Raises
    ------
    InputError
        The source given is not the one of the trail, or origin, scale and shift do not fit.
    """
    if source is not None and trail.source_digest is not None and source.digest != trail.source_digest:
        raise InputError(
            f"the source given is another function ({source.digest}) than the one the trail began with "
            f"({trail.source_digest}); name the right file with --source",
            "/trail/0/digest",
        )
    source = trail.source if source is None else source
    if source is None:
        return None
    from hubokit.reduction.result import Reduction

    first = entries[0] if entries else {}
    scale, shift = first.get("scale"), first.get("shift")
    if trail.steps and (scale is not None or shift is not None):
        raise InputError("the steps declare scale and shift; take them out here", "/trail/0")
    origin = None
    if "origin" in first:
        origin = {label: _read_origin(image) for label, image in first["origin"].items()}
    try:
        return Reduction(
            source,
            model,
            auxiliaries,
            origin=origin,
            scale=None if scale is None else as_fraction(scale, "/trail/0/scale"),
            shift=None if shift is None else as_fraction(shift, "/trail/0/shift"),
            trail=trail,
        )
    except InputError as error:
        place = {"auxiliaries": "/auxiliaries", "origin": "/trail/0/origin"}.get(error.place or "", error.place)
        raise InputError(error.message, place) from None


def _read_origin(image: Any) -> Origin:
    if isinstance(image, list):
        return ("not", image[1])
    return image if isinstance(image, str) else Fraction(int(image))


def refuse_strangers(model: Hamiltonian, auxiliaries: Sequence[str], pointer: str = "/auxiliaries") -> None:
    """Raise for an auxiliary that is no variable of the model.

    Raises
    ------
    InputError
        With the pointer of the first such name.
    """
    for place, name in enumerate(auxiliaries):
        if name not in model.positions:
            raise InputError(f"the auxiliary {quoted(name)} is not among the variables", f"{pointer}/{place}")
