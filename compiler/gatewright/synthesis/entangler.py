"""Two-qubit circuits in the least number of uses of one fixed entangler, whichever it is.

An entangler of the CNOT class is CNOT up to local gates, so its counts and circuits are those of
`gatewright.synthesis.controlled_not`. One of the iSWAP class is SWAP times such a one; SWAPs move through local gates
by exchanging their qubits, so k uses reach SWAP^k times what k CNOTs reach. For any other, counts come from
`gatewright.synthesis.polytopes` and circuits from `gatewright.synthesis.interior`.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import GateSetError, MatrixError
from gatewright.synthesis._kak import Factors, checked_stack, decomposed, gates
from gatewright.synthesis._layers import HADAMARD, PAULI_X, ROUNDING, Plan, conjugate, layers, make_plan, multiply
from gatewright.synthesis.controlled_not import EntanglerCircuit, class_distances, least_uses
from gatewright.synthesis.polytopes import Polytope, reached
from gatewright.synthesis.selection import select, violation_text
from gatewright.synthesis.weyl import canonical_coordinates, mirrored_coordinates

__all__ = ["MOST_USES", "Entangler", "classify", "reach_by_uses"]

MOST_USES = 64
"""An entangler that needs more uses than this for some target is refused unless the caller allows more."""


@dataclass(frozen=True, slots=True, eq=False)
class Entangler:
    """A fixed two-qubit gate that circuits can be made of; built by `classify`.

    Attributes
    ----------
    matrix : ndarray, shape (4, 4)
        The gate E.
    coordinates : ndarray, shape (3,)
        Its point of the chamber.
    mirrored : bool
        Whether it is of the class of iSWAP.
    left, right : ndarray, shape (2, 2, 2)
        Its local gates: E = exp(iφ) · (left₀ ⊗ left₁) · CAN(coordinates) · (right₀ ⊗ right₁).
    deviation : float
        Operator-norm distance up to phase from E to the class of CNOT or iSWAP that it is taken for; each use adds it
        to a circuit's distance. 0 for any other class.
    reach : tuple of Polytope
        What exactly 0, 1, 2 … uses reach, to the number that reaches everything.
    frame : ndarray, shape (4, 4)
        `left` and `right` as quaternions.
    """

    matrix: NDArray[np.complex128]
    coordinates: NDArray[np.float64]
    mirrored: bool
    left: NDArray[np.complex128]
    right: NDArray[np.complex128]
    deviation: float
    reach: tuple[Polytope, ...] = field(repr=False)
    frame: NDArray[np.float64] = field(repr=False)
    _plan: Plan | None = field(repr=False)

    @property
    def closed(self) -> bool:
        """Whether its circuits have closed forms: it is of the class of CNOT or iSWAP."""
        return self._plan is not None

    @property
    def ideal(self) -> NDArray[np.float64]:
        """Its point of the chamber, exactly that of CNOT or iSWAP if only rounding is between."""
        return np.array(self.reach[1].sequence[0]) if self.deviation == 0.0 else self.coordinates

    def count(self, target: ArrayLike, *, tolerance: float = 1e-12) -> NDArray[np.int64]:
        """Return the least number of uses for each target.

        Parameters
        ----------
        target : array_like, shape (..., 4, 4) or (..., 3)
            Unitaries, or their points of the chamber.
        tolerance : float
            A target within this operator-norm distance of one that needs fewer uses counts as that one.

        Returns
        -------
        ndarray of int, shape (...)
            From 0 to ``len(reach) - 1``.

        Raises
        ------
        MatrixError, NotUnitaryError
            As `gatewright.synthesis.weyl.canonical_decomposition`.

        Examples
        --------
        >>> swap = np.eye(4)[[0, 2, 1, 3]]
        >>> entangler = classify(np.diag([1, 1, 1, -1]))
        >>> int(entangler.count(swap)), int(entangler.count_exchanged(swap))
        (3, 0)
        """
        return self._count(_points(target), tolerance)

    def count_exchanged(self, target: ArrayLike, *, tolerance: float = 1e-12) -> NDArray[np.int64]:
        """Return the least number of uses where the two output wires may be exchanged: over W and SWAP · W.

        Parameters, result and errors are those of `count`.
        """
        points = _points(target)
        straight = self._count(points, tolerance)
        crossed = self._count(mirrored_coordinates(points), tolerance)
        return np.asarray(np.minimum(straight, crossed))

    def reason(self, target: ArrayLike, *, tolerance: float = 1e-12) -> str:
        """Say why one target, a unitary or a point of the chamber, needs its number of uses and no fewer.

        Examples
        --------
        >>> classify(np.diag([1, 1, 1, -1])).reason([0.5, 0.25, 0.125])
        '3 uses: 2 reach only z <= 0 (z = 0.125); as (pi/2-x, y, -z): z >= 0 (z = -0.125)'
        """
        point = _points(target)
        uses = int(self._count(point, tolerance))
        if uses == 0:
            return "0 uses: a product of one-qubit gates"
        return f"{uses} use{'s' * (uses > 1)}: {uses - 1} reach only {violation_text(self.reach[uses - 1], point)}"

    def synthesise(self, unitary: ArrayLike, *, tolerance: float = 1e-12) -> EntanglerCircuit:
        """Return for each unitary a circuit with the least number of uses of this entangler.

        Parameters
        ----------
        unitary : array_like, shape (..., 4, 4)
        tolerance : float
            A unitary within this operator-norm distance (up to phase) of one that needs fewer uses is replaced by it.

        Returns
        -------
        EntanglerCircuit
            Within 2e-14 plus ``distance`` of the input in operator norm up to phase (1e-12 where the class of the
            entangler has no closed form); ``distance`` includes ``deviation`` for each use.

        Raises
        ------
        MatrixError, NotUnitaryError
            As `gatewright.synthesis.weyl.canonical_decomposition`.

        Examples
        --------
        >>> from gatewright.linalg import distance, haar_unitary
        >>> iswap = [[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]]
        >>> u = haar_unitary(4, 5, rng=1)
        >>> circuit = classify(iswap).synthesise(u)
        >>> circuit.uses.tolist(), bool((distance(circuit.matrix(iswap), u) < 2e-14).all())
        ([3, 3, 3, 3, 3], True)
        """
        u = checked_stack(unitary)
        batch = u.shape[:-2]
        u = u.reshape(-1, 4, 4)
        if self._plan is None:
            return self._general(decomposed(u), batch, tolerance)
        if self.mirrored:
            # What an odd number of CNOTs has to make is SWAP · U. Even counts, which are exceptions, are done again.
            factors = decomposed(u[:, [0, 2, 1, 3]])
            points = mirrored_coordinates(factors.coordinates)
        else:
            factors = decomposed(u)
            points = factors.coordinates
        distances = self._distances(points)
        uses = least_uses(distances, tolerance)
        if self.mirrored and (even := uses % 2 == 0).any():
            straight = decomposed(u[even])
            factors.local[even], factors.coordinates[even] = straight.local, straight.coordinates
        gap = np.take_along_axis(distances, uses[:, None], axis=-1)[:, 0] + uses * self.deviation
        return EntanglerCircuit(
            uses=uses.reshape(batch),
            layers=layers(self._plan, factors.local, factors.coordinates, uses).reshape(*batch, 4, 2, 2, 2),
            distance=np.where(gap <= ROUNDING, 0.0, gap).reshape(batch),
        )

    def _count(self, points: NDArray[np.float64], tolerance: float) -> NDArray[np.int64]:
        if self._plan is not None:
            return least_uses(self._distances(points), tolerance)
        return select(points, self.reach, tolerance).index.reshape(points.shape[:-1])

    def _general(self, factors: Factors, batch: tuple[int, ...], tolerance: float) -> EntanglerCircuit:
        # The solver, compiled, is loaded only for entanglers that need it.
        from gatewright.synthesis.interior import sequence_layers

        chosen = select(factors.coordinates, self.reach, tolerance)
        most = int(chosen.index.max(initial=0))
        made = np.zeros((len(chosen.index), most + 1, 2, 2, 2), dtype=np.complex128)
        made[...] = np.eye(2)
        for k in np.unique(chosen.index):
            rows = np.flatnonzero(chosen.index == k)
            inner, more = sequence_layers(
                factors.local[rows],
                chosen.points[rows],
                chosen.turned[rows],
                np.broadcast_to(self.coordinates, (1, k, 3)),
                np.broadcast_to(self.frame, (1, k, 4, 4)),
                np.zeros(len(rows), dtype=np.int64),
            )
            made[rows, : k + 1] = gates(inner)
            chosen.distance[rows] += more
        return EntanglerCircuit(
            uses=chosen.index.reshape(batch),
            layers=made.reshape(*batch, most + 1, 2, 2, 2),
            distance=chosen.distance.reshape(batch),
        )

    def _distances(self, points: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the distance of each class to what at most 0, 1, 2 and 3 uses reach (1 use: that number exactly)."""
        distances = class_distances(points)
        if self.mirrored:
            distances[..., 1] = class_distances(mirrored_coordinates(points))[..., 1]
        return distances


def _points(target: ArrayLike) -> NDArray[np.float64]:
    """Return points of the chamber, given as such or as unitaries."""
    array = np.asarray(target)
    if array.ndim and array.shape[-1] == 3:
        return np.asarray(array, dtype=np.float64)
    return canonical_coordinates(array)


def reach_by_uses(coordinates: ArrayLike, *, most: int = MOST_USES) -> tuple[Polytope, ...]:
    """Return what exactly 0, 1, 2 … uses of an entangler reach, to the number that reaches everything.

    Parameters
    ----------
    coordinates : array_like, shape (3,)
        Its point of the chamber; not (0, 0, 0) and not that of SWAP.
    most : int
        Largest number that is looked at.

    Raises
    ------
    GateSetError
        More uses would be needed.

    Examples
    --------
    >>> [round(polytope.share, 4) for polytope in reach_by_uses([np.pi / 8, np.pi / 8, 0])]
    [0.0, 0.0, 0.7901, 1.0]
    """
    reach = [reached([])]
    while not reach[-1].covers_all:
        if len(reach) > most:
            point = ", ".join(f"{value:.6g}" for value in np.asarray(coordinates, dtype=np.float64))
            raise GateSetError(
                "this entangler is so weak that some two-qubit gates need too many uses of it",
                required=f"at most {most} uses for every target",
                found=f"canonical coordinates ({point})",
                hint="a stronger entangler, or one already close to SWAP less so, needs fewer uses",
            )
        reach.append(reach[-1].extended(coordinates))
    return tuple(reach)


def classify(matrix: ArrayLike, *, tolerance: float = 1e-12, most: int = MOST_USES) -> Entangler:
    """Find the class of a fixed two-qubit gate and prepare it for synthesis.

    Parameters
    ----------
    matrix : array_like, shape (4, 4)
        A unitary, with any local gates of its own and any phase.
    tolerance : float
        Operator-norm distance up to phase within which it is taken for one of the class of CNOT or iSWAP, whose
        circuits have closed forms.
    most : int
        An entangler that needs more uses for some target is refused.

    Returns
    -------
    Entangler

    Raises
    ------
    MatrixError, NotUnitaryError
        If it is not one 4 × 4 unitary.
    GateSetError
        If it cannot entangle, being a product of one-qubit gates, or such a product times SWAP; or is so weak that
        some target needs more than `most` uses.

    Examples
    --------
    >>> entangler = classify([[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]])
    >>> entangler.mirrored, (entangler.coordinates * 4 / np.pi).round(12).tolist()
    (True, [1.0, 1.0, 0.0])
    """
    gate = checked_stack(matrix)
    if gate.ndim != 2:
        raise MatrixError("not one two-qubit matrix", required="shape (4, 4)", found=f"shape {gate.shape}")
    factors = decomposed(gate)
    point = factors.coordinates[0]
    straight, crossed = class_distances(point), class_distances(mirrored_coordinates(point))
    found = "canonical coordinates ({:.6g}, {:.6g}, {:.6g})".format(*point)
    if straight[0] <= tolerance or crossed[0] <= tolerance:
        what = "a product of one-qubit gates" if straight[0] <= tolerance else "SWAP times a product of one-qubit gates"
        raise GateSetError(
            f"this two-qubit gate cannot entangle: it is {what}",
            required="a gate that entangles some product state",
            found=found,
        )
    mirrored = bool(crossed[1] < straight[1])
    deviation = float(min(crossed[1], straight[1]))
    closed = deviation <= tolerance
    left, right = factors.local[0, :2], factors.local[0, 2:]
    before, after = conjugate(right), conjugate(left)
    if mirrored:
        # CAN(π/4, 0, 0) = SWAP · (H⊗H) CAN(π/4, π/4, 0) (H⊗H) · XX up to phase.
        before, after = multiply(before, HADAMARD, PAULI_X), multiply(HADAMARD, after)
    local = gates(factors.local[0])
    return Entangler(
        matrix=gate.copy(),
        coordinates=point,
        mirrored=closed and mirrored,
        left=local[:2],
        right=local[2:],
        deviation=deviation if closed and deviation > ROUNDING else 0.0,
        reach=reach_by_uses(_ideal(mirrored) if closed else point, most=most),
        _plan=make_plan(before, after, exchanged=mirrored) if closed else None,
        frame=factors.local[0],
    )


def _ideal(mirrored: bool) -> NDArray[np.float64]:
    """Return the point of CNOT or of iSWAP, free of the rounding of the one given."""
    return np.array([np.pi / 4, np.pi / 4 if mirrored else 0.0, 0.0])
