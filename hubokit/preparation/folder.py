"""A folder that is there whole or not at all: written beside its place under another name, and renamed at the end."""

from __future__ import annotations

import os
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from hubokit.errors import HubokitError, InputError

STEMS = ("source", "reduced", "verdict", "README")
"""What the names of our files begin with, up to the first full stop."""


def refuse_folder(target: Path, *, force: bool) -> None:
    """Raise where the folder cannot be made, or may not be replaced.

    Raises
    ------
    InputError
        It exists and force is not set; it is a file; it holds files that no run of `prepare` writes.
    """
    name = str(target)
    if not target.parent.is_dir():
        raise InputError(f"there is no folder {target.parent}; make it first", file=name)
    if not os.path.lexists(target):
        return
    if target.is_symlink() or not target.is_dir():
        raise InputError("this is no folder; choose another name", file=name)
    if not force:
        raise InputError("the folder exists; choose another name, or replace it with --force", file=name)
    foreign = sorted(entry.name for entry in target.iterdir() if not _ours(entry))
    if foreign:
        raise InputError(
            f"the folder holds {foreign[0]!a}, which prepare does not write; choose another name", file=name
        )


def _ours(entry: Path) -> bool:
    return entry.is_file() and entry.name.partition(".")[0] in STEMS


@contextmanager
def folder_made_beside(target: Path, *, force: bool) -> Iterator[Path]:
    """A new folder beside the target, moved onto it when the block ends well and removed when it does not.

    Yields
    ------
    Path
        The empty folder to write into.
    """
    beside = target.with_name(f".{target.name}-{secrets.token_hex(4)}")
    try:
        beside.mkdir()
        yield beside
        refuse_folder(target, force=force)
        _swap(beside, target)
    except HubokitError as error:
        file = error.file.replace(str(beside), str(target)) if error.file else None
        raise type(error)(error.message, error.place, file) from None
    except OSError as error:
        raise InputError(f"the folder cannot be written: {error.strerror or error}", file=str(target)) from None
    finally:
        shutil.rmtree(beside, ignore_errors=True)


def _swap(made: Path, target: Path) -> None:
    """Rename; an earlier folder is set aside first and put back when the rename fails."""
    if not target.exists():
        made.rename(target)
        return
    aside = target.with_name(f".{target.name}-{secrets.token_hex(4)}")
    target.rename(aside)
    try:
        made.rename(target)
    except BaseException:
        aside.rename(target)
        raise
    shutil.rmtree(aside, ignore_errors=True)
