"""The baseline routes: its events are replayed, and the whole chain proves what it made."""

from __future__ import annotations

import numpy as np

import gatewright as gw
import lattices
import workloads
from gatewright.pipeline import CHAIN
from plain_sabre import sabre, stages


def replayed(graph, pairs: np.ndarray, initial: np.ndarray, events: np.ndarray) -> int:
    site, n, swaps, done = initial.copy(), len(graph), 0, []
    for event in events.tolist():
        if event < 0:
            p, q = divmod(-1 - event, n)
            assert graph.has_edge(p, q)
            u, v = np.flatnonzero(site == p)[0], np.flatnonzero(site == q)[0]
            site[u], site[v] = q, p
            swaps += 1
        else:
            assert graph.has_edge(*site[pairs[event]].tolist())
            done.append(event)
    assert sorted(done) == list(range(len(pairs)))
    place = np.argsort(done)
    for wire in range(n):
        assert (np.diff(place[(pairs == wire).any(axis=1)]) > 0).all()
    return swaps


def test_every_gate_runs_on_an_edge_in_order() -> None:
    for graph in (lattices.grid(3, 4), lattices.hexagons(1, 3), lattices.line(7)):
        pairs = workloads.random_pairs(len(graph), 60, 4)
        one, many = (sabre(graph, pairs, restarts=r, seed=3) for r in (1, 16))
        for made in (one, many):
            assert replayed(graph, pairs, made.initial, made.events) == made.swaps
        assert many.swaps <= one.swaps
        assert np.array_equal(many.events, sabre(graph, pairs, restarts=16, seed=3).events)


def test_it_stands_in_the_chain() -> None:
    graph = lattices.grid(3, 4)
    device = gw.Device.from_graph(list(graph.edges), "cz-virtual-z")
    circuit = workloads.adder(5)
    place, route = stages(graph, restarts=8)
    chain = [{"place": place, "route": route}.get(stage.__name__, stage) for stage in CHAIN]
    result = gw.compile(circuit, device, chain=chain)
    assert result.verdict.error_bound < 1e-10
    assert result.costs.swaps_inserted > 0
