"""What a proof says: windows, seams and placements, as arrays.

A *step* claims that an output circuit does the same as a source circuit. Both are cut into the same sequence of
*windows*. Window w takes a few source wires, which sit on the output wires ``entry`` when it begins and on
``exit`` (the same wires, perhaps permuted) when it ends, and in it

    output · (⊗ seam before) = phase · permutation · (⊗ seam after) · source

A *seam* is the one-qubit unitary by which the output is ahead of the source on a wire; each is written once, by
the window it leaves, and enters the next window on that wire. Seams at the two ends of a circuit and beside
measurements, resets and barriers are the identity. The module holds data only; `checker` judges it.
"""

from __future__ import annotations

import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.errors import ProofFileError
from gatewright.proof.fingerprints import Fingerprints
from gatewright.proof.reorder import Reorder

__all__ = ["Proof", "Step", "Verdict"]

Integers = NDArray[np.int32]


@dataclass(frozen=True, eq=False, slots=True)
class Step:
    """The claim that one circuit does the same as another.

    Attributes
    ----------
    initial, final : ndarray of int32, shape (N,)
        Output wire of each source wire at the two ends; the source is taken to have N wires, those beyond its own
        idle.
    source_window : ndarray of int32, shape (operations of the source,)
        Window of each source operation.
    output_window : ndarray of int32, shape (operations of the output,)
    offsets : ndarray of int64, shape (W + 1,)
        Window w has the slots ``offsets[w]:offsets[w + 1]``, one a wire.
    wires, entry, exit : ndarray of int32, shape (slots,)
        The source wire of each slot, and the output wires on which it enters and leaves.
    seams : ndarray of float64, shape (slots, 4)
        Quaternion (a, b, c, d), the matrix a − i(b X + c Y + d Z), for the seam after the window.
    output : Circuit or None
        The circuit this step ends with, where it is not the last.
    claims : ndarray of int8, shape (W,), optional
        What is claimed of each window, by its number in `gatewright.proof.claims.CLAIM_KINDS`; by default 0
        throughout: equal as matrices. Beside any other claim the seams are the identity.
    """

    initial: Integers
    final: Integers
    source_window: Integers
    output_window: Integers
    offsets: NDArray[np.int64]
    wires: Integers
    entry: Integers
    exit: Integers
    seams: NDArray[np.float64]
    output: Circuit | None = None
    claims: NDArray[np.int8] = field(default_factory=lambda: np.zeros(0, dtype=np.int8))

    def __post_init__(self) -> None:
        """Claim equal matrices where nothing else is said."""
        if not len(self.claims):
            object.__setattr__(self, "claims", np.zeros(max(self.windows, 0), dtype=np.int8))

    @property
    def windows(self) -> int:
        """Number of windows."""
        return len(self.offsets) - 1


@dataclass(frozen=True, eq=False, slots=True)
class Proof:
    """The steps from source to output, in order; each starts where the one before ended.

    Attributes
    ----------
    steps : tuple of Step or Reorder
        The last is a `Step`.
    made_for : Fingerprints
        Of source, output, gate set and device, as far as they are stated; the checker compares them.
    version : str
        Version of gatewright that made it; empty for this one.
    """

    steps: tuple[Step | Reorder, ...]
    made_for: Fingerprints = field(default_factory=Fingerprints)
    version: str = ""

    @property
    def windows(self) -> int:
        """Number of windows in all steps together."""
        return sum(step.windows for step in self.steps)

    def save(self, path: str | Path) -> None:
        """Write the proof file, whole or not at all; `gatewright.read_proof` reads it.

        Raises
        ------
        ProofFileError
            The file cannot be written.
        """
        from gatewright.proof.file import encode_proof

        data, path = encode_proof(self), Path(path)
        temporary = path.with_name(f".{path.name}.{os.getpid()}")
        try:
            temporary.write_bytes(data)
            temporary.replace(path)
        except OSError as error:
            raise ProofFileError(f"cannot write the proof file: {error.strerror}", where=str(path)) from None
        finally:
            temporary.unlink(missing_ok=True)


@dataclass(frozen=True, slots=True)
class Verdict:
    """What the checker found; it exists only where everything was proven.

    Attributes
    ----------
    error_bound : float
        Upper bound on the operator-norm distance, up to global phase, between the source (on its wires, moved to
        their places) and the output; the checker's own rounding is part of it.
    windows : int
    worst_window, worst_distance
        Number (within its step) and distance of the window that contributes most.
    initial, final : tuple of int
        Physical qubit of each source qubit at the two ends.
    method : str
    rounding : float
        Part of ``error_bound``: a bound on what the checker's own arithmetic may have hidden.
    round_bound : float or None
        For programs with classical control: ``error_bound`` covers one round of every loop, and each further round
        adds this much at most. None for straight-line circuits.
    """

    error_bound: float
    windows: int
    worst_window: int
    worst_distance: float
    initial: tuple[int, ...]
    final: tuple[int, ...]
    method: str
    rounding: float = 0.0
    round_bound: float | None = None

    def to_dict(self) -> dict[str, Any]:
        """Return the entries of the JSON summary's ``proof``."""
        facts = {
            "verified": True,
            "error_bound": self.error_bound,
            "rounding": self.rounding,
            "windows": self.windows,
            "method": self.method,
            "worst_window": self.worst_window,
            "worst_distance": self.worst_distance,
        }
        return facts if self.round_bound is None else facts | {"error_bound_per_further_round": self.round_bound}
