"""Claims about windows, each against dense matrices, and the checker's bound on its own rounding."""

from __future__ import annotations

from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from circuits import random_circuit
from gatewright.circuit import Builder, Circuit
from gatewright.errors import ProofError
from gatewright.gates import GATES, MEASURE, RESET
from gatewright.linalg import distance, haar_unitary
from gatewright.proof import Proof, Step, check_proof
from gatewright.proof.claims import CLAIM_KINDS, unitary_of

NUMBER = {kind.name: k for k, kind in enumerate(CLAIM_KINDS)}
CLIFFORD = ("h", "s", "sdg", "x", "y", "z", "sx", "cx", "cz", "cy", "swap", "iswap")
MONOMIAL = ("x", "z", "s", "t", "rz", "p", "cx", "cz", "swap", "cp", "rzz", "ccz", "y")


def one_window(source: Circuit, output: Circuit, kind: str, places: list[int] | None = None) -> Step:
    n = output.n_qubits
    wires = np.arange(n, dtype=np.int32)
    seams = np.zeros((n, 4))
    seams[:, 0] = 1
    leave = wires if places is None else np.array(places, dtype=np.int32)
    return Step(
        initial=wires,
        final=leave,
        source_window=np.zeros(len(source), dtype=np.int32),
        output_window=np.zeros(len(output), dtype=np.int32),
        offsets=np.array([0, n]),
        wires=wires,
        entry=wires,
        exit=leave,
        seams=seams,
        claims=np.array([NUMBER[kind]], dtype=np.int8),
    )


def claimed(source: Circuit, output: Circuit, kind: str, places: list[int] | None = None) -> float:
    return check_proof(source, output, Proof((one_window(source, output, kind, places),))).error_bound


def drawn(n: int, operations: int, seed: int, names: tuple[str, ...]) -> Builder:
    rng = np.random.default_rng(seed)
    builder = Builder(n, n)
    known = [gate for gate in GATES.values() if gate.name in names and gate.n_qubits <= n]
    for _ in range(operations):
        gate = known[rng.integers(len(known))]
        values = rng.choice([0.3, np.pi / 4, -np.pi / 2], gate.n_parameters).tolist()
        builder.gate(gate, *rng.permutation(n)[: gate.n_qubits].tolist(), parameters=values)
    return builder


def permutation_matrix(places: list[int]) -> np.ndarray:
    """Return the matrix that moves qubit q to ``places[q]``."""
    n = len(places)
    out = np.zeros((2**n, 2**n))
    for x in range(2**n):
        bits = [x >> (n - 1 - q) & 1 for q in range(n)]
        out[sum(bit << (n - 1 - places[q]) for q, bit in enumerate(bits)), x] = 1
    return out


@pytest.mark.parametrize(("kind", "names"), [("clifford", CLIFFORD), ("parities", MONOMIAL)])
@given(n=st.integers(1, 5), operations=st.integers(0, 30), seed=st.integers(0, 2**32), moved=st.booleans())
@settings(max_examples=40)
def test_regions_agree_with_dense_matrices(
    kind: str, names: tuple[str, ...], n: int, operations: int, seed: int, moved: bool
) -> None:
    rng = np.random.default_rng(seed)
    places = rng.permutation(n).tolist() if moved else list(range(n))
    source = drawn(n, operations, seed, names).build()
    builder = drawn(n, operations, seed, names)
    if seed % 3:
        # Exchange wires at the end so that they come to their places.
        order = list(range(n))
        for q in range(n):
            at = order.index(places.index(q))
            if at != q:
                builder.gate("swap", q, at)
                order[q], order[at] = order[at], order[q]
    output = builder.build()
    true = float(distance(output.unitary(), permutation_matrix(places) @ source.unitary()))
    try:
        bound = claimed(source, output, kind, places)
    except ProofError:
        assert true > 1e-9
    else:
        assert true <= bound + 1e-13 and bound < 1e-9


@pytest.mark.parametrize("kind", ["clifford", "parities"])
def test_regions_follow_their_wires(kind: str) -> None:
    source = Builder(3).gate("cx", 0, 1).gate("s", 2).build()
    output = Builder(3).gate("cx", 0, 1).gate("swap", 0, 1).gate("swap", 1, 2).gate("s", 1).build()
    # Wire 0 goes to 1 and on to 2, wire 1 to 0, wire 2 to 1.
    assert claimed(source, output, kind, [2, 0, 1]) < 1e-12
    assert claimed(source, output, "matrix", [2, 0, 1]) < 1e-12
    with pytest.raises(ProofError):
        claimed(source, output, kind, [1, 2, 0])


def test_regions_refuse_other_gates_and_name_the_window() -> None:
    t, s = Builder(2).gate("t", 0).build(), Builder(2).gate("s", 0).build()
    with pytest.raises(ProofError, match="window 0 .*'clifford': gates of other kinds"):
        claimed(t, t, "clifford")
    with pytest.raises(ProofError, match="should end as"):
        claimed(s, Builder(2).gate("sdg", 0).build(), "clifford")
    with pytest.raises(ProofError, match="phase of"):
        claimed(t, s, "parities")
    with pytest.raises(ProofError, match="gates of other kinds"):
        claimed(Builder(2).gate("h", 0).build(), Builder(2).gate("h", 0).build(), "parities")


def measured(builder: Builder, bits: list[int] | None = None) -> Circuit:
    for q in range(builder.n_qubits):
        builder.measure(q, q if bits is None else bits[q])
    return builder.build()


@given(st.integers(1, 3), st.integers(0, 2**32), st.sampled_from([0.0, 1e-3, 1.0]))
@settings(max_examples=40)
def test_diagonals_before_measurements(n: int, seed: int, size: float) -> None:
    rng = np.random.default_rng(seed)
    u = haar_unitary(2**n, rng=rng)
    diagonal = np.diag(np.exp(1j * rng.uniform(-3, 3, 2**n)))
    turn = haar_unitary(2**n, rng=rng)
    angles = np.exp(1j * size * rng.uniform(0.5, 1, 2**n) * rng.choice([-1, 1], 2**n))
    off = (turn * angles) @ turn.conj().T
    source = measured(Builder(n, n).unitary(u, *range(n)))
    output = measured(Builder(n, n).unitary(off @ diagonal @ u, *range(n)))
    # From outside: the probabilities and the states after each outcome, from the matrices themselves.
    made, meant = off @ diagonal @ u, u
    apart = max(
        float(np.linalg.norm(np.outer(a, a.conj()) - np.outer(b, b.conj()), 2))
        for a, b in zip(made, meant, strict=True)
    )
    try:
        bound = claimed(source, output, "measured")
    except ProofError:
        assert size > 0
    else:
        assert apart <= 2 * bound + 1e-13
        assert size == 0.0


def test_measured_windows_are_exact_about_bits_and_ends() -> None:
    source = measured(Builder(2, 2).gate("h", 0))
    assert claimed(source, measured(Builder(2, 2).gate("h", 0).gate("cz", 0, 1)), "measured") < 1e-13
    for output in (
        measured(Builder(2, 2).gate("h", 0), [1, 0]),
        measured(Builder(2, 2).gate("h", 0).gate("cx", 0, 1)),
        Builder(2, 2).gate("h", 0).measure(0, 0).build(),
        Builder(2, 2).gate("h", 0).measure(0, 0).measure(1, 1).gate("x", 0).build(),
        Builder(2, 2).gate("h", 0).reset(0).measure(0, 0).measure(1, 1).build(),
    ):
        with pytest.raises(ProofError):
            claimed(source, output, "measured")
    # The same without the claim: a fixed window holds nothing else.
    with pytest.raises(ProofError, match="and no more"):
        claimed(source, measured(Builder(2, 2).gate("h", 0).gate("cz", 0, 1)), "matrix")


def test_gates_absorbed_by_resets() -> None:
    def reset(builder: Builder) -> Circuit:
        return builder.reset(0).reset(1).build()

    source = reset(Builder(2).gate("h", 0))
    assert claimed(source, reset(Builder(2).gate("cx", 0, 1).gate("t", 1)), "reset") == 0
    for output in (
        Builder(2).gate("h", 0).reset(0).build(),
        Builder(2).reset(0).reset(1).gate("x", 0).build(),
    ):
        with pytest.raises(ProofError):
            claimed(source, output, "reset")


def test_the_names_of_claims_are_unique_and_numbered_from_the_default() -> None:
    assert [kind.name for kind in CLAIM_KINDS][0] == "matrix" and len(NUMBER) == len(CLAIM_KINDS)
    assert MEASURE.name == "measure" and RESET.name == "reset"


def exact(circuit: Circuit) -> Any:
    """Multiply a circuit of table gates out with 40 digits: entries from their definitions, by mpmath."""
    n = circuit.n_qubits
    with mpmath.workdps(40):
        total = mpmath.eye(2**n)
        for op in circuit:
            total = _embedded(_matrix(op.name, op.parameters), op.qubits, n) * total
        return total


def _matrix(name: str, p: tuple[float, ...]) -> Any:
    i, e = mpmath.mpc(0, 1), mpmath.expj
    if name == "rz":
        return mpmath.diag([e(-mpmath.mpf(p[0]) / 2), e(mpmath.mpf(p[0]) / 2)])
    if name == "sx":
        return mpmath.matrix([[1 + i, 1 - i], [1 - i, 1 + i]]) / 2
    if name == "h":
        return mpmath.matrix([[1, 1], [1, -1]]) / mpmath.sqrt(2)
    if name == "ry":
        c, s = mpmath.cos(mpmath.mpf(p[0]) / 2), mpmath.sin(mpmath.mpf(p[0]) / 2)
        return mpmath.matrix([[c, -s], [s, c]])
    if name == "u3":
        t, phi, lam = map(mpmath.mpf, p)
        c, s = mpmath.cos(t / 2), mpmath.sin(t / 2)
        return mpmath.matrix([[c, -e(lam) * s], [e(phi) * s, e(phi + lam) * c]]) * e(-(phi + lam) / 2)
    if name == "cp":
        return mpmath.diag([1, 1, 1, e(mpmath.mpf(p[0]))])
    assert name == "cz"
    return mpmath.diag([1, 1, 1, -1])


def _embedded(gate: Any, qubits: tuple[int, ...], n: int) -> Any:
    out = mpmath.zeros(2**n)
    for x in range(2**n):
        held = [x >> (n - 1 - q) & 1 for q in qubits]
        column = sum(bit << (len(qubits) - 1 - k) for k, bit in enumerate(held))
        for row in range(2 ** len(qubits)):
            y = x
            for k, q in enumerate(qubits):
                bit = row >> (len(qubits) - 1 - k) & 1
                y = y & ~(1 << (n - 1 - q)) | bit << (n - 1 - q)
            out[y, x] += gate[row, column]
    return out


@given(st.integers(1, 3), st.integers(0, 25), st.integers(0, 2**32))
@settings(max_examples=25)
def test_the_bound_on_rounding_holds_against_forty_digits(n: int, operations: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    builder = Builder(n)
    names = ("rz", "sx", "h", "ry", "u3") + (("cz", "cp") if n > 1 else ())
    for _ in range(operations):
        gate = GATES[names[rng.integers(len(names))]]
        values = (rng.uniform(-7, 7, gate.n_parameters) * 10.0 ** rng.integers(-9, 3)).tolist()
        builder.gate(gate, *rng.permutation(n)[: gate.n_qubits].tolist(), parameters=values)
    circuit = builder.build()
    product, rounding = unitary_of(circuit)
    true = exact(circuit)
    with mpmath.workdps(40):
        difference = [
            [complex(mpmath.mpc(complex(product[i, j])) - true[i, j]) for j in range(2**n)] for i in range(2**n)
        ]
    error = float(np.linalg.norm(np.array(difference), 2))
    assert error <= rounding
    assert rounding < 1e-12 * (1 + operations) * (1 + np.abs(circuit.parameters).max(initial=0))


def test_the_bound_on_rounding_holds_in_a_wide_window() -> None:
    circuit = random_circuit(7, 40, 3, barriers=False)
    product, rounding = unitary_of(circuit)
    assert np.abs(product - circuit.unitary()).max() <= rounding < 1e-9
