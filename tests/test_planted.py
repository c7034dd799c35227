"""The planted circuits are what they claim: hidden schedules replayed, bounds proven again with networkx."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest

import lattices
from planted import Planted, planted_depth, planted_swaps

GRAPHS = {
    "line-6": lattices.line(6),
    "grid-16": lattices.grid(4, 4),
    "octagons-16": lattices.octagons(),
    "crossed-20": lattices.crossed_grid(4, 5),
    "hexagons-30": lattices.hexagons(3, 3),
    "edges-53": lattices.trimmed(lattices.hexagons_on_edges(3, 3), 53),
    "diamond-54": lattices.diamond(9, 6),
}


def replay(made: Planted) -> int:
    """Run the hidden schedule on its graph; return its swaps."""
    site = dict(enumerate(made.initial.tolist()))
    swaps, done = 0, []
    for event in made.events:
        if isinstance(event, tuple):
            assert made.graph.has_edge(*event)
            p, q = event
            site = {wire: {p: q, q: p}.get(at, at) for wire, at in site.items()}
            swaps += 1
        else:
            a, b = made.pairs[event].tolist()
            assert made.graph.has_edge(site[a], site[b])
            done.append(event)
    assert done == list(range(len(made.pairs)))
    return swaps


def dependencies(pairs: np.ndarray) -> nx.DiGraph:
    order, last = nx.DiGraph(), {}
    for k, pair in enumerate(pairs.tolist()):
        order.add_node(k)
        for wire in pair:
            if wire in last:
                order.add_edge(last[wire], k)
            last[wire] = k
    return order


@pytest.mark.parametrize("name", GRAPHS)
@pytest.mark.parametrize("filler", [0, 10, 100])
def test_planted_swaps(name: str, filler: int) -> None:
    graph = GRAPHS[name]
    for seed in range(3):
        made = planted_swaps(graph, 4, filler=filler, seed=seed)
        assert replay(made) == made.swaps == len(made.sections) == 4
        most = max(degree for _, degree in graph.degree)
        order = dependencies(made.pairs)
        for section in made.sections:
            star = nx.Graph(made.pairs[section].tolist())
            assert max(degree for _, degree in star.degree) > most
        for section, following in zip(made.sections[:-1], made.sections[1:], strict=True):
            for g in section:
                assert set(following) <= nx.descendants(order, g)


@pytest.mark.parametrize("name", GRAPHS)
@pytest.mark.parametrize("density", [0.1, 0.5, 1.0])
def test_planted_depth(name: str, density: float) -> None:
    made = planted_depth(GRAPHS[name], 12, density=density, seed=5)
    assert replay(made) == made.swaps == 0
    order = dependencies(made.pairs)
    assert nx.dag_longest_path_length(order) + 1 == made.depth == 12
    (chain,) = made.sections
    assert len(chain) == 12
    assert all(order.has_edge(a, b) for a, b in zip(chain[:-1], chain[1:], strict=True))


def test_a_complete_graph_needs_no_swaps() -> None:
    with pytest.raises(ValueError, match="one swap never"):
        planted_swaps(nx.complete_graph(5), 1, filler=0, seed=0)


@pytest.mark.parametrize(("name", "n"), [("octagons-16", 16), ("crossed-20", 20), ("edges-53", 53), ("diamond-54", 54)])
def test_the_lattices_have_the_size_they_say(name: str, n: int) -> None:
    assert sorted(GRAPHS[name]) == list(range(n))
    assert nx.is_connected(GRAPHS[name])


def test_lattices_with_room() -> None:
    for n in (11, 16, 30, 67):
        for graph in (lattices.grid_for(n), lattices.hexagons_for(n)):
            assert n <= len(graph) < 1.5 * n + 4
            assert nx.is_connected(graph)
    assert (len(lattices.grid(20, 20)), len(lattices.grid(32, 32))) == (400, 1024)
