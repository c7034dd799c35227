"""Count CNOT-class gates for Haar-random unitaries of several sizes beside the counting bound.

python tests/bench/wide.py
"""

from __future__ import annotations

import time

import gatewright as gw
from gatewright.description import counting_bound
from gatewright.linalg import haar_unitary


def main() -> None:
    for n in range(2, 8):
        device = gw.Device.from_graph([(i, j) for i in range(n) for j in range(i)], "cz-virtual-z")
        begun = time.perf_counter()
        result = gw.compile(haar_unitary(2**n, rng=n), device)
        seconds = time.perf_counter() - begun
        count = result.costs.two_qubit_gates
        bound = counting_bound(n)
        print(f"{n} qubits: {count} CZ, counting bound {bound}, ratio {count / bound:.2f}; {seconds:.2f} s")


if __name__ == "__main__":
    main()
