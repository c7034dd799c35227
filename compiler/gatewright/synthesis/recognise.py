"""Tell from its matrices alone what kind of rotation a native one-qubit gate is, whatever its name, axes and units.

The kinds, with σ the Pauli vector and R_n(t) = exp(-i t/2 n·σ), all up to phase: a fixed rotation; a rotation
R_n(t) about one axis; an equatorial rotation R_n(φ) R_m(θ) R_n(-φ), m orthogonal to n; a general one,
R_n(a) R_m(b) R_n(c); one about any axis, R_v(θ) with v at the angles ϑ from n and φ about n.
Each angle is an affine function of one parameter. What is found is verified over the parameter range.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from itertools import permutations
from typing import Protocol, TypeAlias

import numpy as np
from numpy.typing import NDArray

from gatewright.errors import GateSetError
from gatewright.gates import Gate
from gatewright.synthesis.euler import ROUNDING, quaternion, rotation, settle

__all__ = ["SAME", "Equatorial", "Fixed", "FreeAxis", "General", "Kind", "Knob", "NativeOneQubit", "Turn", "recognise"]

Real: TypeAlias = NDArray[np.float64]
Complex: TypeAlias = NDArray[np.complex128]

#: Axes count as parallel or orthogonal, and the model of a gate as right, within this.
SAME = 2e-14
# A rotation whose range is too short is made of at most so many equal pulses.
_MOST_COPIES = 64
_PI = float(np.pi)


class NativeOneQubit(Protocol):
    """What is asked of a native one-qubit gate."""

    @property
    def gate(self) -> Gate:
        """Name, number of parameters, and matrix up to phase."""

    @property
    def ranges(self) -> Sequence[tuple[float, float]]:
        """Lowest and highest value of each parameter."""

    @property
    def virtual(self) -> bool:
        """Whether it costs nothing."""

    @property
    def duration_ns(self) -> float | None:
        """How long it takes, where known."""


@dataclass(frozen=True, slots=True)
class Knob:
    """Parameter number `slot`, within [low, high], that sets an angle ``scale * p + shift``."""

    slot: int
    scale: float
    shift: float
    low: float
    high: float

    @property
    def reach(self) -> tuple[float, float]:
        """The lowest and highest angle."""
        a, b = self.scale * self.low + self.shift, self.scale * self.high + self.shift
        return min(a, b), max(a, b)

    def _reach(self, copies: int) -> tuple[float, float]:
        a, b = (copies * end for end in self.reach)
        fuzz = ROUNDING * max(1.0, abs(a), abs(b))
        return a - fuzz, b + fuzz

    def copies(self, low: float, high: float) -> int:
        """Return how many equal pulses make every angle of [low, high], full turns apart; 0 if too many."""
        for k in range(1, _MOST_COPIES + 1):
            a, b = self._reach(k)
            first = low + 2 * _PI * np.ceil((a - low) / (2 * _PI))
            if b - a >= 2 * _PI or first + (high - low) <= b:
                return k
        return 0

    def split(self, angle: Real, copies: int = 1) -> tuple[Real, NDArray[np.int64]]:
        """Return the parameter of the fewest equal pulses, `copies` at most, that add up to `angle`; and how many.

        `angle` lies in (-π, π]. The number is 0 where `copies` pulses are too few.
        """
        value = np.zeros(angle.shape)
        count = np.zeros(angle.shape, dtype=np.int64)
        for k in range(1, copies + 1):
            a, b = self._reach(k)
            outside = (angle < a) | (angle > b)
            total = angle
            if outside.any():
                total = np.where(outside, angle + 2 * _PI * np.ceil((a - angle) / (2 * _PI)), angle)
            fits = (count == 0) & (total <= b)
            value = np.where(fits, total / k, value)
            count[fits] = k
        return np.clip((value - self.shift) / self.scale, self.low, self.high), count

    def reversed(self) -> Knob:
        """Return the same knob for the angle about the opposite axis."""
        return replace(self, scale=-self.scale, shift=-self.shift)


@dataclass(frozen=True, eq=False, slots=True)
class Fixed:
    """A gate without parameters, or one of no other kind with its parameters held nearest to zero."""

    index: int
    parameters: tuple[float, ...]
    unitary: Complex

    def describe(self) -> str:
        """Return what it does, for a message."""
        q, _ = quaternion(self.unitary)
        q = q if q[0] >= 0 else -q
        sine = float(np.linalg.norm(q[1:]))
        if sine <= SAME:
            return "does nothing"
        held = " with its parameters held" if self.parameters else ""
        return f"turns by {2 * np.arctan2(sine, q[0]):.4g} about {_show(q[1:] / sine)}{held}"


@dataclass(frozen=True, eq=False, slots=True)
class Turn:
    """A rotation about `axis`."""

    index: int
    axis: Real
    knob: Knob

    def reversed(self) -> Turn:
        """Return the same gate, told about the opposite axis."""
        return replace(self, axis=-self.axis, knob=self.knob.reversed())

    def describe(self) -> str:
        """Return what it does, for a message."""
        low, high = self.knob.reach
        return f"rotates by {low:.4g} to {high:.4g} about {_show(self.axis)}"


@dataclass(frozen=True, eq=False, slots=True)
class Equatorial:
    """An equatorial rotation ``R_pole(φ) R_reference(θ) R_pole(-φ)``.

    `copies` pulses at most make every θ in [0, π], or in [-π, 0] where `sign` is -1; 0 if they do not.
    """

    index: int
    pole: Real
    reference: Real
    turn: Knob
    azimuth: Knob
    copies: int
    sign: int

    def reversed(self) -> Equatorial:
        """Return the same gate, told about the opposite pole."""
        return replace(self, pole=-self.pole, azimuth=self.azimuth.reversed())

    def describe(self) -> str:
        """Return what it does, for a message."""
        (a, b), (c, d) = self.turn.reach, self.azimuth.reach
        equator = f"axes orthogonal to {_show(self.pole)}"
        return f"rotates by {a:.4g} to {b:.4g} about {equator} at angles {c:.4g} to {d:.4g}"


@dataclass(frozen=True, eq=False, slots=True)
class General:
    """A general rotation ``R_outer(a) R_inner(b) R_outer(c)``.

    `sign` is 1 or -1 where b covers [0, π] or [-π, 0], and a and c a full turn; 0 otherwise.
    """

    index: int
    outer: Real
    inner: Real
    left: Knob
    middle: Knob
    right: Knob
    sign: int

    def reversed(self) -> General:
        """Return the same gate, told about the opposite outer axis."""
        return replace(self, outer=-self.outer, left=self.left.reversed(), right=self.right.reversed())

    def describe(self) -> str:
        """Return what it does, for a message."""
        ranges = ", ".join(f"{a:.4g} to {b:.4g}" for a, b in (k.reach for k in (self.left, self.middle, self.right)))
        return f"makes three rotations, about {_show(self.outer)} and an axis orthogonal to it, by {ranges}"


@dataclass(frozen=True, eq=False, slots=True)
class FreeAxis:
    """A rotation by θ about the axis cos ϑ · pole + sin ϑ (cos φ · reference + sin φ · pole × reference).

    `sign` is 1 or -1 where θ covers [0, π] or [-π, 0] and ϑ covers [0, π], 2 or 3 where θ covers [-π, π] and ϑ
    [0, π/2] or [π/2, π]; always with φ a full turn. Otherwise 0.
    """

    index: int
    pole: Real
    reference: Real
    turn: Knob
    polar: Knob
    azimuth: Knob
    sign: int

    def describe(self) -> str:
        """Return what it does, for a message."""
        (a, b), (c, d), (e, f) = self.turn.reach, self.polar.reach, self.azimuth.reach
        axes = f"axes at {c:.4g} to {d:.4g} from {_show(self.pole)} and {e:.4g} to {f:.4g} about it"
        return f"rotates by {a:.4g} to {b:.4g} about {axes}"


Kind: TypeAlias = Fixed | Turn | Equatorial | General | FreeAxis


def _show(axis: Real) -> str:
    return "(" + ", ".join(f"{c + 0.0:.3g}" for c in axis) + ")"


def recognise(index: int, native: NativeOneQubit) -> Kind:
    """Return the kind of a native gate.

    Parameters
    ----------
    index : int
        Carried into the result.
    native : NativeOneQubit

    Raises
    ------
    GateSetError
        If it is not a one-qubit gate with a usable range for each parameter.
    """
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
    finders: dict[int, tuple[Callable[..., Kind | None], ...]] = {
        1: (_find_turn,),
        2: (_find_equatorial,),
        3: (_find_general, _find_free_axis),
    }
    for finder in finders.get(gate.n_parameters, ()):
        for slots in permutations(range(gate.n_parameters)):
            kind = finder(index, samples, *slots)
            if kind is not None:
                return kind
    parameters = np.clip(0.0, samples.low, samples.high)
    return Fixed(index, tuple(parameters.tolist()), gate.matrix(parameters))


class _Samples:
    """The quaternions of one gate over its parameter range."""

    def __init__(self, native: NativeOneQubit) -> None:
        self.gate = native.gate
        self.low = np.array([low for low, _ in native.ranges], dtype=np.float64)
        self.high = np.array([high for _, high in native.ranges], dtype=np.float64)
        k = len(self.low)
        # Generic points: fractional parts of multiples of powers of the golden ratio; no parameter at 0 or an end.
        fractions = np.mod(np.arange(1, 33)[:, None] * ((np.sqrt(5) - 1) / 2) ** np.arange(1, k + 1), 1.0)
        self.points = self.low + fractions * (self.high - self.low)
        self.base = self.low + 0.381966 / np.arange(1, k + 1) * (self.high - self.low)

    def at(self, changes: dict[int, float]) -> Real:
        """Return the quaternion at the base point with some parameters changed."""
        point = self.base.copy()
        for slot, value in changes.items():
            point[slot] = value
        return quaternion(self.gate.matrix(point))[0]

    def agree(self, model: Callable[[Real], Complex]) -> bool:
        """Return whether `model` gives the gate's matrices up to phase at all points."""
        a = quaternion(self.gate.matrix(self.points))[0]
        b = quaternion(model(self.points))[0]
        gap = np.minimum(np.abs(a - b).max(axis=0), np.abs(a + b).max(axis=0))
        return bool(gap.max() <= SAME)

    def knob(self, slot: int, scale: float, shift: float = 0.0) -> Knob:
        return Knob(slot, scale, _settled(shift), float(self.low[slot]), float(self.high[slot]))

    def sweep(self, slot: int, since: Callable[[float], tuple[Real, float]]) -> tuple[Real, float] | None:
        """Find the fixed axis, and the rate, of what turns with a parameter.

        `since` maps a value of the parameter to (sin(t)·axis, cos(t)), t the angle turned since the base point, known
        up to multiples of π. A small first step gives the rate well enough to take a large one without losing count.
        """
        start, stop = float(self.base[slot]), float(self.high[slot])
        step = (stop - start) / 4096
        if step <= 0:
            return None
        vector, cosine = since(start + step)
        sine = float(np.linalg.norm(vector))
        if sine < 1e-7:
            return None
        axis, rate = vector / sine, float(np.arctan2(sine, cosine)) / step
        vector, _ = since(min(stop, start + _PI / 2 / rate))
        if np.linalg.norm(vector) < 1e-7:
            return None
        axis = _clean(vector if vector @ axis > 0 else -vector)
        vector, cosine = since(stop)
        expected = rate * (stop - start)
        excess = float(np.arctan2(vector @ axis, cosine)) - expected
        return axis, (expected + excess - _PI * float(np.rint(excess / _PI))) / (stop - start)

    def rotation(self, slot: int, others: dict[int, float], *, first: bool = False) -> tuple[Real, float] | None:
        """Find the axis and rate of the rotation that a parameter adds after the gate, or before it (`first`)."""
        inverse = self.at(others) * np.array([1.0, -1.0, -1.0, -1.0])

        def since(p: float) -> tuple[Real, float]:
            q = self.at({**others, slot: p})
            q = _times(inverse, q) if first else _times(q, inverse)
            return (q[1:], float(q[0])) if q[0] >= 0 else (-q[1:], -float(q[0]))

        found = self.sweep(slot, since)
        return None if found is None else (found[0], _simple(2 * found[1]))

    def shift(self, slot: int, axis: Real, rate: float) -> float:
        """Return the constant part of the angle about `axis`, the gate being a rotation about it."""
        q = self.at({})
        return 2 * float(np.arctan2(axis @ q[1:], q[0])) - rate * float(self.base[slot])


def _find_turn(index: int, samples: _Samples, slot: int) -> Turn | None:
    found = samples.rotation(slot, {})
    if found is None:
        return None
    axis, rate = found
    knob = samples.knob(slot, rate, samples.shift(slot, axis, rate))
    if not samples.agree(lambda p: rotation(axis, rate * p[:, slot] + knob.shift)):
        return None
    return Turn(index, axis, knob)


def _find_equatorial(index: int, samples: _Samples, turn: int, azimuth: int) -> Equatorial | None:
    found = samples.rotation(turn, {})
    if found is None:
        return None
    axis, rate = found

    def since(p: float) -> tuple[Real, float]:
        now = samples.rotation(turn, {azimuth: p})
        other = axis if now is None else now[0]
        return np.cross(axis, other), float(axis @ other)

    swung = samples.sweep(azimuth, since)
    if swung is None:
        return None
    pole, pace = swung[0], _simple(swung[1])
    reference = _clean(_turned(pole, -pace * float(samples.base[azimuth]), axis))
    theta = samples.knob(turn, rate, samples.shift(turn, axis, rate))
    phi = samples.knob(azimuth, pace)

    def model(p: Real) -> Complex:
        around = rotation(pole, pace * p[:, azimuth])
        return around @ rotation(reference, rate * p[:, turn] + theta.shift) @ np.conj(np.swapaxes(around, -1, -2))

    if not samples.agree(model):
        return None
    if phi.copies(-_PI, _PI) == 1:
        ways = [(theta.copies(0, _PI), 1), (theta.copies(-_PI, 0), -1)]
    elif phi.reach[1] - phi.reach[0] >= _PI - ROUNDING:
        ways = [(theta.copies(-_PI, _PI), 1)]
    else:
        ways = []
    copies, sign = min((way for way in ways if way[0]), key=lambda way: way[0], default=(0, 0))
    return Equatorial(index, pole, reference, theta, phi, copies, sign)


def _find_general(index: int, samples: _Samples, left: int, middle: int, right: int) -> General | None:
    last, between, first = (
        samples.rotation(left, {}),
        samples.rotation(middle, {}),
        samples.rotation(right, {}, first=True),
    )
    if last is None or between is None or first is None:
        return None
    outer, rate_a = last
    rate_c = first[1] if outer @ first[0] > 0 else -first[1]
    turned, rate_b = between
    a, b, c = (rate * float(samples.base[slot]) for rate, slot in ((rate_a, left), (rate_b, middle), (rate_c, right)))
    inner = _clean(_turned(outer, -a, turned))
    if abs(inner @ outer) > SAME:
        return None
    # Without the outer rotations what is left is R_inner(2x) R_outer(2y), whose components along
    # (1, outer, inner, outer × inner) are (cos x cos y, cos x sin y, sin x cos y, -sin x sin y).
    q = _times(_times(_spinor(outer, -a), samples.at({})), _spinor(outer, -c))
    q0 = q[0]
    qo, qm, ql = np.array([outer, inner, np.cross(outer, inner)]) @ q[1:]
    y = np.arctan2(qo, q0) if np.hypot(q0, qo) >= np.hypot(qm, ql) else np.arctan2(-ql, qm)
    x = np.arctan2(qm * np.cos(y) - ql * np.sin(y), q0 * np.cos(y) + qo * np.sin(y))
    knobs = (
        samples.knob(left, rate_a),
        samples.knob(middle, rate_b, float(2 * x - b)),
        samples.knob(right, rate_c, float(2 * y)),
    )

    def model(p: Real) -> Complex:
        parts = [
            rotation(axis, k.scale * p[:, k.slot] + k.shift)
            for axis, k in zip((outer, inner, outer), knobs, strict=True)
        ]
        return parts[0] @ parts[1] @ parts[2]

    if not samples.agree(model):
        return None
    sign = 0
    if knobs[0].copies(-_PI, _PI) == knobs[2].copies(-_PI, _PI) == 1:
        sign = 1 if knobs[1].copies(0, _PI) == 1 else -1 if knobs[1].copies(-_PI, 0) == 1 else 0
    return General(index, outer, inner, *knobs, sign)


def _find_free_axis(index: int, samples: _Samples, turn: int, polar: int, azimuth: int) -> FreeAxis | None:
    found = samples.rotation(turn, {})
    if found is None:
        return None
    start, rate = found

    def axis_at(slot: int, p: float) -> Real:
        now = samples.rotation(turn, {slot: p})
        return start if now is None else now[0]

    # Three axes of a cone, as far apart as may be, give its pole.
    low, high, base = float(samples.low[azimuth]), float(samples.high[azimuth]), float(samples.base[azimuth])
    others = [
        axis_at(azimuth, low + (base - low + f * (high - low)) % (high - low)) for f in (0.08, 0.21, 1 / 3, 2 / 3)
    ]
    poles = [np.cross(a - start, b - start) for k, a in enumerate(others) for b in others[:k]]
    pole = max(poles, key=lambda found: float(np.linalg.norm(found)))
    if np.linalg.norm(pole) < 1e-7:
        return None
    pole = _clean(pole)

    def around(p: float) -> tuple[Real, float]:
        now = axis_at(azimuth, p)
        a, b = (axis - pole * (pole @ axis) for axis in (start, now))
        size = float(np.linalg.norm(a) * np.linalg.norm(b)) or 1.0
        return pole * float(pole @ np.cross(a, b)) / size, float(a @ b) / size

    swung = samples.sweep(azimuth, around)
    if swung is None:
        return None
    pole, pace = swung[0], _simple(swung[1])

    def away(p: float) -> tuple[Real, float]:
        now = axis_at(polar, p)
        return np.cross(start, now), float(start @ now)

    tilted = samples.sweep(polar, away)
    side = start - pole * (pole @ start)
    if tilted is None or np.linalg.norm(side) < 1e-7:
        return None
    side = side / np.linalg.norm(side)
    slope = _simple(tilted[1]) * (1.0 if tilted[0] @ np.cross(pole, side) > 0 else -1.0)
    reference = _clean(_turned(pole, -pace * base, side))
    across = _clean(np.cross(pole, reference))
    theta = samples.knob(turn, rate, samples.shift(turn, start, rate))
    lean = samples.knob(
        polar, slope, float(np.arctan2(side @ start, pole @ start)) - slope * float(samples.base[polar])
    )
    phi = samples.knob(azimuth, pace)

    def model(p: Real) -> Complex:
        frame = rotation(pole, pace * p[:, azimuth]) @ rotation(across, slope * p[:, polar] + lean.shift)
        return frame @ rotation(pole, rate * p[:, turn] + theta.shift) @ np.conj(np.swapaxes(frame, -1, -2))

    if not samples.agree(model):
        return None
    if np.sin(sum(lean.reach) / 2) < 0:
        lean, reference = lean.reversed(), -reference
    sign = 0
    if phi.copies(-_PI, _PI) == 1:
        if lean.copies(0, _PI) == 1:
            sign = 1 if theta.copies(0, _PI) == 1 else -1 if theta.copies(-_PI, 0) == 1 else 0
        elif theta.copies(-_PI, _PI) == 1:
            sign = 2 if lean.copies(0, _PI / 2) == 1 else 3 if lean.copies(_PI / 2, _PI) == 1 else 0
    return FreeAxis(index, pole, reference, theta, lean, phi, sign)


def _times(a: Real, b: Real) -> Real:
    """Multiply two quaternions."""
    return np.concatenate([[a[0] * b[0] - a[1:] @ b[1:]], a[0] * b[1:] + b[0] * a[1:] + np.cross(a[1:], b[1:])])


def _spinor(axis: Real, angle: float) -> Real:
    return np.concatenate([[np.cos(angle / 2)], np.sin(angle / 2) * axis])


def _turned(axis: Real, angle: float, vector: Real) -> Real:
    """Turn a vector about an axis by Rodrigues' formula."""
    along = axis * (axis @ vector)
    return np.asarray(along + np.cos(angle) * (vector - along) + np.sin(angle) * np.cross(axis, vector))


def _clean(axis: Real) -> Real:
    """Return the unit vector, with components at rounding level made zero."""
    axis = axis / np.linalg.norm(axis)
    axis = np.where(np.abs(axis) <= ROUNDING, 0.0, axis)
    return np.asarray(axis / np.linalg.norm(axis))


def _settled(angle: float) -> float:
    return float(settle(np.array(angle))[0])


def _simple(rate: float) -> float:
    """Return the simple fraction, or simple multiple of π, that is within rounding of `rate`."""
    for unit in (1.0, _PI):
        for denominator in range(1, 13):
            near = float(np.rint(rate / unit * denominator)) * unit / denominator
            if abs(near - rate) <= 4 * ROUNDING * abs(rate):
                return near
    return rate
