"""The long lists of a document, checked by arrays, are accepted exactly when the schema accepts them."""

from __future__ import annotations

import copy
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hubokit.errors import InputError
from hubokit.exchange.schema_errors import refuse_invalid
from hubokit.exchange.schema_files import validator

BASE: dict[str, Any] = {
    "document": "hubokit/model",
    "version": "1.0",
    "domain": "spin",
    "convention": "1-2x",
    "variables": ["a", "b"],
    "resolution": "1",
    "constant": "0",
    "terms": [{"locality": 1, "members": [[0], [1]], "weights": [1, 2]}],
}

odd_items = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-3, 3),
    st.sampled_from([2**31 - 2, 2**31 - 1, 2**53 - 1, 2**53, -(2**53), 10**30, -1, 0]),
    st.sampled_from([1.0, 1.5, -2.0, 1e300, float("nan"), float("inf")]),
    st.sampled_from(["1", "-12", "0", "-0", "01", "", "1\n", " 1", "+1", "1.0", "x", "9" * 1000, "9" * 1001, "٣"]),
    st.just({}),
    st.lists(st.integers(0, 2), max_size=2),
)
good_rows = st.lists(st.lists(st.integers(0, 5), min_size=1, max_size=3), max_size=4)
odd_rows = st.lists(st.one_of(odd_items, st.lists(odd_items, max_size=3)), max_size=4)
weights = st.one_of(
    st.lists(st.integers(-(2**53), 2**53), max_size=4),
    st.lists(st.integers().map(str), max_size=4),
    st.lists(odd_items, max_size=4),
)
names = st.lists(st.one_of(st.sampled_from(["a", "b", "", "é", "n" * 1000, "n" * 1001]), odd_items), max_size=4)
pointers = st.sampled_from(
    [
        (("terms", 0, "members"), st.one_of(good_rows, odd_rows)),
        (("terms", 0, "weights"), weights),
        (("terms",), st.one_of(odd_rows, odd_items)),
        (("terms", 0), odd_items),
        (("variables",), names),
        (("auxiliaries",), names),
        (("intent",), st.fixed_dictionaries({"target_states": st.one_of(odd_items, st.just({}))})),
        (("target",), st.tuples(names, odd_rows)),
        (("embedded",), st.tuples(names, odd_rows, weights)),
        (("step",), names),
    ]
)


@st.composite
def documents(draw: st.DrawFn) -> dict[str, Any]:
    """Model documents with one to three lists replaced by something odd."""
    made = copy.deepcopy(BASE)
    for _ in range(draw(st.integers(1, 3))):
        path, strategy = draw(pointers)
        value = draw(strategy)
        if path == ("target",):
            made["intent"] = {"target_states": {"variables": value[0], "states": value[1]}}
        elif path == ("embedded",):
            block = {"locality": 1, "members": value[1], "weights": value[2]}
            digest = "sha256:" + "0" * 64
            model = {**copy.deepcopy(BASE), "variables": value[0], "terms": [block]}
            made["trail"] = [{"step": "source", "digest": digest, "model": model}]
        elif path == ("step",):
            digest = "sha256:" + "0" * 64
            step = {"step": "reduction", "start": digest, "scale": "1", "shift": "0", "auxiliaries": value}
            made["trail"] = [{"step": "source", "digest": digest}, step]
        else:
            place: Any = made
            for key in path[:-1]:
                try:
                    place = place[key]
                except (KeyError, IndexError, TypeError):
                    break
            else:
                fits = isinstance(place, dict) if isinstance(path[-1], str) else isinstance(place, list) and place
                if fits:
                    place[path[-1]] = value
    return made


def accepted(document: Any) -> bool:
    """What the array checks say."""
    try:
        refuse_invalid("model", document)
    except InputError:
        return False
    return True


@settings(max_examples=1500)
@given(documents())
def test_the_array_checks_accept_what_the_schema_accepts(document: dict[str, Any]) -> None:
    before = repr(document)
    assert accepted(document) == validator("model").is_valid(document)
    assert repr(document) == before


@pytest.mark.parametrize(
    ("key", "value", "good"),
    [
        ("members", [[0], [2**31 - 2]], True),
        ("members", [[0], [2**31 - 1]], False),
        ("weights", [1, 2**53 - 1], True),
        ("weights", [1, 2**53], False),
        ("weights", [1, -(2**53) + 1], True),
        ("weights", [1, -(2**53)], False),
        ("weights", ["1", "9" * 1000], True),
        ("weights", ["1", "9" * 1001], False),
        ("weights", [1, 2.0], True),
        ("weights", [1, "2"], False),
    ],
)
def test_both_draw_the_line_at_the_same_number(key: str, value: list[Any], good: bool) -> None:
    document = copy.deepcopy(BASE)
    document["terms"][0][key] = value
    assert accepted(document) == validator("model").is_valid(document) == good


def test_the_two_answers_are_compared_on_both_sides() -> None:
    broken = copy.deepcopy(BASE)
    broken["terms"][0]["weights"] = [1, True]
    assert accepted(BASE)
    assert validator("model").is_valid(BASE)
    assert not accepted(broken)
    assert not validator("model").is_valid(broken)
