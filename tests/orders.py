"""Orders of gates for the tests of bounds and optima, and a plain search that shares no code with either."""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from itertools import permutations

import networkx as nx
import numpy as np

from gatewright.mapping.bounds import GATE, Order


def everyone(n: int) -> Order:
    """All pairs once, in any order."""
    pairs = np.array([(a, b) for b in range(n) for a in range(b)], dtype=np.int32)
    return Order(n, pairs, np.zeros(len(pairs), dtype=np.int8), np.zeros((len(pairs), 2), dtype=np.int64))


def random_order(n: int, gates: int, seed: int, *, commuting: float = 0.0, ties: float = 0.0) -> Order:
    """Random pairs, some of which may change places with their neighbours, and some that only keep order."""
    rng = np.random.default_rng(seed)
    wires = np.array([rng.permutation(n)[:2] for _ in range(gates)], dtype=np.int32).reshape(-1, 2)
    kind = (rng.random(gates) < ties).astype(np.int8)
    runs = np.zeros((gates, 2), dtype=np.int64)
    run_of, tied = [-1] * n, [False] * n
    for k, pair in enumerate(wires.tolist()):
        for j, wire in enumerate(pair):
            if run_of[wire] < 0 or kind[k] or tied[wire] or rng.random() >= commuting:
                run_of[wire] = 2 * k + j
            tied[wire] = bool(kind[k])
            runs[k, j] = run_of[wire]
    return Order(n, wires, kind, runs)


def predecessors(order: Order) -> list[set[int]]:
    """What must come before each entry, by definition: an earlier entry in another run of one of its wires."""
    before: list[set[int]] = []
    for k in range(len(order.wires)):
        mine: set[int] = set()
        for j in range(k):
            for a, run in zip(order.wires[k].tolist(), order.runs[k].tolist(), strict=True):
                for b, other in zip(order.wires[j].tolist(), order.runs[j].tolist(), strict=True):
                    if a == b and run != other:
                        mine |= {j} | before[j]
        before.append(mine)
    return before


def least_entanglers(graph: nx.Graph, order: Order, costs: Sequence[tuple[int, int]], swap_cost: int) -> int:
    """Search by price over placements, gates done, and what each site did last: a swap looks back for its gate."""
    before = predecessors(order)
    gates = [k for k in range(len(order.wires)) if order.kind[k] == GATE]
    states = {(places, frozenset(), ()): 0 for places in permutations(range(len(graph)), order.n)}
    queue = [(0, number, state) for number, state in enumerate(states)]
    heapq.heapify(queue)
    pushed = len(queue)
    while True:
        price, _, state = heapq.heappop(queue)
        if price > states[state]:
            continue
        places, done, fresh = state
        if len(done) == len(gates):
            return price
        following = []
        for k in gates:
            if k not in done and all(j in done for j in before[k] if order.kind[j] == GATE):
                p, q = (places[w] for w in order.wires[k].tolist())
                if graph.has_edge(p, q):
                    kept = tuple(f for f in fresh if not {f[0], f[1]} & {p, q})
                    last = tuple(sorted((*kept, (min(p, q), max(p, q), k))))
                    following.append((price + costs[k][0], (places, done | {k}, last)))
        for p, q in graph.edges:
            moved = tuple({p: q, q: p}.get(x, x) for x in places)
            merged = [f for f in fresh if {f[0], f[1]} == {p, q}]
            kept = tuple(f for f in fresh if not {f[0], f[1]} & {p, q})
            paid = costs[merged[0][2]][1] - costs[merged[0][2]][0] if merged else swap_cost
            following.append((price + paid, (moved, done, kept)))
        for paid, found in following:
            if paid < states.get(found, 1 << 30):
                states[found] = paid
                pushed += 1
                heapq.heappush(queue, (paid, pushed, found))


def least_swaps(graph: nx.Graph, order: Order, fixed: Sequence[int] | None = None) -> int:
    """Search breadth first over all placements of all wires; for very small cases."""
    before = predecessors(order)
    gates = [k for k in range(len(order.wires)) if order.kind[k] == GATE]

    def run(places: tuple[int, ...], done: frozenset[int]) -> frozenset[int]:
        again = True
        while again:
            again = False
            for k in gates:
                if k not in done and all(j in done for j in before[k] if order.kind[j] == GATE):
                    a, b = order.wires[k].tolist()
                    if graph.has_edge(places[a], places[b]):
                        done = done | {k}
                        again = True
        return done

    starts = [
        places
        for places in permutations(range(len(graph)), order.n)
        if fixed is None or all(f in (-1, p) for f, p in zip(fixed, places, strict=True))
    ]
    layer = {(places, run(places, frozenset())) for places in starts}
    seen = set(layer)
    swaps = 0
    while not any(len(done) == len(gates) for _, done in layer):
        following = set()
        for places, done in layer:
            for p, q in graph.edges:
                moved = tuple({p: q, q: p}.get(x, x) for x in places)
                state = (moved, run(moved, done))
                if state not in seen:
                    seen.add(state)
                    following.add(state)
        layer = following
        swaps += 1
    return swaps
