"""Plan a routing: try starts of several kinds, improve them by passes to and fro and by beams, keep the best.

Every pass, backwards ones too, is a candidate (Li, Ding, Xie, ASPLOS 2019, arXiv:1809.02573, use passes to find starts
only); the beam is that of Lowerre (1976). A portfolio rather than one method: on some circuits annealed starts win, on
others random ones.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.mapping.placement import (
    Task,
    annealed,
    completed,
    embedded_beginning,
    grown,
    perfect_start,
    prepare,
    random_region,
    restored,
)
from gatewright.mapping.routing import IN_TIME, NO_SCRIPT, TERMS, Graph, Operations, Pass, Router

__all__ = ["EFFORTS", "Effort", "Plan", "in_time", "place", "plan"]

Integers = NDArray[np.int32]


@dataclass(frozen=True, slots=True)
class Effort:
    """How much is tried.

    Attributes
    ----------
    restarts : int
        Searches for an embedding.
    trials : int
        Starts at most.
    patience : int
        Starts without improvement after which no more are tried; up to 30 qubits, more in proportion beyond.
    rounds : int
        Passes to and fro from each.
    moves : int
        Annealing moves for each wire.
    work : float
        Of all passes, in gates times the square root of the qubits: fewer trials where the circuit is large.
    width : int
        Of the beam, 0 for none.
    levels : float
        Of all beams, in swaps times width times qubits.
    """

    restarts: int
    trials: int
    patience: int
    rounds: int
    moves: int
    work: float
    width: int
    levels: float


EFFORTS = {
    "quick": Effort(4, 4, 2, 1, 4_000, 1e5, 0, 0.0),
    "standard": Effort(16, 32, 6, 4, 20_000, 6e6, 24, 4e7),
    "deep": Effort(100, 400, 48, 8, 40_000, 2e8, 64, 2e9),
}
#: Operations on which starts are improved; what comes later hardly depends on them.
PREFIX = 20_000
#: Candidates kept for the beam.
KEPT = 6


@dataclass(frozen=True, eq=False, slots=True)
class Plan:
    """A start placement, and the swaps that follow from it.

    Attributes
    ----------
    initial : ndarray of int32, shape (n,)
        Qubit of each wire, idle ones included.
    script : ndarray of int64
        The swaps in order, coded ``p * n + q``; may be cut short.
    """

    initial: Integers
    script: NDArray[np.int64]


@dataclass(frozen=True, eq=False, slots=True)
class _Candidate:
    value: tuple[float, float]
    swaps: int
    plan: Plan


class _Pool:
    """The best candidates so far, no two with the same start."""

    def __init__(self, router: Router, objective: str) -> None:
        self.router = router
        self.objective = objective
        self.held: list[_Candidate] = []

    def value(self, made: Pass) -> tuple[float, float]:
        """Return what is to be least, and what decides between equals."""
        return (made.depth, made.cost) if self.objective == "depth" else (made.cost, made.swaps + 1e-4 * made.depth)

    def add(self, initial: Integers, made: Pass, script: NDArray[np.int64]) -> bool:
        """Take in a candidate; return whether it is the best so far."""
        new = _Candidate(self.value(made), made.swaps, Plan(initial, script))
        best = not self.held or new.value < self.held[0].value
        for k, old in enumerate(self.held):
            if np.array_equal(old.plan.initial, initial):
                if old.value <= new.value:
                    return False
                del self.held[k]
                break
        self.held = sorted([*self.held, new], key=lambda held: held.value)[:KEPT]
        return best

    def wants(self, made: Pass) -> bool:
        """Tell whether a pass promises to get among the best."""
        return len(self.held) < KEPT or self.value(made) <= self.held[-1].value

    @property
    def best(self) -> _Candidate:
        return self.held[0]


def plan(
    graph: Graph,
    operations: Operations,
    *,
    n_source: int,
    active: NDArray[np.bool_],
    effort: str = "standard",
    seed: int = 0,
    fixed: Sequence[int] | None = None,
    objective: str = "entanglers",
) -> Plan:
    """Return a start placement and the swaps to make from there.

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
        An interrupt from the keyboard while searching deep ends the search with the best plan so far.
    seed : int
    fixed : sequence of int, length n_source, optional
        Qubit of each wire, -1 where it is free; respected exactly.
    objective : {"entanglers", "depth"}
        What is made least: entanglers, weighted by what they cost on their edges, or their depth.

    Returns
    -------
    Plan

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
    >>> found = plan(graph, star, n_source=4, active=np.ones(4, bool))
    >>> len(route(graph, star, found.initial, script=found.script).swaps)
    0
    """
    task = prepare(graph, operations, n_source=n_source, active=active, seed=seed, fixed=fixed)
    work = EFFORTS[effort]
    start = perfect_start(task, restarts=work.restarts)
    pinned = bool((task.fixed[task.used] >= 0).all())
    joint = operations.joint
    if start is not None and not pinned:
        return Plan(start, NO_SCRIPT)
    short = len(joint) <= PREFIX
    terms = IN_TIME if in_time(objective, effort) else TERMS
    router = Router(graph, operations.take(joint if short else joint[:PREFIX]), terms=terms)
    pool = _Pool(router, objective)
    if start is not None:
        pool.add(start, router.run(start, seed=seed, record=True), NO_SCRIPT)
    try:
        if start is None:
            _try_starts(task, pool, work, seed=seed)
        if work.width and objective != "depth":
            _widen(pool, task, work, seed=seed)
    except KeyboardInterrupt:
        if effort != "deep" or not pool.held:
            raise
    if short:
        return pool.best.plan
    # What was found for the beginning holds only as a start for the whole.
    whole = Router(graph, operations.take(joint), terms=terms)
    finalists = [held.plan.initial for held in pool.held[: max(1, int(work.work / (len(joint) * graph.n**0.5)))]]
    outcomes = [whole.run(initial, seed=seed) for initial in finalists] if len(finalists) > 1 else []
    best = min(range(len(outcomes)), key=lambda k: pool.value(outcomes[k]), default=0)
    return Plan(finalists[best], NO_SCRIPT)


def in_time(objective: str, effort: str) -> bool:
    """Tell whether passes serve the gate whose qubits are free first: for a low depth, or for speed."""
    return objective == "depth" or effort == "quick"


def place(graph: Graph, operations: Operations, **options: object) -> Integers:
    """Return the start of a `plan` alone."""
    return plan(graph, operations, **options).initial  # type: ignore[arg-type]


def _try_starts(task: Task, pool: _Pool, work: Effort, *, seed: int) -> None:
    router = pool.router
    size = max(1, len(router.operations)) * task.graph.n**0.5
    trials = max(2, min(work.trials, int(work.work / (size * (2 * work.rounds + 1)))))
    patience = max(work.patience, work.patience * task.graph.n // 30)
    since = 0
    for number, start in enumerate(_starts(task, pool, work, trials, seed=seed)):
        before = pool.best.value if pool.held else None
        _improve(pool, start, task, rounds=work.rounds, seed=seed + 1000 * number)
        since = since + 1 if pool.best.value == before else 0
        if pool.best.swaps == 0 or since >= patience:
            return


def _improve(pool: _Pool, start: Integers, task: Task, *, rounds: int, seed: int) -> None:
    """Run to and fro from `start`; each pass is a candidate, unless wires with a fixed place would start elsewhere."""
    router = pool.router
    best: tuple[float, float] | None = None
    since = 0
    for round_ in range(rounds + 1):
        there = router.run(start, seed=seed + round_, record=True)
        pool.add(start, there, there.script())
        back = router.run(there.end, seed=seed + round_, backwards=True, record=True)
        start = restored(back.end, task.fixed)
        if np.array_equal(start, back.end) and pool.wants(back):
            script = np.flip(back.script()).copy()
            pool.add(start, router.run(start, seed=seed, script=script, record=True), script)
        value = min(pool.value(there), pool.value(back))
        since = 0 if best is None or value < best else since + 1
        best = value if best is None else min(best, value)
        if since > 2:
            break


def _starts(task: Task, pool: _Pool, work: Effort, trials: int, *, seed: int) -> Iterator[Integers]:
    """Yield starts of all kinds: annealed on the whole and on the beginning, embedded, grown, random, reheated."""
    moves = int(work.moves * len(task.used) * min(1.0, task.graph.n / 40))
    for trial in range(trials):
        kind = trial % 8
        child = seed * 7919 + trial
        if kind in (0, 4):
            yield annealed(task, moves=moves, fading=None, hot=4.0, seed=child)
        elif kind in (1, 5):
            yield annealed(task, moves=moves, fading=0.25 if kind == 1 else 0.08, hot=4.0, seed=child)
        elif kind == 2 and (trial == 2 or task.graph.n <= 200):
            hint = pool.best.plan.initial if trial % 16 == 2 else None
            yield completed(grown(task, embedded_beginning(task, hint)), task)
        elif kind == 3:
            yield completed(grown(task, task.fixed), task)
        elif kind == 6:
            yield completed(random_region(task), task)
        else:
            fading = (0.05, 0.15, None)[trial // 8 % 3]
            start = pool.held[trial // 8 % len(pool.held)].plan.initial
            yield annealed(task, moves=moves // 4, fading=fading, hot=1.0, seed=child, start=start)


def _widen(pool: _Pool, task: Task, work: Effort, *, seed: int) -> None:
    """Search by beams from the best starts, backwards from where they end, and so on while it helps."""
    router = pool.router
    left = work.levels
    for round_ in range(12):
        before = pool.best
        if before.swaps == 0:
            return
        cost = (before.swaps + 2) * work.width * task.graph.n
        left -= cost
        if left < 0:
            return
        limit = int(1.2 * before.swaps) + 2
        backwards = round_ % 2 == 1
        if backwards and (task.fixed >= 0).any():
            continue
        starts = [held.plan.initial for held in pool.held]
        if backwards:
            starts = [router.run(held.plan.initial, seed=seed, script=held.plan.script).end for held in pool.held]
        found = router.search(starts, width=work.width, limit=limit, backwards=backwards)
        if found is not None:
            start, script = found
            if backwards:
                start, script = router.run(start, seed=seed, script=script, backwards=True).end, np.flip(script).copy()
            pool.add(start, router.run(start, seed=seed, script=script, record=True), script)
        if pool.best is before and round_ > 0:
            return
