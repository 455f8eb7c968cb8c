"""States per second of the neighbourhood walk, beside the bare rate of vector additions in the same run.

Run from the top of the repository: ``python -m tests.benchmarks.bench_neighbourhood [variables terms centres]``.
The bare rate adds the same rows of second derivatives to a vector, over the same lengths, and does nothing else.
"""

from __future__ import annotations

import sys
from time import perf_counter
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.balls import centres_of
from hubokit.spectrum.neighbourhood import neighbourhood
from hubokit.spectrum.neighbourhood_walk import walked
from hubokit.spectrum.recentring import recentred, trie_of


@njit(nogil=True)  # type: ignore[untyped-decorator]
def add_all_rows(rows, vector, out):  # type: ignore[no-untyped-def]
    """One addition a pair i < k, as the walk at radius 2 makes them."""
    size = len(vector)
    for i in range(size - 1):
        row = rows[i]
        for k in range(i + 1, size):
            out[k] = vector[k] + row[k]
    return out[size - 1]


@njit(nogil=True)  # type: ignore[untyped-decorator]
def add_all_rows_to_all(rows, vector, out):  # type: ignore[no-untyped-def]
    """One addition a triple i < j < k, as the walk at radius 3 makes them."""
    size = len(vector)
    for i in range(size - 1):
        for j in range(i + 1, size - 1):
            row = rows[j]
            for k in range(j + 1, size):
                out[k] = vector[k] + row[k]
    return out[size - 1]


def dense_cubic(variables: int, terms: int, targets: NDArray[np.int8]) -> Hamiltonian:
    """A design in which each target is deep: on random triples, minus the sum of the targets' products."""
    chance = np.random.default_rng(0)
    triples = np.sort(chance.integers(0, variables, (terms, 3)), axis=1)
    triples = triples[(triples[:, 0] < triples[:, 1]) & (triples[:, 1] < triples[:, 2])]
    weights = sum(-target[triples].prod(axis=1, dtype=np.int64) for target in targets)
    return Hamiltonian.from_arrays([triples], [weights], domain="spin", size=variables)


def best_of(action: Any, times: int = 3) -> float:
    durations = []
    for _ in range(times):
        begun = perf_counter()
        action()
        durations.append(perf_counter() - begun)
    return min(durations)


def main() -> None:
    variables, terms, centres = [int(a) for a in sys.argv[1:4]] or [1000, 1_000_000, 20]
    chance = np.random.default_rng(1)
    states = chance.choice(np.array([-1, 1], np.int8), (centres, variables))
    H = dense_cubic(variables, terms, states)
    print(f"{H!r}, {centres} centres")
    kind: type[Any] = np.int32 if H.weight_bound < 2**30 else np.int64
    for radius in (2, 3):
        trie = trie_of(H.size, H.blocks, radius)
        begun = perf_counter()
        flips = recentred(trie, H.blocks, states[0], H.domain, kind)
        recentring = perf_counter() - begun
        rows, vector = flips.rows, flips.values[1 : 1 + H.size].copy()
        out = np.zeros_like(vector)
        bare_loop = add_all_rows if radius == 2 else add_all_rows_to_all
        bare_loop(rows[:4, :4].copy(), vector[:4], out[:4])
        around = centres_of(states, H.domain, radius, False)
        energies = H.integer_energies(states)
        job = (flips, around, 0, (0, H.size), int(energies.max()), 100)
        walked(flips, around, 0, (0, 1), int(energies.max()), 100)
        count = around.visits // len(states)
        times = 5 if radius == 2 else 1
        bare = count / best_of(lambda loop=bare_loop, r=rows, v=vector, o=out: loop(r, v, o), times)  # type: ignore[misc]
        walk = count / best_of(lambda job=job: walked(*job), times)  # type: ignore[misc]
        print(
            f"radius {radius}, one centre, one core, {np.dtype(kind)}: {count:,} states; "
            f"re-centring {recentring:.3f} s"
        )
        print(f"  bare additions {bare:.3g}/s, walk {walk:.3g} states/s, ratio {walk / bare:.2f}")
        begun = perf_counter()
        look = neighbourhood(H, states, radius)
        spent = perf_counter() - begun
        print(f"  all {centres} centres with re-centring: {look.states:,} states in {spent:.2f} s", end=", ")
        print(f"{look.states / spent:.3g} states/s; {look.at_or_below:,} at or below the highest centre")


if __name__ == "__main__":
    main()
