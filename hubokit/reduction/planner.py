"""The planner: every way of reducing a model is priced exactly, the cheapest is taken, the trail says what it beat.

Ways are

- *term by term*: a family for each locality and sign. Every single family is priced, the families that are best for
  one term alone, and, while the work limit allows, every mix;
- *four-variable groups* (groups.py), with the best mix for what is left over;
- *pair cover* (pair_cover.py): pairs chosen globally.

Prices are exact counts and coefficients of the model that would come out, so the choice is never dearer in the
preferred figure than any single family. Limits count steps, never seconds: the same model gives the same plan
everywhere.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from itertools import product
from math import ceil, lcm, prod
from typing import Any

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Trail
from hubokit.reduction.assembly import Choice, Price, assembled, priced, term_pieces, trail_rows, work_of
from hubokit.reduction.gadgets.attach import Piece
from hubokit.reduction.gadgets.base import Family, Keep
from hubokit.reduction.gadgets.table import FAMILIES, families_for, family, stand_in
from hubokit.reduction.groups import METHOD as GROUPS
from hubokit.reduction.groups import gathered, group_piece

PAIR_COVER = "pair-cover"
TERM_BY_TERM = "term-by-term"

MIX_LIMIT = 2**24
"""Largest work (members times mixes) for pricing every mix of families."""

PAIR_COVER_LIMIT = 2**19
"""Largest work for pricing a pair cover where auxiliaries are not what is preferred."""

Built = tuple[Hamiltonian, tuple[str, ...], list[dict[str, Any]]]


@dataclass(frozen=True)
class Plan:
    """One priced way of reducing a model.

    Parameters
    ----------
    name : str
        For the trail.
    price : Price
    build : callable () -> (model, auxiliaries, rows for the trail)
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
    return ["auto", *(one.name for one in FAMILIES), TERM_BY_TERM, GROUPS, PAIR_COVER]


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
    if method in ("auto", PAIR_COVER):
        plans += _noted(pair_plans(question, method), PAIR_COVER, others)
    if not plans:
        name = method if method not in (GROUPS, PAIR_COVER) else ""
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
        ranked = sorted(
            families, key=lambda one: _alone(one, locality, sign, question.keep, prefer or question.prefer)
        )
        choice[locality, sign] = next((one.name for one in families if one.name == name), ranked[0].name)
    return choice


def _alone(one: Family, locality: int, sign: int, keep: Keep, prefer: str) -> tuple[Any, ...]:
    """How a family compares for one term of weight 1, with gap 1 for one-to-one and 0 otherwise."""
    shape = stand_in(one.name, locality, sign, keep)
    found = shape.coefficients(Fraction(1), Fraction(1 if keep == "one-to-one" else 0))
    sizes = [abs(value) for item, value in found.items() if item]
    price = Price(shape.auxiliaries, shape.couplers, max(sizes) / min(sizes))
    return (*price.figure(prefer), FAMILIES.index(one))


def term_choices(question: Question, notes: list[dict[str, str]]) -> list[tuple[str, Choice]]:
    """Single families, the best for one term alone, and every mix while the work limit allows."""
    options = options_of(question.H)
    named = {one.name for families in options.values() for one in families}
    found = [(one.name, single_choice(question, one.name)) for one in FAMILIES if one.name in named]
    found += [(TERM_BY_TERM, single_choice(question, "", prefer)) for prefer in ("auxiliaries", "range", "couplers")]
    mixes = prod(len(families) for families in options.values())
    work = mixes * work_of(question.H)
    if work <= MIX_LIMIT:
        for mix in product(*options.values()):
            names = [one.name for one in mix]
            found.append((TERM_BY_TERM, dict(zip(options, names, strict=True))))
    else:
        reason = f"{mixes} mixes take {work:,} steps; at most {MIX_LIMIT:,} are taken"
        notes.append({"method": "every mix of families", "reason": reason})
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
    # The mix stands first: where it is no better than a single family, the two are the same model.
    return sorted(best.values(), key=lambda plan: plan.name != TERM_BY_TERM)


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
        return model, auxiliaries, trail_rows(pieces)

    return Plan(name, priced(question.H, pieces, question.gap), build)


def group_plans(question: Question) -> list[Plan] | str:
    """Four-variable groups with the best of three mixes for what is left over; or why there is none."""
    if question.H.locality < 3:
        return "the model is quadratic"
    grouping = gathered(question.H)
    if isinstance(grouping, str):
        return grouping
    piece, taken = group_piece(question.H, grouping, question.gap)
    if not piece.auxiliaries:
        return "no group reaches the auxiliary gap asked for"
    plans = []
    for choice in _distinct(single_choice(question, "", prefer) for prefer in ("auxiliaries", "range", "couplers")):
        rest = term_pieces(question.H, choice, question.gap, question.keep, taken)
        plans.append(_plan(question, [piece, *rest], GROUPS))
    return [min(plans, key=lambda plan: plan.price.figure(question.prefer))]


def _distinct(choices: Any) -> list[Choice]:
    found: list[Choice] = []
    for choice in choices:
        if choice not in found:
            found.append(choice)
    return found


def pair_plans(question: Question, method: str) -> list[Plan] | str:
    """The pair cover, priced; or why it is not."""
    H = question.H
    if H.locality < 3:
        return "the model is quadratic"
    work = work_of(H)
    if method != PAIR_COVER and question.prefer != "auxiliaries" and work > PAIR_COVER_LIMIT:
        return (
            f"{work:,} members to cover; at most {PAIR_COVER_LIMIT:,} are looked at unless auxiliaries are preferred"
        )
    return "not at hand"


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
