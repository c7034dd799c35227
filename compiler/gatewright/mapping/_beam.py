"""The compiled beam search over sequences of swaps: level by level, the most promising states are kept."""

# mypy: disable-error-code="no-untyped-def, untyped-decorator"
from __future__ import annotations

import numpy as np
from numba import njit

from gatewright.mapping._steps import (
    CLOCK,
    CURRENT,
    DONE,
    HEAD,
    MATE,
    OCCUPANT,
    OTHER,
    PENDING,
    POSITION,
    STACK,
    STALE,
    SWAPPED,
    WAITING,
    WAITS,
    advance,
    survey,
)

__all__ = ["beam"]

_A, _B = np.uint64(0x9E3779B97F4A7C15), np.uint64(0xBF58476D1CE4E5B9)
_S29, _S32 = np.uint64(29), np.uint64(32)


@njit(inline="always")
def _mark(wire, qubit, n):
    """Return a random number that stands for a wire on a qubit (Zobrist, 1970)."""
    z = np.uint64(wire * n + qubit + 1) * _A
    z ^= z >> _S29
    z *= _B
    z ^= z >> _S32
    return z


@njit(
    "Tuple((int64, int64, float64))(int32[:, ::1], int32[::1], int32[::1], int32[::1], float32[:, ::1],"
    "int32[::1], int32[::1], int32[::1], int16[:, ::1], float32[::1], float32[:, ::1], float32[::1], float64[::1],"
    "float64[::1], int32[:, :, :, ::1], int64[:, :, ::1], float64[:, :, :, ::1], int64[:, :, ::1], int64[::1],"
    "int32[:, ::1], int32[:, ::1], float64[:, ::1], uint64[:, ::1], int32[:, ::1], float64[:, ::1], uint64[::1],"
    "int64, int64)",
    cache=True,
    nogil=True,
)
def beam(
    lane, wires, offsets, entries, costs, starts, neighbours, twin, distance, weight, ahead, rise, terms,
    pull, states, dones, tallies, counters, events, parents, chosen, value, marks, options, hopes, seen, seeds, width,
):  # fmt: skip
    """Search from the first `seeds` states for the cheapest sequence of swaps that lets all operations run.

    A state's value is the sum of its distances ahead, less ``terms[0]`` for each gate done, plus its entanglers times
    ``terms[1]`` and its time times ``terms[3]``; the search goes on for ``terms[2]`` levels beyond the first that
    ends. Rows of `parents` and `chosen` say for each level where each state came from, and by which edge.

    Returns the level and number of the best that ends, -1 if none does, and its entanglers.
    """
    n = starts.shape[0] - 1
    n_all = states.shape[3]
    room = states.shape[1]
    fan = options.shape[1]
    swap = costs[costs.shape[0] - 1, 0]
    found_level = -1
    found = -1
    found_cost = 1e300
    found_value = 1e300
    last = parents.shape[0]
    n_children = seeds
    level = 0
    while level < last and n_children > 0:
        side = level & 1
        for c in range(n_children):
            state = states[side, c]
            done = dones[side, c]
            tally = tallies[side, c]
            counts = counters[side, c]
            top = n_all
            spent = 0.0
            if level == 0:
                marks[side, c] = np.uint64(0)
                for w in range(n):
                    marks[side, c] ^= _mark(w, state[POSITION, w], n)
                for w in range(n_all):
                    state[STACK, w] = w
                    state[PENDING, w] = 1
                    state[STALE, w] = 2
            else:
                parent = parents[level, c]
                old = states[1 - side, parent]
                for r in range(8):
                    for w in range(n_all):
                        state[r, w] = old[r, w]
                for w in range(n_all):
                    done[w] = dones[1 - side, parent, w]
                for r in range(3):
                    for w in range(n):
                        tally[r, w] = tallies[1 - side, parent, r, w]
                for r in range(4):
                    counts[r] = counters[1 - side, parent, r]
                i = chosen[level, c]
                q = neighbours[i]
                p = neighbours[twin[i]]
                u = state[OCCUPANT, p]
                v = state[OCCUPANT, q]
                marks[side, c] = (
                    marks[1 - side, parent] ^ _mark(u, p, n) ^ _mark(v, q, n) ^ _mark(u, q, n) ^ _mark(v, p, n)
                )
                state[OCCUPANT, p] = v
                state[OCCUPANT, q] = u
                state[POSITION, u] = q
                state[POSITION, v] = p
                late = max(tally[CLOCK, p], tally[CLOCK, q])
                begin = 0.0
                crossed = 0.0
                plain = swap
                if state[MATE, p] == q and state[MATE, q] == p:
                    begin = tally[CURRENT, p]
                    crossed = begin
                    plain = tally[OTHER, p]
                state[MATE, p] = q
                state[MATE, q] = p
                state[SWAPPED, p] = q
                state[SWAPPED, q] = p
                tally[CURRENT, p] = plain
                tally[CURRENT, q] = plain
                tally[OTHER, p] = crossed
                tally[OTHER, q] = crossed
                tally[CLOCK, p] = late + plain - begin
                tally[CLOCK, q] = late + plain - begin
                spent = value[1 - side, parent + room] + (plain - begin) * weight[i]
                state[STACK, 0] = u
                state[STACK, 1] = v
                state[PENDING, u] = 1
                state[PENDING, v] = 1
                top = 2
            spent += advance(
                lane, wires, offsets, entries, costs, starts, neighbours, distance, weight, top, events,
                state, done, tally, counts,
            )  # fmt: skip
            total = 0.0
            for w in range(n):
                total += survey(lane, starts, neighbours, distance, ahead, rise, pull, w, state, done)
            total = 0.5 * total - terms[0] * counts[DONE] + terms[1] * spent
            if terms[3] > 0.0:
                late = 0.0
                for p in range(n):
                    late = max(late, tally[CLOCK, p])
                total += terms[3] * late
            value[side, c] = total
            value[side, c + room] = spent
            for k in range(fan):
                hopes[c, k] = 1e300
            if counts[WAITING] == 0:
                goal = (
                    terms[4] * level + terms[1] * spent + terms[3] * late
                    if terms[3] > 0.0
                    else (terms[4] * level + terms[1] * spent)
                )
                if goal < found_value - 1e-9:
                    found_value = goal
                    found_cost = spent
                    found = c
                    if found_level < 0:
                        last = min(last, level + 1 + np.int64(terms[2]))
                    found_level = level
                value[side, c] = 1e300
                continue
            for k in range(counts[WAITING]):
                w = state[WAITS, k]
                p = state[POSITION, w]
                for i in range(starts[p], starts[p + 1]):
                    q = neighbours[i]
                    nearer = False
                    e = state[HEAD, w]
                    while e < lane[state[HEAD, w], 4]:
                        x = lane[e, 1]
                        if (
                            x >= 0
                            and not done[w] >> (e - state[HEAD, w]) & 1
                            and lane[e, 2] < lane[state[HEAD, x], 4]
                            and distance[q, state[POSITION, x]] < distance[p, state[POSITION, x]]
                        ):
                            nearer = True
                            break
                        e += 1
                    if not nearer or state[SWAPPED, p] == q and state[SWAPPED, q] == p:
                        continue
                    for h in range(fan):
                        if hopes[c, h] < 1e299 and options[c, h] == twin[i]:
                            nearer = False
                    if not nearer:
                        continue
                    share = swap
                    if state[MATE, p] == q and state[MATE, q] == p:
                        share = tally[OTHER, p] - tally[CURRENT, p]
                    hope = total + pull[i] + pull[twin[i]] + terms[1] * share * weight[i]
                    if terms[3] > 0.0:
                        hope += terms[3] * max(0.0, max(tally[CLOCK, p], tally[CLOCK, q]) + share - late)
                    if hope < hopes[c, fan - 1]:
                        h = fan - 1
                        while h > 0 and hopes[c, h - 1] > hope:
                            hopes[c, h] = hopes[c, h - 1]
                            options[c, h] = options[c, h - 1]
                            h -= 1
                        hopes[c, h] = hope
                        options[c, h] = i
        level += 1
        if level >= last:
            break
        # Keep the best `width` states, no two alike; of their swaps, the best `room`.
        kept = 0
        filled = 0
        while kept < width:
            best = 1e299
            b = -1
            for c in range(n_children):
                if value[side, c] < best:
                    best = value[side, c]
                    b = c
            if b < 0:
                break
            key = marks[side, b] ^ (np.uint64(counters[side, b, DONE]) * _B)
            slot = np.int64(key & np.uint64(seen.shape[0] - 1))
            while seen[slot] != key and seen[slot] != np.uint64(0):
                slot = (slot + 1) & (seen.shape[0] - 1)
            value[side, b] = 1e300
            if seen[slot] == key:
                continue
            seen[slot] = key
            kept += 1
            for k in range(fan):
                hope = hopes[b, k]
                if hope > 1e299:
                    break
                h = filled
                if filled < room:
                    filled += 1
                else:
                    h = room - 1
                    if hope >= hopes[room, h]:
                        continue
                while h > 0 and hopes[room, h - 1] > hope:
                    hopes[room, h] = hopes[room, h - 1]
                    parents[level, h] = parents[level, h - 1]
                    chosen[level, h] = chosen[level, h - 1]
                    h -= 1
                hopes[room, h] = hope
                parents[level, h] = b
                chosen[level, h] = options[b, k]
        n_children = filled
    return found_level, found, found_cost
