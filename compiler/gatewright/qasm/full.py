"""The full lane: statements of OpenQASM 3 beyond the plain ones, executed as far as they are known when compiling.

Each statement is parsed by the standard's reference parser and carried out on the names and columns that the fast
lane has: loops are unrolled, branches decided, subroutines written out in place, modifiers resolved. After the
OpenQASM 3 specification (arXiv:2104.14722).
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from types import SimpleNamespace
from typing import TYPE_CHECKING, Any

import numpy as np

from gatewright.classical import Bits, Name
from gatewright.errors import ExpressionError, shorten
from gatewright.program import Assign
from gatewright.qasm.control import End, Return, assigned_names, parts_of
from gatewright.qasm.evaluation import MAX_ELEMENTS, STATEMENT, Pending, Places, Variable
from gatewright.qasm.grammar import MAX_STATEMENT, parse_statement, statement_end
from gatewright.qasm.scope import MAX_QUBITS, NAME, RESERVED
from gatewright.qasm.shapes import Shape, signature
from gatewright.qasm.timing import Timing
from gatewright.qasm.values import Array, Kind, Value, binary, blank_array, cast, expression, shape_of

if TYPE_CHECKING:
    from gatewright.qasm.reader import Reader

__all__ = ["MAX_CALLS", "MAX_PARSED", "FullLane"]

#: Subroutine calls open at once.
MAX_CALLS = 40

#: Characters that the reference parser is given in all: some ten seconds.
MAX_PARSED = 1_000_000

#: Statements, and shapes of them, that are remembered.
_REMEMBERED = 10_000

_KEPT = re.compile(r"\b(?:def|gate|extern|cal|defcal|if|while|switch|box)\b")

_WORD = re.compile(NAME)
_REFUSED = {
    "CalibrationGrammarDeclaration": "'defcalgrammar' inside a block",
    "CalibrationStatement": "'cal' inside a block",
    "CalibrationDefinition": "'defcal' inside a block",
}


class Extern:
    """A function that is declared, and not part of the program."""


@dataclass(frozen=True, slots=True)
class Subroutine:
    """A subroutine, and the offset that the columns of its nodes count from."""

    node: Any
    start: int


class FullLane(Timing):
    """Carries out the statements that the fast lane hands over.

    Parameters
    ----------
    reader : Reader
        Whose names, gates and columns are shared.
    """

    def __init__(self, reader: Reader) -> None:
        super().__init__(reader)
        self.calls = 0
        self.returning: Any = None  # the type that the subroutine at hand returns
        self.shapes: dict[Any, Shape] = {}
        self.pieces: dict[str, tuple[Shape, list[str]]] = {}  # statements that end with their first semicolon
        self.characters = 0  # given to the parser

    # ---------------------------------------------------------------- one statement of the program

    def concerns(self, text: str) -> bool:
        """Whether a text names something that only this lane knows."""
        return bool(self.globals) and not self.globals.keys().isdisjoint(_WORD.findall(text))

    def statement(self, start: int) -> tuple[int, bool]:
        """Carry out the statement that begins at an offset.

        Returns
        -------
        end : int
            Offset behind it.
        ended : bool
            Whether the program ends with it.

        Raises
        ------
        QasmError, UnsupportedError
        """
        end, node = self.parse(start)
        self.start = start
        self.phase = 0.0
        self.frames, self.enclosed, self.calls = [], False, 0
        self.depth, self.loops = 0, []
        self.release_bits(0)
        try:
            if self.execute(node) == "gone":
                return end, True
        except End:
            return end, True
        except RecursionError:
            raise self.source.error(
                "statements or calls are nested too deeply", start, required=f"at most {MAX_CALLS} calls in each other"
            ) from None
        finally:
            if self.phase:
                self.reader.add_phase(self.phase)
        return end, False

    def parse(self, start: int) -> tuple[int, Any]:
        """Return the end and the tree of the statement at an offset; the tree is good until the next call."""
        source = self.source
        stop = source.text.find(";", start, start + MAX_STATEMENT) + 1
        piece = source.text[start:stop]
        known = self.pieces.get(piece)
        if known is not None:
            return stop, known[0].fill(known[1])
        end, skipped = statement_end(source, start)
        text = source.text[start:end].replace("\n", " ")
        # Nodes that outlive their statement, and what is left out of it, are no matter of its shape.
        if skipped or _KEPT.search(text):
            return end, self.parsed_anew(start, end, skipped)
        key, parts = signature(text)
        shape = self.shapes.get(key)
        if shape is None:
            shape = Shape(self.parsed_anew(start, end, skipped), parts, key)
            if shape.sound and len(self.shapes) < _REMEMBERED:
                self.shapes[key] = shape
        if end == stop and shape.sound and len(self.pieces) < _REMEMBERED:
            self.pieces[piece] = shape, parts
        return end, shape.fill(parts)

    def parsed_anew(self, start: int, end: int, skipped: list[tuple[int, int]]) -> Any:
        """Return the tree of a statement that the reference parser makes, unless it has done too much already."""
        self.characters += end - start
        if self.characters > MAX_PARSED:
            raise self.source.error(
                "the statements outside the plain ones are too long in all",
                start,
                required=f"at most {MAX_PARSED} characters in statements of different shapes",
            )
        return parse_statement(self.source, start, end, skipped)

    def execute(self, node: Any) -> str | Return | None:
        """Carry out a statement; return how it leaves the block that it stands in, if it does."""
        self.charge(STATEMENT, node)
        method: Callable[[Any], str | Return | None] | None = self.methods.get(type(node))
        if method is None:
            name = type(node).__name__
            if name in _REFUSED:
                raise self.unsupported(_REFUSED[name] or f"'{node.io_identifier.name}'", node)
            method = getattr(self, f"do_{name}", None)
            if method is None:
                raise self.unsupported(f"this statement ({name})", node)
            self.methods[type(node)] = method
        top = self.hidden_bits.top
        try:
            left = method(node)
        except ExpressionError as problem:
            raise self.fault(problem, node) from None
        if not isinstance(left, Return) and type(node).__name__ != "ClassicalDeclaration":
            self.release_bits(top)
        return left

    def block(self, statements: Sequence[Any], names: dict[str, Any] | None = None) -> str | Return | None:
        """Carry out the statements of a block in a frame of their own."""
        self.frames.append(names or {})
        top = self.hidden_bits.top
        left: str | Return | None = None
        try:
            for statement in statements:
                left = self.execute(statement)
                if left is not None:
                    break
        finally:
            self.frames.pop()
        # What is returned may be read from bits of the block.
        if not isinstance(left, Return):
            self.release_bits(top)
        return left

    def do_Pragma(self, node: Any) -> None:
        """Pass over a pragma."""

    def do_CompoundStatement(self, node: Any) -> str | Return | None:
        """Carry out a block."""
        return self.block(node.statements)

    def do_ReturnStatement(self, node: Any) -> Return:
        """Leave a subroutine."""
        if node.expression is None:
            return Return(None)
        real = type(self.returning).__name__ in ("FloatType", "AngleType")
        return Return(self.evaluate(node.expression, real=real))

    # ---------------------------------------------------------------- declarations and assignments

    def do_QubitDeclaration(self, node: Any) -> None:
        """Declare qubits."""
        self.register(node.qubit, node.size, quantum=True)

    def register(self, identifier: Any, size: Any, *, quantum: bool) -> None:
        """Declare a register of qubits or bits."""
        if self.frames:
            raise self.error("qubits are declared inside a block", identifier, required="a declaration outside")
        number = None if size is None else self.integer(size, 1, MAX_QUBITS)
        self.scope.add_register(identifier.name, number, self.at(identifier), quantum=quantum)

    def do_IODeclaration(self, node: Any) -> None:
        """Declare an input: a name whose value is not known when compiling."""
        name = node.identifier.name
        if node.io_identifier.name != "input":
            self.declare_output(node)
            return
        if self.frames:
            raise self.error("an input is declared inside a block", node, required="a declaration outside")
        kind = self.kind(node.type)
        if kind.name == "bit":
            raise self.unsupported("an input of bits", node)
        made = Variable(kind, Value(kind, Name(name)), constant=True)
        self.declare(name, made, "an input", node.identifier)
        size = getattr(node.type, "size", None) if kind.name == "float" else None
        self.reader.inputs[name] = str(kind) if size is None else f"float[{self.integer(size, 1, 4096)}]"

    def declare_output(self, node: Any) -> None:
        """Declare an output: bits and variables like any others, since all of them are kept."""
        if self.frames:
            raise self.error("an output is declared inside a block", node, required="a declaration outside")
        declaration = SimpleNamespace(type=node.type, identifier=node.identifier, init_expression=None, span=node.span)
        self.do_ClassicalDeclaration(declaration)

    def do_ExternDeclaration(self, node: Any) -> None:
        """Declare a function that is not part of the program; only calls of it are refused."""
        self.declare(node.name.name, Extern(), "an extern function", node.name)

    def do_ConstantDeclaration(self, node: Any) -> None:
        """Declare a constant."""
        variable = self.variable(node, constant=True)
        value = variable.value
        if not self.frames and isinstance(value, Value) and value.kind.name in ("int", "uint", "float", "angle"):
            if abs(value.data) <= 2**53:
                self.scope.constants[node.identifier.name] = float(value.data)

    def do_ClassicalDeclaration(self, node: Any) -> None:
        """Declare a variable, or bits."""
        if type(node.type).__name__ != "BitType":
            top = self.hidden_bits.top
            self.variable(node, constant=False)
            self.release_bits(top)
            return
        given = node.init_expression
        if not self.frames:
            value = None if given is None else self.evaluate(given)
            self.register(node.identifier, node.type.size, quantum=False)
            if value is not None:
                self.set_bits(self.places(node.identifier, quantum=False), value, node)
            return
        size = None if node.type.size is None else self.integer(node.type.size, 1, MAX_QUBITS)
        self.local_bits(node.identifier, size, None if given is None else lambda: self.evaluate(given))

    def local_bits(self, identifier: Any, size: int | None, given: Callable[[], Any] | None) -> None:
        """Declare bits of a block; without a value they begin as 0, as all bits do."""
        places = self.take_bits(size or 1, single=size is None, node=identifier)
        top = self.hidden_bits.top
        self.bits.update(dict.fromkeys(places.indices, 0))
        value = None if given is None else given()
        self.declare(identifier.name, places, "bits", identifier)
        if value is not None:
            self.set_bits(places, value, identifier)
        self.release_bits(top)

    def variable(self, node: Any, *, constant: bool) -> Variable:
        """Declare a variable or a constant with its value."""
        given = node.init_expression
        value: Value | Array | None = None
        if type(node.type).__name__ == "ArrayType":
            kind = self.kind(node.type.base_type)
            sizes = [self.integer(size, 1, MAX_ELEMENTS) for size in node.type.dimensions]
            if float(np.prod(np.array(sizes, dtype=np.float64))) > MAX_ELEMENTS:
                raise self.error("an array is too large", node, required=f"at most {MAX_ELEMENTS} elements")
            self.charge(int(np.prod(sizes)), node)
            value = blank_array(kind, sizes) if given is None else self.array(kind, sizes, given)
        else:
            kind = self.kind(node.type)
            if given is not None:
                value = self.assigned(kind, self.evaluate(given, real=kind.name in ("float", "angle")), given)
        if isinstance(value, Value) and not constant:
            value = self.settled(value)
        lasting = isinstance(value, Value) and self.lasting(value)
        known = value if lasting or not isinstance(value, Value) or not value.is_open else None
        made = Variable(kind, known, constant, self.depth)
        if isinstance(value, Value) and value.is_open and (constant or not lasting):
            if constant:
                raise self.unknown("a constant that depends on the run", given)
            self.store(made, node.identifier.name, value, node)
        self.declare(node.identifier.name, made, "a constant" if constant else "a variable", node.identifier)
        return made

    def assigned(self, kind: Kind, value: Any, node: Any) -> Value:
        """Return a value as a variable of a type takes it."""
        if isinstance(value, Pending):
            value = self.measured(value, node)
        if isinstance(value, Array):
            raise self.error("an array cannot stand here", node, required=f"a value of type {kind}")
        try:
            return cast(value, kind, implicit=True)
        except ExpressionError as problem:
            raise self.fault(problem, node) from None

    def do_AliasStatement(self, node: Any) -> None:
        """Declare an alias of qubits, or of bits."""
        first = node.value
        while type(first).__name__ in ("Concatenation", "IndexExpression"):
            first = first.lhs if hasattr(first, "lhs") else first.collection
        found = self.find(first.name, first) if hasattr(first, "name") else None
        quantum = not (isinstance(found, Places) and not found.quantum)
        places = self.places(node.value, quantum=quantum)
        if len(places.indices) > MAX_QUBITS:
            raise self.error("an alias is too long", node, required=f"at most {MAX_QUBITS} elements")
        self.declare(node.target.name, places, "an alias", node.target)

    def do_ClassicalAssignment(self, node: Any) -> None:
        """Assign to a variable, an element of an array, or bits."""
        indexed = type(node.lvalue).__name__ == "IndexedIdentifier"
        name = node.lvalue.name.name if indexed else node.lvalue.name
        found = self.find(name, node.lvalue)
        op = node.op.name.removesuffix("=")
        if isinstance(found, Places):
            places = self.places(node.lvalue, quantum=False)
            value = self.evaluate(node.rvalue)
            if op:
                if isinstance(value, Pending):
                    value = self.measured(value, node)
                if isinstance(value, Array):
                    raise self.unsupported("this assignment", node)
                value = binary(op, self.read_bits(places, node.lvalue), value)
            self.set_bits(places, value, node)
            return
        if not isinstance(found, Variable):
            raise self.error(f"'{shorten(name)}' is not a variable", node.lvalue)
        if found.constant:
            raise self.error(f"'{shorten(name)}' is a constant", node.lvalue, required="a variable")
        real = found.kind.name in ("float", "angle")
        if not indexed and isinstance(found.value, Array) and not op:
            found.value = self.array(found.kind, shape_of(found.value), node.rvalue)
            return
        if indexed and isinstance(found.value, Array) and self.set_part(found, found.value, node, op):
            return
        value = self.evaluate(node.rvalue, real=real)
        if isinstance(value, Pending):
            value = self.measured(value, node)
        if isinstance(value, Array):
            raise self.unsupported("assigning an array here", node)
        old = found.value
        if not indexed:
            if op:
                if not isinstance(old, Value):
                    raise self.error(f"'{shorten(name)}' has no value yet", node.lvalue)
                value = binary(op, old, value, real=real)
            self.assign(found, name, self.assigned(found.kind, value, node.rvalue), node)
            return
        self.set_element(found, node, value, op, real)

    def set_part(self, variable: Variable, holder: Array, node: Any, op: str) -> bool:
        """Assign to a row or a slice of an array; return whether the assignment is to one."""
        flat = [part for index in node.lvalue.indices for part in (index if isinstance(index, list) else [index])]
        for number, part in enumerate(flat):
            chosen, single = self.positions(len(holder.items), part, node.lvalue)
            item = holder.items[chosen[0]] if single else None
            if number < len(flat) - 1:
                if item is None:
                    raise self.unsupported("an index behind a slice of an array", node)
                if not isinstance(item, Array):
                    raise self.error("too many indices", node.lvalue)
                holder = item
                continue
            if single and not isinstance(item, Array):
                return False
            if op or self.depth > variable.depth:
                what = f"'{op}='" if op else "assigning, depending on a measurement,"
                raise self.unsupported(f"{what} to a part of an array", node)
            wanted = shape_of(item) if isinstance(item, Array) else [len(chosen), *shape_of(holder)[1:]]
            made = self.array(variable.kind, wanted, node.rvalue)
            if shape_of(made) != wanted:
                required, found = (" by ".join(map(str, sizes)) for sizes in (wanted, shape_of(made)))
                raise self.error("an array of another size or type", node.rvalue, required=required, found=found)
            if isinstance(item, Array):
                item.items[:] = made.items
            else:
                for place, value in zip(chosen, made.items, strict=True):
                    holder.items[place] = value
        return True

    def set_element(self, variable: Variable, node: Any, value: Value, op: str, real: bool) -> None:
        """Assign to an element of an array, or to bits of a variable."""
        flat = [part for index in node.lvalue.indices for part in (index if isinstance(index, list) else [index])]
        holder = variable.value
        if value.is_open or self.depth or (isinstance(holder, Value) and holder.is_open):
            raise self.unsupported("assigning to an element of a variable, depending on a measurement", node)
        if isinstance(holder, Value) or holder is None:
            if (
                holder is None
                or len(flat) != 1
                or not holder.kind.width
                or holder.kind.name not in ("bit", "uint", "int")
            ):
                raise self.error("this has no elements to assign to", node.lvalue)
            chosen, _ = self.positions(holder.bits, flat[0], node.lvalue)
            old = self.element(holder, flat[0], node.lvalue)
            if op:
                assert isinstance(old, Value)
                value = binary(op, old, value)
            bits = int(cast(value, Kind("bit", len(chosen)), implicit=True).data)
            data = int(holder.data)
            for k, place in enumerate(chosen):
                data = data & ~(1 << place) | (bits >> k & 1) << place
            variable.value = cast(Value(Kind("int"), data), holder.kind)
            return
        for number, part in enumerate(flat):
            # `set_part` has seen to it that an index is a single one, and the last of an element.
            chosen, _ = self.positions(len(holder.items), part, node.lvalue)
            item = holder.items[chosen[0]]
            if number < len(flat) - 1:
                assert isinstance(item, Array)
                holder = item
            else:
                assert isinstance(item, Value)
                value = binary(op, item, value, real=real) if op else value
                holder.items[chosen[0]] = self.assigned(variable.kind, value, node.rvalue)

    def set_bits(self, places: Places, value: Any, node: Any) -> None:
        """Give bits a value, or the outcome of a measurement."""
        if isinstance(value, Pending):
            self.measurement(value.qubits, places, node)
            return
        if isinstance(value, Array):
            raise self.error("an array cannot become bits", node)
        kind = Kind("bit", 0 if places.single else len(places.indices))
        # Measurements that the fast lane remembers would pass by what is known from here on.
        self.reader.statements.clear()
        value = self.assigned(kind, value, node)
        if value.is_open or self.depth > self.level(places.indices):
            self.mark("assign", Assign(Bits(tuple(places.indices), places.single), expression(value)), node)
            self.stored.update(places.indices)
            for place in places.indices:
                self.bits.pop(place, None)
            return
        for k, place in enumerate(places.indices):
            self.bits[place] = int(value.data) >> k & 1

    def do_QuantumMeasurementStatement(self, node: Any) -> None:
        """Measure into bits, or into a variable by way of bits of our own."""
        if node.target is not None:
            name = node.target.name
            if isinstance(self.find(name if isinstance(name, str) else name.name, node.target), Variable):
                plain = SimpleNamespace(lvalue=node.target, op=SimpleNamespace(name="="), rvalue=node.measure)
                plain.span = node.span
                self.do_ClassicalAssignment(plain)
                return
        super().do_QuantumMeasurementStatement(node)

    # ---------------------------------------------------------------- subroutines

    def acts(self, node: Any) -> bool:
        """Whether evaluating an expression calls a subroutine that has qubits."""
        return any(
            type(argument).__name__ == "QuantumArgument"
            for called in self.called(node)
            for argument in called.node.arguments
        )

    def called(self, node: Any) -> list[Subroutine]:
        """Return the subroutines that an expression calls itself."""
        calls = [part for part in parts_of([node]) if type(part).__name__ == "FunctionCall"]
        found = [self.globals.get(call.name.name) for call in calls]
        return [known for known in found if isinstance(known, Subroutine)]

    def measures(self, node: Any) -> bool:
        """Whether evaluating an expression measures, if only in a subroutine."""
        seen: set[str] = set()
        waiting = [node]
        while waiting:
            part = waiting.pop()
            if any(type(inner).__name__ == "QuantumMeasurement" for inner in parts_of([part])):
                return True
            for known in self.called(part):
                if known.node.name.name not in seen:
                    seen.add(known.node.name.name)
                    waiting.append(known.node.body)
        return False

    def do_SubroutineDefinition(self, node: Any) -> None:
        """Declare a subroutine."""
        if self.frames:
            raise self.error("a subroutine is defined inside a block", node, required="a definition outside")
        self.declare(node.name.name, Subroutine(node, self.start), "a subroutine", node.name)

    def do_ExpressionStatement(self, node: Any) -> None:
        """Call a subroutine for its effect."""
        call = node.expression
        known = self.globals.get(call.name.name) if type(call).__name__ == "FunctionCall" else None
        if not isinstance(known, Subroutine | Extern):
            raise self.error("this is not a statement", node, required="a call of a subroutine")
        value = self.call_subroutine(call)
        if isinstance(value, Pending):
            self.unread(value.qubits, node)

    def call_subroutine(self, node: Any) -> Value | Array | Pending | None:
        """Write a subroutine out in place."""
        name = node.name.name
        known = self.globals.get(name)
        if isinstance(known, Extern):
            raise self.unsupported(f"a call of the extern function '{shorten(name)}'", node)
        if not isinstance(known, Subroutine):
            raise self.error(f"'{shorten(name)}' is not a subroutine", node, found=f"it is {self.scope.declared[name]}")
        definition = known.node
        if len(node.arguments) != len(definition.arguments):
            raise self.error(
                f"wrong number of arguments for '{shorten(name)}'",
                node,
                required=str(len(definition.arguments)),
                found=str(len(node.arguments)),
            )
        if self.calls >= MAX_CALLS:
            raise self.error("subroutines call each other too deeply", node, required=f"at most {MAX_CALLS} levels")
        self.charge(STATEMENT, node)
        names: dict[str, Any] = {}
        changed = set(assigned_names(definition.body))
        for formal, given in zip(definition.arguments, node.arguments, strict=True):
            if formal.name.name in names or formal.name.name in RESERVED:
                raise self.error(f"'{shorten(formal.name.name)}' cannot name an argument", node)
            names[formal.name.name] = self.argument(formal, given, known)
            bound = names[formal.name.name]
            if isinstance(bound, Variable) and bound.kind.name == "bit" and formal.name.name in changed:
                names[formal.name.name] = self.own_bits(bound, formal)
        taken = [place for thing in names.values() if isinstance(thing, Places) for place in thing.indices]
        if len(set(taken)) < len(taken):
            raise self.error("a qubit is repeated", node, required="distinct qubits")
        saved = self.frames, self.enclosed, self.start, self.returning
        self.frames, self.enclosed, self.start, self.returning = [], True, known.start, definition.return_type
        self.calls += 1
        try:
            left = self.block(definition.body, names)
            value = left.value if isinstance(left, Return) else None
            if definition.return_type is None or value is None:
                return None
            kind = self.kind(definition.return_type)
            if isinstance(value, Pending) and kind.name == "bit":
                return value
            return self.assigned(kind, value, definition)
        finally:
            self.frames, self.enclosed, self.start, self.returning = saved
            self.calls -= 1

    def argument(self, formal: Any, given: Any, known: Subroutine) -> Variable | Places:
        """Return what a subroutine's argument stands for in one call."""
        start = self.start
        self.start = known.start
        try:
            if type(formal).__name__ == "QuantumArgument":
                size = None if formal.size is None else self.integer(formal.size, 1, MAX_QUBITS)
                kind = None
            else:
                size = None
                by_array = type(formal.type).__name__ in ("ArrayType", "ArrayReferenceType")
                kind = self.kind(formal.type.base_type if by_array else formal.type)
        finally:
            self.start = start
        if kind is None:
            places = self.places(given)
            if (size is None) != places.single or len(places.indices) != (size or 1):
                raise self.error(
                    "an argument of another size",
                    given,
                    required="a single qubit" if size is None else f"{size} qubits",
                    found="a single qubit" if places.single else f"{len(places.indices)} qubits",
                )
            return Places(places.indices, places.single, True)
        value = self.evaluate(given, real=kind.name in ("float", "angle"))
        if by_array:
            if not isinstance(value, Array) or value.kind != kind:
                raise self.error("an argument of another type", given, required=f"an array of {kind}")
            mutable = formal.access is not None and formal.access.name == "mutable"
            return Variable(kind, value if mutable else value.copy(), not mutable, self.depth)
        return Variable(kind, self.assigned(kind, value, given), depth=self.depth)

    def own_bits(self, argument: Variable, node: Any) -> Places | Variable:
        """Return bits of a subroutine's own with the value of an argument that it assigns to."""
        if not isinstance(argument.value, Value):
            return argument
        places = self.take_bits(argument.kind.width or 1, single=not argument.kind.width, node=node)
        self.set_bits(places, argument.value, node)
        return places
