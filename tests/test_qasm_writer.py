"""The OpenQASM writer: its texts against the reference parser `openqasm3`, and the reader as its inverse."""

from __future__ import annotations

import math

import numpy as np
import openqasm3
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_array_equal

from gatewright.circuit import Builder, Circuit
from gatewright.errors import CircuitError, QasmError
from gatewright.gates import GATES, Gate
from gatewright.linalg import distance, haar_unitary
from gatewright.qasm import QubitMap, map_lines, read, read_map, write
from gatewright.qasm.library import BUILT_IN, DEFINITIONS, LIBRARIES
from gatewright.qasm.writer import angle_texts


def written(circuit: Circuit, version: int = 3, **options) -> str:
    """Write, and have the reference parser read what is OpenQASM 3."""
    text = write(circuit, version=version, **options)
    assert text.endswith(";\n")
    if version == 3:
        openqasm3.parse(text)
    return text


def assert_same_columns(first: Circuit, second: Circuit) -> None:
    assert first.table == second.table
    for name in ("op", "qubits", "offsets", "parameter_offsets", "link"):
        assert_array_equal(getattr(first, name), getattr(second, name))
        assert getattr(first, name).dtype == getattr(second, name).dtype
    assert first.parameters.tobytes() == second.parameters.tobytes()
    assert (first.n_qubits, first.n_bits) == (second.n_qubits, second.n_bits)


def one_gate(gate: Gate, seed: int = 3) -> Circuit:
    angles = np.random.default_rng(seed).uniform(-7, 7, gate.n_parameters)
    return Builder(gate.n_qubits).gate(gate, *reversed(range(gate.n_qubits)), parameters=angles.tolist()).build()


@pytest.mark.parametrize("version", [2, 3])
@pytest.mark.parametrize("name", GATES)
def test_every_gate_in_both_versions(name: str, version: int) -> None:
    circuit = one_gate(GATES[name])
    text = written(circuit, version)
    again = read(text)
    assert_same_columns(circuit, again)
    assert write(again, version=version) == text
    # The meaning of the definition that was written, expanded under another name.
    if name in DEFINITIONS[version]:
        assert f"gate {name}" in text
        body = text.replace(f"gate {name}(", "gate renamed(").replace(f"gate {name} ", "gate renamed ")
        expanded = read(body.replace(f"\n{name}", "\nrenamed"))
        assert len(expanded) > 1 or expanded.table != circuit.table
        assert distance(expanded.unitary(), circuit.unitary()) < 2e-14
        if version == 3:
            np.testing.assert_allclose(expanded.unitary(), circuit.unitary(), atol=2e-14)
    else:
        assert name in LIBRARIES[version] | BUILT_IN[version] and "gate " not in text


@st.composite
def circuits(draw: st.DrawFn) -> Circuit:
    n_qubits, n_bits = draw(st.integers(1, 6)), draw(st.integers(0, 3))
    builder = Builder(n_qubits, n_bits)
    angle = st.floats(-20, 20) | st.tuples(st.integers(-9, 9), st.sampled_from([1, 2, 3, 8, 64, 1024])).map(
        lambda t: t[0] * math.pi / t[1]
    )
    names = [name for name, gate in GATES.items() if gate.n_qubits <= n_qubits]
    for name in draw(st.lists(st.sampled_from([*names, "measure", "reset", "barrier"]), max_size=12)):
        order = draw(st.permutations(range(n_qubits)))
        if name == "barrier":
            builder.barrier(*order[: draw(st.integers(1, n_qubits))])
        elif name == "reset":
            builder.reset(order[0])
        elif name == "measure":
            if n_bits:
                builder.measure(order[0], draw(st.integers(0, n_bits - 1)))
        else:
            gate = GATES[name]
            builder.gate(gate, *order[: gate.n_qubits], parameters=[draw(angle) for _ in range(gate.n_parameters)])
    builder.phase = draw(st.floats(-7, 7))
    return builder.build()


@given(circuits(), st.sampled_from([2, 3]))
def test_reading_what_was_written_gives_the_same_columns(circuit: Circuit, version: int) -> None:
    text = written(circuit, version)
    again = read(text)
    assert_same_columns(circuit, again)
    assert again.phase == (circuit.phase if version == 3 else 0)
    assert write(again, version=version) == (text if version == 2 else write(circuit))


def test_layout() -> None:
    builder = Builder(3, 1)
    builder.gate("h", 0).gate("iswap", 0, 2).gate("rz", 1, parameters=[-3 * math.pi / 8]).barrier(0, 1).barrier()
    circuit = builder.reset(1).measure(2, 0).build()
    assert written(circuit, header=["made by hand", "// and kept"]).splitlines() == [
        "// made by hand",
        "// and kept",
        "OPENQASM 3.0;",
        'include "stdgates.inc";',
        "",
        DEFINITIONS[3]["iswap"],
        "",
        "qubit[3] q;",
        "bit[1] c;",
        "h q[0];",
        "iswap q[0], q[2];",
        "rz(-3*pi/8) q[1];",
        "barrier q[0], q[1];",
        "barrier q;",
        "reset q[1];",
        "c[0] = measure q[2];",
    ]
    assert written(circuit, 2).splitlines()[0:7:6] == ["OPENQASM 2.0;", "creg c[1];"]
    assert written(circuit, 2).splitlines()[-1] == "measure q[2] -> c[0];"


def test_header_cannot_smuggle_statements() -> None:
    text = written(Builder(1).gate("x", 0).build(), header=["a\nx q[0];", "b\r\nc"])
    assert [op.name for op in read(text)] == ["x"]
    assert text.startswith("// a\n// x q[0];\n// b\n// c\n")


def test_registers_are_kept_where_they_can_be() -> None:
    start = 'OPENQASM 3.0; include "stdgates.inc"; '
    circuit = read(
        start + "qubit[2] left; qubit right; bit[2] out; cx left[1], right; out[1] = measure left[0]; barrier;"
    )
    text = written(circuit)
    assert "qubit[2] left;\nqubit[1] right;\nbit[2] out;\ncx left[1], right[0];\n" in text
    assert "barrier left, right;" in text
    assert read(text).qubit_registers == (("left", 2), ("right", 1))
    # A register called like a gate of the library that the writer includes, or not allowed in OpenQASM 2.
    circuit = read("qubit[2] cx; U(0,0,0) cx[1];")
    assert "qubit[2] q;" in written(circuit)
    circuit = read("qubit[2] Q; bit[2] c; U(0,0,0) Q[1]; c = measure Q;")
    assert "qubit[2] Q;" in written(circuit) and "qreg q[2];" in written(circuit, 2)
    gate = Gate("q", 1, 0, GATES["h"].function)
    circuit = Builder(1).gate(gate, 0).build()
    text = written(circuit, definitions={"q": "gate q a { h a; }"})
    assert "qubit[1] q0;\nq q0[0];" in text
    assert_same_columns(read(text, natives={"q": gate}), circuit)


# ---------------------------------------------------------------- angles


@given(st.lists(st.floats(allow_nan=False, allow_infinity=False), min_size=1, max_size=5))
def test_angles_round_trip(values: list[float]) -> None:
    text = "qubit q; " + " ".join(f"U({angle}, 0, 0) q;" for angle in angle_texts(values))
    openqasm3.parse(text)
    assert read(text).parameters[::3].tobytes() == np.array(values).tobytes()


@given(st.integers(-200, 200), st.integers(1, 64) | st.integers(6, 20).map(lambda k: 2**k), st.integers(-2, 2))
def test_fractions_of_pi(factor: int, divisor: int, ulps: int) -> None:
    value = factor * math.pi / divisor
    for _ in range(abs(ulps)):
        value = math.nextafter(value, math.copysign(math.inf, ulps))
    (text,) = angle_texts([value])
    if not ulps and factor and math.gcd(factor, divisor) == 1:
        assert "pi" in text
    assert read(f"qubit q; U({text}, 0, 0) q;").parameters[0].hex() == value.hex()


def test_spelling_of_angles() -> None:
    values = [
        0.0,
        -0.0,
        math.pi,
        -math.pi,
        2 * math.pi,
        math.pi / 2,
        3 * math.pi / 4,
        -5 * math.pi / 64,
        0.5,
        1e-7,
        1e22,
    ]
    assert angle_texts(values) == [
        "0", "-0.0", "pi", "-pi", "2*pi", "pi/2", "3*pi/4", "-5*pi/64", "0.5", "1.0e-07", "1.0e+22",
    ]  # fmt: skip
    assert angle_texts([math.nextafter(math.pi, 4)]) == ["3.1415926535897936"]
    for bad in (math.nan, math.inf):
        with pytest.raises(CircuitError, match="not finite"):
            written(Builder(1).gate("rx", 0, parameters=[bad]).build())


# ---------------------------------------------------------------- explicit unitaries and native gates


@given(
    st.integers(0, 10**6), st.sampled_from(["haar", "diagonal", "antidiagonal", "near diagonal", "near antidiagonal"])
)
def test_explicit_unitaries_of_one_qubit(seed: int, kind: str) -> None:
    rng = np.random.default_rng(seed)
    u, phases = haar_unitary(2, rng=rng), np.exp(1j * rng.uniform(-4, 4, 2))
    if kind != "haar":
        tilt = 10.0 ** rng.uniform(-18, -1) if "near" in kind else 0.0
        small = np.array([[math.cos(tilt), -math.sin(tilt)], [math.sin(tilt), math.cos(tilt)]])
        u = np.diag(phases) @ small @ (np.eye(2) if "anti" not in kind else np.eye(2)[::-1])
    circuit = Builder(2).unitary(u, 1).gate("cx", 1, 0).unitary(u, 0).build()
    again = read(written(circuit))
    assert [op.name for op in again] == ["U", "cx", "U"]
    assert np.abs(again.unitary() - circuit.unitary()).max() < 4e-15
    assert distance(read(written(circuit, 2)).unitary(), circuit.unitary()) < 6e-15
    assert_same_columns(again, read(written(again)))


def test_explicit_unitaries_of_more_qubits_cannot_be_written() -> None:
    circuit = Builder(3).unitary(np.eye(4), 0, 1).build()
    for version in (2, 3):
        with pytest.raises(CircuitError, match="explicit unitary of 2 qubits cannot be written.*compile the circuit"):
            write(circuit, version=version)


def root_of_xx() -> Gate:
    return Gate("rootxx", 2, 1, lambda p: GATES["rxx"].function(p / 2))


def test_native_gates_with_definitions() -> None:
    gate = root_of_xx()
    circuit = Builder(2).gate(gate, 1, 0, parameters=[0.3]).gate("h", 0).build()
    for version, definition in (
        (3, "gate rootxx(t) a, b { gphase(pi); rxx(t/2) a, b; }"),
        (2, "gate rootxx(t) a, b { gphase(pi); ryy(0) a, b; rxx(t/2) a, b; }"),
    ):
        text = written(circuit, version, definitions={"rootxx": definition, "unused": "gate unused a { }"})
        assert "unused" not in text
        assert ("gphase" in text) == (version == 3)
        # Definitions that a definition uses come first.
        used = "rxx" if version == 3 else "ryy"
        assert text.index(f"gate {used}") < text.index("gate rootxx")
        assert_same_columns(read(text, natives={"rootxx": gate}), circuit)
        assert distance(read(text).unitary(), circuit.unitary()) < 1e-14


@pytest.mark.parametrize(
    "definition",
    [
        "gate rootxx(t) a, b { rxx(t) a, b; }",
        "gate rootxx(t) a, b { nonsense a; }",
        "gate rootxx a, b { cx a, b; }",
        "{",
    ],
)
def test_wrong_definitions_are_refused(definition: str) -> None:
    circuit = Builder(2).gate(root_of_xx(), 1, 0, parameters=[0.3]).build()
    with pytest.raises(CircuitError, match="definition of a native gate cannot be used"):
        write(circuit, definitions={"rootxx": definition})


def test_gates_that_cannot_be_written() -> None:
    with pytest.raises(CircuitError, match="no definition of the gate 'rootxx' in OpenQASM 3"):
        write(Builder(2).gate(root_of_xx(), 1, 0, parameters=[0.3]).build())
    other = Gate("cx", 2, 0, GATES["cz"].function)
    with pytest.raises(CircuitError, match="differs from the 'cx' of qelib1.inc"):
        write(Builder(2).gate(other, 0, 1).build(), version=2)
    with pytest.raises(CircuitError, match="no definition of the gate 'rzz'"):
        write(Builder(2).gate(Gate("rzz", 2, 0, GATES["cz"].function), 0, 1).build())
    with pytest.raises(CircuitError, match="two different gates are called 'cx'"):
        write(Builder(2).gate(other, 0, 1).gate("cx", 0, 1).build())
    with pytest.raises(CircuitError, match="cannot be written"):
        write(Builder(1).gate(Gate("wait", 1), 0).build())
    with pytest.raises(CircuitError, match="unknown version"):
        write(Builder(1).build(), version=4)
    same = Gate("cx", 2, 0, lambda p: 1j * GATES["cx"].function(p))
    assert "cx q[0], q[1];" in written(Builder(2).gate(same, 0, 1).gate("cx", 0, 1).build())


# ---------------------------------------------------------------- the qubit map


@given(st.permutations(range(6)), st.permutations(range(6)), st.integers(1, 6))
def test_maps(initial: list[int], final: list[int], n: int) -> None:
    lines = map_lines(initial[:n], final[:n])
    text = written(Builder(6).gate("x", 0).build(), header=["something else", *lines])
    assert read_map(text) == QubitMap(tuple(initial[:n]), tuple(final[:n]))
    assert [op.name for op in read(text)] == ["x"]


def test_maps_that_are_absent_or_damaged() -> None:
    assert read_map("") is None
    assert read_map("OPENQASM 3.0;\n// qubit map in: 0 -> 1\n") is None
    assert read_map("\ufeff//qubit map in : 1->0,0->3\r\n\n  // qubit map out:0 -> 0, 1 -> 1\n") == QubitMap(
        (3, 0), (0, 1)
    )
    good_in, good_out = map_lines([4, 3], [3, 4])
    for lines in (
        [good_in], [good_out], [good_in, good_out, good_in], [good_in, "// qubit map out: 0 -> 3"],
        ["// qubit map in: 0 -> 4, 2 -> 3", good_out], ["// qubit map in: 0 -> 4, 1 -> 4", good_out],
        ["// qubit map in: 0 -> 4, 0 -> 3", good_out], ["// qubit map in:", good_out], ["// qubit map in: x", good_out],
        ["// qubit map in: 0 -> -1, 1 -> 2", good_out], ["// qubit map in: 0 -> 99999999999, 1 -> 2", good_out],
    ):  # fmt: skip
        with pytest.raises(QasmError, match="qubit map"):
            read_map("\n".join(lines), where="a.qasm")
    with pytest.raises(QasmError, match=r"a\.qasm:2:14: .*it is there twice"):
        read_map(f"{good_in}\n{good_in}", where="a.qasm")
