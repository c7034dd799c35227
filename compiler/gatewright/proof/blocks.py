"""Cut a circuit into blocks on pairs of wires, and take out those that do no more than one-qubit gates.

A block is all gates on a pair of wires until one of them meets a third, with the one-qubit gates before each of them.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, Piece, assemble
from gatewright.gates import UNITARY
from gatewright.linalg import kron
from gatewright.proof.products import multiply_runs, operation_matrices
from gatewright.proof.windows import Step

__all__ = ["FIXED", "LOOSE", "PAIR", "SWAP_ROWS", "WIDE", "Blocks", "factors_of", "without_idle_blocks"]

Array = NDArray[np.complex128]
Rows = NDArray[np.int64]

#: How far from a product a block may be for a search to go on; the checker judges by its own tolerance.
LOOSE = 1e-11
#: Kinds of block: measurement, reset or barrier; gates on a pair; a wider gate.
FIXED, PAIR, WIDE = 0, 2, 3
SWAP_ROWS = [0, 2, 1, 3]


class Blocks:
    """A circuit in blocks: lists for what is looked at one by one, arrays for matrices."""

    def __init__(self, circuit: Circuit) -> None:
        self.circuit = circuit
        n, widths, unitary = circuit.n_qubits, circuit.widths, circuit.is_unitary
        single = unitary & (widths == 1)
        self.single = np.flatnonzero(single)
        self.wide = np.flatnonzero(~single)
        rank = np.where(single, np.cumsum(single), np.cumsum(~single)) - 1
        singles = np.empty((len(self.single), 2, 2), dtype=np.complex128)
        rows = np.flatnonzero(unitary & (widths <= 2))
        pairs: list[tuple[Rows, Array]] = []
        for at, matrices, _ in operation_matrices(circuit, rows):
            if matrices.shape[-1] == 2:
                singles[rank[rows[at]]] = matrices
            else:
                pairs.append((rows[at], matrices))
        # Runs of one-qubit gates between wider operations; see `products.window_products`.
        is_wide = np.repeat(~single, widths)
        order = np.argsort(circuit.qubits, kind="stable")
        run = np.empty(len(circuit.qubits), dtype=np.int64)
        run[order] = np.cumsum(is_wide[order]) - is_wide[order] + circuit.qubits[order]
        last = np.cumsum(np.bincount(circuit.qubits[is_wide], minlength=n) + 1) - 1
        self.run_of_single = run[circuit.offsets[:-1][single]]
        #: The wide operation that takes up each run, -1 at the end of a wire.
        self.taker = np.full(n + int(is_wide.sum()), -1)
        self.taker[run[is_wide]] = np.repeat(np.arange(len(self.wide)), widths[self.wide])
        self.runs = multiply_runs(self.run_of_single, singles, n + int(is_wide.sum()))
        self.tails: list[int] = last.tolist()
        starts = circuit.offsets[self.wide]
        self.run_lists = [
            run[s : s + w].tolist() for s, w in zip(starts.tolist(), widths[self.wide].tolist(), strict=True)
        ]
        self._cut(unitary, widths, pairs, rank, run)

    def _cut(
        self, unitary: NDArray[np.bool_], widths: Rows, pairs: list[tuple[Rows, Array]], rank: Rows, run: Rows
    ) -> None:
        circuit = self.circuit
        self.kind: list[int] = []
        self.wires: list[tuple[int, ...]] = []
        self.members: list[list[int]] = []
        block_of = np.empty(len(self.wide), dtype=np.int64)
        turned = np.zeros(len(self.wide), dtype=bool)
        last = [-1] * circuit.n_qubits
        is_pair = (unitary & (widths == 2))[self.wide].tolist()
        is_unitary = unitary[self.wide].tolist()
        flat, offsets = circuit.qubits.tolist(), circuit.offsets[self.wide].tolist()
        for k, start in enumerate(offsets):
            wires = tuple(flat[start : start + len(self.run_lists[k])])
            block = last[wires[0]]
            if is_pair[k] and block >= 0 and block == last[wires[1]] and self.kind[block] == PAIR:
                self.members[block].append(k)
                turned[k] = wires[0] != self.wires[block][0]
            else:
                block = len(self.kind)
                self.kind.append(PAIR if is_pair[k] else WIDE if is_unitary[k] else FIXED)
                self.wires.append(wires)
                self.members.append([k])
                for wire in wires:
                    last[wire] = block
            block_of[k] = block
        self.block_of = block_of
        self.lanes: list[list[int]] = [[] for _ in range(circuit.n_qubits)]
        for block, wires in enumerate(self.wires):
            for wire in wires:
                self.lanes[wire].append(block)
        self.atoms = np.zeros((len(self.wide), 4, 4), dtype=np.complex128)
        for rows, matrices in pairs:
            at = rank[rows]
            index = circuit.offsets[rows][:, None] + np.arange(2)
            before = self.runs[run[index]]
            made = matrices @ kron(before[:, 0], before[:, 1])
            swapped = turned[at]
            made[swapped] = made[swapped][:, SWAP_ROWS][:, :, SWAP_ROWS]
            self.atoms[at] = made
        paired = np.array(is_pair, dtype=bool)
        self.products = multiply_runs(block_of[paired], self.atoms[paired], len(self.kind))
        #: Blocks that do no more than one-qubit gates and perhaps an exchange.
        pair = np.array(self.kind, dtype=np.int64) == PAIR
        self.local = _is_local(self.products) & pair
        self.trivial: list[bool] = (self.local | (_is_local(self.products[:, SWAP_ROWS]) & pair)).tolist()
        self.invariants = _invariants(self.products)


def without_idle_blocks(circuit: Circuit) -> Step | None:
    """Return the step that takes out every block of one-qubit gates and perhaps an exchange, or None without any.

    Such a block would keep neighbours apart that belong together. The one-qubit gates stay; for an exchange, the two
    wires take each other's place from there on. Every other operation is a window of its own.
    """
    blocks = Blocks(circuit)
    trivial = np.array(blocks.trivial, dtype=bool)
    if not trivial.any():
        return None
    taken_by = blocks.taker[blocks.run_of_single]
    owner = np.empty(len(circuit), dtype=np.int64)
    owner[blocks.wide] = blocks.block_of
    owner[blocks.single] = np.where(taken_by >= 0, blocks.block_of[taken_by], -1)
    gone = (owner >= 0) & trivial[owner]
    first = np.array([blocks.wide[members[0]] for members in blocks.members])
    key = np.where(gone, first[owner], np.arange(len(circuit)))
    keys, source_window = np.unique(key, return_inverse=True)
    creators = circuit.take(keys)
    wires = creators.qubits.copy()
    idle = np.flatnonzero(trivial)
    windows = np.searchsorted(keys, first[idle])
    at = creators.offsets[windows]
    pairs = np.array([blocks.wires[block] for block in idle])
    wires[at], wires[at + 1] = pairs[:, 0], pairs[:, 1]
    entry, leave, final = _follow(wires, at[~blocks.local[idle]], circuit.n_qubits)
    # The circuit that is left: each window's operation where its wires are.
    kept = np.flatnonzero(~gone)
    moved = replace(creators, qubits=entry)
    pieces = [piece for _, piece in moved.pieces(np.searchsorted(keys, kept), key[kept])]
    matrices = list(circuit.matrices)
    for slot in range(2):
        link = np.arange(len(matrices), len(matrices) + len(idle))
        for block in idle:
            product = blocks.products[block]
            parts = factors_of(product if blocks.local[block] else product[SWAP_ROWS])
            assert parts is not None
            matrices.append(parts[slot])
        pieces.append(Piece(UNITARY, first[idle], entry[at + slot][:, None], np.zeros((len(idle), 0)), link))
    output, order = assemble(replace(circuit, matrices=tuple(matrices)), circuit.n_qubits, pieces)
    joined = np.concatenate([piece.key for piece in pieces])[order]
    seams = np.zeros((len(wires), 4))
    seams[:, 0] = 1
    return Step(
        initial=np.arange(circuit.n_qubits, dtype=np.int32),
        final=final,
        source_window=source_window.astype(np.int32),
        output_window=np.searchsorted(keys, joined).astype(np.int32),
        offsets=creators.offsets,
        wires=wires,
        entry=entry,
        exit=leave,
        seams=seams,
        output=output,
    )


def _follow(
    wires: NDArray[np.int32], crossed: Rows, count: int
) -> tuple[NDArray[np.int32], NDArray[np.int32], NDArray[np.int32]]:
    """Return where each slot enters and leaves and each wire ends, if the two from each of `crossed` on exchange."""
    place = np.arange(count, dtype=np.int32)
    entry = np.empty_like(wires)
    begin = 0
    # Between two exchanges nothing moves: one gather serves all.
    for slot in crossed.tolist():
        entry[begin : slot + 2] = place[wires[begin : slot + 2]]
        a, b = wires[slot], wires[slot + 1]
        place[a], place[b] = place[b], place[a]
        begin = slot + 2
    entry[begin:] = place[wires[begin:]]
    leave = entry.copy()
    leave[crossed], leave[crossed + 1] = entry[crossed + 1], entry[crossed]
    return entry, leave, place


def _is_local(matrices: Array) -> NDArray[np.bool_]:
    """Return which 4 × 4 unitaries are products of one-qubit ones."""
    realigned = matrices.reshape(-1, 2, 2, 2, 2).transpose(0, 1, 3, 2, 4).reshape(-1, 16)
    largest = np.argmax(np.abs(realigned), axis=1)
    i, j = np.divmod(largest, 4)
    square = realigned.reshape(-1, 4, 4)
    at = np.arange(len(square))
    pivot = np.where(realigned[at, largest] == 0, 1, realigned[at, largest])
    product = square[at, :, j][:, :, None] * (square[at, i] / pivot[:, None])[:, None, :]
    with np.errstate(invalid="ignore"):
        return np.asarray(np.abs(square - product).max(axis=(1, 2), initial=0.0) < LOOSE)


def _invariants(matrices: Array) -> NDArray[np.float64]:
    """Return two numbers that one-qubit unitaries before and after, and an exchange of the wires, do not change.

    They are the sums of the fourth powers of the operator-Schmidt coefficients of U and of SWAP·U, the smaller first.
    """
    found = []
    for stack in (matrices, matrices[..., SWAP_ROWS, :]):
        shape = stack.shape[:-2]
        realigned = stack.reshape(*shape, 2, 2, 2, 2).swapaxes(-3, -2).reshape(*shape, 4, 4)
        gram = realigned @ realigned.conj().swapaxes(-1, -2)
        found.append((gram.real**2 + gram.imag**2).sum(axis=(-2, -1)))
    return np.sort(np.stack(found, axis=-1), axis=-1)


def factors_of(matrix: Array) -> tuple[Array, Array] | None:
    """Return the two one-qubit unitaries whose product a 4 × 4 unitary is, up to phase, or None."""
    realigned = matrix.reshape(2, 2, 2, 2).transpose(0, 2, 1, 3).reshape(4, 4)
    a = realigned[:, int(np.argmax(np.abs(realigned))) % 4]
    # Alternating least squares: from a column this close the factors are the nearest ones, so that along a chain of
    # blocks rounding does not grow, as it does if a column and a row are taken as they are.
    b = (a.conj() @ realigned) / np.vdot(a, a)
    a = (realigned @ b.conj()) / np.vdot(b, b)
    if not np.abs(realigned - a[:, None] * b).max() < LOOSE:
        return None
    return _unitary(a), _unitary(b)


def _unitary(flat: Array) -> Array:
    """Return the nearest matrix of SU(2), up to sign, to four entries that are close to a multiple of one."""
    p, q, r, s = flat / np.sqrt(flat[0] * flat[3] - flat[1] * flat[2])
    a, b = (p + s.conjugate()) / 2, (r - q.conjugate()) / 2
    size = np.sqrt(abs(a) ** 2 + abs(b) ** 2)
    a, b = a / size, b / size
    return np.array([[a, -b.conjugate()], [b, a.conjugate()]])
