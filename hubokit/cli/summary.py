"""The ``summary`` document that ``--json`` prints: the figures of the tables, with exact numbers as strings."""

from __future__ import annotations

import json
from collections.abc import Mapping
from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING, Any

from hubokit.model.numbers import format_fraction

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian
    from hubokit.reduction.result import Reduction
    from hubokit.spectrum.levels import Level

Json = dict[str, Any]


def made_by() -> str:
    """Name and version of this program."""
    try:
        return f"hubokit {version('hubokit')}"
    except PackageNotFoundError:
        return "hubokit (not installed)"


def document(command: str, parts: Mapping[str, Any]) -> Json:
    """A summary document of one command; parts that are None are left out."""
    kept = {name: part for name, part in parts.items() if part is not None}
    return {"document": "hubokit/summary", "version": "1.0", "command": command, "made_by": made_by(), **kept}


def emit(content: Mapping[str, Any]) -> None:
    """Print a JSON document on standard output."""
    print(json.dumps(content, indent=1, ensure_ascii=False))


def model_part(model: Hamiltonian, file: str | None = None, auxiliaries: int | None = None) -> Json:
    """Figures of a model."""
    part: Json = {
        "file": file,
        "digest": model.digest,
        "domain": model.domain,
        "convention": model.convention,
        "variables": model.size,
        "auxiliaries": auxiliaries,
        "terms": len(model),
        "locality": model.locality,
        "terms_by_locality": {str(size): amount for size, amount in terms_by_locality(model).items()},
        "resolution": format_fraction(model.resolution),
        "constant": format_fraction(model.constant),
    }
    return {name: value for name, value in part.items() if value is not None}


def terms_by_locality(model: Hamiltonian) -> dict[int, int]:
    """Number of terms of every size that occurs."""
    return {block.members.shape[1]: block.members.shape[0] for block in model.blocks}


def level_part(level: Level) -> Json:
    """One energy with its states."""
    return {
        "energy": format_fraction(level.energy),
        "degeneracy": str(level.degeneracy),
        "gap": None if level.gap is None else format_fraction(level.gap),
        "complete": level.complete,
        "method": level.method,
        "states": level.states.tolist(),
    }


def reduction_part(reduction: Reduction) -> Json:
    """What a reduction costs and what was asked of it."""
    declared = reduction.declared
    part: Json = {
        "methods": methods_part(reduction),
        "keep": reduction.keep,
        "scale": None if declared is None else format_fraction(declared[0]),
        "shift": None if declared is None else format_fraction(declared[1]),
        "auxiliaries": list(reduction.auxiliaries),
        "costs": costs_part(reduction),
    }
    return {name: value for name, value in part.items() if value is not None}


def costs_part(reduction: Reduction) -> Json:
    """Costs by name."""
    costs = reduction.costs
    return {
        "auxiliaries": costs.auxiliaries,
        "fields": costs.fields,
        "couplers": costs.couplers,
        "couplers-per-variable": costs.couplers_per_variable,
        "coefficient-ratio": format_fraction(costs.coefficient_ratio),
        "field-bits": costs.field_bits,
        "coupler-bits": costs.coupler_bits,
    }


def method_rows(reduction: Reduction) -> list[tuple[str, int, str, int]]:
    """Locality, number of terms, method and auxiliaries, as the reduction step of the trail records them."""
    return [
        (str(row["locality"]), int(row["terms"]), str(row["method"]), int(row["auxiliaries"]))
        for step in reduction.trail.steps
        for row in step.parameters.get("methods", ())
    ]


def methods_part(reduction: Reduction) -> Json | None:
    """Locality of the terms to the methods that reduced them."""
    found: dict[str, list[str]] = {}
    for locality, terms, method, auxiliaries in method_rows(reduction):
        found.setdefault(locality, []).append(f"{method} (terms {terms}, auxiliaries {auxiliaries})")
    return {locality: ", ".join(texts) for locality, texts in found.items()} or None
