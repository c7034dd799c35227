"""Route a circuit on a coupling graph: insert swaps so that every two-qubit gate meets an edge.

Passes in the manner of SABRE (Li, Ding, Xie, ASPLOS 2019, arXiv:1809.02573); the compiled loops are in `_kernels`. Two
things differ from the paper: gates ahead count by their depth below the blocked ones, fading geometrically, and a swap
is priced by the entanglers it costs, since one beside a gate on the same pair of qubits merges with it.

Plain arrays in and out: wires 0 to N − 1 are the qubits, as many as the device has, and further ones (classical bits)
only keep operations in order.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components, shortest_path

from gatewright.errors import CircuitError, DeviceError, DisconnectedError, InputError
from gatewright.mapping._kernels import settle, sweep, weave
from gatewright.mapping._steps import CLOCK, HEAD, LEFT, OCCUPANT, POSITION, ROWS, STALE
from gatewright.mapping.operations import GROUP, Operations, make_operations

__all__ = ["Graph", "Operations", "Pass", "Router", "Routing", "make_graph", "make_operations", "route", "run_pass"]

Integers = NDArray[np.int32]

#: Weight of a gate by its depth below the blocked ones; in the second row, of one that may change places with another.
AHEAD = np.tile(np.concatenate([[1.0], 0.25 * 0.6 ** np.arange(5)]), (2, 1)).astype(np.float32)
#: Of a swap's score: what an entangler weighs against one step of a blocked gate; the penalty on qubits moved since the
#: last gate ran, the paper's decay: enough to break ties; whether the gate is served first whose qubits are free
#: first; what a layer of waiting weighs.
TERMS = (0.15, 0.001, 0.0, 0.0)
#: The same where depth counts.
IN_TIME = (0.15, 0.001, 1.0, 0.0)
#: Of a state in the beam: what a gate done is worth, an entangler costs; levels beyond the first that ends; the weight
#: of time; the weight of a swap when results are compared.
BEAM = (1.35, 0.15, 0.0, 0.0, 1.0)
NO_SCRIPT = np.zeros(0, dtype=np.int64)
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
class Pass:
    """Outcome of one pass.

    Attributes
    ----------
    end : ndarray of int32, shape (n,)
        Qubit of each wire after the pass.
    swaps : int
    cost : float
        Entanglers, weighted by the edges they are on: of each window, as far as the costs of its parts tell.
    depth : float
        Of entanglers.
    events : ndarray of int64
        Coupled operations as numbered, and ``-1 - (p * n + q)`` for a swap of qubits p and q; empty unless recorded.
    """

    end: Integers
    swaps: int
    cost: float
    depth: float
    events: NDArray[np.int64]

    def script(self) -> NDArray[np.int64]:
        """Return the swaps alone, as ``p * n + q``."""
        return np.asarray(-1 - self.events[self.events < 0])


@dataclass(frozen=True, eq=False, slots=True)
class Lines:
    """Operations along their wires, forwards or backwards; see `_steps`."""

    lane: NDArray[np.int32]
    heads: Integers
    wires: Integers
    offsets: Integers
    entries: Integers
    costs: NDArray[np.float32]


def make_lines(operations: Operations, *, backwards: bool = False) -> Lines:
    """Lay the operations out along their wires; those on one wire only may be left out."""
    o, m = operations, len(operations)
    slots = len(o.wires)
    if backwards:
        order = slots - 1 - np.argsort(o.wires[::-1], kind="stable")
    else:
        order = np.argsort(o.wires, kind="stable")
    wire = o.wires[order]
    at = np.arange(slots, dtype=np.int64) + wire
    owner = np.repeat(np.arange(m, dtype=np.int32), np.diff(o.offsets))
    entries = np.empty(slots, dtype=np.int32)
    entries[order] = at
    lane = np.empty((slots + o.n_all, 5), dtype=np.int32)
    lane[:] = (-1, -2, 0, 1 << 30, 0)
    lane[at, 0] = owner[order]
    # The partner of each slot of a gate is the other one of the operation's first two.
    within = np.arange(slots) - o.offsets[:-1][owner]
    pair = (o.coupled[owner] == 1) & (within < 2)
    other = np.where(pair, np.arange(slots) + 1 - 2 * within, 0)
    lane[at, 1] = np.where(pair, o.wires[other] if slots else 0, -1)[order]
    lane[at, 2] = np.where(pair, entries[other] if slots else 0, 0)[order]
    if slots:
        fresh = np.ones(slots, dtype=bool)
        fresh[1:] = (wire[1:] != wire[:-1]) | (np.diff(o.groups[order]) != 0)
        run = np.cumsum(fresh) - 1
        rank = np.arange(slots) - np.flatnonzero(fresh)[run]
        fresh |= rank % GROUP == 0
        run = np.cumsum(fresh) - 1
        lane[at, 3] = run
        begins = at[fresh]
        lane[at, 4] = (begins + np.bincount(run))[run]
    ends = np.cumsum(np.bincount(o.wires, minlength=o.n_all) + 1)
    heads = np.concatenate([[0], ends[:-1]]).astype(np.int32)
    lane[ends - 1, 4] = ends - 1
    tail = np.array([[o.swap_cost, max(o.swap_cost, float(o.costs.max(initial=0.0)))]], dtype=np.float32)
    return Lines(lane, heads, o.wires, o.offsets, entries, np.concatenate([o.costs, tail]))


class Router:
    """Operations prepared for passes in both directions; those on one wire only may be left out.

    Raises
    ------
    CircuitError
        A coupled operation is on a wire that is no qubit.
    """

    def __init__(self, graph: Graph, operations: Operations, *, terms: tuple[float, ...] = TERMS) -> None:
        self.graph = graph
        self.operations = operations
        pairs = operations.pairs
        if len(pairs) and pairs.max() >= graph.n or operations.n_all < graph.n:
            raise CircuitError("the circuit does not fit the device", required=f"coupled wires below {graph.n}")
        self._lines: dict[bool, Lines] = {}
        diameter = int(graph.distance[graph.distance < FAR].max(initial=1))
        self.terms = np.array(terms)
        self.ahead = AHEAD
        self.rise = np.arange(diameter + 2, dtype=np.float32)
        # Without progress for longer than this, a pass is led out of a livelock.
        self._patience = 10 + 2 * graph.n + 4 * diameter
        self.pull = np.zeros(max(len(graph.neighbours), 1))

    def lines(self, backwards: bool) -> Lines:
        """Return the lines of one direction."""
        if backwards not in self._lines:
            self._lines[backwards] = make_lines(self.operations, backwards=backwards)
        return self._lines[backwards]

    def state(self, lines: Lines, start: Integers) -> tuple[Any, ...]:
        """Return the state before the first operation."""
        n, n_all = self.graph.n, self.operations.n_all
        state = np.full((ROWS, n_all), -1, dtype=np.int32)
        state[POSITION, :n] = start
        state[OCCUPANT, start] = np.arange(n)
        state[HEAD] = lines.heads
        state[LEFT] = lines.lane[lines.heads, 4] - lines.heads
        state[STALE] = 0
        return state, np.zeros(n_all, dtype=np.int64), np.zeros((3, n_all)), np.zeros(4, dtype=np.int64)

    def run(
        self,
        start: Integers,
        *,
        seed: int,
        backwards: bool = False,
        record: bool = False,
        script: NDArray[np.int64] = NO_SCRIPT,
    ) -> Pass:
        """Make one pass from the placement `start` (qubit of each wire, shape (n,)), which is left as it is.

        Swaps of the `script`, coded ``p * n + q``, come before those that the pass chooses.
        """
        g, lines = self.graph, self.lines(backwards)
        state, done, tally, counts = self.state(lines, start)
        # Odd, and so never zero, where the generator would stay.
        random = np.uint64((seed * 0x9E3779B97F4A7C15 + 0x1234567) % 2**64 | 1)
        swaps, cost, events = sweep(
            lines.lane,
            lines.wires,
            lines.offsets,
            lines.entries,
            lines.costs,
            g.starts,
            g.neighbours,
            g.twin,
            g.distance,
            g.weight,
            self.ahead,
            self.rise,
            self.terms,
            script,
            self.pull.copy(),
            state,
            done,
            tally,
            counts,
            np.full(g.n + 2, -1, dtype=np.int64),
            self._patience,
            random,
            record,
        )
        end = state[POSITION, : g.n].copy()
        if not record:
            return Pass(end, int(swaps), float(cost), float(tally[CLOCK].max()), events)
        return self._settled(start, end, events, int(swaps), lines)

    def _settled(self, start: Integers, end: Integers, events: NDArray[np.int64], swaps: int, lines: Lines) -> Pass:
        """Put gates beside swaps that they merge with, and count what that costs."""
        g, settled = self.graph, np.empty_like(events)
        state = np.full((4, g.n), -1, dtype=np.int32)
        state[0], state[1, start] = start, np.arange(g.n)
        cost, depth = settle(
            events,
            settled,
            lines.wires,
            lines.offsets,
            self.operations.groups,
            lines.costs,
            g.starts,
            g.neighbours,
            g.weight,
            state,
            np.empty((len(self.operations), 2), dtype=np.int32),
            np.full(len(self.operations), -1, dtype=np.int32),
            np.full(len(events), -1, dtype=np.int32),
            np.zeros((3, g.n)),
        )
        return Pass(end, swaps, float(cost), float(depth), settled)

    def search(
        self,
        starts: list[Integers],
        *,
        width: int,
        limit: int,
        terms: tuple[float, ...] = BEAM,
        backwards: bool = False,
    ) -> tuple[Integers, NDArray[np.int64]] | None:
        """Search by a beam from several starts at once; return the start and the swaps of the best sequence found.

        None if there is none of fewer than `limit` swaps.
        """
        from gatewright.mapping._beam import beam

        g, lines, n_all = self.graph, self.lines(backwards), self.operations.n_all
        room = max(3 * width, len(starts))
        made = [self.state(lines, start) for start in starts]
        states, dones = np.zeros((2, room, ROWS, n_all), dtype=np.int32), np.zeros((2, room, n_all), dtype=np.int64)
        states[:, :, STALE] = 2
        tallies, counters = np.zeros((2, room, 3, n_all)), np.zeros((2, room, 4), dtype=np.int64)
        for k, (state, done, tally, counts) in enumerate(made):
            states[0, k], dones[0, k], tallies[0, k], counters[0, k] = state, done, tally, counts
        fan = 8
        parents, chosen = np.zeros((limit + 1, room), dtype=np.int32), np.zeros((limit + 1, room), dtype=np.int32)
        level, number, _ = beam(
            lines.lane,
            lines.wires,
            lines.offsets,
            lines.entries,
            lines.costs,
            g.starts,
            g.neighbours,
            g.twin,
            g.distance,
            g.weight,
            self.ahead,
            self.rise,
            np.array(terms),
            self.pull.copy(),
            states,
            dones,
            tallies,
            counters,
            NO_SCRIPT,
            parents,
            chosen,
            np.zeros((2, 2 * room)),
            np.zeros((2, room), dtype=np.uint64),
            np.zeros((room, fan), dtype=np.int32),
            np.zeros((room + 1, max(fan, room))),
            np.zeros(1 << (2 * width * (limit + 1)).bit_length(), dtype=np.uint64),
            len(starts),
            width,
        )
        if number < 0:
            return None
        script = np.empty(level, dtype=np.int64)
        while level > 0:
            edge = chosen[level, number]
            script[level - 1] = g.neighbours[g.twin[edge]] * np.int64(g.n) + g.neighbours[edge]
            number = parents[level, number]
            level -= 1
        return starts[number], script


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


def route(
    graph: Graph,
    operations: Operations,
    initial: ArrayLike,
    *,
    seed: int = 0,
    script: NDArray[np.int64] = NO_SCRIPT,
    in_time: bool = False,
) -> Routing:
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
    script : ndarray of int64
        Swaps to make first, in order, coded ``p * n + q``.
    in_time : bool
        Beyond the script, serve the gate whose qubits are free first: for a low depth, and on large devices for speed.

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
    router = Router(graph, operations.take(joint), terms=IN_TIME if in_time else TERMS)
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
    made = router.run(start, seed=seed, record=True, script=script)
    # What is on one wire only, or on bits, is woven in afterwards.
    is_swap = made.events < 0
    swaps = np.stack(np.divmod(-1 - made.events[is_swap], graph.n), axis=1).astype(np.int32)
    order = np.empty_like(made.events)
    order[is_swap] = -1 - np.arange(len(swaps))
    order[~is_swap] = joint[made.events[~is_swap]]
    return Routing(start, made.end, woven(order, operations), swaps)


def woven(order: NDArray[np.int64], operations: Operations) -> NDArray[np.int64]:
    """Add to `order` the operations that it lacks; see `_kernels.weave`."""
    o, m = operations, len(operations)
    slots = len(o.wires)
    by_wire = np.argsort(o.wires, kind="stable")
    line = np.full(slots + o.n_all, -1, dtype=np.int32)
    line[np.arange(slots) + o.wires[by_wire]] = by_wire
    ends = np.cumsum(np.bincount(o.wires, minlength=o.n_all) + 1)
    cursor = np.concatenate([[0], ends[:-1]]).astype(np.int32)
    stack = np.empty(slots + m + 1, dtype=np.int64)
    stack[:slots] = np.repeat(np.arange(m), np.diff(o.offsets))
    events = np.empty(m + np.count_nonzero(order < 0), dtype=np.int64)
    weave(order, o.wires, o.offsets, o.groups, line, cursor, np.zeros(m, dtype=np.uint8), stack, events)
    return events
