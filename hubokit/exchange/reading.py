"""What reading a file gave: the model, and sentences about what the file said in another way than a model can."""

from __future__ import annotations

from dataclasses import dataclass

from hubokit.model.hamiltonian import Hamiltonian


@dataclass(frozen=True)
class Reading:
    """A model and what its reader has to say.

    Parameters
    ----------
    model : Hamiltonian
    remarks : tuple of str
        Such as "3 constraints became penalties of weight 12"; empty where the file is the model.
    """

    model: Hamiltonian
    remarks: tuple[str, ...] = ()
