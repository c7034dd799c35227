"""A small state-vector interpreter of circuits and programs with classical control, written for the tests alone.

It shares nothing with the package but the data types and the table of gates. Measured outcomes come from a script, by
bit and by how often that bit was measured; an outcome that cannot occur gives way to the other one. Operators on
classical values follow the OpenQASM 3 specification (arXiv:2104.14722) on Python integers.
"""

from __future__ import annotations

import operator
import re
from collections.abc import Callable
from typing import Any

import numpy as np

from gatewright.circuit import Circuit
from gatewright.classical import Bits, Expression, Literal, Name, Operation
from gatewright.program import Assign, Block, If, Leave, Program, While

MOST_ROUNDS = 60

OPERATORS: dict[str, Callable[[Any, Any], Any]] = {
    "==": operator.eq, "!=": operator.ne, "<": operator.lt, "<=": operator.le, ">": operator.gt, ">=": operator.ge,
    "&&": lambda a, b: bool(a) and bool(b), "||": lambda a, b: bool(a) or bool(b),
    "&": operator.and_, "|": operator.or_, "^": operator.xor, "<<": operator.lshift, ">>": operator.rshift,
    "+": operator.add, "-": operator.sub, "*": operator.mul, "%": operator.mod, "/": operator.floordiv,
}  # fmt: skip


class Leaving(Exception):
    """A ``break``, ``continue`` or ``end``."""


class Machine:
    """A register of qubits, bits and variables, and a script of outcomes."""

    def __init__(self, state: np.ndarray, n_bits: int, script: np.random.Generator, variables: Any = ()) -> None:
        self.n = int(state.size).bit_length() - 1
        self.state = state.astype(complex).reshape((2,) * self.n)
        self.bits = [0] * n_bits
        self.types = dict(variables)
        self.values: dict[str, Any] = {}
        self.outcomes = script.integers(0, 2, size=(n_bits + 1, 200))
        self.seen = [0] * (n_bits + 1)
        self.rounds = 0

    def apply(self, matrix: np.ndarray, qubits: tuple[int, ...]) -> None:
        k = len(qubits)
        moved = np.tensordot(matrix.reshape((2,) * (2 * k)), self.state, axes=(range(k, 2 * k), qubits))
        self.state = np.moveaxis(moved, range(k), qubits)

    def project(self, qubit: int, line: int) -> int:
        """Measure a qubit; the outcome is that of the script's line if it can occur."""
        # All resets have the same, so that it does not matter which of two on different qubits comes first.
        wanted = int(self.outcomes[line][self.seen[line] % 200 if line < len(self.bits) else 0])
        self.seen[line] += 1
        parts = np.moveaxis(self.state, qubit, 0)
        weights = [float(np.sum(np.abs(parts[value]) ** 2)) for value in (0, 1)]
        value = wanted if weights[wanted] > 1e-9 * sum(weights) else 1 - wanted
        kept = np.zeros_like(parts)
        kept[value] = parts[value] / np.sqrt(weights[value])
        self.state = np.moveaxis(kept, 0, qubit)
        return value

    def circuit(self, circuit: Circuit) -> None:
        for op in circuit:
            if op.name == "measure":
                assert op.bit is not None
                self.bits[op.bit] = self.project(op.qubits[0], op.bit)
            elif op.name == "reset":
                if self.project(op.qubits[0], len(self.bits)):
                    self.apply(np.array([[0, 1], [1, 0]]), op.qubits)
            elif op.matrix is not None:
                self.apply(op.matrix, op.qubits)
            else:
                assert op.name in ("barrier", "delay"), op.name

    def block(self, block: Block) -> None:
        for circuit, statement in zip(block.circuits, (*block.statements, None), strict=True):
            self.circuit(circuit)
            match statement:
                case Assign(target, value):
                    self.assign(target, self.value(value))
                case If(condition, then, otherwise):
                    self.block(then if self.value(condition) else otherwise)
                case While(condition, body):
                    while self.value(condition):
                        self.rounds += 1
                        if self.rounds > MOST_ROUNDS:
                            raise Leaving("end")  # a test stops here on both sides alike
                        try:
                            self.block(body)
                        except Leaving as leaving:
                            if str(leaving) == "end":
                                raise
                            if str(leaving) == "break":
                                break
                case Leave(word):
                    raise Leaving(word)

    def assign(self, target: Name | Bits, value: Any) -> None:
        if isinstance(target, Bits):
            for k, place in enumerate(target.indices):
                self.bits[place] = int(value) >> k & 1
        else:
            self.values[target.name] = converted(value, self.types[target.name])

    def value(self, expression: Expression) -> Any:
        match expression:
            case Literal(text):
                if text in ("true", "false"):
                    return text == "true"
                if text.startswith('"'):
                    return int(text.strip('"'), 2)
                return float(text) if "." in text or "e" in text else int(text)
            case Name(name):
                return self.values[name]
            case Bits(indices):
                return sum(self.bits[place] << k for k, place in enumerate(indices))
            case Operation(op, (inner,)) if op in ("-", "!", "~"):
                value = self.value(inner)
                return {"-": lambda: -value, "!": lambda: not value, "~": lambda: ~value}[op]()
            case Operation("popcount", (inner,)):
                return int(self.value(inner)).bit_count()
            case Operation(op, (left, right)) if op in OPERATORS:
                return OPERATORS[op](self.value(left), self.value(right))
            case Operation(op, (inner,)):
                return converted(self.value(inner), op)
        raise AssertionError(expression)


def converted(value: Any, kind: str) -> Any:
    """Return a value in a type such as ``uint[8]``."""
    match = re.fullmatch(r"(\w+)(?:\[(\d+)\])?", kind)
    assert match is not None
    name, width = match[1], int(match[2] or 0)
    if name == "bool":
        return bool(value)
    if name in ("float", "angle"):
        return float(value)
    whole = int(value)
    if not width:
        return whole & 1 if name == "bit" else whole
    whole &= (1 << width) - 1
    return whole - (1 << width) if name == "int" and whole >> (width - 1) else whole


def run(source: Circuit | Program, state: np.ndarray, seed: int) -> Machine:
    """Run a circuit or a program from a state on the script with the given seed."""
    variables = source.variables if isinstance(source, Program) else ()
    machine = Machine(state, source.n_bits, np.random.default_rng(seed), variables)
    if isinstance(source, Circuit):
        machine.circuit(source)
        return machine
    try:
        machine.block(source.body)
    except Leaving as leaving:
        assert str(leaving) == "end"
    return machine
