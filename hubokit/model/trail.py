"""The recorded steps from a source model to the one at hand.

Each step says everything about itself: its name, the function it started from, its scale and shift (the new energy,
minimised over the auxiliaries the step added, is ``scale * old + shift``), the auxiliaries it added and its
parameters. A trail is a chain of steps, with as much of the source as is known.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian

Origin = str | tuple[Literal["not"], str] | Fraction
"""What a source variable is in the model: a variable, the complement of one, or a fixed value of its domain."""


@dataclass(frozen=True)
class Step:
    """One recorded step.

    Parameters
    ----------
    name : str
        ``"domain"`` (parameters from, to, convention), ``"rounding"`` (resolution, deviation), ``"reduction"`` (keep,
        method, ...) or another word.
    start : str
        Function digest of the model that the step began from.
    scale, shift : Fraction
        P = scale * E + shift over the step; scale is positive.
    auxiliaries : tuple of str
        Variables that the step added.
    parameters : mapping
        JSON values.
    """

    name: str
    start: str
    scale: Fraction = Fraction(1)
    shift: Fraction = Fraction(0)
    auxiliaries: tuple[str, ...] = ()
    parameters: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class Trail:
    """A chain of steps.

    Parameters
    ----------
    steps : tuple of Step
        In the order in which they were made.
    source : Hamiltonian, optional
        The model the trail begins with, where it is at hand.
    source_digest, source_file : str, optional
        What is known of the source where it is not embedded.
    keep : str, optional
        What the reduction was asked to keep: ``"ground-states"``, ``"energies"`` or ``"one-to-one"``.

    Examples
    --------
    >>> trail = Trail((Step("a", "", Fraction(2), Fraction(1)), Step("b", "", Fraction(3))))
    >>> trail.scale, trail.shift
    (Fraction(6, 1), Fraction(3, 1))
    """

    steps: tuple[Step, ...] = ()
    source: Hamiltonian | None = None
    source_digest: str | None = None
    source_file: str | None = None
    keep: str | None = None

    @property
    def declared(self) -> bool:
        """Whether the trail says how the model came about; then its scale and shift bind."""
        return bool(self.steps)

    @property
    def scale(self) -> Fraction:
        """The factor of the whole chain."""
        factor = Fraction(1)
        for step in self.steps:
            factor *= step.scale
        return factor

    @property
    def shift(self) -> Fraction:
        """The shift of the whole chain."""
        total = Fraction(0)
        for step in self.steps:
            total = total * step.scale + step.shift
        return total

    @property
    def auxiliaries(self) -> tuple[str, ...]:
        """All variables that the steps added."""
        return tuple(label for step in self.steps for label in step.auxiliaries)
