"""What the caller of `check` chose, as every kind of evidence is handed it."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any


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

    @property
    def named(self) -> bool:
        """Whether one kind was asked for by name: then it is refused where it is too much, not passed over."""
        return self.evidence != "auto"
