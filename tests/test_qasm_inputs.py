"""Inputs of OpenQASM 3 programs: read, modified, expanded, written, bound; against the same programs with constants."""

from __future__ import annotations

import re
from pathlib import Path

import openqasm3
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import gatewright as gw
from gatewright.circuit import Builder, Circuit
from gatewright.cli import main
from gatewright.errors import CircuitError, GatewrightError, QasmError, UnsupportedError
from gatewright.linalg import distance
from gatewright.parameters import Affine
from gatewright.program import Program
from gatewright.proof import check_program
from gatewright.qasm import read, write

HEAD = 'OPENQASM 3.0; include "stdgates.inc";\ninput angle a; input float[64] b; input int n;\nqubit[3] q;\n'
VALUES = {"a": 0.7, "b": -1.3, "n": 3.0}

#: Statements, each with what comes of it: (gate, parameters as text).
STATEMENTS = [
    ("rz(a) q[0];", [("rz", ["a"])]),
    ("rx(2*a - b/3 + pi/8) q[1];", [("rx", ["2*a - b/3 + pi/8"])]),
    ("rz(sin(a)*2) q[0];", [("rz", ["2*sin(a)"])]),
    ("rz(a*b) q[0];", [("rz", ["a*b"])]),
    ("rz(b**2) q[0];", [("rz", ["b**2"])]),
    ("rz(n*pi/4) q[0];", [("rz", ["pi/4*n"])]),
    ("rz(n/2) q[0];", [("rz", ["n/2"])]),
    ("U(a, 0.5, b) q[2];", [("U", ["a", "0.5", "b"])]),
    ("inv @ rz(a) q[0];", [("rz", ["-a"])]),
    ("inv @ U(a, b, 0.25) q[0];", [("U", ["-a", "-0.25", "-b"])]),
    ("pow(3) @ ry(a) q[0];", [("ry", ["3*a"])]),
    ("pow(-2) @ p(a) q[0];", [("p", ["-2*a"])]),
    ("pow(0) @ p(a) q[0];", [("p", ["0"])]),
    ("pow(2) @ u3(a, b, 0) q[0];", [("u3", ["a", "b", "0"])] * 2),
    ("ctrl @ rz(a) q[0], q[1];", [("crz", ["a"])]),
    ("ctrl @ p(a) q[0], q[1];", [("cp", ["a"])]),
    ("ctrl @ inv @ rx(a) q[0], q[1];", [("crx", ["-a"])]),
    ("ctrl @ gphase(a) q[0];", [("p", ["a"])]),
    ("float w = a/2; rz(3*w) q[0]; w = w + 0.25; rz(w) q[1];", [("rz", ["3*a/2"]), ("rz", ["a/2 + 0.25"])]),
    ("array[float, 2] w = {a, 0.5}; ry(w[0] + w[1]) q[0];", [("ry", ["a + 0.5"])]),
    ("for int i in [1:3] { rz(i*a) q[0]; }", [("rz", ["a"]), ("rz", ["2*a"]), ("rz", ["3*a"])]),
    ("gate g(t) x { rz(t/2) x; gphase(t); rx(t*t) x; } g(a) q[0];", [("rz", ["a/2"]), ("rx", ["a*a"])]),
    ("gate g(t, s) x { rz(t*s) x; } g(a, 2) q[0]; g(a, b) q[1];", [("rz", ["2*a"]), ("rz", ["a*b"])]),
    ("gate g(t) x { for int i in [1:2] { rx(i*t) x; } } g(a + 1) q[0];", [("rx", ["a + 1.0"]), ("rx", ["2*a + 2.0"])]),
    ("gate h2(t) x { rz(t) x; } gate g(t) x { h2(2*t) x; } inv @ g(a) q[0];", [("rz", ["-2*a"])]),
    ("def f(qubit x, float t) { rz(t/2) x; } f(q[0], 2*a + b);", [("rz", ["a + b/2"])]),
    ("rz(a) q;", [("rz", ["a"])] * 3),
    ("gphase(a); x q[0];", [("x", [])]),
]  # fmt: skip

#: Statements that expand into more; their matrices alone are compared.
LONGER = [
    "ctrl(2) @ rx(a) q[0], q[1], q[2];",
    "negctrl @ ctrl @ U(a, b, 0.3) q[2], q[0], q[1];",
    "gate g(t, s) x, y { rz(t) x; cx x, y; U(t, s, 0.2) y; gphase(t*2); } negctrl @ inv @ g(a, 0.4) q[2], q[0], q[1];",
    "gate g(t) x, y { cx x, y; p(t) y; gphase(0.3); } pow(-3) @ ctrl @ g(b) q[1], q[0], q[2];",
    "ctrl @ crz(a + b) q[0], q[1], q[2]; ctrl @ cu(a, b, 0.1, a) q[2], q[1], q[0];",
]


def with_constants(text: str) -> str:
    for name, value in VALUES.items():
        kind, number = ("int", str(int(value))) if name == "n" else ("float", repr(value))
        text = re.sub(rf"input \S+ {name};", f"const {kind} {name} = {number};", text)
    return text


def circuit_of(text: str) -> Circuit:
    made = read(text)
    assert isinstance(made, Circuit)
    return made


@pytest.mark.parametrize(("text", "wanted"), STATEMENTS)
def test_statements(text: str, wanted: list[tuple[str, list[str]]]) -> None:
    made = circuit_of(HEAD + text)
    shown = [(op.name, [v.text() if isinstance(v, Affine) else f"{v:g}" for v in op.parameters]) for op in made]
    assert shown == wanted
    assert distance(made.bind(VALUES).unitary(), circuit_of(with_constants(HEAD + text)).unitary()) < 1e-13


@pytest.mark.parametrize("text", LONGER)
def test_longer_statements(text: str) -> None:
    made = circuit_of(HEAD + text)
    assert distance(made.bind(VALUES).unitary(), circuit_of(with_constants(HEAD + text)).unitary()) < 1e-13


@pytest.mark.parametrize(
    ("text", "where", "error", "says"),
    [
        ("pow(0.5) @ rz(a) q[0];", "4:1", UnsupportedError, "integer power"),
        ("pow(a) @ x q[0];", "4:5", UnsupportedError, "run"),
        ("qubit[n] r;", "4:6", UnsupportedError, "run"),
        ("for int i in [0:n] { x q[0]; }", "4:17", UnsupportedError, "run"),
        ("rz(c) q[0];", "4:4", QasmError, "unknown name 'c'"),
        ("a = 0.5;", "4:1", QasmError, "constant"),
        ("const float k = 2*a;", "4:17", UnsupportedError, "run"),
        ("rz(a/0) q[0];", "4:4", QasmError, "division by zero"),
        ("gate g(t) x { rz(t + a) x; } g(0.5) q[0];", "4", QasmError, "a"),
        ("input bit[2] w;", "4:1", UnsupportedError, "bits"),
        ("input complex z;", "4:7", UnsupportedError, "complex"),
        ("input float a;", "4:13", QasmError, "already defined"),
        ("{ input float z; }", "4:3", QasmError, "inside a block"),
    ],
)
def test_refused(text: str, where: str, error: type[GatewrightError], says: str) -> None:
    with pytest.raises(error) as caught:
        read(HEAD + text, where="p.qasm")
    assert str(caught.value).startswith(f"p.qasm:{where}")
    assert says in str(caught.value)
    assert "\n" not in str(caught.value)


def test_expressions_that_double_end_in_an_error() -> None:
    text = HEAD + "float w = sin(a) + 1; for int i in [1:60] { w = w*w; } rz(w) q[0];"
    with pytest.raises(QasmError, match="too long"):
        read(text)
    # Sums stay affine: doubling sixty times is one coefficient.
    made = circuit_of(HEAD + "float w = a; for int i in [1:60] { w = w + w; } rz(w) q[0];")
    assert made.operation(0).parameters == (Affine.of("a") * 2.0**60,)


@pytest.mark.parametrize("text", [text for text, _ in STATEMENTS if "n/2" not in text] + LONGER)
def test_written_and_read_back(text: str) -> None:
    made = circuit_of(HEAD + text)
    written = write(made)
    openqasm3.parse(written)
    back = circuit_of(written)
    assert back.inputs == made.inputs
    assert [(op.name, op.qubits, op.parameters) for op in back] == [(op.name, op.qubits, op.parameters) for op in made]
    assert write(back) == written


def test_integers_are_not_divided_in_the_output() -> None:
    assert "rz(0.5*n) q[0];" in write(circuit_of(HEAD + "rz(n/2) q[0];"))


def test_openqasm_2_has_no_inputs() -> None:
    with pytest.raises(CircuitError, match="no inputs"):
        write(Builder(1).gate("rz", 0, parameters=[Affine.of("a")]).build(), version=2)


PROGRAM = (
    HEAD
    + """bit[2] c;
h q[0];
rz(a) q[1];
c[0] = measure q[0];
if (c[0]) { rx(a/2 + pi/8) q[2]; cx q[1], q[2]; } else { ry(n*pi/4) q[1]; }
float w = 2*b;
if (b > 1) { x q[1]; }
c[1] = measure q[1];
rz(pi*c[0] + w) q[2];
p(-pi/2*c[0] - a) q[2];
"""
)


def test_programs_with_classical_control() -> None:
    program = read(PROGRAM)
    assert isinstance(program, Program)
    assert program.inputs == (("a", "angle"), ("b", "float[64]"), ("n", "int"))
    device = gw.Device.from_graph([(0, 1), (1, 2)], "cz-virtual-z")
    result = gw.compile(program, device)
    text = result.to_qasm()
    openqasm3.parse(text)
    back = read(text, natives=device.gate_set.natives)
    assert isinstance(back, Program)
    assert check_program(program, back, result.proofs, device=device).error_bound < 1e-11
    bound = program.bind(VALUES)
    assert not bound.inputs
    assert not any(atom in VALUES for circuit in bound.circuits() for atom in circuit.atoms)
    gw.compile(bound, device)


@settings(max_examples=30)
@given(text=st.text(alphabet="ab n+-*/().0123456789sinp", max_size=24))
def test_mutated_angles_are_read_or_refused(text: str) -> None:
    try:
        made = read(f"{HEAD}rz({text}) q[0];")
    except GatewrightError as problem:
        assert "\n" not in str(problem)
    else:
        assert isinstance(made, Circuit)
        write(made)


def test_command_line(tmp_path: Path, examples: Path, capfd: pytest.CaptureFixture[str]) -> None:
    source, output, proof = examples / "ansatz-6.qasm", tmp_path / "out.qasm", tmp_path / "out.proof"
    device = ["--device", str(examples / "grid-9.toml")]
    assert main(["compile", str(source), *device, "-o", str(output), "--proof", str(proof), "--quiet"]) == 0
    assert "input float tilt;" in output.read_text()
    assert main(["check", str(source), str(output), *device, "--proof", str(proof)]) == 0
    output.write_text(output.read_text().replace("rz(2*gamma_2)", "rz(2*gamma_1)", 1))
    assert main(["check", str(source), str(output), *device, "--proof", str(proof)]) == 3
    capfd.readouterr()
    given_all = [f"--set={name}=pi/7" for name in ("gamma_1", "gamma_2", "beta_1", "beta_2", "tilt")]
    assert main(["compile", str(source), *device, *given_all, "--quiet"]) == 0
    assert "input" not in capfd.readouterr().out
    assert main(["count", str(source), *device, "--set", "gamma=1"]) == 1
    assert "'gamma' is not an input" in capfd.readouterr().err
    assert main(["count", str(source), *device, "--set", "tilt=oops"]) == 2
