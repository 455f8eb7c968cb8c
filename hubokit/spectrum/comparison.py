"""A reduced model against its source, over every state of the original variables.

With E(x) the source, F(x, a) the reduced model, P(x) the minimum of F over its auxiliaries and m(x) the number of
settings that reach it, everything that the claims of a verdict need is found exactly, in one pass over the 2**n
states x.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor
from fractions import Fraction
from math import lcm
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from hubokit.errors import InputError, LimitError
from hubokit.spectrum.comparison_result import Comparison, ScaleFrom, comparison_of
from hubokit.spectrum.comparison_walk import Comparing
from hubokit.spectrum.derivatives import Layout
from hubokit.spectrum.elimination import ground_states
from hubokit.spectrum.exhaustive import PACKED
from hubokit.spectrum.polynomial import INT64_BOUND, Polynomial, polynomial_of
from hubokit.spectrum.slabs import Progress, run_slabs
from hubokit.spectrum.two_levels import elimination_order

if TYPE_CHECKING:
    from hubokit.model.hamiltonian import Hamiltonian
    from hubokit.model.trail import Origin

WIDTH_LIMIT = 12
"""Most auxiliaries on which another one may depend when it is eliminated."""

WHOLE, LOW = 16, 14
"""Models of at most WHOLE variables are one block; larger ones have blocks of 2**LOW states."""


def exhaustive_comparison(
    source: Hamiltonian,
    model: Hamiltonian,
    auxiliaries: Sequence[str],
    *,
    scale: Fraction | None = None,
    shift: Fraction | None = None,
    limit: int = 1000,
    executor: Executor | None = None,
    progress: Progress | None = None,
    time: float | None = 600.0,
) -> Comparison:
    """Compare a reduced model with its source at every state of the source.

    The auxiliaries are eliminated inside each block of states, cluster by cluster, so that the cost is 2**n times
    the sum over clusters of auxiliaries of their own enumeration (less for tree-like clusters), never 2**(n + a).

    Parameters
    ----------
    source : Hamiltonian
        E, over n variables.
    model : Hamiltonian
        F, in the same domain, over the variables of the source and the auxiliaries; any locality.
    auxiliaries : sequence of str
        The other variables of the model.
    scale, shift : Fraction, optional
        The declared alpha > 0 (default 1) and beta (default 0). Where neither is given, those for which
        ``P = alpha * E + beta`` everywhere are searched for.
    limit : int
        Most minimisers listed, of E and of P.
    executor, progress, time
        As for `hubokit.spectrum.exhaustive.ground_states`.

    Returns
    -------
    Comparison

    Raises
    ------
    InputError
        Domains or variables that do not fit together; a scale that is not positive.
    LimitError
        Weights beyond int64, auxiliaries too entangled, too many variables, or too long for `time`.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> E = Hamiltonian({("a", "b", "c"): -1}, domain="boolean")
    >>> F = Hamiltonian({("y",): 2, ("a", "y"): -1, ("b", "y"): -1, ("c", "y"): -1}, domain="boolean")
    >>> found = exhaustive_comparison(E, F, ["y"])
    >>> found.same_energies, found.multiplicities, found.ground_multiplicities, found.auxiliary_gap
    (True, (1, 2), (1, 1), Fraction(1, 1))
    """
    _check(source, model, auxiliaries, scale)
    energy = polynomial_of(source)
    if max(model.weight_bound, source.weight_bound) >= INT64_BOUND // 4:
        raise LimitError(
            "the comparison runs in int64, which these weights exceed: use a coarser resolution (H.rounded), or "
            "evidence by projection"
        )
    bare, factors = _parted(model.with_labels((*source.labels, *auxiliaries)), source.size)
    order = elimination_order(range(len(auxiliaries)), factors)
    width = max((len(bucket.neighbours) for bucket in order), default=0)
    if width > WIDTH_LIMIT:
        raise LimitError(
            f"an auxiliary depends on {width} others when it is eliminated, and {WIDTH_LIMIT} are the most: "
            "use evidence by projection, or by a neighbourhood of known states"
        )
    n = source.size
    low = n if n <= WHOLE else min(LOW, n)
    low = min(low, 22 - width)  # tables of 2**width vectors stay below some hundred megabytes
    fixed = min(6, max(0, n - low - 5))

    def task(alpha: Fraction, beta: Fraction) -> Comparing:
        relation = _relation(source, model, alpha, beta)
        largest = relation[0] * model.weight_bound + relation[1] * source.weight_bound + abs(relation[2])
        layout = Layout(low, n - low - fixed, fixed)
        return Comparing(
            energy, bare, tuple(factors.items()), order, relation, limit, layout, wide=largest >= INT64_BOUND
        )

    scale_from: ScaleFrom = "declared"
    if scale is None and shift is None:
        candidate = _candidate(source, model, auxiliaries)
        scale_from = "default" if candidate is None else "found"
        alpha, beta = candidate or (Fraction(1), Fraction(0))
    else:
        alpha, beta = Fraction(1) if scale is None else scale, Fraction(0) if shift is None else shift
    total = run_slabs(task(alpha, beta), executor=executor, progress=progress, time=time)
    if scale_from == "found" and total["wrong"][0]:
        # two states fixed the only candidate, so that there is no other; the default decides
        scale_from, alpha, beta = "default", Fraction(1), Fraction(0)
        total = run_slabs(task(alpha, beta), executor=executor, progress=progress, time=None)
    return comparison_of(source, model, total, alpha, beta, scale_from)


def _check(source: Hamiltonian, model: Hamiltonian, auxiliaries: Sequence[str], scale: Fraction | None) -> None:
    if source.domain != model.domain:
        raise InputError(f"the source is a {source.domain} model and the reduced model a {model.domain} model")
    wanted = {*source.labels, *auxiliaries}
    if len(set(auxiliaries)) != len(auxiliaries) or len(wanted) != source.size + len(auxiliaries):
        raise InputError("an auxiliary is named twice, or is a variable of the source", "auxiliaries")
    if wanted != set(model.labels):
        odd = sorted(wanted ^ set(model.labels))[0]
        raise InputError(f"variable {odd!a} is not in both: the model has the source's variables and the auxiliaries")
    if scale is not None and scale <= 0:
        raise InputError(f"the scale is {scale}; it must be positive", "scale")
    if source.size > PACKED:
        raise LimitError(f"2**{source.size} states are too many to visit: use evidence by projection")


def _parted(model: Hamiltonian, size: int) -> tuple[Polynomial, dict[frozenset[int], Polynomial]]:
    """F without auxiliaries, and the coefficient of each product of auxiliaries; the first `size` variables are x."""
    spin = model.domain == "spin"
    parts: dict[tuple[int, ...], list[tuple[npt.NDArray[np.int64], npt.NDArray[np.int64]]]] = {(): []}
    for block in model.blocks:
        members = block.members.astype(np.int64)
        original = members < size
        masks = np.where(original, np.int64(1) << np.where(original, size - 1 - members, 0), 0).sum(axis=1)
        counts = (~original).sum(axis=1)
        for count in np.unique(counts).tolist():
            rows = np.flatnonzero(counts == count)
            groups, place = np.unique(members[rows, block.locality - count :] - size, axis=0, return_inverse=True)
            by_group = np.argsort(place.ravel(), kind="stable")
            bounds = np.searchsorted(place.ravel()[by_group], np.arange(len(groups) + 1))
            for number, group in enumerate(groups.tolist()):
                chosen = rows[by_group[bounds[number] : bounds[number + 1]]]
                parts.setdefault(tuple(group), []).append((masks[chosen], block.weights[chosen]))
    gathered = {
        group: Polynomial(
            size,
            spin,
            np.concatenate([np.zeros(0, np.int64), *(masks for masks, _ in pieces)]),
            np.concatenate([np.zeros(0, np.int64), *(weights for _, weights in pieces)]),
        )
        for group, pieces in parts.items()
    }
    bare = gathered.pop(())
    return bare, {frozenset(group): polynomial for group, polynomial in gathered.items()}


def _relation(source: Hamiltonian, model: Hamiltonian, alpha: Fraction, beta: Fraction) -> tuple[int, int, int]:
    """(A, B, C) with ``P = alpha * E + beta`` exactly when ``A * p == B * e + C``, p and e in whole resolutions."""
    parts = (model.resolution, alpha * source.resolution, alpha * source.constant + beta - model.constant)
    unit = lcm(*(part.denominator for part in parts))
    a, b, c = (int(part * unit) for part in parts)
    return a, b, c


def _candidate(
    source: Hamiltonian, model: Hamiltonian, auxiliaries: Sequence[str]
) -> tuple[Fraction, Fraction] | None:
    """The only alpha > 0 and beta that can hold everywhere, from two states of different E; 1 where E is constant."""
    first = np.ones(source.size, np.int8) if source.domain == "spin" else np.zeros(source.size, np.int8)
    energy, least = source.energy(first), _projected(source, model, auxiliaries, first)
    if not len(source):
        return Fraction(1), least - energy
    other = _other_level(source, first)
    alpha = (_projected(source, model, auxiliaries, other) - least) / (source.energy(other) - energy)
    return (alpha, least - alpha * energy) if alpha > 0 else None


def _projected(
    source: Hamiltonian, model: Hamiltonian, auxiliaries: Sequence[str], state: npt.NDArray[np.int8]
) -> Fraction:
    """P at one state: the least energy of what is left of F when x is put in."""
    fixed: dict[str, Origin | int] = dict(zip(source.labels, state.tolist(), strict=True))
    left = model.substituted(fixed)
    return ground_states(left, limit=1).energy if auxiliaries else left.constant


def _other_level(source: Hamiltonian, first: npt.NDArray[np.int8]) -> npt.NDArray[np.int8]:
    """A state whose energy differs from that of `first`; the source has terms.

    The difference from that energy is a polynomial other than zero. Each variable in turn keeps its first value when
    that leaves something other than zero, and takes its second value when not.
    """
    values = (1, -1) if source.domain == "spin" else (0, 1)
    left = source - source.energy(first)
    other = first.copy()
    for position, label in enumerate(source.labels):
        kept = left.substituted({label: values[0]})
        if len(kept) or kept.constant:
            other[position], left = values[0], kept
        else:
            other[position], left = values[1], left.substituted({label: values[1]})
    return other
