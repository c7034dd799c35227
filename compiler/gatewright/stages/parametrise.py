"""Write gates with unknown parameters as fixed gates and native rotations of one qubit, exactly.

A native rotation whose angle is not known yet stays as it is through all later stages: a window of its own that
nothing crosses. Which gates of the standard table a set has decides how the rotations are played.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit, Piece, assemble
from gatewright.errors import UnsupportedError
from gatewright.gates import GATES
from gatewright.parameters import Affine, Parameter, within
from gatewright.rotations import PARAMETRISED, Term, rotations
from gatewright.stages.draft import Draft
from gatewright.stages.expand import each_alone

if TYPE_CHECKING:
    from gatewright.devices import GateSet, NativeGate

__all__ = ["FULL_TURN", "NativeTurn", "native_turns", "parametrise"]

#: Length of the range of a parameter that may take any value: a full turn changes the phase alone.
FULL_TURN = 2 * math.pi - 1e-9

#: Parameters, with None for the angle, at which a gate of the standard table is a rotation about an axis.
_TURNS: dict[str, dict[str, tuple[tuple[float | None, ...], ...]]] = {
    "z": {
        "rz": ((None,),),
        "p": ((None,),),
        "phase": ((None,),),
        "u1": ((None,),),
        **{name: ((0.0, None, 0.0), (0.0, 0.0, None)) for name in ("u", "u3", "U")},
    },
    "x": {
        "rx": ((None,),),
        "r": ((None, 0.0),),
        **{name: ((None, -math.pi / 2, math.pi / 2),) for name in ("u", "u3", "U")},
    },
    "y": {
        "ry": ((None,),),
        "r": ((None, math.pi / 2),),
        **{name: ((None, 0.0, 0.0),) for name in ("u", "u3", "U")},
    },
}

#: Fixed gates before and after a rotation about the second axis that make it one about the first.
_CONJUGATION: dict[tuple[str, str], tuple[str, str]] = {
    ("x", "z"): ("h", "h"),
    ("y", "z"): ("sx", "sxdg"),
    ("z", "x"): ("h", "h"),
    ("y", "x"): ("sdg", "s"),
    ("z", "y"): ("sxdg", "sx"),
    ("x", "y"): ("s", "sdg"),
}

#: Gates that are the same up to a global phase, whatever their parameters.
_ALIKE = (("u", "u3", "U"), ("p", "phase", "u1", "rz"))


@dataclass(frozen=True, slots=True)
class NativeTurn:
    """A native gate used as a rotation about an axis.

    Attributes
    ----------
    name : str
    parameters : tuple of float or None
        None at the place of the angle.
    before, after : str
        Fixed gates around it; empty if there are none.
    """

    name: str
    parameters: tuple[float | None, ...]
    before: str = ""
    after: str = ""

    def at(self, angle: Parameter, wire: int) -> list[Term]:
        """Return the gates that rotate a qubit by an angle."""
        values = tuple(angle if value is None else value for value in self.parameters)
        terms: list[Term] = [(self.name, (wire,), values)]
        if self.before:
            terms = [(self.before, (wire,), ()), *terms, (self.after, (wire,), ())]
        return terms


def native_turns(gate_set: GateSet) -> dict[str, NativeTurn]:
    """Choose the native rotation to use about each axis.

    Raises
    ------
    UnsupportedError
        The set has no gate of the standard table that rotates one qubit by any angle.
    """
    found: dict[str, tuple[tuple[int, int], NativeTurn]] = {}
    for axis, kinds in _TURNS.items():
        for native in gate_set.one_qubit:
            for parameters in kinds.get(native.gate.name, ()):
                if not _legal(native, [Affine.of("x") if value is None else value for value in parameters]):
                    continue
                # A frame change first, then what has the fewest parameters.
                rank = (0 if native.virtual else 1, len(parameters))
                if axis not in found or rank < found[axis][0]:
                    found[axis] = rank, NativeTurn(native.gate.name, parameters)
    if not found:
        raise UnsupportedError(
            f"gate set '{gate_set.name}' cannot turn a qubit by an angle that is not known yet",
            required="one of rz, p, phase, u1, rx, ry, r, u, u3, U, with a full turn as the range of its angle",
            hint="give the inputs their values before compiling",
        )
    turns = {axis: turn for axis, (_, turn) in found.items()}
    for axis in _TURNS:
        if axis not in turns:
            other = min(found, key=lambda name: found[name][0])
            before, after = _CONJUGATION[axis, other]
            turns[axis] = replace(found[other][1], before=before, after=after)
    return turns


def _legal(native: NativeGate, values: Sequence[Parameter]) -> bool:
    """Whether a native gate may have these parameters, numbers brought into their range by full turns."""
    for value, (low, high) in zip(values, native.ranges, strict=True):
        if isinstance(value, Affine):
            if not high - low >= FULL_TURN:
                return False
        elif not low <= within(value, low, high) <= high:
            return False
    return True


def parametrise(draft: Draft) -> Draft:
    """Rewrite every gate with unknown parameters; each is one window of the proof.

    Raises
    ------
    UnsupportedError
        The gate set has no rotation by an unknown angle, or no form of a gate is known.
    """
    circuit = draft.circuit
    unknown = circuit.is_symbolic
    if not unknown.any():
        return draft
    gate_set = draft.device.gate_set
    writer = _Writer(gate_set, native_turns(gate_set))
    rows = np.flatnonzero(unknown)
    others = np.flatnonzero(~unknown)
    room = 1 << 20
    pieces: list[Piece] = []
    origins: list[NDArray[np.int64]] = []
    for chosen, piece in circuit.pieces(others, others * room):
        pieces.append(piece)
        origins.append(others[chosen])
    for row in rows.tolist():
        writer.write(circuit, row, row * room)
    for piece in writer.pieces():
        pieces.append(piece)
        origins.append(piece.key // room)
    template = replace(circuit, symbolic=tuple(writer.symbolic))
    made, order = assemble(template, circuit.n_qubits, pieces)
    step = each_alone(circuit, made, np.concatenate(origins)[order])
    return replace(draft, circuit=made, expanded=made, steps=(*draft.steps, step))


class _Writer:
    """Collects the gates that come of the symbolic ones, in columns of each kind."""

    def __init__(self, gate_set: GateSet, turns: dict[str, NativeTurn]) -> None:
        self.natives = gate_set.gates
        self.turns = turns
        self.symbolic: dict[tuple[Parameter, ...], int] = {}
        self.known: dict[tuple[str, tuple[Parameter, ...]], list[Term]] = {}
        self.columns: dict[str, tuple[list[int], list[tuple[int, ...]], list[tuple[float, ...]], list[int]]] = {}

    def write(self, circuit: Circuit, row: int, key: int) -> None:
        """Append what one operation becomes."""
        name = circuit.table[circuit.op[row]].name
        values = circuit.symbolic[circuit.link[row]]
        terms = self.known.get((name, values))
        if terms is None:
            terms = self.known[name, values] = self.terms(name, values)
        qubits = circuit.qubits_of(row)
        for number, (kind, wires, parameters) in enumerate(terms):
            link, numbers = -1, parameters
            if any(isinstance(value, Affine) for value in parameters):
                link = self.symbolic.setdefault(parameters, len(self.symbolic))
                numbers = (math.nan,) * len(parameters)
            keys, places, columns, links = self.columns.setdefault(kind, ([], [], [], []))
            keys.append(key + number)
            places.append(tuple(qubits[wire] for wire in wires))
            columns.append(tuple(float(value) for value in numbers if not isinstance(value, Affine)))
            links.append(link)

    def terms(self, name: str, values: tuple[Parameter, ...]) -> list[Term]:
        """Return what a gate becomes."""
        if (kept := self.kept(name, values)) is not None:
            return [kept]
        forms = rotations(name, values) if name in PARAMETRISED else None
        if forms is None:
            raise UnsupportedError(
                f"no form of the gate '{name}' with unknown parameters is known",
                required="a gate of the standard table",
            )
        terms: list[Term] = []
        for kind, wires, parameters in forms:
            if not parameters or not isinstance(parameters[0], Affine):
                terms.append((kind, wires, parameters))
            elif parameters[0].terms:
                terms += self.turns[kind[1]].at(parameters[0], wires[0])
            else:
                terms.append((kind, wires, (parameters[0].constant,)))
        return terms

    def kept(self, name: str, values: tuple[Parameter, ...]) -> Term | None:
        """Return a gate of one qubit as it is, if the device has it or one equal to it up to phase."""
        if GATES[name].n_qubits != 1:
            return None
        for other in (name, *(kind for alike in _ALIKE if name in alike for kind in alike)):
            native = self.natives.get(other)
            if native is not None and _legal(native, values):
                numbers = [
                    value if isinstance(value, Affine) else within(value, *limits)
                    for value, limits in zip(values, native.ranges, strict=True)
                ]
                return other, (0,), tuple(numbers)
        return None

    def pieces(self) -> Iterator[Piece]:
        """Return everything that was written."""
        for kind, (keys, places, columns, links) in self.columns.items():
            gate = GATES[kind]
            yield Piece(
                gate,
                np.array(keys, dtype=np.int64),
                np.array(places, dtype=np.int32),
                np.array(columns, dtype=np.float64).reshape(len(keys), gate.n_parameters),
                np.array(links, dtype=np.int32),
            )
