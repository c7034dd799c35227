"""Any entangler: accuracy and minimality on whole polytopes, and speed against the closed forms of CZ.

Run ``python tests/bench/entanglers.py`` for 10^3 targets a gate, with ``--full`` for 10^5. Exits with 1 if a circuit is
wrong, a reachable target is not made, or a random circuit leaves a polytope; times are only printed, as ratios to the
path of CZ measured in the same run.
"""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Callable

import numpy as np

from gatewright.linalg import distance, haar_unitary, kron
from gatewright.synthesis.entangler import classify
from gatewright.synthesis.families import family_pieces, least_cost
from gatewright.synthesis.polytopes import other_image, reached
from gatewright.synthesis.weyl import canonical_coordinates, canonical_matrix

Q = np.pi / 4
GATES = {
    "root of iSWAP": (Q / 2, Q / 2, 0),
    "B": (Q, Q / 2, 0),
    "root of CX": (Q / 2, 0, 0),
    "cube root of CX": (Q / 3, 0, 0),
    "root of SWAP": (Q / 2, Q / 2, Q / 2),
    "fSim": (Q, Q, Q / 6),
    "over-rotated CZ": (Q * 0.97, 0, 0),
}


def dressed(points: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    left, right = (kron(haar_unitary(2, len(points), rng=rng), haar_unitary(2, len(points), rng=rng)) for _ in "ab")
    return left @ canonical_matrix(points) @ right


def clock(work: Callable[[], object]) -> float:
    times = []
    for _ in range(3):
        begun = time.process_time()
        work()
        times.append(time.process_time() - begun)
    return min(times)


def hard_points(entangler: object, size: int, rng: np.random.Generator) -> np.ndarray:
    """Vertices, edges, faces and insides of what each number of uses reaches, as they are and nearby."""
    points = []
    for polytope in entangler.reach:
        vertices = polytope.vertices
        for corners in (1, 2, 3, len(vertices)):
            weights = np.zeros((size, len(vertices)))
            for row in weights:
                chosen = rng.choice(len(vertices), min(corners, len(vertices)), replace=False)
                row[chosen] = rng.dirichlet(np.ones(len(chosen)))
            points.append(weights @ vertices)
    exact = np.concatenate(points)
    nearby = exact + 10.0 ** -rng.integers(1, 17, (len(exact), 1)) * rng.uniform(-1, 1, exact.shape)
    return np.concatenate([exact, nearby])


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--full", action="store_true")
    full = parser.parse_args().full
    size = 10**5 if full else 10**3
    rng = np.random.default_rng(1)
    bad = 0

    targets = haar_unitary(4, size, rng=rng)
    cz = classify(np.diag([1, 1, 1, -1]))
    cz.synthesise(targets[:10])
    floor = clock(lambda: cz.synthesise(targets)) / size
    print(f"{size} Haar-random targets a gate; CZ: {1 / floor:.3g} a second, ratio 1")
    print(
        f"{'gate':18}{'uses':>6}{'mean':>9}{'prepare ms':>12}{'a second':>10}{'to CZ':>7}{'error':>9}"
        f"{'hard':>8}{'error':>9}"
    )
    matrices = {name: dressed(np.array([point]), rng)[0] for name, point in GATES.items()}
    matrices |= {f"random {n}": haar_unitary(4, rng=n) for n in range(5)}
    for name, matrix in matrices.items():
        begun = time.process_time()
        entangler = classify(matrix)
        prepare = time.process_time() - begun
        entangler.synthesise(targets[:10])
        seconds = clock(lambda e=entangler: e.synthesise(targets)) / size
        circuit = entangler.synthesise(targets)
        error = float((distance(circuit.matrix(matrix), targets) - circuit.distance).max())
        hard = dressed(hard_points(entangler, max(10, size // 1000), rng), rng)
        made = entangler.synthesise(hard)
        worst = float((distance(made.matrix(matrix), hard) - made.distance).max())
        bad += error > 1e-12 or worst > 1e-12 or made.distance.max() > 2e-12
        print(
            f"{name:18}{len(entangler.reach) - 1:6}{circuit.uses.mean():9.4f}{1e3 * prepare:12.1f}{1 / seconds:10.3g}"
            f"{seconds / floor:7.1f}{error:9.1e}{len(hard):8}{worst:9.1e}"
        )

    left = 0
    for seed in range(20):
        generator = np.random.default_rng(seed)
        sequence = canonical_coordinates(haar_unitary(4, 2 + seed % 3, rng=generator))
        product = np.broadcast_to(np.eye(4, dtype=complex), (size // 20, 4, 4))
        for point in sequence:
            local = kron(haar_unitary(2, size // 20, rng=generator), haar_unitary(2, size // 20, rng=generator))
            product = canonical_matrix(point) @ local @ product
        found = canonical_coordinates(product)
        left += int((reached(sequence).excess(np.stack([found, other_image(found)])).min(axis=0) > 1e-13).sum())
    print(f"{size} random circuits, of which {left} left their polytope")

    def xx(angles: np.ndarray) -> np.ndarray:
        zero = np.zeros(len(angles))
        return canonical_matrix(np.stack([-angles[:, 0] / 2, zero, zero], axis=1))

    points = canonical_coordinates(targets[:2000])
    x, y, z = np.abs(points).T
    choice = least_cost(points, family_pieces(xx, [(-np.pi, np.pi)]))
    apart = float(np.abs(choice.cost / 2 - np.minimum(x + y + z, np.pi / 2 - x + y + z)).max())
    print(f"XX: mean {choice.cost.mean() / 2 / Q:.4f} CNOTs' worth, {apart:.1e} from the published least strength")
    return int(bool(bad or left or apart > 1e-12))


if __name__ == "__main__":
    sys.exit(main())
