"""Gates of the full lane: calls with modifiers, definitions carried out for their parameters, and measurement."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from gatewright.classical import Name
from gatewright.errors import CannotError, CircuitError, ExpressionError, QasmError, shorten
from gatewright.gates import BARRIER, MEASURE, RESET, UNITARY, Gate
from gatewright.parameters import Affine, Parameter
from gatewright.qasm.definitions import MAX_DEPTH, Definition, Op, expand, same_gate
from gatewright.qasm.evaluation import Evaluator, Places, ValueFault, Variable
from gatewright.qasm.modifiers import Passage, controlled, inverse, passage_of, power
from gatewright.qasm.scope import MAX_QUBITS, RESERVED
from gatewright.qasm.unknowns import as_parameter, is_unknown, known_parameters, reads_bits, with_values
from gatewright.qasm.values import Kind, Value, cast

if TYPE_CHECKING:
    from gatewright.qasm.reader import Reader

__all__ = ["Operations"]

#: Modified gates, and bodies of one gate, that are remembered.
_REMEMBERED = 10_000
_REMEMBERED_BODIES = 1_000

#: Steps that a modifier counts for, for each operation that it changes.
_WEIGHT = 10

#: Parameters at which the body of a gate is tried when it is defined.
_TRIAL = (0.3, 0.7, 1.1, 0.9)


class Operations(Evaluator):
    """Statements that append operations.

    Parameters
    ----------
    reader : Reader
        Whose names, gates and columns are shared.
    """

    def __init__(self, reader: Reader) -> None:
        super().__init__(reader.scope)
        self.reader = reader
        self.sink: list[Op] | None = None  # takes the operations while the body of a gate is recorded
        self.phase: Parameter = 0.0
        self.defining: set[str] = set()
        self.modified: dict[Any, tuple[Any, Passage]] = {}

    def block(self, statements: Sequence[Any], names: dict[str, Any] | None = None) -> object:
        """Carry out the statements of a block; the interpreter does."""
        raise NotImplementedError

    # ---------------------------------------------------------------- gates

    def parameter(self, node: Any) -> Parameter:
        """Return the value of a gate parameter, which need not be known when compiling."""
        value = self.scalar(node, real=True)
        if not value.is_open:
            try:
                return float(cast(value, Kind("float")).data)
            except ExpressionError as problem:
                raise self.fault(problem, node) from None
        tree = value.data
        if reads_bits(tree):
            # Bits change from one measurement to the next: what they are now is kept under a name.
            tree = self.kept(value, node)
        try:
            made = as_parameter(tree)
        except ExpressionError as problem:
            raise self.fault(problem, node) from None
        return made if not isinstance(made, Affine) or made.terms else made.constant

    def kept(self, value: Value, node: Any) -> Name:
        """Assign a value to a variable of its own at run time; the interpreter does."""
        raise NotImplementedError

    def emit(self, target: Gate | Definition, qubits: Sequence[int], values: Sequence[Parameter], node: Any) -> None:
        """Append one operation where operations go at the moment."""
        self.charge(target.size if isinstance(target, Definition) else 1, node)
        if self.sink is not None:
            self.sink.append(Op(target, tuple(qubits), tuple(values)))
        elif isinstance(target, Definition):
            self.phase += expand(target, values, qubits, self.reader.emit)
        else:
            self.reader.emit(target, qubits, values)

    def do_QuantumGate(self, node: Any) -> None:
        """Call a gate, with its modifiers."""
        if node.duration is not None:
            raise self.unsupported("a gate of a stated duration", node)
        name = node.name.name
        if name in self.defining:
            raise self.error(f"the gate '{shorten(name)}' is defined by itself", node)
        target = self.reader.target(name, self.at(node.name))
        values = [self.parameter(argument) for argument in node.arguments]
        self.count(node, "parameters", target.n_parameters, len(values))
        changes = self.changes(node.modifiers)
        controls = sum(len(change) for change in changes if isinstance(change, tuple))
        self.count(node, "qubits", target.n_qubits + controls, len(node.qubits))
        rows = self.broadcast(node)
        if not changes:
            self.charge(len(rows) - 1, node)
            for row in rows:
                self.emit(target, row, values, node)
            return
        key = (id(target), tuple(values), tuple(changes))
        known = self.modified.get(key)
        if known is None:
            if isinstance(target, Definition):
                self.charge(target.size, node)
            known = target, self.change(passage_of(target, values), changes, node)
            if len(self.modified) < _REMEMBERED:
                self.modified[key] = known
        self.place(known[1], rows, node)

    def do_QuantumPhase(self, node: Any) -> None:
        """Apply ``gphase``, with its modifiers."""
        changes = self.changes(node.modifiers)
        controls = sum(len(change) for change in changes if isinstance(change, tuple))
        self.count(node, "qubits", controls, len(node.qubits))
        passage = self.change(Passage(0, (), self.parameter(node.argument)), changes, node)
        self.place(passage, self.broadcast(node) if controls else [()], node)

    def count(self, node: Any, what: str, required: int, found: int) -> None:
        """Refuse a wrong number of parameters or qubits."""
        if required != found:
            name = node.name.name if hasattr(node, "name") else "gphase"
            raise self.error(
                f"wrong number of {what} for '{shorten(name)}'", node, required=str(required), found=str(found)
            )

    def changes(self, modifiers: Sequence[Any]) -> list[str | float | tuple[bool, ...]]:
        """Return modifiers in the order in which they act: ``inv``, an exponent, or the states of controls."""
        made: list[str | float | tuple[bool, ...]] = []
        controls = 0
        for modifier in reversed(modifiers):
            name = modifier.modifier.name
            if name == "inv":
                made.append(name)
            elif name == "pow":
                made.append(self.real(modifier.argument))
            else:
                number = 1 if modifier.argument is None else self.integer(modifier.argument, 1, MAX_QUBITS)
                controls += number
                if controls > MAX_QUBITS:
                    raise self.error("too many controls", modifier, required=f"at most {MAX_QUBITS}")
                made.append((name == "ctrl",) * number)
        return made

    def change(self, passage: Passage, changes: Sequence[str | float | tuple[bool, ...]], node: Any) -> Passage:
        """Return a passage with modifiers applied."""
        try:
            for change in changes:
                self.charge(_WEIGHT * (1 + len(passage.operations)), node)
                if isinstance(change, tuple):
                    passage = controlled(passage, change)
                elif isinstance(change, str):
                    passage = inverse(passage)
                else:
                    passage = power(passage, change)
        except (CircuitError, CannotError) as problem:
            if problem.line is not None or isinstance(problem, QasmError):
                raise
            raise self.source.locate(problem, self.at(node)) from None
        return replace(passage, operations=tuple([self.native(op) for op in passage.operations]))

    def native(self, op: Op) -> Op:
        """Return an operation as the device has it: its gate of that name, or a matrix where that one differs."""
        gate = op.target
        native = self.reader.natives.get(gate.name)
        if is_unknown(op):
            return op if native is None else op._replace(target=native)
        if native is None or native is gate or not isinstance(gate, Gate) or gate.function is None:
            return op
        if same_gate(native, gate, exact=True):
            return op._replace(target=native)
        return Op(UNITARY, op.qubits, (), np.array(gate.matrix(known_parameters(op)), dtype=np.complex128))

    def place(self, passage: Passage, rows: Sequence[Sequence[int]], node: Any) -> None:
        """Append a passage on each list of qubits."""
        self.charge(len(passage.operations) * len(rows), node)
        for row in rows:
            for op in passage.operations:
                on = [row[q] for q in op.qubits]
                if self.sink is not None:
                    self.sink.append(Op(op.target, tuple(on), op.parameters, op.matrix))
                else:
                    assert isinstance(op.target, Gate)
                    self.reader.emit(op.target, on, op.parameters, op.matrix)
        self.phase += passage.phase * len(rows)

    def broadcast(self, node: Any) -> list[tuple[int, ...]]:
        """Return the lists of qubits that operands stand for, registers taken element by element."""
        parts = [self.places(operand) for operand in node.qubits]
        sizes = {len(part.indices) for part in parts if not part.single}
        if len(sizes) > 1:
            raise self.error(
                "registers of different sizes in one statement",
                node,
                required="equal sizes",
                found=", ".join(map(str, sorted(sizes))),
            )
        length = sizes.pop() if sizes else 1
        rows = list(zip(*([p.indices[0]] * length if p.single else p.indices for p in parts), strict=True))
        for row in rows:
            self.distinct(row, node)
        return rows

    def distinct(self, qubits: Sequence[int], node: Any) -> None:
        """Refuse a repeated qubit."""
        if len(set(qubits)) < len(qubits):
            raise self.error("a qubit is repeated", node, required="distinct qubits")

    def do_QuantumGateDefinition(self, node: Any) -> None:
        """Define a gate by its body, which is carried out for the parameters of each call."""
        if self.frames:
            raise self.error("a gate is defined inside a block", node, required="a definition outside")
        parameters = tuple(item.name for item in node.arguments)
        wires = tuple(item.name for item in node.qubits)
        for what, items in (("parameter", node.arguments), ("qubit", node.qubits)):
            seen: set[str] = set()
            for item in items:
                if item.name in RESERVED or item.name in seen:
                    required = f"a name for each {what}, none of them twice"
                    raise self.error(f"'{shorten(item.name)}' cannot name a {what}", item, required=required)
                seen.add(item.name)
        self.scope.declare(node.name.name, "a gate", self.at(node.name))
        start = self.start
        known: dict[tuple[float | Name, ...], tuple[list[Op], Parameter]] = {}

        def record(given: tuple[Parameter, ...]) -> tuple[list[Op], Parameter]:
            # What is not known goes through the body under the name of the parameter.
            unknown = {name: value for name, value in zip(parameters, given, strict=True) if isinstance(value, Affine)}
            values = tuple(
                Name(name) if isinstance(value, Affine) else value
                for name, value in zip(parameters, given, strict=True)
            )
            found = known.get(values)
            if found is None:
                found = self.record(node, parameters, wires, values, start)
                if len(known) < _REMEMBERED_BODIES:
                    known[values] = found
            return with_values(*found, unknown) if unknown else found

        size, depth = len(node.body), 1
        self.defining.add(node.name.name)
        try:
            trial, _ = record(tuple(_TRIAL[k % len(_TRIAL)] + 0.01 * k for k in range(len(parameters))))
        except ValueFault:
            trial = []
        finally:
            self.defining.discard(node.name.name)
        inner = [op.target for op in trial if isinstance(op.target, Definition)]
        size = max(size, min(len(trial) + sum(target.size for target in inner), 10**12))
        depth = 1 + max((target.depth for target in inner), default=0)
        if depth > MAX_DEPTH:
            what = f"the gate '{shorten(node.name.name)}' is nested too deeply"
            raise self.error(what, node, required=f"at most {MAX_DEPTH} levels of definitions")
        made = Definition(node.name.name, parameters, len(wires), (), record=record, size=size, depth=depth)
        self.reader.define(made, self.at(node))

    def record(
        self,
        node: Any,
        parameters: tuple[str, ...],
        wires: tuple[str, ...],
        values: tuple[float | Name, ...],
        start: int,
    ) -> tuple[list[Op], Parameter]:
        """Carry out the body of a gate for given parameters."""
        names: dict[str, Any] = {
            name: Variable(Kind("angle"), Value(Kind("angle"), value), constant=True)
            for name, value in zip(parameters, values, strict=True)
        }
        names.update({name: Places((k,), True, True) for k, name in enumerate(wires)})
        saved = self.frames, self.enclosed, self.start, self.sink, self.phase
        self.frames, self.enclosed, self.start, self.sink, self.phase = [], True, start, [], 0.0
        try:
            self.block(node.body, names)
            return self.sink, self.phase
        finally:
            self.frames, self.enclosed, self.start, self.sink, self.phase = saved

    # ---------------------------------------------------------------- other operations

    def outside(self, what: str, node: Any) -> None:
        """Refuse what cannot stand in the body of a gate."""
        if self.sink is not None:
            raise self.error(f"'{what}' cannot stand in a definition", node, required="gates and barriers")

    def do_QuantumReset(self, node: Any) -> None:
        """Apply ``reset``."""
        self.outside("reset", node)
        for qubit in self.places(node.qubits).indices:
            self.emit(RESET, (qubit,), (), node)

    def do_QuantumBarrier(self, node: Any) -> None:
        """Apply ``barrier``, to all qubits where none is named."""
        if node.qubits:
            qubits = [q for operand in node.qubits for q in self.places(operand).indices]
        elif self.sink is not None:
            qubits = [thing.indices[0] for thing in self.frames[0].values() if isinstance(thing, Places)]
        else:
            qubits = list(range(self.scope.n_qubits or self.scope.n_physical))
        self.distinct(qubits, node)
        self.charge(len(qubits), node)
        if qubits:
            self.emit(BARRIER, qubits, (), node)

    def do_QuantumMeasurementStatement(self, node: Any) -> None:
        """Measure into bits."""
        if node.target is None:
            self.unread(self.places(node.measure.qubit), node)
            return
        self.measurement(self.places(node.measure.qubit), self.places(node.target, quantum=False), node)

    def unread(self, sources: Places, node: Any) -> None:
        """Measure qubits into bits of their own that nothing reads."""
        self.outside("measure", node)
        self.charge(len(sources.indices), node)
        for qubit in sources.indices:
            self.reader.measure_unread(qubit, self.at(node))

    def measurement(self, sources: Places, targets: Places, node: Any) -> None:
        """Append the measurement of qubits into as many bits."""
        self.outside("measure", node)
        if len(sources.indices) != len(targets.indices) or (
            sources.single != targets.single and len(sources.indices) > 1
        ):
            raise self.error(
                "a measurement of unequal sizes",
                node,
                required=f"as many bits as qubits ({len(sources.indices)})",
                found=str(len(targets.indices)),
            )
        self.charge(len(sources.indices), node)
        for qubit, bit in zip(sources.indices, targets.indices, strict=True):
            self.bits.pop(bit, None)
            self.reader.link[len(self.reader.op)] = bit
            self.reader.emit(MEASURE, (qubit,))
