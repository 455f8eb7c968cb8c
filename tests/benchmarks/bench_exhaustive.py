"""Exhaustion beside the machine's own limit: ``python -m tests.benchmarks.bench_exhaustive [--long] [-o FILE]``.

Prints Markdown tables. Every ratio is between two figures of one run, taken by turns, the best of a few trials
each. The limit is the rate of k bare vector additions (numbers in the fastest cache, nothing else done) of the
same integer type on as many threads. Rates count processor time, so that other work on the machine disturbs them
little; seconds are wall time. ``--long`` adds the low-autocorrelation model of length 40.
"""

from __future__ import annotations

import argparse
import itertools
import os
import platform
import subprocess
import sys
import textwrap
import time
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.spectrum.derivatives import Layout, integer_type
from hubokit.spectrum.estimate import workers_of
from hubokit.spectrum.exhaustive import count_local_minima, density_of_states, ground_states, low_levels
from hubokit.spectrum.level_walk import LowestLevels
from hubokit.spectrum.polynomial import polynomial_of
from hubokit.spectrum.walk import VECTOR_BYTES, layout_of

WORKERS = workers_of(None)
TRIALS = 5
NOTE = (
    "Written by `python -m tests.benchmarks.bench_exhaustive --long -o FILE`. Rates count processor time, all cores; "
    "seconds are wall time on a machine that did other work too. The limit is the rate of k bare vector additions in "
    "the fastest cache. A whole call includes reading the model, its symmetries and all tables, some milliseconds "
    "that are most of it below n = 28; the walk alone is the difference between two walks of unlike length."
)


def dense(size: int, locality: int, weight: int, domain: str = "spin", seed: int = 0) -> Hamiltonian:
    """Every product of up to `locality` variables, weights uniform between -weight and weight."""
    rng = np.random.default_rng(seed)
    members = [np.array(list(itertools.combinations(range(size), k))) for k in range(1, locality + 1)]
    weights = [rng.integers(-weight, weight + 1, len(rows)) for rows in members]
    return Hamiltonian.from_arrays(members, weights, domain=domain, size=size)


def sparse(size: int, locality: int, count: int, seed: int = 0) -> Hamiltonian:
    """Fields, and `count` random products, over booleans."""
    rng = np.random.default_rng(seed)
    rows = np.array([rng.choice(size, locality, replace=False) for _ in range(count)])
    fields = np.arange(size)[:, None]
    weights = [rng.integers(-9, 10, count), rng.integers(-4, 5, size)]
    return Hamiltonian.from_arrays([rows, fields], weights, domain="boolean", size=size)


def low_autocorrelation(length: int) -> Hamiltonian:
    """E(s) = sum over k of (sum over i of s_i s_(i+k))**2."""
    quads = [(i, i + k, j, j + k) for k in range(1, length) for i in range(length - k) for j in range(length - k)]
    return Hamiltonian.from_arrays([np.array(quads)], [np.ones(len(quads), np.int64)], domain="spin", size=length)


def seconds(call: Callable[[], object]) -> float:
    """Wall time of a call."""
    begun = time.perf_counter()
    call()
    return time.perf_counter() - begun


def processor_seconds(call: Callable[[], object]) -> float:
    """Processor time of a call, all threads together, as if they shared it evenly."""
    begun = time.process_time()
    call()
    return (time.process_time() - begun) / WORKERS


def bare_rate(kind: type[np.signedinteger], adds: int) -> float:
    """Entries a second that as many threads as there are workers can add to `adds` times."""
    from hubokit.spectrum import kernels

    size = VECTOR_BYTES // 2 // np.dtype(kind).itemsize
    arrays = [(np.zeros(size, kind), np.ones(size, kind)) for _ in range(WORKERS)]
    repeats = 2**28 // size
    kernels.bare_additions(*arrays[0], 1)
    with ThreadPoolExecutor(WORKERS) as pool:
        took = processor_seconds(lambda: list(pool.map(lambda pair: kernels.bare_additions(*pair, repeats), arrays)))
    return WORKERS * repeats * size / took / adds


def walk_rate(H: Hamiltonian) -> float:
    """States a second of all workers together without the making of tables: one slab, and all as one slab."""
    polynomial = polynomial_of(H).merged()
    layout = layout_of(polynomial)
    whole = Layout(layout.low, layout.walked + layout.fixed, 0)
    one, all_ = (LowestLevels(polynomial, part, 2, 100_000) for part in (layout, whole))
    least = {}
    for task in (one, all_):
        task.run(0, None, None)
        trials = TRIALS if polynomial.size > 28 else 10 * TRIALS
        least[task.layout] = min(processor_seconds(lambda task=task: task.run(0, None, None)) for _ in range(trials))
    states = (whole.blocks - layout.blocks) << layout.low
    return states / max(1e-9, least[whole] - least[layout])


def rates() -> Iterator[str]:
    """States a second of dense models beside the limit."""
    yield "| n | locality | domain | type | whole call | limit | call / limit | walk alone | walk / limit |"
    yield "|---|---|---|---|---|---|---|---|---|"
    for locality, weight in ((2, 9), (3, 5), (4, 1), (4, 9), (3, 2**20), (4, 2**40)):
        for size in (24, 26, 28, 30):
            domain = "boolean" if size % 4 else "spin"
            H = dense(size, locality, weight, domain)
            polynomial = polynomial_of(H).merged()
            kind = integer_type(polynomial, layout_of(polynomial))
            ground_states(H, time=None)
            call = limit = 0.0
            for _ in range(TRIALS):
                call = max(call, 2**size / processor_seconds(lambda H=H: ground_states(H, time=None)))
                limit = max(limit, bare_rate(kind, locality))
            walk = walk_rate(H)
            yield (
                f"| {size} | {locality} | {domain} | {kind.__name__} | {call / 1e9:.2f} | {limit / 1e9:.2f} "
                f"| {call / limit:.2f} | {walk / 1e9:.2f} | {walk / limit:.2f} |"
            )


def beside_the_exact_solver() -> Iterator[str]:
    """What a user would otherwise run, at the size where it still runs."""
    import dimod

    small = dense(16, 3, 5, "boolean")
    terms = {labels: float(value) for labels, value in small.terms() if labels}
    took = seconds(lambda: dimod.ExactPolySolver().sample_hubo(terms))
    theirs = 2**16 / took
    yield "| | states | seconds | states a second | ratio |"
    yield "|---|---|---|---|---|"
    yield f"| dimod.ExactPolySolver, n = 16, locality 3 | 2^16 | {took:.2f} | {theirs:.3g} | 1 |"
    for size in (28, 30):
        H = dense(size, 3, 5, "boolean")
        ours = min(seconds(lambda H=H: ground_states(H, time=None)) for _ in range(TRIALS))
        rate = 2**size / ours
        yield f"| ground_states, n = {size}, locality 3 | 2^{size} | {ours:.3f} | {rate:.3g} | {rate / theirs:,.0f} |"


def small_models() -> Iterator[str]:
    """The cost of a call."""
    yield "| n | locality | ground_states | low_levels | density_of_states | count_local_minima |"
    yield "|---|---|---|---|---|---|"
    for size, locality in ((6, 3), (10, 4), (12, 4)):
        H = dense(size, locality, 5)
        cells = [
            sorted(seconds(lambda call=call, H=H: call(H)) for _ in range(300))[150]
            for call in (ground_states, low_levels, density_of_states, count_local_minima)
        ]
        yield f"| {size} | {locality} | " + " | ".join(f"{1e3 * cell:.2f} ms" for cell in cells) + " |"


def large_models(long: bool) -> Iterator[str]:
    """Whole calls."""
    yield "| model | seconds | processor seconds | answer |"
    yield "|---|---|---|---|"
    calls: list[tuple[str, Callable[[], object]]] = [
        (
            "6-local boolean, 32 variables, 100 products, ground states",
            lambda: ground_states(sparse(32, 6, 100), time=None),
        ),
        (
            "3-local spin, dense, n = 28, density of states",
            lambda: len(density_of_states(dense(28, 3, 5), time=None)),
        ),
        ("3-local spin, dense, n = 28, local minima", lambda: count_local_minima(dense(28, 3, 5), time=None)),
        ("4-local spin, dense, n = 28, ten levels", lambda: low_levels(dense(28, 4, 1), 10, time=None)[-1]),
        ("low autocorrelation, N = 32", lambda: ground_states(low_autocorrelation(32), time=None)),
    ]
    if long:
        calls.append(("low autocorrelation, N = 40", lambda: ground_states(low_autocorrelation(40), time=None)))
    for name, call in calls:
        kept: list[object] = []
        before = time.process_time()
        took = seconds(lambda call=call, kept=kept: kept.append(call()))
        yield f"| {name} | {took:.2f} | {time.process_time() - before:.2f} | {kept[0]} |"


def memory() -> Iterator[str]:
    """Peak of a process of its own."""
    yield "| n = 32, ground states | peak memory |"
    yield "|---|---|"
    code = (
        "import tests.benchmarks.bench_exhaustive as b; b.ground_states({model}, time=None);"
        "print([int(x.split()[1]) // 1024 for x in open('/proc/self/status') if x.startswith('VmHWM')][0])"
    )
    for name, model in (
        ("dense, locality 3", "b.dense(32, 3, 5)"),
        ("dense, locality 4", "b.dense(32, 4, 1, 'boolean')"),
        ("low autocorrelation", "b.low_autocorrelation(32)"),
    ):
        run = [sys.executable, "-c", code.format(model=model)]
        peak = subprocess.run(run, capture_output=True, text=True, check=True).stdout.strip()
        yield f"| {name} | {peak} MB |"


def machine() -> str:
    """Processor, cores and versions; no names of hosts."""
    import numba

    model = platform.processor() or "unknown processor"
    if Path("/proc/cpuinfo").exists():
        lines = Path("/proc/cpuinfo").read_text().splitlines()
        model = next((line.split(":", 1)[1].strip() for line in lines if line.startswith("model name")), model)
    load = f"load {os.getloadavg()[0]:.1f} at the start" if hasattr(os, "getloadavg") else ""
    return (
        f"{model}, {WORKERS} cores, Python {platform.python_version()}, numpy {np.__version__}, "
        f"numba {numba.__version__}; {load}"
    )


def main() -> None:
    """Print, and write where asked to."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--long", action="store_true", help="add the low-autocorrelation model of length 40")
    parser.add_argument("-o", metavar="FILE", help="write the tables there too")
    options = parser.parse_args()
    sections = (
        (f"Dense models, states per nanosecond on {WORKERS} cores, best of {TRIALS}", rates()),
        ("Beside the exact solver that a user would otherwise run", beside_the_exact_solver()),
        ("Small models, median of 300 calls", small_models()),
        ("Large models, one call each", large_models(options.long)),
        ("Memory", memory()),
    )
    lines = ["# Exhaustive enumeration", "", machine(), "", *textwrap.wrap(NOTE, 110)]
    print("\n".join(lines), flush=True)
    for title, rows in sections:
        for line in ("", f"## {title}", "", *rows):
            print(line, flush=True)
            lines.append(line)
    if options.o:
        Path(options.o).write_text("\n".join(lines) + "\n")


if __name__ == "__main__":
    main()
