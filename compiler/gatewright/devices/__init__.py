"""Native gate sets, coupling graphs and devices, all of them data."""

from gatewright.devices.coupling import Coupling, all_to_all, grid, hexagons, line, ring
from gatewright.devices.device import Device, read_any, read_device
from gatewright.devices.gateset import GateSet, NativeGate, check_definitions, read_gate_set, shipped_gate_sets
from gatewright.devices.reach import Reach

__all__ = [
    "Coupling",
    "Device",
    "GateSet",
    "NativeGate",
    "Reach",
    "all_to_all",
    "check_definitions",
    "grid",
    "hexagons",
    "line",
    "read_any",
    "read_device",
    "read_gate_set",
    "ring",
    "shipped_gate_sets",
]
