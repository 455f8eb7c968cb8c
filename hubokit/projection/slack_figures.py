"""How far penalties could shrink: the slack that shared bounds leave each auxiliary.

A penalty that is part of no coupling between two auxiliaries enters the slack of its own auxiliary alone. So
where the slack at a setting of the guards is s, the penalty's share of the local field there may fall by
anything less than s, at all auxiliaries at once, and the reduction is still proved.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.projection.candidates import fitted, known_samples
from hubokit.projection.clusters import components
from hubokit.projection.shared_bounds import (
    PROGRAM_MOST,
    SHARED_MOST,
    as_fractions,
    better_shares,
    flip_problem,
    slacks,
)
from hubokit.projection.structure import structure_of


@dataclass(frozen=True)
class SlackFigures:
    """Slack of one auxiliary under shared bounds.

    Parameters
    ----------
    guards : tuple of str
        Originals that decide the auxiliary, in model order.
    function : tuple of int
        Its right bit for each setting of the guards, in lift order.
    slacks : tuple of Fraction
        Least slack for each setting, in energy units. The auxiliary is proved where all are positive.
    """

    guards: tuple[str, ...]
    function: tuple[int, ...]
    slacks: tuple[Fraction, ...]

    @property
    def least(self) -> Fraction:
        """The least slack over all settings."""
        return min(self.slacks)


def shared_bound_slacks(
    model: Hamiltonian, auxiliaries: Sequence[str], shares: str = "equal"
) -> dict[str, SlackFigures]:
    """Slacks of all auxiliaries, cluster by cluster.

    Parameters
    ----------
    model : Hamiltonian
        Quadratic.
    auxiliaries : sequence of str
    shares : "equal" or "program"
        Half of each cost to each end, or shares from a linear program where some slack is not positive
        (clusters of up to `PROGRAM_MOST` auxiliaries).

    Returns
    -------
    dict from auxiliary to SlackFigures
        Positive slacks all over one cluster prove all its auxiliaries; nothing is claimed otherwise. Clusters
        of more than `SHARED_MOST` auxiliaries are left out.

    Raises
    ------
    InputError
        The model is not quadratic, or an auxiliary is unknown or named twice.

    Examples
    --------
    >>> F = Hamiltonian({("a", "b"): 4, ("a", "y"): -8, ("b", "y"): -8, ("y",): 12, ("y", "c"): 3}, domain="boolean")
    >>> found = shared_bound_slacks(F, ["y"])["y"]
    >>> found.guards, found.function, [int(s) for s in found.slacks]
    (('a', 'b'), (0, 0, 0, 1), [12, 4, 4, 1])
    """
    structure = structure_of(model, auxiliaries)
    found = components(structure, structure.auxiliaries)
    figures: dict[str, SlackFigures] = {}
    bounds = np.concatenate([[0], np.cumsum(found.a)])
    for start, stop in zip(bounds[:-1].tolist(), bounds[1:].tolist(), strict=True):
        if stop - start > SHARED_MOST:
            continue
        members = found.members[start:stop]
        problem = flip_problem(structure, members)
        candidate = fitted(problem, known_samples(structure, [], problem.known))
        result = slacks(problem, candidate)
        programmable = len(members) <= PROGRAM_MOST and problem.start.dtype != object
        if shares == "program" and result.least <= 0 and programmable:
            _, result = better_shares(problem, candidate)
        for i, position in enumerate(members.tolist()):
            figures[model.labels[position]] = SlackFigures(
                tuple(model.labels[problem.known[k]] for k in candidate.guards[i]),
                tuple(candidate.functions[i].tolist()),
                tuple(value * model.resolution for value in as_fractions(result.tables[i])),
            )
    return figures
