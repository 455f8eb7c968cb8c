"""The Hamiltonian: a multilinear polynomial over spins or booleans, exact and immutable."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hubokit.errors import InputError
from hubokit.model.building import read_arrays, read_mapping
from hubokit.model.digest import function_digest
from hubokit.model.energies import integer_energies
from hubokit.model.expression import Expression, as_number
from hubokit.model.labels import as_labels
from hubokit.model.numbers import Number, absolute_sum, as_fraction, format_fraction
from hubokit.model.rewriting import boolean_parts, rounded_parts, spin_parts, substituted_parts
from hubokit.model.states import DOMAINS, as_states
from hubokit.model.trail import Origin


class Hamiltonian(Expression):
    """A cost function: ``constant + sum of coefficient * product of variables``.

    Parameters
    ----------
    coefficients : mapping from a tuple of labels to a number
        The empty tuple is the constant. Products that are equal up to order are added up; repeated members are
        reduced (s*s = 1, x*x = x).
    domain : "spin" or "boolean"
        Values +1 and -1, or 0 and 1.
    labels : iterable of str, optional
        The variables in order. By default the order of first appearance.
    convention : "1-2x" or "2x-1"
        How the other domain is read: s = 1 - 2x or s = 2x - 1.

    Raises
    ------
    InputError
        A coefficient that is no rational number, a bad name, a member that is not among the labels.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b", "c"): -1, ("d",): "1/2", (): 3}, domain="spin")
    >>> H.locality, H.resolution, H.energy({"a": 1, "b": 1, "c": 1, "d": -1})
    (3, Fraction(1, 2), Fraction(3, 2))
    """

    def __init__(
        self,
        coefficients: Mapping[tuple[str, ...], Number],
        domain: str,
        labels: Iterable[str] | None = None,
        convention: str = "1-2x",
    ) -> None:
        names, resolution, parts = read_mapping(coefficients, labels)
        self._fill(domain, convention, names, resolution, Fraction(0), parts)

    @classmethod
    def from_arrays(
        cls,
        members: Sequence[ArrayLike],
        weights: Sequence[ArrayLike],
        domain: str,
        labels: Iterable[str] | None = None,
        resolution: Number = 1,
        constant: Number = 0,
        convention: str = "1-2x",
        size: int | None = None,
    ) -> Self:
        """Build from one integer array of members for each locality.

        Parameters
        ----------
        members : sequence of integer arrays, each (m, k)
            Positions of variables, in any order; repeats are merged.
        weights : sequence of integer arrays, each (m,)
            In units of the resolution; int64 or objects holding integers. Float arrays are read exactly, each
            number as its shortest decimal.
        labels : iterable of str, optional
            Default ``v0, v1, ...`` up to `size` or the largest member.
        resolution, constant : number
            Rationals, the resolution positive.

        Raises
        ------
        InputError
            Shapes that do not match, members out of range, weights that are no numbers.

        Examples
        --------
        >>> Hamiltonian.from_arrays([[[0, 1], [1, 0]]], [[2, 3]], domain="boolean").terms()
        [(('v0', 'v1'), Fraction(5, 1))]
        """
        names, unit, parts = read_arrays(members, weights, labels, resolution, size)
        self = cls.__new__(cls)
        self._fill(domain, convention, names, unit, as_fraction(constant, "constant"), parts)
        return self

    @property
    def size(self) -> int:
        """Number of variables."""
        return len(self.labels)

    @property
    def locality(self) -> int:
        """Size of the largest product (0 for a constant)."""
        return self.blocks[-1].locality if self.blocks else 0

    def __len__(self) -> int:
        return sum(len(block) for block in self.blocks)

    @cached_property
    def digest(self) -> str:
        """Digest of the function: equal exactly for equal functions of equal variables (`hubokit.model.digest`)."""
        return function_digest(self.domain, self.labels, self.constant, self.resolution, self.blocks)

    @cached_property
    def weight_bound(self) -> int:
        """Sum of absolute weights: no energy lies further from the constant, in units of the resolution."""
        return sum(absolute_sum(block.weights) for block in self.blocks)

    def terms(self) -> list[tuple[tuple[str, ...], Fraction]]:
        """Every product with its coefficient: the constant first (when not zero), then by locality and position."""
        listed: list[tuple[tuple[str, ...], Fraction]] = []
        if self.constant:
            listed.append(((), self.constant))
        for block in self.blocks:
            for row, weight in zip(block.members.tolist(), block.weights.tolist(), strict=True):
                listed.append((tuple(self.labels[i] for i in row), weight * self.resolution))
        return listed

    def states(self, states: object) -> NDArray[np.int8]:
        """Read states of this model (see `hubokit.model.states.as_states`): int8, shape (m, n)."""
        return as_states(states, self.labels, self.domain)

    def integer_energies(self, states: object) -> NDArray[Any]:
        """Exact integers k, shape (m,), with energy = constant + k * resolution."""
        return integer_energies(self.blocks, self.states(states))

    def energies(self, states: object) -> NDArray[np.float64]:
        """Energies as floats, shape (m,): the exact value rounded once or twice."""
        whole = self.integer_energies(states)
        scaled = whole * self.resolution.numerator if whole.dtype == object else whole.astype(np.float64)
        if whole.dtype == object:
            return np.array([float(self.constant + int(k) * self.resolution) for k in whole], np.float64)
        return float(self.constant) + scaled * float(self.resolution)

    def energy(self, state: object) -> Fraction:
        """Exact energy of one state.

        Raises
        ------
        InputError
            More or fewer states than one.
        """
        whole = self.integer_energies(state)
        if len(whole) != 1:
            raise InputError(f"{len(whole)} states were given; energy() takes one, energies() takes many")
        return self.constant + int(whole[0]) * self.resolution

    def in_domain(self, domain: str, convention: str | None = None) -> Self:
        """The same function over the other domain, by the exact change of variables.

        Parameters
        ----------
        domain : "spin" or "boolean"
        convention : "1-2x" or "2x-1", optional
            Default the model's own.

        Raises
        ------
        LimitError
            More than ``EXPANSION_LIMIT`` products: a k-body term gives 2**k.

        Examples
        --------
        >>> Hamiltonian({("a", "b"): 1}, "spin").in_domain("boolean").terms()
        [((), Fraction(1, 1)), (('a',), Fraction(-2, 1)), (('b',), Fraction(-2, 1)), (('a', 'b'), Fraction(4, 1))]
        """
        convention = convention or self.convention
        if domain == self.domain or domain not in DOMAINS:
            parts = [(block.members, block.weights) for block in self.blocks]
            return self._like(parts, self.resolution, self.constant, domain=domain, convention=convention)
        sign = -1 if convention == "1-2x" else 1
        if domain == "boolean":
            parts, unit = boolean_parts(self.blocks, sign), self.resolution
        else:
            parts, unit = spin_parts(self.blocks, sign), self.resolution / 2**self.locality
        return self._like(parts, unit, self.constant, domain=domain, convention=convention)

    def rounded(self, resolution: Number) -> Rounded:
        """The model on a coarser grid, with the exact deviation of every term.

        Each coefficient but the constant goes to the nearest multiple of `resolution` (halves upwards).

        Returns
        -------
        Rounded
            The model, the deviation (rounded minus original, itself a Hamiltonian) and the bound.

        Examples
        --------
        >>> coarse = Hamiltonian({("a",): "0.26", ("a", "b"): 1}, "spin").rounded("1/2")
        >>> coarse.model.terms()[0], coarse.bound
        ((('a',), Fraction(1, 2)), Fraction(12, 25))
        """
        unit = as_fraction(resolution, "resolution")
        if unit <= 0:
            raise InputError(f"the resolution is {format_fraction(unit)}; it must be positive", "resolution")
        parts = rounded_parts(self.blocks, self.resolution / unit)
        model = self._like(parts, unit, self.constant)
        deviation = model - self
        return Rounded(model, deviation, 2 * deviation.weight_bound * deviation.resolution)

    def relabelled(self, names: Mapping[str, str]) -> Self:
        """The same function with some variables renamed; order kept.

        Raises
        ------
        InputError
            An unknown variable, or two variables with one name.
        """
        self._known(names)
        parts = [(block.members, block.weights) for block in self.blocks]
        labels = as_labels((names.get(label, label) for label in self.labels), "labels")
        return self._like(parts, self.resolution, self.constant, labels=labels)

    def substituted(self, origin: Mapping[str, Origin | int]) -> Self:
        """Variables renamed, complemented, merged or fixed.

        Parameters
        ----------
        origin : mapping
            A variable of this model to a label (two may share one), to ``("not", label)``, or to a value of the
            domain. Variables that are not named stay. The result has the variables that are left, by first use.

        Raises
        ------
        InputError
            An unknown variable or a value outside the domain.
        LimitError
            Complemented booleans would expand beyond ``EXPANSION_LIMIT`` products.

        Examples
        --------
        >>> H = Hamiltonian({("a", "b"): 1, ("b",): 2}, "boolean")
        >>> H.substituted({"a": ("not", "c"), "b": 1}).terms()
        [((), Fraction(3, 1)), (('c',), Fraction(-1, 1))]
        """
        self._known(origin)
        names, parts = substituted_parts(self.labels, self.domain, self.blocks, origin)
        return self._like(parts, self.resolution, self.constant, labels=names)

    def _known(self, names: Iterable[str]) -> None:
        for label in names:
            if label not in self.positions:
                raise InputError(f"{label!a} is no variable of the model")

    def __eq__(self, other: object) -> bool:
        """The same domain, the same variables in any order, the same function; or a constant equal to a number."""
        if not isinstance(other, Hamiltonian):
            number = as_number(other)
            return NotImplemented if number is None else not self.blocks and self.constant == number
        if (self.domain, self.constant, len(self)) != (other.domain, other.constant, len(other)):
            return False
        if len(self) and self.resolution != other.resolution:
            return False
        if set(self.labels) != set(other.labels):
            return False
        other = other.with_labels(self.labels)
        return all(
            mine.locality == theirs.locality
            and np.array_equal(mine.members, theirs.members)
            and np.array_equal(mine.weights, theirs.weights)
            for mine, theirs in zip(self.blocks, other.blocks, strict=False)
        )

    def __hash__(self) -> int:
        return hash(self.digest) if self.blocks else hash(self.constant)

    def __repr__(self) -> str:
        return (
            f"<Hamiltonian: {self.domain}, {self.size} variables, {len(self)} terms, locality {self.locality}, "
            f"resolution {format_fraction(self.resolution)}>"
        )

    def __str__(self) -> str:
        shown = self.terms() if len(self) <= 40 else []
        if len(self) > 40:
            return repr(self)
        pieces = [f"{'+' if value > 0 else '-'} {_product(key, abs(value))}" for key, value in shown]
        return " ".join(pieces).removeprefix("+ ") or "0"

    def __getstate__(self) -> dict[str, Any]:
        return {key: value for key, value in self.__dict__.items() if key != "positions"}


@dataclass(frozen=True)
class Rounded:
    """A model on a coarser grid.

    Every ground state of the original lies at most `bound` above the ground energy of `model`: list those states,
    take their exact energies in the original, and its ground states are known.

    Parameters
    ----------
    model : Hamiltonian
        The rounded model.
    deviation : Hamiltonian
        Rounded minus original, term by term.
    bound : Fraction
        Twice the sum of absolute deviations, in energy units.
    """

    model: Hamiltonian
    deviation: Hamiltonian
    bound: Fraction


def spins(labels: str | Iterable[str], convention: str = "1-2x") -> tuple[Hamiltonian, ...]:
    """One single-spin model for each label, to write expressions with.

    Examples
    --------
    >>> a, b, c = spins("a b c")
    >>> print(3 * a * b * c - b + 2)
    2 - b + 3 a b c
    """
    return _variables(labels, "spin", convention)


def booleans(labels: str | Iterable[str], convention: str = "1-2x") -> tuple[Hamiltonian, ...]:
    """One single-boolean model for each label, to write expressions with.

    Examples
    --------
    >>> x, y = booleans("x y")
    >>> (x * (1 - y)) ** 2 == x - x * y
    True
    """
    return _variables(labels, "boolean", convention)


def _variables(labels: str | Iterable[str], domain: str, convention: str) -> tuple[Hamiltonian, ...]:
    return tuple(Hamiltonian({(label,): 1}, domain, convention=convention) for label in as_labels(labels, "labels"))


def _product(key: tuple[str, ...], value: Fraction) -> str:
    if not key:
        return format_fraction(value)
    return " ".join(([] if value == 1 else [format_fraction(value)]) + list(key))
