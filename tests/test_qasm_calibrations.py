"""Calibration statements pass through untouched: ``cal``, ``defcal``, ``defcalgrammar`` (OpenQASM 3 specification)."""

from __future__ import annotations

from pathlib import Path

import openqasm3
import pytest

import gatewright as gw
from gatewright.circuit import Circuit
from gatewright.devices import Device
from gatewright.errors import CircuitError, GatewrightError, UnsupportedError
from gatewright.qasm import read, write

V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'
BLOCKS = (
    'defcalgrammar "openpulse";',
    "cal {\n  extern frame drive(qubit); // a comment; with a brace\n  waveform w = {1.0, 0.5};\n}",
    "defcal x $0 {\n  play(drive($0), w); if (true) { shift_phase(drive($0), pi); }\n}",
    "defcal rz(angle[20] theta) $1 { shift_phase(drive($1), -theta); }",
    "defcal measure $0 -> bit { return capture(drive($0)); }",
)
TEXT = (
    'OPENQASM 3.0;\ninclude "stdgates.inc";\n'
    + "\n".join(BLOCKS)
    + "\nqubit[2] q;\nbit c;\nx q[0];\ncx q[0], q[1];\nc = measure q[0];\n"
)


def test_they_are_kept_as_they_stand_and_written_back() -> None:
    circuit = read(TEXT)
    assert circuit.calibrations == BLOCKS
    assert [op.name for op in circuit] == ["x", "cx", "measure"]
    text = write(circuit)
    assert all(block in text for block in BLOCKS)
    names = [type(statement).__name__ for statement in openqasm3.parse(text).statements]
    assert names[1:6] == [
        "CalibrationGrammarDeclaration", "CalibrationStatement", *["CalibrationDefinition"] * 3,
    ]  # fmt: skip
    assert read(text).calibrations == BLOCKS


def test_they_survive_compilation() -> None:
    result = gw.compile(read(TEXT), Device.from_graph([(0, 1)], "cz-virtual-z"))
    assert read(result.to_qasm()).calibrations == BLOCKS


@pytest.mark.parametrize(
    ("body", "kind", "message"),
    [
        ("cal { {", GatewrightError, "'cal' is not closed"),
        ("defcal x $0 }", GatewrightError, "'defcal' is not closed"),
        ("defcal x $0", GatewrightError, "'defcal' is not closed"),
        ('defcalgrammar "openpulse"', GatewrightError, "'defcalgrammar' is not closed"),
        ("defcal buzz $0 { } buzz q[0];", UnsupportedError, "'buzz', which only a 'defcal' defines"),
        ("bit c; c = measure q[0]; cal { } if (c) x q[0];", UnsupportedError, "beside control"),
        ("for int k in [0:1] { cal { } }", GatewrightError, ""),
    ],
)
def test_what_is_refused(body: str, kind: type[Exception], message: str) -> None:
    with pytest.raises(kind) as caught:
        read(f'OPENQASM 3.0; include "stdgates.inc"; qubit[2] q;\n{body}')
    assert message in str(caught.value)


def test_openqasm_2_cannot_say_it() -> None:
    with pytest.raises(CircuitError, match="no 'cal'"):
        write(read(TEXT), version=2)


# ---------------------------------------------------------------- gates that only a calibration defines

BUZZ = (
    V3 + "defcal buzz(angle[20] t) $1 { play(drive($1), t); }\ndefcal herald $0, $2 { }\ndefcal park q { }\nbit c;\n"
    "h $0; cx $0, $1; buzz(pi/4) $1; cx $1, $2; herald $0, $2; park $1; ccx $0, $1, $2; rz(0.3) $0; c = measure $0;\n"
)
LINE = Device.from_graph([(0, 1), (1, 2), (2, 3), (0, 2)], "cz-virtual-z")


def test_gates_that_only_a_calibration_defines_are_native_as_they_stand(tmp_path: Path) -> None:
    source = read(BUZZ)
    assert isinstance(source, Circuit)
    assert [op.name for op in source] == [
        "h", "cx", "buzz", "cx", "herald", "park", "ccx", "rz", "measure",
    ]  # fmt: skip
    result = gw.compile(source, LINE)
    assert result.initial == result.final == (0, 1, 2)
    text = result.to_qasm()
    openqasm3.parse(text)
    assert (
        "buzz(pi/4) $1;" in text
        and "herald $0, $2;" in text
        and "park $1;" in text
        and "qubit" not in text.split("defcal")[0][-60:]
    )
    assert result.costs.duration_ns is None and result.costs.success_estimate is None
    path = tmp_path / "p.proof"
    path.write_bytes(result.encode_proof())
    output = read(text, natives=LINE.gate_set.natives)
    verdict = gw.check(source, output, device=LINE, proof=gw.read_proof(path))
    assert verdict.error_bound == result.verdict.error_bound


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("buzz(pi/4) $1;", "buzz(pi/2) $1;", "differs"),
        ("park $1;", "", ""),
        ("herald $0, $2;", "herald $2, $0;", "none for these qubits"),
        ("buzz(pi/4) $1;", "buzz(pi/4) $0;", "none for these qubits"),
    ],
)
def test_damage_to_them_is_found(old: str, new: str, message: str) -> None:
    source = read(BUZZ)
    result = gw.compile(source, LINE)
    assert isinstance(source, Circuit) and isinstance(result, gw.Result)
    with pytest.raises(GatewrightError) as caught:
        output = read(result.to_qasm().replace(old, new), natives=LINE.gate_set.natives)
        gw.check(source, output, device=LINE, proof=result.proof)
    assert message in str(caught.value)


@pytest.mark.parametrize(
    ("body", "message"),
    [
        ("defcal buzz $1 { }\n buzz $0;", "4:2: 'buzz', which only a 'defcal' defines, has none for these qubits"),
        ("defcal buzz $1 { } buzz(0.1) $1;", "number of parameters"),
        ("defcal buzz $1 { } ctrl @ buzz $0, $1;", "not unitary"),
        ("input angle a; defcal buzz(angle t) $1 { } buzz(a) $1;", "not known when compiling"),
    ],
)
def test_what_they_cannot_do(body: str, message: str) -> None:
    with pytest.raises(GatewrightError) as caught:
        read(f"{V3}{body}")
    assert message in str(caught.value)


def test_they_are_not_moved() -> None:
    line = Device.from_graph([(0, 1), (1, 2)], "cz-virtual-z")
    text = V3 + "defcal buzz $0 { } cx $0, $2; buzz $0; cx $0, $1; cx $1, $2; cx $0, $2; buzz $0;"
    with pytest.raises(UnsupportedError, match="routing would move 'buzz'"):
        gw.compile(read(text), line)
    with pytest.raises(GatewrightError, match="stay on their physical qubits"):
        gw.compile(read(V3 + "defcal buzz $0 { } buzz $0; h $1;"), line, placement=(1, 0))
