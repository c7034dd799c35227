"""Compiled loops of placement and routing: operation links, the SABRE sweep, weaving, graph embedding.

The sweep follows Li, Ding and Xie, ASPLOS 2019, arXiv:1809.02573 (front layer, extended set, decay).
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["link", "sweep", "weave"]

_MULTIPLIER = np.uint64(0x2545F4914F6CDD1D)
_S12, _S25, _S27, _S33 = np.uint64(12), np.uint64(25), np.uint64(27), np.uint64(33)


@njit("Tuple((int32[::1], int32[::1], int32[::1], int32[::1]))(int32[::1], int32[::1], int64)", cache=True, nogil=True)
def link(wires, offsets, n_all):
    """Return the owner of each slot, the next and the previous slot on its wire, and each operation's layer."""
    m, n_slots = offsets.shape[0] - 1, wires.shape[0]
    owner = np.empty(n_slots, np.int32)
    after = np.full(n_slots, -1, np.int32)
    before = np.full(n_slots, -1, np.int32)
    layer = np.zeros(m, np.int32)
    last = np.full(n_all, -1, np.int32)
    for g in range(m):
        for j in range(offsets[g], offsets[g + 1]):
            owner[j] = g
            earlier = last[wires[j]]
            if earlier >= 0:
                before[j] = earlier
                after[earlier] = j
                layer[g] = max(layer[g], layer[owner[earlier]] + 1)
        for j in range(offsets[g], offsets[g + 1]):
            last[wires[j]] = j
    return owner, after, before, layer


@njit(
    "Tuple((int64, int64, float64, int64[::1]))(int32[::1], int32[::1], int32[::1], int32[::1], uint8[::1], int64,"
    "int32[::1], int32[::1], int16[:, ::1], float32[:, ::1], int32[::1], float64[::1], uint64, boolean)",
    cache=True,
    nogil=True,
)
def sweep(
    wires,
    offsets,
    owner,
    onward,
    coupled,
    n_all,
    starts,
    neighbours,
    distance,
    weight,
    position,
    settings,
    state,
    record,
):
    """Run one pass over the operations in the direction of `onward`; `position` is moved to where the wires end.

    Returns the number of swaps, how many of them merge with the gate beside them, the weighted cost in
    entanglers, and (when `record`) the events: an operation, or ``-1 - (p*N + q)`` for a swap of p and q.
    """
    n, m = starts.shape[0] - 1, offsets.shape[0] - 1
    n_ahead_max, patience_max = int(settings[0]), int(settings[1])
    ahead_weight, fading, decay_step, price = settings[2], settings[3], settings[4], settings[5]
    weighted = weight.shape[0] > 0
    occupant = np.empty(n, np.int32)
    for w in range(n):
        occupant[position[w]] = w
    waiting = np.zeros(m, np.int32)
    for j in range(onward.shape[0]):
        if onward[j] >= 0:
            waiting[owner[onward[j]]] += 1

    front = np.empty(n, np.int32)  # blocked gates, and per wire: its blocked gate, its partner, its place in the list
    blocked = np.full(n, -1, np.int32)
    partner = np.full(n, -1, np.int32)
    spot = np.empty(n, np.int32)
    n_front = 0

    stack = np.empty(n_all + 1, np.int32)
    seen = np.zeros(m, np.int32)
    stamp = 0
    queue = np.empty(n_all + 4 * n_ahead_max, np.int32)
    level = np.empty(n_all + 4 * n_ahead_max, np.int32)
    head = np.full(n, -1, np.int32)  # per wire, the list of its gates in the extended set
    touched = np.empty(2 * n_ahead_max, np.int32)
    chain = np.empty(2 * n_ahead_max, np.int32)
    ahead_partner = np.empty(2 * n_ahead_max, np.int32)
    ahead_value = np.empty(2 * n_ahead_max, np.float64)
    n_ahead = 0

    mate = np.full(n, -1, np.int32)  # last partner of a qubit: q after a gate, -2-q after a swap, -1 after neither
    decay = np.zeros(n, np.float64)
    recent = np.empty((patience_max + 1, 4), np.int32)
    n_recent = 0
    forced = -1

    events = np.empty(2 * m + 16 if record else 0, np.int64)
    n_events = n_swaps = n_merged = 0
    cost = 0.0
    cursor = 0
    top = 0
    stale = True
    stuck = False
    while True:
        # Everything that can run, runs.
        while True:
            if top == 0:
                while cursor < m and waiting[cursor] != 0:
                    cursor += 1
                if cursor == m:
                    break
                waiting[cursor] = -1
                stack[0] = cursor
                top = 1
                cursor += 1
            top -= 1
            g = stack[top]
            waiting[g] = -1
            start, stop = offsets[g], offsets[g + 1]
            if coupled[g]:
                a, b = wires[start], wires[start + 1]
                p, q = position[a], position[b]
                if distance[p, q] != 1:
                    blocked[a] = blocked[b] = g
                    partner[a], partner[b] = b, a
                    spot[a] = spot[b] = n_front
                    front[n_front] = g
                    n_front += 1
                    stale = True
                    continue
                mate[p], mate[q] = q, p
                cost += weight[p, q] if weighted else 1.0
                for k in range(n_recent):
                    decay[recent[k, 0]] = decay[recent[k, 1]] = 0.0
                n_recent = 0
                if record:
                    if n_events == events.shape[0]:
                        grown = np.empty(2 * n_events, np.int64)
                        for k in range(n_events):
                            grown[k] = events[k]
                        events = grown
                    events[n_events] = g
                    n_events += 1
            else:
                for j in range(start, stop):
                    if wires[j] < n:
                        mate[position[wires[j]]] = -1
            for j in range(start, stop):
                if onward[j] >= 0:
                    h = owner[onward[j]]
                    waiting[h] -= 1
                    if waiting[h] == 0:
                        stack[top] = h
                        top += 1
        if n_front == 0:
            break

        if stale:  # the extended set: the nearest successors of the front layer, level by level
            stale = False
            for k in range(2 * n_ahead):
                head[touched[k]] = -1
            n_ahead = 0
            stamp += 1
            filled = 0
            for k in range(n_front):
                queue[filled], level[filled] = front[k], 0
                filled += 1
            k = 0
            total = 0.0
            while k < filled and n_ahead < n_ahead_max:
                g, depth = queue[k], level[k]
                k += 1
                for j in range(offsets[g], offsets[g + 1]):
                    s = onward[j]
                    if s < 0:
                        continue
                    h = owner[s]
                    if seen[h] == stamp:
                        continue
                    seen[h] = stamp
                    if filled < queue.shape[0]:
                        queue[filled], level[filled] = h, depth + 1
                        filled += 1
                    if coupled[h] and n_ahead < n_ahead_max:
                        a, b = wires[offsets[h]], wires[offsets[h] + 1]
                        value = fading**depth
                        total += value
                        c = 2 * n_ahead
                        touched[c], touched[c + 1] = a, b
                        ahead_partner[c], ahead_partner[c + 1] = b, a
                        ahead_value[c] = ahead_value[c + 1] = value
                        chain[c], head[a] = head[a], c
                        chain[c + 1], head[b] = head[b], c + 1
                        n_ahead += 1
            if total > 0.0:
                for c in range(2 * n_ahead):
                    ahead_value[c] *= ahead_weight * n_front / total

        if n_recent >= patience_max or stuck:  # livelock: take the fruitless swaps back and lead the closest gate home
            while n_recent > 0:
                n_recent -= 1
                p, q = recent[n_recent, 0], recent[n_recent, 1]
                u, v = occupant[p], occupant[q]
                occupant[p], occupant[q], position[u], position[v] = v, u, q, p
                mate[p], mate[q] = recent[n_recent, 2], recent[n_recent, 3]
                decay[p] = decay[q] = 0.0
                share = weight[p, q] if weighted else 1.0
                merges = mate[p] == q and mate[q] == p
                cost -= share if merges else 3.0 * share
                n_merged -= merges
                n_swaps -= 1
                n_events -= 1
            stuck = False
            nearest = 1 << 30
            for k in range(n_front):
                a = wires[offsets[front[k]]]
                d = distance[position[a], position[partner[a]]]
                if d < nearest:
                    nearest, forced = d, front[k]

        best_p = best_q = -1
        if forced >= 0:
            a = wires[offsets[forced]]
            best_p, target = position[a], position[partner[a]]
            for i in range(starts[best_p], starts[best_p + 1]):
                if distance[neighbours[i], target] == distance[best_p, target] - 1:
                    best_q = neighbours[i]
                    break
        else:
            best = 1e300
            ties = 1
            for k in range(2 * n_front):
                u = wires[offsets[front[k >> 1]] + (k & 1)]
                p = position[u]
                home = position[partner[u]]
                for i in range(starts[p], starts[p + 1]):
                    q = neighbours[i]
                    v = occupant[q]
                    x = blocked[v]
                    if x >= 0 and q < p:
                        continue  # seen from the other end
                    if mate[p] == -2 - q and mate[q] == -2 - p:
                        continue  # would only undo the swap just made
                    score = float(distance[q, home] - distance[p, home])
                    if x >= 0:
                        other = position[partner[v]]
                        score += distance[p, other] - distance[q, other]
                    c = head[u]
                    while c >= 0:
                        x = ahead_partner[c]
                        if x != v:
                            score += ahead_value[c] * (distance[q, position[x]] - distance[p, position[x]])
                        c = chain[c]
                    c = head[v]
                    while c >= 0:
                        x = ahead_partner[c]
                        if x != u:
                            score += ahead_value[c] * (distance[p, position[x]] - distance[q, position[x]])
                        c = chain[c]
                    share = weight[p, q] if weighted else 1.0
                    score += price * (share if mate[p] == q and mate[q] == p else 3.0 * share)
                    score += max(decay[p], decay[q])
                    if score < best - 1e-9:
                        best, best_p, best_q, ties = score, p, q, 1
                    elif score <= best + 1e-9:
                        ties += 1
                        state ^= state >> _S12
                        state ^= state << _S25
                        state ^= state >> _S27
                        if np.int64((state * _MULTIPLIER) >> _S33) % ties == 0:
                            best_p, best_q = p, q
            if best_p < 0:  # every move would undo the last one
                stuck = True
                continue

        p, q = best_p, best_q
        u, v = occupant[p], occupant[q]
        occupant[p], occupant[q], position[u], position[v] = v, u, q, p
        merges = mate[p] == q and mate[q] == p
        share = weight[p, q] if weighted else 1.0
        cost += share if merges else 3.0 * share
        n_merged += merges
        n_swaps += 1
        if forced < 0:
            recent[n_recent, 0], recent[n_recent, 1] = p, q
            recent[n_recent, 2], recent[n_recent, 3] = mate[p], mate[q]
            n_recent += 1
            decay[p] += decay_step * n_front
            decay[q] += decay_step * n_front
        mate[p], mate[q] = -2 - q, -2 - p
        if record:
            if n_events == events.shape[0]:
                grown = np.empty(2 * n_events, np.int64)
                for k in range(n_events):
                    grown[k] = events[k]
                events = grown
            events[n_events] = -1 - (np.int64(p) * n + q)
            n_events += 1
        for side in range(2):  # the gates this swap has unblocked
            a = u if side == 0 else v
            g = blocked[a]
            if g >= 0 and distance[position[a], position[partner[a]]] == 1:
                b = partner[a]
                n_front -= 1
                moved = front[n_front]
                k = spot[a]
                front[k] = moved
                spot[wires[offsets[moved]]] = spot[wires[offsets[moved] + 1]] = k
                blocked[a] = blocked[b] = -1
                stack[top] = g
                top += 1
                stale = True
                if forced == g:
                    forced = -1
    return n_swaps, n_merged, cost, events[:n_events]


@njit("int64[::1](int64[::1], int32[::1], int32[::1], int64)", cache=True, nogil=True)
def weave(order, wires, offsets, n_all):
    """Return `order` (gates in a valid order, and negative codes) with all other operations put in as late as possible.

    What stands before a gate on its wires comes right before it; the rest comes last, in source order.
    """
    m, n_slots = offsets.shape[0] - 1, wires.shape[0]
    begin = np.zeros(n_all + 1, np.int32)
    for j in range(n_slots):
        begin[wires[j] + 1] += 1
    for w in range(n_all):
        begin[w + 1] += begin[w]
    cursor = begin[:n_all].copy()
    line = np.empty(n_slots, np.int32)
    for g in range(m):
        for j in range(offsets[g], offsets[g + 1]):
            line[cursor[wires[j]]] = g
            cursor[wires[j]] += 1
    for w in range(n_all):
        cursor[w] = begin[w]
    done = np.zeros(m, np.bool_)
    n_codes = 0
    for k in range(order.shape[0]):
        n_codes += order[k] < 0
    events = np.empty(m + n_codes, np.int64)
    filled = 0
    stack = np.empty(m + 1, np.int32)
    for k in range(order.shape[0]):
        if order[k] < 0:
            events[filled] = order[k]
            filled += 1
            continue
        stack[0] = order[k]
        top = 1
        while top > 0:
            g = stack[top - 1]
            ready = True
            for j in range(offsets[g], offsets[g + 1]):
                first = line[cursor[wires[j]]]
                if first != g:
                    stack[top] = first
                    top += 1
                    ready = False
                    break
            if ready:
                top -= 1
                events[filled] = g
                filled += 1
                done[g] = True
                for j in range(offsets[g], offsets[g + 1]):
                    cursor[wires[j]] += 1
    for g in range(m):
        if not done[g]:
            events[filled] = g
            filled += 1
    return events
