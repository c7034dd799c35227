"""Fingerprints of what a proof was made for: SHA-256 digests (FIPS 180-4) of source, output, gate set and device.

They depend on what is meant, not on how it is written: comments, registers' names, global phase, calibration and the
order in which gates are first used leave them as they are.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.errors import ProofError

if TYPE_CHECKING:
    from gatewright.devices import Device, GateSet

__all__ = ["Fingerprints", "check_fingerprints", "fingerprint", "fingerprint_device", "fingerprint_gate_set"]

#: Digits of a native gate's matrix entries that count: the last ones may differ from one processor to the next.
DIGITS = 9


@dataclass(frozen=True, slots=True)
class Fingerprints:
    """Digests in hexadecimal; empty for what was not given.

    Attributes
    ----------
    source, output, gate_set, device : str
    """

    source: str = ""
    output: str = ""
    gate_set: str = ""
    device: str = ""

    @classmethod
    def of(cls, source: Circuit, output: Circuit, device: Device | None = None) -> Fingerprints:
        """Return the fingerprints of these."""
        if device is None:
            return cls(fingerprint(source), fingerprint(output))
        return cls(
            fingerprint(source),
            fingerprint(output),
            fingerprint_gate_set(device.gate_set),
            fingerprint_device(device),
        )


def check_fingerprints(known: Fingerprints, source: Circuit, output: Circuit, device: Device | None) -> None:
    """Check that a proof was made for these.

    Raises
    ------
    ProofError
        Naming what has been changed.
    """
    found = asdict(Fingerprints.of(source, output, device))
    stated = asdict(known)
    changed = [name for name, digest in found.items() if digest and stated[name] and digest != stated[name]]
    if changed:
        names = " and the ".join(name.replace("_", " ") for name in changed)
        raise ProofError(
            f"the proof was made for something else: the {names} has been changed since",
            required=f"fingerprint {stated[changed[0]][:16]}…",
            found=f"{found[changed[0]][:16]}…",
        )


def fingerprint(circuit: Circuit) -> str:
    """Return the digest of what a circuit does: operations, qubits, parameters, bits and matrices.

    Examples
    --------
    >>> from gatewright.circuit import Builder
    >>> fingerprint(Builder(2).gate("h", 0).build())[:8]
    '9769e5fe'
    """
    used = np.flatnonzero(np.bincount(circuit.op, minlength=len(circuit.table)))
    order = sorted(used.tolist(), key=lambda k: (circuit.table[k].name, k))
    number = np.zeros(max(len(circuit.table), 1), dtype=np.int16)
    number[order] = np.arange(len(order))
    names = [circuit.table[k].name for k in order]
    explicit = [circuit.matrices[k] for k in circuit.link[circuit.is_named("unitary")].tolist()]
    measured = circuit.link[circuit.is_named("measure")]
    unknown = dict.fromkeys(circuit.link[circuit.is_symbolic].tolist() if circuit.symbolic else ())
    place = {row: k for k, row in enumerate(unknown)}
    rows = [place[row] for row in circuit.link[circuit.is_symbolic].tolist()] if circuit.symbolic else []
    facts = [circuit.n_qubits, circuit.n_bits, names]
    if rows:
        facts += [rows, [[str(value) for value in circuit.symbolic[row]] for row in unknown], circuit.inputs]
    op = number[circuit.op] if len(circuit) else circuit.op
    parameters = circuit.parameters + 0.0
    if rows:
        parameters[np.repeat(circuit.is_symbolic, np.diff(circuit.parameter_offsets))] = 0.0
    arrays = (op, circuit.qubits, circuit.offsets, parameters, measured, *explicit)
    return _digest(facts, arrays)


def fingerprint_gate_set(gate_set: GateSet) -> str:
    """Return the digest of a gate set: names, sizes, ranges, and matrices at sample points."""
    facts, arrays = [], []
    for name, native in sorted(gate_set.gates.items()):
        facts.append([name, native.gate.n_qubits, native.ranges, native.virtual])
        arrays.append(native.gate.matrix(native.samples()).round(DIGITS) + 0.0)
    return _digest(facts, arrays)


def fingerprint_device(device: Device) -> str:
    """Return the digest of what a device allows: its gate set, and the qubits and pairs in service for each gate."""
    names = sorted(device.gate_set.gates)
    widths = [device.gate_set.gates[name].gate.n_qubits for name in names]
    allowed: list[NDArray[Any]] = [
        device.allowed_qubits(name) if width == 1 else device.allowed_pairs(name)
        for name, width in zip(names, widths, strict=True)
    ]
    arrays: list[NDArray[Any]] = [np.asarray(device.active, dtype=np.uint8)]
    arrays += [np.asarray(pairs, dtype=np.int32) for pairs in allowed]
    return _digest([fingerprint_gate_set(device.gate_set), device.n_qubits, names], arrays)


def _digest(facts: Any, arrays: Iterable[NDArray[Any]]) -> str:
    digest = hashlib.sha256(json.dumps(facts).encode())
    for array in arrays:
        little = np.ascontiguousarray(array, dtype=array.dtype.newbyteorder("<"))
        digest.update(f"{little.dtype.str}{little.shape}".encode())
        digest.update(little.data if little.size else b"")
    return digest.hexdigest()
