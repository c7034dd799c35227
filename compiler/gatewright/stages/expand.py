"""First stage: write every gate on three and more qubits in gates of one and two."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from gatewright.circuit import Circuit, Piece, assemble
from gatewright.errors import UnsupportedError
from gatewright.gates import GATES, UNITARY
from gatewright.proof.windows import Step
from gatewright.stages.draft import Draft
from gatewright.synthesis.expansions import expansion
from gatewright.synthesis.shannon import MAX_QUBITS, shannon_pieces

__all__ = ["each_alone", "expand"]


def expand(draft: Draft) -> Draft:
    """Expand named gates exactly, and explicit unitaries by the quantum Shannon decomposition.

    Every expanded operation becomes one window of the proof. A circuit without wide gates is left as it is.

    Raises
    ------
    UnsupportedError
        A wide gate for which there is no expansion.
    """
    circuit = draft.circuit
    wide = np.flatnonzero(circuit.is_unitary & (circuit.widths > 2))
    if not len(wide):
        return replace(draft, expanded=circuit)
    narrow = np.setdiff1d(np.arange(len(circuit)), wide)
    # Keys leave room for the longest expansion behind every operation.
    room = 1 << 32
    pieces: list[Piece] = []
    origins = []
    for chosen, piece in circuit.pieces(narrow, narrow * room):
        pieces.append(piece)
        origins.append(narrow[chosen])
    matrices = list(circuit.matrices)
    for positions, piece in circuit.pieces(wide, wide * room):
        rows = wide[positions]
        if piece.gate.name == UNITARY.name:
            made = _unitaries(piece, matrices)
        else:
            made = _named(piece)
        pieces += made
        origins += [part.key // room for part in made]
        del rows
    expanded, order = assemble(replace(circuit, matrices=tuple(matrices)), circuit.n_qubits, pieces)
    step = each_alone(circuit, expanded, np.concatenate(origins)[order])
    return replace(draft, circuit=expanded, expanded=expanded, steps=(*draft.steps, step))


def _named(piece: Piece) -> list[Piece]:
    terms = expansion(piece.gate.name)
    if terms is None:
        raise UnsupportedError(
            f"no expansion is known for the gate '{piece.gate.name}' on {piece.qubits.shape[1]} qubits",
            hint="define it in the circuit by gates of the standard library",
        )
    count = len(piece.key)
    return [
        Piece(GATES[name], piece.key + number, piece.qubits[:, list(wires)], np.tile(parameters, (count, 1)))
        for number, (name, wires, parameters) in enumerate(terms)
    ]


def _unitaries(piece: Piece, matrices: list[np.ndarray]) -> list[Piece]:
    assert piece.link is not None
    width = piece.qubits.shape[1]
    if width > MAX_QUBITS:
        raise UnsupportedError(
            "cannot yet decompose a unitary of this size", required=f"{MAX_QUBITS} qubits at most", found=str(width)
        )
    return [
        part
        for key, qubits, link in zip(piece.key.tolist(), piece.qubits, piece.link.tolist(), strict=True)
        for part in shannon_pieces(matrices[link], qubits, key, matrices)
    ]


def each_alone(source: Circuit, expanded: Circuit, origin: np.ndarray) -> Step:
    """Return the claim with one window for each operation of the source; nothing moves, nothing is carried over."""
    place = np.arange(source.n_qubits, dtype=np.int32)
    seams = np.zeros((len(source.qubits), 4))
    seams[:, 0] = 1
    return Step(
        initial=place,
        final=place,
        source_window=np.arange(len(source), dtype=np.int32),
        output_window=origin.astype(np.int32),
        offsets=source.offsets,
        wires=source.qubits,
        entry=source.qubits,
        exit=source.qubits,
        seams=seams,
        output=expanded,
    )
