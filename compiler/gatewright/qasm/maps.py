"""Comment lines at the head of a program that say which physical qubit each source qubit begins and ends on."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from gatewright.errors import QasmError, shorten

__all__ = ["QubitMap", "map_lines", "read_map"]

_HEAD = re.compile(r"(?:\s*//[^\n]*)*")
_LINE = re.compile(r"^\s*//\s*qubit map (in|out)\s*:(.*)$", re.MULTILINE)
_PAIR = re.compile(r"\s*([0-9]{1,9})\s*->\s*([0-9]{1,9})\s*")


@dataclass(frozen=True, slots=True)
class QubitMap:
    """Where the qubits of a source program are at the beginning and at the end.

    Attributes
    ----------
    initial, final : tuple of int
        Entry i is the physical qubit of source qubit i.
    """

    initial: tuple[int, ...]
    final: tuple[int, ...]


def map_lines(initial: Sequence[int], final: Sequence[int]) -> list[str]:
    """Return the two comment lines.

    Parameters
    ----------
    initial, final : sequence of int
        Entry i is the physical qubit of source qubit i.

    Examples
    --------
    >>> map_lines([4, 3], [3, 4])
    ['// qubit map in: 0 -> 4, 1 -> 3', '// qubit map out: 0 -> 3, 1 -> 4']
    """
    return [
        f"// qubit map {word}: " + ", ".join(f"{source} -> {place}" for source, place in enumerate(places))
        for word, places in (("in", initial), ("out", final))
    ]


def read_map(text: str, *, where: str = "") -> QubitMap | None:
    r"""Return the map that the comments in front of a program state, or None if they state none.

    Raises
    ------
    QasmError
        If a line is damaged, missing or repeated, or the two do not fit together.

    Examples
    --------
    >>> read_map("// qubit map in: 0 -> 4, 1 -> 3\n// qubit map out: 0 -> 3, 1 -> 4\nOPENQASM 3.0;")
    QubitMap(initial=(4, 3), final=(3, 4))
    """
    text = text.removeprefix("\ufeff")
    head = _HEAD.match(text)
    found: dict[str, tuple[int, ...]] = {}
    for match in _LINE.finditer(head[0] if head else ""):
        word, places = match[1], match[2]
        line = text.count("\n", 0, match.start(1)) + 1
        column = match.start(1) - text.rfind("\n", 0, match.start(1))
        problem = QasmError(
            f"the comment 'qubit map {word}' cannot be used",
            required="each source qubit from 0 up, once, on a qubit of its own, as in 0 -> 4, 1 -> 3",
            found=f"'{shorten(places.strip())}'" if word not in found else "it is there twice",
            where=where,
            line=line,
            column=column,
        )
        if word in found:
            raise problem
        pairs = [_PAIR.fullmatch(part) for part in places.split(",")]
        if None in pairs:
            raise problem
        table = {int(pair[1]): int(pair[2]) for pair in pairs if pair}
        if sorted(table) != list(range(len(pairs))) or len(set(table.values())) < len(table):
            raise problem
        found[word] = tuple(table[source] for source in range(len(table)))
    if not found:
        return None
    if len(found) < 2 or len(found["in"]) != len(found["out"]):
        raise QasmError(
            "the comments of the qubit map do not fit together",
            required="'qubit map in' and 'qubit map out' of the same qubits",
            where=where,
        )
    return QubitMap(found["in"], found["out"])
