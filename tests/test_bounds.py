"""Lower bounds on swaps: never above what a plain search finds, equal to what was planted, and told in the summary."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import gatewright as gw
import lattices
import workloads
from circuits import random_circuit
from gatewright.circuit import Builder, Circuit
from gatewright.linalg import haar_unitary
from gatewright.mapping import bounds
from gatewright.mapping.bounds import CROSS, GATE, TIE, Order, swap_bound
from gatewright.mapping.exact import fewest_swaps
from gatewright.mapping.routing import Graph, make_graph
from gatewright.stages.precedence import order_of
from gatewright.stages.windows import fuse_circuit, window_unitaries
from gatewright.synthesis.weyl import canonical_coordinates
from orders import everyone, least_swaps, random_order
from planted import planted_depth, planted_swaps
from test_planted import GRAPHS


def coupling(graph: nx.Graph) -> Graph:
    return make_graph(np.array(graph.edges).reshape(-1, 2), len(graph))


def bound(graph: nx.Graph, order: Order, fixed: object = None) -> int:
    active = np.ones(len(graph), dtype=bool)
    return swap_bound(coupling(graph), order, active=active, fixed=fixed).swaps  # type: ignore[arg-type]


@pytest.mark.parametrize("name", GRAPHS)
@pytest.mark.parametrize("filler", [0, 12])
def test_planted_swaps_are_proven(name: str, filler: int) -> None:
    for seed in range(2):
        made = planted_swaps(GRAPHS[name], 5, filler=filler, seed=seed)
        assert bound(made.graph, Order.strict(made.pairs, len(made.graph))) == 5


@pytest.mark.parametrize("name", GRAPHS)
def test_no_swap_is_claimed_where_none_is_needed(name: str) -> None:
    made = planted_depth(GRAPHS[name], 15, density=0.7, seed=3)
    assert bound(made.graph, Order.strict(made.pairs, len(made.graph))) == 0
    assert bound(made.graph, Order.strict(made.pairs, len(made.graph)), made.initial) == 0


@given(st.integers(0, 10**6), st.integers(2, 4), st.integers(0, 9), st.sampled_from([0.0, 0.5, 1.0]), st.booleans())
@settings(max_examples=120, deadline=None)
def test_never_above_a_plain_search(seed: int, n: int, gates: int, commuting: float, pinned: bool) -> None:
    rng = np.random.default_rng(seed)
    graph = nx.random_labeled_tree(int(rng.integers(n, 6)), seed=seed)
    graph.add_edges_from(rng.permutation(len(graph))[:2].tolist() for _ in range(int(rng.integers(3))))
    order = random_order(n, gates, seed, commuting=commuting, ties=0.1)
    fixed = [int(p) if rng.random() < 0.6 else -1 for p in rng.permutation(len(graph))[:n]] if pinned else None
    assert bound(graph, order, fixed) <= least_swaps(graph, order, fixed)


@given(st.integers(0, 10**6), st.sampled_from([0.0, 0.6, 1.0]))
@settings(max_examples=25, deadline=None)
def test_never_above_the_optimum(seed: int, commuting: float) -> None:
    graph = (lattices.line(5), lattices.ring(5), lattices.grid(2, 3))[seed % 3]
    order = random_order(5, 14, seed, commuting=commuting)
    found = fewest_swaps(coupling(graph), order)
    assert found is not None
    assert bound(graph, order) <= found.swaps


@pytest.mark.parametrize("chunks", [(1,), (2, 6, 20)])
def test_chunks_follow_one_another(chunks: tuple[int, ...], monkeypatch: pytest.MonkeyPatch) -> None:
    from orders import predecessors

    monkeypatch.setattr(bounds, "CHUNKS", chunks)
    for seed in range(6):
        order = random_order(5, 60, seed, commuting=0.4 * (seed % 3), ties=0.1)
        before = predecessors(order)
        made = bounds._chunks(order, 7)
        assert len(made) > 2
        for first, second in zip(made[1:-1], made[2:], strict=True):
            assert all(set(first) <= before[g] for g in second)


def test_all_pairs_once_by_counting() -> None:
    # A swap gives at most two new pairs on a line; n(n−1)/2 − (n−1) pairs are to be made adjacent.
    for n in (4, 6, 9):
        assert bound(lattices.line(n), everyone(n)) == -(-(n - 1) * (n - 2) // 4)


def test_distances_from_a_given_placement() -> None:
    pairs = Order.strict(np.array([(0, 1), (2, 3)], dtype=np.int32), 4)
    assert bound(lattices.line(12), pairs, [0, 6, 5, 11]) == 5
    assert bound(lattices.line(12), pairs, [0, 1, 5, 11]) == 5
    assert bound(lattices.line(12), pairs, [0, -1, 5, -1]) == 0
    assert bound(lattices.line(12), pairs) == 0


def test_searches_cut_short_prove_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    graph = lattices.hexagons(2, 2)
    ring = Order.strict(np.array([(k, (k + 1) % 8) for k in range(8)], dtype=np.int32), 8)
    # A hexagonal lattice has no ring of eight.
    assert bound(graph, ring) == 1
    monkeypatch.setattr(bounds, "STEPS", 3)
    assert bound(graph, ring) == 0


def order_for(circuit: Circuit) -> Order:
    fused = fuse_circuit(circuit)
    _, two = window_unitaries(circuit, fused)
    order, window = order_of(circuit, fused, two, canonical_coordinates(two))
    assert len(window) == len(order.wires)
    return order


NAMED = ["cx", "cz", "cp", "crx", "rzz", "rxx", "iswap", "ch", "unitary"]


@given(st.integers(0, 10**6))
@settings(max_examples=120, deadline=None)
def test_what_must_keep_its_order_does_not_commute(seed: int) -> None:
    """Two gates that share a wire, with one-qubit gates between: their matrices decide."""
    rng = np.random.default_rng(seed)
    builder = Builder(3)
    matrices = []
    for pair in (rng.permutation([0, 1]).tolist(), rng.permutation([1, 2]).tolist()):
        name = NAMED[rng.integers(len(NAMED))]
        alone = Builder(3)
        for target in (builder, alone):
            if name == "unitary":
                target.unitary(haar_unitary(4, rng=seed), *pair)
            else:
                target.gate(name, *pair, parameters=[0.7] * (name in ("cp", "crx", "rzz", "rxx")))
        matrices.append(alone.build().unitary())
        if len(matrices) == 1:
            alone = Builder(3)
            for _ in range(rng.integers(4)):
                turn = ["h", "s", "sx", "x", "t", "z"][rng.integers(6)]
                builder.gate(turn, 1)
                alone.gate(turn, 1)
            between = alone.build().unitary()
    order = order_for(builder.build())
    assert order.kind.tolist() == [GATE, GATE]
    shared = [runs[wires.index(1)] for wires, runs in zip(order.wires.tolist(), order.runs.tolist(), strict=True)]
    first = between @ matrices[0] @ between.conj().T
    commute = np.abs(first @ matrices[1] - matrices[1] @ first).max() < 1e-9
    assert (shared[0] == shared[1]) == commute


def test_windows_that_move_as_a_whole() -> None:
    # CX, a turn, CX is diagonal on both wires, and may change places with a CZ; a turn of H on the wire ends that.
    def runs(*between: str) -> bool:
        builder = Builder(3).gate("cx", 0, 1).gate("rz", 1, parameters=[0.3]).gate("cx", 0, 1)
        for name in between:
            builder.gate(name, 1)
        order = order_for(builder.gate("cz", 1, 2).build())
        assert order.wires.tolist() == [[0, 1], [0, 1], [1, 2]]
        return bool(order.runs[0, 1] == order.runs[2, 0])

    assert runs()
    assert runs("t")
    assert not runs("sx", "t")


def test_exchanges_and_barriers() -> None:
    builder = Builder(4).gate("cz", 0, 1).gate("swap", 1, 2).gate("cx", 0, 1).gate("cx", 0, 1)
    order = order_for(builder.build())
    # Two CX in a row are nothing; what is left is a CZ and an exchange.
    assert order.kind.tolist() == [GATE, CROSS]
    order = order_for(Builder(4).gate("cz", 0, 1).gate("swap", 1, 2).gate("cz", 2, 3).build())
    # The content of wire 1 moves to wire 2: both CZ turn it about one axis.
    assert order.runs[0, 1] == order.runs[2, 0]
    order = order_for(Builder(3).gate("cz", 0, 1).barrier(0, 2).gate("cz", 1, 2).gate("cz", 0, 1).build())
    assert order.kind.tolist() == [GATE, TIE, TIE, GATE, GATE]
    assert order.runs[0, 1] == order.runs[-1, 1]
    assert order.runs[0, 0] != order.runs[-1, 0]


def test_exchanges_inside_lower_the_bound() -> None:
    graph = lattices.line(3)
    triangle = [(0, 1), (1, 2), (0, 2)]
    builder = Builder(3)
    for a, b in triangle:
        builder.unitary(haar_unitary(4, rng=a + b), a, b)
    assert bound(graph, order_for(builder.build())) == 1
    builder.gate("swap", 0, 1)
    assert bound(graph, order_for(builder.build())) == 1
    builder.unitary(haar_unitary(4, rng=1), 1, 2)
    assert bound(graph, order_for(builder.build())) == 0


def test_the_summary_tells_the_bound() -> None:
    graph = lattices.grid(3, 3)
    device = gw.Device.from_graph(list(graph.edges), "cz-virtual-z")
    made = planted_swaps(graph, 4, filler=0, seed=2)
    circuit = workloads.from_pairs(made.pairs, 9)
    result = gw.compile(circuit, device)
    told = result.summary()["lower_bound"]
    assert told["swaps"] == result.lower_bound.swaps == 4 <= result.costs.swaps_inserted
    assert "none of which embeds" in told["how"]
    # A CX that takes over a swap needs one CZ more.
    assert told["two_qubit_gates"] == 4 + gw.compile(circuit, all_to_all(9)).lower_bound.two_qubit_gates
    assert told["two_qubit_gates"] <= result.costs.two_qubit_gates
    given_ = gw.compile(circuit, device, placement=made.initial.tolist())
    assert 4 <= given_.lower_bound.swaps <= given_.costs.swaps_inserted


def test_small_circuits_are_searched_for_their_optimum() -> None:
    graph = lattices.line(4)
    device = gw.Device.from_graph(list(graph.edges), "cz-virtual-z")
    told = set()
    for seed in range(8):
        pairs = workloads.random_pairs(4, 12, seed)
        best = fewest_swaps(coupling(graph), Order.strict(pairs, 4))
        assert best is not None
        for effort in ("quick", "standard", "deep"):
            result = gw.compile(workloads.from_pairs(pairs, 4), device, effort=effort)
            bound_ = result.lower_bound.swaps
            assert bound_ <= best.swaps <= result.costs.swaps_inserted
            if effort == "deep":
                assert bound_ == best.swaps
            told.add("complete search" in result.lower_bound.how)
    assert told == {True, False}


def all_to_all(n: int) -> gw.Device:
    return gw.Device.from_graph([(a, b) for b in range(n) for a in range(b)], "cz-virtual-z")


@pytest.mark.parametrize("gate_set", ["cz-virtual-z", "iswap-virtual-z"])
@pytest.mark.parametrize("seed", range(6))
def test_never_above_what_the_compiler_needs(gate_set: str, seed: int) -> None:
    graph = (lattices.line(6), lattices.grid(2, 3), lattices.hexagons(1, 1))[seed % 3]
    device = gw.Device.from_graph(list(graph.edges), gate_set)
    for circuit in (
        random_circuit(6, 40, seed, measured=bool(seed % 2)),
        workloads.fourier(5 + seed % 2),
        workloads.adder(2),
        workloads.from_pairs(workloads.random_pairs(6, 20, seed), 6),
    ):
        placement = np.random.default_rng(seed).permutation(6)[: circuit.n_qubits].tolist() if seed > 3 else None
        result = gw.compile(circuit, device, seed=seed, placement=placement)
        assert result.lower_bound.swaps <= result.costs.swaps_inserted
        assert result.lower_bound.two_qubit_gates <= result.costs.two_qubit_gates
