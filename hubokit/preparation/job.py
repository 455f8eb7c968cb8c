"""prepare(): from a design to a folder with the reduced model, the verdict and every export."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import Number
from hubokit.preparation.contents import DOCUMENTS, export, export_names, readme_text
from hubokit.preparation.figures import SourceFigures, intent_remarks, source_figures
from hubokit.preparation.folder import folder_made_beside, refuse_folder

if TYPE_CHECKING:
    from hubokit.exchange.documents import Document
    from hubokit.reduction.result import Reduction
    from hubokit.validation.verdict import Verdict


@dataclass(frozen=True)
class Prepared:
    """What `prepare` wrote and found.

    Parameters
    ----------
    folder : Path
        Where the files are.
    files : mapping of str to str
        File name to what the file is.
    left_out : mapping of str to str
        Format to the reason why the model could not be written in it.
    figures : SourceFigures
        Ground level of the source.
    reduction : Reduction
    verdict : Verdict
    """

    folder: Path
    files: Mapping[str, str]
    left_out: Mapping[str, str]
    figures: SourceFigures
    reduction: Reduction
    verdict: Verdict

    @property
    def paths(self) -> dict[str, Path]:
        """File name to path."""
        return {name: self.folder / name for name in self.files}

    @property
    def exit_code(self) -> int:
        """0 every asked claim proved, 1 one refuted, 3 one open or only tested."""
        return self.verdict.exit_code


def prepare(
    thing: Hamiltonian | Document | str | os.PathLike[str],
    folder: str | os.PathLike[str],
    *,
    keep: str = "one-to-one",
    prefer: str = "auxiliaries",
    method: str = "auto",
    domain: str | None = None,
    auxiliary_gap: Number | None = None,
    evidence: str = "auto",
    time: float = 600.0,
    seed: int = 0,
    exports: Iterable[str] | None = None,
    force: bool = False,
    progress: Callable[[int, int], None] | None = None,
) -> Prepared:
    """Reduce a design, check the reduction, and write both with every export into one folder.

    Parameters
    ----------
    thing : Hamiltonian, Document or path
        The design before any reduction.
    folder : path
        The folder to make.
    keep, prefer, method, domain, auxiliary_gap, seed
        As for `hubokit.reduce`.
    evidence, time, progress
        As for `hubokit.check`.
    exports : iterable of str, optional
        Names of the formats to write beside the documents; by default every one that takes the models.
    force : bool
        Replace a folder that an earlier run made.

    Returns
    -------
    Prepared

    Raises
    ------
    InputError
        Bad input, a model that is already reduced, or a folder that exists.
    LimitError
        Work refused before its start.

    Examples
    --------
    >>> import tempfile
    >>> design = Hamiltonian({("a", "b", "c"): -1, ("a",): 1}, domain="boolean")
    >>> with tempfile.TemporaryDirectory() as place:
    ...     made = prepare(design, Path(place) / "out")
    ...     made.verdict.holds("one-to-one"), (made.folder / "reduced.json").exists()
    (True, True)
    """
    from hubokit.exchange.documents import Document, as_document, write_document
    from hubokit.reduction.reduce import reduce
    from hubokit.validation.check import check

    target = Path(folder)
    refuse_folder(target, force=force)
    formats = export_names(exports)
    document = _document_of(thing)
    source = document.model
    reduction = reduce(
        source, method=method, keep=keep, prefer=prefer, domain=domain, auxiliary_gap=auxiliary_gap, seed=seed
    )
    verdict = check(reduction, evidence=evidence, time=time, progress=progress)
    figures = source_figures(source, verdict, time)
    remarks = intent_remarks(document.intent, source, figures.ground_energy)
    verdict = replace(verdict, notes=(*verdict.notes, *remarks))
    reduced = replace(
        as_document(reduction), intent=document.intent, notes=document.notes, extensions=document.extensions
    )
    judged = Document(verdict, files={"source": "source.json", "model": "reduced.json"})
    with folder_made_beside(target, force=force) as place:
        write_document(replace(document, digests={}), place / "source.json")
        write_document(reduced, place / "reduced.json", source_file="source.json")
        write_document(judged, place / "verdict.json")
        exported, left_out = export(reduction, place, formats)
        files = {**DOCUMENTS, **exported}
        text = readme_text(reduction, verdict, files, left_out)
        (place / "README.txt").write_text(text, encoding="utf-8")
    return Prepared(target, files, left_out, figures, reduction, verdict)


def _document_of(thing: Hamiltonian | Document | str | os.PathLike[str]) -> Document:
    """The design with whatever stands beside it in its file."""
    from hubokit.exchange.documents import Document, as_document
    from hubokit.exchange.formats import read_document

    document = as_document(thing) if isinstance(thing, (Hamiltonian, Document)) else read_document(thing)
    if isinstance(document.thing, Hamiltonian):
        return document
    kind = "a verdict" if not hasattr(document.thing, "model") else "already a reduced model"
    file = None if isinstance(thing, (Hamiltonian, Document)) else os.fspath(thing)
    raise InputError(
        f"this is {kind}; name the model before the reduction (hubokit check judges a reduced one)", file=file
    )
