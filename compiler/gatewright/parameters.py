"""Gate parameters that are not known yet: affine expressions of values that the program is given when it runs.

An `Affine` is a number plus multiples of *atoms*. An atom is the text of an OpenQASM expression: usually the name of
an input, such as ``theta``, else a subexpression that is not affine in names, kept whole (``sin(theta)``). Texts
from outside are read by `gatewright.expressions` alone; SymPy is loaded only where it is asked for.
"""

from __future__ import annotations

import math
import re
from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from gatewright.angles import angle_texts
from gatewright.errors import CircuitError, ExpressionError, nearest_name, shorten
from gatewright.expressions import CONSTANTS, FUNCTIONS, Expression, parse

if TYPE_CHECKING:
    import sympy

__all__ = [
    "INPUT_TYPE",
    "Affine",
    "Parameter",
    "applied",
    "as_parameter",
    "checked_values",
    "close",
    "names_in",
    "power",
    "product",
    "quotient",
    "read_affine",
    "shown",
    "within",
]

_WORD = re.compile(r"[^\W\d]\w*")
_IDENTIFIER = re.compile(r"[A-Za-z_]\w*", re.ASCII)
#: Denominators with which a coefficient is written, where that is the same float.
_DIVISORS = (*range(1, 65), *(2**k for k in range(7, 21)))
#: Types of inputs that angles can depend on.
INPUT_TYPE = re.compile(r"(?:angle|float|int|uint)(?:\[[1-9][0-9]{0,3}\])?|bool")
#: Atoms of one expression.
MAX_ATOMS = 1_000
#: Characters of one atom.
MAX_ATOM = 2_000

_KNOWN_WORDS = frozenset((*FUNCTIONS, *CONSTANTS))


@dataclass(frozen=True, slots=True)
class Affine:
    """A constant plus multiples of atoms.

    Attributes
    ----------
    constant : float
    terms : tuple of (str, float)
        Atoms and their coefficients, none of them zero, in alphabetical order.

    Examples
    --------
    >>> angle = Affine.of("theta") * 2 + math.pi / 4
    >>> str(angle), angle.evaluate({"theta": 0.25}) == 0.5 + math.pi / 4
    ('2*theta + pi/4', True)
    """

    constant: float
    terms: tuple[tuple[str, float], ...] = ()

    @classmethod
    def of(cls, atom: str) -> Affine:
        """Return the affine expression that is one atom."""
        if len(atom) > MAX_ATOM:
            raise ExpressionError("an expression is too long", required=f"{MAX_ATOM} characters at most")
        return cls(0.0, ((atom, 1.0),))

    @property
    def atoms(self) -> tuple[str, ...]:
        """The atoms that occur."""
        return tuple(atom for atom, _ in self.terms)

    @property
    def names(self) -> tuple[str, ...]:
        """The names that occur in the atoms, in order of appearance."""
        return tuple(dict.fromkeys(name for atom in self.atoms for name in names_in(atom)))

    def __add__(self, other: Affine | float) -> Affine:
        """Return the sum."""
        if not isinstance(other, Affine):
            return Affine(_finite(self.constant + other) + 0.0, self.terms)
        sums = dict(self.terms)
        for atom, factor in other.terms:
            sums[atom] = sums.get(atom, 0.0) + factor
        return _affine(self.constant + other.constant, sums)

    __radd__ = __add__

    def __mul__(self, factor: float) -> Affine:
        """Return a multiple by a number."""
        return _affine(self.constant * factor, {atom: value * factor for atom, value in self.terms})

    __rmul__ = __mul__

    def __truediv__(self, divisor: float) -> Affine:
        """Return the quotient by a number."""
        if divisor == 0:
            raise ExpressionError(
                "an expression has no finite value", required="a finite number", found="a division by zero"
            )
        return _affine(self.constant / divisor, {atom: value / divisor for atom, value in self.terms})

    def __neg__(self) -> Affine:
        """Return the negative."""
        return self * -1.0

    def __sub__(self, other: Affine | float) -> Affine:
        """Return the difference."""
        return self + other * -1.0

    def __rsub__(self, other: float) -> Affine:
        """Return the difference from a number."""
        return -self + other

    def evaluate(self, values: Mapping[str, float]) -> float:
        """Return the number for values of all names.

        Raises
        ------
        ExpressionError
            A name without a value, or an atom without a finite one.
        """
        bound = self.bind(values)
        if isinstance(bound, Affine):
            raise ExpressionError(f"no value for '{shorten(bound.names[0] if bound.names else bound.atoms[0])}'")
        return bound

    def bind(self, values: Mapping[str, Parameter]) -> Affine | float:
        """Put values in the place of names; others stay."""
        total = Affine(self.constant)
        for atom, factor in self.terms:
            if (value := values.get(atom)) is not None:
                total += value * factor
                continue
            names = names_in(atom)
            known: Parameter = Affine(0.0, ((atom, 1.0),))
            if any(name in values for name in names):
                known = read_affine(atom, names, values=values)
            total += known * factor
        return total if total.terms else total.constant

    def substitute(self, values: Mapping[str, float]) -> float:
        """Return the number for values of all *atoms*, taken as independent."""
        return math.fsum((self.constant, *(factor * values[atom] for atom, factor in self.terms)))

    def __str__(self) -> str:
        """Return the OpenQASM text, which `read_affine` reads back to the same floats."""
        return self.text()

    def text(self, integers: Collection[str] = ()) -> str:
        """Return the OpenQASM text; names of integers are not divided, for that would cut off what is behind the point.

        Parameters
        ----------
        integers : collection of str
        """
        parts = [_multiple(atom, factor, divided=atom not in integers) for atom, factor in self.terms]
        if self.constant or not parts:
            parts.append(angle_texts([self.constant])[0])
        text = parts[0]
        for part in parts[1:]:
            text += f" - {part[1:]}" if part[0] == "-" else f" + {part}"
        return text

    def to_sympy(self) -> sympy.Expr:
        """Return the expression in SymPy; names become real symbols.

        Examples
        --------
        >>> (Affine.of("theta") / 2 + math.pi).to_sympy()
        theta/2 + pi
        """
        return parse(str(self), names=self.names, imaginary=False).to_sympy()

    @classmethod
    def from_sympy(cls, expression: sympy.Expr) -> Affine | float:
        """Return a SymPy expression as an affine one.

        Raises
        ------
        CircuitError
            Something that OpenQASM cannot say, or that is not real.

        Examples
        --------
        >>> import sympy
        >>> theta, phi = sympy.symbols("theta phi")
        >>> str(Affine.from_sympy(2 * theta + theta * phi / 3 + sympy.pi / 4))
        'phi*theta/3 + 2*theta + pi/4'
        """
        import sympy

        whole = sympy.expand(expression)
        result: Affine | float = 0.0
        for term in sympy.Add.make_args(whole):
            factor, atom = term.as_independent(*term.free_symbols, as_Add=False) if term.free_symbols else (term, None)
            number = sympy.N(factor, 30)
            if not number.is_real or not number.is_finite:
                raise CircuitError("a parameter is not real", required="a real expression", found=shorten(term))
            turns = factor / sympy.pi
            # The same float as the text n*pi/d gives.
            value = int(turns.p) * math.pi / int(turns.q) if turns.is_Rational and turns else float(number)
            result = result + (value if atom is None else Affine(0.0, ((_sympy_text(atom), value),)))
        return result


#: What a gate takes.
Parameter = Affine | float


def _finite(value: float) -> float:
    if not math.isfinite(value):
        raise ExpressionError("an expression has no finite value", required="a finite number", found=str(value))
    return float(value)


def _affine(constant: float, terms: Mapping[str, float]) -> Affine:
    if len(terms) > MAX_ATOMS:
        raise ExpressionError("an expression has too many unknown parts", required=f"{MAX_ATOMS} at most")
    kept = tuple(sorted((atom, _finite(factor)) for atom, factor in terms.items() if factor))
    # Adding zero turns -0.0 into 0.0, which is what its text is read as.
    return Affine(_finite(constant) + 0.0, kept)


def names_in(atom: str) -> tuple[str, ...]:
    """Return the names in the text of an atom."""
    if _IDENTIFIER.fullmatch(atom):
        return (atom,)
    return tuple(dict.fromkeys(word for word in _WORD.findall(atom) if word not in _KNOWN_WORDS))


def _multiple(atom: str, factor: float, *, divided: bool = True) -> str:
    sign = "-" if factor < 0 else ""
    size = abs(factor)
    inner = atom if _is_product(atom) else f"({atom})"
    if size == 1:
        return sign + inner
    for divisor in _DIVISORS if divided else (1,):
        times = round(size * divisor)
        if times and times <= 4096 and times / divisor == size:
            front = "" if times == 1 else f"{times}*"
            return f"{sign}{front}{inner}" + ("" if divisor == 1 else f"/{divisor}")
    return f"{sign}{angle_texts([size])[0]}*{inner}"


def _is_product(text: str) -> bool:
    """Whether a text can be multiplied and divided without parentheses."""
    depth = 0
    for character in text:
        depth += (character in "([") - (character in ")]")
        if depth == 0 and character in "+-<>=&|!~%^ /":
            return False
    return True


def shown(value: Parameter) -> str:
    """Return a parameter as OpenQASM text."""
    if not isinstance(value, Affine) and value.is_integer() and abs(value) < 2**53:
        return str(int(value))
    return str(value) if isinstance(value, Affine) else angle_texts([value])[0]


def _operand(value: Parameter) -> str:
    """Return a text that may stand on either side of an operator."""
    text = shown(value)
    return text if _WORD.fullmatch(text) or re.fullmatch(r"[0-9.]+", text) else f"({text})"


def product(first: Parameter, second: Parameter) -> Parameter:
    """Return a product; of two unknown ones, as an atom whose factors are in alphabetical order."""
    if not isinstance(first, Affine):
        return second * first if isinstance(second, Affine) else _finite(first * second)
    if not isinstance(second, Affine):
        return first * second
    # Numbers in front are drawn out, so that 2*a*b and a*(2*b) are the same.
    factor = 1.0
    texts: list[str] = []
    for part in (first, second):
        if len(part.terms) == 1 and not part.constant:
            atom, value = part.terms[0]
            factor *= value
            texts += (
                atom.split("*")
                if _plain_product(atom)
                else [atom if _WORD.fullmatch(atom) or _is_call(atom) else f"({atom})"]
            )
        else:
            texts.append(f"({part})")
    return Affine.of("*".join(sorted(texts))) * factor


def _plain_product(atom: str) -> bool:
    return all(_WORD.fullmatch(part) for part in atom.split("*"))


def _is_call(atom: str) -> bool:
    match = re.match(r"[^\W\d]\w*\(", atom)
    if not match or not atom.endswith(")"):
        return False
    depth = 0
    for place, character in enumerate(atom):
        depth += (character == "(") - (character == ")")
        if depth == 0 and character == ")" and place < len(atom) - 1:
            return False
    return True


def quotient(first: Parameter, second: Parameter) -> Parameter:
    """Return a quotient; by something unknown, as an atom."""
    if isinstance(second, Affine):
        return Affine.of(f"{_operand(first)}/{_operand(second)}")
    if isinstance(first, Affine):
        return first / second
    return _finite(first / second)


def power(first: Parameter, second: Parameter) -> Parameter:
    """Return a power, as an atom where something in it is unknown."""
    if not isinstance(first, Affine) and not isinstance(second, Affine):
        result = first**second
        if isinstance(result, complex):
            raise ExpressionError("a power is not real", required="a real number")
        return _finite(result)
    return Affine.of(f"{_operand(first)}**{_operand(second)}")


def applied(name: str, value: Parameter) -> Parameter:
    """Return a function of one argument, as an atom where that is unknown."""
    if isinstance(value, Affine):
        return Affine.of(f"{name}({value})")
    return parse(f"{name}(x)", names=["x"], imaginary=False).real({"x": value})


def read_affine(
    text: str | Expression, names: Iterable[str] = (), *, values: Mapping[str, Any] | None = None
) -> Parameter:
    """Read the text of an expression in names of unknown value.

    Parameters
    ----------
    text : str or Expression
    names : iterable of str
        All names that may occur.
    values : mapping of str to float or Affine, optional
        What some of them stand for.

    Raises
    ------
    ExpressionError

    Examples
    --------
    >>> str(read_affine("(theta + pi)/2 + sin(phi)", ["theta", "phi"]))
    'sin(phi) + theta/2 + pi/2'
    """
    expression = parse(text, names=names, power=("**", "^"), imaginary=False) if isinstance(text, str) else text
    known = values or {}
    stack: list[Parameter] = []
    for step in expression.steps:
        if step.kind in ("number", "constant"):
            stack.append(step.number)
        elif step.kind == "name":
            value = known.get(step.name)
            stack.append(
                Affine.of(step.name) if value is None else value if isinstance(value, Affine) else float(value)
            )
        elif step.kind == "neg":
            stack.append(-stack.pop())
        elif step.kind in FUNCTIONS:
            stack.append(applied(step.kind, stack.pop()))
        else:
            second, first = stack.pop(), stack.pop()
            try:
                stack.append(_binary(step.kind, first, second))
            except ArithmeticError:
                raise ExpressionError(
                    f"'{shorten(expression.text)}' has no finite value", required="a finite number", column=step.column
                ) from None
    result = stack[0]
    return result if not isinstance(result, Affine) or result.terms else result.constant


def _binary(kind: str, first: Parameter, second: Parameter) -> Parameter:
    if kind == "+":
        return first + second if isinstance(first, Affine) else second + first
    if kind == "-":
        return first - second
    if kind == "*":
        return product(first, second)
    return quotient(first, second) if kind == "/" else power(first, second)


def as_parameter(value: Any) -> Parameter:
    """Return a number, an affine expression or a SymPy expression as a parameter."""
    if isinstance(value, Affine):
        return value if value.terms else value.constant
    if hasattr(value, "free_symbols"):
        made = Affine.from_sympy(value)
        if isinstance(made, Affine):
            return made if made.terms else made.constant
        return made
    try:
        return float(value)
    except (TypeError, ValueError):
        raise CircuitError(
            "a parameter is not a number", required="a number or a SymPy expression", found=shorten(value)
        ) from None


def checked_values(inputs: Iterable[tuple[str, str]], values: Mapping[str, float]) -> dict[str, float]:
    """Return values for inputs as floats, each as its type allows."""
    types = dict(inputs)
    known: dict[str, float] = {}
    for name, value in values.items():
        if name not in types:
            raise CircuitError(f"'{shorten(name)}' is not an input of the circuit", hint=nearest_name(name, types))
        kind = types[name].partition("[")[0]
        try:
            number = float(value)
        except (TypeError, ValueError):
            number = math.nan
        fits = math.isfinite(number)
        if kind in ("int", "uint", "bool"):
            fits = fits and number == int(number) and (kind == "int" or number >= 0) and (kind != "bool" or number <= 1)
        if not fits:
            raise CircuitError(f"the value of '{name}' does not fit", required=types[name], found=shorten(value))
        known[name] = number
    return known


def within(value: float, low: float, high: float) -> float:
    """Bring an angle into a range by full turns, where it is outside and the range is wide enough."""
    if low <= value <= high or high - low < math.tau - 1e-9:
        return value
    moved = value - math.tau * math.ceil((value - high) / math.tau)
    return min(max(moved, low), high) if low - 1e-9 <= moved <= high + 1e-9 else moved


def close(first: Parameter, second: Parameter) -> bool:
    """Whether two parameters are equal but for a few units of rounding.

    Examples
    --------
    >>> close(Affine.of("a") * 0.3, Affine.of("a") * (0.1 + 0.2)), close(Affine.of("a"), Affine.of("b"))
    (True, False)
    """
    a = first if isinstance(first, Affine) else Affine(first)
    b = second if isinstance(second, Affine) else Affine(second)
    if a.atoms != b.atoms:
        return False
    if not abs(a.constant - b.constant) <= 1e-15 * max(1.0, abs(a.constant)):
        return False
    return all(abs(x - y) <= 1e-15 * abs(x) for (_, x), (_, y) in zip(a.terms, b.terms, strict=True))


def _sympy_text(expression: Any) -> str:
    """Return a SymPy expression as OpenQASM text."""
    import sympy

    functions = {
        sympy.sin: "sin", sympy.cos: "cos", sympy.tan: "tan", sympy.asin: "arcsin", sympy.acos: "arccos",
        sympy.atan: "arctan", sympy.exp: "exp", sympy.log: "log",
    }  # fmt: skip
    if expression.is_Symbol:
        if not _IDENTIFIER.fullmatch(expression.name) or expression.name in _KNOWN_WORDS:
            raise CircuitError(
                "a symbol cannot be a name in OpenQASM", required="letters, digits and underscores",
                found=shorten(expression.name),
            )  # fmt: skip
        return str(expression.name)
    if expression.is_number:
        value = float(expression)
        return _operand(value)
    if expression.is_Add:
        return "(" + " + ".join(_sympy_text(term) for term in sorted(expression.args, key=str)) + ")"
    if expression.is_Mul:
        return "*".join(sorted(_sympy_text(part) for part in expression.args))
    if isinstance(expression, sympy.exp):
        return f"exp({_sympy_argument(expression.args[0])})"
    if expression.is_Pow:
        return f"({_sympy_text(expression.base)}**{_sympy_text(expression.exp)})"
    name = functions.get(expression.func)
    if name is None:
        raise CircuitError(
            "a parameter cannot be said in OpenQASM",
            required="sums, products, powers and the standard functions of symbols",
            found=shorten(expression),
        )
    return f"{name}({_sympy_argument(expression.args[0])})"


def _sympy_argument(expression: Any) -> str:
    return shown(Affine.from_sympy(expression))
