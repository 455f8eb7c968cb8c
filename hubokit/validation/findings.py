"""What the kinds of evidence have found so far: claims with inference between them, figures, lists, notes."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from typing import Any, Literal

from hubokit.errors import HubokitError
from hubokit.spectrum.levels import Level
from hubokit.validation.case import States
from hubokit.validation.claims import CLAIMS, IMPLIES, implied_by
from hubokit.validation.scaling import Judged
from hubokit.validation.verdict import Claim, Evenness, Figure, Inversions, StateList, Witness

SETTLED = ("proved", "refuted")


class Findings:
    """Filled by evidence, one claim at a time; a settled claim settles what follows from it at once.

    Examples
    --------
    >>> found = Findings()
    >>> found.prove("energies", "projection", "P = E, term by term")
    >>> found.claims["ground-states"].status, found.claims["ground-states"].detail
    ('proved', 'follows from energies')
    """

    def __init__(self) -> None:
        self.claims: dict[str, Claim] = {}
        self.scale = Fraction(1)
        self.shift = Fraction(0)
        self.scale_from: Literal["declared", "found", "default"] = "default"
        self.scale_known = False
        self.figures: dict[str, Figure] = {}
        self.lost: StateList | None = None
        self.spurious: StateList | None = None
        self.inversions: Inversions | None = None
        self.difference: tuple[str, ...] = ()
        self.evenness: tuple[Evenness, ...] = ()
        #: Original states that minimise P, all of them, where they were listed.
        self.minimisers: States | None = None
        #: The ground level of E over all source states, where it is known.
        self.source_level: Level | None = None
        self.notes: list[str] = []
        self.evidence: list[dict[str, Any]] = []

    def settled(self, name: str) -> bool:
        """Whether the claim is proved or refuted."""
        return name in self.claims and self.claims[name].status in SETTLED

    def proved(self, name: str) -> bool:
        """Whether the claim is proved."""
        return name in self.claims and self.claims[name].status == "proved"

    def refuted(self, name: str) -> bool:
        """Whether the claim is refuted."""
        return name in self.claims and self.claims[name].status == "refuted"

    def prove(self, name: str, method: str, detail: str) -> None:
        """Set a claim proved, and what it implies."""
        self._set(Claim(name, "proved", method, detail))
        for other in IMPLIES[name]:
            if not self.settled(other):
                self._set(Claim(other, "proved", method, f"follows from {name}"))

    def refute(
        self,
        name: str,
        method: str,
        detail: str,
        witness: Witness | None = None,
        rival: Witness | None = None,
    ) -> None:
        """Set a claim refuted, and every claim that implies it, with the same witness."""
        self._set(Claim(name, "refuted", method, detail, witness, rival))
        for other in implied_by(name):
            if not self.settled(other):
                self._set(Claim(other, "refuted", method, f"{name} is refuted: {detail}", witness, rival))

    def test(self, name: str, method: str, detail: str) -> None:
        """Set a claim tested on visited states, unless something stronger is known."""
        if not self.settled(name):
            self.claims[name] = Claim(name, "tested", method, detail)

    def leave_open(self, name: str, detail: str) -> None:
        """Say why a claim is open, unless something stronger is known; reasons add up."""
        if self.settled(name) or (name in self.claims and self.claims[name].status == "tested"):
            return
        if name in self.claims and detail not in self.claims[name].detail:
            detail = f"{self.claims[name].detail}; {detail}"
        self.claims[name] = Claim(name, "open", "", detail)

    def note(self, sentence: str) -> None:
        """Add a sentence to the verdict, once."""
        if sentence not in self.notes:
            self.notes.append(sentence)

    def in_order(self, asked: Iterable[str]) -> dict[str, Claim]:
        """Every claim in the order of `CLAIMS`; those that no evidence touched are open."""
        wanted = set(asked)

        def untouched(name: str) -> Claim:
            return Claim(name, "open", "", "the evidence does not settle it" if name in wanted else "not asked")

        return {name: self.claims.get(name, untouched(name)) for name in CLAIMS}

    def _set(self, claim: Claim) -> None:
        before = self.claims.get(claim.name)
        if before is None or before.status not in SETTLED:
            self.claims[claim.name] = claim
        elif before.status != claim.status:
            raise HubokitError(
                f"{claim.name} is {before.status} by {before.method} and {claim.status} by {claim.method}; "
                "this is a defect of hubokit, please report it with both files"
            )

    def take_scale(self, judged: Judged) -> None:
        """Fix the scale and shift of the verdict; the first kind of evidence that knows them decides.

        Raises
        ------
        HubokitError
            Another kind of evidence came to another scale: a defect of this program.
        """
        if self.scale_known and (judged.scale, judged.shift) != (self.scale, self.shift):
            raise HubokitError(
                f"scale and shift are {self.scale}, {self.shift} by one kind of evidence and "
                f"{judged.scale}, {judged.shift} by another; "
                "this is a defect of hubokit, please report it with both files"
            )
        self.scale, self.shift, self.scale_from = judged.scale, judged.shift, judged.scale_from
        self.scale_known = True

    def used(self, kind: str) -> bool:
        """Whether this kind of evidence was gathered."""
        return any(piece["kind"] == kind for piece in self.evidence)
