"""Compiled loops without a place for their cache."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

PROGRAM = """
import sys
import numba.core.caching
from hubokit.model.compiling import compiled

for locator in numba.core.caching.CacheImpl._locator_classes:
    locator.from_function = classmethod(lambda cls, function, file: None)
def halves(number):
    return number // 2
print(compiled(halves, nogil=True)(10))
import numpy, hubokit
H = hubokit.Hamiltonian.from_arrays([numpy.arange(24).reshape(8, 3)], [numpy.ones(8, int)], domain="spin")
print(hubokit.ground_states(H, limit=0).energy)
from hubokit.spectrum import kernels, neighbourhood_kernels
"""


def test_a_loop_is_compiled_where_no_folder_takes_its_cache(tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-c", PROGRAM],
        capture_output=True,
        text=True,
        check=False,
        cwd=Path(__file__).parents[2],
        env={**os.environ, "HOME": str(tmp_path)},
    )
    assert (done.returncode, done.stdout) == (0, "5\n-8\n"), done.stderr
