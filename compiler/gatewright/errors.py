"""Every error gatewright raises on purpose, under one base class.

::

    GatewrightError
    ├── InputError              what came from outside is at fault (exit code 1)
    │   ├── MatrixError         not square, not finite, wrong size
    │   │   └── NotUnitaryError     carries the defect and the distance to the nearest unitary
    │   ├── ExpressionError     an angle or matrix-entry expression
    │   ├── CircuitError        wrong arity, repeated qubit, index out of range, unknown gate
    │   │   └── QasmError       an OpenQASM text, with line and column
    │   ├── GateSetError        a native gate set
    │   ├── DeviceError         a device file or a coupling graph
    │   └── ProofFileError      a proof file that is damaged or belongs to something else
    ├── CannotError             well-formed, but not possible here (exit code 1)
    │   ├── UnsupportedError    not yet supported by this version
    │   └── DisconnectedError   no path between the qubits on this device
    ├── ProofError              the output was not proven equal, or is not legal (exit code 3)
    │   └── UndecidedError      no method could tell whether it is equal
    └── BudgetError             a limit that the user set is exceeded (exit code 4)

Each error says what was required, what was found and what to try, on one line.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from typing import Self

__all__ = [
    "BudgetError",
    "CannotError",
    "CircuitError",
    "DeviceError",
    "DisconnectedError",
    "ExpressionError",
    "GateSetError",
    "GatewrightError",
    "InputError",
    "MatrixError",
    "NotUnitaryError",
    "ProofError",
    "ProofFileError",
    "QasmError",
    "UndecidedError",
    "UnsupportedError",
    "nearest_name",
    "shorten",
]


def shorten(text: object, limit: int = 60) -> str:
    """Return `text` as one printable line of at most `limit` characters, for quoting in a message."""
    start = str(text)[: 4 * limit]
    line = "".join(c if c.isprintable() else " " if c.isspace() else "\N{REPLACEMENT CHARACTER}" for c in start)
    line = " ".join(line.split())
    return line if len(line) <= limit else line[: limit - 1] + "\N{HORIZONTAL ELLIPSIS}"


def nearest_name(name: str, known: Iterable[str]) -> str:
    """Return a hint naming the closest of `known` to `name` and listing them all.

    Examples
    --------
    >>> nearest_name("cxx", ["h", "cx"])
    "did you mean 'cx'? known: cx, h"
    """
    names = sorted(set(known))
    close = difflib.get_close_matches(name[:60], names, n=1, cutoff=0.5)
    meant = f"did you mean '{close[0]}'? " if close else ""
    return f"{meant}known: {', '.join(names)}" if names else meant.strip()


class GatewrightError(Exception):
    """Base class: a message of one line, assembled from its parts.

    Parameters
    ----------
    what : str
        What is wrong.
    required, found, hint : str, optional
        What was required, what was found instead, and what to try.
    where : str, optional
        File name, or the name of the thing at fault.
    line, column : int, optional
        Position in the text, counted from 1.
    """

    exit_code = 1

    def __init__(
        self,
        what: str,
        *,
        required: str = "",
        found: str = "",
        hint: str = "",
        where: str = "",
        line: int | None = None,
        column: int | None = None,
    ) -> None:
        self.what = what
        self.required = required
        self.found = found
        self.hint = hint
        self.where = where
        self.line = line
        self.column = column
        super().__init__(what)

    def located(self, *, where: str = "", line: int | None = None, column: int | None = None) -> Self:
        """Fill in the place where it is not known yet, and return the same error."""
        self.where = self.where or where
        if self.line is None:
            self.line, self.column = line, column
        return self

    def __str__(self) -> str:
        """Return the message on one line: place, what, required, found, hint."""
        place = ":".join(str(part) for part in (self.where, self.line, self.column) if part not in ("", None))
        parts = [f"{place}: {self.what}" if place else self.what]
        parts += [f"required: {self.required}"] if self.required else []
        parts += [f"found: {self.found}"] if self.found else []
        parts += [self.hint] if self.hint else []
        return "; ".join(" ".join(part.split()) for part in parts)


class InputError(GatewrightError):
    """Something that came from outside is at fault."""


class MatrixError(InputError):
    """A matrix cannot be read as a unitary: its shape, its size or an entry is wrong."""


class NotUnitaryError(MatrixError):
    """A matrix is not unitary within the tolerance.

    Attributes
    ----------
    defect : float
        Operator norm of U†U − 1.
    distance : float
        Operator norm of U − W, W the nearest unitary.
    tolerance : float
        What was allowed.
    """

    def __init__(self, *, defect: float, distance: float, tolerance: float, where: str = "") -> None:
        self.defect = defect
        self.distance = distance
        self.tolerance = tolerance
        super().__init__(
            "the matrix is not unitary",
            required=f"‖U†U − 1‖ ≤ {tolerance:.3g}",
            found=f"{defect:.3g}; the nearest unitary is {distance:.3g} away in operator norm",
            hint="try --nearest-unitary to compile that one instead, or a larger --tolerance for rounded entries",
            where=where,
        )


class ExpressionError(InputError):
    """An angle or matrix-entry expression is malformed, too large, or has no finite value."""


class CircuitError(InputError):
    """A circuit is malformed: wrong arity, repeated qubit, index out of range, unknown gate."""


class QasmError(CircuitError):
    """An OpenQASM text is at fault, or says something that is not supported."""


class GateSetError(InputError):
    """A native gate set is malformed, not unitary, or not sufficient."""


class DeviceError(InputError):
    """A device file or a coupling graph is malformed."""


class ProofFileError(InputError):
    """A proof file is damaged, of an unknown version, or does not belong to these circuits."""


class CannotError(GatewrightError):
    """A well-formed request that cannot be met here; never answered by a silent approximation."""


class UnsupportedError(CannotError):
    """Not supported by this version."""


class DisconnectedError(CannotError):
    """Qubits that must meet have no path between them on this device."""


class ProofError(GatewrightError):
    """The output was not proven equal to its source, or is not legal on the device.

    Attributes
    ----------
    window : int or None
        Number of the window at fault.
    qubits : tuple of int
        Physical qubits concerned.
    distance : float or None
        Measured operator-norm distance, where there is one.
    """

    exit_code = 3

    def __init__(
        self,
        what: str,
        *,
        window: int | None = None,
        qubits: tuple[int, ...] = (),
        distance: float | None = None,
        required: str = "",
        found: str = "",
        hint: str = "",
        where: str = "",
        line: int | None = None,
        column: int | None = None,
    ) -> None:
        self.window = window
        self.qubits = qubits
        self.distance = distance
        super().__init__(what, required=required, found=found, hint=hint, where=where, line=line, column=column)


class UndecidedError(ProofError):
    """No method could tell whether the output is equal to its source: neither 'equal' nor 'different'."""


class BudgetError(GatewrightError):
    """A limit set by the user is exceeded.

    Attributes
    ----------
    exceeded : tuple of dict
        One entry for each broken limit: ``name``, ``limit``, ``value``.
    """

    exit_code = 4

    def __init__(self, exceeded: tuple[dict[str, object], ...]) -> None:
        self.exceeded = exceeded
        found = ", ".join(f"{entry['name']} = {entry['value']}" for entry in exceeded)
        required = ", ".join(f"{entry['name']} {entry['relation']} {entry['limit']}" for entry in exceeded)
        super().__init__("over budget", required=required, found=found)
