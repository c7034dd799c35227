"""Run the commands: read, call the library, write; nothing here that the library lacks."""

from __future__ import annotations

import argparse
import json
import os
import sys
import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gatewright.errors import GatewrightError, InputError, ProofError

if TYPE_CHECKING:
    from gatewright.devices import Device
    from gatewright.gates import Gate
    from gatewright.inputs import Source
    from gatewright.proof import Verdict
    from gatewright.result import ProgramResult, Result

__all__ = ["run"]


def run(options: argparse.Namespace) -> int:
    """Run the command that was parsed, and turn every error into one line and an exit code."""
    commands: dict[str, Callable[[argparse.Namespace], int]] = {
        "compile": _compile,
        "count": _count,
        "check": _check,
        "describe": _describe,
    }
    try:
        return commands[options.command](options)
    except GatewrightError as error:
        _say(f"gatewright: {error}")
        return error.exit_code
    except KeyboardInterrupt:
        _say("gatewright: interrupted; nothing was written")
        return 130
    except MemoryError:
        _say("gatewright: out of memory; try a smaller input")
        return 1
    except BrokenPipeError:
        # The reader has gone: what is left to write has nowhere to go.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def _say(line: str) -> None:
    print(line, file=sys.stderr, flush=True)


def _prepare(device: Device | None = None) -> None:
    from gatewright.kernels import load_kernels

    load_kernels(lambda line: _say(f"gatewright: {line}"), device)


@contextmanager
def _progress() -> Iterator[Callable[[str], None] | None]:
    """Show the running stage on a terminal, and nothing elsewhere."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console

    with Console(stderr=True).status("reading") as status:
        yield lambda stage: status.update(stage)


def _write(outputs: dict[str, bytes]) -> None:
    """Write all files, each under a temporary name first and renamed when all are complete; ``-`` is stdout."""
    ready: list[tuple[str, str]] = []
    try:
        for name, data in outputs.items():
            if name == "-":
                continue
            folder = Path(name).parent
            try:
                handle, temporary = tempfile.mkstemp(prefix=f".{Path(name).name}.", dir=folder)
                ready.append((temporary, name))
                with os.fdopen(handle, "wb") as file:
                    file.write(data)
                umask = os.umask(0)
                os.umask(umask)
                Path(temporary).chmod(0o666 & ~umask)
                if Path(name).is_dir():
                    raise IsADirectoryError(21, "Is a directory")
            except OSError as error:
                raise InputError(
                    f"cannot write the file: {(error.strerror or str(error)).lower()}", where=name
                ) from None
        while ready:
            temporary, name = ready[0]
            Path(temporary).replace(name)
            ready.pop(0)
    finally:
        for temporary, _ in ready:
            Path(temporary).unlink(missing_ok=True)
    if "-" in outputs:
        sys.stdout.buffer.write(outputs["-"])
        sys.stdout.buffer.flush()


def _to_json(facts: dict[str, Any]) -> bytes:
    return (json.dumps(facts, indent=2, ensure_ascii=False, allow_nan=False) + "\n").encode()


def _different(names: list[str | None]) -> None:
    given = [name for name in names if name is not None]
    if len(set(given)) < len(given):
        raise InputError(
            "two outputs have the same destination",
            required="different files, and one '-' at most",
            found=", ".join(given),
        )


def _compiled(options: argparse.Namespace) -> Result | ProgramResult:
    from gatewright.devices import read_device
    from gatewright.gates import GATES
    from gatewright.inputs import load

    device = read_device(options.device)
    source = load(
        options.input,
        tolerance=options.tolerance,
        nearest_unitary=options.nearest_unitary,
        qubit_order=options.qubit_order,
        # The device's own gates stay what they are where the program defines them alike.
        natives={name: gate for name, gate in device.gate_set.natives.items() if name not in GATES},
        strict=False,
    )
    device.require_room(source.circuit.n_qubits)
    given = source.circuit.bind(dict(options.set)) if options.set else source.circuit
    # What is wrong with the input has been said before this: the kernels take longer to load than all of that.
    _prepare(device)
    from gatewright.pipeline import compile as compile_source

    with _progress() as progress:
        return compile_source(
            given,
            device,
            seed=options.seed,
            tolerance=options.tolerance,
            effort=options.effort,
            prefer=options.prefer,
            placement=options.placement,
            budget=dict(options.budget),
            progress=progress,
            moved=source.moved,
        )


def _compile(options: argparse.Namespace) -> int:
    destination = options.output or (None if options.json == "-" else "-")
    _different([destination, options.json, options.proof])
    result = _compiled(options)
    met = all(entry["met"] for entry in result.budget)
    outputs: dict[str, bytes] = {}
    if options.json:
        outputs[options.json] = _to_json(result.summary())
    if met:
        version = options.qasm or (2 if str(destination).endswith(".qasm2") else 3)
        if destination:
            outputs[destination] = result.to_qasm(version=version).encode()
        if options.proof:
            outputs[options.proof] = result.encode_proof()
    _write(outputs)
    return _report(result, quiet=options.quiet)


def _report(result: Result | ProgramResult, *, quiet: bool) -> int:
    from gatewright.cost import require_budget
    from gatewright.report.terminal import print_result

    if not quiet:
        print_result(result, sys.stderr)
    require_budget(result.budget)
    return 0


def _count(options: argparse.Namespace) -> int:
    result = _compiled(options)
    from gatewright.cost import require_budget
    from gatewright.report.terminal import print_result

    if options.json:
        _write({options.json: _to_json(result.summary())})
    if options.json != "-":
        print_result(result, sys.stdout)
    require_budget(result.budget)
    return 0


def _check(options: argparse.Namespace) -> int:
    from gatewright.devices import read_device
    from gatewright.inputs import load
    from gatewright.program import Program
    from gatewright.proof import read_proof

    device = read_device(options.device) if options.device else None
    source = load(
        options.source,
        tolerance=max(options.tolerance, 1e-12),
        nearest_unitary=options.nearest_unitary,
        qubit_order=options.qubit_order,
    )
    output = load(options.output, natives=beyond_the_library() if device is None else device.gate_set.natives)
    if isinstance(source.circuit, Program) or isinstance(output.circuit, Program):
        return _check_program(options, source, output, device)
    proof = read_proof(options.proof) if options.proof else None
    places = output.qubit_map
    _prepare()
    from gatewright.pipeline import check

    try:
        verdict = check(
            source.circuit,
            output.circuit,
            device=device,
            proof=proof,
            initial=places.initial if places else None,
            final=places.final if places else None,
            tolerance=options.tolerance,
        )
    except GatewrightError as error:
        if proof is not None and error.exit_code == 3:
            changed = _changed(proof.made_for.source, proof.made_for.output, source.circuit, output.circuit)
            own = "native gates of a device are known only with its --device" if changed and device is None else ""
            error.hint = "; ".join(filter(None, (changed or error.hint, own)))
        raise
    return _tell(options, verdict, legality_checked=device is not None)


def _check_program(options: argparse.Namespace, source: Source, output: Source, device: Device | None) -> int:
    from gatewright.program import Program
    from gatewright.proof import check_program, read_program_proof

    if not isinstance(source.circuit, Program) or not isinstance(output.circuit, Program):
        raise ProofError(
            "not equal: one of the two has classical control and the other has not",
            found=f"source {source.circuit!r}, output {output.circuit!r}",
        )
    proofs = read_program_proof(options.proof) if options.proof else None
    _prepare()
    verdict = check_program(
        source.circuit,
        output.circuit,
        proofs,
        device=device,
        initial=output.qubit_map.initial if output.qubit_map else None,
        tolerance=options.tolerance,
    )
    return _tell(options, verdict, legality_checked=device is not None)


def _tell(options: argparse.Namespace, verdict: Verdict, *, legality_checked: bool) -> int:
    from gatewright.report.terminal import print_verdict

    if options.json:
        places = {"initial": list(verdict.initial), "final": list(verdict.final)}
        facts = verdict.to_dict() | {"placement": places, "legality_checked": legality_checked}
        _write({options.json: _to_json(facts)})
    if options.json != "-":
        print_verdict(verdict, sys.stdout)
    return 0


def beyond_the_library() -> dict[str, Gate]:
    """Return the named gates that a program has to define: their calls are kept where no device says what is native."""
    from gatewright.devices.gateset import STANDARD_LIBRARY
    from gatewright.gates import GATES

    return {name: gate for name, gate in GATES.items() if name not in STANDARD_LIBRARY}


def _changed(source_print: str, output_print: str, source: Any, output: Any) -> str:
    """Say which of the two circuits is not the one that the proof was made for."""
    from gatewright.proof import fingerprint

    changed = [
        name
        for name, circuit, known in (("source", source, source_print), ("output", output, output_print))
        if known and fingerprint(circuit) != known
    ]
    return f"the {' and the '.join(changed)} has been changed since the proof was made" if changed else ""


def _describe(options: argparse.Namespace) -> int:
    from gatewright.devices import read_any, shipped_gate_sets
    from gatewright.inputs import load
    from gatewright.program import Program
    from gatewright.report.terminal import print_description

    name = options.thing
    of_data = name in shipped_gate_sets() or Path(name).suffix.lower() == ".toml"
    moved = 0.0

    def matrix_in(place: str) -> Any:
        nonlocal moved
        source = load(place, nearest_unitary=options.nearest_unitary, qubit_order=options.qubit_order)
        if isinstance(source.circuit, Program):
            what = "a program with classical control has no matrix"
            raise InputError(what, required="a circuit of gates", where=place)
        moved = source.moved
        return source.circuit.unitary()

    _different([options.json, options.chamber])
    targets = {place: matrix_in(place) for place in options.target}
    thing: Any = read_any(name) if of_data else matrix_in(name)
    _prepare()
    from gatewright.description import describe

    facts = describe(thing, targets=targets)
    if not of_data:
        facts["distance_moved"] = moved
    outputs = {options.json: _to_json(facts)} if options.json else {}
    if options.chamber:
        from gatewright.report.reach import picture_of

        outputs[options.chamber] = picture_of(thing, facts, name=Path(name).name).encode()
    _write(outputs)
    if "-" not in outputs:
        print_description(facts, sys.stdout)
    return 0
