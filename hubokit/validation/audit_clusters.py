"""Certificate steps that take out whole clusters of auxiliaries by a table of minima."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from fractions import Fraction
from itertools import combinations, product
from math import comb, prod
from operator import mul
from typing import Any

from hubokit.validation.audit_branching import least_and_count
from hubokit.validation.audit_polynomials import Key, Poly, TooLarge, add, interpolated, settings, values_of
from hubokit.validation.audit_proof import MOST_BITS, Proof, Rejected, binary, positions_in

#: Auxiliaries of one cluster whose settings are all listed, those that branch and bound is tried on, touched
#: variables.
ENUMERATED, MOST_BRANCHED, MOST_TOUCHED = 6, 64, 16
#: Touched variables of a cluster that is settled by counting.
MOST_COUNTED = 256


def _clusters(proof: Proof, step: Mapping[str, Any], variables: int) -> list[tuple[int, int, Key, Key]]:
    found = []
    for shape, factor, members, touched in step["clusters"]:
        if type(shape) is not int or not 0 <= shape < len(step["shapes"]) or type(factor) is not int or factor <= 0:
            raise Rejected("a cluster names no shape or has no positive factor")
        members, touched = positions_in(members, variables), positions_in(touched, variables)
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


def _minima(proof: Proof, rows: list[list[int]], between: Any, size: int) -> Iterator[tuple[int, int]]:
    """Least energy over the auxiliaries' settings and how many settings reach it, for each row of fields."""
    if size <= ENUMERATED:
        values = values_of(proof.domain)
        all_settings = [[values[bit] for bit in setting] for setting in settings(size)]
        inner = [sum(w * v[i] * v[k] for i, k, w in between) for v in all_settings]
        proof.spend(len(inner) * (len(between) + len(rows) * size))
        for fields in rows:
            energies = [e + sum(map(mul, fields, v)) for e, v in zip(inner, all_settings, strict=True)]
            yield min(energies), energies.count(min(energies))
        return
    quadratic = [[0] * size for _ in range(size)]
    spin = proof.domain == "spin"
    for i, k, w in between:
        quadratic[i][k] = quadratic[k][i] = 4 * w if spin else w
    around = [sum(row) // 4 if spin else 0 for row in quadratic]
    base = sum(w for _, _, w in between) if spin else 0
    for fields in rows:
        linear = [-2 * (f + q) for f, q in zip(fields, around, strict=True)] if spin else fields
        low, count = least_and_count(linear, quadratic, proof.spend)
        yield low + (base + sum(fields) if spin else 0), count


def _listed(value: Any, count: int) -> list[int]:
    return [value] * count if type(value) is int else list(value)


def _checked(proof: Proof, shape: Mapping[str, Any], rows: list[list[int]]) -> list[int]:
    """A shape's minima and multiplicities, one for each row of the auxiliaries' fields; returns the latter."""
    size = len(rows[0]) if rows else 0
    if len({(i, k) for i, k, _ in shape["between"] if 0 <= i < k < size}) < len(shape["between"]):
        raise Rejected("couplings among the auxiliaries repeat or are out of range")
    minimum, counts = shape["minimum"], _listed(shape["multiplicity"], len(rows))
    if len(minimum) != len(rows) or len(counts) != len(rows):
        raise Rejected("a table is not as long as its settings")
    found = _minima(proof, rows, shape["between"], size)
    for number, pair in enumerate(found):
        if pair != (minimum[number], counts[number]):
            raise Rejected(f"a table is wrong at entry {number}")
    return counts


def _gain(proof: Proof, touched: Key, counts: list[int], number: Callable[[Key], int]) -> None:
    """Note a cluster's multiplicities; `number` finds a setting of the touched variables among the counts."""
    if len(set(counts)) == 1:
        proof.multiplicity *= counts[0]
    else:
        proof.uneven.append((touched, lambda bits: counts[number(bits)]))


def _rows(proof: Proof, shape: Mapping[str, Any], d: int) -> list[list[int]]:
    """Fields that the auxiliaries of a shape feel at every setting of its touched variables."""
    values = values_of(proof.domain)
    pairs = list(zip(shape["field"], shape["coupling"], strict=True))
    proof.spend((len(pairs) * d) << d)
    return [[f + sum(c * values[b] for c, b in zip(row, t, strict=True)) for f, row in pairs] for t in settings(d)]


def table_of(proof: Proof, shape: Mapping[str, Any], d: int) -> dict[str, list[int]]:
    """Minima and multiplicities of a shape over its d touched variables."""
    found = list(_minima(proof, _rows(proof, shape, d), shape["between"], len(shape["field"])))
    return {"minimum": [low for low, _ in found], "multiplicity": [count for _, count in found]}


def tables_step(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    checked = []
    for shape in step["shapes"]:
        a, d = len(shape["field"]), len(shape["coupling"][0]) if shape["coupling"] else 0
        if d > MOST_TOUCHED or a > MOST_BRANCHED:
            raise TooLarge(f"a table of {a} auxiliaries over {d} variables")
        rows = _rows(proof, shape, d)
        counts = _checked(proof, shape, rows)
        checked.append((counts, interpolated(shape["minimum"], range(d), proof.domain)))
    for number, factor, members, touched in _clusters(proof, step, variables):
        shape, (counts, poly) = step["shapes"][number], checked[number]
        _take(proof, members, _expected(shape, factor, members, shape["coupling"], touched))
        for key, value in poly.items():
            add(proof.gained, tuple(sorted(touched[i] for i in key)), factor * value)
        proof.spend(len(poly))
        _gain(proof, touched, counts, binary)


def counting_step(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    checked = []
    for shape in step["shapes"]:
        sizes = [len(columns) for columns in shape["classes"]]
        kinds = prod(size + 1 for size in sizes)
        if kinds > 2**MOST_BITS or sum(sizes) > MOST_COUNTED or len(shape["field"]) > MOST_BRANCHED:
            raise TooLarge(f"counts of {kinds} kinds over {sum(sizes)} variables")
        grid = list(product(*(range(size + 1) for size in sizes)))
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
        _gain(proof, touched, counts, _counted(shape["classes"], shape["signs"], grid))


def _counted(classes: list[list[int]], signs: list[int], grid: list[Key]) -> Callable[[Key], int]:
    """Finds the entry of a setting by the number of bits set in each class."""
    where = {ks: index for index, ks in enumerate(grid)}

    def entry(bits: Key) -> int:
        return where[tuple(sum(bits[j] ^ (signs[j] < 0) for j in columns) for columns in classes)]

    return entry


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


def states_step(proof: Proof, step: Mapping[str, Any], variables: int) -> None:
    members, touched = positions_in(step["auxiliaries"], variables), positions_in(step["touched"], variables)
    proof.fresh(members)
    if len(touched) > MOST_TOUCHED or len(members) > MOST_BRANCHED:
        raise TooLarge(f"a cluster of {len(members)} auxiliaries and {len(touched)} touched variables")
    if set(touched) & proof.auxiliaries or len(set(touched)) < len(touched):
        raise Rejected("a cluster minimised state by state is tabulated over originals")
    held: Poly = {}
    for y in members:
        held |= proof.touching(y)
    slot = {y: i for i, y in enumerate(members)}
    pulls: list[tuple[int, Key, int]] = []
    between = []
    for key, weight in held.items():
        inside = sorted(slot[position] for position in key if position in slot)
        others = tuple(position for position in key if position not in slot)
        if len(inside) > 2 or (len(inside) == 2 and others):
            raise TooLarge("a cluster whose couplings depend on the state")
        if len(inside) == 2:
            between.append([*inside, weight])
        else:
            pulls.append((inside[0], others, weight))
    values = values_of(proof.domain)
    rows = []
    for t in settings(len(touched)):
        at = proof.decided(dict(zip(touched, t, strict=True)))
        fields = [0] * len(members)
        for i, others, weight in pulls:
            if not all(position in at for position in others):
                raise Rejected("a cluster leaves out a variable that it touches")
            fields[i] += weight * prod(values[at[position]] for position in others)
        proof.spend(len(pulls))
        rows.append(fields)
    counts = _checked(proof, {**step, "between": between}, rows)
    for key in held:
        del proof.left[key]
    proof.done.update(members)
    for key, value in interpolated(step["minimum"], touched, proof.domain).items():
        add(proof.gained, key, value)
    _gain(proof, tuple(touched), counts, binary)
