"""Third stage: insert swaps, and rename the qubits to physical ones."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numba as nb
import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, Piece, assemble
from gatewright.gates import GATES
from gatewright.mapping.routing import route as find_route
from gatewright.mapping.search import in_time
from gatewright.proof.reorder import Reorder
from gatewright.stages.blocks import Blocks
from gatewright.stages.draft import Draft
from gatewright.stages.place import mapping_task, objective_of

__all__ = ["route"]


def route(draft: Draft) -> Draft:
    """Route the circuit from its start placement.

    Where commuting operations changed places on a wire, that is a step of the proof of its own.

    The result acts on all physical qubits of the device; ``origin`` says which operation each comes from.
    """
    graph, blocks = mapping_task(draft)
    seed, script, timed = draft.settings.seed, draft.script, in_time(objective_of(draft), draft.settings.effort)
    routing = find_route(graph, blocks.operations, draft.initial, seed=seed, script=script, in_time=timed)
    events = blocks.expand(routing.events)
    key = np.arange(len(events), dtype=np.int64)
    is_swap = events < 0
    claim = _reordering(draft.circuit, blocks, events[~is_swap])
    if claim is not None:
        circuit = claim.apply(draft.circuit)
        events[~is_swap] = np.arange(len(circuit))
        draft = replace(draft, circuit=circuit, expanded=circuit, steps=(*draft.steps, claim), blocks=None)
    circuit, rows = draft.circuit, events[~is_swap]
    physical = _physical(events, routing.swaps, circuit.qubits, circuit.offsets, draft.initial)
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


def _reordering(circuit: Circuit, blocks: Blocks, order: NDArray[np.int64]) -> Reorder | None:
    """Return the claim that the circuit may be done in `order`; None if no two operations on a wire change places."""
    place = np.empty(len(order), dtype=np.int64)
    place[order] = np.arange(len(order))
    lanes, offsets = circuit.lanes()
    by_lane = np.argsort(lanes, kind="stable")
    at = place[np.repeat(np.arange(len(circuit)), np.diff(offsets))[by_lane]]
    if not ((np.diff(at) < 0) & (np.diff(lanes[by_lane]) == 0)).any():
        return None
    items = blocks.item[order]
    fresh = np.ones(len(items), dtype=bool)
    fresh[1:] = items[1:] != items[:-1]
    rank = np.empty(len(blocks.operations), dtype=np.int32)
    rank[items[fresh]] = np.arange(np.count_nonzero(fresh))
    return Reorder(window=blocks.item, rank=rank)


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
