"""Commuting operations change places: found from matrices, proven pair by pair, and paid back in swaps."""

from __future__ import annotations

from dataclasses import replace

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import gatewright as gw
from gatewright.circuit import Builder, Circuit
from gatewright.errors import ProofError
from gatewright.mapping.operations import GROUP
from gatewright.mapping.routing import Router, make_graph, make_operations
from gatewright.proof import Proof, check_proof
from gatewright.proof.file import decode_proof, encode_proof
from gatewright.proof.reorder import Reorder, check_reorder
from gatewright.stages.blocks import cut_blocks
from gatewright.synthesis.native import native_set
from planted import planted_swaps
from workloads import fourier


def random_circuit(n: int, count: int, seed: int) -> Circuit:
    """Gates that often commute, and some that do not."""
    rng = np.random.default_rng(seed)
    builder = Builder(n, 1)
    for _ in range(count):
        a, b = rng.permutation(n)[:2].tolist()
        kind = rng.integers(12)
        if kind < 3:
            builder.gate("cz", a, b)
        elif kind < 6:
            builder.gate("cx", a, b)
        elif kind < 8:
            builder.gate("rzz", a, b, parameters=[float(rng.uniform(0.1, 3))])
        elif kind < 11:
            builder.gate(("h", "t", "x", "rx")[rng.integers(3)], a)
        else:
            builder.gate("rx", a, parameters=[0.4])
    return builder.build()


@given(st.integers(3, 6), st.integers(0, 40), st.integers(0, 10**6))
@settings(max_examples=40, deadline=None)
def test_what_a_group_holds_commutes(n: int, count: int, seed: int) -> None:
    circuit = random_circuit(n, count, seed)
    device = gw.Device.from_graph(nx.path_graph(n), "cz-virtual-z")
    blocks = cut_blocks(circuit, native_set(device.gate_set), n, tolerance=1e-12)
    operations = blocks.operations
    rng = np.random.default_rng(seed)
    # Any order in which groups come in order along every wire is the same operation.
    left = list(range(len(operations)))
    spans = [range(operations.offsets[k], operations.offsets[k + 1]) for k in left]
    order = []
    while left:
        ready = [
            k
            for k in left
            if all(
                operations.groups[j]
                <= min(operations.groups[i] for h in left for i in spans[h] if same(operations, i, j))
                for j in spans[k]
            )
        ]
        order.append(ready[rng.integers(len(ready))])
        left.remove(order[-1])
    shuffled = circuit.take(blocks.expand(np.array(order, dtype=np.int64)))
    assert np.abs(shuffled.unitary() - circuit.unitary()).max() < 1e-12
    rank = np.empty(len(order), dtype=np.int32)
    rank[order] = np.arange(len(order))
    made, distance, _ = check_reorder(circuit, Reorder(blocks.item, rank), 1e-9)
    assert distance < 1e-12
    assert np.array_equal(made.op, shuffled.op)


def same(operations: object, i: int, j: int) -> bool:
    return bool(operations.wires[i] == operations.wires[j])  # type: ignore[attr-defined]


def test_what_does_not_commute_is_refused() -> None:
    circuit = Builder(3).gate("cx", 0, 1).gate("cx", 1, 2).gate("cz", 0, 2).build()
    windows = np.arange(3, dtype=np.int32)
    made, distance, _ = check_reorder(circuit, Reorder(windows, np.array([0, 1, 2], np.int32)), 1e-9)
    assert distance == 0
    for rank in ([1, 0, 2], [0, 2, 1], [2, 1, 0]):
        with pytest.raises(ProofError, match="change places and do not commute"):
            check_reorder(circuit, Reorder(windows, np.array(rank, np.int32)), 1e-9)
    for window, rank in (([0, 1, 0], [0, 1]), ([0, 1], [0, 1]), ([0, 1, 2], [0, 0, 1])):
        with pytest.raises(ProofError, match="the proof does not hold"):
            check_reorder(circuit, Reorder(np.array(window, np.int32), np.array(rank, np.int32)), 1e-9)
    measured = Builder(2, 1).gate("z", 0).measure(0, 0).gate("z", 1).measure(1, 0).build()
    with pytest.raises(ProofError, match="do not commute"):
        check_reorder(measured, Reorder(np.arange(4, dtype=np.int32), np.array([0, 3, 1, 2], np.int32)), 1e-9)


def test_a_proof_with_a_new_order_goes_through_a_file_and_a_wrong_one_does_not() -> None:
    device = gw.Device.from_graph(nx.path_graph(5), "cz-virtual-z")
    source = fourier(5)
    result = gw.compile(source, device)
    # n^2 + n - 4 CNOTs on a line (Park and Ahn 2023, from memory).
    assert result.costs.two_qubit_gates <= 26
    claims = [step for step in result.proof.steps if isinstance(step, Reorder)]
    assert len(claims) == 1
    read = decode_proof(encode_proof(result.proof))
    assert check_proof(source, result.circuit, read, device=device).error_bound == pytest.approx(
        result.verdict.error_bound, rel=0.1
    )
    wrong = replace(claims[0], rank=claims[0].rank[::-1].copy())
    steps = tuple(wrong if step is claims[0] else step for step in result.proof.steps)
    with pytest.raises(ProofError):
        check_proof(source, result.circuit, Proof(steps), device=device)
    with pytest.raises(ProofError, match="leads to no output"):
        check_proof(source, result.circuit, Proof(result.proof.steps[:1]), device=device)


@pytest.mark.parametrize("n", [4, 5, 6])
def test_all_pairs_once_on_a_line_need_the_least_swaps(n: int) -> None:
    # (n-1)(n-2)/2: no source; exhaustive search, n = 3 to 7.
    builder = Builder(n)
    rng = np.random.default_rng(n)
    pairs = [(a, b) for a in range(n) for b in range(a)]
    for k in rng.permutation(len(pairs)).tolist():
        builder.gate("rzz", *pairs[k], parameters=[0.3])
    result = gw.compile(builder.build(), gw.Device.from_graph(nx.path_graph(n), "cz-virtual-z"))
    assert result.costs.swaps_inserted == (n - 1) * (n - 2) // 2


def test_long_runs_are_cut() -> None:
    builder = Builder(2)
    for k in range(3 * GROUP):
        builder.gate("rz", 0, parameters=[0.1 * k])
    device = gw.Device.from_graph(nx.path_graph(2), "cz-virtual-z")
    blocks = cut_blocks(builder.build(), native_set(device.gate_set), 2, tolerance=1e-12)
    assert np.bincount(blocks.operations.groups).max() == GROUP


def test_the_beam_is_replayed() -> None:
    planted = planted_swaps(nx.convert_node_labels_to_integers(nx.grid_2d_graph(3, 4)), 6, filler=4, seed=1)
    n = len(planted.graph)
    graph = make_graph(np.array(planted.graph.edges), n)
    operations = make_operations(
        planted.pairs.ravel(), np.arange(0, planted.pairs.size + 1, 2), np.ones(len(planted.pairs)), n
    )
    router = Router(graph, operations)
    # From the hidden start, and from another one.
    found = router.search([planted.initial, np.roll(planted.initial, 1)], width=16, limit=40)
    assert found is not None
    start, script = found
    assert np.array_equal(start, planted.initial)
    assert len(script) == planted.swaps
    made = router.run(start, seed=0, script=script, record=True)
    assert made.swaps == planted.swaps
    assert router.search([planted.initial], width=16, limit=planted.swaps - 1) is None
