"""How long an enumeration would take: a short trial, and the refusal that follows from it."""

from __future__ import annotations

import os
import time as clock
from concurrent.futures import Executor

from hubokit.errors import LimitError
from hubokit.spectrum.walk import Task

FASTEST = 1e11
"""States a second that no worker exceeds: what is too long at this rate is refused without a trial."""

TRIAL_SECONDS = 0.03


def workers_of(executor: Executor | None) -> int:
    """How many slabs run at once: the size of the executor where it says so, else the processors of this machine."""
    known = getattr(executor, "_max_workers", None)
    if isinstance(known, int):
        return known
    client = getattr(executor, "_client", None)
    if client is not None and hasattr(client, "ncores"):
        return max(1, int(sum(client.ncores().values())))
    try:
        return len(os.sched_getaffinity(0))
    except AttributeError:  # not on every system
        return os.cpu_count() or 1


def refuse_long(task: Task, left: int, workers: int, time: float | None) -> None:
    """Raise where the slabs that are left would take longer than allowed.

    Parameters
    ----------
    task : Task
        What would run.
    left : int
        Slabs not done yet.
    workers : int
        Slabs that run at once.
    time : float or None
        Seconds allowed; None for any.

    Raises
    ------
    LimitError
        Says how long it would take, and what else would do.
    """
    layout = task.layout
    states = left << (layout.low + layout.walked)
    if time is None or states <= task.untried:
        return
    workers = max(1, min(workers, left))
    seconds, about = states / FASTEST / workers, "at least"
    if seconds <= time:
        about = "about"
        task.trial(0.0)  # compiles, or loads what was compiled
        begun = clock.perf_counter()
        rate = task.trial(TRIAL_SECONDS)
        tables = max(0.0, clock.perf_counter() - begun - 2 * TRIAL_SECONDS)
        seconds = (states / rate + left * tables) / workers
    if seconds > time:
        bits = layout.low + layout.walked + layout.fixed
        raise LimitError(
            f"visiting 2**{bits} states would take {about} {duration(seconds)} on {workers} "
            f"{'processor' if workers == 1 else 'processors'}, and {duration(time)} is allowed: raise the time "
            "(time=, --time), use elimination if the model is sparse, or look at a neighbourhood of known states"
        )


def duration(seconds: float) -> str:
    """A length of time in words.

    Examples
    --------
    >>> duration(0.25), duration(90), duration(7200), duration(1e10)
    ('0.25 seconds', '90 seconds', '2 hours', '317 years')
    """
    for length, noun in ((31557600, "years"), (86400, "days"), (3600, "hours"), (60, "minutes")):
        if seconds >= 2 * length:
            return f"{seconds / length:.3g} {noun}" if seconds < 1000 * length else f"{seconds / length:.0e} {noun}"
    return f"{seconds:.2g} seconds"
