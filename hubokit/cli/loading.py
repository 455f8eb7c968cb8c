"""What a command is given: models, reductions made here or elsewhere."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path

from hubokit.cli import options
from hubokit.cli.progress import reading
from hubokit.cli.text import listing
from hubokit.errors import HubokitError, InputError
from hubokit.exchange.documents import Document
from hubokit.exchange.files import read_text
from hubokit.exchange.formats import read_document
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Origin
from hubokit.reduction.result import Reduction


@dataclass(frozen=True)
class Elsewhere:
    """How a reduction made elsewhere is to be understood, as the command line says it."""

    source: Path | None = None
    auxiliaries: Sequence[str] | None = None
    origin: Sequence[str] | None = None
    scale: str | None = None
    shift: str | None = None

    @property
    def given(self) -> bool:
        """Whether anything but the source is said."""
        return any(part is not None for part in (self.auxiliaries, self.origin, self.scale, self.shift))


def load_document(path: Path, source: Hamiltonian | None = None, file_format: str | None = None) -> Document:
    """What a file holds, with everything beside it where it is a JSON document.

    Where a trail names the file of its source and that file lies beside, it is read too; its digest must fit.
    """
    with reading(path) as progress:
        document = read_document(path, source, file_format, progress)
    name = document.trail[0].get("file") if document.trail else None
    if source is None and isinstance(name, str) and Path(name).name == name and (path.parent / name).is_file():
        return read_document(path, load_model(path.parent / name))
    return document


def load_model(path: Path) -> Hamiltonian:
    """The Hamiltonian of a file; of a reduction, the reduced model."""
    return model_of(load_document(path), path)


def model_of(document: Document, path: Path) -> Hamiltonian:
    """The Hamiltonian of a document read from a file; an error names the file."""
    try:
        return document.model
    except HubokitError as error:
        raise error.located(file=str(path)) from None


def load_reduction(path: Path, elsewhere: Elsewhere) -> tuple[Reduction, Document]:
    """The reduction that a file and the options describe, and the document it came in.

    Raises
    ------
    InputError
        Where the source is neither embedded nor named, or a name of the options is unknown.
    """
    named = None if elsewhere.source is None else load_model(elsewhere.source)
    document = load_document(path, None if elsewhere.given else named)
    if isinstance(document.thing, Reduction) and not elsewhere.given:
        return document.thing, document
    try:
        model = document.model
        source = document.thing.source if named is None and isinstance(document.thing, Reduction) else named
        if source is None:
            hint = f" (the trail calls it {document.trail[0]['file']})" if _names_file(document) else ""
            raise InputError(f"the source is not in the file; --source SOURCE names it{hint}")
        origin = None if elsewhere.origin is None else read_origin(elsewhere.origin, source, model)
        added = options.names(elsewhere.auxiliaries) or document.auxiliaries or _unreached(source, model, origin)
        made = Reduction(
            source,
            model,
            added,
            origin=origin,
            scale=options.fraction(elsewhere.scale, "--scale"),
            shift=options.fraction(elsewhere.shift, "--shift"),
        )
        return made, document
    except HubokitError as error:
        raise error.located(file=str(path)) from None


def _names_file(document: Document) -> bool:
    return bool(document.trail) and "file" in document.trail[0]


def _unreached(source: Hamiltonian, model: Hamiltonian, origin: dict[str, Origin] | None) -> tuple[str, ...]:
    """Variables of the model that stand for no variable of the source: where nothing is said, the auxiliaries."""
    places = origin or {label: label for label in source.labels}
    reached = {_target(place) for place in places.values()}
    return tuple(label for label in model.labels if label not in reached)


def read_origin(texts: Sequence[str], source: Hamiltonian, model: Hamiltonian) -> dict[str, Origin]:
    """Where every source variable went: what is not mentioned kept its name."""
    origin: dict[str, Origin] = {label: label for label in source.labels if label in model.positions}
    known = set(source.labels)
    for text in texts:
        for label, place in _places(text, model).items():
            if label not in known:
                raise InputError(f"{label!r} is no variable of the source", place="--origin")
            origin[label] = place
    missing = [label for label in source.labels if label not in origin]
    if missing:
        raise InputError(f"it is not said where {listing(missing, 5)} went", place="--origin")
    return origin


def _places(text: str, model: Hamiltonian) -> dict[str, Origin]:
    if "=" in text and not Path(text).is_file():
        label, _, place = text.partition("=")
        return {label.strip(): _place(place.strip(), model)}
    try:
        content = json.loads(read_text(Path(text), limit=1 << 28))
    except (ValueError, RecursionError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(f"not a JSON document: {error}", file=text) from None
    if not isinstance(content, dict):
        raise InputError('a map is needed, such as {"a": "q0", "b": ["not", "q1"], "c": 1}', file=text)
    return {label: _place_in_file(place, f"/{label}", text) for label, place in content.items()}


def _place(text: str, model: Hamiltonian) -> Origin:
    if text in model.positions:
        return text
    if text.startswith("not:"):
        return ("not", text.removeprefix("not:"))
    try:
        return Fraction(int(text))
    except ValueError:
        raise InputError(f"{text!r} is no variable of the reduced model and no value", place="--origin") from None


def _place_in_file(place: object, pointer: str, file: str) -> Origin:
    if isinstance(place, str):
        return place
    if isinstance(place, int) and not isinstance(place, bool):
        return Fraction(place)
    if isinstance(place, list) and len(place) == 2 and place[0] == "not" and isinstance(place[1], str):
        return ("not", place[1])
    raise InputError('a name, ["not", name] or a value is needed', place=pointer, file=file)


def _target(place: Origin) -> str | None:
    if isinstance(place, str):
        return place
    return place[1] if isinstance(place, tuple) else None
