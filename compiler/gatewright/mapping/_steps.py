"""Compiled parts of all searches for swaps: running what can run, and looking ahead; they are inlined where used.

Every wire has a *line*: its operations in order, closed by a sentinel. An entry of `lane` holds the operation (-1 at
the end), the partner's wire of a two-qubit gate (-1 for any other operation, -2 at the end), where the gate is on the
partner's line, the ordinal of its group on the wire, and where the group stops. Operations of one group commute and
run in any order; a wire's state is the first entry of its group, how many of them are left and which are done.
Callers allocate the work arrays, and slices are not assigned to: both keep compilation short. A change here needs a
change of date of `_kernels` and `_beam`: numba's cache looks at their files only.
"""

# mypy: disable-error-code="no-untyped-def, untyped-decorator"
from __future__ import annotations

import numpy as np
from numba import njit

__all__ = [
    "CLOCK",
    "CURRENT",
    "DONE",
    "EVENTS",
    "HEAD",
    "LEFT",
    "MATE",
    "OCCUPANT",
    "OTHER",
    "PENDING",
    "POSITION",
    "ROWS",
    "SHAKEN",
    "SPOT",
    "STACK",
    "STALE",
    "SWAPPED",
    "TOUCHED",
    "WAITING",
    "WAITS",
    "advance",
    "survey",
]

#: Rows of the integer state: per wire its qubit; per qubit its wire; per wire the head of its line, the operations left
#: in the head's group, its place in the list of waiting wires; that list; per qubit the other end of its open window,
#: and with which other it was swapped last, if nothing came after; per wire whether its outlook is stale, and whether
#: it is on the stack; the wires to be looked at again; the stack.
POSITION, OCCUPANT, HEAD, LEFT, SPOT, WAITS, MATE, SWAPPED, STALE, PENDING, TOUCHED, STACK, ROWS = range(13)
#: Rows of the float state: what a qubit's open window costs, what it would cost with its wires exchanged, the time.
CURRENT, OTHER, CLOCK = range(3)
#: Places in the counts.
WAITING, EVENTS, DONE, SHAKEN = range(4)

_ONE = np.int64(1)


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
