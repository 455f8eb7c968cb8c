"""Thermal evenness against the plain sum over all auxiliary settings, and a value from the handbook of gadgets."""

from itertools import product
from math import exp, isclose, log

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.result import Reduction
from hubokit.validation import thermal
from hubokit.validation.case import Case
from hubokit.validation.check import check
from hubokit.validation.thermal import TEMPERATURES, largest_ratio, log_weights


def plain_log_weight(model, x, auxiliaries, beta):
    values = (1, -1) if model.domain == "spin" else (0, 1)
    energies = [
        float(model.energy(x | dict(zip(auxiliaries, a, strict=True))))
        for a in product(values, repeat=len(auxiliaries))
    ]
    return log(sum(exp(-beta * (energy - min(energies))) for energy in energies))


@given(st.data())
def test_the_product_over_clusters_is_the_sum_over_all_settings(data):
    domain = data.draw(st.sampled_from(["spin", "boolean"]))
    auxiliaries, originals = ("y0", "y1", "y2", "y3"), ("a", "b")
    labels = (*originals, *auxiliaries)
    keys = st.lists(st.sampled_from(labels), min_size=1, max_size=2, unique=True).map(tuple)
    terms = data.draw(st.dictionaries(keys, st.integers(-3, 3), max_size=9))
    model = Hamiltonian(terms, domain, labels=labels)
    case = Case(Reduction(Hamiltonian({}, domain, labels=originals), model, auxiliaries))
    states = np.array(list(product((1, -1) if domain == "spin" else (0, 1), repeat=2)), np.int8)
    found = log_weights(case, states, 2)
    for row, temperature in enumerate(TEMPERATURES):
        for column, state in enumerate(states):
            x = dict(zip(originals, map(int, state), strict=True))
            plain = plain_log_weight(model, x, auxiliaries, temperature / 2)
            assert isclose(found[row, column], plain, abs_tol=1e-9)


def test_the_published_unevenness_of_a_tie_free_cubic_gadget():
    # -x1 x2 x3 with y (5 - 2 S): W(S = 3) / W(S = 0) = 1.36 at beta_T * gap = 1, over 20 gadgets a factor of 460.
    gadget = {("y",): 5, ("a", "y"): -2, ("b", "y"): -2, ("c", "y"): -2}
    model = Hamiltonian(gadget, "boolean", labels=["a", "b", "c", "y"])
    case = Case(Reduction(Hamiltonian({("a", "b", "c"): -1}, "boolean"), model, ["y"]))
    weights = log_weights(case, np.array([[1, 1, 1], [0, 0, 0]], np.int8), 1)
    assert round(largest_ratio(weights[0]), 2) == 1.36
    assert 450 < largest_ratio(20 * weights[0]) < 470


def test_even_ground_states_are_said_to_be_even():
    E = Hamiltonian({("a", "b"): -1}, "spin")
    verdict = check(Reduction(E, E, []))
    assert [step.ratio for step in verdict.evenness] == [1, 1, 1]
    assert any("equal weight" in note for note in verdict.notes)


def test_the_sentence_names_the_ground_states_that_gain_and_lose_and_whether_cooling_evens_them():
    # Both states of a are ground states; y is tied at a = 0 only.
    E = Hamiltonian({}, "boolean", labels=["a"])
    level = Hamiltonian({("b",): 1}, "boolean", labels=["a", "b"])
    uneven = Reduction(level, Hamiltonian({("b",): 1, ("a", "y"): 1}, "boolean", labels=["a", "b", "y"]), ["y"])
    verdict = check(uneven)
    assert verdict.claims["even-multiplicity"].status == "refuted"
    assert verdict.claims["even-multiplicity"].witness.multiplicity == 2
    assert verdict.claims["even-multiplicity"].rival.multiplicity == 1
    (sentence,) = [note for note in verdict.notes if "heaviest" in note]
    assert "heaviest ground state (a=0 b=0)" in sentence
    assert "does not even out (2 at 10)" in sentence
    assert check(Reduction(E, E, [])).evenness == ()


def test_clusters_too_large_to_sum_are_refused(monkeypatch):
    monkeypatch.setattr(thermal, "LARGEST_CLUSTER", 2)
    labels = ["a", "y0", "y1", "y2"]
    model = Hamiltonian({("y0", "y1"): 1, ("y1", "y2"): 1}, "spin", labels=labels)
    case = Case(Reduction(Hamiltonian({}, "spin", labels=["a"]), model, labels[1:]))
    with pytest.raises(LimitError, match="3 auxiliaries are coupled"):
        log_weights(case, np.ones((1, 1), np.int8), 1)
