"""The whole job: from a circuit or a unitary to a proven native circuit with its costs and their lower bounds."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from gatewright._version import __version__
from gatewright.circuit import Circuit
from gatewright.cost import (
    SUCCESS_MODEL,
    Bound,
    Costs,
    check_budget,
    count_costs,
    require_budget,
)
from gatewright.devices import Device
from gatewright.errors import InputError, ProofError, nearest_name
from gatewright.gates import GATES
from gatewright.linalg import checked_unitary
from gatewright.proof import Fingerprints, Proof, Verdict, check_legal, check_proof, encode_proof
from gatewright.proof.dense import dense_distance, dense_work
from gatewright.proof.judge import judge
from gatewright.stages.draft import Draft, Settings, Stage
from gatewright.stages.expand import expand
from gatewright.stages.fuse import fuse
from gatewright.stages.place import place
from gatewright.stages.route import route
from gatewright.stages.schedule import schedule
from gatewright.stages.synthesise import synthesise
from gatewright.stages.windows import TWO, fuse_circuit, window_unitaries
from gatewright.synthesis.definition import definition_of
from gatewright.synthesis.native import NativeSet, native_set

__all__ = ["CHAIN", "EFFORTS", "Result", "check", "compile", "count"]

#: The stages in order. A caller may pass a chain of their own to `compile`; what it makes is proven all the same.
CHAIN: tuple[Stage, ...] = (expand, place, route, fuse, synthesise, schedule)

EFFORTS = ("quick", "standard", "deep")

#: A window of a proof may be this far off by rounding, beyond the tolerance that the user allows: once for its
#: entanglers, and three times for each of its at most eight one-qubit runs.
ROUNDING = 1e-11
USES_OF_TOLERANCE = 25
#: Full unitaries are compared as well up to this many qubits, where no more than this many matrix entries are computed.
DENSE_QUBITS = 9
DENSE_WORK = 2.5e8


@dataclass(frozen=True, eq=False, slots=True, repr=False)
class Result:
    """A compiled circuit with everything that is known about it; it exists only if the proof holds.

    Attributes
    ----------
    circuit : Circuit
        Native gates on physical qubits, in order of start time.
    source : Circuit
        What was asked for.
    device : Device
    proof : Proof
    verdict : Verdict
        The checker's findings; ``verdict.error_bound`` bounds the operator-norm distance up to global phase.
    costs : Costs
    lower_bound : Bound
    budget : list of dict
        Each limit, its value, and whether it is met.
    starts : ndarray, shape (operations,)
        Start of each operation: nanoseconds, or layers where the device states no durations.
    seed, tolerance, effort
        As used.
    moved : float
        Distance from the matrix given to the unitary that was compiled; 0 for circuits.
    seconds : dict of str to float
        Time taken by each stage.
    """

    circuit: Circuit
    source: Circuit
    device: Device
    proof: Proof
    verdict: Verdict
    costs: Costs
    lower_bound: Bound
    budget: list[dict[str, Any]]
    starts: np.ndarray
    seed: int
    tolerance: float
    effort: str
    moved: float = 0.0
    seconds: dict[str, float] = field(default_factory=dict)

    def __repr__(self) -> str:
        """Return a short summary."""
        cost = f"{self.costs.two_qubit_gates} two-qubit gates, at least {self.lower_bound.two_qubit_gates}"
        return f"Result({self.circuit!r} on {self.device.name}: {cost}; error bound {self.verdict.error_bound:.2g})"

    @property
    def initial(self) -> tuple[int, ...]:
        """Physical qubit of each source qubit at the start."""
        return self.verdict.initial

    @property
    def final(self) -> tuple[int, ...]:
        """Physical qubit of each source qubit at the end."""
        return self.verdict.final

    def summary(self) -> dict[str, Any]:
        """Return what the command line writes as JSON."""
        two = self.source.is_unitary & (self.source.widths == 2)
        return {
            "version": __version__,
            "seed": self.seed,
            "effort": self.effort,
            "tolerance": self.tolerance,
            "device": self.device.name,
            "gate_set": self.device.gate_set.name,
            "input": {
                "qubits": self.source.n_qubits,
                "operations": len(self.source),
                "two_qubit_gates": int(np.count_nonzero(two)),
                "distance_moved": self.moved,
            },
            "output": {**asdict(self.costs), "success_model": SUCCESS_MODEL},
            "lower_bound": asdict(self.lower_bound),
            "placement": {"initial": list(self.initial), "final": list(self.final)},
            "proof": self.verdict.to_dict(),
            "budget": self.budget,
            "seconds": {stage: round(value, 6) for stage, value in self.seconds.items()},
        }

    def encode_proof(self) -> bytes:
        """Return the bytes of the proof file, for `gatewright.read_proof` and ``gatewright check``."""
        return encode_proof(self.proof)

    def to_qasm(self, *, version: int = 3) -> str:
        """Return the circuit as an OpenQASM program, with the placement in its header.

        Parameters
        ----------
        version : int
            3 or 2.
        """
        from gatewright.qasm import map_lines, write

        definitions = {
            name: native.definition or definition_of(native.gate)
            for name, native in self.device.gate_set.gates.items()
            if native.definition or name not in GATES
        }
        header = [
            f"gatewright {__version__}, seed {self.seed}, device {self.device.name}",
            f"proven equal to its source within {self.verdict.error_bound:.3g} (operator norm, up to global phase)",
        ]
        return write(
            self.circuit,
            version=version,
            definitions=definitions,
            header=[f"// {line}" for line in header] + map_lines(self.initial, self.final),
        )


def compile(  # noqa: A001
    source: Circuit | ArrayLike,
    device: Device,
    *,
    seed: int = 0,
    tolerance: float = 1e-12,
    effort: str = "standard",
    placement: Sequence[int] | None = None,
    budget: Mapping[str, float] | None = None,
    nearest_unitary: bool = False,
    moved: float = 0.0,
    chain: Sequence[Stage] = CHAIN,
    progress: Callable[[str], None] | None = None,
) -> Result:
    """Compile a circuit or a unitary for a device, and prove the result.

    Parameters
    ----------
    source : Circuit or array_like, shape (2**n, 2**n)
    device : Device
    seed : int
        The same input, seed and version give the same output.
    tolerance : float
        Where a two-qubit window lies within this distance (operator norm) of a class that needs fewer entanglers, or a
        one-qubit run of one that needs fewer pulses, the fewer are used and the distance is part of the error bound.
        Nothing else is approximated. A matrix may be non-unitary by as much.
    effort : {"standard", "quick", "deep"}
        How long to search for placements.
    placement : sequence of int, optional
        Physical qubit of each source qubit at the start; -1 leaves one free.
    budget : mapping of str to float, optional
        Limits on costs, as in `gatewright.cost.BUDGETS`; whether each is met is in the result.
    nearest_unitary : bool
        Accept a matrix that is not unitary and compile the unitary nearest to it.
    moved : float
        For a circuit read from a matrix: how far that was from unitary, to be reported.
    chain : sequence of callables
        Stages to run, `CHAIN` by default.
    progress : callable, optional
        Called with the name of each stage as it begins.

    Returns
    -------
    Result

    Raises
    ------
    InputError, CannotError
        What is asked for is at fault, or not possible on this device.
    ProofError
        The output could not be proven; nothing is returned then.

    Examples
    --------
    >>> import gatewright as gw
    >>> device = gw.Device.from_graph([(0, 1), (1, 2)], "cz-virtual-z")
    >>> circuit = gw.Builder(3).gate("h", 0).gate("cx", 0, 1).gate("cx", 0, 2).build()
    >>> result = gw.compile(circuit, device)
    >>> result.costs.two_qubit_gates, result.verdict.error_bound < 1e-12
    (2, True)
    """
    if effort not in EFFORTS:
        raise InputError(f"unknown effort '{str(effort)[:60]}'", hint=nearest_name(str(effort), EFFORTS))
    if not 0 <= tolerance <= 1e-2:
        raise InputError("the tolerance is out of range", required="0 to 0.01", found=str(tolerance))
    clock = _Clock(progress)
    if isinstance(source, Circuit):
        circuit = source
    else:
        unitary, moved = checked_unitary(source, tolerance=tolerance, nearest=nearest_unitary)
        circuit = Circuit.from_unitary(unitary)
    device.require_room(circuit.n_qubits)
    settings = Settings(seed=seed, tolerance=tolerance, effort=effort, placement=_placement(placement, circuit))
    clock.start("plan")
    native = native_set(device.gate_set, tolerance=tolerance)
    draft = Draft(circuit=circuit, device=device, settings=settings, native=native, expanded=circuit)
    for stage in chain:
        clock.start(stage.__name__)
        draft = stage(draft)
    clock.start("prove")
    proof = Proof(draft.steps, Fingerprints.of(circuit, draft.circuit, device))
    window_tolerance = ROUNDING + USES_OF_TOLERANCE * tolerance
    verdict = check_proof(circuit, draft.circuit, proof, device=device, tolerance=window_tolerance)
    verdict = _second_opinion(circuit, draft.circuit, verdict)
    clock.start("count")
    costs = count_costs(draft.circuit, device, starts=draft.starts, swaps_inserted=draft.swaps)
    bound = _lower_bound(circuit, draft.expanded, native, tolerance, stays=verdict.initial == verdict.final)
    clock.stop()
    return Result(
        circuit=draft.circuit,
        source=circuit,
        device=device,
        proof=proof,
        verdict=verdict,
        costs=costs,
        lower_bound=bound,
        budget=check_budget(costs, budget or {}),
        starts=draft.starts,
        seed=seed,
        tolerance=tolerance,
        effort=effort,
        moved=moved,
        seconds=clock.seconds,
    )


def count(source: Circuit | ArrayLike, device: Device, **options: Any) -> Costs:
    """Return the costs alone of `compile` with the same arguments; a budget that is not met raises `BudgetError`."""
    result = compile(source, device, **options)
    require_budget(result.budget)
    return result.costs


def check(
    source: Circuit,
    output: Circuit,
    *,
    device: Device | None = None,
    proof: Proof | None = None,
    initial: Sequence[int] | None = None,
    final: Sequence[int] | None = None,
    tolerance: float = 1e-9,
) -> Verdict:
    """Check that `output` is the same operation as `source`, and legal on `device`.

    Parameters
    ----------
    source, output : Circuit
    device : Device, optional
        Without it, legality is not checked.
    proof : Proof, optional
        Without it, whatever can decide is tried: see `gatewright.proof.judge`.
    initial, final : sequence of int, optional
        Without a proof: output qubit of each source qubit at the two ends; found if not given.
    tolerance : float
        Largest operator-norm distance that counts as equal: of a window with a proof, of the whole without one.

    Raises
    ------
    ProofError
        Not equal, or not legal, and where.
    UndecidedError
        Without a proof: no method could tell.
    """
    if proof is not None:
        return check_proof(source, output, proof, device=device, tolerance=tolerance)
    if device is not None:
        check_legal(output, device)
    for name, given in (("initial", initial), ("final", final)):
        if given is None:
            continue
        if len(set(given)) != source.n_qubits or not all(0 <= q < output.n_qubits for q in given):
            raise InputError(
                f"the {name} placement does not fit",
                required=f"{source.n_qubits} different qubits below {output.n_qubits}",
                found=", ".join(map(str, given[:16])),
            )
    return judge(source, output, initial=initial, final=final, tolerance=tolerance)


def _placement(given: Sequence[int] | None, circuit: Circuit) -> tuple[int, ...] | None:
    if given is None:
        return None
    placement = tuple(int(q) for q in given)
    if len(placement) != circuit.n_qubits:
        raise InputError(
            "the placement does not fit the circuit",
            required=f"one physical qubit (or -1) for each of {circuit.n_qubits}",
            found=str(len(placement)),
        )
    return placement


def _second_opinion(source: Circuit, output: Circuit, verdict: Verdict) -> Verdict:
    """Compare the full unitaries of small circuits as well: this tests the checker."""
    places = verdict.initial, verdict.final
    if source.n_qubits > DENSE_QUBITS:
        return verdict
    if dense_work(source, output, *places) > DENSE_WORK:
        return replace(verdict, method=verdict.method + "; too much for comparing full unitaries as well")
    try:
        distance = dense_distance(source, output, *places)
    except InputError:
        # It measures before its end: there is no unitary to compare.
        return verdict
    if not distance <= verdict.error_bound + ROUNDING:
        raise ProofError(
            "the windows say equal and the full unitaries say not: this is a fault of gatewright, please report it",
            distance=distance,
            required=f"distance at most {verdict.error_bound + ROUNDING:.3g}",
            found=f"{distance:.6g}",
        )
    return replace(verdict, method=verdict.method + "; full unitaries compared as well")


def _lower_bound(circuit: Circuit, expanded: Circuit, native: NativeSet, tolerance: float, *, stays: bool) -> Bound:
    """Sum the least number of entanglers over the input's own windows."""
    fused = fuse_circuit(expanded)
    if native.entangler is None or not np.count_nonzero(fused.kind == TWO):
        return Bound(0, "no two-qubit windows in the input")
    _, two = window_unitaries(expanded, fused)
    counts = native.entangler.entangler.count(two, tolerance=tolerance)
    of_what = "the input" if expanded is circuit else "the input, written in gates of one and two qubits"
    how = (
        f"sum over the two-qubit windows of {of_what}, of the exact least number of '{native.entangler.gate.name}' "
        "that each needs on its own, with free one-qubit gates and all-to-all connectivity"
    )
    if not stays:
        counts = np.minimum(counts, native.entangler.entangler.count_exchanged(two, tolerance=tolerance))
        how += ", its two wires exchanged where that needs fewer"
    how += (
        "; a bound for circuits that keep this partition into windows, not the optimum of the whole circuit: "
        "larger windows may need fewer"
    )
    return Bound(int(counts.sum()), how)


class _Clock:
    """Time the stages, and say which one begins."""

    def __init__(self, progress: Callable[[str], None] | None) -> None:
        self.seconds: dict[str, float] = {}
        self._progress = progress
        self._running: tuple[str, float] | None = None

    def start(self, name: str) -> None:
        self.stop()
        self._running = (name, time.perf_counter())
        if self._progress is not None:
            self._progress(name)

    def stop(self) -> None:
        if self._running is not None:
            name, begun = self._running
            self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - begun
            self._running = None
