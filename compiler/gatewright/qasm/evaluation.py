"""Names and expressions of the full lane: what is known when compiling, and the qubits and bits that operands name."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from gatewright.classical import Bits
from gatewright.errors import ExpressionError, QasmError, UnsupportedError, nearest_name, shorten
from gatewright.qasm.scope import RESERVED, Scope
from gatewright.qasm.values import BUILT_IN, Array, Kind, Value, binary, cast, function, unary

if TYPE_CHECKING:
    from openqasm3 import ast

__all__ = [
    "MAX_ELEMENTS",
    "MAX_STEPS",
    "STATEMENT",
    "Evaluator",
    "Pending",
    "Places",
    "Unknown",
    "ValueFault",
    "Variable",
]

#: Most gates that unrolling writes in one program, what else it executes counted in.
MAX_STEPS = 1_000_000
#: What a statement or a round of a loop counts for; a gate counts for one.
STATEMENT = 10

#: Most elements of one array, set or index range.
MAX_ELEMENTS = 1_000_000


class ValueFault(QasmError):
    """An expression without a value for the numbers at hand."""


class Unknown(UnsupportedError):
    """A value that is not known when compiling."""


@dataclass(frozen=True, slots=True)
class Places:
    """Qubits or bits of the circuit, in order; `single` is one of them rather than a register."""

    indices: Sequence[int]
    single: bool
    quantum: bool


@dataclass(frozen=True, slots=True)
class Pending:
    """The result of a measurement that has no bit yet."""

    qubits: Places


@dataclass(slots=True)
class Variable:
    """A classical variable or constant.

    `depth` counts the blocks around its declaration that run or not depending on the run; `runtime` is its name at
    run time, once it has a place there.
    """

    kind: Kind
    value: Value | Array | None
    constant: bool = False
    depth: int = 0
    runtime: str = ""


class Evaluator:
    """Frames of names, and the values of expressions.

    Parameters
    ----------
    scope : Scope
        The global names, shared with the fast lane.
    """

    def __init__(self, scope: Scope) -> None:
        self.scope = scope
        self.source = scope.source
        self.start = 0  # offset of the statement at hand: columns of its nodes count from there
        self.steps = 0
        self.methods: dict[type, Any] = {}  # what evaluates or carries out each type of node
        self.globals: dict[str, Any] = {}
        self.frames: list[dict[str, Any]] = []
        self.enclosed = False  # inside a gate or a subroutine, where global variables are out of sight
        self.bits: dict[int, int] = {}  # values of bits that are known

    # ---------------------------------------------------------------- places in the text

    def at(self, node: Any) -> int:
        """Return the offset of a node."""
        span = getattr(node, "span", None)
        return self.start + (int(span.start_column) if span is not None else 0)

    def error(self, what: str, node: Any, *, required: str = "", found: str = "", hint: str = "") -> QasmError:
        """Return an error at a node."""
        return self.source.error(what, self.at(node), required=required, found=found, hint=hint)

    def fault(self, problem: ExpressionError, node: Any) -> ValueFault:
        """Return the error of an expression at a node."""
        made = ValueFault(problem.what, required=problem.required, found=problem.found, hint=problem.hint)
        return self.source.locate(made, self.at(node))

    def unsupported(self, what: str, node: Any) -> UnsupportedError:
        """Return the error for what is OpenQASM, but not read."""
        return self.scope.unsupported(what, self.at(node))

    def charge(self, steps: int, node: Any) -> None:
        """Count steps of unrolling, and refuse too many."""
        self.steps += steps
        if self.steps > MAX_STEPS:
            self.charge_at(0, self.at(node))

    def charge_at(self, steps: int, offset: int) -> None:
        """Count steps for what begins at an offset, and refuse too many."""
        self.steps += steps
        if self.steps > MAX_STEPS:
            raise self.source.error(
                "unrolling the program takes too many steps",
                offset,
                required=f"at most {MAX_STEPS} gates, a statement counting for {STATEMENT}",
            )

    # ---------------------------------------------------------------- names

    def find(self, name: str, node: Any) -> Any:
        """Return what a name stands for: a Variable, Places, or an object of the program."""
        for frame in reversed(self.frames):
            if name in frame:
                return frame[name]
        known = self.globals.get(name)
        if known is not None and not (self.enclosed and self.hidden(known)):
            return known
        scope = self.scope
        if name in scope.constants:
            kind = Kind("int") if name in scope.integers else Kind("float")
            data = scope.constants[name]
            return Variable(kind, Value(kind, int(data) if name in scope.integers else data), constant=True)
        if not self.enclosed:
            if name in scope.qubit_registers:
                return Places(scope.qubit_registers[name], name in scope.scalars, True)
            if name in scope.bit_registers:
                return Places(scope.bit_registers[name], name in scope.scalars, False)
            if name.startswith("$"):
                span = scope.physical_qubit(name[1:], self.at(node), True)
                return Places(span, True, True)
        if name in BUILT_IN:
            return Variable(Kind("float"), BUILT_IN[name], constant=True)
        if name in scope.declared:
            inside = " and cannot be seen inside a gate or a subroutine" if self.enclosed else ""
            raise self.error(f"'{shorten(name)}' has no value", node, found=f"it is {scope.declared[name]}{inside}")
        names = {*self.globals, *scope.constants, *scope.qubit_registers, *scope.bit_registers}
        for frame in self.frames:
            names.update(frame)
        raise self.error(f"unknown name '{shorten(name)}'", node, hint=nearest_name(name, names))

    @staticmethod
    def hidden(known: Any) -> bool:
        """Whether something global is out of sight inside gates and subroutines."""
        if isinstance(known, Variable) and isinstance(known.value, Value) and known.value.is_open:
            return True
        return isinstance(known, Places) or (isinstance(known, Variable) and not known.constant)

    def declare(self, name: str, thing: Any, what: str, node: Any) -> None:
        """Take a name in the innermost frame."""
        if not self.frames:
            self.scope.declare(name, what, self.at(node))
            self.globals[name] = thing
            return
        if name in RESERVED:
            raise self.error(f"'{shorten(name)}' is a reserved word", node, required="another name")
        if name in self.frames[-1]:
            raise self.error(f"'{shorten(name)}' is already defined", node)
        self.frames[-1][name] = thing

    # ---------------------------------------------------------------- scalars

    def scalar(self, node: ast.Expression, *, real: bool = False) -> Value:
        """Return the value of an expression that is a scalar."""
        value = self.evaluate(node, real=real)
        if isinstance(value, Array):
            raise self.error("an array cannot stand here", node, required="a single value")
        return self.measured(value, node) if isinstance(value, Pending) else value

    def measured(self, pending: Pending, node: Any) -> Value:
        """Measure into bits of our own, and return their value; the interpreter does."""
        raise NotImplementedError

    def acts(self, node: Any) -> bool:
        """Whether evaluating an expression does something to qubits; the interpreter tells."""
        raise NotImplementedError

    def unknown(self, what: str, node: Any) -> Unknown:
        """Return the error for a value that is not known when compiling."""
        problem = Unknown(f"{what} is not yet supported here", required="a value that is known when compiling")
        return self.source.locate(problem, self.at(node))

    def known(self, value: Value, node: Any) -> Value:
        """Return a value, which has to be known when compiling."""
        if value.is_open:
            raise self.unknown("a value that depends on the run", node)
        return value

    def real(self, node: ast.Expression) -> float:
        """Return the value of a gate parameter."""
        value = self.known(self.scalar(node, real=True), node)
        try:
            return float(cast(value, Kind("float")).data)
        except ExpressionError as problem:
            raise self.fault(problem, node) from None

    def integer(self, node: ast.Expression, least: int | None = None, most: int | None = None) -> int:
        """Return the value of an index, a size or a bound."""
        value = self.known(self.scalar(node), node)
        data = value.data
        if value.kind.name == "angle" or data != math.floor(data):
            raise self.error("a number is not an integer", node, required="an integer", found=shorten(data, 30))
        whole = int(data)
        if (least is not None and whole < least) or (most is not None and whole > most):
            raise self.error(
                "an integer is out of range", node, required=f"an integer from {least} to {most}", found=f"'{whole}'"
            )
        return whole

    def evaluate(self, node: Any, *, real: bool = False) -> Value | Array | Pending:
        """Return the value of an expression."""
        method = self.methods.get(type(node))
        if method is None:
            method = getattr(self, f"_{type(node).__name__}", None)
            if method is None:
                raise self.unsupported(f"this expression ({type(node).__name__})", node)
            self.methods[type(node)] = method
        try:
            value: Value | Array | Pending = method(node, real)
        except ExpressionError as problem:
            raise self.fault(problem, node) from None
        return value

    def _IntegerLiteral(self, node: ast.IntegerLiteral, real: bool) -> Value:
        return Value(Kind("int"), node.value)

    def _FloatLiteral(self, node: ast.FloatLiteral, real: bool) -> Value:
        if not math.isfinite(node.value):
            raise ExpressionError("a number is too large", required="a finite number")
        return Value(Kind("float"), node.value)

    def _BooleanLiteral(self, node: ast.BooleanLiteral, real: bool) -> Value:
        return Value(Kind("bool"), node.value)

    def _BitstringLiteral(self, node: ast.BitstringLiteral, real: bool) -> Value:
        return Value(Kind("bit", node.width), node.value)

    def _ImaginaryLiteral(self, node: Any, real: bool) -> Value:
        raise self.unsupported("a complex number", node)

    def _DurationOf(self, node: Any, real: bool) -> Value:
        raise self.unsupported("'durationof'", node)

    def _ArrayLiteral(self, node: ast.ArrayLiteral, real: bool) -> Value:
        raise self.error("a list in braces cannot stand here", node, required="a single value")

    def _Identifier(self, node: ast.Identifier, real: bool) -> Value | Array:
        found = self.find(node.name, node)
        if isinstance(found, Variable):
            if found.value is None:
                raise self.error(f"'{shorten(node.name)}' has no value yet", node)
            return found.value
        if isinstance(found, Places) and not found.quantum:
            return self.read_bits(found, node)
        raise self.error(f"'{shorten(node.name)}' is not a classical value", node, required="a classical value")

    def read_bits(self, places: Places, node: Any) -> Value:
        """Return the value of bits that are all known."""
        kind = Kind("bit", 0 if places.single else len(places.indices))
        if not all(place in self.bits for place in places.indices):
            self.store_bits(places.indices, node)
            return Value(kind, Bits(tuple(places.indices), places.single))
        return Value(kind, sum(self.bits[place] << k for k, place in enumerate(places.indices)))

    def store_bits(self, places: Sequence[int], node: Any) -> None:
        """Assign to bits at run time what is known of them; the interpreter does."""
        raise NotImplementedError

    def _UnaryExpression(self, node: ast.UnaryExpression, real: bool) -> Value:
        return unary(node.op.name, self.scalar(node.expression, real=real))

    def _BinaryExpression(self, node: ast.BinaryExpression, real: bool) -> Value:
        op = node.op.name
        real = real and op in ("+", "-", "*", "/", "%", "**")
        # A long sum is nested to the left: no recursion along it.
        chain = [node]
        while isinstance(chain[-1].lhs, type(node)):
            chain.append(chain[-1].lhs)
        value = self.scalar(chain[-1].lhs, real=real)
        for part in reversed(chain):
            op = part.op.name
            if op in ("&&", "||") and not value.is_open and bool(value.data) == (op == "||"):
                value = Value(Kind("bool"), op == "||")
                continue
            if op in ("&&", "||") and value.is_open and self.acts(part.rhs):
                # The language does not say whether it happens where the left side decides.
                what = f"a subroutine on qubits behind '{op}' and a value that depends on the run"
                raise self.unsupported(what, part.rhs)
            value = binary(op, value, self.scalar(part.rhs, real=real), real=real)
        return value

    def _Cast(self, node: ast.Cast, real: bool) -> Value:
        kind = self.kind(node.type)
        return cast(self.scalar(node.argument, real=kind.name in ("float", "angle")), kind)

    def _FunctionCall(self, node: ast.FunctionCall, real: bool) -> Value | Array | Pending:
        name = node.name.name
        if name in RESERVED or name not in self.scope.declared:
            inside = real or name != "mod"
            values = [self.scalar(argument, real=inside) for argument in node.arguments]
            result = function(name, values)
            if result is None:
                raise self.error(f"unknown function '{shorten(name)}'", node)
            return result
        result_of_call = self.call_subroutine(node)
        if result_of_call is None:
            raise self.error(f"'{shorten(name)}' returns nothing", node, required="a value")
        return result_of_call

    def call_subroutine(self, node: ast.FunctionCall) -> Value | Array | Pending | None:
        """Run a subroutine; the interpreter does."""
        raise NotImplementedError

    def _SizeOf(self, node: ast.SizeOf, real: bool) -> Value:
        depth = 0 if node.index is None else self.integer(node.index, 0, 100)
        target = self.evaluate(node.target)
        for _ in range(depth):
            if isinstance(target, Array) and target.items:
                target = target.items[0]
        if not isinstance(target, Array):
            raise self.error("'sizeof' of what is not an array, or has no such dimension", node)
        return Value(Kind("uint"), len(target.items))

    def _Concatenation(self, node: ast.Concatenation, real: bool) -> Value | Array:
        a, b = self.evaluate(node.lhs), self.evaluate(node.rhs)
        if isinstance(a, Array) and isinstance(b, Array) and a.kind == b.kind:
            return Array(a.kind, [*a.copy().items, *b.copy().items])
        if isinstance(a, Value) and isinstance(b, Value) and a.kind.name == b.kind.name == "bit":
            # The first operand holds the lower indices, as for registers of qubits.
            a, b = self.known(a, node.lhs), self.known(b, node.rhs)
            return Value(Kind("bit", a.bits + b.bits), int(a.data) | int(b.data) << a.bits)
        raise self.error("'++' joins registers, bits or arrays of one type", node)

    def _QuantumMeasurement(self, node: Any, real: bool) -> Pending:
        return Pending(self.places(node.qubit))

    def _IndexExpression(self, node: ast.IndexExpression, real: bool) -> Value | Array:
        base = node.collection
        if base.__class__.__name__ == "Identifier":
            found = self.find(base.name, base)  # type: ignore[attr-defined]
            if isinstance(found, Places):
                if found.quantum:
                    raise self.error("a qubit is not a classical value", node, required="a classical value")
                return self.read_bits(self.select(found, node.index, node), node)
        value = self.evaluate(base)
        if isinstance(value, Pending):
            value = self.measured(value, node)
        return self.element(value, node.index, node)

    def element(self, value: Value | Array, index: Any, node: Any) -> Value | Array:
        """Return an element or a slice of an array, or bits of a value."""
        parts = index if isinstance(index, list) else [index]
        for number, part in enumerate(parts):
            if isinstance(value, Array):
                chosen, single = self.positions(len(value.items), part, node)
                if single:
                    value = value.items[chosen[0]]
                    continue
                if number < len(parts) - 1:
                    raise self.unsupported("an index behind a slice of an array", node)
                value = Array(value.kind, [value.items[k] for k in chosen])
                continue
            if value.kind.name not in ("bit", "int", "uint") or not value.kind.width:
                raise self.error("this value has no elements", node, found=str(value.kind))
            chosen, single = self.positions(value.bits, part, node)
            data = sum((int(self.known(value, node).data) >> k & 1) << place for place, k in enumerate(chosen))
            value = Value(Kind("bit", 0 if single else len(chosen)), data)
        return value

    # ---------------------------------------------------------------- indices

    def span(self, node: ast.RangeDefinition, length: int | None) -> range:
        """Return a range, both ends included; `length` gives the ends that are left out, and turns negative ones."""
        step = 1 if node.step is None else self.integer(node.step)
        if step == 0:
            raise self.error("a range has the step 0", node)
        if length is None and (node.start is None or node.end is None):
            raise self.error("a range has no end", node, required="[start:end] or [start:step:end]")
        first = (0 if step > 0 else -1) if node.start is None else self.integer(node.start)
        last = (-1 if step > 0 else 0) if node.end is None else self.integer(node.end)
        if length is not None:
            first, last = (first + length if first < 0 else first), (last + length if last < 0 else last)
        made = range(first, last + (1 if step > 0 else -1), step)
        # len() of a huge range overflows, and so its size is worked out.
        size = max(0, (last - first) // step + 1)
        if size > MAX_ELEMENTS:
            raise self.error(
                "a range is too long", node, required=f"at most {MAX_ELEMENTS} elements", found=shorten(size, 40)
            )
        return made

    def positions(self, length: int, index: Any, node: Any) -> tuple[list[int], bool]:
        """Return the positions that one index names among `length`, and whether it is a single one."""
        if isinstance(index, list):
            if len(index) != 1:
                raise self.error("too many indices", node, required="one", found=str(len(index)))
            index = index[0]
        name = type(index).__name__
        single = False
        if name == "RangeDefinition":
            chosen = list(self.span(index, length))
        elif name == "DiscreteSet":
            chosen = [self.integer(value) for value in index.values]
        else:
            chosen, single = [self.integer(index)], True
        for k, place in enumerate(chosen):
            if not -length <= place < length:
                required = f"an integer from {-length} to {length - 1}"
                at = node if name == "RangeDefinition" else index
                raise self.error("an index is out of range", at, required=required, found=f"'{place}'")
            chosen[k] = place % length
        return chosen, single

    def select(self, places: Places, index: Any, node: Any) -> Places:
        """Return the elements of a register that an index names."""
        if places.single:
            what = "qubit" if places.quantum else "bit"
            raise self.error(f"a single {what} has no index", node)
        chosen, single = self.positions(len(places.indices), index, node)
        return Places([places.indices[k] for k in chosen], single, places.quantum)

    def places(self, node: Any, *, quantum: bool = True) -> Places:
        """Return the qubits or bits that an operand names."""
        kind = type(node).__name__
        if kind == "Identifier":
            found = self.find(node.name, node)
        elif kind == "IndexedIdentifier":
            found = self.find(node.name.name, node)
            if isinstance(found, Places):
                for index in node.indices:
                    found = self.select(found, index, node)
        elif kind == "IndexExpression":
            found = self.select(self.places(node.collection, quantum=quantum), node.index, node)
        elif kind == "Concatenation":
            left, right = self.places(node.lhs, quantum=quantum), self.places(node.rhs, quantum=quantum)
            found = Places([*left.indices, *right.indices], False, quantum)
        else:
            found = None
        if not isinstance(found, Places) or found.quantum != quantum:
            what = "qubits" if quantum else "bits"
            raise self.error(f"this does not name {what}", node, required=f"a register of {what}, or elements of one")
        return found

    # ---------------------------------------------------------------- types

    def kind(self, node: Any) -> Kind:
        """Return a scalar type."""
        name = {"IntType": "int", "UintType": "uint", "FloatType": "float", "AngleType": "angle"}.get(
            type(node).__name__,
            {"BitType": "bit", "BoolType": "bool", "DurationType": "duration"}.get(type(node).__name__, ""),
        )
        if not name:
            written = type(node).__name__.removesuffix("Type").lower()
            raise self.unsupported(f"the type '{written}'", node)
        size = getattr(node, "size", None)
        width = 0 if size is None else self.integer(size, 1, 4096)
        return Kind(name, 0 if name == "float" else width)

    def array(self, kind: Kind, dimensions: Sequence[int], node: Any) -> Array:
        """Return the array that a list in braces or another array gives."""
        if type(node).__name__ != "ArrayLiteral":
            value = self.evaluate(node)
            if not isinstance(value, Array):
                raise self.error("this is not an array", node, required="an array")
            made = value.copy()
        else:
            made = Array(kind, [])
            for item in node.values:
                if len(dimensions) > 1:
                    made.items.append(self.array(kind, dimensions[1:], item))
                    continue
                value = self.scalar(item, real=kind.name in ("float", "angle"))
                try:
                    made.items.append(cast(value, kind, implicit=True))
                except ExpressionError as problem:
                    raise self.fault(problem, item) from None
        if len(made.items) != dimensions[0] or made.kind != kind:
            found = f"{len(made.items)} elements of type {made.kind}"
            raise self.error(
                "an array of another size or type", node, required=f"{dimensions[0]} of {kind}", found=found
            )
        return made
