"""Describe a gate set, a device or a matrix before anything is compiled."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.devices import Device, GateSet
from gatewright.errors import GateSetError, GatewrightError, InputError, UnsupportedError
from gatewright.linalg import checked_unitary, unitarity_defect
from gatewright.reach_facts import edge_facts, haar_facts, target_facts, uses_in_shipped_sets
from gatewright.synthesis.controlled_not import cnot_count, count_reason
from gatewright.synthesis.entangler import classify
from gatewright.synthesis.euler import euler_angles
from gatewright.synthesis.haar_cost import reach_by_number
from gatewright.synthesis.native import entangler_parameters, native_set
from gatewright.synthesis.weyl import (
    canonical_coordinates,
    entangling_power,
    is_perfect_entangler,
    local_invariants,
)

__all__ = ["counting_bound", "describe"]


def describe(
    thing: Device | GateSet | ArrayLike, *, targets: Mapping[str, NDArray[np.complex128]] | None = None
) -> dict[str, Any]:
    """Describe a device, a native gate set or a unitary matrix.

    Parameters
    ----------
    thing : Device, GateSet or array_like, shape (2**n, 2**n)
    targets : mapping of str to ndarray, shape (4, 4), optional
        Two-qubit unitaries: how many uses of the gate set's entanglers each needs, and why no fewer.

    Returns
    -------
    dict
        With an entry ``kind``; plain values, ready for JSON.

    Raises
    ------
    MatrixError, NotUnitaryError
        For a matrix that is not a unitary.
    InputError
        Targets for a matrix, or a target that is not on two qubits.

    Examples
    --------
    >>> describe(np.diag([1, 1, 1, -1]))["cnot_count"]
    1
    """
    if not isinstance(thing, (Device, GateSet)):
        if targets:
            raise InputError("targets are counted in a gate set's entanglers", required="a gate set or a device")
        return _matrix(thing)
    facts = _device(thing) if isinstance(thing, Device) else _gate_set(thing)
    if targets:
        gate_set = thing.gate_set if isinstance(thing, Device) else thing
        facts["targets"] = {name: _target(gate_set, name, unitary) for name, unitary in targets.items()}
    return facts


def _target(gate_set: GateSet, name: str, unitary: NDArray[np.complex128]) -> dict[str, Any]:
    if unitary.shape != (4, 4):
        raise InputError("not a two-qubit target", required="2 qubits", found=f"shape {unitary.shape}", where=name)
    return {"coordinates": canonical_coordinates(unitary).tolist(), **target_facts(gate_set, unitary)}


def counting_bound(n: int) -> int:
    """Return the least number of CNOTs that almost all `n`-qubit unitaries need, by counting parameters.

    References
    ----------
    Shende, Markov, Bullock, PRA 69, 062321 (2004): ⌈(4ⁿ − 3n − 1)/4⌉.
    """
    return max(0, (int(4**n) - 3 * n + 2) // 4)


def _matrix(matrix: ArrayLike) -> dict[str, Any]:
    unitary, moved = checked_unitary(matrix)
    n = len(unitary).bit_length() - 1
    facts: dict[str, Any] = {
        "kind": "matrix",
        "qubits": n,
        "unitarity_defect": float(unitarity_defect(np.asarray(matrix, dtype=complex))),
        "distance_moved": moved,
        "cnot_lower_bound_generic": counting_bound(n),
    }
    if n == 1:
        angles = euler_angles(unitary, outer="z", inner="y")
        alpha, beta, gamma = (float(a) for a in angles.angles)
        facts["zyz_angles"] = {"first": gamma, "middle": beta, "last": alpha, "phase": float(angles.phase)}
    if n == 2:
        coordinates = canonical_coordinates(unitary)
        g1, g2 = local_invariants(unitary)
        uses = int(cnot_count(unitary))
        facts |= {
            "coordinates": coordinates.tolist(),
            "coordinates_over_pi": (coordinates / np.pi).tolist(),
            "invariants": {"G1": [float(g1.real), float(g1.imag)], "G2": float(g2)},
            "entangling_power": float(entangling_power(unitary)),
            "perfect_entangler": bool(is_perfect_entangler(coordinates)),
            "cnot_count": uses,
            "reason": count_reason(coordinates, uses),
            "uses_in_shipped_sets": uses_in_shipped_sets(unitary),
        }
    return facts


def _gate_set(gate_set: GateSet) -> dict[str, Any]:
    facts: dict[str, Any] = {
        "kind": "gate set",
        "name": gate_set.name,
        "description": gate_set.description,
        "gates": [
            {
                "name": native.gate.name,
                "qubits": native.gate.n_qubits,
                "ranges": [list(bounds) for bounds in native.ranges],
                "virtual": native.virtual,
                "measured": native.measured,
                "distance_moved": native.moved,
                "duration_ns": native.duration_ns,
                "error": native.error,
            }
            for native in gate_set.gates.values()
        ],
        "entanglers": [_entangler(native) for native in gate_set.two_qubit],
    }
    # Loading has made sure that the one-qubit gates reach all of SU(2); any entangler then completes the set.
    facts["universal"] = gate_set.can_entangle
    facts["reason"] = (
        "the one-qubit gates reach all of SU(2) and a two-qubit gate entangles (Brylinski and Brylinski 2002)"
        if gate_set.can_entangle
        else "the one-qubit gates reach all of SU(2), but no two-qubit gate entangles"
    )
    try:
        chosen = native_set(gate_set)
    except GatewrightError as error:
        facts["compiles"] = False
        facts["compiles_reason"] = str(error)
    else:
        facts["compiles"] = True
        facts["entangler_used"] = ", ".join(tool.gate.name for tool in chosen.straight) or None
        facts["one_qubit_gates"] = chosen.plan.summary
        facts["haar_random_gates"] = haar_facts(gate_set)
    return facts


def _entangler(native: Any) -> dict[str, Any]:
    facts: dict[str, Any] = {"name": native.gate.name, "parameters": [], "mean_uses": None, "reach": None}
    try:
        parameters = entangler_parameters(native)
        coordinates = canonical_coordinates(native.gate.matrix(parameters))
        facts |= {
            "parameters": list(parameters),
            "coordinates": coordinates.tolist(),
            "coordinates_over_pi": (coordinates / np.pi).tolist(),
            "perfect_entangler": bool(is_perfect_entangler(coordinates)),
        }
        x, y, z = classify(native.gate.matrix(parameters)).ideal.tolist()
        levels = reach_by_number(((x, y, z),))
        gains = np.maximum(np.diff([level.share for level in levels], prepend=0.0), 0.0)
        facts |= {
            "mean_uses": float(gains @ np.arange(len(levels))),
            "reach": {str(level.uses): float(gain) for level, gain in zip(levels, gains, strict=True)},
        }
    except (GateSetError, UnsupportedError) as error:
        facts["note"] = str(error)
    return facts


def _device(device: Device) -> dict[str, Any]:
    edges = device.edges
    degrees = np.bincount(edges.ravel(), minlength=device.n_qubits)[device.active]
    facts: dict[str, Any] = {
        "kind": "device",
        "name": device.name,
        "description": device.description,
        "gate_set": device.gate_set.name,
        "qubits": device.n_qubits,
        "edges": len(edges),
        "edge_list": edges.tolist(),
        "directed": bool(len(device.pairs) < 2 * len(edges)),
        "connected": device.is_connected,
        "components": [part.tolist() for part in device.components()],
        "out_of_service": {
            "qubits": np.flatnonzero(~device.active).tolist(),
            "edges": device.removed_edges.tolist(),
        },
        "degree": {"least": int(degrees.min()), "most": int(degrees.max())},
        "health": _health(device),
        "gate_set_facts": _gate_set(device.gate_set),
    }
    try:
        each, spread = edge_facts(device)
    except GatewrightError:
        return facts  # the gate set's facts say why
    return facts | {"haar_random_gates": spread, "each_edge": each}


def _health(device: Device) -> dict[str, Any]:
    """Spread of every calibrated quantity that is known."""
    active = device.active
    columns: dict[str, NDArray[np.float64]] = {
        "t1_ns": device.t1_ns[active],
        "t2_ns": device.t2_ns[active],
        "readout_error": device.readout_error[active],
    }
    for name, values in device.gate_errors.items():
        if not device.gate_set.gates[name].virtual:
            of_qubits = device.gate_set.gates[name].gate.n_qubits == 1
            columns[f"{name} error"] = values[active] if of_qubits else values
    return {
        name: {
            "known": int(np.count_nonzero(~np.isnan(values))),
            "of": len(values),
            "least": float(np.nanmin(values)),
            "median": float(np.nanmedian(values)),
            "most": float(np.nanmax(values)),
        }
        for name, values in columns.items()
        if len(values) and not np.isnan(values).all()
    }
