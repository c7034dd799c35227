"""Timing in the full lane: durations that are known when compiling, ``delay``, and ``box`` without a stated duration.

After the OpenQASM 3 specification (arXiv:2104.14722), circuit timing. A delay is an operation that nothing crosses; a
box becomes its contents between two barriers on its qubits. Durations are real numbers of nanoseconds.
"""

from __future__ import annotations

from typing import Any

from gatewright.gates import BARRIER, DELAY
from gatewright.qasm.control import Control, Left
from gatewright.qasm.values import Kind, Value

__all__ = ["Timing"]

#: Nanoseconds in each unit.
_UNITS = {"ns": 1.0, "us": 1e3, "ms": 1e6, "s": 1e9}


class Timing(Control):
    """Statements about time."""

    def _DurationLiteral(self, node: Any, real: bool) -> Value:
        unit = node.unit.name
        if unit not in _UNITS:
            raise self.unsupported(f"a duration in '{unit}'", node)
        return Value(Kind("duration"), float(node.value) * _UNITS[unit])

    def do_DelayInstruction(self, node: Any) -> None:
        """Wait for a time on some qubits, or on all of them where none is named."""
        self.outside("delay", node)
        value = self.scalar(node.duration)
        if value.kind.name != "duration":
            found = f"a value of type {value.kind}"
            raise self.error("a delay has no duration", node.duration, required="such as 100ns", found=found)
        if value.data < 0:
            raise self.error(
                "a delay is negative", node.duration, required="0 ns or more", found=f"{value.data:.6g} ns"
            )
        qubits = [q for operand in node.qubits for q in self.places(operand).indices]
        if not node.qubits:
            qubits = list(range(self.scope.n_qubits or self.scope.n_physical))
        self.distinct(qubits, node)
        self.charge(len(qubits), node)
        if qubits:
            self.emit(DELAY, qubits, (value.data,), node)

    def do_Box(self, node: Any) -> Left:
        """Keep the contents of a box together, between two barriers."""
        if node.duration is not None:
            raise self.unsupported("a box of a stated duration", node)
        self.outside("box", node)
        reader = self.reader
        # The first barrier gets its qubits when the contents have told them.
        row, start = len(reader.op), len(reader.qubits)
        self.emit(BARRIER, (), (), node)
        left = self.block(node.body)
        qubits = sorted(set(reader.qubits[start:]))
        self.charge(2 * len(qubits), node)
        if not qubits and len(reader.op) == row + 1:
            reader.op.pop()
            reader.width.pop()
            return left
        qubits = qubits or list(range(self.scope.n_qubits or self.scope.n_physical))
        reader.qubits[start:start] = qubits
        reader.width[row] = len(qubits)
        if left is None:
            self.emit(BARRIER, qubits, (), node)
        return left
