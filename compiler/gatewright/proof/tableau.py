"""Compare Clifford circuits by what they do to Pauli strings: exact, at any number of qubits.

Gottesman, arXiv:quant-ph/9807006; Aaronson and Gottesman, Phys. Rev. A 70, 052328 (2004). A Clifford gate takes every
Pauli string to one, up to sign; which one is read off its matrix. A gate that is Clifford only up to an error is taken
for the exact one, and the error counts: if M takes each generator P to within δ_P of ±Q, and C takes it to ±Q exactly,
W = C†M commutes with P up to δ_P. Averaging P W P† over all Pauli strings gives tr(W)/d, so W is within Σ δ_P of that
multiple of the identity, and M within 2 Σ δ_P of C up to phase.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.linalg import kron
from gatewright.proof.products import operation_matrices

__all__ = ["NotClifford", "Tableau", "compare_tableaus", "tableau_of"]

Bits = NDArray[np.bool_]

#: Largest error of a gate's Pauli images that is taken as rounding.
ROUNDING = 1e-9
#: Gates up to this many qubits are looked at.
WIDEST = 3
_PAULIS = (np.eye(2), np.array([[0, 1], [1, 0]]), np.array([[0, -1j], [1j, 0]]), np.diag([1.0, -1.0]))
#: Of x + 2 z: the Pauli matrix with these bits (1, X, Z, Y).
_OF_BITS = (_PAULIS[0], _PAULIS[1], _PAULIS[3], _PAULIS[2])


class NotClifford(Exception):
    """A circuit has something else than Clifford gates."""


@dataclass(eq=False, slots=True)
class Tableau:
    """Pauli strings with signs, one a row.

    Attributes
    ----------
    x, z : ndarray of bool, shape (rows, qubits)
        X, Z, or (where both) Y on each qubit.
    sign : ndarray of bool, shape (rows,)
        True for minus.
    error : float
        Bound on the distance of the circuit from the exact Clifford operation.
    """

    x: Bits
    z: Bits
    sign: Bits
    error: float = 0.0


def _action(matrix: NDArray[np.complex128], width: int) -> tuple[NDArray[np.int64], Bits, float]:
    """Return, of every Pauli string's code, the code and the sign of its image, and the error."""
    codes = list(itertools.product(range(4), repeat=width))
    strings = []
    for code in codes:
        string = np.eye(1, dtype=np.complex128)
        for bits in code:
            string = kron(string, _OF_BITS[bits])
        strings.append(string)
    stack = np.array(strings)
    images = matrix @ stack @ matrix.conj().T
    parts = np.einsum("pij,qji->pq", images, stack).real / 2**width
    target = np.argmax(np.abs(parts), axis=1)
    sign = parts[np.arange(len(codes)), target] < 0
    off = np.linalg.norm(images - np.where(sign, -1, 1)[:, None, None] * stack[target], ord=2, axis=(1, 2))
    error = 0.0
    for slot in range(width):
        for bits in (1, 2):
            error += float(off[bits * 4 ** (width - 1 - slot)])
    return target, sign, 2 * error


def tableau_of(circuit: Circuit, start: Tableau) -> Tableau:
    """Follow Pauli strings through a circuit.

    Parameters
    ----------
    circuit : Circuit
        Clifford gates on up to three qubits, and barriers.
    start : Tableau

    Raises
    ------
    NotClifford
    """
    x, z, sign, error = start.x.T.copy(), start.z.T.copy(), start.sign.copy(), start.error
    rows = np.flatnonzero(circuit.is_unitary)
    if len(rows) and circuit.widths[rows].max() > WIDEST:
        raise NotClifford
    actions: list[tuple[NDArray[np.int64], Bits]] = []
    which = np.full(len(circuit), -1)
    for at, matrices, own in operation_matrices(circuit, rows):
        width = int(matrices.shape[-1]).bit_length() - 1
        flat = np.ascontiguousarray(matrices).reshape(len(matrices), -1)
        distinct, number = np.unique(flat.view(np.float64), axis=0, return_inverse=True)
        if len(distinct) > 4096:
            raise NotClifford
        first = np.array([int(np.flatnonzero(number == k)[0]) for k in range(len(distinct))])
        errors = np.zeros(len(distinct))
        for k, example in enumerate(first.tolist()):
            target, minus, errors[k] = _action(matrices[example], width)
            if not errors[k] <= ROUNDING:
                raise NotClifford
            which[rows[at[number == k]]] = len(actions)
            actions.append((target, minus))
        error += float((errors[number] + own).sum())
    for row in rows.tolist():
        target, minus = actions[which[row]]
        qubits = circuit.qubits_of(row)
        code = np.zeros(len(sign), dtype=np.int64)
        for q in qubits:
            code = 4 * code + x[q] + 2 * z[q]
        sign ^= minus[code]
        code = target[code]
        for q in reversed(qubits):
            x[q], z[q] = (code & 1).astype(bool), (code & 2).astype(bool)
            code = code >> 2
    return Tableau(x.T, z.T, sign, error)


def generators(n: int, places: Sequence[int], total: int, ancillas: Sequence[int] = ()) -> Tableau:
    """Return X and then Z of each of n qubits on its place among `total`, then Z of each ancilla."""
    rows = 2 * n + len(ancillas)
    x, z = np.zeros((rows, total), dtype=bool), np.zeros((rows, total), dtype=bool)
    x[np.arange(n), places] = True
    z[n + np.arange(n), places] = True
    z[2 * n + np.arange(len(ancillas)), list(ancillas)] = True
    return Tableau(x, z, np.zeros(rows, dtype=bool))


def compare_tableaus(
    source: Circuit, output: Circuit, initial: Sequence[int], final: Sequence[int] | None = None
) -> tuple[float, tuple[int, ...], str]:
    """Compare two Clifford circuits, gates and barriers only.

    Parameters
    ----------
    source, output : Circuit
    initial : sequence of int
        Output qubit of each source qubit at the start; the output's other qubits start, and must end, in |0⟩.
    final : sequence of int, optional
        Output qubit of each source qubit at the end; found if not given.

    Returns
    -------
    distance : float
        Bound on the distance up to global phase where `difference` is empty.
    final : tuple of int
    difference : str
        A Pauli string of the source that ends differently; empty where there is none.

    Raises
    ------
    NotClifford
        One of them is not a Clifford circuit.
    """
    n, total = source.n_qubits, output.n_qubits
    others = sorted(set(range(total)) - set(initial))
    meant = tableau_of(source, generators(n, range(n), n))
    made = tableau_of(output, generators(n, initial, total, others))
    if final is None:
        # A wire is where its columns are.
        where = {(made.x[: 2 * n, q].tobytes(), made.z[: 2 * n, q].tobytes()): q for q in range(total)}
        found = [where.get((meant.x[:, q].tobytes(), meant.z[:, q].tobytes()), -1) for q in range(n)]
        if min(found) < 0:
            return 0.0, (), "no output qubit carries what the source does to some wire"
        final = found
    ends = list(final)
    rest = sorted(set(range(total)) - set(ends))
    own = slice(0, 2 * n)
    wrong = (made.x[own][:, ends] != meant.x).any(axis=1) | (made.z[own][:, ends] != meant.z).any(axis=1)
    wrong |= (made.sign[own] != meant.sign) | made.x[own][:, rest].any(axis=1)
    if wrong.any():
        row = int(np.flatnonzero(wrong)[0])
        name = f"{'X' if row < n else 'Z'} on source qubit {row % n}"
        return 0.0, tuple(ends), f"{name} ends as {_string(made, row)} and should end as {_string(meant, row, ends)}"
    idle = slice(2 * n, None)
    if made.x[idle].any() or made.z[idle][:, ends].any() or made.sign[idle].any():
        return 0.0, tuple(ends), "a qubit beyond the source's does not end in |0⟩"
    return meant.error + made.error, tuple(ends), ""


def _string(tableau: Tableau, row: int, places: Sequence[int] | None = None) -> str:
    letters = []
    for q in np.flatnonzero(tableau.x[row] | tableau.z[row]).tolist()[:12]:
        letter = "Y" if tableau.x[row, q] and tableau.z[row, q] else "X" if tableau.x[row, q] else "Z"
        letters.append(f"{letter}{places[q] if places is not None else q}")
    return ("-" if tableau.sign[row] else "+") + " ".join(letters)
