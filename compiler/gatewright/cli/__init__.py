"""The command line: a thin shell over the library."""

from __future__ import annotations

import sys
from collections.abc import Sequence

__all__ = ["console", "main"]


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program's name; those of the process by default.

    Returns
    -------
    int
        0 done; 1 the input, gate set or device is at fault; 2 usage; 3 not proven equal, or not legal; 4 over budget;
        130 interrupted.
    """
    from gatewright.cli.arguments import build_parser

    arguments = sys.argv[1:] if argv is None else list(argv)
    parser = build_parser()
    try:
        options = parser.parse_args(arguments)
    except SystemExit as stop:
        return int(stop.code or 0)
    if options.command is None:
        parser.print_help()
        return 2
    # Only now: --help and usage errors answer without loading any numerical library.
    from gatewright.cli.commands import run

    return run(options)


def console() -> None:
    """Enter from the installed ``gatewright`` script."""
    sys.exit(main())
