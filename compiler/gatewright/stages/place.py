"""Second stage: choose the physical qubit on which each source qubit starts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gatewright.mapping.routing import Graph, make_graph
from gatewright.mapping.search import plan
from gatewright.stages.blocks import Blocks, cut_blocks
from gatewright.stages.draft import Draft

__all__ = ["device_graph", "mapping_task", "objective_of", "place"]


def place(draft: Draft) -> Draft:
    """Choose a start placement that needs few swaps and, where the device states the entangler's errors, good edges.

    Raises
    ------
    DisconnectedError, InputError
        See `gatewright.mapping.search.plan`.
    """
    graph, blocks = mapping_task(draft)
    found = plan(
        graph,
        blocks.operations,
        n_source=draft.circuit.n_qubits,
        active=np.asarray(draft.device.active),
        effort=draft.settings.effort,
        seed=draft.settings.seed,
        fixed=draft.settings.placement,
        objective=objective_of(draft),
    )
    return replace(draft, blocks=blocks, initial=found.initial, script=found.script)


def objective_of(draft: Draft) -> str:
    """Return what placement and routing make least."""
    return "depth" if draft.settings.prefer == "duration" else "entanglers"


def mapping_task(draft: Draft) -> tuple[Graph, Blocks]:
    """Return the coupling graph, and the circuit in blocks on as many wires as the device has qubits."""
    n = draft.device.n_qubits
    blocks = draft.blocks
    if blocks is None or len(blocks.item) != len(draft.circuit):
        blocks = cut_blocks(draft.circuit, draft.native, n, tolerance=draft.settings.tolerance)
    return device_graph(draft), blocks


def device_graph(draft: Draft) -> Graph:
    """Return the coupling graph, with what entanglers cost on its edges."""
    return make_graph(draft.device.edges, draft.device.n_qubits, edge_cost=_edge_costs(draft))


def _edge_costs(draft: Draft) -> NDArray[np.float64] | None:
    """Return −log of the best entangler's process fidelity on each edge, or None if it is not known on all of them."""
    edges, names = draft.device.edges, [tool.gate.name for tool in draft.native.straight]
    if not names or not len(edges):
        return None
    # On a directed edge the gate is known in one order only.
    errors: NDArray[np.float64] = np.fmin.reduce(
        [draft.device.errors(name, way) for name in names for way in (edges, edges[:, ::-1])]
    )
    if np.isnan(errors).any():
        return None
    return -np.log(np.maximum(1 - 1.25 * errors, 1e-9))
