"""Circuits on the facets of what a sequence of entanglers reaches: the subspaces that all their factors share there.

Equality in Σ_c δ = Σ_j Σ_{a_j} α_j − d π is attained where the product's eigenvectors c span, seen from factor j, the
basis vectors a_j (Agnihotri & Woodward, Math. Res. Lett. 5, 817 (1998)): every rotation between the factors maps one
set of basis vectors to the next, and does not mix it with the rest.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from gatewright.synthesis._kernels import SIGNS
from gatewright.synthesis._refine import PAIRS
from gatewright.synthesis.polytopes import FORMS, SETS, quantum_products, reached

__all__ = ["block_starts", "common_subspaces", "free_planes", "rotations_to_quaternions"]

Vector = NDArray[np.float64]
Labels = NDArray[np.int64]

#: Facets no further than this are tried, and so many chains of sets for each.
_NEAR = 0.05
_CHAINS = 6
_TIE = 1e-9


def common_subspaces(point: Vector, sequence: Vector) -> Iterator[tuple[float, Labels]]:
    """Find how the basis may split for a point near facets of what a sequence reaches.

    Parameters
    ----------
    point : ndarray, shape (3,)
    sequence : ndarray, shape (k, 3)

    Yields
    ------
    slack : float
        How far the facets are, at most.
    labels : ndarray of int, shape (k + 1, 4)
        Part to which each basis vector belongs: first for the product, then for the factors in order.
    """
    polytope = reached(sequence)
    slack = FORMS @ point - polytope.bounds
    rows = [int(row) for row in np.argsort(slack) if slack[row] < _NEAR]
    chains = {row: list(itertools.islice(_chains(row, sequence), _CHAINS)) for row in rows}
    singles = [(row, chain) for row in rows for chain in chains[row]]
    # All facets that touch and fit together, then fewer.
    touching = [entry for entry in singles if slack[entry[0]] < 1e-11]
    for chosen in (touching, *([entry] for entry in singles), *itertools.combinations(singles[:12], 2)):
        labels = np.zeros((len(sequence) + 1, 4), dtype=np.int64)
        worst = 0.0
        for row, chain in chosen:
            finer = 2 * labels
            for level, members in enumerate(chain):
                finer[level, [3 - i for i in SETS[members]]] += 1
            finer = np.searchsorted(np.unique(finer), finer)
            if (np.sort(finer, axis=1) == np.sort(finer[0])).all():
                labels, worst = finer, max(worst, float(slack[row]))
        if labels.any():
            yield worst, labels


def _chains(row: int, sequence: Vector) -> Iterator[tuple[int, ...]]:
    """Yield the sets (of the product, of factor 1, …, of factor k) whose sums give a bound."""
    first, second, result, degree = quantum_products()
    bounds = [reached(sequence[:count]).bounds for count in range(len(sequence) + 1)]

    def extend(target: int, count: int) -> Iterator[tuple[int, ...]]:
        if count == 0:
            if bounds[0][target] == 0.0:
                yield ()
            return
        at = np.flatnonzero(result == target)
        values = (FORMS @ sequence[count - 1])[first[at]] + bounds[count - 1][second[at]] - np.pi * degree[at]
        for n in at[values >= bounds[count][target] - _TIE]:
            for before in extend(int(second[n]), count - 1):
                yield (*before, int(first[n]))

    for chain in extend(row, len(sequence)):
        yield (row, *chain)


def block_starts(
    labels: Labels, phases: NDArray[np.complex128], target: Vector, rng: np.random.Generator, *, pool: int, keep: int
) -> Vector:
    """Return random quaternions of O_1 … O_{k−1} and R that map parts to parts, shape (keep, k, 2, 4).

    R diagonalises the product, and of `pool` circuits those with phases nearest to the target's are kept.
    """
    k = len(phases)
    rotations = np.zeros((pool, k, 4, 4))
    product = np.zeros((pool, 4, 4), dtype=np.complex128)
    product[:, range(4), range(4)] = phases[0]
    for j in range(1, k):
        for part in np.unique(labels[j]):
            source, goal = np.flatnonzero(labels[j] == part), np.flatnonzero(labels[j + 1] == part)
            blocks, _ = np.linalg.qr(rng.standard_normal((pool, len(source), len(source))))
            rotations[:, j - 1, goal[:, None], source] = blocks
        _make_proper(rotations[:, j - 1])
        product = phases[j][:, None] * (rotations[:, j - 1] @ product)
    square = np.swapaxes(product, 1, 2) @ product
    # Real and imaginary parts commute: any combination has the eigenvectors, and keeps the parts apart.
    _, vectors = np.linalg.eigh(np.cos(0.7) * square.real + np.sin(0.7) * square.imag)
    found = np.einsum("nij,nik,nkj->nj", vectors, square, vectors)
    part_of = labels[1][np.argmax(np.abs(vectors), axis=1)]
    orders = np.array(list(itertools.permutations(range(4))))
    apart = np.abs(found[:, orders] - np.exp(2j * target)).max(axis=2)
    apart[(part_of[:, orders] != labels[0]).any(axis=2)] = np.inf
    order = orders[np.argmin(apart, axis=1)]
    rotations[:, k - 1] = np.take_along_axis(vectors, order[:, None, :], axis=2)
    _make_proper(rotations[:, k - 1])
    best = np.argsort(apart.min(axis=1), kind="stable")[:keep]
    return rotations_to_quaternions(rotations[best].reshape(-1, 4, 4)).reshape(-1, k, 2, 4)


def _make_proper(rotations: Vector) -> None:
    rotations[:, :, 0] *= np.sign(np.linalg.det(rotations))[:, None]


def free_planes(labels: Labels) -> NDArray[np.bool_]:
    """Return which planes O_1 … O_{k−1} and R may turn in without mixing parts, shape (k, 6)."""
    levels = [*range(1, len(labels) - 1), 0]
    return np.array([[labels[level, p] == labels[level, q] for p, q in PAIRS] for level in levels])


def rotations_to_quaternions(rotations: Vector) -> Vector:
    """Return the pairs of quaternions (N, 2, 4) of rotations (N, 4, 4)."""
    outer = np.zeros((len(rotations), 4, 4))
    index = np.arange(4)
    for m in range(4):
        for n in range(4):
            outer[:, m, n] = 0.25 * (rotations[:, index ^ m ^ n, index] @ SIGNS[m, n])
    pivot = np.argmax((outer**2).sum(axis=1), axis=1)
    first = np.take_along_axis(outer, pivot[:, None, None], axis=2)[:, :, 0]
    first /= np.linalg.norm(first, axis=1, keepdims=True)
    second = np.einsum("nm,nmk->nk", first, outer)
    second /= np.linalg.norm(second, axis=1, keepdims=True)
    return np.stack([first, second], axis=1)
