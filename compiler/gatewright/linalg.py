"""Linear algebra on stacks of small matrices: leading batch axes everywhere, inputs never modified.

Distances are taken up to global phase. Haar samples follow Mezzadri, Notices AMS 54, 592 (2007); the
average gate fidelity is that of Nielsen, Phys. Lett. A 303, 249 (2002).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import MatrixError, NotUnitaryError

__all__ = [
    "average_fidelity",
    "checked_unitary",
    "dagger",
    "distance",
    "embed",
    "haar_unitary",
    "kron",
    "nearest_unitary",
    "phase_between",
    "reorder_qubits",
    "unitarity_defect",
]

Array = NDArray[np.complex128]


def dagger(matrix: NDArray[Any]) -> NDArray[Any]:
    """Return the conjugate transpose over the last two axes."""
    return np.asarray(np.conj(np.swapaxes(matrix, -1, -2)))


def kron(first: ArrayLike, second: ArrayLike) -> Array:
    """Return the Kronecker product over the last two axes, `first` on the more significant qubits.

    Parameters
    ----------
    first, second : array_like, shapes (..., a, b) and (..., c, d)
        Stacks whose leading axes broadcast.

    Returns
    -------
    ndarray, shape (..., a*c, b*d)

    Examples
    --------
    >>> kron(np.diag([1, -1]), np.eye(2)).diagonal().real
    array([ 1.,  1., -1., -1.])
    """
    a = np.asarray(first, dtype=np.complex128)
    b = np.asarray(second, dtype=np.complex128)
    product = a[..., :, None, :, None] * b[..., None, :, None, :]
    rows, columns = a.shape[-2] * b.shape[-2], a.shape[-1] * b.shape[-1]
    return product.reshape(*product.shape[:-4], rows, columns)


def unitarity_defect(matrix: ArrayLike) -> NDArray[np.float64]:
    """Return the operator norm of U†U − 1 for each matrix of the stack."""
    u = np.asarray(matrix, dtype=np.complex128)
    gram = dagger(u) @ u - np.eye(u.shape[-1])
    return np.asarray(np.abs(np.linalg.eigvalsh(gram)).max(axis=-1))


def nearest_unitary(matrix: ArrayLike) -> Array:
    """Return the unitary nearest to each matrix in every unitarily invariant norm (the polar factor).

    References
    ----------
    Fan and Hoffman, Proc. AMS 6, 111 (1955).
    """
    left, _, right = np.linalg.svd(np.asarray(matrix, dtype=np.complex128))
    return np.asarray(left @ right)


def phase_between(first: ArrayLike, second: ArrayLike) -> NDArray[np.float64]:
    """Return φ such that ``exp(1j*φ) * second`` is closest to `first` in Frobenius norm (radians, 0 if undefined)."""
    a = np.asarray(first, dtype=np.complex128)
    b = np.asarray(second, dtype=np.complex128)
    return np.asarray(np.angle(np.sum(a * np.conj(b), axis=(-2, -1))))


def distance(first: ArrayLike, second: ArrayLike) -> NDArray[np.float64]:
    """Return the operator-norm distance between unitaries, minimised over the global phase.

    The eigenphases of ``second† first`` lie on the unit circle; the best phase is the middle of the shortest
    arc that holds them all, and the distance is ``2 sin(arc/4)``. Where the arc is short the eigenphases are
    replaced by singular values of the difference, which keeps full relative accuracy near zero.

    Parameters
    ----------
    first, second : array_like, shape (..., d, d)

    Returns
    -------
    ndarray, shape (...)

    Examples
    --------
    >>> float(distance(np.eye(2), 1j * np.eye(2))) < 1e-15
    True
    """
    a, b = np.broadcast_arrays(np.asarray(first, np.complex128), np.asarray(second, np.complex128))
    phases = np.sort(np.angle(np.linalg.eigvals(dagger(b) @ a)), axis=-1)
    gaps = np.diff(phases, axis=-1, append=phases[..., :1] + 2 * np.pi)
    widest = np.argmax(gaps, axis=-1)[..., None]
    arc = 2 * np.pi - np.take_along_axis(gaps, widest, axis=-1)[..., 0]
    start = np.take_along_axis(phases, (widest + 1) % phases.shape[-1], axis=-1)[..., 0]
    turned = np.exp(1j * (start + arc / 2))[..., None, None] * b
    return np.asarray(np.linalg.norm(a - turned, ord=2, axis=(-2, -1)))


def average_fidelity(first: ArrayLike, second: ArrayLike) -> NDArray[np.float64]:
    """Return the average gate fidelity (d + |tr(first† second)|²) / (d² + d) between unitaries."""
    a = np.asarray(first, dtype=np.complex128)
    b = np.asarray(second, dtype=np.complex128)
    d = a.shape[-1]
    overlap = np.abs(np.sum(np.conj(a) * b, axis=(-2, -1))) ** 2
    return np.asarray((d + overlap) / (d * d + d))


def haar_unitary(
    dimension: int, size: int | tuple[int, ...] = (), *, rng: np.random.Generator | int | None = None
) -> Array:
    """Draw unitaries from the Haar measure.

    Parameters
    ----------
    dimension : int
        Size of each matrix.
    size : int or tuple of int
        Leading axes.
    rng : numpy.random.Generator or int, optional
        Source of randomness, passed through `numpy.random.default_rng`.

    Returns
    -------
    ndarray, shape (*size, dimension, dimension)
    """
    generator = np.random.default_rng(rng)
    shape = (*((size,) if isinstance(size, int) else size), dimension, dimension)
    normal = generator.standard_normal(shape) + 1j * generator.standard_normal(shape)
    q, r = np.linalg.qr(normal)
    diagonal = np.diagonal(r, axis1=-2, axis2=-1)
    return np.asarray(q * (diagonal / np.abs(diagonal))[..., None, :])


def reorder_qubits(matrix: ArrayLike, order: tuple[int, ...]) -> Array:
    """Return each matrix with its qubits permuted: new qubit i is old qubit ``order[i]``.

    Examples
    --------
    >>> a, b = haar_unitary(2, 2, rng=1)
    >>> np.allclose(reorder_qubits(kron(a, b), (1, 0)), kron(b, a))
    True
    """
    u = np.asarray(matrix, dtype=np.complex128)
    n = len(order)
    batch = u.shape[:-2]
    tensor = u.reshape(*batch, *(2,) * (2 * n))
    k = len(batch)
    axes = (*range(k), *(k + q for q in order), *(k + n + q for q in order))
    return np.asarray(tensor.transpose(axes).reshape(u.shape))


def checked_unitary(
    matrix: ArrayLike, *, tolerance: float = 1e-12, nearest: bool = False, where: str = ""
) -> tuple[Array, float]:
    """Check one matrix from outside and return the unitary to compile.

    Parameters
    ----------
    matrix : array_like, shape (2**n, 2**n)
    tolerance : float
        Largest ‖U†U − 1‖ that is taken as rounding; never taken below 1e-12.
    nearest : bool
        Accept a matrix beyond the tolerance and use the unitary nearest to it.
    where : str
        Name to use in messages.

    Returns
    -------
    unitary : ndarray
        The unitary nearest to the input: the input itself where its defect is rounding (below 1e-13).
    moved : float
        Operator norm of input minus result.

    Raises
    ------
    MatrixError, NotUnitaryError
    """
    try:
        with np.errstate(over="ignore"):  # what is too large becomes infinite, and is refused below
            u = np.asarray(matrix, dtype=np.complex128)
    except (TypeError, ValueError, OverflowError):
        required = "a square array of complex numbers"
        raise MatrixError("not a matrix of numbers", required=required, where=where) from None
    if u.ndim != 2 or u.shape[0] != u.shape[1]:
        raise MatrixError(
            "the matrix is not square", required="2ⁿ rows and 2ⁿ columns", found=f"shape {u.shape}", where=where
        )
    size = u.shape[0]
    if size < 2 or size & (size - 1):
        raise MatrixError(
            "the matrix is not that of a whole number of qubits",
            required="a size that is a power of two, 2 or more",
            found=f"{size} × {size}",
            where=where,
        )
    if not np.isfinite(u).all():
        row, column = (int(i) for i in np.argwhere(~np.isfinite(u))[0])
        raise MatrixError(
            "the matrix has an entry that is not finite",
            required="finite numbers",
            found=f"{u[row, column]} in row {row}, column {column} (counted from 0)",
            where=where,
        )
    if np.abs(u).max() > 1e6:
        # Far beyond any rounding; and the products below stay free of overflow.
        raise NotUnitaryError(defect=float("inf"), distance=float("inf"), tolerance=max(tolerance, 1e-12), where=where)
    defect = float(unitarity_defect(u))
    if defect <= 1e-13:
        return u.copy(), 0.0
    unitary = nearest_unitary(u)
    moved = float(np.linalg.norm(u - unitary, ord=2))
    if defect > max(tolerance, 1e-12) and not nearest:
        raise NotUnitaryError(defect=defect, distance=moved, tolerance=max(tolerance, 1e-12), where=where)
    if moved > 0.999 and float(np.linalg.svd(u, compute_uv=False)[-1]) < 1e-6:
        raise MatrixError("the matrix is singular, and has no unitary nearest to it", required="full rank", where=where)
    return unitary, moved


def embed(matrices: Array, slots: list[int], width: int) -> Array:
    """Return `matrices` on `slots` of a window of `width` qubits."""
    rest = [slot for slot in range(width) if slot not in slots]
    wide = kron(matrices, np.eye(2 ** len(rest)))
    held = slots + rest
    return reorder_qubits(wide, tuple(held.index(slot) for slot in range(width)))
