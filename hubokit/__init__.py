"""hubokit: reduce k-local Hamiltonians to quadratic form, and prove that their ground states survive.

The public names load when they are first used, so that importing the package costs little more than importing numpy.

Examples
--------
>>> import hubokit as hk
>>> a, b, c = hk.spins("a b c")
>>> R = hk.reduce(3 * a * b * c - b + 2)
>>> R.auxiliaries, hk.check(R).holds("one-to-one")
(('y0',), True)
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

from hubokit.errors import HubokitError, InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian, booleans, spins

if TYPE_CHECKING:
    from hubokit.exchange.documents import Document
    from hubokit.exchange.formats import read, read_document, write
    from hubokit.preparation import prepare
    from hubokit.reduction.reduce import reduce
    from hubokit.reduction.result import Reduction
    from hubokit.spectrum.exhaustive import density_of_states
    from hubokit.spectrum.levels import Density, Level
    from hubokit.spectrum.neighbourhood import neighbourhood
    from hubokit.spectrum.search import ground_states, low_levels
    from hubokit.validation.check import check
    from hubokit.validation.verdict import Claim, Verdict

_HOMES = {
    "Claim": "hubokit.validation.verdict",
    "Density": "hubokit.spectrum.levels",
    "Document": "hubokit.exchange.documents",
    "Level": "hubokit.spectrum.levels",
    "Reduction": "hubokit.reduction.result",
    "Verdict": "hubokit.validation.verdict",
    "check": "hubokit.validation.check",
    "density_of_states": "hubokit.spectrum.exhaustive",
    "ground_states": "hubokit.spectrum.search",
    "low_levels": "hubokit.spectrum.search",
    "neighbourhood": "hubokit.spectrum.neighbourhood",
    "prepare": "hubokit.preparation",
    "read": "hubokit.exchange.formats",
    "read_document": "hubokit.exchange.formats",
    "reduce": "hubokit.reduction.reduce",
    "write": "hubokit.exchange.formats",
}

__all__ = [
    "Claim",
    "Density",
    "Document",
    "Hamiltonian",
    "HubokitError",
    "InputError",
    "Level",
    "LimitError",
    "Reduction",
    "Verdict",
    "booleans",
    "check",
    "density_of_states",
    "ground_states",
    "low_levels",
    "neighbourhood",
    "prepare",
    "read",
    "read_document",
    "reduce",
    "spins",
    "write",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'hubokit' has no attribute {name!r}")
    found = getattr(importlib.import_module(_HOMES[name]), name)
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return sorted(__all__)
