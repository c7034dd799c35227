"""After routing: bring the source qubits to the places where they have to end, if any are given."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from gatewright.circuit import Piece, assemble
from gatewright.gates import GATES
from gatewright.mapping.restoring import restoring_swaps
from gatewright.stages.draft import Draft
from gatewright.stages.place import device_graph

__all__ = ["restore"]


def restore(draft: Draft) -> Draft:
    """Append the swaps that lead to ``settings.final``; these merge with the gates before them like any others.

    Raises
    ------
    DisconnectedError
        A qubit cannot get there.
    """
    wanted = draft.settings.final
    if wanted is None:
        return draft
    n = len(wanted)
    graph = device_graph(draft)
    swaps = restoring_swaps(graph, draft.final[:n], np.array(wanted, dtype=np.int32))
    if not swaps:
        return draft
    circuit, count = draft.circuit, len(draft.circuit)
    rows = np.arange(count, dtype=np.int64)
    chosen_pieces = list(circuit.pieces(rows, rows))
    pieces = [piece for _, piece in chosen_pieces]
    pieces.append(Piece(GATES["swap"], np.arange(count, count + len(swaps)), np.array(swaps, dtype=np.int32)))
    restored, _ = assemble(circuit, circuit.n_qubits, pieces)
    final = draft.final.copy()
    occupant = np.empty_like(final)
    occupant[final] = np.arange(len(final), dtype=final.dtype)
    for p, q in swaps:
        occupant[p], occupant[q] = occupant[q], occupant[p]
    final[occupant] = np.arange(len(final), dtype=final.dtype)
    return replace(
        draft,
        circuit=restored,
        origin=np.concatenate([draft.origin, np.full(len(swaps), -1)]),
        final=final,
        swaps=draft.swaps + len(swaps),
    )
