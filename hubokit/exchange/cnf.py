"""DIMACS CNF: a satisfiability formula as a model whose energy is the number of broken clauses.

The ground energy is 0 exactly when the formula can be satisfied; the ground states are then its models. Format:
comment lines ``c ...``, ``p cnf VARIABLES CLAUSES``, clauses as literals that end with 0 (DIMACS Challenge 1993,
"Satisfiability: suggested format").
"""

from __future__ import annotations

import os
from collections.abc import Iterator

import numpy as np

from hubokit.errors import HubokitError, InputError, LimitError
from hubokit.exchange.clauses import (
    as_literals,
    broken_products,
    clause_lines,
    head_counts,
    posiform,
    scanned,
    split_clauses,
)
from hubokit.exchange.files import write_bytes
from hubokit.exchange.header import Header, header_lines, read_sidecar
from hubokit.exchange.literals import literal_model
from hubokit.exchange.reading import Reading
from hubokit.model.hamiltonian import Hamiltonian

REPEAT_LIMIT = 10**6
"""Most clauses that are written when a weight is written as that many equal clauses."""


def default_name(number: int) -> str:
    """Name of variable `number` where the file gives none."""
    return f"x{number}"


def read_cnf(path: str | os.PathLike[str]) -> Hamiltonian:
    """The number of broken clauses as a boolean model.

    Parameters
    ----------
    path : path
        ``.cnf`` or ``.cnf.gz``.

    Returns
    -------
    Hamiltonian
        Variables ``x1, x2, ...`` or the names in comment lines or the sidecar.

    Raises
    ------
    InputError
        Not a CNF file; the line is named.
    LimitError
        A clause with so many positive literals that its product would expand beyond ``EXPANSION_LIMIT``.
    """
    return load_cnf(path).model


def load_cnf(path: str | os.PathLike[str]) -> Reading:
    """As `read_cnf`, with remarks."""
    try:
        header = Header()
        found = scanned(path, header.take)
        count, clauses = head_counts(found.head, "cnf", 2)[:2]
        if found.hard.any():
            raise InputError('a weight "h" in a CNF file; name it .wcnf', f"clause {int(found.hard.argmax())}")
        starts, ends = split_clauses(found)
        if len(ends) != clauses:
            raise InputError(f"the p line says {clauses} clauses, the file holds {len(ends)}", "line 1")
        if not header.touched:
            read_sidecar(path, header)
        labels = header.labels(count, default_name)
        literals = as_literals(found.numbers, count)
        products = broken_products(literals[literals != 0], ends - starts, np.ones(len(ends), np.int64))
        model = literal_model(
            products, labels, scale=header.scale, constant=header.constant, convention=header.convention
        )
        return Reading(header.restored(model))
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None


def write_cnf(model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False) -> None:
    """Write a model as clauses; a weight of w becomes w equal clauses.

    Raises
    ------
    InputError
        The file exists and force is not set.
    LimitError
        More than ``REPEAT_LIMIT`` clauses would be needed.
    """
    boolean = model.in_domain("boolean")
    constant, products = posiform(boolean)
    total = sum(sum(weights.tolist()) for _, weights in products)
    if total > REPEAT_LIMIT:
        raise LimitError(
            f"the weights would become {total} equal clauses, at most {REPEAT_LIMIT} are written; use .wcnf",
            file=os.fspath(path),
        )
    shift = boolean.constant + constant * boolean.resolution

    def parts() -> Iterator[bytes]:
        lines = header_lines("c", model, scale=boolean.resolution, constant=shift, default=default_name)
        yield "".join(f"{line}\n" for line in lines).encode()
        yield f"p cnf {model.size} {total}\n".encode()
        for literals, weights in products:
            yield clause_lines(np.repeat(literals, weights.astype(np.int64), axis=0), None)

    write_bytes(path, parts(), force=force)
