"""A plan: one priced way of reducing a model, and what all ways share."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cache
from typing import Any

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.assembly import Choice, Price, assembled, priced, term_pieces, trail_rows
from hubokit.reduction.gadgets.attach import Piece
from hubokit.reduction.gadgets.base import Family, Keep
from hubokit.reduction.gadgets.table import families_for, stand_in
from hubokit.reduction.groups import Taken
from hubokit.reduction.pair_piece import PairPiece

RECORD_LIMIT = 2**17
"""Most pairs that are listed in the trail one by one."""

Built = tuple[Hamiltonian, tuple[str, ...], dict[str, Any]]


@dataclass(frozen=True)
class Plan:
    """One priced way of reducing a model.

    Parameters
    ----------
    name : str
        For the trail.
    price : Price
    build : callable () -> (model, auxiliaries, parameters for the trail)
    """

    name: str
    price: Price
    build: Callable[[], Built]


@dataclass(frozen=True)
class Question:
    """What the planner is asked.

    Parameters
    ----------
    H : Hamiltonian
        In the domain of the reduced model.
    keep, prefer : str
    gap : Fraction
        Auxiliary gap asked for, energy units.
    seed : int
    """

    H: Hamiltonian
    keep: Keep
    prefer: str
    gap: Fraction
    seed: int


def options_of(H: Hamiltonian) -> dict[tuple[int, int], list[Family]]:
    """The families that serve each (locality, sign) that the model has."""
    found = {}
    for block in H.blocks:
        for sign in (-1, 1):
            if block.locality > 2 and bool((block.weights * sign > 0).any()):
                found[block.locality, sign] = families_for(H.domain, block.locality, sign)
    return found


def single_choice(question: Question, name: str, prefer: str | None = None) -> Choice:
    """The named family wherever it applies; elsewhere the family that is best for one term alone."""
    choice = {}
    for (locality, sign), families in options_of(question.H).items():
        best = best_alone(question.H.domain, locality, sign, question.keep, prefer or question.prefer)
        choice[locality, sign] = name if name in [one.name for one in families] else best
    return choice


@cache
def best_alone(domain: str, locality: int, sign: int, keep: Keep, prefer: str) -> str:
    """The family that is best for one term of weight 1, with gap 1 for one-to-one and 0 otherwise.

    Examples
    --------
    >>> best_alone("boolean", 3, 1, "one-to-one", "couplers")
    'flipped-literals'
    """

    def figure(one: Family) -> tuple[Any, ...]:
        shape = stand_in(one.name, locality, sign, keep)
        found = shape.coefficients(Fraction(1), Fraction(1 if keep == "one-to-one" else 0))
        sizes = [abs(value) for item, value in found.items() if item]
        return Price(shape.auxiliaries, shape.couplers, max(sizes) / min(sizes)).figure(prefer)

    return min(families_for(domain, locality, sign), key=figure).name


def plan_of(question: Question, pieces: Sequence[Piece], name: str) -> Plan:
    def build() -> Built:
        model, auxiliaries = assembled(question.H, pieces, question.gap)
        return model, auxiliaries, {"methods": trail_rows(pieces), **_records(pieces, auxiliaries)}

    return Plan(name, priced(question.H, pieces, question.gap), build)


def _records(pieces: Sequence[Piece], auxiliaries: tuple[str, ...]) -> dict[str, Any]:
    """What each pair variable stands for, so that lifting needs no search."""
    first = 0
    found: dict[str, Any] = {}
    for piece in pieces:
        names = auxiliaries[first : first + piece.auxiliaries]
        first += piece.auxiliaries
        if isinstance(piece, PairPiece):
            found["pair cover"] = (
                piece.plan.record(names)
                if len(names) <= RECORD_LIMIT
                else {"pairs": f"{len(names):,}, too many to list", "found by": piece.plan.how}
            )
    return found


def with_rest(question: Question, pieces: Sequence[Piece], taken: Taken, name: str) -> list[Plan]:
    """The pieces with the best of three mixes for the terms that they leave over."""
    plans = []
    for choice in _distinct(single_choice(question, "", prefer) for prefer in ("auxiliaries", "range", "couplers")):
        rest = term_pieces(question.H, choice, question.gap, question.keep, taken)
        plans.append(plan_of(question, [*pieces, *rest], name))
    return [min(plans, key=lambda plan: plan.price.figure(question.prefer))]


def _distinct(choices: Iterable[Choice]) -> list[Choice]:
    found: list[Choice] = []
    for choice in choices:
        if choice not in found:
            found.append(choice)
    return found
