"""Find the least number of swaps, or of entanglers, for small circuits, and prove it.

A* (Hart, Nilsson, Raphael, IEEE Trans. Syst. Sci. Cybern. 4, 100 (1968)) over what is done and where the wires are. A
gate that can run is run at once: that never costs a swap. The estimate adds up the distances still to go for pairs
without a wire in common, two steps a swap, or takes the largest. A state is dropped if another with the same places, no
more swaps and all of its gates done has been met.

For entanglers a swap right behind a gate on the same pair of qubits merges with it, so a gate is done in one of two
ways, with its wires exchanged or not, and may be left for later.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from heapq import heappop, heappush
from itertools import permutations
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.errors import UnsupportedError
from gatewright.mapping.bounds import CROSS, GATE, Order
from gatewright.mapping.routing import Graph

__all__ = ["STATES", "GaveUpError", "Optimum", "fewest_entanglers", "fewest_swaps"]

#: States that a search may visit: about half a minute.
STATES = 1_000_000

Places = tuple[int, ...]
_Key = tuple[Places, int]
_Edge = tuple[int, int]


class GaveUpError(UnsupportedError):
    """The search took too many states; `least` are needed at least, as far as it came."""

    def __init__(self, least: int, states: int, *, of: str = "swaps") -> None:
        super().__init__(
            f"the search for the fewest {of} was given up",
            required=f"at most {states} states",
            found=f"at least {least} {of} are needed",
            hint="leave it to the heuristic search and its lower bound",
        )
        self.least = least


@dataclass(frozen=True, eq=False, slots=True)
class Optimum:
    """A routing with the fewest swaps, or entanglers.

    Attributes
    ----------
    swaps : int
    entanglers : int
        0 where they were not asked for.
    initial : dict of int to int
        Qubit of each wire that has a gate.
    events : list of int or (int, int)
        In time order: entries of the order that are gates, by number, and swaps of two qubits.
    """

    swaps: int
    initial: dict[int, int]
    events: list[int | tuple[int, int]]
    entanglers: int = 0


def fewest_swaps(
    graph: Graph,
    order: Order,
    *,
    active: NDArray[np.bool_] | None = None,
    fixed: Sequence[int] | None = None,
    at_most: int | None = None,
    states: int = STATES,
) -> Optimum | None:
    """Search for a routing with the fewest swaps.

    Parameters
    ----------
    graph : Graph
    order : Order
        Gates, and what keeps their order; no exchanges of the circuit's own.
    active : ndarray of bool, shape (graph.n,), optional
        Qubits in service; all by default.
    fixed : sequence of int, length order.n, optional
        Qubit on which each wire starts, -1 where that is free, as it is by default.
    at_most : int, optional
        Swaps of a routing that is known: only a better one is looked for.
    states : int
        The search is given up after so many.

    Returns
    -------
    Optimum or None
        None where there is no routing, or none with fewer than `at_most` + 1 swaps: that is a proof as well.

    Raises
    ------
    GaveUpError
        Too many states.
    UnsupportedError
        The circuit has exchanges of its own.

    Examples
    --------
    >>> from gatewright.mapping.routing import make_graph
    >>> line = make_graph([(0, 1), (1, 2), (2, 3)], 4)
    >>> everyone = Order.strict(np.array([(a, b) for b in range(4) for a in range(b)]), 4)
    >>> fewest_swaps(line, everyone).swaps
    3
    """
    search = _Search(graph, order, np.ones(graph.n, dtype=bool) if active is None else active, fixed)
    return search.run(graph.n**2 * len(order.wires) if at_most is None else at_most, states)


def fewest_entanglers(
    graph: Graph,
    order: Order,
    *,
    costs: Sequence[tuple[int, int]] | None = None,
    swap_cost: int = 3,
    active: NDArray[np.bool_] | None = None,
    fixed: Sequence[int] | None = None,
    states: int = STATES,
) -> Optimum:
    """Search for a routing with the fewest entanglers.

    Parameters
    ----------
    graph, order, active, fixed, states
        As `fewest_swaps` takes them.
    costs : sequence of (int, int), one for each gate of `order`, optional
        Entanglers of the gate alone, and of the gate with its wires exchanged by a swap right behind it; by default
        those of a CNOT among CNOTs, 1 and 2.
    swap_cost : int
        Entanglers of any other swap.

    Raises
    ------
    GaveUpError, UnsupportedError
        As `fewest_swaps` does, or there is no routing.

    Examples
    --------
    >>> from gatewright.mapping.routing import make_graph
    >>> line = make_graph([(0, 1), (1, 2)], 3)
    >>> triangle = Order.strict(np.array([(0, 1), (1, 2), (0, 2)]), 3)
    >>> fewest_entanglers(line, triangle).entanglers
    4
    """
    search = _Search(graph, order, np.ones(graph.n, dtype=bool) if active is None else active, fixed)
    return search.cheapest([(1, 2)] * len(order.wires) if costs is None else list(costs), swap_cost, states)


class _Search:
    """Wires that have a gate, renumbered, on the qubits in service."""

    def __init__(self, graph: Graph, order: Order, active: NDArray[np.bool_], fixed: Sequence[int] | None) -> None:
        if (order.kind == CROSS).any():
            raise UnsupportedError("the exact search does not take exchanges of the circuit's own")
        rows = np.flatnonzero(order.kind == GATE)
        self._rows: list[int] = rows.tolist()
        self._wires: list[int] = np.unique(order.wires[rows]).tolist()
        number = {w: k for k, w in enumerate(self._wires)}
        self._pairs = [(number[a], number[b]) for a, b in order.wires[rows].tolist()]
        self._needs = _needs(order, rows)
        self._all = (1 << len(rows)) - 1
        self._distance: list[list[int]] = graph.distance.tolist()
        self._sites: list[int] = np.flatnonzero(active).tolist()
        self._edges: list[tuple[int, int]] = [(p, q) for p, q in graph.edges.tolist() if active[p] and active[q]]
        self._fixed = [-1 if fixed is None else int(fixed[w]) for w in self._wires]
        self._kept = {int(p) for p in fixed if p >= 0} if fixed is not None else set()
        self._by_pair: dict[tuple[int, int], int] = {}
        for k, (a, b) in enumerate(self._pairs):
            pair = (a, b) if a < b else (b, a)
            self._by_pair[pair] = self._by_pair.get(pair, 0) | 1 << k
        self._of_wire = [0] * len(self._wires)
        for k, (a, b) in enumerate(self._pairs):
            self._of_wire[a] |= 1 << k
            self._of_wire[b] |= 1 << k

    def run(self, at_most: int, states: int) -> Optimum | None:
        """Visit states in the order of their estimates, those with more swaps made first."""
        if not self._pairs:
            return Optimum(0, {}, [])
        buckets: dict[int, list[list[_State]]] = {}
        met: dict[Places, list[tuple[int, int]]] = {}

        def push(places: Places, done: int, swaps: int, parent: _State | None, edge: tuple[int, int] | None) -> None:
            done = self._advance(places, done)
            rest = self._togo(places, done)
            if swaps + rest > at_most or self._dominated(met, places, done, swaps):
                return
            levels = buckets.setdefault(swaps + rest, [])
            while len(levels) <= swaps:
                levels.append([])
            levels[swaps].append(_State(places, done, swaps, parent, edge))

        visited = 0
        for places in self._starts():
            visited += 1
            if visited > states:
                raise GaveUpError(0, states)
            push(places, 0, 0, None, None)
        while buckets:
            least = min(buckets)
            levels = buckets[least]
            while levels and not levels[-1]:
                levels.pop()
            if not levels:
                del buckets[least]
                continue
            state = levels[-1].pop()
            if state.done == self._all:
                return self._told(state)
            if (state.swaps, state.done) not in met[state.places]:
                continue  # a better one has come since
            visited += 1
            if visited > states:
                raise GaveUpError(least, states)
            wire_at = {p: w for w, p in enumerate(state.places)}
            for p, q in self._edges:
                u, v = wire_at.get(p, -1), wire_at.get(q, -1)
                # At least one of the two must have something left to do.
                if not any(w >= 0 and self._of_wire[w] & ~state.done for w in (u, v)):
                    continue
                push(_moved(state.places, p, q), state.done, state.swaps + 1, state, (p, q))
        return None

    def cheapest(self, costs: list[tuple[int, int]], swap_cost: int, states: int) -> Optimum:
        """Visit states in the order of their estimates; doing a gate is priced by what it costs beyond the least."""
        base = sum(min(pair) for pair in costs[: len(self._pairs)])
        extra = [(alone - min(alone, crossed), crossed - min(alone, crossed)) for alone, crossed in costs]
        # No swap is cheaper than this.
        unit = min([swap_cost, *(crossed for _, crossed in extra)])
        best: dict[_Key, int] = {}
        came: dict[_Key, tuple[_Key, int, _Edge | None]] = {}
        queue: list[tuple[int, int, Places, int]] = []

        def push(
            places: Places,
            done: int,
            price: int,
            before: tuple[Places, int] | None,
            gate: int,
            edge: tuple[int, int] | None,
        ) -> None:
            key = (places, done)
            if price < best.get(key, 1 << 30):
                best[key] = price
                if before is not None:
                    came[key] = (before, gate, edge)
                rest = self._togo(places, done) if unit else 0
                heappush(queue, (price + unit * rest, -price, places, done))

        visited = 0
        for places in self._starts():
            visited += 1
            if visited > states:
                raise GaveUpError(base, states, of="entanglers")
            push(places, 0, 0, None, -1, None)
        while queue:
            estimate, price, places, done = heappop(queue)
            price = -price
            key = (places, done)
            if price > best[key]:
                continue
            if done == self._all:
                return self._retold(key, came, base + price)
            visited += 1
            if visited > states:
                raise GaveUpError(base + estimate, states, of="entanglers")
            left = self._all & ~done
            for k, (a, b) in enumerate(self._pairs):
                p, q = places[a], places[b]
                if left >> k & 1 and not self._needs[k] & left and self._distance[p][q] == 1:
                    alone, crossed = extra[k]
                    push(places, done | 1 << k, price + alone, key, k, None)
                    push(_moved(places, p, q), done | 1 << k, price + crossed, key, k, (p, q))
            for p, q in self._edges:
                moved = _moved(places, p, q)
                if moved != places:
                    push(moved, done, price + swap_cost, key, -1, (p, q))
        raise UnsupportedError("there is no routing", required="a path between wires that meet")

    def _retold(self, key: tuple[Places, int], came: dict[tuple[Places, int], Any], entanglers: int) -> Optimum:
        events: list[int | tuple[int, int]] = []
        while key in came:
            key, gate, edge = came[key]
            if edge is not None:
                events.append(edge)
            if gate >= 0:
                events.append(self._rows[gate])
        swaps = sum(isinstance(event, tuple) for event in events)
        return Optimum(swaps, dict(zip(self._wires, key[0], strict=True)), events[::-1], entanglers)

    def _starts(self) -> Iterator[Places]:
        """Yield every start that respects what is fixed."""
        free = [w for w, p in enumerate(self._fixed) if p < 0]
        sites = [p for p in self._sites if p not in self._kept]
        for chosen in permutations(sites, len(free)):
            places = list(self._fixed)
            for w, p in zip(free, chosen, strict=True):
                places[w] = p
            yield tuple(places)

    def _advance(self, places: Places, done: int) -> int:
        """Run every gate that can run."""
        left = self._all & ~done
        again = True
        while again:
            again = False
            rest = left
            while rest:
                low = rest & -rest
                rest ^= low
                k = low.bit_length() - 1
                if self._needs[k] & left == 0:
                    a, b = self._pairs[k]
                    if self._distance[places[a]][places[b]] == 1:
                        left ^= low
                        again = True
        return self._all & ~left

    def _togo(self, places: Places, done: int) -> int:
        """Return a number of swaps that what is left needs at least."""
        left = self._all & ~done
        gaps = []
        for (a, b), gates in self._by_pair.items():
            if gates & left:
                gap = self._distance[places[a]][places[b]] - 1
                if gap > 0:
                    gaps.append((gap, a, b))
        if not gaps:
            return 1 if left else 0
        gaps.sort(reverse=True)
        largest, total, taken = gaps[0][0], 0, 0
        for gap, a, b in gaps:
            if not taken & (1 << a | 1 << b):
                taken |= 1 << a | 1 << b
                total += gap
        return max(largest, -(-total // 2))

    @staticmethod
    def _dominated(met: dict[Places, list[tuple[int, int]]], places: Places, done: int, swaps: int) -> bool:
        """Say whether a state as good has been met at these places; if not, keep this one."""
        known = met.get(places)
        if known is None:
            met[places] = [(swaps, done)]
            return False
        for s, d in known:
            if s <= swaps and done & ~d == 0:
                return True
        known[:] = [(s, d) for s, d in known if not (swaps <= s and d & ~done == 0)]
        known.append((swaps, done))
        return False

    def _told(self, state: _State) -> Optimum:
        path: list[_State] = []
        at: _State | None = state
        while at is not None:
            path.append(at)
            at = at.parent
        path.reverse()
        events: list[int | tuple[int, int]] = []
        done = 0
        for step in path:
            if step.edge is not None:
                events.append(step.edge)
            fresh = step.done & ~done
            # Gates are numbered in time order, and what can run at once may run in that order.
            while fresh:
                low = fresh & -fresh
                fresh ^= low
                events.append(self._rows[low.bit_length() - 1])
            done = step.done
        initial = dict(zip(self._wires, path[0].places, strict=True))
        return Optimum(state.swaps, initial, events)


def _moved(places: Places, p: int, q: int) -> Places:
    """Return the places after a swap of two qubits."""
    return tuple(q if x == p else p if x == q else x for x in places)


@dataclass(frozen=True, eq=False, slots=True)
class _State:
    places: Places
    done: int
    swaps: int
    parent: _State | None
    edge: tuple[int, int] | None


def _needs(order: Order, rows: NDArray[np.int64]) -> list[int]:
    """Return for each gate the set, as bits, of gates that must be done before it."""
    number = {row: k for k, row in enumerate(rows.tolist())}
    before: list[set[int]] = [set() for _ in range(order.n)]
    run: list[set[int]] = [set() for _ in range(order.n)]
    run_of = [-1] * order.n
    needs = []
    for row, (wires, runs) in enumerate(zip(order.wires.tolist(), order.runs.tolist(), strict=True)):
        for wire, of in zip(wires, runs, strict=True):
            if run_of[wire] != of:
                run_of[wire] = of
                before[wire] |= run[wire]
                run[wire] = set()
        mine = set().union(*(before[wire] for wire in wires))
        if row in number:
            needs.append(sum(1 << k for k in mine))
            mine = mine | {number[row]}
        for wire in wires:
            run[wire] |= mine
    return needs
