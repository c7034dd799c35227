"""Routing on plain arrays: every routing is replayed here, step by step, on the networkx graph."""

from __future__ import annotations

import threading

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import CircuitError, DeviceError, DisconnectedError, InputError
from gatewright.mapping.routing import (
    FAR,
    Graph,
    Operations,
    Router,
    Routing,
    make_graph,
    make_operations,
    route,
    run_pass,
)

Op = tuple[tuple[int, ...], bool]


def flat(ops: list[Op], n_all: int) -> Operations:
    offsets = np.concatenate([[0], np.cumsum([len(wires) for wires, _ in ops])])
    return make_operations([w for wires, _ in ops for w in wires], offsets, [coupled for _, coupled in ops], n_all)


def coupling(graph: nx.Graph) -> Graph:
    return make_graph(np.array(graph.edges).reshape(-1, 2), len(graph))


def replay(graph: nx.Graph, ops: list[Op], routing: Routing) -> float:
    """Check a routing against the circuit and the graph; return its cost.

    A window on a pair costs what its CNOTs and swaps need: a CNOT 1, a swap 3, both 2, nothing more than 3.
    """
    n = len(graph)
    where = dict(enumerate(routing.initial.tolist()))
    assert sorted(where.values()) == list(range(n))
    seen: dict[int, list[int]] = {}
    last: dict[int, list[object]] = {}
    cost, swaps = 0, 0

    def window(p: int, q: int, content: str) -> int:
        """Return what `content` adds to the open window of p and q, or to a new one."""
        if last.get(p) is None or last.get(p) is not last.get(q):
            last[p] = last[q] = [0, 3]
        costs = last[p]
        before = costs[0]
        if content == "swap":
            costs.reverse()
        elif 0 in costs:
            costs[:] = [1, 2] if costs[0] == 0 else [2, 1]
        else:
            costs[:] = [min(3, costs[0] + 1), min(3, costs[1] + 1)]
        return costs[0] - before

    for event in routing.events.tolist():
        if event < 0:
            assert event == -1 - swaps
            p, q = routing.swaps[swaps].tolist()
            swaps += 1
            assert graph.has_edge(p, q)
            where = {wire: {p: q, q: p}.get(at, at) for wire, at in where.items()}
            cost += window(p, q, "swap")
            continue
        wires, coupled = ops[event]
        for wire in wires:
            seen.setdefault(wire, []).append(event)
        if coupled:
            p, q = where[wires[0]], where[wires[1]]
            assert graph.has_edge(p, q), f"operation {event} is not on an edge"
            cost += window(p, q, "gate")
    assert swaps == len(routing.swaps)
    assert sorted(e for e in routing.events if e >= 0) == list(range(len(ops)))
    assert all(numbers == sorted(numbers) for numbers in seen.values()), "order is kept on every wire"
    assert [where[wire] for wire in range(n)] == routing.final.tolist()
    return cost


@st.composite
def connected_graphs(draw: st.DrawFn, largest: int = 12) -> nx.Graph:
    n = draw(st.integers(2, largest))
    graph = nx.Graph([(draw(st.integers(0, v - 1)), v) for v in range(1, n)])
    extra = draw(st.lists(st.tuples(st.integers(0, n - 1), st.integers(0, n - 1)), max_size=n))
    graph.add_edges_from((a, b) for a, b in extra if a != b)
    return graph


@st.composite
def circuits(draw: st.DrawFn, n: int, bits: int = 2, longest: int = 60) -> list[Op]:
    """Two-qubit gates, one-qubit gates, measurements into bits, barriers, operations on nothing."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32)))
    ops: list[Op] = []
    for kind in draw(st.lists(st.sampled_from("gggg1mb0"), max_size=longest)):
        wires = rng.permutation(n).tolist()
        if kind == "g":
            ops.append((tuple(wires[:2]), True))
        elif kind == "m":
            ops.append(((wires[0], n + int(rng.integers(bits))), False))
        else:
            count = {"1": 1, "0": 0, "b": int(rng.integers(2, n + 1))}[kind]
            ops.append((tuple(wires[:count]), False))
    return ops


@given(st.data())
@settings(max_examples=150, deadline=None)
def test_every_routing_replays(data: st.DataObject) -> None:
    graph = data.draw(connected_graphs())
    n = len(graph)
    ops = data.draw(circuits(n))
    initial = np.random.default_rng(data.draw(st.integers(0, 99))).permutation(n)
    kept = initial.copy()
    routing = route(coupling(graph), flat(ops, n + 2), initial, seed=data.draw(st.integers(0, 2**40)))
    replay(graph, ops, routing)
    assert np.array_equal(initial, kept)
    assert np.array_equal(routing.initial, initial)


@given(st.data())
@settings(max_examples=60, deadline=None)
def test_the_cost_of_a_pass_is_what_the_replay_counts(data: st.DataObject) -> None:
    graph = data.draw(connected_graphs())
    n = len(graph)
    ops = [op for op in data.draw(circuits(n)) if op[1]]
    initial = np.arange(n, dtype=np.int32)
    made = run_pass(coupling(graph), flat(ops, n), initial, seed=3)
    routing = route(coupling(graph), flat(ops, n), initial, seed=3)
    assert made.cost == replay(graph, ops, routing)
    assert made.swaps == len(routing.swaps)
    assert np.array_equal(made.end, routing.final)


@given(st.data())
@settings(max_examples=60, deadline=None)
def test_the_way_out_of_a_livelock_is_legal(data: st.DataObject) -> None:
    # With no patience every blocked gate is led along a shortest path.
    graph = data.draw(connected_graphs())
    n = len(graph)
    ops = [op for op in data.draw(circuits(n)) if op[1]]
    router = Router(coupling(graph), flat(ops, n))
    router._patience = -1
    start = np.arange(n, dtype=np.int32)
    made = router.run(start, seed=0, record=True)
    is_swap = made.events < 0
    events = np.where(is_swap, -np.cumsum(is_swap), made.events)
    swaps = np.stack(np.divmod(-1 - made.events[is_swap], n), axis=1)
    replay(graph, ops, Routing(start, made.end, events, swaps))
    diameter = nx.diameter(graph)
    assert made.swaps <= len(ops) * max(diameter - 1, 0)


@given(st.data())
@settings(max_examples=60, deadline=None)
def test_backwards_is_forwards_on_the_reversed_circuit(data: st.DataObject) -> None:
    graph = data.draw(connected_graphs())
    n = len(graph)
    ops = data.draw(circuits(n, bits=1))
    start = np.random.default_rng(data.draw(st.integers(0, 99))).permutation(n).astype(np.int32)
    joint = [op for op in ops if len(op[0]) > 1]
    back = Router(coupling(graph), flat(joint, n + 1)).run(start, seed=7, backwards=True)
    forth = Router(coupling(graph), flat(joint[::-1], n + 1)).run(start, seed=7)
    assert (back.swaps, back.cost) == (forth.swaps, forth.cost)
    assert np.array_equal(back.end, forth.end)


GRAPHS = {
    "line": nx.path_graph(30),
    "ring": nx.cycle_graph(31),
    "star": nx.star_graph(24),
    "hexagons": nx.convert_node_labels_to_integers(nx.hexagonal_lattice_graph(3, 3)),
    "tree": nx.balanced_tree(2, 4),
    "grid": nx.convert_node_labels_to_integers(nx.grid_2d_graph(6, 6)),
}


@pytest.mark.parametrize("name", GRAPHS)
def test_no_livelock(name: str) -> None:
    graph = GRAPHS[name]
    n = len(graph)
    diameter = nx.diameter(graph)
    rng = np.random.default_rng(5)
    for seed in range(12):
        ops: list[Op] = [(tuple(rng.permutation(n)[:2].tolist()), True) for _ in range(150)]
        routing = route(coupling(graph), flat(ops, n), rng.permutation(n), seed=seed)
        replay(graph, ops, routing)
        # Leading each gate along a shortest path in turn needs no more.
        assert len(routing.swaps) <= len(ops) * (diameter - 1)


@pytest.mark.parametrize("n", [3, 4, 5, 6, 7])
def test_all_pairs_once_on_a_line(n: int) -> None:
    # At least (n-1)(n-2)/2 swaps even if the gates commuted (no source; exhaustive search, n = 3 to 7).
    graph = nx.path_graph(n)
    ops: list[Op] = [((a, b), True) for a in range(n) for b in range(a + 1, n)]
    counts = []
    for seed in range(20):
        routing = route(coupling(graph), flat(ops, n), np.arange(n), seed=seed)
        replay(graph, ops, routing)
        counts.append(len(routing.swaps))
    bound = (n - 1) * (n - 2) // 2
    assert bound <= min(counts) <= 2 * bound


def test_a_gate_at_distance_d_takes_d_minus_one_swaps() -> None:
    for name, graph in GRAPHS.items():
        lengths = dict(nx.all_pairs_shortest_path_length(graph))
        n = len(graph)
        for a, b in [(0, n - 1), (1, n // 2), (n // 3, n - 2)]:
            routing = route(coupling(graph), flat([((a, b), True)], n), np.arange(n))
            assert len(routing.swaps) == lengths[a][b] - 1, name


def test_operations_on_one_wire_stay_beside_what_follows() -> None:
    # The swap after a gate merges with it, so the measurement of a qubit waits for its moves.
    graph = nx.path_graph(3)
    ops: list[Op] = [((0, 1), True), ((0,), False), ((1, 2), True), ((0, 2), True), ((1,), False)]
    routing = route(coupling(graph), flat(ops, 3), [0, 1, 2])
    assert replay(graph, ops, routing) == 4
    assert routing.events.tolist()[-1] == 4


def test_barriers_and_bits_keep_order() -> None:
    graph = nx.path_graph(4)
    # The gate on (0, 3) is blocked; behind the barrier (1, 2) may not run before it.
    ops: list[Op] = [((0, 3), True), ((0, 1, 2, 3), False), ((1, 2), True), ((1, 4), False), ((2, 4), False)]
    routing = route(coupling(graph), flat(ops, 5), [0, 1, 2, 3])
    replay(graph, ops, routing)
    assert [e for e in routing.events.tolist() if e >= 0] == [0, 1, 2, 3, 4]


@given(connected_graphs(20))
@settings(max_examples=40, deadline=None)
def test_graph_against_networkx(graph: nx.Graph) -> None:
    made = coupling(graph)
    lengths = dict(nx.all_pairs_shortest_path_length(graph))
    n = len(graph)
    assert [[int(made.distance[p, q]) for q in range(n)] for p in range(n)] == [
        [lengths[p][q] for q in range(n)] for p in range(n)
    ]
    for p in range(n):
        entries = range(made.starts[p], made.starts[p + 1])
        assert sorted(made.neighbours[list(entries)].tolist()) == sorted(graph[p])
        for i in entries:
            assert made.neighbours[made.twin[i]] == p
            assert made.twin[made.twin[i]] == i


def test_complete_and_disconnected_graphs() -> None:
    complete = coupling(nx.complete_graph(9))
    assert (complete.distance == 1 - np.eye(9)).all()
    parts = make_graph([(0, 1), (2, 3)], 5)
    assert parts.distance[0, 2] == FAR
    assert parts.component[0] == parts.component[1] != parts.component[2]
    assert make_graph(np.zeros((0, 2)), 1).neighbours.size == 0


def test_same_seed_same_routing_in_any_thread() -> None:
    graph = GRAPHS["grid"]
    n = len(graph)
    rng = np.random.default_rng(0)
    ops = flat([(tuple(rng.permutation(n)[:2].tolist()), True) for _ in range(400)], n)
    made = coupling(graph)
    results: dict[int, Routing] = {}

    def work(k: int) -> None:
        results[k] = route(made, ops, np.arange(n), seed=k % 2)

    threads = [threading.Thread(target=work, args=(k,)) for k in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    for k in range(2, 8):
        assert np.array_equal(results[k].events, results[k % 2].events)
        assert np.array_equal(results[k].swaps, results[k % 2].swaps)
    assert not np.array_equal(results[0].swaps, results[1].swaps)


def test_costly_edges_are_avoided() -> None:
    # A ring with one way round costly: the weighted cost of both ways decides, not the swaps alone.
    n = 8
    edges = [(k, (k + 1) % n) for k in range(n)]
    graph = make_graph(edges, n, edge_cost=[100.0 if k < 4 else 1.0 for k in range(n)])
    assert graph.uneven
    assert graph.weight.mean() == pytest.approx(1)
    routing = route(graph, flat([((0, 4), True)], n), np.arange(n))
    # Qubits 4, 5, 6, 7, 0 form the cheap way.
    assert len(routing.swaps) == 3
    assert set(routing.swaps.ravel().tolist()) <= {4, 5, 6, 7, 0}


def test_even_costs_are_no_costs() -> None:
    assert not make_graph([(0, 1), (1, 2)], 3, edge_cost=[0.0, 0.0], qubit_cost=[0.0] * 3).uneven
    assert not make_graph([(0, 1), (1, 2)], 3, edge_cost=[0.2, 0.2]).uneven


def test_read_only_arrays_are_accepted() -> None:
    arrays = [np.array([0, 2], np.int32), np.array([0, 2], np.int32), np.array([1], np.uint8)]
    for array in arrays:
        array.flags.writeable = False
    graph = nx.path_graph(3)
    routing = route(coupling(graph), make_operations(*arrays, 3), np.arange(3))
    replay(graph, [((0, 2), True)], routing)


def test_nothing_to_do() -> None:
    routing = route(coupling(nx.path_graph(3)), flat([], 3), [2, 0, 1])
    assert routing.final.tolist() == [2, 0, 1]
    assert routing.events.size == routing.swaps.size == 0


def test_disconnected_wires_are_refused() -> None:
    graph = make_graph([(0, 1), (2, 3)], 4)
    ops = flat([((0, 1), True), ((1, 2), True)], 4)
    with pytest.raises(DisconnectedError, match="qubits 1 and 2 of the circuit cannot meet") as caught:
        route(graph, ops, [0, 1, 2, 3])
    assert caught.value.required
    assert caught.value.found == "none from physical qubit 1 to 2"
    replay(nx.Graph([(0, 1), (2, 3)]), [((0, 1), True)], route(graph, flat([((0, 1), True)], 4), [3, 2, 1, 0]))


@pytest.mark.parametrize(
    ("call", "error"),
    [
        (lambda: make_graph([(0, 3)], 3), DeviceError),
        (lambda: make_graph([(1, 1)], 3), DeviceError),
        (lambda: make_graph([(0, -1)], 3), DeviceError),
        (lambda: make_graph([(0, 1)], 3, edge_cost=[-1.0]), DeviceError),
        (lambda: make_graph([(0, 1)], 3, qubit_cost=[0.0, np.nan, 0.0]), DeviceError),
        (lambda: make_operations([0, 5], [0, 2], [1], 3), CircuitError),
        (lambda: make_operations([0], [0, 1], [1], 3), CircuitError),
        (lambda: make_operations([0, 1], [0, 1], [0], 3), CircuitError),
        (lambda: Router(make_graph([(0, 1)], 2), flat([((0, 2), True)], 3)), CircuitError),
        (lambda: route(make_graph([(0, 1)], 2), flat([], 2), [0, 0]), InputError),
        (lambda: route(make_graph([(0, 1)], 2), flat([], 2), [0]), InputError),
    ],
)
def test_bad_input(call: object, error: type[Exception]) -> None:
    with pytest.raises(error) as caught:
        call()  # type: ignore[operator]
    assert "\n" not in str(caught.value)
