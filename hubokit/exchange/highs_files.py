"""MPS and LP files written and read by HiGHS.

HiGHS is compiled code that may not survive every damaged file and prints on standard output, so it runs in a process
of its own with bounded size and time; whatever happens there becomes one error here.
"""

from __future__ import annotations

import io
import os
import re
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

from hubokit.errors import InputError
from hubokit.exchange.files import read_text
from hubokit.exchange.json_text import quoted
from hubokit.exchange.programs import Program

PROGRAM_LIMIT = 2**28
"""Largest MPS or LP file that is read, in bytes."""

TIME_LIMIT = 600
"""Seconds after which the reading process is stopped."""

_READER = """
import sys
import numpy as np
import highspy

source, target = sys.argv[1:]
solver = highspy.Highs()
solver.setOptionValue("output_flag", False)
status = solver.readModel(source)
if status == highspy.HighsStatus.kError:
    sys.exit(3)
lp = solver.getLp()
if solver.getModel().hessian_.dim_:
    sys.exit(4)
if lp.sense_ != highspy.ObjSense.kMinimize:
    sys.exit(5)
lp.a_matrix_.ensureRowwise() if hasattr(lp.a_matrix_, "ensureRowwise") else None
whole = [kind == highspy.HighsVarType.kInteger for kind in lp.integrality_] or [False] * lp.num_col_
np.savez(
    target,
    names="\\n".join(lp.col_names_),
    cost=np.array(lp.col_cost_, float),
    whole=np.array(whole, bool),
    low=np.array(lp.col_lower_, float),
    high=np.array(lp.col_upper_, float),
    lower=np.array(lp.row_lower_, float),
    upper=np.array(lp.row_upper_, float),
    rowwise=lp.a_matrix_.format_ == highspy.MatrixFormat.kRowwise,
    starts=np.array(lp.a_matrix_.start_, np.int64),
    columns=np.array(lp.a_matrix_.index_, np.int64),
    values=np.array(lp.a_matrix_.value_, float),
    offset=float(lp.offset_),
    rows=lp.num_row_,
)
"""

_WRITER = """
import sys
import numpy as np
import highspy

source, target = sys.argv[1:]
stored = np.load(source)
lp = highspy.HighsLp()
lp.col_cost_ = stored["cost"]
lp.num_col_, lp.num_row_ = len(stored["cost"]), len(stored["lower"])
lp.col_lower_, lp.col_upper_ = np.zeros(lp.num_col_), np.ones(lp.num_col_)
lp.row_lower_, lp.row_upper_ = stored["lower"], stored["upper"]
lp.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
lp.a_matrix_.start_, lp.a_matrix_.index_, lp.a_matrix_.value_ = stored["starts"], stored["columns"], stored["values"]
whole, free = highspy.HighsVarType.kInteger, highspy.HighsVarType.kContinuous
lp.integrality_ = [whole if binary else free for binary in stored["binary"]]
lp.col_names_ = str(stored["names"]).split("\\n")
lp.row_names_ = [f"c{number}" for number in range(1, lp.num_row_ + 1)]
solver = highspy.Highs()
solver.setOptionValue("output_flag", False)
if solver.passModel(lp) == highspy.HighsStatus.kError or solver.writeModel(target) == highspy.HighsStatus.kError:
    sys.exit(6)
"""

_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?|[+-]?[iI]nf(inity)?")

_REASONS = {
    3: "HiGHS does not read the file as a linear program",
    4: "a quadratic objective; write the products as columns, or use .opb",
    6: "HiGHS cannot write the program",
    5: "the objective is maximised; turn all signs round and minimise",
}


def highs_write(program: Program, path: Path, kind: str) -> None:
    """Write a program as an MPS or LP file, by the kind, "mps" or "lp", whatever the suffix.

    Raises
    ------
    InputError
        HiGHS does not take the program or cannot write the file.
    """
    with tempfile.TemporaryDirectory() as folder:
        source = os.path.join(folder, "program.npz")
        np.savez(
            source,
            names="\n".join(program.names),
            cost=program.cost,
            binary=program.binary,
            lower=program.lower,
            upper=program.upper,
            starts=program.starts,
            columns=program.columns,
            values=program.values,
        )
        target = os.path.join(folder, f"written.{kind}")
        _in_child(_WRITER, source, target)
        shutil.copyfile(target, path)


def _in_child(script: str, source: str, target: str) -> None:
    try:
        command = [sys.executable, "-P", "-c", script, source, target]
        done = subprocess.run(command, capture_output=True, timeout=TIME_LIMIT, check=False)
    except subprocess.TimeoutExpired:
        raise InputError(f"HiGHS did not come to an end within {TIME_LIMIT} seconds") from None
    if done.returncode != 0:
        raise InputError(_REASONS.get(done.returncode, "HiGHS failed on the file; it may be damaged"))


def refuse_damaged(text: str, *, mps: bool) -> None:
    """Raise for what HiGHS passes over: a missing end, and in MPS files numbers that are none.

    Raises
    ------
    InputError
        With the line.

    Examples
    --------
    >>> refuse_damaged("NAME\\nROWS\\n N c\\nCOLUMNS\\n x c 5q\\nENDATA", mps=True)
    Traceback (most recent call last):
    hubokit.errors.InputError: line 5: "5q" is no number
    """
    lines = text.split("\n")
    last = next((place for place in range(len(lines), 0, -1) if lines[place - 1].strip()), 1)
    if lines[last - 1].strip().lower() != ("endata" if mps else "end"):
        raise InputError(f"the file does not end with {'ENDATA' if mps else 'end'}; it may be cut", f"line {last}")
    if not mps:
        return
    section = ""
    for number, line in enumerate(lines, start=1):
        words = line.split()
        if not words or line.startswith("*"):
            continue
        if not line[0].isspace():
            section = words[0].upper()
            continue
        for word in _number_words(section, words):
            if not _NUMBER.fullmatch(word):
                raise InputError(f"{quoted(word)} is no number", f"line {number}")


def _number_words(section: str, words: list[str]) -> list[str]:
    """The words of a line of an MPS file that must be numbers."""
    if section == "COLUMNS":
        return [] if "'MARKER'" in words else words[2::2]
    if section in ("RHS", "RANGES"):
        return words[2::2] if len(words) % 2 else words[1::2]
    if section == "BOUNDS":
        return words[3:]
    return []


def highs_read(name: str, kind: str) -> Program:
    """The linear program in a file of a kind, "mps" or "lp", whatever its suffix.

    Raises
    ------
    InputError
        The file is none that HiGHS reads, or its objective is quadratic or maximised.
    """
    if os.path.getsize(name) == 0 if os.path.isfile(name) else False:
        raise InputError("the file is empty")
    refuse_damaged(read_text(name, limit=PROGRAM_LIMIT), mps=kind == "mps")
    with tempfile.TemporaryDirectory() as folder:
        target = os.path.join(folder, "program.npz")
        # HiGHS goes by the suffix.
        given = os.path.abspath(name)
        if not name.endswith(f".{kind}"):
            given = shutil.copyfile(given, os.path.join(folder, f"given.{kind}"))
        _in_child(_READER, given, target)
        with open(target, "rb") as stream:
            stored = np.load(io.BytesIO(stream.read()), allow_pickle=False)
    return _program({key: stored[key] for key in stored.files})


def _program(stored: dict[str, np.ndarray[tuple[int, ...], np.dtype[np.generic]]]) -> Program:
    if not len(stored["cost"]):
        raise InputError("the program has no columns")
    names = str(stored["names"]).split("\n")
    if not np.isfinite(stored["cost"].astype(float)).all() or not np.isfinite(stored["values"].astype(float)).all():
        raise InputError("a coefficient of the program is not finite")
    starts, columns, values = (
        stored["starts"].astype(np.int64),
        stored["columns"].astype(np.int64),
        stored["values"].astype(float),
    )
    if not bool(stored["rowwise"]):
        column_of = np.repeat(np.arange(len(starts) - 1), np.diff(starts))
        order = np.lexsort((column_of, columns))
        counts = np.bincount(columns, minlength=int(stored["rows"]))
        starts = np.concatenate([[0], np.cumsum(counts)])
        columns, values = column_of[order], values[order]
    elif len(starts) == 0:
        starts = np.zeros(int(stored["rows"]) + 1, np.int64)
    low, high = stored["low"].astype(float), stored["high"].astype(float)
    binary = stored["whole"].astype(bool) & (low == 0) & (high == 1)
    return Program(
        names,
        stored["cost"].astype(float),
        binary,
        stored["lower"].astype(float),
        stored["upper"].astype(float),
        starts,
        columns,
        values,
        float(stored["offset"]),
    )
