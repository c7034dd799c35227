"""Classical expressions whose value is known only when the program runs: trees of literals, names, bits, operators.

They come out of measured bits and of inputs. gatewright never evaluates them: it keeps them, compares them, and
writes them as OpenQASM. The operators and their order are those of the OpenQASM 3 specification (arXiv:2104.14722).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import TypeAlias

__all__ = ["Bits", "Expression", "Literal", "Name", "Operation", "bits_text", "depth_of", "expression_text", "leaves"]


@dataclass(frozen=True, slots=True)
class Literal:
    """A constant, as OpenQASM writes it."""

    text: str


@dataclass(frozen=True, slots=True)
class Name:
    """A classical variable or an input."""

    name: str


@dataclass(frozen=True, slots=True)
class Bits:
    """Classical bits of the circuit by number, the least significant first; `single` is one of them, no register."""

    indices: tuple[int, ...]
    single: bool = False


@dataclass(frozen=True, slots=True)
class Operation:
    """An operator, a built-in function, or a cast (`op` is the name of the type), with its operands."""

    op: str
    operands: tuple[Expression, ...]


Expression: TypeAlias = Literal | Name | Bits | Operation

#: How tightly the operators of two operands bind.
_BINDING = {
    operator: strength
    for strength, operators in enumerate(
        ("||", "&&", "|", "^", "&", "== !=", "< <= > >=", "<< >>", "+ -", "* / %", "**"), start=1
    )
    for operator in operators.split()
}
_UNARY = 12


def depth_of(expression: Expression | object | None) -> int:
    """Return the levels of operations in each other, 0 for a leaf.

    Examples
    --------
    >>> depth_of(Operation("+", (Name("k"), Operation("-", (Literal("1"),)))))
    2
    """
    level, waiting = 0, [expression]
    while waiting := [inner for part in waiting if isinstance(part, Operation) for inner in part.operands]:
        level += 1
    return level


def leaves(expression: Expression) -> Iterator[Literal | Name | Bits]:
    """Yield the literals, names and bits of an expression, left to right."""
    waiting = [expression]
    while waiting:
        part = waiting.pop()
        if isinstance(part, Operation):
            waiting.extend(reversed(part.operands))
        else:
            yield part


def expression_text(expression: Expression, bit_text: Callable[[Bits], str]) -> str:
    """Return an expression as OpenQASM, with no more parentheses than it needs.

    Parameters
    ----------
    expression : Expression
    bit_text : callable
        Gives the text of bits; see `bits_text`.

    Examples
    --------
    >>> tree = Operation("==", (Operation("+", (Name("n"), Literal("1"))), Literal("3")))
    >>> expression_text(Operation("!", (tree,)), repr)
    '!(n + 1 == 3)'
    """
    return _text(expression, bit_text, 0)


def _text(expression: Expression, bit_text: Callable[[Bits], str], outside: int) -> str:
    match expression:
        case Literal(text):
            return f"({text})" if text.startswith("-") and outside else text
        case Name(name):
            return name
        case Bits():
            return bit_text(expression)
        case Operation(op, (left, right)) if op in _BINDING:
            strength = _BINDING[op]
            # The operators group to the left, but for the power, which groups to the right.
            tighter = (1, 0) if op == "**" else (0, 1)
            text = (
                f"{_text(left, bit_text, strength + tighter[0])} {op} {_text(right, bit_text, strength + tighter[1])}"
            )
            return f"({text})" if strength < outside else text
        case Operation(op, (inner,)) if op in ("-", "!", "~"):
            text = op + _text(inner, bit_text, _UNARY)
            return f"({text})" if outside > _UNARY - 1 else text
        case Operation(op, operands):
            return f"{op}({', '.join(_text(operand, bit_text, 0) for operand in operands)})"


def bits_text(bits: Bits, registers: Sequence[tuple[str, int]]) -> str:
    """Return bits as registers, elements and ranges of them.

    Parameters
    ----------
    bits : Bits
    registers : sequence of (str, int)
        Names and sizes, in order.

    Examples
    --------
    >>> registers = [("a", 2), ("b", 4)]
    >>> [bits_text(bits, registers) for bits in (Bits((2, 3, 4, 5)), Bits((1,), True), Bits((1, 3, 5)))]
    ['b', 'a[1]', 'a[{1}] ++ b[{1, 3}]']
    """
    if not bits.indices:
        raise ValueError("no bits")
    where: dict[int, tuple[str, int, int]] = {}
    start = 0
    for name, size in registers:
        where.update({start + k: (name, k, size) for k in range(size)})
        start += size
    if bits.single:
        name, k, _ = where[bits.indices[0]]
        return f"{name}[{k}]"
    parts: list[str] = []
    run: list[tuple[str, int, int]] = []
    for place in [*map(where.__getitem__, bits.indices), None]:
        if run and (place is None or place[0] != run[0][0]):
            name, _, size = run[0]
            chosen = [k for _, k, _ in run]
            low, high = chosen[0], chosen[-1]
            if chosen == list(range(size)):
                parts.append(name)
            elif len(chosen) > 1 and chosen == list(range(low, high + 1)):
                parts.append(f"{name}[{low}:{high}]")
            else:
                parts.append(f"{name}[{{{', '.join(map(str, chosen))}}}]")
            run = []
        if place is not None:
            run.append(place)
    return " ++ ".join(parts)
