"""Certificate steps that decide auxiliaries by rules: guards with interval bounds, and shared bounds.

An auxiliary y is decided by its guards when the *field* F(y at bit 1) - F(y at bit 0) has one strict sign
for every setting of the guards, whatever all other variables are: then y is that bit in every minimiser.
Several y are decided together when from their right values no set of flips pays: each flip costs more than
its share of what pairs of flips can gain.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from math import ceil
from typing import Any

from hubokit.validation.audit_polynomials import Key, Poly, TooLarge, least, settings, values_of
from hubokit.validation.audit_polynomials import field as field_of
from hubokit.validation.audit_proof import MOST_GUARDS, Proof, Rejected, function_of, positions_in


def _rules(proof: Proof, step: Mapping[str, Any], variables: int) -> list[tuple[int, Key, str]]:
    """Auxiliary, guards and function of a step that decides auxiliaries."""
    members = positions_in(step["auxiliaries"], variables)
    proof.fresh(members)
    if len(step["guards"]) != len(members) or len(step["functions"]) != len(members):
        raise Rejected("guards and functions do not match the auxiliaries")
    rules = []
    for y, guards, function in zip(members, step["guards"], step["functions"], strict=True):
        guards = tuple(positions_in(guards, variables))
        if len(guards) > MOST_GUARDS:
            raise TooLarge(f"{len(guards)} guards of one auxiliary")
        bad = len(function) != 2 ** len(guards) or set(function) - {"0", "1"} or len(set(guards)) < len(guards)
        if bad or y in guards:
            raise Rejected(f"the function of variable {y} does not fit its guards")
        rules.append((y, guards, function))
    return rules


def guards_step(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    """Auxiliaries that their guards decide: the field is at least the margin (rounded up) on the right side."""
    _decide(proof, step, variables, bool(step["eliminate"]), 1)


def weak_guards_step(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    """The same with fields that may be 0: the settings are best ones, but maybe not the only ones."""
    proof.unclear = True
    _decide(proof, step, variables, True, 0)


def _decide(proof: Proof, step: Mapping[str, Any], variables: int, eliminate: bool, least_margin: int) -> None:
    rules = _rules(proof, step, variables)
    margins = step["margins"]
    if len(margins) != len(rules):
        raise Rejected("margins do not match the auxiliaries")
    for (y, guards, function), margin in zip(rules, margins, strict=True):
        if type(margin) is not int or margin < least_margin:
            raise Rejected(f"the margin of variable {y} is less than {least_margin}")
        early = {other for other, _, _ in rules[: [one for one, _, _ in rules].index(y)]} if eliminate else set()
        if proof.gone & set(guards) or proof.done & set(guards) or early & set(guards):
            raise Rejected(f"variable {y} is guarded by a variable that is gone")
        if not eliminate and not proof.settled(guards):
            raise Rejected(f"variable {y} is guarded by a variable that is not settled before it")
        touching = field_of(proof.touching(y), y, proof.domain)
        proof.spend(len(touching) << len(guards))
        for setting, decided in zip(settings(len(guards)), function, strict=True):
            low, high = _interval(touching, dict(zip(guards, setting, strict=True)), proof.domain)
            away = -high if decided == "1" else low
            if ceil(away) < margin or away < 0 or (least_margin and not away):
                raise Rejected(f"the guards of variable {y} do not decide it by {margin} at {setting}")
    for y, guards, function in rules:
        proof.known[y] = (guards, function)
        if eliminate:
            proof.eliminate(y, function_of(function, guards, proof.domain))
            proof.gone.add(y)


def _interval(poly: Poly, fixed: Mapping[int, int], domain: str) -> tuple[Any, Any]:
    """Least and greatest value, each product that is not fixed at its own extreme."""
    values = values_of(domain)
    low = high = 0
    for key, weight in poly.items():
        free = False
        for position in key:
            if position in fixed:
                weight *= values[fixed[position]]
            else:
                free = True
        if not free:
            low, high = low + weight, high + weight
        elif domain == "spin":
            low, high = low - abs(weight), high + abs(weight)
        else:
            low, high = low + min(0, weight), high + max(0, weight)
    return low, high


def shared_step(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    rules = _rules(proof, step, variables)
    members = {y: number for number, (y, _, _) in enumerate(rules)}
    for y, guards, _ in rules:
        if not proof.settled(guards):
            raise Rejected(f"variable {y} is guarded by a variable that is not settled before it")
    shares: dict[tuple[int, int, int, int], Fraction] = {}
    if step["shares"] != "equal":
        for i, k, bit_i, bit_k, text in step["shares"]:
            share = Fraction(text)
            if not 0 <= share <= 1:
                raise Rejected("a share is not between 0 and 1")
            shares[i, k, bit_i, bit_k], shares[k, i, bit_k, bit_i] = share, 1 - share
    per_bit = -2 if proof.domain == "spin" else 1
    for number, (y, guards, function) in enumerate(rules):
        slack = Fraction(step["slacks"][number])
        if slack <= 0:
            raise Rejected(f"the slack of variable {y} is not positive")
        functions: list[tuple[Key, list[Any]]] = []
        right = {setting: int(bit) for setting, bit in zip(settings(len(guards)), function, strict=True)}
        for key, weight in field_of(proof.touching(y), y, proof.domain).items():
            partner = [members[other] for other in key if other in members]
            if len(partner) > 1 or (partner and len(key) > 1):
                raise Rejected(f"variable {y} meets two others of its step in one product")
            if not partner and not proof.settled(key):
                raise Rejected(f"variable {y} is coupled to a variable that is not settled")
            other = rules[partner[0]] if partner else None
            functions.append(_share(proof, (guards, right), key, weight, other, (number, partner), shares, per_bit))
        proof.spend(sum(len(table) for _, table in functions))
        excess = least(functions, proof.spend) if functions else 0
        if excess < slack:
            raise Rejected(f"the shared bound of variable {y} is {excess}, not {slack}")
    for y, guards, function in rules:
        proof.known[y] = (guards, function)


def _share(
    proof: Proof,
    own: tuple[Key, Mapping[tuple[int, ...], int]],
    key: Key,
    weight: int,
    other: tuple[int, Key, str] | None,
    pair: tuple[int, list[int]],
    shares: Mapping[tuple[int, int, int, int], Fraction],
    per_bit: int,
) -> tuple[Key, list[Any]]:
    """sigma times one product of a field, less its share of the cost when the product holds another of the step."""
    guards, right = own
    values = values_of(proof.domain)
    scope = tuple(sorted({*guards, *(other[1] if other else key)}))
    if len(scope) > MOST_GUARDS:
        raise TooLarge(f"a shared bound over {len(scope)} variables at once")
    rule = {} if other is None else dict(zip(settings(len(other[1])), other[2], strict=True))
    table = []
    for setting in settings(len(scope)):
        at = dict(zip(scope, setting, strict=True))
        bit = right[tuple(at[g] for g in guards)]
        sigma = 1 - 2 * bit
        if other is None:
            value: Any = sigma * weight
            for position in key:
                value *= values[at[position]]
            table.append(value)
            continue
        partner = int(rule[tuple(at[g] for g in other[1])])
        value = sigma * weight * values[partner]
        cross = weight * per_bit * sigma * (1 - 2 * partner)
        share = shares.get((pair[0], pair[1][0], bit, partner), Fraction(1, 2))
        table.append(value - share * max(0, -cross))
    return scope, table
