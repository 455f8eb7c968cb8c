"""Compiled inner loops of the Gray-code walk, nothing else: importing this file loads numba.

Every loop releases the interpreter lock and is cached on disk. A walk stops and resumes anywhere; its whole state
is in `cursor` (int64) and in the tables of `hubokit.spectrum.derivatives`:

    cursor[0]  t, the number of steps done, which is the number of the current block
    cursor[1]  least entry of the current vector
    cursor[2]  entry of the current block at which its scan resumes, -1 when the block is done

All loops stand in this one file: the cache on disk would not notice a change to what another file inlines. A walk
function returns 0 when block ``end - 1`` is done and 1 when the room for states is used up.
"""

from __future__ import annotations

from functools import partial
from typing import Any

import numpy as np
from numba import extending, njit, types

from hubokit.model.compiling import compiled

HIGHEST = 2**63 - 1
_INLINE: dict[str, Any] = {"nogil": True, "boundscheck": False, "forceinline": True}


def _trailing_zeros(typingctx, value):  # type: ignore[no-untyped-def]
    """Number of trailing zeros of a nonzero int64, one machine instruction."""

    def generate(context, builder, signature, args):  # type: ignore[no-untyped-def]
        return builder.cttz(args[0], context.get_constant(types.boolean, True))

    return types.int64(types.int64), generate


_lowest_bit: Any = extending.intrinsic(_trailing_zeros)
_loop = partial(compiled, nogil=True, boundscheck=False)


@_loop
def place(rows, row, column, fixed, value, slab, spin):  # type: ignore[no-untyped-def]
    """Add coefficients into zeroed rows once the fixed bits have the values of a slab."""
    kind = rows.dtype.type
    for m in range(row.shape[0]):
        if spin:
            common, odd = fixed[m] & slab, 0
            while common != 0:
                common &= common - 1
                odd ^= 1
            amount = -value[m] if odd else value[m]
        elif fixed[m] & ~slab:
            continue
        else:
            amount = value[m]
        rows[row[m], column[m]] = kind(rows[row[m], column[m]] + amount)


@_loop
def transform(rows, spin):  # type: ignore[no-untyped-def]
    """Coefficients to values, every row in place."""
    kind = rows.dtype.type
    for r in range(rows.shape[0]):
        x = rows[r]
        half = 1
        while half < x.shape[0]:
            for start in range(0, x.shape[0], 2 * half):
                a, b = x[start : start + half], x[start + half : start + 2 * half]
                if spin:
                    for i in range(half):
                        low, high = a[i], b[i]
                        a[i] = kind(low + high)
                        b[i] = kind(low - high)
                else:
                    for i in range(half):
                        b[i] = kind(b[i] + a[i])
            half *= 2


def _signed(plus: bool) -> tuple[Any, Any, Any]:
    """The three loops of a step, for the last table with sign +1 or -1. Each returns the least of the new
    energies."""

    @njit(**_INLINE)
    def add(flat, e, a, size):  # type: ignore[no-untyped-def]
        kind = flat.dtype.type
        least = kind(flat[e] + flat[a]) if plus else kind(flat[e] - flat[a])
        for i in range(size):
            x = kind(flat[e + i] + flat[a + i]) if plus else kind(flat[e + i] - flat[a + i])
            flat[e + i] = x
            least = min(least, x)
        return least

    @njit(**_INLINE)
    def add_through_one(flat, e, a, b, size):  # type: ignore[no-untyped-def]
        kind = flat.dtype.type
        least = kind(flat[e] + kind((flat[b] if plus else -flat[b]) - flat[a]))
        for i in range(size):
            y = kind(flat[b + i] - flat[a + i]) if plus else kind(-flat[b + i] - flat[a + i])
            flat[a + i] = y
            x = kind(flat[e + i] + y)
            flat[e + i] = x
            least = min(least, x)
        return least

    @njit(**_INLINE)
    def add_through_two(flat, e, a, b, c, size):  # type: ignore[no-untyped-def]
        kind = flat.dtype.type
        least = kind(flat[e] + kind(kind((flat[c] if plus else -flat[c]) - flat[b]) - flat[a]))
        for i in range(size):
            z = kind(flat[c + i] - flat[b + i]) if plus else kind(-flat[c + i] - flat[b + i])
            flat[b + i] = z
            y = kind(z - flat[a + i])
            flat[a + i] = y
            x = kind(flat[e + i] + y)
            flat[e + i] = x
            least = min(least, x)
        return least

    return add, add_through_one, add_through_two


_add, _add_through_one, _add_through_two = _signed(True)
_subtract, _subtract_through_one, _subtract_through_two = _signed(False)


@njit(**_INLINE)
def _renew(flat, a, b, sign, size):  # type: ignore[no-untyped-def]
    """a = sign * b - a."""
    kind = flat.dtype.type
    if sign > 0:
        for i in range(size):
            flat[a + i] = kind(flat[b + i] - flat[a + i])
    else:
        for i in range(size):
            flat[a + i] = kind(-flat[b + i] - flat[a + i])


@njit(**_INLINE)
def _negate(flat, a, size):  # type: ignore[no-untyped-def]
    kind = flat.dtype.type
    for i in range(size):
        flat[a + i] = kind(-flat[a + i])


@njit(**_INLINE)
def _advance(t, root, flat, size, row, child, number, sign, steady, chain, least):  # type: ignore[no-untyped-def]
    """Step t of the walk of one polynomial: its energies move on; the least entry of its vector is returned.

    The rows are addressed by unsigned offsets into `flat`: views would be reference-counted, dearer than the
    additions.
    """
    length, with_row = 0, 0
    node, rest = root, t
    while rest != 0:
        node = child[node, _lowest_bit(rest)]
        if node < 0:
            break
        chain[length] = node
        length += 1
        if row[node] >= 0:
            with_row = length
        rest &= rest - 1
    increment = np.int64(0)
    for place in range(length - 1, -1, -1):
        increment -= number[chain[place]]
        number[chain[place]] = increment
    number[root] += increment
    if with_row == 0:
        return least
    last = chain[with_row - 1]
    e, b = np.uint64(row[root]) * size, np.uint64(row[last]) * size
    if steady[last]:
        sign[last] = -sign[last]
    else:
        _negate(flat, b, size)
    factor = sign[last]
    while with_row > 3:
        a = np.uint64(row[chain[with_row - 2]]) * size
        _renew(flat, a, b, factor, size)
        b, factor = a, np.int64(1)
        with_row -= 1
    if with_row == 1:
        return np.int64(_add(flat, e, b, size) if factor > 0 else _subtract(flat, e, b, size))
    a = np.uint64(row[chain[0]]) * size
    if with_row == 2:
        if factor > 0:
            return np.int64(_add_through_one(flat, e, a, b, size))
        return np.int64(_subtract_through_one(flat, e, a, b, size))
    m = np.uint64(row[chain[1]]) * size
    if factor > 0:
        return np.int64(_add_through_two(flat, e, a, m, b, size))
    return np.int64(_subtract_through_two(flat, e, a, m, b, size))


@_loop
def walk_levels(  # type: ignore[no-untyped-def]
    cursor, end, base, rows, row, child, number, sign, steady, chain, energy, count, name, cut, tally, states, names
):
    """Keep the lowest distinct energies, count the states of all but the highest of them, and note states.

    energy (K,), count (K,): levels, ascending. name (K,): identity of a level in the notes. cut (K,): states above
    it are counted and not noted. tally: levels in use, next name, notes in use, ceiling (only energies below it
    count). states, names: the notes.
    """
    e, flat, size = rows[0], rows.ravel(), np.uint64(rows.shape[1])
    low_bits = _lowest_bit(np.int64(e.shape[0]))
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
        least = _advance(t, 0, flat, size, row, child, number, sign, steady, chain, least)
        if least + number[0] < min(tally[3], energy[most - 1] if tally[0] == most else HIGHEST):
            resume = 0


@_loop
def walk_candidates(  # type: ignore[no-untyped-def]
    cursor, end, base, rows, row, child, number, sign, steady, chain, ceiling, tally, states, energies
):
    """Note every state of energy at most `ceiling`, with its energy. tally[0]: notes in use."""
    e, flat, size = rows[0], rows.ravel(), np.uint64(rows.shape[1])
    low_bits = _lowest_bit(np.int64(e.shape[0]))
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
        least = _advance(t, 0, flat, size, row, child, number, sign, steady, chain, least)
        if least + number[0] <= ceiling:
            resume = 0


@_loop
def walk_counts(  # type: ignore[no-untyped-def]
    cursor, end, rows, row, child, number, sign, steady, chain, lowest, step, counts
):
    """Count every energy: counts (2, bins), energy ``lowest + step * bin``, step 1 or 2."""
    e, flat, size = rows[0], rows.ravel(), np.uint64(rows.shape[1])
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
        _advance(t, 0, flat, size, row, child, number, sign, steady, chain, np.int64(0))
        cursor[2] = 0


@_loop
def walk_energies(  # type: ignore[no-untyped-def]
    cursor, end, rows, row, child, number, sign, steady, chain, out
):
    """Write the energies of the next blocks: out (blocks, 2**L) int64."""
    e, flat, size = rows[0], rows.ravel(), np.uint64(rows.shape[1])
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
        _advance(t, 0, flat, size, row, child, number, sign, steady, chain, np.int64(0))
        cursor[2] = 0


@_loop
def _keep_within(kept, d, least, most):  # type: ignore[no-untyped-def]
    kind = kept.dtype.type
    for i in range(d.shape[0]):
        kept[i] = kind(kept[i] & (kind(least <= d[i]) & kind(d[i] <= most)))


@_loop
def _keep_low_flips(kept, e):  # type: ignore[no-untyped-def]
    """Every pair at distance `reach`, also those that differ in more than one bit: whole vectors, masked.

    The places are unsigned: a signed one might be negative and count from the end, and nothing would be vectorised.
    """
    kind, size, reach = kept.dtype.type, np.uint64(e.shape[0]), np.uint64(1)
    while reach < size:
        for i in range(size - reach):
            kept[i] = kind(kept[i] & (kind(e[i] <= e[i + reach]) | kind((i & reach) != 0)))
        for i in range(size - reach):
            kept[i + reach] = kind(kept[i + reach] & (kind(e[i + reach] <= e[i]) | kind((i & reach) != 0)))
        reach = np.uint64(reach + reach)


@_loop
def walk_minima(  # type: ignore[no-untyped-def]
    cursor, end, rows, row, child, number, sign, steady, chain, roots, watched, fixed, kept, lowest, highest, total
):
    """Count the states that no single flip lowers; total[0] grows.

    roots: the energies first, then one derivative for each bit that is not low. watched (len(roots) - 1,): its
    walked bit, or -1 with the bit's setting in `fixed`. kept (2**L,): room, of the type of the rows. lowest,
    highest: of that type.
    """
    kind = rows.dtype.type
    flat, size = rows.ravel(), np.uint64(rows.shape[1])
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
                least, most = (bound, highest) if one == 0 else (lowest, bound)
                if least > highest or most < lowest:
                    kept[:] = 0
                else:
                    _keep_within(kept, rows[row[root]], kind(max(least, lowest)), kind(min(most, highest)))
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
            _advance(t, roots[place], flat, size, row, child, number, sign, steady, chain, np.int64(0))
        cursor[2] = 0


@_loop
def bare_additions(e, a, repeats):  # type: ignore[no-untyped-def]
    """The machine's own limit, for benchmarks: vector additions in the cache and nothing else."""
    kind = e.dtype.type
    for _ in range(repeats):
        for i in range(e.shape[0]):
            e[i] = kind(e[i] + a[i])
