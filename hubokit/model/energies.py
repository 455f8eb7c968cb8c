"""Exact energies of given states, as array work over blocks of terms."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.states import States
from hubokit.model.terms import Block

CELLS = 2**22
"""Products held at once."""


def integer_energies(blocks: Sequence[Block], states: States) -> NDArray[Any]:
    """Sum of weights times products for each state.

    Parameters
    ----------
    blocks : sequence of Block
        int64 weights (their absolute sum is below 2**62, so nothing wraps) or objects.
    states : int8 array, shape (m, n)
        Values of the domain; the product is plain multiplication for spins and booleans alike.

    Returns
    -------
    int64 or object array, shape (m,)
    """
    wide = any(block.weights.dtype == object for block in blocks)
    totals = np.zeros(len(states), dtype=object if wide else np.int64)
    if len(states) == 0:
        return totals
    columns = np.ascontiguousarray(states.T)
    for block in blocks:
        step = max(1, CELLS // len(states))
        for start in range(0, len(block), step):
            members = block.members[start : start + step]
            products = columns[members[:, 0]]
            for place in range(1, block.locality):
                products = products * columns[members[:, place]]
            weights = block.weights[start : start + step]
            totals = totals + weights @ products.astype(totals.dtype)
    return totals
