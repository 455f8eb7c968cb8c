"""A file from which a long enumeration resumes: what has been found, and in which slabs.

The file is bound to the task by a digest over the terms, the use of the bits and what was asked for, so that the
checkpoint of another model, or of another question, is refused. It is written beside and renamed: a kill at any
moment leaves the last whole file. After the run it stays, and a repeated call returns at once.
"""

from __future__ import annotations

import contextlib
import dataclasses
import hashlib
import os
import tempfile
import zipfile
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.errors import InputError
from hubokit.spectrum.polynomial import Polynomial
from hubokit.spectrum.walk import Result, Task

_KIND = "hubokit/checkpoint 1"


def task_digest(task: Task) -> str:
    """Digest of everything that decides the answer of a task."""
    found = hashlib.sha256(type(task).__name__.encode())
    for field in dataclasses.fields(task):  # type: ignore[arg-type]
        value = getattr(task, field.name)
        if isinstance(value, Polynomial):
            found.update(f"{value.size} {value.spin} {len(value.masks)} ".encode())
            found.update(np.ascontiguousarray(value.masks, "<i8").tobytes())
            found.update(np.ascontiguousarray(value.weights, "<i8").tobytes())
        else:
            found.update(f" {field.name} {value}".encode())
    return "sha256:" + found.hexdigest()


class Checkpoint:
    """The file of one run.

    Parameters
    ----------
    path : path-like
        Where; its folder must exist.
    task : Task
        What the run does.
    """

    def __init__(self, path: str | os.PathLike[str], task: Task) -> None:
        self.path = Path(path)
        self.digest = task_digest(task)

    def load(self, slabs: int) -> tuple[npt.NDArray[np.bool_], Result | None]:
        """Which slabs are done, and their merged result; nothing where there is no file yet.

        Raises
        ------
        InputError
            The file is no checkpoint, is damaged, or belongs to another task.
        """
        none = np.zeros(slabs, bool)
        if not self.path.parent.is_dir():
            raise InputError(f"the folder {self.path.parent} does not exist", "checkpoint", str(self.path))
        if not self.path.exists():
            return none, None
        try:
            with np.load(self.path, allow_pickle=False) as file:
                if str(file["kind"]) != _KIND:
                    raise ValueError
                digest, done = str(file["task"]), file["done"]
                result = {name[7:]: file[name] for name in file.files if name.startswith("result.")}
        except (OSError, ValueError, KeyError, zipfile.BadZipFile, EOFError):
            raise InputError(
                "this file is no checkpoint of an enumeration; name a new file", "checkpoint", str(self.path)
            ) from None
        if digest != self.digest or done.shape != none.shape:
            raise InputError(
                "this checkpoint belongs to another model or another question; name a new file, or delete this one",
                "checkpoint",
                str(self.path),
            )
        return done.astype(bool), result if done.any() else None

    def save(self, done: npt.NDArray[np.bool_], total: Result) -> None:
        """Replace the file."""
        handle, name = tempfile.mkstemp(prefix=self.path.name + ".", dir=self.path.parent)
        try:
            with os.fdopen(handle, "wb") as file:
                arrays: dict[str, Any] = {f"result.{key}": array for key, array in total.items()}
                np.savez(file, kind=np.array(_KIND), task=np.array(self.digest), done=done, **arrays)
                file.flush()
                os.fsync(file.fileno())
            os.replace(name, self.path)
        except BaseException:
            with contextlib.suppress(OSError):
                os.unlink(name)
            raise
