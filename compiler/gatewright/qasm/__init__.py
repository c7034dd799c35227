"""OpenQASM 2 and 3: straight-line programs into circuits, and circuits into programs."""

from gatewright.qasm.maps import QubitMap, map_lines, read_map
from gatewright.qasm.reader import read
from gatewright.qasm.source import read_text
from gatewright.qasm.writer import write

__all__ = ["QubitMap", "map_lines", "read", "read_map", "read_text", "write"]
