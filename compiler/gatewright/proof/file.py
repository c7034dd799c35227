"""Proof files: a zip archive of one JSON header and packed arrays; no pickle, nothing executable.

``proof.json`` states the format and its version, the version of gatewright, the fingerprints of source, output, gate
set and device, the kinds of claims, and type and shape of every array; each array is a little-endian member of its own.
`packing` says how arrays are packed. The bytes depend on the proof alone: reading and writing again gives the same.

A step K has ``K.initial``, ``K.final``, ``K.entry``, ``K.exit`` (as differences from the entries) and ``K.widths``
(integers), ``K.source_window`` and ``K.output_window`` (differences), ``K.claims``, and the parts of ``K.seams``;
``K.wires`` only where they do not follow; and, but for the last, the columns of the circuit it ends with.
"""

from __future__ import annotations

import io
import json
import math
import zipfile
import zlib
from collections.abc import Callable, Iterable, Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from gatewright._version import __version__
from gatewright.calibrated import without_matrix
from gatewright.circuit import Circuit
from gatewright.errors import InputError, ProofFileError, shorten
from gatewright.gates import BARRIER, DELAY, GATES, MEASURE, RESET, UNITARY, Gate
from gatewright.parameters import Affine, Parameter
from gatewright.proof.claims import CLAIM_KINDS
from gatewright.proof.fingerprints import Fingerprints
from gatewright.proof.packing import (
    follow_wires,
    pack_differences,
    pack_integers,
    pack_seams,
    unpack_differences,
    unpack_integers,
    unpack_seams,
)
from gatewright.proof.reorder import Reorder
from gatewright.proof.windows import Proof, Step

__all__ = ["FORMAT", "FORMAT_VERSION", "decode_proof", "encode_proof", "read_file", "read_proof"]

Decoded = TypeVar("Decoded")

FORMAT = "gatewright-proof"
FORMAT_VERSION = 2
#: Largest size of all arrays together, uncompressed.
MAX_BYTES = 1 << 32
MAX_HEADER = 1 << 24

_CIRCUIT = {
    "op": np.int16,
    "qubits": np.int32,
    "offsets": np.int64,
    "parameters": np.float64,
    "parameter_offsets": np.int64,
    "link": np.int32,
}
_GROWING = ("offsets", "parameter_offsets")
_SEAMS = ("code", "steps", "small", "odd")
_SPECIAL = {gate.name: gate for gate in (MEASURE, RESET, BARRIER, DELAY, UNITARY)}


def encode_proof(proof: Proof) -> bytes:
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
            arrays[f"{number}.window"] = pack_differences(step.window)
            arrays[f"{number}.rank"] = pack_differences(step.rank)
            steps.append({"output": None, "reorder": True})
            continue
        arrays |= {f"{number}.{name}": array for name, array in _pack_step(step).items()}
        steps.append({"output": _encode_circuit(step.output, f"{number}.output", arrays)})
    header = {
        "format": FORMAT,
        "format_version": FORMAT_VERSION,
        "gatewright": proof.version or __version__,
        "fingerprints": asdict(proof.made_for),
        "claims": [kind.name for kind in CLAIM_KINDS],
        "steps": steps,
        "arrays": {name: [array.dtype.str, list(array.shape)] for name, array in arrays.items()},
    }
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED, compresslevel=5) as archive:
        # ZipInfo's fixed default date keeps the bytes the same from run to run.
        archive.writestr(_member("proof.json"), json.dumps(header, indent=1))
        for name, array in arrays.items():
            archive.writestr(_member(name), array.astype(array.dtype.newbyteorder("<")).tobytes())
    return buffer.getvalue()


def _pack_step(step: Step) -> dict[str, NDArray[Any]]:
    packed = {
        "initial": pack_integers(step.initial),
        "final": pack_integers(step.final),
        "widths": pack_integers(np.diff(step.offsets)),
        "entry": pack_integers(step.entry),
        "exit": pack_integers(step.exit.astype(np.int64) - step.entry),
        "source_window": pack_differences(step.source_window),
        "output_window": pack_differences(step.output_window),
        "claims": step.claims.astype(np.uint8),
    }
    packed |= {f"seams.{part}": array for part, array in pack_seams(step.seams).items()}
    followed = follow_wires(step.initial, step.entry, step.exit)
    if followed is None or not np.array_equal(followed, step.wires):
        packed["wires"] = pack_integers(step.wires)
    return packed


def _member(name: str) -> zipfile.ZipInfo:
    info = zipfile.ZipInfo(name)
    info.compress_type = zipfile.ZIP_DEFLATED
    return info


def _encode_circuit(circuit: Circuit | None, prefix: str, arrays: dict[str, NDArray[Any]]) -> dict[str, Any] | None:
    if circuit is None:
        return None
    for gate in circuit.table:
        if gate.name not in _SPECIAL and GATES.get(gate.name) != gate and not without_matrix(gate):
            raise ProofFileError(
                f"the proof passes through the gate '{gate.name}', which is not in the standard table",
                hint="give wide gates of your own as explicit unitaries",
            )
    for name in _CIRCUIT:
        column = getattr(circuit, name)
        if name == "parameters":
            arrays[f"{prefix}.{name}"] = np.asarray(column, dtype=np.float64)
        else:
            arrays[f"{prefix}.{name}"] = pack_differences(column) if name in _GROWING else pack_integers(column)
    flat = [matrix.ravel() for matrix in circuit.matrices]
    arrays[f"{prefix}.matrices"] = np.concatenate(flat) if flat else np.zeros(0, dtype=np.complex128)
    return {
        "n_qubits": circuit.n_qubits,
        "n_bits": circuit.n_bits,
        "table": [gate.name for gate in circuit.table],
        "matrix_sizes": [len(matrix) for matrix in circuit.matrices],
        "calibrated": {gate.name: [gate.n_qubits, gate.n_parameters] for gate in circuit.table if without_matrix(gate)},
        **({"symbolic": _encode_symbolic(circuit.symbolic)} if circuit.symbolic else {}),
    }


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


def read_proof(path: str | Path) -> Proof:
    """Read a proof file.

    Raises
    ------
    ProofFileError
        Missing, truncated, edited, or of another version.
    """
    return read_file(path, decode_proof)


def read_file(path: str | Path, decode: Callable[[bytes], Decoded]) -> Decoded:
    """Read a file and decode its bytes; errors name the file."""
    where = str(path)
    try:
        data = Path(path).read_bytes()
    except OSError as error:
        raise ProofFileError(f"cannot read the proof file: {error.strerror}", where=where) from None
    try:
        return decode(data)
    except ProofFileError as error:
        raise error.located(where=where) from None


def decode_proof(data: bytes) -> Proof:
    """Decode the bytes of a proof file; see `read_proof`."""
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            members = {info.filename: info for info in archive.infolist()}
            if sum(info.file_size for info in members.values()) > MAX_BYTES:
                raise ProofFileError("the proof file is too large", required=f"{MAX_BYTES} bytes at most")
            header = _header(archive, members)
            if set(members) != {"proof.json", *header["arrays"]} or len(archive.infolist()) > len(members):
                raise ProofFileError("the proof file is damaged", required="one member for each array it lists")
            arrays = {name: _array(archive, members, name, entry) for name, entry in header["arrays"].items()}
        return _decode(header, arrays)
    except ProofFileError:
        raise
    except (zipfile.BadZipFile, zipfile.LargeZipFile, zlib.error, OSError, EOFError, NotImplementedError) as error:
        raise ProofFileError("the proof file is damaged", found=shorten(error)) from None
    except InputError as error:
        raise ProofFileError("the proof file is damaged", found=error.what) from None
    except (KeyError, TypeError, ValueError, AttributeError, IndexError, ArithmeticError, RuntimeError) as error:
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
    if dtype.kind not in "uifc" or name not in members or members[name].file_size != size:
        raise ProofFileError("the proof file is damaged", required=f"array '{shorten(name)}' of {size} bytes")
    return np.frombuffer(archive.read(members[name]), dtype=dtype).reshape(shape)


def _decode(header: dict[str, Any], arrays: dict[str, NDArray[Any]]) -> Proof:
    if header["claims"][: len(CLAIM_KINDS)] != [kind.name for kind in CLAIM_KINDS][: len(header["claims"])]:
        raise ProofFileError("the proof makes claims of kinds that this version does not know")
    steps: list[Step | Reorder] = []
    for number, entry in enumerate(header["steps"]):
        mine = {name.partition(".")[2]: array for name, array in arrays.items() if name.startswith(f"{number}.")}
        if entry.get("reorder") is True:
            window, rank = unpack_differences(mine["window"]), unpack_differences(mine["rank"])
            for array in (window, rank):
                if len(array) and not 0 <= array.min() <= array.max() < 1 << 31:
                    raise ProofFileError("the proof file is damaged", required="numbers of windows below 2³¹")
            steps.append(Reorder(window.astype(np.int32), rank.astype(np.int32)))
            continue
        output = None if entry["output"] is None else _decode_circuit(entry["output"], f"{number}.output", arrays)
        steps.append(_unpack_step(mine, len(header["claims"]), output))
    known = {name: str(header["fingerprints"][name]) for name in asdict(Fingerprints())}
    return Proof(tuple(steps), Fingerprints(**known), str(header["gatewright"]))


def _unpack_step(packed: dict[str, NDArray[Any]], kinds: int, output: Circuit | None) -> Step:
    widths = unpack_integers(packed["widths"])
    names = ("initial", "final", "entry", "exit")
    columns = {name: unpack_integers(packed[name]) for name in names}
    columns["exit"] = columns["exit"] + columns["entry"]
    columns |= {name: unpack_differences(packed[name]) for name in ("source_window", "output_window")}
    claims = packed["claims"]
    if len(widths) and not 0 <= widths.min() <= widths.max() <= len(columns["entry"]):
        raise ProofFileError("the proof file is damaged", required="windows of at least 0 slots")
    if claims.ndim != 1 or (claims >= kinds).any() or (claims >= len(CLAIM_KINDS)).any():
        raise ProofFileError("the proof file is damaged", required="claims of the kinds that it lists")
    for array in columns.values():
        if len(array) and not -1 <= array.min() <= array.max() < 1 << 31:
            raise ProofFileError("the proof file is damaged", required="numbers of wires and windows below 2³¹")
    short = {name: array.astype(np.int32) for name, array in columns.items()}
    if "wires" in packed:
        wires = unpack_integers(packed["wires"]).astype(np.int32)
    else:
        followed = follow_wires(short["initial"], short["entry"], short["exit"])
        if followed is None:
            raise ProofFileError("the proof file is damaged", required="slots that begin where others end")
        wires = followed
    offsets = np.concatenate([[0], np.cumsum(widths)])
    seams = unpack_seams({part: packed[f"seams.{part}"] for part in _SEAMS})
    if not offsets[-1] == len(wires) == len(seams) == len(short["entry"]) or len(claims) != len(widths):
        raise ProofFileError("the proof file is damaged", required="as many slots in every column")
    return Step(**short, offsets=offsets, wires=wires, seams=seams, output=output, claims=claims.astype(np.int8))


def _decode_circuit(entry: dict[str, Any], prefix: str, arrays: dict[str, NDArray[Any]]) -> Circuit:
    columns: dict[str, Any] = {}
    for name, dtype in _CIRCUIT.items():
        array = arrays[f"{prefix}.{name}"]
        if name != "parameters":
            array = unpack_differences(array) if name in _GROWING else unpack_integers(array)
        if array.ndim != 1:
            raise ProofFileError("the proof file is damaged", required=f"array '{name}' of one axis")
        columns[name] = array.astype(dtype)
    own = {str(name): Gate(str(name), int(n), int(p)) for name, (n, p) in entry.get("calibrated", {}).items()}
    table: tuple[Gate, ...] = tuple(_SPECIAL.get(name) or own.get(name) or GATES[name] for name in entry["table"])
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
