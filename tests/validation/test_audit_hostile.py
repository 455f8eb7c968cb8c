"""The second checker before hostile documents: a report or one clear error, never a raised claim accepted."""

from __future__ import annotations

import copy
import itertools
import json
import random
from fractions import Fraction

import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from hubokit.errors import HubokitError, InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection import stages
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction
from hubokit.validation.audit import audit
from hubokit.validation.check import check
from hubokit.validation.claims import CLAIMS

#: Values that no honest document holds at most places, and some that it may hold elsewhere.
NUMBERS = (None, True, False, 0, 1, -1, 2, 3, 17, 10**30, 0.5, 1.0, float("nan"))
WORDS = (
    "",
    "0",
    "1",
    "1/2",
    "1/0",
    "1e999999999",
    "proved",
    "refuted",
    "projection",
    "equal",
    "spin",
    "a",
    "y",
    "0001",
)
STRANGE = (*NUMBERS, *WORDS, [], {}, [0], [[]], ["not", "a"], [1, 1])
KINDS = ("replace", "replace", "remove", "double", "near", "near")


@pytest.fixture(scope="module")
def judged(by_hand):
    """Documents of honest verdicts by every kind of step, proved and refuted: (verdict, source, model)."""
    thirds = [f"t{i}" for i in range(5)]
    chained = {("y", t): 1 + i % 3 for i, t in enumerate(thirds)} | {("a", "b"): 40, ("a", "y"): -80, ("b", "y"): -80}
    pair = Hamiltonian({("a", "b", t): 1 + i % 3 for i, t in enumerate(thirds)}, "boolean")
    many = {(f"x{i}", "y"): -2 for i in range(20)} | {("y",): 39}
    E = Hamiltonian({("a", "b"): 1, ("c",): 2, (): "1/3"}, "spin")
    reductions = [
        by_hand["cubic"](strict=True),
        by_hand["cubic"](strict=False),
        by_hand["rosenberg"](1),
        reduce(by_hand["autocorrelation"](6)),
        Reduction(
            Hamiltonian({tuple(f"x{i}" for i in range(20)): -1}, "boolean"), Hamiltonian(many, "boolean"), ["y"]
        ),
        Reduction(E, E.substituted({"a": ("not", "p"), "b": "c"}), [], origin={"a": ("not", "p"), "b": "c"}),
        Reduction(E, 2 * E.in_domain("boolean") - 1, []),
    ]
    verdicts = [by_hand["written"](check(made)) for made in reductions]
    with pytest.MonkeyPatch.context() as patch:  # rules where a table would do
        patch.setattr(stages, "SMALL", -1)
        patch.setattr(stages, "CHEAP", 0)
        decided = Hamiltonian(chained | {("y",): 120}, "boolean", labels=["a", "b", *thirds, "y"])
        for made in (by_hand["paired"](6, 0.7), Reduction(pair, decided, ["y"])):
            reductions.append(made)
            verdicts.append(by_hand["written"](check(made)))
    return [
        (verdict, by_hand["document"](made.source), by_hand["document"](made.model))
        for made, verdict in zip(reductions, verdicts, strict=True)
    ]


def places(value, path=()):
    """Every place inside a JSON value, as a path."""
    yield path
    if isinstance(value, (dict, list)):
        for key in value if isinstance(value, dict) else range(len(value)):
            yield from places(value[key], (*path, key))


def change(document, path, kind, value):
    """Replace one place of a document, remove it, double it, or move it by one."""
    *way, last = path
    for key in way:
        document = document[key]
    if kind == "remove":
        del document[last]
    elif kind == "double" and isinstance(document, list):
        document.append(copy.deepcopy(document[last]))
    elif kind == "near" and type(document[last]) is int:
        document[last] += 1
    elif kind == "near" and isinstance(document[last], str) and document[last][:1].isdigit():
        document[last] = str((int(document[last][0]) + 1) % 2) + document[last][1:]
    else:
        document[last] = value


def changed(document, path, value):
    """A copy with another value at one place."""
    fresh = copy.deepcopy(document)
    change(fresh, path, "replace", value)
    return fresh


def mutants(document, rng, number):
    """Copies of a document, each changed at one to three random places."""
    text = json.dumps(document)
    paths = [path for path in places(document) if path]
    for _ in range(number):
        fresh = json.loads(text)
        for _ in range(rng.choice((1, 1, 2, 3))):
            top = rng.choice(sorted({path[0] for path in paths}))
            path = rng.choice(paths if rng.random() < 0.5 else [path for path in paths if path[0] == top])
            try:
                change(fresh, path, rng.choice(KINDS), copy.deepcopy(rng.choice(STRANGE)))
            except (KeyError, IndexError, TypeError):  # an earlier change took the place away
                continue
        yield fresh


@settings(max_examples=80, phases=[Phase.generate])
@given(seed=st.integers(0, 10**9), number=st.integers(0, 8))
def test_a_verdict_changed_at_random_places_gets_a_report_or_a_clear_error(judged, seed, number):
    verdict, source, model = judged[number % len(judged)]
    for mutant in mutants(verdict, random.Random(seed), 30):
        report = report_or_error(mutant, source, model)
        if report is None or [item.result for item in report.items[:2]] != ["accepted", "accepted"]:
            continue
        same = all(mutant[name] == verdict[name] for name in ("scale", "shift"))
        if not same or mutant["evidence"][:1] != verdict["evidence"][:1]:  # then it is another question
            continue
        accepted = {item.name for item in report.items if item.result == "accepted"}
        for name in accepted.intersection(CLAIMS):
            told, true = mutant["claims"][name]["status"], verdict["claims"][name]["status"]
            assert true not in ("proved", "refuted") or told == true


@settings(max_examples=50, phases=[Phase.generate])
@given(seed=st.integers(0, 10**9), number=st.integers(0, 8), which=st.sampled_from([1, 2]))
def test_models_changed_at_random_places_get_a_report_or_a_clear_error(judged, seed, number, which):
    honest = judged[number % len(judged)]
    for mutant in mutants(honest[which], random.Random(seed), 20):
        documents = list(honest)
        documents[which] = mutant
        report = report_or_error(*documents)
        assert report is None or len(report.items) >= 2


def report_or_error(verdict, source, model):
    """The audit's report, or None where it refused the documents in one line."""
    try:
        return audit(verdict, source, model)
    except HubokitError as error:
        refusal = str(error)
    assert "\n" not in refusal
    return None


def test_every_claim_raised_or_lowered_is_rejected_or_not_re_checked(judged):
    for verdict, source, model in judged:
        for name, status in itertools.product(CLAIMS, ("proved", "refuted")):
            true = verdict["claims"][name]["status"]
            if true not in ("proved", "refuted") or true == status:
                continue
            forged = changed(verdict, ("claims", name, "status"), status)
            results = {item.name: item.result for item in audit(forged, source, model).items}
            assert results[name] != "accepted"


def test_models_of_other_variables_are_a_rejected_digest_and_nothing_else_is_looked_at(judged, by_hand):
    verdict, _, model = judged[0]
    other = by_hand["document"](Hamiltonian({("p", "q", "r"): 1}, "boolean"))
    report = audit(verdict, other, model)
    assert report.rejected
    assert [(item.name, item.result) for item in report.items] == [
        ("source digest", "rejected"),
        ("model digest", "accepted"),
    ]


@pytest.mark.parametrize("value", [1.0, True, "1", None, 3])
def test_a_state_whose_values_are_no_integers_of_the_domain_is_bad_input(judged, value):
    verdict, source, model = judged[1]
    label = next(iter(verdict["claims"]["one-to-one"]["witness"]["state"]))
    forged = changed(verdict, ("claims", "one-to-one", "witness", "state", label), value)
    with pytest.raises(InputError, match="gives"):
        audit(forged, source, model)


@pytest.mark.parametrize("text", ["1e999999999", "9" * 100_000, "1/0", 0.5, True, "nan"])
def test_numbers_that_would_not_end_are_refused(judged, text):
    verdict, source, model = next(one for one in judged if any(step["step"] == "shared" for step in steps_of(one[0])))
    forged = copy.deepcopy(verdict)
    step = next(step for step in steps_of(forged) if step["step"] == "shared")
    for change in ({"slacks": [text] * len(step["slacks"])}, {"shares": [[0, 1, 0, 0, text]]}):
        honest = {key: step[key] for key in change}
        step.update(change)
        with pytest.raises(InputError, match="rational"):
            audit(forged, source, model)
        step.update(honest)
    assert audit(forged, source, model).accepted


def steps_of(verdict):
    return [
        step
        for piece in verdict["evidence"]
        if piece["kind"] == "projection"
        for step in piece["certificate"].get("steps", [])
    ]


def test_the_documents_hold_every_kind_of_step_that_the_checks_rest_on(judged):
    kinds = {step["step"] for verdict, _, _ in judged for step in steps_of(verdict)}
    assert kinds >= {"tables", "counting", "shared", "guards"}
    statuses = {verdict["claims"][name]["status"] for verdict, _, _ in judged for name in CLAIMS}
    assert statuses >= {"proved", "refuted"}
    assert all(audit(*documents).accepted for documents in judged)
    assert any(Fraction(verdict["scale"]) == 2 for verdict, _, _ in judged)


def test_a_witness_shows_nothing_under_a_scale_that_nobody_declared_or_found(judged, by_hand):
    chain = {(f"v{i}", f"v{i + 1}"): -1 for i in range(24)}
    made = Reduction(Hamiltonian(chain, "spin"), 2 * Hamiltonian(chain, "spin"), [])
    verdict = by_hand["written"](check(made))
    assert Fraction(verdict["scale"]) == 2
    state = {f"v{i}": 1 for i in range(25)}
    witness = {"state": state, "auxiliaries": {}, "source_energy": "-24", "model_energy": "-48", "multiplicity": 1}
    verdict["claims"]["energies"].update(status="refuted", witness=witness)
    verdict.update(scale="1", shift="0", scale_from="default", evidence=verdict["evidence"][:1])
    report = audit(verdict, by_hand["document"](made.source), by_hand["document"](made.model))
    assert "accepted" not in {item.result for item in report.items if item.name == "energies"}
