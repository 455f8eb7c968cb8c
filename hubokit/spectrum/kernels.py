"""Compiled inner loops of the Gray-code walk, nothing else: importing this file loads numba.

Every loop releases the interpreter lock and is cached on disk. A walk stops and resumes anywhere; its whole state
is in `cursor` (int64) and in the tables of `hubokit.spectrum.derivatives`:

    cursor[0]  t, the number of steps done, which is the number of the current block
    cursor[1]  least entry of the current vector
    cursor[2]  entry of the current block at which its scan resumes, -1 when the block is done

A walk function returns 0 when block ``end - 1`` is done and 1 when the room for states is used up.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

HIGHEST = 2**63 - 1
_OPTIONS: dict[str, Any] = {"nogil": True, "cache": True, "boundscheck": False}


@njit(**_OPTIONS)
def _add(e, a):  # type: ignore[no-untyped-def]
    kind = e.dtype.type
    least = kind(e[0] + a[0])
    for i in range(e.shape[0]):
        x = kind(e[i] + a[i])
        e[i] = x
        least = min(least, x)
    return least


@njit(**_OPTIONS)
def _subtract(e, a):  # type: ignore[no-untyped-def]
    kind = e.dtype.type
    least = kind(e[0] - a[0])
    for i in range(e.shape[0]):
        x = kind(e[i] - a[i])
        e[i] = x
        least = min(least, x)
    return least


@njit(**_OPTIONS)
def _add_through_one(e, a, b):  # type: ignore[no-untyped-def]
    kind = e.dtype.type
    least = kind(e[0] + kind(b[0] - a[0]))
    for i in range(e.shape[0]):
        y = kind(b[i] - a[i])
        a[i] = y
        x = kind(e[i] + y)
        e[i] = x
        least = min(least, x)
    return least


@njit(**_OPTIONS)
def _subtract_through_one(e, a, b):  # type: ignore[no-untyped-def]
    kind = e.dtype.type
    least = kind(e[0] - kind(b[0] + a[0]))
    for i in range(e.shape[0]):
        y = kind(-b[i] - a[i])
        a[i] = y
        x = kind(e[i] + y)
        e[i] = x
        least = min(least, x)
    return least


@njit(**_OPTIONS)
def _add_through_two(e, a, b, c):  # type: ignore[no-untyped-def]
    kind = e.dtype.type
    least = kind(e[0] + kind(kind(c[0] - b[0]) - a[0]))
    for i in range(e.shape[0]):
        z = kind(c[i] - b[i])
        b[i] = z
        y = kind(z - a[i])
        a[i] = y
        x = kind(e[i] + y)
        e[i] = x
        least = min(least, x)
    return least


@njit(**_OPTIONS)
def _subtract_through_two(e, a, b, c):  # type: ignore[no-untyped-def]
    kind = e.dtype.type
    least = kind(e[0] + kind(kind(-c[0] - b[0]) - a[0]))
    for i in range(e.shape[0]):
        z = kind(-c[i] - b[i])
        b[i] = z
        y = kind(z - a[i])
        a[i] = y
        x = kind(e[i] + y)
        e[i] = x
        least = min(least, x)
    return least


@njit(**_OPTIONS)
def _renew(a, b, sign):  # type: ignore[no-untyped-def]
    """a = sign * b - a."""
    kind = a.dtype.type
    if sign > 0:
        for i in range(a.shape[0]):
            a[i] = kind(b[i] - a[i])
    else:
        for i in range(a.shape[0]):
            a[i] = kind(-b[i] - a[i])


@njit(**_OPTIONS)
def _negate(a):  # type: ignore[no-untyped-def]
    kind = a.dtype.type
    for i in range(a.shape[0]):
        a[i] = kind(-a[i])


@njit(**_OPTIONS)
def _advance(t, root, rows, row, child, number, sign, steady, chain, least):  # type: ignore[no-untyped-def]
    """Step t of the walk of one polynomial: its energies move on; the least entry of its vector is returned."""
    length, with_row = 0, 0
    node, rest, bit = root, t, 0
    while rest != 0:
        while rest & 1 == 0:
            rest >>= 1
            bit += 1
        node = child[node, bit]
        if node < 0:
            break
        chain[length] = node
        length += 1
        if row[node] >= 0:
            with_row = length
        rest >>= 1
        bit += 1
    increment = np.int64(0)
    for place in range(length - 1, -1, -1):
        increment -= number[chain[place]]
        number[chain[place]] = increment
    number[root] += increment
    if with_row == 0:
        return least
    last = chain[with_row - 1]
    if steady[last]:
        sign[last] = -sign[last]
    else:
        _negate(rows[row[last]])
    factor = sign[last]
    e, b = rows[row[root]], rows[row[last]]
    while with_row > 3:
        a = rows[row[chain[with_row - 2]]]
        _renew(a, b, factor)
        b, factor = a, np.int64(1)
        with_row -= 1
    if with_row == 1:
        return np.int64(_add(e, b) if factor > 0 else _subtract(e, b))
    a = rows[row[chain[0]]]
    if with_row == 2:
        return np.int64(_add_through_one(e, a, b) if factor > 0 else _subtract_through_one(e, a, b))
    m = rows[row[chain[1]]]
    return np.int64(_add_through_two(e, a, m, b) if factor > 0 else _subtract_through_two(e, a, m, b))


@njit(**_OPTIONS)
def walk_levels(  # type: ignore[no-untyped-def]
    cursor, end, base, rows, row, child, number, sign, steady, chain, energy, count, name, cut, tally, states, names
):
    """Keep the lowest distinct energies, count the states of all but the highest of them, and note states.

    energy (K,), count (K,): levels, ascending. name (K,): identity of a level in the notes. cut (K,): states above
    it are counted and not noted. tally: levels in use, next name, notes in use, ceiling (only energies below it
    count). states, names: the notes.
    """
    e = rows[row[0]]
    low_bits = 0
    while 1 << low_bits < e.shape[0]:
        low_bits += 1
    most = energy.shape[0]
    t, least, resume = cursor[0], cursor[1], cursor[2]
    while True:
        if resume >= 0:
            high = np.uint64(base) | np.uint64((t ^ (t >> 1)) << low_bits)
            shift = number[0]
            used = tally[0]
            bound = min(tally[3], energy[most - 1] if used == most else HIGHEST)
            for i in range(resume, e.shape[0]):
                x = shift + e[i]
                if x >= bound:
                    continue
                if tally[2] == states.shape[0]:
                    cursor[0], cursor[1], cursor[2] = t, least, i
                    return 1
                place = used - 1
                while place >= 0 and energy[place] > x:
                    place -= 1
                if place < 0 or energy[place] != x:
                    place += 1
                    used = min(used + 1, most)
                    for other in range(used - 1, place, -1):
                        energy[other] = energy[other - 1]
                        count[other] = count[other - 1]
                        name[other] = name[other - 1]
                        cut[other] = cut[other - 1]
                    energy[place], count[place], name[place], cut[place] = x, 0, tally[1], HIGHEST
                    tally[1] += 1
                    tally[0] = used
                    bound = min(tally[3], energy[most - 1] if used == most else HIGHEST)
                count[place] += 1
                if place < most - 1:
                    state = np.int64(high | np.uint64(i))
                    if state <= cut[place]:
                        states[tally[2]] = state
                        names[tally[2]] = name[place]
                        tally[2] += 1
            resume = -1
        if t + 1 >= end:
            cursor[0], cursor[1], cursor[2] = t, least, -1
            return 0
        t += 1
        least = _advance(t, 0, rows, row, child, number, sign, steady, chain, least)
        if least + number[0] < min(tally[3], energy[most - 1] if tally[0] == most else HIGHEST):
            resume = 0


@njit(**_OPTIONS)
def walk_candidates(  # type: ignore[no-untyped-def]
    cursor, end, base, rows, row, child, number, sign, steady, chain, ceiling, tally, states, energies
):
    """Note every state of energy at most `ceiling`, with its energy. tally[0]: notes in use."""
    e = rows[row[0]]
    low_bits = 0
    while 1 << low_bits < e.shape[0]:
        low_bits += 1
    t, least, resume = cursor[0], cursor[1], cursor[2]
    while True:
        if resume >= 0:
            high = np.uint64(base) | np.uint64((t ^ (t >> 1)) << low_bits)
            shift = number[0]
            for i in range(resume, e.shape[0]):
                x = shift + e[i]
                if x <= ceiling:
                    if tally[0] == states.shape[0]:
                        cursor[0], cursor[1], cursor[2] = t, least, i
                        return 1
                    states[tally[0]] = np.int64(high | np.uint64(i))
                    energies[tally[0]] = x
                    tally[0] += 1
            resume = -1
        if t + 1 >= end:
            cursor[0], cursor[1], cursor[2] = t, least, -1
            return 0
        t += 1
        least = _advance(t, 0, rows, row, child, number, sign, steady, chain, least)
        if least + number[0] <= ceiling:
            resume = 0


@njit(**_OPTIONS)
def walk_counts(  # type: ignore[no-untyped-def]
    cursor, end, rows, row, child, number, sign, steady, chain, lowest, step, counts
):
    """Count every energy: counts (2, bins), energy ``lowest + step * bin``, step 1 or 2."""
    e = rows[row[0]]
    half = step - 1
    t = cursor[0]
    while True:
        if cursor[2] >= 0:
            shift = number[0] - lowest
            # two histograms by turns: a count need not wait for the one before it
            for i in range(e.shape[0]):
                counts[i & 1, (shift + e[i]) >> half] += 1
        cursor[0], cursor[2] = t, -1
        if t + 1 >= end:
            return 0
        t += 1
        _advance(t, 0, rows, row, child, number, sign, steady, chain, np.int64(0))
        cursor[2] = 0


@njit(**_OPTIONS)
def walk_energies(  # type: ignore[no-untyped-def]
    cursor, end, rows, row, child, number, sign, steady, chain, out
):
    """Write the energies of the next blocks: out (blocks, 2**L) int64."""
    e = rows[row[0]]
    t = cursor[0]
    place = 0
    while True:
        if cursor[2] >= 0:
            shift = number[0]
            for i in range(e.shape[0]):
                out[place, i] = shift + e[i]
            place += 1
        cursor[0], cursor[2] = t, -1
        if t + 1 >= end:
            return 0
        t += 1
        _advance(t, 0, rows, row, child, number, sign, steady, chain, np.int64(0))
        cursor[2] = 0


@njit(**_OPTIONS)
def _keep_at_least(kept, d, bound):  # type: ignore[no-untyped-def]
    for i in range(d.shape[0]):
        kept[i] = kept[i] if d[i] >= bound else 0


@njit(**_OPTIONS)
def _keep_at_most(kept, d, bound):  # type: ignore[no-untyped-def]
    for i in range(d.shape[0]):
        kept[i] = kept[i] if d[i] <= bound else 0


@njit(**_OPTIONS)
def _keep_low_flips(kept, e):  # type: ignore[no-untyped-def]
    reach = 1
    while reach < e.shape[0]:
        for start in range(0, e.shape[0], 2 * reach):
            for i in range(start, start + reach):
                kept[i] = kept[i] if e[i] <= e[i + reach] else 0
                kept[i + reach] = kept[i + reach] if e[i + reach] <= e[i] else 0
        reach *= 2


@njit(**_OPTIONS)
def walk_minima(  # type: ignore[no-untyped-def]
    cursor, end, rows, row, child, number, sign, steady, chain, roots, watched, fixed, kept, lowest, highest, total
):
    """Count the states that no single flip lowers; total[0] grows.

    roots: the energies first, then one derivative for each bit that is not low. watched (len(roots) - 1,): its
    walked bit, or -1 with the bit's setting in `fixed`. kept (2**L,): room, of the type of the rows. lowest,
    highest: of that type.
    """
    kind = rows.dtype.type
    t = cursor[0]
    while True:
        if cursor[2] >= 0:
            kept[:] = 1
            gray = t ^ (t >> 1)
            for place in range(1, roots.shape[0]):
                root = roots[place]
                bit = watched[place - 1]
                one = fixed[place - 1] if bit < 0 else (gray >> bit) & 1
                # derivative d + number: not lowered when it is >= 0 (bit 0) or <= 0 (bit 1)
                bound = -number[root]
                d = rows[row[root]]
                if one == 0:
                    if bound > highest:
                        kept[:] = 0
                    elif bound > lowest:
                        _keep_at_least(kept, d, kind(bound))
                elif bound < lowest:
                    kept[:] = 0
                elif bound < highest:
                    _keep_at_most(kept, d, kind(bound))
            _keep_low_flips(kept, rows[row[roots[0]]])
            found = 0
            for i in range(kept.shape[0]):
                found += kept[i]
            total[0] += found
        cursor[0], cursor[2] = t, -1
        if t + 1 >= end:
            return 0
        t += 1
        for place in range(roots.shape[0]):
            _advance(t, roots[place], rows, row, child, number, sign, steady, chain, np.int64(0))
        cursor[2] = 0


@njit(**_OPTIONS)
def bare_additions(e, a, repeats):  # type: ignore[no-untyped-def]
    """The machine's own limit, for benchmarks: vector additions in the cache and nothing else."""
    kind = e.dtype.type
    for _ in range(repeats):
        for i in range(e.shape[0]):
            e[i] = kind(e[i] + a[i])
