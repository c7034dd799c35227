"""Read one unitary matrix from a file, from standard input or from bytes: NumPy's own formats, JSON, or plain text.

The format is told by the content. NumPy's files are never unpickled, and their size is checked before they are
loaded (`numpy.lib.format`). Entries in text are read as by `gatewright.expressions`: ``0.5+0.5i``, ``1/sqrt(2)``.
"""

from __future__ import annotations

import cmath
import io
import json
import os
import re
import sys
import zipfile
from dataclasses import dataclass
from pathlib import Path
from typing import IO, Any, Literal

import numpy as np
from numpy.lib import format as npy_format
from numpy.typing import NDArray

from gatewright.errors import ExpressionError, MatrixError, shorten
from gatewright.expressions import parse
from gatewright.linalg import checked_unitary, reorder_qubits

__all__ = ["MAX_ROWS", "MatrixInput", "read_matrix"]

Array = NDArray[np.complex128]

#: Largest matrix, and largest text that holds one.
MAX_ROWS = 2**12
MAX_BYTES = 2**28

_NPY = b"\x93NUMPY"
_ZIP = (b"PK\x03\x04", b"PK\x05\x06")
_FORMATS = ".npy, .npz, .json, .csv or .txt"
_SPACED_SIGN = re.compile(r"(?<=\S)[ \t]+([+-])[ \t]+(?=\S)")


@dataclass(frozen=True, eq=False, slots=True)
class MatrixInput:
    """A matrix that was read and checked.

    Attributes
    ----------
    matrix : ndarray, shape (2**n, 2**n)
        The unitary to compile; qubit 0 is the leftmost Kronecker factor.
    moved : float
        Operator norm of the matrix that was read minus `matrix`.
    """

    matrix: Array
    moved: float

    @property
    def n_qubits(self) -> int:
        """Number of qubits."""
        return len(self.matrix).bit_length() - 1


def read_matrix(
    source: str | os.PathLike[str] | bytes,
    *,
    qubit_order: Literal["first", "last"] = "first",
    tolerance: float = 1e-12,
    nearest: bool = False,
    where: str = "",
) -> MatrixInput:
    r"""Read a unitary.

    Parameters
    ----------
    source : path or bytes
        A file, ``-`` for standard input, or the content itself. ``.npy``; ``.npz`` with one array, or with one
        called ``unitary``; JSON, a list of rows whose entries are numbers, ``[re, im]`` or text; or text with a
        row a line, entries between commas, semicolons or blanks, and comments behind ``#``.
    qubit_order : {"first", "last"}
        Where qubit 0 stands among the Kronecker factors of the matrix in the file.
    tolerance, nearest
        See `gatewright.linalg.checked_unitary`.
    where : str
        Name of bytes for messages.

    Returns
    -------
    MatrixInput

    Raises
    ------
    MatrixError, NotUnitaryError

    Examples
    --------
    >>> read_matrix(b"0 1\n1 0").matrix.tolist()
    [[0j, (1+0j)], [(1+0j), 0j]]
    """
    if qubit_order not in ("first", "last"):
        raise MatrixError("unknown qubit order", required="'first' or 'last'", found=f"'{shorten(qubit_order)}'")
    if isinstance(source, bytes):
        entries = _read(io.BytesIO(source), where)
    elif os.fspath(source) == "-":
        where = where or "<stdin>"
        entries = _read(io.BytesIO(sys.stdin.buffer.read(2 * MAX_BYTES + 1)), where)
    else:
        where = where or os.fspath(source)
        try:
            with Path(source).open("rb") as file:
                _check_suffix(file, where)
                entries = _read(file, where)
        except (OSError, ValueError) as problem:
            found = (problem.strerror if isinstance(problem, OSError) else None) or str(problem)
            raise MatrixError("the file cannot be read", found=found, where=shorten(where, 300)) from None
    matrix, moved = checked_unitary(entries, tolerance=tolerance, nearest=nearest, where=where)
    if qubit_order == "last":
        matrix = reorder_qubits(matrix, tuple(reversed(range(len(matrix).bit_length() - 1))))
    return MatrixInput(matrix, moved)


def _check_suffix(file: IO[bytes], where: str) -> None:
    """Refuse a file that is called a NumPy file and is none."""
    suffix = Path(where).suffix.lower()
    wanted: dict[str, bytes | tuple[bytes, ...]] = {".npy": _NPY, ".npz": _ZIP}
    start = file.read(len(_NPY))
    file.seek(0)
    if suffix in wanted and not start.startswith(wanted[suffix]):
        found = "an empty file" if not start else f"a file that begins with {start!r}"
        raise MatrixError(f"this is not a {suffix} file", required="what numpy.save writes", found=found, where=where)


def _read(file: IO[bytes], where: str) -> NDArray[Any]:
    """Return the array that an open file holds, checked for size and for being of numbers."""
    start = file.read(len(_NPY))
    file.seek(0)
    try:
        if start == _NPY:
            return _read_npy(file, where)
        if start.startswith(_ZIP):
            return _read_npz(file, where)
    except MatrixError:
        raise
    except Exception as problem:  # whatever NumPy and zipfile meet in a damaged file
        found = shorten(problem) or type(problem).__name__
        raise MatrixError("the NumPy file is damaged", required=_FORMATS, found=found, where=where) from None
    data = file.read(MAX_BYTES + 1)
    if len(data) > MAX_BYTES:
        raise MatrixError("the text is too large", required=f"at most {MAX_BYTES // 2**20} MiB", where=where)
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        found = f"byte 0x{data[problem.start]:02x} at offset {problem.start}"
        raise MatrixError("this is not a matrix", required=_FORMATS, found=found, where=where) from None
    body = text.lstrip()
    if not body:
        raise MatrixError("the matrix is empty", required=_FORMATS, where=where)
    return _json_rows(text, where) if body[0] in "[{" else _text_rows(text, where)


# ---------------------------------------------------------------- NumPy's formats


def _read_npy(file: IO[bytes], where: str) -> NDArray[Any]:
    version = npy_format.read_magic(file)
    if version == (1, 0):
        shape, _, dtype = npy_format.read_array_header_1_0(file)
    elif version == (2, 0):
        shape, _, dtype = npy_format.read_array_header_2_0(file)
    else:
        raise MatrixError("unknown version of the .npy format", required="1.0 or 2.0", found=str(version), where=where)
    if dtype.kind not in "iufc":
        found = "Python objects, which are never loaded" if dtype.hasobject else f"type {dtype}"
        raise MatrixError("the array does not hold numbers", required="real or complex", found=found, where=where)
    if len(shape) != 2:
        required = "2ⁿ rows and 2ⁿ columns"
        raise MatrixError("the array is not a matrix", required=required, found=f"shape {shape}", where=where)
    _check_size(shape[0], shape[1], where)
    file.seek(0)
    return np.asarray(npy_format.read_array(file, allow_pickle=False))


def _read_npz(file: IO[bytes], where: str) -> NDArray[Any]:
    with zipfile.ZipFile(file) as archive:
        members = {name.removesuffix(".npy"): name for name in archive.namelist()}
        name = "unitary" if "unitary" in members else next(iter(members), "")
        if len(members) != 1 and name != "unitary":
            names = shorten(", ".join(sorted(members))) or "none"
            required = "exactly one, or one called 'unitary'"
            raise MatrixError("the archive does not hold one array", required=required, found=names, where=where)
        with archive.open(members[name]) as member:
            return _read_npy(member, where)


def _check_size(rows: int, columns: int, where: str, line: int | None = None) -> None:
    if max(rows, columns) > MAX_ROWS:
        raise MatrixError(
            "the matrix is too large",
            required=f"at most {MAX_ROWS} rows and columns",
            found=f"{rows} × {columns}",
            where=where,
            line=line,
        )


# ---------------------------------------------------------------- text


def _entry(text: str, row: int, column: int, where: str, line: int | None) -> complex:
    """Read one entry of a matrix."""
    bare = text.strip()
    if bare.isascii():
        try:
            value = complex(bare.replace("i", "j"))
            if cmath.isfinite(value):
                return value
        except ValueError:
            pass  # not a plain number: an expression, or an error to be told
    try:
        return parse(bare).value()
    except ExpressionError as problem:
        raise MatrixError(
            f"the entry in row {row}, column {column} (counted from 0) cannot be read: {problem.what}",
            required="a finite number such as 0.5+0.5i",
            found=f"'{shorten(bare)}'" if bare else "nothing",
            where=where,
            line=line,
        ) from None


def _ragged(row: int, found: int, width: int, where: str, line: int | None) -> MatrixError:
    return MatrixError(
        "the rows have different lengths",
        required=f"{width} entries in each, as in row 0",
        found=f"{found} in row {row}",
        where=where,
        line=line,
    )


def _text_rows(text: str, where: str) -> Array:
    lines = [(number, line.partition("#")[0].strip()) for number, line in enumerate(text.splitlines(), 1)]
    lines = [(number, line) for number, line in lines if line]
    if not lines:
        raise MatrixError("the matrix is empty", required=_FORMATS, where=where)
    separator = next((mark for mark in ",;" if mark in lines[0][1]), None)
    rows: list[list[complex]] = []
    width = 0
    for number, line in lines:
        if separator is None:
            # A sign with blanks on both sides stands between the parts of one entry.
            parts = _SPACED_SIGN.sub(r"\1", line).split()
        else:
            parts = [part.strip().strip("\"'") for part in line.removesuffix(separator).split(separator)]
        width = width or len(parts)
        _check_size(len(rows) + 1, len(parts), where, number)
        if len(parts) != width:
            raise _ragged(len(rows), len(parts), width, where, number)
        rows.append([_entry(part, len(rows), column, where, number) for column, part in enumerate(parts)])
    return np.array(rows, dtype=np.complex128)


def _json_rows(text: str, where: str) -> Array:
    try:
        data = json.loads(text)
    except json.JSONDecodeError as problem:
        raise MatrixError(
            "the JSON text cannot be read", found=problem.msg, where=where, line=problem.lineno, column=problem.colno
        ) from None
    except (ValueError, RecursionError) as problem:
        raise MatrixError("the JSON text cannot be read", found=shorten(problem), where=where) from None
    if isinstance(data, dict) and "unitary" in data:
        data = data["unitary"]
    if not isinstance(data, list) or not data or not all(isinstance(row, list) for row in data):
        found = f"a {type(data).__name__}" if not isinstance(data, list) else "a list of something else"
        required = "a list of rows, or an object with that under 'unitary'"
        raise MatrixError("the JSON text is not a matrix", required=required, found=found, where=where)
    _check_size(len(data), len(data[0]), where)
    for row, entries in enumerate(data):
        if len(entries) != len(data[0]):
            raise _ragged(row, len(entries), len(data[0]), where, None)
    rows = [[_json_entry(entry, r, c, where) for c, entry in enumerate(row)] for r, row in enumerate(data)]
    return np.array(rows, dtype=np.complex128)


def _json_entry(entry: object, row: int, column: int, where: str) -> complex:
    if isinstance(entry, str):
        return _entry(entry, row, column, where, None)
    parts = entry if isinstance(entry, list) and len(entry) == 2 else [entry]
    # bool is a kind of int, and not meant here.
    if all(isinstance(part, int | float) and not isinstance(part, bool) for part in parts):
        try:
            value = complex(*map(float, parts))
        except OverflowError:
            value = complex("inf")  # an integer beyond any float
        if cmath.isfinite(value):
            return value
    raise MatrixError(
        f"the entry in row {row}, column {column} (counted from 0) cannot be read",
        required="a finite number, [re, im], or text such as '0.5+0.5i'",
        found=shorten(json.dumps(entry), 40),
        where=where,
    )
