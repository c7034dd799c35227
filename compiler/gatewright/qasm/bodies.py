"""Read the gate definitions of an OpenQASM program: header, and a body of calls, barriers and ``gphase``."""

from __future__ import annotations

import re
from collections.abc import Callable

from gatewright.errors import ExpressionError, nearest_name, shorten
from gatewright.gates import BARRIER, Gate
from gatewright.qasm.definitions import MAX_DEPTH, Definition, Step
from gatewright.qasm.scope import NAME, RESERVED, UNSUPPORTED, Scope, split

__all__ = ["read_definition"]

_HEADER = re.compile(rf"gate\s+({NAME})\s*(?:\(([^()]*)\))?\s*([^()]*)")
_NAME = re.compile(NAME)
_STEP = re.compile(rf"({NAME})\s*(?:\((.*)\))?\s*(.*)", re.DOTALL)

Target = Callable[[str, int], Gate | Definition]


def read_definition(
    scope: Scope, header: str, header_offset: int, body: str, body_offset: int, target: Target
) -> Definition:
    """Read one definition and declare its name.

    Parameters
    ----------
    scope : Scope
    header : str
        From ``gate`` up to the opening brace, at `header_offset` of the program.
    body : str
        Between the braces, at `body_offset`.
    target : callable
        Returns the gate of a name used at an offset, or raises.

    Raises
    ------
    QasmError, UnsupportedError
    """
    match = _HEADER.fullmatch(header)
    if match is None:
        required = "gate name(parameters) qubits { }"
        raise scope.source.error("not a gate definition", header_offset, required=required, found=shorten(header))
    name = match[1]
    parameters = _formal(scope, match[2] or "", header_offset + match.start(2), "parameter")
    wires = _formal(scope, match[3], header_offset + match.start(3), "qubit")
    if not wires:
        raise scope.source.error(f"the gate '{shorten(name)}' has no qubits", header_offset, required="at least one")
    scope.declare(name, "a gate", header_offset + match.start(1))
    steps = _Body(scope, name, parameters, wires, target).steps(body, body_offset)
    used = {word for step in steps for expression in step.expressions for word in expression.names}
    constants = {word: scope.constants[word] for word in sorted(used - {*parameters})}
    made = Definition(name, parameters, len(wires), tuple(steps), constants)
    if made.depth > MAX_DEPTH:
        what = f"the gate '{shorten(name)}' is nested too deeply"
        raise scope.source.error(what, header_offset, required=f"at most {MAX_DEPTH} levels of definitions")
    return made


def _formal(scope: Scope, text: str, offset: int, what: str) -> tuple[str, ...]:
    """Read the names of a definition's parameters or qubits."""
    names: dict[str, None] = {}
    for part, begin in split(text, offset):
        if not _NAME.fullmatch(part) or part in RESERVED or part in names:
            required = f"a name for each {what}, none of them twice"
            raise scope.source.error(f"'{shorten(part)}' cannot name a {what}", begin, required=required)
        names[part] = None
    return tuple(names)


class _Body:
    """The body of one definition."""

    def __init__(
        self, scope: Scope, own: str, parameters: tuple[str, ...], wires: tuple[str, ...], target: Target
    ) -> None:
        self.scope = scope
        self.own = own
        self.parameters = frozenset(parameters)
        self.names = frozenset((*scope.constants, *parameters))
        self.wires = {wire: k for k, wire in enumerate(wires)}
        self.target = target

    def steps(self, text: str, offset: int) -> list[Step]:
        """Read all statements."""
        steps = []
        pieces = text.split(";")
        for number, piece in enumerate(pieces):
            statement = piece.strip()
            at = offset + len(piece) - len(piece.lstrip())
            if statement:
                steps.append(self.step(statement, at))
                if number == len(pieces) - 1:
                    required = "';' behind each statement of a definition"
                    raise self.scope.source.error("a ';' is missing", at, required=required)
            offset += len(piece) + 1
        return steps

    def step(self, text: str, offset: int) -> Step:
        """Read one statement."""
        scope = self.scope
        match = _STEP.fullmatch(text)
        if match is None:
            raise scope.source.error("this is not a statement", offset, found=f"'{shorten(text, 30)}'")
        word = match[1]
        if word in UNSUPPORTED:
            raise scope.unsupported(f"'{word}'", offset)
        if word in RESERVED and word not in ("barrier", "gphase", "U"):
            raise scope.source.error(f"'{word}' cannot stand in a definition", offset, required="gates and barriers")
        if word == self.own:
            raise scope.source.error(f"the gate '{shorten(word)}' is defined by itself", offset)
        target: Gate | Definition | None = None
        if word == "gphase":
            scope.only_in(3, "'gphase'", offset)
        else:
            target = BARRIER if word == "barrier" else self.target(word, offset)
        parts = split(match[2], offset + match.start(2))
        expressions = tuple(scope.expression(part, begin, self.names) for part, begin in parts)
        scope.check_count(word, "parameters", target.n_parameters if target else 1, match[2], offset)
        qubits = self.qubits(match[3], offset + match.start(3))
        if target is BARRIER:
            qubits = qubits or tuple(self.wires.values())
        else:
            scope.check_count(word, "qubits", target.n_qubits if target else 0, match[3], offset)
        if any(name in self.parameters for expression in expressions for name in expression.names):
            return Step(target, qubits, expressions, None)
        try:
            values = tuple([expression.real(scope.constants) for expression in expressions])
        except ExpressionError as problem:
            raise scope.at_fault(problem, offset, inside=False) from None
        return Step(target, qubits, expressions, values)

    def qubits(self, text: str, offset: int) -> tuple[int, ...]:
        """Read the qubits of a statement."""
        places = []
        for part, begin in split(text, offset):
            place = self.wires.get(part)
            if place is None:
                what = f"unknown qubit '{shorten(part, 30)}' in the definition of '{shorten(self.own)}'"
                raise self.scope.source.error(what, begin, hint=nearest_name(part, self.wires))
            places.append(place)
        self.scope.check_distinct(places, text, offset)
        return tuple(places)
