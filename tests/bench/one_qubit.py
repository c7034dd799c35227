"""Time one-qubit synthesis against two floors measured in the same run: three arctangents, and one 2 × 2 eigh.

Run: python tests/bench/one_qubit.py [number of unitaries]
"""

import sys
import time
from collections.abc import Callable
from types import SimpleNamespace
from typing import Any

import numpy as np

from gatewright.gates import GATES, Gate
from gatewright.linalg import haar_unitary
from gatewright.synthesis.euler import euler_angles, rotation, virtual_z
from gatewright.synthesis.one_qubit import plan_one_qubit

FULL = (-np.pi, np.pi)


def native(name: str, *ranges: tuple[float, float], virtual: bool = False) -> SimpleNamespace:
    return SimpleNamespace(gate=GATES[name], ranges=ranges, virtual=virtual, duration_ns=None)


def tilted(degrees: float) -> SimpleNamespace:
    axis = [np.sin(np.radians(degrees)), 0, np.cos(np.radians(degrees))]
    gate = Gate("tilted", 1, 1, lambda p: rotation(axis, p[..., 0]))
    return SimpleNamespace(gate=gate, ranges=(FULL,), virtual=False, duration_ns=None)


def pulse(angle: float) -> SimpleNamespace:
    gate = Gate("pulse", 1, 0, lambda p: np.broadcast_to(rotation("x", angle), (*p.shape[:-1], 2, 2)))
    return SimpleNamespace(gate=gate, ranges=(), virtual=False, duration_ns=None)


RZ = native("rz", FULL, virtual=True)
SETS = {
    "virtual z, quarter turn": [RZ, native("sx")],
    "virtual z, quarter and half turn": [RZ, native("sx"), native("x")],
    "z and x rotations": [native("rz", FULL), native("rx", FULL)],
    "equatorial and virtual z": [RZ, native("r", (0, np.pi), FULL)],
    "equatorial alone": [native("r", (0, np.pi), FULL)],
    "quarter turn 3 % too long, virtual z": [RZ, pulse(1.03 * np.pi / 2)],
    "axis at 60 degrees, virtual z": [RZ, tilted(60)],
    "two axes at 60 degrees": [native("rz", FULL), tilted(60)],
    "general pulse": [native("u", (0, np.pi), FULL, FULL)],
}


def best(work: Callable[[], Any], repeats: int = 3) -> float:
    """Return the least time of a few runs, in seconds."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def main(n: int) -> None:
    """Print a table of times per unitary and of ratios to the floors."""
    u = haar_unitary(2, n, rng=1)
    a, b = np.ascontiguousarray(u[:, 0].real), np.ascontiguousarray(u[:, 0].imag)
    arctangents = best(lambda: [np.arctan2(x, y) for x, y in ((a, b), (b, a), (a[:, ::-1], b))]) / 2
    eigh = best(lambda: np.linalg.eigh(u + np.conj(np.swapaxes(u, 1, 2))))
    print(f"{n} Haar unitaries; floors: 3 arctan2 {arctangents / n * 1e9:.0f}, eigh {eigh / n * 1e9:.0f} ns each")
    print(f"{'':42}{'ns each':>8}{'/ arctan2':>11}{'/ eigh':>8}")

    def row(name: str, seconds: float) -> None:
        print(f"{name:42}{seconds / n * 1e9:8.0f}{seconds / arctangents:11.1f}{seconds / eigh:8.2f}")

    row("euler_angles", best(lambda: euler_angles(u, outer="z", inner="y")))
    row("virtual_z", best(lambda: virtual_z(u)))
    for name, natives in SETS.items():
        plan = plan_one_qubit(natives)
        row(name, best(lambda plan=plan: plan.emit(plan.angles(u))))


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000)
