"""Plain tables for a terminal: every count with its lower bound beside it."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any, TextIO

if TYPE_CHECKING:
    from gatewright.proof import Verdict
    from gatewright.result import ProgramResult, Result

__all__ = ["print_description", "print_result", "print_verdict"]


#: Entries of a list of tables that are shown.
_MOST_SHOWN = 16


def print_result(result: Result | ProgramResult, stream: TextIO) -> None:
    """Print costs, bounds, placement and proof of a compilation."""
    costs, verdict = result.costs, result.verdict
    gates = ", ".join(f"{number} {name}" for name, number in costs.by_gate.items()) or "none"
    rows = [
        ("two-qubit gates", str(costs.two_qubit_gates), f"at least {result.lower_bound.two_qubit_gates} (see note)"),
        ("one-qubit gates", str(costs.one_qubit_gates), "physical pulses; virtual ones are free"),
        (
            "swaps inserted",
            str(costs.swaps_inserted),
            f"at least {result.lower_bound.swaps} (see note); merged into neighbouring windows where there are any",
        ),
        ("two-qubit depth", str(costs.two_qubit_depth), ""),
        ("depth", str(costs.depth), "layers of physical operations"),
    ]
    if costs.duration_ns is not None:
        rows.append(("duration", f"{costs.duration_ns:g} ns", ""))
    if costs.success_estimate is not None:
        rows.append(("success estimate", f"{costs.success_estimate:.4g}", "a model; trust your own calibration first"))
    rows.append(("error bound", f"{verdict.error_bound:.2g}", f"proven: {verdict.windows} {verdict.method}"))
    if verdict.round_bound:
        rows.append(("for a further round", f"{verdict.round_bound:.2g}", "of a loop, at most"))
    if result.moved:
        rows.append(("input moved by", f"{result.moved:.2g}", "to the nearest unitary"))
    for name, moved in result.device.gate_set.measured.items():
        rows.append((f"measured {name} moved by", f"{moved:.2g}", "to the nearest unitary, which is compiled to"))
    for entry in result.budget:
        met = "met" if entry["met"] else "NOT MET"
        rows.append((f"budget {entry['name']}", f"{entry['relation']} {entry['limit']:g}", met))
    print(f"{result.source.n_qubits} qubits on {result.device.name} ({result.device.gate_set.name})", file=stream)
    name_width, value_width = (max(len(row[column]) for row in rows) for column in (0, 1))
    for name, value, remark in rows:
        print(f"  {name:<{name_width}}  {value:>{value_width}}  {remark}".rstrip(), file=stream)
    print(f"operations: {gates}", file=stream)
    print(f"placement in: {_places(result.initial)}", file=stream)
    print(f"placement out: {_places(result.final)}", file=stream)
    print(f"note on the lower bound: {result.lower_bound.how}", file=stream)


def _places(places: tuple[int, ...]) -> str:
    return ", ".join(f"{q}→{p}" for q, p in enumerate(places))


def print_verdict(verdict: Verdict, stream: TextIO) -> None:
    """Print what the checker found."""
    print(f"equal within {verdict.error_bound:.3g} (operator norm, up to global phase)", file=stream)
    if verdict.round_bound:
        print(f"each further round of a loop adds {verdict.round_bound:.3g} at most", file=stream)
    if verdict.rounding:
        print(f"of this, {verdict.rounding:.3g} is what the checker's own rounding may hide", file=stream)
    print(f"method: {verdict.method}", file=stream)
    if verdict.windows:
        worst = f"the worst, number {verdict.worst_window}, is {verdict.worst_distance:.3g} off"
        print(f"windows: {verdict.windows}; {worst}", file=stream)
    print(f"placement in: {_places(verdict.initial)}", file=stream)
    print(f"placement out: {_places(verdict.final)}", file=stream)


def print_description(facts: dict[str, Any], stream: TextIO) -> None:
    """Print facts as indented lines."""
    for line in _lines(facts, 0):
        print(line, file=stream)


def _lines(value: dict[str, Any], depth: int) -> Iterable[str]:
    pad = "  " * depth
    for key, entry in value.items():
        name = key.replace("_", " ")
        if isinstance(entry, dict):
            lines = list(_lines(entry, depth + 1))
            yield from [f"{pad}{name}:", *lines] if lines else []
        elif isinstance(entry, list) and entry and isinstance(entry[0], dict):
            yield f"{pad}{name}:"
            for item in entry[:_MOST_SHOWN]:
                lines = list(_lines(item, depth + 2))
                yield f"{pad}  - {lines[0].strip()}"
                yield from lines[1:]
            if len(entry) > _MOST_SHOWN:
                yield f"{pad}  … ({len(entry)} in all; --json has them)"
        elif entry not in ("", None, []):
            yield f"{pad}{name}: {_short(entry)}"


def _short(entry: Any) -> str:
    if isinstance(entry, bool):
        return "yes" if entry else "no"
    if isinstance(entry, float):
        return f"{entry:.10g}"
    if isinstance(entry, list):
        shown = ", ".join(f"({_short(item)})" if isinstance(item, list) else _short(item) for item in entry[:40])
        return shown + (f", … ({len(entry)} in all)" if len(entry) > 40 else "")
    return str(entry)
