"""Circuits whose least depth, or least number of swaps, is known because they are built around it.

Both kinds are lists of pairs of wires in time order, made on a hidden placement. Known depths follow Tan and Cong, IEEE
Trans. Comput. (2020); known numbers of swaps use the argument of arXiv:2502.08839, that what does not embed needs one.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import networkx as nx
import numpy as np


@dataclass(frozen=True, eq=False)
class Planted:
    """A circuit with its hidden optimum.

    Attributes
    ----------
    graph : nx.Graph
        The device; as many wires as sites.
    pairs : ndarray of int32, shape (gates, 2)
    initial : ndarray of int32, shape (n,)
        Site of each wire at the start of the hidden schedule.
    events : list of int or (int, int)
        The hidden schedule: numbers of gates, and the sites of swaps.
    swaps, depth : int
        Of the hidden schedule; `optimum` says which of them is least possible.
    sections : list of list of int
        Gates that prove the bound: for swaps, each list is a star of too many wires, all of it before the next; for
        depth, one list, a chain of dependent gates.
    """

    graph: nx.Graph
    pairs: np.ndarray
    initial: np.ndarray
    events: list[int | tuple[int, int]]
    swaps: int
    depth: int
    sections: list[list[int]] = field(default_factory=list)


def planted_depth(graph: nx.Graph, depth: int, *, density: float, seed: int) -> Planted:
    """Plant gates cycle by cycle on a hidden placement.

    `density` is the share of a largest possible cycle that is filled, beyond a chain of gates.

    The least depth is `depth` and the least number of swaps 0. Proof: the hidden placement runs every cycle's gates on
    edges, at once, so `depth` cycles and no swap suffice. The chain has a gate in every cycle that shares a wire with
    the chain's gate of the cycle before, so no schedule that keeps the order of gates along every wire is shorter.
    """
    rng = np.random.default_rng(seed)
    n = len(graph)
    edges = np.array(graph.edges)
    wire_at = rng.permutation(n)
    initial = np.empty(n, dtype=np.int32)
    initial[wire_at] = np.arange(n)
    most = len(nx.maximal_matching(graph))
    site = int(edges[rng.integers(len(edges)), 0])
    pairs: list[tuple[int, int]] = []
    chain: list[int] = []
    for _ in range(depth):
        # The chain walks on from either end of its last gate.
        other = int(rng.choice(list(graph[site])))
        cycle = [(site, other)]
        busy = {site, other}
        site = (site, other)[rng.integers(2)]
        for a, b in edges[rng.permutation(len(edges))].tolist():
            if len(cycle) >= max(1.0, density * most):
                break
            if not {a, b} & busy:
                busy |= {a, b}
                cycle.append((a, b))
        order = rng.permutation(len(cycle))
        chain.append(len(pairs) + int(np.flatnonzero(order == 0)[0]))
        for k in order:
            a, b = cycle[k] if rng.random() < 0.5 else cycle[k][::-1]
            pairs.append((wire_at[a], wire_at[b]))
    made = np.array(pairs, dtype=np.int32)
    return Planted(graph, made, initial, list(range(len(made))), 0, depth, [chain])


def planted_swaps(graph: nx.Graph, swaps: int, *, filler: int, seed: int) -> Planted:
    """Plant swaps that no routing can do without, with `filler` more gates in each section.

    The least number of swaps is `swaps`. Proof: a section is a star, one wire that meets more different wires than any
    site has neighbours. No placement puts them all beside it, so in every routing the placement changes, by at least
    one swap, after the star's first gate and before its last. All gates of a star share a wire, so they have an
    order; a path of gates leads from the last of one to the first of the next, each sharing a wire with the one
    before, so the stars follow one another in every routing that keeps the order along every wire, and a swap inside
    one is not inside another. The hidden schedule has one swap in each section, and every gate on an edge.

    Raises
    ------
    ValueError
        No pair of neighbours has together enough neighbours, as on a complete graph.
    """
    rng = np.random.default_rng(seed)
    n = len(graph)
    most = max(degree for _, degree in graph.degree)
    sides = [
        (p, q)
        for a, b in graph.edges
        for p, q in ((a, b), (b, a))
        if len((set(graph[p]) | set(graph[q])) - {p, q}) >= most and set(graph[q]) - set(graph[p]) - {p}
    ]
    if not sides:
        raise ValueError("one swap never gives a wire more partners than a site has neighbours here")
    edges = np.array(graph.edges)
    wire_at = rng.permutation(n)
    initial = np.empty(n, dtype=np.int32)
    initial[wire_at] = np.arange(n)
    pairs: list[tuple[int, int]] = []
    events: list[int | tuple[int, int]] = []
    sections: list[list[int]] = []

    def gate(a: int, b: int) -> int:
        a, b = (a, b) if rng.random() < 0.5 else (b, a)
        pairs.append((int(wire_at[a]), int(wire_at[b])))
        events.append(len(pairs) - 1)
        return len(pairs) - 1

    def fill(count: int) -> None:
        for a, b in edges[rng.integers(len(edges), size=count)].tolist():
            gate(a, b)

    at = -1
    for _ in range(swaps):
        p, q = sides[rng.integers(len(sides))]
        if at >= 0:
            path = nx.shortest_path(graph, at, p)
            for a, b in zip(path[:-1], path[1:], strict=True):
                gate(a, b)
        before, after = set(graph[p]), set(graph[q]) - {p}
        needed = most + 1
        # Wires met before the swap: at least one that cannot be met after it.
        only_before, both = before - after - {q}, (before & after) | {q}
        late = after - before
        extra = rng.permutation(sorted(only_before)).tolist()
        first = [*extra, *(x for x in sorted(both) if rng.random() < 0.5)]
        second = [*rng.permutation(sorted(late)).tolist(), *(x for x in sorted(both) if x not in first)]
        rng.shuffle(first)
        rng.shuffle(second)
        # What stands on q before the swap stands on p after it.
        assert len(first) + len(second) >= needed
        shares = np.bincount(rng.integers(len(first) + len(second), size=filler), minlength=len(first) + len(second))
        star = []
        for k, x in enumerate(first):
            fill(shares[k])
            star.append(gate(p, x))
        events.append((p, q))
        wire_at[[p, q]] = wire_at[[q, p]]
        for k, x in enumerate(second):
            fill(shares[len(first) + k])
            star.append(gate(q, p if x == q else x))
        sections.append(star)
        at = q
    depth = _depth(pairs, n)
    return Planted(graph, np.array(pairs, dtype=np.int32), initial, events, swaps, depth, sections)


def _depth(pairs: list[tuple[int, int]], n: int) -> int:
    free = [0] * n
    for a, b in pairs:
        free[a] = free[b] = max(free[a], free[b]) + 1
    return max(free, default=0)
