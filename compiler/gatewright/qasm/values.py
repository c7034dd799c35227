"""Classical values of OpenQASM 3 that are known when compiling: types, casts, operators and functions.

After the OpenQASM 3 specification (arXiv:2104.14722), chapters on types and on classical instructions: integers of a
stated width wrap, unsized ones have 64 bits, bit 0 of a register is the rightmost of its bit string and the least
significant. Choices of this reader: an ``angle`` without a width is a real number that is not reduced; division of
integers is of reals where a real number is wanted (gate parameters, exponents of ``pow``, ``float`` and ``angle``
values) and truncates elsewhere.
"""

from __future__ import annotations

import math
import operator
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from gatewright.classical import Bits, Expression, Literal, Name, Operation
from gatewright.errors import ExpressionError, shorten
from gatewright.expressions import CONSTANTS

__all__ = [
    "BUILT_IN",
    "Array",
    "Kind",
    "Value",
    "binary",
    "blank_array",
    "cast",
    "expression",
    "function",
    "shape_of",
    "unary",
]

#: Width of integers without a stated one, and the widest that may be stated.
UNSIZED = 64
MAX_WIDTH = 4096


@dataclass(frozen=True, slots=True)
class Kind:
    """A scalar type: ``bool``, ``int``, ``uint``, ``float``, ``angle`` or ``bit``, and its width (0: not stated)."""

    name: str
    width: int = 0

    def __str__(self) -> str:
        """Return the type as the language writes it."""
        return f"{self.name}[{self.width}]" if self.width else self.name


@dataclass(frozen=True, slots=True)
class Value:
    """A scalar: its type and a Python number. Bits are an integer, bit 0 the least significant.

    What is known only when the program runs has an expression instead of the number: `is_open`.
    """

    kind: Kind
    data: Any

    @property
    def is_open(self) -> bool:
        """Whether its number is not known when compiling."""
        return isinstance(self.data, Literal | Name | Bits | Operation)

    @property
    def is_integer(self) -> bool:
        """Whether it is stored as an integer."""
        return self.kind.name in ("bool", "int", "uint", "bit")

    @property
    def bits(self) -> int:
        """Number of bits of a value that has bits."""
        if self.kind.name == "bool":
            return 1
        return self.kind.width or (1 if self.kind.name == "bit" else UNSIZED)


@dataclass(slots=True)
class Array:
    """An array: the type of its elements and nested lists of them."""

    kind: Kind
    items: list[Value | Array]

    def copy(self) -> Array:
        """Return a copy that shares nothing."""
        return Array(self.kind, [item.copy() if isinstance(item, Array) else item for item in self.items])


BUILT_IN: dict[str, Value] = {name: Value(Kind("float"), value) for name, value in CONSTANTS.items()}

_BOOL = Kind("bool")
_FLOAT = Kind("float")


def _wrap(data: int, name: str, width: int) -> int:
    """Reduce an integer to its width; width 0 keeps it."""
    if not width:
        if data.bit_length() > MAX_WIDTH:
            raise ExpressionError("an integer is too large", required=f"at most {MAX_WIDTH} bits")
        return data
    data &= (1 << width) - 1
    return data - (1 << width) if name == "int" and data >> (width - 1) else data


def _finite(value: float) -> float:
    if isinstance(value, complex) or not math.isfinite(value):
        raise ExpressionError("the value is not a finite real number", found=shorten(value, 30))
    return value


def cast(value: Value, kind: Kind, *, implicit: bool = False) -> Value:
    """Return a value in another type.

    Parameters
    ----------
    implicit : bool
        Whether it is an assignment: bits only go into as many bits.

    Raises
    ------
    ExpressionError
        If the language has no such cast, or the value does not fit.

    Examples
    --------
    >>> cast(Value(Kind("int"), 300), Kind("uint", 8)).data
    44
    """
    data, source = value.data, value.kind
    name = kind.name
    if "duration" in (name, source.name):
        if name != source.name or value.is_open:
            raise ExpressionError(f"{source} cannot become {kind}", required="a duration that is known when compiling")
        return value
    if value.is_open:
        same = source == kind or implicit
        return Value(kind, data if same else Operation(str(kind), (data,)))
    if kind.width > MAX_WIDTH:
        raise ExpressionError("a type is too wide", required=f"at most {MAX_WIDTH} bits", found=str(kind))
    if name == "bool":
        return Value(kind, bool(data))
    if name in ("int", "uint"):
        if source.name == "angle":
            raise ExpressionError(f"an angle cannot become {kind}", required="bits or a real number between")
        whole = int(_finite(data))
        if not kind.width and not -(2 ** (UNSIZED - 1)) <= whole < 2 ** (UNSIZED - (name == "int")):
            raise ExpressionError(f"a value does not fit {kind}", required=f"{UNSIZED} bits", found=shorten(whole, 30))
        if not kind.width and name == "uint" and whole < 0:
            whole = _wrap(whole, name, UNSIZED)
        return Value(kind, _wrap(whole, name, kind.width))
    if name == "bit":
        width = kind.width or 1
        if source.name == "float":
            raise ExpressionError("a real number cannot become bits", required="an integer or bits")
        if source.name == "angle":
            if source.width != width:
                raise ExpressionError(f"{source} cannot become {kind}", required="equal widths")
            data = round(data / math.tau * 2**width)
        if implicit and source.name == "bit" and value.bits != width:
            raise ExpressionError("bits of another number", required=str(width), found=str(value.bits))
        return Value(Kind("bit", kind.width), int(data) & ((1 << width) - 1))
    if name == "float":
        try:
            return Value(kind, _finite(float(data)))
        except OverflowError:
            raise ExpressionError("a value is too large for a real number") from None
    if name == "angle":
        if source.name == "bit" and kind.width:
            if value.bits != kind.width:
                raise ExpressionError(f"{value.bits} bits cannot become {kind}", required="equal widths")
            return Value(kind, data * math.tau / 2**kind.width)
        data = _finite(float(data))
        if kind.width:
            data = (round(data / math.tau * 2**kind.width) % 2**kind.width) * math.tau / 2**kind.width
        return Value(kind, data)
    raise ExpressionError(f"values of type {kind} are not known when compiling")


_COMPARISONS: dict[str, Callable[[float, float], bool]] = {
    "==": operator.eq,
    "!=": operator.ne,
    "<": operator.lt,
    "<=": operator.le,
    ">": operator.gt,
    ">=": operator.ge,
}
_BITWISE: dict[str, Callable[[int, int], int]] = {"&": operator.and_, "|": operator.or_, "^": operator.xor}


def _common(a: Value, b: Value) -> Kind:
    """Return the type of arithmetic between two integers: unsigned wins, and the wider of stated widths."""
    unsigned = "uint" in (a.kind.name, b.kind.name)
    widths = [v.kind.width for v in (a, b) if v.kind.name in ("int", "uint") and v.kind.width]
    if not widths and unsigned:
        return Kind("uint", 0)
    return Kind("uint" if unsigned else "int", max(widths, default=0))


def _integer(a: Value) -> int:
    if not a.is_integer:
        raise ExpressionError("an integer, bits or a truth value is required", found=str(a.kind))
    return int(a.data)


def binary(op: str, a: Value, b: Value, *, real: bool = False) -> Value:
    """Return the value of a binary operator; `real` makes division of integers one of reals.

    Raises
    ------
    ExpressionError

    Examples
    --------
    >>> seven, two = Value(Kind("int"), 7), Value(Kind("int"), 2)
    >>> binary("/", seven, two).data, binary("/", seven, two, real=True).data
    (3, 3.5)
    """
    if "duration" in (a.kind.name, b.kind.name):
        return _duration(op, a, b)
    if a.is_open or b.is_open:
        return _open_binary(op, a, b, real=real)
    if op in _COMPARISONS:
        return Value(_BOOL, _COMPARISONS[op](a.data, b.data))
    if op == "&&":
        return Value(_BOOL, bool(a.data) and bool(b.data))
    if op == "||":
        return Value(_BOOL, bool(a.data) or bool(b.data))
    if op in _BITWISE:
        data = _BITWISE[op](_integer(a), _integer(b))
        if "bit" in (a.kind.name, b.kind.name):
            width = max(v.bits for v in (a, b) if v.kind.name == "bit")
            sizes = {v.bits for v in (a, b) if v.kind.name == "bit"}
            if len(sizes) > 1:
                raise ExpressionError(f"'{op}' between bits of different numbers", found=f"{a.bits} and {b.bits}")
            return Value(Kind("bit", width), data & ((1 << width) - 1))
        if a.kind.name == b.kind.name == "bool":
            return Value(_BOOL, bool(data))
        kind = _common(a, b)
        return Value(kind, _wrap(data, kind.name, kind.width))
    if op in ("<<", ">>"):
        return _shift(op, a, _integer(b))
    if a.is_integer and b.is_integer and not (op == "/" and real):
        return _whole(op, int(a.data), int(b.data), _common(a, b))
    return _real(op, a, b)


def _duration(op: str, a: Value, b: Value) -> Value:
    """Return a sum, a difference, a multiple, a quotient or a comparison of durations."""
    if a.is_open or b.is_open:
        raise ExpressionError("a duration depends on the run", required="a duration that is known when compiling")
    both = a.kind.name == b.kind.name
    if both and op in _COMPARISONS:
        return Value(_BOOL, _COMPARISONS[op](a.data, b.data))
    if not (op in ("+", "-", "/") if both else op == "*" or (op == "/" and a.kind.name == "duration")):
        raise ExpressionError(f"'{op}' between {a.kind} and {b.kind}", required="durations, or multiples of them")
    value = _real(op, Value(_FLOAT, a.data), Value(_FLOAT, b.data))
    return value if both and op == "/" else Value(Kind("duration"), value.data)


def expression(value: Value) -> Expression:
    """Return a value as an expression: a literal where it is known."""
    data = value.data
    if value.is_open:
        return data  # type: ignore[no-any-return]
    if value.kind.name == "bool":
        return Literal("true" if data else "false")
    if value.kind.name == "duration":
        return Literal(f"{data!r}ns")
    if value.kind.name == "bit" and value.kind.width:
        return Literal(f'"{int(data):0{value.kind.width}b}"')
    return Literal(repr(data) if isinstance(data, float) else str(int(data)))


def _open_binary(op: str, a: Value, b: Value, *, real: bool) -> Value:
    """Return the expression of an operator whose operands are not both known."""
    left, right = expression(a), expression(b)
    if op in _COMPARISONS or op in ("&&", "||"):
        return Value(_BOOL, Operation(op, (left, right)))
    kind = a.kind
    if op in _BITWISE or op in ("<<", ">>"):
        for value in (a, b):
            if not value.is_integer and value.kind.name != "angle":
                raise ExpressionError("an integer, bits or a truth value is required", found=str(value.kind))
        if op in _BITWISE and "bit" not in (a.kind.name, b.kind.name) and a.kind != b.kind:
            kind = _common(a, b)
    elif a.is_integer and b.is_integer:
        kind = _common(a, b)
        if op == "/" and real:
            kind, left = _FLOAT, Operation("float", (left,))
    else:
        angles = [value.kind for value in (a, b) if value.kind.name == "angle"]
        kind = angles[0] if len(angles) == 1 or (angles and op in "+-") else _FLOAT
    return Value(kind, Operation(op, (left, right)))


def _shift(op: str, a: Value, places: int) -> Value:
    data = _integer(a)
    if not 0 <= places <= MAX_WIDTH:
        raise ExpressionError("a shift is out of range", required=f"0 to {MAX_WIDTH}", found=shorten(places, 30))
    data = data << places if op == "<<" else data >> places
    if a.kind.name == "bit":
        return Value(a.kind, data & ((1 << a.bits) - 1))
    kind = a.kind if a.kind.name != "bool" else Kind("int")
    return Value(kind, _wrap(data, kind.name, kind.width))


def _whole(op: str, x: int, y: int, kind: Kind) -> Value:
    if op in ("/", "%") and y == 0:
        raise ExpressionError("division by zero")
    if op == "**":
        if y < 0:
            return _real(op, Value(kind, x), Value(kind, y))
        if y * x.bit_length() > 2 * MAX_WIDTH:
            raise ExpressionError("an integer is too large", required=f"at most {MAX_WIDTH} bits")
        data = x**y
    elif op in ("/", "%"):
        quotient = abs(x) // abs(y)
        quotient = quotient if (x < 0) == (y < 0) else -quotient
        data = quotient if op == "/" else x - y * quotient
    else:
        data = {"+": operator.add, "-": operator.sub, "*": operator.mul}[op](x, y)
    if kind.name == "uint" and not kind.width and data < 0:
        data &= (1 << UNSIZED) - 1
    return Value(kind, _wrap(data, kind.name, kind.width))


def _real(op: str, a: Value, b: Value) -> Value:
    try:
        x, y = float(a.data), float(b.data)
        if op == "+":
            data = x + y
        elif op == "-":
            data = x - y
        elif op == "*":
            data = x * y
        elif op == "/":
            data = x / y
        elif op == "%":
            data = math.fmod(x, y)
        else:
            data = x**y
    except ZeroDivisionError:
        raise ExpressionError("division by zero") from None
    except (ArithmeticError, ValueError):
        raise ExpressionError("the value is not a finite real number") from None
    # A product or quotient of an angle of stated width keeps that type in the language: it stays on its grid.
    kinds = {v.kind for v in (a, b) if v.kind.name == "angle" and v.kind.width}
    if len(kinds) == 1 and (op in "+-" or (op in "*/" and not b.kind.name == "angle")):
        return cast(Value(_FLOAT, data), kinds.pop())
    return Value(_FLOAT, _finite(data))


def unary(op: str, a: Value) -> Value:
    """Return the value of ``-``, ``!`` or ``~``."""
    if a.is_open:
        return Value(_BOOL if op == "!" else a.kind, Operation(op, (a.data,)))
    if a.kind.name == "duration":
        if op != "-":
            raise ExpressionError(f"'{op}' of a duration", required="'-'")
        return Value(a.kind, -a.data)
    if op == "!":
        return Value(_BOOL, not a.data)
    if op == "~":
        data = ~_integer(a)
        if a.kind.name in ("bit", "uint"):
            return Value(a.kind, data & ((1 << a.bits) - 1))
        return Value(Kind("int", a.kind.width), data)
    if a.is_integer:
        return _whole("-", 0, int(a.data), _common(a, a))
    if a.kind.name == "angle" and a.kind.width:
        return cast(Value(_FLOAT, -a.data), a.kind)
    return Value(_FLOAT, -a.data)


_REALS: dict[str, Callable[[float], float]] = {
    "arccos": math.acos,
    "arcsin": math.asin,
    "arctan": math.atan,
    "cos": math.cos,
    "exp": math.exp,
    "ln": math.log,
    "log": math.log,
    "sin": math.sin,
    "sqrt": math.sqrt,
    "tan": math.tan,
}


def function(name: str, values: Sequence[Value]) -> Value | None:
    """Return the value of a built-in function, or None if there is none of that name.

    Raises
    ------
    ExpressionError
        For wrong arguments.

    Examples
    --------
    >>> function("popcount", [Value(Kind("bit", 4), 0b1011)]).data
    3
    """
    wanted = {"mod": 2, "rotl": 2, "rotr": 2}.get(name, 1)
    if name not in _REALS and name not in ("mod", "rotl", "rotr", "popcount", "ceiling", "floor"):
        return None
    if len(values) != wanted:
        raise ExpressionError(f"wrong number of arguments for '{name}'", required=str(wanted), found=str(len(values)))
    a = values[0]
    if any(value.is_open for value in values):
        kinds = {"mod": a.kind, "rotl": a.kind, "rotr": a.kind, "popcount": Kind("uint")}
        whole = Kind("int") if name in ("ceiling", "floor") else _FLOAT
        return Value(kinds.get(name, whole), Operation(name, tuple(expression(value) for value in values)))
    if name in _REALS:
        try:
            return Value(_FLOAT, _finite(_REALS[name](float(a.data))))
        except (ArithmeticError, ValueError):
            raise ExpressionError(f"'{name}' has no finite value here", found=shorten(a.data, 30)) from None
    if name == "mod":
        return binary("%", a, values[1])
    if name == "popcount":
        return Value(Kind("uint"), (_integer(a) & ((1 << a.bits) - 1)).bit_count())
    if name in ("ceiling", "floor"):
        return Value(Kind("int"), math.ceil(a.data) if name == "ceiling" else math.floor(a.data))
    data, width = _integer(a), a.bits
    places = _integer(values[1]) % width
    if name == "rotr":
        places = width - places
    data &= (1 << width) - 1
    data = ((data << places) | (data >> (width - places))) & ((1 << width) - 1)
    return Value(a.kind, _wrap(data, a.kind.name, width))


def blank_array(kind: Kind, sizes: Sequence[int]) -> Array:
    """Return an array of zeros: the language leaves the first values open."""
    if len(sizes) == 1:
        return Array(kind, [cast(Value(Kind("bit"), 0) if kind.name != "angle" else Value(kind, 0), kind)] * sizes[0])
    return Array(kind, [blank_array(kind, sizes[1:]) for _ in range(sizes[0])])


def shape_of(array: Array) -> list[int]:
    """Return the sizes of an array."""
    sizes = [len(array.items)]
    while array.items and isinstance(array.items[0], Array):
        array = array.items[0]
        sizes.append(len(array.items))
    return sizes
