"""The independent checker: agrees with full unitaries, and lets no damaged output or proof pass."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import gatewright as gw
from circuits import random_circuit
from gatewright.circuit import Builder, Circuit
from gatewright.errors import ProofError
from gatewright.gates import GATES
from gatewright.proof import Proof, Step, check_proof, dense_distance

DEVICES = {
    "line, cz": gw.Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4)], "cz-virtual-z"),
    "star, directed cnot": gw.Device.from_graph([(0, 1), (0, 2), (3, 0), (4, 0)], "cnot-textbook", directed=True),
    "ring, iswap": gw.Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4), (4, 0)], "iswap-virtual-z"),
    "all pairs, xx": gw.Device.from_graph([(i, j) for i in range(5) for j in range(i)], "ion-xx"),
}


@pytest.fixture(scope="module")
def compiled() -> gw.Result:
    circuit = random_circuit(4, 30, 11, measured=True)
    return gw.compile(circuit, DEVICES["line, cz"], seed=3)


@given(st.sampled_from(sorted(DEVICES)), st.integers(1, 5), st.integers(0, 25), st.integers(0, 2**32))
def test_the_bound_holds_against_full_unitaries(device: str, n: int, operations: int, seed: int) -> None:
    circuit = random_circuit(n, operations, seed)
    result = gw.compile(circuit, DEVICES[device], seed=seed % 7)
    distance = dense_distance(circuit, result.circuit, result.initial, result.final)
    assert distance <= result.verdict.error_bound + 2e-14 * (1 + len(result.circuit))
    assert result.verdict.error_bound < 1e-11


def last_step(proof: Proof, **changes: object) -> Proof:
    return Proof((*proof.steps[:-1], replace(proof.steps[-1], **changes)))


def row(circuit: Circuit, name: str, number: int = 0) -> int:
    """Return the place of an operation of that name."""
    kind = next(k for k, gate in enumerate(circuit.table) if gate.name == name)
    return int(np.flatnonzero(circuit.op == kind)[number])


def turned(circuit: Circuit, name: str, by: float) -> Circuit:
    parameters = circuit.parameters.copy()
    parameters[circuit.parameter_offsets[row(circuit, name, 2)]] += by
    return replace(circuit, parameters=parameters)


def renamed(circuit: Circuit, name: str, other: str) -> Circuit:
    op = circuit.op.copy()
    op[row(circuit, name, 1)] = len(circuit.table)
    return replace(circuit, op=op, table=(*circuit.table, GATES[other]))


def requbited(circuit: Circuit, name: str, qubits: list[int]) -> Circuit:
    changed = circuit.qubits.copy()
    start = circuit.offsets[row(circuit, name)]
    changed[start : start + len(qubits)] = qubits
    return replace(circuit, qubits=changed)


def swapped_order(circuit: Circuit) -> Circuit:
    """Exchange two neighbours on one wire that do not commute."""
    for k in range(len(circuit)):
        for j in range(k + 1, len(circuit)):
            if circuit.qubits_of(k) == circuit.qubits_of(j) and len(circuit.qubits_of(k)) == 1:
                a, b = circuit.operation(k).matrix, circuit.operation(j).matrix
                if a is not None and b is not None and not np.allclose(a @ b, b @ a):
                    order = np.arange(len(circuit))
                    order[[k, j]] = [j, k]
                    return circuit.take(order)
                break
            if set(circuit.qubits_of(k)) & set(circuit.qubits_of(j)):
                break
    raise AssertionError("no such pair")


def relinked(circuit: Circuit, bit: int) -> Circuit:
    link = circuit.link.copy()
    link[row(circuit, "measure")] = bit
    return replace(circuit, link=link)


OUTPUT_DAMAGE: dict[str, Callable[[Circuit], Circuit]] = {
    "angle off by 1e-6": lambda c: turned(c, "rz", 1e-6),
    "angle off by -1e-8": lambda c: turned(c, "rz", -1e-8),
    "angle not a number": lambda c: turned(c, "rz", float("nan")),
    "angle out of range": lambda c: turned(c, "rz", 2 * np.pi),
    "sx conjugated": lambda c: renamed(c, "sx", "sxdg"),
    "sx replaced by x": lambda c: renamed(c, "sx", "x"),
    "a pulse dropped": lambda c: c.take(np.delete(np.arange(len(c)), row(c, "sx"))),
    "an entangler dropped": lambda c: c.take(np.delete(np.arange(len(c)), row(c, "cz"))),
    "a pulse doubled": lambda c: c.take(np.insert(np.arange(len(c)), row(c, "sx"), row(c, "sx"))),
    "two gates exchanged": swapped_order,
    "a pulse moved to another qubit": lambda c: requbited(c, "sx", [(c.qubits_of(row(c, "sx"))[0] + 1) % 5]),
    "an entangler on an absent edge": lambda c: requbited(c, "cz", [0, 4]),
    "a measurement into the wrong bit": lambda c: relinked(c, (int(c.link[row(c, "measure")]) + 1) % 4),
    "a measurement of the wrong qubit": lambda c: requbited(
        c, "measure", [(c.qubits_of(row(c, "measure"))[0] + 1) % 5]
    ),
    "a measurement dropped": lambda c: c.take(np.delete(np.arange(len(c)), row(c, "measure"))),
    "a barrier dropped": lambda c: c.take(np.delete(np.arange(len(c)), row(c, "barrier"))),
}


@pytest.mark.parametrize("damage", sorted(OUTPUT_DAMAGE))
def test_damaged_output_is_refused(compiled: gw.Result, damage: str) -> None:
    broken = OUTPUT_DAMAGE[damage](compiled.circuit)
    with pytest.raises(ProofError):
        check_proof(compiled.source, broken, compiled.proof, device=compiled.device, tolerance=1e-9)


def test_a_changed_angle_names_its_window(compiled: gw.Result) -> None:
    at = row(compiled.circuit, "rz", 2)
    with pytest.raises(ProofError) as caught:
        broken = turned(compiled.circuit, "rz", 1e-6)
        check_proof(compiled.source, broken, compiled.proof, device=compiled.device)
    assert caught.value.window == compiled.proof.steps[-1].output_window[at]
    assert set(compiled.circuit.qubits_of(at)) <= set(caught.value.qubits)
    # exp(-i δ/2 Z) is δ/2 from the identity in operator norm, √2 times as much in Frobenius norm on two qubits.
    assert caught.value.distance == pytest.approx(1e-6, rel=0.3)


def moved_seam(step: Step) -> Step:
    """Change the largest seam."""
    seams = step.seams.copy()
    worst = int(np.argmin(np.abs(seams[:, 0])))
    seams[worst] = [1, 0, 0, 0]
    return replace(step, seams=seams)


def exchanged(array: np.ndarray, i: int, j: int) -> np.ndarray:
    out = array.copy()
    out[[i, j]] = out[[j, i]]
    return out


PROOF_DAMAGE: dict[str, Callable[[Step], Step]] = {
    "an output operation in another window": lambda s: replace(
        s, output_window=np.where(np.arange(len(s.output_window)) == 3, s.windows - 1, s.output_window)
    ),
    "a source operation in another window": lambda s: replace(
        s, source_window=np.where(np.arange(len(s.source_window)) == 2, s.windows - 1, s.source_window)
    ),
    "a window that does not exist": lambda s: replace(s, output_window=s.output_window + s.windows),
    "a missing window": lambda s: replace(s, offsets=s.offsets[:-1]),
    "wrong final placement": lambda s: replace(s, final=exchanged(s.final, 0, 1)),
    "wrong initial placement": lambda s: replace(s, initial=exchanged(s.initial, 0, 1)),
    "final placement not a permutation": lambda s: replace(s, final=np.zeros_like(s.final)),
    "a seam lost": moved_seam,
    "a seam that is no quaternion": lambda s: replace(s, seams=2 * s.seams),
    "a seam not a number": lambda s: replace(s, seams=s.seams * np.nan),
    "wires exchanged in a window": lambda s: replace(s, wires=exchanged(s.wires, 0, 1)),
    "exit lost": lambda s: replace(s, exit=s.exit[::-1].copy()),
    "shorter arrays": lambda s: replace(s, output_window=s.output_window[:-1]),
}


@pytest.mark.parametrize("damage", sorted(PROOF_DAMAGE))
def test_damaged_proof_is_refused(compiled: gw.Result, damage: str) -> None:
    steps = compiled.proof.steps
    broken = Proof((*steps[:-1], PROOF_DAMAGE[damage](steps[-1])))
    with pytest.raises(ProofError):
        check_proof(compiled.source, compiled.circuit, broken, device=compiled.device)


def test_an_empty_proof_is_refused(compiled: gw.Result) -> None:
    with pytest.raises(ProofError, match="empty"):
        check_proof(compiled.source, compiled.circuit, Proof(()))


def test_a_proof_of_another_circuit_is_refused(compiled: gw.Result) -> None:
    other = random_circuit(4, 30, 12, measured=True)
    with pytest.raises(ProofError):
        check_proof(other, compiled.circuit, compiled.proof, device=compiled.device)


def test_a_global_phase_passes(compiled: gw.Result) -> None:
    turned_source = replace(compiled.source, phase=1.0)
    verdict = check_proof(turned_source, compiled.circuit, compiled.proof, device=compiled.device)
    assert verdict.error_bound < 1e-11


def test_a_measurement_may_not_overtake_another_into_the_same_bit() -> None:
    builder = Builder(2, 1).gate("x", 0).measure(0, 0).measure(1, 0)
    result = gw.compile(builder.build(), DEVICES["line, cz"])
    rows = np.flatnonzero(~result.circuit.is_unitary)
    order = np.arange(len(result.circuit))
    order[rows] = order[rows[::-1]]
    late, step = result.circuit.take(order), result.proof.steps[-1]
    with pytest.raises(ProofError, match="classical bit"):
        check_proof(result.source, late, Proof((replace(step, output_window=step.output_window[order]),)))


@pytest.mark.parametrize("stage", ["synthesise", "route", "schedule", "expand"])
def test_a_bug_planted_in_a_stage_is_caught_by_the_checker(stage: str) -> None:
    from gatewright.pipeline import CHAIN

    def sabotaged(real: Callable[..., Any]) -> Callable[..., Any]:
        def wrapper(draft: Any) -> Any:
            made = real(draft)
            circuit = made.circuit
            keep = np.ones(len(circuit), dtype=bool)
            keep[np.flatnonzero(circuit.is_unitary & (circuit.widths == 2))[0]] = False
            index = np.flatnonzero(keep)
            changes: dict[str, Any] = {"circuit": circuit.take(index)}
            if stage in ("synthesise", "schedule"):
                last = replace(made.steps[-1], output_window=made.steps[-1].output_window[index])
                changes["steps"] = (*made.steps[:-1], last)
            if stage == "schedule":
                changes["starts"] = made.starts[index]
            if stage == "route":
                changes["origin"] = made.origin[index]
            if stage == "expand":
                changes["expanded"] = changes["circuit"]
            return replace(made, **changes)

        wrapper.__name__ = real.__name__
        return wrapper

    chain = tuple(sabotaged(part) if part.__name__ == stage else part for part in CHAIN)
    circuit = Builder(3).gate("h", 0).gate("cx", 0, 1).gate("cx", 1, 2).gate("cp", 0, 2, parameters=[0.7]).build()
    with pytest.raises(ProofError):
        gw.compile(circuit, DEVICES["line, cz"], chain=chain)


def test_the_checker_imports_nothing_that_it_checks() -> None:
    import gatewright.proof

    forbidden = ("synthesis", "mapping", "stages", "pipeline", "cost")
    for file in Path(gatewright.proof.__file__).parent.glob("*.py"):
        for node in ast.walk(ast.parse(file.read_text())):
            names = [node.module or ""] if isinstance(node, ast.ImportFrom) else []
            names += [alias.name for alias in node.names] if isinstance(node, ast.Import) else []
            for name in names:
                parts = name.split(".")
                assert not (parts[0] == "gatewright" and len(parts) > 1 and parts[1] in forbidden), (file, name)
    program = (
        "import sys, gatewright.proof\n"
        "bad = [m for m in sys.modules if m.startswith('gatewright.') and m.split('.')[1] in "
        f"{forbidden!r}]\n"
        "assert not bad, bad"
    )
    subprocess.run([sys.executable, "-c", program], check=True)
