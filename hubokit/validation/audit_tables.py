"""A certificate of the audit's own, where a verdict leaves its certificate out because of its size.

Large reductions term by term are many small clusters of few shapes: their tables are quickly made here, and then
followed like those of any certificate.
"""

from __future__ import annotations

from typing import Any

from hubokit.validation.audit_clusters import table_of
from hubokit.validation.audit_polynomials import Key, TooLarge
from hubokit.validation.audit_proof import Proof

#: Auxiliaries and touched variables of one cluster at most.
MEMBERS, TOUCHED = 12, 10


def own_tables(proof: Proof) -> dict[str, Any]:
    """A step of tables for every cluster of auxiliaries.

    Raises
    ------
    TooLarge
        A cluster is not small, or the model is not quadratic.
    """
    root = {y: y for y in proof.auxiliaries}

    def find(y: int) -> int:
        while root[y] != y:
            root[y] = root[root[y]]
            y = root[y]
        return y

    keys = [key for key in proof.left if any(position in root for position in key)]
    for key in keys:
        if len(key) > 2:
            raise TooLarge("a model that is not quadratic")
        if len(key) == 2 and key[0] in root and key[1] in root:
            root[find(key[0])] = find(key[1])
    members: dict[int, list[int]] = {}
    for y in sorted(root):
        members.setdefault(find(y), []).append(y)
    terms: dict[int, list[Key]] = {one: [] for one in members}
    for key in keys:
        terms[find(next(position for position in key if position in root))].append(key)
    shapes: list[dict[str, Any]] = []
    known: dict[Any, int] = {}
    clusters: list[list[Any]] = []
    for one, own in members.items():
        touched = sorted({position for key in terms[one] for position in key if position not in root})
        if len(own) > MEMBERS or len(touched) > TOUCHED:
            raise TooLarge(
                f"a cluster of {len(own)} auxiliaries over {len(touched)} variables without its certificate"
            )
        shape = _shape(proof, own, touched, terms[one])
        name = (tuple(shape["field"]), tuple(map(tuple, shape["coupling"])), tuple(map(tuple, shape["between"])))
        if name not in known:
            known[name] = len(shapes)
            shapes.append({**shape, **table_of(proof, shape, len(touched))})
        clusters.append([known[name], 1, own, touched])
    return {"step": "tables", "shapes": shapes, "clusters": clusters}


def _shape(proof: Proof, own: list[int], touched: list[int], keys: list[Key]) -> dict[str, Any]:
    """Field, couplings to the touched variables and couplings inside, from a cluster's terms."""
    slot = {y: i for i, y in enumerate(own)}
    place = {x: j for j, x in enumerate(touched)}
    field, between = [0] * len(own), []
    coupling = [[0] * len(touched) for _ in own]
    for key in sorted(keys):
        weight = proof.left[key]
        inside = [position for position in key if position in slot]
        if len(inside) == 2:
            between.append([slot[inside[0]], slot[inside[1]], weight])
        elif len(key) == 1:
            field[slot[key[0]]] = weight
        else:
            (other,) = (position for position in key if position not in slot)
            coupling[slot[inside[0]]][place[other]] = weight
    return {"field": field, "coupling": coupling, "between": between}
