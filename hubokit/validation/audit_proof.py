"""The state of a projection proof while the audit follows it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

from hubokit.validation.audit_polynomials import Key, Poly, TooLarge, add, add_product, interpolated, values_of

#: Elementary operations that one certificate may take.
MOST_WORK = 2**29
#: Guards of one auxiliary, bits of one table, and entries of any one list.
MOST_GUARDS, MOST_BITS, MOST_ENTRIES = 12, 20, 4_000_000


class Rejected(Exception):  # noqa: N818 - it is an answer, not a fault of the program
    """The certificate is wrong; the message says where."""


@dataclass
class Proof:
    """What has been followed so far.

    Parameters
    ----------
    domain : str
    left : dict
        F with the eliminated auxiliaries replaced and the tabulated clusters taken out.
    gained : dict
        What the tables put into P.
    """

    domain: str
    left: Poly
    auxiliaries: frozenset[int]
    gained: Poly = field(default_factory=dict)
    known: dict[int, tuple[Key, str]] = field(default_factory=dict)
    done: set[int] = field(default_factory=set)
    gone: set[int] = field(default_factory=set)
    uneven: list[tuple[Key, Callable[[Key], int]]] = field(default_factory=list)
    multiplicity: int = 1
    unclear: bool = False
    work: int = 0

    def __post_init__(self) -> None:
        self.holding: dict[int, set[Key]] = {position: set() for position in self.auxiliaries}
        for key in self.left:
            self._index(key)

    def _index(self, key: Key) -> None:
        for position in key:
            if position in self.holding:
                self.holding[position].add(key)

    def touching(self, position: int) -> Poly:
        """The terms of F' that hold a variable."""
        return {key: self.left[key] for key in self.holding[position] if key in self.left}

    def spend(self, operations: int) -> None:
        """Count work and stop beyond the limit."""
        self.work += operations
        if self.work > MOST_WORK:
            raise TooLarge(f"a certificate that takes more than {MOST_WORK:,} operations")

    def fresh(self, members: Sequence[int]) -> None:
        """Every auxiliary is settled once."""
        for position in members:
            if position not in self.auxiliaries or position in self.known or position in self.done:
                raise Rejected(f"variable {position} is no auxiliary or is settled twice")
        if len(set(members)) < len(members):
            raise Rejected("an auxiliary is settled twice in one step")

    def settled(self, positions: Sequence[int]) -> bool:
        """Whether variables are originals or have a rule."""
        return all(position not in self.auxiliaries or position in self.known for position in positions)

    def decided(self, bits: dict[int, int]) -> dict[int, int]:
        """Bits of originals, and of every known auxiliary whose guards they reach."""
        for position, (guards, function) in self.known.items():
            if position not in self.gone and all(g in bits for g in guards):
                bits[position] = int(function[binary(tuple(bits[g] for g in guards))])
        return bits

    def eliminate(self, position: int, by: Poly) -> None:
        """Replace an auxiliary in F' by the polynomial of its function."""
        old = self.touching(position)
        for key in old:
            del self.left[key]
        for key, weight in old.items():
            fresh: Poly = {}
            rest = tuple(other for other in key if other != position)
            add_product(fresh, {rest: weight}, by, self.domain)
            self.spend(len(fresh))
            for one, value in fresh.items():
                add(self.left, one, value)
                self._index(one)


def positions_in(listed: Any, variables: int) -> list[int]:
    if not isinstance(listed, list) or len(listed) > MOST_ENTRIES:
        raise Rejected("a list of variables is missing or too long")
    for one in listed:
        if type(one) is not int or not 0 <= one < variables:
            raise Rejected(f"{one!r} is no position of a variable")
    return listed


def function_of(function: str, guards: Key, domain: str) -> Poly:
    low, high = values_of(domain)
    return interpolated([high if bit == "1" else low for bit in function], guards, domain)


def binary(bits: Key) -> int:
    return int("0" + "".join(map(str, bits)), 2)
