"""The OpenQASM reader: what it reads, by hand-worked columns and the reference parser; what it refuses, and where."""

from __future__ import annotations

import io
import math
import random
import sys
from pathlib import Path

import numpy as np
import openqasm3
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.circuit import Circuit
from gatewright.errors import GatewrightError, QasmError, UnsupportedError
from gatewright.expressions import parse as parse_expression
from gatewright.gates import GATES, Gate
from gatewright.linalg import distance
from gatewright.qasm import read, read_text
from gatewright.qasm.library import LIBRARIES

V2 = 'OPENQASM 2.0;\ninclude "qelib1.inc";\n'
V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'


def rows(circuit: Circuit) -> list[tuple]:
    """Name, qubits and, where there are any, parameters and bit."""
    return [
        (op.name, op.qubits, *([op.parameters] if op.parameters else []), *([op.bit] if op.bit is not None else []))
        for op in circuit
    ]


# ---------------------------------------------------------------- what is read


def test_the_example_of_the_openqasm_2_paper() -> None:
    """The quantum Fourier transform on four qubits, arXiv:1707.03429, section 2 (retyped from memory)."""
    text = """
    // quantum Fourier transform
    OPENQASM 2.0;
    include "qelib1.inc";
    qreg q[4];
    creg c[4];
    x q[0];
    x q[2];
    barrier q;
    h q[0];
    cu1(pi/2) q[1],q[0];
    h q[1];
    cu1(pi/4) q[2],q[0];
    cu1(pi/2) q[2],q[1];
    h q[2];
    cu1(pi/8) q[3],q[0];
    cu1(pi/4) q[3],q[1];
    cu1(pi/2) q[3],q[2];
    h q[3];
    measure q -> c;
    """
    circuit = read(text)
    assert (circuit.n_qubits, circuit.n_bits, len(circuit)) == (4, 4, 17)
    assert circuit.counts() == {"barrier": 1, "cu1": 6, "h": 4, "measure": 4, "x": 2}
    assert rows(circuit)[2:5] == [("barrier", (0, 1, 2, 3)), ("h", (0,)), ("cu1", (1, 0), (math.pi / 2,))]
    # Qubit 0 is the most significant here. The circuit is the transform without its final swaps.
    n = 16
    fourier = np.exp(2j * np.pi * np.outer(range(n), range(n)) / n) / 4
    reverse = [int(f"{k:04b}"[::-1], 2) for k in range(n)]
    unitary = circuit.take(np.arange(3, 13)).unitary()
    assert distance(unitary, fourier[reverse]) < 1e-13


def test_registers_declarations_and_both_measurements() -> None:
    text = (
        V3
        + "qubit[2] a; qubit b; bit[2] c; bit d; x a[1]; x b; c = measure a; "
        + "measure b -> d; c[1] = measure b; bit e = measure b;"
    )
    circuit = read(text)
    openqasm3.parse(text)
    assert circuit.qubit_registers == (("a", 2), ("b", 1))
    assert circuit.bit_registers == (("c", 2), ("d", 1), ("e", 1))
    assert rows(circuit) == [
        ("x", (1,)), ("x", (2,)), ("measure", (0,), 0), ("measure", (1,), 1), ("measure", (2,), 2),
        ("measure", (2,), 1), ("measure", (2,), 3),
    ]  # fmt: skip


def test_broadcasting() -> None:
    circuit = read(V2 + "qreg q[3]; qreg r[3]; h q; cx q,r; cx q[0],r; cx q,r[2]; rz(1) r; reset r;")
    assert rows(circuit) == [
        *[("h", (k,)) for k in range(3)],
        *[("cx", (k, k + 3)) for k in range(3)],
        *[("cx", (0, k + 3)) for k in range(3)],
        *[("cx", (k, 5)) for k in range(3)],
        *[("rz", (k + 3,), (1.0,)) for k in range(3)],
        *[("reset", (k + 3,)) for k in range(3)],
    ]


def test_definitions_expand() -> None:
    text = (
        V3
        + """
    const float quarter = pi/4;
    gate inner(a, b) x, y { rz(a*quarter) x; cx x, y; barrier x, y; gphase(b); }
    gate outer(t) p, q, r { inner(t, 2*t) q, p; inner(1, -t) r, q; h p; }
    gate nothing x { }
    qubit[3] q;
    outer(0.5) q[2], q[0], q[1];
    nothing q;
    """
    )
    circuit = read(text)
    assert rows(circuit) == [
        ("rz", (0,), (0.5 * math.pi / 4,)), ("cx", (0, 2)), ("barrier", (0, 2)),
        ("rz", (1,), (math.pi / 4,)), ("cx", (1, 0)), ("barrier", (1, 0)), ("h", (2,)),
    ]  # fmt: skip
    assert circuit.phase == pytest.approx(0.5)


@pytest.mark.parametrize("version", [2, 3])
def test_every_library_gate_is_known(version: int) -> None:
    start = V2 if version == 2 else V3
    for name in LIBRARIES[version]:
        gate = GATES[name]
        angles = ", ".join(f"0.{k + 1}" for k in range(gate.n_parameters))
        qubits = ", ".join(f"q[{k}]" for k in range(gate.n_qubits))
        declaration = "qreg q[5];" if version == 2 else "qubit[5] q;"
        circuit = read(f"{start}{declaration} {name}{f'({angles})' if angles else ''} {qubits};")
        assert circuit.table == (gate,)
        assert circuit.parameters.tolist() == [(k + 1) / 10 for k in range(gate.n_parameters)]


def test_built_in_gates_need_no_include() -> None:
    assert [op.name for op in read("OPENQASM 2.0; qreg q[2]; U(0,0,pi) q[0]; CX q[0],q[1];")] == ["U", "CX"]
    circuit = read("qubit[2] q; U(0,0,pi) q[0]; gphase(pi/2); gphase(1);")
    assert circuit.phase == math.pi / 2 + 1
    for text in ("OPENQASM 3; qubit[2] q; CX q[0],q[1];", "qubit q; h q;", "OPENQASM 2.0; qreg q[1]; h q[0];"):
        with pytest.raises(QasmError, match="unknown gate"):
            read(text)


def test_a_program_without_the_library_may_define_its_gates() -> None:
    same = "gate h a { U(pi/2, 0, pi) a; gphase(-pi/4); } qubit q; h q;"
    assert rows(read(same)) == [("h", (0,))]
    own = "gate h a { U(pi/3, 0, pi) a; } qubit q; h q;"
    assert rows(read(own)) == [("U", (0,), (math.pi / 3, 0.0, math.pi))]
    # rzz is not in stdgates.inc: kept where it means what it usually does, expanded where it does not.
    start = V3 + "gate rzz(t) a, b { cx a, b; rz(%s) b; cx a, b; } qubit[2] q; rzz(0.5) q[0], q[1];"
    assert rows(read(start % "t")) == [("rzz", (0, 1), (0.5,))]
    assert rows(read(start % "2*t")) == [("cx", (0, 1)), ("rz", (1,), (1.0,)), ("cx", (0, 1))]


def test_spelling() -> None:
    text = (
        "\ufeff// a comment; with a semicolon\r\n/* several\r\nlines; */OPENQASM 3.1 ;\r\ninclude\t'stdgates.inc';"
        "qubit [ 2 ] q;\r\n\r\n h  q [ 0 ] ;cx q[0],q[1]/* ; */;rz ( pi / 2 )\tq [1];;"
        "x\nq[1];barrier; // no newline at the end"
    )
    assert rows(read(text)) == [
        ("h", (0,)),
        ("cx", (0, 1)),
        ("rz", (1,), (math.pi / 2,)),
        ("x", (1,)),
        ("barrier", (0, 1)),
    ]
    assert rows(read("OPENQASM 3;\rqubit qäß;\rU(π,0,0) qäß;")) == [("U", (0,), (math.pi, 0.0, 0.0))]


def test_constants() -> None:
    circuit = read(
        V3 + "const int n = 3; const uint[8] m = n - 1; const angle step = pi/n; qubit[n*m] q; rz(step) q[n + m];"
    )
    assert circuit.n_qubits == 6
    assert rows(circuit) == [("rz", (5,), (math.pi / 3,))]


def test_physical_qubits() -> None:
    circuit = read(V3 + "bit[2] c; h $0; cx $0, $3; c[1] = measure $3; barrier;")
    assert circuit.n_qubits == 4 and circuit.qubit_registers == ()
    assert rows(circuit) == [("h", (0,)), ("cx", (0, 3)), ("measure", (3,), 1), ("barrier", (0, 1, 2, 3))]


def test_columns_are_those_of_a_circuit() -> None:
    circuit = read(V3 + "qubit[2] q; bit c; cx q[0], q[1]; h q[0]; cx q[1], q[0]; rz(0.5) q[1]; c = measure q[0];")
    assert [gate.name for gate in circuit.table] == ["cx", "h", "rz", "measure"]
    assert circuit.op.tolist() == [0, 1, 0, 2, 3] and circuit.op.dtype == np.int16
    assert circuit.qubits.tolist() == [0, 1, 0, 1, 0, 1, 0] and circuit.qubits.dtype == np.int32
    assert circuit.offsets.tolist() == [0, 2, 3, 5, 6, 7] and circuit.offsets.dtype == np.int64
    assert circuit.parameters.tolist() == [0.5] and circuit.parameter_offsets.tolist() == [0, 0, 0, 0, 1, 1]
    assert circuit.link.tolist() == [-1, -1, -1, -1, 0] and circuit.link.dtype == np.int32
    assert len(read(V3 + "qubit q;")) == 0


ANGLE = st.one_of(
    st.floats(-100, 100).map(repr),
    st.integers(0, 99).map(str),
    st.tuples(st.sampled_from(["", "-"]), st.integers(1, 99), st.integers(1, 99)).map(
        lambda t: f"{t[0]}{t[1]}*pi/{t[2]}"
    ),
    st.tuples(st.floats(0, 9).map("{:.6f}".format), st.integers(1, 9)).map(lambda t: f"pi*{t[0]}/{t[1]}"),
    st.sampled_from(["pi", "-pi", "-pi*2", "2*pi*3/4", "+pi", "pi/0.5", "1e-3", "-.5", "5.", "3 * pi", "sqrt(2)/2"]),
)


@given(st.lists(ANGLE, min_size=1, max_size=8))
def test_fast_numbers_are_those_of_the_expression_reader(angles: list[str]) -> None:
    """The short way round for plain numbers and fractions of pi gives the same float to the last bit."""
    circuit = read(V3 + "qubit q;" + "".join(f"rz({angle}) q;" for angle in angles))
    expected = [parse_expression(angle).real() for angle in angles]
    assert circuit.parameters.tobytes() == np.array(expected).tobytes()


@settings(max_examples=50)
@given(st.integers(0, 10**6))
def test_repeated_statements_mean_what_single_ones_do(seed: int) -> None:
    """Each distinct statement is analysed once: a shuffled program against the same one with every text made unique."""
    rng = random.Random(seed)
    pool = [
        "h q[0]",
        "cx q[0],q[1]",
        "rz(pi/4) q[2]",
        "measure q -> c",
        "reset q[1]",
        "g(0.5) q[1]",
        "gphase(0.25)",
    ]
    start = V3 + "qubit[3] q; bit[3] c; gate g(a) x { rz(a) x; gphase(a); }\n"
    chosen = [rng.choice(pool) for _ in range(rng.randrange(1, 40))]
    plain = read(start + "".join(f"{text};\n" for text in chosen))
    unique = read(start + "".join(f"{' ' * k}{text};\n" for k, text in enumerate(chosen)))
    assert rows(plain) == rows(unique)
    assert plain.table == unique.table
    assert plain.phase == pytest.approx(unique.phase)


# ---------------------------------------------------------------- native gates


def entangler(angle: float = 0.3) -> Gate:
    return Gate("ent", 2, 1, lambda p: GATES["rxx"].function(p * angle))


def test_native_gates_are_kept() -> None:
    natives = {"ent": entangler()}
    call = "qubit[2] q; ent(0.5) q[0], q[1];"
    definition = "gate ent(t) a, b { h a; h b; cx a, b; rz(0.3*t) b; cx a, b; h a; h b; }"
    circuit = read(V3 + definition + call, natives=natives)
    assert circuit.table == (natives["ent"],) and rows(circuit) == [("ent", (0, 1), (0.5,))]
    assert rows(read(V3 + call, natives=natives)) == [("ent", (0, 1), (0.5,))]
    assert rows(read(V2 + "opaque ent(t) a, b; qreg q[2]; ent(1) q[0],q[1];", natives=natives)) == [
        ("ent", (0, 1), (1.0,))
    ]
    assert [op.name for op in read(V3 + definition + call)] == ["h", "h", "cx", "rz", "cx", "h", "h"]
    with pytest.raises(UnsupportedError, match="opaque gate 'ent'"):
        read(V2 + "opaque ent(t) a, b; qreg q[2]; ent(1) q[0],q[1];")


def test_a_native_gate_defined_otherwise_is_refused() -> None:
    natives = {"ent": entangler()}
    for body in ("cx a, b;", "h a; h b; cx a, b; rz(0.30001*t) b; cx a, b; h a; h b;", "rz(1/(t-t)) a;"):
        with pytest.raises(QasmError, match="differs from the device's native gate") as caught:
            read(V3 + f"\ngate ent(t) a, b {{ {body} }} qubit q;", natives=natives, where="file.qasm")
        assert str(caught.value).startswith("file.qasm:4:1:")
    with pytest.raises(QasmError, match="differs"):
        read(V3 + "gate ent a, b { cx a, b; } qubit q;", natives=natives)


def test_a_native_gate_with_the_name_of_a_library_gate() -> None:
    phase = Gate("cx", 2, 0, lambda p: 1j * GATES["cx"].function(p))
    other = Gate("cx", 2, 0, GATES["cz"].function)
    call = "qubit[2] q; cx q[0], q[1];"
    assert read(V3 + call, natives={"cx": phase}).table == (phase,)
    with pytest.raises(QasmError, match="differs from the one of stdgates.inc"):
        read(V3 + call, natives={"cx": other})
    assert read(call, natives={"cx": other}).table == (other,)


# ---------------------------------------------------------------- what is refused

REFUSED = [
    # text behind V3 (line 3), line, column, class, words
    ("h q;", 3, 3, QasmError, "unknown register 'q'"),
    ("qubit[2] q; h q[2];", 3, 17, QasmError, "out of range"),
    ("qubit[2] q; h q[99999999999999999999];", 3, 17, QasmError, "out of range"),
    ("qubit[2] q; h q[0.5];", 3, 17, QasmError, "not an integer"),
    ("qubit[2] q;\n  cx q[0],q[0];", 4, 6, QasmError, "a qubit is repeated"),
    ("qubit[2] q; cx q, q;", 3, 16, QasmError, "a qubit is repeated"),
    ("qubit[2] q; qubit[3] r; cx q, r;", 3, 28, QasmError, "different sizes"),
    ("qubit[2] q; barrier q, q[0];", 3, 20, QasmError, "a qubit is repeated"),
    ("qubit[2] q; ccxx q[0];", 3, 13, QasmError, "did you mean 'ccx'"),
    ("qubit[2] q; rzz(1) q[0], q[1];", 3, 13, QasmError, "stdgates.inc does not have it"),
    ("qubit[2] q; h q[0], q[1];", 3, 13, QasmError, "wrong number of qubits for 'h'; required: 1; found: 2"),
    ("qubit[2] q; h;", 3, 13, QasmError, "wrong number of qubits"),
    ("qubit[2] q; cx q[0],;", 3, 21, QasmError, "a qubit is missing"),
    ("qubit[2] q; rz q[0];", 3, 13, QasmError, "wrong number of parameters for 'rz'; required: 1; found: 0"),
    ("qubit[2] q; h(1) q[0];", 3, 13, QasmError, "wrong number of parameters"),
    ("qubit[2] q; rz(1/0) q[0];", 3, 17, QasmError, "no finite value"),
    ("qubit[2] q; rz(2 ^ 3) q[0];", 3, 18, QasmError, "written '**'"),
    ("qubit[2] q; rz(\n  x) q[0];", 4, 3, QasmError, "unknown name 'x'"),
    ("qubit[2] q; rz(i) q[0];", 3, 16, QasmError, "unknown name 'i'"),
    ("qubit[2] q; rz(sqrt(-1)) q[0];", 3, 16, QasmError, "not real"),
    ("qubit[2] q; rz(" + "(" * 10_000 + ") q[0];", 3, 116, QasmError, "nested too deeply"),
    ("qubit[2] q; rz(9**9**9) q[0];", 3, 17, QasmError, "no finite value"),
    ("qubit[2] q; rz(__import__('os')) q[0];", 3, 16, QasmError, "unknown name '__import__'"),
    ("qubit[2] q; rz(pi q[0];", 3, 15, QasmError, "not closed"),
    ("qubit[2] q; h q[0]\ncx q[0], q[1];", 3, 13, QasmError, "is a ';' missing?"),
    ("qubit[2] q\nh q;", 3, 1, QasmError, "is a ';' missing?"),
    ("qubit[2] q; h q", 3, 15, QasmError, "a ';' is missing"),
    ("qubit[2] q; h q[0] }", 3, 15, QasmError, "does not name a qubit"),
    ("qubit[0] q;", 3, 7, QasmError, "an integer from 1"),
    ("qubit[100001] q;", 3, 7, QasmError, "an integer from 1 to 100000"),
    ("qubit[60000] q; qubit[60000] r;", 3, 30, QasmError, "too many qubits"),
    ("qubit[2] q; qubit[2] q;", 3, 22, QasmError, "already defined"),
    ("qubit[2] h;", 3, 10, QasmError, "a gate of stdgates.inc"),
    ("qubit[2] gate;", 3, 10, QasmError, "reserved word"),
    ("qubit[2] q; h h;", 3, 15, QasmError, "not a register of qubits"),
    ("qubit[2] q; q q;", 3, 13, QasmError, "is not a gate"),
    ("qubit[2] q; bit[2] c; h c;", 3, 25, QasmError, "not a register of qubits"),
    ("qubit[2] q; bit[3] c; c = measure q;", 3, 35, QasmError, "unequal sizes"),
    ("qubit[2] q; bit c; c = measure q;", 3, 32, QasmError, "unequal sizes"),
    ("qubit q; bit c; c[0] = measure q;", 3, 17, QasmError, "no index"),
    ("qubit q; measure q -> q;", 3, 23, QasmError, "not a register of bits"),
    ("qubit q; gphase(1) q;", 3, 10, QasmError, "gphase(angle)"),
    ("qubit q; h q; OPENQASM 3.0;", 3, 15, QasmError, "not the first statement"),
    ('include "stdgates.inc";', 3, 1, QasmError, "already defined"),
    ('include "/etc/passwd";', 3, 1, QasmError, "no file is ever opened"),
    ('include "qelib1.inc";', 3, 1, QasmError, "belongs to OpenQASM 2"),
    ("gate g a { g a; }", 3, 12, QasmError, "is defined by itself"),
    ("gate f a { g a; } gate g a { f a; }", 3, 12, QasmError, "unknown gate 'g'"),
    ("gate g a { h b; }", 3, 14, QasmError, "unknown qubit 'b'"),
    ("gate g a, a { h a; }", 3, 11, QasmError, "none of them twice"),
    ("gate g(t, t) a { h a; }", 3, 11, QasmError, "none of them twice"),
    ("gate g { }", 3, 1, QasmError, "has no qubits"),
    ("gate g a { rz(u) a; }", 3, 15, QasmError, "unknown name 'u'"),
    ("gate g a { cx a, a; }", 3, 15, QasmError, "a qubit is repeated"),
    ("gate g a { h a }", 3, 12, QasmError, "a ';' is missing"),
    ("gate g a { measure a; }", 3, 12, QasmError, "cannot stand in a definition"),
    ("gate g a { h a;", 3, 1, QasmError, "is not closed"),
    ("gate g a;", 3, 1, QasmError, "has no body"),
    ("gate g[2] a { h a; }", 3, 7, QasmError, "cannot name a qubit"),
    ("gate h a { x a; }", 3, 6, QasmError, "already defined"),
    ("gate U(a,b,c) q { }", 3, 6, QasmError, "reserved word"),
    ("gate g(t) a { rz(1/t) a; } qubit q; g(0) q;", 3, 37, QasmError, "no finite value"),
    ("opaque g a;", 3, 1, QasmError, "belongs to OpenQASM 2"),
    ("2 + 2;", 3, 1, QasmError, "not a statement"),
    ("/* open", 3, 1, QasmError, "a comment is not closed"),
    ("qubit q; const int n = 2.5;", 3, 23, QasmError, "not an integer"),
    ("stretch s;", 3, 1, UnsupportedError, "'stretch'"),
    ("qubit[2] q; delay[10dt] q;", 3, 18, UnsupportedError, "'dt'"),
    ("qubit q; h $0;", 3, 12, UnsupportedError, "beside registers"),
    ("h $0; qubit q;", 3, 13, UnsupportedError, "beside physical qubits"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "line", "column", "kind", "words"), REFUSED, ids=[row[0][:40] for row in REFUSED])
def test_refused(text: str, line: int, column: int, kind: type, words: str) -> None:
    with pytest.raises(kind) as caught:
        read(V3 + text, where="a.qasm")
    message = str(caught.value)
    assert words in message
    assert message.startswith(f"a.qasm:{line}:{column}: ")
    assert "\n" not in message and len(message) < 600


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "empty"), (" \n\t ", "empty"), ("// only a comment", "empty"), ("\ufeff", "empty"),
        ("OPENQASM 4.0; qubit q;", "unknown version"), ("OPENQASM 2.1; qubit q;", "unknown version"),
        ("OPENQASM; qubit q;", "unknown version"), (V3, "no qubits are declared"), (V3 + "bit c;", "no qubits"),
        ("OPENQASM 2.0; include 'stdgates.inc';", "belongs to OpenQASM 3"),
        ('include "qelib1.inc";', "belongs to OpenQASM 2"),
        (V2 + "qubit q;", "belongs to OpenQASM 3"), (V2 + "qreg q;", "has no size"),
        (V2 + "qreg q[1]; gphase(1);", "OpenQASM 3"),
        (V2 + "qreg q[1]; creg c[1]; c = measure q;", "OpenQASM 3"), (V2 + "qreg q[1]; measure q;", "no bit"),
        (V2 + "qreg q[1]; h $0;", "OpenQASM 3"), (V2 + "qreg q[1]; barrier;", "OpenQASM 3"),
        (V2 + "qreg q[1]; if(c==1) x q[0];", "'c'"), (V2 + "qreg q[1]; rz(2**3) q[0];", "written '^'"),
        (V2 + "gate CX a,b { }", "already defined"), ("MZ\0\1", "zero byte"), ("qubit q; h q; include", "unknown gate"),
    ],
)  # fmt: skip
def test_refused_programs(text: str, words: str) -> None:
    with pytest.raises(GatewrightError) as caught:
        read(text)
    assert words in str(caught.value)


def test_exploding_definitions_are_refused_at_once() -> None:
    double = "gate g0 a { U(0,0,0) a; }" + "".join(f"gate g{k + 1} a {{ g{k} a; g{k} a; }}" for k in range(90))
    with pytest.raises(QasmError, match="too many operations"):
        read(f"{double} qubit q; g90 q;")
    assert len(read(f"{double} qubit q; g10 q;")) == 1024
    empty = "gate g0(t) a { }" + "".join(f"gate g{k + 1}(t) a {{ g{k}(t) a; g{k}(t+1) a; }}" for k in range(90))
    with pytest.raises(QasmError, match="too many operations"):
        read(f"{empty} qubit q; g90(1) q;")
    chain = "gate g0 a { U(0,0,0) a; }" + "".join(f"gate g{k + 1} a {{ g{k} a; }}" for k in range(200))
    with pytest.raises(QasmError, match="nested too deeply"):
        read(f"{chain} qubit q; g150 q;")
    with pytest.raises(QasmError, match="too many operations"):
        read("qubit[100000] q;" + "U(0,0,0) q;" * 101)
    with pytest.raises(QasmError, match="too many qubits"):
        read("qubit[100000] q;" + "barrier q;" * 401)


MEGABYTES_OF_GARBAGE = {
    "characters": "".join(random.Random(1).choices([chr(k) for k in range(32, 127)], k=10**7)),
    "words": "a " * 5_000_000,
    "parentheses": "(" * 10**7,
    "open comments": "/*" * 5_000_000 + " ",
    "quotes": '"' * 10**7,
    "definitions": "gate g a {" * 1_000_000,
    "no semicolon": "h q" * 3_000_000,
    "spaces": " " * 10**7,
    "operands": V3 + "qubit q; x " + "q," * 3_000_000 + "q;",
    "parameters": V3 + "qubit q; rx(" + "1," * 3_000_000 + "1) q;",
    "index": V3 + "qubit q; x q[" + "1" * 10**7 + "];",
}


@pytest.mark.parametrize("name", MEGABYTES_OF_GARBAGE)
def test_garbage_is_one_short_error(name: str) -> None:
    with pytest.raises(GatewrightError) as caught:
        read(MEGABYTES_OF_GARBAGE[name])
    assert len(str(caught.value)) < 600


SEEDS = [
    V3 + "qubit[3] q; bit[3] c;\nh q; cx q[0], q[1]; rz(-3*pi/4 + 1e-3) q[2]; // end\n"
    "c = measure q; barrier q[0]; reset q;",
    V2 + "qreg q[2]; creg c[2];\ngate g(a,b) x,y { rz(a^2) x; cx x,y; }\n"
    "g(pi/2, 1) q[0],q[1]; measure q -> c; u3(1,2,3) q;",
    "const int n = 2; qubit[n] q; gphase(pi); U(1, 2.5, sin(n)) q[n - 1]; /* x */ cx $0, $1;",
]
PIECES = st.sampled_from(
    [
        *" \n\t;,(){}[]<>\"'/*+-^$@#=\0\\é",
        "//",
        "/*",
        "->",
        "**",
        "gate ",
        "qubit",
        "q",
        "0",
        "pi",
        "9" * 30,
        "measure",
        "if",
    ]
)


@settings(max_examples=300)
@given(st.sampled_from(SEEDS), st.lists(st.tuples(st.integers(0, 200), st.integers(0, 12), PIECES), max_size=5))
def test_mutated_programs_are_read_or_refused(seed: str, edits: list[tuple[int, int, str]]) -> None:
    for place, length, piece in edits:
        seed = seed[:place] + piece + seed[place + length :]
    try:
        circuit = read(seed)
    except GatewrightError as problem:
        assert "\n" not in str(problem)
    else:
        assert circuit.n_qubits >= 1


@given(st.text(max_size=60))
def test_any_text_is_read_or_refused(text: str) -> None:
    for start in ("", V3 + "qubit q;", V3 + "gate g a {"):
        try:
            read(start + text)
        except GatewrightError as problem:
            assert str(problem)


# ---------------------------------------------------------------- files


def test_files(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    file = tmp_path / "a.qasm"
    file.write_bytes((V3 + "qubit q; h q;").encode())
    assert rows(read(read_text(file), where=str(file))) == [("h", (0,))]
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(file.read_bytes())))
    assert rows(read(read_text("-"), where="-")) == [("h", (0,))]
    file.write_bytes((V3 + "qubit q; hh q;").encode())
    with pytest.raises(QasmError, match=r"a\.qasm:3:10: unknown gate 'hh'"):
        read(read_text(file), where=str(file))


def test_files_that_cannot_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for path in (tmp_path, tmp_path / "missing.qasm", "nul\0name"):
        with pytest.raises(QasmError, match="cannot be read"):
            read(read_text(path), where=str(path))
    for data in (b"\x89PNG\r\n\x1a\n\xff", "qubit ä;".encode("utf-16"), b"OPENQASM 3.0;\n// \xff"):
        (tmp_path / "binary").write_bytes(data)
        with pytest.raises(QasmError, match="not an OpenQASM text"):
            read_text(tmp_path / "binary")
    monkeypatch.setattr("gatewright.qasm.source.MAX_BYTES", 5)
    (tmp_path / "large").write_bytes(b"qubit q;")
    with pytest.raises(QasmError, match="too large"):
        read_text(tmp_path / "large")
    with pytest.raises(QasmError, match="too large"):
        read("qubit q;")
