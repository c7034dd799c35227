"""Whole programs: read, compiled for the example devices, proven, written, read back, and run on the same outcomes.

The programs are of our own writing: those in `tests/programs` and in `examples`. Runs are compared by the interpreter
in `tests/interpreter.py`; the text of every output is parsed by the OpenQASM reference parser.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import openqasm3
import pytest

import gatewright as gw
from gatewright.circuit import Circuit
from gatewright.inputs import load
from gatewright.linalg import haar_unitary
from gatewright.program import Program
from gatewright.proof import decode_program_proof
from gatewright.qasm import read
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
        proofs = [part.proof for part in decode_program_proof(result.encode_proof())]
        verdict = gw.check_program(source, again, proofs, device=device)
    else:
        assert isinstance(again, Circuit)
        assert isinstance(result, gw.Result)
        verdict = gw.check(source, again, device=device, proof=result.proof)
    assert verdict.error_bound < 1e-10
    assert (verdict.initial, verdict.final) == (result.initial, result.final)
    for seed in range(4):
        assert agree(source, again, verdict.initial, verdict.final, seed) < 1e-9
