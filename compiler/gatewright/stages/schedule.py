"""Last stage: start every operation as soon as its qubits are free, and list them in that order."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from gatewright.cost import as_soon_as_possible, is_virtual, operation_durations
from gatewright.proof.windows import Step
from gatewright.stages.draft import Draft

__all__ = ["schedule"]


def schedule(draft: Draft) -> Draft:
    """Order the operations by start time: in nanoseconds, or in layers where the device states no durations."""
    circuit = draft.circuit
    durations = operation_durations(circuit, draft.device)
    if np.isnan(durations).any():
        durations = np.where(is_virtual(circuit, draft.device), 0.0, 1.0)
    starts, _ = as_soon_as_possible(circuit, durations)
    order = np.argsort(starts, kind="stable")
    last = draft.steps[-1]
    assert isinstance(last, Step)  # what synthesis claimed
    step = replace(last, output_window=last.output_window[order])
    return replace(
        draft,
        circuit=circuit.take(order),
        steps=(*draft.steps[:-1], step),
        starts=starts[order],
    )
