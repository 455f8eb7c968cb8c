"""Large text files are read in chunks: memory in proportion to the arrays, and nothing lost where chunks meet."""

from __future__ import annotations

import random
import tracemalloc
from pathlib import Path

import numpy as np
import pytest

from hubokit.errors import InputError
from hubokit.exchange import scanning
from hubokit.exchange.formats import read, write
from hubokit.exchange.scanning import Chunk, chunks, whole_numbers, words
from hubokit.exchange.table import write_table
from hubokit.model.hamiltonian import Hamiltonian


def large_model(count: int) -> Hamiltonian:
    """A cubic model over 5,000 variables."""
    draw = np.random.default_rng(7)
    members = draw.integers(0, 5000, (count, 3))
    return Hamiltonian.from_arrays([members], [draw.integers(1, 1000, count)], "boolean", size=5000)


@pytest.mark.parametrize(("suffix", "terms"), [("opb", 5_000_000), ("csv", 5_000_000), ("wcnf", 150_000)])
def test_the_memory_of_reading_is_a_few_times_that_of_the_arrays(suffix: str, terms: int, tmp_path: Path) -> None:
    model = large_model(terms)
    path = tmp_path / f"m.{suffix}"
    write(model, path)
    del model
    arrays = terms * (3 * 4 + 8)
    tracemalloc.start()
    back = read(path)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert len(back) > 0.99 * terms  # type: ignore[arg-type]
    assert peak < 14 * arrays + 12 * scanning.CHUNK


@pytest.mark.parametrize("size", [1, 7, 64, 333])
@pytest.mark.parametrize("suffix", ["opb", "csv", "wcnf", "cnf", "mtx", "pauli"])
def test_small_chunks_give_the_same_model(
    suffix: str, size: int, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    draw = random.Random(3)
    labels = [f"valve {i}" for i in range(6)]
    terms = {tuple(sorted(draw.sample(labels, draw.randint(1, 2)))): draw.randint(-9, 9) for _ in range(20)}
    model = Hamiltonian(terms, "boolean", labels=labels)
    path = tmp_path / f"m.{suffix}"
    if suffix == "csv":
        write_table(model, path, members="numbers")
    else:
        write(model, path)
    monkeypatch.setattr(scanning.chunks, "__kwdefaults__", {"size": size})
    assert read(path) == model


def test_chunks_end_at_line_ends_and_add_up_to_the_file(tmp_path: Path) -> None:
    path = tmp_path / "m.txt"
    text = "".join(f"line {i} {'x' * (i % 50)}\n" for i in range(500))
    path.write_text(text)
    found = list(chunks(path, size=100))
    assert b"".join(chunk.data.tobytes() for chunk in found).decode() == text
    assert all(chunk.fresh for chunk in found)
    assert all(text.split("\n")[chunk.line - 1].encode() in chunk.data.tobytes() for chunk in found)


def test_progress_is_told_in_bytes_of_the_file(tmp_path: Path) -> None:
    path = tmp_path / "m.opb"
    write(large_model(60_000), path)
    told: list[tuple[int, int]] = []
    read(path, progress=lambda done, total: told.append((done, total)))
    size = path.stat().st_size
    assert told[-1] == (size, size)
    assert [done for done, _ in told] == sorted({done for done, _ in told})
    assert len(told) == -(-size // 2**20)
    told.clear()
    read(path)
    assert told == []


def test_errors_in_late_chunks_name_the_right_line(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scanning.chunks, "__kwdefaults__", {"size": 50})
    path = tmp_path / "m.cnf"
    path.write_text("p cnf 3 100\n" + "1 -2 3 0\n" * 70 + "1 two 0\n" + "1 -2 3 0\n" * 29)
    with pytest.raises(InputError, match="line 72: a literal or weight is a whole number"):
        read(path)


@pytest.mark.parametrize(
    ("text", "values"),
    [
        ("0 -0 +7 -12 000123", [0, 0, 7, -12, 123]),
        ("999999999999999999 -999999999999999999", [10**18 - 1, 1 - 10**18]),
        ("1000000000000000000 5", [10**18, 5]),
        ("-123456789012345678901234567890 2", [-123456789012345678901234567890, 2]),
    ],
)
def test_whole_numbers_of_any_length_are_read(text: str, values: list[int]) -> None:
    found = whole_numbers(words(Chunk(np.frombuffer(text.encode(), np.uint8), 1, True)), "a number")
    assert found.tolist() == values


@pytest.mark.parametrize(
    "text", ["1.0", "+", "-", "", "1e3", "0x1", "1_000", "--1", "+-1", "12a", "٣", "1" * 20 + "x"]
)
def test_what_is_no_whole_number_is_refused(text: str) -> None:
    with pytest.raises(InputError, match="line 3: a number is a whole number"):
        whole_numbers(words(Chunk(np.frombuffer(f"1\n2\n3 {text or '.'}".encode(), np.uint8), 1, True)), "a number")
