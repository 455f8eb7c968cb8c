"""WCNF, weighted clauses as in the MaxSAT Evaluations: old header (``p wcnf``) and the form of 2022 (no header).

The energy is the weight of the broken clauses. Any model leaves as a posiform, one clause for each of its products
and no auxiliaries. Hard clauses become penalties of weight 1 + (sum of all soft weights), so that breaking one
costs more than breaking every soft clause. Format: MaxSAT Evaluation 2022, rules, "WCNF".
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import HubokitError, InputError
from hubokit.exchange.clauses import (
    ClauseFile,
    as_literals,
    broken_products,
    clause_lines,
    head_counts,
    posiform,
    scanned,
    split_clauses,
)
from hubokit.exchange.cnf import default_name
from hubokit.exchange.files import write_bytes
from hubokit.exchange.header import Header, header_lines, read_sidecar
from hubokit.exchange.literals import literal_model
from hubokit.exchange.reading import Reading
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import smallest_weights


def read_wcnf(path: str | os.PathLike[str]) -> Hamiltonian:
    """The weight of broken clauses as a boolean model; see `load_wcnf`."""
    return load_wcnf(path).model


def load_wcnf(path: str | os.PathLike[str]) -> Reading:
    """The weight of broken clauses as a boolean model, and what became of hard clauses.

    Parameters
    ----------
    path : path
        ``.wcnf`` or ``.wcnf.gz``, with the old header or without one.

    Raises
    ------
    InputError
        Not a WCNF file; the line or clause is named.
    LimitError
        Products that would expand beyond ``EXPANSION_LIMIT``.
    """
    try:
        header = Header()
        found = scanned(path, header.take)
        starts, ends = split_clauses(found)
        weights, hard, count = _weighted(found, starts, ends)
        numbers = found.numbers
        numbers[starts] = 0  # the weights are read; only literals are left
        literals = as_literals(numbers[numbers != 0], count)
        del found, numbers
        if not header.touched:
            read_sidecar(path, header)
        count = header.count(int(np.abs(literals).max(initial=0))) if count is None else count
        penalty = 1 + sum(weights[~hard].tolist())
        remarks: tuple[str, ...] = ()
        if hard.any():
            weights = weights.astype(object)
            weights[hard] = penalty
            number = int(hard.sum())
            remarks = (
                f"{number} hard clause{'s' if number > 1 else ''} became penalties of weight {penalty} "
                "(1 + the sum of the soft weights)",
            )
        weights = smallest_weights(weights)
        products = broken_products(literals, ends - starts - 1, weights)
        labels = header.labels(count, default_name)
        model = literal_model(
            products, labels, scale=header.scale, constant=header.constant, convention=header.convention
        )
        return Reading(header.restored(model), remarks)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None


def _weighted(
    found: ClauseFile, starts: NDArray[np.int64], ends: NDArray[np.int64]
) -> tuple[NDArray[Any], NDArray[np.bool_], int | None]:
    """Weight of every clause, whether it is hard, and the number of variables where the header says it."""
    if len(starts) and (starts == ends).any():
        clause = int((starts == ends).argmax()) + 1
        raise InputError("a clause begins with its weight, a number of at least 1, or h", f"clause {clause}")
    weights, hard = found.numbers[starts], found.hard[starts]
    inner = found.hard.copy()
    inner[starts] = False
    if inner.any():
        clause = int(np.searchsorted(ends, int(inner.argmax()))) + 1
        raise InputError("h stands only at the beginning of a clause", f"clause {clause}")
    low = (weights < 1) & ~hard
    if low.any():
        clause = int(np.asarray(low, bool).argmax()) + 1
        raise InputError(f"the weight {weights[clause - 1]} is below 1", f"clause {clause}")
    if found.head == ():
        if not len(starts):
            raise InputError("there is no clause and no p line in the file", "line 1")
        return weights, hard, None
    counts = head_counts(found.head, "wcnf", 2)
    if hard.any():
        raise InputError("h with an old header; give the top weight instead", f"clause {int(hard.argmax()) + 1}")
    if len(ends) != counts[1]:
        raise InputError(f"the p line says {counts[1]} clauses, the file holds {len(ends)}", "line 1")
    if len(counts) > 2:
        hard = np.asarray(weights >= counts[2], dtype=np.bool_)
    return weights, hard, counts[0]


def write_wcnf(
    model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False, header: str = "2022"
) -> None:
    """Write a model as weighted clauses: a posiform, no auxiliaries.

    Parameters
    ----------
    model : Hamiltonian
        A spin model is written in booleans; the comment lines say so and reading undoes it.
    header : "2022" or "old"
        Without a p line, or with ``p wcnf VARIABLES CLAUSES TOP``.

    Raises
    ------
    InputError
        The file exists and force is not set, or another header.
    LimitError
        The change of domain expands too far.
    """
    if header not in ("2022", "old"):
        raise InputError(f'the header is "2022" or "old", not {header!a}', "header")
    boolean = model.in_domain("boolean")
    constant, products = posiform(boolean)
    shift = boolean.constant + constant * boolean.resolution
    number = sum(len(weights) for _, weights in products)
    top = 1 + sum(sum(weights.tolist()) for _, weights in products)

    def parts() -> Iterator[bytes]:
        lines = header_lines("c", model, scale=boolean.resolution, constant=shift, default=default_name)
        yield "".join(f"{line}\n" for line in lines).encode()
        if header == "old" or not number:
            yield f"p wcnf {model.size} {number} {top}\n".encode()
        for literals, weights in products:
            yield clause_lines(literals, weights)

    write_bytes(path, parts(), force=force)
