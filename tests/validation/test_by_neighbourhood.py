"""What a neighbourhood says of the claims is what plain enumeration of the same states says, for every radius."""

import importlib.util
import random
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction
from hubokit.spectrum.search import ground_states
from hubokit.validation import by_neighbourhood as engine
from hubokit.validation.case import Case
from hubokit.validation.check import check
from hubokit.validation.claims import CLAIMS
from hubokit.validation.findings import Findings
from hubokit.validation.no_auxiliaries import OwnProjection
from hubokit.validation.options import Options

PLACE = Path(__file__).parent.parent / "benchmarks" / "bench_mutations.py"
_spec = importlib.util.spec_from_file_location("bench_mutations", PLACE)
brute = importlib.util.module_from_spec(_spec)
sys.modules["bench_mutations"] = brute
_spec.loader.exec_module(brute)


def statuses_on(reduction, known, centres, radius):
    """The status of every claim by the definitions, with "all states" replaced by those within the radius."""
    ball = [
        state
        for state in known.energies
        if any(sum(a != b for a, b in zip(state, centre, strict=True)) <= radius for centre in centres)
    ]
    E = {state: known.energies[state] for state in ball}
    P = {state: known.minima[state] for state in ball if known.minima[state] is not None}
    if not P:
        return len(ball), None
    scale, shift = reduction.declared or brute.searched({x: E[x] for x in P}, P)
    off = [x for x in P if P[x] != scale * E[x] + shift] or any(p is None for p in known.minima.values())
    tied = any(known.counts[x] != 1 for x in P)
    least_E, least_P = min(E.values()), min(P.values())
    lowest_E, lowest_P = ({x for x in Q if Q[x] == least} for Q, least in ((E, least_E), (P, least_P)))
    same = lowest_E == lowest_P
    even = same and len({known.counts[x] for x in lowest_P}) == 1
    return len(ball), {
        "quadratic": "proved",
        "ground-energy": "tested" if least_P == scale * least_E + shift else "open",
        "ground-states": "tested" if same else "open",
        "even-multiplicity": "tested" if even else "open",
        "energies": "refuted" if off else "tested",
        "one-to-one": "refuted" if off or tied else "tested",
    }


def without_polynomial(projection):
    """The same projection, as though P were too large to be written down."""
    if isinstance(projection, OwnProjection):
        return projection
    return replace(projection, polynomial=None, uniform_multiplicity=None)


@pytest.mark.parametrize("is_polynomial", [True, False])
def test_every_radius_gives_what_enumeration_of_the_ball_gives(is_polynomial, monkeypatch):
    if not is_polynomial:
        whole = Case.projection.func
        monkeypatch.setattr(Case, "projection", property(lambda case: without_polynomial(whole(case))))
    rng = random.Random(31)
    seen = set()
    for _ in range(16):
        for mutant in brute.mutants_of(brute.random_reduction(rng), rng, 3):
            made = mutant.reduction
            if made.model.locality > 2:
                continue
            known = brute.truth(made)
            centres = rng.sample(sorted(known.energies), min(2, len(known.energies)))
            for radius in range(made.source.size + 1):
                visited, wanted = statuses_on(made, known, centres, radius)
                if wanted is None:
                    continue
                verdict = check(made, claims="all", evidence="neighbourhood", radius=radius, around=centres)
                for name in CLAIMS:
                    claim = verdict.claims[name]
                    assert claim.status == wanted[name], (name, radius, centres, mutant)
                    seen.add((name, claim.status))
                assert f"{visited:,} state{'s' if visited != 1 else ''} visited" in str(verdict.evidence)
    assert {status for name, status in seen if name == "even-multiplicity"} == {"open", "tested"}
    assert {status for name, status in seen if name == "energies"} == {"refuted", "tested"}


@pytest.mark.parametrize("domain", ["spin", "boolean"])
@pytest.mark.parametrize("change", [0, 1, 2])
def test_ten_variables_at_every_radius(domain, change):
    rng = np.random.default_rng(change)
    labels = [f"v{i}" for i in range(10)]
    terms = {
        tuple(labels[i] for i in sorted(rng.choice(10, 3, replace=False))): int(rng.choice([-2, 1, 3]))
        for _ in range(3)
    }
    terms |= {(label,): int(rng.choice([-1, 0, 1])) for label in labels}
    made = reduce(Hamiltonian(terms, domain, labels=labels))
    if change:
        members = (labels[0],) if change == 1 else (labels[2], made.auxiliaries[0])
        model = (made.model + Hamiltonian({members: 1}, domain)).with_labels(made.model.labels)
        made = Reduction(made.source, model, made.auxiliaries)
    known = brute.truth(made)
    states = sorted(known.energies)
    centres = [states[i] for i in rng.choice(len(states), 3, replace=False)]
    for radius in range(11):
        _, wanted = statuses_on(made, known, centres, radius)
        verdict = check(made, claims="all", evidence="neighbourhood", radius=radius, around=centres)
        assert {name: verdict.claims[name].status for name in CLAIMS} == wanted


def test_a_refutation_does_not_call_itself_no_proof(by_hand):
    verdict = check(by_hand["rosenberg"](1), claims="all", evidence="neighbourhood", radius=8, around=[[0] * 8])
    for name in ("energies", "one-to-one"):
        claim = verdict.claims[name]
        assert claim.status == "refuted"
        assert claim.witness.source_energy != claim.witness.model_energy
        assert "256 states visited" in claim.detail
        assert "not a proof" not in claim.detail


def known_ground_level(E, F, radius, around):
    """The findings of a neighbourhood where the ground level of E is known beforehand."""
    found, case = Findings(), Case(Reduction(E, F, [], scale=1, shift=0))
    found.source_level = ground_states(E)
    options = Options(asked=CLAIMS, evidence="neighbourhood", radius=radius, around=around)
    engine.by_neighbourhood(case, options, found)
    return found


def test_a_state_as_low_as_a_ground_state_settles_the_claim_where_the_ground_level_is_known():
    E = Hamiltonian({("a",): 1, ("b",): 2}, "spin")
    level = Hamiltonian({("b",): 2}, "spin", labels=["a", "b"])
    found = known_ground_level(E, level, 0, [[1, -1]])
    claim = found.claims["ground-states"]
    assert claim.status == "refuted"
    assert claim.witness.model_energy == claim.rival.model_energy == -2
    assert claim.witness.source_energy > claim.rival.source_energy == -3
    below = known_ground_level(E, Hamiltonian({("a",): -1, ("b",): 2}, "spin"), 0, [[1, -1]])
    assert below.claims["ground-states"].status == "refuted"
    assert "lies below" in below.claims["ground-states"].detail
    assert known_ground_level(E, E, 0, [[1, 1]]).claims["ground-states"].status == "tested"


def test_lists_of_lowest_states_that_are_cut_are_not_compared(monkeypatch):
    monkeypatch.setattr(engine, "LISTED", 1)
    labels = [f"v{i}" for i in range(10)]
    E = Hamiltonian({("v0", "v1"): -1}, "spin", labels=labels)
    same = check(Reduction(E, E, []), claims="all", evidence="neighbourhood", radius=10, around=[[1] * 10])
    assert same.claims["even-multiplicity"].status == "tested"
    other = Hamiltonian({("v0", "v1"): -1, ("v0", "v2"): -1, ("v1", "v2"): -1}, "spin", labels=labels)
    claim = check(
        Reduction(E, other, []), claims="all", evidence="neighbourhood", radius=10, around=[[1] * 10]
    ).claims["ground-states"]
    assert claim.status == "open"
    assert "too many are lowest to compare" in claim.detail


def test_multiplicities_beyond_what_is_visited_one_by_one_leave_one_to_one_open(by_hand, monkeypatch):
    made = by_hand["cubic"](strict=False)
    around = [[0, 0, 0, 0]]
    assert check(made, claims="all", evidence="neighbourhood", radius=2, around=around).claims[
        "one-to-one"
    ].status == ("refuted")
    monkeypatch.setattr(engine, "VISITED", 5)
    claim = check(made, claims="all", evidence="neighbourhood", radius=2, around=around).claims["one-to-one"]
    assert claim.status == "open"
    assert "within radius 1 only" in claim.detail


def test_a_thousand_spins_are_walked_at_radius_two():
    rng = np.random.default_rng(5)
    members = np.sort(np.array([rng.choice(1000, 3, replace=False) for _ in range(1500)]), axis=1)
    E = Hamiltonian.from_arrays([members], [rng.choice([-3, -1, 1, 3], 1500)], domain="spin", size=1000)
    made, around = reduce(E), rng.choice([-1, 1], (2, 1000))
    verdict = check(made, claims="all", evidence="neighbourhood", radius=2, around=around)
    assert {verdict.claims[name].status for name in CLAIMS[1:]} == {"tested"}
    assert "1,001,002 states visited, all within radius 2 of 2 centres given" in verdict.claims["energies"].detail
    # (v3 - s3)(v4 - s4) vanishes at every state within one flip of s, and shows at the second.
    s3, s4 = int(around[0, 3]), int(around[0, 4])
    far = Hamiltonian({("v3", "v4"): 1, ("v3",): -s4, ("v4",): -s3, (): s3 * s4}, "spin")
    wrong = Reduction(E, (made.model + far).with_labels(made.model.labels), made.auxiliaries, scale=1, shift=0)
    near = check(wrong, claims="all", evidence="neighbourhood", radius=1, around=around[:1])
    assert near.claims["energies"].status == "tested"
    claim = check(wrong, claims="all", evidence="neighbourhood", radius=2, around=around[:1]).claims["energies"]
    assert claim.status == "refuted"
    assert claim.witness.model_energy == claim.witness.source_energy + 4 * s3 * s4
    assert [v for v, value in claim.witness.state.items() if value != around[0, E.positions[v]]] == ["v3", "v4"]


def test_auxiliaries_that_trap_a_centre_are_noted():
    E = Hamiltonian({("a",): -1}, "spin")
    F = Hamiltonian({("a",): -1, ("a", "y"): -3}, "spin")
    verdict = check(Reduction(E, F, ["y"]), claims="all", evidence="neighbourhood", around=[[1]])
    note = next(note for note in verdict.notes if note.startswith("traps: "))
    assert "1 single-flip local minimum" in note
    assert "2 above centre 1, by flips of a, y" in note
    below = check(Reduction(E, F, ["y"]), claims="all", evidence="neighbourhood", around=[[-1]])
    assert not any("2 above" in note for note in below.notes)
    free = check(Reduction(E, E, []), claims="all", evidence="neighbourhood", around=[[1]])
    assert not any("traps" in note for note in free.notes)


def test_centres_given_twice_count_once_and_none_is_refused(by_hand):
    made = by_hand["rosenberg"](7)
    verdict = check(made, evidence="neighbourhood", radius=1, around=[[0] * 8, [0] * 8])
    assert "9 states visited, all within radius 1 of 1 centre given" in verdict.claims["energies"].detail
    with pytest.raises(InputError, match="no states were given"):
        check(made, evidence="neighbourhood", radius=1, around=np.zeros((0, 8), np.int8))
    with pytest.raises(InputError, match="radius is -1"):
        check(made, evidence="neighbourhood", radius=-1)
