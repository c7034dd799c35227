"""Windows with unknown parameters: a bound for all their values from finitely many.

Entries of the standard gates are trigonometric polynomials in half of each parameter, of the degrees that `HARMONICS`
states. So are those of E = W − (tr W/d)·1 with W = output† · source, in every independent unknown. Sampled at N > 2D
equally spaced points, a trigonometric polynomial of degree D is at most its largest sample over cos(πD/N) (Ehlich and
Zeller, Math. Z. 86, 41 (1964)); taken along one variable after another, and for every linear functional of the matrix,
this bounds the norm ε of E everywhere. W is unitary, so that output and source differ by ε·√(1 + ε²/d) at most, up to
a phase that may depend on the unknowns. Unknowns without a small common unit count as independent: that asks more.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.errors import ProofError, shorten
from gatewright.gates import GATES, UNITARY, Gate
from gatewright.linalg import dagger, distance, embed
from gatewright.parameters import Affine, Parameter, close

__all__ = ["HARMONICS", "UnknownWindows", "require_standard"]

Array = NDArray[np.complex128]

_HALF, _WHOLE = (-1, 1), (0, 2)
#: Least and greatest multiple of half of each parameter in the exponents of a gate's entries, from its definition.
HARMONICS: dict[str, tuple[tuple[int, int], ...]] = {
    **{name: (_HALF,) for name in ("rx", "ry", "rz", "crx", "cry", "crz", "rxx", "ryy", "rzz", "rzx")},
    **{name: (_WHOLE,) for name in ("p", "phase", "u1", "cp", "cphase", "cu1")},
    "r": (_HALF, (-2, 2)),
    "u2": (_HALF, _HALF),
    "u3": (_HALF, _HALF, _HALF),
    "u": (_HALF, _WHOLE, _WHOLE),
    "U": (_WHOLE, _WHOLE, _WHOLE),
    "cu3": (_HALF, _WHOLE, _WHOLE),
    "cu": (_HALF, _WHOLE, _WHOLE, _WHOLE),
}

#: Largest denominator of the ratio of two coefficients that share a unit.
_LARGEST_DENOMINATOR = 64
#: Matrix entries that are computed for one window.
_MOST_ENTRIES = 1 << 23
#: A standard gate under its name differs from the table's by no more than this, up to phase.
_SAME = 1e-9


@dataclass(frozen=True, slots=True)
class _Angle:
    """A parameter: a number, plus multiples of independent unknowns, numbered within the window."""

    constant: float
    multiples: tuple[tuple[int, int], ...] = ()


@dataclass(frozen=True, slots=True)
class _Factor:
    """One operation of a window: its gate, the slots, and its parameters or its own matrix."""

    gate: Gate
    slots: tuple[int, ...]
    angles: tuple[_Angle, ...] = ()
    matrix: bytes = b""


def require_standard(circuit: Circuit) -> None:
    """Check that every gate with unknown parameters is the one of its name in the standard table, up to phase.

    Raises
    ------
    ProofError
    """
    for kind in np.unique(circuit.op[circuit.is_symbolic]).tolist():
        gate = circuit.table[kind]
        known = GATES.get(gate.name)
        if known is not None and gate.name in HARMONICS and gate.n_parameters == known.n_parameters:
            values = np.random.default_rng(64).uniform(-7, 7, (64, gate.n_parameters))
            if gate == known or bool((distance(gate.matrix(values), known.matrix(values)) <= _SAME).all()):
                continue
        raise ProofError(
            f"nothing can be proven of '{shorten(gate.name)}' with unknown parameters",
            required="a gate of the standard table",
        )


class UnknownWindows:
    """Bounds for windows with unknown parameters; windows of the same structure are computed once."""

    def __init__(self) -> None:
        self._known: dict[tuple[int, tuple[_Factor, ...], tuple[_Factor, ...]], float] = {}

    def distance(
        self,
        source: Circuit,
        source_rows: Sequence[int],
        source_slots: Sequence[tuple[int, ...]],
        output: Circuit,
        output_rows: Sequence[int],
        output_slots: Sequence[tuple[int, ...]],
        width: int,
    ) -> float:
        """Return an upper bound of the distance for all values, in operator norm up to phase.

        Parameters
        ----------
        source, output : Circuit
        source_rows, output_rows : sequence of int
            The operations of the window, in order.
        source_slots, output_slots : sequence of tuple of int
            The slots of the window on which each acts.
        width : int
            Number of slots.
        """
        if len(source_rows) == len(output_rows) == 1 and source_slots[0] == output_slots[0]:
            a, b = source_rows[0], output_rows[0]
            if source.table[source.op[a]].name == output.table[output.op[b]].name and _same(
                _parameters(source, a), _parameters(output, b)
            ):
                return 0.0
        units = _Units()
        held = [
            [units.factor(circuit, row, slots) for row, slots in zip(rows, places, strict=True)]
            for circuit, rows, places in ((source, source_rows, source_slots), (output, output_rows, output_slots))
        ]
        meant, made = (tuple(units.resolved(factor) for factor in side) for side in held)
        key = (width, meant, made)
        known = self._known.get(key)
        if known is None:
            known = self._known[key] = _bound(*key)
        return known


def _parameters(circuit: Circuit, row: int) -> tuple[Parameter, ...]:
    gate = circuit.table[circuit.op[row]]
    if gate.function is not None and circuit.link[row] >= 0:
        return circuit.symbolic[circuit.link[row]]
    start = circuit.parameter_offsets[row]
    return tuple(circuit.parameters[start : start + gate.n_parameters].tolist())


def _same(first: Sequence[Parameter], second: Sequence[Parameter]) -> bool:
    return len(first) == len(second) > 0 and all(close(a, b) for a, b in zip(first, second, strict=True))


class _Units:
    """Finds the independent unknowns of a window, and writes coefficients as integers in units of each."""

    def __init__(self) -> None:
        self._references: list[tuple[str, float]] = []  # atom, first coefficient met
        self._ratios: list[dict[float, Fraction]] = []

    def factor(self, circuit: Circuit, row: int, slots: tuple[int, ...]) -> tuple[_Factor, tuple[Parameter, ...]]:
        gate = circuit.table[circuit.op[row]]
        if gate.name == UNITARY.name:
            return _Factor(gate, slots, (), circuit.matrices[circuit.link[row]].tobytes()), ()
        values = _parameters(circuit, row)
        for value in values:
            for atom, coefficient in value.terms if isinstance(value, Affine) else ():
                self._place(atom, coefficient)
        return _Factor(gate, slots), values

    def _place(self, atom: str, coefficient: float) -> int:
        for number, (other, reference) in enumerate(self._references):
            if other != atom:
                continue
            ratio = coefficient / reference
            fraction = Fraction(ratio).limit_denominator(_LARGEST_DENOMINATOR)
            if abs(float(fraction) - ratio) <= 4e-15 * abs(ratio):
                self._ratios[number][coefficient] = fraction
                return number
        self._references.append((atom, coefficient))
        self._ratios.append({coefficient: Fraction(1)})
        return len(self._references) - 1

    def resolved(self, factor: tuple[_Factor, tuple[Parameter, ...]]) -> _Factor:
        """Return a factor with its angles in units of the unknowns."""
        bare, values = factor
        angles = []
        for value in values:
            if not isinstance(value, Affine):
                angles.append(_Angle(value + 0.0))
                continue
            multiples = []
            for atom, coefficient in value.terms:
                number = self._place(atom, coefficient)
                common = math.lcm(*(ratio.denominator for ratio in self._ratios[number].values()))
                multiples.append((number, int(self._ratios[number][coefficient] * common)))
            angles.append(_Angle(value.constant + 0.0, tuple(multiples)))
        return _Factor(bare.gate, bare.slots, tuple(angles), bare.matrix)


def _bound(width: int, source: tuple[_Factor, ...], output: tuple[_Factor, ...]) -> float:
    """Return the bound for one structure."""
    lowest: dict[int, int] = {}
    highest: dict[int, int] = {}
    for side, sign in ((source, 1), (output, -1)):
        for factor in side:
            for place, angle in enumerate(factor.angles):
                for unknown, times in angle.multiples:
                    ends = [sign * times * end for end in HARMONICS[factor.gate.name][place]]
                    lowest[unknown] = lowest.get(unknown, 0) + min(ends)
                    highest[unknown] = highest.get(unknown, 0) + max(ends)
    # Multiplied by a phase, the exponents lie evenly about zero; half a step more where they cannot.
    degrees = [(highest[unknown] - lowest[unknown] + 1) // 2 for unknown in sorted(lowest)]
    size = 2**width
    for points in ([4 * d for d in degrees], [3 * d for d in degrees], [2 * d + 1 for d in degrees]):
        if math.prod(points) * size * size <= _MOST_ENTRIES:
            break
    else:
        raise ProofError(
            "a window depends on too many unknown parameters to be proven",
            required=f"at most {_MOST_ENTRIES} matrix entries",
            found=f"{math.prod(points) * size * size}",
        )
    grid = np.meshgrid(*(4 * np.pi * np.arange(n) / n for n in points), indexing="ij")
    values = {unknown: axis.ravel() for unknown, axis in zip(sorted(lowest), grid, strict=True)}
    count = math.prod(points)
    made, meant = (_product(side, values, count, width) for side in (output, source))
    w = dagger(made) @ meant
    w[:, range(size), range(size)] -= np.trace(w, axis1=1, axis2=2)[:, None] / size
    sampled = float(np.linalg.norm(w, axis=(1, 2)).max())
    growth = math.prod(1 / math.cos(math.pi * d / n) for d, n in zip(degrees, points, strict=True))
    epsilon = sampled * growth
    return epsilon * math.sqrt(1 + epsilon**2 / size)


def _product(factors: Sequence[_Factor], values: dict[int, NDArray[np.float64]], count: int, width: int) -> Array:
    """Return the products of a window's gates at all points, shape (count, 2**width, 2**width)."""
    total: Array = np.broadcast_to(np.eye(2**width, dtype=np.complex128), (count, 2**width, 2**width))
    for factor in factors:
        if factor.matrix:
            side = 2 ** len(factor.slots)
            matrix = np.frombuffer(factor.matrix, dtype=np.complex128).reshape(side, side)
        elif any(angle.multiples for angle in factor.angles):
            columns = [
                angle.constant + sum((times * values[unknown] for unknown, times in angle.multiples), np.zeros(count))
                for angle in factor.angles
            ]
            matrix = GATES[factor.gate.name].matrix(np.stack(columns, axis=-1))
        else:
            matrix = factor.gate.matrix([angle.constant for angle in factor.angles])
        total = embed(matrix, list(factor.slots), width) @ total
    return total
