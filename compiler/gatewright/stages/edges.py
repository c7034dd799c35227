"""Which entanglers a pair of qubits has, in which order of its qubits, and what a use of each costs there."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.devices import Device
from gatewright.errors import DeviceError
from gatewright.synthesis.native import NativeEntangler
from gatewright.synthesis.toolkit import Cost

__all__ = ["PREFERENCES", "EdgeGroup", "allowed_tools", "groups_of_edges"]

#: What is made least, and what decides between equals.
PREFERENCES: dict[str, tuple[str, ...]] = {
    "uses": ("uses", "infidelity", "duration"),
    "fidelity": ("infidelity", "uses", "duration"),
    "duration": ("duration", "uses", "infidelity"),
}


@dataclass(frozen=True, slots=True, eq=False)
class EdgeGroup:
    """Pairs of qubits on which the same entanglers cost the same.

    Attributes
    ----------
    rows : ndarray of int64
        Of the pairs given.
    tools : tuple of int
        Indices of the entanglers that may be used, each gate once.
    costs : tuple of tuple of float
        Of a use of each.
    """

    rows: NDArray[np.int64]
    tools: tuple[int, ...]
    costs: tuple[Cost, ...]


def allowed_tools(device: Device, tools: tuple[NativeEntangler, ...], pairs: NDArray[np.int32]) -> NDArray[np.bool_]:
    """Return which entanglers are legal on each ordered pair, shape (k, 2) → (k, tools)."""
    allowed = np.empty((len(pairs), len(tools)), dtype=np.bool_)
    for t, tool in enumerate(tools):
        allowed[:, t] = device.allows(tool.gate.name, pairs[:, ::-1] if tool.flipped else pairs)
    return allowed


def groups_of_edges(
    device: Device, tools: tuple[NativeEntangler, ...], pairs: NDArray[np.int32], prefer: str
) -> Iterator[EdgeGroup]:
    """Sort ordered pairs by the entanglers that they have and what these cost.

    Parameters
    ----------
    device : Device
    tools : tuple of NativeEntangler
        A flipped one is used where the same gate is not legal as it stands.
    pairs : ndarray of int32, shape (k, 2)
    prefer : str
        A key of `PREFERENCES`. Errors or durations that are not known for all entanglers of a pair are left out.

    Raises
    ------
    DeviceError
        A pair has no entangler.
    """
    if not len(pairs):
        return
    distinct, owner = np.unique(pairs, axis=0, return_inverse=True)
    owner = owner.reshape(-1)
    allowed = allowed_tools(device, tools, distinct)
    names = [tool.gate.name for tool in tools]
    for t, tool in enumerate(tools):
        if tool.flipped:
            straight = names.index(tool.gate.name)
            allowed[:, t] &= ~allowed[:, straight]
    choices = np.asarray(allowed, dtype=np.int64).sum(axis=1)
    if not choices.all():
        p, q = distinct[int(np.argmin(choices))].tolist()
        raise DeviceError(
            f"qubits {p} and {q} have no entangler that can be used", required="one of the set's", where=device.name
        )
    prices = np.zeros((len(distinct), len(tools), 3))
    for t, tool in enumerate(tools):
        oriented = distinct[:, ::-1] if tool.flipped else distinct
        error, duration = device.errors(tool.gate.name, oriented), device.durations(tool.gate.name, oriented)
        part = {
            "uses": np.ones(len(distinct)),
            "infidelity": -np.log(np.maximum(1 - 1.25 * error, 1e-9)),
            "duration": duration,
        }
        prices[:, t] = np.stack([part[name] for name in PREFERENCES[prefer]], axis=1)
    # What is not known for every entangler of a pair cannot decide between them.
    unknown = np.asarray((np.isnan(prices) & allowed[:, :, None]).any(axis=1))
    prices = np.where(unknown[:, None, :], 0.0, prices)
    prices[~allowed | (choices == 1)[:, None]] = 0.0
    key = np.concatenate([allowed.astype(float), prices.reshape(len(distinct), -1)], axis=1)
    kinds, kind = np.unique(key, axis=0, return_inverse=True)
    kind = kind.reshape(-1)
    for number in range(len(kinds)):
        edge = int(np.argmax(kind == number))
        chosen = tuple(np.flatnonzero(allowed[edge]).tolist())
        costs = tuple(tuple(float(value) for value in prices[edge, t]) for t in chosen)
        if not all(cost[0] > 0 for cost in costs):
            # Nothing to compare by: count.
            costs = tuple((1.0, *cost) for cost in costs)
        yield EdgeGroup(np.flatnonzero(kind[owner] == number), chosen, costs)
