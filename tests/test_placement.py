"""Placement: planted and impossible embeddings, components, fixed wires, costs; networkx decides what embeds."""

from __future__ import annotations

import dataclasses

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import DisconnectedError, InputError
from gatewright.mapping.placement import embed
from gatewright.mapping.routing import Graph, Operations, make_graph, make_operations, route
from gatewright.mapping.search import place, plan


def grid(rows: int, columns: int) -> nx.Graph:
    return nx.convert_node_labels_to_integers(nx.grid_2d_graph(rows, columns))


def coupling(graph: nx.Graph) -> Graph:
    return make_graph(np.array(graph.edges).reshape(-1, 2), len(graph))


def gates(pairs: object, n: int) -> Operations:
    wires = np.array(pairs, dtype=np.int32).reshape(-1, 2)
    return make_operations(wires.ravel(), np.arange(0, wires.size + 1, 2), np.ones(len(wires)), n)


def planted(graph: nx.Graph, layers: int, seed: int) -> np.ndarray:
    """Layers of gates on random matchings of the graph's edges, the wires renamed: no swap is needed."""
    rng = np.random.default_rng(seed)
    names = rng.permutation(len(graph))
    edges = np.array(graph.edges)
    pairs = []
    for _ in range(layers):
        busy: set[int] = set()
        for a, b in edges[rng.permutation(len(edges))].tolist():
            if not {a, b} & busy:
                busy |= {a, b}
                pairs.append((names[a], names[b]))
    return np.array(pairs)


def swaps(graph: Graph, operations: Operations, **options: object) -> int:
    active = options.pop("active", np.ones(graph.n, dtype=bool))
    n_source = options.pop("n_source", graph.n)
    made = plan(graph, operations, n_source=n_source, active=active, **options)  # type: ignore[arg-type]
    seed = options.get("seed", 0)
    return len(route(graph, operations, made.initial, seed=seed, script=made.script).swaps)  # type: ignore[arg-type]


@pytest.mark.parametrize("effort", ["quick", "standard"])
@pytest.mark.parametrize(
    "graph",
    [grid(3, 3), grid(4, 4), grid(6, 9), nx.convert_node_labels_to_integers(nx.hexagonal_lattice_graph(3, 3))],
    ids=["3x3", "4x4", "6x9", "hexagons"],
)
def test_planted_circuits_need_no_swap(graph: nx.Graph, effort: str) -> None:
    # Known optimum by construction, in the manner of Tan and Cong, IEEE Trans. Comput. 2020.
    for seed in range(5):
        assert swaps(coupling(graph), gates(planted(graph, 20, seed), len(graph)), effort=effort, seed=seed) == 0


@pytest.mark.parametrize("layers", [1, 2, 3])
def test_sparse_planted_circuits_need_no_swap(layers: int) -> None:
    for seed in range(8):
        assert swaps(coupling(grid(4, 4)), gates(planted(grid(4, 4), layers, seed), 16), seed=seed) == 0


@given(st.integers(0, 10**6), st.integers(2, 9), st.integers(1, 14))
@settings(max_examples=150, deadline=None)
def test_embedding_agrees_with_networkx(seed: int, n: int, count: int) -> None:
    rng = np.random.default_rng(seed)
    host = nx.gnm_random_graph(n, int(rng.integers(1, 2 * n)), seed=seed)
    guest = nx.gnm_random_graph(n, min(count, n * (n - 1) // 2), seed=seed + 1)
    graph = coupling(host)
    linked = nx.to_numpy_array(guest, nodelist=range(n)) > 0
    everywhere = np.zeros(n, dtype=np.int32)
    whole = make_graph(np.array(host.edges).reshape(-1, 2), n)
    # One component for all, so that only adjacency matters.
    whole.component[:] = 0
    free = np.full(n, -1, dtype=np.int32)
    active = np.ones(n, dtype=bool)
    found = embed(whole, linked, free, everywhere, active, restarts=4, rng=np.random.default_rng(0))
    core = guest.subgraph([w for w in guest if guest.degree(w)])
    possible = nx.algorithms.isomorphism.GraphMatcher(host, core).subgraph_is_monomorphic()
    assert (found is not None) == possible
    if found is not None:
        assert all(graph.distance[found[a], found[b]] == 1 for a, b in guest.edges)
        placed = found[found >= 0]
        assert len(set(placed.tolist())) == len(placed) == len(core)


def test_the_same_seed_gives_the_same_placement() -> None:
    graph = coupling(grid(4, 5))
    rng = np.random.default_rng(1)
    operations = gates([rng.permutation(20)[:2] for _ in range(300)], 20)
    active = np.ones(20, dtype=bool)
    first, again, other = (place(graph, operations, n_source=20, active=active, seed=s) for s in (4, 4, 5))
    assert np.array_equal(first, again)
    assert not np.array_equal(first, other)


def test_effort_pays() -> None:
    graph = coupling(grid(4, 5))
    rng = np.random.default_rng(2)
    operations = gates([rng.permutation(20)[:2] for _ in range(200)], 20)
    counts = [len(route(graph, operations, rng.permutation(20)).swaps) for _ in range(20)]
    assert swaps(graph, operations) < min(counts)
    assert swaps(graph, operations, effort="deep") <= swaps(graph, operations)


def test_long_circuits_are_placed_on_their_beginning(monkeypatch: pytest.MonkeyPatch) -> None:
    from gatewright.mapping import search

    graph = coupling(grid(3, 4))
    rng = np.random.default_rng(3)
    operations = gates([rng.permutation(12)[:2] for _ in range(600)], 12)
    whole = swaps(graph, operations)
    monkeypatch.setattr(search, "PREFIX", 100)
    for work in (1.0, 1e9):
        monkeypatch.setitem(search.EFFORTS, "standard", dataclasses.replace(search.EFFORTS["standard"], work=work))
        assert swaps(graph, operations) < 1.4 * whole


def test_wires_that_need_not_move_stay() -> None:
    graph = coupling(nx.path_graph(6))
    initial = place(graph, gates([(0, 1), (1, 2)], 6), n_source=3, active=np.ones(6, dtype=bool))
    assert initial.tolist() == [0, 1, 2, 3, 4, 5]


@given(st.data())
@settings(max_examples=60, deadline=None)
def test_fixed_wires_and_qubits_out_of_service(data: st.DataObject) -> None:
    seed = data.draw(st.integers(0, 10**6))
    rng = np.random.default_rng(seed)
    full = grid(4, 4)
    closed = rng.permutation(16)[: data.draw(st.integers(0, 4))]
    full.remove_nodes_from(closed.tolist())
    region = sorted(max(nx.connected_components(full), key=len))
    active = np.zeros(16, dtype=bool)
    active[region] = True
    graph = make_graph(np.array(full.subgraph(region).edges).reshape(-1, 2), 16)
    n_source = data.draw(st.integers(2, len(region)))
    pairs = [rng.permutation(n_source)[:2] for _ in range(data.draw(st.integers(0, 40)))]
    fixed = np.full(n_source, -1)
    count = data.draw(st.integers(0, n_source))
    fixed[rng.permutation(n_source)[:count]] = rng.permutation(region)[:count]
    operations = gates(pairs, 16)
    initial = place(graph, operations, n_source=n_source, active=active, effort="quick", fixed=fixed.tolist())
    assert sorted(initial.tolist()) == list(range(16))
    assert (initial[:n_source][fixed >= 0] == fixed[fixed >= 0]).all()
    assert active[initial[:n_source]].all()
    routing = route(graph, operations, initial)
    assert active[routing.swaps].all()


def test_fixed_wires_help_where_they_can() -> None:
    # A ring of six on a ring of six, one wire fixed: no swap whatever its qubit.
    graph = coupling(nx.cycle_graph(6))
    ring = gates([(k, (k + 2) % 6) for k in range(6)] + [(0, 3)], 6)
    chain = gates([(0, 2), (2, 4), (4, 1), (1, 3), (3, 5), (5, 0)], 6)
    assert swaps(graph, chain, fixed=[3, -1, -1, -1, -1, -1]) == 0
    assert swaps(graph, chain, fixed=[3, -1, 2, -1, -1, -1]) == 0
    assert swaps(graph, chain, fixed=[3, -1, 0, -1, -1, -1]) > 0
    assert swaps(graph, ring, fixed=[0, 1, 2, 3, 4, 5]) > 0


def test_groups_go_to_parts_of_their_own() -> None:
    # Rings of three and of four, on a device of two such rings the other way round.
    device = nx.disjoint_union(nx.cycle_graph(4), nx.cycle_graph(3))
    circuit = [(0, 1), (1, 2), (2, 0), (3, 4), (4, 5), (5, 6), (6, 3)]
    assert swaps(coupling(device), gates(circuit, 7)) == 0


def test_parts_are_packed_exactly() -> None:
    # Groups of 4, 3, 3, 2 fill parts of 7 and 5 in one way only; the tightest part first would fail.
    device = nx.disjoint_union(nx.path_graph(7), nx.path_graph(5))
    circuit, at = [], 0
    for size in (4, 3, 3, 2):
        circuit += [(at + k, at + k + 1) for k in range(size - 1)]
        at += size
    operations = gates(circuit, 12)
    graph = coupling(device)
    initial = place(graph, operations, n_source=12, active=np.ones(12, dtype=bool))
    route(graph, operations, initial)
    parts = graph.component[initial]
    assert [len(set(parts[a:b].tolist())) for a, b in ((0, 4), (4, 7), (7, 10), (10, 12))] == [1, 1, 1, 1]


def test_a_circuit_that_fits_one_part_is_placed_there() -> None:
    device = nx.disjoint_union(nx.path_graph(3), grid(3, 3))
    rng = np.random.default_rng(0)
    operations = gates([rng.permutation(6)[:2] for _ in range(60)], 12)
    graph = coupling(device)
    initial = place(graph, operations, n_source=6, active=np.ones(12, dtype=bool))
    assert (initial[:6] >= 3).all()
    route(graph, operations, initial)


def test_interacting_wires_without_room_are_refused() -> None:
    graph = coupling(nx.disjoint_union(nx.path_graph(3), nx.path_graph(3)))
    active = np.ones(6, dtype=bool)
    with pytest.raises(DisconnectedError, match="4 qubits of the circuit must meet") as caught:
        place(graph, gates([(0, 1), (1, 2), (2, 3)], 6), n_source=4, active=active)
    assert caught.value.found == "parts of 3, 3 qubits"
    with pytest.raises(DisconnectedError, match="must meet, and the placement leaves them no connected part"):
        place(graph, gates([(0, 1)], 6), n_source=2, active=active, fixed=[0, 3])
    with pytest.raises(DisconnectedError, match="do not fit into the connected parts"):
        place(graph, gates([(0, 1), (2, 3), (4, 5)], 6), n_source=6, active=active)
    active[0] = False
    with pytest.raises(DisconnectedError):
        place(make_graph([(1, 2), (3, 4), (4, 5)], 6), gates([(0, 1)], 6), n_source=6, active=active)


@pytest.mark.parametrize("fixed", [[0, 0], [0, 6], [0, -2], [5, -1]])
def test_bad_fixed_placements(fixed: list[int]) -> None:
    active = np.array([True] * 5 + [False])
    with pytest.raises(InputError):
        place(make_graph([(k, k + 1) for k in range(4)], 6), gates([(0, 1)], 6), n_source=2, active=active, fixed=fixed)


@pytest.mark.parametrize("pairs", [[(0, 1), (1, 2), (2, 3), (3, 0)], [(0, 1), (1, 2), (2, 0), (2, 3), (3, 1), (0, 3)]])
def test_low_cost_regions_are_preferred(pairs: list[tuple[int, int]]) -> None:
    # The right half of the grid is ten times as costly; both a circuit that embeds and one that needs swaps go left.
    graph = grid(4, 8)
    edges = np.array(graph.edges)
    right = (edges % 8 >= 4).any(axis=1)
    made = make_graph(edges, 32, edge_cost=np.where(right, 0.1, 0.01), qubit_cost=np.full(32, 1e-3))
    for seed in range(4):
        initial = place(made, gates(pairs * 3, 32), n_source=4, active=np.ones(32, dtype=bool), seed=seed)
        assert (initial[:4] % 8 < 4).all()


def test_idle_and_lonely_wires() -> None:
    graph = coupling(nx.path_graph(5))
    operations = make_operations([0, 3], [0, 1, 2], [0, 0], 5)
    initial = place(graph, operations, n_source=4, active=np.array([False, True, True, True, True]))
    assert sorted(initial.tolist()) == [0, 1, 2, 3, 4]
    assert initial[4] == 0
