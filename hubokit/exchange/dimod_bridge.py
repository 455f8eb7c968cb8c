"""dimod objects there and back: quadratic models of both vartypes, and binary polynomials of any degree.

dimod's own change of vartype is s = 2x - 1, so models from there carry that convention. Its biases are floats: a
coefficient leaves only when the float reads back as the same rational (a float means its shortest decimal).
"""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any, TypeAlias

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction, format_fraction

if TYPE_CHECKING:
    import dimod
    from dimod.higherorder.polynomial import BinaryPolynomial

    Polynomial: TypeAlias = BinaryPolynomial
    Quadratic: TypeAlias = dimod.BinaryQuadraticModel

_VARTYPE = {"spin": "SPIN", "boolean": "BINARY"}


def exact_float(value: Fraction, what: str) -> float:
    """The float that reads back as the same rational.

    Raises
    ------
    InputError
        There is none: the rational has more digits than a float holds.

    Examples
    --------
    >>> exact_float(Fraction(1, 10), "the constant")
    0.1
    """
    try:
        number = float(value)
        if as_fraction(number) == value:
            return number
    except (OverflowError, InputError):
        pass
    raise InputError(
        f"{what} is {format_fraction(value)[:60]}, which no float holds exactly; "
        "round the model to a coarser resolution first"
    )


def to_bqm(model: Hamiltonian) -> Quadratic:
    """A quadratic model as a dimod.BinaryQuadraticModel of the same domain.

    Parameters
    ----------
    model : Hamiltonian
        Locality at most 2.

    Raises
    ------
    InputError
        Products of more than two variables, or a coefficient that no float holds exactly.

    Examples
    --------
    >>> bqm = to_bqm(Hamiltonian({("a", "b"): "1/2", ("b",): 1, (): 3}, "spin"))
    >>> bqm.vartype.name, float(bqm.quadratic[("a", "b")]), float(bqm.offset)
    ('SPIN', 0.5, 3.0)
    """
    import dimod

    if model.locality > 2:
        raise InputError(
            f"the model has products of {model.locality} variables; reduce it first, or take to_polynomial"
        )
    bqm = dimod.BinaryQuadraticModel(_VARTYPE[model.domain], dtype=float)
    for label in model.labels:
        bqm.add_variable(label)
    for key, value in model.terms():
        number = exact_float(value, _named(key))
        if not key:
            bqm.offset += number
        elif len(key) == 1:
            bqm.add_linear(key[0], number)
        else:
            bqm.add_quadratic(key[0], key[1], number)
    return bqm


def to_polynomial(model: Hamiltonian) -> Polynomial:
    """A model of any locality as a dimod.BinaryPolynomial of the same domain.

    A variable that stands in no term is kept with a coefficient of zero.

    Raises
    ------
    InputError
        A coefficient that no float holds exactly.

    Examples
    --------
    >>> poly = to_polynomial(Hamiltonian({("a", "b", "c"): -1}, "boolean"))
    >>> poly[("a", "b", "c")], poly.vartype.name
    (-1.0, 'BINARY')
    """
    from dimod.higherorder.polynomial import BinaryPolynomial

    terms = {key: exact_float(value, _named(key)) for key, value in model.terms()}
    used = {label for key in terms for label in key}
    terms.update({(label,): 0.0 for label in model.labels if label not in used})
    made: Polynomial = BinaryPolynomial(terms, _VARTYPE[model.domain])
    return made


def from_dimod(thing: Quadratic | Polynomial) -> Hamiltonian:
    """A dimod model as a Hamiltonian; variables become strings.

    Parameters
    ----------
    thing : dimod.BinaryQuadraticModel or dimod.BinaryPolynomial
        Every bias is read as its shortest decimal.

    Raises
    ------
    InputError
        Another object, or two variables with the same name as strings (1 and "1").

    Examples
    --------
    >>> import dimod
    >>> from_dimod(dimod.BinaryQuadraticModel({0: 1}, {(0, 1): 0.1}, 2, "SPIN")).terms()
    [((), Fraction(2, 1)), (('0',), Fraction(1, 1)), (('0', '1'), Fraction(1, 10))]
    """
    import dimod
    from dimod.higherorder.polynomial import BinaryPolynomial

    coefficients: dict[tuple[str, ...], Any] = {}
    if isinstance(thing, dimod.BinaryQuadraticModel):
        variables = list(thing.variables)
        items = [((), thing.offset), *(((v,), b) for v, b in thing.linear.items()), *thing.quadratic.items()]
    elif isinstance(thing, BinaryPolynomial):
        variables = sorted(thing.variables, key=str)
        items = list(thing.items())
    else:
        raise InputError(f"a BinaryQuadraticModel or BinaryPolynomial is needed, not {type(thing).__name__}")
    names = {variable: str(variable) for variable in variables}
    if len(set(names.values())) < len(names):
        raise InputError("two variables have the same name as strings; relabel them first")
    for key, bias in items:
        coefficients[tuple(sorted(names[variable] for variable in key))] = as_fraction(bias, str(key)[:60])
    domain = "spin" if thing.vartype is dimod.SPIN else "boolean"
    return Hamiltonian(coefficients, domain, labels=list(names.values()), convention="2x-1")


def _named(key: tuple[str, ...]) -> str:
    return f"the coefficient of {' '.join(key)[:60]}" if key else "the constant"
