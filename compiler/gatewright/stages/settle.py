"""After the last stage: a source that is already legal, and that compiling did not make cheaper, stays as it is.

So the output of a compilation, compiled once more, comes back statement by statement.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.cost import Costs, as_soon_as_possible, count_costs, is_virtual, operation_durations
from gatewright.errors import ProofError
from gatewright.proof import check_legal
from gatewright.proof.windows import Step
from gatewright.stages.draft import Draft, Settings

__all__ = ["cheaper", "costs_of", "settle", "stays", "unchanged"]


def settle(draft: Draft) -> Draft:
    """Return the source in place of the circuit made of it, if it is on all qubits of the device, legal, and no dearer.

    The first difference decides: two-qubit gates, one-qubit gates, operations, duration, depths.
    """
    source = draft.source
    if source is None or not len(source) or source.n_qubits != draft.device.n_qubits or not stays(draft.settings):
        return draft
    same = unchanged(draft, source)
    return draft if same is None or cheaper(costs_of(draft), costs_of(same)) else same


def stays(settings: Settings) -> bool:
    """Whether the settings let every qubit of the device begin and end where it is."""
    wishes = (settings.placement, settings.final)
    return not any(q not in (-1, place) for wanted in wishes for place, q in enumerate(wanted or ()))


def unchanged(draft: Draft, source: Circuit) -> Draft | None:
    """Return the draft that gives back its source, if that is on all qubits of the device and legal as it stands."""
    device = draft.device
    if source.n_qubits != device.n_qubits:
        return None
    try:
        check_legal(source, device)
    except ProofError:
        return None
    starts = _starts(source, draft)
    if (np.diff(starts) < 0).any():
        return None  # not in order of time, as the output of a compilation is
    return replace(
        draft,
        circuit=source,
        steps=(_unchanged(source),),
        initial=np.arange(device.n_qubits, dtype=np.int32),
        final=np.arange(device.n_qubits, dtype=np.int32),
        starts=starts,
        swaps=0,
    )


def costs_of(draft: Draft) -> Costs:
    """Return the costs of a draft that has been through the chain."""
    return count_costs(draft.circuit, draft.device, starts=draft.starts, swaps_inserted=draft.swaps)


def cheaper(costs: Costs, others: Costs) -> bool:
    """Whether costs are less than others."""
    return _counted(costs) < _counted(others)


def _starts(circuit: Circuit, draft: Draft) -> NDArray[np.float64]:
    durations = operation_durations(circuit, draft.device)
    if np.isnan(durations).any():
        durations = np.where(is_virtual(circuit, draft.device), 0.0, 1.0)
    return as_soon_as_possible(circuit, durations)[0]


def _counted(costs: Costs) -> tuple[float, ...]:
    return (
        costs.two_qubit_gates,
        costs.one_qubit_gates,
        costs.operations,
        costs.duration_ns or 0.0,
        costs.depth,
        costs.two_qubit_depth,
    )


def _unchanged(circuit: Circuit) -> Step:
    """Return the claim that a circuit equals itself: every operation is a window of its own."""
    rows = np.arange(len(circuit), dtype=np.int32)
    whole = np.zeros((len(circuit.qubits), 4))
    whole[:, 0] = 1
    places = np.arange(circuit.n_qubits, dtype=np.int32)
    return Step(places, places, rows, rows, circuit.offsets, circuit.qubits, circuit.qubits, circuit.qubits, whole)
