"""Judge two circuits without a proof: by whatever method can decide, from the most to the least scalable.

In this order: matching of two-qubit blocks, whose result the checker verifies; Clifford tableaus; phase polynomials;
full unitaries; random states. Each says 'equal, within a bound', 'different, with a witness', or nothing. When none
decides, the answer is 'undecided'.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.errors import CircuitError, ProofError, UndecidedError
from gatewright.gates import MEASURE
from gatewright.proof.checker import check_proof
from gatewright.proof.dense import (
    BINDINGS,
    check_measurements,
    compare_dense,
    dense_distance,
    touched_qubits,
    unitary_part,
)
from gatewright.proof.matching import Stuck, match_circuits
from gatewright.proof.phase_polynomial import NotMonomial, compare_phase_polynomials
from gatewright.proof.states import VECTORS, compare_states
from gatewright.proof.tableau import NotClifford, compare_tableaus
from gatewright.proof.windows import Verdict

__all__ = ["judge"]

#: Full unitaries are compared up to this many qubits on either side, random states up to that many.
DENSE_QUBITS, STATE_QUBITS = 12, 26
#: Amplitudes that comparing states may compute.
STATE_WORK = 2.0**37
#: All placements at the start are tried by full unitaries where none is given, up to this many qubits.
FREE_QUBITS = 5

Places = tuple[int, ...]


def judge(
    source: Circuit,
    output: Circuit,
    *,
    initial: Sequence[int] | None = None,
    final: Sequence[int] | None = None,
    tolerance: float = 1e-9,
    seed: int = 0,
) -> Verdict:
    """Find out whether `output` is the same operation as `source`.

    Parameters
    ----------
    source, output : Circuit
    initial, final : sequence of int, optional
        Output qubit of each source qubit at the two ends; found where they are not given.
    tolerance : float
        Largest distance that counts as equal: of a window where windows are matched, else of the whole.
    seed : int
        Of the random states.

    Raises
    ------
    ProofError
        They differ; the message says on what, and by how much.
    UndecidedError
        No method could tell.

    Examples
    --------
    >>> from gatewright.circuit import Builder
    >>> three = Builder(2).gate("cx", 0, 1).gate("cx", 1, 0).gate("cx", 0, 1).build()
    >>> judge(Builder(2).gate("swap", 0, 1).build(), three).final
    (0, 1)
    """
    if source.n_qubits > output.n_qubits:
        raise ProofError(
            "not equal: the source has more qubits than the output",
            required=f"{output.n_qubits} at most",
            found=str(source.n_qubits),
        )
    if source.symbolic or output.symbolic:
        return _at_random_values(source, output, initial, final, tolerance)
    start = None if initial is None else tuple(int(q) for q in initial)
    end = None if final is None else tuple(int(q) for q in final)
    found = match_circuits(source, output, start)
    if not isinstance(found, Stuck):
        try:
            verdict = check_proof(source, output, found.proof, tolerance=tolerance)
        except ProofError:
            pass  # what was found does not hold: another method has to say
        else:
            if end is None or verdict.final == end:
                return Verdict(
                    **{field: getattr(verdict, field) for field in Verdict.__slots__ if field != "method"},
                    method="two-qubit blocks matched, and the windows found multiplied out with their seams",
                )
    reasons = [_stopped(found)] if isinstance(found, Stuck) else ["matching: the windows found do not hold"]
    task = _Task(source, output, start, end, tolerance, seed, found if isinstance(found, Stuck) else None)
    methods: tuple[tuple[str, Callable[[], Verdict | str]], ...] = (
        ("tableau", task.by_tableau),
        ("phase polynomial", task.by_phase_polynomial),
        ("full unitaries", task.by_unitaries),
        ("random states", task.by_states),
    )
    for name, method in methods:
        said = method()
        if isinstance(said, Verdict):
            return said
        reasons.append(f"{name}: {said}")
    raise UndecidedError(
        "undecided: no method could tell whether these are equal",
        found="; ".join(reasons),
        hint="compile with --proof and check with that proof",
    )


def _at_random_values(
    source: Circuit, output: Circuit, initial: Sequence[int] | None, final: Sequence[int] | None, tolerance: float
) -> Verdict:
    """Compare full unitaries at a few values of the unknown parameters."""
    own = tuple(range(source.n_qubits))
    places = tuple(initial or own), tuple(final or initial or own)
    try:
        distance = dense_distance(source, output, *places)
    except CircuitError as error:
        raise UndecidedError(
            f"undecided: {error.what}", hint="compile with --proof and check with that proof"
        ) from None
    if not distance <= tolerance:
        raise ProofError(
            "not equal: the full unitaries differ for some values of the unknown parameters",
            distance=distance,
            required=f"operator-norm distance at most {tolerance:.3g}",
            found=f"{distance:.6g}",
        )
    return Verdict(
        error_bound=distance,
        windows=0,
        worst_window=0,
        worst_distance=0.0,
        initial=places[0],
        final=places[1],
        method="full unitaries compared; qubits beyond the source's taken to start and end in |0⟩; "
        f"at {BINDINGS} random values of the unknown parameters: evidence, no proof",
    )


def _stopped(stuck: Stuck) -> str:
    where = "at the end" if stuck.operation < 0 else f"at operation {stuck.operation}"
    on = f" on qubits {', '.join(map(str, stuck.qubits))}" if stuck.qubits else ""
    return f"matching: stopped {where}{on} after {stuck.blocks} blocks"


class _Task:
    def __init__(
        self,
        source: Circuit,
        output: Circuit,
        initial: Places | None,
        final: Places | None,
        tolerance: float,
        seed: int,
        stuck: Stuck | None,
    ) -> None:
        self.source, self.output, self.tolerance, self.seed = source, output, tolerance, seed
        self.start = initial if initial is not None else tuple(range(source.n_qubits))
        self.initial, self.given_final = initial, final
        self.stuck = stuck
        #: Without a placement, circuits on the same qubits are taken to mean the same ones.
        self.comparable = initial is not None or source.n_qubits == output.n_qubits

    def _final(self) -> Places | None:
        """Return the final placement if it is given or follows from the measurements."""
        if self.given_final is not None:
            return self.given_final
        ends: dict[int, int] = {}
        bits: dict[int, int] = {}
        for circuit, table in ((self.output, bits), (self.source, ends)):
            rows = np.flatnonzero(circuit.is_named(MEASURE.name))
            for row in rows.tolist():
                table[int(circuit.link[row])] = circuit.qubits_of(row)[0]
        found = {qubit: bits[bit] for bit, qubit in ends.items() if bit in bits}
        if len(found) == self.source.n_qubits and len(set(found.values())) == len(found):
            return tuple(found[q] for q in range(self.source.n_qubits))
        return None

    def _parts(self) -> tuple[Circuit, Circuit, Places | None] | str:
        """Return both circuits without the measurements at their ends."""
        final = self._final()
        try:
            rows = unitary_part(self.source), unitary_part(self.output)
            if not (self.source.is_named(MEASURE.name).any() or self.output.is_named(MEASURE.name).any()):
                return self.source, self.output, final
            if final is None:
                return "the final placement is not known"
            check_measurements(self.source, self.output, final)
        except CircuitError as error:
            return error.what
        return self.source.take(rows[0]), self.output.take(rows[1]), final

    def _differ(self, what: str, *, distance: float, method: str) -> ProofError:
        place = f"; {_stopped(self.stuck)}" if self.stuck is not None and self.stuck.certain else ""
        assumed = "" if self.initial is not None else ", with source qubit i on output qubit i at the start"
        return ProofError(
            f"not equal: {what} ({method}{assumed}{place})",
            qubits=self.stuck.qubits if self.stuck is not None else (),
            distance=distance,
            required=f"distance at most {self.tolerance:.3g}",
            found=f"{distance:.6g}" if distance else "",
        )

    def _symbolic(self, compare: Callable[..., tuple[float, Places, str]], method: str) -> Verdict | str:
        parts = self._parts()
        if isinstance(parts, str):
            return parts
        distance, final, difference = compare(parts[0], parts[1], self.start, parts[2])
        if difference:
            if not self.comparable:
                return f"{difference}, if source qubit i starts on output qubit i"
            raise self._differ(difference, distance=distance, method=method)
        if not distance <= self.tolerance:
            return f"equal within {distance:.3g} only"
        return self._verdict(distance, distance, final, method)

    def by_tableau(self) -> Verdict | str:
        try:
            return self._symbolic(compare_tableaus, "Clifford tableaus compared")
        except NotClifford:
            return "not Clifford circuits"

    def by_phase_polynomial(self) -> Verdict | str:
        try:
            return self._symbolic(compare_phase_polynomials, "phase polynomials compared")
        except NotMonomial:
            return "other gates than exchanges, NOT, CNOT and diagonal ones"

    def by_unitaries(self) -> Verdict | str:
        n = self.source.n_qubits
        finals = self._final()
        held = touched_qubits(self.output, self.start, finals or self.start)
        if max(n, len(held)) > DENSE_QUBITS:
            return f"more than {DENSE_QUBITS} qubits"
        try:
            comparison = compare_dense(self.source, self.output, self.start, finals or self.start)
        except CircuitError as error:
            return error.what
        method = "full unitaries compared; qubits beyond the source's taken to start and end in |0⟩"
        if comparison.distance <= self.tolerance:
            bound = comparison.distance + comparison.rounding
            return self._verdict(bound, comparison.rounding, finals or self.start, method)
        if self.initial is None or finals is None:
            placed = self._search(held)
            if placed is not None:
                comparison = compare_dense(self.source, self.output, *placed)
                if comparison.distance <= self.tolerance:
                    self.start = placed[0]
                    bound = comparison.distance + comparison.rounding
                    return self._verdict(bound, comparison.rounding, placed[1], method)
        if not self.comparable:
            return "they differ, if source qubit i starts and ends on output qubit i"
        raise self._differ(
            f"the full unitaries differ, most on the input {_state(comparison.worst)}",
            distance=comparison.distance,
            method="operator norm, up to global phase",
        )

    def _search(self, held: list[int]) -> tuple[Places, Places] | None:
        """Look for placements of a few qubits under which the full unitaries agree."""
        n = self.source.n_qubits
        few = n <= (FREE_QUBITS if self.initial is None else DENSE_QUBITS)
        if not few or len(held) != n or self.output.is_named(MEASURE.name).any():
            return None
        rank = {q: k for k, q in enumerate(held)}
        only = Circuit.take(self.source, unitary_part(self.source))
        u, v = only.unitary(), _restricted(self.output, rank).unitary()
        for start in itertools.permutations(range(n)) if self.initial is None else [[rank[q] for q in self.start]]:
            # A basis state with one 1 shows where each wire ends.
            moved = v.reshape((2,) * (2 * n)).transpose([*range(n), *(n + q for q in start)]).reshape(v.shape)
            w = moved @ u.conj().T
            ends = []
            for q in range(n):
                column = np.abs(w[:, 1 << (n - 1 - q)])
                at = int(np.argmax(column))
                if column[at] < 0.999 or at == 0 or at & (at - 1):
                    break
                ends.append(n - at.bit_length())
            if len(ends) == n and len(set(ends)) == n:
                return tuple(held[q] for q in start), tuple(held[q] for q in ends)
        return None

    def by_states(self) -> Verdict | str:
        final = self._final() or self.start
        held = touched_qubits(self.output, self.start, final)
        if max(self.source.n_qubits, len(held)) > STATE_QUBITS:
            return f"more than {STATE_QUBITS} qubits"
        try:
            check_measurements(self.source, self.output, final)
        except CircuitError as error:
            return error.what
        gates = np.count_nonzero(self.source.widths > 1) + np.count_nonzero(self.output.widths > 1) + len(held)
        if gates * 2.0 ** len(held) * (VECTORS + 1) > STATE_WORK:
            return "too many gates on too many qubits"
        said = compare_states(self.source, self.output, self.start, final, seed=self.seed)
        if said.apart > self.tolerance:
            if not self.comparable:
                return "they differ, if source qubit i starts and ends on output qubit i"
            raise self._differ(
                f"they differ on Gaussian vector {said.vector} of seed {self.seed}",
                distance=said.apart,
                method="random states",
            )
        if said.bound > self.tolerance:
            return f"{said.statement}; this is above the tolerance of {self.tolerance:.3g}"
        return self._verdict(said.bound, said.bound - said.residual, final, said.statement)

    def _verdict(self, bound: float, rounding: float, final: Places, method: str) -> Verdict:
        return Verdict(
            error_bound=bound,
            rounding=rounding,
            windows=0,
            worst_window=0,
            worst_distance=0.0,
            initial=self.start,
            final=tuple(final),
            method=method,
        )


def _restricted(circuit: Circuit, rank: dict[int, int]) -> Circuit:
    kept = circuit.take(np.flatnonzero(circuit.is_unitary))
    qubits = np.array([rank[q] for q in kept.qubits.tolist()], dtype=np.int32)
    return replace(kept, n_qubits=len(rank), qubits=qubits, qubit_registers=())


def _state(amplitudes: NDArray[np.complex128]) -> str:
    """Return the largest amplitudes of a state as text."""
    n = len(amplitudes).bit_length() - 1
    order = np.argsort(-np.abs(amplitudes), kind="stable")[:4]
    phase = amplitudes[order[0]] / abs(amplitudes[order[0]])
    shown = [(amplitudes[k] / phase, k) for k in order.tolist() if abs(amplitudes[k]) > 1e-6]
    text = " + ".join(f"({a.real:.4g}{a.imag:+.4g}i)|{k:0{n}b}⟩" for a, k in shown)
    return text + (" + …" if np.linalg.norm(amplitudes[order]) < 1 - 1e-9 else "")
