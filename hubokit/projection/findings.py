"""What has been found out about the clusters of one model, in the order of the proof."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from hubokit.projection.chains import Chain
from hubokit.projection.guards import Rules
from hubokit.projection.polynomial import Gathered
from hubokit.projection.settle import Settled
from hubokit.projection.structure import Structure


@dataclass(frozen=True)
class RuleStep:
    """Rules in the order of the proof.

    Parameters
    ----------
    at_once : bool
        Whether the auxiliaries are put in before the next step is judged.
    rules : list of Rules
    """

    at_once: bool
    rules: list[Rules]


Step = Settled | RuleStep


@dataclass
class Findings:
    """Everything found out about the clusters of one model.

    Parameters
    ----------
    structure : Structure
    gathered : Gathered
        Terms of P so far, over originals and decided auxiliaries.
    settled : list of (Settled, bool)
        Batches settled by tables or counting; whether they touch originals only.
    rounds : list of rounds of Rules
        In an order in which every guard is known before it is asked for.
    undecided : list of str
    steps : list of Settled or RuleStep
        In the order of the proof.
    """

    structure: Structure
    gathered: Gathered
    settled: list[tuple[Settled, bool]] = field(default_factory=list)
    rounds: list[list[Rules]] = field(default_factory=list)
    undecided: list[str] = field(default_factory=list)
    steps: list[Step] = field(default_factory=list)

    def settle(self, settled: Settled) -> None:
        """Take in a batch settled by tables or counting, whose polynomials are gathered already."""
        consistent = not self.structure.is_auxiliary[settled.batch.touched].any()
        self.settled.append((settled, bool(consistent)))
        self.steps.append(settled)

    def follow(self, chain: Chain) -> None:
        """Take in auxiliaries eliminated in turn, with what their terms became."""
        self.rounds.extend(chain.rounds())
        self.steps.extend(RuleStep(at_once, rules) for at_once, rules in chain.steps)
        polynomial = chain.polynomial
        constant = (np.zeros((1, 0), np.int64), np.array([polynomial.constant], object))
        self.gathered.add([constant, *polynomial.parts], polynomial.shift)
