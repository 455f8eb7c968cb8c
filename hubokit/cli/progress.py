"""A progress bar on a terminal, and nothing in a pipe."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

from hubokit.cli.text import printable

Report = Callable[[int, int], None]


@contextmanager
def bar(title: str) -> Iterator[Report | None]:
    """A ``progress(done, total)`` callable that draws on standard error, or None where that is no terminal.

    Examples
    --------
    >>> with bar("walking") as report:
    ...     report is None or report(1, 2)
    True
    """
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("{task.description}"), BarColumn(), TextColumn("{task.percentage:>3.0f}%"))
    with Progress(*columns, TimeRemainingColumn(), console=Console(stderr=True), transient=True) as progress:
        task = progress.add_task(title, total=None)

        def report(done: int, total: int) -> None:
            progress.update(task, completed=done, total=total)

        yield report


LARGE = 1 << 24
"""Bytes from which the reading of a file is worth a bar."""


@contextmanager
def reading(path: Path) -> Iterator[Report | None]:
    """A bar over the bytes of a large file, as `bar` is; None where the file is small."""
    try:
        large = path.stat().st_size >= LARGE
    except OSError:
        large = False
    if not large:
        yield None
        return
    with bar(f"reading {printable(path.name)}") as report:
        yield report
