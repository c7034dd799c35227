"""Coupling graphs for tests and benchmarks, built by networkx and numbered from 0; no device of anybody's."""

from __future__ import annotations

import math

import networkx as nx


def _numbered(graph: nx.Graph) -> nx.Graph:
    plain = nx.Graph()
    plain.add_nodes_from(range(len(graph)))
    number = {node: k for k, node in enumerate(sorted(graph))}
    plain.add_edges_from((number[a], number[b]) for a, b in graph.edges)
    return plain


def line(n: int) -> nx.Graph:
    return nx.path_graph(n)


def ring(n: int) -> nx.Graph:
    return nx.cycle_graph(n)


def grid(rows: int, columns: int) -> nx.Graph:
    return _numbered(nx.grid_2d_graph(rows, columns))


def crossed_grid(rows: int, columns: int) -> nx.Graph:
    """A grid with both diagonals of alternate cells, as on a chessboard."""
    graph = nx.grid_2d_graph(rows, columns)
    for r in range(rows - 1):
        for c in range(columns - 1):
            if (r + c) % 2:
                graph.add_edge((r, c), (r + 1, c + 1))
                graph.add_edge((r, c + 1), (r + 1, c))
    return _numbered(graph)


def diamond(rows: int, columns: int) -> nx.Graph:
    """A square lattice turned by 45 degrees: each site meets two of the row above and two of the row below."""
    graph = nx.Graph()
    for r in range(rows - 1):
        for c in range(columns):
            for other in (c, c + (1 if r % 2 else -1)):
                if 0 <= other < columns:
                    graph.add_edge((r, c), (r + 1, other))
    return _numbered(graph)


def hexagons(rows: int, columns: int) -> nx.Graph:
    return _numbered(nx.hexagonal_lattice_graph(rows, columns))


def hexagons_on_edges(rows: int, columns: int) -> nx.Graph:
    """A hexagonal lattice with one more site in the middle of each edge."""
    lattice = hexagons(rows, columns)
    graph = nx.Graph()
    for k, (a, b) in enumerate(lattice.edges):
        graph.add_edges_from([(a, len(lattice) + k), (len(lattice) + k, b)])
    return _numbered(graph)


def octagons() -> nx.Graph:
    """Two rings of eight, joined by two edges: 16 qubits."""
    graph = nx.disjoint_union(nx.cycle_graph(8), nx.cycle_graph(8))
    graph.add_edges_from([(1, 14), (2, 13)])
    return graph


def trimmed(graph: nx.Graph, n: int) -> nx.Graph:
    """The first n sites of a breadth-first walk from site 0: connected."""
    kept = [0, *(b for _, b in nx.bfs_edges(graph, 0))][:n]
    return _numbered(graph.subgraph(kept))


def grid_for(n: int) -> nx.Graph:
    """The grid closest to a square with room for n."""
    rows = math.isqrt(n)
    return grid(rows, -(-n // rows))


def hexagons_for(n: int) -> nx.Graph:
    """The most compact hexagonal lattice with room for n."""
    sizes = [(2 * (r + 1) * (c + 1) - 2, abs(r - c), r, c) for r in range(1, 40) for c in range(1, 40)]
    _, _, rows, columns = min(size for size in sizes if size[0] >= n)
    return hexagons(rows, columns)
