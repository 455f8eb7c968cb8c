"""Model documents as the audit reads them: plain integers, nothing taken on trust."""

from __future__ import annotations

import hashlib
import json
import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from hubokit.errors import InputError
from hubokit.validation.audit_arithmetic import Key, Poly, add, values_of


@dataclass(frozen=True)
class Model:
    """A model document: terms by sorted positions, as integers in units of the resolution."""

    domain: str
    convention: str
    labels: tuple[str, ...]
    resolution: Fraction
    constant: Fraction
    terms: Poly

    def value(self, state: Mapping[str, Any], label: str) -> int:
        """The value that a state of some document gives to a variable."""
        value = state[label]
        if type(value) is not int or value not in values_of(self.domain):
            raise InputError(f"a state gives {label!r} the value {str(value)[:20]!r}")
        return value


def rational(text: Any) -> Fraction:
    """A rational string or integer, of bounded length."""
    if type(text) is int:
        return Fraction(text)
    if type(text) is not str or len(text) > 4000 or not re.fullmatch(r"[+-]?[0-9]+(/0*[1-9][0-9]*)?", text):
        raise InputError(f"not a rational: {str(text)[:40]!r}")
    return Fraction(text)


def read_model(document: Mapping[str, Any]) -> Model:
    """A model document in plain numbers."""
    labels = tuple(unicodedata.normalize("NFC", label) for label in document["variables"])
    convention = document.get("convention", "1-2x")
    if len(set(labels)) < len(labels) or document["domain"] not in ("spin", "boolean"):
        raise InputError("variables repeat, or the domain is neither spin nor boolean")
    if convention not in ("1-2x", "2x-1"):
        raise InputError(f"no such convention: {str(convention)[:20]!r}")
    terms: Poly = {}
    for block in document["terms"]:
        for members, text in zip(block["members"], block["weights"], strict=True):
            weight = rational(text)
            if not all(type(i) is int and 0 <= i < len(labels) for i in members) or len(set(members)) < len(members):
                raise InputError(f"a term has the members {str(members)[:40]}")
            if weight.denominator != 1:
                raise InputError(f"a weight is no integer: {weight}")
            add(terms, members, int(weight))
    constant, unit = rational(document["constant"]), rational(document["resolution"])
    return Model(document["domain"], convention, labels, unit, constant, terms)


def digest(model: Model) -> str:
    """SHA-256 over the canonical JSON of the function: names sorted, coefficients in lowest terms."""
    names = sorted(model.labels)
    rank = {name: place for place, name in enumerate(names)}
    blocks: dict[int, list[tuple[Key, str]]] = {}
    for key, weight in model.terms.items():
        members = tuple(sorted(rank[model.labels[i]] for i in key))
        blocks.setdefault(len(key), []).append((members, str(weight * model.resolution)))
    terms = [
        {
            "coefficients": [one for _, one in block],
            "locality": size,
            "members": [list(members) for members, _ in block],
        }
        for size, block in ((size, sorted(block)) for size, block in sorted(blocks.items()))
    ]
    whole = {"constant": str(model.constant), "domain": model.domain, "terms": terms, "variables": names}
    text = json.dumps(whole, separators=(",", ":"), ensure_ascii=False)
    return "sha256:" + hashlib.sha256(text.encode()).hexdigest()
