"""The whole job as a library: published counts, determinism, options, what is refused."""

from __future__ import annotations

import io
import json
import threading

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import gatewright as gw
from circuits import random_circuit
from gatewright.circuit import Builder
from gatewright.errors import (
    BudgetError,
    DeviceError,
    DisconnectedError,
    InputError,
    MatrixError,
    NotUnitaryError,
    ProofError,
    UnsupportedError,
)
from gatewright.gates import GATES
from gatewright.linalg import distance, haar_unitary, nearest_unitary
from gatewright.pipeline import CHAIN
from gatewright.proof import dense_distance
from gatewright.qasm import read as read_qasm
from gatewright.report.terminal import print_result


def complete(n: int, gate_set: str = "cz-virtual-z") -> gw.Device:
    return gw.Device.from_graph([(i, j) for i in range(n) for j in range(i)], gate_set, name="complete")


def line(n: int, gate_set: str = "cz-virtual-z") -> gw.Device:
    return gw.Device.from_graph([(i, i + 1) for i in range(n - 1)], gate_set, name="line")


def two_qubit_gates(builder: Builder, device: gw.Device) -> tuple[int, int]:
    result = gw.compile(builder.build(), device)
    return result.costs.two_qubit_gates, result.lower_bound.two_qubit_gates


@pytest.mark.parametrize("gate_set", ["cz-virtual-z", "cnot-textbook", "cross-resonance", "cz-rz-rx", "ion-xx"])
def test_published_counts(gate_set: str) -> None:
    # Toffoli: 6 CNOTs, optimal: Shende and Markov, QIC 9, 461 (2009).
    assert two_qubit_gates(Builder(3).gate("ccx", 0, 1, 2), complete(3, gate_set)) == (6, 6)
    # SWAP needs 3: Vatan and Williams, PRA 69, 032315 (2004). SWAP · CNOT is locally iSWAP and needs 2.
    assert two_qubit_gates(Builder(2).gate("swap", 0, 1), complete(2, gate_set)) == (3, 3)
    assert two_qubit_gates(Builder(2).gate("cx", 0, 1).gate("swap", 0, 1), complete(2, gate_set)) == (2, 2)
    # CCCX: 14, the parity construction (Barenco et al., PRA 52, 3457 (1995), lemma 7.1).
    assert two_qubit_gates(Builder(4).gate("c3x", 0, 1, 2, 3), complete(4, gate_set))[0] == 14


def test_swap_beside_a_gate_is_one_iswap() -> None:
    # CNOT · SWAP is one iSWAP, a CNOT alone takes two: (π/4, 0, 0) and its mirror (π/4, π/4, 0) in the chamber.
    # No source; recomputed.
    device = complete(2, "iswap-virtual-z")
    assert two_qubit_gates(Builder(2).gate("cx", 0, 1).gate("swap", 0, 1), device) == (1, 1)
    assert two_qubit_gates(Builder(2).gate("cx", 0, 1), device) == (2, 2)


def test_h_then_cnot_makes_a_bell_pair() -> None:
    # Common practice, no source: amplitudes 1/√2 on 00 and 11, none on 01 and 10.
    result = gw.compile(Builder(2).gate("h", 0).gate("cx", 0, 1).build(), complete(2))
    state = result.circuit.unitary()[:, 0]
    assert np.allclose(np.abs(state), [np.sqrt(0.5), 0, 0, np.sqrt(0.5)], atol=1e-14)
    # H is one quarter turn between frame changes; a CNOT is a CZ between two of them on the target.
    assert result.circuit.count("sx") == 3
    assert result.circuit.count("cz") == 1


def test_haar_unitaries_need_three() -> None:
    # Haar mean of 3 CNOTs: Shende, Bullock, Markov, PRA 70, 012310 (2004).
    device = complete(2)
    for u in haar_unitary(4, 10, rng=5):
        result = gw.compile(u, device)
        assert (result.costs.two_qubit_gates, result.lower_bound.two_qubit_gates) == (3, 3)
        assert distance(result.circuit.unitary(), u) < 2e-14


@pytest.mark.parametrize("n", [1, 2, 3, 4])
@pytest.mark.parametrize("gate_set", ["cz-virtual-z", "ion-xx", "iswap-virtual-z", "cz-general-pulse"])
def test_unitaries_of_any_size(n: int, gate_set: str) -> None:
    u = haar_unitary(2**n, rng=n)
    result = gw.compile(u, complete(max(n, 2), gate_set))
    source = gw.Circuit.from_unitary(u)
    assert dense_distance(source, result.circuit, result.initial, result.final) < 1e-13 * 4**n
    # Shende, Bullock, Markov, IEEE TCAD 25, 1000 (2006): 9/16 4ⁿ − 3/2 2ⁿ CNOTs by the plain Shannon decomposition.
    if n > 1 and gate_set != "iswap-virtual-z":
        assert result.costs.two_qubit_gates <= 9 * 4**n // 16 - 3 * 2**n // 2 + 3 * (n == 2)


def test_special_unitaries_cost_little() -> None:
    device = complete(3)
    assert gw.compile(np.eye(8), device).costs.operations == 0
    assert gw.compile(np.kron(np.eye(2), haar_unitary(4, rng=1)), device).costs.two_qubit_gates == 3
    diagonal = np.diag(np.exp(1j * np.random.default_rng(1).normal(size=8)))
    # A diagonal on n qubits takes at most 2ⁿ − 2: Bullock and Markov, QIC 4, 27 (2004); six here.
    assert gw.compile(diagonal, device).costs.two_qubit_gates <= 6


@settings(max_examples=20)
@given(st.integers(0, 2**32))
def test_the_same_seed_gives_the_same_bytes(seed: int) -> None:
    circuit = random_circuit(5, 20, seed, measured=True)
    device = line(6)
    texts: list[str] = []

    def work() -> None:
        result = gw.compile(circuit, device, seed=4)
        texts.append(result.to_qasm() + result.encode_proof().hex())

    threads = [threading.Thread(target=work) for _ in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(set(texts)) == 1


def test_tolerance_uses_fewer_and_says_so() -> None:
    x = np.array([[0, 1], [1, 0]])
    xx = np.kron(x, x)
    near = (np.cos(1e-7) * np.eye(4) + 1j * np.sin(1e-7) * xx) @ np.diag([1, 1, 1, -1])
    exact = gw.compile(near, complete(2))
    assert exact.costs.two_qubit_gates == 2
    assert exact.verdict.error_bound < 1e-12
    loose = gw.compile(near, complete(2), tolerance=1e-6)
    assert loose.costs.two_qubit_gates == 1
    # An honest bound: at least the true distance, at most the Frobenius norm's factor of 2 above it.
    true = float(distance(loose.circuit.unitary(), near))
    assert 0.9e-7 < true <= loose.verdict.error_bound < 2.1e-7


@pytest.mark.parametrize("rounding", [lambda u: np.round(u, 8), lambda u: u.astype(np.complex64)])
def test_rounded_matrices_have_the_right_count(rounding: object) -> None:
    rng = np.random.default_rng(2)
    cnot = np.eye(4)[[0, 1, 3, 2]]
    for uses in range(4):
        u = np.kron(*haar_unitary(2, 2, rng=rng))
        for _ in range(uses):
            u = np.kron(*haar_unitary(2, 2, rng=rng)) @ cnot @ u
        given_matrix = rounding(u)  # type: ignore[operator]
        with pytest.raises(NotUnitaryError):
            gw.compile(given_matrix, complete(2))
        result = gw.compile(given_matrix, complete(2), tolerance=1e-6)
        assert result.costs.two_qubit_gates == uses
        assert 0 < result.moved < 1e-6
        assert distance(result.circuit.unitary(), nearest_unitary(given_matrix)) <= result.verdict.error_bound < 1e-5


def test_the_nearest_unitary_on_request() -> None:
    with pytest.raises(NotUnitaryError) as caught:
        gw.compile(1.2 * np.eye(4), complete(2))
    assert caught.value.defect == pytest.approx(0.44)
    assert caught.value.distance == pytest.approx(0.2)
    result = gw.compile(1.2 * np.eye(4), complete(2), nearest_unitary=True)
    assert result.moved == pytest.approx(0.2)
    assert result.costs.operations == 0


def test_a_placement_is_respected() -> None:
    circuit = Builder(3).gate("cx", 0, 2).gate("cx", 1, 2).build()
    result = gw.compile(circuit, line(5), placement=[4, -1, 0])
    assert (result.initial[0], result.initial[2]) == (4, 0)
    for wrong in ([0, 0, 1], [0, 1], [0, 1, 9], [0, 1, -2]):
        with pytest.raises(InputError):
            gw.compile(circuit, line(5), placement=wrong)


def test_budgets() -> None:
    circuit = Builder(2).gate("swap", 0, 1).build()
    assert gw.count(circuit, complete(2), budget={"two_qubit_gates": 3}).two_qubit_gates == 3
    with pytest.raises(BudgetError, match="two_qubit_gates = 3") as caught:
        gw.count(circuit, complete(2), budget={"two_qubit_gates": 2, "depth": 100})
    assert [entry["name"] for entry in caught.value.exceeded] == ["two_qubit_gates"]
    result = gw.compile(circuit, complete(2), budget={"two_qubit_gates": 2})
    assert result.budget[0]["met"] is False
    with pytest.raises(InputError, match="did you mean 'two_qubit_gates'"):
        gw.count(circuit, complete(2), budget={"two_qubit_gate": 2})


def test_the_summary_has_every_promised_entry() -> None:
    summary = json.loads(json.dumps(gw.compile(random_circuit(3, 12, 1), line(4)).summary(), allow_nan=False))
    assert {"version", "seed", "input", "output", "lower_bound", "placement", "proof", "budget", "seconds"} <= set(
        summary
    )
    assert {"qubits", "operations", "two_qubit_gates"} <= set(summary["input"])
    assert {
        "qubits",
        "operations",
        "one_qubit_gates",
        "two_qubit_gates",
        "by_gate",
        "depth",
        "two_qubit_depth",
        "swaps_inserted",
        "duration_ns",
        "success_estimate",
    } <= set(summary["output"])
    assert {"two_qubit_gates", "how"} <= set(summary["lower_bound"])
    assert {"verified", "error_bound", "windows", "method"} <= set(summary["proof"])
    assert len(summary["placement"]["initial"]) == len(summary["placement"]["final"]) == 3


def test_the_lower_bound_is_never_above_the_count() -> None:
    for seed in range(12):
        for device in (line(5), line(5, "iswap-virtual-z"), complete(5)):
            result = gw.compile(random_circuit(5, 25, seed, barriers=False), device, seed=seed)
            assert result.lower_bound.two_qubit_gates <= result.costs.two_qubit_gates
            assert "not the optimum of the whole circuit" in result.lower_bound.how


def test_too_many_qubits_and_no_path() -> None:
    with pytest.raises(DeviceError, match="more qubits than the device"):
        gw.compile(Builder(4).gate("h", 0).build(), line(3))
    islands = gw.Device.from_graph([(0, 1), (2, 3)], "cz-virtual-z")
    connected = Builder(3).gate("cx", 0, 1).gate("cx", 1, 2).build()
    with pytest.raises(DisconnectedError):
        gw.compile(connected, islands)
    # What fits in one island compiles there.
    assert gw.compile(Builder(2).gate("cx", 0, 1).build(), islands).costs.two_qubit_gates == 1


def test_bad_matrices() -> None:
    device = complete(2)
    for matrix, words in (
        (np.zeros((3, 3)), "power of two"),
        (np.zeros((2, 3)), "not square"),
        (np.full((4, 4), np.nan), "not finite"),
        (np.zeros((0, 0)), "qubits"),
        ([["a", "b"], ["c", "d"]], "numbers"),
        (np.full((4, 4), 1e300), "not unitary"),
    ):
        with pytest.raises(MatrixError, match=words):
            gw.compile(matrix, device)
    with pytest.raises(InputError, match="tolerance"):
        gw.compile(np.eye(4), device, tolerance=-1)
    with pytest.raises(InputError, match="effort"):
        gw.compile(np.eye(4), device, effort="heroic")


def test_an_unknown_wide_gate_is_refused() -> None:
    from gatewright.gates import Gate

    ghost = Gate("ghost", 3, 0, lambda p: np.broadcast_to(np.eye(8, dtype=complex), (*p.shape[:-1], 8, 8)))
    with pytest.raises(UnsupportedError, match="ghost"):
        gw.compile(Builder(3).gate(ghost, 0, 1, 2).build(), line(3))


def test_a_chain_may_be_cut_and_is_proven_all_the_same() -> None:
    circuit = Builder(2).gate("h", 0).gate("cx", 0, 1).build()
    result = gw.compile(circuit, line(2), chain=CHAIN)
    assert [stage.__name__ for stage in CHAIN] == [
        "parametrise",
        "expand",
        "place",
        "route",
        "restore",
        "fuse",
        "synthesise",
        "schedule",
        "settle",
    ]
    assert list(result.seconds)[1:-3] == [stage.__name__ for stage in CHAIN]
    with pytest.raises(ProofError):
        gw.compile(circuit, line(2), chain=CHAIN[:5])


def test_calibration_gives_a_duration_and_a_success_estimate(examples: object) -> None:
    device = gw.read_device(f"{examples}/grid-9.toml")
    empty = gw.compile(Builder(1).build(), device)
    assert (empty.costs.duration_ns, empty.costs.success_estimate) == (0.0, 1.0)
    circuit = Builder(2, 2).gate("h", 0).gate("cx", 0, 1).measure(0, 0).measure(1, 1).build()
    result = gw.compile(circuit, device, placement=[0, 1])
    # The model, worked out by hand: 1 − 1.5 r for each pulse, 1 − 1.25 r for the entangler, 1 − e for each readout,
    # and 1/4 + e^{−t/T1}/4 + e^{−t/T2}/2 for a qubit that waits.
    by_hand = 1.0
    for operation in result.circuit:
        if operation.name == "measure":
            by_hand *= 1 - device.readout_error[operation.qubits[0]]
        elif operation.name == "cz":
            by_hand *= 1 - 1.25 * device.error("cz", operation.qubits)
        elif operation.name == "sx":
            by_hand *= 1 - 1.5 * device.error("sx", operation.qubits)
    assert result.costs.success_estimate == pytest.approx(by_hand, rel=0.02)
    assert result.costs.success_estimate <= by_hand * (1 + 1e-12)
    assert result.costs.duration_ns is not None
    assert result.costs.duration_ns > device.readout_duration_ns[0]
    assert "model" in result.summary()["output"]["success_model"]


@pytest.mark.parametrize("gate_set", ["cz-virtual-z", "iswap-virtual-z", "cross-resonance"])
def test_wires_without_gates_and_lone_measurements(gate_set: str) -> None:
    circuit = Builder(3, 3).measure(2, 0).reset(1).gate("h", 1).measure(1, 1).build()
    result = gw.compile(circuit, line(4, gate_set))
    assert result.circuit.count("measure") == 2
    assert result.verdict.error_bound < 1e-13


def test_public_names_are_listed_and_documented() -> None:
    assert sorted(gw.__all__) == sorted(set(gw.__all__))
    for name in gw.__all__:
        thing = getattr(gw, name)
        assert name == "__version__" or name == "CHAIN" or thing.__doc__, name
    assert set(dir(gw)) == set(gw.__all__)
    with pytest.raises(AttributeError):
        gw.nothing  # noqa: B018


@pytest.mark.parametrize("seed", [1, 2])
def test_a_measured_pulse_is_what_is_compiled_to(seed: int) -> None:
    # A quarter turn that came out three per cent too long, about an axis that is off, and not quite unitary.
    rng = np.random.default_rng(seed)
    pulse = GATES["r"].matrix([1.03 * np.pi / 2, 0.04]) + 0.01 * rng.normal(size=(2, 2))
    cz = {"qubits": 2, "matrix": np.diag([1, 1, 1, -1])}
    rz = {"qubits": 1, "virtual": True, "parameters": [{"name": "t", "from": "-pi", "to": "pi"}]}
    gates = {
        "rz": {**rz, "matrix": [["exp(-i*t/2)", 0], [0, "exp(i*t/2)"]]},
        "turn": {"qubits": 1, "measured": True, "matrix": pulse},
        "cz": cz,
    }
    device = gw.Device.from_graph([(0, 1)], gw.read_gate_set({"name": "measured", "gates": gates}), name="pair")
    result = gw.compile(haar_unitary(4, rng=seed), device)
    assert result.verdict.error_bound < 1e-12 and result.costs.two_qubit_gates == 3
    (used,) = (gate for gate in result.circuit.table if gate.name == "turn")
    assert np.abs(used.matrix() - nearest_unitary(pulse)).max() < 1e-13
    moved = float(np.linalg.norm(pulse - nearest_unitary(pulse), ord=2))
    assert result.summary()["measured_gates"] == {"turn": pytest.approx(moved)}
    assert gw.describe(device)["gate_set_facts"]["gates"][1]["distance_moved"] == pytest.approx(moved)
    table = io.StringIO()
    print_result(result, table)
    assert f"measured turn moved by {moved:.2g} to the nearest unitary" in " ".join(table.getvalue().split())
    # The written program defines the measured gate for a reader that knows nothing of the device.
    assert distance(read_qasm(result.to_qasm()).unitary(), result.source.unitary()) < 1e-12
