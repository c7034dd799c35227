"""Chains of arcs on the sphere: how far rotations about several axes tilt an axis, and the turns between them.

A rotation U that carries the axis n to an axis at an angle β is known up to rotations about n before and after it. A
product of such rotations, of tilts b₁ … b_p, with free rotations about n between them, draws a chain of arcs of these
lengths; the ends are β apart. Which β occur follows from the triangle inequality on the sphere, arc by arc; the turns
follow from the law of cosines in its half-angle form, which loses nothing where the chain is stretched or folded.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

__all__ = ["chain_reach", "corner", "polar", "product", "stations", "turned", "turning"]

Real: TypeAlias = NDArray[np.float64]

_PI = float(np.pi)


def chain_reach(links: Sequence[float]) -> tuple[float, float]:
    """Return the least and the greatest distance of the ends of a chain of arcs, each in [0, π]; all between occur.

    Examples
    --------
    >>> chain_reach([1.0, 0.25]), chain_reach([1.0, 0.25, 1.0])
    ((0.75, 1.25), (0.0, 2.25))
    """
    low = high = 0.0
    for link in links:
        top = _PI if low <= _PI - link <= high else max(min(s + link, 2 * _PI - s - link) for s in (low, high))
        low, high = max(0.0, link - high, low - link), top
    return low, high


def stations(links: Real, end: Real, fraction: float | Real = 0.5) -> Real:
    """Choose how far each point of a chain is from its start.

    Parameters
    ----------
    links : ndarray, shape (p, N)
        Arcs of each of N chains.
    end : ndarray, shape (N,)
        Distance of the ends, within reach.
    fraction : float or ndarray, shape (N,)
        Where in its interval each free distance is taken, from 0 to 1.

    Returns
    -------
    ndarray, shape (p, N)
        Distances from the start after 1, …, p arcs; the last is `end`.
    """
    p = len(links)
    low, high = np.zeros(links.shape), np.zeros(links.shape)
    low[0] = high[0] = links[0]
    for j in range(1, p):
        a, b, link = low[j - 1], high[j - 1], links[j]
        low[j] = np.maximum(0.0, np.maximum(link - b, a - link))
        over = (a <= _PI - link) & (_PI - link <= b)
        far = np.maximum(np.minimum(a + link, 2 * _PI - a - link), np.minimum(b + link, 2 * _PI - b - link))
        high[j] = np.where(over, _PI, far)
    out = np.empty(links.shape)
    out[-1] = end
    for j in range(p - 2, -1, -1):
        link, next_one = links[j + 1], out[j + 1]
        least = np.maximum(low[j], np.abs(next_one - link))
        most = np.minimum(high[j], np.minimum(next_one + link, 2 * _PI - next_one - link))
        out[j] = least + fraction * np.maximum(most - least, 0.0)
    return out


def corner(a: Real | float, b: Real | float, c: Real | float) -> Real:
    """Return the angle between the sides a and b of a spherical triangle, opposite c; the nearest, if there is none."""
    s = (np.asarray(a) + b + c) / 2
    sine = np.sin(s - a) * np.sin(s - b)
    cosine = np.sin(s) * np.sin(s - c)
    return np.asarray(2 * np.arctan2(np.sqrt(np.maximum(sine, 0.0)), np.sqrt(np.maximum(cosine, 0.0))))


def product(a: Real, b: Real) -> Real:
    """Multiply quaternions, shapes (4, ...); components (1, n, x, n × x) of a right-handed frame."""
    p, q, r, s = a
    w, x, y, z = b
    return np.stack(
        [
            p * w - q * x - r * y - s * z,
            p * x + q * w + r * z - s * y,
            p * y - q * z + r * w + s * x,
            p * z + q * y - r * x + s * w,
        ]
    )


def turning(axis: Real, angle: Real) -> Real:
    """Return quaternions, shape (4, ...), of rotations by `angle` about the unit vector `axis`, shape (3,)."""
    sine = np.sin(angle / 2)
    return np.stack([np.cos(angle / 2), *(component * sine for component in axis)])


def turned(q: Real, vector: Real) -> Real:
    """Return vectors, shape (3,) or (3, ...), turned by quaternions, shape (4, ...)."""
    v = vector if vector.ndim > 1 else vector.reshape(3, *[1] * (q.ndim - 1))
    t = 2 * np.cross(q[1:], np.broadcast_to(v, q[1:].shape), axis=0)
    return np.asarray(v + q[0] * t + np.cross(q[1:], t, axis=0))


def polar(q: Real) -> tuple[Real, Real, Real]:
    """Return α, β, γ with q = R_n(α) R_x(β) R_n(γ) up to sign, β in [0, π]; components of q along (1, n, x, n × x)."""
    sigma, delta = np.arctan2(q[1], q[0]), np.arctan2(q[3], q[2])
    return sigma + delta, 2 * np.arctan2(np.hypot(q[2], q[3]), np.hypot(q[0], q[1])), sigma - delta
