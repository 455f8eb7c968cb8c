"""convert(): the same model in another format, with what was changed on the way and what would be lost."""

from __future__ import annotations

import os
from dataclasses import dataclass, replace

from hubokit.errors import InputError
from hubokit.exchange.clauses import posiform
from hubokit.exchange.documents import Document
from hubokit.exchange.files import Progress, refuse_existing
from hubokit.exchange.formats import JSON, Format, format_of, read_document, write
from hubokit.exchange.header import sidecar_path
from hubokit.exchange.programs import EXACT, largest
from hubokit.exchange.table import NAMED_LIMIT
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction

SIDECAR = ("mps", "lp")
"""Formats without comment lines, whose names and facts stand in a sidecar."""

COUNTED = ("opb", "wcnf", "cnf", "mps", "lp", "matrix-market")
"""Formats with whole weights: scale and constant stand beside them."""

NUMBERED = ("opb", "wcnf", "cnf", "matrix-market", "pauli")
"""Formats that number the variables and hold their names in comment lines."""

SOLVED = ("opb", "wcnf", "matrix-market")
"""Formats with whole weights of any size, whose readers may compute in floats."""

CONVENTIONS = {"1-2x": "s = 1 - 2x", "2x-1": "s = 2x - 1"}


@dataclass(frozen=True)
class Conversion:
    """What a conversion did.

    Parameters
    ----------
    source, document : Document
        As read, and as written.
    read_as, format : Format
        Of the file read, and of the file written.
    changes : tuple of str
        What the file says in another way; reading it undoes this.
    losses : tuple of str
        What the file does not say at all.
    """

    source: Document
    document: Document
    read_as: Format
    format: Format
    changes: tuple[str, ...]
    losses: tuple[str, ...]

    @property
    def sides(self) -> tuple[str, str]:
        """Format, domain and convention of the file read and of the file written."""
        return _side(self.read_as, self.source.model), _side(self.format, self.document.model)


def convert(
    path_in: str | os.PathLike[str],
    path_out: str | os.PathLike[str],
    *,
    source_format: str | None = None,
    target_format: str | None = None,
    domain: str | None = None,
    form: str | None = None,
    lossy: bool = False,
    force: bool = False,
    progress: Progress | None = None,
) -> Conversion:
    """Read a file and write it in another format, or in the other domain.

    Parameters
    ----------
    path_in, path_out : path
    source_format, target_format : str, optional
        Names of formats, where the suffixes do not say them.
    domain : "spin" or "boolean", optional
        Domain of the model written; by default its own.
    form : str, optional
        One of the forms of a format that is written in more than one way.
    lossy : bool
        Whether something may be left behind (trail, intent, notes).
    force : bool
        Whether an existing file is replaced.
    progress : callable, optional
        Called with the bytes read and the bytes in all.

    Returns
    -------
    Conversion

    Raises
    ------
    InputError
        Bad input, a verdict, an existing file, a loss that was not allowed, a format that cannot hold the model.
    LimitError
        A change of domain that expands too far, weights that the format does not hold exactly.
    """
    entry = format_of(path_out, target_format)
    try:
        entry.told(form)
    except InputError as error:
        raise error.located(file=os.fspath(path_out)) from None
    refuse_existing(path_out, force=force)
    source = read_document(path_in, format=source_format, progress=progress)
    if getattr(source.thing, "claims", None) is not None:
        raise InputError("a verdict stands in JSON alone; name a model document", file=os.fspath(path_in))
    document, changes = _in_domain(source, domain, os.fspath(path_in))
    changes += [str(remark) for remark in source.notes.get("reading", ())]
    lost = losses(document, entry)
    if lost and not lossy:
        raise InputError(
            f"{entry.name} files do not hold {' and '.join(lost)}; allow the loss with --lossy, or write .json",
            file=os.fspath(path_out),
        )
    changes += changed(document, entry, path_out, form)
    write(document, path_out, entry.name, force=force, form=form)
    return Conversion(source, document, format_of(path_in, source_format), entry, tuple(changes), tuple(lost))


def _side(entry: Format, model: Hamiltonian) -> str:
    domain = model.domain if entry.domain == "any" else entry.domain
    return f"{entry.name}, {domain} variables, {CONVENTIONS[model.convention]}"


def _in_domain(document: Document, domain: str | None, file: str) -> tuple[Document, list[str]]:
    if domain is None or domain == document.model.domain:
        return document, []
    if not isinstance(document.thing, Hamiltonian):
        raise InputError("a reduction keeps its domain; reduce the source again with --domain", file=file)
    model = document.thing.in_domain(domain)
    said = f"{document.model.domain} became {domain} by {CONVENTIONS[model.convention]}"
    return replace(document, thing=model, trail=(), digests={}), [said]


def changed(document: Document, entry: Format, path: str | os.PathLike[str], form: str | None = None) -> list[str]:
    """What a file of this format says in another way than the model: domain, scale, constant, names.

    Examples
    --------
    >>> model = Hamiltonian({("mist valve", "pump"): "1/2", (): 3}, "spin")
    >>> for line in changed(Document(model), format_of("plan.opb"), "plan.opb"):
    ...     print(line)
    the spin model is written in boolean variables by s = 1 - 2x; reading undoes it
    weights are in units of 1 and the constant is 7/2: comment lines say both, and reading undoes it
    variables are numbered from 1 in the order of the model; comment lines hold their names
    """
    model = document.model
    if entry.name == JSON:
        return []
    said = []
    if entry.domain not in ("any", model.domain):
        rule = CONVENTIONS[model.convention]
        said.append(f"the {model.domain} model is written in {entry.domain} variables by {rule}; reading undoes it")
        model = model.in_domain(entry.domain)
    place = f"the sidecar {sidecar_path(path).name} says" if entry.name in SIDECAR else "comment lines say"
    numbered = entry.name == "csv" and (form == "numbered" or (form is None and len(model) > NAMED_LIMIT))
    halved = form == "symmetric"
    unit = model.resolution / 2 if halved else model.resolution
    if (entry.name in COUNTED or numbered) and (unit != 1 or model.constant):
        constant = model.constant
        if entry.name in ("wcnf", "cnf"):
            constant += posiform(model)[0] * model.resolution
        facts = f"weights are in units of {format_fraction(unit)} and the constant is {format_fraction(constant)}"
        said.append(f"{facts}: {place} both, and reading undoes it")
    if halved:
        said.append("every pair stands halved on both sides of the diagonal")
    if entry.name == "matrix-market" and model.domain == "spin" and any(b.locality == 1 for b in model.blocks):
        said.append("fields stand in a second file, .fields.mtx")
    if entry.name in (*NUMBERED, *SIDECAR) or numbered:
        holder = f"the sidecar {sidecar_path(path).name} holds" if entry.name in SIDECAR else "comment lines hold"
        said.append(f"variables are numbered from 1 in the order of the model; {holder} their names")
    if entry.name in SOLVED and any(largest(block.weights) > EXACT for block in model.blocks):
        said.append("weights exceed 2**53: a solver that computes in floats rounds them")
    if entry.name in SIDECAR and model.locality > 1:
        count = sum(len(block) for block in model.blocks if block.locality > 1)
        said.append(f"{count} products became columns with the rows that tie them to their members")
    return said


def losses(document: Document, entry: Format) -> list[str]:
    """What a file of this format does not hold of the document.

    Examples
    --------
    >>> losses(Document(Hamiltonian({("a",): 1}, "spin"), intent={"ground_energy": "-1"}), format_of("m.opb"))
    ['the intent']
    """
    if entry.name == JSON:
        return []
    lost = []
    if not isinstance(document.thing, Hamiltonian):
        lost.append("the source")
    if not isinstance(document.thing, Hamiltonian) or document.trail:
        lost.append("the trail")
    if document.auxiliaries:
        lost.append("which variables are auxiliaries")
    kept = {name: value for name, value in document.notes.items() if name != "reading"}
    beside = (("the intent", document.intent), ("the notes", kept), ("the extensions", document.extensions))
    return lost + [name for name, value in beside if value]
