"""Two-qubit synthesis: accuracy and counts on every kind of hard case, and speed against a batched eigh.

Run ``python tests/bench/two_qubit.py`` for a slice of 10^4 unitaries, with ``--full`` for 10^6. Exits with 1 if an
error or a count is wrong; times are only printed, as ratios to a floor measured in the same run.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.linalg import distance, haar_unitary, kron, nearest_unitary
from gatewright.synthesis.controlled_not import EntanglerCircuit, synthesise
from gatewright.synthesis.entangler import classify
from gatewright.synthesis.weyl import canonical_coordinates, canonical_decomposition, canonical_matrix

QUARTER = np.pi / 4
TOLERANCE = 1e-12
CX = np.eye(4)[[0, 1, 3, 2]].astype(complex)
ISWAP = np.array([[1, 0, 0, 0], [0, 0, 1j, 0], [0, 1j, 0, 0], [0, 0, 0, 1]])

# Every vertex, edge and face of the chamber (s, t, u are random): the point, and its least number of CNOTs and of
# iSWAPs. Shende, Bullock & Markov, PRA 70, 012310 (2004); iSWAP is SWAP times a gate of the CNOT class, so that even
# numbers of them reach what as many CNOTs do.
PLACES: dict[str, tuple[Callable[..., tuple[Any, Any, Any]], int, int]] = {
    "local": (lambda s, t, u: (0, 0, 0), 0, 0),
    "CNOT": (lambda s, t, u: (QUARTER, 0, 0), 1, 2),
    "iSWAP": (lambda s, t, u: (QUARTER, QUARTER, 0), 2, 1),
    "SWAP": (lambda s, t, u: (QUARTER, QUARTER, QUARTER), 3, 3),
    "SWAP, other image": (lambda s, t, u: (QUARTER, QUARTER, -QUARTER), 3, 3),
    "edge (s, 0, 0)": (lambda s, t, u: (s, 0, 0), 2, 2),
    "edge (s, s, 0)": (lambda s, t, u: (s, s, 0), 2, 2),
    "edge (s, s, s)": (lambda s, t, u: (s, s, s), 3, 3),
    "edge (s, s, -s)": (lambda s, t, u: (s, s, -s), 3, 3),
    "edge (π/4, s, 0)": (lambda s, t, u: (QUARTER, s, 0), 2, 2),
    "edge (π/4, s, s)": (lambda s, t, u: (QUARTER, s, s), 3, 3),
    "edge (π/4, π/4, s)": (lambda s, t, u: (QUARTER, QUARTER, s), 3, 3),
    "face (s, t, 0)": (lambda s, t, u: (s, t, 0), 2, 2),
    "face (s, s, t)": (lambda s, t, u: (s, s, t), 3, 3),
    "face (s, t, t)": (lambda s, t, u: (s, t, t), 3, 3),
    "face (s, t, -t)": (lambda s, t, u: (s, t, -t), 3, 3),
    "face (π/4, s, t)": (lambda s, t, u: (QUARTER, s, t), 3, 3),
    "inside (s, t, u)": (lambda s, t, u: (s, t, u), 3, 3),
}


@dataclass(frozen=True)
class Family:
    """A stack of unitaries and their counts, −1 where the count is not known beforehand."""

    name: str
    unitaries: NDArray[np.complex128]
    cnots: NDArray[np.int64]
    iswaps: NDArray[np.int64]


def local_gates(size: int, rng: np.random.Generator) -> NDArray[np.complex128]:
    return kron(haar_unitary(2, size, rng=rng), haar_unitary(2, size, rng=rng))


def small_unitaries(angle: NDArray[np.float64], rng: np.random.Generator) -> NDArray[np.complex128]:
    """exp(i·angle·H) for random H of operator norm 1."""
    h = rng.standard_normal((angle.size, 4, 4)) + 1j * rng.standard_normal((angle.size, 4, 4))
    values, vectors = np.linalg.eigh(h + np.conj(np.swapaxes(h, -1, -2)))
    values /= np.abs(values).max(axis=-1, keepdims=True)
    return (vectors * np.exp(1j * angle[:, None] * values)[:, None, :]) @ np.conj(np.swapaxes(vectors, -1, -2))


def gamma_count(unitary: NDArray[np.complex128]) -> NDArray[np.int64]:
    """CNOT count by the criteria on γ(U) = U YY Uᵀ YY of Shende, Bullock & Markov (2004), which need det U = 1."""
    yy = np.fliplr(np.diag([-1, 1, 1, -1])).astype(complex)
    special = unitary / (np.linalg.det(unitary) ** 0.25)[:, None, None]
    gamma = special @ yy @ np.swapaxes(special, -1, -2) @ yy
    trace = np.trace(gamma, axis1=-2, axis2=-1)
    identity = np.eye(4)

    def vanishes(matrix: NDArray[np.complex128]) -> NDArray[np.bool_]:
        return np.abs(matrix).max(axis=(-2, -1)) < 1e-9

    none = vanishes(gamma - identity) | vanishes(gamma + identity)
    one = (np.abs(trace) < 1e-9) & vanishes(gamma @ gamma + identity)
    return np.select([none, one, np.abs(trace.imag) < 1e-9], [0, 1, 2], 3)


def points(name: str, size: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Points of one place, away from its borders."""
    u, t, s = np.sort(rng.uniform(0.05, 0.7, (3, size)), axis=0)
    return np.stack(np.broadcast_arrays(*PLACES[name][0](s, t, u), s)[:3], axis=-1).astype(float)


def families(total: int, rng: np.random.Generator) -> Iterator[Family]:
    """About `total` unitaries: the places and their neighbourhoods, Haar, permutations, diagonals, tiny hierarchies."""
    size = max(1, total // (len(PLACES) + 6))
    for name, (_, cnots, iswaps) in PLACES.items():
        base = points(name, size, rng)
        exponent = rng.integers(1, 18, size)
        epsilon = np.where(exponent == 17, 0.0, 10.0**-exponent)
        kind = rng.integers(0, 3, size)
        step = rng.uniform(0.5, 1, (size, 3)) * rng.choice([-1, 1], (size, 3))
        # Kind 0 moves the point in all directions, 1 within its plane z = const, 2 not at all (but the unitary).
        step[kind == 1, 2] = 0
        step[kind == 2] = 0
        unitaries = canonical_matrix(base + epsilon[:, None] * step)
        unitaries[kind == 2] = small_unitaries(epsilon[kind == 2], rng) @ unitaries[kind == 2]
        unitaries = local_gates(size, rng) @ unitaries @ local_gates(size, rng)

        in_plane = (kind == 1) & (max(cnots, iswaps) < 3)
        moved = np.where(kind == 2, -1, np.where(in_plane, 2, 3))
        far, near = epsilon >= 10 * TOLERANCE, epsilon <= TOLERANCE / 10
        yield Family(
            name,
            unitaries,
            np.where(near, cnots, np.where(far, moved, -1)),
            np.where(near, iswaps, np.where(far, moved, -1)),
        )

    unknown, three = np.full(size, -1), np.full(size, 3)
    yield Family("Haar", haar_unitary(4, size, rng=rng), three, three)
    exact = np.eye(4, dtype=complex)[np.argsort(rng.random((size, 4)), axis=-1)]
    yield Family("permutation", exact, gamma_count(exact), unknown)
    phased = exact * 1j ** rng.integers(0, 4, (size, 1, 4))
    yield Family("permutation with phases", phased, gamma_count(phased), unknown)
    diagonal = np.exp(2j * np.pi * rng.random((size, 4)))[:, None, :] * np.eye(4)
    yield Family("diagonal", diagonal, np.full(size, 2), np.full(size, 2))
    signs = rng.choice([1, -1, 1j, -1j], (size, 1, 4)) * np.eye(4)
    yield Family("diagonal of ±1, ±i", signs, gamma_count(signs), unknown)
    start = rng.choice([0, QUARTER, QUARTER / 2, 0.3], (size, 3))
    tiny = 10.0 ** -rng.uniform(0, 17, (size, 3)) * rng.choice([-1, 1], (size, 3))
    hierarchy = local_gates(size, rng) @ canonical_matrix(start + tiny) @ local_gates(size, rng)
    yield Family("steps of every size", hierarchy, unknown, unknown)


def rounded_families(total: int, rng: np.random.Generator) -> Iterator[Family]:
    """Every place with entries rounded to 8 digits or to float32, then the nearest unitary."""
    size = max(1, total // (2 * len(PLACES)))
    for name, (_, cnots, iswaps) in PLACES.items():
        exact = local_gates(size, rng) @ canonical_matrix(points(name, size, rng)) @ local_gates(size, rng)
        for how, rough in (("8 digits", exact.round(8)), ("float32", exact.astype(np.complex64))):
            yield Family(f"{name}, {how}", nearest_unitary(rough), np.full(size, cnots), np.full(size, iswaps))


def faults(
    unitaries: NDArray[np.complex128],
    circuit: EntanglerCircuit,
    entangler: NDArray[np.complex128],
    expected: NDArray[np.int64],
    *,
    tolerance: float,
) -> tuple[float, int]:
    """Return the largest error beyond the recorded distance, and the number of wrong counts.

    The recorded distance must also be no more than what is measured, and within the tolerance.
    """
    measured = distance(circuit.matrix(entangler), unitaries)
    assert (circuit.distance <= tolerance).all(), "an approximation beyond the tolerance"
    error = np.abs(measured - circuit.distance)
    return float(error.max()), int(((circuit.uses != expected) & (expected >= 0)).sum())


def best(function: Callable[[], object], repeats: int = 5) -> float:
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return min(times)


def compile_seconds() -> tuple[float, float]:
    """Seconds of importing the kernels without and with a cache, less numba's own import."""
    code = (
        "import time, numpy, numba; t = time.perf_counter(); "
        "import gatewright.synthesis._kernels; print(time.perf_counter() - t)"
    )
    with tempfile.TemporaryDirectory() as folder:
        environment = {**os.environ, "NUMBA_CACHE_DIR": folder}
        cold, warm = (
            float(subprocess.run([sys.executable, "-c", code], env=environment, check=True, capture_output=True).stdout)
            for _ in range(2)
        )
    return cold, warm


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--full", action="store_true", help="10^6 unitaries instead of 10^4")
    parser.add_argument("--seed", type=int, default=1)
    options = parser.parse_args()
    rng = np.random.default_rng(options.seed)
    total = 10**6 if options.full else 10**4

    dressed = [local_gates(1, rng)[0] @ gate @ local_gates(1, rng)[0] for gate in (CX, ISWAP)]
    compilers = (
        ("CX", CX, synthesise, False),
        ("CX with local gates", dressed[0], classify(dressed[0]).synthesise, False),
        ("iSWAP with local gates", dressed[1], classify(dressed[1]).synthesise, True),
    )
    failed = False
    for title, source, tolerance in (
        ("exact and perturbed", families(total, rng), TOLERANCE),
        ("rounded", rounded_families(total // 10, rng), 1e-6),
    ):
        worst, wrong, seen = dict.fromkeys((c[0] for c in compilers), 0.0), 0, 0
        for family in source:
            seen += len(family.unitaries)
            for name, matrix, compiler, mirrored in compilers:
                circuit = compiler(family.unitaries, tolerance=tolerance)
                expected = family.iswaps if mirrored else family.cnots
                error, bad = faults(family.unitaries, circuit, matrix, expected, tolerance=tolerance)
                worst[name] = max(worst[name], error)
                if bad or error > 2e-14:
                    print(f"FAULT {family.name}, {name}: error {error:.2e}, {bad} wrong counts")
                wrong += bad
        failed |= wrong > 0 or max(worst.values()) > 2e-14
        errors = ", ".join(f"{name} {error:.2e}" for name, error in worst.items())
        print(f"{title}: {seen} unitaries, {wrong} wrong counts; largest error beyond the recorded distance: {errors}")

    u = haar_unitary(4, 10**5, rng=rng)
    hermitian = u + np.conj(np.swapaxes(u, -1, -2))
    floor = best(lambda: np.linalg.eigh(hermitian))
    print(f"floor: numpy.linalg.eigh of {len(u)} 4 × 4 matrices, {floor * 1e6 / len(u):.2f} µs each")
    cz, iswap = classify(np.diag([1, 1, 1, -1])), classify(ISWAP)
    for label, function in (
        ("synthesise to CX", lambda: synthesise(u)),
        ("synthesise to CZ", lambda: cz.synthesise(u)),
        ("synthesise to iSWAP", lambda: iswap.synthesise(u)),
        ("canonical_decomposition", lambda: canonical_decomposition(u)),
        ("canonical_coordinates", lambda: canonical_coordinates(u)),
    ):
        seconds = best(function)
        print(f"{label}: {seconds * 1e6 / len(u):.2f} µs each, {seconds / floor:.2f} × floor")
    cold, warm = compile_seconds()
    print(f"kernels: compiled in {cold:.1f} s, loaded from the cache in {warm:.2f} s")
    return int(failed)


if __name__ == "__main__":
    sys.exit(main())
