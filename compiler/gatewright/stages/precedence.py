"""Say which two-qubit gates of a circuit must keep their order, for the lower bounds on routing.

Two gates that share one wire commute exactly if each commutes with the rotations of that wire about one common axis,
seen through the one-qubit gates between them: the operators that a gate has on the wire span no more than that axis.
Whether operations or whole windows are moved, what may change places is put into one run; in doubt it is, as that
only weakens a bound.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.mapping.bounds import CROSS, GATE, TIE, Order
from gatewright.stages.windows import TWO, Fused
from gatewright.synthesis.weyl import canonical_coordinates

__all__ = ["order_of"]

Array = NDArray[np.complex128]
Vectors = NDArray[np.float64]
Integers = NDArray[np.int64]
Flags = NDArray[np.bool_]

#: Axes and classes closer than this count as equal: generous, since that weakens a bound and never makes it wrong.
CLOSE = 1e-6
#: One-qubit gates in a row that are multiplied out; behind more of them, gates are taken to commute.
IN_A_ROW = 32

PAULI = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
ON_WIRE = np.array([[np.kron(p, np.eye(2)) for p in PAULI], [np.kron(np.eye(2), p) for p in PAULI]])


def order_of(circuit: Circuit, fused: Fused, unitaries: Array, points: Vectors) -> tuple[Order, NDArray[np.int32]]:
    """Return what every routing of a circuit must respect.

    Parameters
    ----------
    circuit : Circuit
        Unitary gates on one and two qubits, and others.
    fused : Fused
        Its windows.
    unitaries : ndarray, shape (windows of kind TWO, 4, 4)
    points : ndarray, shape (windows of kind TWO, 3)
        Their points of the chamber.

    Returns
    -------
    order : Order
        Gates in windows that are the identity up to one-qubit gates are left out; windows that are a SWAP up to them
        become one exchange.
    window : ndarray of int32
        The window that each entry of the order is in.
    """
    local_window, cross_window, plain_window = (np.zeros(len(fused.kind), dtype=bool) for _ in range(3))
    two = fused.kind == TWO
    local_window[two] = (points < CLOSE).all(axis=1)
    cross_window[two] = (np.abs(points - np.pi / 4) < CLOSE).all(axis=1) | (
        np.abs(points - np.array([1, 1, -1]) * np.pi / 4) < CLOSE
    ).all(axis=1)
    plain_window[two] = (np.abs(points[:, 1:]) < CLOSE).all(axis=1)
    in_two = circuit.is_unitary & (circuit.widths == 2)
    crossing = in_two & cross_window[fused.window]
    # One exchange a window, at its first two-qubit gate.
    rows = np.flatnonzero(crossing)
    first = np.zeros(len(circuit), dtype=bool)
    first[rows[np.unique(fused.window[rows], return_index=True)[1]]] = True
    gate = in_two & ~crossing & ~local_window[fused.window]
    wild = np.zeros(len(circuit), dtype=bool)
    kinds = np.select([gate, first, ~circuit.is_gate], [GATE, CROSS, TIE], -1).astype(np.int8)

    axes, has = _axes(circuit, np.flatnonzero(gate))
    number = np.bincount(fused.window[gate], minlength=len(fused.kind))
    compound = gate & (number[fused.window] > 1)
    # Gates about an axis that they turn themselves, and gates of windows that may move as a whole.
    unclear = np.flatnonzero(gate & ~has.all(axis=1))
    alone = unclear[~compound[unclear]]
    wild[alone] = plain_window[fused.window[alone]]
    many = unclear[compound[unclear]]
    if len(many):
        wild[many] = (np.abs(_coordinates(circuit, many)[:, 1:]) < CLOSE).all(axis=1)
    whole = compound & plain_window[fused.window]
    parted = _Parted(circuit, fused, kinds, axes, has, wild, whole, plain_window)
    runs = _runs(parted, unitaries[np.maximum(np.cumsum(two) - 1, 0)] if len(unitaries) else unitaries)
    return _entries(circuit, fused, kinds, runs)


def _coordinates(circuit: Circuit, rows: Integers) -> Vectors:
    points = np.zeros((len(circuit), 3))
    for at, matrices in circuit.matrix_groups(rows):
        points[at] = canonical_coordinates(matrices)
    return points[rows]


def _axes(circuit: Circuit, rows: Integers) -> tuple[Vectors, Flags]:
    """Return for each operation and slot the axis whose rotations commute with it, and whether there is one."""
    axes = np.zeros((len(circuit), 2, 3))
    has = np.zeros((len(circuit), 2), dtype=bool)
    for at, matrices in circuit.matrix_groups(rows):
        flat = matrices[:1] if circuit.table[circuit.op[at[0]]].n_parameters == 0 and len(matrices) > 1 else matrices
        if flat is not matrices and not (matrices == flat).all():
            flat = matrices  # explicit unitaries
        for slot in range(2):
            moved = flat[:, None] @ ON_WIRE[slot] - ON_WIRE[slot] @ flat[:, None]
            moved = moved.reshape(len(flat), 3, 16)
            values, vectors = np.linalg.eigh(np.einsum("gik,gjk->gij", moved, moved.conj()).real)
            axes[at, slot] = vectors[:, :, 0]
            has[at, slot] = values[:, 0] < CLOSE**2
    return axes, has


@dataclass(frozen=True, eq=False, slots=True)
class _Parted:
    """What is known of each operation (and of each window, in `plain`)."""

    circuit: Circuit
    fused: Fused
    kinds: NDArray[np.int8]
    axes: Vectors
    has: Flags
    wild: Flags
    whole: Flags
    plain: Flags


def _runs(parted: _Parted, unitaries: Array) -> Integers:
    """Return the number of the run of each slot of each operation, along the content of each wire."""
    circuit, window, has = parted.circuit, parted.fused.window, parted.has
    slots, owner = circuit.qubits.astype(np.int64), np.repeat(np.arange(len(circuit)), circuit.widths)
    line = _lines(circuit, parted.kinds) if (parted.kinds == CROSS).any() else slots
    slot = np.arange(len(slots)) - circuit.offsets[owner]
    order = np.argsort(line, kind="stable")
    own, at, on = owner[order], slot[order], line[order]
    is_one = circuit.is_unitary[own] & (circuit.widths[own] == 1)
    is_gate, marks = parted.kinds[own] == GATE, parted.kinds[own] >= 0
    marks &= parted.kinds[own] != CROSS
    position = np.arange(len(own))
    before = np.concatenate([[-1], np.maximum.accumulate(np.where(marks, position, -1))[:-1]])[: len(own)]
    # Gates that follow a gate on their line.
    i = np.flatnonzero(is_gate & (before >= 0))
    j = before[i]
    i, j = (x[(on[i] == on[j]) & is_gate[j]] for x in (i, j))
    g, h = own[i], own[j]
    # Gates of unclear axis, and all behind what is neither turned nor kept in order, may commute.
    passed = np.concatenate([[0], np.cumsum(~(is_one | marks))])
    vague = parted.wild[g] | parted.wild[h] | (passed[i] > passed[j + 1])
    loose = (has[g, at[i]] | parted.wild[g]) & (has[h, at[j]] | parted.wild[h])
    one_window = window[g] == window[h]
    together = np.where(one_window, parted.whole[g], vague & loose)
    check = np.flatnonzero(~together & has[g, at[i]] & has[h, at[j]])
    vectors = parted.axes[h[check], at[j[check]]]
    between = i[check] - j[check] - 1
    turns = _quaternions(circuit)
    for step in range(1, min(int(between.max(initial=0)), IN_A_ROW) + 1):
        behind = np.flatnonzero(between >= step)
        vectors[behind] = _turned(turns[own[j[check[behind]] + step]], vectors[behind])
    together[check] = _parallel(vectors, parted.axes[g[check], at[i[check]]]) | (between > IN_A_ROW)
    # Windows of several gates may move as a whole.
    check = np.flatnonzero(
        ~together
        & ~one_window
        & (parted.whole[g] | parted.whole[h])
        & parted.plain[window[g]]
        & parted.plain[window[h]]
    )
    first, last = window[h[check]], window[g[check]]
    slot_of = [np.where(parted.fused.wires[parted.fused.offsets[w]] == circuit.qubits[circuit.offsets[k] + x], 0, 1)
               for w, k, x in ((first, h[check], at[j[check]]), (last, g[check], at[i[check]]))]  # fmt: skip
    leaving, entering = _leaving(unitaries[first], slot_of[0]), _leaving(unitaries[last], slot_of[1], entering=True)
    together[check] |= _parallel(leaving, entering)
    same = np.zeros(len(own), dtype=bool)
    same[i] = together
    # A run is numbered by where it starts.
    runs = np.empty(len(own), dtype=np.int64)
    runs[order] = np.maximum.accumulate(np.where(marks & ~same, position, -1))
    return runs


def _parallel(a: Vectors, b: Vectors) -> Flags:
    return np.asarray((_cross(a, b) ** 2).sum(axis=1) < CLOSE**2)


def _leaving(unitaries: Array, slot: Integers, *, entering: bool = False) -> Vectors:
    """Return the axis on one wire whose rotations pass a window of the class of controlled gates: behind, or before."""
    paulis = ON_WIRE[slot]
    moved = unitaries[:, None] @ paulis @ unitaries.conj().swapaxes(-1, -2)[:, None]
    passing = np.einsum("giab,gjba->gij", paulis, moved).real / 4
    left, _, right = np.linalg.svd(passing)
    return np.asarray(right[:, 0] if entering else left[:, :, 0])


def _quaternions(circuit: Circuit) -> Vectors:
    """Return w, x, y, z of each one-qubit gate w − i(xX + yY + zZ), up to sign and phase."""
    out = np.zeros((len(circuit), 4))
    for at, u in circuit.matrix_groups(np.flatnonzero(circuit.is_unitary & (circuit.widths == 1))):
        a, b, c, d = u[:, 0, 0], u[:, 0, 1], u[:, 1, 0], u[:, 1, 1]
        root = np.sqrt(a * d - b * c)
        out[at, 0], out[at, 1] = ((a + d) / root).real / 2, -((b + c) / root).imag / 2
        out[at, 2], out[at, 3] = ((c - b) / root).real / 2, ((d - a) / root).imag / 2
    return out


def _turned(turns: Vectors, vectors: Vectors) -> Vectors:
    """Rotate vectors by unit quaternions."""
    w, axis = turns[:, :1], turns[:, 1:]
    across = _cross(axis, vectors)
    return np.asarray(vectors + 2 * (w * across + _cross(axis, across)))


def _cross(a: Vectors, b: Vectors) -> Vectors:
    x, y, z = a.T
    u, v, w = b.T
    return np.stack([y * w - z * v, z * u - x * w, x * v - y * u], axis=1)


def _lines(circuit: Circuit, kinds: NDArray[np.int8]) -> Integers:
    """Return the content that each slot holds, wires changing theirs at each exchange."""
    content = list(range(circuit.n_qubits))
    lines = circuit.qubits.tolist()
    offsets = circuit.offsets.tolist()
    for k, kind in enumerate(kinds.tolist()):
        for s in range(offsets[k], offsets[k + 1]):
            lines[s] = content[lines[s]]
        if kind == CROSS:
            a, b = circuit.qubits_of(k)
            content[a], content[b] = content[b], content[a]
    return np.array(lines, dtype=np.int64)


def _entries(
    circuit: Circuit, fused: Fused, kinds: NDArray[np.int8], runs: Integers
) -> tuple[Order, NDArray[np.int32]]:
    """Put gates, exchanges and what keeps order on several wires into rows of two wires."""
    paired = np.flatnonzero((kinds == GATE) | (kinds == CROSS))
    slots = circuit.offsets[paired][:, None] + np.arange(2)
    wires, numbers, kind = [circuit.qubits[slots]], [runs[slots]], [kinds[paired]]
    key, owner = [paired * 2.0], [paired]
    for k in np.flatnonzero(kinds == TIE).tolist():
        s = np.arange(circuit.offsets[k], circuit.offsets[k + 1])
        # To and fro along the wires, so that what came before on any of them comes before all.
        path = np.concatenate([s, s[-2::-1]]) if len(s) > 1 else np.repeat(s, 2)
        rows = np.stack([path[:-1], path[1:]], axis=1)
        wires.append(circuit.qubits[rows])
        numbers.append(runs[rows])
        kind.append(np.full(len(rows), TIE, dtype=np.int8))
        key.append(2.0 * k + np.arange(len(rows)) / len(rows))
        owner.append(np.full(len(rows), k))
    order = np.argsort(np.concatenate(key), kind="stable")
    made = Order(
        circuit.n_qubits,
        np.concatenate(wires)[order].astype(np.int32),
        np.concatenate(kind)[order],
        np.concatenate(numbers)[order].astype(np.int64),
    )
    return made, fused.window[np.concatenate(owner)[order]]
