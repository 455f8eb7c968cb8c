"""The second checker: it accepts every honest verdict and rejects each of a set of forged ones."""

import ast
import copy
from dataclasses import replace
from fractions import Fraction
from itertools import product
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import hubokit.validation.audit as audit_module
from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction
from hubokit.validation.audit import audit
from hubokit.validation.audit_arithmetic import Work, interpolated, least, least_and_count, value_at
from hubokit.validation.audit_models import digest, read_model
from hubokit.validation.check import check


@pytest.fixture(scope="module")
def audited(by_hand):
    def run(reduction, change=None, verdict=None):
        fields = by_hand["written"](check(reduction) if verdict is None else verdict)
        if change is not None:
            change(fields)
        return audit(fields, by_hand["document"](reduction.source), by_hand["document"](reduction.model))

    return run


@pytest.fixture(scope="module")
def shared(by_hand):
    reduction = by_hand["paired"](12, 0.65)
    return reduction, check(reduction)


def chained(seed=0, thirds=14):
    """A pair variable in many cubic terms: too many touched variables for a table, decided by its two guards."""
    rng = np.random.default_rng(seed)
    names = [f"t{i}" for i in range(thirds)]
    weights = [int(w) for w in rng.integers(1, 6, thirds) * rng.choice([-1, 1], thirds)]
    E = Hamiltonian({("a", "b", t): w for t, w in zip(names, weights, strict=True)}, "boolean")
    M = 1 + sum(abs(w) for w in weights)
    terms = {("y", t): w for t, w in zip(names, weights, strict=True)}
    terms |= {("a", "b"): M, ("a", "y"): -2 * M, ("b", "y"): -2 * M, ("y",): 3 * M}
    return Reduction(E, Hamiltonian(terms, "boolean", labels=["a", "b", *names, "y"]), ["y"])


def symmetric(size):
    """A negative monomial of many variables with one tie-free auxiliary: settled by counting."""
    names = [f"x{i}" for i in range(size)]
    terms = {("y",): 2 * size - 1} | {(x, "y"): -2 for x in names}
    return Reduction(Hamiltonian({tuple(names): -1}, "boolean"), Hamiltonian(terms, "boolean"), ["y"])


def step_kinds(reduction, by_hand):
    (piece,) = [p for p in by_hand["written"](check(reduction))["evidence"] if p["kind"] == "projection"]
    return {step["step"] for step in piece["certificate"]["steps"]}


class TestHonestVerdicts:
    def test_tables_counting_and_guards_are_followed(self, by_hand, audited):
        made = {
            "tables": by_hand["cubic"](strict=True),
            "guards": chained(),
            "counting": symmetric(60),
        }
        for kind, reduction in made.items():
            assert kind in step_kinds(reduction, by_hand)
            report = audited(reduction)
            assert report.accepted, str(report)
            assert report.exit_code == 0

    @pytest.mark.parametrize("method", ["auto", "pair-cover", "term-by-term"])
    def test_our_own_reductions_of_a_four_local_spin_model_are_accepted(self, by_hand, audited, method):
        report = audited(reduce(by_hand["autocorrelation"](8), method=method))
        assert report.accepted, str(report)

    def test_pair_variables_proved_by_shared_bounds_are_accepted(self, by_hand, shared, audited):
        reduction, verdict = shared
        assert step_kinds(reduction, by_hand) == {"shared"}
        report = audited(reduction, verdict=verdict)
        assert report.accepted, str(report)

    def test_refutations_are_re_checked_too(self, by_hand, audited):
        for reduction in (by_hand["cubic"](strict=False), by_hand["rosenberg"](1)):
            report = audited(reduction)
            assert report.accepted, str(report)

    def test_both_domains_both_conventions_and_every_origin(self, audited):
        for convention in ("1-2x", "2x-1"):
            E = Hamiltonian({("a", "b"): 1, ("c",): 2, (): "1/3"}, "spin", convention=convention)
            moved = E.substituted({"a": ("not", "p"), "b": "q"}).in_domain("boolean")
            assert audited(Reduction(E, moved, [], origin={"a": ("not", "p"), "b": "q"})).accepted
            fixed = E.substituted({"a": 1, "b": "c"})
            assert audited(Reduction(E, fixed, [], origin={"a": 1, "b": "c"})).accepted

    def test_found_scale_and_shift_are_sought_again(self, by_hand, audited):
        made = by_hand["cubic"](strict=True)
        assert audited(replace(made, model=Fraction(5, 2) * made.model - 1)).accepted

    def test_a_large_exhaustion_is_not_re_checked_and_not_accepted(self, by_hand, audited):
        rng = np.random.default_rng(1)
        pairs = np.array([(i, j) for i in range(18) for j in range(i)])
        E = Hamiltonian.from_arrays([pairs], [rng.integers(-3, 4, len(pairs))], "spin", size=18)
        reduction = Reduction(E, E, [])
        report = audited(reduction, verdict=check(reduction, evidence="exhaustion"))
        assert {item.result for item in report.items if item.name == "ground-states"} == {"not re-checked"}
        assert "2^18" in str(report)
        assert not report.accepted
        assert not report.rejected
        assert report.exit_code == 3

    def test_a_certificate_left_out_for_its_size_is_made_again(self, by_hand, audited):
        rng = np.random.default_rng(2)
        triples, weights = rng.integers(0, 300, (600, 3)), rng.integers(-4, 5, 600)
        reduction = reduce(Hamiltonian.from_arrays([triples], [weights], "spin", size=300), method="term-by-term")

        def leave_out(fields):
            certificate = projection_piece(fields)["certificate"]
            certificate.update(omitted="size", counts={})
            for name in ("steps", "auxiliaries"):
                certificate.pop(name, None)

        assert audited(reduction, leave_out).accepted

        def raise_multiplicity(fields):
            leave_out(fields)
            projection_piece(fields)["certificate"]["multiplicity"] = 2

        assert audited(reduction, raise_multiplicity).rejected

    def test_tested_claims_are_not_accepted(self, by_hand, audited):
        made = by_hand["cubic"](strict=True)
        report = audited(made, verdict=check(made, evidence="neighbourhood", radius=1))
        assert report.exit_code == 3


def projection_piece(fields):
    return next(piece for piece in fields["evidence"] if piece["kind"] == "projection")


def first_step(fields, kind):
    return next(step for step in projection_piece(fields)["certificate"]["steps"] if step["step"] == kind)


def raise_claim(fields):
    fields["claims"]["one-to-one"].update(status="proved", witness=None)


def lower_claim(fields):
    fields["claims"]["ground-states"]["status"] = "refuted"


def swap_digest(fields):
    fields["source_digest"] = fields["model_digest"]


def change_scale(fields):
    fields["scale"] = "2"


def alter_table(fields):
    first_step(fields, "tables")["shapes"][0]["minimum"][3] += 1


def alter_multiplicity(fields):
    first_step(fields, "tables")["shapes"][0]["multiplicity"] = 1
    projection_piece(fields)["certificate"]["multiplicity"] = 1


def alter_witness(fields):
    fields["claims"]["one-to-one"]["witness"]["source_energy"] = "17"


def drop_auxiliary(fields):
    fields["evidence"][0]["auxiliaries"] = []
    fields["evidence"][0]["origin"] = {}


def negate_factor(fields):
    first_step(fields, "tables")["clusters"][0][1] = -1


class TestForgedVerdicts:
    @pytest.mark.parametrize(
        "forge",
        [
            raise_claim,
            lower_claim,
            swap_digest,
            change_scale,
            alter_table,
            alter_multiplicity,
            alter_witness,
            negate_factor,
        ],
    )
    def test_a_forged_verdict_on_a_gadget_with_ties_is_rejected(self, by_hand, audited, forge):
        made = by_hand["cubic"](strict=False)
        assert audited(made).accepted
        assert audited(made, forge).rejected

    def test_auxiliaries_passed_off_as_originals_are_bad_input(self, by_hand, audited):
        with pytest.raises(InputError, match="originals"):
            audited(by_hand["cubic"](strict=False), drop_auxiliary)

    @pytest.mark.parametrize("forge", ["margin", "function", "guards", "missing", "twice", "order"])
    def test_a_forged_guard_is_rejected(self, audited, forge):
        def change(fields):
            step = first_step(fields, "guards")
            certificate = projection_piece(fields)["certificate"]
            if forge == "margin":
                step["margins"][0] += 1
            elif forge == "function":
                step["functions"][0] = "0000"
            elif forge == "guards":
                step["guards"][0] = [0, 2]
            elif forge == "missing":
                certificate["steps"] = []
            elif forge == "twice":
                certificate["steps"].append(copy.deepcopy(step))
            else:
                step["guards"][0] = [step["auxiliaries"][0], 0]

        made = chained()
        assert audited(made).accepted
        assert audited(made, change).rejected

    @pytest.mark.parametrize("forge", ["slack", "function", "shares", "guards"])
    def test_a_forged_shared_bound_is_rejected(self, shared, audited, forge):
        def change(fields):
            step = first_step(fields, "shared")
            if forge == "slack":
                step["slacks"][0] = str(Fraction(step["slacks"][0]) + 1)
            elif forge == "function":
                step["functions"][0] = "0000"
            elif forge == "shares":
                step["shares"] = [[0, 1, b, c, "3/2"] for b in (0, 1) for c in (0, 1)]
            else:
                step["guards"][0] = step["guards"][1]

        reduction, verdict = shared
        assert audited(reduction, change, verdict).rejected

    def test_a_weak_penalty_passed_off_as_strong_is_rejected(self, by_hand, audited):
        strong, weak = chained(), chained()
        terms = dict(weak.model.terms())
        for key in terms:
            if set(key) <= {"a", "b", "y"}:
                terms[key] = terms[key] / 8
        weak = replace(weak, model=Hamiltonian(terms, "boolean", labels=weak.model.labels))
        fields = by_hand["written"](check(strong))
        fields["model_digest"] = weak.model.digest
        report = audit(fields, by_hand["document"](weak.source), by_hand["document"](weak.model))
        assert report.rejected

    @pytest.mark.parametrize("place", ["minimum", "signs", "classes", "coupling"])
    def test_a_forged_count_is_rejected(self, audited, place):
        def change(fields):
            shape = first_step(fields, "counting")["shapes"][0]
            if place == "minimum":
                shape["minimum"][-1] -= 1
            elif place == "signs":
                shape["signs"][0] = -1
            elif place == "classes":
                shape["classes"][0] = shape["classes"][0][1:]
            else:
                shape["coupling"][0][0] -= 1

        assert audited(symmetric(21), change).rejected

    def test_clusters_of_hostile_size_are_not_worked_through(self, audited):
        rng = np.random.default_rng(3)
        thirds = [f"x{i}" for i in range(18)]
        terms = {(x, "y"): int(w) for x, w in zip(thirds, rng.permutation(18) + 1, strict=True)} | {("y",): -40}
        E = Hamiltonian({(x,): 1 for x in thirds}, "spin")
        reduction = Reduction(E, E + Hamiltonian(terms, "spin", labels=[*thirds, "y"]), ["y"])

        def alone(fields):
            steps = [
                {"step": "states", "auxiliaries": [18], "touched": list(range(18)), "minimum": [], "multiplicity": 1}
            ]
            piece = {"kind": "projection", "certificate": {"steps": steps, "multiplicity": 1}}
            fields["evidence"] = [fields["evidence"][0], piece]

        report = audited(reduction, alone)
        assert "a cluster of 1 auxiliaries over 18 variables" in str(report)
        assert not report.accepted

    def test_tables_of_hostile_size_are_rejected_at_once(self, audited):
        def many(fields):
            shape = first_step(fields, "counting")["shapes"][0]
            shape["field"], shape["coupling"] = [1, 1], [[1], [1]]

        def wide(fields):
            shape = {"field": [0], "coupling": [[0] * 40], "between": [], "minimum": [0], "multiplicity": 1}
            steps = [{"step": "tables", "shapes": [shape], "clusters": []}]
            projection_piece(fields)["certificate"]["steps"] = steps

        def classes(fields):
            shape = first_step(fields, "counting")["shapes"][0]
            shape["classes"] = [list(range(1000))] * 60

        with pytest.raises(InputError):
            audited(symmetric(21), many)
        for change in (wide, classes):
            assert audited(symmetric(21), change).rejected

    @pytest.mark.parametrize("fields", [{}, {"evidence": []}, {"evidence": 3}])
    def test_what_is_no_verdict_is_bad_input(self, by_hand, fields):
        made = by_hand["cubic"](strict=True)
        with pytest.raises(InputError):
            audit(fields, by_hand["document"](made.source), by_hand["document"](made.model))


def test_the_audit_computes_the_same_digest_from_the_document_alone(by_hand):
    for H in (
        Hamiltonian({("b", "a"): "1/2", ("é",): 10**30, (): -3}, "spin"),
        Hamiltonian({("x10", "x9", "x1"): -2, ("x9",): "4/6"}, "boolean"),
    ):
        assert digest(read_model(by_hand["document"](H))) == H.digest


def test_tables_turn_into_polynomials_by_the_definition():
    assert interpolated([1, 2, 3, 5], [[7], [9]], "boolean", Work()) == {(): 1, (9,): 1, (7,): 2, (7, 9): 1}
    assert interpolated([1, 1, 1, -1], [[0], [1]], "spin", Work()) == {
        (): Fraction(1, 2),
        (1,): Fraction(1, 2),
        (0,): Fraction(1, 2),
        (0, 1): Fraction(-1, 2),
    }


@given(st.data())
def test_branch_and_bound_agrees_with_listing_every_setting(data):
    n = data.draw(st.integers(0, 7))
    numbers = st.integers(-6, 6)
    linear = data.draw(st.lists(numbers, min_size=n, max_size=n))
    quadratic = [[0] * n for _ in range(n)]
    for i in range(n):
        for k in range(i):
            quadratic[i][k] = quadratic[k][i] = data.draw(numbers)
    energies = [
        sum(linear[i] * b[i] for i in range(n))
        + sum(quadratic[i][k] * b[i] * b[k] for i in range(n) for k in range(i))
        for b in product((0, 1), repeat=n)
    ]
    assert least_and_count(linear, quadratic, Work()) == (min(energies), energies.count(min(energies)))


def test_the_least_value_of_a_sum_is_found_bit_by_bit():
    rng = np.random.default_rng(0)
    for _ in range(20):
        functions = [
            (tuple(sorted(rng.choice(6, 3, replace=False).tolist())), rng.integers(-9, 9, 8).tolist())
            for _ in range(5)
        ]
        states = [[n >> (5 - i) & 1 for i in range(6)] for n in range(64)]
        sums = [sum(table[int("".join(str(x[b]) for b in bits), 2)] for bits, table in functions) for x in states]
        assert least(functions, Work()) == min(sums)


@given(st.data())
def test_functions_of_counts_turn_into_polynomials_by_the_definition(data):
    domain = data.draw(st.sampled_from(["spin", "boolean"]))
    classes = data.draw(st.sampled_from([[[0, 1, 2]], [[2, 0], [1]], [[3], [0, 1], [2]], []]))
    grid = list(product(*(range(len(one) + 1) for one in classes)))
    table = data.draw(st.lists(st.integers(-9, 9), min_size=len(grid), max_size=len(grid)))
    poly, values = interpolated(table, classes, domain, Work()), (1, -1) if domain == "spin" else (0, 1)
    for bits in product((0, 1), repeat=4):
        counts = tuple(sum(bits[i] for i in one) for one in classes)
        assert value_at(poly, [values[bit] for bit in bits]) == table[grid.index(counts)]


def test_the_audit_imports_nothing_of_hubokit_but_itself_and_the_errors():
    for path in Path(audit_module.__file__).parent.glob("audit*.py"):
        tree = ast.parse(path.read_text())
        names = {node.module for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)}
        names |= {alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names}
        ours = {name for name in names if name.startswith("hubokit")}
        assert all(name == "hubokit.errors" or name.startswith("hubokit.validation.audit") for name in ours)
        assert not names & {"numpy", "scipy", "networkx"}
