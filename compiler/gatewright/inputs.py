"""Read what a user has: an OpenQASM program, or a unitary matrix in one of several formats."""

from __future__ import annotations

import os
import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import Literal

from gatewright.circuit import Circuit
from gatewright.gates import Gate
from gatewright.matrices import read_matrix
from gatewright.program import Program
from gatewright.qasm import QubitMap, read_map
from gatewright.qasm import read as read_program
from gatewright.qasm.source import decode, read_bytes

__all__ = ["Source", "load", "read"]

MATRIX_SUFFIXES = (".npy", ".npz", ".csv", ".txt", ".json")
PROGRAM_SUFFIXES = (".qasm", ".qasm2", ".qasm3")

#: How a matrix begins: NumPy's files and archives, or (after blanks and # comments) a number, sign or bracket.
_MATRIX = re.compile(rb"\x93NUMPY|PK[\x03\x05]|(?:\xef\xbb\xbf)?(?:\s|#[^\n]*\n)*[-+.\d(\[{]")


@dataclass(frozen=True, slots=True)
class Source:
    """Something to compile or to check.

    Attributes
    ----------
    circuit : Circuit or Program
    moved : float
        Operator-norm distance from a matrix as given to the unitary taken for it.
    qubit_map : QubitMap or None
        The placement stated in the header of a program that gatewright wrote.
    """

    circuit: Circuit | Program
    moved: float = 0.0
    qubit_map: QubitMap | None = None


def load(
    path: str | os.PathLike[str],
    *,
    tolerance: float = 1e-12,
    nearest_unitary: bool = False,
    qubit_order: Literal["first", "last"] = "first",
    natives: Mapping[str, Gate] = MappingProxyType({}),
    strict: bool = True,
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
    qubit_order : {"first", "last"}
        Where qubit 0 stands among the Kronecker factors of a matrix.
    natives : mapping of str to Gate, optional
        Gates that stay as they are where the program defines them.
    strict : bool
        Whether a definition of such a gate has to agree with it; if not, one that differs is the program's own.

    Raises
    ------
    InputError
    """
    name = os.fspath(path)
    suffix = Path(name).suffix.lower()
    where = "<stdin>" if name == "-" else name
    source: str | os.PathLike[str] | bytes = path
    if suffix not in MATRIX_SUFFIXES:
        data = read_bytes(path)
        if suffix in PROGRAM_SUFFIXES or not _MATRIX.match(data):
            text = decode(data, where=where)
            return Source(
                read_program(text, where=where, natives=natives, strict=strict), qubit_map=read_map(text, where=where)
            )
        source = data
    given = read_matrix(source, qubit_order=qubit_order, tolerance=tolerance, nearest=nearest_unitary, where=where)
    return Source(Circuit.from_unitary(given.matrix), given.moved)


def read(
    path: str | os.PathLike[str],
    *,
    tolerance: float = 1e-12,
    nearest_unitary: bool = False,
    qubit_order: Literal["first", "last"] = "first",
) -> Circuit | Program:
    """Read an OpenQASM program or a unitary matrix as a circuit, or as a program where it depends on measured bits.

    Parameters
    ----------
    path : str or path
        ``.qasm``, ``.npy``, ``.npz``, ``.csv``, ``.txt`` or ``.json``; ``-`` is standard input.
    tolerance : float
        How far from unitary a matrix may be.
    nearest_unitary : bool
        Take the nearest unitary for a matrix beyond the tolerance.
    qubit_order : {"first", "last"}
        Where qubit 0 stands among the Kronecker factors of a matrix.

    Raises
    ------
    InputError
        With file, line and column where there is one.
    """
    return load(path, tolerance=tolerance, nearest_unitary=nearest_unitary, qubit_order=qubit_order).circuit
