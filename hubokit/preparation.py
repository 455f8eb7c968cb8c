"""The main job as one call: read a design, reduce it, check it, write everything a backend needs into a folder.

The folder is written beside its final place under another name and renamed when it is complete, so that an
interrupted run leaves nothing that looks finished.
"""

from __future__ import annotations

import os
import secrets
import shutil
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING

from hubokit.errors import HubokitError, InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import Number, format_fraction

if TYPE_CHECKING:
    from hubokit.exchange.documents import Document
    from hubokit.reduction.result import Reduction
    from hubokit.validation.verdict import Verdict

DOCUMENTS = {
    "source.json": "the design as it was read",
    "reduced.json": "the reduced model, its auxiliaries, and the trail back to the source",
    "verdict.json": "claim by claim what is proved, with the evidence that an audit re-checks",
    "README.txt": "what each file is, and how to map answers back",
}

NOT_EXPORTED = ("json", "cnf")
"""The documents stand in the folder anyway; in CNF a weight of w would become w equal clauses."""


@dataclass(frozen=True)
class SourceFigures:
    """Ground level of the source, where the evidence at hand or a short search gives it.

    Parameters
    ----------
    ground_energy : Fraction or None
    degeneracy : int or None
        Number of ground states.
    gap : Fraction or None
        Separation from the next level; None also where there is one level only.
    note : str
        Why figures are missing; empty where they are not.
    """

    ground_energy: Fraction | None
    degeneracy: int | None
    gap: Fraction | None
    note: str = ""


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
    document = _document_of(thing)
    source = document.model
    reduction = reduce(
        source, method=method, keep=keep, prefer=prefer, domain=domain, auxiliary_gap=auxiliary_gap, seed=seed
    )
    verdict = check(reduction, evidence=evidence, time=time, progress=progress)
    figures = source_figures(source, verdict, time)
    reduced = replace(
        as_document(reduction), intent=document.intent, notes=document.notes, extensions=document.extensions
    )
    judged = Document(verdict, files={"source": "source.json", "model": "reduced.json"})
    with folder_made_beside(target, force=force) as place:
        write_document(replace(document, digests={}), place / "source.json")
        write_document(reduced, place / "reduced.json", source_file="source.json")
        write_document(judged, place / "verdict.json")
        exports, left_out = _export(reduction, place)
        files = {**DOCUMENTS, **exports}
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


def source_figures(source: Hamiltonian, verdict: Verdict, time: float) -> SourceFigures:
    """Ground level of the source: from the verdict where it has one, else by a search within the allowed time."""
    figures = verdict.figures
    energy, amount = figures.get("source-ground-energy"), figures.get("source-degeneracy")
    if energy is not None and energy.value is not None and amount is not None and amount.value is not None:
        return SourceFigures(energy.value, int(amount.value), verdict.source_gap)
    from hubokit.spectrum.search import ground_states

    try:
        level = ground_states(source, 1, time=time)
    except LimitError as error:
        return SourceFigures(None, None, None, f"not searched: {error}")
    return SourceFigures(level.energy, level.degeneracy, level.gap)


def refuse_folder(target: Path, *, force: bool) -> None:
    """Raise where the folder cannot be made, or may not be replaced.

    Raises
    ------
    InputError
        It exists and force is not set; it is a file; it holds files that no run of `prepare` writes.
    """
    name = str(target)
    if not target.parent.is_dir():
        raise InputError(f"there is no folder {target.parent}; make it first", file=name)
    if not os.path.lexists(target):
        return
    if target.is_symlink() or not target.is_dir():
        raise InputError("this is no folder; choose another name", file=name)
    if not force:
        raise InputError("the folder exists; choose another name, or replace it with --force", file=name)
    foreign = sorted(entry.name for entry in target.iterdir() if not _ours(entry))
    if foreign:
        raise InputError(
            f"the folder holds {foreign[0]!a}, which prepare does not write; choose another name", file=name
        )


def _ours(entry: Path) -> bool:
    return entry.is_file() and (entry.name in DOCUMENTS or entry.name.partition(".")[0] in ("source", "reduced"))


@contextmanager
def folder_made_beside(target: Path, *, force: bool) -> Iterator[Path]:
    """A new folder beside the target, moved onto it when the block ends well and removed when it does not.

    Yields
    ------
    Path
        The empty folder to write into.
    """
    beside = target.with_name(f".{target.name}-{secrets.token_hex(4)}")
    try:
        beside.mkdir()
        yield beside
        refuse_folder(target, force=force)
        _swap(beside, target)
    except HubokitError as error:
        file = error.file.replace(str(beside), str(target)) if error.file else None
        raise type(error)(error.message, error.place, file) from None
    except OSError as error:
        raise InputError(f"the folder cannot be written: {error.strerror or error}", file=str(target)) from None
    finally:
        shutil.rmtree(beside, ignore_errors=True)


def _swap(made: Path, target: Path) -> None:
    """Rename; an earlier folder is set aside first and put back when the rename fails."""
    if not target.exists():
        made.rename(target)
        return
    aside = target.with_name(f".{target.name}-{secrets.token_hex(4)}")
    target.rename(aside)
    try:
        made.rename(target)
    except BaseException:
        aside.rename(target)
        raise
    shutil.rmtree(aside, ignore_errors=True)


def _export(reduction: Reduction, place: Path) -> tuple[dict[str, str], dict[str, str]]:
    """Write source and reduced model in every format that takes them.

    Returns
    -------
    files, left_out : dict of str to str
        File name to what it is; file name to the reason why it could not be written.
    """
    from hubokit.exchange.formats import FORMATS, write

    files: dict[str, str] = {}
    left_out: dict[str, str] = {}
    models = {"source": reduction.source, "reduced": reduction.model}
    for entry in FORMATS.values():
        if entry.write is None or entry.name in NOT_EXPORTED:
            continue
        for stem, model in models.items():
            if entry.locality is not None and model.locality > entry.locality:
                continue
            name = stem + entry.suffixes[0]
            what = "the design" if stem == "source" else "the reduced model"
            other = entry.domain not in ("any", model.domain)
            try:
                write(model, place / name)
                files[name] = f"{what} in {entry.name.upper()} format" + (
                    f", in {entry.domain} variables" if other else ""
                )
            except HubokitError as error:
                left_out[name] = error.message
    for path in sorted(place.iterdir()):
        if path.name not in files and path.name not in DOCUMENTS:
            files[path.name] = "goes with the file of the same beginning"
    return files, left_out


def readme_text(reduction: Reduction, verdict: Verdict, files: Mapping[str, str], left_out: Mapping[str, str]) -> str:
    """README.txt of the folder: what each file is, what was shown, and the way back for answers.

    Returns
    -------
    str
        Plain ASCII, no line longer than 80 characters.
    """
    model, source = reduction.model, reduction.source
    first, second = ("1", "-1") if model.domain == "spin" else ("0", "1")
    names = [*source.labels[:2], *reduction.auxiliaries[:1]]
    parts = [
        "FILES",
        *(_folded(f"{name:<20} {what}", 23) for name, what in files.items()),
        *(_folded(f"(not written: {name}: {reason})", 4) for name, reason in left_out.items()),
        "",
        "THE MODELS",
        _folded(f"source: {source.size} {source.domain} variables, locality {source.locality}, {len(source)} terms"),
        _folded(
            f"reduced: {model.size} {model.domain} variables, {len(reduction.auxiliaries)} of them auxiliaries, "
            f"locality {model.locality}, {len(model)} terms"
        ),
        _folded(f"spins and booleans map by s = {'1 - 2x' if model.convention == '1-2x' else '2x - 1'}"),
        _folded(
            f"energies: the source has E, and the reduced model, at its best auxiliaries, has {_map_of(verdict)}"
        ),
        "",
        "WHAT WAS SHOWN",
        *(_folded(f"{name:<20} {claim.status}, {claim.method}", 23) for name, claim in verdict.claims.items()),
        "",
        "FROM A SOLVER'S ANSWER BACK TO THE DESIGN",
        _folded("1. Give the reduced model, in whichever file your solver reads, to the solver."),
        _folded(
            "2. Write its answers into a table, STATES.csv: the first line names every variable of reduced.json, "
            f"auxiliaries included, in any order; then one answer a line with the values {first} and {second}. "
            "Formats that number their variables name them in their comments.",
            5,
        ),
        _ascii(f"       {','.join(names)},..."),
        f"       {first},{second},...",
        _folded("3. Run"),
        "       hubokit project reduced.json STATES.csv",
        _folded(
            "   It prints every answer in the variables of the source, with its energy in both models, and whether "
            "the auxiliaries are at their best.",
            5,
        ),
        "",
        "TO CHECK AGAIN",
        "       hubokit check reduced.json --source source.json",
        "       hubokit audit verdict.json",
        _folded(
            "The first gathers the evidence anew. The second re-checks the evidence in verdict.json by other code."
        ),
        "",
        _folded(
            "The verdict concerns the mathematical model, not the hardware that runs it and not the plant that it "
            "describes: the responsible engineer and the rules of the place decide on those.",
            0,
            0,
        ),
    ]
    return "\n".join(parts) + "\n"


def _map_of(verdict: Verdict) -> str:
    """How the energies of the reduced model hang on those of the source."""
    scale = "E" if verdict.scale == 1 else f"{format_fraction(verdict.scale)} * E"
    return scale if verdict.shift == 0 else f"{scale} + {format_fraction(verdict.shift)}"


def _folded(text: str, rest: int = 2, first: int = 2) -> str:
    """Plain ASCII, folded at 80 characters, the first line and the others indented."""
    from textwrap import fill

    return fill(_ascii(text), 80, initial_indent=" " * first, subsequent_indent=" " * rest, break_on_hyphens=False)


def _ascii(text: str) -> str:
    return text.encode("ascii", "backslashreplace").decode("ascii")
