"""What a foreign file format cannot say itself, kept in comment lines or in a sidecar ``NAME.names.json``.

A comment line is the mark of the format, ``hubokit``, a key and a JSON value::

    * hubokit domain "spin"
    * hubokit name 1 "valve 1"

Keys: ``variables`` (their number), ``domain``, ``convention``, ``scale``, ``constant`` and ``name`` (with a number).
The energy of the model is ``constant + scale * value``, where value is what the file says. The sidecar is a JSON
object with the same keys and ``names``, a list.
"""

from __future__ import annotations

import json
import os
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import Any

from hubokit.errors import InputError, LimitError
from hubokit.exchange.files import read_text
from hubokit.exchange.json_text import parsed, quoted
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.labels import as_label, as_labels
from hubokit.model.numbers import as_fraction, format_fraction
from hubokit.model.states import CONVENTIONS, DOMAINS

VARIABLE_LIMIT = 2**20
"""A file that counts more variables than this is refused."""


@dataclass
class Header:
    """Facts about a model gathered from comment lines or a sidecar, while a file is read.

    Parameters
    ----------
    domain : str, optional
        Domain of the model that the file stands for, where it was changed for the file.
    convention : str
    scale, constant : Fraction
        Energy = constant + scale * value of the file.
    names : dict of int to str
        Number of the variable in the file, from 1, to its name.
    variables : int, optional
        How many there are.
    touched : bool
        Whether the file itself said anything; then a sidecar is not looked for.
    digest : str, optional
        Function digest of the model, where a sidecar says it.
    """

    domain: str | None = None
    convention: str = "1-2x"
    scale: Fraction = Fraction(1)
    constant: Fraction = Fraction(0)
    names: dict[int, str] = field(default_factory=dict)
    variables: int | None = None
    touched: bool = False
    digest: str | None = None

    def take(self, text: str, line: int) -> None:
        """Read one comment line; what is not ours is passed over.

        Raises
        ------
        InputError
            A line that begins with ``hubokit`` and cannot be read.
        """
        if not text.startswith("hubokit "):
            return
        self.touched = True
        place = f"line {line}"
        _, key, *rest = text.split(None, 2)
        number: int | None = None
        value = rest[0] if rest else ""
        if key == "name":
            digits, _, value = value.partition(" ")
            if not digits.isascii() or not digits.isdigit() or len(digits) > 9:
                raise InputError('a name line is like: hubokit name 3 "valve"', place)
            number = int(digits)
        try:
            self.put(key, json.loads(value), number, place)
        except (ValueError, RecursionError) as error:
            if isinstance(error, InputError):
                raise
            raise InputError(f"the value of {quoted(key)} is not JSON", place) from None

    def put(self, key: str, value: Any, number: int | None, place: str) -> None:
        """Set one fact.

        Raises
        ------
        InputError
            An unknown key, or a value that is none for it.
        """
        if key in ("domain", "convention"):
            choices = DOMAINS if key == "domain" else CONVENTIONS
            if value not in choices:
                raise InputError(f"the {key} is {' or '.join(choices)}, not {quoted(value)}", place)
            setattr(self, key, value)
        elif key in ("scale", "constant"):
            if not isinstance(value, str):
                raise InputError(f'the {key} is a string like "3/2", not {quoted(value)}', place)
            setattr(self, key, as_fraction(value, place))
            if self.scale <= 0:
                raise InputError(f"the scale is {quoted(value)}; it must be positive", place)
        elif key == "digest":
            self.digest = str(value)
        elif key == "variables":
            if type(value) is not int or value < 0:
                raise InputError(f"the number of variables is a whole number, not {quoted(value)}", place)
            refuse_many(value, place)
            self.variables = value
        elif key == "name" and number is not None:
            if number in self.names:
                raise InputError(f"variable {number} has a name already", place)
            self.names[number] = as_label(value, place)
        else:
            raise InputError(f"an unknown key: {quoted(key)}", place)

    def count(self, largest: int) -> int:
        """Number of variables where the file itself only shows that there are `largest` at least."""
        if self.variables is None:
            return max(largest, *self.names) if self.names else largest
        if self.variables < largest:
            raise InputError(f"variable {largest} occurs, but there are {self.variables} variables")
        return self.variables

    def labels(self, count: int, default: Callable[[int], str]) -> tuple[str, ...]:
        """Names of variables 1 to `count`; `default` names those without one.

        Raises
        ------
        InputError
            A name for a variable that the file does not have, or a name twice.
        LimitError
            More than ``VARIABLE_LIMIT`` variables.
        """
        refuse_many(count)
        beyond = [number for number in self.names if not 1 <= number <= count]
        if beyond:
            raise InputError(f"a name for variable {beyond[0]}, but the file has variables 1 to {count}")
        return as_labels(self.names.get(number) or default(number) for number in range(1, count + 1))

    def restored(self, model: Hamiltonian) -> Hamiltonian:
        """The model in the domain that it had before it was written.

        Raises
        ------
        InputError
            The sidecar belongs to another model.
        LimitError
            The change of domain expands too far.
        """
        if self.domain is not None:
            model = model.in_domain(self.domain, self.convention)
        if self.digest is not None and self.digest != model.digest:
            raise InputError(
                "the file and its sidecar .names.json do not belong together: the digest is another; "
                "take the digest out of the sidecar to accept the change"
            )
        return model


def refuse_many(count: int, place: str | None = None) -> None:
    """Raise for a file that counts more than ``VARIABLE_LIMIT`` variables."""
    if count > VARIABLE_LIMIT:
        raise LimitError(f"the file counts {count} variables; at most {VARIABLE_LIMIT} are read", place)


def header_lines(
    mark: str, model: Hamiltonian, *, scale: Fraction, constant: Fraction, default: Callable[[int], str]
) -> list[str]:
    """The comment lines for a model; names only where they are not the default.

    Examples
    --------
    >>> H = Hamiltonian({("x1", "b c"): 1}, "spin")
    >>> for line in header_lines("*", H, scale=Fraction(1), constant=Fraction(0), default=lambda i: f"x{i}"):
    ...     print(line)
    * hubokit variables 2
    * hubokit domain "spin"
    * hubokit convention "1-2x"
    * hubokit scale "1"
    * hubokit constant "0"
    * hubokit name 2 "b c"
    """
    facts = {
        "domain": model.domain,
        "convention": model.convention,
        "scale": format_fraction(scale),
        "constant": format_fraction(constant),
    }
    lines = [f"{mark} hubokit variables {model.size}"]
    lines += [f"{mark} hubokit {key} {json.dumps(value)}" for key, value in facts.items()]
    lines += [
        f"{mark} hubokit name {number} {json.dumps(label)}"
        for number, label in enumerate(model.labels, start=1)
        if label != default(number)
    ]
    return lines


def sidecar_path(path: str | os.PathLike[str]) -> Path:
    """``NAME.names.json`` beside ``NAME.suffix`` (or ``NAME.suffix.gz``).

    Examples
    --------
    >>> sidecar_path("plan.mps.gz").name
    'plan.names.json'
    """
    target = Path(path)
    stem = target.name.removesuffix(".gz")
    return target.with_name(Path(stem).stem + ".names.json")


def sidecar_text(names: Sequence[str], facts: Mapping[str, str]) -> str:
    """The text of a sidecar: the facts, one a line, and the names, one a line."""
    lines = [f" {json.dumps(key)}: {json.dumps(value)}" for key, value in facts.items()]
    listed = ",\n  ".join(json.dumps(name, ensure_ascii=False) for name in names)
    return "{" + ",\n".join([*lines, f' "names": [\n  {listed}]'])[1:] + "}\n"


def read_sidecar(path: str | os.PathLike[str], header: Header) -> bool:
    """Take the facts of the sidecar of `path` into the header, where there is one.

    Raises
    ------
    InputError
        The sidecar cannot be read.
    """
    side = sidecar_path(path)
    if not side.is_file():
        return False
    try:
        facts = parsed(read_text(side))
        if not isinstance(facts, dict):
            raise InputError("a sidecar is a JSON object")
        names = facts.pop("names", [])
        if not isinstance(names, list):
            raise InputError("a list of names is needed", "/names")
        for key, value in facts.items():
            header.put(key, value, None, f"/{key}")
        header.names = {n: as_label(name, f"/names/{n - 1}") for n, name in enumerate(names, start=1)}
    except InputError as error:
        raise error.located(file=str(side)) from None
    return True
