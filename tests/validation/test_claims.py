"""The inference between claims, and what a verdict makes of their statuses."""

import pytest

from hubokit.errors import HubokitError, InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.result import Reduction
from hubokit.validation.check import check
from hubokit.validation.claims import CLAIMS, IMPLIES, asked_claims
from hubokit.validation.findings import Findings
from hubokit.validation.layout import verdict_from_json
from hubokit.validation.verdict import Claim, Verdict


def test_implication_is_transitive_and_without_circles():
    for name in CLAIMS:
        assert name not in IMPLIES[name]
        for other in IMPLIES[name]:
            assert set(IMPLIES[other]) <= set(IMPLIES[name])


@pytest.mark.parametrize("name", CLAIMS)
def test_a_proof_carries_to_what_follows_and_a_refutation_to_what_it_follows_from(name):
    up, down = Findings(), Findings()
    up.prove(name, "m", "d")
    down.refute(name, "m", "d")
    assert {other for other in CLAIMS if up.proved(other)} == {name, *IMPLIES[name]}
    assert {other for other in CLAIMS if down.refuted(other)} == {name} | {o for o in CLAIMS if name in IMPLIES[o]}


def test_two_kinds_of_evidence_that_disagree_are_an_error_and_no_verdict():
    found = Findings()
    found.prove("energies", "projection", "")
    with pytest.raises(HubokitError, match="ground-states is proved by projection and refuted by exhaustion"):
        found.refute("ground-states", "exhaustion", "")


def test_a_tested_claim_gives_way_to_a_proof_and_not_the_other_way_round():
    found = Findings()
    found.test("energies", "neighbourhood", "some states")
    found.prove("energies", "projection", "all of them")
    found.test("energies", "neighbourhood", "some states")
    assert found.claims["energies"].status == "proved"


def test_reasons_for_an_open_claim_add_up():
    found = Findings()
    found.leave_open("energies", "too wide")
    found.leave_open("energies", "too many")
    assert found.claims["energies"].detail == "too wide; too many"


def test_all_claims_are_asked_where_nothing_is_known_to_have_been_kept():
    assert asked_claims(None, None) == CLAIMS
    assert asked_claims(None, "one-to-one") == ("quadratic", "one-to-one")


def verdict_of(**statuses):
    claims = {name: Claim(name, statuses.get(name.replace("-", "_"), "proved"), "", "") for name in CLAIMS}
    return Verdict(claims, ("quadratic", "energies"), 1, 0, "default", "", "")


@pytest.mark.parametrize(("status", "code"), [("proved", 0), ("refuted", 1), ("open", 3), ("tested", 3)])
def test_the_exit_code_speaks_of_the_asked_claims(status, code):
    assert verdict_of(energies=status).exit_code == code
    assert verdict_of(one_to_one=status).exit_code == 0


def test_a_verdict_speaks_of_every_claim_and_of_no_other():
    with pytest.raises(InputError, match="missing 'quadratic'"):
        Verdict({}, (), 1, 0, "default", "", "")
    with pytest.raises(InputError, match="no such claim"):
        verdict_of().holds("spectrum")


def test_a_verdict_comes_back_from_json_as_it_was(by_hand):
    E = Hamiltonian({("a",): 1, ("b",): 2}, "spin")
    turned = Reduction(E, Hamiltonian({("a",): 2, ("b",): 1}, "spin"), [])
    fixed = Reduction(E, Hamiltonian({("b",): 2}, "spin"), [], origin={"a": -1})
    for reduction in (by_hand["cubic"](strict=False), by_hand["rosenberg"](1), turned, fixed):
        verdict = check(reduction)
        assert verdict_from_json(by_hand["written"](verdict)).claims == verdict.claims
        again = verdict_from_json(by_hand["written"](verdict))
        assert by_hand["written"](again) == by_hand["written"](verdict)
        assert (again.figures, again.lost, again.inversions) == (verdict.figures, verdict.lost, verdict.inversions)
