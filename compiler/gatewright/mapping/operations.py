"""Operations as placement and routing see them: flat wires, groups of neighbours that commute, and costs."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import CircuitError

__all__ = ["GROUP", "Operations", "make_operations"]

Integers = NDArray[np.int32]
#: Operations of a group at most: their marks are the bits of one integer.
GROUP = 60


@dataclass(frozen=True, eq=False, slots=True)
class Operations:
    """Operations in time order, on flat wires; what routing must keep in order.

    Attributes
    ----------
    wires : ndarray of int32
        Operation k is on ``wires[offsets[k]:offsets[k + 1]]``.
    offsets : ndarray of int32, shape (m + 1,)
    coupled : ndarray of uint8, shape (m,)
        1 for gates whose first two wires must be neighbours.
    n_all : int
        Number of wires, further ones included.
    groups : ndarray of int32, like `wires`
        Along a wire, never falling; neighbours of one group may change places.
    costs : ndarray of float32, shape (m, 2)
        Entanglers that each operation needs alone, and together with a swap of its wires.
    swap_cost : float
        Entanglers of a swap alone.
    """

    wires: Integers
    offsets: Integers
    coupled: NDArray[np.uint8]
    n_all: int
    groups: Integers
    costs: NDArray[np.float32]
    swap_cost: float

    def __len__(self) -> int:
        """Return the number of operations."""
        return len(self.coupled)

    @property
    def pairs(self) -> Integers:
        """Wires of the coupled operations, shape (g, 2)."""
        first = self.offsets[:-1][self.coupled == 1]
        return np.asarray(self.wires[first[:, None] + np.arange(2)])

    @property
    def joint(self) -> NDArray[np.int64]:
        """Numbers of the operations on two or more wires, which alone constrain the swaps."""
        return np.flatnonzero(np.diff(self.offsets) > 1)

    def take(self, rows: NDArray[np.int64]) -> Operations:
        """Return the operations numbered `rows`."""
        lengths = np.diff(self.offsets)[rows]
        offsets = np.concatenate([[0], np.cumsum(lengths)]).astype(np.int32)
        at = np.arange(offsets[-1]) + np.repeat(self.offsets[:-1][rows] - offsets[:-1], lengths)
        wires, groups = np.ascontiguousarray(self.wires[at]), np.ascontiguousarray(self.groups[at])
        return replace(
            self, wires=wires, offsets=offsets, coupled=self.coupled[rows], groups=groups, costs=self.costs[rows]
        )


def make_operations(
    wires: ArrayLike,
    offsets: ArrayLike,
    coupled: ArrayLike,
    n_all: int,
    *,
    groups: ArrayLike | None = None,
    costs: ArrayLike | None = None,
    swap_cost: float = 3.0,
) -> Operations:
    """Return `Operations` with the types that the compiled loops want.

    Without `groups` every operation keeps its place; without `costs` every gate costs what a CNOT does among CNOTs: one
    entangler alone, two with a swap.

    Raises
    ------
    CircuitError
        The arrays do not fit together, or a coupled operation has fewer than two wires.
    """
    # Compiled signatures hold for writable arrays only, so read-only ones are copied.
    made_wires = np.require(wires, np.int32, ["C", "W"])
    made_offsets = np.require(offsets, np.int32, ["C", "W"])
    made_coupled = np.require(coupled, np.uint8, ["C", "W"])
    lengths, m = np.diff(made_offsets), len(made_coupled)
    if (
        made_offsets.shape != (m + 1,)
        or made_offsets[0] != 0
        or made_offsets[-1] != len(made_wires)
        or (lengths < 2 * (made_coupled == 1)).any()
        or (len(made_wires) and not 0 <= made_wires.min() <= made_wires.max() < n_all)
    ):
        raise CircuitError("the arrays of operations do not fit together", required=f"wires 0 to {n_all - 1}")
    made_groups = np.repeat(np.arange(m), lengths) if groups is None else groups
    made_costs = np.tile([1.0, 2.0], (m, 1)) if costs is None else costs
    return Operations(
        made_wires,
        made_offsets,
        made_coupled,
        n_all,
        np.require(made_groups, np.int32, ["C", "W"]),
        np.require(made_costs, np.float32, ["C", "W"]),
        float(swap_cost),
    )
