"""Compiled kernels of two-qubit synthesis: the KAK decomposition, and the layers of a circuit of entanglers.

A one-qubit gate is a unit quaternion (w, a, b, c) here, standing for w − i(aX + bY + cZ). In the magic basis
(Hill & Wootters, PRL 78, 5022 (1997)), taken as ε, −iXε, −iYε, −iZε with ε = (|01⟩ − |10⟩)/√2, a local gate A⊗B is
the rotation q → A q B* of the quaternions, and CAN(x,y,z) is diagonal. The diagonal is found by simultaneous Jacobi
rotations: Bunse-Gerstner, Byers & Mehrmann, SIAM J. Matrix Anal. Appl. 14, 927 (1993), doi:10.1137/0614062.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba
import numpy as np
from numba import types
from numpy.typing import NDArray

__all__ = ["SIGNS", "arrange", "decompose"]

_F = TypeVar("_F", bound=Callable[..., Any])


def _signs() -> NDArray[np.float64]:
    """Return s[m, n, j] with e_m e_j ē_n = s[m, n, j] e_{m^n^j} for the quaternion units e."""
    product = np.array([[1, 1, 1, 1], [1, -1, 1, -1], [1, -1, -1, 1], [1, 1, -1, -1]], dtype=np.float64)
    m, n, j = np.ogrid[:4, :4, :4]
    return np.asarray(product[m, j] * product[m ^ j, n] * np.where(n == 0, 1.0, -1.0))


def _magic() -> tuple[NDArray[np.int64], NDArray[np.complex128]]:
    """Return the two rows where each magic basis vector is not zero, and the coefficients of M[i, j] from there."""
    rows = np.array([[1, 2], [0, 3], [0, 3], [1, 2]], dtype=np.int64)
    entries = np.array([[1, -1], [1j, -1j], [1, 1], [-1j, -1j]])
    return rows, 0.5 * entries.conj()[:, None, :, None] * entries[None, :, None, :]


SIGNS = _signs()
_ROWS, _MAGIC = _magic()

_SWEEPS = 40
"""Most Jacobi sweeps."""
_USUAL_SWEEPS = 7
"""Enough for unitary input, which mostly takes 4; after them, a sweep that gains little meets the input's defect."""
_CONVERGED = 1e-30
"""Sum of the squares of the off-diagonal entries that is rounding."""
_NEAR = 1e-18
"""What that sum is at most for input that is let through."""
_WALL = 1e-15
"""So near to π/4, x counts as π/4, where z ≥ 0."""
_ACCEPTED = 1e-9
"""Largest departure from unitarity that is let through."""


def _compiled(*arguments: Any) -> Callable[[_F], _F]:
    """Compile for one signature, cached on disk, releasing the lock."""
    jit = numba.njit(types.int64(*arguments), cache=True, nogil=True, error_model="numpy")
    return cast(Callable[[_F], _F], jit)


def _input(dtype: Any, dimensions: int) -> Any:
    return types.Array(dtype, dimensions, "C", readonly=True)


@_compiled(_input(types.complex128, 3), types.float64[::1], types.float64[:, :, ::1], types.float64[:, ::1])
def decompose(unitaries: Any, phase: Any, local: Any, coordinates: Any) -> int:
    """Fill phase (N), local (N, 4, 4) and coordinates (N, 3) with the KAK decomposition of unitaries (N, 4, 4).

    The four quaternions of each are those of left qubits 0, 1 and right qubits 0, 1. Returns -1, or the index of the
    first matrix that is not finite or not unitary.
    """
    real, imag, frame, product = np.empty((4, 4)), np.empty((4, 4)), np.empty((4, 4)), np.empty((4, 4))
    # Row p holds row p of Re S, row p of Im S, and the eigenvector p as far as it is known.
    work = np.empty((4, 12))
    angle, column = np.empty(4), np.empty(4, np.int64)
    for index in range(unitaries.shape[0]):
        # M = B† U B for the magic basis B; only sums, no rounding of 1/√2.
        for i in range(4):
            for j in range(4):
                entry = 0j
                for k in range(2):
                    for m in range(2):
                        entry += _MAGIC[i, j, k, m] * unitaries[index, _ROWS[i, k], _ROWS[j, m]]
                real[i, j], imag[i, j] = entry.real, entry.imag

        # S = Mᵀ M, whose commuting real and imaginary parts share their eigenvectors.
        for p in range(4):
            for q in range(4):
                a, b = 0.0, 0.0
                for k in range(4):
                    a += real[k, p] * real[k, q] - imag[k, p] * imag[k, q]
                    b += real[k, p] * imag[k, q] + imag[k, p] * real[k, q]
                work[p, q] = a
                work[p, 4 + q] = b
                work[p, 8 + q] = 1.0 if q == p else 0.0
        previous = np.inf
        for sweep in range(_SWEEPS):
            off = 0.0
            for p in range(3):
                for q in range(p + 1, 4):
                    a, b = work[p, q], work[p, 4 + q]
                    off += a * a + b * b
            if off <= _CONVERGED or (sweep >= _USUAL_SWEEPS and off <= _NEAR and off > 0.5 * previous):
                break
            previous = off
            for p in range(3):
                for q in range(p + 1, 4):
                    # The rotation by θ, |θ| ≤ π/4, that minimises both off-diagonal entries together. All six angles
                    # are 0 only on diagonal matrices: with o = 2 S_pq and d = S_pp − S_qq as plane vectors, else
                    # d ⊥ o and |d| ≥ |o|, and commutation would force four equidistant S_pp.
                    o1, o2 = 2.0 * work[p, q], 2.0 * work[p, 4 + q]
                    d1, d2 = work[p, p] - work[q, q], work[p, 4 + p] - work[q, 4 + q]
                    squares = o1 * o1 + o2 * o2
                    cos4 = d1 * d1 + d2 * d2 - squares
                    sin4 = 2.0 * (d1 * o1 + d2 * o2)
                    size = math.sqrt(cos4 * cos4 + sin4 * sin4)
                    if squares <= 1e-40 or size == 0.0:
                        continue
                    large = math.sqrt(0.5 + 0.5 * abs(cos4) / size)
                    small = 0.5 * sin4 / (size * large)
                    if cos4 < 0.0:
                        large, small = abs(small), math.copysign(large, small)
                    c = math.sqrt(0.5 + 0.5 * large)
                    s = 0.5 * small / c
                    for k in range(12):
                        a, b = work[p, k], work[q, k]
                        work[p, k] = c * a + s * b
                        work[q, k] = c * b - s * a
                    for k in range(8):
                        i, j = k & 3, k & 4
                        a, b = work[i, j + p], work[i, j + q]
                        work[i, j + p] = c * a + s * b
                        work[i, j + q] = c * b - s * a

        for p in range(4):
            for k in range(4):
                frame[k, p] = work[p, 8 + k]
        defect, leak = 0.0, 0.0
        # Stage 0 finds the half-angles of the eigenvalues, and whether M · frame · e^{−i·angle}, which is real, is a
        # proper rotation; stage 1 the right local gates, from the frame in its final order; stage 2 the left ones.
        for stage in range(3):
            if stage != 1:
                for p in range(4):
                    cos2, sin2 = 0.0, 0.0
                    for i in range(4):
                        a, b = 0.0, 0.0
                        for k in range(4):
                            a += real[i, k] * frame[k, p]
                            b += imag[i, k] * frame[k, p]
                        work[i, p], work[i, 4 + p] = a, b
                        cos2 += (a - b) * (a + b)
                        sin2 += 2.0 * a * b
                    if stage == 0:
                        angle[p] = 0.5 * math.atan2(sin2, cos2)
                    c, s = math.cos(angle[p]), math.sin(angle[p])
                    for i in range(4):
                        a, b = work[i, p], work[i, 4 + p]
                        frame[i, p] = c * a + s * b
                        leak += (c * b - s * a) * (c * b - s * a)

            # A rotation is q → f q s* for unit quaternions f, s; ¼ of signed sums of its entries gives f sᵀ.
            first = 2 if stage == 1 else 0
            norm, best, pivot = 0.0, -1.0, 0
            for n in range(4):
                size = 0.0
                for m in range(4):
                    a = 0.0
                    for j in range(4):
                        a += 0.25 * SIGNS[m, n, j] * frame[m ^ n ^ j, j]
                    product[m, n] = a
                    size += a * a
                norm += size
                if size > best:
                    best, pivot = size, n
            best = math.sqrt(best)
            for m in range(4):
                local[index, first, m] = product[m, pivot] / best
            size = 0.0
            for n in range(4):
                a = 0.0
                for m in range(4):
                    a += product[m, n] * local[index, first, m]
                local[index, first + 1, n] = a
                size += a * a

            if stage == 0:
                # An improper rotation gives ½ of an orthogonal matrix instead of f sᵀ, hence ¼ here instead of 1.
                # Sorting the half-angles gives x ≥ y ≥ |z|. They are known modulo π; taking π off the last makes it
                # the first. One parity of the number of π's makes the rotation proper, and of the two choices left
                # one has x ≤ π/4. `odd` is the parity of the permutation.
                odd = False
                for p in range(4):
                    a, k = angle[p], p
                    while k > 0 and angle[k - 1] > a:
                        angle[k], column[k] = angle[k - 1], column[k - 1]
                        k -= 1
                        odd = not odd
                    angle[k], column[k] = a, p
                for turn in range(3):
                    if turn == 0 and size >= 0.5:
                        continue
                    if turn == 1:
                        x = 0.25 * (angle[3] + angle[2] - angle[1] - angle[0])
                        z = 0.25 * (angle[2] + angle[1] - angle[3] - angle[0])
                        if x < math.pi / 4 - _WALL or (x <= math.pi / 4 + _WALL and z >= 0.0):
                            break
                    a, p = angle[3] - math.pi, column[3]
                    for k in range(3, 0, -1):
                        angle[k], column[k] = angle[k - 1], column[k - 1]
                    angle[0], column[0] = a, p
                    odd = not odd
                for p in range(4):
                    a = -1.0 if odd and p == 0 else 1.0
                    for k in range(4):
                        frame[k, p] = a * work[column[p], 8 + k]
            else:
                defect += abs(norm - 1.0) + abs(size - 1.0)
                a = math.sqrt(size)
                for n in range(4):
                    local[index, first + 1, n] /= a
            if stage == 1:
                # Rebuilt from its quaternions the frame is orthogonal to rounding.
                for i in range(4):
                    for j in range(4):
                        a = 0.0
                        for m in range(4):
                            n = m ^ i ^ j
                            a += SIGNS[m, n, j] * local[index, 2, m] * local[index, 3, n]
                        frame[i, j] = a
                for m in range(1, 4):
                    local[index, 2, m] *= -1.0
                    local[index, 3, m] *= -1.0
        if not (defect <= _ACCEPTED and leak <= _ACCEPTED * _ACCEPTED):
            return index

        # Differences of sorted angles keep x ≥ y ≥ |z| true in floating point too.
        a, b = max(angle[3] - angle[2], 0.0), max(angle[1] - angle[0], 0.0)
        y = min(0.25 * (a + b), math.pi / 4)
        x = min(0.25 * (a + b) + 0.5 * max(angle[2] - angle[1], 0.0), math.pi / 4)
        coordinates[index, 0] = x
        coordinates[index, 1] = y
        coordinates[index, 2] = min(max(0.25 * (b - a), -y if x < math.pi / 4 - 0.5 * _WALL else 0.0), y)
        a = 0.25 * (angle[0] + angle[1] + angle[2] + angle[3])
        phase[index] = a + 2.0 * math.pi if a <= -math.pi else a
    return -1


@_compiled(
    _input(types.float64, 3),
    _input(types.float64, 2),
    _input(types.int64, 1),
    _input(types.float64, 4),
    _input(types.float64, 4),
    _input(types.float64, 4),
    types.boolean,
    types.complex128[:, :, :, :, ::1],
)
def arrange(
    local: Any, coordinates: Any, uses: Any, head: Any, tail: Any, angles: Any, exchanged: Any, layers: Any
) -> int:
    """Fill layers (N, 4, 2, 2, 2) with the one-qubit gates of a circuit of uses (N) entanglers, identity beyond them.

    Gate [j, q] of a circuit of k uses is head[k, j, q] · exp(iθZ) · tail[k, j, q], θ = angles[k, j, q] · (x, y, z, 1),
    with the left local gate (of the other qubit if `exchanged` and k is odd) in front where j = k, and the right one
    behind where j = 0. Returns the number of circuits.
    """
    total, factor, result = np.empty(4), np.empty(4), np.empty(4)
    for index in range(uses.shape[0]):
        k = uses[index]
        for j in range(4):
            for q in range(2):
                total[0], total[1], total[2], total[3] = 1.0, 0.0, 0.0, 0.0
                if j <= k:
                    theta = angles[k, j, q, 3]
                    for axis in range(3):
                        theta += angles[k, j, q, axis] * coordinates[index, axis]
                    for part in range(5):
                        if (part == 0 and j < k) or (part == 4 and j > 0) or (part == 2 and theta == 0.0):
                            continue
                        for m in range(4):
                            if part == 0:
                                factor[m] = local[index, 1 - q if exchanged and k & 1 else q, m]
                            elif part == 1:
                                factor[m] = head[k, j, q, m]
                            elif part == 2:
                                factor[m] = math.cos(theta) if m == 0 else -math.sin(theta) if m == 3 else 0.0
                            elif part == 3:
                                factor[m] = tail[k, j, q, m]
                            else:
                                factor[m] = local[index, 2 + q, m]
                            result[m] = 0.0
                        for m in range(4):
                            for n in range(4):
                                result[m ^ n] += SIGNS[m, 0, n] * total[m] * factor[n]
                        for m in range(4):
                            total[m] = result[m]
                layers[index, j, q, 0, 0] = complex(total[0], -total[3])
                layers[index, j, q, 0, 1] = complex(-total[2], -total[1])
                layers[index, j, q, 1, 0] = complex(total[2], -total[1])
                layers[index, j, q, 1, 1] = complex(total[0], total[3])
    return int(uses.shape[0])
