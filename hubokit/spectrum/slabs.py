"""Running the slabs of a task over an executor: progress, a checkpoint, and a prompt end when interrupted."""

from __future__ import annotations

import os
import threading
import time as clock
from collections.abc import Callable
from concurrent.futures import FIRST_COMPLETED, Executor, Future, ThreadPoolExecutor, wait

import numpy as np
import numpy.typing as npt

from hubokit.spectrum.checkpoint import Checkpoint
from hubokit.spectrum.estimate import refuse_long, workers_of
from hubokit.spectrum.walk import Result, Stop, Task

Progress = Callable[[int, int], None]

SAVE_SECONDS = 1.0
"""A checkpoint is written about so often."""

_LOOK_SECONDS = 0.2


def run_slabs(
    task: Task,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoint: str | os.PathLike[str] | None = None,
    time: float | None = None,
) -> Result:
    """The merged result of all slabs.

    Parameters
    ----------
    task : Task
        What a slab does.
    executor : Executor, optional
        Where slabs run; by default threads, one for each processor (compiled loops release the interpreter lock).
    progress : callable, optional
        Called with (slabs done, slabs) at the start and after every slab, in this thread.
    checkpoint : path-like, optional
        A file to resume from and to keep up to date.
    time : float, optional
        Seconds allowed by the estimate; None for any.

    Raises
    ------
    LimitError
        Before the start, when it would take longer than `time`.
    InputError
        A checkpoint of something else.
    """
    run = _Run(task, progress, None if checkpoint is None else Checkpoint(checkpoint, task))
    left = np.flatnonzero(~run.done).tolist()
    workers = workers_of(executor)
    refuse_long(task, len(left), workers, time)
    run.report()
    try:
        if executor is not None:
            # only threads can be told to stop in the middle of a slab
            stop = threading.Event() if isinstance(executor, ThreadPoolExecutor) else None
            _spread(run, left, executor, stop, max(2 * workers, 8))
        elif workers == 1 or len(left) <= 1:
            for slab in left:
                run.take(slab, task.run(slab, task.hint(run.total), None))
        else:
            _in_threads(run, left, workers)
    finally:
        run.save()
    assert run.total is not None
    return run.total


class _Run:
    """What has been found so far."""

    def __init__(self, task: Task, progress: Progress | None, checkpoint: Checkpoint | None) -> None:
        self.task = task
        self.progress = progress
        self.checkpoint = checkpoint
        self.done: npt.NDArray[np.bool_] = np.zeros(task.layout.slabs, bool)
        self.total: Result | None = None
        if checkpoint is not None:
            self.done, self.total = checkpoint.load(task.layout.slabs)
        self.saved, self.unsaved = clock.monotonic(), False

    def take(self, slab: int, part: Result) -> None:
        """One more slab."""
        # the total and its slabs change in one step: an interrupt between them must not count a slab twice
        done = self.done.copy()
        done[slab] = True
        total = self.task.merge(self.total, part)
        self.done, self.total, self.unsaved = done, total, True
        if clock.monotonic() - self.saved > SAVE_SECONDS:
            self.save()
        self.report()

    def save(self) -> None:
        """Bring the checkpoint up to date."""
        if self.checkpoint is not None and self.total is not None and self.unsaved:
            self.checkpoint.save(self.done, self.total)
            self.saved, self.unsaved = clock.monotonic(), False

    def report(self) -> None:
        """Tell how far it is."""
        if self.progress is not None:
            self.progress(int(self.done.sum()), len(self.done))


def _work(task: Task, slab: int, hint: int | None, stop: Stop | None) -> Result:
    return task.run(slab, hint, stop)


def _in_threads(run: _Run, left: list[int], workers: int) -> None:
    stop = threading.Event()
    pool = ThreadPoolExecutor(workers, thread_name_prefix="hubokit")
    try:
        _spread(run, left, pool, stop, 2 * workers)
    finally:
        pool.shutdown(wait=True, cancel_futures=True)


def _spread(run: _Run, left: list[int], executor: Executor, stop: Stop | None, at_once: int) -> None:
    """Keep `at_once` slabs with the executor, lowest first, until all are done."""
    waiting = list(reversed(left))
    running: dict[Future[Result], int] = {}
    try:
        while waiting or running:
            while waiting and len(running) < at_once:
                slab = waiting.pop()
                running[executor.submit(_work, run.task, slab, run.task.hint(run.total), stop)] = slab
            finished, _ = wait(running, timeout=_LOOK_SECONDS, return_when=FIRST_COMPLETED)
            for future in finished:
                run.take(running.pop(future), future.result())
    finally:
        for future in running:
            future.cancel()
        if isinstance(stop, threading.Event):
            stop.set()
