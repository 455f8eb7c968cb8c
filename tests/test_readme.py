"""README.md shows what the program prints, and its library example runs."""

from __future__ import annotations

import importlib.util
import re
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def test_the_examples_show_what_the_commands_print() -> None:
    spec = importlib.util.spec_from_file_location("make_readme", ROOT / "tests" / "make_readme.py")
    assert spec is not None
    assert spec.loader is not None
    program = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(program)
    assert len(program.BLOCK.findall(README)) == 8
    assert program.refreshed(README) == README, "python tests/make_readme.py puts the present output in"


def test_the_library_example_runs(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    (example,) = re.findall(r"```python\n(.*?)```", README, re.DOTALL)
    assert len([line for line in example.splitlines() if line.strip()]) <= 10
    exec(compile(example, "README.md", "exec"), {})
    assert (tmp_path / "reduced.json").exists()


def test_the_two_commands_are_those_that_the_checks_run() -> None:
    commands = re.findall(r"```sh\n(.*?)\n```", README, re.DOTALL)
    assert len(commands) == 2
    assert "hubokit prepare" in commands[0]
    assert commands[1].endswith("bin/pytest")
