"""Judging without a proof: every method against full unitaries, and 'undecided' where none can tell."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import expm

import gatewright as gw
from circuits import random_circuit
from gatewright.circuit import Builder, Circuit
from gatewright.errors import ProofError, UndecidedError
from gatewright.linalg import distance
from gatewright.proof import check_proof
from gatewright.proof.judge import judge
from gatewright.proof.matching import Stuck, match_circuits
from gatewright.proof.phase_polynomial import NotMonomial, compare_phase_polynomials
from gatewright.proof.states import compare_states
from gatewright.proof.tableau import NotClifford, compare_tableaus

DEVICES = {
    "line, cz": gw.Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4)], "cz-virtual-z"),
    "ring, iswap": gw.Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4), (4, 0)], "iswap-virtual-z"),
    "all pairs, xx": gw.Device.from_graph([(i, j) for i in range(5) for j in range(i)], "ion-xx"),
}
CLIFFORD = ("h", "s", "sdg", "x", "y", "z", "sx", "cx", "cz", "cy", "swap", "iswap")
MONOMIAL = ("x", "z", "s", "t", "rz", "p", "cx", "cz", "swap", "cp", "rzz", "ccz", "y")


def drawn(n: int, operations: int, seed: int, names: tuple[str, ...]) -> Circuit:
    rng = np.random.default_rng(seed)
    builder = Builder(n)
    known = [gate for gate in gw.gates.GATES.values() if gate.name in names and gate.n_qubits <= n]
    for _ in range(operations):
        gate = known[rng.integers(len(known))]
        values = rng.choice([0.3, np.pi / 4, -np.pi / 2, 2.5, 7.0], gate.n_parameters).tolist()
        builder.gate(gate, *rng.permutation(n)[: gate.n_qubits].tolist(), parameters=values)
    return builder.build()


def rewired(circuit: Circuit, places: list[int]) -> Circuit:
    return replace(circuit, qubits=np.array(places, dtype=np.int32)[circuit.qubits])


def without(circuit: Circuit, k: int) -> Circuit:
    return circuit.take(np.delete(np.arange(len(circuit)), k))


@given(st.sampled_from(sorted(DEVICES)), st.integers(1, 5), st.integers(0, 20), st.integers(0, 2**32), st.booleans())
@settings(max_examples=60)
def test_what_matching_finds_holds(device: str, n: int, operations: int, seed: int, stated: bool) -> None:
    circuit = random_circuit(n, operations, seed, widest=2, measured=seed % 3 == 0)
    result = gw.compile(circuit, DEVICES[device], seed=seed % 5)
    found = match_circuits(circuit, result.circuit, result.initial if stated else None)
    if isinstance(found, Stuck):
        return
    try:
        verdict = check_proof(circuit, result.circuit, found.proof)
    except ProofError:
        assert not stated  # wires that look alike may be bound to the wrong ones; the checker says so
        return
    if stated:
        assert verdict.initial == result.initial


def test_matching_goes_through_on_generic_circuits() -> None:
    rng = np.random.default_rng(4)
    for device in DEVICES.values():
        builder = Builder(5, 5)
        for k in range(40):
            a, b = rng.permutation(5)[:2].tolist()
            for q in (a, b):  # so that no two neighbours commute
                builder.gate("u3", q, parameters=rng.uniform(-3, 3, 3).tolist())
            builder.gate("cx", a, b)
            if k == 20:
                builder.barrier(0, 1, 2)
        for q in range(5):
            builder.measure(q, 4 - q)
        source = builder.build()
        result = gw.compile(source, device, seed=2)
        for places in (result.initial, None):
            verdict = judge(source, result.circuit, initial=places)
            assert (verdict.initial, verdict.final) == (result.initial, result.final)
            assert "blocks matched" in verdict.method
        entangler = int(np.flatnonzero(result.circuit.widths == 2)[7])
        with pytest.raises(ProofError):
            judge(source, without(result.circuit, entangler), initial=result.initial, final=result.final)


def test_a_trivial_block_keeps_nothing_apart() -> None:
    source = Builder(3)
    for name, *qubits in (("cx", 0, 1), ("cx", 1, 2), ("cx", 1, 2), ("cx", 0, 1), ("h", 0), ("cx", 0, 2)):
        source.gate(name, *qubits)
    output = Builder(3).gate("h", 0).gate("cx", 0, 2).build()
    found = match_circuits(source.build(), output, (0, 1, 2))
    assert not isinstance(found, Stuck)
    assert check_proof(source.build(), output, found.proof).error_bound < 1e-12


@given(st.integers(1, 5), st.integers(0, 40), st.integers(0, 2**32))
@settings(max_examples=60)
def test_tableaus_agree_with_full_unitaries(n: int, operations: int, seed: int) -> None:
    one, two = drawn(n, operations, seed, CLIFFORD), drawn(n, operations, seed + 1, CLIFFORD)
    for first, second in ((one, two), (one, one), (one, without(one, operations // 2) if operations else one)):
        bound, _, difference = compare_tableaus(first, second, range(n), range(n))
        true = float(distance(first.unitary(), second.unitary()))
        assert (true < 1e-9) == (difference == "")
        if not difference:
            assert true <= bound + 1e-12 and bound < 1e-10


def test_tableaus_find_where_the_wires_end_and_mind_the_idle_ones() -> None:
    source = drawn(4, 30, 1, CLIFFORD)
    builder = Builder(6)
    for op in rewired(source, [4, 1, 3, 0]):
        builder.gate(op.name, *op.qubits, parameters=op.parameters)
    builder.gate("swap", 4, 2).gate("cz", 4, 5)
    bound, final, difference = compare_tableaus(source, builder.build(), [4, 1, 3, 0])
    assert (final, difference) == ((2, 1, 3, 0), "") and bound < 1e-10
    builder.gate("h", 5)
    assert "|0⟩" in compare_tableaus(source, builder.build(), [4, 1, 3, 0], [2, 1, 3, 0])[2]
    with pytest.raises(NotClifford):
        compare_tableaus(source, Builder(4).gate("t", 0).build(), range(4))
    near = Builder(1).gate("rz", 0, parameters=[np.pi / 2 + 1e-11]).build()
    bound, _, difference = compare_tableaus(Builder(1).gate("s", 0).build(), near, [0], [0])
    assert difference == "" and 0.5e-11 < bound < 1e-9


def test_tableaus_of_a_thousand_qubits() -> None:
    n = 1000
    rng = np.random.default_rng(0)
    forward, backward = Builder(n), []
    for _ in range(1500):
        a, b = rng.permutation(n)[:2].tolist()
        forward.gate("h", a).gate("cx", a, b)
        backward += [("cx", a, b), ("h", a)]
    for name, *qubits in reversed(backward):
        forward.gate({"cx": "cx", "h": "h"}[name], *qubits)
    done = forward.build()
    turned = done.take(np.concatenate([np.arange(3000), np.arange(3000)[::-1]]))
    assert compare_tableaus(Builder(n).build(), turned, range(n), range(n))[2] == ""


@given(st.integers(1, 5), st.integers(0, 40), st.integers(0, 2**32))
@settings(max_examples=60)
def test_phase_polynomials_agree_with_full_unitaries(n: int, operations: int, seed: int) -> None:
    one, two = drawn(n, operations, seed, MONOMIAL), drawn(n, operations, seed + 1, MONOMIAL)
    for first, second in ((one, two), (one, one), (one, without(one, operations // 2) if operations else one)):
        bound, _, difference = compare_phase_polynomials(first, second, range(n), range(n))
        true = float(distance(first.unitary(), second.unitary()))
        assert (true < 1e-8) == (difference == ""), difference
        if not difference:
            assert true <= bound + 1e-12 and bound < 1e-9
        else:
            assert bound <= true + 1e-9


def test_phase_polynomials_know_identities_beyond_single_terms() -> None:
    # CCZ by its seven parities, each π/4 (Nielsen and Chuang, section 4.3, for the Toffoli gate).
    meant = Builder(3).gate("ccz", 0, 1, 2).build()
    made = Builder(3)
    for q in range(3):
        made.gate("t", q)
    for a, b in ((0, 1), (1, 2), (0, 2)):
        made.gate("cx", a, b).gate("tdg", b).gate("cx", a, b)
    made.gate("cx", 0, 2).gate("cx", 1, 2).gate("t", 2).gate("cx", 1, 2).gate("cx", 0, 2)
    assert compare_phase_polynomials(meant, made.build(), range(3), range(3))[2] == ""
    # 2π in every parity of two bits is trivial although no single term of the gates is.
    twice = Builder(2).gate("cz", 0, 1).gate("cz", 0, 1).build()
    assert compare_phase_polynomials(Builder(2).build(), twice, range(2), range(2))[2] == ""
    with pytest.raises(NotMonomial):
        compare_phase_polynomials(meant, Builder(3).gate("h", 0).build(), range(3))


@given(st.integers(1, 6), st.sampled_from([1e-2, 1e-4, 1e-6]), st.integers(0, 2**32))
@settings(max_examples=40)
def test_the_bound_of_random_states_holds_for_planted_differences(n: int, size: float, seed: int) -> None:
    rng = np.random.default_rng(seed)
    source = random_circuit(n, 15, seed, barriers=False)
    generator = rng.standard_normal((2**n, 2**n)) + 1j * rng.standard_normal((2**n, 2**n))
    generator = generator + generator.conj().T
    if seed % 2:
        # The hardest to see: one input alone is changed.
        vector = rng.standard_normal(2**n) + 1j * rng.standard_normal(2**n)
        generator = np.outer(vector, vector.conj())
    generator /= np.linalg.norm(generator, 2)
    output = Builder(n)
    for op in source:
        if op.name == "unitary":
            output.unitary(op.matrix, *op.qubits)
        else:
            output.gate(op.name, *op.qubits, parameters=op.parameters)
    planted = output.unitary(expm(1j * size * generator), *range(n)).build()
    said = compare_states(source, planted, range(n), range(n), seed=seed % 97)
    # Distance for the phase that was fixed beforehand: at most 2 sin(size/2) plus what the phase is off.
    true = float(distance(planted.unitary(), source.unitary()))
    assert true <= said.bound
    assert said.apart <= true + 1e-12
    assert "except with probability ≤ s^k" in said.statement
    same = compare_states(source, source, range(n), range(n))
    assert same.residual < 1e-12 and same.apart == 0.0 and same.bound < 1e-9


def test_random_states_decide_where_matrices_are_too_large() -> None:
    n = 14
    source = drawn(n, 60, 3, ("t", "h", "cx", "ccz"))
    output = Builder(n)
    for op in source:
        if op.name == "h":
            output.gate("rz", op.qubits[0], parameters=[np.pi]).gate("ry", op.qubits[0], parameters=[np.pi / 2])
        elif op.name == "ccz":
            a, b, c = op.qubits
            output.gate("ccx", a, b, c).gate("h", c).gate("ccx", a, b, c).gate("ccz", a, b, c).gate("ccx", a, b, c)
            output.gate("h", c).gate("ccx", a, b, c)
        else:
            output.gate(op.name, *op.qubits, parameters=op.parameters)
    made = output.build()
    said = compare_states(source, made, range(n), range(n), vectors=2)
    assert said.apart > 0.1 or said.bound < 1e-7


DECIDED: dict[str, tuple[Callable[[], Circuit], Callable[[], Circuit], str]] = {
    "matching": (
        lambda: Builder(2).gate("swap", 0, 1).build(),
        lambda: Builder(2).gate("cx", 0, 1).gate("cx", 1, 0).gate("cx", 0, 1).build(),
        "blocks matched",
    ),
    "tableaus": (
        lambda: Builder(3).gate("ccx", 0, 1, 2).gate("ccx", 0, 1, 2).gate("cz", 0, 1).gate("cz", 1, 2).build()[2:],
        lambda: Builder(3).gate("cz", 1, 2).gate("h", 1).gate("cx", 0, 1).gate("h", 1).build(),
        "",
    ),
    "phase polynomials": (
        lambda: Builder(3).gate("ccz", 0, 1, 2).gate("t", 0).build(),
        lambda: Builder(3).gate("t", 0).gate("ccz", 1, 2, 0).build(),
        "phase polynomials",
    ),
    "full unitaries": (
        lambda: Builder(3).gate("ccx", 0, 1, 2).build(),
        lambda: Builder(3).gate("h", 2).gate("ccz", 0, 1, 2).gate("h", 2).build(),
        "full unitaries",
    ),
}


@pytest.mark.parametrize("what", sorted(DECIDED))
def test_each_method_decides_its_own(what: str) -> None:
    source, output, method = DECIDED[what]
    verdict = judge(source(), output())
    assert method in verdict.method
    assert verdict.error_bound < 1e-9
    assert distance(source().unitary(), output().unitary()) <= verdict.error_bound


@pytest.mark.parametrize(
    ("source", "output", "witness"),
    [
        (Builder(2).gate("cx", 0, 1), Builder(2).gate("cx", 1, 0), "some wire"),
        (Builder(1).gate("t", 0), Builder(1).gate("tdg", 0), "phase of |1⟩"),
        (Builder(3).gate("ccx", 0, 1, 2), Builder(3).gate("ccx", 1, 2, 0).gate("h", 0), "on the input"),
        (Builder(2, 1).gate("h", 0).measure(0, 0), Builder(2, 1).gate("h", 0).measure(1, 0), ""),
        (Builder(2).gate("h", 0), Builder(1).gate("h", 0), "more qubits"),
    ],
)
def test_a_difference_comes_with_a_witness(source: Builder, output: Builder, witness: str) -> None:
    with pytest.raises(ProofError, match="not equal|undecided") as caught:
        judge(source.build(), output.build(), initial=range(source.n_qubits))
    assert witness in str(caught.value)


@given(st.integers(1, 4), st.integers(0, 25), st.integers(0, 2**32), st.integers(0, 3))
@settings(max_examples=60)
def test_verdicts_agree_with_full_unitaries(n: int, operations: int, seed: int, change: int) -> None:
    source = random_circuit(n, operations, seed, barriers=False)
    output = random_circuit(n, operations, seed + (change == 1), barriers=False)
    if change == 2 and operations:
        output = without(output, seed % operations)
    if change == 3:
        output = rewired(output, np.random.default_rng(seed).permutation(n).tolist())
    same = tuple(range(n))
    true = float(distance(source.unitary(), output.unitary()))
    try:
        verdict = judge(source, output, initial=same, final=same)
    except ProofError as problem:
        assert true > 1e-10, problem
    else:
        assert true <= verdict.error_bound + 1e-14


def test_placements_of_a_few_qubits_are_found() -> None:
    source = Builder(3).gate("ccx", 0, 1, 2).gate("t", 0).gate("h", 1).gate("ccx", 1, 2, 0).build()
    output = rewired(source, [2, 0, 1])
    verdict = judge(source, output)
    assert verdict.initial == verdict.final == (2, 0, 1)


def test_undecided_is_not_equal() -> None:
    n = 30
    source, output = Builder(n, n), Builder(n, n)
    for q in range(n - 2):
        source.gate("ccx", q, q + 1, q + 2).gate("h", q)
        output.gate("h", q + 2).gate("ccz", q, q + 1, q + 2).gate("h", q + 2).gate("h", q)
    with pytest.raises(UndecidedError, match="undecided") as caught:
        judge(source.build(), output.build())
    assert caught.value.exit_code == 3
    assert "random states: more than 26 qubits" in str(caught.value)
    measured = Builder(2, 1).gate("ccx" if n < 0 else "h", 0).measure(0, 0).gate("h", 0).build()
    other = Builder(2, 1).gate("h", 0).measure(0, 0).gate("x", 0).gate("h", 0).build()
    with pytest.raises(ProofError):
        judge(measured, other)
