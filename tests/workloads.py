"""Circuits that people run: adders, Fourier transforms, QAOA, Ising chains and lattices, multipliers; and random ones.

Generated here from the published constructions, so that the sizes and seeds used for tuning and those used for judging
can be kept apart.
"""

from __future__ import annotations

from collections.abc import Iterator

import networkx as nx
import numpy as np

import lattices
from gatewright.circuit import Builder, Circuit


def adder(bits: int) -> Circuit:
    """Add a register to another, with carries in and out; on 2 bits + 2 qubits. Cuccaro et al., quant-ph/0410184."""
    builder = Builder(2 * bits + 2)
    a, b = [2 * k + 2 for k in range(bits)], [2 * k + 1 for k in range(bits)]
    _ripple(builder, a, b, carry=0, out=2 * bits + 1)
    return builder.build()


def _ripple(builder: Builder, a: list[int], b: list[int], *, carry: int, out: int) -> None:
    below = [carry, *a[:-1]]
    for c, x, y in zip(below, b, a, strict=True):
        builder.gate("cx", y, x).gate("cx", y, c).gate("ccx", c, x, y)
    builder.gate("cx", a[-1], out)
    for c, x, y in reversed(list(zip(below, b, a, strict=True))):
        builder.gate("ccx", c, x, y).gate("cx", y, c).gate("cx", c, x)


def multiplier(bits: int) -> Circuit:
    """Multiply two registers into a third, adding shifted rows of partial products; on 5 bits + 1 qubits."""
    a, b = list(range(bits)), list(range(bits, 2 * bits))
    row, product = list(range(2 * bits, 3 * bits)), list(range(3 * bits, 5 * bits))
    builder = Builder(5 * bits + 1)
    for k in range(bits):
        for j in range(bits):
            builder.gate("ccx", a[k], b[j], row[j])
        _ripple(builder, row, product[k : k + bits], carry=5 * bits, out=product[k + bits])
        for j in range(bits):
            builder.gate("ccx", a[k], b[j], row[j])
    return builder.build()


def fourier(n: int) -> Circuit:
    """The quantum Fourier transform without its final reversal; Nielsen & Chuang, section 5.1."""
    builder = Builder(n)
    for k in range(n):
        builder.gate("h", k)
        for j in range(k + 1, n):
            builder.gate("cp", j, k, parameters=[np.pi / 2 ** (j - k)])
    return builder.build()


def qaoa(n: int, *, degree: int, layers: int, seed: int) -> Circuit:
    """Layers for the largest cut of a random regular graph; Farhi, Goldstone, Gutmann, arXiv:1411.4028."""
    rng = np.random.default_rng(seed)
    graph = nx.random_regular_graph(degree, n, seed=seed)
    builder = Builder(n)
    for k in range(n):
        builder.gate("h", k)
    for _ in range(layers):
        gamma, beta = rng.uniform(0.1, 1.4, size=2)
        edges = np.array(graph.edges)
        for a, b in edges[rng.permutation(len(edges))].tolist():
            builder.gate("rzz", a, b, parameters=[gamma])
        for k in range(n):
            builder.gate("rx", k, parameters=[beta])
    return builder.build()


def ising(graph: nx.Graph, *, steps: int, seed: int) -> Circuit:
    """First-order Trotter steps of an Ising model in a transverse field; its numbering is shuffled."""
    rng = np.random.default_rng(seed)
    n = len(graph)
    name = rng.permutation(n)
    coupling = rng.uniform(0.1, 1.4, size=graph.number_of_edges())
    builder = Builder(n)
    for _ in range(steps):
        for (a, b), angle in zip(graph.edges, coupling, strict=True):
            builder.gate("rzz", name[a], name[b], parameters=[angle])
        for k in range(n):
            builder.gate("rx", k, parameters=[0.3])
    return builder.build()


def torus(rows: int, columns: int) -> nx.Graph:
    return nx.convert_node_labels_to_integers(nx.grid_2d_graph(rows, columns, periodic=True), ordering="sorted")


def second_neighbours(n: int) -> nx.Graph:
    """A closed chain with couplings of range one and two."""
    return nx.circulant_graph(n, [1, 2])


def random_pairs(n: int, gates: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    first = rng.integers(n, size=gates)
    return np.stack([first, (first + rng.integers(1, n, size=gates)) % n], axis=1).astype(np.int32)


def from_pairs(pairs: np.ndarray, n: int, seed: int = 0) -> Circuit:
    """CX on each pair, random one-qubit gates before it: no two neighbours commute."""
    rng = np.random.default_rng(seed)
    builder = Builder(n)
    angles = rng.uniform(0.2, 1.2, size=(len(pairs), 2, 3))
    for pair, turn in zip(pairs.tolist(), angles.tolist(), strict=True):
        for wire, values in zip(pair, turn, strict=True):
            builder.gate("u3", wire, parameters=values)
        builder.gate("cx", *pair)
    return builder.build()


def structured(*, held_out: bool, largest: int = 67) -> Iterator[tuple[str, Circuit, str, nx.Graph]]:
    """Yield name, circuit, and the graph to put it on with its name.

    The sizes and seeds for judging are not those for tuning.
    """
    if held_out:
        circuits = [
            *((f"adder {b}", adder(b)) for b in (5, 9, 17, 32)),
            *((f"fourier {n}", fourier(n)) for n in (11, 19, 37, 67)),
            *((f"qaoa {n}/{d}/{p}", qaoa(n, degree=d, layers=p, seed=900 + n)) for n, d, p in QAOA_JUDGED),
            *((f"torus {r}x{c}", ising(torus(r, c), steps=3, seed=77)) for r, c in ((4, 5), (5, 7), (8, 8))),
            *((f"second neighbours {n}", ising(second_neighbours(n), steps=4, seed=78)) for n in (13, 31, 61)),
            *((f"multiplier {b}", multiplier(b)) for b in (2, 4, 7, 13)),
        ]
    else:
        circuits = [
            *((f"adder {b}", adder(b)) for b in (6, 11, 20)),
            *((f"fourier {n}", fourier(n)) for n in (13, 24, 48)),
            *((f"qaoa {n}/{d}/{p}", qaoa(n, degree=d, layers=p, seed=n)) for n, d, p in QAOA_TUNED),
            *((f"torus {r}x{c}", ising(torus(r, c), steps=3, seed=7)) for r, c in ((3, 6), (6, 7))),
            *((f"second neighbours {n}", ising(second_neighbours(n), steps=4, seed=8)) for n in (16, 40)),
            *((f"multiplier {b}", multiplier(b)) for b in (3, 5, 9)),
        ]
    for name, circuit in circuits:
        if circuit.n_qubits <= largest:
            yield name, circuit, "grid", lattices.grid_for(circuit.n_qubits)
            yield name, circuit, "hexagons", lattices.hexagons_for(circuit.n_qubits)


#: Qubits, degree, layers.
QAOA_JUDGED = ((12, 3, 2), (22, 3, 1), (30, 4, 2), (44, 3, 2), (64, 3, 1))
QAOA_TUNED = ((14, 3, 1), (26, 3, 2), (40, 4, 1), (58, 3, 2))
