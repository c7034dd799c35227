"""The compiled scanner of plain statements gives what the reader without it gives: circuits, errors, places."""

from __future__ import annotations

import math
import random

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.circuit import Circuit
from gatewright.errors import GatewrightError
from gatewright.qasm import read, scanner
from gatewright.qasm._kernels import number
from gatewright.qasm.reader import Reader
from gatewright.qasm.source import Source

HEAD = {
    3: 'OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit[5] q;\nqubit[12] long_name;\nqubit one;\nbit[5] c;\n'
    "const float eighth = pi/8;\ngate own(t) a, b { cx a, b; rz(t) b; }\n",
    2: 'OPENQASM 2.0;\ninclude "qelib1.inc";\nqreg q[5];\nqreg long_name[12];\ncreg c[5];\n'
    "gate own(t) a, b { cx a, b; rz(t) b; }\n",
}
GATES = {"h": (1, 0), "cx": (2, 0), "rz": (1, 1), "u3": (1, 3), "ccx": (3, 0), "cu1": (2, 1), "own": (2, 1)}
ODD = (
    "barrier q; |reset q[1];|measure q[0] -> c[0];|h q;|h q[5];|rz() q[0];|rz(1/0) q[0];|cx q[1], q[1];|"
    "u3(1,2) q[0];|rz(2^3) q[0];|rz(2**3) q[0];|foo q[0];|rz(foo) q[0];|h(1) q[0];|h() q[0];|h q [ 1 ];|"
    "rz(1e400) q[2];|;|h q[0] q[1];|h long_name[007];|rz(sin(0.3)) q[0];|rz(0x10) q[0];|rz(1_0) q[0];|"
    "h q[0]|rz(3..1) q[1];|rz(1e) q[1];|rz((1) q[1];|rz(1)) q[1];|cx one, q[0];|h one;|h one[0];|h $1;|"
    "rz(c[0]) q[0];|rz(eighth*2) q[0];|h q[-1];|h q[0:1];|rz(π) q[0];|h é[0];|rz(2 3) q[0];|"
    "rz(tau/euler) q[0];|U(1,2,3) q[0];|rz(+-+1) q[0];|rz(1++1) q[0];|let a = q[0:1];|h a[0];|int k = 3;|"
    "rz(k/2) q[0];|rz(--1) q[1];|rz(1e-300*1e-300) q[1];|rz(-0.0) q[0];|rz(.5e1) q[2];|rz(5.) q[2];|"
    "ccx q[0],q[1],q[0];|pow(2) @ h q[0];|h q[1],;|cx q[0];|rz(1e308*10) q[0];|end;"
).split("|")


@pytest.fixture(autouse=True)
def everywhere(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scanner, "pays", lambda text: False)
    monkeypatch.setattr("gatewright.qasm.reader.pays", lambda text: False)


def angle(rng: random.Random) -> str:
    kind = rng.randrange(8)
    if kind == 0:
        return repr(rng.uniform(-7, 7))
    if kind == 1:
        front, behind = rng.choice(["", "-", "+ "]), rng.choice(["", "/4", " / 16", "*2/3"])
        return f"{front}{rng.choice(['', '3*', '0.7 * '])}pi{behind}"
    if kind == 2:
        return f"({angle(rng)}+{angle(rng)})*-{rng.randrange(9)}"
    if kind == 3:
        return f"{angle(rng)}-{angle(rng)}/({angle(rng)})"
    if kind == 4:
        return f"{rng.uniform(-7, 7):.{rng.randrange(1, 30)}f}"
    if kind == 5:
        return f"{rng.uniform(-7, 7) * 10.0 ** rng.randrange(-30, 10):.{rng.randrange(20)}e}"
    if kind == 6:
        return str(rng.randrange(10 ** rng.randrange(1, 25)))
    return f"-(-{angle(rng)})"


def statement(rng: random.Random, odd: float, version: int) -> str:
    if rng.random() < odd:
        return rng.choice(ODD)
    name = rng.choice(list(GATES))
    if version == 3 and name == "cu1":
        name = "cp"
    n_qubits, n_parameters = GATES.get(name, (2, 1))
    values = ",".join(angle(rng) for _ in range(n_parameters))
    operands = rng.choice([", ", ",", " ,\n\t"]).join(
        rng.choice(["q[{}]", "long_name[{}]", "q[ {} ]"]).format(k) for k in rng.sample(range(5), n_qubits)
    )
    return f"{name}{f'({values})' if n_parameters else ''} {operands};{rng.choice(['', ' ', chr(10)])}"


def outcome(text: str) -> object:
    try:
        made = Reader(Source(text, "x.qasm"), {}).read()
    except GatewrightError as problem:
        return str(problem)
    made = made if isinstance(made, Circuit) else made.joined()
    columns = (made.op, made.qubits, made.offsets, made.parameters, made.parameter_offsets, made.link)
    return made.table, [column.tobytes() for column in columns], made.phase, made.n_qubits, made.n_bits


def with_scanner(text: str, monkeypatch: pytest.MonkeyPatch) -> object:
    with monkeypatch.context() as patch:
        patch.setattr("gatewright.qasm.reader.pays", lambda text: True)
        return outcome(text)


@pytest.mark.parametrize("version", [2, 3])
@pytest.mark.parametrize("odd", [0.0, 0.02, 0.2])
def test_programs_with_and_without_the_scanner(version: int, odd: float, monkeypatch: pytest.MonkeyPatch) -> None:
    rng = random.Random(int(100 * odd) + version)
    for size in [1, 3, 10, 60] * 8:
        text = HEAD[version] + "".join(statement(rng, odd, version) for _ in range(size))
        assert with_scanner(text, monkeypatch) == outcome(text), text


@pytest.mark.parametrize("odd", ODD)
@pytest.mark.parametrize("version", [2, 3])
def test_each_odd_statement_among_plain_ones(odd: str, version: int, monkeypatch: pytest.MonkeyPatch) -> None:
    plain = "h q[0];rz(1) q[1];cx q[0],q[1];u3(1,2,3) q[2];ccx q[0],q[1],q[2];"
    for text in (plain * 3 + odd + plain * 3, plain + odd, plain + odd[:-1], plain + (odd + plain) * 3):
        assert with_scanner(HEAD[version] + text, monkeypatch) == outcome(HEAD[version] + text)


def test_blocks_fill_up(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scanner, "_BLOCK", (7, 15, 9))
    rng = random.Random(5)
    text = HEAD[3] + "".join(statement(rng, 0.05, 3) for _ in range(400)).replace("end;", "")
    text += "".join(statement(rng, 0.0, 3) for _ in range(400))
    assert with_scanner(text, monkeypatch) == outcome(text)


def test_physical_qubits(monkeypatch: pytest.MonkeyPatch) -> None:
    text = 'OPENQASM 3.0; include "stdgates.inc"; h $3; cx $0, $1; h $2; h $12; h $1 ; cx $1,$1;'
    assert with_scanner(text, monkeypatch) == outcome(text)
    assert with_scanner(text[:-10], monkeypatch) == outcome(text[:-10])


def test_the_scanner_reads_most_of_a_plain_program(monkeypatch: pytest.MonkeyPatch) -> None:
    rng = random.Random(3)
    text = HEAD[3] + "".join(f"cx q[1], q[2]; rz({rng.uniform(0, 3)}) q[1];\nrz(3*pi/8) q[0];" for _ in range(500))
    counts: list[int] = []
    finished = scanner.Scanner.columns

    def columns(self: scanner.Scanner) -> scanner.Columns:
        counts.append(self.count)
        return finished(self)

    monkeypatch.setattr(scanner.Scanner, "columns", columns)
    with_scanner(text, monkeypatch)
    assert counts and counts[0] > 1400


TENS = 10.0 ** np.arange(23)


def scanned(text: str) -> float | None:
    value, end = number(np.frombuffer(bytearray(text.encode() + b";;"), np.uint8), 0, TENS)
    return value if end == len(text) else None


@settings(max_examples=200)
@given(
    st.floats(min_value=0, max_value=1e300, allow_subnormal=False), st.sampled_from(["r", "17e", "20e", "15f", "25f"])
)
def test_numbers_are_rounded_as_python_rounds_them(value: float, form: str) -> None:
    text = repr(value) if form == "r" else f"{value:.{form}}"
    assert scanned(text) in (None, float(text))


@settings(max_examples=200)
@given(st.integers(min_value=2**52, max_value=2**53 - 1), st.integers(min_value=-60, max_value=4), st.integers(-3, 3))
def test_numbers_near_the_middle_between_two_floats(mantissa: int, exponent: int, off: int) -> None:
    # The exact decimal of a midpoint and its neighbours in the last place: the hardest to round.
    from decimal import Decimal, localcontext

    with localcontext() as context:
        context.prec = 120
        middle = Decimal(2 * mantissa + 1) * Decimal(2) ** (exponent - 1)
        for digits in (17, 18, 19, 20, 22, 40):
            context.prec = digits
            rounded = +middle
            context.prec = 120
            text = f"{rounded + off * Decimal(10) ** (rounded.adjusted() - digits + 1):f}"
            assert scanned(text) in (None, float(text))


def test_most_numbers_are_told() -> None:
    rng = random.Random(1)
    for form in ("{!r}", "{:.17f}", "{:.15f}", "{:.6f}", "{:.18e}"):
        values = [form.format(rng.uniform(1e-3, 7)) for _ in range(1000)]
        told = [scanned(text) for text in values]
        assert sum(value is None for value in told) <= 60
        assert all(value in (None, float(text)) for value, text in zip(told, values, strict=True))
    assert scanned("1e400") is None and scanned("1..2") is None and scanned("1_0") is None and scanned("e5") is None
    assert scanned("0") == 0 and scanned("0.000") == 0 and scanned("007") == 7 and scanned(".5") == 0.5
    assert math.isclose(scanned("123456789012345678901234567890e-25") or 0, 12345.67890123456, rel_tol=1e-15)


def test_a_large_program_goes_through_it() -> None:
    assert scanner.LARGE > 200_000
    text = HEAD[2] + "rz(0.25) q[1];\n" * 20_000
    assert len(read(text)) == 20_000
