"""Judge, independently, whether an output is the same operation as its source, and legal on the device.

It knows nothing of how an output was made and imports nothing that makes one. For every step it verifies that

1. each operation lies in one window, on wires of that window, and along every wire (and classical bit) the
   windows come in order, so that the circuit equals the product of its windows;
2. in every window, output and source agree up to the seams, a permutation and a phase: the Frobenius norm of the
   difference bounds the operator norm from above; with unknown parameters, for all their values (`parametrised`);
   where windows change places, all that share a wire and do are multiplied out and found to commute (`reorder`);
3. the places of the wires, and the seams, lead from each window to the next and end as claimed;
4. every output operation is a native gate, its parameters in range, on qubits that the device allows.

Operator-norm distances add under composition, so their sum bounds the whole circuit, at any number of qubits.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, NoReturn

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, apply_operations
from gatewright.errors import ProofError
from gatewright.gates import BARRIER, MEASURE, RESET
from gatewright.linalg import embed, kron
from gatewright.parameters import Affine
from gatewright.proof.parametrised import UnknownWindows, require_standard
from gatewright.proof.reorder import Reorder, check_reorder
from gatewright.proof.windows import Proof, Step, Verdict

if TYPE_CHECKING:
    from gatewright.devices import Device

__all__ = ["check_legal", "check_proof"]

Array = NDArray[np.complex128]
Rows = NDArray[np.int64]

#: Windows up to this many wires are multiplied out in batches; wider ones, one operation after another.
BATCH_WIDTH = 5
#: Matrix entries held at a time, to bound memory (16 bytes each).
BLOCK = 1 << 21
#: How far beyond its range a parameter may lie, for ranges that are rounded themselves (radians).
RANGE_SLACK = 1e-12


def check_proof(
    source: Circuit, output: Circuit, proof: Proof, *, device: Device | None = None, tolerance: float = 1e-9
) -> Verdict:
    """Check a proof and return the bound it gives.

    Parameters
    ----------
    source, output : Circuit
    proof : Proof
    device : Device, optional
        Checks legality, and takes native gates' matrices from it rather than from `output`.
    tolerance : float
        Largest distance at which a single window still counts as proven.

    Returns
    -------
    Verdict

    Raises
    ------
    ProofError
        Naming the window, the qubits and the distance.
    """
    if not proof.steps:
        raise ProofError("the proof is empty", required="at least one step")
    if device is not None:
        natives = {name: native.gate for name, native in device.gate_set.gates.items()}
        output = replace(output, table=tuple(natives.get(gate.name, gate) for gate in output.table))
        check_legal(output, device)
    place: NDArray[np.int32] = np.arange(source.n_qubits, dtype=np.int32)
    initial = place
    total, worst, worst_window = 0.0, 0.0, 0
    current = source
    for number, step in enumerate(proof.steps):
        last = number == len(proof.steps) - 1
        if isinstance(step, Reorder):
            if last:
                _refuse("a claim of a new order leads to no output")
            current, distance = check_reorder(current, step, tolerance)
            total += distance
            continue
        following = output if last else step.output
        if following is None:
            raise ProofError("the proof lacks the circuit between two of its steps", found=f"step {number}")
        distances = _check_step(current, following, step, tolerance)
        if number == 0:
            initial = step.initial[: source.n_qubits]
            place = step.final[: source.n_qubits]
        else:
            initial, place = step.initial[initial], step.final[place]
        total += float(distances.sum())
        if len(distances) and distances.max() > worst:
            worst_window, worst = int(distances.argmax()), float(distances.max())
        current = following
    return Verdict(
        error_bound=total,
        windows=proof.windows,
        worst_window=worst_window,
        worst_distance=worst,
        initial=tuple(initial.tolist()),
        final=tuple(place.tolist()),
        method="windows multiplied out with their seams",
    )


def check_legal(circuit: Circuit, device: Device) -> None:
    """Check that every operation is native, in range, and on qubits where the device has it.

    Raises
    ------
    ProofError
        Naming the first operation that is not.
    """
    if circuit.n_qubits > device.n_qubits:
        raise ProofError(
            "the output has more qubits than the device",
            required=f"{device.n_qubits} at most",
            found=str(circuit.n_qubits),
        )
    active = np.asarray(device.active)
    for k, gate in enumerate(circuit.table):
        rows = np.flatnonzero(circuit.op == k)
        if not len(rows) or gate.name == BARRIER.name:
            continue
        width = int(circuit.widths[rows[0]])
        qubits = circuit.qubits[circuit.offsets[rows][:, None] + np.arange(width)]
        native = None
        if gate.name in (MEASURE.name, RESET.name):
            allowed = active[qubits[:, 0]]
        else:
            native = device.gate_set.gates.get(gate.name)
            if native is None:
                _illegal(circuit, int(rows[0]), f"'{gate.name}' is not a native gate of {device.name}")
            if width == 1:
                table = np.zeros(device.n_qubits, dtype=bool)
                table[np.asarray(device.allowed_qubits(gate.name), dtype=np.int64)] = True
                allowed = table[qubits[:, 0]]
            else:
                pairs = np.asarray(device.allowed_pairs(gate.name), dtype=np.int64).reshape(-1, 2)
                codes = pairs[:, 0] * device.n_qubits + pairs[:, 1]
                allowed = np.isin(qubits[:, 0].astype(np.int64) * device.n_qubits + qubits[:, 1], codes)
        if not allowed.all():
            _illegal(
                circuit, int(rows[np.flatnonzero(~allowed)[0]]), f"{device.name} has no '{gate.name}' on these qubits"
            )
        if native is not None:
            if circuit.symbolic:
                unknown = circuit.link[rows] >= 0
                _check_unknown(circuit, rows[unknown], native.ranges)
                rows = rows[~unknown]
            values = circuit.parameters[circuit.parameter_offsets[rows][:, None] + np.arange(gate.n_parameters)]
            for column, (low, high) in enumerate(native.ranges):
                inside = (values[:, column] >= low - RANGE_SLACK) & (values[:, column] <= high + RANGE_SLACK)
                if not inside.all():
                    row = int(np.flatnonzero(~inside)[0])
                    _illegal(
                        circuit,
                        int(rows[row]),
                        f"parameter {column} of '{gate.name}' is out of range",
                        required=f"{low:.6g} to {high:.6g}",
                        found=f"{values[row, column]:.12g}",
                    )


def _check_unknown(circuit: Circuit, rows: Rows, ranges: Sequence[tuple[float, float]]) -> None:
    """Check that every unknown parameter may take any value, up to full turns that change the phase alone."""
    for row in rows.tolist():
        gate = circuit.table[circuit.op[row]]
        turn = 2 * np.pi if gate.n_qubits == 1 else 4 * np.pi
        for column, (value, (low, high)) in enumerate(zip(circuit.symbolic[circuit.link[row]], ranges, strict=True)):
            if isinstance(value, Affine):
                if not high - low >= turn - RANGE_SLACK:
                    _illegal(
                        circuit,
                        row,
                        f"parameter {column} of '{gate.name}' is not known, and its range is no full turn",
                        required=f"a range of {turn:.6g}",
                        found=f"{low:.6g} to {high:.6g}",
                    )
            elif not low - RANGE_SLACK <= value <= high + RANGE_SLACK:
                required = f"{low:.6g} to {high:.6g}"
                what = f"parameter {column} of '{gate.name}' is out of range"
                _illegal(circuit, row, what, required=required, found=f"{value:.12g}")


def _illegal(circuit: Circuit, row: int, what: str, *, required: str = "", found: str = "") -> NoReturn:
    qubits = circuit.qubits_of(row)
    named = ", ".join(map(str, qubits))
    raise ProofError(
        f"not legal: {what} (operation {row}, qubits {named})", qubits=qubits, required=required, found=found
    )


def _check_step(source: Circuit, output: Circuit, step: Step, tolerance: float) -> NDArray[np.float64]:
    """Check one step and return the distance of each of its windows."""
    _check_shapes(source, output, step)
    slot_window = np.repeat(np.arange(step.windows), np.diff(step.offsets))
    source_slots = _slots_in_order(source, step.source_window, step.wires, slot_window, step, "source")
    output_slots = _slots_in_order(output, step.output_window, step.entry, slot_window, step, "output")
    fixed = _fixed_windows(source, output, step, source_slots, output_slots)
    unknown = _unknown_windows(source, output, step, fixed)
    before, after = _chain(step, slot_window, fixed | unknown)
    distances = np.zeros(step.windows)
    n = step.windows
    sides = [_Side(output, step.output_window, output_slots, n), _Side(source, step.source_window, source_slots, n)]
    widths = np.diff(step.offsets)
    if unknown.any():
        distances[unknown] = _unknown_distances(np.flatnonzero(unknown), widths, sides[1], sides[0])
    known = ~fixed & ~unknown
    for width in np.unique(widths[known]).tolist():
        for block in _blocks(np.flatnonzero((widths == width) & known), width, sides):
            made, meant = (side.products(block, width) for side in sides)
            slots = step.offsets[block][:, None] + np.arange(width)
            made = made @ _tensor(before[slots])
            meant = _permute(_tensor(after[slots]) @ meant, step.entry[slots], step.exit[slots])
            overlap = np.einsum("nij,nij->n", made, meant.conj())
            size = np.abs(overlap)
            phase = np.where(size > 0, overlap / np.where(size > 0, size, 1), 1)
            distances[block] = np.linalg.norm(made - phase[:, None, None] * meant, axis=(1, 2))
    # A comparison with NaN is false: ask for what is right, not for what is wrong.
    wrong = np.flatnonzero(~(distances <= tolerance))
    if len(wrong):
        window = int(wrong[0])
        _differs(step, window, float(distances[window]), tolerance)
    return distances


def _window_qubits(step: Step, window: int) -> tuple[int, ...]:
    return tuple(step.entry[step.offsets[window] : step.offsets[window + 1]].tolist())


def _named(step: Step, window: int) -> str:
    return f"window {window} on physical qubits {', '.join(map(str, _window_qubits(step, window)))}"


def _differs(step: Step, window: int, distance: float, tolerance: float) -> NoReturn:
    raise ProofError(
        f"not equal: {_named(step, window)} differs from its source",
        window=window,
        qubits=_window_qubits(step, window),
        distance=distance,
        required=f"distance at most {tolerance:.3g}",
        found=f"{distance:.6g}",
        hint="what was compiled with a --tolerance may differ by 25 times that in a window" if distance < 1e-4 else "",
    )


def _refuse(what: str, *, required: str = "", found: str = "") -> NoReturn:
    raise ProofError(f"the proof does not hold: {what}", required=required, found=found)


def _check_shapes(source: Circuit, output: Circuit, step: Step) -> None:
    n, slots = output.n_qubits, int(step.offsets[-1])
    expected: dict[str, tuple[NDArray[np.generic], tuple[int, ...]]] = {
        "initial": (step.initial, (n,)),
        "final": (step.final, (n,)),
        "source_window": (step.source_window, (len(source),)),
        "output_window": (step.output_window, (len(output),)),
        "wires": (step.wires, (slots,)),
        "entry": (step.entry, (slots,)),
        "exit": (step.exit, (slots,)),
        "seams": (step.seams, (slots, 4)),
    }
    for name, (array, shape) in expected.items():
        if array.shape != shape:
            side = {"source_window": "source", "output_window": "output"}.get(name, "")
            what = f"the {side} has been changed: '{name}'" if side else f"'{name}'"
            _refuse(f"{what} does not fit", required=f"shape {shape}", found=f"{array.shape}")
    if source.n_qubits > n:
        _refuse("the source has more qubits than the output", required=f"{n} at most", found=str(source.n_qubits))
    if source.n_bits > output.n_bits:
        _refuse("the output lacks classical bits", required=str(source.n_bits), found=str(output.n_bits))
    if step.offsets[0] != 0 or (np.diff(step.offsets) < 1).any():
        _refuse("a window has no wires")
    for name, array in (("source_window", step.source_window), ("output_window", step.output_window)):
        if len(array) and not 0 <= array.min() <= array.max() < step.windows:
            _refuse(f"'{name}' names a window that does not exist", required=f"0 to {step.windows - 1}")
    for name, array in (("wires", step.wires), ("entry", step.entry), ("exit", step.exit)):
        if len(array) and not 0 <= array.min() <= array.max() < n:
            _refuse(f"'{name}' names a wire that does not exist", required=f"0 to {n - 1}")
    for name, array in (("initial", step.initial), ("final", step.final)):
        if not np.array_equal(np.sort(array), np.arange(n)):
            _refuse(f"'{name}' is not a placement", required=f"each of 0 to {n - 1} once")
    norms = np.linalg.norm(step.seams, axis=1)
    if not (np.abs(norms - 1) < 1e-6).all():
        _refuse("a seam is not a unit quaternion", required="norm 1")


def _slots_in_order(
    circuit: Circuit,
    window: NDArray[np.int32],
    slot_wire: NDArray[np.int32],
    slot_window: Rows,
    step: Step,
    side: str,
) -> Rows:
    """Return the slot in its window of every wire of every operation; check membership and order."""
    n = len(step.initial)
    of_wire = np.repeat(window.astype(np.int64), circuit.widths)
    keys = slot_window * n + slot_wire
    order = np.argsort(keys)
    if (np.diff(keys[order]) == 0).any():
        _refuse(f"a window holds a wire of the {side} twice")
    wanted = of_wire * n + circuit.qubits
    found = np.searchsorted(keys[order], wanted)
    found[found == len(keys)] = 0
    outside = np.flatnonzero(keys[order][found] != wanted) if len(keys) else np.arange(len(wanted))
    if len(outside):
        bad = int(outside[0])
        raise ProofError(
            f"not equal: an operation of the {side} acts outside its {_named(step, int(of_wire[bad]))}",
            window=int(of_wire[bad]),
            qubits=_window_qubits(step, int(of_wire[bad])),
            found=f"qubit {circuit.qubits[bad]}",
        )
    measured = circuit.is_named(MEASURE.name)
    for lane, windows, name in (
        (circuit.qubits, of_wire, "wire"),
        (circuit.link[measured], window[measured], "classical bit"),
    ):
        by_lane = np.argsort(lane, kind="stable")
        falls = (np.diff(windows[by_lane]) < 0) & (np.diff(lane[by_lane]) == 0)
        if falls.any():
            _refuse(f"windows are out of order on {name} {lane[by_lane][np.flatnonzero(falls)[0]]} of the {side}")
    return np.asarray(order[found] - step.offsets[of_wire])


def _fixed_windows(
    source: Circuit, output: Circuit, step: Step, source_slots: Rows, output_slots: Rows
) -> NDArray[np.bool_]:
    """Find the windows with measurements, resets and barriers, and check that both sides have the same one."""
    fixed = np.zeros(step.windows, dtype=bool)
    sides = ((source, step.source_window, source_slots), (output, step.output_window, output_slots))
    for circuit, window, _ in sides:
        fixed[window[~circuit.is_gate]] = True
    if not fixed.any():
        return fixed
    held = []
    for circuit, window, slots in sides:
        rows = np.flatnonzero(fixed[window])
        rows = rows[np.argsort(window[rows], kind="stable")]
        alone = np.array_equal(window[rows], np.flatnonzero(fixed))
        whole = alone and np.array_equal(circuit.widths[rows], np.diff(step.offsets)[fixed])
        if not whole:
            count = np.bincount(window[rows], minlength=step.windows)
            wrong = np.flatnonzero(fixed & (count != 1))
            at = int(wrong[0]) if len(wrong) else int(np.flatnonzero(fixed)[0])
            raise ProofError(
                f"not equal: {_named(step, at)} must hold one measurement, reset or barrier on each side and no more",
                window=at,
                qubits=_window_qubits(step, at),
            )
        held.append((circuit, rows, slots))
    (a, rows_a, slots_a), (b, rows_b, slots_b) = held
    for at, i, j in zip(np.flatnonzero(fixed).tolist(), rows_a.tolist(), rows_b.tolist(), strict=True):
        same = a.table[a.op[i]].name == b.table[b.op[j]].name and a.link[i] == b.link[j]
        first = slots_a[a.offsets[i] : a.offsets[i + 1]]
        second = slots_b[b.offsets[j] : b.offsets[j + 1]]
        span = slice(step.offsets[at], step.offsets[at + 1])
        same = same and np.array_equal(np.sort(first), np.sort(second))
        if not same or not np.array_equal(step.entry[span], step.exit[span]):
            raise ProofError(
                f"not equal: {_named(step, at)} holds a measurement, reset or barrier that differs from its source",
                window=at,
                qubits=_window_qubits(step, at),
                required=f"{a.table[a.op[i]].name}, bit {a.link[i]}",
                found=f"{b.table[b.op[j]].name}, bit {b.link[j]}",
            )
    return fixed


def _unknown_windows(source: Circuit, output: Circuit, step: Step, fixed: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Find the windows with unknown parameters, and check that nothing but their values is open."""
    unknown = np.zeros(step.windows, dtype=bool)
    for circuit, window in ((source, step.source_window), (output, step.output_window)):
        if circuit.symbolic:
            require_standard(circuit)
            unknown[window[circuit.is_symbolic]] = True
    moved = np.repeat(unknown, np.diff(step.offsets)) & (step.entry != step.exit)
    if moved.any():
        at = int(np.searchsorted(step.offsets, np.flatnonzero(moved)[0], side="right")) - 1
        raise ProofError(
            f"not equal: {_named(step, at)} with unknown parameters exchanges its wires",
            window=at,
            qubits=_window_qubits(step, at),
        )
    return unknown & ~fixed


def _unknown_distances(windows: Rows, widths: Rows, source: _Side, output: _Side) -> list[float]:
    """Return the bound of each window with unknown parameters."""
    bounds = UnknownWindows()

    def held(side: _Side, window: int) -> tuple[Circuit, list[int], list[tuple[int, ...]]]:
        circuit = side.circuit
        rows = side.rows[side.starts[window] : side.starts[window + 1]].tolist()
        slots = [tuple(side.slots[circuit.offsets[row] : circuit.offsets[row + 1]].tolist()) for row in rows]
        return circuit, rows, slots

    return [
        bounds.distance(*held(source, window), *held(output, window), int(widths[window]))
        for window in windows.tolist()
    ]


def _chain(step: Step, slot_window: Rows, fixed: NDArray[np.bool_]) -> tuple[Array, Array]:
    """Follow every wire from window to window; return the seams before and after each slot as matrices."""
    order = np.lexsort((slot_window, step.wires))
    wires = step.wires[order]
    starts = np.ones(len(order), dtype=bool)
    starts[1:] = wires[1:] != wires[:-1]
    ends = np.ones(len(order), dtype=bool)
    ends[:-1] = starts[1:]
    expected = np.empty_like(step.entry)
    expected[1:] = step.exit[order][:-1]
    expected[starts] = step.initial[wires[starts]]
    wrong = np.flatnonzero(expected != step.entry[order])
    if len(wrong):
        at = int(slot_window[order][wrong[0]])
        raise ProofError(
            f"not equal: {_named(step, at)} does not begin where its wires are",
            window=at,
            qubits=_window_qubits(step, at),
            required=f"source wire {wires[wrong[0]]} on physical qubit {expected[wrong[0]]}",
        )
    final = step.initial.copy()
    final[wires[ends]] = step.exit[order][ends]
    if not np.array_equal(final, step.final):
        _refuse(
            "the windows do not lead to the claimed final placement",
            required=", ".join(map(str, final.tolist()[:16])),
            found=", ".join(map(str, step.final.tolist()[:16])),
        )
    taken, left = (column[np.lexsort((column, slot_window))] for column in (step.entry, step.exit))
    if not np.array_equal(taken, left):
        _refuse("a window does not leave its wires on the qubits it took")
    quaternions = step.seams / np.linalg.norm(step.seams, axis=1, keepdims=True)
    following_fixed = np.ones(len(order), dtype=bool)
    following_fixed[:-1] = fixed[slot_window[order]][1:]
    plain = ends | following_fixed | fixed[slot_window[order]]
    quaternions[order[plain]] = (1, 0, 0, 0)
    after = _quaternion_matrices(quaternions)
    before = np.empty_like(after)
    before[order[1:]] = after[order[:-1]]
    before[order[starts]] = np.eye(2)
    return before, after


def _quaternion_matrices(q: NDArray[np.float64]) -> Array:
    a, b, c, d = q.T
    return np.asarray(np.stack([a - 1j * d, -c - 1j * b, c - 1j * b, a + 1j * d], axis=-1).reshape(-1, 2, 2))


def _tensor(factors: Array) -> Array:
    """Kronecker product of the one-qubit matrices of each window, shape (k, width, 2, 2)."""
    product = factors[:, 0]
    for slot in range(1, factors.shape[1]):
        product = kron(product, factors[:, slot])
    return product


def _permute(matrices: Array, entry: NDArray[np.int32], leave: NDArray[np.int32]) -> Array:
    """Move the qubit of each slot to the slot whose entry is its exit (rows only: a product from the left)."""
    width = entry.shape[1]
    target = np.argmax(entry[:, None, :] == leave[:, :, None], axis=2)
    bits = (np.arange(2**width)[:, None] >> np.arange(width - 1, -1, -1)) & 1
    rows = (bits[None] << (width - 1 - target)[:, None, :]).sum(axis=2)
    moved = np.empty_like(matrices)
    np.put_along_axis(moved, np.broadcast_to(rows[:, :, None], matrices.shape), matrices, axis=1)
    return moved


def _blocks(windows: Rows, width: int, sides: list[_Side]) -> Iterator[Rows]:
    """Cut windows of one width into blocks whose matrices fit in memory."""
    load = np.cumsum(np.max([side.counts[windows] for side in sides], axis=0) + 1)
    limit = max(1, BLOCK >> (2 * width)) if width <= BATCH_WIDTH else 1
    edges = np.flatnonzero(np.diff(load // limit)) + 1
    return iter(np.split(windows, edges) if width <= BATCH_WIDTH else np.split(windows, len(windows)))


class _Side:
    """One circuit with its operations sorted by window."""

    def __init__(self, circuit: Circuit, window: NDArray[np.int32], slots: Rows, windows: int) -> None:
        self.circuit = circuit
        self.slots = slots
        self.rows = np.argsort(window, kind="stable")
        self.counts = np.bincount(window, minlength=windows)
        self.starts = np.concatenate([[0], np.cumsum(self.counts)])

    def products(self, windows: Rows, width: int) -> Array:
        """Return each window's product, shape (len(windows), 2**width, 2**width); the last operation leftmost."""
        counts = self.counts[windows]
        begin = np.concatenate([[0], np.cumsum(counts)])
        places = np.arange(begin[-1]) + np.repeat(self.starts[windows] - begin[:-1], counts)
        rows = self.rows[places]
        size = 2**width
        if width > BATCH_WIDTH:
            return self._one_window(rows, width)[None]
        factors = np.empty((len(rows), size, size), dtype=np.complex128)
        position = np.empty(len(self.circuit), dtype=np.int64)
        position[rows] = np.arange(len(rows))
        for of_kind, matrices in self.circuit.matrix_groups(rows):
            k = int(matrices.shape[-1]).bit_length() - 1
            slots = self.slots[self.circuit.offsets[of_kind][:, None] + np.arange(k)]
            code = (slots * width ** np.arange(k)).sum(axis=1)
            for value in np.unique(code):
                same = code == value
                factors[position[of_kind[same]]] = embed(matrices[same], slots[same][0].tolist(), width)
        return _multiply_out(factors, counts)

    def _one_window(self, rows: Rows, width: int) -> Array:
        places = np.zeros(self.circuit.n_qubits, dtype=np.int64)
        for row in rows.tolist():
            span = slice(self.circuit.offsets[row], self.circuit.offsets[row + 1])
            places[self.circuit.qubits[span]] = self.slots[span]
        return apply_operations(self.circuit, rows.tolist(), places.tolist(), np.eye(2**width, dtype=np.complex128))


def _multiply_out(factors: Array, counts: Rows) -> Array:
    """Multiply runs of factors, neighbours two by two, so that every round is one batch."""
    size = factors.shape[-1]
    out = np.broadcast_to(np.eye(size, dtype=np.complex128), (len(counts), size, size)).copy()
    counts = counts.copy()
    while counts.max(initial=0) > 1:
        begin = np.cumsum(counts) - counts
        index = np.arange(len(factors)) - np.repeat(begin, counts)
        is_left = index % 2 == 0
        has_partner = is_left & (index + 1 < np.repeat(counts, counts))
        lead = np.flatnonzero(has_partner)
        kept = factors.copy()
        kept[lead] = factors[lead + 1] @ factors[lead]
        factors = kept[is_left]
        counts = (counts + 1) // 2
    out[counts == 1] = factors
    return out
