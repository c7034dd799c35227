"""Control flow of the full lane: carried out where all is known when compiling, kept where it depends on the run.

What depends on a measured bit stays in the program as a mark (`gatewright.program.Mark`) among the operations. The
variables and bits that such a block assigns are no longer known behind it: before it they get a place at run time,
and every later assignment is kept. After the OpenQASM 3 specification (arXiv:2104.14722), classical instructions.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from gatewright.classical import Bits, Expression, Literal, Name, Operation, depth_of
from gatewright.errors import shorten
from gatewright.program import Assign, Leave, Mark
from gatewright.qasm.evaluation import STATEMENT, Pending, Places, Variable
from gatewright.qasm.hidden import FIRST_HIDDEN, HiddenBits
from gatewright.qasm.operations import Operations
from gatewright.qasm.scope import RESERVED
from gatewright.qasm.unknowns import as_parameter, as_tree, names_of, reads_bits
from gatewright.qasm.values import Array, Kind, Value, cast, expression

if TYPE_CHECKING:
    from gatewright.qasm.reader import Reader

__all__ = ["Control", "End", "Return", "assigned_names", "parts_of"]


@dataclass(frozen=True, slots=True)
class Return:
    """The end of a subroutine."""

    value: Value | Array | Pending | None


class End(Exception):
    """The end of the program."""


#: Levels of an expression that is kept for the run.
MAX_LEVELS = 200

LEAVING = ("BreakStatement", "ContinueStatement", "EndStatement")

#: How a block is left: ``break``, ``continue``, a return, or ``gone`` where no path goes on behind it.
Left = str | Return | None


class Control(Operations):
    """Statements of control flow.

    Parameters
    ----------
    reader : Reader
        Whose columns take the operations and the marks.
    """

    def __init__(self, reader: Reader) -> None:
        super().__init__(reader)
        self.depth = 0  # blocks open at the moment that run or not depending on the run
        self.loops: list[tuple[bool, int]] = []  # open loops: whether each is kept, and the depth outside it
        self.stored: set[int] = set()  # bits that were assigned at run time
        self.hidden_bits = HiddenBits()

    def block(self, statements: Sequence[Any], names: dict[str, Any] | None = None) -> Left:
        """Carry out the statements of a block in a frame of their own; the interpreter does."""
        raise NotImplementedError

    # ---------------------------------------------------------------- bits that have no register

    def take_bits(self, number: int, *, single: bool, node: Any) -> Places:
        """Take bits of our own, until the statement or the block at hand ends."""
        self.charge(number, node)
        return Places(self.hidden_bits.take(number, self.depth), single, False)

    def release_bits(self, top: int) -> None:
        """Give back bits of our own that were taken since `top` were in use."""
        for place in self.hidden_bits.release(top):
            self.bits.pop(place, None)

    def measured(self, pending: Pending, node: Any) -> Value:
        """Measure into bits of our own, and return their value."""
        sources = pending.qubits
        places = self.take_bits(len(sources.indices), single=sources.single, node=node)
        self.measurement(sources, places, node)
        return self.read_bits(places, node)

    def acts(self, node: Any) -> bool:
        """Whether evaluating an expression does something to qubits; the interpreter tells."""
        raise NotImplementedError

    def measures(self, node: Any) -> bool:
        """Whether evaluating an expression measures; the interpreter tells."""
        raise NotImplementedError

    def level(self, places: Sequence[int]) -> int:
        """Return the blocks around the declaration of bits that run or not depending on the run."""
        return min(self.hidden_bits.levels[place] if place >= FIRST_HIDDEN else 0 for place in places)

    # ---------------------------------------------------------------- marks, and what they do to names

    def mark(self, word: str, content: Expression | Assign | Leave | None, node: Any) -> None:
        """Put a mark among the operations."""
        if self.sink is not None:
            raise self.unsupported("a gate definition that depends on the run", node)
        self.charge(STATEMENT, node)
        if depth_of(content.value if isinstance(content, Assign) else content) > MAX_LEVELS:
            required = f"at most {MAX_LEVELS} operations in each other"
            raise self.error("an expression that depends on the run is too long", node, required=required)
        self.reader.mark(Mark(word, content))

    def lasting(self, value: Value) -> bool:
        """Whether a value is a real number that depends on inputs alone, and so stays what it is."""
        if not value.is_open or not (isinstance(value.data, Name) or value.kind.name in ("float", "angle")):
            return False
        return not reads_bits(value.data) and names_of(value.data) <= self.reader.inputs.keys()

    def settled(self, value: Value) -> Value:
        """Return a number that depends on inputs alone in its affine form, so that expressions of it do not grow."""
        if value.kind.name not in ("float", "angle") or not self.lasting(value):
            return value
        return Value(value.kind, as_tree(as_parameter(value.data)))

    def store(self, variable: Variable, name: str, value: Value, node: Any) -> None:
        """Assign to a variable at run time."""
        if not variable.runtime:
            variable.runtime = self.reader.variable(name, variable.kind)
        self.mark("assign", Assign(Name(variable.runtime), expression(value)), node)
        variable.value = Value(variable.kind, Name(variable.runtime))

    def kept(self, value: Value, node: Any) -> Name:
        """Assign a value to a variable of its own at run time."""
        name = self.reader.variable("angle_of_bits", value.kind)
        self.mark("assign", Assign(Name(name), expression(value)), node)
        return Name(name)

    def assign(self, variable: Variable, name: str, value: Value, node: Any) -> None:
        """Assign to a variable: when compiling if that can be, else at run time."""
        value = self.settled(value)
        if (value.is_open and not self.lasting(value)) or (self.depth and variable.depth < self.depth):
            self.store(variable, name, value, node)
        else:
            variable.value = value

    def store_bits(self, places: Sequence[int], node: Any) -> None:
        """Assign to bits at run time what is known of them."""
        known = [place for place in places if place in self.bits]
        for place in known:
            value = Literal(str(self.bits[place]))
            self.mark("assign", Assign(Bits((place,), single=True), value), node)
            self.stored.add(place)

    def forget(self, statements: Sequence[Any], node: Any) -> None:
        """Let go of what is known of the variables and bits that statements assign."""
        for name in dict.fromkeys(assigned_names(statements)):
            try:
                found = self.find(name, node)
            except Exception:  # declared inside the statements
                continue
            if isinstance(found, Places) and not found.quantum:
                self.store_bits(found.indices, node)
                for place in found.indices:
                    self.bits.pop(place, None)
            elif isinstance(found, Variable) and not found.constant:
                if isinstance(found.value, Value) and (not found.value.is_open or self.lasting(found.value)):
                    self.store(found, name, found.value, node)
                elif found.value is None and not found.runtime:
                    found.runtime = self.reader.variable(name, found.kind)
                    found.value = Value(found.kind, Name(found.runtime))

    def finish(self) -> None:
        """Give bits that still hold a known value that value at run time, where they do not begin with it."""
        measured = {*self.reader.link.values(), *self.stored}
        for place, value in sorted(self.bits.items()):
            if value or place in measured:
                self.reader.mark(Mark("assign", Assign(Bits((place,), single=True), Literal(str(value)))))
        self.bits.clear()

    # ---------------------------------------------------------------- branches

    def branch(self, statements: Sequence[Any], node: Any) -> Left:
        """Carry out a block that runs or not depending on the run; return ``gone`` if nothing goes on behind it."""
        self.depth += 1
        try:
            left = self.block(statements)
        except End:
            self.mark("leave", Leave("end"), node)
            return "gone"
        finally:
            self.depth -= 1
        if isinstance(left, Return):
            raise self.unsupported("a 'return' that depends on a measurement", node)
        if left in ("break", "continue"):
            kept, depth = self.loops[-1] if self.loops else (False, 0)
            if not kept or depth > self.depth:
                raise self.unsupported(f"a '{left}' that depends on a measurement, in a loop that is unrolled", node)
            self.mark("leave", Leave(str(left)), node)
            return "gone"
        return left

    def choose(self, condition: Expression, branches: Sequence[Sequence[Any]], node: Any) -> Left:
        """Keep an ``if`` with its two branches."""
        self.mark("if", condition, node)
        first = self.branch(branches[0], node)
        self.mark("else", None, node)
        second = self.branch(branches[1], node)
        self.mark("close", None, node)
        return "gone" if first == second == "gone" else None

    def do_BranchingStatement(self, node: Any) -> Left:
        """Carry out the branch of ``if`` that is taken, or keep both."""
        value = self.scalar(node.condition)
        if not value.is_open:
            return self.block(node.if_block if value.data else node.else_block)
        self.forget([*node.if_block, *node.else_block], node)
        return self.choose(value.data, (node.if_block, node.else_block), node)

    def do_SwitchStatement(self, node: Any) -> Left:
        """Carry out the case of ``switch`` that is met, or keep all as a chain of ``if``."""
        value = self.scalar(node.target)
        cases = [([self.integer(label) for label in labels], body.statements) for labels, body in node.cases]
        default = [] if node.default is None else node.default.statements
        if not value.is_open:
            wanted = self.integer(node.target)
            return self.block(next((body for labels, body in cases if wanted in labels), default))
        self.forget([statement for _, body in cases for statement in body] + list(default), node)
        return self.chain(value.data, cases, default, node)

    def chain(self, value: Expression, cases: Sequence[tuple[list[int], Any]], default: Any, node: Any) -> Left:
        """Keep the cases of ``switch``."""
        if not cases:
            return self.branch(default, node)
        labels, body = cases[0]
        tests: list[Expression] = [Operation("==", (value, Literal(str(label)))) for label in labels]
        condition = tests[0]
        for test in tests[1:]:
            condition = Operation("||", (condition, test))
        self.mark("if", condition, node)
        first = self.branch(body, node)
        self.mark("else", None, node)
        second = self.chain(value, cases[1:], default, node)
        self.mark("close", None, node)
        return "gone" if first == second == "gone" else None

    # ---------------------------------------------------------------- loops

    def do_WhileLoop(self, node: Any) -> Left:
        """Unroll ``while`` as long as its condition is known, and keep it from where it is not."""
        if self.acts(node.while_condition):
            # Each round does so anew, and a condition that is kept has no place for that.
            node = _with_condition_inside(node)
        while True:
            value = self.scalar(node.while_condition)
            if value.is_open or (value.data and self.depends(node)):
                return self.keep_loop(node)
            if not value.data:
                return None
            self.charge(STATEMENT, node)
            self.loops.append((False, self.depth))
            try:
                left = self.block(node.block)
            finally:
                self.loops.pop()
            if left == "break":
                return None
            if left == "gone" or isinstance(left, Return):
                return left

    def depends(self, node: Any) -> bool:
        """Whether a loop, whose condition is known before its first round, depends on the run later."""
        changed = {name for name in _open_targets(node.block, self.is_open_name, self.measures)}

        def is_open(expression: Any) -> bool:
            return self.measures(expression) or any(
                name in changed or self.is_open_name(name, at) for name, at in _names(expression)
            )

        if is_open(node.while_condition):
            return True
        branches = [part for part in parts_of(node.block) if type(part).__name__ == "BranchingStatement"]
        return any(
            is_open(part.condition) and any(type(inner).__name__ in LEAVING for inner in parts_of([part]))
            for part in branches
        )

    def is_open_name(self, name: str, node: Any) -> bool:
        """Whether a name stands for something that is not known when compiling."""
        try:
            found = self.find(name, node)
        except Exception:  # declared inside the loop
            return False
        if isinstance(found, Places):
            return not found.quantum and not all(place in self.bits for place in found.indices)
        return isinstance(found, Variable) and isinstance(found.value, Value) and found.value.is_open

    def keep_loop(self, node: Any) -> Left:
        """Keep a ``while``."""
        self.forget(node.block, node)
        value = self.scalar(node.while_condition)
        self.mark("while", expression(value), node)
        self.loops.append((True, self.depth))
        try:
            self.branch(node.block, node)
        finally:
            self.loops.pop()
        self.mark("close", None, node)
        return None

    def do_ForInLoop(self, node: Any) -> Left:
        """Unroll ``for``."""
        kind = self.kind(node.type)
        declared = node.set_declaration
        what = type(declared).__name__
        values: Sequence[Any]
        if what == "RangeDefinition":
            span = self.span(declared, None)
            self.charge(STATEMENT * len(span), node)
            values = [Value(Kind("int"), k) for k in span]
        elif what == "DiscreteSet":
            values = [self.scalar(item, real=kind.name in ("float", "angle")) for item in declared.values]
        else:
            whole = self.evaluate(declared)
            if isinstance(whole, Array):
                values = list(whole.items)
            elif isinstance(whole, Value) and whole.kind.name == "bit":
                data = self.known(whole, declared).data
                values = [Value(Kind("bit"), int(data) >> k & 1) for k in range(whole.bits)]
            else:
                raise self.error("'for' over what is not a range, a set or an array", declared)
        name = node.identifier.name
        if name in RESERVED:
            raise self.error(f"'{shorten(name)}' is a reserved word", node.identifier, required="another name")
        for value in values:
            if isinstance(value, Array):
                raise self.error("'for' over the rows of an array", declared, required="an array of one dimension")
            self.loops.append((False, self.depth))
            try:
                left = self.block(node.block, {name: Variable(kind, cast(value, kind), depth=self.depth)})
            finally:
                self.loops.pop()
            if left == "break":
                break
            if left == "gone" or isinstance(left, Return):
                return left
        return None

    def do_BreakStatement(self, node: Any) -> str:
        """Leave a loop."""
        return "break"

    def do_ContinueStatement(self, node: Any) -> str:
        """Go to the next round of a loop."""
        return "continue"

    def do_EndStatement(self, node: Any) -> None:
        """End the program."""
        raise End


def parts_of(nodes: Iterable[Any]) -> Iterator[Any]:
    """Yield all nodes of syntax trees."""
    waiting = list(nodes)
    while waiting:
        node = waiting.pop()
        if isinstance(node, list | tuple):
            waiting.extend(node)
        elif hasattr(node, "__dataclass_fields__"):
            yield node
            waiting.extend(value for name, value in vars(node).items() if name != "span")


def _names(node: Any) -> Iterator[tuple[str, Any]]:
    """Yield the names in a syntax tree."""
    return ((part.name, part) for part in parts_of([node]) if type(part).__name__ == "Identifier")


def _target(node: Any) -> list[str]:
    """Return the name that an assignment is to."""
    return [node.name.name if type(node).__name__ == "IndexedIdentifier" else node.name]


def _with_condition_inside(loop: Any) -> Any:
    """Return ``while (true) { if (!condition) break; ... }`` for a loop."""
    from openqasm3 import ast

    def at(node: Any, span: Any) -> Any:
        node.span = span
        return node

    condition, span = loop.while_condition, loop.while_condition.span
    inverted = at(ast.UnaryExpression(ast.UnaryOperator["!"], condition), span)
    leaving = at(ast.BranchingStatement(inverted, [at(ast.BreakStatement(), span)], []), span)
    return at(ast.WhileLoop(at(ast.BooleanLiteral(True), span), [leaving, *loop.block]), loop.span)


def _open_targets(
    statements: Sequence[Any], is_open: Callable[[str, Any], bool], measures: Callable[[Any], bool]
) -> set[str]:
    """Return the names that statements may give a value that depends on a measurement."""
    found: set[str] = set()
    assignments = []
    for part in parts_of(statements):
        if type(part).__name__ == "QuantumMeasurementStatement" and part.target is not None:
            found.update(_target(part.target))
        elif type(part).__name__ == "ClassicalAssignment":
            assignments.append((_target(part.lvalue)[0], part.rvalue))
        elif type(part).__name__ == "ClassicalDeclaration" and part.init_expression is not None:
            assignments.append((part.identifier.name, part.init_expression))
    size = -1
    while size < len(found):
        size = len(found)
        for name, value in assignments:
            if measures(value) or any(read in found or is_open(read, at) for read, at in _names(value)):
                found.add(name)
    return found


def assigned_names(statements: Sequence[Any]) -> Iterator[str]:
    """Yield the names that statements assign."""
    for part in parts_of(statements):
        if type(part).__name__ == "ClassicalAssignment":
            yield from _target(part.lvalue)
        elif type(part).__name__ == "QuantumMeasurementStatement" and part.target is not None:
            yield from _target(part.target)
