"""Choose where a circuit's wires start on the device.

Sources of starts: an embedding of the interaction graph, or of as much of its beginning as embeds, found by bounded
backtracking, the wire with the fewest places first (Haralick and Elliott, Artif. Intell. 14, 263 (1980)); annealing
(Kirkpatrick, Gelatt, Vecchi, Science 220, 671 (1983)); greedy growth along the strongest interactions; compact random
regions. `gatewright.mapping.search` improves them and chooses.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from gatewright.errors import DisconnectedError, InputError
from gatewright.mapping import _places
from gatewright.mapping.routing import Graph, Operations

__all__ = [
    "Task",
    "annealed",
    "completed",
    "embed",
    "embedded_beginning",
    "grown",
    "perfect_start",
    "prepare",
    "random_region",
    "restored",
]

Integers = NDArray[np.int32]

#: Last temperature of the annealing.
COLD = 0.2


@dataclass(frozen=True, eq=False, slots=True)
class Task:
    """What every start must respect."""

    graph: Graph
    pairs: Integers
    weight: NDArray[np.float64]
    fixed: Integers
    home: Integers
    used: Integers
    active: NDArray[np.bool_]
    rng: np.random.Generator
    expense: NDArray[np.float64]


def prepare(
    graph: Graph,
    operations: Operations,
    *,
    n_source: int,
    active: NDArray[np.bool_],
    seed: int = 0,
    fixed: Sequence[int] | None = None,
) -> Task:
    """Check what is asked for, and assign every group of interacting wires to a component of the device.

    Parameters and errors are those of `gatewright.mapping.search.plan`.
    """
    active = np.asarray(active, dtype=bool)
    pairs = operations.pairs
    pinned = _checked(fixed, n_source, active)
    used = np.arange(n_source, dtype=np.int32)
    home = _homes(graph, pairs, pinned, used, active)
    rng = np.random.default_rng(seed)
    return Task(graph, pairs, _interactions(pairs, graph.n), pinned, home, used, active, rng, _expense(graph))


def perfect_start(task: Task, *, restarts: int) -> Integers | None:
    """Return a start from which no swap is needed, if one is found; where costs differ, the cheapest of several."""
    own = _where_they_are(task)
    graph = task.graph
    if own is not None and not graph.uneven:
        return completed(own, task)
    if (task.fixed[task.used] >= 0).all():
        return completed(task.fixed, task)
    found = [] if own is None else [own]
    for _ in range(8 if graph.uneven else 1):  # where costs differ, one embedding may be better than the next
        made = embed(graph, task.weight > 0, task.fixed, task.home, task.active, restarts=restarts, rng=task.rng)
        if made is None:
            break
        found.append(made)
    return min((completed(start, task) for start in found), key=lambda x: _cost_in_place(task, x)) if found else None


def annealed(
    task: Task, *, moves: int, fading: float | None, hot: float, seed: int, start: Integers | None = None
) -> Integers:
    """Anneal a start: the sum over gates of the distance of their wires, later gates counting less.

    Parameters
    ----------
    task : Task
    moves : int
    fading : float or None
        Share of the circuit after which a gate counts half.
    hot : float
        First temperature, in mean weights of a pair.
    seed : int
    start : ndarray of int32, shape (n,), optional
        Random by default.
    """
    graph, n, pairs = task.graph, task.graph.n, task.pairs
    rng = np.random.default_rng(seed)
    weight = np.ones(len(pairs)) if fading is None else 0.5 ** (np.arange(len(pairs)) / max(1.0, fading * len(pairs)))
    both = np.concatenate([pairs, pairs[:, ::-1]])
    matrix = coo_array((np.tile(weight, 2), (both[:, 0], both[:, 1])), shape=(n, n)).tocsr()
    matrix.sum_duplicates()
    scale = matrix.data.mean() if matrix.nnz else 1.0
    place = (completed(random_region(task), task) if start is None else start).astype(np.int32)
    movable = task.used[task.fixed[task.used] < 0]
    if not len(movable) or not matrix.nnz:
        return place
    occupant = np.full(n, -1, dtype=np.int32)
    occupant[~task.active] = -2
    occupant[place[task.used]] = task.used
    pinned = task.used[task.fixed[task.used] >= 0]
    occupant[place[pinned]] = -2
    load = np.asarray(matrix.sum(axis=1)).ravel() / scale
    place[np.setdiff1d(np.arange(n), task.used)] = -1
    _places.anneal(
        matrix.indptr.astype(np.int32),
        matrix.indices.astype(np.int32),
        matrix.data / scale,
        graph.starts,
        graph.neighbours,
        graph.distance,
        graph.component,
        task.home,
        movable,
        load,
        0.5 * task.expense if graph.uneven else np.zeros(n),
        place,
        occupant,
        moves,
        hot,
        COLD,
        np.uint64(rng.integers(1 << 62) * 2 + 1),
    )
    return completed(place, task)


def restored(placement: Integers, fixed: Integers) -> Integers:
    """Put fixed wires back on their qubits, in exchange with whatever stands there."""
    out = placement.copy()
    for wire in np.flatnonzero(fixed >= 0).tolist():
        other = int(np.flatnonzero(out == fixed[wire])[0])
        out[other], out[wire] = out[wire], out[other]
    return out


def _cost_in_place(task: Task, start: Integers) -> float:
    """Return the weighted cost of all gates on a placement where each meets an edge."""
    weight = np.zeros((task.graph.n, task.graph.n))
    weight[np.repeat(np.arange(task.graph.n), np.diff(task.graph.starts)), task.graph.neighbours] = task.graph.weight
    gates = weight[start[task.pairs[:, 0]], start[task.pairs[:, 1]]].sum()
    return float(gates + 1e-3 * task.expense[start[task.used]].sum())


def _expense(graph: Graph) -> NDArray[np.float64]:
    """Return the mean weight of each qubit's edges, 1 where it has none."""
    degree = np.diff(graph.starts)
    source = np.repeat(np.arange(graph.n), degree)
    total = np.bincount(source, weights=graph.weight, minlength=graph.n)
    return np.where(degree > 0, total / np.maximum(degree, 1), 1.0)


def _where_they_are(task: Task) -> Integers | None:
    """Return the placement of every wire on the qubit of its own number, if no gate needs a swap there."""
    own = np.full(task.graph.n, -1, dtype=np.int32)
    own[task.used] = task.used
    as_fixed = np.array_equal(task.fixed[task.fixed >= 0], np.flatnonzero(task.fixed >= 0))
    meet = bool((task.graph.distance[task.pairs[:, 0], task.pairs[:, 1]] == 1).all())
    return own if meet and as_fixed and task.active[task.used].all() else None


def _interactions(pairs: Integers, n: int) -> NDArray[np.float64]:
    """Count the gates between wires, later ones less: shape (n, n), symmetric."""
    weight = np.zeros((n, n))
    if len(pairs):
        fading = 0.5 ** (np.arange(len(pairs)) / max(50.0, len(pairs) / 4))
        np.add.at(weight, (pairs[:, 0], pairs[:, 1]), np.maximum(fading, 1e-6))
    return weight + weight.T


def _checked(fixed: Sequence[int] | None, n_source: int, active: NDArray[np.bool_]) -> Integers:
    placement = np.full(len(active), -1, dtype=np.int32)
    if fixed is None:
        return placement
    given = [int(q) for q in fixed]
    named = [q for q in given if q != -1]
    for q in named:
        if not 0 <= q < len(active) or not active[q]:
            raise InputError(
                f"the placement names qubit {q}",
                required=f"a qubit in service, 0 to {len(active) - 1}, or -1 for a free one",
                found="out of service" if 0 <= q < len(active) else "no such qubit",
            )
    if len(set(named)) < len(named):
        raise InputError("the placement names a qubit twice", found=", ".join(map(str, given[:20])))
    placement[:n_source] = given
    return placement


def _homes(graph: Graph, pairs: Integers, fixed: Integers, used: Integers, active: NDArray[np.bool_]) -> Integers:
    """Assign every group of interacting wires to a component of the device: those with a fixed place, then the rest."""
    n, component = graph.n, graph.component
    links = coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n))
    _, group = connected_components(links, directed=False)
    homes = np.full(n, -1, dtype=np.int32)
    room = np.bincount(component[active], minlength=int(component.max(initial=0)) + 1)
    parts = ", ".join(str(r) for r in sorted(room[room > 0].tolist(), reverse=True)[:12])
    order = np.argsort(group[used], kind="stable")
    members = np.split(used[order], np.flatnonzero(np.diff(group[used][order])) + 1) if len(used) else []
    free: list[Integers] = []
    for wires in members:
        tied = np.unique(component[fixed[wires][fixed[wires] >= 0]])
        if len(tied) == 0:
            free.append(wires)
            continue
        room[tied[0]] -= len(wires)
        homes[wires] = tied[0]
        if len(tied) > 1 or room[tied[0]] < 0:
            raise DisconnectedError(
                f"{len(wires)} qubits of the circuit must meet, and the placement leaves them no connected part",
                required=f"a connected part with {len(wires)} free qubits, holding all that the placement fixes",
                found=f"parts of {parts} qubits",
                hint=f"qubits {', '.join(map(str, wires[:12].tolist()))} must meet",
            )
    free.sort(key=len, reverse=True)
    packed = _packed([len(wires) for wires in free], room.tolist())
    if packed is None:
        wires = free[0]
        raise DisconnectedError(
            f"{len(wires)} qubits of the circuit must meet, and no connected part of the device has room"
            if len(wires) > room.max(initial=0)
            else f"the circuit's {len(used)} qubits do not fit into the connected parts of the device",
            required="connected parts for groups of {} qubits".format(", ".join(str(len(w)) for w in free[:12])),
            found=f"parts of {parts} qubits",
            hint=f"the largest group has qubits {', '.join(map(str, wires[:12].tolist()))}",
        )
    for wires, part in zip(free, packed, strict=True):
        homes[wires] = part
    return homes


def _packed(sizes: list[int], room: list[int], budget: int = 20_000) -> list[int] | None:
    """Return a part for each size, sizes falling, by a bounded search: the tightest part that has room comes first."""
    left = list(room)
    chosen: list[int] = []
    options: list[list[int]] = []
    while len(chosen) < len(sizes):
        size = sizes[len(chosen)]
        if len(options) == len(chosen):
            # Parts of equal room are alike.
            by_room = {r: part for part, r in enumerate(left) if r >= size}
            options.append([by_room[r] for r in sorted(by_room, reverse=True)])
        budget -= 1
        if options[-1] and budget > 0:
            part = options[-1].pop()
            left[part] -= size
            chosen.append(part)
        elif chosen and budget > 0:
            options.pop()
            left[chosen[-1]] += sizes[len(chosen) - 1]
            chosen.pop()
        else:
            return None
    return chosen


def completed(placement: Integers, task: Task) -> Integers:
    """Put wires that have no place yet, idle ones last, on the qubits that are left."""
    out = placement.copy()
    taken = np.zeros(task.graph.n, dtype=bool)
    taken[out[out >= 0]] = True
    for wire in task.used[out[task.used] < 0].tolist():
        free = np.flatnonzero(~taken & task.active & (task.graph.component == task.home[wire]))
        if task.graph.uneven:
            free = free[np.argsort(task.expense[free])[:1]]
        out[wire] = free[task.rng.integers(len(free))]
        taken[out[wire]] = True
    idle = np.flatnonzero(out < 0)
    out[idle] = np.flatnonzero(~taken)
    return out


def embedded_beginning(task: Task, hint: Integers | None = None) -> Integers:
    """Embed the longest run of first interactions that is found to embed."""
    low, high = np.minimum(*task.pairs.T), np.maximum(*task.pairs.T)
    _, first = np.unique(low.astype(np.int64) * task.graph.n + high, return_index=True)
    distinct = task.pairs[np.sort(first)]
    best, good, bad = task.fixed, 0, min(len(distinct), len(task.graph.edges)) + 1
    while good + 1 < bad:
        middle = (good + bad) // 2
        linked = np.zeros_like(task.weight, dtype=bool)
        linked[distinct[:middle, 0], distinct[:middle, 1]] = True
        linked |= linked.T
        found = embed(task.graph, linked, task.fixed, task.home, task.active, restarts=1, rng=task.rng, hint=hint)
        if found is None:
            bad = middle
        else:
            best, good = found, middle
    return best


def grown(task: Task, placed: Integers) -> Integers:
    """Place wire after wire, the one bound most to those placed, where its partners are nearest."""
    graph, weight, rng = task.graph, task.weight, task.rng
    out = placed.copy()
    taken = ~task.active
    taken[out[out >= 0]] = True
    attached = weight[:, out >= 0].sum(axis=1)
    total = weight.sum(axis=1)
    waiting = np.zeros(graph.n, dtype=bool)
    waiting[task.used] = (out[task.used] < 0) & (total[task.used] > 0)
    source = np.repeat(np.arange(graph.n), np.diff(graph.starts))
    while waiting.any():
        wires = np.flatnonzero(waiting)
        noise = 1 + 0.2 * rng.random(len(wires))
        wire = int(wires[np.lexsort((total[wires] * noise, attached[wires] * noise))[-1]])
        free = np.flatnonzero(~taken & (graph.component == task.home[wire]))
        partners = np.flatnonzero((weight[wire] > 0) & (out >= 0))
        open_ = np.bincount(source, weights=~taken[graph.neighbours], minlength=graph.n)[free]
        if len(partners):
            away = graph.distance[np.ix_(free, out[partners])] @ weight[wire, partners]
            # Among equally near qubits, one that leaves room for the partners still to come.
            score = away * (1 + 0.1 * rng.random(len(free))) - 1e-3 * open_
        else:
            middle = graph.distance[np.ix_(free, free)].mean(axis=1)
            score = middle * (1 + 0.5 * rng.random(len(free))) - 0.1 * open_
        if graph.uneven:
            score += 0.5 * task.expense[free] * max(total[wire], 1.0)
        out[wire] = free[int(np.argmin(score))]
        taken[out[wire]] = True
        attached += weight[:, wire]
        waiting[wire] = False
    return out


def random_region(task: Task) -> Integers:
    """Place the wires of each component at random in a compact region around a random qubit."""
    out = task.fixed.copy()
    taken = ~task.active
    taken[out[out >= 0]] = True
    waiting = task.used[out[task.used] < 0]
    for home in np.unique(task.home[waiting]).tolist():
        wires = task.rng.permutation(waiting[task.home[waiting] == home])
        free = np.flatnonzero(~taken & (task.graph.component == home))
        distance = task.graph.distance[task.rng.choice(free), free] + 0.5 * task.rng.random(len(free))
        if task.graph.uneven:
            distance += 2.0 * task.expense[free]
        region = free[np.argsort(distance)[: len(wires)]]
        out[wires] = region
        taken[region] = True
    return out


def embed(
    graph: Graph,
    linked: NDArray[np.bool_],
    fixed: Integers,
    home: Integers,
    active: NDArray[np.bool_],
    *,
    restarts: int,
    rng: np.random.Generator,
    hint: Integers | None = None,
) -> Integers | None:
    """Search for a placement of all interacting wires on which every gate meets an edge.

    Parameters
    ----------
    graph : Graph
    linked : ndarray of bool, shape (n, n)
        Which wires interact; symmetric.
    fixed, home : ndarray of int32, shape (n,)
        Qubit of a wire that has its place, else -1; component of each wire.
    active : ndarray of bool, shape (n,)
    restarts : int
        Bounded searches, each with another order among equals, before the search is given up.
    rng : numpy.random.Generator
    hint : ndarray of int32, shape (n,), optional
        Where to look for each wire's qubit first.

    Returns
    -------
    ndarray of int32, shape (n,), or None
        -1 for wires that do not interact. None where nothing was found, which proves nothing.
    """
    n = graph.n
    wires, peers = np.nonzero(linked)
    degrees, degree = np.bincount(wires, minlength=n), np.diff(graph.starts)
    together = linked & (fixed[:, None] >= 0) & (fixed[None, :] >= 0)
    if (
        len(wires) > 2 * len(graph.edges)
        or (np.sort(degrees)[::-1] > np.sort(degree)[::-1]).any()
        or (graph.distance[fixed[:, None], fixed[None, :]][together] != 1).any()
    ):
        return None
    begin = np.concatenate([[0], np.cumsum(degrees)]).astype(np.int32)
    component = np.where(active, graph.component, -1).astype(np.int32)
    expense = _expense(graph)
    options = np.empty((np.count_nonzero(degrees) + 1, min(n, max(64, degree.max()))), dtype=np.int32)
    work = np.empty((7, n + 1), dtype=np.int32)
    keys = np.empty(options.shape[1])
    where = np.full(n, -1, dtype=np.int32) if hint is None else hint
    budget = min(max(100_000, 100 * n * n), 8_000_000)  # a fraction of a second
    for trial in range(restarts):
        # The first tries prefer qubits with few free neighbours, the others leave that more and more to chance.
        appeal = rng.random(n) * (1 + trial % 4)
        if graph.uneven:
            appeal += 8 * expense
        found = fixed.copy()
        arrays = (begin, peers.astype(np.int32), graph.starts, graph.neighbours, graph.distance, component, home)
        outcome = _places.embed(*arrays, appeal, where, found, work, options, keys, budget)
        if outcome >= 0:
            found[(degrees == 0) & (fixed < 0)] = -1
            return found
        if outcome == -1 and options.shape[1] == n:
            return None  # all options were tried
    return None
