"""Evidence from a neighbourhood: all source states within a Hamming radius of chosen centres, and no others.

What holds there is `tested`, never proved. What fails there refutes a claim only where one state settles it
for all: `energies` and `one-to-one`. A set of minimisers that differs among the visited states leaves the
claim open, unless the ground states of the source are known from elsewhere.
"""

from __future__ import annotations

from itertools import combinations
from math import comb

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError, LimitError
from hubokit.model.states import from_bits, to_bits
from hubokit.validation.case import Case, States
from hubokit.validation.findings import Findings
from hubokit.validation.options import Options
from hubokit.validation.probing import columns_at
from hubokit.validation.scaling import Column, column_relation, judge_scale
from hubokit.validation.tables import comparable_columns
from hubokit.validation.verdict import Witness

METHOD = "neighbourhood"
#: Radius where none is given, and states visited at most.
RADIUS, VISITED = 2, 200_000
#: Entries (states times variables) held at most.
ENTRIES = 2**28
#: Random starts of the descent that finds centres, centres taken from it, and terms evaluated on the way at
#: most.
STARTS, CENTRES, DESCENT = 64, 4, 2**30


def by_neighbourhood(case: Case, options: Options, found: Findings) -> None:
    """Test the claims on the states near the centres."""
    if not case.projectable:
        _leave(options, found, "the model is not quadratic")
        return
    try:
        states, account = visited(case, options, found)
        originals, known = case.original_states(states)
        originals, bare = originals[known], states[~known]
        if not len(originals):
            _leave(options, found, "the model has no state near the centres")
            return
        E, P, best, counts = columns_at(case, originals)
    except LimitError as refusal:
        if options.named:
            raise
        _leave(options, found, str(refusal))
        return
    relation = column_relation(P, E)
    if not found.scale_known:
        found.take_scale(judge_scale(case.declared, relation))
        if found.scale_from == "found":
            found.note("scale and shift were found on the visited states alone")
    _judge(case, found, account, (originals, best), (E, P), counts)
    _ground_claims(case, found, account, bare, (E, P), counts)
    _against_ground_states(case, found, account, (originals, best), P, counts)
    found.evidence.append({"kind": METHOD, "account": account})


def _leave(options: Options, found: Findings, reason: str) -> None:
    for name in options.asked:
        found.leave_open(name, f"{METHOD}: {reason}")


def visited(case: Case, options: Options, found: Findings) -> tuple[States, str]:
    """Distinct source states within the radius of the centres, and a phrase that counts them.

    Raises
    ------
    InputError
        A negative radius.
    LimitError
        More states than may be held, with their number.
    """
    n = case.source.size
    centres = None if options.around is None else case.source.states(options.around)
    many = CENTRES if centres is None else len(centres)
    most = min(VISITED, ENTRIES // max(1, n, case.model.size))

    def number(radius: int) -> int:
        return sum(comb(n, flips) for flips in range(min(radius, n) + 1)) * many

    radius = options.radius
    if radius is None:
        radius = next((r for r in range(RADIUS, 0, -1) if number(r) <= most), 0)
    if radius < 0:
        raise InputError(f"the radius is {radius}; it must be at least 0", place="radius")
    if number(radius) > most:
        raise LimitError(
            f"{number(radius):,} states lie within radius {radius} of {many} centres; "
            f"at most {most:,} of this model are visited: take a smaller radius or fewer centres"
        )
    if centres is None:
        centres = descended(case, found)
    bits = to_bits(centres, case.source.domain)
    flips = [
        np.array(chosen, np.int64) for size in range(min(radius, n) + 1) for chosen in combinations(range(n), size)
    ]
    mask = np.zeros((len(flips), n), np.uint8)
    for row, chosen in enumerate(flips):
        mask[row, chosen] = 1
    states = (bits[:, None, :] ^ mask[None, :, :]).reshape(len(bits) * len(mask), n)
    states = np.unique(states, axis=0) if n else states[:1]
    origin = "found by descent" if options.around is None else "given"
    centre = f"{len(centres)} centre{'s' if len(centres) != 1 else ''} {origin}"
    account = f"{len(states):,} states visited, all within radius {radius} of {centre}; not a proof"
    return from_bits(states, case.source.domain), account


def descended(case: Case, found: Findings) -> States:
    """Centres: ground states of E where they are known, else the lowest distinct states that descent reaches.

    The descent flips one variable at a time from seeded random starts.
    """
    if found.source_level is not None:
        known: States = found.source_level.states[:CENTRES]
        return known
    E = case.source
    rng = np.random.default_rng(0)
    starts = STARTS if len(E) * E.size * STARTS * 3 <= DESCENT else CENTRES
    flips = min(E.size, DESCENT // (3 * starts * max(len(E), 1)))
    bits = rng.integers(0, 2, (starts, E.size), np.uint8)
    energy = E.integer_energies(from_bits(bits, E.domain))
    for _ in range(3):
        for column in rng.permutation(E.size)[:flips]:
            bits[:, column] ^= 1
            turned = E.integer_energies(from_bits(bits, E.domain))
            worse = turned >= energy
            bits[worse, column] ^= 1
            energy = np.where(worse, energy, turned)
    order = np.argsort(energy, kind="stable")
    _, first = np.unique(bits[order], axis=0, return_index=True)
    return from_bits(bits[order][np.sort(first)[:CENTRES]], E.domain)


def _judge(
    case: Case,
    found: Findings,
    account: str,
    states: tuple[States, States],
    columns: tuple[Column, Column],
    counts: NDArray[np.object_],
) -> None:
    (originals, best), (E, P) = states, columns
    left, right = comparable_columns(P, E, found.scale, found.shift)
    off, tied = np.flatnonzero(left != right), np.flatnonzero(counts != 1)

    def refute(name: str, text: str, at: int) -> None:
        witness = case.witness(originals[at], best[at], "projection", int(counts[at]), P[at])
        found.refute(name, METHOD, f"{text}; {account}", witness)

    if len(off) and not found.settled("energies"):
        refute("energies", f"P differs from alpha E + beta at {len(off)} visited states", int(off[0]))
    elif not case.represents_all and not found.settled("energies"):
        text = "variables are merged or fixed: the model lacks source states"
        found.refute("energies", METHOD, text, case.bare_witness(case.unrepresented_state()))
    else:
        found.test("energies", METHOD, account)
    if len(tied) and not found.settled("one-to-one"):
        refute("one-to-one", f"{len(tied)} visited states have more than one best setting", int(tied[0]))
    elif not len(off):
        found.test("one-to-one", METHOD, account)


def _against_ground_states(
    case: Case,
    found: Findings,
    account: str,
    states: tuple[States, States],
    P: Column,
    counts: NDArray[np.object_],
) -> None:
    """Where the ground states of E are known: one visited state that lies below one of them settles the claims."""
    level = found.source_level
    if level is None:
        return
    originals, known = case.original_states(level.states[:VISITED])
    if not known.any():
        return
    _, reduced, best, many = columns_at(case, originals[known])
    own = originals[known]
    high, low = int(reduced.integers.argmax()), int(P.integers.argmin())

    def at_ground(row: int) -> Witness:
        return case.witness(own[row], best[row], "projection", int(many[row]), reduced[row])

    visited_low = case.witness(states[0][low], states[1][low], "projection", int(counts[low]), P[low])
    if P[low] < reduced[high] and not found.settled("ground-states"):
        text = f"a ground state of E does not minimise P: a visited state lies below it; {account}"
        found.refute("ground-states", METHOD, text, at_ground(high), visited_low)
    most, fewest = int(np.argmax(many)), int(np.argmin(many))
    if many[most] != many[fewest] and not found.settled("even-multiplicity"):
        text = f"m runs from {many[fewest]} to {many[most]} over the ground states of E"
        found.refute("even-multiplicity", METHOD, text, at_ground(most), at_ground(fewest))
    target = found.scale * level.energy + found.shift
    if P[low] < target and found.scale_from != "found" and not found.settled("ground-energy"):
        text = f"min P is at most {P[low]}, alpha min E + beta = {target}; {account}"
        found.refute("ground-energy", METHOD, text, visited_low)


def _ground_claims(
    case: Case,
    found: Findings,
    account: str,
    bare: States,
    columns: tuple[Column, Column],
    counts: NDArray[np.object_],
) -> None:
    """The three claims about ground states: tested on the visited states, or open with what was seen.

    `bare` are the visited source states that the model cannot represent: P is infinite there.
    """
    E, P = columns
    lowest, low = E.integers == E.integers.min(), P.integers == P.integers.min()
    least = E[int(lowest.argmax())]
    missing = 0
    if len(bare):
        levels = case.source.integer_energies(bare)
        floor = case.source.constant + int(levels.min()) * case.source.resolution
        missing = int((levels == levels.min()).sum()) if floor <= least else 0
        if floor < least:
            lowest, least = np.zeros(len(lowest), bool), floor
    if P[int(low.argmax())] == found.scale * least + found.shift:
        found.test("ground-energy", METHOD, account)
    else:
        found.leave_open("ground-energy", f"{METHOD}: the least visited energies differ; {account}")
    if missing or not np.array_equal(low, lowest):
        lost, spurious = int((lowest & ~low).sum()) + missing, int((low & ~lowest).sum())
        text = f"{METHOD}: among visited states {lost} minimisers are lost and {spurious} spurious; {account}"
        for name in ("ground-states", "even-multiplicity"):
            found.leave_open(name, text)
        return
    found.test("ground-states", METHOD, account)
    if len(set(counts[low])) == 1:
        found.test("even-multiplicity", METHOD, account)
    else:
        found.leave_open("even-multiplicity", f"{METHOD}: m differs among the lowest visited states; {account}")
