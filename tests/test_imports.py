"""Importing hubokit costs little more than importing numpy: nothing heavy is loaded until it is used."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
HEAVY = (
    "numba",
    "dimod",
    "scipy",
    "networkx",
    "jsonschema",
    "matplotlib",
    "highspy",
    "typer",
    "rich",
    "orjson",
    "rfc8785",
    "sympy",
    "distributed",
)


def loaded_after(statement: str) -> set[str]:
    """Top-level modules in a fresh interpreter after one statement."""
    program = f"{statement}\nimport sys\nprint(' '.join({{m.split('.')[0] for m in sys.modules}}))"
    run = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, cwd=ROOT, timeout=120
    )
    return set(run.stdout.split())


def test_importing_hubokit_loads_numpy_and_nothing_heavier() -> None:
    loaded = loaded_after("import hubokit; hubokit.Hamiltonian, hubokit.reduce, hubokit.check, hubokit.read")
    assert "numpy" in loaded
    assert loaded.isdisjoint(HEAVY)


def test_a_small_model_is_reduced_and_checked_without_the_compiler() -> None:
    loaded = loaded_after(
        "import hubokit as hk\n"
        "H = hk.Hamiltonian({('a', 'b', 'c'): -1}, domain='boolean')\n"
        "assert hk.check(hk.reduce(H)).holds('one-to-one')"
    )
    assert loaded.isdisjoint({"numba", "dimod", "jsonschema", "matplotlib", "typer", "rich"})
