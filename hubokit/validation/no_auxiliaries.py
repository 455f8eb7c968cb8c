"""The projection of a model without auxiliaries, of any locality: P is the model."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import States
from hubokit.projection.result import GapBound


@dataclass(frozen=True)
class OwnProjection:
    """What `hubokit.projection.project.Projection` offers, where there is nothing to minimise over.

    Examples
    --------
    >>> OwnProjection(Hamiltonian({("a", "b", "c"): 1}, "spin")).minimum(np.array([[1, 1, -1]]))[0].tolist()
    [-1]
    """

    model: Hamiltonian
    undecided: tuple[str, ...] = ()
    uniform_multiplicity: int = 1
    clusters: tuple[Any, ...] = ()

    @property
    def gap_everywhere(self) -> GapBound:
        """No auxiliary setting lies above the minimum."""
        return GapBound(None, True)

    @property
    def polynomial(self) -> Hamiltonian:
        """P."""
        return self.model

    def minimum(self, states: object) -> tuple[NDArray[Any], States, NDArray[Any]]:
        """Energies in units of the resolution, no auxiliaries, multiplicities of one."""
        energies = self.model.integer_energies(states)
        return energies, np.zeros((len(energies), 0), np.int8), np.full(len(energies), 1, object)

    def multiplicities(self, states: object) -> NDArray[Any]:
        """One for each state."""
        return self.minimum(states)[2]

    def gap_at(self, states: object) -> GapBound:
        """No auxiliary setting lies above the minimum."""
        return self.gap_everywhere

    def multiplicity_witness(self) -> States | None:
        """No state has two best settings."""
        return None

    def certificate(self) -> dict[str, Any]:
        """The empty proof, in the layout of `hubokit.projection.certificate`."""
        gap = {"value": None, "exact": True}
        return {
            "kind": "projection",
            "version": 1,
            "auxiliaries": [],
            "multiplicity": 1,
            "gap": gap,
            "entries": 0,
            "steps": [],
        }
