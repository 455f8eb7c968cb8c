"""Boolean terms that share a common part, reduced together: one auxiliary stands for the part in all of them.

Terms w_H prod_H x whose members all contain C, |C| = r, are replaced by the same terms with y in place of the members
of C. With S = sum of x over C, R_H = H without C, and gamma the auxiliary gap asked for,

    sum_H w_H prod_H x = min over y of  B prod_C x + y (A (r - S) - B) + sum_H w_H y prod_{R_H} x,
    B = max(0, U + gamma),   A = max(0, B - L + gamma),

where L <= sum_H w_H prod_{R_H} x <= U. Proof: at prod_C x = 1 the choice y = 1 leaves the terms and y = 0 costs
B >= U + gamma instead; at prod_C x = 0 the choice y = 0 gives 0, the value of the terms, and y = 1 costs at least
A - B + L >= gamma more. So y = prod_C x in every best setting, with auxiliary gap gamma; at gamma = 0 with ties.

For positive weights B = U = sum of the weights and L = 0: the theorem of Fix, Gruber, Boros and Zabih, in which
A y (r - S) takes the place of the monomial -B y prod_C x. Both sides being chosen, weights of both signs stand side
by side, and the tie-free variant (gamma > 0) is the same form. At gamma = 0 and negative weights alone B = 0: one
auxiliary for all of them.

What is left, B prod_C x and the shortened terms, is an ordinary Hamiltonian: more common parts are sought in it
(parts may hold earlier auxiliaries), then it is reduced in the ordinary ways. Reducing it keeps its energies at every
(x, y), so the minimum over all auxiliaries is the source's, and a wrong y still costs gamma. L and U are taken over
the terms that hold y with every other variable free. No part is longer than a function of guards may be (`MOST`), so
that a projection can prove each y by the members of its part, however many terms share it.

Cost: one auxiliary for each part, ceil(log2 r) - 1 more for B prod_C x where r > 2 and B > 0, and those of the
shortened terms. Spins have no such form: a product of spins is no monomial in the sign that A y (r - S) needs.

References
----------
Fix, A., Gruber, A., Boros, E., Zabih, R. 2011, "A graph cut algorithm for higher-order Markov random fields", ICCV.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cache

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_weights, common_resolution
from hubokit.model.terms import Part
from hubokit.reduction.assembly import fresh_labels
from hubokit.reduction.gadgets.table import families_for, stand_in

METHOD = "common-part"

MOST = 6
"""Longest common part."""

TERM_LIMIT = 512
"""Most terms of three and more members among which common parts are sought."""

PART_LIMIT = 2**13
"""Most common parts that are compared in one round."""

Terms = dict[tuple[int, ...], int]


@dataclass(frozen=True)
class Shared:
    """A model in which auxiliaries stand for common parts; its longer terms are still to be reduced.

    Parameters
    ----------
    model : Hamiltonian
        Over the source's variables, then the auxiliaries.
    auxiliaries : tuple of str
    parts : tuple of tuple of str
        The variables whose product each auxiliary is.
    served : mapping from locality to int
        How many terms of the source were shortened.
    """

    model: Hamiltonian
    auxiliaries: tuple[str, ...]
    parts: tuple[tuple[str, ...], ...]
    served: dict[int, int]


def shared_parts(H: Hamiltonian, gap: Fraction) -> Shared | str | None:
    """Replace common parts as long as that takes fewer auxiliaries.

    Parameters
    ----------
    H : Hamiltonian
    gap : Fraction
        Auxiliary gap asked for, energy units.

    Returns
    -------
    Shared, str or None
        None where no part saves an auxiliary; a sentence where a work limit is in the way.

    Examples
    --------
    >>> H = Hamiltonian({(*"abcd", other): 1 for other in "efgh"}, "boolean")
    >>> shared = shared_parts(H, Fraction(0))
    >>> shared.parts, str(shared.model)[:9], shared.model.locality
    ((('a', 'b', 'c', 'd'),), '12 y0 - 4', 4)
    """
    long = sum(len(block) for block in H.blocks if block.locality > 2)
    if H.domain != "boolean" or H.locality < 4 or long < 2:
        return None
    if long > TERM_LIMIT:
        return f"{long:,} terms to compare with each other; at most {TERM_LIMIT:,} are"
    unit = common_resolution([H.resolution, *([gap] if gap else [])])
    factor, step = int(H.resolution / unit), int(gap / unit)
    terms = {
        tuple(row): weight * factor
        for block in H.blocks
        for row, weight in zip(block.members.tolist(), block.weights.tolist(), strict=True)
    }
    untouched = set(terms)
    parts: list[tuple[int, ...]] = []
    while found := _round(terms, H.size + len(parts), step):
        for part, members in found:
            number = H.size + len(parts)
            parts.append(part)
            for old in members:
                new = (*(v for v in old if v not in part), number)
                terms[new] = terms.pop(old)
    if not parts:
        return None
    _penalise(terms, parts, H.size, step)
    labels = (*H.labels, *fresh_labels(H.labels, len(parts)))
    lost = [len(key) for key in untouched if key not in terms]
    return Shared(
        _as_model(H, terms, labels, unit),
        labels[H.size :],
        tuple(tuple(labels[v] for v in part) for part in parts),
        {locality: lost.count(locality) for locality in sorted(set(lost))},
    )


def _as_model(H: Hamiltonian, terms: Terms, labels: tuple[str, ...], unit: Fraction) -> Hamiltonian:
    parts: list[Part] = []
    for locality in sorted({len(key) for key in terms}):
        rows = [key for key in terms if len(key) == locality]
        parts.append((np.array(rows, np.int64), as_weights([terms[row] for row in rows])))
    return Hamiltonian.from_arrays(
        [members for members, _ in parts],
        [weights for _, weights in parts],
        H.domain,
        labels=labels,
        resolution=unit,
        constant=H.constant,
        convention=H.convention,
    )


@cache
def _alone(locality: int, sign: int) -> int:
    """Auxiliaries of a term by itself."""
    if locality < 3:
        return 0
    return min(
        stand_in(one.name, locality, sign, "one-to-one").auxiliaries
        for one in families_for("boolean", locality, sign)
    )


def _round(terms: Terms, size: int, step: int) -> list[tuple[tuple[int, ...], list[tuple[int, ...]]]]:
    """Common parts that save auxiliaries, greatest saving first, each term shortened at most once."""
    long = sorted(key for key in terms if len(key) > 2)
    if len(long) < 2:
        return []
    inside = np.zeros((len(long), size), bool)
    inside[np.repeat(np.arange(len(long)), [len(key) for key in long]), np.concatenate(long)] = True
    parts = _candidates(inside)
    # Counts of common members are below 2**24, so single precision is exact.
    common = parts.astype(np.float32) @ inside.T.astype(np.float32)
    lengths = parts.sum(axis=1)
    holds = common == lengths[:, None]
    negative = np.array([terms[key] < 0 for key in long])
    saving = np.zeros((MOST + 1, len(long)), np.int64)
    for r in range(2, MOST + 1):
        signs = [-1 if below else 1 for below in negative.tolist()]
        saving[r] = [
            _alone(len(key), sign) - _alone(len(key) - r + 1, sign) if len(key) >= r else 0
            for key, sign in zip(long, signs, strict=True)
        ]
    gains = (holds * saving[lengths]).sum(axis=1)
    free = np.ones(len(long), bool)
    found = []
    # One by one, because each choice takes terms away from the next; savings only fall while terms are taken.
    for place in np.argsort(-gains, kind="stable").tolist():
        r = int(lengths[place])
        useful = holds[place] & free & (saving[r] > 0)
        choices = [useful] if step else [useful, useful & negative]
        net, chosen = max(
            ((_net(saving[r], one, negative, r, step), one) for one in choices), key=lambda pair: pair[0]
        )
        if net > 0:
            free &= ~chosen
            part = tuple(np.flatnonzero(parts[place]).tolist())
            found.append((part, [long[i] for i in np.flatnonzero(chosen).tolist()]))
    return found


def _net(
    saving: npt.NDArray[np.int64], chosen: npt.NDArray[np.bool_], negative: npt.NDArray[np.bool_], r: int, step: int
) -> int:
    """Auxiliaries saved by one part, its own taken off."""
    returned = _alone(r, 1) if step or bool((chosen & ~negative).any()) else 0
    return int(saving[chosen].sum()) - 1 - returned


def _candidates(inside: npt.NDArray[np.bool_]) -> npt.NDArray[np.bool_]:
    """Intersections of two terms, cut to at most `MOST` members; distinct rows, the most frequent kept."""
    first, second = np.triu_indices(len(inside), 1)
    packed = np.packbits(inside, axis=1)
    both = packed[first] & packed[second]
    rows, counts = np.unique(both, axis=0, return_counts=True)
    rows = rows[np.argsort(-counts, kind="stable")[:PART_LIMIT]]
    found = np.unpackbits(rows, axis=1, count=inside.shape[1]).astype(bool)
    place = np.cumsum(found, axis=1)
    # A part of four pays for its length best (see the cost), so long ones are cut to that as well.
    cut = np.concatenate([found & (place <= MOST), found & (place <= 4)])
    cut = np.unique(cut, axis=0)
    return np.asarray(cut[cut.sum(axis=1) >= 2], dtype=bool)


def _penalise(terms: Terms, parts: Sequence[tuple[int, ...]], size: int, step: int) -> None:
    """Add what ties each auxiliary to its part, the last defined first: its terms are then all known."""
    for number in range(size + len(parts) - 1, size - 1, -1):
        part = parts[number - size]
        spans = [(weight, len(key) == 1) for key, weight in terms.items() if number in key]
        low = sum(weight for weight, always in spans if weight < 0 or always)
        high = sum(weight for weight, always in spans if weight > 0 or always)
        back = max(0, high + step)
        away = max(0, back - low + step)
        changes: Terms = {part: back, (number,): away * len(part) - back}
        changes |= {tuple(sorted((v, number))): -away for v in part}
        for key, value in changes.items():
            terms[key] = terms.get(key, 0) + value
            if not terms[key]:
                del terms[key]
