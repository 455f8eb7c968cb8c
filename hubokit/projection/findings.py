"""What has been found out about the clusters of one model, in the order of the proof."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from hubokit.projection.chains import Chain
from hubokit.projection.guards import Rules
from hubokit.projection.polynomial import Gathered
from hubokit.projection.settle import Settled
from hubokit.projection.structure import Integers, Positions, Structure


@dataclass(frozen=True)
class RuleStep:
    """Auxiliaries decided by interval bounds.

    Parameters
    ----------
    at_once : bool
        Whether the auxiliaries are put in before the next step is judged.
    rules : list of Rules
    least_margin : 1 or 0
        With 0 the settings are best ones, but maybe not the only ones.
    """

    at_once: bool
    rules: list[Rules]
    least_margin: int = 1

    @property
    def name(self) -> str:
        """Name of the method."""
        return "guards" if self.least_margin else "guards with ties"


@dataclass(frozen=True)
class SharedStep:
    """Auxiliaries decided together by shared bounds.

    Parameters
    ----------
    rules : list of Rules, one for each auxiliary
    shares : list of (i, k, right bit of i, right bit of k, numerator)
        Shares that differ from one half, as numerators over `hubokit.projection.shared_bounds.PARTS`.
    slacks : list of Fraction
        Least slack of each auxiliary, in units of the resolution.
    """

    rules: list[Rules]
    shares: list[tuple[int, int, int, int, int]]
    slacks: list[Fraction]
    name: str = "shared bounds"


@dataclass(frozen=True)
class Listed:
    """A cluster minimised state by state.

    Parameters
    ----------
    auxiliaries, touched : int64 arrays
        Its auxiliaries, and the originals on which its minimum depends (directly or through decided auxiliaries).
    minimum : integer array, shape (2**d,)
        Least energy of the terms that hold the auxiliaries, in lift order of the touched originals.
    multiplicity : object array, shape (2**d,)
    gap : int
        Least strictly positive excess, -1 where there is none.
    is_gap_exact : bool
        Whether `gap` is the true one; otherwise a lower bound.
    """

    auxiliaries: Positions
    touched: Positions
    minimum: Integers
    multiplicity: Integers
    gap: int
    is_gap_exact: bool


Step = Settled | RuleStep | SharedStep | Listed


@dataclass
class Findings:
    """Everything found out about the clusters of one model.

    Parameters
    ----------
    structure : Structure
    gathered : Gathered
        Terms of P so far, over originals and decided auxiliaries.
    rounds : list of rounds of Rules
        In an order in which every guard is known before it is asked for.
    undecided : list of str
    steps : list of steps
        In the order of the proof.
    """

    structure: Structure
    gathered: Gathered
    rounds: list[list[Rules]] = field(default_factory=list)
    undecided: list[str] = field(default_factory=list)
    steps: list[Step] = field(default_factory=list)

    def known(self) -> NDArray[np.bool_]:
        """Originals and auxiliaries decided by rules, shape (n,)."""
        known = ~self.structure.is_auxiliary
        for rules in self.rounds:
            for one in rules:
                known[one.auxiliaries] = True
        return known

    def settled(self) -> Iterator[tuple[Settled, bool]]:
        """Batches settled by tables or counting, and whether they touch originals only."""
        for step in self.steps:
            if isinstance(step, Settled):
                yield step, not bool(self.structure.is_auxiliary[step.batch.touched].any())

    @property
    def is_tie_free_or_counted(self) -> bool:
        """Whether m is known of every cluster."""
        return all(step.least_margin > 0 for step in self.steps if isinstance(step, RuleStep))

    def listed(self) -> Iterator[Listed]:
        """Clusters minimised state by state."""
        return (step for step in self.steps if isinstance(step, Listed))

    def settle(self, step: Settled | Listed) -> None:
        """Take in clusters whose polynomials are gathered already."""
        self.steps.append(step)

    def decide(self, step: RuleStep | SharedStep, rules: list[Rules]) -> None:
        """Take in auxiliaries decided by their guards; the terms that this completes go into P as they stand."""
        before = self.known()
        self.rounds.append(rules)
        self.steps.append(step)
        after = self.known()
        fresh = np.flatnonzero(after & ~before)
        ends, weights = self.structure.ends, self.structure.weights
        kept = after[ends].all(axis=1) & ~before[ends].all(axis=1)
        self.gathered.add([(fresh[:, None], self.structure.field[fresh]), (ends[kept], weights[kept])])

    def follow(self, chain: Chain) -> None:
        """Take in auxiliaries eliminated in turn, with what their terms became."""
        # Where ties are possible the rules are no facts about every minimiser, and nothing but P may rest on them.
        if chain.least_margin:
            self.rounds.extend(chain.rounds())
        self.steps.extend(RuleStep(at_once, rules, chain.least_margin) for at_once, rules in chain.steps)
        polynomial = chain.polynomial
        constant = (np.zeros((1, 0), np.int64), np.array([polynomial.constant], object))
        self.gathered.add([constant, *polynomial.parts], polynomial.shift)
