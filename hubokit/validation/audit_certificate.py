"""The certificate of a projection, followed step by step.

A certificate lists, in proof order, how every auxiliary is minimised away. There are two ways, and `follow`
repeats them from the model alone:

*decided*: a few guard variables give the auxiliary's bit, because any other bit costs more, whatever else is
set ("guards", "weak guards"; "shared" for several auxiliaries at once);

*settled*: all terms that hold the auxiliaries of a cluster are replaced by their minimum, as a polynomial in
the variables that the cluster touches ("tables", "counting", "states").

F' is the model with what is done so far replaced; P is what remains of it at the end.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from fractions import Fraction
from itertools import product
from math import ceil, prod
from typing import Any

from hubokit.validation.audit_arithmetic import (
    MOST_BITS,
    Key,
    Poly,
    TooLarge,
    Work,
    add,
    interpolated,
    least,
    least_and_count,
    times,
    values_of,
)
from hubokit.validation.audit_models import rational

#: Auxiliaries of one cluster at most.
MOST_MEMBERS = 64


class Rejected(Exception):  # noqa: N818 - it is an answer, not a fault of the program
    """The certificate is wrong; the message says where."""


class Proof:
    """What has been followed so far; afterwards `gained` is P, without the model's constant."""

    def __init__(self, model: Poly, domain: str, variables: int, auxiliaries: Iterable[int]) -> None:
        self.left, self.domain, self.variables = dict(model), domain, variables  # left: F', but what is in gained
        self.auxiliaries = frozenset(auxiliaries)
        self.gained: Poly = {}
        self.rules: dict[int, tuple[Key, str]] = {}  # decided: guards, and the bit for each of their settings
        self.gone: set[int] = set()  # no longer in F': settled, or replaced by their rule
        self.multiplicity = 1
        self.uneven: list[Callable[[Mapping[int, int]], int]] = []  # further factors of m, by the bits
        self.unclear = False  # m is not known
        self.work = Work()
        self.holding: dict[int, set[Key]] = {y: set() for y in self.auxiliaries}
        for key in self.left:
            self._index(key)

    def _index(self, key: Key) -> None:
        for y in self.auxiliaries.intersection(key):
            self.holding[y].add(key)

    def touching(self, *members: int) -> Poly:
        """The terms of F' that hold any of some auxiliaries."""
        return {key: self.left[key] for y in members for key in self.holding[y] if key in self.left}

    def replace(self, old: Iterable[Key], new: Poly) -> None:
        """Take terms out of F' and put others in."""
        for key in old:
            del self.left[key]
        self.work.spend(len(new))
        for key, weight in new.items():
            add(self.left, key, weight)
            self._index(key)

    def fresh(self, listed: Any) -> Key:
        """The auxiliaries that a step speaks of: none twice, none dealt with before."""
        members = self.positions(listed)
        if not self.auxiliaries.issuperset(members) or self.gone.union(self.rules).intersection(members):
            raise Rejected("an auxiliary is none, or is dealt with twice")
        return members

    def positions(self, listed: Any) -> Key:
        """A list of different variables."""
        good = isinstance(listed, list) and all(type(one) is int and 0 <= one < self.variables for one in listed)
        if not good or len(set(listed)) < len(listed):
            raise Rejected("a list of variables is none, or names one twice")
        return tuple(listed)

    def open(self, positions: Iterable[int]) -> frozenset[int]:
        """Those variables that are auxiliaries without a rule."""
        return self.auxiliaries.intersection(positions).difference(self.rules)

    def bits(self, known: Mapping[int, int]) -> dict[int, int]:
        """Given bits, and those that rules give from them."""
        found = dict(known)
        for y, (guards, function) in self.rules.items():
            if y not in found and all(g in found for g in guards):
                found[y] = int(function[_number(found[g] for g in guards)])
        return found

    def multiplicity_at(self, originals: Mapping[int, int]) -> int:
        """m at a state of the originals, given as bits by position."""
        at = self.bits(originals)
        return self.multiplicity * prod(count(at) for count in self.uneven)


def _number(bits: Iterable[int]) -> int:
    return int("0" + "".join(map(str, bits)), 2)


def follow(
    certificate: Mapping[str, Any], model: Poly, domain: str, variables: int, auxiliaries: Sequence[int]
) -> Proof:
    """Repeat a certificate: the model's terms in units of its resolution, and the variables to minimise over.

    Raises
    ------
    Rejected
        A step does not hold.
    TooLarge
        A step, or the whole, is beyond this checker.
    """
    proof = Proof(model, domain, variables, auxiliaries)
    if "steps" not in certificate:  # left out for its size
        for members, touched in _clusters(proof):
            _settle(proof, members, [[(x, 1)] for x in touched])
    for number, step in enumerate(certificate.get("steps", ())):
        kind = step.get("step")
        if kind not in STEPS:
            raise TooLarge(f"a step of the kind {str(kind)[:20]!r}")
        try:
            STEPS[kind](proof, step)
        except Rejected as fault:
            raise Rejected(f"step {number} ({kind}): {fault}") from None
    if proof.auxiliaries.difference(proof.gone, proof.rules):
        raise Rejected("an auxiliary is not dealt with by any step")
    for key, value in proof.left.items():
        add(proof.gained, key, value)
    for y in reversed([one for one in proof.rules if one not in proof.gone]):
        proof.work.spend(len(proof.gained))
        proof.gained = _substituted(proof, proof.gained, y)
    return proof


def _substituted(proof: Proof, poly: Poly, y: int) -> Poly:
    """A polynomial with an auxiliary replaced by its rule."""
    guards, function = proof.rules[y]
    values = [values_of(proof.domain)[int(bit)] for bit in function]
    rule = interpolated(values, [[g] for g in guards], proof.domain, proof.work)
    found = {key: value for key, value in poly.items() if y not in key}
    held = {tuple(i for i in key if i != y): value for key, value in poly.items() if y in key}
    for key, value in times(held, rule, proof.domain).items():
        add(found, key, value)
    return found


def _decide(proof: Proof, step: Mapping[str, Any]) -> None:
    """Auxiliaries given by their guards.

    The field of y is F'(bit 1) - F'(bit 0), a sum of products; sigma = 1 - 2 (right bit). In the steps of guards,
    sigma * field, least over everything else product by product, must reach the margin. In a shared step the
    auxiliaries are right together: a wrong setting is a set of flips, the cost of each is sigma * field with the
    others right, less its share of what each other flip of the set could take off it.
    """
    members, kind = proof.fresh(step["auxiliaries"]), step["step"]
    together, eliminate = kind == "shared", bool(step.get("eliminate"))
    if kind == "weak guards":
        proof.unclear = eliminate = True
    margins = [rational(one) for one in step["slacks" if together else "margins"]]
    rules: dict[int, tuple[Key, str]] = {}
    for y, listed, function in zip(members, step["guards"], step["functions"], strict=True):
        guards = proof.positions(listed)
        if len(guards) > MOST_BITS - 4:
            raise TooLarge(f"{len(guards)} guards of one auxiliary")
        if (
            type(function) is not str
            or len(function) != 2 ** len(guards)
            or set(function) - {"0", "1"}
            or y in guards
        ):
            raise Rejected(f"the function of variable {y} does not fit its guards")
        if proof.gone.intersection(guards) or (rules.keys() & guards if eliminate else proof.open(guards)):
            raise Rejected(f"variable {y} is guarded by a variable that is not there, or not settled before it")
        rules[y] = (guards, function)
    shares = _shares(step["shares"], members) if together else {}
    for y, margin in zip(members, margins, strict=True):
        functions = list(_costs(proof, y, rules, together, shares))
        excess = least(functions, proof.work)
        weak = kind == "weak guards"
        if margin < 0 or excess < 0 or (0 in (margin, excess) and not weak):
            raise Rejected(f"the guards of variable {y} do not decide it")
        if (excess if together else ceil(excess)) < margin:
            raise Rejected(f"the bound of variable {y} is {excess}, not {margin}")
    proof.rules.update(rules)
    for y in members if eliminate else ():
        held = proof.touching(y)
        proof.replace(held, _substituted(proof, held, y))
        proof.gone.add(y)


def _shares(listed: Any, members: Key) -> dict[Any, Fraction]:
    """What end y of a pair (y, z) bears when their right bits are (b, c); where nothing is listed, one half."""
    found: dict[Any, Fraction] = {}
    for i, k, b, c, text in [] if listed == "equal" else listed:
        share = rational(text)
        if not 0 <= share <= 1:
            raise Rejected("a share is not between 0 and 1")
        y, z = members[i], members[k]
        found[y, z, b, c], found[z, y, c, b] = share, 1 - share
    return found


def _costs(
    proof: Proof, y: int, rules: Mapping[int, tuple[Key, str]], together: bool, shares: Mapping[Any, Fraction]
) -> Iterable[tuple[Key, list[Any]]]:
    """What flipping y away from its right bit costs at least, as functions of few bits each."""
    low, high = values_of(proof.domain)
    guards, function = rules[y]
    for held, coefficient in proof.touching(y).items():
        key = tuple(one for one in held if one != y)
        weight = coefficient * (high - low)
        partner = next((z for z in key if together and z in rules), None)
        if partner is not None and len(key) > 1:
            raise Rejected(f"variable {y} meets another of its step and a third in one product")
        if together and partner is None and proof.open(key):
            raise Rejected(f"variable {y} is coupled to a variable that is not settled")
        others = key if partner is None else rules[partner][0]
        scope = (*guards, *sorted(set(others).difference(guards)))
        if len(scope) > MOST_BITS:
            raise TooLarge(f"a bound over {len(scope)} variables at once")
        proof.work.spend(4 << len(scope))
        table = []
        for setting in product((0, 1), repeat=len(scope)):
            at = dict(zip(scope, setting, strict=True))
            bit = int(function[_number(setting[: len(guards)])])
            sigma = 1 - 2 * bit
            if partner is None:
                table.append(sigma * weight * prod(high if at[one] else low for one in key))
            else:
                right = int(rules[partner][1][_number(at[g] for g in others)])
                taken = min(0, sigma * (1 - 2 * right) * weight * (high - low))  # when both flip
                share = shares.get((y, partner, bit, right), Fraction(1, 2))
                table.append(sigma * weight * (high if right else low) + share * taken)
        if together:
            yield scope, table
        else:  # each product at its own least, for every setting of the guards
            run = 1 << (len(scope) - len(guards))
            yield guards, [min(table[start : start + run]) for start in range(0, len(table), run)]
    yield (), [0]


def _take_clusters(proof: Proof, step: Mapping[str, Any]) -> None:
    """Clusters of the listed shapes, which say their terms and minima, divided by a factor."""
    for number, factor, listed, touched in step["clusters"]:
        shape, members, columns = step["shapes"][number], proof.fresh(listed), proof.positions(touched)
        classes = shape.get("classes", [[j] for j in range(len(columns))])
        signs = shape.get("signs", [1] * len(columns))
        if sorted(j for one in classes for j in one) != list(range(len(columns))) or len(signs) != len(columns):
            raise Rejected("the classes do not part the columns")
        if any(sign not in ((1, -1) if proof.domain == "spin" else (1,)) for sign in signs):
            raise Rejected("a sign is neither 1 nor -1")
        groups = [[(columns[j], signs[j]) for j in one] for one in classes]
        expected: Poly = {}
        for y, field, row in zip(members, shape["field"], shape["coupling"], strict=True):
            add(expected, (y,), factor * field)
            for weight, group in zip(row, groups, strict=True):
                for x, sign in group:
                    add(expected, (y, x), factor * sign * weight)
        for i, k, weight in shape["between"]:
            add(expected, (members[i], members[k]), factor * weight)
        if expected != proof.touching(*members):
            raise Rejected(f"the model's terms at variable {members[:1]} are not those of the shape")
        _settle(proof, members, groups, (shape, factor))


def _take_states(proof: Proof, step: Mapping[str, Any]) -> None:
    """One cluster whose terms may also hold auxiliaries with rules."""
    groups = [[(x, 1)] for x in proof.positions(step["touched"])]
    _settle(proof, proof.fresh(step["auxiliaries"]), groups, (step, 1))


def _settle(
    proof: Proof,
    members: Key,
    groups: list[list[tuple[int, int]]],
    stated: tuple[Mapping[str, Any], Any] | None = None,
) -> None:
    """Put the minimum of a cluster's terms in their place.

    The minimum is written in the variables of the groups, (position, sign): those of a group are coupled alike but
    for the sign, so that the number of set bits in each group, turned round where the sign is -1, is enough. What is
    stated of the minimum (divided by a factor) and the multiplicity is compared.
    """
    sign_of = dict(one for group in groups for one in group)
    if prod(len(group) + 1 for group in groups) > 2**MOST_BITS or len(members) > MOST_MEMBERS:
        raise TooLarge(f"a cluster of {len(members)} auxiliaries over {len(sign_of)} variables")
    if proof.open(sign_of):
        raise Rejected("a cluster touches a variable that is not settled")
    held = proof.touching(*members)
    minima = _minima(proof, held, members, groups)
    lows, counts = ([pair[i] for pair in minima.values()] for i in (0, 1))
    if stated is not None:
        fields, factor = stated
        many = fields["multiplicity"]
        if [factor * low for low in fields["minimum"]] != lows:
            raise Rejected("a table of minima is wrong")
        if (many if isinstance(many, list) else [many] * len(counts)) != counts:
            raise Rejected("a table of multiplicities is wrong")
    proof.replace(held, {})
    proof.gone.update(members)
    poly = interpolated(lows, [[x for x, _ in group] for group in groups], proof.domain, proof.work)
    for key, weight in poly.items():
        add(proof.gained, key, weight * prod(sign_of[x] for x in key))
    if len(set(counts)) == 1:
        proof.multiplicity *= counts[0]
    else:
        proof.uneven.append(lambda at: minima[tuple(sum(at[x] ^ (s < 0) for x, s in group) for group in groups)][1])


def _minima(
    proof: Proof, held: Poly, members: Key, groups: list[list[tuple[int, int]]]
) -> dict[Key, tuple[Any, int]]:
    """Least value of a cluster's terms and how many settings reach it, by the numbers of set bits in each group."""
    low, high = values_of(proof.domain)
    step, slot = high - low, {y: i for i, y in enumerate(members)}  # a value is low + step * bit
    cost, constant = [0] * len(members), 0
    pairs: list[list[Any]] = [[0] * len(members) for _ in members]
    pulls: list[tuple[int, Key, Any]] = []
    for key, weight in held.items():
        inside = [slot[position] for position in key if position in slot]
        others = tuple(position for position in key if position not in slot)
        if len(inside) == 1:
            pulls.append((inside[0], others, weight))
        elif len(inside) == 2 and not others:
            i, k = inside
            pairs[i][k] = pairs[k][i] = weight * step**2
            cost[i] += weight * low * step
            cost[k] += weight * low * step
            constant += weight * low**2
        else:
            raise TooLarge("a cluster whose couplings depend on the state")
    found = {}
    for ks in product(*(range(len(group) + 1) for group in groups)):
        set_ = {x: j < k for group, k in zip(groups, ks, strict=True) for j, (x, _) in enumerate(group)}
        at = {x: int(set_[x] ^ (sign < 0)) for group in groups for x, sign in group}
        if any(position not in at for _, others, _ in pulls for position in others):
            at = proof.bits(at)
        fields, base = list(cost), constant
        proof.work.spend(len(pulls) + len(members))
        for i, others, weight in pulls:
            if not all(position in at for position in others):
                raise Rejected("a cluster leaves out a variable that it touches")
            pull = weight * prod(high if at[position] else low for position in others)
            fields[i] += pull * step
            base += pull * low
        least_, count = least_and_count(fields, pairs, proof.work)
        found[ks] = (base + least_, count)
    return found


def _clusters(proof: Proof) -> list[tuple[Key, Key]]:
    """Auxiliaries that are coupled to each other, and what they touch."""
    group: dict[int, list[int]] = {y: [y] for y in proof.auxiliaries}
    for key in proof.left:
        one, *more = [position for position in key if position in group] or [-1]
        for other in more:
            if group[one] is not group[other]:
                few, many = sorted((group[one], group[other]), key=len)
                many += few
                group.update((y, many) for y in few)
    found = []
    for own in {id(members): members for members in group.values()}.values():
        near = {position for key in proof.touching(*own) for position in key}
        found.append((tuple(sorted(own)), tuple(sorted(near.difference(own)))))
    return sorted(found)


STEPS: Mapping[str, Callable[[Proof, Mapping[str, Any]], None]] = {
    "guards": _decide,
    "weak guards": _decide,
    "shared": _decide,
    "tables": _take_clusters,
    "counting": _take_clusters,
    "states": _take_states,
}
