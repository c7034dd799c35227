"""Drive the compiled scanner of plain statements through a large program: its names, its columns, and when it pays."""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from gatewright.expressions import CONSTANTS

if TYPE_CHECKING:
    from gatewright.qasm.reader import Reader

__all__ = ["LARGE", "Columns", "Scanner", "pays"]

#: Characters from which the scanner pays: with numba still to be imported, and without.
LARGE = 4_000_000
_LOADED = 200_000

#: Statements, qubits and parameters of one block.
_BLOCK = (2**16, 2**17, 2**17)

#: A run shorter than this does not pay; so many statements at most are then left to the others before the next try.
_SHORT = 4
_PATIENCE = 256


class Columns(NamedTuple):
    """What the scanner read: kinds, qubits and parameters, one operation a statement."""

    op: NDArray[np.int32]
    qubits: NDArray[np.int32]
    parameters: NDArray[np.float64]


#: Statements longer than this on average are no calls of gates.
_LONGEST_MEAN = 400


def pays(text: str) -> bool:
    """Return whether a text is large enough for the scanner, and made of statements as short as those it reads."""
    large = len(text) >= (_LOADED if "numba" in sys.modules else LARGE)
    return large and text.count(";") * _LONGEST_MEAN > len(text)


class Scanner:
    """Reads calls of known gates on single qubits, and stops in front of anything else.

    Parameters
    ----------
    reader : Reader
        Whose names it knows. It reads only calls of gates that the reader has read before, so that whatever may be
        wrong with a gate has been said.
    """

    def __init__(self, reader: Reader) -> None:
        from gatewright.qasm import _kernels

        self._kernels: Any = _kernels
        self.reader = reader
        # One byte a character, so that offsets agree; what does not fit one, no statement of the scanner holds.
        self.text = np.frombuffer(bytearray(reader.source.text.encode("latin-1", "replace") + b";;;;"), np.uint8)
        self.stop = reader.source.text.rfind(";") + 1
        self.full: list[Columns] = []
        self.count = 0  # of statements read
        self.wait = self._patience = 0
        self._runs: list[tuple[int, int]] = []  # how many other statements come before, and its length
        self._known: tuple[int, ...] = ()
        self._names: tuple[Any, ...] = ()
        self._tens = 10.0 ** np.arange(23)
        self._work = np.empty(128), np.empty(128, dtype=np.int64)
        self._state = np.zeros(4, dtype=np.int64)
        self._block = self._new_block()

    @staticmethod
    def _new_block() -> tuple[NDArray[np.int32], NDArray[np.int32], NDArray[np.float64]]:
        return np.empty(_BLOCK[0], np.int32), np.empty(_BLOCK[1], np.int32), np.empty(_BLOCK[2])

    def advance(self, order: list[int]) -> None:
        """Read statements from the reader's position on; the reader goes on with the first one left to others."""
        if self.wait:
            self.wait -= 1
            return
        reader = self.reader
        scope, others = reader.scope, reader.full.globals if reader.full is not None else {}
        known = len(reader.kinds), len(scope.declared), len(scope.constants), len(others), scope.n_physical
        if known != self._known:
            self._known, self._names = known, self._table(others)
        before = self.count
        self._state[0] = reader.position
        while True:
            had = int(self._state[1])
            full = self._kernels.scan(self.text, self.stop, *self._names, *self._block, *self._work, self._state)
            self.count += int(self._state[1]) - had
            if not full:
                break
            self._flush()
        if self.count > before:
            self._runs.append((len(order), self.count - before))
            reader.position = int(self._state[0])
            reader.pieces = reader.source.pieces(reader.position)
        self._patience = 0 if self.count - before >= _SHORT else min(2 * self._patience + 1, _PATIENCE)
        self.wait = self._patience

    def order(self, others: list[int]) -> NDArray[np.int64]:
        """Return the numbers of all statements: those of the reader with the runs of the scanner among them.

        Statement k of the scanner has the number of the reader's distinct statements plus k.
        """
        places, lengths = np.array(self._runs, dtype=np.int64).T
        own = np.arange(self.count) + len(self.reader.first) - 1
        return np.insert(np.array(others, dtype=np.int64), np.repeat(places, lengths), own)

    def _flush(self) -> None:
        _, n, q, p = self._state.tolist()
        op, qubits, parameters = self._block
        self.full.append(Columns(op[:n].copy(), qubits[:q].copy(), parameters[:p].copy()))
        self._state[1:] = 0

    def columns(self) -> Columns:
        """Return all that was read."""
        self._flush()
        return Columns(*(np.concatenate(parts) for parts in zip(*self.full, strict=True)))

    def _table(self, others: Any) -> tuple[Any, ...]:
        """Return the names: bytes, hash table, what they stand for, and the values of constants."""
        kernels, scope = self._kernels, self.reader.scope
        rows: dict[str, tuple[int, int, int, int]] = {}
        values: list[float] = []
        for name, value in {**CONSTANTS, **scope.constants}.items():
            rows[name] = (kernels.CONSTANT, len(values), 0, 0)
            values.append(value)
        for name, span in scope.qubit_registers.items():
            rows[name] = (kernels.QUBITS, span.start, len(span), int(name in scope.scalars))
        for name in scope.bit_registers:
            rows.pop(name, None)
        for name, kind in self.reader.kinds.items():
            rows[name] = (kernels.GATE, *kind)
        rows = {name: row for name, row in rows.items() if name.isascii() and name not in others}
        pool = "".join(rows).encode("ascii") or b" "
        slots = np.full(1 << (4 * len(rows) + 4).bit_length(), -1, dtype=np.int32)
        entries = np.zeros((len(rows), 6), dtype=np.int64)
        start = 0
        for number, (name, row) in enumerate(rows.items()):
            entries[number] = (start, len(name), *row)
            start += len(name)
            at = 0
            for byte in name.encode("ascii"):
                at = (at * kernels.MULTIPLIER + byte) & 0xFFFFFFFF
            at %= len(slots)
            while slots[at] >= 0:
                at = (at + 1) % len(slots)
            slots[at] = number
        return np.frombuffer(bytearray(pool), np.uint8), slots, entries, np.array(values), self._tens, scope.n_physical
