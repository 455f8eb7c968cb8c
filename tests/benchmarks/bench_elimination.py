"""Bucket elimination: table entries per second beside the bare rate of adding tables; predicted beside spent time.

Run from the top of the repository: ``python -m tests.benchmarks.bench_elimination``.
The models are parity equations with a planted solution (3-local, sparse) and square strips.
"""

from __future__ import annotations

from time import perf_counter

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.elimination import draw_ground_states, ground_states, low_levels, predicted_cost
from hubokit.spectrum.elimination_tables import Problem, eliminate


def parity(variables: int, equations: int, seed: int) -> Hamiltonian:
    chance = np.random.default_rng(seed)
    triples = {tuple(sorted(chance.choice(variables, 3, replace=False).tolist())) for _ in range(equations)}
    members = np.array(sorted(triples))
    solution = chance.choice([-1, 1], variables)
    return Hamiltonian.from_arrays([members], [-solution[members].prod(axis=1)], domain="spin", size=variables)


def strip(width: int, length: int, seed: int) -> Hamiltonian:
    site = np.arange(width * length).reshape(length, width)
    across = np.stack([site[:, :-1].ravel(), site[:, 1:].ravel()], axis=1)
    along = np.stack([site[:-1].ravel(), site[1:].ravel()], axis=1)
    bonds = np.concatenate([across, along])
    weights = np.random.default_rng(seed).choice([-1, 1], len(bonds))
    return Hamiltonian.from_arrays([bonds], [weights], domain="spin", size=width * length)


def bare_rate() -> float:
    """Additions a second of one table of 2**20 entries to another, the best of several."""
    one, other = np.ones(1 << 20, np.int32), np.ones(1 << 20, np.int32)
    spent = []
    for _ in range(20):
        begun = perf_counter()
        np.add(one, other, out=one)
        spent.append(perf_counter() - begun)
    return len(one) / min(spent)


def timed(name: str, action: object) -> float:
    begun = perf_counter()
    result = action()  # type: ignore[operator]
    spent = perf_counter() - begun
    print(f"  {name}: {spent:.2f} s{'' if result is None else f', {result}'}")
    return spent


def main() -> None:
    ground_states(strip(16, 4, 0), limit=1)  # compiles
    low_levels(strip(16, 4, 0), 2, limit=1)
    bare = bare_rate()
    models = {f"parity n={n} m={m}": parity(n, m, 0) for n, m in ((150, 75), (300, 120), (300, 150))}
    models |= {f"strip {w} x {length}": strip(w, length, 0) for w, length in ((8, 60), (16, 20), (20, 15))}
    for name, H in models.items():
        begun = perf_counter()
        cost = predicted_cost(H)
        assert cost.order is not None
        print(f"{name}: {cost}, {cost.entries:,} entries; order found in {perf_counter() - begun:.2f} s")
        problem, order = Problem(H.domain, H.size, H.blocks), cost.order
        spent = timed("energies alone", lambda problem=problem, order=order: eliminate(problem, order) and None)
        rate = cost.entries / spent
        print(f"    {rate:.3g} entries/s, bare additions {bare:.3g}/s, ratio {rate / bare:.2f}")
        whole = timed("ground level, count and gap", lambda H=H, cost=cost: ground_states(H, limit=0, cost=cost))
        print(f"    predicted {cost.seconds:.2f} s, ratio {whole / cost.seconds:.2f}")
        timed("with 1,000 first states", lambda H=H, cost=cost: ground_states(H, limit=1000, cost=cost) and None)
        timed("100 random draws", lambda H=H, cost=cost: draw_ground_states(H, 100, cost=cost).shape)
        two = predicted_cost(H, 2)
        spent = timed(
            "two levels with counts", lambda H=H: [x.degeneracy.bit_length() for x in low_levels(H, 2, limit=0)]
        )
        print(f"    predicted {two.seconds:.2f} s, ratio {spent / two.seconds:.2f}")


if __name__ == "__main__":
    main()
