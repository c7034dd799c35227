"""Time the whole chain on a long random circuit, and the start-up of the command line.

Prints seconds a stage, operations a second, and the ratio of everything to a floor measured in the same run: one pass
of NumPy over the circuit's own matrices (each two-qubit gate's 4 × 4 matrix multiplied once).

    python tests/bench/pipeline.py [--gates 100000] [--rows 4] [--columns 5]
"""

from __future__ import annotations

import argparse
import subprocess
import sys
import time

import numpy as np

import gatewright as gw
from gatewright.circuit import Circuit, Piece, assemble
from gatewright.devices import coupling
from gatewright.gates import GATES
from gatewright.linalg import haar_unitary


def random_circuit(n: int, gates: int, seed: int = 0) -> Circuit:
    """Return `gates` CX on random pairs with twice as many random u3 among them."""
    rng = np.random.default_rng(seed)
    first = rng.integers(n, size=gates)
    second = (first + rng.integers(1, n, size=gates)) % n
    keys = rng.permutation(3 * gates)
    cx = Piece(GATES["cx"], np.sort(keys[:gates]), np.stack([first, second], axis=1))
    angles = rng.uniform(-np.pi, np.pi, size=(2 * gates, 3))
    u3 = Piece(GATES["u3"], np.sort(keys[gates:]), rng.integers(n, size=(2 * gates, 1)), angles)
    return assemble(gw.Builder(n).build(), n, [cx, u3])[0]


def whole_process(*arguments: str) -> float:
    """Return the seconds of the second of two runs."""
    for _ in range(2):
        begun = time.perf_counter()
        subprocess.run([sys.executable, *arguments], check=True, stdout=subprocess.DEVNULL)
        seconds = time.perf_counter() - begun
    return seconds


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--gates", type=int, default=100_000)
    parser.add_argument("--rows", type=int, default=4)
    parser.add_argument("--columns", type=int, default=5)
    parser.add_argument("--effort", default="standard")
    options = parser.parse_args()
    device = gw.Device.from_graph(coupling.grid(options.rows, options.columns), "cz-virtual-z", name="grid")
    gw.compile(random_circuit(device.n_qubits, 100), device)
    circuit = random_circuit(device.n_qubits, options.gates)
    matrices = haar_unitary(4, options.gates, rng=1)
    begun = time.perf_counter()
    matrices @ matrices
    floor = time.perf_counter() - begun
    begun = time.perf_counter()
    result = gw.compile(circuit, device, effort=options.effort)
    seconds = time.perf_counter() - begun
    print(f"{len(circuit)} operations on {device.n_qubits} qubits: {seconds:.2f} s, {seconds / floor:.0f} × the floor")
    for stage, value in result.seconds.items():
        print(f"  {stage:<12} {value:8.3f} s  {value / floor:8.1f} × the floor")
    costs = result.costs
    print(f"  {costs.two_qubit_gates} two-qubit gates, at least {result.lower_bound.two_qubit_gates}")
    print(f"  {costs.swaps_inserted} swaps, two-qubit depth {costs.two_qubit_depth}")
    print(f"  error bound {result.verdict.error_bound:.2e} over {result.verdict.windows} windows")
    python = whole_process("-c", "pass")
    for name, arguments in (
        ("gatewright --help", ("-m", "gatewright", "--help")),
        ("import gatewright", ("-c", "import gatewright")),
        ("import numpy", ("-c", "import numpy")),
    ):
        value = whole_process(*arguments)
        print(f"{name:<20} {value:.3f} s, {value / python:.1f} × an empty Python")


if __name__ == "__main__":
    main()
