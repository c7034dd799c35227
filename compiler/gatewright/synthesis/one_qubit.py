"""One-qubit unitaries in the native one-qubit gates of any set, with the fewest pulses; batched.

What the gates do is found from their matrices (`gatewright.synthesis.recognise`). The ways to combine them: Euler
angles (Nielsen and Chuang, theorem 4.1); one or two fixed quarter turns between rotations, which cost nothing where
they are virtual (McKay et al., PRA 96, 022330 (2017)); one equatorial pulse before a rotation about the pole; two
equatorial pulses of least total angle; one general rotation. For axes and pulses at other angles:
`gatewright.synthesis.tilted`; pulses about any axis: `gatewright.synthesis.free_axis`.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Protocol, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import MatrixError, UnsupportedError
from gatewright.gates import Gate
from gatewright.linalg import haar_unitary
from gatewright.synthesis.euler import ROUNDING, axis_vector, euler_angles, fewest_turns, quaternion, rotation, settle
from gatewright.synthesis.free_axis import free_axis_ways
from gatewright.synthesis.recognise import SAME, Equatorial, Fixed, General, Kind, NativeOneQubit, Turn, recognise
from gatewright.synthesis.tilted import TwoTilted, tilted_ways, too_weak

__all__ = ["Emission", "NativeOneQubit", "OneQubitPlan", "Rows", "plan_one_qubit"]

Real: TypeAlias = NDArray[np.float64]
Complex: TypeAlias = NDArray[np.complex128]
Mask: TypeAlias = NDArray[np.bool_]

_PI = float(np.pi)
_QUARTER = _PI / 2
_BLOCK = 16384


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


@dataclass(frozen=True, eq=False, slots=True)
class OneQubitPlan:
    """How a set of native gates makes any one-qubit unitary.

    Attributes
    ----------
    gates : tuple of Gate
        The gates used.
    virtual : tuple of bool
        Which of them cost nothing.
    axis : ndarray, shape (3,), or None
        The axis n of a rotation that may be split off at the end and carried into later gates.
    summary : str
        The way chosen, in words.
    steers : bool
        Whether a rotation about n before a pulse can be taken into the pulse's own axis, and so be carried behind it
        as well: where β ≠ 0, emit α = -γ with the last factor kept and carry α + γ; no rotation about n remains.
    """

    gates: tuple[Gate, ...]
    virtual: tuple[bool, ...]
    axis: Real | None
    summary: str
    steers: bool
    _way: _Way = field(repr=False)
    _local: dict[int, int] = field(repr=False)

    def angles(self, unitaries: ArrayLike, *, tolerance: float = ROUNDING) -> Real:
        """Return what `emit` needs to make each unitary.

        Parameters
        ----------
        unitaries : array_like, shape (N, 2, 2)
        tolerance : float
            Largest distance in operator norm that each angle may be moved by where that saves a pulse.

        Returns
        -------
        ndarray, shape (N, 3)
            Where the plan has an axis n: (α, β, γ) with U ∝ R_n(α) C(β) R_n(γ), C(β) depending on β alone, and α and γ
            in (-π, π]. C(0) = 1; β is 0 where U is a rotation about n, and then γ is its whole angle and α is 0.
            Without an axis the three numbers have no meaning outside this plan.

        Raises
        ------
        MatrixError
            If a matrix is not 2 × 2 or far from unitary.
        """
        u = np.asarray(unitaries, dtype=np.complex128)
        if u.ndim != 3 or u.shape[1:] != (2, 2):
            raise MatrixError("not a batch of one-qubit matrices", required="shape (N, 2, 2)", found=f"shape {u.shape}")
        out = np.empty((len(u), 3))
        # In blocks, here and below, so that the temporaries stay in the cache.
        for rows in _blocks(len(u)):
            out[rows] = self._way.angles(u[rows], tolerance)
        return out

    def emit(self, angles: ArrayLike, trailing: ArrayLike = True) -> Emission:
        """Return the native operations for each site.

        Parameters
        ----------
        angles : array_like, shape (N, 3)
            From `angles`; α and γ may have been changed, by any amount, where the plan has an axis.
        trailing : array_like of bool, shape (N,) or ()
            Where False, the last factor R_n(α) is left out; of no effect without an axis.

        Returns
        -------
        Emission
            Rotations by zero are left out; all parameters lie in their ranges.
        """
        values = np.asarray(angles, dtype=np.float64)
        last = np.broadcast_to(np.asarray(trailing, dtype=bool), values.shape[:1])
        width = max(gate.n_parameters for gate in self.gates)
        gates, parameters = [], []
        for rows in _blocks(len(values)):
            written = Rows(len(values[rows]), width, self._local)
            self._way.emit(written, values[rows], last[rows])
            gates.append(np.stack(written.gates, axis=1))
            parameters.append(np.stack(written.parameters, axis=1))
        return Emission(np.concatenate(gates), np.concatenate(parameters))

    def pulses(self, angles: ArrayLike, trailing: ArrayLike = True) -> NDArray[np.int64]:
        """Return the number of operations that are not virtual, for each site, shape (N,)."""
        physical = np.append(~np.array(self.virtual, dtype=bool), False)
        return np.asarray(np.count_nonzero(physical[self.emit(angles, trailing).gate], axis=1))


def _blocks(n: int) -> Iterator[slice]:
    return (slice(start, start + _BLOCK) for start in range(0, max(n, 1), _BLOCK))


class Rows:
    """Operations being written, one column of all sites at a time."""

    def __init__(self, n: int, width: int, local: dict[int, int]) -> None:
        self.n = n
        self.width = width
        self.local = local
        self.gates: list[NDArray[np.int16]] = []
        self.parameters: list[Real] = []

    def add(self, index: int, where: Mask, values: dict[int, Real | float]) -> None:
        """Write a column: a gate where wanted."""
        parameters = np.zeros((self.n, self.width))
        for slot, value in values.items():
            parameters[:, slot] = np.where(where, value, 0.0)
        self.gates.append(np.where(where, self.local[index], -1).astype(np.int16))
        self.parameters.append(parameters)

    def fixed(self, pulse: Fixed, where: Mask) -> None:
        """Write a fixed pulse."""
        self.add(pulse.index, where, dict(enumerate(pulse.parameters)))

    def turn(self, turn: Turn, copies: int, angle: Real, where: Mask | bool = True) -> None:
        """Rotate by `angle` in (-π, π], by up to `copies` equal pulses."""
        value, count = turn.knob.split(angle, copies)
        for k in range(copies):
            self.add(turn.index, (angle != 0) & (count > k) & where, {turn.knob.slot: value})

    def equatorial(self, gate: Equatorial, theta: Real, phi: Real) -> None:
        """Rotate by `theta` in [-π, π] about the equatorial axis at `phi`."""
        back = (theta < 0) if gate.sign > 0 else (theta > 0)
        azimuth = settle(phi + _PI * back)[0]
        place, fits = gate.azimuth.split(azimuth)
        if not fits.all():
            other, _ = gate.azimuth.split(settle(azimuth + _PI)[0])
            place, back = np.where(fits, place, other), back ^ (fits == 0)
        value, count = gate.turn.split(np.where(back, -theta, theta), gate.copies)
        for k in range(gate.copies):
            self.add(gate.index, (theta != 0) & (count > k), {gate.turn.slot: value, gate.azimuth.slot: place})

    def general(self, gate: General, alpha: Real, beta: Real, gamma: Real, where: Mask) -> None:
        """Write a general rotation, `beta` in [-π, π]."""
        back = (beta < 0) if gate.sign > 0 else (beta > 0)
        a, _ = gate.left.split(settle(alpha + _PI * back)[0])
        b, _ = gate.middle.split(np.where(back, -beta, beta))
        c, _ = gate.right.split(settle(gamma - _PI * back)[0])
        self.add(gate.index, where, {gate.left.slot: a, gate.middle.slot: b, gate.right.slot: c})


# --- Ways to combine gates --------------------------------------------------------------------------------------


class _Way(Protocol):
    @property
    def summary(self) -> str: ...

    @property
    def steers(self) -> bool: ...

    @property
    def members(self) -> tuple[Kind, ...]: ...

    @property
    def frame(self) -> tuple[Real, Real]:
        """Two orthogonal axes that the way singles out."""

    def angles(self, u: Complex, tolerance: float) -> Real: ...

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None: ...


def _euler(u: Complex, frame: tuple[Real, Real], tolerance: float) -> Real:
    return euler_angles(u, outer=frame[0], inner=frame[1], tolerance=tolerance).angles


def _gathered(angles: Real, trailing: Mask) -> tuple[Real, Real, Real]:
    """Return α, β, γ in (-π, π] with as much as possible in γ (β = 0) or in α (β = π), and α = 0 where not wanted."""
    beta = angles[:, 1]
    alpha = np.where(trailing, angles[:, 0], 0.0)
    gamma = angles[:, 2]
    none, half = beta == 0, (np.abs(beta) == _PI) & trailing
    gamma, alpha = gamma + np.where(none, alpha, 0.0), alpha - np.where(half, gamma, 0.0)
    alpha[none] = 0.0
    return settle(alpha)[0], beta, settle(np.where(half, 0.0, gamma))[0]


@dataclass(frozen=True, eq=False, slots=True)
class _TwoAxes:
    """Rotations about two orthogonal axes: C(β) = R_m(β)."""

    outer: Turn
    inner: Turn
    outer_copies: int
    inner_copies: int
    both_ways: bool
    summary = "Euler angles about two axes"
    steers = False

    @property
    def members(self) -> tuple[Kind, ...]:
        return self.outer, self.inner

    @property
    def frame(self) -> tuple[Real, Real]:
        return self.outer.axis, self.inner.axis

    def angles(self, u: Complex, tolerance: float) -> Real:
        angles = _euler(u, self.frame, tolerance)
        half = angles[:, 1] == _PI
        angles[half, 0], angles[half, 2] = settle(-angles[half, 2])[0], 0.0
        return fewest_turns(angles)[0] if self.both_ways else angles

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        alpha, beta, gamma = _gathered(angles, trailing)
        if self.both_ways:
            full = np.stack([alpha, beta, gamma], axis=1)
            full[trailing] = fewest_turns(full[trailing])[0]
            alpha, beta, gamma = full.T
        rows.turn(self.outer, self.outer_copies, gamma)
        rows.turn(self.inner, self.inner_copies, settle(beta)[0])
        rows.turn(self.outer, self.outer_copies, alpha)


@dataclass(frozen=True, eq=False, slots=True)
class _Pulsed:
    """Rotations about n and fixed pulses: G = R_m(π/2) R_n(g), and where there is one H = R_m(π) R_n(h).

    C(π/2) = G, C(π) = H or else G R_n(-g) G, and C(β) = G R_n(π - β - g) G otherwise: the factors R_n that
    R_m(β) = R_n(-π/2) R_m(π/2) R_n(π - β) R_m(π/2) R_n(-π/2) has besides are taken into α and γ.
    """

    outer: Turn
    copies: int
    inner: Real
    quarter: Fixed
    g: float
    half: Fixed | None = None
    h: float = 0.0
    steers = False

    @property
    def summary(self) -> str:
        return "rotations about one axis and fixed quarter turns" + (" and half turns" if self.half else "")

    @property
    def members(self) -> tuple[Kind, ...]:
        return (self.outer, self.quarter, *([self.half] if self.half else []))

    @property
    def frame(self) -> tuple[Real, Real]:
        return self.outer.axis, self.inner

    def angles(self, u: Complex, tolerance: float) -> Real:
        angles = _euler(u, self.frame, tolerance)
        beta, gamma = angles[:, 1], angles[:, 2]
        quarter, half = beta == _QUARTER, beta == _PI
        two = (beta != 0) & ~quarter & ~half
        angles[half, 0] = settle((self.h if self.half else self.g) - gamma[half])[0]
        angles[half, 2] = 0.0
        angles[quarter, 2] = settle(gamma[quarter] - self.g)[0]
        generic = angles[two]
        generic[:, 0] = settle(generic[:, 0] - _QUARTER)[0]
        generic[:, 2] = settle(generic[:, 2] - _QUARTER - self.g)[0]
        angles[two] = fewest_turns(generic)[0]
        return angles

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        alpha, beta, gamma = _gathered(angles, trailing)
        half = np.abs(beta) == _PI
        two = (beta != 0) & (beta != _QUARTER)
        rows.turn(self.outer, self.copies, gamma)
        if self.half is not None:
            two &= ~half
            rows.fixed(self.half, half)
        rows.fixed(self.quarter, two | (beta == _QUARTER))
        rows.turn(self.outer, self.copies, settle(_PI - beta - self.g)[0], two)
        rows.fixed(self.quarter, two)
        rows.turn(self.outer, self.copies, alpha)


@dataclass(frozen=True, eq=False, slots=True)
class _Steered:
    """One equatorial pulse and a rotation about its pole: C(β) = R_m(β)."""

    outer: Turn
    copies: int
    pulse: Equatorial
    summary = "one equatorial pulse and a rotation about the pole"
    steers = True

    @property
    def members(self) -> tuple[Kind, ...]:
        return self.outer, self.pulse

    @property
    def frame(self) -> tuple[Real, Real]:
        return self.outer.axis, self.pulse.reference

    def angles(self, u: Complex, tolerance: float) -> Real:
        angles = _euler(u, self.frame, tolerance)
        half = angles[:, 1] == _PI
        angles[half, 0], angles[half, 2] = settle(-angles[half, 2])[0], 0.0
        return fewest_turns(angles)[0]

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        beta, gamma = angles[:, 1], settle(angles[:, 2])[0]
        alpha = settle(angles[:, 0])[0]
        # R_n(α) R_m(β) R_n(γ) = R_n(α + γ) · [R_n(-γ) R_m(β) R_n(γ)], and for β = π also [R_n(φ) R_m(β) R_n(-φ)] with
        # φ = (α - γ)/2.
        half = np.abs(beta) == _PI
        after = np.where(half | ~trailing | (beta == 0), 0.0, alpha + gamma)
        before = np.where(beta == 0, gamma + np.where(trailing, alpha, 0.0), np.where(trailing, 0.0, gamma))
        phi = np.where(trailing, np.where(half, (alpha - gamma) / 2, -gamma), 0.0)
        rows.turn(self.outer, self.copies, settle(before)[0])
        rows.equatorial(self.pulse, beta, phi)
        rows.turn(self.outer, self.copies, settle(after)[0])


@dataclass(frozen=True, eq=False, slots=True)
class _One:
    """One general rotation; or, where that is enough and in the set, a rotation about its outer axis: C(β) = R_m(β)."""

    pulse: General
    outer: Turn | None = None
    copies: int = 0
    steers = False

    @property
    def summary(self) -> str:
        return "one general rotation" + (", or one about its outer axis" if self.outer else "")

    @property
    def members(self) -> tuple[Kind, ...]:
        return (self.pulse, *([self.outer] if self.outer else []))

    @property
    def frame(self) -> tuple[Real, Real]:
        return self.pulse.outer, self.pulse.inner

    def angles(self, u: Complex, tolerance: float) -> Real:
        return _euler(u, self.frame, tolerance)

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        if self.outer is None:
            rows.general(self.pulse, angles[:, 0], angles[:, 1], angles[:, 2], np.count_nonzero(angles, axis=1) > 0)
            return
        alpha, beta, gamma = _gathered(angles, trailing)
        rows.turn(self.outer, self.copies, gamma, beta == 0)
        rows.general(self.pulse, alpha, beta, gamma, beta != 0)


@dataclass(frozen=True, eq=False, slots=True)
class _TwoEquatorial:
    """Equatorial pulses alone: two by the same angle θ at azimuths φ₁ then φ₂, or one by 2θ where φ₁ = φ₂.

    In the Euler angles of the pole n and the reference m, U = R_n(α) R_m(β) R_n(γ) has the quaternion
    (c cos σ, c sin σ, s cos δ, s sin δ), c = cos β/2, s = sin β/2, σ = (α + γ)/2, δ = (α - γ)/2. Two pulses by θ at
    δ ± χ/2 have (cos² θ/2 - sin² θ/2 cos χ, ± sin² θ/2 sin χ, sin θ cos χ/2 cos δ, sin θ cos χ/2 sin δ). Hence, for
    cos σ ≥ 0, tan χ/2 = |c sin σ| / (1 - c cos σ) and tan θ/2 = hypot(1 - c cos σ, c sin σ) / s. No two equatorial
    pulses have a smaller total angle: with pulses by a and b, cos (a+b)/2 = c cos σ - |c sin σ| tan χ/2 falls with χ,
    and cos (a-b)/2 = c cos σ + |c sin σ| cot χ/2 ≤ 1 holds χ up; equality is a = b.
    """

    pulse: Equatorial
    summary = "two equatorial pulses at most"
    steers = False

    @property
    def members(self) -> tuple[Kind, ...]:
        return (self.pulse,)

    @property
    def frame(self) -> tuple[Real, Real]:
        return self.pulse.pole, self.pulse.reference

    def angles(self, u: Complex, tolerance: float) -> Real:
        alpha, beta, gamma = _euler(u, self.frame, tolerance).T
        half = beta == _PI
        total, odd = settle(alpha + gamma, tolerance)
        total, tilt = np.where(half, 0.0, total), settle((alpha - gamma) / 2 + _PI * odd)[0]
        cosine, sine = np.where(half, 0.0, np.cos(beta / 2)), np.sin(beta / 2)
        along, across = cosine * np.cos(total / 2), cosine * np.sin(total / 2)
        one = np.abs(across) <= tolerance
        # 1 - c cos σ, without cancellation.
        less = (across * across + sine * sine) / (1 + along)
        theta = 2 * np.arctan2(np.hypot(less, across), sine)
        spread = np.arctan2(np.abs(across), less) * np.sign(across)
        theta = np.where(one, beta / 2, settle(theta)[0])
        spread = np.where(one, 0.0, spread)
        return np.stack([theta, settle(tilt + spread)[0], settle(tilt - spread)[0]], axis=1)

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        theta, first, second = angles.T
        one = first == second
        rows.equatorial(self.pulse, np.where(one, 2 * theta, theta), first)
        rows.equatorial(self.pulse, np.where(one, 0.0, theta), second)


# --- The choice -------------------------------------------------------------------------------------------------


def plan_one_qubit(gates: Sequence[NativeOneQubit], *, passing: Sequence[ArrayLike] = ()) -> OneQubitPlan:
    """Choose how to make any one-qubit unitary from native gates.

    Every way that these gates allow is tried on the same unitaries: Haar-random ones, and the Clifford groups of the
    gates' own axes. The one with the fewest pulses is taken; then an axis that passes through entanglers; then the
    least duration (or, where a duration is not known, the least total angle); then the fewest operations.

    Parameters
    ----------
    gates : sequence of NativeOneQubit
    passing : sequence of array_like, shape (3,)
        Axes whose rotations may be moved behind an entangler.

    Returns
    -------
    OneQubitPlan

    Raises
    ------
    UnsupportedError
        If none of the ways is possible with these gates; it says what they do.
    GateSetError
        If a gate is not a one-qubit gate with a usable range for each parameter.

    Examples
    --------
    >>> from types import SimpleNamespace
    >>> from gatewright.gates import GATES
    >>> rz = SimpleNamespace(gate=GATES["rz"], ranges=[(-np.pi, np.pi)], virtual=True, duration_ns=None)
    >>> sx = SimpleNamespace(gate=GATES["sx"], ranges=[], virtual=False, duration_ns=30)
    >>> plan = plan_one_qubit([rz, sx])
    >>> plan.summary
    'rotations about one axis and fixed quarter turns'
    >>> plan.pulses(plan.angles([GATES["s"].matrix(), GATES["h"].matrix(), GATES["x"].matrix()])).tolist()
    [0, 1, 2]
    """
    kinds = [recognise(index, native) for index, native in enumerate(gates)]
    ways = [*_ways(kinds), *free_axis_ways(kinds), *tilted_ways(kinds, [native.virtual for native in gates])]
    plans = [_planned(way, gates) for way in ways]
    if not plans:
        found = "; ".join(f"'{native.gate.name}' {kind.describe()}" for native, kind in zip(gates, kinds, strict=True))
        raise UnsupportedError(
            "cannot yet make every one-qubit unitary from these gates",
            required="a general rotation; or equatorial rotations; or rotations by any angle about an axis, with "
            "rotations about another axis or with a fixed gate that tilts the axis",
            found=found or "no one-qubit gate",
            hint=too_weak(kinds) or "an angle may be made of up to 64 equal pulses",
        )
    samples = _samples([plan._way.frame for plan in plans])
    timed = all(native.virtual or native.duration_ns is not None for native in gates)
    costs = [_cost(plan, gates, samples, passing, timed=timed) for plan in plans]
    return plans[costs.index(min(costs))]


def _ways(kinds: Sequence[Kind]) -> Iterator[_Way]:
    fixed = [kind for kind in kinds if isinstance(kind, Fixed)]
    turns = [kind for kind in kinds if isinstance(kind, Turn)]
    equatorials = [kind for kind in kinds if isinstance(kind, Equatorial) and kind.copies]
    generals = [kind for kind in kinds if isinstance(kind, General) and kind.sign]
    for outer in turns:
        copies = outer.knob.copies(-_PI, _PI)
        if not copies:
            continue
        for turn in turns:
            for inner in (turn, turn.reversed()):
                all_round, one_way = inner.knob.copies(-_PI, _PI), inner.knob.copies(0, _PI)
                if one_way and abs(inner.axis @ outer.axis) <= SAME:
                    yield _TwoAxes(outer, inner, copies, all_round or one_way, all_round > 0)
        yield from _pulsed(outer, copies, fixed)
        for equatorial in equatorials:
            for swung in (equatorial, equatorial.reversed()):
                if _same(swung.pole, outer.axis):
                    yield _Steered(outer, copies, swung)
        for general in generals:
            for free in (general, general.reversed()):
                if _same(free.outer, outer.axis):
                    yield _One(free, outer, copies)
    yield from (_TwoEquatorial(equatorial) for equatorial in equatorials)
    yield from (_One(general) for general in generals)


def _same(a: Real, b: Real) -> bool:
    return float(np.abs(a - b).max()) <= SAME


def _pulsed(outer: Turn, copies: int, fixed: Sequence[Fixed]) -> Iterator[_Way]:
    n = outer.axis
    across = np.eye(3)[int(np.argmin(np.abs(n)))]
    across = across - n * (n @ across)
    angles = [euler_angles(pulse.unitary, outer=n, inner=across, tolerance=SAME).angles.tolist() for pulse in fixed]
    halves = [(pulse, gamma) for pulse, (_, beta, gamma) in zip(fixed, angles, strict=True) if beta == _PI]
    for quarter, (alpha, beta, gamma) in zip(fixed, angles, strict=True):
        if beta != _QUARTER:
            continue
        # R_n(α) R_across(π/2) R_n(γ) = R_m(π/2) R_n(α + γ) with the inner axis m = R_n(α) across.
        m = across / np.linalg.norm(across)
        m = np.cos(alpha) * m + np.sin(alpha) * np.cross(n, m)
        g = float(settle(alpha + gamma)[0])
        yield _Pulsed(outer, copies, m, quarter, g)
        for half, turned in halves:
            # R_across(π) R_n(γ) = R_m(π) R_n(γ + 2α).
            yield _Pulsed(outer, copies, m, quarter, g, half, float(settle(turned + 2 * alpha)[0]))


def _planned(way: _Way, gates: Sequence[NativeOneQubit]) -> OneQubitPlan:
    used = sorted(kind.index for kind in way.members)
    outer = any(isinstance(kind, Turn) for kind in way.members) and not isinstance(way, TwoTilted)
    return OneQubitPlan(
        gates=tuple(gates[index].gate for index in used),
        virtual=tuple(gates[index].virtual for index in used),
        axis=way.frame[0] if outer else None,
        summary=way.summary,
        steers=way.steers,
        _way=way,
        _local={index: k for k, index in enumerate(used)},
    )


def _samples(frames: Sequence[tuple[Real, Real]]) -> tuple[Complex, Complex]:
    """Return Haar-random unitaries, and the Clifford groups of the frames."""
    distinct = {tuple(np.round(np.concatenate(frame), 9)): frame for frame in frames}
    a, b, c = (_QUARTER * np.ravel(k) for k in np.meshgrid(np.arange(4), np.arange(3), np.arange(4)))
    cliffords = [rotation(n, a) @ rotation(m, b) @ rotation(n, c) for n, m in list(distinct.values())[:6]]
    return haar_unitary(2, 32, rng=0), np.concatenate(cliffords)


def _cost(
    plan: OneQubitPlan,
    gates: Sequence[NativeOneQubit],
    samples: tuple[Complex, Complex],
    passing: Sequence[ArrayLike],
    *,
    timed: bool,
) -> tuple[float, ...]:
    means = []
    for unitaries in samples:
        emission = plan.emit(plan.angles(unitaries))
        counts = np.zeros(4)
        for index, local in plan._local.items():
            site, column = np.nonzero(emission.gate == local)
            native = gates[index]
            counts[3] += len(site)
            if native.virtual:
                continue
            counts[0] += len(site)
            counts[1] += len(site) * (native.duration_ns or 0.0) if timed else 0.0
            q, _ = quaternion(native.gate.matrix(emission.parameters[site, column, : native.gate.n_parameters]))
            counts[2] += np.sum(2 * np.arctan2(np.linalg.norm(q[1:], axis=0), np.abs(q[0])))
        means.append(np.round(counts / len(unitaries), 6))
    haar, special = means
    axis = plan.axis
    passes = axis is not None and any(abs(float(axis @ axis_vector(n))) >= 1 - 1e-9 for n in passing)
    return (haar[0], special[0], 0.0 if passes else 1.0, haar[1], special[1], haar[2], haar[3], special[3])
