"""Any symmetric function of n booleans, f(S) with S = x1 + ... + xn, with at most floor(n/2) auxiliaries.

    f(S) = min over y of  f(0) + r S + p S(S-1)/2 + sum_j y_j (c_j - b_j S)

A bracket that is +h at S = i and -h' at S = i + 1 (h, h' > 0, b = h + h') takes h' from the second difference of the
sum at S = i and h at S = i + 1, and nothing elsewhere. So with second differences D(S) of f, S = 1 .. n-1, choose
p >= max D and spend the excess p - D(S) on brackets, two neighbouring positions each; a bracket at either end of the
range spends one. Every h and h' is at least the auxiliary gap asked for, and no bracket vanishes: no ties.

Two choices of p are tried: p = max D, where positions without excess need no bracket (the excess in between must
come in runs that brackets can cover), and p = max D + gap, where all n - 1 positions form one run. For a single
positive monomial the first gives Ishikawa's count.

Cost: at most floor(n/2) auxiliaries, n(n-1)/2 + n * auxiliaries couplers.

References
----------
Anthony, M., Boros, E., Crama, Y., Gruber, A. 2017, "Quadratic reformulations of nonlinear binary optimization
problems", Math. Program. 162, 115 (symmetric functions by piecewise linear forms). Tie-free brackets derived here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

SOURCE = "Anthony, Boros, Crama & Gruber 2017"


@dataclass(frozen=True)
class SymmetricForm:
    """The numbers of the formula above.

    Parameters
    ----------
    constant, field, coupler : Fraction
        f(0), r and p.
    brackets : tuple of (c, b)
        One for each auxiliary.
    """

    constant: Fraction
    field: Fraction
    coupler: Fraction
    brackets: tuple[tuple[Fraction, Fraction], ...]

    def value(self, count: int) -> Fraction:
        """The minimum over the auxiliaries at S = count."""
        below = sum((min(Fraction(0), c - b * count) for c, b in self.brackets), Fraction(0))
        return self.constant + self.field * count + self.coupler * (count * (count - 1) // 2) + below


def symmetric_form(values: Sequence[Fraction | int], gap: Fraction | int) -> SymmetricForm:
    """A quadratic form for a symmetric function.

    Parameters
    ----------
    values : sequence of Fraction, length n + 1
        f(0), ..., f(n); n at least 2.
    gap : Fraction
        Auxiliary gap asked for, not negative; 0 allows ties.

    Returns
    -------
    SymmetricForm
        The one with fewer auxiliaries; of two equal ones that with the smaller coupler.

    Examples
    --------
    >>> form = symmetric_form([0, 0, 0, 0, 1], 1)
    >>> len(form.brackets), [int(form.value(count)) for count in range(5)]
    (1, [0, 0, 0, 0, 1])
    """
    f = [Fraction(value) for value in values]
    gap = Fraction(gap)
    differences = [f[i + 1] - 2 * f[i] + f[i - 1] for i in range(1, len(f) - 1)]
    top = max(differences)
    best: SymmetricForm | None = None
    # The last option always has a cover: every position holds at least the gap, and both ends are open.
    for coupler in dict.fromkeys((top, top + gap)):
        spent = _cover([coupler - value for value in differences], gap)
        if spent is not None and (best is None or len(spent) < len(best.brackets)):
            first = sum((h_after for i, _, h_after in spent if i == 0), Fraction(0))
            brackets = tuple((h + (h + after) * i, h + after) for i, h, after in spent)
            best = SymmetricForm(f[0], f[1] - f[0] + first, coupler, brackets)
    assert best is not None
    return best


Spent = list[tuple[int, Fraction, Fraction]]
"""Brackets as (i, h, h'): +h at S = i, -h' at S = i + 1."""


def _cover(excess: list[Fraction], gap: Fraction) -> Spent | None:
    """Brackets that spend the excess of every position exactly, or None where they cannot."""
    spent: Spent = []
    last = len(excess)
    position = 1
    while position <= last:
        if excess[position - 1] == 0:
            position += 1
            continue
        end = position
        while end < last and excess[end] > 0:
            end += 1
        run = _cover_run([excess[i - 1] for i in range(position, end + 1)], position, last, gap)
        if run is None:
            return None
        spent += run
        position = end + 1
    return spent


def _cover_run(excess: list[Fraction], start: int, last: int, gap: Fraction) -> Spent | None:
    """Brackets for positions ``start``, ... that all have excess, by as few as can be."""
    if min(excess) < gap:
        return None
    length = len(excess)
    if length % 2 == 0:
        return [(start + k, excess[k + 1], excess[k]) for k in range(0, length, 2)]
    open_height = max(gap, max(excess))
    if start == 1:
        # The bracket at i = 0 spends h at position 1 only; its h' is free.
        rest = [(start + k, excess[k + 1], excess[k]) for k in range(1, length, 2)]
        return [(0, excess[0], open_height), *rest]
    if start + length - 1 == last:
        rest = [(start + k, excess[k + 1], excess[k]) for k in range(0, length - 1, 2)]
        return [*rest, (last, open_height, excess[-1])]
    if length == 1:
        return [(start, Fraction(0), excess[0])] if gap == 0 else None
    middle = next((k for k in range(1, length, 2) if excess[k] >= 2 * gap), None)
    if middle is None:
        return None
    # Two brackets meet in the middle position and share its excess.
    half = excess[middle] / 2
    left = [(start + k, excess[k + 1] if k + 1 < middle else half, excess[k]) for k in range(0, middle, 2)]
    right = [(start + k, excess[k + 1], half if k == middle else excess[k]) for k in range(middle, length - 1, 2)]
    return left + right
