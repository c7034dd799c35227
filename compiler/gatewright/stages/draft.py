"""What travels along the chain of stages: the circuit so far, and what later stages and the proof need of it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.proof.reorder import Reorder
from gatewright.proof.windows import Step
from gatewright.stages.blocks import Blocks
from gatewright.stages.windows import Fused

if TYPE_CHECKING:
    from gatewright.devices import Device
    from gatewright.synthesis.native import NativeSet

__all__ = ["Draft", "Settings", "Stage"]


@dataclass(frozen=True, slots=True)
class Settings:
    """What the user may choose.

    Attributes
    ----------
    seed : int
        Of all random choices.
    tolerance : float
        Operator-norm distance within which a window is given to a class that needs fewer entanglers.
    effort : str
        ``quick``, ``standard`` or ``deep``: how long to search for placements.
    placement : tuple of int or None
        Physical qubit of each source qubit at the start, -1 where it is free.
    final : tuple of int or None
        Physical qubit of each source qubit at the end; wherever routing leaves them by default.
    prefer : str
        What is made least where qubits have several entanglers: ``uses``, ``fidelity`` (its loss) or ``duration``.
    """

    seed: int = 0
    tolerance: float = 1e-12
    effort: str = "standard"
    placement: tuple[int, ...] | None = None
    final: tuple[int, ...] | None = None
    prefer: str = "uses"


@dataclass(frozen=True, eq=False, slots=True)
class Draft:
    """A compilation under way; every stage returns a new one.

    Attributes
    ----------
    circuit : Circuit
        As the last stage left it.
    device : Device
    settings : Settings
    native : NativeSet
        How the device's gates are used.
    expanded : Circuit
        The source in gates of one and two qubits.
    steps : tuple of Step or Reorder
        Claims of the stages so far, for the checker.
    initial, final : ndarray of int32, shape (N,)
        Physical qubit of each source wire, from placement and routing on.
    blocks : Blocks or None
        The circuit as placement and routing see it.
    script : ndarray of int64
        Swaps that go with `initial`, as `gatewright.mapping.search.Plan` has them.
    origin : ndarray of int64, shape (operations,)
        Operation of `expanded` behind each operation of the routed circuit, -1 for an inserted swap.
    fused : Fused
    starts : ndarray of float64, shape (operations,)
        Of the scheduled circuit: nanoseconds where the device states durations, else layers.
    swaps : int
        Swaps inserted.
    source : Circuit or None
        What the chain began with, if it may be given back unchanged.
    """

    circuit: Circuit
    device: Device
    settings: Settings
    native: NativeSet
    expanded: Circuit
    steps: tuple[Step | Reorder, ...] = ()
    initial: NDArray[np.int32] = field(default_factory=lambda: np.zeros(0, np.int32))
    final: NDArray[np.int32] = field(default_factory=lambda: np.zeros(0, np.int32))
    blocks: Blocks | None = None
    script: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))
    origin: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))
    fused: Fused | None = None
    starts: NDArray[np.float64] = field(default_factory=lambda: np.zeros(0))
    swaps: int = 0
    source: Circuit | None = None


#: A stage of the chain.
Stage = Callable[[Draft], Draft]
