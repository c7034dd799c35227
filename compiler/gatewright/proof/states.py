"""Compare two circuits on random states, where full matrices are too large.

Apply both to complex Gaussian vectors. The phase φ is fixed on a first vector; with k further ones let r be the largest
residual ‖U x - e^{iφ} V x‖ / ‖x‖. A Gaussian vector's direction is uniform on the sphere of dimension N = 2ⁿ, so its
squared overlap with the worst input is below s/N with probability 1 - (1 - s/N)^(N-1) ≤ s. If not all k are, then
‖U - e^{iφ}V‖ ≤ r·√(2ⁿ/s). Basis states alone would miss every difference that is diagonal.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, apply_operations
from gatewright.proof.dense import applied_rounding, spread, touched_qubits, unitary_part

__all__ = ["VECTORS", "StateComparison", "compare_states", "gaussian_states"]

Array = NDArray[np.complex128]

#: Vectors tested, beside the one that fixes the phase; and the share s: the bound fails with probability s^k = 1e-12.
VECTORS, SHARE = 6, 0.01


@dataclass(frozen=True, slots=True)
class StateComparison:
    """What random states say.

    Attributes
    ----------
    bound : float
        On ‖U - e^{iφ}V‖, rounding included, except with probability at most `failure`.
    failure : float
    residual : float
        Largest residual per unit vector.
    apart : float
        How far the two certainly are from each other at least, whatever the phase; 0 if rounding hides it.
    vector : int
        Number of the vector that shows it best.
    statement : str
    """

    bound: float
    failure: float
    residual: float
    apart: float
    vector: int
    statement: str


def gaussian_states(n: int, count: int, seed: int) -> list[Array]:
    """Return complex Gaussian vectors of n qubits, divided by their norms."""
    rng = np.random.default_rng(seed)
    states = []
    for _ in range(count):
        parts = rng.standard_normal((2, 2**n))
        state = parts[0] + 1j * parts[1]
        states.append(state / np.linalg.norm(state))
    return states


def compare_states(
    source: Circuit,
    output: Circuit,
    initial: Sequence[int],
    final: Sequence[int],
    *,
    vectors: int = VECTORS,
    share: float = SHARE,
    seed: int = 0,
) -> StateComparison:
    """Apply both circuits to random states.

    Parameters
    ----------
    source, output : Circuit
        Unitary, but for measurements at the end and barriers.
    initial, final : sequence of int
        Output qubit of each source qubit at the two ends; the output's other qubits start in |0⟩.
    vectors, share : int, float
        k and s of the bound.
    seed : int

    Examples
    --------
    >>> from gatewright.circuit import Builder
    >>> a = Builder(1).gate("rz", 0, parameters=[0.4]).build()
    >>> b = Builder(1).gate("p", 0, parameters=[0.4]).build()
    >>> compare_states(a, b, [0], [0]).bound < 1e-12
    True
    """
    n = source.n_qubits
    held = touched_qubits(output, initial, final)
    rank = {q: k for k, q in enumerate(held)}
    places = [rank.get(q, 0) for q in range(output.n_qubits)]
    meant_rows, made_rows = unitary_part(source), unitary_part(output)
    rounding = applied_rounding(source, meant_rows) + applied_rounding(output, made_rows)
    overlaps, fidelities = [], []
    differences: list[float] = []
    phase = 1.0 + 0j
    for k, state in enumerate(gaussian_states(n, vectors + 1, seed)):
        column = state[:, None]
        meant = spread(apply_operations(source, meant_rows, range(n), column), final, rank)[:, 0]
        made = apply_operations(output, made_rows, places, spread(column, initial, rank))[:, 0]
        overlap = complex(np.vdot(meant, made))
        if k == 0:
            phase = overlap / abs(overlap) if overlap else phase
        else:
            differences.append(float(np.linalg.norm(made - phase * meant)))
        own = overlap / abs(overlap) if overlap else 1.0
        fidelities.append(float(np.linalg.norm(made - own * meant)))
        overlaps.append(own)
    residual = max(differences)
    bound = (residual + rounding) * float(np.sqrt(2.0**n / share))
    failure = share**vectors
    # Every vector by itself, and any two whose phases differ, keep the circuits apart.
    vector = int(np.argmax(fidelities))
    apart = max(0.0, fidelities[vector] - rounding)
    statement = (
        f"{vectors} complex Gaussian vectors: ‖U−e^(iφ)V‖ ≤ r·√(2^n/s) except with probability ≤ s^k, with "
        f"n = {n}, k = {vectors}, s = {share:g}, r = {residual + rounding:.3g} (rounding included): "
        f"at most {bound:.3g} except with probability {failure:.1g}"
    )
    return StateComparison(bound, failure, residual, apart, vector, statement)
