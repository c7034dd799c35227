"""Single statements of OpenQASM 3 by the standard's own reference parser, the package ``openqasm3``.

The extent of a statement is found by its tokens, and its size and depth are bounded before the parser sees it. The
grammar is that of the OpenQASM 3 specification (arXiv:2104.14722). The package is imported at the first use.
"""

from __future__ import annotations

import importlib
import re
import sys
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from gatewright.errors import shorten
from gatewright.qasm.source import Source

if TYPE_CHECKING:
    from openqasm3 import ast

__all__ = ["MAX_NESTING", "MAX_STATEMENT", "MAX_STATEMENT_TOKENS", "parse_statement", "statement_end"]

#: Limits on one statement that needs the full grammar: characters, tokens, and levels open at once.
MAX_STATEMENT = 65_536
MAX_STATEMENT_TOKENS = 20_000
MAX_NESTING = 100

#: Frames of the interpreter that the parser may take for a statement of the largest size.
_FRAMES = 250_000

_TOKEN = re.compile(r'\s*("[^"\n]*"?|[^\W\d]\w*|[0-9.][\w.]*|->|\*\*|\+\+|&&|\|\||[<>=!]=|<<|>>|\S)')
_LINE = re.compile(r"[^\n]*")
_HEADERS = frozenset(("if", "for", "while", "switch", "else"))
_PREFIXES = frozenset("-!~")
_MESSAGE = re.compile(r"L(\d+):C(\d+): (.*)", re.DOTALL)
_CLOSING = {")": "(", "]": "[", "}": "{"}


def _tokens(text: str, start: int) -> Iterator[re.Match[str]]:
    while (match := _TOKEN.match(text, start)) is not None:
        start = match.end()
        yield match


def statement_end(source: Source, start: int) -> tuple[int, list[tuple[int, int]]]:
    """Return where the statement that begins at `start` ends, and the spans of annotations and pragmas inside it.

    Raises
    ------
    QasmError
        If it does not end, or is larger or deeper than the limits.
    """
    text = source.text
    stack: list[tuple[str, bool, int]] = []  # bracket, whether it is a body, where
    skipped: list[tuple[int, int]] = []
    previous, headers, prefixes, count, position = "", 0, 0, 0, start
    branches = False
    while (match := _TOKEN.match(text, position)) is not None:
        token, at, position = match[1], match.start(1), match.end()
        count += 1
        if count > MAX_STATEMENT_TOKENS or at - start > MAX_STATEMENT:
            required = f"at most {MAX_STATEMENT_TOKENS} tokens and {MAX_STATEMENT} characters"
            raise source.error("a statement outside the plain ones is too long", start, required=required, found="more")
        if previous in ("", ";", "{", "}") and (token in ("@", "#") or token == "pragma"):
            line = _LINE.match(text, at)
            assert line is not None
            skipped.append((at, line.end()))
            position = line.end()
            continue
        prefixes = prefixes + 1 if token in _PREFIXES else 0
        headers = headers + 1 if token in _HEADERS else 0 if token in ";{}" else headers
        if max(prefixes, headers, len(stack)) >= MAX_NESTING:
            raise source.error("a statement is nested too deeply", at, required=f"at most {MAX_NESTING} levels")
        branches |= token == "if"
        ended = token == ";" and not stack
        if token in ("(", "[", "{"):
            body = token == "{" and previous not in ("=", "in", ",", "(", "[") and not any(not b for _, b, _ in stack)
            stack.append((token, body, at))
        elif token in _CLOSING:
            if not stack or stack[-1][0] != _CLOSING[token]:
                raise source.error(f"a '{token}' without its '{_CLOSING[token]}'", at)
            _, body, _ = stack.pop()
            ended = body and not stack
        previous = token
        if ended:
            following = _TOKEN.match(text, position)
            if not (branches and following is not None and following[1] == "else"):
                return position, skipped
    if stack:
        closing = {"(": ")", "[": "]", "{": "}"}[stack[0][0]]
        raise source.error(
            f"a '{stack[0][0]}' is not closed", stack[0][2], required=f"a matching '{closing}'", found="the end"
        )
    raise source.error("a statement does not end", start, required="';' or a block in braces", found="the end")


def parse_statement(source: Source, start: int, end: int, skipped: list[tuple[int, int]]) -> ast.Statement | ast.Pragma:
    """Parse the one statement between two offsets; node spans hold offsets from `start` as columns.

    Raises
    ------
    QasmError
        If the standard's grammar does not have it.
    """
    text = source.text[start:end]
    for first, last in skipped:
        text = text[: first - start] + " " * (last - first) + text[last - start :]
    # On one line columns are offsets, for nodes of every kind.
    text = text.replace("\n", " ")
    limit = sys.getrecursionlimit()
    try:
        # The parser walks down a long sum term by term; tokens and nesting are bounded already.
        sys.setrecursionlimit(max(limit, _FRAMES))
        program = _parse(text)
    except _Fault as problem:
        raise source.error(problem.what, start + problem.column, found=problem.found) from None
    except RecursionError:
        raise source.error(
            "an expression or a statement is nested too deeply or too long", start, required="shorter expressions"
        ) from None
    except Exception as problem:  # the parser's own tree walk fails on some malformed texts
        raise source.error("this is not a statement", start, found=f"'{shorten(text, 30)}'") from problem
    finally:
        sys.setrecursionlimit(limit)
    if len(program.statements) != 1 or program.version is not None:
        raise source.error("this is not a statement", start, found=f"'{shorten(text, 30)}'")
    return program.statements[0]


class _Fault(Exception):
    """A complaint of the parser."""

    def __init__(self, what: str, column: int, found: str = "") -> None:
        self.what = what
        self.column = column
        self.found = found


def _misfit(token: Any, column: int) -> _Fault:
    word = getattr(token, "text", "") or ""
    found = "the end of the statement" if word in ("<EOF>", "") else f"'{shorten(word, 30)}'"
    return _Fault("this does not fit the grammar of OpenQASM 3", max(0, getattr(token, "column", column)), found)


def _parse(text: str) -> ast.Program:
    """Parse with the reference parser, whose own entry point would print its complaints."""
    reference: Any = importlib.import_module("openqasm3.parser")

    class Listener(reference.ErrorListener):  # type: ignore[misc]
        def syntaxError(self, recognizer: Any, symbol: Any, line: int, column: int, message: str, cause: Any) -> None:
            if symbol is None:
                raise _Fault("this is not a symbol of OpenQASM 3", column, f"'{shorten(text[column:], 10)}'")
            raise _misfit(symbol, column)

    lexer = reference.qasm3Lexer(reference.InputStream(text))
    parser = reference.qasm3Parser(reference.CommonTokenStream(lexer))
    for recognizer in (lexer, parser):
        recognizer.removeErrorListeners()
        recognizer.addErrorListener(Listener())
    parser._errHandler = reference.BailErrorStrategy()
    try:
        program: ast.Program = reference.QASMNodeVisitor().visitProgram(parser.program())
    except reference.ParseCancellationException as problem:
        token = getattr(problem.args[0] if problem.args else None, "offendingToken", None)
        raise _misfit(token, 0) from None
    except reference.QASM3ParsingError as problem:
        match = _MESSAGE.match(str(problem))
        if match is None:
            raise _Fault(shorten(problem, 100), 0) from None
        raise _Fault(shorten(match[3], 100), int(match[2])) from None
    return program
