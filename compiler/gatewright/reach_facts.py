"""What gate sets and edges of devices reach, what a Haar-random gate costs on them, and why a target needs its uses.

Facts for `gatewright.description`: plain values, ready for JSON.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.devices import Device, GateSet, read_gate_set, shipped_gate_sets
from gatewright.errors import GatewrightError
from gatewright.linalg import haar_unitary
from gatewright.synthesis.haar_cost import Point, best_supplement, haar_cost, reach_by_number
from gatewright.synthesis.native import native_set, usable_entanglers
from gatewright.synthesis.selection import select, violation_text
from gatewright.synthesis.toolkit import cheapest_sequences
from gatewright.synthesis.weyl import canonical_coordinates

__all__ = ["edge_facts", "entangler_points", "haar_facts", "target_facts", "uses_in_shipped_sets"]

Vector = NDArray[np.float64]

#: What a layer of one-qubit gates counts, in entanglers, where the durations are not known.
_LAYER = 0.1
_LAYER_SAMPLES = 256


def entangler_points(gate_set: GateSet) -> tuple[tuple[str, ...], tuple[Point, ...]]:
    """Return the names and chamber points of the entanglers of a gate set.

    Raises
    ------
    GatewrightError
        The set cannot be used; why.
    """
    usable = usable_entanglers(gate_set)
    points = [entangler.ideal for _, _, entangler in usable]
    return tuple(native.gate.name for native, _, _ in usable), tuple(
        (float(x), float(y), float(z)) for x, y, z in points
    )


def target_facts(gate_set: GateSet, matrix: NDArray[np.complex128], *, tolerance: float = 1e-12) -> dict[str, Any]:
    """Say how many uses a two-qubit unitary needs in a gate set, of what, and why fewer do not reach it.

    Parameters
    ----------
    gate_set : GateSet
    matrix : ndarray, shape (4, 4)
    tolerance : float

    Raises
    ------
    GatewrightError
        The set cannot be used; why.
    """
    names, points = entangler_points(gate_set)
    place = canonical_coordinates(matrix)
    if not points:
        local = bool(np.abs(place).max() <= tolerance)
        return {"uses": 0 if local else None, "sequence": [], "reason": "the set has no entangler"}
    sequences = cheapest_sequences(points, ((1.0,),) * len(points))
    index = int(select(place, [polytope for _, polytope in sequences], tolerance).index[0])
    members = sequences[index][0]
    reasons = [
        f"{_listed([names[k] for k in other])} reach only {violation_text(polytope, place)}"
        for other, polytope in sequences
        if len(other) == len(members) - 1
    ]
    return {
        "uses": len(members),
        "sequence": [names[k] for k in members],
        "reason": "; ".join(reasons) if len(members) > 1 else "a single class" if members else "one-qubit gates do",
    }


def _listed(names: list[str]) -> str:
    return " + ".join(f"{names.count(name)} {name}" for name in dict.fromkeys(names))


def uses_in_shipped_sets(matrix: NDArray[np.complex128]) -> dict[str, Any]:
    """Return `target_facts` of a two-qubit unitary for every shipped gate set."""
    facts: dict[str, Any] = {}
    for name in shipped_gate_sets():
        try:
            found = target_facts(read_gate_set(name), matrix)
        except GatewrightError as error:
            found = {"uses": None, "sequence": [], "reason": str(error)}
        facts[name] = found
    return facts


def haar_facts(gate_set: GateSet) -> dict[str, Any]:
    """Describe what numbers of uses reach, what Haar-random two-qubit gates cost, and the best supplement.

    Raises
    ------
    GatewrightError
        The set cannot be used; why.
    """
    names, points = entangler_points(gate_set)
    if not points:
        return {}
    levels = reach_by_number(points)
    shares = [level.share for level in levels]
    gains = np.maximum(np.diff(shares, prepend=0.0), 0.0)
    mean = float(gains @ np.arange(len(levels)))
    natives = [gate_set.gates[name] for name in names]
    durations = np.array([np.nan if native.duration_ns is None else native.duration_ns for native in natives])
    errors = np.array([np.nan if native.error is None else native.error for native in natives])
    uses = _cheapest_uses(points, errors, durations)
    layer_ns, layer_loss, pulses = _layer(gate_set)
    duration = float(uses @ durations)
    loss = float(uses @ _loss(errors))
    facts = {
        "mean_uses": mean,
        "reached_by_at_most": {str(level.uses): level.share for level in levels},
        "cost": {
            "uses": dict(zip(names, uses.tolist(), strict=True)),
            "entanglers_ns": _known(duration),
            "pulses_per_layer": pulses,
            "duration_ns": _known(duration + (float(uses.sum()) + 1) * layer_ns),
            "process_infidelity": _known(1 - np.exp(-loss - 2 * (float(uses.sum()) + 1) * layer_loss)),
        },
    }
    facts["supplement"] = _supplement(names, points, durations, layer_ns, mean)
    return facts


def _supplement(
    names: tuple[str, ...], points: tuple[Point, ...], durations: Vector, layer_ns: float, mean: float
) -> dict[str, Any]:
    facts: dict[str, Any] = {}
    timed = bool(np.isfinite(durations).all() and np.isfinite(layer_ns) and (durations > 0).all())
    costs, layer = (durations.tolist(), layer_ns) if timed else ([1 - _LAYER] * len(points), _LAYER)
    found = best_supplement(points, costs, layer=layer)
    if found is not None:
        facts["fraction"] = {
            "gate": f"{names[found.of]} to the power {found.fraction}",
            "coordinates": list(found.coordinates),
            "mean_cost": found.cost,
            "mean_cost_now": found.before,
            "unit": "ns, with one layer of one-qubit gates a use"
            if timed
            else "entanglers, a tenth of it one-qubit gates",
        }
    if mean > 2 + 1e-3:
        # Two uses of the class (π/4, π/8, 0) reach everything, and one use of anything reaches a single class: Zhang,
        # Vala, Sastry, Whaley, PRL 93, 020502 (2004).
        facts["fewest_uses"] = {"coordinates": [np.pi / 4, np.pi / 8, 0.0], "mean_uses": 2.0}
    return facts


def _cheapest_uses(points: tuple[Point, ...], errors: Vector, durations: Vector) -> Vector:
    """Return the mean number of uses of each entangler where the fewest are used, the better ones first."""
    if len(points) == 1:
        gains = np.diff([level.share for level in reach_by_number(points)], prepend=0.0)
        return np.array([np.maximum(gains, 0.0) @ np.arange(len(gains))])
    decisive = errors if np.isfinite(errors).all() else durations if np.isfinite(durations).all() else 0 * errors
    decisive = np.nan_to_num(decisive)
    # With two, only which is the better matters; so that edges alike in that share one computation.
    rank = np.argsort(np.argsort(decisive)) if len(points) <= 2 else decisive
    costs = tuple((1.0, float(value)) for value in rank)
    return np.array(haar_cost(points, costs).uses)


@lru_cache(maxsize=64)
def _layer(gate_set: GateSet) -> tuple[float, float, float]:
    """Return the mean duration, −log process fidelity and number of pulses of a Haar-random one-qubit gate."""
    plan = native_set(gate_set).plan
    emission = plan.emit(plan.angles(haar_unitary(2, _LAYER_SAMPLES, rng=0)))
    duration = loss = pulses = 0.0
    for number, gate in enumerate(plan.gates):
        native = gate_set.gates[gate.name]
        mean = float(np.count_nonzero(emission.gate == number)) / _LAYER_SAMPLES
        if mean and not native.virtual:
            pulses += mean
            duration += mean * (np.nan if native.duration_ns is None else native.duration_ns)
            loss += mean * (np.nan if native.error is None else -np.log(max(1 - 1.5 * native.error, 1e-9)))
    return duration, loss, pulses


def edge_facts(device: Device) -> tuple[list[dict[str, Any]], dict[str, Any]]:
    """Return what each edge of a device reaches and costs, and the spread over the edges.

    Raises
    ------
    GatewrightError
        The device's gate set cannot be used; why.
    """
    names, points = entangler_points(device.gate_set)
    edges = device.edges
    legal = np.zeros((len(edges), len(names)), dtype=np.bool_)
    errors, durations = np.full(legal.shape, np.nan), np.full(legal.shape, np.nan)
    for k, name in enumerate(names):
        for pairs in (edges[:, ::-1], edges):
            rows = device.allows(name, pairs)
            legal[rows, k] = True
            errors[rows, k] = device.errors(name, pairs[rows])
            durations[rows, k] = device.durations(name, pairs[rows])
    facts: list[dict[str, Any]] = []
    for number, (edge, here) in enumerate(zip(edges.tolist(), legal, strict=True)):
        chosen = np.flatnonzero(here)
        entry: dict[str, Any] = {"qubits": edge, "entanglers": [names[k] for k in chosen]}
        if len(chosen):
            own = tuple(points[k] for k in chosen)
            try:
                uses = _cheapest_uses(own, errors[number, chosen], durations[number, chosen])
            except GatewrightError as error:
                facts.append(entry | {"note": str(error)})
                continue
            entry |= {
                "mean_uses": float(uses.sum()),
                "entanglers_ns": _known(float(uses @ durations[number, chosen])),
                "process_infidelity": _known(1 - float(np.exp(-uses @ _loss(errors[number, chosen])))),
            }
            if len(chosen) > 1:
                entry["uses"] = {names[k]: float(u) for k, u in zip(chosen, uses, strict=True)}
        facts.append(entry)
    return facts, _spread(facts)


def _spread(facts: list[dict[str, Any]]) -> dict[str, Any]:
    spread: dict[str, Any] = {}
    for key in ("mean_uses", "entanglers_ns", "process_infidelity"):
        known = [(entry[key], entry["qubits"]) for entry in facts if entry.get(key) is not None]
        if known:
            values = [value for value, _ in known]
            least, most = min(known), max(known)
            spread[key] = {"least": least[0], "median": float(np.median(values)), "most": most[0]}
            if most[0] > least[0]:
                spread[key] |= {"best_edge": least[1], "worst_edge": most[1]}
    return spread


def _loss(errors: Vector) -> Vector:
    """Return −log of the process fidelity of two-qubit gates with these errors."""
    return -np.log(np.maximum(1 - 1.25 * errors, 1e-9))


def _known(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
