"""Calibration statements pass through untouched: ``cal``, ``defcal``, ``defcalgrammar`` (OpenQASM 3 specification)."""

from __future__ import annotations

import openqasm3
import pytest

import gatewright as gw
from gatewright.devices import Device
from gatewright.errors import CircuitError, GatewrightError, UnsupportedError
from gatewright.qasm import read, write

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
        ("defcal buzz $0 { } buzz q[0];", UnsupportedError, "calling 'buzz', which has a 'defcal'"),
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
