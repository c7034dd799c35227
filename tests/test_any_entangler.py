"""Circuits of any entangler: sufficiency on whole polytopes, minimality, mixtures, and the compiler with them."""

import numpy as np
import pytest
import scipy.optimize
from hypothesis import given, settings
from hypothesis import strategies as st

import gatewright as gw
from gatewright.devices import Device, read_device, read_gate_set
from gatewright.errors import DeviceError, GateSetError
from gatewright.linalg import distance, haar_unitary, kron
from gatewright.synthesis.entangler import classify
from gatewright.synthesis.polytopes import other_image
from gatewright.synthesis.toolkit import least_mixed_uses, synthesise_mixed
from gatewright.synthesis.weyl import canonical_coordinates, canonical_matrix

Q = np.pi / 4
SWAP = np.eye(4)[[0, 2, 1, 3]].astype(complex)
CZ = np.diag([1, 1, 1, -1]).astype(complex)
ISWAP = np.array([[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]])
POINTS = {
    "root of iSWAP": (Q / 2, Q / 2, 0),
    "B": (Q, Q / 2, 0),
    "root of CX": (Q / 2, 0, 0),
    "root of SWAP": (Q / 2, Q / 2, Q / 2),
    "its inverse": (Q / 2, Q / 2, -Q / 2),
    "fSim": (Q, Q, Q / 6),
    "over-rotated CZ": (Q * 0.97, 0, 0),
    "nearly CX": (Q, 1e-3, 0),
    "generic": (0.5, 0.31, -0.2),
}


def dressed(points, rng):
    size = len(points)
    left, right = (kron(haar_unitary(2, size, rng=rng), haar_unitary(2, size, rng=rng)) for _ in range(2))
    return left @ canonical_matrix(points) @ right


def samples(polytope, size, rng):
    """Vertices, points of edges, of faces and of the inside."""
    vertices = polytope.vertices
    weights = [np.eye(len(vertices))]
    for row in np.concatenate(polytope.halfspaces[0][None]):
        on = np.flatnonzero(np.abs(vertices @ row - (vertices @ row).min()) < 1e-9)
        part = np.zeros((size // 4, len(vertices)))
        part[:, on] = rng.dirichlet(np.ones(len(on)), len(part))
        weights.append(part)
    for alpha in (0.2, 1.0):
        weights.append(rng.dirichlet(np.full(len(vertices), alpha), size))
    return np.concatenate(weights) @ vertices


@pytest.mark.parametrize("name", POINTS)
def test_everything_that_is_reached_is_made(name):
    rng = np.random.default_rng(41)
    gate = dressed(np.array([POINTS[name]]), rng)[0]
    entangler = classify(gate)
    assert not entangler.closed
    for k, polytope in enumerate(entangler.reach[:5]):
        points = samples(polytope, 20, rng)
        exponent = rng.integers(1, 17, len(points))
        nearby = points + (10.0**-exponent)[:, None] * rng.uniform(-1, 1, points.shape)
        for targets, most in ((points, k), (nearby, len(entangler.reach) - 1)):
            unitaries = dressed(targets, rng)
            circuit = entangler.synthesise(unitaries)
            assert (circuit.uses <= most).all()
            assert (distance(circuit.matrix(gate), unitaries) <= circuit.distance + 1e-12).all()
            assert (circuit.distance <= 1e-10).all()


@given(st.integers(0, 2**32))
@settings(deadline=None, max_examples=40)
def test_random_entanglers(seed):
    rng = np.random.default_rng(seed)
    gate = haar_unitary(4, rng=rng)
    entangler = classify(gate)
    unitaries = haar_unitary(4, 20, rng=rng)
    unitaries[:3] = np.eye(4), gate, SWAP
    circuit = entangler.synthesise(unitaries)
    assert circuit.uses[:2].tolist() == [0, 1]
    assert (circuit.uses == entangler.count(unitaries)).all()
    assert (distance(circuit.matrix(gate), unitaries) <= 1e-12).all()
    crossed = np.minimum(circuit.uses, entangler.count(SWAP @ unitaries))
    assert (entangler.count_exchanged(unitaries) == crossed).all()


@given(st.integers(1, 4), st.integers(0, 2**32))
@settings(deadline=None, max_examples=60)
def test_products_of_k_need_at_most_k(k, seed):
    rng = np.random.default_rng(seed)
    gate = haar_unitary(4, rng=rng)
    entangler = classify(gate)
    product = kron(*haar_unitary(2, 2, rng=rng))
    for _ in range(k):
        product = kron(*haar_unitary(2, 2, rng=rng)) @ gate @ product
    assert entangler.count(product) <= k


def test_an_optimiser_does_not_beat_the_claimed_minimum():
    # Twelve targets just outside of what two uses reach; SciPy looks for two-use circuits over all one-qubit gates.
    rng = np.random.default_rng(43)
    gate = canonical_matrix((Q / 2, Q / 2, 0))
    entangler = classify(gate)
    points = canonical_coordinates(haar_unitary(4, 400, rng=rng))
    two = entangler.reach[2]
    excess = two.excess(np.stack([points, other_image(points)])).min(axis=0)
    for point, gap in zip(points[excess > 0.02][:12], excess[excess > 0.02][:12], strict=True):
        target = canonical_matrix(point)
        assert entangler.count(target) == 3

        def loss(angles, target=target):
            half = angles.reshape(6, 3)
            u = [_euler(*a) for a in half]
            made = kron(u[0], u[1]) @ gate @ kron(u[2], u[3]) @ gate @ kron(u[4], u[5])
            return 1 - np.abs(np.trace(made.conj().T @ target)) / 4

        best = min(scipy.optimize.minimize(loss, rng.uniform(-3, 3, 18), method="BFGS").fun for _ in range(2))
        # |tr|/4 <= cos(half the arc between the classes) and the classes are `gap` apart.
        assert best > 1e-3 * gap**2


def _euler(a, b, c):
    cos, sin = np.cos(b), np.sin(b)
    return np.array(
        [
            [np.exp(1j * (a + c)) * cos, -np.exp(1j * (a - c)) * sin],
            [np.exp(1j * (c - a)) * sin, np.exp(-1j * (a + c)) * cos],
        ]
    )


def test_mixtures_take_the_cheaper_sequence():
    rng = np.random.default_rng(44)
    gates = [canonical_matrix((Q / 2, Q / 2, 0)), CZ, ISWAP]
    tools = [classify(gate) for gate in gates]
    unitaries = np.concatenate([haar_unitary(4, 60, rng=rng), [np.eye(4), CZ, ISWAP, SWAP]])
    made = synthesise_mixed(unitaries, tools, costs=[(1.0,), (1.2,), (1.5,)])
    product = kron(made.layers[:, 0, 0], made.layers[:, 0, 1])
    for j in range(made.members.shape[1]):
        with_gate = (
            kron(made.layers[:, j + 1, 0], made.layers[:, j + 1, 1]) @ np.array(gates)[made.members[:, j]] @ product
        )
        product = np.where((made.members[:, j] >= 0)[:, None, None], with_gate, product)
    assert (distance(product, unitaries) <= 1e-12).all()
    price = np.array([1.0, 1.2, 1.5, 0.0])[made.members].sum(axis=1)
    alone = [price_of * tool.count(unitaries) for price_of, tool in zip((1.0, 1.2, 1.5), tools, strict=True)]
    assert (price <= np.min(alone, axis=0) + 1e-12).all()
    assert (price < np.min(alone, axis=0) - 1e-12).any()
    assert made.members[-4:-1].tolist() == [[-1, -1, -1], [1, -1, -1], [2, -1, -1]]
    least = least_mixed_uses(unitaries, tools)
    assert (least <= made.uses).all()
    # CNOT times iSWAP is a swap up to local gates (mirror gates).
    assert least[-1] == 2


def gate_set(matrices, **options):
    turn = {"name": "t", "from": "-pi", "to": "pi"}
    gates = {
        "rz": {
            "qubits": 1,
            "virtual": True,
            "parameters": [turn],
            "matrix": [["exp(-i*t/2)", 0], [0, "exp(i*t/2)"]],
        },
        "sx": {"qubits": 1, "matrix": [["(1+i)/2", "(1-i)/2"], ["(1-i)/2", "(1+i)/2"]]},
    }
    for name, matrix in matrices.items():
        rows = [[f"{v.real:.17g}+({v.imag:.17g})*i" for v in row] for row in np.asarray(matrix, dtype=complex)]
        gates[name] = {"qubits": 2, "matrix": rows, **options.get(name, {})}
    return read_gate_set({"name": "measured", "gates": gates})


@pytest.mark.parametrize("directed", [False, True])
def test_a_random_matrix_as_the_only_entangler_compiles(directed):
    native = gate_set({"pulse": haar_unitary(4, rng=3)})
    device = Device.from_graph([(0, 1), (2, 1), (2, 3)], native, directed=directed)
    for source in (haar_unitary(4, rng=1), SWAP, haar_unitary(8, rng=2)):
        result = gw.compile(source, device)
        assert result.verdict.error_bound < 1e-11
        assert result.costs.two_qubit_gates >= result.lower_bound.two_qubit_gates
    pair = Device.from_graph([(0, 1)], native, directed=directed)
    result = gw.compile(haar_unitary(4, rng=1), pair)
    assert result.costs.two_qubit_gates == result.lower_bound.two_qubit_gates == 2
    assert "1 reach only" in result.lower_bound.how


def test_several_entanglers_and_directions_in_one_circuit():
    matrices = {"pulse": haar_unitary(4, rng=3), "cz": CZ}
    native = gate_set(matrices, pulse={"error": 0.02}, cz={"error": 0.01})
    device = Device.from_graph([(0, 1), (2, 1), (2, 3)], native, directed=True)
    result = gw.compile(haar_unitary(8, rng=2), device)
    assert set(result.costs.by_gate) >= {"pulse", "cz"}
    assert result.verdict.error_bound < 1e-11


def test_what_is_preferred_decides_between_entanglers():
    native = gate_set(
        {"long": canonical_matrix((Q, Q / 2, 0)), "quick": CZ},
        long={"error": 0.02, "duration_ns": 500},
        quick={"error": 0.001, "duration_ns": 50},
    )
    device = Device.from_graph([(0, 1)], native)
    target = haar_unitary(4, rng=1)
    uses = {prefer: gw.compile(target, device, prefer=prefer).costs for prefer in ("uses", "fidelity", "duration")}
    assert uses["uses"].two_qubit_gates == 2
    assert uses["fidelity"].by_gate["quick"] == uses["duration"].by_gate["quick"] == 3
    with pytest.raises(gw.errors.InputError, match="unknown preference 'speed'"):
        gw.compile(target, device, prefer="speed")


@pytest.mark.parametrize(
    ("matrix", "message"),
    [
        (kron(*haar_unitary(2, 2, rng=5)), "no entangler that can be used.*a product of one-qubit gates"),
        (SWAP, "no entangler that can be used.*SWAP times"),
        (canonical_matrix((0.01, 0, 0)), "so weak that some two-qubit gates need too many uses"),
    ],
)
def test_sets_that_cannot(matrix, message):
    device = Device.from_graph([(0, 1)], gate_set({"pulse": matrix}))
    with pytest.raises(GateSetError, match=message):
        gw.compile(CZ, device)


def test_different_entanglers_on_different_edges():
    native = gate_set({"pulse": haar_unitary(4, rng=3), "cz": CZ, "swapping": ISWAP})
    data = {
        "name": "patchwork",
        "gate_set": native,
        "coupling": {"shape": "line", "qubits": 4},
        "gates": {"pulse": {"pairs": [[1, 0]]}, "cz": {"pairs": [[1, 2]]}, "swapping": {"pairs": [[3, 2]]}},
    }
    device = read_device(data)
    assert device.allows("pulse", [[0, 1], [1, 0]]).tolist() == [False, True]
    assert device.allows("cz", [[1, 2], [2, 1], [0, 1]]).tolist() == [True, True, False]
    assert device.allowed_pairs("swapping").tolist() == [[2, 3], [3, 2]]
    result = gw.compile(haar_unitary(8, rng=6), device, placement=[0, 1, 2])
    assert {"pulse", "cz"} <= set(result.costs.by_gate)
    assert result.verdict.error_bound < 1e-11
    for gate, pairs in (("pulse", [[0, 1]]), ("cz", [[0, 2]]), ("cx", [[0, 1]])):
        with pytest.raises(DeviceError, match="no two-qubit gate|a pair of the coupling|unknown|known"):
            read_device({**data, "gates": {**data["gates"], gate: {"pairs": pairs[:0] if gate == "pulse" else pairs}}})
