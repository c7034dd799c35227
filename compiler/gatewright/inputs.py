"""Read what a user has: an OpenQASM program, or a unitary matrix in one of several formats."""

from __future__ import annotations

import os
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from gatewright.circuit import Circuit
from gatewright.errors import InputError
from gatewright.gates import Gate

if TYPE_CHECKING:
    from gatewright.qasm import QubitMap

__all__ = ["MAX_BYTES", "Source", "load", "read", "read_bytes"]

#: Largest file that is read.
MAX_BYTES = 1 << 28
MATRIX_SUFFIXES = (".npy", ".npz", ".csv", ".txt", ".json")
PROGRAM_SUFFIXES = (".qasm", ".qasm2", ".qasm3", ".inc")


@dataclass(frozen=True, slots=True)
class Source:
    """Something to compile or to check.

    Attributes
    ----------
    circuit : Circuit
    moved : float
        Operator-norm distance from a matrix as given to the unitary taken for it.
    qubit_map : QubitMap or None
        The placement stated in the header of a program that gatewright wrote.
    """

    circuit: Circuit
    moved: float = 0.0
    qubit_map: QubitMap | None = None


def read_bytes(path: str | os.PathLike[str]) -> bytes:
    """Read a file, or standard input for ``-``.

    Raises
    ------
    InputError
        Missing, a directory, unreadable, empty or too large.
    """
    name = os.fspath(path)
    where = "<stdin>" if name == "-" else name
    try:
        if name == "-":
            data = sys.stdin.buffer.read(MAX_BYTES + 1)
        else:
            if Path(name).is_dir():
                raise InputError("this is a directory", required="a file", where=where)
            with Path(name).open("rb") as file:
                data = file.read(MAX_BYTES + 1)
    except OSError as error:
        raise InputError(f"cannot read the file: {(error.strerror or str(error)).lower()}", where=where) from None
    if len(data) > MAX_BYTES:
        raise InputError("the file is too large", required=f"{MAX_BYTES} bytes at most", where=where)
    if not data.strip():
        raise InputError("the file is empty", required="an OpenQASM program or a unitary matrix", where=where)
    return data


def load(
    path: str | os.PathLike[str],
    *,
    tolerance: float = 1e-12,
    nearest_unitary: bool = False,
    first_qubit: str = "left",
    natives: Mapping[str, Gate] | None = None,
) -> Source:
    """Read a program or a matrix, with what else is known about it.

    Parameters
    ----------
    path : str or path
        By suffix: ``.qasm`` OpenQASM 2 or 3; ``.npy``, ``.npz``, ``.csv``, ``.txt``, ``.json`` a unitary. ``-`` is
        standard input, and its form is found from its first bytes, as for any other suffix.
    tolerance : float
        How far from unitary a matrix may be.
    nearest_unitary : bool
        Take the nearest unitary for a matrix beyond the tolerance.
    first_qubit : {"left", "right"}
        Which factor of the Kronecker product is qubit 0 of a matrix.
    natives : mapping of str to Gate, optional
        Gates that stay as they are where the program defines them.

    Raises
    ------
    InputError
    """
    from gatewright import matrices, qasm

    data = read_bytes(path)
    name = os.fspath(path)
    where = "<stdin>" if name == "-" else name
    suffix = Path(name).suffix.lower()
    if suffix in MATRIX_SUFFIXES or (suffix not in PROGRAM_SUFFIXES and matrices.looks_like_matrix(data)):
        given = matrices.decode_matrix(data, suffix=suffix, where=where, first_qubit=first_qubit)
        unitary, moved = matrices.checked(given, tolerance=tolerance, nearest=nearest_unitary, where=where)
        return Source(Circuit.from_unitary(unitary), moved)
    text = qasm.decode_text(data, where=where)
    return Source(qasm.read(text, where=where, natives=natives), qubit_map=qasm.read_map(text))


def read(
    path: str | os.PathLike[str],
    *,
    tolerance: float = 1e-12,
    nearest_unitary: bool = False,
    first_qubit: str = "left",
) -> Circuit:
    """Read an OpenQASM program or a unitary matrix as a circuit.

    Parameters
    ----------
    path : str or path
        ``.qasm``, ``.npy``, ``.npz``, ``.csv``, ``.txt`` or ``.json``; ``-`` is standard input.
    tolerance : float
        How far from unitary a matrix may be.
    nearest_unitary : bool
        Take the nearest unitary for a matrix beyond the tolerance.
    first_qubit : {"left", "right"}
        Which factor of the Kronecker product is qubit 0 of a matrix.

    Raises
    ------
    InputError
        With file, line and column where there is one.
    """
    return load(path, tolerance=tolerance, nearest_unitary=nearest_unitary, first_qubit=first_qubit).circuit
