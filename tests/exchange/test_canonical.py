"""Canonical bytes are those of RFC 8785, arrays and all."""

from __future__ import annotations

import hashlib
import json
from typing import Any

import numpy as np
import pytest
import rfc8785
from hypothesis import given
from hypothesis import strategies as st

from hubokit.exchange.canonical import canonical_parts, document_digest
from hubokit.exchange.documents import document_text, document_to_json, plain_json
from hubokit.exchange.layout import line_starts
from hubokit.model.hamiltonian import Hamiltonian

safe = st.integers(-(2**53) + 1, 2**53 - 1)
texts = st.text(st.characters(exclude_categories=["Cs"]), max_size=6)
values = st.recursive(
    st.one_of(st.none(), st.booleans(), safe, texts, st.floats(allow_nan=False, allow_infinity=False)),
    lambda inner: st.one_of(st.lists(inner, max_size=4), st.dictionaries(texts, inner, max_size=4)),
    max_leaves=12,
)


@given(values)
def test_the_bytes_are_those_of_rfc8785(value: Any) -> None:
    assert b"".join(canonical_parts(value)) == rfc8785.dumps(value)


def test_keys_stand_in_the_order_of_their_utf16_code_units() -> None:
    keys = {"\ufb01": 1, "\U0001f600": 2, "z": 3}
    assert list(json.loads(b"".join(canonical_parts(keys)))) == ["z", "\U0001f600", "\ufb01"]
    assert b"".join(canonical_parts(keys)) == rfc8785.dumps(keys)


@given(st.lists(st.lists(safe, min_size=2, max_size=2), min_size=1, max_size=5))
def test_an_array_stands_for_its_list(rows: list[list[int]]) -> None:
    array = np.array(rows, np.int64)
    assert b"".join(canonical_parts({"rows": array})) == rfc8785.dumps({"rows": rows})


def test_the_document_digest_is_sha256_over_rfc8785_without_digests() -> None:
    fields = plain_json(document_to_json(Hamiltonian({("b", "ä"): "1/3", ("b",): 10**20, (): -1}, "spin")))
    digest = fields.pop("digests")["document"]
    assert digest == "sha256:" + hashlib.sha256(rfc8785.dumps(fields)).hexdigest()


def test_the_digest_does_not_depend_on_the_layout() -> None:
    model = Hamiltonian({("a", "b"): 3, ("c",): 1}, "boolean")
    fields = document_to_json(model)
    again = json.loads(b"".join(document_text(fields)))
    assert document_digest(again) == fields["digests"]["document"]
    assert document_digest(dict(reversed(again.items()))) == fields["digests"]["document"]


def random_model(seed: int, size: int, count: int) -> Hamiltonian:
    draw = np.random.default_rng(seed)
    members = [draw.integers(0, size, (count, k)) for k in (1, 2, 3)]
    return Hamiltonian.from_arrays(members, [draw.integers(1, 9, count) for _ in members], "spin", size=size)


def lines_of(model: Hamiltonian) -> list[bytes]:
    return b"".join(document_text(document_to_json(model))).split(b"\n")


def test_the_lines_of_a_large_document_are_short() -> None:
    lines = lines_of(random_model(1, 40, 400))
    assert max(map(len, lines)) < 250
    assert len(lines) > 100


@pytest.mark.parametrize("seed", range(5))
def test_one_weight_changed_changes_one_line_beside_the_digests(seed: int) -> None:
    model = random_model(seed, 40, 400)
    term, _ = model.terms()[-7 * (seed + 1)]
    other = model + Hamiltonian({term: 100}, "spin")
    changed = [pair for pair in zip(lines_of(model), lines_of(other), strict=True) if pair[0] != pair[1]]
    assert len([pair for pair in changed if b"sha256" not in pair[0]]) == 1


def test_one_term_more_changes_one_line_of_members_and_one_of_weights() -> None:
    model = Hamiltonian({(f"v{i}", f"v{j}"): 1 for i in range(9) for j in range(i) if i != 5 or j != 3}, "spin")
    more = model + Hamiltonian({("v3", "v5"): 7}, "spin")
    before = set(lines_of(model))
    added = [line for line in lines_of(more) if line not in before and b"sha256" not in line]
    assert len(added) == 2


def test_a_line_begins_where_the_first_member_changes_and_after_sixteen_terms() -> None:
    members = np.array([[0, i] for i in range(1, 20)] + [[1, 2], [3, 4], [3, 5]])
    assert line_starts(members).tolist() == [16, 19, 20]
