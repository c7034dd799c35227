"""Cut a circuit into windows of one or two wires, and multiply each window out.

A window takes every gate on a pair of wires until one of them is used with a third wire; one-qubit gates join the
window that is open on their wire, or the next one. Inserted swaps are gates like any other, so a swap beside a
gate costs only what the merged unitary costs. Measurements, resets and barriers are windows of their own.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numba as nb
import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit

__all__ = ["FIXED", "ONE", "TWO", "Fused", "fuse_circuit", "window_unitaries"]

Array = NDArray[np.complex128]

#: Kinds of window.
FIXED, ONE, TWO = 0, 1, 2


@dataclass(frozen=True, eq=False, slots=True)
class Fused:
    """A circuit cut into windows.

    Attributes
    ----------
    window : ndarray of int32, shape (m,)
        The window of each operation.
    kind : ndarray of int8, shape (W,)
        `FIXED`, `ONE` or `TWO`.
    offsets : ndarray of int64, shape (W + 1,)
        Slots of each window.
    wires : ndarray of int32, shape (slots,)
        The wire of each slot.
    """

    window: NDArray[np.int32]
    kind: NDArray[np.int8]
    offsets: NDArray[np.int64]
    wires: NDArray[np.int32]


@nb.njit("i8(i4[::1], i8[::1], b1[::1], i4[::1], i1[::1], i8[::1], i4[::1], i4[::1])", cache=True, nogil=True)
def _assign(
    qubits: Any, offsets: Any, unitary: Any, window: Any, kind: Any, creator: Any, merged: Any, last: Any
) -> int:
    """Fill `window`, `kind` and `creator`; `merged` and `last` come filled with -1. Return the number of windows."""
    m = len(unitary)
    total = 0
    for k in range(m):
        start, width = offsets[k], offsets[k + 1] - offsets[k]
        p = qubits[start]
        a = last[p]
        if unitary[k] and width == 1 and a >= 0 and kind[a] != 0:
            window[k] = a
            continue
        if unitary[k] and width == 2:
            b = last[qubits[start + 1]]
            if a >= 0 and a == b and kind[a] == 2:
                window[k] = a
                continue
            if a >= 0 and kind[a] == 1:
                merged[a] = total
            if b >= 0 and kind[b] == 1:
                merged[b] = total
        window[k] = total
        kind[total] = width if unitary[k] else 0
        creator[total] = k
        for j in range(start, start + width):
            last[qubits[j]] = total
        total += 1
    # Number the windows that are left by their creation: that order holds along every wire.
    alive = 0
    for w in range(total):
        if merged[w] < 0:
            merged[w] = -1 - alive
            kind[alive] = kind[w]
            creator[alive] = creator[w]
            alive += 1
    for k in range(m):
        w = window[k]
        window[k] = -1 - (merged[merged[w]] if merged[w] >= 0 else merged[w])
    return alive


def fuse_circuit(circuit: Circuit) -> Fused:
    """Cut a circuit of one- and two-qubit gates into windows.

    Parameters
    ----------
    circuit : Circuit
        Unitary operations on one or two qubits; others of any width.

    Returns
    -------
    Fused
    """
    m = len(circuit)
    window, kind, creator = np.empty(m, np.int32), np.empty(m, np.int8), np.empty(m, np.int64)
    merged, last = np.full(m, -1, np.int32), np.full(circuit.n_qubits, -1, np.int32)
    count = _assign(circuit.qubits, circuit.offsets, circuit.is_unitary, window, kind, creator, merged, last)
    created = circuit.take(creator[:count])
    return Fused(window, kind[:count].copy(), created.offsets, created.qubits)


@nb.njit(
    "void(i4[::1], i4[::1], i4[::1], c16[:,:,::1], c16[:,:,::1], i4[::1], c16[:,:,::1], c16[:,:,::1], c16[:,::1])",
    cache=True,
    nogil=True,
)
def _multiply(
    place: Any, slot: Any, row: Any, one: Any, two: Any, width: Any, out_one: Any, out_two: Any, old: Any
) -> None:
    """Multiply each operation onto the window at `place`; `slot` is -1 in a window of one wire, `old` is scratch."""
    for k in range(len(place)):
        w = place[k]
        if width[k] == 0:
            continue
        if width[k] == 1:
            a, b, c, d = one[row[k], 0, 0], one[row[k], 0, 1], one[row[k], 1, 0], one[row[k], 1, 1]
            if slot[k] < 0:
                for j in range(2):
                    x, y = out_one[w, 0, j], out_one[w, 1, j]
                    out_one[w, 0, j] = a * x + b * y
                    out_one[w, 1, j] = c * x + d * y
                continue
            # Rows whose bit of this slot is 0, and their partners.
            step = 2 - slot[k]
            other = 3 - step
            for i in range(0, 2 * other, other):
                for j in range(4):
                    x, y = out_two[w, i, j], out_two[w, i + step, j]
                    out_two[w, i, j] = a * x + b * y
                    out_two[w, i + step, j] = c * x + d * y
            continue
        # Element by element: assigning slices would compile for seconds.
        for i in range(4):
            for j in range(4):
                old[i, j] = out_two[w, i, j]
        for i in range(4):
            # With the wires exchanged, basis states 01 and 10 change places.
            p = i if slot[k] == 0 or i == 0 or i == 3 else 3 - i
            for j in range(4):
                total = 0j
                for h in range(4):
                    q = h if slot[k] == 0 or h == 0 or h == 3 else 3 - h
                    total += two[row[k], i, h] * old[q, j]
                out_two[w, p, j] = total


def window_unitaries(circuit: Circuit, fused: Fused) -> tuple[Array, Array]:
    """Multiply out every window, in its wires' order.

    Returns
    -------
    one : ndarray, shape (windows of kind ONE, 2, 2)
    two : ndarray, shape (windows of kind TWO, 4, 4)
        Each in the order of the windows.
    """
    widths = np.where(circuit.is_unitary, circuit.widths, 0).astype(np.int32)
    row = np.zeros(len(circuit), dtype=np.int32)
    tables = {width: np.empty((np.count_nonzero(widths == width), 2**width, 2**width), complex) for width in (1, 2)}
    filled = {1: 0, 2: 0}
    for rows, matrices in circuit.matrix_groups():
        width = int(widths[rows[0]])
        start = filled[width]
        tables[width][start : start + len(rows)] = matrices
        row[rows] = np.arange(start, start + len(rows))
        filled[width] += len(rows)
    first = circuit.qubits[circuit.offsets[:-1]]
    second_of_window = fused.wires[np.minimum(fused.offsets[:-1] + 1, len(fused.wires) - 1)]
    is_second = first == second_of_window[fused.window]
    slot = np.where(fused.kind[fused.window] == ONE, -1, is_second).astype(np.int32)
    rank = np.zeros(len(fused.kind), dtype=np.int32)
    for kind in (ONE, TWO):
        chosen = fused.kind == kind
        rank[chosen] = np.arange(np.count_nonzero(chosen))
    one = np.tile(np.eye(2, dtype=np.complex128), (int(np.sum(fused.kind == ONE)), 1, 1))
    two = np.tile(np.eye(4, dtype=np.complex128), (int(np.sum(fused.kind == TWO)), 1, 1))
    _multiply(rank[fused.window], slot, row, tables[1], tables[2], widths, one, two, np.empty((4, 4), complex))
    return one, two
