"""Programs with classical control: straight-line circuits between statements that depend on measured bits.

A block is circuits and control statements by turns; it begins and ends with a circuit, which may be empty. So two
programs of the same shape can be walked side by side, and there is a place for swaps before every statement.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, Piece, assemble
from gatewright.classical import Bits, Expression, Literal, Name, Operation, leaves
from gatewright.gates import MEASURE, UNITARY
from gatewright.parameters import Parameter, checked_values

__all__ = ["Assign", "Block", "If", "Leave", "Mark", "Program", "Statement", "While", "split_at_marks"]


NO_VALUES: Mapping[str, float] = MappingProxyType({})


@dataclass(frozen=True, eq=False, slots=True)
class Block:
    """Circuits and the statements between them: circuit k comes before statement k, the last one after all.

    Attributes
    ----------
    circuits : tuple of Circuit
        One more than there are statements.
    statements : tuple of Statement
    """

    circuits: tuple[Circuit, ...]
    statements: tuple[Statement, ...] = ()


@dataclass(frozen=True, slots=True)
class Assign:
    """Give a classical variable or bits a value."""

    target: Name | Bits
    value: Expression


@dataclass(frozen=True, eq=False, slots=True)
class If:
    """Run one of two blocks."""

    condition: Expression
    then: Block
    otherwise: Block


@dataclass(frozen=True, eq=False, slots=True)
class While:
    """Run a block as long as the condition holds before it."""

    condition: Expression
    body: Block


@dataclass(frozen=True, slots=True)
class Leave:
    """Leave the innermost loop (``break``), its round (``continue``), or the program (``end``)."""

    word: str


Statement: TypeAlias = Assign | If | While | Leave


@dataclass(frozen=True, eq=False, slots=True)
class Program:
    """A program with classical control.

    Attributes
    ----------
    n_qubits, n_bits : int
    body : Block
    variables : tuple of (str, str)
        Names and OpenQASM types of the classical variables, beside the bits.
    qubit_registers, bit_registers : tuple of (str, int)
        Names and sizes. Bits begin as 0.
    """

    n_qubits: int
    n_bits: int
    body: Block
    variables: tuple[tuple[str, str], ...] = ()
    qubit_registers: tuple[tuple[str, int], ...] = ()
    bit_registers: tuple[tuple[str, int], ...] = ()

    def circuits(self) -> Iterator[Circuit]:
        """Yield the straight-line circuits in the order of the text."""
        return _circuits(self.body)

    def __len__(self) -> int:
        """Return the number of operations of all circuits together."""
        return sum(len(circuit) for circuit in self.circuits())

    def __repr__(self) -> str:
        """Return a short summary."""
        parts = sum(1 for circuit in self.circuits() if len(circuit))
        return f"Program({self.n_qubits} qubits, {self.n_bits} bits, {len(self)} operations in {parts} circuits)"

    def joined(self) -> Circuit:
        """Return all circuits one after another, as if every branch and every loop ran once: for counting, placing."""
        pieces: list[Piece] = []
        matrices: list[NDArray[np.complex128]] = []
        symbolic: list[tuple[Parameter, ...]] = []
        start = 0
        template: Circuit | None = None
        for circuit in self.circuits():
            template = template or circuit
            rows = np.arange(len(circuit))
            for _, piece in circuit.pieces(rows, rows + start):
                if piece.gate.name == UNITARY.name and piece.link is not None:
                    pieces.append(replace(piece, link=piece.link + len(matrices)))
                elif piece.gate.function is not None and piece.link is not None and circuit.symbolic:
                    pieces.append(replace(piece, link=np.where(piece.link < 0, -1, piece.link + len(symbolic))))
                else:
                    pieces.append(piece)
            matrices += circuit.matrices
            symbolic += circuit.symbolic
            start += len(circuit)
        assert template is not None  # a block has at least one circuit
        return assemble(
            replace(template, matrices=tuple(matrices), symbolic=tuple(symbolic)), template.n_qubits, pieces
        )[0]

    @property
    def inputs(self) -> tuple[tuple[str, str], ...]:
        """Names that the program is given values for when it runs, with their OpenQASM types."""
        return self.body.circuits[0].inputs

    def bind(self, values: Mapping[str, float]) -> Program:
        """Put numbers in the place of inputs, in gates and in classical expressions; see `Circuit.bind`."""
        known = checked_values(self.inputs, values)
        return replace(self, body=_map(self.body, lambda circuit: circuit.bind(known), known))

    def map_circuits(self, change: Callable[[Circuit], Circuit]) -> Program:
        """Return the program with every circuit replaced by what `change` makes of it."""
        return replace(self, body=_map(self.body, change))


def inner_blocks(statement: Statement) -> tuple[Block, ...]:
    """Return the blocks of a statement."""
    match statement:
        case If(_, then, otherwise):
            return then, otherwise
        case While(_, body):
            return (body,)
    return ()


def _circuits(block: Block) -> Iterator[Circuit]:
    for circuit, statement in zip(block.circuits, (*block.statements, None), strict=True):
        yield circuit
        for inner in () if statement is None else inner_blocks(statement):
            yield from _circuits(inner)


def _given(expression: Expression, values: Mapping[str, float]) -> Expression:
    """Put numbers in the place of names in an expression."""
    match expression:
        case Name(name) if name in values:
            return Literal(str(int(values[name])) if values[name].is_integer() else repr(values[name]))
        case Operation(op, operands):
            return Operation(op, tuple(_given(operand, values) for operand in operands))
    return expression


def _map(block: Block, change: Callable[[Circuit], Circuit], values: Mapping[str, float] = NO_VALUES) -> Block:
    made = []
    statements: list[Statement] = []
    for circuit, statement in zip(block.circuits, (*block.statements, None), strict=True):
        made.append(change(circuit))
        match statement:
            case If(condition, then, otherwise):
                statements.append(
                    If(_given(condition, values), _map(then, change, values), _map(otherwise, change, values))
                )
            case While(condition, body):
                statements.append(While(_given(condition, values), _map(body, change, values)))
            case Assign(target, value):
                statements.append(Assign(target, _given(value, values)))
            case Leave():
                statements.append(statement)
    return Block(tuple(made), tuple(statements))


@dataclass(frozen=True, slots=True)
class Mark:
    """A place in a flat list of operations: ``if``, ``else``, ``while``, ``close``, or a plain statement."""

    word: str
    content: Expression | Statement | None = None


def split_at_marks(circuit: Circuit, rows: Sequence[int], marks: Sequence[Mark]) -> Block:
    """Return the block that a flat circuit with marks stands for; neighbours with one condition become one ``if``.

    Parameters
    ----------
    circuit : Circuit
        Operations in the order of the text, and the marks among them.
    rows : sequence of int
        The operations that are marks, in order.
    marks : sequence of Mark
        What each is; well nested.
    """
    dropped = _between_equal_conditions(circuit, rows, marks)
    if dropped:
        marks = [mark for k, mark in enumerate(marks) if k not in dropped]
        kept = np.ones(len(circuit), dtype=bool)
        kept[[rows[k] for k in dropped]] = False
        places = np.cumsum(kept) - 1
        rows = [int(places[row]) for k, row in enumerate(rows) if k not in dropped]
        circuit = circuit.take(np.flatnonzero(kept))
    edges = [-1, *rows, len(circuit)]
    # Blocks that are open, each with its mark, circuits and statements; the outermost first.
    open_blocks: list[tuple[Mark | None, list[Circuit], list[Statement]]] = [(None, [], [])]
    finished: list[Block] = []  # first branches of ifs that are open
    for k in range(len(edges) - 1):
        _, circuits, statements = open_blocks[-1]
        circuits.append(circuit.take(np.arange(edges[k] + 1, edges[k + 1])))
        if k == len(marks):
            break
        mark = marks[k]
        if mark.word in ("if", "while"):
            open_blocks.append((mark, [], []))
            continue
        if mark.word not in ("else", "close"):
            assert isinstance(mark.content, Assign | Leave)
            statements.append(mark.content)
            continue
        opened, _, _ = open_blocks.pop()
        assert opened is not None
        block = Block(tuple(circuits), tuple(statements))
        if mark.word == "else":
            finished.append(block)
            open_blocks.append((Mark("else", opened.content), [], []))
            continue
        condition = opened.content
        assert condition is not None and not isinstance(condition, Assign | If | While | Leave)
        whole = While(condition, block) if opened.word == "while" else If(condition, finished.pop(), block)
        open_blocks[-1][2].append(whole)
    return Block(tuple(open_blocks[0][1]), tuple(open_blocks[0][2]))


def _between_equal_conditions(circuit: Circuit, rows: Sequence[int], marks: Sequence[Mark]) -> set[int]:
    """Return the marks between an ``if`` of gates alone and a next one on the same condition, if it still holds.

    OpenQASM 2 writes a condition before every single operation.
    """
    dropped: set[int] = set()
    words = [mark.word for mark in marks]
    measured = circuit.is_named(MEASURE.name)
    for k in range(len(marks) - 3):
        if words[k : k + 4] != ["if", "else", "close", "if"] or marks[k].content != marks[k + 3].content:
            continue
        if rows[k + 3] != rows[k + 1] + 2:  # something in the other branch, or between the two
            continue
        inside = np.arange(rows[k] + 1, rows[k + 1])
        bits = set(circuit.link[inside[measured[inside]]].tolist())
        condition = marks[k].content
        assert isinstance(condition, Literal | Name | Bits | Operation)
        if all(bits.isdisjoint(leaf.indices) for leaf in leaves(condition) if isinstance(leaf, Bits)):
            dropped.update((k + 1, k + 2, k + 3))
    return dropped
