"""Write a fixed native gate as an OpenQASM gate definition, from its matrix alone."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gatewright.errors import UnsupportedError
from gatewright.gates import Gate
from gatewright.synthesis.controlled_not import synthesise
from gatewright.synthesis.euler import euler_angles

__all__ = ["definition_of"]


def definition_of(gate: Gate) -> str:
    """Return a definition by ``U`` and ``cx``, exact within rounding and up to global phase.

    Parameters
    ----------
    gate : Gate
        On one or two qubits, without parameters.

    Raises
    ------
    UnsupportedError
        If the gate has parameters.

    Examples
    --------
    >>> from gatewright.gates import GATES
    >>> definition_of(GATES["h"])
    'gate h a { U(1.5707963267948966, 0.0, 3.141592653589793) a; }'
    """
    if gate.n_parameters:
        raise UnsupportedError(
            f"no OpenQASM definition is known for the gate '{gate.name}'",
            hint="add a `definition` to it in the gate set file",
        )
    matrix = gate.matrix()
    if gate.n_qubits == 1:
        return f"gate {gate.name} a {{ {_rotation(matrix, 'a')} }}"
    circuit = synthesise(matrix)
    statements = []
    for layer in range(int(circuit.uses) + 1):
        statements += ["cx a, b;"] if layer else []
        statements += [_rotation(circuit.layers[layer, qubit], name) for qubit, name in enumerate("ab")]
    return f"gate {gate.name} a, b {{ {' '.join(statements)} }}"


def _rotation(matrix: NDArray[np.complex128], qubit: str) -> str:
    last, middle, first = (float(angle) for angle in euler_angles(matrix, outer="z", inner="y").angles)
    return f"U({middle!r}, {last!r}, {first!r}) {qubit};"
