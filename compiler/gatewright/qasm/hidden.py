"""Bits that a program has no register for: those of blocks and subroutines, and outcomes read in expressions.

They get numbers above all others while a program is read, handed out as on a stack, and become one register of our own
behind those of the program when it has been read.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

from gatewright.classical import Bits, Expression, Operation, leaves
from gatewright.program import Assign, Mark, Statement

__all__ = ["FIRST_HIDDEN", "HiddenBits", "placed"]

#: The number of the first hidden bit while a program is read; no program has as many bits.
FIRST_HIDDEN = 1 << 30


class HiddenBits:
    """A stack of bits."""

    def __init__(self) -> None:
        self.top = 0  # bits in use
        self.levels: dict[int, int] = {}  # blocks around each that run or not depending on the run

    def take(self, number: int, level: int) -> list[int]:
        """Take bits, at a level of blocks that run or not depending on the run."""
        taken = list(range(FIRST_HIDDEN + self.top, FIRST_HIDDEN + self.top + number))
        self.levels.update(dict.fromkeys(taken, level))
        self.top += number
        return taken

    def release(self, top: int) -> range:
        """Give back all bits but the first `top`; return them."""
        freed = range(FIRST_HIDDEN + top, FIRST_HIDDEN + self.top)
        self.top = top
        return freed


def placed(links: Mapping[int, int], marks: Sequence[Mark], start: int) -> tuple[dict[int, int], list[Mark], int]:
    """Give the hidden bits that are used places one behind another.

    Parameters
    ----------
    links : mapping of int to int
        Bits of measurements, by row.
    marks : sequence of Mark
    start : int
        The first place.

    Returns
    -------
    links, marks
        With the places.
    number : int
        Of places.
    """
    used = set(links.values())
    for mark in marks:
        used.update(_bits(mark.content))
    hidden = sorted(bit for bit in used if bit >= FIRST_HIDDEN)
    places = dict(zip(hidden, range(start, start + len(hidden)), strict=True))
    moved = [replace(mark, content=_content(mark.content, places)) for mark in marks]
    return {row: places.get(bit, bit) for row, bit in links.items()}, moved, len(hidden)


def _bits(content: Expression | Statement | None) -> Iterator[int]:
    match content:
        case Assign(target, value):
            yield from _bits(target)
            yield from _bits(value)
        case Bits() | Operation():
            for leaf in leaves(content):
                if isinstance(leaf, Bits):
                    yield from leaf.indices


def _content(content: Expression | Statement | None, places: Mapping[int, int]) -> Expression | Statement | None:
    match content:
        case Assign(target, value):
            return Assign(_placed(target, places), _placed(value, places))  # type: ignore[arg-type]
        case Bits() | Operation():
            return _placed(content, places)
    return content


def _placed(expression: Expression, places: Mapping[int, int]) -> Expression:
    match expression:
        case Bits(indices, single):
            return Bits(tuple([places.get(k, k) for k in indices]), single)
        case Operation(op, operands):
            return Operation(op, tuple([_placed(operand, places) for operand in operands]))
    return expression
