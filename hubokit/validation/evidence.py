"""The table of kinds of evidence, cheapest first.

Each kind is a plain function ``(case, options, found) -> None`` behind a name: it settles what it can and
says of the rest why it could not. None of them knows how the reduction was made.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from types import MappingProxyType
from typing import Any

from hubokit.errors import InputError
from hubokit.validation.case import Case
from hubokit.validation.findings import Findings


@dataclass(frozen=True)
class Options:
    """What the caller of `check` chose.

    Parameters
    ----------
    asked : tuple of str
    evidence : str
        "auto", or the one kind asked for.
    radius : int or None
        Of the neighbourhood; None = 2.
    around : states or None
        Source states; None = states found by descent.
    below : Fraction or None
        Order inversions are listed among source states with at most this energy.
    executor, progress
        Handed to the engine.
    time : float
        Seconds that a predicted cost may come to.
    """

    asked: tuple[str, ...]
    evidence: str = "auto"
    radius: int | None = None
    around: Any = None
    below: Fraction | None = None
    executor: Any = None
    progress: Any = None
    time: float = 600.0


Kind = Callable[[Case, Options, Findings], None]


def _projection(case: Case, options: Options, found: Findings) -> None:
    from hubokit.validation.by_projection import by_projection

    by_projection(case, options, found)


def _exhaustion(case: Case, options: Options, found: Findings) -> None:
    from hubokit.validation.by_exhaustion import by_exhaustion

    by_exhaustion(case, options, found)


def _elimination(case: Case, options: Options, found: Findings) -> None:
    from hubokit.validation.by_levels import by_elimination

    by_elimination(case, options, found)


def _neighbourhood(case: Case, options: Options, found: Findings) -> None:
    from hubokit.validation.by_neighbourhood import by_neighbourhood

    by_neighbourhood(case, options, found)


EVIDENCE: Mapping[str, Kind] = MappingProxyType(
    {
        "projection": _projection,
        "exhaustion": _exhaustion,
        "elimination": _elimination,
        "neighbourhood": _neighbourhood,
    }
)


#: What "auto" goes through; its exhaustion goes over to elimination where that is cheaper.
AUTO = ("projection", "exhaustion", "neighbourhood")


def kinds_for(evidence: str) -> tuple[str, ...]:
    """The kinds that a choice of evidence stands for, in the order in which they are tried.

    Raises
    ------
    InputError
        When it is no kind of evidence.

    Examples
    --------
    >>> kinds_for("auto")
    ('projection', 'exhaustion', 'neighbourhood')
    """
    if evidence == "auto":
        return AUTO
    if evidence not in EVIDENCE:
        raise InputError(f"no such evidence: {evidence!r}; there are auto, {', '.join(EVIDENCE)}", place="evidence")
    return (evidence,)
