"""reduce(): a quadratic model for any Hamiltonian."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from typing import Any

import numpy as np

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import Number, as_fraction, format_fraction, times
from hubokit.model.trail import Step, Trail
from hubokit.reduction.gadgets.attach import Piece, attach, shared_resolution
from hubokit.reduction.gadgets.base import Keep
from hubokit.reduction.gadgets.table import FAMILIES, families_for, family, stand_in, wide_stand_in
from hubokit.reduction.result import Reduction

KEEPS = ("ground-states", "energies", "one-to-one")
PREFERENCES = ("auxiliaries", "range", "couplers")


def reduce(
    H: Hamiltonian,
    method: str = "auto",
    keep: str = "one-to-one",
    prefer: str = "auxiliaries",
    domain: str | None = None,
    auxiliary_gap: Number | None = None,
    seed: int = 0,
) -> Reduction:
    """Write a Hamiltonian as a quadratic one with auxiliaries.

    Parameters
    ----------
    H : Hamiltonian
    method : str
        ``"auto"``, or the name of a family, which then serves every term that it can; other terms get what ``"auto"``
        would give them.
    keep : {"one-to-one", "energies", "ground-states"}
        What must survive: every energy with exactly one best auxiliary setting a state, every energy, or the set of
        ground states.
    prefer : {"auxiliaries", "range", "couplers"}
        What to have least of: auxiliaries, coefficient ratio, couplers.
    domain : {"spin", "boolean"}, optional
        Domain of the reduced model; default the source's.
    auxiliary_gap : number, optional
        Least auxiliary gap asked for, in energy units. Default: the source's resolution for one-to-one, else 0 (ties
        between auxiliary settings are allowed).
    seed : int
        Seed of the searches that use chance.

    Returns
    -------
    Reduction

    Raises
    ------
    InputError
        An unknown word, a negative gap, a gap of 0 with one-to-one.
    LimitError
        A change of domain that would expand too far.

    Examples
    --------
    >>> R = reduce(Hamiltonian({("a", "b", "c"): -1}, "boolean"), keep="energies")
    >>> R.auxiliaries, str(R.model)
    (('y0',), '2 y0 - a y0 - b y0 - c y0')
    """
    gap = _checked(H, keep, prefer, domain, auxiliary_gap)
    if method != "auto":
        family(method)
    steps: list[Step] = []
    working = H
    if domain is not None and domain != H.domain:
        working = H.in_domain(domain)
        change = {"from": H.domain, "to": domain, "convention": H.convention}
        steps.append(Step("domain", H.digest, parameters=change))
    choice = chosen_families(working, method, keep, prefer)
    pieces = pieces_of(working, choice, gap, keep)
    model, auxiliaries = assembled(working, pieces, gap)
    parameters: dict[str, Any] = {
        "keep": keep,
        "prefer": prefer,
        "auxiliary gap": format_fraction(gap),
        "seed": seed,
        "methods": methods_of(pieces),
    }
    steps.append(Step("reduction", working.digest, auxiliaries=auxiliaries, parameters=parameters))
    trail = Trail(tuple(steps), source=H, source_digest=H.digest, keep=keep)
    return Reduction(H, model, auxiliaries, trail=trail)


def _checked(H: Hamiltonian, keep: str, prefer: str, domain: str | None, auxiliary_gap: Number | None) -> Fraction:
    """The auxiliary gap in energy units, after every word has been looked at."""
    for name, value, words in (
        ("keep", keep, KEEPS),
        ("prefer", prefer, PREFERENCES),
        ("domain", domain or H.domain, ("spin", "boolean")),
    ):
        if value not in words:
            raise InputError(f"{value!r} was given; it is one of {', '.join(words)}", name)
    if auxiliary_gap is None:
        return H.resolution if keep == "one-to-one" else Fraction(0)
    gap = as_fraction(auxiliary_gap, "auxiliary_gap")
    if gap < 0 or (gap == 0 and keep == "one-to-one"):
        raise InputError(f"{format_fraction(gap)} was given; it must be positive for {keep}", "auxiliary_gap")
    return gap


def chosen_families(H: Hamiltonian, method: str, keep: str, prefer: str) -> dict[tuple[int, int], str]:
    """Name of the family that serves each (locality, sign) of the model."""
    choice = {}
    for block in H.blocks:
        if block.locality < 3:
            continue
        for sign in (-1, 1):
            if not bool((block.weights * sign > 0).any()):
                continue
            options = families_for(H.domain, block.locality, sign)  # type: ignore[arg-type]
            named = [one for one in options if one.name == method]
            ranked = sorted(options, key=lambda one: _local_rank(one.name, block.locality, sign, keep, prefer))
            choice[block.locality, sign] = (named or ranked)[0].name
    return choice


def _local_rank(name: str, locality: int, sign: int, keep: Any, prefer: str) -> tuple[Any, ...]:
    """How a family compares for one term of weight 1 with the gap that `keep` needs."""
    shape = stand_in(name, locality, sign, keep)
    gap = Fraction(1 if keep == "one-to-one" else 0)
    sizes = [abs(value) for item, value in shape.coefficients(Fraction(1), gap).items() if item]
    ratio = max(sizes) / min(sizes)
    order = [one.name for one in FAMILIES].index(name)
    figures = {"auxiliaries": shape.auxiliaries, "range": ratio, "couplers": shape.couplers}
    return (figures.pop(prefer), *figures.values(), order)


def pieces_of(H: Hamiltonian, choice: dict[tuple[int, int], str], gap: Fraction, keep: str) -> list[Piece]:
    """The terms of three and more members, in canonical order, grouped by stand-in."""
    keep_word: Keep = keep  # type: ignore[assignment]
    pieces = []
    for block in H.blocks:
        for sign in (-1, 1):
            name = choice.get((block.locality, sign))
            if name is None:
                continue
            chosen = block.weights * sign > 0
            members, sizes = block.members[chosen], np.abs(block.weights[chosen])
            own = stand_in(name, block.locality, sign, keep_word)
            wide = np.zeros(len(sizes), bool) if own.reach is None else sizes < gap / (own.reach * H.resolution)
            for part, shape in ((~wide, own), (wide, wide_stand_in(name, block.locality, sign, keep_word))):
                if part.any():
                    pieces.append(Piece(shape, members[part], sizes[part], name))
    return pieces


def fresh_labels(labels: Sequence[str], count: int) -> tuple[str, ...]:
    """The first `count` of y0, y1, ... that are not among `labels`.

    Examples
    --------
    >>> fresh_labels(["a", "y1"], 3)
    ('y0', 'y2', 'y3')
    """
    taken = set(labels)
    found: list[str] = []
    number = 0
    while len(found) < count:
        label = f"y{number}"
        number += 1
        if label not in taken:
            found.append(label)
    return tuple(found)


def assembled(H: Hamiltonian, pieces: Iterable[Piece], gap: Fraction) -> tuple[Hamiltonian, tuple[str, ...]]:
    """The model with its short terms kept and every piece replaced by its stand-ins; and the auxiliaries."""
    pieces = list(pieces)
    resolution = shared_resolution(pieces, H.resolution, gap)
    factor = int(H.resolution / resolution)
    parts = [(b.members.astype(np.int64), times(b.weights, factor)) for b in H.blocks if b.locality < 3]
    first, constant = H.size, 0
    for piece in pieces:
        more, offset = attach(piece, first, H.resolution, gap, resolution)
        parts += more
        constant += offset
        first += piece.auxiliaries
    auxiliaries = fresh_labels(H.labels, first - H.size)
    model = Hamiltonian.from_arrays(
        [members for members, _ in parts],
        [weights for _, weights in parts],
        H.domain,
        labels=(*H.labels, *auxiliaries),
        resolution=resolution,
        constant=H.constant + constant * resolution,
        convention=H.convention,
    )
    return model, auxiliaries


def methods_of(pieces: Iterable[Piece]) -> list[dict[str, Any]]:
    """Rows for the trail: which family served how many terms of which locality, and the auxiliaries it took."""
    rows: dict[tuple[int, str], dict[str, Any]] = {}
    for piece in pieces:
        locality = int(piece.members.shape[1])
        row = rows.setdefault(
            (locality, piece.method), {"locality": locality, "method": piece.method, "terms": 0, "auxiliaries": 0}
        )
        row["terms"] += len(piece.sizes)
        row["auxiliaries"] += piece.auxiliaries
    return list(rows.values())
