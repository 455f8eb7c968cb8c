"""What a second checker needs to follow a projection's proof, as a JSON document.

All variables are positions in the model's labels. Energies, weights, margins and tables are integers in units
of the model's resolution, without its constant. A *bit* is 0 for boolean 0 and spin +1, 1 for boolean 1 and
spin -1. Setting number t of a list of variables carries the first one as its most significant bit.

Document
--------
``kind`` "projection"; ``version`` 1; ``auxiliaries`` (positions); ``multiplicity`` m or null; ``gap``
``{"value": int or null, "exact": bool}`` or null; ``entries``, the number of integers that the steps hold;
and ``steps`` in the order of the proof. When there would be more than `LIMIT` entries, ``"omitted": "size"``
and ``counts`` (step: auxiliaries) stand in place of ``steps``.

The checker keeps a polynomial F', at first the model F, and the set of *known* auxiliaries. Every auxiliary
is in exactly one step. The field of y is F'(y bit 1) - F'(y bit 0).

Steps
-----
guards
    ``auxiliaries``, ``guards`` (a list for each), ``functions`` (text: character t is y's bit at setting t of
    its guards), ``margins``, ``eliminate``. For every setting of the guards and whatever the other variables
    are, the field is < 0 where the bit is 1 and > 0 where it is 0, by bounds taken term by term, and its
    absolute value, rounded up to a whole number, is at least the margin. All auxiliaries of a step are judged
    against the same F'. Not ``eliminate``: the guards are originals or known before, and the auxiliaries
    become known. ``eliminate``: the auxiliaries are replaced in F' one after the other in the listed order; a
    guard may be an auxiliary that is still in F'.
weak guards
    As guards with ``eliminate``, but the field may be 0 as well, on the side where the bit is right: P is
    right, the multiplicity not known.
shared
    ``auxiliaries``, ``guards``, ``functions``, ``shares``, ``slacks``: decided together, see
    `hubokit.projection.shared_bounds`. ``shares`` is "equal" or a list of ``[i, k, bit of i, bit of k,
    "p/q"]`` (end i bears p/q of a negative coupling, end k the rest; one half where not listed).
tables
    ``shapes`` (``field``, ``coupling``, ``between`` as ``[i, k, weight]``, ``minimum``, ``multiplicity``) and
    ``clusters`` ``[shape, factor, auxiliaries, touched]``: the cluster's couplings are factor times the
    shape's; ``minimum[t]`` is the least energy at setting t of the touched variables, which are originals or
    known; ``multiplicity`` is one number or one for each t.
counting
    The same with ``classes`` (columns), ``signs`` (of the columns) and ``coupling`` by class; ``minimum`` is
    flat in C order over the numbers of sign-adjusted set bits in each class.
states
    ``auxiliaries``, ``touched`` (originals), ``minimum``, ``multiplicity``: the terms that hold the
    auxiliaries minimised state by state, with the known auxiliaries at their values.

P is what F' holds without undecided auxiliaries, plus factor times the polynomials of the tables, with the
known auxiliaries put in, last first.
"""

from __future__ import annotations

from collections import Counter
from fractions import Fraction
from typing import Any

import numpy as np

from hubokit.model.numbers import format_fraction
from hubokit.projection.clusters import Batch, shapes
from hubokit.projection.counting import classes_of, count
from hubokit.projection.findings import Findings, Listed, RuleStep, SharedStep, Step
from hubokit.projection.guards import Rules
from hubokit.projection.result import GapBound
from hubokit.projection.settle import Settled, tables_of
from hubokit.projection.shared_bounds import PARTS
from hubokit.projection.structure import Integers

LIMIT = 200_000
"""Integers that a certificate may hold."""


def certificate(findings: Findings, multiplicity: int | None, gap: GapBound | None) -> dict[str, Any]:
    """The document described above.

    Examples
    --------
    >>> from hubokit.model.hamiltonian import Hamiltonian
    >>> from hubokit.projection.project import project
    >>> F = Hamiltonian({("x", "a"): -2, ("y", "a"): -2, ("a",): 3}, domain="boolean")
    >>> project(F, ["a"]).certificate()["steps"][0]["shapes"][0]["minimum"]
    [0, 0, 0, -1]
    """
    resolution, domain = findings.structure.model.resolution, findings.structure.domain
    value = None if gap is None or gap.value is None else int(gap.value / resolution)
    document: dict[str, Any] = {
        "kind": "projection",
        "version": 1,
        "auxiliaries": findings.structure.auxiliaries.tolist(),
        "multiplicity": multiplicity,
        "gap": None if gap is None else {"value": value, "exact": gap.exact},
        "entries": 0,
    }
    entries = sum(_entries(step, domain) for step in findings.steps) + len(findings.structure.auxiliaries)
    document["entries"] = entries
    if entries > LIMIT:
        counts: Counter[str] = Counter()
        for step in findings.steps:
            counts[_name(step)] += _auxiliaries(step)
        del document["auxiliaries"]
        return document | {"omitted": "size", "counts": dict(sorted(counts.items()))}
    return document | {"steps": [_written(step, domain) for step in findings.steps]}


def _name(step: Step) -> str:
    if isinstance(step, Settled):
        return "counting" if step.method == "counting" else "tables"
    if isinstance(step, Listed):
        return "states"
    if isinstance(step, SharedStep):
        return "shared"
    return "guards" if step.least_margin else "weak guards"


def _auxiliaries(step: Step) -> int:
    if isinstance(step, Settled):
        return int(step.batch.auxiliaries.size)
    if isinstance(step, Listed):
        return len(step.auxiliaries)
    return sum(len(rules) for rules in step.rules)


def _entries(step: Step, domain: str) -> int:
    """How many integers a step will write down; no table is made for this."""
    if isinstance(step, Listed):
        return len(step.auxiliaries) + len(step.touched) + 2 * len(step.minimum)
    if isinstance(step, Settled):
        distinct, a, d = len(step.distinct), step.batch.a, step.batch.d
        if step.method == "counting":
            cells = sum(classes_of(one, domain).cells for one in step.distinct.coupling)
        else:
            cells = distinct << d
        return len(step.batch) * (a + d + 2) + distinct * (a + a * d + a * a) + cells
    shares = 5 * len(step.shares) if isinstance(step, SharedStep) else 0
    return shares + sum(len(rules) * (rules.g + 3 + (1 << rules.g)) for rules in step.rules)


def _written(step: Step, domain: str) -> dict[str, Any]:
    if isinstance(step, Settled):
        return _settled(step, domain)
    if isinstance(step, Listed):
        return {
            "step": "states",
            "auxiliaries": step.auxiliaries.tolist(),
            "touched": step.touched.tolist(),
            "minimum": [int(energy) for energy in step.minimum],
            "multiplicity": _one_or_all(step.multiplicity),
        }
    rows = _rules(step.rules)
    margins = rows.pop("margins")
    if isinstance(step, RuleStep):
        return {"step": _name(step), "eliminate": step.at_once, **rows, "margins": margins}
    shares = [[i, k, r, s, format_fraction(Fraction(part, PARTS))] for i, k, r, s, part in step.shares]
    slacks = [format_fraction(slack) for slack in step.slacks]
    return {"step": "shared", **rows, "shares": shares or "equal", "slacks": slacks}


def _rules(all_rules: list[Rules]) -> dict[str, Any]:
    rows = [(y, rules, index) for rules in all_rules for index, y in enumerate(rules.auxiliaries.tolist())]
    return {
        "auxiliaries": [y for y, _, _ in rows],
        "guards": [rules.guards[index].tolist() for _, rules, index in rows],
        "functions": [text for rules in all_rules for text in function_texts(rules)],
        "margins": [int(rules.margin[index]) for _, rules, index in rows],
    }


def function_texts(rules: Rules) -> list[str]:
    """Truth tables as text, one character for each setting of the guards."""
    return ["".join(map(str, row)) for row in rules.truth_tables().tolist()]


def _settled(step: Settled, domain: str) -> dict[str, Any]:
    batch = step.batch
    if step.method == "counting":
        distinct, factors, shape = step.distinct, step.factors, step.shape
        written = [_counted_shape(distinct.taken(np.array([index])), domain) for index in range(len(distinct))]
    else:
        distinct, factors, shape = shapes(batch)
        tables = tables_of(distinct, domain)
        written = [
            _shape(distinct, index)
            | {"minimum": tables.minimum[index].tolist(), "multiplicity": _one_or_all(tables.multiplicity[index])}
            for index in range(len(distinct))
        ]
    rows = zip(shape.tolist(), factors.tolist(), batch.auxiliaries.tolist(), batch.touched.tolist(), strict=True)
    return {
        "step": "counting" if step.method == "counting" else "tables",
        "shapes": written,
        "clusters": [list(row) for row in rows],
    }


def _shape(distinct: Batch, index: int) -> dict[str, Any]:
    between = distinct.between[index]
    first, second = np.nonzero(between)
    return {
        "field": distinct.field[index].tolist(),
        "coupling": distinct.coupling[index].tolist(),
        "between": [[int(i), int(k), int(between[i, k])] for i, k in zip(first, second, strict=True)],
    }


def _counted_shape(one: Batch, domain: str) -> dict[str, Any]:
    counted = count(one, domain)
    assert counted is not None
    return _shape(one, 0) | {
        "coupling": counted.classes.coupling.tolist(),
        "classes": [list(columns) for columns in counted.classes.members],
        "signs": list(counted.classes.signs),
        "minimum": counted.minimum.ravel().tolist(),
        "multiplicity": _one_or_all(counted.multiplicity.ravel()),
    }


def _one_or_all(multiplicity: Integers) -> int | list[int]:
    values: list[int] = [int(m) for m in multiplicity]
    return values[0] if len(set(values)) == 1 else values
