"""Small answers of a projection: bounds on gaps and summaries of clusters."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction


@dataclass(frozen=True)
class GapBound:
    """The least strictly positive F - P over some states, in energy units.

    Parameters
    ----------
    value : Fraction or None
        None when no auxiliary setting lies above the minimum at all.
    exact : bool
        False when `value` is a lower bound only.
    """

    value: Fraction | None
    exact: bool

    def __str__(self) -> str:
        from hubokit.model.numbers import format_fraction

        if self.value is None:
            return "none"
        return format_fraction(self.value) if self.exact else f"at least {format_fraction(self.value)}"


@dataclass(frozen=True)
class ClusterSummary:
    """Clusters that one method settled.

    Parameters
    ----------
    method : str
        "table", "counting", "guards", "guards with ties", "shared bounds" or "single states".
    count : int
        Number of clusters (for guards: of auxiliaries).
    auxiliaries, touched : int
        Of each cluster; for guards the number of guards is `touched`.
    """

    method: str
    count: int
    auxiliaries: int
    touched: int

    def __str__(self) -> str:
        if self.method in ("guards", "guards with ties", "shared bounds"):
            return f"{self.count:,} auxiliaries decided by {self.touched} guards each ({self.method})"
        return (
            f"{self.count:,} clusters of {self.auxiliaries} auxiliaries over {self.touched} variables ({self.method})"
        )


def least(bounds: list[GapBound]) -> GapBound:
    """The least of several gaps: exact when the least value is attained by an exact one.

    Examples
    --------
    >>> print(least([GapBound(Fraction(2), True), GapBound(Fraction(3), False)]))
    2
    """
    values = [bound for bound in bounds if bound.value is not None]
    if not values:
        return GapBound(None, all(bound.exact for bound in bounds))
    value = min(bound.value for bound in values if bound.value is not None)
    return GapBound(value, any(bound.value == value and bound.exact for bound in values))
