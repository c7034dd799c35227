"""Classical expressions as parameters of gates: what is known only when the program runs becomes an affine angle."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import NoReturn

from gatewright.classical import Bits, Expression, Literal, Name, Operation, expression_text, leaves
from gatewright.errors import ExpressionError, UnsupportedError
from gatewright.expressions import FUNCTIONS, parse
from gatewright.gates import BARRIER, GATES, Gate
from gatewright.parameters import (
    Affine,
    Parameter,
    applied,
    power,
    product,
    quotient,
)
from gatewright.qasm.definitions import Op, same_gate
from gatewright.rotations import Term, controlled_phase, inverse_parameters
from gatewright.rotations import controlled as controlled_terms

__all__ = [
    "as_tree",
    "as_parameter",
    "controlled_unknown",
    "inverse_unknown",
    "is_unknown",
    "known_parameters",
    "names_of",
    "phase_under",
    "power_unknown",
    "reads_bits",
    "with_values",
]

#: Gates whose powers are those with a multiple of the angle.
_ONE_ANGLE = frozenset("rx ry rz p phase u1 cp cphase cu1 crx cry crz rxx ryy rzz rzx".split())


def as_parameter(tree: Expression) -> Parameter:
    """Return an expression as an affine one; what is not affine becomes an atom.

    Raises
    ------
    ExpressionError
        Something that is no number, or too large.

    Examples
    --------
    >>> str(as_parameter(Operation("/", (Operation("+", (Name("theta"), Literal("1"))), Literal("2")))))
    'theta/2 + 0.5'
    """
    match tree:
        case Literal(text):
            return _number(text)
        case Name(name):
            return Affine.of(name)
        case Bits():
            raise ExpressionError("bits cannot stand here", required="a number")
        case Operation("-", (inner,)):
            return as_parameter(inner) * -1.0
        case Operation("+", (left, right)):
            first, second = as_parameter(left), as_parameter(right)
            return first + second if isinstance(first, Affine) else second + first
        case Operation("-", (left, right)):
            return as_parameter(left) + as_parameter(right) * -1.0
        case Operation("*", (left, right)):
            return product(as_parameter(left), as_parameter(right))
        case Operation("/", (left, right)):
            divisor = as_parameter(right)
            if divisor == 0:
                raise ExpressionError("a division by zero")
            return quotient(as_parameter(left), divisor)
        case Operation("**", (left, right)) | Operation("pow", (left, right)):
            return power(as_parameter(left), as_parameter(right))
        case Operation(name, (inner,)) if name in FUNCTIONS:
            return applied(name, as_parameter(inner))
        case Operation(name, (inner,)) if name.partition("[")[0] == "float":
            return as_parameter(inner)
    return Affine.of(expression_text(tree, _no_bits))


def _number(text: str) -> float:
    if text in ("true", "false"):
        return float(text == "true")
    return float(int(text.strip('"'), 2)) if text.startswith('"') else float(text)


def _no_bits(bits: Bits) -> str:
    raise ExpressionError("bits cannot stand here", required="a number")


def as_tree(value: Parameter) -> Expression:
    """Return a parameter as an expression, of the form in which its text would be read.

    Examples
    --------
    >>> as_tree(Affine.of("theta") * 2)
    Operation(op='*', operands=(Literal(text='2.0'), Name(name='theta')))
    """
    if not isinstance(value, Affine):
        return Literal(repr(value))
    stack: list[Expression] = []
    for step in parse(str(value), names=value.names, imaginary=False).steps:
        if step.kind in ("number", "constant"):
            stack.append(Literal(repr(step.number)))
        elif step.kind == "name":
            stack.append(Name(step.name))
        elif step.kind == "neg" or step.kind in FUNCTIONS:
            stack.append(_folded("-" if step.kind == "neg" else step.kind, (stack.pop(),)))
        else:
            second, first = stack.pop(), stack.pop()
            stack.append(_folded("**" if step.kind == "pow" else step.kind, (first, second)))
    return stack[0]


def _folded(op: str, operands: tuple[Expression, ...]) -> Expression:
    tree = Operation(op, operands)
    if not all(isinstance(operand, Literal) for operand in operands):
        return tree
    number = as_parameter(tree)
    assert not isinstance(number, Affine)
    return Literal(repr(number))


def names_of(tree: Expression) -> set[str]:
    """Return the names in an expression."""
    return {leaf.name for leaf in leaves(tree) if isinstance(leaf, Name)}


def reads_bits(tree: Expression) -> bool:
    """Whether an expression reads classical bits."""
    return any(isinstance(leaf, Bits) for leaf in leaves(tree))


# ---------------------------------------------------------------- modifiers


def is_unknown(op: Op) -> bool:
    """Whether an operation has a parameter that is not known."""
    return any(isinstance(value, Affine) for value in op.parameters)


def known_parameters(op: Op) -> tuple[float, ...]:
    """Return the parameters of an operation, all of which are known."""
    assert not is_unknown(op)
    return op.parameters  # type: ignore[return-value]


def with_values(
    operations: Sequence[Op], phase: Parameter, values: Mapping[str, Parameter]
) -> tuple[list[Op], Parameter]:
    """Return operations and a phase with parameters put in the place of names."""

    def bound(value: Parameter) -> Parameter:
        return value.bind(values) if isinstance(value, Affine) else value

    made = [
        op._replace(parameters=tuple([bound(value) for value in op.parameters])) if is_unknown(op) else op
        for op in operations
    ]
    return made, bound(phase)


def inverse_unknown(op: Op) -> Op:
    """Return the inverse of an operation with unknown parameters."""
    _standard(op)
    found = inverse_parameters(op.target.name, op.parameters)
    if found is None:
        _refuse(op, "the inverse")
    name, values = found
    return Op(op.target if name == op.target.name else GATES[name], op.qubits, values)


def power_unknown(op: Op, exponent: float) -> list[Op]:
    """Return an integer power of an operation with unknown parameters."""
    _standard(op)
    if exponent != int(exponent):
        _refuse(op, "a power that is not an integer")
    if op.target.name in _ONE_ANGLE:
        return [op._replace(parameters=(op.parameters[0] * exponent,))]
    if exponent < 0:
        op = inverse_unknown(op)
    return [op] * int(abs(exponent))


def controlled_unknown(op: Op, controls: int) -> list[Op]:
    """Return an operation with unknown parameters under controls, which are the first qubits."""
    _standard(op)
    wires = tuple(q + controls for q in op.qubits)
    terms = controlled_terms(op.target.name, op.parameters, tuple(range(controls)), wires)
    if terms is None:
        _refuse(op, "a control")
    return _ops(terms)


def phase_under(phase: Parameter, controls: int) -> list[Op]:
    """Return a global phase under controls."""
    return _ops(controlled_phase(phase, tuple(range(controls))))


def _ops(terms: Sequence[Term]) -> list[Op]:
    made = []
    for name, wires, values in terms:
        known = tuple([value.constant if isinstance(value, Affine) and not value.terms else value for value in values])
        if not known or any(known):
            made.append(Op(GATES[name], wires, known))
    return made


def _standard(op: Op) -> None:
    """Refuse gates that only share the name of a standard one."""
    gate = op.target
    assert gate != BARRIER
    known = GATES.get(gate.name)
    if not isinstance(gate, Gate) or known is None or not same_gate(gate, known, exact=True):
        _refuse(op, "a modifier")


def _refuse(op: Op, what: str) -> NoReturn:
    raise UnsupportedError(
        f"{what} of the gate '{op.target.name}' with an angle that is not known when compiling is not yet supported",
        required="a gate of the standard library, and integer powers",
    )
