"""What a Haar-random two-qubit gate costs with given entanglers, and which further entangler would save most.

Shares and means over the chamber are taken with the Haar density ∝ |∏ sin 2(c_i + c_j) sin 2(c_i − c_j)| (Watts,
O'Connor, Vala, Entropy 15, 1963 (2013)) on a fixed low-discrepancy set of points (an additive recurrence; Niederreiter,
Random Number Generation and Quasi-Monte Carlo Methods (1992)): they are good to about 2e-3. That a set gains most from
a fraction of a gate that it has, at that fraction of the cost: Peterson, Bishop, Javadi-Abhari, Quantum 6, 696 (2022).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import combinations_with_replacement

import numpy as np
from numpy.typing import NDArray

from gatewright.errors import GateSetError
from gatewright.synthesis.coverage import coverage
from gatewright.synthesis.entangler import MOST_USES
from gatewright.synthesis.polytopes import ROUNDING, Polytope, other_image, reached
from gatewright.synthesis.selection import select
from gatewright.synthesis.toolkit import Cost, cheapest_sequences

__all__ = [
    "FRACTIONS",
    "HaarCost",
    "Supplement",
    "Uses",
    "best_supplement",
    "chamber_sample",
    "haar_cost",
    "reach_by_number",
]

Vector = NDArray[np.float64]
Point = tuple[float, float, float]

#: Parts of an entangler that are tried as a supplement.
FRACTIONS = (Fraction(1, 2), Fraction(1, 3), Fraction(2, 3), Fraction(1, 4), Fraction(3, 4))
_SAMPLES = 12_000
#: Local gates, CNOT, and the two points of SWAP, in units of π/4.
_CORNERS = np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 1], [1, 1, -1]])


@dataclass(frozen=True, slots=True)
class HaarCost:
    """The mean cost of the cheapest sequence over Haar-random two-qubit gates.

    Attributes
    ----------
    mean : tuple of float
        One entry for each entry of the costs.
    uses : tuple of float
        Mean number of uses of each entangler.
    shares : tuple of (tuple of int, float)
        Each sequence that is the cheapest for some, and its share; the cheapest first.
    """

    mean: Cost
    uses: tuple[float, ...]
    shares: tuple[tuple[tuple[int, ...], float], ...]


@dataclass(frozen=True, slots=True)
class Supplement:
    """A fraction of one of the entanglers that, added to the set, lowers the mean cost most.

    Attributes
    ----------
    of : int
        Index of the entangler.
    fraction : Fraction
        Power of it that is added: that part of its chamber point, at that part of its cost.
    coordinates : tuple of float
        Chamber point of the addition.
    cost, before : float
        Mean cost with and without it.
    """

    of: int
    fraction: Fraction
    coordinates: Point
    cost: float
    before: float


@dataclass(frozen=True, slots=True, eq=False)
class Uses:
    """What exactly so many uses reach, and the Haar share of what at most as many reach."""

    uses: int
    polytopes: tuple[Polytope, ...]
    share: float


@lru_cache(maxsize=4)
def chamber_sample(size: int = _SAMPLES) -> tuple[Vector, Vector]:
    """Return points of the chamber, shape (size, 3), and their weights in the Haar measure, which add up to 1.

    Examples
    --------
    >>> points, weights = chamber_sample()
    >>> x, y, z = points.T
    >>> perfect = (x + y >= np.pi / 4) & (y + np.abs(z) <= np.pi / 4)
    >>> abs(float(weights[perfect].sum()) - 8 / (3 * np.pi)) < 1e-3
    True
    """
    # The root of g⁴ = g + 1: the recurrence with steps 1/g, 1/g², 1/g³ fills the cube evenly.
    g = 1.2207440846057596
    cube = np.mod(0.5 + np.arange(size)[:, None] / g ** np.arange(1, 4), 1.0)
    # The ordered part of the cube is a tetrahedron; its differences are the weights of the corners.
    u = -np.sort(-cube, axis=1)
    parts = np.column_stack([1 - u[:, 0], u[:, 0] - u[:, 1], u[:, 1] - u[:, 2], u[:, 2]])
    points = np.pi / 4 * parts @ _CORNERS
    cosine = np.cos(4 * points)
    density = np.abs((cosine[:, 0] - cosine[:, 1]) * (cosine[:, 0] - cosine[:, 2]) * (cosine[:, 1] - cosine[:, 2]))
    return points, density / density.sum()


@lru_cache(maxsize=64)
def reach_by_number(points: tuple[Point, ...], *, most: int = MOST_USES) -> tuple[Uses, ...]:
    """Return what 0, 1, 2 … uses of entanglers reach, which may be mixed, up to the number that reaches everything.

    Shares of one entangler that needs no more than 7 uses are exact to rounding; others are good to about 2e-3.

    Parameters
    ----------
    points : tuple of (float, float, float)
        Chamber points of the entanglers.
    most : int
        Largest number of uses.

    Raises
    ------
    GateSetError
        More uses would be needed.

    Examples
    --------
    >>> [round(level.share, 4) for level in reach_by_number(((np.pi / 8, np.pi / 8, 0.0),))]
    [0.0, 0.0, 0.7901, 1.0]
    """
    sets: dict[tuple[int, ...], Polytope] = {(): reached([])}
    sample, weights = chamber_sample()
    images = np.stack([sample, other_image(sample)])
    inside = np.zeros(len(sample), dtype=np.bool_)
    levels: list[Uses] = []
    for uses in range(most + 1):
        for polytope in sets.values():
            left = np.flatnonzero(~inside)
            inside[left] = (polytope.excess(images[:, left]) <= ROUNDING).any(axis=0)
        done = any(polytope.covers_all for polytope in sets.values())
        levels.append(Uses(uses, tuple(sets.values()), 1.0 if done else float(weights[inside].sum())))
        if done:
            break
        longer = combinations_with_replacement(range(len(points)), uses + 1)
        sets = {members: sets[members[:-1]].extended(points[members[-1]]) for members in longer if members[:-1] in sets}
        sets = _distinct(sets)
    else:
        found = "; ".join("canonical coordinates ({:.6g}, {:.6g}, {:.6g})".format(*point) for point in points)
        raise GateSetError(
            "the entanglers are so weak that some two-qubit gates need too many uses of them",
            required=f"at most {most} uses for every target",
            found=found,
        )
    if len(points) == 1 and len(levels) <= 8:
        exact = coverage([("", np.array(points[0]))]).levels
        levels = [Uses(level.uses, level.polytopes, e.share) for level, e in zip(levels, exact, strict=True)]
    return tuple(levels)


def _distinct(sets: dict[tuple[int, ...], Polytope]) -> dict[tuple[int, ...], Polytope]:
    """Leave out what is within another; all that extends it is within the same extension of the other."""
    kept: dict[tuple[int, ...], Polytope] = {}
    for members, polytope in sets.items():
        if not any((polytope.bounds >= other.bounds - 1e-15).all() for other in kept.values()):
            kept[members] = polytope
    return kept


@lru_cache(maxsize=256)
def haar_cost(points: tuple[Point, ...], costs: tuple[Cost, ...]) -> HaarCost:
    """Return the mean cost of Haar-random two-qubit gates, each made by its cheapest sequence.

    Parameters
    ----------
    points : tuple of (float, float, float)
        Chamber points of the entanglers.
    costs : tuple of tuple of float
        Of a use of each, compared entry by entry.

    Raises
    ------
    GateSetError
        The entanglers are too weak.

    Examples
    --------
    >>> q = np.pi / 8
    >>> round(haar_cost(((q, q, 0.0),), ((1.0,),)).mean[0], 2)
    2.21
    """
    sequences = cheapest_sequences(points, costs)
    sample, weights = chamber_sample()
    index = select(sample, [polytope for _, polytope in sequences], 1e-12).index
    share = np.bincount(index, weights=weights, minlength=len(sequences))
    counts = np.array([[members.count(k) for k in range(len(points))] for members, _ in sequences], dtype=np.float64)
    uses = share @ counts
    mean = uses @ np.array(costs, dtype=np.float64)
    shares = tuple((members, float(s)) for (members, _), s in zip(sequences, share, strict=True) if s > 0)
    return HaarCost(tuple(mean.tolist()), tuple(uses.tolist()), shares)


def best_supplement(points: Sequence[Point], costs: Sequence[float], *, layer: float) -> Supplement | None:
    """Return the fraction of one of the entanglers that lowers the mean cost most, None if none does.

    Parameters
    ----------
    points : sequence of (float, float, float)
    costs : sequence of float
        Positive; a fraction of an entangler is taken to cost that fraction.
    layer : float
        What every use costs besides: the one-qubit gates that go with it.

    Examples
    --------
    >>> found = best_supplement([(np.pi / 4, 0.0, 0.0)], [0.9], layer=0.1)
    >>> found is not None and (round(found.before, 9), str(found.fraction), found.cost < 2.1)
    (3.0, '1/2', True)
    """
    known, prices = tuple(points), tuple((float(cost) + layer,) for cost in costs)
    before = haar_cost(known, prices).mean[0]
    best: Supplement | None = None
    for number, (point, (price,)) in enumerate(zip(known, prices, strict=True)):
        for fraction in FRACTIONS:
            part = float(fraction)
            added = (point[0] * part, point[1] * part, point[2] * part)
            cost = haar_cost((*known, added), (*prices, ((price - layer) * part + layer,))).mean[0]
            if cost < min(before, best.cost if best else before) - 1e-3 * before:
                best = Supplement(number, fraction, added, cost, before)
    return best
