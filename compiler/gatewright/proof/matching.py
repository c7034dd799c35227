"""Find a proof for a pair of circuits by consuming both in two-qubit blocks, with the placement and the swaps followed.

Both circuits are cut into blocks: all gates on a pair of wires until one of them meets a third. Output blocks are
taken in order. Each must do what the next source block on the same two wires does, or the first gates of it, up to
one-qubit unitaries that are owed to later blocks and up to an exchange of the two wires; or nothing but that by itself.
Where no placement is given, the wires of the output are bound to those of the source when they first meet a block,
trying one possibility after another. What is found is a `Step` like any other, for the checker to judge: an error
here can make it fail, never make it accept.
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gatewright.circuit import Circuit
from gatewright.gates import MEASURE
from gatewright.proof.blocks import FIXED, LOOSE, PAIR, SWAP_ROWS, Blocks, factors_of, without_idle_blocks
from gatewright.proof.windows import Proof, Step

__all__ = ["Matched", "Stuck", "match_circuits"]

Array = NDArray[np.complex128]
Rows = NDArray[np.int64]

#: How many ways of binding wires are tried.
TRIALS = 64
#: How many blocks are looked at in all these.
WORK = 100_000
#: How many gates of a block are tried as a part of it, where the whole does not fit.
LOOKAHEAD = 12
_ONE, _FOUR = np.eye(2, dtype=np.complex128), np.eye(4, dtype=np.complex128)


@dataclass(frozen=True, eq=False, slots=True)
class Stuck:
    """Where matching ended without success.

    Attributes
    ----------
    operation : int
        The output operation that begins the block that could not be matched; -1 at the end of the output.
    qubits : tuple of int
        Output qubits of it.
    blocks : int
        Output blocks matched before it.
    distance : float or None
        Where the next source block on the same wires is known: how far the block is from it, in operator norm, up to
        one-qubit unitaries, from the operator-Schmidt coefficients.
    certain : bool
        Whether the placement was given.
    """

    operation: int
    qubits: tuple[int, ...]
    blocks: int
    distance: float | None
    certain: bool


@dataclass(frozen=True, eq=False, slots=True)
class Matched:
    """A proof found, for the checker.

    Attributes
    ----------
    proof : Proof
    """

    proof: Proof


def match_circuits(source: Circuit, output: Circuit, initial: Sequence[int] | None = None) -> Matched | Stuck:
    """Look for a proof that `output` does the same as `source`.

    Parameters
    ----------
    source, output : Circuit
        The output has at least as many qubits.
    initial : sequence of int, optional
        Output qubit of each source qubit at the start; found if not given.

    Returns
    -------
    Matched or Stuck
        The proof for the checker, or how far it went.

    Examples
    --------
    >>> from gatewright.circuit import Builder
    >>> a = Builder(2).gate("h", 0).gate("cx", 0, 1).build()
    >>> b = Builder(2).gate("h", 0).gate("h", 1).gate("cz", 0, 1).gate("h", 1).build()
    >>> match_circuits(a, b).proof.windows
    3
    """
    steps: list[Step] = []
    while (step := without_idle_blocks(source)) is not None:
        assert step.output is not None
        steps.append(step)
        source = step.output
    meant, made = Blocks(source), Blocks(output)
    furthest: Stuck | None = None
    for sparing in (False, True):
        choices: list[int] = []
        for _ in range(max(1, min(TRIALS, WORK // (len(made.kind) + 1)))):
            search = _Search(meant, made, initial, choices, sparing=sparing)
            found = search.run()
            if isinstance(found, Step):
                return Matched(Proof((*steps, found)))
            if furthest is None or found.blocks > furthest.blocks:
                furthest = found
            # The last decision with another possibility takes it; those after it begin anew.
            taken = search.decisions
            while taken and taken[-1][0] + 1 >= taken[-1][1]:
                taken.pop()
            if not taken:
                break
            choices = [choice for choice, _ in taken[:-1]] + [taken[-1][0] + 1]
    assert furthest is not None
    return furthest


class _Search:
    """One pass over both circuits."""

    def __init__(
        self, meant: Blocks, made: Blocks, initial: Sequence[int] | None, choices: list[int], *, sparing: bool
    ) -> None:
        self.meant, self.made, self.choices, self.sparing = meant, made, choices, sparing
        self.n, self.wires = made.circuit.n_qubits, meant.circuit.n_qubits
        self.decisions: list[tuple[int, int]] = []
        self.given = initial is not None
        # A label is the output qubit on which a wire begins; `label_at` says which is where now.
        self.label_at, self.place_of = list(range(self.n)), list(range(self.n))
        self.bound = [-1] * self.n
        self.label_of = [-1] * self.wires
        for wire, label in enumerate(initial or ()):
            self.bound[label], self.label_of[wire] = wire, label
        self.seam: list[Array] = [_ONE] * self.n
        self.next = [0] * self.wires
        self.done = [0] * len(meant.kind)
        # Output blocks: how far each is consumed, those that come next, those that wait for something of the source.
        self.begun = [0] * len(made.kind)
        self.reached = [0] * self.n
        self.ready: list[int] = []
        self.waiting: set[int] = set()
        self.matched = 0
        self.slots: list[tuple[int, int, int]] = []
        self.counts: list[int] = []
        self.seams: list[Array] = []
        self.source_window = np.zeros(len(meant.wide), dtype=np.int32)
        self.output_window = np.zeros(len(made.wide), dtype=np.int32)
        self.source_run = np.zeros(len(meant.runs), dtype=np.int32)
        self.output_run = np.zeros(len(made.runs), dtype=np.int32)

    def run(self) -> Step | Stuck:
        """Match blocks as soon as they come next on their wires, in the order of the output where there is a choice."""
        made, meant = self.made, self.meant
        for wire in range(self.wires):
            self._settle(wire)
        for block, wires in enumerate(made.wires):
            if all(made.lanes[q][0] == block for q in wires):
                self.ready.append(block)
        heapq.heapify(self.ready)
        while self.ready or self.waiting:
            if not self.ready and self._split_some():
                continue
            if not self.ready:
                block = min(self.waiting, key=lambda b: (not self._is_open(b), b))
                if not self._is_open(block) or not self._bind(block):
                    return self._stuck(min(self.waiting))
                self.waiting.discard(block)
                heapq.heappush(self.ready, block)
                continue
            block = heapq.heappop(self.ready)
            q = made.wires[block][0]
            if self.reached[q] >= len(made.lanes[q]) or made.lanes[q][self.reached[q]] != block:
                continue  # offered twice, and done
            kind = made.kind[block]
            if not (self._pair(block) if kind == PAIR else kind == FIXED and self._fixed(block)):
                self.waiting.add(block)
                continue
            self.matched += 1
            for q in made.wires[block]:
                self.reached[q] += 1
            for q in made.wires[block]:
                self._offer(q)
        # What is left may still do no more than exchange wires that the output never used.
        for wire, lane in enumerate(meant.lanes):
            if self.next[wire] < len(lane) and self.label_of[wire] < 0:
                label = min((k for k in range(self.n) if self.bound[k] < 0), key=lambda k: (k != wire, k))  # noqa: B023
                self._join(label, wire)
        for wire in range(self.wires):
            self._settle(wire)
        if any(self.next[wire] < len(lane) for wire, lane in enumerate(meant.lanes)):
            return self._stuck(-1)
        return self._finish()

    def _split_some(self) -> bool:
        """Match a part of a block that waits, where nothing else goes on."""
        for block in sorted(self.waiting):
            before = self.begun[block]
            if self.made.kind[block] == PAIR and (self._pair(block, split=True) or self.begun[block] > before):
                self.waiting.discard(block)
                heapq.heappush(self.ready, block)
                return True
        return False

    def _offer(self, q: int) -> None:
        """Make the output block that comes next on a qubit ready, if it comes next on all of its own."""
        lanes = self.made.lanes
        if self.reached[q] < len(lanes[q]):
            block = lanes[q][self.reached[q]]
            if all(
                self.reached[p] < len(lanes[p]) and lanes[p][self.reached[p]] == block for p in self.made.wires[block]
            ):
                heapq.heappush(self.ready, block)

    def _is_open(self, block: int) -> bool:
        return self.made.kind[block] == PAIR and any(self.bound[self.label_at[q]] < 0 for q in self.made.wires[block])

    def _stuck(self, block: int) -> Stuck:
        if block < 0:
            return Stuck(-1, (), self.matched, None, self.given)
        distance = None
        wires = self.made.wires[block]
        if self.made.kind[block] == PAIR:
            wires_of = [self.bound[self.label_at[q]] for q in wires]
            facing = self._front(wires_of[0], wires_of[1]) if min(wires_of) >= 0 else None
            if facing is not None:
                product = self._compared(block, self._rest(facing, wires_of[0]))
                distance = min(_schmidt_distance(product), _schmidt_distance(product[SWAP_ROWS]))
        operation = int(self.made.wide[self.made.members[block][0]])
        return Stuck(operation, wires, self.matched, distance, self.given)

    # What comes next on the source's wires.

    def _ahead(self, wire: int) -> int:
        lane = self.meant.lanes[wire]
        return lane[self.next[wire]] if self.next[wire] < len(lane) else -1

    def _front(self, a: int, b: int) -> int | None:
        """Return the block on wires a and b that comes next on both."""
        block = self._ahead(a)
        return block if block >= 0 and block == self._ahead(b) and self.meant.kind[block] == PAIR else None

    def _rest(self, block: int, first: int, gates: int | None = None) -> Array:
        """Return what is left of a source block, or its next `gates`, with wire `first` as the first factor."""
        begun = self.done[block]
        if begun == 0 and gates is None:
            product: Array = self.meant.products[block]
        else:
            members = self.meant.members[block][begun:]
            product = _FOUR
            for k in members[:gates]:
                product = self.meant.atoms[k] @ product
        return np.asarray(product if self.meant.wires[block][0] == first else product[SWAP_ROWS][:, SWAP_ROWS])

    def _compared(self, block: int, product: Array, stop: int | None = None) -> Array:
        """Return what an output block, up to its member `stop`, does beyond `product` of the source."""
        p, q = self.made.wires[block]
        ahead = _pair_tensor(self.seam[self.label_at[p]], self.seam[self.label_at[q]])
        if self.begun[block] == 0 and stop is None:
            made: Array = self.made.products[block]
        else:
            made = _FOUR
            for k in self.made.members[block][self.begun[block] : stop]:
                made = self.made.atoms[k] @ made
        return np.asarray(made @ ahead @ product.conj().T)

    # Consuming.

    def _pair(self, block: int, *, split: bool = False) -> bool:
        """Match an output block: as a whole, or, with `split`, piece by piece."""
        members = len(self.made.members[block])
        while self.begun[block] < members:
            labels = self.label_at[self.made.wires[block][0]], self.label_at[self.made.wires[block][1]]
            a, b = self.bound[labels[0]], self.bound[labels[1]]
            facing = self._front(a, b) if min(a, b) >= 0 else None
            gates = len(self.meant.members[facing]) - self.done[facing] if facing is not None else 0
            # All of the source block, nothing of it, or the first gates, the most or the fewest first.
            most = [] if facing is None else [None, *range(gates - 1, 0, -1)]
            ways: list[tuple[int | None, int | None]] = [(facing, part) for part in most]
            ways.insert(min(len(ways), 1), (None, None))
            if self.sparing:
                ways.reverse()
            if any(self._consume(block, labels, *way, None) for way in ways):
                return True
            if not split:
                return False
            stops = range(min(members - 1, self.begun[block] + LOOKAHEAD), self.begun[block], -1)
            parts = (None, *range(min(gates - 1, LOOKAHEAD), 0, -1)) if facing is not None else ()
            some = any(self._consume(block, labels, facing, part, stop) for part in parts for stop in stops)
            if not some and not any(self._consume(block, labels, None, None, stop) for stop in stops):
                return False
        return True

    def _consume(
        self, block: int, labels: tuple[int, int], facing: int | None, gates: int | None, stop: int | None
    ) -> bool:
        """Match (a part of) an output block with a source block, or part of it, or nothing, if it fits."""
        first = self.bound[labels[0]]
        product = _FOUR if facing is None else self._rest(facing, first, gates)
        difference = self._compared(block, product, stop)
        factors, crossed = factors_of(difference), False
        if factors is None:
            factors, crossed = factors_of(difference[SWAP_ROWS]), True
        if factors is None:
            return False
        window = self._window(labels, self.made.wires[block], crossed, factors)
        for k in self.made.members[block][self.begun[block] : stop]:
            self.output_window[k] = window
            self.output_run[self.made.run_lists[k]] = window
        self.begun[block] = len(self.made.members[block]) if stop is None else stop
        if facing is not None:
            members = self.meant.members[facing]
            self._take(facing, len(members) if gates is None else self.done[facing] + gates, window)
        return True

    def _take(self, block: int, stop: int, window: int) -> None:
        members = self.meant.members[block]
        for k in members[self.done[block] : stop]:
            self.source_window[k] = window
            self.source_run[self.meant.run_lists[k]] = window
        self.done[block] = stop
        if stop == len(members):
            for wire in self.meant.wires[block]:
                self.next[wire] += 1
        for wire in self.meant.wires[block]:
            self._settle(wire)
            self._wake(wire)

    def _wake(self, wire: int) -> None:
        """Try again the output block that waits where a wire is."""
        place = self.place_of[self.label_of[wire]]
        lane = self.made.lanes[place]
        if self.reached[place] < len(lane) and lane[self.reached[place]] in self.waiting:
            self.waiting.discard(lane[self.reached[place]])
            heapq.heappush(self.ready, lane[self.reached[place]])

    def _window(self, labels: Sequence[int], places: Sequence[int], crossed: bool, factors: Sequence[Array]) -> int:
        leave = places[::-1] if crossed else places
        for label, entry, out, seam in zip(labels, places, leave, factors, strict=True):
            self.slots.append((label, entry, out))
            self.seams.append(seam)
            self.seam[label] = seam
            self.label_at[out], self.place_of[label] = label, out
        self.counts.append(len(places))
        return len(self.counts) - 1

    def _settle(self, wire: int) -> None:
        """Consume source blocks that do no more than one-qubit gates and an exchange, while they come next."""
        while True:
            block = self._ahead(wire)
            if block < 0 or not (self.meant.trivial[block] or self.done[block]):
                return
            if self.meant.kind[block] != PAIR or self._front(*self.meant.wires[block]) is None:
                return
            a, b = self.meant.wires[block]
            labels = self.label_of[a], self.label_of[b]
            if min(labels) < 0:
                return
            places = self.place_of[labels[0]], self.place_of[labels[1]]
            difference = _pair_tensor(self.seam[labels[0]], self.seam[labels[1]]) @ self._rest(block, a).conj().T
            factors, crossed = factors_of(difference), False
            if factors is None:
                # The source exchanges its wires and the output does not: each takes the other's place.
                factors, crossed = factors_of(difference[SWAP_ROWS]), True
            if factors is None:
                return
            window = self._window(labels, places, crossed, factors)
            self._take(block, len(self.meant.members[block]), window)

    # Binding wires.

    def _choose(self, count: int) -> int:
        at = len(self.decisions)
        choice = self.choices[at] if at < len(self.choices) else 0
        self.decisions.append((choice, count))
        return choice

    def _join(self, label: int, wire: int) -> None:
        self.bound[label], self.label_of[wire] = wire, label

    def _bind(self, block: int) -> bool:
        """Bind the wires of an output block to those of a source block that comes next and may be the same."""
        labels = self.label_at[self.made.wires[block][0]], self.label_at[self.made.wires[block][1]]
        a, b = self.bound[labels[0]], self.bound[labels[1]]
        fronts = {self._ahead(a if a >= 0 else b)} if max(a, b) >= 0 else {self._ahead(w) for w in range(self.wires)}
        options = []
        wanted = self.made.invariants[block]
        for facing in fronts:
            if facing < 0 or self.meant.kind[facing] != PAIR or self._front(*self.meant.wires[facing]) is None:
                continue
            alike = bool(np.abs(self.meant.invariants[facing] - wanted).max() < LOOSE)
            for pair in (self.meant.wires[facing], self.meant.wires[facing][::-1]):
                if all(
                    self.label_of[wire] in (-1, label) and self.bound[label] in (-1, wire)
                    for wire, label in zip(pair, labels, strict=True)
                ):
                    moved = sum(wire != label for wire, label in zip(pair, labels, strict=True))
                    options.append((moved > 0, not alike, moved, facing, pair))
        options.sort()
        if not options:
            return False
        choice = self._choose(min(len(options), TRIALS))
        for label, wire in zip(labels, options[choice][-1], strict=True):
            self._join(label, wire)
        for wire in options[choice][-1]:
            self._settle(wire)
        return True

    # Measurements, resets and barriers, and the ends.

    def _fixed(self, block: int) -> bool:
        """Match a measurement, reset or barrier with the same one of the source."""
        row = int(self.made.wide[self.made.members[block][0]])
        places = self.made.wires[block]
        facing = self._same_fixed(row, places)
        if facing is None:
            return False
        wires = self.meant.wires[facing]
        labels = [self.label_of[wire] for wire in wires]
        member = self.meant.members[facing][0]
        for j, (wire, label) in enumerate(zip(wires, labels, strict=True)):
            place = self.place_of[label]
            window = self._window([label], [place], False, [_ONE])
            self.source_run[self.meant.run_lists[member][j]] = window
            own = self.made.members[block][0]
            self.output_run[self.made.run_lists[own][places.index(place)]] = window
            self.next[wire] += 1
        held = [self.place_of[label] for label in labels]
        window = self._window(labels, held, False, [_ONE] * len(held))
        self.source_window[member] = window
        self.output_window[self.made.members[block][0]] = window
        self.done[facing] = 1
        for wire in wires:
            self._settle(wire)
            self._wake(wire)
        return True

    def _same_fixed(self, row: int, places: tuple[int, ...]) -> int | None:
        made, meant = self.made.circuit, self.meant.circuit
        name, bit = made.table[made.op[row]].name, made.link[row]
        wires = [self.bound[self.label_at[p]] for p in places]
        free = [w for w in range(self.wires) if self.label_of[w] < 0]
        lanes = [w for w in wires if w >= 0] or free
        for wire in lanes:
            self._settle(wire)
            facing = self._ahead(wire)
            if facing < 0 or self.meant.kind[facing] != FIXED:
                continue
            other = int(self.meant.wide[self.meant.members[facing][0]])
            same = meant.table[meant.op[other]].name == name and len(self.meant.wires[facing]) == len(places)
            if not same or (name == MEASURE.name and meant.link[other] != bit):
                continue
            held, wanted = (
                circuit.parameters[slice(*circuit.parameter_offsets[k : k + 2])]
                for circuit, k in ((made, row), (meant, other))
            )
            if not np.array_equal(held, wanted):
                continue
            their = self.meant.wires[facing]
            if any(self._ahead(w) != facing for w in their):
                continue
            unbound = [w for w in their if self.label_of[w] < 0]
            open_labels = [self.label_at[p] for p in places if self.bound[self.label_at[p]] < 0]
            if {w for w in wires if w >= 0} != set(their) - set(unbound) or len(unbound) != len(open_labels):
                continue
            for w, label in zip(unbound, open_labels, strict=True):
                self._join(label, w)
            return facing
        return None

    def _finish(self) -> Step | Stuck:
        labels = [label for label in range(self.n) if self.bound[label] < 0]
        for wire in [w for w in range(self.wires) if self.label_of[w] < 0]:
            meant = self.meant.runs[self.meant.tails[wire]]
            labels.sort(key=lambda label: (label != wire, label))
            for label in labels:
                place = self.place_of[label]
                difference = self.made.runs[self.made.tails[place]] @ self.seam[label] @ meant.conj().T
                if abs(abs(np.trace(difference)) - 2) < LOOSE:
                    self._join(label, wire)
                    labels.remove(label)
                    break
            else:
                return self._stuck(-1)
        # Wires beyond the source's take what is left.
        for wire, label in enumerate(labels, self.wires):
            self.bound[label] = wire
        for place, label in enumerate(list(self.label_at)):
            window = self._window([label], [place], False, [_ONE])
            self.output_run[self.made.tails[place]] = window
            if self.bound[label] < self.wires:
                self.source_run[self.meant.tails[self.bound[label]]] = window
        return self._step()

    def _step(self) -> Step:
        slots = np.array(self.slots, dtype=np.int32).reshape(-1, 3)
        bound = np.array(self.bound, dtype=np.int32)
        initial, final = np.empty(self.n, dtype=np.int32), np.empty(self.n, dtype=np.int32)
        initial[bound] = np.arange(self.n)
        final[bound[self.label_at]] = np.arange(self.n)
        windows = []
        for side, wide, runs in (
            (self.meant, self.source_window, self.source_run),
            (self.made, self.output_window, self.output_run),
        ):
            window = np.empty(len(side.circuit), dtype=np.int32)
            window[side.wide], window[side.single] = wide, runs[side.run_of_single]
            windows.append(window)
        return Step(
            initial=initial,
            final=final,
            source_window=windows[0],
            output_window=windows[1],
            offsets=np.concatenate([[0], np.cumsum(self.counts)]).astype(np.int64),
            wires=bound[slots[:, 0]],
            entry=slots[:, 1].copy(),
            exit=slots[:, 2].copy(),
            seams=_quaternions(np.array(self.seams).reshape(-1, 2, 2)),
        )


def _pair_tensor(a: Array, b: Array) -> Array:
    return np.asarray((a[:, None, :, None] * b[None, :, None, :]).reshape(4, 4))


def _schmidt_distance(matrix: Array) -> float:
    """Return a lower bound on the operator-norm distance from products: that in Frobenius norm, divided by 2."""
    realigned = matrix.reshape(2, 2, 2, 2).transpose(0, 2, 1, 3).reshape(4, 4)
    rest = np.linalg.svd(realigned, compute_uv=False)[1:]
    return float(np.sqrt((rest**2).sum()) / 2)


def _quaternions(u: Array) -> NDArray[np.float64]:
    """Return (a, b, c, d) with u ∝ a - i(b X + c Y + d Z)."""
    determinant = u[:, 0, 0] * u[:, 1, 1] - u[:, 0, 1] * u[:, 1, 0]
    m = u / np.sqrt(determinant)[:, None, None]
    parts = (
        (m[:, 0, 0] + m[:, 1, 1]).real,
        -(m[:, 0, 1] + m[:, 1, 0]).imag,
        (m[:, 1, 0] - m[:, 0, 1]).real,
        (m[:, 1, 1] - m[:, 0, 0]).imag,
    )
    quaternions = np.stack(parts, axis=1) / 2
    return np.asarray(quaternions / np.linalg.norm(quaternions, axis=1, keepdims=True))
