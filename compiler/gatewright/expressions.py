"""A small safe reader of angle and matrix-entry expressions: ``exp(-i*theta/2)``, ``3*pi/8``, ``-2^2``.

The text is split into tokens and turned into postfix order by Dijkstra's shunting-yard method (Mathematical
Centre report MR 35, 1961): no recursion, and nothing is ever executed. Powers bind tighter than signs and group to
the right (``-2^2`` is −4, ``2^3^2`` is 512), as in OpenQASM (arXiv:2104.14722). Numbers are reals, so ``1/2`` is 0.5.
"""

from __future__ import annotations

import cmath
import functools
import math
import operator
import re
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import ExpressionError, nearest_name, shorten

if TYPE_CHECKING:
    import sympy

__all__ = ["CONSTANTS", "FUNCTIONS", "MAX_DEPTH", "MAX_LENGTH", "MAX_TOKENS", "Expression", "parse"]

#: Limits on one expression: characters, tokens, levels of parentheses, signs and powers open at once.
MAX_LENGTH = 10_000
MAX_TOKENS = 4_000
MAX_DEPTH = 100

#: Named constants.
CONSTANTS: dict[str, float] = {
    "pi": math.pi,
    "π": math.pi,
    "tau": math.tau,
    "τ": math.tau,
    "euler": math.e,
    "ℇ": math.e,
}

#: Functions of one argument.
FUNCTIONS = ("arccos", "arcsin", "arctan", "cos", "exp", "ln", "log", "sin", "sqrt", "tan")

_TOKEN = re.compile(
    r"""\s*(?:
    (?P<number>0[xX][0-9a-fA-F]+|0[bB][01]+|0[oO][0-7]+|(?:[0-9][0-9_]*\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)
    |(?P<name>[^\W\d]\w*)
    |(?P<operator>\*\*|[-+*/^()])
    |(?P<other>\S)
    )""",
    re.VERBOSE,
)

_PRECEDENCE = {"+": 1, "-": 1, "*": 2, "/": 2, "neg": 3, "pos": 3, "pow": 4}
_MAX = np.finfo(np.float64).max
_PROBLEMS = (ArithmeticError, ValueError)  # what Python and NumPy raise for 1/0, overflow, ln 0

Scalar = float | complex
Values = Mapping[str, ArrayLike]


class _Step(NamedTuple):
    """One step of the postfix program: ``number``, ``name``, ``i``, ``neg``, a binary operator or a function."""

    kind: str
    column: int
    number: float = 0.0
    name: str = ""


@dataclass(frozen=True, slots=True)
class Expression:
    """An expression that has been read; `parse` makes it.

    Attributes
    ----------
    text : str
        As it was given.
    names : tuple of str
        The declared names that occur, in order of first appearance.
    """

    text: str
    names: tuple[str, ...]
    steps: tuple[_Step, ...] = field(repr=False, compare=False)

    def evaluate(self, values: Values | None = None) -> NDArray[np.complex128]:
        """Return the value for arrays of the names.

        Parameters
        ----------
        values : mapping of str to array_like
            Real or complex; they broadcast against each other, including those that do not occur.

        Returns
        -------
        ndarray of complex, shape of all `values` broadcast together

        Raises
        ------
        ExpressionError
            A name without a value, a division by zero, an overflow, or a value that is not finite.

        Examples
        --------
        >>> parse("theta/2 + i", names=["theta"]).evaluate({"theta": [0.0, 1.0]}).tolist()
        [1j, (0.5+1j)]
        """
        arrays = {name: _array(value) for name, value in (values or {}).items()}
        with np.errstate(divide="raise", over="raise", invalid="raise", under="ignore"):
            result = self._run(arrays, _ARRAY_FUNCTIONS)
        shape = np.broadcast_shapes(*(a.shape for a in arrays.values()))
        return np.array(np.broadcast_to(result, shape), dtype=np.complex128)

    def value(self) -> complex:
        """Return the value of an expression without names.

        Examples
        --------
        >>> parse("(1+i)/sqrt(2)").value()
        (0.7071067811865475+0.7071067811865475j)
        """
        return complex(self._run({}, _SCALAR_FUNCTIONS))

    def real(self, values: Mapping[str, float] | None = None) -> float:
        """Return the value as a real number, for single numbers as values of the names.

        Raises
        ------
        ExpressionError
            As for `evaluate`, and where the imaginary part is more than rounding.

        Examples
        --------
        >>> parse("-2^2 + x", names=["x"]).real({"x": 0.5})
        -3.5
        """
        result = self._run(values or {}, _SCALAR_FUNCTIONS)
        if not isinstance(result, complex):
            return float(result)
        if abs(result.imag) > 1e-12 * max(1.0, abs(result)):
            raise ExpressionError(
                f"'{shorten(self.text)}' is not real", required="a real number", found=f"{result:.6g}", column=1
            )
        return result.real

    def to_sympy(self) -> sympy.Expr:
        """Return the expression in SymPy: names as real symbols, decimals as rationals.

        Examples
        --------
        >>> parse("exp(-i*t/2)", names=["t"]).to_sympy()
        exp(-I*t/2)
        """
        import sympy

        constants = {math.pi: sympy.pi, math.tau: 2 * sympy.pi, math.e: sympy.E}
        functions = {
            "arccos": sympy.acos, "arcsin": sympy.asin, "arctan": sympy.atan, "cos": sympy.cos, "exp": sympy.exp,
            "ln": sympy.log, "log": sympy.log, "sin": sympy.sin, "sqrt": sympy.sqrt, "tan": sympy.tan,
        }  # fmt: skip
        stack: list[Any] = []
        for step in self.steps:
            if step.kind == "number":
                stack.append(_sympy_number(step.number))
            elif step.kind == "constant":
                stack.append(constants[step.number])
            elif step.kind == "name":
                stack.append(sympy.Symbol(step.name, real=True))
            elif step.kind == "i":
                stack.append(sympy.I)
            elif step.kind == "neg":
                stack.append(-stack.pop())
            elif step.kind in functions:
                stack.append(functions[step.kind](stack.pop()))
            else:
                second, first = stack.pop(), stack.pop()
                stack.append(_sympy_power(first, second) if step.kind == "pow" else _BINARY[step.kind](first, second))
            if stack[-1].has(sympy.zoo, sympy.nan, sympy.oo, -sympy.oo):
                raise self._not_finite(step)
        return stack[0]

    def _run(self, values: Mapping[str, Any], functions: Mapping[str, Callable[..., Any]]) -> Any:
        stack: list[Any] = []
        result: Any
        for step in self.steps:
            kind = step.kind
            try:
                if kind == "number" or kind == "constant":
                    stack.append(step.number)
                    continue
                if kind == "name":
                    result = values[step.name]
                elif kind == "i":
                    result = 1j
                elif kind in _BINARY:
                    second = stack.pop()
                    binary = functions.get(kind) or _BINARY[kind]
                    result = binary(stack.pop(), second)
                else:
                    result = functions[kind](stack.pop())
            except KeyError:
                what = f"no value for '{step.name}' in '{shorten(self.text)}'"
                raise ExpressionError(what, column=step.column) from None
            except _PROBLEMS:
                raise self._not_finite(step) from None
            if not _finite(result):
                raise self._not_finite(step)
            stack.append(result)
        return stack[0]

    def _not_finite(self, step: _Step) -> ExpressionError:
        what = {"/": "a division by zero", "pow": "a power", "name": f"a value of '{step.name}'", "*": "a product"}
        return ExpressionError(
            f"'{shorten(self.text)}' has no finite value",
            required="a finite number",
            found=f"{what.get(step.kind, repr(step.kind))} that has none",
            column=step.column,
        )


def parse(
    text: str, *, names: Iterable[str] = (), power: Iterable[str] = ("^", "**"), imaginary: bool = True
) -> Expression:
    """Read an expression: numbers, constants, names, ``+ - * /``, powers, signs, parentheses, functions.

    Parameters
    ----------
    text : str
    names : iterable of str
        Variables that may occur. They may not be called like a function, ``pi``, or the imaginary unit.
    power : iterable of str
        How a power may be written.
    imaginary : bool
        Whether ``i`` and ``j`` are the imaginary unit, alone or behind a number (``0.5i``).

    Returns
    -------
    Expression

    Raises
    ------
    ExpressionError
        With the column in `text` (counted from 1), what was required and what was found.

    Examples
    --------
    >>> parse("3*pi/8").real() == 3 * np.pi / 8
    True
    >>> parse("exp(-i*theta/2)", names=["theta"]).names
    ('theta',)
    """
    if not isinstance(text, str):
        raise ExpressionError("an expression is not text", required="text", found=type(text).__name__)
    if len(text) > MAX_LENGTH:
        raise ExpressionError(
            "an expression is too long", required=f"{MAX_LENGTH} characters at most", found=f"{len(text)}", column=1
        )
    declared = frozenset(names)
    reserved = {*FUNCTIONS, "pi", "π", *(("i", "j") if imaginary else ())}
    if taken := sorted(declared & reserved):
        raise ExpressionError(f"'{taken[0]}' cannot be the name of a variable", required="a name not in use")
    return _Reader(text, declared, frozenset(power), imaginary).read()


class _Reader:
    """One pass of the shunting-yard method over the tokens."""

    def __init__(self, text: str, declared: frozenset[str], power: frozenset[str], imaginary: bool) -> None:
        self.text = text
        self.declared = declared
        self.power = power
        self.imaginary = imaginary
        self.steps: list[_Step] = []
        self.waiting: list[tuple[str, int]] = []  # operators, functions and parentheses not yet written out
        self.depth = 0

    def read(self) -> Expression:
        operand_next = True
        for column, kind, token in self.tokens():
            operand_next = (self.operand if operand_next else self.operation)(column, kind, token)
        end = len(self.text.rstrip()) + 1
        if operand_next:
            raise self.error("the expression is empty" if end == 1 else "the expression ends early", end, "")
        while self.waiting:
            kind, column = self.waiting.pop()
            if kind == "(":
                raise self.error("a parenthesis is not closed", column, "(", "a matching ')'")
            self.write(kind, column)
        used = dict.fromkeys(step.name for step in self.steps if step.kind == "name")
        return Expression(self.text, tuple(used), tuple(self.steps))

    def tokens(self) -> Iterator[tuple[int, str, str]]:
        for count, match in enumerate(_TOKEN.finditer(self.text)):
            kind = match.lastgroup or "other"
            column = match.start(kind) + 1
            if count >= MAX_TOKENS:
                raise ExpressionError(
                    "an expression has too many parts", required=f"{MAX_TOKENS} at most", column=column
                )
            yield column, kind, match[kind]

    def operand(self, column: int, kind: str, token: str) -> bool:
        """Take a token where a value must begin; return whether a value is still due."""
        if self.waiting and self.waiting[-1][0] in FUNCTIONS and token != "(":
            name = self.waiting[-1][0]
            raise self.error(f"'{name}' is a function", column, token, f"'(' behind it, as in {name}(x)")
        if kind == "number":
            self.steps.append(_Step("number", column, self.number(column, token)))
            return False
        if kind == "name":
            return self.word(column, token)
        if token in ("+", "-"):
            self.wait("neg" if token == "-" else "pos", column)
            return True
        if token == "(":
            self.wait("(", column)
            return True
        raise self.error("a value is missing", column, token)

    def word(self, column: int, token: str) -> bool:
        if token in self.declared:
            self.steps.append(_Step("name", column, name=token))
        elif token in CONSTANTS:
            self.steps.append(_Step("constant", column, CONSTANTS[token]))
        elif token in FUNCTIONS:
            self.waiting.append((token, column))
            return True
        elif self.imaginary and token in ("i", "j"):
            self.steps.append(_Step("i", column))
        else:
            known = {*self.declared, "pi", "tau", "euler", *FUNCTIONS, *(("i",) if self.imaginary else ())}
            raise ExpressionError(
                f"unknown name '{shorten(token)}' in '{shorten(self.text)}'",
                hint=nearest_name(token, known),
                column=column,
            )
        return False

    def operation(self, column: int, kind: str, token: str) -> bool:
        """Take a token behind a value; return whether another value is due."""
        if token == ")":
            while self.waiting and self.waiting[-1][0] != "(":
                self.write(*self.waiting.pop())
            if not self.waiting:
                raise self.error("a parenthesis is not opened", column, token)
            self.waiting.pop()
            self.depth -= 1
            if self.waiting and self.waiting[-1][0] in FUNCTIONS:
                self.write(*self.waiting.pop())
            return False
        if kind == "name" and self.imaginary and token in ("i", "j") and self.follows_number(column):
            self.steps += [_Step("i", column), _Step("*", column)]
            return False
        symbol = "pow" if token in self.power else token
        precedence = _PRECEDENCE.get(symbol, 0) if kind == "operator" else 0
        if not precedence:
            wrong_power = self.power and token in ("^", "**")
            meant = f"a power written '{min(self.power)}'" if wrong_power else "an operator"
            raise self.error("an operator is missing", column, token, meant)
        # Equal precedence: left first, except that powers group to the right.
        least = precedence + 1 if symbol == "pow" else precedence
        while self.waiting and _PRECEDENCE.get(self.waiting[-1][0], 0) >= least:
            self.write(*self.waiting.pop())
        self.wait(symbol, column)
        return True

    def follows_number(self, column: int) -> bool:
        return self.steps[-1].kind == "number" and self.text[column - 2 : column - 1] in frozenset("0123456789.")

    def wait(self, kind: str, column: int) -> None:
        self.waiting.append((kind, column))
        if kind in ("(", "neg", "pos", "pow"):
            self.depth += 1
            if self.depth > MAX_DEPTH:
                raise ExpressionError(
                    "an expression is nested too deeply", required=f"{MAX_DEPTH} levels at most", column=column
                )

    def write(self, kind: str, column: int) -> None:
        if kind in ("neg", "pos", "pow"):
            self.depth -= 1
        if kind != "pos":
            self.steps.append(_Step(kind, column))

    def number(self, column: int, token: str) -> float:
        try:
            value = float(int(token, 0)) if token[:2].lower() in ("0x", "0b", "0o") else float(token)
        except (ValueError, OverflowError):
            value = math.inf
        if math.isinf(value):
            raise self.error("a number cannot be read", column, token, "a finite number")
        return value

    def error(self, what: str, column: int, token: str, required: str = "") -> ExpressionError:
        return ExpressionError(
            f"{what} in '{shorten(self.text)}'" if self.text.strip() else what,
            required=required or "a number, a name, or '('",
            found=f"'{shorten(token)}'" if token else "the end",
            column=column,
        )


def _array(value: ArrayLike) -> NDArray[Any]:
    array = np.asarray(value)
    return array.astype(np.complex128 if np.iscomplexobj(array) else np.float64)


def _finite(value: Any) -> bool:
    if isinstance(value, np.ndarray):
        return bool(np.isfinite(value).all())
    if isinstance(value, complex):
        return cmath.isfinite(value)
    return bool(-_MAX <= value <= _MAX)


def _scalar(real: Callable[[float], float], general: Callable[[complex], complex]) -> Callable[[Scalar], Scalar]:
    """Return `real` for real arguments where it is defined, else `general`."""

    def function(x: Scalar) -> Scalar:
        if isinstance(x, complex):
            return general(x)
        try:
            return real(x)
        except ValueError:
            return general(x)

    return function


def _array_power(x: Any, p: Any) -> Any:
    if np.iscomplexobj(x) or np.iscomplexobj(p) or not np.any((np.less(x, 0)) & (p != np.rint(p))):
        return np.asarray(x) ** p
    return np.asarray(x, np.complex128) ** p


_BINARY: dict[str, Callable[[Any, Any], Any]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": operator.truediv,
    "pow": operator.pow,
}

_SCALAR_FUNCTIONS: dict[str, Callable[..., Any]] = {
    "neg": operator.neg,
    "arccos": _scalar(math.acos, cmath.acos),
    "arcsin": _scalar(math.asin, cmath.asin),
    "arctan": _scalar(math.atan, cmath.atan),
    "cos": _scalar(math.cos, cmath.cos),
    "exp": _scalar(math.exp, cmath.exp),
    "ln": _scalar(math.log, cmath.log),
    "log": _scalar(math.log, cmath.log),
    "sin": _scalar(math.sin, cmath.sin),
    "sqrt": _scalar(math.sqrt, cmath.sqrt),
    "tan": _scalar(math.tan, cmath.tan),
}

_ARRAY_FUNCTIONS: dict[str, Callable[..., Any]] = {
    "neg": np.negative,
    "/": np.divide,
    "pow": _array_power,
    "arccos": np.emath.arccos,
    "arcsin": np.emath.arcsin,
    "arctan": np.arctan,
    "cos": np.cos,
    "exp": np.exp,
    "ln": np.emath.log,
    "log": np.emath.log,
    "sin": np.sin,
    "sqrt": np.emath.sqrt,
    "tan": np.tan,
}


@functools.cache
def _sympy_number(value: float) -> Any:
    import sympy

    if value and not 1e-30 < abs(value) < 1e30:
        return sympy.Float(value)
    return sympy.Integer(int(value)) if value.is_integer() else sympy.Rational(repr(value))


def _sympy_power(base: Any, exponent: Any) -> Any:
    """Return the power; numbers whose exact power would be huge are taken as floats, so that 9**9**9 is quick."""
    import sympy

    if base.is_Rational and exponent.is_Rational and (base.p.bit_length() + base.q.bit_length()) * abs(exponent) > 4096:
        try:
            float(base) ** float(exponent)
        except ArithmeticError:
            return sympy.zoo
        return base.evalf() ** exponent.evalf()
    return base**exponent
