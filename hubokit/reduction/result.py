"""What a reduction gives back: both models, the auxiliaries, and the way between their states."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
import numpy.typing as npt

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction, format_fraction
from hubokit.model.states import change_domain
from hubokit.model.trail import Origin, Trail
from hubokit.reduction.costs import Costs, costs_of
from hubokit.reduction.lifting import Definition, by_rule, definitions, reaches

if TYPE_CHECKING:
    from hubokit.projection.project import Projection

States = npt.NDArray[np.int8]


@dataclass(frozen=True, eq=False)
class Reduction:
    """A source model, a model that stands for it, and how their variables correspond.

    Parameters
    ----------
    source : Hamiltonian
        The design, E(x).
    model : Hamiltonian
        The reduced model, F(x, a), usually quadratic.
    auxiliaries : sequence of str
        Variables of the model that the reduction added; they are put in model order.
    origin : mapping, optional
        What each source variable became: a label of the model, ``("not", label)``, or a number (a value of the
        *source's* domain at which it was fixed). Variables that are not named kept their label. Where the domains
        differ, labels are read through the model's convention.
    scale, shift : number, optional
        Declared alpha > 0 and beta of ``min over a of F = alpha * E + beta``. Where neither is given the trail
        declares them, if it has steps.
    trail : Trail
        The recorded steps.

    Raises
    ------
    InputError
        An auxiliary or an origin that the model does not have, a source variable without counterpart, a variable of
        the model that is neither auxiliary nor the counterpart of a source variable.

    Examples
    --------
    >>> E = Hamiltonian({("a", "b", "c"): -1}, "boolean")
    >>> F = Hamiltonian({("y",): 2, ("a", "y"): -1, ("b", "y"): -1, ("c", "y"): -1}, "boolean", ["a", "b", "c", "y"])
    >>> R = Reduction(E, F, ["y"])
    >>> R.originals, R.costs.couplers, R.project([[1, 1, 0, 0]]).tolist()
    (('a', 'b', 'c'), 3, [[1, 1, 0]])
    """

    source: Hamiltonian
    model: Hamiltonian
    auxiliaries: Sequence[str]
    origin: Mapping[str, Origin | int] | None = None
    scale: Fraction | int | str | None = None
    shift: Fraction | int | str | None = None
    trail: Trail = field(default_factory=Trail)

    def __post_init__(self) -> None:
        added = set(self.auxiliaries)
        if len(added) < len(self.auxiliaries):
            twice = next(label for label in self.auxiliaries if list(self.auxiliaries).count(label) > 1)
            raise InputError(f"{twice!a} is named twice", "auxiliaries")
        ordered = tuple(self.auxiliaries)
        if self.model.labels[self.model.size - len(ordered) :] != ordered:
            for label in self.auxiliaries:
                if label not in self.model.positions:
                    raise InputError(f"{label!a} is no variable of the reduced model", "auxiliaries")
            ordered = tuple(label for label in self.model.labels if label in added)
        object.__setattr__(self, "auxiliaries", ordered)
        for name in ("scale", "shift"):
            value = getattr(self, name)
            if value is not None:
                object.__setattr__(self, name, as_fraction(value, name))
        if self.scale is not None and as_fraction(self.scale) <= 0:
            raise InputError(f"the scale is {format_fraction(as_fraction(self.scale))}; it must be positive", "scale")
        self._check_origin(added)

    def _check_origin(self, added: set[str]) -> None:
        given = self.origin or {}
        if not given and set(self.source.labels) == set(self.originals):
            return
        for label in given:
            if label not in self.source.positions:
                raise InputError(f"{label!a} is no variable of the source", "origin")
        allowed = (1, -1) if self.source.domain == "spin" else (0, 1)
        covered = set()
        for label in self.source.labels:
            image = given.get(label, label)
            target = image[1] if isinstance(image, tuple) else image
            if isinstance(target, str):
                if target not in self.model.positions:
                    raise InputError(
                        f"source variable {label!a} would be {target!a}, which the reduced model does not have; "
                        "name its counterpart in origin",
                        "origin",
                    )
                if target in added:
                    raise InputError(f"source variable {label!a} would be the auxiliary {target!a}", "origin")
                covered.add(target)
            elif target not in allowed:
                raise InputError(f"{label!a} is fixed at {target}, which is no {self.source.domain} value", "origin")
        loose = next((label for label in self.originals if label not in covered), None)
        if loose is not None:
            raise InputError(
                f"{loose!a} of the reduced model is neither an auxiliary nor the counterpart of a source variable; "
                "name it in auxiliaries or in origin",
                "auxiliaries",
            )

    @property
    def keep(self) -> str | None:
        """What the reduction was asked to keep, as the trail says; None where it does not."""
        return self.trail.keep

    @property
    def declared(self) -> tuple[Fraction, Fraction] | None:
        """The binding (scale, shift): those given, else those of the trail, else None."""
        if self.scale is not None or self.shift is not None:
            scale = Fraction(1) if self.scale is None else as_fraction(self.scale)
            return scale, Fraction(0) if self.shift is None else as_fraction(self.shift)
        return (self.trail.scale, self.trail.shift) if self.trail.declared else None

    @cached_property
    def originals(self) -> tuple[str, ...]:
        """Variables of the model that are no auxiliaries, in model order."""
        split = self.model.size - len(self.auxiliaries)
        if self.model.labels[split:] == self.auxiliaries:
            return self.model.labels[:split]
        added = set(self.auxiliaries)
        return tuple(label for label in self.model.labels if label not in added)

    @cached_property
    def costs(self) -> Costs:
        """What the reduced model asks of a backend."""
        return costs_of(self.model, len(self.auxiliaries))

    @cached_property
    def projection(self) -> Projection:
        """The minimum of the model over its auxiliaries.

        Raises
        ------
        InputError
            The model is not quadratic.
        """
        from hubokit.projection.project import project

        return project(self.model, self.auxiliaries)

    def source_in_model_variables(self) -> Hamiltonian:
        """E rewritten by `origin`: a function of the model's originals, in the model's domain and convention.

        Raises
        ------
        LimitError
            The change of variables expands beyond the limit of the model room.
        """
        moved: Hamiltonian = self.source
        if self.origin:
            moved = moved.substituted(
                {k: v if isinstance(v, (str, tuple)) else int(v) for k, v in self.origin.items()}
            )
        return moved.in_domain(self.model.domain, self.model.convention).with_labels(self.originals)

    @cached_property
    def _counterparts(self) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.bool_], npt.NDArray[np.int8]]:
        """For each source variable: position in the model (-1 fixed), whether complemented, value where fixed."""
        given = self.origin or {}
        place = np.full(self.source.size, -1, np.intp)
        flipped = np.zeros(self.source.size, bool)
        fixed = np.zeros(self.source.size, np.int8)
        for i, label in enumerate(self.source.labels):
            image = given.get(label, label)
            if isinstance(image, tuple):
                flipped[i] = True
                image = image[1]
            if isinstance(image, str):
                place[i] = self.model.positions[image]
            else:
                fixed[i] = int(image)
        return place, flipped, fixed

    def representable(self, states: object) -> npt.NDArray[np.bool_]:
        """Which source states the model can represent at all, where `origin` merges or fixes variables.

        Parameters
        ----------
        states : array_like, shape (m, n)
            Source states.

        Returns
        -------
        bool array, shape (m,)
        """
        given = self.source.states(states)
        return np.asarray((self.project(self._spread(given)) == given).all(axis=1), dtype=bool)

    def _spread(self, states: States) -> States:
        """Model states (m, N) with the originals set from source states, auxiliaries at the first value."""
        place, flipped, _ = self._counterparts
        first = 1 if self.model.domain == "spin" else 0
        full = np.full((len(states), self.model.size), first, np.int8)
        kept = place >= 0
        values = _complemented(states[:, kept], flipped[kept], self.source.domain)
        full[:, place[kept]] = change_domain(values, self.source.domain, self.model.domain, self.model.convention)
        return full

    def lift(self, states: object) -> States:
        """Source states to states of the model with the best auxiliaries (of several best, the first in lift order).

        Auxiliaries that the trail defines get their values by rule; where it lists none, or the rule does not reach
        the energy declared, the minimum is found exactly.

        Parameters
        ----------
        states : array_like, shape (m, n)
            Source states: values of the source's domain in its label order, or mappings.

        Returns
        -------
        int8 array, shape (m, N)
            Values of the model's domain in its label order.

        Raises
        ------
        InputError
            A state that the model cannot represent (`origin` merges or fixes variables).
        LimitError
            The auxiliaries hang together too widely to be minimised exactly.
        """
        given = self.source.states(states)
        full = self._spread(given)
        lost = np.flatnonzero((self.project(full) != given).any(axis=1))
        if len(lost):
            raise InputError(
                f"state {int(lost[0])} cannot be represented: origin merges or fixes variables otherwise", "states"
            )
        if self.auxiliaries and len(given):
            done = self._set_by_rule(given, full)
            if not done.all():
                columns = [self.model.positions[label] for label in self.originals]
                _, best, _ = self.projection.minimum(full[~done][:, columns])
                places = [self.model.positions[label] for label in self.auxiliaries]
                full[np.flatnonzero(~done)[:, None], places] = best
        return full

    @cached_property
    def _definitions(self) -> list[Definition]:
        """What the trail says auxiliaries stand for; none where the source was renamed on the way."""
        return [] if self.origin else definitions(self.trail, self.source, self.model)

    @cached_property
    def _rest(self) -> Projection:
        """The minimum over the auxiliaries that have no definition, those with one taken as originals."""
        from hubokit.projection.project import project

        defined = {one.auxiliary for one in self._definitions}
        return project(self.model, [label for label in self.auxiliaries if label not in defined])

    def _set_by_rule(self, given: States, full: States) -> npt.NDArray[np.bool_]:
        """Set the auxiliaries of `full` by what the trail lists, and say at which states that holds, shape (m,)."""
        defined, declared = self._definitions, self.declared
        if not defined or declared is None:
            return np.zeros(len(given), bool)
        values = change_domain(
            by_rule(defined, self.source, given), self.source.domain, self.model.domain, self.model.convention
        )
        full[:, [self.model.positions[one.auxiliary] for one in defined]] = values
        if len(defined) < len(self.auxiliaries):
            rest = self._rest
            _, best, _ = rest.minimum(full[:, [self.model.positions[label] for label in rest.originals]])
            full[:, [self.model.positions[label] for label in rest.auxiliaries]] = best
        return reaches(self.source, self.model, given, full, *declared)

    def project(self, states: object) -> States:
        """States of the model back to source states; auxiliaries are dropped.

        Parameters
        ----------
        states : array_like, shape (m, N)
            Values of the model's domain in its label order, or mappings.

        Returns
        -------
        int8 array, shape (m, n)
            Values of the source's domain in its label order.
        """
        full = self.model.states(states)
        place, flipped, fixed = self._counterparts
        found = np.repeat(fixed[None, :], len(full), axis=0)
        kept = place >= 0
        values = change_domain(full[:, place[kept]], self.model.domain, self.source.domain, self.model.convention)
        found[:, kept] = _complemented(values, flipped[kept], self.source.domain)
        return found


def _complemented(
    values: npt.NDArray[Any], flipped: npt.NDArray[np.bool_], domain: Literal["spin", "boolean"] | str
) -> States:
    """The same values with the flipped columns complemented."""
    other = -values if domain == "spin" else 1 - values
    return np.asarray(np.where(flipped[None, :], other, values), dtype=np.int8)
