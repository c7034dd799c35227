"""No wrong output survives: damage of every kind to outputs and proofs, as files, and bugs planted in the stages.

Each damage is applied to what `compile` wrote; harmful ones must be refused both with the proof and without it, and
the ones that change nothing but the global phase or the text must pass. Whether a damage is harmful is not taken on
trust: full unitaries (SciPy's singular values of the difference) say so, for the part before the measurements.
"""

from __future__ import annotations

import copy
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.linalg import svdvals

import gatewright as gw
from gatewright.circuit import Builder, Circuit
from gatewright.cli import main
from gatewright.errors import GatewrightError, ProofError
from gatewright.gates import GATES
from gatewright.pipeline import CHAIN
from gatewright.proof import Proof, check_proof, decode_proof, encode_proof
from gatewright.proof.dense import spread

DEVICE_FILE = """
name = "mutation bench"
gate_set = "cross-resonance"
[coupling]
qubits = 5
edges = [[0, 1], [2, 1], [2, 3], [4, 3]]
directed = true
"""


@dataclass(frozen=True)
class Made:
    source: Circuit
    result: gw.Result
    device: gw.Device


@pytest.fixture(scope="module")
def made() -> Made:
    device = gw.Device.from_graph([(0, 1), (2, 1), (2, 3), (4, 3)], "cross-resonance", directed=True)
    rng = np.random.default_rng(8)
    builder = Builder(4, 4)
    for k in range(14):
        a, b = rng.permutation(4)[:2].tolist()
        builder.gate("u3", a, parameters=rng.uniform(-3, 3, 3).tolist()).gate("cx", a, b)
        builder.gate("cp", b, a, parameters=[float(rng.uniform(0.4, 2))])
        if k == 7:
            builder.barrier(0, 1, 2, 3)
    for q in range(4):
        builder.measure(q, 3 - q)
    source = builder.build()
    return Made(source, gw.compile(source, device, seed=1), device)


def rows(circuit: Circuit, name: str) -> np.ndarray:
    return np.flatnonzero(circuit.is_named(name))


def at(circuit: Circuit, name: str, number: int) -> int:
    return int(rows(circuit, name)[number])


def turned(circuit: Circuit, by: Callable[[float], float], number: int = 3) -> Circuit:
    parameters = circuit.parameters.copy()
    k = circuit.parameter_offsets[at(circuit, "rz", number)]
    # Not one that is a multiple of π: some damage would do nothing there.
    while abs(np.sin(parameters[k])) < 0.1:
        number += 1
        k = circuit.parameter_offsets[at(circuit, "rz", number)]
    parameters[k] = by(float(parameters[k]))
    return replace(circuit, parameters=parameters)


def renamed(circuit: Circuit, old: str, new: str, number: int = 2) -> Circuit:
    op = circuit.op.copy()
    op[at(circuit, old, number)] = len(circuit.table)
    return replace(circuit, op=op, table=(*circuit.table, GATES[new]))


def without(circuit: Circuit, name: str, number: int = 2) -> Circuit:
    return circuit.take(np.delete(np.arange(len(circuit)), at(circuit, name, number)))


def doubled(circuit: Circuit, name: str, number: int = 2) -> Circuit:
    k = at(circuit, name, number)
    return circuit.take(np.insert(np.arange(len(circuit)), k, k))


def on(circuit: Circuit, name: str, qubits: list[int] | None = None, number: int = 2) -> Circuit:
    """Move an operation to other qubits; its own, turned round, by default."""
    flat = circuit.qubits.copy()
    k = at(circuit, name, number)
    span = slice(circuit.offsets[k], circuit.offsets[k + 1])
    flat[span] = flat[span][::-1].copy() if qubits is None else qubits
    return replace(circuit, qubits=flat)


def exchanged(circuit: Circuit) -> Circuit:
    """Exchange an entangler with the next pulse on one of its qubits."""
    k = at(circuit, "zx90", 4)
    for j in range(k + 1, len(circuit)):
        if circuit.qubits_of(j) == (circuit.qubits_of(k)[0],) and circuit.table[circuit.op[j]].name == "sx":
            order = np.arange(len(circuit))
            order[k : j + 1] = np.roll(order[k : j + 1], -1)
            return circuit.take(np.r_[order[: k + 1][:k], j, np.delete(np.arange(k, len(circuit)), j - k)])
    raise AssertionError("no pulse follows")


def relinked(circuit: Circuit, change: Callable[[np.ndarray], np.ndarray]) -> Circuit:
    link = circuit.link.copy()
    measured = rows(circuit, "measure")
    link[measured] = change(link[measured])
    return replace(circuit, link=link)


def early(circuit: Circuit) -> Circuit:
    """Move a measurement in front of the last pulse on its qubit."""
    k = at(circuit, "measure", 1)
    q = circuit.qubits_of(k)[0]
    before = [j for j in range(k) if q in circuit.qubits_of(j) and circuit.table[circuit.op[j]].name == "sx"][-1]
    order = np.delete(np.arange(len(circuit)), k)
    return circuit.take(np.insert(order, before, k))


def conjugated(circuit: Circuit) -> Circuit:
    parameters = -circuit.parameters
    op = circuit.op.copy()
    op[rows(circuit, "sx")] = len(circuit.table)
    return replace(circuit, parameters=parameters, op=op, table=(*circuit.table, GATES["sxdg"]))


def appended(circuit: Circuit, name: str, *qubits: int, parameters: tuple[float, ...] = ()) -> Circuit:
    builder = Builder(circuit.n_qubits, circuit.n_bits)
    first = int(np.flatnonzero(~circuit.is_unitary & ~circuit.is_named("barrier"))[0])
    for k, op in enumerate(circuit):
        if k == first:
            builder.gate(name, *qubits, parameters=parameters)
        if op.name == "measure":
            builder.measure(op.qubits[0], op.bit or 0)
        elif op.name == "barrier":
            builder.barrier(*op.qubits)
        else:
            builder.gate(circuit.table[circuit.op[k]], *op.qubits, parameters=op.parameters)
    return builder.build()


HARMFUL: dict[str, Callable[[Circuit], Circuit]] = {
    "angle off by 1e-6": lambda c: turned(c, lambda t: t + 1e-6),
    "angle off by -1e-6": lambda c: turned(c, lambda t: t - 1e-6, 9),
    "angle of the other sign": lambda c: turned(c, lambda t: -t),
    "angle halved": lambda c: turned(c, lambda t: t / 2),
    "angle lost": lambda c: turned(c, lambda t: 0.0),
    "angle turned by π": lambda c: turned(c, lambda t: t - np.copysign(np.pi, t)),
    "angle out of range": lambda c: turned(c, lambda t: t + 2 * np.pi),
    "angle not a number": lambda c: turned(c, lambda t: float("nan")),
    "angle infinite": lambda c: turned(c, lambda t: float("inf")),
    "everything conjugated": conjugated,
    "one pulse conjugated": lambda c: renamed(c, "sx", "sxdg"),
    "a pulse made a half turn": lambda c: renamed(c, "sx", "x"),
    "a pulse replaced by another gate": lambda c: renamed(c, "sx", "h"),
    "a pulse dropped": lambda c: without(c, "sx"),
    "a rotation dropped": lambda c: without(c, "rz", int(np.argmax(np.abs(np.sin(c.parameters))))),
    "an entangler dropped": lambda c: without(c, "zx90"),
    "a pulse doubled": lambda c: doubled(c, "sx"),
    "an entangler doubled": lambda c: doubled(c, "zx90"),
    "a pulse too many": lambda c: appended(c, "sx", 0),
    "operands of an entangler exchanged": lambda c: on(c, "zx90"),
    "an entangler on an absent edge": lambda c: on(c, "zx90", [0, 4]),
    "an entangler on another edge": lambda c: on(
        c, "zx90", [4, 3] if c.qubits_of(at(c, "zx90", 2)) != (4, 3) else [2, 3]
    ),
    "a pulse on another qubit": lambda c: on(c, "sx", [(c.qubits_of(at(c, "sx", 2))[0] + 1) % 5]),
    "two operations exchanged": exchanged,
    "the end permuted by a swap": lambda c: appended(c, "swap", 1, 2),
    "all qubits renumbered": lambda c: replace(c, qubits=(4 - c.qubits).astype(np.int32)),
    "two measurements into each other's bits": lambda c: relinked(c, lambda bits: np.roll(bits, 1)),
    "two measurements into one bit": lambda c: relinked(c, lambda bits: np.where(bits == 1, 2, bits)),
    "a measurement of another qubit": lambda c: on(c, "measure", [(c.qubits_of(at(c, "measure", 0))[0] + 1) % 5], 0),
    "a measurement dropped": lambda c: without(c, "measure", 0),
    "a measurement doubled": lambda c: doubled(c, "measure", 0),
    "a measurement before its pulse": early,
    "a barrier dropped": lambda c: without(c, "barrier", 0),
    "the operations backwards": lambda c: c.take(np.arange(len(c))[::-1]),
    "half of it": lambda c: c[: len(c) // 2],
    "nothing": lambda c: c[:0],
}
#: Those that only the proof can see: the operation is the same, but what the source asked for is not there.
ONLY_ORDER = {"a barrier dropped", "a measurement doubled"}


def unitary_part(circuit: Circuit) -> Circuit:
    return circuit.take(np.flatnonzero(circuit.is_unitary))


def true_distance(made: Made, output: Circuit) -> float:
    """Return the distance from the source before the measurements, by full matrices."""
    n = made.source.n_qubits
    rank = {q: q for q in range(5)}
    meant = spread(unitary_part(made.source).unitary(), made.result.final, rank)
    there = unitary_part(output).unitary() @ spread(np.eye(2**n, dtype=complex), made.result.initial, rank)
    phase = np.vdot(meant, there)
    return float(svdvals(there - phase / abs(phase) * meant)[0]) if phase else 2.0


@pytest.mark.parametrize("damage", sorted(HARMFUL))
def test_damaged_outputs_are_refused(made: Made, damage: str) -> None:
    with np.errstate(invalid="ignore"):
        broken = HARMFUL[damage](made.result.circuit)
    readable = not np.isnan(broken.parameters).any() and not np.isinf(broken.parameters).any()
    bare = Proof(made.result.proof.steps)
    for proof in (made.result.proof, bare):
        # The bare proof, without fingerprints, must see it by its windows or by legality.
        with pytest.raises(ProofError) as caught:
            check_proof(made.source, broken, proof, device=made.device)
        assert "\n" not in str(caught.value)
    if readable and damage not in ONLY_ORDER:
        with pytest.raises(ProofError):
            gw.check(made.source, broken, device=made.device, initial=made.result.initial, final=made.result.final)


def test_what_is_called_harmful_is(made: Made) -> None:
    """By full matrices, from outside; measurements, order and legality aside."""
    assert true_distance(made, made.result.circuit) <= made.result.verdict.error_bound
    aside = ("measurement", "barrier", "not a number", "infinite", "out of range", "absent edge")
    for damage, change in HARMFUL.items():
        if not any(word in damage for word in aside):
            broken = change(made.result.circuit)
            assert true_distance(made, broken) > 1e-7, damage


HARMLESS: dict[str, Callable[[Circuit], Circuit]] = {
    "nothing at all": lambda c: c,
    "a global phase": lambda c: replace(c, phase=c.phase + 0.7),
    "names of registers": lambda c: replace(c, qubit_registers=(("other", c.n_qubits),)),
    "a gate in the table that nothing uses": lambda c: replace(c, table=(*c.table, GATES["h"])),
}


@pytest.mark.parametrize("change", sorted(HARMLESS))
def test_harmless_changes_pass(made: Made, change: str) -> None:
    output = HARMLESS[change](made.result.circuit)
    verdict = check_proof(made.source, output, made.result.proof, device=made.device)
    assert verdict.error_bound == made.result.verdict.error_bound
    assert gw.check(made.source, output, device=made.device, initial=made.result.initial).error_bound < 1e-9


def step_of(proof: Proof, **changes: Any) -> Proof:
    return replace(proof, steps=(*proof.steps[:-1], replace(proof.steps[-1], **changes)))


def swapped(array: np.ndarray, i: int, j: int) -> np.ndarray:
    out = array.copy()
    out[[i, j]] = out[[j, i]]
    return out


def with_seam(proof: Proof, change: Callable[[np.ndarray], np.ndarray]) -> Proof:
    step = proof.steps[-1]
    seams = step.seams.copy()
    # One that is neither the identity nor its own inverse.
    k = int(np.argmax(np.abs(seams[:, 0]) * np.linalg.norm(seams[:, 1:], axis=1)))
    seams[k] = change(seams[k])
    return step_of(proof, seams=seams)


def short_of_window(proof: Proof, window: int) -> Proof:
    step = proof.steps[-1]
    slots = np.r_[0 : step.offsets[window], step.offsets[window + 1] : step.offsets[-1]]
    widths = np.delete(np.diff(step.offsets), window)
    return step_of(
        proof,
        offsets=np.concatenate([[0], np.cumsum(widths)]),
        wires=step.wires[slots],
        entry=step.entry[slots],
        exit=step.exit[slots],
        seams=step.seams[slots],
        claims=np.delete(step.claims, window),
        source_window=np.where(step.source_window > window, step.source_window - 1, step.source_window),
        output_window=np.where(step.output_window > window, step.output_window - 1, step.output_window),
    )


PROOFS: dict[str, Callable[[Proof], Proof]] = {
    "a window missing": lambda p: short_of_window(p, 3),
    "the last window missing": lambda p: short_of_window(p, p.steps[-1].windows - 1),
    "an output operation in another window": lambda p: step_of(
        p, output_window=np.where(np.arange(len(p.steps[-1].output_window)) == 5, 9, p.steps[-1].output_window)
    ),
    "a source operation in another window": lambda p: step_of(
        p, source_window=np.where(np.arange(len(p.steps[-1].source_window)) == 5, 0, p.steps[-1].source_window)
    ),
    "windows numbered backwards": lambda p: step_of(
        p, output_window=p.steps[-1].windows - 1 - p.steps[-1].output_window
    ),
    "a window that does not exist": lambda p: step_of(p, source_window=p.steps[-1].source_window + 10_000),
    "a negative window": lambda p: step_of(p, output_window=p.steps[-1].output_window - 5),
    "two wires exchanged": lambda p: step_of(p, wires=swapped(p.steps[-1].wires, 0, 1)),
    "a wire that does not exist": lambda p: step_of(p, wires=p.steps[-1].wires + 5),
    "entries exchanged": lambda p: step_of(p, entry=swapped(p.steps[-1].entry, 0, 1)),
    "exits exchanged": lambda p: step_of(p, exit=swapped(p.steps[-1].exit, 0, 1)),
    "another placement at the start": lambda p: step_of(p, initial=swapped(p.steps[-1].initial, 0, 1)),
    "another placement at the end": lambda p: step_of(p, final=swapped(p.steps[-1].final, 0, 1)),
    "no placement": lambda p: step_of(p, final=np.zeros_like(p.steps[-1].final)),
    "a seam lost": lambda p: with_seam(p, lambda q: np.array([1.0, 0, 0, 0])),
    "the phase of a seam lost": lambda p: with_seam(p, lambda q: q * [1, 1, 1, -1]),
    "a seam inverted": lambda p: with_seam(p, lambda q: q * [1, -1, -1, -1]),
    "a seam off by 1e-6": lambda p: with_seam(p, lambda q: (q + [1e-6, 0, 0, 0]) / np.linalg.norm(q + [1e-6, 0, 0, 0])),
    "a seam of zeros": lambda p: with_seam(p, lambda q: q * 0),
    "a seam not a number": lambda p: with_seam(p, lambda q: q * np.nan),
    "seams left out": lambda p: step_of(p, seams=p.steps[-1].seams[:-1]),
    "a claim of another kind": lambda p: step_of(p, claims=np.full_like(p.steps[-1].claims, 4)),
    "measured where it is not": lambda p: step_of(p, claims=np.full_like(p.steps[-1].claims, 1)),
    "a claim that does not exist": lambda p: step_of(p, claims=np.full_like(p.steps[-1].claims, 99)),
    "a claim left out": lambda p: step_of(p, claims=p.steps[-1].claims[:-1]),
    "no steps": lambda p: replace(p, steps=()),
    "a step twice": lambda p: replace(p, steps=(*p.steps, p.steps[-1])),
    **{
        f"another fingerprint of the {name}": lambda p, name=name: replace(
            p, made_for=replace(p.made_for, **{name: "f" * 64})
        )
        for name in ("source", "output", "gate_set", "device")
    },
}


@pytest.mark.parametrize("damage", sorted(PROOFS))
def test_damaged_proofs_are_refused(made: Made, damage: str) -> None:
    broken = PROOFS[damage](made.result.proof)
    with np.errstate(invalid="ignore"), pytest.raises(GatewrightError):
        check_proof(made.source, made.result.circuit, broken, device=made.device)
    # And through the file: refused when it is written, read, or judged.
    with np.errstate(invalid="ignore"), pytest.raises((GatewrightError, ValueError)):
        check_proof(made.source, made.result.circuit, decode_proof(encode_proof(broken)), device=made.device)


def test_a_proof_of_something_else_is_refused(made: Made) -> None:
    other = gw.compile(made.source, made.device, seed=5)
    third = Builder(4, 4).gate("h", 0).build()
    for source, output, proof in (
        (made.source, other.circuit, made.result.proof),
        (third, made.result.circuit, made.result.proof),
        (made.source, made.result.circuit, gw.compile(third, made.device).proof),
    ):
        if output is other.circuit and np.array_equal(other.circuit.qubits, made.result.circuit.qubits):
            continue
        with pytest.raises(ProofError):
            check_proof(source, output, proof, device=made.device)


BUGS: dict[str, tuple[str, Callable[[Any], Any]]] = {}


def bug(stage: str) -> Callable[[Callable[[Any], Any]], Callable[[Any], Any]]:
    def register(change: Callable[[Any], Any]) -> Callable[[Any], Any]:
        BUGS[f"{stage}: {(change.__doc__ or '').strip()}"] = stage, change
        return change

    return register


@bug("synthesise")
def _(draft: Any) -> Any:
    """An angle off by 1e-7."""
    return replace(draft, circuit=turned(draft.circuit, lambda t: t + 1e-7))


@bug("synthesise")
def _(draft: Any) -> Any:
    """Seams forgotten."""
    step = draft.steps[-1]
    seams = np.tile([1.0, 0, 0, 0], (len(step.seams), 1))
    return replace(draft, steps=(*draft.steps[:-1], replace(step, seams=seams)))


@bug("synthesise")
def _(draft: Any) -> Any:
    """The final placement not followed."""
    step = draft.steps[-1]
    return replace(draft, steps=(*draft.steps[:-1], replace(step, final=swapped(step.final, 0, 1))))


@bug("synthesise")
def _(draft: Any) -> Any:
    """A pulse too long."""
    return replace(draft, circuit=renamed(draft.circuit, "sx", "x"))


@bug("synthesise")
def _(draft: Any) -> Any:
    """An entangler turned round."""
    return replace(draft, circuit=on(draft.circuit, "zx90"))


@bug("route")
def _(draft: Any) -> Any:
    """Two qubits confused after routing."""
    flat = draft.circuit.qubits.copy()
    flat[draft.circuit.offsets[-4] :] = flat[draft.circuit.offsets[-4] :][::-1].copy()
    return replace(draft, circuit=replace(draft.circuit, qubits=flat))


@bug("place")
def _(draft: Any) -> Any:
    """Two source qubits on one place."""
    initial = draft.initial.copy()
    initial[0] = initial[1]
    return replace(draft, initial=initial)


@bug("fuse")
def _(draft: Any) -> Any:
    """An operation in the window after its own."""
    window = draft.fused.window.copy()
    window[np.flatnonzero(window == 2)[0]] = 3
    return replace(draft, fused=replace(draft.fused, window=window))


@bug("schedule")
def _(draft: Any) -> Any:
    """Two operations in the wrong order."""
    k = at(draft.circuit, "zx90", 3)
    q = draft.circuit.qubits_of(k)[1]
    j = next(i for i in range(k + 1, len(draft.circuit)) if q in draft.circuit.qubits_of(i))
    order = np.arange(len(draft.circuit))
    order[[k, j]] = j, k
    step = draft.steps[-1]
    step = replace(step, output_window=step.output_window[order])
    return replace(draft, circuit=draft.circuit.take(order), steps=(*draft.steps[:-1], step))


@pytest.mark.parametrize("name", sorted(BUGS))
def test_bugs_planted_in_stages_are_caught_by_the_checker(made: Made, name: str, monkeypatch: Any) -> None:
    stage, change = BUGS[name]
    caught: list[str] = []

    def sabotaged(real: Callable[[Any], Any]) -> Callable[[Any], Any]:
        def run(draft: Any) -> Any:
            return change(copy.copy(real(draft)))

        run.__name__ = real.__name__
        return run

    real_check = check_proof

    def watched(*arguments: Any, **options: Any) -> Any:
        try:
            return real_check(*arguments, **options)
        except ProofError as problem:
            caught.append(str(problem))
            raise

    monkeypatch.setattr("gatewright.pipeline.check_proof", watched)
    chain = tuple(sabotaged(part) if part.__name__ == stage else part for part in CHAIN)
    if stage in ("place", "fuse"):
        # A later stage may stumble over these first; what matters is that nothing comes out.
        with pytest.raises((GatewrightError, IndexError, ValueError, AssertionError)):
            gw.compile(made.source, made.device, seed=1, chain=chain)
        return
    with pytest.raises(ProofError):
        gw.compile(made.source, made.device, seed=1, chain=chain)
    assert caught


def test_there_are_enough_kinds() -> None:
    assert len(HARMFUL) >= 25 and len(PROOFS) >= 25


def test_files_in_another_folder_are_judged_by_themselves(made: Made, tmp_path: Path, monkeypatch: Any) -> None:
    from gatewright.qasm import write

    (tmp_path / "d.toml").write_text(DEVICE_FILE)
    (tmp_path / "in.qasm").write_text(write(made.source))
    monkeypatch.chdir(tmp_path)
    assert main("compile in.qasm --device d.toml -o out.qasm --proof out.proof --quiet".split()) == 0
    check = "check in.qasm out.qasm --device d.toml --proof out.proof".split()
    assert main(check) == 0
    text = (tmp_path / "out.qasm").read_text()
    lines = text.splitlines()
    pulses = [k for k, line in enumerate(lines) if line.startswith("sx ")]
    for broken in (
        [*lines[: pulses[3]], *lines[pulses[3] + 1 :]],
        [*lines[: pulses[3]], lines[pulses[3]], *lines[pulses[3] :]],
        [line.replace("rz(", "rz(1e-6 + ", 1) if k == pulses[2] - 1 else line for k, line in enumerate(lines)],
    ):
        if broken == lines:
            continue
        (tmp_path / "out.qasm").write_text("\n".join(broken) + "\n")
        assert main(check) == 3
    (tmp_path / "out.qasm").write_text(text + "// a remark\n\n")
    assert main(check) == 0
    data = (tmp_path / "out.proof").read_bytes()
    (tmp_path / "out.proof").write_bytes(data[:-100])
    assert main(check) == 1
