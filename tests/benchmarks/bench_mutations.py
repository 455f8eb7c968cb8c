"""The mutation trial: random small reductions, each mutated, every claim of the verdict held to plain brute force.

Run it as a program::

    python tests/benchmarks/bench_mutations.py --mutants 100000 --seed 1

It prints how many mutants changed which claim, how many verdicts were wrong in either direction, and how many claims
were left open; the last two must be 0. The short version in tests/validation/test_mutations.py imports this file.

The oracle below knows models only by `terms()`: it multiplies out every product over every state of every variable in
Python integers, and shares no code with the check.
"""

from __future__ import annotations

import argparse
import random
import sys
import time
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import product
from math import lcm

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.trail import Step, Trail
from hubokit.reduction.planner import methods
from hubokit.reduction.reduce import reduce
from hubokit.reduction.result import Reduction
from hubokit.validation.check import check
from hubokit.validation.claims import CLAIMS
from hubokit.validation.verdict import Verdict

#: Variables of a reduced model at most.
LARGEST = 11
KEEPS = ("one-to-one", "energies", "ground-states")


# --- the oracle ---------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Truth:
    """What brute force says: claims, counts, gaps, and E, P, m of every source state."""

    claims: dict[str, bool]
    lost: int
    spurious: int
    source_gap: Fraction | None
    model_gap: Fraction | None
    energies: dict[tuple[int, ...], Fraction]
    minima: dict[tuple[int, ...], Fraction | None]
    counts: dict[tuple[int, ...], int]


def values(domain: str) -> tuple[int, int]:
    """The two values of a variable."""
    return (1, -1) if domain == "spin" else (0, 1)


def table(H: Hamiltonian, labels: tuple[str, ...]) -> tuple[list[int], int]:
    """Energy times a common denominator for every state in the order of `itertools.product`, and the denominator."""
    terms = [([labels.index(label) for label in key], value) for key, value in H.terms()]
    unit = lcm(*(value.denominator for _, value in terms)) if terms else 1
    whole = [(key, int(value * unit)) for key, value in terms]
    found = []
    for state in product(values(H.domain), repeat=len(labels)):
        energy = 0
        for key, weight in whole:
            for position in key:
                weight *= state[position]
            energy += weight
        found.append(energy)
    return found, unit


def model_state(reduction: Reduction, state: dict[str, int]) -> dict[str, int] | None:
    """Values of the model's originals for a source state, None where the model has no such state."""
    source, model = reduction.source, reduction.model
    found: dict[str, int] = {}
    for label, value in state.items():
        image = (reduction.origin or {}).get(label, label)
        if isinstance(image, tuple):
            image = image[1]
            value = -value if source.domain == "spin" else 1 - value
        if not isinstance(image, str):
            if value != image:
                return None
            continue
        if source.domain != model.domain:
            sign = -1 if model.convention == "1-2x" else 1
            value = sign * (2 * value - 1) if model.domain == "spin" else (sign * value + 1) // 2
        if found.setdefault(image, value) != value:
            return None
    return found


def truth(reduction: Reduction) -> Truth:
    """Every claim by the definitions, over all x and all a."""
    source, model, auxiliaries = reduction.source, reduction.model, tuple(reduction.auxiliaries)
    originals = tuple(label for label in model.labels if label not in auxiliaries)
    F, unit_F = table(model, originals + auxiliaries)
    E, unit_E = table(source, source.labels)
    block = 2 ** len(auxiliaries)
    place = {
        state: number * block for number, state in enumerate(product(values(model.domain), repeat=len(originals)))
    }
    energies: dict[tuple[int, ...], Fraction] = {}
    minima: dict[tuple[int, ...], Fraction | None] = {}
    counts: dict[tuple[int, ...], int] = {}
    above: dict[tuple[int, ...], Fraction | None] = {}
    for state, value in zip(product(values(source.domain), repeat=source.size), E, strict=True):
        energies[state] = Fraction(value, unit_E)
        there = model_state(reduction, dict(zip(source.labels, state, strict=True)))
        if there is None:
            minima[state], counts[state] = None, 0
            continue
        start = place[tuple(there[label] for label in originals)]
        settings = F[start : start + block]
        least = min(settings)
        minima[state], counts[state] = Fraction(least, unit_F), settings.count(least)
        higher = [energy for energy in settings if energy > least]
        above[state] = Fraction(min(higher) - least, unit_F) if higher else None
    return judged(reduction, energies, minima, counts, above)


def judged(
    reduction: Reduction,
    energies: dict[tuple[int, ...], Fraction],
    minima: dict[tuple[int, ...], Fraction | None],
    counts: dict[tuple[int, ...], int],
    above: dict[tuple[int, ...], Fraction | None],
) -> Truth:
    """The six claims, the lists and the two gaps."""
    held = {state: level for state, level in minima.items() if level is not None}
    scale, shift = reduction.declared or searched(energies, held)
    least_E, least_P = min(energies.values()), min(held.values())
    ground_E = {state for state, energy in energies.items() if energy == least_E}
    ground_P = {state for state, level in held.items() if level == least_P}
    same = all(minima[state] == scale * energy + shift for state, energy in energies.items())
    claims = {
        "quadratic": all(len(key) <= 2 for key, _ in reduction.model.terms()),
        "ground-energy": least_P == scale * least_E + shift,
        "ground-states": ground_E == ground_P,
        "even-multiplicity": ground_E == ground_P and len({counts[state] for state in ground_P}) == 1,
        "energies": same,
        "one-to-one": same and set(counts.values()) == {1},
    }
    levels = sorted(set(energies.values()))
    gaps = [level - least_P for level in held.values() if level > least_P]
    gaps += [gap for state in ground_P if (gap := above[state]) is not None]
    return Truth(
        claims,
        len(ground_E - ground_P),
        len(ground_P - ground_E),
        levels[1] - levels[0] if len(levels) > 1 else None,
        min(gaps) if gaps else None,
        energies,
        minima,
        counts,
    )


def searched(
    energies: dict[tuple[int, ...], Fraction], held: dict[tuple[int, ...], Fraction]
) -> tuple[Fraction, Fraction]:
    """alpha and beta that hold on every state the model has; 1 and 0 where there are none."""
    pairs = [(energies[state], level) for state, level in held.items()]
    (first, level), *_ = pairs
    other = next(((energy, value) for energy, value in pairs if energy != first), None)
    alpha = Fraction(1) if other is None else (other[1] - level) / (other[0] - first)
    beta = level - alpha * first
    if alpha > 0 and all(value == alpha * energy + beta for energy, value in pairs):
        return alpha, beta
    return Fraction(1), Fraction(0)


# --- random reductions and their mutants --------------------------------------------------------------------------


def random_source(rng: random.Random) -> Hamiltonian:
    """A Hamiltonian of 2 to 5 variables with small rational weights and products of up to all of them."""
    domain = rng.choice(("spin", "boolean"))
    labels = tuple("abcde"[: rng.randint(2, 5)])
    terms: dict[tuple[str, ...], Fraction] = {}
    unit = rng.choice((Fraction(1), Fraction(1), Fraction(1, 2), Fraction(2, 3), Fraction(10**21, 7)))
    for _ in range(rng.randint(1, 6)):
        size = rng.choice((1, 2, 3, 3, 3, 4, 5))
        key = tuple(sorted(rng.sample(labels, min(size, len(labels)))))
        terms[key] = unit * rng.choice((-3, -2, -1, -1, 1, 1, 2, 3))
    terms[()] = rng.choice((Fraction(0), Fraction(5), Fraction(-7, 3)))
    return Hamiltonian(terms, domain, labels=labels, convention=rng.choice(("1-2x", "2x-1")))


def random_reduction(rng: random.Random) -> Reduction:
    """One of our own reductions, every family in turn, small enough for brute force."""
    while True:
        source = random_source(rng)
        method = rng.choice(METHODS)
        made = reduce(
            source,
            method=method,
            keep=rng.choice(KEEPS),
            prefer=rng.choice(("auxiliaries", "range", "couplers")),
            domain=rng.choice((None, "spin", "boolean")),
        )
        if made.model.size <= LARGEST:
            return made


METHODS = tuple(methods())


def respelled(reduction: Reduction, rng: random.Random) -> Reduction:
    """The same reduction made elsewhere: originals renamed and flipped, sometimes merged or fixed."""
    source, model = reduction.source, reduction.model
    origin: dict[str, object] = {}
    change: dict[str, object] = {}
    fresh = {label: f"q{number}" for number, label in enumerate(rng.sample(source.labels, source.size))}
    for label in source.labels:
        flip = rng.random() < 0.4
        origin[label] = ("not", fresh[label]) if flip else fresh[label]
        change[label] = ("not", fresh[label]) if flip else fresh[label]
    kind = rng.choice(("renamed", "renamed", "merged", "fixed"))
    if kind == "merged" and source.size > 2:
        first, second = rng.sample(source.labels, 2)
        origin[second] = change[second] = origin[first]
    if kind == "fixed":
        label = rng.choice(source.labels)
        at = rng.choice(values(source.domain))
        origin[label] = Fraction(at)
        inside = at
        if source.domain != model.domain:
            sign = -1 if model.convention == "1-2x" else 1
            inside = sign * (2 * at - 1) if model.domain == "spin" else (sign * at + 1) // 2
        change[label] = inside
    moved = model.substituted(change)
    keep = [label for label in moved.labels if label not in reduction.auxiliaries]
    spare = {image[1] if isinstance(image, tuple) else image for image in origin.values()}
    missing = sorted(label for label in spare if isinstance(label, str) and label not in keep)
    moved = moved.with_labels((*moved.labels, *missing))
    auxiliaries = [label for label in reduction.auxiliaries if label in moved.labels]
    return Reduction(source, moved, auxiliaries, origin=origin, trail=Trail())


def coefficients(H: Hamiltonian) -> dict[tuple[str, ...], Fraction]:
    """The terms as a dictionary."""
    return dict(H.terms())


def rebuilt(H: Hamiltonian, terms: dict[tuple[str, ...], Fraction]) -> Hamiltonian:
    """A Hamiltonian with other coefficients over the same variables."""
    return Hamiltonian(terms, H.domain, labels=H.labels, convention=H.convention)


def _picked(terms: dict[tuple[str, ...], Fraction], rng: random.Random) -> tuple[str, ...]:
    return rng.choice([key for key in terms if key] or [()])


def off_by_one(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    terms = coefficients(H)
    key = _picked(terms, rng)
    terms[key] = terms.get(key, Fraction(0)) + rng.choice((-1, 1)) * H.resolution
    return rebuilt(H, terms)


def sign_flipped(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    terms = coefficients(H)
    key = _picked(terms, rng)
    terms[key] = -terms.get(key, Fraction(0))
    return rebuilt(H, terms)


def coupler_dropped(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    terms = coefficients(H)
    pairs = [key for key in terms if len(key) == 2]
    if pairs:
        del terms[rng.choice(pairs)]
    return rebuilt(H, terms)


def coupler_added(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    terms = coefficients(H)
    if H.size > 1:
        key = tuple(sorted(rng.sample(H.labels, 2), key=H.labels.index))
        terms[key] = terms.get(key, Fraction(0)) + rng.choice((-2, -1, 1, 2)) * H.resolution
    return rebuilt(H, terms)


def penalty_weakened(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    if not auxiliaries:
        return off_by_one(H, auxiliaries, rng)
    label, factor = rng.choice(auxiliaries), rng.choice((Fraction(1, 2), Fraction(3, 4), Fraction(9, 8)))
    return rebuilt(H, {key: value * factor if label in key else value for key, value in H.terms()})


def auxiliary_rewired(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    terms = coefficients(H)
    wires = [key for key in terms if len(key) == 2 and set(key) & set(auxiliaries)]
    if not wires:
        return coupler_added(H, auxiliaries, rng)
    old = rng.choice(wires)
    end = next(label for label in old if label in auxiliaries)
    target = rng.choice([label for label in H.labels if label != end])
    value = terms.pop(old)
    key = tuple(sorted((end, target), key=H.labels.index))
    terms[key] = terms.get(key, Fraction(0)) + value
    return rebuilt(H, terms)


def constant_shifted(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    return H + rng.choice((-1, 1)) * H.resolution


def product_added(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    terms = coefficients(H)
    key = tuple(sorted(rng.sample(H.labels, min(3, H.size)), key=H.labels.index))
    terms[key] = terms.get(key, Fraction(0)) + H.resolution
    return rebuilt(H, terms)


def rescaled(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    return rng.choice((2, Fraction(3, 2), -1)) * H + rng.choice((0, 1))


def untouched(H: Hamiltonian, auxiliaries: tuple[str, ...], rng: random.Random) -> Hamiltonian:
    return H


MUTATIONS: dict[str, Callable[[Hamiltonian, tuple[str, ...], random.Random], Hamiltonian]] = {
    "none": untouched,
    "off by one": off_by_one,
    "sign flipped": sign_flipped,
    "coupler dropped": coupler_dropped,
    "coupler added": coupler_added,
    "penalty changed": penalty_weakened,
    "auxiliary rewired": auxiliary_rewired,
    "constant shifted": constant_shifted,
    "product added": product_added,
    "rescaled": rescaled,
    "source term changed": off_by_one,
}


@dataclass(frozen=True)
class Mutant:
    """One mutated reduction."""

    mutation: str
    spelling: str
    reduction: Reduction


def mutants_of(made: Reduction, rng: random.Random, number: int) -> Iterator[Mutant]:
    """Mutants of one reduction, each with its trail, without it, declared otherwise, or spelled otherwise."""
    for _ in range(number):
        spelling = rng.choice(("trail", "trail", "no trail", "no trail", "declared", "origin"))
        base = made
        if spelling == "origin":
            base = respelled(made, rng)
        mutation = rng.choice(tuple(MUTATIONS))
        change = MUTATIONS[mutation]
        source, model, auxiliaries = base.source, base.model, tuple(base.auxiliaries)
        if mutation == "source term changed":
            source = change(source, (), rng)
        else:
            model = change(model, auxiliaries, rng)
        changed = replace(base, source=source, model=model)
        if spelling == "no trail":
            changed = replace(changed, trail=Trail())
        elif spelling == "declared":
            step = Step("made by hand", "", scale=Fraction(3, 2), shift=Fraction(1))
            honest = rng.random() < 0.5
            body = Fraction(3, 2) * model + 1 if honest else model
            changed = replace(changed, model=body, trail=Trail((step,), keep=rng.choice(KEEPS)))
        yield Mutant(mutation, spelling, changed)


# --- the comparison -----------------------------------------------------------------------------------------------


def faults(mutant: Mutant, verdict: Verdict, known: Truth, complete: bool = True) -> list[str]:
    """Every way in which a verdict departs from the truth; `complete` also objects to open and tested claims."""
    found = []
    for name in CLAIMS:
        claim = verdict.claims[name]
        if claim.status == "proved" and not known.claims[name]:
            found.append(f"{name} proved but false")
        if claim.status == "refuted" and known.claims[name]:
            found.append(f"{name} refuted but true")
        if complete and claim.status in ("open", "tested"):
            found.append(f"{name} {claim.status}: {claim.detail}")
        if claim.status == "refuted" and name != "quadratic":
            found += _witness_faults(mutant.reduction, claim.witness, known, name)
            if claim.rival is not None:
                found += _witness_faults(mutant.reduction, claim.rival, known, f"{name} (rival)")
    if verdict.lost is not None and verdict.lost.count != known.lost:
        found.append(f"{verdict.lost.count} lost, truly {known.lost}")
    if verdict.spurious is not None and verdict.spurious.count != known.spurious:
        found.append(f"{verdict.spurious.count} spurious, truly {known.spurious}")
    for name, value in (("source-gap", known.source_gap), ("model-gap", known.model_gap)):
        figure = verdict.figures.get(name)
        if (
            figure is not None
            and figure.exact
            and not figure.note.startswith("not computed")
            and figure.value != value
        ):
            found.append(f"{name} {figure}, truly {value}")
    return found


def _witness_faults(reduction: Reduction, witness: object, known: Truth, name: str) -> list[str]:
    if witness is None:
        return [f"{name} refuted without a witness"]
    state = tuple(witness.state[label] for label in reduction.source.labels)  # type: ignore[attr-defined]
    found = []
    if witness.source_energy != known.energies[state]:  # type: ignore[attr-defined]
        found.append(f"{name}: witness with a wrong E")
    if witness.model_energy != known.minima[state]:  # type: ignore[attr-defined]
        found.append(f"{name}: witness with a wrong P")
    if witness.multiplicity not in (None, known.counts[state]):  # type: ignore[attr-defined]
        found.append(f"{name}: witness with a wrong multiplicity")
    return found


@dataclass
class Tally:
    """What a trial counted."""

    mutants: int
    changed: Counter[tuple[str, str]]
    wrong: list[str]
    undecided: int


def trial(number: int, seed: int, evidence: str = "auto") -> Tally:
    """Judge `number` mutants and compare every claim with brute force."""
    rng = random.Random(seed)
    tally = Tally(0, Counter(), [], 0)
    while tally.mutants < number:
        made = random_reduction(rng)
        for mutant in mutants_of(made, rng, 8):
            known = truth(mutant.reduction)
            verdict = check(mutant.reduction, evidence=evidence)
            for name in CLAIMS:
                tally.changed[mutant.mutation, name] += not known.claims[name]
            wrong = faults(mutant, verdict, known, complete=evidence == "auto")
            tally.undecided += any(" open: " in line or " tested: " in line for line in wrong)
            tally.wrong += [f"{mutant.mutation}, {mutant.spelling}: {line}" for line in wrong]
            tally.mutants += 1
    return tally


def main(arguments: list[str]) -> int:
    """Run a trial and print its table."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--mutants", type=int, default=10_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--evidence", default="auto")
    chosen = parser.parse_args(arguments)
    start = time.perf_counter()
    tally = trial(chosen.mutants, chosen.seed, chosen.evidence)
    seconds = time.perf_counter() - start
    print(f"{tally.mutants} mutants, seed {chosen.seed}, evidence {chosen.evidence}, {seconds:.0f} s")
    print(f"{'mutation':<22}" + "".join(f"{name:>19}" for name in CLAIMS))
    for mutation in MUTATIONS:
        print(f"{mutation:<22}" + "".join(f"{tally.changed[mutation, name]:>19}" for name in CLAIMS))
    print(f"verdicts with a claim left open: {tally.undecided}")
    print(f"wrong: {len(tally.wrong) - tally.undecided if chosen.evidence == 'auto' else len(tally.wrong)}")
    for line in tally.wrong[:20]:
        print("  " + line)
    return 1 if tally.wrong else 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
