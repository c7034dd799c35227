"""Axes and pulses at any angle: reconstruction, the fewest pulses, the least total angle; against SciPy and bounds."""

from __future__ import annotations

import functools
from itertools import product as every

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize
from scipy.spatial.transform import Rotation

from gatewright.errors import UnsupportedError
from gatewright.gates import Gate
from gatewright.linalg import distance, haar_unitary
from gatewright.synthesis.chains import chain_reach, corner
from gatewright.synthesis.euler import rotation
from gatewright.synthesis.one_qubit import OneQubitPlan, plan_one_qubit
from gatewright.synthesis.tilted import MOST_PULSES, least_factors
from test_one_qubit import (
    BOUND,
    FULL,
    PI,
    RZ,
    SX,
    Native,
    X,
    check_legal,
    cliffords,
    disguised,
    native,
    perturbed,
    rebuilt,
    seeds,
)


def about(psi: float, span: tuple[float, float] = FULL, **options) -> Native:
    """A rotation about an axis at the angle psi to z."""
    axis = [np.sin(psi), 0, np.cos(psi)]
    return Native(Gate("tilted", 1, 1, lambda p: rotation(axis, p[..., 0])), (span,), **options)


def pulse(name: str, axis: list[float], angle: float) -> Native:
    return Native(Gate(name, 1, 0, lambda p: np.broadcast_to(rotation(axis, angle), (*p.shape[:-1], 2, 2))))


Z = native("rz", FULL)
DEGREES = [89.9999999, 80, 60, 45, 28]
SETS: dict[str, list[Native]] = {
    **{f"virtual z, {d} degrees": [RZ, about(np.radians(d))] for d in DEGREES},
    **{f"z, {d} degrees": [Z, about(np.radians(d))] for d in DEGREES},
    "virtual z, x to 0.5": [RZ, native("rx", (0, 0.5))],
    "virtual z, x from -0.9 to -0.2": [RZ, native("rx", (-0.9, -0.2))],
    "virtual z, 50 degrees from 0.3 to 2": [RZ, about(0.9, (0.3, 2.0))],
    "virtual z, one pulse": [RZ, pulse("f", [1, 0.3, 0.2], 1.0)],
    "virtual z, three pulses": [RZ, pulse("f", [1, 0.3, 0.2], 1.0), pulse("g", [1, 0, 0], 0.4), X],
    "virtual z, quarter, eighth": [RZ, SX, pulse("g", [1, 0, 0], PI / 4)],
    "virtual z, nearly a quarter": [RZ, pulse("g", [1, 0, 0], PI / 2 + 1e-9)],
    "virtual z, three per cent too much": [RZ, pulse("g", [1, 0, 0], 1.03 * PI / 2)],
    "virtual z, nearly a Hadamard": [RZ, pulse("g", [1, 0, 1.02], 0.98 * PI)],
    "z, one pulse": [Z, pulse("f", [1, 0.3, 0.2], 1.0)],
}
WITH_AXIS = [name for name in SETS if not name.startswith("z") or "degrees" not in name]


@functools.cache
def plan_of(name: str) -> OneQubitPlan:
    return plan_one_qubit(SETS[name])


@pytest.mark.parametrize("name", SETS)
def test_reconstruction(name):
    rng = np.random.default_rng(1)
    plan = plan_of(name)
    assert (plan.axis is not None) == (name in WITH_AXIS)
    for u in (haar_unitary(2, 300, rng=rng), cliffords(), perturbed(rng)):
        phases = np.exp(1j * rng.uniform(0, 2 * PI, len(u)))[:, None, None]
        emission = plan.emit(plan.angles(phases * u))
        check_legal(plan, SETS[name], emission)
        assert distance(rebuilt(plan, emission), u).max() < 2 * BOUND
    one = np.exp(1j * np.linspace(0, 7, 20))[:, None, None] * np.eye(2)
    assert (plan.emit(plan.angles(one)).gate == -1).all()
    assert len(plan.emit(plan.angles(np.zeros((0, 2, 2)))).gate) == 0


@given(st.sampled_from(list(SETS)), seeds)
@settings(deadline=None, max_examples=8)
def test_nothing_depends_on_names_axes_units_or_phases(name, seed):
    natives, frame = disguised(SETS[name], seed)
    plain, plan = plan_of(name), plan_one_qubit(natives)
    assert plan.summary == plain.summary
    rng = np.random.default_rng(seed)
    u = np.concatenate([haar_unitary(2, 50, rng=rng), cliffords(), perturbed(rng)[::7]])
    emission = plan.emit(plan.angles(frame @ u @ frame.conj().T))
    check_legal(plan, natives, emission)
    assert distance(rebuilt(plan, emission), frame @ u @ frame.conj().T).max() < 5 * BOUND
    pulses = [p.pulses(p.angles(m)) for p, m in ((plain, u[:50]), (plan, frame @ u[:50] @ frame.conj().T))]
    assert np.array_equal(*pulses)


@given(st.sampled_from(WITH_AXIS), seeds)
@settings(deadline=None, max_examples=8)
def test_the_last_rotation_may_be_carried(name, seed):
    natives, frame = disguised(SETS[name], seed)
    plan = plan_one_qubit(natives)
    rng = np.random.default_rng(seed)
    u = frame @ np.concatenate([haar_unitary(2, 40, rng=rng), cliffords()]) @ frame.conj().T
    angles = plan.angles(u)
    trailing = rng.random(len(u)) < 0.5
    brought = rng.choice([0, PI, -PI / 2, 7.7, -30.0], size=len(u))
    emission = plan.emit(angles + brought[:, None] * [0, 0, 1], trailing)
    check_legal(plan, natives, emission)
    made = rebuilt(plan, emission) @ rotation(plan.axis, -brought)
    made = np.where(trailing[:, None, None], made, rotation(plan.axis, angles[:, 0]) @ made)
    assert distance(made, u).max() < 5 * BOUND


@given(st.floats(0.06, PI / 2), st.booleans(), st.floats(-16, -1), seeds)
@settings(deadline=None, max_examples=10)
def test_any_angle_and_walls_between_counts(psi, virtual, power, seed):
    # Products of few factors lie on the walls, where fewer factors just suffice; and just beside them.
    rng = np.random.default_rng(seed)
    psi = psi if virtual else max(psi, 0.45)
    plan = plan_one_qubit([RZ if virtual else Z, about(psi)])
    axes = [[0, 0, 1], [np.sin(psi), 0, np.cos(psi)]]
    walls = []
    for k in range(6):
        u = np.eye(2)
        for j in range(k):
            inner = 0 < j < k - 1
            u = rotation(axes[j % 2], PI if inner else rng.uniform(-PI, PI)) @ u
        walls += [u, rotation(rng.normal(size=3), 10**power) @ u]
    walls = np.array(walls)
    assert distance(rebuilt(plan, plan.emit(plan.angles(walls))), walls).max() < 4 * BOUND
    pulses = plan.pulses(plan.angles(walls[::2], tolerance=1e-12))
    most = [0, 1, 1, 2, 2, 3] if virtual else [0, 1, 2, 3, 4, 5]
    assert (pulses <= most).all()
    emission = plan.emit(plan.angles(walls, tolerance=1e-9))
    assert distance(rebuilt(plan, emission), walls).max() < 5e-9


# --- The fewest


def scipy_gap(target: np.ndarray, axes: list[list[float]], rng: np.random.Generator) -> float:
    """The least angle between a rotation and products of rotations about these axes, by SciPy from ten starts."""
    goal = Rotation.from_matrix(target)

    def gap(angles: np.ndarray) -> float:
        total = Rotation.identity()
        for axis, angle in zip(axes, angles, strict=True):
            total = Rotation.from_rotvec(angle * np.array(axis)) * total
        w = (goal.inv() * total).as_quat()[3]
        return 1 - w * w

    starts = rng.uniform(-PI, PI, (10, len(axes)))
    return float(np.sqrt(max(0.0, min(minimize(gap, s, method="BFGS").fun for s in starts))))


def as_rotation(u: np.ndarray) -> np.ndarray:
    paulis = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
    return np.array([[np.trace(a @ u @ b @ u.conj().T).real / 2 for b in paulis] for a in paulis])


@pytest.mark.parametrize("degrees", [75, 50])
def test_no_fewer_rotations_about_two_axes_suffice_for_scipy(degrees):
    psi = np.radians(degrees)
    plan = plan_one_qubit([Z, about(psi)])
    rng = np.random.default_rng(degrees)
    u = haar_unitary(2, 5, rng=rng)
    axes = [[0.0, 0.0, 1.0], [np.sin(psi), 0.0, np.cos(psi)]]
    for matrix, k in zip(u, plan.pulses(plan.angles(u)).tolist(), strict=True):
        for first in (0, 1):
            fewer = [axes[(first + j) % 2] for j in range(k - 1)]
            assert scipy_gap(as_rotation(matrix), fewer, rng) > 1e-4


@pytest.mark.parametrize("degrees", [89, 60, 59, 45, 44, 30])
def test_lowenthals_number_suffices_and_is_needed(degrees):
    # Lowenthal, Canad. J. Math. 23, 364 (1971): ⌈π/ψ⌉ + 1 factors for some rotation, no more for any.
    psi = np.radians(degrees)
    number = int(np.ceil(180 / degrees - 1e-9)) + 1
    assert least_factors(psi) == number
    plan = plan_one_qubit([Z, about(psi)])
    bisector = np.array([np.sin(psi / 2), 0, np.cos(psi / 2)])
    # These turn n and m far from n and from m: half turns about axes across both, and what is near them.
    hard = [rotation("y", PI - 0.002), rotation("y", PI), rotation(np.cross(bisector, [0, 1, 0]), PI)]
    hard += [rotation("y", PI - s * psi) for s in np.linspace(-1, 1, 81)]
    u = np.concatenate([hard, haar_unitary(2, 200, rng=1)])
    assert plan.pulses(plan.angles(u)).max() == number


def test_two_rotations_are_found_where_they_suffice():
    psi = 0.8
    plan = plan_one_qubit([Z, about(psi)])
    rng = np.random.default_rng(2)
    a, b = rng.uniform(-PI, PI, (2, 40))
    m = [np.sin(psi), 0, np.cos(psi)]
    for u in (rotation("z", a) @ rotation(m, b), rotation(m, a) @ rotation("z", b)):
        assert (plan.pulses(plan.angles(u)) == 2).all()
    for u in (rotation("z", a), rotation(m, a)):
        assert (plan.pulses(plan.angles(u)) == 1).all()


@given(st.lists(st.floats(0.0, PI), min_size=1, max_size=5), seeds)
@settings(deadline=None, max_examples=60)
def test_reach_of_chains_by_sampling(links, seed):
    # Tilts of products of rotations by SciPy, at random turns between them: within reach, and the ends are met.
    low, high = chain_reach(links)
    rng = np.random.default_rng(seed)
    turns = rng.uniform(-PI, PI, (400, len(links)))
    extremes = np.array(list(every([0, PI], repeat=len(links))))
    total = Rotation.identity(len(turns) + len(extremes))
    for j, link in enumerate(links):
        step = Rotation.from_euler("x", link) * Rotation.from_euler(
            "z", np.concatenate([turns, extremes])[:, j : j + 1]
        )
        total = step * total
    tilts = np.arccos(np.clip(total.as_matrix()[:, 2, 2], -1, 1))
    assert tilts.min() >= low - 1e-7 and tilts.max() <= high + 1e-7
    if 0 < low:
        assert tilts[len(turns) :].min() == pytest.approx(low, abs=1e-6)
    if high < PI:
        assert tilts[len(turns) :].max() == pytest.approx(high, abs=1e-6)


@given(st.floats(0.1, 3.0), st.floats(0.1, 3.0), st.floats(0.0, PI))
def test_corners_by_the_law_of_cosines(a, b, turn):
    # Todhunter, Spherical Trigonometry, article 37.
    c = np.arccos(np.clip(np.cos(a) * np.cos(b) + np.sin(a) * np.sin(b) * np.cos(turn), -1, 1))
    assert float(corner(a, b, c)) == pytest.approx(turn, abs=2e-6)


def test_fixed_pulses_are_the_fewest_and_then_turn_least():
    plan = plan_of("virtual z, three pulses")
    u = haar_unitary(2, 200, rng=4)
    tilt = np.arccos(np.clip(np.abs(u[:, 0, 0]) ** 2 * 2 - 1, -1, 1))
    emission = plan.emit(plan.angles(u))
    natives = SETS["virtual z, three pulses"]
    turns = {"f": 1.0, "g": 0.4, "x": PI}
    tilts = {}
    for item in natives[1:]:
        tilts[item.gate.name] = float(np.arccos(np.clip(2 * np.abs(item.gate.matrix()[0, 0]) ** 2 - 1, -1, 1)))
    for row, b in zip(emission.gate, tilt, strict=True):
        names = [plan.gates[k].name for k in row if k >= 0 and plan.gates[k].name != "rz"]
        allowed = []
        for count in range(1, 4):
            for word in every("fgx", repeat=count):
                low, high = chain_reach([tilts[name] for name in word])
                if low <= b <= high:
                    allowed.append((count, round(sum(turns[name] for name in word), 9)))
            if allowed:
                break
        assert (len(names), round(sum(turns[name] for name in names), 9)) == min(allowed)


# --- The least total angle


def totals(name: str, u: np.ndarray, slots: list[str]) -> np.ndarray:
    plan = plan_of(name)
    emission = plan.emit(plan.angles(u))
    wanted = [k for k, gate in enumerate(plan.gates) if gate.name in slots]
    return np.abs(np.where(np.isin(emission.gate, wanted), emission.parameters[..., 0], 0)).sum(axis=1)


def test_equal_pulses_about_a_tilted_axis_have_the_least_total_angle():
    # Tilts δ with sin δ/2 = sin ψ sin θ/2 must add up to the whole tilt; any split, by SciPy's minimiser.
    psi = np.radians(28)
    u = haar_unitary(2, 30, rng=5)
    found = totals("virtual z, 28 degrees", u, ["tilted"])
    tilt = np.arccos(np.clip(2 * np.abs(u[:, 0, 0]) ** 2 - 1, -1, 1))
    for total, b in zip(found, tilt, strict=True):
        count = int(np.ceil(b / (2 * psi)))

        def excess(theta: np.ndarray, b: float = b) -> float:
            return float(np.sum(2 * np.arcsin(np.sin(psi) * np.sin(theta / 2))) - b)

        start = np.full(count, total / count) * np.linspace(0.9, 1.1, count)
        best = minimize(
            np.sum,
            np.minimum(start, PI),
            bounds=[(0, PI)] * count,
            constraints={"type": "ineq", "fun": excess},
            method="SLSQP",
            options={"ftol": 1e-12, "maxiter": 300},
        )
        assert total <= best.fun + 1e-6


@pytest.mark.parametrize("degrees", [80, 50])
def test_no_total_angle_of_scipy_is_less(degrees):
    psi = np.radians(degrees)
    plan = plan_one_qubit([Z, about(psi)])
    rng = np.random.default_rng(6)
    u = haar_unitary(2, 60, rng=rng)
    emission = plan.emit(plan.angles(u))
    found = np.abs(emission.parameters[..., 0]).sum(axis=1)
    axes = np.array([[0.0, 0.0, 1.0], [np.sin(psi), 0.0, np.cos(psi)]])
    counts = plan.pulses(plan.angles(u))
    chosen = np.concatenate([np.flatnonzero(counts == 3)[:3], np.flatnonzero(counts == 4)[:3]])
    for site in chosen.tolist():
        goal, k = Rotation.from_matrix(as_rotation(u[site])), int(counts[site])
        for first in (0, 1):

            def gap(angles: np.ndarray, k: int = k, first: int = first, goal: Rotation = goal) -> np.ndarray:
                total = Rotation.identity()
                for j in range(k):
                    total = Rotation.from_rotvec(angles[j] * axes[(first + j) % 2]) * total
                return (goal.inv() * total).as_rotvec()

            for start in rng.uniform(-2, 2, (5, k)):
                # |angle| as the difference of two numbers that are not negative, to keep the problem smooth.
                best = minimize(
                    np.sum,
                    np.concatenate([np.maximum(start, 0), np.maximum(-start, 0)]),
                    bounds=[(0, PI)] * (2 * k),
                    constraints={"type": "eq", "fun": lambda p, k=k, gap=gap: gap(p[:k] - p[k:])},
                    method="SLSQP",
                    options={"maxiter": 100},
                )
                if np.linalg.norm(gap(best.x[:k] - best.x[k:])) < 1e-7:
                    assert found[site] <= best.fun + 2e-3


# --- What is refused


def test_axes_that_are_too_close():
    with pytest.raises(UnsupportedError, match=f"axes are so close .*; at most {MOST_PULSES} are made") as caught:
        plan_one_qubit([RZ, about(0.02)])
    assert "159 rotations" in str(caught.value)
    plan_one_qubit([RZ, about(0.06)])
    for natives in ([RZ, pulse("g", [1, 0, 0], 1e-3)], [RZ, native("rx", (0, 0.01))], [RZ, about(1e-15)]):
        with pytest.raises(UnsupportedError, match="cannot yet make every one-qubit unitary"):
            plan_one_qubit(natives)
