"""One slab of the Gray-code walk: driving the compiled loops in short pieces, and what a task has to offer.

A *task* is a frozen, picklable object that runs one slab anywhere and merges results in any order. A result is a
mapping of names to arrays, so that it can be sent, merged and kept in a file. `run` may be told a *hint*, what
other slabs have found already, which saves work and changes no answer.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any, ClassVar, Protocol

import numpy as np
import numpy.typing as npt

from hubokit.spectrum.derivatives import TABLE_BYTES, Layout, Tables, integer_type, table_count
from hubokit.spectrum.polynomial import Polynomial

Result = dict[str, npt.NDArray[Any]]

PIECE_SECONDS = 0.04
"""A compiled loop returns about this often, to look whether it should stop."""

VECTOR_BYTES = 2**13
"""Most bytes of a vector: the few that most steps touch fit the fastest cache. Half of it for localities above 3."""

DEPTH = 64
"""Room for the chain of derivatives of one step."""


class Stop(Protocol):
    """Anything that can say that the work should end, such as a `threading.Event`."""

    def is_set(self) -> bool:
        """Whether to end."""


class StoppedError(Exception):
    """A slab was left unfinished because it was asked to."""


class Task(Protocol):
    """What the slabs of one run do."""

    untried: ClassVar[int]
    """So many states take no time worth an estimate."""

    @property
    def layout(self) -> Layout:
        """The use of the bits: it says how many slabs there are."""

    def run(self, slab: int, hint: int | None, stop: Stop | None) -> Result:
        """The result of one slab."""

    def merge(self, total: Result | None, part: Result) -> Result:
        """Two results as one; commutative."""

    def hint(self, total: Result | None) -> int | None:
        """What the next slabs may be told."""

    def trial(self, seconds: float) -> float:
        """States a second of one worker, from a walk of about so many seconds."""


class Walk:
    """A walk through one slab that can pause.

    Parameters
    ----------
    tables : Tables
        Freshly made; they are used up.
    blocks : int
        Number of blocks of the slab.
    """

    def __init__(self, tables: Tables, blocks: int) -> None:
        self.tables = tables
        self.blocks = blocks
        self.cursor = np.array([0, int(tables.rows[0].min()), 0], np.int64)
        self.chain = np.zeros(DEPTH, np.int64)

    @property
    def arrays(self) -> tuple[npt.NDArray[Any], ...]:
        """The arguments that every compiled walk takes, in its order."""
        t = self.tables
        return t.rows, t.row, t.child, t.number, t.sign, t.steady, self.chain

    @property
    def done(self) -> int:
        """Blocks finished."""
        return int(self.cursor[0]) + (1 if self.cursor[2] < 0 else 0)

    def drive(
        self,
        piece: Callable[[int], int],
        stop: Stop | None,
        full: Callable[[], None] | None = None,
        most: int | None = None,
        seconds: float | None = None,
    ) -> None:
        """Call `piece(end)` until the slab is done.

        Parameters
        ----------
        piece : callable
            Walks until block ``end - 1`` is done (returns 0) or the room for states is used up (returns 1).
        stop : Stop, optional
            Looked at between pieces.
        full : callable, optional
            Makes room.
        most : int, optional
            Most blocks a piece.
        seconds : float, optional
            End after about so long, wherever the walk is then.

        Raises
        ------
        StoppedError
            When `stop` said so.
        """
        size, begun = min(16, most or 16), time.perf_counter()
        while self.done < self.blocks:
            if stop is not None and stop.is_set():
                raise StoppedError
            before = time.perf_counter()
            if piece(min(self.blocks, self.done + size)) and full is not None:
                full()
            now = time.perf_counter()
            if now - before < PIECE_SECONDS / 2:
                size = min(2 * size, most or 2 * size)
            elif now - before > PIECE_SECONDS:
                size = max(1, size // 2)
            if seconds is not None and now - begun > seconds:
                return

    def rate(
        self, piece: Callable[[int], int], full: Callable[[], None] | None, most: int | None, seconds: float
    ) -> float:
        """States a second, over a walk of about so many seconds; the first blocks, which are dearer, are left out."""
        self.drive(piece, None, full, most=min(most or 64, 64), seconds=seconds / 4)
        first, begun = self.done, time.perf_counter()
        self.drive(piece, None, full, most=most, seconds=seconds)
        states = (self.done - first) * self.tables.rows.shape[1]
        return max(1.0, states) / max(1e-9, time.perf_counter() - begun) if states else 1e10


def layout_of(polynomial: Polynomial, derivatives: bool = False) -> Layout:
    """How many bits are low, walked and fixed.

    The low bits are as many as keep a few vectors in the fastest cache, and fewer where the tables would fill more
    than ``TABLE_BYTES``. A slab takes about a second for large models.

    Parameters
    ----------
    polynomial : Polynomial
        More than a handful of variables.
    derivatives : bool
        Every bit above the low ones has a walk of its own (local minima).
    """
    size = polynomial.size
    fixed = 0 if size <= 22 else 1 if size <= 24 else 3 if size <= 30 else 3 + (size - 29) // 2
    if derivatives:  # a slab makes many tables, and so is larger
        fixed = 0 if size <= 20 else 1 if size <= 24 else 3 + max(0, size - 30)
    locality = int(np.bitwise_count(polynomial.masks).max(initial=0))
    most = VECTOR_BYTES if locality <= 3 else VECTOR_BYTES // 2
    for low in (12, 11, 10, 9, 8):
        low = min(low, size - fixed)
        layout = Layout(low, size - fixed - low, fixed)
        width = np.dtype(integer_type(polynomial, layout)).itemsize
        if width << low > most and low > 8:
            continue
        copies = 1 + (size - low if derivatives else 0)
        enough = TABLE_BYTES // (copies * (width << low))
        if table_count(polynomial, layout, enough) <= enough:
            break
    return layout
