"""The columnar circuit: a million operations are a few arrays.

A circuit owns a table of operation kinds (`Gate`), and one row an operation: the kind, the qubits, the
parameters, and a `link` (the classical bit of a measurement, the number of an explicit matrix). Circuits are
frozen; a `Builder` makes them. Time runs left to right. Qubit 0 is the leftmost factor of the Kronecker product.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import CircuitError
from gatewright.gates import ANY, BARRIER, DELAY, GATES, MEASURE, RESET, UNITARY, Gate, find_gate
from gatewright.linalg import checked_unitary, kron
from gatewright.parameters import INPUT_TYPE, Affine, Parameter, as_parameter, checked_values, within

__all__ = ["Builder", "Circuit", "Operation", "Piece", "apply_matrix", "apply_operations", "assemble"]

Array = NDArray[np.complex128]
Integers = NDArray[np.int32]

#: Largest number of qubits for which a full unitary is made (16 MiB at 10, 256 MiB at 12).
MAX_DENSE_QUBITS = 12

NO_RANGES: Mapping[str, Sequence[tuple[float, float]]] = MappingProxyType({})


@dataclass(frozen=True, slots=True)
class Operation:
    """A view of one operation of a circuit.

    Attributes
    ----------
    name : str
    qubits : tuple of int
    parameters : tuple of float or Affine
    bit : int or None
        The classical bit of a measurement.
    matrix : ndarray or None
        The matrix, for what is unitary and known.
    """

    name: str
    qubits: tuple[int, ...]
    parameters: tuple[Parameter, ...] = ()
    bit: int | None = None
    matrix: Array | None = field(default=None, repr=False, compare=False)


@dataclass(frozen=True, eq=False, slots=True)
class Circuit:
    """A straight-line circuit in columns.

    Attributes
    ----------
    n_qubits, n_bits : int
    table : tuple of Gate
        The kinds of operation that occur; `op` indexes it.
    op : ndarray of int16, shape (m,)
    qubits : ndarray of int32, shape (q,)
        Flat; operation k acts on ``qubits[offsets[k]:offsets[k + 1]]``.
    offsets : ndarray of int64, shape (m + 1,)
    parameters : ndarray of float64, shape (p,)
        Flat, with `parameter_offsets` (m + 1,); NaN where `symbolic` says what it is.
    link : ndarray of int32, shape (m,)
        The classical bit of a measurement, the row in `matrices` of an explicit unitary, the row in `symbolic` of a
        gate with parameters that are not known yet, else -1.
    matrices : tuple of ndarray
    phase : float
        Global phase, radians.
    qubit_registers, bit_registers : tuple of (str, int)
        Names and sizes, for writing; empty if there are none to keep.
    calibrations : tuple of str
        ``cal``, ``defcal`` and ``defcalgrammar`` statements of the program, kept as they stand for writing.
    symbolic : tuple of tuples of float or Affine
        All parameters of a gate of which some are not known yet.
    inputs : tuple of (str, str)
        Names that the program is given values for when it runs, with their OpenQASM types.
    """

    n_qubits: int
    n_bits: int
    table: tuple[Gate, ...]
    op: NDArray[np.int16]
    qubits: Integers
    offsets: NDArray[np.int64]
    parameters: NDArray[np.float64]
    parameter_offsets: NDArray[np.int64]
    link: Integers
    matrices: tuple[Array, ...] = ()
    phase: float = 0.0
    qubit_registers: tuple[tuple[str, int], ...] = ()
    bit_registers: tuple[tuple[str, int], ...] = ()
    symbolic: tuple[tuple[Parameter, ...], ...] = ()
    inputs: tuple[tuple[str, str], ...] = ()
    calibrations: tuple[str, ...] = ()

    @classmethod
    def from_unitary(cls, matrix: ArrayLike, *, tolerance: float = 1e-12, nearest: bool = False) -> Circuit:
        """Return the circuit of one explicit unitary on as many qubits as the matrix has.

        Raises
        ------
        MatrixError, NotUnitaryError
            See `gatewright.linalg.checked_unitary`.
        """
        unitary, _ = checked_unitary(matrix, tolerance=tolerance, nearest=nearest)
        n = int(unitary.shape[0]).bit_length() - 1
        builder = Builder(n)
        builder.unitary(unitary, *range(n), check=False)
        return builder.build()

    def __len__(self) -> int:
        """Return the number of operations."""
        return len(self.op)

    def __iter__(self) -> Iterator[Operation]:
        """Iterate over views of the operations."""
        return (self.operation(k) for k in range(len(self)))

    def __getitem__(self, key: slice) -> Circuit:
        """Return the slice of operations as a circuit on the same qubits."""
        return self.take(np.arange(len(self))[key])

    def qubits_of(self, k: int) -> tuple[int, ...]:
        """Return the qubits of operation `k`."""
        return tuple(self.qubits[self.offsets[k] : self.offsets[k + 1]].tolist())

    def operation(self, k: int) -> Operation:
        """Return a view of operation `k`."""
        gate = self.table[self.op[k]]
        parameters = self.parameters[self.parameter_offsets[k] : self.parameter_offsets[k + 1]]
        matrix, shown = None, tuple(parameters.tolist())
        if gate.name == UNITARY.name:
            matrix = self.matrices[self.link[k]]
        elif gate.function is not None and self.link[k] >= 0:
            shown = self.symbolic[self.link[k]]
        elif gate.function is not None:
            matrix = gate.matrix(parameters)
        bit = int(self.link[k]) if gate.name == MEASURE.name else None
        return Operation(gate.name, self.qubits_of(k), shown, bit, matrix)

    @property
    def widths(self) -> NDArray[np.int64]:
        """Number of qubits of each operation, shape (m,)."""
        return np.diff(self.offsets)

    @property
    def is_unitary(self) -> NDArray[np.bool_]:
        """Whether each operation is a unitary gate with known parameters, shape (m,)."""
        return self.is_gate & ~self.is_symbolic if self.symbolic else self.is_gate

    @property
    def is_gate(self) -> NDArray[np.bool_]:
        """Whether each operation is a gate, its parameters known or not: no barrier, measurement or reset."""
        return self._of_kind([gate.function is not None or gate.name == UNITARY.name for gate in self.table])

    @property
    def is_symbolic(self) -> NDArray[np.bool_]:
        """Whether each operation is a gate with parameters that are not known yet, shape (m,)."""
        if not self.symbolic:
            return np.zeros(len(self), dtype=bool)
        return np.asarray(self._of_kind([gate.function is not None for gate in self.table]) & (self.link >= 0))

    def bind(
        self, values: Mapping[str, float], *, ranges: Mapping[str, Sequence[tuple[float, float]]] = NO_RANGES
    ) -> Circuit:
        """Put numbers in the place of names; those that are not given stay.

        Parameters
        ----------
        values : mapping of str to float
        ranges : mapping of str to sequence of (float, float), optional
            Least and greatest value of each parameter of a gate, by its name: what comes of the values is brought
            into them by full turns, which change a one-qubit gate by a global phase at most.

        Raises
        ------
        CircuitError
            A name that is not an input, or a value that does not fit its type.

        Examples
        --------
        >>> circuit = Builder(1).gate("rz", 0, parameters=[Affine.of("theta") / 2]).build()
        >>> circuit.bind({"theta": 0.5}).operation(0).parameters
        (0.25,)
        """
        known = checked_values(self.inputs, values)
        return self._replaced(
            lambda value: value.bind(known), tuple(pair for pair in self.inputs if pair[0] not in known), ranges
        )

    def at_atoms(self, values: Mapping[str, float]) -> Circuit:
        """Return the circuit at values of all atoms, taken as independent of each other."""
        return self._replaced(lambda value: value.substitute(values), (), {})

    @property
    def atoms(self) -> tuple[str, ...]:
        """The atoms of all parameters that are not known yet, in order of first appearance."""
        used = np.unique(self.link[self.is_symbolic]).tolist()
        rows = (self.symbolic[k] for k in used)
        return tuple(dict.fromkeys(atom for row in rows for v in row if isinstance(v, Affine) for atom in v.atoms))

    def _replaced(
        self,
        change: Callable[[Affine], Parameter],
        inputs: tuple[tuple[str, str], ...],
        ranges: Mapping[str, Sequence[tuple[float, float]]],
    ) -> Circuit:
        """Return the circuit with every unknown parameter changed."""
        rows = np.flatnonzero(self.is_symbolic)
        made = {
            k: tuple([change(v) if isinstance(v, Affine) else v for v in self.symbolic[k]])
            for k in np.unique(self.link[rows]).tolist()
        }
        parameters, link = self.parameters.copy(), self.link.copy()
        kept: list[tuple[Parameter, ...]] = []
        place: dict[int, int] = {}
        for row in rows.tolist():
            old = int(link[row])
            numbers = made[old]
            if any(isinstance(value, Affine) for value in numbers):
                link[row] = place.setdefault(old, len(kept))
                if link[row] == len(kept):
                    kept.append(numbers)
                continue
            limits = ranges.get(self.table[self.op[row]].name) or ((-np.inf, np.inf),) * len(numbers)
            start = self.parameter_offsets[row]
            for column, (value, limit) in enumerate(zip(numbers, limits, strict=True)):
                assert not isinstance(value, Affine)
                parameters[start + column] = within(value, *limit)
            link[row] = -1
        return replace(self, parameters=parameters, link=link, symbolic=tuple(kept), inputs=inputs)

    def lanes(self) -> tuple[Integers, NDArray[np.int64]]:
        """Return `qubits` and `offsets` with the classical bit of each measurement as one more wire, n_qubits + bit.

        What keeps the order along these wires keeps the order of measurements into the same bit as well.
        """
        measured = self.is_named(MEASURE.name)
        if not measured.any():
            return self.qubits, self.offsets
        offsets = _offsets(self.widths + measured, len(self))
        wires = np.empty(offsets[-1], dtype=np.int32)
        bit_at = offsets[1:][measured] - 1
        is_bit = np.zeros(len(wires), dtype=bool)
        is_bit[bit_at] = True
        wires[~is_bit] = self.qubits
        wires[bit_at] = self.n_qubits + self.link[measured]
        return wires, offsets

    def is_named(self, name: str) -> NDArray[np.bool_]:
        """Return which operations are called `name`, shape (m,)."""
        return self._of_kind([gate.name == name for gate in self.table])

    def _of_kind(self, kinds: list[bool]) -> NDArray[np.bool_]:
        return np.asarray(np.array(kinds, dtype=bool)[self.op] if len(self.op) else np.zeros(0, dtype=bool))

    def count(self, name: str) -> int:
        """Return how many operations are called `name`."""
        return sum(int(np.count_nonzero(self.op == k)) for k, gate in enumerate(self.table) if gate.name == name)

    def counts(self) -> dict[str, int]:
        """Return the number of operations by name, in alphabetical order."""
        totals: dict[str, int] = {}
        for k, number in enumerate(np.bincount(self.op, minlength=len(self.table)).tolist()):
            if number:
                totals[self.table[k].name] = totals.get(self.table[k].name, 0) + number
        return dict(sorted(totals.items()))

    def take(self, index: ArrayLike) -> Circuit:
        """Return the circuit of the operations numbered `index`, in that order, on the same qubits."""
        rows = np.asarray(index, dtype=np.int64)
        qubits, offsets = _gather(self.qubits, self.offsets, rows)
        parameters, parameter_offsets = _gather(self.parameters, self.parameter_offsets, rows)
        return replace(
            self,
            op=self.op[rows],
            qubits=qubits,
            offsets=offsets,
            parameters=parameters,
            parameter_offsets=parameter_offsets,
            link=self.link[rows],
        )

    def matrix_groups(self, index: ArrayLike | None = None) -> Iterator[tuple[NDArray[np.int64], Array]]:
        """Yield ``(rows, matrices)`` for the unitary operations, one batch a kind and size; others are passed over.

        Parameters
        ----------
        index : array_like of int, optional
            Operations to visit; all by default. `rows` are positions in the circuit.

        Yields
        ------
        rows : ndarray of int, shape (k,)
        matrices : ndarray, shape (k, d, d)
        """
        chosen = np.arange(len(self)) if index is None else np.asarray(index, dtype=np.int64)
        if self.symbolic:
            chosen = chosen[~self.is_symbolic[chosen]]
        kinds = self.op[chosen]
        for k, gate in enumerate(self.table):
            rows = chosen[kinds == k]
            if not len(rows):
                continue
            if gate.function is not None:
                starts = self.parameter_offsets[rows]
                yield rows, gate.matrix(self.parameters[starts[:, None] + np.arange(gate.n_parameters)])
            elif gate.name == UNITARY.name:
                for width in np.unique(self.widths[rows]):
                    same = rows[self.widths[rows] == width]
                    yield same, np.stack([self.matrices[i] for i in self.link[same]])

    def pieces(self, rows: NDArray[np.int64], key: NDArray[np.int64]) -> Iterator[tuple[NDArray[np.int64], Piece]]:
        """Yield ``(positions in rows, piece)``, one a kind and width, for operations `rows` with the given keys."""
        kinds = self.op[rows]
        widths = self.widths[rows]
        for k, gate in enumerate(self.table):
            of_kind = np.flatnonzero(kinds == k)
            for width in np.unique(widths[of_kind]).tolist():
                chosen = of_kind[widths[of_kind] == width]
                at = rows[chosen]
                qubits = self.qubits[self.offsets[at][:, None] + np.arange(width)]
                values = self.parameters[self.parameter_offsets[at][:, None] + np.arange(gate.n_parameters)]
                yield chosen, Piece(gate, key[chosen], qubits, values, self.link[at])

    def unitary(self) -> Array:
        """Return the full matrix, global phase included.

        Returns
        -------
        ndarray, shape (2**n_qubits, 2**n_qubits)

        Raises
        ------
        CircuitError
            If there are more than 12 qubits, or an operation is not unitary (barriers are passed over).

        Examples
        --------
        >>> b = Builder(2)
        >>> b.gate("h", 0).gate("cx", 0, 1)
        Builder(2 qubits, 0 bits, 2 operations)
        >>> b.build().unitary()[:, 0].real.round(3).tolist()
        [0.707, 0.0, 0.0, 0.707]
        """
        if self.n_qubits > MAX_DENSE_QUBITS:
            raise CircuitError(
                "too many qubits for a full matrix", required=f"{MAX_DENSE_QUBITS} at most", found=str(self.n_qubits)
            )
        other = np.flatnonzero(~self.is_unitary & ~self.is_named(BARRIER.name) & ~self.is_named(DELAY.name))
        if len(other):
            name = self.table[self.op[other[0]]].name
            if self.is_symbolic[other[0]]:
                raise CircuitError(
                    f"'{name}' has a parameter that is not known yet", hint="`bind` values for the inputs first"
                )
            raise CircuitError(f"'{name}' is not unitary", required="a circuit of unitary gates")
        start: Array = np.eye(2**self.n_qubits, dtype=np.complex128) * np.exp(1j * self.phase)
        return apply_operations(self, np.flatnonzero(self.is_unitary).tolist(), range(self.n_qubits), start)

    def __repr__(self) -> str:
        """Return a short summary."""
        return f"Circuit({self.n_qubits} qubits, {self.n_bits} bits, {len(self)} operations)"


@dataclass(frozen=True, eq=False, slots=True)
class Piece:
    """Many operations of one kind, to be merged with others by `assemble`.

    Attributes
    ----------
    gate : Gate
    key : ndarray of int64, shape (k,)
        Place in the merged order; equal keys keep the order in which they are given.
    qubits : ndarray of int, shape (k, w)
    parameters : ndarray of float, shape (k, gate.n_parameters)
    link : ndarray of int, shape (k,), or None for -1 throughout
    """

    gate: Gate
    key: NDArray[np.int64]
    qubits: NDArray[Any]
    parameters: NDArray[np.float64] | None = None
    link: NDArray[Any] | None = None


def assemble(template: Circuit, n_qubits: int, pieces: Sequence[Piece]) -> tuple[Circuit, NDArray[np.int64]]:
    """Merge pieces by key into one circuit.

    Parameters
    ----------
    template : Circuit
        Gives bits, bit registers, explicit matrices and global phase.
    n_qubits : int
    pieces : sequence of Piece

    Returns
    -------
    circuit : Circuit
    order : ndarray of int64, shape (m,)
        Row k of the circuit is row ``order[k]`` of the pieces one after another.
    """
    sizes = [len(piece.key) for piece in pieces]
    total = sum(sizes)
    keys = np.concatenate([piece.key for piece in pieces]) if pieces else np.zeros(0, np.int64)
    order = np.argsort(keys, kind="stable")
    rank = np.empty(total, dtype=np.int64)
    rank[order] = np.arange(total)
    table: dict[Gate, int] = {}
    kinds = [table.setdefault(piece.gate, len(table)) for piece in pieces]
    op = np.repeat(np.array(kinds, np.int16), sizes)[order]
    offsets = _offsets(np.repeat([piece.qubits.shape[1] for piece in pieces], sizes)[order], total)
    parameter_offsets = _offsets(np.repeat([piece.gate.n_parameters for piece in pieces], sizes)[order], total)
    qubits = np.empty(offsets[-1], dtype=np.int32)
    parameters = np.empty(parameter_offsets[-1], dtype=np.float64)
    link = np.full(total, -1, dtype=np.int32)
    start = 0
    for piece, size in zip(pieces, sizes, strict=True):
        rows = rank[start : start + size]
        qubits[offsets[rows][:, None] + np.arange(piece.qubits.shape[1])] = piece.qubits
        if piece.parameters is not None:
            parameters[parameter_offsets[rows][:, None] + np.arange(piece.gate.n_parameters)] = piece.parameters
        if piece.link is not None:
            link[rows] = piece.link
        start += size
    merged = replace(
        template,
        n_qubits=n_qubits,
        table=tuple(table),
        op=op,
        qubits=qubits,
        offsets=offsets,
        parameters=parameters,
        parameter_offsets=parameter_offsets,
        link=link,
        qubit_registers=template.qubit_registers if n_qubits == template.n_qubits else (),
    )
    return merged, order


def _offsets(lengths: NDArray[Any], total: int) -> NDArray[np.int64]:
    offsets = np.zeros(total + 1, dtype=np.int64)
    np.cumsum(lengths, out=offsets[1:])
    return offsets


def apply_matrix(matrix: Array, qubits: Sequence[int], state: Array, n_qubits: int) -> Array:
    """Return `matrix` on `qubits` applied from the left to `state`, shape (2**n_qubits, columns)."""
    k = len(qubits)
    tensor = state.reshape(*(2,) * n_qubits, -1)
    gate = np.asarray(matrix).reshape((2,) * (2 * k))
    moved = np.tensordot(gate, tensor, axes=(range(k, 2 * k), qubits))
    return np.asarray(np.moveaxis(moved, range(k), qubits), order="C").reshape(state.shape)


def apply_operations(circuit: Circuit, rows: Sequence[int], places: Sequence[int], state: Array) -> Array:
    """Apply unitary operations in order to a stack of states.

    One-qubit gates wait for the next wider one on their qubit, so that the states are passed over less often.

    Parameters
    ----------
    circuit : Circuit
    rows : sequence of int
        The operations.
    places : sequence of int
        Which qubit of the states each qubit of the circuit is.
    state : ndarray, shape (2**n, columns)
    """
    n = len(state).bit_length() - 1
    waiting: dict[int, Array] = {}
    matrices: dict[int, Array] = {}
    for of_kind, stack in circuit.matrix_groups(rows):
        matrices.update(zip(of_kind.tolist(), stack, strict=True))
    for k in rows:
        qubits = [places[q] for q in circuit.qubits_of(k)]
        matrix = matrices[k]
        if len(qubits) == 1:
            before = waiting.get(qubits[0])
            waiting[qubits[0]] = matrix if before is None else matrix @ before
            continue
        local = np.eye(1, dtype=np.complex128)
        for q in qubits:
            local = kron(local, waiting.pop(q, np.eye(2)))
        state = apply_matrix(matrix @ local, qubits, state, n)
    for q, matrix in waiting.items():
        state = apply_matrix(matrix, [q], state, n)
    return state


def _gather(flat: NDArray[Any], offsets: NDArray[np.int64], rows: NDArray[np.int64]) -> tuple[Any, NDArray[np.int64]]:
    """Select ragged rows: the new flat array and its offsets."""
    lengths = np.diff(offsets)[rows]
    new_offsets = _offsets(lengths, len(rows))
    source = np.arange(new_offsets[-1]) + np.repeat(offsets[:-1][rows] - new_offsets[:-1], lengths)
    return flat[source], new_offsets


class Builder:
    """Append operations, then `build` the frozen circuit.

    Parameters
    ----------
    n_qubits : int
    n_bits : int
    gates : mapping of str to Gate, optional
        Known gates; the standard table by default.

    Examples
    --------
    >>> b = Builder(2, 1)
    >>> b.gate("h", 0).gate("rz", 1, parameters=[0.5]).measure(1, 0)
    Builder(2 qubits, 1 bits, 3 operations)
    >>> [op.name for op in b.build()]
    ['h', 'rz', 'measure']
    """

    def __init__(self, n_qubits: int, n_bits: int = 0, *, gates: Mapping[str, Gate] = GATES) -> None:
        if n_qubits < 1:
            raise CircuitError("a circuit has no qubits", required="at least 1", found=str(n_qubits))
        self.n_qubits = n_qubits
        self.n_bits = n_bits
        self.phase = 0.0
        self.qubit_registers: tuple[tuple[str, int], ...] = ()
        self.bit_registers: tuple[tuple[str, int], ...] = ()
        self._gates = gates
        self._table: dict[Gate, int] = {}
        self._op: list[int] = []
        self._qubits: list[int] = []
        self._offsets: list[int] = [0]
        self._parameters: list[float] = []
        self._parameter_offsets: list[int] = [0]
        self._link: list[int] = []
        self._matrices: list[Array] = []
        self._symbolic: dict[tuple[Parameter, ...], int] = {}
        self._inputs: dict[str, str] = {}

    def __repr__(self) -> str:
        """Return a short summary."""
        return f"Builder({self.n_qubits} qubits, {self.n_bits} bits, {len(self._op)} operations)"

    def __len__(self) -> int:
        """Return the number of operations so far."""
        return len(self._op)

    def input(self, name: str, kind: str = "float") -> Builder:
        """Declare a name that gets its value when the program runs; names that are not declared become floats.

        Parameters
        ----------
        name : str
        kind : str
            Its OpenQASM type: ``float``, ``angle``, ``int``, ``uint`` or ``bool``, with a width where wanted.
        """
        if not INPUT_TYPE.fullmatch(kind):
            raise CircuitError("unknown type of an input", required="float, angle, int, uint, bool", found=kind[:40])
        if not name.isidentifier() or not name.isascii() or self._inputs.get(name, kind) != kind:
            raise CircuitError(f"'{name[:40]}' cannot be the name of an input", required="a name not in use")
        self._inputs[name] = kind
        return self

    def gate(self, gate: str | Gate, *qubits: int, parameters: Sequence[Any] = ()) -> Builder:
        """Append a named gate.

        Parameters
        ----------
        gate : str or Gate
        *qubits : int
        parameters : sequence of float, Affine or SymPy expression
            Those that are not numbers stay unknown until `Circuit.bind`; a gate of the standard table may have them.

        Raises
        ------
        CircuitError
            Unknown gate, wrong number of qubits or parameters, repeated qubit, index out of range.
        """
        kind = find_gate(gate, self._gates) if isinstance(gate, str) else gate
        if len(parameters) != kind.n_parameters:
            raise CircuitError(
                f"wrong number of parameters for '{kind.name}'",
                required=str(kind.n_parameters),
                found=str(len(parameters)),
            )
        if not all(isinstance(value, float | int) for value in parameters):
            values = tuple(as_parameter(value) for value in parameters)
            if any(isinstance(value, Affine) for value in values):
                if kind.name not in GATES:
                    raise CircuitError(
                        f"the gate '{kind.name}' cannot have unknown parameters",
                        required="a gate of the standard table",
                    )
                for value in values:
                    for name in value.names if isinstance(value, Affine) else ():
                        self._inputs.setdefault(name, "float")
                blank = [np.nan] * len(values)
                return self._append(kind, qubits, blank, self._symbolic.setdefault(values, len(self._symbolic)))
            parameters = values
        return self._append(kind, qubits, parameters)

    def unitary(self, matrix: ArrayLike, *qubits: int, check: bool = True) -> Builder:
        """Append an explicit unitary; the first qubit given is the leftmost Kronecker factor."""
        u = checked_unitary(matrix)[0] if check else np.array(matrix, dtype=np.complex128)
        if u.shape != (2 ** len(qubits),) * 2:
            raise CircuitError(
                "the matrix does not fit the qubits",
                required=f"{2 ** len(qubits)} × {2 ** len(qubits)} for {len(qubits)} qubits",
                found=" × ".join(map(str, u.shape)),
            )
        self._matrices.append(u)
        return self._append(UNITARY, qubits, (), len(self._matrices) - 1)

    def measure(self, qubit: int, bit: int) -> Builder:
        """Append a measurement of `qubit` into classical `bit`."""
        if not 0 <= bit < self.n_bits:
            raise CircuitError("classical bit out of range", required=f"0 to {self.n_bits - 1}", found=str(bit))
        return self._append(MEASURE, (qubit,), (), bit)

    def reset(self, qubit: int) -> Builder:
        """Append a reset of `qubit` to |0⟩."""
        return self._append(RESET, (qubit,))

    def barrier(self, *qubits: int) -> Builder:
        """Append a barrier on `qubits`, or on all of them if none is given."""
        return self._append(BARRIER, qubits or tuple(range(self.n_qubits)))

    def delay(self, duration: float, *qubits: int) -> Builder:
        """Append a wait of `duration` nanoseconds on `qubits`, or on all of them if none is given."""
        if not 0 <= duration < np.inf:
            raise CircuitError("a delay is out of range", required="0 ns or more", found=str(duration))
        return self._append(DELAY, qubits or tuple(range(self.n_qubits)), (float(duration),))

    def _append(self, kind: Gate, qubits: Sequence[int], parameters: Sequence[float] = (), link: int = -1) -> Builder:
        if kind.n_qubits not in (ANY, len(qubits)):
            raise CircuitError(
                f"wrong number of qubits for '{kind.name}'", required=str(kind.n_qubits), found=str(len(qubits))
            )
        for q in qubits:
            if not 0 <= q < self.n_qubits:
                raise CircuitError("qubit index out of range", required=f"0 to {self.n_qubits - 1}", found=str(q))
        if len(qubits) > 1 and len(set(qubits)) != len(qubits):
            raise CircuitError(
                f"repeated qubit in '{kind.name}'", required="distinct qubits", found=", ".join(map(str, qubits))
            )
        self._op.append(self._table.setdefault(kind, len(self._table)))
        self._qubits.extend(qubits)
        self._offsets.append(len(self._qubits))
        self._parameters.extend(parameters)
        self._parameter_offsets.append(len(self._parameters))
        self._link.append(link)
        return self

    def build(self) -> Circuit:
        """Return the circuit built so far."""
        if len(self._table) > np.iinfo(np.int16).max:
            raise CircuitError("too many kinds of operation", required="at most 32767", found=str(len(self._table)))
        return Circuit(
            n_qubits=self.n_qubits,
            n_bits=self.n_bits,
            table=tuple(self._table),
            op=np.array(self._op, dtype=np.int16),
            qubits=np.array(self._qubits, dtype=np.int32),
            offsets=np.array(self._offsets, dtype=np.int64),
            parameters=np.array(self._parameters, dtype=np.float64),
            parameter_offsets=np.array(self._parameter_offsets, dtype=np.int64),
            link=np.array(self._link, dtype=np.int32),
            matrices=tuple(self._matrices),
            phase=self.phase,
            qubit_registers=self.qubit_registers,
            bit_registers=self.bit_registers,
            symbolic=tuple(self._symbolic),
            inputs=tuple(self._inputs.items()),
        )
