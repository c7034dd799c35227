"""Time the OpenQASM reader and writer on programs of 10^6 statements.

Run ``python tests/bench/qasm.py [statements]``. The floor of reading is one regular expression that finds every
statement of the text; the floor of writing is one formatted string for every statement. Both are measured in the
same run, in processor time, the best of three.
"""

from __future__ import annotations

import re
import resource
import sys
import time
from collections.abc import Callable

import numpy as np

from gatewright.circuit import Circuit
from gatewright.gates import GATES
from gatewright.qasm import read, write

STATEMENT = re.compile(r"\s*(\w+)\s*(\([^()]*\))?\s*([^();]*);")


def best(job: Callable[[], object], repeats: int = 3) -> float:
    """Return the least processor time of a few runs, in seconds."""
    times = []
    for _ in range(repeats):
        start = time.process_time()
        job()
        times.append(time.process_time() - start)
    return min(times)


def random_circuit(n_qubits: int, size: int, kinds: list[str], angles: str, seed: int = 1) -> Circuit:
    """Return random gates on random qubits, with angles that repeat or not."""
    rng = np.random.default_rng(seed)
    table = tuple(GATES[name] for name in kinds)
    op = rng.integers(0, len(table), size).astype(np.int16)
    width = np.array([gate.n_qubits for gate in table])[op]
    n_parameters = np.array([gate.n_parameters for gate in table])[op]
    offsets, parameter_offsets = (np.concatenate([[0], np.cumsum(column)]) for column in (width, n_parameters))
    qubits = rng.integers(0, n_qubits, offsets[-1]).astype(np.int32)
    second = offsets[:-1][width == 2] + 1
    qubits[second] = (qubits[second - 1] + rng.integers(1, n_qubits, len(second))) % n_qubits
    total = int(parameter_offsets[-1])
    parameters = (
        rng.integers(-15, 16, total) * np.pi / 16 if angles == "fractions" else rng.uniform(-np.pi, np.pi, total)
    )
    return Circuit(
        n_qubits=n_qubits,
        n_bits=0,
        table=table,
        op=op,
        qubits=qubits,
        offsets=offsets,
        parameters=parameters,
        parameter_offsets=parameter_offsets,
        link=np.full(size, -1, dtype=np.int32),
    )


def main() -> None:
    """Print one line a program."""
    size = int(float(sys.argv[1])) if len(sys.argv) > 1 else 10**6
    print(f"{size} statements{'':14}read/s  x floor    write/s  x floor")
    for title, n_qubits, kinds, angles in (
        ("h, cx, rz; fractions of pi; 20 qubits", 20, ["h", "cx", "rz"], "fractions"),
        ("h, cx, rz; any angle; 20 qubits", 20, ["h", "cx", "rz"], "any"),
        ("h, cx, rz; any angle; 1000 qubits", 1000, ["h", "cx", "rz"], "any"),
        ("cx, U; any angles; 1000 qubits", 1000, ["cx", "U"], "any"),
    ):
        print(f"{title:38}{measured(random_circuit(n_qubits, size, kinds, angles))}", flush=True)
    reading, scan = read_and_scan(expressions(size))
    print(f"{'u3, cx, rz; expressions; 1000 qubits':38}{size / reading:9.3g}{reading / scan:9.1f}")
    print(f"most memory: {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20:.2f} GiB")


def expressions(size: int, seed: int = 2) -> str:
    """Return a program of u3, cx and rz whose parameters are distinct arithmetic expressions."""
    rng = np.random.default_rng(seed)
    qubits, angles = rng.integers(0, 999, size).tolist(), rng.uniform(0, 1, (size, 2)).tolist()
    forms = (
        "u3({a}*pi, pi/2 - {b}, -{a}/2 + {b}*3) q[{q}];",
        "cx q[{q}], q[999];",
        "rz(3*pi/8 + {a}) q[{q}];",
    )
    body = [forms[k % 3].format(a=a, b=b, q=q) for k, (q, (a, b)) in enumerate(zip(qubits, angles, strict=True))]
    return "\n".join(['OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit[1000] q;', *body, ""])


def read_and_scan(text: str) -> tuple[float, float]:
    """Return the times of reading a text, and of the floor."""
    return best(lambda: read(text)), best(lambda: sum(1 for _ in STATEMENT.finditer(text)))


def measured(circuit: Circuit) -> str:
    """Return the figures for one circuit."""
    text = write(circuit)
    rows = list(zip(circuit.op.tolist(), circuit.qubits[circuit.offsets[:-1]].tolist(), strict=True))
    reading, scan = read_and_scan(text)
    writing = best(lambda: write(circuit))
    lines = best(lambda: "\n".join([f"{k} q[{q}];" for k, q in rows]))
    size = len(circuit)
    return f"{size / reading:9.3g}{reading / scan:9.1f}{size / writing:11.3g}{writing / lines:9.1f}"


if __name__ == "__main__":
    main()
