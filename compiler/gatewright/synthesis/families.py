"""Circuits of least total cost from a parametrised entangler: XX(θ), CPhase(φ), fSim(θ, φ), CAN(x, y, z) and others.

Within a piece of its parameters such a gate's point of the alcove is an affine function of them. What a sequence
reaches is then linear in target and parameters together (`gatewright.synthesis.polytopes`), and the parameters of
least cost solve a linear program. Its optimal bases are few: each is found by the solver once and then serves, by
matrix products alone, every other target for which it is feasible and, the program being the same, optimal.
For XX(θ) see Peterson, Bishop & Javadi-Abhari, Quantum 6, 696 (2022).
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import GateSetError, UnsupportedError
from gatewright.synthesis._kak import checked_stack, decomposed, gates
from gatewright.synthesis.polytopes import FORMS, WALLS, other_image, quantum_products
from gatewright.synthesis.weyl import canonical_coordinates

__all__ = ["Choice", "Piece", "FamilyCircuit", "chain_table", "family_pieces", "least_cost", "synthesise_family"]

Vector = NDArray[np.float64]

_WALL_OFFSETS = np.array([0.0, 0, 0, -np.pi / 2])
_SAMPLES = 400
_STEP = 1e-5
_SAME = 1e-7
_ROUNDING = 1e-12


@dataclass(frozen=True, eq=False)
class Piece:
    """Part of a family on which its point of the alcove is `matrix` @ parameters + `offset`.

    Attributes
    ----------
    matrix, offset : ndarray, shapes (3, P) and (3,)
    normals, limits : ndarray, shapes (m, P) and (m,)
        The part is where normals @ parameters ≤ limits.
    cost : ndarray, shape (P,)
    fixed : float
        A use costs fixed + cost @ parameters.
    """

    matrix: Vector
    offset: Vector
    normals: Vector
    limits: Vector
    cost: Vector
    fixed: float

    def holds(self, parameters: Vector) -> NDArray[np.bool_]:
        """Return which parameters (..., P) belong to the part."""
        return np.asarray((parameters @ self.normals.T <= self.limits + _SAME).all(axis=-1))


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """The cheapest uses of a family for each of N targets.

    Attributes
    ----------
    uses : ndarray of int64, shape (N,)
        −1 where the target is not reached.
    parameters : ndarray, shape (N, K, P)
        Of each use; 0 beyond the uses.
    cost : ndarray, shape (N,)
    points, turned : ndarray, shapes (N, 3) and (N,)
        The image of the target that is reached, and whether it is the other one.
    """

    uses: NDArray[np.int64]
    parameters: Vector
    cost: Vector
    points: Vector
    turned: NDArray[np.bool_]


def family_pieces(
    matrix: Callable[[Vector], NDArray[np.complex128]],
    ranges: Sequence[tuple[float, float]],
    *,
    fixed: float = 0.0,
    slope: float = 1.0,
) -> list[Piece]:
    """Find the parts of a family of gates on which its point of the alcove is affine, and price them.

    A use costs fixed + slope · Σ |parameter|. Ranges are cut at 0. Parts that offer nothing more cheaply than another
    are left out.

    Parameters
    ----------
    matrix : callable
        Parameters (N, P) to unitaries (N, 4, 4).
    ranges : sequence of (float, float)
        Least and greatest value of each parameter.
    fixed, slope : float

    Raises
    ------
    UnsupportedError
        The point is not piecewise affine in the parameters.
    """
    rng = np.random.default_rng(0)
    count = len(ranges)
    cuts = [((low, 0.0), (0.0, high)) if low < 0.0 < high else ((low, high),) for low, high in ranges]
    pieces: list[Piece] = []
    for box in itertools.product(*cuts):
        low, high = np.array(box).T
        signs = np.where(low + high < 0, -1.0, 1.0)
        points = low + (high - low) * rng.uniform(0.001, 0.999, (_SAMPLES, count))
        shifts = np.concatenate([np.zeros((1, count)), _STEP * np.eye(count), -_STEP * np.eye(count)])
        around = canonical_coordinates(matrix((points[:, None] + shifts).reshape(-1, count))).reshape(_SAMPLES, -1, 3)
        middle = around[:, 0]
        slopes = np.swapaxes((around[:, 1 : 1 + count] - around[:, 1 + count :]) / (2 * _STEP), 1, 2)
        bent = np.abs(around[:, 1 : 1 + count] + around[:, 1 + count :] - 2 * middle[:, None]).max(axis=(1, 2)) > 1e-9
        # Slopes of canonical coordinates are small fractions; rounding to them removes the error of the differences.
        exact = np.round(slopes * 48) / 48
        fits = (np.abs(exact - slopes).max(axis=(1, 2)) < 1e-6) & ~bent
        left = np.ones(_SAMPLES, dtype=bool)
        for n in np.flatnonzero(fits):
            if not left[n]:
                continue
            a, b = exact[n], middle[n] - exact[n] @ points[n]
            b = np.where(
                np.abs(np.round(b * 48 / np.pi) * np.pi / 48 - b) < 1e-9, np.round(b * 48 / np.pi) * np.pi / 48, b
            )
            # The chamber, not the whole alcove: x ≤ π/4.
            walls = np.vstack([-WALLS @ a, a[0]])
            limits = np.append(WALLS @ b - _WALL_OFFSETS, np.pi / 4 - b[0])
            box_normals = np.concatenate([np.eye(count), -np.eye(count)])
            piece = Piece(
                a,
                b,
                np.concatenate([walls, box_normals]),
                np.concatenate([limits, high, -low]),
                slope * signs,
                fixed,
            )
            inside = piece.holds(points)
            wrong = np.abs(points @ a.T + b - middle).max(axis=1) > _SAME
            if (inside & wrong).any():
                raise _not_affine()
            left &= ~inside
            pieces.append(piece)
        if (left & ~bent).any():
            raise _not_affine()
    return _without_dearer(pieces, rng)


def _not_affine() -> UnsupportedError:
    return UnsupportedError(
        "the canonical coordinates of this entangler are not piecewise linear in its parameters",
        required="a family such as XX(θ), CPhase(φ), fSim(θ, φ) or CAN(x, y, z)",
        hint="give the gate at fixed parameters instead",
    )


def _without_dearer(pieces: list[Piece], rng: np.random.Generator) -> list[Piece]:
    kept: list[Piece] = []
    for piece in sorted(pieces, key=lambda p: float(_corner_cost(p))):
        corners = _inside(piece, rng)
        points = corners @ piece.matrix.T + piece.offset
        price = corners @ piece.cost
        dearer = False
        for other in kept:
            same = (points - other.offset) @ np.linalg.pinv(other.matrix).T
            matches = np.abs(same @ other.matrix.T + other.offset - points).max(axis=1) < 1e-9
            if (matches & other.holds(same) & (same @ other.cost <= price + 1e-9)).all():
                dearer = True
        if not dearer:
            kept.append(piece)
    return kept


def _corner_cost(piece: Piece) -> float:
    from scipy.optimize import linprog

    found = linprog(piece.cost, A_ub=piece.normals, b_ub=piece.limits + 1e-12, bounds=[(None, None)] * len(piece.cost))
    return float(found.fun) if found.fun is not None else np.inf


def _inside(piece: Piece, rng: np.random.Generator) -> Vector:
    from scipy.optimize import linprog

    corners = []
    for direction in rng.standard_normal((24, len(piece.cost))):
        free = [(None, None)] * len(direction)
        found = linprog(direction, A_ub=piece.normals, b_ub=piece.limits + 1e-12, bounds=free)
        corners.append(found.x)
    return np.array(corners)


@dataclass(frozen=True, slots=True, eq=False)
class FamilyCircuit:
    """A stack of circuits L_k · E(p_k) · L_{k−1} ··· E(p_1) · L_0 of one family of entanglers.

    Attributes
    ----------
    uses : ndarray of int64, shape (N,)
    parameters : ndarray, shape (N, K, P)
        Of each use, the first in time first; 0 beyond the uses.
    layers : ndarray, shape (N, K + 1, 2, 2, 2)
        One-qubit gates, the identity beyond the uses.
    cost : ndarray, shape (N,)
    """

    uses: NDArray[np.int64]
    parameters: Vector
    layers: NDArray[np.complex128]
    cost: Vector


def chain_table(k: int) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """Return all inequalities of k factors: sets of the factors (n, k), of the product (n,), and degrees (n,).

    Σ_set(product) ≥ Σ_j Σ_set(factor j) − degree · π for each row.
    """
    first, second, result, degree = quantum_products()
    rows: set[tuple[tuple[int, ...], int, int]] = {((a,), a, 0) for a in range(len(FORMS))}
    for _ in range(k - 1):
        rows = {
            ((*sets, int(first[n])), int(result[n]), d + int(degree[n]))
            for sets, product, d in rows
            for n in np.flatnonzero(second == product)
        }
    # Factors of one family are alike; but each row is kept, since their parameters differ.
    table = sorted(rows)
    sets = np.array([row[0] for row in table], dtype=np.int64)
    return sets, np.array([row[1] for row in table]), np.array([row[2] for row in table])


@dataclass(eq=False)
class _Program:
    """min cost · p over rows @ p ≤ constant + slope @ δ, for one sequence of pieces."""

    pieces: tuple[Piece, ...]
    bases: list[tuple[NDArray[np.int64], Vector]] = field(default_factory=list)

    @cached_property
    def parts(self) -> tuple[Vector, Vector, Vector, Vector]:
        k, count = len(self.pieces), len(self.pieces[0].cost)
        sets, product, degree = chain_table(k)
        rows = np.concatenate([FORMS[sets[:, j]] @ self.pieces[j].matrix for j in range(k)], axis=1)
        constant = np.pi * degree - np.sum([FORMS[sets[:, j]] @ self.pieces[j].offset for j in range(k)], axis=0)
        slope = FORMS[product]
        every = np.unique(np.round(np.column_stack([rows, constant, slope]), 12), axis=0)
        rows, constant, slope = every[:, : k * count], every[:, k * count], every[:, k * count + 1 :]
        bounds = [np.zeros((len(p.normals), k * count)) for p in self.pieces]
        for j, (bound, p) in enumerate(zip(bounds, self.pieces, strict=True)):
            bound[:, j * count : (j + 1) * count] = p.normals
        rows = np.concatenate([rows, *bounds])
        constant = np.concatenate([constant, *(p.limits for p in self.pieces)])
        slope = np.concatenate([slope, np.zeros((len(rows) - len(slope), 3))])
        return rows, constant, slope, np.concatenate([p.cost for p in self.pieces])

    @cached_property
    def least(self) -> Vector:
        """Least value of every row over the pieces."""
        from scipy.optimize import linprog

        k, count = len(self.pieces), len(self.pieces[0].cost)
        rows = self.parts[0].reshape(-1, k, count)
        total = np.zeros(len(rows))
        for j, piece in enumerate(self.pieces):
            distinct, owner = np.unique(rows[:, j], axis=0, return_inverse=True)
            free = [(None, None)] * count
            values = [linprog(row, A_ub=piece.normals, b_ub=piece.limits + 1e-13, bounds=free).fun for row in distinct]
            total += np.array(values, dtype=np.float64)[owner.reshape(-1)]
        return total

    def solve(self, points: Vector) -> tuple[Vector, Vector]:
        """Return the parameters (N, k·P) and their cost (N,), infinite where there is no solution."""
        from scipy.optimize import linprog

        rows, constant, slope, cost = self.parts
        limits = constant + points @ slope.T
        parameters = np.zeros((len(points), rows.shape[1]))
        price = np.full(len(points), np.inf)
        # Targets that a single inequality excludes, whatever the parameters, need no program.
        open_ = np.flatnonzero((self.least <= limits + _ROUNDING).all(axis=1))
        number = 0
        while len(open_):
            if number < len(self.bases):
                active, inverse = self.bases[number]
                number += 1
                tried = limits[np.ix_(open_, active)] @ inverse.T
                good = (tried @ rows.T <= limits[open_] + _ROUNDING).all(axis=1)
                parameters[open_[good]], price[open_[good]] = tried[good], tried[good] @ cost
                open_ = open_[~good]
                continue
            found = linprog(cost, A_ub=rows, b_ub=limits[open_[0]] + 1e-13, bounds=[(None, None)] * rows.shape[1])
            basis = None
            if found.success and found.slack is not None:
                basis = _basis(rows, found.ineqlin.marginals, found.slack)
            if basis is None:
                open_ = open_[1:]
                continue
            active, inverse = basis
            tried = inverse @ limits[open_[0], active]
            if (rows @ tried <= limits[open_[0]] + 1e-11).all():
                parameters[open_[0]], price[open_[0]] = tried, tried @ cost
                self.bases.append(basis)
            open_ = open_[1:]
        return parameters, price


def _basis(rows: Vector, marginals: Vector, slack: Vector) -> tuple[NDArray[np.int64], Vector] | None:
    """Choose independent active rows, those with a price first, and invert them; the prices are those of an optimum."""
    order = np.lexsort((slack, -np.abs(marginals)))
    chosen: list[int] = []
    for n in order:
        if slack[n] > 1e-7:
            continue
        if np.linalg.matrix_rank(rows[[*chosen, n]], tol=1e-9) > len(chosen):
            chosen.append(int(n))
            if len(chosen) == rows.shape[1]:
                return np.array(chosen, dtype=np.int64), np.asarray(np.linalg.inv(rows[chosen]), dtype=np.float64)
    return None


def least_cost(points: ArrayLike, pieces: Sequence[Piece], *, most: int = 3, prefer_uses: bool = False) -> Choice:
    """Return for each class the uses of a family with the least total cost.

    Parameters
    ----------
    points : array_like, shape (N, 3)
        Points of the chamber.
    pieces : sequence of Piece
    most : int
        Largest number of uses.
    prefer_uses : bool
        Take as few uses as possible first, and the least cost among these.

    Raises
    ------
    GateSetError
        A target is not reached within `most` uses: the limits of the parameters exclude what is needed.
    """
    given = np.asarray(points, dtype=np.float64).reshape(-1, 3)
    count = len(pieces[0].cost)
    uses = np.full(len(given), -1, dtype=np.int64)
    parameters = np.zeros((len(given), most, count))
    cost = np.full(len(given), np.inf)
    made, turned = given.copy(), np.zeros(len(given), dtype=bool)
    local = np.abs(given).max(axis=1) <= 4e-15
    uses[local], cost[local] = 0, 0.0
    for k in range(1, most + 1):
        for members in itertools.combinations_with_replacement(range(len(pieces)), k):
            program = _Program(tuple(pieces[i] for i in members))
            fixed = sum(pieces[i].fixed for i in members)
            for image in (0, 1):
                rows = np.flatnonzero((uses < 0) | (uses == k)) if prefer_uses else np.flatnonzero(~local)
                at = given[rows] if image == 0 else other_image(given[rows])
                found, price = program.solve(at)
                better = price + fixed < cost[rows] - 1e-12
                chosen = rows[better]
                uses[chosen], cost[chosen] = k, price[better] + fixed
                parameters[chosen] = 0.0
                parameters[chosen, :k] = found[better].reshape(-1, k, count)
                made[chosen], turned[chosen] = at[better], image == 1
    if (uses < 0).any():
        worst = given[int(np.argmax(uses < 0))]
        raise GateSetError(
            "the limits of this entangler's parameters exclude what is needed",
            required=f"every two-qubit gate within {most} uses",
            found="canonical coordinates ({:.6g}, {:.6g}, {:.6g}) are not reached".format(*worst),
            hint="wider limits, or more uses",
        )
    return Choice(uses, parameters, cost, made, turned)


def synthesise_family(
    unitary: ArrayLike,
    matrix: Callable[[Vector], NDArray[np.complex128]],
    pieces: Sequence[Piece],
    *,
    most: int = 3,
    prefer_uses: bool = False,
) -> FamilyCircuit:
    """Return for each unitary a circuit of a family of entanglers with the least total cost.

    Parameters
    ----------
    unitary : array_like, shape (N, 4, 4)
    matrix, pieces
        As `family_pieces` takes and gives them.
    most, prefer_uses
        As `least_cost` takes them.

    Raises
    ------
    MatrixError, NotUnitaryError, GateSetError

    Examples
    --------
    >>> from gatewright.synthesis.weyl import canonical_matrix
    >>> def xx(angles):
    ...     angle = angles[:, 0] / 2
    ...     return canonical_matrix(np.stack([-angle, 0 * angle, 0 * angle], axis=1))
    >>> pieces = family_pieces(xx, [(-np.pi, np.pi)])
    >>> circuit = synthesise_family(canonical_matrix([[0.5, 0.3, 0.1]]), xx, pieces)
    >>> circuit.uses.tolist(), circuit.cost.round(9).tolist()
    ([3], [1.8])
    """
    # The solver, compiled, is loaded only where it is needed.
    from gatewright.synthesis.interior import sequence_layers

    factors = decomposed(checked_stack(unitary))
    choice = least_cost(factors.coordinates, pieces, most=most, prefer_uses=prefer_uses)
    layers = np.zeros((len(choice.uses), int(choice.uses.max(initial=0)) + 1, 2, 2, 2), dtype=np.complex128)
    layers[...] = np.eye(2)
    for k in np.unique(choice.uses):
        rows = np.flatnonzero(choice.uses == k)
        parameters = choice.parameters[rows, :k].reshape(len(rows) * k, choice.parameters.shape[2])
        used = decomposed(matrix(parameters)) if k else None
        inner, _ = sequence_layers(
            factors.local[rows],
            choice.points[rows],
            choice.turned[rows],
            used.coordinates.reshape(-1, k, 3) if used is not None else np.zeros((len(rows), 0, 3)),
            used.local.reshape(-1, k, 4, 4) if used is not None else np.zeros((len(rows), 0, 4, 4)),
            np.arange(len(rows)),
        )
        layers[rows, : k + 1] = gates(inner)
    return FamilyCircuit(choice.uses, choice.parameters[:, : layers.shape[1] - 1], layers, choice.cost)
