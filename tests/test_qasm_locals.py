"""Bits of blocks and subroutines, measured results in expressions, and assignments to parts of arrays.

Meanings after the OpenQASM 3 specification (arXiv:2104.14722): scopes, subroutines, classical instructions, arrays.
"""

from __future__ import annotations

import numpy as np
import pytest

from gatewright.circuit import Circuit
from gatewright.classical import Bits
from gatewright.errors import GatewrightError, UnsupportedError
from gatewright.program import If, Program, While
from gatewright.qasm import read, write
from interpreter import run

V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'


def program(text: str) -> Program:
    made = read(V3 + text)
    assert isinstance(made, Program)
    return made


def alike(first: Program | Circuit, second: Program | Circuit) -> bool:
    """Whether both do the same on the same outcomes, bits that only one of them has left aside."""
    start = np.eye(1, 2**first.n_qubits, dtype=complex)[0]
    for seed in range(6):
        a, b = run(first, start, seed), run(second, start, seed)
        shared = min(first.n_bits, second.n_bits)
        if a.bits[:shared] != b.bits[:shared] or abs(np.vdot(a.state, b.state)) < 1 - 1e-9:
            return False
    return True


@pytest.mark.parametrize(
    ("local", "plain"),
    [
        (
            "def f(qubit a) -> bit { return measure a; } if (f(q[0])) { x q[1]; }",
            "bit w; w = measure q[0]; if (w) { x q[1]; }",
        ),
        (
            "for int k in [0:1] { bit b = measure q[k]; if (b) { ry(0.4) q[2]; } }",
            "bit w; w = measure q[0]; if (w) { ry(0.4) q[2]; } w = measure q[1]; if (w) { ry(0.4) q[2]; }",
        ),
        (
            "def f(qubit a) -> int { bit b; b = measure a; return b + 1; } int n = f(q[0]) * f(q[1]);"
            " if (n == 4) { x q[2]; }",
            "bit w; bit v; w = measure q[0]; v = measure q[1]; if (w && v) { x q[2]; }",
        ),
        (
            "if (c[0]) { bit b = measure q[0]; bit d = b; if (d) { b = 0; } if (b) { x q[1]; } if (d) { x q[2]; } }",
            "bit w; if (c[0]) { w = measure q[0]; if (w) { x q[2]; } }",
        ),
        (
            "def f(qubit a) -> bool { h a; return measure a; } while (f(q[0])) { ry(0.3) q[1]; }",
            "bit w = 1; while (w) { h q[0]; w = measure q[0]; if (w) { ry(0.3) q[1]; } }",
        ),
        (
            "def f(bit b, qubit a) { if (b) { x a; } b = measure a; if (b) { h a; } } c[1] = measure q[0]; "
            "f(c[1], q[2]);",
            "c[1] = measure q[0]; if (c[1]) { x q[2]; } bit w; w = measure q[2]; if (w) { h q[2]; }",
        ),
        (
            "def f(qubit[2] a) -> bit[2] { return measure a; } "
            "switch (f(q[0:1])) { case 2 { x q[2]; } default { h q[2]; } }",
            "bit[2] w; w = measure q[0:1]; if (w == 2) { x q[2]; } else { h q[2]; }",
        ),
        ("def f(qubit a) -> bit { return measure a; } c[0] = !f(q[0]);", "bit w; w = measure q[0]; c[0] = !w;"),
        (
            "bool ok = measure q[0]; if (ok) { x q[2]; } ok = measure q[1]; if (ok) { h q[2]; }",
            "bit w; w = measure q[0]; if (w) { x q[2]; } w = measure q[1]; if (w) { h q[2]; }",
        ),
    ],
)
def test_what_a_local_bit_means(local: str, plain: str) -> None:
    """The same as a bit that is declared outside, and the text that is written means the same again."""
    declared = "qubit[3] q; bit[2] c; ry(1.1) q[0]; ry(0.7) q[1]; c[0] = measure q[2]; ry(2) q[2]; "
    source, wanted = program(declared + local), program(declared + plain)
    # Outcomes come by bit: both have the one that is not declared outside in third place.
    assert alike(source, wanted)
    again = read(write(source))
    assert isinstance(again, Program) and again.n_bits == source.n_bits
    assert write(again) == write(source)


def test_bits_of_blocks_share_their_places() -> None:
    body = "bit[3] a = measure q; if (a[1]) { bit b = measure q[0]; if (b) { x q[2]; } }"
    made = program(f"qubit[3] q; bit c; for int k in [0:9] {{ {body} }}")
    assert made.bit_registers == (("c", 1), ("local_bits", 4))


def test_the_register_has_a_name_that_is_free() -> None:
    made = program("qubit q; bit local_bits; int local_bits1 = 3; { bool b = measure q; if (b) { local_bits1 = 4; } }")
    assert [name for name, _ in made.bit_registers] == ["local_bits", "local_bits2"]


def test_bits_of_blocks_that_are_known_need_no_place() -> None:
    made = read(V3 + "qubit[2] q; { bit[2] b = 2; if (b[1]) { x q[0]; } b[0] = 1; if (b == 3) { x q[1]; } }")
    assert isinstance(made, Circuit) and made.n_bits == 0
    assert [op.qubits for op in made] == [(0,), (1,)]


def test_a_condition_that_measures_is_evaluated_in_each_round() -> None:
    made = program("def f(qubit a) -> bit { h a; return measure a; } qubit[2] q; while (f(q[0])) { x q[1]; }")
    (loop,) = (statement for statement in made.body.statements if isinstance(statement, While))
    assert [op.name for op in loop.body.circuits[0]] == ["h", "measure"]
    assert not len(made.body.circuits[0])


def test_a_measured_bit_is_read_before_it_is_measured_again() -> None:
    made = program("def f(qubit a) -> bit { return measure a; } qubit[2] q; if (f(q[0]) != f(q[1])) { x q[0]; }")
    (branch,) = (statement for statement in made.body.statements if isinstance(statement, If))
    assert branch.condition.operands == (Bits((0,), True), Bits((1,), True))  # type: ignore[union-attr]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("if (measure q[0]) { x q[1]; }", "does not fit the grammar"),
        ("if (c[0] && f(q[0])) { x q[1]; }", "a subroutine on qubits behind '&&'"),
        ("if (f(q[0]) || f(q[1])) { x q[1]; }", r"a subroutine on qubits behind '\|\|'"),
        ("{ bit[3] b = measure q; }", "a measurement of unequal sizes"),
        ("{ bit b = measure q; }", "a measurement of unequal sizes"),
        ("{ bit b; bit b; }", "already defined"),
        ("rx(pi * q[f(q[0])]) q[0];", "not a classical value"),
        ("x q[f(q[0])];", "depends on the run"),
        ("const bool ok = f(q[0]);", "a constant that depends on the run"),
        ("uint[4] n = 0; n[1] = measure q[0];", "depending on a measurement"),
        ("gate g a { bit b = measure a; } g q[0];", "'bit' cannot stand in a definition"),
    ],
)
def test_what_is_refused(text: str, message: str) -> None:
    with pytest.raises(GatewrightError, match=message) as caught:
        read(f"{V3}def f(qubit a) -> bit {{ return measure a; }} qubit[2] q; bit[2] c; c = measure q;\n{text}")
    assert caught.value.line == 4 or "grammar" in message


# ---------------------------------------------------------------- parts of arrays


ARRAYS = "qubit q; array[float, 2, 3] a = {{1, 2, 3}, {4, 5, 6}}; array[float, 3] b = {7, 8, 9}; "


@pytest.mark.parametrize(
    ("text", "values"),
    [
        ("a[1] = b; b[0] = 1;", [1, 2, 3, 7, 8, 9]),
        ("a[0, 1:2] = b[0:1];", [1, 7, 8, 4, 5, 6]),
        ("a[1][{2, 0}] = b[1:2];", [1, 2, 3, 9, 5, 8]),
        ("a[0:1] = a[{1, 0}];", [4, 5, 6, 1, 2, 3]),
        ("b[0:1] = b[1:2]; a[0] = b;", [8, 9, 9, 4, 5, 6]),
        ("a[-1] = a[0]; a[0, 0] = 5;", [5, 2, 3, 1, 2, 3]),
    ],
)
def test_assigning_to_parts_of_arrays(text: str, values: list[float]) -> None:
    """NumPy's views of the same arrays agree on these by hand."""
    made = read(V3 + ARRAYS + text + "for int j in [0:1] { for int k in [0:2] { rx(a[j, k]) q; } }")
    assert isinstance(made, Circuit)
    assert [op.parameters[0] for op in made] == values


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("a[0] = b[0:1];", "an array of another size"),
        ("b[0:1] = a;", "an array of another size"),
        ("a[0] = 3;", "this is not an array"),
        ("a[0] += b;", r"'\+=' to a part of an array"),
        ("a[2] = b;", "out of range"),
        ("a[0:1][0] = b;", "an index behind a slice"),
        ("a[0, 0, 0] = 1;", "too many indices"),
        ("bit c = measure q; if (c) { a[0] = b; }", "depending on a measurement, to a part of an array"),
    ],
)
def test_parts_of_arrays_that_are_refused(text: str, message: str) -> None:
    with pytest.raises(GatewrightError, match=message):
        read(V3 + ARRAYS + text)


def test_complex_numbers_are_refused_by_name() -> None:
    for text in ("complex[float[64]] z = 1.0;", "array[complex[float], 2] z;", "float x = 2im;"):
        with pytest.raises(UnsupportedError, match="complex"):
            read(V3 + "qubit q; " + text)
