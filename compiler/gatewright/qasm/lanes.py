"""Which of the reader's two lanes a statement is for."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from gatewright.qasm.scope import NAME, UNSUPPORTED, Scope

if TYPE_CHECKING:
    from gatewright.qasm.full import FullLane

__all__ = ["CONST", "EITHER", "FAST", "FULL", "beyond", "lane", "leading_word"]

#: The lanes: the fast one alone, the full one alone, either.
FAST, FULL, EITHER = 0, 1, 2

#: A constant that the fast lane declares.
CONST = re.compile(rf"const\s+(int|uint|float|angle)\s*(?:\[[^]]*\])?\s*({NAME})\s*=(.*)", re.DOTALL)

_WORD = re.compile(NAME)
_LEADING = re.compile(rf"\s*({NAME}|\S)")
_ARGUMENTS = re.compile(r"\([^;]*\)")
#: What the fast lane leaves to the full one: ranges, sets, blocks, modifiers, operators, casts and functions.
_RICH = re.compile(r"[:{@%&|<~!>]")
_NEGATIVE = re.compile(r"\[\s*-")
_CALLS = re.compile(
    r"\b(?:mod|ceiling|floor|popcount|rotl|rotr|sizeof)\s*\("
    r"|\b(?:int|uint|float|angle|bool|bit)\s*(?:\[[^]]*\]\s*)?\("
)
_RICH_BODY = re.compile(r"[@%&|<~!]|\b(?:for|if|while|switch|mod|ceiling|floor|popcount|rotl|rotr|pow)\b")
_REFUSED = frozenset("durationof stretch".split())


def leading_word(piece: str) -> tuple[str, int] | None:
    """Return the first word or character of a text and its place, or None for blanks."""
    match = _LEADING.match(piece)
    return (match[1], match.start(1)) if match else None


def beyond(text: str, scope: Scope, full: FullLane | None) -> bool:
    """Whether a statement is one for the full lane, as far as its text tells."""
    if scope.version != 3:
        return False
    if _RICH.search(text.replace("->", "")) or "==" in text or "++" in text:
        return True
    if ("-" in text and _NEGATIVE.search(text)) or ("(" in text and _CALLS.search(text)):
        return True
    if full is not None and full.concerns(text):
        return True
    if not scope.bit_registers or "(" not in text:
        return False
    # The value of a bit as a parameter.
    words = (word for part in _ARGUMENTS.findall(text) for word in _WORD.findall(part))
    return any(word in scope.bit_registers for word in words)


def lane(word: str, piece: str, start: int, scope: Scope, full: FullLane | None) -> int:
    """Return the lane for the OpenQASM 3 statement that begins with `word` at the offset `start`."""
    if word in ("OPENQASM", "include", "opaque") or word in _REFUSED:
        return FAST
    if word == "gate":
        text = scope.source.text
        body = text[start : text.find("}", start) + 1]
        rich = _RICH_BODY.search(body) is not None or (full is not None and full.concerns(body))
    elif word in UNSUPPORTED or beyond(piece, scope, full):
        rich = True
    elif word == "const":
        rich = CONST.fullmatch(piece.strip()) is None
    else:
        # Assignments of anything but a measurement.
        rich = "=" in piece and "measure" not in piece and word not in ("qubit", "qreg", "creg")
    return FULL if rich else EITHER
