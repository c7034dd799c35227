"""Coupling graphs: generators against networkx's own, and edge lists that are wrong."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gatewright.devices.coupling import (
    MAX_PAIRS,
    MAX_QUBITS,
    SHAPES,
    Coupling,
    all_to_all,
    grid,
    hexagons,
    line,
    read_coupling,
    ring,
)
from gatewright.devices.reading import Table
from gatewright.errors import DeviceError

sizes = st.integers(1, 6)


def as_graph(coupling: Coupling) -> nx.Graph:
    graph = nx.Graph()
    graph.add_nodes_from(range(coupling.n_qubits))
    graph.add_edges_from(coupling.edges.tolist())
    return graph


def same(coupling: Coupling, expected: nx.Graph) -> bool:
    """Equal as labelled graphs, with the edges in our order."""
    edges = sorted(tuple(sorted(edge)) for edge in expected.edges)
    return coupling.n_qubits == len(expected) and [tuple(e) for e in coupling.edges.tolist()] == edges


def table(data: object) -> Table:
    return Table(data, error=DeviceError, key="coupling")


@given(st.integers(1, 30))
def test_line_and_all_to_all_are_those_of_networkx(n: int) -> None:
    assert same(line(n), nx.path_graph(n))
    assert same(all_to_all(n), nx.complete_graph(n))


@given(st.integers(3, 30))
def test_ring_is_that_of_networkx(n: int) -> None:
    assert same(ring(n), nx.cycle_graph(n))


@given(sizes, sizes)
def test_grid_is_that_of_networkx_numbered_row_by_row(rows: int, columns: int) -> None:
    expected = nx.relabel_nodes(nx.grid_2d_graph(rows, columns), lambda site: site[0] * columns + site[1])
    assert same(grid(rows, columns), expected)


@pytest.mark.parametrize("rows", range(1, 6))
@pytest.mark.parametrize("columns", range(1, 6))
def test_hexagons_are_those_of_networkx(rows: int, columns: int) -> None:
    # networkx draws the same patch turned by 90 degrees: its rows are our columns.
    plain = as_graph(hexagons(rows, columns))
    assert nx.is_isomorphic(plain, nx.hexagonal_lattice_graph(columns, rows))
    heavy = as_graph(hexagons(rows, columns, on_edges=True))
    subdivided = nx.Graph()
    for k, (a, b) in enumerate(sorted(plain.edges)):
        nx.add_path(subdivided, [a, len(plain) + k, b])
    assert nx.utils.graphs_equal(heavy, subdivided)


@given(sizes, sizes)
def test_hexagons_are_a_planar_patch_of_that_many_cells(rows: int, columns: int) -> None:
    patch = as_graph(hexagons(rows, columns))
    # Euler: faces inside = edges - vertices + 1; every corner has two or three neighbours.
    assert patch.number_of_edges() - len(patch) + 1 == rows * columns
    assert {degree for _, degree in patch.degree} <= {2, 3}
    # Numbered line by line: a site's neighbour in its own line is the next number.
    assert nx.check_planarity(patch)[0] and nx.is_connected(patch)


@given(st.integers(2, 12), st.data())
def test_edge_lists_are_normalised(n: int, data: st.DataObject) -> None:
    pool = [(a, b) for a in range(n) for b in range(a)]
    chosen = data.draw(st.lists(st.sampled_from(pool), unique=True))
    flipped = [edge if data.draw(st.booleans()) else edge[::-1] for edge in chosen]
    coupling = Coupling.from_edges(flipped, n_qubits=n)
    assert [tuple(e) for e in coupling.edges.tolist()] == sorted((b, a) for a, b in chosen)
    assert [tuple(e) for e in coupling.pairs.tolist()] == sorted(chosen + [(b, a) for a, b in chosen])
    directed = Coupling.from_edges(np.array(flipped, dtype=np.int64).reshape(-1, 2), n_qubits=n, directed=True)
    assert [tuple(e) for e in directed.pairs.tolist()] == sorted(flipped)
    assert directed.pairs.dtype == np.int32


@given(sizes, sizes, st.data())
def test_leaving_sites_out_is_an_induced_subgraph(rows: int, columns: int, data: st.DataObject) -> None:
    full = grid(rows, columns)
    gone = data.draw(st.sets(st.integers(0, full.n_qubits - 1), max_size=full.n_qubits - 1))
    kept = [q for q in range(full.n_qubits) if q not in gone]
    expected = nx.relabel_nodes(as_graph(full).subgraph(kept), {q: k for k, q in enumerate(kept)})
    assert same(full.without(gone), expected)


def test_directed_edges_may_be_given_in_both_orders() -> None:
    assert Coupling.from_edges([(0, 1), (1, 0)], directed=True).pairs.tolist() == [[0, 1], [1, 0]]


@pytest.mark.parametrize(
    ("edges", "n_qubits", "message"),
    [
        ([(0, 1), (1, 0)], 2, "an edge is given twice; required: each edge once; found: [0, 1]"),
        ([(0, 1), (1, 1)], 2, "edge 1 (counted from 0) is wrong"),
        ([(0, 2)], 2, "required: two distinct qubits from 0 to 1; found: (0, 2)"),
        ([(0, -1)], 2, "found: (0, -1)"),
        ([(0, 1.0)], 2, "found: (0, 1.0)"),
        ([(0, True)], 2, "found: (0, True)"),
        ([(0, 1, 2)], 3, "found: (0, 1, 2)"),
        (["01"], 2, "found: '01'"),
        (np.array([[0, 5]]), 5, "found: [0, 5]"),
        (7, 2, "the edges are not a list"),
        ([], None, "no edges and no number of qubits"),
        ([(0, 1)], 0, f"required: 1 to {MAX_QUBITS}; found: 0"),
        ([(0, 10**30)], None, "edge 0"),
    ],
)
def test_wrong_edges_are_refused(edges: object, n_qubits: int | None, message: str) -> None:
    with pytest.raises(DeviceError) as caught:
        Coupling.from_edges(edges, n_qubits=n_qubits)  # type: ignore[arg-type]
    assert message in str(caught.value)


@pytest.mark.parametrize(
    ("data", "message"),
    [
        ({}, "either 'coupling.shape' or 'coupling.edges'; found: neither"),
        ({"shape": "line", "qubits": 2, "edges": []}, "found: both"),
        ({"shape": "gird", "rows": 2}, "unknown coupling shape 'gird'; did you mean 'grid'?"),
        ({"shape": "grid", "rows": 2}, "'columns' is missing in 'coupling'"),
        ({"shape": "grid", "rows": 2, "columns": 0}, "'coupling.columns' is wrong"),
        ({"shape": "grid", "rows": 2, "columns": 2, "qubits": 4}, "unknown key 'qubits' in 'coupling'"),
        ({"shape": "ring", "qubits": 2}, "an integer from 3"),
        ({"shape": "grid", "rows": 1000, "columns": 1000}, f"required: 1 to {MAX_QUBITS}; found: 1000000"),
        ({"shape": "all-to-all", "qubits": 9000}, f"at most {MAX_PAIRS} ordered pairs"),
        ({"shape": "line", "qubits": "9"}, "found: '9'"),
        ({"shape": "line", "qubits": 3, "directed": 1}, "'coupling.directed' is wrong; required: true or false"),
        ({"shape": "line", "qubits": 3, "without": [3]}, "a site to leave out is not there"),
        ({"shape": "line", "qubits": 3, "without": [0, 1, 2]}, "every site is left out"),
        ({"shape": "hexagons", "rows": 60, "columns": 60, "on_edges": True}, "wrong number of qubits"),
        ({"edges": {"0": 1}}, "'coupling.edges' is wrong; required: a list"),
    ],
)
def test_wrong_tables_are_refused(data: dict[str, object], message: str) -> None:
    with pytest.raises(DeviceError) as caught:
        read_coupling(table(data))
    assert message in str(caught.value)
    assert "\n" not in str(caught.value)


def test_every_shape_is_read() -> None:
    assert read_coupling(table({"shape": "line", "qubits": 4})).edges.tolist() == line(4).edges.tolist()
    heavy = read_coupling(table({"shape": "hexagons", "rows": 1, "columns": 2, "on_edges": True, "without": [0]}))
    assert heavy.n_qubits == 20
    one_way = read_coupling(table({"shape": "line", "qubits": 3, "directed": True}))
    assert one_way.pairs.tolist() == [[0, 1], [1, 2]]
    for name, generator in SHAPES.items():
        assert generator.__doc__ and generator.__name__.replace("_", "-") == name


def test_the_largest_sizes_are_quick_enough_to_build() -> None:
    assert len(all_to_all(1000).pairs) == 999_000
    assert grid(100, 100).n_qubits == MAX_QUBITS
