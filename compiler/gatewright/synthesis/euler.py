"""One-qubit unitaries as three rotations about two orthogonal axes, and in the virtual-Z form; batched.

Euler angles: Nielsen and Chuang, *Quantum Computation and Quantum Information*, theorem 4.1. They are read from
quaternion components with two-argument arctangents, so that nothing is lost at the poles. Virtual-Z form: McKay,
Wood, Sheldon, Chow and Gambetta, PRA 96, 022330 (2017).
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import InputError, MatrixError

__all__ = [
    "ROUNDING",
    "EulerAngles",
    "VirtualZ",
    "axis_vector",
    "euler_angles",
    "fewest_turns",
    "quaternion",
    "rotation",
    "settle",
    "virtual_z",
]

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]
Mask = NDArray[np.bool_]

#: What is taken as rounding: 8 times the machine epsilon.
ROUNDING = 8 * float(np.finfo(np.float64).eps)

# Angles within rounding of a multiple of pi/48 (so of pi/16 and of pi/12) become the exactly rounded multiple.
_GRID = 48
_MULTIPLES = np.array([f.numerator * np.pi / f.denominator for f in (Fraction(k, _GRID) for k in range(-48, 49))])
_BLOCK = 16384
_NAMED_AXES = {"x": (1.0, 0.0, 0.0), "y": (0.0, 1.0, 0.0), "z": (0.0, 0.0, 1.0)}


@dataclass(frozen=True, eq=False, slots=True)
class EulerAngles:
    """The result of `euler_angles`: ``U = exp(1j*phase) R_outer(α) R_inner(β) R_outer(γ)``.

    Attributes
    ----------
    angles : ndarray, shape (..., 3)
        α and γ in (-π, π], β in [0, π]; radians.
    phase : ndarray, shape (...)
        In (-π, π].
    """

    angles: Real
    phase: Real


@dataclass(frozen=True, eq=False, slots=True)
class VirtualZ:
    """The result of `virtual_z`: rotations about z around at most two √X pulses.

    Attributes
    ----------
    angles : ndarray, shape (..., 3)
        (a, b, c), each in (-π, π]; radians.
    pulses : ndarray of int8, shape (...)
        0: ``Rz(c)``; 1: ``Rz(a) √X Rz(c)``; 2: ``Rz(a) √X Rz(b) √X Rz(c)``. Angles not used are 0.
    phase : ndarray, shape (...)
        In (-π, π]; the product times ``exp(1j*phase)`` is the unitary, with √X as ``GATES["sx"]`` has it.
    """

    angles: Real
    pulses: NDArray[np.int8]
    phase: Real


def axis_vector(axis: str | ArrayLike) -> Real:
    """Return the unit vector of an axis given as 'x', 'y', 'z' or as three numbers.

    Raises
    ------
    InputError

    Examples
    --------
    >>> axis_vector([0, 3, 4]).tolist()
    [0.0, 0.6, 0.8]
    """
    required = "'x', 'y', 'z' or three finite real numbers, not all zero"
    if isinstance(axis, str):
        if axis not in _NAMED_AXES:
            raise InputError("not a rotation axis", required=required, found=repr(axis[:20]))
        return np.array(_NAMED_AXES[axis])
    try:
        vector = np.asarray(axis, dtype=np.float64)
    except (TypeError, ValueError):
        raise InputError("not a rotation axis", required=required, found=type(axis).__name__) from None
    if vector.shape != (3,) or not np.isfinite(vector).all() or not vector.any():
        found = str(vector.tolist()) if vector.size <= 3 else f"shape {vector.shape}"
        raise InputError("not a rotation axis", required=required, found=found)
    vector = vector / np.abs(vector).max()
    return np.asarray(vector / np.linalg.norm(vector))


def rotation(axis: str | ArrayLike, angle: ArrayLike) -> Complex:
    """Return ``exp(-1j*angle/2 * (n·σ))`` for the unit vector n of `axis`.

    Parameters
    ----------
    axis : {'x', 'y', 'z'} or array_like, shape (3,)
    angle : array_like, shape (...)
        Radians.

    Returns
    -------
    ndarray, shape (..., 2, 2)

    Raises
    ------
    InputError
        If `axis` is not an axis.

    Examples
    --------
    >>> rotation("y", np.pi).real.round(3).tolist()
    [[0.0, -1.0], [1.0, 0.0]]
    """
    half = np.asarray(angle, dtype=np.float64) / 2
    cosine, sine = np.cos(half), np.sin(half)
    x, y, z = axis_vector(axis)
    out = np.empty((*half.shape, 2, 2), dtype=np.complex128)
    out[..., 0, 0] = cosine - 1j * z * sine
    out[..., 0, 1] = (-1j * x - y) * sine
    out[..., 1, 0] = (-1j * x + y) * sine
    out[..., 1, 1] = cosine + 1j * z * sine
    return out


def quaternion(unitary: ArrayLike) -> tuple[Real, Real]:
    """Return q and φ such that ``U = exp(1j*φ) (q0 - 1j (q1 X + q2 Y + q3 Z))``, q a unit vector up to rounding.

    Parameters
    ----------
    unitary : array_like, shape (..., 2, 2)

    Returns
    -------
    components : ndarray, shape (4, ...)
        Component first. The sign of q is arbitrary; it goes with φ.
    phase : ndarray, shape (...)
        In (-π/2, π/2].

    Raises
    ------
    MatrixError
        If a matrix is not 2 × 2, or not unitary to five digits.
    """
    q, root = _components(np.asarray(unitary, dtype=np.complex128))
    return q, np.angle(root)


def _components(u: Complex) -> tuple[Real, Complex]:
    if u.shape[-2:] != (2, 2):
        raise MatrixError("not a one-qubit matrix", required="shape (..., 2, 2)", found=f"shape {u.shape}")
    a, b, c, d = u[..., 0, 0], u[..., 0, 1], u[..., 1, 0], u[..., 1, 1]
    with np.errstate(over="ignore", invalid="ignore"):
        determinant = a * d - b * c
        # A 2 × 2 matrix is unitary if and only if its squared norm is 2 and its determinant has modulus 1.
        square = np.square(u.real).sum(axis=(-2, -1)) + np.square(u.imag).sum(axis=(-2, -1))
        good = (np.abs(square - 2) <= 1e-5) & (np.abs(np.abs(determinant) - 1) <= 1e-5)
    if not good.all():
        where = np.unravel_index(int(np.argmin(good)), good.shape)
        place = f" at index {tuple(int(i) for i in where)}" if good.ndim else ""
        raise MatrixError("not a unitary matrix", required="U†U = 1 to five digits", found=f"otherwise{place}")
    root = np.sqrt(determinant)
    half = 0.5 * np.conj(root)
    q = np.empty((4, *u.shape[:-2]), dtype=np.float64)
    q[0] = ((a + d) * half).real
    q[1] = -((b + c) * half).imag
    q[2] = ((c - b) * half).real
    q[3] = ((d - a) * half).imag
    return q, root


def settle(angle: Real, tolerance: float = ROUNDING) -> tuple[Real, Mask]:
    """Bring angles into (-π, π] and to the exact multiple of π/48 that is within rounding.

    Parameters
    ----------
    angle : ndarray
        Radians.
    tolerance : float
        Multiples of π/2 attract from twice this far (a distance of `tolerance` in operator norm).

    Returns
    -------
    settled : ndarray
    odd : ndarray of bool
        Whether an odd number of full turns was taken off: the rotation has changed sign.
    """
    turns = np.rint(angle * (0.5 / np.pi))
    settled = angle - (2 * np.pi) * turns
    attraction = np.full(2 * _GRID + 1, ROUNDING)
    attraction[:: _GRID // 2] = max(ROUNDING, 2 * tolerance)
    index = np.rint(settled * (_GRID / np.pi)).astype(np.intp) + _GRID
    near = _MULTIPLES.take(index, mode="clip")
    settled = np.where(np.abs(settled - near) <= attraction.take(index, mode="clip"), near, settled)
    under = settled <= -np.pi
    return np.where(under, np.pi, settled), (np.remainder(turns, 2) != 0) ^ under


def euler_angles(
    unitary: ArrayLike, *, outer: str | ArrayLike, inner: str | ArrayLike, tolerance: float = ROUNDING
) -> EulerAngles:
    """Decompose ``U = exp(1j*phase) R_outer(α) R_inner(β) R_outer(γ)``.

    The angles are exact to a few units of rounding everywhere. At the poles, where only one combination of α and γ
    is defined, α is 0: β = 0 where U is a rotation about `outer` within the tolerance, and β = π where it turns
    `outer` over. β within the tolerance of π/2 is π/2. Angles within rounding of a multiple of π/48 are that multiple.

    Parameters
    ----------
    unitary : array_like, shape (..., 2, 2)
    outer, inner : {'x', 'y', 'z'} or array_like, shape (3,)
        Two orthogonal axes.
    tolerance : float
        The largest distance, in operator norm, that each of the three angles may be moved by to 0, π/2 or π.

    Returns
    -------
    EulerAngles

    Raises
    ------
    InputError
        If the axes are not orthogonal to 1e-12.
    MatrixError
        If a matrix is not 2 × 2 or far from unitary.

    Notes
    -----
    With ``σ = (α + γ)/2`` and ``δ = (α - γ)/2`` the quaternion of the product is, along (1, outer, inner,
    outer × inner), ``(cos β/2 cos σ, cos β/2 sin σ, sin β/2 cos δ, sin β/2 sin δ)``.

    References
    ----------
    Nielsen and Chuang, *Quantum Computation and Quantum Information*, theorem 4.1.

    Examples
    --------
    >>> hadamard = np.array([[1, 1], [1, -1]]) / np.sqrt(2)
    >>> (euler_angles(hadamard, outer="z", inner="y").angles / np.pi).tolist()
    [0.0, 0.5, 1.0]
    """
    o, m = axis_vector(outer), axis_vector(inner)
    if abs(o @ m) > 1e-12:
        raise InputError(
            "the two axes are not orthogonal", required="a right angle", found=f"cosine {o @ m:.3g} between them"
        )
    frame = np.array([o, m, np.cross(o, m)])
    u = np.asarray(unitary, dtype=np.complex128)
    batch = u.shape[:-2]
    if u.shape[-2:] == (2, 2):
        u = u.reshape(-1, 2, 2)
    angles = np.empty((len(u), 3))
    phase = np.empty(len(u))
    # In blocks, so that the dozen temporaries stay in the cache.
    for start in range(0, len(u), _BLOCK):
        rows = slice(start, start + _BLOCK)
        _euler_block(u[rows], frame, tolerance, angles[rows], phase[rows])
    return EulerAngles(angles.reshape(*batch, 3), phase.reshape(batch))


def _euler_block(u: Complex, frame: Real, tolerance: float, angles: Real, phase: Real) -> None:
    q, root = _components(u)
    q0 = q[0]
    qo, qm, ql = frame @ q[1:]
    cosine, sine = np.sqrt(q0 * q0 + qo * qo), np.sqrt(qm * qm + ql * ql)
    # σ and δ modulo π, each within ±π/2 where the grid of floats is finest; the signs carry the rest.
    negative_c, negative_s = np.signbit(q0), np.signbit(qm)
    sigma = np.arctan2(np.where(negative_c, -qo, qo), np.abs(q0))
    delta = np.arctan2(np.where(negative_s, -ql, ql), np.abs(qm))
    odd = negative_c ^ negative_s
    alpha, gamma = sigma + delta, sigma - delta
    over_a, over_g = odd & (alpha > 0), odd & (gamma > 0)
    alpha += np.pi * odd - 2 * np.pi * over_a
    gamma += np.pi * odd - 2 * np.pi * over_g
    minus = np.where(odd, over_a ^ over_g ^ negative_s, negative_c)
    at_zero, at_pi = sine <= tolerance, cosine <= tolerance
    pole = at_zero | at_pi
    alpha[pole] = 0.0
    gamma = np.where(at_zero, 2 * sigma, np.where(at_pi, -2 * delta, gamma))
    minus = np.where(at_zero, negative_c, np.where(at_pi, negative_s, minus))
    beta = 2 * np.arctan2(np.where(at_zero, 0.0, sine), np.where(at_pi, 0.0, cosine))
    alpha, odd_a = settle(alpha, tolerance)
    gamma, odd_g = settle(gamma, tolerance)
    beta, _ = settle(beta, tolerance)
    angles[:, 0], angles[:, 1], angles[:, 2] = alpha, beta, gamma
    turned = np.angle(root) + np.pi * (minus ^ odd_a ^ odd_g)
    phase[:] = np.where(turned > np.pi, turned - 2 * np.pi, turned)


def fewest_turns(angles: Real) -> tuple[Real, Mask]:
    """Replace (α, β, γ) by the equal (α+π, -β, γ-π) where that leaves more of the outer angles at zero.

    Parameters
    ----------
    angles : ndarray, shape (..., 3)

    Returns
    -------
    angles : ndarray, shape (..., 3)
        β now in (-π, π].
    odd : ndarray of bool, shape (...)
        Whether the product has changed sign.
    """
    outer = angles[..., ::2]
    flip = np.count_nonzero(np.abs(outer) == np.pi, axis=-1) > np.count_nonzero(outer == 0, axis=-1)
    out = angles.copy()
    out[flip, 1] *= -1
    out[flip, 0], odd_a = settle(out[flip, 0] + np.pi)
    out[flip, 2], odd_g = settle(out[flip, 2] - np.pi)
    odd = np.zeros(flip.shape, dtype=bool)
    odd[flip] = odd_a ^ odd_g
    return out, odd


def virtual_z(unitary: ArrayLike, *, tolerance: float = ROUNDING) -> VirtualZ:
    """Write unitaries as rotations about z around the least number of √X pulses: 0, 1 or 2.

    None for a rotation about z, one where the middle angle of the ZXZ form is π/2, two otherwise.

    Parameters
    ----------
    unitary : array_like, shape (..., 2, 2)
    tolerance : float
        As in `euler_angles`.

    Returns
    -------
    VirtualZ

    Raises
    ------
    MatrixError
        If a matrix is not 2 × 2 or far from unitary.

    References
    ----------
    McKay, Wood, Sheldon, Chow and Gambetta, PRA 96, 022330 (2017).

    Examples
    --------
    >>> virtual_z(np.array([np.eye(2), rotation("y", np.pi / 2), rotation("x", 0.3)])).pulses.tolist()
    [0, 1, 2]
    """
    euler = euler_angles(unitary, outer="z", inner="x", tolerance=tolerance)
    beta = euler.angles[..., 1]
    pulses = np.where(beta == 0, 0, np.where(beta == np.pi / 2, 1, 2)).astype(np.int8)
    angles = euler.angles.copy()
    # Rx(β) = Rz(-π/2) Rx(π/2) Rz(π-β) Rx(π/2) Rz(-π/2); two pulses in a row make Rx(π).
    generic = (pulses == 2) & (beta != np.pi)
    odd = np.zeros(beta.shape, dtype=bool)
    for column in (0, 2):
        angles[generic, column], change = settle(angles[generic, column] - np.pi / 2)
        odd[generic] ^= change
    angles[generic], change = fewest_turns(angles[generic])
    odd[generic] ^= change
    angles[generic, 1], change = settle(np.pi - angles[generic, 1])
    odd[generic] ^= change
    angles[~generic, 1] = 0.0
    turned = euler.phase + np.pi * odd - pulses * (np.pi / 4)
    return VirtualZ(angles, pulses, np.asarray(settle(turned, 0.0)[0]))
