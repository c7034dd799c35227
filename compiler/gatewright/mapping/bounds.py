"""Prove how many swaps a circuit needs at least, whatever the routing.

A set of gates whose wires no placement puts on edges needs a swap between its first gate and its last (the argument of
arXiv:2502.08839). Here it is applied along the order of the circuit: if every gate of a set comes after s swaps and the
set does not embed, whatever has to come after all of it comes after s + 1. One walk over the circuit finds these levels
for all gates; counting and distances give further bounds, and the largest holds.

A bound never comes from a search that was cut short: what is not shown to be impossible is taken to be possible.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.mapping.routing import FAR, Graph

__all__ = ["CROSS", "GATE", "TIE", "Order", "SwapBound", "swap_bound"]

#: Kinds of entries of an `Order`.
GATE, TIE, CROSS = 0, 1, 2

#: Steps of the searches for embeddings: for each, for the set-up of each, and for a whole walk. A step costs some
#: ten microseconds. Without any left, a walk goes on looking for wires with too many partners.
STEPS, SET_UP, ALL_STEPS = 400, 10, 10_000
#: Entries that are looked at, and those up to which the circuit is also walked backwards.
ENTRIES, BACKWARDS = 15_000, 8_000
#: Gates in a chunk of the counting bound, as a multiple of the number of edges.
CHUNKS = (2, 6, 20)
#: Placements that are remembered, as they often show at once that a set embeds.
WITNESSES = 12
#: Wires up to which the best pairing is found for the bound from distances; beyond, a greedy one.
MATCHED = 60


@dataclass(frozen=True, eq=False, slots=True)
class Order:
    """What a routing must respect: the gates on two wires in time order, and which of them may change places.

    Attributes
    ----------
    n : int
        Number of wires.
    wires : ndarray of int32, shape (m, 2)
    kind : ndarray of int8, shape (m,)
        `GATE` must be carried out on an edge. `TIE` keeps the order of what is on its wires, and needs no edge.
        `CROSS` exchanges the content of its wires: a routing may do so by renaming, or as a gate.
    runs : ndarray of int64, shape (m, 2)
        What follows itself along each wire with the same number may change places. Numbers rise in time; they go
        along with the content of a wire through a `CROSS`, whose own numbers mean nothing.
    """

    n: int
    wires: NDArray[np.int32]
    kind: NDArray[np.int8]
    runs: NDArray[np.int64]

    @classmethod
    def strict(cls, pairs: NDArray[np.int32], n: int) -> Order:
        """Return the order of gates that all keep their places along their wires."""
        m = len(pairs)
        runs = np.repeat(np.arange(m)[:, None], 2, axis=1)
        return cls(n, np.asarray(pairs, dtype=np.int32).reshape(-1, 2), np.zeros(m, dtype=np.int8), runs)

    def first(self, count: int) -> Order:
        """Return the order of the first entries."""
        return Order(self.n, self.wires[:count], self.kind[:count], self.runs[:count])

    def reversed(self) -> Order:
        """Return the order of the circuit run backwards."""
        last = self.runs.max(initial=0)
        return Order(self.n, self.wires[::-1], self.kind[::-1], last - self.runs[::-1])


@dataclass(frozen=True, slots=True)
class SwapBound:
    """At least so many swaps, and the reason."""

    swaps: int
    how: str


def swap_bound(
    graph: Graph,
    order: Order,
    *,
    active: NDArray[np.bool_],
    fixed: Sequence[int] | None = None,
) -> SwapBound:
    """Bound the number of swaps of every routing of a circuit.

    Parameters
    ----------
    graph : Graph
    order : Order
    active : ndarray of bool, shape (graph.n,)
        Qubits in service.
    fixed : sequence of int, length order.n, optional
        Qubit on which each wire starts, -1 where that is free. Without it, every start is allowed.

    Returns
    -------
    SwapBound
        It counts every exchange of two neighbours' contents; where a routing carries out gates over a distance, each
        counts once for every qubit in between. A function of its arguments alone.

    Examples
    --------
    >>> from gatewright.mapping.routing import make_graph
    >>> line = make_graph([(0, 1), (1, 2)], 3)
    >>> triangle = Order.strict(np.array([(0, 1), (1, 2), (0, 2)]), 3)
    >>> swap_bound(line, triangle, active=np.ones(3, bool)).swaps
    1
    """
    start = np.full(order.n, -1, dtype=np.int64) if fixed is None else np.asarray(fixed, dtype=np.int64)
    pinned = bool((start >= 0).any())
    of_part = f" (of the first {ENTRIES} two-qubit operations alone)" if len(order.wires) > ENTRIES else ""
    order = order.first(ENTRIES)
    # A routing may carry out these exchanges by renaming: each then stands for one change of the placement.
    free_crossings = _inner_crossings(order)
    reduced = f", less {free_crossings} exchanges that the circuit asks for itself" if free_crossings else ""
    reduced += of_part
    found = [SwapBound(0, "nothing shows that a swap is needed")]
    levels = _Walk(graph, order, active, start, ALL_STEPS).run()
    if not pinned and levels and len(order.wires) <= BACKWARDS:
        # Run backwards, other gates come first; the start is then the end, so this holds for free starts only.
        levels = max(levels, _Walk(graph, order.reversed(), active, start, ALL_STEPS).run())
    found.append(SwapBound(levels - free_crossings, EMBEDDED + reduced))
    found.append(SwapBound(_counted(graph, order, active, free_crossings), COUNTED + reduced))
    if pinned and not free_crossings:
        found.append(SwapBound(_moved(graph, order, start), MOVED + reduced))
    return max(found, key=lambda bound: bound.swaps)


EMBEDDED = "that many sets of gates one after the other, none of which embeds in the coupling graph"
COUNTED = (
    "sets of gates one after the other: pairs that meet in each, or partners of one wire, less the most that are "
    "adjacent at once, by the most that one swap makes adjacent anew"
)
MOVED = "distances to go from the given placement for pairs without a wire in common, two steps a swap"


def _inner_crossings(order: Order) -> int:
    """Count the exchanges that have a gate before them and one after: only these can stand in for a swap."""
    crossings = np.flatnonzero(order.kind == CROSS)
    if not len(crossings):
        return 0
    gates = np.flatnonzero(order.kind == GATE)
    if not len(gates):
        return 0
    return int(np.count_nonzero((crossings > gates[0]) & (crossings < gates[-1])))


def _counted(graph: Graph, order: Order, active: NDArray[np.bool_], crossings: int) -> int:
    """Compare the pairs that meet with what placements and swaps offer, in chunks that follow one another."""
    gates = order.kind == GATE
    pairs = order.wires[gates]
    edges = graph.edges[active[graph.edges].all(axis=1)]
    degree = np.bincount(edges.ravel(), minlength=graph.n)
    gain = int((degree[edges].sum(axis=1) - 2).max(initial=0))
    if not len(pairs) or not gain:
        return 0
    # Pairs adjacent at once: no more than the edges, nor than the largest degrees of so many qubits give.
    wires = len(np.unique(pairs))
    at_once = min(len(edges), int(np.sort(degree)[::-1][:wires].sum()) // 2)
    most = int(degree.max())
    codes = np.full(len(order.kind), -1, dtype=np.int64)
    codes[gates] = pairs.min(axis=1).astype(np.int64) * order.n + pairs.max(axis=1)

    def needed(of_entries: NDArray[np.int64]) -> int:
        distinct = np.unique(of_entries)
        distinct = distinct[distinct >= 0]
        by_pairs = -(-max(len(distinct) - at_once, 0) // gain)
        # A wire that moves meets the neighbours of its new place, but for the wire that it has moved past.
        partners = np.bincount(np.concatenate(np.divmod(distinct, order.n)), minlength=order.n)
        by_star = -(-max(int(partners.max(initial=0)) - most, 0) // max(most - 1, 1))
        return max(by_pairs, by_star)

    best = needed(codes)
    if not best:
        return 0
    for multiple in CHUNKS:
        size = multiple * len(edges)
        if size >= len(pairs):
            break
        best = max(best, sum(needed(codes[chunk]) for chunk in _chunks(order, size)))
    # An exchange by renaming may bring new neighbours to both wires at once.
    return max(best - crossings * -(-2 * most // min(gain, max(most - 1, 1))), 0)


def _chunks(order: Order, size: int) -> list[list[int]]:
    """Cut sets of `size` gates, all of each before all of the next; what lies between is left out."""
    everything = (1 << order.n) - 1
    chunks: list[list[int]] = [[]]
    # The wires whose last gate of the chunk before is known to come first; all, before the first chunk.
    seen, open_seen, run_of = [everything] * order.n, [everything] * order.n, [-1] * order.n
    current: list[int] = []
    ends = [False] * order.n
    rows = zip(order.wires.tolist(), order.kind.tolist(), order.runs.tolist(), strict=True)
    for entry, ((a, b), kind, (run_a, run_b)) in enumerate(rows):
        if kind == CROSS:
            for values in (seen, open_seen, run_of):
                values[a], values[b] = values[b], values[a]
            continue
        for wire, run in ((a, run_a), (b, run_b)):
            if run_of[wire] != run:
                run_of[wire] = run
                seen[wire] = open_seen[wire]
        both = seen[a] | seen[b]
        open_seen[a] |= both
        open_seen[b] |= both
        if kind == GATE and both == everything:
            current.append(entry)
            ends[a] = ends[b] = True
            if len(current) == size:
                chunks.append(current)
                current = []
                # Wires without a gate in the chunk have nothing to wait for; open runs may still change places.
                idle = sum(1 << w for w in range(order.n) if not ends[w])
                for w in range(order.n):
                    seen[w] = idle
                    open_seen[w] = idle | (1 << w if ends[w] else 0)
                ends = [False] * order.n
    chunks.append(current)
    return chunks


def _moved(graph: Graph, order: Order, start: NDArray[np.int64]) -> int:
    """Pair the wires so that their distances to go add up most; a swap moves two wires by one step."""
    gates = order.wires[order.kind == GATE]
    gates = gates[(start[gates] >= 0).all(axis=1)]
    if not len(gates):
        return 0
    low, high = gates.min(axis=1).astype(np.int64), gates.max(axis=1)
    low, high = np.divmod(np.unique(low * order.n + high), order.n)
    togo = graph.distance[start[low], start[high]].astype(np.int64) - 1
    far = (togo > 0) & (togo < FAR - 1)
    low, high, togo = low[far], high[far], togo[far]
    if not len(togo):
        return 0
    if len(np.unique(np.concatenate([low, high]))) <= MATCHED:
        import networkx as nx

        links = nx.Graph()
        links.add_weighted_edges_from(zip(low.tolist(), high.tolist(), togo.tolist(), strict=True))
        paired = sum(int(links.edges[pair]["weight"]) for pair in nx.max_weight_matching(links))
    else:
        taken: set[int] = set()
        paired = 0
        for k in np.argsort(-togo, kind="stable").tolist():
            pair = {int(low[k]), int(high[k])}
            if not pair & taken:
                taken |= pair
                paired += int(togo[k])
    # One swap alone brings two wires nearer by one step, so the farthest pair counts in full.
    return max(-(-paired // 2), int(togo.max()))


class _Walk:
    """One walk over an order, giving each gate the number of swaps known to come before it.

    Every wire carries the level of its last run and the set of gates, as a bit for each distinct pair, that come before
    its end and have that level. A gate joins what its two wires carry; if the joint set does not embed, one swap more
    has come before the gate is done, and it starts a new set.
    """

    def __init__(
        self, graph: Graph, order: Order, active: NDArray[np.bool_], start: NDArray[np.int64], steps: int
    ) -> None:
        self._order = order
        self._start = start.tolist()
        self._pinned = bool((start >= 0).any())
        self._measured = self._pinned and not (order.kind == CROSS).any()
        self._distance = graph.distance
        self._host = _Host(graph, active)
        self._steps = steps
        gates = order.wires[order.kind == GATE]
        codes = gates.min(axis=1).astype(np.int64) * order.n + gates.max(axis=1)
        distinct, number = np.unique(codes, return_inverse=True)
        self._pairs: list[tuple[int, int]] = [divmod(code, order.n) for code in distinct.tolist()]
        self._number = {pair: k for k, pair in enumerate(self._pairs)}
        self._bits = [0] * len(order.wires)
        for entry, k in zip(np.flatnonzero(order.kind == GATE).tolist(), number.tolist(), strict=True):
            self._bits[entry] = 1 << k
        self._known: dict[tuple[bool, int], bool] = {}
        self._of_wire = [0] * order.n
        for k, (a, b) in enumerate(self._pairs):
            self._of_wire[a] |= 1 << k
            self._of_wire[b] |= 1 << k
        self._most = max((len(around) for around in self._host.around), default=0)
        self._witnesses: list[int] = []

    def run(self) -> int:
        """Return the number of swaps that come before the end."""
        n, order = self._order.n, self._order
        level, carried = [0] * n, [0] * n  # before the run that is open on each wire
        open_level, open_set, run_of = [0] * n, [0] * n, [-1] * n
        entries = zip(order.wires.tolist(), order.kind.tolist(), order.runs.tolist(), self._bits, strict=True)
        for (a, b), kind, (run_a, run_b), bit in entries:
            if kind == CROSS:
                for values in (level, carried, open_level, open_set, run_of):
                    values[a], values[b] = values[b], values[a]
                continue
            for wire, run in ((a, run_a), (b, run_b)):
                if run_of[wire] != run:
                    run_of[wire] = run
                    at, gates = open_level[wire], open_set[wire]
                    if gates != carried[wire] and self._fails(at, gates):
                        at, gates = at + 1, 0
                    level[wire] = open_level[wire] = at
                    carried[wire] = open_set[wire] = gates
            at = max(level[a], level[b])
            gates = (carried[a] if level[a] == at else 0) | (carried[b] if level[b] == at else 0) | bit
            if bit and self._measured:
                far = self._togo(a, b)
                if far > at:
                    at, gates = far, bit
            if gates not in (carried[a], carried[b]) and (self._crowded(gates, a, b) or self._fails(at, gates)):
                at, gates = at + 1, bit
            for wire in (a, b):
                if at > open_level[wire]:
                    open_level[wire], open_set[wire] = at, gates
                elif at == open_level[wire]:
                    open_set[wire] |= gates
        top = max(open_level, default=0)
        last = 0
        for wire in range(n):
            if open_level[wire] == top:
                last |= open_set[wire]
        return top + self._fails(top, last)

    def _togo(self, a: int, b: int) -> int:
        """Return how many swaps it takes at least to bring two wires together."""
        p, q = self._start[a], self._start[b]
        if p >= 0 and q >= 0 and self._distance[p, q] < FAR:
            return int(self._distance[p, q]) - 1
        return 0

    def _crowded(self, gates: int, a: int, b: int) -> bool:
        """Say whether one of two wires has more partners than any qubit has neighbours."""
        of_wire, most = self._of_wire, self._most
        return (gates & of_wire[a]).bit_count() > most or (gates & of_wire[b]).bit_count() > most

    def _fails(self, level: int, gates: int) -> bool:
        """Say whether no placement has all these pairs on edges; before the first swap, only the given one is there."""
        first = level == 0 and self._pinned
        if not first:
            for k, mask in enumerate(self._witnesses):
                if gates & ~mask == 0:
                    if k:
                        self._witnesses.insert(0, self._witnesses.pop(k))
                    return False
        if self._steps <= 0:
            return False
        key = (first, gates)
        if key not in self._known:
            self._known[key] = self._searched(gates, first)
        return self._known[key]

    def _searched(self, gates: int, first: bool) -> bool:
        pairs = []
        rest = gates
        while rest:
            low = rest & -rest
            pairs.append(self._pairs[low.bit_length() - 1])
            rest ^= low
        places: dict[int, int] = {}
        if first:
            places = {w: self._start[w] for pair in pairs for w in pair if self._start[w] >= 0}
            taken = {p for p in self._start if p >= 0}
        else:
            taken = set()
        verdict, steps = self._host.search(pairs, places, taken - set(places.values()), min(STEPS, self._steps))
        self._steps -= steps + SET_UP
        if verdict is not None and not first:
            self._remember(verdict)
        return verdict is None and steps >= 0 and not self._host.gave_up

    def _remember(self, places: dict[int, int]) -> None:
        """Keep a placement, as the set of all pairs that are adjacent in it."""
        wire_at = {p: w for w, p in places.items()}
        mask = 0
        for p, a in wire_at.items():
            for q in self._host.around[p]:
                b = wire_at.get(q, -1)
                if b > a:
                    mask |= 1 << self._number.get((a, b), len(self._pairs))
        self._witnesses.insert(0, mask)
        del self._witnesses[WITNESSES:]


class _Host:
    """A coupling graph as bit sets, for complete searches with a limit."""

    def __init__(self, graph: Graph, active: NDArray[np.bool_]) -> None:
        edges = graph.edges[active[graph.edges].all(axis=1)]
        self.edges: list[tuple[int, int]] = [(p, q) for p, q in edges.tolist()]
        self.sites: list[int] = np.flatnonzero(active).tolist()
        self._beside = [0] * graph.n
        self.around: list[list[int]] = [[] for _ in range(graph.n)]
        for p, q in self.edges:
            self._beside[p] |= 1 << q
            self._beside[q] |= 1 << p
            self.around[p].append(q)
            self.around[q].append(p)
        self._room = [sorted((len(self.around[q]) for q in self.around[p]), reverse=True) for p in range(graph.n)]
        self._fitting: dict[tuple[int, ...], int] = {}
        self._even = _two_coloured(self.edges)
        #: Whether the last search was cut short.
        self.gave_up = False

    def search(
        self, pairs: list[tuple[int, int]], places: dict[int, int], taken: set[int], limit: int
    ) -> tuple[dict[int, int] | None, int]:
        """Return a placement with all pairs on edges, None if there is none or the limit came first; and the steps."""
        self.gave_up = False
        near: dict[int, list[int]] = {}
        for a, b in pairs:
            near.setdefault(a, []).append(b)
            near.setdefault(b, []).append(a)
        domain = {}
        for w, others in near.items():
            domain[w] = self._fit(tuple(sorted((len(near[x]) for x in others), reverse=True)))
            if w in places:
                domain[w] &= 1 << places[w]
            if not domain[w]:
                return None, 0
        if self._even and not _two_coloured(pairs):
            return None, 0
        used = 0
        for p in taken:
            used |= 1 << p
        self._left = limit
        found = self._extend(near, domain, used, {})
        return found, limit - self._left

    def _fit(self, degrees: tuple[int, ...]) -> int:
        """Return the sites whose neighbours have at least these degrees, largest to largest."""
        if degrees not in self._fitting:
            mask = 0
            for p in self.sites:
                room = self._room[p]
                if len(room) >= len(degrees) and all(r >= d for r, d in zip(room, degrees, strict=False)):
                    mask |= 1 << p
            self._fitting[degrees] = mask
        return self._fitting[degrees]

    def _extend(
        self, near: dict[int, list[int]], domain: dict[int, int], used: int, done: dict[int, int]
    ) -> dict[int, int] | None:
        """Place the wire with the fewest sites left (Haralick and Elliott, Artif. Intell. 14, 263 (1980))."""
        if not domain:
            return done
        if self._left <= 0:
            self.gave_up = True
            return None
        self._left -= 1
        wire, fewest = -1, 1 << 30
        for w, mask in domain.items():
            count = (mask & ~used).bit_count() * 64 - len(near[w])
            if count < fewest:
                wire, fewest = w, count
        mask = domain[wire] & ~used
        while mask:
            low = mask & -mask
            mask ^= low
            p = low.bit_length() - 1
            narrowed = {w: m for w, m in domain.items() if w != wire}
            dead = False
            for x in near[wire]:
                if x in narrowed:
                    narrowed[x] &= self._beside[p]
                    if not narrowed[x] & ~(used | low):
                        dead = True
                        break
            if not dead:
                found = self._extend(near, narrowed, used | low, {**done, wire: p})
                if found is not None or self.gave_up:
                    return found
        return None


def _two_coloured(pairs: Sequence[tuple[int, int]]) -> bool:
    """Say whether a graph has no odd cycle."""
    near: dict[int, list[int]] = {}
    for a, b in pairs:
        near.setdefault(a, []).append(b)
        near.setdefault(b, []).append(a)
    colour: dict[int, int] = {}
    for root in near:
        if root in colour:
            continue
        colour[root] = 0
        stack = [root]
        while stack:
            a = stack.pop()
            for b in near[a]:
                if b not in colour:
                    colour[b] = 1 - colour[a]
                    stack.append(b)
                elif colour[b] == colour[a]:
                    return False
    return True
