"""Which two-qubit classes a sequence of entanglers can reach with free one-qubit gates: exact convex polytopes.

A class CAN(x, y, z) has two images in the alcove x ≥ y ≥ |z|, x + y ≤ π/2: its point p of the chamber, and
(π/2 − x, y, −z). Its phases are x+y−z, x−y+z, −x+y+z, −x−y−z. Products of classes obey the inequalities of the
multiplicative eigenvalue problem of SU(4) (Agnihotri & Woodward, Math. Res. Lett. 5, 817 (1998); Belkale, Compos.
Math. 129, 67 (2001); for two-qubit gates Peterson, Crooks & Smith, Quantum 4, 247 (2020)):

    Σ_c (phases of the product) ≥ Σ_j Σ_{a_j} (phases of factor j) − d π

for sets of r phases whose Schubert classes have q^d c in their quantum product a_1 * a_2 * …; and these suffice. The
structure constants come from the Vafa-Intriligator sum (Bertram, Adv. Math. 128, 289 (1997); Rietsch, Duke Math. J.
110, 523 (2001)). Being non-negative, they compose: the bound on each of the 14 sums of phases after one more factor
is a maximum over the bounds before it, and no projection is left to do.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = [
    "FORMS",
    "ROUNDING",
    "SETS",
    "WALLS",
    "Polytope",
    "covers",
    "haar_mass",
    "haar_share",
    "other_image",
    "quantum_products",
    "reached",
    "union_share",
]

Vector = NDArray[np.float64]

ROUNDING = 4e-15
"""Points outside by no more than this, in radians, are inside: rounding."""
_SAME = 1e-9
_OPEN = 1e-14
"""A region that is left open counts if it is wider than this."""
_QUARTER = np.pi / 4

#: Phases of a class over (x, y, z), in descending order.
_PHASES = np.array([[1.0, 1, -1], [1, -1, 1], [-1, 1, 1], [-1, -1, -1]])
#: The sets of one, two and three phases whose sums are bounded, numbered from 0.
SETS = [subset for r in (1, 2, 3) for subset in itertools.combinations(range(4), r)]
#: The sums over (x, y, z), shape (14, 3): ±2x, ±2y, ±2z and the eight ±x ± y ± z.
FORMS: Vector = np.array([_PHASES[list(subset)].sum(axis=0) for subset in SETS])
#: The alcove: WALLS @ p ≥ (0, 0, 0, −π/2).
WALLS: Vector = np.array([[1.0, -1, 0], [0, 1, -1], [0, 1, 1], [-1, -1, 0]])
_WALL_OFFSETS = np.array([0.0, 0, 0, -np.pi / 2])
#: Dual of the norm 'sum of the two largest absolute values', in which the classes' distance is 2 sin(norm/2).
_DUAL = np.maximum(np.abs(FORMS).max(axis=1), np.abs(FORMS).sum(axis=1) / 2)


@lru_cache(maxsize=1)
def quantum_products() -> tuple[NDArray[np.int64], ...]:
    """Return the products of Schubert classes of the Grassmannians of C⁴ that are not zero.

    Returns
    -------
    first, second, result, degree : ndarray of int, shape (72,)
        q^degree · result occurs in first * second, once; indices of rows of `FORMS`. Sorted by result.

    Notes
    -----
    For each r, with ζ the r-subsets of the fourth roots of (−1)^{r+1} and s the Schur polynomials, the number is
    Σ_ζ s_a(ζ) s_b(ζ) s̄_c(ζ) |V(ζ)|² / 4^r, V the Vandermonde determinant.

    Examples
    --------
    >>> len(quantum_products()[0])
    72
    """
    rows: list[tuple[int, int, int, int]] = []
    for r in (1, 2, 3):
        roots = np.exp(1j * np.pi * (2 * np.arange(4) + (r + 1) % 2) / 4)
        zeta = np.array(list(itertools.combinations(roots, r)))
        # The partition of the set {i_1 < … < i_r} (from 0) has parts 4 − r + j − i_j, for j = 0 … r − 1.
        numbers = [k for k, subset in enumerate(SETS) if len(subset) == r]
        parts = [tuple(4 - r + j - i for j, i in enumerate(SETS[k])) for k in numbers]
        powers = np.arange(r)[::-1]
        vandermonde = np.linalg.det(zeta[:, :, None] ** powers)
        alternants = np.array([np.linalg.det(zeta[:, :, None] ** (np.array(part) + powers)) for part in parts])
        schur = alternants / vandermonde
        weight = np.abs(vandermonde) ** 2 / 4**r
        for (a, p), (b, q), (c, s) in itertools.product(enumerate(parts), repeat=3):
            degree, rest = divmod(sum(p) + sum(q) - sum(s), 4)
            number = round(float(np.sum(schur[a] * schur[b] * schur[c].conj() * weight).real))
            if rest == 0 and degree >= 0 and number:
                rows.append((numbers[a], numbers[b], numbers[c], degree))
    rows.sort(key=lambda row: row[2])
    return tuple(np.array(rows, dtype=np.int64).T)


def other_image(points: ArrayLike) -> Vector:
    """Return (π/2 − x, y, −z), the other image of each class in the alcove."""
    p = np.asarray(points, dtype=np.float64)
    return np.asarray(p * np.array([-1.0, 1, -1]) + np.array([np.pi / 2, 0, 0]))


@dataclass(frozen=True, eq=False)
class Polytope:
    """The points p of the alcove with FORMS @ p ≥ bounds: what a sequence of entanglers reaches, up to image.

    A class is reached if and only if one of its two images is in it.

    Attributes
    ----------
    bounds : ndarray, shape (14,)
        Radians.
    sequence : tuple of (float, float, float)
        Chamber points of the entanglers.
    """

    bounds: Vector
    sequence: tuple[tuple[float, float, float], ...] = ()

    def extended(self, point: ArrayLike) -> Polytope:
        """Return the polytope of one more use, of an entangler with this point."""
        p = np.asarray(point, dtype=np.float64)
        first, second, result, degree = quantum_products()
        candidates = (FORMS @ p)[first] + self.bounds[second] - np.pi * degree
        starts = np.flatnonzero(np.diff(result, prepend=-1))
        x, y, z = (float(v) for v in p)
        return Polytope(np.maximum.reduceat(candidates, starts), (*self.sequence, (x, y, z)))

    @property
    def uses(self) -> int:
        """Number of entanglers."""
        return len(self.sequence)

    @cached_property
    def halfspaces(self) -> tuple[Vector, Vector]:
        """Normals (m, 3) and offsets (m,) of the inequalities normal · p ≥ offset that bound it, walls included.

        Those that hold on all its vertices with room to spare are left out.
        """
        normals = np.concatenate([FORMS, WALLS])
        offsets = np.concatenate([self.bounds, _WALL_OFFSETS])
        touching = (normals @ self.vertices.T - offsets[:, None]).min(axis=1, initial=np.inf) < _SAME
        return normals[touching], offsets[touching]

    @cached_property
    def vertices(self) -> Vector:
        """Vertices, shape (v, 3); of a flat polytope too."""
        return _vertices(np.concatenate([FORMS, WALLS]), np.concatenate([self.bounds, _WALL_OFFSETS]))

    def excess(self, points: ArrayLike) -> Vector:
        """Return how far each point (..., 3) is outside at least, in the norm of the classes' distance; ≤ 0 inside.

        Points of the alcove; a lower bound of the distance, exact where one inequality decides.
        """
        return np.asarray(((self.bounds - np.asarray(points) @ FORMS.T) / _DUAL).max(axis=-1))

    def violated(self, point: ArrayLike) -> tuple[int, float, float]:
        """Return the inequality that a point breaks most: row of `FORMS`, value, and least value that is reached."""
        values = FORMS @ np.asarray(point, dtype=np.float64)
        row = int(np.argmax((self.bounds - values) / _DUAL))
        return row, float(values[row]), float(self.bounds[row])

    def nearest(self, point: ArrayLike) -> tuple[Vector, float]:
        """Return a point of the polytope nearest to a point of the alcove, and its norm distance.

        By linear programming, on a scale at which the solver's tolerance is far below rounding.
        """
        from scipy.optimize import linprog

        p = np.asarray(point, dtype=np.float64)
        normals = np.concatenate([FORMS, WALLS])
        slack = normals @ p - np.concatenate([self.bounds, _WALL_OFFSETS])
        scale = max(float(-slack.min()), 1e-300)
        if slack.min() >= 0:
            return p, 0.0
        signs = np.array(list(itertools.product((1.0, -1.0), repeat=2)))
        pairs = np.zeros((12, 4))
        for k, (i, j) in enumerate(((0, 1), (0, 2), (1, 2))):
            pairs[4 * k : 4 * k + 4, i], pairs[4 * k : 4 * k + 4, j] = signs.T
        pairs[:, 3] = -1
        near = slack < 1e3 * scale
        rows = np.concatenate([pairs, np.column_stack([-normals[near], np.zeros(near.sum())])])
        limits = np.concatenate([np.zeros(12), slack[near] / scale])
        found = linprog([0, 0, 0, 1], A_ub=rows, b_ub=limits, bounds=[(None, None)] * 3 + [(0, None)])
        if found.x is None or not found.success:
            return p, np.inf
        return p + scale * found.x[:3], float(scale * found.x[3])

    @cached_property
    def covers_all(self) -> bool:
        """Whether every class is reached."""
        return covers(self)

    @cached_property
    def share(self) -> float:
        """Share of Haar-random two-qubit unitaries that are reached."""
        return haar_share(self)


def reached(points: ArrayLike) -> Polytope:
    """Return what a sequence of entanglers reaches.

    Parameters
    ----------
    points : array_like, shape (k, 3)
        Their points of the chamber, in any order; k may be 0.

    Returns
    -------
    Polytope

    Examples
    --------
    >>> two_b = reached([[np.pi / 4, np.pi / 8, 0]] * 2)
    >>> two_b.covers_all, round(two_b.share, 9)
    (True, 1.0)
    """
    # The empty product is the class of the lowest r phases: these sum to at most 0, and here to at least 0.
    lowest = [subset == tuple(range(4 - len(subset), 4)) for subset in SETS]
    polytope = Polytope(np.where(lowest, 0.0, -np.inf))
    for point in np.asarray(points, dtype=np.float64).reshape(-1, 3):
        polytope = polytope.extended(point)
    return polytope


def covers(polytope: Polytope) -> bool:
    """Tell whether a polytope and its other image cover the alcove.

    What they leave open is the union over pairs of inequalities, one of each, of where both fail; each such region
    is convex, and is empty if it has no inside.
    """
    box = np.array([[0, 0, 0], [np.pi / 2, 0, 0], [_QUARTER, _QUARTER, _QUARTER], [_QUARTER, _QUARTER, -_QUARTER]])
    bounds = polytope.bounds
    corners = np.stack([box, other_image(box)])
    if (polytope.excess(corners).min(axis=0) > _OPEN).any():
        return False
    turned, turned_bounds = _turned(FORMS, bounds)
    fails = (bounds[:, None] - FORMS @ box.T).max(axis=1) > _OPEN
    fails_turned = (turned_bounds[:, None] - turned @ box.T).max(axis=1) > _OPEN
    for a in np.flatnonzero(fails):
        for b in np.flatnonzero(fails_turned):
            normals = np.concatenate([-FORMS[[a]], -turned[[b]], WALLS])
            offsets = np.concatenate([[-bounds[a], -turned_bounds[b]], _WALL_OFFSETS])
            vertices = _vertices(normals, offsets)
            if len(vertices) and (normals @ vertices.mean(axis=0) - offsets).min() > _OPEN:
                return False
    return True


def _turned(normals: Vector, offsets: Vector) -> tuple[Vector, Vector]:
    """Return normals · other_image(p) ≥ offsets as inequalities for p."""
    return normals * np.array([-1.0, 1, -1]), offsets - normals[:, 0] * np.pi / 2


def haar_share(polytope: Polytope) -> float:
    """Return the share of Haar-random two-qubit unitaries whose class a sequence reaches, exact to rounding.

    Examples
    --------
    >>> round(haar_share(reached([[np.pi / 8, np.pi / 8, 0]] * 2)), 4)
    0.7901
    """
    return union_share([(FORMS, polytope.bounds)])


def union_share(regions: Sequence[tuple[Vector, Vector]]) -> float:
    """Return the share of Haar-random two-qubit unitaries with an image in one of the convex regions.

    Parameters
    ----------
    regions : sequence of (ndarray, ndarray)
        Normals (m, 3) and offsets (m,) of inequalities normal · p ≥ offset on points p of the alcove.
    """
    regions = [image for normals, offsets in regions for image in ((normals, offsets), _turned(normals, offsets))]
    whole = haar_mass(WALLS, _WALL_OFFSETS)
    # Cut what is left, region by region: the parts of a convex piece outside a region, one inequality at a time.
    left = [(WALLS, _WALL_OFFSETS)]
    for normals, offsets in regions:
        rest: list[tuple[Vector, Vector]] = []
        for piece_normals, piece_offsets in left:
            kept_normals, kept_offsets = piece_normals, piece_offsets
            vertices = _vertices(kept_normals, kept_offsets)
            for normal, offset in zip(normals, offsets, strict=True):
                values = vertices @ normal - offset
                if not len(values) or not values.min() <= -_SAME or not np.isfinite(offset):
                    continue
                outside = (np.vstack([kept_normals, -normal]), np.append(kept_offsets, -offset))
                corners = _vertices(*outside)
                if len(corners) > 3 and (outside[0] @ corners.mean(axis=0) - outside[1]).min() > _SAME:
                    rest.append(outside)
                kept_normals, kept_offsets = np.vstack([kept_normals, normal]), np.append(kept_offsets, offset)
                vertices = _vertices(kept_normals, kept_offsets)
        left = rest
    missing = sum(haar_mass(*piece) for piece in left)
    share = 1.0 - missing / whole
    # Exactly nothing and everything, free of the rounding of the integrals.
    return 0.0 if share < 1e-13 else 1.0 if missing < 1e-14 * whole else share


def haar_mass(normals: Vector, offsets: Vector) -> float:
    """Return the integral of ∏ sin 2(c_i + c_j) sin 2(c_i − c_j) over {normals · p ≥ offsets} within the alcove."""
    vertices = _vertices(normals, offsets)
    if len(vertices) < 4 or np.linalg.svd(vertices - vertices.mean(axis=0), compute_uv=False)[2] < _SAME:
        return 0.0
    centre = vertices.mean(axis=0)
    nodes, weights = np.polynomial.legendre.leggauss(16)
    nodes, weights = (nodes + 1) / 2, weights / 2
    u, v, w = (grid.ravel() for grid in np.meshgrid(nodes, nodes, nodes, indexing="ij"))
    weight = np.einsum("i,j,k->ijk", weights, weights, weights).ravel() * u**2 * v
    # Duffy's map of the cube to a tetrahedron.
    barycentric = np.stack([1 - u, u * (1 - v), u * v * (1 - w), u * v * w], axis=1)
    total = 0.0
    for face in _faces(vertices, normals, offsets):
        for second, third in itertools.pairwise(face[1:]):
            corners = np.stack([centre, vertices[face[0]], vertices[second], vertices[third]])
            volume = abs(float(np.linalg.det(corners[1:] - corners[0])))
            c = np.cos(4 * (barycentric @ corners))
            density = (c[:, 1] - c[:, 0]) * (c[:, 2] - c[:, 0]) * (c[:, 2] - c[:, 1]) / 8
            total += volume * float(weight @ density)
    return abs(total)


def _faces(vertices: Vector, normals: Vector, offsets: Vector) -> list[list[int]]:
    """Return the vertices of each facet of a solid polytope, in order around it."""
    faces: dict[frozenset[int], list[int]] = {}
    for normal, offset in zip(normals, offsets, strict=True):
        on = np.flatnonzero(np.abs(vertices @ normal - offset) < _SAME)
        if len(on) < 3 or frozenset(on.tolist()) in faces:
            continue
        away = vertices[on] - vertices[on].mean(axis=0)
        _, _, axes = np.linalg.svd(away)
        angles = np.arctan2(away @ axes[1], away @ axes[0])
        faces[frozenset(on.tolist())] = on[np.argsort(angles)].tolist()
    return list(faces.values())


def _vertices(normals: Vector, offsets: Vector) -> Vector:
    """Return the vertices of {normals · p ≥ offsets}: every three planes that meet in one point inside."""
    finite = np.isfinite(offsets)
    normals, offsets = normals[finite], offsets[finite]
    triples = _triples(len(normals))
    planes = normals[triples]
    determinants = np.linalg.det(planes)
    regular = np.abs(determinants) > 1e-6
    points = np.linalg.solve(planes[regular], offsets[triples[regular]][..., None])[..., 0]
    points = points[(points @ normals.T - offsets > -1e-11).all(axis=1)]
    if not len(points):
        return np.zeros((0, 3))
    _, first = np.unique(np.round(points, 9) + 0.0, axis=0, return_index=True)
    points = points[np.sort(first)]
    # Rounding may have split one vertex into two neighbours.
    apart = np.abs(points[:, None] - points[None]).max(axis=2) > _SAME
    single = np.array([apart[k, :k].all() for k in range(len(points))])
    return np.asarray(points[single])


@lru_cache(maxsize=64)
def _triples(count: int) -> NDArray[np.int64]:
    return np.array(list(itertools.combinations(range(count), 3)), dtype=np.int64).reshape(-1, 3)
