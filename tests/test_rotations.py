"""Exact forms of the gates with parameters, against the definitions: numerically, and symbolically by SymPy."""

from __future__ import annotations

import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.circuit import Builder
from gatewright.gates import GATES
from gatewright.linalg import distance
from gatewright.parameters import Affine
from gatewright.rotations import PARAMETRISED, Term, controlled, controlled_phase, inverse_parameters, rotations

ANGLES = st.floats(-10, 10)


def unitary(terms: list[Term], n: int) -> np.ndarray:
    builder = Builder(n)
    for name, wires, values in terms:
        builder.gate(name, *wires, parameters=values)
    return builder.build().unitary()


def test_every_parametrised_gate_of_the_table_has_a_form() -> None:
    assert {name for name, gate in GATES.items() if gate.n_parameters} == PARAMETRISED


@pytest.mark.parametrize("name", sorted(PARAMETRISED))
@settings(max_examples=8)
@given(values=st.lists(ANGLES, min_size=4, max_size=4))
def test_rotations(name: str, values: list[float]) -> None:
    gate = GATES[name]
    terms = rotations(name, values[: gate.n_parameters])
    assert terms is not None
    assert all(not v or n in ("rx", "ry", "rz") for n, _, v in terms)
    assert distance(unitary(terms, gate.n_qubits), gate.matrix(values[: gate.n_parameters])) < 1e-13


@pytest.mark.parametrize("name", sorted(PARAMETRISED))
@pytest.mark.parametrize("controls", [0, 1, 2, 3])
@settings(max_examples=8)
@given(values=st.lists(ANGLES, min_size=4, max_size=4))
def test_controlled_exactly(name: str, controls: int, values: list[float]) -> None:
    gate = GATES[name]
    v = values[: gate.n_parameters]
    n = controls + gate.n_qubits
    terms = controlled(name, v, tuple(range(controls)), tuple(range(controls, n)))
    assert terms is not None
    wanted = np.eye(2**n, dtype=complex)
    wanted[-(2**gate.n_qubits) :, -(2**gate.n_qubits) :] = gate.matrix(v)
    assert np.abs(unitary(terms, n) - wanted).max() < 1e-13


@pytest.mark.parametrize("name", sorted(PARAMETRISED))
@settings(max_examples=8)
@given(values=st.lists(ANGLES, min_size=4, max_size=4))
def test_inverse_exactly(name: str, values: list[float]) -> None:
    gate = GATES[name]
    v = values[: gate.n_parameters]
    undone = inverse_parameters(name, v)
    assert undone is not None
    product = GATES[undone[0]].matrix(undone[1]) @ gate.matrix(v)
    assert np.abs(product - np.eye(len(product))).max() < 1e-13


@pytest.mark.parametrize("n", [1, 2, 3, 4, 5])
def test_controlled_phase(n: int) -> None:
    made = unitary(controlled_phase(0.7, tuple(range(n))), n)
    wanted = np.diag([*np.ones(2**n - 1), np.exp(0.7j)])
    assert np.abs(made - wanted).max() < 1e-13


# ---------------------------------------------------------------- SymPy, from the definitions of stdgates.inc

I2 = sympy.eye(2)
X, Y, Z = sympy.Matrix([[0, 1], [1, 0]]), sympy.Matrix([[0, -sympy.I], [sympy.I, 0]]), sympy.diag(1, -1)


def _turn(pauli: sympy.Matrix, t: sympy.Expr) -> sympy.Matrix:
    return sympy.cos(t / 2) * I2 - sympy.I * sympy.sin(t / 2) * pauli


def _control(m: sympy.Matrix) -> sympy.Matrix:
    return sympy.diag(I2, m)


def _kron(a: sympy.Matrix, b: sympy.Matrix) -> sympy.Matrix:
    return sympy.kronecker_product(a, b)


def _two(pauli: sympy.Matrix, t: sympy.Expr) -> sympy.Matrix:
    return sympy.cos(t / 2) * sympy.eye(4) - sympy.I * sympy.sin(t / 2) * pauli


def _u(t: sympy.Expr, p: sympy.Expr, q: sympy.Expr) -> sympy.Matrix:
    c, s = sympy.cos(t / 2), sympy.sin(t / 2)
    return sympy.Matrix(
        [[c, -sympy.exp(sympy.I * q) * s], [sympy.exp(sympy.I * p) * s, sympy.exp(sympy.I * (p + q)) * c]]
    )


a, b, c, d = sympy.symbols("a b c d", real=True)
DEFINED = {
    "p": sympy.diag(1, sympy.exp(sympy.I * a)),
    "u": _u(a, b, c),
    "cp": _control(sympy.diag(1, sympy.exp(sympy.I * a))),
    "crx": _control(_turn(X, a)),
    "cry": _control(_turn(Y, a)),
    "crz": _control(_turn(Z, a)),
    "cu": sympy.diag(I2, sympy.exp(sympy.I * d) * _u(a, b, c)),
    "rxx": _two(_kron(X, X), a),
    "ryy": _two(_kron(Y, Y), a),
    "rzz": _two(_kron(Z, Z), a),
    "rzx": _two(_kron(Z, X), a),
}
FIXED = {"cx": _control(X), "cy": _control(Y), "cz": _control(Z)}
TURNS = {"rx": X, "ry": Y, "rz": Z}


@pytest.mark.parametrize("name", sorted(DEFINED))
def test_identities_by_sympy(name: str) -> None:
    wanted = DEFINED[name]
    n = GATES[name].n_qubits
    values = [Affine.of(letter) for letter in "abcd"[: GATES[name].n_parameters]]
    made = sympy.eye(2**n)
    for kind, wires, angles in rotations(name, values) or []:
        if kind in FIXED:
            made = FIXED[kind] * made
            continue
        turn = _turn(TURNS[kind], angles[0].to_sympy())  # type: ignore[union-attr]
        if n == 2:
            turn = _kron(turn, I2) if wires == (0,) else _kron(I2, turn)
        made = turn * made
    # Equal up to a phase: W = made† wanted is a multiple of one, identically in the angles.
    w = (made.H * wanted).applyfunc(lambda e: sympy.simplify(sympy.expand(e.rewrite(sympy.exp))))
    assert (w - w[0, 0] * sympy.eye(2**n)).applyfunc(lambda e: sympy.simplify(sympy.expand(e))) == sympy.zeros(2**n)
    assert sympy.simplify(w[0, 0] * sympy.conjugate(w[0, 0])) == 1
