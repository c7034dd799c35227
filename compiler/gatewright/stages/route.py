"""Third stage: insert swaps, and rename the qubits to physical ones."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Piece, assemble
from gatewright.gates import GATES
from gatewright.mapping.routing import Routing
from gatewright.mapping.routing import route as find_route
from gatewright.stages.draft import Draft
from gatewright.stages.place import mapping_task

__all__ = ["route"]


def route(draft: Draft) -> Draft:
    """Route the circuit from its start placement.

    The result acts on all physical qubits of the device; ``origin`` says which operation each comes from.
    """
    graph, operations = mapping_task(draft)
    routing = find_route(graph, operations, draft.initial, seed=draft.settings.seed)
    circuit = draft.circuit
    key = np.arange(len(routing.events), dtype=np.int64)
    is_swap = routing.events < 0
    rows = routing.events[~is_swap]
    moved = replace(circuit, qubits=_physical(draft, routing))
    pieces: list[Piece] = []
    origins: list[NDArray[np.int64]] = []
    for chosen, piece in moved.pieces(rows, key[~is_swap]):
        pieces.append(piece)
        origins.append(rows[chosen])
    if len(routing.swaps):
        pieces.append(Piece(GATES["swap"], key[is_swap], routing.swaps))
        origins.append(np.full(len(routing.swaps), -1))
    routed, order = assemble(circuit, graph.n, pieces)
    origin = np.concatenate(origins)[order] if origins else np.zeros(0, dtype=np.int64)
    return replace(draft, circuit=routed, origin=origin, final=routing.final, swaps=len(routing.swaps))


def _physical(draft: Draft, routing: Routing) -> NDArray[np.int32]:
    """Return the circuit's qubits at the time of each operation as physical qubits."""
    circuit = draft.circuit
    position = draft.initial.copy()
    occupant = np.empty_like(position)
    occupant[position] = np.arange(len(position))
    qubits = np.empty_like(circuit.qubits)
    events = routing.events
    swap_at = np.flatnonzero(events < 0)
    start = 0
    # Between two swaps nothing moves: one gather serves all operations there.
    for at, (p, q) in zip([*swap_at.tolist(), len(events)], [*routing.swaps.tolist(), (0, 0)], strict=True):
        rows = events[start:at]
        if len(rows):
            first, width = circuit.offsets[rows], circuit.widths[rows]
            flat = np.repeat(first - (np.cumsum(width) - width), width) + np.arange(int(width.sum()))
            qubits[flat] = position[circuit.qubits[flat]]
        u, v = occupant[p], occupant[q]
        if at < len(events):
            occupant[p], occupant[q], position[u], position[v] = v, u, q, p
        start = at + 1
    return qubits
