"""Evidence from a neighbourhood: all source states within a Hamming radius of chosen centres, and no others.

Where the projection gives P as a polynomial, and every source state is a state of the model, E and P are walked
around the same centres (`hubokit.spectrum.neighbourhood`), and P - alpha E - beta is written in the flips away from
them: it vanishes at every visited state exactly when its coefficients do. Otherwise P is minimised state by state.
"""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations
from math import comb

import numpy as np

from hubokit.errors import InputError, LimitError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, to_bits
from hubokit.spectrum.balls import Neighbourhood
from hubokit.spectrum.minima import is_local_minimum
from hubokit.spectrum.neighbourhood import neighbourhood
from hubokit.validation.case import Case, States
from hubokit.validation.difference_near import nonzero_near, relation_near
from hubokit.validation.findings import Findings
from hubokit.validation.options import Options
from hubokit.validation.probing import columns_at
from hubokit.validation.scaling import column_relation, judge_scale
from hubokit.validation.tables import comparable_columns
from hubokit.validation.traps import traps
from hubokit.validation.visit import METHOD, Lowest, Visit, judge, lowest_of

#: Radius where none is given, states visited one by one at most, and states walked in a second.
RADIUS, VISITED, WALKED = 2, 200_000, 500_000_000
#: Entries (states times variables) held at most, those of the lists of lowest states, and states in one of them.
ENTRIES, LISTED, MOST_LISTED = 2**28, 2**22, 2**11
#: Starts of the descent that finds centres, centres taken from it, terms evaluated on the way at most.
STARTS, CENTRES, DESCENT = 64, 4, 2**28
#: Flips around a centre within which traps are looked for.
TRAP_RADIUS = 2


def by_neighbourhood(case: Case, options: Options, found: Findings) -> None:
    """Test the claims on the states near the centres."""
    if not case.projectable:
        _leave(options, found, "the model is not quadratic")
        return
    try:
        visit: Visit | None
        P = case.projection.polynomial if case.represents_all else None
        centres, radius, origin = _places(case, options, found, walked=P is not None)
        if P is not None:
            visit = _walked(case, options, found, P.with_labels(case.originals), (centres, radius, origin))
        else:
            visit = _asked(case, found, centres, radius, origin)
    except LimitError as refusal:
        if options.named:
            raise
        _leave(options, found, str(refusal))
        return
    if visit is None:
        _leave(options, found, "the model has no state near the centres")
        return
    judge(case, found, visit)
    found.evidence.append({"kind": METHOD, "account": visit.tested})
    _note_traps(case, found, centres)


def _leave(options: Options, found: Findings, reason: str) -> None:
    for name in options.asked:
        found.leave_open(name, f"{METHOD}: {reason}")


def _places(case: Case, options: Options, found: Findings, walked: bool) -> tuple[States, int, str]:
    """Distinct centres (source states), the radius, and a phrase for where the centres are from.

    Raises
    ------
    InputError
        A negative radius, or no centre.
    LimitError
        More states than may be visited, with their number.
    """
    n = case.source.size
    centres = None if options.around is None else case.source.states(options.around)
    if centres is not None:
        if not len(centres):
            raise InputError("no states were given to look around", place="around")
        centres = centres[np.sort(np.unique(centres, axis=0, return_index=True)[1])] if n else centres[:1]
    many = CENTRES if centres is None else len(centres)
    one_by_one = min(VISITED, ENTRIES // max(1, n, case.model.size))
    most = max(one_by_one, int(WALKED * options.time)) if walked else one_by_one
    radius = options.radius
    if radius is None:
        radius = next((r for r in range(RADIUS, 0, -1) if _number(n, r) * many <= most), 0)
    if radius < 0:
        raise InputError(f"the radius is {radius}; it must be at least 0", place="radius")
    if _number(n, radius) * many > most:
        raise LimitError(
            f"{_number(n, radius) * many:,} states lie within radius {radius} of {many} centres; "
            f"at most {most:,} of this model are visited: take a smaller radius or fewer centres"
        )
    if centres is None:
        return descended(case, found), min(radius, n), "found by descent"
    return centres, min(radius, n), "given"


def _number(size: int, radius: int) -> int:
    return sum(comb(size, flips) for flips in range(min(radius, size) + 1))


def _account(states: int, radius: int, centres: States, origin: str) -> str:
    centre = f"{len(centres)} centre{'s' if len(centres) != 1 else ''} {origin}"
    return f"{states:,} state{'s' if states != 1 else ''} visited, all within radius {radius} of {centre}"


def _walked(case: Case, options: Options, found: Findings, P: Hamiltonian, places: tuple[States, int, str]) -> Visit:
    """E and P walked around the same centres, their difference by algebra."""
    source_centres, radius, origin = places
    E, centres = case.energy, case.original_states(source_centres)[0]
    limit = int(np.clip(LISTED // (max(1, E.size) * len(centres) * (radius + 1)), 64, MOST_LISTED))
    looks = [
        neighbourhood(
            H, centres, radius, limit=limit, distinct=True,
            executor=options.executor, progress=options.progress, time=options.time,
        )
        for H in (E, P)
    ]  # fmt: skip
    if not found.scale_known:
        relation = None if case.declared is not None else relation_near(P, E, centres, radius)
        _take_scale(case, found, relation)
    difference = (P - found.scale * E - found.shift).with_labels(case.originals)
    off = nonzero_near(difference, centres, radius)
    tied, tied_text, unlooked = _ties(case, centres, radius)
    return Visit(
        _account(looks[0].states, radius, source_centres, origin),
        _lowest(looks[0], limit),
        _lowest(looks[1], limit),
        off,
        "P differs from alpha E + beta at a visited state",
        tied,
        tied_text,
        unlooked,
    )


def _take_scale(case: Case, found: Findings, relation: object) -> None:
    found.take_scale(judge_scale(case.declared, relation))  # type: ignore[arg-type]
    if found.scale_from == "found":
        found.note("scale and shift were found on the visited states alone")


def _lowest(look: Neighbourhood, limit: int) -> Lowest:
    """The lowest states of a look: centres among them, and those listed as lying at or below the highest centre."""
    shells = [shell for ball in look.balls for shell in ball.shells[1:]]
    least = min([ball.energy for ball in look.balls] + [shell.lowest for shell in shells if shell.lowest is not None])
    rows = [ball.centre[None, :] for ball in look.balls if ball.energy == least]
    complete = True
    for shell in shells:
        count = sum(energy == least for energy in shell.energies)
        rows.append(shell.spurious[:count])
        complete &= count < limit or shell.at_or_below <= limit
    return Lowest(least, np.concatenate(rows), complete)


def _ties(case: Case, centres: States, radius: int) -> tuple[States | None, str, str]:
    """A visited state with more than one best auxiliary setting; and why not every state was looked at."""
    projection = case.projection
    if projection.uniform_multiplicity == 1:
        return None, "", ""
    if projection.uniform_multiplicity is not None:
        return centres[0], f"every state has {projection.uniform_multiplicity} best settings", ""
    most = min(VISITED, ENTRIES // max(1, case.model.size))
    reach = next((r for r in range(radius, 0, -1) if _number(centres.shape[1], r) * len(centres) <= most), 0)
    states = within(centres, reach, case.model.domain)
    many = np.asarray(projection.multiplicities(states), object)
    tied = np.flatnonzero(many != 1)
    if len(tied):
        return states[int(tied[0])], f"{len(tied)} visited states have more than one best setting", ""
    where = f"multiplicities were looked at within radius {reach} only, where all are 1"
    return None, "", "" if reach == radius else where


def within(centres: States, radius: int, domain: str) -> States:
    """All distinct states within a radius, one by one."""
    n = centres.shape[1]
    bits = to_bits(centres, domain)
    flips = [
        np.array(chosen, np.int64) for size in range(min(radius, n) + 1) for chosen in combinations(range(n), size)
    ]
    mask = np.zeros((len(flips), n), np.uint8)
    for row, chosen in enumerate(flips):
        mask[row, chosen] = 1
    states = (bits[:, None, :] ^ mask[None, :, :]).reshape(len(bits) * len(mask), n)
    return from_bits(np.unique(states, axis=0) if n else states[:1], domain)


def _asked(case: Case, found: Findings, centres: States, radius: int, origin: str) -> Visit | None:
    """E and P asked for at every visited state; None where the model can represent none of them."""
    states = within(centres, radius, case.source.domain)
    originals, known = case.original_states(states)
    originals, bare = originals[known], states[~known]
    if not len(originals):
        return None
    E, P, _, counts = columns_at(case, originals)
    if not found.scale_known:
        _take_scale(case, found, column_relation(P, E))
    left, right = comparable_columns(P, E, found.scale, found.shift)
    off, tied = np.flatnonzero(left != right), np.flatnonzero(counts != 1)
    missing = case.source.integer_energies(bare)
    return Visit(
        _account(len(states), radius, centres, origin),
        lowest_of(E, originals),
        lowest_of(P, originals),
        originals[int(off[0])] if len(off) else None,
        f"P differs from alpha E + beta at {len(off)} visited states",
        originals[int(tied[0])] if len(tied) else None,
        f"{len(tied)} visited states have more than one best setting",
        "",
        [case.source.constant + int(k) * case.source.resolution for k in missing],
    )


def _note_traps(case: Case, found: Findings, centres: States) -> None:
    """Whether the auxiliaries make local minima near the centres that the source has not, as a note.

    A centre that a single flip lowers holds nobody; there nothing is looked for.
    """
    if not case.auxiliaries or case.model.locality > 2:
        return
    places = np.flatnonzero(case.original_states(centres)[1])
    try:
        places = places[is_local_minimum(case.model, case.reduction.lift(centres[places]))]
        if not len(places):
            found.note("traps: not looked for, since a single flip lowers the energy of every centre")
            return
        seen = traps(case.reduction, centres[places], TRAP_RADIUS)
    except LimitError as refusal:
        found.note(f"traps near the centres were not looked for: {refusal}")
        return
    seen = replace(seen, found=tuple(replace(trap, target=int(places[trap.target])) for trap in seen.found))
    over = len(centres) - len(places)
    passed = f"; {over} of {len(centres)} centres are no local minima and were passed over" if over else ""
    found.note(f"traps: {seen}{passed}")


def descended(case: Case, found: Findings) -> States:
    """Centres: ground states of E where they are known, else the lowest distinct states that descent reaches.

    The descent flips one variable at a time from seeded random starts.
    """
    if found.source_level is not None and len(found.source_level.states):
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
