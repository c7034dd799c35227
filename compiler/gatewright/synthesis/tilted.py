"""Ways to combine one-qubit gates whose axes are at any angle to each other, with the fewest pulses.

Two axes at an angle ψ ≤ π/2 make every rotation in ⌈π/ψ⌉ + 1 factors and some in no fewer (Lowenthal, Canad. J. Math.
23, 364 (1971)); how many one given rotation needs: Hamada, R. Soc. Open Sci. 1, 140145 (2014). Pulses of fixed or
limited tilt between free rotations about one axis: chains of arcs (`gatewright.synthesis.chains`). The fewest pulses
come first, then the least total angle.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import combinations_with_replacement
from itertools import product as every
from math import ceil, comb
from typing import TYPE_CHECKING, TypeAlias

import numpy as np
from numpy.typing import NDArray

from gatewright.synthesis.chains import chain_reach, corner, polar, product, stations, turned, turning
from gatewright.synthesis.euler import ROUNDING, euler_angles, quaternion, settle
from gatewright.synthesis.recognise import SAME, Fixed, Kind, Turn

if TYPE_CHECKING:
    from gatewright.synthesis.one_qubit import Rows

__all__ = ["MOST_PULSES", "TwoTilted", "least_factors", "tilted_ways", "too_weak"]

Real: TypeAlias = NDArray[np.float64]
Complex: TypeAlias = NDArray[np.complex128]
Mask: TypeAlias = NDArray[np.bool_]

#: More pulses than this for one rotation are not offered.
MOST_PULSES = 64
_PI = float(np.pi)
_N = np.array([1.0, 0.0, 0.0])
# Multisets of pulses looked at for each length.
_MOST_WORDS = 4096
# Chains tried at once, so that temporaries stay small.
_AT_ONCE = 1 << 17
# Sums of a few angles are this exact.
_FUZZ = 8 * ROUNDING


def least_factors(angle: float) -> int:
    """Return how many rotations about two axes at this angle, 0 < angle ≤ π/2, suffice for all: ⌈π/angle⌉ + 1.

    References
    ----------
    Lowenthal, Canad. J. Math. 23, 364 (1971).

    Examples
    --------
    >>> [least_factors(np.pi / k) for k in (2, 2.5, 3, 3.5, 4)]
    [3, 4, 4, 5, 5]
    """
    return ceil(_PI / angle - 1e-9) + 1


def _frame(n: Real, toward: Real) -> tuple[Real, Real]:
    """Return the axis orthogonal to n on the side of `toward`, and the matrix of the frame (n, x, n × x)."""
    x = toward - n * (n @ toward)
    x = x / np.linalg.norm(x)
    x = x - n * (n @ x)
    x = x / np.linalg.norm(x)
    return x, np.array([n, x, np.cross(n, x)])


def _angle(a: Real, b: Real) -> float:
    return float(np.arctan2(np.linalg.norm(np.cross(a, b)), a @ b))


def _in_frame(q: Real, frame: Real) -> Real:
    return np.concatenate([q[:1], np.einsum("ij,j...->i...", frame, q[1:])])


# --- Pulses between free rotations about one axis ------------------------------------------------------------------


@dataclass(frozen=True, eq=False, slots=True)
class _Middle:
    """The inner part C(β) of a batch: pulses and the rotations about n after each; and its α, γ."""

    word: NDArray[np.int64]
    strength: Real
    after: Real
    alpha: Real
    gamma: Real


def _joined(pulses: Real, links: Real, beta: Real) -> tuple[Real, Real, Real]:
    """Return the rotations about n after each pulse but the last, and α, γ of the product.

    Parameters
    ----------
    pulses : ndarray, shape (4, p, N)
        Quaternions in the frame, in time order.
    links : ndarray, shape (p, N)
        Their tilts.
    beta : ndarray, shape (N,)
    """
    way = stations(links, beta)
    total = pulses[:, 0]
    after = np.zeros(links.shape)
    for j in range(1, len(links)):
        alpha, now, _ = polar(total)
        _, _, g = polar(pulses[:, j])
        after[j - 1] = _PI - corner(now, links[j], way[j]) - alpha - g
        total = product(pulses[:, j], product(turning(_N, after[j - 1]), total))
    alpha, _, gamma = polar(total)
    return settle(after)[0], alpha, gamma


class _Between:
    """Shared by the ways that write U = R_n(α) C(β) R_n(γ), C(β) of pulses with rotations about n between them."""

    __slots__ = ()
    outer: Turn
    copies: int
    inner: Real
    steers = False

    @property
    def frame(self) -> tuple[Real, Real]:
        return self.outer.axis, self.inner

    def _snapped(self, beta: Real, tolerance: float) -> Real:
        raise NotImplementedError

    def _middle(self, beta: Real) -> _Middle:
        raise NotImplementedError

    def _pulse(self, rows: Rows, middle: _Middle, column: int) -> None:
        raise NotImplementedError

    def angles(self, u: Complex, tolerance: float) -> Real:
        angles = euler_angles(u, outer=self.frame[0], inner=self.frame[1], tolerance=tolerance).angles
        beta = angles[:, 1] = self._snapped(angles[:, 1], tolerance)
        some = beta != 0
        middle = self._middle(beta[some])
        angles[some, 0] -= middle.alpha
        angles[some, 2] -= middle.gamma
        half = beta == _PI
        angles[half, 0] -= angles[half, 2]
        angles[half, 2] = 0.0
        angles[:, 0], angles[:, 2] = settle(angles[:, 0])[0], settle(angles[:, 2])[0]
        return angles

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        alpha = np.where(trailing, angles[:, 0], 0.0)
        beta, gamma = angles[:, 1], angles[:, 2]
        none, half = beta == 0, (beta == _PI) & trailing
        gamma = gamma + np.where(none, alpha, 0.0)
        alpha = np.where(none, 0.0, alpha - np.where(half, gamma, 0.0))
        gamma = np.where(half, 0.0, gamma)
        middle = self._middle(beta)
        rows.turn(self.outer, self.copies, settle(gamma)[0])
        for column in range(middle.after.shape[0]):
            self._pulse(rows, middle, column)
            rows.turn(self.outer, self.copies, middle.after[column])
        rows.turn(self.outer, self.copies, settle(alpha)[0])


@dataclass(frozen=True, eq=False, slots=True)
class _FixedPulses(_Between):
    """Rotations about n and fixed pulses of any tilts; of equally many pulses those of the least total angle."""

    outer: Turn
    copies: int
    inner: Real
    pulses: tuple[Fixed, ...]
    words: tuple[tuple[int, ...], ...]
    reach: Real
    quaternions: Real
    links: Real
    steers = False

    @property
    def summary(self) -> str:
        return f"rotations about one axis and up to {max(map(len, self.words))} fixed pulses"

    @property
    def members(self) -> tuple[Kind, ...]:
        return (self.outer, *(self.pulses[k] for k in sorted({k for word in self.words for k in word})))

    def _word(self, beta: Real, tolerance: float) -> NDArray[np.int64]:
        inside = (beta >= self.reach[:, :1] - 2 * tolerance) & (beta <= self.reach[:, 1:] + 2 * tolerance)
        return np.asarray(np.where(inside.any(axis=0), np.argmax(inside, axis=0), len(self.reach) - 1))

    def _snapped(self, beta: Real, tolerance: float) -> Real:
        low, high = self.reach[self._word(beta, max(tolerance, ROUNDING))].T
        return np.where(beta == 0, 0.0, np.clip(beta, low, high))

    def _middle(self, beta: Real) -> _Middle:
        word = self._word(beta, ROUNDING)
        longest = max(map(len, self.words))
        after, alpha, gamma = np.zeros((longest, len(beta))), np.zeros(len(beta)), np.zeros(len(beta))
        for k in np.unique(word[beta != 0]).tolist():
            rows = np.flatnonzero((word == k) & (beta != 0))
            letters = list(self.words[k])
            pulses = np.repeat(self.quaternions[:, letters, None], len(rows), axis=2)
            links = np.repeat(self.links[letters, None], len(rows), axis=1)
            after[: len(letters), rows], alpha[rows], gamma[rows] = _joined(pulses, links, beta[rows])
        return _Middle(np.where(beta == 0, -1, word), np.zeros(0), after, alpha, gamma)

    def _pulse(self, rows: Rows, middle: _Middle, column: int) -> None:
        for k, pulse in enumerate(self.pulses):
            having = [i for i, word in enumerate(self.words) if column < len(word) and word[column] == k]
            if having:
                rows.fixed(pulse, np.isin(middle.word, having))


@dataclass(frozen=True, eq=False, slots=True)
class _LimitedPulses(_Between):
    """Rotations about n and equal rotations by θ about another axis, tilted by ψ from n and perhaps limited in angle.

    Each pulse tilts n by δ, sin δ/2 = sin ψ · sin θ/2. As δ is concave in θ, pulses of equal angles have the least
    total angle among equally many.
    """

    outer: Turn
    copies: int
    inner: Real
    turn: Turn
    tilt: float
    axis: Real
    least: float
    most: float
    sign: int
    steers = False

    @property
    def summary(self) -> str:
        return f"rotations about one axis and up to {self._count(np.array([_PI]), ROUNDING)[0]} about another"

    @property
    def members(self) -> tuple[Kind, ...]:
        return self.outer, self.turn

    def _count(self, beta: Real, tolerance: float) -> NDArray[np.int64]:
        count = np.maximum(1, np.ceil((beta - 2 * tolerance) / self.most)).astype(np.int64)
        return np.where((count == 1) & (beta < self.least - 2 * tolerance), 2, count)

    def _snapped(self, beta: Real, tolerance: float) -> Real:
        count = self._count(beta, max(tolerance, ROUNDING))
        low = np.where(count == 1, self.least, 0.0)
        return np.where(beta == 0, 0.0, np.clip(beta, low, np.minimum(count * self.most, _PI)))

    def _middle(self, beta: Real) -> _Middle:
        count = np.where(beta == 0, 0, self._count(beta, ROUNDING))
        link = np.clip(beta / np.maximum(count, 1), self.least, self.most)
        cosine = np.sqrt(np.maximum(np.sin(self.tilt - link / 2) * np.sin(self.tilt + link / 2), 0.0))
        theta = self.sign * 2 * np.arctan2(np.sin(link / 2), cosine)
        longest = int(count.max(initial=1))
        after, alpha, gamma = np.zeros((longest, len(beta))), np.zeros(len(beta)), np.zeros(len(beta))
        for k in np.unique(count[beta != 0]).tolist():
            rows = np.flatnonzero(count == k)
            pulses = np.repeat(turning(self.axis, theta[rows])[:, None], k, axis=1)
            links = np.repeat(polar(pulses[:, 0])[1][None], k, axis=0)
            after[:k, rows], alpha[rows], gamma[rows] = _joined(pulses, links, beta[rows])
        return _Middle(count, theta, after, alpha, gamma)

    def _pulse(self, rows: Rows, middle: _Middle, column: int) -> None:
        rows.turn(self.turn, 1, middle.strength, middle.word > column)


# --- Two axes, both of them pulses ---------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False, slots=True)
class TwoTilted:
    """Rotations about two axes at an angle ψ < π/2, n and m, alternating, in either order.

    Of k rotations the first and the last are free; the others turn the corners of a chain of k - 1 arcs of length ψ,
    from the axis of the last to the image under U of the axis of the first. Among the fewest, the total angle is the
    least for up to three; with four, the one free distance is searched to about 1e-3; with more, all free distances
    are taken at the same fraction of their intervals, which is searched.
    """

    outer: Turn
    inner_turn: Turn
    copies: tuple[int, int]
    tilt: float
    inner: Real
    _axes: Real = field(repr=False)
    _matrix: Real = field(repr=False)
    steers = False

    @property
    def summary(self) -> str:
        """What it does, in words."""
        return f"up to {least_factors(self.tilt)} rotations about two axes"

    @property
    def members(self) -> tuple[Kind, ...]:
        """The gates used."""
        return self.outer, self.inner_turn

    @property
    def frame(self) -> tuple[Real, Real]:
        """The axes n and x."""
        return self.outer.axis, self.inner

    def angles(self, u: Complex, tolerance: float) -> Real:
        """Return Euler angles of what will be made, in the frame (n, x)."""
        q = _in_frame(quaternion(u)[0], self._matrix)
        made = self._solved(q, max(tolerance, ROUNDING))
        total = np.zeros_like(q)
        total[0] = 1.0
        for position in made:
            for axis, angle in zip(self._axes, position, strict=True):
                total = product(turning(axis, angle), total)
        return np.stack(polar(total), axis=1)

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        """Write the rotations."""
        alpha, beta, gamma = angles.T
        x = np.array([0.0, 1.0, 0.0])
        q = product(turning(_N, alpha), product(turning(x, beta), turning(_N, gamma)))
        for on_n, on_m in self._solved(q, _FUZZ):
            rows.turn(self.outer, self.copies[0], on_n)
            rows.turn(self.inner_turn, self.copies[1], on_m)

    def _solved(self, q: Real, tolerance: float) -> Real:
        """Return angles, shape (positions, 2, N): in time order, about n or about m; zero where not used."""
        most = least_factors(self.tilt)
        n_sites = q.shape[1]
        n, m = self._axes
        about = [np.linalg.norm(np.cross(q[1:], axis[:, None], axis=0), axis=0) for axis in (n, m)]
        along = [np.hypot(q[0], axis @ q[1:]) for axis in (n, m)]
        same = [2 * np.arctan2(about[k], along[k]) for k in (0, 1)]
        crossed = []
        for last, first in ((n, m), (m, n)):
            image = turned(q, first)
            apart = np.linalg.norm(np.cross(last[:, None], image, axis=0), axis=0)
            crossed.append(np.arctan2(apart, last @ image))
        out = np.zeros((most, 2, n_sites))
        open_ = 2 * np.arctan2(np.linalg.norm(q[1:], axis=0), np.abs(q[0])) > 2 * tolerance
        for k in range(1, most + 1):
            low, high = chain_reach([self.tilt] * (k - 1))
            ends = same if k % 2 else crossed
            fits = [open_ & (end >= low - 2 * tolerance) & (end <= high + 2 * tolerance) for end in ends]
            if k == most:
                fits[0] |= open_ & ~fits[1]
            best = np.full(n_sites, np.inf)
            for last in (0, 1):
                at = np.flatnonzero(fits[last])
                if len(at):
                    angles, total = self._shortest(q[:, at], k, last, np.clip(ends[last][at], low, high))
                    better = total < best[at] - 1e-12
                    at, angles = at[better], angles[:, better]
                    best[at] = total[better]
                    out[:, :, at] = 0.0
                    for j in range(k):
                        out[j, (last + k - 1 - j) % 2, at] = angles[j]
            open_ &= ~(fits[0] | fits[1])
        return out

    def _shortest(self, q: Real, k: int, last: int, beta: Real) -> tuple[Real, Real]:
        """Return the k angles, shape (k, N), that add up to the least, and their sum."""
        inner = max(k - 2, 0)
        signs = np.array(list(every((1, -1), repeat=inner)) if inner <= 3 else [[1] * inner, [-1] * inner])
        fractions = np.linspace(0, 1, 17) if k > 3 else np.array([0.5])
        choice = np.array(list(every(range(len(signs)), fractions)))
        size, blocks = max(1, _AT_ONCE // len(choice)), []
        for start in range(0, q.shape[1], size):
            rows = slice(start, start + size)
            blocks.append(self._best_of(q[:, rows], k, last, beta[rows], signs, choice))
        return np.concatenate([block[0] for block in blocks], axis=1), np.concatenate([block[1] for block in blocks])

    def _best_of(self, q: Real, k: int, last: int, beta: Real, signs: Real, choice: Real) -> tuple[Real, Real]:
        def tried(fraction: Real, sign: Real) -> tuple[Real, Real, Real]:
            """Return the best of `fraction`, shape (c, N), with signs of shape (inner, c, N)."""
            c = len(fraction)
            angles = self._chain(
                np.tile(q, c), k, last, np.tile(beta, c), fraction.ravel(), sign.reshape(len(sign), fraction.size)
            )
            totals = np.abs(angles).sum(axis=0).reshape(fraction.shape)
            # Equal totals must not be told apart by rounding.
            first = np.argmax(totals <= totals.min(axis=0) + 1e-9, axis=0)
            at = first * q.shape[1] + np.arange(q.shape[1])
            return angles[:, at], fraction.ravel()[at], first.astype(float)

        shape = (len(choice), q.shape[1])
        every_sign = signs[choice[:, 0].astype(int)].T
        spread = np.broadcast_to(every_sign[:, :, None], (len(every_sign), *shape))
        angles, at, first = tried(np.broadcast_to(choice[:, 1:], shape).copy(), spread)
        if k > 3:
            sign = np.repeat(every_sign[:, None, first.astype(int)], 3, axis=1)
            for step in 1 / 32 / 2.0 ** np.arange(8):
                angles, at, _ = tried(np.stack([at, np.maximum(at - step, 0.0), np.minimum(at + step, 1.0)]), sign)
        return angles, np.abs(angles).sum(axis=0)

    def _chain(self, q: Real, k: int, last: int, beta: Real, fraction: Real, sign: Real) -> Real:
        axes = [self._axes[(last + k - 1 - j) % 2] for j in range(k)]
        n_sites = q.shape[1]
        out = np.zeros((k, n_sites))
        total = np.zeros_like(q)
        total[0] = 1.0
        if k >= 3:
            way = stations(np.full((k - 1, n_sites), self.tilt), beta, fraction)
            for j in range(1, k - 1):
                point = turned(total, axes[0])
                now = _azimuth(axes[j], axes[j + 1], point)
                out[j] = settle(sign[j - 1] * corner(way[j - 1], self.tilt, way[j]) - now)[0]
                total = product(turning(axes[j], out[j]), total)
        back = total * np.array([1.0, -1.0, -1.0, -1.0])[:, None]
        if k >= 2:
            other = axes[-2]
            here, there = (
                _azimuth(axes[-1], other, turned(total, axes[0])),
                _azimuth(axes[-1], other, turned(q, axes[0])),
            )
            out[-1] = settle(there - here)[0]
        rest = product(back, product(turning(axes[-1], -out[-1]), q)) if k >= 2 else q
        out[0] = settle(2 * np.arctan2(axes[0] @ rest[1:], rest[0]))[0]
        return out


def _azimuth(pole: Real, zero: Real, points: Real) -> Real:
    """Return the angles about `pole` of points, shape (3, N), counted from the side of `zero`."""
    across = np.cross(pole, zero)
    return np.asarray(np.arctan2(across @ points, np.cross(across, pole) @ points))


# --- Which ways there are ------------------------------------------------------------------------------------------


def tilted_ways(kinds: Sequence[Kind], virtual: Sequence[bool]) -> Iterator[_FixedPulses | _LimitedPulses | TwoTilted]:
    """Yield the ways of this module that these gates allow."""
    turns = [kind for kind in kinds if isinstance(kind, Turn)]
    fixed = [kind for kind in kinds if isinstance(kind, Fixed)]
    for outer in turns:
        copies = outer.knob.copies(-_PI, _PI)
        if not copies:
            continue
        yield from _fixed(outer, copies, fixed)
        for turn in turns:
            if np.linalg.norm(np.cross(turn.axis, outer.axis)) <= SAME:
                continue
            inner = turn if turn.axis @ outer.axis >= 0 else turn.reversed()
            tilt = _angle(outer.axis, inner.axis)
            full = inner.knob.copies(-_PI, _PI)
            right = abs(inner.axis @ outer.axis) <= SAME
            if not (right and inner.knob.copies(0, _PI)):
                yield from _limited(outer, copies, inner, tilt)
            if not right and full and turn.index > outer.index and not (virtual[turn.index] or virtual[outer.index]):
                yield from _two(outer, inner, (copies, full), tilt)


def too_weak(kinds: Sequence[Kind]) -> str:
    """Say which axes are so close together that no way is offered, for a message; empty if there are none."""
    turns = [kind for kind in kinds if isinstance(kind, Turn)]
    for outer in turns:
        for turn in turns:
            sine = float(np.linalg.norm(np.cross(turn.axis, outer.axis)))
            if SAME < sine and (needed := least_factors(float(np.arcsin(min(1.0, sine))))) > MOST_PULSES:
                return f"two axes are so close that {needed} rotations are needed; at most {MOST_PULSES} are made"
    return ""


def _fixed(outer: Turn, copies: int, fixed: Sequence[Fixed]) -> Iterator[_FixedPulses]:
    n = outer.axis
    inner, frame = _frame(n, np.eye(3)[int(np.argmin(np.abs(n)))])
    q = [_in_frame(quaternion(pulse.unitary)[0], frame) for pulse in fixed]
    links = [float(polar(one)[1]) for one in q]
    angles = [2 * float(np.arctan2(np.linalg.norm(one[1:]), abs(one[0]))) for one in q]
    # Of pulses that tilt alike, the one that turns least.
    kept: list[int] = []
    for k in sorted(range(len(fixed)), key=lambda k: angles[k]):
        if links[k] > 1e-9 and all(abs(links[k] - links[other]) > SAME for other in kept):
            kept.append(k)
    if not kept or _PI / max(links[k] for k in kept) > MOST_PULSES:
        return
    tilts = [links[k] if abs(links[k] - _PI) > SAME else _PI for k in kept]
    simple = [min(abs(tilt - _PI / 2), abs(tilt - _PI)) <= SAME for tilt in tilts]
    if all(simple) and min(tilts) < 2:
        return  # quarter and half turns: done in closed form
    words: list[tuple[int, ...]] = []
    reach: list[tuple[float, float]] = []
    for length in range(1, MOST_PULSES + 1):
        used = range(len(kept))
        if comb(len(kept) + length - 1, length) > _MOST_WORDS:
            used = range(int(np.argmax(tilts)), int(np.argmax(tilts)) + 1)
        every_word = combinations_with_replacement(used, length)
        for word in sorted(every_word, key=lambda word: sum(angles[kept[k]] for k in word)):
            low, high = chain_reach([tilts[k] for k in word])
            if not any(a <= low and high <= b for a, b in reach):
                words.append(word)
                reach.append((low, high))
        if _covered(reach):
            break
    else:
        return
    yield _FixedPulses(
        outer=outer,
        copies=copies,
        inner=inner,
        pulses=tuple(fixed[k] for k in kept),
        words=tuple(words),
        reach=np.array(reach),
        quaternions=np.stack([q[k] for k in kept], axis=1),
        links=np.array(tilts),
    )


def _covered(reach: Sequence[tuple[float, float]]) -> bool:
    end = 0.0
    for low, high in sorted(reach):
        if low <= end + ROUNDING:
            end = max(end, high)
    return end >= _PI - ROUNDING


def _limited(outer: Turn, copies: int, inner: Turn, tilt: float) -> Iterator[_LimitedPulses]:
    low, high = inner.knob.reach
    best: tuple[float, float, int] | None = None
    for turns in (-1, 0, 1):
        a, b = low + 2 * _PI * turns, high + 2 * _PI * turns
        for sign, least, most in ((1, max(a, 0.0), min(b, _PI)), (-1, max(-b, 0.0), min(-a, _PI))):
            if most > least and (best is None or (most, -least, sign) > (best[1], -best[0], best[2])):
                best = (least, most, sign)
    if best is None:
        return
    sines = np.sin(np.array(best[:2]) / 2)
    cosines = np.hypot(np.cos(np.array(best[:2]) / 2), np.cos(tilt) * sines)
    least, most = (2 * np.arctan2(np.sin(tilt) * sines, cosines)).tolist()
    if most <= 1e-9 or least > _PI / 2 or _PI / most > MOST_PULSES:
        return
    x, _ = _frame(outer.axis, inner.axis)
    axis = np.array([np.cos(tilt), np.sin(tilt), 0.0])
    yield _LimitedPulses(outer, copies, x, inner, tilt, axis, least, most, best[2])


def _two(outer: Turn, inner: Turn, copies: tuple[int, int], tilt: float) -> Iterator[TwoTilted]:
    if least_factors(tilt) > MOST_PULSES:
        return
    x, matrix = _frame(outer.axis, inner.axis)
    axes = np.array([_N, [np.cos(tilt), np.sin(tilt), 0.0]])
    yield TwoTilted(outer, inner, copies, tilt, x, axes, matrix)
