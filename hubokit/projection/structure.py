"""A quadratic model seen from its auxiliaries: which terms hold none of them, one of them, or two.

With originals x and auxiliaries a, ``F(x, a) = D(x) + sum_i (h_i + sum_j c_ij x_j) a_i + sum_{i<k} q_ik a_i a_k``.
D goes into the projection as it stands; everything else is what the minimum is taken over. Energies are integers in
units of the model's resolution, without its constant.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.terms import Part

Integers = NDArray[Any]
"""int64 where a proven bound allows it, else Python integers in an object array."""

Positions = NDArray[np.int64]

BOUND = 2**52
"""Weights whose absolute sum stays below this are worked on as int64: every sum here stays below 2**62."""


@dataclass(frozen=True)
class Structure:
    """The terms of a quadratic model, sorted by the number of auxiliaries they hold.

    Parameters
    ----------
    model : Hamiltonian
        Locality at most 2.
    is_auxiliary : bool array, shape (n,)
    direct : list of (members, weights)
        Terms without auxiliaries, in positions of the model.
    field : integer array, shape (n,)
        h_i for auxiliaries, 0 elsewhere.
    ends : int64 array, shape (p, 2)
        Pairs that hold at least one auxiliary.
    weights : integer array, shape (p,)
    """

    model: Hamiltonian
    is_auxiliary: NDArray[np.bool_]
    direct: list[Part]
    field: Integers
    ends: Positions
    weights: Integers

    @property
    def domain(self) -> str:
        """The model's domain."""
        return self.model.domain

    @cached_property
    def auxiliaries(self) -> Positions:
        """Positions of the auxiliaries, ascending."""
        return np.flatnonzero(self.is_auxiliary)

    @cached_property
    def originals(self) -> Positions:
        """Positions of the originals, ascending."""
        return np.flatnonzero(~self.is_auxiliary)

    @cached_property
    def neighbours(self) -> Neighbours:
        """Every auxiliary's couplings, both directions."""
        ends = np.concatenate([self.ends, self.ends[:, ::-1]])
        weights = np.concatenate([self.weights, self.weights])
        kept = self.is_auxiliary[ends[:, 0]]
        ends, weights = ends[kept], weights[kept]
        order = np.argsort(ends[:, 0] * len(self.is_auxiliary) + ends[:, 1], kind="stable")
        ends, weights = ends[order], weights[order]
        starts = np.searchsorted(ends[:, 0], np.arange(len(self.is_auxiliary) + 1))
        return Neighbours(starts, ends[:, 1], weights)


@dataclass(frozen=True)
class Neighbours:
    """Row i: the variables coupled to auxiliary i are ``other[starts[i]:starts[i+1]]``, ascending."""

    starts: Positions
    other: Positions
    weights: Integers

    def rows(self, chosen: Positions) -> tuple[Positions, Positions, Integers]:
        """Entries of the chosen rows: index into `chosen`, the other variable, the weight."""
        lengths = self.starts[chosen + 1] - self.starts[chosen]
        row = np.repeat(np.arange(len(chosen)), lengths)
        offset = np.arange(len(row)) - np.repeat(np.cumsum(lengths) - lengths, lengths)
        entry = self.starts[chosen][row] + offset
        return row, self.other[entry], self.weights[entry]


def structure_of(model: Hamiltonian, auxiliaries: Sequence[str]) -> Structure:
    """Sort the terms of a quadratic model by the auxiliaries they hold.

    Raises
    ------
    InputError
        The model is not quadratic, or an auxiliary is unknown or named twice.

    Examples
    --------
    >>> F = Hamiltonian({("x", "y"): -2, ("y",): 1, ("x",): 3}, domain="boolean")
    >>> structure_of(F, ["y"]).field.tolist()
    [0, 1]
    """
    if model.locality > 2:
        raise InputError(f"the model has locality {model.locality}; projection takes quadratic models only", "model")
    positions = model.positions
    chosen = np.zeros(model.size, bool)
    try:
        named = np.fromiter((positions[label] for label in auxiliaries), np.int64)
    except KeyError as missing:
        raise InputError(f"{missing.args[0]} is no variable of the model", "auxiliaries") from None
    chosen[named] = True
    if int(chosen.sum()) < len(named):
        repeated = np.flatnonzero(np.bincount(named) > 1)[0]
        raise InputError(f"{model.labels[repeated]} is named twice", "auxiliaries")
    kind = np.int64 if model.weight_bound < BOUND else object
    field = np.zeros(model.size, kind)
    direct: list[Part] = []
    ends, weights = np.zeros((0, 2), np.int64), np.zeros(0, kind)
    for block in model.blocks:
        members, numbers = block.members.astype(np.int64), block.weights.astype(kind)
        held = chosen[members].any(axis=1)
        direct.append((members[~held], numbers[~held]))
        if block.locality == 1:
            field[members[held, 0]] = numbers[held]
        else:
            ends, weights = members[held], numbers[held]
    return Structure(model, chosen, direct, field, ends, weights)
