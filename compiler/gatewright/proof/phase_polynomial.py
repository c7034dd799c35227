"""Compare circuits of exchanges, NOT, CNOT and diagonal gates by their parity terms, at any number of qubits.

Amy, Maslov, Mosca, IEEE TCAD 33, 1476 (2014), arXiv:1303.2042. On basis states such a circuit computes an affine
function over GF(2), and multiplies by exp(i Σ a_S (S·x)), where S·x is the parity of a set S of inputs. Two circuits
with the same function are equal up to phase if Σ (a_S - b_S)(S·x) is the same up to multiples of 2π for all x; the sum
of the differences' moduli, each taken to the nearest multiple of 2π, bounds the distance.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.proof.products import UNIT, operation_matrices

__all__ = ["NotMonomial", "PhasePolynomial", "compare_phase_polynomials", "phase_polynomial"]

#: Largest modulus of an entry that is taken as zero.
ROUNDING = 1e-12
#: Terms that do not cancel one by one are compared on all inputs of up to this many variables.
MOST_VARIABLES = 16


class NotMonomial(Exception):
    """A circuit has a gate that is not an affine permutation of basis states with phases."""


@dataclass(eq=False, slots=True)
class PhasePolynomial:
    """What a circuit does to basis states.

    Attributes
    ----------
    wires : list of (int, int)
        Of each qubit at the end: the set of inputs whose parity it is, as a mask, and 1 where it is inverted.
    terms : dict of int to float
        Angle of every parity.
    error : float
        Bound on the rounding.
    """

    wires: list[tuple[int, int]]
    terms: dict[int, float] = field(default_factory=dict)
    error: float = 0.0


def phase_polynomial(circuit: Circuit, wires: list[tuple[int, int]]) -> PhasePolynomial:
    """Follow the parities of the inputs through a circuit of gates and barriers.

    Parameters
    ----------
    circuit : Circuit
    wires : list of (int, int)
        Of each qubit at the start: mask of inputs and inversion, ``(0, 0)`` for |0⟩.

    Raises
    ------
    NotMonomial
    """
    state = PhasePolynomial(list(wires))
    rows = np.flatnonzero(circuit.is_unitary)
    if len(rows) and circuit.widths[rows].max() > 4:
        raise NotMonomial
    actions: list[tuple[NDArray[np.int64], NDArray[np.float64]]] = []
    which = np.full(len(circuit), -1)
    for at, matrices, own in operation_matrices(circuit, rows):
        size = matrices.shape[-1]
        image = np.argmax(np.abs(matrices), axis=1)
        kept = np.take_along_axis(matrices, image[:, None, :], axis=1)[:, 0, :]
        rest = np.sqrt(np.maximum((np.abs(matrices) ** 2).sum(axis=(1, 2)) - (np.abs(kept) ** 2).sum(axis=1), 0))
        if not (rest < ROUNDING**0.5).all():
            raise NotMonomial
        off = np.abs(matrices).copy()
        np.put_along_axis(off, image[:, None, :], 0, axis=1)
        if not (off.max(axis=(1, 2), initial=0.0) < ROUNDING).all():
            raise NotMonomial
        # Walsh-Hadamard: θ(b) = Σ c_S (-1)^(S·b), and (-1)^p = 1 - 2 p.
        index = np.arange(size)
        parity = np.array([[bin(s & b).count("1") & 1 for b in index] for s in index])
        angles = np.angle(kept) @ (1 - 2 * parity).T / size
        for k, position in enumerate(at.tolist()):
            which[rows[position]] = len(actions)
            actions.append((image[k], -2 * angles[k]))
        state.error += float((own + off.sum(axis=(1, 2)) + 8 * size * UNIT).sum())
    for row in rows.tolist():
        _apply(state, circuit.qubits_of(row), *actions[which[row]])
    return state


def _apply(
    state: PhasePolynomial, qubits: tuple[int, ...], image: NDArray[np.int64], angles: NDArray[np.float64]
) -> None:
    width = len(qubits)
    held = [state.wires[q] for q in qubits]
    for s in range(1, len(angles)):
        if angles[s]:
            _add(state, held, s, float(angles[s]))
    base = int(image[0])
    columns = [int(image[1 << j]) ^ base for j in range(width)]
    for b in range(len(image)):
        linear = base
        for j in range(width):
            linear ^= columns[j] if b >> j & 1 else 0
        if linear != image[b]:
            raise NotMonomial
    # Bit j counts from the last qubit of the gate.
    for out, q in enumerate(qubits):
        bit = width - 1 - out
        mask, inverted = 0, base >> bit & 1
        for j in range(width):
            if columns[j] >> bit & 1:
                mask ^= held[width - 1 - j][0]
                inverted ^= held[width - 1 - j][1]
        state.wires[q] = mask, inverted


def _add(state: PhasePolynomial, held: list[tuple[int, int]], subset: int, angle: float) -> None:
    mask, inverted = 0, 0
    for j in range(len(held)):
        if subset >> j & 1:
            mask ^= held[len(held) - 1 - j][0]
            inverted ^= held[len(held) - 1 - j][1]
    if mask:
        before = state.terms.get(mask, 0.0)
        state.terms[mask] = before + (-angle if inverted else angle)
        state.error += 2 * UNIT * abs(before)


def compare_phase_polynomials(
    source: Circuit, output: Circuit, initial: Sequence[int], final: Sequence[int] | None = None
) -> tuple[float, tuple[int, ...], str]:
    """Compare two circuits; arguments and result are those of `gatewright.proof.tableau.compare_tableaus`.

    Raises
    ------
    NotMonomial
        One of them has other gates, or too many terms differ to be compared.
    """
    n = source.n_qubits
    meant = phase_polynomial(source, [(1 << q, 0) for q in range(n)])
    start = [(0, 0)] * output.n_qubits
    for q, place in enumerate(initial):
        start[place] = 1 << q, 0
    made = phase_polynomial(output, start)
    if final is None:
        where = {wire: q for q, wire in enumerate(made.wires)}
        found = [where.get(wire, -1) for wire in meant.wires]
        if min(found) < 0:
            return 0.0, (), "no output qubit ends with the value of some wire of the source"
        final = found
    ends = tuple(final)
    for q, place in enumerate(ends):
        if made.wires[place] != meant.wires[q]:
            x = _witness(made.wires[place], meant.wires[q])
            return 0.0, ends, f"source qubit {q} ends with another value on the input {_ket(x, n)}"
    for place in set(range(output.n_qubits)) - set(ends):
        if made.wires[place] != (0, 0):
            return 0.0, ends, f"output qubit {place}, which is not the source's, does not end in |0⟩"
    left: dict[int, float] = {}
    for mask in made.terms.keys() | meant.terms.keys():
        left[mask] = made.terms.get(mask, 0.0) - meant.terms.get(mask, 0.0)
    wrapped = {mask: float(np.remainder(a + np.pi, 2 * np.pi) - np.pi) for mask, a in left.items()}
    large = {mask: a for mask, a in wrapped.items() if abs(a) > 1e-9}
    small = sum(abs(a) for mask, a in wrapped.items() if mask not in large)
    bound = small + made.error + meant.error + 4 * UNIT * sum(map(abs, left.values()))
    if not large:
        return bound, ends, ""
    union = 0
    for mask in large:
        union |= mask
    variables = [j for j in range(n) if union >> j & 1]
    if len(variables) > MOST_VARIABLES:
        raise NotMonomial
    values = np.arange(2 ** len(variables))
    total = np.zeros(len(values))
    for mask, a in large.items():
        own = sum(1 << k for k, j in enumerate(variables) if mask >> j & 1)
        total += a * (np.bitwise_count(values & own) & 1)
    off = np.abs(np.remainder(total + np.pi, 2 * np.pi) - np.pi)
    worst = int(np.argmax(off))
    if off[worst] <= 1e-9 * max(1, len(large)):
        return bound + float(off[worst]), ends, ""
    x = sum(1 << j for k, j in enumerate(variables) if worst >> k & 1)
    text = f"the phase of {_ket(x, n)} beside that of {_ket(0, n)} is off by {off[worst]:.6g}"
    return float(2 * np.sin(off[worst] / 4)), ends, text


def _witness(first: tuple[int, int], second: tuple[int, int]) -> int:
    difference = first[0] ^ second[0]
    return 0 if first[1] != second[1] else difference & -difference


def _ket(x: int, n: int) -> str:
    bits = "".join("1" if x >> q & 1 else "0" for q in range(n))
    return f"|{bits if n <= 32 else bits[:29] + '...'}⟩"
