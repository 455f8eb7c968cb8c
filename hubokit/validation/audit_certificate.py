"""The certificate of a projection, followed step by step in plain integers.

A certificate lists, in proof order, how every auxiliary is minimised away: decided by a few *guard*
variables whatever the others are, decided together by shared bounds, or tabulated with its cluster. `follow`
repeats each step from the model alone and returns P and what is known of the multiplicity, or says which
step is wrong (`Rejected`), or that a step is beyond what this checker re-checks (`TooLarge`).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import combinations, product
from math import comb
from typing import Any

from hubokit.validation.audit_polynomials import (
    Key,
    Poly,
    TooLarge,
    add,
    add_product,
    interpolated,
    least,
    settings,
    substituted,
    values_of,
)
from hubokit.validation.audit_polynomials import (
    field as field_of,
)

#: Elementary operations that one certificate may take.
MOST_WORK = 2**25
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


def multiplicity_at(proof: Proof, bits: Mapping[int, int]) -> int:
    """m at a state of the originals, given as bits by position."""
    at = dict(bits)
    for position, (guards, function) in proof.known.items():
        if position not in proof.gone:
            at[position] = int(function[_binary(tuple(at[g] for g in guards))])
    total = proof.multiplicity
    for touched, count in proof.uneven:
        total *= count(tuple(at[position] for position in touched))
    return total


def follow(certificate: Mapping[str, Any], model: Poly, domain: str, variables: int) -> Proof:
    """Repeat a certificate; afterwards `Proof.gained` is P over the originals (without the model's constant).

    Parameters
    ----------
    certificate : mapping
    model : dict
        The model's terms in units of its resolution, without its constant.
    variables : int
        Number of variables of the model.

    Raises
    ------
    Rejected
        A step does not hold.
    TooLarge
        A step, or the whole, is beyond this checker.
    """
    if "steps" not in certificate:
        raise TooLarge(f"a certificate of {certificate.get('entries', 'many')} entries, which the verdict leaves out")
    auxiliaries = _positions(certificate["auxiliaries"], variables)
    proof = Proof(domain, dict(model), frozenset(auxiliaries))
    for number, step in enumerate(certificate["steps"]):
        kind = step.get("step")
        if kind not in STEPS:
            raise TooLarge(f"a step of the kind {kind!r}")
        try:
            STEPS[kind](proof, step, variables)
        except Rejected as fault:
            raise Rejected(f"step {number} ({kind}): {fault}") from None
    missing = proof.auxiliaries - set(proof.known) - proof.done
    if missing:
        raise Rejected(f"{len(missing)} auxiliaries are not settled by any step")
    _close(proof)
    return proof


def _close(proof: Proof) -> None:
    """P = what is left of F' + what the tables gave, with the known auxiliaries put in, last first."""
    P: Poly = dict(proof.left)
    for key, value in proof.gained.items():
        add(P, key, value)
    for position in reversed([one for one in proof.known if one not in proof.gone]):
        guards, function = proof.known[position]
        proof.spend(len(P))
        P = substituted(P, position, _function(function, guards, proof.domain), proof.domain)
    proof.gained = P


def _positions(listed: Any, variables: int) -> list[int]:
    if not isinstance(listed, list) or len(listed) > MOST_ENTRIES:
        raise Rejected("a list of variables is missing or too long")
    for one in listed:
        if type(one) is not int or not 0 <= one < variables:
            raise Rejected(f"{one!r} is no position of a variable")
    return listed


def _function(function: str, guards: Key, domain: str) -> Poly:
    low, high = values_of(domain)
    return interpolated([high if bit == "1" else low for bit in function], guards, domain)


def _rules(proof: Proof, step: Mapping[str, Any], variables: int) -> list[tuple[int, Key, str]]:
    """Auxiliary, guards and function of a step that decides auxiliaries."""
    members = _positions(step["auxiliaries"], variables)
    proof.fresh(members)
    if len(step["guards"]) != len(members) or len(step["functions"]) != len(members):
        raise Rejected("guards and functions do not match the auxiliaries")
    rules = []
    for y, guards, function in zip(members, step["guards"], step["functions"], strict=True):
        guards = tuple(_positions(guards, variables))
        if len(guards) > MOST_GUARDS:
            raise TooLarge(f"{len(guards)} guards of one auxiliary")
        bad = len(function) != 2 ** len(guards) or set(function) - {"0", "1"} or len(set(guards)) < len(guards)
        if bad or y in guards:
            raise Rejected(f"the function of variable {y} does not fit its guards")
        rules.append((y, guards, function))
    return rules


def _guards(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    eliminate = step["eliminate"]
    rules = _rules(proof, step, variables)
    margins = step["margins"]
    if len(margins) != len(rules):
        raise Rejected("margins do not match the auxiliaries")
    for (y, guards, function), margin in zip(rules, margins, strict=True):
        if type(margin) is not int or margin <= 0:
            raise Rejected(f"the margin of variable {y} is not positive")
        early = {other for other, _, _ in rules[: [one for one, _, _ in rules].index(y)]} if eliminate else set()
        if proof.gone & set(guards) or proof.done & set(guards) or early & set(guards):
            raise Rejected(f"variable {y} is guarded by a variable that is gone")
        if not eliminate and not proof.settled(guards):
            raise Rejected(f"variable {y} is guarded by a variable that is not settled before it")
        touching = field_of(proof.touching(y), y, proof.domain)
        proof.spend(len(touching) << len(guards))
        for setting, decided in zip(settings(len(guards)), function, strict=True):
            low, high = _interval(touching, dict(zip(guards, setting, strict=True)), proof.domain)
            if (decided == "1" and high > -margin) or (decided == "0" and low < margin):
                raise Rejected(f"the guards of variable {y} do not decide it by {margin} at {setting}")
    for y, guards, function in rules:
        proof.known[y] = (guards, function)
        if eliminate:
            proof.eliminate(y, _function(function, guards, proof.domain))
            proof.gone.add(y)


def _interval(poly: Poly, fixed: Mapping[int, int], domain: str) -> tuple[Any, Any]:
    """Least and greatest value, each product that is not fixed at its own extreme."""
    values = values_of(domain)
    low = high = 0
    for key, weight in poly.items():
        free = False
        for position in key:
            if position in fixed:
                weight *= values[fixed[position]]
            else:
                free = True
        if not free:
            low, high = low + weight, high + weight
        elif domain == "spin":
            low, high = low - abs(weight), high + abs(weight)
        else:
            low, high = low + min(0, weight), high + max(0, weight)
    return low, high


def _shared(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    rules = _rules(proof, step, variables)
    members = {y: number for number, (y, _, _) in enumerate(rules)}
    for y, guards, _ in rules:
        if not proof.settled(guards):
            raise Rejected(f"variable {y} is guarded by a variable that is not settled before it")
    shares: dict[tuple[int, int, int, int], Fraction] = {}
    if step["shares"] != "equal":
        for i, k, bit_i, bit_k, text in step["shares"]:
            share = Fraction(text)
            if not 0 <= share <= 1:
                raise Rejected("a share is not between 0 and 1")
            shares[i, k, bit_i, bit_k], shares[k, i, bit_k, bit_i] = share, 1 - share
    per_bit = -2 if proof.domain == "spin" else 1
    for number, (y, guards, function) in enumerate(rules):
        slack = Fraction(step["slacks"][number])
        if slack <= 0:
            raise Rejected(f"the slack of variable {y} is not positive")
        functions: list[tuple[Key, list[Any]]] = []
        right = {setting: int(bit) for setting, bit in zip(settings(len(guards)), function, strict=True)}
        for key, weight in field_of(proof.touching(y), y, proof.domain).items():
            partner = [members[other] for other in key if other in members]
            if len(partner) > 1 or (partner and len(key) > 1):
                raise Rejected(f"variable {y} meets two others of its step in one product")
            if not partner and not proof.settled(key):
                raise Rejected(f"variable {y} is coupled to a variable that is not settled")
            other = rules[partner[0]] if partner else None
            functions.append(_share(proof, (guards, right), key, weight, other, (number, partner), shares, per_bit))
        proof.spend(sum(len(table) for _, table in functions))
        excess = least(functions) if functions else 0
        if excess < slack:
            raise Rejected(f"the shared bound of variable {y} is {excess}, not {slack}")
    for y, guards, function in rules:
        proof.known[y] = (guards, function)


def _share(
    proof: Proof,
    own: tuple[Key, Mapping[tuple[int, ...], int]],
    key: Key,
    weight: int,
    other: tuple[int, Key, str] | None,
    pair: tuple[int, list[int]],
    shares: Mapping[tuple[int, int, int, int], Fraction],
    per_bit: int,
) -> tuple[Key, list[Any]]:
    """sigma times one product of a field, less its share of the cost when the product holds another of the step."""
    guards, right = own
    values = values_of(proof.domain)
    scope = tuple(sorted({*guards, *(other[1] if other else key)}))
    if len(scope) > MOST_GUARDS:
        raise TooLarge(f"a shared bound over {len(scope)} variables at once")
    rule = {} if other is None else dict(zip(settings(len(other[1])), other[2], strict=True))
    table = []
    for setting in settings(len(scope)):
        at = dict(zip(scope, setting, strict=True))
        bit = right[tuple(at[g] for g in guards)]
        sigma = 1 - 2 * bit
        if other is None:
            value: Any = sigma * weight
            for position in key:
                value *= values[at[position]]
            table.append(value)
            continue
        partner = int(rule[tuple(at[g] for g in other[1])])
        value = sigma * weight * values[partner]
        cross = weight * per_bit * sigma * (1 - 2 * partner)
        share = shares.get((pair[0], pair[1][0], bit, partner), Fraction(1, 2))
        table.append(value - share * max(0, -cross))
    return scope, table


def _clusters(proof: Proof, step: Mapping[str, Any], variables: int) -> list[tuple[Mapping[str, Any], int, Key, Key]]:
    found = []
    for shape, factor, members, touched in step["clusters"]:
        if type(shape) is not int or not 0 <= shape < len(step["shapes"]) or type(factor) is not int or factor <= 0:
            raise Rejected("a cluster names no shape or has no positive factor")
        members, touched = _positions(members, variables), _positions(touched, variables)
        proof.fresh(members)
        if not proof.settled(touched) or set(touched) & set(members) or len(set(touched)) < len(touched):
            raise Rejected("a cluster touches a variable that is not settled")
        found.append((shape, factor, tuple(members), tuple(touched)))
        proof.done.update(members)
    return found


def _take(proof: Proof, members: Key, expected: Poly) -> None:
    """The terms of F' that hold a cluster's auxiliaries are the expected ones; take them out."""
    held: Poly = {}
    for y in members:
        held |= proof.touching(y)
    if held != {key: weight for key, weight in expected.items() if weight}:
        raise Rejected(f"the model's terms at variable {members[0]} are not those of the shape")
    for key in held:
        del proof.left[key]
    proof.spend(len(held))


def _expected(shape: Mapping[str, Any], factor: int, members: Key, coupling: Any, touched: Key) -> Poly:
    expected: Poly = {}
    for y, weight, row in zip(members, shape["field"], coupling, strict=True):
        add(expected, (y,), factor * weight)
        for variable, value in zip(touched, row, strict=True):
            add(expected, tuple(sorted((y, variable))), factor * value)
    for i, k, weight in shape["between"]:
        add(expected, tuple(sorted((members[i], members[k]))), factor * weight)
    return expected


def _minima(proof: Proof, fields: list[int], between: Any) -> tuple[int, int]:
    """Least energy over the auxiliaries' settings and the number of settings that reach it."""
    values = values_of(proof.domain)
    energies = []
    proof.spend((1 << len(fields)) * (len(fields) + len(between)) // 4 + 1)
    for setting in settings(len(fields)):
        v = [values[bit] for bit in setting]
        inner = sum(w * v[i] * v[k] for i, k, w in between)
        energies.append(inner + sum(f * s for f, s in zip(fields, v, strict=True)))
    return min(energies), energies.count(min(energies))


def _listed(value: Any, count: int) -> list[int]:
    return [value] * count if type(value) is int else list(value)


def _checked(proof: Proof, shape: Mapping[str, Any], rows: list[list[int]]) -> list[int]:
    """A shape's minima and multiplicities, one for each row of the auxiliaries' fields; returns the latter."""
    minimum, counts = shape["minimum"], _listed(shape["multiplicity"], len(rows))
    if len(minimum) != len(rows) or len(counts) != len(rows):
        raise Rejected("a table is not as long as its settings")
    for number, fields in enumerate(rows):
        if _minima(proof, fields, shape["between"]) != (minimum[number], counts[number]):
            raise Rejected(f"a table is wrong at entry {number}")
    return counts


def _gain(proof: Proof, touched: Key, counts: list[int], number: Callable[[Key], int]) -> None:
    """Note a cluster's multiplicities; `number` finds a setting of the touched variables among the counts."""
    if len(set(counts)) == 1:
        proof.multiplicity *= counts[0]
    else:
        proof.uneven.append((touched, lambda bits: counts[number(bits)]))


def _binary(bits: Key) -> int:
    return int("0" + "".join(map(str, bits)), 2)


def _tables(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    values = values_of(proof.domain)
    checked = []
    for shape in step["shapes"]:
        a, d = len(shape["field"]), len(shape["coupling"][0]) if shape["coupling"] else 0
        if a + d > MOST_BITS:
            raise TooLarge(f"a table over {a + d} variables")
        pairs = list(zip(shape["field"], shape["coupling"], strict=True))
        rows = [
            [f + sum(c * values[b] for c, b in zip(row, t, strict=True)) for f, row in pairs] for t in settings(d)
        ]
        proof.spend(len(rows) * a * d)
        counts = _checked(proof, shape, rows)
        checked.append((counts, interpolated(shape["minimum"], range(d), proof.domain)))
    for number, factor, members, touched in _clusters(proof, step, variables):
        shape, (counts, poly) = step["shapes"][number], checked[number]
        _take(proof, members, _expected(shape, factor, members, shape["coupling"], touched))
        for key, value in poly.items():
            add(proof.gained, tuple(sorted(touched[i] for i in key)), factor * value)
        proof.spend(len(poly))
        _gain(proof, touched, counts, _binary)


def _counting(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    checked = []
    for shape in step["shapes"]:
        sizes = [len(columns) for columns in shape["classes"]]
        grid = list(product(*(range(size + 1) for size in sizes)))
        if len(grid) > 2**MOST_BITS or len(shape["field"]) > MOST_BITS:
            raise TooLarge(f"counts of {len(grid)} kinds")
        if sorted(j for columns in shape["classes"] for j in columns) != list(range(len(shape["signs"]))):
            raise Rejected("the classes do not part the columns")
        if any(sign not in ((1, -1) if proof.domain == "spin" else (1,)) for sign in shape["signs"]):
            raise Rejected("a sign is neither 1 nor -1")
        spin = proof.domain == "spin"
        pairs = list(zip(shape["field"], shape["coupling"], strict=True))
        totals = [[d - 2 * k if spin else k for d, k in zip(sizes, ks, strict=True)] for ks in grid]
        rows = [[f + sum(c * v for c, v in zip(row, at, strict=True)) for f, row in pairs] for at in totals]
        counts = _checked(proof, shape, rows)
        checked.append((counts, sizes, grid))
    for number, factor, members, touched in _clusters(proof, step, variables):
        shape, (counts, sizes, grid) = step["shapes"][number], checked[number]
        place = {j: c for c, columns in enumerate(shape["classes"]) for j in columns}
        if len(touched) != len(shape["signs"]):
            raise Rejected("signs do not match the touched variables")
        coupling = [[sign * row[place[j]] for j, sign in enumerate(shape["signs"])] for row in shape["coupling"]]
        _take(proof, members, _expected(shape, factor, members, coupling, touched))
        _symmetric(proof, shape, dict(zip(grid, shape["minimum"], strict=True)), sizes, touched, factor)
        where = {ks: index for index, ks in enumerate(grid)}
        classes, signs = shape["classes"], shape["signs"]
        _gain(
            proof,
            touched,
            counts,
            lambda bits, c=classes, s=signs, w=where: w[tuple(sum(bits[j] ^ (s[j] < 0) for j in cols) for cols in c)],
        )


def _symmetric(
    proof: Proof, shape: Mapping[str, Any], minimum: dict[Key, Any], sizes: list[int], touched: Key, factor: int
) -> None:
    """Add the polynomial of a function of counts: one coefficient for each number of members from every class."""
    coefficients = minimum
    for axis, d in enumerate(sizes):
        matrix = [[_weight(proof.domain, d, j, k) for k in range(d + 1)] for j in range(d + 1)]
        proof.spend(len(coefficients) * (d + 1))
        fresh: dict[Key, Any] = {}
        for ks, value in coefficients.items():
            for j in range(d + 1):
                at = (*ks[:axis], j, *ks[axis + 1 :])
                fresh[at] = fresh.get(at, 0) + matrix[j][ks[axis]] * value
        coefficients = fresh
    for js, value in coefficients.items():
        if not value:
            continue
        count = 1
        for j, d in zip(js, sizes, strict=True):
            count *= comb(d, j)
        proof.spend(count)
        for parts in product(*(combinations(cols, j) for cols, j in zip(shape["classes"], js, strict=True))):
            columns = [column for part in parts for column in part]
            sign = 1
            for column in columns:
                sign *= shape["signs"][column]
            add(proof.gained, tuple(sorted(touched[column] for column in columns)), factor * sign * value)


def _weight(domain: str, d: int, j: int, k: int) -> Any:
    """What the value at count k gives to the coefficient of j chosen members of d."""
    if domain == "boolean":
        return (-1) ** (j - k) * comb(j, k) if k <= j else 0
    signed = sum((-1) ** i * comb(j, i) * comb(d - j, k - i) for i in range(min(j, k) + 1))
    return Fraction(signed, 2**d)


def _states(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    members, touched = _positions(step["auxiliaries"], variables), _positions(step["touched"], variables)
    proof.fresh(members)
    if len(members) + len(touched) > MOST_BITS:
        raise TooLarge(f"a cluster of {len(members)} auxiliaries and {len(touched)} touched variables")
    if not proof.settled(touched) or set(touched) & set(members):
        raise Rejected("a cluster touches a variable that is not settled")
    held: Poly = {}
    for y in members:
        held |= proof.touching(y)
    slot = {y: i for i, y in enumerate(members)}
    place = {x: j for j, x in enumerate(touched)}
    if any(len(key) > 2 or not set(key) <= {*members, *touched} for key in held):
        raise Rejected("a cluster leaves out a variable that it touches")
    between = [[slot[key[0]], slot[key[1]], w] for key, w in held.items() if len(key) == 2 and set(key) <= set(slot)]
    values = values_of(proof.domain)
    rows = []
    for t in settings(len(touched)):
        fields = [0] * len(members)
        for key, weight in held.items():
            inside = [p for p in key if p in slot]
            if len(inside) == 1:
                out = [p for p in key if p in place]
                fields[slot[inside[0]]] += weight * (values[t[place[out[0]]]] if out else 1)
        rows.append(fields)
    counts = _checked(proof, {**step, "between": between}, rows)
    for key in held:
        del proof.left[key]
    proof.done.update(members)
    for key, value in interpolated(step["minimum"], touched, proof.domain).items():
        add(proof.gained, key, value)
    _gain(proof, tuple(touched), counts, _binary)


STEPS: Mapping[str, Callable[[Proof, Mapping[str, Any], int], None]] = {
    "guards": _guards,
    "shared": _shared,
    "tables": _tables,
    "counting": _counting,
    "states": _states,
}
