"""What the names of an OpenQASM program stand for: registers, constants, and the numbers and operands made of them."""

from __future__ import annotations

import math
import re
from collections.abc import Collection, Iterable, Sequence

from gatewright.errors import ExpressionError, QasmError, UnsupportedError, shorten
from gatewright.expressions import FUNCTIONS, Expression, parse
from gatewright.qasm.source import Source

__all__ = ["MAX_QUBITS", "NAME", "RESERVED", "UNSUPPORTED", "Scope", "split"]

#: Most qubits, and most bits, of one program.
MAX_QUBITS = 100_000

#: Words of OpenQASM that begin what the fast lane does not read.
UNSUPPORTED = frozenset(
    "if else for while switch case default def defcal cal defcalgrammar extern input output let box delay nop"
    " durationof duration stretch int uint float angle bool complex array ctrl negctrl inv pow return break continue"
    " end pragma void readonly mutable".split()
)

#: Words that cannot name a register, a gate or a constant.
RESERVED = UNSUPPORTED | {
    *"OPENQASM include qreg creg qubit bit gate opaque measure barrier reset gphase const pi π U".split(),
    *FUNCTIONS,
}

NAME = r"[^\W\d]\w*"
_UNSIGNED = r"(?:[0-9]+\.?[0-9]*|\.[0-9]+)"
_FLOAT = re.compile(rf"[-+]?{_UNSIGNED}(?:[eE][-+]?[0-9]+)?")
_PI = re.compile(rf"([-+]?)(?:({_UNSIGNED})\s*\*\s*)?pi(?:\s*\*\s*({_UNSIGNED}))?(?:\s*/\s*({_UNSIGNED}))?")
_OPERAND = re.compile(rf"(?:({NAME})\s*(?:\[([^][]*)\])?|\$([0-9]+))")

#: Texts of numbers and lists of operands that are remembered.
_REMEMBERED = 100_000


def split(text: str | None, offset: int) -> list[tuple[str, int]]:
    """Split a list at its commas; give each part, without blanks around it, with its offset."""
    parts: list[tuple[str, int]] = []
    if text is None or not text or text.isspace():
        return parts
    for part in text.split(","):
        parts.append((part.strip(), offset + len(part) - len(part.lstrip())))
        offset += len(part) + 1
    return parts


class Scope:
    """The global names of one program.

    Parameters
    ----------
    source : Source
    """

    def __init__(self, source: Source) -> None:
        self.source = source
        self.version = 3
        self.constants: dict[str, float] = {}
        self.integers: set[str] = set()  # constants that are integers
        self.declared: dict[str, str] = {}
        self.qubit_registers: dict[str, range] = {}
        self.bit_registers: dict[str, range] = {}
        self.scalars: set[str] = set()  # registers declared without a size
        self.n_qubits = 0
        self.n_bits = 0
        self.n_physical = 0
        #: Lists of distinct single qubits, by their text.
        self.lists: dict[str, tuple[int, ...]] = {}
        self._singles: dict[str, int] = {}  # single qubits, by their text
        #: Values of parameters, by their text.
        self.numbers: dict[str, float] = {}

    # ---------------------------------------------------------------- complaints

    def unsupported(self, what: str, offset: int) -> UnsupportedError:
        """Return the error for what is OpenQASM, but not read."""
        problem = UnsupportedError(
            f"{what} is not yet supported", required="gates, and control flow that is known when compiling"
        )
        return self.source.locate(problem, offset)

    def only_in(self, version: int, what: str, offset: int) -> None:
        """Refuse what the other version does not have."""
        if self.version != version:
            raise self.source.error(
                f"{what} belongs to OpenQASM {version}",
                offset,
                found=f"a program in OpenQASM {self.version}",
                hint=f"begin the program with OPENQASM {version}.0;",
            )

    def check_count(self, name: str, what: str, required: int, given: str | None, offset: int) -> None:
        """Refuse a wrong number of parameters or qubits in a list of them."""
        found = given.count(",") + 1 if given and not given.isspace() else 0
        if required != found:
            raise self.source.error(
                f"wrong number of {what} for '{shorten(name)}'",
                offset,
                required=str(required),
                found=str(found),
                hint="is a ';' missing?" if given and "\n" in given.strip() else "",
            )

    def check_distinct(self, qubits: Sequence[int], text: str, offset: int) -> None:
        """Refuse a repeated qubit."""
        if len(set(qubits)) < len(qubits):
            raise self.source.error(
                "a qubit is repeated", offset, required="distinct qubits", found=f"'{shorten(text.strip())}'"
            )

    # ---------------------------------------------------------------- names

    def declare(self, name: str, what: str, offset: int) -> None:
        """Take a name, once."""
        if name in RESERVED:
            raise self.source.error(f"'{shorten(name)}' is a reserved word", offset, required="another name")
        if name in self.declared:
            found = f"it is {self.declared[name]}"
            raise self.source.error(f"'{shorten(name)}' is already defined", offset, found=found)
        self.declared[name] = what

    def add_register(self, name: str, size: int | None, offset: int, *, quantum: bool) -> None:
        """Declare a register; size None is a single qubit or bit."""
        self.declare(name, "a register", offset)
        start = self.n_qubits if quantum else self.n_bits
        span = range(start, start + (1 if size is None else size))
        if span.stop > MAX_QUBITS:
            raise self.source.error("too many qubits or bits", offset, required=f"at most {MAX_QUBITS}")
        if size is None:
            self.scalars.add(name)
        if not quantum:
            self.bit_registers[name] = span
            self.n_bits = span.stop
            return
        if self.n_physical:
            raise self.unsupported("a register beside physical qubits", offset)
        self.qubit_registers[name] = span
        self.n_qubits = span.stop

    # ---------------------------------------------------------------- numbers

    def expression(self, text: str, offset: int, names: Iterable[str]) -> Expression:
        """Read an expression of reals."""
        try:
            return parse(text, names=names, power=("^",) if self.version == 2 else ("**",), imaginary=False)
        except ExpressionError as problem:
            raise self.at_fault(problem, offset) from None

    def at_fault(self, problem: ExpressionError, offset: int, *, inside: bool = True) -> QasmError:
        """Return the error of an expression whose text begins at `offset`, or that was used there."""
        return self.source.error(
            problem.what,
            offset + (problem.column or 1) - 1 if inside else offset,
            required=problem.required,
            found=problem.found,
            hint=problem.hint,
        )

    def number(self, text: str, offset: int) -> float:
        """Return the value of a parameter; the text of anything but a plain number is remembered."""
        if _FLOAT.fullmatch(text):
            value = float(text)
            if value not in (math.inf, -math.inf):
                return value
        known = self.numbers.get(text)
        if known is None:
            known = self._number(text, offset)
            if len(self.numbers) < _REMEMBERED:
                self.numbers[text] = known
        return known

    def number_list(self, texts: Sequence[str], offset: int) -> list[float]:
        """Return the values of parameters with one character between them."""
        values = []
        for text in texts:
            values.append(self.number(text, offset))
            offset += len(text) + 1
        return values

    def _number(self, text: str, offset: int) -> float:
        bare = text.strip()
        if _FLOAT.fullmatch(bare):
            value = float(bare)
            if math.isfinite(value):
                return value
        elif match := _PI.fullmatch(bare):
            sign, before, behind, below = match.groups()
            # The order of operations is that of the expression reader, so the value is the same to the last bit.
            value = math.pi if before is None else float(before) * math.pi
            value = value if behind is None else value * float(behind)
            divisor = 1.0 if below is None else float(below)
            if divisor and math.isfinite(value) and math.isfinite(value / divisor):
                return -value / divisor if sign == "-" else value / divisor
        try:
            return self.expression(text, offset, self.constants).real(self.constants)
        except ExpressionError as problem:
            raise self.at_fault(problem, offset) from None

    def integer(self, text: str, offset: int, least: int, most: int) -> int:
        """Return the value of a size, an index or an integer constant."""
        bare = text.strip()
        if bare.isascii() and bare.isdigit() and len(bare) < 16:
            value = float(bare)
        else:
            value = self.number(text, offset)
        if value != math.floor(value) or not least <= value <= most:
            raise self.source.error(
                "an integer is out of range" if value == math.floor(value) else "a number is not an integer",
                offset,
                required=f"an integer from {least} to {most}",
                found=f"'{shorten(bare, 30)}'",
            )
        return int(value)

    # ---------------------------------------------------------------- operands

    def qubits(self, text: str, offset: int) -> tuple[int, ...] | None:
        """Return a list of distinct single qubits, remembered by its text, or None if it names a whole register."""
        found = [self._singles.get(part, -1) for part in text.split(",")]
        if -1 in found:
            parts = split(text, offset)
            spans = [self.operand(part, begin, self.qubit_registers) for part, begin in parts]
            if not spans or not all(single for _, single in spans):
                return None
            found = [span[0] for span, _ in spans]
            self._singles.update(zip(text.split(","), found, strict=True))
        if len(set(found)) < len(found):
            self.check_distinct(found, text, offset)
        qubits = tuple(found)
        if len(self.lists) < _REMEMBERED:
            self.lists[text] = qubits
        return qubits

    def broadcast(self, text: str, offset: int) -> list[tuple[int, ...]]:
        """Return the lists of qubits that a list of operands stands for, registers taken element by element."""
        parts = [self.operand(part, begin, self.qubit_registers) for part, begin in split(text, offset)]
        sizes = {len(span) for span, single in parts if not single}
        if len(sizes) > 1:
            raise self.source.error(
                "registers of different sizes in one statement",
                offset,
                required="equal sizes",
                found=", ".join(map(str, sorted(sizes))),
            )
        length = sizes.pop() if sizes else 1
        rows = list(zip(*([span[0]] * length if single else span for span, single in parts), strict=True))
        for row in rows:
            self.check_distinct(row, text, offset)
        return rows

    def operand(self, text: str, offset: int, registers: dict[str, range]) -> tuple[range, bool]:
        """Return the indices that an operand names, and whether it is a single one."""
        offset += len(text) - len(text.lstrip())
        bare = text.strip()
        quantum = registers is self.qubit_registers
        what = "qubit" if quantum else "bit"
        match = _OPERAND.fullmatch(bare)
        if match is None:
            raise self.source.error(
                f"a {what} is missing" if not bare else f"this does not name a {what}",
                offset,
                required="name or name[index]",
                found=f"'{shorten(bare, 30)}'" if bare else "nothing",
                hint="is a ';' missing?" if "\n" in bare else "",
            )
        name, index, physical = match.groups()
        if physical is not None:
            return self.physical_qubit(physical, offset, quantum), True
        span = registers.get(name)
        if span is None:
            other = self.declared.get(name)
            raise self.source.error(
                f"'{shorten(name)}' is not a register of {what}s" if other else f"unknown register '{shorten(name)}'",
                offset,
                found=f"it is {other}" if other else "",
                hint=self._known(what, registers),
            )
        if index is None:
            return span, name in self.scalars
        if name in self.scalars:
            raise self.source.error(f"'{shorten(name)}' is a single {what}: it has no index", offset)
        if not index.isdigit() and (":" in index or "{" in index or index.strip().startswith("-")):
            raise self.unsupported("a range, set or negative index", offset)
        k = self.integer(index, offset + match.start(2), 0, len(span) - 1)
        return span[k : k + 1], True

    def physical_qubit(self, digits: str, offset: int, quantum: bool) -> range:
        """Return the index of a physical qubit such as ``$3``."""
        self.only_in(3, "a physical qubit", offset)
        if not quantum:
            raise self.source.error("this does not name a bit", offset, required="name or name[index]")
        if self.qubit_registers:
            raise self.unsupported("a physical qubit beside registers", offset)
        k = self.integer(digits, offset + 1, 0, MAX_QUBITS - 1)
        self.n_physical = max(self.n_physical, k + 1)
        return range(k, k + 1)

    @staticmethod
    def _known(what: str, registers: Collection[str]) -> str:
        return f"registers of {what}s: {shorten(', '.join(registers))}" if registers else f"no {what}s are declared"
