"""A few hundred mutated reductions, every claim of every verdict held to brute force (the short mutation trial)."""

import importlib.util
import random
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from hubokit.validation.check import check
from hubokit.validation.claims import CLAIMS
from hubokit.validation.verdict import Claim

PLACE = Path(__file__).parent.parent / "benchmarks" / "bench_mutations.py"
_spec = importlib.util.spec_from_file_location("bench_mutations", PLACE)
trial_program = importlib.util.module_from_spec(_spec)
sys.modules["bench_mutations"] = trial_program
_spec.loader.exec_module(trial_program)


@pytest.fixture(scope="module")
def tally():
    return trial_program.trial(480, seed=20)


def test_no_verdict_on_a_mutant_is_wrong_and_none_is_open(tally):
    assert tally.wrong == []
    assert tally.mutants == 480


def test_the_mutations_change_every_claim_in_both_directions(tally):
    for name in CLAIMS:
        false = sum(count for (_, claim), count in tally.changed.items() if claim == name)
        assert 0 < false < tally.mutants


@pytest.mark.parametrize("evidence", ["projection", "exhaustion", "elimination", "neighbourhood"])
def test_no_single_kind_of_evidence_is_wrong_about_a_mutant(evidence):
    assert trial_program.trial(160, seed=21, evidence=evidence).wrong == []


def test_the_trial_notices_a_verdict_turned_round():
    rng = random.Random(3)
    made = trial_program.random_reduction(rng)
    mutant = next(trial_program.mutants_of(made, rng, 1))
    known, verdict = trial_program.truth(mutant.reduction), check(mutant.reduction)
    assert trial_program.faults(mutant, verdict, known) == []
    other = {"proved": "refuted", "refuted": "proved"}
    for name in CLAIMS:
        claim = verdict.claims[name]
        turned = Claim(name, other[claim.status], claim.method, "turned round", claim.witness)
        wrong = replace(verdict, claims={**verdict.claims, name: turned})
        assert trial_program.faults(mutant, wrong, known) != []


def test_the_oracle_agrees_with_a_reduction_worked_out_by_hand():
    # -x1 x2 x3 = min over y of y (2 - S): ties where two of the three are one (Freedman & Drineas 2005).
    H, R = trial_program.Hamiltonian, trial_program.Reduction
    E = H({("a", "b", "c"): -1}, "boolean")
    F = H({("y",): 2, ("a", "y"): -1, ("b", "y"): -1, ("c", "y"): -1}, "boolean", labels=["a", "b", "c", "y"])
    known = trial_program.truth(R(E, F, ["y"]))
    assert known.claims["energies"]
    assert not known.claims["one-to-one"]
    assert known.counts[1, 1, 0] == 2
    assert known.counts[1, 1, 1] == 1
    assert known.model_gap == 1


def test_what_is_tested_on_a_neighbourhood_of_all_states_is_true():
    rng = random.Random(22)
    tested = 0
    for _ in range(12):
        for mutant in trial_program.mutants_of(trial_program.random_reduction(rng), rng, 8):
            source, known = mutant.reduction.source, trial_program.truth(mutant.reduction)
            first = [trial_program.values(source.domain)[0]] * source.size
            verdict = check(mutant.reduction, evidence="neighbourhood", radius=source.size, around=[first])
            for name in CLAIMS:
                if verdict.claims[name].status == "tested":
                    assert known.claims[name], (name, mutant)
                    tested += 1
    assert tested > 100
