"""The planner: every way of reducing a model is priced exactly, the cheapest is taken, the trail says what it beat.

Ways are

- *term by term*: a family for each locality and sign. Every single family is priced, the families that are best for
  one term alone, and every mix, or the best improved one locality at a time;
- *four-variable groups* (groups.py) and *symmetric* parts (symmetric.py), with the best mix for what is left over;
- *pair cover* (pair_cover.py): pairs chosen globally.

Prices are exact counts and coefficients of the model that would come out, so the choice is never dearer in the
preferred figure than any single family. Limits count steps, never seconds: the same model gives the same plan
everywhere.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from functools import cache
from itertools import product
from math import ceil, lcm, prod
from typing import Any

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Trail
from hubokit.reduction.assembly import Choice, Price, assembled, priced, term_pieces, trail_rows, work_of
from hubokit.reduction.covers import pair_cover_reduction
from hubokit.reduction.gadgets.attach import Piece
from hubokit.reduction.gadgets.base import Family, Keep
from hubokit.reduction.gadgets.table import FAMILIES, families_for, family, stand_in
from hubokit.reduction.groups import METHOD as GROUPS
from hubokit.reduction.groups import Taken, gathered, group_piece
from hubokit.reduction.pair_piece import METHOD as PAIR_COVER
from hubokit.reduction.pair_piece import PairPiece, lonely_terms, without
from hubokit.reduction.symmetric import LARGEST, symmetric_pieces
from hubokit.reduction.symmetric import METHOD as SYMMETRIC
from hubokit.reduction.tightening import tightened

TERM_BY_TERM = "term-by-term"

MIX_LIMIT = 27
"""Most mixes of families that are all priced; beyond it the best is improved one locality at a time."""

PAIR_COVER_LIMIT = 2**15
"""Most members of terms for pricing a pair cover where auxiliaries are not what is preferred."""

Built = tuple[Hamiltonian, tuple[str, ...], dict[str, Any]]

RECORD_LIMIT = 2**17
"""Most pairs that are listed in the trail one by one."""


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
class Planned:
    """What the planner decided.

    Parameters
    ----------
    chosen : Plan
    others : list of Plan
        Cheapest first; the first is the runner-up.
    not_priced : list of dict
        ``method`` and ``reason`` of every way that a work limit kept from being priced.
    """

    chosen: Plan
    others: list[Plan]
    not_priced: list[dict[str, str]] = field(default_factory=list)

    def as_json(self) -> dict[str, Any]:
        """Plain JSON values, for the trail."""
        return {
            "chosen": {"plan": self.chosen.name, **self.chosen.price.as_json()},
            "others": [{"plan": other.name, **other.price.as_json()} for other in self.others],
            "not priced": self.not_priced,
        }


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


def methods() -> list[str]:
    """Every name that ``reduce(method=...)`` takes.

    Examples
    --------
    >>> methods()[:2]
    ['auto', 'negative-monomial']
    """
    return ["auto", *(one.name for one in FAMILIES), TERM_BY_TERM, GROUPS, SYMMETRIC, PAIR_COVER]


def planned(question: Question, method: str = "auto") -> Planned:
    """Price the ways that `method` allows and choose.

    Raises
    ------
    InputError
        An unknown method.
    LimitError
        A method that was named is beyond its work limit.
    """
    others: list[dict[str, str]] = []
    plans: list[Plan] = []
    if method in ("auto", TERM_BY_TERM):
        plans += term_plans(question, others)
    if method in ("auto", GROUPS):
        plans += _noted(group_plans(question), GROUPS, others)
    if method in ("auto", SYMMETRIC):
        largest = LARGEST if method == "auto" else question.H.size
        plans += symmetric_plans(question, largest)
    if method in ("auto", PAIR_COVER):
        plans += _noted(pair_plans(question, method), PAIR_COVER, others)
    if not plans:
        name = method if method not in (GROUPS, SYMMETRIC, PAIR_COVER) else ""
        if name:
            family(name)
        plans = [_best_gap(question, single_choice(question, name), name or TERM_BY_TERM)]
    ranked = sorted(plans, key=lambda plan: plan.price.figure(question.prefer))
    return Planned(ranked[0], ranked[1:], others)


def _noted(found: list[Plan] | str, method: str, notes: list[dict[str, str]]) -> list[Plan]:
    """The plans; or none, with the reason noted."""
    if isinstance(found, str):
        notes.append({"method": method, "reason": found})
        return []
    return found


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


def term_choices(question: Question, notes: list[dict[str, str]]) -> list[tuple[str, Choice]]:
    """Single families, the best for one term alone, and every mix where there are few."""
    options = options_of(question.H)
    named = {one.name for families in options.values() for one in families}
    found = [(one.name, single_choice(question, one.name)) for one in FAMILIES if one.name in named]
    found += [(TERM_BY_TERM, single_choice(question, "", prefer)) for prefer in ("auxiliaries", "range", "couplers")]
    mixes = prod(len(families) for families in options.values())
    if mixes > MIX_LIMIT:
        reason = f"there are {mixes:,}, more than {MIX_LIMIT}; the best was improved one locality at a time instead"
        notes.append({"method": "every mix of families", "reason": reason})
        return found
    for mix in product(*options.values()):
        names = [one.name for one in mix]
        found.append((TERM_BY_TERM, dict(zip(options, names, strict=True))))
    return found


def term_plans(question: Question, notes: list[dict[str, str]]) -> list[Plan]:
    """The single families and the best mix, priced."""
    prices: dict[tuple[tuple[tuple[int, int], str], ...], Plan] = {}
    best: dict[str, Plan] = {}
    for name, choice in term_choices(question, notes):
        key = tuple(sorted(choice.items()))
        if key not in prices:
            prices[key] = _best_gap(question, choice, name)
        plan = Plan(name, prices[key].price, prices[key].build)
        if name not in best or plan.price.figure(question.prefer) < best[name].price.figure(question.prefer):
            best[name] = plan
    options = options_of(question.H)
    if prod(len(families) for families in options.values()) > MIX_LIMIT:
        start = min(prices.values(), key=lambda plan: plan.price.figure(question.prefer))
        choice = dict(next(key for key, plan in prices.items() if plan is start))
        best[TERM_BY_TERM] = _improved(question, choice, start)
    # The mix stands first: where it is no better than a single family, the two are the same model.
    return sorted(best.values(), key=lambda plan: plan.name != TERM_BY_TERM)


def _improved(question: Question, choice: dict[tuple[int, int], str], plan: Plan) -> Plan:
    """The plan after one pass that tries every other family for one (locality, sign) after the other."""
    for key, families in options_of(question.H).items():
        for one in families:
            if one.name != choice[key]:
                other = _best_gap(question, {**choice, key: one.name}, TERM_BY_TERM)
                if other.price.figure(question.prefer) < plan.price.figure(question.prefer):
                    choice, plan = {**choice, key: one.name}, other
    return Plan(TERM_BY_TERM, plan.price, plan.build)


def _best_gap(question: Question, choice: Choice, name: str) -> Plan:
    """The plan for the gap asked for; where range is preferred, or for a wider gap that needs no finer resolution.

    A gap that is no multiple of the denominators of its gadgets makes the resolution finer, and with it the smallest
    coefficient; a slightly wider gap costs less there.
    """
    plan = _term_plan(question, choice, name)
    if question.prefer != "range" or not question.gap:
        return plan
    shapes = [stand_in(family_name, *key, question.keep) for key, family_name in choice.items()]
    denominator = lcm(*(value.denominator for shape in shapes for value in shape.by_gap.values()))
    step = question.H.resolution * denominator
    wider = step * ceil(question.gap / step)
    if wider == question.gap:
        return plan
    other = _term_plan(replace(question, gap=wider), choice, name)
    return min(plan, other, key=lambda one: one.price.figure(question.prefer))


def _term_plan(question: Question, choice: Choice, name: str) -> Plan:
    return _plan(question, term_pieces(question.H, choice, question.gap, question.keep), name)


def _plan(question: Question, pieces: Sequence[Piece], name: str) -> Plan:
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


def group_plans(question: Question) -> list[Plan] | str:
    """Four-variable groups with the best of three mixes for what is left over; or the work limit in the way."""
    grouping = gathered(question.H)
    if grouping is None or isinstance(grouping, str):
        return grouping or []
    piece, taken = group_piece(question.H, grouping, question.gap)
    if not piece.auxiliaries:
        return []
    return _with_rest(question, [piece], taken, GROUPS)


def symmetric_plans(question: Question, largest: int) -> list[Plan]:
    """Symmetric parts as functions of a count, with the best of three mixes for the rest."""
    pieces, taken = symmetric_pieces(question.H, question.gap, largest)
    if not pieces:
        return []
    return _with_rest(question, pieces, taken, SYMMETRIC)


def _with_rest(question: Question, pieces: Sequence[Piece], taken: Taken, name: str) -> list[Plan]:
    """The pieces with the best of three mixes for the terms that they leave over."""
    plans = []
    for choice in _distinct(single_choice(question, "", prefer) for prefer in ("auxiliaries", "range", "couplers")):
        rest = term_pieces(question.H, choice, question.gap, question.keep, taken)
        plans.append(_plan(question, [*pieces, *rest], name))
    return [min(plans, key=lambda plan: plan.price.figure(question.prefer))]


def _distinct(choices: Any) -> list[Choice]:
    found: list[Choice] = []
    for choice in choices:
        if choice not in found:
            found.append(choice)
    return found


def pair_plans(question: Question, method: str) -> list[Plan] | str:
    """Pair covers of all terms and of the short ones, with gadgets for the rest; or the work limit in the way."""
    H = question.H
    if H.locality < 3:
        return []
    work = work_of(H)
    if method != PAIR_COVER and question.prefer != "auxiliaries" and work > PAIR_COVER_LIMIT:
        return f"{work:,} members to cover; at most {PAIR_COVER_LIMIT:,} unless auxiliaries are preferred"
    longer = {block.locality: np.ones(len(block), bool) for block in H.blocks if block.locality > 4}
    plans = []
    for left_out in ({}, longer) if longer else ({},):
        plans += _covers(question, left_out, work <= PAIR_COVER_LIMIT)
    return [min(plans, key=lambda plan: plan.price.figure(question.prefer))]


def _covers(question: Question, left_out: Taken, every: bool) -> list[Plan]:
    """The cover of all terms but those left out, and what becomes of it when lonely terms are left out too.

    Where `every` is False only the last is priced.
    """
    H = question.H
    plans: list[Plan] = []
    for last in (False, False, True):
        cover = pair_cover_reduction(
            H,
            keep=question.keep,
            auxiliary_gap=question.gap or None,
            seed=question.seed,
            only=without(H, left_out),
        )
        lonely = lonely_terms(cover)
        done = last or not any(mask.any() for mask in lonely.values())
        if done or every:
            plans += _with_rest(question, [PairPiece(tightened(cover))], dict(cover.covered), PAIR_COVER)
        if done:
            break
        left_out = {k: mask | left_out.get(k, np.zeros(len(mask), bool)) for k, mask in lonely.items()}
    return plans


def plan_table(trail: Trail) -> list[dict[str, Any]]:
    """What the planner chose and what it beat, read from a trail: one row a plan, the chosen first.

    Parameters
    ----------
    trail : Trail

    Returns
    -------
    list of dict
        Keys plan, status (``"chosen"``, ``"runner-up"``, ``"dearer"`` or ``"not priced"``), auxiliaries, couplers,
        coefficient ratio, reason. Empty when the trail has no reduction that was planned.

    Examples
    --------
    >>> from hubokit.reduction.reduce import reduce
    >>> H = Hamiltonian({("a", "b", "c"): 1, ("b", "c", "d"): 1}, "spin")
    >>> rows = plan_table(reduce(H, prefer="auxiliaries").trail)
    >>> rows[0]["plan"], rows[0]["auxiliaries"]
    ('four-variable-groups', 1)
    """
    rows: list[dict[str, Any]] = []
    for step in trail.steps:
        plan = step.parameters.get("plan") if step.name == "reduction" else None
        if not plan:
            continue
        rows.append({**plan["chosen"], "status": "chosen", "reason": ""})
        for place, other in enumerate(plan["others"]):
            rows.append({**other, "status": "runner-up" if place == 0 else "dearer", "reason": ""})
        nothing = {"auxiliaries": None, "couplers": None, "coefficient ratio": None}
        rows += [
            {"plan": note["method"], **nothing, "status": "not priced", "reason": note["reason"]}
            for note in plan["not priced"]
        ]
    return rows
