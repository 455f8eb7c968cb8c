"""The planner: every way of reducing a model is priced exactly, the cheapest is taken, the trail says what it beat.

Ways are

- *term by term*: a family for each locality and sign. Every single family is priced, the families that are best for
  one term alone, and every mix, or the best improved one locality at a time;
- *four-variable groups* (groups.py) and *symmetric* parts (symmetric.py), with the best mix for what is left over;
- *common parts* of boolean terms (common_part.py), then the best of term by term and a pair cover for the rest;
- *pair cover* (covers.py): pairs chosen globally;
- *product spins* (product_spins.py): the same pairs of spins with a spin for their product. They
  take more auxiliaries than the pair cover and a wider range than term by term (of the models tried), so they are
  priced unasked only where couplers are preferred.

Prices are exact counts and coefficients of the model that would come out, so the choice is never dearer in the
preferred figure than any single family. Limits count steps, never seconds: the same model gives the same plan
everywhere.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

from hubokit.errors import LimitError
from hubokit.model.trail import Trail
from hubokit.reduction.common_part import METHOD as COMMON_PART
from hubokit.reduction.deductions import Deduced, deduced
from hubokit.reduction.gadgets.table import FAMILIES, family
from hubokit.reduction.groups import METHOD as GROUPS
from hubokit.reduction.pair_piece import METHOD as PAIR_COVER
from hubokit.reduction.plans import Plan, Question, single_choice
from hubokit.reduction.product_spins import METHOD as PRODUCT_SPINS
from hubokit.reduction.symmetric import LARGEST
from hubokit.reduction.symmetric import METHOD as SYMMETRIC
from hubokit.reduction.ways import (
    TERM_BY_TERM,
    best_gap,
    common_part_plans,
    cover_plans,
    group_plans,
    pair_covers,
    product_spin_plans,
    symmetric_plans,
    term_plans,
)

PARTIAL = (GROUPS, SYMMETRIC, COMMON_PART, PAIR_COVER, PRODUCT_SPINS)
"""Ways that serve some terms and leave others to term by term."""


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


def methods() -> list[str]:
    """Every name that ``reduce(method=...)`` takes.

    Examples
    --------
    >>> methods()[:2]
    ['auto', 'negative-monomial']
    """
    return ["auto", *(one.name for one in FAMILIES), TERM_BY_TERM, *PARTIAL]


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
        plans += _noted(group_plans(question, method), GROUPS, others)
    if method in ("auto", SYMMETRIC):
        largest = LARGEST if method == "auto" else question.H.size
        plans += symmetric_plans(question, largest)
    if method in ("auto", COMMON_PART):
        plans += _noted(common_part_plans(question), COMMON_PART, others)
    if method in ("auto", PAIR_COVER, PRODUCT_SPINS):
        covers = pair_covers(question, method)
        if method != PRODUCT_SPINS:
            plans += _noted(cover_plans(question, covers), PAIR_COVER, others)
        if method == PRODUCT_SPINS or (method == "auto" and question.prefer == "couplers"):
            plans += _noted(product_spin_plans(question, covers), PRODUCT_SPINS, others)
    if others and method in PARTIAL:
        raise LimitError(f'{others[0]["reason"]}; method "auto" takes another way', "method")
    if not plans:
        name = method if method not in PARTIAL else ""
        if name:
            family(name)
        plans = [best_gap(question, single_choice(question, name), name or TERM_BY_TERM)]
    ranked = sorted(plans, key=lambda plan: plan.price.figure(question.prefer))
    return Planned(ranked[0], ranked[1:], others)


def planned_for_ground_states(question: Question) -> tuple[Planned, Deduced | None]:
    """The cheapest plan, after deductions where these make it cheaper; they keep ground states, not energies.

    Returns
    -------
    planned : Planned
    deductions : Deduced or None
        None where the plan begins with the model as it was given.
    """
    plain = planned(question)
    found = deduced(question.H)
    if found is None:
        return plain, None
    after = planned(replace(question, H=found.model))
    figures = [one.chosen.price.figure(question.prefer) for one in (after, plain)]
    better = figures[0] < figures[1]
    best, other, name = (after, plain, "{}, without deductions") if better else (plain, after, "deductions, then {}")
    beaten = [replace(plan, name=name.format(plan.name)) for plan in (other.chosen, *other.others)]
    others = sorted([*best.others, *beaten], key=lambda plan: plan.price.figure(question.prefer))
    return Planned(best.chosen, others, best.not_priced), found if better else None


def _noted(found: list[Plan] | str, method: str, notes: list[dict[str, str]]) -> list[Plan]:
    """The plans; or none, with the reason noted."""
    if isinstance(found, str):
        notes.append({"method": method, "reason": found})
        return []
    return found


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
    >>> from hubokit.model.hamiltonian import Hamiltonian
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
