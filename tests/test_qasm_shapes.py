"""A statement's tree made from another one of its shape is the tree that the reference parser makes."""

from __future__ import annotations

import random
import re
from typing import Any

import pytest

from gatewright.qasm.grammar import parse_statement
from gatewright.qasm.shapes import Shape, _walk, signature
from gatewright.qasm.source import Source

FORMS = [
    "ctrl({i}) @ pow({f}) @ {n}({f} * -{n}, ({n} + {i}) / 2) {n}[{i}], {n};",
    "{n}[{n} + {i}:{i}:-1] = measure {n}[{{{i}, {n}}}];",
    "const float[64] {n} = sin({f}) ** {i} - {n}({n}, {f});",
    "array[int[8], {i}, 2] {n} = {{ {{ {i}, {n} }}, {{ -{i}, 2 }} }};",
    "let {n} = {n} ++ {n}[{i}:];",
    "for uint {n} in [{i}:{i}:{n}] {{ x {n}[{n}]; {n} += {f} * {n}; }}",
    '{n}({i}, {n}[{i}], 0x1f, 0b101, "0101", 1_000);',
    "gphase({f} + {n});",
    "barrier {n}, {n}[{i}], $3, $0;",
    "uint[12] {n} = {n} << {i} | ~{n}[0] ^ int[8]({n} > {f} && !{n});",
    "delay[{i} * 2 + 10ns] {n};",
    "inv @ {n} {n}[-{i}];",
]


def text(form: str, rng: random.Random) -> str:
    out = ""
    while "{" in form:
        before, _, rest = form.partition("{")
        out += before
        if rest[0] == "{":
            out, form = out + "{", rest[1:]
            continue
        kind, _, form = rest.partition("}")
        out += {
            "i": lambda: str(rng.randrange(10 ** rng.randrange(1, 6))),
            "f": lambda: rng.choice([f"{rng.random():.{rng.randrange(1, 9)}f}", "1.5e-3", "2.E5", ".25"]),
            "n": lambda: rng.choice("abcdefghpqrs") + rng.choice(["", "7", "_long_name", "X"]),
        }[kind]()
    return (out + form).replace("}}", "}")


def tree(node: Any) -> tuple[str, list[tuple[str, int]]]:
    """Return all but where nodes end, which nobody asks for."""
    starts = [(type(part).__name__, part.span.start_column) for part in _walk(node) if getattr(part, "span", None)]
    return re.sub(r"Span\([^()]*\)", "", repr(node)), starts


def parsed(statement: str) -> Any:
    return parse_statement(Source(statement), 0, len(statement), [])


@pytest.mark.parametrize("form", FORMS)
def test_a_filled_shape_is_the_tree_of_the_parser(form: str) -> None:
    rng = random.Random(form)
    first = text(form, rng)
    key, parts = signature(first)
    shape = Shape(parsed(first), parts, key)
    used = 0
    for _ in range(30):
        other = text(form, rng)
        key, parts = signature(other)
        if key == signature(first)[0]:
            assert shape.sound
            used += 1
            assert tree(shape.fill(parts)) == tree(parsed(other))
    assert used


@pytest.mark.parametrize(
    ("one", "other"),
    [("a + b;", "a ++ b;"), ("x q;", "reset q;"), ("rz(1) q;", "rz(1.0) q;"), ("f(q);", "sizeof(q);"),
     ("x $1;", "x $2;"),
     ("a = 10ns;", "a = 10us;"), ("a = 0x1;", "a = 0x2;"), ('a = "01";', 'a = "11";'), ("a = true;", "a = b;")],
)  # fmt: skip
def test_other_shapes(one: str, other: str) -> None:
    assert signature(one)[0] != signature(other)[0]
