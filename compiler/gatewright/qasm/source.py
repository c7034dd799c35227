"""The text of an OpenQASM program: reading it from outside, blanking its comments, and naming places in it."""

from __future__ import annotations

import os
import re
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import TypeVar

from gatewright.errors import GatewrightError, QasmError, shorten

__all__ = ["MAX_BYTES", "Source", "decode", "read_bytes", "read_text"]

#: Largest text that is read, in bytes.
MAX_BYTES = 2**28

# The last alternative meets only a comment that is not closed.
_SKIP = re.compile(r'"[^"\n]*"|//[^\n]*|/\*(?s:.*?)\*/|/\*')
_VISIBLE = re.compile(r"[^\n]")
_FIRST_CHUNK, _CHUNK = 2**8, 2**20

Error = TypeVar("Error", bound=GatewrightError)


def read_bytes(path: str | os.PathLike[str]) -> bytes:
    """Return the content of a file, or of standard input for ``-``.

    Raises
    ------
    QasmError
        If the file cannot be read, is empty, or is larger than `MAX_BYTES`.
    """
    where = os.fspath(path)
    try:
        if where == "-":
            where = "<stdin>"
            data = sys.stdin.buffer.read(MAX_BYTES + 1)
        else:
            with Path(path).open("rb") as file:
                data = file.read(MAX_BYTES + 1)
    except (OSError, ValueError) as problem:
        what = problem.strerror if isinstance(problem, OSError) and problem.strerror else str(problem)
        raise QasmError("the file cannot be read", found=what.lower(), where=shorten(where, 300)) from None
    if len(data) > MAX_BYTES:
        raise QasmError(
            "the file is too large", required=f"at most {MAX_BYTES // 2**20} MiB", found="more", where=where
        )
    if not data.strip():
        raise QasmError("the file is empty", required="an OpenQASM program or a unitary matrix", where=where)
    return data


def read_text(path: str | os.PathLike[str]) -> str:
    """Return the text of a file, or of standard input for ``-``.

    Raises
    ------
    QasmError
        As `read_bytes`, and if it is not UTF-8 text.
    """
    return decode(read_bytes(path), where="<stdin>" if os.fspath(path) == "-" else os.fspath(path))


def decode(data: bytes, *, where: str = "") -> str:
    """Return the text that `data` holds in UTF-8.

    Raises
    ------
    QasmError
        With the place of the first byte that is not text.
    """
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        line = data.count(b"\n", 0, problem.start) + 1
        raise QasmError(
            "the file is not an OpenQASM text",
            required="UTF-8 text",
            found=f"byte 0x{data[problem.start]:02x} at offset {problem.start}",
            where=where,
            line=line,
            column=problem.start - data.rfind(b"\n", 0, problem.start),
        ) from None


class Source:
    """A program's text with its comments blanked, so that offsets still name places in the original.

    Parameters
    ----------
    text : str
    where : str
        File name for messages.
    """

    def __init__(self, text: str, where: str = "") -> None:
        if len(text) > MAX_BYTES:
            raise QasmError("the text is too large", required=f"at most {MAX_BYTES // 2**20} MiB", where=where)
        self.where = where
        text = text.removeprefix("\ufeff")
        if "\r" in text:
            text = text.replace("\r\n", "\n").replace("\r", "\n")
        self.text = self.original = text
        if "\0" in text:
            raise self.error(
                "this is not a text", text.index("\0"), required="an OpenQASM program", found="a zero byte"
            )
        if "//" in text or "/*" in text:
            self.text = _SKIP.sub(self._blank, text)
        if not self.text or self.text.isspace():
            raise QasmError("the program is empty", required="at least a declaration of qubits", where=where)

    def _blank(self, match: re.Match[str]) -> str:
        found = match[0]
        if found[0] == '"':
            return found
        if found == "/*":
            raise self.error("a comment is not closed", match.start(), required="'*/' behind it", found="the end")
        return " " * len(found) if "\n" not in found else _VISIBLE.sub(" ", found)

    def pieces(self, start: int = 0) -> Iterator[str]:
        """Yield what lies between semicolons, from an offset behind one to the end of the text."""
        text, chunk = self.text, _FIRST_CHUNK
        while (end := text.find(";", start + chunk)) >= 0:
            yield from text[start:end].split(";")
            start = end + 1
            chunk = min(4 * chunk, _CHUNK)
        yield from text[start:].split(";")

    def locate(self, problem: Error, offset: int) -> Error:
        """Give an error its file, line and column."""
        problem.where = self.where
        problem.line = self.text.count("\n", 0, offset) + 1
        problem.column = offset - self.text.rfind("\n", 0, offset)
        return problem

    def error(self, what: str, offset: int, *, required: str = "", found: str = "", hint: str = "") -> QasmError:
        """Return the error to raise at an offset of the text."""
        return self.locate(QasmError(what, required=required, found=found, hint=hint), offset)
