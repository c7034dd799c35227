"""Compiled loops of placement: graph embedding by backtracking, annealing.

The embedding is a backtracking search with the fewest-candidates-first rule of Haralick and Elliott, Artif. Intell.
14, 263 (1980); the annealing is that of Kirkpatrick, Gelatt and Vecchi, Science 220, 671 (1983).
"""

# mypy: disable-error-code="no-untyped-def, untyped-decorator"
from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["anneal", "embed"]

_MULTIPLIER = np.uint64(0x2545F4914F6CDD1D)  # xorshift64*: Vigna, ACM Trans. Math. Softw. 42, 30 (2016)
_S12, _S20, _S25, _S27, _S40 = np.uint64(12), np.uint64(20), np.uint64(25), np.uint64(27), np.uint64(40)
_LOW = np.uint64((1 << 20) - 1)


@njit(
    "int64(int32[::1], int32[::1], int32[::1], int32[::1], int16[:, ::1], int32[::1], int32[::1], float64[::1],"
    "int32[::1], int32[::1], int32[:, ::1], int32[:, ::1], float64[::1], int64)",
    cache=True,
    nogil=True,
)
def embed(
    begin, peers, starts, neighbours, distance, component, home, appeal, hint, place, work, options, keys, budget,
):  # fmt: skip
    """Seek a qubit for each wire so that all peers are adjacent; `place` holds the pinned wires, else -1.

    A wire may stand on qubits whose component is its `home`; those near its `hint` (where that is not -1), with few
    free neighbours and a low `appeal` are tried first, as many as `options` has room for. Returns the number of tests
    spent on success, -1 when the options are exhausted, -2 when the budget is.
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
                    key = free[q] + appeal[q]
                    if hint[best] >= 0:
                        key += 16.0 * distance[q, hint[best]]
                    k = found
                    if found < options.shape[1]:
                        found += 1
                    else:
                        k -= 1
                        if keys[k] <= key:
                            continue
                    while k > 0 and keys[k - 1] > key:
                        options[depth, k] = options[depth, k - 1]
                        keys[k] = keys[k - 1]
                        k -= 1
                    options[depth, k] = q
                    keys[k] = key
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


@njit(
    "float64(int32[::1], int32[::1], float64[::1], int32[::1], int32[::1], int16[:, ::1], int32[::1], int32[::1],"
    "int32[::1], float64[::1], float64[::1], int32[::1], int32[::1], int64, float64, float64, uint64)",
    cache=True,
    nogil=True,
)
def anneal(
    begin, peers, weight, starts, neighbours, distance, component, home, movable, load, expense, place, occupant,
    moves, hot, cold, random,
):  # fmt: skip
    """Anneal `place` by exchanges; the energy is the weighted sum of the peers' distances, and of load times expense.

    Half of the moves go beside a peer, the others to a neighbour. `movable` lists the wires that may move;
    `occupant` has -2 where nothing may come. Returns the change of the energy.
    """
    cooling = (cold / hot) ** (1.0 / max(moves, 1))
    heat = hot
    total = 0.0
    for _ in range(moves):
        heat *= cooling
        random ^= random >> _S12
        random ^= random << _S25
        random ^= random >> _S27
        bits = random * _MULTIPLIER
        w = movable[np.int64(bits & _LOW) % movable.shape[0]]
        p = place[w]
        r = np.int64((bits >> _S20) & _LOW)
        near = p
        if r & 1 and begin[w + 1] > begin[w]:
            near = place[peers[begin[w] + (r >> 1) % (begin[w + 1] - begin[w])]]
        if starts[near + 1] == starts[near]:
            continue
        q = neighbours[starts[near] + (r >> 9) % (starts[near + 1] - starts[near])]
        v = occupant[q]
        if q == p or v == -2 or component[q] != home[w]:
            continue
        change = load[w] * (expense[q] - expense[p])
        for i in range(begin[w], begin[w + 1]):
            x = peers[i]
            if x != v:
                change += weight[i] * (distance[q, place[x]] - distance[p, place[x]])
        if v >= 0:
            change += load[v] * (expense[p] - expense[q])
            for i in range(begin[v], begin[v + 1]):
                x = peers[i]
                if x != w:
                    change += weight[i] * (distance[p, place[x]] - distance[q, place[x]])
        if change <= 0.0 or change < -heat * np.log((np.int64(bits >> _S40) + 1) / 16777216.0):
            place[w] = q
            occupant[q] = w
            occupant[p] = v
            if v >= 0:
                place[v] = p
            total += change
    return total
