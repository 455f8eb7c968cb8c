"""Writes the models of fixtures/, the same every time: ``python tests/make_fixtures.py [FOLDER]``.

Every random choice has its seed here and in the file it went into.
"""

from __future__ import annotations

import itertools
import random
import sys
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

from hubokit.exchange.documents import Document, write_document
from hubokit.model.hamiltonian import Hamiltonian

ROOT = Path(__file__).resolve().parents[1]
LOW_AUTOCORRELATION = {8: 8, 12: 10, 16: 24}
SATISFIABLE_SEED = 20
UNSATISFIABLE_SEED = 21
PARITY_SEED = 22

NORTH = ("north-1", "north-2", "north-3", "north-4")
SOUTH = ("south-1", "south-2", "south-3")
VALVES = (*NORTH, *SOUTH, "mist-east", "mist-west", "pump", "tank-a", "tank-b", "feed", "flush")
RULES: tuple[tuple[int, str, str], ...] = (
    *(
        (2, " ".join(triple), "no three valves of the north line at once")
        for triple in itertools.combinations(NORTH, 3)
    ),
    (2, "south-1 south-2 south-3", "no three valves of the south line at once"),
    (1, "!north-1 !north-2", "bed 1 of the north line gets water"),
    (1, "!north-3 !north-4", "bed 2 of the north line gets water"),
    (1, "!south-1 !south-2 !south-3", "the south line gets water"),
    (2, "mist-east !pump", "the east mist runs only with the pump"),
    (2, "mist-east pump !tank-a", "and only from tank a"),
    (2, "mist-west !pump", "the west mist runs only with the pump"),
    (2, "mist-west pump !tank-b", "and only from tank b"),
    (1, "!mist-east !mist-west", "one mist at least"),
    (1, "mist-east mist-west south-1 south-2", "both mists leave pressure for one of south 1 and 2"),
    (1, "mist-east north-3 north-4", "the east mist leaves pressure for one of north 3 and 4"),
    (1, "feed !tank-a !tank-b", "feed is drawn from a tank"),
    (1, "feed pump tank-a flush", "no feed from tank a down the drain"),
    (1, "feed north-1 north-2", "feed goes to one of north 1 and 2"),
    (2, "flush mist-east", "no flushing while the east mist runs"),
    (2, "flush mist-west", "no flushing while the west mist runs"),
    (1, "tank-a tank-b !feed", "both tanks only for feed"),
    (1, "tank-a tank-b south-2 south-3", "both tanks leave one of south 2 and 3 shut"),
)
"""Weight of a broken rule, the literals that are all true when it is broken (``!`` = shut), and the rule."""


def low_autocorrelation(size: int) -> Hamiltonian:
    """E(s) = sum_{k=1..N-1} (sum_{i=1..N-k} s_i s_{i+k})^2, expanded exactly: a 4-local spin model."""
    terms: dict[tuple[int, ...], int] = {}
    for shift in range(1, size):
        for i, j in itertools.product(range(size - shift), repeat=2):
            odd = {i} ^ {i + shift} ^ {j} ^ {j + shift}
            product = tuple(sorted(odd))
            terms[product] = terms.get(product, 0) + 1
    labels = tuple(f"s{i + 1:02d}" for i in range(size))
    return Hamiltonian(
        {tuple(labels[i] for i in product): weight for product, weight in terms.items()},
        domain="spin",
        labels=labels,
    )


def random_clauses(variables: int, amount: int, seed: int) -> list[tuple[int, ...]]:
    """Distinct clauses of three literals on distinct variables, every choice uniform."""
    chance = random.Random(seed)
    clauses: dict[tuple[int, ...], None] = {}
    while len(clauses) < amount:
        chosen = sorted(chance.sample(range(1, variables + 1), 3))
        clauses[tuple(v if chance.random() < 0.5 else -v for v in chosen)] = None
    return list(clauses)


def dimacs(variables: int, clauses: Sequence[Sequence[int]], comments: Iterable[str]) -> str:
    """A formula in DIMACS CNF."""
    lines = [f"c {comment}" for comment in comments]
    lines.append(f"p cnf {variables} {len(clauses)}")
    lines += [" ".join(map(str, [*clause, 0])) for clause in clauses]
    return "\n".join(lines) + "\n"


def parity_equations(variables: int, equations: int, seed: int) -> tuple[Hamiltonian, list[int]]:
    """H = -sum_e J_e s_i s_j s_k with J_e = +1 or -1 so that a planted state satisfies every equation."""
    chance = random.Random(seed)
    planted = [chance.choice((1, -1)) for _ in range(variables)]
    triples: dict[tuple[int, ...], None] = {}
    while len(triples) < equations:
        triples[tuple(sorted(chance.sample(range(variables), 3)))] = None
    labels = tuple(f"b{i + 1:02d}" for i in range(variables))
    weights = {t: planted[t[0]] * planted[t[1]] * planted[t[2]] for t in triples}
    model = Hamiltonian(
        {tuple(labels[i] for i in t): -weight for t, weight in weights.items()}, domain="spin", labels=labels
    )
    return model, planted


def greenhouse() -> Hamiltonian:
    """The sum of the broken rules: 0 for an admissible setting of the valves."""
    terms: dict[tuple[str, ...], int] = {}
    for weight, literals, _ in RULES:
        partial: dict[tuple[str, ...], int] = {(): weight}
        for literal in literals.split():
            name = literal.removeprefix("!")
            longer = {(*product, name): -w if literal[0] == "!" else w for product, w in partial.items()}
            partial = {**partial, **longer} if literal[0] == "!" else longer
        for product, w in partial.items():
            key = tuple(sorted(product))
            terms[key] = terms.get(key, 0) + w
    return Hamiltonian(terms, domain="boolean", labels=VALVES)


def elsewhere() -> tuple[Hamiltonian, Hamiltonian]:
    """Two parity terms, and the same reduced elsewhere: other names, one spin flipped, one auxiliary a term.

    A product of three spins is the minimum over a of 3 + S + (pairs) - 2 a S - 2 a, with S the sum of the spins.
    """
    source = Hamiltonian({("a", "b", "c"): 1, ("c", "d", "e"): 1}, domain="spin")
    terms: dict[tuple[str, ...], int] = {(): 6}
    # Spin c went to -q2. Two factors of -1 cancel in pairs, so only terms odd in c change their sign.
    for spins, auxiliary in ((("q0", "q1", "q2"), "t0"), (("q2", "q3", "q4"), "t1")):
        sign = {"q2": -1}
        for spin in spins:
            terms[(spin,)] = terms.get((spin,), 0) + sign.get(spin, 1)
            terms[(spin, auxiliary)] = -2 * sign.get(spin, 1)
        for one, other in itertools.combinations(spins, 2):
            terms[(one, other)] = sign.get(one, 1) * sign.get(other, 1)
        terms[(auxiliary,)] = -2
    return source, Hamiltonian(terms, domain="spin")


def write_all(folder: Path) -> None:
    """Write every fixture into a folder, over what is there."""
    folder.mkdir(parents=True, exist_ok=True)

    def save(name: str, model: Hamiltonian, intent: dict[str, Any], notes: dict[str, Any]) -> None:
        write_document(Document(thing=model, intent=intent, notes=notes), folder / name, force=True)

    for size, energy in LOW_AUTOCORRELATION.items():
        save(
            f"low-autocorrelation-{size:02d}.json",
            low_autocorrelation(size),
            {
                "description": f"A radar pulse of {size} chips with the least autocorrelation off its peak",
                "ground_energy": str(energy),
            },
            {
                "formula": "E(s) = sum_{k=1..N-1} (sum_{i=1..N-k} s_i s_{i+k})^2",
                "reference": "Packebusch & Mertens 2016, J. Phys. A 49 165001",
            },
        )
    for name, amount, seed, outcome in (
        ("satisfiable-20", 70, SATISFIABLE_SEED, "satisfiable"),
        ("unsatisfiable-20", 130, UNSATISFIABLE_SEED, "unsatisfiable"),
    ):
        text = dimacs(
            20,
            random_clauses(20, amount, seed),
            (
                f"random 3-SAT, 20 variables, {amount} clauses, {outcome}",
                f"written by tests/make_fixtures.py, seed {seed}",
            ),
        )
        (folder / f"{name}.cnf").write_text(text, encoding="utf-8")
    parity, planted = parity_equations(20, 18, PARITY_SEED)
    save(
        "parity-equations.json",
        parity,
        {
            "description": "Eighteen parity equations on twenty spins, all satisfied by a planted state",
            "ground_energy": "-18",
            "target_states": {"variables": list(parity.labels), "states": [planted]},
        },
        {"seed": PARITY_SEED, "target_states": "one of the ground states, not all"},
    )
    save(
        "greenhouse.json",
        greenhouse(),
        {
            "description": "Settings of fourteen irrigation valves that break no rule; 1 is open",
            "energy_unit": "weight of broken rules",
            "ground_energy": "0",
            "groups": [
                {"name": "north line", "variables": list(NORTH), "constraint": "at most two open"},
                {"name": "south line", "variables": list(SOUTH), "constraint": "one or two open"},
                {"name": "mist", "variables": ["mist-east", "mist-west"], "constraint": "at least one open"},
            ],
        },
        {
            "invented": "An example made up for this toolkit; no such greenhouse exists",
            "rules": [f"{rule} (weight {weight}: {literals})" for weight, literals, rule in RULES],
        },
    )
    (folder / "greenhouse-settings.csv").write_text(settings_table(greenhouse(), 6), encoding="utf-8")
    source, reduced = elsewhere()
    save("elsewhere-source.json", source, {"description": "Two parity terms that share a spin"}, {})
    save(
        "elsewhere-reduced.json",
        reduced,
        {},
        {
            "reduced": "The source under other names (a, b, d, e are q0, q1, q3, q4; c is q2 flipped), with "
            "auxiliaries t0 and t1 and without a trail"
        },
    )
    (folder / "elsewhere-origin.json").write_text(
        '{"a": "q0", "b": "q1", "c": ["not", "q2"], "d": "q3", "e": "q4"}\n', encoding="utf-8"
    )
    (folder / "elsewhere-states.csv").write_text(
        "q0,q1,q2,q3,q4,t0,t1\n1,1,1,1,1,1,1\n-1,1,-1,-1,1,1,1\n-1,1,-1,-1,1,-1,1\n", encoding="utf-8"
    )


def settings_table(model: Hamiltonian, amount: int) -> str:
    """The first admissible settings in lift order, as a table of states."""
    rows = [",".join(model.labels)]
    for state in itertools.product((0, 1), repeat=model.size):
        if model.energy(state) == 0:
            rows.append(",".join(map(str, state)))
            if len(rows) > amount:
                break
    return "\n".join(rows) + "\n"


if __name__ == "__main__":
    write_all(Path(sys.argv[1]) if len(sys.argv) > 1 else ROOT / "fixtures")
