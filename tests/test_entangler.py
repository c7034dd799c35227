"""Circuits of one fixed entangler: the classes of CNOT and of iSWAP, which have closed forms, and any other."""

import importlib.util
import sys
from pathlib import Path

import numpy as np
import pytest
import scipy.linalg
import scipy.stats
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import GateSetError, MatrixError, NotUnitaryError
from gatewright.linalg import distance, haar_unitary, kron, nearest_unitary
from gatewright.synthesis.controlled_not import cnot_count
from gatewright.synthesis.entangler import classify
from gatewright.synthesis.weyl import canonical_coordinates, canonical_matrix

QUARTER = np.pi / 4
X = np.array([[0, 1], [1, 0]], dtype=complex)
Z = np.diag([1, -1]).astype(complex)
CX = np.eye(4)[[0, 1, 3, 2]].astype(complex)
CX_REVERSED = np.eye(4)[[0, 3, 2, 1]].astype(complex)
CZ = np.diag([1, 1, 1, -1]).astype(complex)
SWAP = np.eye(4)[[0, 2, 1, 3]].astype(complex)
ISWAP = np.array([[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]])
ACCURACY = 2e-14

# (matrix, whether it is of the iSWAP class)
ENTANGLERS = {
    "CX": (CX, False),
    "CX reversed": (CX_REVERSED, False),
    "CZ": (CZ, False),
    "XX(π/4)": (scipy.linalg.expm(-0.25j * np.pi * np.kron(X, X)), False),
    "ZX(π/4)": (scipy.linalg.expm(-0.25j * np.pi * np.kron(Z, X)), False),
    "ZZ(π/4)": (scipy.linalg.expm(0.25j * np.pi * np.kron(Z, Z)), False),
    "iSWAP": (ISWAP, True),
    "iSWAP, inverse": (ISWAP.conj(), True),
    "two CX": (CX @ CX_REVERSED, True),
    "SWAP · CZ": (SWAP @ CZ, True),
}


@pytest.fixture(scope="module")
def cases():
    """The benchmark's module, whose families of hard cases the suite shares."""
    path = Path(__file__).parent / "bench" / "two_qubit.py"
    spec = importlib.util.spec_from_file_location("bench_two_qubit_entangler", path)
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    yield module
    del sys.modules[spec.name]


@pytest.mark.parametrize("name", ENTANGLERS)
def test_classes(name):
    matrix, mirrored = ENTANGLERS[name]
    entangler = classify(matrix)
    assert entangler.mirrored == mirrored
    assert entangler.coordinates == pytest.approx([QUARTER, QUARTER if mirrored else 0, 0], abs=2e-15)
    assert entangler.deviation == 0
    local = kron(*entangler.left) @ canonical_matrix(entangler.coordinates) @ kron(*entangler.right)
    assert distance(local, matrix) < 1e-14
    assert entangler.count(matrix) == 1
    assert entangler.count(SWAP @ matrix) == 2
    assert entangler.count(SWAP) == 3
    assert entangler.count(np.eye(4)) == 0
    assert [int(entangler.count_exchanged(u)) for u in (matrix, SWAP @ matrix, SWAP, np.eye(4))] == [1, 1, 0, 0]


@pytest.mark.parametrize("name", ENTANGLERS)
def test_haar_unitaries(name):
    unitary = scipy.stats.unitary_group(dim=4, seed=31).rvs(300)
    entangler = classify(ENTANGLERS[name][0])
    circuit = entangler.synthesise(unitary)
    assert (circuit.uses == 3).all()
    assert (circuit.distance == 0).all()
    assert (distance(circuit.matrix(entangler.matrix), unitary) <= ACCURACY).all()
    assert (entangler.count_exchanged(unitary) == 3).all()


@pytest.mark.parametrize("mirrored", [False, True])
def test_every_hard_case(cases, mirrored):
    rng = np.random.default_rng(32)
    gate = kron(*haar_unitary(2, 2, rng=rng)) @ (ISWAP if mirrored else CX) @ kron(*haar_unitary(2, 2, rng=rng))
    entangler = classify(np.exp(1j) * gate)
    assert entangler.mirrored == mirrored
    for tolerance, families in ((1e-12, cases.families(10**4, rng)), (1e-6, cases.rounded_families(500, rng))):
        for family in families:
            circuit = entangler.synthesise(family.unitaries, tolerance=tolerance)
            expected = family.iswaps if mirrored else family.cnots
            error, wrong = cases.faults(family.unitaries, circuit, gate, expected, tolerance=tolerance)
            assert error <= ACCURACY, family.name
            assert wrong == 0, family.name
            assert (entangler.count(family.unitaries, tolerance=tolerance) == circuit.uses).all()


@given(st.sampled_from(list(ENTANGLERS)), st.integers(0, 3), st.integers(0, 2**32))
@settings(deadline=None, max_examples=150)
def test_circuits_of_k_need_no_more_than_k(name, k, seed):
    rng = np.random.default_rng(seed)
    gate = kron(*haar_unitary(2, 2, rng=rng)) @ ENTANGLERS[name][0] @ kron(*haar_unitary(2, 2, rng=rng))
    entangler = classify(gate)
    product = kron(*haar_unitary(2, 2, rng=rng))
    for _ in range(k):
        product = kron(*haar_unitary(2, 2, rng=rng)) @ gate @ product
    circuit = entangler.synthesise(product)
    assert circuit.uses == k
    assert distance(circuit.matrix(gate), product) <= ACCURACY


@given(*[st.one_of(st.floats(-1.6, 1.6), st.sampled_from([0.0, QUARTER, -QUARTER]))] * 3)
@settings(deadline=None, max_examples=150)
def test_counts_by_swaps_and_cnots(x, y, z):
    # k iSWAPs reach SWAP^k times what k CNOTs reach; with the outputs free to be exchanged both gates count the same.
    unitary = canonical_matrix([x, y, z])
    straight, crossed = int(cnot_count(unitary)), int(cnot_count(SWAP @ unitary))
    cz, iswap = classify(CZ), classify(ISWAP)
    assert cz.count(unitary) == straight
    assert iswap.count(unitary) == min(
        [k for k in (0, 2) if straight == k] + [k for k in (1, 3) if crossed == k] + [2 if straight == 1 else 3]
    )
    assert cz.count_exchanged(unitary) == min(straight, crossed)
    assert iswap.count_exchanged(unitary) == min(int(iswap.count(unitary)), int(iswap.count(SWAP @ unitary)))


def test_points_instead_of_unitaries():
    unitary = haar_unitary(4, (2, 3), rng=33)
    unitary[0] = [np.eye(4), CX, SWAP]
    points = canonical_coordinates(unitary)
    for matrix in (CZ, ISWAP):
        entangler = classify(matrix)
        assert entangler.count(points).tolist() == entangler.count(unitary).tolist()
        assert entangler.count_exchanged(points).tolist() == entangler.count_exchanged(unitary).tolist()
        assert entangler.count(points).shape == (2, 3)
        assert entangler.count(points[0, 1]).shape == ()
        circuit = entangler.synthesise(unitary)
        assert circuit.uses.tolist() == entangler.count(unitary).tolist()
        assert (distance(circuit.matrix(matrix), unitary) <= ACCURACY).all()


@pytest.mark.parametrize("matrix", [CX, ISWAP])
@pytest.mark.parametrize("how", ["8 digits", "float32"])
def test_rounded_entangler_is_used_honestly(matrix, how):
    rng = np.random.default_rng(34)
    gate = kron(*haar_unitary(2, 2, rng=rng)) @ matrix @ kron(*haar_unitary(2, 2, rng=rng))
    gate = nearest_unitary(gate.round(8) if how == "8 digits" else gate.astype(np.complex64))
    assert not classify(gate).closed
    entangler = classify(gate, tolerance=1e-6)
    assert entangler.closed
    assert 1e-10 < entangler.deviation < 1e-6
    unitary = haar_unitary(4, 100, rng=rng)
    unitary[:3] = np.eye(4), gate, SWAP
    circuit = entangler.synthesise(unitary, tolerance=1e-6)
    assert circuit.uses.tolist() == [0, 1] + [3] * 98
    measured = distance(circuit.matrix(gate), unitary)
    assert (measured <= circuit.distance + ACCURACY).all()
    assert circuit.distance[0] == 0
    assert circuit.distance[3:] == pytest.approx(3 * entangler.deviation, rel=1e-12)


@pytest.mark.parametrize(
    ("matrix", "message"),
    [
        (np.eye(4), "cannot entangle: it is a product of one-qubit gates"),
        (kron(*haar_unitary(2, 2, rng=35)), "cannot entangle: it is a product of one-qubit gates"),
        (SWAP, "cannot entangle: it is SWAP times a product of one-qubit gates"),
        (SWAP @ kron(*haar_unitary(2, 2, rng=36)), "cannot entangle: it is SWAP times"),
        (canonical_matrix([QUARTER, -QUARTER, QUARTER - 1e-14]), "cannot entangle: it is SWAP times"),
    ],
)
def test_gates_that_cannot_entangle(matrix, message):
    with pytest.raises(GateSetError, match=message):
        classify(matrix)


def test_bad_input():
    for matrix in (np.eye(2), np.stack([CX, CX]), "CX"):
        with pytest.raises(MatrixError):
            classify(matrix)
    with pytest.raises(MatrixError, match="not finite"):
        classify(np.full((4, 4), np.inf))
    with pytest.raises(NotUnitaryError):
        classify(CX * 1.01)
    with pytest.raises(MatrixError, match="shape"):
        classify(CX).synthesise(np.eye(2))
    with pytest.raises(MatrixError, match="shape"):
        classify(CX).count(np.eye(2))


def test_the_entangler_keeps_its_own_copy():
    gate = CX.copy()
    entangler = classify(gate)
    gate[0, 0] = 5
    assert entangler.matrix[0, 0] == 1
