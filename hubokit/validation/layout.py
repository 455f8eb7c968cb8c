"""The JSON fields of a verdict, there and back; the document around them is made by exchange.

Rationals and counts are strings ("-3/2", "12"), states are objects label -> value, absent things are null.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from hubokit.model.numbers import as_fraction, format_fraction
from hubokit.validation.verdict import (
    Claim,
    Evenness,
    Figure,
    Inversion,
    Inversions,
    StateList,
    Verdict,
    Witness,
)

Json = dict[str, Any]


def verdict_to_json(verdict: Verdict) -> Json:
    """The fields of a verdict as JSON values, without ``document``, ``version`` and ``digests``.

    Returns
    -------
    dict
        ``claims, asked, scale, shift, scale_from, source_digest, model_digest, figures, evenness, lost,
        spurious, inversions, difference, notes, evidence, made_by``.
    """
    return {
        "claims": {name: _claim_to_json(claim) for name, claim in verdict.claims.items()},
        "asked": list(verdict.asked),
        "scale": format_fraction(verdict.scale),
        "shift": format_fraction(verdict.shift),
        "scale_from": verdict.scale_from,
        "source_digest": verdict.source_digest,
        "model_digest": verdict.model_digest,
        "figures": {name: _figure_to_json(figure) for name, figure in verdict.figures.items()},
        "evenness": [
            {"beta_gap": format(step.beta_gap, "g"), "ratio": format(step.ratio, ".6g")} for step in verdict.evenness
        ],
        "lost": _list_to_json(verdict.lost),
        "spurious": _list_to_json(verdict.spurious),
        "inversions": _inversions_to_json(verdict.inversions),
        "difference": list(verdict.difference),
        "notes": list(verdict.notes),
        "evidence": [_evidence_to_json(piece) for piece in verdict.evidence],
        "made_by": verdict.version,
    }


def verdict_from_json(fields: Mapping[str, Any]) -> Verdict:
    """A verdict from the fields that `verdict_to_json` wrote (validated against the schema beforehand)."""
    return Verdict(
        claims={name: _claim_from_json(name, claim) for name, claim in fields["claims"].items()},
        asked=tuple(fields["asked"]),
        scale=as_fraction(fields["scale"], "/scale"),
        shift=as_fraction(fields["shift"], "/shift"),
        scale_from=fields["scale_from"],
        source_digest=fields["source_digest"],
        model_digest=fields["model_digest"],
        figures={name: _figure_from_json(figure) for name, figure in fields["figures"].items()},
        evenness=tuple(Evenness(float(step["beta_gap"]), float(step["ratio"])) for step in fields["evenness"]),
        lost=_list_from_json(fields["lost"]),
        spurious=_list_from_json(fields["spurious"]),
        inversions=_inversions_from_json(fields["inversions"]),
        difference=tuple(fields["difference"]),
        notes=tuple(fields["notes"]),
        evidence=tuple(fields["evidence"]),
        version=fields["made_by"],
    )


def _evidence_to_json(piece: Mapping[str, Any]) -> Json:
    return {name: dict(value) if isinstance(value, Mapping) else value for name, value in piece.items()}


def _rational(value: Fraction | None) -> str | None:
    return None if value is None else format_fraction(value)


def _number(text: str | None) -> Fraction | None:
    return None if text is None else as_fraction(text)


def _count(value: int | None) -> str | None:
    return None if value is None else str(value)


def _whole(text: str | None) -> int | None:
    return None if text is None else int(text)


def _claim_to_json(claim: Claim) -> Json:
    return {
        "status": claim.status,
        "method": claim.method,
        "detail": claim.detail,
        "witness": _witness_to_json(claim.witness),
        "rival": _witness_to_json(claim.rival),
    }


def _claim_from_json(name: str, fields: Json) -> Claim:
    return Claim(
        name=name,
        status=fields["status"],
        method=fields["method"],
        detail=fields["detail"],
        witness=_witness_from_json(fields["witness"]),
        rival=_witness_from_json(fields["rival"]),
    )


def _witness_to_json(witness: Witness | None) -> Json | None:
    if witness is None:
        return None
    return {
        "state": dict(witness.state),
        "auxiliaries": dict(witness.auxiliaries),
        "source_energy": format_fraction(witness.source_energy),
        "model_energy": _rational(witness.model_energy),
        "minimum_by": witness.minimum_by,
        "multiplicity": _count(witness.multiplicity),
    }


def _witness_from_json(fields: Json | None) -> Witness | None:
    if fields is None:
        return None
    return Witness(
        state=dict(fields["state"]),
        auxiliaries=dict(fields["auxiliaries"]),
        source_energy=as_fraction(fields["source_energy"]),
        model_energy=_number(fields["model_energy"]),
        minimum_by=fields["minimum_by"],
        multiplicity=_whole(fields["multiplicity"]),
    )


def _figure_to_json(figure: Figure) -> Json:
    return {"value": _rational(figure.value), "exact": figure.exact, "note": figure.note}


def _figure_from_json(fields: Json) -> Figure:
    return Figure(_number(fields["value"]), fields["exact"], fields["note"])


def _list_to_json(states: StateList | None) -> Json | None:
    if states is None:
        return None
    return {
        "count": _count(states.count),
        "states": [dict(state) for state in states.states],
        "source_energies": [format_fraction(energy) for energy in states.source_energies],
        "model_energies": [_rational(energy) for energy in states.model_energies],
    }


def _list_from_json(fields: Json | None) -> StateList | None:
    if fields is None:
        return None
    return StateList(
        count=_whole(fields["count"]),
        states=tuple(dict(state) for state in fields["states"]),
        source_energies=tuple(as_fraction(energy) for energy in fields["source_energies"]),
        model_energies=tuple(_number(energy) for energy in fields["model_energies"]),
    )


def _inversions_to_json(inversions: Inversions | None) -> Json | None:
    if inversions is None:
        return None
    return {
        "below": format_fraction(inversions.below),
        "count": _count(inversions.count),
        "pairs": [
            {"lower": _witness_to_json(pair.lower), "upper": _witness_to_json(pair.upper)}
            for pair in inversions.pairs
        ],
    }


def _inversions_from_json(fields: Json | None) -> Inversions | None:
    if fields is None:
        return None
    pairs = []
    for pair in fields["pairs"]:
        lower, upper = _witness_from_json(pair["lower"]), _witness_from_json(pair["upper"])
        if lower is not None and upper is not None:
            pairs.append(Inversion(lower, upper))
    return Inversions(as_fraction(fields["below"]), int(fields["count"]), tuple(pairs))
