"""What a circuit needs at least on a device: swaps, and entanglers with those swaps merged as well as they can be.

A swap beside a gate on the same pair of qubits makes one window with it, of the mirrored class (see
`gatewright.synthesis.weyl.mirrored_coordinates`), which may cost no more entanglers than the gate, or even fewer.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.cost import Bound
from gatewright.errors import ExpressionError
from gatewright.gates import GATES
from gatewright.mapping.bounds import CROSS, GATE, Order, SwapBound, swap_bound
from gatewright.mapping.exact import GaveUpError, fewest_swaps
from gatewright.mapping.routing import make_graph
from gatewright.parameters import Affine, names_in, read_affine
from gatewright.stages.draft import Draft
from gatewright.stages.precedence import order_of
from gatewright.stages.windows import TWO, fuse_circuit, window_unitaries
from gatewright.synthesis.toolkit import least_mixed_uses
from gatewright.synthesis.weyl import canonical_coordinates, mirrored_coordinates

__all__ = ["lower_bound"]

#: States, by effort, of the search for the fewest swaps of a circuit with no more gates than this.
STATES = {"quick": 0, "standard": 1_000, "deep": 100_000}
SMALL = 60


def lower_bound(draft: Draft, circuit: Circuit, *, stays: bool, placement: tuple[int, ...] | None) -> Bound:
    """Bound the swaps of a circuit, and the entanglers that its own windows and those swaps need together.

    Parameters
    ----------
    draft : Draft
        After the chain.
    circuit : Circuit
        What went into the chain.
    stays : bool
        Whether its wires end where they began.
    placement : tuple of int or None
        Qubit on which each wire was to start, -1 where that was free.

    Returns
    -------
    Bound
    """
    expanded, native, tolerance = draft.expanded, draft.native, draft.settings.tolerance
    unknown = bool(expanded.symbolic)
    if unknown:
        # What holds for all values holds for these.
        expanded = _at_some_values(expanded)
    fused = fuse_circuit(expanded)
    if not native.entanglers or not np.count_nonzero(fused.kind == TWO):
        return Bound(0, "no two-qubit windows in the input")
    _, two = window_unitaries(expanded, fused)
    points = canonical_coordinates(two)
    order, window = order_of(expanded, fused, two, points)
    swaps = _swaps(draft, order, placement)
    tools = [tool.entangler for tool in native.straight]
    # Points are known already; several tools want the matrices.
    straight, mirrored = (points, mirrored_coordinates(points)) if len(tools) == 1 else (two, two[:, [0, 2, 1, 3]])
    counts = least_mixed_uses(straight, tools, tolerance=tolerance)
    exchanged = least_mixed_uses(mirrored, tools, tolerance=tolerance)
    counts, exchanged = _brought_together(counts, exchanged, order, np.cumsum(fused.kind == TWO)[window] - 1)
    swap = int(least_mixed_uses(GATES["swap"].matrix(()), tools, tolerance=tolerance))
    of_what = "the input" if expanded is circuit else "the input, written in gates of one and two qubits"
    if unknown:
        of_what += ", with values of no special kind for its unknown parameters"
    names = " or ".join(f"'{tool.gate.name}'" for tool in native.straight)
    how = (
        f"sum over the two-qubit windows of {of_what}, of the exact least number of {names} "
        "that each needs on its own, with free one-qubit gates"
    )
    if len(counts) == 1 and not swaps.swaps and stays:
        # Its wires ended where they began, so a swap merged into the window would have needed another to undo it.
        total = int(counts[0])
        if len(tools) == 1 and total:
            how += f"; here {tools[0].reason(two[0], tolerance=tolerance)}"
    else:
        total = int(np.minimum(counts, exchanged).sum())
        how += ", its two wires exchanged where that needs fewer"
        # Each swap either merges with a window of its own, and exchanges its wires, or stands alone.
        dearer = np.minimum(exchanged - counts, swap)
        needed = max(swaps.swaps - int(np.count_nonzero(dearer <= 0)), 0)
        if needed:
            extra = np.sort(dearer[dearer > 0])[:needed]
            added = int(extra.sum()) + swap * (needed - len(extra))
            total += added
            how += f"; {added} more for the swaps, each merged with the window that it makes least dearer"
    how += (
        "; a bound for circuits that keep this partition into windows, not the optimum of the whole circuit: "
        "larger windows may need fewer"
    )
    given = " from the given placement" if placement is not None else ""
    if swaps.swaps:
        how = f"swaps{given}: {swaps.how}. Two-qubit gates: {how}"
    return Bound(total, how, swaps.swaps)


def _at_some_values(circuit: Circuit) -> Circuit:
    """Return a circuit at values of its unknown parameters that have nothing special about them."""
    rng = np.random.default_rng(len(circuit))
    whole = {name for name, kind in circuit.inputs if kind.partition("[")[0] in ("int", "uint", "bool")}
    names = dict.fromkeys(name for atom in circuit.atoms for name in names_in(atom))
    values = {name: 1.0 if name in whole else float(rng.uniform(0.3, 1.2)) for name in names}
    atoms = {}
    for atom in circuit.atoms:
        try:
            found = read_affine(atom, names_in(atom), values=values)
        except ExpressionError:  # more than `gatewright.expressions` evaluates
            found = float(rng.uniform(0.3, 1.2))
        assert not isinstance(found, Affine)
        atoms[atom] = found
    return circuit.at_atoms(atoms)


def _swaps(draft: Draft, order: Order, placement: tuple[int, ...] | None) -> SwapBound:
    """Bound the swaps; where more were made and the circuit is small, search for the optimum, or as far as it goes."""
    graph, active = make_graph(draft.device.edges, draft.device.n_qubits), np.asarray(draft.device.active)
    found = swap_bound(graph, order, active=active, fixed=placement)
    gates = order.kind == GATE
    states = STATES[draft.settings.effort]
    if draft.swaps <= found.swaps or not states or gates.sum() > SMALL or (order.kind == CROSS).any():
        return found
    try:
        best = fewest_swaps(graph, order, active=active, fixed=placement, at_most=draft.swaps - 1, states=states)
    except GaveUpError as error:
        least, how = error.least, "a search that has ruled out fewer"
    else:
        least, how = draft.swaps if best is None else best.swaps, "the optimum, by a complete search"
    return SwapBound(least, how) if least > found.swaps else found


def _brought_together(
    counts: NDArray[np.int64], exchanged: NDArray[np.int64], order: Order, window: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Count nothing for windows on one pair of wires that may be brought together past what they commute with."""
    gates = np.flatnonzero(order.kind == GATE)
    if not len(gates):
        return counts, exchanged
    first = gates[np.unique(window[gates], return_index=True)[1]]
    # A run belongs to one wire: two of them name the pair as well.
    runs = np.sort(order.runs[first], axis=1)
    _, group, size = np.unique(runs[:, 0] * (runs.max() + 1) + runs[:, 1], return_inverse=True, return_counts=True)
    shared = window[first[size[group] > 1]]
    counts, exchanged = counts.copy(), exchanged.copy()
    counts[shared] = exchanged[shared] = 0
    return counts, exchanged
