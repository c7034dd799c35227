"""Third stage: insert swaps, and rename the qubits to physical ones."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numba as nb
import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Piece, assemble
from gatewright.gates import GATES
from gatewright.mapping.routing import route as find_route
from gatewright.stages.draft import Draft
from gatewright.stages.place import mapping_task

__all__ = ["route"]


def route(draft: Draft) -> Draft:
    """Route the circuit from its start placement.

    The result acts on all physical qubits of the device; ``origin`` says which operation each comes from.
    """
    graph, operations = mapping_task(draft)
    routing = find_route(graph, operations, draft.initial, seed=draft.settings.seed, script=draft.script)
    circuit = draft.circuit
    key = np.arange(len(routing.events), dtype=np.int64)
    is_swap = routing.events < 0
    rows = routing.events[~is_swap]
    physical = _physical(routing.events, routing.swaps, circuit.qubits, circuit.offsets, draft.initial)
    moved = replace(circuit, qubits=physical)
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


@nb.njit("i4[::1](i8[::1], i4[:,::1], i4[::1], i8[::1], i4[::1])", cache=True, nogil=True)
def _physical(events: Any, swaps: Any, qubits: Any, offsets: Any, initial: Any) -> Any:
    """Return the qubits of each operation as the physical qubits that hold them at its time."""
    position = initial.copy()
    occupant = np.empty_like(position)
    for wire in range(len(position)):
        occupant[position[wire]] = wire
    moved = np.empty_like(qubits)
    for event in events:
        if event >= 0:
            for j in range(offsets[event], offsets[event + 1]):
                moved[j] = position[qubits[j]]
        else:
            p, q = swaps[-1 - event, 0], swaps[-1 - event, 1]
            u, v = occupant[p], occupant[q]
            occupant[p], occupant[q], position[u], position[v] = v, u, q, p
    return moved
