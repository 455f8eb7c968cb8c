"""Projection of large models: seconds, peak memory and what was proved.

Run from the top level: ``python -m tests.benchmarks.bench_projection [number of terms]``. Four models of
random cubic structure over 20,000 variables: one gadget for each term (a few shapes), the same with weights
that share no shape, shared pairs with computed penalties, and pairs of pairs coupled to each other.
"""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.project import project

VARIABLES = 20_000


def gadgets(count: int, rng: np.random.Generator) -> tuple[Hamiltonian, int]:
    """min over a of w a (5 - 2 S) for each triple: -w x1 x2 x3."""
    triples = np.sort(rng.integers(0, VARIABLES, (count, 3)), axis=1)
    triples = triples[(np.diff(triples, axis=1) > 0).all(axis=1)]
    count = len(triples)
    weights = rng.integers(1, 100, count)
    y = VARIABLES + np.arange(count)
    pairs = np.concatenate([np.stack([triples[:, j], y], axis=1) for j in range(3)])
    members, numbers = [y[:, None], pairs], [5 * weights, np.tile(-2 * weights, 3)]
    return Hamiltonian.from_arrays(members, numbers, domain="boolean", size=VARIABLES + count), count


def foreign(count: int, rng: np.random.Generator) -> tuple[Hamiltonian, int]:
    """One spin auxiliary for each triple with random couplings: no two clusters alike."""
    y = VARIABLES + np.arange(count)
    triples = rng.integers(0, VARIABLES, (count, 3))
    pairs = np.concatenate([np.stack([triples[:, j], y], axis=1) for j in range(3)])
    numbers = [rng.integers(-50, 51, count), rng.integers(-50, 51, 3 * count)]
    return Hamiltonian.from_arrays([y[:, None], pairs], numbers, domain="spin", size=VARIABLES + count), count


def shared_pairs(count: int, rng: np.random.Generator) -> tuple[Hamiltonian, int]:
    """Cubic terms through an eighth as many pairs, each with a penalty from its own terms."""
    return _pairs(count, count // 8, rng, lambda own, pairs: rng.integers(0, VARIABLES, count))


def coupled_pairs(count: int, rng: np.random.Generator) -> tuple[Hamiltonian, int]:
    """Quartic terms as products of two pairs."""
    return _pairs(
        count, count // 8, rng, lambda own, pairs: VARIABLES + (own + rng.integers(1, pairs, count)) % pairs
    )


def _pairs(
    count: int, amount: int, rng: np.random.Generator, partner: Callable[[np.ndarray, int], np.ndarray]
) -> tuple[Hamiltonian, int]:
    pairs = np.sort(rng.integers(0, VARIABLES, (amount, 2)), axis=1)
    pairs = np.unique(pairs[pairs[:, 0] < pairs[:, 1]], axis=0)
    y = VARIABLES + np.arange(len(pairs))
    own = rng.integers(0, len(pairs), count)
    other = partner(own, len(pairs))
    weights = rng.integers(-20, 21, count)
    penalty = np.ones(len(pairs), np.int64)
    np.add.at(penalty, own, np.abs(weights))
    inner = other >= VARIABLES
    np.add.at(penalty, other[inner] - VARIABLES, np.abs(weights[inner]))
    members = np.concatenate(
        [
            pairs,
            np.stack([pairs[:, 0], y], axis=1),
            np.stack([pairs[:, 1], y], axis=1),
            np.stack([other, y[own]], axis=1),
        ]
    )
    numbers = np.concatenate([penalty, -2 * penalty, -2 * penalty, weights])
    size = VARIABLES + len(pairs)
    model = Hamiltonian.from_arrays([y[:, None], members], [3 * penalty, numbers], domain="boolean", size=size)
    return model, len(pairs)


def main() -> None:
    """Print one line for each model."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000
    heads = ("auxiliaries", "built s", "projected s", "terms of P", "m", "peak GB")
    print(f"{'model':14}" + "".join(f"{head:>13}" for head in heads) + "  methods")
    for make in (gadgets, foreign, shared_pairs, coupled_pairs):
        start = time.perf_counter()
        model, auxiliaries = make(count, np.random.default_rng(1))
        built = time.perf_counter()
        found = project(model, model.labels[VARIABLES:])
        done = time.perf_counter()
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
        terms = "open" if found.polynomial is None else f"{len(found.polynomial):,}"
        uniform = "-" if found.uniform_multiplicity is None else str(found.uniform_multiplicity)[:3]
        methods = ", ".join(sorted({summary.method for summary in found.clusters}))
        cells = (f"{auxiliaries:,}", f"{built - start:.1f}", f"{done - built:.1f}", terms, uniform, f"{peak:.2f}")
        print(f"{make.__name__:14}" + "".join(f"{cell:>13}" for cell in cells) + f"  {methods}", flush=True)


if __name__ == "__main__":
    main()
