"""The table of kinds of evidence, cheapest first.

Each kind is a plain function ``(case, options, found) -> None`` behind a name: it settles what it can and
says of the rest why it could not. None of them knows how the reduction was made.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

from hubokit.errors import InputError
from hubokit.validation.by_exhaustion import by_exhaustion
from hubokit.validation.by_levels import by_elimination
from hubokit.validation.by_neighbourhood import by_neighbourhood
from hubokit.validation.by_projection import by_projection
from hubokit.validation.case import Case
from hubokit.validation.findings import Findings
from hubokit.validation.options import Options

Kind = Callable[[Case, Options, Findings], None]

EVIDENCE: Mapping[str, Kind] = MappingProxyType(
    {
        "projection": by_projection,
        "exhaustion": by_exhaustion,
        "elimination": by_elimination,
        "neighbourhood": by_neighbourhood,
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
