"""Choose where a circuit's wires start on the device.

Three sources of starts: an embedding of the whole interaction graph (no swap is needed then), found by bounded
backtracking with forward checking, smallest domain first (Haralick and Elliott, Artif. Intell. 14, 263 (1980)); greedy
growth along the strongest interactions; compact random regions. Each is improved by passes to and fro over the circuit
(Li, Ding, Xie, ASPLOS 2019, arXiv:1809.02573), and the cheapest wins.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.errors import DisconnectedError, InputError
from gatewright.mapping.routing import Graph, Operations, Router

__all__ = ["TRIALS", "embed", "place"]

Integers = NDArray[np.int32]

#: Starts tried, by effort.
TRIALS = {"quick": 2, "standard": 10, "deep": 80}
#: Passes to and fro from each start.
ROUNDS = {"quick": 1, "standard": 2, "deep": 4}
#: A placement is chosen on so many joint operations at most; what comes later hardly depends on it.
PREFIX = 20_000
#: Steps of the search for an embedding.
EMBEDDING_STEPS = {"quick": 2_000, "standard": 20_000, "deep": 400_000}


@dataclass(frozen=True, eq=False, slots=True)
class _Task:
    """What every start must respect."""

    graph: Graph
    weight: NDArray[np.float64]
    fixed: Integers
    home: Integers
    used: Integers


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

    Parameters
    ----------
    graph : Graph
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
    """
    rng = np.random.default_rng(seed)
    pairs = operations.pairs
    task = _Task(
        graph=graph,
        weight=_interactions(pairs, graph.n),
        fixed=_checked(fixed, n_source, active),
        home=np.full(graph.n, -1, dtype=np.int32),
        used=np.arange(n_source, dtype=np.int32),
    )
    task.home[:] = _homes(task, pairs, active)
    joint = np.flatnonzero((np.diff(operations.offsets) > 1) | (operations.coupled == 1))
    perfect = _where_they_are(task, pairs, active)
    if perfect is None:
        perfect = embed(graph, task.weight > 0, task.fixed, task.home, active, steps=EMBEDDING_STEPS[effort], rng=rng)
    if perfect is not None:
        return _completed(perfect, task, active, rng)
    if (task.fixed[:n_source] >= 0).all():
        return _completed(task.fixed, task, active, rng)
    router = Router(graph, operations.take(joint[:PREFIX]))
    free = not (task.fixed >= 0).any()
    best: tuple[float, int, Integers] | None = None
    for trial in range(TRIALS[effort]):
        grown = trial % 2 == 0
        start = _completed(_grow(task, active, rng) if grown else _region(task, active, rng), task, active, rng)
        for round_ in range(ROUNDS[effort] + 1):
            forwards = router.run(start, seed=seed + 97 * trial + round_)
            if best is None or (forwards.cost, forwards.swaps) < best[:2]:
                best = (forwards.cost, forwards.swaps, start)
            if not free or round_ == ROUNDS[effort]:
                break
            start = router.run(forwards.end, seed=seed + 97 * trial + round_, backwards=True).end
    assert best is not None
    return best[2]


def _where_they_are(task: _Task, pairs: Integers, active: NDArray[np.bool_]) -> Integers | None:
    """Return the placement of every wire on the qubit of its own number, if no gate needs a swap there."""
    own = np.full(task.graph.n, -1, dtype=np.int32)
    own[task.used] = task.used
    as_fixed = np.array_equal(task.fixed[task.fixed >= 0], np.flatnonzero(task.fixed >= 0))
    meet = bool((task.graph.distance[pairs[:, 0], pairs[:, 1]] == 1).all())
    return own if meet and as_fixed and active[task.used].all() else None


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


def _homes(task: _Task, pairs: Integers, active: NDArray[np.bool_]) -> Integers:
    """Assign every group of interacting wires to a component of the device, the largest groups first."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    n, component = task.graph.n, task.graph.component
    links = coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n))
    _, group = connected_components(links, directed=False)
    homes = np.full(n, -1, dtype=np.int32)
    room = np.bincount(component[active], minlength=int(component.max(initial=0)) + 1)
    members = [task.used[group[task.used] == g] for g in np.unique(group[task.used])]
    bound = [np.unique(component[task.fixed[m][task.fixed[m] >= 0]]) for m in members]
    # Groups that the user has tied to a place come first, then the large ones.
    for k in sorted(range(len(members)), key=lambda k: (len(bound[k]) == 0, -len(members[k]))):
        wires, tied = members[k], bound[k]
        choices = tied if len(tied) else np.argsort(-room, kind="stable")
        fitting = [c for c in choices.tolist() if room[c] >= len(wires)]
        if len(tied) > 1 or not fitting:
            parts = sorted((int(r) for r in np.bincount(component[active]) if r), reverse=True)
            raise DisconnectedError(
                f"{len(wires)} qubits of the circuit interact, and no connected part of the device can hold them",
                required=f"a connected part with {len(wires)} free qubits"
                + (", holding all that the placement fixes" if len(tied) else ""),
                found=f"parts of {', '.join(map(str, parts[:12]))} qubits",
                hint=f"qubits {', '.join(map(str, wires[:12].tolist()))} must meet",
            )
        # The tightest part that holds the group, so that large ones stay free for large groups.
        chosen = min(fitting, key=lambda c: room[c])
        homes[wires] = chosen
        room[chosen] -= len(wires)
    return homes


def _completed(placement: Integers, task: _Task, active: NDArray[np.bool_], rng: np.random.Generator) -> Integers:
    """Put wires that have no place yet, idle ones last, on the qubits that are left."""
    out = placement.copy()
    taken = np.zeros(task.graph.n, dtype=bool)
    taken[out[out >= 0]] = True
    for wire in task.used[out[task.used] < 0].tolist():
        free = np.flatnonzero(~taken & active & (task.graph.component == task.home[wire]))
        out[wire] = free[rng.integers(len(free))]
        taken[out[wire]] = True
    idle = np.flatnonzero(out < 0)
    out[idle] = np.flatnonzero(~taken)
    return out


def _grow(task: _Task, active: NDArray[np.bool_], rng: np.random.Generator) -> Integers:
    """Place wire after wire, the one bound most to those placed, where its partners are nearest."""
    graph, weight = task.graph, task.weight
    out = task.fixed.copy()
    taken = ~active
    taken[out[out >= 0]] = True
    degree = np.diff(graph.starts)
    attached = weight[:, out >= 0].sum(axis=1)
    remaining = {int(w) for w in task.used if out[w] < 0 and weight[w].any()}
    while remaining:
        wires = np.array(sorted(remaining))
        noise = 1 + 0.2 * rng.random(len(wires))
        best = np.lexsort((weight[wires].sum(axis=1) * noise, attached[wires] * noise))[-1]
        wire = int(wires[best])
        free = np.flatnonzero(~taken & (graph.component == task.home[wire]))
        partners = np.flatnonzero((weight[wire] > 0) & (out >= 0))
        if len(partners):
            away = graph.distance[np.ix_(free, out[partners])].astype(float) @ weight[wire, partners]
            open_ = np.array([np.count_nonzero(~taken[_neighbours(graph, q)]) for q in free.tolist()])
            # Among equally near qubits, one that leaves room for the partners still to come.
            score = away * (1 + 0.1 * rng.random(len(free))) - 1e-3 * open_
        else:
            middle = graph.distance[np.ix_(free, free)].astype(float).mean(axis=1)
            score = middle * (1 + 0.5 * rng.random(len(free))) - 0.1 * degree[free]
        out[wire] = free[int(np.argmin(score))]
        taken[out[wire]] = True
        attached += weight[:, wire]
        remaining.discard(wire)
    return out


def _neighbours(graph: Graph, q: int) -> Integers:
    return np.asarray(graph.neighbours[graph.starts[q] : graph.starts[q + 1]])


def _region(task: _Task, active: NDArray[np.bool_], rng: np.random.Generator) -> Integers:
    """Place the wires of each component at random in a compact region around a random qubit."""
    out = task.fixed.copy()
    taken = ~active
    taken[out[out >= 0]] = True
    waiting = task.used[out[task.used] < 0]
    for home in np.unique(task.home[waiting]).tolist():
        wires = rng.permutation(waiting[task.home[waiting] == home])
        free = np.flatnonzero(~taken & (task.graph.component == home))
        distance = task.graph.distance[rng.choice(free), free].astype(float)
        region = free[np.argsort(distance + 0.5 * rng.random(len(free)))[: len(wires)]]
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
    steps: int,
    rng: np.random.Generator,
) -> Integers | None:
    """Search for a placement of all interacting wires on which every gate meets an edge.

    Parameters
    ----------
    graph : Graph
    linked : ndarray of bool, shape (n, n)
        Which wires interact.
    fixed, home : ndarray of int32, shape (n,)
        Qubit of a wire that has its place, else -1; component of each wire.
    active : ndarray of bool, shape (n,)
    steps : int
        Wires placed in all, over several restarts, before the search is given up.
    rng : numpy.random.Generator

    Returns
    -------
    ndarray of int32, shape (n,), or None
        -1 for wires that do not interact. None where nothing was found, which proves nothing.
    """
    wires = np.flatnonzero(linked.any(axis=1))
    degrees = linked.sum(axis=1)
    degree = np.diff(graph.starts)
    if len(wires) == 0:
        return fixed.copy()
    if degrees.max() > degree.max(initial=0) or linked.sum() // 2 > len(graph.edges):
        return None
    masks = [sum(1 << int(q) for q in _neighbours(graph, p)) for p in range(graph.n)]
    domains: dict[int, int] = {}
    for w in wires.tolist():
        if fixed[w] >= 0:
            domains[w] = 1 << int(fixed[w])
        else:
            fits = active & (graph.component == home[w]) & (degree >= degrees[w])
            fits[fixed[fixed >= 0]] = False
            domains[w] = sum(1 << int(q) for q in np.flatnonzero(fits))
    partners = {w: np.flatnonzero(linked[w]).tolist() for w in wires.tolist()}
    budget = 200
    spent = 0
    while spent < steps:
        found, used = _search(domains, partners, masks, min(budget, steps - spent), rng)
        spent += used
        budget *= 2
        if found is not None:
            out = fixed.copy()
            out[list(found)] = list(found.values())
            return out
        if used < budget // 2:
            return None
    return None


def _search(
    domains: dict[int, int], partners: dict[int, list[int]], masks: list[int], budget: int, rng: np.random.Generator
) -> tuple[dict[int, int] | None, int]:
    """Backtrack without recursion; domains are bit sets. Return the embedding, if found, and the steps taken."""
    # One level a placed wire: the wire, its qubits left to try, the domains before it was placed.
    levels: list[tuple[int, list[int], dict[int, int]]] = []
    placed: dict[int, int] = {}
    current = dict(domains)
    used = 0
    while True:
        if len(placed) == len(domains):
            return placed, used
        wire = min((w for w in current if w not in placed), key=lambda w: (current[w].bit_count(), -len(partners[w])))
        values = [q for q in range(current[wire].bit_length()) if current[wire] >> q & 1]
        levels.append((wire, rng.permutation(values).tolist(), current))
        while levels:
            wire, values, before = levels[-1]
            if not values:
                levels.pop()
                placed.pop(wire, None)
                continue
            if used >= budget:
                return None, used
            used += 1
            q = values.pop()
            narrowed = _narrowed(before, wire, q, placed, partners, masks)
            if narrowed is not None:
                placed[wire] = q
                current = narrowed
                break
            placed.pop(wire, None)
        else:
            return None, used


def _narrowed(
    before: dict[int, int], wire: int, q: int, placed: dict[int, int], partners: dict[int, list[int]], masks: list[int]
) -> dict[int, int] | None:
    """Return the domains after placing `wire` on `q`, or None if one of them is empty."""
    near = set(partners[wire])
    after: dict[int, int] = {}
    for other, domain in before.items():
        if other == wire:
            after[other] = 1 << q
        elif other in placed:
            after[other] = domain
        else:
            left = domain & ~(1 << q)
            if other in near:
                left &= masks[q]
            if not left:
                return None
            after[other] = left
    return after
