"""Least CNOT counts and the circuits that attain them: against the published criteria and on every hard case."""

import importlib.util
import itertools
import sys
from pathlib import Path

import numpy as np
import pytest
import scipy.stats
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import MatrixError, NotUnitaryError
from gatewright.linalg import distance, haar_unitary, kron
from gatewright.synthesis.controlled_not import class_distances, cnot_count, count_reason, synthesise
from gatewright.synthesis.weyl import canonical_coordinates, canonical_matrix

QUARTER = np.pi / 4
CX = np.eye(4)[[0, 1, 3, 2]]
CX_REVERSED = np.eye(4)[[0, 3, 2, 1]]
SWAP = np.eye(4)[[0, 2, 1, 3]]
ACCURACY = 2e-14


@pytest.fixture(scope="module")
def cases():
    """The benchmark's module, whose families of hard cases the suite shares."""
    path = Path(__file__).parent / "bench" / "two_qubit.py"
    spec = importlib.util.spec_from_file_location("bench_two_qubit", path)
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    yield module
    del sys.modules[spec.name]


def test_every_hard_case(cases):
    seen = set()
    for family in cases.families(10**4, np.random.default_rng(21)):
        circuit = synthesise(family.unitaries)
        error, wrong = cases.faults(family.unitaries, circuit, CX, family.cnots, tolerance=1e-12)
        assert error <= ACCURACY, family.name
        assert wrong == 0, family.name
        seen.update(circuit.uses.tolist())
    assert seen == {0, 1, 2, 3}


def test_rounded_entries(cases):
    for family in cases.rounded_families(1000, np.random.default_rng(22)):
        circuit = synthesise(family.unitaries, tolerance=1e-6)
        error, wrong = cases.faults(family.unitaries, circuit, CX, family.cnots, tolerance=1e-6)
        assert error <= ACCURACY, family.name
        assert wrong == 0, family.name
        strict = synthesise(family.unitaries)
        assert (distance(strict.matrix(CX), family.unitaries) <= ACCURACY).all()


def test_published_criteria(cases):
    # Shende, Bullock & Markov, PRA 70, 012310 (2004), on γ(U), by code of the benchmark's own.
    rng = np.random.default_rng(23)
    places = [canonical_matrix(cases.points(name, 20, rng)) for name in cases.PLACES]
    unitary = np.concatenate([*places, haar_unitary(4, 200, rng=rng)])
    unitary = cases.local_gates(len(unitary), rng) @ unitary @ cases.local_gates(len(unitary), rng)
    counts = cnot_count(unitary)
    assert (counts == cases.gamma_count(unitary)).all()
    assert set(counts.tolist()) == {0, 1, 2, 3}
    assert (synthesise(unitary).uses == counts).all()


def test_criteria_need_determinant_one(cases):
    # det CZ = −1: without the normalisation tr γ is not 0, and CZ would seem to need more than one CNOT.
    cz = np.diag([1, 1, 1, -1])
    yy = np.fliplr(np.diag([-1, 1, 1, -1]))
    squared = np.linalg.matrix_power(cz @ yy @ cz.T @ yy, 2)
    assert not np.allclose(squared, -np.eye(4))
    assert cases.gamma_count(cz[None].astype(complex)).tolist() == cnot_count(cz[None]).tolist() == [1]


def test_all_permutations(cases):
    matrices = np.array([np.eye(4)[list(order)] for order in itertools.permutations(range(4))], dtype=complex)
    assert (cnot_count(matrices) == cases.gamma_count(matrices)).all()
    circuit = synthesise(matrices)
    assert (distance(circuit.matrix(CX), matrices) <= ACCURACY).all()


def test_haar_unitaries_need_three():
    # Shende, Bullock & Markov 2004: fewer reach only a set of measure zero.
    unitary = scipy.stats.unitary_group(dim=4, seed=24).rvs(2000)
    circuit = synthesise(unitary)
    assert (circuit.uses == 3).all()
    assert (circuit.distance == 0).all()
    assert (distance(circuit.matrix(CX), unitary) <= ACCURACY).all()


def test_swap_and_its_company():
    # SWAP needs 3 (Vatan & Williams, PRA 69, 032315 (2004)); SWAP · CNOT is of the iSWAP class and needs 2.
    assert cnot_count(SWAP) == 3
    assert cnot_count(SWAP @ CX) == cnot_count(CX @ SWAP) == 2
    assert cnot_count(CX) == cnot_count(CX_REVERSED) == 1
    assert cnot_count(CX @ CX_REVERSED) == 2
    assert cnot_count(CX @ CX_REVERSED @ CX) == 3
    assert cnot_count(np.diag(np.exp(1j * np.arange(4) ** 2))) == 2


@given(st.integers(0, 3), st.integers(0, 2**32))
@settings(deadline=None, max_examples=60)
def test_circuits_of_k_need_no_more_than_k(k, seed):
    rng = np.random.default_rng(seed)
    product = kron(*haar_unitary(2, 2, rng=rng))
    for _ in range(k):
        product = kron(*haar_unitary(2, 2, rng=rng)) @ CX @ product
    assert cnot_count(product) == k
    circuit = synthesise(product)
    assert distance(circuit.matrix(CX), product) <= ACCURACY


@given(*[st.floats(0, QUARTER)] * 3, st.integers(0, 2**32))
@settings(deadline=None, max_examples=100)
def test_any_unitary(x, y, z, seed):
    rng = np.random.default_rng(seed)
    unitary = kron(*haar_unitary(2, 2, rng=rng)) @ canonical_matrix([x, y, z]) @ kron(*haar_unitary(2, 2, rng=rng))
    circuit = synthesise(unitary)
    assert circuit.uses == cnot_count(unitary)
    assert abs(distance(circuit.matrix(CX), unitary) - circuit.distance) <= ACCURACY
    assert circuit.distance <= 1e-12


@pytest.mark.parametrize(
    ("point", "step", "fewer", "more"),
    [
        # The class, and a step of it that leads as far away in operator norm.
        ([0.5, 0.3, 0], [0, 0, 1], 2, 3),
        ([0.5, 0.3, 0], [0, 0, -1], 2, 3),
        ([QUARTER, 0.3, 0], [0, 0, 1], 2, 3),
        ([QUARTER, 0.3, 0], [0, 0, -1], 2, 3),
        ([QUARTER, QUARTER, 0], [0, 0, -1], 2, 3),
        ([QUARTER, 0, 0], [0, 1, 0], 1, 2),
        ([QUARTER, 0, 0], [1, 0, 0], 1, 2),
        ([QUARTER, 0, 0], [-1, 0, 0], 1, 2),
        ([0, 0, 0], [0, -1, 0], 0, 2),
    ],
)
@pytest.mark.parametrize("tolerance", [1e-12, 1e-6, 1e-3])
def test_the_tolerance_decides(point, step, fewer, more, tolerance):
    local = kron(*haar_unitary(2, 2, rng=25))
    for share, count in ((0.98, fewer), (1.02, more)):
        unitary = local @ canonical_matrix(np.array(point) + share * tolerance * np.array(step))
        circuit = synthesise(unitary, tolerance=tolerance)
        assert circuit.uses == cnot_count(unitary, tolerance=tolerance) == count
        recorded = 2 * np.sin(share * tolerance / 2) if count == fewer else 0.0
        assert circuit.distance == pytest.approx(recorded, abs=ACCURACY)
        assert distance(circuit.matrix(CX), unitary) == pytest.approx(recorded, abs=ACCURACY)


def test_swap_with_all_signs():
    signs = np.array(list(itertools.product((-1, 1), repeat=3)))
    for step in (0, 1e-15, 1e-13, 1e-9):
        unitary = canonical_matrix((QUARTER - step) * signs)
        assert (cnot_count(unitary) == 3).all()
        assert (distance(synthesise(unitary).matrix(CX), unitary) <= ACCURACY).all()


def images(point: np.ndarray) -> np.ndarray:
    """All points of the same class near the chamber: permutations, even sign changes, shifts by π/2."""
    signs = [s for s in itertools.product((-1, 1), repeat=3) if np.prod(s) == 1]
    shifts = itertools.product((-np.pi / 2, 0, np.pi / 2), repeat=3)
    return np.array(
        [
            point[list(order)] * sign + np.array(shift)
            for order, sign, shift in itertools.product(itertools.permutations(range(3)), signs, list(shifts))
        ]
    )


def test_distance_to_a_class_is_that_of_its_nearest_image():
    points = canonical_coordinates(haar_unitary(4, 40, rng=26))
    target = canonical_matrix(points)
    for column, place in ((0, [0, 0, 0]), (1, [QUARTER, 0, 0])):
        candidates = np.unique(images(np.array(place, dtype=float)).round(12), axis=0)
        nearest = distance(target[:, None], canonical_matrix(candidates)).min(axis=1)
        assert class_distances(points)[:, column] == pytest.approx(nearest, abs=1e-11)
    flattened = []
    for axis, height in itertools.product(range(3), (-np.pi / 2, 0, np.pi / 2)):
        flat = points.copy()
        flat[:, axis] = height
        flattened.append(distance(target, canonical_matrix(flat)))
    assert class_distances(points)[:, 2] == pytest.approx(np.min(flattened, axis=0), abs=1e-13)


@given(st.sampled_from([0, 1, 2]), st.floats(0, 1.5), st.integers(0, 2**32))
@settings(deadline=None, max_examples=200)
def test_no_gate_of_a_class_is_nearer(k, size, seed):
    # A gate of the class, moved by a known distance, is never reported as farther away than that.
    rng = np.random.default_rng(seed)
    point = [[0, 0, 0], [QUARTER, 0, 0], [*rng.uniform(-1, 1, 2), 0]][k]
    h = rng.standard_normal((4, 4)) + 1j * rng.standard_normal((4, 4))
    values, vectors = np.linalg.eigh(h + h.conj().T)
    # Often few directions only, where the bound is tight.
    values *= rng.integers(0, 2, 4)
    values *= size / max(np.abs(values).max(), 1e-3)
    member = kron(*haar_unitary(2, 2, rng=rng)) @ canonical_matrix(point)
    moved = (vectors * np.exp(1j * values)) @ vectors.conj().T @ member
    assert class_distances(canonical_coordinates(moved))[k] <= distance(moved, member) + 1e-14


def test_shape_and_form_of_the_circuits():
    unitary = haar_unitary(4, (2, 3), rng=27)
    unitary[0, 0] = np.eye(4)
    unitary[0, 1] = CX
    unitary[0, 2] = CX @ kron(*haar_unitary(2, 2, rng=28)) @ CX
    before = unitary.copy()
    circuit = synthesise(unitary)
    assert (unitary == before).all()
    assert circuit.uses.tolist() == [[0, 1, 2], [3, 3, 3]]
    assert circuit.layers.shape == (2, 3, 4, 2, 2, 2)
    assert circuit.distance.shape == (2, 3)
    assert circuit.matrix(CX).shape == (2, 3, 4, 4)
    layer = np.arange(4)[None, None, :, None]
    beyond = np.broadcast_to(layer > circuit.uses[..., None, None], (2, 3, 4, 2))
    assert (circuit.layers[beyond] == np.eye(2)).all()
    assert np.abs(np.linalg.det(circuit.layers) - 1).max() < 2e-15
    gram = circuit.layers @ np.conj(np.swapaxes(circuit.layers, -1, -2))
    assert np.abs(gram - np.eye(2)).max() < 2e-15
    single = synthesise(unitary[0, 2])
    assert single.uses.shape == single.distance.shape == ()
    assert (single.layers == circuit.layers[0, 2]).all()
    assert synthesise(np.empty((0, 4, 4))).layers.shape == (0, 4, 2, 2, 2)


@pytest.mark.parametrize(
    ("unitary", "count", "words"),
    [
        (np.eye(4), 0, ["0 CNOTs", "product of one-qubit gates"]),
        (CX, 1, ["1 CNOT:", "(π/4, 0, 0)", "0.765 away"]),
        (canonical_matrix([0.5, 0.25, 0]), 2, ["2 CNOTs", "z = 0", "0.529 away", "0.733 away"]),
        (SWAP, 3, ["3 CNOTs", "two reach only z = 0", "0.765 away", "z = 0.785398"]),
    ],
)
def test_reasons(unitary, count, words):
    assert cnot_count(unitary) == count
    reason = count_reason(canonical_coordinates(unitary), count)
    for word in words:
        assert word in reason
    assert reason.endswith(".") and "\n" not in reason


def test_bad_input():
    for function in (synthesise, cnot_count):
        with pytest.raises(MatrixError, match="shape"):
            function(np.eye(8))
        with pytest.raises(MatrixError, match="not finite"):
            function(np.full((4, 4), np.nan))
        with pytest.raises(NotUnitaryError):
            function(np.ones((4, 4)))
