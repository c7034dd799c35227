"""How a native gate set is used: its one-qubit plan, its entanglers, and which phases pass through that.

A rotation about the axis n that the one-qubit plan can split off commutes with some entanglers, or changes wires in
passing (iSWAP); then it need not be played before them. All of this is found from the matrices, never from names.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gatewright.errors import GateSetError
from gatewright.gates import Gate
from gatewright.linalg import dagger, kron, reorder_qubits
from gatewright.synthesis.entangler import Entangler, classify
from gatewright.synthesis.one_qubit import OneQubitPlan, plan_one_qubit
from gatewright.synthesis.weyl import canonical_coordinates

if TYPE_CHECKING:
    from gatewright.devices import GateSet, NativeGate

__all__ = ["NativeEntangler", "NativeSet", "entangler_parameters", "native_set", "usable_entanglers"]

Array = NDArray[np.complex128]
Vector = NDArray[np.float64]

#: Chamber points of the classes that `classify` accepts.
CLASSES = np.array([[np.pi / 4, 0, 0], [np.pi / 4, np.pi / 4, 0]])
B_CLASS = np.array([np.pi / 4, np.pi / 8, 0])
#: Points at which a parametrised entangler is looked at before refining.
SAMPLES = 241
PAULI = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])


@dataclass(frozen=True, eq=False, slots=True)
class NativeEntangler:
    """One two-qubit native gate at fixed parameters, with its qubits in one order.

    Attributes
    ----------
    gate : Gate
    parameters : tuple of float
    entangler : Entangler
        Of the gate's matrix with the qubits in that order.
    passes_to : tuple of int
        For each qubit, where a rotation about the plan's axis goes when moved behind the gate; -1 if it does not pass.
    sign : tuple of int
        The sign that its angle takes.
    flipped : bool
        Whether the gate's first qubit is the second of the window's.
    """

    gate: Gate
    parameters: tuple[float, ...]
    entangler: Entangler
    passes_to: tuple[int, int]
    sign: tuple[int, int]
    flipped: bool = False


@dataclass(frozen=True, eq=False, slots=True)
class NativeSet:
    """A gate set ready for use.

    Attributes
    ----------
    plan : OneQubitPlan
    entanglers : tuple of NativeEntangler
        Every usable two-qubit gate; those that are not symmetric in their qubits a second time, flipped, behind all
        that are not flipped. Empty for a set without two-qubit gates.
    """

    plan: OneQubitPlan
    entanglers: tuple[NativeEntangler, ...]

    @property
    def straight(self) -> tuple[NativeEntangler, ...]:
        """The entanglers that are not flipped: each gate once."""
        return tuple(entangler for entangler in self.entanglers if not entangler.flipped)


def usable_entanglers(
    gate_set: GateSet, *, tolerance: float = 1e-12
) -> list[tuple[NativeGate, tuple[float, ...], Entangler]]:
    """Return the two-qubit gates of a set that entangle, at chosen parameters.

    Raises
    ------
    GateSetError
        The set has two-qubit gates and none can be used; the reason for each is given.
    """
    usable: list[tuple[NativeGate, tuple[float, ...], Entangler]] = []
    reasons: list[str] = []
    for native in gate_set.two_qubit:
        try:
            parameters = entangler_parameters(native)
            entangler = classify(native.gate.matrix(parameters), tolerance=tolerance)
        except GateSetError as error:
            reasons.append(f"'{native.gate.name}': {error}")
        else:
            usable.append((native, parameters, entangler))
    if reasons and not usable:
        raise GateSetError(f"gate set '{gate_set.name}' has no entangler that can be used", found="; ".join(reasons))
    return usable


@lru_cache(maxsize=64)
def native_set(gate_set: GateSet, *, tolerance: float = 1e-12) -> NativeSet:
    """Plan the use of a gate set.

    Parameters
    ----------
    gate_set : GateSet
    tolerance : float
        Within which an entangler belongs to a class with closed forms.

    Raises
    ------
    GateSetError
        The set has two-qubit gates and none can be used; the reason for each is given.
    """
    usable = usable_entanglers(gate_set, tolerance=tolerance)
    if not usable:
        return NativeSet(plan_one_qubit(gate_set.one_qubit), ())
    axes = dict(zip("xyz", np.eye(3), strict=True))
    # Phases pass the better the more of the gates let them.
    passing = [
        name
        for name, axis in axes.items()
        if all(max(_passages(entangler.matrix, axis)[0]) >= 0 for _, _, entangler in usable)
    ]
    plan = plan_one_qubit(gate_set.one_qubit, passing=passing)
    tools = [
        NativeEntangler(native.gate, parameters, entangler, *_passages(entangler.matrix, plan.axis))
        for native, parameters, entangler in usable
    ]
    for native, parameters, entangler in usable:
        if not native.symmetric:
            turned = classify(reorder_qubits(entangler.matrix, (1, 0)), tolerance=tolerance)
            passes = _passages(turned.matrix, plan.axis)
            tools.append(NativeEntangler(native.gate, parameters, turned, *passes, flipped=True))
    return NativeSet(plan, tuple(tools))


def entangler_parameters(native: NativeGate) -> tuple[float, ...]:
    """Choose parameters at which the gate is closest to a usable class."""
    if native.gate.n_parameters == 0:
        return ()
    if native.gate.n_parameters > 1:
        return _several_parameters(native)
    # Only parametrised entanglers need it, and it takes a fifth of a second to load.
    from scipy.optimize import minimize_scalar

    low, high = native.ranges[0]
    low, high = max(low, -2 * np.pi), min(high, 2 * np.pi)
    grid = np.linspace(low, high, SAMPLES)

    def away(angles: Iterable[float]) -> NDArray[np.float64]:
        points = canonical_coordinates(native.gate.matrix(np.asarray(angles, dtype=float)[:, None]))
        return np.asarray(np.abs(points[:, None, :] - CLASSES).max(axis=2).min(axis=1))

    distances = away(grid)
    # Of equally good points, the smallest angle; of two of the same size, the positive one.
    best = int(np.argmin(np.round(distances, 9) + 1e-12 * np.abs(grid) + 1e-14 * (grid < 0)))
    around = (grid[max(best - 1, 0)], grid[min(best + 1, SAMPLES - 1)])
    refined = minimize_scalar(lambda a: float(away([a])[0]), bounds=around, method="bounded", options={"xatol": 1e-15})
    # The optimum is a kink of the distance; where it is a simple fraction of π, that fraction is exact.
    simple = np.round(refined.x * 24 / np.pi) * np.pi / 24
    candidates = [c for c in (simple, float(refined.x), float(grid[best])) if low <= c <= high]
    return (min(candidates, key=lambda a: float(np.round(away([a])[0], 14))),)


def _several_parameters(native: NativeGate) -> tuple[float, ...]:
    """Choose several parameters: the class of B if it is there, which makes everything in two, else as for one."""
    from scipy.optimize import minimize

    samples = native.samples()
    points = canonical_coordinates(native.gate.matrix(samples))
    low, high = np.array(native.ranges).T
    best: tuple[float, tuple[float, ...]] = (np.inf, ())
    wanted = B_CLASS

    def away(parameters: Vector) -> float:
        inside = np.clip(parameters, low, high)
        return float(np.abs(canonical_coordinates(native.gate.matrix(inside)) - wanted).max())

    for wanted in np.concatenate([[B_CLASS], CLASSES]):
        start = samples[int(np.argmin(np.abs(points - wanted).max(axis=1)))]
        precise = minimize(away, start, method="Nelder-Mead", options={"xatol": 1e-13, "fatol": 1e-15, "maxiter": 4000})
        found = np.clip(precise.x, low, high)
        simple = np.clip(np.round(found * 24 / np.pi) * np.pi / 24, low, high)
        parameters = min((simple, found), key=lambda p: round(away(p), 13))
        if away(parameters) <= 1e-12:
            return tuple(float(p) for p in parameters)
        best = min(best, (away(parameters), tuple(float(p) for p in parameters)))
    return best[1]


def _passages(matrix: Array, axis: NDArray[np.float64] | None) -> tuple[tuple[int, int], tuple[int, int]]:
    if axis is None:
        return (-1, -1), (1, 1)
    turn = np.tensordot(axis, PAULI, axes=1)
    local = (kron(turn, np.eye(2)), kron(np.eye(2), turn))
    target, sign = [-1, -1], [1, 1]
    for qubit in range(2):
        moved = matrix @ local[qubit] @ dagger(matrix)
        for other in range(2):
            for s in (1, -1):
                if np.abs(moved - s * local[other]).max() < 1e-12:
                    target[qubit], sign[qubit] = other, s
    return (target[0], target[1]), (sign[0], sign[1])
