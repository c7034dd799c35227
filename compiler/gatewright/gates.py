"""The table of named gates: each an exact, batched matrix function of its parameters.

Definitions are those published with OpenQASM: the standard library of OpenQASM 3 (Cross et al., ACM Trans.
Quantum Comput. 3, 12 (2022), arXiv:2104.14722, and the specification's ``stdgates.inc``), and the ``qelib1.inc``
of OpenQASM 2 (Cross et al., arXiv:1707.03429) with its later additions. The two-qubit rotations and iSWAP are
the trade's usual native gates. Qubit 0 is the leftmost factor of the Kronecker product; angles are radians.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import CircuitError, nearest_name

__all__ = ["ANY", "BARRIER", "CONTROL", "DELAY", "GATES", "MEASURE", "RESET", "UNITARY", "Gate", "find_gate"]

Array = NDArray[np.complex128]
MatrixFunction = Callable[[NDArray[np.float64]], Array]

#: Number of qubits of an operation that takes as many as it is given.
ANY = -1


@dataclass(frozen=True, slots=True)
class Gate:
    """One kind of operation.

    Attributes
    ----------
    name : str
    n_qubits : int
        `ANY` for a barrier or an explicit unitary.
    n_parameters : int
    function : callable or None
        Maps parameters of shape (..., n_parameters) to matrices (..., d, d); None for what is not a unitary
        gate (measurement, reset, barrier) or carries its own matrix.
    """

    name: str
    n_qubits: int
    n_parameters: int = 0
    function: MatrixFunction | None = None

    def matrix(self, parameters: ArrayLike = ()) -> Array:
        """Return the matrices for a stack of parameters.

        Parameters
        ----------
        parameters : array_like, shape (..., n_parameters)

        Returns
        -------
        ndarray, shape (..., 2**n_qubits, 2**n_qubits)

        Raises
        ------
        CircuitError
            If the operation has no matrix, or the number of parameters is wrong.

        Examples
        --------
        >>> GATES["rz"].matrix([np.pi]).round(3).tolist()
        [[-1j, 0j], [0j, 1j]]
        """
        values = np.asarray(parameters, dtype=np.float64)
        if self.function is None:
            raise CircuitError(f"'{self.name}' has no matrix", required="a unitary gate")
        if values.ndim == 0 or values.shape[-1] != self.n_parameters:
            raise CircuitError(
                f"wrong number of parameters for '{self.name}'",
                required=str(self.n_parameters),
                found=str(values.shape[-1] if values.ndim else 1),
            )
        return self.function(values)


def _constant(rows: ArrayLike) -> MatrixFunction:
    matrix = np.array(rows, dtype=np.complex128)
    matrix.setflags(write=False)
    return lambda p: np.broadcast_to(matrix, (*p.shape[:-1], *matrix.shape))


def _diagonal(*entries: Callable[[NDArray[np.float64]], NDArray[np.float64]]) -> MatrixFunction:
    """Diagonal gate from the phases (radians) of its entries."""

    def function(p: NDArray[np.float64]) -> Array:
        out = np.zeros((*p.shape[:-1], len(entries), len(entries)), dtype=np.complex128)
        for k, phase in enumerate(entries):
            out[..., k, k] = np.exp(1j * phase(p))
        return out

    return function


def _rotation(generator: ArrayLike) -> MatrixFunction:
    """exp(-i θ/2 · generator) for a generator that squares to one."""
    g = np.array(generator, dtype=np.complex128)
    one = np.eye(len(g))

    def function(p: NDArray[np.float64]) -> Array:
        half = p[..., 0, None, None] / 2
        return np.asarray(np.cos(half) * one - 1j * np.sin(half) * g)

    return function


def _controlled(function: MatrixFunction) -> MatrixFunction:
    """Add a control in front (qubit 0)."""

    def controlled(p: NDArray[np.float64]) -> Array:
        inner = function(p)
        d = inner.shape[-1]
        out = np.zeros((*inner.shape[:-2], 2 * d, 2 * d), dtype=np.complex128)
        out[..., range(d), range(d)] = 1
        out[..., d:, d:] = inner
        return out

    return controlled


def _u(p: NDArray[np.float64]) -> Array:
    theta, phi, lam = p[..., 0] / 2, p[..., 1], p[..., 2]
    out = np.empty((*theta.shape, 2, 2), dtype=np.complex128)
    out[..., 0, 0] = np.cos(theta)
    out[..., 0, 1] = -np.exp(1j * lam) * np.sin(theta)
    out[..., 1, 0] = np.exp(1j * phi) * np.sin(theta)
    out[..., 1, 1] = np.exp(1j * (phi + lam)) * np.cos(theta)
    return out


def _u_standard(p: NDArray[np.float64]) -> Array:
    """OpenQASM 3's built-in U, with the phase that its specification gives it."""
    return np.asarray(np.exp(0.5j * p[..., 0])[..., None, None] * _u(p))


def _u_symmetric(p: NDArray[np.float64]) -> Array:
    """Return the form with determinant one, as ``u2`` and ``u3`` of OpenQASM 3's standard library define it."""
    return np.asarray(np.exp(-0.5j * (p[..., 1] + p[..., 2]))[..., None, None] * _u(p))


def _u2(p: NDArray[np.float64]) -> Array:
    return _u_symmetric(np.concatenate([np.full_like(p[..., :1], np.pi / 2), p], axis=-1))


def _cu(p: NDArray[np.float64]) -> Array:
    out = _controlled(_u)(p[..., :3])
    out[..., 2:, 2:] *= np.exp(1j * p[..., 3])[..., None, None]
    return out


def _equatorial(p: NDArray[np.float64]) -> Array:
    """Rotate by p[0] about the axis at angle p[1] from x in the equatorial plane."""
    half, phi = p[..., 0] / 2, p[..., 1]
    out = np.empty((*half.shape, 2, 2), dtype=np.complex128)
    out[..., 0, 0] = out[..., 1, 1] = np.cos(half)
    out[..., 0, 1] = -1j * np.exp(-1j * phi) * np.sin(half)
    out[..., 1, 0] = -1j * np.exp(1j * phi) * np.sin(half)
    return out


def _permutation(images: list[int], phases: dict[int, complex] | None = None) -> Array:
    out = np.zeros((len(images), len(images)), dtype=np.complex128)
    out[images, range(len(images))] = 1
    for column, phase in (phases or {}).items():
        out[:, column] *= phase
    return out


_X = np.array([[0, 1], [1, 0]], dtype=np.complex128)
_Y = np.array([[0, -1j], [1j, 0]])
_Z = np.diag([1.0 + 0j, -1.0])
_H = np.array([[1, 1], [1, -1]]) / np.sqrt(2)
_SX = np.array([[1 + 1j, 1 - 1j], [1 - 1j, 1 + 1j]]) / 2
_SWAP = _permutation([0, 2, 1, 3])


def _zero(p: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.zeros(p.shape[:-1])


def _first(p: NDArray[np.float64]) -> NDArray[np.float64]:
    return p[..., 0]


_phase = _diagonal(_zero, _first)
_rx, _ry, _rz = _rotation(_X), _rotation(_Y), _rotation(_Z)


def _c(matrix: ArrayLike, controls: int = 1) -> MatrixFunction:
    function = _constant(matrix)
    for _ in range(controls):
        function = _controlled(function)
    return function


def _table(gates: Iterable[Gate]) -> dict[str, Gate]:
    return {gate.name: gate for gate in gates}


#: Every named unitary gate. `r` is the equatorial rotation.
GATES: dict[str, Gate] = _table(
    [
        Gate("id", 1, 0, _constant(np.eye(2))),
        Gate("x", 1, 0, _constant(_X)),
        Gate("y", 1, 0, _constant(_Y)),
        Gate("z", 1, 0, _constant(_Z)),
        Gate("h", 1, 0, _constant(_H)),
        Gate("s", 1, 0, _constant(np.diag([1, 1j]))),
        Gate("sdg", 1, 0, _constant(np.diag([1, -1j]))),
        Gate("t", 1, 0, _constant(np.diag([1, (1 + 1j) / np.sqrt(2)]))),
        Gate("tdg", 1, 0, _constant(np.diag([1, (1 - 1j) / np.sqrt(2)]))),
        Gate("sx", 1, 0, _constant(_SX)),
        Gate("sxdg", 1, 0, _constant(_SX.conj().T)),
        Gate("p", 1, 1, _phase),
        Gate("phase", 1, 1, _phase),
        Gate("u1", 1, 1, _phase),
        Gate("rx", 1, 1, _rx),
        Gate("ry", 1, 1, _ry),
        Gate("rz", 1, 1, _rz),
        Gate("r", 1, 2, _equatorial),
        Gate("u2", 1, 2, _u2),
        Gate("u3", 1, 3, _u_symmetric),
        Gate("u", 1, 3, _u),
        Gate("U", 1, 3, _u_standard),
        Gate("cx", 2, 0, _c(_X)),
        Gate("CX", 2, 0, _c(_X)),
        Gate("cy", 2, 0, _c(_Y)),
        Gate("cz", 2, 0, _c(_Z)),
        Gate("ch", 2, 0, _c(_H)),
        Gate("csx", 2, 0, _c(_SX)),
        Gate("swap", 2, 0, _constant(_SWAP)),
        Gate("iswap", 2, 0, _constant(_permutation([0, 2, 1, 3], {1: 1j, 2: 1j}))),
        Gate("cp", 2, 1, _controlled(_phase)),
        Gate("cphase", 2, 1, _controlled(_phase)),
        Gate("cu1", 2, 1, _controlled(_phase)),
        Gate("crx", 2, 1, _controlled(_rx)),
        Gate("cry", 2, 1, _controlled(_ry)),
        Gate("crz", 2, 1, _controlled(_rz)),
        Gate("cu3", 2, 3, _controlled(_u)),
        Gate("cu", 2, 4, _cu),
        Gate("rxx", 2, 1, _rotation(np.kron(_X, _X))),
        Gate("ryy", 2, 1, _rotation(np.kron(_Y, _Y))),
        Gate("rzz", 2, 1, _rotation(np.kron(_Z, _Z))),
        Gate("rzx", 2, 1, _rotation(np.kron(_Z, _X))),
        Gate("ccx", 3, 0, _c(_X, 2)),
        Gate("ccz", 3, 0, _c(_Z, 2)),
        Gate("cswap", 3, 0, _c(_SWAP)),
        # Relative-phase Toffolis (Margolus; Maslov, PRA 93, 022311 (2016)), as qelib1.inc defines them.
        Gate("rccx", 3, 0, _constant(_permutation([0, 1, 2, 3, 4, 5, 7, 6], {5: -1, 6: 1j, 7: -1j}))),
        Gate("rc3x", 4, 0, _constant(_permutation([*range(14), 15, 14], {12: 1j, 13: -1j, 14: -1}))),
        Gate("c3x", 4, 0, _c(_X, 3)),
        Gate("c3sqrtx", 4, 0, _c(_SX, 3)),
        Gate("c4x", 5, 0, _c(_X, 4)),
    ]
)

MEASURE = Gate("measure", 1)
RESET = Gate("reset", 1)
BARRIER = Gate("barrier", ANY)
#: Nothing for a time, in nanoseconds, which is its parameter; like a barrier, nothing crosses it.
DELAY = Gate("delay", ANY, 1)
UNITARY = Gate("unitary", ANY)
#: A mark among the operations while a program with classical control is read; no circuit keeps it.
CONTROL = Gate("control", 0)


def find_gate(name: str, gates: Mapping[str, Gate] | None = None) -> Gate:
    """Return the gate called `name`.

    Raises
    ------
    CircuitError
        Naming the nearest known gate.
    """
    table = GATES if gates is None else gates
    try:
        return table[name]
    except KeyError:
        raise CircuitError(f"unknown gate '{name[:60]}'", hint=nearest_name(name, table)) from None
