"""Compiled solver for the one-qubit gates between given entanglers: damped Gauss-Newton.

In the magic basis of `gatewright.synthesis._kernels` a circuit of k entanglers is M = D_k O_{k−1} … O_1 D_1, each D_j
diagonal and each O_j a rotation, and it is of the class with phases a if M = L diag(e^{ia}) Rᵀ with rotations L, R.
What has to vanish is E = Im W of the symmetric unitary W_{bc} = e^{−i(a_b + a_c)} (RᵀMᵀMR)_{bc}, to first order linear
in turns of all O_j and R: 10 equations, solved with least turns. This form stays smooth where phases coincide, and R
need not be known beforehand. On a facet of what is reached E is quadratic in the turns; steps are doubled there.
"""

from __future__ import annotations

import math
from typing import Any

import numba
import numpy as np
from numba import types

from gatewright.synthesis._kernels import SIGNS

__all__ = ["PAIRS", "refine"]

PAIRS = np.array([[1, 0], [2, 0], [3, 0], [3, 2], [1, 3], [2, 1]], dtype=np.int64)
"""Planes of the six turns: about 1 and the unit i, then about the two others, so that quaternions come out easily."""
_DIAGONAL = np.array([0, 4, 7, 9], dtype=np.int64)
_DONE = 4e-31
"""Sum of the squares of E and of Re W − 1 that is rounding."""
_NEAR = 1e-24
"""Where that sum ceases to improve below this, rounding is reached."""


def _in(dtype: Any, dimensions: int) -> Any:
    return types.Array(dtype, dimensions, "C", readonly=True)


@numba.njit(
    types.int64(
        _in(types.float64, 2),
        _in(types.int64, 1),
        _in(types.complex128, 3),
        _in(types.float64, 5),
        _in(types.boolean, 2),
        types.int64,
        types.int64,
        types.float64[:, :, :, ::1],
        types.float64[::1],
    ),
    cache=True,
    nogil=True,
    error_model="numpy",
)
def refine(
    targets: Any,
    which: Any,
    phases: Any,
    starts: Any,
    free: Any,
    attempts: Any,
    steps: Any,
    found: Any,
    residual: Any,
) -> int:
    """Fill found (N, k + 1, 2, 4) with quaternions of O_1 … O_{k−1}, R, L, and residual (N); return the failures.

    targets (N, 4) holds the phases a, ascending; phases (P, k, 4) the diagonals of D_j, of which target n uses row
    which[n]. The first `attempts` of starts (N or 1, S, k, 2, 4), quaternions of O_j and R, are tried for `steps` steps
    each. O_j and R turn only in the planes with free (k, 6).
    """
    k = phases.shape[1]
    count = 6 * k
    old, new = np.empty((k, 2, 4)), np.empty((k, 2, 4))
    turn = np.empty((k, 4, 4))
    part = np.empty((k + 1, 4, 4), np.complex128)
    column = np.empty((count, 10))
    normal, factor = np.empty((10, 10)), np.empty((10, 10))
    error, y = np.empty(10), np.empty(10)
    twist, step = np.empty(4, np.complex128), np.empty(6)
    failures = 0
    for index in range(targets.shape[0]):
        row, own = which[index], index % starts.shape[0]
        for b in range(4):
            twist[b] = complex(math.cos(targets[index, b]), -math.sin(targets[index, b]))
        overall = np.inf
        for start in range(attempts):
            for j in range(k):
                for q in range(2):
                    for m in range(4):
                        new[j, q, m] = starts[own, start, j, q, m]
            merit, damping, stretch, refused, weight = np.inf, 1e-3, 1.0, 0, 1.0
            for _step in range(steps):
                # part[j] = B_j R e^{−ia}, what stands to the right of O_j; part[k − 1] is M R e^{−ia}.
                for j in range(k):
                    for b in range(4):
                        for c in range(4):
                            a = 0.0
                            for m in range(4):
                                n = m ^ b ^ c
                                a += SIGNS[m, n, c] * new[j, 0, m] * new[j, 1, n]
                            turn[j, b, c] = a
                for b in range(4):
                    for c in range(4):
                        part[0, b, c] = phases[row, 0, b] * turn[k - 1, b, c] * twist[c]
                for j in range(1, k):
                    for b in range(4):
                        for c in range(4):
                            z = 0j
                            for m in range(4):
                                z += turn[j - 1, b, m] * part[j - 1, m, c]
                            part[j, b, c] = phases[row, j, b] * z
                trial, r = 0.0, 0
                for b in range(4):
                    for c in range(b, 4):
                        z = 0j
                        for m in range(4):
                            z += part[k - 1, m, b] * part[k - 1, m, c]
                        if b == c:
                            z -= 1.0
                        y[r] = z.imag
                        trial += (z.real * z.real + z.imag * z.imag) * (1.0 if b == c else 2.0)
                        r += 1
                if trial < merit:
                    # A drop by 16 is what double roots give: then the step should have been twice as long.
                    stretch = 2.0 if stretch == 1.0 and 9.0 * trial < merit < 32.0 * trial and trial < 1e-2 else 1.0
                    merit, refused = trial, 0
                    damping = max(0.1 * damping, 1e-16)
                    for r in range(10):
                        error[r] = y[r]
                    for j in range(k):
                        for q in range(2):
                            for m in range(4):
                                old[j, q, m] = new[j, q, m]
                    if merit <= _DONE:
                        break
                    # Turns of R cost little, those of O_j the more the nearer the target: where phases all but coincide
                    # R has to turn far before the small errors left say anything about O_j.
                    weight = min(1.0, math.sqrt(math.sqrt(merit)))
                    for j in range(k):
                        for t in range(6):
                            scale = 0.0 if not free[j, t] else 2.0 * weight if j < k - 1 else 2.0
                            p, q, r = PAIRS[t, 0], PAIRS[t, 1], 0
                            for b in range(4):
                                for c in range(b, 4):
                                    if j < k - 1:
                                        z = np.conj(part[j, p, b]) * part[j, q, c]
                                        z -= np.conj(part[j, q, b]) * part[j, p, c]
                                        column[6 * j + t, r] = scale * z.imag
                                    else:
                                        a = 1.0 if b == p and c == q else -1.0 if b == q and c == p else 0.0
                                        sine = math.sin(targets[index, b] - targets[index, c])
                                        column[6 * j + t, r] = scale * a * sine
                                    r += 1
                    for r in range(10):
                        for m in range(r + 1):
                            a = 0.0
                            for t in range(count):
                                a += column[t, r] * column[t, m]
                            normal[r, m] = a
                    # The sum of the diagonal equations says nothing: keep it apart, on the scale of the others.
                    a = 0.25 * (normal[0, 0] + normal[4, 4] + normal[7, 7] + normal[9, 9])
                    for r in range(4):
                        for m in range(r + 1):
                            normal[_DIAGONAL[r], _DIAGONAL[m]] += a
                else:
                    refused += 1
                    if refused > 3 and merit < _NEAR:
                        break
                    damping = damping if stretch == 2.0 else 8.0 * damping + 1e-15
                    stretch = 1.0
                # Cholesky, with damping tied to how far the target still is.
                shift = 1.0 + damping * min(1.0, merit) + 1e-16
                for r in range(10):
                    for m in range(r + 1):
                        a = normal[r, m] * shift + 1e-22 if r == m else normal[r, m]
                        for t in range(m):
                            a -= factor[r, t] * factor[m, t]
                        factor[r, m] = math.sqrt(max(a, 1e-17 * normal[r, r], 1e-300)) if r == m else a / factor[m, m]
                for r in range(10):
                    a = -error[r]
                    for t in range(r):
                        a -= factor[r, t] * y[t]
                    y[r] = a / factor[r, r]
                for r in range(9, -1, -1):
                    a = y[r]
                    for t in range(r + 1, 10):
                        a -= factor[t, r] * y[t]
                    y[r] = a / factor[r, r]
                for j in range(k):
                    for t in range(6):
                        a = 0.0
                        for r in range(10):
                            a += column[6 * j + t, r] * y[r]
                        step[t] = 0.5 * stretch * a * (weight if j < k - 1 else 1.0)
                    for q in range(2):
                        # p (1 + u) and q (1 + w), normalised, for the turn v → u v − v w.
                        sign = 1.0 if q == 0 else -1.0
                        b1, b2, b3 = step[3] + sign * step[0], step[4] + sign * step[1], step[5] + sign * step[2]
                        size = 1.0 / math.sqrt(1.0 + b1 * b1 + b2 * b2 + b3 * b3)
                        w, x, v, u = old[j, q, 0], old[j, q, 1], old[j, q, 2], old[j, q, 3]
                        new[j, q, 0] = (w - x * b1 - v * b2 - u * b3) * size
                        new[j, q, 1] = (x + w * b1 + v * b3 - u * b2) * size
                        new[j, q, 2] = (v + w * b2 + u * b1 - x * b3) * size
                        new[j, q, 3] = (u + w * b3 + x * b2 - v * b1) * size
            if merit < overall:
                overall = merit
                for j in range(k):
                    for q in range(2):
                        for m in range(4):
                            found[index, j, q, m] = old[j, q, m]
            if overall < _NEAR:
                break
        residual[index] = math.sqrt(overall)
        if not overall < _NEAR:
            failures += 1
    return failures
