"""Time how long damaged programs, and programs of a megabyte made to take long, take to be refused or read.

python tests/bench/damaged.py [small programs]

Processor time and the most memory; the floor is one split of the same text at its semicolons and blanks.
"""

from __future__ import annotations

import resource
import sys
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from gatewright.errors import GatewrightError  # noqa: E402
from gatewright.qasm import read  # noqa: E402
from qasm_corpus import LARGE, damaged  # noqa: E402


def timed(text: str) -> tuple[float, str]:
    """Return the time that a text takes, and what becomes of it."""
    begun = time.process_time()
    try:
        what = f"read: {len(read(text))} operations"
    except GatewrightError as problem:
        what = str(problem)
    return time.process_time() - begun, what


def main() -> None:
    """Print the slowest of the small programs, and a line for each large one."""
    timed("OPENQASM 3.0; qubit q; if (true) { U(1, pow(2, 1), 3) q; }")  # loads the parser
    number = int(float(sys.argv[1])) if len(sys.argv) > 1 else 1000
    slowest = max((timed(damaged(seed)) for seed in range(number)), key=lambda pair: pair[0])
    print(f"slowest of {number} small ones: {slowest[0]:.2f} s  {slowest[1][:80]}")
    rows = []
    for name, make in LARGE.items():
        text = make()
        begun = time.process_time()
        text.replace("\n", " ").replace(";", " ").split()
        floor = time.process_time() - begun
        rows.append((*timed(text), name, len(text), floor))
    for seconds, what, name, size, floor in sorted(rows, reverse=True):
        print(f"{seconds:7.2f} s {seconds / max(floor, 1e-4):9.0f} x {size / 1e6:5.1f} MB  {name:24} {what[:90]}")
    print(f"most memory: {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20:.2f} GiB")


if __name__ == "__main__":
    main()
