"""Two-qubit circuits in the least number of uses of one fixed entangler of the class of CNOT or of iSWAP.

An entangler of the CNOT class is CNOT up to local gates, so its counts and circuits are those of
`gatewright.synthesis.controlled_not`. One of the iSWAP class is SWAP times such a one; SWAPs move through local gates
by exchanging their qubits, so k uses reach SWAP^k times what k CNOTs reach.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import GateSetError, MatrixError, UnsupportedError
from gatewright.synthesis._kak import checked_stack, decomposed, gates
from gatewright.synthesis._layers import HADAMARD, PAULI_X, ROUNDING, Plan, conjugate, layers, make_plan, multiply
from gatewright.synthesis.controlled_not import EntanglerCircuit, class_distances, least_uses
from gatewright.synthesis.weyl import canonical_coordinates, mirrored_coordinates

__all__ = ["Entangler", "classify"]


@dataclass(frozen=True, slots=True, eq=False)
class Entangler:
    """A fixed two-qubit gate that circuits can be made of; built by `classify`.

    Attributes
    ----------
    matrix : ndarray, shape (4, 4)
        The gate E.
    coordinates : ndarray, shape (3,)
        Its point of the chamber.
    mirrored : bool
        False in the class of CNOT, True in that of iSWAP.
    left, right : ndarray, shape (2, 2, 2)
        Its local gates: E = exp(iφ) · (left₀ ⊗ left₁) · CAN(coordinates) · (right₀ ⊗ right₁).
    deviation : float
        Operator-norm distance up to phase from E to its class; each use adds it to a circuit's distance.
    """

    matrix: NDArray[np.complex128]
    coordinates: NDArray[np.float64]
    mirrored: bool
    left: NDArray[np.complex128]
    right: NDArray[np.complex128]
    deviation: float
    _plan: Plan = field(repr=False)

    def count(self, target: ArrayLike, *, tolerance: float = 1e-12) -> NDArray[np.int64]:
        """Return the least number of uses for each target.

        Parameters
        ----------
        target : array_like, shape (..., 4, 4) or (..., 3)
            Unitaries, or their points of the chamber.
        tolerance : float
            A target within this operator-norm distance of one that needs fewer uses counts as that one.

        Returns
        -------
        ndarray of int, shape (...)
            From 0 to 3.

        Raises
        ------
        MatrixError, NotUnitaryError
            As `gatewright.synthesis.weyl.canonical_decomposition`.

        Examples
        --------
        >>> swap = np.eye(4)[[0, 2, 1, 3]]
        >>> entangler = classify(np.diag([1, 1, 1, -1]))
        >>> int(entangler.count(swap)), int(entangler.count_exchanged(swap))
        (3, 0)
        """
        return least_uses(self._distances(_points(target)), tolerance)

    def count_exchanged(self, target: ArrayLike, *, tolerance: float = 1e-12) -> NDArray[np.int64]:
        """Return the least number of uses where the two output wires may be exchanged: over W and SWAP · W.

        Parameters, result and errors are those of `count`.
        """
        points = _points(target)
        straight = least_uses(self._distances(points), tolerance)
        crossed = least_uses(self._distances(mirrored_coordinates(points)), tolerance)
        return np.asarray(np.minimum(straight, crossed))

    def synthesise(self, unitary: ArrayLike, *, tolerance: float = 1e-12) -> EntanglerCircuit:
        """Return for each unitary a circuit with the least number of uses of this entangler.

        Parameters
        ----------
        unitary : array_like, shape (..., 4, 4)
        tolerance : float
            A unitary within this operator-norm distance (up to phase) of one that needs fewer uses is replaced by it.

        Returns
        -------
        EntanglerCircuit
            Within 2e-14 plus ``distance`` of the input in operator norm up to phase; ``distance`` includes
            ``deviation`` for each use.

        Raises
        ------
        MatrixError, NotUnitaryError
            As `gatewright.synthesis.weyl.canonical_decomposition`.

        Examples
        --------
        >>> from gatewright.linalg import distance, haar_unitary
        >>> iswap = [[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]]
        >>> u = haar_unitary(4, 5, rng=1)
        >>> circuit = classify(iswap).synthesise(u)
        >>> circuit.uses.tolist(), bool((distance(circuit.matrix(iswap), u) < 2e-14).all())
        ([3, 3, 3, 3, 3], True)
        """
        u = checked_stack(unitary)
        batch = u.shape[:-2]
        u = u.reshape(-1, 4, 4)
        if self.mirrored:
            # What an odd number of CNOTs has to make is SWAP · U. Even counts, which are exceptions, are done again.
            factors = decomposed(u[:, [0, 2, 1, 3]])
            points = mirrored_coordinates(factors.coordinates)
        else:
            factors = decomposed(u)
            points = factors.coordinates
        distances = self._distances(points)
        uses = least_uses(distances, tolerance)
        if self.mirrored and (even := uses % 2 == 0).any():
            straight = decomposed(u[even])
            factors.local[even], factors.coordinates[even] = straight.local, straight.coordinates
        gap = np.take_along_axis(distances, uses[:, None], axis=-1)[:, 0] + uses * self.deviation
        return EntanglerCircuit(
            uses=uses.reshape(batch),
            layers=layers(self._plan, factors.local, factors.coordinates, uses).reshape(*batch, 4, 2, 2, 2),
            distance=np.where(gap <= ROUNDING, 0.0, gap).reshape(batch),
        )

    def _distances(self, points: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the distance of each class to what at most 0, 1, 2 and 3 uses reach (1 use: that number exactly)."""
        distances = class_distances(points)
        if self.mirrored:
            distances[..., 1] = class_distances(mirrored_coordinates(points))[..., 1]
        return distances


def _points(target: ArrayLike) -> NDArray[np.float64]:
    """Return points of the chamber, given as such or as unitaries."""
    array = np.asarray(target)
    if array.ndim and array.shape[-1] == 3:
        return np.asarray(array, dtype=np.float64)
    return canonical_coordinates(array)


def classify(matrix: ArrayLike, *, tolerance: float = 1e-12) -> Entangler:
    """Find the class of a fixed two-qubit gate and prepare it for synthesis.

    Parameters
    ----------
    matrix : array_like, shape (4, 4)
        A unitary, with any local gates of its own and any phase.
    tolerance : float
        Operator-norm distance up to phase within which it belongs to a class.

    Returns
    -------
    Entangler

    Raises
    ------
    MatrixError, NotUnitaryError
        If it is not one 4 × 4 unitary.
    GateSetError
        If it cannot entangle, being a product of one-qubit gates, or such a product times SWAP.
    UnsupportedError
        If it is of any class but those of CNOT and iSWAP.

    Examples
    --------
    >>> entangler = classify([[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]])
    >>> entangler.mirrored, (entangler.coordinates * 4 / np.pi).round(12).tolist()
    (True, [1.0, 1.0, 0.0])
    """
    gate = checked_stack(matrix)
    if gate.ndim != 2:
        raise MatrixError("not one two-qubit matrix", required="shape (4, 4)", found=f"shape {gate.shape}")
    factors = decomposed(gate)
    point = factors.coordinates[0]
    straight, crossed = class_distances(point), class_distances(mirrored_coordinates(point))
    found = "canonical coordinates ({:.6g}, {:.6g}, {:.6g})".format(*point)
    if straight[0] <= tolerance or crossed[0] <= tolerance:
        what = "a product of one-qubit gates" if straight[0] <= tolerance else "SWAP times a product of one-qubit gates"
        raise GateSetError(
            f"this two-qubit gate cannot entangle: it is {what}",
            required="a gate that entangles some product state",
            found=found,
        )
    mirrored = bool(crossed[1] < straight[1])
    deviation = float(min(crossed[1], straight[1]))
    if deviation > tolerance:
        raise UnsupportedError(
            "this version cannot yet synthesise circuits of this entangler",
            required="the class of CNOT (π/4, 0, 0) or of iSWAP (π/4, π/4, 0)",
            found=f"{found}, {deviation:.3g} away",
        )

    left, right = factors.local[0, :2], factors.local[0, 2:]
    before, after = conjugate(right), conjugate(left)
    if mirrored:
        # CAN(π/4, 0, 0) = SWAP · (H⊗H) CAN(π/4, π/4, 0) (H⊗H) · XX up to phase.
        before, after = multiply(before, HADAMARD, PAULI_X), multiply(HADAMARD, after)
    local = gates(factors.local[0])
    return Entangler(
        matrix=gate.copy(),
        coordinates=point,
        mirrored=mirrored,
        left=local[:2],
        right=local[2:],
        deviation=deviation if deviation > ROUNDING else 0.0,
        _plan=make_plan(before, after, exchanged=mirrored),
    )
