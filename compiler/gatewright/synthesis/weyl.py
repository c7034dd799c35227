"""Canonical (KAK) decomposition of two-qubit unitaries, their place in the Weyl chamber, and local invariants.

Khaneja & Glaser, Chem. Phys. 267, 11 (2001); chamber: Zhang, Vala, Sastry & Whaley, PRA 67, 042313 (2003);
invariants: Makhlin, Quant. Inf. Proc. 1, 243 (2002). Conventions: CAN(x,y,z) = exp(i(x XX + y YY + z ZZ)), chamber
π/4 ≥ x ≥ y ≥ |z|, and z ≥ 0 where x = π/4.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.linalg import kron
from gatewright.synthesis._kak import checked_stack, decomposed, gates

__all__ = [
    "CanonicalDecomposition",
    "canonical_coordinates",
    "canonical_decomposition",
    "canonical_matrix",
    "entangling_power",
    "is_perfect_entangler",
    "local_invariants",
    "mirrored_coordinates",
]

_MAGIC = np.array([[1, 1j, 0, 0], [0, 0, 1j, 1], [0, 0, 1j, -1], [1, -1j, 0, 0]]) / np.sqrt(2)


@dataclass(frozen=True, slots=True, eq=False)
class CanonicalDecomposition:
    """U = exp(i·phase) · (left₀ ⊗ left₁) · CAN(coordinates) · (right₀ ⊗ right₁), for a stack of unitaries.

    Attributes
    ----------
    phase : ndarray, shape (...)
        Radians, in (−π, π].
    left, right : ndarray, shape (..., 2, 2, 2)
        Local gates in SU(2); axis -3 is the qubit.
    coordinates : ndarray, shape (..., 3)
        The point (x, y, z) of the chamber, radians.
    """

    phase: NDArray[np.float64]
    left: NDArray[np.complex128]
    coordinates: NDArray[np.float64]
    right: NDArray[np.complex128]

    def matrix(self) -> NDArray[np.complex128]:
        """Multiply the factors out, shape (..., 4, 4)."""
        left = kron(self.left[..., 0, :, :], self.left[..., 1, :, :])
        right = kron(self.right[..., 0, :, :], self.right[..., 1, :, :])
        phase = np.exp(1j * self.phase)[..., None, None]
        return np.asarray(phase * (left @ canonical_matrix(self.coordinates) @ right))


def canonical_matrix(coordinates: ArrayLike) -> NDArray[np.complex128]:
    """Return CAN(x, y, z) = exp(i(x XX + y YY + z ZZ)) in closed form.

    Parameters
    ----------
    coordinates : array_like, shape (..., 3)
        Radians; any real numbers, in the chamber or not.

    Returns
    -------
    ndarray, shape (..., 4, 4)

    Examples
    --------
    >>> swap = np.exp(-0.25j * np.pi) * canonical_matrix([np.pi / 4, np.pi / 4, np.pi / 4])
    >>> np.round(swap.real).astype(int).tolist()
    [[1, 0, 0, 0], [0, 0, 1, 0], [0, 1, 0, 0], [0, 0, 0, 1]]
    """
    x, y, z = np.moveaxis(np.asarray(coordinates, dtype=np.float64), -1, 0)
    outer, inner = np.exp(1j * z), np.exp(-1j * z)
    matrix = np.zeros((*x.shape, 4, 4), dtype=np.complex128)
    matrix[..., 0, 0] = matrix[..., 3, 3] = outer * np.cos(x - y)
    matrix[..., 0, 3] = matrix[..., 3, 0] = 1j * outer * np.sin(x - y)
    matrix[..., 1, 1] = matrix[..., 2, 2] = inner * np.cos(x + y)
    matrix[..., 1, 2] = matrix[..., 2, 1] = 1j * inner * np.sin(x + y)
    return matrix


def canonical_decomposition(unitary: ArrayLike) -> CanonicalDecomposition:
    """Decompose each unitary into local gates around a canonical gate of the chamber.

    The symmetric unitary MᵀM in the magic basis is diagonalised by Jacobi rotations that act on its real and
    imaginary parts together (Bunse-Gerstner, Byers & Mehrmann 1993), which stays accurate on every degenerate class.

    Parameters
    ----------
    unitary : array_like, shape (..., 4, 4)
        Unitary to rounding; qubit 0 is the more significant one.

    Returns
    -------
    CanonicalDecomposition
        Its product is within 1e-14 of the input in operator norm (plus the input's own departure from unitarity).

    Raises
    ------
    MatrixError
        If a matrix is not 4 × 4 or has an entry that is not finite.
    NotUnitaryError
        If a matrix is not unitary within 1e-9.

    Notes
    -----
    A compiled loop over the stack, about as fast as a batched ``numpy.linalg.eigh``.

    Examples
    --------
    >>> cz = np.diag([1, 1, 1, -1])
    >>> parts = canonical_decomposition(cz)
    >>> np.allclose(parts.coordinates, [np.pi / 4, 0, 0]), np.allclose(parts.matrix(), cz)
    (True, True)
    """
    u = checked_stack(unitary)
    factors = decomposed(u)
    batch = u.shape[:-2]
    local = gates(factors.local).reshape(*batch, 4, 2, 2)
    return CanonicalDecomposition(
        phase=factors.phase.reshape(batch),
        left=local[..., :2, :, :],
        coordinates=factors.coordinates.reshape(*batch, 3),
        right=local[..., 2:, :, :],
    )


def canonical_coordinates(unitary: ArrayLike) -> NDArray[np.float64]:
    """Return the point (x, y, z) of the chamber for each unitary, radians.

    Parameters
    ----------
    unitary : array_like, shape (..., 4, 4)

    Returns
    -------
    ndarray, shape (..., 3)
        π/4 ≥ x ≥ y ≥ |z|, and z ≥ 0 where x is π/4 within rounding.

    Raises
    ------
    MatrixError, NotUnitaryError
        As `canonical_decomposition`.

    Examples
    --------
    >>> canonical_coordinates(np.eye(4)).tolist()
    [0.0, 0.0, 0.0]
    """
    u = checked_stack(unitary)
    return decomposed(u).coordinates.reshape(*u.shape[:-2], 3)


def mirrored_coordinates(coordinates: ArrayLike) -> NDArray[np.float64]:
    """Return the chamber point of SWAP · CAN(x, y, z), the mirror gate.

    Parameters
    ----------
    coordinates : array_like, shape (..., 3)
        Points of the chamber.

    Returns
    -------
    ndarray, shape (..., 3)

    Examples
    --------
    >>> (mirrored_coordinates([np.pi / 4, 0, 0]) * 4 / np.pi).tolist()
    [1.0, 1.0, 0.0]
    """
    x, y, z = np.moveaxis(np.asarray(coordinates, dtype=np.float64), -1, 0)
    quarter = np.pi / 4
    last = np.where(z < 0, quarter - x, x - quarter)
    # On the chamber's wall x = π/4 the sign of z is free, and is chosen not negative.
    last = np.where(np.abs(z) <= 1e-15, np.abs(last), last)
    return np.stack([quarter - np.abs(z), quarter - y, last], axis=-1)


def local_invariants(unitary: ArrayLike) -> tuple[NDArray[np.complex128], NDArray[np.float64]]:
    """Return Makhlin's invariants of each unitary, equal exactly where two gates differ by local gates only.

    G1 = tr²(m) / (16 det U) and G2 = (tr²(m) − tr(m²)) / (4 det U) for m = MᵀM in the magic basis.

    Parameters
    ----------
    unitary : array_like, shape (..., 4, 4)

    Returns
    -------
    g1 : ndarray of complex, shape (...)
    g2 : ndarray of float, shape (...)

    Raises
    ------
    MatrixError
        As `canonical_decomposition`.

    References
    ----------
    Makhlin, Quant. Inf. Proc. 1, 243 (2002).

    Examples
    --------
    >>> g1, g2 = local_invariants(np.diag([1, 1, 1, -1]))
    >>> abs(g1) < 1e-15, round(float(g2), 12)
    (np.True_, 1.0)
    """
    u = checked_stack(unitary)
    magic = _MAGIC.conj().T @ u @ _MAGIC
    m = np.swapaxes(magic, -1, -2) @ magic
    trace = np.trace(m, axis1=-2, axis2=-1)
    square = np.sum(m * m, axis=(-2, -1))
    det = np.linalg.det(u)
    return np.asarray(trace**2 / (16 * det)), np.asarray(((trace**2 - square) / (4 * det)).real)


def entangling_power(unitary: ArrayLike) -> NDArray[np.float64]:
    """Return the mean linear entropy that each unitary gives to random product states, (2/9)(1 − |G1|).

    Parameters
    ----------
    unitary : array_like, shape (..., 4, 4)

    Returns
    -------
    ndarray, shape (...)
        Between 0 (local gates, SWAP) and 2/9.

    References
    ----------
    Zanardi, Zalka & Faoro, PRA 62, 030301 (2000).

    Examples
    --------
    >>> round(9 * float(entangling_power(np.diag([1, 1, 1, -1]))), 12)
    2.0
    """
    return np.asarray((2 / 9) * (1 - np.abs(local_invariants(unitary)[0])))


def is_perfect_entangler(coordinates: ArrayLike, *, tolerance: float = 1e-12) -> NDArray[np.bool_]:
    """Tell whether gates of each class turn some product state into a maximally entangled one.

    Parameters
    ----------
    coordinates : array_like, shape (..., 3)
        Points of the chamber.
    tolerance : float
        Radians by which a point may lie outside; gates of practice lie on the very boundary.

    Returns
    -------
    ndarray of bool, shape (...)
        x + y ≥ π/4 and y + |z| ≤ π/4.

    References
    ----------
    Zhang, Vala, Sastry & Whaley, PRA 67, 042313 (2003).

    Examples
    --------
    >>> is_perfect_entangler([[np.pi / 4, 0, 0], [np.pi / 4, np.pi / 4, np.pi / 4]]).tolist()
    [True, False]
    """
    x, y, z = np.moveaxis(np.asarray(coordinates, dtype=np.float64), -1, 0)
    return np.asarray((x + y >= np.pi / 4 - tolerance) & (y + np.abs(z) <= np.pi / 4 + tolerance))
