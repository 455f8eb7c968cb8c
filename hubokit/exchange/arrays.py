"""Models as arrays: the ``.npz`` file, and quadratic models as scipy sparse or dense numpy matrices.

An ``.npz`` file holds ``document``, the fields of a model document without its terms as JSON bytes (uint8), and for
each locality k ``members_k`` (int32, shape (m, k)) and ``weights_k`` (int64, or strings of digits beyond it). No
pickled object is written or read.
"""

from __future__ import annotations

import json
import os
import re
import zipfile
import zlib
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hubokit.errors import HubokitError, InputError, LimitError
from hubokit.exchange import files
from hubokit.exchange.json_text import parsed, quoted
from hubokit.exchange.model_document import model_fields
from hubokit.exchange.reading import Reading
from hubokit.exchange.schema_errors import kind_of, refuse_invalid
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import Number, as_fraction, exact_array

if TYPE_CHECKING:
    from scipy.sparse import coo_array

_KEY = re.compile(r"(members|weights)_([1-9]\d{0,5})\.npy")


def read_arrays(path: str | os.PathLike[str]) -> Hamiltonian:
    """The model of an ``.npz`` file; see `load_arrays`."""
    return load_arrays(path).model


def load_arrays(path: str | os.PathLike[str]) -> Reading:
    """The model of an ``.npz`` file.

    Raises
    ------
    InputError
        Not such a file; the array is named.
    LimitError
        The arrays inflate to more than ``INFLATE_LIMIT``.
    """
    name = os.fspath(path)
    try:
        for _ in files.pieces(name, limit=files.READ_LIMIT):
            break
        return Reading(_loaded(name))
    except HubokitError as error:
        raise error.located(file=name) from None
    except (OSError, ValueError, EOFError, KeyError, zipfile.BadZipFile, zlib.error, RuntimeError) as error:
        raise InputError(f"not an .npz file, or a damaged one: {str(error)[:100]}", file=name) from None
    except (TypeError, SyntaxError, MemoryError, OverflowError, NotImplementedError) as error:
        raise InputError(f"an array with a damaged header: {type(error).__name__}", file=name) from None


def _loaded(name: str) -> Hamiltonian:
    with zipfile.ZipFile(name) as archive:
        inside = archive.infolist()
        total = sum(entry.file_size for entry in inside)
        if total > files.INFLATE_LIMIT:
            raise LimitError(f"the arrays inflate to {total} bytes, more than the limit of {files.INFLATE_LIMIT}")
        names = [entry.filename for entry in inside]
    if len(set(names)) < len(names) or "document.npy" not in names:
        raise InputError('the array "document" is missing, or one stands twice')
    strange = next((n for n in names if n != "document.npy" and not _KEY.fullmatch(n)), None)
    if strange is not None:
        raise InputError(f"an array of an unknown name: {quoted(strange.removesuffix('.npy'))}")
    with np.load(name, allow_pickle=False) as stored:
        fields = stored["document"]
        if fields.dtype != np.uint8 or fields.ndim != 1:
            raise InputError("the array holds JSON bytes, uint8", "document")
        document = parsed(files.decoded(fields.tobytes()))
        if kind_of(document) != "model":
            raise InputError("a model document is needed", "document")
        refuse_invalid("model", {**document, "terms": []})
        sizes = sorted(int(match[2]) for match in map(_KEY.fullmatch, names) if match and match[1] == "members")
        members = [_members(stored, size) for size in sizes]
        values = [_weights(stored, size, len(rows)) for size, rows in zip(sizes, members, strict=True)]
    return Hamiltonian.from_arrays(
        members,
        values,
        domain=document["domain"],
        labels=document["variables"],
        resolution=document["resolution"],
        constant=document["constant"],
        convention=document["convention"],
    )


def _members(stored: Any, size: int) -> NDArray[Any]:
    rows: NDArray[Any] = stored[f"members_{size}"]
    if rows.dtype.kind not in "iu" or rows.ndim != 2 or rows.shape[1] != size:
        raise InputError(
            f"integers of shape (m, {size}) are needed, not {rows.dtype} {rows.shape}", f"members_{size}"
        )
    return rows


def _weights(stored: Any, size: int, count: int) -> NDArray[Any]:
    if f"weights_{size}" not in stored.files:
        raise InputError(f"there are members_{size} but no weights_{size}")
    values: NDArray[Any] = stored[f"weights_{size}"]
    if values.shape != (count,):
        raise InputError(f"{count} weights are needed, not an array of shape {values.shape}", f"weights_{size}")
    if values.dtype.kind == "U":
        if values.dtype.itemsize > 4 * 1000 or not all(re.fullmatch(r"-?\d+", text) for text in values.tolist()):
            raise InputError("weights as strings are whole numbers of at most 1000 digits", f"weights_{size}")
        return np.array([int(text) for text in values.tolist()], dtype=object)
    if values.dtype.kind not in "iu":
        raise InputError(f"weights are whole numbers, not {values.dtype}", f"weights_{size}")
    return values


def write_arrays(model: Hamiltonian, path: str | os.PathLike[str], *, force: bool = False) -> None:
    """Write a model as an ``.npz`` file.

    Raises
    ------
    InputError
        The file exists and force is not set.
    """
    fields = model_fields(model)
    stored: dict[str, NDArray[Any]] = {}
    for block in fields.pop("terms"):
        stored[f"members_{block['locality']}"] = np.asarray(block["members"], np.int32)
        stored[f"weights_{block['locality']}"] = np.asarray(block["weights"])
    text = json.dumps({**fields, "terms": []}, ensure_ascii=False).encode()
    with files.safe_path(path, force=force) as temporary, open(temporary, "wb") as stream:
        np.savez_compressed(stream, document=np.frombuffer(text, np.uint8), **stored)  # type: ignore[arg-type]


@dataclass(frozen=True)
class Matrices:
    """A quadratic model as a matrix: energy = constant + resolution * (v' A v + fields . v).

    Parameters
    ----------
    matrix : scipy.sparse.coo_array or ndarray, shape (n, n), int64
        Upper triangle, each pair once. The diagonal holds the fields of a boolean model and is zero for spins.
    fields : int64 array, shape (n,)
        Fields of a spin model; zero for booleans.
    resolution, constant : Fraction
    labels : tuple of str
    domain, convention : str
    """

    matrix: Any
    fields: NDArray[np.int64]
    resolution: Fraction
    constant: Fraction
    labels: tuple[str, ...]
    domain: str
    convention: str


def to_sparse(model: Hamiltonian) -> Matrices:
    """A quadratic model as a scipy sparse matrix and a vector of fields.

    Raises
    ------
    InputError
        Locality above 2.
    LimitError
        A weight beyond int64.

    Examples
    --------
    >>> M = to_sparse(Hamiltonian({("a", "b"): "3/2", ("a",): 1}, "spin"))
    >>> M.matrix.toarray().tolist(), M.fields.tolist(), M.resolution
    ([[0, 3], [0, 0]], [2, 0], Fraction(1, 2))
    """
    from scipy.sparse import coo_array

    rows, columns, values, fields = _narrow_parts(model)
    matrix: coo_array[Any] = coo_array((values, (rows, columns)), shape=(model.size, model.size), dtype=np.int64)
    return Matrices(matrix, fields, model.resolution, model.constant, model.labels, model.domain, model.convention)


def to_dense(model: Hamiltonian) -> Matrices:
    """A quadratic model as a dense numpy matrix and a vector of fields.

    Raises
    ------
    InputError, LimitError
        As `to_sparse`, or more than 20,000 variables.

    Examples
    --------
    >>> to_dense(Hamiltonian({("a", "b"): 3, ("b",): -1}, "boolean")).matrix.tolist()
    [[0, 3], [0, -1]]
    """
    if model.size > 20_000:
        raise LimitError(f"a dense matrix of {model.size} variables; take to_sparse")
    rows, columns, values, fields = _narrow_parts(model)
    matrix = np.zeros((model.size, model.size), np.int64)
    matrix[rows, columns] = values
    return Matrices(matrix, fields, model.resolution, model.constant, model.labels, model.domain, model.convention)


def quadratic_parts(
    model: Hamiltonian,
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[Any], NDArray[Any]]:
    """Rows, columns and values of the upper triangle, and the fields of a spin model; objects beyond int64."""
    if model.locality > 2:
        raise InputError(f"the model has products of {model.locality} variables; a matrix holds two; reduce it first")
    kind = object if any(block.weights.dtype == object for block in model.blocks) else np.int64
    fields = np.zeros(model.size, kind)
    rows, columns, values = [np.zeros(0, np.int64)], [np.zeros(0, np.int64)], [np.zeros(0, kind)]
    for block in model.blocks:
        if block.locality == 1 and model.domain == "spin":
            fields[block.members[:, 0]] = block.weights
        else:
            rows.append(block.members[:, 0].astype(np.int64))
            columns.append(block.members[:, -1].astype(np.int64))
            values.append(block.weights.astype(kind))
    return np.concatenate(rows), np.concatenate(columns), np.concatenate(values), fields


def _narrow_parts(
    model: Hamiltonian,
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    rows, columns, values, fields = quadratic_parts(model)
    if max((abs(v) for v in [*values.tolist(), *fields.tolist()]), default=0) >= 2**63:
        raise LimitError("a weight is beyond int64; round the model to a coarser resolution")
    return rows, columns, values.astype(np.int64), fields.astype(np.int64)


def from_matrix(
    matrix: Any,
    domain: str,
    fields: ArrayLike | None = None,
    labels: Iterable[str] | None = None,
    resolution: Number = 1,
    constant: Number = 0,
    convention: str = "1-2x",
) -> Hamiltonian:
    """``constant + resolution * (v' A v + fields . v)`` from a sparse or dense matrix.

    Parameters
    ----------
    matrix : scipy sparse array or array_like, shape (n, n)
        Any of its triangles or both: entries (i, j) and (j, i) are added. Floats are read as their shortest decimals.
    domain : "spin" or "boolean"
        A spin matrix has a diagonal of zeros, since s*s = 1.
    fields : array_like, shape (n,), optional

    Raises
    ------
    InputError
        A matrix that is not square, fields of another length, or a spin matrix with a diagonal.

    Examples
    --------
    >>> print(from_matrix([[1, 2], [3, 0]], "boolean", labels=["a", "b"]))
    a + 5 a b
    """
    if hasattr(matrix, "tocoo"):
        entries = matrix.tocoo()
        shape, rows, columns, values = entries.shape, entries.row, entries.col, entries.data
    else:
        dense = exact_array(matrix)
        shape = dense.shape
        rows, columns = np.nonzero(dense) if dense.ndim == 2 else (np.zeros(0, int), np.zeros(0, int))
        values = dense[rows, columns] if dense.ndim == 2 else dense
    if len(shape) != 2 or shape[0] != shape[1]:
        raise InputError(f"a square matrix is needed, not one of shape {tuple(shape)}", "matrix")
    if domain == "spin" and (rows == columns).any():
        raise InputError("a spin matrix has no diagonal, since s*s = 1; give fields apart", "matrix")
    members = [np.stack([rows, columns], axis=1).astype(np.int64)]
    weights = [np.asarray(values)]
    if fields is not None:
        vector = exact_array(fields)
        if vector.shape != (shape[0],):
            raise InputError(f"{shape[0]} fields are needed, not an array of shape {vector.shape}", "fields")
        members.append(np.arange(shape[0])[:, None])
        weights.append(vector)
    return Hamiltonian.from_arrays(
        members,
        weights,
        domain=domain,
        labels=labels,
        size=shape[0],
        resolution=as_fraction(resolution),
        constant=as_fraction(constant),
        convention=convention,
    )
