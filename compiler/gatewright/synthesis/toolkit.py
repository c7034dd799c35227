"""The cheapest circuit from several entanglers: sequences in the order of their cost, and the first that reaches.

Which classes a sequence reaches does not depend on its order (`gatewright.synthesis.polytopes`), so sequences are
multisets, looked at from the cheapest on until one reaches everything.
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import GateSetError
from gatewright.synthesis._kak import checked_stack, decomposed, gates
from gatewright.synthesis.controlled_not import EntanglerCircuit
from gatewright.synthesis.entangler import MOST_USES, Entangler
from gatewright.synthesis.polytopes import Polytope, reached
from gatewright.synthesis.selection import select
from gatewright.synthesis.weyl import canonical_coordinates, mirrored_coordinates

__all__ = ["MOST_SEQUENCES", "MixedCircuit", "cheapest_sequences", "least_mixed_uses", "synthesise_mixed"]

MOST_SEQUENCES = 3000
"""So many sequences are looked at before one must reach everything."""

Cost = tuple[float, ...]


@dataclass(frozen=True, slots=True, eq=False)
class MixedCircuit:
    """A stack of circuits L_k · E_k · L_{k−1} ··· E_1 · L_0, each E_j one of several entanglers.

    Attributes
    ----------
    uses : ndarray of int, shape (N,)
    members : ndarray of int, shape (N, K)
        Index of the entangler of each use, the first in time first; −1 beyond the uses.
    layers : ndarray, shape (N, K + 1, 2, 2, 2)
    distance : ndarray, shape (N,)
        As in `EntanglerCircuit`.
    """

    uses: NDArray[np.int64]
    members: NDArray[np.int64]
    layers: NDArray[np.complex128]
    distance: NDArray[np.float64]


@lru_cache(maxsize=256)
def cheapest_sequences(
    points: tuple[tuple[float, float, float], ...], costs: tuple[Cost, ...], most: int = MOST_USES
) -> tuple[tuple[tuple[int, ...], Polytope], ...]:
    """Return sequences of entanglers in ascending order of cost, the last of which reaches everything.

    Parameters
    ----------
    points : tuple of (x, y, z)
        Chamber points of the entanglers.
    costs : tuple of tuple of float
        Cost of a use of each, compared entry by entry, the first first; they add up along a sequence.
    most : int
        Largest number of uses.

    Returns
    -------
    tuple of (tuple of int, Polytope)
        Entanglers used, and what they reach. Sequences that reach nothing more than a cheaper one are left out.

    Raises
    ------
    GateSetError
        Within `most` uses and `MOST_SEQUENCES` sequences none reaches everything.

    Examples
    --------
    >>> found = cheapest_sequences(((np.pi / 4, 0, 0), (np.pi / 4, np.pi / 4, 0)), ((1, 0), (1, 0.5)))
    >>> [members for members, _ in found]
    [(), (0,), (1,), (0, 0), (0, 1), (0, 0, 0)]
    """
    heap: list[tuple[Cost, tuple[int, ...]]] = [((0.0,) * len(costs[0]), ())]
    found: list[tuple[tuple[int, ...], Polytope]] = []
    known: dict[tuple[int, ...], Polytope] = {(): reached([])}
    for _ in range(MOST_SEQUENCES):
        if not heap:
            break
        cost, members = heapq.heappop(heap)
        polytope = known[members]
        if not any((polytope.bounds >= other.bounds - 1e-15).all() for _, other in found):
            found.append((members, polytope))
            if polytope.covers_all:
                return tuple(found)
        if len(members) < most:
            for i in range(members[-1] if members else 0, len(points)):
                longer = (*members, i)
                known[longer] = polytope.extended(points[i])
                heapq.heappush(heap, (tuple(a + b for a, b in zip(cost, costs[i], strict=True)), longer))
    raise GateSetError(
        "these entanglers are so weak that some two-qubit gates need too many uses of them",
        required=f"at most {most} uses, and {MOST_SEQUENCES} sequences, for every target",
        found="; ".join("canonical coordinates ({:.6g}, {:.6g}, {:.6g})".format(*point) for point in points),
    )


def least_mixed_uses(
    target: ArrayLike, entanglers: Sequence[Entangler], *, tolerance: float = 1e-12, exchanged: bool = False
) -> NDArray[np.int64]:
    """Return the least number of uses for each target where every use may be of another entangler.

    Parameters
    ----------
    target : array_like, shape (..., 4, 4)
    entanglers : sequence of Entangler
    tolerance : float
        As `Entangler.count` takes it.
    exchanged : bool
        Whether the two output wires may be exchanged.
    """
    if len(entanglers) == 1:
        only = entanglers[0]
        return (
            only.count_exchanged(target, tolerance=tolerance) if exchanged else only.count(target, tolerance=tolerance)
        )
    points = canonical_coordinates(target)
    sequences = cheapest_sequences(_points(entanglers), ((1.0,),) * len(entanglers))
    polytopes = [polytope for _, polytope in sequences]
    uses = np.array([polytope.uses for polytope in polytopes], dtype=np.int64)
    least = uses[select(points, polytopes, tolerance).index]
    if exchanged:
        least = np.minimum(least, uses[select(mirrored_coordinates(points), polytopes, tolerance).index])
    return np.asarray(least.reshape(points.shape[:-1]))


def synthesise_mixed(
    unitary: ArrayLike, entanglers: Sequence[Entangler], *, costs: Sequence[Cost] = (), tolerance: float = 1e-12
) -> MixedCircuit:
    """Return for each unitary the cheapest circuit from several entanglers.

    Parameters
    ----------
    unitary : array_like, shape (N, 4, 4)
    entanglers : sequence of Entangler
    costs : sequence of tuple of float
        As `cheapest_sequences` takes them; by default every use costs the same.
    tolerance : float
        As `Entangler.synthesise` takes it.

    Returns
    -------
    MixedCircuit

    Raises
    ------
    MatrixError, NotUnitaryError, GateSetError

    Examples
    --------
    >>> from gatewright.linalg import haar_unitary
    >>> from gatewright.synthesis.entangler import classify
    >>> from gatewright.synthesis.weyl import canonical_matrix
    >>> tools = [classify(canonical_matrix([np.pi / 4, y, 0])) for y in (0, np.pi / 8)]
    >>> synthesise_mixed(haar_unitary(4, 3, rng=1), tools, costs=[(1.0,), (1.4,)]).members.tolist()
    [[0, 1], [0, 1], [0, 1]]
    """
    u = checked_stack(unitary)
    if len(entanglers) == 1:
        made = entanglers[0].synthesise(u, tolerance=tolerance)
        depth = made.layers.shape[1] - 1
        members = np.where(np.arange(depth) < made.uses[:, None], 0, -1)
        return MixedCircuit(made.uses, members, made.layers, made.distance)
    priced = tuple(tuple(float(part) for part in cost) for cost in costs) or ((1.0,),) * len(entanglers)
    sequences = cheapest_sequences(_points(entanglers), priced)
    factors = decomposed(u)
    chosen = select(factors.coordinates, [polytope for _, polytope in sequences], tolerance)
    lengths = np.array([len(members) for members, _ in sequences], dtype=np.int64)
    uses = lengths[chosen.index]
    most = int(uses.max(initial=0))
    layers = np.zeros((len(u), most + 1, 2, 2, 2), dtype=np.complex128)
    layers[...] = np.eye(2)
    members = np.full((len(u), most), -1, dtype=np.int64)
    distance = chosen.distance.copy()
    for number in np.unique(chosen.index):
        rows = np.flatnonzero(chosen.index == number)
        order = sequences[number][0]
        k = len(order)
        members[rows, :k] = order
        if k and len(set(order)) == 1 and entanglers[order[0]].deviation <= tolerance:
            same = _uniform(u[rows], entanglers[order[0]], tolerance)
            if same is not None and (same.uses == k).all():
                layers[rows, : k + 1], distance[rows] = same.layers[:, : k + 1], same.distance
                continue
        # The solver, compiled, is loaded only where it is needed.
        from gatewright.synthesis.interior import sequence_layers

        frames = np.array([entanglers[i].frame for i in order]).reshape(1, k, 4, 4)
        points = np.array([entanglers[i].coordinates for i in order]).reshape(1, k, 3)
        which = np.zeros(len(rows), dtype=np.int64)
        inner, more = sequence_layers(
            factors.local[rows], chosen.points[rows], chosen.turned[rows], points, frames, which
        )
        layers[rows, : k + 1] = gates(inner)
        distance[rows] += more
    return MixedCircuit(uses, members, layers, distance)


def _uniform(u: NDArray[np.complex128], entangler: Entangler, tolerance: float) -> EntanglerCircuit | None:
    """Return circuits of one entangler from its closed forms, if it has them."""
    return entangler.synthesise(u, tolerance=tolerance) if entangler.closed else None


def _points(entanglers: Sequence[Entangler]) -> tuple[tuple[float, float, float], ...]:
    return tuple((float(e.ideal[0]), float(e.ideal[1]), float(e.ideal[2])) for e in entanglers)
