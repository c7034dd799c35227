"""Compiled loops of the synthesise stage: one-qubit layers merged along the wires, phases carried on."""

from __future__ import annotations

import math
from typing import Any

import numba as nb
import numpy as np

__all__ = ["carry_phases", "merge_runs"]


@nb.njit(
    "i8(i1[::1], i8[::1], i4[::1], i4[::1], b1[::1], c16[:,:,:,:,::1], c16[:,:,::1], i8[::1], i4[::1], i4[::1],"
    " c16[:,:,::1], i8[::1], c16[:,:,::1])",
    cache=True,
    nogil=True,
)
def merge_runs(
    kind: Any,
    offsets: Any,
    wires: Any,
    uses: Any,
    flush: Any,
    layers: Any,
    site_matrix: Any,
    site_event: Any,
    site_window: Any,
    site_wire: Any,
    owed: Any,
    window_event: Any,
    pending: Any,
) -> int:
    """Multiply one-qubit layers together along the wires; `pending` comes as identities. Return the number of sites."""
    site, event = 0, 0
    for w in range(len(kind)):
        window_event[w] = event
        if kind[w] == 0:
            event += 1
        for layer in range(uses[w] + 1):
            for j in range(kind[w]):
                slot = offsets[w] + j
                p = wires[slot]
                played = layer < uses[w] or flush[slot]
                for a in range(2):
                    for b in range(2):
                        total = 0j
                        for c in range(2):
                            total += layers[w, layer, j, a, c] * pending[p, c, b]
                        site_matrix[site, a, b] = total
                for a in range(2):
                    for b in range(2):
                        pending[p, a, b] = (1.0 if a == b else 0.0) if played else site_matrix[site, a, b]
                        owed[slot, a, b] = pending[p, a, b]
                if played:
                    site_event[site], site_window[site], site_wire[site] = event, w, p
                    site += 1
                    event += 1
            if layer < uses[w]:
                event += 1
    return site


@nb.njit(
    "void(i1[::1], i8[::1], i4[::1], i4[::1], b1[::1], i8[:,::1], i8[:,::1], i8[:,::1], b1, f8[:,::1], b1[::1],"
    " f8[::1], f8[::1], f8[::1])",
    cache=True,
    nogil=True,
)
def carry_phases(
    kind: Any,
    offsets: Any,
    wires: Any,
    uses: Any,
    flush: Any,
    tools: Any,
    passes_to: Any,
    sign: Any,
    steers: bool,
    angles: Any,
    trailing: Any,
    owed: Any,
    phase: Any,
    moved: Any,
) -> None:
    """Move rotations about the plan's axis behind the entanglers that let them pass; use j of w is of tools[w, j]."""
    site = 0
    for w in range(len(kind)):
        if kind[w] == 0:
            continue
        for layer in range(uses[w] + 1):
            moved[0] = moved[1] = 0.0
            for j in range(kind[w]):
                p = wires[offsets[w] + j]
                if layer == uses[w]:
                    if flush[offsets[w] + j]:
                        angles[site, 2] += phase[p]
                        phase[p] = 0.0
                        trailing[site] = True
                        site += 1
                    continue
                angles[site, 2] += phase[p]
                phase[p] = 0.0
                tool = tools[w, layer]
                to, turned = passes_to[tool, j], sign[tool, j]
                if to < 0:
                    trailing[site] = True
                elif angles[site, 1] == 0.0:
                    moved[to] += turned * (angles[site, 0] + angles[site, 2])
                    angles[site, 0] = angles[site, 2] = 0.0
                elif steers:
                    # The rotation before the pulse turns the pulse's axis and comes out behind it.
                    moved[to] += turned * (angles[site, 0] + angles[site, 2])
                    angles[site, 0] = -angles[site, 2]
                    trailing[site] = True
                else:
                    moved[to] += turned * angles[site, 0]
                site += 1
            if layer < uses[w]:
                for j in range(kind[w]):
                    p = wires[offsets[w] + j]
                    phase[p] = moved[j] - 2 * np.pi * math.floor(moved[j] / (2 * np.pi) + 0.5)
        for j in range(kind[w]):
            owed[offsets[w] + j] = phase[wires[offsets[w] + j]]
