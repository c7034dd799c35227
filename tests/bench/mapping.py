"""Measure placement and routing against known optima, published figures, and plain SABRE in the same run.

Every row prints its medians and worst cases beside its goal. Circuits, sizes and seeds are the held-out ones; with
``--tuning`` those meant for tuning. The rows on structured and random circuits compile twice, once with the baseline in
the chain, and prove both results; swaps of all others are replayed here.

    python tests/bench/mapping.py [--rows structured,speed] [--share 0.2] [--tuning] [--effort standard]
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

import networkx as nx
import numpy as np

import gatewright as gw
import lattices
import plain_sabre
import workloads
from gatewright.circuit import Builder, Circuit, Piece, assemble
from gatewright.gates import GATES
from gatewright.mapping.bounds import Order
from gatewright.mapping.exact import fewest_swaps
from gatewright.mapping.routing import make_graph
from gatewright.pipeline import CHAIN
from gatewright.stages.draft import Draft, Settings
from gatewright.synthesis.native import native_set
from planted import planted_depth, planted_swaps

GATE_SET = "cz-virtual-z"


@dataclass(frozen=True)
class Options:
    share: float
    tuning: bool
    effort: str
    restarts: int
    verbose: bool

    def some(self, items: Iterable) -> list:
        """Take an even share of the items, at least one."""
        every = list(items)
        count = max(1, round(self.share * len(every)))
        return [every[int((k + 0.5) * len(every) / count)] for k in range(count)]

    def seeds(self, count: int) -> list[int]:
        first = 0 if self.tuning else 50_000
        return list(range(first, first + count))

    def tell(self, line: str) -> None:
        if self.verbose:
            print(f"    {line}", flush=True)


def say(what: str, value: object, goal: str, met: bool) -> None:
    print(f"  {what:<58} {value!s:>12}   goal {goal:<12} {'met' if met else 'NOT MET'}", flush=True)


def device_of(graph: nx.Graph) -> gw.Device:
    return gw.Device.from_graph(list(graph.edges), GATE_SET)


def mapped(circuit: Circuit, graph: nx.Graph, effort: str, seed: int = 0) -> tuple[Draft, float]:
    """Run the chain up to routing; return the draft and the seconds of the stages after expansion."""
    device = device_of(graph)
    draft = Draft(circuit, device, Settings(effort=effort, seed=seed), native_set(device.gate_set), circuit)
    seconds = 0.0
    for stage in CHAIN:
        if stage.__name__ == "fuse":
            break
        begun = time.perf_counter()
        draft = stage(draft)
        if stage.__name__ != "expand":
            seconds += time.perf_counter() - begun
    return draft, seconds


def replayed(source: Circuit, draft: Draft, graph: nx.Graph) -> int:
    """Check a routed circuit step by step; return its inserted swaps. For sources that keep their order."""
    wire_at = {int(site): wire for wire, site in enumerate(draft.initial)}
    lines: dict[int, list[tuple]] = {}
    swaps = 0
    for k, operation in enumerate(draft.circuit):
        if len(operation.qubits) == 2:
            assert graph.has_edge(*operation.qubits)
        if draft.origin[k] < 0:
            assert operation.name == "swap"
            p, q = operation.qubits
            wire_at[p], wire_at[q] = wire_at[q], wire_at[p]
            swaps += 1
        else:
            wires = tuple(wire_at[p] for p in operation.qubits)
            for w in wires:
                lines.setdefault(w, []).append((operation.name, wires, operation.parameters))
    for operation in reversed(list(source)):
        for w in operation.qubits:
            assert lines[w].pop() == (operation.name, operation.qubits, operation.parameters)
    assert not any(lines.values())
    assert swaps == draft.swaps
    return swaps


DEPTH_GRAPHS: dict[str, Callable[[], nx.Graph]] = {
    "octagons 16": lattices.octagons,
    "crossed grid 20": lambda: lattices.crossed_grid(4, 5),
    "hexagons, edges 53": lambda: lattices.trimmed(lattices.hexagons_on_edges(3, 3), 53),
    "diamond 54": lambda: lattices.diamond(9, 6),
}
SWAP_GRAPHS: dict[str, Callable[[], nx.Graph]] = {
    "grid 16": lambda: lattices.grid(4, 4),
    "crossed grid 20": lambda: lattices.crossed_grid(4, 5),
    "hexagons 48": lambda: lattices.hexagons(4, 4),
    "diamond 54": lambda: lattices.diamond(9, 6),
    "hexagons, edges 129": lambda: lattices.trimmed(lattices.hexagons_on_edges(5, 6), 129),
}


def row_planted_depth(o: Options) -> None:
    """Solve circuits with a planted depth without a swap."""
    cases = [
        (name, density, depth, seed)
        for name in DEPTH_GRAPHS
        for density in (0.1, 0.3, 0.6, 0.9, 1.0)
        for depth, seed in zip((5, 15, 25, 35, 45, 5, 15, 25, 35, 45), o.seeds(10), strict=True)
    ]
    swaps, seconds = [], []
    for name, density, depth, seed in o.some(cases):
        graph = DEPTH_GRAPHS[name]()
        made = planted_depth(graph, depth, density=density, seed=seed)
        circuit = workloads.from_pairs(made.pairs, len(graph), seed)
        draft, taken = mapped(circuit, graph, o.effort)
        swaps.append(replayed(circuit, draft, graph))
        seconds.append(taken)
        o.tell(f"{name}, density {density}, depth {depth}: {swaps[-1]} swaps, {taken:.2f} s")
    solved = sum(s == 0 for s in swaps)
    say(f"planted depth, {len(swaps)} circuits: solved with no swap", f"{solved}", "all", solved == len(swaps))
    slowest = f"median {np.median(seconds):.2f}, slowest"
    say(f"planted depth: seconds, {slowest}", f"{max(seconds):.2f}", "< 1", max(seconds) < 1)


def _ratios(o: Options, cases: list) -> tuple[list[float], list[float]]:
    ratios, seconds = [], []
    for name, graph, k, filler, seed in cases:
        made = planted_swaps(graph, k, filler=filler, seed=seed)
        circuit = workloads.from_pairs(made.pairs, len(graph), seed)
        draft, taken = mapped(circuit, graph, o.effort)
        ratios.append(replayed(circuit, draft, graph) / k)
        seconds.append(taken)
        o.tell(f"{name}, k {k}, filler {filler}, {len(made.pairs)} gates: ratio {ratios[-1]:.2f}, {taken:.1f} s")
    return ratios, seconds


def row_planted_swaps(o: Options) -> None:
    """Find the optimum of circuits with planted swaps."""
    cases = [
        (name, SWAP_GRAPHS[name](), k, filler, seed)
        for name in SWAP_GRAPHS
        for seed, (k, filler) in zip(o.seeds(12), [(k, f) for k in (5, 20, 100) for f in (0, 10, 40, 200)], strict=True)
    ]
    ratios, seconds = _ratios(o, o.some(cases))
    mean = float(np.exp(np.mean(np.log(np.maximum(ratios, 1e-9)))))
    exact = float(np.mean(np.array(ratios) == 1))
    say(f"planted swaps, {len(ratios)} circuits: geometric mean ratio", f"{mean:.3f}", "≤ 1.10", mean <= 1.10)
    say("planted swaps: exactly optimal", f"{exact:.0%}", "≥ 85 %", exact >= 0.85)
    say(f"planted swaps: worst ratio (slowest {max(seconds):.1f} s)", f"{max(ratios):.2f}", "≤ 2", max(ratios) <= 2)


def row_planted_large(o: Options) -> None:
    """Do so at 400 and 1,024 qubits."""
    cases = [
        (f"{r} x {r} grid", lattices.grid(r, r), 20, filler, seed)
        for r in (20, 32)
        for filler, seed in zip((0, 40, 400), o.seeds(3), strict=True)
    ]
    ratios, seconds = _ratios(o, o.some(cases))
    median = f"median {np.median(ratios):.2f}, worst"
    say(f"planted swaps, 400 and 1,024 qubits: ratio, {median}", f"{max(ratios):.2f}", "≤ 3", max(ratios) <= 3)
    say("planted swaps, 400 and 1,024 qubits: slowest, seconds", f"{max(seconds):.0f}", "≤ 120", max(seconds) <= 120)


def _against_baseline(o: Options, cases: list, goals: dict[str, tuple[float, float | None]], what: str) -> None:
    """Compile each case with and without the baseline in the chain, and compare."""
    ratios: dict[str, list[float]] = {name: [] for name in (*goals, "seconds")}
    for name, circuit, graph in cases:
        device = device_of(graph)
        ours = gw.compile(circuit, device, effort=o.effort)
        place, route = plain_sabre.stages(graph, restarts=o.restarts)
        chain = [{"place": place, "route": route}.get(stage.__name__, stage) for stage in CHAIN]
        theirs = gw.compile(circuit, device, chain=chain)
        for measure in goals:
            mine, other = getattr(ours.costs, measure), getattr(theirs.costs, measure)
            ratios[measure].append((mine + 1e-9) / (other + 1e-9))
        stages = [stage for stage in ours.seconds if stage in ("place", "route")]
        ratios["seconds"].append(sum(ours.seconds[s] for s in stages) / theirs.seconds["place"])
        o.tell(
            f"{name}: swaps {ours.costs.swaps_inserted}/{theirs.costs.swaps_inserted} "
            f"(≥ {ours.lower_bound.swaps}), entanglers {ours.costs.two_qubit_gates}/{theirs.costs.two_qubit_gates}, "
            f"two-qubit depth {ours.costs.two_qubit_depth}/{theirs.costs.two_qubit_depth}, "
            f"{sum(ours.seconds[s] for s in stages):.1f}/{theirs.seconds['place']:.1f} s"
        )
    for measure, (median_goal, worst_goal) in goals.items():
        values = np.array(ratios[measure])
        median = float(np.median(values))
        quartiles = f"quartiles {np.quantile(values, 0.25):.2f} to {np.quantile(values, 0.75):.2f}"
        say(f"{what}: {measure}, {quartiles}, median", f"{median:.3f}", f"≤ {median_goal}", median <= median_goal)
        if worst_goal is not None:
            worst = f"worst ({np.count_nonzero(values > worst_goal + 1e-6)} above)"
            met = bool(values.max() <= worst_goal + 1e-6)
            say(f"{what}: {measure}, {worst}", f"{values.max():.3f}", f"≤ {worst_goal}", met)
    longest = max(ratios["seconds"])
    say(f"{what}: seconds, median {np.median(ratios['seconds']):.2f}, worst", f"{longest:.2f}", "≤ 1", longest <= 1)


def row_structured(o: Options) -> None:
    """Compare with plain SABRE on circuits that people run."""
    cases = [(f"{name}, {on}", c, graph) for name, c, on, graph in workloads.structured(held_out=not o.tuning)]
    goals = {"swaps_inserted": (0.75, 1.0), "two_qubit_gates": (0.85, None), "two_qubit_depth": (0.8, None)}
    _against_baseline(o, o.some(cases), goals, f"structured, ÷ SABRE × {o.restarts}")


def row_random(o: Options) -> None:
    """Compare with plain SABRE on random circuits."""
    cases = []
    for (n, gates), seed in zip(
        ((20, 200), (20, 1000), (36, 400), (54, 600), (72, 1500), (100, 1000)), o.seeds(6), strict=True
    ):
        circuit = workloads.from_pairs(workloads.random_pairs(n, gates, seed), n, seed)
        for on, graph in (("grid", lattices.grid_for(n)), ("hexagons", lattices.hexagons_for(n))):
            cases.append((f"random {n}, {gates} gates, {on}", circuit, graph))
    goals = {"swaps_inserted": (0.92, 1.0), "two_qubit_gates": (0.88, None), "two_qubit_depth": (0.55, None)}
    _against_baseline(o, o.some(cases), goals, f"random, ÷ SABRE × {o.restarts}")


def row_fourier_grid(o: Options) -> None:
    """Add fewer CNOTs to Fourier transforms than the SABRE paper reports (Li, Ding, Xie, ASPLOS 2019)."""
    device = device_of(lattices.crossed_grid(4, 5))
    for n, published in ((10, 54), (13, 93), (16, 186), (20, 372)):
        costs = gw.compile(workloads.fourier(n), device, effort=o.effort).costs
        added = costs.two_qubit_gates - n * (n - 1)
        what = f"QFT-{n}, crossed 4 x 5 grid, {costs.swaps_inserted} swaps: CNOTs added"
        say(what, f"{added}", f"< {published}", added < published)


def row_fourier_line(o: Options) -> None:
    """Put Fourier transforms on a line in n² + n − 4 CNOTs (Park and Ahn 2023)."""
    found = {}
    for n in o.some(range(5, 17)):
        found[n] = gw.compile(workloads.fourier(n), device_of(lattices.line(n)), effort=o.effort).costs.two_qubit_gates
        o.tell(f"QFT-{n} on a line: {found[n]} CNOTs, {n * n + n - 4} published")
    met = sum(count <= n * n + n - 4 for n, count in found.items())
    worst = max(count / (n * n + n - 4) for n, count in found.items())
    say(f"QFT on a line, {len(found)} sizes (worst ratio {worst:.3f}): met", met, "all", met == len(found))


def row_all_pairs(o: Options) -> None:
    """Route all pairs, which commute, on a line in (n − 1)(n − 2)/2 swaps."""
    extra = {}
    for n in range(3, 9):
        rng = np.random.default_rng(n)
        builder = Builder(n)
        pairs = np.array([(a, b) for b in range(n) for a in range(b)])
        for a, b in pairs[rng.permutation(len(pairs))].tolist():
            builder.gate("rzz", a, b, parameters=[rng.uniform(0.1, 1.4)])
        draft, _ = mapped(builder.build(), lattices.line(n), o.effort)
        extra[n] = draft.swaps - (n - 1) * (n - 2) // 2
    say("all pairs once on a line, n = 3 … 8: swaps beyond the optimum", extra, "0", not any(extra.values()))


def row_optimum(o: Options) -> None:
    """Equal the proven optimum on small random circuits."""
    graphs = (lattices.line(5), lattices.ring(5), lattices.grid(2, 3), nx.Graph([(0, 1), (1, 2), (2, 3), (1, 4)]))
    beyond, bound = [], []
    for k in o.some(range(100)):
        seed = o.seeds(100)[k]
        graph, rng = graphs[k % 4], np.random.default_rng(seed)
        n, gates = int(rng.integers(4, 6)), int(rng.integers(6, 16))
        pairs = workloads.random_pairs(n, gates, seed)
        best = fewest_swaps(make_graph(np.array(graph.edges), len(graph)), Order.strict(pairs, n))
        assert best is not None
        circuit = workloads.from_pairs(pairs, n, seed)
        result = gw.compile(circuit, device_of(graph), effort=o.effort)
        beyond.append(result.costs.swaps_inserted - best.swaps)
        bound.append(result.lower_bound.swaps / best.swaps if best.swaps else 1.0)
        assert beyond[-1] >= 0 and bound[-1] <= 1
    equal = float(np.mean(np.array(beyond) == 0))
    what = f"{len(beyond)} small circuits (most beyond: {max(beyond)}): at the optimum"
    say(what, f"{equal:.0%}", "≥ 95 %", equal >= 0.95)
    print(
        f"  their lower bound, ÷ the optimum: mean {np.mean(bound):.2f}, equal for {np.mean(np.array(bound) == 1):.0%}"
    )


def long_circuit(n: int, gates: int, seed: int) -> Circuit:
    cx = Piece(GATES["cx"], np.arange(gates), workloads.random_pairs(n, gates, seed))
    return assemble(Builder(n).build(), n, [cx])[0]


def row_speed(o: Options) -> None:
    """Route fast, and as fast for long circuits; one pass of the plain SABRE kernel stands beside it."""
    for graph, goal in (
        (lattices.grid(4, 5), 5e5),
        (lattices.grid(10, 10), 1e5),
        (lattices.grid(32, 32), 1.5e4),
    ):
        n = len(graph)
        rates = {}
        for gates in (10**4, 10**5, 10**6):
            if gates * n > o.share * 1.1e9:
                continue
            _, seconds = mapped(long_circuit(n, gates, 1), graph, "quick")
            rates[gates] = gates / seconds
        pairs = workloads.random_pairs(n, 1000, 1)
        begun = time.perf_counter()
        plain_sabre.sabre(graph, pairs, restarts=1)
        floor = 3 * len(pairs) / (time.perf_counter() - begun)
        shown = ", ".join(f"{gates:.0e}: {rate:.2e}" for gates, rate in rates.items())
        print(f"  quick, {n} qubits, gates a second: {shown}; plain SABRE {floor:.1e} in a pass")
        say(
            f"quick, {n} qubits: least of these",
            f"{min(rates.values()):.2e}",
            f"≥ {goal:.1e}",
            min(rates.values()) >= goal,
        )
        flat = max(rates.values()) / min(rates.values())
        say(f"quick, {n} qubits: most ÷ least", f"{flat:.2f}", "≤ 2", flat <= 2)


COMPILING = """
import time, numba.core.event as event
class Listener(event.Listener):
    depth = 0; total = 0.0; seen = []
    def on_start(self, e):
        if self.depth == 0: self.begun = time.process_time()
        self.depth += 1
        self.seen.append((str(e.data["dispatcher"].py_func.__module__), e.data["dispatcher"].py_func.__name__))
    def on_end(self, e):
        self.depth -= 1
        if self.depth == 0: self.total += time.process_time() - self.begun
listener = Listener()
event.register("numba:compile", listener)
import gc; gc.disable()
import gatewright as gw, gatewright.pipeline
circuit = gw.Builder(3).gate("h", 0).gate("cx", 0, 1).gate("cx", 1, 2).gate("cx", 0, 2).build()
gw.compile(circuit, gw.Device.from_graph([(0, 1), (1, 2)], "cz-virtual-z"))
own = [".".join(name) for name in listener.seen if name[0].startswith("gatewright")]
print(listener.total, len(own), *sorted({name for name in own if own.count(name) > 1}))
"""


def row_kernels(o: Options) -> None:
    """Compile all kernels once, on a fresh installation, in one process."""
    with tempfile.TemporaryDirectory() as folder:
        environment = os.environ | {"NUMBA_CACHE_DIR": folder}
        command = [sys.executable, "-c", COMPILING]
        told = subprocess.run(command, env=environment, check=True, capture_output=True, text=True).stdout.split()
    seconds, count, twice = float(told[0]), told[1], told[2:]
    say(f"{count} kernels compiled, seconds of one core", f"{seconds:.1f}", "≤ 10", seconds <= 10)
    say("compiled more than once", ", ".join(twice) or "none", "none", not twice)


ROWS: dict[str, Callable[[Options], None]] = {
    name[4:].replace("_", "-"): row for name, row in list(globals().items()) if name.startswith("row_")
}


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--rows", default=",".join(ROWS), help="; ".join(f"{n}: {r.__doc__}" for n, r in ROWS.items()))
    parser.add_argument("--share", type=float, default=1.0, help="run only this share of the cases")
    parser.add_argument("--tuning", action="store_true", help="the circuits for tuning, not those for judging")
    parser.add_argument("--effort", default="standard")
    parser.add_argument("--restarts", type=int, default=256, help="random starts of the baseline")
    parser.add_argument("--verbose", action="store_true", help="print every case")
    given = parser.parse_args()
    options = Options(given.share, given.tuning, given.effort, given.restarts, given.verbose)
    # What is compiled and loaded once is not timed.
    mapped(workloads.adder(3), lattices.grid(3, 3), given.effort)
    for name in given.rows.split(","):
        begun = time.perf_counter()
        print(f"{name}: {ROWS[name].__doc__}")
        ROWS[name](options)
        print(f"  ({time.perf_counter() - begun:.0f} s)")


if __name__ == "__main__":
    main()
