"""OPB, the format of the pseudo-Boolean competition: an integer objective over literals, products included.

A file is comment lines ``* ...``, ``min: +2 x1 ~x2 -3 x3 ;`` and constraints ``+1 x1 +1 x2 >= 1 ;`` (Roussel &
Manquinho 2012, "Input/output format and solver requirements for the competitions of pseudo-Boolean solvers"). A model
leaves as one objective in units of its resolution; constant, scale, domain and names stand in comment lines that
reading honours. Constraints are read as penalties of proven weight (`hubokit.exchange.constraints`) or refused.
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import HubokitError, InputError
from hubokit.exchange.cnf import default_name
from hubokit.exchange.constraints import Constraint, penalty
from hubokit.exchange.files import write_bytes
from hubokit.exchange.header import Header, header_lines, read_sidecar
from hubokit.exchange.literals import grouped, literal_model
from hubokit.exchange.opb_words import END, MINIMISE, NUMBER, OpbWords, opb_words
from hubokit.exchange.reading import Reading
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import smallest_weights


def read_opb(path: str | os.PathLike[str]) -> Hamiltonian:
    """The objective of an OPB file, with penalties for its constraints, as a boolean model; see `load_opb`."""
    return load_opb(path).model


def load_opb(path: str | os.PathLike[str]) -> Reading:
    """The objective of an OPB file as a boolean model, and what became of its constraints.

    Parameters
    ----------
    path : path
        ``.opb`` or ``.opb.gz``.

    Raises
    ------
    InputError
        Not an OPB file; the line is named.
    LimitError
        A constraint for which no penalty of reasonable size is known.
    """
    try:
        header = OpbHeader()
        found = opb_words(path, header.take)
        objective, constraints = _statements(found)
        largest = int(np.abs(found.values[found.kinds > NUMBER + 1]).max(initial=0)) if len(found.values) else 0
        if not header.touched:
            read_sidecar(path, header)
        header.check(largest, len(constraints))
        labels = header.labels(max(header.count(largest), header.said.get("variable", 0)), default_name)
        products, weights = _products(found, *objective)
        penalties = [(penalty(c, labels), c) for c in (_constraint(found, *place) for place in constraints)]
        del found  # the words take more memory than the model
        model = literal_model(
            products, labels, scale=header.scale, constant=header.constant, convention=header.convention
        )
        remarks: tuple[str, ...] = ()
        if penalties:
            factor = 1 + sum(abs(weight) for weight in weights.tolist())
            for made, _ in penalties:
                if made is not None:
                    model = model + made * (factor * header.scale)
            remarks = (
                f"{len(penalties)} constraint{'s' if len(penalties) > 1 else ''} became penalties of weight {factor} "
                "(1 + the sum of absolute weights of the objective)",
            )
        return Reading(header.restored(model), remarks)
    except HubokitError as error:
        raise error.located(file=os.fspath(path)) from None


@dataclass
class OpbHeader(Header):
    """Comment lines of an OPB file: ours, and the counts of the first line."""

    said: dict[str, int] = field(default_factory=dict)

    def take(self, text: str, line: int) -> None:
        """Read one comment line."""
        super().take(text, line)
        if line == 1:
            for key, digits in re.findall(r"#(variable|constraint)= *(\d{1,18})\b", text):
                self.said[key] = int(digits)

    def check(self, largest: int, constraints: int) -> None:
        """Compare the counts of the first line with what was found.

        Raises
        ------
        InputError
            They differ.
        """
        if "variable" in self.said and largest > self.said["variable"]:
            raise InputError(f"x{largest} occurs, but the line says {self.said['variable']} variables", "line 1")
        if self.said.get("constraint", constraints) != constraints:
            raise InputError(
                f"the line says {self.said['constraint']} constraints, the file holds {constraints}", "line 1"
            )


def _statements(found: OpbWords) -> tuple[tuple[int, int], list[tuple[int, int, int]]]:
    """Where the objective stands (start, end) and every constraint (start, end, line)."""
    ends = np.flatnonzero(found.kinds == END)
    size = len(found.kinds)
    if (int(ends[-1]) + 1 if len(ends) else 0) < size:
        raise InputError("the last statement does not end with ; and the file may be cut", "end")
    starts = [0, *(ends[:-1] + 1).tolist()] if len(ends) else []
    places = list(zip(starts, ends.tolist(), found.end_lines.tolist(), strict=True))
    objective = (0, 0)
    if places and found.kinds[0] == MINIMISE:
        objective = (1, places[0][1])
        places = places[1:]
    extra = np.flatnonzero(found.kinds[1:] == MINIMISE)
    if len(extra):
        line = found.end_lines[np.searchsorted(ends, int(extra[0]) + 1)]
        raise InputError("min: stands only once, before the constraints", f"line {line}")
    if not places and objective == (0, 0) and not len(ends):
        raise InputError("there is no objective (min: ... ;) and no constraint in the file", "line 1")
    return objective, places


def _products(
    found: OpbWords, start: int, end: int
) -> tuple[list[tuple[NDArray[np.int64], NDArray[Any]]], NDArray[Any]]:
    """The weighted products between two places, grouped by length, and all weights."""
    kinds = found.kinds[start:end]
    heads = np.flatnonzero(kinds == NUMBER)
    line = found.line_of(start)
    if len(kinds) and kinds[0] != NUMBER:
        raise InputError("a term begins with its weight: +1 x1", f"line {line}")
    if (kinds < NUMBER).any():
        raise InputError("a relation (>=, =) in the objective", f"line {line}")
    lengths = np.diff(np.concatenate([heads, [len(kinds)]])) - 1
    weights = smallest_weights(found.numbers(start + heads))
    if (lengths == 0).any():
        place = start + int(heads[(lengths == 0).argmax()])
        raise InputError(
            f"the weight {found.numbers(np.array([place]))[0]} has no variable; a constant goes into a comment line "
            '* hubokit constant "..."',
            f"line {found.line_of(place)}",
        )
    literals = found.values[start:end][kinds != NUMBER]
    return grouped(literals, lengths, weights), weights


def _constraint(found: OpbWords, start: int, end: int, line: int) -> Constraint:
    kinds = found.kinds[start:end]
    relations = np.flatnonzero(kinds < NUMBER)
    if len(relations) != 1 or int(relations[0]) != len(kinds) - 2 or kinds[-1] != NUMBER:
        raise InputError("a constraint is like +1 x1 +1 x2 >= 1 ;", f"line {line}")
    if len(kinds) < 3 or kinds[0] != NUMBER:
        raise InputError("a term begins with its weight: +1 x1", f"line {line}")
    relation = found.relation(start + int(relations[0]))
    products, weights = [], found.numbers(start + np.flatnonzero(kinds[:-1] == NUMBER)).tolist()
    row: list[int] = []
    for kind, value in zip(kinds[1:-1].tolist(), found.values[start + 1 : end - 1].tolist(), strict=True):
        if kind <= NUMBER:
            if not row:
                raise InputError("a weight in the constraint has no variable", f"line {line}")
            products.append(tuple(row))
            row = []
        else:
            row.append(value)
    bound = int(found.numbers(np.array([end - 1]))[0])
    return Constraint(list(zip(products, weights, strict=True)), relation, bound, line)


def write_opb(model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False) -> None:
    """Write a model as one objective with products.

    Parameters
    ----------
    model : Hamiltonian
        A spin model is written in booleans; the comment lines say so and reading undoes it.

    Raises
    ------
    InputError
        The file exists and force is not set.
    LimitError
        The change of domain expands too far.
    """
    boolean = model.in_domain("boolean")

    def parts() -> Iterator[bytes]:
        products = [block for block in boolean.blocks if block.locality > 1]
        first = f"* #variable= {model.size} #constraint= 0"
        if products:
            size = sum(block.locality * len(block) for block in products)
            first += f" #product= {sum(map(len, products))} sizeproduct= {size}"
        lines = [
            first,
            "* energy = constant + scale * objective",
        ]
        lines += header_lines("*", model, scale=boolean.resolution, constant=boolean.constant, default=default_name)
        yield "".join(f"{line}\n" for line in lines).encode()
        yield b"min:"
        if not boolean.blocks and model.size:
            yield b" +0 x1"
        for block in boolean.blocks:
            yield _terms(block.members, block.weights)
        yield b" ;\n"

    write_bytes(path, parts(), force=force)


def _terms(members: NDArray[np.int32], weights: NDArray[Any]) -> bytes:
    """`` +2 x1 x3 -1 x2``: terms in the words of the objective, by array printing."""
    import orjson

    if weights.dtype == object:
        rows = (members + 1).tolist()
        return b"".join(
            f" {weight:+d} x{' x'.join(map(str, row))}".encode()
            for weight, row in zip(weights.tolist(), rows, strict=True)
        )
    table = np.hstack([weights.astype(np.int64)[:, None], members.astype(np.int64) + 1])
    text = orjson.dumps(np.ascontiguousarray(table), option=orjson.OPT_SERIALIZE_NUMPY)
    text = b" +" + text[2:-2].replace(b"],[", b" +").replace(b",", b" x")
    return text.replace(b"+-", b"-")
