"""The claim that windows of a circuit may change places, and its check: what changes places is multiplied out.

Let the source be cut into windows that come in order along every wire. Sorting the windows by a new rank gives an
output within the sum of ‖A B − B A‖ over all pairs of windows that change places and share a wire, in operator norm:
the order is reached by exchanging neighbours, each such pair once, and pairs without a common wire commute.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, apply_operations
from gatewright.errors import ProofError
from gatewright.proof.products import UNIT, multiplication

__all__ = ["Reorder", "check_reorder"]

Rows = NDArray[np.int64]
#: Pairs of windows multiplied out at a time.
BLOCK = 1 << 14
#: Qubits of a pair of windows at most.
WIDEST = 8


@dataclass(frozen=True, eq=False, slots=True)
class Reorder:
    """The claim that the windows of a circuit may be done in another order.

    Attributes
    ----------
    window : ndarray of int32, shape (operations,)
        Window of each operation, numbered such that they come in order along every wire.
    rank : ndarray of int32, shape (W,)
        New place of each window.
    """

    window: NDArray[np.int32]
    rank: NDArray[np.int32]

    @property
    def windows(self) -> int:
        """Number of windows."""
        return len(self.rank)

    @property
    def output(self) -> None:
        """None: the circuit in its new order follows from the claim."""

    def apply(self, circuit: Circuit) -> Circuit:
        """Return the circuit in its new order."""
        return circuit.take(np.argsort(self.rank[self.window], kind="stable"))


def check_reorder(source: Circuit, claim: Reorder, tolerance: float) -> tuple[Circuit, float, float]:
    """Check the claim; return the circuit in its new order, a bound on its distance from the source, and its rounding.

    Raises
    ------
    ProofError
        The claim does not fit the circuit, or windows that change places do not commute within `tolerance`.
    """
    window, rank, m = claim.window, claim.rank, len(source)
    fits = window.shape == (m,) and rank.ndim == 1 and (m == 0 or 0 <= window.min() <= window.max() < len(rank))
    if not fits or not np.array_equal(np.sort(rank), np.arange(len(rank))):
        raise ProofError(
            "the proof does not hold: the claim of a new order does not fit",
            required=f"a window for each of {m} operations, and each place once",
        )
    lanes, offsets = source.lanes()
    by_lane = np.argsort(lanes, kind="stable")
    at = np.repeat(window.astype(np.int64), np.diff(offsets))[by_lane]
    lane = lanes[by_lane]
    if ((np.diff(at) < 0) & (np.diff(lane) == 0)).any():
        raise ProofError("the proof does not hold: windows to be reordered are out of order on a wire")
    # Each window once on each of its wires.
    once = np.ones(len(at), dtype=bool)
    once[1:] = (np.diff(at) != 0) | (np.diff(lane) != 0)
    total, rounding = 0.0, 0.0
    counts = np.bincount(window, minlength=len(rank))
    for first, second in _exchanged(at[once], lane[once].astype(np.int64), rank.astype(np.int64)):
        distances = _Commutators(source, claim).norms(first, second)
        wrong = np.flatnonzero(~(distances <= tolerance))
        if len(wrong):
            k = int(wrong[0])
            raise ProofError(
                f"not equal: windows {first[k]} and {second[k]} change places and do not commute",
                window=int(first[k]),
                distance=float(distances[k]),
                required=f"distance at most {tolerance:.3g}",
                found=f"{distances[k]:.6g}",
            )
        total += float(distances.sum())
        # Two products of all operations of both windows, each applied to at most two qubits.
        rounding += float((counts[first] + counts[second]).sum()) * 2 * (multiplication(4) + 8 * UNIT)
    return claim.apply(source), total, rounding


def _exchanged(at: Rows, lane: Rows, rank: Rows) -> list[tuple[Rows, Rows]]:
    """Return all pairs of windows that share a lane and change places, in batches, each pair once."""
    place = rank[at]
    # On a lane, windows i < j change places only if they are nearer than the two have moved together.
    by_place = np.lexsort((place, lane))
    moved = np.empty(len(at), dtype=np.int64)
    moved[by_place] = np.arange(len(at))
    furthest = int(np.abs(moved - np.arange(len(at))).max(initial=0))
    found: list[Rows] = []
    for step in range(1, 2 * furthest + 1):
        if step >= len(at):
            break
        turned = (place[:-step] > place[step:]) & (lane[:-step] == lane[step:])
        k = np.flatnonzero(turned)
        if len(k):
            found.append(np.stack([at[k], at[k + step]], axis=1))
    if not found:
        return []
    pairs = np.unique(np.concatenate(found), axis=0)
    return [(block[:, 0], block[:, 1]) for block in np.split(pairs, range(BLOCK, len(pairs), BLOCK))]


class _Commutators:
    """The windows of a circuit, for multiplying pairs of them out."""

    def __init__(self, circuit: Circuit, claim: Reorder) -> None:
        self.circuit = circuit
        self.rows = np.argsort(claim.window, kind="stable")
        counts = np.bincount(claim.window, minlength=claim.windows)
        self.starts = np.concatenate([[0], np.cumsum(counts)])
        self.unitary = circuit.is_unitary
        self.known: dict[tuple[object, ...], float] = {}

    def norms(self, first: Rows, second: Rows) -> NDArray[np.float64]:
        """Return the Frobenius norm of each commutator; infinite where one of the two is no unitary."""
        return np.array([self._norm(a, b) for a, b in zip(first.tolist(), second.tolist(), strict=True)])

    def _norm(self, a: int, b: int) -> float:
        circuit = self.circuit
        sides = [self.rows[self.starts[w] : self.starts[w + 1]].tolist() for w in (a, b)]
        if not all(self.unitary[row] for side in sides for row in side):
            return float("inf")
        names: dict[int, int] = {}
        key: list[object] = []
        for row in [*sides[0], -1, *sides[1]]:
            if row < 0:
                key.append(row)
                continue
            span = slice(circuit.parameter_offsets[row], circuit.parameter_offsets[row + 1])
            places = tuple(names.setdefault(qubit, len(names)) for qubit in circuit.qubits_of(row))
            key.append((int(circuit.op[row]), int(circuit.link[row]), circuit.parameters[span].tobytes(), places))
        if len(names) > WIDEST:
            return float("inf")
        found = self.known.get(tuple(key))
        if found is None:
            where = [0] * circuit.n_qubits
            for qubit, place in names.items():
                where[qubit] = place
            eye = np.eye(2 ** len(names), dtype=np.complex128)
            one = apply_operations(circuit, sides[0] + sides[1], where, eye)
            two = apply_operations(circuit, sides[1] + sides[0], where, eye)
            found = self.known[tuple(key)] = float(np.linalg.norm(one - two))
        return found
