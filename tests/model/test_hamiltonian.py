"""A Hamiltonian is the function that was written down, in every form and domain."""

import pickle
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import hubokit as hk
from hubokit.errors import InputError, LimitError
from hubokit.model.states import change_domain
from tests.strategies import CONVENTIONS, DOMAINS, EDGES, all_states, coefficients, hamiltonians, plain_energy


@given(coefficients(), DOMAINS)
def test_energies_are_those_of_the_definition(made, domain):
    labels, mapping = made
    H = hk.Hamiltonian(mapping, domain, labels=labels)
    for state in all_states(labels, domain):
        assert H.energy(state) == plain_energy(mapping, state)


@given(coefficients(max_size=4, values=EDGES), DOMAINS)
def test_energies_beyond_int64_are_exact(made, domain):
    labels, mapping = made
    H = hk.Hamiltonian(mapping, domain, labels=labels)
    for state in all_states(labels, domain):
        assert H.energy(state) == plain_energy(mapping, state)


@given(hamiltonians())
def test_integer_energies_and_floats_agree_with_the_exact_energy(H):
    states = [list(state.values()) for state in all_states(H.labels, H.domain)]
    exact = [H.energy(state) for state in states]
    assert [H.constant + int(k) * H.resolution for k in H.integer_energies(states)] == exact
    assert np.allclose(H.energies(states), [float(e) for e in exact])


@given(hamiltonians(), CONVENTIONS)
def test_a_change_of_domain_keeps_every_energy_and_comes_back(H, convention):
    other = "spin" if H.domain == "boolean" else "boolean"
    changed = H.in_domain(other, convention)
    states = np.array([list(s.values()) for s in all_states(H.labels, H.domain)], np.int8)
    images = change_domain(states, H.domain, other, convention)
    assert [changed.energy(image) for image in images] == [H.energy(state) for state in states]
    assert changed.convention == convention
    assert changed.in_domain(H.domain) == H


@given(hamiltonians(domain="spin"), hamiltonians(domain="spin", max_size=4))
def test_arithmetic_is_pointwise(F, G):
    labels = list(dict.fromkeys(F.labels + G.labels))
    for state in list(all_states(labels, "spin"))[:16]:
        f = F.energy({label: state[label] for label in F.labels})
        g = G.energy({label: state[label] for label in G.labels})
        assert (F + G).energy(state) == f + g
        assert (F - G).energy(state) == f - g
        assert (F * G).energy(state) == f * g
    assert hk.Hamiltonian({}, "spin", labels=F.labels) == F - F
    assert 2 - F == -(F - 2)
    assert F * Fraction(1, 3) == F / 3
    assert F**2 == F * F


@given(hamiltonians(max_size=5), st.data())
def test_substitution_is_composition(H, data):
    values = (1, -1) if H.domain == "spin" else (0, 1)
    target = st.one_of(
        st.sampled_from(["u", "w"]), st.sampled_from([("not", "u"), ("not", "w")]), st.sampled_from(values)
    )
    origin = {label: data.draw(target) for label in H.labels}
    G = H.substituted(origin)
    for state in all_states(("u", "w"), H.domain):
        image = {}
        for label, value in origin.items():
            if isinstance(value, tuple):
                image[label] = -state[value[1]] if H.domain == "spin" else 1 - state[value[1]]
            else:
                image[label] = state[value] if isinstance(value, str) else value
        assert G.energy({label: state[label] for label in G.labels}) == H.energy(image)


@given(hamiltonians(), st.permutations(range(6)))
def test_equality_and_digest_do_not_depend_on_order(H, order):
    labels = [H.labels[i] for i in order if i < H.size]
    again = H.with_labels(labels)
    assert again == H
    assert again.digest == H.digest
    assert hash(again) == hash(H)
    assert (H + 1).digest != H.digest


@given(hamiltonians(), hamiltonians())
def test_digests_are_equal_exactly_for_equal_models(F, G):
    assert (F == G) == (F.digest == G.digest)


@given(hamiltonians(), st.fractions(min_value=Fraction(1, 50), max_value=3))
def test_rounding_knows_its_deviation_and_bounds_the_ground_states(H, unit):
    coarse = H.rounded(unit)
    assert coarse.model - H == coarse.deviation
    assert all((c / unit).denominator == 1 for key, c in coarse.model.terms() if key)
    assert all(abs(c) <= unit / 2 for _, c in coarse.deviation.terms())
    states = list(all_states(H.labels, H.domain))
    lowest = min(H.energy(s) for s in states)
    floor = min(coarse.model.energy(s) for s in states)
    assert all(coarse.model.energy(s) <= floor + coarse.bound for s in states if H.energy(s) == lowest)


@given(hamiltonians())
def test_terms_build_the_model_again(H):
    assert hk.Hamiltonian(dict(H.terms()), H.domain, labels=H.labels) == H
    arrays = hk.Hamiltonian.from_arrays(
        [block.members for block in H.blocks],
        [block.weights for block in H.blocks],
        domain=H.domain,
        labels=H.labels,
        resolution=H.resolution,
        constant=H.constant,
    )
    assert arrays == H
    assert pickle.loads(pickle.dumps(H)) == H


def test_the_mapping_form_merges_repeats():
    assert hk.Hamiltonian({("a", "b"): 1, ("b", "a"): 2, ("a", "a", "c"): 4}, "spin").terms() == [
        (("c",), 4),
        (("a", "b"), 3),
    ]
    assert hk.Hamiltonian({("a", "a", "c"): 4}, "boolean").terms() == [(("a", "c"), 4)]


def test_learned_coefficients_are_read_exactly_from_arrays():
    H = hk.Hamiltonian.from_arrays([[[0], [1]]], [np.array([0.1, 0.25])], domain="spin")
    assert H.terms() == [(("v0",), Fraction(1, 10)), (("v1",), Fraction(1, 4))]
    small = hk.Hamiltonian.from_arrays([[[0]]], [np.array([0.1], np.float32)], domain="spin")
    assert small.terms() == [(("v0",), Fraction(1, 10))]


def test_names_are_distinct_after_unicode_nfc():
    with pytest.raises(InputError, match="stands twice"):
        hk.Hamiltonian({}, "spin", labels=["\u00e9", "e\u0301"])
    H = hk.Hamiltonian({("e\u0301",): 1}, "spin")
    assert H.energy({"\u00e9": -1}) == -1


def test_a_sixty_body_term_is_refused_in_the_other_domain_with_its_number():
    H = hk.Hamiltonian({tuple(f"s{i}" for i in range(60)): 1}, "spin")
    with pytest.raises(LimitError, match=r"2\*\*60 products"):
        H.in_domain("boolean")


@pytest.mark.parametrize(
    ("attempt", "message"),
    [
        (lambda: hk.Hamiltonian({"ab": 1}, "spin"), "tuple of labels"),
        (lambda: hk.Hamiltonian({("a",): 1}, "qubit"), "domain"),
        (lambda: hk.Hamiltonian({("a",): 1}, "spin", convention="x"), "convention"),
        (lambda: hk.Hamiltonian({("a",): 1}, "spin", labels=["b"]), "not among the labels"),
        (lambda: hk.Hamiltonian({("",): 1}, "spin"), "empty"),
        (lambda: hk.Hamiltonian({("\ud800",): 1}, "spin"), "surrogate"),
        (lambda: hk.Hamiltonian({("a",): "many"}, "spin"), "not a finite number"),
        (lambda: hk.Hamiltonian.from_arrays([[[0, -1]]], [[1]], domain="spin"), "negative"),
        (lambda: hk.Hamiltonian.from_arrays([[[0, 7]]], [[1]], domain="spin", labels="a b"), "only 2 variables"),
        (lambda: hk.Hamiltonian.from_arrays([[[0]]], [[1, 2]], domain="spin"), "1 products and 2 weights"),
        (lambda: hk.Hamiltonian.from_arrays([[[0.5]]], [[1]], domain="spin"), "integers are needed"),
        (lambda: hk.Hamiltonian.from_arrays([[[0]]], [[1]], domain="spin", resolution=0), "positive"),
        (lambda: hk.spins("a")[0] + hk.booleans("b")[0], "convert one"),
        (lambda: hk.spins("a")[0].energy({"b": 1}), "no value for a"),
        (lambda: hk.spins("a")[0].energy({"a": 1, "b": 1}), "no variable of the model"),
        (lambda: hk.spins("a")[0].energy([0]), r"\+1 or -1"),
        (lambda: hk.spins("a")[0].energy([[1], [1]]), "takes one"),
        (lambda: hk.spins("a")[0].energies([[1, 1]]), "1 values a state"),
        (lambda: hk.spins("a")[0] / 0, "divided by zero"),
        (lambda: hk.spins("a")[0] ** -1, "exponent"),
        (lambda: hk.spins("a")[0].substituted({"b": 1}), "no variable"),
        (lambda: hk.spins("a")[0].substituted({"a": 0}), "no spin value"),
        (lambda: hk.spins("a b")[0].relabelled({"a": ""}), "empty"),
    ],
)
def test_bad_input_is_one_clear_line(attempt, message):
    with pytest.raises(InputError, match=message) as caught:
        attempt()
    assert "\n" not in str(caught.value)


def test_a_million_cubic_terms_are_merged_as_arrays():
    rng = np.random.default_rng(20)
    members, weights = rng.integers(0, 20_000, (1_000_000, 3)), rng.integers(-9, 10, 1_000_000)
    H = hk.Hamiltonian.from_arrays([members], [weights], domain="spin", size=20_000)
    state = rng.choice(np.array([1, -1], np.int8), 20_000)
    assert H.energy(state) == int((state[members].astype(np.int64).prod(axis=1) * weights).sum())
    assert (H + H).weight_bound == H.weight_bound
    assert (H + H).resolution == 2 * H.resolution


@pytest.mark.parametrize(
    "weights", [[2**64 - 1, -1], [2**63, -(2**63)], [2**63 + 5, 3], [2**60 + 1, 0.5], [2**64 - 1, Fraction(1, 3)]]
)
def test_numbers_of_a_list_are_kept_where_numpy_would_round_them(weights):
    expected = hk.Hamiltonian({("v0", "v1"): weights[0], ("v1", "v2"): weights[1]}, domain="spin")
    assert [value for _, value in expected.terms()] == [Fraction(weight) for weight in weights]
    assert hk.Hamiltonian.from_arrays([[[0, 1], [1, 2]]], [weights], domain="spin") == expected
