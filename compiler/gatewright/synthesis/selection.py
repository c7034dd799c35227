"""Choosing the first of a list of sequences that reaches each target within a tolerance, and saying why none before.

Distances between classes are those of `gatewright.synthesis.controlled_not.class_distances`: 2 sin(s/2), s the sum of
the two largest absolute differences of coordinates, between the nearest images in the alcove.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.synthesis.polytopes import FORMS, ROUNDING, Polytope, other_image

__all__ = ["Selection", "inequality_text", "select", "violation_text"]

Vector = NDArray[np.float64]

_NAMES = "xyz"


@dataclass(frozen=True, slots=True, eq=False)
class Selection:
    """Which sequence makes each of N targets.

    Attributes
    ----------
    index : ndarray of int64, shape (N,)
        Of the polytope; -1 where none reaches the target.
    points : ndarray, shape (N, 3)
        What is made: a point of that polytope, the target's own image or the nearest point within the tolerance.
    turned : ndarray of bool, shape (N,)
        Whether that is the other image than was given.
    distance : ndarray, shape (N,)
        Operator-norm distance up to phase to the target; 0 where it is rounding.
    """

    index: NDArray[np.int64]
    points: Vector
    turned: NDArray[np.bool_]
    distance: Vector


def select(points: ArrayLike, polytopes: Sequence[Polytope], tolerance: float) -> Selection:
    """Return for each chamber point the first of the polytopes that is within `tolerance` of it.

    Parameters
    ----------
    points : array_like, shape (N, 3)
    polytopes : sequence of Polytope
        In order of preference.
    tolerance : float
        Operator norm up to phase.

    Examples
    --------
    >>> from gatewright.synthesis.polytopes import reached
    >>> by_uses = [reached([[np.pi / 8, np.pi / 8, 0]] * k) for k in range(4)]
    >>> select([[0, 0, 0], [0.7, 0.3, 0.2], [0.7, 0.7, 0.7]], by_uses, 1e-12).index.tolist()
    [0, 2, 3]
    """
    given = np.asarray(points, dtype=np.float64).reshape(-1, 3)
    images = np.stack([given, other_image(given)])
    index = np.full(len(given), -1, dtype=np.int64)
    made, turned, distance = given.copy(), np.zeros(len(given), dtype=bool), np.zeros(len(given))
    reach = 2 * np.arcsin(min(1.0, 0.5 * tolerance))
    open_ = np.arange(len(given))
    for number, polytope in enumerate(polytopes):
        if not len(open_):
            break
        if number == len(polytopes) - 1 and polytope.covers_all:
            # What it leaves open is no wider than rounding.
            reach = max(reach, 1e-11)
        rounding = max(ROUNDING, 1e-15 * polytope.uses)
        excess = polytope.excess(images[:, open_])
        image = np.argmin(excess, axis=0)
        least = np.take_along_axis(excess, image[None], axis=0)[0]
        inside = least <= rounding
        hit = open_[inside]
        index[hit], turned[hit] = number, image[inside] == 1
        made[hit] = images[image[inside], hit]
        for place in np.flatnonzero(~inside & (least <= reach)):
            target = open_[place]
            found = [(*polytope.nearest(images[i, target]), i) for i in (0, 1) if excess[i, place] <= reach]
            point, gap, i = min(found, key=lambda entry: entry[1])
            if gap <= reach:
                index[target], turned[target], made[target] = number, i == 1, point
                distance[target] = 2 * np.sin(0.5 * gap)
        open_ = open_[index[open_] < 0]
    distance[distance <= ROUNDING] = 0.0
    return Selection(index, made, turned, distance)


def inequality_text(form: ArrayLike, bound: float, *, digits: int = 6) -> str:
    """Return the inequality form · (x, y, z) ≥ bound as text, such as ``x + y - z >= 0.25``.

    Parameters
    ----------
    form : array_like, shape (3,)
        Its coefficients that are not 0 are ± the same number.
    bound : float

    Examples
    --------
    >>> inequality_text([1, 1, -1], 0.25), inequality_text([-2, 0, 0], -1.5)
    ('x + y - z >= 0.25', 'x <= 0.75')
    """
    form = np.asarray(form, dtype=np.float64)
    size = float(np.abs(form).max())
    form, bound = form / size, bound / size
    single = np.flatnonzero(form)
    if len(single) == 1:
        name, value = _NAMES[single[0]], bound + 0.0
        return f"{name} >= {value:.{digits}g}" if form[single[0]] > 0 else f"{name} <= {-value + 0.0:.{digits}g}"
    text = "".join(f" {'+' if c > 0 else '-'} {name}" for c, name in zip(form, _NAMES, strict=True) if c)
    text = text[3:] if text.startswith(" +") else "-" + text[3:]
    return f"{text} >= {bound + 0.0:.{digits}g}"


def violation_text(polytope: Polytope, point: ArrayLike) -> str:
    """Say which inequalities show that a sequence does not reach a class: one for each of its two images.

    Examples
    --------
    >>> from gatewright.synthesis.polytopes import reached
    >>> violation_text(reached([[np.pi / 4, 0, 0]] * 2), [0.5, 0.25, 0.125])
    'z <= 0 (z = 0.125); as (pi/2-x, y, -z): z >= 0 (z = -0.125)'
    """
    parts = []
    for image in (np.asarray(point, dtype=np.float64), other_image(point)):
        row, value, bound = polytope.violated(image)
        left = inequality_text(FORMS[row], bound).split(" >=")[0].split(" <=")[0]
        shown = value if np.count_nonzero(FORMS[row]) > 1 else value / 2 * np.sign(FORMS[row].sum())
        parts.append(f"{inequality_text(FORMS[row], bound)} ({left} = {shown:.6g})")
    return f"{parts[0]}; as (pi/2-x, y, -z): {parts[1]}"
