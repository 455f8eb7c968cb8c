"""The auxiliary gap over all states: the least strictly positive F - P, or a bound of it.

Given the originals, clusters do not meet, so the gap is the least of the clusters' gaps. Tables give it
exactly. A rule gives its margin, which is attained where an auxiliary touches originals only; where
auxiliaries are coupled, every wrong setting is charged with the others at their worst, and the slack of
shared bounds (the others right, joint gains divided) is often far larger.
"""

from __future__ import annotations

import numpy as np

from hubokit.projection.clusters import components
from hubokit.projection.findings import Findings
from hubokit.projection.result import GapBound, least
from hubokit.projection.settle import Settled
from hubokit.projection.shared_bounds import PARTS, Candidate, FlipProblem, flip_problem, slacks
from hubokit.projection.structure import Integers, Positions
from hubokit.projection.tables import NONE

MOST = 400
"""Auxiliaries whose bounds are sharpened, all clusters together."""


def gap_everywhere(findings: Findings) -> GapBound:
    """Least strictly positive F - P over all states, when every cluster is settled."""
    unit = findings.structure.model.resolution
    bounds = [_of_tables(settled, findings, consistent) for settled, consistent in findings.settled()]
    bounds.extend(
        GapBound(None if listed.gap == NONE else listed.gap * unit, listed.is_gap_exact)
        for listed in findings.listed()
    )
    # Nothing but wholeness is known of clusters that may have ties.
    if not findings.is_tie_free_or_counted:
        bounds.append(GapBound(unit, False))
    coupled: list[Positions] = []
    for rules in findings.rounds:
        for one in rules:
            if one.attained.any():
                bounds.append(GapBound(int(one.margin[one.attained].min()) * unit, True))
            coupled.append(one.auxiliaries[~one.attained])
    charged = np.concatenate(coupled) if coupled else np.zeros(0, np.int64)
    if len(charged):
        bounds.append(GapBound(_of_coupled(findings, charged) * unit, False))
    return least(bounds)


def _of_tables(settled: Settled, findings: Findings, consistent: bool) -> GapBound:
    value = settled.least_gap()
    return GapBound(None if value is None else value * findings.structure.model.resolution, consistent)


def _of_coupled(findings: Findings, charged: Positions) -> int:
    """Bound over clusters of coupled auxiliaries: the better of margins and slacks in each."""
    margin = np.zeros(len(findings.structure.is_auxiliary), findings.structure.field.dtype)
    for rules in findings.rounds:
        for one in rules:
            margin[one.auxiliaries] = one.margin
    if len(charged) > MOST:
        return int(margin[charged].min())
    found = components(findings.structure, findings.structure.auxiliaries)
    asked = np.zeros(len(margin), bool)
    asked[charged] = True
    values = []
    for cluster in np.unique(found.cluster[asked[found.members]]):
        members = found.auxiliaries_of(int(cluster))
        decided = members[margin[members] > 0]
        slack = _slack(findings, members) if len(decided) == len(members) else 0
        values.append(max(int(margin[decided].min()), slack))
    return min(values)


def _slack(findings: Findings, members: Positions) -> int:
    """Least slack of a cluster under equal shares, rounded up; 0 where that says nothing."""
    if len(members) > MOST:
        return 0
    problem = flip_problem(findings.structure, members)
    candidate = _as_candidate(findings, problem)
    if candidate is None:
        return 0
    return max(0, -(-slacks(problem, candidate).least // PARTS))


def _as_candidate(findings: Findings, problem: FlipProblem) -> Candidate | None:
    """The rules of a cluster with guards in ascending order; None where some guard is an auxiliary."""
    place = {int(position): i for i, position in enumerate(problem.auxiliaries)}
    guards: list[tuple[int, ...]] = [()] * len(place)
    functions: list[Integers] = [np.zeros(1, np.int64)] * len(place)
    for rules in findings.rounds:
        for one in rules:
            inside = np.flatnonzero(np.isin(one.auxiliaries, problem.auxiliaries))
            if not len(inside):
                continue
            chosen = one.taken(inside)
            for y, row, table in zip(chosen.auxiliaries, chosen.guards, chosen.truth_tables(), strict=True):
                if findings.structure.is_auxiliary[row].any():
                    return None
                order = np.argsort(row)
                guards[place[int(y)]] = tuple(int(k) for k in np.searchsorted(problem.known, row[order]))
                functions[place[int(y)]] = table.reshape((2,) * one.g).transpose(order).ravel()
    return Candidate(tuple(guards), tuple(functions))
