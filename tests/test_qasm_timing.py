"""Delays, boxes and durations of OpenQASM 3, outputs, extern functions, and measurements without a bit."""

from __future__ import annotations

import numpy as np
import openqasm3
import pytest

import gatewright as gw
from gatewright.devices import Device
from gatewright.errors import ProofError, QasmError, UnsupportedError
from gatewright.gates import DELAY
from gatewright.proof import check_proof
from gatewright.qasm import read, write

V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'


def rows(circuit: gw.Circuit) -> list[tuple]:
    return [(op.name, op.qubits, op.parameters) for op in circuit]


@pytest.mark.parametrize(
    ("duration", "nanoseconds"),
    [
        ("100ns", 100.0), ("2us", 2000.0), ("2.5µs", 2500.0), ("1ms", 1e6), ("1s", 1e9), ("0ns", 0.0),
        ("2 * 100ns", 200.0), ("100ns * 2 + 1us", 1200.0), ("1us / 4", 250.0), ("step - 50ns", 250.0),
        ("step * (1us / 500ns)", 600.0), ("-(-step)", 300.0),
    ],
)  # fmt: skip
def test_durations_in_nanoseconds(duration: str, nanoseconds: float) -> None:
    """Units and arithmetic as in the specification's chapter on circuit timing."""
    text = (
        f"{V3}const duration step = 300ns; duration other = step; qubit[2] q; h q[0]; delay[{duration}] q[0]; h q[0];"
    )
    assert rows(read(text))[1] == ("delay", (0,), (nanoseconds,))


def test_the_qubits_of_a_delay() -> None:
    circuit = read(f"{V3}qubit[3] q; delay[5ns] q[2], q[0]; delay[6ns] q; delay[7ns];")
    assert rows(circuit) == [
        ("delay", (2, 0), (5.0,)), ("delay", (0, 1, 2), (6.0,)), ("delay", (0, 1, 2), (7.0,)),
    ]  # fmt: skip
    text = write(circuit)
    assert "delay[5ns] q[2], q[0];" in text
    assert isinstance(openqasm3.parse(text).statements[2], openqasm3.ast.DelayInstruction)
    assert rows(read(text)) == rows(circuit)


@pytest.mark.parametrize("value", [0.1, 1e-7, 123456.789, 3.0, 1e22])
def test_a_delay_is_written_to_the_last_bit(value: float) -> None:
    circuit = gw.Builder(1).delay(value, 0).build()
    assert rows(read(write(circuit))) == rows(circuit)
    with pytest.raises(gw.errors.CircuitError, match="cannot be written in OpenQASM 2"):
        write(circuit, version=2)


def test_a_box_keeps_its_contents_between_barriers() -> None:
    circuit = read(f"{V3}qubit[3] q; h q[0]; box {{ x q[2]; delay[10ns] q[0]; cx q[0], q[2]; }} box {{ }} h q[1];")
    assert rows(circuit) == [
        ("h", (0,), ()), ("barrier", (0, 2), ()), ("x", (2,), ()), ("delay", (0,), (10.0,)), ("cx", (0, 2), ()),
        ("barrier", (0, 2), ()), ("h", (1,), ()),
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("body", "line", "column", "kind", "message"),
    [
        ("delay[10dt] q;", 4, 6, UnsupportedError, "a duration in 'dt'"),
        ("delay[10] q;", 4, 6, QasmError, "a delay has no duration"),
        ("delay[0.5 * 2] q;", 4, 6, QasmError, "a delay has no duration"),
        ("delay[1ns - 2ns] q;", 4, 6, QasmError, "a delay is negative"),
        ("delay[1ns * 2ns] q;", 4, 6, QasmError, "between duration and duration"),
        ("delay[1ns + 2] q;", 4, 6, QasmError, "between duration and int"),
        ("delay[durationof({ x q; })] q;", 4, 6, UnsupportedError, "'durationof'"),
        ("delay[1ns] q, q;", 4, 1, QasmError, "repeated"),
        ("box[10ns] { x q; }", 4, 1, UnsupportedError, "a box of a stated duration"),
        ("stretch a;", 4, 1, UnsupportedError, "'stretch'"),
        ("gate g a { delay[1ns] a; }", 4, 12, UnsupportedError, "'delay'"),
        ("extern f(int) -> int; int k = f(2);", 4, 31, UnsupportedError, "a call of the extern function 'f'"),
        ("extern f(qubit a); f(q[0]);", 4, 10, QasmError, "does not fit the grammar"),
        ("if (true) { output bit b; }", 4, 13, QasmError, "must be global"),
    ],
)
def test_what_is_refused(body: str, line: int, column: int, kind: type[Exception], message: str) -> None:
    with pytest.raises(kind, match=message) as caught:
        read(f"{V3}qubit[2] q;\n{body}", where="x.qasm")
    assert (caught.value.line, caught.value.column) == (line, column)


def test_an_extern_function_may_be_declared() -> None:
    assert len(read(f"{V3}extern f(int[8], float) -> bit; qubit q; x q;")) == 1


def test_outputs_are_kept() -> None:
    outputs = "output bit[2] c; output float angle_of_q;"
    circuit = read(f"{V3}qubit[2] q; {outputs} angle_of_q = 0.5; rx(angle_of_q) q[0]; c = measure q;")
    assert circuit.bit_registers == (("c", 2),)
    assert [op.bit for op in circuit if op.name == "measure"] == [0, 1]


def test_measurements_without_a_bit() -> None:
    text = f"{V3}qubit[2] q; bit c; measure q; h q[0]; measure q[0]; c = measure q[1];"
    text += " def m(qubit a) -> bit { return measure a; } m(q[1]);"
    circuit = read(text)
    assert circuit.bit_registers == (("c", 1), ("unread_outcomes", 2))
    assert [op.bit for op in circuit if op.name == "measure"] == [1, 2, 1, 0, 2]
    result = gw.compile(circuit, Device.from_graph([(0, 1)], "cz-virtual-z"))
    openqasm3.parse(result.to_qasm())


def compiled() -> gw.Result:
    device = Device.from_graph([(0, 1), (1, 2), (2, 3)], "cz-virtual-z")
    text = f"{V3}qubit[3] q; h q[0]; cx q[0], q[2]; delay[100ns] q[0], q[2]; h q[0]; delay[40ns] q[0]; cx q[0], q[2];"
    return gw.compile(read(text), device)


def test_nothing_crosses_a_delay() -> None:
    result = compiled()
    names = [op.name for op in result.circuit if op.name in ("cz", "delay")]
    assert names == ["cz", "delay", "delay", "cz"]
    waits = [op.parameters for op in result.circuit if op.name == "delay"]
    assert waits == [(100.0,), (40.0,)]
    again = read(result.to_qasm())
    assert [op.parameters for op in again if op.name == "delay"] == waits


def test_the_proof_covers_delays() -> None:
    result = compiled()
    k = next(k for k, op in enumerate(result.circuit) if op.name == "delay")
    parameters = result.circuit.parameters.copy()
    parameters[result.circuit.parameter_offsets[k]] += 1
    from dataclasses import replace

    changed = replace(result.circuit, parameters=parameters)
    with pytest.raises(ProofError, match="not equal"):
        check_proof(result.source, changed, result.proof, device=result.device, tolerance=1e-9)


def test_delays_count_in_the_duration_and_as_idling() -> None:
    device = Device.from_graph([(0, 1)], "cz-rz-rx")
    plain = gw.Builder(2).gate("cz", 0, 1).gate("cz", 0, 1)
    short = gw.compile(gw.Builder(2).gate("cz", 0, 1).delay(0, 0, 1).gate("cz", 0, 1).build(), device)
    long = gw.compile(gw.Builder(2).gate("cz", 0, 1).delay(500, 0, 1).gate("cz", 0, 1).build(), device)
    assert long.costs.duration_ns == short.costs.duration_ns + 500
    assert long.costs.operations == short.costs.operations and long.costs.depth == short.costs.depth
    assert gw.compile(plain.build(), device).costs.two_qubit_gates == 0
    assert np.count_nonzero(long.circuit.is_named(DELAY.name)) == 1
