"""The stages of a projection, cheapest first: each settles the clusters it can and hands on the rest.

1. Tables for small clusters.
2. Auxiliaries with a few guards, by interval bounds; what they leave falls apart into smaller clusters.
3. Counting, and cheap tables, with the decided auxiliaries among the touched variables.
4. Auxiliaries eliminated in turn (chains).
5. Auxiliaries decided together by shared bounds.
6. Single states, where few originals are behind a cluster of many auxiliaries; then larger tables.
7. Chains once more, ties allowed: P is found, but not how many settings reach it.
"""

from __future__ import annotations

from collections import Counter

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.states import from_bits, to_bits, unpack
from hubokit.projection.candidates import fitted, known_samples
from hubokit.projection.chains import eliminate
from hubokit.projection.clusters import Components, batches, components
from hubokit.projection.findings import Findings, Listed, RuleStep, SharedStep
from hubokit.projection.guards import Rules, decide
from hubokit.projection.polynomial import Gathered
from hubokit.projection.search import gap_above, search
from hubokit.projection.settle import TABLE_WORK, by_counting, by_tables
from hubokit.projection.shared_bounds import (
    PARTS,
    PROGRAM_MOST,
    SHARED_MOST,
    Candidate,
    FlipProblem,
    as_fractions,
    better_shares,
    flip_problem,
    slacks,
)
from hubokit.projection.structure import Integers, Positions, Structure
from hubokit.projection.tables import coefficients, least_positive, written

SMALL = 12
"""Auxiliaries plus touched variables up to which a cluster is tabulated without looking for guards."""

SINGLE = 6
"""Touched variables up to which a single auxiliary is tabulated without looking for guards."""

SMALL_WORK = 2**28
"""Energies that these tables may take together."""

CHEAP = 2**24
"""Energies that the tables of a batch may take before chains are tried."""

DENSE = 2**24
"""Largest number of couplings of one cluster that are written out as a dense array."""

LISTED_BITS = 16
"""Originals behind a cluster that is minimised state by state."""


def settle(structure: Structure, table_bits: int) -> Findings:
    """Run all stages over one model."""
    findings = Findings(structure, Gathered(structure.domain))
    findings.gathered.add([part for part in structure.direct if len(part[1])])
    found = components(structure, structure.auxiliaries)
    left = _small_tables(findings, found, table_bits)
    if not left.any():
        return findings
    candidates = found.members[left[found.cluster]]
    for rules in decide(structure, candidates):
        findings.decide(RuleStep(False, rules), rules)
    waiting = candidates[~findings.known()[candidates]]
    if not len(waiting):
        return findings
    found = components(structure, waiting)
    left = _by_shape(findings, found, np.ones(len(found), bool), table_bits, CHEAP)
    left = _by_chains(findings, found, left)
    for cluster in np.flatnonzero(left):
        left[cluster] = not _by_shared_bounds(findings, found.auxiliaries_of(int(cluster)))
    for cluster in np.flatnonzero(left):
        left[cluster] = not _by_states(findings, found.auxiliaries_of(int(cluster)), table_bits)
    left = _by_shape(findings, found, left, table_bits, TABLE_WORK)
    left = _by_chains(findings, found, left, least_margin=0)
    _name_undecided(findings, found, left)
    return findings


def _small_tables(findings: Findings, found: Components, table_bits: int) -> NDArray[np.bool_]:
    """Tables for small clusters; returns which clusters are left."""
    # A single auxiliary with many neighbours is usually decided by a few of them, which is quicker and as exact.
    size = np.where((found.a == 1) & (found.d > SINGLE), SMALL + 1, found.a + found.d)
    total, limit = 0, -1
    for bits in range(SMALL + 1):
        total += int((size == bits).sum()) << bits
        if total > SMALL_WORK:
            break
        limit = bits
    chosen = (size <= limit) & (found.d <= table_bits)
    for batch in batches(findings.structure, found, chosen):
        settled = by_tables(batch, findings.structure.domain, findings.gathered, table_bits, TABLE_WORK)
        if settled is None:
            chosen[found.cluster[np.isin(found.members, batch.auxiliaries)]] = False
        else:
            findings.settle(settled)
    return ~chosen


def _by_shape(
    findings: Findings, found: Components, chosen: NDArray[np.bool_], table_bits: int, work: int
) -> NDArray[np.bool_]:
    """Counting or tables for the chosen clusters; returns which of them are left."""
    structure = findings.structure
    cluster_of = np.full(len(structure.is_auxiliary), -1)
    cluster_of[found.members] = found.cluster
    left = chosen.copy()
    dense = chosen & (found.a * (found.a + found.d) <= DENSE)
    for batch in batches(structure, found, dense):
        settled = by_counting(batch, structure.domain, findings.gathered) or by_tables(
            batch, structure.domain, findings.gathered, table_bits, work
        )
        if settled is not None:
            findings.settle(settled)
            left[cluster_of[batch.auxiliaries[:, 0]]] = False
    return left


def _by_chains(
    findings: Findings, found: Components, chosen: NDArray[np.bool_], least_margin: int = 1
) -> NDArray[np.bool_]:
    """Auxiliaries eliminated in turn, for clusters that come out decided whole; returns which are left."""
    structure = findings.structure
    known = findings.known()
    cluster_of = np.full(len(structure.is_auxiliary), -1)
    cluster_of[found.members] = found.cluster
    trying = chosen
    # A second pass leaves out the clusters that stayed open: the terms of one cluster never meet those of another.
    while trying.any():
        chain = eliminate(structure, found.members[trying[found.cluster]], known, least_margin)
        if not len(chain.left):
            findings.follow(chain)
            return chosen & ~trying
        trying = trying.copy()
        trying[cluster_of[chain.left]] = False
    return chosen


def _by_shared_bounds(findings: Findings, auxiliaries: Positions) -> bool:
    """Decide all auxiliaries of one cluster together, with equal shares or better ones."""
    if not 1 < len(auxiliaries) <= SHARED_MOST:
        return False
    problem = flip_problem(findings.structure, auxiliaries)
    candidate = fitted(problem, known_samples(findings.structure, findings.rounds, problem.known))
    found = slacks(problem, candidate)
    shares: Integers | None = None
    if found.least <= 0 and len(auxiliaries) <= PROGRAM_MOST and problem.start.dtype != object:
        shares, found = better_shares(problem, candidate)
    if found.least <= 0:
        return False
    least = [min(as_fractions(table)) for table in found.tables]
    rules = [_as_rules(problem, candidate, i, int(table.min())) for i, table in enumerate(found.tables)]
    findings.decide(SharedStep(rules, _unequal(problem, shares), least), rules)
    return True


def _as_rules(problem: FlipProblem, candidate: Candidate, i: int, slack: int) -> Rules:
    bits = candidate.functions[i].tolist()
    guards = problem.known[list(candidate.guards[i])]
    # F - P is a whole multiple of the resolution, so the slack may be rounded up.
    return Rules(
        problem.auxiliaries[i : i + 1],
        guards[None, :],
        np.array([sum(bit << t for t, bit in enumerate(bits))], np.uint64),
        np.array([-(-slack // PARTS)], problem.start.dtype),
        np.array([False]),
    )


def _unequal(problem: FlipProblem, shares: Integers | None) -> list[tuple[int, int, int, int, int]]:
    if shares is None:
        return []
    upper = np.triu(problem.pair) != 0
    listed = np.argwhere((shares != PARTS // 2) & upper[:, :, None, None])
    return [(i, k, r, s, int(shares[i, k, r, s])) for i, k, r, s in listed.tolist()]


def _by_states(findings: Findings, auxiliaries: Positions, table_bits: int) -> bool:
    """Minimise one cluster at every state of the originals behind it."""
    structure = findings.structure
    if len(auxiliaries) > SHARED_MOST:
        return False
    problem = flip_problem(structure, auxiliaries)
    touched = _originals_behind(findings, problem.known)
    if len(touched) > min(LISTED_BITS, table_bits):
        return False
    bits = np.zeros((1 << len(touched), len(structure.is_auxiliary)), np.int8)
    bits[:, touched] = unpack(np.arange(1 << len(touched)), len(touched))
    states = from_bits(bits, structure.domain)
    for rules in findings.rounds:
        for one in rules:
            states[:, one.auxiliaries] = from_bits(
                one.bits(to_bits(states[:, one.guards], structure.domain)), structure.domain
            )
    known_bits = to_bits(states[:, problem.known], structure.domain).astype(problem.linear.dtype)
    try:
        fields = problem.start + known_bits @ problem.linear.T
        found = search(fields, problem.pair)
    except LimitError:
        return False
    gap, is_exact = gap_above(fields, problem.pair, found)
    states[:, auxiliaries] = from_bits(found.bits, structure.domain)
    minimum = _cluster_energies(structure, auxiliaries, states)
    findings.settle(Listed(auxiliaries, touched, minimum, found.multiplicity, int(least_positive(gap)), is_exact))
    coefficient, shift = coefficients(minimum[None, :], structure.domain)
    findings.gathered.add(written(coefficient, touched[None, :]), shift)
    return True


def _cluster_energies(structure: Structure, auxiliaries: Positions, states: NDArray[np.int8]) -> Integers:
    """Energies of the terms that hold at least one of the auxiliaries, shape (m,)."""
    held = np.zeros(len(structure.is_auxiliary), bool)
    held[auxiliaries] = True
    kept = held[structure.ends].any(axis=1)
    kind = structure.field.dtype
    total: Integers = states[:, auxiliaries].astype(kind) @ structure.field[auxiliaries]
    for (first, second), weight in zip(structure.ends[kept].tolist(), structure.weights[kept].tolist(), strict=True):
        total = total + weight * (states[:, first] * states[:, second]).astype(kind)
    return total


def _originals_behind(findings: Findings, known: Positions) -> Positions:
    """The originals among the given variables, and those on which the decided auxiliaries among them depend."""
    asked = np.zeros(len(findings.structure.is_auxiliary), bool)
    asked[known] = True
    for rules in reversed(findings.rounds):
        for one in rules:
            used = asked[one.auxiliaries]
            asked[one.guards[used].ravel()] = True
    return np.flatnonzero(asked & ~findings.structure.is_auxiliary)


def _name_undecided(findings: Findings, found: Components, left: NDArray[np.bool_]) -> None:
    kinds = Counter(zip(found.a[left].tolist(), found.d[left].tolist(), strict=True))
    for (a, d), number in sorted(kinds.items()):
        clusters = "1 cluster" if number == 1 else f"{number:,} clusters"
        auxiliaries = "1 auxiliary" if a == 1 else f"{a:,} coupled auxiliaries"
        findings.undecided.append(
            f"{clusters} of {auxiliaries} touching {d:,} variable{'' if d == 1 else 's'}: no few guards decide them, "
            "alone or by shared bounds, and the minimum over them has too large a table or too many terms"
        )
