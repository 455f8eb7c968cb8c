"""The figures that stand beside the claims of a verdict, by name."""

from __future__ import annotations

from collections.abc import Mapping

#: Names of the figures, in printing order, with what they are.
FIGURES: Mapping[str, str] = {
    "source-ground-energy": "least E",
    "source-degeneracy": "ground states of E",
    "source-gap": "gap of E",
    "model-ground-energy": "least P (and least F)",
    "projection-degeneracy": "minimisers of P",
    "projection-gap": "gap of P",
    "model-gap": "gap of F",
    "auxiliary-gap-at-minimisers": "auxiliary gap at the minimisers of P",
    "auxiliary-gap-everywhere": "auxiliary gap over all x",
    "relative-auxiliary-gap-at-minimisers": "the first, divided by the largest coefficient",
    "relative-auxiliary-gap-everywhere": "the second, divided by the largest coefficient",
    "auxiliaries": "auxiliaries",
    "fields": "fields",
    "couplers": "couplers",
    "couplers-per-variable": "most couplers at one variable",
    "coefficient-ratio": "largest over smallest coefficient",
    "field-bits": "bits of the fields",
    "coupler-bits": "bits of the couplers",
    "source-local-minima": "single-flip local minima of E",
    "model-local-minima": "single-flip local minima of F",
}
