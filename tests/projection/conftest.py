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
    """For each setting of the originals: the minimum, its multiplicity, the first best auxiliaries, the nearest excess."""

    states: list[tuple[int, ...]]
    minimum: list[Fraction]
    multiplicity: list[int]
    first: list[tuple[int, ...]]
    gap: list[Fraction | None]

    def least_gap(self) -> Fraction | None:
        return min((gap for gap in self.gap if gap is not None), default=None)


def enumerate_all(model: Hamiltonian, auxiliaries: tuple[str, ...]) -> Enumerated:
    values = (1, -1) if model.domain == "spin" else (0, 1)
    inner = [label for label in model.labels if label in auxiliaries]
    outer = [label for label in model.labels if label not in auxiliaries]
    terms = model.terms()
    found = Enumerated([], [], [], [], [])
    for x in itertools.product(values, repeat=len(outer)):
        energies = []
        for a in itertools.product(values, repeat=len(inner)):
            state = dict(zip(outer, x, strict=True)) | dict(zip(inner, a, strict=True))
            energies.append(sum((c * int(np.prod([state[v] for v in key])) for key, c in terms), Fraction(0)))
        least = min(energies)
        found.states.append(x)
        found.minimum.append(least)
        found.multiplicity.append(energies.count(least))
        found.first.append(list(itertools.product(values, repeat=len(inner)))[energies.index(least)])
        found.gap.append(min((e - least for e in energies if e > least), default=None))
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
