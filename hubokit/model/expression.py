"""Arithmetic of models: sums, products and powers, over the union of their variables."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from functools import cached_property, reduce
from typing import Self

import numpy as np

from hubokit.errors import InputError
from hubokit.model import terms as columns
from hubokit.model.labels import as_labels
from hubokit.model.numbers import as_fraction, common_resolution, times
from hubokit.model.states import CONVENTIONS, DOMAINS
from hubokit.model.terms import Block, Part


class Expression:
    """What a Hamiltonian is made of, and the operators ``+ - * / **`` with numbers and models.

    Models meet over the union of their variables; products expand and are refused beyond ``EXPANSION_LIMIT``.
    """

    domain: str
    convention: str
    labels: tuple[str, ...]
    constant: Fraction
    resolution: Fraction
    blocks: tuple[Block, ...]

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
            raise InputError(f'the domain is {domain!a}; it must be "spin" or "boolean"', "domain")
        if convention not in CONVENTIONS:
            raise InputError(f'the convention is {convention!a}; it must be "1-2x" or "2x-1"', "convention")
        added, blocks = columns.canonical_blocks(parts, domain)
        constant += added * resolution
        resolution, blocks = columns.coprime(resolution, blocks)
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

    @cached_property
    def positions(self) -> Mapping[str, int]:
        """Column of each variable."""
        return {label: position for position, label in enumerate(self.labels)}

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

    def __neg__(self) -> Self:
        return self * -1

    def __add__(self, other: object) -> Self:
        if not isinstance(other, Expression):
            number = as_number(other)
            return NotImplemented if number is None else self._shifted(number)
        left, right = self._beside(other)
        unit = common_resolution([left.resolution, right.resolution])
        parts = [
            (block.members, times(block.weights, int(model.resolution / unit)))
            for model in (left, right)
            for block in model.blocks
        ]
        return self._like(parts, unit, self.constant + other.constant, labels=left.labels)

    def _shifted(self, number: Fraction) -> Self:
        parts = [(block.members, block.weights) for block in self.blocks]
        return self._like(parts, self.resolution, self.constant + number)

    __radd__ = __add__

    def __sub__(self, other: object) -> Self:
        if isinstance(other, Expression):
            return self + -other
        number = as_number(other)
        return NotImplemented if number is None else self._shifted(-number)

    def __rsub__(self, other: object) -> Self:
        return -self + other

    def __mul__(self, other: object) -> Self:
        if not isinstance(other, Expression):
            number = as_number(other)
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
        number = as_number(other)
        if number is None:
            return NotImplemented
        if number == 0:
            raise InputError("a model is divided by zero")
        return self * (1 / number)

    def __pow__(self, exponent: int) -> Self:
        if not isinstance(exponent, int) or exponent < 0:
            raise InputError(f"the exponent is {exponent}; a whole number of at least 0 is needed")
        return reduce(lambda power, _: power * self, range(exponent), self * 0 + 1)

    def _beside(self, other: Expression) -> tuple[Expression, Expression]:
        """Both models over the union of their variables."""
        if other.domain != self.domain:
            raise InputError(
                f"a {self.domain} model meets a {other.domain} model; convert one with in_domain() first"
            )
        if other.labels == self.labels:
            return self, other
        union = self.labels + tuple(label for label in other.labels if label not in self.positions)
        return self.with_labels(union), other.with_labels(union)


def _parts(model: Expression) -> list[Part]:
    return [(block.members, block.weights) for block in model.blocks]


def as_number(value: object) -> Fraction | None:
    try:
        return as_fraction(value) if not isinstance(value, str) else None
    except InputError:
        if isinstance(value, float):
            raise
        return None
