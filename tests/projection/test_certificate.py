"""A certificate is enough for the second checker: it follows every step in plain integers to the same P."""

from __future__ import annotations

import json
from fractions import Fraction

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection import certificate as layout
from hubokit.projection import stages
from hubokit.projection.project import project
from hubokit.validation.audit_certificate import follow


def assert_certificate_is_enough(projection):
    """The second checker reaches P from the certificate as JSON; returns the kinds of its steps."""
    document = json.loads(json.dumps(projection.certificate()))
    model = projection.model
    terms = {
        tuple(row): int(weight)
        for block in model.blocks
        for row, weight in zip(block.members.tolist(), block.weights.tolist(), strict=True)
    }
    auxiliaries = [model.positions[label] for label in projection.auxiliaries]
    proof = follow(document, terms, model.domain, model.size, auxiliaries)
    reached = {
        tuple(model.labels[i] for i in key): Fraction(value) * model.resolution for key, value in proof.gained.items()
    }
    reached[()] = reached.get((), Fraction(0)) + model.constant
    assert Hamiltonian(reached, domain=model.domain, labels=projection.originals) == projection.polynomial
    return {step["step"] for step in document["steps"]}


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("small", [12, -1])
def test_every_certificate_of_a_random_model_leads_to_its_polynomial(monkeypatch, make_model, domain, small):
    monkeypatch.setattr(stages, "SMALL", small)
    for seed in range(40):
        model, auxiliaries = make_model(seed, domain, 4, 3, 1 + seed % 12, 0.3 + 0.015 * seed)
        assert_certificate_is_enough(project(model, auxiliaries))


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_every_certificate_of_products_of_products_leads_to_its_polynomial(monkeypatch, make_chain, domain):
    monkeypatch.setattr(stages, "SMALL", -1)
    kinds = set()
    for seed in range(80):
        model, auxiliaries = make_chain(seed, domain)
        P = project(model, auxiliaries, table_bits=20 if seed % 2 else 0)
        if P.polynomial is not None:
            kinds |= assert_certificate_is_enough(P)
    assert {"guards", "tables"} <= kinds


@pytest.mark.parametrize("scale", ["1", "0.62", "0.55"])
def test_certificates_of_tightened_penalties_lead_to_the_source(monkeypatch, make_low_autocorrelation, scale):
    monkeypatch.setattr(stages, "SMALL", -1)
    monkeypatch.setattr(stages, "CHEAP", 0)
    model, auxiliaries, _ = make_low_autocorrelation(8, Fraction(scale))
    kinds = assert_certificate_is_enough(project(model, auxiliaries))
    assert kinds == {"guards"} if scale == "1" else {"shared"}


def test_a_cluster_minimised_state_by_state_is_listed_whole(monkeypatch, make_low_autocorrelation):
    monkeypatch.setattr(stages, "SMALL", -1)
    monkeypatch.setattr(stages, "CHEAP", 0)
    monkeypatch.setattr(stages, "_by_shared_bounds", lambda *given: False)
    model, auxiliaries, _ = make_low_autocorrelation(6, Fraction("0.6"))
    assert assert_certificate_is_enough(project(model, auxiliaries)) == {"states"}


def test_a_counted_cluster_certifies_a_product_of_sixty_booleans():
    x = [f"x{i}" for i in range(60)]
    F = Hamiltonian({("a",): 119} | {(v, "a"): -2 for v in x}, domain="boolean", labels=[*x, "a"])
    P = project(F, ["a"])
    assert P.polynomial == Hamiltonian({tuple(x): -1}, domain="boolean")
    assert assert_certificate_is_enough(P) == {"counting"}


def test_a_certificate_above_the_limit_says_only_how_large_it_would_be(monkeypatch):
    monkeypatch.setattr(layout, "LIMIT", 100)
    rng = np.random.default_rng(2)
    members = np.stack([rng.integers(0, 50, 40), 50 + np.arange(40)], axis=1)
    F = Hamiltonian.from_arrays([members], [rng.integers(1, 9, 40)], domain="spin", size=90)
    document = project(F, [f"v{i}" for i in range(50, 90)]).certificate()
    assert document["omitted"] == "size"
    assert document["counts"] == {"tables": 40}
    assert document["entries"] > 100
    assert "steps" not in document
