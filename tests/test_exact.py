"""Optimal numbers of swaps: published and enumerated values, a plain search, and the routings replayed."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import gatewright as gw
import lattices
import workloads
from gatewright.errors import UnsupportedError
from gatewright.mapping.bounds import CROSS, GATE, Order
from gatewright.mapping.exact import GaveUpError, Optimum, fewest_entanglers, fewest_swaps
from gatewright.mapping.routing import Graph, make_graph
from orders import everyone, least_entanglers, least_swaps, predecessors, random_order
from planted import planted_swaps


def coupling(graph: nx.Graph) -> Graph:
    return make_graph(np.array(graph.edges).reshape(-1, 2), len(graph))


def replay(graph: nx.Graph, order: Order, found: Optimum) -> None:
    site, done, swaps = dict(found.initial), [], 0
    before = predecessors(order)
    for event in found.events:
        if isinstance(event, tuple):
            p, q = event
            assert graph.has_edge(p, q)
            site = {w: {p: q, q: p}.get(at, at) for w, at in site.items()}
            swaps += 1
            continue
        a, b = order.wires[event].tolist()
        assert graph.has_edge(site[a], site[b])
        assert all(j in done for j in before[event] if order.kind[j] == GATE)
        done.append(event)
    assert sorted(done) == np.flatnonzero(order.kind == GATE).tolist()
    assert swaps == found.swaps


# All pairs once, commuting: on a line (n−1)(n−2)/2, on rings of 4, 5, 6 and on small grids by full enumeration, as the
# project's table of check values has it (recomputed for it, exhaustively). All wires are alike, so the start does not
# matter.
@pytest.mark.parametrize(
    ("graph", "swaps"),
    [
        *((lattices.line(n), (n - 1) * (n - 2) // 2) for n in (3, 4, 5, 6)),
        (lattices.ring(4), 1),
        (lattices.ring(5), 3),
        (lattices.ring(6), 5),
        (lattices.grid(2, 2), 1),
        (lattices.grid(2, 3), 4),
    ],
    ids=lambda value: f"{len(value)} qubits" if isinstance(value, nx.Graph) else str(value),
)
def test_all_pairs_once(graph: nx.Graph, swaps: int) -> None:
    n = len(graph)
    found = fewest_swaps(coupling(graph), everyone(n), fixed=range(n))
    assert found is not None
    assert found.swaps == swaps
    replay(graph, everyone(n), found)
    assert fewest_swaps(coupling(graph), everyone(n), fixed=range(n), at_most=swaps - 1) is None


@given(st.integers(0, 10**6), st.integers(2, 4), st.integers(0, 7), st.sampled_from([0.0, 0.5, 1.0]), st.booleans())
@settings(max_examples=60, deadline=None)
def test_a_plain_search_agrees(seed: int, n: int, gates: int, commuting: float, pinned: bool) -> None:
    rng = np.random.default_rng(seed)
    graph = nx.random_labeled_tree(int(rng.integers(n, 6)), seed=seed)
    graph.add_edges_from(rng.permutation(len(graph))[:2].tolist() for _ in range(int(rng.integers(3))))
    order = random_order(n, gates, seed, commuting=commuting, ties=0.1)
    fixed = [int(p) if rng.random() < 0.6 else -1 for p in rng.permutation(len(graph))[:n]] if pinned else None
    found = fewest_swaps(coupling(graph), order, fixed=fixed)
    assert found is not None
    assert found.swaps == least_swaps(graph, order, fixed)
    replay(graph, order, found)
    if fixed is not None:
        assert all(fixed[w] in (-1, p) for w, p in found.initial.items())


@given(st.integers(0, 10**6), st.integers(2, 4), st.integers(0, 5), st.sampled_from([0.0, 0.6]))
@settings(max_examples=40, deadline=None)
def test_a_plain_search_for_entanglers_agrees(seed: int, n: int, gates: int, commuting: float) -> None:
    rng = np.random.default_rng(seed)
    graph = nx.random_labeled_tree(n, seed=seed)
    order = random_order(n, gates, seed, commuting=commuting)
    # With an iSWAP a CNOT costs two and, exchanged, one; prices that never fall suit the plain search.
    costs = [(1, 2) if rng.random() < 0.6 else (3, 3) for _ in range(gates)]
    found = fewest_entanglers(coupling(graph), order, costs=costs)
    assert found.entanglers == least_entanglers(graph, order, costs, 3)
    replay(graph, order, found)


def test_entanglers_where_a_swap_makes_gates_cheaper() -> None:
    graph = lattices.line(3)
    triangle = Order.strict(np.array([(0, 1), (1, 2), (0, 2)], dtype=np.int32), 3)
    found = fewest_entanglers(coupling(graph), triangle, costs=[(2, 1)] * 3)
    assert found.entanglers == 3
    replay(graph, triangle, found)
    fewest = fewest_swaps(coupling(graph), triangle)
    assert fewest is not None and fewest.swaps == 1 <= found.swaps


def test_the_compiler_never_beats_the_fewest_entanglers() -> None:
    for seed in range(6):
        graph = (lattices.line(4), lattices.ring(4))[seed % 2]
        last: dict[int, int] = {}
        kept = []
        for a, b in workloads.random_pairs(4, 14, seed).tolist():
            if last.get(a) != b or last.get(b) != a:  # else both would make one window
                kept.append((a, b))
                last[a], last[b] = b, a
        pairs = np.array(kept, dtype=np.int32)
        best = fewest_entanglers(coupling(graph), Order.strict(pairs, 4))
        device = gw.Device.from_graph(list(graph.edges), "cz-virtual-z")
        circuit = workloads.from_pairs(pairs, 4)
        assert gw.compile(circuit, all_to_all(4)).costs.two_qubit_gates == len(pairs)
        assert gw.compile(circuit, device).costs.two_qubit_gates >= best.entanglers > len(pairs)


def all_to_all(n: int) -> gw.Device:
    return gw.Device.from_graph([(a, b) for b in range(n) for a in range(b)], "cz-virtual-z")


def test_planted_swaps_are_the_fewest() -> None:
    for graph, seed in ((lattices.line(5), 0), (lattices.grid(2, 3), 1), (lattices.ring(5), 2)):
        made = planted_swaps(graph, 3, filler=2, seed=seed)
        found = fewest_swaps(coupling(graph), Order.strict(made.pairs, len(graph)))
        assert found is not None
        assert found.swaps == 3


def test_it_says_when_it_gives_up() -> None:
    graph = coupling(lattices.grid(3, 3))
    order = random_order(9, 30, 1)
    with pytest.raises(GaveUpError, match="given up") as caught:
        fewest_swaps(graph, order, fixed=range(9), states=50)
    assert "at most 50 states" in str(caught.value)
    exact = fewest_swaps(coupling(lattices.line(5)), random_order(5, 24, 3))
    assert exact is not None
    for states in (100, 200, 300):
        with pytest.raises(GaveUpError) as caught:
            fewest_swaps(coupling(lattices.line(5)), random_order(5, 24, 3), states=states)
        assert caught.value.least <= exact.swaps
    assert caught.value.least > 0
    crossing = Order(9, order.wires, np.full(30, CROSS, dtype=np.int8), order.runs)
    with pytest.raises(UnsupportedError, match="exchanges of the circuit's own"):
        fewest_swaps(graph, crossing)


def test_no_gates_and_no_path() -> None:
    empty = fewest_swaps(coupling(lattices.line(3)), random_order(3, 0, 0))
    assert empty is not None
    assert (empty.swaps, empty.events) == (0, [])
    apart = make_graph([(0, 1), (2, 3)], 4)
    triangle = Order.strict(np.array([(0, 1), (1, 2), (0, 2)], dtype=np.int32), 3)
    assert fewest_swaps(apart, triangle) is None
