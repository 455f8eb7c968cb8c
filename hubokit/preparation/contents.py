"""What stands in the folder: the documents, the exports, and the README.txt that explains them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from textwrap import fill
from typing import TYPE_CHECKING

from hubokit.errors import HubokitError, InputError
from hubokit.model.numbers import format_fraction

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian
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

EXPORT_LIMIT = 500_000
"""Terms above which a model is not written in other formats unasked."""

LETTERS_LIMIT = 100_000_000
"""Letters above which a table of Pauli strings, one letter a variable in every term, is not written unasked."""

BOOLEAN_ANSWERS = "       hubokit project reduced.json STATES.csv --domain boolean"

BESIDE = "names of the variables, for the formats that number them"


def export_names(asked: Iterable[str] | None) -> tuple[str, ...]:
    """Names of the formats to write; every one that the folder offers where none is asked for.

    Raises
    ------
    InputError
        No such format, or one that is only read.
    """
    from hubokit.exchange.formats import FORMATS

    offered = tuple(name for name, entry in FORMATS.items() if entry.write is not None and name not in NOT_EXPORTED)
    if asked is None:
        return offered
    names = tuple(asked)
    for name in names:
        if name not in offered:
            raise InputError(f"no such export: {name!a}; there are {', '.join(offered)}", "exports")
    return names


def export(reduction: Reduction, place: Path, formats: Iterable[str]) -> tuple[dict[str, str], dict[str, str]]:
    """Write source and reduced model in every one of the formats that takes them.

    Returns
    -------
    files, left_out : dict of str to str
        File name to what it is; file name to the reason why it could not be written.
    """
    from hubokit.exchange.formats import FORMATS, write

    files: dict[str, str] = {}
    left_out: dict[str, str] = {}
    models = {"source": reduction.source, "reduced": reduction.model}
    for entry in (FORMATS[name] for name in formats):
        for stem, model in models.items():
            if entry.locality is not None and model.locality > entry.locality:
                continue
            name = stem + entry.suffixes[0]
            reason = _too_large(model, entry.name)
            if reason is not None:
                left_out[name] = f"{reason}; hubokit convert --lossy writes it"
                continue
            other = "" if entry.domain in ("any", model.domain) else f" (in {entry.domain} variables)"
            try:
                # The folder is new; only a file of names that two formats share can be there already.
                write(model, place / name, force=True)
                files[name] = f"{entry.name}: {entry.carries.removeprefix('any model as ')}{other}"
            except HubokitError as error:
                left_out[name] = error.message
    for path in sorted(place.iterdir()):
        if path.name not in files and path.name not in DOCUMENTS:
            files[path.name] = (
                BESIDE if path.name.endswith(".names.json") else f"second part of {_first_part(path, files)}"
            )
    return files, left_out


def _too_large(model: Hamiltonian, format_name: str) -> str | None:
    """Why a model is not written in a format unasked; None where it is."""
    if len(model) > EXPORT_LIMIT:
        return f"more than {EXPORT_LIMIT} terms"
    if format_name == "pauli":
        # A term of k booleans is up to 2**k terms of spins.
        strings = sum(len(block.weights) << (block.locality * (model.domain == "boolean")) for block in model.blocks)
        if strings * model.size > LETTERS_LIMIT:
            return f"a letter for each of {model.size} variables in every term"
    return None


def _first_part(path: Path, files: Mapping[str, str]) -> str:
    """The file that a second file of the same format goes with: reduced.mtx for reduced.fields.mtx."""
    first = f"{path.name.partition('.')[0]}{path.suffix}"
    return first if first in files else "another file"


def grouped(files: Mapping[str, str]) -> list[tuple[str, str]]:
    """Files that are the same kind of thing in one row.

    Examples
    --------
    >>> grouped({"source.opb": "opb", "reduced.opb": "opb", "README.txt": "this"})
    [('source.opb, reduced.opb', 'opb'), ('README.txt', 'this')]
    """
    rows: dict[str, list[str]] = {}
    for name, what in files.items():
        rows.setdefault(what, []).append(name)
    return [(", ".join(names), what) for what, names in rows.items()]


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
        *(_folded(f"{names:<40} {what}", 43) for names, what in grouped(files)),
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
            "Columns x1, x2, ... of a format that numbers the variables will do as well.",
            5,
        ),
        _ascii(f"       {','.join(names)},..."),
        f"       {first},{second},...",
        _folded("3. Run"),
        "       hubokit project reduced.json STATES.csv",
        *(
            [_folded("     or, where the answers of a file in boolean variables are 0 and 1,", 5, 0), BOOLEAN_ANSWERS]
            if model.domain == "spin"
            else []
        ),
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
    return fill(_ascii(text), 80, initial_indent=" " * first, subsequent_indent=" " * rest, break_on_hyphens=False)


def _ascii(text: str) -> str:
    return text.encode("ascii", "backslashreplace").decode("ascii")
