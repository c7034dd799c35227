"""Quality of placement and routing on circuits whose optimum is known: small, and the same on every machine.

The full tables are made by ``tests/bench/mapping.py``.
"""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest

import gatewright as gw
import lattices
import workloads
from gatewright.mapping.bounds import Order
from gatewright.mapping.exact import fewest_swaps
from gatewright.mapping.routing import make_graph
from planted import planted_depth, planted_swaps
from test_planted import GRAPHS


def compiled(circuit: gw.Circuit, graph: nx.Graph, **options: object) -> gw.Result:
    return gw.compile(circuit, gw.Device.from_graph(list(graph.edges), "cz-virtual-z"), **options)  # type: ignore


@pytest.mark.parametrize("name", ["octagons-16", "crossed-20", "edges-53", "diamond-54"])
@pytest.mark.parametrize("density", [0.2, 0.6, 1.0])
def test_planted_depths_need_no_swap(name: str, density: float) -> None:
    for seed in range(2):
        made = planted_depth(GRAPHS[name], 12, density=density, seed=seed)
        assert compiled(workloads.from_pairs(made.pairs, len(made.graph)), made.graph).costs.swaps_inserted == 0


@pytest.mark.parametrize("filler", [40, 200])
def test_planted_swaps_are_found(filler: int) -> None:
    for name in ("grid-16", "crossed-20"):
        made = planted_swaps(GRAPHS[name], 5, filler=filler, seed=1)
        result = compiled(workloads.from_pairs(made.pairs, len(made.graph)), made.graph)
        assert result.costs.swaps_inserted == result.lower_bound.swaps == 5


# Li, Ding, Xie, ASPLOS 2019: added CNOTs of QFT-10, 13, 16 and 20 on a 4 × 5 grid with crossed cells.
@pytest.mark.parametrize(("n", "published"), [(10, 54), (13, 93), (16, 186), (20, 372)])
def test_fourier_transforms_on_a_crossed_grid(n: int, published: int) -> None:
    result = compiled(workloads.fourier(n), lattices.crossed_grid(4, 5))
    assert result.costs.two_qubit_gates - n * (n - 1) < published


def test_small_circuits_stay_near_the_optimum() -> None:
    beyond = []
    for seed in range(12):
        graph = (lattices.line(5), lattices.ring(5), lattices.grid(2, 3))[seed % 3]
        pairs = workloads.random_pairs(5, 12, seed)
        best = fewest_swaps(make_graph(np.array(graph.edges), len(graph)), Order.strict(pairs, 5))
        assert best is not None
        result = compiled(workloads.from_pairs(pairs, 5), graph)
        assert result.lower_bound.swaps <= best.swaps <= result.costs.swaps_inserted
        beyond.append(result.costs.swaps_inserted - best.swaps)
    assert np.mean(beyond) <= NEAR, beyond


#: Swaps beyond the optimum, on average.
NEAR = 1.0
