"""Damaged programs, small and of a megabyte, get one line of complaint or a circuit: no traceback, no hang."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import GatewrightError
from gatewright.qasm import read, read_map
from qasm_corpus import LARGE, PROGRAMS, damaged

#: Valid programs of a megabyte take their time, which the benchmark tells; here each is read once in the short.
LONG = {
    "annotations", "arrays", "bits", "broadcasts", "calls", "definitions, not plain", "distinct angles",
    "distinct functions", "known bits", "long definition", "loops in a row", "many controls",
    "measurements", "plain and not", "powers of a gate", "pragmas", "variables", "version 2, conditions",
}  # fmt: skip


#: What is refused for its size, and what the message says.
CAPS = {
    "parentheses": "10000 characters",
    "parentheses, not plain": "100 levels",
    "blocks": "100 levels",
    "headers": "100 levels",
    "definitions in a row": "100 levels",
    "broadcasts": "10000000",
    "barriers": "40000000",
    "loop": "1000000 elements",
    "loops": "1000000 gates",
    "endless loop": "1000000 gates",
    "endless recursion": "40 levels",
    "calls in each other": "40 levels",
    "doubling definitions": "10000000",
    "large array": "1000000 elements",
    "wide type": "4096",
    "sum, not plain": "20000 tokens",
    "aliases": "100000 elements",
    "repeated gate": "1000000",
    "distinct powers": "a distinct fractional power for 200",
    "controls of a number": "100000",
}


def outcome(text: str) -> str:
    """Return the complaint about a program, or nothing."""
    try:
        read_map(text, where="x.qasm")
        read(text, where="x.qasm")
    except GatewrightError as problem:
        message = str(problem)
        assert "\n" not in message and message.startswith("x.qasm") and len(message) < 2000
        return message
    return ""


@pytest.mark.parametrize("name", sorted(PROGRAMS))
def test_the_programs_themselves_are_read(name: str) -> None:
    assert outcome(PROGRAMS[name]) == ""


@settings(max_examples=150, derandomize=True)
@given(st.integers(0, 10**9))
def test_damaged_programs(seed: int) -> None:
    outcome(damaged(seed))


@settings(max_examples=60, derandomize=True)
@given(st.binary(max_size=200), st.sampled_from(sorted(PROGRAMS)), st.integers(0, 2000))
def test_any_characters_in_a_program(splinter: bytes, name: str, at: int) -> None:
    text = PROGRAMS[name]
    outcome(text[:at] + splinter.decode("latin-1") + text[at:])


@pytest.mark.parametrize("name", sorted(set(LARGE) - LONG - set(CAPS)))
def test_large_programs(name: str) -> None:
    outcome(LARGE[name]())


@pytest.mark.parametrize("name", sorted(LONG))
def test_the_beginnings_of_long_programs(name: str) -> None:
    outcome(LARGE[name]()[:10_000])


@pytest.mark.parametrize("name", sorted(CAPS))
def test_caps_are_in_the_messages(name: str) -> None:
    assert CAPS[name] in outcome(LARGE[name]())


@pytest.mark.parametrize("form", ["{}", "mod({}, 7)", "float({})"])
@pytest.mark.parametrize("operator", ["+", "-", "*"])
def test_long_expressions(form: str, operator: str) -> None:
    head = 'OPENQASM 3.0; include "stdgates.inc"; qubit q;\n'
    assert outcome(f"{head}rz({form.format(operator.join(['1'] * 300))}) q;") == ""
    refused = outcome(f"{head}rz({form.format(operator.join(['1'] * 12000))}) q;")
    assert refused.startswith("x.qasm:2:") and "required" in refused


@pytest.mark.parametrize(
    "path", ["/etc/passwd", "../other.qasm", "./stdgates.inc", "x.qasm", "stdgates.inc\\0", "", "/dev/zero"]
)
def test_no_file_is_ever_included(path: str) -> None:
    assert "cannot be included" in outcome(f'OPENQASM 3.0; include "{path}"; qubit q;')


@pytest.mark.parametrize("form", ["if ({} == 1) x q;", "int k = {};", "rx(float({})) q;"])
def test_long_expressions_that_depend_on_the_run(form: str) -> None:
    head = 'OPENQASM 3.0; include "stdgates.inc"; qubit q; bit[2] c;\nc[0] = measure q;\n'
    assert outcome(head + form.format("+".join(["c[0]"] * 100))) == ""
    assert "200 operations" in outcome(head + form.format("+".join(["c[0]"] * 3000)))


def test_a_call_without_operands_behind_one_with_them() -> None:
    head = 'OPENQASM 3.0; include "stdgates.inc"; qubit q;\nx q;\n'
    assert "3:1: wrong number of qubits" in outcome(head + "x ;")
