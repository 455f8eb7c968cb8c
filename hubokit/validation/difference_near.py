"""Whether two polynomials agree on all states within a radius of given centres, by algebra alone.

Written in the flips away from a centre (`hubokit.spectrum.recentring`), the part of degree at most r of a polynomial
is its value at every state within r flips, and the zero polynomial is the only one that vanishes at all of them. So a
difference is zero near a centre exactly when these coefficients are; where one is not, a smallest flip set with a
nonzero coefficient is a state that shows it: the coefficients of all its proper subsets are zero.
"""

from __future__ import annotations

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.states import from_bits, to_bits
from hubokit.spectrum.recentring import Trie, flip_coefficients, trie_of
from hubokit.validation.case import States
from hubokit.validation.scaling import Relation


def nonzero_near(polynomial: Hamiltonian, centres: States, radius: int) -> States | None:
    """A state within `radius` flips of a centre where a polynomial does not vanish; None where there is none.

    Parameters
    ----------
    polynomial : Hamiltonian
    centres : int8 array, shape (c, n)
        In label order.
    radius : int

    Returns
    -------
    int8 array, shape (n,), or None
        Of the first such centre, a state with fewest flips.

    Raises
    ------
    LimitError
        Too many terms to be written in the flips.

    Examples
    --------
    >>> D = Hamiltonian({("a", "b"): 1, ("a",): -1, ("b",): -1, (): 1}, "spin")    # 4 where a = b = -1
    >>> nonzero_near(D, np.array([[1, 1]], np.int8), 1) is None
    True
    >>> nonzero_near(D, np.array([[1, 1]], np.int8), 2).tolist()
    [-1, -1]
    """
    trie = trie_of(polynomial.size, polynomial.blocks, radius)
    # A coefficient of degree d carries a factor 2^d.
    kind = np.int64 if polynomial.weight_bound << trie.depth < 2**62 else object
    zero = -polynomial.constant / polynomial.resolution
    for centre in centres:
        values = flip_coefficients(trie, polynomial.blocks, centre, polynomial.domain, kind)
        if int(values[0]) != zero:
            here: States = centre
            return here
        # At radius 0 the single flips are in the trie all the same.
        found = np.flatnonzero(values[1:] != 0) if radius else np.zeros(0, np.int64)
        if len(found):
            bits = to_bits(centre, polynomial.domain)
            bits[_members(trie, int(found[0]) + 1)] ^= 1
            state: States = from_bits(bits, polynomial.domain)
            return state
    return None


def _members(trie: Trie, node: int) -> list[int]:
    members = []
    while node:
        members.append(int(trie.last[node]))
        node = int(np.flatnonzero((trie.begin <= node) & (node < trie.end))[0])
    return members


def relation_near(P: Hamiltonian, E: Hamiltonian, centres: States, radius: int) -> Relation | None:
    """The scale and shift for which P = scale * E + shift at all states within the radius; None where none fit.

    Examples
    --------
    >>> E = Hamiltonian({("a", "b"): 1, ("a",): 2}, "spin")
    >>> relation_near(3 * E + 1, E, np.array([[1, 1]], np.int8), 1)
    Relation(scale=Fraction(3, 1), shift=Fraction(1, 1), level=None)
    >>> relation_near(-1 * E, E, np.array([[1, 1]], np.int8), 1) is None
    True
    """
    first = centres[0]
    least, level = P.energy(first), E.energy(first)
    other = nonzero_near(E - level, centres, radius)
    if other is None:
        flat = nonzero_near(P - least, centres, radius) is None
        return Relation(type(level)(1), least - level, level) if flat else None
    scale = (P.energy(other) - least) / (E.energy(other) - level)
    if scale <= 0:
        return None
    shift = least - scale * level
    fits = nonzero_near((P - scale * E - shift).with_labels(E.labels), centres, radius) is None
    return Relation(scale, shift) if fits else None
