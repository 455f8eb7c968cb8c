"""Supposed right settings of a cluster's auxiliaries as functions of a few guards, for the proof by shared bounds.

Nothing here proves anything: states are drawn, each is brought to a local minimum by single flips, and every
auxiliary is fitted by a function of its few heaviest neighbours, setting by setting by majority. A wrong
candidate only fails to prove.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from hubokit.model.states import from_bits, to_bits
from hubokit.projection.guards import Rules
from hubokit.projection.search import local_minima
from hubokit.projection.shared_bounds import Candidate, FlipProblem
from hubokit.projection.structure import Integers, Positions, Structure

SAMPLES = 512
MOST = 4
"""Guards tried for one auxiliary."""


def known_samples(structure: Structure, rounds: Sequence[Sequence[Rules]], columns: Positions) -> Integers:
    """Bits of the given variables, shape (SAMPLES, v): originals at random, decided auxiliaries by their rules."""
    rng = np.random.default_rng(0)
    states = np.zeros((SAMPLES, len(structure.is_auxiliary)), np.int8)
    states[:, structure.originals] = from_bits(
        rng.integers(0, 2, (SAMPLES, len(structure.originals))), structure.domain
    )
    for rules in rounds:
        for one in rules:
            states[:, one.auxiliaries] = from_bits(
                one.bits(to_bits(states[:, one.guards], structure.domain)), structure.domain
            )
    return to_bits(states[:, columns], structure.domain).astype(np.int64)


def fitted(problem: FlipProblem, known_bits: Integers) -> Candidate:
    """A candidate from local minima at the sampled states."""
    fields = problem.start + known_bits.astype(problem.linear.dtype) @ problem.linear.T
    bits = local_minima(fields, problem.pair)[0].astype(np.int64)
    guards, functions = [], []
    for i in range(len(problem.auxiliaries)):
        weight = np.abs(problem.linear[i])
        heaviest = [int(k) for k in np.argsort(-weight, kind="stable")[:MOST] if weight[k]]
        chosen: tuple[tuple[int, ...], Integers] = ((), np.zeros(1, np.int64))
        fewest = len(bits) + 1
        for g in range(len(heaviest) + 1):
            columns = tuple(sorted(heaviest[:g]))
            function, misses = _majority(known_bits[:, columns], bits[:, i])
            # One more guard must explain clearly more.
            if misses < fewest - len(bits) // 50:
                chosen, fewest = (columns, function), misses
        guards.append(chosen[0])
        functions.append(chosen[1])
    return Candidate(tuple(guards), tuple(functions))


def _majority(guard_bits: Integers, wanted: Integers) -> tuple[Integers, int]:
    g = guard_bits.shape[1]
    index = guard_bits @ (1 << np.arange(g - 1, -1, -1)) if g else np.zeros(len(wanted), np.int64)
    ones = np.bincount(index, weights=wanted, minlength=1 << g).astype(np.int64)
    total = np.bincount(index, minlength=1 << g)
    function = (2 * ones > total).astype(np.int64)
    return function, int(np.where(function == 1, total - ones, ones).sum())
