"""Best auxiliaries by rule: where a trail lists what an auxiliary stands for, no search is needed.

A pair variable is the product of its operands (booleans) or down exactly when both are (spins), a product variable
and a common part are products. Operands are source variables or auxiliaries listed before. The rule is trusted only
for the very model it was recorded for (its digest stands beside the list) and only at states where it reaches the
energy that the trail declares; everywhere else the minimum over the auxiliaries is found exactly.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Trail

MODEL = "listed for"
"""Key of a reduction's parameters: digest of the model whose auxiliaries are listed."""

LISTS = (("common parts",), ("pair cover", "pairs"))
"""Where the parameters of a reduction list auxiliaries, in the order of definition."""


@dataclass(frozen=True)
class Definition:
    """What one auxiliary stands for.

    Parameters
    ----------
    auxiliary : str
    operands : tuple of str
    is_pair : bool
        For spins: down exactly when all operands are; otherwise, and for booleans, their product.
    """

    auxiliary: str
    operands: tuple[str, ...]
    is_pair: bool


def definitions(trail: Trail, source: Hamiltonian, model: Hamiltonian) -> list[Definition]:
    """The auxiliaries that the trail defines, operands before what they define; none where it is not to be trusted.

    Parameters
    ----------
    trail : Trail
    source, model : Hamiltonian

    Examples
    --------
    >>> from hubokit.reduction.reduce import reduce
    >>> R = reduce(Hamiltonian({("a", "b", "c"): 1, ("a", "b", "d"): 2}, "spin"), method="pair-cover")
    >>> definitions(R.trail, R.source, R.model)
    [Definition(auxiliary='y0', operands=('a', 'b'), is_pair=True)]
    """
    found: list[Definition] = []
    known = set(source.labels)
    for step in trail.steps:
        if step.parameters.get(MODEL) != model.digest:
            continue
        for keys in LISTS:
            rows: Any = step.parameters
            for key in keys:
                rows = rows.get(key) if isinstance(rows, Mapping) else None
            for row in rows if isinstance(rows, (list, tuple)) else ():
                one = _definition(row)
                if one is None or one.auxiliary in known or not known.issuperset(one.operands):
                    return []
                known.add(one.auxiliary)
                found.append(one)
    return found


def _definition(row: object) -> Definition | None:
    """A row of a list; None where it is not of the form that is written."""
    if not isinstance(row, Mapping) or not isinstance(row.get("of"), (list, tuple)) or not row["of"]:
        return None
    return Definition(str(row.get("auxiliary")), tuple(map(str, row["of"])), row.get("is") == "pair")


def by_rule(defined: list[Definition], source: Hamiltonian, states: npt.NDArray[np.int8]) -> npt.NDArray[np.int8]:
    """Values of the defined auxiliaries in the source's domain.

    Parameters
    ----------
    defined : list of Definition
    source : Hamiltonian
    states : int8 array, shape (m, n)
        Source states.

    Returns
    -------
    int8 array, shape (m, number defined)
    """
    columns = {label: states[:, i] for i, label in enumerate(source.labels)}
    for one in defined:
        values = np.stack([columns[label] for label in one.operands])
        down = one.is_pair and source.domain == "spin"
        columns[one.auxiliary] = values.max(axis=0) if down else values.prod(axis=0, dtype=np.int8)
    found = [columns[one.auxiliary] for one in defined]
    return np.stack(found, axis=1) if found else np.zeros((len(states), 0), np.int8)


def reaches(
    E: Hamiltonian,
    F: Hamiltonian,
    states: npt.NDArray[np.int8],
    full: npt.NDArray[np.int8],
    scale: Fraction,
    shift: Fraction,
) -> npt.NDArray[np.bool_]:
    """At which states the model's energy is ``scale * E + shift``, exactly.

    Parameters
    ----------
    E, F : Hamiltonian
    states : int8 array, shape (m, n)
        States of E.
    full : int8 array, shape (m, N)
        States of F.
    scale, shift : Fraction

    Returns
    -------
    bool array, shape (m,)
    """
    factor, step = scale * E.resolution / F.resolution, (scale * E.constant + shift - F.constant) / F.resolution
    common = factor.denominator * step.denominator
    wanted = E.integer_energies(states).astype(object) * int(factor * common) + int(step * common)
    return np.asarray(F.integer_energies(full).astype(object) * common == wanted, dtype=bool)
