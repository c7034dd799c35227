"""The workloads compute what their names say."""

from __future__ import annotations

import numpy as np
import pytest

import workloads
from gatewright.circuit import apply_operations


def outcome(circuit, bits: dict[int, int]) -> list[int]:
    n = circuit.n_qubits
    state = np.zeros(2**n, dtype=complex)
    state[sum(value << (n - 1 - q) for q, value in bits.items())] = 1
    state = apply_operations(circuit, range(len(circuit)), range(n), state.reshape(-1, 1)).ravel()
    (at,) = np.flatnonzero(np.abs(state) > 0.5)
    assert abs(abs(state[at]) - 1) < 1e-9
    return [int(at) >> (n - 1 - q) & 1 for q in range(n)]


def number(bits: list[int], wires: list[int]) -> int:
    return sum(bits[w] << k for k, w in enumerate(wires))


@pytest.mark.parametrize(("x", "y"), [(0, 0), (1, 3), (5, 6), (7, 7)])
def test_adders_add(x: int, y: int) -> None:
    circuit = workloads.adder(3)
    a, b = [2, 4, 6], [1, 3, 5]
    given = {w: x >> k & 1 for k, w in enumerate(a)} | {w: y >> k & 1 for k, w in enumerate(b)}
    bits = outcome(circuit, given)
    assert number(bits, [*b, 7]) == x + y
    assert number(bits, a) == x


@pytest.mark.parametrize(("x", "y"), [(0, 3), (3, 3), (2, 3), (1, 2)])
def test_multipliers_multiply(x: int, y: int) -> None:
    circuit = workloads.multiplier(2)
    bits = outcome(circuit, {0: x & 1, 1: x >> 1, 2: y & 1, 3: y >> 1})
    assert number(bits, [6, 7, 8, 9]) == x * y
    assert number(bits, [4, 5, 10]) == 0


def test_fourier_transforms() -> None:
    n = 4
    reverse = [int(f"{k:04b}"[::-1], 2) for k in range(2**n)]
    matrix = workloads.fourier(n).unitary()[reverse]
    assert np.allclose(matrix, np.fft.ifft(np.eye(2**n), norm="ortho"))


def test_sizes_and_splits() -> None:
    judged = {(name, graph): circuit for name, circuit, graph, _ in workloads.structured(held_out=True)}
    tuned = {(name, graph): circuit for name, circuit, graph, _ in workloads.structured(held_out=False)}
    assert not set(judged) & set(tuned)
    sizes = [circuit.n_qubits for circuit in judged.values()]
    assert (min(sizes), max(sizes)) == (11, 67)
    assert len(workloads.from_pairs(workloads.random_pairs(9, 50, 1), 9)) == 150
