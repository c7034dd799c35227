"""The commands and their options."""

from __future__ import annotations

import argparse

from gatewright._version import __version__

__all__ = ["build_parser"]

_EXITS = (
    "exit codes: 0 done; 1 the input, gate set or device is at fault; 2 usage; 3 not proven equal (different or "
    "undecided), or not legal; 4 over budget; 130 interrupted"
)
_INPUT = "OpenQASM 2 or 3, or a unitary as .npy, .npz, .csv, .txt or .json; - for standard input"
_JSON = "write the summary as JSON to FILE, - for standard output"


def _budget(text: str) -> tuple[str, float]:
    name, mark, limit = text.partition("=")
    try:
        value = float(limit)
    except ValueError:
        mark = ""
        value = 0.0
    if not mark or not name or value != value:
        raise argparse.ArgumentTypeError(f"{text[:60]!r}: a budget is NAME=NUMBER, such as two_qubit_gates=40")
    return name, value


def _value(text: str) -> tuple[str, float]:
    name, mark, value = text.partition("=")
    # Imported here: --help loads nothing that reads expressions.
    from gatewright.errors import ExpressionError
    from gatewright.expressions import parse

    try:
        number = parse(value, imaginary=False).real()
    except ExpressionError:
        mark = ""
        number = 0.0
    if not mark or not name.isidentifier():
        raise argparse.ArgumentTypeError(f"{text[:60]!r}: a value is NAME=NUMBER, such as theta=0.3 or theta=pi/4")
    return name, number


def _tolerance(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = -1.0
    if not 0 <= value <= 1e-2:
        raise argparse.ArgumentTypeError(f"{text[:60]!r}: a tolerance is a number from 0 to 0.01")
    return value


def _placement(text: str) -> tuple[int, ...]:
    try:
        return tuple(int(part) for part in text.split(","))
    except ValueError:
        raise argparse.ArgumentTypeError(
            f"{text[:60]!r}: a placement lists a physical qubit for each source qubit, such as 3,4,1 (-1: free)"
        ) from None


def _seed(text: str) -> int:
    if not text.isdecimal() or len(text) > 19:
        raise argparse.ArgumentTypeError(f"{text[:60]!r}: a seed is a whole number from 0")
    return int(text)


def build_parser() -> argparse.ArgumentParser:
    """Return the parser of the whole command line."""
    parser = argparse.ArgumentParser(
        prog="gatewright",
        description="Compile unitaries and circuits to a device's native gates, count the cost with its lower bound, "
        "and prove the output equal to its input.",
        epilog=_EXITS,
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"gatewright {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", title="commands")
    _add_compile(commands)
    _add_count(commands)
    _add_check(commands)
    _add_describe(commands)
    return parser


def _command(commands: argparse._SubParsersAction, name: str, help_: str, example: str) -> argparse.ArgumentParser:  # type: ignore[type-arg]
    parser: argparse.ArgumentParser = commands.add_parser(
        name,
        help=help_,
        description=help_[0].upper() + help_[1:] + ".",
        epilog=f"example:\n  {example}\n\n{_EXITS}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    return parser


def _matrix_options(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--nearest-unitary", action="store_true", help="accept a matrix that is not unitary: take the nearest one"
    )
    parser.add_argument(
        "--qubit-order",
        choices=("first", "last"),
        default="first",
        help="which Kronecker factor of a matrix is qubit 0: the first (leftmost, the default) or the last",
    )


def _compile_options(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("input", metavar="INPUT", help=_INPUT)
    parser.add_argument("--device", required=True, metavar="FILE", help="device file (TOML)")
    parser.add_argument("--json", metavar="FILE", help=_JSON)
    parser.add_argument("--seed", type=_seed, default=0, metavar="N", help="seed of all random choices (default: 0)")
    parser.add_argument(
        "--effort",
        choices=("quick", "standard", "deep"),
        default="standard",
        help="how long to search for placements (default: standard)",
    )
    parser.add_argument(
        "--prefer",
        choices=("uses", "fidelity", "duration"),
        default="uses",
        help="what is made least where qubits have several entanglers: their uses (the default), the loss of fidelity, "
        "or the duration",
    )
    parser.add_argument(
        "--tolerance",
        type=_tolerance,
        default=1e-12,
        metavar="X",
        help="use fewer entanglers where the target is within X of a class that needs fewer (default: 1e-12)",
    )
    parser.add_argument(
        "--placement", type=_placement, metavar="Q,Q,...", help="physical qubit of each source qubit, -1 where free"
    )
    parser.add_argument(
        "--set",
        type=_value,
        action="append",
        default=[],
        metavar="NAME=VALUE",
        help="give an input of the program its value before compiling; those that are not set stay open in the "
        "output; may be repeated",
    )
    parser.add_argument(
        "--budget",
        type=_budget,
        action="append",
        default=[],
        metavar="NAME=LIMIT",
        help="fail with exit code 4 beyond a limit on two_qubit_gates, one_qubit_gates, operations, depth, "
        "two_qubit_depth, swaps_inserted, duration_ns, or below one on success_estimate; may be repeated",
    )
    _matrix_options(parser)


def _add_compile(commands: argparse._SubParsersAction) -> None:  # type: ignore[type-arg]
    parser = _command(
        commands,
        "compile",
        "compile a circuit or a unitary to native gates, proven equal",
        "gatewright compile circuit.qasm --device device.toml -o native.qasm --proof native.proof",
    )
    _compile_options(parser)
    parser.add_argument(
        "-o", "--output", metavar="FILE", help="write the native circuit as OpenQASM to FILE, - for standard output"
    )
    parser.add_argument(
        "--qasm", type=int, choices=(2, 3), help="OpenQASM version (default: 3, or 2 for a file ending in .qasm2)"
    )
    parser.add_argument("--proof", metavar="FILE", help="write the proof, for `gatewright check`")
    parser.add_argument("--quiet", action="store_true", help="no table of costs on standard error")


def _add_count(commands: argparse._SubParsersAction) -> None:  # type: ignore[type-arg]
    parser = _command(
        commands,
        "count",
        "count what a circuit or a unitary would cost on a device, writing no circuit",
        "gatewright count circuit.qasm --device device.toml --budget two_qubit_gates=40",
    )
    _compile_options(parser)


def _add_check(commands: argparse._SubParsersAction) -> None:  # type: ignore[type-arg]
    parser = _command(
        commands,
        "check",
        "check that a circuit is the same operation as its source, and legal on a device",
        "gatewright check circuit.qasm native.qasm --device device.toml --proof native.proof",
    )
    parser.add_argument("source", metavar="SOURCE", help=_INPUT)
    parser.add_argument("output", metavar="OUTPUT", help="OpenQASM program to judge")
    parser.add_argument("--device", metavar="FILE", help="device file (TOML); without it, legality is not checked")
    parser.add_argument("--proof", metavar="FILE", help="proof file; without it, whatever can decide is tried")
    parser.add_argument("--json", metavar="FILE", help=_JSON)
    parser.add_argument(
        "--tolerance",
        type=_tolerance,
        default=1e-9,
        metavar="X",
        help="largest distance that counts as equal: of a window with a proof, of the whole without (default: 1e-9)",
    )
    _matrix_options(parser)


def _add_describe(commands: argparse._SubParsersAction) -> None:  # type: ignore[type-arg]
    parser = _command(
        commands,
        "describe",
        "describe a gate set, a device or a matrix",
        "gatewright describe device.toml",
    )
    parser.add_argument(
        "thing", metavar="GATESET|DEVICE|MATRIX", help="shipped gate set by name, TOML file, or a matrix file"
    )
    parser.add_argument("--json", metavar="FILE", help=_JSON)
    parser.add_argument(
        "--target",
        action="append",
        default=[],
        metavar="MATRIX",
        help="two-qubit unitary: say how many entanglers of the gate set it needs, and why no fewer; may be repeated",
    )
    parser.add_argument(
        "--chamber",
        metavar="FILE.svg",
        help="draw the Weyl chamber: what each number of uses reaches, with the entanglers and the targets",
    )
    _matrix_options(parser)
