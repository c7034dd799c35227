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

import itertools
from dataclasses import replace
from typing import TYPE_CHECKING, Any, NoReturn

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.errors import ProofError
from gatewright.gates import MEASURE
from gatewright.proof.claims import CLAIM_KINDS, MATRIX, ClaimKind, Sides
from gatewright.proof.fingerprints import check_fingerprints
from gatewright.proof.legality import check_legal
from gatewright.proof.parametrised import UnknownWindows, require_standard
from gatewright.proof.products import (
    BATCH_WIDTH,
    UNIT,
    Held,
    frobenius_distances,
    multiplication,
    permute_rows,
    quaternion_matrices,
    window_products,
)
from gatewright.proof.reorder import Reorder, check_reorder
from gatewright.proof.windows import Proof, Step, Verdict

if TYPE_CHECKING:
    from gatewright.devices import Device

__all__ = ["check_proof"]

Array = NDArray[np.complex128]
Rows = NDArray[np.int64]
Vector = NDArray[np.float64]

#: Operations, and matrix entries, held at a time, to bound memory.
CHUNK, BLOCK = 1 << 18, 1 << 22


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
    width = max((len(step.initial) for step in proof.steps if isinstance(step, Step)), default=0)
    if output.n_qubits < width:
        # A program on physical qubits need not name the last ones.
        output = replace(output, n_qubits=width, qubit_registers=())
    if not proof.steps:
        raise ProofError("the proof is empty", required="at least one step")
    given = output
    if device is not None:
        natives = {name: native.gate for name, native in device.gate_set.gates.items()}
        output = replace(output, table=tuple(natives.get(gate.name, gate) for gate in output.table))
        check_legal(output, device)
    place: NDArray[np.int32] = np.arange(source.n_qubits, dtype=np.int32)
    initial = place
    measured, rounding, worst, worst_window = 0.0, 0.0, 0.0, 0
    current = source
    for number, step in enumerate(proof.steps):
        last = number == len(proof.steps) - 1
        if isinstance(step, Reorder):
            if last:
                _refuse("a claim of a new order leads to no output")
            current, distance, error = check_reorder(current, step, tolerance)
            measured, rounding = measured + distance, rounding + error
            continue
        following = output if last else step.output
        if following is None:
            raise ProofError("the proof lacks the circuit between two of its steps", found=f"step {number}")
        distances, roundings = _check_step(current, following, step, tolerance)
        if number == 0:
            initial = step.initial[: source.n_qubits]
            place = step.final[: source.n_qubits]
        else:
            initial, place = step.initial[initial], step.final[place]
        measured, rounding = measured + float(distances.sum()), rounding + float(roundings.sum())
        if len(distances) and distances.max() > worst:
            worst_window, worst = int(distances.argmax()), float(distances.max())
        current = following
    check_fingerprints(proof.made_for, source, given, device)
    return Verdict(
        error_bound=(measured + rounding) * (1 + 128 * UNIT),  # of the sums themselves
        rounding=rounding,
        windows=proof.windows,
        worst_window=worst_window,
        worst_distance=worst,
        initial=tuple(initial.tolist()),
        final=tuple(place.tolist()),
        method="windows multiplied out with their seams",
    )


def _check_step(source: Circuit, output: Circuit, step: Step, tolerance: float) -> tuple[Vector, Vector]:
    """Check one step; return the measured distance and the rounding of each of its windows."""
    _check_shapes(source, output, step)
    meant = _Side(source, step.source_window, step.wires, step, "source")
    made = _Side(output, step.output_window, step.entry, step, "output")
    meant.check_order()
    made.check_order()
    chain, bounds = _Chain(step), UnknownWindows()
    distances, roundings = np.zeros(step.windows), np.zeros(step.windows)
    load = np.cumsum(meant.counts + made.counts + 1) // CHUNK
    edges = [0, *(np.flatnonzero(np.diff(load)) + 1).tolist(), step.windows]
    for first, last in itertools.pairwise(edges):
        claimed = step.claims[first:last] != MATRIX
        fixed = _fixed_windows(meant, made, step, first, claimed)
        unknown = _unknown_windows(meant, made, first, last) & ~fixed & ~claimed
        alone = fixed | unknown | claimed
        before, after = chain.advance(first, last, alone)
        widths = np.where(alone, 0, np.diff(step.offsets[first : last + 1]))
        for width in np.unique(widths[widths > 0]).tolist():
            for block in _blocks(np.flatnonzero(widths == width) + first, width, meant.counts + made.counts):
                slots = step.offsets[block][:, None] + np.arange(width)
                at = slots - step.offsets[first]
                left, error_left = window_products(made.held(block, width), [before[at]], [])
                right, error_right = window_products(meant.held(block, width), [], [after[at]])
                right = permute_rows(right, step.entry[slots], step.exit[slots])
                distances[block] = frobenius_distances(left, right)
                roundings[block] = error_left + error_right + 16 * UNIT * 2 ** (width / 2)
        for window in (np.flatnonzero(claimed) + first).tolist():
            distances[window], roundings[window] = _check_claim(meant, made, step, window)
        for window in (np.flatnonzero(unknown) + first).tolist():
            distances[window], roundings[window] = _check_unknown(meant, made, step, window, bounds)
    chain.finish()
    # A comparison with NaN is false: ask for what is right, not for what is wrong.
    wrong = np.flatnonzero(~(distances <= tolerance) | ~(roundings < 0.5))
    if len(wrong):
        _differs(step, int(wrong[0]), float(distances[wrong[0]]), tolerance)
    # Products of factors that are themselves slightly off: (1 + e)^m - 1 is at most m e / (1 - m e).
    return distances, roundings / (1 - roundings)


def _check_claim(meant: _Side, made: _Side, step: Step, window: int) -> tuple[float, float]:
    """Let the claim made of one window judge it."""
    span = slice(step.offsets[window], step.offsets[window + 1])
    target = np.argmax(step.entry[span] == step.exit[span][:, None], axis=1)
    kind: type[ClaimKind] = CLAIM_KINDS[int(step.claims[window])]
    sides = Sides(meant.piece(window), made.piece(window), tuple(target.tolist()))
    try:
        return kind.check(sides)
    except ProofError as error:
        raise ProofError(
            f"not equal: {_named(step, window)}, claimed as '{kind.name}': {error.what}",
            window=window,
            qubits=_window_qubits(step, window),
            distance=error.distance,
            required=error.required,
            found=error.found,
        ) from None


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
        "claims": (step.claims, (step.windows,)),
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
    if not ((step.claims >= 0) & (step.claims < len(CLAIM_KINDS))).all():
        _refuse("a claim is of no known kind", required=f"0 to {len(CLAIM_KINDS) - 1}")
    norms = np.linalg.norm(step.seams, axis=1)
    if not (np.abs(norms - 1) < 1e-6).all():
        _refuse("a seam is not a unit quaternion", required="norm 1")


def _fixed_windows(meant: _Side, made: _Side, step: Step, first: int, special: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Find the windows with measurements, resets and barriers, and check that both sides have the same one."""
    last = first + len(special)
    fixed = np.zeros(len(special), dtype=bool)
    for side in (meant, made):
        rows = side.rows[side.starts[first] : side.starts[last]]
        fixed[side.window[rows[~side.is_gate[rows]]] - first] = True
    fixed &= ~special
    for window in (np.flatnonzero(fixed) + first).tolist():
        held = [side.rows[side.starts[window] : side.starts[window + 1]] for side in (meant, made)]
        span = slice(step.offsets[window], step.offsets[window + 1])
        facts = []
        for side, rows in zip((meant, made), held, strict=True):
            circuit = side.circuit
            if len(rows) != 1 or circuit.widths[rows[0]] != span.stop - span.start:
                raise ProofError(
                    f"not equal: {_named(step, window)} must hold one measurement, reset or barrier on each side "
                    "and no more",
                    window=window,
                    qubits=_window_qubits(step, window),
                )
            qubits = circuit.qubits[circuit.offsets[rows[0]] : circuit.offsets[rows[0] + 1]]
            whole = np.array_equal(np.sort(qubits), np.sort(side.wires[span]))
            values = circuit.parameters[slice(*circuit.parameter_offsets[rows[0] : rows[0] + 2])].tolist()
            facts.append((circuit.table[circuit.op[rows[0]]].name, int(circuit.link[rows[0]]), values, whole))
        (name, bit, values, whole), (other_name, other_bit, other_values, other_whole) = facts
        same = (name, bit, values) == (other_name, other_bit, other_values) and whole and other_whole
        if not same or not np.array_equal(step.entry[span], step.exit[span]):
            raise ProofError(
                f"not equal: {_named(step, window)} holds a measurement, reset or barrier that differs from its source",
                window=window,
                qubits=_window_qubits(step, window),
                required=f"{name}, bit {bit}",
                found=f"{other_name}, bit {other_bit}",
            )
    return fixed


def _unknown_windows(meant: _Side, made: _Side, first: int, last: int) -> NDArray[np.bool_]:
    """Find the windows with unknown parameters."""
    unknown = np.zeros(last - first, dtype=bool)
    for side in (meant, made):
        if side.circuit.symbolic:
            rows = side.rows[side.starts[first] : side.starts[last]]
            unknown[side.window[rows[side.circuit.is_symbolic[rows]]] - first] = True
    return unknown


def _check_unknown(meant: _Side, made: _Side, step: Step, window: int, bounds: UnknownWindows) -> tuple[float, float]:
    """Return the bound of a window with unknown parameters, and its rounding."""
    span = slice(step.offsets[window], step.offsets[window + 1])
    if not np.array_equal(step.entry[span], step.exit[span]):
        raise ProofError(
            f"not equal: {_named(step, window)} with unknown parameters exchanges its wires",
            window=window,
            qubits=_window_qubits(step, window),
        )
    width = int(span.stop - span.start)
    held = [side.held(np.array([window]), width) for side in (meant, made)]
    for side in held:
        require_standard(side.circuit)
    meant_ops, made_ops = ((side.circuit, side.rows.tolist(), side.slots_by_operation()) for side in held)
    distance = bounds.distance(*meant_ops, *made_ops, width)
    operations = sum(len(side.rows) for side in held)
    return distance, 4 * operations * (multiplication(2**width) + 64 * UNIT * 2 ** (width / 2)) if distance else 0.0


class _Chain:
    """Follow every wire from window to window: its place, and the seam that it carries."""

    def __init__(self, step: Step) -> None:
        self.step = step
        self.place = step.initial.copy()
        self.seam = np.zeros((len(step.initial), 4))
        self.seam[:, 0] = 1

    def advance(self, first: int, last: int, plain: NDArray[np.bool_]) -> tuple[Array, Array]:
        """Return the seams before and after each slot of a run of windows; those beside `plain` ones are 1."""
        step = self.step
        span = slice(step.offsets[first], step.offsets[last])
        wires, entry, leave = step.wires[span], step.entry[span], step.exit[span]
        slot_window = np.repeat(np.arange(first, last), np.diff(step.offsets[first : last + 1]))
        codes = [np.sort(slot_window * len(self.place) + column) for column in (wires, entry, leave)]
        for code, side in zip(codes[:2], ("source", "output"), strict=True):
            if (np.diff(code) == 0).any():
                _refuse(f"a window holds a wire of the {side} twice")
        if not np.array_equal(codes[1], codes[2]):
            _refuse("a window does not leave its wires on the qubits it took")
        order = np.argsort(_small(wires, len(self.place)), kind="stable")
        lane = wires[order]
        starts, ends = np.ones(len(lane), dtype=bool), np.ones(len(lane), dtype=bool)
        starts[1:] = lane[1:] != lane[:-1]
        ends[:-1] = starts[1:]
        expected = np.empty_like(entry)
        expected[order[1:]] = leave[order[:-1]]
        expected[order[starts]] = self.place[lane[starts]]
        wrong = np.flatnonzero(expected != entry)
        if len(wrong):
            at = int(slot_window[wrong[0]])
            raise ProofError(
                f"not equal: {_named(step, at)} does not begin where its wires are",
                window=at,
                qubits=_window_qubits(step, at),
                required=f"source wire {wires[wrong[0]]} on physical qubit {expected[wrong[0]]}",
            )
        after = step.seams[span]
        before = np.empty_like(after)
        before[order[1:]] = after[order[:-1]]
        before[order[starts]] = self.seam[lane[starts]]
        self.place[lane[ends]], self.seam[lane[ends]] = leave[order][ends], after[order][ends]
        beside = plain[slot_window - first]
        if not (_is_identity(before[beside]).all() and _is_identity(after[beside]).all()):
            _refuse("a seam crosses a measurement, reset or barrier, or meets a window claimed without a matrix")
        return quaternion_matrices(before), quaternion_matrices(after)

    def finish(self) -> None:
        """Check that the wires end where it is claimed, and that no seam is left over."""
        if not np.array_equal(self.place, self.step.final):
            _refuse(
                "the windows do not lead to the claimed final placement",
                required=", ".join(map(str, self.place.tolist()[:16])),
                found=", ".join(map(str, self.step.final.tolist()[:16])),
            )
        if not _is_identity(self.seam).all():
            _refuse("a seam is left over at the end", required="identity seams at both ends of the circuit")


def _small(lane: NDArray[Any], count: int) -> NDArray[Any]:
    """Return lane numbers in the shortest type that holds them: 16 bits are sorted in linear time."""
    return lane.astype(np.uint16) if count <= 1 << 16 else lane


def _is_identity(q: Vector) -> NDArray[np.bool_]:
    return np.asarray(~q[:, 1:].any(axis=1))


def _blocks(windows: Rows, width: int, counts: Rows) -> list[Rows]:
    """Cut windows of one width into blocks whose matrices fit in memory."""
    if width > BATCH_WIDTH:
        return np.split(windows, len(windows))
    load = np.cumsum(counts[windows] + 1) // max(1, BLOCK >> (2 * width))
    return np.split(windows, np.flatnonzero(np.diff(load)) + 1)


class _Side:
    """One circuit with its operations sorted by window."""

    def __init__(
        self, circuit: Circuit, window: NDArray[np.int32], wires: NDArray[np.int32], step: Step, name: str
    ) -> None:
        self.circuit, self.window, self.wires, self.step, self.name = circuit, window, wires, step, name
        self.rows = np.argsort(window, kind="stable")
        self.counts = np.bincount(window, minlength=step.windows)
        self.starts = np.concatenate([[0], np.cumsum(self.counts)])
        self.is_gate = circuit.is_gate

    def check_order(self) -> None:
        """Check that along every wire, and every classical bit, the windows come in order."""
        circuit = self.circuit
        measured = np.flatnonzero(circuit.is_named(MEASURE.name))
        lanes = ((circuit.n_qubits, "wire"), (circuit.n_bits, "classical bit"))
        for (count, name), by_bit in zip(lanes, (False, True), strict=True):
            reached = np.full(count, -1, dtype=np.int64)
            rows = measured if by_bit else np.arange(len(circuit))
            for start in range(0, len(rows), CHUNK):
                chunk = rows[start : start + CHUNK]
                if by_bit:
                    lane, windows = circuit.link[chunk], self.window[chunk]
                else:
                    lane = circuit.qubits[circuit.offsets[chunk[0]] : circuit.offsets[chunk[-1] + 1]]
                    windows = np.repeat(self.window[chunk], circuit.widths[chunk])
                order = np.argsort(_small(lane, count), kind="stable")
                lane, windows = lane[order], windows[order]
                begins = np.ones(len(lane), dtype=bool)
                begins[1:] = lane[1:] != lane[:-1]
                previous = np.empty(len(lane), dtype=np.int64)
                previous[1:] = windows[:-1]
                previous[begins] = reached[lane[begins]]
                falls = np.flatnonzero(windows < previous)
                if len(falls):
                    _refuse(f"windows are out of order on {name} {lane[falls[0]]} of the {self.name}")
                reached[lane] = windows

    def held(self, windows: Rows, width: int) -> Held:
        """Return the operations of windows of one width; each must act on wires of its window."""
        counts = self.counts[windows]
        local = np.repeat(np.arange(len(windows)), counts)
        begin = np.cumsum(counts) - counts
        rows = self.rows[np.arange(len(local)) + np.repeat(self.starts[windows] - begin, counts)]
        lengths = self.circuit.widths[rows]
        offsets = np.concatenate([[0], np.cumsum(lengths)])
        flat = np.arange(offsets[-1]) + np.repeat(self.circuit.offsets[rows] - offsets[:-1], lengths)
        qubits = self.circuit.qubits[flat]
        owner = np.repeat(local, lengths)
        slots = np.full(len(qubits), -1)
        table = self.wires[self.step.offsets[windows][:, None] + np.arange(width)]
        if len(windows) == 1:
            inverse = np.full(len(self.step.initial), -1)
            inverse[table[0]] = np.arange(width)
            slots = inverse[qubits]
        else:
            for slot in range(width):
                slots[table[owner, slot] == qubits] = slot
        outside = np.flatnonzero(slots < 0)
        if len(outside):
            window = int(windows[owner[outside[0]]])
            raise ProofError(
                f"not equal: an operation of the {self.name} acts outside its {_named(self.step, window)}",
                window=window,
                qubits=_window_qubits(self.step, window),
                found=f"qubit {qubits[outside[0]]}",
            )
        return Held(self.circuit, rows, local, offsets, slots, len(windows), width)

    def piece(self, window: int) -> Circuit:
        """Return the operations of one window as a circuit on its slots."""
        held = self.held(np.array([window]), int(self.step.offsets[window + 1] - self.step.offsets[window]))
        slots = held.slots.astype(np.int32)
        return replace(self.circuit.take(held.rows), n_qubits=held.width, qubits=slots, qubit_registers=())
