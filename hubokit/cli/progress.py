"""A progress bar on a terminal, and nothing in a pipe."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager

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
