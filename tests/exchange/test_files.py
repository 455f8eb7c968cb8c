"""Files are read in bounded pieces and written whole or not at all."""

from __future__ import annotations

import gzip
import os
from pathlib import Path

import pytest

from hubokit.errors import InputError, LimitError
from hubokit.exchange import files
from hubokit.exchange.files import pieces, read_bytes, read_text, safe_path, write_bytes, write_text


def test_text_is_read_without_byte_order_mark_and_carriage_returns(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"
    path.write_bytes("\ufeffVentil ä\r\nzwei\r\n".encode())
    assert read_text(path) == "Ventil ä\nzwei\n"


def test_text_that_is_not_utf8_is_refused_with_its_line(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"
    path.write_bytes(b"one\ntwo \xff\n")
    with pytest.raises(InputError, match=r"a\.txt: line 2: the text is not UTF-8"):
        read_text(path)


@pytest.mark.parametrize(
    ("name", "message"),
    [("missing.json", "no such file"), ("", "this is a folder"), ("nul\0.json", "cannot be read")],
)
def test_what_is_no_file_is_refused(tmp_path: Path, name: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_bytes(f"{tmp_path}/{name}")


def test_a_file_beyond_the_limit_is_refused_with_the_limit(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"
    path.write_bytes(b"x" * 101)
    assert len(read_bytes(path, limit=101)) == 101
    with pytest.raises(LimitError, match="holds more than the limit of 100 bytes"):
        read_bytes(path, limit=100)


def test_a_gz_that_inflates_beyond_the_limit_is_refused_before_it_is_inflated(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "bomb.json.gz"
    path.write_bytes(gzip.compress(bytes(64 * 2**20)))
    monkeypatch.setattr(files, "INFLATE_LIMIT", 10 * 2**20)
    seen = []
    stream = map(seen.append, map(len, pieces(path)))
    with pytest.raises(LimitError, match="inflates to more than the limit of 10485760 bytes"):
        list(stream)
    assert max(seen) <= files.PIECE
    assert sum(seen) <= 10 * 2**20


def test_a_gz_of_several_members_and_padding_is_one_stream(tmp_path: Path) -> None:
    path = tmp_path / "a.gz"
    parts = [os.urandom(3_000_000), b"", b"x" * 5_000_000]
    path.write_bytes(b"".join(map(gzip.compress, parts)) + bytes(512))
    assert read_bytes(path) == b"".join(parts)


@pytest.mark.parametrize("cut", [0, 5, 30, -1])
def test_a_gz_that_was_cut_is_refused(tmp_path: Path, cut: int) -> None:
    path = tmp_path / "a.gz"
    path.write_bytes(gzip.compress(b"some text that is long enough")[:cut])
    with pytest.raises(InputError, match="ends too early"):
        read_bytes(path)


def test_a_gz_that_is_none_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "a.gz"
    path.write_bytes(b"{}")
    with pytest.raises(InputError, match=r"not a gzip file|ends too early"):
        read_bytes(path)


def test_an_existing_file_is_replaced_only_with_force(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"
    write_text(path, "first")
    with pytest.raises(InputError, match="--force"):
        write_text(path, "second")
    assert path.read_text() == "first"
    write_text(path, "second", force=True)
    assert path.read_text() == "second"
    assert os.listdir(tmp_path) == ["a.txt"]


@pytest.mark.parametrize("fault", [KeyboardInterrupt, ZeroDivisionError])
def test_an_interruption_leaves_no_half_written_file(tmp_path: Path, fault: type[BaseException]) -> None:
    path = tmp_path / "a.txt"
    path.write_text("before")

    def interrupted() -> None:
        with safe_path(path, force=True) as temporary:
            temporary.write_text("half")
            raise fault

    with pytest.raises(fault):
        interrupted()
    assert path.read_text() == "before"
    assert os.listdir(tmp_path) == ["a.txt"]


def test_a_file_that_appears_while_another_is_written_is_not_lost(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"

    def overtaken() -> None:
        with safe_path(path) as temporary:
            temporary.write_text("ours")
            path.write_text("theirs")

    with pytest.raises(InputError, match="the file exists"):
        overtaken()
    assert path.read_text() == "theirs"
    assert os.listdir(tmp_path) == ["a.txt"]


def test_a_folder_that_is_missing_is_an_error_of_ours(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be written: No such file or directory"):
        write_text(tmp_path / "missing" / "a.txt", "text")


def test_the_same_content_is_compressed_to_the_same_bytes(tmp_path: Path) -> None:
    write_bytes(tmp_path / "a.gz", [b"some ", b"text"])
    write_bytes(tmp_path / "b.gz", [b"some text"])
    assert (tmp_path / "a.gz").read_bytes() == (tmp_path / "b.gz").read_bytes()
    assert gzip.decompress((tmp_path / "a.gz").read_bytes()) == b"some text"


def test_a_device_or_a_pipe_is_not_replaced_even_with_force(tmp_path: Path) -> None:
    pipe = tmp_path / "answers.csv"
    os.mkfifo(pipe)
    link = tmp_path / "link.csv"
    link.symlink_to(pipe)
    for place in (pipe, link):
        with pytest.raises(InputError, match="a device or a pipe"):
            write_bytes(place, [b"x"], force=True)
    assert pipe.is_fifo()
    assert link.is_symlink()
