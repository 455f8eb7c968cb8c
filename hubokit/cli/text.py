"""Plain text that reads well at 80 columns: tables, named fields, numbers, names that are safe to print."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence
from fractions import Fraction

WIDTH = 80
INDENT = "  "


def printable(text: str) -> str:
    r"""The text with control and format characters written as escapes, so that a name cannot steer a terminal.

    Examples
    --------
    >>> print(printable("valve\x1b[2J"))
    valve\x1b[2J
    """
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)


def number(value: Fraction | int | float | None, none: str = "none") -> str:
    """A figure as text: whole numbers and fractions exactly, very long ones shortened, floats to three digits.

    Examples
    --------
    >>> number(Fraction(3, 2)), number(-4), number(None), number(2.5), number(10**60)
    ('3/2', '-4', 'none', '2.5', 'about 1e+60')
    """
    if value is None:
        return none
    if isinstance(value, float):
        return f"{value:.3g}"
    exact = Fraction(value)
    if exact.numerator.bit_length() + exact.denominator.bit_length() <= 128:
        return str(exact)
    try:
        return f"about {float(exact):.6g}"
    except OverflowError:
        power = exact.numerator.bit_length() - exact.denominator.bit_length()
        return f"about {'-' if exact < 0 else ''}2^{power}"


def count(amount: int, one: str, many: str | None = None) -> str:
    """An amount with its noun.

    Examples
    --------
    >>> count(1, "state"), count(3, "auxiliary", "auxiliaries")
    ('1 state', '3 auxiliaries')
    """
    return f"{amount} {one if amount == 1 else (many or one + 's')}"


def fields(pairs: Iterable[tuple[str, str]], column: int = 16) -> str:
    """Named values one below the other, long values folded under their own column.

    Examples
    --------
    >>> print(fields([("variables", "14 boolean"), ("gap", "1")]))
      variables       14 boolean
      gap             1
    """
    lines = []
    for name, value in pairs:
        first = f"{INDENT}{name:<{column - 1}} "
        rest = " " * (len(INDENT) + column)
        folded = textwrap.wrap(
            printable(value), WIDTH, initial_indent=first, subsequent_indent=rest, break_long_words=False,
            break_on_hyphens=False,
        )  # fmt: skip
        lines += folded or [first.rstrip()]
    return "\n".join(lines)


def folded(text: str, indent: int) -> list[str]:
    """A text as lines of at most 80 characters, indented, the later ones two more."""
    return textwrap.wrap(
        printable(text), WIDTH, initial_indent=" " * indent, subsequent_indent=" " * (indent + 2),
        break_long_words=False, break_on_hyphens=False,
    )  # fmt: skip


def table(header: Sequence[str], rows: Iterable[Sequence[str]], align: str = "") -> str:
    """Columns under a header; the last column is folded so that no line passes 80 characters.

    Parameters
    ----------
    header : sequence of str
        The title of each column.
    rows : iterable of sequences of str
        One text a column.
    align : str
        One letter a column, ``l`` or ``r``; missing letters mean ``l``.

    Returns
    -------
    str
        The lines, indented like every section.

    Examples
    --------
    >>> print(table(["energy", "states"], [["-3", "4"], ["0", "12"]], align="rr"))
      energy  states
          -3       4
           0      12
    """
    body = [[printable(cell) for cell in row] for row in rows]
    align = align.ljust(len(header), "l")
    widths = [max(len(row[i]) for row in [list(header), *body]) for i in range(len(header))]
    left = sum(widths[:-1]) + 2 * (len(widths) - 1) + len(INDENT)
    widths[-1] = min(widths[-1], max(WIDTH - left, 24))
    lines = []
    for row in [list(header), *body]:
        tail = textwrap.wrap(row[-1], widths[-1], break_on_hyphens=False) or [""]
        cells = [*row[:-1], tail[0]]
        placed = [c.rjust(w) if a == "r" else c.ljust(w) for c, w, a in zip(cells, widths, align, strict=True)]
        lines.append((INDENT + "  ".join(placed)).rstrip())
        lines += [" " * left + more for more in tail[1:]]
    return "\n".join(lines)


def listing(names: Sequence[str], limit: int = 12) -> str:
    """Names in a row, cut after a limit with the number left out.

    Examples
    --------
    >>> listing(["a", "b", "c"], limit=2)
    'a, b and 1 more'
    """
    if len(names) <= limit:
        return ", ".join(names)
    return f"{', '.join(names[:limit])} and {len(names) - limit} more"


def size_of(octets: int) -> str:
    """A file size in words.

    Examples
    --------
    >>> size_of(812), size_of(20480)
    ('812 B', '20.5 kB')
    """
    if octets < 1000:
        return f"{octets} B"
    if octets < 1_000_000:
        return f"{octets / 1000:.1f} kB"
    return f"{octets / 1_000_000:.1f} MB"


def section(title: str, *parts: str) -> str:
    """A titled block: the title, its lines, and an empty line.

    Examples
    --------
    >>> print(section("FILES", "  one"))
    FILES
      one
    <BLANKLINE>
    """
    return "\n".join([printable(title), *(part for part in parts if part), ""])
