"""What `describe` tells of reach and cost: published shares and means, independent Haar samples, devices, bad sets."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import expm

import gatewright as gw
from gatewright.devices import shipped_gate_sets
from gatewright.errors import GateSetError
from gatewright.gates import GATES
from gatewright.linalg import haar_unitary, kron, nearest_unitary
from gatewright.reach_facts import entangler_points, target_facts
from gatewright.synthesis.entangler import classify
from gatewright.synthesis.haar_cost import best_supplement, chamber_sample, haar_cost, reach_by_number
from gatewright.synthesis.polytopes import FORMS, reached, union_share
from gatewright.synthesis.weyl import canonical_coordinates, canonical_matrix, mirrored_coordinates

Q = np.pi / 4
CX, ISWAP, ROOT_ISWAP, B = (Q, 0.0, 0.0), (Q, Q, 0.0), (Q / 2, Q / 2, 0.0), (Q, Q / 2, 0.0)

RZ: dict[str, Any] = {
    "qubits": 1,
    "virtual": True,
    "parameters": [{"name": "theta", "from": "-pi", "to": "pi"}],
    "matrix": [["exp(-i*theta/2)", 0], [0, "exp(i*theta/2)"]],
}
SX: dict[str, Any] = {"qubits": 1, "matrix": [["(1+i)/2", "(1-i)/2"], ["(1-i)/2", "(1+i)/2"]]}


def made_of(**gates: Any) -> gw.GateSet:
    return gw.read_gate_set({"name": "test", "gates": {"rz": RZ, "sx": SX, **gates}})


def fixed(matrix: Any, **more: Any) -> dict[str, Any]:
    return {"qubits": 2, "matrix": matrix, **more}


# --- Shares and means


def test_the_sample_has_the_haar_measure() -> None:
    points, weights = chamber_sample()
    x, y, z = points.T
    assert ((x <= Q) & (x >= y) & (y >= np.abs(z))).all()
    # 8/(3π): Watts, O'Connor, Vala, Entropy 15, 1963 (2013).
    assert weights[(x + y >= Q) & (y + np.abs(z) <= Q)].sum() == pytest.approx(8 / (3 * np.pi), abs=2e-3)
    # The mean entangling power of Haar-random gates, by an independent sample.
    haar = canonical_coordinates(haar_unitary(4, 20_000, rng=1))
    for axis in range(3):
        assert weights @ np.abs(points[:, axis]) == pytest.approx(np.abs(haar[:, axis]).mean(), abs=3e-3)
    # Two uses of the root of iSWAP with a free swap of the outputs: 0.94361 (SOURCES: recomputed by another route).
    two = reached([ROOT_ISWAP] * 2)
    mirrored = mirrored_coordinates(points)
    images = [points, points * [-1, 1, -1] + [2 * Q, 0, 0], mirrored, mirrored * [-1, 1, -1] + [2 * Q, 0, 0]]
    inside = np.min([two.excess(image) for image in images], axis=0) <= 1e-12
    assert weights[inside].sum() == pytest.approx(0.94361, abs=2e-3)


@pytest.mark.parametrize(
    ("point", "mean", "shares"),
    [
        # Shende, Bullock, Markov, PRA 70, 012310 (2004).
        (CX, 3.0, [0, 0, 0, 1]),
        (ISWAP, 3.0, [0, 0, 0, 1]),
        # Huang et al., PRL 130, 070601 (2023).
        (ROOT_ISWAP, 2.2099, [0, 0, 0.79011, 1]),
        # Zhang, Vala, Sastry, Whaley, PRL 93, 020502 (2004).
        (B, 2.0, [0, 0, 1]),
        # Peterson, Crooks, Smith, Quantum 4, 247 (2020), method; figures recomputed.
        ((Q / 2, 0.0, 0.0), 3.5402, [0, 0, 0, 0.50001, 0.95988, 0.99986, 1]),
    ],
)
def test_published_shares_and_means(point: Any, mean: float, shares: list[float]) -> None:
    found = [level.share for level in reach_by_number((point,))]
    assert found == pytest.approx(shares, abs=2e-5)
    gains = np.diff(found, prepend=0.0)
    assert gains @ np.arange(len(found)) == pytest.approx(mean, abs=1e-4)
    assert haar_cost((point,), ((1.0,),)).mean[0] == pytest.approx(mean, abs=4e-3)


def test_a_third_of_cnot() -> None:
    # 5.0016, Peterson, Bishop, Javadi-Abhari, Quantum 6, 696 (2022), method; figure recomputed. By sampling here.
    assert haar_cost(((Q / 3, 0.0, 0.0),), ((1.0,),)).mean[0] == pytest.approx(5.0016, abs=6e-3)


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=8, deadline=None)
def test_costs_agree_with_an_independent_haar_sample(seed: int) -> None:
    rng = np.random.default_rng(seed)
    sample, _ = chamber_sample()
    point = sample[rng.integers(len(sample))]
    if point[0] + point[1] < 0.4 or point[2] > 0.6:
        return
    x, y, z = point.tolist()
    levels = reach_by_number(((x, y, z),))
    counts = classify(canonical_matrix(point)).count(haar_unitary(4, 4000, rng=rng))
    for level in levels:
        assert np.mean(counts <= level.uses) == pytest.approx(level.share, abs=0.035)
    assert counts.mean() == pytest.approx(haar_cost(((x, y, z),), ((1.0,),)).mean[0], abs=0.06)


def test_costs_of_mixed_sequences_against_exact_integrals() -> None:
    # CNOT and its root at half the cost: each sequence's share by exact integration over the union of polytopes.
    points, costs = (CX, (Q / 2, 0.0, 0.0)), ((1.0,), (0.5,))
    found = haar_cost(points, costs)
    regions, last, mean = [], 0.0, 0.0
    for members, _ in found.shares:
        regions.append((FORMS, reached([points[k] for k in members]).bounds))
        share = union_share(regions)
        mean, last = mean + (share - last) * sum(costs[k][0] for k in members), share
    assert last == pytest.approx(1.0, abs=1e-3)
    assert found.mean[0] == pytest.approx(mean, abs=3e-3)
    # No set of XX gates can be better than XX(θ) of any strength: 1.5 (Peterson et al., 2022).
    assert 1.5 < found.mean[0] < 2


def test_best_supplement_is_the_best_of_those_tried() -> None:
    found = best_supplement([CX], [0.9], layer=0.1)
    assert found is not None and found.before == pytest.approx(3.0)
    for fraction in (1 / 2, 1 / 3, 2 / 3, 1 / 4, 3 / 4):
        cost = haar_cost((CX, (Q * fraction, 0.0, 0.0)), ((1.0,), (0.9 * fraction + 0.1,))).mean[0]
        assert found.cost <= cost + 1e-9
    # Where the one-qubit gates are all that a use costs, nothing is saved that another strong gate does not save.
    assert best_supplement([B], [1e-6], layer=1.0) is None


# --- Targets


def test_targets_in_every_shipped_set() -> None:
    swap = gw.describe(GATES["swap"].matrix())["uses_in_shipped_sets"]
    assert list(swap) == shipped_gate_sets()
    expected = {
        "cz-virtual-z": 3,  # Vatan & Williams, PRA 69, 032315 (2004)
        "iswap-virtual-z": 3,
        "sqrt-iswap-virtual-z": 3,  # Huang et al. (2023)
        "b-general-pulse": 2,  # Zhang et al. (2004)
        "exchange-sqrt-swap": 2,  # Loss & DiVincenzo, PRA 57, 120 (1998)
        "cz-and-iswap": 2,  # SWAP · CNOT is one iSWAP
        "sqrt-cnot-hadamard": 6,  # three CNOTs of two roots each; fewer have too little strength
    }
    assert {name: swap[name]["uses"] for name in expected} == expected
    assert sorted(swap["cz-and-iswap"]["sequence"]) == ["cz", "iswap"]
    for matrix, uses in ((np.eye(4), 0), (kron(haar_unitary(2, rng=1), haar_unitary(2, rng=2)), 0)):
        assert {entry["uses"] for entry in gw.describe(matrix)["uses_in_shipped_sets"].values()} == {uses}


@given(st.integers(0, 2**32 - 1), st.sampled_from(["cz-virtual-z", "sqrt-iswap-virtual-z", "fsim-equatorial"]))
@settings(max_examples=20, deadline=None)
def test_targets_agree_with_the_synthesis(seed: int, name: str) -> None:
    gate_set = gw.read_gate_set(name)
    unitary = haar_unitary(4, rng=seed)
    found = target_facts(gate_set, unitary)
    (entangler,) = (tool.matrix() for tool in [gate_set.two_qubit[0].gate])
    assert found["uses"] == int(classify(entangler).count(unitary)) == len(found["sequence"])
    # The reason quotes an inequality that fails.
    assert f"{found['uses'] - 1} {gate_set.two_qubit[0].gate.name} reach only" in found["reason"]


# --- Gate sets and devices


@pytest.mark.parametrize("name", shipped_gate_sets())
def test_every_shipped_set_is_described_and_compiles(name: str) -> None:
    gate_set = gw.read_gate_set(name)
    facts = gw.describe(gate_set)
    assert facts["universal"] and facts["compiles"]
    haar = facts["haar_random_gates"]
    shares = list(haar["reached_by_at_most"].values())
    assert shares == sorted(shares) and shares[0] == 0 and shares[-1] == 1
    assert haar["mean_uses"] >= 2 - 1e-9
    assert sum(haar["cost"]["uses"].values()) == pytest.approx(haar["mean_uses"], abs=6e-3)
    assert 0 < haar["cost"]["process_infidelity"] < 0.1 and haar["cost"]["duration_ns"] > haar["cost"]["entanglers_ns"]
    assert ("fewest_uses" in haar["supplement"]) == (haar["mean_uses"] > 2.001)
    for entangler in facts["entanglers"]:
        assert sum(entangler["reach"].values()) == pytest.approx(1, abs=1e-9)
    device = gw.Device.from_graph([(0, 1)], gate_set, name="pair")
    for seed, unitary in enumerate((haar_unitary(4, rng=5), GATES["swap"].matrix(), GATES["cz"].matrix(), np.eye(4))):
        result = gw.compile(unitary, device, seed=seed)
        assert result.verdict.error_bound < 1e-11
        names, _ = entangler_points(gate_set)
        least = target_facts(gate_set, unitary)["uses"]
        assert result.costs.two_qubit_gates == least == result.lower_bound.two_qubit_gates, (names, seed)


def test_edges_of_a_device() -> None:
    pairs = [{"qubits": [0, 1], "error": 0.002}, {"qubits": [1, 2], "error": 0.02}]
    device = gw.read_device(
        {
            "name": "chain",
            "gate_set": "cz-and-iswap",
            "coupling": {"shape": "line", "qubits": 4},
            "calibration": {"gates": {"cz": {"pairs": pairs}}},
        }
    )
    facts = gw.describe(device)
    good, bad, usual = facts["each_edge"]
    assert good["qubits"] == [0, 1] and good["entanglers"] == ["cz", "iswap"]
    assert good["mean_uses"] == pytest.approx(3, abs=1e-9)
    # The better of the two does most of the work.
    assert good["uses"]["cz"] > good["uses"]["iswap"] and bad["uses"]["cz"] < bad["uses"]["iswap"]
    assert good["process_infidelity"] < usual["process_infidelity"]
    spread = facts["haar_random_gates"]["process_infidelity"]
    assert spread["best_edge"] == [0, 1] and spread["least"] == good["process_infidelity"]
    # 3 uses of cz with error 0.002, process error 1.25 times that.
    assert good["process_infidelity"] == pytest.approx(1 - (1 - 1.25 * 0.002) ** 3, rel=1e-9)


def test_a_random_entangler_is_described_and_compiled_to() -> None:
    gate_set = made_of(mine=fixed(haar_unitary(4, rng=11)))
    facts = gw.describe(gate_set, targets={"t": haar_unitary(4, rng=12)})
    assert facts["universal"] and facts["targets"]["t"]["uses"] in (2, 3)
    device = gw.Device.from_graph([(0, 1)], gate_set, name="pair")
    result = gw.compile(haar_unitary(4, rng=12), device)
    assert result.costs.two_qubit_gates == facts["targets"]["t"]["uses"]
    assert result.verdict.error_bound < 1e-11


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_measured_entangler_is_what_is_compiled_to(seed: int) -> None:
    # A cross-resonance pulse of 40 degrees, three per cent too long, with local terms, and not quite unitary.
    rng = np.random.default_rng(seed)
    z, x = GATES["z"].matrix(), GATES["x"].matrix()
    turn = 1.03 * np.radians(40)
    ideal = expm(-0.5j * (turn * kron(z, x) + 0.05 * kron(np.eye(2), x) + 0.02 * kron(z, np.eye(2))))
    measured = ideal + 0.01 * (rng.normal(size=(4, 4)) + 1j * rng.normal(size=(4, 4)))
    gate_set = made_of(pulse=fixed(measured, measured=True))
    moved = float(np.linalg.norm(measured - nearest_unitary(measured), ord=2))
    facts = gw.describe(gate_set)
    assert facts["gates"][2]["measured"] and facts["gates"][2]["distance_moved"] == pytest.approx(moved)
    device = gw.Device.from_graph([(0, 1)], gate_set, name="pair")
    result = gw.compile(haar_unitary(4, rng=seed), device)
    assert result.verdict.error_bound < 1e-11
    (used,) = (gate for gate in result.circuit.table if gate.name == "pulse")
    assert np.abs(used.matrix() - nearest_unitary(measured)).max() < 1e-13
    assert result.costs.two_qubit_gates == result.lower_bound.two_qubit_gates
    # In the ideal pulse's counts the number would be another or the circuit wrong: it is this gate's own count.
    assert result.costs.two_qubit_gates == int(classify(nearest_unitary(measured)).count(haar_unitary(4, rng=seed)))


@pytest.mark.parametrize(
    ("matrix", "reason"),
    [
        (np.eye(4)[[0, 2, 1, 3]], "cannot entangle: it is SWAP times a product of one-qubit gates"),
        (kron(haar_unitary(2, rng=1), haar_unitary(2, rng=2)), "cannot entangle: it is a product of one-qubit gates"),
        (canonical_matrix([0.005, 0, 0]), "so weak"),
    ],
)
def test_sets_that_are_not_enough_say_why(matrix: Any, reason: str) -> None:
    gate_set = made_of(mine=fixed(matrix))
    facts = gw.describe(gate_set)
    assert not facts["compiles"] and reason in facts["compiles_reason"]
    assert facts["universal"] is (reason == "so weak")
    with pytest.raises(GateSetError, match=reason):
        gw.describe(gate_set, targets={"t": np.eye(4)})
    with pytest.raises(GateSetError, match=reason):
        gw.compile(np.eye(4), gw.Device.from_graph([(0, 1)], gate_set, name="pair"))
