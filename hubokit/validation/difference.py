"""Where two polynomials differ: their difference, its largest terms, its sign, and a state that shows it."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import format_fraction
from hubokit.validation.case import States

#: Terms of a difference that a verdict prints.
TERMS_SHOWN = 8
#: Widest product over whose settings a witness is looked for by listing them all.
LISTED_LOCALITY = 12


def largest_terms(difference: Hamiltonian, count: int = TERMS_SHOWN) -> tuple[str, ...]:
    """The terms of largest absolute coefficient as text, the constant first where there is one.

    Examples
    --------
    >>> largest_terms(Hamiltonian({("a", "b"): -1, ("c",): 5, (): 2}, "spin"))
    ('2', '+5 c', '-1 a b')
    """
    shown: list[tuple[float, int, int]] = []
    for number, block in enumerate(difference.blocks):
        size = np.abs(block.weights)
        if size.dtype == object:
            size = np.array([float(value) if value.bit_length() < 1000 else np.inf for value in size])
        order = np.argsort(-size, kind="stable")[:count]
        shown += [(-float(size[row]), number, int(row)) for row in order]
    texts = [format_fraction(difference.constant)] if difference.constant else []
    for _, number, row in sorted(shown)[: count - len(texts)]:
        block = difference.blocks[number]
        coefficient = int(block.weights[row]) * difference.resolution
        names = " ".join(difference.labels[i] for i in block.members[row])
        texts.append(f"{'+' if coefficient > 0 else ''}{format_fraction(coefficient)} {names}")
    left = len(difference) + bool(difference.constant) - len(texts)
    return (*texts, f"... ({left} more)") if left else tuple(texts)


def least_bound(difference: Hamiltonian) -> Fraction:
    """A lower bound on a polynomial: every term at its least.

    Examples
    --------
    >>> least_bound(Hamiltonian({("a", "b"): 3, ("a",): -1, (): 1}, "boolean"))
    Fraction(0, 1)
    """
    total = 0
    for block in difference.blocks:
        weights = block.weights if difference.domain == "spin" else np.minimum(block.weights, 0)
        total -= int(np.abs(weights).sum())
    return difference.constant + total * difference.resolution


def nonzero_state(polynomial: Hamiltonian) -> States:
    """A state where a polynomial that is not zero does not vanish, by algebra: no search over all states.

    Take a product T that no other product contains (spins) or that contains no other product (booleans), set
    every variable outside T to its first value in lift order: what is left is a polynomial in the variables
    of T whose coefficient of T itself is that of the term, hence not zero. Of the settings of T one is then
    not a root: for booleans all ones, for spins it is listed, or found by restricting one variable after the
    other.

    Returns
    -------
    int8 array, shape (n,)

    Examples
    --------
    >>> nonzero_state(Hamiltonian({("a", "b"): 1, ("a",): 1}, "spin", labels=["a", "b"])).tolist()
    [1, 1]
    """
    spin = polynomial.domain == "spin"
    state = np.full(polynomial.size, 1 if spin else 0, np.int8)
    if not polynomial.blocks or (not spin and polynomial.constant):
        return state
    if not spin:
        state[polynomial.blocks[0].members[0]] = 1
        return state
    members = polynomial.blocks[-1].members[0]
    if len(members) > LISTED_LOCALITY:
        return _restricted(polynomial, members.tolist())
    settings = 1 - 2 * ((np.arange(2 ** len(members))[:, None] >> np.arange(len(members))) & 1)
    chunk = max(1, 2**24 // max(polynomial.size, 1))
    for start in range(0, len(settings), chunk):
        part = settings[start : start + chunk]
        states = np.repeat(state[None, :], len(part), axis=0)
        states[:, members] = part
        values = polynomial.integer_energies(states)
        zero = -polynomial.constant / polynomial.resolution
        root = values == int(zero) if zero.denominator == 1 else np.zeros(len(values), bool)
        if not root.all():
            found: States = states[int(np.argmin(root))]
            return found
    raise AssertionError("a polynomial with a term vanishes nowhere")


def _restricted(polynomial: Hamiltonian, members: list[int]) -> States:
    """Successive restriction: of the two restrictions of a nonzero polynomial one at least is nonzero."""
    state = np.ones(polynomial.size, np.int8)
    inside = set(members)
    left = polynomial.substituted(
        {label: Fraction(1) for position, label in enumerate(polynomial.labels) if position not in inside}
    )
    for position in members:
        label = polynomial.labels[position]
        if label not in left.positions:
            continue
        tried = left.substituted({label: Fraction(1)})
        if tried == 0:
            tried, state[position] = left.substituted({label: Fraction(-1)}), -1
        left = tried
    return state
