"""Write angles as text that reads back to the same float: exact multiples of pi where they are, else decimals."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from gatewright.errors import CircuitError

__all__ = ["angle_texts"]

_DIVISORS = (*range(1, 65), *(2**k for k in range(7, 21)))
_LARGEST_FACTOR = 1024


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
    # Unique by bits, which keeps -0.0 apart from 0.0.
    bits, inverse = np.unique(given.view(np.int64), return_inverse=True)
    unique = bits.view(np.float64)
    texts = list(map(repr, unique.tolist()))
    size = np.abs(unique)
    for place in np.flatnonzero((size < 1e-3) | (size > 1e15)).tolist():
        texts[place] = _decimal(texts[place])
    rest = np.flatnonzero((size > 0) & (size <= _LARGEST_FACTOR * np.pi))
    angles, turns = unique[rest], unique[rest] / np.pi
    for divisor in _DIVISORS:
        factor = np.rint(turns * divisor)
        same = factor * np.pi / divisor == angles
        if not same.any():
            continue
        # In lowest terms only: 13*pi/13 is the neighbour of pi, and no better than its decimals.
        small = (factor != 0) & (np.abs(factor) <= _LARGEST_FACTOR)
        same[same] = small[same] & (np.gcd(factor[same].astype(np.int64), divisor) == 1)
        for place, k in zip(rest[same].tolist(), factor[same].astype(int).tolist(), strict=True):
            number = {1: "pi", -1: "-pi"}.get(k, f"{k}*pi")
            texts[place] = number if divisor == 1 else f"{number}/{divisor}"
        rest, angles, turns = rest[~same], angles[~same], turns[~same]
    return [texts[k] for k in inverse.tolist()]


def _decimal(text: str) -> str:
    """Return a float's repr as both versions spell it: OpenQASM 2 wants a point before an exponent."""
    if "e" in text and "." not in text:
        return text.replace("e", ".0e")
    return "0" if text == "0.0" else text
