"""Bad JSON documents: one error that names file and place, at once, whatever is in the file."""

from __future__ import annotations

import copy
import gzip
import json
import tracemalloc
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from hubokit.errors import HubokitError
from hubokit.exchange import files
from hubokit.exchange.formats import read

DIGEST = "sha256:" + "0" * 64
BASE: dict[str, Any] = {
    "document": "hubokit/model",
    "version": "1.0",
    "domain": "spin",
    "convention": "1-2x",
    "variables": ["a", "b", "c"],
    "resolution": "1/2",
    "constant": "3/2",
    "terms": [
        {"locality": 1, "members": [[0], [2]], "weights": [1, -4]},
        {"locality": 2, "members": [[0, 1]], "weights": [2]},
    ],
}
SOURCE = {"step": "source", "digest": DIGEST}
STEP = {"step": "reduction", "start": DIGEST, "scale": "1", "shift": "0"}


def changed(pointer: str, value: Any) -> bytes:
    """The base with one place set, or taken out where the value is ``...``."""
    document = copy.deepcopy(BASE)
    *path, last = [int(step) if step.isdigit() else step for step in pointer.split("/")[1:]]
    place: Any = document
    for step in path:
        place = place[step]
    if value is ...:
        del place[last]
    else:
        place[last] = value
    return json.dumps(document).encode()


TEXT = json.dumps(BASE)
PLACES: list[tuple[str, Any, str]] = [
    *((f"/{name}", ..., f'the field "{name}" is missing') for name in BASE),
    ("/document", "hubokit/thing", "/document: a kind of document that is not known"),
    ("/document", 7, "/document: a kind of document that is not known: 7"),
    ("/version", "2.0", '/version: version "2.0" is not read here'),
    ("/version", 1.0, "/version: must be a string"),
    ("/version", "1.x", "/version"),
    ("/domain", "ising", '/domain: must be "spin" or "boolean"'),
    ("/domain", None, "/domain"),
    ("/convention", "x-2", '/convention: must be "1-2x" or "2x-1"'),
    ("/variables", {}, "/variables: must be a list"),
    ("/variables", ["a", "b", "a"], '/variables/2: the name "a" stands twice'),
    ("/variables", ["a", "", "c"], "/variables/1: a variable name has 1 to 1000 characters"),
    ("/variables", ["a", 7, "c"], "/variables/1: a variable name is a string, not 7"),
    ("/variables", ["a", "\u00e9", "e\u0301"], "/variables: .* stands twice .after Unicode NFC."),
    ("/variables", ["a", "n" * 1001, "c"], "/variables/1"),
    ("/variables", ["a", "\ud800", "c"], "/variables: .* lone surrogate"),
    ("/variables", ["a"], "/terms/0/members/1/0: member 2 is out of range; there are 1 variables"),
    ("/resolution", "0", "/resolution"),
    ("/resolution", "-1", "/resolution: .* A?.*above zero|/resolution"),
    ("/resolution", 0.5, "/resolution: must be a string"),
    ("/resolution", "1/0", "/resolution"),
    ("/resolution", "0.5", "/resolution"),
    ("/constant", "1.5", "/constant"),
    ("/constant", "", "/constant"),
    ("/constant", "9" * 5000, "/constant: holds 5000 characters"),
    ("/constant", "1\n", "/constant"),
    ("/terms", None, "/terms: must be a list"),
    ("/terms/0", [], "/terms/0: must be an object"),
    ("/terms/0/locality", 0, "/terms/0/locality: must be at least 1"),
    ("/terms/0/locality", True, "/terms/0/locality: must be an integer"),
    ("/terms/0/locality", 2, "/terms/1/locality: locality 2 has a block already|/terms/0/members/0: 1 members"),
    ("/terms/0/locality", 10**9, "/terms/0/locality: must be at most"),
    ("/terms/0/members", [[0]], "/terms/0/weights: 2 weights for 1 terms"),
    ("/terms/0/members", [[0], [0]], "/terms/0/members/1: the term .* stands twice, first at /terms/0/members/0"),
    ("/terms/0/members", [[0], []], "/terms/0/members/1: the list is empty"),
    ("/terms/0/members", [[0], 2], "/terms/0/members/1: a list of integers is needed here, not 2"),
    ("/terms/0/members", [[0], ["2"]], '/terms/0/members/1/0: a member is a whole number .* not "2"'),
    ("/terms/0/members", [[0], [True]], "/terms/0/members/1/0: .* not true"),
    ("/terms/0/members", [[0], [3]], "/terms/0/members/1/0: member 3 is out of range"),
    ("/terms/0/members", [[0], [-1]], "/terms/0/members/1/0: .* not -1"),
    ("/terms/0/members", [[0], [1.5]], "/terms/0/members/1/0: .* not 1.5"),
    ("/terms/0/members", [[0], [10**40]], "/terms/0/members/1/0"),
    ("/terms/1/members", [[0, 1, 2]], "/terms/1/members/0: 3 members in a block of locality 2"),
    ("/terms/1/members", [[1, 1]], "/terms/1/members/0: a member stands twice in the term"),
    ("/terms/1/members", {"0": [0, 1]}, "/terms/1/members: must be a list"),
    ("/terms/0/weights", [1], "/terms/0/weights: 1 weights for 2 terms"),
    ("/terms/0/weights", [1, "2"], "/terms/0/weights/1"),
    ("/terms/0/weights", ["1", 2], "/terms/0/weights/1: weights of one block are all numbers or all strings"),
    ("/terms/0/weights", [1, 2**53], "/terms/0/weights/1: .* write all weights of the block as strings"),
    ("/terms/0/weights", [1, 0.5], "/terms/0/weights/1: .* not 0.5"),
    ("/terms/0/weights", [1, None], "/terms/0/weights/1: .* not null"),
    ("/terms/0/weights", ["1", "1e3"], "/terms/0/weights/1"),
    ("/terms/0/weights", ["1", "9" * 1001], "/terms/0/weights/1: a weight of 1001 characters"),
    ("/terms/0/weights", [1, float("nan")], "/terms/0/weights/1: .* not NaN"),
    ("/terms/0/colour", "red", "/terms/0/colour: there is no field of this name"),
    ("/colour", "red", "/colour: there is no field of this name"),
    ("/a~1b", 1, "/a~01b: there is no field"),
    ("/auxiliaries", ["z"], '/auxiliaries/0: the auxiliary "z" is not among the variables'),
    ("/auxiliaries", ["a", "a"], "/auxiliaries/1"),
    ("/auxiliaries", "a", "/auxiliaries: must be a list"),
    ("/notes", [], "/notes: must be an object"),
    ("/notes", {"x": float("inf")}, "/notes/x: not a finite number"),
    ("/notes", {"x": [1, 2**60]}, r"/notes/x/1: an integer beyond 2\*\*53 - 1"),
    ("/notes", {"x": 2**53}, "/notes/x: an integer beyond"),
    ("/notes", {"x": {"y": -(2**53)}}, "/notes/x/y: an integer beyond"),
    ("/extensions", {"x": "\udfff"}, "/extensions/x: .* lone surrogate"),
    ("/intent", {"aim": 1}, "/intent/aim: there is no field of this name"),
    ("/intent", {"ground_energy": 3}, "/intent/ground_energy: must be a string"),
    ("/intent", {"target_states": {"variables": ["a"], "states": [[2]]}}, "/intent/target_states/states/0/0"),
    (
        "/intent",
        {"target_states": {"variables": ["a", "b"], "states": [[1, 1], [1]]}},
        "/intent/target_states/states/1: 1 values for 2 variables",
    ),
    ("/intent", {"target_states": {"variables": ["a", "a"], "states": []}}, "/intent/target_states/variables/1"),
    ("/intent", {"target_states": {"states": []}}, 'the field "variables" is missing from this object'),
    ("/digests", {"function": "md5:1"}, "/digests/function"),
    ("/digests", {"function": DIGEST}, "/digests/function: the function was changed"),
    ("/digests", {"document": DIGEST}, "/digests/document: a field was changed"),
    ("/trail", [STEP], "/trail/0"),
    ("/trail", [SOURCE, {**STEP, "scale": "0"}], "/trail/1/scale"),
    ("/trail", [SOURCE, {**STEP, "scale": "-1"}], "/trail/1/scale"),
    ("/trail", [SOURCE, SOURCE], "/trail/1"),
    ("/trail", [SOURCE, {**STEP, "start": "sha256:" + "1" * 64}], "/trail/1/start: the first step does not start"),
    ("/trail", [{**SOURCE, "model": {**BASE, "domain": "x"}}], "/trail/0/model/domain"),
    ("/trail", [{**SOURCE, "model": BASE}], "/trail/0/digest: the embedded source is another function"),
    ("/trail", [{**SOURCE, "model": {**BASE, "trail": []}}], "/trail/0/model/trail: there is no field"),
    ("/trail", [{**SOURCE, "model": {**BASE, "variables": ["a"]}}], "/trail/0/model/terms/0/members/1/0"),
    ("/trail", [{**SOURCE, "origin": {"a": ["maybe", "b"]}}], "/trail/0/origin/a/0"),
    ("/trail", [{**SOURCE, "origin": {"a": 3}}], "/trail/0/origin/a: must be at most 1"),
]
TEXTS: list[tuple[str, bytes, str]] = [
    ("empty", b"", "the file is empty"),
    ("white space", b"  \n ", "the file is empty"),
    ("a list", b"[]", "a document is a JSON object, not a list of 0"),
    ("a number", b"7", "a document is a JSON object, not 7"),
    ("null", b"null", "a document is a JSON object, not null"),
    ("cut in the middle", TEXT[: len(TEXT) // 2].encode(), "line 1 column .*: not JSON"),
    ("cut before the end", TEXT[:-1].encode(), "not JSON"),
    ("two documents", (TEXT + TEXT).encode(), "not JSON: Extra data"),
    ("single quotes", TEXT.replace('"', "'").encode(), "not JSON"),
    ("a trailing comma", TEXT[:-1].encode() + b",}", "not JSON"),
    ("a comment", b"// model\n" + TEXT.encode(), "line 1 column 1: not JSON"),
    ("a control character", TEXT.replace('"a"', '"a\x01"').encode(), "not JSON: Invalid control character"),
    ("a key twice", TEXT[:-1].encode() + b', "domain": "boolean"}', 'the key "domain" stands twice in one object'),
    (
        "a key twice inside",
        TEXT.replace('"locality": 2', '"locality": 2, "locality": 2').encode(),
        "/terms/1: the key",
    ),
    ("a key twice in notes", TEXT[:-1].encode() + b', "notes": {"x": {"y": 1, "y": 2}}}', "/notes/x: the key"),
    ("NaN", TEXT.replace("-4", "NaN").encode(), "/terms/0/weights/1"),
    ("minus infinity", TEXT.replace("-4", "-Infinity").encode(), "/terms/0/weights/1"),
    ("an exponent out of range", TEXT.replace("-4", "1e999999999").encode(), "/terms/0/weights/1"),
    ("ten million digits", TEXT.replace("-4", "4" * 10**7).encode(), "line 1: a number of 10000000 digits"),
    ("ten million digits as a string", TEXT.replace("-4", '"' + "4" * 10**7 + '"').encode(), "/terms/0/weights"),
    ("ten million digits in a constant", TEXT.replace("3/2", "3" * 10**7).encode(), "/constant: holds 10000000"),
    ("nested ten thousand deep", b"[" * 10_000 + b"]" * 10_000, "nested deeper than 100 levels"),
    ("a million open brackets", b"[" * 10**6, "nested deeper than 100 levels"),
    ("objects ten thousand deep", b'{"a":' * 10_000 + b"1" + b"}" * 10_000, "nested deeper than 100 levels"),
    (
        "notes two hundred deep",
        TEXT[:-1].encode() + b', "notes": {"x": ' + b"[" * 200 + b"]" * 200 + b"}}",
        "/notes/x/0.*: nested deeper than 100 levels",
    ),
    ("UTF-16", TEXT.encode("utf-16"), "line 1: the text is not UTF-8"),
    ("Latin-1", TEXT.replace('"b"', '"é"').encode("latin-1"), "line 1: the text is not UTF-8"),
    ("binary rubbish", bytes(range(256)) * 40, "the text is not UTF-8"),
    ("zeros", bytes(10_000), "not JSON"),
    ("a verdict of nothing", b'{"document": "hubokit/verdict", "version": "1.0"}', 'the field "claims" is missing'),
    (
        "a summary",
        b'{"document": "hubokit/summary", "version": "1.0", "command": "show", "made_by": "x"}',
        "/document: a summary is written for reading by other programs",
    ),
]
CASES = [
    (f"{pointer} {index}", changed(pointer, value), message) for index, (pointer, value, message) in enumerate(PLACES)
]
CASES += TEXTS


def test_the_base_itself_is_read(tmp_path: Path) -> None:
    (tmp_path / "bad.json").write_text(TEXT)
    assert read(tmp_path / "bad.json").size == 3  # type: ignore[union-attr]


def test_there_are_more_than_a_hundred_bad_documents() -> None:
    assert len({content for _, content, _ in CASES}) > 100


def error_of(path: Path) -> str:
    """The one line that reading gives."""
    with pytest.raises(HubokitError) as caught:
        read(path)
    return str(caught.value)


@pytest.mark.parametrize(("content", "message"), [case[1:] for case in CASES], ids=[case[0][:40] for case in CASES])
def test_a_bad_document_gives_one_line_with_file_and_place(content: bytes, message: str, tmp_path: Path) -> None:
    import re

    path = tmp_path / "bad.json"
    path.write_bytes(content)
    line = error_of(path)
    assert line.startswith(f"{path}: ")
    assert re.search(message, line), line
    assert len(line) < len(str(path)) + 400
    assert "\n" not in line


@pytest.mark.parametrize("case", [case for case in CASES if len(case[1]) > 10**6], ids=lambda case: case[0])
def test_a_huge_bad_document_takes_little_memory(case: tuple[str, bytes, str], tmp_path: Path) -> None:
    path = tmp_path / "bad.json"
    path.write_bytes(case[1])
    tracemalloc.start()
    error_of(path)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 12 * len(case[1])


@pytest.mark.parametrize(
    ("damage", "message"),
    [
        (lambda data: data[:-9], "the gzip stream ends too early"),
        (lambda data: data[:20], "the gzip stream ends too early"),
        (lambda data: data[:-8] + b"\0" * 8, "not a gzip file, or a damaged one"),
        (lambda data: b"PK" + data, "not a gzip file, or a damaged one"),
        (lambda _: b"", "the gzip stream ends too early"),
        (lambda _: TEXT.encode(), "not a gzip file"),
        (lambda data: data + b"rubbish", "not a gzip file, or a damaged one"),
        (lambda data: gzip.compress(data), "the text is not UTF-8"),
    ],
)
def test_a_damaged_gz_gives_one_line(damage: Callable[[bytes], bytes], message: str, tmp_path: Path) -> None:
    path = tmp_path / "bad.json.gz"
    path.write_bytes(damage(gzip.compress(TEXT.encode())))
    assert message in error_of(path)


def test_a_gz_bomb_is_refused_with_the_limit(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(files, "INFLATE_LIMIT", 2**24)
    path = tmp_path / "bad.json.gz"
    path.write_bytes(gzip.compress(TEXT.encode() + b" " * 2**28, compresslevel=1))
    tracemalloc.start()
    assert "inflates to more than the limit of 16777216 bytes" in error_of(path)
    assert tracemalloc.get_traced_memory()[1] < 2**26
    tracemalloc.stop()
