"""What a check looks at: the source rewritten over the model's original variables, and the way between their states.

Original variables of the model are columns o; a source state x is read off o by `link`. Where `origin`
merges or fixes variables some x have no o: the model cannot represent them, P(x) is infinite there.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import HubokitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, to_bits
from hubokit.reduction.result import Reduction
from hubokit.validation.no_auxiliaries import OwnProjection
from hubokit.validation.verdict import Witness

Bits = NDArray[np.uint8]
States = NDArray[np.int8]


@dataclass(frozen=True)
class Link:
    """How source variables hang on original variables, in bits of the lift order.

    Parameters
    ----------
    column : int64 array, shape (n source variables,)
        The original variable a source variable is read from, -1 where it is fixed.
    flip : uint8 array, same shape
        Added (mod 2) to that bit; for a fixed variable the bit itself.
    """

    column: NDArray[np.int64]
    flip: Bits

    def source_bits(self, original_bits: Bits) -> Bits:
        """Bits (m, source variables) of the source states that original bits (m, originals) stand for."""
        padded = np.concatenate([original_bits, np.zeros((len(original_bits), 1), np.uint8)], axis=1)
        return padded[:, self.column] ^ self.flip

    def original_bits(self, source_bits: Bits, originals: int) -> tuple[Bits, NDArray[np.bool_]]:
        """Original bits (m, originals) of source states, and which of them the model can represent."""
        found = np.zeros((len(source_bits), originals), np.uint8)
        used = self.column >= 0
        found[:, self.column[used]] = source_bits[:, used] ^ self.flip[used]
        return found, (self.source_bits(found) == source_bits).all(axis=1)


class Case:
    """One reduction under check.

    Attributes
    ----------
    source, model : Hamiltonian
    auxiliaries, originals : tuple of str
        The model's variables, parted; originals in model order.
    energy : Hamiltonian
        E rewritten over the originals, in the model's domain.
    represents_all : bool
        Whether every source state is a state of the model.
    """

    def __init__(self, reduction: Reduction) -> None:
        self.reduction = reduction
        self.source: Hamiltonian = reduction.source
        self.model: Hamiltonian = reduction.model
        self.auxiliaries: tuple[str, ...] = tuple(reduction.auxiliaries)
        self.originals: tuple[str, ...] = reduction.originals

    @cached_property
    def energy(self) -> Hamiltonian:
        """E over the originals, in the model's domain."""
        return self.reduction.source_in_model_variables().with_labels(self.originals)

    @cached_property
    def projection(self) -> Any:
        """The model's projection, made once by the reduction."""
        return self.reduction.projection if self.auxiliaries else OwnProjection(self.model)

    @property
    def projectable(self) -> bool:
        """Whether there is a projection: the model is quadratic, or has no auxiliaries."""
        return not self.auxiliaries or self.model.locality <= 2

    @property
    def declared(self) -> tuple[Fraction, Fraction] | None:
        """Scale and shift that bind: the caller's, else the trail's, else None."""
        return self.reduction.declared

    @property
    def keep(self) -> str | None:
        """What the reduction was asked to keep, as far as the trail says."""
        return self.reduction.keep

    @cached_property
    def link(self) -> Link:
        """The way from original bits to source bits, read off two states of the model."""
        source, origin = self.source, self.reduction.origin or {}
        ends = np.zeros((2, self.model.size), np.uint8)
        ends[1] = 1
        seen = to_bits(self.reduction.project(from_bits(ends, self.model.domain)), source.domain)
        place = {label: column for column, label in enumerate(self.originals)}
        column = np.full(source.size, -1, np.int64)
        for position, label in enumerate(source.labels):
            image = origin.get(label, label)
            name = image[1] if isinstance(image, tuple) else image
            if isinstance(name, str):
                column[position] = place[name]
        return Link(column, seen[0])

    @cached_property
    def represents_all(self) -> bool:
        """Whether every source state is a state of the model: no variable fixed, no two merged."""
        column = self.link.column
        return bool((column >= 0).all()) and len(np.unique(column)) == len(column)

    def source_states(self, original_states: States) -> States:
        """Source states, shape (m, source variables), of original states (m, originals)."""
        bits = self.link.source_bits(to_bits(original_states, self.model.domain))
        return from_bits(bits, self.source.domain)

    def original_states(self, source_states: States) -> tuple[States, NDArray[np.bool_]]:
        """Original states of source states, and which of them the model can represent."""
        bits, known = self.link.original_bits(to_bits(source_states, self.source.domain), len(self.originals))
        return from_bits(bits, self.model.domain), known

    def unrepresented_state(self) -> States:
        """One source state, shape (source variables,), that the model has no state for."""
        column = self.link.column
        bits = self.link.source_bits(np.zeros((1, len(self.originals)), np.uint8))
        fixed = np.flatnonzero(column < 0)
        if len(fixed):
            bits[0, fixed[0]] ^= 1
        else:
            _, first, counts = np.unique(column, return_index=True, return_counts=True)
            bits[0, first[counts > 1][0]] ^= 1
        state: States = from_bits(bits, self.source.domain)[0]
        return state

    def witness(
        self,
        original_state: States,
        auxiliary_state: States,
        minimum_by: str,
        multiplicity: int | None = None,
        minimum: Fraction | None = None,
    ) -> Witness:
        """A witness whose two energies `Hamiltonian.energy` gives.

        Parameters
        ----------
        original_state : int8 array (originals,)
        auxiliary_state : int8 array (auxiliaries,)
            In the order of `auxiliaries`.
        minimum : Fraction, optional
            What P is held to be; a re-evaluation that differs is an error of this program.
        """
        x = self.source_states(original_state[None, :])[0]
        whole = dict(zip(self.originals, map(int, original_state), strict=True))
        best = dict(zip(self.auxiliaries, map(int, auxiliary_state), strict=True))
        state = dict(zip(self.source.labels, map(int, x), strict=True))
        model_energy = self.model.energy(whole | best)
        if minimum is not None and model_energy != minimum:
            raise HubokitError(
                f"the check found a least energy of {minimum} and the model gives {model_energy} for the same state; "
                "this is a defect of hubokit, please report it with both files"
            )
        by = minimum_by if self.auxiliaries else ""
        return Witness(state, best, self.source.energy(state), model_energy, by, multiplicity)

    def bare_witness(self, source_state: States) -> Witness:
        """A witness for a source state that the model cannot represent."""
        state: Mapping[str, int] = dict(zip(self.source.labels, map(int, source_state), strict=True))
        return Witness(state, {}, self.source.energy(state), None, "", 0)

    def projected_witness(self, original_state: States) -> Witness:
        """A witness with the best auxiliaries that the projection finds for this one state.

        A model that is not quadratic has no projection: there the auxiliaries' own Hamiltonian is searched.
        """
        if not self.projectable:
            return self._searched_witness(original_state)
        minimum, best, counts = self.projection.minimum(original_state[None, :])
        value = self.model.constant + int(minimum[0]) * self.model.resolution
        return self.witness(original_state, best[0], "projection", int(counts[0]), value)

    def _searched_witness(self, original_state: States) -> Witness:
        from hubokit.spectrum.search import ground_states

        fixed = {label: int(value) for label, value in zip(self.originals, original_state, strict=True)}
        level = ground_states(self.model.substituted(fixed).with_labels(self.auxiliaries), limit=1)
        return self.witness(original_state, level.states[0], level.method, level.degeneracy, level.energy)


def rows(labels: Sequence[str], states: States) -> tuple[dict[str, int], ...]:
    """States as mappings label -> value."""
    return tuple(dict(zip(labels, map(int, state), strict=True)) for state in states)
