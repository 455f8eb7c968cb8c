"""The ways of reducing a model, each as priced plans.

Term by term, groups, symmetric parts, common parts, pair covers, product spins.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from functools import partial
from itertools import product
from math import ceil, lcm, prod

import numpy as np

from hubokit.reduction.assembly import Choice, Price, term_pieces, work_of
from hubokit.reduction.common_part import METHOD as COMMON_PART
from hubokit.reduction.common_part import Shared, shared_parts
from hubokit.reduction.covers import PairCoverPlan, pair_cover_reduction
from hubokit.reduction.gadgets.table import FAMILIES, stand_in
from hubokit.reduction.groups import METHOD as GROUPS
from hubokit.reduction.groups import Taken, gathered, group_piece
from hubokit.reduction.pair_piece import METHOD as PAIR_COVER
from hubokit.reduction.pair_piece import PairPiece, lonely_terms, without
from hubokit.reduction.plans import Built, Plan, Question, options_of, plan_of, single_choice, with_rest
from hubokit.reduction.product_spins import METHOD as PRODUCT_SPINS
from hubokit.reduction.product_spins import fewest_couplers, with_product_spins
from hubokit.reduction.symmetric import METHOD as SYMMETRIC
from hubokit.reduction.symmetric import symmetric_pieces
from hubokit.reduction.tightening import tightened

TERM_BY_TERM = "term-by-term"

MIX_LIMIT = 27
"""Most mixes of families that are all priced; beyond it the best is improved one locality at a time."""

PAIR_COVER_LIMIT = 2**15
"""Most members of terms for pricing a pair cover where auxiliaries are not what is preferred."""

GROUPS_LIMIT = 2**19
"""The same for four-variable groups."""

COMMON_COVER_LIMIT = 2**10
"""Most members of terms that common parts leave for which a pair cover is priced as well."""


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
            prices[key] = best_gap(question, choice, name)
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
                other = best_gap(question, {**choice, key: one.name}, TERM_BY_TERM)
                if other.price.figure(question.prefer) < plan.price.figure(question.prefer):
                    choice, plan = {**choice, key: one.name}, other
    return Plan(TERM_BY_TERM, plan.price, plan.build)


def best_gap(question: Question, choice: Choice, name: str) -> Plan:
    """The plan for the gap asked for; where range is preferred, or for a wider gap that needs no finer resolution.

    A gap that is no multiple of the denominators of its gadgets makes the resolution finer, and with it the smallest
    coefficient; a slightly wider gap costs less there.
    """
    plan = term_plan(question, choice, name)
    if question.prefer != "range" or not question.gap:
        return plan
    shapes = [stand_in(family_name, *key, question.keep) for key, family_name in choice.items()]
    denominator = lcm(*(value.denominator for shape in shapes for value in shape.by_gap.values()))
    step = question.H.resolution * denominator
    wider = step * ceil(question.gap / step)
    if wider == question.gap:
        return plan
    other = term_plan(replace(question, gap=wider), choice, name)
    return min(plan, other, key=lambda one: one.price.figure(question.prefer))


def term_plan(question: Question, choice: Choice, name: str) -> Plan:
    return plan_of(question, term_pieces(question.H, choice, question.gap, question.keep), name)


def group_plans(question: Question, method: str) -> list[Plan] | str:
    """Four-variable groups with the best of three mixes for what is left over; or the work limit in the way."""
    work = work_of(question.H)
    if method != GROUPS and question.prefer != "auxiliaries" and work > GROUPS_LIMIT:
        return f"{work:,} members to gather; at most {GROUPS_LIMIT:,} unless auxiliaries are preferred"
    grouping = gathered(question.H)
    if grouping is None or isinstance(grouping, str):
        return grouping or []
    piece, taken = group_piece(question.H, grouping, question.gap)
    if not piece.auxiliaries:
        return []
    return with_rest(question, [piece], taken, GROUPS)


def symmetric_plans(question: Question, largest: int) -> list[Plan]:
    """Symmetric parts as functions of a count, with the best of three mixes for the rest."""
    pieces, taken = symmetric_pieces(question.H, question.gap, largest)
    if not pieces:
        return []
    return with_rest(question, pieces, taken, SYMMETRIC)


def common_part_plans(question: Question) -> list[Plan] | str:
    """Common parts first, then the cheaper of term by term and a pair cover for what they leave."""
    shared = shared_parts(question.H, question.gap)
    if shared is None or isinstance(shared, str):
        return shared or []
    rest = replace(question, H=shared.model)
    plans = term_plans(rest, [])
    if work_of(shared.model) <= COMMON_COVER_LIMIT:
        covers = pair_plans(rest, COMMON_PART)
        plans += [] if isinstance(covers, str) else covers
    best = min(plans, key=lambda plan: plan.price.figure(question.prefer))
    price = best.price
    whole = Price(len(shared.auxiliaries) + price.auxiliaries, price.couplers, price.ratio)
    return [Plan(COMMON_PART, whole, partial(_with_common_parts, shared, best))]


def _with_common_parts(shared: Shared, rest: Plan) -> Built:
    """The reduced model with the auxiliaries of both steps, and what each common part is."""
    model, auxiliaries, made = rest.build()
    rows = [
        {"locality": locality, "method": COMMON_PART, "terms": terms, "auxiliaries": 0}
        for locality, terms in shared.served.items()
    ]
    rows[0]["auxiliaries"] = len(shared.auxiliaries)
    listed = [
        {"auxiliary": name, "of": list(part), "is": "product"}
        for name, part in zip(shared.auxiliaries, shared.parts, strict=True)
    ]
    return (
        model,
        (*shared.auxiliaries, *auxiliaries),
        {**made, "methods": rows + made["methods"], "common parts": listed},
    )


def pair_plans(question: Question, method: str) -> list[Plan] | str:
    """Pair covers of all terms and of the short ones, with gadgets for the rest; or the work limit in the way."""
    return cover_plans(question, pair_covers(question, method))


def pair_covers(question: Question, method: str) -> list[PairCoverPlan] | str:
    """The covers that are worth pricing, penalties from interval bounds; or the work limit in the way."""
    H = question.H
    if H.locality < 3:
        return []
    work = work_of(H)
    if method not in (PAIR_COVER, PRODUCT_SPINS) and question.prefer != "auxiliaries" and work > PAIR_COVER_LIMIT:
        return f"{work:,} members to cover; at most {PAIR_COVER_LIMIT:,} unless auxiliaries are preferred"
    longer = {block.locality: np.ones(len(block), bool) for block in H.blocks if block.locality > 4}
    found = []
    for left_out in ({}, longer) if longer else ({},):
        found += _covers(question, left_out, work <= PAIR_COVER_LIMIT)
    return found


def cover_plans(question: Question, covers: Sequence[PairCoverPlan] | str) -> list[Plan] | str:
    """The best of the covers as pair covers, their penalties tightened; or the work limit in the way of covers."""
    if isinstance(covers, str):
        return covers
    plans: list[Plan] = []
    for cover in covers:
        plans += with_rest(question, [PairPiece(tightened(cover))], dict(cover.covered), PAIR_COVER)
    return plans and [min(plans, key=lambda plan: plan.price.figure(question.prefer))]


def product_spin_plans(question: Question, covers: Sequence[PairCoverPlan] | str) -> list[Plan] | str:
    """The best of the covers of a spin model with product spins; or the work limit in the way of covers."""
    if question.H.domain != "spin":
        return []
    if isinstance(covers, str):
        return covers
    plans: list[Plan] = []
    for cover in covers:
        better = with_product_spins(cover, fewest_couplers(cover))
        if better is not cover:
            pieces = [PairPiece(tightened(better), PRODUCT_SPINS)]
            plans += with_rest(question, pieces, dict(better.covered), PRODUCT_SPINS)
    return plans and [min(plans, key=lambda plan: plan.price.figure(question.prefer))]


def _covers(question: Question, left_out: Taken, every: bool) -> list[PairCoverPlan]:
    """The cover of all terms but those left out, and what becomes of it when lonely terms are left out too.

    Where `every` is False only the last is given. Beside them, where there are quartic terms, a cover whose search
    knows that each of these may keep a gadget of its own.
    """
    H = question.H
    found: list[PairCoverPlan] = []
    start = left_out
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
            found.append(cover)
        if done:
            break
        left_out = {k: mask | left_out.get(k, np.zeros(len(mask), bool)) for k, mask in lonely.items()}
    free = np.concatenate([np.zeros(0, bool), *(mask for k, mask in without(H, start).items() if k == 4)])
    if free.any():
        cover = pair_cover_reduction(
            H,
            keep=question.keep,
            auxiliary_gap=question.gap or None,
            seed=question.seed,
            only=without(H, start),
            alone=free,
        )
        if cover.chosen.alone:
            found.append(cover)
    return found
