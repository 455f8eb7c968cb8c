"""What a check answers: claims with status, method and witness, and the figures beside them.

A verdict is data first. `str(verdict)` prints it on one screen (screen.py), `layout.py` gives its JSON
fields.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property
from typing import Any, Literal, NamedTuple

from hubokit.errors import InputError
from hubokit.validation.claims import CLAIMS, Status
from hubokit.validation.figure_names import FIGURES as FIGURES


@dataclass(frozen=True)
class Witness:
    """A state on which a refutation rests, with energies that `Hamiltonian.energy` gives back.

    Parameters
    ----------
    state : mapping of str to int
        The source state x, values of the source's domain.
    auxiliaries : mapping of str to int
        The best auxiliary setting found for x, values of the model's domain; empty where the model has no
        state for x.
    source_energy : Fraction
        E(x).
    model_energy : Fraction or None
        F(x, a) = P(x), or None where the model cannot represent x (P is infinite there).
    minimum_by : str
        How the minimum over the auxiliaries was found: "projection", "exhaustion", ...; "" where there are
        no auxiliaries.
    multiplicity : int or None
        m(x) where known.
    """

    state: Mapping[str, int]
    auxiliaries: Mapping[str, int]
    source_energy: Fraction
    model_energy: Fraction | None
    minimum_by: str
    multiplicity: int | None = None


@dataclass(frozen=True)
class Claim:
    """One claim and how it stands.

    Parameters
    ----------
    name : str
        One of `hubokit.validation.claims.CLAIMS`.
    status : "proved" | "refuted" | "tested" | "open"
        `tested` means that it holds on the visited states, which `detail` counts; it is not a proof.
    method : str
        "inspection", "projection", "exhaustion", "elimination", "neighbourhood", or "" while open.
    detail : str
        A sentence: what was shown and on how many states, or why the claim is open.
    witness : Witness or None
        Present when refuted by a state (every claim but `quadratic`).
    rival : Witness or None
        The state that `witness` is compared with, where a refutation takes two: a lower state beside a lost
        ground state, a ground state of another multiplicity.
    """

    name: str
    status: Status
    method: str
    detail: str
    witness: Witness | None = None
    rival: Witness | None = None


@dataclass(frozen=True)
class Figure:
    """A number beside the claims, exact or a bound, or the reason why there is none.

    Examples
    --------
    >>> print(Figure(Fraction(3, 2)), Figure(Fraction(2), exact=False), sep="; ")
    3/2; at least 2
    >>> print(Figure(None, note="none: one level"))
    none: one level
    """

    value: Fraction | None
    exact: bool = True
    note: str = ""

    def __str__(self) -> str:
        if self.value is None:
            return self.note or "not computed"
        number = f"{'' if self.exact else 'at least '}{self.value}"
        return f"{number} ({self.note})" if self.note else number


@dataclass(frozen=True)
class StateList:
    """States of the source that a refuted verdict names: their count (None = unknown) and the first of them.

    `source_energies` and `model_energies` (P, None where the model has no such state) go with `states`.
    """

    count: int | None
    states: tuple[Mapping[str, int], ...] = ()
    source_energies: tuple[Fraction, ...] = ()
    model_energies: tuple[Fraction | None, ...] = ()

    @property
    def complete(self) -> bool:
        """Whether every state counted is listed."""
        return self.count == len(self.states)


@dataclass(frozen=True)
class Inversion:
    """Two source states whose order is turned round: E(lower) < E(upper) but P(lower) > P(upper)."""

    lower: Witness
    upper: Witness


@dataclass(frozen=True)
class Inversions:
    """Order inversions among the source states with E at most `below`: their count and the first few."""

    below: Fraction
    count: int
    pairs: tuple[Inversion, ...] = ()


@dataclass(frozen=True)
class Evenness:
    """Thermal evenness at one temperature: largest over smallest W(x) among the ground states.

    W(x) = sum over a of exp(-beta_T (F(x, a) - P(x))) is the weight of ground state x; `beta_gap` is beta_T
    times the source gap in the reduced model's energy scale. `ratio` is a float: a figure, no verdict rests
    on it.
    """

    beta_gap: float
    ratio: float


class AuxiliaryGap(NamedTuple):
    """Least strictly positive F(x, a) - P(x), in the model's energy units: two figures."""

    at_minimisers: Fraction | None
    everywhere: Fraction | None


class Deferred(Mapping[str, Any]):
    """A JSON object that is made when it is first looked into: a certificate of a large proof is not small.

    Examples
    --------
    >>> Deferred(lambda: {"kind": "table"}) == {"kind": "table"}
    True
    """

    def __init__(self, make: Callable[[], dict[str, Any]]) -> None:
        self._make = make

    @cached_property
    def made(self) -> dict[str, Any]:
        """The object itself."""
        return self._make()

    def __getitem__(self, key: str) -> Any:
        return self.made[key]

    def __iter__(self) -> Iterator[str]:
        return iter(self.made)

    def __len__(self) -> int:
        return len(self.made)

    def __repr__(self) -> str:
        return "Deferred()"


@dataclass(frozen=True)
class Verdict:
    """The whole answer of a check.

    Parameters
    ----------
    claims : mapping of str to Claim
        Every claim, in the order of `CLAIMS`.
    asked : tuple of str
        The claims the check was asked for; `exit_code` speaks of those.
    scale, shift : Fraction
        alpha > 0 and beta with which the claims were judged: P = alpha * E + beta.
    scale_from : "declared" | "found" | "default"
        Whether the trail or the caller declared them, they were found to hold everywhere, or neither (1 and
        0).
    figures : mapping of str to Figure
        Gaps, costs and counts by name, e.g. ``source-gap``; see `FIGURES`.
    evenness : tuple of Evenness
        Thermal evenness over the ground states where they could be listed.
    lost, spurious : StateList or None
        Ground states of E that do not minimise P, and the reverse; None where not looked for.
    inversions : Inversions or None
    difference : tuple of str
        The largest terms of P - (alpha E + beta) where P is known as a polynomial and differs; empty
        otherwise.
    notes : tuple of str
        Plain sentences: how scale and shift were chosen, what unevenness does, what a declared intent says.
    evidence : tuple of dict
        JSON objects that the audit re-checks; each has a ``kind``. A certificate may be `Deferred`.
    source_digest, model_digest : str
        Function digests of both models.
    version : str
        The hubokit that made it.
    """

    claims: Mapping[str, Claim]
    asked: tuple[str, ...]
    scale: Fraction
    shift: Fraction
    scale_from: Literal["declared", "found", "default"]
    source_digest: str
    model_digest: str
    figures: Mapping[str, Figure] = field(default_factory=dict)
    evenness: tuple[Evenness, ...] = ()
    lost: StateList | None = None
    spurious: StateList | None = None
    inversions: Inversions | None = None
    difference: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    evidence: tuple[dict[str, Any], ...] = ()
    version: str = ""

    def __post_init__(self) -> None:
        missing = [name for name in CLAIMS if name not in self.claims]
        if missing:
            raise InputError(f"a verdict speaks of every claim; missing {missing[0]!r}", place="claims")

    def holds(self, name: str) -> bool:
        """Whether the claim is proved.

        Raises
        ------
        InputError
            When `name` is not a claim.
        """
        if name not in self.claims:
            raise InputError(f"no such claim: {name!r}; claims are {', '.join(CLAIMS)}", place="name")
        return self.claims[name].status == "proved"

    @property
    def exit_code(self) -> int:
        """0 every asked claim proved, 1 one refuted, 3 one open or only tested."""
        statuses = {self.claims[name].status for name in self.asked}
        if "refuted" in statuses:
            return 1
        return 0 if statuses <= {"proved"} else 3

    @property
    def source_gap(self) -> Fraction | None:
        """Gap of E, None when E has one level or the gap was not computed (`figures` says which)."""
        return self._figure("source-gap")

    @property
    def model_gap(self) -> Fraction | None:
        """Gap of F: the smaller of the gap of P and the auxiliary gap at ground states."""
        return self._figure("model-gap")

    @property
    def auxiliary_gap(self) -> AuxiliaryGap:
        """The two auxiliary gaps, in energy units of the model."""
        return AuxiliaryGap(self._figure("auxiliary-gap-at-minimisers"), self._figure("auxiliary-gap-everywhere"))

    def _figure(self, name: str) -> Fraction | None:
        return self.figures[name].value if name in self.figures else None

    def __str__(self) -> str:
        from hubokit.validation.screen import screen

        return screen(self)
