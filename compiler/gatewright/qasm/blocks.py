"""The text of a program with classical control: blocks of statements, indented, around the circuits' own lines."""

from __future__ import annotations

from collections.abc import Callable, Iterator

from gatewright.circuit import Circuit
from gatewright.classical import Bits, Expression, Literal, Operation, expression_text
from gatewright.errors import CircuitError
from gatewright.program import Assign, Block, If, Leave, Statement, While

__all__ = ["block_lines", "conditional_lines"]

INDENT = "  "


def block_lines(
    block: Block, lines_of: Callable[[Circuit], list[str]], bit_text: Callable[[Bits], str], indent: str = ""
) -> Iterator[str]:
    """Yield the lines of a block in OpenQASM 3.

    Parameters
    ----------
    block : Block
    lines_of : callable
        Gives a circuit's lines, without indentation.
    bit_text : callable
        Gives the text of bits.
    """
    for circuit, statement in zip(block.circuits, (*block.statements, None), strict=True):
        yield from (indent + line for line in lines_of(circuit))
        match statement:
            case Assign(target, value):
                yield f"{indent}{_text(target, bit_text)} = {_text(value, bit_text)};"
            case Leave(word):
                yield f"{indent}{word};"
            case While(condition, body):
                yield f"{indent}while ({_text(condition, bit_text)}) {{"
                yield from block_lines(body, lines_of, bit_text, indent + INDENT)
                yield indent + "}"
            case If(condition, then, otherwise):
                inside = list(block_lines(then, lines_of, bit_text, indent + INDENT))
                other = list(block_lines(otherwise, lines_of, bit_text, indent + INDENT))
                yield f"{indent}if ({_text(condition, bit_text)}) {{"
                yield from inside
                if other:
                    yield indent + "} else {"
                    yield from other
                yield indent + "}"


def _text(expression: Expression, bit_text: Callable[[Bits], str]) -> str:
    return expression_text(expression, bit_text)


def conditional_lines(
    block: Block, lines_of: Callable[[Circuit], list[str]], bit_text: Callable[[Bits], str]
) -> Iterator[str]:
    """Yield the lines of a block in OpenQASM 2, which knows ``if(register==integer)`` before single operations.

    Raises
    ------
    CircuitError
        Where the language cannot say it.
    """
    for circuit, statement in zip(block.circuits, (*block.statements, None), strict=True):
        yield from lines_of(circuit)
        if statement is not None:
            yield from _conditional(statement, lines_of, bit_text)


def _conditional(
    statement: Statement, lines_of: Callable[[Circuit], list[str]], bit_text: Callable[[Bits], str]
) -> Iterator[str]:
    match statement:
        case If(Operation("==", (Bits() as bits, Literal(number))), then, otherwise) if (
            number.isdigit()
            and not then.statements
            and not otherwise.statements
            and not len(otherwise.circuits[0])
            and "[" not in (register := bit_text(bits))
        ):
            lines = lines_of(then.circuits[0])
            if any(line.startswith("measure") for line in lines[:-1]):
                raise CircuitError(
                    "OpenQASM 2 cannot measure inside a condition and go on with the same condition",
                    hint="write OpenQASM 3",
                )
            yield from (line if line.startswith("//") else f"if({register}=={number}) {line}" for line in lines)
        case _:
            raise CircuitError(
                "this classical control cannot be written in OpenQASM 2",
                required="if(register==integer) without else",
                hint="write OpenQASM 3",
            )
