"""Stacks of small matrices: against SciPy, published averages, and plain statements."""

import numpy as np
import pytest
import scipy.linalg
import scipy.stats
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import MatrixError, NotUnitaryError
from gatewright.linalg import (
    average_fidelity,
    checked_unitary,
    dagger,
    distance,
    haar_unitary,
    kron,
    nearest_unitary,
    phase_between,
    reorder_qubits,
    unitarity_defect,
)

EPS = np.finfo(float).eps
seeds = st.integers(0, 2**32 - 1)


def hermitian(rng: np.random.Generator, d: int) -> np.ndarray:
    """A traceless Hermitian matrix whose extreme eigenvalues are ±1."""
    h = rng.normal(size=(d, d)) + 1j * rng.normal(size=(d, d))
    h = h + h.conj().T
    values = np.linalg.eigvalsh(h)
    return (2 * h - (values[0] + values[-1]) * np.eye(d)) / (values[-1] - values[0])


def test_kron_is_that_of_numpy_and_broadcasts():
    rng = np.random.default_rng(1)
    a, b = rng.normal(size=(5, 1, 2, 3)), rng.normal(size=(4, 3, 2)) * 1j
    product = kron(a, b)
    assert product.shape == (5, 4, 6, 6)
    assert np.array_equal(product[3, 2], np.kron(a[3, 0], b[2]))


def test_dagger_over_the_last_axes():
    a = np.arange(12).reshape(2, 2, 3) * (1 + 2j)
    assert np.array_equal(dagger(a)[1], a[1].conj().T)


@given(seeds, st.sampled_from([2, 4, 8]), st.integers(1, 16))
@settings(deadline=None, max_examples=60)
def test_distance_of_a_known_rotation(seed, d, power):
    # exp(i t H), H with extreme eigenvalues ±1, is 2 sin(t/2) from 1, and no phase brings it nearer.
    rng = np.random.default_rng(seed)
    t = 10.0**-power
    u, h = haar_unitary(d, rng=rng), hermitian(rng, d)
    moved = np.exp(1j * rng.uniform(0, 7)) * u @ scipy.linalg.expm(1j * t * h)
    assert distance(moved, u) == pytest.approx(2 * np.sin(t / 2), abs=40 * d * EPS)
    assert distance(u, moved) == pytest.approx(distance(moved, u), abs=40 * d * EPS)


def test_distance_is_the_least_over_all_phases():
    a, b = haar_unitary(4, 20, rng=3), haar_unitary(4, 20, rng=4)
    phases = np.exp(1j * np.linspace(0, 2 * np.pi, 2001))
    brute = np.linalg.norm(a[:, None] - phases[:, None, None] * b[:, None], ord=2, axis=(-2, -1)).min(axis=1)
    found = distance(a, b)
    assert (found <= brute + 1e-12).all()
    assert np.abs(found - brute).max() < 2e-3


def test_distance_of_named_gates():
    # Eigenphases 0 and π; 0, π/2, π and 3π/2: the shortest arcs that hold them are π and 3π/2, and 2 sin(arc/4).
    assert distance(np.eye(2), np.diag([1, -1])) == pytest.approx(np.sqrt(2))
    assert distance(np.eye(4), np.diag([1, 1j, -1, -1j])) == pytest.approx(2 * np.sin(3 * np.pi / 8))
    assert distance(np.zeros((0, 2, 2)), np.eye(2)).shape == (0,)


def test_phase_between_minimises_the_frobenius_norm():
    u = haar_unitary(4, 50, rng=5)
    noisy = u * np.exp(1.2j) + 0.05 * haar_unitary(4, 50, rng=6)
    phase = phase_between(noisy, u)

    def gap(shift: float) -> np.ndarray:
        return np.linalg.norm(noisy - np.exp(1j * (phase + shift))[:, None, None] * u, axis=(-2, -1))

    assert (gap(0.0) <= gap(1e-3)).all() and (gap(0.0) <= gap(-1e-3)).all()
    assert np.abs(phase - 1.2).max() < 0.1


@given(seeds, st.sampled_from([2, 4]))
@settings(deadline=None, max_examples=30)
def test_average_fidelity_is_the_average_over_states(seed, d):
    # The eigenstates of the Paulis are a 2-design, so that the mean over them is the Haar mean (Dankert, Cleve, Emerson
    # and Livine, PRA 80, 012304 (2009)); for two qubits, those of a complete set of five bases (Klappenecker and
    # Rötteler, IEEE ISIT 2005, p. 1740), here the joint eigenbases of commuting triples of Paulis.
    x, y, z, one = np.array([[0, 1], [1, 0]]), np.array([[0, -1j], [1j, 0]]), np.diag([1, -1]), np.eye(2)
    if d == 2:
        pairs = [(x,), (y,), (z,)]
    else:
        words = [("z1", "1z"), ("x1", "1x"), ("y1", "1y"), ("xy", "yz"), ("yx", "zy")]
        table = {"x": x, "y": y, "z": z, "1": one}
        pairs = [tuple(np.kron(table[w[0]], table[w[1]]) for w in pair) for pair in words]
    bases = [np.linalg.eigh(sum(2.0**k * p for k, p in enumerate(pair)))[1] for pair in pairs]
    states = np.concatenate(bases, axis=1)
    u, v = haar_unitary(d, 2, rng=seed)
    overlaps = np.abs(np.einsum("is,ij,js->s", states.conj(), u.conj().T @ v, states)) ** 2
    assert average_fidelity(u, v) == pytest.approx(overlaps.mean(), abs=1e-13)


def test_average_fidelity_of_bit_flip():
    # (d + |tr|²)/(d² + d) = 2/6 (Nielsen, Phys. Lett. A 303, 249 (2002)).
    assert average_fidelity(np.eye(2), [[0, 1], [1, 0]]) == pytest.approx(1 / 3)


def test_unitarity_defect_is_the_operator_norm():
    rng = np.random.default_rng(7)
    m = haar_unitary(4, 10, rng=rng) + 0.1 * rng.normal(size=(10, 4, 4))
    expected = [np.linalg.norm(a.conj().T @ a - np.eye(4), ord=2) for a in m]
    assert np.allclose(unitarity_defect(m), expected, atol=1e-14)
    assert unitarity_defect(haar_unitary(8, 100, rng=8)).max() < 1e-14


def test_nearest_unitary_is_the_polar_factor():
    rng = np.random.default_rng(9)
    m = rng.normal(size=(6, 4, 4)) + 1j * rng.normal(size=(6, 4, 4))
    for a, w in zip(m, nearest_unitary(m), strict=True):
        assert np.allclose(w, scipy.linalg.polar(a)[0], atol=1e-12)


def test_haar_against_scipy_and_published_moments():
    ours = np.trace(haar_unitary(3, 20000, rng=10), axis1=-2, axis2=-1)
    theirs = np.trace(scipy.stats.unitary_group.rvs(3, 20000, random_state=11), axis1=-2, axis2=-1)
    for part in (np.real, np.imag, np.abs):
        assert scipy.stats.ks_2samp(part(ours), part(theirs)).pvalue > 1e-3
    # E|tr U|² = 1, E|tr U|⁴ = 2 and E|tr U|⁶ = 6 for d ≥ 3 (Diaconis and Shahshahani, J. Appl. Prob. 31A, 49 (1994)).
    for power, moment in ((2, 1), (4, 2), (6, 6)):
        values = np.abs(ours) ** power
        assert abs(values.mean() - moment) < 5 * values.std() / np.sqrt(len(values))


def test_haar_shapes_and_seeds():
    assert haar_unitary(2).shape == (2, 2)
    assert haar_unitary(2, (3, 4), rng=1).shape == (3, 4, 2, 2)
    assert np.array_equal(haar_unitary(4, 2, rng=5), haar_unitary(4, 2, rng=np.random.default_rng(5)))


@given(seeds, st.permutations(range(3)))
@settings(deadline=None, max_examples=20)
def test_reorder_qubits_moves_kronecker_factors(seed, order):
    parts = haar_unitary(2, 3, rng=seed)
    whole = kron(kron(parts[0], parts[1]), parts[2])
    expected = kron(kron(parts[order[0]], parts[order[1]]), parts[order[2]])
    assert np.allclose(reorder_qubits(whole, tuple(order)), expected, atol=1e-14)
    back = tuple(int(i) for i in np.argsort(order))
    assert np.array_equal(reorder_qubits(reorder_qubits(whole, tuple(order)), back), whole)


def test_reorder_qubits_turns_a_controlled_not_round():
    cx = np.eye(4)[[0, 1, 3, 2]]
    assert np.array_equal(reorder_qubits(cx, (1, 0)), np.eye(4)[[0, 3, 2, 1]])


def test_checked_unitary_accepts_rounding_only():
    u = haar_unitary(4, rng=12)
    same, moved = checked_unitary(u)
    assert np.array_equal(same, u) and same is not u and moved == 0
    rounded = np.round(u, 8)
    with pytest.raises(NotUnitaryError) as caught:
        checked_unitary(rounded)
    error = caught.value
    assert error.defect == pytest.approx(unitarity_defect(rounded))
    assert error.distance == pytest.approx(np.linalg.norm(rounded - nearest_unitary(rounded), ord=2))
    for accepted, moved in (checked_unitary(rounded, tolerance=1e-6), checked_unitary(rounded, nearest=True)):
        assert unitarity_defect(accepted) < 1e-14
        assert moved == pytest.approx(error.distance)
        assert 0 < moved < 1e-7


@pytest.mark.parametrize(
    ("matrix", "message"),
    [
        (np.eye(3), "whole number of qubits"),
        (np.eye(1), "whole number of qubits"),
        (np.zeros((0, 0)), "whole number of qubits"),
        (np.ones((2, 4)), "not square"),
        (np.zeros((2, 2, 2)), "not square"),
        (5, "not square"),
        ([[1, 0], [0]], "not a matrix of numbers"),
        ([["a", 0], [0, 1]], "not a matrix of numbers"),
        ({}, "not a matrix of numbers"),
        ([[10**400, 0], [0, 1]], "not a matrix of numbers"),
        ([[np.nan, 0], [0, 1]], "not finite"),
        ([[1, 0], [0, np.inf]], "row 1, column 1"),
        ([[1.7e308 + 1.7e308j, 0], [0, 1]], "not unitary"),
        (np.eye(2) * np.longdouble("1e4000"), "not finite"),
        (np.eye(2) * 1e200, "not unitary"),
        (np.zeros((2, 2)), "not unitary"),
        (np.ones((2, 2)), "not unitary"),
    ],
)
def test_checked_unitary_refuses(matrix, message):
    with pytest.raises(MatrixError, match=message) as caught:
        checked_unitary(matrix, where="m.npy")
    text = str(caught.value)
    assert text.startswith("m.npy: ") and "\n" not in text


def test_inputs_are_not_modified():
    u, v = haar_unitary(4, 2, rng=13)
    before = u.copy(), v.copy()
    kron(u, v), distance(u, v), average_fidelity(u, v), nearest_unitary(u), unitarity_defect(u)
    reorder_qubits(u, (1, 0)), checked_unitary(u), phase_between(u, v), dagger(u)
    assert np.array_equal(u, before[0]) and np.array_equal(v, before[1])
