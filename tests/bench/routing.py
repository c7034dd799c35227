"""Time placement and routing, against a floor measured in the same run, and count what planted circuits cost.

The floor is a compiled loop that walks the same gates by one cursor a wire, with no swaps and no choices.

    python tests/bench/routing.py [--gates 100000]
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable

import networkx as nx
import numpy as np
from numba import njit

from gatewright.mapping.routing import make_graph, make_operations, route, run_pass
from gatewright.mapping.search import EFFORTS, place, plan


@njit("int64(int32[::1], int32[::1], int32[::1])")
def walk(wires, line, cursor):  # type: ignore[no-untyped-def]
    """Run every gate that heads both its wires, until none is left; return how many ran."""
    stack = np.empty(cursor.shape[0] + 1, np.int32)
    ran = top = 0
    for w in range(cursor.shape[0]):
        g = line[cursor[w]]
        if g >= 0 and wires[2 * g] == w and line[cursor[wires[2 * g + 1]]] == g:
            stack[top] = g
            top += 1
    while top > 0:
        top -= 1
        g = stack[top]
        ran += 1
        a = wires[2 * g]
        b = wires[2 * g + 1]
        cursor[a] += 1
        cursor[b] += 1
        g = line[cursor[a]]
        if g >= 0 and line[cursor[wires[2 * g]]] == g and line[cursor[wires[2 * g + 1]]] == g:
            stack[top] = g
            top += 1
        h = line[cursor[b]]
        if h >= 0 and h != g and line[cursor[wires[2 * h]]] == h and line[cursor[wires[2 * h + 1]]] == h:
            stack[top] = h
            top += 1
    return ran


def best_of(times: int, run: Callable[[], object]) -> float:
    """Return the least seconds of some runs."""
    seconds = []
    for _ in range(times):
        begun = time.perf_counter()
        run()
        seconds.append(time.perf_counter() - begun)
    return min(seconds)


def grid(rows: int, columns: int) -> nx.Graph:
    return nx.convert_node_labels_to_integers(nx.grid_2d_graph(rows, columns))


def random_pairs(n: int, gates: int, seed: int = 0) -> np.ndarray:
    rng = np.random.default_rng(seed)
    first = rng.integers(n, size=gates)
    return np.stack([first, (first + rng.integers(1, n, size=gates)) % n], axis=1).astype(np.int32)


def planted_pairs(graph: nx.Graph, layers: int, share: float, seed: int = 0) -> np.ndarray:
    """Gates on random matchings of the graph's edges, the wires renamed: no swap is needed."""
    rng = np.random.default_rng(seed)
    names, edges = rng.permutation(len(graph)), np.array(graph.edges)
    pairs = []
    for _ in range(layers):
        busy: set[int] = set()
        for a, b in edges[rng.permutation(len(edges))].tolist():
            if not {a, b} & busy and rng.random() < share:
                busy |= {a, b}
                pairs.append((names[a], names[b]))
    return np.array(pairs, dtype=np.int32)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--gates", type=int, default=100_000)
    options = parser.parse_args()
    print(f"{'random gates':<26} {'one pass':>14} {'floor':>14} {'ratio':>6} {'swaps/gate':>11}   placement, by effort")
    for name, graph in (
        ("20 qubits, grid", grid(4, 5)),
        ("100 qubits, grid", grid(10, 10)),
        ("54 qubits, hexagons", nx.convert_node_labels_to_integers(nx.hexagonal_lattice_graph(4, 4))),
    ):
        n = len(graph)
        pairs = random_pairs(n, options.gates)
        made = make_graph(np.array(graph.edges), n)
        operations = make_operations(pairs.ravel(), np.arange(0, pairs.size + 1, 2), np.ones(len(pairs)), n)
        lengths = np.bincount(operations.wires, minlength=n)
        line = np.full(operations.wires.size + n, -1, dtype=np.int32)
        rows = np.argsort(operations.wires, kind="stable")
        line[np.arange(rows.size) + operations.wires[rows]] = rows // 2
        cursor = (np.cumsum(lengths + 1) - lengths - 1).astype(np.int32)
        assert walk(operations.wires, line, cursor.copy()) == len(pairs)
        floor = best_of(5, lambda w=operations.wires, x=line, c=cursor: walk(w, x, c.copy()))
        start = np.arange(n, dtype=np.int32)
        seconds = best_of(3, lambda g=made, o=operations, s=start: run_pass(g, o, s))
        swaps = run_pass(made, operations, start).swaps
        placed = ", ".join(
            "{} {:.2f} s".format(
                effort,
                best_of(
                    1,
                    lambda g=made, o=operations, k=n, e=effort: place(
                        g, o, n_source=k, active=np.ones(k, bool), effort=e
                    ),
                ),
            )
            for effort in EFFORTS
        )
        print(
            f"{name:<26} {len(pairs) / seconds:>10.3g} g/s {len(pairs) / floor:>10.3g} g/s {seconds / floor:>6.0f}"
            f" {swaps / len(pairs):>11.2f}   {placed}"
        )
    print("\nplanted circuits, swaps found (least possible: 0) and seconds")
    for name, graph in (
        ("54 qubits, 6 x 9 grid", grid(6, 9)),
        ("100 qubits, 10 x 10 grid", grid(10, 10)),
        ("142 qubits, hexagons", nx.convert_node_labels_to_integers(nx.hexagonal_lattice_graph(7, 7))),
    ):
        n = len(graph)
        made = make_graph(np.array(graph.edges), n)
        found = []
        for layers, share in ((2, 1.0), (5, 0.4), (20, 0.7)):
            pairs = planted_pairs(graph, layers, share)
            operations = make_operations(pairs.ravel(), np.arange(0, pairs.size + 1, 2), np.ones(len(pairs)), n)
            begun = time.perf_counter()
            planned = plan(made, operations, n_source=n, active=np.ones(n, bool))
            count = len(route(made, operations, planned.initial, script=planned.script).swaps)
            found.append(f"{len(pairs)} gates: {count} swaps {time.perf_counter() - begun:.2f} s")
        print(f"{name:<26} {'   '.join(found)}")


if __name__ == "__main__":
    main()
