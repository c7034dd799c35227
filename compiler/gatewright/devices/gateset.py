"""Native gate sets as data: their model, their TOML reader, and the checks on loading.

A gate set file is TOML; its keys are described at `read_gate_set`. Standard names are those of OpenQASM 3's
``stdgates.inc`` (Cross et al., ACM Trans. Quantum Comput. 3, 12 (2022)). That a two-qubit gate entangles if and only
if it is neither a product nor a product times SWAP, and then with all one-qubit gates reaches everything exactly:
Brylinski and Brylinski, Universal quantum gates, in Mathematics of Quantum Computation (2002).
"""

from __future__ import annotations

import itertools
import math
import os
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.devices.reach import Reach, one_qubit_reach
from gatewright.devices.reading import Table, load_toml
from gatewright.devices.resources import shipped_gate_set_files
from gatewright.errors import (
    ExpressionError,
    GateSetError,
    GatewrightError,
    MatrixError,
    NotUnitaryError,
    nearest_name,
    shorten,
)
from gatewright.expressions import Expression, parse
from gatewright.gates import BARRIER, DELAY, GATES, MEASURE, RESET, UNITARY, Gate
from gatewright.linalg import checked_unitary, distance, reorder_qubits, unitarity_defect

__all__ = [
    "STANDARD_LIBRARY",
    "UNITS",
    "GateSet",
    "NativeGate",
    "check_definitions",
    "read_gate_set",
    "shipped_gate_sets",
]

Array = NDArray[np.complex128]
Vector = NDArray[np.float64]

#: Gates that an OpenQASM 3 program has without a definition of its own: ``stdgates.inc`` and the built-in ``U``.
STANDARD_LIBRARY = frozenset(
    "U CX p phase x y z h s sdg t tdg sx rx ry rz id u1 u2 u3 "
    "cx cy cz cp cphase crx cry crz ch cu swap ccx cswap".split()
)

#: Units of a parameter's range, in radians.
UNITS: dict[str, float] = {"rad": 1.0, "deg": math.pi / 180, "turn": 2 * math.pi}

_NAME = re.compile(r"[a-z][A-Za-z0-9_]{0,31}")

#: Words of OpenQASM 2 and 3 that cannot name a gate, and what operations of a circuit are called.
_RESERVED = frozenset(
    f"{MEASURE.name} {RESET.name} {BARRIER.name} {DELAY.name} {UNITARY.name} "
    "gate opaque include def cal defcal defcalgrammar extern box let break continue if else end return for while in "
    "switch case default nop pragma input output const readonly mutable qreg creg qubit bit bool int uint float angle "
    "complex array void duration stretch gphase inv pow ctrl negctrl dim durationof delay true false pi tau euler im "
    "arccos arcsin arctan ceiling cos exp floor log ln mod popcount rotl rotr sin sqrt tan sizeof real imag".split()
)
_RESERVED_PARAMETERS = frozenset("pi tau euler i j e exp sin cos tan sqrt ln".split())

_MAX_GATES = 32
_MAX_PARAMETERS = 6
_MAX_EXPRESSION = 1000
_MAX_DEFINITION = 2000
_MAX_ANGLE = 1e4

#: What ‖U†U − 1‖ may be, and the distance from a standard gate of the same name or from the definition.
_TOLERANCE = 1e-12
_SAME = 1e-9

#: How far, in operator norm, a measured matrix may be from the unitary that stands for it.
_MEASURED = 0.3


@dataclass(frozen=True, slots=True)
class _Entries:
    """A matrix function made of expressions; two are equal if their texts are."""

    text: str
    base: Array = field(compare=False, repr=False)
    names: tuple[str, ...] = field(default=(), compare=False, repr=False)
    entries: tuple[tuple[int, int, Expression], ...] = field(default=(), compare=False, repr=False)

    def __call__(self, parameters: Vector) -> Array:
        """Return the matrices, shape (..., d, d), for parameters of shape (..., n)."""
        shape = (*parameters.shape[:-1], *self.base.shape)
        if not self.entries:
            return np.broadcast_to(self.base, shape)
        out = np.empty(shape, dtype=np.complex128)
        out[...] = self.base
        values = {name: parameters[..., k] for k, name in enumerate(self.names)}
        for row, column, expression in self.entries:
            out[..., row, column] = expression.evaluate(values)
        return out


@dataclass(frozen=True, slots=True)
class NativeGate:
    """One operation of a processor.

    Attributes
    ----------
    gate : Gate
        Name, number of qubits and of parameters, matrix function.
    parameters : tuple of str
        Names of the parameters.
    ranges : tuple of (float, float)
        Least and greatest value of each parameter, in radians.
    virtual : bool
        Done by a change of frame, in no time and without error; such a gate is diagonal.
    duration_ns, error : float, optional
        Typical values; a device has its own. The error is one minus the average gate fidelity.
    definition : str
        An OpenQASM gate definition; empty where there is none in the file.
    symmetric : bool
        For a two-qubit gate: exchanging its qubits changes nothing but a global phase.
    measured : bool
        The matrix of the file was measured; the gate is the unitary nearest to it.
    moved : float
        Operator norm of the matrix of the file minus the gate's.
    """

    gate: Gate
    parameters: tuple[str, ...] = ()
    ranges: tuple[tuple[float, float], ...] = ()
    virtual: bool = False
    duration_ns: float | None = None
    error: float | None = None
    definition: str = ""
    symmetric: bool = False
    measured: bool = False
    moved: float = 0.0

    def samples(self) -> Vector:
        """Return points of the parameters' range: a grid with the ends and corners, and fixed random ones.

        Returns
        -------
        ndarray, shape (s, n_parameters)
        """
        return _samples(self.ranges)


def _samples(ranges: tuple[tuple[float, float], ...]) -> Vector:
    if not ranges:
        return np.zeros((1, 0))
    low, high = np.array(ranges).T
    steps = max(2, min(33, int(1000 ** (1 / len(ranges)))))
    grid = np.array(list(itertools.product(np.linspace(0, 1, steps), repeat=len(ranges))))
    random = np.random.default_rng(0).random((64, len(ranges)))
    return np.asarray(np.clip(low + np.concatenate([grid, random]) * (high - low), low, high))


@dataclass(frozen=True, eq=False)
class GateSet:
    """The native operations of a processor.

    Attributes
    ----------
    name, description : str
    gates : mapping of str to NativeGate
        In the order of the file.
    """

    name: str
    description: str
    gates: Mapping[str, NativeGate]

    @property
    def one_qubit(self) -> tuple[NativeGate, ...]:
        """The one-qubit gates."""
        return tuple(gate for gate in self.gates.values() if gate.gate.n_qubits == 1)

    @property
    def two_qubit(self) -> tuple[NativeGate, ...]:
        """The two-qubit gates."""
        return tuple(gate for gate in self.gates.values() if gate.gate.n_qubits == 2)

    @property
    def natives(self) -> dict[str, Gate]:
        """The gates' names, sizes and matrix functions."""
        return {name: gate.gate for name, gate in self.gates.items()}

    @property
    def measured(self) -> dict[str, float]:
        """The gates that were measured, and how far each matrix is from the unitary that stands for it."""
        return {name: gate.moved for name, gate in self.gates.items() if gate.measured}

    @cached_property
    def reach(self) -> Reach:
        """What the one-qubit gates generate."""
        return one_qubit_reach([gate.gate.matrix(gate.samples()) for gate in self.one_qubit])

    @cached_property
    def can_entangle(self) -> bool:
        """Whether some two-qubit gate is neither a product of one-qubit gates nor one times SWAP.

        By the operator-Schmidt rank (Nielsen et al., Phys. Rev. A 67, 052301 (2003)) of the gate, and of the gate
        times SWAP, at points of its range.

        Examples
        --------
        >>> read_gate_set("cz-virtual-z").can_entangle
        True
        """
        swap = GATES["swap"].matrix()
        for native in self.two_qubit:
            u = native.gate.matrix(native.samples())
            if np.any((_second_schmidt_value(u) > _SAME) & (_second_schmidt_value(u @ swap) > _SAME)):
                return True
        return False


def _second_schmidt_value(u: Array) -> Vector:
    """Return the second-largest operator-Schmidt coefficient of two-qubit unitaries, shape (s, 4, 4) → (s,)."""
    realigned = u.reshape(-1, 2, 2, 2, 2).transpose(0, 1, 3, 2, 4).reshape(-1, 4, 4)
    return np.asarray(np.linalg.svd(realigned, compute_uv=False)[:, 1])


def shipped_gate_sets() -> list[str]:
    """Return the names of the gate sets that come with gatewright.

    Examples
    --------
    >>> "iswap-virtual-z" in shipped_gate_sets()
    True
    """
    return list(shipped_gate_set_files())


def read_gate_set(source: str | os.PathLike[str] | Mapping[str, Any], *, where: str = "") -> GateSet:
    """Read a gate set by its shipped name, from a file, or from the same content as a mapping.

    Loading checks that every gate is unitary over its whole range (at a grid of points with the ends, and at random
    ones), that one with a name of `gatewright.gates.GATES` is that gate up to global phase, that definitions in
    OpenQASM agree with the matrices, and that the one-qubit gates reach all of SU(2) exactly. Fixed matrices are
    taken to the nearest unitary, so that rounding in the last digits does no harm.

    Parameters
    ----------
    source : str, path or mapping
        A path is recognised by its ``.toml`` or by a separator. Keys:

        ``name``, ``description``
            Text; the description may be left out.
        ``gates.NAME.qubits``
            1 or 2.
        ``gates.NAME.matrix``
            Rows of numbers and of expressions in the parameters, such as ``"exp(-i*theta/2)"``. The first qubit is
            the more significant.
        ``gates.NAME.parameters``
            A list of ``{name = …, from = …, to = …, unit = …}``. The range is given in `unit`, which is ``"rad"`` if
            left out, ``"deg"`` or ``"turn"``; in the matrix, the definition and circuits the parameter is in radians.
        ``gates.NAME.measured``
            True for a matrix without parameters that was measured, by process tomography for example, and so is
            not quite unitary: the gate is the unitary nearest to it, and how far that is, is reported.
        ``gates.NAME.virtual``
            True for a change of frame: a diagonal one-qubit gate.
        ``gates.NAME.duration_ns``, ``gates.NAME.error``
            Typical values; may be left out.
        ``gates.NAME.definition``
            The gate in terms of OpenQASM's standard library, for use in output; needed for a gate with
            parameters that `gatewright.gates.GATES` does not have.
    where : str
        Name to use in messages for a mapping or a name.

    Returns
    -------
    GateSet

    Raises
    ------
    GateSetError

    Examples
    --------
    >>> gates = read_gate_set("cz-virtual-z")
    >>> list(gates.gates), gates.gates["cz"].symmetric
    (['rz', 'sx', 'cz'], True)
    """
    if isinstance(source, GateSet):
        return source
    if isinstance(source, Mapping):
        return _read(source, where)
    text = os.fspath(source)
    if isinstance(source, os.PathLike) or text.endswith(".toml") or "/" in text or os.sep in text:
        return _read(load_toml(text, error=GateSetError), shorten(text, 200))
    shipped = shipped_gate_set_files()
    if text not in shipped:
        raise GateSetError(f"unknown gate set '{shorten(text)}'", hint=nearest_name(text, shipped), where=where)
    return _read(load_toml(shipped[text], error=GateSetError), text)


def _read(data: object, where: str) -> GateSet:
    table = Table(data, error=GateSetError, where=where, known=("name", "description", "gates"))
    name = table.text("name")
    description = table.text("description", "", limit=2000)
    table.get("gates")
    entries = table.table("gates")
    if not 1 <= len(entries.data) <= _MAX_GATES:
        raise table.fault("gates", f"1 to {_MAX_GATES} gates", found=f"{len(entries.data)} gates")
    gates = {key: _read_gate(entries, key) for key in entries.data}
    found = GateSet(name, description, gates)
    if found.reach.kind != "all":
        raise table.fail(
            "the one-qubit gates do not reach all of SU(2)",
            required="every one-qubit unitary, exactly",
            found=found.reach.found,
            hint=f"missing: {found.reach.missing}",
        )
    check_definitions(found, where=where)
    return found


def _read_gate(gates: Table, name: str) -> NativeGate:
    known = ("qubits", "parameters", "matrix", "measured", "virtual", "duration_ns", "error", "definition")
    if not (_NAME.fullmatch(name) and name not in _RESERVED) and name not in GATES:
        raise gates.fail(
            f"'{shorten(name)}' cannot name a gate",
            required="a small letter, then up to 31 letters, digits or underscores; no word of OpenQASM's own",
        )
    table = gates.table(name, known)
    n_qubits = table.integer("qubits", 1, 2)
    parameters, ranges = _read_parameters(table)
    measured = table.boolean("measured", False)
    if measured and parameters:
        raise table.fault("measured", "a matrix without parameters", True)
    function, moved = _read_matrix(table, 2**n_qubits, parameters, measured)
    gate = Gate(name, n_qubits, len(parameters), function)

    points = _samples(ranges)
    try:
        matrices = gate.matrix(points)
    except ExpressionError as problem:
        raise _in_entry(table, "matrix", problem) from None
    if parameters:
        _check_unitary(table, matrices, points, parameters)
    _check_standard(table, gate, matrices, points)
    symmetric = n_qubits == 2 and bool(np.all(distance(matrices, reorder_qubits(matrices, (1, 0))) < _SAME))
    virtual = table.boolean("virtual", False)
    error = table.number("error", 0, 1) if "error" in table else None
    duration = table.number("duration_ns", 0, math.inf) if "duration_ns" in table else None
    if virtual:
        diagonal = n_qubits == 1 and float(np.abs(matrices[:, [0, 1], [1, 0]]).max()) <= _TOLERANCE
        if not diagonal or error or duration:
            raise table.fault("virtual", "a diagonal one-qubit gate without duration and error", True)
        error = duration = 0.0
    return NativeGate(
        gate=gate,
        parameters=parameters,
        ranges=ranges,
        virtual=virtual,
        duration_ns=duration,
        error=error,
        definition=_read_definition(table, gate),
        symmetric=symmetric,
        measured=measured,
        moved=moved,
    )


def _read_parameters(table: Table) -> tuple[tuple[str, ...], tuple[tuple[float, float], ...]]:
    rows = table.tables("parameters", ("name", "from", "to", "unit"))
    if len(rows) > _MAX_PARAMETERS:
        raise table.fault("parameters", f"at most {_MAX_PARAMETERS}", found=f"{len(rows)} parameters")
    names: list[str] = []
    ranges: list[tuple[float, float]] = []
    for row in rows:
        name = row.text("name")
        if not _NAME.fullmatch(name) or name in _RESERVED_PARAMETERS or name in names:
            raise row.fault("name", "a small letter, then letters, digits or underscores; a new name", name)
        unit = row.text("unit", "rad")
        if unit not in UNITS:
            raise row.fail(f"unknown unit '{shorten(unit)}' in '{row.key}'", hint=nearest_name(unit, UNITS))
        low, high = (_bound(row, key) * UNITS[unit] for key in ("from", "to"))
        if not (low < high and max(abs(low), abs(high)) <= _MAX_ANGLE):
            raise row.fail(
                f"the range of '{row.key}' is wrong",
                required=f"from < to, within ±{_MAX_ANGLE:g} rad",
                found=f"{low:g} to {high:g} rad",
            )
        names.append(name)
        ranges.append((low, high))
    return tuple(names), tuple(ranges)


def _bound(row: Table, key: str) -> float:
    value = row.get(key)
    if isinstance(value, str):
        try:
            return _parse(row, key, value, ()).real()
        except ExpressionError as problem:
            raise _in_entry(row, key, problem) from None
    return row.number(key, -_MAX_ANGLE * 60, _MAX_ANGLE * 60)


def _parse(table: Table, key: str, text: str, names: tuple[str, ...]) -> Expression:
    if len(text) > _MAX_EXPRESSION:
        raise table.fault(key, f"at most {_MAX_EXPRESSION} characters", text)
    try:
        return parse(text, names=names)
    except ExpressionError as problem:
        raise _in_entry(table, key, problem) from None


def _in_entry(table: Table, key: str, problem: GatewrightError) -> GatewrightError:
    """Return the error of an expression or a definition as one about the entry that holds it."""
    return table.fail(
        f"'{shorten(table.path(key))}' cannot be read: {problem.what}",
        required=problem.required,
        found=problem.found,
        hint=problem.hint,
    )


def _read_matrix(table: Table, size: int, names: tuple[str, ...], measured: bool) -> tuple[_Entries, float]:
    """Return the matrix function, and how far a fixed matrix was moved to be unitary."""
    rows = table.sequence("matrix")
    if len(rows) != size:
        raise table.fault("matrix", f"{size} rows", found=f"{len(rows)} rows")
    base = np.zeros((size, size), dtype=np.complex128)
    entries: list[tuple[int, int, Expression]] = []
    texts: list[str] = list(names)
    for r, row in enumerate(rows):
        values = table.as_sequence(f"matrix[{r}]", row)
        if len(values) != size:
            raise table.fault(f"matrix[{r}]", f"{size} entries", found=f"{len(values)} entries")
        for c, value in enumerate(values):
            key = f"matrix[{r}][{c}]"
            if isinstance(value, str):
                expression = _parse(table, key, value, names)
                if expression.names:
                    entries.append((r, c, expression))
                else:
                    try:
                        base[r, c] = expression.value()
                    except ExpressionError as problem:
                        raise _in_entry(table, key, problem) from None
                texts.append(value)
            elif isinstance(value, (int, float, complex, np.number)) and not isinstance(value, bool):
                try:
                    base[r, c] = value
                except OverflowError:
                    raise table.fault(key, "a number of ordinary size", value) from None
                texts.append(repr(value))
            else:
                raise table.fault(key, "a number or an expression in quotes", value)
    if not np.isfinite(base).all():
        r, c = np.argwhere(~np.isfinite(base))[0].tolist()
        raise table.fault(f"matrix[{r}][{c}]", "a finite number", rows[r][c])
    moved = 0.0
    if not names:
        try:
            base, moved = checked_unitary(base, tolerance=_TOLERANCE, nearest=measured)
        except NotUnitaryError as problem:
            raise _not_unitary(table, problem.defect) from None
        except MatrixError as problem:
            raise table.fail(f"the matrix of '{table.key}' cannot be used: {problem.what}") from None
        if moved > _MEASURED:
            raise table.fail(
                f"the measured matrix of '{table.key}' is too far from any unitary",
                required=f"at most {_MEASURED:g} in operator norm",
                found=f"{moved:.3g}",
            )
    base.setflags(write=False)
    return _Entries(" ".join(texts), base, names, tuple(entries)), moved


def _check_unitary(table: Table, matrices: Array, points: Vector, names: tuple[str, ...]) -> None:
    # Far from unitary is enough to know; beyond it the products might overflow.
    large = np.abs(matrices).max(axis=(1, 2)) > 1e6
    defects = np.where(large, np.inf, unitarity_defect(np.where(large[:, None, None], 0, matrices)))
    worst = int(np.argmax(defects))
    if defects[worst] > _TOLERANCE:
        raise _not_unitary(table, float(defects[worst]), _at(points[worst], names))


def _not_unitary(table: Table, defect: float, at: str = "") -> GatewrightError:
    return table.fail(
        f"the matrix of '{table.key}' is not unitary" + (f" at {at}" if at else ""),
        required=f"‖U†U − 1‖ ≤ {_TOLERANCE:g}",
        found=f"{defect:.3g}",
        hint='write roots and fractions as expressions, such as "1/sqrt(2)"'
        if defect < 1e-4
        else "if the matrix was measured, say measured = true",
    )


def _at(point: Vector, names: tuple[str, ...]) -> str:
    return ", ".join(f"{name} = {value:.6g}" for name, value in zip(names, point, strict=True))


def _check_standard(table: Table, gate: Gate, matrices: Array, points: Vector) -> None:
    """Check that a gate with a well-known name is that gate."""
    known = GATES.get(gate.name)
    if known is None:
        return
    if (known.n_qubits, known.n_parameters) != (gate.n_qubits, gate.n_parameters):
        raise table.fail(
            f"'{gate.name}' is the name of another gate",
            required=f"qubits: {known.n_qubits}, parameters: {known.n_parameters}; or another name",
            found=f"qubits: {gate.n_qubits}, parameters: {gate.n_parameters}",
        )
    apart = float(distance(matrices, known.matrix(points)).max())
    if apart > _SAME:
        raise table.fail(
            f"'{gate.name}' is the name of another gate",
            required="the matrix of that name up to global phase, or another name",
            found=f"a distance of {apart:.3g}",
        )


def _read_definition(table: Table, gate: Gate) -> str:
    if "definition" not in table:
        if gate.n_parameters and gate.name not in GATES:
            raise table.fail(
                f"'{table.path('definition')}' is missing",
                required=f"an OpenQASM definition, as '{gate.name}' is not a well-known gate",
                hint=f'such as definition = "gate {gate.name}(t) q {{ ry(t) q; }}"',
            )
        return ""
    text = table.get("definition")
    if gate.name in STANDARD_LIBRARY:
        raise table.fault("definition", "none, as OpenQASM's standard library has this gate", text)
    if not isinstance(text, str) or not 0 < len(text) <= _MAX_DEFINITION:
        raise table.fault("definition", f"text of at most {_MAX_DEFINITION} characters", text)
    text = text.strip()
    if not re.match(rf"gate\s+{gate.name}\b[^{{}}]*\{{[^{{}}]*\}}\Z", text):
        raise table.fault("definition", f"one definition, 'gate {gate.name} … {{ … }}'", text)
    return text


def check_definitions(gate_set: GateSet, *, where: str = "") -> None:
    """Check that each OpenQASM definition of a gate set is its gate, up to global phase.

    The definition is read as part of an OpenQASM 3 program, at up to eight points of the parameters' range.

    Raises
    ------
    GateSetError
        If a definition cannot be read, or gives another matrix.
    """
    from gatewright import qasm
    from gatewright.circuit import Circuit

    for name, native in gate_set.gates.items():
        if not native.definition:
            continue
        points = native.samples()
        points = points[:: max(1, len(points) // 7)]
        key = f"gates.{name}.definition"
        for point in points:
            values = f"({', '.join(map(repr, point.tolist()))})" if len(point) else ""
            qubits = ", ".join(f"q[{k}]" for k in range(native.gate.n_qubits))
            program = (
                f'OPENQASM 3.0;\ninclude "stdgates.inc";\n{native.definition}\n'
                f"qubit[{native.gate.n_qubits}] q;\n{name}{values} {qubits};\n"
            )
            try:
                circuit = qasm.read(program)
                assert isinstance(circuit, Circuit)  # a gate's definition measures nothing
                matrix = circuit.unitary()
            except GatewrightError as problem:
                raise GateSetError(
                    f"'{key}' cannot be read: {problem.what}",
                    required=problem.required,
                    found=problem.found,
                    hint=problem.hint,
                    where=where or gate_set.name,
                ) from None
            apart = float(distance(matrix, native.gate.matrix(point)))
            if apart > _SAME:
                raise GateSetError(
                    f"'{key}' is not the gate of the matrix",
                    required="the same up to global phase",
                    found=f"a distance of {apart:.3g}" + (f" at {_at(point, native.parameters)}" if len(point) else ""),
                    where=where or gate_set.name,
                )
