"""Native one-qubit gates found from their matrices, and the fewest pulses for any unitary, over invented gate sets."""

import functools
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import GateSetError, MatrixError, UnsupportedError
from gatewright.gates import GATES, Gate
from gatewright.linalg import dagger, distance, haar_unitary
from gatewright.synthesis.euler import rotation
from gatewright.synthesis.one_qubit import Emission, OneQubitPlan, plan_one_qubit
from gatewright.synthesis.recognise import Equatorial, Fixed, General, Knob, Turn, recognise

PI = np.pi
FULL = (-PI, PI)
# What the decisions at the poles may move, and rounding.
BOUND = 1e-14
seeds = st.integers(0, 2**32 - 1)


@dataclass(frozen=True)
class Native:
    gate: Gate
    ranges: tuple[tuple[float, float], ...] = ()
    virtual: bool = False
    duration_ns: float | None = None


def native(name: str, *ranges: tuple[float, float], virtual: bool = False, ns: float | None = None) -> Native:
    return Native(GATES[name], ranges, virtual, ns)


RZ = native("rz", FULL, virtual=True)
SX, X, H = native("sx", ns=30.0), native("x", ns=30.0), native("h", ns=30.0)
U = native("u", (0, PI), FULL, FULL, ns=45.0)
R = native("r", (0, PI), FULL, ns=40.0)


def any_axis(*ranges: tuple[float, float]) -> Native:
    """A rotation by p[0] about the axis at p[1] from z and p[2] about z."""

    def matrix(p: np.ndarray) -> np.ndarray:
        frame = GATES["rz"].matrix(p[..., 2:]) @ GATES["ry"].matrix(p[..., 1:2])
        return frame @ GATES["rz"].matrix(p[..., :1]) @ dagger(frame)

    return Native(Gate("free", 1, 3, matrix), ranges, duration_ns=45.0)


SETS: dict[str, list[Native]] = {
    "virtual z, quarter": [RZ, SX],
    "virtual z, quarter, half": [RZ, SX, X],
    "virtual z, Hadamard": [RZ, H],
    "virtual z, y from 0 to a quarter": [native("ry", (0, PI / 2)), RZ],
    "z, x": [native("rz", FULL, ns=20.0), native("rx", FULL, ns=30.0)],
    "y, z from 0": [native("ry", FULL), native("rz", (0, 2 * PI))],
    "y to a half, z to a quarter": [native("ry", (0, PI)), native("rz", (-PI / 2, PI / 2))],
    "equatorial, virtual z": [R, RZ],
    "equatorial, z": [R, native("rz", FULL, ns=20.0)],
    "equatorial to a quarter, virtual z": [native("r", (0, PI / 2), FULL), RZ],
    "equatorial": [R],
    "equatorial, both ways over half the circle": [native("r", FULL, (0, PI))],
    "equatorial, negative": [native("r", (-PI, 0), (0, 2 * PI))],
    "equatorial to a half": [native("r", (0, 0.5), FULL)],
    "general": [U],
    "general, negative": [native("u", (-PI, 0), (0, 2 * PI), FULL)],
    "general, virtual z": [U, native("p", FULL, virtual=True)],
    "general, any axis": [any_axis((0, PI), (0, PI), FULL)],
    "general, any axis, negative": [any_axis((-PI, 0), (0, PI), (0, 2 * PI))],
    "general, any axis of a half": [any_axis(FULL, (0, PI / 2), FULL)],
    "general, any axis, virtual z": [any_axis((0, PI), (0, PI), FULL), RZ],
    "two parameters held, virtual z": [native("u2", FULL, FULL), RZ],
    "everything": [SX, native("rx", FULL), U, R, RZ, native("id")],
}


@functools.cache
def plan_of(name: str) -> OneQubitPlan:
    return plan_one_qubit(SETS[name])


WITH_AXIS = [name for name in SETS if not name.startswith(("equatorial", "general")) or name.endswith(" z")]


def disguised(natives: Sequence[Native], seed: int) -> tuple[list[Native], np.ndarray]:
    """Turn the axes of a set, scale, shift and exchange its parameters, rename its gates, and give them phases."""
    rng = np.random.default_rng(seed)
    frame = haar_unitary(2, rng=rng)

    def hidden(item: Native, k: int) -> Native:
        n = item.gate.n_parameters
        scale = rng.choice([-1, 1], size=n) * rng.choice([0.5, 1, 2, PI, 2 * PI, 0.7315], size=n)
        # Shifts would take a bounded angle out of its range; whole turns do not.
        shift = 2 * PI * rng.integers(-1, 2, size=n)
        order = rng.permutation(n)
        phase = rng.normal(size=n + 1)
        function: Callable[[np.ndarray], np.ndarray] = item.gate.function

        def matrix(p: np.ndarray) -> np.ndarray:
            inner = np.empty(p.shape)
            inner[..., order] = p
            angles = inner * scale + shift
            turned = frame @ function(angles) @ frame.conj().T
            return np.exp(1j * (phase[0] + p @ phase[1:]))[..., None, None] * turned

        ends = (np.array(item.ranges).reshape(n, 2) - shift[:, None]) / scale[:, None] if n else np.zeros((0, 2))
        ranges = tuple((float(ends[j].min()), float(ends[j].max())) for j in order)
        return Native(Gate(f"g{k}", 1, n, matrix), ranges, item.virtual, item.duration_ns)

    return [hidden(item, k) for k, item in enumerate(natives)], frame


def rebuilt(plan: OneQubitPlan, emission: Emission) -> np.ndarray:
    out = np.broadcast_to(np.eye(2, dtype=complex), (len(emission.gate), 2, 2)).copy()
    for column in range(emission.gate.shape[1]):
        for k, gate in enumerate(plan.gates):
            rows = np.flatnonzero(emission.gate[:, column] == k)
            if len(rows):
                out[rows] = gate.matrix(emission.parameters[rows, column, : gate.n_parameters]) @ out[rows]
    return out


def check_legal(plan: OneQubitPlan, natives: Sequence[Native], emission: Emission) -> None:
    assert emission.gate.dtype == np.int16
    assert ((emission.gate >= -1) & (emission.gate < len(plan.gates))).all()
    assert emission.parameters.shape == (*emission.gate.shape, max(gate.n_parameters for gate in plan.gates))
    for k, gate in enumerate(plan.gates):
        (ranges,) = (item.ranges for item in natives if item.gate is gate)
        used = emission.parameters[emission.gate == k]
        low, high = np.array(ranges).reshape(-1, 2).T
        assert ((used[:, : len(low)] >= low) & (used[:, : len(low)] <= high)).all()
        assert (used[:, len(low) :] == 0).all()
    assert (emission.parameters[emission.gate == -1] == 0).all()


def cliffords(frame: np.ndarray | None = None) -> np.ndarray:
    """The 24 Cliffords, each once."""
    quarters = PI / 2 * np.arange(4)
    a, b, c = (np.ravel(angle) for angle in np.meshgrid(quarters, quarters, quarters))
    words = rotation("z", a) @ rotation("x", b) @ rotation("z", c)
    group: list[np.ndarray] = []
    for u in words:
        if all(distance(u, g) > 0.1 for g in group):
            group.append(u)
    assert len(group) == 24
    turned = np.array(group)
    return turned if frame is None else frame @ turned @ frame.conj().T


def perturbed(rng: np.random.Generator) -> np.ndarray:
    """Cliffords near which rotations by 1e-1 to 1e-16 about random axes are found."""
    small = np.array([rotation(rng.normal(size=3), 10.0 ** -(k % 16 + 1)) for k in range(240)])
    return np.repeat(cliffords(), 10, axis=0) @ small


# --- Any set makes any unitary ----------------------------------------------------------------------------------


@pytest.mark.parametrize("name", SETS)
def test_reconstruction(name):
    rng = np.random.default_rng(1)
    plan = plan_of(name)
    for u in (haar_unitary(2, 500, rng=rng), cliffords(), perturbed(rng)):
        phases = np.exp(1j * rng.uniform(0, 2 * PI, len(u)))[:, None, None]
        emission = plan.emit(plan.angles(phases * u))
        check_legal(plan, SETS[name], emission)
        assert distance(rebuilt(plan, emission), u).max() < BOUND


@given(st.sampled_from(list(SETS)), seeds)
@settings(deadline=None, max_examples=25)
def test_nothing_depends_on_names_axes_units_or_phases(name, seed):
    natives, frame = disguised(SETS[name], seed)
    plain, plan = plan_of(name), plan_one_qubit(natives)
    rng = np.random.default_rng(seed)
    u = np.concatenate([haar_unitary(2, 50, rng=rng), cliffords(), perturbed(rng)[::7]])
    emission = plan.emit(plan.angles(frame @ u @ frame.conj().T))
    check_legal(plan, natives, emission)
    # Parameters with odd scales add their own rounding.
    assert distance(rebuilt(plan, emission), frame @ u @ frame.conj().T).max() < 4 * BOUND
    assert plan.summary == plain.summary
    exact = np.concatenate([u[:50], cliffords()])
    counts = [p.pulses(p.angles(m)) for p, m in ((plain, exact), (plan, frame @ exact @ frame.conj().T))]
    assert np.array_equal(*counts)


@given(st.sampled_from(WITH_AXIS), seeds)
@settings(deadline=None, max_examples=25)
def test_the_last_rotation_may_be_carried(name, seed):
    natives, frame = disguised(SETS[name], seed)
    plan = plan_one_qubit(natives)
    rng = np.random.default_rng(seed)
    u = frame @ np.concatenate([haar_unitary(2, 40, rng=rng), cliffords()]) @ frame.conj().T
    angles = plan.angles(u)
    trailing = rng.random(len(u)) < 0.5
    # What came from the site before is added to γ, by any amount.
    brought = rng.choice([0, PI, -PI / 2, 7.7, -30.0], size=len(u))
    changed = angles + brought[:, None] * [0, 0, 1]
    emission = plan.emit(changed, trailing)
    check_legal(plan, natives, emission)
    made = rebuilt(plan, emission) @ rotation(plan.axis, -brought)
    made = np.where(trailing[:, None, None], made, rotation(plan.axis, angles[:, 0]) @ made)
    assert distance(made, u).max() < 4 * BOUND


@pytest.mark.parametrize("name", WITH_AXIS)
def test_angles_of_rotations_about_the_axis(name):
    plan = plan_of(name)
    t = np.concatenate([np.linspace(-PI, PI, 41)[1:], [1e-9, -1e-14]])
    angles = plan.angles(rotation(plan.axis, t))
    assert (angles[:, :2] == 0).all()
    assert np.abs(angles[:, 2] - t).max() < 2e-15
    assert (plan.angles(haar_unitary(2, 200, rng=2))[:, 1] != 0).all()
    angles[:, 2] = 0
    assert (plan.emit(angles).gate == -1).all()


@pytest.mark.parametrize("name", SETS)
def test_identity_takes_nothing(name):
    plan = plan_of(name)
    one = np.exp(1j * np.linspace(0, 7, 20))[:, None, None] * np.eye(2)
    assert (plan.emit(plan.angles(one)).gate == -1).all()


def test_steering_leaves_no_rotation_about_the_pole():
    natives, frame = disguised(SETS["equatorial, virtual z"], 5)
    plan = plan_one_qubit(natives)
    assert plan.steers
    u = frame @ np.concatenate([haar_unitary(2, 100, rng=3), cliffords()]) @ frame.conj().T
    angles = plan.angles(u)
    carried = np.where(angles[:, 1] == 0, angles[:, 2], angles[:, 0] + angles[:, 2])
    steered = np.column_stack([-angles[:, 2], angles[:, 1], angles[:, 2]]) * (angles[:, 1:2] != 0)
    emission = plan.emit(steered)
    virtual = np.append(plan.virtual, False)[emission.gate]
    assert not virtual.any()
    assert distance(rotation(plan.axis, carried) @ rebuilt(plan, emission), u).max() < BOUND


# --- The fewest pulses ------------------------------------------------------------------------------------------


def counts(natives: Sequence[Native], matrices: np.ndarray) -> list[int]:
    plan = plan_one_qubit(natives)
    return plan.pulses(plan.angles(matrices)).tolist()


def named(*names: str) -> np.ndarray:
    return np.array([GATES[name].matrix() for name in names])


def test_named_gates_with_virtual_z():
    gates = named("id", "s", "t", "z", "h", "sx", "sxdg", "x", "y")
    assert counts([RZ, SX], gates) == [0, 0, 0, 0, 1, 1, 1, 2, 2]
    assert counts([RZ, SX, X], gates) == [0, 0, 0, 0, 1, 1, 1, 1, 1]
    assert counts([RZ, H], gates) == [0, 0, 0, 0, 1, 1, 1, 2, 2]
    assert counts([RZ, R], gates) == [0, 0, 0, 0, 1, 1, 1, 1, 1]
    assert counts([U], gates) == [0, 1, 1, 1, 1, 1, 1, 1, 1]
    assert counts([R], gates) == [0, 2, 2, 2, 2, 1, 1, 1, 1]
    free = any_axis((0, PI), (0, PI), FULL)
    assert counts([free], gates) == [0, 1, 1, 1, 1, 1, 1, 1, 1]
    assert counts([RZ, free], gates) == [0, 0, 0, 0, 1, 1, 1, 1, 1]


def quaternions(u: np.ndarray) -> np.ndarray:
    u = u / np.sqrt(np.linalg.det(u))[..., None, None]
    return np.array(
        [
            np.einsum("ij,nji->n", m, u) / 2
            for m in (np.eye(2), 1j * named("x")[0], 1j * named("y")[0], 1j * named("z")[0])
        ]
    ).real


def test_two_physical_axes_use_the_fewest_rotations():
    # R_z R_x and R_x R_z have components with |w y| = |x z|; one rotation has y = 0 and x = 0 or z = 0.
    rng = np.random.default_rng(4)
    a, b = rng.uniform(-PI, PI, (2, 50))
    u = np.concatenate(
        [
            cliffords(),
            haar_unitary(2, 50, rng=rng),
            rotation("z", a) @ rotation("x", b),
            rotation("x", a) @ rotation("z", b),
            rotation("x", a),
            rotation("z", b),
        ]
    )
    w, x, y, z = np.abs(quaternions(u)).round(9)
    least = np.where(
        np.abs(w * y - x * z) > 1e-8, 3, np.where((y > 0) | ((x > 0) & (z > 0)), 2, np.where((x > 0) | (z > 0), 1, 0))
    )
    found = np.array(counts(SETS["z, x"], u))
    assert np.array_equal(found, least)
    assert np.array_equal(np.array(counts([native("rx", FULL), native("rz", FULL)], u)), least)


def test_equatorial_pulses_alone_use_the_fewest():
    # One pulse has no component along the pole.
    rng = np.random.default_rng(5)
    u = np.concatenate([cliffords(), haar_unitary(2, 50, rng=rng), GATES["r"].matrix(rng.uniform(-7, 7, (50, 2)))])
    w, _, _, z = np.abs(quaternions(u))
    least = np.where(np.abs(w - 1) < 1e-12, 0, np.where(z < 1e-12, 1, 2))
    assert counts([R], u) == least.tolist()


def test_two_equatorial_pulses_have_the_least_total_angle():
    # All first pulses after which the rest is equatorial, by brute force over their azimuth.
    plan = plan_one_qubit([R])
    u = np.concatenate([haar_unitary(2, 40, rng=6), cliffords(), rotation("z", [0.1, 1.0, 3.0])])
    emission = plan.emit(plan.angles(u))
    totals = np.sum(emission.parameters[..., 0] * (emission.gate >= 0), axis=1)
    azimuths = np.linspace(0, PI, 20_001)
    for matrix, total, q in zip(u, totals, quaternions(u).T, strict=True):
        w, x, y, z = q
        # The component of U·R(θ,φ)† along the pole vanishes.
        theta = 2 * np.arctan2(z, x * np.sin(azimuths) - y * np.cos(azimuths))
        rest = matrix / np.sqrt(np.linalg.det(matrix)) @ dagger(GATES["r"].matrix(np.column_stack([theta, azimuths])))
        assert np.abs(quaternions(rest)[3]).max() < 1e-9

        def least(angle: np.ndarray) -> np.ndarray:
            return np.minimum(np.abs(angle) % (2 * PI), 2 * PI - np.abs(angle) % (2 * PI))

        second = 2 * np.arccos(np.clip(np.abs(quaternions(rest)[0]), 0, 1))
        brute = (least(theta) + second).min()
        assert total <= brute + 1e-7
        assert total == pytest.approx(brute, abs=1e-3)


def test_short_ranges_take_many_equal_pulses():
    natives = [native("rz", (0, 0.2)), SX]
    plan = plan_one_qubit(natives)
    u = np.concatenate([haar_unitary(2, 100, rng=9), cliffords()])
    emission = plan.emit(plan.angles(u))
    check_legal(plan, natives, emission)
    # Each of up to a hundred pulses adds its rounding.
    assert distance(rebuilt(plan, emission), u).max() < 5 * BOUND


def test_tolerance_saves_pulses():
    plan = plan_one_qubit([RZ, SX, X])
    off = 2e-13
    u = np.array([rotation("x", off), rotation("y", PI / 2 + off), rotation("x", PI - off)])
    tight, loose = plan.angles(u), plan.angles(u, tolerance=1e-12)
    assert plan.pulses(tight).tolist() == [2, 2, 2]
    assert plan.pulses(loose).tolist() == [0, 1, 1]
    assert distance(rebuilt(plan, plan.emit(tight)), u).max() < BOUND
    assert 1e-14 < distance(rebuilt(plan, plan.emit(loose)), u).max() <= off
    alone = plan_one_qubit([R])
    nearly = GATES["r"].matrix([1.0, 0.3]) @ rotation("z", off)
    assert alone.pulses(alone.angles([nearly])).tolist() == [2]
    assert alone.pulses(alone.angles([nearly], tolerance=1e-12)).tolist() == [1]


# --- The choice among ways --------------------------------------------------------------------------------------


def used(natives: Sequence[Native], **options) -> list[str]:
    return [gate.name for gate in plan_one_qubit(natives, **options).gates]


def test_fewest_pulses_then_duration_then_passing_axes():
    slow, fast = native("rx", FULL, ns=50.0), native("ry", FULL, ns=20.0)
    assert used([slow, fast, RZ]) == ["ry", "rz"]
    assert used([SX, RZ, X, native("h", ns=10.0)]) == ["rz", "x", "h"]
    assert used([SX, RZ, native("rx", FULL)]) == ["rz", "rx"]
    assert used([RZ, U, R]) == ["rz", "r"]
    assert used([RZ, U, native("r", (0, PI), FULL, ns=90.0)]) == ["rz", "u"]
    # With two physical axes the shorter one is outside, unless the other passes through the entangler.
    axes = [native("rx", FULL, ns=20.0), native("rz", FULL, ns=30.0)]
    assert plan_one_qubit(axes).axis.tolist() == [1, 0, 0]
    assert plan_one_qubit(axes, passing=["z"]).axis.tolist() == [0, 0, 1]
    assert plan_one_qubit(axes, passing=[(0, 0, -1)]).axis.tolist() == [0, 0, 1]


def test_the_axis_is_the_virtual_one():
    for virtual in "xyz":
        for physical in set("xyz") - {virtual}:
            plan = plan_one_qubit([native(f"r{physical}", FULL), native(f"r{virtual}", FULL, virtual=True)])
            assert plan.axis.tolist() == [float(name == virtual) for name in "xyz"]
            assert plan.virtual == (False, True)
            assert plan.pulses(plan.angles(haar_unitary(2, 20, rng=7))).tolist() == [1] * 20
    assert [name for name in SETS if plan_of(name).axis is not None] == WITH_AXIS


@pytest.mark.parametrize(
    "natives",
    [
        [],
        [RZ],
        [RZ, native("t")],
        [RZ, native("z")],
        [H, native("t")],
        [RZ, X],
        [native("rx", (0, 0.02)), RZ],
        [native("r", (0, PI), (0, PI / 2))],
        [native("r", (0, 0.04), FULL)],
        [native("u", (0, 1.0), FULL, FULL)],
        [any_axis((0, 1.0), (0, PI), FULL)],
        [native("rz", (0, 0.09)), SX],
        [RZ, Native(Gate("tilted", 1, 1, lambda p: rotation([0.01, 0, 1], p[..., 0])), (FULL,))],
        [RZ, Native(Gate("weak", 1, 0, lambda p: rotation("x", 0.01)))],
    ],
)
def test_what_is_not_enough(natives):
    with pytest.raises(UnsupportedError, match="cannot yet") as caught:
        plan_one_qubit(natives)
    text = str(caught.value)
    assert "\n" not in text and "required: a general rotation" in text
    assert all(f"'{item.gate.name}'" in text for item in natives)


def test_bad_gates_and_bad_batches():
    with pytest.raises(GateSetError, match="1 qubit, as many ranges"):
        plan_one_qubit([native("cx")])
    with pytest.raises(GateSetError, match="range"):
        plan_one_qubit([native("rx")])
    for bad in ((1.0, -1.0), (np.nan, 1.0), (0.0, np.inf)):
        with pytest.raises(GateSetError, match="low ≤ high"):
            plan_one_qubit([native("rx", bad)])
    plan = plan_one_qubit([U])
    for matrix in (np.eye(2), np.ones((3, 2, 2)), np.zeros((1, 3, 3))):
        with pytest.raises(MatrixError):
            plan.angles(matrix)


def test_empty_and_long_batches():
    for name in SETS:
        plan = plan_of(name)
        emission = plan.emit(plan.angles(np.zeros((0, 2, 2))))
        assert emission.gate.shape[0] == emission.parameters.shape[0] == 0
    plan = plan_one_qubit(SETS["virtual z, quarter, half"])
    u = haar_unitary(2, 40_000, rng=8)
    before = u.copy()
    angles = plan.angles(u)
    kept = angles.copy()
    emission = plan.emit(angles)
    assert np.array_equal(u, before) and np.array_equal(angles, kept)
    assert distance(rebuilt(plan, emission), u).max() < BOUND


# --- Recognition ------------------------------------------------------------------------------------------------


def test_kinds_of_named_gates():
    kinds = {
        "id": Fixed, "x": Fixed, "h": Fixed, "t": Fixed, "rx": Turn, "rz": Turn, "p": Turn, "u1": Turn,
        "r": Equatorial, "u2": Fixed, "u3": General, "u": General, "U": General,
    }  # fmt: skip
    for name, kind in kinds.items():
        found = recognise(3, native(name, *[FULL] * GATES[name].n_parameters))
        assert type(found) is kind and found.index == 3, name


def test_axes_and_knobs_of_named_gates_are_exact():
    turn = recognise(0, native("ry", (0, 4 * PI)))
    assert isinstance(turn, Turn)
    assert turn.axis.tolist() == [0, 1, 0] and turn.knob == Knob(0, 1.0, 0.0, 0.0, 4 * PI)
    swing = recognise(0, R)
    assert isinstance(swing, Equatorial)
    assert swing.pole.tolist() == [0, 0, 1] and swing.reference.tolist() == [1, 0, 0]
    assert (swing.turn.slot, swing.azimuth.slot, swing.copies) == (0, 1, 1)
    free = recognise(0, U)
    assert isinstance(free, General)
    assert free.outer.tolist() == [0, 0, 1] and free.inner.tolist() == [0, 1, 0]
    assert [(k.slot, k.scale, k.shift) for k in (free.left, free.middle, free.right)] == [
        (1, 1, 0),
        (0, 1, 0),
        (2, 1, 0),
    ]


@given(seeds)
@settings(deadline=None, max_examples=25)
def test_turned_scaled_and_shifted_rotation(seed):
    rng = np.random.default_rng(seed)
    axis, scale, shift = rng.normal(size=3), rng.uniform(0.3, 9), rng.uniform(-3, 3)
    axis /= np.linalg.norm(axis)
    gate = Gate("g", 1, 1, lambda p: np.exp(1j * p[..., :1, None]) * rotation(axis, scale * p[..., 0] + shift))
    low = rng.uniform(-5, 5)
    found = recognise(0, Native(gate, ((low, low + rng.uniform(0.5, 9)),)))
    assert isinstance(found, Turn)
    assert np.abs(found.axis - axis).max() < 1e-14
    assert found.knob.scale == pytest.approx(scale, rel=1e-14)
    assert np.sin((found.knob.shift - shift) / 2) == pytest.approx(0, abs=1e-13)


def test_a_rotation_that_is_not_linear_is_not_taken_for_one():
    gate = Gate("g", 1, 1, lambda p: rotation("x", np.sin(p[..., 0])))
    assert isinstance(recognise(0, Native(gate, (FULL,))), Fixed)
    kink = Gate("g", 1, 1, lambda p: rotation("x", p[..., 0] + 1e-9 * np.maximum(p[..., 0] - 3, 0)))
    assert isinstance(recognise(0, Native(kink, (FULL,))), Fixed)


@given(st.floats(-7, 7), st.floats(0.8, 14), st.floats(-PI, PI), seeds)
@settings(deadline=None, max_examples=100)
def test_knobs_split_angles_into_the_fewest_equal_pulses(low, length, target, seed):
    knob = Knob(0, float(np.random.default_rng(seed).choice([1.0, -2.0, PI])), 0.25, low, low + length)
    copies = knob.copies(-PI, PI)
    if not copies:
        reach = knob.reach
        assert 64 * (reach[1] - reach[0]) < 2 * PI
        return
    parameter, count = knob.split(np.array([target]), copies)
    k = int(count[0])
    assert 1 <= k <= copies and knob.low <= parameter[0] <= knob.high
    turns = (k * (knob.scale * parameter[0] + knob.shift) - target) / (2 * PI)
    assert turns == pytest.approx(np.rint(turns), abs=1e-13)
    for fewer in range(1, k):
        a, b = (fewer * end for end in knob.reach)
        assert 2 * PI * np.ceil((a - target) / (2 * PI) - 1e-9) + target > b - 1e-9
