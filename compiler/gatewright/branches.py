"""Compile programs with classical control: every straight-line circuit by the chain, placements threaded through.

A circuit begins where the one before left its qubits. A loop's body ends where it began, and so do ``break`` and
``continue``; where branches meet, all end on the places that cost the fewest restoring swaps. A program that can end
early ends where it began. The swaps are part of the circuits, and merge with their gates like any others.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from gatewright.circuit import Circuit
from gatewright.cost import Costs
from gatewright.mapping.restoring import restoring_swaps
from gatewright.program import Assign, Block, If, Leave, Program, Statement, While, inner_blocks
from gatewright.stages.draft import Draft, Stage
from gatewright.stages.place import device_graph
from gatewright.stages.settle import cheaper, costs_of, settle, stays, unchanged

__all__ = ["Threaded", "combined_costs", "thread_program"]

Places = tuple[int, ...]

#: Rounds that a loop is taken to run when swaps in it are weighed against swaps before it.
ROUNDS = 4


@dataclass(frozen=True, eq=False, slots=True)
class Threaded:
    """A program whose circuits have been through the chain.

    Attributes
    ----------
    program : Program
    drafts : tuple of Draft
        Of each circuit, in the order of the text.
    """

    program: Program
    drafts: tuple[Draft, ...]


@dataclass(frozen=True, eq=False, slots=True)
class _Made:
    """A block compiled: its drafts, and where it leaves the qubits (None if nothing goes on behind it)."""

    block: Block
    drafts: tuple[Draft, ...]
    end: Places | None

    @property
    def swaps(self) -> int:
        return sum(draft.swaps for draft in self.drafts)


def thread_program(program: Program, draft: Draft, chain: Sequence[Stage]) -> Threaded:
    """Run the chain over every circuit of a program.

    Parameters
    ----------
    program : Program
    draft : Draft
        Device, settings and native set; its circuit is not used.
    chain : sequence of callables
        Stages; those up to the first that places qubits run once over all circuits joined, to choose the start.

    Raises
    ------
    CannotError
        As the stages do.
    """
    joined = program.joined()
    start = replace(draft, circuit=joined, expanded=joined)
    for stage in chain:
        start = stage(start)
        if len(start.initial):
            break
    begin: Places = tuple(start.initial[: program.n_qubits].tolist())
    ends_early = any(statement.word == "end" for statement in _leaves(program.body))
    made = _Threader(draft, chain, begin).block(program.body, begin, begin if ends_early else None, None)
    changed = replace(
        program,
        n_qubits=draft.device.n_qubits,
        body=made.block,
        qubit_registers=(),
    )
    return _settled(program, draft, Threaded(changed, made.drafts), chain)


def _settled(program: Program, draft: Draft, made: Threaded, chain: Sequence[Stage]) -> Threaded:
    """Return the program itself where it is legal as it stands and not dearer, if the chain settles circuits so."""
    if settle not in chain or program.n_qubits != draft.device.n_qubits or not stays(draft.settings):
        return made
    same: list[Draft] = []
    for part, circuit in zip(made.drafts, program.circuits(), strict=True):
        kept = unchanged(part, circuit)
        if kept is None:
            return made
        same.append(kept)
    costs = combined_costs(made.program, [costs_of(part) for part in made.drafts])
    if cheaper(costs, combined_costs(program, [costs_of(part) for part in same])):
        return made
    return Threaded(program, tuple(same))


def _leaves(block: Block) -> list[Leave]:
    found = [statement for statement in block.statements if isinstance(statement, Leave)]
    for statement in block.statements:
        for inner in inner_blocks(statement):
            found += _leaves(inner)
    return found


def _stops(block: Block) -> list[Statement | None]:
    """Return the statement behind each circuit, past assignments with nothing but empty circuits behind them."""
    stops: list[Statement | None] = [*block.statements, None]
    for k in range(len(block.statements) - 1, -1, -1):
        if isinstance(stops[k], Assign) and not len(block.circuits[k + 1]):
            stops[k] = stops[k + 1]
    return stops


class _Threader:
    """Compiles blocks from a given placement, to a given one or wherever they end."""

    def __init__(self, draft: Draft, chain: Sequence[Stage], begin: Places) -> None:
        self.draft = draft
        self.chain = chain
        self.begin = begin
        self.graph = device_graph(draft)

    def circuit(self, circuit: Circuit, start: Places, target: Places | None) -> Draft:
        settings = replace(self.draft.settings, placement=start, final=target)
        made = replace(self.draft, circuit=circuit, expanded=circuit, source=circuit, settings=settings)
        for stage in self.chain:
            made = stage(made)
        return made

    def block(self, block: Block, start: Places, target: Places | None, loop: Places | None) -> _Made:
        circuits: list[Circuit] = []
        statements: list[Statement] = []
        drafts: list[Draft] = []
        place, gone = start, False
        # An empty circuit behind an assignment stays empty: swaps come before the assignment, where a text that is
        # read again has room for them.
        stops = _stops(block)
        for k, (circuit, statement) in enumerate(zip(block.circuits, (*block.statements, None), strict=True)):
            stop = stops[k] if k == 0 or stops[k - 1] is not stops[k] else Assign
            wanted = target if stop is None and not gone else None
            if isinstance(stop, Leave):
                wanted = self.begin if stop.word == "end" else loop
            elif isinstance(stop, While):
                wanted = self.before(circuit, stop, place)
            made = self.circuit(circuit, place, wanted)
            circuits.append(made.circuit)
            drafts.append(made)
            place = tuple(made.final[: len(place)].tolist())
            match statement:
                case If():
                    first, second = self.branches(statement, place, loop)
                    statements.append(If(statement.condition, first.block, second.block))
                    drafts += (*first.drafts, *second.drafts)
                    end = first.end if first.end is not None else second.end
                    place, gone = (place, True) if end is None else (end, gone)
                case While(condition, body):
                    inner = self.block(body, place, place, place)
                    statements.append(While(condition, inner.block))
                    drafts += inner.drafts
                case Leave():
                    statements.append(statement)
                    gone = True
                case Assign():
                    statements.append(statement)
        return _Made(Block(tuple(circuits), tuple(statements)), tuple(drafts), None if gone else place)

    def branches(self, statement: If, place: Places, loop: Places | None) -> tuple[_Made, _Made]:
        """Compile two branches so that they end on the same places."""
        made = [self.block(block, place, None, loop) for block in (statement.then, statement.otherwise)]
        ends = [branch.end for branch in made]
        if ends[0] is None or ends[1] is None or ends[0] == ends[1]:
            return made[0], made[1]
        meeting = min((ends[0], ends[1], place), key=lambda end: self.apart(ends[0], end) + self.apart(ends[1], end))
        for k, block in enumerate((statement.then, statement.otherwise)):
            if ends[k] != meeting:
                made[k] = self.block(block, place, meeting, loop)
        return made[0], made[1]

    def before(self, circuit: Circuit, loop: While, place: Places) -> Places | None:
        """Choose the places on which a loop begins: those that routing leaves, or those its body would lead to."""
        there = tuple(self.circuit(circuit, place, None).final[: len(place)].tolist())
        inside = self.block(loop.body, there, there, there)
        free = self.block(loop.body, there, None, there)
        if not inside.swaps or free.end is None or free.end == there:
            return None
        better = self.block(loop.body, free.end, free.end, free.end)
        saved = ROUNDS * (inside.swaps - better.swaps)
        return free.end if saved > self.apart(there, free.end) else None

    def apart(self, now: Places | None, wanted: Places) -> int:
        if now is None:
            return 0
        return len(restoring_swaps(self.graph, np.array(now, np.int32), np.array(wanted, np.int32)))


def combined_costs(program: Program, costs: Sequence[Costs]) -> Costs:
    """Combine the costs of a program's circuits.

    Gates are counted over all branches. Depth and duration are those of the longest run that passes every loop once,
    each circuit waiting for the one before; the success estimate is that of the worst such run.

    Parameters
    ----------
    program : Program
    costs : sequence of Costs
        One for each circuit, in the order of the text.
    """
    remaining = iter(costs)

    def block(given: Block) -> Costs:
        total = next(remaining)
        for statement in given.statements:
            inner = [block(part) for part in inner_blocks(statement)]
            if inner:
                either = _merged(inner[0], inner[1], np.maximum, np.minimum) if len(inner) == 2 else inner[0]
                total = _merged(total, either)
            total = _merged(total, next(remaining))
        return total

    return block(program.body)


def _merged(
    a: Costs, b: Costs, longest: Callable[..., float] = np.add, worst: Callable[..., float] = np.multiply
) -> Costs:
    names = sorted({*a.by_gate, *b.by_gate})
    known = a.duration_ns is not None and b.duration_ns is not None
    estimated = a.success_estimate is not None and b.success_estimate is not None
    return Costs(
        qubits=a.qubits,
        operations=a.operations + b.operations,
        one_qubit_gates=a.one_qubit_gates + b.one_qubit_gates,
        two_qubit_gates=a.two_qubit_gates + b.two_qubit_gates,
        by_gate={name: a.by_gate.get(name, 0) + b.by_gate.get(name, 0) for name in names},
        depth=int(longest(a.depth, b.depth)),
        two_qubit_depth=int(longest(a.two_qubit_depth, b.two_qubit_depth)),
        swaps_inserted=a.swaps_inserted + b.swaps_inserted,
        duration_ns=float(longest(a.duration_ns, b.duration_ns)) if known else None,
        success_estimate=float(worst(a.success_estimate, b.success_estimate)) if estimated else None,
    )
