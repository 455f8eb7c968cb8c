"""The certificate of a projection, followed step by step in plain integers.

A certificate lists, in proof order, how every auxiliary is minimised away: decided by a few *guard*
variables whatever the others are, decided together by shared bounds, or tabulated with its cluster. `follow`
repeats each step from the model alone and returns P and what is known of the multiplicity, or says which
step is wrong (`Rejected`), or that a step is beyond what this checker re-checks (`TooLarge`).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from hubokit.validation.audit_clusters import counting_step, states_step, tables_step
from hubokit.validation.audit_polynomials import Poly, TooLarge, add, substituted
from hubokit.validation.audit_proof import Proof, Rejected, function_of
from hubokit.validation.audit_rules import guards_step, shared_step, weak_guards_step
from hubokit.validation.audit_tables import own_tables

STEPS: Mapping[str, Callable[[Proof, Mapping[str, Any], int], None]] = {
    "guards": guards_step,
    "weak guards": weak_guards_step,
    "shared": shared_step,
    "tables": tables_step,
    "counting": counting_step,
    "states": states_step,
}


def follow(
    certificate: Mapping[str, Any], model: Poly, domain: str, variables: int, auxiliaries: Sequence[int]
) -> Proof:
    """Repeat a certificate; afterwards `Proof.gained` is P over the originals (without the model's constant).

    Parameters
    ----------
    certificate : mapping
    model : dict
        The model's terms in units of its resolution, without its constant.
    variables : int
        Number of variables of the model.
    auxiliaries : sequence of int
        The variables to minimise over.

    Raises
    ------
    Rejected
        A step does not hold.
    TooLarge
        A step, or the whole, is beyond this checker.
    """
    proof = Proof(domain, dict(model), frozenset(auxiliaries))
    steps = certificate["steps"] if "steps" in certificate else [own_tables(proof)]
    for number, step in enumerate(steps):
        kind = step.get("step")
        if kind not in STEPS:
            raise TooLarge(f"a step of the kind {kind!r}")
        try:
            STEPS[kind](proof, step, variables)
        except Rejected as fault:
            raise Rejected(f"step {number} ({kind}): {fault}") from None
    missing = proof.auxiliaries - set(proof.known) - proof.done
    if missing:
        raise Rejected(f"{len(missing)} auxiliaries are not settled by any step")
    _close(proof)
    return proof


def _close(proof: Proof) -> None:
    """P = what is left of F' + what the tables gave, with the known auxiliaries put in, last first."""
    P: Poly = dict(proof.left)
    for key, value in proof.gained.items():
        add(P, key, value)
    for position in reversed([one for one in proof.known if one not in proof.gone]):
        guards, function = proof.known[position]
        proof.spend(len(P))
        P = substituted(P, position, function_of(function, guards, proof.domain), proof.domain)
    proof.gained = P


def multiplicity_at(proof: Proof, bits: Mapping[int, int]) -> int:
    """m at a state of the originals, given as bits by position."""
    at = proof.decided(dict(bits))
    total = proof.multiplicity
    for touched, count in proof.uneven:
        total *= count(tuple(at[position] for position in touched))
    return total
