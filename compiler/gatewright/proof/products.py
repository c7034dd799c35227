"""Multiply windows out in batches, and bound the rounding of doing so.

The bounds are those of floating-point arithmetic (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed.,
SIAM 2002, chapter 3): a real inner product of length k is off by at most γ_k = k u / (1 - k u) times the inner
product of absolute values, u = 2⁻⁵³, whatever the order of summation and with or without fused operations. A complex
d × d product is made of real inner products of length 2d, so it is off by at most √2 γ_2d |A||B| entry by entry, and
by 2√2 d² u in operator norm where the factors are unitary (‖|A|‖ ≤ √d); `multiplication` takes 3 d² u.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, apply_matrix, apply_operations
from gatewright.gates import GATES, UNITARY, Gate
from gatewright.linalg import dagger, kron, reorder_qubits

__all__ = [
    "BATCH_WIDTH",
    "UNIT",
    "Held",
    "frobenius_distances",
    "multiplication",
    "multiply_runs",
    "operation_matrices",
    "permute_rows",
    "quaternion_matrices",
    "window_products",
]

Array = NDArray[np.complex128]
Rows = NDArray[np.int64]
Vector = NDArray[np.float64]

#: Unit roundoff of float64.
UNIT = 2.0**-53
#: Relative error of an entry of a gate's matrix: up to two elementary functions within 4 units in the last place and
#: their product; the constants of the table are rounded square roots.
FORMULA, CONSTANT = 20 * UNIT, 2 * UNIT
#: Windows up to this many wires are multiplied out in batches; wider ones, one operation after another.
BATCH_WIDTH = 5
#: Of a seam's matrix: a quaternion that is divided by its norm.
SEAM = 10 * UNIT


class Held:
    """The operations of some windows of one width: `rows` by window and time, and where each acts.

    Attributes
    ----------
    circuit : Circuit
    rows : ndarray of int, shape (k,)
    window : ndarray of int, shape (k,)
        Number of each operation's window, from 0.
    offsets, slots : ndarray of int, shapes (k + 1,) and (offsets[-1],)
        Operation i acts on the slots ``slots[offsets[i]:offsets[i + 1]]`` of its window.
    count, width : int
        Windows, and slots of each.
    """

    __slots__ = ("circuit", "count", "offsets", "rows", "slots", "width", "window")

    def __init__(
        self, circuit: Circuit, rows: Rows, window: Rows, offsets: Rows, slots: Rows, count: int, width: int
    ) -> None:
        self.circuit, self.rows, self.window = circuit, rows, window
        self.offsets, self.slots, self.count, self.width = offsets, slots, count, width

    def slots_by_operation(self) -> list[tuple[int, ...]]:
        """Return the slots of each operation."""
        bounds = self.offsets.tolist()
        return [tuple(self.slots[i:j].tolist()) for i, j in itertools.pairwise(bounds)]


def multiplication(size: Any) -> Any:
    """Return a bound on the operator-norm error of a product of two unitaries of that size."""
    return 3 * size * size * UNIT


def operation_matrices(circuit: Circuit, rows: Rows) -> Iterator[tuple[Rows, Array, Vector]]:
    """Yield, kind by kind, positions in `rows`, matrices, and bounds on the matrices' operator-norm errors.

    A gate of the table is what its formula says for the parameters as given. An explicit matrix, and a native gate of
    a device, stands for the unitary nearest to it: its error counts ‖M†M - 1‖, which that distance does not exceed.
    """
    kinds = circuit.op[rows]
    for k, gate in enumerate(circuit.table):
        at = np.flatnonzero(kinds == k)
        if gate.name == UNITARY.name:
            widths = circuit.widths[rows[at]]
            for width in np.unique(widths).tolist():
                same = at[widths == width]
                matrices = np.stack([circuit.matrices[i] for i in circuit.link[rows[same]]])
                yield same, matrices, _defects(matrices)
        elif len(at) and gate.function is not None:
            starts = circuit.parameter_offsets[rows[at]]
            values = circuit.parameters[starts[:, None] + np.arange(gate.n_parameters)]
            yield at, *_evaluated(gate, values)


def _evaluated(gate: Gate, values: Vector) -> tuple[Array, Vector]:
    size = 2**gate.n_qubits
    standard = GATES.get(gate.name) == gate
    if not gate.n_parameters:
        one = gate.matrix(values[:1])
        error = CONSTANT * np.sqrt(size) + (0.0 if standard else float(_defects(one)[0]))
        return np.broadcast_to(one, (len(values), size, size)), np.full(len(values), error)
    matrices = gate.matrix(values)
    errors = FORMULA * np.sqrt(size) + 2 * UNIT * np.abs(values).sum(axis=1)
    return matrices, errors if standard else errors + _defects(matrices)


def _defects(matrices: Array) -> Vector:
    gram = _times(dagger(matrices), matrices) - np.eye(matrices.shape[-1])
    return np.asarray(np.sqrt((gram.real**2 + gram.imag**2).sum(axis=(1, 2))) + multiplication(matrices.shape[-1]))


def window_products(held: Held, lead: list[Array], trail: list[Array]) -> tuple[Array, Vector]:
    """Multiply windows out, the last operation leftmost.

    One-qubit operations are first multiplied along their slot, up to the next wider operation on it.

    Parameters
    ----------
    held : Held
    lead, trail : list of ndarray, shape (count, width, 2, 2)
        One-qubit factors on all slots, before and after the operations.

    Returns
    -------
    products : ndarray, shape (count, 2**width, 2**width)
    rounding : ndarray, shape (count,)
        Bound on the operator-norm error of each.
    """
    width, slots, offsets = held.width, held.slots, held.offsets
    if width > BATCH_WIDTH:
        return _one_window(held, lead, trail)
    size = 2**width
    lengths = np.diff(offsets)
    single = lengths == 1
    rank = np.where(single, np.cumsum(single), np.cumsum(~single)) - 1
    singles = np.empty((np.count_nonzero(single), 2, 2), dtype=np.complex128)
    rounding = np.full(held.count, width * (len(lead) + len(trail)) * (SEAM + multiplication(2)))
    wider = []
    for at, matrices, errors in operation_matrices(held.circuit, held.rows):
        own = matrices.shape[-1]
        if own == 2:
            singles[rank[at]] = matrices
            errors = errors + multiplication(2)
        else:
            wider.append((at, matrices))
            errors = errors + 2 * multiplication(own) + multiplication(size)
        rounding += np.bincount(held.window[at], errors, held.count)
    # The run that an operation joins, or takes up: every slot has one run more than wider operations.
    lane = np.repeat(held.window, lengths) * width + slots
    is_wide = np.repeat(~single, lengths)
    order = np.argsort(lane, kind="stable")
    run = np.empty(len(lane), dtype=np.int64)
    run[order] = np.cumsum(is_wide[order]) - is_wide[order] + lane[order]
    last = np.cumsum(np.bincount(lane[is_wide], minlength=held.count * width) + 1) - 1
    first = np.concatenate([[0], last[:-1] + 1])
    keys = [*(first for _ in lead), run[offsets[:-1][single]], *(last for _ in trail)]
    factors = [*(a.reshape(-1, 2, 2) for a in lead), singles, *(a.reshape(-1, 2, 2) for a in trail)]
    runs = multiply_runs(np.concatenate(keys), np.concatenate(factors), held.count * width + int(is_wide.sum()))
    tails = runs[last.reshape(-1, width)]
    if width == 1:
        return tails[:, 0], rounding
    embedded = np.empty((np.count_nonzero(~single), size, size), dtype=np.complex128)
    for at, matrices in wider:
        index = offsets[at][:, None] + np.arange(int(lengths[at[0]]))
        merged = _times(matrices, _tensor(runs[run[index]]))
        code = (slots[index] * width ** np.arange(index.shape[1])).sum(axis=1)
        for value in np.unique(code):
            same = np.flatnonzero(code == value)
            embedded[rank[at[same]]] = _embed(merged[same], slots[index[same[0]]].tolist(), width)
    product = multiply_runs(held.window[~single], embedded, held.count)
    rounding += multiplication(size) + 3 * UNIT * width * 2 ** (width / 2)
    return _times(_tensor(tails), product), rounding


def _one_window(held: Held, lead: list[Array], trail: list[Array]) -> tuple[Array, Vector]:
    """Multiply one wide window out, one operation after another."""
    width, lengths = held.width, np.diff(held.offsets)
    growth = 2 ** (width / 2)
    errors = 2 * growth * multiplication(2.0**lengths)
    for at, _, own in operation_matrices(held.circuit, held.rows):
        errors[at] += own
    seams = width * (len(lead) + len(trail)) * (SEAM + growth * multiplication(2))
    product = np.eye(2**width, dtype=np.complex128)
    for factors in lead:
        product = _apply_all(factors[0], product)
    piece = replace(
        held.circuit.take(held.rows), n_qubits=width, qubits=held.slots.astype(np.int32), qubit_registers=()
    )
    product = apply_operations(piece, range(len(held.rows)), range(width), product)
    for factors in trail:
        product = _apply_all(factors[0], product)
    return product[None], np.array([errors.sum() + seams])


def _apply_all(factors: Array, product: Array) -> Array:
    for slot, matrix in enumerate(factors):
        product = apply_matrix(matrix, [slot], product, len(factors))
    return product


def multiply_runs(key: Rows, factors: Array, count: int) -> Array:
    """Multiply the factors that have the same key, neighbours two by two, so that every round is one batch.

    Parameters
    ----------
    key : ndarray of int, shape (k,)
        Below `count`; equal keys are in order of time.
    factors : ndarray, shape (k, d, d)

    Returns
    -------
    ndarray, shape (count, d, d)
        The later factor is on the left; identities where there is none.
    """
    size = factors.shape[-1]
    if len(key) and (np.diff(key) < 0).any():
        order = np.argsort(key, kind="stable")
        key, factors = key[order], factors[order]
    out = np.broadcast_to(np.eye(size, dtype=np.complex128), (count, size, size)).copy()
    while len(key):
        begins = np.ones(len(key), dtype=bool)
        begins[1:] = key[1:] != key[:-1]
        start = np.flatnonzero(begins)
        lengths = np.diff(start, append=len(key))
        alone = start[lengths == 1]
        out[key[alone]] = factors[alone]
        within = np.arange(len(key)) - np.repeat(start, lengths)
        lengths = np.repeat(lengths, lengths)
        left = np.flatnonzero((within % 2 == 0) & (lengths > 1))
        paired = within[left] + 1 < lengths[left]
        product = factors[left]
        product[paired] = _times(factors[left[paired] + 1], product[paired])
        key, factors = key[left], product
    return out


def _times(a: Array, b: Array) -> Array:
    """Multiply stacks of matrices; those of one qubit element by element, which is several times faster."""
    if a.shape[-1] != 2:
        return np.asarray(a @ b)
    out = np.empty(np.broadcast_shapes(a.shape, b.shape), dtype=np.complex128)
    for i in range(2):
        for j in range(2):
            out[..., i, j] = a[..., i, 0] * b[..., 0, j] + a[..., i, 1] * b[..., 1, j]
    return out


def _tensor(factors: Array) -> Array:
    """Kronecker product of the one-qubit matrices of each window, shape (k, width, 2, 2)."""
    product = factors[:, 0]
    for slot in range(1, factors.shape[1]):
        product = kron(product, factors[:, slot])
    return product


def _embed(matrices: Array, slots: list[int], width: int) -> Array:
    """Return `matrices` on `slots` of a window of `width` qubits."""
    rest = [slot for slot in range(width) if slot not in slots]
    held = slots + rest
    if held == list(range(width)) and not rest:
        return matrices
    wide = kron(matrices, np.eye(2 ** len(rest)))
    return reorder_qubits(wide, tuple(held.index(slot) for slot in range(width)))


def frobenius_distances(left: Array, right: Array) -> Vector:
    """Return the Frobenius distance of each pair, up to a phase."""
    overlap = np.einsum("nij,nij->n", left, right.conj())
    size = np.abs(overlap)
    phase = np.where(size > 0, overlap / np.where(size > 0, size, 1), 1)
    return np.asarray(np.linalg.norm(left - phase[:, None, None] * right, axis=(1, 2)))


def quaternion_matrices(q: Vector) -> Array:
    """Return the unitaries of quaternions (a, b, c, d), shape (k, 4): a - i(b X + c Y + d Z), after normalising."""
    a, b, c, d = (q / np.linalg.norm(q, axis=1, keepdims=True)).T
    return np.asarray(np.stack([a - 1j * d, -c - 1j * b, c - 1j * b, a + 1j * d], axis=-1).reshape(-1, 2, 2))


def permute_rows(matrices: Array, entry: NDArray[np.int32], leave: NDArray[np.int32]) -> Array:
    """Move the qubit of each slot to the slot whose entry is its exit (rows only: a product from the left)."""
    width = entry.shape[1]
    moving = np.flatnonzero((entry != leave).any(axis=1))
    if not len(moving):
        return matrices
    target = np.argmax(entry[moving][:, None, :] == leave[moving][:, :, None], axis=2)
    bits = (np.arange(2**width)[:, None] >> np.arange(width - 1, -1, -1)) & 1
    rows = (bits[None] << (width - 1 - target)[:, None, :]).sum(axis=2)
    moved = np.empty_like(matrices[moving])
    np.put_along_axis(moved, np.broadcast_to(rows[:, :, None], moved.shape), matrices[moving], axis=1)
    matrices[moving] = moved
    return matrices
