"""Choose where a circuit's wires start on the device.

Three sources of starts: an embedding of the interaction graph, or of as much of its beginning as embeds, found by
bounded backtracking, the wire with the fewest places first (Haralick and Elliott, Artif. Intell. 14, 263 (1980));
greedy growth along the strongest interactions; compact random regions. Each is improved by passes to and fro over the
circuit (Li, Ding, Xie, ASPLOS 2019, arXiv:1809.02573), and the cheapest wins.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from gatewright.errors import DisconnectedError, InputError
from gatewright.mapping import _places
from gatewright.mapping.routing import Graph, Operations, Router

__all__ = ["TRIALS", "embed", "place"]

Integers = NDArray[np.int32]

#: Starts tried, by effort: at least and at most, and between them as many as fit into so many gates times qubits.
TRIALS = {"quick": (2, 8, 5e4), "standard": (4, 32, 6e5), "deep": (16, 256, 1e7)}
#: Passes to and fro from each start.
ROUNDS = {"quick": 2, "standard": 5, "deep": 12}
#: Starts are improved on so many joint operations of the beginning; what comes later hardly depends on them.
PREFIX = 2_000
#: Work spent on passes over the whole circuit to compare the best of them, in gates times qubits, by effort.
WHOLE = {"quick": 1e6, "standard": 1e7, "deep": 3e7}
#: Restarts of the search for an embedding.
RESTARTS = {"quick": 4, "standard": 16, "deep": 200}


@dataclass(frozen=True, eq=False, slots=True)
class _Task:
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


def place(
    graph: Graph,
    operations: Operations,
    *,
    n_source: int,
    active: NDArray[np.bool_],
    effort: str = "standard",
    seed: int = 0,
    fixed: Sequence[int] | None = None,
) -> Integers:
    """Return a start placement.

    `gatewright.mapping.routing.route` with the same seed finds again what the winner cost here.

    Parameters
    ----------
    graph : Graph
        With weights, regions of low cost are preferred, and the weighted cost decides.
    operations : Operations
    n_source : int
        Wires of the circuit; those beyond it, up to ``graph.n``, are idle.
    active : ndarray of bool, shape (n,)
        Qubits in service.
    effort : {"quick", "standard", "deep"}
    seed : int
    fixed : sequence of int, length n_source, optional
        Qubit of each wire, -1 where it is free; respected exactly.

    Returns
    -------
    ndarray of int32, shape (n,)
        Qubit of each wire, idle ones included.

    Raises
    ------
    DisconnectedError
        Wires that interact do not fit into one connected part of the device.
    InputError
        `fixed` names a qubit twice, or one that does not exist or is out of service.

    Examples
    --------
    >>> from gatewright.mapping.routing import make_graph, make_operations, route
    >>> graph = make_graph([(0, 1), (1, 2), (2, 3)], 4)
    >>> star = make_operations([3, 0, 3, 1], [0, 2, 4], [1, 1], 4)
    >>> len(route(graph, star, place(graph, star, n_source=4, active=np.ones(4, bool))).swaps)
    0
    """
    rng = np.random.default_rng(seed)
    active = np.asarray(active, dtype=bool)
    pairs = operations.pairs
    pinned = _checked(fixed, n_source, active)
    used = np.arange(n_source, dtype=np.int32)
    home = _homes(graph, pairs, pinned, used, active)
    task = _Task(graph, pairs, _interactions(pairs, graph.n), pinned, home, used, active, rng, _expense(graph))
    own = _where_they_are(task)
    if own is not None and not graph.uneven:
        return _completed(own, task)
    if (pinned[used] >= 0).all():
        return _completed(pinned, task)
    perfect = [] if own is None else [own]
    for _ in range(8 if graph.uneven else 1):  # where costs differ, one embedding may be better than the next
        found = embed(graph, task.weight > 0, pinned, home, active, restarts=RESTARTS[effort], rng=rng)
        if found is None:
            break
        perfect.append(found)
    if perfect:
        return min((_completed(start, task) for start in perfect), key=lambda start: _cost_in_place(task, start))

    joint = operations.joint
    whole = Router(graph, operations.take(joint))
    first = np.arange(min(len(joint), PREFIX))
    short = len(first) == len(joint)
    router = whole if short else Router(graph, operations.take(joint[np.sort(first)]))
    improved: list[tuple[float, int, Integers]] = []
    least, most, work = TRIALS[effort]
    trials = max(least, min(most, int(work / (len(first) * graph.n))))
    for start in _starts(task, trials):
        improved.append(_improved(router, start, task, rounds=ROUNDS[effort], seed=seed))
    improved.sort(key=lambda entry: entry[:2])
    if short:
        return improved[0][2]
    passes = max(1, min(len(improved), int(WHOLE[effort] / (len(joint) * graph.n))))
    finalists = [start for _, _, start in improved[:passes]]
    if passes == 1:
        return finalists[0]
    outcomes = [whole.run(start, seed=seed) for start in finalists]
    return finalists[min(range(passes), key=lambda k: (outcomes[k].cost, outcomes[k].swaps))]


def _improved(router: Router, start: Integers, task: _Task, *, rounds: int, seed: int) -> tuple[float, int, Integers]:
    """Run to and fro from `start`; return the cost, the swaps and the start of the cheapest pass forwards."""
    best: tuple[float, int, Integers] | None = None
    for round_ in range(rounds + 1):
        made = router.run(start, seed=seed)
        if best is None or (made.cost, made.swaps) < best[:2]:
            best = (made.cost, made.swaps, start)
        if round_ < rounds:
            start = _restored(router.run(made.end, seed=seed + 1 + round_, backwards=True).end, task.fixed)
    assert best is not None
    return best


def _restored(placement: Integers, fixed: Integers) -> Integers:
    """Put fixed wires back on their qubits, in exchange with whatever stands there."""
    out = placement.copy()
    for wire in np.flatnonzero(fixed >= 0).tolist():
        other = int(np.flatnonzero(out == fixed[wire])[0])
        out[other], out[wire] = out[wire], out[other]
    return out


def _cost_in_place(task: _Task, start: Integers) -> float:
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


def _where_they_are(task: _Task) -> Integers | None:
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


def _completed(placement: Integers, task: _Task) -> Integers:
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


def _starts(task: _Task, trials: int) -> Iterator[Integers]:
    """Yield starts of the three kinds in turn, the embedded beginning first."""
    for trial in range(trials):
        if trial % 3 == 0 and (trial == 0 or task.graph.n <= 200):
            yield _completed(_grow(task, _embedded_beginning(task)), task)
        elif trial % 3 < 2:
            yield _completed(_grow(task, task.fixed), task)
        else:
            yield _completed(_region(task), task)


def _embedded_beginning(task: _Task) -> Integers:
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
        found = embed(task.graph, linked, task.fixed, task.home, task.active, restarts=1, rng=task.rng)
        if found is None:
            bad = middle
        else:
            best, good = found, middle
    return best


def _grow(task: _Task, placed: Integers) -> Integers:
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


def _region(task: _Task) -> Integers:
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
    budget = min(max(100_000, 100 * n * n), 8_000_000)  # a fraction of a second
    for trial in range(restarts):
        # The first tries prefer qubits with few free neighbours, the others leave that more and more to chance.
        appeal = rng.random(n) * (1 + trial % 4)
        if graph.uneven:
            appeal += 8 * expense
        found = fixed.copy()
        arrays = (begin, peers.astype(np.int32), graph.starts, graph.neighbours, graph.distance, component, home)
        outcome = _places.embed(*arrays, appeal, found, work, options, budget)
        if outcome >= 0:
            found[(degrees == 0) & (fixed < 0)] = -1
            return found
        if outcome == -1 and options.shape[1] == n:
            return None  # all options were tried
    return None
