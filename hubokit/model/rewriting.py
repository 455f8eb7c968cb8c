"""Rewriting variables in columns of terms: change of domain, renaming, complementing, merging, fixing, rounding."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from math import comb

import numpy as np
from numpy.typing import NDArray

from hubokit.errors import InputError
from hubokit.model.labels import as_label
from hubokit.model.numbers import INT64_BOUND, absolute_sum, smallest_weights, times
from hubokit.model.terms import ABSENT, Block, Part, refuse_expansion
from hubokit.model.trail import Origin


def boolean_parts(blocks: Iterable[Block], sign: int) -> list[Part]:
    """Spins written as ``s = sign * (2x - 1)``, in the same unit."""
    return affine_parts(blocks, -sign, 2 * sign)


def spin_parts(blocks: Sequence[Block], sign: int) -> list[Part]:
    """Booleans written as ``x = (1 + sign*s)/2``, in units of the old one over 2**locality."""
    top = max((block.locality for block in blocks), default=0)
    raised = [Block(block.members, times(block.weights, 2 ** (top - block.locality))) for block in blocks]
    return affine_parts(raised, 1, sign)


def rounded_parts(blocks: Iterable[Block], ratio: Fraction) -> list[Part]:
    """Weights times `ratio`, each to the nearest whole number, halves upwards."""
    top, bottom = 2 * ratio.numerator, 2 * ratio.denominator
    parts = []
    for block in blocks:
        weights = block.weights
        if (absolute_sum(weights) + 1) * (top + bottom) >= INT64_BOUND:
            weights = weights.astype(object)
        parts.append((block.members, smallest_weights((weights * top + bottom // 2) // bottom)))
    return parts


def substituted_parts(
    labels: Sequence[str], domain: str, blocks: Iterable[Block], origin: Mapping[str, Origin | int]
) -> tuple[tuple[str, ...], list[Part]]:
    """Labels and parts after `origin`; see `Hamiltonian.substituted`."""
    names: dict[str, int] = {}
    targets = np.full(len(labels), ABSENT, np.int64)
    negated = np.zeros(len(labels), bool)
    value = np.ones(len(labels), np.int64)
    allowed = (1, -1) if domain == "spin" else (0, 1)
    for position, label in enumerate(labels):
        image = origin.get(label, label)
        if isinstance(image, tuple):
            negated[position] = True
            image = image[1]
        if isinstance(image, str):
            targets[position] = names.setdefault(as_label(image), len(names))
        elif image in allowed:
            value[position] = int(image)
        else:
            raise InputError(f"{label} is fixed at {image}, which is no {domain} value")
    if domain == "spin":
        return tuple(names), spin_substitution(blocks, targets, np.where(negated, -value, value))
    return tuple(names), boolean_substitution(blocks, targets, negated, value == 0)


def affine_parts(blocks: Iterable[Block], offset: int, slope: int) -> list[Part]:
    """Every variable v replaced by ``offset + slope*v``, expanded: the subsets of each product, weighted.

    A term of locality k gives 2**k products.

    Raises
    ------
    LimitError
        More than ``EXPANSION_LIMIT`` products.
    """
    blocks = list(blocks)
    for block in blocks:
        refuse_expansion(len(block) << block.locality, f"a change of domain of {block.locality}-body terms")
    refuse_expansion(sum(len(b) << b.locality for b in blocks), "the change of domain")
    growth = abs(offset) + abs(slope)
    bound = sum(absolute_sum(block.weights) * growth**block.locality for block in blocks)
    kind = np.int64 if bound < INT64_BOUND else object
    parts = []
    for block in blocks:
        k, weights = block.locality, block.weights.astype(kind)
        for size in range(k + 1):
            factor = offset ** (k - size) * slope**size
            if factor == 0:
                continue
            subsets = list(itertools.combinations(range(k), size))
            members = block.members[:, np.array(subsets, dtype=np.intp).reshape(comb(k, size), size)]
            parts.append(
                (members.reshape(len(block) * comb(k, size), size), np.repeat(weights * factor, comb(k, size)))
            )
    return parts


def spin_substitution(blocks: Iterable[Block], targets: NDArray[np.int64], signs: NDArray[np.int64]) -> list[Part]:
    """Spin v replaced by ``signs[v]`` times the spin ``targets[v]`` (-1: nothing but the sign)."""
    return [(targets[block.members], block.weights * np.prod(signs[block.members], axis=1)) for block in blocks]


def boolean_substitution(
    blocks: Iterable[Block],
    targets: NDArray[np.int64],
    negated: NDArray[np.bool_],
    zero: NDArray[np.bool_],
) -> list[Part]:
    """Boolean v replaced by ``targets[v]`` (-1: one), by its complement where ``negated``, by 0 where ``zero``.

    A term with j complemented members gives 2**j products.

    Raises
    ------
    LimitError
        More than ``EXPANSION_LIMIT`` products.
    """
    parts = []
    count = 0
    for block in blocks:
        kept = ~zero[block.members].any(axis=1)
        members, weights = block.members[kept], block.weights[kept]
        flips = negated[members]
        number = np.bincount(flips.sum(axis=1), minlength=1) if len(members) else np.zeros(1, int)
        count += sum(int(m) << j for j, m in enumerate(number))
        refuse_expansion(count, "the complemented literals")
        rows = targets[members]
        for column in range(block.locality):
            flipped = flips[:, column]
            if flipped.any():
                dropped = rows[flipped].copy()
                dropped[:, column] = ABSENT
                rows = np.concatenate([rows, dropped])
                weights = np.concatenate([np.where(flipped, -weights, weights), weights[flipped]])
                flips = np.concatenate([flips, flips[flipped]])
        parts.append((rows, weights))
    return parts
