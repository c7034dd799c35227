"""Windows with unknown parameters: a bound for all their values from finitely many.

Entries of the standard gates are trigonometric polynomials in half of each parameter, of the degrees that `HARMONICS`
states. So are those of E = W − (tr W/d)·1 with W = output† · source, in every independent unknown. Sampled at N > 2D
equally spaced points, a trigonometric polynomial of degree D is at most its largest sample over cos(πD/N) (Ehlich and
Zeller, Math. Z. 86, 41 (1964)); taken along one variable after another, and for every linear functional of the matrix,
this bounds the norm ε of E everywhere. W is unitary, so that output and source differ by ε·√(1 + ε²/d) at most, up to
a phase that may depend on the unknowns. Unknowns are affine parts of angles; taken as independent, they ask more.
"""

from __future__ import annotations

import functools
import itertools
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

#: Largest numerator and denominator of a multiple of an unknown: others count as unknowns of their own.
_LARGEST = 16
#: Angles that are combined with each other.
_MOST_COMBINED = 5
#: Coefficients that agree to this are taken as equal: the rounding of an angle of that size is as large.
_ROUNDING = 4e-15
#: Sampled points for each degree, and the most matrix entries for which so many are taken.
SAMPLING = ((4.0, 1 << 16), (3.0, 1 << 19), (2.5, 1 << 21), (2.0, 1 << 23))
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
    """Finds independent unknowns of a window, and writes every angle as rational multiples of them.

    An unknown is the affine part of some angle, those of the source first. That what is taken as independent may in
    truth depend on each other does no harm: the bound then holds for more than is asked.
    """

    def __init__(self) -> None:
        self._basis: list[dict[str, float]] = []
        self._forms: list[tuple[dict[str, float], tuple[tuple[int, Fraction], ...]]] = []  # the first angles met
        self._known: dict[tuple[tuple[str, float], ...], tuple[tuple[int, Fraction], ...]] = {}

    def factor(self, circuit: Circuit, row: int, slots: tuple[int, ...]) -> tuple[_Factor, tuple[Parameter, ...]]:
        gate = circuit.table[circuit.op[row]]
        if gate.name == UNITARY.name:
            return _Factor(gate, slots, (), circuit.matrices[circuit.link[row]].tobytes()), ()
        values = _parameters(circuit, row)
        for value in values:
            if isinstance(value, Affine):
                self._express(value.terms)
        return _Factor(gate, slots), values

    def resolved(self, factor: tuple[_Factor, tuple[Parameter, ...]]) -> _Factor:
        """Return a factor with its angles in units of the unknowns, once all of the window are known."""
        bare, values = factor
        units = [1] * len(self._basis)
        for expressed in self._known.values():
            for number, times in expressed:
                units[number] = math.lcm(units[number], times.denominator)
        angles = [
            _Angle(
                value.constant + 0.0,
                tuple((number, int(times * units[number])) for number, times in self._known[value.terms]),
            )
            if isinstance(value, Affine)
            else _Angle(value + 0.0)
            for value in values
        ]
        return _Factor(bare.gate, bare.slots, tuple(angles), bare.matrix)

    def _express(self, terms: tuple[tuple[str, float], ...]) -> None:
        if terms in self._known:
            return
        vector = dict(terms)
        found = self._one(vector) or self._several(vector)
        if not found:
            self._basis.append(vector)
            found = ((len(self._basis) - 1, Fraction(1)),)
        self._known[terms] = found
        if len(self._forms) < _MOST_COMBINED:
            self._forms.append((vector, found))

    def _one(self, vector: dict[str, float]) -> tuple[tuple[int, Fraction], ...]:
        """Return the angle as a multiple of one unknown, or nothing."""
        for number, other in enumerate(self._basis):
            if other.keys() == vector.keys():
                first = next(iter(vector))
                ratio = Fraction(vector[first] / other[first]).limit_denominator(_LARGEST)
                if abs(ratio) <= _LARGEST and all(
                    abs(float(ratio) * other[a] - vector[a]) <= _ROUNDING * abs(vector[a]) for a in vector
                ):
                    return ((number, ratio),)
        return ()

    def _several(self, vector: dict[str, float]) -> tuple[tuple[int, Fraction], ...]:
        """Return the angle as a combination of the first angles with whole and half factors, or nothing."""
        if len(self._forms) < 2:
            return ()
        atoms = list(dict.fromkeys(atom for form in (*(form for form, _ in self._forms), vector) for atom in form))
        rows = np.array([[form.get(atom, 0.0) for atom in atoms] for form, _ in self._forms])
        wanted = np.array([vector.get(atom, 0.0) for atom in atoms])
        factors = _combinations(len(self._forms))
        size = np.abs(factors) @ np.abs(rows) + np.abs(wanted)
        fits = np.flatnonzero((np.abs(factors @ rows - wanted) <= _ROUNDING * size).all(axis=1))
        if not len(fits):
            return ()
        best = factors[fits[np.argmin(np.count_nonzero(factors[fits], axis=1))]]
        total: dict[int, Fraction] = {}
        for factor, (_, expressed) in zip(best.tolist(), self._forms, strict=True):
            for number, times in expressed:
                total[number] = total.get(number, Fraction(0)) + Fraction(factor) * times
        return tuple((number, times) for number, times in sorted(total.items()) if times)


@functools.cache
def _combinations(count: int) -> NDArray[np.float64]:
    return np.array(list(itertools.product((0, 1, -1, 0.5, -0.5), repeat=count)))


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
    for ratio, most in SAMPLING:
        points = [max(math.ceil(ratio * d), 2 * d + 1) for d in degrees]
        if math.prod(points) * size * size <= most:
            break
    else:
        raise ProofError(
            "a window depends on too many unknown parameters to be proven",
            required=f"at most {SAMPLING[-1][1]} matrix entries at the points to be sampled",
            found=str(math.prod(points) * size * size),
        )
    # One axis for each unknown: a product grows along those that occur in it, no more.
    axes = np.ix_(*(4 * np.pi * np.arange(n) / n for n in points))
    values = dict(zip(sorted(lowest), axes, strict=True))
    made, meant = (_product(side, values, width) for side in (output, source))
    w = dagger(made) @ meant
    w[..., range(size), range(size)] -= np.trace(w, axis1=-2, axis2=-1)[..., None] / size
    sampled = float(np.linalg.norm(w, axis=(-2, -1)).max())
    growth = math.prod(1 / math.cos(math.pi * d / n) for d, n in zip(degrees, points, strict=True))
    epsilon = sampled * growth
    return epsilon * math.sqrt(1 + epsilon**2 / size)


def _product(factors: Sequence[_Factor], values: dict[int, NDArray[np.float64]], width: int) -> Array:
    """Return the products of a window's gates on the grid of the unknowns, shape (..., 2**width, 2**width)."""
    total: Array = np.eye(2**width, dtype=np.complex128)
    for factor in factors:
        if factor.matrix:
            side = 2 ** len(factor.slots)
            matrix = np.frombuffer(factor.matrix, dtype=np.complex128).reshape(side, side)
        elif any(angle.multiples for angle in factor.angles):
            columns = [
                sum((times * values[unknown] for unknown, times in angle.multiples), np.array(angle.constant))
                for angle in factor.angles
            ]
            matrix = GATES[factor.gate.name].matrix(np.stack(np.broadcast_arrays(*columns), axis=-1))
        else:
            matrix = factor.gate.matrix([angle.constant for angle in factor.angles])
        total = embed(matrix, list(factor.slots), width) @ total
    return total
