"""Evidence by projection: P as a polynomial against alpha * E + beta, coefficient by coefficient."""

from __future__ import annotations

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.validation.case import Case, States
from hubokit.validation.difference import largest_terms, least_bound, nonzero_state
from hubokit.validation.findings import Findings
from hubokit.validation.options import Options
from hubokit.validation.scaling import Relation, judge_scale, polynomial_relation
from hubokit.validation.uneven import tied_state
from hubokit.validation.verdict import Deferred

METHOD = "projection"
#: Methods of the projection that decide auxiliaries one by one; the others settle whole clusters.
RULES = ("guards", "chains", "shared bounds")


def by_projection(case: Case, options: Options, found: Findings) -> None:
    """Settle `energies` and what follows, or refute it with a state; say why where a cluster is undecided."""
    if not case.projectable:
        for name in options.asked:
            found.leave_open(name, "projection: the model is not quadratic")
        return
    projection = case.projection
    polynomial: Hamiltonian | None = projection.polynomial
    if polynomial is None:
        reason = "; ".join(projection.undecided) or "the projected polynomial would be too large"
        for name in options.asked:
            found.leave_open(name, f"projection: {reason}")
        return
    polynomial = polynomial.with_labels(case.originals)
    relation = polynomial_relation(polynomial, case.energy)
    found.take_scale(judge_scale(case.declared, relation))
    found.evidence.append({"kind": METHOD, "certificate": Deferred(projection.certificate)})
    differs = polynomial - (found.scale * case.energy + found.shift)
    if differs == 0:
        _equal(case, found, polynomial)
    else:
        _different(case, found, differs, relation)
    _multiplicity(case, found)


def _equal(case: Case, found: Findings, polynomial: Hamiltonian) -> None:
    terms = len(polynomial)
    account = f"P = alpha E + beta, {terms} term{'s' if terms != 1 else ''} compared over {_clusters(case)}"
    if case.represents_all:
        found.prove("energies", METHOD, account)
        return
    text = "variables are merged or fixed: the model lacks source states; on those it has, " + account
    found.refute("energies", METHOD, text, case.bare_witness(case.unrepresented_state()))


def _different(case: Case, found: Findings, differs: Hamiltonian, relation: Relation | None) -> None:
    found.difference = largest_terms(differs)
    witness = case.projected_witness(nonzero_state(differs))
    if least_bound(differs) >= 0:
        found.note("P - (alpha E + beta) is nonnegative: no state came out below its energy")
    terms = len(differs) + bool(differs.constant)
    found.refute("energies", METHOD, f"P differs from alpha E + beta in {terms} terms", witness)
    if relation is None or not case.represents_all:
        found.leave_open("ground-states", "projection: P is no multiple of E, so its minimisers have to be listed")
        return
    text = f"P = {format_fraction(relation.scale)} E + {format_fraction(relation.shift)}: the same minimisers"
    found.prove("ground-states", METHOD, text)
    if relation.with_scale(found.scale).scale == found.scale:
        text = f"min P lies {format_fraction(differs.constant)} off: P = alpha E + beta + that everywhere"
        found.refute("ground-energy", METHOD, text, witness)


def _multiplicity(case: Case, found: Findings) -> None:
    uniform = case.projection.uniform_multiplicity
    energies, states = found.proved("energies"), found.proved("ground-states")
    if uniform is not None:
        if energies and uniform == 1:
            found.prove("one-to-one", METHOD, f"m = 1 at every state, over {_clusters(case)}")
        if states:
            found.prove("even-multiplicity", METHOD, f"m = {uniform} at every state")
        if energies and uniform != 1:
            witness = case.projected_witness(_first(case))
            found.refute("one-to-one", METHOD, f"m = {uniform} at every state", witness)
        return
    if not energies:
        return
    state = tied_state(case)
    if state is None:
        reason = "projection: m is not known to be one everywhere and no tied state was found"
        found.leave_open("one-to-one", reason)
        return
    witness = case.projected_witness(state)
    found.refute("one-to-one", METHOD, "a state has more than one best auxiliary setting", witness)


def _first(case: Case) -> States:
    return np.full(len(case.originals), 1 if case.model.domain == "spin" else 0, np.int8)


def _clusters(case: Case) -> str:
    """What the auxiliaries were settled by, in a phrase."""
    decided = sum(one.count for one in case.projection.clusters if one.method in RULES)
    tabulated = sum(one.count for one in case.projection.clusters if one.method not in RULES)
    parts = []
    if decided:
        parts.append(f"{decided:,} {'auxiliary' if decided == 1 else 'auxiliaries'} decided by guards")
    if tabulated or not decided:
        parts.append(f"{tabulated:,} cluster{'s' if tabulated != 1 else ''} of auxiliaries")
    return " and ".join(parts)
