"""Statements of the same shape are parsed once: only their names, numbers and columns are exchanged afterwards.

Programs repeat few shapes, with other names and numbers each time, and the reference parser takes about a millisecond
for each statement. A shape is a text with its names and plain numbers left out. Its tree is used again only if every
one of these is found in the tree, at its place.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import fields, is_dataclass
from itertools import accumulate
from typing import Any

__all__ = ["Shape", "signature"]

_PART = re.compile(r'("[^"\n]*"|\$[0-9]+|[^\W\d]\w*|\.?[0-9][\w.]*(?:(?<=[eE])[-+][0-9]+)?)')
_NUMBER = re.compile(r"[0-9]{1,18}|(?:[0-9]{1,18}\.[0-9]{0,18}|\.[0-9]{1,18})(?:[eE][-+]?[0-9]{1,2})?")
_NAME = re.compile(r"[^\W\d]\w*")

#: Words that decide the shape.
_WORDS = frozenset(
    "OPENQASM include defcalgrammar def cal defcal gate extern box let break continue if else end return for while in"
    " switch case default input output const readonly mutable qreg qubit creg bool bit int uint float angle complex"
    " array void duration stretch gphase inv pow ctrl negctrl durationof delay reset measure barrier im true false"
    " sizeof pragma real imag".split()
)

_TYPES = frozenset("int uint float angle bit complex qubit creg qreg".split())

Signature = tuple[tuple[str, ...], tuple[str, ...]]


def signature(text: str) -> tuple[Signature, list[str]]:
    """Return the shape of a text as something to compare, and the text in parts: every second one may be exchanged.

    Examples
    --------
    >>> signature("x q[2];")[0] == signature("h w[11];")[0]
    True
    """
    parts = _PART.split(text)
    marks: list[str] = []
    for number, part in enumerate(parts[1::2]):
        if part in _WORDS or not part.isascii() or not (_NAME.fullmatch(part) or _NUMBER.fullmatch(part)):
            marks.append(part)
        elif part[0] == "_" or part[0].isalpha():
            marks.append("")
        elif number and marks[-1] in _TYPES and parts[2 * number].strip() == "[":
            marks.append(part)  # the tree does not say where the width of a type stands
        else:
            marks.append("0" if part.isdigit() else ".")
    return (tuple(parts[::2]), tuple(marks)), parts


class Shape:
    """The tree of one statement, to be filled with the names and numbers of others of its shape.

    Attributes
    ----------
    sound : bool
        Whether that can be done.
    """

    def __init__(self, node: Any, parts: list[str], key: Signature) -> None:
        self.node = node
        self.text = "".join(parts)
        starts = [0, *accumulate(map(len, parts))]
        place = {start: number for number, start in enumerate(starts[:-1]) if number % 2}
        wanted = {2 * number + 1 for number, mark in enumerate(key[1]) if mark in ("", ".", "0")}
        found: set[int] = set()
        self.names: list[tuple[Any, int]] = []
        self.numbers: list[tuple[Any, int, type]] = []
        self.spans: list[tuple[Any, int, int]] = []  # span, part, offset inside it
        self.sound = True
        for part in _walk(node):
            span = getattr(part, "span", None)
            if span is None:
                continue
            at = span.start_column
            number = place.get(at)
            if number is None:
                number = next((k for k in range(0, len(parts), 2) if starts[k] <= at < starts[k + 1]), -1)
            self.sound &= number >= 0
            self.spans.append((span, number, at - starts[number]))
            kind = type(part).__name__
            if kind == "Identifier" and part.name == parts[number]:
                self.names.append((part, number))
                found.add(number)
            elif kind in ("IntegerLiteral", "FloatLiteral") and number in wanted:
                exact = int if kind == "IntegerLiteral" else float
                if part.value == exact(parts[number]):
                    self.numbers.append((part, number, exact))
                    found.add(number)
        self.sound &= wanted <= found

    def fill(self, parts: list[str]) -> Any:
        """Return the tree with the names, numbers and columns of a text in parts; earlier ones are overwritten."""
        text = "".join(parts)
        if text == self.text:
            return self.node
        self.text = text
        starts = [0, *accumulate(map(len, parts))]
        for node, number in self.names:
            node.name = parts[number]
        for node, number, exact in self.numbers:
            node.value = exact(parts[number])
        for span, number, offset in self.spans:
            span.start_column = starts[number] + offset
        return self.node


def _walk(node: Any) -> Iterator[Any]:
    """Yield the nodes of a tree."""
    waiting = [node]
    while waiting:
        part = waiting.pop()
        if isinstance(part, Sequence) and not isinstance(part, str):
            waiting.extend(part)
        elif is_dataclass(part):
            yield part
            waiting.extend(getattr(part, item.name) for item in fields(part) if item.name != "span")
