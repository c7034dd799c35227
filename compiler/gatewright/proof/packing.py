"""Pack the arrays of a proof into few bytes, exactly: what comes back is the same bit for bit.

- Numbers of windows, which grow along a circuit, are written as differences.
- Integers are written in the fewest bytes, all lowest bytes first, then the next: deflation does the rest.
- The source wires of slots follow from the places on which they enter and leave, and are written only if they do not.
- Of a seam, a unit quaternion, the largest component follows from the others up to rounding: only its sign and the
  difference in units of the last place are written.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "follow_wires",
    "pack_differences",
    "pack_integers",
    "pack_seams",
    "unpack_differences",
    "unpack_integers",
    "unpack_seams",
]

Array = NDArray[Any]
Bytes = NDArray[np.uint8]


def pack_integers(array: Array) -> Bytes:
    """Return integers as bytes, shape (size of each, count), lowest bytes first; negative ones are folded in between.

    Examples
    --------
    >>> pack_integers(np.array([0, -1, 1, 300])).tolist()
    [[0, 1, 2, 88], [0, 0, 0, 2]]
    """
    wide = array.astype(np.int64)
    folded = ((wide << 1) ^ (wide >> 63)).view(np.uint64)
    top = int(folded.max(initial=0))
    size = max(1, (top.bit_length() + 7) // 8)
    return np.ascontiguousarray(folded.astype("<u8").view(np.uint8).reshape(-1, 8)[:, :size].T)


def unpack_integers(planes: Bytes) -> NDArray[np.int64]:
    """Undo `pack_integers`."""
    whole = np.zeros((planes.shape[1], 8), dtype=np.uint8)
    whole[:, : planes.shape[0]] = planes.T
    folded = whole.view("<u8")[:, 0].astype(np.uint64)
    return np.asarray((folded >> np.uint64(1)).view(np.int64) ^ -(folded & np.uint64(1)).view(np.int64))


def pack_differences(array: Array) -> Bytes:
    """Return the differences of neighbours, packed."""
    return pack_integers(np.diff(array.astype(np.int64), prepend=0))


def unpack_differences(planes: Bytes) -> NDArray[np.int64]:
    """Undo `pack_differences`."""
    return np.cumsum(unpack_integers(planes))


def pack_seams(seams: NDArray[np.float64]) -> dict[str, Array]:
    """Return the parts of quaternions, shape (k, 4): see `unpack_seams`."""
    bits = np.ascontiguousarray(seams).view(np.int64)
    largest = np.argmax(np.abs(seams), axis=1) if len(seams) else np.zeros(0, dtype=np.int64)
    at = np.arange(len(seams)), largest
    negative = np.signbit(seams[at])
    kept = bits != 0
    kept[at] = False
    small = np.where(kept, seams, 0.0)
    with np.errstate(over="ignore"):
        steps = np.abs(seams[at]).view(np.int64) - _largest(small).view(np.int64)
    odd = np.abs(steps) > 100
    code = (kept << np.arange(4)).sum(axis=1) + (largest << 4) + (negative.astype(np.int64) << 6)
    return {
        "code": code.astype(np.uint8),
        "steps": np.where(odd, -128, steps).astype(np.int8),
        "small": seams[kept],
        "odd": np.abs(seams[at])[odd],
    }


def unpack_seams(parts: dict[str, Array]) -> NDArray[np.float64]:
    """Undo `pack_seams`.

    Parameters
    ----------
    parts : dict
        ``code``, a byte a quaternion: bits 0 to 3 say which components are written, bits 4 and 5 which is the
        largest, bit 6 whether that is negative; ``steps``, its difference from √(1 - the other squares) in units of
        the last place, -128 where it is written in ``odd`` instead; ``small``, the components written.

    Raises
    ------
    ValueError
        The parts do not fit together.
    """
    code = parts["code"].astype(np.int64)
    kept = (code[:, None] >> np.arange(4)) & 1 == 1
    largest = (code >> 4) & 3
    at = np.arange(len(code)), largest
    steps = parts["steps"].astype(np.int64)
    odd = steps == -128
    fits = len(parts["steps"]) == len(code) and np.count_nonzero(kept) == len(parts["small"])
    if not fits or np.count_nonzero(odd) != len(parts["odd"]) or (code > 127).any() or kept[at].any():
        raise ValueError("the parts of the seams do not fit together")
    seams = np.zeros((len(code), 4))
    seams[kept] = parts["small"]
    with np.errstate(over="ignore", invalid="ignore"):
        value = (_largest(seams).view(np.int64) + np.where(odd, 0, steps)).view(np.float64)
    value[odd] = parts["odd"]
    seams[at] = np.where((code >> 6) & 1 == 1, -value, value)
    return seams


def _largest(small: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return √(1 - squares of the others), in a fixed order of operations."""
    with np.errstate(over="ignore", invalid="ignore"):
        squares = small * small
        rest = 1.0 - ((squares[:, 0] + squares[:, 1]) + (squares[:, 2] + squares[:, 3]))
        return np.sqrt(np.where(rest > 0, rest, 0.0))


def follow_wires(initial: Array, entry: Array, leave: Array) -> NDArray[np.int32] | None:
    """Return the source wire of every slot, or None if slots do not leave where others enter.

    Parameters
    ----------
    initial : ndarray of int, shape (N,)
        Output wire of each source wire at the start.
    entry, leave : ndarray of int, shape (slots,)
        Output wires on which each slot enters and leaves, window by window.
    """
    if not np.array_equal(np.sort(initial), np.arange(len(initial))):
        return None
    into, out = np.argsort(entry, kind="stable"), np.argsort(leave, kind="stable")
    lane = entry[into]
    if not np.array_equal(lane, leave[out]):
        return None
    starts = np.ones(len(lane), dtype=bool)
    starts[1:] = lane[1:] != lane[:-1]
    before = np.arange(len(lane))
    before[into[1:]] = out[:-1]
    before[into[starts]] = into[starts]
    if (before > np.arange(len(lane))).any() or np.count_nonzero(before == np.arange(len(lane))) != starts.sum():
        return None
    while True:  # every round doubles how far back a slot looks
        further = before[before]
        if np.array_equal(further, before):
            break
        before = further
    wire = np.empty(len(initial), dtype=np.int32)
    wire[initial] = np.arange(len(initial))
    return wire[entry[before]]
