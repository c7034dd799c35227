"""Two-qubit circuits with the least number of CNOTs: 0, 1, 2 or 3.

Counts: Shende, Bullock & Markov, PRA 70, 012310 (2004), read off the canonical coordinates. Three-CNOT circuit:
Vatan & Williams, PRA 69, 032315 (2004). CNOT here has qubit 0 as its control.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.linalg import kron
from gatewright.synthesis._kak import checked_stack, decomposed
from gatewright.synthesis._layers import HADAMARD, ONE, ROUNDING, layers, make_plan, multiply, quarter_turn
from gatewright.synthesis.weyl import canonical_coordinates

__all__ = ["EntanglerCircuit", "class_distances", "cnot_count", "count_reason", "least_uses", "synthesise"]

# CAN(π/4, 0, 0) = (H Rz(−π/2) ⊗ Rx(−π/2)) · CX · (H ⊗ 1) up to phase.
_PLAN = make_plan(
    np.stack([HADAMARD, ONE]),
    np.stack([multiply(HADAMARD, quarter_turn("z", -1)), quarter_turn("x", -1)]),
    exchanged=False,
)


@dataclass(frozen=True, slots=True, eq=False)
class EntanglerCircuit:
    """A stack of circuits U ≈ exp(iφ) · L_k · E · L_{k−1} · E ··· E · L_0, E a fixed entangler used k times.

    Attributes
    ----------
    uses : ndarray of int, shape (...)
        k, from 0 to a greatest number K, which is 3 for CNOT.
    layers : ndarray, shape (..., K + 1, 2, 2, 2)
        One-qubit gates, [layer, qubit] 2 × 2 in SU(2); layer 0 is the first in time, those beyond k are 1.
    distance : ndarray, shape (...)
        Operator-norm distance up to phase between the target and what is built, where an approximation within the
        tolerance was used; 0 where none was (rounding is not counted).
    """

    uses: NDArray[np.int64]
    layers: NDArray[np.complex128]
    distance: NDArray[np.float64]

    def matrix(self, entangler: ArrayLike) -> NDArray[np.complex128]:
        """Multiply the circuits out, shape (..., 4, 4), for the entangler's matrix (4 × 4)."""
        gate = np.asarray(entangler, dtype=np.complex128)
        local = kron(self.layers[..., 0, :, :], self.layers[..., 1, :, :])
        product = np.asarray(local[..., 0, :, :])
        for j in range(1, self.layers.shape[-4]):
            longer = local[..., j, :, :] @ gate @ product
            product = np.where((self.uses >= j)[..., None, None], longer, product)
        return product


def class_distances(coordinates: ArrayLike) -> NDArray[np.float64]:
    """Return the distance of each class to what exactly 0, 1, 2 and 3 CNOTs reach.

    Parameters
    ----------
    coordinates : array_like, shape (..., 3)
        Points of the chamber.

    Returns
    -------
    ndarray, shape (..., 4)
        Least operator-norm distance up to phase from CAN(x, y, z) to a local gate, to one of the class of CNOT, to
        one with z = 0, and to any.

    Notes
    -----
    The distance between two classes is attained by two canonical gates, because each eigenphase of MᵀM moves by at
    most twice the arc between the gates. CAN(a, b, c) is 2 sin(s/2) from 1, with s the sum of the two largest of the
    absolute values of a, b and c.

    Examples
    --------
    >>> class_distances([np.pi / 4, 0, 1e-3]).round(6).tolist()
    [0.765367, 0.001, 0.001, 0.0]
    """
    x, y, z = np.moveaxis(np.asarray(coordinates, dtype=np.float64), -1, 0)
    height = np.abs(z)
    sums = np.stack([x + y, y + np.maximum(height, np.abs(np.pi / 4 - x)), height, np.zeros_like(x)], axis=-1)
    return np.asarray(2 * np.sin(0.5 * sums))


def least_uses(distances: NDArray[np.float64], tolerance: float) -> NDArray[np.int64]:
    """Return the index of the first of the last axis's distances within `tolerance`, or else of the last one."""
    within = distances <= tolerance
    within[..., -1] = True
    return np.asarray(np.argmax(within, axis=-1), dtype=np.int64)


def cnot_count(unitary: ArrayLike, *, tolerance: float = 1e-12) -> NDArray[np.int64]:
    """Return the least number of CNOTs for each unitary.

    Parameters
    ----------
    unitary : array_like, shape (..., 4, 4)
    tolerance : float
        A unitary within this operator-norm distance (up to phase) of one that needs fewer counts as that one.

    Returns
    -------
    ndarray of int, shape (...)

    Raises
    ------
    MatrixError, NotUnitaryError
        As `gatewright.synthesis.weyl.canonical_decomposition`.

    References
    ----------
    Shende, Bullock & Markov, PRA 70, 012310 (2004).

    Examples
    --------
    >>> swap = np.eye(4)[[0, 2, 1, 3]]
    >>> cnot_count([np.eye(4), np.diag([1, 1, 1, -1]), np.diag([1, 1, 1, -1]) @ swap, swap]).tolist()
    [0, 1, 2, 3]
    """
    return least_uses(class_distances(canonical_coordinates(unitary)), tolerance)


def count_reason(coordinates: ArrayLike, count: int) -> str:
    """Say in one sentence why the class needs `count` CNOTs and no fewer.

    Parameters
    ----------
    coordinates : array_like, shape (3,)
        Its point of the chamber.
    count : int
        Its CNOT count, from 0 to 3.

    Examples
    --------
    >>> count_reason([0.5, 0.25, 0.125], 3)
    '3 CNOTs: two reach only z = 0, and that is 0.125 away (z = 0.125).'
    """
    x, y, z = (float(value) for value in np.asarray(coordinates, dtype=np.float64))
    local, single, plane, _ = (float(value) for value in class_distances([x, y, z]))
    if count == 0:
        return "0 CNOTs: (x, y, z) = (0, 0, 0), a product of one-qubit gates."
    if count == 1:
        return (
            "1 CNOT: (x, y, z) = (π/4, 0, 0), the class of CNOT itself; without one only (0, 0, 0) is reached, "
            f"and that is {local:.3g} away."
        )
    if count == 2:
        return (
            f"2 CNOTs: z = 0; one reaches only (π/4, 0, 0), and that is {single:.3g} away "
            f"(x = {x:.6g}, y = {y:.6g}), none only (0, 0, 0), {local:.3g} away."
        )
    return f"3 CNOTs: two reach only z = 0, and that is {plane:.3g} away (z = {z:.6g})."


def synthesise(unitary: ArrayLike, *, tolerance: float = 1e-12) -> EntanglerCircuit:
    """Return for each unitary a circuit with the least number of CNOTs, control on qubit 0.

    Parameters
    ----------
    unitary : array_like, shape (..., 4, 4)
    tolerance : float
        A unitary within this operator-norm distance (up to phase) of one that needs fewer CNOTs is replaced by it,
        and the distance recorded.

    Returns
    -------
    EntanglerCircuit
        Within 2e-14 plus ``distance`` of the input in operator norm up to phase.

    Raises
    ------
    MatrixError, NotUnitaryError
        As `gatewright.synthesis.weyl.canonical_decomposition`.

    References
    ----------
    Vatan & Williams, PRA 69, 032315 (2004); Shende, Bullock & Markov, PRA 70, 012310 (2004).

    Examples
    --------
    >>> from gatewright.linalg import distance
    >>> swap, cx = np.eye(4)[[0, 2, 1, 3]], np.eye(4)[[0, 1, 3, 2]]
    >>> circuit = synthesise(swap)
    >>> int(circuit.uses), bool(distance(circuit.matrix(cx), swap) < 2e-14)
    (3, True)
    """
    u = checked_stack(unitary)
    factors = decomposed(u)
    distances = class_distances(factors.coordinates)
    uses = least_uses(distances, tolerance)
    gap = np.take_along_axis(distances, uses[:, None], axis=-1)[:, 0]
    batch = u.shape[:-2]
    return EntanglerCircuit(
        uses=uses.reshape(batch),
        layers=layers(_PLAN, factors.local, factors.coordinates, uses).reshape(*batch, 4, 2, 2, 2),
        distance=np.where(gap <= ROUNDING, 0.0, gap).reshape(batch),
    )
