"""Programs of our own in OpenQASM 2 and 3, and seeded damage to them: what the fuzz test and its benchmark read."""

from __future__ import annotations

import random
import re
from collections.abc import Callable

__all__ = ["DAMAGE", "LARGE", "PROGRAMS", "damaged"]

PROGRAMS = {
    "plain 2": """OPENQASM 2.0;
include "qelib1.inc";
gate twist(a, b) p, q { rz(a/2) p; cx p, q; u3(a, -b, pi*0.5) q; barrier p, q; CX p, q; }
opaque box_of(t) x, y;
qreg q[4];
creg c[4];
h q;
cx q[0], q[1]; // entangle
u2(0, pi) q[2];
twist(-pi/4, 3.5e-1) q[1], q[2];
/* a longer
   comment */
barrier q;
measure q -> c;
""",
    "plain 3": """OPENQASM 3.0;
include "stdgates.inc";
const int n = 3;
const angle turn = pi / 2 ** 3;
qubit[n] q;
qubit spare;
bit[n] c = "010";
gate swing(a) x, y { ctrl @ rz(a) x, y; gphase(-a/4); inv @ pow(2) @ h y; }
swing(turn) q[0], q[1];
for int k in [0:2:n - 1] { negctrl @ U(0.1 * k, turn, -turn) spare, q[k]; }
let pair = q[{0, 2}] ++ q[1:1];
cx pair[0], pair[1];
c[0] = measure q[0];
measure q[1] -> c[1];
reset q[2];
barrier q, spare;
""",
    "control": """OPENQASM 3.1;
include "stdgates.inc";
def prepare(qubit[2] pair, float theta, int[8] rounds) -> int[8] {
  for uint j in {1, 2, 5} { ry(theta * j) pair[0]; if (j % 2 == 0) { continue; } cx pair[0], pair[1]; }
  if (rounds > 1) { x pair[1]; return rounds - 1; } else { z pair[0]; }
  return 0;
}
qubit[4] q;
array[float[64], 2, 2] grid = {{0.1, 0.2}, {0.3, sqrt(0.4)}};
int[8] left = 3;
while (left > 0) { left = prepare(q[0:1], grid[1][0], left); }
switch (left + 1) { case 0, 2 { x q[3]; } case 1 { y q[2]; } default { h q; } }
uint[8] word = 0b1010_0110;
word = (word << 2) | 5 ^ popcount(word);
if (word[3] && !(word == 12)) rx(float(word) / 7) q[1];
grid[0][1] += 2.5;
rz(grid[0][1]) q[2];
@note here
pragma anything at all
end;
""",
    "physical": """OPENQASM 3;
include "stdgates.inc";
bit b;
h $0;
ctrl(2) @ x $0, $2, $1;
pow(1/3) @ s $2;
b = measure $1;
""",
}

_TOKEN = re.compile(r"\w+|\s+|[^\w\s]")


def _tokens(text: str) -> list[str]:
    return _TOKEN.findall(text)


def _delete(rng: random.Random, text: str) -> str:
    parts = _tokens(text)
    at = rng.randrange(len(parts))
    del parts[at : at + rng.choice([1, 1, 1, 2, 5, 20])]
    return "".join(parts)


def _duplicate(rng: random.Random, text: str) -> str:
    parts = _tokens(text)
    at = rng.randrange(len(parts))
    return "".join(parts[:at] + parts[at : at + rng.choice([1, 2, 8])] * rng.choice([2, 3, 50]) + parts[at:])


def _swap(rng: random.Random, text: str) -> str:
    parts = _tokens(text)
    a, b = rng.randrange(len(parts)), rng.randrange(len(parts))
    parts[a], parts[b] = parts[b], parts[a]
    return "".join(parts)


def _replace(rng: random.Random, text: str) -> str:
    parts = _tokens(text)
    parts[rng.randrange(len(parts))] = rng.choice(parts)
    return "".join(parts)


_SPLINTERS = (
    "{ } ( ) [ ] ; , : = == -> ++ ** @ # $ $9 \" ' // /* */ \\ \0 \x0c \u00e9 \u03c0 \ufeff \u2028 1e999 "
    "1e-999 0x 0b 9999999999999999999 -1 0 1000000000000 pi 1/0 1ns 2.5im 0xfff 1_000 nan inf __class__ "
    "if else for while def gate ctrl inv pow measure reset barrier let const int float bit qubit array "
    "switch case default return end box delay input output extern cal defcal include OPENQASM gphase U "
    "mutable readonly stretch duration durationof sizeof in bool complex angle q c q[0] c[0] "
    "[0:1000000000000] h x cx (( )) {{ }} -- !! ~~"
).split(" ")


def _insert(rng: random.Random, text: str) -> str:
    parts = _tokens(text)
    parts.insert(rng.randrange(len(parts) + 1), rng.choice([" {} ", "{}"]).format(rng.choice(_SPLINTERS)))
    return "".join(parts)


def _letter(rng: random.Random, text: str) -> str:
    at = rng.randrange(len(text))
    return text[:at] + chr(rng.choice([rng.randrange(128), rng.randrange(0xD800)])) + text[at + rng.randrange(2) :]


def _cut(rng: random.Random, text: str) -> str:
    return text[: rng.randrange(1, len(text))]


def _number(rng: random.Random, text: str) -> str:
    found = list(re.finditer(r"\d+", text))
    if not found:
        return text
    match = rng.choice(found)
    other = rng.choice(["0", "1", "2", "-1", "17", "1000000000000", "1" * 400, "1e5", "0.5", "k", "c[0]", "99999"])
    return text[: match.start()] + other + text[match.end() :]


def _graft(rng: random.Random, text: str) -> str:
    lines = text.split("\n")
    lines.insert(rng.randrange(1, len(lines) + 1), rng.choice(rng.choice(list(PROGRAMS.values())).split("\n")))
    return "\n".join(lines)


def _nest(rng: random.Random, text: str) -> str:
    opening, closing = rng.choice([("(", ")"), ("[", "]"), ("{", "}"), ("if (true) {", "}"), ("inv @ ", ""), ("-", "")])
    depth = rng.choice([3, 30, 200, 3000])
    at = rng.randrange(len(text))
    end = rng.randrange(at, len(text) + 1)
    return text[:at] + opening * depth + text[at:end] + closing * depth + text[end:]


DAMAGE: tuple[Callable[[random.Random, str], str], ...] = (
    _delete, _duplicate, _swap, _replace, _insert, _letter, _cut, _number, _graft, _nest,
)  # fmt: skip


def damaged(seed: int) -> str:
    """Return one of the programs with one to four kinds of damage."""
    rng = random.Random(seed)
    text = rng.choice(list(PROGRAMS.values()))
    for _ in range(rng.choice([1, 1, 2, 4])):
        text = rng.choice(DAMAGE)(rng, text) or ";"
    return text


_V2 = 'OPENQASM 2.0; include "qelib1.inc"; qreg q[2]; '


def _v3(text: str) -> str:
    return f'OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit[4] q;\nbit[4] c;\n{text}'


#: Texts of about a megabyte that a careless reader would take long over, or not survive.
LARGE: dict[str, Callable[[], str]] = {
    "parentheses": lambda: _v3("rz(" + "(" * 500_000 + "1" + ")" * 500_000 + ") q[0];"),
    "parentheses, not plain": lambda: _v3("rz(mod(" + "(" * 500_000 + "1" + ")" * 500_000 + ",2)) q[0];"),
    "brackets": lambda: _v3("x q" + "[" * 500_000 + "0" + "]" * 500_000 + ";"),
    "blocks": lambda: _v3("if (true) {" * 90_000 + "x q[0];" + "}" * 90_000),
    "bare blocks": lambda: _v3("{" * 500_000 + "}" * 500_000),
    "headers": lambda: _v3("if (true) " * 100_000 + "x q[0];"),
    "else if": lambda: _v3("if (false) x q[0];" + " else if (false) x q[0];" * 40_000),
    "signs": lambda: _v3("rz(" + "-" * 1_000_000 + "1) q[0];"),
    "tildes": lambda: _v3("int k = " + "~" * 1_000_000 + "1;"),
    "powers": lambda: _v3("rz(" + "2**" * 300_000 + "1) q[0];"),
    "sum": lambda: _v3("rz(" + "1+" * 500_000 + "1) q[0];"),
    "sum, not plain": lambda: _v3("rz(mod(" + "1+" * 500_000 + "1, 2)) q[0];"),
    "modifiers": lambda: _v3("inv @ " * 160_000 + "x q[0];"),
    "controls": lambda: _v3("ctrl @ " * 140_000 + "x q;"),
    "many controls": lambda: _v3("ctrl(3) @ x q[0], q[1], q[2], q[3];" * 25_000),
    "powers of a gate": lambda: _v3("pow(0.1) @ h q[0];" * 50_000),
    "distinct powers": lambda: _v3("".join(f"pow(0.{k}) @ h q[0];" for k in range(1, 50_000))),
    "operands": lambda: _v3("barrier " + "q[0]," * 200_000 + "q[1];"),
    "list": lambda: _v3("for int k in {" + "1," * 500_000 + "1} x q[0];"),
    "array": lambda: _v3("array[int[8], 2] a = {" + "{" * 400_000 + "1" + "}" * 400_000 + "};"),
    "concatenation": lambda: _v3("let a = " + "q ++ " * 200_000 + "q;"),
    "cases": lambda: _v3("switch (1) {" + "case 2 { }" * 100_000 + "}"),
    "semicolons": lambda: _v3(";" * 1_000_000),
    "a name": lambda: _v3("x " + "q" * 1_000_000 + ";"),
    "a number": lambda: _v3("rz(" + "1" * 1_000_000 + ") q[0];"),
    "an index": lambda: _v3("x q[" + "1" * 1_000_000 + "];"),
    "an integer": lambda: _v3("int k = " + "1" * 1_000_000 + ";"),
    "a bit string": lambda: _v3('bit[8] d = "' + "1" * 1_000_000 + '";'),
    "a string": lambda: _v3('include "' + "a" * 1_000_000 + '";'),
    "an open string": lambda: _v3('include "' + "a" * 1_000_000),
    "quotes": lambda: _v3('"' * 1_000_001),
    "comments": lambda: _v3("/*" * 500_000),
    "slashes": lambda: _v3("/" * 1_000_000),
    "blanks": lambda: _v3(" " * 1_000_000),
    "blanks in a call": lambda: _v3("x" + " " * 1_000_000 + "q[0]" + "\t" * 1000),
    "blanks before a sign": lambda: _v3("x q[0]" + " " * 1_000_000 + "!"),
    "line ends": lambda: _v3("\r\n" * 500_000 + "x"),
    "open definition": lambda: _v3("gate g a { " + "x a; " * 200_000),
    "long definition": lambda: _v3("gate g a { " + "x a; " * 200_000 + "} g q; g q;"),
    "doubling definitions": lambda: _v3(
        "gate g0 a { x a; x a; }" + "".join(f"gate g{k} a {{ g{k - 1} a; g{k - 1} a; }}" for k in range(1, 90))
        + "g89 q[0];"
    ),
    "definitions in a row": lambda: _v3(
        "gate g0 a { x a; }" + "".join(f"gate g{k} a {{ g{k - 1} a; }}" for k in range(1, 30_000))
        + "g9999 q[0];"
    ),
    "open definitions": lambda: _v3("gate g a { " * 100_000),
    "definitions, not plain": lambda: _v3(
        "".join(f"gate g{k} a {{ inv @ h a; }} " for k in range(30_000))
    ),
    "registers": lambda: _v3("".join(f"qubit[3] q{k}; " for k in range(60_000))),
    "bits": lambda: _v3("".join(f"bit b{k}; " for k in range(80_000))),
    "constants": lambda: _v3("".join(f"const int k{k} = {k}; " for k in range(40_000))),
    "variables": lambda: _v3("".join(f"int k{k} = {k}; " for k in range(50_000))),
    "unknown gates": lambda: _v3("".join(f"g{k} q[0]; " for k in range(80_000))),
    "broadcasts": lambda: 'OPENQASM 3.0; include "stdgates.inc"; qubit[100000] q; ' + "h q; " * 200_000,
    "barriers": lambda: 'OPENQASM 3.0; include "stdgates.inc"; qubit[100000] q; ' + "barrier q; barrier q ; " * 45_000,
    "loop": lambda: _v3("for int k in [0:1000000000000] { x q[0]; }"),
    "loops": lambda: _v3("".join(f"for int k{d} in [0:99] {{ " for d in range(40)) + "x q[0];" + "}" * 40),
    "endless loop": lambda: _v3("while (true) { int k = 1; }"),
    "endless recursion": lambda: _v3("def f(int k) -> int { return f(k + 1) + f(k + 2); } int k = f(1);"),
    "loops in a row": lambda: _v3("for int k in [0:1] x q[k];" * 40_000),
    "growing integer": lambda: _v3("int k = 3; for int j in [0:100000] { k = k * k; }"),
    "wide type": lambda: _v3("int[1000000000] k = 1; k = k << 999999999;"),
    "large array": lambda: _v3("array[int[8], 1000, 1000, 1000] a;"),
    "arrays": lambda: _v3("".join(f"array[int[8], 1000000] a{k};" for k in range(20_000))),
    "shift": lambda: _v3("int k = 1 << 1000000000000;"),
    "exponent": lambda: _v3("int k = 9 ** 9 ** 9 ** 9;"),
    "repeated gate": lambda: _v3("pow(1000000000000) @ h q[0];"),
    "controls of a number": lambda: _v3("ctrl(1000000000000) @ h q[0];"),
    "annotations": lambda: _v3("@a\n" * 300_000 + "x q[0];"),
    "pragmas": lambda: _v3("pragma a\n" * 100_000),
    "open pragma": lambda: _v3("pragma " + "a" * 1_000_000),
    "calls": lambda: _v3("def f(qubit a) { x a; } " + "f(q[0]); " * 100_000),
    "calls in each other": lambda: _v3(
        "def f0(qubit a) { x a; } "
        + "".join(f"def f{k}(qubit a) {{ f{k - 1}(a); f{k - 1}(a); }} " for k in range(1, 60))
        + "f59(q[0]);"
    ),
    "aliases": lambda: _v3("let a0 = q ++ q; " + "".join(f"let a{k} = a{k - 1} ++ a{k - 1}; " for k in range(1, 60))),
    "plain and not": lambda: _v3("x q[0]; int k = 1; " + "x q[k]; rx(k) q[0]; h q[0]; " * 35_000),
    "distinct angles": lambda: _v3("".join(f"rz({k}/7.25) q[{k % 4}]; " for k in range(45_000))),
    "distinct functions": lambda: _v3("".join(f"rz(sin({k}/7.25)) q[{k % 4}]; " for k in range(40_000))),
    "wide controls": lambda: 'OPENQASM 3.0; include "stdgates.inc"; qubit[100000] q; ' + "ctrl(99999) @ x q; ",
    "measurements": lambda: _v3("c[0] = measure q[0]; measure q[1] -> c[1]; " * 25_000),
    "known bits": lambda: _v3("c[0] = 1; c[0] = 0; " * 50_000),
    "version 2, opaque": lambda: _V2 + "".join(f"opaque o{k} a; " for k in range(80_000)),
    "version 2, conditions": lambda: _V2 + 'creg c[2]; ' + "if(c==1) x q[0]; " * 60_000,
    "version 2, parentheses": lambda: _V2 + 'rx(' + "(" * 1_000_000,
    "version 2, braces": lambda: _V2 + "{" * 1_000_000,
}  # fmt: skip
