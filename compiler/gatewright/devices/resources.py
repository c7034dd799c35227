"""Where the shipped gate sets are: the one lookup, for wheels, editable installs and zip imports alike."""

from __future__ import annotations

from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path

from gatewright.errors import GateSetError

__all__ = ["gate_set_folder", "shipped_gate_set_files"]


def gate_set_folder() -> Traversable:
    """Return the folder of the shipped gate sets.

    An installed package has it inside; in a checkout it stands beside ``pyproject.toml``.

    Raises
    ------
    GateSetError
        If it is in neither place; the message names both.
    """
    installed = files("gatewright") / "_data" / "gatesets"
    if installed.is_dir():
        return installed
    root = Path(__file__).resolve().parents[3]
    checkout = root / "gatesets"
    if (root / "pyproject.toml").is_file() and checkout.is_dir():
        return checkout
    raise GateSetError(
        "the shipped gate sets are missing",
        required=f"{installed} or {checkout}",
        hint="install gatewright again, or name a gate set file",
    )


def shipped_gate_set_files() -> dict[str, Traversable]:
    """Return the shipped gate set files by name, in alphabetical order.

    Examples
    --------
    >>> "cz-virtual-z" in shipped_gate_set_files()
    True
    """
    found = {file.name[:-5]: file for file in gate_set_folder().iterdir() if file.name.endswith(".toml")}
    return dict(sorted(found.items()))
