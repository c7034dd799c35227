"""Gates that only a program's own ``defcal`` defines: which they are, and on which physical qubits they may stand.

Nothing is known of what such a gate does. It is an operation without a matrix that stays where it is, and that nothing
crosses. After the OpenQASM 3 specification (arXiv:2104.14722), pulse-level descriptions of gates.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from gatewright.circuit import Circuit
from gatewright.gates import BARRIER, CONTROL, DELAY, MEASURE, RESET, UNITARY, Gate

__all__ = ["Calibrated", "calibrated_gates", "misplaced", "without_matrix"]

_SPECIAL = frozenset(gate.name for gate in (BARRIER, CONTROL, DELAY, MEASURE, RESET, UNITARY))
_HEADER = re.compile(r"defcal\s+([^\W\d]\w*)\s*(?:\(([^()]*)\))?\s*([^{}()]*?)\s*(?:->[^{}]*)?\{")


@dataclass(frozen=True, slots=True)
class Calibrated:
    """A gate with a calibration: the operation, and its physical qubits, -1 where the calibration is for any."""

    gate: Gate
    qubits: frozenset[tuple[int, ...]]

    def allows(self, qubits: Iterable[int]) -> bool:
        """Whether there is a calibration for these qubits."""
        given = tuple(qubits)
        return any(
            len(pattern) == len(given) and all(p in (-1, q) for p, q in zip(pattern, given, strict=True))
            for pattern in self.qubits
        )


def calibrated_gates(statements: Iterable[str]) -> dict[str, Calibrated]:
    """Return the gates that ``defcal`` statements define, by name.

    Examples
    --------
    >>> found = calibrated_gates(["defcal buzz(angle[20] t) $3 { }", "defcal buzz(angle[20] t) $4 { }"])
    >>> found["buzz"].gate.n_parameters, sorted(found["buzz"].qubits)
    (1, [(3,), (4,)])
    """
    found: dict[str, Calibrated] = {}
    for statement in statements:
        match = _HEADER.match(statement)
        if match is None or match[1] in _SPECIAL:
            continue
        operands = [operand.strip() for operand in match[3].split(",")]
        qubits = tuple(int(operand[1:]) if operand[1:].isdigit() else -1 for operand in operands)
        count = match[2].count(",") + 1 if match[2] and match[2].strip() else 0
        known = found.get(match[1])
        if known is None:
            found[match[1]] = Calibrated(Gate(match[1], len(qubits), count), frozenset({qubits}))
        elif (known.gate.n_qubits, known.gate.n_parameters) == (len(qubits), count):
            found[match[1]] = Calibrated(known.gate, known.qubits | {qubits})
    return found


def without_matrix(gate: Gate) -> bool:
    """Whether an operation is a gate that only a calibration defines."""
    return gate.function is None and gate.name not in _SPECIAL


def misplaced(circuit: Circuit) -> int | None:
    """Return the first operation that only a calibration defines, and that stands where there is none; else None."""
    kinds = [k for k, gate in enumerate(circuit.table) if without_matrix(gate)]
    if not kinds:
        return None
    known = calibrated_gates(circuit.calibrations)
    for row in np.flatnonzero(np.isin(circuit.op, kinds)).tolist():
        gate = known.get(circuit.table[circuit.op[row]].name)
        if gate is None or not gate.allows(circuit.qubits_of(row)):
            return int(row)
    return None
