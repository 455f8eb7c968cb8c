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
from hubokit.spectrum.neighbourhood import _rows, neighbourhood, walked
from hubokit.spectrum.recentring import flip_coefficients, trie_of


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


def dense_cubic(variables: int, terms: int, seed: int = 0) -> Hamiltonian:
    """Random cubic spin terms, with fields and all pairs."""
    chance = np.random.default_rng(seed)
    triples = np.sort(chance.integers(0, variables, (terms, 3)), axis=1)
    triples = triples[(triples[:, 0] < triples[:, 1]) & (triples[:, 1] < triples[:, 2])]
    pairs = np.array(np.triu_indices(variables, 1)).T
    return Hamiltonian.from_arrays(
        [triples, pairs],
        [chance.choice([-2, -1, 1, 2], len(triples)), chance.integers(-3, 4, len(pairs))],
        domain="spin",
        size=variables,
    )


def descended(H: Hamiltonian, count: int, seed: int) -> NDArray[np.int8]:
    """States from which some descent was made, so that centres are low as targets are."""
    chance = np.random.default_rng(seed)
    trie = trie_of(H.size, H.blocks, 1)
    states = chance.choice(np.array([-1, 1], np.int8), (count, H.size))
    for state in states:
        for _ in range(60):
            gains = flip_coefficients(trie, H.blocks, state, H.domain, np.int64)[1:]
            lowering = np.argsort(gains)[:20]
            state[lowering[gains[lowering] < 0][: max(1, len(lowering) // 4)]] *= -1
    return states


def best_of(action: Any, times: int = 3) -> float:
    durations = []
    for _ in range(times):
        begun = perf_counter()
        action()
        durations.append(perf_counter() - begun)
    return min(durations)


def main() -> None:
    variables, terms, centres = [int(a) for a in sys.argv[1:4]] or [1000, 1_000_000, 20]
    H = dense_cubic(variables, terms)
    states = descended(H, centres, 1)
    print(f"{H!r}, {centres} centres")
    kind: type[Any] = np.int32 if H.weight_bound < 2**30 else np.int64
    for radius in (2, 3):
        trie = trie_of(H.size, H.blocks, radius)
        values = flip_coefficients(trie, H.blocks, states[0], H.domain, kind)
        rows, vector = _rows(trie, values, radius), values[1 : 1 + H.size].copy()
        out = np.zeros_like(vector)
        bare_loop = add_all_rows if radius == 2 else add_all_rows_to_all
        bare_loop(rows[:4, :4].copy(), vector[:4], out[:4])
        around = centres_of(states, H.domain, radius, False)
        energies = H.integer_energies(states)
        job = (trie, values, around, 0, (0, H.size), int(energies.max()), 100)
        walked(trie, values, around, 0, (0, 1), int(energies.max()), 100)
        count = around.visits // len(states)
        times = 5 if radius == 2 else 1
        bare = count / best_of(lambda loop=bare_loop, r=rows, v=vector, o=out: loop(r, v, o), times)  # type: ignore[misc]
        walk = count / best_of(lambda job=job: walked(*job), times)  # type: ignore[misc]
        print(f"radius {radius}, one centre, one core, {np.dtype(kind)}: {count:,} states")
        print(f"  bare additions {bare:.3g}/s, walk {walk:.3g} states/s, ratio {walk / bare:.2f}")
        begun = perf_counter()
        look = neighbourhood(H, states, radius)
        spent = perf_counter() - begun
        print(f"  all {centres} centres with re-centring: {look.states:,} states in {spent:.2f} s", end=", ")
        print(f"{look.states / spent:.3g} states/s; {look.at_or_below:,} at or below the highest centre")


if __name__ == "__main__":
    main()
