"""Bounds of the auxiliary gap: never above the truth, and sharp where it matters."""

from __future__ import annotations

from fractions import Fraction

import pytest

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection import gaps, stages
from hubokit.projection.project import project
from hubokit.projection.result import GapBound, least


def test_coupled_pairs_have_a_bound_far_above_their_margins(monkeypatch, make_low_autocorrelation, enumerated):
    monkeypatch.setattr(stages, "SMALL", -1)
    monkeypatch.setattr(stages, "CHEAP", 0)
    model, auxiliaries, _ = make_low_autocorrelation(6, Fraction(1))
    sharp = project(model, auxiliaries).gap_everywhere
    monkeypatch.setattr(gaps, "MOST", 0)
    plain = project(model, auxiliaries).gap_everywhere
    truth = enumerated(model, tuple(auxiliaries)).least_gap()
    assert plain.value == 1
    assert 50 <= sharp.value <= truth
    assert not sharp.exact


@pytest.mark.parametrize("domain", ["spin", "boolean"])
def test_bounds_of_decided_clusters_never_exceed_the_gap(monkeypatch, make_chain, enumerated, domain):
    monkeypatch.setattr(stages, "SMALL", -1)
    monkeypatch.setattr(stages, "CHEAP", -1)
    decided = 0
    for seed in range(80):
        model, auxiliaries = make_chain(seed, domain)
        P = project(model, auxiliaries)
        if {summary.method for summary in P.clusters} == {"guards"}:
            decided += 1
            gap = enumerated(model, auxiliaries).least_gap()
            assert 0 < P.gap_everywhere.value <= gap
            if P.gap_everywhere.exact:
                assert P.gap_everywhere.value == gap
    assert decided >= 10


def test_the_gap_of_a_model_is_the_least_of_its_clusters():
    F = Hamiltonian({("a", "x"): 3, ("b", "y"): 2, ("b",): 5}, domain="spin")
    assert project(F, ["a", "b"]).gap_everywhere == GapBound(Fraction(6), True)
    assert least([]) == GapBound(None, True)
    assert least([GapBound(None, True), GapBound(Fraction(2), False)]) == GapBound(Fraction(2), False)
    assert str(GapBound(Fraction(1, 2), False)) == "at least 1/2"
