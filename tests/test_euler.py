"""Euler angles and the virtual-Z form: reconstruction everywhere, SciPy's rotations, published formulas."""

import itertools

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from gatewright.errors import InputError, MatrixError
from gatewright.gates import GATES
from gatewright.linalg import distance, haar_unitary
from gatewright.synthesis.euler import (
    ROUNDING,
    EulerAngles,
    VirtualZ,
    axis_vector,
    euler_angles,
    fewest_turns,
    quaternion,
    rotation,
    settle,
    virtual_z,
)

PAIRS = list(itertools.permutations("xyz", 2))
QUARTER = np.pi / 2
# Reconstruction, phase included: what decisions at the poles may move (three times ROUNDING), and rounding.
BOUND = 6e-15
seeds = st.integers(0, 2**32 - 1)


def rebuilt(euler: EulerAngles, outer, inner) -> np.ndarray:
    alpha, beta, gamma = np.moveaxis(euler.angles, -1, 0)
    product = rotation(outer, alpha) @ rotation(inner, beta) @ rotation(outer, gamma)
    return np.exp(1j * euler.phase)[..., None, None] * product


def rebuilt_virtual(form: VirtualZ) -> np.ndarray:
    sx = GATES["sx"].matrix()
    a, b, c = (rotation("z", angle) for angle in np.moveaxis(form.angles, -1, 0))
    pulses = form.pulses[..., None, None]
    middle = np.where(pulses == 0, np.eye(2), np.where(pulses == 1, sx, sx @ b @ sx))
    return np.exp(1j * form.phase)[..., None, None] * (a @ middle @ c)


def norm(matrix: np.ndarray) -> float:
    return float(np.linalg.norm(matrix, ord=2, axis=(-2, -1)).max())


def cliffords() -> np.ndarray:
    """The 24 Cliffords, several times, with arbitrary phases."""
    quarters = QUARTER * np.arange(4)
    a, b, c = (np.ravel(angle) for angle in np.meshgrid(quarters, quarters, quarters))
    phases = np.random.default_rng(1).uniform(0, 2 * np.pi, len(a))
    return np.exp(1j * phases)[:, None, None] * (rotation("z", a) @ rotation("x", b) @ rotation("z", c))


def perturbed(power: int) -> np.ndarray:
    """Cliffords times rotations by 10**-power about random axes."""
    rng = np.random.default_rng(power)
    return np.array([u @ rotation(rng.normal(size=3), 10.0**-power) for u in cliffords()])


def legal(angles: np.ndarray) -> bool:
    alpha, beta, gamma = np.moveaxis(angles, -1, 0)
    outer = all(((-np.pi < a) & (a <= np.pi)).all() for a in (alpha, gamma))
    return bool(outer and ((beta >= 0) & (beta <= np.pi)).all())


@given(seeds, st.floats(-20, 20))
@settings(deadline=None, max_examples=40)
def test_rotation_is_the_exponential(seed, angle):
    n = np.random.default_rng(seed).normal(size=3)
    n /= np.linalg.norm(n)
    x, y, z = (GATES[name].matrix() for name in "xyz")
    expected = scipy.linalg.expm(-0.5j * angle * (n[0] * x + n[1] * y + n[2] * z))
    assert norm(rotation(n, angle) - expected) < 1e-13
    assert np.allclose(rotation(n, angle + 2 * np.pi), -rotation(n, angle), atol=1e-14)


def test_rotation_agrees_with_the_standard_library():
    # rx, ry, rz of OpenQASM 3's stdgates.inc.
    angles = np.linspace(-7, 7, 15)
    for axis in "xyz":
        assert norm(rotation(axis, angles) - GATES[f"r{axis}"].matrix(angles[:, None])) < 1e-15
    assert rotation("z", np.zeros((2, 3))).shape == (2, 3, 2, 2)


@given(seeds, st.sampled_from(PAIRS))
@settings(deadline=None, max_examples=60)
def test_reconstruction_haar(seed, pair):
    u = haar_unitary(2, (4, 5), rng=seed)
    euler = euler_angles(u, outer=pair[0], inner=pair[1])
    assert euler.angles.shape == (4, 5, 3) and euler.phase.shape == (4, 5)
    assert legal(euler.angles)
    assert norm(rebuilt(euler, *pair) - u) < BOUND


@given(seeds)
@settings(deadline=None, max_examples=60)
def test_reconstruction_any_orthogonal_axes(seed):
    frame = Rotation.random(rng=seed).as_matrix()
    u = haar_unitary(2, 20, rng=seed)
    near = rotation(frame[0], np.linspace(-9, 9, 18)) @ rotation(frame[1], 10.0 ** -np.arange(18))
    for batch in (u, near, near @ rotation(frame[1], np.pi)):
        euler = euler_angles(batch, outer=frame[0], inner=3 * frame[1])
        assert legal(euler.angles)
        assert norm(rebuilt(euler, frame[0], frame[1]) - batch) < BOUND


@pytest.mark.parametrize("pair", PAIRS)
@pytest.mark.parametrize("power", range(1, 17))
def test_reconstruction_near_the_poles(pair, power):
    u = perturbed(power)
    euler = euler_angles(u, outer=pair[0], inner=pair[1])
    assert legal(euler.angles)
    assert norm(rebuilt(euler, *pair) - u) < BOUND
    form = virtual_z(u)
    assert norm(rebuilt_virtual(form) - u) < BOUND


@pytest.mark.parametrize("pair", PAIRS)
def test_cliffords_have_exact_quarter_turns(pair):
    u = cliffords()
    products = u[:, None] @ u[None, :] @ u[5]
    for batch in (u, products):
        euler = euler_angles(batch, outer=pair[0], inner=pair[1])
        assert legal(euler.angles)
        multiples = np.rint(euler.angles / QUARTER)
        assert np.array_equal(euler.angles, multiples * QUARTER)
        poles = (euler.angles[..., 1] == 0) | (euler.angles[..., 1] == np.pi)
        assert poles.any() and (euler.angles[poles, 0] == 0).all()
        assert norm(rebuilt(euler, *pair) - batch) < BOUND


@pytest.mark.parametrize("pair", PAIRS)
def test_angles_against_scipy(pair):
    # SU(2) covers SO(3) twice: each unitary is one rotation, whose intrinsic Euler angles SciPy finds.
    u = haar_unitary(2, 500, rng=3)
    pauli = np.array([GATES[name].matrix() for name in "xyz"])
    matrices = np.einsum("aij,njk,bkl,nil->nab", pauli, u, pauli, u.conj()).real / 2
    sequence = (pair[0] + pair[1] + pair[0]).upper()
    expected = Rotation.from_matrix(matrices).as_euler(sequence)
    found = euler_angles(u, outer=pair[0], inner=pair[1]).angles
    turns = (found - expected) / (2 * np.pi)
    assert np.abs(turns - np.rint(turns)).max() < 1e-12
    assert np.abs(Rotation.from_euler(sequence, found).as_matrix() - matrices).max() < 1e-14


def test_quaternion_against_scipy():
    u = haar_unitary(2, 100, rng=4)
    q, phase = quaternion(u)
    assert np.abs(np.sum(q**2, axis=0) - 1).max() < 1e-14
    pauli = np.array([GATES[name].matrix() for name in "xyz"])
    matrices = np.einsum("aij,njk,bkl,nil->nab", pauli, u, pauli, u.conj()).real / 2
    assert np.abs(Rotation.from_quat(q.T, scalar_first=True).as_matrix() - matrices).max() < 1e-14
    axis, half = q[1:] / np.linalg.norm(q[1:], axis=0), np.arctan2(np.linalg.norm(q[1:], axis=0), q[0])
    again = np.array([rotation(a, 2 * t) for a, t in zip(axis.T, half, strict=True)])
    assert norm(np.exp(1j * phase)[:, None, None] * again - u) < 1e-14


def test_opposite_signs_share_angles_and_differ_by_pi_in_phase():
    u = np.concatenate([haar_unitary(2, 200, rng=5), cliffords()])
    plus, minus = (euler_angles(s * u, outer="z", inner="y") for s in (1, -1))
    assert np.allclose(plus.angles, minus.angles, atol=1e-13)
    assert np.allclose(np.exp(1j * plus.phase), -np.exp(1j * minus.phase), atol=1e-13)


def test_poles_put_everything_into_the_first_rotation():
    t = np.array([0.3, -2.9, 3.1])
    for outer, inner in PAIRS:
        about = euler_angles(rotation(outer, t), outer=outer, inner=inner).angles
        assert (about[:, :2] == 0).all() and np.allclose(about[:, 2], t, atol=1e-15)
        over = euler_angles(rotation(inner, np.pi) @ rotation(outer, t), outer=outer, inner=inner).angles
        assert (over[:, 0] == 0).all() and (over[:, 1] == np.pi).all() and np.allclose(over[:, 2], t, atol=1e-15)


def test_only_rounding_is_taken_as_an_exact_angle():
    # Half as far in operator norm: ROUNDING for what may save a pulse, half that for other multiples of π/48.
    for near, far in ((0.0, 4e-15), (QUARTER, 4e-15), (np.pi / 8, 3e-15), (-np.pi / 3, 3e-15), (-5 * np.pi / 6, 3e-15)):
        exact = settle(np.array([near + d for d in (-far, -4e-16, 0.0, 4e-16, far)]))[0]
        assert (exact[1:4] == near).all()
        assert exact[0] < near < exact[4]


@given(st.lists(st.floats(-50, 50), min_size=1), st.floats(0, 1e-6))
@settings(deadline=None)
def test_settle_changes_angles_by_full_turns_and_at_most_the_tolerance(angles, tolerance):
    values = np.array(angles)
    settled, odd = settle(values, tolerance)
    assert ((settled > -np.pi) & (settled <= np.pi)).all()
    turns = np.rint((values - settled) / (2 * np.pi))
    assert np.abs(values - settled - 2 * np.pi * turns).max() <= max(ROUNDING, 2 * tolerance) + 3e-14
    assert np.array_equal(odd, turns % 2 == 1)


def test_tolerance_decides_at_the_poles_and_at_a_quarter():
    for size, tolerance in ((3e-13, 1e-12), (3e-7, 1e-6)):
        for start in (0.0, QUARTER, np.pi):
            u = rotation("z", 0.4) @ rotation("y", abs(start - size)) @ rotation("z", 0.9)
            loose = euler_angles(u, outer="z", inner="y", tolerance=tolerance)
            tight = euler_angles(u, outer="z", inner="y")
            assert loose.angles[1] == start and tight.angles[1] == pytest.approx(abs(start - size), abs=1e-15)
            assert norm(rebuilt(loose, "z", "y") - u) <= tolerance
            assert norm(rebuilt(tight, "z", "y") - u) < BOUND


def test_rounded_entries_are_accepted():
    u = haar_unitary(2, 50, rng=6)
    assert distance(rebuilt(euler_angles(u.astype(np.complex64), outer="z", inner="x"), "z", "x"), u).max() < 1e-6


def test_batches_longer_than_a_block():
    u = haar_unitary(2, 40_000, rng=7)
    euler = euler_angles(u, outer="y", inner="z")
    assert norm(rebuilt(euler, "y", "z") - u) < BOUND
    assert np.array_equal(euler.angles[33_000:33_010], euler_angles(u[33_000:33_010], outer="y", inner="z").angles)
    assert euler_angles(u[:0], outer="y", inner="z").angles.shape == (0, 3)


@given(seeds)
@settings(deadline=None, max_examples=40)
def test_fewest_turns_keeps_the_product(seed):
    rng = np.random.default_rng(seed)
    angles = rng.choice([0.0, np.pi, QUARTER, -QUARTER, 1.1, -0.3], size=(30, 3))
    shorter, odd = fewest_turns(angles)

    def product(a: np.ndarray) -> np.ndarray:
        return rotation("z", a[:, 0]) @ rotation("x", a[:, 1]) @ rotation("z", a[:, 2])

    assert norm(product(shorter) * np.where(odd, -1, 1)[:, None, None] - product(angles)) < 1e-14
    zeros = [np.count_nonzero(a[:, ::2] == 0, axis=1) for a in (angles, shorter)]
    assert (zeros[1] >= zeros[0]).all()


# --- Virtual-Z form -----------------------------------------------------------------------------------------------


def least_pulses(u: np.ndarray) -> int:
    """|U00| is 1 for no pulse; Rz √X Rz has 1/√2; two reach all else (McKay et al., PRA 96, 022330 (2017))."""
    size = abs(u[0, 0])
    return 0 if abs(size - 1) < 1e-9 else 1 if abs(size - np.sqrt(0.5)) < 1e-9 else 2


@given(seeds)
@settings(deadline=None, max_examples=40)
def test_virtual_z_of_anything(seed):
    u = haar_unitary(2, 30, rng=seed)
    form = virtual_z(u)
    assert (form.pulses == 2).all() and form.pulses.dtype == np.int8
    assert ((form.angles > -np.pi) & (form.angles <= np.pi)).all()
    assert norm(rebuilt_virtual(form) - u) < BOUND


def test_virtual_z_uses_the_fewest_pulses():
    u = cliffords()
    form = virtual_z(u)
    assert form.pulses.tolist() == [least_pulses(m) for m in u]
    assert norm(rebuilt_virtual(form) - u) < BOUND
    # Of the 24 Cliffords 4 are diagonal, 4 turn z over, and 16 take it to ±x or ±y.
    distinct = np.unique(np.column_stack([form.pulses, form.angles]), axis=0)
    assert np.bincount(distinct[:, 0].astype(int)).tolist() == [4, 16, 4]
    unused = form.pulses < 2
    assert (form.angles[unused, 1] == 0).all() and (form.angles[form.pulses == 0, 0] == 0).all()


def test_virtual_z_of_named_gates():
    counts = {"id": 0, "z": 0, "s": 0, "t": 0, "h": 1, "sx": 1, "sxdg": 1, "x": 2, "y": 2}
    for name, count in counts.items():
        form = virtual_z(GATES[name].matrix())
        assert form.pulses == count, name
        assert norm(rebuilt_virtual(form) - GATES[name].matrix()) < BOUND
    assert not virtual_z(GATES["sx"].matrix()).angles.any()
    assert not virtual_z(GATES["x"].matrix()).angles.any()


def test_virtual_z_is_the_published_sequence():
    # U(θ,φ,λ) = Z(φ-π/2) X(π/2) Z(π-θ) X(π/2) Z(λ-π/2) for U = Rz(φ) Rx(θ) Rz(λ): McKay et al., equation 3.
    theta, phi, lam = 0.7, 1.9, -0.4
    form = virtual_z(rotation("z", phi) @ rotation("x", theta) @ rotation("z", lam))
    assert np.allclose(form.angles, [phi - QUARTER, np.pi - theta, lam - QUARTER], atol=1e-14)


# --- Bad input ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("axis", ["w", "", [0, 0, 0], [1, 2], [np.nan, 0, 1], [[1, 0, 0]], None, "xyz", ["a", 1, 2]])
def test_not_an_axis(axis):
    with pytest.raises(InputError, match="not a rotation axis") as caught:
        axis_vector(axis)
    assert "\n" not in str(caught.value)


def test_axis_vector_survives_extreme_lengths():
    assert np.allclose(axis_vector([1e-300, 0, 1e-300]), np.sqrt([0.5, 0, 0.5]))
    assert np.allclose(axis_vector([0, 1e300, -1e300]), np.array([0, 1, -1]) / np.sqrt(2))


def test_axes_must_be_orthogonal():
    with pytest.raises(InputError, match="not orthogonal"):
        euler_angles(np.eye(2), outer="z", inner=[0, 1, 0.1])
    with pytest.raises(InputError, match="not orthogonal"):
        euler_angles(np.eye(2), outer="z", inner="z")


@pytest.mark.parametrize(
    "matrix", [np.eye(3), np.ones(4), np.ones((2, 2)), np.diag([1, 1.001]), np.full((2, 2), np.nan), np.eye(2) * 1e200]
)
def test_not_a_unitary(matrix):
    for function in (lambda m: euler_angles(m, outer="z", inner="y"), virtual_z, quaternion):
        with pytest.raises(MatrixError):
            function(matrix)


def test_the_matrix_at_fault_is_named():
    u = haar_unitary(2, (3, 4), rng=8)
    u[1, 2] *= 2
    with pytest.raises(MatrixError, match=r"at index \(1, 2\)"):
        quaternion(u)


def test_inputs_are_not_modified():
    u = haar_unitary(2, 10, rng=9)
    before = u.copy()
    euler_angles(u, outer="z", inner="y"), virtual_z(u), quaternion(u)
    assert np.array_equal(u, before)
    angles = np.array([[np.pi, 0.3, 0.2]])
    fewest_turns(angles), settle(angles)
    assert angles.tolist() == [[np.pi, 0.3, 0.2]]
