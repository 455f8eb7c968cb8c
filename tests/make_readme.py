"""Runs the examples of README.md and puts what they print into it: ``python tests/make_readme.py``.

A block that opens with ```console holds a line ``$ hubokit ...`` or ``$ python fixtures/...`` and, below it, what
that command printed.
"""

from __future__ import annotations

import contextlib
import io
import os
import re
import runpy
import shlex
import tempfile
from collections.abc import Iterator
from pathlib import Path

from hubokit.cli.app import run

ROOT = Path(__file__).resolve().parents[1]
BLOCK = re.compile(r"```console\n\$ ((?:hubokit|python fixtures/)[^\n]*)\n(.*?)```", re.DOTALL)


@contextlib.contextmanager
def beside_the_fixtures() -> Iterator[None]:
    """A fresh working folder in which ``fixtures/`` is ours."""
    before = Path.cwd()
    with tempfile.TemporaryDirectory() as place:
        os.symlink(ROOT / "fixtures", Path(place) / "fixtures")
        os.chdir(place)
        try:
            yield
        finally:
            os.chdir(before)


def printed(command: str) -> str:
    """What a command prints on standard output."""
    text = io.StringIO()
    program, *arguments = shlex.split(command)
    with contextlib.redirect_stdout(text):
        if program == "python":
            runpy.run_path(arguments[0])
        else:
            run(arguments)
    return text.getvalue().rstrip("\n")


def refreshed(readme: str) -> str:
    """The same text with the output of every example as it is now."""
    with beside_the_fixtures():
        return BLOCK.sub(lambda block: f"```console\n$ {block[1]}\n{printed(block[1])}\n```", readme)


if __name__ == "__main__":
    path = ROOT / "README.md"
    path.write_text(refreshed(path.read_text(encoding="utf-8")), encoding="utf-8")
