"""Constructs of the OpenQASM 3 specification (arXiv:2104.14722, chapters of the language), in examples written afresh.

The standard's reference parser is the oracle of their structure; SymPy that of the gates' matrices.
"""

from __future__ import annotations

import numpy as np
import openqasm3
import pytest
import sympy

import gatewright as gw
from gatewright.linalg import distance
from gatewright.qasm import read

HEAD = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'

#: Chapter, program, statements of the reference parser behind the include, names of the operations read.
EXAMPLES = {
    "types: registers, physical and classical": (
        'qubit[3] anc; bit[4] word = "0110"; uint[5] small = 11; int[6] other = -7; float[32] ratio = 0.75;'
        " angle[20] turn = pi / 2; bool flag = true; rz(turn) anc[1];",
        "QubitDeclaration " + "ClassicalDeclaration " * 6 + "QuantumGate",
        "rz",
    ),
    "types: constants and arrays": (
        "const uint n = 4; array[int[16], 2, 3] table = {{1, 2, 3}, {4, 5, 6}}; qubit[n] q;"
        " rx(table[1][2] / n) q[n - 1];",
        "ConstantDeclaration ClassicalDeclaration QubitDeclaration QuantumGate",
        "rx",
    ),
    "types: aliases, slices and concatenation": (
        "qubit[2] left; qubit[6] right; let both = left ++ right; let odd = both[1:2:-1]; h odd; x both[{0, 7}];",
        "QubitDeclaration QubitDeclaration AliasStatement AliasStatement QuantumGate QuantumGate",
        "h h h h x x",
    ),
    "gates: definitions and modifiers": (
        "gate turn(a) t { ctrl(0 + 1) @ gphase(a) t; } gate pair(a) u, v { turn(a) u; inv @ turn(a) v; }"
        " qubit[3] q; pair(0.3) q[0], q[1]; negctrl @ ctrl @ x q[0], q[1], q[2]; pow(2) @ s q[0];",
        "QuantumGateDefinition QuantumGateDefinition QubitDeclaration QuantumGate QuantumGate QuantumGate",
        None,
    ),
    "gates: broadcasting": (
        "qubit[3] a; qubit[3] b; qubit one; cx a, b; cx one, a;",
        "QubitDeclaration " * 3 + "QuantumGate QuantumGate",
        "cx " * 6,
    ),
    "instructions: measurement and reset": (
        "qubit[2] q; bit[2] c; reset q; h q[0]; c[0] = measure q[0]; measure q[1] -> c[1]; barrier q;",
        "QubitDeclaration ClassicalDeclaration QuantumReset QuantumGate QuantumMeasurementStatement"
        " QuantumMeasurementStatement QuantumBarrier",
        "reset reset h measure measure barrier",
    ),
    "classical: loops, branches, switch": (
        "qubit[4] q; for uint k in [0:2:3] { h q[k]; } for int k in {1, 3} { if (k > 2) { x q[k]; } else { y q[k]; } }"
        " int n = 2; while (n > 0) { z q[n]; n -= 1; } switch (n) { case 0 { s q[0]; } default { t q[0]; } }",
        "QubitDeclaration ForInLoop ForInLoop ClassicalDeclaration WhileLoop SwitchStatement",
        "h h y x z z s",
    ),
    "subroutines": (
        "def echo(qubit[2] w, angle a) { rx(a) w[0]; cx w[0], w[1]; rx(-a) w[0]; } qubit[3] q; echo(q[1:2], pi / 8);",
        "SubroutineDefinition QubitDeclaration ExpressionStatement",
        "rx cx rx",
    ),
    "timing": (
        "const duration gap = 3 * 20ns; qubit[2] q; x q[0]; delay[gap] q[0]; box { delay[1us] q; } x q[0];",
        "ConstantDeclaration QubitDeclaration QuantumGate DelayInstruction Box QuantumGate",
        "x delay barrier delay barrier x",
    ),
    "directives: pragmas, annotations, input and output": (
        "pragma keep this line\n@for_the_reader once\noutput bit c;\nqubit q; h q; c = measure q;",
        "Pragma IODeclaration QubitDeclaration QuantumGate QuantumMeasurementStatement",
        "h measure",
    ),
    "bits: operators and casts": (
        'bit[8] a = "10001111"; bit[8] b = "01110000"; qubit q; rz(pi * popcount(a | b) / 8) q;'
        " rz(int[8](a << 1) / 2.0) q; rz(float(uint[8](~b) >> 4)) q;",
        "ClassicalDeclaration ClassicalDeclaration QubitDeclaration QuantumGate QuantumGate QuantumGate",
        "rz rz rz",
    ),
}


def operations(text: str) -> list[gw.circuit.Operation]:
    """Return the operations of a program; bits with a value of their own make it one with classical statements."""
    made = read(text)
    return list(made if isinstance(made, gw.Circuit) else made.joined())


@pytest.mark.parametrize("name", sorted(EXAMPLES))
def test_examples(name: str) -> None:
    body, structure, names = EXAMPLES[name]
    tree = openqasm3.parse(HEAD + body)
    assert [type(statement).__name__ for statement in tree.statements[1:]] == structure.split()
    found = [op.name for op in operations(HEAD + body)]
    if names is not None:
        assert found == names.split()


def test_values_of_the_examples() -> None:
    """Worked by hand: 1/4 of table[1][2] = 6; popcount 8 of 8 bits; 0b00011110 / 2; ~01110000 = 10001111, >> 4 = 8."""
    assert operations(HEAD + EXAMPLES["types: constants and arrays"][0])[0].parameters == (1.5,)
    angles = [op.parameters[0] for op in operations(HEAD + EXAMPLES["bits: operators and casts"][0])]
    assert np.allclose(angles, [np.pi, 15.0, 8.0])


def test_the_gates_of_the_example_as_a_matrix() -> None:
    circuit = read(HEAD + "gate turn(a) t { ctrl @ gphase(a) t; } qubit[2] q; turn(0.3) q[0]; inv @ turn(0.3) q[1];")
    wanted = np.diag(np.exp(1j * np.array([0, -0.3, 0.3, 0])))
    assert np.abs(circuit.unitary() - wanted).max() < 1e-15


def _u(theta: sympy.Expr, phi: sympy.Expr, lam: sympy.Expr) -> sympy.Matrix:
    """Return U of the OpenQASM 2 paper, up to phase (arXiv:1707.03429, equation 2)."""
    i = sympy.I
    c, s = sympy.cos(theta / 2), sympy.sin(theta / 2)
    return sympy.Matrix([[c, -sympy.exp(i * lam) * s], [sympy.exp(i * phi) * s, sympy.exp(i * (phi + lam)) * c]])


#: One-qubit gates of qelib1.inc as the paper defines them, by the angles of U.
PI = sympy.pi
ONE_QUBIT = {
    "u1(0.4)": (0, 0, 0.4), "u2(0.4, 0.7)": (PI / 2, 0.4, 0.7), "u3(0.1, 0.4, 0.7)": (0.1, 0.4, 0.7), "x": (PI, 0, PI),
    "y": (PI, PI / 2, PI / 2), "z": (0, 0, PI), "h": (PI / 2, 0, PI), "s": (0, 0, PI / 2), "sdg": (0, 0, -PI / 2),
    "t": (0, 0, PI / 4), "tdg": (0, 0, -PI / 4), "rx(0.4)": (0.4, -PI / 2, PI / 2), "ry(0.4)": (0.4, 0, 0),
    "rz(0.4)": (0, 0, 0.4), "id": (0, 0, 0),
}  # fmt: skip


@pytest.mark.parametrize("call", sorted(ONE_QUBIT))
@pytest.mark.parametrize("controlled", [False, True])
def test_library_gates_against_sympy(call: str, controlled: bool) -> None:
    exact = np.array(_u(*map(sympy.sympify, ONE_QUBIT[call])).evalf(30).tolist(), dtype=complex)
    if not controlled:
        made = read(f'OPENQASM 2.0; include "qelib1.inc"; qreg q[1]; {call} q[0];').unitary()
        assert distance(made, exact) < 1e-14
        return
    # Under a control the phase matters: that of OpenQASM 3's own gates.
    circuit = read(f"{HEAD}qubit[2] q; ctrl @ {call} q[0], q[1];")
    plain = read(f"{HEAD}qubit[2] q; {call} q[1];").unitary()[:2, :2]
    wanted = np.eye(4, dtype=complex)
    wanted[2:, 2:] = plain
    assert np.abs(circuit.unitary() - wanted).max() < 1e-14
    assert distance(plain, exact) < 1e-14


def test_every_example_compiles() -> None:
    device = gw.Device.from_graph([(k, k + 1) for k in range(8)], "cz-virtual-z")
    for name in ("gates: definitions and modifiers", "subroutines", "timing"):
        openqasm3.parse(gw.compile(read(HEAD + EXAMPLES[name][0]), device).to_qasm())
