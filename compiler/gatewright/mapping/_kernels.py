"""Compiled loops of routing: running what can run, looking ahead, the greedy sweep, weaving.

The sweep is a heuristic search in the manner of Li, Ding and Xie, ASPLOS 2019, arXiv:1809.02573.

Every wire has a *line*: its operations in order, closed by a sentinel. An entry of `lane` holds the operation (-1 at
the end), the partner's wire of a two-qubit gate (-1 for any other operation, -2 at the end), where the gate is on the
partner's line, the ordinal of its group on the wire, and where the group stops. Operations of one group commute and
run in any order; a wire's state is the first entry of its group, how many of them are left and which are done.
Callers allocate the work arrays, and slices are not assigned to: both keep compilation short.
"""

# mypy: disable-error-code="no-untyped-def, untyped-decorator"
from __future__ import annotations

import numpy as np
from numba import njit

__all__ = [
    "CLOCK", "CURRENT", "DONE", "EVENTS", "GROUP", "HEAD", "LEFT", "MATE", "OCCUPANT", "OTHER", "PENDING", "POSITION", "ROWS",
    "SHAKEN", "SPOT", "STACK", "STALE", "SWAPPED", "TOUCHED", "WAITING", "WAITS", "advance", "survey", "sweep", "weave",
]  # fmt: skip

#: Rows of the integer state: per wire its qubit; per qubit its wire; per wire the head of its line, the operations left
#: in the head's group, its place in the list of waiting wires; that list; per qubit the other end of its open window,
#: and with which other it was swapped last, if nothing came after; per wire whether its outlook is stale, and whether it
#: is on the stack; the wires to be looked at again; the stack.
POSITION, OCCUPANT, HEAD, LEFT, SPOT, WAITS, MATE, SWAPPED, STALE, PENDING, TOUCHED, STACK, ROWS = range(13)
#: Rows of the float state: what a qubit's open window costs, what it would cost with its wires exchanged, the time.
CURRENT, OTHER, CLOCK = range(3)
#: Places in the counts.
WAITING, EVENTS, DONE, SHAKEN = range(4)
#: Operations of a group at most: their marks are the bits of one integer.
GROUP = 60

_MULTIPLIER = np.uint64(0x2545F4914F6CDD1D)  # xorshift64*: Vigna, ACM Trans. Math. Softw. 42, 30 (2016)
_S12, _S25, _S27, _S33 = np.uint64(12), np.uint64(25), np.uint64(27), np.uint64(33)
_ONE = np.int64(1)

_STATE = "int32[:, ::1], int64[::1], float64[:, ::1], int64[::1]"


@njit(inline="always")
def advance(
    lane, wires, offsets, entries, costs, starts, neighbours, distance, weight, top, events,
    state, done, tally, counts,
):  # fmt: skip
    """Run everything that can run, beginning at the `top` wires on the stack; return what it costs.

    `costs` has for each operation the entanglers it needs, and those it needs together with a swap; its last row has
    those of a swap alone, and the most that any window needs.
    """
    n = starts.shape[0] - 1
    most = costs[costs.shape[0] - 1, 1]
    record = events.shape[0] > 0
    spent = 0.0
    while top > 0:
        top -= 1
        w = state[STACK, top]
        state[PENDING, w] = 0
        if state[STALE, w] != 2:
            state[STALE, w] = 2
            state[TOUCHED, counts[SHAKEN]] = w
            counts[SHAKEN] += 1
        waits = False
        e = state[HEAD, w]
        stop = lane[e, 4]
        while e < stop:
            if done[w] >> (e - state[HEAD, w]) & 1:
                e += 1
                continue
            g = lane[e, 0]
            x = lane[e, 1]
            if x >= 0:
                c = lane[e, 2]
                if c >= lane[state[HEAD, x], 4]:
                    e += 1
                    continue
                p = state[POSITION, w]
                q = state[POSITION, x]
                if distance[p, q] != 1:
                    waits = True
                    if state[SPOT, x] < 0:
                        state[SPOT, x] = counts[WAITING]
                        state[WAITS, counts[WAITING]] = x
                        counts[WAITING] += 1
                        if state[STALE, x] != 2:
                            state[STALE, x] = 2
                            state[TOUCHED, counts[SHAKEN]] = x
                            counts[SHAKEN] += 1
                    e += 1
                    continue
                plain = costs[g, 0]
                crossed = costs[g, 1]
                begin = 0.0
                late = max(tally[CLOCK, p], tally[CLOCK, q])
                if state[MATE, p] == q and state[MATE, q] == p:
                    begin = tally[CURRENT, p]
                    if tally[OTHER, p] == 0.0:
                        plain = costs[g, 1]
                        crossed = costs[g, 0]
                    elif begin > 0.0:
                        plain = min(most, plain + begin)
                        crossed = min(most, costs[g, 0] + tally[OTHER, p])
                state[MATE, p] = q
                state[MATE, q] = p
                state[SWAPPED, p] = -1
                state[SWAPPED, q] = -1
                tally[CURRENT, p] = plain
                tally[CURRENT, q] = plain
                tally[OTHER, p] = crossed
                tally[OTHER, q] = crossed
                tally[CLOCK, p] = late + plain - begin
                tally[CLOCK, q] = late + plain - begin
                i = starts[p]
                while neighbours[i] != q:
                    i += 1
                spent += (plain - begin) * weight[i]
                counts[DONE] += 1
                if record:
                    events[counts[EVENTS]] = g
                    counts[EVENTS] += 1
            else:
                runs = True
                for j in range(offsets[g], offsets[g + 1]):
                    if entries[j] >= lane[state[HEAD, wires[j]], 4]:
                        runs = False
                        break
                if not runs:
                    e += 1
                    continue
            for j in range(offsets[g], offsets[g + 1]):
                y = wires[j]
                done[y] |= _ONE << (entries[j] - state[HEAD, y])
                state[LEFT, y] -= 1
                if x < 0 and y < n:
                    state[MATE, state[POSITION, y]] = -1
                if state[LEFT, y] == 0:
                    h = lane[state[HEAD, y], 4]
                    state[HEAD, y] = h
                    state[LEFT, y] = lane[h, 4] - h
                    done[y] = 0
                if y != w and state[PENDING, y] == 0:
                    state[PENDING, y] = 1
                    state[STACK, top] = y
                    top += 1
            e += 1
            if e - state[HEAD, w] > 0 and lane[state[HEAD, w], 4] == stop:
                continue
            e = state[HEAD, w]
            stop = lane[e, 4]
            waits = False
        if waits != (state[SPOT, w] >= 0):
            if waits:
                state[SPOT, w] = counts[WAITING]
                state[WAITS, counts[WAITING]] = w
                counts[WAITING] += 1
            else:
                counts[WAITING] -= 1
                y = state[WAITS, counts[WAITING]]
                state[WAITS, state[SPOT, w]] = y
                state[SPOT, y] = state[SPOT, w]
                state[SPOT, w] = -1
    return spent


@njit(inline="always")
def survey(lane, starts, neighbours, distance, ahead, rise, pull, w, state, done):
    """Fill `pull` on the edges of wire w: what moving w along each changes in the weighted sum of its distances ahead.

    Returns that sum, of distances beyond 1, as it is; a gate is as deep as it is on the later of its wires.
    """
    depths = ahead.shape[1]
    p = state[POSITION, w]
    first = starts[p]
    last = starts[p + 1]
    for i in range(first, last):
        pull[i] = 0.0
    total = 0.0
    e = state[HEAD, w]
    base = lane[e, 3] - (state[SPOT, w] < 0)
    stop = lane[e, 4]
    head = e
    while lane[e, 1] >= -1 and lane[e, 3] - base < depths:
        x = lane[e, 1]
        if x >= 0 and (e >= stop or not done[w] >> (e - head) & 1):
            h = state[HEAD, x]
            depth = max(lane[e, 3] - base, lane[lane[e, 2], 3] - lane[h, 3] + (state[SPOT, x] < 0))
            if depth < depths:
                home = state[POSITION, x]
                free = 1 if lane[e, 3] == lane[e + 1, 3] or lane[e, 3] == lane[e - 1, 3] else 0
                a = ahead[free, depth]
                d = rise[distance[home, p]]
                total += a * (d - rise[1])
                for i in range(first, last):
                    q = neighbours[i]
                    if q != home:
                        pull[i] += a * (rise[distance[home, q]] - d)
        e += 1
    return total


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
    total = 0
    for g in range(costs.shape[0] - 1):
        total += 1
    swap = costs[total, 0]
    events = np.empty(2 * total + 64 if record else 0, np.int64)
    top = state.shape[1]
    for w in range(top):
        state[STACK, w] = w
        state[PENDING, w] = 1
    n_swaps = fruitless = 0
    chased = -1
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
                for k in range(n_list):
                    w = state[WAITS, k]
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
