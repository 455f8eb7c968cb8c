"""Reading and writing files so that nothing is half done: bounded pieces in, temporary file and rename out.

Every error is an ``InputError`` (or ``LimitError``) that names the file as the caller named it.
"""

from __future__ import annotations

import os
import secrets
import zlib
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from pathlib import Path

from hubokit.errors import InputError, LimitError

READ_LIMIT = 2**32
"""Largest file that is read, in bytes."""

INFLATE_LIMIT = 2**30
"""Largest size, in bytes, to which a ``.gz`` file may inflate."""

PIECE = 2**20
"""Bytes read at a time."""

Progress = Callable[[int, int], None]
"""Called with the bytes done and the bytes in all."""

_progress: ContextVar[Progress | None] = ContextVar("progress", default=None)

_BOM = b"\xef\xbb\xbf"


def pieces(path: str | os.PathLike[str], *, limit: int | None = None) -> Iterator[bytes]:
    """The content of a file, inflated where it is ``.gz``, in pieces of at most ``PIECE`` bytes.

    Parameters
    ----------
    path : path
        A name that ends in ``.gz`` is inflated.
    limit : int, optional
        Bytes; ``READ_LIMIT`` (``INFLATE_LIMIT`` for ``.gz``) when left out.

    Raises
    ------
    InputError
        There is no such file, it cannot be read, or it is no complete gzip stream.
    LimitError
        The file is larger, or inflates to more, than the limit.
    """
    name = os.fspath(path)
    zipped = name.endswith(".gz")
    bound = (INFLATE_LIMIT if zipped else READ_LIMIT) if limit is None else limit
    try:
        with open(name, "rb") as stream:
            source = _reported(iter(lambda: stream.read(PIECE), b""), os.fstat(stream.fileno()).st_size)
            total = 0
            for piece in _inflated(source, name) if zipped else source:
                total += len(piece)
                if total > bound:
                    deed = "inflates to" if zipped else "holds"
                    raise LimitError(f"the file {deed} more than the limit of {bound} bytes", file=name)
                yield piece
    except FileNotFoundError:
        raise InputError("there is no such file", file=name) from None
    except IsADirectoryError:
        raise InputError("this is a folder; name a file in it", file=name) from None
    except (OSError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(f"the file cannot be read: {error}", file=name) from None


@contextmanager
def reporting(progress: Progress | None) -> Iterator[None]:
    """While the block lasts, reading calls ``progress(done, total)`` with bytes of the file, at most once a piece.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.NamedTemporaryFile() as file, reporting(print):
    ...     _ = file.write(b"some text"), file.flush()
    ...     _ = read_bytes(file.name)
    9 9
    """
    token = _progress.set(progress)
    try:
        yield
    finally:
        _progress.reset(token)


def _reported(source: Iterator[bytes], total: int) -> Iterator[bytes]:
    progress, done = _progress.get(), 0
    for piece in source:
        done += len(piece)
        if progress is not None:
            progress(done, max(done, total))
        yield piece


def _inflated(source: Iterator[bytes], name: str) -> Iterator[bytes]:
    """Inflate a gzip stream of one or more members, never more than ``PIECE`` bytes at once."""
    machine = zlib.decompressobj(wbits=31)
    for raw in source:
        rest, full = raw, False
        while rest or full:
            if machine.eof:
                rest = rest.lstrip(b"\0")
                if not rest:
                    break
                machine = zlib.decompressobj(wbits=31)
            try:
                piece = machine.decompress(rest, PIECE)
            except zlib.error as error:
                raise InputError(f"not a gzip file, or a damaged one: {error}", file=name) from None
            rest = machine.unused_data if machine.eof else machine.unconsumed_tail
            full = len(piece) == PIECE and not machine.eof
            if piece:
                yield piece
    if not machine.eof:
        raise InputError("the gzip stream ends too early; copy the file again", file=name)


def read_bytes(path: str | os.PathLike[str], *, limit: int | None = None) -> bytes:
    """The whole content of a file, inflated where it is ``.gz``, without a byte order mark.

    Raises
    ------
    InputError, LimitError
        As for `pieces`.
    """
    data = b"".join(pieces(path, limit=limit))
    return data.removeprefix(_BOM)


def read_text(path: str | os.PathLike[str], *, limit: int | None = None) -> str:
    """The whole content of a file as text: UTF-8, any line ends, a byte order mark dropped.

    Raises
    ------
    InputError
        As for `pieces`, or the bytes are not UTF-8 (the line is named).
    """
    return decoded(read_bytes(path, limit=limit), file=os.fspath(path)).replace("\r\n", "\n")


def decoded(data: bytes, *, file: str | None = None) -> str:
    """Bytes as UTF-8 text.

    Raises
    ------
    InputError
        The bytes are not UTF-8; the line is named.

    Examples
    --------
    >>> decoded("Ventil ä".encode())
    'Ventil ä'
    """
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise InputError("the text is not UTF-8; save the file as UTF-8", f"line {line}", file) from None


def refuse_existing(path: str | os.PathLike[str], *, force: bool) -> None:
    """Raise when the output file is there and may not be replaced.

    Raises
    ------
    InputError
        The file exists and force is not set, or it is a folder, a device or a pipe.
    """
    name = os.fspath(path)
    if os.path.isdir(name):
        raise InputError("this is a folder; name a file in it", file=name)
    if os.path.exists(name) and not os.path.isfile(name):
        # A rename would put a plain file in its place, with or without force.
        raise InputError("this is a device or a pipe; name a file", file=name)
    if os.path.lexists(name) and not force:
        raise InputError("the file exists; choose another name, or replace it with --force", file=name)


@contextmanager
def safe_path(path: str | os.PathLike[str], *, force: bool = False) -> Iterator[Path]:
    """A temporary path beside `path`, moved onto it when the block ends well and removed when it does not.

    Parameters
    ----------
    path : path
        The file to be written.
    force : bool
        Whether a file of that name is replaced.

    Yields
    ------
    Path
        A file of the same suffix in the same folder, to be written by the caller.

    Raises
    ------
    InputError
        The file exists and may not be replaced, or the folder cannot be written.
    """
    name = os.fspath(path)
    refuse_existing(name, force=force)
    target = Path(name)
    suffix = "".join(target.suffixes[-2:]) if target.suffix == ".gz" else target.suffix
    temporary = target.with_name(f".{secrets.token_hex(6)}{suffix}")
    try:
        os.close(os.open(temporary, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o666))
        yield temporary
        with open(temporary, "rb+") as stream:
            os.fsync(stream.fileno())
        _move(temporary, target, force=force)
    except OSError as error:
        reason = error.strerror or str(error)
        raise InputError(f"the file cannot be written: {reason}", file=name) from None
    finally:
        temporary.unlink(missing_ok=True)


def _move(temporary: Path, target: Path, *, force: bool) -> None:
    """Rename; without force by a link, which fails when another writer was quicker."""
    if not force:
        try:
            os.link(temporary, target)
            return
        except FileExistsError:
            refuse_existing(target, force=False)
        except OSError:
            pass
    os.replace(temporary, target)


def write_bytes(path: str | os.PathLike[str], data: Iterable[bytes], *, force: bool = False) -> None:
    """Write the parts of `data` one after the other, compressed where the name ends in ``.gz``.

    The same data gives the same bytes: no time stamp and no file name goes into a ``.gz``.

    Raises
    ------
    InputError
        The file exists and force is not set, or it cannot be written.
    """
    with safe_path(path, force=force) as temporary, open(temporary, "wb") as stream:
        if not os.fspath(path).endswith(".gz"):
            stream.writelines(data)
            return
        machine = zlib.compressobj(6, zlib.DEFLATED, 31)
        for part in data:
            stream.write(machine.compress(part))
        stream.write(machine.flush())


def write_text(path: str | os.PathLike[str], text: str, *, force: bool = False) -> None:
    """Write text as UTF-8 with line feeds, as `write_bytes` does."""
    write_bytes(path, [text.encode("utf-8")], force=force)
