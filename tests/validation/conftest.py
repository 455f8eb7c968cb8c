"""Reductions worked out by hand, and documents written field by field, for the tests of this room."""

import json

import pytest

from hubokit.model.hamiltonian import Hamiltonian, spins
from hubokit.model.numbers import format_fraction
from hubokit.reduction.result import Reduction
from hubokit.validation.layout import verdict_to_json


def cubic(strict):
    """-abc + d with the form of Freedman & Drineas 2005: y (2 - S) has ties, y (5 - 2 S) has none."""
    E = Hamiltonian({("a", "b", "c"): -1, ("d",): 1}, "boolean")
    field, coupling = (5, -2) if strict else (2, -1)
    terms = {("y",): field, ("d",): 1, **{(x, "y"): coupling for x in "abc"}}
    return Reduction(E, Hamiltonian(terms, "boolean", labels=["a", "b", "c", "d", "y"]), ["y"])


def rosenberg(strength):
    """Every cubic term that holds the pair a b, for six third variables, with one product variable and a penalty."""
    thirds = [f"t{i}" for i in range(6)]
    weights = [3, -2, 1, -3, 2, -1]
    short = {("a",): 2, ("b",): 2}
    E = Hamiltonian({("a", "b", t): w for t, w in zip(thirds, weights, strict=True)} | short, "boolean")
    terms = {("y", t): w for t, w in zip(thirds, weights, strict=True)} | short
    terms |= {("a", "b"): strength, ("a", "y"): -2 * strength, ("b", "y"): -2 * strength, ("y",): 3 * strength}
    return Reduction(E, Hamiltonian(terms, "boolean", labels=["a", "b", *thirds, "y"]), ["y"])


def autocorrelation(size):
    """The low-autocorrelation model: a 4-local spin model."""
    s = spins(f"s{i}" for i in range(size))
    zero = 0 * s[0]
    return sum((sum((s[i] * s[i + k] for i in range(size - k)), zero) ** 2 for k in range(1, size)), zero)


def document(H):
    """A model document, without what the audit does not read."""
    return {
        "domain": H.domain,
        "convention": H.convention,
        "variables": list(H.labels),
        "resolution": format_fraction(H.resolution),
        "constant": format_fraction(H.constant),
        "terms": [
            {"locality": b.locality, "members": b.members.tolist(), "weights": [int(w) for w in b.weights]}
            for b in H.blocks
        ],
        "trail": [],
    }


def written(verdict):
    """A verdict as it comes back from a file."""
    return json.loads(json.dumps(verdict_to_json(verdict)))


@pytest.fixture(scope="session")
def by_hand():
    """The helpers above, for tests that cannot import this file."""
    return {
        "cubic": cubic,
        "rosenberg": rosenberg,
        "autocorrelation": autocorrelation,
        "document": document,
        "written": written,
    }
