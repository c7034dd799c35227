"""Check that a circuit is legal on a device: native gates, parameters in range, on qubits where the device has them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, NoReturn

import numpy as np
from numpy.typing import NDArray

from gatewright.calibrated import misplaced, without_matrix
from gatewright.circuit import Circuit
from gatewright.errors import ProofError
from gatewright.gates import BARRIER, DELAY, MEASURE, RESET
from gatewright.parameters import Affine

if TYPE_CHECKING:
    from gatewright.devices import Device

__all__ = ["check_legal"]

Rows = NDArray[np.int64]

#: How far beyond its range a parameter may lie, for ranges that are rounded themselves (radians).
RANGE_SLACK = 1e-12


def check_legal(circuit: Circuit, device: Device) -> None:
    """Check that every operation is native, in range, and on qubits where the device has it.

    Raises
    ------
    ProofError
        Naming the first operation that is not.
    """
    if circuit.n_qubits > device.n_qubits:
        raise ProofError(
            "the output has more qubits than the device",
            required=f"{device.n_qubits} at most",
            found=str(circuit.n_qubits),
        )
    stray = misplaced(circuit)
    if stray is not None:
        _illegal(circuit, stray, f"'{circuit.operation(stray).name}' is not native, nor calibrated on these qubits")
    active = np.asarray(device.active)
    for k, gate in enumerate(circuit.table):
        rows = np.flatnonzero(circuit.op == k)
        if not len(rows) or gate.name == BARRIER.name:
            continue
        if gate.name == DELAY.name and gate.function is None:
            values = circuit.parameters[circuit.parameter_offsets[rows]]
            wrong = np.flatnonzero(~(np.isfinite(values) & (values >= 0)))
            if len(wrong):
                _illegal(circuit, int(rows[wrong[0]]), "a delay has no duration from 0 up")
            continue
        if without_matrix(gate) and gate.name not in device.gate_set.gates:
            continue  # judged by the program's own calibrations, below
        width = int(circuit.widths[rows[0]])
        qubits = circuit.qubits[circuit.offsets[rows][:, None] + np.arange(width)]
        native = None
        if gate.name in (MEASURE.name, RESET.name):
            allowed = active[qubits[:, 0]]
        else:
            native = device.gate_set.gates.get(gate.name)
            if native is None:
                _illegal(circuit, int(rows[0]), f"'{gate.name}' is not a native gate of {device.name}")
            if width == 1:
                table = np.zeros(device.n_qubits, dtype=bool)
                table[np.asarray(device.allowed_qubits(gate.name), dtype=np.int64)] = True
                allowed = table[qubits[:, 0]]
            else:
                pairs = np.asarray(device.allowed_pairs(gate.name), dtype=np.int64).reshape(-1, 2)
                codes = pairs[:, 0] * device.n_qubits + pairs[:, 1]
                allowed = np.isin(qubits[:, 0].astype(np.int64) * device.n_qubits + qubits[:, 1], codes)
        if not allowed.all():
            _illegal(
                circuit, int(rows[np.flatnonzero(~allowed)[0]]), f"{device.name} has no '{gate.name}' on these qubits"
            )
        if native is not None:
            if circuit.symbolic:
                unknown = circuit.link[rows] >= 0
                _check_unknown(circuit, rows[unknown], native.ranges)
                rows = rows[~unknown]
            values = circuit.parameters[circuit.parameter_offsets[rows][:, None] + np.arange(gate.n_parameters)]
            for column, (low, high) in enumerate(native.ranges):
                inside = (values[:, column] >= low - RANGE_SLACK) & (values[:, column] <= high + RANGE_SLACK)
                if not inside.all():
                    row = int(np.flatnonzero(~inside)[0])
                    _illegal(
                        circuit,
                        int(rows[row]),
                        f"parameter {column} of '{gate.name}' is out of range",
                        required=f"{low:.6g} to {high:.6g}",
                        found=f"{values[row, column]:.12g}",
                    )


def _check_unknown(circuit: Circuit, rows: Rows, ranges: Sequence[tuple[float, float]]) -> None:
    """Check that every unknown parameter may take any value, up to full turns that change the phase alone."""
    for row in rows.tolist():
        gate = circuit.table[circuit.op[row]]
        turn = 2 * np.pi if gate.n_qubits == 1 else 4 * np.pi
        for column, (value, (low, high)) in enumerate(zip(circuit.symbolic[circuit.link[row]], ranges, strict=True)):
            if isinstance(value, Affine):
                if not high - low >= turn - RANGE_SLACK:
                    _illegal(
                        circuit,
                        row,
                        f"parameter {column} of '{gate.name}' is not known, and its range is no full turn",
                        required=f"a range of {turn:.6g}",
                        found=f"{low:.6g} to {high:.6g}",
                    )
            elif not low - RANGE_SLACK <= value <= high + RANGE_SLACK:
                required = f"{low:.6g} to {high:.6g}"
                what = f"parameter {column} of '{gate.name}' is out of range"
                _illegal(circuit, row, what, required=required, found=f"{value:.12g}")


def _illegal(circuit: Circuit, row: int, what: str, *, required: str = "", found: str = "") -> NoReturn:
    qubits = circuit.qubits_of(row)
    named = ", ".join(map(str, qubits))
    raise ProofError(
        f"not legal: {what} (operation {row}, qubits {named})", qubits=qubits, required=required, found=found
    )
