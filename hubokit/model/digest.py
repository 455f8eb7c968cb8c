"""The digest of a function: equal for two models exactly when they are the same function of the same variables.

SHA-256 over the canonical JSON (RFC 8785) of

    {"constant": "3/2", "domain": "spin",
     "terms": [{"coefficients": ["1/2", "-2"], "locality": 1, "members": [[0], [3]]}, ...],
     "variables": ["a", "b", ...]}

with the variables in code point order (NFC), members as positions in that order, the terms of each locality in
lexicographic order of their members, and coefficients in lowest terms.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hubokit.model.numbers import format_fraction
from hubokit.model.terms import Block, canonical_blocks


def function_digest(
    domain: str, labels: Sequence[str], constant: Fraction, resolution: Fraction, blocks: Sequence[Block]
) -> str:
    """``"sha256:..."`` of the function, independent of the order of the variables."""
    import orjson

    order = sorted(range(len(labels)), key=labels.__getitem__)
    if order != list(range(len(labels))):
        rank = np.empty(len(labels), np.int32)
        rank[order] = np.arange(len(labels), dtype=np.int32)
        _, blocks = canonical_blocks(((rank[block.members], block.weights) for block in blocks), domain)
    terms = [
        {
            "coefficients": coefficient_texts(block.weights, resolution),
            "locality": block.locality,
            "members": np.ascontiguousarray(block.members),
        }
        for block in blocks
    ]
    document = {
        "constant": format_fraction(constant),
        "domain": domain,
        "terms": terms,
        "variables": [labels[position] for position in order],
    }
    canonical = orjson.dumps(document, option=orjson.OPT_SERIALIZE_NUMPY)
    return "sha256:" + hashlib.sha256(canonical).hexdigest()


def coefficient_texts(weights: NDArray[Any], resolution: Fraction) -> list[str]:
    """``weights * resolution`` as rationals in lowest terms.

    Examples
    --------
    >>> coefficient_texts(np.array([1, -4]), Fraction(1, 2))
    ['1/2', '-2']
    """
    if len(weights) == 0:
        return []
    values, places = np.unique(weights, return_inverse=True)
    texts = [format_fraction(int(value) * resolution) for value in values.tolist()]
    return np.array(texts, dtype=object)[places].tolist()  # type: ignore[no-any-return]
