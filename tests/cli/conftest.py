"""The command line run inside the test process: exit code, standard output, standard error."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from hubokit.cli.app import run

ROOT = Path(__file__).resolve().parents[2]


@dataclass(frozen=True)
class Outcome:
    """What one command left behind."""

    code: int
    out: str
    err: str


@pytest.fixture
def hubokit(capsys: pytest.CaptureFixture[str]) -> Callable[..., Outcome]:
    """Run one command line; no command may ever print a traceback."""

    def call(*arguments: str | Path) -> Outcome:
        code = run([str(argument) for argument in arguments])
        printed = capsys.readouterr()
        assert "Traceback" not in printed.err
        return Outcome(code, printed.out, printed.err)

    return call


@pytest.fixture
def fixtures() -> Path:
    """The folder of models."""
    return ROOT / "fixtures"
