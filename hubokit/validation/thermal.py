"""Thermal evenness: how unevenly the auxiliaries weigh the ground states at finite temperature.

In equilibrium at inverse temperature beta a ground state x of the reduced model has the weight
W(x) = sum over a of exp(-beta (F(x, a) - P(x))), at least m(x) and equal to it as the temperature falls. The
sum factorises over the clusters of coupled auxiliaries. These are figures: floating point is good enough, no
claim rests on them.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.validation.case import Case, States

Floats = NDArray[np.float64]

#: beta_T times the gap, at which evenness is given.
TEMPERATURES = (1.0, 3.0, 10.0)
#: Largest cluster whose settings are summed one by one, and clusters of more than one auxiliary at most.
LARGEST_CLUSTER, CLUSTERS = 20, 5000
#: Entries (ground states times auxiliaries or settings) held at most.
ENTRIES = 2**25


def log_weights(case: Case, ground_states: States, gap: Fraction) -> Floats:
    """log W of every ground state at every temperature.

    Parameters
    ----------
    case : Case
    ground_states : int8 array (g, n)
        Original states.
    gap : Fraction
        The gap in the model's energy scale; beta_T times it is 1, 3, 10.

    Returns
    -------
    float64 array, shape (3, g)

    Raises
    ------
    LimitError
        A cluster has more than `LARGEST_CLUSTER` auxiliaries, or there are too many states.
    """
    g, a = len(ground_states), len(case.auxiliaries)
    if g * max(a, 1) > ENTRIES:
        raise LimitError(f"{g} ground states of {a} auxiliaries")
    betas = np.array(TEMPERATURES) / float(gap)
    if not a:
        return np.zeros((len(betas), g))
    fields, pairs, couplings = _parted(case, ground_states)
    total = np.zeros((len(betas), g))
    for members in _clusters(a, pairs):
        total += _cluster_sum(case.model.domain, fields[:, members], members, pairs, couplings, betas)
    alone = np.setdiff1d(np.arange(a), pairs.ravel())
    step = 2 if case.model.domain == "spin" else 1
    for row, beta in enumerate(betas):
        total[row] += np.log1p(np.exp(-beta * step * np.abs(fields[:, alone]))).sum(axis=1)
    return total


def _parted(case: Case, states: States) -> tuple[Floats, NDArray[np.int64], Floats]:
    """Fields (g, a) that the auxiliaries feel at each state, pairs of coupled auxiliaries (p, 2), couplings (p,)."""
    from scipy.sparse import coo_array

    model = case.model
    unit = float(model.resolution)
    added = np.full(model.size, -1)
    added[[model.positions[label] for label in case.auxiliaries]] = np.arange(len(case.auxiliaries))
    original = np.full(model.size, -1)
    original[[model.positions[label] for label in case.originals]] = np.arange(len(case.originals))
    fields = np.zeros((len(states), len(case.auxiliaries)))
    pairs, couplings = np.zeros((0, 2), np.int64), np.zeros(0)
    for block in model.blocks:
        weights = block.weights.astype(np.float64) * unit
        if block.locality == 1:
            chosen = added[block.members[:, 0]] >= 0
            fields[:, added[block.members[chosen, 0]]] += weights[chosen]
        if block.locality == 2:
            inside = added[block.members] >= 0
            both, one = inside.all(axis=1), inside.any(axis=1) & ~inside.all(axis=1)
            pairs, couplings = added[block.members[both]], weights[both]
            first = inside[one, 0]
            own = np.where(first, block.members[one, 0], block.members[one, 1])
            other = np.where(first, block.members[one, 1], block.members[one, 0])
            shape = (len(case.originals), len(case.auxiliaries))
            matrix = coo_array((weights[one], (original[other], added[own])), shape=shape).tocsr()
            fields += states.astype(np.float64) @ matrix
    return fields, pairs, couplings


def _clusters(auxiliaries: int, pairs: NDArray[np.int64]) -> list[NDArray[np.int64]]:
    """Clusters of more than one auxiliary."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    if not len(pairs):
        return []
    graph = coo_array((np.ones(len(pairs), np.int8), (pairs[:, 0], pairs[:, 1])), shape=(auxiliaries,) * 2)
    _, cluster = connected_components(graph, directed=False)
    sizes = np.bincount(cluster)
    many = np.flatnonzero(sizes > 1)
    if sizes.max() > LARGEST_CLUSTER:
        raise LimitError(f"{sizes.max()} auxiliaries are coupled, settings of {LARGEST_CLUSTER} are summed")
    if len(many) > CLUSTERS:
        raise LimitError(f"{len(many)} clusters of coupled auxiliaries, {CLUSTERS} are summed")
    order = np.argsort(cluster, kind="stable")
    starts = np.concatenate([[0], np.cumsum(sizes)])
    return [order[starts[one] : starts[one + 1]] for one in many]


def _cluster_sum(
    domain: str,
    fields: Floats,
    members: NDArray[np.int64],
    pairs: NDArray[np.int64],
    couplings: Floats,
    betas: Floats,
) -> Floats:
    """log of the sum over one cluster's settings, relative to its best, shape (temperatures, g)."""
    size = len(members)
    if len(fields) << size > ENTRIES:
        raise LimitError(f"{len(fields)} ground states times 2^{size} settings of one cluster")
    column = {int(member): place for place, member in enumerate(members)}
    matrix = np.zeros((size, size))
    for row in np.flatnonzero(np.isin(pairs[:, 0], members)):
        first, second = sorted((column[int(pairs[row, 0])], column[int(pairs[row, 1])]))
        matrix[second, first] += couplings[row]
    low, high = (1.0, -1.0) if domain == "spin" else (0.0, 1.0)
    inner = np.zeros(1)
    for place in range(size):
        pull = _doubled(matrix[place, :place], low, high)
        inner = np.concatenate([inner + low * pull, inner + high * pull])
    logs = np.empty((len(betas), len(fields)))
    for state, field in enumerate(fields):
        energy = inner + _doubled(field, low, high)
        energy -= energy.min()
        logs[:, state] = [np.log(np.exp(-beta * energy).sum()) for beta in betas]
    return logs


def _doubled(weights: Floats, low: float, high: float) -> Floats:
    """Sum of weight * value for every setting of the variables, one doubling for each variable."""
    total = np.zeros(1)
    for weight in weights:
        total = np.concatenate([total + low * weight, total + high * weight])
    return total


def largest_ratio(log_weights_at: Floats) -> float:
    """Largest over smallest weight, inf where it passes the range of a float.

    Examples
    --------
    >>> largest_ratio(np.log(np.array([1.0, 2.0, 4.0])))
    4.0
    """
    spread = float(log_weights_at.max() - log_weights_at.min())
    return float(round(float(np.exp(spread)), 12)) if spread < 700 else float("inf")
