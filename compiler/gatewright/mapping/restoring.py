"""Swaps that bring wires back to given places: token swapping, where some tokens do not matter.

Swaps that bring a wire nearer and none away come first; where there is none left, the ends of a spanning tree are
served one after another, each by the shortest way through what is left of the tree, which always comes to an end
(Miltzow, Narins, Okamoto, Rote, Thomas, Uno, ESA 2016, arXiv:1602.05150, compare both ideas). A heuristic: the number
of swaps is not claimed to be the least.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gatewright.errors import DisconnectedError
from gatewright.mapping.routing import Graph

__all__ = ["restoring_swaps"]

Integers = NDArray[np.int32]


def restoring_swaps(graph: Graph, now: Integers, wanted: Integers) -> list[tuple[int, int]]:
    """Return swaps on edges of the graph, in order, that bring wires from one placement to another.

    Parameters
    ----------
    graph : Graph
    now, wanted : ndarray of int, shape (wires,)
        Qubit of each wire that matters; further qubits hold wires that may end anywhere.

    Raises
    ------
    DisconnectedError
        A wire would have to go to another component.

    Examples
    --------
    >>> from gatewright.mapping.routing import make_graph
    >>> restoring_swaps(make_graph([(0, 1), (1, 2)], 3), np.array([2]), np.array([0]))
    [(1, 2), (0, 1)]
    """
    apart = np.flatnonzero(graph.component[now] != graph.component[wanted])
    if len(apart):
        wire = int(apart[0])
        raise DisconnectedError(
            "a wire cannot be brought to the place that it has to end on",
            required=f"a path from qubit {now[wire]} to qubit {wanted[wire]}",
        )
    # Where the wire on each qubit has to go; a wire that does not matter is at home everywhere.
    goal: dict[int, int] = {int(p): int(q) for p, q in zip(now, wanted, strict=True)}
    swaps: list[tuple[int, int]] = []

    def swap(p: int, q: int) -> None:
        swaps.append((min(p, q), max(p, q)))
        moved = {q: goal.pop(p, -1), p: goal.pop(q, -1)}
        goal.update({at: to for at, to in moved.items() if to >= 0})

    def gain(p: int, q: int) -> int:
        there, back = goal.get(p), goal.get(q)
        total = 0
        for to, old, new in ((there, p, q), (back, q, p)):
            if to is not None:
                total += int(graph.distance[old, to]) - int(graph.distance[new, to])
        return total

    def neighbours(p: int) -> list[int]:
        found: list[int] = graph.neighbours[graph.starts[p] : graph.starts[p + 1]].tolist()
        return found

    while True:
        away = [p for p, q in sorted(goal.items()) if p != q]
        best = max(((gain(p, q), -p, -q) for p in away for q in neighbours(p)), default=(0, 0, 0))
        if best[0] <= 0:
            break
        swap(-best[1], -best[2])
    if any(p != q for p, q in goal.items()):
        _serve_ends(graph, goal, swap)
    return swaps


def _serve_ends(graph: Graph, goal: dict[int, int], swap: object) -> None:
    """Bring each wire home to an end of what is left of a spanning forest, and take that end away."""
    # Seldom needed, and it takes a quarter of a second to load.
    import networkx as nx

    assert callable(swap)
    forest = nx.Graph()
    forest.add_nodes_from(range(graph.n))
    whole = nx.Graph(graph.edges.tolist())
    for part in nx.connected_components(whole):
        forest.add_edges_from(nx.bfs_tree(whole, min(part)).edges)
    ends = [p for p in forest if forest.degree(p) <= 1]
    while ends:
        end = ends.pop()
        if end not in forest:
            continue
        at = next((p for p, q in goal.items() if q == end), -1)
        if at < 0:
            # No wire ends here: one that does not matter has to, the nearest of them. There is one in this tree.
            steps = nx.single_source_shortest_path_length(forest, end)
            at = min((p for p in steps if p not in goal), key=steps.__getitem__)
        path = nx.shortest_path(forest, at, end)
        for p, q in zip(path, path[1:], strict=False):
            swap(p, q)
        beside = list(forest[end])
        forest.remove_node(end)
        ends.extend(p for p in beside if forest.degree(p) <= 1)
