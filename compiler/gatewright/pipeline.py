"""The whole job: from a circuit or a unitary to a proven native circuit with its costs and their lower bounds."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from typing import Any, overload

from numpy.typing import ArrayLike

from gatewright.branches import combined_costs, thread_program
from gatewright.calibrated import misplaced, without_matrix
from gatewright.circuit import Circuit
from gatewright.cost import Bound, Costs, check_budget, count_costs, require_budget
from gatewright.devices import Device
from gatewright.errors import InputError, ProofError, UnsupportedError, nearest_name
from gatewright.linalg import checked_unitary
from gatewright.lower_bounds import lower_bound
from gatewright.program import Program
from gatewright.proof import Fingerprints, Proof, Verdict, check_legal, check_program, check_proof
from gatewright.proof.dense import BINDINGS, dense_distance, dense_work
from gatewright.proof.judge import judge
from gatewright.result import ProgramResult, Result
from gatewright.stages.draft import Draft, Settings, Stage
from gatewright.stages.edges import PREFERENCES
from gatewright.stages.expand import expand
from gatewright.stages.fuse import fuse
from gatewright.stages.parametrise import parametrise
from gatewright.stages.place import place
from gatewright.stages.restore import restore
from gatewright.stages.route import route
from gatewright.stages.schedule import schedule
from gatewright.stages.settle import settle
from gatewright.stages.synthesise import synthesise
from gatewright.synthesis.native import NativeSet, native_set

__all__ = ["CHAIN", "EFFORTS", "Result", "check", "compile", "count"]

#: The stages in order. A caller may pass a chain of their own to `compile`; what it makes is proven all the same.
CHAIN: tuple[Stage, ...] = (parametrise, expand, place, route, restore, fuse, synthesise, schedule, settle)

EFFORTS = ("quick", "standard", "deep")

#: A window of a proof may be this far off by rounding, beyond the tolerance that the user allows: once for its
#: entanglers, and three times for each of its one-qubit runs, two more than twice the number of entanglers.
ROUNDING = 1e-11
#: Full unitaries are compared as well up to this many qubits, where no more than this many matrix entries are computed.
DENSE_QUBITS = 9
DENSE_WORK = 2.5e8


@overload
def compile(  # noqa: A001
    source: Circuit | ArrayLike,
    device: Device,
    *,
    seed: int = 0,
    tolerance: float = 1e-12,
    effort: str = "standard",
    prefer: str = "uses",
    placement: Sequence[int] | None = None,
    final_placement: Sequence[int] | None = None,
    budget: Mapping[str, float] | None = None,
    nearest_unitary: bool = False,
    moved: float = 0.0,
    chain: Sequence[Stage] = CHAIN,
    progress: Callable[[str], None] | None = None,
) -> Result: ...


@overload
def compile(  # noqa: A001
    source: Program,
    device: Device,
    *,
    seed: int = 0,
    tolerance: float = 1e-12,
    effort: str = "standard",
    prefer: str = "uses",
    placement: Sequence[int] | None = None,
    final_placement: Sequence[int] | None = None,
    budget: Mapping[str, float] | None = None,
    nearest_unitary: bool = False,
    moved: float = 0.0,
    chain: Sequence[Stage] = CHAIN,
    progress: Callable[[str], None] | None = None,
) -> ProgramResult: ...


def compile(  # noqa: A001
    source: Circuit | Program | ArrayLike,
    device: Device,
    *,
    seed: int = 0,
    tolerance: float = 1e-12,
    effort: str = "standard",
    prefer: str = "uses",
    placement: Sequence[int] | None = None,
    final_placement: Sequence[int] | None = None,
    budget: Mapping[str, float] | None = None,
    nearest_unitary: bool = False,
    moved: float = 0.0,
    chain: Sequence[Stage] = CHAIN,
    progress: Callable[[str], None] | None = None,
) -> Result | ProgramResult:
    """Compile a circuit, a program or a unitary for a device, and prove the result.

    Parameters
    ----------
    source : Circuit, Program or array_like, shape (2**n, 2**n)
    device : Device
    seed : int
        The same input, seed and version give the same output.
    tolerance : float
        Where a two-qubit window lies within this distance (operator norm) of a class that needs fewer entanglers, or a
        one-qubit run of one that needs fewer pulses, the fewer are used and the distance is part of the error bound.
        Nothing else is approximated. A matrix may be non-unitary by as much.
    effort : {"standard", "quick", "deep"}
        How long to search for placements.
    prefer : {"uses", "fidelity", "duration"}
        What is made least in each window where its qubits have several entanglers: the number of uses, the loss of
        fidelity, or the duration. The others decide between equals. What the device does not state is not compared.
    placement : sequence of int, optional
        Physical qubit of each source qubit at the start; -1 leaves one free.
    final_placement : sequence of int, optional
        Physical qubit of each source qubit at the end, reached by swaps; wherever routing leaves them by default.
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
    Result or ProgramResult
        The latter for a program with classical control.

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
    if prefer not in PREFERENCES:
        raise InputError(f"unknown preference '{str(prefer)[:60]}'", hint=nearest_name(str(prefer), PREFERENCES))
    if not 0 <= tolerance <= 1e-2:
        raise InputError("the tolerance is out of range", required="0 to 0.01", found=str(tolerance))
    clock = _Clock(progress)
    if isinstance(source, Circuit | Program):
        asked: Circuit | Program = source
    else:
        unitary, moved = checked_unitary(source, tolerance=tolerance, nearest=nearest_unitary)
        asked = Circuit.from_unitary(unitary)
    device.require_room(asked.n_qubits)
    if isinstance(asked, Circuit) and any(without_matrix(gate) for gate in asked.table):
        # Gates that only a calibration defines stand on physical qubits.
        placement = final_placement = _at_home(asked, placement, final_placement)
    settings = Settings(
        seed=seed,
        tolerance=tolerance,
        effort=effort,
        prefer=prefer,
        placement=_placement(placement, asked),
        final=_placement(final_placement, asked),
    )
    clock.start("plan")
    native = native_set(device.gate_set, tolerance=tolerance)
    first = asked if isinstance(asked, Circuit) else next(asked.circuits())
    draft = Draft(circuit=first, device=device, settings=settings, native=native, expanded=first, source=first)
    given: dict[str, Any] = {"device": device, "seed": seed, "tolerance": tolerance, "effort": effort, "moved": moved}
    if isinstance(asked, Program):
        return _compile_program(asked, draft, chain, clock, budget or {}, given)
    for stage in chain:
        clock.start(stage.__name__)
        draft = stage(draft)
    _require_calibrated_in_place(draft.circuit)
    clock.start("prove")
    proof = Proof(draft.steps, Fingerprints.of(asked, draft.circuit, device))
    verdict = proven(asked, draft.circuit, proof, device=device, tolerance=tolerance)
    clock.start("count")
    costs = count_costs(draft.circuit, device, starts=draft.starts, swaps_inserted=draft.swaps)
    clock.start("bound")
    stays = verdict.initial == verdict.final
    bound = lower_bound(draft, asked, stays=stays, placement=settings.placement)
    clock.stop()
    return Result(
        circuit=draft.circuit,
        source=asked,
        proof=proof,
        verdict=verdict,
        costs=costs,
        lower_bound=bound,
        budget=check_budget(costs, budget or {}),
        starts=draft.starts,
        seconds=clock.seconds,
        **given,
    )


def proven(source: Circuit, output: Circuit, proof: Proof, *, device: Device, tolerance: float) -> Verdict:
    """Check a proof, and compare the full unitaries of small circuits as well.

    Raises
    ------
    ProofError
    """
    slack = _window_tolerance(native_set(device.gate_set, tolerance=tolerance), tolerance)
    verdict = check_proof(source, output, proof, device=device, tolerance=slack)
    return _second_opinion(source, output, verdict)


def _window_tolerance(native: NativeSet, tolerance: float) -> float:
    """Return how far off a window may be: by its class, and by the pulses of the runs around each entangler."""
    deepest = max((len(entangler.entangler.reach) - 1 for entangler in native.entanglers), default=0)
    return ROUNDING + (1 + 6 * (deepest + 1)) * tolerance


def _compile_program(
    source: Program,
    draft: Draft,
    chain: Sequence[Stage],
    clock: _Clock,
    budget: Mapping[str, float],
    given: dict[str, Any],
) -> ProgramResult:
    """Compile and prove a program with classical control."""
    device, tolerance = draft.device, draft.settings.tolerance
    clock.start("compile circuits")
    threaded = thread_program(source, draft, chain)
    clock.start("prove")
    proofs = tuple(
        Proof(part.steps, Fingerprints.of(circuit, part.circuit, device))
        for circuit, part in zip(source.circuits(), threaded.drafts, strict=True)
    )
    slack = _window_tolerance(draft.native, tolerance)
    verdict = check_program(source, threaded.program, proofs, device=device, tolerance=slack)
    clock.start("count")
    costs, bounds = [], []
    for circuit, part in zip(source.circuits(), threaded.drafts, strict=True):
        costs.append(count_costs(part.circuit, device, starts=part.starts, swaps_inserted=part.swaps))
        stays = bool((part.initial == part.final)[: source.n_qubits].all())
        # Any circuit may begin where the one before it ends, wherever that is.
        bounds.append(lower_bound(part, circuit, stays=stays, placement=None))
    total = combined_costs(threaded.program, costs)
    how = max((bound.how for bound in bounds), key=len) + "; summed over the circuits of the program"
    clock.stop()
    return ProgramResult(
        program=threaded.program,
        source=source,
        proofs=proofs,
        verdict=verdict,
        costs=total,
        lower_bound=Bound(sum(b.two_qubit_gates for b in bounds), how, sum(b.swaps for b in bounds)),
        budget=check_budget(total, budget),
        seconds=clock.seconds,
        **given,
    )


def count(source: Circuit | Program | ArrayLike, device: Device, **options: Any) -> Costs:
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
        if given is not None and (
            len(set(given)) != source.n_qubits or not all(0 <= q < output.n_qubits for q in given)
        ):
            raise InputError(
                f"the {name} placement does not fit",
                required=f"{source.n_qubits} different qubits below {output.n_qubits}",
                found=", ".join(map(str, given[:16])),
            )
    return judge(source, output, initial=initial, final=final, tolerance=tolerance)


def _at_home(circuit: Circuit, *given: Sequence[int] | None) -> tuple[int, ...]:
    """Return the placement that leaves every qubit where it is, and refuse any other."""
    home = tuple(range(circuit.n_qubits))
    for places in given:
        if places is not None and any(q not in (-1, at) for at, q in enumerate(places)):
            raise InputError(
                "gates that only a 'defcal' defines stay on their physical qubits", required="no other placement"
            )
    return home


def _require_calibrated_in_place(circuit: Circuit) -> None:
    row = misplaced(circuit)
    if row is not None:
        operation = circuit.operation(row)
        raise UnsupportedError(
            f"routing would move '{operation.name}', which only a 'defcal' defines, to other qubits",
            required="two-qubit gates on coupled qubits in a program with such gates",
            found=", ".join(f"${q}" for q in operation.qubits),
        )


def _placement(given: Sequence[int] | None, circuit: Circuit | Program) -> tuple[int, ...] | None:
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
    how = "; full unitaries compared as well"
    if source.symbolic:
        how += f", at {BINDINGS} random values of the unknown parameters"
    return replace(verdict, method=verdict.method + how)


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
