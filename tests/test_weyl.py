"""Canonical decomposition, chamber, invariants: against published tables, SciPy and definitions."""

import itertools

import numpy as np
import pytest
import scipy.linalg
import scipy.stats
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import MatrixError, NotUnitaryError
from gatewright.linalg import haar_unitary, kron
from gatewright.synthesis.weyl import (
    canonical_coordinates,
    canonical_decomposition,
    canonical_matrix,
    entangling_power,
    is_perfect_entangler,
    local_invariants,
    mirrored_coordinates,
)

PI = np.pi
QUARTER = PI / 4
X = np.array([[0, 1], [1, 0]], dtype=complex)
Y = np.array([[0, -1j], [1j, 0]])
Z = np.diag([1, -1]).astype(complex)
CX = np.eye(4)[[0, 1, 3, 2]]
SWAP = np.eye(4)[[0, 2, 1, 3]]
ISWAP = np.array([[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]])
ROOT_ISWAP = scipy.linalg.block_diag(1, np.array([[1, 1j], [1j, 1]]) / np.sqrt(2), 1)
# The root that is −i on the singlet, as SWAP = exp(i(XX + YY + ZZ)π/4) up to phase gives it.
ROOT_SWAP = scipy.linalg.block_diag(1, np.array([[1 - 1j, 1 + 1j], [1 + 1j, 1 - 1j]]) / 2, 1)


def exponential(x: float, y: float, z: float) -> np.ndarray:
    return scipy.linalg.expm(1j * (x * np.kron(X, X) + y * np.kron(Y, Y) + z * np.kron(Z, Z)))


# Makhlin, Quant. Inf. Proc. 1, 243 (2002), in the normalisation of Zhang, Vala, Sastry & Whaley, PRA 67, 042313
# (2003); every row was also recomputed with NumPy by a route of its own.
TABLE = [
    ("identity", np.eye(4), (0, 0, 0), 1, 3, 0),
    ("CNOT", CX, (QUARTER, 0, 0), 0, 1, 2 / 9),
    ("CZ", np.diag([1, 1, 1, -1]), (QUARTER, 0, 0), 0, 1, 2 / 9),
    (
        "root of CNOT",
        scipy.linalg.block_diag(1, 1, np.array([[1 + 1j, 1 - 1j], [1 - 1j, 1 + 1j]]) / 2),
        (PI / 8, 0, 0),
        1 / 2,
        2,
        1 / 9,
    ),
    ("iSWAP", ISWAP, (QUARTER, QUARTER, 0), 0, -1, 2 / 9),
    ("root of iSWAP", ROOT_ISWAP, (PI / 8, PI / 8, 0), 1 / 4, 1, 1 / 6),
    ("SWAP", SWAP, (QUARTER, QUARTER, QUARTER), -1, -3, 0),
    ("root of SWAP", ROOT_SWAP, (PI / 8, PI / 8, PI / 8), 1j / 4, 0, 1 / 6),
    ("inverse root of SWAP", ROOT_SWAP.conj().T, (PI / 8, PI / 8, -PI / 8), -1j / 4, 0, 1 / 6),
    ("B", exponential(QUARTER, PI / 8, 0), (QUARTER, PI / 8, 0), 0, 0, 2 / 9),
]


@pytest.mark.parametrize(("name", "gate", "point", "g1", "g2", "power"), TABLE, ids=[row[0] for row in TABLE])
def test_table_of_gates(name, gate, point, g1, g2, power):
    dressed = np.exp(0.7j) * kron(*haar_unitary(2, 2, rng=1)) @ gate @ kron(*haar_unitary(2, 2, rng=2))
    for matrix in (gate, dressed):
        assert canonical_coordinates(matrix) == pytest.approx(point, abs=2e-15)
        first, second = local_invariants(matrix)
        assert abs(first - g1) < 5e-15
        assert abs(second - g2) < 1e-14
        assert entangling_power(matrix) == pytest.approx(power, abs=2e-15)


def test_invariants_of_a_gate_beyond_the_table():
    # CAN(π/4, π/4, π/24), recomputed with NumPy by a route of its own (no published source).
    gate = exponential(QUARTER, QUARTER, PI / 24)
    g1, g2 = local_invariants(gate)
    assert g1 == pytest.approx(-0.066987, abs=1e-6)
    assert g2 == pytest.approx(-1.133975, abs=1e-6)
    assert entangling_power(gate) == pytest.approx(0.2073, abs=1e-4)


def test_canonical_matrix_is_the_exponential():
    rng = np.random.default_rng(3)
    points = rng.uniform(-4, 4, (20, 3))
    expected = np.array([exponential(*point) for point in points])
    assert np.abs(canonical_matrix(points) - expected).max() < 2e-14
    assert canonical_matrix(points.reshape(4, 5, 3)).shape == (4, 5, 4, 4)


def in_chamber(points: np.ndarray) -> np.ndarray:
    x, y, z = np.moveaxis(points, -1, 0)
    wall = (x < QUARTER - 2e-16) | (z >= 0)
    return (x <= QUARTER) & (y <= x) & (np.abs(z) <= y) & wall


def assert_decomposes(unitary: np.ndarray, tolerance: float = 1e-14) -> np.ndarray:
    parts = canonical_decomposition(unitary)
    assert np.linalg.norm(parts.matrix() - unitary, ord=2, axis=(-2, -1)).max() < tolerance
    assert in_chamber(parts.coordinates).all()
    for gates in (parts.left, parts.right):
        gram = gates @ np.conj(np.swapaxes(gates, -1, -2))
        assert np.abs(gram - np.eye(2)).max() < 1e-15
        assert np.abs(np.linalg.det(gates) - 1).max() < 1e-15
    assert (np.abs(parts.phase) <= PI).all()
    return parts.coordinates


def test_haar_unitaries():
    unitary = scipy.stats.unitary_group(dim=4, seed=11).rvs(3000)
    points = assert_decomposes(unitary)
    # Zhang, Vala, Sastry & Whaley, PRA 67, 042313 (2003), eqs. for G1 and G2, whose c is twice ours.
    cos, sin = np.cos(2 * points).prod(axis=-1) ** 2, np.sin(2 * points).prod(axis=-1) ** 2
    g1, g2 = local_invariants(unitary)
    assert np.abs(g1 - (cos - sin + 0.25j * np.sin(4 * points).prod(axis=-1))).max() < 2e-14
    assert np.abs(g2 - (4 * cos - 4 * sin - np.cos(4 * points).prod(axis=-1))).max() < 5e-14


def test_haar_share_of_perfect_entanglers():
    # 8/(3π): Watts, O'Connor & Vala, Entropy 15, 1963 (2013).
    unitary = scipy.stats.unitary_group(dim=4, seed=12).rvs(20000)
    share = is_perfect_entangler(canonical_coordinates(unitary)).mean()
    expected = 8 / (3 * PI)
    assert share == pytest.approx(expected, abs=4 * np.sqrt(expected * (1 - expected) / len(unitary)))


def test_flat_share_of_perfect_entanglers():
    # Exactly one half of the chamber's volume: Zhang, Vala, Sastry & Whaley, PRA 67, 042313 (2003).
    rng = np.random.default_rng(13)
    points = rng.uniform(-QUARTER, QUARTER, (400000, 3))
    points = points[in_chamber(points)]
    assert is_perfect_entangler(points).mean() == pytest.approx(0.5, abs=4 * 0.5 / np.sqrt(len(points)))


def test_perfect_entanglers_by_the_convex_hull():
    # Makhlin 2002: perfect exactly if the eigenvalues of MᵀM hold 0 in their convex hull.
    unitary = haar_unitary(4, 2000, rng=14)
    magic = np.array([[1, 0, 0, 1j], [0, 1j, 1, 0], [0, 1j, -1, 0], [1, 0, 0, -1j]]) / np.sqrt(2)
    m = magic.conj().T @ unitary @ magic
    angles = np.sort(np.angle(np.linalg.eigvals(np.swapaxes(m, -1, -2) @ m)), axis=-1)
    gaps = np.diff(angles, axis=-1, append=angles[:, :1] + 2 * PI)
    assert (is_perfect_entangler(canonical_coordinates(unitary)) == (gaps.max(axis=-1) <= PI)).all()


def test_perfect_entanglers_on_the_boundary():
    # CNOT, iSWAP, B and √iSWAP lie on it (Zhang et al. 2003); SWAP, 1 and √CNOT lie outside.
    gates = [row[2] for row in TABLE if row[0] in ("CNOT", "iSWAP", "B", "root of iSWAP", "root of SWAP")]
    assert is_perfect_entangler(gates).all()
    assert not is_perfect_entangler([row[2] for row in TABLE if row[0] in ("SWAP", "identity", "root of CNOT")]).any()


def test_entangling_power_by_its_definition():
    # Zanardi, Zalka & Faoro, PRA 62, 030301 (2000): mean linear entropy over product states. The eigenstates of the
    # Pauli matrices are a 2-design, so that averaging over their products is exact.
    states = [np.linalg.eigh(pauli)[1][:, k] for pauli in (X, Y, Z) for k in range(2)]
    products = np.array([np.kron(a, b) for a, b in itertools.product(states, repeat=2)])
    unitary = haar_unitary(4, 50, rng=15)
    psi = np.einsum("nij,sj->nsi", unitary, products).reshape(50, 36, 2, 2)
    rho = psi @ np.conj(np.swapaxes(psi, -1, -2))
    entropy = 1 - np.einsum("nsij,nsji->ns", rho, rho).real
    assert entangling_power(unitary) == pytest.approx(entropy.mean(axis=-1), abs=1e-14)


def test_decomposition_keeps_leading_axes_and_its_input():
    unitary = haar_unitary(4, (2, 3), rng=16)
    unitary.setflags(write=False)
    parts = canonical_decomposition(unitary)
    assert parts.phase.shape == (2, 3)
    assert parts.left.shape == parts.right.shape == (2, 3, 2, 2, 2)
    assert parts.coordinates.shape == (2, 3, 3)
    single = canonical_decomposition(unitary[1, 2])
    assert single.coordinates.tolist() == parts.coordinates[1, 2].tolist()
    assert single.phase.shape == ()
    assert canonical_coordinates(np.empty((0, 4, 4))).shape == (0, 3)
    turned = np.swapaxes(unitary, -1, -2)
    assert_decomposes(turned)


def test_monomial_matrices():
    rng = np.random.default_rng(17)
    for order in itertools.permutations(range(4)):
        permutation = np.eye(4)[list(order)]
        phases = 1j ** rng.integers(0, 4, (20, 1, 4))
        assert_decomposes(np.concatenate([permutation[None], permutation * phases]))


angle = st.floats(-1.6, 1.6)
special = st.sampled_from([0.0, PI / 8, -PI / 8, QUARTER, -QUARTER, PI / 2])
coordinate = st.one_of(angle, special)
size = st.one_of(st.just(0.0), st.integers(1, 16).map(lambda k: 10.0**-k))


@given(coordinate, coordinate, coordinate, size, st.booleans(), st.integers(0, 2**32))
@settings(deadline=None, max_examples=300)
def test_any_point_and_its_neighbourhood(x, y, z, step, dressed, seed):
    rng = np.random.default_rng(seed)
    point = np.array([x, y, z]) + step * rng.uniform(-1, 1, 3)
    unitary = canonical_matrix(point)
    if dressed:
        unitary = kron(*haar_unitary(2, 2, rng=rng)) @ unitary @ kron(*haar_unitary(2, 2, rng=rng))
    found = assert_decomposes(unitary)
    # Up to the sign of z, the chamber point is the sorted distances from the multiples of π/2.
    folded = np.sort(np.abs(point - PI / 2 * np.round(point / (PI / 2))))[::-1]
    assert np.abs(np.abs(found) - folded).max() < 3e-15


@given(st.integers(0, 2**32))
@settings(deadline=None, max_examples=100)
def test_coordinates_under_symmetries(seed):
    rng = np.random.default_rng(seed)
    u = haar_unitary(4, rng=rng)
    point = canonical_coordinates(u)
    dressed = np.exp(5j) * kron(*haar_unitary(2, 2, rng=rng)) @ u @ kron(*haar_unitary(2, 2, rng=rng))
    assert np.abs(canonical_coordinates(dressed) - point).max() < 1e-14
    assert np.abs(canonical_coordinates(u.T) - point).max() < 1e-14
    assert np.abs(canonical_coordinates(SWAP @ u @ SWAP) - point).max() < 1e-14
    assert np.abs(canonical_coordinates(u.conj()) - point * [1, 1, -1]).max() < 1e-14
    # Mirror gates: SWAP · CAN(x,y,z) is CAN(π/4 − z, π/4 − y, x − π/4) up to local gates, for z ≥ 0.
    assert np.abs(canonical_coordinates(SWAP @ u) - mirrored_coordinates(point)).max() < 1e-14


@pytest.mark.parametrize("row", TABLE, ids=[row[0] for row in TABLE])
def test_mirror_of_the_table(row):
    assert mirrored_coordinates(row[2]) == pytest.approx(canonical_coordinates(SWAP @ row[1]), abs=2e-15)


@pytest.mark.parametrize(
    ("matrix", "message"),
    [
        (np.eye(3), r"required: numbers in shape \(\.\.\., 4, 4\); found: shape \(3, 3\)"),
        (np.eye(2), r"found: shape \(2, 2\)"),
        (5.0, r"found: shape \(\)"),
        ("text", "not a stack of two-qubit matrices"),
        ([[1, 2], [3]], "not a stack of two-qubit matrices"),
        (np.where(np.eye(4) == 1, np.nan, 0), r"not finite.*row 0, column 0"),
        (np.diag([1, 1, np.inf, 1]), r"not finite.*row 2, column 2"),
    ],
)
def test_not_a_matrix(matrix, message):
    for function in (canonical_decomposition, canonical_coordinates, local_invariants, entangling_power):
        with pytest.raises(MatrixError, match=message):
            function(matrix)


def test_place_in_the_stack_is_named():
    stack = haar_unitary(4, 6, rng=18)
    stack[4, 1, 2] = np.nan
    with pytest.raises(MatrixError, match="matrix 4 of the stack.*row 1, column 2"):
        canonical_coordinates(stack)
    stack[4] = np.eye(4) * 1.1
    with pytest.raises(NotUnitaryError, match="matrix 4 of the stack") as caught:
        canonical_coordinates(stack)
    assert caught.value.defect == pytest.approx(0.21)
    assert caught.value.distance == pytest.approx(0.1)


@pytest.mark.parametrize("scale", [0.0, 0.5, 1e200, 1e308])
def test_not_unitary(scale):
    with pytest.raises(NotUnitaryError):
        canonical_decomposition(np.full((4, 4), scale))
    with pytest.raises(NotUnitaryError):
        canonical_decomposition(scale * np.eye(4))


def test_complex_orthogonal_is_not_unitary():
    # MᵀM is 1 for it, as for local gates; only the decomposition's own check tells.
    generator = np.triu(np.arange(16.0).reshape(4, 4) / 10, 1)
    magic = np.array([[1, 0, 0, 1j], [0, 1j, 1, 0], [0, 1j, -1, 0], [1, 0, 0, -1j]]) / np.sqrt(2)
    orthogonal = scipy.linalg.expm(1j * (generator - generator.T))
    with pytest.raises(NotUnitaryError):
        canonical_decomposition(magic @ orthogonal @ magic.conj().T)


def test_input_with_a_defect_of_its_own():
    rng = np.random.default_rng(19)
    for defect in (1e-14, 1e-12, 1e-10):
        for point in ([0, 0, 0], [QUARTER, 0, 0], [QUARTER, QUARTER, QUARTER], [0.5, 0.3, 0.1]):
            exact = kron(*haar_unitary(2, 2, rng=rng)) @ canonical_matrix(point)
            rough = exact + defect * rng.uniform(-1, 1, (200, 4, 4))
            assert_decomposes(rough, 1e-14 + 10 * defect)


def test_rotation_without_a_preferred_angle():
    # Diagonal entries of MᵀM that differ by δ, with iδ/2 beside them: every Jacobi angle is as good as any other, and
    # in exact binary fractions nothing of that is lost to rounding. The input is unitary to 1e-9 only.
    delta = 2.0**-32
    magic = np.array([[0, 1j, 1, 0], [1, 0, 0, -1j], [-1, 0, 0, -1j], [0, -1j, 1, 0]])
    m = np.eye(4, dtype=complex)
    m[:2, :2] += delta / 4 * np.array([[1, 1j], [1j, -1]])
    assert_decomposes((magic @ m @ magic.conj().T / 2)[None], 1e-9)
