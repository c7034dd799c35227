"""Write angles as text that reads back to the same float: exact multiples of pi where they are, else decimals."""

from __future__ import annotations

import math
from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.errors import CircuitError

__all__ = ["angle_texts"]

_DIVISORS = (*range(1, 65), *(2**k for k in range(7, 21)))
_LARGEST_FACTOR = 1024

#: So many angles tell whether they repeat.
_SAMPLE = 1024


def _common_multiples(divisors: Iterable[int], limit: int) -> tuple[int, ...]:
    """Return a few numbers below a limit such that each divisor divides one of them."""
    made: list[int] = []
    for divisor in divisors:
        for k, known in enumerate(made):
            if math.lcm(known, divisor) < limit:
                made[k] = math.lcm(known, divisor)
                break
        else:
            made.append(divisor)
    return tuple(made)


_COMMON = _common_multiples(_DIVISORS, 2**40)


def angle_texts(values: ArrayLike) -> list[str]:
    """Return the text of each angle: a multiple of pi where that is the same float when read, else a decimal.

    Raises
    ------
    CircuitError
        If an angle is not finite.

    Examples
    --------
    >>> angle_texts([0.0, np.pi, -3 * np.pi / 8, 0.1, 1e-7])
    ['0', 'pi', '-3*pi/8', '0.1', '1.0e-07']
    """
    given = np.asarray(values, dtype=np.float64).ravel()
    if not np.isfinite(given).all():
        raise CircuitError("an angle is not finite", required="finite angles", found=str(given[~np.isfinite(given)][0]))
    bits = given.view(np.int64)
    if len(np.unique(bits[:_SAMPLE])) > 0.9 * min(len(bits), _SAMPLE):
        return _texts(given)
    # Unique by bits, which keeps -0.0 apart from 0.0.
    unique, inverse = np.unique(bits, return_inverse=True)
    texts = _texts(unique.view(np.float64))
    return [texts[k] for k in inverse.tolist()]


def _texts(angles: NDArray[np.float64]) -> list[str]:
    """Return the text of each angle, all of them finite."""
    texts = list(map(repr, angles.tolist()))
    size = np.abs(angles)
    for place in np.flatnonzero((size < 1e-3) | (size > 1e15)).tolist():
        texts[place] = _decimal(texts[place])
    rest = np.flatnonzero((size > 0) & (size <= _LARGEST_FACTOR * np.pi))
    rest = rest[_near_fractions(angles[rest] / np.pi)]
    left, turns = angles[rest], angles[rest] / np.pi
    for divisor in _DIVISORS:
        factor = np.rint(turns * divisor)
        same = factor * np.pi / divisor == left
        if not same.any():
            continue
        # In lowest terms only: 13*pi/13 is the neighbour of pi, and no better than its decimals.
        small = (factor != 0) & (np.abs(factor) <= _LARGEST_FACTOR)
        same[same] = small[same] & (np.gcd(factor[same].astype(np.int64), divisor) == 1)
        for place, k in zip(rest[same].tolist(), factor[same].astype(int).tolist(), strict=True):
            number = {1: "pi", -1: "-pi"}.get(k, f"{k}*pi")
            texts[place] = number if divisor == 1 else f"{number}/{divisor}"
        rest, left, turns = rest[~same], left[~same], turns[~same]
    return texts


def _near_fractions(turns: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Return which numbers may be fractions with one of the divisors, for rounding; few others are among them."""
    near = np.zeros(len(turns), dtype=np.bool_)
    for common in _COMMON:
        scaled = np.abs(turns * common)
        near |= np.abs(scaled - np.rint(scaled)) <= scaled * 2.0**-50
    return near


def _decimal(text: str) -> str:
    """Return a float's repr as both versions spell it: OpenQASM 2 wants a point before an exponent."""
    if "e" in text and "." not in text:
        return text.replace("e", ".0e")
    return "0" if text == "0.0" else text
