"""TOML from outside, made safe: bounded in size, checked for type, and every fault named by its key.

TOML 1.0 (https://toml.io/en/v1.0.0), read with the standard library's `tomllib`.
"""

from __future__ import annotations

import math
import os
import re
import tomllib
from collections.abc import Iterable, Mapping
from importlib.resources.abc import Traversable
from numbers import Integral, Real
from pathlib import Path
from typing import Any

import numpy as np

from gatewright.errors import InputError, nearest_name, shorten

__all__ = ["MAX_BYTES", "Table", "is_integer", "is_number", "load_toml", "one_line"]

#: Largest file that is read. `tomllib` takes about a second for this much.
MAX_BYTES = 2**20

#: Most parts of a dotted key; `tomllib` takes time that grows with the cube of this number.
_MAX_KEY_PARTS = 20

Failure = type[InputError]


def load_toml(source: str | os.PathLike[str] | Traversable, *, error: Failure) -> dict[str, Any]:
    """Read a TOML file.

    Raises
    ------
    InputError
        Of the class `error`: unreadable, too large, not text, or not TOML; with line and column where known.
    """
    file = Path(source) if isinstance(source, (str, os.PathLike)) else source
    where = shorten(file, 200)
    try:
        with file.open("rb") as stream:
            raw = stream.read(MAX_BYTES + 1)
    except (OSError, ValueError) as problem:
        reason = getattr(problem, "strerror", None) or str(problem)
        raise error("the file cannot be read", found=reason.lower(), where=where) from None
    if len(raw) > MAX_BYTES:
        raise error("the file is too large", required=f"at most {MAX_BYTES} bytes of TOML", where=where)
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        line = raw.count(b"\n", 0, problem.start) + 1
        raise error("the file is not text", required="TOML in UTF-8", where=where, line=line) from None
    if not text.strip():
        raise error("the file is empty", required="TOML", where=where)
    for number, line_text in enumerate(text.split("\n"), 1):
        if line_text.count(".") > _MAX_KEY_PARTS and not line_text.lstrip().startswith("#"):
            pieces = re.split(r"[=,{}\[\]]", re.sub(r"\.\.+", "", line_text))
            if max(piece.count(".") for piece in pieces) > _MAX_KEY_PARTS:
                raise error("a dotted key has too many parts", required=f"{_MAX_KEY_PARTS}", where=where, line=number)
    try:
        return tomllib.loads(text)
    except RecursionError:
        raise error("the brackets are nested too deeply", where=where) from None
    except ValueError as problem:  # TOMLDecodeError among them
        message = str(problem)
        at: tuple[int | None, int | None] = (None, None)
        place = re.search(r" \(at line (\d+), column (\d+)\)$", message)
        if place:
            at = (int(place[1]), int(place[2]))
            message = message[: place.start()]
        elif message.endswith("(at end of document)"):
            at = (text.count("\n") + 1, None)
        raise error("not valid TOML", found=shorten(message, 100), where=where, line=at[0], column=at[1]) from None


def one_line(value: object) -> str:
    """Return a short quotation of a value for a message."""
    try:
        return shorten(f"'{value}'" if isinstance(value, str) else repr(value), 60)
    except (ValueError, RecursionError):  # an integer of more digits than Python prints, nesting without end
        return f"a value of type {type(value).__name__}"


class Table:
    """A mapping from outside with typed access; faults name the full key.

    Parameters
    ----------
    data : object
        What should be a mapping with text keys.
    error : type of InputError
        Class of the errors raised.
    where : str
        File name for messages.
    key : str
        Full key of this table, empty for the outermost.
    known : iterable of str, optional
        Keys that may occur; any by default.
    """

    def __init__(
        self, data: object, *, error: Failure, where: str = "", key: str = "", known: Iterable[str] | None = None
    ) -> None:
        self.error = error
        self.where = where
        self.key = key
        if not isinstance(data, Mapping):
            raise self.fault("", "a table", data)
        for name in data:
            if not isinstance(name, str):
                raise self.fault("", "text as keys", name)
        self.data: Mapping[str, Any] = data
        if known is not None:
            names = tuple(known)
            for name in data:
                if name not in names:
                    inside = f" in '{key}'" if key else ""
                    raise self.fail(f"unknown key '{shorten(name)}'{inside}", hint=nearest_name(name, names))

    def path(self, name: str) -> str:
        """Return the full key of the entry `name`."""
        return ".".join(part for part in (self.key, name) if part)

    def fail(self, what: str, *, required: str = "", found: str = "", hint: str = "") -> InputError:
        """Return an error about this source."""
        return self.error(what, required=required, found=found, hint=hint, where=self.where)

    def fault(self, name: str, required: str, value: object = None, *, found: str = "") -> InputError:
        """Return an error about the entry `name`, quoting its value unless there is a better phrase."""
        key = self.path(name)
        what = f"'{shorten(key)}' is wrong" if key else "the outermost value is wrong"
        return self.fail(what, required=required, found=found or one_line(value))

    def __contains__(self, name: str) -> bool:
        """Return whether there is an entry `name`."""
        return name in self.data

    def get(self, name: str) -> Any:
        """Return an entry that must be there."""
        if name not in self.data:
            inside = f" in '{shorten(self.key)}'" if self.key else ""
            raise self.fail(f"'{name}' is missing{inside}")
        return self.data[name]

    def text(self, name: str, default: str | None = None, *, limit: int = 80) -> str:
        """Return printable text of one line, at most `limit` characters (line breaks become spaces)."""
        if name not in self.data and default is not None:
            return default
        value = self.get(name)
        if not isinstance(value, str):
            raise self.fault(name, "text", value)
        line = " ".join(value.split())
        if not line or len(line) > limit or not line.isprintable():
            raise self.fault(name, f"1 to {limit} printable characters", value)
        return line

    def boolean(self, name: str, default: bool) -> bool:
        """Return true or false."""
        value = self.data.get(name, default)
        if not isinstance(value, (bool, np.bool_)):
            raise self.fault(name, "true or false", value)
        return bool(value)

    def integer(self, name: str, low: int, high: int) -> int:
        """Return an integer from `low` to `high`."""
        value = self.get(name)
        if not is_integer(value) or not low <= value <= high:
            raise self.fault(name, f"an integer from {low} to {high}", value)
        return int(value)

    def number(self, name: str, low: float, high: float, *, unknown: bool = False) -> float:
        """Return a number from `low` to `high`; with `unknown`, NaN is allowed, and stands for no entry."""
        return self.as_number(name, self.data.get(name, math.nan) if unknown else self.get(name), low, high, unknown)

    def as_number(self, name: str, value: Any, low: float, high: float, unknown: bool) -> float:
        """Return `value` as a number from `low` to `high`."""
        if is_number(value):
            try:
                number = float(value)
            except OverflowError:
                number = math.inf
            if (low <= number <= high and math.isfinite(number)) or (unknown and math.isnan(number)):
                return number
        limits = f"of at least {low:g}" if math.isinf(high) else f"from {low:g} to {high:g}"
        raise self.fault(name, f"a number {limits}" + (", or nan where unknown" if unknown else ""), value)

    def sequence(self, name: str) -> list[Any]:
        """Return a list."""
        return self.as_sequence(name, self.get(name))

    def as_sequence(self, name: str, value: object) -> list[Any]:
        """Return `value` as a list (arrays and tuples are taken too)."""
        if isinstance(value, np.ndarray) and value.ndim:
            return list(value)
        if isinstance(value, (list, tuple)):
            return list(value)
        raise self.fault(name, "a list", value)

    def table(self, name: str, known: Iterable[str] | None = None) -> Table:
        """Return the table `name`; an empty one where it is left out."""
        return Table(self.data.get(name, {}), error=self.error, where=self.where, key=self.path(name), known=known)

    def tables(self, name: str, known: Iterable[str]) -> list[Table]:
        """Return the list of tables `name`; an empty one where it is left out."""
        names = tuple(known)
        entries = self.sequence(name) if name in self.data else []
        return [
            Table(entry, error=self.error, where=self.where, key=self.path(f"{name}[{k}]"), known=names)
            for k, entry in enumerate(entries)
        ]


def is_integer(value: Any) -> bool:
    """Return whether `value` is an integer and no truth value."""
    return isinstance(value, Integral) and not isinstance(value, bool)


def is_number(value: Any) -> bool:
    """Return whether `value` is a real number and no truth value."""
    return isinstance(value, Real) and not isinstance(value, bool)
