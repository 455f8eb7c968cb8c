"""A state with more than one best auxiliary setting, found by algebra on small clusters where that works."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.states import from_bits, unpack
from hubokit.validation.case import Case, States

#: Most original variables of which every state is tried.
ALL_STATES = 14
#: The same where the model is not quadratic and each state takes a search of its own.
SEARCHED_STATES = 10
#: Clusters that are looked into one by one, the most variables each may touch, and random states tried last.
CLUSTERS, TOUCHED, RANDOM = 256, 12, 4096


def tied_state(case: Case) -> States | None:
    """An original state, int8 (n,), with multiplicity above one, or None when none was found.

    The projection offers one where its tables show it. Else every state is tried where there are few; or,
    for the first clusters of auxiliaries, every setting of the variables that one cluster touches (the
    multiplicity of a state is a product over clusters, so a tie of one cluster is a tie of the state); else
    states at random.
    """
    n = len(case.originals)
    if not case.projectable:
        return _searched(case)
    offered = case.projection.multiplicity_witness()
    if offered is not None and (found := _first_tied(case, offered)) is not None:
        return found
    if n <= ALL_STATES:
        return _first_tied(case, from_bits(unpack(np.arange(2**n), n), case.model.domain))
    for touched in _touched_sets(case):
        states = np.full((2 ** len(touched), n), 1 if case.model.domain == "spin" else 0, np.int8)
        settings = unpack(np.arange(len(states)), len(touched))
        states[:, touched] = from_bits(settings, case.model.domain)
        found = _first_tied(case, states)
        if found is not None:
            return found
    if n > 2**16:
        return None
    rng = np.random.default_rng(0)
    bits = rng.integers(0, 2, (min(RANDOM, 2**26 // n), n), np.uint8)
    return _first_tied(case, from_bits(bits, case.model.domain))


def _searched(case: Case) -> States | None:
    """A tied state of a model that is not quadratic, each state's auxiliaries searched on their own."""
    n = len(case.originals)
    if n <= SEARCHED_STATES:
        bits = unpack(np.arange(2**n), n)
    else:
        bits = np.random.default_rng(0).integers(0, 2, (2**SEARCHED_STATES, n), np.uint8)
    for state in from_bits(bits, case.model.domain):
        if case.projected_witness(state).multiplicity != 1:
            found: States = state
            return found
    return None


def _first_tied(case: Case, states: States) -> States | None:
    for start in range(0, len(states), 2**12):
        counts = np.asarray(case.projection.multiplicities(states[start : start + 2**12]), object)
        tied = np.flatnonzero(counts != 1)
        if len(tied):
            found: States = states[start + int(tied[0])]
            return found
    return None


def _touched_sets(case: Case) -> list[NDArray[Any]]:
    """Columns of original variables that the first few clusters touch, distinct, at most `TOUCHED` each."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    model = case.model
    place = np.full(model.size, -1)
    place[[model.positions[label] for label in case.originals]] = np.arange(len(case.originals))
    pairs = [block.members for block in model.blocks if block.locality == 2]
    ends = pairs[0] if pairs else np.zeros((0, 2), np.int64)
    added = place[ends] < 0
    inner, link = ends[added.all(axis=1)], ends[added.any(axis=1) & ~added.all(axis=1)]
    ones = np.ones(len(inner), np.int8)
    graph = coo_array((ones, (inner[:, 0], inner[:, 1])), shape=(model.size, model.size))
    _, cluster = connected_components(graph, directed=False)
    own = np.where(place[link[:, 0]] < 0, link[:, 0], link[:, 1])
    other = np.where(place[link[:, 0]] < 0, link[:, 1], link[:, 0])
    order = np.argsort(cluster[own], kind="stable")
    _, starts = np.unique(cluster[own][order], return_index=True)
    parts = np.split(place[other][order], starts[1:]) if len(order) else []
    small = [np.unique(part) for part in parts[: 4 * CLUSTERS]]
    return [part for part in small if len(part) <= TOUCHED][:CLUSTERS]
