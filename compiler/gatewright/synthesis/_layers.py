"""How circuits of CNOT-class or iSWAP-class entanglers are laid out, as tables for the compiled kernel.

Everything is derived for C = CAN(π/4, 0, 0). Two uses: C exp(i(aZI + bIZ)) C = exp(i(aYX + bXY)) XX. Three uses:
the circuit of Vatan & Williams, PRA 69, 032315 (2004), CX₀₁ · (exp(ibY) ⊗ exp(iaZ)) · CX₁₀ · (exp(icY) ⊗ 1) · CX₀₁,
is locally CAN(c + π/4, π/4 − b, a + π/4). Any other entangler E enters as C = P·E·Q, P and Q local, or as
C = SWAP·P·E·Q, whose SWAPs are moved to the end and exchange the qubits of every second layer.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.synthesis._kernels import SIGNS, arrange

__all__ = [
    "HADAMARD",
    "ONE",
    "PAULI_X",
    "ROUNDING",
    "Plan",
    "conjugate",
    "layers",
    "make_plan",
    "multiply",
    "quarter_turn",
]

Quaternions = NDArray[np.float64]

ROUNDING = 4e-15
"""Distances up to here are rounding, and recorded as 0."""

ONE = np.array([1.0, 0.0, 0.0, 0.0])
PAULI_X = np.array([0.0, 1.0, 0.0, 0.0])
HADAMARD = np.array([0.0, 1.0, 0.0, 1.0]) / np.sqrt(2)


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """Tables of `arrange`: head and tail (quaternions) and angles, each [uses, layer, qubit, 4]."""

    head: NDArray[np.float64]
    tail: NDArray[np.float64]
    angles: NDArray[np.float64]
    exchanged: bool


def multiply(*factors: Quaternions) -> Quaternions:
    """Return the product of quaternions (..., 4), in the order of the gates' matrix product."""
    product = factors[0]
    index = np.arange(4)
    for factor in factors[1:]:
        result = np.zeros(np.broadcast_shapes(product.shape, factor.shape))
        for m in range(4):
            result[..., m ^ index] += SIGNS[m, 0] * product[..., m, None] * factor
        product = result
    return product


def conjugate(quaternion: Quaternions) -> Quaternions:
    """Return the inverse of unit quaternions (..., 4)."""
    return np.asarray(quaternion * np.array([1.0, -1.0, -1.0, -1.0]))


def quarter_turn(axis: str, sign: int = 1) -> Quaternions:
    """Return the rotation by ±π/2 about X or Z."""
    quaternion = np.array([1.0, sign * (axis == "x"), 0.0, sign * (axis == "z")])
    return np.asarray(quaternion / np.sqrt(2))


def make_plan(before: Quaternions, after: Quaternions, *, exchanged: bool) -> Plan:
    """Return the tables for an entangler E with C = P·E·Q (times SWAP if `exchanged`).

    Parameters
    ----------
    before, after : ndarray, shape (2, 4)
        The gates of Q and of P on qubits 0 and 1.
    exchanged : bool
        Whether E is of the iSWAP class; P·E·Q must then commute with SWAP.
    """
    head, tail = np.broadcast_to(ONE, (4, 4, 2, 4)).copy(), np.broadcast_to(ONE, (4, 4, 2, 4)).copy()
    angles = np.zeros((4, 4, 2, 4))
    s, h = quarter_turn("z"), HADAMARD
    x_plus, x_minus = quarter_turn("x"), quarter_turn("x", -1)

    # [uses, layer, qubit]; layer 0 is the first in time.
    head[2, 0, 0], head[2, 0, 1] = PAULI_X, multiply(PAULI_X, s)
    angles[2, 1, 0], angles[2, 1, 1] = [0, -1, 0, 0], [1, 0, 0, 0]
    head[2, 2, 1] = conjugate(s)

    head[3, 0, 0] = multiply(h, s)
    head[3, 1, 0], angles[3, 1, 0], tail[3, 1, 0] = x_minus, [1, 0, 0, -np.pi / 4], multiply(x_plus, s, h)
    head[3, 1, 1] = multiply(h, x_plus)
    head[3, 2, 0], angles[3, 2, 0], tail[3, 2, 0] = multiply(h, x_minus), [0, -1, 0, np.pi / 4], PAULI_X
    angles[3, 2, 1], tail[3, 2, 1] = [0, 0, 1, -np.pi / 4], multiply(s, h)
    head[3, 3, 0], head[3, 3, 1] = multiply(s, h), multiply(conjugate(s), x_plus)

    if exchanged:
        for table in (head, tail, angles):
            table[:, 1::2] = table[:, 1::2, ::-1].copy()
    for uses in range(1, 4):
        head[uses, :uses] = multiply(before, head[uses, :uses])
        tail[uses, 1 : uses + 1] = multiply(tail[uses, 1 : uses + 1], after)
    return Plan(head=head, tail=tail, angles=angles, exchanged=exchanged)


def layers(
    plan: Plan, local: Quaternions, coordinates: NDArray[np.float64], uses: NDArray[np.int64]
) -> NDArray[np.complex128]:
    """Return the one-qubit gates, shape (N, 4, 2, 2, 2), of the circuits with these numbers of uses.

    Parameters
    ----------
    plan : Plan
    local : ndarray, shape (N, 4, 4)
        Quaternions of the left and right local gates of the target (of SWAP · target where `exchanged` and the
        number of uses is odd).
    coordinates : ndarray, shape (N, 3)
        Of the same; with 2 uses z is taken as 0, with 1 they are taken as (π/4, 0, 0), with 0 as (0, 0, 0).
    uses : ndarray of int64, shape (N,)
    """
    result = np.empty((uses.shape[0], 4, 2, 2, 2), dtype=np.complex128)
    arrange(local, coordinates, uses, plan.head, plan.tail, plan.angles, plan.exchanged, result)
    return result
