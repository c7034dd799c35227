"""Exact forms of the gates with parameters: fixed gates, and rotations of one qubit whose angles are affine.

Euler forms: Nielsen and Chuang, theorem 4.1. Controlled gates with two CNOTs: Barenco et al., PRA 52, 3457 (1995),
lemmas 5.2 and 5.4. A controlled Pauli conjugates a rotation of one qubit into one of two (Vatan and Williams, PRA 69,
032315 (2004)). Phases under many controls, in Gray-code order: Welch, Greenbaum, Mostame, Aspuru-Guzik, New J. Phys.
16, 033040 (2014). Angles may be numbers or `gatewright.parameters.Affine`: only sums and multiples are taken.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import pi

from gatewright.parameters import Parameter

__all__ = ["PARAMETRISED", "Term", "controlled", "controlled_phase", "inverse_parameters", "rotations"]

#: Gate name, its qubits (numbered within the gate that is rewritten), its parameters.
Term = tuple[str, tuple[int, ...], tuple[Parameter, ...]]

_PHASES = ("p", "phase", "u1")
#: Gates that are another one under a control.
_UNDER = {"cp": "p", "cphase": "p", "cu1": "p", "crx": "rx", "cry": "ry", "crz": "rz", "cu3": "u"}
#: A controlled Pauli, and the rotation that it turns into one of both qubits: on the qubit of that number.
_CONJUGATED = {"rzz": ("cx", "rz", 1), "rxx": ("cx", "rx", 0), "ryy": ("cy", "ry", 0), "rzx": ("cz", "rx", 1)}

#: Gates with a form on file.
PARAMETRISED = frozenset(
    (*_PHASES, *_UNDER, *_CONJUGATED, "rx", "ry", "rz", "r", "u2", "u3", "u", "U", "cu"),
)


def rotations(name: str, values: Sequence[Parameter]) -> list[Term] | None:
    """Return a gate as fixed gates of the standard table and ``rx``, ``ry``, ``rz``, exact up to a global phase.

    Parameters
    ----------
    name : str
    values : sequence of float or Affine

    Returns
    -------
    list of Term, or None
        None if there is no form on file.

    Examples
    --------
    >>> [name for name, _, _ in rotations("crz", (0.4,))]
    ['rz', 'cx', 'rz', 'cx']
    """
    v = tuple(values)
    if name in ("rx", "ry", "rz"):
        return [(name, (0,), v)]
    if name in _PHASES:
        return [("rz", (0,), v)]
    if name == "r":
        return [("rz", (0,), (-v[1],)), ("rx", (0,), v[:1]), ("rz", (0,), v[1:])]
    if name == "u2":
        return rotations("u3", (pi / 2, *v))
    if name in ("u3", "u", "U"):
        return [("rz", (0,), v[2:]), ("ry", (0,), v[:1]), ("rz", (0,), v[1:2])]
    if name in ("cp", "cphase", "cu1"):
        half = v[0] * 0.5
        return [("rz", (0,), (half,)), ("rz", (1,), (half,)), _CX, ("rz", (1,), (-half,)), _CX]
    if name in ("crx", "cry", "crz"):
        half, turn = v[0] * 0.5, ("cz", (0, 1), ()) if name == "crx" else _CX
        return [(name[1:], (1,), (half,)), turn, (name[1:], (1,), (-half,)), turn]
    if name in ("cu3", "cu"):
        theta, phi, lam = v[0] * 0.5, v[1], v[2]
        total, difference = (lam + phi) * 0.5, (lam - phi) * 0.5
        front = total + v[3] if name == "cu" else total
        return [
            ("rz", (0,), (front,)),
            ("rz", (1,), (difference,)),
            _CX,
            ("rz", (1,), (-total,)),
            ("ry", (1,), (-theta,)),
            _CX,
            ("ry", (1,), (theta,)),
            ("rz", (1,), (phi,)),
        ]
    if name in _CONJUGATED:
        around, inner, wire = _CONJUGATED[name]
        return [(around, (0, 1), ()), (inner, (wire,), v), (around, (0, 1), ())]
    return None


_CX: Term = ("cx", (0, 1), ())


def controlled_phase(angle: Parameter, wires: Sequence[int]) -> list[Term]:
    """Return gates that multiply the all-ones state of some qubits by e^{i angle}, phase included.

    Examples
    --------
    >>> controlled_phase(0.5, (3,)), [name for name, _, _ in controlled_phase(0.5, (0, 1, 2))].count("cx")
    ([('p', (3,), (0.5,))], 6)
    """
    n = len(wires)
    if n == 1:
        return [("p", (wires[0],), (angle,))]
    if n == 2:
        return [("cp", tuple(wires), (angle,))]
    unit = angle * 0.5 ** (n - 1)
    terms: list[Term] = [("p", (wires[0],), (unit,))]
    for target in range(1, n):
        terms.append(("p", (wires[target],), (unit,)))
        parity = 0
        for step in range(1, 2**target):
            # The bit in which Gray code number `step` differs from the one before.
            control = target - 1 - ((step & -step).bit_length() - 1)
            parity ^= 1 << control
            terms.append(("cx", (wires[control], wires[target]), ()))
            terms.append(("p", (wires[target],), (-unit if parity.bit_count() % 2 else unit,)))
        terms.append(("cx", (wires[0], wires[target]), ()))
    return terms


def controlled(
    name: str, values: Sequence[Parameter], controls: tuple[int, ...], wires: tuple[int, ...]
) -> list[Term] | None:
    """Return a gate under controls, exact with its phase, in gates of the standard table.

    Parameters
    ----------
    name : str
    values : sequence of float or Affine
    controls, wires : tuple of int
        Qubits on which the controls are, and those of the gate itself.

    Returns
    -------
    list of Term, or None
        None if there is no form on file.

    Examples
    --------
    >>> controlled("rz", (0.5,), (0,), (1,))
    [('crz', (0, 1), (0.5,))]
    """
    v = tuple(values)
    if not controls:
        return [(name, wires, v)]
    single = len(controls) == 1

    def inner(kind: str, *angles: Parameter, on: tuple[int, ...] = wires, more: tuple[int, ...] = ()) -> list[Term]:
        return controlled(kind, angles, (*controls, *more), on) or []

    if name in _PHASES:
        return controlled_phase(v[0], (*controls, *wires))
    if single and name in ("rx", "ry", "rz"):
        return [(f"c{name}", (*controls, *wires), v)]
    if name == "rz":
        return [*controlled_phase(v[0], (*controls, *wires)), *controlled_phase(v[0] * -0.5, controls)]
    if name == "rx":
        return [("h", wires, ()), *inner("rz", *v), ("h", wires, ())]
    if name == "ry":
        return [("rx", wires, (pi / 2,)), *inner("rz", *v), ("rx", wires, (-pi / 2,))]
    if name == "r":
        return [("rz", wires, (-v[1],)), *inner("rx", v[0]), ("rz", wires, (v[1],))]
    if name == "u2":
        return inner("u3", pi / 2, *v)
    if name == "u3":
        return [*inner("rz", v[2]), *inner("ry", v[0]), *inner("rz", v[1])]
    if name in ("u", "U"):
        phase = v[0] * 0.5 if name == "U" else 0.0
        if single:
            return [("cu", (*controls, *wires), (*v, phase))]
        terms = [*inner("p", v[2]), *inner("ry", v[0]), *inner("p", v[1])]
        return [*terms, *controlled_phase(phase, controls)] if name == "U" else terms
    if name in _UNDER:
        return inner(_UNDER[name], *v, on=wires[1:], more=wires[:1])
    if name == "cu":
        return [*inner("u", *v[:3], on=wires[1:], more=wires[:1]), *controlled_phase(v[3], (*controls, wires[0]))]
    if name in _CONJUGATED:
        around, kind, wire = _CONJUGATED[name]
        return [(around, wires, ()), *inner(kind, *v, on=(wires[wire],)), (around, wires, ())]
    return None


def inverse_parameters(name: str, values: Sequence[Parameter]) -> tuple[str, tuple[Parameter, ...]] | None:
    """Return the gate and the parameters that undo a gate, exact with its phase; None if it is not on file.

    Examples
    --------
    >>> inverse_parameters("u", (0.1, 0.2, 0.3))
    ('u', (-0.1, -0.3, -0.2))
    """
    if name not in PARAMETRISED:
        return None
    v = [-value for value in values]
    if name == "u2":
        # u2(φ, λ) is u3(π/2, φ, λ).
        return "u3", (-pi / 2, v[1], v[0])
    if name == "r":
        return name, (v[0], values[1])
    if name in ("u3", "u", "U", "cu3", "cu"):
        return name, (v[0], v[2], v[1], *v[3:])
    return name, tuple(v)
