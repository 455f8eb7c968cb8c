"""Objects of other libraries, there and back."""

from __future__ import annotations

import random
from fractions import Fraction

import dimod
import networkx as nx
import numpy as np
import pytest
import sympy
from dimod.higherorder.polynomial import BinaryPolynomial

from hubokit.errors import InputError, LimitError
from hubokit.exchange.arrays import from_matrix, to_dense, to_sparse
from hubokit.exchange.dimod_bridge import from_dimod, to_bqm, to_polynomial
from hubokit.exchange.networkx_bridge import (
    from_factor_graph,
    from_interaction_graph,
    to_factor_graph,
    to_interaction_graph,
)
from hubokit.exchange.sympy_bridge import from_sympy, to_sympy
from hubokit.model.hamiltonian import Hamiltonian

SEEDS = range(40)


def random_model(seed: int, locality: int) -> Hamiltonian:
    """A model with coefficients that floats hold."""
    draw = random.Random(seed)
    labels = draw.sample(["a", "b 1", "ü", "x3", "d", "e"], draw.randint(1, 6))
    terms = {
        tuple(draw.sample(labels, draw.randint(0, min(locality, len(labels))))): draw.choice([1, -2, "1/4", "0.1", 7])
        for _ in range(8)
    }
    return Hamiltonian(terms, draw.choice(["spin", "boolean"]), labels=labels)


@pytest.mark.parametrize("seed", SEEDS)
def test_a_quadratic_model_goes_to_dimod_and_back(seed: int) -> None:
    model = random_model(seed, 2)
    bqm = to_bqm(model)
    assert from_dimod(bqm) == model
    assert list(bqm.variables) == list(model.labels)
    state = dict.fromkeys(model.labels, 1)
    assert bqm.energy(state) == pytest.approx(float(model.energy(state)))


@pytest.mark.parametrize("seed", SEEDS)
def test_a_model_of_any_locality_goes_to_a_polynomial_and_back(seed: int) -> None:
    model = random_model(seed, 4)
    assert from_dimod(to_polynomial(model)) == model


def test_models_from_dimod_carry_its_change_of_variables() -> None:
    bqm = dimod.BinaryQuadraticModel({"a": 1}, {("a", "b"): -1}, 0.5, "BINARY")
    model = from_dimod(bqm)
    assert model.convention == "2x-1"
    assert model.in_domain("spin") == from_dimod(bqm.change_vartype("SPIN", inplace=False))


def test_dimod_labels_of_any_kind_become_strings_unless_two_coincide() -> None:
    assert from_dimod(dimod.BinaryQuadraticModel({("q", 1): 1}, {}, 0, "SPIN")).labels == ("('q', 1)",)
    with pytest.raises(InputError, match="the same name as strings"):
        from_dimod(BinaryPolynomial({(1,): 1, ("1",): 1}, "SPIN"))


@pytest.mark.parametrize("value", [2**53 + 1, Fraction(1, 3), 10**400])
def test_a_coefficient_that_no_float_holds_is_refused(value: int | Fraction) -> None:
    with pytest.raises(InputError, match="which no float holds exactly; round the model"):
        to_bqm(Hamiltonian({("a",): value}, "spin"))


def test_larger_products_are_refused_where_two_are_held() -> None:
    model = Hamiltonian({("a", "b", "c"): 1}, "spin")
    for way in (to_bqm, to_sparse, to_dense):
        with pytest.raises(InputError, match="products of 3 variables"):
            way(model)


@pytest.mark.parametrize("seed", SEEDS)
def test_matrices_give_energies_and_the_model_back(seed: int) -> None:
    model = random_model(seed, 2)
    for made in (to_sparse(model), to_dense(model)):
        matrix = made.matrix if isinstance(made.matrix, np.ndarray) else made.matrix.toarray()
        assert (np.tril(matrix, -1) == 0).all()
        values = [0, 1] if model.domain == "boolean" else [-1, 1]
        for state in np.random.default_rng(seed).choice(values, (5, model.size)):
            whole = int(state @ matrix @ state + made.fields @ state)
            assert model.energy(state) == made.constant + whole * made.resolution
        back = from_matrix(
            made.matrix,
            made.domain,
            made.fields,
            labels=made.labels,
            resolution=made.resolution,
            constant=made.constant,
        )
        assert back == model


@pytest.mark.parametrize("seed", range(10))
def test_a_spin_matrix_keeps_its_diagonal_free(seed: int) -> None:
    model = random_model(seed, 2).in_domain("spin")
    assert (np.diag(to_dense(model).matrix) == 0).all()
    with pytest.raises(InputError, match="a spin matrix has no diagonal"):
        from_matrix(np.eye(3, dtype=int), "spin")


@pytest.mark.parametrize(
    ("matrix", "fields", "message"),
    [
        (np.zeros((2, 3)), None, "a square matrix is needed"),
        (np.zeros(4), None, "a square matrix is needed"),
        (np.zeros((2, 2)), [1, 2, 3], "2 fields are needed"),
    ],
)
def test_matrices_of_a_wrong_shape_are_refused(matrix: object, fields: list[int] | None, message: str) -> None:
    with pytest.raises(InputError, match=message):
        from_matrix(matrix, "spin", fields)


def test_weights_beyond_int64_do_not_wrap_in_a_matrix() -> None:
    with pytest.raises(LimitError, match="beyond int64"):
        to_sparse(Hamiltonian({("a", "b"): 2**70, ("a",): 1}, "spin"))


@pytest.mark.parametrize("seed", SEEDS)
def test_graphs_give_the_model_back(seed: int) -> None:
    quadratic, model = random_model(seed, 2), random_model(seed, 4)
    assert from_interaction_graph(to_interaction_graph(quadratic)) == quadratic
    assert from_factor_graph(to_factor_graph(model)) == model


def test_the_interaction_graph_joins_variables_that_meet_in_a_term() -> None:
    graph = to_interaction_graph(Hamiltonian({("a", "b", "c"): 1, ("c", "d"): 2, ("a", "b"): 3}, "spin"))
    assert {frozenset(edge) for edge in graph.edges} == {frozenset(pair) for pair in ("ab", "ac", "bc", "cd")}
    assert graph.edges["a", "b"] == {"coupling": 3, "terms": 1}
    with pytest.raises(InputError, match="take the factor graph"):
        from_interaction_graph(graph)


def test_a_graph_from_elsewhere_needs_a_domain_and_couplings() -> None:
    graph = nx.Graph([(1, 2)])
    with pytest.raises(InputError, match="does not say its domain"):
        from_interaction_graph(graph)
    with pytest.raises(InputError, match="edge 1 2: an edge joins two nodes and carries a coupling"):
        from_interaction_graph(graph, "spin")


@pytest.mark.parametrize("seed", SEEDS)
def test_sympy_expressions_give_the_model_back(seed: int) -> None:
    model = random_model(seed, 4)
    assert from_sympy(to_sympy(model), model.domain, labels=model.labels) == model


def test_powers_are_reduced_by_the_domain() -> None:
    s = sympy.Symbol("s")
    assert from_sympy(s**3 + s**2, "spin") == Hamiltonian({("s",): 1, (): 1}, "spin")
    assert from_sympy(s**3 + s**2, "boolean") == Hamiltonian({("s",): 2}, "boolean")


@pytest.mark.parametrize(
    ("expression", "message"),
    [("sin(s)", "not rational|not a polynomial"), ("s**t", "not a polynomial"), ("pi*s", "not rational")],
)
def test_what_is_no_polynomial_is_refused(expression: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        from_sympy(sympy.sympify(expression), "spin")


def test_a_matrix_of_lists_keeps_integers_that_numpy_would_round() -> None:
    model = from_matrix([[0, 2**64 - 1], [0, -1]], "boolean", [2**63 + 5, 3])
    assert [value for _, value in model.terms()] == [2**63 + 5, 2, 2**64 - 1]
