"""Circuits of any given sequence of entanglers for classes that it reaches: the one-qubit gates between them.

What a sequence reaches is known from `gatewright.synthesis.polytopes`; the gates are found by the compiled
Gauss-Newton solver `gatewright.synthesis._refine`. The squared distance that it minimises is the norm square of a
moment map, shifted, and such have no local minima besides the global ones (Kirwan, Cohomology of Quotients in
Symplectic and Algebraic Geometry, 1984; for products in compact groups Alekseev, Malkin & Meinrenken, J. Differential
Geom. 48, 445 (1998)), so any start serves; another is taken where one stops at a saddle.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import CannotError
from gatewright.synthesis._kernels import SIGNS
from gatewright.synthesis._layers import conjugate, multiply
from gatewright.synthesis._refine import refine

__all__ = ["canonical_phases", "inner_gates", "sequence_layers"]

Vector = NDArray[np.float64]

#: Phases of CAN(x, y, z) in the magic basis, over (x, y, z); ascending for points of the alcove.
_PHASES = np.array([[-1.0, -1, -1], [-1, 1, 1], [1, -1, 1], [1, 1, -1]])
_STARTS = 96
_STEPS = 80
_PATIENT = 600
_ACCEPTED = 3e-13
#: CAN(p) ∝ (Z ⊗ X) CAN(q) (Y ⊗ 1) for the two images p, q of a class.
_IMAGE_LEFT = np.array([[0.0, 0, 0, 1], [0, 1, 0, 0]])
_IMAGE_RIGHT = np.array([[0.0, 0, 1, 0], [1, 0, 0, 0]])


def canonical_phases(points: ArrayLike) -> Vector:
    """Return the phases of CAN(x, y, z), shape (..., 4), ascending for points of the alcove."""
    return np.asarray(np.asarray(points, dtype=np.float64) @ _PHASES.T)


@lru_cache(maxsize=64)
def _starts(k: int) -> Vector:
    quaternions = np.random.default_rng(k).standard_normal((_STARTS, k, 2, 4))
    return np.asarray(quaternions / np.linalg.norm(quaternions, axis=-1, keepdims=True))


def inner_gates(points: Vector, sequences: Vector, which: NDArray[np.int64]) -> tuple[Vector, Vector, Vector, Vector]:
    """Find the gates between canonical gates that make them a given class.

    Parameters
    ----------
    points : ndarray, shape (N, 3)
        Points of the alcove that are reached, the images in the polytopes.
    sequences : ndarray, shape (P, k, 3)
        Points of the entanglers, the first in time first; k ≥ 1.
    which : ndarray of int64, shape (N,)
        The sequence of each point.

    Returns
    -------
    between, left, right : ndarray, shapes (N, k − 1, 2, 4), (N, 2, 4), (N, 2, 4)
        Quaternions with CAN_k O_{k−1} … O_1 CAN_1 = left · CAN(point) · right⁻¹ up to phase.
    residual : ndarray, shape (N,)
        How far that is from true.
    """
    k = sequences.shape[1]
    targets = np.ascontiguousarray(canonical_phases(points))
    phases = np.ascontiguousarray(np.exp(1j * canonical_phases(sequences)))
    starts = _starts(k)
    if k == 1:
        starts = np.broadcast_to([1.0, 0, 0, 0], (1, 1, 2, 4)).copy()
    found = np.empty((len(points), k + 1, 2, 4))
    residual = np.empty(len(points))
    row = np.ascontiguousarray(which, dtype=np.int64)
    refine(targets, row, phases, starts, min(12, len(starts)), _STEPS, found, residual)
    again = np.flatnonzero(~(residual <= _ACCEPTED))
    if len(again):
        other, rest = np.empty((len(again), k + 1, 2, 4)), np.empty(len(again))
        refine(targets[again], row[again], phases, starts[::-1].copy(), len(starts), _PATIENT, other, rest)
        better = rest < residual[again]
        found[again[better]], residual[again[better]] = other[better], rest[better]
    return found[:, : k - 1], _left(found, targets, phases[row]), found[:, k - 1], residual


def _left(found: Vector, targets: Vector, phases: NDArray[np.complex128]) -> Vector:
    """Return the quaternions of L = M R e^{−ia}, real to the residual."""
    k = phases.shape[1]
    product = phases[:, 0, :, None] * _rotations(found[:, k - 1]) * np.exp(-1j * targets)[:, None, :]
    for j in range(1, k):
        product = phases[:, j, :, None] * (_rotations(found[:, j - 1]) @ product)
    return _from_rotations(product.real)


def _rotations(pairs: Vector) -> Vector:
    """Return the rotations v → f v s̄ of pairs of quaternions, shape (N, 2, 4) → (N, 4, 4)."""
    out = np.zeros((len(pairs), 4, 4))
    index = np.arange(4)
    for m in range(4):
        for n in range(4):
            out[:, index ^ m ^ n, index] += SIGNS[m, n] * (pairs[:, 0, m] * pairs[:, 1, n])[:, None]
    return out


def _from_rotations(rotations: Vector) -> Vector:
    """Return the pairs of quaternions (N, 2, 4) of rotations (N, 4, 4)."""
    outer = np.zeros((len(rotations), 4, 4))
    index = np.arange(4)
    for m in range(4):
        for n in range(4):
            outer[:, m, n] = 0.25 * (rotations[:, index ^ m ^ n, index] @ SIGNS[m, n])
    pivot = np.argmax((outer**2).sum(axis=1), axis=1)
    first = np.take_along_axis(outer, pivot[:, None, None], axis=2)[:, :, 0]
    first /= np.linalg.norm(first, axis=1, keepdims=True)
    second = np.einsum("nm,nmk->nk", first, outer)
    second /= np.linalg.norm(second, axis=1, keepdims=True)
    return np.stack([first, second], axis=1)


def sequence_layers(
    local: Vector,
    points: Vector,
    turned: NDArray[np.bool_],
    sequences: Vector,
    frames: Vector,
    which: NDArray[np.int64],
) -> Vector:
    """Return the one-qubit gates of circuits of given sequences, as quaternions, shape (N, k + 1, 2, 4).

    Parameters
    ----------
    local : ndarray, shape (N, 4, 4)
        Quaternions of the targets' local gates: left 0, 1, right 0, 1.
    points : ndarray, shape (N, 3)
        What to make: images of the targets' classes in the alcove, in the polytopes of the sequences.
    turned : ndarray of bool, shape (N,)
        Whether `points` are the other images than `local` belongs to.
    sequences, frames : ndarray, shapes (P, k, 3) and (P, k, 4, 4)
        Points and local gates of the entanglers, the first in time first.
    which : ndarray of int64, shape (N,)

    Raises
    ------
    CannotError
        No circuit was found for a class that the polytopes say is reached.
    """
    left, right = local[:, :2], local[:, 2:]
    left = np.where(turned[:, None, None], multiply(left, _IMAGE_LEFT), left)
    right = np.where(turned[:, None, None], multiply(_IMAGE_RIGHT, right), right)
    k = sequences.shape[1]
    if k == 0:
        return multiply(left, right)[:, None]
    between, outer, inner, residual = inner_gates(points, sequences, which)
    if not (residual <= 1e-12).all():
        worst = int(np.argmax(residual))
        raise CannotError(
            "no circuit was found for a class that is reached: this is a fault of gatewright, please report it",
            found=f"coordinates {points[worst].tolist()}, {k} uses, residual {residual[worst]:.3g}",
        )
    undo_left, undo_right = conjugate(frames[:, :, :2]), conjugate(frames[:, :, 2:])
    out = np.empty((len(points), k + 1, 2, 4))
    out[:, 0] = multiply(undo_right[which, 0], inner, right)
    for j in range(1, k):
        out[:, j] = multiply(undo_right[which, j], between[:, j - 1], undo_left[which, j - 1])
    out[:, k] = multiply(left, conjugate(outer), undo_left[which, k - 1])
    return out
