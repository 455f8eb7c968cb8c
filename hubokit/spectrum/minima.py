"""Single-flip local minima near given states of a quadratic model: what may trap a sampler beside a target.

A *local minimum* is a state whose energy no single flip lowers. Around a centre c with single-flip changes l_i and
second derivatives q_ij, the state with the flips T is one exactly when

    l_i + sum(q_ij, j in T)  is  <= 0 for every i in T (without j = i)  and  >= 0 for every i outside T.

The first half is met by few sets: each connected part of such a set (joined by negative q) must meet it by itself,
because couplings between parts only add to the left side. So connected parts are grown along negative q, the
self-supporting ones kept, put together, and tested in full: every set of at most `radius` flips is covered, though
few are written down.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import to_bits
from hubokit.spectrum.recentring import flip_coefficients, trie_of

SETS = 1 << 20
"""Most sets of flips that are written down around one centre."""

Flips = tuple[int, ...]


@dataclass(frozen=True)
class LocalMinimum:
    """A local minimum near a centre.

    Parameters
    ----------
    flips : tuple of str
        The variables in which it differs from the centre, in model order.
    rise : Fraction
        Its energy minus that of the centre.
    """

    flips: tuple[str, ...]
    rise: Fraction


@dataclass(frozen=True)
class NearMinima:
    """Local minima within a radius of one centre.

    Parameters
    ----------
    radius : int
    centre_is_minimum : bool
        Whether no single flip lowers the energy of the centre itself.
    minima : tuple of LocalMinimum
        The others, lowest first.
    """

    radius: int
    centre_is_minimum: bool
    minima: tuple[LocalMinimum, ...]

    def through(self, variables: Iterable[str]) -> tuple[LocalMinimum, ...]:
        """The minima that need at least one of these variables flipped: auxiliaries, say."""
        wanted = set(variables)
        return tuple(found for found in self.minima if not wanted.isdisjoint(found.flips))


def minima_near(model: Hamiltonian, around: object, radius: int = 2) -> list[NearMinima]:
    """All single-flip local minima within `radius` flips of given states, for each state.

    Parameters
    ----------
    model : Hamiltonian
        Locality at most 2, any size.
    around : states
        In any form that `Hamiltonian.states` reads: the lifted targets of a reduced model, say.
    radius : int
        Most flips.

    Returns
    -------
    list of NearMinima
        In the order of the states.

    Raises
    ------
    InputError
        A model of higher locality, or a negative radius.
    LimitError
        Too many sets of flips hold together.

    Examples
    --------
    >>> H = Hamiltonian({("a", "y"): -3, ("a",): -1}, "spin")
    >>> near = minima_near(H, [[1, 1]])[0]
    >>> near.centre_is_minimum, near.minima
    (True, (LocalMinimum(flips=('a', 'y'), rise=Fraction(2, 1)),))
    """
    if model.locality > 2:
        raise InputError(f"local minima are looked for in quadratic models; this one has locality {model.locality}")
    if radius < 0:
        raise InputError(f"the radius is {radius}; it cannot be negative", "radius")
    return [_around(model, state, radius) for state in model.states(around)]


def flip_changes(H: Hamiltonian, states: object) -> NDArray[np.int64]:
    """Change of the energy by each single flip, in units of the resolution.

    Parameters
    ----------
    H : Hamiltonian
        Any locality.
    states : states
        In any form that `Hamiltonian.states` reads.

    Returns
    -------
    integer array, shape (m, n)
        int64, or objects where the weights need them.

    Examples
    --------
    >>> flip_changes(Hamiltonian({("a", "b"): -1, ("b",): 1}, "spin"), [[1, 1], [1, -1]]).tolist()
    [[2, 0], [-2, 0]]
    """
    kind = np.int64 if H.weight_bound < 2**61 else object
    trie, rows = trie_of(H.size, H.blocks, 1), H.states(states)
    changes = np.zeros((len(rows), H.size), kind)
    for place, state in enumerate(rows):
        changes[place] = flip_coefficients(trie, H.blocks, state, H.domain, kind)[1 : 1 + H.size]
    return changes


def is_local_minimum(H: Hamiltonian, states: object) -> NDArray[np.bool_]:
    """Whether no single flip lowers the energy, for each state; shape (m,).

    Examples
    --------
    >>> is_local_minimum(Hamiltonian({("a", "b"): -1}, "spin"), [[1, 1], [1, -1]]).tolist()
    [True, False]
    """
    return np.asarray((flip_changes(H, states) >= 0).all(axis=1), bool)


@dataclass(frozen=True)
class _Flipped:
    """A quadratic model in the flips: changes l, and for each variable its partners and couplings q."""

    changes: list[int]
    couplings: list[dict[int, int]]

    def supports_itself(self, flips: Flips) -> bool:
        return all(self.changes[i] + sum(self.couplings[i].get(j, 0) for j in flips if j != i) <= 0 for i in flips)

    def is_minimum(self, flips: Flips, bottoms: NDArray[np.bool_]) -> bool:
        """`bottoms` says which changes are not negative at the centre."""
        if not self.supports_itself(flips):
            return False
        touched = set().union(*(self.couplings[i] for i in flips)).difference(flips)
        if any(self.changes[i] + sum(self.couplings[i].get(j, 0) for j in flips) < 0 for i in touched):
            return False
        untouched = bottoms.copy()
        untouched[[*touched, *flips]] = True
        return bool(untouched.all())

    def rise(self, flips: Flips) -> int:
        pairs = sum(self.couplings[i].get(j, 0) for i in flips for j in flips if i < j)
        return sum(self.changes[i] for i in flips) + pairs


def _around(model: Hamiltonian, state: NDArray[np.int8], radius: int) -> NearMinima:
    flipped = _in_flips(model, state)
    bottoms = np.array([change >= 0 for change in flipped.changes], bool)
    found = [flips for flips in _self_supporting(flipped, radius) if flipped.is_minimum(flips, bottoms)]
    minima = sorted((flipped.rise(flips), flips) for flips in found)
    return NearMinima(
        radius,
        bool(bottoms.all()),
        tuple(LocalMinimum(tuple(model.labels[i] for i in flips), rise * model.resolution) for rise, flips in minima),
    )


def _in_flips(model: Hamiltonian, state: NDArray[np.int8]) -> _Flipped:
    """For spins l_i = -2 s_i (h_i + sum J_ij s_j) and q_ij = 4 J_ij s_i s_j; for booleans with g = 1 - 2x alike."""
    changes = [int(change) for change in flip_changes(model, state)[0]]
    signs = (1 - 2 * to_bits(state, model.domain).astype(np.int64)) * (2 if model.domain == "spin" else 1)
    couplings: list[dict[int, int]] = [{} for _ in range(model.size)]
    for block in model.blocks:
        if block.locality == 2:
            factors = signs[block.members].prod(axis=1)
            for (i, j), weight, factor in zip(
                block.members.tolist(), block.weights.tolist(), factors.tolist(), strict=True
            ):
                couplings[i][j] = couplings[j][i] = weight * factor
    return _Flipped(changes, couplings)


def _self_supporting(flipped: _Flipped, radius: int) -> list[Flips]:
    """All sets of 1 to `radius` flips that support themselves."""
    helpful = [[j for j, q in partners.items() if q < 0] for partners in flipped.couplings]
    connected: list[set[Flips]] = [set(), {(i,) for i in range(len(helpful))}]
    for _ in range(2, radius + 1):
        longer = {
            tuple(sorted((*flips, j))) for flips in connected[-1] for i in flips for j in helpful[i] if j not in flips
        }
        _refuse_many(len(longer))
        connected.append(longer)
    parts = [
        flips for level in connected[1 : radius + 1] for flips in sorted(level) if flipped.supports_itself(flips)
    ]
    found, recent = list(parts), list(parts)
    while recent:
        # A union begins with the part that holds its first flip; the later parts may come in any order.
        joined = {
            tuple(sorted((*flips, *part)))
            for flips in recent
            for part in parts
            if part[0] > flips[0] and len(flips) + len(part) <= radius and set(part).isdisjoint(flips)
        }
        recent = sorted(joined.difference(found))
        found += recent
        _refuse_many(len(found))
    return found


def _refuse_many(count: int) -> None:
    if count > SETS:
        raise LimitError(
            f"{count:,} sets of flips hold together near a state, {SETS:,} are allowed; a smaller radius"
        )
