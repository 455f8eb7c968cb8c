"""The oracle of this room: every state of every variable, in plain Python fractions."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
import pytest

from hubokit.model.hamiltonian import Hamiltonian


@dataclass(frozen=True)
class Enumerated:
    """For each setting of the originals: minimum, multiplicity, first best auxiliaries, nearest excess."""

    states: list[tuple[int, ...]]
    minimum: list[Fraction]
    multiplicity: list[int]
    first: list[tuple[int, ...]]
    gap: list[Fraction | None]

    def least_gap(self) -> Fraction | None:
        return min((gap for gap in self.gap if gap is not None), default=None)


def enumerate_all(model: Hamiltonian, auxiliaries: tuple[str, ...]) -> Enumerated:
    """Every state of every variable, energies in Python integers over one denominator."""
    values = (1, -1) if model.domain == "spin" else (0, 1)
    inner = [i for i, label in enumerate(model.labels) if label in auxiliaries]
    outer = [i for i, label in enumerate(model.labels) if label not in auxiliaries]
    settings = np.array(list(itertools.product(values, repeat=len(model.labels))), object)
    total = np.zeros(len(settings), object)
    unit = model.resolution
    for key, coefficient in model.terms():
        if key:
            total = total + int(coefficient / unit) * np.prod(
                settings[:, [model.labels.index(v) for v in key]], axis=1
            )
    # Originals first: rows of x in lift order, columns of a in lift order.
    table = np.moveaxis(total.reshape((2,) * len(model.labels)), outer, range(len(outer)))
    table = table.reshape(2 ** len(outer), 2 ** len(inner))
    all_inner = list(itertools.product(values, repeat=len(inner)))
    found = Enumerated([], [], [], [], [])
    for x, row in zip(itertools.product(values, repeat=len(outer)), table.tolist(), strict=True):
        least = min(row)
        found.states.append(x)
        found.minimum.append(model.constant + least * unit)
        found.multiplicity.append(row.count(least))
        found.first.append(all_inner[row.index(least)])
        found.gap.append(min(((e - least) * unit for e in row if e > least), default=None))
    return found


@pytest.fixture
def enumerated() -> Callable[[Hamiltonian, tuple[str, ...]], Enumerated]:
    return enumerate_all


def random_model(
    seed: int, domain: str, originals: int, auxiliaries: int, largest: int, density: float = 0.7
) -> tuple[Hamiltonian, tuple[str, ...]]:
    """A random quadratic model with its auxiliaries scattered among the originals."""
    rng = np.random.default_rng(seed)
    count = originals + auxiliaries
    labels = [f"v{i}" for i in range(count)]
    chosen = tuple(labels[i] for i in sorted(rng.permutation(count)[:auxiliaries]))
    pairs = np.array(list(itertools.combinations(range(count), 2)), np.int64).reshape(-1, 2)
    pairs = pairs[rng.random(len(pairs)) < density]
    model = Hamiltonian.from_arrays(
        [np.arange(count)[:, None], pairs],
        [rng.integers(-largest, largest + 1, count), rng.integers(-largest, largest + 1, len(pairs))],
        domain=domain,
        labels=labels,
        resolution=Fraction(int(rng.integers(1, 4)), int(rng.integers(1, 4))),
        constant=Fraction(int(rng.integers(-3, 4)), 5),
    )
    return model, chosen


@pytest.fixture
def make_model() -> Callable[..., tuple[Hamiltonian, tuple[str, ...]]]:
    return random_model


def random_chain(seed: int, domain: str) -> tuple[Hamiltonian, tuple[str, ...]]:
    """Products of random pairs, of originals or of products made before, with random penalties, some of them
    too weak.

    Every product enters the model with a random weight, and products are coupled to originals and to each other.
    """
    rng = np.random.default_rng(seed)
    originals = int(rng.integers(3, 6))
    terms: dict[tuple[str, ...], int] = {}

    def add(key: tuple[str, ...], weight: int) -> None:
        key = tuple(sorted(set(key)))
        terms[key] = terms.get(key, 0) + int(weight)

    names = [f"x{i}" for i in range(originals)]
    auxiliaries = []
    penalty = int(rng.integers(2, 14))
    for k in range(int(rng.integers(2, 6))):
        first, second = rng.choice(len(names), 2, replace=False)
        y = f"y{k}"
        strength = penalty + int(rng.integers(0, 3))
        for key, c in (
            ((names[first], names[second]), 1),
            ((names[first], y), -2),
            ((names[second], y), -2),
            ((y,), 3),
        ):
            add(key, c * strength)
        names.append(y)
        auxiliaries.append(y)
    for _ in range(int(rng.integers(2, 7))):
        first, second = rng.choice(len(names), 2, replace=False)
        add((names[first], names[second]), rng.integers(-3, 4))
        add((names[first],), rng.integers(-2, 3))
    labels = [names[i] for i in rng.permutation(len(names))]
    model = Hamiltonian(terms, domain="boolean", labels=labels).in_domain(domain)
    return model, tuple(label for label in labels if label in auxiliaries)


@pytest.fixture
def make_chain() -> Callable[[int, str], tuple[Hamiltonian, tuple[str, ...]]]:
    return random_chain


def low_autocorrelation(size: int, scale: Fraction) -> tuple[Hamiltonian, list[str], Hamiltonian]:
    """The low-autocorrelation model over booleans, its pairs (i, j) with i + j even replaced by auxiliaries.

    s_i s_j = 1 - 2 x_i - 2 x_j + 4 y_ij with two-sided penalties from interval bounds, scaled. Returns the model, its
    auxiliaries and the source.
    """
    source: dict[tuple[int, ...], int] = {}
    for k in range(1, size):
        pairs = [(i, i + k) for i in range(size - k)]
        for p, q in itertools.product(pairs, repeat=2):
            key = tuple(sorted(set(p) ^ set(q)))
            source[key] = source.get(key, 0) + 1
    terms: dict[tuple[str, ...], Fraction] = {}

    def add(key: tuple[str, ...], weight: Fraction | int) -> None:
        key = tuple(sorted(key))
        terms[key] = terms.get(key, Fraction(0)) + weight

    pairs_used: dict[str, tuple[str, str]] = {}

    def product(i: int, j: int) -> dict[tuple[str, ...], int]:
        xi, xj, y = f"x{i:02}", f"x{j:02}", f"y{i:02}.{j:02}"
        if (i + j) % 2:
            return {(): 1, (xi,): -2, (xj,): -2, (xi, xj): 4}
        pairs_used[y] = (xi, xj)
        return {(): 1, (xi,): -2, (xj,): -2, (y,): 4}

    for key, weight in source.items():
        factors: list[dict[tuple[str, ...], int]] = []
        if len(key) == 2:
            factors = [product(*key)]
        elif len(key) == 4:
            a, b, c, d = key
            splits = (((a, d), (b, c)), ((a, b), (c, d)), ((a, c), (b, d)))
            factors = [product(*p) for p in next(s for s in splits if all(sum(p) % 2 == 0 for p in s))]
        for chosen in itertools.product(*(factor.items() for factor in factors)):
            joined = tuple(v for members, _ in chosen for v in members)
            add(joined, weight * int(np.prod([c for _, c in chosen])))
    for y, (first, second) in pairs_used.items():
        field = [(key, c) for key, c in terms.items() if y in key]
        low = sum(c if len(key) == 1 else min(c, 0) for key, c in field)
        high = sum(c if len(key) == 1 else max(c, 0) for key, c in field)
        a, b = scale * (max(0, -low) + 1), scale * (max(0, high) + 1)
        pairs_used[y] = (first, second)
        for key, c in (((first, second), b), ((first, y), -(a + b)), ((second, y), -(a + b)), ((y,), 2 * a + b)):
            add(key, c)
    names = [f"x{i:02}" for i in range(size)]
    model = Hamiltonian(terms, domain="boolean", labels=[*names, *pairs_used])
    spins = {tuple(names[i] for i in key): c for key, c in source.items()}
    return model, list(pairs_used), Hamiltonian(spins, domain="spin", labels=names).in_domain("boolean")


@pytest.fixture
def make_low_autocorrelation() -> Callable[[int, Fraction], tuple[Hamiltonian, list[str], Hamiltonian]]:
    return low_autocorrelation
