"""Compiled loops of routing: the greedy sweep, settling gates beside swaps, weaving in what is on one wire only.

The sweep is a heuristic search in the manner of Li, Ding and Xie, ASPLOS 2019, arXiv:1809.02573; see `_steps`.
"""

# mypy: disable-error-code="no-untyped-def, untyped-decorator"
from __future__ import annotations

import numpy as np
from numba import njit

from gatewright.mapping._steps import (
    CLOCK,
    CURRENT,
    DONE,
    EVENTS,
    HEAD,
    MATE,
    OCCUPANT,
    OTHER,
    PENDING,
    POSITION,
    SHAKEN,
    SPOT,
    STACK,
    STALE,
    SWAPPED,
    TOUCHED,
    WAITING,
    WAITS,
    advance,
    survey,
)

__all__ = ["settle", "sweep", "weave"]

#: Waiting wires looked at in turn for the one to be served next.
CROWD = 64

_MULTIPLIER = np.uint64(0x2545F4914F6CDD1D)  # xorshift64*: Vigna, ACM Trans. Math. Softw. 42, 30 (2016)
_S12, _S25, _S27, _S33 = np.uint64(12), np.uint64(25), np.uint64(27), np.uint64(33)

_STATE = "int32[:, ::1], int64[::1], float64[:, ::1], int64[::1]"


@njit(
    "Tuple((int64, float64, int64[::1]))(int32[:, ::1], int32[::1], int32[::1], int32[::1], float32[:, ::1],"
    "int32[::1], int32[::1], int32[::1], int16[:, ::1], float32[::1], float32[:, ::1], float32[::1], float64[::1],"
    "int64[::1], float64[::1], " + _STATE + ", int64[::1], int64, uint64, boolean)",
    cache=True,
    nogil=True,
)
def sweep(
    lane, wires, offsets, entries, costs, starts, neighbours, twin, distance, weight, ahead, rise, terms, script, pull,
    state, done, tally, counts, moved, patience, seed, record,
):  # fmt: skip
    """Run all operations from the placement in `state`, which is moved to where the wires end; see `Router.run`.

    A swap's score is what it changes in the sum of distances ahead, plus its entanglers times ``terms[0]``, plus
    ``terms[1]`` on qubits moved since the last gate ran. With ``terms[2]`` set, only the waiting gate whose qubits are
    free first is served, and brought nearer. Swaps of the `script` come first.

    Returns the number of swaps, the weighted entanglers, and the events: a gate, or ``-1 - (p*n + q)`` for a swap.
    """
    n = starts.shape[0] - 1
    total = costs.shape[0] - 1
    swap = costs[total, 0]
    events = np.empty(2 * total + 64 if record else 0, np.int64)
    top = state.shape[1]
    for w in range(top):
        state[STACK, w] = w
        state[PENDING, w] = 1
    n_swaps = fruitless = 0
    chased = served = -1
    spent = 0.0
    random = seed
    while True:
        before = counts[DONE]
        spent += advance(
            lane, wires, offsets, entries, costs, starts, neighbours, distance, weight, top, events,
            state, done, tally, counts,
        )  # fmt: skip
        if counts[WAITING] == 0:
            break
        if counts[DONE] > before:
            fruitless = 0
            chased = -1
        if record and counts[EVENTS] + total - counts[DONE] + 2 > events.shape[0]:
            grown = np.empty(2 * events.shape[0] + total, np.int64)
            for k in range(counts[EVENTS]):
                grown[k] = events[k]
            events = grown
        chosen = -1
        if n_swaps < script.shape[0]:
            p = script[n_swaps] // n
            q = script[n_swaps] - p * n
            for i in range(starts[p], starts[p + 1]):
                if neighbours[i] == q:
                    chosen = i
        else:
            n_list = counts[WAITING]
            a = b = -1
            if chased < 0 and fruitless > patience or terms[2] > 0.0:
                # Serve one gate: the closest of all in a livelock, else the one whose qubits are free first.
                least = 1e300
                turns = n_list
                if fruitless <= patience and n_list > CROWD:
                    turns = CROWD  # looking at all for every swap would take most of the time
                for _ in range(turns):
                    served += 1
                    if served >= n_list:
                        served = 0
                    w = state[WAITS, served]
                    p = state[POSITION, w]
                    e = state[HEAD, w]
                    head = e
                    stop = lane[e, 4]
                    while e < stop:
                        x = lane[e, 1]
                        if x >= 0 and not done[w] >> (e - head) & 1 and lane[e, 2] < lane[state[HEAD, x], 4]:
                            q = state[POSITION, x]
                            key = float(distance[p, q])
                            if fruitless <= patience:
                                key = 1e-3 * key + max(tally[CLOCK, p], tally[CLOCK, q])
                            if key < least:
                                least = key
                                a = w
                                b = x
                                if fruitless > patience:
                                    chased = e
                        e += 1
            if chased >= 0:  # lead it home
                if fruitless > patience and a >= 0:
                    moved[0] = a
                    moved[1] = b
                p = state[POSITION, moved[0]]
                home = state[POSITION, moved[1]]
                for i in range(starts[p], starts[p + 1]):
                    if distance[neighbours[i], home] < distance[p, home]:
                        chosen = i
            else:
                while counts[SHAKEN] > 0:
                    counts[SHAKEN] -= 1
                    w = state[TOUCHED, counts[SHAKEN]]
                    state[STALE, w] = 1
                    e = state[HEAD, w]
                    base = lane[e, 3]
                    while lane[e, 1] >= -1 and lane[e, 3] - base < ahead.shape[1]:
                        x = lane[e, 1]
                        if x >= 0 and state[STALE, x] == 0:
                            state[STALE, x] = 1
                        e += 1
                if a >= 0:
                    n_list = 2
                best = 1e300
                ties = 1
                near = 1 << 14
                for k in range(n_list):
                    w = state[WAITS, k]
                    if a >= 0:
                        w = a if k == 0 else b
                        near = distance[state[POSITION, a], state[POSITION, b]]
                    p = state[POSITION, w]
                    for i in range(starts[p] - 1, starts[p + 1]):
                        q = p if i < starts[p] else neighbours[i]
                        v = state[OCCUPANT, q]
                        if i >= starts[p]:
                            if a < 0 and state[SPOT, v] >= 0 and q < p:
                                continue  # seen from its other end
                            if a >= 0 and distance[q, state[POSITION, b if k == 0 else a]] >= near:
                                continue
                        if state[STALE, v]:
                            state[STALE, v] = 0
                            survey(lane, starts, neighbours, distance, ahead, rise, pull, v, state, done)
                        if i < starts[p]:
                            continue
                        share = swap
                        if state[MATE, p] == q and state[MATE, q] == p:
                            share = tally[OTHER, p] - tally[CURRENT, p]
                            if state[SWAPPED, p] == q:
                                continue  # would only undo the swap just made
                        score = pull[i] + pull[twin[i]] + terms[0] * share * weight[i]
                        if moved[2 + p] == counts[DONE] or moved[2 + q] == counts[DONE]:
                            score += terms[1]
                        if terms[3] > 0.0:
                            score += terms[3] * max(tally[CLOCK, p], tally[CLOCK, q])
                        if score < best - 1e-9:
                            best = score
                            chosen = i
                            ties = 1
                        elif score <= best + 1e-9:
                            ties += 1
                            random ^= random >> _S12
                            random ^= random << _S25
                            random ^= random >> _S27
                            if np.int64((random * _MULTIPLIER) >> _S33) % ties == 0:
                                chosen = i
        if chosen < 0:
            fruitless = patience + 1
            continue

        q = neighbours[chosen]
        p = neighbours[twin[chosen]]
        u = state[OCCUPANT, p]
        v = state[OCCUPANT, q]
        state[OCCUPANT, p] = v
        state[OCCUPANT, q] = u
        state[POSITION, u] = q
        state[POSITION, v] = p
        moved[2 + p] = counts[DONE]
        moved[2 + q] = counts[DONE]
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
        spent += (plain - begin) * weight[chosen]
        n_swaps += 1
        fruitless += 1
        if record:
            events[counts[EVENTS]] = -1 - (np.int64(p) * n + q)
            counts[EVENTS] += 1
        state[STACK, 0] = u
        state[STACK, 1] = v
        state[PENDING, u] = 1
        state[PENDING, v] = 1
        top = 2
    return n_swaps, spent, events[: counts[EVENTS]]


@njit(
    "int64(int64[::1], int32[::1], int32[::1], int32[::1], int32[::1], int32[::1], uint8[::1], int64[::1],int64[::1])",
    cache=True,
    nogil=True,
)
def weave(order, wires, offsets, groups, line, cursor, done, stack, events):
    """Put all operations into `order` (gates in a valid order, and negative codes) as late as possible.

    What stands in earlier groups on a gate's wires comes right before it; what is left comes last, in source order.
    `line` lists the slots (places in `wires`) of every wire, `groups` the group of each slot, `stack` begins with the
    operation of each slot. Returns the number of `events` written.
    """
    slots = wires.shape[0]
    filled = 0
    for k in range(order.shape[0] + done.shape[0]):
        g = order[k] if k < order.shape[0] else k - order.shape[0]
        if g < 0:
            events[filled] = g
            filled += 1
            continue
        if done[g]:
            continue
        top = slots
        stack[top] = g
        while top >= slots:
            g = stack[top]
            clear = True
            for j in range(offsets[g], offsets[g + 1]):
                c = cursor[wires[j]]
                while line[c] >= 0 and groups[line[c]] < groups[j]:
                    if not done[stack[line[c]]]:
                        clear = False
                        break
                    c += 1
                cursor[wires[j]] = c
                if not clear:
                    top += 1
                    stack[top] = stack[line[c]]
                    break
            if clear:
                top -= 1
                events[filled] = g
                filled += 1
                done[g] = 1
    return filled


@njit(
    "Tuple((float64, float64))(int64[::1], int64[::1], int32[::1], int32[::1], int32[::1], float32[:, ::1], int32[::1],"
    "int32[::1], float32[::1], int32[:, ::1], int32[:, ::1], int32[::1], int32[::1], float64[:, ::1])",
    cache=True,
    nogil=True,
)
def settle(
    events, settled, wires, offsets, groups, costs, starts, neighbours, weight, state, earlier, bound, waits, tally,
):  # fmt: skip
    """Put gates right before a swap of the same wires where they may be done then; copy `events` into `settled`.

    Rows of `state`: qubit of each wire, wire of each qubit, and two of -1; `bound` (like the gates) and `waits` (like
    the events) come as -1. A window that a barrier or measurement cuts counts as one.
    Returns the weighted entanglers, and their depth.
    """
    n = starts.shape[0] - 1
    m = costs.shape[0] - 1
    swap = costs[m, 0]
    most = costs[m, 1]
    for k in range(events.shape[0]):
        g = events[k]
        if g >= 0:
            first = offsets[g]
            earlier[g, 0] = state[2, wires[first]]
            earlier[g, 1] = state[2, wires[first + 1]]
            state[2, wires[first]] = g
            state[2, wires[first + 1]] = g
            continue
        p = (-1 - g) // n
        q = -1 - g - p * n
        u = state[1, p]
        v = state[1, q]
        state[1, p] = v
        state[1, q] = u
        top = state[2, u]
        other = state[2, v]
        h = top
        while h >= 0 and other >= 0:
            a = 0 if wires[offsets[h]] == u else 1
            b = 0 if wires[offsets[top]] == u else 1
            if groups[offsets[h] + a] != groups[offsets[top] + b]:
                break
            if wires[offsets[h] + 1 - a] == v:
                b = 0 if wires[offsets[other]] == v else 1
                if bound[h] < 0 and groups[offsets[h] + 1 - a] == groups[offsets[other] + b]:
                    bound[h] = k
                    waits[k] = h
                break
            h = earlier[h, a]
    filled = 0
    spent = 0.0
    for w in range(n):
        state[1, state[0, w]] = w
    for k in range(events.shape[0]):
        for turn in range(2):
            g = events[k]
            if turn == 0:
                if g >= 0 and bound[g] >= 0 or g < 0 and waits[k] < 0:
                    continue
                if g < 0:
                    g = waits[k]
            elif g >= 0:
                continue
            if g >= 0:
                p = np.int64(state[0, wires[offsets[g]]])
                q = np.int64(state[0, wires[offsets[g] + 1]])
            else:
                p = (-1 - g) // n
                q = -1 - g - p * n
            settled[filled] = g
            filled += 1
            begin = 0.0
            plain = swap if g < 0 else costs[g, 0]
            crossed = 0.0 if g < 0 else costs[g, 1]
            if state[3, p] == q and state[3, q] == p:
                begin = tally[0, p]
                if g < 0:
                    plain = tally[1, p]
                    crossed = begin
                elif tally[1, p] == 0.0:
                    plain = costs[g, 1]
                    crossed = costs[g, 0]
                elif begin > 0.0:
                    plain = min(most, plain + begin)
                    crossed = min(most, costs[g, 0] + tally[1, p])
            state[3, p] = q
            state[3, q] = p
            late = max(tally[2, p], tally[2, q]) + plain - begin
            for r in (p, q):
                tally[0, r] = plain
                tally[1, r] = crossed
                tally[2, r] = late
            i = starts[p]
            while neighbours[i] != q:
                i += 1
            spent += (plain - begin) * weight[i]
            if g < 0:
                u = state[1, p]
                v = state[1, q]
                state[1, p] = v
                state[1, q] = u
                state[0, u] = q
                state[0, v] = p
    late = 0.0
    for p in range(n):
        late = max(late, tally[2, p])
    return spent, late
