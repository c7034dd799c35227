"""Hold verdicts against full unitaries on many random circuits: with their proof, without it, and damaged.

    python tests/bench/verdicts.py [--circuits 10000] [--qubits 10]

Prints how often each method decided, and the largest ratio of true distance to bound; anything wrong ends the run.
"""

from __future__ import annotations

import argparse
import sys
from collections import Counter
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

import gatewright as gw
from circuits import random_circuit
from gatewright.errors import ProofError
from gatewright.proof import check_proof, dense_distance
from gatewright.proof.judge import judge


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--circuits", type=int, default=10_000)
    parser.add_argument("--qubits", type=int, default=10)
    options = parser.parse_args()
    rng = np.random.default_rng(0)
    devices = {
        n: gw.Device.from_graph([(k, k + 1) for k in range(n - 1)] or [(0, 1)], "cz-virtual-z")
        for n in range(1, options.qubits + 1)
    }
    methods: Counter[str] = Counter()
    tightest = caught = harmless = 0
    for k in range(options.circuits):
        # Most circuits are small: the cost of full unitaries grows as 4^n.
        n = min(1 + int(rng.geometric(0.3)), options.qubits)
        source = random_circuit(n, int(rng.integers(1, 30)), k, barriers=False)
        result = gw.compile(source, devices[n], seed=k, effort="quick")
        true = dense_distance(source, result.circuit, result.initial, result.final)
        assert true <= result.verdict.error_bound, (k, true, result.verdict)
        tightest = max(tightest, true / result.verdict.error_bound)
        judged = judge(source, result.circuit, initial=result.initial, final=result.final)
        assert true <= judged.error_bound, (k, true, judged)
        methods[judged.method[:24]] += 1
        if not len(result.circuit):
            continue
        damaged = result.circuit.take(np.delete(np.arange(len(result.circuit)), rng.integers(len(result.circuit))))
        apart = dense_distance(source, damaged, result.initial, result.final)
        for by_proof in (False, True):
            try:
                if by_proof:
                    said = check_proof(source, damaged, result.proof)
                else:
                    said = judge(source, damaged, initial=result.initial, final=result.final)
            except ProofError:
                caught += apart > 1e-9
                harmless += apart <= 1e-9
            else:
                assert apart <= said.error_bound, (k, apart, said)
        if (k + 1) % 1000 == 0:
            print(f"{k + 1} circuits", file=sys.stderr)
    print(f"{options.circuits} circuits of up to {options.qubits} qubits: no verdict against the full unitaries")
    print(f"largest true distance over bound: {tightest:.2g}; {caught} damages refused, {harmless} harmless ones too")
    for method, count in methods.most_common():
        print(f"  {count:6d} {method}")


if __name__ == "__main__":
    main()
