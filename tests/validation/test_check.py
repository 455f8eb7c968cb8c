"""What a check says of reductions worked out by hand."""

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Step, Trail
from hubokit.reduction.result import Reduction
from hubokit.validation.check import check
from hubokit.validation.claims import CLAIMS


def statuses(verdict):
    return {name: claim.status for name, claim in verdict.claims.items()}


def test_a_tie_free_gadget_is_proved_one_to_one_by_projection(by_hand):
    verdict = check(by_hand["cubic"](strict=True))
    assert set(statuses(verdict).values()) == {"proved"}
    assert verdict.claims["one-to-one"].method == "projection"
    assert verdict.exit_code == 0


def test_a_gadget_with_ties_keeps_the_energies_and_is_refuted_one_to_one_by_a_tied_state(by_hand):
    reduction = by_hand["cubic"](strict=False)
    verdict = check(reduction)
    assert verdict.holds("energies")
    assert verdict.claims["one-to-one"].status == "refuted"
    witness = verdict.claims["one-to-one"].witness
    assert sum(witness.state[x] for x in "abc") == 2
    assert witness.multiplicity == 2
    assert verdict.exit_code == 1


def test_ties_away_from_the_ground_states_leave_these_even(by_hand):
    assert check(by_hand["cubic"](strict=False)).holds("even-multiplicity")


def test_a_product_penalty_above_its_bound_is_proved_and_one_below_is_refuted(by_hand):
    strong, weak = by_hand["rosenberg"](7), by_hand["rosenberg"](1)
    assert check(strong).exit_code == 0
    verdict = check(weak)
    assert verdict.claims["energies"].status == "refuted"
    assert verdict.claims["ground-states"].status == "refuted"
    witness = verdict.claims["energies"].witness
    assert weak.source.energy(witness.state) == witness.source_energy
    assert weak.model.energy({**witness.state, **witness.auxiliaries}) == witness.model_energy
    assert witness.model_energy != witness.source_energy


def test_a_weight_off_by_one_is_shown_as_the_difference_polynomial(by_hand):
    reduction = by_hand["cubic"](strict=True)
    wrong = replace(reduction, model=reduction.model + Hamiltonian({("a", "d"): 1}, "boolean"))
    assert check(wrong).difference == ("+1 a d",)


class TestScale:
    def test_scale_and_shift_are_found_exactly_where_nothing_is_declared(self, by_hand):
        made = by_hand["cubic"](strict=True)
        verdict = check(replace(made, model=Fraction(3, 7) * made.model - 2))
        assert (verdict.scale, verdict.shift, verdict.scale_from) == (Fraction(3, 7), -2, "found")
        assert verdict.exit_code == 0

    def test_declared_scale_and_shift_bind(self, by_hand):
        made = by_hand["cubic"](strict=True)
        model = 2 * made.model + 3
        assert check(replace(made, model=model, scale=2, shift=3)).exit_code == 0
        verdict = check(replace(made, model=model, scale=1, shift=0))
        assert verdict.scale_from == "declared"
        assert verdict.claims["energies"].status == "refuted"
        assert verdict.claims["ground-energy"].status == "refuted"
        assert verdict.holds("ground-states")

    def test_a_trail_declares_too(self, by_hand):
        made = by_hand["cubic"](strict=True)
        trail = Trail((Step("by hand", "", scale=Fraction(2)),), keep="energies")
        verdict = check(replace(made, model=2 * made.model, trail=trail))
        assert (verdict.scale, verdict.scale_from, verdict.asked) == (2, "declared", ("quadratic", "energies"))

    def test_without_any_that_hold_they_are_one_and_nought(self, by_hand):
        made = by_hand["cubic"](strict=True)
        verdict = check(replace(made, model=-1 * made.model))
        assert (verdict.scale, verdict.shift, verdict.scale_from) == (1, 0, "default")

    def test_a_constant_source_is_judged_with_scale_one(self):
        E = Hamiltonian({(): 5}, "spin", labels=["a"])
        verdict = check(Reduction(E, Hamiltonian({(): 7}, "spin", labels=["a"]), []))
        assert (verdict.scale, verdict.shift) == (1, 2)
        assert verdict.exit_code == 0


class TestOrigin:
    def test_renamed_and_flipped_variables_are_read_through_the_origin(self):
        E = Hamiltonian({("a", "b"): 1, ("a",): 2}, "spin")
        F = Hamiltonian({("p", "q"): -1, ("p",): -2}, "spin")
        verdict = check(Reduction(E, F, [], origin={"a": ("not", "p"), "b": "q"}))
        assert verdict.exit_code == 0

    def test_merging_variables_keeps_the_ground_states_when_they_agree_there(self):
        E = Hamiltonian({("a", "b"): -1, ("a",): "1/2"}, "spin")
        verdict = check(Reduction(E, Hamiltonian({("a",): "1/2", (): -1}, "spin"), [], origin={"b": "a"}))
        assert verdict.holds("ground-states")
        assert verdict.holds("even-multiplicity")
        assert verdict.claims["energies"].status == "refuted"
        assert verdict.claims["energies"].witness.model_energy is None

    def test_a_fixed_variable_can_lose_ground_states(self):
        E = Hamiltonian({("a", "b"): 1}, "spin")
        verdict = check(Reduction(E, Hamiltonian({("b",): 1}, "spin"), [], origin={"a": Fraction(1)}))
        assert verdict.holds("ground-energy")
        assert verdict.claims["ground-states"].status == "refuted"
        assert (verdict.lost.count, verdict.spurious.count) == (1, 0)
        assert verdict.lost.states == ({"a": -1, "b": 1},)
        assert verdict.lost.model_energies == (None,)


class TestAsking:
    def test_claims_follow_the_trail_and_quadratic_is_always_among_them(self, by_hand):
        made = replace(by_hand["cubic"](strict=False), trail=Trail((Step("x", ""),), keep="energies"))
        verdict = check(made)
        assert verdict.asked == ("quadratic", "energies")
        assert verdict.exit_code == 0

    def test_named_claims_go_before_the_trail(self, by_hand):
        made = by_hand["cubic"](strict=False)
        assert check(made, claims="energies").exit_code == 0
        assert check(made, claims=["one-to-one"]).exit_code == 1
        assert check(made, claims="all").asked == CLAIMS

    def test_a_claim_nobody_asked_for_is_open_where_the_evidence_does_not_settle_it(self, by_hand):
        made = by_hand["rosenberg"](1)
        verdict = check(made, claims="energies", evidence="projection")
        assert statuses(verdict)["even-multiplicity"] == "open"
        assert verdict.claims["even-multiplicity"].detail == "not asked"

    @pytest.mark.parametrize("bad", [{"claims": "spectrum"}, {"evidence": "guess"}])
    def test_unknown_words_are_refused_with_those_that_there_are(self, by_hand, bad):
        with pytest.raises(InputError, match=r"energies|exhaustion"):
            check(by_hand["cubic"](strict=True), **bad)


class TestKindsOfEvidence:
    @pytest.mark.parametrize("evidence", ["projection", "exhaustion", "elimination", "neighbourhood"])
    def test_no_kind_proves_what_is_false(self, by_hand, evidence):
        verdict = check(by_hand["rosenberg"](1), evidence=evidence)
        assert not verdict.holds("energies")
        assert verdict.exit_code in (1, 3)

    def test_exhaustion_needs_no_projection(self, by_hand):
        verdict = check(by_hand["rosenberg"](7), evidence="exhaustion")
        assert verdict.exit_code == 0
        assert {verdict.claims[name].method for name in CLAIMS} == {"inspection", "exhaustion"}

    def test_a_neighbourhood_tests_and_says_that_it_proves_nothing(self, by_hand):
        verdict = check(by_hand["rosenberg"](7), evidence="neighbourhood", radius=1, around=[[0] * 8])
        assert verdict.exit_code == 3
        for name in ("ground-energy", "ground-states", "energies", "one-to-one"):
            claim = verdict.claims[name]
            assert claim.status == "tested"
            assert "9 states visited, all within radius 1 of 1 centre given; not a proof" in claim.detail

    def test_a_lost_minimum_in_a_neighbourhood_leaves_the_claim_open_with_the_finding(self):
        E = Hamiltonian({("a",): 1, ("b",): 1}, "spin")
        F = Hamiltonian({("a",): 1, ("b",): -1}, "spin")
        verdict = check(Reduction(E, F, []), evidence="neighbourhood", radius=1, around=[[1, 1]])
        assert verdict.claims["energies"].status == "refuted"
        claim = verdict.claims["ground-states"]
        assert claim.status == "open"
        assert "lost" in claim.detail

    def test_sparse_models_of_many_variables_are_settled_by_elimination(self):
        chain = {(f"v{i}", f"v{i + 1}"): -1 for i in range(79)}
        E, F = Hamiltonian(chain, "spin"), Hamiltonian({**chain, ("v0", "v40"): -2}, "spin")
        verdict = check(Reduction(E, F, []))
        assert verdict.claims["ground-states"].status == "proved"
        assert verdict.claims["ground-states"].method == "elimination"
        assert verdict.claims["energies"].status == "refuted"
        assert verdict.figures["source-degeneracy"].value == 2

    def test_many_ground_states_are_compared_without_listing_them(self):
        loose = [f"v{i}" for i in range(60)]
        E = Hamiltonian({("a", "b"): -1, ("b", "c"): -1}, "spin", labels=["a", "b", "c", *loose])
        F = Hamiltonian({("a", "b"): -1, ("b", "c"): -1, ("a", "c"): -1}, "spin", labels=E.labels)
        G = Hamiltonian({("a", "b"): -1, ("b", "c"): -1, (loose[-1],): 1}, "spin", labels=E.labels)
        assert check(Reduction(E, F, [])).claims["ground-states"].status == "proved"
        verdict = check(Reduction(E, G, []))
        assert verdict.claims["ground-states"].status == "refuted"
        assert (verdict.lost.count, verdict.spurious.count) == (2**60, 0)
        witness, rival = verdict.claims["ground-states"].witness, verdict.claims["ground-states"].rival
        assert witness.source_energy == rival.source_energy
        assert witness.model_energy > rival.model_energy

    def test_a_model_that_is_not_quadratic_is_refuted_by_inspection_and_still_judged(self):
        E = Hamiltonian({("a", "b", "c"): -1}, "spin")
        verdict = check(Reduction(E, E, []))
        assert verdict.claims["quadratic"].status == "refuted"
        assert verdict.holds("one-to-one")
        assert verdict.exit_code == 1

    def test_nothing_cheap_enough_leaves_the_claims_open_with_the_reasons(self):
        verdict = check(dense_with_a_field(70), claims=["ground-energy", "ground-states"])
        assert verdict.claims["ground-energy"].status == "open"
        assert "not a proof" in verdict.claims["ground-energy"].detail
        assert verdict.claims["ground-states"].status == "tested"
        assert "width" in str(verdict.figures["source-gap"])
        assert verdict.exit_code == 3

    @pytest.mark.parametrize("claims", ["ground-states", "energies", "all"])
    @pytest.mark.parametrize(
        ("evidence", "size", "words"),
        [
            ("elimination", 70, ["70 variables", "width", "projection"]),
            ("exhaustion", 70, ["2**70 states", "projection"]),
            ("exhaustion", 60, ["2**60 states", "days", "projection"]),
            ("neighbourhood", 700, ["radius 6", "smaller radius", "projection"]),
        ],
    )
    def test_evidence_asked_for_by_name_is_refused_before_its_start_where_it_is_too_much(
        self, evidence, size, words, claims
    ):
        with pytest.raises(LimitError) as refusal:
            check(dense_with_a_field(size), claims=claims, evidence=evidence, radius=6)
        for word in words:
            assert word in str(refusal.value)


def dense_with_a_field(size):
    """A dense pair model beside the same with one field more: projection tells them apart, nothing small does."""
    rng = np.random.default_rng(0)
    pairs = np.array([(i, j) for i in range(size) for j in range(i)])
    E = Hamiltonian.from_arrays([pairs], [rng.integers(1, 9, len(pairs))], "spin")
    return Reduction(E, E + Hamiltonian({("v0",): 1}, "spin"), [])


class TestFindings:
    def test_lost_and_spurious_ground_states_are_counted_and_named(self):
        E, F = Hamiltonian({("a",): 1, ("b",): 2}, "spin"), Hamiltonian({("a",): -1, ("b",): 2}, "spin")
        verdict = check(Reduction(E, F, []))
        assert verdict.lost.states == ({"a": -1, "b": -1},)
        assert verdict.spurious.states == ({"a": 1, "b": -1},)
        assert verdict.lost.source_energies == (-3,)
        assert verdict.lost.model_energies == (-1,)

    def test_order_inversions_are_counted_below_a_chosen_energy(self):
        E = Hamiltonian({("a",): 1, ("b",): 2}, "spin")
        F = Hamiltonian({("a",): 2, ("b",): 1}, "spin")
        verdict = check(Reduction(E, F, []), below=3)
        assert verdict.inversions.count == 1
        (pair,) = verdict.inversions.pairs
        assert pair.lower.source_energy < pair.upper.source_energy
        assert pair.lower.model_energy > pair.upper.model_energy
        assert check(Reduction(E, F, []), below=-1).inversions.count == 0

    def test_the_gap_of_the_model_is_the_smaller_of_both_gaps(self, by_hand):
        verdict = check(by_hand["cubic"](strict=True))
        assert (verdict.source_gap, verdict.model_gap) == (1, 1)
        assert verdict.auxiliary_gap == (1, 1)
        assert verdict.figures["relative-auxiliary-gap-everywhere"].value == Fraction(1, 5)

    def test_one_level_has_no_gap_and_says_so(self):
        E = Hamiltonian({(): 1}, "boolean", labels=["a"])
        verdict = check(Reduction(E, E, []))
        assert verdict.source_gap is None
        assert str(verdict.figures["source-gap"]) == "none: one level"

    def test_a_proof_of_many_thousand_terms_needs_no_enumeration(self):
        rng = np.random.default_rng(5)
        from hubokit.reduction.reduce import reduce

        triples, weights = rng.integers(0, 900, (20_000, 3)), rng.integers(-4, 5, 20_000)
        E = Hamiltonian.from_arrays([triples], [weights], "boolean", size=900)
        verdict = check(reduce(E))
        assert verdict.exit_code == 0
        assert verdict.claims["one-to-one"].method == "projection"
        assert verdict.figures["source-gap"].note.startswith("not computed")


def test_the_screen_names_every_claim_and_stays_in_ascii_and_in_width(by_hand):
    for verdict in (check(by_hand["cubic"](strict=False)), check(by_hand["rosenberg"](1))):
        text = str(verdict)
        assert text.isascii()
        assert all(f"{name:<17} {verdict.claims[name].status}" in text for name in CLAIMS)
        assert max(len(line) for line in text.split("\n")) <= 120
        assert "witness: x:" in text


class TestManyGroundStates:
    """More ground states than are listed: witnesses are sought by tilting one function with the other."""

    LOOSE = tuple(f"v{i:02}" for i in range(40))

    def pair(self, E, F):
        labels = ["a", "b", *self.LOOSE]
        return check(
            Reduction(Hamiltonian(E, "boolean", labels=labels), Hamiltonian(F, "boolean", labels=labels), [])
        )

    def test_a_lost_state_beyond_the_list_is_found(self):
        # Only states with the last variables set are lost; the list in lift order begins with the others.
        last = self.LOOSE[-3:]
        verdict = self.pair({("a",): 1}, {("a",): 1, last: 1})
        claim = verdict.claims["ground-states"]
        assert claim.status == "refuted"
        assert (verdict.lost.count, verdict.spurious.count) == (2**38, 0)
        assert claim.witness.source_energy == 0
        assert claim.witness.model_energy == 1

    def test_a_spurious_state_beyond_the_list_is_found(self):
        last = self.LOOSE[-3:]
        verdict = self.pair({("a",): 1, last: 1}, {("a",): 1})
        claim = verdict.claims["ground-states"]
        assert claim.status == "refuted"
        assert (verdict.lost.count, verdict.spurious.count) == (0, 2**38)
        assert claim.witness.source_energy == 1
        assert claim.witness.model_energy == 0

    def test_a_constant_source_and_a_model_that_is_not(self):
        verdict = self.pair({(): 3}, {(self.LOOSE[-1],): 1, (): 3})
        assert verdict.lost.count == 2**41
        assert verdict.claims["ground-states"].witness.state[self.LOOSE[-1]] == 1


def test_what_is_no_reduction_is_refused_with_what_would_do():
    with pytest.raises(InputError, match=r"a Reduction is needed, not a Hamiltonian; Reduction\(source, model"):
        check(Hamiltonian({("a", "b"): 1}, "spin"))
