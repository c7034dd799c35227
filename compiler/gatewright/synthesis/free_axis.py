"""Any one-qubit unitary as one pulse about a freely chosen axis, by the axis and angle of its quaternion."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias

import numpy as np
from numpy.typing import NDArray

from gatewright.synthesis.chains import product, turning
from gatewright.synthesis.euler import euler_angles, settle
from gatewright.synthesis.recognise import SAME, FreeAxis, Kind, Turn

if TYPE_CHECKING:
    from gatewright.synthesis.one_qubit import Rows

__all__ = ["free_axis_ways"]

Real: TypeAlias = NDArray[np.float64]
Complex: TypeAlias = NDArray[np.complex128]
Mask: TypeAlias = NDArray[np.bool_]

_PI = float(np.pi)


@dataclass(frozen=True, eq=False, slots=True)
class _OnePulse:
    """One pulse; or, where that is enough and in the set, a rotation about the pole: C(β) = R_reference(β)."""

    pulse: FreeAxis
    outer: Turn | None = None
    copies: int = 0
    steers = False

    @property
    def summary(self) -> str:
        return "one rotation about any axis" + (", or one about the pole" if self.outer else "")

    @property
    def members(self) -> tuple[Kind, ...]:
        return (self.pulse, *([self.outer] if self.outer else []))

    @property
    def frame(self) -> tuple[Real, Real]:
        return self.pulse.pole, self.pulse.reference

    def angles(self, u: Complex, tolerance: float) -> Real:
        return euler_angles(u, outer=self.pulse.pole, inner=self.pulse.reference, tolerance=tolerance).angles

    def emit(self, rows: Rows, angles: Real, trailing: Mask) -> None:
        alpha = np.where(trailing, angles[:, 0], 0.0) if self.outer else angles[:, 0]
        beta, gamma = angles[:, 1], angles[:, 2]
        if self.outer is not None:
            total = settle(gamma + alpha)[0]
            rows.turn(self.outer, self.copies, np.where(beta == 0, total, 0.0))
        pole, reference = np.array([1.0, 0.0, 0.0]), np.array([0.0, 1.0, 0.0])
        q = product(turning(pole, alpha), product(turning(reference, beta), turning(pole, gamma)))
        q = np.where(q[0] < 0, -q, q)
        theta = 2 * np.arctan2(np.linalg.norm(q[1:], axis=0), q[0])
        backwards = np.full(len(theta), self.pulse.sign < 0)
        polar = np.arctan2(np.hypot(q[2], q[3]), q[1])
        if self.pulse.sign >= 2:
            backwards = (polar > _PI / 2) if self.pulse.sign == 2 else (polar < _PI / 2)
        # A rotation by -θ about the opposite axis is the same.
        polar = np.where(backwards, np.arctan2(np.hypot(q[2], q[3]), -q[1]), polar)
        azimuth = np.where(backwards, np.arctan2(-q[3], -q[2]), np.arctan2(q[3], q[2]))
        theta = np.where(backwards, -settle(theta)[0], settle(theta)[0])
        t, lean, phi = self.pulse.turn, self.pulse.polar, self.pulse.azimuth
        values: dict[int, Real | float] = {
            t.slot: t.split(theta)[0],
            lean.slot: lean.split(settle(polar)[0])[0],
            phi.slot: phi.split(settle(azimuth)[0])[0],
        }
        wanted = (np.abs(theta) > SAME) & ((beta != 0) if self.outer is not None else np.ones(len(theta), dtype=bool))
        rows.add(self.pulse.index, wanted, values)


def free_axis_ways(kinds: Sequence[Kind]) -> Iterator[_OnePulse]:
    """Yield the ways of this module that these gates allow."""
    for pulse in kinds:
        if not isinstance(pulse, FreeAxis) or not pulse.sign:
            continue
        yield _OnePulse(pulse)
        for outer in kinds:
            if isinstance(outer, Turn) and (copies := outer.knob.copies(-_PI, _PI)):
                for free in (outer, outer.reversed()):
                    if float(np.abs(free.axis - pulse.pole).max()) <= SAME:
                        yield _OnePulse(pulse, free, copies)
