"""Mutants with the small-model paths switched off: the paths of large models are held to brute force."""

import importlib.util
import random
import sys
from pathlib import Path

import pytest

import hubokit.validation.by_comparison as comparison
import hubokit.validation.by_exhaustion as exhaustion
import hubokit.validation.by_levels as levels
import hubokit.validation.tables as tables
from hubokit.errors import LimitError
from hubokit.validation.check import check
from hubokit.validation.claims import asked_claims

PLACE = Path(__file__).parent.parent / "benchmarks" / "bench_mutations.py"
_spec = importlib.util.spec_from_file_location("bench_mutations_paths", PLACE)
program = importlib.util.module_from_spec(_spec)
sys.modules["bench_mutations_paths"] = program
_spec.loader.exec_module(program)


def refuse(*_arguments):
    raise LimitError("switched off for the test")


def close_tables(monkeypatch):
    monkeypatch.setattr(tables, "MODEL_LIMIT", -1)
    monkeypatch.setattr(tables, "STATES_LIMIT", -1)


def close_comparison(monkeypatch):
    close_tables(monkeypatch)
    monkeypatch.setattr(comparison, "by_comparison", refuse)


def leave_blocks(monkeypatch):
    monkeypatch.setattr(tables, "MODEL_LIMIT", -1)
    monkeypatch.setattr(comparison, "by_comparison", refuse)


def close_all(monkeypatch):
    close_comparison(monkeypatch)
    monkeypatch.setattr(exhaustion, "tables_by_blocks", refuse)
    monkeypatch.setattr(levels, "ENUMERABLE", -1)
    monkeypatch.setattr(levels, "SPARSE_TERMS", -1)


def judged(evidence, seed, number=120):
    rng = random.Random(seed)
    for _ in range(number // 8):
        for mutant in program.mutants_of(program.random_reduction(rng), rng, 8):
            try:
                verdict = check(mutant.reduction, evidence=evidence)
            except LimitError:  # asked for by name and refused, which a claim about every state may be
                assert evidence != "auto"
                assert not {"ground-states", "ground-energy"} & set(asked_claims(None, mutant.reduction.keep))
                continue
            yield mutant, program.truth(mutant.reduction), verdict


@pytest.mark.parametrize(
    ("close", "evidence"),
    [
        (close_tables, "exhaustion"),
        (close_tables, "auto"),
        (close_comparison, "exhaustion"),
        (close_comparison, "auto"),
        (leave_blocks, "exhaustion"),
        (close_all, "auto"),
    ],
)
def test_no_path_of_large_models_is_wrong(monkeypatch, close, evidence):
    close(monkeypatch)
    methods, verdicts = set(), 0
    for mutant, known, verdict in judged(evidence, seed=31):
        verdicts += 1
        assert program.faults(mutant, verdict, known, complete=False) == []
        methods |= {claim.method for claim in verdict.claims.values()}
    assert len(methods) > 1
    assert verdicts >= 40


def test_ground_states_are_settled_without_tables(monkeypatch):
    close_comparison(monkeypatch)
    for _, known, verdict in judged("auto", seed=32):
        claim = verdict.claims["ground-states"]
        assert claim.status == ("proved" if known.claims["ground-states"] else "refuted")
