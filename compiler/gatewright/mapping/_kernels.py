"""Compiled loops of placement and routing: operation lines, the SABRE sweep, weaving, graph embedding.

The sweep is the heuristic search of Li, Ding and Xie, ASPLOS 2019, arXiv:1809.02573; the embedding is a
backtracking search with the fewest-candidates-first rule of Haralick and Elliott, Artif. Intell. 14, 263 (1980).

Every wire has a *line*: its operations in order, closed by -1 at both ends. Beside each entry stand the partner on
the other wire of a two-qubit gate (-1 for any other operation, -2 at the ends) and where that gate is on the
partner's line. Callers allocate the work arrays, and slices are not assigned to: both keep compilation short.
"""

# mypy: disable-error-code="no-untyped-def, untyped-decorator"
from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["embed", "link", "sweep", "weave"]

_MULTIPLIER = np.uint64(0x2545F4914F6CDD1D)  # xorshift64*: Vigna, ACM Trans. Math. Softw. 42, 30 (2016)
_S12, _S25, _S27, _S33 = np.uint64(12), np.uint64(25), np.uint64(27), np.uint64(33)


@njit(
    "void(int32[::1], int32[::1], uint8[::1], int32[::1], int32[::1], int32[::1], int32[::1], int32[::1])",
    cache=True,
    nogil=True,
)
def link(wires, offsets, coupled, cursor, line, mates, cross, layer):
    """Fill the lines and the ASAP layer of each operation; `cursor` starts at the first entry of each line."""
    for g in range(coupled.shape[0]):
        first = offsets[g]
        stop = offsets[g + 1]
        deep = 0
        for j in range(first, stop):
            w = wires[j]
            at = cursor[w]
            earlier = line[at - 1]
            if earlier >= 0 and layer[earlier] >= deep:
                deep = layer[earlier] + 1
            line[at] = g
            mates[at] = -1
            if coupled[g] and j < first + 2:
                x = wires[2 * first + 1 - j]
                mates[at] = x
                cross[at] = cursor[x] if j == first else cursor[x] - 1
            cursor[w] = at + 1
        layer[g] = deep


@njit(
    "Tuple((int64, int64, float64, int64[::1]))(int32[::1], int32[::1], uint8[::1], int64,"
    "int32[::1], int32[::1], int32[::1], int32[::1],"
    "int32[::1], int32[::1], int32[::1], int16[:, ::1], float32[::1], int32[::1],"
    "float64[::1], float64, float64, int64, int32[::1], int32[:, ::1], float64[::1], int64[::1], uint64, boolean)",
    cache=True,
    nogil=True,
)
def sweep(
    wires, offsets, coupled, step,
    cursor, line, mates, cross,
    starts, neighbours, twin, distance, weight, position,
    ahead, price, decay, patience, arrived, work, pull, events, state, record,
):  # fmt: skip
    """Run one pass over all operations; `position` (wire to qubit) is moved to where the wires end.

    `step` is +1 forwards (`cursor` at the first entries) or -1 backwards (at the last). A swap's score is the
    change of the sum over the gates within sight of ``ahead[depth] * distance``, plus `price` for each entangler
    it costs (1 beside a gate on the same pair, else 3), plus the decay. `pull` holds the first part for each edge,
    renewed only where something moved.

    Returns the number of swaps, how many of them merge, the weighted entanglers (of the gates too), and the events: a
    gate, or ``-1 - (p*n + q)`` for a swap of p and q.
    """
    n = starts.shape[0] - 1
    n_ahead = ahead.shape[0]
    occupant, blocked, spot, front, mate = work[0], work[1], work[2], work[3], work[4]
    moved, stack, stale, shaken, renew = work[5], work[6], work[7], work[8], work[9]
    for w in range(n):
        occupant[position[w]] = w
        blocked[w] = -1  # the gate of the front layer that waits on this wire
        mate[w] = -1  # what a qubit did last: q after a gate with q, -2-q after a swap with q
        moved[w] = -1  # how many gates were left when the qubit was last swapped
        stale[w] = 2  # of its pulls: 2 as the wire has moved or advanced, 1 as a partner within sight has
        shaken[w] = w
    n_shaken = n
    n_renew = n_front = fruitless = n_events = n_swaps = n_merged = n_left = top = 0
    forced = -1
    cost = 0.0
    for g in range(coupled.shape[0]):
        n_left += coupled[g]
    for w in range(cursor.shape[0]):
        g = line[cursor[w]]
        if g >= 0:
            arrived[g] += 1
            if arrived[g] == offsets[g + 1] - offsets[g]:
                stack[top] = g
                top += 1
    while True:
        while top > 0:  # everything that can run, runs
            top -= 1
            g = stack[top]
            first = offsets[g]
            runs = True
            if coupled[g]:
                a = wires[first]
                b = wires[first + 1]
                p = position[a]
                q = position[b]
                if distance[p, q] != 1:
                    runs = False
                    blocked[a] = g
                    blocked[b] = g
                    spot[a] = n_front
                    spot[b] = n_front
                    front[n_front] = g
                    n_front += 1
                else:
                    mate[p] = q
                    mate[q] = p
                    fruitless = 0
                    n_left -= 1
                    for i in range(starts[p], starts[p + 1]):
                        if neighbours[i] == q:
                            cost += weight[i]
                            break
                    if record:
                        events[n_events] = g
                        n_events += 1
            for j in range(first, offsets[g + 1]):
                w = wires[j]
                if runs:
                    cursor[w] += step
                    h = line[cursor[w]]
                    if h >= 0:
                        arrived[h] += 1
                        if arrived[h] == offsets[h + 1] - offsets[h]:
                            stack[top] = h
                            top += 1
                if w < n:
                    if not coupled[g]:
                        mate[position[w]] = -1
                    if stale[w] == 0:
                        stale[w] = 2
                        shaken[n_shaken] = w
                        n_shaken += 1
        if n_front == 0:
            break
        if record and n_events + n_left + 2 > events.shape[0]:
            grown = np.empty(2 * (n_events + n_left + 2), np.int64)
            for k in range(n_events):
                grown[k] = events[k]
            events = grown

        chosen = -1
        if fruitless > patience and forced < 0:  # livelock: lead the closest gate home
            nearest = 1 << 30
            for k in range(n_front):
                a = wires[offsets[front[k]]]
                d = distance[position[a], position[mates[cursor[a]]]]
                if d < nearest:
                    nearest = d
                    forced = front[k]
        if forced >= 0:
            a = wires[offsets[forced]]
            p = position[a]
            home = position[mates[cursor[a]]]
            for i in range(starts[p], starts[p + 1]):
                if distance[neighbours[i], home] < distance[p, home]:
                    chosen = i
        else:
            while n_shaken > 0:
                n_shaken -= 1
                x = shaken[n_shaken]
                c = cursor[x]
                for _ in range(n_ahead + 1):
                    if x >= 0 and stale[x] != 1:
                        stale[x] = 1
                        renew[n_renew] = x
                        n_renew += 1
                    x = mates[c]
                    if x < -1:
                        break
                    c += step
            while n_renew > 0:
                n_renew -= 1
                w = renew[n_renew]
                stale[w] = 0
                p = position[w]
                for i in range(starts[p], starts[p + 1]):
                    pull[i] = 0.0
                c = cursor[w]
                for k in range(0 if blocked[w] >= 0 else 1, n_ahead):
                    x = mates[c]
                    if x < -1:
                        break
                    if x >= 0:  # a gate is as deep as it is on the later of its wires
                        depth = abs(cross[c] - cursor[x])
                        if blocked[x] < 0:
                            depth += 1
                        if depth < k:
                            depth = k
                        if depth < n_ahead:
                            home = position[x]
                            d = distance[home, p]
                            for i in range(starts[p], starts[p + 1]):
                                q = neighbours[i]
                                if q != home:
                                    pull[i] += ahead[depth] * (distance[home, q] - d)
                    c += step
            best = 1e300
            ties = 1
            for k in range(2 * n_front):
                p = position[wires[offsets[front[k >> 1]] + (k & 1)]]
                for i in range(starts[p], starts[p + 1]):
                    q = neighbours[i]
                    if blocked[occupant[q]] >= 0 and q < p:
                        continue  # seen from its other end
                    if mate[p] == -2 - q and mate[q] == -2 - p:
                        continue  # would only undo the swap just made
                    share = 1.0 if mate[p] == q and mate[q] == p else 3.0
                    score = pull[i] + pull[twin[i]] + price * share * weight[i]
                    if moved[p] == n_left or moved[q] == n_left:
                        score += decay
                    if score < best - 1e-9:
                        best = score
                        chosen = i
                        ties = 1
                    elif score <= best + 1e-9:
                        ties += 1
                        state ^= state >> _S12
                        state ^= state << _S25
                        state ^= state >> _S27
                        if np.int64((state * _MULTIPLIER) >> _S33) % ties == 0:
                            chosen = i
            if chosen < 0:
                fruitless = patience + 1
                continue

        q = neighbours[chosen]
        p = neighbours[twin[chosen]]
        u = occupant[p]
        v = occupant[q]
        occupant[p] = v
        occupant[q] = u
        position[u] = q
        position[v] = p
        moved[p] = n_left
        moved[q] = n_left
        if mate[p] == q and mate[q] == p:
            cost += weight[chosen]
            n_merged += 1
        else:
            cost += 3.0 * weight[chosen]
        mate[p] = -2 - q
        mate[q] = -2 - p
        n_swaps += 1
        fruitless += 1
        if record:
            events[n_events] = -1 - (np.int64(p) * n + q)
            n_events += 1
        w = u
        for _ in range(2):
            if stale[w] == 0:
                stale[w] = 2
                shaken[n_shaken] = w
                n_shaken += 1
            g = blocked[w]
            if g >= 0:
                b = mates[cursor[w]]
                if distance[position[w], position[b]] == 1:
                    n_front -= 1
                    h = front[n_front]
                    k = spot[w]
                    front[k] = h
                    spot[wires[offsets[h]]] = k
                    spot[wires[offsets[h] + 1]] = k
                    blocked[w] = -1
                    blocked[b] = -1
                    stack[top] = g
                    top += 1
                    if forced == g:
                        forced = -1
            w = v
    return n_swaps, n_merged, cost, events[:n_events]


@njit(
    "int64(int64[::1], int32[::1], int32[::1], int32[::1], int32[::1], uint8[::1], int32[::1], int64[::1])",
    cache=True,
    nogil=True,
)
def weave(order, wires, offsets, line, cursor, done, stack, events):
    """Put all operations into `order` (gates in a valid order, and negative codes) as late as possible.

    What stands before a gate on its wires comes right before it; what is left comes last, in source order.
    Returns the number of `events` written.
    """
    filled = 0
    for k in range(order.shape[0]):
        if order[k] < 0:
            events[filled] = order[k]
            filled += 1
            continue
        stack[0] = order[k]
        top = 1
        while top > 0:
            g = stack[top - 1]
            first = g
            for j in range(offsets[g], offsets[g + 1]):
                first = line[cursor[wires[j]]]
                if first != g:
                    stack[top] = first
                    top += 1
                    break
            if first == g:
                top -= 1
                events[filled] = g
                filled += 1
                done[g] = 1
                for j in range(offsets[g], offsets[g + 1]):
                    cursor[wires[j]] += 1
    for g in range(done.shape[0]):
        if done[g] == 0:
            events[filled] = g
            filled += 1
    return filled


@njit(
    "int64(int32[::1], int32[::1], int32[::1], int32[::1], int16[:, ::1], int32[::1], int32[::1], float64[::1],"
    "int32[::1], int32[:, ::1], int32[:, ::1], int64)",
    cache=True,
    nogil=True,
)
def embed(
    begin, peers, starts, neighbours, distance, component, home, appeal, place, work, options, budget,
):  # fmt: skip
    """Seek a qubit for each wire so that all peers are adjacent; `place` holds the pinned wires, else -1.

    A wire may stand on qubits whose component is its `home`; those with few free neighbours and a low `appeal` are
    tried first, as many as `options` has room for. Returns the number of tests spent on success, -1 when the options
    are exhausted, -2 when the budget is.
    """
    n = place.shape[0]
    occupant, free, need, ties, chosen, at, count = work[0], work[1], work[2], work[3], work[4], work[5], work[6]
    for w in range(n):
        occupant[w] = -1
    for w in range(n):
        if place[w] >= 0:
            occupant[place[w]] = w
    for w in range(n):
        free[w] = 0  # of a qubit: its free neighbours
        for i in range(starts[w], starts[w + 1]):
            free[w] += occupant[neighbours[i]] < 0
        need[w] = 0  # of a wire: its peers still to be placed, and those that are
        for i in range(begin[w], begin[w + 1]):
            need[w] += place[peers[i]] < 0
        ties[w] = begin[w + 1] - begin[w] - need[w]
    spent = 0
    depth = 0
    count[0] = -1
    while depth >= 0:
        if spent > budget:
            return -2
        if count[depth] < 0:  # a new level: the wire with the fewest places left beside its placed peers
            spent += n
            best = -1
            fewest = 1 << 30
            for w in range(n):
                if place[w] >= 0 or begin[w] == begin[w + 1]:
                    continue
                found = n + 1
                for j in range(begin[w], begin[w + 1]):
                    anchor = place[peers[j]]
                    if anchor >= 0:
                        found = 0
                        for k in range(starts[anchor], starts[anchor + 1]):
                            q = neighbours[k]
                            spent += 1
                            found += occupant[q] < 0 and free[q] >= need[w]
                        break
                if found < fewest or (found == fewest and need[w] + ties[w] > need[best] + ties[best]):
                    best = w
                    fewest = found
            if best < 0:
                return spent
            chosen[depth] = best
            at[depth] = 0
            found = 0
            for q in range(n):
                fits = occupant[q] < 0 and component[q] == home[best] and free[q] >= need[best]
                if fits:
                    for i in range(begin[best], begin[best + 1]):
                        if place[peers[i]] >= 0 and distance[q, place[peers[i]]] != 1:
                            fits = False
                if fits:
                    k = found
                    if found < options.shape[1]:
                        found += 1
                    else:
                        k -= 1
                        if free[options[depth, k]] + appeal[options[depth, k]] <= free[q] + appeal[q]:
                            continue
                    while k > 0 and free[options[depth, k - 1]] + appeal[options[depth, k - 1]] > free[q] + appeal[q]:
                        options[depth, k] = options[depth, k - 1]
                        k -= 1
                    options[depth, k] = q
            count[depth] = found
        w = chosen[depth]
        sign = 1
        if place[w] >= 0:  # back from below, or walled in: take the wire off again
            sign = -1
            q = place[w]
            place[w] = -1
            occupant[q] = -1
        elif at[depth] < count[depth]:
            q = options[depth, at[depth]]
            at[depth] += 1
            place[w] = q
            occupant[q] = w
            spent += 1
        else:
            depth -= 1
            continue
        fits = sign > 0
        for i in range(begin[w], begin[w + 1]):
            need[peers[i]] -= sign
            ties[peers[i]] += sign
        for i in range(starts[q], starts[q + 1]):
            x = neighbours[i]
            free[x] -= sign
            if occupant[x] >= 0 and free[x] < need[occupant[x]]:
                fits = False  # the wire on x needs more free neighbours than it has left
        if fits:
            depth += 1
            count[depth] = -1
    return -1
