"""Compile unitaries and circuits to a device's native gates, count the cost, and prove the output equal to its input.

Everything public is listed in ``__all__`` and loaded when first used, so that importing the package is quick.

Conventions: qubit 0 is the leftmost factor of the Kronecker product; angles are radians; ``rz(t)`` is
``diag(e^{-it/2}, e^{it/2})``; time runs left to right in a circuit, right to left in a product of matrices.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

from gatewright._version import __version__

if TYPE_CHECKING:
    from gatewright.circuit import Builder, Circuit
    from gatewright.cost import Bound, Costs
    from gatewright.description import describe
    from gatewright.devices import Device, GateSet, read_device, read_gate_set
    from gatewright.errors import GatewrightError
    from gatewright.gates import Gate
    from gatewright.inputs import read
    from gatewright.parameters import Affine
    from gatewright.pipeline import CHAIN, check, compile, count
    from gatewright.program import Program
    from gatewright.proof import Proof, Verdict, check_program, read_program_proof, read_proof
    from gatewright.result import ProgramResult, Result

__all__ = [
    "CHAIN",
    "Affine",
    "Bound",
    "Builder",
    "Circuit",
    "Costs",
    "Device",
    "Gate",
    "GateSet",
    "GatewrightError",
    "Program",
    "ProgramResult",
    "Proof",
    "Result",
    "Verdict",
    "__version__",
    "check",
    "check_program",
    "compile",
    "count",
    "describe",
    "read",
    "read_device",
    "read_gate_set",
    "read_program_proof",
    "read_proof",
]

_HOMES = {
    "circuit": ("Builder", "Circuit"),
    "cost": ("Bound", "Costs"),
    "description": ("describe",),
    "devices": ("Device", "GateSet", "read_device", "read_gate_set"),
    "errors": ("GatewrightError",),
    "gates": ("Gate",),
    "inputs": ("read",),
    "parameters": ("Affine",),
    "pipeline": ("CHAIN", "check", "compile", "count"),
    "program": ("Program",),
    "proof": ("Proof", "Verdict", "check_program", "read_program_proof", "read_proof"),
    "result": ("ProgramResult", "Result"),
}
_HOME_OF = {name: module for module, names in _HOMES.items() for name in names}


def __getattr__(name: str) -> Any:
    """Load a public name from its module when it is first asked for."""
    if name in _HOME_OF:
        module = importlib.import_module(f"gatewright.{_HOME_OF[name]}")
        value = getattr(module, name)
        globals()[name] = value
        return value
    raise AttributeError(f"module 'gatewright' has no attribute '{name}'")


def __dir__() -> list[str]:
    """Return the public names."""
    return sorted(__all__)
