"""Options that several commands share: one name and one meaning for each."""

from __future__ import annotations

from collections.abc import Sequence
from enum import StrEnum
from fractions import Fraction
from pathlib import Path
from typing import Annotated

import typer

from hubokit.errors import InputError


class Keep(StrEnum):
    """What a reduction is asked to keep."""

    ground_states = "ground-states"
    energies = "energies"
    one_to_one = "one-to-one"


class Prefer(StrEnum):
    """The figure that a reduction makes small first."""

    auxiliaries = "auxiliaries"
    range = "range"
    couplers = "couplers"


class Domain(StrEnum):
    """Values of the variables."""

    spin = "spin"
    boolean = "boolean"


class Evidence(StrEnum):
    """Kinds of evidence."""

    auto = "auto"
    projection = "projection"
    exhaustion = "exhaustion"
    elimination = "elimination"
    neighbourhood = "neighbourhood"


def _seconds(time: float) -> float:
    """A limit that every prediction can be compared with."""
    if not time >= 0:
        raise InputError(f"{time} is no number of seconds; 60 is a minute, inf is no limit", "--time")
    return time


Model = Annotated[Path, typer.Argument(metavar="MODEL", help="A model in any format that hubokit reads.")]
Reduced = Annotated[Path, typer.Argument(metavar="REDUCED", help="The reduced model.")]
Json = Annotated[bool, typer.Option("--json", help="Print the machine-readable document instead of the table.")]
Force = Annotated[bool, typer.Option("--force", help="Replace what exists.")]
KeepOption = Annotated[Keep, typer.Option("--keep", help="What the reduction must keep.")]
PreferOption = Annotated[Prefer, typer.Option("--prefer", help="The figure to make small first.")]
MethodOption = Annotated[str, typer.Option("--method", help="A gadget family by name; auto chooses.")]
DomainOption = Annotated[
    Domain | None, typer.Option("--domain", help="Domain of the result; by default that of the source.")
]
GapOption = Annotated[
    str | None,
    typer.Option(
        "--auxiliary-gap", metavar="ENERGY", help="Least auxiliary gap; by default the source's resolution."
    ),
]
Seed = Annotated[int, typer.Option("--seed", help="Seed of what is left to chance; the same seed gives the same.")]
EvidenceOption = Annotated[Evidence, typer.Option("--evidence", help="Kind of evidence; auto takes the cheapest.")]
ClaimOption = Annotated[
    list[str] | None,
    typer.Option("--claim", metavar="NAME", help="Claim to ask for, or all; may be given several times."),
]
Time = Annotated[
    float,
    typer.Option("--time", metavar="SECONDS", callback=_seconds, help="Refuse work that would take longer."),
]
Limit = Annotated[int, typer.Option("--limit", min=0, help="Most states kept per level.")]
Checkpoint = Annotated[
    Path | None,
    typer.Option("--checkpoint", metavar="FILE", help="Keep progress here; the same command resumes from it."),
]
Source = Annotated[Path | None, typer.Option("--source", metavar="SOURCE", help="The model before the reduction.")]
Format = Annotated[
    str | None, typer.Option("--format", metavar="NAME", help="Format of the result; by default from its suffix.")
]
Auxiliaries = Annotated[
    list[str] | None,
    typer.Option(
        "--auxiliaries",
        metavar="NAMES",
        help="Auxiliary variables of a reduction made elsewhere, separated by commas; may be given several times.",
    ),
]
OriginOption = Annotated[
    list[str] | None,
    typer.Option(
        "--origin",
        metavar="PLACE",
        help="Where a source variable went: NAME=OTHER, NAME=not:OTHER or NAME=VALUE; or a JSON file with "
        'such a map: {"a": "q0", "b": ["not", "q1"], "c": 1}. May be given several times.',
    ),
]
ScaleOption = Annotated[str | None, typer.Option("--scale", help="Declared factor on the energies.")]
ShiftOption = Annotated[str | None, typer.Option("--shift", help="Declared shift of the energies.")]


def fraction(text: str | None, option: str) -> Fraction | None:
    """The exact number that an option gives.

    Raises
    ------
    InputError
        Where the text is not a number.
    """
    if text is None:
        return None
    from hubokit.model.numbers import as_fraction

    return as_fraction(text, place=option)


def names(texts: Sequence[str] | None) -> tuple[str, ...] | None:
    """Names separated by commas, over all the times that the option was given.

    Examples
    --------
    >>> names(["y0, y1", "y2"])
    ('y0', 'y1', 'y2')
    """
    if texts is None:
        return None
    return tuple(name for text in texts for part in text.split(",") if (name := part.strip()))


def claims(texts: Sequence[str] | None) -> str | tuple[str, ...] | None:
    """What ``check`` is asked for: None, ``"all"`` or names."""
    asked = names(texts)
    if asked is None:
        return None
    if not asked:
        raise InputError("no claim is named", place="--claim")
    return "all" if asked == ("all",) else asked
