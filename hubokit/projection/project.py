"""Projection of a quadratic model: P(x) = min over the auxiliaries of F(x, a).

The auxiliaries split into clusters, which `hubokit.projection.stages` settles one way or another, and P is a
polynomial. What nothing settles is named in `Projection.undecided`, and P is then not claimed; the minimum at
given states is exact all the same.
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
from hubokit.model.states import States, from_bits, unpack
from hubokit.projection.findings import Findings, Listed
from hubokit.projection.gaps import gap_everywhere
from hubokit.projection.minimum import Minimiser
from hubokit.projection.polynomial import Gathered
from hubokit.projection.result import ClusterSummary, GapBound
from hubokit.projection.settle import Settled
from hubokit.projection.stages import settle
from hubokit.projection.structure import Structure, structure_of
from hubokit.projection.substitution import substituted
from hubokit.projection.tables import NONE

GAP_WORK = 2**28
"""Table entries that may be computed for the true gap at given states where rules give a bound already."""


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
        # Rules give bounds; the minimum over all auxiliaries together gives the true gap, where it is within reach.
        whole = Minimiser(self.findings.structure)
        within_reach = self.findings.rounds and whole.elimination_work * len(originals) <= GAP_WORK
        found = (whole if within_reach else self.minimiser).minima(originals)
        positive = found.gap[found.gap != NONE]
        if not len(positive):
            return GapBound(None, found.exact)
        return GapBound(int(positive.min()) * self.model.resolution, found.exact)

    def multiplicity_witness(self) -> States | None:
        """A state of the originals (1, originals) with several best auxiliary settings, where tables show one."""
        structure = self.findings.structure
        for settled, consistent in self.findings.settled():
            shape = settled.shape
            uneven = np.flatnonzero(settled.most[shape] > 1)
            if len(uneven) and consistent:
                bits = np.zeros((1, len(structure.is_auxiliary)), np.int8)
                bits[0, settled.batch.touched[uneven[0]]] = settled.witness[shape[uneven[0]]]
                return from_bits(bits[:, structure.originals], self.model.domain)
        for listed in self.findings.listed():
            ties = np.flatnonzero(listed.multiplicity > 1)
            if len(ties):
                bits = np.zeros((1, len(structure.is_auxiliary)), np.int8)
                bits[0, listed.touched] = unpack(ties[:1], len(listed.touched))[0]
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
    return _projection(settle(structure_of(model, auxiliaries), table_bits))


def _projection(findings: Findings) -> Projection:
    structure = findings.structure
    model = structure.model
    polynomial = None
    too_large: tuple[str, ...] = ()
    if not findings.undecided:
        try:
            gathered = substituted(findings.gathered, findings.rounds, model.size)
            polynomial = _over_originals(structure, gathered)
        except LimitError as refused:
            too_large = (f"P as a polynomial: {refused.message}",)
    is_settled = not findings.undecided
    return Projection(
        model,
        tuple(model.labels[i] for i in structure.auxiliaries),
        tuple(model.labels[i] for i in structure.originals),
        polynomial,
        (*findings.undecided, *too_large),
        _uniform(findings) if is_settled and findings.is_tie_free_or_counted else None,
        gap_everywhere(findings) if is_settled else None,
        _summaries(findings),
        findings,
    )


def _uniform(findings: Findings) -> int | None:
    total = 1
    for settled, _ in findings.settled():
        least_of, most_of = settled.least[settled.shape], settled.most[settled.shape]
        if (least_of != most_of).any():
            return None
        for value, number in zip(*np.unique(least_of, return_counts=True), strict=True):
            total *= int(value) ** int(number)
    for listed in findings.listed():
        if len(set(listed.multiplicity.tolist())) > 1:
            return None
        total *= int(listed.multiplicity[0])
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
    for settled, _ in findings.settled():
        counted[settled.method, settled.batch.a, settled.batch.d] += len(settled.batch)
    for step in findings.steps:
        if isinstance(step, Listed):
            counted["single states", len(step.auxiliaries), len(step.touched)] += 1
        elif not isinstance(step, Settled):
            method = step.name
            for one in step.rules:
                counted[method, 1, one.g] += len(one)
    return tuple(ClusterSummary(method, number, a, d) for (method, a, d), number in sorted(counted.items()))
