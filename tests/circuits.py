"""Random circuits for the tests."""

from __future__ import annotations

import numpy as np

from gatewright.circuit import Builder, Circuit
from gatewright.gates import GATES
from gatewright.linalg import haar_unitary

#: Angles that meet special cases more often than chance would.
ANGLES = (0.0, np.pi / 2, -np.pi / 2, np.pi, np.pi / 4, 1e-9)


def random_circuit(
    n: int, operations: int, seed: int, *, widest: int = 3, barriers: bool = True, measured: bool = False
) -> Circuit:
    """Draw named gates of every kind, explicit unitaries and barriers on random qubits."""
    rng = np.random.default_rng(seed)
    kinds = [gate for gate in GATES.values() if gate.n_qubits <= min(n, widest)]
    builder = Builder(n, n)
    for _ in range(operations):
        lot = rng.random()
        if barriers and lot < 0.04:
            builder.barrier(*rng.permutation(n)[: rng.integers(1, n + 1)].tolist())
        elif lot < 0.1 and n > 1:
            builder.unitary(haar_unitary(4, rng=rng), *rng.permutation(n)[:2].tolist())
        else:
            gate = kinds[rng.integers(len(kinds))]
            special, free = rng.choice(ANGLES, gate.n_parameters), rng.uniform(-7, 7, gate.n_parameters)
            values = np.where(rng.random(gate.n_parameters) < 0.4, special, free)
            builder.gate(gate, *rng.permutation(n)[: gate.n_qubits].tolist(), parameters=values.tolist())
    if measured:
        for q in range(n):
            builder.measure(q, n - 1 - q)
    return builder.build()
