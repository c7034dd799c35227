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
from gatewright.synthesis.facets import block_starts, common_subspaces, free_planes, rotations_to_quaternions

__all__ = ["canonical_phases", "inner_gates", "sequence_layers"]

Vector = NDArray[np.float64]

#: Phases of CAN(x, y, z) in the magic basis, over (x, y, z); ascending for points of the alcove.
_PHASES = np.array([[-1.0, -1, -1], [-1, 1, 1], [1, -1, 1], [1, 1, -1]])
_STARTS = 64
_TRIES = 3
_ROUNDS = 4
_HELPERS = 2000
_NEIGHBOURS = 4
_STEPS = 60
_PATIENT = 2000
_ACCEPTED = 3e-13
_GIVEN_UP = 2e-10
#: CAN(p) ∝ (Z ⊗ X) CAN(q) (Y ⊗ 1) for the two images p, q of a class.
_IMAGE_LEFT = np.array([[0.0, 0, 0, 1], [0, 1, 0, 0]])
_IMAGE_RIGHT = np.array([[0.0, 0, 1, 0], [1, 0, 0, 0]])


def canonical_phases(points: ArrayLike) -> Vector:
    """Return the phases of CAN(x, y, z), shape (..., 4), ascending for points of the alcove."""
    return np.asarray(np.asarray(points, dtype=np.float64) @ _PHASES.T)


@lru_cache(maxsize=64)
def _starts(k: int) -> Vector:
    quaternions = np.random.default_rng(k).standard_normal((1, _STARTS, k, 2, 4))
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
    starts = _starts(k) if k > 1 else np.array([1.0, 0, 0, 0]) * np.ones((1, 1, 1, 2, 4))
    found = np.empty((len(points), k + 1, 2, 4))
    residual = np.empty(len(points))
    row = np.ascontiguousarray(which, dtype=np.int64)
    free = np.ones((k, 6), dtype=np.bool_)
    refine(targets, row, phases, starts, free, min(_TRIES, starts.shape[1]), _STEPS, found, residual)
    # Near facets random starts fail often, but neighbours that are solved lead there.
    for _ in range(_ROUNDS if k > 1 else 0):
        solved = residual <= _ACCEPTED
        left_over = np.flatnonzero(~solved)
        if not 0 < len(left_over) < len(points):
            break
        helpers = np.flatnonzero(solved)[:_HELPERS]
        apart = np.abs(targets[left_over, None, :] - targets[None, helpers, :]).sum(axis=2)
        apart[row[left_over, None] != row[None, helpers]] += 10.0
        nearest = helpers[np.argsort(apart, axis=1)[:, :_NEIGHBOURS]]
        tried, error = np.empty((len(left_over), k + 1, 2, 4)), np.empty(len(left_over))
        refine(
            targets[left_over], row[left_over], phases, found[nearest, :k], free, nearest.shape[1], _STEPS, tried, error
        )
        better = error < residual[left_over]
        found[left_over[better]], residual[left_over[better]] = tried[better], error[better]
    for n in np.flatnonzero(~(residual <= _ACCEPTED)) if k > 1 else ():
        other, rest = _on_facets(points[n], sequences[row[n]], targets[[n]], phases[[row[n]]])
        if rest < residual[n]:
            found[n], residual[n] = other, rest
    return found[:, : k - 1], _left(found, targets, phases[row]), found[:, k - 1], residual


def _on_facets(point: Vector, sequence: Vector, target: Vector, phases: NDArray[np.complex128]) -> tuple[Vector, float]:
    """Find the gates for a point on or near facets of what is reached, where the general solver converges slowly.

    On a facet all factors keep a common subspace, spanned by some of the basis vectors for each of them. With turns of
    that kind alone its equation is met, and the others are regular. Near a facet the solution is near such a one, by
    about the square root of the distance.
    """
    k = len(sequence)
    rng = np.random.default_rng(0)
    every = np.ones((k, 6), dtype=np.bool_)
    row = np.zeros(1, dtype=np.int64)
    best, least = np.empty((1, k + 1, 2, 4)), np.inf
    found, rest = np.empty((1, k + 1, 2, 4)), np.empty(1)
    for slack, labels in common_subspaces(point, sequence):
        starts = block_starts(labels, phases[0], target[0], rng, pool=500, keep=12)[None]
        refine(target, row, phases, starts, free_planes(labels), 12, _STEPS, found, rest)
        if rest[0] < least:
            best, least = found.copy(), float(rest[0])
        if least <= _ACCEPTED:
            return best[0], least
        # From the square root of the distance, to turns of order one where all that is reached is thin.
        size = np.geomspace(0.3 * np.sqrt(max(slack, float(rest[0]), 1e-14)), 1.0, 24)[:, None, None, None]
        starts = found[:, None, :k] + size * rng.standard_normal((1, 24, k, 2, 4))
        starts /= np.linalg.norm(starts, axis=-1, keepdims=True)
        refine(target, row, phases, starts, every, 24, _STEPS, found, rest)
        if rest[0] < least:
            best, least = found.copy(), float(rest[0])
        if least <= _ACCEPTED:
            return best[0], least
    whole = np.zeros((k + 1, 4), dtype=np.int64)
    # What is left are points where nearly all circuits are elsewhere: draw many, and take the time.
    starts = block_starts(whole, phases[0], target[0], rng, pool=20000, keep=_STARTS)[None]
    for tries, steps in ((_STARTS, _STEPS), (_STARTS // 4, _PATIENT)):
        refine(target, row, phases, starts, every, tries, steps, found, rest)
        if rest[0] < least:
            best, least = found.copy(), float(rest[0])
        if least <= _ACCEPTED:
            break
    return best[0], least


def _left(found: Vector, targets: Vector, phases: NDArray[np.complex128]) -> Vector:
    """Return the quaternions of L = M R e^{−ia}, real to the residual."""
    k = phases.shape[1]
    product = phases[:, 0, :, None] * _rotations(found[:, k - 1]) * np.exp(-1j * targets)[:, None, :]
    for j in range(1, k):
        product = phases[:, j, :, None] * (_rotations(found[:, j - 1]) @ product)
    return rotations_to_quaternions(product.real)


def _rotations(pairs: Vector) -> Vector:
    """Return the rotations v → f v s̄ of pairs of quaternions, shape (N, 2, 4) → (N, 4, 4)."""
    out = np.zeros((len(pairs), 4, 4))
    index = np.arange(4)
    for m in range(4):
        for n in range(4):
            out[:, index ^ m ^ n, index] += SIGNS[m, n] * (pairs[:, 0, m] * pairs[:, 1, n])[:, None]
    return out


def sequence_layers(
    local: Vector,
    points: Vector,
    turned: NDArray[np.bool_],
    sequences: Vector,
    frames: Vector,
    which: NDArray[np.int64],
) -> tuple[Vector, Vector]:
    """Return the one-qubit gates of circuits of given sequences, as quaternions, shape (N, k + 1, 2, 4).

    With them comes a bound (N,) on their distance from the class asked for: 0 for rounding, and up to 1e-10 for points
    that lie within about as much of several facets and of a coincidence of phases without lying on them.

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
        return multiply(left, right)[:, None], np.zeros(len(points))
    between, outer, inner, residual = inner_gates(points, sequences, which)
    if not (residual <= _GIVEN_UP).all():
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
    return out, np.where(residual <= _ACCEPTED, 0.0, residual)
