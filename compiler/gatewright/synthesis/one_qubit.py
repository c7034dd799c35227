"""One-qubit unitaries in the native one-qubit gates of any set, with the fewest pulses; batched.

Every gate is recognised from its matrices alone, whatever its name, axes, units and phases: a fixed rotation, a
rotation about one axis, an equatorial rotation R(θ,φ) = Rn(φ) Rm(θ) Rn(-φ), a general one Rn(a) Rm(b) Rn(c). The
ways to combine them are Euler angles (Nielsen and Chuang, theorem 4.1) and fixed quarter turns between rotations
that cost nothing (McKay et al., PRA 96, 022330 (2017)).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import permutations, product
from typing import Any, Protocol, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import GateSetError, UnsupportedError
from gatewright.gates import Gate
from gatewright.linalg import haar_unitary
from gatewright.synthesis.euler import ROUNDING, euler_angles, fewest_turns, quaternion, rotation, settle

__all__ = ["Emission", "NativeOneQubit", "OneQubitPlan", "plan_one_qubit"]

Real: TypeAlias = NDArray[np.float64]
Mask: TypeAlias = NDArray[np.bool_]

# Axes count as parallel or orthogonal, and a model of a gate as right, within this.
_SAME = 2e-14
# A rotation whose range is too short is made of at most so many pulses.
_MOST_COPIES = 4
_PI = float(np.pi)


class NativeOneQubit(Protocol):
    """What is asked of a native one-qubit gate."""

    @property
    def gate(self) -> Gate:
        """Name, number of parameters and matrix, up to phase."""

    @property
    def ranges(self) -> Sequence[tuple[float, float]]:
        """Lowest and highest value of each parameter."""

    @property
    def virtual(self) -> bool:
        """Whether it costs nothing."""

    @property
    def duration_ns(self) -> float | None:
        """How long it takes, where known."""


@dataclass(frozen=True, eq=False, slots=True)
class Emission:
    """Native operations for a batch of sites, in time order along axis 1.

    Attributes
    ----------
    gate : ndarray of int16, shape (N, S)
        Index into the plan's gates; -1 for none, anywhere in a row.
    parameters : ndarray of float64, shape (N, S, P)
        P is the largest number of parameters of any of the plan's gates; those not used are 0.
    """

    gate: NDArray[np.int16]
    parameters: Real


# --- Recognised gates -------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Knob:
    """Parameter number `slot`, within [low, high], that turns an angle ``scale * p + shift``."""

    slot: int
    scale: float
    shift: float
    low: float
    high: float

    @property
    def reach(self) -> tuple[float, float]:
        a, b = self.scale * self.low + self.shift, self.scale * self.high + self.shift
        return min(a, b), max(a, b)

    def copies(self, low: float, high: float) -> int:
        """Return the number of pulses that make every angle of [low, high] up to full turns; 0 if too many."""
        for k in range(1, _MOST_COPIES + 1):
            a, b = (k * end for end in self.reach)
            fuzz = ROUNDING * max(1.0, abs(a), abs(b))
            first = low + 2 * _PI * np.ceil((a - fuzz - low) / (2 * _PI))
            if b - a >= 2 * _PI - fuzz or first + (high - low) <= b + fuzz:
                return k
        return 0

    def split(self, angle: Real, copies: int) -> tuple[Real, NDArray[np.int64]]:
        """Return the parameter of each of the fewest equal pulses that add up to `angle`, and their number."""
        value = np.zeros(angle.shape)
        count = np.zeros(angle.shape, dtype=np.int64)
        for k in range(1, copies + 1):
            a, b = (k * end for end in self.reach)
            fuzz = ROUNDING * max(1.0, abs(a), abs(b))
            if a <= -_PI and b >= _PI:
                total, fits = angle, count == 0
            else:
                inside = (angle >= a - fuzz) & (angle <= b + fuzz)
                total = angle + 2 * _PI * np.where(inside, 0.0, np.ceil((a - fuzz - angle) / (2 * _PI)))
                fits = (count == 0) & (total <= b + fuzz)
            value = np.where(fits, total / k, value)
            count[fits] = k
        return np.clip((value - self.shift) / self.scale, self.low, self.high), count

    def holds(self, angle: Real) -> Mask:
        """Return where one pulse is enough."""
        return self.split(angle, 1)[1] == 1


@dataclass(frozen=True, eq=False, slots=True)
class _Fixed:
    """A gate without parameters, or one of no other kind with its parameters held nearest to zero."""

    index: int
    parameters: tuple[float, ...]
    unitary: NDArray[np.complex128]

    def describe(self) -> str:
        q, _ = quaternion(self.unitary)
        q = q if q[0] >= 0 else -q
        sine = float(np.linalg.norm(q[1:]))
        return f"turns by {2 * np.arctan2(sine, q[0]):.4g} about {_show(q[1:] / max(sine, 1e-300))}"


@dataclass(frozen=True, eq=False, slots=True)
class _Turn:
    """A rotation about `axis`."""

    index: int
    axis: Real
    knob: _Knob
    copies: int = 0

    def reversed(self) -> _Turn:
        knob = replace(self.knob, scale=-self.knob.scale, shift=-self.knob.shift)
        return replace(self, axis=-self.axis, knob=knob)

    def describe(self) -> str:
        low, high = self.knob.reach
        return f"rotates by {low:.4g} to {high:.4g} about {_show(self.axis)}"


@dataclass(frozen=True, eq=False, slots=True)
class _Swing:
    """An equatorial rotation ``R_pole(φ) R_reference(θ) R_pole(-φ)``."""

    index: int
    pole: Real
    reference: Real
    turn: _Knob
    azimuth: _Knob
    copies: int = 0
    sign: int = 1

    def usable(self) -> _Swing | None:
        """Return the gate with the number of pulses it needs for any θ and φ, or None if it cannot make them."""
        low, high = self.azimuth.reach
        if self.azimuth.copies(-_PI, _PI) == 1:
            ways = [(self.turn.copies(0, _PI), 1), (self.turn.copies(-_PI, 0), -1)]
        elif high - low >= _PI - ROUNDING:
            ways = [(self.turn.copies(-_PI, _PI), 1)]
        else:
            return None
        copies, sign = min(((c, -s) for c, s in ways if c), default=(0, 0))
        return replace(self, copies=copies, sign=-sign) if copies else None

    def reversed(self) -> _Swing:
        azimuth = replace(self.azimuth, scale=-self.azimuth.scale, shift=-self.azimuth.shift)
        return replace(self, pole=-self.pole, azimuth=azimuth)

    def describe(self) -> str:
        low, high = self.turn.reach
        return f"rotates by {low:.4g} to {high:.4g} about axes orthogonal to {_show(self.pole)}"


@dataclass(frozen=True, eq=False, slots=True)
class _Free:
    """A general rotation ``R_outer(a) R_inner(b) R_outer(c)``."""

    index: int
    outer: Real
    inner: Real
    left: _Knob
    middle: _Knob
    right: _Knob
    sign: int = 1

    def usable(self) -> _Free | None:
        if self.left.copies(-_PI, _PI) != 1 or self.right.copies(-_PI, _PI) != 1:
            return None
        if self.middle.copies(0, _PI) == 1:
            return self
        return replace(self, sign=-1) if self.middle.copies(-_PI, 0) == 1 else None

    def reversed(self) -> _Free:
        left, right = (replace(k, scale=-k.scale, shift=-k.shift) for k in (self.left, self.right))
        return replace(self, outer=-self.outer, left=left, right=right)

    def describe(self) -> str:
        return f"is a general rotation with outer axis {_show(self.outer)}"


_Kind: TypeAlias = _Fixed | _Turn | _Swing | _Free


def _show(axis: Real) -> str:
    return "(" + ", ".join(f"{c + 0.0:.3g}" for c in axis) + ")"


# --- Recognition ------------------------------------------------------------------------------------------------


def _times(a: Real, b: Real) -> Real:
    return np.concatenate([[a[0] * b[0] - a[1:] @ b[1:]], a[0] * b[1:] + b[0] * a[1:] + np.cross(a[1:], b[1:])])


def _inverse(a: Real) -> Real:
    return np.concatenate([a[:1], -a[1:]])


def _turned(axis: Real, angle: float, vector: Real) -> Real:
    """Rodrigues' formula."""
    along = axis * (axis @ vector)
    return np.asarray(along + np.cos(angle) * (vector - along) + np.sin(angle) * np.cross(axis, vector))


def _clean(axis: Real) -> Real:
    """Return the unit vector, with components at rounding level made zero."""
    axis = axis / np.linalg.norm(axis)
    axis = np.where(np.abs(axis) <= ROUNDING, 0.0, axis)
    return np.asarray(axis / np.linalg.norm(axis))


def _clean_rate(rate: float) -> float:
    """Return the simple fraction, or simple multiple of pi, within rounding of `rate`."""
    for unit in (1.0, _PI):
        for denominator in range(1, 13):
            near = np.rint(rate / unit * denominator) * unit / denominator
            if abs(near - rate) <= 4 * ROUNDING * abs(rate):
                return float(near)
    return rate


def _half_angle(sine: float, cosine: float) -> float:
    return float(settle(np.array(2 * np.arctan2(sine, cosine)))[0])


class _Samples:
    """The quaternions of one gate over its parameter range."""

    def __init__(self, native: NativeOneQubit) -> None:
        self.gate = native.gate
        self.low = np.array([low for low, _ in native.ranges], dtype=np.float64)
        self.high = np.array([high for _, high in native.ranges], dtype=np.float64)
        # Generic points: the fractional parts of multiples of powers of the golden ratio.
        golden = (np.sqrt(5) - 1) / 2
        k = len(self.low)
        fractions = np.mod(np.arange(1, 33)[:, None] * golden ** np.arange(1, k + 1), 1.0)
        self.points = self.low + fractions * (self.high - self.low)
        self.base = self.low + np.array([0.382, 0.236, 0.146][:k]) * (self.high - self.low)

    def at(self, changes: dict[int, float]) -> Real:
        point = self.base.copy()
        for slot, value in changes.items():
            point[slot] = value
        return quaternion(self.gate.matrix(point))[0]

    def agree(self, model: Callable[[Real], NDArray[np.complex128]]) -> bool:
        """Return whether `model` gives the gate's matrices up to phase at all sample points."""
        a = quaternion(self.gate.matrix(self.points))[0]
        b = quaternion(model(self.points))[0]
        gap = np.minimum(np.abs(a - b).max(axis=0), np.abs(a + b).max(axis=0))
        return bool(gap.max() <= _SAME)

    def knob(self, slot: int, scale: float, shift: float) -> _Knob:
        return _Knob(slot, scale, shift, float(self.low[slot]), float(self.high[slot]))

    def spin(self, slot: int, angle: Callable[[float], tuple[Real, float]]) -> tuple[Real, float] | None:
        """Find the fixed axis and the rate of what turns with parameter `slot`.

        `angle` maps a value of the parameter to the vector sin(a)·axis and to cos(a), a being the angle turned
        since the base point, or half of it; the rate is that of a. A first small step tells the rate well enough
        to choose a large one without losing count of the turns.
        """
        start, stop = float(self.base[slot]), float(self.high[slot])
        step = (stop - start) / 4096
        if step <= 0:
            return None
        vector, cosine = angle(start + step)
        sine = float(np.linalg.norm(vector))
        if sine < 1e-7:
            return None
        axis, rate = vector / sine, float(np.arctan2(sine, cosine)) / step
        vector, _ = angle(min(stop, start + _PI / 2 / rate))
        axis = _clean(vector if vector @ axis > 0 else -vector)
        vector, cosine = angle(stop)
        expected = rate * (stop - start)
        # Half-angles are known modulo pi only, the sign of a quaternion being arbitrary.
        excess = float(np.arctan2(vector @ axis, cosine)) - expected
        return axis, _clean_rate((expected + excess - _PI * np.rint(excess / _PI)) / (stop - start))


def _recognise(index: int, native: NativeOneQubit) -> _Kind:
    gate = native.gate
    if gate.n_qubits != 1 or len(native.ranges) != gate.n_parameters:
        raise GateSetError(
            f"'{gate.name}' is not a one-qubit gate with a range for each parameter",
            required="1 qubit, as many ranges as parameters",
            found=f"{gate.n_qubits} qubits, {gate.n_parameters} parameters, {len(native.ranges)} ranges",
        )
    if not all(-1e6 <= low <= high <= 1e6 for low, high in native.ranges):
        raise GateSetError(
            f"a parameter range of '{gate.name}' is not usable",
            required="low ≤ high, both within ±1e6",
            found=", ".join(f"{low:.6g} to {high:.6g}" for low, high in native.ranges),
        )
    samples = _Samples(native)
    finders: dict[int, Callable[..., _Kind | None]] = {1: _find_turn, 2: _find_swing, 3: _find_free}
    if gate.n_parameters in finders:
        for slots in permutations(range(gate.n_parameters)):
            kind = finders[gate.n_parameters](index, samples, *slots)
            if kind is not None:
                return kind
    parameters = np.clip(0.0, samples.low, samples.high)
    return _Fixed(index, tuple(parameters.tolist()), gate.matrix(parameters))


def _spin_left(samples: _Samples, slot: int, others: dict[int, float]) -> tuple[Real, float] | None:
    """Find what turns on the left of the gate, later in time, with a parameter."""
    inverse = _inverse(samples.at(others))

    def since(p: float) -> tuple[Real, float]:
        q = _times(samples.at({**others, slot: p}), inverse)
        return (q[1:], float(q[0])) if q[0] >= 0 else (-q[1:], -float(q[0]))

    found = samples.spin(slot, since)
    return None if found is None else (found[0], _clean_rate(2 * found[1]))


def _spin_right(samples: _Samples, slot: int) -> tuple[Real, float] | None:
    """Find what turns on the right of the gate, earlier in time, with a parameter."""
    inverse = _inverse(samples.at({}))

    def since(p: float) -> tuple[Real, float]:
        q = _times(inverse, samples.at({slot: p}))
        return (q[1:], float(q[0])) if q[0] >= 0 else (-q[1:], -float(q[0]))

    found = samples.spin(slot, since)
    return None if found is None else (found[0], _clean_rate(2 * found[1]))


def _find_turn(index: int, samples: _Samples, slot: int) -> _Turn | None:
    found = _spin_left(samples, slot, {})
    if found is None:
        return None
    axis, rate = found
    q = samples.at({})
    shift = float(settle(np.array(_half_angle(axis @ q[1:], q[0]) - rate * samples.base[slot]))[0])
    if not samples.agree(lambda p: rotation(axis, rate * p[:, slot] + shift)):
        return None
    return _Turn(index, axis, samples.knob(slot, rate, shift))


def _find_swing(index: int, samples: _Samples, turn: int, azimuth: int) -> _Swing | None:
    start = float(samples.base[azimuth])
    found = _spin_left(samples, turn, {})
    if found is None:
        return None
    axis, rate = found

    def since(p: float) -> tuple[Real, float]:
        now = _spin_left(samples, turn, {azimuth: p})
        other = axis if now is None else now[0]
        return np.cross(axis, other), float(axis @ other)

    swung = samples.spin(azimuth, since)
    if swung is None:
        return None
    pole, pace = swung
    q = samples.at({})
    shift = float(settle(np.array(_half_angle(axis @ q[1:], q[0]) - rate * samples.base[turn]))[0])
    reference = _clean(_turned(pole, -pace * start, axis))

    def model(p: Real) -> NDArray[np.complex128]:
        around = rotation(pole, pace * p[:, azimuth])
        return around @ rotation(reference, rate * p[:, turn] + shift) @ np.conj(np.swapaxes(around, -1, -2))

    if not samples.agree(model):
        return None
    return _Swing(index, pole, reference, samples.knob(turn, rate, shift), samples.knob(azimuth, pace, 0.0))


def _find_free(index: int, samples: _Samples, left: int, middle: int, right: int) -> _Free | None:
    later, between, earlier = _spin_left(samples, left, {}), None, _spin_right(samples, right)
    if later is None or earlier is None:
        return None
    outer, rate_left = later
    rate_right = earlier[1]
    if outer @ earlier[0] < 0:
        rate_right = -rate_right
    # With the base point's left rotation undone, the middle one turns about the inner axis.
    between = _spin_left(samples, middle, {})
    if between is None:
        return None
    turned, rate_middle = between
    inner = _clean(_turned(outer, -rate_left * samples.base[left], turned))
    if abs(inner @ outer) > _SAME:
        return None
    undo = [_spinor(outer, -rate_left * samples.base[left]), _spinor(outer, -rate_right * samples.base[right])]
    q0, *vector = _times(_times(undo[0], samples.at({})), undo[1])
    qo, qm, ql = np.array([outer, inner, np.cross(outer, inner)]) @ np.array(vector)
    # What is left is R_inner(x) R_outer(y), with components (cos·cos, cos·sin, sin·cos, -sin·sin) of the halves.
    y = np.arctan2(qo, q0) if np.hypot(q0, qo) >= np.hypot(qm, ql) else np.arctan2(-ql, qm)
    x = np.arctan2(qm * np.cos(y) - ql * np.sin(y), q0 * np.cos(y) + qo * np.sin(y))
    shift_middle = float(settle(np.array(2 * x - rate_middle * samples.base[middle]))[0])
    shift_right = float(settle(np.array(2 * y))[0])

    def model(p: Real) -> NDArray[np.complex128]:
        first = rotation(outer, rate_right * p[:, right] + shift_right)
        return (
            rotation(outer, rate_left * p[:, left]) @ rotation(inner, rate_middle * p[:, middle] + shift_middle) @ first
        )

    if not samples.agree(model):
        return None
    return _Free(
        index,
        outer,
        inner,
        samples.knob(left, rate_left, 0.0),
        samples.knob(middle, rate_middle, shift_middle),
        samples.knob(right, rate_right, shift_right),
    )


def _spinor(axis: Real, angle: float) -> Real:
    return np.concatenate([[np.cos(angle / 2)], np.sin(angle / 2) * axis])
