"""Put the distinct statements of a program together into the columns of a circuit."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit

if TYPE_CHECKING:
    from gatewright.qasm.reader import Reader
    from gatewright.qasm.scanner import Columns

__all__ = ["MAX_OPERANDS", "circuit"]

#: Most qubits that all operations together may name.
MAX_OPERANDS = 40_000_000


def circuit(reader: Reader, order: NDArray[np.int64], scanned: Columns | None = None) -> Circuit:
    """Return the columns for the distinct statements in the order in which they occur.

    Those in `scanned`, an operation each, are numbered behind those of the reader.
    """
    first = np.array(reader.first, dtype=np.int64)
    op = np.array(reader.op, dtype=np.int64)
    width = np.array(reader.width, dtype=np.int64)
    kinds = tuple(reader.table)
    n_parameters = np.array([kind.n_parameters for kind in kinds], dtype=np.int64)[op]
    named, values = np.array(reader.qubits, dtype=np.int32), np.array(reader.parameters, dtype=np.float64)
    if scanned is not None:
        more = scanned.op
        first = np.concatenate([first, first[-1] + np.arange(1, len(more) + 1)])
        op = np.concatenate([op, more])
        width = np.concatenate([width, np.array([kind.n_qubits for kind in kinds])[more]])
        n_parameters = np.concatenate([n_parameters, np.array([kind.n_parameters for kind in kinds])[more]])
        named, values = np.concatenate([named, scanned.qubits]), np.concatenate([values, scanned.parameters])
    lengths = np.diff(first)[order]
    reader.check_total(int(lengths.sum()), 0)
    rows, _ = _spans(first[order], lengths)
    if width[rows].sum() > MAX_OPERANDS:
        raise reader.source.error("the operations name too many qubits", 0, required=f"at most {MAX_OPERANDS} in all")
    qubits, offsets = _gather(named, width, rows)
    parameters, parameter_offsets = _gather(values, n_parameters, rows)
    link = np.full(len(op), -1, dtype=np.int32)
    link[list(reader.link)] = list(reader.link.values())
    link[list(reader.marks)] = list(reader.marks.values())
    symbolic = dict.fromkeys(reader.unknown.values())
    number_of = {values: k for k, values in enumerate(symbolic)}
    link[list(reader.unknown)] = [number_of[values] for values in reader.unknown.values()]
    link[list(reader.matrices)] = range(len(reader.matrices))
    phase = np.zeros(len(first))
    phase[list(reader.phases)] = list(reader.phases.values())
    # Number the kinds in the order in which they first occur, as a Builder does.
    used, places = np.unique(op[rows], return_index=True)
    used = used[np.argsort(places)]
    number = np.zeros(len(reader.table) + 1, dtype=np.int16)
    number[used] = np.arange(len(used))
    scope = reader.scope
    return Circuit(
        n_qubits=scope.n_qubits or scope.n_physical,
        n_bits=scope.n_bits,
        table=tuple(kinds[k] for k in used.tolist()),
        op=number[op[rows]],
        qubits=qubits,
        offsets=offsets,
        parameters=parameters,
        parameter_offsets=parameter_offsets,
        link=link[rows],
        matrices=tuple(reader.matrices.values()),
        phase=float(phase[order].sum()),
        qubit_registers=tuple((name, len(span)) for name, span in scope.qubit_registers.items()),
        bit_registers=tuple((name, len(span)) for name, span in scope.bit_registers.items()),
        symbolic=tuple(symbolic),
        inputs=tuple(reader.inputs.items()),
    )


def _spans(starts: NDArray[np.int64], lengths: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the indices of spans one after another, and the offsets of the spans among them."""
    offsets = np.zeros(len(lengths) + 1, dtype=np.int64)
    np.cumsum(lengths, out=offsets[1:])
    return np.arange(offsets[-1]) + np.repeat(starts - offsets[:-1], lengths), offsets


def _gather(flat: NDArray[Any], lengths: NDArray[np.int64], rows: NDArray[np.int64]) -> tuple[NDArray[Any], Any]:
    """Select rows of a ragged array: the new flat array and its offsets."""
    starts = np.cumsum(lengths) - lengths
    index, offsets = _spans(starts[rows], lengths[rows])
    return flat[index], offsets
