"""Few pairs that cover all rows: simplification, greedy, sides, exchange, and the integer program where small.

*Sides.* Give every variable one of two sides. Of three variables two are on one side, so the pairs within the sides
cover every cubic term; for all triples on n variables halves give C(n,2) - floor(n^2/4) pairs, the least number
(Mantel 1907). A quartic splits within the sides unless three of its variables are on one side, that is unless the
sides add up to an odd number over it. The sides without an odd quartic form a linear space over GF(2); a local
search in that space looks for the sides with the fewest pairs within. For the low-autocorrelation model it meets
the pairs (i, j) with i + j even.

Every answer is at most the greedy one, which is where the search begins and which stays its oracle.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hubokit.reduction.cover_kernels import exchange_loop, greedy_loop, kernel, prune_loop
from hubokit.reduction.cover_problem import DROPPED, EMPTY, SLOTS, CoverProblem
from hubokit.reduction.cover_program import least_cover

PROGRAM_WORK = 10_000
"""Rows times squared mean degree of the pairs up to which the integer program is asked, for `work` = 1."""

PROGRAM_NODES = 100
"""Branch and bound nodes of one program, for `work` = 1."""

QUARTIC_NODES = 2000
"""Nodes times rows where quartics are among them: there a node takes far longer."""

QUARTIC_ROWS, LOOSE_DEGREE = 64, 1.6
"""More quartics than these count as hard, unless their pairs stand in this few rows on average."""

EXCHANGE_WORK = 100_000_000
"""Slots that the weighted exchange may look at, for `work` = 1."""

EXCHANGE_STEPS = 200_000
SAMPLE = 50
SIDE_WORK = 20_000_000
"""Moves times pairs up to which sides are searched."""

SIDE_STARTS = 8

Chosen = NDArray[np.bool_]


@dataclass(frozen=True)
class Cover:
    """A full cover and how it was found.

    Parameters
    ----------
    chosen : bool array, shape (p,)
        Given pairs included.
    how : str
        In words, for the trail.
    greedy : int
        What the greedy rule alone would have cost.
    least : int
        No cover is known to be possible below this number.
    """

    chosen: Chosen
    how: str
    greedy: int
    least: int


def find_cover(problem: CoverProblem, seed: int = 0, work: int = 1) -> Cover:
    """Few pairs that cover every row.

    Parameters
    ----------
    problem : CoverProblem
    seed : int
        Of the searches that use chance.
    work : int
        Multiplies the limits, which count steps: the answer is the same on every machine.

    Returns
    -------
    Cover

    Examples
    --------
    >>> from itertools import combinations
    >>> from hubokit.reduction.cover_problem import cover_problem
    >>> cover = find_cover(cover_problem([np.array(list(combinations(range(6), 3)))], 6))
    >>> int(cover.chosen.sum()), cover.how
    (6, 'integer program, proven least')
    """
    forced, core = simplified(problem)
    rest, numbers = core.part(np.flatnonzero(~core.is_covered(core.given)))
    floor = greedy_cover(problem)
    base = problem.count(forced)
    greedy = problem.count(floor)
    if not len(rest.rows):
        return Cover(forced, "forced pair by pair, proven least", greedy, base)
    found, how, least = _search(rest, seed, work)
    chosen = forced.copy()
    chosen[numbers[found]] = True
    if problem.count(chosen) > greedy:
        return Cover(floor, "greedy", greedy, base + least)
    return Cover(chosen, how, greedy, base + least)


def simplified(problem: CoverProblem) -> tuple[Chosen, CoverProblem]:
    """Pairs that some least cover holds for certain, and the problem that is left.

    In a cubic row a pair that occurs nowhere else is no better than another pair of the row: it is left out while
    the row has another. A cubic row with one pair left forces that pair. In a quartic with a gadget of its own a
    split with a pair that occurs nowhere else is no better than the gadget; without other splits the gadget is
    forced.

    Returns
    -------
    forced : bool array, shape (p,)
        Given pairs included.
    core : CoverProblem
        The rows that are not covered yet, with the forced pairs given; some slots are left out.
    """
    chosen = problem.given.copy()
    rows = problem.rows
    while True:
        state = replace(problem, rows=rows, given=chosen)
        rows = rows[~state.is_covered(chosen)]
        degree = np.append(np.bincount(rows[rows >= 0], minlength=problem.pairs), [0, 0])
        held = np.append(chosen, [False, False])
        lonely = (rows >= 0) & (degree[rows] == 1) & ~held[rows]
        shared = (rows >= 0) & ~lonely
        cubic = rows[:, 3] == EMPTY
        drop = lonely & shared.any(axis=1, keepdims=True) & cubic[:, None]
        own = rows[:, 6] >= 0
        for split in (0, 2, 4):
            broken = own & (lonely[:, split] | lonely[:, split + 1])
            drop[:, split : split + 2] |= broken[:, None]
        kept = rows.copy()
        kept[drop] = EMPTY
        kept[drop & ~cubic[:, None]] = DROPPED
        left = (kept >= 0).sum(axis=1)
        take = np.where(cubic, (left == 1) | ~shared.any(axis=1), own & (left == 2))
        if take.any():
            chosen = chosen.copy()
            first = (kept[take] >= 0).argmax(axis=1)
            chosen[kept[take][np.arange(len(first)), first]] = True
        elif np.array_equal(kept, rows):
            return chosen, replace(problem, rows=kept, given=chosen)
        rows = kept


def greedy_cover(problem: CoverProblem, allowed: Chosen | None = None, seed: int | None = None) -> Chosen:
    """The greedy rule: again and again the pair that does most for the rows not yet covered.

    Parameters
    ----------
    problem : CoverProblem
    allowed : bool array, shape (p,), optional
        Choose among these alone; they must cover all rows.
    seed : int, optional
        Shuffles equal pairs; without it the pair numbered first is taken.
    """
    starts, slots = problem.incidence
    rank = np.arange(problem.pairs)
    if seed is not None:
        rank = np.random.default_rng(seed).permutation(problem.pairs)
    choices = np.ones(problem.pairs, bool) if allowed is None else allowed
    chosen: Chosen = kernel(greedy_loop, len(slots))(problem.rows, starts, slots, problem.given, choices, rank)
    return chosen


def pruned(problem: CoverProblem, chosen: Chosen) -> Chosen:
    """A full cover without the pairs that it can do without, the least used tried first."""
    starts, slots = problem.incidence
    order = np.argsort(np.diff(starts), kind="stable")
    order = order[chosen[order] & ~problem.given[order]]
    held = np.append(chosen, [False, False])
    kernel(prune_loop, len(slots))(problem.rows, starts, slots, held, order)
    return held[:-2]


def exchanged(problem: CoverProblem, chosen: Chosen, seed: int, steps: int) -> Chosen:
    """The smallest full cover that the weighted exchange meets from this one."""
    starts, slots = problem.incidence
    mean = max(1, len(slots) // max(1, problem.pairs))
    loop = kernel(exchange_loop, steps * SAMPLE * mean)
    best: Chosen = loop(problem.rows, starts, slots, problem.given, chosen, steps, SAMPLE, seed)
    return best


def exchange_steps(problem: CoverProblem, work: int) -> int:
    """How many steps of the exchange fit its limit."""
    mean = 1 + len(problem.incidence[1]) // max(1, problem.pairs)
    return min(EXCHANGE_STEPS * work, EXCHANGE_WORK * work // (SAMPLE * mean))


def _search(problem: CoverProblem, seed: int, work: int) -> tuple[Chosen, str, int]:
    """A full cover of a simplified problem, how it was found, and a lower bound of its cost."""
    best, how = pruned(problem, greedy_cover(problem)), "greedy"
    parts = components(problem)
    sizes = [program_work(problem, lines) for lines in parts]
    if max(sizes) <= PROGRAM_WORK * work:
        chosen, least = _by_program(problem, best, parts, sizes, work)
        if least == problem.count(chosen):
            return chosen, "integer program, proven least", least
        best, how = chosen, "integer program, stopped at its node limit"
    for within in sides(problem, seed):
        other = pruned(problem, greedy_cover(problem, within | problem.given))
        if problem.count(other) < problem.count(best):
            best, how = other, "pairs within two sides"
    start = problem.count(best)
    better = exchanged(problem, best, seed, exchange_steps(problem, work))
    if problem.count(better) < start:
        best, how = better, f"{how}, improved by exchange"
    if max(sizes) > PROGRAM_WORK * work:
        least = 0
        solvable = [i for i, size in enumerate(sizes) if size <= PROGRAM_WORK * work]
        if solvable:
            chosen, least = _by_program(
                problem, best, [parts[i] for i in solvable], [sizes[i] for i in solvable], work
            )
            if problem.count(chosen) < problem.count(best):
                best, how = chosen, f"{how}, small components by integer program"
    return best, how, least


def program_work(problem: CoverProblem, lines: NDArray[np.int64]) -> int:
    """Rows times squared mean degree of the pairs: what the integer program grows with; more for many quartics."""
    rows = problem.rows[lines]
    used = rows[:, :6][rows[:, :6] >= 0]
    used = used[~problem.given[used]]
    degree = len(used) / max(1, len(np.unique(used)))
    quartics = int((rows[:, 3] != EMPTY).sum())
    hard = quartics > QUARTIC_ROWS and degree > LOOSE_DEGREE
    return int(len(rows) * degree**2) * (1 + hard * quartics)


def _by_program(
    problem: CoverProblem, chosen: Chosen, parts: list[NDArray[np.int64]], sizes: list[int], work: int
) -> tuple[Chosen, int]:
    """Components solved by integer program, several small ones in one; the cover and its lower bound."""
    chosen = chosen.copy()
    least = 0
    batch: list[NDArray[np.int64]] = []
    load = 0
    for index, lines in enumerate(parts):
        batch.append(lines)
        load += sizes[index]
        if load < PROGRAM_WORK and index + 1 < len(parts):
            continue
        inner, numbers = problem.part(np.concatenate(batch))
        nodes = PROGRAM_NODES if inner.is_cubic.all() else max(1, QUARTIC_NODES // len(inner.rows))
        answer = least_cover(inner, chosen[numbers], nodes * work)
        chosen[numbers] = answer.chosen
        least += answer.bound
        batch, load = [], 0
    return chosen, least


def components(problem: CoverProblem) -> list[NDArray[np.int64]]:
    """Rows that hang together through pairs, one array of row numbers for each component."""
    label = np.arange(len(problem.rows))
    starts, slots = problem.incidence
    owner = np.repeat(np.arange(problem.pairs), np.diff(starts))
    joins = ~problem.given[owner]
    owner, row = owner[joins], slots[joins] // SLOTS
    while True:
        least = np.full(problem.pairs, len(label), np.int64)
        np.minimum.at(least, owner, label[row])
        fresh = label.copy()
        np.minimum.at(fresh, row, least[owner])
        fresh = fresh[fresh]
        if np.array_equal(fresh, label):
            break
        label = fresh
    order = np.argsort(label, kind="stable")
    cuts = np.flatnonzero(np.diff(label[order])) + 1
    return list(np.split(order, cuts))


def sides(problem: CoverProblem, seed: int) -> list[Chosen]:
    """Pairs within two sides that leave no quartic odd, for the best of several starts; none where it cannot pay.

    Returns
    -------
    list of bool arrays, shape (p,)
        Each covers every row.
    """
    if problem.pairs > 3 * len(problem.rows):
        return []
    moves = even_sides(problem)
    if len(moves) < 2 or len(moves) * problem.pairs > SIDE_WORK:
        return []
    crossing = moves[:, problem.operands[:, 0]] ^ moves[:, problem.operands[:, 1]]
    signs = crossing.astype(np.float32)
    cost = ~problem.given
    rng = np.random.default_rng(seed)
    best: Chosen | None = None
    for start in range(SIDE_STARTS):
        mask = rng.integers(0, 2, len(moves)).astype(bool) if start else np.zeros(len(moves), bool)
        within = crossing[mask].sum(axis=0) % 2 == 0
        while True:
            # A move turns the pairs it crosses round: those within leave, those across come in.
            gain = signs @ np.where(cost, np.where(within, 1, -1), 0).astype(np.float32)
            move = int(gain.argmax())
            if gain[move] <= 0:
                break
            within = within ^ crossing[move]
        # A row that has lost the pair within to simplification is no longer covered by any sides: it gets all it has.
        bare = problem.rows[~problem.is_covered(within)]
        within[bare[bare >= 0]] = True
        if best is None or (within & cost).sum() < (best & cost).sum():
            best = within
    return [] if best is None else [best]


def even_sides(problem: CoverProblem) -> NDArray[np.bool_]:
    """A basis of all sides that add up to an even number over every quartic row, shape (b, variables)."""
    quartic = problem.rows[~problem.is_cubic]
    used = np.unique(problem.operands[problem.operands >= 0])
    if len(quartic) * len(used) > SIDE_WORK:
        return np.zeros((0, problem.variables), bool)
    place = {int(variable): index for index, variable in enumerate(used)}
    pivots: dict[int, int] = {}
    usable = (quartic[:, 0:6:2] >= 0).argmax(axis=1) * 2
    each = np.arange(len(quartic))
    members = np.column_stack([problem.operands[quartic[each, usable]], problem.operands[quartic[each, usable + 1]]])
    for row in members.tolist():
        vector = 0
        for variable in row:
            vector |= 1 << place[variable]
        while vector:
            top = vector.bit_length() - 1
            if top not in pivots:
                pivots[top] = vector
                break
            vector ^= pivots[top]
    for top in sorted(pivots):  # reduced from the lowest pivot up, each row keeps one pivot
        for lower in pivots:
            if lower < top and pivots[top] >> lower & 1:
                pivots[top] ^= pivots[lower]
    free = [index for index in range(len(used)) if index not in pivots]
    basis = np.zeros((len(free), problem.variables), bool)
    for line, index in enumerate(free):
        basis[line, used[index]] = True
        for top, vector in pivots.items():
            if vector >> index & 1:
                basis[line, used[top]] = True
    return basis
