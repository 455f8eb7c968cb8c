"""Random Hamiltonians for property tests, and the slow, obvious energy they are compared with."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping
from fractions import Fraction
from math import prod

from hypothesis import strategies as st

from hubokit.model.hamiltonian import Hamiltonian

DOMAINS = st.sampled_from(["spin", "boolean"])
CONVENTIONS = st.sampled_from(["1-2x", "2x-1"])
RATIONALS = st.fractions(min_value=-20, max_value=20, max_denominator=12)
EDGES = st.sampled_from([1, -1, 2**15, -(2**15), 2**31 - 1, -(2**31), 2**62, -(2**62), 2**63 - 1, 10**30])

Coefficients = dict[tuple[str, ...], Fraction]


@st.composite
def coefficients(
    draw: st.DrawFn,
    max_size: int = 6,
    max_locality: int = 4,
    values: st.SearchStrategy[Fraction] | st.SearchStrategy[int] = RATIONALS,
    max_terms: int = 12,
    min_size: int = 1,
) -> tuple[list[str], Coefficients]:
    """Labels and a mapping from products (of distinct members) to numbers."""
    labels = [f"q{i}" for i in range(draw(st.integers(min_size, max_size)))]
    products = st.lists(st.sampled_from(labels), max_size=min(max_locality, len(labels)), unique=True).map(tuple)
    return labels, draw(st.dictionaries(products, values, max_size=max_terms))


@st.composite
def hamiltonians(
    draw: st.DrawFn,
    domain: str | None = None,
    max_size: int = 6,
    max_locality: int = 4,
    values: st.SearchStrategy[Fraction] | st.SearchStrategy[int] = RATIONALS,
    max_terms: int = 12,
    min_size: int = 1,
) -> Hamiltonian:
    """A Hamiltonian over at most `max_size` variables."""
    labels, mapping = draw(coefficients(max_size, max_locality, values, max_terms, min_size))
    return Hamiltonian(mapping, domain or draw(DOMAINS), labels=labels, convention=draw(CONVENTIONS))


def plain_energy(terms: Mapping[tuple[str, ...], Fraction], state: Mapping[str, int]) -> Fraction:
    """The energy as the definition says it, term by term."""
    return sum((Fraction(c) * prod(state[label] for label in key) for key, c in terms.items()), Fraction(0))


def all_states(labels: list[str] | tuple[str, ...], domain: str) -> Iterator[dict[str, int]]:
    """Every state in lift order: first variable first, spin +1 before -1, boolean 0 before 1."""
    values = (1, -1) if domain == "spin" else (0, 1)
    for row in itertools.product(values, repeat=len(labels)):
        yield dict(zip(labels, row, strict=True))
