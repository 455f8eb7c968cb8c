"""Columns of terms agree with a dictionary of products, whatever the order, the repeats and the size of weights."""

from collections import Counter
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hubokit.errors import LimitError
from hubokit.model.terms import EXPANSION_LIMIT, canonical_blocks, product_parts, row_keys

WEIGHTS = st.one_of(st.integers(-9, 9), st.sampled_from([2**61, -(2**61), 2**62, 10**30, -(10**30)]))


@st.composite
def parts(draw):
    made = []
    for _ in range(draw(st.integers(0, 4))):
        width, rows = draw(st.integers(0, 4)), draw(st.integers(1, 6))
        members = draw(
            st.lists(st.lists(st.integers(-1, 5), min_size=width, max_size=width), min_size=rows, max_size=rows)
        )
        weights = draw(st.lists(WEIGHTS, min_size=rows, max_size=rows))
        made.append((np.array(members, np.int64).reshape(rows, width), np.array(weights, dtype=object)))
    return made


def by_dictionary(given_parts, domain):
    total = Counter()
    for members, weights in given_parts:
        for row, weight in zip(members.tolist(), weights.tolist(), strict=True):
            count = Counter(v for v in row if v >= 0)
            kept = count if domain == "boolean" else [v for v, c in count.items() if c % 2]
            total[tuple(sorted(kept))] += weight
    return {key: weight for key, weight in total.items() if weight}


@given(parts(), st.sampled_from(["spin", "boolean"]))
def test_canonical_blocks_are_the_dictionary_of_products(given_parts, domain):
    constant, blocks = canonical_blocks(given_parts, domain)
    found = {tuple(row): w for b in blocks for row, w in zip(b.members.tolist(), b.weights.tolist(), strict=True)}
    if constant:
        found[()] = constant
    assert found == by_dictionary(given_parts, domain)


@given(parts(), st.sampled_from(["spin", "boolean"]))
def test_blocks_are_sorted_distinct_and_narrow_when_they_can_be(given_parts, domain):
    _, blocks = canonical_blocks(given_parts, domain)
    assert [b.locality for b in blocks] == sorted({b.locality for b in blocks})
    for block in blocks:
        rows = block.members.tolist()
        assert rows == sorted(rows)
        assert all(a < b for row in rows for a, b in pairwise(row))
    narrow = sum(abs(int(w)) for b in blocks for w in b.weights) < 2**62
    assert all((b.weights.dtype == np.int64) == narrow for b in blocks)


@given(st.lists(st.lists(st.integers(0, 10**6), min_size=5, max_size=5), min_size=1, max_size=30))
def test_row_keys_order_rows_as_lists(rows):
    keys = row_keys(np.array(rows), 10**6 + 1)
    assert sorted(range(len(rows)), key=lambda i: [int(k[i]) for k in keys]) == sorted(
        range(len(rows)), key=lambda i: rows[i]
    )


def test_a_product_that_would_explode_is_refused_with_its_number():
    side = (np.arange(2**13)[:, None], np.ones(2**13, np.int64))
    with pytest.raises(LimitError, match=f"67,108,864 products; at most {EXPANSION_LIMIT:,}"):
        product_parts([side], [side])
