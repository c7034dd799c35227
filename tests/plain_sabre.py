"""The baseline: SABRE as published (Li, Ding, Xie, ASPLOS 2019, arXiv:1809.02573), from many random starts.

Front layer and an extended set of 20 gates at weight 0.5, decay 0.001 reset every five swaps or when a gate runs; from
each random start a pass forwards, one backwards, one forwards, and the fewest swaps win. It shares no code with what it
is compared with.
"""

from __future__ import annotations

import time
from dataclasses import dataclass, replace

import networkx as nx
import numpy as np
from numba import njit

from gatewright.circuit import Builder, Circuit
from gatewright.stages.draft import Draft

EXTENDED, WEIGHT, DECAY, RESET = 20, 0.5, 0.001, 5


@njit(
    "int64(int32[:, ::1], int32[:, ::1], int32[::1], int32[::1], int32[:, ::1], int32[::1], int64[::1], int64)",
    cache=True,
    nogil=True,
)
def sabre_pass(pairs, following, starts, neighbours, distance, position, events, seed):  # type: ignore[no-untyped-def]
    """Run one pass; `position` ends as the final placement. Return the number of events, or -1 if they are too many.

    Row g of `following` has the next gates on the two wires of gate g, -1 where there are none; an event is the number
    of a gate, or ``-1 - (p * n + q)`` for a swap.
    """
    n, m = len(position), len(pairs)
    occupant = np.empty(n, np.int32)
    for w in range(n):
        occupant[position[w]] = w
    needs = np.zeros(m, np.int32)
    for g in range(m):
        for j in range(2):
            if following[g, j] >= 0:
                needs[following[g, j]] += 1
    front = np.empty(n, np.int32)
    ready = np.empty(m + 1, np.int32)
    extended = np.empty(EXTENDED, np.int32)
    queue = np.empty(m + 1, np.int32)
    stamp = np.full(m, -1, np.int64)
    decay = np.ones(n)
    involved = np.zeros(n, np.uint8)
    n_front = n_ready = n_events = n_extended = swaps = idle = 0
    for g in range(m):
        if needs[g] == 0:
            ready[n_ready] = g
            n_ready += 1
    state = np.uint64(seed * 2 + 1)
    done = 0
    while True:
        ran = False
        kept = 0
        for k in range(n_front):  # what a swap has made possible
            g = front[k]
            if distance[position[pairs[g, 0]], position[pairs[g, 1]]] == 1:
                ready[n_ready] = g
                n_ready += 1
            else:
                front[kept] = g
                kept += 1
        n_front = kept
        while n_ready > 0:
            n_ready -= 1
            g = ready[n_ready]
            if distance[position[pairs[g, 0]], position[pairs[g, 1]]] != 1:
                front[n_front] = g
                n_front += 1
                continue
            ran = True
            done += 1
            events[n_events] = g
            n_events += 1
            for j in range(2):
                h = following[g, j]
                if h >= 0:
                    needs[h] -= 1
                    if needs[h] == 0:
                        ready[n_ready] = h
                        n_ready += 1
        if n_front == 0:
            return n_events
        if n_events + 2 * n >= len(events):
            return -1
        if ran or swaps == 0:
            decay[:] = 1.0
            idle = 0
            n_extended = head = tail = 0
            for k in range(n_front):
                queue[tail] = front[k]
                tail += 1
            while head < tail and n_extended < EXTENDED:
                g = queue[head]
                head += 1
                for j in range(2):
                    h = following[g, j]
                    if h >= 0 and stamp[h] != done and n_extended < EXTENDED:
                        stamp[h] = done
                        extended[n_extended] = h
                        n_extended += 1
                        queue[tail] = h
                        tail += 1
        best = 1e300
        ties = best_p = best_q = 0
        if idle > 10 * n:  # the paper says nothing of endless loops: lead the first gate home
            best_p = position[pairs[front[0], 0]]
            home = position[pairs[front[0], 1]]
            for i in range(starts[best_p], starts[best_p + 1]):
                if distance[neighbours[i], home] < distance[best_p, home]:
                    best_q = neighbours[i]
        else:
            for k in range(n_front):
                involved[position[pairs[front[k], 0]]] = 1
                involved[position[pairs[front[k], 1]]] = 1
            for p in range(n):
                if involved[p] == 0:
                    continue
                for i in range(starts[p], starts[p + 1]):
                    q = neighbours[i]
                    if involved[q] == 1 and q < p:
                        continue
                    u, v = occupant[p], occupant[q]
                    position[u] = q
                    position[v] = p
                    near = far = 0
                    for k in range(n_front):
                        g = front[k]
                        near += distance[position[pairs[g, 0]], position[pairs[g, 1]]]
                    for k in range(n_extended):
                        g = extended[k]
                        far += distance[position[pairs[g, 0]], position[pairs[g, 1]]]
                    position[u] = p
                    position[v] = q
                    score = near / n_front
                    if n_extended > 0:
                        score += WEIGHT * far / n_extended
                    score *= max(decay[p], decay[q])
                    if score < best - 1e-12:
                        best, best_p, best_q, ties = score, p, q, 1
                    elif score <= best + 1e-12:
                        ties += 1
                        state ^= state >> np.uint64(12)
                        state ^= state << np.uint64(25)
                        state ^= state >> np.uint64(27)
                        if np.int64((state * np.uint64(0x2545F4914F6CDD1D)) >> np.uint64(33)) % ties == 0:
                            best_p, best_q = p, q
            for k in range(n_front):
                involved[position[pairs[front[k], 0]]] = 0
                involved[position[pairs[front[k], 1]]] = 0
        u, v = occupant[best_p], occupant[best_q]
        occupant[best_p], occupant[best_q] = v, u
        position[u], position[v] = best_q, best_p
        decay[best_p] += DECAY
        decay[best_q] += DECAY
        events[n_events] = -1 - (np.int64(best_p) * n + best_q)
        n_events += 1
        swaps += 1
        idle += 1
        if idle % RESET == 0:
            decay[:] = 1.0


@dataclass(frozen=True, eq=False)
class Baseline:
    """What the baseline found: placement, events (gates, and -1 - (p n + q) for swaps), and the time it took."""

    initial: np.ndarray
    events: np.ndarray
    swaps: int
    seconds: float


def following_gates(pairs: np.ndarray, n: int) -> np.ndarray:
    following = np.full((len(pairs), 2), -1, dtype=np.int32)
    last: list[tuple[int, int] | None] = [None] * n
    for g, pair in enumerate(pairs.tolist()):
        for j, wire in enumerate(pair):
            if last[wire] is not None:
                following[last[wire]] = g
            last[wire] = (g, j)
    return following


def sabre(graph: nx.Graph, pairs: np.ndarray, *, restarts: int, seed: int = 0) -> Baseline:
    """Route `pairs` of wires (as many as sites) from the best of random starts."""
    n = len(graph)
    begun = time.perf_counter()
    pairs = np.ascontiguousarray(pairs, dtype=np.int32)
    neighbours = [sorted(graph[p]) for p in range(n)]
    starts = np.concatenate([[0], np.cumsum([len(x) for x in neighbours])]).astype(np.int32)
    flat = np.array([q for x in neighbours for q in x], dtype=np.int32)
    distance = np.full((n, n), n, dtype=np.int32)
    for p, row in nx.all_pairs_shortest_path_length(graph):
        distance[p, list(row)] = list(row.values())
    back = np.ascontiguousarray(pairs[::-1])
    ahead, behind = following_gates(pairs, n), following_gates(back, n)
    events = np.empty((len(pairs) + 2 * n + 10) * (int(distance.max()) + 4), dtype=np.int64)
    rng = np.random.default_rng(seed)
    best: tuple[int, np.ndarray, np.ndarray] | None = None
    for trial in range(restarts):
        position = rng.permutation(n).astype(np.int32)
        start = position
        for k, (of, order) in enumerate(((pairs, ahead), (back, behind), (pairs, ahead))):
            start = position.copy()
            count = sabre_pass(of, order, starts, flat, distance, position, events, (seed << 20) + 3 * trial + k)
            if count < 0:
                break
        if count >= 0 and (best is None or count < best[0]):
            best = (count, start, events[:count].copy())
    assert best is not None
    return Baseline(best[1], best[2], best[0] - len(pairs), time.perf_counter() - begun)


def stages(graph: nx.Graph, *, restarts: int, seed: int = 0) -> tuple:
    """Return stages that place and route by the baseline, to stand in the chain of `gatewright.compile`."""
    found: list[tuple[Baseline, np.ndarray]] = []

    def place(draft: Draft) -> Draft:
        circuit = draft.circuit
        rows = np.flatnonzero(circuit.is_unitary & (circuit.widths == 2))
        pairs = circuit.qubits[circuit.offsets[rows][:, None] + np.arange(2)]
        made = sabre(graph, pairs, restarts=restarts, seed=seed)
        found[:] = [(made, rows)]
        return replace(draft, initial=made.initial)

    def route(draft: Draft) -> Draft:
        made, rows = found[0]
        circuit, n = draft.circuit, len(graph)
        order = _woven(circuit, made, rows, n)
        position = made.initial.copy()
        builder = Builder(n, circuit.n_bits)
        origin = []
        for event in order:
            if event < 0:
                p, q = divmod(-1 - event, n)
                position[np.isin(position, (p, q))] = position[np.isin(position, (p, q))][::-1]
                builder.gate("swap", p, q)
                origin.append(-1)
                continue
            operation = circuit.operation(event)
            sites = [int(position[w]) for w in operation.qubits]
            if operation.name == "unitary":
                builder.unitary(operation.matrix, *sites)
            elif operation.name == "barrier":
                builder.barrier(*sites)
            else:
                builder.gate(operation.name, *sites, parameters=operation.parameters)
            origin.append(event)
        routed = builder.build()
        return replace(draft, circuit=routed, origin=np.array(origin), final=position, swaps=made.swaps)

    return place, route


def _woven(circuit: Circuit, made: Baseline, rows: np.ndarray, n: int) -> list[int]:
    """Put the other operations in: each right before the next two-qubit gate of its wire, as late as possible."""
    lines: list[list[int]] = [[] for _ in range(n)]
    for k in range(len(circuit)):
        for w in circuit.qubits_of(k):
            lines[w].append(k)
    cursor = [0] * n
    order: list[int] = []

    def upto(k: int) -> None:
        stack = [k]
        while stack:
            g = stack[-1]
            wanted = next((lines[w][cursor[w]] for w in circuit.qubits_of(g) if lines[w][cursor[w]] != g), g)
            if wanted != g:
                stack.append(wanted)
                continue
            stack.pop()
            order.append(g)
            for w in circuit.qubits_of(g):
                cursor[w] += 1

    for event in made.events.tolist():
        if event < 0:
            order.append(event)
        else:
            upto(int(rows[event]))
    for w in range(n):
        while cursor[w] < len(lines[w]):
            upto(lines[w][-1])
    return order
