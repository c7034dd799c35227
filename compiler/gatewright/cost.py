"""What a native circuit costs: counts, depth, duration, a success estimate, lower bounds and budgets.

The success estimate is a model, not a promise; see `success_estimate` for what it assumes.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numba as nb
import numpy as np
from numpy.typing import NDArray

from gatewright.calibrated import without_matrix
from gatewright.circuit import Circuit
from gatewright.errors import BudgetError, InputError, nearest_name
from gatewright.gates import BARRIER, DELAY, RESET

if TYPE_CHECKING:
    from gatewright.devices import Device

__all__ = [
    "BUDGETS",
    "SUCCESS_MODEL",
    "Bound",
    "Costs",
    "as_soon_as_possible",
    "check_budget",
    "count_costs",
    "is_virtual",
    "operation_durations",
    "require_budget",
    "success_estimate",
]

Vector = NDArray[np.float64]

#: Budgets, and whether the limit is the most or the least that is allowed.
BUDGETS: dict[str, str] = {
    "operations": "≤",
    "one_qubit_gates": "≤",
    "two_qubit_gates": "≤",
    "depth": "≤",
    "two_qubit_depth": "≤",
    "swaps_inserted": "≤",
    "duration_ns": "≤",
    "success_estimate": "≥",
}

SUCCESS_MODEL = (
    "a model: independent depolarising errors from the device file's calibration, process fidelities multiplied, "
    "idling by T1 and T2 where known, readout included; it ignores crosstalk, drift, coherent addition of errors and "
    "errors that cannot matter. The device's own current calibration and the laboratory's procedures take precedence"
)


@dataclass(frozen=True, slots=True)
class Costs:
    """The costs of a native circuit.

    Attributes
    ----------
    qubits : int
        Physical qubits of the device.
    operations : int
        All but barriers.
    one_qubit_gates, two_qubit_gates : int
        Virtual gates, which cost nothing, are among the operations but not among the one-qubit gates.
    by_gate : dict of str to int
    depth, two_qubit_depth : int
        Layers of physical gates, measurements and resets; layers of two-qubit gates.
    swaps_inserted : int
        By routing; merged into neighbouring windows where there are any.
    duration_ns : float or None
        None where the device does not state the durations of all gates used.
    success_estimate : float or None
        None where the device does not state the errors of all gates used.
    """

    qubits: int
    operations: int
    one_qubit_gates: int
    two_qubit_gates: int
    by_gate: dict[str, int]
    depth: int
    two_qubit_depth: int
    swaps_inserted: int
    duration_ns: float | None
    success_estimate: float | None


@dataclass(frozen=True, slots=True)
class Bound:
    """Lower bounds on two-qubit gates and on swaps, and exactly what they bound."""

    two_qubit_gates: int
    how: str
    swaps: int = 0


@nb.njit("f8(i4[::1], i8[::1], f8[::1], f8[::1], f8[::1])", cache=True, nogil=True)
def _asap(wires: Any, offsets: Any, durations: Any, free: Any, starts: Any) -> float:
    end = 0.0
    for k in range(len(starts)):
        start = 0.0
        for j in range(offsets[k], offsets[k + 1]):
            start = max(start, free[wires[j]])
        starts[k] = start
        for j in range(offsets[k], offsets[k + 1]):
            free[wires[j]] = start + durations[k]
        end = max(end, start + durations[k])
    return end


def as_soon_as_possible(circuit: Circuit, durations: Vector) -> tuple[Vector, float]:
    """Return the start of every operation, and the end of the last.

    Parameters
    ----------
    circuit : Circuit
    durations : ndarray of float64, shape (operations,)
        With ones for the operations that count and zeros for the rest, the end is a depth.
    """
    starts = np.empty(len(circuit))
    wires, offsets = circuit.lanes()
    free = np.zeros(circuit.n_qubits + circuit.n_bits)
    return starts, float(_asap(wires, offsets, durations, free, starts))


def is_virtual(circuit: Circuit, device: Device) -> NDArray[np.bool_]:
    """Return which operations take no action on the device: virtual gates, barriers and delays."""
    gates = device.gate_set.gates
    names = {BARRIER.name, DELAY.name, *(name for name, native in gates.items() if native.virtual)}
    return np.isin(circuit.op, [k for k, gate in enumerate(circuit.table) if gate.name in names])


def operation_durations(circuit: Circuit, device: Device) -> Vector:
    """Return each operation's duration in nanoseconds, NaN where the device does not state it."""
    durations = _per_operation(circuit, device, device.durations)
    waits = np.flatnonzero(circuit.is_named(DELAY.name))
    durations[waits] = circuit.parameters[circuit.parameter_offsets[waits]]
    return durations


def operation_errors(circuit: Circuit, device: Device) -> Vector:
    """Return each operation's error probability, NaN where the device does not state it; resets are taken as exact."""
    errors = _per_operation(circuit, device, device.errors)
    return np.where(circuit.is_named(RESET.name), 0.0, errors)


def _per_operation(circuit: Circuit, device: Device, look_up: Callable[[str, Any], Vector]) -> Vector:
    values = np.zeros(len(circuit))
    free = is_virtual(circuit, device)
    for k, gate in enumerate(circuit.table):
        rows = np.flatnonzero((circuit.op == k) & ~free)
        if len(rows):
            width = int(circuit.widths[rows[0]])
            if without_matrix(gate) and gate.name not in device.gate_set.gates:
                values[rows] = np.nan  # only the program's own calibration knows
                continue
            values[rows] = look_up(gate.name, circuit.qubits[circuit.offsets[rows][:, None] + np.arange(width)])
    return values


def count_costs(circuit: Circuit, device: Device, *, starts: Vector, swaps_inserted: int) -> Costs:
    """Count what a native circuit costs on a device.

    Parameters
    ----------
    circuit : Circuit
        Native, in the order of `starts`.
    device : Device
    starts : ndarray, shape (operations,)
        Start of each operation in nanoseconds; used where all durations are known.
    swaps_inserted : int
    """
    free = is_virtual(circuit, device)
    gate = circuit.is_gate
    barrier = circuit.is_named(BARRIER.name) | circuit.is_named(DELAY.name)
    two = gate & (circuit.widths == 2)
    durations = operation_durations(circuit, device)
    known = not np.isnan(durations).any()
    return Costs(
        qubits=device.n_qubits,
        operations=int(np.count_nonzero(~barrier)),
        one_qubit_gates=int(np.count_nonzero(gate & (circuit.widths == 1) & ~free)),
        two_qubit_gates=int(np.count_nonzero(two)),
        by_gate={name: number for name, number in circuit.counts().items() if name not in (BARRIER.name, DELAY.name)},
        depth=round(as_soon_as_possible(circuit, np.where(free, 0.0, 1.0))[1]),
        two_qubit_depth=round(as_soon_as_possible(circuit, two.astype(float))[1]),
        swaps_inserted=swaps_inserted,
        duration_ns=float((starts + durations).max(initial=0.0)) if known else None,
        success_estimate=success_estimate(circuit, device, starts if known else None, durations),
    )


def success_estimate(circuit: Circuit, device: Device, starts: Vector | None, durations: Vector) -> float | None:
    """Estimate the probability that a run is not spoilt by an error.

    A gate error r, one minus the average fidelity, becomes the process fidelity 1 − (d+1)/d · r; a qubit that idles
    for t between two operations contributes 1/4 + e^{−t/T1}/4 + e^{−t/T2}/2; a measurement, one minus its readout
    error. All are multiplied. `SUCCESS_MODEL` says what the model leaves out.

    Returns
    -------
    float or None
        None where the error of a gate that is used is not known.
    """
    errors = operation_errors(circuit, device)
    if np.isnan(errors).any():
        return None
    factor = np.where(circuit.is_gate, np.where(circuit.widths == 2, 1.25, 1.5), 1.0)
    log_success = float(np.log(np.maximum(1 - factor * errors, 1e-300)).sum())
    if starts is not None:
        durations = np.where(circuit.is_named(DELAY.name), 0.0, durations)  # to wait is to idle
        owner = np.repeat(np.arange(len(circuit)), circuit.widths)
        order = np.lexsort((owner, circuit.qubits))
        wire, at = circuit.qubits[order], owner[order]
        gap = np.maximum(starts[at][1:] - (starts + durations)[at][:-1], 0.0)
        same = wire[1:] == wire[:-1]
        idle, qubit = gap[same], wire[1:][same]
        t1, t2 = device.t1_ns[qubit], device.t2_ns[qubit]
        kept = 0.25 + 0.25 * np.exp(-idle / t1) + 0.5 * np.exp(-idle / t2)
        log_success += float(np.log(kept[~np.isnan(kept)]).sum())
    return float(np.exp(log_success))


def check_budget(costs: Costs, budget: Mapping[str, float]) -> list[dict[str, Any]]:
    """Compare costs with limits.

    Parameters
    ----------
    costs : Costs
    budget : mapping of str to float
        Keys are those of `BUDGETS`.

    Returns
    -------
    list of dict
        ``name``, ``relation``, ``limit``, ``value``, ``met`` for each limit.

    Raises
    ------
    InputError
        Unknown name, or a limit on something the device file does not allow to be computed.
    """
    entries = []
    for name, limit in budget.items():
        if name not in BUDGETS:
            raise InputError(f"unknown budget '{name[:60]}'", hint=nearest_name(name, BUDGETS))
        value = getattr(costs, name)
        if value is None:
            raise InputError(
                f"'{name}' cannot be computed for this device",
                required="the errors and durations of all gates used, in the device or gate set file",
            )
        met = value <= limit if BUDGETS[name] == "≤" else value >= limit
        entries.append({"name": name, "relation": BUDGETS[name], "limit": limit, "value": value, "met": bool(met)})
    return entries


def require_budget(entries: list[dict[str, Any]]) -> None:
    """Raise `BudgetError` if a limit is not met."""
    broken = tuple(entry for entry in entries if not entry["met"])
    if broken:
        raise BudgetError(broken)
