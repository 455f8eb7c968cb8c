"""Projection of a quadratic model: P(x) = min over the auxiliaries of F(x, a), as an explicit polynomial where it can be proved.

The auxiliaries split into clusters. In this order: small clusters by tables; auxiliaries with a few guards by interval bounds;
what is left of the other clusters by counting or by larger tables, with the decided auxiliaries among the touched variables and
put in afterwards. What none of these settles is named in `Projection.undecided`, and P is then not claimed.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import States, from_bits
from hubokit.projection.chains import eliminate
from hubokit.projection.clusters import Components, batches, components
from hubokit.projection.findings import Findings, RuleStep
from hubokit.projection.guards import decide
from hubokit.projection.minimum import Minimiser
from hubokit.projection.polynomial import Gathered
from hubokit.projection.result import ClusterSummary, GapBound, least
from hubokit.projection.settle import TABLE_WORK, Settled, by_counting, by_tables
from hubokit.projection.structure import Positions, Structure, structure_of
from hubokit.projection.substitution import substituted
from hubokit.projection.tables import NONE

SMALL = 12
"""Auxiliaries plus touched variables up to which a cluster is tabulated without looking for guards."""

CHEAP = 2**22
"""Energies that the tables of a batch may take before chains are tried."""

DENSE = 2**24
"""Largest number of couplings of one cluster that are written out as a dense array."""

SMALL_WORK = 2**28
"""Energies that these tables may take together."""


@dataclass(frozen=True)
class Projection:
    """The minimum of a quadratic model over its auxiliaries.

    Parameters
    ----------
    model : Hamiltonian
    auxiliaries, originals : tuple of str
        In model order.
    polynomial : Hamiltonian or None
        P over the originals, in the model's domain; None when some cluster is undecided or P would be too large.
    undecided : tuple of str
        One sentence for each kind of undecided cluster.
    uniform_multiplicity : int or None
        m(x) when it is known to be the same for all x.
    gap_everywhere : GapBound or None
        Least strictly positive F - P over all x; None when some cluster is undecided.
    clusters : tuple of ClusterSummary
    """

    model: Hamiltonian
    auxiliaries: tuple[str, ...]
    originals: tuple[str, ...]
    polynomial: Hamiltonian | None
    undecided: tuple[str, ...]
    uniform_multiplicity: int | None
    gap_everywhere: GapBound | None
    clusters: tuple[ClusterSummary, ...]
    findings: Findings = field(repr=False)

    @cached_property
    def minimiser(self) -> Minimiser:
        """The engine behind `minimum`."""
        return Minimiser(self.findings.structure, tuple(tuple(one) for one in self.findings.rounds))

    def minimum(self, states: object) -> tuple[NDArray[Any], States, NDArray[Any]]:
        """Exact minimum over the auxiliaries at given states of the originals, whether or not P is known.

        Parameters
        ----------
        states : mapping, sequence or array (m, originals)
            Values of the model's domain.

        Returns
        -------
        energies : integer array, shape (m,)
            In units of the model's resolution, without its constant.
        auxiliaries : int8 array, shape (m, a)
            Best auxiliaries, the first in lift order among the best.
        multiplicities : object array, shape (m,)

        Raises
        ------
        LimitError
            Some cluster of auxiliaries is too wide.
        """
        from hubokit.model.states import as_states

        found = self.minimiser.minima(as_states(states, self.originals, self.model.domain))
        energies = self.model.integer_energies(found.states)
        return energies, found.states[:, self.findings.structure.auxiliaries], found.multiplicity

    def multiplicities(self, states: object) -> NDArray[Any]:
        """m(x) at given states of the originals: Python integers, shape (m,)."""
        return self.minimum(states)[2]

    def gap_at(self, states: object) -> GapBound:
        """Least strictly positive F - P over these states of the originals."""
        from hubokit.model.states import as_states

        originals = as_states(states, self.originals, self.model.domain)
        whole = Minimiser(self.findings.structure)
        found = None
        if any(self.findings.rounds):
            try:
                found = whole.minima(originals)
            except LimitError:
                found = None
        if found is None:
            found = self.minimiser.minima(originals)
        positive = found.gap[found.gap != NONE]
        if not len(positive):
            return GapBound(None, found.exact)
        return GapBound(int(positive.min()) * self.model.resolution, found.exact)

    def multiplicity_witness(self) -> States | None:
        """A state of the originals (1, originals) with more than one best auxiliary setting, where tables show one."""
        structure = self.findings.structure
        for settled, consistent in self.findings.settled:
            shape = settled.shape
            uneven = np.flatnonzero(settled.most[shape] > 1)
            if len(uneven) and consistent:
                bits = np.zeros((1, len(structure.is_auxiliary)), np.int8)
                bits[0, settled.batch.touched[uneven[0]]] = settled.witness[shape[uneven[0]]]
                return from_bits(bits[:, structure.originals], self.model.domain)
        return None

    def certificate(self) -> dict[str, Any]:
        """What a second checker needs to follow the proof: see `hubokit.projection.certificate`."""
        from hubokit.projection.certificate import certificate

        return certificate(self.findings, self.uniform_multiplicity, self.gap_everywhere)


def project(model: Hamiltonian, auxiliaries: Sequence[str], *, table_bits: int = 20) -> Projection:
    """Minimise a quadratic model over its auxiliaries.

    Parameters
    ----------
    model : Hamiltonian
        Locality at most 2, either domain.
    auxiliaries : sequence of str
        The variables to minimise over.
    table_bits : int
        Largest number of touched variables of a tabulated cluster.

    Returns
    -------
    Projection

    Raises
    ------
    InputError
        The model is not quadratic, or an auxiliary is unknown or named twice.

    Examples
    --------
    >>> F = Hamiltonian({("x", "a"): -2, ("y", "a"): -2, ("z", "a"): -2, ("a",): 5}, domain="boolean")
    >>> P = project(F, ["a"])
    >>> P.polynomial.terms(), P.uniform_multiplicity, str(P.gap_everywhere)
    ([(('x', 'y', 'z'), Fraction(-1, 1))], 1, '1')
    """
    structure = structure_of(model, auxiliaries)
    findings = Findings(structure, Gathered(model.domain))
    findings.gathered.add([part for part in structure.direct if len(part[1])])
    found = components(structure, structure.auxiliaries)
    rest = _tabulate_small(findings, found, table_bits)
    if rest.any():
        waiting = found.members[rest[found.cluster]]
        findings.rounds = decide(structure, waiting)
        findings.steps.extend(RuleStep(False, rules) for rules in findings.rounds)
        _add_decided_terms(findings)
        _settle_rest(findings, _undecided(findings, waiting), table_bits)
    return _projection(findings)


def _tabulate_small(findings: Findings, found: Components, table_bits: int) -> NDArray[np.bool_]:
    """Tables for small clusters; returns which clusters are left."""
    size = found.a + found.d
    work = np.bincount(size, minlength=SMALL + 1)[: SMALL + 1].astype(object)
    total, limit = 0, -1
    for bits, number in enumerate(work):
        total += int(number) << bits
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


def _undecided(findings: Findings, waiting: Positions) -> Positions:
    left = np.zeros(len(findings.structure.is_auxiliary), bool)
    left[waiting] = True
    for rules in findings.rounds:
        for one in rules:
            left[one.auxiliaries] = False
    return np.flatnonzero(left)


def _add_decided_terms(findings: Findings) -> None:
    """Terms whose auxiliaries are all decided go into P as they stand, to be put in later."""
    structure = findings.structure
    decided = np.zeros(len(structure.is_auxiliary), bool)
    for rules in findings.rounds:
        for one in rules:
            decided[one.auxiliaries] = True
    plain = decided | ~structure.is_auxiliary
    kept = plain[structure.ends].all(axis=1)
    fresh = np.flatnonzero(decided)
    findings.gathered.add([(fresh[:, None], structure.field[fresh]), (structure.ends[kept], structure.weights[kept])])


def _settle_rest(findings: Findings, waiting: Positions, table_bits: int) -> None:
    """What plain guards leave: counting and cheap tables, then chains, then larger tables, then single states."""
    if not len(waiting):
        return
    found = components(findings.structure, waiting)
    left = _by_shape(findings, found, np.ones(len(found), bool), table_bits, CHEAP)
    left = _by_chains(findings, found, left)
    left = _by_shape(findings, found, left, table_bits, TABLE_WORK)
    kinds = Counter(zip(found.a[left].tolist(), found.d[left].tolist(), strict=True))
    for (a, d), number in sorted(kinds.items()):
        findings.undecided.append(
            f"{number} cluster{'s' if number > 1 else ''} of {a} coupled auxiliaries touching {d} variables: no few "
            f"guards decide them, and tables over {d} variables with {a} auxiliaries are too large"
        )


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


def _by_chains(findings: Findings, found: Components, chosen: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Auxiliaries eliminated in turn, for clusters that come out decided whole; returns which of the chosen are left."""
    structure = findings.structure
    known = ~structure.is_auxiliary
    for rules in findings.rounds:
        for one in rules:
            known[one.auxiliaries] = True
    cluster_of = np.full(len(structure.is_auxiliary), -1)
    cluster_of[found.members] = found.cluster
    left = chosen.copy()
    trying = chosen
    # A second pass without the clusters that stayed open: the terms of one cluster never meet those of another.
    while trying.any():
        chain = eliminate(structure, found.members[trying[found.cluster]], known)
        if not len(chain.left):
            findings.follow(chain)
            return left & ~trying
        trying = trying.copy()
        trying[cluster_of[chain.left]] = False
    return left


def _projection(findings: Findings) -> Projection:
    structure = findings.structure
    model = structure.model
    polynomial = None
    if not findings.undecided:
        try:
            gathered = substituted(findings.gathered, findings.rounds, model.size)
            polynomial = _over_originals(structure, gathered)
        except LimitError as refused:
            findings.undecided.append(f"P as a polynomial: {refused.message}")
    bounds = [_gap(settled, model, consistent) for settled, consistent in findings.settled]
    for rules in findings.rounds:
        for one in rules:
            margin = one.margin.min()
            attained = bool(one.attained[one.margin == margin].any())
            bounds.append(GapBound(int(margin) * model.resolution, attained))
    clusters_known = polynomial is not None or not any("cluster" in one for one in findings.undecided)
    return Projection(
        model,
        tuple(model.labels[i] for i in structure.auxiliaries),
        tuple(model.labels[i] for i in structure.originals),
        polynomial,
        tuple(findings.undecided),
        _uniform(findings) if clusters_known else None,
        least(bounds) if clusters_known else None,
        _summaries(findings),
        findings,
    )


def _gap(settled: Settled, model: Hamiltonian, consistent: bool) -> GapBound:
    value = settled.least_gap()
    return GapBound(None if value is None else value * model.resolution, consistent)


def _uniform(findings: Findings) -> int | None:
    total = 1
    for settled, _ in findings.settled:
        least_of, most_of = settled.least[settled.shape], settled.most[settled.shape]
        if (least_of != most_of).any():
            return None
        for value, number in zip(*np.unique(least_of, return_counts=True), strict=True):
            total *= int(value) ** int(number)
    return total


def _over_originals(structure: Structure, gathered: Gathered) -> Hamiltonian:
    model = structure.model
    column = np.full(model.size, -1)
    column[structure.originals] = np.arange(len(structure.originals))
    unit = model.resolution / (1 << gathered.shift)
    return Hamiltonian.from_arrays(
        [column[members] for members, _ in gathered.parts],
        [weights for _, weights in gathered.parts],
        domain=model.domain,
        labels=[model.labels[i] for i in structure.originals],
        resolution=unit,
        constant=model.constant + Fraction(gathered.constant) * unit,
        convention=model.convention,
    )


def _summaries(findings: Findings) -> tuple[ClusterSummary, ...]:
    counted: Counter[tuple[str, int, int]] = Counter()
    for settled, _ in findings.settled:
        counted[settled.method, settled.batch.a, settled.batch.d] += len(settled.batch)
    for rules in findings.rounds:
        for one in rules:
            counted["guards", 1, one.g] += len(one)
    return tuple(ClusterSummary(method, number, a, d) for (method, a, d), number in sorted(counted.items()))
