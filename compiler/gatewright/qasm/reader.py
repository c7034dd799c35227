"""Read programs in OpenQASM 2 and 3 into circuits.

The languages are those of Cross et al., arXiv:1707.03429 (version 2) and ACM Trans. Quantum Comput. 3, 12 (2022),
arXiv:2104.14722 (version 3). Each distinct plain statement is analysed once; a program is then a list of numbers of
distinct statements, which NumPy turns into columns. Statements of OpenQASM 3 beyond the plain ones are handed to
`gatewright.qasm.full`, one by one. What is not read is refused by name, line and column.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from itertools import count
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gatewright.calibrated import calibrated_gates, misplaced
from gatewright.circuit import Circuit
from gatewright.classical import Bits, Literal, Operation
from gatewright.errors import ExpressionError, QasmError, UnsupportedError, nearest_name, shorten
from gatewright.gates import BARRIER, CONTROL, GATES, MEASURE, RESET, Gate
from gatewright.parameters import Affine, Parameter
from gatewright.program import Mark, Program, split_at_marks
from gatewright.qasm.bodies import read_definition
from gatewright.qasm.columns import MAX_OPERANDS, circuit
from gatewright.qasm.definitions import Definition, equals, expand, same_gate
from gatewright.qasm.hidden import placed
from gatewright.qasm.lanes import CONST, EITHER, FAST, beyond, lane, leading_word
from gatewright.qasm.library import BUILT_IN, LIBRARIES, LIBRARY_FILES
from gatewright.qasm.scanner import Scanner, pays
from gatewright.qasm.scope import MAX_QUBITS, NAME, UNSUPPORTED, Scope, split
from gatewright.qasm.source import Source

if TYPE_CHECKING:
    from gatewright.qasm.full import FullLane

__all__ = ["MAX_OPERANDS", "MAX_OPERATIONS", "Reader", "read"]

#: Most operations of one program, the steps of expanded definitions included.
MAX_OPERATIONS = 10_000_000

#: Distinct statements that are remembered.
_REMEMBERED = 100_000

_WORD = re.compile(NAME)
_FLAT = re.compile(rf"\s*({NAME})\s*(?:\(([^()]*)\))?\s*([^()]*)")
_CALL = re.compile(rf"({NAME})\s*(?:\((.*)\))?\s*(.*)", re.DOTALL)
_INCLUDE = re.compile(r"""include\s*(?:"([^"]*)"|'([^']*)')""")
_REGISTER = re.compile(rf"(qreg|creg)\s+({NAME})\s*(?:\[([^][]*)\])?")
_DECLARATION = re.compile(rf"(qubit|bit)\s*(?:\[([^][]*)\])?\s*({NAME})\s*(?:=(.*))?", re.DOTALL)
_OPAQUE = re.compile(rf"opaque\s+({NAME})\s*(?:\([^()]*\))?\s*[^()]*")
_BLOCK = re.compile(r"\s*gate\b")
_BRACES = re.compile(r"[{}]")
_CALIBRATED = re.compile(rf"defcal\s+({NAME})")
_NOTES = re.compile(r"(?:\s*(?:@|#|pragma\b)[^\n]*)++")
_MEASURE = re.compile(r"measure\b(.*)", re.DOTALL)
_IF = re.compile(r"if\s*\(\s*([^\s=()]+)\s*==\s*([^=()]*?)\s*\)\s*(.*)", re.DOTALL)
_ARROW = re.compile(r"measure\b(.*)->(.*)", re.DOTALL)


def read(
    text: str, *, where: str = "", natives: Mapping[str, Gate] | None = None, strict: bool = True
) -> Circuit | Program:
    """Read an OpenQASM program.

    Versions 2.0, 3.0 and 3.1 (3.0 where the version line is missing); ``include`` of the version's own standard
    library, which is never opened; registers, constants, gate definitions, gate calls with broadcasting,
    ``gphase``, ``barrier``, ``measure`` and ``reset``. Of OpenQASM 3 also modifiers, classical variables, aliases,
    control flow and subroutines, as far as all is known when compiling: they are carried out while reading, and
    the circuit holds the gates that come of it. Annotations and pragmas are passed over. Division is of reals in
    gate parameters, also between integers.

    A gate that the program defines is expanded; but where the definition equals the gate of that name in the
    table of this package, up to global phase, the call stays what it is. Global phase is kept as far as the
    program tells it: OpenQASM 2 does not. Under modifiers the definition counts, phase included.

    Parameters
    ----------
    text : str
    where : str
        File name for messages.
    natives : mapping of str to Gate, optional
        Native gates of a device: calls of these names stay what they are. Where the program or its library
        defines such a gate, it has to agree with the native matrix up to global phase.
    strict : bool
        If False, natives are known only where the program defines or declares them, and one that differs is the
        program's own.

    Returns
    -------
    Circuit

    Raises
    ------
    QasmError
        The program is at fault.
    UnsupportedError
        The program says something that this version does not read.

    Examples
    --------
    >>> c = read('OPENQASM 3.0; include "stdgates.inc"; qubit[2] q; h q[0]; cx q[0], q[1]; rz(pi/4) q;')
    >>> [(op.name, op.qubits) for op in c]
    [('h', (0,)), ('cx', (0, 1)), ('rz', (0,)), ('rz', (1,))]
    """
    return Reader(Source(text, where), natives or {}, strict=strict).read()


class Reader:
    """One program being read; with `only_full` the full lane takes every statement that it can."""

    def __init__(
        self, source: Source, natives: Mapping[str, Gate], *, only_full: bool = False, strict: bool = True
    ) -> None:
        self.source = source
        self.only_full = only_full
        self.full: FullLane | None = None
        self.closed = 0  # offset behind the last statement of the full lane
        self.ended = False
        self.scope = Scope(source)
        self.natives = natives
        self.strict = strict
        self.pieces = source.pieces()
        self.position = 0  # offset of the piece at hand
        self.started = False
        self.gates: dict[str, Gate | Definition] = {name: GATES[name] for name in BUILT_IN[3]}
        if strict:
            self.gates.update(natives)
        self.opaque: set[str] = set()
        self.clashes: set[str] = set()  # native gates that differ from the library's
        self.statements: dict[str, int] = {}
        self.kinds: dict[str, tuple[int, int, int]] = {}  # of gates called before: number, qubits, parameters
        # Operations of the distinct statements: statement k makes operations first[k] to first[k + 1].
        self.first: list[int] = [0]
        self.phases: dict[int, float] = {}
        self.table: dict[Gate, int] = {}
        self.op: list[int] = []
        self.width: list[int] = []
        self.qubits: list[int] = []
        self.parameters: list[float] = []
        self.link: dict[int, int] = {}  # bits of measurements
        self.calibrations: list[str] = []
        self.calibrated: set[str] = set()  # gates with a calibration
        self.unread: dict[int, int] = {}  # bits of qubits whose outcomes are dropped
        self.matrices: dict[int, NDArray[np.complex128]] = {}  # of explicit unitaries
        self.marks: dict[int, int] = {}  # of control flow that depends on the run: numbers of their contents
        self.contents: list[Mark] = []
        self.variables: dict[str, str] = {}  # at run time: names and types
        self.inputs: dict[str, str] = {}  # names and types
        self.unknown: dict[int, tuple[Parameter, ...]] = {}  # parameters of operations of which some are not known
        self.handlers: dict[str, Callable[[str, int], None]] = {
            "OPENQASM": self.version_line,
            "include": self.include,
            "qreg": self.register,
            "creg": self.register,
            "qubit": self.register,
            "bit": self.register,
            "opaque": self.opaque_gate,
            "const": self.constant,
            "measure": self.measure,
            "barrier": self.barrier,
            "reset": self.reset,
            "gphase": self.global_phase,
        }

    # ---------------------------------------------------------------- the program as a whole

    def read(self) -> Circuit | Program:
        """Read all statements and put the columns together."""
        order: list[int] = []
        known = self.statements.get
        scanner = Scanner(self) if not self.only_full and pays(self.source.text) else None
        while (piece := next(self.pieces, None)) is not None:
            number = known(piece)
            if number is None:
                try:
                    # What is plainly for the full lane is spared the complaint of the fast one.
                    full = self.full
                    plain = "++" not in piece and (
                        full is None or not (":" in piece or (full.globals and full.concerns(piece)))
                    )
                    number = self.flat_call(piece) if plain and not self.only_full else -1
                except (QasmError, UnsupportedError):
                    if not beyond(piece, self.scope, self.full):
                        raise
                    number = -1
                if number < 0:
                    number = self.any_statement(piece)
            order.append(number)
            self.position += len(piece) + 1
            if self.ended:
                break
            if scanner is not None:
                scanner.advance(order)
        end = len(self.source.text.rstrip()) - 1
        if self.source.text[end] not in ";}" and self.closed <= end and not self.ended:
            raise self.source.error("a ';' is missing", end, required="';' behind the last statement")
        if not self.scope.n_qubits and not self.scope.n_physical:
            hint = "such as 'qubit[2] q;' or 'qreg q[2];'"
            raise self.source.error("no qubits are declared", 0, required="a declaration of qubits", hint=hint)
        if self.full is not None and self.full.bits:
            self.full.finish()
            order.append(self.finish(None))
        if self.full is not None and self.full.hidden_bits.levels:
            self.place_hidden_bits()
        if scanner is None or not scanner.count:
            flat = circuit(self, np.array(order, dtype=np.int64))
        else:
            flat = circuit(self, scanner.order(order), scanner.columns())
        if self.calibrations and self.marks:
            raise self.scope.unsupported("'cal' or 'defcal' beside control that depends on the run", 0)
        flat = replace(flat, calibrations=tuple(self.calibrations))
        wrong = misplaced(flat) if self.calibrations else None
        if wrong is not None:
            operation = flat.operation(wrong)
            operands = r"\s*,\s*".join(rf"\${q}" for q in operation.qubits)
            call = re.search(rf"\b{re.escape(operation.name)}\s*(?:\([^()]*\))?\s*{operands}\s*;", self.source.text)
            raise self.source.error(
                f"'{shorten(operation.name)}', which only a 'defcal' defines, has none for these qubits",
                call.start() if call else 0,
                found=", ".join(f"${q}" for q in operation.qubits),
            )
        return self.with_control(flat) if self.marks else flat

    def with_control(self, flat: Circuit) -> Program:
        """Return the program that a circuit with marks stands for."""
        rows = np.flatnonzero(flat.is_named(CONTROL.name))
        marks = [self.contents[k] for k in flat.link[rows].tolist()]
        return Program(
            n_qubits=flat.n_qubits,
            n_bits=flat.n_bits,
            body=split_at_marks(replace(flat, phase=0.0), rows.tolist(), marks),
            variables=tuple(self.variables.items()),
            qubit_registers=flat.qubit_registers,
            bit_registers=flat.bit_registers,
        )

    def place_hidden_bits(self) -> None:
        """Give bits that have no register one behind all others."""
        scope = self.scope
        self.link, self.contents, number = placed(self.link, self.contents, scope.n_bits)
        if number:
            taken = {*self.variables, *scope.declared}
            name = next(name for k in count() if (name := f"local_bits{k or ''}") not in taken)
            scope.add_register(name, number, 0, quantum=False)

    def mark(self, mark: Mark) -> None:
        """Append a mark of control flow."""
        self.marks[len(self.op)] = len(self.contents)
        self.contents.append(mark)
        self.emit(CONTROL, ())

    def variable(self, name: str, kind: object) -> str:
        """Give a variable a place at run time; return its name there."""
        taken = {*self.variables, *(self.scope.declared if name not in self.scope.declared else ())}
        free = next(other for k in count() if (other := f"{name}_{k}" if k else name) not in taken)
        self.variables[free] = str(kind)
        return free

    def check_total(self, operations: int, offset: int) -> None:
        """Refuse a program that is too long."""
        if operations > MAX_OPERATIONS:
            raise self.source.error(
                "too many operations", offset, required=f"at most {MAX_OPERATIONS}", found=str(operations)
            )

    # ---------------------------------------------------------------- one statement

    def hand_over(self, piece: str) -> str | None:
        """Let the full lane carry out the statement that a piece begins with, or pass over an annotation or a pragma.

        Returns
        -------
        str or None
            What follows it up to a semicolon; None for a statement that the fast lane reads.
        """
        leading = leading_word(piece)
        if leading is None or self.scope.version != 3:
            return None
        word, start = leading[0], self.position + leading[1]
        if word in ("@", "#", "pragma"):
            skipped = _NOTES.match(self.source.text, start)
            return self.behind(piece, skipped.end() if skipped else start)
        if word in ("cal", "defcal", "defcalgrammar"):
            return self.behind(piece, self.calibration(word, start))
        choice = lane(word, piece, start, self.scope, self.full)
        if choice == FAST or (choice == EITHER and not self.only_full):
            return None
        if self.full is None:
            from gatewright.qasm.full import FullLane

            self.full = FullLane(self)
        # Blocks in a row without any semicolon are gone through again and again.
        self.full.charge_at(len(piece) >> 10, start)
        end, self.ended = self.full.statement(start)
        return self.behind(piece, end)

    def calibration(self, word: str, start: int) -> int:
        """Keep a calibration statement as it stands; return the offset behind it."""
        text = self.source.text
        if word == "defcalgrammar":
            end = text.find(";", start) + 1
        else:
            depth, end = 0, 0
            for match in _BRACES.finditer(text, start):
                depth += 1 if match[0] == "{" else -1
                if depth <= 0:
                    end = match.end() if match[0] == "}" and depth == 0 else 0
                    break
        if not end:
            raise self.source.error(f"a '{word}' is not closed", start, required="';'" if word[6:] else "'}'")
        self.calibrations.append(self.source.original[start:end])
        name = _CALIBRATED.match(text, start)
        if name is not None:
            self.calibrated.add(name[1])
        return end

    def behind(self, piece: str, end: int) -> str:
        """Go on behind the offset `end`; return what follows it up to a semicolon."""
        self.closed = end
        self.started = True
        if end and self.source.text[end - 1] == ";":
            end -= 1
        while self.position + len(piece) < end:
            self.position += len(piece) + 1
            piece = next(self.pieces)
        rest = piece[end - self.position :]
        self.position = end
        return rest

    def flat_call(self, piece: str) -> int:
        """Read the call of a gate seen before on single qubits; return its number, or -1 for anything else."""
        match = _FLAT.fullmatch(piece)
        if match is None:
            return -1
        name, arguments, operands = match.groups()
        kind = self.kinds.get(name)
        if kind is None:
            return -1
        op, n_qubits, n_parameters = kind
        qubits = self.scope.lists.get(operands) or self.scope.qubits(operands, self.position + match.start(3))
        if qubits is None or len(qubits) != n_qubits:
            return -1
        if n_parameters:
            texts = (arguments or "").split(",")
            if len(texts) != n_parameters:
                return -1
            self.parameters += self.scope.number_list(texts, self.position + match.start(2))
        elif arguments:
            return -1
        self.op.append(op)
        self.width.append(n_qubits)
        self.qubits += qubits
        return self.finish(piece)

    def any_statement(self, piece: str) -> int:
        """Read any statement, and the definitions in front of it; return its number."""
        length = len(piece)
        remember = True
        while not self.ended:
            rest = self.hand_over(piece)
            if rest is None and _BLOCK.match(piece):
                rest = self.definition(piece)
            if rest is None:
                break
            piece, remember = rest, False
        statement = piece.strip()
        if statement and not self.ended:
            remember &= self.statement(statement, self.position + len(piece) - len(piece.lstrip()))
            self.started = True
        self.position += len(piece) - length  # the caller adds the length of the piece that it knows
        return self.finish(piece if remember else None)

    def finish(self, piece: str | None) -> int:
        """Close the distinct statement at hand, and remember its text if it is given."""
        number = len(self.first) - 1
        self.first.append(len(self.op))
        if piece is not None and number < _REMEMBERED:
            self.statements[piece] = number
        return number

    def statement(self, text: str, offset: int) -> bool:
        """Read a statement that is not a definition; return whether its text means the same next time."""
        match = _WORD.match(text)
        if match is None:
            what = {"@": "an annotation", "#": "a pragma", "{": "a block", "$": "assigning to a qubit"}.get(text[0])
            if what:
                raise self.scope.unsupported(what, offset)
            raise self.source.error("this is not a statement", offset, found=f"'{shorten(text, 30)}'")
        word = match[0]
        if word in self.handlers:
            self.handlers[word](text, offset)
            return word in ("measure", "reset", "gphase") or (word == "barrier" and text != word)
        if word == "if" and self.scope.version == 2:
            return self.conditional(text, offset)
        if word in UNSUPPORTED:
            raise self.scope.unsupported(f"'{word}'", offset)
        if word in self.scope.bit_registers and "=" in text:
            target, _, value = text.partition("=")
            self.assign(target, offset, value, offset + len(target) + 1)
        else:
            self.call(text, offset)
        return True

    def conditional(self, text: str, offset: int) -> bool:
        """Read ``if(register == integer)`` of OpenQASM 2 and the statement behind it."""
        match = _IF.fullmatch(text)
        if match is None or _WORD.match(match[3]) is None or match[3].startswith(("if", "gate", "qreg", "creg")):
            raise self.source.error("this 'if' cannot be read", offset, required="if(register==integer) and a gate")
        span, single = self.scope.operand(match[1], offset + match.start(1), self.scope.bit_registers)
        if single or len(span) == 0:
            raise self.source.error("'if' compares a whole register", offset, required="if(register==integer)")
        wanted = self.scope.integer(match[2], offset + match.start(2), 0, 2**63)
        condition = Operation("==", (Bits(tuple(span)), Literal(str(wanted))))
        self.mark(Mark("if", condition))
        remember = self.statement(match[3], offset + match.start(3))
        self.mark(Mark("else"))
        self.mark(Mark("close"))
        return remember

    def emit(
        self,
        gate: Gate,
        qubits: Sequence[int],
        parameters: Sequence[Parameter] = (),
        matrix: NDArray[np.complex128] | None = None,
        /,
    ) -> None:
        """Append one operation; `matrix` is that of an explicit unitary."""
        if self.inputs or self.variables:
            parameters = self.numbers(gate, parameters)
        if matrix is not None:
            self.matrices[len(self.op)] = matrix
        if len(self.op) >= MAX_OPERATIONS:
            self.check_total(len(self.op) + 1, self.position)
        self.op.append(self.table.setdefault(gate, len(self.table)))
        self.width.append(len(qubits))
        self.qubits += qubits
        self.parameters += parameters  # type: ignore[arg-type]

    def numbers(self, gate: Gate, parameters: Sequence[Parameter]) -> Sequence[float]:
        """Return the parameters of the next operation as numbers; put what is not known aside."""
        parameters = [v.constant if isinstance(v, Affine) and not v.terms else v for v in parameters]
        numbers = [math.nan if isinstance(value, Affine) else value for value in parameters]
        if any(isinstance(value, Affine) for value in parameters):
            if gate.name not in GATES:
                what = f"an angle of '{shorten(gate.name)}' that is not known when compiling"
                raise self.scope.unsupported(what, self.position)
            self.unknown[len(self.op)] = tuple(parameters)
        return numbers

    def call(self, text: str, offset: int) -> None:
        """Read the call of a gate."""
        match = _CALL.fullmatch(text)
        assert match is not None  # it begins with a word, and anything may follow
        name, arguments, operands = match.groups()
        target = self.target(name, offset)
        if isinstance(target, Definition) and target.stands_for is not None:
            target = target.stands_for
        if "(" in operands:
            raise self.source.error("a '(' is not closed", offset + match.start(3), required="a matching ')'")
        self.scope.check_count(name, "parameters", target.n_parameters, arguments, offset)
        self.scope.check_count(name, "qubits", target.n_qubits, operands, offset)
        values = [self.scope.number(part, at) for part, at in split(arguments, offset + match.start(2))]
        rows = self.scope.broadcast(operands, offset + match.start(3))
        if isinstance(target, Gate):
            self.check_total(len(self.op) + len(rows), offset)
            for row in rows:
                self.emit(target, row, values)
            self.kinds[name] = (self.table[target], target.n_qubits, target.n_parameters)
            return
        self.check_total(len(self.op) + len(rows) * target.size, offset)
        try:
            phase: Parameter = sum(expand(target, values, row, self.emit) for row in rows)
        except ExpressionError as problem:
            raise self.scope.at_fault(problem, offset, inside=False) from None
        self.add_phase(phase)

    def add_phase(self, phase: Parameter) -> None:
        """Add a global phase to the distinct statement at hand; what of it is not known is no one's concern."""
        phase = phase.constant if isinstance(phase, Affine) else phase
        if phase:
            number = len(self.first) - 1
            self.phases[number] = self.phases.get(number, 0.0) + phase

    def target(self, name: str, offset: int) -> Gate | Definition:
        """Return the gate called `name`."""
        if name in self.opaque:
            raise self.scope.unsupported(f"calling the opaque gate '{shorten(name)}'", offset)
        if name in self.clashes:
            library = LIBRARY_FILES[self.scope.version]
            raise self.source.error(f"the device's native gate '{name}' differs from the one of {library}", offset)
        gate = self.gates.get(name)
        if gate is not None:
            return gate
        if name in self.calibrated:
            return self.calibrated_gate(name, offset)
        scope = self.scope
        library = LIBRARY_FILES[scope.version]
        if name in scope.declared:
            raise self.source.error(f"'{shorten(name)}' is not a gate", offset, found=f"it is {scope.declared[name]}")
        if name in LIBRARIES[scope.version]:
            hint = f'put include "{library}"; in front'
        elif name in GATES:
            hint = f"{library} does not have it: define it with 'gate {name}'"
        else:
            hint = nearest_name(name, self.gates)
        raise self.source.error(f"unknown gate '{shorten(name)}'", offset, hint=hint)

    def calibrated_gate(self, name: str, offset: int) -> Gate:
        """Return a gate that only a calibration defines."""
        found = calibrated_gates(self.calibrations).get(name)
        if found is None or not self.scope.n_physical and self.scope.n_qubits:
            what = f"calling '{shorten(name)}', which only a 'defcal' defines, on anything but its physical qubits"
            raise self.scope.unsupported(what, offset)
        return found.gate

    # ---------------------------------------------------------------- other operations

    def global_phase(self, text: str, offset: int) -> None:
        """Read ``gphase(angle)``."""
        self.scope.only_in(3, "'gphase'", offset)
        match = _CALL.fullmatch(text)
        values = split(match[2], offset + match.start(2)) if match else []
        if match is None or match[3] or len(values) != 1:
            raise self.source.error("this 'gphase' cannot be read", offset, required="gphase(angle)")
        self.add_phase(self.scope.number(*values[0]))

    def reset(self, text: str, offset: int) -> None:
        """Read ``reset``."""
        at = offset + len("reset")
        for part, begin in split(text[len("reset") :], at) or [("", at)]:
            span, _ = self.scope.operand(part, begin, self.scope.qubit_registers)
            for qubit in span:
                self.emit(RESET, (qubit,))

    def barrier(self, text: str, offset: int) -> None:
        """Read ``barrier``, of all qubits where none is named."""
        at = offset + len("barrier")
        operands = text[len("barrier") :]
        scope = self.scope
        parts = [scope.operand(part, begin, scope.qubit_registers)[0] for part, begin in split(operands, at)]
        if not parts:
            scope.only_in(3, "a barrier without qubits", offset)
            parts = [range(scope.n_qubits or scope.n_physical)]
        qubits = [qubit for span in parts for qubit in span]
        scope.check_distinct(qubits, operands, at)
        if len(self.qubits) + len(qubits) > MAX_OPERANDS:
            raise self.source.error("the operations name too many qubits", offset, required=f"at most {MAX_OPERANDS}")
        if qubits:
            self.emit(BARRIER, qubits)

    def measure(self, text: str, offset: int) -> None:
        """Read ``measure qubits -> bits``."""
        match = _ARROW.fullmatch(text)
        if match is None:
            if self.scope.version == 2:
                raise self.source.error("a measurement has no bit", offset, required="measure qubits -> bits")
            at = offset + len("measure")
            span, _ = self.scope.operand(text[len("measure") :], at, self.scope.qubit_registers)
            for qubit in span:
                self.measure_unread(qubit, offset)
            return
        self.measurement(match[1], offset + match.start(1), match[2], offset + match.start(2))

    def measure_unread(self, qubit: int, offset: int) -> None:
        """Measure a qubit whose outcome nobody asks for: into a bit of a register of our own."""
        if qubit not in self.unread:
            scope = self.scope
            name = next(name for k in count() if (name := f"unread_outcomes{k or ''}") not in scope.declared)
            size = scope.n_qubits or scope.n_physical
            scope.add_register(name, size, offset, quantum=False)
            self.unread.update((q, bit) for q, bit in enumerate(scope.bit_registers[name]) if q not in self.unread)
        self.link[len(self.op)] = self.unread[qubit]
        self.emit(MEASURE, (qubit,))

    def assign(self, target: str, target_offset: int, value: str, offset: int) -> None:
        """Read ``bits = measure qubits``."""
        at = offset + len(value) - len(value.lstrip())
        match = _MEASURE.fullmatch(value.strip())
        if match is None:
            raise self.scope.unsupported("assigning anything but a measurement", at)
        self.scope.only_in(3, "'='", target_offset)
        self.measurement(match[1], at + match.start(1), target, target_offset)

    def measurement(self, qubits: str, qubits_offset: int, bits: str, bits_offset: int) -> None:
        """Append the measurement of a qubit into a bit, or of a register into one of the same size."""
        scope = self.scope
        sources, single = scope.operand(qubits, qubits_offset, scope.qubit_registers)
        targets, single_bit = scope.operand(bits, bits_offset, scope.bit_registers)
        if len(sources) != len(targets) or (single != single_bit and len(sources) > 1):
            raise self.source.error(
                "a measurement of unequal sizes",
                qubits_offset + len(qubits) - len(qubits.lstrip()),
                required=f"as many bits as qubits ({len(sources)})",
                found=str(len(targets)),
            )
        for qubit, bit in zip(sources, targets, strict=True):
            if self.full is not None:
                self.full.bits.pop(bit, None)
            self.link[len(self.op)] = bit
            self.emit(MEASURE, (qubit,))

    # ---------------------------------------------------------------- declarations

    def version_line(self, text: str, offset: int) -> None:
        """Read ``OPENQASM version``."""
        version = text[len("OPENQASM") :].strip()
        if self.started:
            raise self.source.error("the version line is not the first statement", offset)
        if version not in ("2", "2.0", "3", "3.0", "3.1"):
            found = f"'{shorten(version, 30)}'"
            raise self.source.error("unknown version of OpenQASM", offset, required="2.0, 3.0 or 3.1", found=found)
        self.scope.version = int(version[0])
        for name in BUILT_IN[self.scope.version]:
            self.gates.setdefault(name, GATES[name])
            self.scope.declared.setdefault(name, "a gate of the language")

    def include(self, text: str, offset: int) -> None:
        """Read ``include`` of the version's standard library."""
        match = _INCLUDE.fullmatch(text)
        file = (match[1] or match[2] or "") if match else ""
        version = self.scope.version
        if file != LIBRARY_FILES[version]:
            belongs = [
                f'"{name}" belongs to OpenQASM {number}' for number, name in LIBRARY_FILES.items() if name == file
            ]
            raise self.source.error(
                "this file cannot be included",
                offset,
                required='"qelib1.inc" in OpenQASM 2, "stdgates.inc" in OpenQASM 3',
                found=shorten(text[len("include") :].strip(), 40),
                hint=f"{belongs[0]}, this is OpenQASM {version}" if belongs else "no file is ever opened",
            )
        for name in sorted(LIBRARIES[version]):
            self.scope.declare(name, f"a gate of {file}", offset)
            native = self.natives.get(name, GATES[name])
            self.gates[name] = native
            if not same_gate(native, GATES[name]):
                self.clashes.add(name)

    def register(self, text: str, offset: int) -> None:
        """Read a declaration of qubits or bits."""
        word = _WORD.match(text)[0]  # type: ignore[index]
        old = word in ("qreg", "creg")
        match = (_REGISTER if old else _DECLARATION).fullmatch(text)
        if match is None:
            required = f"{word} name[size]" if old else f"{word}[size] name"
            hint = "is a ';' missing?" if "\n" in text else ""
            raise self.source.error(
                f"this '{word}' cannot be read", offset, required=required, found=shorten(text), hint=hint
            )
        if not old:
            self.scope.only_in(3, f"'{word}'", offset)
        name, size_text = (match[2], match[3]) if old else (match[3], match[2])
        at = offset + match.start(2 if old else 3)
        size = None
        if size_text is not None:
            size = self.scope.integer(size_text, offset + match.start(3 if old else 2), 1, MAX_QUBITS)
        elif old and self.scope.version == 2:
            raise self.source.error(f"the register '{shorten(name)}' has no size", at, required=f"{word} name[size]")
        self.scope.add_register(name, size, at, quantum=word in ("qreg", "qubit"))
        if not old and match[4] is not None:
            if word == "qubit":
                raise self.source.error("a qubit has no initial value", offset + match.start(4))
            self.assign(name, at, match[4], offset + match.start(4))

    def constant(self, text: str, offset: int) -> None:
        """Read ``const type name = expression``."""
        match = CONST.fullmatch(text)
        if match is None:
            raise self.scope.unsupported("this 'const'", offset)
        self.scope.only_in(3, "'const'", offset)
        kind, name, value = match.groups()
        at = offset + match.start(3)
        if kind in ("int", "uint"):
            number: float = self.scope.integer(value, at, -(2**53) if kind == "int" else 0, 2**53)
        else:
            number = self.scope.number(value, at)
        self.scope.declare(name, "a constant", offset + match.start(2))
        self.scope.constants[name] = number
        if kind in ("int", "uint"):
            self.scope.integers.add(name)

    def opaque_gate(self, text: str, offset: int) -> None:
        """Read ``opaque``: a name that may not be called, unless it is a native gate."""
        match = _OPAQUE.fullmatch(text)
        if match is None:
            raise self.source.error("this 'opaque' cannot be read", offset, required="opaque name(parameters) qubits")
        self.scope.only_in(2, "'opaque'", offset)
        self.scope.declare(match[1], "an opaque gate", offset + match.start(1))
        if match[1] not in self.natives:
            self.opaque.add(match[1])
        else:
            self.gates[match[1]] = self.natives[match[1]]

    # ---------------------------------------------------------------- gate definitions

    def definition(self, piece: str) -> str:
        """Read the gate definition that a piece begins with; return what follows it up to a semicolon."""
        start = self.position + len(piece) - len(piece.lstrip())
        self.started = True
        header, brace, _ = piece.partition("{")
        if not brace:
            raise self.source.error("a gate definition has no body", start, required="gate name(parameters) qubits { }")
        body_start = self.position + len(header) + 1
        inside = piece[len(header) + 1 :]
        self.position = body_start
        while "}" not in inside:
            self.position += len(inside) + 1
            following = next(self.pieces, None)
            if following is None:
                raise self.source.error("a gate definition is not closed", start, required="'}'", found="the end")
            inside = following
        last, _, rest = inside.partition("}")
        end = self.position + len(last)
        self.position = end + 1
        body = self.source.text[body_start:end]
        self.define(read_definition(self.scope, header.strip(), start, body, body_start, self.target), start)
        return rest

    def define(self, made: Definition, start: int) -> None:
        """Make a definition known; where it is a known gate up to global phase, calls stay calls of that."""
        name = made.name
        known = self.natives.get(name) or GATES.get(name)
        same = known is not None and equals(made, known)
        if name in self.natives and not same and self.strict:
            raise self.source.error(
                f"the definition of '{shorten(name)}' differs from the device's native gate",
                start,
                required="the same matrix up to global phase",
                hint="rename the gate in the program",
            )
        if known is None or not same:
            self.gates[name] = made
        elif self.scope.version == 2 or equals(made, known, exact=True):
            self.gates[name] = known
        else:
            self.gates[name] = replace(made, stands_for=known)
