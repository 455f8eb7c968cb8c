"""read() and write(): a file's suffix, or a name, to a format; one table of formats."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import partial
from typing import TYPE_CHECKING

from hubokit.errors import HubokitError, InputError
from hubokit.exchange import documents
from hubokit.exchange.arrays import load_arrays, write_arrays
from hubokit.exchange.cnf import load_cnf, write_cnf
from hubokit.exchange.documents import Document, as_document, write_document
from hubokit.exchange.files import Progress, reporting
from hubokit.exchange.linear_programs import load_program, write_program
from hubokit.exchange.matrix_market import load_matrix_market, write_matrix_market
from hubokit.exchange.opb import load_opb, write_opb
from hubokit.exchange.pauli import load_pauli, write_pauli
from hubokit.exchange.reading import Reading
from hubokit.exchange.table import load_table, write_table
from hubokit.exchange.wcnf import load_wcnf, write_wcnf
from hubokit.model.hamiltonian import Hamiltonian

if TYPE_CHECKING:
    from hubokit.exchange.documents import Thing


@dataclass(frozen=True)
class Format:
    """A file format.

    Parameters
    ----------
    name : str
        What ``--format`` takes.
    suffixes : tuple of str
        Each also with ``.gz`` behind it where `packed`.
    load : callable or None
        Path to `Reading`; None where the format is only written.
    write : callable or None
        ``write(model, path, force=...)``; None where it is only read.
    carries : str
        In words, which models it holds and how.
    domain : "any", "boolean" or "spin"
        Domain in which the file speaks; a model of the other is changed, and changed back on reading.
    locality : int or None
        Largest product it can hold.
    packed : bool
        Whether ``.gz`` is read and written.
    forms : mapping of str to dict
        What ``--form`` takes where the format is written in more than one way, the usual one first: the word to
        what `write` is told. Every form is read alike.
    """

    name: str
    suffixes: tuple[str, ...]
    load: Callable[[str | os.PathLike[str]], Reading] | None
    write: Callable[..., None] | None
    carries: str
    domain: str = "any"
    locality: int | None = None
    packed: bool = True
    forms: Mapping[str, Mapping[str, str]] = field(default_factory=dict)

    def told(self, form: str | None) -> Mapping[str, str]:
        """What `write` is told for a form; nothing for None.

        Raises
        ------
        InputError
            No such form; the message lists them.

        Examples
        --------
        >>> FORMATS["wcnf"].told("old-header")
        {'header': 'old'}
        """
        if form is None:
            return {}
        if form not in self.forms:
            there = f"there are {', '.join(self.forms)}" if self.forms else "it is written in one form only"
            raise InputError(f"{self.name} files have no form {form!a}; {there}", "form")
        return self.forms[form]


JSON = "json"

FORMATS: dict[str, Format] = {
    entry.name: entry
    for entry in (
        Format(JSON, (".json",), None, None, "any model, a reduction with its trail, a verdict: the schema"),
        Format("opb", (".opb",), load_opb, write_opb, "any model as an integer objective with products", "boolean"),
        Format(
            "wcnf",
            (".wcnf",),
            load_wcnf,
            write_wcnf,
            "any model as weighted clauses",
            "boolean",
            forms={"no-header": {"header": "2022"}, "old-header": {"header": "old"}},
        ),
        Format("cnf", (".cnf", ".dimacs"), load_cnf, write_cnf, "a model of small weights as clauses", "boolean"),
        *(
            Format(
                kind,
                (f".{kind}",),
                partial(load_program, kind=kind),
                partial(write_program, kind=kind),
                "a linear integer program",
                "boolean",
                packed=False,
            )
            for kind in ("mps", "lp")
        ),
        Format(
            "matrix-market",
            (".mtx",),
            load_matrix_market,
            write_matrix_market,
            "a quadratic model as a matrix, spin fields in a file of their own",
            locality=2,
            forms={"upper": {"matrix": "upper"}, "symmetric": {"matrix": "symmetric"}},
        ),
        Format("npz", (".npz",), load_arrays, write_arrays, "any model as numpy arrays", packed=False),
        Format(
            "csv",
            (".csv",),
            load_table,
            write_table,
            "any model as a table of terms",
            forms={"named": {"members": "names"}, "numbered": {"members": "numbers"}},
        ),
        Format("pauli", (".pauli",), load_pauli, write_pauli, "any model as Pauli-Z strings", "spin"),
    )
}
"""Every format by its name."""


def format_of(path: str | os.PathLike[str], name: str | None = None, option: str = "--format") -> Format:
    """The format of a file by its suffix, or the one of that name; `option` is what would name it.

    Raises
    ------
    InputError
        No such format; the message lists them.

    Examples
    --------
    >>> format_of("plan.opb.gz").name
    'opb'
    """
    file = os.fspath(path)
    if name is not None:
        if name not in FORMATS:
            raise InputError(f"no such format: {name!a}; there are {', '.join(FORMATS)}", file=file)
        return FORMATS[name]
    lower = file.lower()
    bare = lower.removesuffix(".gz")
    for entry in FORMATS.values():
        if bare.endswith(entry.suffixes):
            if bare != lower and not entry.packed:
                raise InputError(f"{entry.name} files are not read or written as .gz", file=file)
            return entry
    known = ", ".join(suffix for entry in FORMATS.values() for suffix in entry.suffixes)
    raise InputError(f"the suffix says no format; use one of {known}, or name it with {option}", file=file)


def read_document(
    path: str | os.PathLike[str],
    source: Hamiltonian | None = None,
    format: str | None = None,
    progress: Progress | None = None,
) -> Document:
    """Read a file with everything it holds beside the model.

    Parameters
    ----------
    path : path
    source : Hamiltonian, optional
        The source of a reduced model whose trail does not embed it.
    format : str, optional
        Name of the format, where the suffix does not say it.
    progress : callable, optional
        Called with the bytes read and the bytes in all.

    Returns
    -------
    Document
        What a reader of a foreign format has to say stands in ``notes["reading"]``.

    Raises
    ------
    InputError, LimitError
        Bad input, with file and place.
    """
    with reporting(progress):
        return _document(path, source, format_of(path, format, "hubokit convert --from"))


def _document(path: str | os.PathLike[str], source: Hamiltonian | None, entry: Format) -> Document:
    if entry.name == JSON:
        return documents.read_document(path, source)
    if entry.load is None:
        raise InputError(f"{entry.name} files are only written", file=os.fspath(path))
    try:
        reading = entry.load(path)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None
    notes: dict[str, object] = {"reading": list(reading.remarks)} if reading.remarks else {}
    if source is not None:
        return _reduced(reading.model, source, notes)
    return Document(reading.model, notes=notes)


def _reduced(model: Hamiltonian, source: Hamiltonian, notes: dict[str, object]) -> Document:
    """A foreign file beside its source: variables that the source does not have are the auxiliaries."""
    from hubokit.reduction.result import Reduction

    auxiliaries = tuple(label for label in model.labels if label not in source.positions)
    return Document(Reduction(source, model, auxiliaries), auxiliaries, notes=notes)


def read(
    path: str | os.PathLike[str],
    source: Hamiltonian | None = None,
    format: str | None = None,
    progress: Progress | None = None,
) -> Thing:
    """Read a file; the parameters are those of `read_document`.

    Returns
    -------
    Hamiltonian, Reduction or Verdict
        A Reduction where the document's trail embeds its source or `source` is given.

    Raises
    ------
    InputError, LimitError
        Bad input, with file and place.
    """
    return read_document(path, source, format, progress).thing


def _told(entry: Format, form: str | None, path: str | os.PathLike[str]) -> Mapping[str, str]:
    try:
        return entry.told(form)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None


def write(
    thing: Thing | Document,
    path: str | os.PathLike[str],
    format: str | None = None,
    *,
    force: bool = False,
    detached: bool = False,
    source_file: str | None = None,
    form: str | None = None,
) -> None:
    """Write a Hamiltonian, Reduction, Verdict or Document.

    Parameters
    ----------
    thing : Hamiltonian, Reduction, Verdict or Document
        In every format but JSON a Reduction is written as its model.
    path : path
    format : str, optional
        Name of the format; by default the suffix says it.
    force : bool
        Whether an existing file is replaced.
    detached, source_file
        In JSON: leave the source out of the trail, and the name of its file.
    form : str, optional
        One of the format's `Format.forms`, such as "symmetric" for a Matrix Market file.

    Raises
    ------
    InputError, LimitError
        The file exists, the format cannot hold the thing, or it has no such form.
    """
    entry = format_of(path, format)
    told = _told(entry, form, path)
    if entry.name == JSON:
        write_document(thing, path, force=force, detached=detached, source_file=source_file)
        return
    if entry.write is None:
        raise InputError(f"{entry.name} files are only read", file=os.fspath(path))
    try:
        model = as_document(thing).model
        if entry.locality is not None and model.locality > entry.locality:
            raise InputError(
                f"the model has products of {model.locality} variables, {entry.name} holds {entry.locality}; "
                "reduce it first (hubokit reduce)"
            )
        entry.write(model, path, force=force, **told)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None
