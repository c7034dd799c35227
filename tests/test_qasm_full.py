"""The full lane of the OpenQASM reader: modifiers, values known when compiling, control flow, subroutines.

Meanings are those of the OpenQASM 3 specification (arXiv:2104.14722); matrices are compared with NumPy and SciPy, the
standard library with its published definitions (retyped in `test_gates`), circuits with ones worked out by hand.
"""

from __future__ import annotations

import functools

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.circuit import Circuit
from gatewright.errors import GatewrightError, QasmError, UnsupportedError
from gatewright.gates import GATES, Gate
from gatewright.qasm import read, write
from gatewright.qasm.definitions import Definition
from gatewright.qasm.modifiers import matrix_of, passage_of
from gatewright.qasm.reader import Reader
from gatewright.qasm.source import Source
from gatewright.qasm.values import Kind, Value, binary, cast, unary
from test_gates import STDGATES

V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'


def forced(text: str) -> Circuit:
    """Read a program with every statement in the full lane."""
    return Reader(Source(text), {}, only_full=True).read()


def rows(circuit: Circuit) -> list[tuple[object, ...]]:
    """Return the operations as tuples: name, qubits, then parameters or the bit."""
    found: list[tuple[object, ...]] = []
    for op in circuit:
        found.append((op.name, op.qubits, *op.parameters, *(() if op.bit is None else (op.bit,))))
    return found


def same(a: Circuit, b: Circuit) -> bool:
    """Whether two circuits have equal columns."""
    return (
        a.table == b.table
        and (a.n_qubits, a.n_bits, a.qubit_registers, a.bit_registers)
        == (b.n_qubits, b.n_bits, b.qubit_registers, b.bit_registers)
        and all(
            np.array_equal(getattr(a, name), getattr(b, name))
            for name in ("op", "qubits", "offsets", "parameters", "parameter_offsets", "link")
        )
        and abs(a.phase - b.phase) < 1e-12
    )


# ruff: noqa: E501
# ---------------------------------------------------------------- the two lanes agree

BOTH = [
    "qubit[3] q; h q; cx q[0], q[1]; rz(-3*pi/4 + 1e-3) q[2]; U(1, 2.5, sin(1)) q[0];",
    "qubit q; qubit[2] r; bit[2] c; bit d; cx q, r; c = measure r; measure q -> d; reset r; barrier q, r; barrier r[1];",
    "qreg q[2]; creg c[2]; x q[0]; measure q[0] -> c[1]; c[0] = measure q[1]; barrier;",
    "const int n = 3; const float t = pi/n; const angle u = -t/2; qubit[n] q; rx(t) q[n - 1]; rz(u) q[n-2]; rz(n/2) q[0];",
    "gate g(a, b) x, y { rz(a**2) x; cx x, y; } qubit[3] q; gate k x { g(1, 2) x, x; } gate m(t) x, y, z { g(t, -t) x, y; g(t/2, t) y, z; h z; } m(1.5) q[2], q[0], q[1];",
    "gate g(a, b) x, y { rz(a**2) x; cx x, y; gphase(b); barrier x, y; } qubit[3] q; g(0.5, 0.25) q[0], q[1];\n"
    "gate m(t) x, y, z { g(t, -t) x, y; g(t/2, t) y, z; h z; } m(1.5) q[2], q[0], q[1];",
    "gphase(pi/8); cx $0, $3; rx(arccos(0.5)) $1; cu(1, 2, 3, 4) $0, $2;",
    "gate cy2 a, b { sdg b; cx a, b; s b; } gate rzz(t) a, b { cx a, b; rz(t) b; cx a, b; } qubit[2] q;"
    " cy2 q[0], q[1]; rzz(0.3) q[1], q[0];",
    "qubit[2] q; bit[2] c = measure q; rz(2*(1 - pi)**2) q[0]; rx(-2**2) q[1]; ry(2**-1) q[1]; rz(exp(1) - ln(2)) q;",
]


@pytest.mark.parametrize("text", BOTH)
def test_both_lanes_read_the_same(text: str) -> None:
    try:
        expected = read(V3 + text)
    except GatewrightError:
        with pytest.raises(GatewrightError):
            forced(V3 + text)
        return
    assert same(forced(V3 + text), expected)


_NUMBERS = st.sampled_from(
    ["pi/4", "-pi", "0.5", "1e-3", "3*pi/8", "2**3/7", "cos(0.2)", "n - 1.5", "-(n + 1)/2", "tau"]
)
_QUBITS = st.permutations(["q[0]", "q[1]", "q[n - 1]", "r", "w[0]", "w[1]"])


@st.composite
def _statements(draw: st.DrawFn) -> str:
    lines = []
    for _ in range(draw(st.integers(1, 12))):
        gate = draw(st.sampled_from([g for name, g in sorted(GATES.items()) if name in _LIBRARY]))
        values = ", ".join(draw(_NUMBERS) for _ in range(gate.n_parameters))
        qubits = ", ".join(draw(_QUBITS)[: gate.n_qubits])
        lines.append(f"{gate.name}{f'({values})' if values else ''} {qubits};")
    return "\n".join(lines)


_LIBRARY = ("h", "x", "sx", "rz", "p", "u3", "u2", "cx", "cp", "cu", "crx", "ccx", "cswap", "U")


@settings(max_examples=30, deadline=None)
@given(_statements())
def test_both_lanes_read_the_same_calls(text: str) -> None:
    program = f"{V3}const int n = 3; qubit[3] q; qubit r; qubit[2] w;\n{text}"
    assert same(forced(program), read(program))


def test_unusual_statements_leave_the_others_alone() -> None:
    flat = "".join(f"rz({k}/7) q[{k % 2}]; cx q[0], q[1];\n" for k in range(50))
    mixed = read(f"{V3}qubit[2] q;\n{flat}ctrl @ x q[0], q[1];\n{flat}")
    assert same(mixed, read(f"{V3}qubit[2] q;\n{flat}cx q[0], q[1];\n{flat}"))


# ---------------------------------------------------------------- modifiers


def controlled(matrix: np.ndarray, *, positive: bool = True) -> np.ndarray:
    one = np.eye(len(matrix))
    return scipy.linalg.block_diag(one, matrix) if positive else scipy.linalg.block_diag(matrix, one)


TABLE_FORMS = [
    ("ctrl @ x", 2, "cx"), ("ctrl @ ctrl @ x", 3, "ccx"), ("ctrl(2) @ x", 3, "ccx"), ("ctrl @ cx", 3, "ccx"),
    ("ctrl(3) @ x", 4, "c3x"), ("ctrl(4) @ x", 5, "c4x"), ("ctrl @ swap", 3, "cswap"), ("ctrl @ h", 2, "ch"),
    ("ctrl @ rz(0.3)", 2, "crz"), ("ctrl @ p(0.3)", 2, "cp"), ("ctrl @ gphase(0.3)", 1, "p"), ("inv @ s", 1, "sdg"),
    ("inv @ inv @ t", 1, "t"), ("pow(1/2) @ x", 1, "sx"), ("inv @ pow(1/2) @ x", 1, "sxdg"), ("pow(0.5) @ z", 1, "s"),
    ("pow(2) @ s", 1, "z"), ("pow(-1) @ t", 1, "tdg"), ("inv @ rx(0.3)", 1, "rx"), ("pow(3) @ ry(0.1)", 1, "ry"),
    ("inv @ u3(1, 2, 3)", 1, "u3"), ("inv @ cu(1, 2, 3, 4)", 2, "cu"), ("ctrl @ pow(1/2) @ x", 2, "csx"),
    ("pow(1/4) @ z", 1, "t"), ("pow(0) @ x", 1, "id"),
]  # fmt: skip


@pytest.mark.parametrize(("call", "n", "name"), TABLE_FORMS)
def test_modified_gates_that_are_table_gates(call: str, n: int, name: str) -> None:
    circuit = read(f"{V3}qubit[{n}] q; {call} {', '.join(f'q[{k}]' for k in range(n))};")
    assert [op.name for op in circuit] == [name]
    assert circuit.phase == 0


@settings(max_examples=120, deadline=None)
@given(
    st.sampled_from(["u", "U", "u3", "rx", "p", "rz", "cu", "rzz", "h", "sx", "swap", "cx", "iswap", "gphase"]),
    st.lists(st.sampled_from(["ctrl", "negctrl", "inv", "2", "-3", "0.37", "-0.5", "1/3"]), max_size=4),
    st.lists(st.floats(-3, 3), min_size=4, max_size=4),
)
def test_modifiers_against_matrices(name: str, chain: list[str], angles: list[float]) -> None:
    """Nested modifiers against block matrices, inverses and `scipy.linalg.fractional_matrix_power`."""
    if name == "gphase":
        values, expected, n = angles[:1], np.array([[np.exp(1j * angles[0])]]), 0
    else:
        gate = GATES[name]
        values, n = angles[: gate.n_parameters], gate.n_qubits
        expected = gate.matrix(values)
    words = []
    for word in reversed(chain):
        if word in ("ctrl", "negctrl"):
            if n == 4:
                continue
            expected, n = controlled(expected, positive=word == "ctrl"), n + 1
        elif word == "inv":
            expected = expected.conj().T
        else:
            exponent = float(eval(word, {"__builtins__": {}}))  # one of the texts above
            on_cut = np.abs(np.linalg.eigvals(expected) + 1) < 1e-6
            if exponent != round(exponent) and on_cut.any():
                continue  # SciPy takes either side of the branch cut there
            expected = scipy.linalg.fractional_matrix_power(expected, exponent)
        words.insert(0, f"{word} @ " if word.isalpha() else f"pow({word}) @ ")
    library = {"u": "", "rzz": "gate rzz(t) a, b { cx a, b; rz(t) b; cx a, b; }"}.get(name, "")
    library += "gate u(a, b, c) q { gphase(-a/2); U(a, b, c) q; }" if name == "u" else ""
    library += "gate iswap a, b { s a; s b; h a; cx a, b; cx b, a; h b; }" if name == "iswap" else ""
    call = f"{name}({', '.join(map(repr, values))})" if values else name
    qubits = ", ".join(f"q[{k}]" for k in range(n))
    circuit = read(f"{V3}{library} qubit[{max(n, 1)}] q; {''.join(words)}{call} {qubits};")
    if n == 0:
        expected = expected[0, 0] * np.eye(2)
    assert np.abs(circuit.unitary() - expected).max() < 1e-9


def test_the_branch_cut_is_on_one_side_whatever_the_rounding() -> None:
    for k in range(1, 8):
        circuit = read(f"{V3}qubit q; pow(1/{k}) @ pow({k}) @ pow(1/{k}) @ y q;")
        power = scipy.linalg.expm(1j * np.pi / (2 * k) * (np.eye(2) - GATES["y"].matrix()))
        assert np.abs(circuit.unitary() - power).max() < 1e-12


def test_modifiers_see_the_phase_that_a_plain_call_drops() -> None:
    # U(pi, 0, pi) is iX with the phase that the specification gives to U.
    circuit = read("OPENQASM 3.0; gate x a { U(pi, 0, pi) a; } qubit[2] q; x q[0]; ctrl @ x q[0], q[1];")
    assert rows(circuit[:1]) == [("x", (0,))]
    assert np.abs(circuit[1:].unitary() - controlled(1j * GATES["x"].matrix())).max() < 1e-12


def test_modified_definitions_nested_in_definitions() -> None:
    text = (
        "gate a(t) x, y { inv @ rz(t) x; ctrl @ ry(t/2) x, y; gphase(t); }"
        "gate b(t) x, y, z { negctrl @ a(t) z, x, y; pow(2) @ a(2*t) y, z; } qubit[4] q;"
        "ctrl @ inv @ b(0.3) q[3], q[0], q[1], q[2];"
    )

    def a(t: float) -> np.ndarray:
        rz = np.kron(GATES["rz"].matrix([-t]), np.eye(2))
        return np.exp(1j * t) * GATES["cry"].matrix([t / 2]) @ rz

    # On the wires x, y, z; negctrl's control z is moved to the front.
    moved = np.moveaxis(np.eye(8).reshape([2] * 6), (0, 1, 2), (1, 2, 0)).reshape(8, 8)
    first = moved.T @ controlled(a(0.3), positive=False) @ moved
    b = np.kron(np.eye(2), a(0.6) @ a(0.6)) @ first
    expected = controlled(b.conj().T)
    order = np.moveaxis(np.eye(16).reshape([2] * 8), (0, 1, 2, 3), (1, 2, 3, 0)).reshape(16, 16)
    for candidate in (read(V3 + text), forced(V3 + text)):
        made = candidate.unitary()
        assert np.abs(made - order.T @ expected @ order).max() < 1e-12


def test_gates_of_the_standard_library_as_published(monkeypatch: pytest.MonkeyPatch) -> None:
    """The published text of ``stdgates.inc``, with its modifiers, read by the full lane: phases included."""
    monkeypatch.setattr("gatewright.qasm.reader.equals", lambda *_, **__: False)
    reader = Reader(Source(f"OPENQASM 3.0;\n{STDGATES}\nqubit q;"), {}, only_full=True)
    reader.read()
    made = {name: gate for name, gate in reader.gates.items() if isinstance(gate, Definition)}
    assert len(made) >= 30
    rng = np.random.default_rng(3)
    for name, definition in made.items():
        for _ in range(3):
            values = rng.uniform(-3, 3, definition.n_parameters)
            found = matrix_of(passage_of(definition, tuple(values.tolist())))
            assert np.abs(found - GATES[name].matrix(values)).max() < 1e-12, name


def test_modified_gates_that_a_device_has_otherwise() -> None:
    other = Gate("cx", 2, 0, GATES["cz"].function)
    alike = Gate("ccx", 3, 0, GATES["ccx"].function)
    text = "OPENQASM 3.0; gate x a { U(pi, 0, pi) a; gphase(-pi/2); } qubit[3] q;"
    text += "ctrl @ x q[0], q[1]; ctrl(2) @ x q[0], q[1], q[2];"
    circuit = read(text, natives={"cx": other, "ccx": alike})
    assert [op.name for op in circuit] == ["unitary", "ccx"]
    assert alike in circuit.table
    expected = GATES["ccx"].matrix() @ np.kron(GATES["cx"].matrix(), np.eye(2))
    assert np.abs(circuit.unitary() - expected).max() < 1e-12


def test_a_definition_without_values_at_some_angles() -> None:
    text = "OPENQASM 3.0; gate rz(t) a { inv @ U(0, 0, sqrt(t - 100)) a; } qubit q;"
    assert len(read(f"{text} rz(101) q;")) == 1
    with pytest.raises(QasmError, match="no finite value"):
        read(f"{text} rz(1) q;")


def test_large_gates_are_inverted_and_controlled_gate_by_gate() -> None:
    wires = ", ".join("abcdefgh")
    body = "h a; cx a, b; cx b, c; rz(0.2) h; cx c, d; t e; barrier a, b; swap f, g;"
    text = f"{V3}gate big {wires} {{ {body} }} qubit[9] q;"
    on = ", ".join(f"q[{k}]" for k in range(8))
    assert [r[0] for r in rows(read(f"{text} inv @ big {on};"))] == "swap barrier tdg cx rz cx cx h".split()
    assert [r[0] for r in rows(read(f"{text} ctrl @ big q[8], {on};"))][:3] == ["ch", "ccx", "ccx"]
    assert len(read(f"{text} pow(3) @ big {on};")) == 24
    with pytest.raises(UnsupportedError, match=r":4:1: .*required: at most 6 qubits; found: 8"):
        read(f"{text}\npow(0.5) @ big {on};", where="a.qasm")


# ---------------------------------------------------------------- programs worked out by hand

H, X, Y, Z = "h", "x", "y", "z"
BY_HAND: list[tuple[str, list[tuple[object, ...]]]] = [
    ("qubit[3] q; for int i in [0:2] { h q[i]; }", [(H, (0,)), (H, (1,)), (H, (2,))]),
    ("qubit[3] q; for int i in [2:-2:0] x q[i];", [(X, (2,)), (X, (0,))]),
    ("qubit[3] q; for uint i in {2, 0} { x q[i]; y q[i]; }", [(X, (2,)), (Y, (2,)), (X, (0,)), (Y, (0,))]),
    ("qubit q; for float f in {0.5, 1/4} rx(f) q;", [("rx", (0,), 0.5), ("rx", (0,), 0.25)]),
    ("qubit q; for int i in [3:1] x q; h q;", [(H, (0,))]),
    ("array[int[8], 3] a = {2, 0, 1}; qubit[3] q; for int i in a x q[i];", [(X, (2,)), (X, (0,)), (X, (1,))]),
    ("qubit[4] q; x q[1:2]; y q[{3, 0}]; z q[-1]; h q[0:2:3];",
     [(X, (1,)), (X, (2,)), (Y, (3,)), (Y, (0,)), (Z, (3,)), (H, (0,)), (H, (2,))]),
    ("qubit[4] q; let a = q[0:1] ++ q[3]; x a; y a[-1]; cx a[0], a[2]; let b = a[1:2]; z b[0];",
     [(X, (0,)), (X, (1,)), (X, (3,)), (Y, (3,)), ("cx", (0, 3)), (Z, (1,))]),
    ("qubit[4] q; cx q[0:1], q[2:3]; cx q[0], q[{1, 3}];", [("cx", (0, 2)), ("cx", (1, 3)), ("cx", (0, 1)), ("cx", (0, 3))]),
    ("int n = 3; qubit[4] q; while (n > 0) { n -= 1; if (n == 1) continue; x q[n]; }", [(X, (2,)), (X, (0,))]),
    ("int n = 0; qubit q; while (true) { n += 1; if (n >= 3) { break; } x q; } rz(n) q;",
     [(X, (0,)), (X, (0,)), ("rz", (0,), 3.0)]),
    ("qubit q; int k = 5; switch (k) { case 1, 5 { x q; } default { y q; } }", [(X, (0,))]),
    ("qubit q; int k = 6; switch (k) { case 1, 5 { x q; } default { y q; } }", [(Y, (0,))]),
    ("qubit q; if (1 < 2 && !(3 == 4)) x q; else y q; if (false) { x q; } else if (true) { z q; }", [(X, (0,)), (Z, (0,))]),
    ("qubit q; x q; end; y q;", [(X, (0,))]),
    ("qubit q; int i = 1; rz(i) q; i = i + 1; rz(i) q; i <<= 2; rz(i) q; rz(i) q;",
     [("rz", (0,), 1.0), ("rz", (0,), 2.0), ("rz", (0,), 8.0), ("rz", (0,), 8.0)]),
    ("def f(qubit a, qubit[2] b, int[8] k) -> int { for uint i in [1:k] { cx a, b[i - 1]; } return k*2; }"
     "qubit[3] q; rx(f(q[0], q[1:2], 2)) q[0];", [("cx", (0, 1)), ("cx", (0, 2)), ("rx", (0,), 4.0)]),
    ("const float w = 0.5; def f(qubit a) { if (w > 1) { return; } ry(w) a; return; x a; } qubit[2] q; f(q[1]);",
     [("ry", (1,), 0.5)]),
    ("def fact(int n) -> int { if (n < 2) { return 1; } return n*fact(n - 1); } qubit q; rz(fact(5)) q;",
     [("rz", (0,), 120.0)]),
    ("def f(qubit a) -> bit { h a; return measure a; } qubit q; bit[2] c; c[1] = f(q);", [(H, (0,)), ("measure", (0,), 1)]),
    ("def f(mutable array[int[8], #dim = 1] a) { a[0] = 7; } array[int[8], 2] a = {1, 2}; qubit q; f(a); rz(a[0]) q;",
     [("rz", (0,), 7.0)]),
    ("gate g(t) a { for int i in [1:2] { rz(i*t) a; } } qubit q; g(0.25) q;", [("rz", (0,), 0.25), ("rz", (0,), 0.5)]),
    ("qubit[2] q; bit[2] c = \"01\"; if (c[0]) x q[0]; if (c[1]) y q[0]; if (c == \"01\") z q[0]; c = 0;", [(X, (0,)), (Z, (0,))]),
    ("qubit[4] q; bit[4] c; for int i in [0:3] { c[3 - i] = measure q[i]; }",
     [("measure", (0,), 3), ("measure", (1,), 2), ("measure", (2,), 1), ("measure", (3,), 0)]),
    ("qubit q;\n@keep x; y\nh q; // no\n#pragma fast { lane\npragma other\nfor int i in [0:0] {\n @inner ; }\n x q; }\n@last",
     [(H, (0,)), (X, (0,))]),
    ("array[float, 2, 2] a = {{1, 2}, {3, 4.5}}; qubit q; rz(a[1][1]) q; rz(a[1, 0]) q; a[0][1] = 9; rz(a[0, 1]) q;"
     "rz(sizeof(a, 1)) q;", [("rz", (0,), 4.5), ("rz", (0,), 3.0), ("rz", (0,), 9.0), ("rz", (0,), 2.0)]),
    ("qubit q; { int i = 2; x q[j]; }", []),
    ("qubit[2] q; { int i = 1; x q[i]; } int i = 0; x q[i]; for int i in [1:1] { y q[i]; } z q[i];",
     [(X, (1,)), (X, (0,)), (Y, (1,)), (Z, (0,))]),
    ("const uint n = 2**3 % 5; qubit[n] q; x q[n - 1];", [(X, (2,))]),
    ("const bool yes = true; qubit q; rz(yes ? 1 : 0) q;", []),
]  # fmt: skip


@pytest.mark.parametrize(("text", "expected"), [row for row in BY_HAND if row[1]], ids=lambda v: str(v)[:50])
@pytest.mark.parametrize("lane", [read, forced])
def test_programs_by_hand(text: str, expected: list[tuple[object, ...]], lane: object) -> None:
    assert rows(lane(V3 + text)) == expected  # type: ignore[operator]


@pytest.mark.parametrize("text", [row[0] for row in BY_HAND if not row[1]])
def test_programs_that_are_not_openqasm(text: str) -> None:
    with pytest.raises(QasmError):
        read(V3 + text)


VALUES = [
    ("7/2", 3.5), ("int(7)/2", 3.5), ("7 % 4", 3), ("-7 % 4", -3), ("mod(7, 4)", 3), ("2**3**2", 512), ("1 << 4 | 1", 17),
    ("popcount(uint[4](11))", 3), ("int[8](200)", -56), ("uint[8](300)", 44), ("uint[8](-1)", 255), ("~uint[4](5)", 10),
    ("float(3 > 2)", 1), ("int(2.9)", 2), ("int(-2.9)", -2), ("ceiling(2.1)", 3), ("floor(-2.1)", -3),
    ("rotl(uint[4](9), 1)", 3), ("rotr(uint[4](9), 1)", 12), ("angle[4](pi/2 + 2*pi)", np.pi / 2), ("angle[2](3.0)", np.pi),
    ("int[4](7) + int[4](1)", -8), ("uint[4](0) - 1", 15), ("2**0.5", 2**0.5), ("sqrt(2)*sqrt(2)", 2.0000000000000004),
    ("0x1F + 0b11 + 0o7", 41), ("1_000", 1000), ("bool(0.1)", 1), ("5 ^ 3", 6), ("uint[8](6) & 3", 2), ("euler", np.e),
]  # fmt: skip


@pytest.mark.parametrize(("text", "value"), VALUES)
def test_values(text: str, value: float) -> None:
    (row,) = rows(forced(f"{V3}qubit q; rz({text}) q;"))
    assert row == ("rz", (0,), pytest.approx(value, rel=1e-15, abs=1e-15))


@given(st.integers(-(2**70), 2**70), st.integers(-(2**70), 2**70), st.integers(1, 70), st.booleans())
def test_integers_wrap_as_in_c(x: int, y: int, width: int, signed: bool) -> None:
    kind = Kind("int" if signed else "uint", width)
    a, b = (cast(Value(Kind("int"), v), kind) for v in (x, y))
    for value, plain in ((a, x), (b, y)):
        assert (value.data - plain) % 2**width == 0
    for op, exact in (("+", x + y), ("-", x - y), ("*", x * y)):
        made = binary(op, a, b).data
        assert (made - exact) % 2**width == 0
        assert (-(2 ** (width - 1)) <= made < 2 ** (width - 1)) if signed else (0 <= made < 2**width)
    assert (unary("~", a).data + 1 + x) % 2**width == 0
    if b.data:
        quotient, rest = binary("/", a, b).data, binary("%", a, b).data
        assert (quotient * b.data + rest - a.data) % 2**width == 0
        assert abs(rest) < abs(b.data)


@given(st.integers(-50, 50), st.integers(-50, 50), st.integers(-7, 7).filter(bool))
def test_ranges_include_their_ends(start: int, stop: int, step: int) -> None:
    expected = [k for k in range(-60, 61) if (k - start) % step == 0 and min(start, stop) <= k <= max(start, stop)]
    if (stop - start) * step < 0:
        expected = []
    circuit = read(f"{V3}qubit q; x q; for int i in [{start}:{step}:{stop}] rz(i) q;")
    assert [op.parameters[0] for op in circuit if op.name == "rz"] == (expected if step > 0 else expected[::-1])


def test_a_circuit_with_modified_gates_is_written_and_read_back() -> None:
    text = V3 + "qubit[3] q; ctrl @ rz(0.25) q[0], q[1]; pow(1/3) @ h q[2]; negctrl @ x q[1], q[2]; inv @ t q[0];"
    circuit = read(text)
    assert np.abs(read(write(circuit)).unitary() - circuit.unitary()).max() < 1e-12


# ---------------------------------------------------------------- refused

REFUSED = [
    ("qubit q;\nfor int i in [0:10**12] x q;", 4, 15, QasmError, "at most 1000000"),
    ("qubit q; while (true) { }", 3, 10, QasmError, "at most 1000000 gates"),
    ("qubit[100000] q; for int i in [0:10**4] { h q; }", 3, 43, QasmError, "at most 1000000 gates"),
    ("def f(qubit a) { f(a); } qubit q;\nf(q);", 3, 18, QasmError, "too deeply"),
    ("bit c; qubit[2] q; c = measure q[0];\nint i = c; x q[i];", 4, 16, UnsupportedError, "depends on the run"),
    ("bit c; qubit q; c = measure q;\nfor int i in [0:c] { x q; }", 4, 17, UnsupportedError, "depends on the run"),
    ("bit c; qubit q; c = measure q;\nfor int i in [0:1] { if (c) { break; } }", 4, 22, UnsupportedError, "unrolled"),
    ("def f(bit c) -> int { if (c) { return 1; } return 2; } bit c; qubit q;\nrz(f(c)) q;", 3, 23, UnsupportedError, "'return'"),
    ("array[int, 2] a = {1, 2}; bit c;\nif (c) { a[0] = 3; }", 4, 10, UnsupportedError, "an element"),
    ("qubit q;\n  box[1us] { x q; }", 4, 3, UnsupportedError, "a box of a stated duration"),
    ("qubit q; for int i in [0:1] { delay[1dt] q; }", 3, 36, UnsupportedError, "'dt'"),
    ("complex a = 1im;", 3, 1, UnsupportedError, "complex"),
    ("qubit[3] q; x q[0:3];", 3, 15, QasmError, "out of range"),
    ("qubit[3] q; x q[{0, 3}];", 3, 17, QasmError, "from -3 to 2"),
    ("qubit[3] q; x q[-4];", 3, 17, QasmError, "from -3 to 2"),
    ("qubit q; int i = 1 % 0;", 3, 18, QasmError, "division by zero"),
    ("qubit q; int i; rz(i) q;", 3, 20, QasmError, "no value yet"),
    ("qubit q; const int n = 2; n = 3;", 3, 27, QasmError, "is a constant"),
    ("int i = 0; int i = 1;", 3, 16, QasmError, "already defined"),
    ("qubit q; ctrl @ x q;", 3, 10, QasmError, "wrong number of qubits"),
    ("qubit[2] q; ctrl @ x q[0], q[0];", 3, 13, QasmError, "repeated"),
    ("qubit[2] q; ctrl(0) @ x q[0], q[1];", 3, 18, QasmError, "out of range"),
    ("qubit q; pow(10**9) @ x q;", 3, 10, UnsupportedError, "too large"),
    ("gate g a { inv @ g a; }", 3, 12, QasmError, "defined by itself"),
    ("gate g a { inv @ hh a; }", 3, 18, QasmError, "unknown gate 'hh'"),
    ("qubit q; gate g a { inv @ x q; }", 3, 29, QasmError, "cannot be seen inside"),
    ("int i = 1; def f(qubit a) { rz(i) a; } qubit q; f(q);", 3, 32, QasmError, "cannot be seen inside"),
    ("def f(qubit a, qubit b) { } qubit q; f(q, q);", 3, 38, QasmError, "repeated"),
    ("def f(qubit[2] a) { } qubit q; f(q);", 3, 34, QasmError, "another size"),
    ("qubit q; ctrl @ reset q;", 3, 17, QasmError, "does not fit the grammar"),
    ("qubit q; if (true) { break; }", 3, 22, QasmError, "outside loop"),
    ("qubit q; if (true) { x q;", 3, 20, QasmError, "is not closed"),
    ("qubit q; if (true) x q", 3, 10, QasmError, "does not end"),
    ("qubit q; int[8 i = 3;", 3, 13, QasmError, "is not closed"),
    ("array[int[8], 2] a = {1, 2, 3};", 3, 22, QasmError, "another size"),
    ("array[int[8], 100000, 100000] a;", 3, 1, QasmError, "too large"),
    ("int[100000] i = 1;", 3, 4, QasmError, "out of range"),
    ("int i = 2**10**6;", 3, 9, QasmError, "too large"),
    ("int i = 1 << 10**9;", 3, 9, QasmError, "out of range"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "line", "column", "kind", "words"), REFUSED, ids=[row[0][:40] for row in REFUSED])
def test_refused(text: str, line: int, column: int, kind: type, words: str) -> None:
    with pytest.raises(kind, match=words) as caught:
        read(V3 + text, where="a.qasm")
    assert (caught.value.line, caught.value.column) == (line, column), str(caught.value)
    assert "\n" not in str(caught.value)


DEEP = 100_000
HOSTILE = {
    "parentheses": f"int i = {'(' * DEEP}1{')' * DEEP};",
    "signs": f"int i = {'-' * DEEP}1;",
    "not": f"bool i = {'!' * DEEP}true;",
    "sum": f"int i = 1{' + 1' * DEEP};",
    "powers": f"int i = 1{' ** 1' * DEEP};",
    "blocks": "{" * DEEP + "}" * DEEP,
    "if": "if (true) " * DEEP + "x q;",
    "else": "if (true) { } else " * DEEP + "{ }",
    "for": "for int i in [0:9] " * DEEP + "x q;",
    "modifiers": "inv @ " * DEEP + "x q;",
    "controls": "ctrl(100000) @ " * 100 + "x q;",
    "indices": f"x q{'[0]' * DEEP};",
    "concatenation": f"let a = q{' ++ q' * DEEP};",
    "calls": f"rz({'sin(' * DEEP}1{')' * DEEP}) q;",
    "digits": f"int i = {'9' * DEEP};",
    "bits": f'bit[4] c = "{"01" * DEEP}";',
    "loops": "for int i in [1:1000] for int j in [1:1000] for int k in [1:1000] x q;",
    "doubling": "gate d0 a { inv @ s a; }"
    + "".join(f"gate d{k} a {{ d{k - 1} a; inv @ d{k - 1} a; d{k - 1} a; }}" for k in range(1, 60)),
    "doubling calls": "def f0(qubit a) { x a; }"
    + "".join(f"def f{k}(qubit a) {{ f{k - 1}(a); f{k - 1}(a); }}" for k in range(1, 39))
    + "f38(q);",
    "growing alias": "let a0 = q ++ q;" + "".join(f"let a{k + 1} = a{k} ++ a{k};" for k in range(40)),
    "growing array": "array[int, 2] a = {1, 2}; int n = 0; while (true) { a = a ++ a; }",
}


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_texts_are_one_error(name: str) -> None:
    with pytest.raises(GatewrightError) as caught:
        read(f"{V3}qubit q;\n{HOSTILE[name]}")
    assert "\n" not in str(caught.value)
    assert len(str(caught.value)) < 600


SEEDS = [
    V3 + "qubit[4] q; bit[2] c;\nfor int i in [0:2] { ctrl @ rz(i*pi/4) q[i], q[i + 1]; }\nlet a = q[0:1] ++ q[{3}]; h a;",
    V3 + "def f(qubit a, int[8] k) -> int { while (k > 2) { k -= 1; x a; } return k; }\nqubit[2] q; rx(f(q[0], 5)) q[1];",
    V3 + "gate g(t) a, b { inv @ pow(1/2) @ crx(t) a, b; negctrl @ gphase(t) a; }\nqubit[2] q; g(0.5) q[0], q[1]; end;",
    V3 + 'array[int[8], 3] a = {1, 2, 3}; bit[4] b = "0101"; qubit[4] q;\nswitch (a[1]) { case 2 { x q[1:2]; } default { } }'
    "\nif (b[0]) { y q; } else z q[-1];\n@note\nfor bit k in b { rz(k) q[0]; } b = 0;",
]  # fmt: skip
PIECES = st.sampled_from(
    [*" \n;,(){}[]<>\"'/*+-^$@#=:\\é!~%&|", "++", "**", "for int i in ", "if (", "else ", "while (true) ", "gate ", "def ", "inv @ "]
    + ["ctrl @ ", "pow(", "q", "0", "pi", "9" * 30, "measure ", "int ", "bit[2] ", "let ", "break;", "return ", "case ", "1:1000"]
)  # fmt: skip


@settings(max_examples=200, deadline=None)
@given(st.sampled_from(SEEDS), st.lists(st.tuples(st.integers(0, 260), st.integers(0, 12), PIECES), max_size=4))
def test_mutated_programs_are_read_or_refused(seed: str, edits: list[tuple[int, int, str]]) -> None:
    for place, length, piece in edits:
        seed = seed[:place] + piece + seed[place + length :]
    for lane in (read, forced):
        try:
            circuit = lane(seed)
        except GatewrightError as problem:
            assert "\n" not in str(problem)
        else:
            assert circuit.n_qubits >= 1


def test_the_seeds_are_read() -> None:
    for seed in SEEDS:
        assert same(forced(seed), read(seed))


def test_nothing_is_printed(capfd: pytest.CaptureFixture[str]) -> None:
    for text in ("ctrl @ reset q;", "if (true) { x €; }", "int i = ;"):
        with pytest.raises(QasmError):
            read(f"{V3}qubit q; {text}")
    assert capfd.readouterr() == ("", "")


def test_the_reference_parser_is_only_loaded_for_what_needs_it() -> None:
    import subprocess
    import sys

    program = functools.partial(
        "import sys\nfrom gatewright.qasm import read\nread({!r})\nassert ('openqasm3' in sys.modules) is {}".format
    )
    for text, needed in (("qubit[2] q; h q; cx q[0], q[1];", False), ("qubit[2] q; ctrl @ x q[0], q[1];", True)):
        subprocess.run([sys.executable, "-c", program(V3 + text, needed)], check=True)
