"""Whole programs: read, compiled for the example devices, proven, written, read back, and run on the same outcomes.

The programs are of our own writing: those in `tests/programs` and in `examples`. Runs are compared by the interpreter
in `tests/interpreter.py`; the text of every output is parsed by the OpenQASM reference parser.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import openqasm3
import pytest

import gatewright as gw
from gatewright.circuit import Circuit
from gatewright.classical import Bits, Literal, Name, Operation, bits_text, expression_text
from gatewright.errors import CircuitError, ProofError
from gatewright.inputs import load
from gatewright.linalg import haar_unitary
from gatewright.program import Assign, Block, If, Leave, Program, While
from gatewright.proof import decode_program_proof
from gatewright.qasm import read, write
from interpreter import run

HERE = Path(__file__).parent
EXAMPLES = HERE.parent / "examples"
FILES = sorted([*(HERE / "programs").glob("*.qasm"), *EXAMPLES.glob("*.qasm")])
DEVICES = {name: EXAMPLES / f"{name}.toml" for name in ("grid-9", "chain-11", "kite-5")}


def device_for(source: Circuit | Program, file: Path) -> gw.Device:
    """Return one of the example devices on which the program fits, a different one from file to file."""
    names = [name for name in DEVICES if gw.read_device(DEVICES[name]).n_qubits >= source.n_qubits]
    return gw.read_device(DEVICES[sorted(names)[len(file.stem) % len(names)]])


def spread(state: np.ndarray, places: tuple[int, ...], n: int) -> np.ndarray:
    """Return a state with its qubits on `places` among n, the others in |0⟩."""
    k = len(places)
    out = np.zeros((2,) * n, dtype=complex)
    index: list[Any] = [0] * n
    for q in places:
        index[q] = slice(None)
    out[tuple(index)] = np.moveaxis(state.reshape((2,) * k), range(k), np.argsort(np.argsort(places)))
    return out.ravel()


def agree(source: Circuit | Program, output: Circuit | Program, initial: Any, final: Any, seed: int) -> float:
    """Run both on the same outcomes; compare bits and variables, and return how far apart the states are."""
    rng = np.random.default_rng(seed)
    values = {name: float(rng.uniform(-3, 3)) for name, _ in source.inputs}
    source, output = source.bind(values), output.bind(values)
    start = haar_unitary(2**source.n_qubits, rng=seed)[:, 0]
    meant = run(source, start, seed)
    made = run(output, spread(start, initial, output.n_qubits), seed)
    assert meant.bits == made.bits
    assert meant.values == made.values
    wanted = spread(meant.state.ravel(), final, output.n_qubits)
    return float(abs(1 - abs(np.vdot(wanted, made.state.ravel()))))


def test_there_are_enough_programs() -> None:
    names = {file.stem for file in FILES}
    assert len(names) >= 25
    assert {"teleportation", "repeat-until-success", "phase-estimation", "syndrome-reset"} <= names


@pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)
def test_programs_compile_and_run_alike(file: Path) -> None:
    source = load(file).circuit
    device = device_for(source, file)
    result = gw.compile(source, device)
    text = result.to_qasm()
    openqasm3.parse(text)
    again = read(text, natives=device.gate_set.natives)
    if isinstance(source, Program):
        assert isinstance(again, Program)
        assert isinstance(result, gw.ProgramResult)
        proofs = decode_program_proof(result.encode_proof())
        verdict = gw.check_program(source, again, proofs, device=device)
    else:
        assert isinstance(again, Circuit)
        assert isinstance(result, gw.Result)
        verdict = gw.check(source, again, device=device, proof=result.proof)
    assert verdict.error_bound < 1e-10
    assert (verdict.initial, verdict.final) == (result.initial, result.final)
    for seed in range(4):
        assert agree(source, again, verdict.initial, verdict.final, seed) < 1e-9


# ---------------------------------------------------------------- the joins

LINE = gw.Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4)], "cz-virtual-z")
V3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'
CONTROLLED = (
    V3 + "qubit[4] q; bit[2] c; int n = 0;\nh q[0]; cx q[0], q[3]; c[0] = measure q[0];\n"
    "if (c[0]) { cx q[0], q[2]; cx q[1], q[3]; n += 1; } else { x q[1]; }\n"
    "while (c[0] && n < 3) { cx q[0], q[1]; cx q[1], q[2]; cx q[2], q[0]; c[0] = measure q[1]; n += 1;"
    " if (n == 2) { break; } cx q[3], q[0]; }\n"
    "c[1] = measure q[2];\n"
)


def compiled() -> tuple[Program, gw.ProgramResult]:
    source = read(CONTROLLED)
    assert isinstance(source, Program)
    result = gw.compile(source, LINE)
    assert isinstance(result, gw.ProgramResult)
    return source, result


def with_body(program: Program, statements: dict[int, Any]) -> Program:
    """Return a program with some statements of its outermost block replaced."""
    body = program.body
    changed = tuple(statements.get(k, old) for k, old in enumerate(body.statements))
    return replace(program, body=Block(body.circuits, changed))


def refused(source: Program, output: Program, proofs: Any) -> str:
    with pytest.raises(ProofError) as caught:
        gw.check_program(source, output, proofs, device=LINE)
    return str(caught.value)


def place_of(program: Program, kind: type) -> int:
    return next(k for k, statement in enumerate(program.body.statements) if isinstance(statement, kind))


def test_damaged_control_is_refused() -> None:
    source, result = compiled()
    output, proofs = result.program, result.proofs
    gw.check_program(source, output, proofs, device=LINE)
    branch = output.body.statements[place_of(output, If)]
    loop = output.body.statements[place_of(output, While)]
    count = output.body.statements[place_of(output, Assign)]
    assert isinstance(branch, If) and isinstance(loop, While) and isinstance(count, Assign)
    here, there, at = place_of(output, If), place_of(output, While), place_of(output, Assign)
    inverted = Operation("!", (branch.condition,))
    other = replace(branch.then, statements=(Assign(Name("n"), Literal("2")),))
    damaged = {
        "condition inverted": {here: If(inverted, branch.then, branch.otherwise)},
        "another bit": {here: If(Bits((1,), True), branch.then, branch.otherwise)},
        "branches exchanged": {here: If(branch.condition, branch.otherwise, branch.then)},
        "loop to a branch": {there: If(loop.condition, loop.body, Block((loop.body.circuits[0].take([]),)))},
        "another loop condition": {there: While(branch.condition, loop.body)},
        "another value": {at: Assign(count.target, Literal("1"))},
        "another target": {at: Assign(Bits((0,), True), count.value)},
        "a statement within": {here: If(branch.condition, other, branch.otherwise)},
    }
    for name, statements in damaged.items():
        assert "not equal" in refused(source, with_body(output, statements), proofs), name
    shorter = Block(output.body.circuits[:-1], output.body.statements[:-1])
    assert "statements" in refused(source, replace(output, body=shorter), proofs)
    assert "variables" in refused(source, replace(output, variables=()), proofs)
    assert "does not fit" in refused(source, output, proofs[:-1])


def test_programs_are_judged_without_their_proofs() -> None:
    source, result = compiled()
    verdict = gw.check_program(source, result.program, device=LINE, initial=result.initial)
    assert (verdict.initial, verdict.final) == (result.initial, result.final)
    assert verdict.error_bound < 1e-9
    branch = result.program.body.statements[place_of(result.program, If)]
    assert isinstance(branch, If)
    turned = If(branch.condition, branch.otherwise, branch.then)
    changed = with_body(result.program, {place_of(result.program, If): turned})
    with pytest.raises(ProofError, match="not equal"):
        gw.check_program(source, changed, device=LINE, initial=result.initial)


def test_a_damaged_gate_is_named_with_its_circuit() -> None:
    source, result = compiled()
    for number, circuit in enumerate(result.program.circuits()):
        if not circuit.count("cz"):
            continue
        remaining = iter(range(1_000_000))

        def dropped(given: Circuit, number: int = number, remaining: Any = remaining) -> Circuit:
            if next(remaining) != number:
                return given
            rows = np.flatnonzero(~given.is_named("cz"))
            return given.take(rows)

        message = refused(source, result.program.map_circuits(dropped), result.proofs)
        assert f"circuit {number} of the program" in message


def test_branches_that_end_apart_are_refused() -> None:
    """The circuits are each proven, and the joins between them are not."""
    text = V3 + "qubit[3] q; bit c; c = measure q[0]; if (c) { cx q[0], q[1]; cx q[1], q[2]; cx q[0], q[2]; }"
    source = read(text)
    assert isinstance(source, Program)
    line = gw.Device.from_graph([(0, 1), (1, 2)], "cz-virtual-z")
    result = gw.compile(source, line)
    assert isinstance(result, gw.ProgramResult)
    branch = source.body.statements[0]
    assert isinstance(branch, If)
    start = gw.check_program(source, result.program, result.proofs, device=line).initial
    elsewhere = next(
        made
        for final in ((0, 1, 2), (2, 1, 0), (1, 0, 2), (0, 2, 1))
        if final != result.final
        for made in [gw.compile(branch.then.circuits[0], line, placement=start, final_placement=final)]
    )
    inside = If(branch.condition, Block((elsewhere.circuit,)), result.program.body.statements[0].otherwise)  # type: ignore[union-attr]
    output = with_body(result.program, {0: inside})
    proofs = list(result.proofs)
    proofs[1] = elsewhere.proof
    with pytest.raises(ProofError, match="the branches of an 'if' leave the qubits on different places"):
        gw.check_program(source, output, proofs, device=line)


def test_a_round_that_moves_the_qubits_is_refused() -> None:
    source = read(V3 + "qubit[2] q; bit c; c = measure q[0]; while (c) { cx q[0], q[1]; c = measure q[0]; }")
    assert isinstance(source, Program)
    line = gw.Device.from_graph([(0, 1)], "cz-virtual-z")
    result = gw.compile(source, line)
    assert isinstance(result, gw.ProgramResult)
    loop = source.body.statements[0]
    assert isinstance(loop, While)
    turned = gw.compile(loop.body.circuits[0], line, placement=result.initial, final_placement=result.initial[::-1])
    output = with_body(result.program, {0: While(loop.condition, Block((turned.circuit,)))})
    proofs = [result.proofs[0], turned.proof, *result.proofs[2:]]
    with pytest.raises(ProofError, match="a round of a loop"):
        gw.check_program(source, output, proofs, device=line)


def test_a_given_placement_at_both_ends() -> None:
    circuit = gw.Builder(3).gate("cx", 0, 1).gate("cx", 1, 2).gate("cx", 2, 0).build()
    for final in ((4, 3, 2), (0, 2, 4), (1, 0, 3)):
        result = gw.compile(circuit, LINE, placement=(2, 0, 1), final_placement=final)
        assert (result.initial, result.final) == ((2, 0, 1), final)
        assert result.verdict.error_bound < 1e-11


def test_the_proof_of_a_program_survives_its_file_and_damage_to_the_file_does_not(tmp_path: Path) -> None:
    source, result = compiled()
    data = result.encode_proof()
    assert data == result.encode_proof()
    path = tmp_path / "p.proof"
    path.write_bytes(data)
    proofs = gw.read_program_proof(path)
    verdict = gw.check_program(source, result.program, proofs, device=LINE)
    assert verdict.error_bound == result.verdict.error_bound
    for cut in (10, len(data) // 2, len(data) - 5):
        path.write_bytes(data[:cut])
        with pytest.raises(ProofError if cut < 0 else gw.GatewrightError):
            gw.read_program_proof(path)


# ---------------------------------------------------------------- text


def test_expressions_need_few_parentheses_and_keep_their_meaning() -> None:
    """Precedence as in the OpenQASM 3 specification's table of operators; Python's own rules agree on these."""
    a, b, c = (Name(name) for name in "abc")
    values = {"a": 5, "b": 3, "c": 6}
    for outer in ("+", "-", "*", "&", "|", "^", "<<", "**"):
        for inner in ("+", "-", "*", "&", "|", "^", "<<", "**"):
            for tree in (
                Operation(outer, (Operation(inner, (a, b)), c)),
                Operation(outer, (a, Operation(inner, (b, c)))),
            ):
                text, full = expression_text(tree, repr), _bracketed(tree)
                try:
                    eval(full, {}, values)  # noqa: S307
                except ValueError:  # a shift by a negative number
                    continue
                assert eval(text, {}, values) == eval(full, {}, values), (text, full)  # noqa: S307
    assert expression_text(Operation("+", (Operation("+", (a, b)), c)), repr) == "a + b + c"
    assert expression_text(Operation("-", (a, Operation("-", (b, c)))), repr) == "a - (b - c)"


def _bracketed(tree: Any) -> str:
    if isinstance(tree, Name):
        return tree.name
    left, right = tree.operands
    return f"({_bracketed(left)} {tree.op} {_bracketed(right)})"


@pytest.mark.parametrize(
    ("bits", "text"),
    [
        (Bits((0,), True), "a[0]"),
        (Bits((0, 1)), "a"),
        (Bits((3, 4)), "b[1:2]"),
        (Bits((1, 2)), "a[{1}] ++ b[{0}]"),
        (Bits((4, 2)), "b[{2, 0}]"),
    ],
)
def test_bits_as_text(bits: Bits, text: str) -> None:
    registers = [("a", 2), ("b", 3)]
    assert bits_text(bits, registers) == text
    program = read(V3 + f"bit[2] a; bit[3] b; qubit q; let some = {text}; if (some == 1) {{ x q; }}")
    assert isinstance(program, Program)
    branch = program.body.statements[0]
    assert isinstance(branch, If) and isinstance(branch.condition, Operation)
    found = branch.condition.operands[0]
    assert found == bits
    again = read(write(program))
    assert isinstance(again, Program) and isinstance(again.body.statements[0], If)
    assert again.body.statements[0].condition == branch.condition


def test_version_2_says_what_it_can() -> None:
    text = 'OPENQASM 2.0;\ninclude "qelib1.inc";\nqreg q[2];\ncreg c[2];\nmeasure q[0] -> c[0];\nif(c==1) x q[1];\n'
    source = read(text)
    assert write(source, version=2).splitlines()[-2:] == text.splitlines()[-2:]
    result = gw.compile(source, LINE)
    again = read(result.to_qasm(version=2), natives=LINE.gate_set.natives)
    assert isinstance(source, Program) and isinstance(result, gw.ProgramResult) and isinstance(again, Program)
    gw.check_program(source, again, result.proofs, device=LINE)
    for body in ("if (c) { x q[0]; } else { y q[0]; }", "while (c) { x q[0]; c[0] = measure q[0]; }"):
        with pytest.raises(CircuitError, match="OpenQASM 2"):
            write(read(V3 + f"qubit[2] q; bit[2] c; {body}"), version=2)


def test_loops_prefer_swaps_before_to_swaps_inside() -> None:
    """Where one swap before a loop spares one in each round, it is placed before."""
    body = "cx q[0], q[4]; c[0] = measure q[0];"
    spread_out = "cx q[0], q[1]; cx q[1], q[2]; cx q[2], q[3]; cx q[3], q[4];" * 3
    source = read(V3 + f"qubit[5] q; bit[1] c; {spread_out} c[0] = measure q[0]; while (c[0]) {{ {body} {body} }}")
    assert isinstance(source, Program)
    result = gw.compile(source, LINE)
    assert isinstance(result, gw.ProgramResult)
    loop = result.program.body.statements[0]
    assert isinstance(loop, While)
    assert loop.body.circuits[0].count("cz") == 2


def test_leaving_words_are_kept() -> None:
    program = read((HERE / "programs" / "early-end.qasm").read_text())
    assert isinstance(program, Program)
    words = [
        s.word
        for st in program.body.statements
        if isinstance(st, If)
        for s in st.then.statements
        if isinstance(s, Leave)
    ]
    assert words == ["end"]
