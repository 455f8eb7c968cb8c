"""Seconds and memory of writing and reading large files, beside orjson alone on the same bytes.

Run from the top of the repository: ``python -m tests.benchmarks.bench_exchange [terms]``. Each reading runs in a
process of its own, so that its peak of memory is its own; seconds are of processor time.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path
from time import process_time

import numpy as np
import orjson

from hubokit.exchange.formats import read, write
from hubokit.model.hamiltonian import Hamiltonian

SUFFIXES = ("json", "npz", "opb", "csv", "wcnf")


def cubic(terms: int) -> Hamiltonian:
    """Random cubic terms over 20,000 variables."""
    draw = np.random.default_rng(1)
    members = draw.integers(0, 20_000, (terms, 3))
    return Hamiltonian.from_arrays([members], [draw.integers(1, 100, terms)], "boolean", size=20_000)


def peak_megabytes() -> float:
    """Peak of this process alone (Linux): what getrusage says begins with the peak of the parent."""
    status = Path("/proc/self/status").read_text().splitlines()
    return next(int(line.split()[1]) for line in status if line.startswith("VmHWM")) / 1e3


def reading(path: str) -> None:
    """Read a file and print seconds, peak megabytes above the start, and megabytes of the arrays."""
    before = peak_megabytes()
    start = process_time()
    model = read(path)
    seconds = process_time() - start
    peak = peak_megabytes() - before
    assert isinstance(model, Hamiltonian)
    arrays = sum(block.members.nbytes + block.weights.nbytes for block in model.blocks) / 1e6
    print(f"{seconds:.1f} s, peak {peak:.0f} MB, arrays {arrays:.0f} MB")


def main(terms: int) -> None:
    """Every format in turn."""
    model = cubic(terms)
    with tempfile.TemporaryDirectory() as folder:
        for suffix in SUFFIXES:
            path = Path(folder) / f"model.{suffix}"
            start = process_time()
            write(model, path)
            size = path.stat().st_size / 1e6
            print(f"{suffix}: {size:.0f} MB, written in {process_time() - start:.1f} s; read in ", end="", flush=True)
            subprocess.run([sys.executable, "-m", "tests.benchmarks.bench_exchange", "read", str(path)], check=True)
            if suffix == "json":
                data = path.read_bytes()
                start = process_time()
                value = orjson.loads(data)
                middle = process_time()
                orjson.dumps(value)
                print(f"  orjson alone: loads {middle - start:.1f} s, dumps {process_time() - middle:.1f} s")
            path.unlink()


if __name__ == "__main__":
    if sys.argv[1:2] == ["read"]:
        reading(sys.argv[2])
    else:
        main(int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000)
