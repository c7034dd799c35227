"""Gate modifiers of OpenQASM 3: ``inv @``, ``pow(k) @``, ``ctrl @`` and ``negctrl @``, phases included.

The meanings are those of the OpenQASM 3 specification (arXiv:2104.14722): modifiers act from the right, controls are
the first qubits, and a power that is not an integer takes the principal branch of the logarithm: eigenvalues
exp(iφ) with −π < φ ≤ π become exp(ikφ). A single operation becomes the table gate with the same matrix where there
is one, else an explicit unitary; longer bodies are inverted and controlled operation by operation.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import apply_matrix
from gatewright.errors import CircuitError, UnsupportedError
from gatewright.gates import BARRIER, GATES, UNITARY, Gate
from gatewright.parameters import Affine, Parameter
from gatewright.qasm.definitions import Definition, Op, expand
from gatewright.qasm.unknowns import (
    controlled_unknown,
    inverse_unknown,
    is_unknown,
    known_parameters,
    phase_under,
    power_unknown,
)

__all__ = ["MAX_EXPLICIT", "MAX_REPEATED", "Passage", "controlled", "inverse", "matrix_of", "passage_of", "power"]

Array = NDArray[np.complex128]

#: Most qubits of an explicit unitary that a modifier makes.
MAX_EXPLICIT = 6

#: Most operations that an integer power writes out.
MAX_REPEATED = 1_000_000

#: Largest difference of entries between a matrix and the table gate that takes its place.
_TOLERANCE = 1e-14

#: Eigenvalues whose phase is this close to −π lie on the branch cut but for rounding.
_CUT = 1e-12


@dataclass(frozen=True, slots=True)
class Passage:
    """Table gates and explicit unitaries in a row, on qubits of their own.

    Attributes
    ----------
    n_qubits : int
    operations : tuple of Op
        None of them is a definition.
    phase : float
        Global phase, radians.
    """

    n_qubits: int
    operations: tuple[Op, ...] = ()
    phase: Parameter = 0.0


def passage_of(target: Gate | Definition, values: Sequence[Parameter]) -> Passage:
    """Return the operations of a gate at given parameters, definitions expanded to the last, phases included."""
    places = tuple(range(target.n_qubits))
    if isinstance(target, Gate):
        return Passage(target.n_qubits, (Op(target, places, tuple(values)),))
    found: list[Op] = []

    def emit(
        gate: Gate, qubits: Sequence[int], parameters: Sequence[Parameter] = (), matrix: Array | None = None, /
    ) -> None:
        found.append(Op(gate, tuple(qubits), tuple(parameters), matrix))

    phase = expand(target, values, places, emit, exact=True)
    return Passage(target.n_qubits, tuple(found), phase)


def matrix_of(passage: Passage) -> Array:
    """Return the matrix of a passage, global phase included, shape (2**n, 2**n).

    Raises
    ------
    UnsupportedError
        On more than `MAX_EXPLICIT` qubits.

    Examples
    --------
    >>> matrix_of(passage_of(GATES["cx"], ())).real.astype(int).tolist()
    [[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 0, 1], [0, 0, 1, 0]]
    """
    n = passage.n_qubits
    if n > MAX_EXPLICIT:
        raise UnsupportedError(
            "a modified gate without a shorter form on this many qubits is not yet supported",
            required=f"at most {MAX_EXPLICIT} qubits",
            found=str(n),
        )
    state: Array = np.eye(2**n, dtype=np.complex128) * np.exp(1j * _known(passage.phase))
    for op in passage.operations:
        if op.target != BARRIER:
            state = apply_matrix(_matrix(op), op.qubits, state, n)
    return state


def _known(phase: Parameter) -> float:
    assert not isinstance(phase, Affine)
    return phase


def inverse(passage: Passage) -> Passage:
    """Return the inverse: the operations inverted, in reverse order.

    Examples
    --------
    >>> [op.target.name for op in inverse(passage_of(GATES["s"], ())).operations]
    ['sdg']
    """
    operations: list[Op] = []
    known: dict[Op | None, list[Op]] = {}
    for op in reversed(passage.operations):
        if op.target == BARRIER:
            operations.append(op)
            continue
        if is_unknown(op):
            operations.append(inverse_unknown(op))
            continue
        alike = op._replace(qubits=()) if op.matrix is None else None
        if alike in known:
            operations += [one._replace(qubits=op.qubits) for one in known[alike]]
            continue
        v = tuple(-value for value in known_parameters(op))
        # U(θ, φ, λ) is inverted by U(−θ, −λ, −φ).
        hints = [(v[0], v[2], v[1], *v[3:]) if len(v) > 2 else v, v, known_parameters(op)]
        made = _resolved(_matrix(op).conj().T, op.qubits, hints, op.target)
        operations += made
        if alike is not None:
            known[alike] = made
    return Passage(passage.n_qubits, tuple(operations), -passage.phase)


def power(passage: Passage, exponent: float) -> Passage:
    """Return the power of a passage; an exponent that is not an integer takes the principal branch.

    Raises
    ------
    UnsupportedError
        A power that is not an integer on more than `MAX_EXPLICIT` qubits, or too many repetitions.

    Examples
    --------
    >>> [op.target.name for op in power(passage_of(GATES["x"], ()), 0.5).operations]
    ['sx']
    """
    n = passage.n_qubits
    if abs(exponent) > MAX_REPEATED:
        raise UnsupportedError(
            "a power is too large to be exact", required=f"at most {MAX_REPEATED}", found=f"{exponent:.6g}"
        )
    if exponent == 1:
        return passage
    if any(is_unknown(op) for op in passage.operations) or isinstance(passage.phase, Affine):
        return _unknown_power(passage, exponent)
    if exponent == math.floor(exponent):
        if exponent < 0:
            return power(inverse(passage), -exponent)
        repeated = exponent * len(passage.operations)
        # Written out as long as that is shorter than the generic unitary on these qubits.
        if n > MAX_EXPLICIT or (len(passage.operations) != 1 and n > 1 and repeated <= 4**n):
            if repeated > MAX_REPEATED:
                raise UnsupportedError(
                    "a power repeats too many operations",
                    required=f"at most {MAX_REPEATED}",
                    found=f"{repeated:.0f}",
                )
            phase = math.remainder(passage.phase * exponent, math.tau)
            return Passage(n, passage.operations * int(exponent), phase)
    if n == 0:
        # The one eigenvalue exp(iφ) of a bare phase.
        phase = passage.phase
        if exponent != math.floor(exponent):
            phase = math.remainder(phase, math.tau)
            phase = phase + math.tau if phase <= -math.pi + _CUT else phase
        return Passage(0, (), phase * exponent)
    only = passage.operations[0] if len(passage.operations) == 1 else None
    hints = []
    if only is not None:
        known = known_parameters(only)
        hints = [tuple(value * exponent for value in known), known]
    places = tuple(range(n))
    matrix = _power(matrix_of(passage), exponent)
    if only is not None and only.qubits == places:
        return Passage(n, tuple(_resolved(matrix, places, hints, only.target)))
    return Passage(n, tuple(_resolved(matrix, places, hints)))


def _unknown_power(passage: Passage, exponent: float) -> Passage:
    """Return an integer power of a passage with unknown parameters, written out."""
    if exponent != math.floor(exponent):
        raise UnsupportedError(
            "a power that is not an integer, of a gate whose angle is not known when compiling, is not yet supported",
            required="an integer power",
            found=f"{exponent:.6g}",
        )
    phase = passage.phase * exponent
    if len(passage.operations) == 1 and is_unknown(passage.operations[0]):
        return Passage(passage.n_qubits, tuple(power_unknown(passage.operations[0], exponent)), phase)
    if exponent < 0:
        passage, exponent = inverse(passage), -exponent
    if exponent * len(passage.operations) > MAX_REPEATED:
        raise UnsupportedError("a power repeats too many operations", required=f"at most {MAX_REPEATED}")
    return Passage(passage.n_qubits, passage.operations * int(exponent), phase)


def controlled(passage: Passage, controls: Sequence[bool]) -> Passage:
    """Return the passage under controls in front, each on |1⟩ (True) or on |0⟩ (False).

    Examples
    --------
    >>> [op.target.name for op in controlled(passage_of(GATES["x"], ()), [True, True]).operations]
    ['ccx']
    """
    k = len(controls)
    front = tuple(range(k))
    flips = [Op(GATES["x"], (q,)) for q, positive in enumerate(controls) if not positive]
    operations = list(flips)
    known: dict[Op | None, list[Op]] = {}
    for op in passage.operations:
        places = tuple(q + k for q in op.qubits)
        if op.target == BARRIER:
            operations.append(Op(BARRIER, places))
            continue
        if is_unknown(op):
            if k + len(op.qubits) > MAX_EXPLICIT:
                raise UnsupportedError(
                    "a controlled gate on this many qubits is not yet supported",
                    required=f"at most {MAX_EXPLICIT} qubits",
                    found=str(k + len(op.qubits)),
                )
            operations += controlled_unknown(op, k)
            continue
        alike = op._replace(qubits=()) if op.matrix is None else None
        if alike in known:
            operations += [one._replace(qubits=(*front, *places)) for one in known[alike]]
            continue
        inner = _matrix(op)
        if len(inner) * 2**k > 2**MAX_EXPLICIT:
            raise UnsupportedError(
                "a controlled gate on this many qubits is not yet supported",
                required=f"at most {MAX_EXPLICIT} qubits",
                found=str(k + len(op.qubits)),
            )
        made = _resolved(_under(inner, k), (*front, *places), [known_parameters(op)])
        operations += made
        if alike is not None:
            known[alike] = made
    if passage.phase:
        if k > MAX_EXPLICIT:
            raise UnsupportedError(
                "a controlled phase on this many qubits is not yet supported",
                required=f"at most {MAX_EXPLICIT} qubits",
                found=str(k),
            )
        if isinstance(passage.phase, Affine):
            return Passage(passage.n_qubits + k, (*operations, *phase_under(passage.phase, k), *flips))
        bare = np.array([[np.exp(1j * passage.phase)]])
        operations += _resolved(_under(bare, k), front, [(passage.phase,)])
    n = passage.n_qubits + k
    return Passage(n, (*operations, *flips))


def _under(inner: Array, controls: int) -> Array:
    """Return a matrix under controls."""
    size = len(inner) * 2**controls
    out = np.eye(size, dtype=np.complex128)
    out[size - len(inner) :, size - len(inner) :] = inner
    return out


def _matrix(op: Op) -> Array:
    assert isinstance(op.target, Gate)
    if op.matrix is not None:
        return op.matrix
    if op.target.function is None:
        raise CircuitError(f"'{op.target.name}' is not unitary", required="a unitary gate under a modifier")
    return op.target.matrix(known_parameters(op))


def _power(matrix: Array, exponent: float) -> Array:
    """Return the principal power of a unitary by its Schur form, which is diagonal."""
    if exponent == math.floor(exponent) and abs(exponent) <= 64:
        return np.linalg.matrix_power(matrix, int(exponent))
    import scipy.linalg

    triangular, vectors = scipy.linalg.schur(matrix, output="complex")
    angles = np.angle(np.diagonal(triangular))
    angles = np.where(angles <= -np.pi + _CUT, np.pi, angles)
    return np.asarray((vectors * np.exp(1j * exponent * angles)) @ vectors.conj().T, dtype=np.complex128)


@functools.cache
def _constants(n: int) -> tuple[tuple[Gate, ...], Array]:
    """Return the gates without parameters on some qubits, and their matrices."""
    gates = tuple(gate for gate in GATES.values() if gate.n_qubits == n and not gate.n_parameters)
    return gates, np.array([gate.matrix() for gate in gates]).reshape(len(gates), 2**n, 2**n)


@functools.cache
def _parametrised(n: int, n_parameters: int) -> tuple[Gate, ...]:
    """Return the gates with so many parameters."""
    return tuple(g for g in GATES.values() if g.n_qubits == n and g.n_parameters == n_parameters)


def _resolved(
    matrix: Array, qubits: tuple[int, ...], hints: Iterable[tuple[float, ...]], own: Gate | Definition | None = None
) -> list[Op]:
    """Return a matrix as a table gate if one is equal to it, else as an explicit unitary; nothing for the identity.

    `hints` are parameters to try, `own` a gate to try first.
    """
    n = len(qubits)
    if n > 1 and np.abs(matrix - np.eye(len(matrix))).max() <= _TOLERANCE:
        return []
    first = (own,) if isinstance(own, Gate) and own.function is not None and own.n_qubits == n else ()
    hints = tuple(dict.fromkeys(hints))
    for values in hints:
        # A table gate of the program's own name comes before others that are equal to it.
        for gate in (*first, *(_parametrised(n, len(values)) if values else ())):
            if len(values) == gate.n_parameters and np.abs(gate.matrix(values) - matrix).max() <= _TOLERANCE:
                return [Op(gate, qubits, tuple(values))]
    gates, matrices = _constants(n)
    if gates:
        equal = np.flatnonzero(np.abs(matrices - matrix).max(axis=(1, 2)) <= _TOLERANCE)
        if len(equal):
            return [Op(gates[equal[0]], qubits)]
    return [Op(UNITARY, qubits, (), np.array(matrix, dtype=np.complex128))]
