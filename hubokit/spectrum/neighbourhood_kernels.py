"""Compiled walk over the flip sets around a centre, nothing else: importing this file loads numba.

The walk goes down the flip sets in lexicographic order, all flips but the last one by one (the *prefix*), the last
one as a vector: for a prefix A with energy e the vector V holds, for every later variable k, the change when k is
flipped too, so that ``e + V[k]`` are the energies of all states A + {k}. Lengthening the prefix by i adds the row of
second derivatives of i to V, and the few rows of higher derivatives in i and members of the prefix, which are found
in the trie of `hubokit.spectrum.recentring`.
"""

from __future__ import annotations

from functools import partial

import numpy as np

from hubokit.model.compiling import compiled

_loop = partial(compiled, nogil=True, boundscheck=False)


@_loop
def first_in_order(one, other, count, bits):  # type: ignore[no-untyped-def]
    """Whether the first flip set leads to a state before that of the second in lift order, for one centre."""
    for place in range(count):
        if one[place] != other[place]:
            if one[place] < other[place]:
                return bits[one[place]] == 1
            return bits[other[place]] == 0
    return False


@_loop
def keep_lowest(energy, flips, count, bits, energies, sets, filled):  # type: ignore[no-untyped-def]
    """Insert a flip set into a list by energy and lift order; a full list forgets its last. Returns the length."""
    limit = len(energies)
    place = filled
    while place > 0 and (
        energies[place - 1] > energy
        or (energies[place - 1] == energy and first_in_order(flips, sets[place - 1], count, bits))
    ):
        place -= 1
    if place >= limit:
        return filled
    filled = min(filled + 1, limit)
    for k in range(filled - 1, place, -1):
        energies[k] = energies[k - 1]
        sets[k, :count] = sets[k - 1, :count]
    energies[place] = energy
    sets[place, :count] = flips[:count]
    return filled


@_loop
def _add_row(target, base, row, start):  # type: ignore[no-untyped-def]
    """``target = base + row`` from `start` on; returns the least entry."""
    kind = target.dtype.type
    least = kind(base[start] + row[start])
    for k in range(start, len(target)):
        here = kind(base[k] + row[k])
        target[k] = here
        least = min(least, here)
    return least


@_loop
def _least(vector, start, stop):  # type: ignore[no-untyped-def]
    least = vector[start]
    for k in range(start, stop):
        least = min(least, vector[k])
    return least


@_loop
def _count_up_to(vector, start, stop, bar):  # type: ignore[no-untyped-def]
    kind = vector.dtype.type
    count = kind(0)
    for k in range(start, stop):
        count = kind(count + kind(vector[k] <= bar))
    return np.int64(count)


@_loop
def scan(  # type: ignore[no-untyped-def]
    vector, least, energy, start, stop, depth, flips, overlap, near, sizes, cuts, threshold, bits, kept, lowest,
    below, energies, sets, filled,
):  # fmt: skip
    """Take in the states prefix + {k}, start <= k < stop, all at distance depth + 1; `least` is the least of vector.

    A state is passed over when it lies within `cuts[b, distance]` of another centre b.
    """
    distance = depth + 1
    partly = False
    for b in range(len(sizes)):
        away = sizes[b] + distance - 2 * overlap[depth, b]
        if away <= cuts[b, distance]:
            return
        if away - 2 <= cuts[b, distance]:
            partly = True
    if not partly:
        kept[distance] += stop - start
        bottom = energy + np.int64(least)
        lowest[distance] = min(lowest[distance], bottom)
        if bottom > threshold:
            return
        room = np.iinfo(vector.dtype)
        bar = vector.dtype.type(min(max(threshold - energy, room.min), room.max))
        below[distance] += _count_up_to(vector, start, stop, bar)
        if filled[distance] == energies.shape[1] and bottom > energies[distance, energies.shape[1] - 1]:
            return
    for k in range(start, stop):
        if partly:
            skip = False
            for b in range(len(sizes)):
                away = sizes[b] + distance - 2 * (overlap[depth, b] + near[b, k])
                if away <= cuts[b, distance]:
                    skip = True
                    break
            if skip:
                continue
            kept[distance] += 1
        here = energy + np.int64(vector[k])
        lowest[distance] = min(lowest[distance], here)
        if here <= threshold:
            if partly:
                below[distance] += 1
            if filled[distance] < energies.shape[1] or here <= energies[distance, energies.shape[1] - 1]:
                flips[depth] = k
                filled[distance] = keep_lowest(
                    here, flips, distance, bits, energies[distance], sets[distance], filled[distance]
                )


@_loop
def walk(  # type: ignore[no-untyped-def]
    radius, begin_at, end_at, values, last, begin, end, dense, active_room, near, sizes, cuts, threshold, bits, kept,
    lowest, below, energies, sets, filled,
):  # fmt: skip
    """Visit all flip sets of size 1 to `radius` whose first flip is in [begin_at, end_at).

    Parameters
    ----------
    values, last, begin, end : arrays over the nodes of the trie
        Coefficients (int32 or int64) and structure.
    dense : array, shape (n, n) or (0, 0)
        Second derivatives as rows, or none: then the rows come from the trie.
    active_room : int
        Most subsets of a prefix with children in the trie.
    near, sizes, cuts : arrays (B, n), (B,), (B, radius + 1)
        Other centres: where they differ from this one, in how many places, and how close to them a state is skipped.
    kept, lowest, below, energies, sets, filled : arrays, first axis radius + 1
        Filled in: states counted, least energy, states at or below the threshold, and the lowest of those.
    """
    size = len(bits)
    vectors = np.empty((max(radius, 1), size), values.dtype)
    for k in range(size):
        vectors[0, k] = values[1 + k]
    energy = np.zeros(max(radius, 1), np.int64)
    energy[0] = values[0]
    flips = np.zeros(radius + 1, np.int32)
    overlap = np.zeros((max(radius, 1), len(sizes)), np.int64)
    following = np.zeros(radius + 1, np.int64)
    active = np.zeros(active_room, np.int64)
    actives = np.zeros(radius + 1, np.int64)
    if begin_at < end_at:
        least = _least(vectors[0], begin_at, end_at)
        scan(vectors[0], least, energy[0], begin_at, end_at, 0, flips, overlap, near, sizes, cuts, threshold, bits,
             kept, lowest, below, energies, sets, filled)  # fmt: skip
    if radius < 2:
        return
    following[0] = begin_at
    depth = 0
    while depth >= 0:
        stop = end_at if depth == 0 else size
        i = following[depth]
        if depth == radius - 1 or i >= min(stop, size - 1):
            depth -= 1
            continue
        following[depth] += 1
        flips[depth] = i
        above, here = vectors[depth], vectors[depth + 1]
        energy[depth + 1] = energy[depth] + np.int64(above[i])
        if len(dense) > 0:
            least = _add_row(here, above, dense[i], i + 1)
            settled = True
        else:
            settled = False
            here[i + 1 :] = above[i + 1 :]
            for child in range(begin[1 + i], end[1 + i]):
                here[last[child]] += values[child]
        count = actives[depth]
        for a in range(actives[depth]):
            low, high = begin[active[a]], end[active[a]]
            while low < high:
                middle = (low + high) // 2
                if last[middle] < i:
                    low = middle + 1
                else:
                    high = middle
            if low < end[active[a]] and last[low] == i and begin[low] < end[low]:
                settled = False
                active[count] = low
                count += 1
                for child in range(begin[low], end[low]):
                    here[last[child]] += values[child]
        if begin[1 + i] < end[1 + i]:
            active[count] = 1 + i
            count += 1
        depth += 1
        actives[depth] = count
        following[depth] = i + 1
        for b in range(len(sizes)):
            overlap[depth, b] = overlap[depth - 1, b] + near[b, i]
        if not settled:
            least = _least(here, i + 1, size)
        bottom = energy[depth] + np.int64(least)
        if bottom > threshold and len(sizes) == 0:  # by far the most frequent case, settled without a call
            kept[depth + 1] += size - i - 1
            lowest[depth + 1] = min(lowest[depth + 1], bottom)
            continue
        scan(here, least, energy[depth], i + 1, size, depth, flips, overlap, near, sizes, cuts, threshold, bits, kept,
             lowest, below, energies, sets, filled)  # fmt: skip
