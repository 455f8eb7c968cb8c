"""The canonical bytes of a document, and the digest over them.

RFC 8785 (Rundgren, Jordan, Erdtman 2020, "JSON Canonicalization Scheme"): no white space, keys in the order of their
UTF-16 code units, numbers as ECMAScript prints them. Integers of at most 2**53 print as plain digits there, so the
arrays of a million terms are printed by a compiled printer and put in their place among the small parts.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np


def canonical_parts(value: Any) -> Iterator[bytes]:
    """The RFC 8785 form in parts that belong one after the other.

    Parameters
    ----------
    value : JSON value
        Besides dict, list, str, int, float, bool and None it may hold integer arrays of absolute value at most
        2**53 - 1, which stand for lists (of lists).

    Raises
    ------
    rfc8785.CanonicalizationError
        A value that RFC 8785 cannot carry.

    Examples
    --------
    >>> b"".join(canonical_parts({"b": np.array([[0, 1]]), "a": 1.0, "c": ["x"]}))
    b'{"a":1,"b":[[0,1]],"c":["x"]}'
    """
    import orjson
    import rfc8785

    if isinstance(value, np.ndarray):
        yield orjson.dumps(np.ascontiguousarray(value), option=orjson.OPT_SERIALIZE_NUMPY)
    elif isinstance(value, Mapping):
        yield b"{"
        for place, key in enumerate(sorted(value, key=lambda text: text.encode("utf-16-be"))):
            yield (b"," if place else b"") + rfc8785.dumps(key) + b":"
            yield from canonical_parts(value[key])
        yield b"}"
    elif isinstance(value, (list, tuple)):
        if all(type(item) is str for item in value):
            yield orjson.dumps(value)
            return
        yield b"["
        for place, item in enumerate(value):
            if place:
                yield b","
            yield from canonical_parts(item)
        yield b"]"
    else:
        yield rfc8785.dumps(value)


def document_digest(document: Mapping[str, Any]) -> str:
    """SHA-256 over the canonical form of every field but ``digests``.

    Parameters
    ----------
    document : mapping
        The fields of a document; term arrays may be numpy arrays.

    Returns
    -------
    str
        ``"sha256:"`` and 64 hexadecimal digits.

    Examples
    --------
    >>> document_digest({"a": 1}) == document_digest({"a": 1, "digests": {}})
    True
    """
    digest = hashlib.sha256()
    for part in canonical_parts({key: value for key, value in document.items() if key != "digests"}):
        digest.update(part)
    return "sha256:" + digest.hexdigest()
