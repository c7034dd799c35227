"""Checked entry to the KAK kernel, and its result in the kernel's own form: quaternions for the local gates."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import MatrixError, NotUnitaryError
from gatewright.linalg import nearest_unitary, unitarity_defect
from gatewright.synthesis._kernels import decompose

__all__ = ["Factors", "checked_stack", "decomposed", "gates"]


@dataclass(frozen=True, slots=True, eq=False)
class Factors:
    """The kernel's own form of N decompositions: local (N, 4, 4) are quaternions of left 0, 1 and right 0, 1."""

    phase: NDArray[np.float64]
    local: NDArray[np.float64]
    coordinates: NDArray[np.float64]


def checked_stack(unitary: ArrayLike) -> NDArray[np.complex128]:
    """Return the stack as complex128; raise MatrixError unless it is of finite 4 × 4 matrices."""
    required = "numbers in shape (..., 4, 4)"
    try:
        u = np.asarray(unitary, dtype=np.complex128)
    except (TypeError, ValueError):
        raise MatrixError("not a stack of two-qubit matrices", required=required) from None
    if u.shape[-2:] != (4, 4):
        raise MatrixError("not a stack of two-qubit matrices", required=required, found=f"shape {u.shape}")
    finite = np.isfinite(u)
    if not finite.all():
        *batch, row, column = (int(i) for i in np.argwhere(~finite)[0])
        raise MatrixError(
            "the matrix has an entry that is not finite",
            required="finite numbers",
            found=f"{u[(*batch, row, column)]} in row {row}, column {column} (counted from 0)",
            where=f"matrix {batch[0] if len(batch) == 1 else tuple(batch)} of the stack" if batch else "",
        )
    return u


def decomposed(unitary: NDArray[np.complex128]) -> Factors:
    """Decompose a checked stack, its leading axes flattened; raise NotUnitaryError beyond 1e-9."""
    u = np.require(unitary.reshape(-1, 4, 4), requirements=["C", "A"])
    size = u.shape[0]
    factors = Factors(np.empty(size), np.empty((size, 4, 4)), np.empty((size, 3)))
    failed = decompose(u, factors.phase, factors.local, factors.coordinates)
    if failed >= 0:
        matrix = u[failed]
        defect = distance = np.inf
        if np.abs(matrix).max() < 1e6:
            # Larger entries are far from unitary, and their products might overflow.
            defect = float(unitarity_defect(matrix))
            distance = float(np.linalg.norm(matrix - nearest_unitary(matrix), ord=2))
        where = f"matrix {failed} of the stack" if size > 1 else ""
        raise NotUnitaryError(defect=defect, distance=distance, tolerance=1e-9, where=where)
    return factors


def gates(quaternion: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Return w − i(aX + bY + cZ), shape (..., 2, 2), for unit quaternions (w, a, b, c), shape (..., 4)."""
    matrix = np.empty((*quaternion.shape[:-1], 2, 2), dtype=np.complex128)
    w, a, b, c = np.moveaxis(quaternion, -1, 0)
    matrix[..., 0, 0], matrix[..., 1, 1] = w - 1j * c, w + 1j * c
    matrix[..., 0, 1], matrix[..., 1, 0] = -b - 1j * a, b - 1j * a
    return matrix
