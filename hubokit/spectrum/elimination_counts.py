"""Exact numbers of ground states from an elimination: machine integers first, residues where those end.

The number of best completions of a bucket's separator is the product of what its messages say, summed over the values
without excess. As long as the product of the largest entries stays below 2**62 the tables hold the numbers
themselves. Buckets beyond that are swept once for each of several primes below 2**31, enough that their product
exceeds the proven bound, and the number follows by the Chinese remainder theorem. Whether there *is* a completion is
never read off a residue: every setting of a separator has one, because a minimum is attained.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cache, cached_property
from itertools import islice

import numpy as np
from numpy.typing import NDArray

from hubokit.spectrum.elimination_kernels import Table, lower_message, multiply_message, narrowed
from hubokit.spectrum.elimination_tables import Elimination

EXACT_BOUND = 2**62
NO_LEVEL = 2**62
"""Stands for 'no further level' where a gap is asked for; larger than any difference of two energies."""


@dataclass(frozen=True)
class Counts:
    """Numbers of best completions for every bucket of an elimination.

    Parameters
    ----------
    elimination : Elimination
    exact : tuple
        For each rank the int64 table over its separator, or None where residues are needed.
    bounds : tuple of int
        For each rank, a number that no entry of its table exceeds.
    children : tuple of tuple of int
        For each rank, the ranks whose messages it receives.
    """

    elimination: Elimination
    exact: tuple[Table | None, ...]
    bounds: tuple[int, ...]
    children: tuple[tuple[int, ...], ...]

    @property
    def roots(self) -> list[int]:
        """Ranks that send no message: one for each connected part."""
        return [rank for rank, separator in enumerate(self.elimination.order.separators) if not separator]

    @property
    def primes(self) -> tuple[int, ...]:
        """Primes whose product exceeds every bound; none when nothing needs them."""
        return primes_beyond(max((b for e, b in zip(self.exact, self.bounds, strict=True) if e is None), default=0))

    @cached_property
    def residues(self) -> dict[int, list[NDArray[np.uint32]]]:
        """For each rank without an exact table, its table modulo each of the primes."""
        kept: dict[int, list[NDArray[np.uint32]]] = {r: [] for r, e in enumerate(self.exact) if e is None}
        for prime in self.primes:
            for rank, table in self._modulo(prime).items():
                kept[rank].append(table.astype(np.uint32))
        return kept

    @cached_property
    def total(self) -> int:
        """Number of ground states."""
        plain = math.prod(int(self._exact(r)[0]) for r in self.roots if self.exact[r] is not None)
        wide = [rank for rank in self.roots if self.exact[rank] is None]
        if not wide:
            return plain
        remainders: list[list[int]] = [[] for _ in wide]
        for prime in self.primes:
            tables = self._modulo(prime, keep=set(wide))
            for found, rank in zip(remainders, wide, strict=True):
                found.append(int(tables[rank][0]))
        return plain * math.prod(from_residues(found, self.primes) for found in remainders)

    def at(self, rank: int, index: NDArray[np.int64]) -> NDArray[np.object_]:
        """Exact numbers at some entries of one table, as Python integers."""
        table = self.exact[rank]
        if table is not None:
            return table[index].astype(object)
        columns = [residues[index].tolist() for residues in self.residues[rank]]
        found = np.empty(len(index), object)
        found[:] = [from_residues(row, self.primes) for row in zip(*columns, strict=True)]
        return found

    def _exact(self, rank: int) -> Table:
        table = self.exact[rank]
        if table is None:
            raise AssertionError(f"bucket {rank} has residues only")
        return table

    def _modulo(self, prime: int, keep: set[int] | None = None) -> dict[int, Table]:
        """Tables of the wide buckets modulo a prime; only those in `keep` outlive their use."""
        tables: dict[int, Table] = {}
        for rank, exact in enumerate(self.exact):
            if exact is not None:
                continue
            scope = (rank, *self.elimination.order.separators[rank])
            product = np.ones(1 << len(scope), np.int64)
            for child in self.children[rank]:
                message = self.exact[child]
                message = tables[child] if message is None else message.astype(np.int64) % prime
                multiply_message(product, message, self.elimination.order.separators[child], scope)
                product %= prime
                if keep is not None and child not in keep:
                    tables.pop(child, None)
            tables[rank] = _over_best(product, self.elimination.differences[rank]) % prime
        return tables


def count_ground_states(elimination: Elimination) -> Counts:
    """Sweep the buckets once in machine integers, as far as proven bounds allow.

    Examples
    --------
    >>> import numpy as np
    >>> from hubokit.model.terms import Block
    >>> from hubokit.spectrum.elimination_order import elimination_order
    >>> from hubokit.spectrum.elimination_tables import Problem, eliminate
    >>> ring = Block(np.array([[0, 1], [0, 2], [1, 2]], np.int32), np.array([1, 1, 1]))
    >>> order = elimination_order(3, [ring], widest=22)
    >>> count_ground_states(eliminate(Problem("spin", 3, (ring,)), order)).total
    6
    """
    separators = elimination.order.separators
    children: list[list[int]] = [[] for _ in separators]
    exact: list[Table | None] = []
    bounds: list[int] = []
    for rank, separator in enumerate(separators):
        bound = 2 * math.prod(bounds[child] for child in children[rank])
        inputs = [(exact[child], separators[child]) for child in children[rank]]
        if bound < EXACT_BOUND:
            scope = (rank, *separator)
            product = np.ones(1 << len(scope), np.int64)
            for message, message_scope in inputs:
                if message is not None:
                    multiply_message(product, message.astype(np.int64, copy=False), message_scope, scope)
            table = _over_best(product, elimination.differences[rank])
            exact.append(narrowed(table))
            bounds.append(int(table.max()))
        else:
            exact.append(None)
            bounds.append(bound)
        if separator:
            children[separator[0]].append(rank)
    return Counts(elimination, tuple(exact), tuple(bounds), tuple(map(tuple, children)))


def _over_best(product: Table, difference: Table) -> Table:
    """Sum over the values without excess."""
    half = len(difference)
    summed = np.where(difference >= 0, product[:half], 0)
    summed += np.where(difference <= 0, product[half:], 0)
    return summed


def gap(elimination: Elimination) -> int | None:
    """Least strictly positive excess of any state: the gap in the problem's units; None when there is one level."""
    separators = elimination.order.separators
    wide = any(difference.dtype == object for difference in elimination.differences)
    kind = object if wide else np.int64
    none = max(NO_LEVEL, *(4 * int(np.abs(d).max()) for d in elimination.differences)) if wide else NO_LEVEL
    waiting: list[list[tuple[tuple[int, ...], Table]]] = [[] for _ in separators]
    least = none
    for rank, separator in enumerate(separators):
        table = np.full(2 << len(separator), none, dtype=kind)
        for scope, message in waiting[rank]:
            lower_message(table, message, scope, (rank, *separator))
        waiting[rank] = []
        difference = elimination.differences[rank].astype(kind, copy=False)
        first, second = table[: len(difference)], table[len(difference) :]
        after = np.where(difference > 0, first, np.where(difference < 0, second, np.minimum(first, second)))
        other = np.where(difference == 0, none, np.abs(difference))
        after = np.minimum(after, other)
        if separator:
            waiting[separator[0]].append((separator, after))
        else:
            least = min(least, int(after[0]))
    return None if least == none else least


def primes_beyond(bound: int) -> tuple[int, ...]:
    """The largest primes below 2**31, as many as make a product above `bound`.

    Examples
    --------
    >>> primes_beyond(2**40)
    (2147483647, 2147483629)
    """
    count = 0 if bound == 0 else bound.bit_length() // 30 + 1
    chosen = tuple(islice(_primes(), count))
    needed = next((k for k in range(count + 1) if math.prod(chosen[:k]) > bound), count)
    return chosen[:needed] if bound else ()


def _primes() -> Iterator[int]:
    """Primes downwards from 2**31 - 1."""
    return (number for number in range(2**31 - 1, 2, -2) if _is_prime(number))


def _is_prime(number: int) -> bool:
    """Miller's test with the bases 2, 3, 5 and 7, which is certain below 3.2e9 (Jaeschke 1993)."""
    odd, twos = number - 1, 0
    while odd % 2 == 0:
        odd, twos = odd // 2, twos + 1
    for base in (2, 3, 5, 7):
        power = pow(base, odd, number)
        if power in (1, number - 1):
            continue
        if not any(pow(power, 2**k, number) == number - 1 for k in range(1, twos)):
            return False
    return True


def from_residues(residues: Sequence[int], primes: Sequence[int]) -> int:
    """The number below the product of the primes that leaves these residues (Chinese remainder theorem).

    Examples
    --------
    >>> from_residues([2, 3], [3, 5])
    8
    """
    product, units = _units(tuple(primes))
    return sum(residue * unit for residue, unit in zip(residues, units, strict=True)) % product


@cache
def _units(primes: tuple[int, ...]) -> tuple[int, tuple[int, ...]]:
    """Product of the primes, and for each prime the number that is 1 modulo it and 0 modulo the others."""
    product = math.prod(primes)
    return product, tuple(product // p * pow(product // p, -1, p) for p in primes)
