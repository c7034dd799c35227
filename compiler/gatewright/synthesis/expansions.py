"""Exact expansions of named gates on three and more qubits into one- and two-qubit gates.

A multiply controlled phase on n qubits is diagonal: its phase is a sum over the parities of all subsets of the
qubits, visited in Gray-code order with 2ⁿ − 2 CNOTs (Welch, Greenbaum, Mostame, Aspuru-Guzik, New J. Phys. 16,
033040 (2014)); six for the Toffoli gate, which is the least (Shende and Markov, QIC 9, 461 (2009)). The
relative-phase Toffolis are written as OpenQASM 2's ``qelib1.inc`` defines them.
"""

from __future__ import annotations

from math import pi

__all__ = ["Term", "expansion"]

#: Gate name, its qubits (numbered within the expanded gate), its parameters.
Term = tuple[str, tuple[int, ...], tuple[float, ...]]


def controlled_phase(angle: float, n: int) -> list[Term]:
    """Return the gates that multiply the all-ones state of `n` qubits by e^{i angle} (exact, phase included).

    Examples
    --------
    >>> sum(name == "cx" for name, _, _ in controlled_phase(pi, 3))
    6
    """
    unit = angle / 2 ** (n - 1)
    terms: list[Term] = [("p", (0,), (unit,))]
    for target in range(1, n):
        terms.append(("p", (target,), (unit,)))
        parity = 0
        for step in range(1, 2**target):
            # The bit in which Gray code number `step` differs from the one before; the last step closes the circle.
            control = target - 1 - ((step & -step).bit_length() - 1)
            parity ^= 1 << control
            terms.append(("cx", (control, target), ()))
            sign = -1 if parity.bit_count() % 2 else 1
            terms.append(("p", (target,), (sign * unit,)))
        terms.append(("cx", (0, target), ()))
    return terms


def _conjugated(terms: list[Term], target: int) -> list[Term]:
    return [("h", (target,), ()), *terms, ("h", (target,), ())]


def _fredkin() -> list[Term]:
    return [("cx", (2, 1), ()), *_conjugated(controlled_phase(pi, 3), 2), ("cx", (2, 1), ())]


def _rccx() -> list[Term]:
    t: Term = ("t", (2,), ())
    tdg: Term = ("tdg", (2,), ())
    return _conjugated([t, ("cx", (1, 2), ()), tdg, ("cx", (0, 2), ()), t, ("cx", (1, 2), ()), tdg], 2)


def _rc3x() -> list[Term]:
    t: Term = ("t", (3,), ())
    tdg: Term = ("tdg", (3,), ())
    ends = _conjugated([t, ("cx", (2, 3), ()), tdg], 3)
    middle: list[Term] = [("cx", (0, 3), ()), t, ("cx", (1, 3), ()), tdg]
    return [*ends, *middle, *middle, *ends]


_EXPANSIONS: dict[str, list[Term]] = {
    "ccx": _conjugated(controlled_phase(pi, 3), 2),
    "ccz": controlled_phase(pi, 3),
    "cswap": _fredkin(),
    "rccx": _rccx(),
    "rc3x": _rc3x(),
    "c3x": _conjugated(controlled_phase(pi, 4), 3),
    "c3sqrtx": _conjugated(controlled_phase(pi / 2, 4), 3),
    "c4x": _conjugated(controlled_phase(pi, 5), 4),
}


def expansion(name: str) -> list[Term] | None:
    """Return the expansion of the gate called `name`, or None if there is none on file."""
    return _EXPANSIONS.get(name)
