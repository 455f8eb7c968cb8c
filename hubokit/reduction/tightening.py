"""Penalties of chosen pairs made smaller, as far as shared bounds prove that nothing is lost.

The interval bounds of `hubokit.reduction.penalties` let every other auxiliary do its worst. With every setting
written as a set of flips d from the right one, the excess is ``sum l_i(x) d_i + sum q_ij(x) d_i d_j``; the cost of
a negative q_ij is divided between its two ends, and the local condition (`hubokit.projection.shared_bounds`)

    l_i(x) - sum_j share_ij max(0, -q_ij(x)) >= g    for every i and every x

proves the auxiliary gap g. Penalties enter l_i alone, and only by the setting of the two operands: A, B or 2A + B.
So, shares given, the least A and B of each pair are read off the least value of the rest, setting by setting; no
scale is guessed. Shares are equal first; then a linear program over the worst states met looks for shares under
which the largest penalty is smaller (rounded to 64ths; the exact condition is evaluated again and alone decides).

Only pairs of original variables are tightened; groups of auxiliaries with pairs of pairs keep their interval bounds.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from hubokit.model.numbers import absolute_sum, format_fraction
from hubokit.projection.shared_bounds import PARTS, Candidate, FlipProblem, Slacks, equal_shares, slacks
from hubokit.projection.structure import BOUND
from hubokit.reduction.covers import PairCoverPlan, covered_form
from hubokit.reduction.pairs import PairVariables
from hubokit.reduction.penalties import BooleanForm, Strengths
from hubokit.reduction.tightening_ledger import Coefficients, Ledger, both_readings
from hubokit.reduction.tightening_program import Group, SharesProgram

LARGEST_GROUP = 400
"""Auxiliaries that hang together up to which shared bounds are evaluated, for `work` = 1."""

MOST_ROUNDS = 24
"""Linear programs solved for the shares of one group, for `work` = 1."""

PROGRAM_GROUP = 40
"""Auxiliaries of one group up to which shares are sought by linear program, for `work` = 1."""

SHARED_WORK = 200_000
"""Sum of squared group sizes over which shared bounds are evaluated, heaviest penalties first, for `work` = 1."""

GROUP_WORK = 200
"""What a group counts beside its squared size."""

PROGRAM_WORK = 3_000
"""Sum of squared group sizes over which linear programs are solved, for `work` = 1."""

ENOUGH = Fraction(12, 25)
"""Share of the largest coefficient before, at which the search for shares is content for `work` = 1.

The tighter the penalties, the longer a later check looks for shares of its own that prove them.
"""

BOTH_DOWN = np.array([0, 0, 0, 1])
"""A pair variable over the settings of its operands."""


def tightened(plan: PairCoverPlan, work: int = 1) -> PairCoverPlan:
    """The same plan with smaller penalties, where shared bounds prove them.

    Parameters
    ----------
    plan : PairCoverPlan
        With penalties from interval bounds.
    work : int
        Multiplies the limits.

    Returns
    -------
    PairCoverPlan
        Its `tightening` says how far the largest coefficient came down and what proves it; `plan` itself where
        nothing is gained.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> from hubokit.reduction.covers import pair_cover_reduction
    >>> H = Hamiltonian({("a", "b", "c", "d"): 1, ("a", "b", "e", "f"): 1}, "spin")
    >>> plan = pair_cover_reduction(H)
    >>> better = tightened(plan)
    >>> better.price()["largest"] < plan.price()["largest"], better.tightening["proved by"]
    (True, 'shared bounds, equal shares')
    """
    form = covered_form(plan.source, plan.covered, plan.factors, plan.pairs, plan.resolution)
    gap = int(plan.gap / plan.resolution)
    given, (form, strengths) = plan, _wide(form, plan.strengths, gap)
    plan = replace(plan, strengths=strengths)
    found = heaviest_first(groups(form, plan.pairs, LARGEST_GROUP * work), plan.strengths)
    if not found:
        return given
    ledgers = [Ledger(plan, domain) for domain in dict.fromkeys((plan.source.domain, "boolean"))]
    one, both = plan.strengths.one.copy(), plan.strengths.both.copy()
    proofs: set[str] = set()
    shared, programmed = SHARED_WORK * work, PROGRAM_WORK * work
    for numbers in found:
        shared -= len(numbers) ** 2 + GROUP_WORK
        programmed -= len(numbers) ** 2 + GROUP_WORK
        if shared < 0:
            break
        before = Strengths(one[numbers], both[numbers])
        tables = [ledger.table(numbers) for ledger in ledgers]
        table = tables[0] if len(tables) == 1 else both_readings(tables[0], tables[1], before)
        rounds = MOST_ROUNDS * work if len(numbers) <= PROGRAM_GROUP * work and programmed >= 0 else 0
        enough = int(ENOUGH * table.figure(before)[0]) if work == 1 else 0
        strengths, proof = least_strengths(group_of(form, plan.pairs, numbers), table, gap, rounds, enough)
        # A group is proved whole: either all its penalties are the new ones, or none.
        if table.figure(strengths) < table.figure(before):
            one[numbers], both[numbers] = strengths.one, strengths.both
            for ledger in ledgers:
                ledger.change(numbers, strengths)
            proofs.add(proof)
    if not proofs:
        return given
    better = replace(plan, strengths=Strengths(one, both))
    scale = Fraction(better.price()["largest"]) / plan.price()["largest"]
    record = {"scale": format_fraction(scale), "proved by": "; ".join(sorted(proofs))}
    return replace(better, tightening=record)


def _wide(form: BooleanForm, strengths: Strengths, gap: int) -> tuple[BooleanForm, Strengths]:
    """Both with Python integers where slacks, which are in units of 1 / `PARTS`, might not fit int64."""
    numbers = (form.fields, form.couplers, strengths.one, strengths.both)
    if sum(map(absolute_sum, numbers)) + gap < BOUND:
        return form, strengths
    fields, couplers, one, both = (array.astype(object) for array in numbers)
    return BooleanForm(fields, form.members, couplers), Strengths(one, both)


def heaviest_first(found: Sequence[NDArray[np.int64]], strengths: Strengths) -> list[NDArray[np.int64]]:
    """Groups by their largest penalty, the largest first."""
    weight = 2 * strengths.one + strengths.both
    return sorted(found, key=lambda numbers: -int(weight[numbers].max()))


def groups(form: BooleanForm, pairs: PairVariables, most: int) -> list[NDArray[np.int64]]:
    """The groups of two to `most` coupled pair variables of original variables, as numbers of auxiliaries.

    Parameters
    ----------
    form : BooleanForm
        The rewritten model without penalties.
    pairs : PairVariables
    most : int
    """
    ends = form.members[(form.members >= pairs.size).all(axis=1)] - pairs.size
    flat = (pairs.operands < pairs.size).all(axis=1) & ~pairs.is_product
    label = _labels(pairs, ends)
    order = np.argsort(label, kind="stable")
    together = np.split(order, np.flatnonzero(np.diff(label[order])) + 1)
    return [np.sort(numbers) for numbers in together if 2 <= len(numbers) <= most and flat[numbers].all()]


def _labels(pairs: PairVariables, ends: NDArray[np.int64]) -> NDArray[np.int64]:
    """The least auxiliary that each auxiliary hangs together with, by couplers or by definition."""
    needs = np.column_stack([pairs.operands, pairs.companions])
    line, column = np.nonzero(needs >= pairs.size)
    links = np.concatenate([ends, np.column_stack([line, needs[line, column] - pairs.size])]).astype(np.int64)
    label = np.arange(pairs.count)
    while True:
        fresh = label.copy()
        least = np.minimum(label[links[:, 0]], label[links[:, 1]])
        np.minimum.at(fresh, links[:, 0], least)
        np.minimum.at(fresh, links[:, 1], least)
        fresh = fresh[fresh]
        if np.array_equal(fresh, label):
            return label
        label = fresh


def group_of(form: BooleanForm, pairs: PairVariables, numbers: NDArray[np.int64]) -> Group:
    """The flip problem of a group, without penalties, and its right settings."""
    place = np.full(pairs.size + pairs.count, -1)
    place[pairs.size + numbers] = np.arange(len(numbers))
    kind = form.fields.dtype
    own = place[form.members[:, 1]] >= 0
    members, couplers = form.members[own], form.couplers[own]
    outer = members[:, 0] < pairs.size
    known = np.union1d(members[outer, 0], pairs.operands[numbers])
    column = np.full(pairs.size, -1)
    column[known] = np.arange(len(known))
    linear = np.zeros((len(numbers), len(known)), kind)
    linear[place[members[outer, 1]], column[members[outer, 0]]] = couplers[outer]
    first, second = place[members[~outer]].T
    pair = np.zeros((len(numbers), len(numbers)), kind)
    pair[first, second] = couplers[~outer]
    pair[second, first] = couplers[~outer]
    problem = FlipProblem(pairs.size + numbers, known, form.fields[pairs.size + numbers], linear, pair)
    guards = tuple((int(column[u]), int(column[v])) for u, v in pairs.operands[numbers].tolist())
    return Group(problem, Candidate(guards, (BOTH_DOWN,) * len(numbers)))


def least_strengths(group: Group, table: Coefficients, gap: int, rounds: int, enough: int) -> tuple[Strengths, str]:
    """The least A and B of a group under the best shares found, and what proves them.

    The search for shares ends when the largest coefficient in the table is at most `enough`.
    """
    best_shares = equal_shares(group.problem)
    found = slacks(group.problem, group.candidate)
    best, proof = strengths_for(found, gap), "shared bounds, equal shares"
    if group.problem.start.dtype == object:
        return best, proof  # beyond 64 bits floats propose nothing of use
    program = SharesProgram(group, table, gap)
    for _ in range(rounds):
        if table.figure(best)[0] <= enough or not program.learn(found):
            break
        shares = program.solve(best_shares)
        found = slacks(group.problem, group.candidate, shares)
        strengths = strengths_for(found, gap)
        if table.figure(strengths) < table.figure(best):
            best, best_shares, proof = strengths, shares, "shared bounds, shares by linear program"
    return best, proof


def strengths_for(found: Slacks, gap: int) -> Strengths:
    """The least whole A and B for which slacks without penalties become at least `gap`.

    Examples
    --------
    >>> rest = np.array([[0, -2 * PARTS], [-3 * PARTS, -5 * PARTS]])
    >>> strengths = strengths_for(Slacks((rest,), ()), 1)
    >>> strengths.one.tolist(), strengths.both.tolist()
    ([4], [6])
    """
    tables = np.array([gap * PARTS - table for table in found.tables])
    need = -(-tables // PARTS)
    both = need[:, 1, 1]
    one = np.maximum(need[:, 0, 1], need[:, 1, 0])
    short = np.maximum(need[:, 0, 0] - 2 * one - both, 0)
    return Strengths(one + (short + 1) // 2, both)
