"""Swaps that bring wires back: they do, on edges, and on small graphs close to the fewest."""

from __future__ import annotations

from collections import deque

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gatewright.errors import DisconnectedError
from gatewright.mapping.restoring import restoring_swaps
from gatewright.mapping.routing import make_graph


def replayed(swaps: list[tuple[int, int]], now: list[int]) -> list[int]:
    places = list(now)
    for p, q in swaps:
        places = [q if place == p else p if place == q else place for place in places]
    return places


def fewest(graph: nx.Graph, now: tuple[int, ...], wanted: tuple[int, ...]) -> int:
    """Return the least number of swaps, by searching breadth first."""
    seen, waiting = {now: 0}, deque([now])
    while waiting:
        places = waiting.popleft()
        if places == wanted:
            return seen[places]
        for p, q in graph.edges:
            moved = tuple(q if place == p else p if place == q else place for place in places)
            if moved not in seen:
                seen[moved] = seen[places] + 1
                waiting.append(moved)
    raise AssertionError("no way")


@given(st.integers(2, 12), st.integers(0, 2**32 - 1), st.floats(0.0, 0.5))
def test_wires_arrive(n: int, seed: int, density: float) -> None:
    rng = np.random.default_rng(seed)
    tree = nx.random_labeled_tree(n, seed=seed % 2**31)
    tree.add_edges_from((p, q) for p in range(n) for q in range(p) if rng.random() < density)
    count = int(rng.integers(1, n + 1))
    now, wanted = rng.permutation(n)[:count], rng.permutation(n)[:count]
    swaps = restoring_swaps(make_graph(list(tree.edges), n), now, wanted)
    assert all(tree.has_edge(p, q) for p, q in swaps)
    assert replayed(swaps, now.tolist()) == wanted.tolist()


def test_close_to_the_fewest() -> None:
    rng = np.random.default_rng(3)
    made = least = 0
    for trial in range(60):
        n = 4 + trial % 3
        graph = nx.connected_watts_strogatz_graph(n, 2, 0.4, seed=trial)
        count = int(rng.integers(1, n + 1))
        now, wanted = rng.permutation(n)[:count], rng.permutation(n)[:count]
        made += len(restoring_swaps(make_graph(list(graph.edges), n), now, wanted))
        least += fewest(graph, tuple(now.tolist()), tuple(wanted.tolist()))
    assert least <= made <= 1.2 * least


def test_another_component_is_out_of_reach() -> None:
    graph = make_graph([(0, 1), (2, 3)], 4)
    with pytest.raises(DisconnectedError, match="cannot be brought"):
        restoring_swaps(graph, np.array([0]), np.array([3]))
    assert restoring_swaps(graph, np.array([0, 3]), np.array([1, 2])) == [(0, 1), (2, 3)]
