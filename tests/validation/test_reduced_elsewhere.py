"""Models reduced by another library's product variables are judged like any other.

Source of the reductions: ``dimod.make_quadratic`` (dimod documentation, "Higher-order models"); every claim is held
to plain enumeration of all (x, a).
"""

from __future__ import annotations

import itertools
import random

import dimod
import pytest

import hubokit as hk
from hubokit.exchange.dimod_bridge import from_dimod

CLAIMS = ("ground-energy", "ground-states", "even-multiplicity", "energies", "one-to-one")


def random_cubic(seed: int, domain: str) -> hk.Hamiltonian:
    chance = random.Random(seed)
    triples = chance.sample(list(itertools.combinations("abcdef", 3)), 3)
    return hk.Hamiltonian(
        {triple: chance.choice((-3, -2, -1, 1, 2, 3)) for triple in triples}, domain, labels="a b c d e f"
    )


def reduced(source: hk.Hamiltonian, strength: float) -> hk.Reduction:
    terms = {members: int(value) for members, value in source.terms()}
    quadratic = dimod.make_quadratic(terms, strength, "SPIN" if source.domain == "spin" else "BINARY")
    for label in source.labels:
        quadratic.add_variable(label)
    model = from_dimod(quadratic)
    return hk.Reduction(source, model, tuple(label for label in model.labels if label not in source.positions))


def plain_claims(reduction: hk.Reduction, scale: int, shift: int) -> dict[str, bool]:
    """The claims by their definitions, over every x and a."""
    source, model = reduction.source, reduction.model
    values = (1, -1) if source.domain == "spin" else (0, 1)
    rows = []
    for x in itertools.product(values, repeat=source.size):
        fixed = model.substituted(dict(zip(source.labels, x, strict=True)))
        energies = [fixed.energy(a) for a in itertools.product(values, repeat=fixed.size)]
        rows.append((source.energy(x), min(energies), energies.count(min(energies))))
    lowest, least = min(e for e, _, _ in rows), min(p for _, p, _ in rows)
    same = all((e == lowest) == (p == least) for e, p, _ in rows)
    energies_kept = all(p == scale * e + shift for e, p, _ in rows)
    return {
        "ground-energy": least == scale * lowest + shift,
        "ground-states": same,
        "even-multiplicity": same and len({m for e, _, m in rows if e == lowest}) == 1,
        "energies": energies_kept,
        "one-to-one": energies_kept and all(m == 1 for _, _, m in rows),
    }


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("strength", [100, 0.5])
@pytest.mark.parametrize("seed", range(4))
def test_a_strong_and_a_weak_strength_are_told_apart_as_enumeration_does(seed, strength, domain):
    reduction = reduced(random_cubic(seed, domain), strength)
    verdict = hk.check(reduction, claims="all")
    truth = plain_claims(reduction, verdict.scale, verdict.shift)
    assert {name: verdict.claims[name].status for name in CLAIMS} == {
        name: "proved" if holds else "refuted" for name, holds in truth.items()
    }
    assert truth["energies"] == (strength == 100)
