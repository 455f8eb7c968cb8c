"""States pack into integers whose order is the lift order."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from hubokit.model.states import change_domain, from_bits, in_lift_order, pack, to_bits, unpack
from tests.strategies import all_states


@given(st.integers(0, 8), st.sampled_from(["spin", "boolean"]))
def test_packed_order_is_lift_order(size, domain):
    states = np.array([list(s.values()) for s in all_states([f"q{i}" for i in range(size)], domain)], np.int8)
    states = states.reshape(2**size, size)
    assert pack(to_bits(states, domain)).tolist() == list(range(2**size))
    assert (from_bits(unpack(np.arange(2**size), size), domain) == states).all()


@given(st.integers(1, 70), st.integers(0, 1000), st.sampled_from(["spin", "boolean"]))
def test_rows_sort_into_lift_order(size, seed, domain):
    bits = np.random.default_rng(seed).integers(0, 2, (20, size), np.uint8)
    ordered = to_bits(in_lift_order(from_bits(bits, domain), domain), domain)
    assert ordered.tolist() == sorted(bits.tolist())


def test_both_conventions_map_both_ways():
    x = np.array([[0, 1]], np.int8)
    assert change_domain(x, "boolean", "spin", "1-2x").tolist() == [[1, -1]]
    assert change_domain(x, "boolean", "spin", "2x-1").tolist() == [[-1, 1]]
    for convention in ("1-2x", "2x-1"):
        there = change_domain(x, "boolean", "spin", convention)
        assert (change_domain(there, "spin", "boolean", convention) == x).all()
