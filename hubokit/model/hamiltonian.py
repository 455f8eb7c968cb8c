"""The Hamiltonian: a multilinear polynomial over spins or booleans, exact and immutable."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, reduce
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hubokit.errors import InputError
from hubokit.model import terms as columns
from hubokit.model.digest import function_digest
from hubokit.model.energies import integer_energies
from hubokit.model.labels import as_label, as_labels
from hubokit.model.numbers import (
    INT64_BOUND,
    Number,
    absolute_sum,
    as_fraction,
    as_weights,
    common_resolution,
    format_fraction,
    smallest_weights,
)
from hubokit.model.states import CONVENTIONS, DOMAINS, as_states
from hubokit.model.terms import Block, Part
from hubokit.model.trail import Origin


class Hamiltonian:
    """A cost function: ``constant + sum of coefficient * product of variables``.

    Parameters
    ----------
    coefficients : mapping from a tuple of labels to a number
        The empty tuple is the constant. Products that are equal up to order are added up; repeated members are reduced
        (s*s = 1, x*x = x).
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

    domain: str
    convention: str
    labels: tuple[str, ...]
    constant: Fraction
    resolution: Fraction
    blocks: tuple[Block, ...]

    def __init__(
        self,
        coefficients: Mapping[tuple[str, ...], Number],
        domain: str,
        labels: Iterable[str] | None = None,
        convention: str = "1-2x",
    ) -> None:
        names = _labels_of(coefficients) if labels is None else as_labels(labels)
        place = {label: position for position, label in enumerate(names)}
        values: list[Fraction] = []
        rows: dict[int, tuple[list[list[int]], list[int]]] = {}
        for key, value in coefficients.items():
            values.append(as_fraction(value, f"coefficient of {_shown(key)}"))
            try:
                row = [place[as_label(label)] for label in _members(key)]
            except KeyError as missing:
                raise InputError(f"{missing.args[0]} is not among the labels", f"term {_shown(key)}") from None
            members, numbers = rows.setdefault(len(row), ([], []))
            members.append(row)
            numbers.append(len(values) - 1)
        resolution = common_resolution(values)
        weights = [int(value / resolution) for value in values]
        parts = [
            (np.array(members, np.int64).reshape(-1, width), as_weights([weights[i] for i in numbers]))
            for width, (members, numbers) in rows.items()
        ]
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
            In units of the resolution; int64 or objects holding integers. Float arrays are read exactly, each number as its
            shortest decimal.
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
        unit = as_fraction(resolution, "resolution")
        if unit <= 0:
            raise InputError(f"the resolution is {format_fraction(unit)}; it must be positive", "resolution")
        if len(members) != len(weights):
            raise InputError(f"{len(members)} arrays of members and {len(weights)} of weights")
        rows = [_member_array(array, place) for place, array in enumerate(members)]
        values, unit = _weight_arrays(weights, unit)
        for place, (row, value) in enumerate(zip(rows, values, strict=True)):
            if len(row) != len(value):
                raise InputError(f"{len(row)} products and {len(value)} weights", f"weights[{place}]")
        largest = max((int(row.max()) for row in rows if row.size), default=-1)
        if labels is None:
            names = tuple(f"v{i}" for i in range(largest + 1 if size is None else size))
        else:
            names = as_labels(labels, "labels")
        if largest >= len(names):
            raise InputError(f"a member is {largest}, but there are only {len(names)} variables", "members")
        self = cls.__new__(cls)
        self._fill(
            domain,
            convention,
            names,
            unit,
            as_fraction(constant, "constant"),
            list(zip(rows, values, strict=True)),
        )
        return self

    def _fill(
        self,
        domain: str,
        convention: str,
        labels: tuple[str, ...],
        resolution: Fraction,
        constant: Fraction,
        parts: Iterable[Part],
    ) -> None:
        if domain not in DOMAINS:
            raise InputError(f'the domain is {ascii(domain)}; it must be "spin" or "boolean"', "domain")
        if convention not in CONVENTIONS:
            raise InputError(f'the convention is {ascii(convention)}; it must be "1-2x" or "2x-1"', "convention")
        added, blocks = columns.canonical_blocks(parts, domain)
        constant += added * resolution
        resolution, blocks = _largest_resolution(resolution, blocks)
        self.domain, self.convention, self.labels = domain, convention, labels
        self.resolution, self.constant, self.blocks = resolution, constant, blocks

    def _like(
        self,
        parts: Iterable[Part],
        resolution: Fraction,
        constant: Fraction,
        *,
        labels: tuple[str, ...] | None = None,
        domain: str | None = None,
        convention: str | None = None,
    ) -> Self:
        made = type(self).__new__(type(self))
        made._fill(
            domain or self.domain,
            convention or self.convention,
            self.labels if labels is None else labels,
            resolution,
            constant,
            parts,
        )
        return made

    # What it is -------------------------------------------------------------------------------------------------

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
    def positions(self) -> Mapping[str, int]:
        """Column of each variable."""
        return {label: position for position, label in enumerate(self.labels)}

    @cached_property
    def digest(self) -> str:
        """Digest of the function (see `hubokit.model.digest`): equal exactly for equal functions of equal variables."""
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

    # Energies ---------------------------------------------------------------------------------------------------

    def states(self, states: object) -> NDArray[np.int8]:
        """Read states of this model (see `hubokit.model.states.as_states`): int8, shape (m, n)."""
        return as_states(states, self.labels, self.domain)

    def integer_energies(self, states: object) -> NDArray[np.generic]:
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

    # New models -------------------------------------------------------------------------------------------------

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
            parts, unit = columns.affine_parts(self.blocks, -sign, 2 * sign), self.resolution
        else:
            parts, unit = self._halved_parts(sign), self.resolution / 2**self.locality
        return self._like(parts, unit, self.constant, domain=domain, convention=convention)

    def _halved_parts(self, sign: int) -> list[Part]:
        """Parts of x = (1 + sign*s)/2 in units of resolution / 2**locality."""
        top = self.locality
        raised = [Block(block.members, _times(block.weights, 2 ** (top - block.locality))) for block in self.blocks]
        return columns.affine_parts(raised, 1, sign)

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
        ratio = self.resolution / unit
        top, bottom = 2 * ratio.numerator, 2 * ratio.denominator
        parts = []
        for block in self.blocks:
            weights = block.weights
            if (self.weight_bound + 1) * (top + bottom) >= INT64_BOUND:
                weights = weights.astype(object)
            parts.append((block.members, smallest_weights((weights * top + bottom // 2) // bottom)))
        model = self._like(parts, unit, self.constant)
        deviation = model - self
        return Rounded(model, deviation, 2 * deviation.weight_bound * deviation.resolution)

    def with_labels(self, labels: Iterable[str]) -> Self:
        """The same function with the variables in another order, and possibly more of them.

        Raises
        ------
        InputError
            A variable of the model is not among the labels.
        """
        names = as_labels(labels, "labels")
        place = {label: position for position, label in enumerate(names)}
        missing = [label for label in self.labels if label not in place]
        if missing:
            raise InputError(f"the variable {missing[0]} is not among the labels", "labels")
        rank = np.array([place[label] for label in self.labels], np.int64)
        parts = [(rank[block.members], block.weights) for block in self.blocks]
        return self._like(parts, self.resolution, self.constant, labels=names)

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
            A variable of this model to a label (two may share one), to ``("not", label)``, or to a value of the domain.
            Variables that are not named stay. The result has the variables that are left, in order of first use.

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
        names: dict[str, int] = {}
        targets = np.full(self.size, columns.ABSENT, np.int64)
        negated = np.zeros(self.size, bool)
        value = np.ones(self.size, np.int64)
        allowed = (1, -1) if self.domain == "spin" else (0, 1)
        for position, label in enumerate(self.labels):
            image = origin.get(label, label)
            if isinstance(image, tuple):
                negated[position] = True
                image = image[1]
            if isinstance(image, str):
                targets[position] = names.setdefault(as_label(image), len(names))
            elif image in allowed:
                value[position] = int(image)
            else:
                raise InputError(f"{label} is fixed at {image}, which is no {self.domain} value")
        if self.domain == "spin":
            parts = columns.spin_substitution(self.blocks, targets, np.where(negated, -value, value))
        else:
            parts = columns.boolean_substitution(self.blocks, targets, negated, value == 0)
        return self._like(parts, self.resolution, self.constant, labels=tuple(names))

    def _known(self, names: Iterable[str]) -> None:
        for label in names:
            if label not in self.positions:
                raise InputError(f"{ascii(label)} is no variable of the model")

    # Arithmetic -------------------------------------------------------------------------------------------------

    def __neg__(self) -> Self:
        return self * -1

    def __add__(self, other: object) -> Self:
        if not isinstance(other, Hamiltonian):
            number = _number(other)
            return NotImplemented if number is None else self._shifted(number)
        left, right = self._beside(other)
        unit = common_resolution([left.resolution, right.resolution])
        parts = [
            (block.members, _times(block.weights, int(model.resolution / unit)))
            for model in (left, right)
            for block in model.blocks
        ]
        return self._like(parts, unit, self.constant + other.constant, labels=left.labels)

    def _shifted(self, number: Fraction) -> Self:
        parts = [(block.members, block.weights) for block in self.blocks]
        return self._like(parts, self.resolution, self.constant + number)

    __radd__ = __add__

    def __sub__(self, other: object) -> Self:
        if isinstance(other, Hamiltonian):
            return self + -other
        number = _number(other)
        return NotImplemented if number is None else self._shifted(-number)

    def __rsub__(self, other: object) -> Self:
        return -self + other

    def __mul__(self, other: object) -> Self:
        if not isinstance(other, Hamiltonian):
            number = _number(other)
            if number is None:
                return NotImplemented
            sign = (number > 0) - (number < 0)
            parts = [(block.members, block.weights * sign) for block in self.blocks]
            return self._like(parts, self.resolution * (abs(number) or 1), self.constant * number)
        left, right = self._beside(other)
        unit = left.resolution * right.resolution
        bulk = columns.product_parts(_parts(left), _parts(right))
        product = self._like(bulk, unit, left.constant * right.constant, labels=left.labels)
        if left.constant:
            product = product + (right - right.constant) * left.constant
        if right.constant:
            product = product + (left - left.constant) * right.constant
        return product

    __rmul__ = __mul__

    def __truediv__(self, other: object) -> Self:
        number = _number(other)
        if number is None:
            return NotImplemented
        if number == 0:
            raise InputError("a Hamiltonian is divided by zero")
        return self * (1 / number)

    def __pow__(self, exponent: int) -> Self:
        if not isinstance(exponent, int) or exponent < 0:
            raise InputError(f"the exponent is {exponent}; a whole number of at least 0 is needed")
        return reduce(lambda power, _: power * self, range(exponent), self * 0 + 1)

    def _beside(self, other: Hamiltonian) -> tuple[Hamiltonian, Hamiltonian]:
        """Both models over the union of their variables."""
        if other.domain != self.domain:
            raise InputError(
                f"a {self.domain} model meets a {other.domain} model; convert one with in_domain() first"
            )
        if other.labels == self.labels:
            return self, other
        union = self.labels + tuple(label for label in other.labels if label not in self.positions)
        return self.with_labels(union), other.with_labels(union)

    def __eq__(self, other: object) -> bool:
        """The same domain, the same variables in any order, the same function; or a constant equal to a number."""
        if not isinstance(other, Hamiltonian):
            number = _number(other)
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

    Every ground state of the original lies at most `bound` above the ground energy of `model`: list those states, take
    their exact energies in the original, and its ground states are known.

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


def _parts(model: Hamiltonian) -> list[Part]:
    return [(block.members, block.weights) for block in model.blocks]


def _number(value: object) -> Fraction | None:
    try:
        return as_fraction(value) if not isinstance(value, str) else None
    except InputError:
        if isinstance(value, float):
            raise
        return None


def _times(weights: NDArray[np.generic], factor: int) -> NDArray[np.generic]:
    """Weights times an integer; objects where int64 might wrap."""
    if weights.dtype != object and absolute_sum(weights) * abs(factor) >= INT64_BOUND:
        weights = weights.astype(object)
    return weights * factor if weights.dtype == object else weights * np.int64(factor)


def _largest_resolution(resolution: Fraction, blocks: tuple[Block, ...]) -> tuple[Fraction, tuple[Block, ...]]:
    """The same terms with weights of greatest common divisor one."""
    if not blocks:
        return Fraction(1), ()
    common = math.gcd(*(int(np.gcd.reduce(block.weights)) for block in blocks))
    if common > 1:
        divided = [Block(block.members, block.weights // common) for block in blocks]
        narrow = sum(absolute_sum(block.weights) for block in divided) < INT64_BOUND
        kind = np.int64 if narrow else object
        blocks = tuple(Block(block.members, block.weights.astype(kind)) for block in divided)
    return resolution * common, blocks


def _member_array(array: ArrayLike, place: int) -> NDArray[np.generic]:
    rows = np.asarray(array)
    if rows.size == 0 and rows.ndim < 2:
        rows = rows.reshape(0, 0).astype(np.int64)
    if rows.ndim != 2:
        raise InputError(f"members of shape {rows.shape}; an (m, k) array is needed", f"members[{place}]")
    if rows.dtype.kind not in "iu" and rows.size:
        raise InputError(f"members of type {rows.dtype}; integers are needed", f"members[{place}]")
    if rows.size and (int(rows.min()) < 0 or int(rows.max()) >= 2**31 - 1):
        raise InputError("a member is negative or beyond 2**31", f"members[{place}]")
    return rows.astype(np.int32)


def _weight_arrays(weights: Sequence[ArrayLike], unit: Fraction) -> tuple[list[NDArray[np.generic]], Fraction]:
    """Whole weights and their unit; floats and fractions are brought to their common resolution first."""
    arrays = [np.asarray(array) for array in weights]
    if all(_holds_integers(array) for array in arrays):
        return [as_weights(array, f"weights[{i}]") for i, array in enumerate(arrays)], unit
    values = [[as_fraction(value, f"weights[{i}]") for value in a.tolist()] for i, a in enumerate(arrays)]
    if any(array.dtype == np.float32 for array in arrays):
        values = [[as_fraction(value, f"weights[{i}]") for value in a] for i, a in enumerate(arrays)]
    grid = common_resolution(value for row in values for value in row)
    return [as_weights([int(value / grid) for value in row]) for row in values], unit * grid


def _holds_integers(array: NDArray[np.generic]) -> bool:
    if array.dtype == object:
        return all(isinstance(value, (int, np.integer)) for value in array.ravel())
    return array.size == 0 or array.dtype.kind != "f"


def _members(key: object) -> tuple[object, ...]:
    if isinstance(key, str):
        raise InputError(f"a term is a tuple of labels; write ({ascii(key)},) for a field", f"term {ascii(key)}")
    try:
        return tuple(key)  # type: ignore[arg-type]
    except TypeError:
        raise InputError(f"a term is a tuple of labels, not {ascii(key)[:60]}") from None


def _labels_of(coefficients: Mapping[tuple[str, ...], Number]) -> tuple[str, ...]:
    seen: dict[str, None] = {}
    for key in coefficients:
        for label in _members(key):
            seen.setdefault(as_label(label, f"term {_shown(key)}"))
    return tuple(seen)


def _shown(key: object) -> str:
    text = ascii(key)
    return text if len(text) <= 60 else text[:57] + "..."


def _product(key: tuple[str, ...], value: Fraction) -> str:
    if not key:
        return format_fraction(value)
    return " ".join(([] if value == 1 else [format_fraction(value)]) + list(key))
