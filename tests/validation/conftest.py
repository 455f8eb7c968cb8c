"""Reductions worked out by hand, and documents written field by field, for the tests of this room."""

import json

import pytest

from hubokit.model.hamiltonian import Hamiltonian, booleans, spins
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


def paired(size, strength):
    """The same model by pair variables y = x_i x_j, i + j even, with two-sided penalties at a part of safe ones.

    A and B of the penalty B x_i x_j - (A + B)(x_i + x_j) y + (2 A + B) y are the interval bounds of y's coefficient
    times `strength`; below about 0.8 the bounds of single variables prove nothing, and only shared ones do.
    """
    x = booleans(f"x{i}" for i in range(size))
    pairs = {}

    def spin_pair(i, j):
        i, j = sorted((i, j))
        pairs[f"y{i}_{j}"] = (i, j)
        return Hamiltonian({(f"y{i}_{j}",): 4}, "boolean") - 2 * x[i] - 2 * x[j] + 1

    F = 0 * x[0]
    for k in range(1, size):
        for i in range(size - k):
            for j in range(size - k):
                split = ((i, j), (i + k, j + k)) if (i - j) % 2 == 0 else ((i, j + k), (j, i + k))
                if k % 2 == 0:
                    split = ((i, i + k), (j, j + k))
                one, two = (spin_pair(*pair) if pair[0] != pair[1] else 1 + 0 * x[0] for pair in split)
                F = F + (one * two if i != j and set(split[0]) != set(split[1]) else 1)
    bare = dict(F.terms())
    for y, (i, j) in pairs.items():
        own = [(key, w) for key, w in bare.items() if y in key]
        fixed = sum(w for key, w in own if len(key) == 1)
        low = fixed + sum(min(0, w) for key, w in own if len(key) == 2)
        high = fixed + sum(max(0, w) for key, w in own if len(key) == 2)
        A, B = (max(1, int(strength * (bound + 1))) for bound in (-low, high))
        Y = Hamiltonian({(y,): 1}, "boolean")
        F = F + B * x[i] * x[j] - (A + B) * (x[i] + x[j]) * Y + (2 * A + B) * Y
    order = [f"x{i}" for i in range(size)]
    labels = [*order, *(label for label in F.labels if label in pairs)]
    return Reduction(
        autocorrelation(size).relabelled({f"s{i}": f"x{i}" for i in range(size)}),
        F.with_labels(labels),
        labels[size:],
    )


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
        "paired": paired,
        "document": document,
        "written": written,
    }
