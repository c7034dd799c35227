"""Route a circuit on a coupling graph: insert swaps so that every two-qubit gate meets an edge.

Passes in the manner of SABRE (Li, Ding, Xie, ASPLOS 2019, arXiv:1809.02573); the compiled loops are in `_kernels`. Two
things differ from the paper: gates ahead count by their depth below the blocked ones, fading geometrically, and a swap
is priced by the entanglers it costs, since one beside a gate on the same pair of qubits merges with it.

Plain arrays in and out: wires 0 to N − 1 are the qubits, as many as the device has, and further ones (classical bits)
only keep operations in order.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components, shortest_path

from gatewright.errors import CircuitError, DeviceError, DisconnectedError, InputError
from gatewright.mapping._kernels import link, sweep, weave

__all__ = ["Graph", "Operations", "Pass", "Router", "Routing", "make_graph", "make_operations", "route", "run_pass"]

Integers = NDArray[np.int32]

#: Weight of a gate by its depth below the blocked ones, which count 1. Set by trial on random, QFT, adder, planted and
#: regular-graph circuits on lines, grids and hexagons, as are the next two.
AHEAD = np.concatenate([[1.0], 0.25 * 0.6 ** np.arange(5)])
#: What an entangler spent on a swap weighs against one step of a blocked gate.
PRICE = 0.15
#: Penalty on qubits already swapped since the last gate ran, the paper's decay: enough to break ties.
DECAY = 0.001
#: Distance of qubits without a path.
FAR = 30_000


@dataclass(frozen=True, eq=False, slots=True)
class Graph:
    """A coupling graph, without directions.

    Attributes
    ----------
    n : int
    edges : ndarray of int32, shape (E, 2)
        Each edge once, the smaller qubit first, sorted.
    starts, neighbours : ndarray of int32
        Neighbours of p are ``neighbours[starts[p]:starts[p + 1]]``.
    twin : ndarray of int32
        For each entry of `neighbours`, the same edge seen from its other end.
    distance : ndarray of int16, shape (n, n)
        `FAR` where there is no path.
    component : ndarray of int32, shape (n,)
    weight : ndarray of float32
        Cost of an entangler on each entry of `neighbours`; 1 on average.
    uneven : bool
        Whether the weights differ.
    """

    n: int
    edges: Integers
    starts: Integers
    neighbours: Integers
    twin: Integers
    distance: NDArray[np.int16]
    component: Integers
    weight: NDArray[np.float32]
    uneven: bool


def make_graph(
    edges: ArrayLike, n: int, *, edge_cost: ArrayLike | None = None, qubit_cost: ArrayLike | None = None
) -> Graph:
    """Return the graph of undirected `edges` on `n` qubits.

    Parameters
    ----------
    edges : array_like of int, shape (E, 2)
        In either order; an edge may come twice, its first cost holds. Leave out those of qubits out of service.
    n : int
        At most `FAR`.
    edge_cost, qubit_cost : array_like of float, shapes (E,) and (n,), optional
        What a two-qubit gate on each edge costs, for instance −log of its fidelity, and what goes with each of its
        qubits, in the same unit. Only ratios matter. Without them entanglers cost the same everywhere.

    Returns
    -------
    Graph

    Raises
    ------
    DeviceError
        An edge names a qubit that does not exist, or one qubit twice; a cost is negative or not finite.

    Examples
    --------
    >>> graph = make_graph([(0, 1), (2, 1)], 4)
    >>> graph.edges.tolist(), graph.component.tolist(), int(graph.distance[0, 2])
    ([[0, 1], [1, 2]], [0, 0, 0, 1], 2)
    """
    pairs = np.asarray(edges, dtype=np.int64).reshape(-1, 2)
    wrong = (pairs < 0).any(axis=1) | (pairs >= n).any(axis=1) | (pairs[:, 0] == pairs[:, 1])
    if not 0 < n <= FAR or wrong.any():
        found = f"{n} qubits" if not wrong.any() else "{} – {}".format(*pairs[np.flatnonzero(wrong)[0]])
        raise DeviceError("the coupling graph is malformed", required=f"pairs of 1 to {FAR} qubits", found=found)
    codes, kept = np.unique(pairs.min(axis=1) * n + pairs.max(axis=1), return_index=True)
    once = np.stack(np.divmod(codes, n), axis=1).astype(np.int32)
    cost = _costs(edge_cost, len(pairs), "edge")[kept] + _costs(qubit_cost, n, "qubit")[once].sum(axis=1)
    mean = cost.sum() / max(len(cost), 1)
    uneven = bool(len(cost)) and bool(np.ptp(cost) > 1e-9 * mean)
    weight = cost / mean if uneven else np.ones(len(cost))

    source, target = np.concatenate([once, once[:, ::-1]]).T
    order = np.lexsort((target, source))
    rank = np.argsort(order)
    matrix = csr_array((np.ones(len(order)), (source, target)), shape=(n, n))
    if 2 * len(once) == n * (n - 1):
        distance = 1.0 - np.eye(n)  # shortest paths would take cubic time
    else:
        distance = shortest_path(matrix, unweighted=True)
    return Graph(
        n=n,
        edges=once,
        starts=np.searchsorted(source[order], np.arange(n + 1)).astype(np.int32),
        neighbours=target[order].astype(np.int32),
        twin=np.roll(rank, len(once))[order].astype(np.int32),
        distance=np.where(np.isinf(distance), FAR, distance).astype(np.int16),
        component=connected_components(matrix, directed=False)[1].astype(np.int32),
        weight=np.tile(weight, 2)[order].astype(np.float32),
        uneven=uneven,
    )


def _costs(values: ArrayLike | None, count: int, of: str) -> NDArray[np.float64]:
    if values is None:
        return np.zeros(count)
    cost = np.asarray(values, dtype=np.float64)
    if cost.shape != (count,) or not np.isfinite(cost).all() or (cost < 0).any():
        raise DeviceError(f"the {of} costs are malformed", required=f"{count} finite numbers, none negative")
    return cost


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

    @property
    def joint(self) -> NDArray[np.int64]:
        """Numbers of the operations on two or more wires, which alone constrain the swaps."""
        return np.flatnonzero(np.diff(self.offsets) > 1)

    def take(self, rows: NDArray[np.int64]) -> Operations:
        """Return the operations numbered `rows`."""
        lengths = np.diff(self.offsets)[rows]
        offsets = np.concatenate([[0], np.cumsum(lengths)]).astype(np.int32)
        at = np.arange(offsets[-1]) + np.repeat(self.offsets[:-1][rows] - offsets[:-1], lengths)
        return Operations(np.ascontiguousarray(self.wires[at]), offsets, self.coupled[rows], self.n_all)


def make_operations(wires: ArrayLike, offsets: ArrayLike, coupled: ArrayLike, n_all: int) -> Operations:
    """Return `Operations` with the types that the compiled loops want.

    Raises
    ------
    CircuitError
        The arrays do not fit together, or a coupled operation has fewer than two wires.
    """
    # Compiled signatures hold for writable arrays only, so read-only ones are copied.
    made = Operations(
        np.require(wires, np.int32, ["C", "W"]),
        np.require(offsets, np.int32, ["C", "W"]),
        np.require(coupled, np.uint8, ["C", "W"]),
        n_all,
    )
    lengths = np.diff(made.offsets)
    if (
        made.offsets.shape != (len(made) + 1,)
        or made.offsets[0] != 0
        or made.offsets[-1] != len(made.wires)
        or (lengths < 2 * (made.coupled == 1)).any()
        or (len(made.wires) and not 0 <= made.wires.min() <= made.wires.max() < n_all)
    ):
        raise CircuitError("the arrays of operations do not fit together", required=f"wires 0 to {n_all - 1}")
    return made


@dataclass(frozen=True, eq=False, slots=True)
class Pass:
    """Outcome of one pass.

    Attributes
    ----------
    end : ndarray of int32, shape (n,)
        Qubit of each wire after the pass.
    swaps : int
    cost : float
        Entanglers, weighted, roughly: one a gate and a swap beside a gate on the same pair, three any other swap.
    events : ndarray of int64
        Coupled operations as numbered, and ``-1 - (p * n + q)`` for a swap of qubits p and q; empty unless recorded.
    """

    end: Integers
    swaps: int
    cost: float
    events: NDArray[np.int64]


class Router:
    """Operations prepared for passes in both directions; those on one wire only may be left out.

    Raises
    ------
    CircuitError
        A coupled operation is on a wire that is no qubit.
    """

    def __init__(self, graph: Graph, operations: Operations) -> None:
        self.graph = graph
        self.operations = operations
        pairs = operations.pairs
        if len(pairs) and pairs.max() >= graph.n or operations.n_all < graph.n:
            raise CircuitError("the circuit does not fit the device", required=f"coupled wires below {graph.n}")
        lengths = np.bincount(operations.wires, minlength=operations.n_all)
        ends = np.cumsum(lengths + 2)
        self._first = (ends - lengths - 1).astype(np.int32)
        self._last = (ends - 2).astype(np.int32)
        self._line = np.full(ends[-1], -1, dtype=np.int32)
        self._mates = np.full(ends[-1], -2, dtype=np.int32)
        self._cross = np.zeros(ends[-1], dtype=np.int32)
        #: Earliest layer of each operation.
        self.layer = np.zeros(len(operations), dtype=np.int32)
        o = operations
        link(o.wires, o.offsets, o.coupled, self._first.copy(), self._line, self._mates, self._cross, self.layer)
        # Without progress for longer than this, a pass is led out of a livelock.
        self._patience = 10 + 2 * graph.n + 4 * int(graph.distance[graph.distance < FAR].max(initial=1))

    def run(self, start: Integers, *, seed: int, backwards: bool = False, record: bool = False) -> Pass:
        """Make one pass from the placement `start` (qubit of each wire, shape (n,)), which is left as it is."""
        position = start.astype(np.int32)
        g, o = self.graph, self.operations
        # Odd, and so never zero, where the generator would stay.
        state = np.uint64((seed * 0x9E3779B97F4A7C15 + 0x1234567) % 2**64 | 1)
        swaps, _, cost, events = sweep(
            o.wires,
            o.offsets,
            o.coupled,
            -1 if backwards else 1,
            (self._last if backwards else self._first).copy(),
            self._line,
            self._mates,
            self._cross,
            g.starts,
            g.neighbours,
            g.twin,
            g.distance,
            g.weight,
            position,
            AHEAD,
            PRICE,
            DECAY,
            self._patience,
            np.zeros(len(o), dtype=np.int32),
            np.empty((10, o.n_all), dtype=np.int32),
            np.zeros(len(g.neighbours)),
            np.empty(2 * len(o) if record else 0, dtype=np.int64),
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


def route(graph: Graph, operations: Operations, initial: ArrayLike, *, seed: int = 0) -> Routing:
    """Insert swaps from the placement `initial` on.

    Operations that are not coupled come as late as their successors allow, so that a swap stands right beside the gate
    it merges with. The time is linear in gates and swaps.

    Parameters
    ----------
    graph : Graph
    operations : Operations
    initial : array_like of int, shape (n,)
        Qubit of each wire, a permutation.
    seed : int
        For ties; the same seed gives the same routing, in any thread.

    Returns
    -------
    Routing
        Every operation once, in the source's order along every wire.

    Raises
    ------
    InputError
        `initial` is not a permutation of the qubits.
    DisconnectedError
        The wires of a coupled operation have no path between them.

    Examples
    --------
    >>> graph = make_graph([(0, 1), (1, 2)], 3)
    >>> triangle = make_operations([0, 1, 1, 2, 0, 2], [0, 2, 4, 6], [1, 1, 1], 3)
    >>> routing = route(graph, triangle, [0, 1, 2])
    >>> len(routing.swaps), int((routing.events >= 0).sum())
    (1, 3)
    """
    start = np.array(initial, dtype=np.int32)
    if start.shape != (graph.n,) or not np.array_equal(np.sort(start), np.arange(graph.n)):
        raise InputError("the start placement is malformed", required=f"each qubit from 0 to {graph.n - 1} once")
    joint = operations.joint
    router = Router(graph, operations.take(joint))
    pairs = operations.pairs
    at = graph.component[start[pairs]]
    apart = np.flatnonzero(at[:, 0] != at[:, 1])
    if apart.size:
        a, b = pairs[apart[0]].tolist()
        raise DisconnectedError(
            f"qubits {a} and {b} of the circuit cannot meet",
            required="a path between their places on the device",
            found=f"none from physical qubit {start[a]} to {start[b]}",
            hint="try another placement, or leave it to the compiler",
        )
    made = router.run(start, seed=seed, record=True)
    # What is on one wire only, or on bits, is woven in afterwards.
    is_swap = made.events < 0
    swaps = np.stack(np.divmod(-1 - made.events[is_swap], graph.n), axis=1).astype(np.int32)
    order = np.empty_like(made.events)
    order[is_swap] = -1 - np.arange(len(swaps))
    order[~is_swap] = joint[made.events[~is_swap]]
    m, o = len(operations), operations
    line = np.repeat(np.arange(m, dtype=np.int32), np.diff(o.offsets))[np.argsort(o.wires, kind="stable")]
    counts = np.bincount(o.wires, minlength=o.n_all)
    woven = np.empty(m + len(swaps), dtype=np.int64)
    done, stack = np.zeros(m, dtype=np.uint8), np.empty(m + 1, dtype=np.int32)
    weave(order, o.wires, o.offsets, line, (np.cumsum(counts) - counts).astype(np.int32), done, stack, woven)
    return Routing(start, made.end, woven, swaps)
