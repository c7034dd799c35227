"""Read straight-line programs in OpenQASM 2 and 3 into circuits.

The languages are those of Cross et al., arXiv:1707.03429 (version 2) and ACM Trans. Quantum Comput. 3, 12 (2022),
arXiv:2104.14722 (version 3). Each distinct statement is analysed once; a program is then a list of numbers of
distinct statements, which NumPy turns into columns. What is not read is refused by name, line and column.
"""

from __future__ import annotations

import math
import os
import re
from collections.abc import Callable, Mapping, Sequence
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.errors import ExpressionError, QasmError, UnsupportedError, nearest_name, shorten
from gatewright.expressions import FUNCTIONS, parse
from gatewright.gates import ANY, BARRIER, GATES, MEASURE, RESET, Gate
from gatewright.qasm.definitions import MAX_DEPTH, Definition, Step, equals, expand
from gatewright.qasm.library import BUILT_IN, DEFINITIONS, LIBRARIES, LIBRARY_FILES
from gatewright.qasm.source import Source, read_text

__all__ = ["MAX_OPERATIONS", "MAX_QUBITS", "RESERVED", "read", "read_file"]

#: Limits on one program: operations after expansion, qubits (and bits), and qubits named by all operations.
MAX_OPERATIONS = 20_000_000
MAX_QUBITS = 1_000_000
MAX_OPERANDS = 200_000_000

#: Distinct statements, operand lists and numbers that are remembered.
_REMEMBERED = 500_000

_UNSUPPORTED = frozenset(
    "if else for while switch case default def defcal cal defcalgrammar extern input output let box delay nop"
    " durationof duration stretch int uint float angle bool complex array ctrl negctrl inv pow return break continue"
    " end pragma void readonly mutable".split()
)
_KEYWORDS = frozenset(
    "OPENQASM include qreg creg qubit bit gate opaque measure barrier reset gphase const pi π U".split()
)

#: Words that cannot name a register, a gate or a constant.
RESERVED = _UNSUPPORTED | _KEYWORDS | frozenset(FUNCTIONS)

_NAME = r"[^\W\d]\w*"
_NUMBER = r"(?:[0-9]+\.?[0-9]*|\.[0-9]+)"
_FLAT = re.compile(rf"\s*({_NAME})\s*(?:\(([^()]*)\))?\s*([^()]*)")
_CALL = re.compile(rf"({_NAME})\s*(?:\((.*)\))?\s*(.*)", re.DOTALL)
_WORD = re.compile(_NAME)
_OPERAND = re.compile(rf"\s*(?:({_NAME})\s*(?:\[\s*(?:([0-9]{{1,9}})|([^][]*))\s*\])?|\$([0-9]{{1,9}}))\s*")
_FLOAT = re.compile(rf"[-+]?{_NUMBER}(?:[eE][-+]?[0-9]+)?")
_PI = re.compile(rf"([-+]?)(?:({_NUMBER})\s*\*\s*)?pi(?:\s*\*\s*({_NUMBER}))?(?:\s*/\s*({_NUMBER}))?")
_INCLUDE = re.compile(r"""include\s*(?:"([^"]*)"|'([^']*)')""")
_CONST = re.compile(rf"const\s+(int|uint|float|angle)\s*(?:\[[^]]*\])?\s*({_NAME})\s*=(.*)", re.DOTALL)
_REGISTER = re.compile(rf"(qreg|creg)\s+({_NAME})\s*(?:\[([^][]*)\])?()")
_DECLARATION = re.compile(rf"(qubit|bit)\s*(?:\[([^][]*)\])?\s*({_NAME})\s*(?:=(.*))?", re.DOTALL)
_GATE = re.compile(rf"(?:gate|opaque)\s+({_NAME})\s*(?:\(([^()]*)\))?\s*([^()]*)")
_BLOCK = re.compile(r"\s*gate\b")


def read(text: str, *, where: str = "", natives: Mapping[str, Gate] = MappingProxyType({})) -> Circuit:
    """Read an OpenQASM program.

    Versions 2.0, 3, 3.0 and 3.1 (the last two when the version line is missing); ``include`` of the version's
    own standard library, which is never opened; registers, constants, gate definitions, gate calls with
    broadcasting, ``gphase``, ``barrier``, ``measure`` and ``reset``. Division is of reals, also between integers.

    A gate that the program defines is expanded, unless its definition equals the gate of that name in the table
    of this package (which the version's library lacks), up to global phase.

    Parameters
    ----------
    text : str
    where : str
        File name for messages.
    natives : mapping of str to Gate
        Native gates of a device: calls of these names stay what they are. Where the program defines such a gate,
        the definition has to agree with the native matrix up to global phase.

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
    return _Reader(Source(text, where), natives).read()


def read_file(
    path: str | os.PathLike[str], *, natives: Mapping[str, Gate] = MappingProxyType({})
) -> Circuit:
    """Read an OpenQASM file, or standard input for ``-``; see `read`."""
    where = "<stdin>" if os.fspath(path) == "-" else os.fspath(path)
    return read(read_text(path), where=where, natives=natives)


class _Reader:
    """One program being read."""

    def __init__(self, source: Source, natives: Mapping[str, Gate]) -> None:
        self.source = source
        self.natives = natives
        self.pieces = source.pieces()
        self.position = 0  # offset of the piece at hand
        self.started = False
        self.version = 3
        self.constants: dict[str, float] = {}
        self.declared: dict[str, str] = {}
        self.gates: dict[str, Gate | Definition] = dict(natives)
        self.refused: dict[str, str] = {}  # gates that may not be called, and why
        self.qubit_registers: dict[str, range] = {}
        self.bit_registers: dict[str, range] = {}
        self.scalars: set[str] = set()
        self.n_qubits = self.n_bits = self.n_physical = 0
        self.total = 0
        # What is remembered of texts.
        self.statements: dict[str, int] = {}
        self.lists: dict[str, tuple[int, ...]] = {}
        self.numbers: dict[str, float] = {}
        self.kinds: dict[str, tuple[int, int, int]] = {}
        # Operations of the distinct statements: statement k makes operations first[k] to first[k + 1].
        self.table: dict[Gate, int] = {}
        self.op: list[int] = []
        self.width: list[int] = []
        self.qubits: list[int] = []
        self.parameters: list[float] = []
        self.link: dict[int, int] = {}
        self.first: list[int] = [0]
        self.phases: dict[int, float] = {}
        self.handlers: dict[str, Callable[[str, int], None]] = {
            "OPENQASM": self.version_line,
            "include": self.include,
            "qreg": self.register,
            "creg": self.register,
            "qubit": self.register,
            "bit": self.register,
            "opaque": self.opaque,
            "const": self.constant,
            "measure": self.measure_arrow,
            "barrier": self.barrier,
            "reset": self.reset,
            "gphase": self.global_phase,
        }
        for name in BUILT_IN[3]:
            self.gates.setdefault(name, GATES[name])

    # ---------------------------------------------------------------- the program as a whole

    def read(self) -> Circuit:
        """Read all statements and put the columns together."""
        order: list[int] = []
        known = self.statements.get
        for piece in self.pieces:
            number = known(piece)
            if number is None:
                number = self.flat_call(piece)
                if number < 0:
                    number = self.any_statement(piece)
            order.append(number)
            self.position += len(piece) + 1
        text = self.source.text
        end = len(text.rstrip())
        if text[end - 1] not in ";}":
            raise self.source.error("a ';' is missing", end - 1, required="';' behind the last statement")
        self.n_qubits = self.n_qubits or self.n_physical
        if not self.n_qubits:
            raise self.source.error(
                "the program has no qubits", 0, required="a declaration of qubits", hint="such as qubit[2] q;"
            )
        return self.circuit(np.array(order, dtype=np.int64))

    def circuit(self, order: NDArray[np.int64]) -> Circuit:
        first = np.array(self.first, dtype=np.int64)
        rows = _ranges(first[order], np.diff(first)[order])
        if len(rows) > MAX_OPERATIONS:
            raise self.too_large(len(rows), 0)
        op = np.array(self.op, dtype=np.int64)
        width = np.array(self.width, dtype=np.int64)
        n_parameters = np.array([kind.n_parameters for kind in self.table] or [0])[op]
        if int(width[rows].sum()) > MAX_OPERANDS:
            raise self.source.error(
                "the program names too many qubits", 0, required=f"at most {MAX_OPERANDS} in all its operations"
            )
        # The kinds in order of first use.
        used, places = np.unique(op[rows], return_index=True)
        used = used[np.argsort(places)]
        number = np.zeros(len(self.table), dtype=np.int16)
        number[used] = np.arange(len(used))
        kinds = tuple(self.table)
        qubits, offsets = _gather(np.array(self.qubits, dtype=np.int32), width, rows)
        parameters, parameter_offsets = _gather(np.array(self.parameters, dtype=np.float64), n_parameters, rows)
        link = np.full(len(op), -1, dtype=np.int32)
        link[list(self.link.keys())] = list(self.link.values())
        phase = np.zeros(len(first))
        phase[list(self.phases.keys())] = list(self.phases.values())
        return Circuit(
            n_qubits=self.n_qubits,
            n_bits=self.n_bits,
            table=tuple(kinds[k] for k in used.tolist()),
            op=number[op[rows]] if len(rows) else np.zeros(0, np.int16),
            qubits=qubits,
            offsets=offsets,
            parameters=parameters,
            parameter_offsets=parameter_offsets,
            link=link[rows],
            phase=float(phase[order].sum()),
            qubit_registers=tuple((name, len(span)) for name, span in self.qubit_registers.items()),
            bit_registers=tuple((name, len(span)) for name, span in self.bit_registers.items()),
        )

    # ---------------------------------------------------------------- one statement

    def flat_call(self, piece: str) -> int:
        """Read the call of a gate already seen, on single qubits; return its number, or -1 if it is anything else."""
        match = _FLAT.fullmatch(piece)
        if match is None:
            return -1
        name, arguments, operands = match.groups()
        kind = self.kinds.get(name)
        if kind is None:
            return -1
        op, n_qubits, n_parameters = kind
        qubits = self.lists.get(operands)
        if qubits is None:
            found, single = self.operand_list(operands, self.position + match.start(3))
            if not single:
                return -1
            qubits = found[0]
        if len(qubits) != n_qubits:
            return -1
        if n_parameters == 1 and arguments:
            value = self.numbers.get(arguments)
            if value is None:
                value = self.number(arguments, self.position + match.start(2))
            self.parameters.append(value)
        elif n_parameters:
            texts = (arguments or "").split(",")
            if len(texts) != n_parameters:
                return -1
            self.parameters += self.number_list(texts, self.position + match.start(2))
        elif arguments:
            return -1
        self.op.append(op)
        self.width.append(n_qubits)
        self.qubits += qubits
        return self.finish(piece)

    def any_statement(self, piece: str) -> int:
        """Read any statement; return its number."""
        before = len(self.op)
        while _BLOCK.match(piece):
            piece = self.definition(piece)
        statement = piece.strip()
        keep = False
        if statement:
            offset = self.position + len(piece) - len(piece.lstrip())
            keep = self.statement(statement, offset)
            self.started = True
        self.total += len(self.op) - before
        return self.finish(piece if keep else "")

    def finish(self, piece: str) -> int:
        """Close the distinct statement at hand; remember its text unless that is empty."""
        number = len(self.first) - 1
        self.first.append(len(self.op))
        if piece and number < _REMEMBERED:
            self.statements[piece] = number
        return number

    def statement(self, text: str, offset: int) -> bool:
        """Read a statement that is not a definition; return whether its text may be remembered."""
        match = _WORD.match(text)
        if match is None:
            what = {"@": "annotations", "#": "pragmas", "$": "this statement", "{": "a block"}.get(text[0])
            if what:
                raise self.unsupported(what, offset)
            raise self.source.error("this is not a statement", offset, found=f"'{shorten(text, 30)}'")
        word = match[0]
        if word in self.handlers:
            self.handlers[word](text, offset)
            return word in ("measure", "reset", "gphase")
        if word in _UNSUPPORTED and word not in self.gates:
            raise self.unsupported(f"'{word}'", offset)
        if word in self.bit_registers and "=" in text:
            target, _, value = text.partition("=")
            self.assignment(target, value, offset, offset + len(target) + 1)
        else:
            self.call(text, offset)
        return True

    def unsupported(self, what: str, offset: int) -> UnsupportedError:
        return self.source.locate(
            UnsupportedError(f"{what} is not yet supported", required="a straight-line program of gates"), offset
        )

    def too_large(self, found: int, offset: int) -> QasmError:
        return self.source.error(
            "the program has too many operations", offset, required=f"at most {MAX_OPERATIONS}", found=str(found)
        )

    def only_in(self, version: int, what: str, offset: int) -> None:
        if self.version != version:
            other = {2: "OPENQASM 2.0;", 3: "OPENQASM 3.0;"}[version]
            raise self.source.error(
                f"{what} belongs to OpenQASM {version}",
                offset,
                found=f"a program in OpenQASM {self.version}",
                hint=f"begin the program with {other}",
            )

    # ---------------------------------------------------------------- declarations

    def version_line(self, text: str, offset: int) -> None:
        version = text[len("OPENQASM") :].strip()
        if self.started:
            raise self.source.error("the version line is not the first statement", offset)
        if version not in ("2", "2.0", "3", "3.0", "3.1"):
            raise self.source.error(
                "unknown version of OpenQASM", offset, required="2.0, 3.0 or 3.1", found=f"'{shorten(version, 30)}'"
            )
        self.version = int(version[0])
        for name in BUILT_IN[self.version]:
            self.gates.setdefault(name, GATES[name])

    def include(self, text: str, offset: int) -> None:
        match = _INCLUDE.fullmatch(text)
        file = (match[1] or match[2] or "") if match else ""
        wanted = LIBRARY_FILES[self.version]
        if file != wanted:
            required = ' or "stdgates.inc" (version 3)'
            other = [v for v, name in LIBRARY_FILES.items() if name == file]
            hint = f'"{file}" belongs to version {other[0]}' if other else "nothing else is ever opened"
            raise self.source.error(
                "this file cannot be included",
                offset,
                required='"qelib1.inc" (version 2)' + required,
                found=shorten(text[len("include") :].strip(), 40) + f" in a version {self.version} program",
                hint=hint,
            )
        for name in sorted(LIBRARIES[self.version]):
            self.declare(name, f"a gate of {wanted}", offset)
            native = self.natives.get(name)
            if native is None:
                self.gates[name] = GATES[name]
            elif not _same_gate(native, GATES[name]):
                self.refused[name] = f"the native gate '{name}' differs from the one in {wanted}"

    def declare(self, name: str, what: str, offset: int) -> None:
        if name in RESERVED:
            raise self.source.error(f"'{shorten(name)}' is a reserved word", offset, required="another name")
        if name in self.declared:
            raise self.source.error(
                f"'{shorten(name)}' is already defined", offset, found=f"it is {self.declared[name]}"
            )
        self.declared[name] = what

    def register(self, text: str, offset: int) -> None:
        word = text[:5].split("[")[0].split()[0]
        old = word in ("qreg", "creg")
        match = (_REGISTER if old else _DECLARATION).fullmatch(text)
        if match is None:
            example = f"{word} name[4]" if old else f"{word}[4] name"
            raise self.source.error(f"this '{word}' cannot be read", offset, required=f"{example};", found=shorten(text))
        if not old:
            self.only_in(3, f"'{word}'", offset)
        name_group, size_group = (2, 3) if old else (3, 2)
        name, size_text = match[name_group], match[size_group]
        at = offset + match.start(name_group)
        if size_text is None:
            if old and self.version == 2:
                raise self.source.error(f"the register '{shorten(name)}' has no size", at, required=f"{name}[size]")
            size = 1
            self.scalars.add(name)
        else:
            size = self.integer(size_text, offset + match.start(size_group), 1, MAX_QUBITS)
        quantum = word in ("qreg", "qubit")
        self.declare(name, "a register", at)
        start = self.n_qubits if quantum else self.n_bits
        if start + size > MAX_QUBITS:
            raise self.source.error("too many qubits or bits", at, required=f"at most {MAX_QUBITS}")
        if quantum:
            if self.n_physical:
                raise self.unsupported("declaring qubits beside physical qubits", at)
            self.qubit_registers[name] = range(start, start + size)
            self.n_qubits += size
        else:
            self.bit_registers[name] = range(start, start + size)
            self.n_bits += size
        if match[4]:
            if quantum:
                raise self.source.error("a qubit has no initial value", offset + match.start(4))
            self.assignment(name, match[4], at, offset + match.start(4))

    def constant(self, text: str, offset: int) -> None:
        match = _CONST.fullmatch(text)
        if match is None:
            raise self.unsupported("this 'const'", offset)
        self.only_in(3, "'const'", offset)
        kind, name, value = match.groups()
        self.declare(name, "a constant", offset + match.start(2))
        at = offset + match.start(3)
        if kind in ("int", "uint"):
            self.constants[name] = self.integer(value, at, -(2**53) if kind == "int" else 0, 2**53)
        else:
            self.constants[name] = self.number(value, at)

    def opaque(self, text: str, offset: int) -> None:
        match = _GATE.fullmatch(text)
        if match is None:
            raise self.source.error("this 'opaque' cannot be read", offset, required="opaque name(parameters) qubits;")
        name = match[1]
        self.only_in(2, "'opaque'", offset)
        self.declare(name, "an opaque gate", offset + match.start(1))
        if name not in self.natives:
            self.refused[name] = f"the gate '{shorten(name)}' is opaque: it has no matrix"

    # ---------------------------------------------------------------- gate definitions

    def definition(self, piece: str) -> str:
        """Read the gate definition at the beginning of a piece; return the rest of the piece where it ends."""
        start = self.position + len(piece) - len(piece.lstrip())
        self.started = True
        header, brace, _ = piece.partition("{")
        if not brace:
            raise self.source.error("a gate definition has no body", start, required="gate name(parameters) qubits { }")
        body_start = self.position + len(header) + 1
        while "}" not in piece:
            self.position += len(piece) + 1
            following = next(self.pieces, None)
            if following is None:
                raise self.source.error("a gate definition is not closed", start, required="'}'", found="the end")
            piece = following
        inside, _, rest = piece.partition("}")
        end = self.position + len(inside)
        self.position = end + 1
        if end < body_start:
            raise self.source.error("a gate definition has no body", start, required="'{' before '}'")
        body = self.source.text[body_start:end]
        match = _GATE.fullmatch(header.strip())
        if match is None:
            raise self.source.error(
                "this gate definition cannot be read",
                start,
                required="gate name(parameters) qubits { }",
                found=shorten(header),
            )
        name = match[1]
        parameters = self.formal(match[2] or "", start + match.start(2), "parameter")
        wires = self.formal(match[3], start + match.start(3), "qubit")
        if not wires:
            raise self.source.error(f"the gate '{shorten(name)}' has no qubits", start)
        self.declare(name, "a gate", start + match.start(1))
        steps = self.body(name, body, body_start, parameters, {wire: k for k, wire in enumerate(wires)})
        made = Definition.make(name, parameters, len(wires), steps)
        if made.depth > MAX_DEPTH:
            raise self.source.error(
                f"the gate '{shorten(name)}' is nested too deeply", start, required=f"{MAX_DEPTH} levels at most"
            )
        native = self.natives.get(name)
        if native is not None:
            if not equals(made, native):
                raise self.source.error(
                    f"the definition of '{shorten(name)}' differs from the device's native gate",
                    start,
                    required=f"the native matrix up to global phase ({native.n_parameters} parameters, "
                    f"{native.n_qubits} qubits)",
                )
        elif name in DEFINITIONS[self.version] and equals(made, GATES[name]) or (
            name in LIBRARIES[self.version] and equals(made, GATES[name])
        ):
            self.gates[name] = GATES[name]
        else:
            self.gates[name] = made
        return rest

    def formal(self, text: str, offset: int, what: str) -> tuple[str, ...]:
        """Read the names of a definition's parameters or qubits."""
        if not text.strip():
            return ()
        names = [name.strip() for name in text.split(",")]
        for name in names:
            if not _WORD.fullmatch(name) or name in RESERVED:
                raise self.source.error(f"'{shorten(name)}' cannot name a {what}", offset, required="names")
        if len(set(names)) < len(names):
            raise self.source.error(f"a {what} is named twice", offset, found=shorten(text))
        return tuple(names)

    def body(
        self, own: str, text: str, offset: int, parameters: tuple[str, ...], wires: dict[str, int]
    ) -> list[Step]:
        """Read the statements of a definition."""
        steps = []
        names = {**{name: 0.0 for name in self.constants if name not in parameters}, **dict.fromkeys(parameters, 0.0)}
        pieces = text.split(";")
        for number, piece in enumerate(pieces):
            statement = piece.strip()
            at = offset + len(piece) - len(piece.lstrip())
            offset += len(piece) + 1
            if not statement:
                continue
            if number == len(pieces) - 1:
                raise self.source.error("a ';' is missing", at, required="';' behind each statement of a definition")
            match = _CALL.fullmatch(statement)
            if match is None or "{" in statement:
                raise self.source.error("this is not a statement", at, found=f"'{shorten(statement, 30)}'")
            word = match[1]
            if word == own:
                raise self.source.error(f"the gate '{shorten(own)}' is defined by itself", at)
            if (word in _UNSUPPORTED and word not in self.gates) or "@" in statement:
                raise self.unsupported(f"'{word}'", at)
            target = None if word == "gphase" else BARRIER if word == "barrier" else self.target(word, at)
            expressions = []
            for part, begin in _split(match[2], at + match.start(2)):
                try:
                    expressions.append(parse(part, names=names, power=self.power, imaginary=False))
                except ExpressionError as problem:
                    raise self.expression_error(problem, begin) from None
            self.check_count(word, "parameters", target.n_parameters if target else 1, len(expressions), at)
            used = []
            for part, begin in _split(match[3].strip() or None, at + match.start(3)):
                wire = wires.get(part.strip())
                if wire is None:
                    raise self.source.error(
                        f"unknown qubit '{shorten(part.strip())}' in a definition",
                        begin,
                        hint=nearest_name(part.strip(), wires),
                    )
                used.append(wire)
            if target is BARRIER:
                used = used or list(wires.values())
            else:
                self.check_count(word, "qubits", target.n_qubits if target else 0, len(used), at)
            self.check_distinct(used, at + match.start(3))
            bound = [e for e in expressions if any(name in parameters for name in e.names)]
            values = None
            if not bound:
                try:
                    values = tuple(expression.real(self.constants) for expression in expressions)
                except ExpressionError as problem:
                    raise self.expression_error(problem, at + match.start(2)) from None
            steps.append(Step(target, tuple(used), tuple(expressions), values))
        return steps
