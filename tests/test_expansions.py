"""Exact expansions of wide gates, and the Shannon decomposition of wide unitaries."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import unitary_group

import gatewright as gw
from gatewright.circuit import Builder, Circuit, assemble
from gatewright.gates import GATES
from gatewright.linalg import distance, haar_unitary, kron, reorder_qubits
from gatewright.synthesis.expansions import controlled_phase, expansion
from gatewright.synthesis.shannon import shannon_pieces

WIDE = sorted(name for name, gate in GATES.items() if gate.n_qubits > 2)

#: CNOTs of each expansion: Toffoli 6 (Shende, Markov, QIC 9, 461 (2009)), diagonal 2ⁿ − 2 (Bullock, Markov, QIC 4, 27
#: (2004)); rccx 3 and rc3x 6 as qelib1.inc writes them.
CNOTS = {"ccx": 6, "ccz": 6, "cswap": 8, "rccx": 3, "rc3x": 6, "c3x": 14, "c3sqrtx": 14, "c4x": 30}


@pytest.mark.parametrize("name", WIDE)
def test_expansions_are_exact(name: str) -> None:
    terms = expansion(name)
    assert terms is not None
    builder = Builder(GATES[name].n_qubits)
    for gate, wires, parameters in terms:
        builder.gate(gate, *wires, parameters=parameters)
    circuit = builder.build()
    assert circuit.count("cx") == CNOTS[name]
    assert distance(circuit.unitary(), GATES[name].matrix()) < 5e-15


@given(st.integers(1, 6), st.floats(-7, 7))
def test_controlled_phase_with_its_phase(n: int, angle: float) -> None:
    builder = Builder(n)
    for gate, wires, parameters in controlled_phase(angle, n):
        builder.gate(gate, *wires, parameters=parameters)
    expected = np.eye(2**n, dtype=complex)
    expected[-1, -1] = np.exp(1j * angle)
    assert np.abs(builder.build().unitary() - expected).max() < 1e-14


def shannon(u: np.ndarray) -> Circuit:
    n = len(u).bit_length() - 1
    matrices: list[np.ndarray] = []
    pieces = shannon_pieces(u, np.arange(n, dtype=np.int32), 0, matrices)
    circuit, _ = assemble(Builder(n).build(), n, pieces)
    return replace(circuit, matrices=tuple(matrices))


@pytest.mark.parametrize("n", [2, 3, 4, 5, 6])
def test_shannon_decomposes_haar_unitaries(n: int) -> None:
    u = unitary_group.rvs(2**n, random_state=n)
    circuit = shannon(u)
    assert distance(circuit.unitary(), u) < 1e-15 * 4**n
    # Theorem 8: each level has three multiplexed rotations of 2ⁿ⁻¹ CNOTs and four unitaries on a qubit less.
    expected = sum(3 * 2 ** (k - 1) * 4 ** (n - k) for k in range(3, n + 1))
    assert (circuit.count("cx"), circuit.count("unitary")) == (expected, 4 ** (n - 2))


def degenerate(n: int, seed: int) -> list[np.ndarray]:
    rng = np.random.default_rng(seed)
    size = 2**n
    permutation = np.eye(size)[rng.permutation(size)]
    product = np.eye(1)
    for _ in range(n):
        product = kron(product, haar_unitary(2, rng=rng))
    half = haar_unitary(size // 2, rng=rng)
    return [
        np.eye(size),
        permutation,
        np.diag(np.exp(1j * rng.uniform(0, 7, size))),
        np.diag(rng.choice([1, -1], size)),
        product,
        kron(np.eye(2), half),
        kron(half, np.eye(2)),
        reorder_qubits(kron(np.diag([1, 0]), np.eye(size // 2)) + kron(np.diag([0, 1]), half), tuple(range(n))),
        haar_unitary(size, rng=rng).real.astype(complex) * 0 + np.linalg.qr(rng.normal(size=(size, size)))[0],
    ]


@given(st.integers(3, 4), st.integers(0, 2**32), st.sampled_from([0.0, *(10.0**-k for k in range(1, 17))]))
def test_shannon_on_degenerate_unitaries_and_near_them(n: int, seed: int, size: float) -> None:
    rng = np.random.default_rng(seed)
    noise = rng.normal(size=(2**n, 2**n, 2)) @ [1, 1j]
    for u in degenerate(n, seed):
        left, _, right = np.linalg.svd(u + size * noise)
        near = left @ right
        assert distance(shannon(near).unitary(), near) < 1e-13


def test_special_forms_take_no_more_than_they_need() -> None:
    device = gw.Device.from_graph([(0, 1), (0, 2), (1, 2)], "cz-virtual-z")
    # A controlled two-qubit unitary: two of them around one multiplexed rotation.
    u = np.eye(8, dtype=complex)
    u[4:, 4:] = haar_unitary(4, rng=4)
    assert gw.compile(u, device).costs.two_qubit_gates <= 3 + 4 + 3
