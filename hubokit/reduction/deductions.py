"""Steps without auxiliaries that keep the ground states: excluded configurations, and deductions from them.

Fix a few variables Z and two settings z, z' of them. Where

    E(z, r) > E(z', r)     for every setting r of all other variables,

no ground state has Z = z: the configuration is *excluded*. Interval bounds show it exactly: group the terms that
touch Z by the product R of their other members; then E(z, r) - E(z', r) = sum_R d_R R, and its least value is at
least d_() + sum over R of min(0, d_R) for booleans, of -|d_R| for spins, in whole numbers.

The energy of states with Z = z may then be changed at will, as long as E'(z, r) > E'(z', r) = E(z', r) still holds
for some z': such states stay above the ground energy, all others are as they were, so the ground energy and the set
of ground states are kept. The energies of other states are not; no more may be claimed. With [z] the product of
(1 - x or x) or of (1 + z s), which is 0 unless Z = z, three uses lower the locality of a model:

- *value*: Z = {i}. Terms of three and more lose x_i, which becomes the value that is left.
- *deduction*: Z = {i, j}. In every minimum [z] = 0, an equation that writes x_i x_j by x_i and x_j; it is put into
  terms of three and more.
- *configuration*: Z the members of a cubic term c x_i x_j x_k (of a boolean quartic, z all ones). Adding a multiple
  of [z] removes the term.

What a change lowers too far is given back by M [z], with the least M >= 0 for which the same bound shows the
exclusion again; [z] has at most two members there.

Cost: no auxiliary; bounds for each variable, pair and term in turn until nothing changes.

References
----------
Ishikawa, H. 2014, "Higher-order clique reduction without auxiliary variables", CVPR (excludable local
configurations).
Tanburn, R., Okada, E., Dattani, N. 2015, "Reducing multi-qubit interactions in adiabatic quantum computation without
adding auxiliary qubits", arXiv:1508.04816 (deductions).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from itertools import combinations, product
from typing import Any

import numpy as np
import numpy.typing as npt

from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import INT64_BOUND, as_weights, format_fraction
from hubokit.model.terms import Part

STEP = "deduction"
"""Name of the step in a trail."""

WORK_LIMIT = 2**17
"""Most bounds that are computed; what was found until then stays."""

TERM_LIMIT = 2**14
"""Most terms of a model that is looked at."""

Members = tuple[int, ...]


@dataclass(frozen=True)
class Deduced:
    """A model with the same ground states.

    Parameters
    ----------
    model : Hamiltonian
        Over the same variables.
    found : tuple of mapping
        What was used, in order: JSON values for the trail.
    stopped : str
        Which work limit ended the search; empty where none did.
    """

    model: Hamiltonian
    found: tuple[dict[str, Any], ...]
    stopped: str = ""

    def record(self) -> dict[str, Any]:
        """Parameters for the trail."""
        said: dict[str, Any] = {"keeps": "ground-states", "excluded configurations": list(self.found)}
        return {**said, "stopped": self.stopped} if self.stopped else said


def deduced(H: Hamiltonian) -> Deduced | None:
    """Lower the locality of terms where excluded configurations allow it.

    Parameters
    ----------
    H : Hamiltonian

    Returns
    -------
    Deduced or None
        None where nothing was found.

    Examples
    --------
    >>> found = deduced(Hamiltonian({("a", "b", "c"): 1, ("a", "b"): 3, ("a",): -2, ("b",): -2}, "boolean"))
    >>> found.model.locality, found.found[0]["rule"], found.found[0]["excluded"]
    (2, 'deduction', [1, 1])
    """
    if H.locality < 3 or len(H) > TERM_LIMIT:
        return None
    search = _Search(H)
    search.run()
    if not search.found:
        return None
    return Deduced(search.model(), tuple(search.found), search.stopped)


@cache
def _settings(count: int, domain: str) -> list[tuple[int, ...]]:
    """All settings of a few variables, in lift order."""
    return list(product((1, -1) if domain == "spin" else (0, 1), repeat=count))


def indicator(members: Members, setting: tuple[int, ...], domain: str) -> dict[Members, int]:
    """A multiple of the polynomial that is 1 at that setting of the members and 0 elsewhere, with whole coefficients.

    Examples
    --------
    >>> indicator((0, 1), (1, 0), "boolean"), indicator((0,), (-1,), "spin")
    ({(0,): 1, (0, 1): -1}, {(): 1, (0,): -1})
    """
    found: dict[Members, int] = {(): 1}
    for member, value in zip(members, setting, strict=True):
        constant, slope = (1, value) if domain == "spin" else (1 - value, 2 * value - 1)
        after: dict[Members, int] = {}
        for item, weight in found.items():
            after[item] = after.get(item, 0) + weight * constant
            after[(*item, member)] = weight * slope
        found = {item: weight for item, weight in after.items() if weight}
    return found


class _Search:
    """A model taken apart, changed step by step."""

    def __init__(self, H: Hamiltonian) -> None:
        self.H = H
        self.terms: dict[Members, int] = {}
        self.touching: list[set[Members]] = [set() for _ in range(H.size)]
        self.constant = 0
        for block in H.blocks:
            for row, weight in zip(block.members.tolist(), block.weights.tolist(), strict=True):
                self.add(tuple(row), int(weight))
        self.found: list[dict[str, Any]] = []
        self.work = 0
        self.stopped = ""

    def add(self, members: Members, weight: int) -> None:
        if not members:
            self.constant += weight
            return
        total = self.terms.get(members, 0) + weight
        if total:
            self.terms[members] = total
        else:
            self.terms.pop(members, None)
        for member in members:
            (self.touching[member].add if total else self.touching[member].discard)(members)

    def model(self) -> Hamiltonian:
        H = self.H
        parts: list[Part] = []
        for locality in sorted({len(key) for key in self.terms}):
            rows = sorted(key for key in self.terms if len(key) == locality)
            parts.append((np.array(rows, np.int64), as_weights([self.terms[row] for row in rows])))
        return Hamiltonian.from_arrays(
            [members for members, _ in parts],
            [weights for _, weights in parts],
            H.domain,
            labels=H.labels,
            size=H.size,
            resolution=H.resolution,
            constant=H.constant + self.constant * H.resolution,
            convention=H.convention,
        )

    def run(self) -> None:
        """Rules in turn, until a whole pass changes nothing or the work is used up."""
        before = -1
        while before != len(self.found) and not self.stopped:
            before = len(self.found)
            for members in self.places():
                if self.work > WORK_LIMIT:
                    self.stopped = f"after {WORK_LIMIT:,} bounds"
                    return
                self.try_at(members)

    def places(self) -> Iterator[Members]:
        """Variables, pairs and terms of the longer terms, as they are now; a change makes some of them idle."""
        long = sorted(key for key in self.terms if len(key) > 2)
        yield from ((v,) for v in sorted({v for key in long for v in key}))
        yield from sorted({pair for key in long for pair in combinations(key, 2)})
        yield from (key for key in long if len(key) == 3 or (len(key) == 4 and self.H.domain == "boolean"))

    def bounds(self, members: Members) -> npt.NDArray[Any]:
        """Least value of E(z, r) - E(z', r) for all settings z (rows) and z' (columns), by intervals."""
        settings = np.array(_settings(len(members), self.H.domain), np.int64)
        rests: dict[Members, npt.NDArray[Any]] = {}
        touched = set().union(*(self.touching[v] for v in members))
        kind = object if sum(abs(self.terms[key]) for key in touched) * 4 >= INT64_BOUND else np.int64
        columns = dict(zip(members, settings.T, strict=True))
        for key in touched:
            values = np.full(len(settings), self.terms[key], kind)
            for member in key:
                if member in columns:
                    values = values * columns[member]
            rest = tuple(member for member in key if member not in columns)
            rests[rest] = rests[rest] + values if rest in rests else values
        total = np.zeros((len(settings), len(settings)), kind)
        self.work += len(touched)
        for rest, values in rests.items():
            difference = values[:, None] - values[None, :]
            if rest:
                difference = -abs(difference) if self.H.domain == "spin" else np.minimum(difference, 0)
            total = total + difference
        return total

    def try_at(self, members: Members) -> None:
        """Use an excluded configuration of these variables, if there is one and it lowers a term."""
        if len(members) < 3:
            useful = self.longer(members)
            if not useful:
                return
        elif members not in self.terms:
            return
        table = self.bounds(members)
        best = table.argmax(axis=1)
        margins = table[np.arange(len(table)), best]
        settings = _settings(len(members), self.H.domain)
        # The shorter the indicator, the fewer terms a change leaves; then the wider the margin, the less is raised.
        lengths = [len(indicator(members, setting, self.H.domain)) for setting in settings]
        excluded = [place for place in range(len(settings)) if margins[place] > 0]
        for place in sorted(excluded, key=lambda place: (lengths[place], -int(margins[place]))):
            said = {
                "rule": ("value", "deduction")[len(members) - 1] if len(members) < 3 else "configuration",
                "variables": [self.H.labels[v] for v in members],
                "excluded": list(settings[place]),
                "beaten by": list(settings[int(best[place])]),
                "at least": format_fraction(int(margins[place]) * self.H.resolution),
            }
            used = (
                self.remove(members, settings[place], int(margins[place]))
                if len(members) > 2
                else self.rewrite(members, settings[place])
            )
            if used:
                self.found.append({**said, **used})
                return

    def longer(self, members: Members) -> list[Members]:
        """Terms of three and more that hold all the members."""
        inside = set.intersection(*(self.touching[v] for v in members))
        return sorted(key for key in inside if len(key) > 2)

    def remove(self, members: Members, setting: tuple[int, ...], margin: int) -> dict[str, Any] | None:
        """Take a term away by a multiple of the indicator, where the configuration stays excluded."""
        ones = indicator(members, setting, self.H.domain)
        if len(members) == 4 and len(ones) > 1:
            return None
        # For spins the indicator is 2^3 at its setting.
        height = 2 ** len(members) if self.H.domain == "spin" else 1
        factor = -self.terms[members] * ones[members]
        if margin + factor * height <= 0:
            return None
        for item, weight in ones.items():
            self.add(item, factor * weight)
        return {"terms": 1, "raised by": format_fraction(factor * height * self.H.resolution)}

    def rewrite(self, members: Members, setting: tuple[int, ...]) -> dict[str, Any] | None:
        """Put what the members are in every minimum into the longer terms that hold them."""
        ones = indicator(members, setting, self.H.domain)
        sign = ones.pop(members)
        # The product of the members equals this wherever the configuration is not met.
        instead = {item: -sign * weight for item, weight in ones.items()}
        chosen = [key for key in self.longer(members) if len(key) == 3 or len(instead) < 2 or len(members) == 1]
        if not chosen:
            return None
        for key in chosen:
            weight = self.terms[key]
            rest = tuple(member for member in key if member not in members)
            self.add(key, -weight)
            for item, value in instead.items():
                self.add(tuple(sorted((*item, *rest))), weight * value)
        place = _settings(len(members), self.H.domain).index(setting)
        least = max(int(value) for value in np.delete(self.bounds(members)[place], place))
        height = 2 ** len(members) if self.H.domain == "spin" else 1
        penalty = max(0, -((least - 1) // height))
        for item, weight in {**ones, members: sign}.items():
            self.add(item, penalty * weight)
        return {"terms": len(chosen), "raised by": format_fraction(penalty * height * self.H.resolution)}
