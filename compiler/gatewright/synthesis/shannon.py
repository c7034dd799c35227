"""Unitaries on three and more qubits by the quantum Shannon decomposition.

A unitary is cut by the cosine-sine decomposition into block-diagonal unitaries around a multiplexed Ry; a
block-diagonal one, by an eigenvalue problem, into two unitaries on one qubit fewer around a multiplexed Rz; down
to two-qubit unitaries, which the later stages merge and synthesise. Multiplexed rotations on k controls take 2ᵏ
CNOTs in Gray-code order (Shende, Bullock, Markov, IEEE TCAD 25, 1000 (2006), theorems 8, 11, 12).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cossin, hadamard, schur

from gatewright.circuit import Piece
from gatewright.gates import GATES, UNITARY
from gatewright.linalg import dagger

__all__ = ["MAX_QUBITS", "shannon_pieces"]

Array = NDArray[np.complex128]

#: Above this (4ⁿ/2 CNOTs, each checked on a 2ⁿ × 2ⁿ matrix) the proof takes hours.
MAX_QUBITS = 8
#: Rotations all below this (radians) are rounding; leaving them out is part of the measured distance.
NEGLIGIBLE = 4e-15


@dataclass(frozen=True, slots=True)
class _Term:
    """A rotation (name and angle), a CNOT, or an explicit two-qubit matrix."""

    name: str
    wires: tuple[int, ...]
    angle: float = 0.0
    matrix: Array | None = None


def shannon_pieces(unitary: Array, qubits: NDArray[np.int32], key: int, matrices: list[Array]) -> list[Piece]:
    """Decompose one unitary into CNOTs, rotations and explicit two-qubit unitaries.

    Parameters
    ----------
    unitary : ndarray, shape (2**n, 2**n), n at least 2
    qubits : ndarray of int32, shape (n,)
        Where it acts.
    key : int
        Keys of the pieces count up from here.
    matrices : list of ndarray
        Table of explicit matrices; new ones are appended.

    Returns
    -------
    list of Piece
        Equal to the unitary up to global phase, within a small multiple of rounding.
    """
    pieces = []
    for number, term in enumerate(_decompose(unitary, tuple(range(len(qubits))))):
        link = None
        gate = UNITARY if term.matrix is not None else GATES[term.name]
        if term.matrix is not None:
            link = np.array([len(matrices)], dtype=np.int32)
            matrices.append(term.matrix)
        values = np.full((1, gate.n_parameters), term.angle)
        wires = qubits[list(term.wires)][None, :]
        pieces.append(Piece(gate, np.array([key + number], dtype=np.int64), wires, values, link))
    return pieces


def _decompose(unitary: Array, wires: tuple[int, ...]) -> list[_Term]:
    """Return the terms in time order for `unitary` on `wires`."""
    if len(wires) == 2:
        return [_Term("unitary", wires, matrix=unitary)]
    half = len(unitary) // 2
    left, theta, right = cossin(unitary, p=half, q=half, separate=True)
    angles = 2 * np.asarray(theta, dtype=np.float64)
    u1, u2, v1, v2 = (np.asarray(block, dtype=np.complex128) for block in (*left, *right))
    if np.abs(angles).max() <= NEGLIGIBLE:
        return _demultiplex(u1 @ v1, u2 @ v2, wires)
    return [
        *_demultiplex(v1, v2, wires),
        *_multiplexed_rotation("ry", angles, wires[1:], wires[0]),
        *_demultiplex(u1, u2, wires),
    ]


def _demultiplex(first: Array, second: Array, wires: tuple[int, ...]) -> list[_Term]:
    """Return ``first ⊕ second``, selected by ``wires[0]``, as W · multiplexed Rz · V."""
    # A Schur form of a normal matrix is diagonal with orthonormal vectors, also where eigenvalues coincide.
    form, v = schur(first @ dagger(second), output="complex")
    phases = np.angle(np.diagonal(form))
    w = np.exp(0.5j * phases)[:, None] * (dagger(v) @ second)
    return [
        *_decompose(w, wires[1:]),
        *_multiplexed_rotation("rz", -phases, wires[1:], wires[0]),
        *_decompose(v, wires[1:]),
    ]


def _multiplexed_rotation(
    name: str, angles: NDArray[np.float64], controls: tuple[int, ...], target: int
) -> list[_Term]:
    """Rotate `target` by ``angles[j]`` where the controls hold j (the first control most significant)."""
    if np.abs(angles).max() <= NEGLIGIBLE:
        return []
    k = len(controls)
    count = 2**k
    gray = np.arange(count) ^ (np.arange(count) >> 1)
    mixed = hadamard(count) @ angles / count
    terms = []
    for step in range(count):
        terms.append(_Term(name, (target,), float(mixed[gray[step]])))
        changed = int(gray[step] ^ gray[(step + 1) % count])
        terms.append(_Term("cx", (controls[k - changed.bit_length()], target)))
    return terms
