"""Reductions beside dimod.make_quadratic: auxiliaries, couplers, coefficient ratio, terms a second.

Run ``python -m tests.benchmarks.bench_reduction`` for the short cases, ``... all`` for the long ones too, and a word
for the cases whose name holds it. dimod is given the same terms as a dictionary and a penalty of twice the sum of
absolute weights, which keeps the ground states. Seconds are processor time of one run, so that other work on the
machine disturbs them little.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from itertools import combinations

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.reduction.reduce import reduce


def all_triples(size: int) -> Hamiltonian:
    """All triples with weights 1, 2, 3 in turn, so that no symmetry helps."""
    members = np.array(list(combinations(range(size), 3)))
    return Hamiltonian.from_arrays([members], [1 + np.arange(len(members)) % 3], "boolean", size=size)


def random_cubic(count: int, size: int = 20_000, domain: str = "boolean") -> Hamiltonian:
    """Random cubic terms with weights from -100 to 100."""
    chance = np.random.default_rng(1)
    members = np.sort(chance.integers(0, size, (count, 3)), axis=1)
    return Hamiltonian.from_arrays([members], [chance.integers(-100, 101, count)], domain, size=size)


def pulses(size: int) -> Hamiltonian:
    """Low-autocorrelation binary sequences."""
    rows: dict[int, list[list[int]]] = {0: [], 2: [], 4: []}
    for k in range(1, size):
        for i, j in combinations(range(size - k), 2):
            odd = sorted({i} ^ {i + k} ^ {j} ^ {j + k})
            rows[len(odd)].append(odd)
    members = [np.array(rows[k]).reshape(-1, k) for k in (2, 4)]
    return Hamiltonian.from_arrays(members, [np.full(len(m), 2) for m in members], "spin", size=size)


def random_clauses(size: int, count: int) -> Hamiltonian:
    """Random 3-SAT: broken clauses counted."""
    chance = np.random.default_rng(3)
    terms: dict[tuple[str, ...], int] = {}
    for _ in range(count):
        names = [f"x{i}" for i in sorted(chance.choice(size, 3, replace=False).tolist())]
        signs = chance.integers(0, 2, 3)
        for mask in range(8):
            chosen = [i for i in range(3) if mask >> i & 1]
            if all(i in chosen or signs[i] for i in range(3)):
                key = tuple(names[i] for i in chosen)
                terms[key] = terms.get(key, 0) + (-1) ** sum(int(signs[i]) for i in chosen)
    return Hamiltonian(terms, "boolean", labels=[f"x{i}" for i in range(size)])


def plaquettes(size: int) -> Hamiltonian:
    """Four-body plaquettes of a square grid with random signs."""
    chance = np.random.default_rng(5)
    row, column = np.divmod(np.arange((size - 1) ** 2), size - 1)
    first = row * size + column
    members = np.stack([first, first + 1, first + size, first + size + 1], axis=1)
    return Hamiltonian.from_arrays([members], [chance.choice([-1, 1], len(members))], "spin", size=size * size)


CASES: dict[str, tuple[Callable[[], Hamiltonian], bool]] = {
    "all triples, n = 10": (lambda: all_triples(10), False),
    "all triples, n = 20": (lambda: all_triples(20), False),
    "all triples, n = 30": (lambda: all_triples(30), False),
    "random cubic, 1,000": (lambda: random_cubic(1_000, 200), False),
    "random cubic, 10,000": (lambda: random_cubic(10_000, 2_000), False),
    "random cubic, 100,000": (lambda: random_cubic(100_000), True),
    "random cubic, 1,000,000": (lambda: random_cubic(1_000_000), True),
    "pulses, N = 10": (lambda: pulses(10), False),
    "pulses, N = 16": (lambda: pulses(16), False),
    "pulses, N = 20": (lambda: pulses(20), False),
    "pulses, N = 30": (lambda: pulses(30), True),
    "pulses, N = 40": (lambda: pulses(40), True),
    "3-SAT, 250 / 1,065": (lambda: random_clauses(250, 1_065), False),
    "plaquettes, 30 x 30": (lambda: plaquettes(30), False),
}


def beside_dimod(H: Hamiltonian) -> tuple[float, int, int, float]:
    """Seconds, auxiliaries, couplers and coefficient ratio of dimod.make_quadratic."""
    import dimod

    polynomial = {
        tuple(row): int(weight)
        for block in H.blocks
        for row, weight in zip(block.members.tolist(), block.weights.tolist(), strict=True)
    }
    start = time.process_time()
    made = dimod.make_quadratic(polynomial, 2.0 * H.weight_bound, "SPIN" if H.domain == "spin" else "BINARY")
    seconds = time.process_time() - start
    linear = np.array(list(made.linear.values()))
    quadratic = np.array(list(made.quadratic.values()))
    sizes = np.abs(np.concatenate([linear, quadratic]))
    sizes = sizes[sizes > 0]
    used = {i for block in H.blocks for i in np.unique(block.members).tolist()}
    return seconds, made.num_variables - len(used), len(quadratic[quadratic != 0]), float(sizes.max() / sizes.min())


def main(every: bool, only: str = "") -> None:
    """Print one row a case and preference."""
    print("| case | what | auxiliaries | couplers | ratio | seconds | terms a second |")
    print("|---|---|---|---|---|---|---|")
    for name, (make, is_long) in CASES.items():
        if (is_long and not every) or only not in name:
            continue
        H = make()
        for prefer in ("auxiliaries", "range", "couplers"):
            start = time.process_time()
            R = reduce(H, prefer=prefer)
            seconds = time.process_time() - start
            costs = R.costs
            plan = R.trail.steps[-1].parameters["plan"]["chosen"]["plan"]
            print(
                f"| {name} | {prefer}: {plan} | {costs.auxiliaries:,} | {costs.couplers:,} | "
                f"{float(costs.coefficient_ratio):,.0f} | {seconds:.2f} | {len(H) / seconds:,.0f} |",
                flush=True,
            )
        seconds, auxiliaries, couplers, ratio = beside_dimod(H)
        print(
            f"| {name} | dimod.make_quadratic | {auxiliaries:,} | {couplers:,} | {ratio:,.0f} | {seconds:.2f} | "
            f"{len(H) / seconds:,.0f} |",
            flush=True,
        )


if __name__ == "__main__":
    main("all" in sys.argv[1:], next((word for word in sys.argv[1:] if word != "all"), ""))
