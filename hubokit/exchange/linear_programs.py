"""MPS and LP files: a model as a linear integer program, written and read through HiGHS.

Objective coefficients are the weights; scale, constant, domain, convention and names stand in the sidecar
NAME.names.json. Floats carry weights up to 2**53 exactly; larger ones are refused.
"""

from __future__ import annotations

import os

import numpy as np

from hubokit.errors import HubokitError, InputError
from hubokit.exchange.cnf import default_name
from hubokit.exchange.constraints import Constraint, penalty
from hubokit.exchange.files import read_text, refuse_existing, safe_path, write_text
from hubokit.exchange.header import Header, read_sidecar, refuse_many, sidecar_path, sidecar_text
from hubokit.exchange.highs_files import highs_read, highs_write
from hubokit.exchange.literals import literal_model
from hubokit.exchange.programs import Program, linearised, own_order, product_columns
from hubokit.exchange.reading import Reading
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction, common_resolution, format_fraction


def write_program(
    model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False, kind: str | None = None
) -> None:
    """Write a model as an MPS or LP file and its sidecar NAME.names.json.

    Parameters
    ----------
    model : Hamiltonian
        A spin model is written in booleans; the sidecar says so and reading undoes it.
    kind : "mps" or "lp", optional
        By default the suffix says it.

    Raises
    ------
    InputError
        One of the files exists and force is not set, or the model has no variables.
    LimitError
        Weights that a float does not hold exactly.
    """
    side = sidecar_path(path)
    if model.size == 0:
        raise InputError("a model without variables is no program", file=os.fspath(path))
    boolean = model.in_domain("boolean")
    program = linearised(boolean)
    facts = {
        "digest": model.digest,
        "domain": model.domain,
        "convention": model.convention,
        "scale": format_fraction(boolean.resolution),
        "constant": format_fraction(boolean.constant),
    }
    text = sidecar_text(model.labels, facts)
    held = side.is_file() and read_text(side) == text  # the .mps and the .lp of one model share it
    if not held:
        refuse_existing(side, force=force)
    with safe_path(path, force=force) as temporary:
        highs_write(program, temporary, _kind(path, kind))
    if not held:
        write_text(side, text, force=force)


def read_program(path: str | os.PathLike[str]) -> Hamiltonian:
    """The model of an MPS or LP file; see `load_program`."""
    return load_program(path).model


def _kind(path: str | os.PathLike[str], kind: str | None) -> str:
    return kind or ("mps" if os.fspath(path).lower().endswith(".mps") else "lp")


def load_program(path: str | os.PathLike[str], kind: str | None = None) -> Reading:
    """The model of an MPS or LP file: one that `write_program` wrote, or any program in binary columns.

    Parameters
    ----------
    path : path
        Product columns are recognised by their names and rows. Other rows become penalties of
        proven weight (`hubokit.exchange.constraints`).
    kind : "mps" or "lp", optional
        By default the suffix says it.

    Raises
    ------
    InputError
        Not such a file, a column that is not binary, a maximised or quadratic objective.
    LimitError
        A row for which no penalty of reasonable size is known.
    """
    name = os.fspath(path)
    try:
        program = own_order(highs_read(name, _kind(path, kind)))
        header = Header()
        read_sidecar(path, header)
        own = product_columns(program)
        remarks: tuple[str, ...] = ()
        if own is not None:
            model = _own_model(program, own, header)
        else:
            model, remarks = _foreign_model(program, header)
        return Reading(header.restored(model), remarks)
    except HubokitError as error:
        raise error.located(file=name) from None


def _own_model(program: Program, products: list[tuple[int, ...]], header: Header) -> Hamiltonian:
    size = int(program.binary.sum())
    refuse_many(size)
    return _sum(program, products, header.labels(size, default_name), header)


def _sum(program: Program, products: list[tuple[int, ...]], labels: tuple[str, ...], header: Header) -> Hamiltonian:
    costs = [as_fraction(value, "the objective") for value in program.cost.tolist()]
    unit = common_resolution(costs)
    groups: dict[int, tuple[list[tuple[int, ...]], list[int]]] = {}
    for row, value in zip(products, costs, strict=True):
        rows, weights = groups.setdefault(len(row), ([], []))
        rows.append(row)
        weights.append(int(value / unit))
    return Hamiltonian.from_arrays(
        [np.array(rows, np.int64) for rows, _ in groups.values()],
        [np.array(weights, dtype=object) for _, weights in groups.values()],
        domain="boolean",
        labels=labels,
        resolution=unit * header.scale,
        constant=header.constant + header.scale * as_fraction(program.offset),
        convention=header.convention,
    )


def _foreign_model(program: Program, header: Header) -> tuple[Hamiltonian, tuple[str, ...]]:
    if not program.binary.all():
        column = int((~program.binary).argmax())
        mend = "every column must be binary, or a product column as hubokit writes it"
        raise InputError(mend, f"column {program.names[column][:60]}")
    size = len(program.names)
    labels = header.labels(size, lambda number: program.names[number - 1] or default_name(number))
    model = _sum(program, [(i,) for i in range(size)], labels, header)
    constraints = [c for place in range(len(program.lower)) for c in _constraints(program, place)]
    if not constraints:
        return model, ()
    spread = model.weight_bound * model.resolution
    factor = header.scale + spread
    penalties = literal_model([], labels)
    for constraint in constraints:
        made = penalty(constraint, labels)
        if made is not None:
            penalties = penalties + made
    remark = (
        f"{len(constraints)} rows became penalties of weight {format_fraction(factor)} "
        "(above the spread of the objective)"
    )
    return model + penalties * factor, (remark,)


def _constraints(program: Program, place: int) -> list[Constraint]:
    inside = slice(int(program.starts[place]), int(program.starts[place + 1]))
    values = [as_fraction(value, f"row {place + 1}") for value in program.values[inside].tolist()]
    bounds = [float(program.lower[place]), float(program.upper[place])]
    exact = [as_fraction(bound) for bound in bounds if np.isfinite(bound)]
    unit = common_resolution([*values, *exact])
    products: list[tuple[tuple[int, ...], int]] = []
    for column, value in zip(program.columns[inside].tolist(), values, strict=True):
        products.append(((int(column) + 1,), int(value / unit)))
    if len(exact) == 2 and exact[0] == exact[1]:
        return [Constraint(products, "=", int(exact[0] / unit), place + 1)]
    sides = zip((">=", "<="), bounds, strict=True)
    return [
        Constraint(products, relation, int(as_fraction(bound) / unit), place + 1)
        for relation, bound in sides
        if np.isfinite(bound)
    ]
