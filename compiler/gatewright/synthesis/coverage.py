"""What each number of uses of a gate set's entanglers reaches: regions of the alcove, Haar shares, the mean of uses.

`gate_set_coverage` is the entry for descriptions, tables and pictures. A class is reached by a number of uses if one
of its two images, (x, y, z) in the chamber or (π/2 − x, y, −z), lies in one of that level's convex regions.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gatewright.synthesis.entangler import MOST_USES
from gatewright.synthesis.polytopes import Polytope, reached, union_share
from gatewright.synthesis.selection import inequality_text

if TYPE_CHECKING:
    from gatewright.devices import GateSet

__all__ = ["Coverage", "Level", "Region", "coverage", "gate_set_coverage"]

Vector = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Region:
    """A convex region of the alcove x ≥ y ≥ |z|, x + y ≤ π/2 that one sequence of entanglers reaches.

    Attributes
    ----------
    sequence : tuple of str
        Names of the entanglers; their order does not matter.
    normals, offsets : ndarray, shapes (m, 3) and (m,)
        It is where normal · (x, y, z) ≥ offset for all; redundant ones are left out.
    vertices : ndarray, shape (v, 3)
        Radians; fewer than four, or all in a plane, where the region has no volume.
    """

    sequence: tuple[str, ...]
    normals: Vector
    offsets: Vector
    vertices: Vector

    @property
    def texts(self) -> tuple[str, ...]:
        """The inequalities in words, such as ``x + y - z >= 0.25``."""
        return tuple(inequality_text(n, float(o)) for n, o in zip(self.normals, self.offsets, strict=True))


@dataclass(frozen=True, slots=True, eq=False)
class Level:
    """What exactly `uses` entanglers reach, and the Haar share of what at most as many reach."""

    uses: int
    regions: tuple[Region, ...]
    share: float


@dataclass(frozen=True, slots=True, eq=False)
class Coverage:
    """What a set of entanglers reaches by number of uses, from 0 to the number that reaches everything."""

    levels: tuple[Level, ...]

    @property
    def mean_uses(self) -> float:
        """Mean of the least number of uses over Haar-random two-qubit unitaries."""
        shares = [level.share for level in self.levels]
        return float(
            sum(level.uses * (b - a) for level, a, b in zip(self.levels, [0.0, *shares], shares, strict=False))
        )

    @property
    def reach(self) -> dict[str, float]:
        """Haar share of the unitaries whose least number of uses this is, by number of uses."""
        shares = [level.share for level in self.levels]
        gains = np.maximum(np.diff(shares, prepend=0.0), 0.0)
        return {str(level.uses): float(gain) for level, gain in zip(self.levels, gains, strict=True)}


def coverage(points: Sequence[tuple[str, Vector]], *, most: int = MOST_USES) -> Coverage:
    """Return what fixed entanglers, free to be mixed in one circuit, reach by number of uses.

    Parameters
    ----------
    points : sequence of (str, array_like of shape (3,))
        Name and chamber point of each entangler.
    most : int
        Largest number of uses that is looked at; the levels end there if not all is reached.

    Examples
    --------
    >>> result = coverage([("half", np.array([np.pi / 8, np.pi / 8, 0]))])
    >>> [round(level.share, 4) for level in result.levels], round(result.mean_uses, 4)
    ([0.0, 0.0, 0.7901, 1.0], 2.2099)
    """
    levels: list[Level] = []
    sets: dict[tuple[int, ...], Polytope] = {(): reached([])}
    for uses in range(most + 1):
        regions = tuple(
            Region(tuple(points[i][0] for i in members), *polytope.halfspaces, polytope.vertices)
            for members, polytope in sets.items()
        )
        seen = [(r.normals, r.offsets) for level in levels for r in level.regions if len(r.vertices) > 3]
        share = union_share([*seen, *((r.normals, r.offsets) for r in regions)])
        levels.append(Level(uses, regions, share))
        if any(polytope.covers_all for polytope in sets.values()):
            break
        members = itertools.combinations_with_replacement(range(len(points)), uses + 1)
        sets = {chosen: sets[chosen[:-1]].extended(points[chosen[-1]][1]) for chosen in members}
    return Coverage(tuple(levels))


def gate_set_coverage(gate_set: GateSet, *, most: int = MOST_USES) -> Coverage:
    """Return what each number of uses of a gate set's entanglers reaches, with free one-qubit gates.

    Parameters
    ----------
    gate_set : GateSet
    most : int
        As `coverage` takes it.

    Raises
    ------
    GateSetError
        It has no gate that entangles.

    Examples
    --------
    >>> from gatewright.devices import read_gate_set
    >>> gate_set_coverage(read_gate_set("cz-virtual-z")).reach
    {'0': 0.0, '1': 0.0, '2': 0.0, '3': 1.0}
    """
    from gatewright.synthesis.native import usable_entanglers

    points = [(native.gate.name, entangler.ideal) for native, _, entangler in usable_entanglers(gate_set)]
    return coverage(points, most=most)
