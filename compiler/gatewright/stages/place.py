"""Second stage: choose the physical qubit on which each source qubit starts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gatewright.mapping.search import plan
from gatewright.mapping.routing import Graph, Operations, make_graph, make_operations
from gatewright.stages.draft import Draft

__all__ = ["place"]


def place(draft: Draft) -> Draft:
    """Choose a start placement that needs few swaps and, where the device states the entangler's errors, good edges.

    Raises
    ------
    DisconnectedError, InputError
        See `gatewright.mapping.search.plan`.
    """
    graph, operations = mapping_task(draft)
    found = plan(
        graph,
        operations,
        n_source=draft.circuit.n_qubits,
        active=np.asarray(draft.device.active),
        effort=draft.settings.effort,
        seed=draft.settings.seed,
        fixed=draft.settings.placement,
    )
    return replace(draft, initial=found.initial, script=found.script)


def mapping_task(draft: Draft) -> tuple[Graph, Operations]:
    """Return the coupling graph, and the circuit's operations on as many wires as the device has qubits."""
    circuit, n = draft.circuit, draft.device.n_qubits
    wires, offsets = circuit.lanes()
    # Bits are numbered behind the circuit's own qubits; make room for the idle ones.
    wires = np.where(wires >= circuit.n_qubits, wires + (n - circuit.n_qubits), wires)
    coupled = circuit.is_unitary & (circuit.widths == 2)
    graph = make_graph(draft.device.edges, n, edge_cost=_edge_costs(draft))
    return graph, make_operations(wires, offsets, coupled, n + circuit.n_bits)


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
