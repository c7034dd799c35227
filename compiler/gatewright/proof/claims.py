"""Kinds of claims about a window: one class each, with its own check.

The default, number 0, is that both sides are equal as matrices; the checker multiplies those out in batches. A window
with any other claim stands alone: the identity on the seams beside it, and a class here that judges it.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.errors import ProofError
from gatewright.gates import MEASURE, RESET
from gatewright.proof.phase_polynomial import NotMonomial, compare_phase_polynomials
from gatewright.proof.products import Held, window_products
from gatewright.proof.tableau import NotClifford, compare_tableaus

__all__ = [
    "CLAIM_KINDS",
    "MATRIX",
    "AbsorbedByReset",
    "ClaimKind",
    "CliffordRegion",
    "DiagonalBeforeMeasurement",
    "Equal",
    "PhasePolynomialRegion",
    "Sides",
]

Array = NDArray[np.complex128]


@dataclass(frozen=True, eq=False, slots=True)
class Sides:
    """A window for a claim to judge.

    Attributes
    ----------
    meant, made : Circuit
        The operations of source and output, on the window's slots.
    target : tuple of int
        Slot on whose place the wire of each slot ends.
    """

    meant: Circuit
    made: Circuit
    target: tuple[int, ...]


class ClaimKind(ABC):
    """What may be claimed of a window."""

    name: ClassVar[str]

    @classmethod
    @abstractmethod
    def check(cls, sides: Sides) -> tuple[float, float]:
        """Return a bound on the distance, and on the rounding of finding it.

        Raises
        ------
        ProofError
            The claim does not hold, or cannot be judged.
        """


class Equal(ClaimKind):
    """Both sides are equal as matrices, up to seams, permutation and phase."""

    name = "matrix"

    @classmethod
    def check(cls, sides: Sides) -> tuple[float, float]:
        """Never called: the checker multiplies these windows out itself."""
        raise ProofError("a window claimed as a matrix is multiplied out by the checker")


def _split(circuit: Circuit, ending: str) -> tuple[Circuit, dict[int, int]]:
    """Return the unitary part, and the slot and link of each operation `ending`, which must be last on its slot."""
    ends: dict[int, int] = {}
    for k in range(len(circuit)):
        qubits = circuit.qubits_of(k)
        if ends.keys() & set(qubits):
            raise ProofError(f"an operation follows a {ending} in the window")
        if circuit.table[circuit.op[k]].name == ending:
            ends[qubits[0]] = int(circuit.link[k])
        elif not circuit.is_unitary[k]:
            raise ProofError(f"something else than gates and one {ending} on each wire")
    if len(ends) < circuit.n_qubits:
        raise ProofError(f"a wire does not end in a {ending}")
    return circuit.take(np.flatnonzero(circuit.is_unitary)), ends


def unitary_of(circuit: Circuit) -> tuple[Array, float]:
    """Return the matrix of a small circuit, and a bound on its rounding."""
    k = len(circuit)
    held = Held(
        circuit, np.arange(k), np.zeros(k, np.int64), circuit.offsets, circuit.qubits.astype(np.int64), 1,
        circuit.n_qubits,
    )  # fmt: skip
    product, rounding = window_products(held, [], [])
    return product[0], float(rounding[0])


class DiagonalBeforeMeasurement(ClaimKind):
    """Every wire ends in its measurement, and before it the sides differ by a diagonal matrix.

    With M_b the projection on outcome b and D = diag(e^{iθ_b}), M_b D = e^{iθ_b} M_b: each outcome keeps its
    probability, and the state after it changes by a phase that is global once the outcome is known.
    """

    name = "measured"

    @classmethod
    def check(cls, sides: Sides) -> tuple[float, float]:
        """Multiply both sides out, and compare up to phases of the rows."""
        (meant, bits), (made, made_bits) = (_split(side, MEASURE.name) for side in (sides.meant, sides.made))
        if {sides.target[slot]: bit for slot, bit in bits.items()} != made_bits:
            raise ProofError("a measurement goes into another bit", required=str(bits), found=str(made_bits))
        (left, one), (right, two) = unitary_of(made), unitary_of(meant)
        n = sides.made.n_qubits
        right = right.reshape(*(2,) * n, -1).transpose([*np.argsort(sides.target), n]).reshape(right.shape)
        overlap = np.einsum("ij,ij->i", left, right.conj())
        size = np.abs(overlap)
        phase = np.where(size > 0, overlap / np.where(size > 0, size, 1), 1)
        return float(np.linalg.norm(left - phase[:, None] * right)), one + two


class AbsorbedByReset(ClaimKind):
    """Every wire ends in a reset: what gates did on these wires alone before is forgotten.

    The reset of all wires of the window takes any state of them to |0…0⟩, whatever unitary came before, and what else
    is entangled with them keeps its reduced state.
    """

    name = "reset"

    @classmethod
    def check(cls, sides: Sides) -> tuple[float, float]:
        """Ask that nothing but gates on the window's own wires comes before the resets, on both sides."""
        _split(sides.meant, RESET.name)
        _split(sides.made, RESET.name)
        return 0.0, 0.0


def _compared(
    sides: Sides, compare: Callable[..., tuple[float, tuple[int, ...], str]], refused: type[Exception]
) -> float:
    """Compare both sides by a method for any number of wires."""
    for side in (sides.meant, sides.made):
        if not side.is_unitary.all():
            raise ProofError("something else than gates in the window")
    try:
        distance, _, difference = compare(sides.meant, sides.made, range(sides.made.n_qubits), sides.target)
    except refused:
        raise ProofError("gates of other kinds in the window") from None
    if difference:
        raise ProofError(difference, distance=distance or None)
    return distance


class CliffordRegion(ClaimKind):
    """Both sides are Clifford circuits, on any number of wires, that take every Pauli string to the same one."""

    name = "clifford"

    @classmethod
    def check(cls, sides: Sides) -> tuple[float, float]:
        """Compare the tableaus."""
        return _compared(sides, compare_tableaus, NotClifford), 0.0


class PhasePolynomialRegion(ClaimKind):
    """Both sides are circuits of exchanges, NOT, CNOT and diagonal gates with the same function and parity terms."""

    name = "parities"

    @classmethod
    def check(cls, sides: Sides) -> tuple[float, float]:
        """Compare the phase polynomials."""
        return _compared(sides, compare_phase_polynomials, NotMonomial), 0.0


#: The kinds by their numbers in `gatewright.proof.windows.Step.claims`.
CLAIM_KINDS: tuple[type[ClaimKind], ...] = (
    Equal,
    DiagonalBeforeMeasurement,
    AbsorbedByReset,
    CliffordRegion,
    PhasePolynomialRegion,
)
MATRIX = 0
