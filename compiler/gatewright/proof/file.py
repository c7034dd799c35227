"""Proof files: a zip archive of one JSON header and plain little-endian arrays; no pickle, nothing executable.

``proof.json`` states the format, its version, the version of gatewright, fingerprints of source and output, and for
every array its type and shape. Each array is a member of its own. The bytes depend on the proof alone.
"""

from __future__ import annotations

import hashlib
import io
import json
import math
import zipfile
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright._version import __version__
from gatewright.circuit import Circuit
from gatewright.errors import ProofFileError, shorten
from gatewright.gates import BARRIER, GATES, MEASURE, RESET, UNITARY, Gate
from gatewright.parameters import Affine, Parameter
from gatewright.proof.reorder import Reorder
from gatewright.proof.windows import Proof, Step

__all__ = ["FORMAT", "ProofFile", "decode_proof", "encode_proof", "fingerprint", "read_proof"]

FORMAT = "gatewright-proof"
FORMAT_VERSION = 1
#: Largest size of all arrays together, uncompressed.
MAX_BYTES = 1 << 32
MAX_HEADER = 1 << 24

_STEP = {
    "initial": np.int32,
    "final": np.int32,
    "source_window": np.int32,
    "output_window": np.int32,
    "offsets": np.int64,
    "wires": np.int32,
    "entry": np.int32,
    "exit": np.int32,
    "seams": np.float64,
}
_CIRCUIT = {
    "op": np.int16,
    "qubits": np.int32,
    "offsets": np.int64,
    "parameters": np.float64,
    "parameter_offsets": np.int64,
    "link": np.int32,
}
_SPECIAL = {gate.name: gate for gate in (MEASURE, RESET, BARRIER, UNITARY)}


@dataclass(frozen=True, eq=False, slots=True)
class ProofFile:
    """A proof as read from a file, with the fingerprints of the circuits it was made for."""

    proof: Proof
    source: str
    output: str
    version: str


def fingerprint(circuit: Circuit) -> str:
    """Return a SHA-256 digest of what a circuit does: operations, qubits, parameters, bits and matrices."""
    digest = hashlib.sha256()
    names = json.dumps([circuit.n_qubits, circuit.n_bits, [gate.name for gate in circuit.table]])
    digest.update(names.encode())
    link, symbolic = circuit.link, circuit.symbolic
    if symbolic:
        # Numbered as they first occur, whatever the order of the table.
        unknown = circuit.is_symbolic
        number_of: dict[int, int] = {}
        link = link.copy()
        link[unknown] = [number_of.setdefault(k, len(number_of)) for k in link[unknown].tolist()]
        symbolic = tuple(symbolic[k] for k in number_of)
    arrays = (circuit.op, circuit.qubits, circuit.offsets, circuit.parameters, link, *circuit.matrices)
    for array in arrays:
        digest.update(np.ascontiguousarray(array).tobytes())
    if symbolic:
        digest.update(json.dumps([_encode_symbolic(symbolic), circuit.inputs]).encode())
    return digest.hexdigest()


def _encode_symbolic(symbolic: Sequence[Sequence[Parameter]]) -> list[list[Any]]:
    """Return unknown parameters as numbers, and as a constant with pairs of atom and coefficient."""
    return [
        [
            [value.constant, [list(term) for term in value.terms]] if isinstance(value, Affine) else value
            for value in row
        ]
        for row in symbolic
    ]


def _decode_symbolic(entry: Any) -> tuple[tuple[Parameter, ...], ...]:
    rows = []
    for row in entry:
        values: list[Parameter] = []
        for value in row:
            if isinstance(value, list):
                terms = tuple((str(atom), float(factor)) for atom, factor in value[1])
                value = Affine(float(value[0]), terms)
                numbers = (value.constant, *(factor for _, factor in terms))
                if list(terms) != sorted(terms) or len(dict(terms)) < len(terms) or not terms:
                    raise ValueError("unknown parameters out of order")
            else:
                numbers = (float(value),)
            if not all(math.isfinite(number) for number in numbers):
                raise ValueError("a parameter that is not finite")
            values.append(value if isinstance(value, Affine) else float(value))
        rows.append(tuple(values))
    return tuple(rows)


def encode_proof(proof: Proof, source: Circuit, output: Circuit) -> bytes:
    """Return the bytes of a proof file.

    Raises
    ------
    ProofFileError
        A circuit between two steps uses a gate that is not in the standard table.
    """
    arrays: dict[str, NDArray[Any]] = {}
    steps: list[dict[str, Any]] = []
    for number, step in enumerate(proof.steps):
        if isinstance(step, Reorder):
            arrays[f"{number}.window"] = np.asarray(step.window, dtype=np.int32)
            arrays[f"{number}.rank"] = np.asarray(step.rank, dtype=np.int32)
            steps.append({"reorder": True})
            continue
        for name, dtype in _STEP.items():
            arrays[f"{number}.{name}"] = np.asarray(getattr(step, name), dtype=dtype)
        steps.append({"output": _encode_circuit(step.output, f"{number}.output", arrays)})
    header = {
        "format": FORMAT,
        "format_version": FORMAT_VERSION,
        "gatewright": __version__,
        "source": fingerprint(source),
        "output": fingerprint(output),
        "steps": steps,
        "arrays": {name: [array.dtype.str, list(array.shape)] for name, array in arrays.items()},
    }
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as archive:
        # ZipInfo's fixed default date keeps the bytes the same from run to run.
        archive.writestr(_member("proof.json"), json.dumps(header, indent=1))
        for name, array in arrays.items():
            archive.writestr(_member(name), array.astype(array.dtype.newbyteorder("<")).tobytes())
    return buffer.getvalue()


def _member(name: str) -> zipfile.ZipInfo:
    info = zipfile.ZipInfo(name)
    info.compress_type = zipfile.ZIP_DEFLATED
    return info


def _encode_circuit(circuit: Circuit | None, prefix: str, arrays: dict[str, NDArray[Any]]) -> dict[str, Any] | None:
    if circuit is None:
        return None
    for gate in circuit.table:
        if gate.name not in _SPECIAL and GATES.get(gate.name) != gate:
            raise ProofFileError(
                f"the proof passes through the gate '{gate.name}', which is not in the standard table",
                hint="give wide gates of your own as explicit unitaries",
            )
    for name, dtype in _CIRCUIT.items():
        arrays[f"{prefix}.{name}"] = np.asarray(getattr(circuit, name), dtype=dtype)
    flat = [matrix.ravel() for matrix in circuit.matrices]
    arrays[f"{prefix}.matrices"] = np.concatenate(flat) if flat else np.zeros(0, dtype=np.complex128)
    return {
        "n_qubits": circuit.n_qubits,
        "n_bits": circuit.n_bits,
        "table": [gate.name for gate in circuit.table],
        "matrix_sizes": [len(matrix) for matrix in circuit.matrices],
        **({"symbolic": _encode_symbolic(circuit.symbolic)} if circuit.symbolic else {}),
    }


def read_proof(path: str | Path) -> ProofFile:
    """Read a proof file.

    Raises
    ------
    ProofFileError
        Missing, truncated, edited, or of another version.
    """
    where = str(path)
    try:
        data = Path(path).read_bytes()
    except OSError as error:
        raise ProofFileError(f"cannot read the proof file: {error.strerror}", where=where) from None
    try:
        return decode_proof(data)
    except ProofFileError as error:
        raise error.located(where=where) from None


def decode_proof(data: bytes) -> ProofFile:
    """Decode the bytes of a proof file; see `read_proof`."""
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            members = {info.filename: info for info in archive.infolist()}
            if sum(info.file_size for info in members.values()) > MAX_BYTES:
                raise ProofFileError("the proof file is too large", required=f"{MAX_BYTES} bytes at most")
            header = _header(archive, members)
            arrays = {name: _array(archive, members, name, entry) for name, entry in header["arrays"].items()}
        return _decode(header, arrays)
    except ProofFileError:
        raise
    except (zipfile.BadZipFile, zipfile.LargeZipFile, OSError, EOFError, NotImplementedError) as error:
        raise ProofFileError("the proof file is damaged", found=shorten(error)) from None
    except (KeyError, TypeError, ValueError, AttributeError, IndexError, OverflowError, RuntimeError) as error:
        raise ProofFileError(
            "the proof file is damaged", required=f"the fields of {FORMAT} {FORMAT_VERSION}", found=shorten(error)
        ) from None


def _header(archive: zipfile.ZipFile, members: dict[str, zipfile.ZipInfo]) -> dict[str, Any]:
    info = members.get("proof.json")
    if info is None or info.file_size > MAX_HEADER:
        raise ProofFileError("this is not a proof file", required="an archive that holds proof.json")
    header = json.loads(archive.read(info))
    if not isinstance(header, dict) or header.get("format") != FORMAT:
        raise ProofFileError("this is not a proof file", required=f"format '{FORMAT}'")
    if header.get("format_version") != FORMAT_VERSION:
        raise ProofFileError(
            "the proof file is of another version",
            required=str(FORMAT_VERSION),
            found=shorten(header.get("format_version")),
        )
    return header


def _array(archive: zipfile.ZipFile, members: dict[str, zipfile.ZipInfo], name: str, entry: Any) -> NDArray[Any]:
    kind, shape = entry
    dtype = np.dtype(kind)
    size = math.prod(int(length) for length in shape) * dtype.itemsize
    if dtype.kind not in "ifc" or name not in members or members[name].file_size != size:
        raise ProofFileError("the proof file is damaged", required=f"array '{shorten(name)}' of {size} bytes")
    return np.frombuffer(archive.read(members[name]), dtype=dtype).reshape(shape)


def _decode(header: dict[str, Any], arrays: dict[str, NDArray[Any]]) -> ProofFile:
    steps: list[Step | Reorder] = []
    for number, entry in enumerate(header["steps"]):
        if entry.get("reorder") is True:
            claim = {name: arrays[f"{number}.{name}"].astype(np.int32) for name in ("window", "rank")}
            _require_dimensions(claim, {})
            steps.append(Reorder(**claim))
            continue
        columns = {name: arrays[f"{number}.{name}"].astype(dtype) for name, dtype in _STEP.items()}
        _require_dimensions(columns, {"seams": 2})
        if len(columns["offsets"]) < 1 or columns["offsets"][-1] != len(columns["wires"]):
            raise ProofFileError("the proof file is damaged", required="offsets that end at the number of slots")
        if columns["offsets"][0] != 0 or (np.diff(columns["offsets"]) < 0).any():
            raise ProofFileError("the proof file is damaged", required="offsets that increase from 0")
        output = None if entry["output"] is None else _decode_circuit(entry["output"], f"{number}.output", arrays)
        steps.append(Step(**columns, output=output))
    return ProofFile(Proof(tuple(steps)), str(header["source"]), str(header["output"]), str(header["gatewright"]))


def _require_dimensions(columns: dict[str, NDArray[Any]], but: dict[str, int]) -> None:
    for name, array in columns.items():
        if array.ndim != but.get(name, 1):
            raise ProofFileError("the proof file is damaged", required=f"array '{name}' of {but.get(name, 1)} axes")


def _decode_circuit(entry: dict[str, Any], prefix: str, arrays: dict[str, NDArray[Any]]) -> Circuit:
    columns: dict[str, Any] = {name: arrays[f"{prefix}.{name}"].astype(dtype) for name, dtype in _CIRCUIT.items()}
    _require_dimensions(columns, {})
    table: tuple[Gate, ...] = tuple(_SPECIAL.get(name) or GATES[name] for name in entry["table"])
    sizes = [int(size) for size in entry["matrix_sizes"]]
    circuit = Circuit(
        n_qubits=int(entry["n_qubits"]),
        n_bits=int(entry["n_bits"]),
        table=table,
        matrices=tuple(_split(arrays[f"{prefix}.matrices"], sizes)),
        symbolic=_decode_symbolic(entry.get("symbolic", [])),
        **columns,
    )
    _require_consistent(circuit)
    return circuit


def _split(flat: NDArray[Any], sizes: Iterable[int]) -> Iterable[NDArray[np.complex128]]:
    start = 0
    for size in sizes:
        yield flat[start : start + size * size].astype(np.complex128).reshape(size, size)
        start += size * size


def _require_consistent(circuit: Circuit) -> None:
    """Check that a circuit from outside indexes nothing that it does not have."""
    m = len(circuit.op)
    ok = len(circuit.link) == m
    for offsets, flat in ((circuit.offsets, circuit.qubits), (circuit.parameter_offsets, circuit.parameters)):
        ok = ok and len(offsets) == m + 1 and offsets[0] == 0 and offsets[-1] == len(flat)
        ok = ok and bool((np.diff(offsets) >= 0).all())
    if ok and m:
        ok = 0 <= circuit.op.min() and circuit.op.max() < len(circuit.table)
        ok = ok and circuit.qubits.min(initial=0) >= 0 and circuit.qubits.max(initial=0) < circuit.n_qubits
    if ok and m:
        widths = np.array([gate.n_qubits for gate in circuit.table])[circuit.op]
        numbers = np.array([gate.n_parameters for gate in circuit.table])[circuit.op]
        explicit = np.array([gate.name == UNITARY.name for gate in circuit.table])[circuit.op]
        sizes = np.array([len(matrix) for matrix in circuit.matrices] or [0])
        link = circuit.link[explicit]
        ok = bool(((widths < 0) | (widths == circuit.widths)).all())
        ok = ok and bool((numbers == np.diff(circuit.parameter_offsets)).all())
        ok = ok and bool(((link >= 0) & (link < len(circuit.matrices))).all())
        ok = ok and bool((sizes[link] == 2 ** circuit.widths[explicit]).all())
        ok = ok and all(_unitary(matrix) for matrix in circuit.matrices)
        named = np.array([gate.function is not None for gate in circuit.table])[circuit.op]
        lengths = np.array([len(row) for row in circuit.symbolic] or [0])
        link = circuit.link[named & (circuit.link >= 0)]
        ok = ok and bool((link < len(circuit.symbolic)).all())
        ok = ok and bool((lengths[link] == numbers[named & (circuit.link >= 0)]).all())
    if not ok:
        raise ProofFileError("the proof file is damaged", required="a consistent circuit between its steps")


def _unitary(matrix: NDArray[np.complex128]) -> bool:
    gram = matrix.conj().T @ matrix
    return bool(np.abs(gram - np.eye(len(matrix))).max(initial=0.0) < 1e-9)
