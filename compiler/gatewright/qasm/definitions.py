"""Gate definitions of an OpenQASM program: what they hold, how they expand, and when they equal a known gate."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Builder
from gatewright.errors import ExpressionError, QasmError
from gatewright.expressions import Expression
from gatewright.gates import BARRIER, Gate
from gatewright.linalg import distance
from gatewright.parameters import Affine, Parameter, read_affine

__all__ = ["MAX_DEPTH", "Definition", "Emit", "Op", "Record", "Step", "equals", "expand", "same_gate"]

#: Levels of definitions that may use each other.
MAX_DEPTH = 100

#: A definition is compared with a known gate only up to these sizes.
MAX_COMPARED_QUBITS = 8
MAX_COMPARED_SIZE = 10_000

#: Angles at which operations are compared: random, the same in every run.
_TRIALS = 4


class Emit(Protocol):
    """What takes the table gates of an expansion; `matrix` is that of an explicit unitary."""

    def __call__(
        self,
        gate: Gate,
        qubits: Sequence[int],
        parameters: Sequence[Parameter] = (),
        matrix: NDArray[np.complex128] | None = None,
        /,
    ) -> object:
        """Take one operation."""


class Op(NamedTuple):
    """One operation of a definition at given parameters: a table gate, a definition, or an explicit unitary."""

    target: Gate | Definition
    qubits: tuple[int, ...]
    parameters: tuple[Parameter, ...] = ()
    matrix: NDArray[np.complex128] | None = None


#: Operations and global phase of a definition, by its parameters.
Record = Callable[[tuple[Parameter, ...]], tuple[Sequence[Op], Parameter]]


@dataclass(frozen=True, slots=True)
class Step:
    """One statement of a definition's body.

    Attributes
    ----------
    target : Gate, Definition or None
        What is applied; None for ``gphase``.
    qubits : tuple of int
        Positions among the qubits of the definition.
    expressions : tuple of Expression
        The parameters, in terms of those of the definition and of constants.
    values : tuple of float or None
        Their values, where they do not depend on the definition's parameters.
    """

    target: Gate | Definition | None
    qubits: tuple[int, ...]
    expressions: tuple[Expression, ...]
    values: tuple[float, ...] | None


@dataclass(frozen=True, slots=True)
class Definition:
    """A gate that the program defines.

    Attributes
    ----------
    name : str
    parameters : tuple of str
    n_qubits : int
    steps : tuple of Step
    constants : mapping of str to float
        Constants of the program that the steps may name.
    record : callable or None
        Makes the operations at given parameters, in place of `steps`.
    stands_for : Gate or None
        The known gate that calls become: the same operation up to global phase. Modifiers look at the definition
        itself, for a phase matters under a control.
    size : int
        Steps taken to expand it, nested ones included; at most 10^12.
    depth : int
        Levels of nesting.
    """

    name: str
    parameters: tuple[str, ...]
    n_qubits: int
    steps: tuple[Step, ...]
    constants: Mapping[str, float] = field(default_factory=dict)
    record: Record | None = None
    stands_for: Gate | None = None
    size: int = 0
    depth: int = 0

    def __post_init__(self) -> None:
        """Work out the size and the depth."""
        if self.record is not None:
            return
        inner = [step.target for step in self.steps if isinstance(step.target, Definition)]
        # Capped: definitions that double each other would make numbers of thousands of digits.
        size = min(len(self.steps) + sum(target.size for target in inner), 10**12)
        object.__setattr__(self, "size", size)
        object.__setattr__(self, "depth", 1 + max((target.depth for target in inner), default=0))

    @property
    def n_parameters(self) -> int:
        """Number of parameters."""
        return len(self.parameters)


def expand(
    definition: Definition, values: Sequence[Parameter], qubits: Sequence[int], emit: Emit, *, exact: bool = False
) -> Parameter:
    """Pass the table gates of one call to `emit`, in order, and return the global phase that it adds.

    With `exact`, definitions that stand for a known gate up to global phase are expanded as well.

    Raises
    ------
    ExpressionError
        If a parameter has no finite real value.
    """
    if definition.stands_for is not None and not exact:
        emit(definition.stands_for, qubits, values)
        return 0.0
    if definition.record is not None:
        operations, phase = definition.record(tuple(values))
        for target, places, numbers, matrix in operations:
            on = [qubits[q] for q in places]
            if isinstance(target, Definition):
                phase += expand(target, numbers, on, emit, exact=exact)
            else:
                emit(target, on, numbers, matrix)
        return phase
    named: dict[str, Parameter] = {**definition.constants, **dict(zip(definition.parameters, values, strict=True))}
    unknown = any(isinstance(value, Affine) for value in values)
    total: Parameter = 0.0
    for step in definition.steps:
        angles: tuple[Parameter, ...] = step.values or ()
        if step.values is None and unknown:
            angles = tuple([read_affine(expression, values=named) for expression in step.expressions])
        elif step.values is None:
            angles = tuple([expression.real(named) for expression in step.expressions])  # type: ignore[arg-type]
        target_of_step = step.target
        if isinstance(target_of_step, Gate):
            emit(target_of_step, [qubits[q] for q in step.qubits], angles)
        elif target_of_step is None:
            total += angles[0]
        else:
            total += expand(target_of_step, angles, [qubits[q] for q in step.qubits], emit, exact=exact)
    return total


def equals(definition: Definition, gate: Gate, *, tolerance: float = 1e-9, exact: bool = False) -> bool:
    """Return whether a definition and a gate are the same operation at a few random angles.

    Up to global phase, unless `exact`: then phases count, also those of the definitions that it calls.
    Definitions on more than 8 qubits or of more than 10,000 steps count as different.
    """
    if (definition.n_qubits, definition.n_parameters) != (gate.n_qubits, gate.n_parameters):
        return False
    if definition.n_qubits > MAX_COMPARED_QUBITS or definition.size > MAX_COMPARED_SIZE:
        return False
    rng = np.random.default_rng(20)
    for _ in range(_TRIALS if gate.n_parameters else 1):
        values = rng.uniform(-np.pi, np.pi, gate.n_parameters).tolist()
        builder = Builder(definition.n_qubits)

        try:
            phase = expand(definition, values, range(definition.n_qubits), _into(builder), exact=exact)
        except (ExpressionError, QasmError):
            return False
        assert not isinstance(phase, Affine)  # the parameters are numbers
        builder.phase = phase
        made, wanted = builder.build().unitary(), gate.matrix(values)
        if not (np.abs(made - wanted).max() if exact else distance(made, wanted)) <= tolerance:
            return False
    return True


def _into(builder: Builder) -> Emit:
    """Return what appends operations to a builder, barriers left out."""

    def emit(
        kind: Gate,
        qubits: Sequence[int],
        numbers: Sequence[Parameter] = (),
        matrix: NDArray[np.complex128] | None = None,
        /,
    ) -> None:
        if matrix is not None:
            builder.unitary(matrix, *qubits, check=False)
        elif kind != BARRIER:
            builder.gate(kind, *qubits, parameters=numbers)

    return emit


def same_gate(first: Gate, second: Gate, *, tolerance: float = 1e-9, exact: bool = False) -> bool:
    """Return whether two gates are the same operation at a few random angles, up to global phase unless `exact`."""
    if first == second:
        return True
    if (first.n_qubits, first.n_parameters) != (second.n_qubits, second.n_parameters):
        return False
    if first.function is None or second.function is None:
        return False
    values = np.random.default_rng(20).uniform(-np.pi, np.pi, (_TRIALS, first.n_parameters))
    a, b = first.matrix(values), second.matrix(values)
    return bool(np.all((np.abs(a - b) if exact else distance(a, b)) <= tolerance))
