"""Cut a circuit into blocks for routing: what runs on one pair in a row, what it costs, and what it commutes with.

A block is a run of two-qubit gates on one pair with the one-qubit gates between them; every other operation is an item
of its own. Two items commute if on every wire that they share both commute with the same Pauli operator: both are then
block-diagonal in that operator's basis, and their blocks act on different wires. Such runs are groups, whose items may
be routed in any order. All of this is found from the matrices.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.gates import UNITARY
from gatewright.mapping.operations import GROUP, Operations, make_operations
from gatewright.stages.windows import FIXED, ONE, TWO, Fused, window_unitaries
from gatewright.synthesis.weyl import canonical_coordinates, mirrored_coordinates

if TYPE_CHECKING:
    from gatewright.synthesis.native import NativeSet

__all__ = ["Blocks", "cut_blocks"]

Array = NDArray[np.complex128]
#: How far from commuting with a Pauli operator an item may be; it counts in the error bound where it is used.
TOLERANCE = 1e-13


@dataclass(frozen=True, eq=False, slots=True)
class Blocks:
    """A circuit cut into items.

    Attributes
    ----------
    item : ndarray of int32, shape (m,)
        The item of each operation; items are numbered by their first operations.
    operations : Operations
        The items as routing wants them, on as many wires as the device has qubits, and bits behind these.
    """

    item: NDArray[np.int32]
    operations: Operations

    def expand(self, events: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return `events` with the operations of each item in its place; negative events stay."""
        by_item = np.argsort(self.item, kind="stable")
        size = np.bincount(self.item, minlength=len(self.operations))
        start = np.cumsum(size) - size
        is_item = events >= 0
        lengths = np.where(is_item, size[np.where(is_item, events, 0)] if len(size) else 1, 1)
        owner = np.repeat(np.arange(len(events)), lengths)
        within = np.arange(len(owner)) - (np.cumsum(lengths) - lengths)[owner]
        event = events[owner]
        if not len(by_item):
            return event
        at = np.where(event >= 0, start[np.maximum(event, 0)] + within, 0)
        return np.asarray(np.where(event >= 0, by_item[at], event))


def cut_blocks(circuit: Circuit, native: NativeSet, n: int, *, tolerance: float) -> Blocks:
    """Cut a circuit of one- and two-qubit gates into items.

    Parameters
    ----------
    circuit : Circuit
    native : NativeSet
        Its entanglers decide what a block costs.
    n : int
        Qubits of the device.
    tolerance : float
        Of counting entanglers.
    """
    item, first = _items(circuit)
    created = circuit.take(first)
    kind = np.where(created.is_unitary, created.widths, FIXED).astype(np.int8)
    fused = Fused(item, kind, created.offsets, created.qubits)
    one, two = window_unitaries(circuit, fused)
    wires, offsets = created.lanes()
    wires = np.where(wires >= circuit.n_qubits, wires + (n - circuit.n_qubits), wires)
    axes = np.zeros(len(wires), dtype=np.int32)
    axes[offsets[:-1][kind == ONE]] = _axes_of_one(one)
    at = offsets[:-1][kind == TWO]
    axes[at], axes[at + 1] = _axes_of_two(two)
    costs = np.ones((len(first), 2))
    swap_cost = 3.0
    if native.straight:
        known, distinct = _distinct(circuit, item, first, kind, two)
        counted, swap_cost = _costs(distinct, native, tolerance)
        costs[kind == TWO] = counted[known]
    operations = make_operations(
        wires,
        offsets,
        kind == TWO,
        n + circuit.n_bits,
        groups=_groups(wires, axes),
        costs=costs,
        swap_cost=swap_cost,
    )
    return Blocks(item, operations)


def _items(circuit: Circuit) -> tuple[NDArray[np.int32], NDArray[np.int64]]:
    """Return the item of each operation, and the first operation of each item."""
    m = len(circuit)
    root = np.arange(m, dtype=np.int64)
    unitary, widths = circuit.is_unitary, circuit.widths
    two = unitary & (widths == 2)
    # Along every wire, the last operation before and the first one after that is no one-qubit gate.
    order = np.argsort(circuit.qubits, kind="stable")
    owner = np.repeat(np.arange(m), widths)[order]
    slots = np.arange(len(order))
    joint = ~(unitary & (widths == 1))[owner]
    begins = np.ones(len(order), dtype=bool)
    begins[1:] = np.diff(circuit.qubits[order]) != 0
    start = np.maximum.accumulate(np.where(begins, slots, 0))
    seen = np.maximum.accumulate(np.where(joint, slots, -1)) if len(slots) else slots
    last = np.concatenate([[-1], seen[:-1]]) if len(slots) else slots
    before = np.full(len(order), -1)
    before[order] = np.where(last >= start, owner[last], -1)
    pairs = np.flatnonzero(two)
    left, right = before[circuit.offsets[:-1][pairs]], before[circuit.offsets[:-1][pairs] + 1]
    same = (left == right) & (left >= 0)
    same[same] &= two[left[same]]
    root[pairs[same]] = left[same]
    while True:
        further = root[root]
        if np.array_equal(further, root):
            break
        root = further
    single = np.flatnonzero(unitary & (widths == 1))
    slot_of = np.empty(len(order), dtype=np.int64)
    slot_of[order] = slots
    here = slot_of[circuit.offsets[:-1][single]]
    end = np.flatnonzero(np.concatenate([begins[1:], [True]])) if len(slots) else slots
    stop = end[np.cumsum(begins) - 1] if len(slots) else slots
    ahead = np.minimum.accumulate(np.where(joint, slots, len(slots))[::-1])[::-1] if len(slots) else slots
    behind = before[circuit.offsets[:-1][single]]
    follows = ahead[here]
    inside = (behind >= 0) & (follows <= stop[here])
    inside[inside] &= two[behind[inside]] & (root[behind[inside]] == root[owner[follows[inside]]])
    root[single[inside]] = root[behind[inside]]
    first, item = np.unique(root, return_inverse=True)
    return item.reshape(-1).astype(np.int32), first


def _axes_of_one(u: Array) -> NDArray[np.int32]:
    """Return the Pauli operators that each matrix commutes with: 1 for X, 2 for Y, 4 for Z."""
    return _axes(u[:, 0, 0], u[:, 0, 1], u[:, 1, 0], u[:, 1, 1])


def _axes_of_two(u: Array) -> tuple[NDArray[np.int32], NDArray[np.int32]]:
    """Return the same for Pauli operators on either wire of two."""
    first = _axes(u[:, :2, :2], u[:, :2, 2:], u[:, 2:, :2], u[:, 2:, 2:])
    second = _axes(u[:, ::2, ::2], u[:, ::2, 1::2], u[:, 1::2, ::2], u[:, 1::2, 1::2])
    return first, second


def _axes(a: Array, b: Array, c: Array, d: Array) -> NDArray[np.int32]:
    def zero(x: Array) -> NDArray[np.bool_]:
        return (
            np.abs(x).max(axis=tuple(range(1, x.ndim)), initial=0.0) <= TOLERANCE
            if x.ndim > 1
            else np.abs(x) <= TOLERANCE
        )

    even = zero(a - d)
    along = ((even & zero(b - c), 1), (even & zero(b + c), 2), (zero(b) & zero(c), 4))
    return np.asarray(sum(bit * holds.astype(np.int32) for holds, bit in along))


def _groups(wires: NDArray[np.integer], axes: NDArray[np.int32]) -> NDArray[np.int32]:
    """Return the number of each item's run of the same axes along its wire; a run has `GROUP` items at most."""
    order = np.argsort(wires, kind="stable")
    wire, axis = wires[order], axes[order]
    fresh = np.ones(len(order), dtype=bool)
    fresh[1:] = (np.diff(wire) != 0) | (np.diff(axis) != 0) | (axis[1:] == 0)
    run = np.cumsum(fresh) - 1
    rank = np.arange(len(order)) - np.flatnonzero(fresh)[run] if len(order) else run
    fresh |= rank % GROUP == 0
    groups = np.empty(len(order), dtype=np.int32)
    groups[order] = np.cumsum(fresh)
    return groups


def _distinct(
    circuit: Circuit, item: NDArray[np.int32], first: NDArray[np.int64], kind: NDArray[np.int8], two: Array
) -> tuple[NDArray[np.int64], Array]:
    """Return the matrices of blocks without those known to repeat, and where each block's stands among them."""
    size = np.bincount(item, minlength=len(first))[kind == TWO]
    rows = first[kind == TWO]
    width = 6
    counts = np.diff(circuit.parameter_offsets)[rows]
    own = circuit.is_named(UNITARY.name)[rows] | (size > 1) | (counts > width)
    key = np.zeros((len(rows), width + 2))
    key[:, 0] = circuit.op[rows]
    for column in range(width):
        has = counts > column
        key[has, column + 1] = circuit.parameters[circuit.parameter_offsets[rows[has]] + column]
    key[own, -1] = 1 + np.arange(np.count_nonzero(own))
    _, chosen, back = np.unique(key, axis=0, return_index=True, return_inverse=True)
    return back.reshape(-1), two[chosen]


def _costs(two: Array, native: NativeSet, tolerance: float) -> tuple[NDArray[np.float64], float]:
    """Return the least uses for each matrix alone and with its output wires exchanged, and for a swap."""
    points = canonical_coordinates(two) if len(two) else np.zeros((0, 3))
    swap = np.full((1, 3), np.pi / 4)
    every = np.concatenate([points, mirrored_coordinates(points), swap])
    uses = np.min([tool.entangler.count(every, tolerance=tolerance) for tool in native.straight], axis=0)
    return np.stack([uses[: len(two)], uses[len(two) : -1]], axis=1).astype(float), float(uses[-1])
