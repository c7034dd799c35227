"""OpenQASM 2 and 3: straight-line programs into circuits, and circuits into programs."""

from gatewright.qasm.reader import read, read_file
from gatewright.qasm.source import read_text

__all__ = ["read", "read_file", "read_text"]
