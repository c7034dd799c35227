"""Write circuits as OpenQASM 2 or 3, so that reading the text gives the same columns to the last bit.

Angles are written as multiples of pi only where the reader returns the same float, else with the fewest digits
that do. Gates that the version's library lacks are written with a definition.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Mapping, Sequence
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from gatewright.angles import angle_texts
from gatewright.calibrated import calibrated_gates, without_matrix
from gatewright.circuit import Circuit
from gatewright.classical import Bits, bits_text
from gatewright.errors import CircuitError, QasmError, UnsupportedError, shorten
from gatewright.gates import BARRIER, DELAY, GATES, MEASURE, RESET, UNITARY, Gate
from gatewright.parameters import Affine
from gatewright.program import Program
from gatewright.qasm.blocks import block_lines, conditional_lines
from gatewright.qasm.definitions import same_gate
from gatewright.qasm.library import BUILT_IN, DEFINITIONS, LIBRARIES, LIBRARY_FILES
from gatewright.qasm.reader import read
from gatewright.qasm.scope import RESERVED

__all__ = ["angle_texts", "write"]

_WORD = re.compile(r"[^\W\d]\w*")
_NAMES = {2: re.compile(r"[a-z][A-Za-z0-9_]*"), 3: re.compile(r"[A-Za-z_][A-Za-z0-9_]*")}
_PHASE_STEP = re.compile(r"\bgphase\b[^;]*;\s*")


def write(
    circuit: Circuit | Program,
    *,
    version: int = 3,
    definitions: Mapping[str, str] = MappingProxyType({}),
    header: Sequence[str] = (),
) -> str:
    """Return a circuit as a program, one statement a line.

    Parameters
    ----------
    circuit : Circuit or Program
        Explicit unitaries of one qubit are written as ``U``; larger ones cannot be written.
    version : {3, 2}
        OpenQASM 2 has no global phase: it is left out there.
    definitions : mapping of str to str
        ``gate`` definitions of native gates by name, in terms of the version's standard library. Each is checked
        against the gate's matrix.
    header : sequence of str
        Comment lines to put in front.

    Returns
    -------
    str

    Raises
    ------
    CircuitError
        Where the language cannot say what the circuit does.

    Examples
    --------
    >>> from gatewright.circuit import Builder
    >>> print(write(Builder(2).gate("cx", 0, 1).gate("rz", 1, parameters=[3 * np.pi / 4]).build()))
    OPENQASM 3.0;
    include "stdgates.inc";
    <BLANKLINE>
    qubit[2] q;
    cx q[0], q[1];
    rz(3*pi/4) q[1];
    <BLANKLINE>
    """
    if version not in LIBRARY_FILES:
        raise CircuitError("unknown version of OpenQASM", required="2 or 3", found=str(version))
    flat = circuit if isinstance(circuit, Circuit) else circuit.joined()
    if flat.inputs and version == 2:
        raise CircuitError(
            "OpenQASM 2 has no inputs",
            required="values for all parameters",
            found=f"'{flat.inputs[0][0]}'",
            hint="write OpenQASM 3, or bind the inputs first",
        )
    defined = _definitions(flat, version, definitions)
    qubits, bits = _registers(flat, version, defined)
    phase = 0.0
    # Calibrations speak of physical qubits, and so does what they define.
    known = calibrated_gates(flat.calibrations)
    kinds = (flat.table[k] for k in np.unique(flat.op).tolist())
    physical = any(without_matrix(gate) and gate.name in known for gate in kinds)

    def lines_of(part: Circuit) -> list[str]:
        nonlocal phase
        names = [f"${k}" for k in range(flat.n_qubits)] if physical else _elements(qubits)
        registers = names if physical else [name for name, _ in qubits]
        made, phase = _statements(part, version, names, _elements(bits), registers)
        return made

    if isinstance(circuit, Circuit):
        lines = lines_of(circuit)
    else:
        text_of = block_lines if version == 3 else conditional_lines
        joined: dict[str, str] = {}

        def bit_text(given: Bits) -> str:
            text = bits_text(given, bits)
            # The language joins registers in aliases alone.
            return text if "++" not in text else joined.setdefault(text, f"joined_bits_{len(joined)}")

        lines = list(text_of(circuit.body, lines_of, bit_text))
        lines = [f"let {name} = {text};" for text, name in joined.items()] + lines
        lines = [f"{kind} {name};" for name, kind in circuit.variables] + lines
        phase = 0.0  # of a run, and never seen
    comments = [line for text in header for line in text.splitlines()]
    head = [line if line.startswith("//") else f"// {line}" for line in comments]
    head += [f"OPENQASM {version}.0;", f'include "{LIBRARY_FILES[version]}";', "", *defined.values()]
    head += [f"input {kind} {name};" for name, kind in flat.inputs]
    if flat.calibrations and version == 2:
        raise CircuitError("OpenQASM 2 has no 'cal' and 'defcal'", hint="write OpenQASM 3")
    head += flat.calibrations
    if defined or flat.inputs or flat.calibrations:
        head.append("")
    quantum, classical = ("qreg {0}[{1}];", "creg {0}[{1}];") if version == 2 else ("qubit[{1}] {0};", "bit[{1}] {0};")
    head += [] if physical else [quantum.format(name, size) for name, size in qubits]
    head += [classical.format(name, size) for name, size in bits]
    if phase and version == 3:
        head.append(f"gphase({angle_texts([phase])[0]});")
    return "\n".join([*head, *lines, ""])


# ---------------------------------------------------------------- gates and their definitions


def _definitions(circuit: Circuit, version: int, given: Mapping[str, str]) -> dict[str, str]:
    """Return the definitions to write, by name, in order."""
    kinds: dict[str, Gate] = {}
    for k in np.unique(circuit.op).tolist():
        gate = circuit.table[k]
        if gate.function is not None and not same_gate(kinds.setdefault(gate.name, gate), gate):
            raise CircuitError(f"two different gates are called '{shorten(gate.name)}'", required="different names")
    library = LIBRARIES[version] | BUILT_IN[version]
    available = {**DEFINITIONS[version], **{name: text for name, text in given.items() if name not in library}}
    texts: dict[str, str] = {}
    for name, gate in sorted(kinds.items()):
        if name in library:
            if not same_gate(gate, GATES[name]):
                raise CircuitError(
                    f"the native gate '{name}' differs from the '{name}' of {LIBRARY_FILES[version]}",
                    hint="give the native gate another name",
                )
        elif name in given or (name in available and same_gate(gate, GATES[name])):
            _add(name, version, available, texts, ())
        else:
            raise CircuitError(
                f"no definition of the gate '{shorten(name)}' in OpenQASM {version}",
                required="a gate of the standard library, or a definition of it",
            )
    checked = {name: kinds[name] for name in given if name in kinds and name in texts}
    if checked:
        _check(version, texts, checked)
    return texts


def _add(name: str, version: int, available: Mapping[str, str], texts: dict[str, str], above: tuple[str, ...]) -> None:
    """Add a definition behind those that it uses."""
    text = _PHASE_STEP.sub("", available[name]) if version == 2 else available[name]
    for word in _WORD.findall(text):
        if word in available and word not in texts and word not in (name, *above):
            _add(word, version, available, texts, (name, *above))
    texts[name] = text.strip()


def _check(version: int, texts: Mapping[str, str], gates: Mapping[str, Gate]) -> None:
    """Read the definitions that were given, which compares them with the gates."""
    start = f'OPENQASM {version}.0; include "{LIBRARY_FILES[version]}";'
    end = "qreg only[1];" if version == 2 else "qubit[1] only;"
    try:
        read("\n".join([start, *texts.values(), end]), natives=gates)
    except (QasmError, UnsupportedError) as problem:
        raise CircuitError(
            "a definition of a native gate cannot be used", found=problem.what, hint=problem.hint
        ) from None


# ---------------------------------------------------------------- registers


def _registers(
    circuit: Circuit, version: int, defined: Iterable[str]
) -> tuple[tuple[tuple[str, int], ...], tuple[tuple[str, int], ...]]:
    """Return the registers to declare: those of the circuit where they fit, else ``q`` and ``c``."""
    taken = {*RESERVED, *LIBRARIES[version], *BUILT_IN[version], *defined, *(name for name, _ in circuit.inputs)}
    qubits, bits = circuit.qubit_registers, circuit.bit_registers
    names = [name for name, _ in (*qubits, *bits)]
    fit = len(set(names)) == len(names) and all(_NAMES[version].fullmatch(n) and n not in taken for n in names)
    fit &= all(size > 0 for _, size in (*qubits, *bits))

    def fresh(name: str) -> str:
        free = next(
            other for k in range(-1, len(taken) + 1) if (other := f"{name}{k}" if k >= 0 else name) not in taken
        )
        taken.add(free)
        return free

    if not fit or sum(size for _, size in qubits) != circuit.n_qubits:
        taken.update(names if fit else ())
        qubits = ((fresh("q"), circuit.n_qubits),)
    if not fit or sum(size for _, size in bits) != circuit.n_bits:
        bits = ((fresh("c"), circuit.n_bits),) if circuit.n_bits else ()
    return qubits, bits


def _elements(registers: Sequence[tuple[str, int]]) -> list[str]:
    return [f"{name}[{k}]" for name, size in registers for k in range(size)]


# ---------------------------------------------------------------- statements


def _statements(
    circuit: Circuit, version: int, qubits: list[str], bits: list[str], registers: list[str]
) -> tuple[list[str], float]:
    """Return a line for each operation, and the global phase."""
    lines = np.empty(len(circuit), dtype=object)
    phase = circuit.phase
    for k, gate in enumerate(circuit.table):
        rows = np.flatnonzero(circuit.op == k)
        if not len(rows):
            continue
        if gate.name == UNITARY.name and gate.function is None:
            texts, more = _explicit(circuit, rows)
            # OpenQASM 3's U carries the phase θ/2; see `gatewright.gates`.
            phase += more
            lines[rows] = [f"{text} {qubits[q]};" for text, q in zip(texts, _first(circuit, rows), strict=True)]
        elif gate.name == MEASURE.name and gate.function is None:
            pairs = zip(_first(circuit, rows), circuit.link[rows].tolist(), strict=True)
            if version == 2:
                lines[rows] = [f"measure {qubits[q]} -> {bits[b]};" for q, b in pairs]
            else:
                lines[rows] = [f"{bits[b]} = measure {qubits[q]};" for q, b in pairs]
        elif gate.name == BARRIER.name and gate.function is None:
            whole = tuple(range(circuit.n_qubits))
            for row in rows.tolist():
                places = circuit.qubits_of(row)
                names = registers if places == whole else [qubits[q] for q in places]
                lines[row] = f"barrier {', '.join(names)};"
        elif gate.name == DELAY.name and gate.function is None and version == 3:
            for row in rows.tolist():
                time = repr(float(circuit.parameters[circuit.parameter_offsets[row]])).removesuffix(".0")
                lines[row] = f"delay[{time}ns] {', '.join([qubits[q] for q in circuit.qubits_of(row)])};"
        elif (
            gate.function is not None or gate.name == RESET.name or gate.name in calibrated_gates(circuit.calibrations)
        ):
            lines[rows] = _calls(circuit, gate, rows, qubits)
        else:
            raise CircuitError(f"the operation '{shorten(gate.name)}' cannot be written in OpenQASM {version}")
    return lines.tolist(), phase


def _calls(circuit: Circuit, gate: Gate, rows: NDArray[np.int64], names: list[str]) -> list[str]:
    """Return the calls of one gate."""
    places = circuit.qubits[circuit.offsets[rows][:, None] + np.arange(gate.n_qubits)]
    columns = [[names[q] for q in column] for column in places.T.tolist()]
    operands = columns[0] if len(columns) == 1 else [", ".join(parts) for parts in zip(*columns, strict=True)]
    if not gate.n_parameters:
        return [f"{gate.name} {text};" for text in operands]
    values = circuit.parameters[circuit.parameter_offsets[rows][:, None] + np.arange(gate.n_parameters)]
    unknown = circuit.link[rows] >= 0 if circuit.symbolic else np.zeros(len(rows), dtype=bool)
    angles = angle_texts(np.where(unknown[:, None], 0, values))
    whole = {name for name, kind in circuit.inputs if kind.partition("[")[0] in ("int", "uint", "bool")}
    known: dict[int, list[str]] = {}
    for place in np.flatnonzero(unknown).tolist():
        link = int(circuit.link[rows[place]])
        if link not in known:
            row = circuit.symbolic[link]
            known[link] = [v.text(whole) if isinstance(v, Affine) else angle_texts([v])[0] for v in row]
        angles[place * gate.n_parameters : (place + 1) * gate.n_parameters] = known[link]
    if gate.n_parameters > 1:
        steps = [angles[k :: gate.n_parameters] for k in range(gate.n_parameters)]
        angles = [", ".join(parts) for parts in zip(*steps, strict=True)]
    return [f"{gate.name}({angle}) {text};" for angle, text in zip(angles, operands, strict=True)]


def _first(circuit: Circuit, rows: NDArray[np.int64]) -> list[int]:
    first: list[int] = circuit.qubits[circuit.offsets[rows]].tolist()
    return first


def _explicit(circuit: Circuit, rows: NDArray[np.int64]) -> tuple[list[str], float]:
    """Return calls of ``U`` for explicit unitaries of one qubit, and the phase that they leave in OpenQASM 3."""
    widest = int(circuit.widths[rows].max())
    if widest > 1:
        raise CircuitError(
            f"an explicit unitary of {widest} qubits cannot be written in OpenQASM",
            required="named gates, and explicit unitaries of one qubit",
            hint="compile the circuit to native gates first",
        )
    m = np.stack([circuit.matrices[k] for k in circuit.link[rows].tolist()])
    m = np.where(np.abs(m) < 1e-16, 0, m)
    theta = 2 * np.arctan2(np.abs(m[:, 1, 0]), np.abs(m[:, 0, 0]))
    # Angles of the larger pair of entries come last, so that noise in the smaller does not matter.
    alpha = np.angle(m[:, 0, 0])
    phi = np.where(m[:, 1, 0] == 0, 0, np.angle(m[:, 1, 0]) - alpha)
    diagonal = np.abs(m[:, 0, 0]) >= np.abs(m[:, 1, 0])
    lam = np.where(diagonal, np.angle(m[:, 1, 1]) - alpha - phi, np.angle(-m[:, 0, 1]) - alpha)
    angles = np.column_stack([theta, *(a - 2 * np.pi * np.rint(a / (2 * np.pi)) for a in (phi, lam))])
    texts = iter(angle_texts(angles))
    phase = math.fsum((alpha - theta / 2).tolist())
    return [f"U({a}, {b}, {c})" for a, b, c in zip(texts, texts, texts, strict=True)], phase
