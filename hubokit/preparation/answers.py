"""Answers of a solver brought back to the design: source states, both energies, auxiliaries at their best or not."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import States
from hubokit.reduction.result import Reduction


@dataclass(frozen=True)
class Answers:
    """States of a reduced model seen from its source, one entry an answer.

    Parameters
    ----------
    states : int8 array, shape (m, source variables)
        In the source's domain and label order.
    source_energies, model_energies : tuple of Fraction
        E of the source state, and F of the answer as it was given.
    best_energies : tuple of (Fraction or None)
        P, the least F that any setting of the auxiliaries reaches; None where that is too much work.
    """

    states: States
    source_energies: tuple[Fraction, ...]
    model_energies: tuple[Fraction, ...]
    best_energies: tuple[Fraction | None, ...]

    def __len__(self) -> int:
        return len(self.states)

    def above_best(self, number: int) -> Fraction | None:
        """By how much one answer lies above the best auxiliaries of its state; None where that is not known."""
        best = self.best_energies[number]
        return None if best is None else self.model_energies[number] - best


def answers_of(reduction: Reduction, states: States) -> Answers:
    """Bring states of a reduced model back to its source.

    Parameters
    ----------
    reduction : Reduction
    states : int8 array, shape (m, variables of the model)
        In the model's domain and label order.

    Returns
    -------
    Answers

    Examples
    --------
    >>> from hubokit.reduction.reduce import reduce
    >>> R = reduce(Hamiltonian({("a", "b", "c"): -1}, "boolean"))
    >>> found = answers_of(R, R.lift([[1, 1, 1]]))
    >>> found.states.tolist(), str(found.source_energies[0]), found.above_best(0)
    ([[1, 1, 1]], '-1', Fraction(0, 1))
    """
    source, model = reduction.source, reduction.model
    below = reduction.project(states)
    return Answers(
        below,
        _energies(source, source.integer_energies(below)),
        _energies(model, model.integer_energies(states)),
        _best(reduction, states),
    )


def _best(reduction: Reduction, states: States) -> tuple[Fraction | None, ...]:
    model = reduction.model
    columns = [model.positions[label] for label in reduction.projection.originals]
    try:
        return _energies(model, reduction.projection.minimum(states[:, columns])[0])
    except LimitError:
        return (None,) * len(states)


def _energies(model: Hamiltonian, whole: NDArray[Any]) -> tuple[Fraction, ...]:
    return tuple(model.constant + int(k) * model.resolution for k in np.asarray(whole))
