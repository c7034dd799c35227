"""Route a circuit on a coupling graph: insert swaps so that every two-qubit gate meets an edge.

One pass in the manner of SABRE (Li, Ding, Xie, ASPLOS 2019, arXiv:1809.02573); the compiled loops are in `_kernels`.
Plain arrays in and out: wires 0 to N − 1 are the qubits, as many as the device has, and further ones (classical bits)
only keep operations in order.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components, shortest_path

from gatewright.mapping._kernels import link, sweep, weave

__all__ = ["Graph", "Operations", "Pass", "Routing", "make_graph", "make_operations", "route", "run_pass"]

Integers = NDArray[np.int32]

#: Gates looked at beyond the blocked ones, their share in a swap's score, its fading, and the costs of haste.
AHEAD, AHEAD_SHARE, FADING, DECAY, PRICE = 20, 0.5, 1.0, 0.001, 0.0
#: Distance of qubits without a path.
FAR = 30_000

_NO_WEIGHT = np.empty((0, 0), dtype=np.float32)


@dataclass(frozen=True, eq=False, slots=True)
class Graph:
    """A coupling graph, without directions.

    Attributes
    ----------
    n : int
    edges : ndarray of int32, shape (E, 2)
    starts, neighbours : ndarray of int32
        Neighbours of p are ``neighbours[starts[p]:starts[p + 1]]``.
    distance : ndarray of int16, shape (n, n)
        `FAR` where there is no path.
    component : ndarray of int32, shape (n,)
    """

    n: int
    edges: Integers
    starts: Integers
    neighbours: Integers
    distance: NDArray[np.int16]
    component: Integers


def make_graph(edges: ArrayLike, n: int) -> Graph:
    """Return the graph of undirected `edges`, shape (E, 2), on `n` qubits."""
    pairs = np.asarray(edges, dtype=np.int32).reshape(-1, 2)
    both = np.concatenate([pairs, pairs[:, ::-1]])
    both = np.unique(both, axis=0)
    matrix = csr_array((np.ones(len(both)), (both[:, 0], both[:, 1])), shape=(n, n))
    distance = shortest_path(matrix, unweighted=True)
    return Graph(
        n=n,
        edges=pairs,
        starts=np.searchsorted(both[:, 0], np.arange(n + 1)).astype(np.int32),
        neighbours=np.ascontiguousarray(both[:, 1]),
        distance=np.where(np.isinf(distance), FAR, distance).astype(np.int16),
        component=connected_components(matrix, directed=False)[1].astype(np.int32),
    )


@dataclass(frozen=True, eq=False, slots=True)
class Operations:
    """Operations in time order, on flat wires; what routing must keep in order.

    Attributes
    ----------
    wires : ndarray of int32
        Operation k is on ``wires[offsets[k]:offsets[k + 1]]``.
    offsets : ndarray of int32, shape (m + 1,)
    coupled : ndarray of uint8, shape (m,)
        1 for gates whose first two wires must be neighbours.
    n_all : int
        Number of wires, further ones included.
    """

    wires: Integers
    offsets: Integers
    coupled: NDArray[np.uint8]
    n_all: int

    def __len__(self) -> int:
        """Return the number of operations."""
        return len(self.coupled)

    @property
    def pairs(self) -> Integers:
        """Wires of the coupled operations, shape (g, 2)."""
        first = self.offsets[:-1][self.coupled == 1]
        return np.asarray(self.wires[first[:, None] + np.arange(2)])

    def take(self, rows: NDArray[np.int64]) -> Operations:
        """Return the operations numbered `rows`."""
        lengths = np.diff(self.offsets)[rows]
        offsets = np.concatenate([[0], np.cumsum(lengths)]).astype(np.int32)
        at = np.arange(offsets[-1]) + np.repeat(self.offsets[:-1][rows] - offsets[:-1], lengths)
        return Operations(np.ascontiguousarray(self.wires[at]), offsets, self.coupled[rows], self.n_all)


def make_operations(wires: ArrayLike, offsets: ArrayLike, coupled: ArrayLike, n_all: int) -> Operations:
    """Return `Operations` with the types that the compiled loops want."""
    return Operations(
        np.ascontiguousarray(wires, dtype=np.int32),
        np.ascontiguousarray(offsets, dtype=np.int32),
        np.ascontiguousarray(coupled, dtype=np.uint8),
        n_all,
    )


@dataclass(frozen=True, eq=False, slots=True)
class Pass:
    """Outcome of one pass.

    Attributes
    ----------
    end : ndarray of int32, shape (n,)
        Qubit of each wire after the pass.
    swaps : int
    cost : float
        Entanglers, roughly: one a gate and a swap beside a gate on the same pair, three any other swap.
    events : ndarray of int64
        Operations as numbered, and ``-1 - (p * n + q)`` for a swap of qubits p and q; empty unless recorded.
    """

    end: Integers
    swaps: int
    cost: float
    events: NDArray[np.int64]


class Router:
    """Operations prepared for passes in both directions."""

    def __init__(self, graph: Graph, operations: Operations) -> None:
        self.graph = graph
        self.operations = operations
        self._owner, self._after, self._before, _ = link(operations.wires, operations.offsets, operations.n_all)
        reach = graph.distance[graph.distance < FAR]
        patience = float(reach.max(initial=1)) + 20.0
        self._settings = np.array([AHEAD, patience, AHEAD_SHARE, FADING, DECAY, PRICE, 0.0])

    def run(self, start: Integers, *, seed: int, backwards: bool = False, record: bool = False) -> Pass:
        """Make one pass from the placement `start` (qubit of each wire, shape (n,)), which is left as it is."""
        position = start.astype(np.int32)
        g, o = self.graph, self.operations
        # Any odd constant keeps the generator's state away from zero.
        state = np.uint64((seed * 0x9E3779B97F4A7C15 + 0x1234567) % 2**64 | 1)
        swaps, _, cost, events = sweep(
            o.wires,
            o.offsets,
            self._owner,
            self._before if backwards else self._after,
            o.coupled,
            o.n_all,
            g.starts,
            g.neighbours,
            g.distance,
            _NO_WEIGHT,
            position,
            self._settings,
            state,
            record,
        )
        return Pass(position, int(swaps), float(cost), events)


def run_pass(graph: Graph, operations: Operations, start: Integers, *, seed: int = 0) -> Pass:
    """Make one recorded pass forwards; see `Router`."""
    return Router(graph, operations).run(start, seed=seed, record=True)


@dataclass(frozen=True, eq=False, slots=True)
class Routing:
    """A routed circuit.

    Attributes
    ----------
    initial, final : ndarray of int32, shape (n,)
        Qubit of each wire at the two ends.
    events : ndarray of int64
        In time order: operations as numbered, and ``-1 - k`` for the swap ``swaps[k]``.
    swaps : ndarray of int32, shape (S, 2)
    """

    initial: Integers
    final: Integers
    events: NDArray[np.int64]
    swaps: Integers


def route(graph: Graph, operations: Operations, initial: Integers, *, seed: int = 0) -> Routing:
    """Insert swaps from the placement `initial` on.

    Parameters
    ----------
    graph : Graph
    operations : Operations
    initial : ndarray of int32, shape (n,)
        Qubit of each wire, a permutation; the two wires of a coupled operation lie in one component.
    seed : int
        For ties.

    Returns
    -------
    Routing
        Every operation once, in the source's order along every wire.
    """
    # What is on one wire only does not constrain the swaps: it is woven in afterwards.
    joint = np.flatnonzero((np.diff(operations.offsets) > 1) | (operations.coupled == 1))
    made = run_pass(graph, operations.take(joint), initial, seed=seed)
    order = made.events.copy()
    order[order >= 0] = joint[order[order >= 0]]
    woven = weave(order, operations.wires, operations.offsets, operations.n_all)
    is_swap = woven < 0
    swaps = np.stack(np.divmod(-1 - woven[is_swap], graph.n), axis=1).astype(np.int32)
    woven[is_swap] = -1 - np.arange(len(swaps))
    return Routing(initial.astype(np.int32), made.end, woven, swaps)
