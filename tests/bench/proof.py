"""Make, write, read and check proofs of long circuits on a large hexagonal lattice, and judge them without a proof.

The device is a wall of 10 × 18 hexagons with a qubit on every corner and edge (1,011 qubits). The circuit has CX on
neighbours and, one time in twenty, on next neighbours, with as many random one-qubit gates among them. Prints, for each
size, seconds and microseconds a two-qubit gate of the source, and at the end the checks: checking takes no longer than
compiling; the cost a gate of the largest size is at most 1.5 times that of the smallest; memory.

    python tests/bench/proof.py [--largest 1000000] [--match 100000]
"""

from __future__ import annotations

import argparse
import resource
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

import gatewright as gw
from gatewright.circuit import Circuit, Piece, assemble
from gatewright.devices import coupling
from gatewright.gates import GATES
from gatewright.proof import check_proof, decode_proof
from gatewright.proof.judge import judge

FAR = 0.05


def lattice_circuit(device: gw.Device, gates: int, seed: int = 0) -> Circuit:
    """Return a circuit that is local on the lattice."""
    rng = np.random.default_rng(seed)
    near: list[list[int]] = [[] for _ in range(device.n_qubits)]
    for a, b in device.edges.tolist():
        near[a].append(b)
        near[b].append(a)
    two = np.array([(x, y) for middle in near for x in middle for y in middle if x != y])
    pairs = device.edges[rng.integers(len(device.edges), size=gates)].astype(np.int64)
    far = rng.random(gates) < FAR
    pairs[far] = two[rng.integers(len(two), size=int(far.sum()))]
    turned = rng.random(gates) < 0.5
    pairs[turned] = pairs[turned][:, ::-1]
    keys = rng.permutation(2 * gates)
    cx = Piece(GATES["cx"], np.sort(keys[:gates]), pairs)
    angles = rng.uniform(-np.pi, np.pi, (gates, 3))
    u3 = Piece(GATES["u3"], np.sort(keys[gates:]), rng.integers(device.n_qubits, size=(gates, 1)), angles)
    return assemble(gw.Builder(device.n_qubits).build(), device.n_qubits, [cx, u3])[0]


def timed(task: Callable[..., Any], *arguments: Any, **options: Any) -> tuple[Any, float]:
    begun = time.perf_counter()
    value = task(*arguments, **options)
    return value, time.perf_counter() - begun


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--largest", type=int, default=1_000_000, help="two-qubit gates of the largest circuit")
    parser.add_argument("--match", type=int, default=100_000, help="up to this size, judge without a proof as well")
    options = parser.parse_args()
    graph = coupling.hexagons(10, 18, on_edges=True)
    device = gw.Device.from_graph(graph, "cz-virtual-z", name="wall of hexagons")
    gw.compile(lattice_circuit(device, 100), device, effort="quick")
    sizes = [size for size in (1_000, 10_000, 100_000, 1_000_000) if size <= options.largest]
    costs, ratio = {}, 0.0
    place = tuple(range(device.n_qubits))
    for size in sizes:
        source = lattice_circuit(device, size)
        result, total = timed(gw.compile, source, device, placement=place, effort="quick")
        compiling = total - result.seconds["prove"]
        # Small circuits are over in milliseconds: the best of several.
        repeats = max(1, min(20, 20_000 // size))
        pair = source, result.circuit
        runs = [timed(check_proof, *pair, result.proof, device=device) for _ in range(repeats)]
        verdict, checking = min(runs, key=lambda run: run[1])
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / "x.proof"
            _, saving = timed(result.proof.save, path)
            data = path.read_bytes()
        again, reading = timed(decode_proof, data)
        assert again.windows == result.proof.windows
        operations = len(result.circuit)
        print(f"{size} two-qubit gates, {operations} native operations, {verdict.windows} windows")
        print(f"  compile {compiling:.2f} s, check {checking:.3f} s: {1e6 * checking / size:.1f} µs a two-qubit gate")
        print(f"  bound {verdict.error_bound:.2e}, of it rounding {verdict.rounding:.2e}")
        print(
            f"  file {len(data)} bytes: {len(data) / operations:.1f} a native operation, "
            f"{len(data) / result.costs.two_qubit_gates:.1f} a native two-qubit gate; "
            f"written in {saving:.2f} s, read in {reading:.2f} s"
        )
        if size <= options.match:
            judged, seconds = timed(judge, *pair, initial=result.initial)
            print(f"  without the proof {seconds:.1f} s: {judged.method}")
        costs[size], ratio = checking / size, checking / compiling
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20
    print(f"check / compile at the largest: {ratio:.2f} (wanted: at most 1)")
    print(f"cost a gate, largest over smallest: {costs[sizes[-1]] / costs[sizes[0]]:.2f} (wanted: at most 1.5)")
    print(f"peak memory {peak:.2f} GiB (wanted: below 4)")


if __name__ == "__main__":
    main()
