"""The compiled scanner of the plainest statements: calls of known gates on single qubits, with arithmetic.

It reads bytes and stops in front of anything else, so that it never has to complain. Decimal numbers are rounded
correctly: one operation where digits and power of ten are exact (Clinger, PLDI 1990), else a quotient in twice the
precision (Dekker, Numer. Math. 18, 224 (1971)) with Ziv's rounding test (ACM Trans. Math. Softw. 17, 410 (1991));
where that cannot tell, it stops.
"""

# mypy: disable-error-code="no-untyped-def, untyped-decorator, assignment"
from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["CONSTANT", "GATE", "MULTIPLIER", "QUBITS", "number", "scan"]

#: Kinds of names.
GATE, QUBITS, CONSTANT = 0, 1, 2

#: Of the hash of names.
MULTIPLIER = 31

_MOST_TOKENS = 60
_MOST_DIGITS = 19
_TEN = np.uint64(10)
_SPLIT = 134217729.0  # 2**27 + 1
_ZIV = 1 + 2.0**-40
_TAIL = 2.0**-59
_LARGEST = 1.7976931348623157e308
_CLASSES = np.zeros(256, dtype=np.uint8)  # 1 letter or _, 2 digit, 4 blank
_CLASSES[[*range(65, 91), *range(97, 123), 95]] = 1
_CLASSES[48:58] = 2
_CLASSES[[32, 9, 10]] = 4


@njit("Tuple((float64, int64))(uint8[::1], int64, float64[::1])", cache=True, nogil=True)
def number(text, i, tens):
    """Return the unsigned decimal number at `i` and the place behind it, or -1 where it cannot be told."""
    digits = np.uint64(0)
    count = 0  # significant digits
    exponent = 0
    seen = False
    lost = False
    point = False
    while True:
        c = text[i]
        if c == 46 and not point:
            point = True
            i += 1
            continue
        if c < 48 or c > 57:
            break
        seen = True
        if count < _MOST_DIGITS:
            digits = digits * _TEN + np.uint64(c - 48)
            count += 1 if digits else 0
            exponent -= 1 if point else 0
        else:
            lost |= c != 48
            exponent += 0 if point else 1
        i += 1
    if not seen:
        return 0.0, -1
    if c == 101 or c == 69:
        i += 1
        sign = 1
        if text[i] == 43 or text[i] == 45:
            sign = 44 - np.int64(text[i])
            i += 1
        if text[i] < 48 or text[i] > 57:
            return 0.0, -1
        size = 0
        while 48 <= text[i] <= 57:
            size = min(size * 10 + text[i] - 48, 100_000)
            i += 1
        exponent += sign * size
    if _CLASSES[text[i]] & 3 or text[i] == 46:
        return 0.0, -1
    high = np.float64(digits)
    if digits == 0:
        return 0.0, i
    if lost or exponent < -22 or exponent > 22:
        if not lost or exponent < -22 or exponent >= 0:
            return 0.0, -1
    elif exponent == 0:
        return high, i
    elif digits <= np.uint64(9007199254740992):
        return (high * tens[exponent] if exponent > 0 else high / tens[-exponent]), i
    elif exponent > 0:
        return 0.0, -1
    below = tens[-exponent]
    low = np.float64(np.int64(digits - np.uint64(high)))
    first = high / below
    t = _SPLIT * first
    a = t - (t - first)
    b = first - a
    t = _SPLIT * below
    x = t - (t - below)
    y = below - x
    product = first * below
    error = ((a * x - product) + a * y + b * x) + b * y
    second = ((high - product) - error + low) / below
    value = first + second
    rest = (first - value) + second
    tail = value * _TAIL if lost else 0.0
    if value + (rest * _ZIV + tail) != value or value + (rest * _ZIV - tail) != value:
        return 0.0, -1
    return value, i


@njit("int64(uint8[::1], int64, int64, uint8[::1], int32[::1], int64[:, ::1])", cache=True, nogil=True)
def find(text, start, end, pool, slots, entries):
    """Return the entry of the name between two places, or -1."""
    h = 0
    for i in range(start, end):
        h = (h * MULTIPLIER + text[i]) & 0xFFFFFFFF
    mask = slots.shape[0] - 1
    at = h & mask
    while slots[at] >= 0:
        e = slots[at]
        if entries[e, 1] == end - start:
            same = True
            for k in range(end - start):
                if pool[entries[e, 0] + k] != text[start + k]:
                    same = False
                    break
            if same:
                return e
        at = (at + 1) & mask
    return -1


@njit(
    "int64(uint8[::1], int64, uint8[::1], int32[::1], int64[:, ::1], float64[::1], float64[::1], int64,"
    "int32[::1], int32[::1], float64[::1], float64[::1], int64[::1], int64[::1])",
    cache=True,
    nogil=True,
)
def scan(
    text, stop, pool, slots, entries, constants, tens, physical, op, qubits, parameters, values, waiting, state
):  # fmt: skip
    """Read statements into the columns; return 1 if these are full, else 0.

    `state` holds the place in the text, and how much of `op`, `qubits` and `parameters` is filled. The byte in front
    of `stop` is a semicolon.
    """
    i, n, q, p = state[0], state[1], state[2], state[3]
    full = 0
    while i < stop:
        while _CLASSES[text[i]] == 4:
            i += 1
        start = i
        if _CLASSES[text[i]] != 1:
            break
        while _CLASSES[text[i]] & 3:
            i += 1
        e = find(text, start, i, pool, slots, entries)
        if e < 0 or entries[e, 2] != GATE:
            break
        n_qubits, n_parameters = entries[e, 4], entries[e, 5]
        if n == op.shape[0] or q + n_qubits > qubits.shape[0] or p + n_parameters > parameters.shape[0]:
            full = 1
            break
        while _CLASSES[text[i]] == 4:
            i += 1
        good = True
        r = -1
        if n_parameters:
            good = text[i] == 40
            k = 0
            while good and k < n_parameters:
                i += 1
                # One expression, by Dijkstra's shunting yard: 0 is a parenthesis, 1 to 4 are + - * /, 5 is a sign.
                v = w = tokens = 0
                due = True  # a value
                while good:
                    while _CLASSES[text[i]] == 4:
                        i += 1
                    c = text[i]
                    tokens += 1
                    good = tokens < _MOST_TOKENS
                    if due:
                        if c == 40 or c == 45:
                            waiting[w] = 0 if c == 40 else 5
                            w += 1
                            i += 1
                        elif c == 43:
                            good = good and text[i - 1] != 43  # '++' is a symbol of its own
                            i += 1
                        elif _CLASSES[c] == 1:
                            first = i
                            while _CLASSES[text[i]] & 3:
                                i += 1
                            r = find(text, first, i, pool, slots, entries)
                            good = good and r >= 0 and entries[r, 2] == CONSTANT
                            if good:
                                values[v] = constants[entries[r, 3]]
                                v += 1
                            due = False
                        else:
                            value, after = number(text, i, tens)
                            good = good and 0 <= after and value <= _LARGEST
                            if good:
                                values[v] = value
                                v += 1
                                i = after
                            due = False
                        continue
                    rank = 0
                    sign = 0
                    if c == 43 or c == 45:
                        rank, sign = 1, 1 if c == 43 else 2
                    elif c == 42 or c == 47:
                        rank, sign = 2, 3 if c == 42 else 4
                    while good and w > 0 and waiting[w - 1] > 0 and (waiting[w - 1] + 1) // 2 >= rank:
                        w -= 1
                        symbol = waiting[w]
                        if symbol == 5:
                            values[v - 1] = -values[v - 1]
                            continue
                        v -= 1
                        x = values[v - 1]
                        y = values[v]
                        if symbol == 1:
                            x += y
                        elif symbol == 2:
                            x -= y
                        elif symbol == 3:
                            x *= y
                        elif y != 0.0:
                            x /= y
                        else:
                            good = False
                        good = good and -_LARGEST <= x <= _LARGEST
                        values[v - 1] = x
                    if rank:
                        i += 1
                        waiting[w] = sign
                        w += 1
                        due = True
                    elif c == 41 and w > 0:
                        w -= 1
                        i += 1
                    else:
                        break
                good = good and w == 0 and text[i] == (44 if k < n_parameters - 1 else 41)
                if good:
                    parameters[p + k] = values[0]
                k += 1
            i += 1
        k = 0
        while good and k < n_qubits:
            while _CLASSES[text[i]] == 4:
                i += 1
            span, size = 0, physical
            numbered = text[i] == 36  # a physical qubit
            if not numbered:
                first = i
                while _CLASSES[text[i]] & 3:
                    i += 1
                r = find(text, first, i, pool, slots, entries) if i > first else -1
                if r < 0 or entries[r, 2] != QUBITS:
                    good = False
                    break
                span, size = entries[r, 3], entries[r, 4]
                while _CLASSES[text[i]] == 4:
                    i += 1
            at = 0
            if numbered or entries[r, 5] == 0:
                good = numbered or text[i] == 91
                i += 1
                while not numbered and _CLASSES[text[i]] == 4:
                    i += 1
                first = i
                while _CLASSES[text[i]] == 2 and i - first < 10:
                    at = at * 10 + text[i] - 48
                    i += 1
                good = good and i > first and at < size
                while _CLASSES[text[i]] == 4:
                    i += 1
                if not numbered:
                    good = good and text[i] == 93
                    i += 1
                    while _CLASSES[text[i]] == 4:
                        i += 1
            qubits[q + k] = span + at
            for j in range(k):
                good = good and qubits[q + j] != span + at
            k += 1
            good = good and text[i] == (44 if k < n_qubits else 59)
            i += 1
        if not good:
            break
        op[n] = entries[e, 3]
        n += 1
        q += n_qubits
        p += n_parameters
        state[0] = i
    state[1], state[2], state[3] = n, q, p
    return full
