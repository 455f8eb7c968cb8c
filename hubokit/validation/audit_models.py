"""Model documents as the audit reads them: plain integers, nothing taken on trust."""

from __future__ import annotations

import hashlib
import json
import re
import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from hubokit.errors import InputError
from hubokit.validation.audit_polynomials import Key, Poly, add, value_at


@dataclass(frozen=True)
class Model:
    """A model document in plain numbers: terms by sorted positions, as integers in units of the resolution."""

    domain: str
    convention: str
    labels: tuple[str, ...]
    resolution: Fraction
    constant: Fraction
    terms: Poly

    def energy(self, state: Mapping[str, int]) -> Fraction:
        """The energy of a state given by names."""
        whole = value_at(self.terms, [state[label] for label in self.labels])
        return self.constant + self.resolution * Fraction(whole)


def rational(text: Any) -> Fraction:
    """A rational string or integer, of bounded length."""
    if type(text) is int:
        return Fraction(text)
    if not isinstance(text, str) or len(text) > 5000 or not re.fullmatch(r"[+-]?\d+(/\d+)?", text):
        raise InputError(f"not a rational: {str(text)[:40]!r}")
    return Fraction(text)


def read_model(document: Mapping[str, Any]) -> Model:
    """A model document in plain numbers."""
    labels = tuple(unicodedata.normalize("NFC", label) for label in document["variables"])
    if len(set(labels)) < len(labels) or document["domain"] not in ("spin", "boolean"):
        raise InputError("variables repeat, or the domain is neither spin nor boolean")
    terms: Poly = {}
    for block in document["terms"]:
        for members, weight in zip(block["members"], block["weights"], strict=True):
            key = tuple(sorted(members))
            if len(set(key)) < len(key) or not all(type(i) is int and 0 <= i < len(labels) for i in key):
                raise InputError(f"a term has the members {members}")
            add(terms, key, int(rational(weight)))
    constant, unit = rational(document["constant"]), rational(document["resolution"])
    return Model(document["domain"], document.get("convention", "1-2x"), labels, unit, constant, terms)


def digest(model: Model) -> str:
    """SHA-256 over the canonical JSON of the function: names sorted, coefficients in lowest terms."""
    order = sorted(range(len(model.labels)), key=lambda position: model.labels[position])
    rank = {position: place for place, position in enumerate(order)}
    sizes: dict[int, list[tuple[Key, int]]] = {}
    for key, weight in model.terms.items():
        sizes.setdefault(len(key), []).append((tuple(sorted(rank[i] for i in key)), weight))
    blocks = [
        {
            "coefficients": [str(weight * model.resolution) for _, weight in sorted(block)],
            "locality": size,
            "members": [list(key) for key, _ in sorted(block)],
        }
        for size, block in sorted(sizes.items())
    ]
    whole = {
        "constant": str(model.constant),
        "domain": model.domain,
        "terms": blocks,
        "variables": [model.labels[position] for position in order],
    }
    text = json.dumps(whole, separators=(",", ":"), ensure_ascii=False)
    return "sha256:" + hashlib.sha256(text.encode()).hexdigest()


def scaled(E: Poly, scale: Fraction, shift: Fraction) -> Poly:
    """scale * E + shift."""
    found: Poly = {key: scale * value for key, value in E.items()}
    add(found, (), shift)
    return found


def related(P: Poly, E: Poly) -> tuple[Fraction, Fraction] | None:
    """alpha > 0 and beta of P = alpha E + beta as polynomials (alpha = 1 where E is constant), or None."""
    terms = sorted(key for key in E if key)
    scale = Fraction(P.get(terms[0], 0)) / E[terms[0]] if terms else Fraction(1)
    shift = P.get((), 0) - scale * E.get((), 0)
    return (scale, Fraction(shift)) if scale > 0 and scaled(E, scale, shift) == P else None


def relation_of(pairs: Sequence[tuple[Fraction, Fraction]]) -> tuple[Fraction, Fraction] | None:
    """The same from sorted pairs (E, P) of states."""
    (first, level), (last, top) = pairs[0], pairs[-1]
    scale = (top - level) / (last - first) if last != first else Fraction(1)
    shift = level - scale * first
    good = scale > 0 and all(value == scale * energy + shift for energy, value in pairs)
    return (scale, shift) if good else None
