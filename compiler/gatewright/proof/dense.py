"""Compare two small circuits by their full matrices: a second opinion, without windows or seams.

Qubits of the output that carry no source qubit are taken to start in |0⟩, and must end there.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, apply_operations
from gatewright.errors import CircuitError, ProofError
from gatewright.gates import BARRIER, DELAY, MEASURE
from gatewright.linalg import dagger
from gatewright.proof.products import multiplication, operation_matrices

__all__ = [
    "DenseComparison",
    "applied_rounding",
    "check_measurements",
    "compare_dense",
    "dense_distance",
    "dense_work",
    "spread",
    "touched_qubits",
    "unitary_part",
]

Array = NDArray[np.complex128]

#: Largest matrix: 2**24 entries are 256 MiB.
MAX_LOG_ENTRIES = 24
#: Unknown parameters are given random values as often as this.
BINDINGS = 3


def touched_qubits(output: Circuit, initial: Sequence[int], final: Sequence[int]) -> list[int]:
    """Return the output's qubits that an operation or a source qubit touches, in order."""
    acting = np.repeat(~(output.is_named(BARRIER.name) | output.is_named(DELAY.name)), output.widths)
    return sorted({*output.qubits[acting].tolist(), *initial, *final})


def dense_work(source: Circuit, output: Circuit, initial: Sequence[int], final: Sequence[int]) -> float:
    """Return the number of matrix entries that the comparison computes."""
    entries = 2.0 ** (len(touched_qubits(output, initial, final)) + source.n_qubits)
    return float(entries * (1 + np.count_nonzero(output.widths >= 2)))


@dataclass(frozen=True, eq=False, slots=True)
class DenseComparison:
    """What full matrices say.

    Attributes
    ----------
    distance : float
        Operator norm of the difference, the phase chosen for the smallest Frobenius norm.
    rounding : float
        Bound on the error of that.
    worst : ndarray, shape (2**n,)
        The input state on which they differ most.
    """

    distance: float
    rounding: float
    worst: Array


def dense_distance(source: Circuit, output: Circuit, initial: Sequence[int], final: Sequence[int]) -> float:
    """Return the distance found by `compare_dense`; unknown parameters are given a few random values."""
    if source.symbolic or output.symbolic:
        rng = np.random.default_rng(source.n_qubits)
        atoms = dict.fromkeys((*source.atoms, *output.atoms))
        draws = [
            dict(zip(atoms, rng.uniform(-np.pi, np.pi, len(atoms)).tolist(), strict=True)) for _ in range(BINDINGS)
        ]
        return max(dense_distance(source.at_atoms(v), output.at_atoms(v), initial, final) for v in draws)
    return compare_dense(source, output, initial, final).distance


def compare_dense(source: Circuit, output: Circuit, initial: Sequence[int], final: Sequence[int]) -> DenseComparison:
    """Compare the full matrices, up to global phase, of the output and the source on its places.

    Parameters
    ----------
    source, output : Circuit
        Unitary, but for measurements at the end; these must agree.
    initial, final : sequence of int, length source.n_qubits
        Output qubit of each source qubit at the two ends.

    Raises
    ------
    CircuitError
        Too large, or not unitary before its measurements.
    ProofError
        The measurements differ.
    """
    held = touched_qubits(output, initial, final)
    n = source.n_qubits
    if len(held) + n > MAX_LOG_ENTRIES:
        raise CircuitError(
            "too large to compare by full matrices",
            required=f"qubits of the source and qubits touched by the output together at most {MAX_LOG_ENTRIES}",
            found=f"{n} and {len(held)}",
            hint="compile with --proof and check with that proof",
        )
    check_measurements(source, output, final)
    meant_rows, made_rows = unitary_part(source), unitary_part(output)
    rank = {q: k for k, q in enumerate(held)}
    meant = spread(apply_operations(source, meant_rows, range(n), np.eye(2**n, dtype=np.complex128)), final, rank)
    start = spread(np.eye(2**n, dtype=np.complex128), initial, rank)
    made = apply_operations(output, made_rows, [rank.get(q, 0) for q in range(output.n_qubits)], start)
    overlap = complex(np.vdot(meant, made))
    phase = overlap / abs(overlap) if overlap else 1.0
    difference = made - phase * meant
    # The largest singular value, by the Hermitian eigenvalue problem: many times faster, and as accurate for it.
    values, vectors = np.linalg.eigh(dagger(difference) @ difference)
    growth = 2 ** (n / 2)
    rounding = growth * (applied_rounding(source, meant_rows) + applied_rounding(output, made_rows))
    return DenseComparison(float(np.sqrt(max(0.0, values[-1]))), rounding, vectors[:, -1])


def check_measurements(source: Circuit, output: Circuit, final: Sequence[int]) -> None:
    """Check that both measure the same at their ends.

    Raises
    ------
    CircuitError
        Something else follows a measurement.
    ProofError
        The measurements differ.
    """
    meant_bits, made_bits = _split(source)[1], _split(output)[1]
    if {(final[q], bit) for q, bit in meant_bits} != set(made_bits):
        raise ProofError(
            "not equal: the measurements at the end differ",
            required=_listed([(final[q], bit) for q, bit in meant_bits]),
            found=_listed(made_bits),
        )


def unitary_part(circuit: Circuit) -> list[int]:
    """Return the unitary operations, in order; what else there is must be measurements at the end, and barriers."""
    return _split(circuit)[0]


def applied_rounding(circuit: Circuit, rows: Sequence[int]) -> float:
    """Return a bound on the error, per unit vector, of applying operations one after another to a state.

    A product with a gate on w qubits is an inner product of length 2^w for every entry, so it is off by at most
    √2 γ_(2·2^w) ‖|G|‖ in norm, ‖|G|‖ ≤ 2^(w/2); the matrix itself, and merging one-qubit gates into it, count too.
    """
    index = np.asarray(rows, dtype=np.int64)
    total = float(2 * multiplication(2.0 ** circuit.widths[index]).sum()) if len(index) else 0.0
    for _, _, errors in operation_matrices(circuit, index):
        total += float(errors.sum())
    return total / (1 - total) if total < 0.5 else float("inf")


def _listed(pairs: list[tuple[int, int]]) -> str:
    return ", ".join(f"qubit {q} → bit {b}" for q, b in sorted(pairs)[:12]) or "none"


def _split(circuit: Circuit) -> tuple[list[int], list[tuple[int, int]]]:
    """Return the unitary operations, and the measurements, which must be the last on their qubits and bits."""
    unitary: list[int] = []
    measured: list[tuple[int, int]] = []
    done: set[int] = set()
    is_unitary = circuit.is_unitary.tolist()
    for k in range(len(circuit)):
        name = circuit.table[circuit.op[k]].name
        if name in (BARRIER.name, DELAY.name):
            continue
        qubits = circuit.qubits_of(k)
        again = done.intersection(qubits)
        if name == MEASURE.name and not again:
            measured.append((qubits[0], int(circuit.link[k])))
            done.add(qubits[0])
        elif again or not is_unitary[k]:
            raise CircuitError(
                "cannot compare full matrices of a circuit that measures or resets before its end",
                found=f"operation {k} ('{name}') on qubit {qubits[0]}",
                hint="compile with --proof and check with that proof",
            )
        else:
            unitary.append(k)
    if len({bit for _, bit in measured}) < len(measured):
        raise CircuitError(
            "cannot compare full matrices of a circuit that measures twice into one bit",
            hint="compile with --proof and check with that proof",
        )
    return unitary, measured


def spread(columns: Array, places: Sequence[int], rank: dict[int, int]) -> Array:
    """Put the n qubits of `columns` on their places among all held qubits, the others in |0⟩."""
    n, total = len(places), len(rank)
    bits = (np.arange(2**n)[:, None] >> np.arange(n - 1, -1, -1)) & 1
    rows = (bits << (total - 1 - np.array([rank[q] for q in places]))).sum(axis=1)
    out = np.zeros((2**total, columns.shape[1]), dtype=np.complex128)
    out[rows] = columns
    return out
