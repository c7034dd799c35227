"""Fifth stage: turn windows into native gates.

Every two-qubit window becomes ``L_k E … E L_1 E L_0``. What stands after its last entangler is not played there: it
is multiplied into the first layer of the next window on the same wire, so that one run of pulses does for both. The
part of a run that is a rotation about the plan's axis moves on behind an entangler that lets it pass. What is owed
at the end of a window in this way is its seam in the proof.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, Piece, assemble
from gatewright.errors import GateSetError
from gatewright.gates import Gate
from gatewright.linalg import dagger
from gatewright.proof.windows import Step
from gatewright.stages._kernels import carry_phases, merge_runs
from gatewright.stages.draft import Draft
from gatewright.stages.edges import allowed_tools, groups_of_edges
from gatewright.stages.windows import FIXED, ONE, TWO, Fused, window_unitaries
from gatewright.synthesis.euler import ROUNDING
from gatewright.synthesis.native import NativeEntangler, NativeSet
from gatewright.synthesis.toolkit import MixedCircuit, synthesise_mixed

__all__ = ["synthesise"]

Array = NDArray[np.complex128]


@dataclass(frozen=True, eq=False, slots=True)
class _Sites:
    """One-qubit runs to be played: matrices first, then angles, and where and when each is."""

    angles: NDArray[np.float64]
    trailing: NDArray[np.bool_]
    event: NDArray[np.int64]
    window: NDArray[np.int32]
    wire: NDArray[np.int32]


def synthesise(draft: Draft) -> Draft:
    """Write the fused windows in native gates, and claim each as equal to its part of the source.

    Raises
    ------
    GateSetError
        A window needs an entangler and the gate set has none.
    """
    assert draft.fused is not None
    circuit, native = draft.circuit, draft.native
    fused = _oriented(draft.fused, draft)
    one, two = window_unitaries(circuit, fused)
    made = _windows(two, fused, draft)
    # Layers of every window; one of a single wire has one, on its first slot.
    uses = np.zeros(len(fused.kind), dtype=np.int32)
    tools = np.full((len(uses), made.members.shape[1]), -1, dtype=np.int64)
    layers = np.zeros((len(uses), made.layers.shape[1], 2, 2, 2), dtype=np.complex128)
    layers[fused.kind == ONE, 0, 0] = one
    is_two = fused.kind == TWO
    uses[is_two], tools[is_two], layers[is_two] = made.uses, made.members, made.layers
    sites, seams, window_event = _runs(fused, layers, uses, tools, native, circuit.n_qubits, draft.settings.tolerance)
    output, windows = _emit(circuit, fused, sites, uses, tools, window_event, native, draft.device.gate_set.natives)
    step, final = _claim(draft, fused, windows, seams)
    return replace(draft, circuit=output, fused=fused, final=final, steps=(*draft.steps, step))


def _windows(two: Array, fused: Fused, draft: Draft) -> MixedCircuit:
    """Make every two-wire window from the entanglers of its pair; members are indices of the native set's."""
    native, settings = draft.native, draft.settings
    if len(two) and not native.entanglers:
        raise GateSetError(
            f"gate set '{draft.device.gate_set.name}' has no two-qubit gate",
            required="an entangler for the two-qubit gates of the circuit",
        )
    first = fused.offsets[:-1][fused.kind == TWO]
    pairs = fused.wires[first[:, None] + np.arange(2)]
    groups = list(groups_of_edges(draft.device, native.entanglers, pairs, settings.prefer))
    made: list[MixedCircuit] = []
    for group in groups:
        entanglers = [native.entanglers[t].entangler for t in group.tools]
        part = synthesise_mixed(two[group.rows], entanglers, costs=group.costs, tolerance=settings.tolerance)
        numbers = np.array([*group.tools, -1], dtype=np.int64)
        made.append(replace(part, members=numbers[part.members]))
    if len(made) == 1:
        return made[0]
    depth = max((part.members.shape[1] for part in made), default=0)
    whole = MixedCircuit(
        uses=np.zeros(len(two), dtype=np.int64),
        members=np.full((len(two), depth), -1, dtype=np.int64),
        layers=np.zeros((len(two), depth + 1, 2, 2, 2), dtype=np.complex128),
        distance=np.zeros(len(two)),
    )
    for group, part in zip(groups, made, strict=True):
        k = part.members.shape[1]
        whole.uses[group.rows], whole.distance[group.rows] = part.uses, part.distance
        whole.members[group.rows, :k], whole.layers[group.rows, : k + 1] = part.members, part.layers
    return whole


def _oriented(fused: Fused, draft: Draft) -> Fused:
    """Order the wires of every two-wire window so that most entanglers of that pair need not be flipped."""
    first = fused.offsets[:-1][fused.kind == TWO]
    straight = draft.native.straight
    if not straight or not len(first):
        return fused
    pairs = fused.wires[first[:, None] + np.arange(2)]
    distinct, owner = np.unique(pairs, axis=0, return_inverse=True)
    here, there = (allowed_tools(draft.device, straight, way).sum(axis=1) for way in (distinct, distinct[:, ::-1]))
    turned = (there > here)[owner.reshape(-1)]
    wires = fused.wires.copy()
    wires[first[turned]], wires[first[turned] + 1] = pairs[turned, 1], pairs[turned, 0]
    return replace(fused, wires=wires)


def _runs(
    fused: Fused,
    layers: Array,
    uses: NDArray[np.int32],
    tools: NDArray[np.int64],
    native: NativeSet,
    n_wires: int,
    tolerance: float,
) -> tuple[_Sites, NDArray[np.float64], NDArray[np.int64]]:
    """Merge layers along the wires, find their angles, carry phases on; return the runs and each slot's seam."""
    kind, offsets, wires = fused.kind, fused.offsets, fused.wires
    slot_window = np.repeat(np.arange(len(kind)), np.diff(offsets))
    flush = _last_before_fixed(wires, kind[slot_window] == FIXED)
    most = int(np.sum(np.where(kind == TWO, 2 * uses, 0)) + len(wires)) + 1
    matrix = np.empty((most, 2, 2), dtype=np.complex128)
    event = np.empty(most, dtype=np.int64)
    window, wire = np.empty(most, dtype=np.int32), np.empty(most, dtype=np.int32)
    owed = np.tile(np.eye(2, dtype=np.complex128), (len(wires), 1, 1))
    window_event = np.empty(len(kind), dtype=np.int64)
    pending = np.tile(np.eye(2, dtype=np.complex128), (n_wires, 1, 1))
    total = merge_runs(
        kind, offsets, wires, uses, flush, layers, matrix, event, window, wire, owed, window_event, pending
    )
    angles = np.ascontiguousarray(native.plan.angles(matrix[:total], tolerance=max(tolerance, ROUNDING)))
    trailing = np.zeros(total, dtype=np.bool_)
    phases = np.zeros(len(wires))
    axis = native.plan.axis
    if axis is None:
        trailing[:] = True
    else:
        passes = np.array([entangler.passes_to for entangler in native.entanglers], dtype=np.int64).reshape(-1, 2)
        sign = np.array([entangler.sign for entangler in native.entanglers], dtype=np.int64).reshape(-1, 2)
        steers, phase = native.plan.steers, np.zeros(n_wires)
        carry_phases(
            kind, offsets, wires, uses, flush, tools, passes, sign, steers, angles, trailing, phases, phase, np.zeros(2)
        )
        angles[:, ::2] = _snapped(angles[:, ::2])
    # The output lacks what is owed: it is ahead of the source by the inverse.
    half = -phases / 2
    behind = np.zeros((len(wires), 4))
    behind[:, 0] = np.cos(half)
    behind[:, 1:] = np.sin(half)[:, None] * (axis if axis is not None else np.zeros(3))
    seams = _quaternion_product(behind, _quaternions(dagger(owed)))
    return _Sites(angles, trailing, event[:total], window[:total], wire[:total]), seams, window_event


def _last_before_fixed(wires: NDArray[np.int32], is_fixed: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Return which slots are the last of their wire, or come directly before a fixed window on it."""
    order = np.argsort(wires, kind="stable")
    same = wires[order][1:] == wires[order][:-1]
    last = np.ones(len(wires), dtype=np.bool_)
    last[order[:-1]] = ~same | is_fixed[order[1:]]
    return last


def _snapped(angles: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return sums of angles with those within rounding of a multiple of π/16 set to it."""
    multiple = np.round(angles * 16 / np.pi) * np.pi / 16
    return np.where(np.abs(angles - multiple) <= 2e-15, multiple, angles)


def _quaternions(u: Array) -> NDArray[np.float64]:
    """Return (a, b, c, d) with u ∝ a − i(b X + c Y + d Z)."""
    determinant = u[:, 0, 0] * u[:, 1, 1] - u[:, 0, 1] * u[:, 1, 0]
    m = u / np.sqrt(determinant)[:, None, None]
    return (
        np.stack(
            [
                (m[:, 0, 0] + m[:, 1, 1]).real,
                -(m[:, 0, 1] + m[:, 1, 0]).imag,
                (m[:, 1, 0] - m[:, 0, 1]).real,
                (m[:, 1, 1] - m[:, 0, 0]).imag,
            ],
            axis=1,
        )
        / 2
    )


def _quaternion_product(p: NDArray[np.float64], q: NDArray[np.float64]) -> NDArray[np.float64]:
    out = np.empty_like(p)
    out[:, 0] = p[:, 0] * q[:, 0] - np.einsum("ni,ni->n", p[:, 1:], q[:, 1:])
    out[:, 1:] = p[:, :1] * q[:, 1:] + q[:, :1] * p[:, 1:] + np.cross(p[:, 1:], q[:, 1:])
    return out


def _emit(
    circuit: Circuit,
    fused: Fused,
    sites: _Sites,
    uses: NDArray[np.int32],
    tools: NDArray[np.int64],
    window_event: NDArray[np.int64],
    native: NativeSet,
    natives: Mapping[str, Gate],
) -> tuple[Circuit, NDArray[np.int32]]:
    """Return the native circuit and the window of each of its operations."""
    emission = native.plan.emit(sites.angles, sites.trailing)
    room = max(1, emission.gate.shape[1])
    pieces: list[Piece] = []
    windows: list[NDArray[Any]] = []
    for number, gate in enumerate(native.plan.gates):
        site, column = np.nonzero(emission.gate == number)
        if len(site):
            values = emission.parameters[site, column, : gate.n_parameters]
            pieces.append(Piece(gate, sites.event[site] * room + column, sites.wire[site][:, None], values))
            windows.append(sites.window[site])
    for number, entangler in enumerate(native.entanglers):
        window, layer = np.nonzero(tools == number)
        if len(window):
            pieces.append(_entanglers(fused, window, layer, window_event, entangler, room))
            windows.append(window)
    fixed_rows = np.flatnonzero(fused.kind[fused.window] == FIXED)
    at = fused.window[fixed_rows]
    for chosen, piece in circuit.pieces(fixed_rows, window_event[at] * room):
        # A rotation by an unknown angle is the device's own gate from here on.
        gate = natives.get(piece.gate.name, piece.gate) if piece.gate.function is not None else piece.gate
        pieces.append(replace(piece, gate=gate))
        windows.append(at[chosen])
    output, order = assemble(replace(circuit, matrices=(), phase=0.0), circuit.n_qubits, pieces)
    joined = np.concatenate(windows) if windows else np.zeros(0)
    return output, joined[order].astype(np.int32)


def _entanglers(
    fused: Fused,
    window: NDArray[np.int64],
    layer: NDArray[np.int64],
    window_event: NDArray[np.int64],
    entangler: NativeEntangler,
    room: int,
) -> Piece:
    """Place the uses of one entangler: after the two runs of each layer."""
    key = (window_event[window] + 3 * layer + 2) * room
    order = [1, 0] if entangler.flipped else [0, 1]
    qubits = fused.wires[fused.offsets[window][:, None] + np.array(order)]
    return Piece(entangler.gate, key, qubits, np.tile(np.array(entangler.parameters), (len(window), 1)))


def _claim(
    draft: Draft, fused: Fused, output_window: NDArray[np.int32], seams: NDArray[np.float64]
) -> tuple[Step, NDArray[np.int32]]:
    """Follow the source wires through the windows and write the step."""
    from_source = draft.origin >= 0
    source_window = np.empty(len(draft.expanded), dtype=np.int32)
    source_window[draft.origin[from_source]] = fused.window[from_source]
    crossed = np.bincount(fused.window[~from_source], minlength=len(fused.kind)) % 2 == 1
    exits = fused.wires.copy()
    turned = fused.offsets[:-1][crossed]
    exits[turned], exits[turned + 1] = fused.wires[turned + 1], fused.wires[turned]
    wires, final = _follow(draft.initial, fused.offsets, fused.wires, crossed)
    # A seam belongs to the source wire, which leaves a crossed window on the other output wire.
    slots = np.arange(len(exits))
    slots[turned], slots[turned + 1] = turned + 1, turned
    step = Step(
        initial=draft.initial,
        final=final,
        source_window=source_window,
        output_window=output_window,
        offsets=fused.offsets,
        wires=wires,
        entry=fused.wires,
        exit=exits,
        seams=seams[slots],
    )
    return step, final


def _follow(
    initial: NDArray[np.int32], offsets: NDArray[np.int64], entry: NDArray[np.int32], crossed: NDArray[np.bool_]
) -> tuple[NDArray[np.int32], NDArray[np.int32]]:
    """Return the source wire of every slot, and where each source wire ends."""
    occupant = np.empty(len(initial), dtype=np.int32)
    occupant[initial] = np.arange(len(initial))
    wires = np.empty(len(entry), dtype=np.int32)
    start = 0
    # Between two crossed windows nothing moves: one gather serves them all.
    for w in np.flatnonzero(crossed).tolist():
        stop = int(offsets[w]) + 2
        wires[start:stop] = occupant[entry[start:stop]]
        p, q = entry[stop - 2], entry[stop - 1]
        occupant[p], occupant[q] = occupant[q], occupant[p]
        start = stop
    wires[start:] = occupant[entry[start:]]
    final = np.empty(len(initial), dtype=np.int32)
    final[occupant] = np.arange(len(initial))
    return wires, final
