"""The table of gates against SymPy's gates, SciPy's matrix functions and OpenQASM's published definitions.

The definitions are those of the OpenQASM 3 standard library (arXiv:2104.14722 and the specification's
``stdgates.inc``) and of OpenQASM 2's ``qelib1.inc`` (arXiv:1707.03429, with the additions of its later releases).
They were typed from memory; each is a statement about matrices that the test works out on its own, by walking the
syntax tree of the reference parser `openqasm3`.
"""

from __future__ import annotations

import math
import operator

import numpy as np
import openqasm3
import pytest
import scipy.linalg
import sympy
import sympy.physics.quantum.gate as sympy_gates
from openqasm3 import ast
from sympy.physics.quantum.represent import represent

from gatewright.errors import CircuitError
from gatewright.gates import ANY, BARRIER, GATES, MEASURE, RESET, UNITARY, Gate, find_gate
from gatewright.linalg import dagger, distance
from gatewright.qasm import read
from gatewright.qasm.library import LIBRARIES, LIBRARY_FILES

STDGATES = """
gate p(lambda) a { ctrl @ gphase(lambda) a; }
gate x a { U(pi, 0, pi) a; gphase(-pi/2); }
gate y a { U(pi, pi/2, pi/2) a; gphase(-pi/2); }
gate z a { p(pi) a; }
gate h a { U(pi/2, 0, pi) a; gphase(-pi/4); }
gate s a { pow(1/2) @ z a; }
gate sdg a { inv @ pow(1/2) @ z a; }
gate t a { pow(1/2) @ s a; }
gate tdg a { inv @ pow(1/2) @ s a; }
gate sx a { pow(1/2) @ x a; }
gate rx(theta) a { U(theta, -pi/2, pi/2) a; gphase(-theta/2); }
gate ry(theta) a { U(theta, 0, 0) a; gphase(-theta/2); }
gate rz(lambda) a { gphase(-lambda/2); U(0, 0, lambda) a; }
gate cx a, b { ctrl @ x a, b; }
gate cy a, b { ctrl @ y a, b; }
gate cz a, b { ctrl @ z a, b; }
gate cp(lambda) a, b { ctrl @ p(lambda) a, b; }
gate crx(theta) a, b { ctrl @ rx(theta) a, b; }
gate cry(theta) a, b { ctrl @ ry(theta) a, b; }
gate crz(theta) a, b { ctrl @ rz(theta) a, b; }
gate ch a, b { ctrl @ h a, b; }
gate swap a, b { cx a, b; cx b, a; cx a, b; }
gate ccx a, b, c { ctrl @ ctrl @ x a, b, c; }
gate cswap a, b, c { ctrl @ swap a, b, c; }
gate cu(theta, phi, lambda, gamma) a, b { p(gamma - theta/2) a; ctrl @ U(theta, phi, lambda) a, b; }
gate phase(lambda) q { U(0, 0, lambda) q; }
gate cphase(lambda) a, b { ctrl @ phase(lambda) a, b; }
gate id a { U(0, 0, 0) a; }
gate u1(lambda) q { U(0, 0, lambda) q; }
gate u2(phi, lambda) q { gphase(-(phi + lambda + pi/2)/2); U(pi/2, phi, lambda) q; }
gate u3(theta, phi, lambda) q { gphase(-(phi + lambda + theta)/2); U(theta, phi, lambda) q; }
"""

QELIB1 = """
gate u3(theta,phi,lambda) q { U(theta,phi,lambda) q; }
gate u2(phi,lambda) q { U(pi/2,phi,lambda) q; }
gate u1(lambda) q { U(0,0,lambda) q; }
gate cx c,t { CX c,t; }
gate id a { U(0,0,0) a; }
gate u(theta,phi,lambda) q { U(theta,phi,lambda) q; }
gate p(phi) q { U(0,0,phi) q; }
gate x a { u3(pi,0,pi) a; }
gate y a { u3(pi,pi/2,pi/2) a; }
gate z a { u1(pi) a; }
gate h a { u2(0,pi) a; }
gate s a { u1(pi/2) a; }
gate sdg a { u1(-pi/2) a; }
gate t a { u1(pi/4) a; }
gate tdg a { u1(-pi/4) a; }
gate rx(theta) a { u3(theta,-pi/2,pi/2) a; }
gate ry(theta) a { u3(theta,0,0) a; }
gate rz(phi) a { u1(phi) a; }
gate sx a { sdg a; h a; sdg a; }
gate sxdg a { s a; h a; s a; }
gate cz a,b { h b; cx a,b; h b; }
gate cy a,b { sdg b; cx a,b; s b; }
gate swap a,b { cx a,b; cx b,a; cx a,b; }
gate ch a,b { h b; sdg b; cx a,b; h b; t b; cx a,b; t b; h b; s b; x b; s a; }
gate ccx a,b,c {
  h c; cx b,c; tdg c; cx a,c; t c; cx b,c; tdg c; cx a,c; t b; t c; h c; cx a,b; t a; tdg b; cx a,b;
}
gate cswap a,b,c { cx c,b; ccx a,b,c; cx c,b; }
gate crx(lambda) a,b { u1(pi/2) b; cx a,b; u3(-lambda/2,0,0) b; cx a,b; u3(lambda/2,-pi/2,0) b; }
gate cry(lambda) a,b { ry(lambda/2) b; cx a,b; ry(-lambda/2) b; cx a,b; }
gate crz(lambda) a,b { rz(lambda/2) b; cx a,b; rz(-lambda/2) b; cx a,b; }
gate cu1(lambda) a,b { u1(lambda/2) a; cx a,b; u1(-lambda/2) b; cx a,b; u1(lambda/2) b; }
gate cp(lambda) a,b { p(lambda/2) a; cx a,b; p(-lambda/2) b; cx a,b; p(lambda/2) b; }
gate cu3(theta,phi,lambda) c,t {
  u1((lambda+phi)/2) c; u1((lambda-phi)/2) t; cx c,t; u3(-theta/2,0,-(phi+lambda)/2) t; cx c,t; u3(theta/2,phi,0) t;
}
gate csx a,b { h b; cu1(pi/2) a,b; h b; }
gate cu(theta,phi,lambda,gamma) c,t {
  p(gamma) c; p((lambda+phi)/2) c; p((lambda-phi)/2) t; cx c,t; u(-theta/2,0,-(phi+lambda)/2) t; cx c,t;
  u(theta/2,phi,0) t;
}
gate rxx(theta) a,b { u3(pi/2,theta,0) a; h b; cx a,b; u1(-theta) b; cx a,b; h b; u2(-pi,pi-theta) a; }
gate rzz(theta) a,b { cx a,b; u1(theta) b; cx a,b; }
gate rccx a,b,c { u2(0,pi) c; u1(pi/4) c; cx b,c; u1(-pi/4) c; cx a,c; u1(pi/4) c; cx b,c; u1(-pi/4) c; u2(0,pi) c; }
gate rc3x a,b,c,d {
  u2(0,pi) d; u1(pi/4) d; cx c,d; u1(-pi/4) d; u2(0,pi) d; cx a,d; u1(pi/4) d; cx b,d; u1(-pi/4) d; cx a,d;
  u1(pi/4) d; cx b,d; u1(-pi/4) d; u2(0,pi) d; u1(pi/4) d; cx c,d; u1(-pi/4) d; u2(0,pi) d;
}
gate c3x a,b,c,d {
  h d; cu1(pi/4) a,d; h d; cx a,b; h d; cu1(-pi/4) b,d; h d; cx a,b; h d; cu1(pi/4) b,d; h d; cx b,c;
  h d; cu1(-pi/4) c,d; h d; cx a,c; h d; cu1(pi/4) c,d; h d; cx b,c; h d; cu1(-pi/4) c,d; h d; cx a,c;
  h d; cu1(pi/4) c,d; h d;
}
gate c3sqrtx a,b,c,d {
  h d; cu1(pi/8) a,d; h d; cx a,b; h d; cu1(-pi/8) b,d; h d; cx a,b; h d; cu1(pi/8) b,d; h d; cx b,c;
  h d; cu1(-pi/8) c,d; h d; cx a,c; h d; cu1(pi/8) c,d; h d; cx b,c; h d; cu1(-pi/8) c,d; h d; cx a,c;
  h d; cu1(pi/8) c,d; h d;
}
gate c4x a,b,c,d,e {
  h e; cu1(pi/2) d,e; h e; c3x a,b,c,d; h e; cu1(-pi/2) d,e; h e; c3x a,b,c,d; c3sqrtx a,b,c,e;
}
"""

OPERATORS = {"+": operator.add, "-": operator.sub, "*": operator.mul, "/": operator.truediv}


def u_of_openqasm_3(theta: float, phi: float, lam: float) -> np.ndarray:
    """U as the OpenQASM 3 specification prints it, phase included."""
    e = np.exp
    return 0.5 * np.array(
        [
            [1 + e(1j * theta), -1j * e(1j * lam) * (1 - e(1j * theta))],
            [1j * e(1j * phi) * (1 - e(1j * theta)), e(1j * (phi + lam)) * (1 + e(1j * theta))],
        ]
    )


def u_of_openqasm_2(theta: float, phi: float, lam: float) -> np.ndarray:
    """U(θ, φ, λ) = Rz(φ) Ry(θ) Rz(λ), as arXiv:1707.03429 defines it."""
    z, y = np.diag([1, -1]), np.array([[0, -1j], [1j, 0]])
    rotations = ((phi, z), (theta, y), (lam, z))
    return np.linalg.multi_dot([scipy.linalg.expm(-0.5j * angle * axis) for angle, axis in rotations])


class Interpreter:
    """Matrices of gate definitions, from the reference parser's syntax tree alone."""

    def __init__(self, text: str, u) -> None:
        self.u = u
        self.definitions = {gate.name.name: gate for gate in openqasm3.parse(text).statements}

    def value(self, node, values: dict[str, float]) -> float:
        if isinstance(node, ast.BinaryExpression):
            return OPERATORS[node.op.name](self.value(node.lhs, values), self.value(node.rhs, values))
        if isinstance(node, ast.UnaryExpression):
            assert node.op.name == "-"
            return -self.value(node.expression, values)
        if isinstance(node, ast.Identifier):
            return math.pi if node.name == "pi" else values[node.name]
        return float(node.value)

    def matrix(self, name: str, values: list[float]) -> np.ndarray:
        if name == "U":
            return self.u(*values)
        if name == "CX":
            return np.eye(4)[[0, 1, 3, 2]].astype(complex)
        gate = self.definitions[name]
        named = {argument.name: value for argument, value in zip(gate.arguments, values, strict=True)}
        wires = [qubit.name for qubit in gate.qubits]
        total = np.eye(2 ** len(wires), dtype=complex)
        for step in gate.body:
            numbers = [self.value(node, named) for node in getattr(step, "arguments", [])]
            if isinstance(step, ast.QuantumPhase):
                # With no control it is a scalar; each control makes it a phase of one more qubit.
                matrix = np.exp([[1j * self.value(step.argument, named)]])
            else:
                matrix = self.matrix(step.name.name, numbers)
            for modifier in reversed(step.modifiers):
                matrix = self.modified(matrix, modifier, named)
            total = embed(matrix, [wires.index(qubit.name) for qubit in step.qubits], len(wires)) @ total
        return total

    def modified(self, matrix: np.ndarray, modifier, values: dict[str, float]) -> np.ndarray:
        if modifier.modifier == ast.GateModifierName.inv:
            return matrix.conj().T
        if modifier.modifier == ast.GateModifierName.pow:
            return scipy.linalg.fractional_matrix_power(matrix, self.value(modifier.argument, values))
        assert modifier.modifier == ast.GateModifierName.ctrl
        return scipy.linalg.block_diag(np.eye(len(matrix)), matrix)


def embed(matrix: np.ndarray, wires: list[int], n: int) -> np.ndarray:
    """The matrix on all n qubits, entry by entry from the bits of row and column."""
    full = np.zeros((2**n, 2**n), dtype=complex)
    rest = [q for q in range(n) if q not in wires]

    def bits(index: int, places: list[int]) -> int:
        return sum(((index >> (n - 1 - q)) & 1) << (len(places) - 1 - k) for k, q in enumerate(places))

    for row in range(2**n):
        for column in range(2**n):
            if bits(row, rest) == bits(column, rest):
                full[row, column] = matrix[bits(row, wires), bits(column, wires)]
    return full


STANDARD_3 = Interpreter(STDGATES, u_of_openqasm_3)
STANDARD_2 = Interpreter(QELIB1, u_of_openqasm_2)


def angles(gate: Gate) -> list[list[float]]:
    rng = np.random.default_rng(7)
    return [rng.uniform(-7, 7, gate.n_parameters).tolist() for _ in range(3 if gate.n_parameters else 1)]


@pytest.mark.parametrize("name", STANDARD_3.definitions)
def test_openqasm_3_standard_library(name: str) -> None:
    """Exactly, phase included: OpenQASM 3, stdgates.inc."""
    for values in angles(GATES[name]):
        np.testing.assert_allclose(GATES[name].matrix(values), STANDARD_3.matrix(name, values), atol=1e-14)


@pytest.mark.parametrize("name", STANDARD_2.definitions)
def test_openqasm_2_standard_library(name: str) -> None:
    """Up to global phase, which OpenQASM 2 does not tell: qelib1.inc."""
    for values in angles(GATES[name]):
        assert distance(GATES[name].matrix(values), STANDARD_2.matrix(name, values)) < 2e-14


def test_built_in_gates_of_the_language() -> None:
    for values in angles(GATES["U"]):
        np.testing.assert_allclose(GATES["U"].matrix(values), u_of_openqasm_3(*values), atol=1e-15)
        assert distance(GATES["U"].matrix(values), u_of_openqasm_2(*values)) < 1e-14
    # CX as arXiv:1707.03429 and Nielsen & Chuang print it, control first.
    np.testing.assert_array_equal(GATES["CX"].matrix(), [[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 0, 1], [0, 0, 1, 0]])


SYMPY = {
    "id": (sympy_gates.IdentityGate(0), 1),
    "x": (sympy_gates.X(0), 1),
    "y": (sympy_gates.Y(0), 1),
    "z": (sympy_gates.Z(0), 1),
    "h": (sympy_gates.H(0), 1),
    "s": (sympy_gates.S(0), 1),
    "t": (sympy_gates.T(0), 1),
    # SymPy counts qubits from the right: of two, our qubit 0 is its qubit 1.
    "cx": (sympy_gates.CNOT(1, 0), 2),
    "CX": (sympy_gates.CNOT(1, 0), 2),
    "cy": (sympy_gates.CGate((1,), sympy_gates.Y(0)), 2),
    "cz": (sympy_gates.CGate((1,), sympy_gates.Z(0)), 2),
    "ch": (sympy_gates.CGate((1,), sympy_gates.H(0)), 2),
    "swap": (sympy_gates.SWAP(1, 0), 2),
    "ccx": (sympy_gates.CGate((2, 1), sympy_gates.X(0)), 3),
    "ccz": (sympy_gates.CGate((2, 1), sympy_gates.Z(0)), 3),
    "c3x": (sympy_gates.CGate((3, 2, 1), sympy_gates.X(0)), 4),
    "c4x": (sympy_gates.CGate((4, 3, 2, 1), sympy_gates.X(0)), 5),
}


@pytest.mark.parametrize("name", SYMPY)
def test_against_sympy(name: str) -> None:
    gate, n_qubits = SYMPY[name]
    expected = np.array(represent(gate, nqubits=n_qubits).evalf(20), dtype=complex)
    np.testing.assert_allclose(GATES[name].matrix(), expected, atol=1e-15)


def _rotation(axis: str, theta: sympy.Symbol) -> sympy.Matrix:
    """Return exp(-i θ/2 P) of a Pauli matrix, as Nielsen and Chuang, 4.4 to 4.6."""
    pauli = {"x": sympy.Matrix([[0, 1], [1, 0]]), "y": sympy.Matrix([[0, -sympy.I], [sympy.I, 0]])}
    matrix = pauli.get(axis, sympy.Matrix([[1, 0], [0, -1]]))
    return sympy.cos(theta / 2) * sympy.eye(2) - sympy.I * sympy.sin(theta / 2) * matrix


def _controlled(matrix: sympy.Matrix, controls: int = 1) -> sympy.Matrix:
    """Return a matrix under controls, which are the first qubits."""
    return sympy.diag(sympy.eye(matrix.rows * (2**controls - 1)), matrix)


def _u(theta: sympy.Symbol, phi: sympy.Symbol, lam: sympy.Symbol) -> sympy.Matrix:
    """Return U as the OpenQASM 3 specification prints it."""
    i = sympy.I
    a, b = 1 + sympy.exp(i * theta), 1 - sympy.exp(i * theta)
    return (
        sympy.Matrix([[a, -i * sympy.exp(i * lam) * b], [i * sympy.exp(i * phi) * b, sympy.exp(i * (phi + lam)) * a]])
        / 2
    )


def _power(generator: sympy.Matrix, theta: sympy.Symbol) -> sympy.Matrix:
    """Return exp(-i θ/2 G) where G squared is 1."""
    return sympy.cos(theta / 2) * sympy.eye(generator.rows) - sympy.I * sympy.sin(theta / 2) * generator


_A, _B, _C, _D = sympy.symbols("a b c d", real=True)
_PAULI = {"x": sympy.Matrix([[0, 1], [1, 0]]), "z": sympy.Matrix([[1, 0], [0, -1]])}
_SWAP = sympy.Matrix([[1, 0, 0, 0], [0, 0, 1, 0], [0, 1, 0, 0], [0, 0, 0, 1]])
_HALF = (1 + sympy.I) / 2
#: The principal square root of X.
_ROOT = sympy.Matrix([[_HALF, 1 - _HALF], [1 - _HALF, _HALF]])

#: Gates of several qubits of both libraries in SymPy's matrices, with their parameters; what `SYMPY` has is left out.
SYMPY_MATRICES: dict[str, tuple[sympy.Matrix, tuple[sympy.Symbol, ...]]] = {
    "cp": (_controlled(sympy.diag(1, sympy.exp(sympy.I * _A))), (_A,)),
    "cphase": (_controlled(sympy.diag(1, sympy.exp(sympy.I * _A))), (_A,)),
    "cu1": (_controlled(sympy.diag(1, sympy.exp(sympy.I * _A))), (_A,)),
    "crx": (_controlled(_rotation("x", _A)), (_A,)),
    "cry": (_controlled(_rotation("y", _A)), (_A,)),
    "crz": (_controlled(_rotation("z", _A)), (_A,)),
    # The control's phase takes away that of U, which is exp(iθ/2) in OpenQASM 3.
    "cu": (_controlled(sympy.exp(sympy.I * (_D - _A / 2)) * _u(_A, _B, _C)), (_A, _B, _C, _D)),
    "cu3": (_controlled(sympy.exp(-sympy.I * _A / 2) * _u(_A, _B, _C)), (_A, _B, _C)),
    "csx": (_controlled(_ROOT), ()),
    "c3sqrtx": (_controlled(_ROOT, 3), ()),
    "cswap": (_controlled(_SWAP), ()),
    "rxx": (_power(sympy.kronecker_product(_PAULI["x"], _PAULI["x"]), _A), (_A,)),
    "rzz": (_power(sympy.kronecker_product(_PAULI["z"], _PAULI["z"]), _A), (_A,)),
    # The relative-phase Toffoli of Margolus, as Barenco et al., PRA 52, 3457 (1995), section 6.2, up to the places of
    # its signs: those of qelib1.inc.
    "rccx": (sympy.diag(sympy.eye(5), -1, sympy.Matrix([[0, -sympy.I], [sympy.I, 0]])), ()),
    # Maslov, PRA 93, 022311 (2016), figure 4, with the signs of qelib1.inc.
    "rc3x": (
        sympy.diag(sympy.eye(12), sympy.I, -sympy.I, sympy.Matrix([[0, 1], [-1, 0]])),
        (),
    ),
}


@pytest.mark.parametrize("name", SYMPY_MATRICES)
def test_gates_of_several_qubits_against_sympy_matrices(name: str) -> None:
    matrix, symbols = SYMPY_MATRICES[name]
    for values in angles(GATES[name]):
        expected = np.array(matrix.subs(dict(zip(symbols, values, strict=True))).evalf(20).tolist(), dtype=complex)
        np.testing.assert_allclose(GATES[name].matrix(values), expected, atol=1e-14)


def test_every_gate_of_several_qubits_has_a_sympy_matrix() -> None:
    names = {name for library in LIBRARIES.values() for name in library if GATES[name].n_qubits > 1}
    assert names <= {*SYMPY, *SYMPY_MATRICES}


@pytest.mark.parametrize("version", [2, 3])
def test_a_program_that_includes_the_library_means_these_matrices(version: int) -> None:
    """Read from text, on qubits in another order."""
    header = f'OPENQASM {version}.0; include "{LIBRARY_FILES[version]}"; ' + ("qreg" if version == 2 else "qubit")
    header += " q[5];" if version == 2 else "[5] q;"
    for name in sorted(LIBRARIES[version]):
        gate = GATES[name]
        places = [4, 0, 3, 1, 2][: gate.n_qubits]
        for values in angles(gate):
            given = f"({', '.join(map(repr, values))})" if values else ""
            text = f"{header} {name}{given} {', '.join(f'q[{q}]' for q in places)};"
            (op,) = read(text)
            assert op.qubits == tuple(places) and op.matrix is not None
            np.testing.assert_allclose(op.matrix, gate.matrix(values), atol=1e-15)


X = np.array([[0, 1], [1, 0]])
Y = np.array([[0, -1j], [1j, 0]])
Z = np.diag([1, -1])
ONE = np.diag([0, 1])

#: Generators G of gates exp(-i θ/2 G), and of phases exp(i θ G).
ROTATIONS = {
    "rx": X, "ry": Y, "rz": Z, "rxx": np.kron(X, X), "ryy": np.kron(Y, Y), "rzz": np.kron(Z, Z), "rzx": np.kron(Z, X),
    "crx": np.kron(ONE, X), "cry": np.kron(ONE, Y), "crz": np.kron(ONE, Z),
}  # fmt: skip
PHASES = {
    "p": ONE,
    "phase": ONE,
    "u1": ONE,
    "cp": np.kron(ONE, ONE),
    "cphase": np.kron(ONE, ONE),
    "cu1": np.kron(ONE, ONE),
}


@pytest.mark.parametrize("name", ROTATIONS)
def test_rotations_against_expm(name: str) -> None:
    for (theta,) in angles(GATES[name]):
        expected = scipy.linalg.expm(-0.5j * theta * ROTATIONS[name])
        np.testing.assert_allclose(GATES[name].matrix([theta]), expected, atol=3e-15)


@pytest.mark.parametrize("name", PHASES)
def test_phases_against_expm(name: str) -> None:
    for (theta,) in angles(GATES[name]):
        np.testing.assert_allclose(
            GATES[name].matrix([theta]), scipy.linalg.expm(1j * theta * PHASES[name]), atol=3e-15
        )


def test_equatorial_rotation_against_expm() -> None:
    """Rotation about the axis (cos φ, sin φ, 0): Nielsen & Chuang, eq. 4.8."""
    for theta, phi in angles(GATES["r"]):
        expected = scipy.linalg.expm(-0.5j * theta * (np.cos(phi) * X + np.sin(phi) * Y))
        np.testing.assert_allclose(GATES["r"].matrix([theta, phi]), expected, atol=3e-15)


def test_matrix_functions() -> None:
    """Roots by SciPy's principal square root; iSWAP as the exponential of its Hamiltonian (common knowledge)."""
    np.testing.assert_allclose(GATES["sx"].matrix(), scipy.linalg.sqrtm(X), atol=1e-15)
    np.testing.assert_allclose(GATES["sxdg"].matrix(), scipy.linalg.sqrtm(X).conj().T, atol=1e-15)
    np.testing.assert_allclose(
        GATES["csx"].matrix(), scipy.linalg.block_diag(np.eye(2), scipy.linalg.sqrtm(X)), atol=1e-15
    )
    root = scipy.linalg.block_diag(np.eye(14), scipy.linalg.sqrtm(X))
    np.testing.assert_allclose(GATES["c3sqrtx"].matrix(), root, atol=1e-15)
    hamiltonian = np.kron(X, X) + np.kron(Y, Y)
    np.testing.assert_allclose(GATES["iswap"].matrix(), scipy.linalg.expm(0.25j * np.pi * hamiltonian), atol=1e-15)


def test_relative_phase_toffolis_are_toffolis_up_to_signs() -> None:
    """Maslov, PRA 93, 022311 (2016): they permute as Toffoli gates do, entries of modulus one."""
    np.testing.assert_array_equal(np.abs(GATES["rccx"].matrix()), GATES["ccx"].matrix().real)
    np.testing.assert_array_equal(np.abs(GATES["rc3x"].matrix()), GATES["c3x"].matrix().real)


@pytest.mark.parametrize("name", GATES)
def test_contract(name: str) -> None:
    gate = GATES[name]
    assert gate.name == name
    checked = {*STANDARD_3.definitions, *STANDARD_2.definitions, *SYMPY, *ROTATIONS, *PHASES}
    assert name in checked | {"U", "r", "iswap"}, "a gate without a check from outside"
    rng = np.random.default_rng(3)
    stack = gate.matrix(rng.uniform(-7, 7, (2, 3, gate.n_parameters)))
    assert stack.shape == (2, 3, 2**gate.n_qubits, 2**gate.n_qubits)
    assert stack.dtype == np.complex128
    np.testing.assert_allclose(
        stack @ dagger(stack), np.broadcast_to(np.eye(2**gate.n_qubits), stack.shape), atol=1e-15
    )
    with pytest.raises(CircuitError, match="wrong number of parameters"):
        gate.matrix([0.1] * (gate.n_parameters + 1))


def test_operations_without_a_matrix() -> None:
    for gate in (MEASURE, RESET, BARRIER, UNITARY):
        assert gate.n_qubits in (1, ANY)
        with pytest.raises(CircuitError, match="has no matrix"):
            gate.matrix()


def test_find_gate_names_the_nearest() -> None:
    assert find_gate("cx") is GATES["cx"]
    with pytest.raises(CircuitError, match="did you mean 'swap'"):
        find_gate("swapp")
