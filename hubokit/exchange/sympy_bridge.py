"""sympy expressions there and back (sympy is optional)."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from typing import Any

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian


def _sympy() -> Any:
    try:
        import sympy
    except ImportError:
        raise InputError("sympy is not installed; pip install sympy") from None
    return sympy


def to_sympy(model: Hamiltonian) -> Any:
    """The model as an expanded sympy expression with rational coefficients; symbols bear the variables' names.

    Raises
    ------
    InputError
        sympy is not installed.

    Examples
    --------
    >>> to_sympy(Hamiltonian({("a", "b"): "1/2", (): 3}, "spin"))
    a*b/2 + 3
    """
    sympy = _sympy()
    symbols = {label: sympy.Symbol(label) for label in model.labels}
    terms = [
        sympy.Mul(sympy.Rational(value.numerator, value.denominator), *(symbols[label] for label in key))
        for key, value in model.terms()
    ]
    return sympy.Add(*terms)


def from_sympy(
    expression: Any, domain: str, labels: Iterable[str] | None = None, convention: str = "1-2x"
) -> Hamiltonian:
    """A polynomial expression as a model; powers are reduced (s*s = 1, x*x = x).

    Parameters
    ----------
    expression : sympy expression
        A polynomial in its symbols with rational coefficients; a sympy Float means its shortest decimal.
    domain : "spin" or "boolean"
    labels : iterable of str, optional
        By default the symbols in alphabetical order.

    Raises
    ------
    InputError
        No polynomial, a coefficient that is not rational, two symbols of one name, or sympy is not installed.

    Examples
    --------
    >>> import sympy
    >>> a, b = sympy.symbols("a b")
    >>> print(from_sympy((a - b) ** 2, "boolean"))
    a + b - 2 a b
    """
    sympy = _sympy()
    expression = sympy.sympify(expression)
    symbols = sorted(expression.free_symbols, key=lambda symbol: symbol.name)
    names = [symbol.name for symbol in symbols]
    if len(set(names)) < len(names):
        raise InputError("two symbols have the same name")
    coefficients: dict[tuple[str, ...], Any] = {}
    try:
        listed = sympy.Poly(expression, *symbols).terms() if symbols else [((), expression)]
    except sympy.PolynomialError as error:
        raise InputError(f"not a polynomial: {str(error)[:100]}") from None
    for powers, coefficient in listed:
        key = tuple(name for name, power in zip(names, powers, strict=True) for _ in range(_reduced(power, domain)))
        coefficients[key] = coefficients.get(key, 0) + _rational(coefficient)
    return Hamiltonian(coefficients, domain, labels=names if labels is None else labels, convention=convention)


def _reduced(power: int, domain: str) -> int:
    return power % 2 if domain == "spin" else min(power, 1)


def _rational(coefficient: Any) -> Fraction:
    if coefficient.is_Rational:
        return Fraction(int(coefficient.p), int(coefficient.q))
    if coefficient.is_Float:
        return Fraction(repr(float(coefficient)))
    raise InputError(f"a coefficient is not rational: {str(coefficient)[:60]}")
